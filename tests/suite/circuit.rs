//! Circuits: records to a network, every rule of connection with its place, and the symbols offered.

use std::collections::BTreeMap;

use qsheaf::circuit::{self, Built, ElementKind};
use qsheaf::diagnostic::{Diagnostics, Severity};
use qsheaf::formula::Expr;
use qsheaf::part::PartKind;
use qsheaf::quantity::{Dimension, Kind, Origin};
use qsheaf::source::File;
use qsheaf::worksheet;

const HEAD: &str =
    "---\nnote: HB-007\ntitle: Lamp switch\nauthor: A. Keeper\nrevision: A\ndate: 2026-11-30\n---\n";

/// Builds the circuit of a block whose first element stands on line 9.
fn build(elements: &str) -> Result<Built, Diagnostics> {
    let text = format!("{HEAD}```circuit\n{elements}```\n");
    let (worksheet, _) = worksheet::read(&File::new("a.md", text.into_bytes()))?;
    let basis: BTreeMap<String, Kind> = [
        ("V_bat", Kind::of(Dimension::VOLT)),
        ("R_b", Kind::of(Dimension::OHM)),
        ("R7", Kind::of(Dimension::OHM)),
        ("T_a", Kind::TEMPERATURE),
    ]
    .map(|(name, kind)| (name.to_owned(), kind))
    .into();
    let parts: BTreeMap<String, PartKind> = [
        ("LBN-250", PartKind::Npn),
        ("LBP-120", PartKind::Pnp),
        ("LBD-1", PartKind::Diode),
        ("LBZ-62", PartKind::Zener),
        ("LBR-25", PartKind::Resistor),
        ("LBL-12", PartKind::Filament),
        ("LBK-12", PartKind::Coil),
    ]
    .map(|(name, kind)| (name.to_owned(), kind))
    .into();
    circuit::build(&worksheet.circuit, &basis, &parts)
}

fn errors(elements: &str) -> Vec<String> {
    match build(elements) {
        Ok(_) => Vec::new(),
        Err(found) => found
            .0
            .iter()
            .filter(|diagnostic| diagnostic.severity == Severity::Error)
            .map(|diagnostic| match &diagnostic.place {
                Some(place) => format!("{}:{} {}", place.line, place.column, diagnostic.message),
                None => diagnostic.message.clone(),
            })
            .collect(),
    }
}

fn built(elements: &str) -> Built {
    build(elements).unwrap_or_else(|found| panic!("{found:#?}"))
}

const LAMP: &str = "BT1: {supply: V_bat, plus: bat}\n\
    PS1: {supply: 4.6 V ± 0.2 V, plus: drive, source: measured 2026-10-02}\n\
    DS1: {filament: 12 V 1.2 W ± 5 %, cold: 14 Ω ± 20 %, from: bat, to: lamp}\n\
    R1: {resistor: 470 Ω ± 5 %, from: drive, to: base, power: 0.25 W, tcr: 100 ppm/K, about: base resistor}\n\
    Q1: {npn: LBN-250, collector: lamp, base: base, emitter: ground, r_th: 200 K/W}\n";

#[test]
fn a_lamp_switch_becomes_a_network() {
    let built = built(LAMP);
    let network = &built.network;
    assert_eq!(network.nodes, ["ground", "bat", "drive", "lamp", "base"]);
    let kinds: Vec<ElementKind> = network.elements.iter().map(|element| element.kind).collect();
    use ElementKind::*;
    assert_eq!(kinds, [Supply, Supply, Filament, Resistor, Npn]);
    assert_eq!(network.elements[0].terminals, [1, 0]);
    assert_eq!(network.elements[4].terminals, [3, 4, 0]);
    assert_eq!(network.elements[4].part.as_deref(), Some("LBN-250"));
    assert_eq!(network.elements[0].value.as_ref().map(|value| value.text.as_str()), Some("V_bat"));
    assert!(built.warnings.0.is_empty(), "{:#?}", built.warnings);

    let symbols: Vec<&str> = built.inputs.iter().map(|input| input.symbol.as_str()).collect();
    assert_eq!(symbols, ["PS1", "DS1", "DS1.R_cold", "R1", "R1.TCR", "Q1.R_th"]);
    let source = built.inputs[0].sourced.source.as_ref().unwrap();
    assert_eq!(source.origin, Origin::Measurement);
    assert_eq!(built.inputs[3].description.as_deref(), Some("base resistor"));
    assert!(built.inputs[3].sourced.source.is_none());
    // 12 V and 1.2 W are 120 Ω; 5 % more power is 120 Ω / 1.05.
    let lamp = &built.inputs[1].sourced.quantity;
    assert!((lamp.spread.nominal - 120.0).abs() < 1e-9);
    assert!((lamp.spread.low - 120.0 / 1.05).abs() < 1e-9 && (lamp.spread.high - 120.0 / 0.95).abs() < 1e-9);
    let voltage = network.elements[2].rated_voltage.as_ref().map(|formula| &formula.expr);
    assert!(matches!(voltage, Some(Expr::Literal { value, .. }) if *value == 12.0));
    let power = network.elements[3].rated_power.as_ref().map(|formula| &formula.expr);
    assert!(matches!(power, Some(Expr::Literal { value, .. }) if *value == 0.25));
}

#[test]
fn values_come_from_formulas_parts_and_the_basis_under_the_same_name() {
    let built = built(
        "BT1: {supply: V_bat, plus: a}\nR1: {resistor: R_b / 2, from: a, to: b}\nR7: {resistor: R7, from: b, to: ground}\n\
         DS1: {filament: LBL-12, from: a, to: ground}\nK1: {coil: 320 Ω, part: LBK-12, from: a, to: ground}\n",
    );
    let parts: Vec<Option<&str>> =
        built.network.elements.iter().map(|element| element.part.as_deref()).collect();
    assert_eq!(parts, [None, None, None, Some("LBL-12"), Some("LBK-12")]);
    assert!(built.network.elements[3].value.is_none());
    let symbols: Vec<&str> = built.inputs.iter().map(|input| input.symbol.as_str()).collect();
    assert_eq!(symbols, ["K1"]);
}

#[test]
fn codes_of_iec_60062_are_read_by_where_they_stand() {
    let built = built(
        "BT1: {supply: V_bat, plus: a}\nR1: {resistor: 4k7 ± 1 %, from: a, to: b}\n\
         C1: {capacitor: 4n7, from: b, to: ground}\nR2: {resistor: 2R2, from: b, to: ground}\n",
    );
    let values: Vec<f64> = built.inputs.iter().map(|input| input.sourced.quantity.spread.nominal).collect();
    for (value, wanted) in values.iter().zip([4.7e3, 4.7e-9, 2.2]) {
        assert!((value / wanted - 1.0).abs() < 1e-12, "{values:?}");
    }
    assert!((built.inputs[0].sourced.quantity.spread.high - 4747.0).abs() < 1e-9);
    assert_eq!(built.inputs[0].sourced.quantity.kind, Kind::of(Dimension::OHM));
    assert_eq!(built.inputs[1].sourced.quantity.kind, Kind::of(Dimension::FARAD));
}

/// A supply and a resistor that make the rest of a test's circuit whole; two lines.
fn with_supply(elements: &str) -> String {
    format!("BT1: {{supply: V_bat, plus: a}}\nR1: {{resistor: 1 kΩ, from: a, to: ground}}\n{elements}")
}

#[test]
fn records_that_are_wrong_are_placed() {
    for (element, expected) in [
        ("R2: {resitor: 1 kΩ, from: a, to: ground}\n", "11:6 `R2` does not say what it is"),
        ("R2: {from: a, to: ground}\n", "11:1 `R2` does not say what it is"),
        ("R2: {resistor: 1 kΩ, coil: 1 kΩ, from: a, to: ground}\n", "11:22 `R2` is two things at once"),
        ("R2: {resistor: 1 kΩ, form: a, to: ground}\n", "11:22 a resistor has no `form`"),
        ("R2: {resistor: 1 kΩ, to: ground}\n", "11:1 `from` of `R2` is not connected"),
        ("R2: {resistor: 1 kΩ, from: a, to: gnd}\n", "11:35 `gnd` is not the reference node"),
        ("R2: {resistor: 1 kΩ, from: a, to: 0}\n", "11:35 `0` is not the reference node"),
        ("R2: {resistor: 1 kΩ, from: 1a, to: ground}\n", "11:28 `1a` cannot name a node"),
        ("R2: {resistor: 1 kΩ, from: a, to: a}\n", "11:1 all terminals of `R2` are on the same node"),
        ("R2: {resistor: , from: a, to: ground}\n", "11:14 the value is missing"),
        ("R2: {resistor: 1 V, from: a, to: ground}\n", "11:16 `1 V`: the unit does not fit"),
        ("R2: {resistor: 470, from: a, to: ground}\n", "11:16 `470`: it has no unit"),
        ("R2: {resistor: V_bat, from: a, to: ground}\n", "11:16 `V_bat` comes to V"),
        ("R2: {resistor: R_c, from: a, to: ground}\n", "11:16 `R_c` is not in the design basis"),
        ("R2: {resistor: -1 to 5 Ω, from: a, to: ground}\n", "11:16 `-1 to 5 Ω` is negative"),
        ("C1: {capacitor: 0 µF, from: a, to: ground}\n", "11:17 `0 µF` reaches zero"),
        (
            "R2: {resistor: 1 kΩ, power: 1 W ± 5 %, from: a, to: ground}\n",
            "11:29 a rating is one number, without a tolerance",
        ),
        ("R2: {resistor: 1 kΩ, power: 1 V, from: a, to: ground}\n", "11:29 `1 V`: the unit does not fit"),
        ("DS1: {filament: 12 V 5 Ω, from: a, to: ground}\n", "11:22 `5 Ω` does not rate a filament"),
        ("D1: {diode: LBD-2, anode: a, cathode: ground}\n", "11:13 there is no part record `LBD-2`"),
        ("D1: {diode: LBZ-62, anode: a, cathode: ground}\n", "11:13 the part `LBZ-62` is a Zener diode"),
        (
            "Q1: {npn: LBP-120, collector: a, base: a, emitter: ground}\n",
            "11:11 the part `LBP-120` is a PNP transistor",
        ),
        (
            "R2: {resistor: 1 kΩ, part: LBR-26, from: a, to: ground}\n",
            "11:28 there is no part record `LBR-26`",
        ),
        ("R-2: {resistor: 1 kΩ, from: a, to: ground}\n", "11:1 `R-2` is no reference designator"),
        (
            "R7: {resistor: 1 kΩ, from: a, to: ground}\n",
            "11:1 `R7` is an element and a name of the design basis",
        ),
        (
            "a: {resistor: 1 kΩ, from: a, to: ground}\n",
            "11:1 `a` is an element and a node: `a.V` would mean two things",
        ),
    ] {
        let found = errors(&with_supply(element));
        assert_eq!(found.first().map(String::as_str), Some(expected), "{element}: {found:?}");
    }
    assert_eq!(
        errors(&with_supply("R1: {resistor: 1 kΩ, from: a, to: ground}\n")),
        ["11:1 `R1` stands twice"]
    );
}

#[test]
fn a_designator_in_two_blocks_is_refused() {
    let two = with_supply("```\n\n```circuit\nR1: {resistor: 1 kΩ, from: a, to: ground}\n");
    assert_eq!(errors(&two), ["14:1 there are two elements `R1`"]);
}

#[test]
fn right_spellings_are_offered() {
    for (element, nearest) in [
        ("R2: {resitor: 1 kΩ, from: a, to: ground}\n", "resistor"),
        ("R2: {resistor: 1 kΩ, form: a, to: ground}\n", "from"),
        ("D1: {diode: LBD-2, anode: a, cathode: ground}\n", "LBD-1"),
        ("R2: {resistor: R_c, from: a, to: ground}\n", "R_b"),
    ] {
        let Err(found) = build(&with_supply(element)) else { panic!() };
        assert_eq!(found.0[0].nearest.as_deref(), Some(nearest), "{element}");
    }
}

#[test]
fn connections_are_judged() {
    // (what is wrong or near it, error)
    for (elements, expected) in [
        (
            "R2: {resistor: 1 kΩ, from: a, to: lmap}\n",
            &["11:35 only `R2` is connected to the node `lmap`"][..],
        ),
        (
            "R2: {resistor: 1 kΩ, from: b, to: c}\nR3: {resistor: 1 kΩ, from: b, to: c}\n",
            &["11:28 the nodes `b`, `c` have no path to ground"],
        ),
        (
            "C1: {capacitor: 1 µF, from: a, to: b}\nC2: {capacitor: 1 µF, from: b, to: ground}\n",
            &["11:36 the node `b` reaches ground only through capacitors: C1, C2"],
        ),
        (
            "PS2: {current: 2 mA, from: a, to: b}\nPS3: {current: 1 mA, from: b, to: ground}\n",
            &["11:35 only current sources lead from the node `b`: PS2, PS3"],
        ),
        (
            "PS2: {current: 2 mA, from: a, to: b}\nC1: {capacitor: 1 µF, from: b, to: ground}\n",
            &["11:35 only current sources lead from the node `b`: PS2"],
        ),
        ("BT2: {supply: 12 V, plus: a}\n", &["11:1 `BT2` closes a loop of voltage sources with `BT1`"]),
        (
            "L1: {inductor: 10 mH, from: a, to: ground}\n",
            &["11:1 `L1` closes a loop of voltage sources with `BT1`"],
        ),
        (
            "BT2: {supply: 3 V, plus: b, minus: a}\nBT3: {supply: 3 V, plus: b}\n",
            &["12:1 `BT3` closes a loop of voltage sources with `BT1`, `BT2`"],
        ),
        (
            "MK1: {signal: 1 mV, resistance: 600 Ω, plus: a}\nMK2: {signal: 1 mV, resistance: 600 Ω, plus: a}\n",
            &["12:1 `MK2` is a second signal source"],
        ),
    ] {
        let mut found = errors(&with_supply(elements));
        found.sort();
        let mut expected: Vec<String> = expected.iter().map(|line| (*line).to_owned()).collect();
        expected.sort();
        assert_eq!(found, expected, "{elements}");
    }
    // Near misses.
    for elements in [
        "BT2: {supply: 12 V, resistance: 0.1 Ω, plus: a}\n",
        "L1: {inductor: 10 mH, resistance: 2 Ω, from: a, to: ground}\n",
        "PS2: {current: 2 mA, from: a, to: b}\nR3: {resistor: 1 kΩ, from: b, to: ground}\n",
        "C1: {capacitor: 1 µF, from: a, to: b}\nR3: {resistor: 1 kΩ, from: b, to: ground}\n",
        "Q1: {npn: LBN-250, collector: a, base: b, emitter: ground}\nC1: {capacitor: 1 µF, from: a, to: b}\n",
    ] {
        assert_eq!(errors(&with_supply(elements)), Vec::<String>::new(), "{elements}");
    }
    let floating = errors("R1: {resistor: 1 kΩ, from: a, to: b}\nR2: {resistor: 1 kΩ, from: a, to: b}\n");
    assert_eq!(floating, ["9:1 nothing in this circuit is connected to `ground`"]);
}

#[test]
fn an_unusual_designator_is_a_warning() {
    let built = built(&with_supply("X5: {resistor: 1 kΩ, from: a, to: ground}\n"));
    let messages: Vec<&str> = built.warnings.0.iter().map(|warning| warning.message.as_str()).collect();
    assert_eq!(messages, ["`X5` is an unusual designator for a resistor"]);
}

#[test]
fn a_circuit_offers_trade_symbols() {
    let built = built(
        "BT1: {supply: V_bat, plus: a, resistance: 0.1 Ω}\nMK1: {signal: 10 mV, resistance: 600 Ω, plus: in}\n\
         C1: {capacitor: 1 µF, from: in, to: b}\nR1: {resistor: 1 kΩ, from: a, to: b}\n\
         K1: {coil: 320 Ω, inductance: 0.4 H, from: a, to: c}\nQ1: {npn: LBN-250, collector: c, base: b, emitter: ground}\n\
         D1: {diode: LBD-1, anode: c, cathode: a}\nR2: {resistor: 1 kΩ, from: in, to: ground}\n",
    );
    let symbols = circuit::symbols(&built.network);
    let kind = |name: &str| symbols.iter().find(|symbol| symbol.name == name).map(|symbol| symbol.kind);
    for (name, wanted) in [
        ("Q1.V_BE", Kind::of(Dimension::VOLT)),
        ("Q1.I_C", Kind::of(Dimension::AMPERE)),
        ("Q1.T_j", Kind::TEMPERATURE),
        ("Q1.h_FE", Kind::NONE),
        ("Q1.overdrive", Kind::NONE),
        ("R1", Kind::of(Dimension::OHM)),
        ("R1.P", Kind::of(Dimension::WATT)),
        ("C1", Kind::of(Dimension::FARAD)),
        ("C1.W", Kind::of(Dimension::JOULE)),
        ("K1.L", Kind::of(Dimension::HENRY)),
        ("K1.W", Kind::of(Dimension::JOULE)),
        ("D1.T_j", Kind::TEMPERATURE),
        ("BT1.I", Kind::of(Dimension::AMPERE)),
        ("BT1.R_s", Kind::of(Dimension::OHM)),
        ("MK1.R_in", Kind::of(Dimension::OHM)),
        ("c.V", Kind::of(Dimension::VOLT)),
        ("c.gain", Kind::NONE),
        ("c.R_out", Kind::of(Dimension::OHM)),
    ] {
        assert_eq!(kind(name), Some(wanted), "{name}");
    }
    assert_eq!(kind("ground.V"), None);
    assert_eq!(kind("Q1"), None);
    let mut names: Vec<&str> = symbols.iter().map(|symbol| symbol.name.as_str()).collect();
    let count = names.len();
    names.sort();
    names.dedup();
    assert_eq!(names.len(), count, "each symbol once");
}
