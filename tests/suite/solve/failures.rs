//! What has no solution, or none worth showing, gives a failure and no number.

use qsheaf::solve::{Branch, Class, Failure, Plan, Probe, Thermal, Topology};

use super::net::{Net, full, ideal, plain_diode, switch};

#[test]
fn undetermined_networks_are_singular() {
    let mut loose = Net::default();
    loose.supply(1, 0, 5.0);
    loose.resistor(1, 0, 100.0);
    loose.resistor(2, 3, 470.0);
    loose.resistor(3, 4, 330.0);
    loose.resistor(4, 2, 1e-3);
    assert_eq!(loose.solve(300.0), Err(Failure::Singular));

    let mut twice = Net::default();
    twice.supply(1, 0, 5.0);
    twice.supply(1, 0, 5.0);
    twice.resistor(1, 0, 100.0);
    assert_eq!(twice.solve(300.0), Err(Failure::Singular));

    let mut shorted = Net::default();
    shorted.supply(1, 0, 5.0);
    shorted.resistor(1, 0, 0.0);
    assert_eq!(shorted.solve(300.0), Err(Failure::Singular));

    let mut cut = Net::default();
    cut.two(0, 1, Branch::Current { amperes: 1e-3 });
    cut.two(1, 0, Branch::Capacitor);
    assert_eq!(cut.solve(300.0), Err(Failure::Singular));
}

/// A current driven against ideal junctions finds no voltage that carries it.
#[test]
fn current_against_a_blocking_diode() {
    let mut net = Net::default();
    net.two(0, 1, Branch::Current { amperes: -1e-3 });
    net.diode(1, 0, plain_diode());
    assert!(net.solve(300.0).is_err());
}

#[test]
fn a_junction_straight_across_a_supply() {
    let mut net = Net::default();
    net.supply(1, 0, 9.0);
    net.npn([1, 1, 0], ideal());
    assert!(matches!(net.solve(300.0), Err(Failure::BeyondModel { .. } | Failure::NotConverged { .. })));
}

#[test]
fn values_without_sense() {
    for ohms in [-1.0, f64::NAN, f64::INFINITY] {
        let mut net = switch(full());
        net.branches[2] = Branch::Resistor { ohms };
        assert_eq!(net.solve(300.0), Err(Failure::Unfit { element: 2 }));
    }
    let net = switch(full());
    for ambient in [0.0, -5.0, f64::NAN] {
        assert_eq!(net.solve(ambient), Err(Failure::Unfit { element: 5 }));
    }
    let mut net = switch(full());
    net.branches[4] = Branch::Resistor { ohms: 1.0 };
    assert_eq!(net.solve(300.0), Err(Failure::Unfit { element: 4 }));
    let parameters = qsheaf::device::transistor::Transistor { saturation_current: f64::NAN, ..full() };
    net.branches[4] = Branch::Transistor { pnp: false, parameters, r_th: None, probe: Probe::default() };
    assert!(net.solve(300.0).is_err());
    let plan = net.plan();
    let short = plan.solve(&net.branches[..3], 300.0, Thermal::ColdStart, None, &mut plan.scratch());
    assert_eq!(short, Err(Failure::Unfit { element: 3 }));
}

#[test]
fn plans_check_their_terminals() {
    let element = |terminals: &[usize], class| Topology { terminals: terminals.to_vec(), class };
    let fits = element(&[1, 0], Class::TwoTerminal);
    for wrong in [
        element(&[1, 7], Class::TwoTerminal),
        element(&[1], Class::TwoTerminal),
        element(&[1, 0], Class::Transistor),
        element(&[1, 0, 1], Class::Diode),
    ] {
        let plan = Plan::new(2, &[fits.clone(), wrong]);
        assert!(matches!(plan, Err(Failure::Unfit { element: 1 })));
    }
}

#[test]
fn extreme_values_give_a_right_point_or_a_failure() {
    let mut accepted = 0;
    for volts in [1e-9, 1.0, 1e3, 1e6] {
        for (small, large) in [(1e-6, 1e12), (1e-3, 1e9), (1e-9, 1e3)] {
            let mut net = switch(full());
            net.branches[0] = Branch::Supply { volts, ohms: small };
            net.branches[2] = Branch::Resistor { ohms: small };
            net.branches[3] = Branch::Resistor { ohms: large };
            if let Ok(point) = net.solve(300.0) {
                assert!(net.residual(&point) < 1.0, "{volts} V, {small} and {large} ohm");
                accepted += 1;
            }
        }
    }
    assert!(accepted >= 8, "{accepted}");
}

/// An element in state open carries nothing, of whatever kind it is; the rest still solves.
#[test]
fn open_elements() {
    let mut net = switch(full());
    net.branches[4] = Branch::Open;
    let point = net.solve(300.0).expect("solves");
    assert_eq!(point.elements[4].i, 0.0);
    assert!((point.voltages[3] - 12.6).abs() < 1e-12);
    let mut net = switch(full());
    net.branches[3] = Branch::Open;
    let point = net.solve(300.0).expect("solves");
    assert!(net.residual(&point) < 1.0);
    assert!(point.elements[4].i < 1e-5, "open base: {}", point.elements[4].i);
}

/// A saturated transistor whose load is gone: its collector carries nothing, to the floor of the current rule.
#[test]
fn saturated_without_load() {
    for parameters in [ideal(), full()] {
        for (ohms, ambient) in [(100.0, 233.15), (1e3, 298.15), (4.7e3, 398.15)] {
            let mut net = switch(parameters);
            net.branches[2] = Branch::Open;
            net.branches[3] = Branch::Resistor { ohms };
            let point = net.solve(ambient).expect("solves");
            assert!(point.elements[4].i.abs() <= 1e-18, "{:e}", point.elements[4].i);
            assert!((0.001..0.15).contains(&point.voltages[3]), "{}", point.voltages[3]);
            assert!(net.residual(&point) < 1.0);
        }
    }
}

/// A start of another network is not taken.
#[test]
fn a_start_that_does_not_fit_is_ignored() {
    let net = switch(full());
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let thermal = Thermal::ColdStart;
    let nothing = plan.solve(&net.branches, 300.0, thermal, None, &mut scratch).expect("solves");
    let mut strange = nothing.solution.clone();
    strange.junctions[0] = f64::NAN;
    let from = plan.solve(&net.branches, 300.0, thermal, Some(&strange), &mut scratch).expect("solves");
    assert_eq!(nothing, from);
    strange.junctions.pop();
    let from = plan.solve(&net.branches, 300.0, thermal, Some(&strange), &mut scratch).expect("solves");
    assert_eq!(nothing, from);
}
