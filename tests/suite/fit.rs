//! Fits: the demonstration records reach every limit of their sheets on the unsafe side; contradictions are refused.

mod bias;
mod gain;
mod limits;
mod timing;

use qsheaf::fit::{self, Bound, Law};
use qsheaf::part::{self, Part};
use qsheaf::source::File;

fn demo(file: &str) -> Vec<Part> {
    let path = format!("{}/worksheets/parts/{file}", env!("CARGO_MANIFEST_DIR"));
    let file = File::new(&format!("parts/{file}"), std::fs::read(path).unwrap());
    part::read(&file).unwrap_or_else(|errors| panic!("{errors:#?}"))
}

fn read(text: &str) -> Result<Vec<Part>, String> {
    part::read(&File::new("parts/x.yaml", text.as_bytes().to_vec())).map_err(|errors| {
        errors
            .0
            .iter()
            .map(|d| format!("{}: {}", d.place.as_ref().unwrap(), d.message))
            .collect::<Vec<_>>()
            .join("\n")
    })
}

#[test]
fn corners_reach_every_limit_of_the_sheet_on_the_unsafe_side() {
    let mut rows = 0;
    for part in demo("transistors.yaml").into_iter().chain(demo("diodes.yaml")) {
        let model = fit::fit(&part).unwrap_or_else(|errors| panic!("{}: {errors:#?}", part.name));
        for residual in &model.residuals {
            rows += 1;
            let [low, nominal, high] = residual.model;
            println!(
                "{} {:?} {}: {:?} {:?} {:?} -> {:.4} {:.4} {:.4}",
                part.name,
                residual.quantity,
                residual.at,
                residual.min,
                residual.typ,
                residual.max,
                low,
                nominal,
                high
            );
            if let Some(min) = residual.min {
                assert!(
                    low <= min * (1.0 + 1e-12),
                    "{} {:?} {}: {low} > {min}",
                    part.name,
                    residual.quantity,
                    residual.at
                );
            }
            if let Some(max) = residual.max {
                assert!(
                    high >= max * (1.0 - 1e-12),
                    "{} {:?} {}: {high} < {max}",
                    part.name,
                    residual.quantity,
                    residual.at
                );
            }
            if let Some(typ) = residual.typ {
                let off = (nominal / typ - 1.0).abs();
                let allowed = match residual.quantity {
                    part::RowQuantity::CurrentGain => 0.15,
                    part::RowQuantity::CollectorEmitterSaturation => 0.6,
                    _ => 0.08,
                };
                assert!(
                    off < allowed,
                    "{} {:?} {}: {nominal} against {typ}",
                    part.name,
                    residual.quantity,
                    residual.at
                );
            }
        }
    }
    assert!(rows > 40);
}

#[test]
fn a_missing_row_leaves_its_side_open_and_names_the_row() {
    let part = demo("transistors.yaml").into_iter().find(|part| part.name == "LBN-150").unwrap();
    let model = fit::fit(&part).unwrap();
    let saturation = model.axes.iter().find(|axis| axis.name == "saturation").unwrap();
    let Bound::Absent { wanted } = &saturation.high else { panic!("{saturation:?}") };
    assert!(wanted.starts_with("V_CE(sat) max"), "{wanted}");
    assert!(matches!(&model.law, Law::Transistor(law) if law.saturation_cover.is_empty()));
}

#[test]
fn one_gain_and_one_voltage_fall_back_to_ebers_and_moll_and_say_so() {
    let parts = read(
        "X-1:\n  kind: npn\n  source: data sheet X-1 revision A\n  rows:\n    - {h_FE: {min: 50, max: 200}, I_C: 10 mA, V_CE: 5 V}\n    - {V_BE: {typ: 0.7 V}, I_C: 10 mA, V_CE: 5 V}\n",
    )
    .unwrap();
    let model = fit::fit(&parts[0]).unwrap();
    assert!(model.notes.iter().any(|note| note.contains("Ebers and Moll")));
    let Law::Transistor(law) = &model.law else { panic!() };
    assert!(law.nominal.knee_current_forward.is_infinite() && law.nominal.emitter_leakage == 0.0);
    assert!((law.nominal.gain_forward - 100.0).abs() < 5.0);
}

#[test]
fn impossible_records_are_refused_at_their_row() {
    let row =
        |row: &str| format!("X-1:\n  kind: npn\n  source: data sheet X-1 revision A\n  rows:\n    - {row}\n");
    for (text, expected) in [
        (
            row("{h_FE: {min: 300, max: 100}, I_C: 10 mA, V_CE: 5 V}"),
            "parts/x.yaml:5:14: h_FE: the minimum lies above the maximum",
        ),
        (
            row("{h_FE: {min: 100, typ: 50}, I_C: 10 mA, V_CE: 5 V}"),
            "parts/x.yaml:5:14: h_FE: the typical value lies outside the limits",
        ),
        (row("{h_FE: {min: 100}, I_C: 10 mA}"), "parts/x.yaml:5:7: a row of h_FE needs V_CE"),
        (row("{V_CE(sat): {max: 0.3 V}, I_C: 10 mA}"), "parts/x.yaml:5:7: a row of V_CE(sat) needs I_B"),
        (
            row("{h_FE: {min: 100}, I_C: 10 V, V_CE: 5 V}"),
            "parts/x.yaml:5:31: this is a value in V, not in A",
        ),
        (row("{hFE: {min: 100}, I_C: 10 mA, V_CE: 5 V}"), "parts/x.yaml:5:8: `hFE` is no quantity of a row"),
        ("X-1:\n  kind: nnp\n".to_owned(), "parts/x.yaml:2:9: `nnp` is no kind of part"),
        ("X-1:\n  kind: npn\n  row: []\n".to_owned(), "parts/x.yaml:3:3: unknown key `row`"),
    ] {
        let found = read(&text).unwrap_err();
        assert!(found.lines().any(|line| line.starts_with(expected)), "{text}\ngave {found}");
    }
    let contradiction = read(&row(
        "{h_FE: {min: 100, typ: 150}, I_C: 10 mA, V_CE: 5 V}\n    - {h_FE: {min: 4000}, I_C: 11 mA, V_CE: 5 V}\n    - {h_FE: {max: 4}, I_C: 12 mA, V_CE: 5 V}",
    ))
    .unwrap();
    let errors = fit::fit(&contradiction[0]).unwrap_err();
    assert!(errors.0[0].message.contains("contradict each other"), "{errors:?}");
}
