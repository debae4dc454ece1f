//! Midband against differences of the solver's own operating points, and against textbook formulas.

use qsheaf::device::{thermal_voltage, transistor::Transistor};
use qsheaf::solve::{Branch, Failure, OperatingPoint, Plan, Thermal};

use super::net::{Net, full, ideal};

const T: f64 = 298.15;

/// A common-emitter stage with a coupled signal, a split emitter resistance and a coupled load. Returns the signal.
fn amplifier(parameters: Transistor, r_e: [f64; 2], source: f64) -> (Net, usize) {
    let mut net = Net::default();
    net.supply(1, 0, 12.0);
    let signal = net.two(2, 0, Branch::Signal { ohms: source });
    net.two(2, 3, Branch::Capacitor);
    net.resistor(1, 3, 68e3);
    net.resistor(3, 0, 15e3);
    net.resistor(1, 4, 4.7e3);
    net.npn([4, 3, 5], parameters);
    net.resistor(5, 6, r_e[0]);
    net.resistor(6, 0, r_e[1]);
    net.two(6, 0, Branch::Capacitor);
    net.two(4, 7, Branch::Capacitor);
    net.resistor(7, 0, 22e3);
    (net, signal)
}

fn at(net: &Net) -> (Plan, OperatingPoint) {
    let plan = net.plan();
    let point = plan.solve(&net.branches, T, Thermal::ColdStart, None, &mut plan.scratch()).expect("solves");
    (plan, point)
}

/// The network with each capacitor as a supply of its d.c. voltage, each inductor as a source of its d.c. current, and
/// the signal at `e` volts: its d.c. operating point is the midband circuit at large signals.
fn twin(net: &Net, point: &OperatingPoint, signal: usize, e: f64) -> OperatingPoint {
    let mut twin = net.clone();
    for (k, branch) in twin.branches.iter_mut().enumerate() {
        match *branch {
            Branch::Capacitor => *branch = Branch::Supply { volts: point.elements[k].v, ohms: 0.0 },
            Branch::Inductor { .. } => *branch = Branch::Current { amperes: point.elements[k].i },
            Branch::Signal { ohms } if k == signal => *branch = Branch::Supply { volts: e, ohms },
            _ => {}
        }
    }
    twin.solve(T).expect("solves")
}

/// Central difference, once extrapolated.
fn slope(f: impl Fn(f64) -> f64) -> f64 {
    let h = 2e-4;
    let d = |h: f64| (f(h) - f(-h)) / (2.0 * h);
    (4.0 * d(h / 2.0) - d(h)) / 3.0
}

fn close(is: f64, expected: f64, relative: f64) {
    assert!((is - expected).abs() <= relative * expected.abs(), "{is:e} instead of {expected:e}");
}

fn against_differences(net: &Net, signal: usize) {
    let (plan, point) = at(net);
    let mut scratch = plan.scratch();
    let band = plan.midband(&point, &net.branches, signal, &mut scratch).expect("linear");
    for node in 0..net.nodes {
        let expected = slope(|e| twin(net, &point, signal, e).voltages[node]);
        assert!((band.gain[node] - expected).abs() < 1e-6 * expected.abs().max(1e-3), "node {node}");
        // A current into the node from outside gives the output resistance.
        if node > 0 {
            let mut pushed = net.clone();
            let source = pushed.two(0, node, Branch::Current { amperes: 0.0 });
            let mut with = point.clone();
            with.elements.push(Default::default());
            let r_out = slope(|e| {
                pushed.branches.clone_into(&mut pushed.clone().branches);
                let mut moved = pushed.clone();
                moved.branches[source] = Branch::Current { amperes: e * 1e-3 };
                twin(&moved, &with, signal, 0.0).voltages[node]
            }) * 1e3;
            let is = plan.output_resistance(&point, &net.branches, node, &mut scratch).expect("linear");
            assert!((is - r_out).abs() < 1e-5 * r_out.abs().max(1e-2), "node {node}: {is} and {r_out}");
        }
    }
    let terminals = &net.elements[signal].terminals;
    let v = slope(|e| {
        let point = twin(net, &point, signal, e);
        point.voltages[terminals[0]] - point.voltages[terminals[1]]
    });
    let i = slope(|e| -twin(net, &point, signal, e).elements[signal].i);
    close(band.input_resistance.expect("flows"), v / i, 1e-5);
}

#[test]
fn agrees_with_differences() {
    for parameters in [ideal(), full()] {
        let (net, signal) = amplifier(parameters, [0.0, 1e3], 600.0);
        against_differences(&net, signal);
        let (net, signal) = amplifier(parameters, [100.0, 1e3], 0.0);
        against_differences(&net, signal);
    }
    // A second stage, PNP, with an inductor in its collector.
    let (mut net, signal) = amplifier(full(), [220.0, 820.0], 50.0);
    net.resistor(1, 8, 330.0);
    net.pnp([9, 4, 8], full());
    net.two(9, 10, Branch::Inductor { ohms: 12.0 });
    net.resistor(10, 0, 1e3);
    net.resistor(9, 0, 2.2e3);
    against_differences(&net, signal);
}

/// Gray and Meyer, Analysis and Design of Analog Integrated Circuits, chapter 3 (from memory): gain -g_m R_L, input
/// resistance r_pi beside the divider, with an emitter resistance r_pi + (beta + 1) R_E; output resistance R_C.
#[test]
fn textbook_common_emitter() {
    let parallel = |a: f64, b: f64| a * b / (a + b);
    let load = parallel(4.7e3, 22e3);
    let divider = parallel(68e3, 15e3);
    for r_e in [0.0, 150.0] {
        let (net, signal) = amplifier(ideal(), [r_e, 1.2e3], 1e3);
        let (plan, point) = at(&net);
        let band = plan.midband(&point, &net.branches, signal, &mut plan.scratch()).expect("linear");
        let g_m = point.elements[6].i / thermal_voltage(T);
        let base = 200.0 / g_m + 201.0 * r_e;
        let input = parallel(divider, base);
        close(band.input_resistance.expect("flows"), input, 1e-9);
        let gain = -load * 200.0 / base * input / (input + 1e3);
        close(band.gain[7], gain, 1e-9);
        close(band.gain[4], gain, 1e-9);
        let out = plan.output_resistance(&point, &net.branches, 7, &mut plan.scratch()).expect("linear");
        close(out, load, 1e-9);
    }
}

/// The emitter follower: output resistance (r_pi + R_S) / (beta + 1) beside R_E; gain just under one.
#[test]
fn textbook_follower() {
    let mut net = Net::default();
    net.supply(1, 0, 10.0);
    net.supply(2, 0, 5.0);
    let signal = net.two(3, 2, Branch::Signal { ohms: 10e3 });
    let q = net.npn([1, 3, 4], ideal());
    net.resistor(4, 0, 1e3);
    let (plan, point) = at(&net);
    let mut scratch = plan.scratch();
    let r_pi = 200.0 * thermal_voltage(T) / point.elements[q].i;
    let inside = (r_pi + 10e3) / 201.0;
    let out = plan.output_resistance(&point, &net.branches, 4, &mut scratch).expect("linear");
    close(out, inside * 1e3 / (inside + 1e3), 1e-9);
    let band = plan.midband(&point, &net.branches, signal, &mut scratch).expect("linear");
    close(band.gain[4], 201e3 / (201e3 + r_pi + 10e3), 1e-9);
    close(band.input_resistance.expect("flows"), r_pi + 201e3, 1e-9);
}

#[test]
fn what_has_no_midband() {
    let (mut net, signal) = amplifier(ideal(), [0.0, 1e3], 600.0);
    let (plan, point) = at(&net);
    let mut scratch = plan.scratch();
    let none = plan.midband(&point, &net.branches, 0, &mut scratch);
    assert_eq!(none, Err(Failure::Unfit { element: 0 }));
    let none = plan.output_resistance(&point, &net.branches, 99, &mut scratch);
    assert_eq!(none, Err(Failure::Unfit { element: net.branches.len() }));
    // A collector with an inductor and nothing else has no finite gain.
    net.branches[5] = Branch::Inductor { ohms: 0.0 };
    net.branches[10] = Branch::Open;
    let (plan, point) = at(&net);
    let endless = plan.midband(&point, &net.branches, signal, &mut scratch);
    assert!(matches!(endless, Err(Failure::Singular)), "{endless:?}");
    // A signal that drives nothing sees no resistance to speak of.
    let mut idle = Net::default();
    idle.supply(1, 0, 1.0);
    idle.resistor(1, 0, 1e3);
    let signal = idle.two(2, 0, Branch::Signal { ohms: 50.0 });
    idle.two(2, 0, Branch::Open);
    let (plan, point) = at(&idle);
    let band = plan.midband(&point, &idle.branches, signal, &mut plan.scratch()).expect("linear");
    assert_eq!(band.input_resistance, None);
}
