//! Studies of small notes: what is refused and where, and what each verdict rests on.

mod heat;
mod odds;

use qsheaf::source::{Bundle, File};
use qsheaf::study::{Findings, Verdict, study};

const SHEET: &str = "---
note: T-1
title: A stage
author: N. Example
revision: A
date: 2026-11-20
---

The base gets {{ I_B | unit(\"mA\", 3) }}.

```basis
V_cc: 10 V ± 5 % [supply sheet revision 1 page 1]
V_in: 5 V ± 2 % [logic sheet revision 1 page 1]
T_a: 0 to 50 °C, usually 25 °C [specification S-1 clause 2]
```

```conditions
on: {normal: yes}
off: {normal: yes, V_in: 0 to 0.3 V}
```

```circuit
PS1: {supply: V_cc, plus: cc}
PS2: {supply: V_in, plus: in}
R1: {resistor: 1 kΩ ± 1 %, power: 0.5 W, from: cc, to: c, source: drawing S-2}
R2: {resistor: 10 kΩ ± 1 %, power: 0.25 W, from: in, to: b, source: drawing S-2}
Q1: {npn: X-1, collector: c, base: b, emitter: ground}
```

```derivation
base current: I_B = (V_in - Q1.V_BE) / R2 in on
collector current: I_C = (V_cc - Q1.V_CE) / R1 in on
gain: k = I_C / I_B in on
```

```acceptance
saturated: Q1 saturated in on
low: c.V <= 0.4 V in on
dark: R1.I <= 10 µA in off
```
";

const PART: &str = "X-1:
  kind: npn
  about: test transistor
  source: data sheet X-1 revision A
  rows:
    - {h_FE: {min: 100, typ: 200, max: 400}, I_C: 10 mA, V_CE: 5 V}
    - {V_BE: {min: 0.6 V, typ: 0.67 V, max: 0.75 V}, I_C: 10 mA, V_CE: 5 V}
    - {V_CE(sat): {typ: 0.1 V, max: 0.25 V}, I_C: 20 mA, I_B: 0.5 mA}
    - {I_CBO: {max: 20 nA}, V_CB: 20 V}
    - {I_CBO: {max: 8 µA}, V_CB: 20 V, T_j: 125 °C}
  ratings: {V_CEO: 40 V, V_CBO: 40 V, V_EBO: 5 V, I_C: 100 mA, I_B: 20 mA, P_tot: 300 mW, T_j: 150 °C, R_th(j-a): 350 K/W}
";

fn run(sheet: &str, part: &str) -> Result<Findings, String> {
    let mut bundle = Bundle::default();
    for (path, text) in
        [("notebook.yaml", "organisation: Test\n"), ("sheet.md", sheet), ("parts/x.yaml", part)]
    {
        bundle.insert(File::new(path, text.as_bytes().to_vec()));
    }
    study(&bundle, "sheet.md").map_err(|errors| {
        let line = |d: &qsheaf::diagnostic::Diagnostic| {
            let place =
                d.place.as_ref().map_or(String::new(), |p| format!("{}:{}:{}: ", p.file, p.line, p.column));
            let near = d.nearest.as_ref().map_or(String::new(), |near| format!(" ({near}?)"));
            format!("{place}{}{near}", d.message)
        };
        errors.0.iter().map(line).collect::<Vec<_>>().join("\n")
    })
}

fn verdict(findings: &Findings, label: &str) -> Verdict {
    findings.criteria.iter().find(|criterion| criterion.label == label).unwrap().verdict.clone()
}

#[track_caller]
fn with(from: &str, to: &str) -> String {
    assert!(SHEET.contains(from), "{from}");
    SHEET.replacen(from, to, 1)
}

#[test]
fn a_sound_note_is_met() {
    let found = run(SHEET, PART).unwrap();
    for label in ["saturated", "low", "dark"] {
        assert_eq!(verdict(&found, label), Verdict::Met, "{label}");
    }
    let low = found.criteria.iter().find(|c| c.label == "low").unwrap();
    // No less than the row of V_CE(sat) where it covers: 10 mA at a forced gain of about 25.
    let worst = low.worst.value.value().unwrap();
    assert!((0.13..0.3).contains(&worst), "{worst}");
    assert!(low.worst.corner.levels.iter().any(|(name, level)| name == "Q1 saturation" && level == "high"));
}

#[test]
fn verdicts_say_what_they_rest_on() {
    let assumed =
        run(&with("[supply sheet revision 1 page 1]", "[assumed, like the old one]"), PART).unwrap();
    assert_eq!(verdict(&assumed, "saturated"), Verdict::MetOnAssumptions { count: 1 });
    let unsourced = run(&with(" [supply sheet revision 1 page 1]", ""), PART).unwrap();
    assert_eq!(verdict(&unsourced, "saturated"), Verdict::MetOnAssumptions { count: 1 });

    let no_row = PART.lines().filter(|line| !line.contains("V_CE(sat)")).collect::<Vec<_>>().join("\n");
    let Verdict::NotShown { reason } = verdict(&run(SHEET, &no_row).unwrap(), "low") else { panic!() };
    assert!(reason.contains("V_CE(sat) max"), "{reason}");

    let no_leakage = PART.lines().filter(|line| !line.contains("I_CBO")).collect::<Vec<_>>().join("\n");
    let Verdict::NotShown { reason } = verdict(&run(SHEET, &no_leakage).unwrap(), "dark") else { panic!() };
    assert!(reason.contains("I_CBO max"), "{reason}");

    // One temperature of I_CBO: its growth is an assumption.
    let one_row = PART.lines().filter(|line| !line.contains("125 °C")).collect::<Vec<_>>().join("\n");
    assert_eq!(verdict(&run(SHEET, &one_row).unwrap(), "dark"), Verdict::MetOnAssumptions { count: 1 });

    // More current than the row covers.
    let beyond = run(&with("resistor: 1 kΩ ± 1 %", "resistor: 220 Ω ± 1 %"), PART).unwrap();
    assert!(matches!(verdict(&beyond, "low"), Verdict::NotShown { .. } | Verdict::NotMet));

    let typical = PART.replace("{min: 100, typ: 200, max: 400}", "{typ: 200}");
    let weak = run(&with("resistor: 10 kΩ ± 1 %", "resistor: 47 kΩ ± 1 %"), &typical).unwrap();
    let Verdict::NotShown { reason } = verdict(&weak, "saturated") else {
        panic!("{:?}", verdict(&weak, "saturated"))
    };
    assert!(reason.contains("h_FE min"), "{reason}");

    let violated = run(&with("resistor: 10 kΩ ± 1 %", "resistor: 82 kΩ ± 1 %"), PART).unwrap();
    assert_eq!(verdict(&violated, "saturated"), Verdict::NotMet);

    let touching = run(&with("low: c.V <= 0.4 V in on", "low: V_cc <= 10.5 V"), PART).unwrap();
    let Verdict::NotShown { reason } = verdict(&touching, "low") else { panic!() };
    assert!(reason.contains("numerical error"), "{reason}");
}

#[test]
fn a_missing_rating_is_not_shown_and_names_what_to_get() {
    let part = PART.replace("V_EBO: 5 V, ", "");
    let found = run(SHEET, &part).unwrap();
    let line = found
        .stress
        .iter()
        .find(|line| line.quantity == qsheaf::part::RatingQuantity::EmitterBase)
        .expect("a line for the missing rating");
    assert_eq!(line.verdict, "not-shown");
    assert!(line.reason.as_ref().unwrap().contains("V_EBO"), "{:?}", line.reason);
}

#[test]
fn mistakes_are_told_with_file_line_column_and_nearest_spelling() {
    for (from, to, expected) in [
        ("{{ I_B |", "{{ I_Bx |", "sheet.md:9:18: unknown name `I_Bx` (I_B?)"),
        ("\"mA\", 3", "\"mV\", 3", "sheet.md:9:15: the value is in A, not in mV"),
        ("Q1.V_BE) / R2", "Q1.V_BB) / R2", "sheet.md:31:29: unknown name `Q1.V_BB` (Q1.V_BC?)"),
        (
            "(V_cc - Q1.V_CE) / R1",
            "(V_cc - R1) / R1",
            "the two sides of `-` do not fit: V on the left, Ω on the right",
        ),
        ("k = I_C / I_B", "k = I_C / k", "`k` is defined by itself"),
        ("npn: X-1", "npn: X-2", "X-2"),
        (
            "c.V <= 0.4 V",
            "c.V <= 0.4 A",
            "the two sides of the comparison do not fit: V on the left, A on the right",
        ),
        ("low: c.V <= 0.4 V in on", "low: c.V <= 0.4 V in onn", "onn"),
        ("saturated: Q1 saturated", "saturated: Q9 saturated", "`Q9` is no transistor of the circuit (Q1?)"),
        ("```circuit", "```circiut", "circiut"),
        ("10 V ± 5 %", "10 Volt ± 5 %", "Volt"),
        ("to: b, source", "to: bb, source", "bb"),
        ("10 kΩ ± 1 %", "10 kV ± 1 %", "sheet.md:26:16: `10 kV ± 1 %`: the unit does not fit"),
        ("on: {normal: yes}", "on: {normal: yes, V_ix: 3 V}", "V_ix"),
        ("note: T-1", "note: T-1\nnotte: 2", "notte"),
    ] {
        let found = run(&with(from, to), PART).err().unwrap_or_else(|| panic!("{to} was taken"));
        assert!(found.contains(expected) && found.contains("sheet.md:"), "{to}:\n{found}");
    }
}

#[test]
fn every_mistake_of_a_note_is_told_at_once() {
    let sheet = with("c.V <= 0.4 V", "c.V <= 0.4 A")
        .replace("{{ I_B |", "{{ I_Bx |")
        .replace("R1.I <= 10", "R1.J <= 10");
    let found = run(&sheet, PART).unwrap_err();
    assert_eq!(found.lines().count(), 3, "{found}");
}

#[test]
fn a_derating_circuit_has_its_extreme_inside_the_gain_range() {
    // Collector load of 1 kΩ at a base current that leaves the transistor active: its dissipation peaks at V²/(4R), inside
    // the range of the gain.
    let sheet = with("saturated: Q1 saturated in on\nlow: c.V <= 0.4 V in on", "cool: Q1.P <= 100 mW in on")
        .replace("resistor: 10 kΩ ± 1 %", "resistor: 180 kΩ ± 1 %");
    let found = run(&sheet, PART).unwrap();
    let cool = &found.criteria[0];
    let worst = cool.worst.value.value().unwrap();
    let v = 10.5;
    assert!((worst / (v * v / (4.0 * 990.0)) - 1.0).abs() < 2e-2, "{worst}");
    assert!(
        cool.flags.iter().any(|flag| flag.contains("inside the range of") && flag.contains("Q1")),
        "{:?}",
        cool.flags
    );
}

#[test]
fn a_rating_met_on_assumptions_is_told_as_such_and_not_as_not_shown() {
    let sheet = with("[supply sheet revision 1 page 1]", "[assumed, like the old one]");
    let found = run(&sheet, PART).unwrap();
    let assumed = found.stress.iter().filter(|line| line.verdict == "met-on-assumptions").count();
    assert!(assumed > 0);
    let issue = qsheaf::report::Issue {
        number: 1,
        date: found.note.date.clone(),
        status: qsheaf::report::Status::Issued,
        program: String::new(),
    };
    let sources = qsheaf::report::source(&found, &issue, None, &Bundle::default()).unwrap();
    let page: serde_json::Value = serde_json::from_slice(&sources.files["page.json"]).unwrap();
    assert_eq!(page["counts"]["stress"]["assumed"], assumed);
    assert_eq!(page["counts"]["stress"]["not_shown"], 0);
}
