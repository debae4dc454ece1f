//! Gain rows: the ends of the axis at the limits of every row, by a search of their own; what the axis leaves alone.

use qsheaf::device::transistor::Transistor;
use qsheaf::fit::{self, Law, TransistorLaw};
use qsheaf::part::{Part, Row, RowQuantity};

use super::{demo, read};

pub fn law_of(part: &Part) -> TransistorLaw {
    let model = fit::fit(part).unwrap_or_else(|errors| panic!("{}: {errors:#?}", part.name));
    let Law::Transistor(law) = model.law else { panic!() };
    law
}

/// A record of an NPN transistor with these rows.
pub fn record(rows: &[String]) -> Part {
    let rows: String = rows.iter().map(|row| format!("    - {{{row}}}\n")).collect();
    let text = format!("X-1:\n  kind: npn\n  source: data sheet X-1 revision A\n  rows:\n{rows}");
    read(&text).unwrap_or_else(|errors| panic!("{errors}")).remove(0)
}

/// h_FE in a row's test condition by halving: nothing of the fit's own searches is in it.
fn gain(transistor: &Transistor, row: &Row) -> f64 {
    let (i_c, v_ce) = (row.at.i_c.unwrap(), row.at.v_ce.unwrap());
    let at = transistor.at(row.at.t_j);
    let u_ce = v_ce - i_c * at.parameters.collector_resistance;
    let (mut low, mut high) = (0.0, 1.6);
    for _ in 0..90 {
        let middle = (low + high) / 2.0;
        if at.currents(middle, middle - u_ce).i_c < i_c { low = middle } else { high = middle }
    }
    let now = at.currents(low, low - u_ce);
    now.i_c / now.i_b
}

const LOW: fit::Coordinates = [-1.0, 0.0, 0.0, 0.0];
const HIGH: fit::Coordinates = [1.0, 0.0, 0.0, 0.0];

/// How far the ends lie outside the limits of each h_FE row, as ratios: an end inside gives less than one.
fn beyond(part: &Part) -> Vec<(String, f64)> {
    let law = law_of(part);
    let mut found = Vec::new();
    for row in part.rows_of(RowQuantity::CurrentGain) {
        let what = format!("{} at {:?}", part.name, row.at);
        if let Some(min) = row.min {
            found.push((format!("{what} min"), min / gain(&law.specimen(&LOW), row)));
        }
        if let Some(max) = row.max {
            found.push((format!("{what} max"), gain(&law.specimen(&HIGH), row) / max));
        }
    }
    found
}

#[test]
fn the_ends_of_the_demonstration_parts_are_at_the_limits_not_inside_and_not_wider() {
    let mut rows = 0;
    for part in demo("transistors.yaml") {
        for (what, ratio) in beyond(&part) {
            assert!((1.0..1.02).contains(&ratio), "{what}: {ratio}");
            rows += 1;
        }
    }
    assert!(rows >= 18, "{rows}");
}

fn invented() -> Vec<Part> {
    let row = |limits: &str, i_c: f64, v_ce: f64, t_j: f64| {
        format!("h_FE: {{{limits}}}, I_C: {i_c} mA, V_CE: {v_ce} V, T_j: {t_j} °C")
    };
    let many = (0..14).map(|k| {
        let min = 40.0 + 5.0 * f64::from((k * 7) % 5);
        row(&format!("min: {min}, typ: 150, max: {}", 8.0 * min), 0.1 * 2f64.powi(k), 5.0, 25.0)
    });
    vec![
        // One current, two voltages, half the gain: steeper than any base current allows.
        record(&[
            row("min: 100, typ: 180", 150.0, 10.0, 25.0),
            row("min: 50, typ: 170, max: 300", 150.0, 1.0, 25.0),
            row("min: 20, typ: 160", 140.0, 10.0, 25.0),
            row("max: 190", 160.0, 10.0, 25.0),
        ]),
        record(&many.collect::<Vec<_>>()),
        // Cold rows that are wider and narrower than at 25 °C, and hot ones.
        record(&[
            row("min: 100, typ: 200, max: 400", 10.0, 5.0, 25.0),
            row("min: 30, typ: 100", 10.0, 5.0, -55.0),
            row("min: 20, typ: 60", 100.0, 5.0, -55.0),
            row("min: 70, typ: 100", 10.0, 5.0, -20.0),
            row("min: 190, typ: 300, max: 900", 10.0, 5.0, 125.0),
        ]),
        // Limits at another temperature only.
        record(&[row("typ: 200", 10.0, 5.0, 25.0), row("min: 30, max: 900", 10.0, 5.0, -55.0)]),
    ]
}

#[test]
fn the_ends_are_nowhere_inside_a_limit() {
    for part in invented() {
        for (what, ratio) in beyond(&part) {
            assert!(ratio >= 1.0 - 1e-12, "{what}: {ratio}");
        }
    }
}

#[test]
fn the_axis_moves_the_base_current_alone_and_one_way() {
    for part in demo("transistors.yaml").into_iter().chain(invented()) {
        let law = law_of(&part);
        for t_j in [218.15, 258.15, 298.15, 398.15] {
            for v_be in [-1.0, 0.3, 0.45, 0.55, 0.62, 0.68, 0.74, 0.8, 0.9] {
                let mut last = f64::INFINITY;
                for step in -8..=8 {
                    let specimen = law.specimen(&[f64::from(step) / 8.0, 0.0, 0.0, 0.0]);
                    let now = specimen.at(t_j).currents(v_be, v_be - 3.0);
                    let nominal = law.nominal.at(t_j).currents(v_be, v_be - 3.0);
                    assert_eq!(now.i_c, nominal.i_c);
                    assert!(now.di_b_dv_be >= 0.0, "{}: I_B falls at {v_be} V, {t_j} K, {step}", part.name);
                    if v_be > 0.0 {
                        assert!(now.i_b <= last, "{}: {v_be} V, {t_j} K, {step}", part.name);
                        last = now.i_b;
                    }
                }
            }
        }
    }
}

/// Beyond the outermost rows the ratio of limit to typical value stays what it is at the last of them.
#[test]
fn ends_keep_their_ratio_beyond_the_outermost_rows() {
    let part = demo("transistors.yaml").into_iter().find(|part| part.name == "LBN-250").unwrap();
    let law = law_of(&part);
    let row = |i_c: f64| {
        let mut row = part.rows_of(RowQuantity::CurrentGain).next().unwrap().clone();
        row.at.i_c = Some(i_c);
        row
    };
    let ratio = |i_c: f64| gain(&law.specimen(&LOW), &row(i_c)) / gain(&law.nominal, &row(i_c));
    // Up to the cut-off current, which is no part of the gain.
    assert!((ratio(1e-4) / ratio(1e-3) - 1.0).abs() < 2e-3, "{} {}", ratio(1e-4), ratio(1e-3));
    assert!((ratio(0.9) / ratio(0.5) - 1.0).abs() < 1e-6);
    assert!((ratio(0.15) / ratio(0.5) - 1.0).abs() > 0.2);
}

/// Against scipy's non-negative least squares: tests/reference/fit_gain.py.
#[test]
fn the_gain_curve_agrees_with_scipy() {
    let cases: serde_json::Value =
        serde_json::from_str(include_str!("../../reference/fit_gain.json")).unwrap();
    let number = |value: &serde_json::Value| value.as_f64().unwrap();
    let mut zeros = 0;
    for case in cases.as_array().unwrap() {
        let row = |pair: &serde_json::Value| {
            // At V_CB = 0 the Early effect has no part in it.
            format!("h_FE: {{typ: {}}}, I_C: {} A, V_CE: 0.7 V", number(&pair[1]), number(&pair[0]))
        };
        let rows: Vec<String> = case["rows"].as_array().unwrap().iter().map(row).collect();
        let nominal = law_of(&record(&rows)).nominal;
        let found = [
            1.0 / nominal.gain_forward,
            1.0 / (nominal.gain_forward * nominal.knee_current_forward),
            nominal.emitter_leakage / nominal.saturation_current.sqrt(),
        ];
        for (found, wanted) in found.iter().zip(case["coefficients"].as_array().unwrap()) {
            let wanted = number(wanted);
            zeros += usize::from(wanted == 0.0);
            assert!((found - wanted).abs() <= 1e-8 * wanted, "{rows:?}: {found} {wanted}");
        }
    }
    assert!(zeros > 0 && zeros < 8, "{zeros}");
}
