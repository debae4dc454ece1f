//! Run-away in a note: what is printed agrees with what a note at those values comes to.

use super::{PART, SHEET, run, verdict};
use qsheaf::study::{EquilibriumFinding, Findings, HeatFinding, Verdict};

/// A stage whose base is held at a voltage, with a ballast in its emitter: the classic way to run away.
fn held(ambient: &str, ballast: &str) -> Findings {
    let (head, _) = SHEET.split_once("The base gets").unwrap();
    let sheet = format!(
        "{head}
```basis
T_a: {ambient} [specification S-1 clause 2]
R_e: {ballast} [specification S-1 clause 3]
```

```circuit
PS1: {{supply: 10 V, plus: cc, source: drawing S-2}}
PS2: {{supply: 0.6 V, plus: b, source: drawing S-2}}
R1: {{resistor: 1 Ω ± 1 %, power: 5 W, from: cc, to: c, source: drawing S-2}}
R2: {{resistor: R_e, power: 5 W, from: e, to: ground}}
Q1: {{npn: X-1, collector: c, base: b, emitter: e}}
```

```acceptance
cool: Q1.T_j <= 150 °C over nominal
```
"
    );
    run(&sheet, PART).unwrap()
}

fn line(findings: &Findings) -> &HeatFinding {
    let [line] = &findings.heat[..] else { panic!("{} lines", findings.heat.len()) };
    line
}

fn equilibrium(findings: &Findings) -> EquilibriumFinding {
    line(findings).equilibrium.unwrap_or_else(|| panic!("{:?}", findings.heat))
}

#[test]
fn run_away_begins_where_the_note_says() {
    // Nothing else varies much: the corner's limit is near that of a note at a single ambient temperature.
    let found = held("-15 to -10 °C", "1 Ω");
    let from = line(&found).runaway_from.expect("it runs away somewhere") - 273.15;
    assert!(equilibrium(&found).gain < 1.0 && from > -10.0, "{:?}", found.heat);
    let at = |ambient: f64| held(&format!("{ambient:.3} to {:.3} °C", ambient + 0.2), "1 Ω");
    let below = at(from - 1.0);
    assert!(equilibrium(&below).gain > 0.5 && equilibrium(&below).gain < 1.0, "{:?}", below.heat);
    let above = at(from + 1.0);
    assert_eq!(line(&above).equilibrium, None, "{:?}", above.heat);
    // Seen from above, it is the same temperature.
    let again = line(&above).runaway_from.unwrap() - 273.15;
    assert!((again - from).abs() < 1.0, "{again} and {from}");
    let t_j = above.stress.iter().find(|line| line.designator == "Q1" && line.verdict == "not-shown");
    assert!(t_j.is_some_and(|line| line.reason.as_ref().is_some_and(|why| why.contains("equilibrium"))));
}

#[test]
fn the_ballast_keeps_what_it_promises() {
    let bare = held("15 to 16 °C", "0.1 Ω");
    let heat = line(&bare);
    let more = heat.ballast.expect("a ballast") + 0.1;
    let helped = held("15 to 16 °C", &format!("{more:.6} Ω"));
    let gain = equilibrium(&helped).gain;
    assert!((gain - 0.5).abs() < 0.02, "{gain} with {more}");
    // Less is not enough.
    let less = held("15 to 16 °C", &format!("{:.6} Ω", 0.5 * more));
    assert!(line(&less).equilibrium.is_none_or(|found| found.gain > 0.51), "{:?}", less.heat);
}

#[test]
fn a_stage_whose_current_is_held_does_not_run_away() {
    let found = run(SHEET, PART).unwrap();
    assert!(!found.heat.is_empty());
    for heat in &found.heat {
        assert!(heat.equilibrium.is_some_and(|found| found.gain < 0.1), "{heat:?}");
        assert_eq!((heat.runaway_from, heat.ballast), (None, None));
    }
    assert_eq!(verdict(&found, "saturated"), Verdict::Met);
}
