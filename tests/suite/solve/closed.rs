//! Closed forms and rules of the trade.

use qsheaf::device::{diode::Diode, thermal_voltage};
use qsheaf::solve::Branch;

use super::net::{Net, full, ideal, plain_diode, switch};

fn close(is: f64, expected: f64, relative: f64) {
    assert!((is - expected).abs() <= relative * expected.abs(), "{is:e} instead of {expected:e}");
}

/// `tests/reference/solve_lambert.py` (mpmath): a junction behind a resistance, from a milliohm to a gigaohm, from -20 V
/// to 400 V; once with the resistance outside, once as the diode's own.
#[test]
fn diode_and_resistor_follow_lambert_w() {
    let mut count = 0;
    for line in include_str!("../../reference/solve_lambert.csv").lines().skip(1) {
        let numbers: Vec<f64> = line.split(',').map(|x| x.parse().expect("a number")).collect();
        let [volts, ohms, saturation_current, emission_coefficient, amperes] = numbers[..] else {
            panic!("five columns")
        };
        for own in [false, true] {
            let mut net = Net::default();
            net.supply(1, 0, volts);
            let diode = Diode {
                saturation_current,
                emission_coefficient,
                series_resistance: if own { ohms } else { 0.0 },
                ..plain_diode()
            };
            let at = if own { 1 } else { net.resistor(1, 2, ohms) + 1 };
            let d = net.diode(at, 0, diode);
            let point = net.solve(298.15).unwrap_or_else(|failure| panic!("{line}: {failure:?}"));
            close(point.elements[d].i, amperes, 1e-9);
            count += 1;
        }
    }
    assert!(count >= 270);
}

#[test]
fn bridge_of_resistors() {
    let mut net = Net::default();
    net.two(1, 0, Branch::Supply { volts: 10.0, ohms: 5.0 });
    for (from, to, ohms) in [(1, 2, 100.0), (1, 3, 220.0), (2, 0, 330.0), (3, 0, 47.0)] {
        net.resistor(from, to, ohms);
    }
    let detector = net.resistor(2, 3, 1e-3);
    let point = net.solve(300.0).expect("solves");
    // By Cramer's rule on the three node equations, in rational numbers (the detector's 1 mΩ included).
    let (g_s, g_d) = (0.2, 1000.0);
    let (a, b, c, d) = (1.0 / 100.0, 1.0 / 220.0, 1.0 / 330.0, 1.0 / 47.0);
    let m = [[g_s + a + b, -a, -b], [-a, a + c + g_d, -g_d], [-b, -g_d, b + d + g_d]];
    let det = |m: [[f64; 3]; 3]| {
        m[0][0] * (m[1][1] * m[2][2] - m[1][2] * m[2][1]) - m[0][1] * (m[1][0] * m[2][2] - m[1][2] * m[2][0])
            + m[0][2] * (m[1][0] * m[2][1] - m[1][1] * m[2][0])
    };
    for k in 0..3 {
        let mut with = m;
        for (row, right) in with.iter_mut().zip([10.0 * g_s, 0.0, 0.0]) {
            row[k] = right;
        }
        close(point.voltages[k + 1], det(with) / det(m), 1e-9);
    }
    assert!(net.residual(&point) < 1.0);
    close(point.elements[detector].i, (point.voltages[2] - point.voltages[3]) / 1e-3, 1e-6);
}

/// A milliohm carries a nanoampere beside ten amperes, at 400 V: the current rule holds to 1e-9 at its nodes.
#[test]
fn milliohm_beside_gigaohm() {
    let mut net = Net::default();
    net.supply(1, 0, 400.0);
    net.resistor(1, 0, 40.0);
    let small = net.resistor(1, 2, 1e-3);
    let large = net.resistor(2, 0, 1e9);
    let short = net.resistor(2, 3, 0.0);
    let other = net.resistor(3, 0, 4e9);
    let point = net.solve(300.0).expect("solves");
    close(point.elements[large].i, 4e-7, 1e-11);
    close(point.elements[other].i, 1e-7, 1e-11);
    close(point.elements[small].i, 5e-7, 1e-11);
    close(point.elements[short].i, 1e-7, 1e-11);
    close(point.elements[0].p, -(400.0 * 400.0 / 40.0 + 400.0 * 5e-7), 1e-11);
    assert!(net.residual(&point) < 1.0);
}

/// Ebers and Moll 1954: V_CE(sat) = V_T ln((1 + (k + 1) / beta_R) / (1 - k / beta_F)) at forced gain k.
#[test]
fn saturation_voltage_of_the_ideal_transistor() {
    for t in [250.0, 298.15, 400.0] {
        for k in [1.0, 10.0, 50.0, 150.0] {
            let mut net = Net::default();
            // Current enters a source at its first terminal and leaves it at the second.
            net.two(0, 1, Branch::Current { amperes: 1e-3 });
            net.two(0, 2, Branch::Current { amperes: k * 1e-3 });
            let q = net.npn([2, 1, 0], ideal());
            let now = ideal().at(t).parameters;
            let point = net.solve(t).expect("solves");
            let share = (1.0 + (k + 1.0) / now.gain_reverse) / (1.0 - k / now.gain_forward);
            close(point.elements[q].v, thermal_voltage(t) * share.ln(), 1e-6);
            close(point.elements[q].i / point.elements[q].i_b, k, 1e-9);
        }
    }
}

/// The differential pair's currents are in the ratio exp(dV / V_T) (Gray and Meyer, Analysis and Design of Analog
/// Integrated Circuits, the emitter-coupled pair; from memory).
#[test]
fn differential_pair_follows_the_exponential() {
    for millivolts in [-180.0, -20.0, 5.0, 60.0_f64] {
        let mut net = Net::default();
        net.supply(1, 0, 12.0);
        net.supply(2, 0, millivolts * 1e-3);
        net.two(3, 0, Branch::Current { amperes: 2e-3 });
        let left = net.npn([1, 2, 3], ideal());
        let right = net.npn([1, 0, 3], ideal());
        let point = net.solve(298.15).expect("solves");
        let ratio = (millivolts * 1e-3 / thermal_voltage(298.15)).exp();
        close(point.elements[left].i / point.elements[right].i, ratio, 1e-6);
        close(point.elements[left].i + point.elements[right].i, 2e-3 * 200.0 / 201.0, 1e-9);
    }
}

/// Common practice: about 0.7 V across a conducting silicon junction, about -2 mV per kelvin at fixed current, leakage
/// doubling every 10 K, collector current just under emitter current.
#[test]
fn rules_of_the_trade() {
    let mut net = Net::default();
    net.supply(1, 0, 5.0);
    net.two(2, 0, Branch::Current { amperes: 0.1e-3 });
    let q = net.npn([1, 0, 2], full());
    let at = |t: f64| net.solve(t).expect("solves").elements[q];
    let v_be = at(298.15).v_be;
    assert!((0.55..0.75).contains(&v_be), "{v_be}");
    let slope = (at(308.15).v_be - at(288.15).v_be) / 20.0;
    assert!((-2.4e-3..-1.6e-3).contains(&slope), "{slope}");
    let alpha = at(298.15).i / (at(298.15).i + at(298.15).i_b);
    assert!((0.98..1.0).contains(&alpha), "{alpha}");

    let mut off = Net::default();
    off.supply(1, 0, 20.0);
    let q = off.npn([1, 0, 0], full());
    let leak = |t: f64| off.solve(t).expect("solves").elements[q].i;
    let doubling = leak(308.15) / leak(298.15);
    assert!((1.9..2.1).contains(&doubling), "{doubling}");
}

#[test]
fn a_start_changes_nothing_but_the_way() {
    let net = switch(full());
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let thermal = qsheaf::solve::Thermal::ColdStart;
    let cold = plan.solve(&net.branches, 298.15, thermal, None, &mut scratch).expect("solves");
    let mut other = net.clone();
    other.branches[3] = Branch::Resistor { ohms: 330.0 };
    let elsewhere = plan.solve(&other.branches, 350.0, thermal, None, &mut scratch).expect("solves");
    let warm =
        plan.solve(&net.branches, 298.15, thermal, Some(&elsewhere.solution), &mut scratch).expect("solves");
    for (a, b) in cold.elements.iter().zip(&warm.elements) {
        close(a.i, b.i, 1e-11);
    }
    let again = plan
        .solve(&net.branches, 298.15, thermal, Some(&elsewhere.solution), &mut plan.scratch())
        .expect("solves");
    assert_eq!(
        warm, again,
        "the same arguments give the same bits, whatever the scratch was used for before"
    );
}

/// Shared by threads, each with storage of its own, a plan gives the bits that it gives alone.
#[test]
fn threads_give_the_same_bits() {
    let net = super::net::two_stage(full());
    let plan = net.plan();
    let first = plan
        .solve(&net.branches, 298.15, qsheaf::solve::Thermal::ColdStart, None, &mut plan.scratch())
        .expect("solves");
    let series = |part: usize, of: usize| {
        let mut scratch = plan.scratch();
        (0..60)
            .filter(|k| k % of == part)
            .map(|k| {
                let mut branches = net.branches.clone();
                branches[3] = Branch::Resistor { ohms: 3e3 + 50.0 * k as f64 };
                let thermal = qsheaf::solve::Thermal::ColdStart;
                let point = plan.solve(&branches, 298.15, thermal, Some(&first.solution), &mut scratch);
                (k, point.expect("solves"))
            })
            .collect::<Vec<_>>()
    };
    let alone = series(0, 1);
    let together = std::thread::scope(|scope| {
        let series = &series;
        let threads: Vec<_> = (0..3).map(|part| scope.spawn(move || series(part, 3))).collect();
        let mut all: Vec<_> = threads.into_iter().flat_map(|thread| thread.join().expect("ends")).collect();
        all.sort_by_key(|(k, _)| *k);
        all
    });
    assert_eq!(alone, together);
}

/// A circuit as written is compiled to the same plan as its topology.
#[test]
fn a_circuit_is_compiled() {
    use qsheaf::circuit::{Element, ElementKind, Network};
    let element = |designator: &str, kind, terminals: &[usize]| Element {
        designator: designator.to_owned(),
        kind,
        terminals: terminals.to_vec(),
        value: None,
        resistance: None,
        cold: None,
        inductance: None,
        part: None,
        r_th: None,
        rated_power: None,
        about: None,
        tcr: None,
        rated_voltage: None,
        place: qsheaf::source::Place::new(&"circuit.md".into(), 1, 1, 0),
    };
    let mut network = Network {
        nodes: ["ground", "supply", "drive", "load", "base"].map(str::to_owned).to_vec(),
        elements: vec![
            element("BT1", ElementKind::Supply, &[1, 0]),
            element("PS1", ElementKind::Supply, &[2, 0]),
            element("R1", ElementKind::Resistor, &[1, 3]),
            element("R2", ElementKind::Resistor, &[2, 4]),
            element("Q1", ElementKind::Npn, &[3, 4, 0]),
        ],
    };
    let plan = qsheaf::solve::Plan::of(&network).expect("fits");
    assert_eq!((plan.nodes(), plan.elements()), (5, 5));
    let net = switch(full());
    let thermal = qsheaf::solve::Thermal::ColdStart;
    let point = plan.solve(&net.branches, 298.15, thermal, None, &mut plan.scratch());
    assert_eq!(point, net.solve(298.15));
    network.elements[4].terminals.pop();
    let unfit = qsheaf::solve::Plan::of(&network).expect_err("a transistor has three terminals");
    assert_eq!(unfit, qsheaf::solve::Failure::Unfit { element: 4 });
}
