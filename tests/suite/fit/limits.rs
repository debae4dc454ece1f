//! Zener with series resistance; what makes a bound weak; rows that contradict each other or cannot be kept.

use qsheaf::device::diode::Diode;
use qsheaf::fit::{self, Bound, Law, Model};
use qsheaf::part::Part;
use qsheaf::quantity::Origin;

use super::{demo, read};

fn one(kind: &str, rows: &[&str]) -> Part {
    let rows: String = rows.iter().map(|row| format!("    - {{{row}}}\n")).collect();
    let text = format!("X-1:\n  kind: {kind}\n  source: data sheet X-1 revision A\n  rows:\n{rows}");
    read(&text).unwrap_or_else(|errors| panic!("{errors}")).remove(0)
}

fn refused(part: &Part) -> String {
    let errors = fit::fit(part).unwrap_err();
    let lines = errors.0.iter().map(|d| format!("{}: {}", d.place.as_ref().unwrap(), d.message));
    lines.collect::<Vec<_>>().join("\n")
}

/// Voltage across the whole Zener at a reverse current, by halving.
fn zener_voltage(zener: &Diode, i_z: f64) -> f64 {
    let at = zener.at(298.15);
    let (mut low, mut high) = (0.0, 100.0);
    for _ in 0..90 {
        let middle = (low + high) / 2.0;
        if -at.current(-middle).0 < i_z { low = middle } else { high = middle }
    }
    low + i_z * at.parameters.series_resistance
}

#[test]
fn a_zener_keeps_v_z_and_r_z_with_its_series_resistance() {
    let forward = ["V_F: {typ: 0.72 V}, I_F: 1 mA", "V_F: {typ: 0.80 V, max: 0.95 V}, I_F: 10 mA"];
    let more = "V_F: {typ: 1.1 V}, I_F: 100 mA";
    let mut with_resistance = 0;
    for (rows, v_z, r_z, i_z) in [
        (vec![forward[0], forward[1]], 5.1, 30.0, 5e-3),
        (vec![forward[0], forward[1], more], 6.2, 10.0, 5e-3),
        (vec![forward[0], forward[1], more], 12.0, 6.0, 20e-3),
        (vec![forward[0], forward[1], more], 2.4, 90.0, 5e-3),
        (vec![], 5.1, 60.0, 5e-3),
    ] {
        let z = format!("V_Z: {{min: {} V, typ: {v_z} V, max: {} V}}, I_Z: {i_z} A", 0.9 * v_z, 1.1 * v_z);
        let r = format!("r_Z: {{typ: {r_z} Ω}}, I_Z: {i_z} A");
        let leak = ["I_R: {max: 2 µA}, V_R: 1 V", "I_R: {max: 50 µA}, V_R: 1 V, T_j: 150 °C"];
        let all: Vec<&str> = rows.into_iter().chain([z.as_str(), r.as_str()]).chain(leak).collect();
        let model = fit::fit(&one("zener", &all)).unwrap_or_else(|errors| panic!("{errors:#?}"));
        let Law::Diode(law) = model.law else { panic!() };
        with_resistance += usize::from(law.nominal.series_resistance > 0.1);
        let found = zener_voltage(&law.nominal, i_z);
        assert!((found - v_z).abs() < 1e-9, "{found} {v_z}");
        let step = 1e-4 * i_z;
        let slope = (zener_voltage(&law.nominal, i_z + step) - zener_voltage(&law.nominal, i_z - step))
            / (2.0 * step);
        assert!((slope / r_z - 1.0).abs() < 1e-6, "{slope} {r_z}, {:?}", law.nominal);
        for (end, limit) in [(-1.0, 0.9 * v_z), (1.0, 1.1 * v_z)] {
            let found = zener_voltage(&law.specimen(&[0.0, 0.0, end, 0.0]), i_z);
            assert!(end * (found - limit) >= 0.0 && (found - limit).abs() < 1e-6, "{found} {limit}");
        }
    }
    assert!(with_resistance >= 3);
    let odd = one("zener", &["V_Z: {typ: 5 V}, I_Z: 5 mA", "r_Z: {max: 1.2 kΩ}, I_Z: 5 mA"]);
    assert!(refused(&odd).contains("r_Z I_Z exceeds V_Z"), "{}", refused(&odd));
}

fn leakage(model: &Model) -> &Bound {
    &model.axes.iter().find(|axis| axis.name == "leakage").unwrap().high
}

#[test]
fn a_leakage_whose_growth_is_assumed_is_weakly_bound() {
    let gain = "h_FE: {min: 50, max: 200}, I_C: 10 mA, V_CE: 5 V";
    let drop = "V_F: {typ: 0.7 V}, I_F: 10 mA";
    for (kind, first, name) in [("npn", gain, "I_CBO"), ("diode", drop, "I_R")] {
        let bias = if kind == "npn" { "V_CB: 20 V" } else { "V_R: 20 V" };
        let row = |value: &str, t_j: &str, more: &str| {
            format!("{name}: {{max: {value}}}, {bias}, T_j: {t_j}{more}")
        };
        let of = |rows: &[String]| {
            let mut all = vec![first];
            all.extend(rows.iter().map(String::as_str));
            fit::fit(&one(kind, &all)).unwrap_or_else(|errors| panic!("{errors:#?}"))
        };
        let cool = row("10 nA", "25 °C", "");
        let hot = row("10 µA", "150 °C", "");
        assert!(matches!(leakage(&of(&[])), Bound::Absent { .. }));
        let model = of(std::slice::from_ref(&cool));
        let Bound::Weak { source } = leakage(&model) else { panic!("{model:?}") };
        assert!(source.origin == Origin::Assumption && source.text.contains("common practice"), "{source:?}");
        assert!(
            model.notes.iter().any(|note| note.contains("common practice") && note.contains("assumption"))
        );
        assert!(matches!(leakage(&of(std::slice::from_ref(&hot))), Bound::Weak { .. }));
        assert_eq!(leakage(&of(&[cool.clone(), hot.clone()])), &Bound::Sourced);
        // As much at 150 °C as at 25 °C says nothing of the growth.
        assert!(matches!(leakage(&of(&[cool.clone(), row("10 nA", "150 °C", "")])), Bound::Weak { .. }));
        // Any weak row that takes part makes the bound weak, whether or not it decides.
        for at in ["25 °C", "80 °C", "150 °C"] {
            let weak = row("1 nA", at, ", source: assumed for want of a row");
            let rows = match at {
                "25 °C" => vec![weak, hot.clone()],
                "80 °C" => vec![cool.clone(), weak, hot.clone()],
                _ => vec![cool.clone(), row("10 µA", at, ", source: from memory")],
            };
            let model = of(&rows);
            assert!(matches!(leakage(&model), Bound::Weak { .. }), "{at}: {model:?}");
        }
    }
}

#[test]
fn no_bound_of_the_demonstration_parts_is_weak() {
    for part in demo("transistors.yaml").into_iter().chain(demo("diodes.yaml")) {
        for axis in fit::fit(&part).unwrap().axes {
            let weak = |bound: &Bound| matches!(bound, Bound::Weak { .. });
            assert!(!weak(&axis.low) && !weak(&axis.high), "{}: {axis:?}", part.name);
        }
    }
}

#[test]
fn a_weak_gain_row_makes_its_side_weak_alone() {
    let part = one(
        "npn",
        &[
            "h_FE: {min: 100, typ: 180, max: 300}, I_C: 10 mA, V_CE: 5 V",
            "h_FE: {min: 60, typ: 150}, I_C: 100 mA, V_CE: 5 V, source: assumed",
        ],
    );
    let model = fit::fit(&part).unwrap();
    assert!(matches!(model.axes[0].low, Bound::Weak { .. }) && model.axes[0].high == Bound::Sourced);
}

#[test]
fn rows_that_contradict_each_other_in_one_test_condition_are_refused() {
    let first = "h_FE: {min: 100, max: 300}, I_C: 10 mA, V_CE: 5 V";
    for (later, expected) in [
        ("h_FE: {max: 90}, I_C: 10 mA, V_CE: 5 V", "its maximum lies below the minimum there"),
        ("h_FE: {min: 310}, I_C: 10 mA, V_CE: 5 V", "its minimum lies above the maximum there"),
        ("h_FE: {typ: 50}, I_C: 10 mA, V_CE: 5 V", "its typical value lies outside the limits there"),
    ] {
        let found = refused(&one("npn", &[first, later]));
        assert!(
            found.starts_with("parts/x.yaml:6:7: h_FE contradicts the row at parts/x.yaml:5:7"),
            "{found}"
        );
        assert!(found.ends_with(expected) && found.contains("I_C = 10"), "{found}");
    }
    let found = refused(&one("npn", &["h_FE: {typ: 50}, I_C: 10 mA, V_CE: 5 V", first]));
    assert!(found.ends_with("the typical value there lies outside its limits"), "{found}");
    let zener = ["V_Z: {min: 4.8 V, max: 5.4 V}, I_Z: 5 mA", "V_Z: {min: 5.5 V}, I_Z: 5 mA"];
    assert!(refused(&one("zener", &zener)).contains("contradicts"));
    // In another test condition the same numbers are no contradiction, nor are limits that add to each other.
    for later in ["h_FE: {max: 90}, I_C: 200 mA, V_CE: 5 V", "h_FE: {typ: 200}, I_C: 10 mA, V_CE: 5 V"] {
        assert!(fit::fit(&one("npn", &[first, later])).is_ok());
    }
}

#[test]
fn rows_that_no_specimen_can_keep_are_refused_at_their_place() {
    let gain = "h_FE: {min: 100, max: 300}, I_C: 10 mA, V_CE: 5 V";
    let part = one("npn", &[gain, "V_CE(sat): {min: 1 µV, max: 0.3 V}, I_C: 10 mA, I_B: 1 mA"]);
    let found = refused(&part);
    assert!(
        found.starts_with("parts/x.yaml:6:7: no specimen of the fitted model reaches the minimum"),
        "{found}"
    );
    // More collector current than this base current carries, also with the collector junction far reversed.
    for i_b in ["20 µA", "40 µA", "48 µA"] {
        let row = format!("V_CE(sat): {{max: 0.3 V}}, I_C: 10 mA, I_B: {i_b}");
        let found = refused(&one("npn", &[gain, &row]));
        assert!(
            found.starts_with("parts/x.yaml:6:7: the fitted model cannot reach this row's bias"),
            "{found}"
        );
    }
}

#[test]
fn limits_of_v_be_in_saturation_are_reached_on_both_sides() {
    let part = one(
        "npn",
        &[
            "h_FE: {min: 100, max: 300}, I_C: 10 mA, V_CE: 5 V",
            "V_BE: {min: 0.62 V, typ: 0.66 V, max: 0.72 V}, I_C: 10 mA, V_CE: 5 V",
            "V_BE(sat): {min: 0.60 V, typ: 0.8 V, max: 1.0 V}, I_C: 10 mA, I_B: 2 mA",
        ],
    );
    let model = fit::fit(&part).unwrap_or_else(|errors| panic!("{errors:#?}"));
    let [low, _, high] = model.residuals[2].model;
    assert!(low <= 0.60 && (1.0..1.001).contains(&high), "{:?}", model.residuals[2]);
}
