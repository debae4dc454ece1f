//! Thermal run-away: loop gain, equilibria.

use qsheaf::device::REFERENCE_TEMPERATURE;
use qsheaf::solve::{Branch, Thermal};

use super::net::{Net, ideal};

/// A transistor with its base held: dissipation is V_CC I_C(T), whatever the network.
fn held(volts: f64, k_per_w: f64, copies: usize) -> Net {
    let mut net = Net::default();
    net.supply(1, 0, 10.0);
    net.supply(2, 0, volts);
    for _ in 0..copies {
        net.npn([1, 2, 0], ideal());
    }
    for branch in &mut net.branches {
        if let Branch::Transistor { r_th, .. } = branch {
            *r_th = Some(k_per_w);
        }
    }
    net
}

fn gain(net: &Net, ambient: f64) -> (f64, f64, f64) {
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let point = plan.solve(&net.branches, ambient, Thermal::Equilibrium, None, &mut scratch).expect("solves");
    let gain = plan.loop_gain(&net.branches, ambient, &point.solution, &mut scratch).expect("a loop gain");
    let device = net.branches.iter().position(|b| matches!(b, Branch::Transistor { .. })).unwrap();
    (gain, point.elements[device].t_j, point.elements[device].p)
}

/// The dissipation at a junction temperature: everything at that ambient, nothing heating itself.
fn power_at(net: &Net, t_j: f64) -> f64 {
    net.solve(t_j).expect("solves").elements[2].p
}

#[test]
fn loop_gain_is_the_slope_of_the_dissipation() {
    for (volts, k_per_w) in [(0.55, 400.0), (0.6, 200.0), (0.63, 150.0)] {
        let net = held(volts, k_per_w, 1);
        let (found, t_j, _) = gain(&net, 298.15);
        let slope = (power_at(&net, t_j + 0.05) - power_at(&net, t_j - 0.05)) / 0.1;
        let expected = k_per_w * slope;
        assert!((found - expected).abs() < 1e-4 * expected, "{found} instead of {expected}");
        assert!(found > 0.0 && found < 1.0);
    }
}

#[test]
fn devices_that_do_not_touch_each_other_have_the_gain_of_one() {
    let (one, ..) = gain(&held(0.6, 200.0, 1), 298.15);
    let (three, ..) = gain(&held(0.6, 200.0, 3), 298.15);
    assert!((one - three).abs() < 1e-6, "{one} and {three}");
}

#[test]
fn what_heats_the_other_counts() {
    // Two transistors in series with one base divider apart: the upper one's dissipation falls as the lower one's current
    // rises, so that the matrix is full; its trace and determinant give the eigenvalue by hand.
    let mut net = Net::default();
    net.supply(1, 0, 10.0);
    net.supply(2, 0, 0.62);
    net.npn([3, 2, 0], ideal());
    net.resistor(1, 3, 1000.0);
    net.npn([1, 3, 4], ideal());
    net.resistor(4, 0, 100.0);
    for branch in &mut net.branches {
        if let Branch::Transistor { r_th, .. } = branch {
            *r_th = Some(150.0);
        }
    }
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let ambient = 300.0;
    let point = plan.solve(&net.branches, ambient, Thermal::Equilibrium, None, &mut scratch).expect("solves");
    let found = plan.loop_gain(&net.branches, ambient, &point.solution, &mut scratch).expect("a loop gain");
    // Each column by hand. A device at its own temperature in a circuit at the reference temperature, where nothing more is
    // added to its parameters: those of that temperature, and its thermal voltage.
    let (t_1, t_2) = (point.elements[2].t_j, point.elements[4].t_j);
    let powers = |t_1: f64, t_2: f64| {
        let mut held = net.clone();
        for (element, t_j) in [(2, t_1), (4, t_2)] {
            if let Branch::Transistor { parameters, r_th, .. } = &mut held.branches[element] {
                *parameters = parameters.at(t_j).parameters;
                *r_th = None;
                parameters.emission_coefficient *= t_j / REFERENCE_TEMPERATURE;
                parameters.emitter_leakage_emission *= t_j / REFERENCE_TEMPERATURE;
            }
        }
        let point = held.solve(REFERENCE_TEMPERATURE).expect("solves");
        [point.elements[2].p, point.elements[4].p]
    };
    let d = 0.05;
    let column = |up: [f64; 2], down: [f64; 2]| [0, 1].map(|i| 150.0 * (up[i] - down[i]) / (2.0 * d));
    let [a, c] = column(powers(t_1 + d, t_2), powers(t_1 - d, t_2));
    let [b, e] = column(powers(t_1, t_2 + d), powers(t_1, t_2 - d));
    let half = (a + e) / 2.0;
    let expected = half + (half * half - (a * e - b * c)).max(0.0).sqrt();
    assert!((found - expected).abs() < 1e-3 * expected.abs(), "{found} instead of {expected}");
}

#[test]
fn both_equilibria_are_found_and_told_apart() {
    let net = held(0.63, 200.0, 1);
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let point = plan.solve(&net.branches, 298.15, Thermal::Equilibrium, None, &mut scratch).expect("solves");
    let all = plan.equilibria(&net.branches, 298.15, &point.solution, &mut scratch).unwrap().unwrap();
    assert_eq!(all.iter().map(|one| one.lasts).collect::<Vec<_>>(), [true, false]);
    assert!((all[0].t_j - point.elements[2].t_j).abs() < 1e-6);
    for one in &all {
        // T_j = T_a + R_th P(T_j), with P from a circuit that is at that temperature altogether.
        assert!((298.15 + 200.0 * power_at(&net, one.t_j) - one.t_j).abs() < 1e-5, "{}", one.t_j);
    }
    // With several devices that heat themselves there is no such list.
    let two = held(0.6, 200.0, 2);
    let plan = two.plan();
    let mut scratch = plan.scratch();
    let point = plan.solve(&two.branches, 298.15, Thermal::Equilibrium, None, &mut scratch).expect("solves");
    assert_eq!(plan.equilibria(&two.branches, 298.15, &point.solution, &mut scratch), Ok(None));
}
