//! What a note starts from, as a flat list of named texts: basis values, conditions, elements, rows of parts, criteria.

use crate::part::{Part, RatingQuantity, Row};
use crate::quantity::{self, Dimension, Kind, Unit};
use crate::study::{Findings, Input};

/// Significant digits of a printed row; data sheets print fewer.
const DIGITS: u8 = 6;

/// One thing that somebody typed. `readings` says it ever more exactly: the text, then with its source, then in numbers.
pub(super) struct Fact {
    pub name: String,
    pub readings: Vec<String>,
}

impl Fact {
    fn new(name: impl Into<String>, text: impl Into<String>) -> Fact {
        Fact { name: name.into(), readings: vec![text.into()] }
    }

    /// What tells two versions of a fact apart: the first reading in which they differ.
    pub fn apart<'a>(&'a self, other: &'a Fact) -> Option<(&'a str, &'a str)> {
        let pairs = self.readings.iter().zip(&other.readings);
        pairs.map(|(a, b)| (a.as_str(), b.as_str())).find(|(a, b)| a != b)
    }

    pub fn text(&self) -> &str {
        self.readings.first().map_or("", String::as_str)
    }
}

/// Every fact, each name once.
pub(super) fn facts(findings: &Findings) -> Vec<Fact> {
    let mut out: Vec<Fact> = findings.inputs.iter().map(input).collect();
    for condition in &findings.conditions {
        let sort = if condition.normal { "normal" } else { "fault" };
        let lasts = condition.lasts.as_ref().map(|lasts| format!(", lasts {lasts}")).unwrap_or_default();
        let name = &condition.name;
        out.push(Fact::new(format!("condition {name}"), format!("{sort}{lasts}")));
        let overrides = condition.overrides.iter();
        out.extend(overrides.map(|(what, value)| Fact::new(format!("{what} in {name}"), value)));
    }
    for element in &findings.elements {
        let designator = &element.designator;
        let is_input = findings.inputs.iter().any(|input| &input.symbol == designator);
        if !is_input && !element.value.is_empty() {
            out.push(Fact::new(format!("{designator} value"), &element.value));
        }
        if let Some(part) = &element.part {
            out.push(Fact::new(format!("{designator} part"), part));
        }
        let ends: Vec<String> =
            element.terminals.iter().map(|(terminal, node)| format!("{terminal} {node}")).collect();
        out.push(Fact::new(
            format!("{designator} connections"),
            format!("{}: {}", element.kind, ends.join(", ")),
        ));
    }
    findings.parts.iter().for_each(|part| self::part(part, &mut out));
    for criterion in &findings.criteria {
        let clause = criterion.clause.as_ref().map(|clause| format!(" [{clause}]")).unwrap_or_default();
        let safety = if criterion.safety { ", safety" } else { "" };
        let within = criterion.conditions.join(", ");
        let reason = criterion.coverage.as_ref().map(|found| format!(" because \"{}\"", found.because));
        let over = format!("{}{}", criterion.over, reason.unwrap_or_default());
        let text = format!("{} over {over} in {within}{safety}{clause}", criterion.text);
        out.push(Fact::new(format!("criterion {}", criterion.label), text));
    }
    tell_apart(out)
}

/// Numbers names that stand more than once.
fn tell_apart(mut facts: Vec<Fact>) -> Vec<Fact> {
    let mut seen = std::collections::BTreeMap::new();
    for fact in &mut facts {
        let count = seen.entry(fact.name.clone()).or_insert(0_u32);
        *count += 1;
        if *count > 1 {
            fact.name.push_str(&format!(" ({count})"));
        }
    }
    facts
}

fn input(input: &Input) -> Fact {
    let source = input.source.as_ref().map_or("no source", |source| source.text.as_str());
    let [low, nominal, high] = [input.spread.low, input.spread.nominal, input.spread.high]
        .map(|value| quantity::text(value, &input.unit, DIGITS));
    Fact {
        name: input.symbol.clone(),
        readings: vec![
            input.text.clone(),
            format!("{} [{source}]", input.text),
            format!("{low} to {high}, nominal {nominal}"),
            input.role.text(),
        ],
    }
}

fn part(part: &Part, out: &mut Vec<Fact>) {
    out.push(Fact::new(format!("{} description", part.name), &part.description));
    for (name, text, source) in part_lines(part) {
        let exact = format!("{text} [{source}]");
        out.push(Fact { name: format!("{} {name}", part.name), readings: vec![text, exact] });
    }
}

/// How a part's specimens lie within their limits, and every row, rating and pulse of a record: name with its test condition, value as text, source.
pub fn part_lines(part: &Part) -> Vec<(String, String, &str)> {
    let mut out = Vec::new();
    if let Some(role) = part.spread {
        out.push(("spread".to_owned(), role.text(), "the record"));
    }
    for row in &part.rows {
        let kind = Kind::of(row.quantity.dimension());
        let all: Vec<f64> = [row.min, row.typ, row.max].into_iter().flatten().collect();
        let unit = quantity::preferred_unit(&all, kind);
        let columns = [("min", row.min), ("typ", row.typ), ("max", row.max)];
        let text: Vec<String> = columns
            .into_iter()
            .filter_map(|(column, value)| Some(format!("{column} {}", plain(value?, &unit))))
            .collect();
        let at = bias(row);
        let at = if at.is_empty() { at } else { format!(" at {at}") };
        let name = format!("{}{at}", row.quantity.symbol());
        out.push((name, text.join(", "), row.source.text.as_str()));
    }
    for rating in &part.ratings {
        let up_to = rating.up_to.map(|up_to| format!(" up to {}", plain(up_to, &Unit::celsius())));
        let text = format!("{}{}", rating_text(rating.quantity, rating.value), up_to.unwrap_or_default());
        out.push((format!("rating {}", rating.quantity.symbol()), text, &rating.source.text));
    }
    for pulse in &part.pulses {
        let lasts = in_best_unit(pulse.lasts, Kind::of(Dimension::SECOND));
        let text = in_best_unit(pulse.impedance, Kind::of(Dimension::KELVIN_PER_WATT));
        out.push((format!("Z_th(j-a) at {lasts}"), text, &pulse.source.text));
    }
    out
}

/// A rating in its usual unit.
fn rating_text(quantity: RatingQuantity, value: f64) -> String {
    if quantity.kind() == Kind::TEMPERATURE {
        plain(value, &Unit::celsius())
    } else {
        in_best_unit(value, quantity.kind())
    }
}

/// A row's test condition: `I_C = 150 mA, V_CE = 5 V`, and the temperature where it is not 25 °C.
fn bias(row: &Row) -> String {
    let at = &row.at;
    let named = [
        ("I_C", at.i_c, Dimension::AMPERE),
        ("I_B", at.i_b, Dimension::AMPERE),
        ("V_CE", at.v_ce, Dimension::VOLT),
        ("V_CB", at.v_cb, Dimension::VOLT),
        ("I_F", at.i_f, Dimension::AMPERE),
        ("V_R", at.v_r, Dimension::VOLT),
    ];
    let mut parts: Vec<String> = named
        .into_iter()
        .filter_map(|(name, value, dimension)| {
            Some(format!("{name} = {}", in_best_unit(value?, Kind::of(dimension))))
        })
        .collect();
    if at.t_j != crate::device::REFERENCE_TEMPERATURE {
        parts.push(format!("T_j = {}", plain(at.t_j, &Unit::celsius())));
    }
    parts.join(", ")
}

fn in_best_unit(value: f64, kind: Kind) -> String {
    plain(value, &quantity::preferred_unit(&[value], kind))
}

/// A printed value without trailing zeros, as a record would write it.
fn plain(value: f64, unit: &Unit) -> String {
    let mut printed = quantity::print(value, unit, DIGITS);
    if printed.digits.contains('.') {
        let kept = printed.digits.trim_end_matches(['0', '\u{202f}']).trim_end_matches('.').len();
        printed.digits.truncate(kept);
    }
    printed.text()
}
