//! Device equations: against mpmath (tests/reference/device_currents.py), derivatives against differences, temperature laws,
//! and what the trade expects of silicon.

use qsheaf::device::curve::Curve;
use qsheaf::device::diode::{self, Diode};
use qsheaf::device::transistor::{self, Transistor};
use qsheaf::device::{BOLTZMANN, ELEMENTARY_CHARGE, REFERENCE_TEMPERATURE, thermal_voltage};

/// A silicon transistor with every effect.
const FULL: Transistor = Transistor {
    saturation_current: 3e-14,
    emission_coefficient: 1.02,
    gain_forward: 210.0,
    gain_reverse: 3.0,
    early_voltage_forward: 85.0,
    early_voltage_reverse: 12.0,
    knee_current_forward: 0.4,
    emitter_leakage: 2e-12,
    emitter_leakage_emission: 1.8,
    base_resistance: 10.0,
    collector_resistance: 0.5,
    emitter_resistance: 0.1,
    cutoff_current: 1e-9,
    cutoff_e_fold: 10.0 / std::f64::consts::LN_2,
    energy_gap: 1.12,
    saturation_exponent: 3.0,
    gain_exponent: 1.5,
    gain_over_current: Curve::ZERO,
    gain_over_temperature: Curve::ZERO,
};

/// The same without anything beyond Ebers and Moll.
const PLAIN: Transistor = Transistor {
    emission_coefficient: 1.0,
    early_voltage_forward: f64::INFINITY,
    early_voltage_reverse: f64::INFINITY,
    knee_current_forward: f64::INFINITY,
    emitter_leakage: 0.0,
    cutoff_current: 0.0,
    ..FULL
};

/// A specimen whose gain leaves the common law over current and temperature.
fn bent() -> Transistor {
    let over = |points: &[[f64; 2]]| Curve::through(points).unwrap();
    Transistor {
        early_voltage_reverse: f64::INFINITY,
        gain_over_current: over(&[[-9.0, -0.4], [-6.5, -0.7], [-3.0, -0.3], [-1.0, -0.9]]),
        gain_over_temperature: over(&[[-0.3, -0.5], [0.0, 0.0], [0.2, 0.1]]),
        ..FULL
    }
}

const ZENER: Diode = Diode {
    saturation_current: 1e-14,
    emission_coefficient: 1.05,
    series_resistance: 1.0,
    leakage: 1e-8,
    leakage_e_fold: 10.0 / std::f64::consts::LN_2,
    breakdown_voltage: 2.4,
    breakdown_current: 5e-3,
    breakdown_slope: 0.5,
    breakdown_coefficient: -1.6e-3,
    energy_gap: 1.12,
    saturation_exponent: 3.0,
};

const DIODE: Diode =
    Diode { saturation_current: 3e-9, emission_coefficient: 1.8, breakdown_voltage: f64::INFINITY, ..ZENER };

const TEMPERATURES: [f64; 5] = [218.15, 253.15, 298.15, 358.15, 423.15];

fn reference() -> serde_json::Value {
    serde_json::from_str(include_str!("../reference/device_currents.json")).unwrap()
}

/// A parameter of the reference, infinite where it is null.
fn value(parameters: &serde_json::Value, name: &str) -> f64 {
    let found = parameters.get(name).unwrap_or_else(|| panic!("{name}"));
    found.as_f64().unwrap_or(f64::INFINITY)
}

fn numbers(point: &serde_json::Value) -> Vec<f64> {
    point.as_array().unwrap().iter().map(|x| x.as_f64().unwrap()).collect()
}

#[test]
fn transistor_currents_agree_with_mpmath() {
    let mut points = 0;
    for (name, case) in reference()["transistors"].as_object().unwrap() {
        let of = |key: &str| value(&case["parameters"], key);
        let device = Transistor {
            saturation_current: of("saturation_current"),
            emission_coefficient: of("emission_coefficient"),
            gain_forward: of("gain_forward"),
            gain_reverse: of("gain_reverse"),
            early_voltage_forward: of("early_voltage_forward"),
            early_voltage_reverse: of("early_voltage_reverse"),
            knee_current_forward: of("knee_current_forward"),
            emitter_leakage: of("emitter_leakage"),
            emitter_leakage_emission: of("emitter_leakage_emission"),
            cutoff_current: of("cutoff_current"),
            cutoff_e_fold: of("cutoff_e_fold"),
            energy_gap: of("energy_gap"),
            saturation_exponent: of("saturation_exponent"),
            gain_exponent: of("gain_exponent"),
            ..PLAIN
        };
        for point in case["points"].as_array().unwrap().iter().map(numbers) {
            let [t, v_be, v_bc, i_c, i_b] = point[..] else { panic!() };
            let now = device.at(t).currents(v_be, v_bc);
            // Two terms of the collector current may cancel: what is left knows the larger one only to its last place.
            let cancelled = 1e-14 * (i_c.abs() + i_b.abs());
            for (found, wanted) in [(now.i_c, i_c), (now.i_b, i_b)] {
                assert!(
                    (found - wanted).abs() <= 1e-9 * wanted.abs() + cancelled,
                    "{name} at {t} K, {v_be}, {v_bc}: {found:e}, not {wanted:e}"
                );
            }
            points += 1;
        }
    }
    assert!(points > 1900);
}

#[test]
fn diode_currents_agree_with_mpmath() {
    let mut points = 0;
    for (name, case) in reference()["diodes"].as_object().unwrap() {
        let of = |key: &str| value(&case["parameters"], key);
        let device = Diode {
            saturation_current: of("saturation_current"),
            emission_coefficient: of("emission_coefficient"),
            series_resistance: 0.0,
            leakage: of("leakage"),
            leakage_e_fold: of("leakage_e_fold"),
            breakdown_voltage: of("breakdown_voltage"),
            breakdown_current: of("breakdown_current"),
            breakdown_slope: of("breakdown_slope"),
            breakdown_coefficient: of("breakdown_coefficient"),
            energy_gap: of("energy_gap"),
            saturation_exponent: of("saturation_exponent"),
        };
        for point in case["points"].as_array().unwrap().iter().map(numbers) {
            let [t, v, wanted] = point[..] else { panic!() };
            let (found, _) = device.at(t).current(v);
            assert!(
                (found - wanted).abs() <= 1e-9 * wanted.abs(),
                "{name} at {t} K, {v}: {found:e}, {wanted:e}"
            );
            points += 1;
        }
    }
    assert!(points > 200);
}

/// Difference quotient of `f` at `x` by Richardson's extrapolation of central differences, and how far it can be trusted.
fn slope(f: &dyn Fn(f64) -> f64, x: f64) -> (f64, f64) {
    let h = 2e-5 * x.abs().max(1.0);
    let central = |h: f64| (f(x + h) - f(x - h)) / (2.0 * h);
    let (wide, narrow) = (central(h), central(h / 2.0));
    let rounding = 1e-15 * (f(x).abs() + f(x + h).abs()) / h;
    (narrow + (narrow - wide) / 3.0, (narrow - wide).abs() + 4.0 * rounding)
}

fn same_slope(what: &str, given: f64, f: &dyn Fn(f64) -> f64, x: f64) {
    let (wanted, doubt) = slope(f, x);
    assert!(given.is_finite(), "{what} at {x}");
    assert!(
        (given - wanted).abs() <= 1e-6 * wanted.abs() + doubt,
        "{what} at {x}: {given:e}, differences give {wanted:e} ± {doubt:e}"
    );
}

/// Among them voltages far beyond any circuit, and widths of the base where the Early effect is continued.
const ACROSS: [f64; 20] = [
    -1000.0, -300.0, -40.0, -2.0, -0.5, -0.1, -0.011, 0.013, 0.21, 0.43, 0.61, 0.72, 0.85, 1.3, 4.0, 9.9,
    12.1, 60.0, 300.0, 1000.0,
];

#[test]
fn transistor_derivatives_agree_with_differences() {
    for device in
        [PLAIN, FULL, bent(), Transistor { early_voltage_reverse: 1.5, knee_current_forward: 1e-3, ..FULL }]
    {
        for t in TEMPERATURES {
            let at = device.at(t);
            for v_be in ACROSS {
                for v_bc in ACROSS {
                    let now = at.currents(v_be, v_bc);
                    let what = |name: &str| format!("{name} at {t} K, {v_be}, {v_bc}");
                    let over_be = |v| at.currents(v, v_bc);
                    let over_bc = |v| at.currents(v_be, v);
                    same_slope(&what("dI_C/dV_BE"), now.di_c_dv_be, &|v| over_be(v).i_c, v_be);
                    same_slope(&what("dI_C/dV_BC"), now.di_c_dv_bc, &|v| over_bc(v).i_c, v_bc);
                    same_slope(&what("dI_B/dV_BE"), now.di_b_dv_be, &|v| over_be(v).i_b, v_be);
                    same_slope(&what("dI_B/dV_BC"), now.di_b_dv_bc, &|v| over_bc(v).i_b, v_bc);
                }
            }
        }
    }
}

#[test]
fn diode_derivatives_agree_with_differences() {
    for device in [DIODE, ZENER] {
        for t in TEMPERATURES {
            let at = device.at(t);
            for v in ACROSS {
                same_slope(&format!("dI/dV at {t} K"), at.current(v).1, &|v| at.current(v).0, v);
            }
        }
    }
}

/// Where a law changes its form its value and slope do not jump.
#[test]
fn laws_are_continued_without_a_jump() {
    let at = FULL.at(REFERENCE_TEMPERATURE);
    let n_vt = FULL.emission_coefficient * thermal_voltage(REFERENCE_TEMPERATURE);
    let edges_be = [0.0, 1e-3 * n_vt, -1e-3 * n_vt, 120.0 * n_vt, 0.9 * FULL.early_voltage_reverse];
    for edge in edges_be {
        let hair = 1e-12 * f64::max(edge.abs(), 1e-3);
        let (a, b) = (at.currents(edge - hair, -1.0), at.currents(edge + hair, -1.0));
        for (x, y) in
            [(a.i_c, b.i_c), (a.i_b, b.i_b), (a.di_c_dv_be, b.di_c_dv_be), (a.di_b_dv_be, b.di_b_dv_be)]
        {
            assert!((x - y).abs() <= 1e-7 * x.abs().max(1e-9), "at {edge}: {x:e}, {y:e}");
        }
    }
    for edge in [0.0, 120.0 * n_vt, 0.9 * FULL.early_voltage_forward] {
        let hair = 1e-12 * f64::max(edge, 1e-3);
        let (a, b) = (at.currents(0.6, edge - hair), at.currents(0.6, edge + hair));
        for (x, y) in
            [(a.i_c, b.i_c), (a.i_b, b.i_b), (a.di_c_dv_bc, b.di_c_dv_bc), (a.di_b_dv_bc, b.di_b_dv_bc)]
        {
            assert!((x - y).abs() <= 1e-7 * x.abs().max(1e-9), "at {edge}: {x:e}, {y:e}");
        }
    }
}

#[test]
fn nothing_overflows_up_to_a_kilovolt() {
    let odd = Transistor { saturation_current: 1e-5, knee_current_forward: 1e-6, ..FULL };
    for t in [150.0, 298.15, 700.0] {
        for v_be in (-1000..=1000).step_by(40).map(f64::from) {
            for v_bc in (-1000..=1000).step_by(40).map(f64::from) {
                for device in [PLAIN, FULL, bent(), odd] {
                    let now = device.at(t).currents(v_be, v_bc);
                    let all =
                        [now.i_c, now.i_b, now.di_c_dv_be, now.di_c_dv_bc, now.di_b_dv_be, now.di_b_dv_bc];
                    assert!(all.iter().all(|x| x.is_finite()), "{t} K, {v_be}, {v_bc}: {now:?}");
                }
            }
            for device in [DIODE, ZENER] {
                let (i, g) = device.at(t).current(v_be);
                assert!(i.is_finite() && g.is_finite() && g >= 0.0);
            }
        }
    }
}

/// A diode gives nothing by itself: no current without voltage, and current along the voltage.
#[test]
fn diodes_are_passive_even_with_soft_breakdown() {
    for device in [DIODE, ZENER, Diode { breakdown_voltage: 0.2, ..ZENER }] {
        for t in TEMPERATURES {
            let at = device.at(t);
            assert_eq!(at.current(0.0).0, 0.0);
            let mut v = 1e-9;
            while v < 1000.0 {
                assert!(at.current(v).0 > 0.0 && at.current(-v).0 < 0.0, "{v} V at {t} K");
                v *= 1.7;
            }
        }
    }
}

/// The power into a transistor is never negative: a device without sources gives nothing.
#[test]
fn transistors_are_passive() {
    for device in [PLAIN, FULL, bent()] {
        for t in TEMPERATURES {
            let at = device.at(t);
            for v_be in ACROSS {
                for v_bc in ACROSS {
                    let now = at.currents(v_be, v_bc);
                    // P = I_B V_BE + I_C V_CE
                    let (base, collector) = (now.i_b * v_be, now.i_c * (v_be - v_bc));
                    let rounding = 1e-12 * (base.abs() + collector.abs());
                    assert!(base + collector >= -rounding, "{t} K, {v_be}, {v_bc}: {base} + {collector}");
                }
            }
        }
    }
}

fn v_be_at(device: &Transistor, t: f64, i_c: f64, v_cb: f64) -> f64 {
    let at = device.at(t);
    let (mut low, mut high) = (0.0, 1.5);
    for _ in 0..80 {
        let middle = (low + high) / 2.0;
        if at.currents(middle, -v_cb).i_c < i_c { low = middle } else { high = middle }
    }
    low
}

fn v_f_at(at: &diode::AtTemperature, i_f: f64) -> f64 {
    let (mut low, mut high) = (0.0, 2.0);
    for _ in 0..80 {
        let middle = (low + high) / 2.0;
        if at.current(middle).0 < i_f { low = middle } else { high = middle }
    }
    low
}

/// Common practice: about 0.7 V across a conducting silicon junction.
#[test]
fn conducting_silicon_takes_about_0_7_v() {
    let v_be = v_be_at(&FULL, REFERENCE_TEMPERATURE, 10e-3, 5.0);
    assert!((0.6..0.8).contains(&v_be), "{v_be}");
    let v_f = v_f_at(&DIODE.at(REFERENCE_TEMPERATURE), 10e-3);
    assert!((0.6..0.8).contains(&v_f), "{v_f}");
}

/// Common practice: V_BE falls by about 2 mV per kelvin at constant current. The exact law of the equations:
/// dV_BE/dT = (V_BE - E_g - m kT/q) / T (Sze, Physics of Semiconductor Devices, 1969, from memory).
#[test]
fn v_be_falls_by_about_two_millivolts_a_kelvin() {
    let i_c = 5e-3;
    for t in [253.15, 298.15, 343.15] {
        let v_be = |t| v_be_at(&PLAIN, t, i_c, 0.0);
        let found = (v_be(t + 0.5) - v_be(t - 0.5)) / 1.0;
        let law = (v_be(t) - PLAIN.energy_gap - PLAIN.saturation_exponent * thermal_voltage(t)) / t;
        assert!((found - law).abs() < 1e-8, "{found} {law}");
        assert!((-2.4e-3..-1.5e-3).contains(&found), "{found}");
    }
}

/// Common practice: leakage doubles for every ten kelvin.
#[test]
fn leakage_doubles_per_ten_kelvin() {
    let cutoff = |t: f64| -FULL.at(t).currents(0.0, -10.0).i_b;
    assert!((cutoff(308.15) / cutoff(298.15) - 2.0).abs() < 1e-3);
    let device = Diode { saturation_current: 1e-15, ..DIODE };
    let reverse = |t: f64| -device.at(t).current(-10.0).0;
    assert!((reverse(308.15) / reverse(298.15) - 2.0).abs() < 1e-3);
}

/// Common practice: the collector current is just under the emitter current.
#[test]
fn collector_current_is_just_under_the_emitter_current() {
    let now = FULL.at(REFERENCE_TEMPERATURE).currents(0.65, -5.0);
    let ratio = now.i_c / (now.i_c + now.i_b);
    assert!((0.98..1.0).contains(&ratio), "{ratio}");
}

/// The gain over temperature follows its power law, in both directions and with the recombination current in it.
#[test]
fn gain_follows_its_power_of_temperature() {
    let gain = |device: &Transistor, t: f64, i_c: f64| {
        let now: transistor::Currents = device.at(t).currents(v_be_at(device, t, i_c, 0.0), 0.0);
        now.i_c / now.i_b
    };
    for t in TEMPERATURES {
        let power = (t / REFERENCE_TEMPERATURE).powf(1.5);
        let ratio = gain(&PLAIN, t, 1e-3) / gain(&PLAIN, REFERENCE_TEMPERATURE, 1e-3);
        assert!((ratio / power - 1.0).abs() < 1e-9, "{ratio} {power}");
    }
    assert!(gain(&FULL, 358.15, 1e-3) > gain(&FULL, 298.15, 1e-3));
    // Fall towards low and high currents.
    let at = |i_c| gain(&FULL, REFERENCE_TEMPERATURE, i_c);
    assert!(at(1e-6) < 0.8 * at(5e-3) && at(0.5) < 0.6 * at(5e-3));
}

/// With V_BC = 0 the knee bends the transport current as I_F = I_C (1 + I_C / I_K) (Gummel and Poon 1970).
#[test]
fn knee_current_bends_the_transport_current() {
    let device = Transistor { knee_current_forward: 0.1, early_voltage_reverse: f64::INFINITY, ..PLAIN };
    let at = device.at(REFERENCE_TEMPERATURE);
    for v_be in [0.5, 0.65, 0.75, 0.85] {
        let i_c = at.currents(v_be, 0.0).i_c;
        let forward = device.saturation_current * (v_be / thermal_voltage(REFERENCE_TEMPERATURE)).exp_m1();
        assert!((i_c * (1.0 + i_c / 0.1) / forward - 1.0).abs() < 1e-10);
    }
}

/// CODATA 2022: kT/q at 300 K is 25.852 mV.
#[test]
fn thermal_voltage_from_exact_constants() {
    assert_eq!((BOLTZMANN, ELEMENTARY_CHARGE), (1.380_649e-23, 1.602_176_634e-19));
    assert!((thermal_voltage(300.0) - 25.851_999_786e-3).abs() < 1e-11);
}

/// Through its points, between neighbours elsewhere, level beyond the outermost, without a jump in value or slope.
#[test]
fn curves_go_through_their_points_without_overshoot() {
    let points = [[-2.0, 1.0], [-1.5, 3.0], [0.0, 3.5], [0.3, 0.2], [2.0, 0.2], [2.1, 5.0], [4.0, 4.0]];
    let curve = Curve::through(&points).unwrap();
    for [at, value] in points {
        assert!((curve.at(at).0 - value).abs() < 1e-14);
        let (before, after) = (curve.at(at - 1e-9), curve.at(at + 1e-9));
        assert!((before.0 - after.0).abs() < 1e-6 && (before.1 - after.1).abs() < 1e-4);
    }
    for pair in points.windows(2) {
        let secant = (pair[1][1] - pair[0][1]) / (pair[1][0] - pair[0][0]);
        for k in 0..=200 {
            let x = pair[0][0] + (pair[1][0] - pair[0][0]) * f64::from(k) / 200.0;
            let (value, slope) = curve.at(x);
            assert!(
                value >= pair[0][1].min(pair[1][1]) - 1e-12 && value <= pair[0][1].max(pair[1][1]) + 1e-12
            );
            assert!(slope * secant >= -1e-9 && slope.abs() <= 2.0 * secant.abs() + 1e-9, "{slope} {secant}");
            if k % 200 != 0 {
                same_slope("curve", slope, &|x| curve.at(x).0, x);
            }
        }
    }
    assert_eq!((curve.at(-50.0), curve.at(50.0)), ((1.0, 0.0), (4.0, 0.0)));
    assert_eq!((Curve::ZERO.at(1.0), curve.times(-2.0).at(0.0).0), ((0.0, 0.0), -7.0));
    let json = serde_json::to_string(&curve).unwrap();
    assert_eq!(serde_json::from_str::<Curve>(&json).unwrap(), curve);
    for wrong in
        [&[[1.0, 0.0], [1.0, 2.0]][..], &[[2.0, 0.0], [1.0, 2.0]], &[[0.0, f64::NAN]], &[[0.0; 2]; 9]]
    {
        assert_eq!(Curve::through(wrong), None);
    }
}
