//! Devices at a given bias: confirmed solutions of the device equations, the same as by nested halving.

use qsheaf::device::curve::Curve;
use qsheaf::device::transistor::{AtTemperature, Transistor};
use qsheaf::fit::simulate::{self, AtBias};

/// A transistor with all that a fit can give it and terminal resistances beyond that.
pub fn device() -> Transistor {
    Transistor {
        saturation_current: 2e-14,
        emission_coefficient: 1.0,
        gain_forward: 180.0,
        gain_reverse: 3.0,
        early_voltage_forward: 90.0,
        early_voltage_reverse: f64::INFINITY,
        knee_current_forward: 0.5,
        emitter_leakage: 2e-12,
        emitter_leakage_emission: 2.0,
        base_resistance: 9.0,
        collector_resistance: 0.6,
        emitter_resistance: 0.05,
        cutoff_current: 1e-9,
        cutoff_e_fold: 14.4,
        energy_gap: 1.12,
        saturation_exponent: 3.0,
        gain_exponent: 1.5,
        gain_over_current: Curve::ZERO,
        gain_over_temperature: Curve::ZERO,
    }
}

/// The same with one parameter after another elsewhere.
fn devices() -> Vec<Transistor> {
    let base = device();
    vec![
        base,
        Transistor { emitter_resistance: 0.0, base_resistance: 0.0, collector_resistance: 0.0, ..base },
        Transistor { gain_forward: 25.0, gain_reverse: 0.05, ..base },
        Transistor { gain_forward: 900.0, gain_reverse: 20.0, saturation_current: 1e-16, ..base },
        Transistor { early_voltage_forward: f64::INFINITY, cutoff_current: 0.0, ..base },
        Transistor {
            early_voltage_forward: 15.0,
            early_voltage_reverse: 8.0,
            emission_coefficient: 1.05,
            ..base
        },
        Transistor { knee_current_forward: f64::INFINITY, emitter_leakage: 0.0, ..base },
        Transistor { knee_current_forward: 5e-3, emitter_leakage: 5e-11, cutoff_current: 1e-7, ..base },
    ]
}

/// Halves a bracket in which `too_low` turns from true to false.
fn halve(mut low: f64, mut high: f64, too_low: impl Fn(f64) -> bool) -> f64 {
    for _ in 0..90 {
        let middle = (low + high) / 2.0;
        if too_low(middle) { low = middle } else { high = middle }
    }
    (low + high) / 2.0
}

/// V_BE and V_CE with I_C and I_B forced, by a halving inside a halving: slow, and with nothing that could mislead it.
fn forced_by_halving(transistor: &Transistor, t_j: f64, i_c: f64, i_b: f64) -> Option<(f64, f64)> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    let u_be_at = |u_bc: f64| halve(0.0, 1.6, |u_be| at.currents(u_be, u_bc).i_c < i_c);
    let u_bc = halve(-200.0, 1.6, |u_bc| at.currents(u_be_at(u_bc), u_bc).i_b < i_b);
    let u_be = u_be_at(u_bc);
    let now = at.currents(u_be, u_bc);
    let near = |a: f64, b: f64| (a / b - 1.0).abs() < 1e-6;
    (near(now.i_c, i_c) && near(now.i_b, i_b)).then(|| {
        let emitter = (i_c + i_b) * p.emitter_resistance;
        (u_be + i_b * p.base_resistance + emitter, u_be - u_bc + i_c * p.collector_resistance + emitter)
    })
}

/// The currents at the junction voltages of a solution are those that were forced, and the terminals add up.
fn satisfies(at: &AtTemperature, found: &AtBias, i_c: f64, i_b: f64) {
    let p = &at.parameters;
    let now = at.currents(found.u_be, found.u_bc);
    assert!((now.i_c / i_c - 1.0).abs() < 1e-9, "{found:?}: I_C {} not {i_c}", now.i_c);
    assert!((now.i_b / i_b - 1.0).abs() < 1e-9, "{found:?}: I_B {} not {i_b}", now.i_b);
    let emitter = (i_c + i_b) * p.emitter_resistance;
    assert!((found.v_be - found.u_be - i_b * p.base_resistance - emitter).abs() < 1e-9);
    assert!((found.v_ce - found.u_be + found.u_bc - i_c * p.collector_resistance - emitter).abs() < 1e-9);
}

#[test]
fn forced_currents_satisfy_the_device_and_agree_with_halving() {
    let (mut solved, mut refused) = (0, 0);
    for transistor in devices() {
        for t_j in [218.15, 298.15, 398.15] {
            for i_c in [1e-5, 1e-3, 0.03, 0.5] {
                for forced_gain in [0.3, 5.0, 20.0, 60.0, 150.0, 180.0, 200.0, 400.0, 2000.0] {
                    let i_b = i_c / forced_gain;
                    let found = simulate::forced(&transistor, t_j, i_c, i_b);
                    let wanted = forced_by_halving(&transistor, t_j, i_c, i_b);
                    let what = format!("{transistor:?} at {t_j} K, {i_c} A, {i_b} A");
                    match (found, wanted) {
                        (Some(found), Some((v_be, v_ce))) => {
                            satisfies(&transistor.at(t_j), &found, i_c, i_b);
                            assert!((found.v_be - v_be).abs() < 1e-8, "{what}: {} {v_be}", found.v_be);
                            // Deep in the active region V_CE follows from the small slope of I_B alone.
                            let allowed = 1e-8 + if v_ce > 1.0 { 1e-4 * v_ce } else { 0.0 };
                            assert!((found.v_ce - v_ce).abs() < allowed, "{what}: {} {v_ce}", found.v_ce);
                            solved += 1;
                        }
                        (None, None) => refused += 1,
                        (found, wanted) => panic!("{what}: {found:?}, by halving {wanted:?}"),
                    }
                }
            }
        }
    }
    println!("{solved} solved, {refused} refused");
    assert!(solved > 350 && refused > 150, "{solved} {refused}");
}

#[test]
fn a_base_current_that_cannot_carry_the_collector_current_gives_no_number() {
    let t_j = 298.15;
    for transistor in devices() {
        for i_c in [1e-4, 1e-2, 0.2] {
            // Less than the base takes with 200 V across the collector junction.
            let deep =
                simulate::active(&Transistor { collector_resistance: 0.0, ..transistor }, t_j, i_c, 220.0);
            let Some(deep) = deep else { continue };
            for share in [0.999, 0.9, 0.1, 1e-3] {
                assert_eq!(simulate::forced(&transistor, t_j, i_c, deep.i_b * share), None, "{transistor:?}");
            }
        }
    }
    for absurd in [0.0, -1e-3, f64::NAN, f64::INFINITY, 1e9] {
        assert_eq!(simulate::forced(&device(), t_j, absurd, 1e-4), None, "{absurd}");
        assert_eq!(simulate::forced(&device(), t_j, 1e-2, absurd), None, "{absurd}");
        assert_eq!(simulate::active(&device(), t_j, absurd, 5.0), None, "{absurd}");
    }
    // A leaking junction carries more than this at V_BE = 0: no answer, and no end of a bracket in its place.
    let leaky = Transistor { cutoff_current: 1e-4, ..device() };
    assert_eq!(simulate::active(&leaky, t_j, 1e-6, 5.0), None);
}

#[test]
fn the_active_region_satisfies_the_device() {
    let mut solved = 0;
    for transistor in devices() {
        for t_j in [218.15, 298.15, 398.15] {
            for i_c in [1e-5, 1e-3, 0.03, 0.5] {
                for v_ce in [0.2, 1.0, 10.0] {
                    let Some(found) = simulate::active(&transistor, t_j, i_c, v_ce) else { continue };
                    assert!((found.v_ce - v_ce).abs() < 1e-9, "{found:?}");
                    satisfies(&transistor.at(t_j), &found, i_c, found.i_b);
                    solved += 1;
                }
            }
        }
    }
    assert!(solved > 230, "{solved}");
}

#[test]
fn the_reverse_gain_for_a_saturation_voltage_gives_that_voltage() {
    let mut checked = 0;
    for transistor in devices() {
        for t_j in [218.15, 298.15, 398.15] {
            for (i_c, i_b) in [(1e-3, 1e-4), (10e-3, 1e-3), (0.1, 0.01)] {
                let Some(before) = simulate::forced(&transistor, t_j, i_c, i_b) else { continue };
                for more in [0.01, 0.05, 0.15] {
                    let wanted = before.v_ce + more;
                    let gain = simulate::reverse_gain_at(&transistor, t_j, i_c, i_b, wanted).unwrap();
                    assert!(gain < transistor.gain_reverse, "{gain}");
                    if gain > 0.0 {
                        let lowered = Transistor { gain_reverse: gain, ..transistor };
                        let found = simulate::forced(&lowered, t_j, i_c, i_b).unwrap();
                        assert!((found.v_ce - wanted).abs() < 1e-9, "{} {wanted}", found.v_ce);
                        checked += 1;
                    }
                }
                // No reverse gain makes the junctions keep next to nothing.
                let drops =
                    i_c * transistor.collector_resistance + (i_c + i_b) * transistor.emitter_resistance;
                let least = simulate::reverse_gain_at(&transistor, t_j, i_c, i_b, drops + 1e-4);
                assert_eq!(least, Some(f64::INFINITY));
            }
        }
    }
    assert!(checked > 100, "{checked}");
}
