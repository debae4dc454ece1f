//! Regions, forced gain, overdrive, and the distances to each edge.

use qsheaf::solve::{
    Branch, EDGE_OF_SATURATION, ElementPoint, Probe, Region, active_gain, cut_in_voltage, forced_gain,
    margin, overdrive, region,
};

use super::net::{Net, full, ideal};

const ALL: [Region; 4] = [Region::Off, Region::Active, Region::Saturated, Region::Reverse];

/// A transistor with `drive` volts through 10 kΩ into its base and `supply` volts through 1 kΩ to its collector; all
/// turned round for PNP.
fn stage(full_model: bool, pnp: bool, drive: f64, supply: f64) -> (Branch, ElementPoint) {
    let sign = if pnp { -1.0 } else { 1.0 };
    let parameters = if full_model { full() } else { ideal() };
    let mut net = Net::default();
    net.supply(1, 0, sign * supply);
    net.supply(2, 0, sign * drive);
    net.resistor(1, 3, 1e3);
    net.resistor(2, 4, 10e3);
    let q = if pnp { net.pnp([3, 4, 0], parameters) } else { net.npn([3, 4, 0], parameters) };
    (net.branches[q], net.solve(298.15).expect("solves").elements[q])
}

#[test]
fn the_four_regions() {
    for (full_model, pnp) in [(false, false), (false, true), (true, false), (true, true)] {
        for (drive, supply, expected) in [
            (0.0, 10.0, Region::Off),
            (0.4, 10.0, Region::Off),
            (0.9, 10.0, Region::Active),
            (1.0, 10.0, Region::Active),
            (3.0, 10.0, Region::Saturated),
            (10.0, 10.0, Region::Saturated),
            (5.0, 0.0, Region::Saturated),
            (-3.0, -2.0, Region::Off),
        ] {
            let (branch, point) = stage(full_model, pnp, drive, supply);
            assert_eq!(region(&branch, &point), Some(expected), "{drive} V, {supply} V");
        }
        // Collector and emitter changed over: the collector junction conducts, the emitter junction is reverse biased.
        let (branch, point) = stage(full_model, pnp, 0.0, -5.0);
        assert_eq!(region(&branch, &point), Some(Region::Reverse));
    }
}

/// The sign of each margin says the same as the region, all the way through.
#[test]
fn margins_agree_with_regions_and_are_continuous() {
    for (full_model, pnp) in [(false, false), (false, true), (true, false), (true, true)] {
        let mut last: Option<[f64; 4]> = None;
        for k in 0..1200 {
            let drive = -1.0 + 5.0 * f64::from(k) / 1200.0;
            let (branch, point) = stage(full_model, pnp, drive, 10.0);
            let is = region(&branch, &point).expect("a transistor");
            let margins = ALL.map(|region| {
                margin(region, &branch, &point).unwrap_or_else(|| panic!("{drive} V: {point:?}"))
            });
            for (region, margin) in ALL.iter().zip(margins) {
                assert_eq!(*region == is, margin > 0.0, "{region:?} by {margin}, but {is:?} at {drive} V");
            }
            if let Some(last) = last {
                // Overdrive grows steeply past the edge; the others are voltages of slowly moving nodes.
                for (k, most) in [(0, 0.1), (1, 0.3), (3, 0.3)] {
                    assert!((margins[k] - last[k]).abs() < most, "{k} at {drive} V");
                }
                assert!(
                    (margins[2] - last[2]).abs() < 0.1 + 0.1 * margins[2].abs() || last[2] < -0.9,
                    "{drive} V"
                );
            }
            last = Some(margins);
        }
    }
}

/// With an ideal transistor h_FE is beta_F, and the overdrive of a deeply saturated stage is what a hand calculation
/// says: 9.3 V / 10 kΩ of base current, 9.9 V / 1 kΩ of collector current, gain 200.
#[test]
fn overdrive_by_hand() {
    let (branch, point) = stage(false, false, 10.0, 10.0);
    assert!((active_gain(&branch, &point).expect("h_FE") - 200.0).abs() < 1e-6);
    let forced = forced_gain(&branch, &point).expect("k");
    assert!((forced - point.i / point.i_b).abs() < 1e-12);
    assert!((forced - 9.9 / 0.93).abs() < 0.2, "{forced}");
    let n = overdrive(&branch, &point).expect("overdrive");
    assert!((n - 200.0 / forced).abs() < 1e-6);
    let saturated = margin(Region::Saturated, &branch, &point).expect("margin");
    assert!((saturated - (n - EDGE_OF_SATURATION)).abs() < 1e-12);
}

/// V_CB = 0, the edge of quasi-saturation, is still active; V_CE about 0.2 V at some collector current is the edge.
#[test]
fn the_edge_of_saturation_is_where_textbooks_put_it() {
    // Diode connected: V_CB is zero.
    let mut net = Net::default();
    net.supply(1, 0, 10.0);
    net.resistor(1, 2, 1e3);
    let q = net.npn([2, 2, 0], ideal());
    let point = net.solve(298.15).expect("solves");
    let at = &point.elements[q];
    assert_eq!(region(&net.branches[q], at), Some(Region::Active));
    // A hundredth of the base current in the collector junction: V_CE = V_T ln((1 + (k + 1) / beta_R) / (1 - k / beta_F))
    // with k = beta_F / 1.01 (Ebers and Moll 1954).
    let (branch, low) = stage(false, false, 1.05, 2.0);
    let edge = low.v - margin(Region::Active, &branch, &low).expect("margin");
    let k = 200.0 / EDGE_OF_SATURATION;
    let expected = 0.025_692_6 * ((1.0 + (k + 1.0) / 4.0) / (1.0 - k / 200.0)).ln();
    assert!((edge - expected).abs() < 1e-4, "{edge} V instead of {expected} V");
    assert!((0.2..0.25).contains(&edge));
    // h_FE of a real one at zero V_CB: what the device equations give there.
    assert!((overdrive(&net.branches[q], at).expect("overdrive") - 1.0).abs() < 1e-9);
}

#[test]
fn the_cut_in_voltage_falls_with_temperature() {
    assert!((cut_in_voltage(298.15) - 0.5).abs() < 1e-15);
    assert!((cut_in_voltage(348.15) - 0.4).abs() < 1e-15);
    assert!(cut_in_voltage(900.0) > 0.0);
}

#[test]
fn other_elements_have_no_region() {
    let resistor = Branch::Resistor { ohms: 1.0 };
    let point = ElementPoint { v: 1.0, i: 1.0, t_j: 300.0, ..ElementPoint::default() };
    assert_eq!(region(&resistor, &point), None);
    assert_eq!(forced_gain(&resistor, &point), None);
    assert_eq!(active_gain(&resistor, &point), None);
    assert_eq!(overdrive(&resistor, &point), None);
    assert_eq!(margin(Region::Off, &resistor, &point), None);
    let (branch, mut broken) = stage(true, false, 3.0, 10.0);
    broken.v = f64::NAN;
    assert_eq!(region(&branch, &broken), None);
}

/// What a probe adds shows at the terminals: V_CE and V_BE by so much at the same currents, the cut-off current beside
/// the collector junction.
#[test]
fn probes() {
    for pnp in [false, true] {
        let sign = if pnp { -1.0 } else { 1.0 };
        let mut net = Net::default();
        net.two(0, 1, Branch::Current { amperes: sign * 1e-3 });
        net.two(0, 2, Branch::Current { amperes: sign * 2e-2 });
        let q = if pnp { net.pnp([2, 1, 0], full()) } else { net.npn([2, 1, 0], full()) };
        let plain = net.solve(298.15).expect("solves").elements[q];
        if let Branch::Transistor { probe, .. } = &mut net.branches[q] {
            *probe = Probe { v_ce: 0.15, v_be: 0.05, cutoff: 0.0 };
        }
        let raised = net.solve(298.15).expect("solves").elements[q];
        assert!((raised.i - plain.i).abs() < 1e-14 && (raised.i_b - plain.i_b).abs() < 1e-14);
        assert!((raised.v - plain.v - sign * 0.15).abs() < 1e-10);
        assert!((raised.v_be - plain.v_be - sign * 0.05).abs() < 1e-10);
        assert_eq!(region(&net.branches[q], &raised), Some(Region::Saturated));

        let mut off = Net::default();
        off.supply(1, 0, sign * 10.0);
        let q = if pnp { off.pnp([1, 0, 0], ideal()) } else { off.npn([1, 0, 0], ideal()) };
        if let Branch::Transistor { probe, .. } = &mut off.branches[q] {
            *probe = Probe { cutoff: 3e-6, ..Probe::default() };
        }
        let at = off.solve(298.15).expect("solves").elements[q];
        assert!((at.i - sign * 3e-6).abs() < 1e-11 && (at.i_b + sign * 3e-6).abs() < 1e-11);
        assert_eq!(region(&off.branches[q], &at), Some(Region::Off));
    }
}
