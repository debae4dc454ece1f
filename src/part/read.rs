//! Part records from YAML.
//!
//! ```yaml
//! LBN-250:
//!   kind: npn
//!   about: NPN switching transistor
//!   source: data sheet LBN-250 rev C          # of every row that names no other; `page` is added
//!   spread: normal                            # how specimens lie within their limits; uniform where nothing is said
//!   rows:
//!     - {h_FE: {min: 100, typ: 180, max: 300}, I_C: 150 mA, V_CE: 1 V, page: 2}
//!     - {V_CE(sat): {max: 0.4 V}, I_C: 150 mA, I_B: 15 mA, page: 3}
//!   ratings: {V_CEO: 60 V, I_C: 1 A, P_tot: {value: 0.8 W, up to: 25 °C}, T_j: 150 °C, R_th(j-a): 156 K/W}
//!   pulses:
//!     - {lasts: 100 ms, Z_th(j-a): 12 K/W, page: 5}
//! ```

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::quantity::{self, Dimension, Kind, Quantity, Role, Source};
use crate::source::{Digest, File, Place};
use crate::worksheet::{Spot, source_of};
use crate::yaml::{self, Key, Node, Value};

use super::{Part, PartKind, Pulse, Rating, RatingQuantity, Row, RowQuantity, TestCondition};

const KEYS: [&str; 7] = ["kind", "about", "source", "spread", "rows", "ratings", "pulses"];
const KINDS: [(&str, PartKind); 8] = [
    ("npn", PartKind::Npn),
    ("pnp", PartKind::Pnp),
    ("diode", PartKind::Diode),
    ("zener", PartKind::Zener),
    ("resistor", PartKind::Resistor),
    ("capacitor", PartKind::Capacitor),
    ("filament", PartKind::Filament),
    ("coil", PartKind::Coil),
];
const BIAS: [&str; 8] = ["I_C", "I_B", "V_CE", "V_CB", "I_F", "I_Z", "V_R", "T_j"];

/// Reads every record of a file.
///
/// # Errors
/// All of what is wrong, each with its place: malformed YAML, unknown keys, wrong units, a minimum above its maximum, rows
/// without their bias, ratings that are no ratings.
pub fn read(file: &File) -> Result<Vec<Part>, Diagnostics> {
    let origin = Place::new(&file.path, 1, 1, 0);
    let text = file.text().map_err(|at| {
        Diagnostics::from(
            Diagnostic::error(&origin, format!("byte {at} is no text")).expected("YAML in UTF-8"),
        )
    })?;
    let root = yaml::read(text, &file.path, 1)?;
    let mut errors = Diagnostics::default();
    let mut parts = Vec::new();
    for (key, node) in root.map("part records: `NAME:` and below it `kind:`, `rows:`, `ratings:`")? {
        if let Some(part) = record(key, node, file, &mut errors) {
            parts.push(part);
        }
    }
    if errors.has_errors() { Err(errors) } else { Ok(parts) }
}

fn record(key: &Key, node: &Node, file: &File, errors: &mut Diagnostics) -> Option<Part> {
    let entries = errors.keep(node.map("`kind:`, `rows:`, `ratings:`"))?;
    yaml::refuse_unknown_keys(entries, &KEYS, errors);
    let words: Vec<&str> = KINDS.iter().map(|(word, _)| *word).collect();
    let Some(kind) = node.get("kind") else {
        errors.push(
            Diagnostic::error(&key.place, format!("the kind of `{}` is missing", key.name))
                .expected(format!("`kind:` with one of {}", words.join(", "))),
        );
        return None;
    };
    let word = errors.keep(kind.scalar("a kind"))?;
    let Some((_, kind_of)) = KINDS.iter().find(|(name, _)| *name == word) else {
        errors.push(
            Diagnostic::error(&kind.place, format!("`{word}` is no kind of part"))
                .expected(format!("one of {}", words.join(", ")))
                .nearest(word, words.iter().copied()),
        );
        return None;
    };
    let about = node.get("about").and_then(|node| errors.keep(node.scalar("a description"))).unwrap_or("");
    let default = node.get("source").and_then(|node| {
        errors
            .keep(node.scalar("the data sheet, its revision"))
            .map(|text| (text.trim().to_owned(), node.place.clone()))
    });
    let mut part = Part {
        name: key.name.clone(),
        kind: *kind_of,
        description: about.to_owned(),
        rows: Vec::new(),
        ratings: Vec::new(),
        pulses: Vec::new(),
        spread: node.get("spread").and_then(|node| {
            let text = errors.keep(node.scalar("uniform, triangular, normal or bias"))?;
            errors.keep(Role::parse(text.trim(), &node.place))
        }),
        digest: Digest::of(&file.bytes),
        place: key.place.clone(),
    };
    for item in node.get("rows").map(Node::items).unwrap_or_default() {
        part.rows.extend(row(item, *kind_of, default.as_ref(), errors));
    }
    if let Some(ratings) = node.get("ratings") {
        read_ratings(ratings, default.as_ref(), &mut part.ratings, errors);
    }
    for item in node.get("pulses").map(Node::items).unwrap_or_default() {
        part.pulses.extend(pulse(item, default.as_ref(), errors));
    }
    Some(part)
}

/// The source of a row: its own `source`, or the record's; with the page where one is named.
fn source(node: &Node, default: Option<&(String, Place)>, errors: &mut Diagnostics) -> Option<Source> {
    let page = node.get("page").and_then(|page| errors.keep(page.scalar("a page number")));
    let own = match node.get("source") {
        Some(own) => {
            Some((errors.keep(own.scalar("where the row comes from"))?.trim().to_owned(), own.place.clone()))
        }
        None => default.cloned(),
    };
    let Some((text, place)) = own else {
        errors.push(
            Diagnostic::error(&node.place, "this row has no source").expected(
                "`source:` in the row or in the record: a data sheet with revision, `measured ...`, `assumed: ...` or \
                 `from memory`",
            ),
        );
        return None;
    };
    let text = page.map_or(text.clone(), |page| format!("{text} page {page}"));
    let mut unclear = Diagnostics::default();
    let found = source_of(&Spot { value: text, place }, &[], &mut unclear);
    Some(found)
}

fn row(
    node: &Node,
    part: PartKind,
    default: Option<&(String, Place)>,
    errors: &mut Diagnostics,
) -> Option<Row> {
    let entries = errors.keep(node.map("a row such as `{h_FE: {min: 100}, I_C: 150 mA, V_CE: 1 V}`"))?;
    let symbols: Vec<&str> = RowQuantity::ALL.iter().map(|quantity| quantity.symbol()).collect();
    let known = |name: &str| BIAS.contains(&name) || matches!(name, "page" | "source" | "pulsed");
    let mut stated: Option<(RowQuantity, &Node)> = None;
    for (key, value) in entries {
        if known(&key.name) {
            continue;
        }
        let Some(quantity) = RowQuantity::ALL.into_iter().find(|quantity| quantity.symbol() == key.name)
        else {
            errors.push(
                Diagnostic::error(&key.place, format!("`{}` is no quantity of a row", key.name))
                    .expected(format!("one of {}; or the bias: {}", symbols.join(", "), BIAS.join(", ")))
                    .nearest(&key.name, symbols.iter().copied().chain(BIAS)),
            );
            return None;
        };
        if stated.is_some() {
            errors
                .push(Diagnostic::error(&key.place, "a row states one quantity").expected("a row for each"));
            return None;
        }
        if !belongs(quantity, part) {
            errors.push(Diagnostic::error(
                &key.place,
                format!("`{}` is no quantity of this kind of part", key.name),
            ));
            return None;
        }
        stated = Some((quantity, value));
    }
    let Some((quantity, value)) = stated else {
        errors.push(
            Diagnostic::error(&node.place, "the row states no quantity")
                .expected(format!("one of {}", symbols.join(", "))),
        );
        return None;
    };
    let at = condition(node, quantity, errors)?;
    let (min, typ, max) = columns(value, quantity, errors)?;
    let source = source(node, default, errors)?;
    Some(Row { quantity, at, min, typ, max, source, place: node.place.clone() })
}

fn belongs(quantity: RowQuantity, part: PartKind) -> bool {
    use RowQuantity as Q;
    match part {
        PartKind::Npn | PartKind::Pnp => matches!(
            quantity,
            Q::CurrentGain
                | Q::BaseEmitterVoltage
                | Q::BaseEmitterSaturation
                | Q::CollectorEmitterSaturation
                | Q::CollectorCutoff
                | Q::OutputConductance
                | Q::BaseEmitterTemperatureCoefficient
                | Q::OutputCapacitance
                | Q::InputCapacitance
                | Q::TransitionFrequency
        ),
        PartKind::Diode => matches!(quantity, Q::ForwardVoltage | Q::ReverseCurrent),
        PartKind::Zener => matches!(
            quantity,
            Q::ForwardVoltage
                | Q::ReverseCurrent
                | Q::ZenerVoltage
                | Q::ZenerResistance
                | Q::ZenerTemperatureCoefficient
        ),
        PartKind::Resistor | PartKind::Capacitor => {
            matches!(quantity, Q::ResistanceCoefficient | Q::Tolerance | Q::Ageing)
        }
        PartKind::Filament | PartKind::Coil => matches!(
            quantity,
            Q::Resistance
                | Q::ColdResistance
                | Q::Inductance
                | Q::ResistanceCoefficient
                | Q::Tolerance
                | Q::Ageing
        ),
    }
}

fn measured(node: &Node, kind: Kind, what: &str, errors: &mut Diagnostics) -> Option<Quantity> {
    let text = errors.keep(node.scalar(what))?;
    let indent = text.len() - text.trim_start().len();
    let place = node.place.within(text, indent, text.len());
    let quantity = errors.keep(quantity::parse_as(text.trim(), &place, kind))?;
    if quantity.kind.point != kind.point && quantity.spread.nominal != 0.0 {
        errors.push(
            Diagnostic::error(&node.place, "a temperature and a temperature difference are not the same")
                .expected(if kind.point { "a temperature in °C" } else { "a difference in K" }),
        );
        return None;
    }
    Some(quantity)
}

fn condition(node: &Node, quantity: RowQuantity, errors: &mut Diagnostics) -> Option<TestCondition> {
    let mut at = TestCondition { t_j: crate::device::REFERENCE_TEMPERATURE, ..TestCondition::default() };
    for name in BIAS {
        let Some(value) = node.get(name) else { continue };
        let kind = match name {
            "T_j" => Kind::TEMPERATURE,
            name if name.starts_with('I') => Kind::of(Dimension::AMPERE),
            _ => Kind::of(Dimension::VOLT),
        };
        let si = measured(value, kind, "a bias value", errors)?.spread.nominal;
        if name != "T_j" && si <= 0.0 {
            errors.push(
                Diagnostic::error(&value.place, format!("{name} is not above zero"))
                    .expected("its magnitude"),
            );
            return None;
        }
        match name {
            "I_C" => at.i_c = Some(si),
            "I_B" => at.i_b = Some(si),
            "V_CE" => at.v_ce = Some(si),
            "V_CB" => at.v_cb = Some(si),
            "I_F" | "I_Z" => at.i_f = Some(si),
            "V_R" => at.v_r = Some(si),
            _ => at.t_j = si,
        }
    }
    for needed in quantity.needs() {
        if node.get(needed).is_none() {
            errors.push(
                Diagnostic::error(&node.place, format!("a row of {} needs {needed}", quantity.symbol()))
                    .expected(format!("the bias it was measured at: {}", quantity.needs().join(", "))),
            );
            return None;
        }
    }
    Some(at)
}

/// Minimum, typical and maximum of a row.
type Columns = (Option<f64>, Option<f64>, Option<f64>);

fn columns(node: &Node, quantity: RowQuantity, errors: &mut Diagnostics) -> Option<Columns> {
    let kind = Kind::of(quantity.dimension());
    let (min, typ, max) = match &node.value {
        Value::Map(entries) => {
            yaml::refuse_unknown_keys(entries, &["min", "typ", "max"], errors);
            let mut column = |name: &str| -> Option<Option<f64>> {
                match node.get(name) {
                    Some(value) => measured(value, kind, "a value", errors).map(|q| Some(q.spread.nominal)),
                    None => Some(None),
                }
            };
            (column("min")?, column("typ")?, column("max")?)
        }
        _ if quantity == RowQuantity::Ageing => {
            let text = errors.keep(node.scalar("a share of the value: `± 2 %`"))?;
            let drift = errors.keep(quantity::parse_ageing(text, &node.place))?.spread;
            (Some(drift.low), None, Some(drift.high))
        }
        _ => {
            let read = measured(node, kind, "`{min: ..., typ: ..., max: ...}`", errors)?;
            if read.bounded {
                (Some(read.spread.low), Some(read.spread.nominal), Some(read.spread.high))
            } else {
                (None, Some(read.spread.nominal), None)
            }
        }
    };
    let error = |message: &str| Diagnostic::error(&node.place, format!("{}: {message}", quantity.symbol()));
    let ordered = |a: Option<f64>, b: Option<f64>| a.zip(b).is_none_or(|(a, b)| a <= b);
    if min.is_none() && typ.is_none() && max.is_none() {
        errors.push(error("the row gives no value").expected("one of min, typ, max"));
        return None;
    }
    if !ordered(min, max) {
        errors.push(error("the minimum lies above the maximum").expected("min ≤ typ ≤ max"));
        return None;
    }
    if !ordered(min, typ) || !ordered(typ, max) {
        errors.push(error("the typical value lies outside the limits").expected("min ≤ typ ≤ max"));
        return None;
    }
    let signed = matches!(
        quantity,
        RowQuantity::BaseEmitterTemperatureCoefficient
            | RowQuantity::ZenerTemperatureCoefficient
            | RowQuantity::ResistanceCoefficient
            | RowQuantity::Ageing
    );
    if !signed && [min, typ, max].into_iter().flatten().any(|value| value <= 0.0) {
        errors.push(error("a value is not above zero").expected("magnitudes, for NPN and PNP alike"));
        return None;
    }
    Some((min, typ, max))
}

fn read_ratings(
    node: &Node,
    default: Option<&(String, Place)>,
    out: &mut Vec<Rating>,
    errors: &mut Diagnostics,
) {
    let Some(entries) = errors.keep(node.map("ratings such as `V_CEO: 60 V`")) else { return };
    let symbols: Vec<&str> = RatingQuantity::ALL.iter().map(|quantity| quantity.symbol()).collect();
    let source_of_all = source(node, default, errors);
    for (key, value) in entries {
        if matches!(key.name.as_str(), "page" | "source") {
            continue;
        }
        let Some(quantity) = RatingQuantity::ALL.into_iter().find(|quantity| quantity.symbol() == key.name)
        else {
            errors.push(
                Diagnostic::error(&key.place, format!("`{}` is no rating", key.name))
                    .expected(format!("one of {}", symbols.join(", ")))
                    .nearest(&key.name, symbols.iter().copied()),
            );
            continue;
        };
        let what = "a rating with its unit";
        let mut own = source_of_all.clone();
        let (limit, up_to) = match &value.value {
            Value::Map(entries) => {
                yaml::refuse_unknown_keys(entries, &["value", "up to", "source", "page"], errors);
                let Some(limit) = value.get("value") else {
                    errors.push(Diagnostic::error(&value.place, "the value is missing").expected("`value:`"));
                    continue;
                };
                if value.get("source").is_some() || value.get("page").is_some() {
                    own = source(value, default, errors);
                }
                let up_to = value
                    .get("up to")
                    .and_then(|node| measured(node, Kind::TEMPERATURE, "a temperature", errors))
                    .map(|quantity| quantity.spread.nominal);
                (measured(limit, quantity.kind(), what, errors), up_to)
            }
            _ => (measured(value, quantity.kind(), what, errors), None),
        };
        let (Some(limit), Some(source)) = (limit, own) else { continue };
        if limit.spread.nominal <= 0.0 {
            errors.push(Diagnostic::error(&value.place, format!("{} is not above zero", key.name)));
            continue;
        }
        out.push(Rating { quantity, value: limit.spread.nominal, up_to, source, place: value.place.clone() });
    }
}

fn pulse(node: &Node, default: Option<&(String, Place)>, errors: &mut Diagnostics) -> Option<Pulse> {
    let example = "`{lasts: 100 ms, Z_th(j-a): 12 K/W}`";
    let entries = errors.keep(node.map(example))?;
    yaml::refuse_unknown_keys(entries, &["lasts", "Z_th(j-a)", "source", "page"], errors);
    let (Some(lasts), Some(impedance)) = (node.get("lasts"), node.get("Z_th(j-a)")) else {
        errors.push(
            Diagnostic::error(&node.place, "a pulse row needs its length and impedance").expected(example),
        );
        return None;
    };
    let lasts = measured(lasts, Kind::of(Dimension::SECOND), "a length of time", errors)?.spread.nominal;
    let impedance = measured(impedance, Kind::of(Dimension::KELVIN_PER_WATT), "a thermal impedance", errors)?;
    let source = source(node, default, errors)?;
    Some(Pulse { lasts, impedance: impedance.spread.nominal, source, place: node.place.clone() })
}
