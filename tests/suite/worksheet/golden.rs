//! One whole worksheet, as an author would write it.

use qsheaf::diagnostic::Severity;
use qsheaf::markup::{Flow, Inline};
use qsheaf::quantity::{Kind, Origin};
use qsheaf::worksheet::{
    self, CriterionKind, DerivationKind, ElementState, FigureKind, Over, Piece, Region, Span, Worksheet,
};

use super::whole;

pub const LAMP: &str = r#"---
note: HB-007
title: Lamp switch of the lantern
author: A. Keeper
checker:
revision: B
date: 2026-02-28
clauses:
  LB-1 3.4: the lamp driver saturates
  LB-1 3.6: no junction above 125 °C
revisions:
  - {revision: A, date: 2025-12-31, change: first issue}
---
# Lamp switch

The lantern is driven from a logic output[^logic]. See $V_{CE} = V_{bat} - I_C R_L$.

```basis
V_bat:   10.8 to 14.8 V, usually 12.6 V      [battery sheet rev 3 p. 4]
V_drive: 4.6 V ± 0.2 V -- logic output, high [measured 2026-10-02]
T_a:     -20 to 50 °C, usually 25 °C         [LB-1 3.6]
beta: {value: 90, source: assumed, about: "least gain, any lot"}
```

```circuit
BT1: {supply: V_bat, plus: bat}
PS1: {supply: V_drive, plus: drive}
DS1: {filament: 12 V 1.2 W, cold: 14 Ω ± 20 %, from: bat, to: lamp}
R1:  {resistor: 470 Ω ± 5 %, from: drive, to: base}
Q1:  {npn: LBN-250, collector: lamp, base: base, emitter: ground}
```

```conditions
on:     {normal: yes}
off:    {normal: yes, V_drive: 0 to 0.4 V}
inrush: {normal: yes, DS1: cold, lasts: 80 ms}
short:  {normal: no, DS1: shorted}
```

## Derivation

```derivation
base current:       I_B = (V_drive - Q1.V_BE) / R1
collector current:  I_C = (V_bat - Q1.V_CE)
                          / DS1.R in on

forced gain:        k   = I_C / I_B
enough:             I_B > 3 * I_C / beta
```

```acceptance
saturated:  Q1 saturated          over extremes in on, inrush  [LB-1 3.4]
cool:       Q1.T_j <= 125 °C      over nominal safety          [LB-1 3.6]
dark:       DS1.I <= 1 mA         in off
```

The base gets {{ I_B | unit("mA", 3) }}; Q1 is {{ "saturated" if met("saturated") else "NOT saturated" }}.
With the output low the lamp takes {{ max(at("off", DS1.I)) | unit("mA", 2) }}, worst {{ worst("dark") }}.

```figure
plot: [Q1.V_CE, lamp.V]
against: V_drive
over: 0 to 5 V
corners: yes
in: on
title: Transfer
```

```figure
plot: output characteristics of Q1
```

[^logic]: At {{ V_drive }}.
"#;

fn lamp() -> Worksheet {
    match whole(LAMP) {
        Ok((worksheet, warnings)) => {
            assert!(warnings.0.is_empty(), "{warnings:#?}");
            worksheet
        }
        Err(found) => panic!("{found:#?}"),
    }
}

#[test]
fn the_head_is_read() {
    let head = lamp().head;
    assert_eq!(head.note.value, "HB-007");
    assert_eq!(head.title.value, "Lamp switch of the lantern");
    assert!(head.checker.is_none() && head.approver.is_none());
    assert_eq!(head.date.value, "2026-02-28");
    assert_eq!(head.clauses[1].0.value, "LB-1 3.6");
    assert_eq!(head.clauses[1].1, "no junction above 125 °C");
    assert_eq!(head.revisions, [["A", "2025-12-31", "first issue"].map(String::from)]);
    assert_eq!((head.title.place.line, head.title.place.column), (3, 8));
}

#[test]
fn the_basis_has_values_sources_and_places() {
    let basis = lamp().basis;
    let names: Vec<&str> = basis.iter().map(|entry| entry.name.value.as_str()).collect();
    assert_eq!(names, ["V_bat", "V_drive", "T_a", "beta"]);
    let drive = &basis[1];
    assert_eq!(drive.description.as_deref(), Some("logic output, high"));
    assert_eq!(drive.sourced.source.as_ref().map(|source| source.origin), Some(Origin::Measurement));
    assert_eq!((drive.sourced.place.line, drive.sourced.place.column), (20, 10));
    assert!((drive.sourced.quantity.spread.low - 4.4).abs() < 1e-12);
    assert_eq!(basis[0].sourced.source.as_ref().map(|source| source.origin), Some(Origin::DataSheet));
    assert_eq!(basis[2].sourced.source.as_ref().map(|source| source.origin), Some(Origin::Specification));
    assert_eq!(basis[2].sourced.quantity.kind, Kind::TEMPERATURE);
    assert_eq!(basis[3].sourced.source.as_ref().map(|source| source.origin), Some(Origin::Assumption));
    assert_eq!(basis[3].description.as_deref(), Some("least gain, any lot"));
}

#[test]
fn conditions_override_and_set_states() {
    let conditions = lamp().conditions;
    assert_eq!(conditions.len(), 4);
    assert!(conditions[0].normal && !conditions[3].normal);
    assert_eq!(conditions[1].overrides[0].0.value, "V_drive");
    assert!((conditions[1].overrides[0].1.spread.high - 0.4).abs() < 1e-12);
    assert_eq!(conditions[2].states[0].1.value, ElementState::Cold);
    assert!((conditions[2].lasts.as_ref().unwrap().spread.nominal - 0.08).abs() < 1e-12);
    assert_eq!(conditions[3].states[0].1.value, ElementState::Shorted);
}

#[test]
fn derivation_lines_define_and_assert() {
    let lines = lamp().derivation;
    assert_eq!(lines.len(), 4);
    let DerivationKind::Define { name, formula } = &lines[1].what else { panic!() };
    assert_eq!(name.value, "I_C");
    assert_eq!(formula.text, "(V_bat - Q1.V_CE) / DS1.R");
    assert_eq!(lines[1].condition.as_ref().map(|c| c.value.as_str()), Some("on"));
    // The divisor stands on the continuation line, and its place says so.
    let qsheaf::formula::Expr::Binary { right, .. } = &formula.expr else { panic!() };
    let qsheaf::formula::Expr::Name { name, place } = right.as_ref() else { panic!() };
    assert_eq!((name.as_str(), place.line, place.column), ("DS1.R", 45, 29));
    let DerivationKind::Assert { text, .. } = &lines[3].what else { panic!() };
    assert_eq!(text, "I_B > 3 * I_C / beta");
    assert_eq!(lines[3].label, "enough");
}

#[test]
fn criteria_carry_region_limit_conditions_and_clause() {
    let lines = lamp().acceptance;
    let CriterionKind::State { designator, region } = &lines[0].what else { panic!() };
    assert_eq!((designator.value.as_str(), *region), ("Q1", Region::Saturated));
    let conditions: Vec<&str> = lines[0].conditions.iter().map(|c| c.value.as_str()).collect();
    assert_eq!(conditions, ["on", "inrush"]);
    assert_eq!(lines[0].clause.as_ref().map(|c| c.value.as_str()), Some("LB-1 3.4"));
    assert!(lines[1].safety && lines[1].over == Over::Nominal);
    assert_eq!(lines[1].text, "Q1.T_j <= 125 °C");
    assert!(lines[2].clause.is_none() && lines[2].over == Over::Extremes);
}

#[test]
fn a_coverage_carries_its_share_samples_and_reason() {
    let read = |tail: &str| {
        let block = format!("```acceptance\na: T_a <= 50 °C {tail}\n```\n");
        let sheet = super::body(&block);
        sheet.unwrap().0.acceptance.remove(0)
    };
    let line = read("over coverage 99.7 % because \"trimmed in test [7] over night\" safety [LB-1 3.6]");
    let coverage = line.coverage.unwrap();
    assert!(
        (coverage.share - 0.997).abs() < 1e-12 && coverage.text == "99.7 %" && coverage.samples.is_none()
    );
    assert_eq!(coverage.because, "trimmed in test [7] over night");
    assert!(line.safety && line.over == Over::Extremes);
    assert_eq!(line.clause.map(|clause| clause.value).as_deref(), Some("LB-1 3.6"));
    assert_eq!(line.text, "T_a <= 50 °C");
    let line = read("safety over coverage 95% from 20000 samples because “sorted”");
    let coverage = line.coverage.unwrap();
    assert!(coverage.samples == Some(20_000) && coverage.because == "sorted" && coverage.text == "95%");
    assert!(read("over extremes").coverage.is_none());
}

#[test]
fn figures_and_recalls_are_found() {
    let worksheet = lamp();
    let FigureKind::Sweep { plot, against, corners, .. } = &worksheet.figures[0].kind else { panic!() };
    assert_eq!((plot.len(), against.value.as_str(), *corners), (2, "V_drive", true));
    let FigureKind::OutputCharacteristics { designator, .. } = &worksheet.figures[1].kind else { panic!() };
    assert_eq!(designator.value, "Q1");
    let names: Vec<&str> =
        worksheet.recalls.iter().flat_map(|recall| &recall.names).map(|name| name.value.as_str()).collect();
    assert_eq!(names, ["V_drive", "I_B", "DS1.I"]);
    let parts: Vec<&str> = worksheet.parts_used().iter().map(|part| part.value.as_str()).collect();
    assert_eq!(parts, ["LBN-250"]);
}

#[test]
fn blocks_keep_their_order_in_the_body() {
    let placed: Vec<(String, usize)> = lamp()
        .body
        .iter()
        .filter_map(|piece| match piece {
            Piece::Placed { word, index } => Some((word.clone(), *index)),
            _ => None,
        })
        .collect();
    let expected = [
        ("basis", 0),
        ("circuit", 0),
        ("conditions", 0),
        ("derivation", 0),
        ("acceptance", 0),
        ("figure", 0),
        ("figure", 1),
    ];
    assert_eq!(placed, expected.map(|(word, index)| (word.to_owned(), index)));
}

#[test]
fn a_footnote_stands_where_it_is_referred_to() {
    let worksheet = lamp();
    let Piece::Paragraph { content } = &worksheet.body[1] else { panic!() };
    let found = content.iter().any(|span| {
        matches!(span, Span::Footnote(pieces)
            if matches!(pieces.as_slice(), [Piece::Paragraph { content }]
                if matches!(content.as_slice(), [Span::Text(_), Span::Recall(0), Span::Text(_)])))
    });
    assert!(found, "{content:#?}");
}

#[test]
fn the_flow_has_recalls_filled_in() {
    let worksheet = lamp();
    let flow = worksheet::flow(&worksheet.body, &|index| vec![Inline::Text { text: format!("#{index}") }]);
    assert_eq!(flow.len(), worksheet.body.len());
    let texts: Vec<String> = flow
        .iter()
        .filter_map(|flow| match flow {
            Flow::Paragraph { content } => Some(content),
            _ => None,
        })
        .flatten()
        .filter_map(|inline| match inline {
            Inline::Text { text } => Some(text.clone()),
            _ => None,
        })
        .collect();
    let all = texts.concat();
    assert!(all.contains("The base gets #1; Q1 is #2."), "{all}");
}

#[test]
fn windows_line_ends_and_a_byte_order_mark_change_nothing() {
    let text = format!("\u{feff}{}", LAMP.replace('\n', "\r\n"));
    let (worksheet, warnings) = whole(&text).unwrap_or_else(|found| panic!("{found:#?}"));
    assert!(!warnings.0.iter().any(|d| d.severity == Severity::Error));
    assert_eq!(worksheet.derivation.len(), 4);
    assert_eq!(worksheet.basis.len(), 4);
    let place = &worksheet.basis[1].sourced.place;
    assert_eq!((place.line, place.column), (20, 10));
}
