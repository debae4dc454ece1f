//! Thermal equilibrium: the balance holds, run-away is found, ambient is kept where nothing is known. Against scipy and
//! mpmath see `reference`.

use qsheaf::solve::{Attempt, Branch, ElementPoint, Failure, Thermal};

use super::net::{Net, full, ideal, switch, two_stage};

fn mount(net: &mut Net, k_per_w: f64) {
    for branch in &mut net.branches {
        if let Branch::Transistor { r_th, .. } | Branch::Diode { r_th, .. } = branch {
            *r_th = Some(k_per_w);
        }
    }
}

/// Base held at `volts`: the collector current grows with temperature and heats the junction further.
fn held_base(volts: f64, supply: f64, k_per_w: f64) -> Net {
    let mut net = Net::default();
    net.supply(1, 0, supply);
    net.supply(2, 0, volts);
    net.npn([1, 2, 0], ideal());
    mount(&mut net, k_per_w);
    net
}

#[test]
fn temperature_and_dissipation_agree() {
    for mut net in [switch(full()), two_stage(full())] {
        mount(&mut net, 250.0);
        let cold = net.solve(313.15).expect("solves");
        let hot = net.hot(313.15).expect("solves");
        for (k, branch) in net.branches.iter().enumerate() {
            let at: &ElementPoint = &hot.elements[k];
            if matches!(branch, Branch::Transistor { .. }) {
                assert!((at.t_j - (313.15 + 250.0 * at.p)).abs() < 2e-8, "{} K", at.t_j);
                assert!(at.self_heated && at.t_j > 313.15);
                assert_eq!(cold.elements[k].t_j, 313.15);
                assert!(!cold.elements[k].self_heated);
            }
        }
        assert!(net.residual(&hot) < 1.0);
    }
}

#[test]
fn without_thermal_resistance_a_device_stays_at_ambient() {
    let net = two_stage(full());
    let cold = net.solve(300.0).expect("solves");
    let hot = net.hot(300.0).expect("solves");
    assert_eq!(cold, hot);
}

/// At a held base the current grows by a factor e in some 12 K: the loop gain reaches one where R_th P is that much
/// (one equilibrium below it, one above, which must not be reported), and beyond there is none.
#[test]
fn run_away_is_found() {
    let rise = |net: &Net| net.hot(298.15).map(|point| point.elements[2].t_j - 298.15);
    let mut last = 0.0;
    let mut ran_away = false;
    for step in 0..60 {
        let net = held_base(0.6 + 0.002 * f64::from(step), 10.0, 200.0);
        match rise(&net) {
            Ok(kelvin) => {
                assert!(!ran_away, "an equilibrium beyond run-away");
                assert!(kelvin > last && kelvin < 20.0, "{kelvin} K");
                last = kelvin;
            }
            Err(Failure::ThermalRunaway { element: 2 }) => ran_away = true,
            Err(failure) => panic!("step {step}: {failure:?}"),
        }
    }
    assert!(ran_away && last > 5.0, "{last}");
}

/// Started beyond the lower equilibrium, where an upper, unstable one is nearer: the lower one is found.
#[test]
fn an_equilibrium_that_would_not_last_is_not_reported() {
    let net = held_base(0.63, 10.0, 200.0);
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let first = plan.solve(&net.branches, 298.15, Thermal::Equilibrium, None, &mut scratch).expect("solves");
    let lower = first.elements[2].t_j;
    for guess in [310.0, 330.0, 345.0, 360.0, 400.0] {
        let mut start = first.solution.clone();
        start.temperatures[0] = guess;
        let again = plan
            .solve(&net.branches, 298.15, Thermal::Equilibrium, Some(&start), &mut scratch)
            .unwrap_or_else(|failure| panic!("from {guess} K: {failure:?}"));
        assert!((again.elements[2].t_j - lower).abs() < 1e-6, "from {guess} K: {}", again.elements[2].t_j);
    }
}

/// Two devices that share the heat of each other's current: only together do they run away.
#[test]
fn coupled_devices() {
    let pair = |k_per_w: f64| {
        let mut net = Net::default();
        net.supply(1, 0, 12.0);
        net.supply(2, 0, 0.62);
        net.npn([3, 2, 0], ideal());
        net.pnp([4, 3, 1], ideal());
        net.resistor(4, 0, 100.0);
        net.resistor(3, 1, 2.2e3);
        mount(&mut net, k_per_w);
        net
    };
    let warm = pair(100.0).hot(298.15).expect("solves");
    assert!(warm.elements[2].t_j > 298.15 && warm.elements[3].t_j > 298.15);
    assert!(pair(100.0).residual(&warm) < 1.0);
}

#[test]
fn wrong_thermal_resistances() {
    for k_per_w in [-1.0, f64::NAN, f64::INFINITY] {
        let mut net = switch(full());
        mount(&mut net, k_per_w);
        assert_eq!(net.hot(300.0), Err(Failure::Unfit { element: 4 }));
    }
    let mut net = switch(full());
    mount(&mut net, 0.0);
    assert_eq!(net.hot(300.0).expect("solves").elements[4].t_j, 300.0);
    assert_eq!(net.hot(300.0).expect("solves").attempts[0], Attempt::Direct);
}
