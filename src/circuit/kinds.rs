//! What each kind of element is made of: its terminals, its keys, its value, the letters of its designator.

use crate::part::PartKind;
use crate::quantity::Dimension;
use crate::worksheet::{Record, Spot};

use super::ElementKind;

/// One kind of element as records describe it.
pub(super) struct KindRule {
    pub kind: ElementKind,
    /// The key that names the kind; its text is the value or the part.
    pub key: &'static str,
    pub words: &'static str,
    /// Keys of the terminals in order.
    pub terminals: &'static [&'static str],
    /// Dimension of the value; `None` for a device, whose key names a part.
    pub value: Option<Dimension>,
    /// The kind of part that may stand behind it.
    pub part: Option<PartKind>,
    /// Further keys.
    pub keys: &'static [&'static str],
    /// Letters that designators of this kind begin with (IEC 81346-2, IEEE 315, and common practice).
    pub letters: &'static [&'static str],
    /// A value for the messages.
    pub example: &'static str,
}

/// Keys that every record may have.
pub(super) const COMMON_KEYS: [&str; 2] = ["source", "about"];

/// Keys that say how a value varies and drifts; a device has no value, and how its specimens vary stands with its part.
pub(super) const VALUE_KEYS: [&str; 2] = ["spread", "ageing"];

const TWO_ENDS: &[&str] = &["from", "to"];
const POLES: &[&str] = &["plus", "minus"];
const DIODE: &[&str] = &["anode", "cathode"];
const TRANSISTOR: &[&str] = &["collector", "base", "emitter"];

pub(super) const KINDS: [KindRule; 12] = [
    KindRule {
        kind: ElementKind::Npn,
        key: "npn",
        words: "NPN transistor",
        terminals: TRANSISTOR,
        value: None,
        part: Some(PartKind::Npn),
        keys: &["r_th"],
        letters: &["Q", "T", "V"],
        example: "`Q1: {npn: PART, collector: lamp, base: base, emitter: ground}`",
    },
    KindRule {
        kind: ElementKind::Pnp,
        key: "pnp",
        words: "PNP transistor",
        terminals: TRANSISTOR,
        value: None,
        part: Some(PartKind::Pnp),
        keys: &["r_th"],
        letters: &["Q", "T", "V"],
        example: "`Q1: {pnp: PART, collector: lamp, base: base, emitter: bat}`",
    },
    KindRule {
        kind: ElementKind::Diode,
        key: "diode",
        words: "diode",
        terminals: DIODE,
        value: None,
        part: Some(PartKind::Diode),
        keys: &["r_th"],
        letters: &["D", "CR", "R", "V"],
        example: "`D1: {diode: PART, anode: coil, cathode: bat}`",
    },
    KindRule {
        kind: ElementKind::Zener,
        key: "zener",
        words: "Zener diode",
        terminals: DIODE,
        value: None,
        part: Some(PartKind::Zener),
        keys: &["r_th"],
        letters: &["D", "VR", "Z", "R", "V"],
        example: "`D1: {zener: PART, anode: ground, cathode: ref}`",
    },
    KindRule {
        kind: ElementKind::Resistor,
        key: "resistor",
        words: "resistor",
        terminals: TWO_ENDS,
        value: Some(Dimension::OHM),
        part: Some(PartKind::Resistor),
        keys: &["part", "power", "voltage", "tcr", "r_th"],
        letters: &["R"],
        example: "`R1: {resistor: 470 Ω ± 5 %, from: drive, to: base}`",
    },
    KindRule {
        kind: ElementKind::Filament,
        key: "filament",
        words: "filament lamp",
        terminals: TWO_ENDS,
        value: Some(Dimension::OHM),
        part: Some(PartKind::Filament),
        keys: &["part", "cold", "power", "voltage"],
        letters: &["DS", "E", "H", "LA", "P"],
        example: "`DS1: {filament: 12 V 1.2 W, cold: 14 Ω ± 20 %, from: bat, to: lamp}`",
    },
    KindRule {
        kind: ElementKind::Coil,
        key: "coil",
        words: "coil",
        terminals: TWO_ENDS,
        value: Some(Dimension::OHM),
        part: Some(PartKind::Coil),
        keys: &["part", "cold", "inductance", "power", "voltage"],
        letters: &["K", "L", "Y", "M"],
        example: "`K1: {coil: 320 Ω ± 10 %, inductance: 0.4 H, from: bat, to: coil}`",
    },
    KindRule {
        kind: ElementKind::Capacitor,
        key: "capacitor",
        words: "capacitor",
        terminals: TWO_ENDS,
        value: Some(Dimension::FARAD),
        part: Some(PartKind::Capacitor),
        keys: &["part", "voltage"],
        letters: &["C"],
        example: "`C1: {capacitor: 10 µF ± 20 %, from: in, to: base}`",
    },
    KindRule {
        kind: ElementKind::Inductor,
        key: "inductor",
        words: "inductor",
        terminals: TWO_ENDS,
        value: Some(Dimension::HENRY),
        part: None,
        keys: &["resistance"],
        letters: &["L"],
        example: "`L1: {inductor: 10 mH, resistance: 2 Ω, from: bat, to: lamp}`",
    },
    KindRule {
        kind: ElementKind::Supply,
        key: "supply",
        words: "voltage source",
        terminals: POLES,
        value: Some(Dimension::VOLT),
        part: None,
        keys: &["resistance"],
        letters: &["BT", "PS", "G", "TB", "U", "VS"],
        example: "`BT1: {supply: V_bat, plus: bat}`",
    },
    KindRule {
        kind: ElementKind::Current,
        key: "current",
        words: "current source",
        terminals: TWO_ENDS,
        value: Some(Dimension::AMPERE),
        part: None,
        keys: &[],
        letters: &["PS", "G", "I", "B", "IS"],
        example: "`PS2: {current: 2 mA ± 1 %, from: ground, to: base}`",
    },
    KindRule {
        kind: ElementKind::Signal,
        key: "signal",
        words: "signal source",
        terminals: POLES,
        value: Some(Dimension::VOLT),
        part: None,
        keys: &["resistance"],
        letters: &["MK", "G", "PS", "B", "J", "X", "VS"],
        example: "`MK1: {signal: 10 mV, resistance: 600 Ω, plus: in}`",
    },
];

impl KindRule {
    /// The kind in words with its article.
    pub fn one(&self) -> String {
        let article = if self.words.starts_with(['N', 'i']) { "an" } else { "a" };
        format!("{article} {}", self.words)
    }
}

/// The rule of a kind.
pub(super) fn rule(kind: ElementKind) -> Option<&'static KindRule> {
    KINDS.iter().find(|rule| rule.kind == kind)
}

/// The part record that an element names: with its kind where it is a device, in `part` otherwise.
pub fn part_named(record: &Record) -> Option<&Spot<String>> {
    let names_part = |key: &str| {
        key == "part"
            || KINDS.iter().any(|rule| rule.key == key && rule.value.is_none() && rule.part.is_some())
    };
    record.fields.iter().find(|(key, _)| names_part(&key.value)).map(|(_, value)| value)
}

/// The kind of a part in words.
pub(super) fn part_words(kind: PartKind) -> &'static str {
    match kind {
        PartKind::Npn => "an NPN transistor",
        PartKind::Pnp => "a PNP transistor",
        PartKind::Diode => "a diode",
        PartKind::Zener => "a Zener diode",
        PartKind::Resistor => "a resistor",
        PartKind::Capacitor => "a capacitor",
        PartKind::Filament => "a filament lamp",
        PartKind::Coil => "a coil",
    }
}
