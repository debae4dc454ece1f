//! Records -> network.

use std::collections::BTreeMap;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::Formula;
use crate::part::PartKind;
use crate::quantity::{Dimension, Kind, Role, parse_ageing};
use crate::source::Place;
use crate::worksheet::{Record, Spot, source_of};

use super::kinds::{COMMON_KEYS, KINDS, KindRule, VALUE_KEYS, part_words};
use super::values::{InPlace, Reader, Wanted};
use super::{Element, ElementKind, Network, rules};

/// A circuit block as a network.
#[derive(Clone, Debug, Default)]
pub struct Built {
    pub network: Network,
    /// Values written with the elements, in order of writing.
    pub inputs: Vec<InPlace>,
    pub warnings: Diagnostics,
}

/// An element's terminal as it was written: its node, and the place of the node's name.
pub(super) struct Terminal {
    pub node: usize,
    pub place: Place,
}

/// Builds the network of a circuit. `basis` gives the kind of every name of the design basis, `parts` the kind of every
/// part record of the notebook.
///
/// # Errors
/// All of: an unknown kind, key, part or name; a missing value, terminal or kind; a value of another dimension; a designator
/// that stands twice; a name with two meanings; a node with one connection; a node without a d.c. path to ground; a loop of
/// voltage sources; nodes that only current sources feed.
pub fn build(
    records: &[Record],
    basis: &BTreeMap<String, Kind>,
    parts: &BTreeMap<String, PartKind>,
) -> Result<Built, Diagnostics> {
    let mut builder = Builder {
        basis,
        parts,
        network: Network { nodes: vec!["ground".to_owned()], elements: Vec::new() },
        inputs: Vec::new(),
        terminals: Vec::new(),
        diagnostics: Diagnostics::default(),
    };
    let mut seen: BTreeMap<&str, &Place> = BTreeMap::new();
    for record in records {
        let designator = record.key.value.as_str();
        if let Some(first) = seen.insert(designator, &record.key.place) {
            builder.diagnostics.push(
                Diagnostic::error(&record.key.place, format!("there are two elements `{designator}`"))
                    .expected(format!("a designator of its own; the first stands on line {}", first.line)),
            );
            continue;
        }
        if let Some((element, terminals)) = builder.element(record) {
            builder.network.elements.push(element);
            builder.terminals.push(terminals);
        }
    }
    let mut diagnostics = builder.diagnostics;
    // Connections are judged where every element was understood; an element left out would leave its nodes dangling.
    if !diagnostics.has_errors() {
        rules::check(&builder.network, &builder.terminals, &builder.inputs, basis, &mut diagnostics);
    }
    if diagnostics.has_errors() {
        return Err(diagnostics);
    }
    Ok(Built { network: builder.network, inputs: builder.inputs, warnings: diagnostics })
}

struct Builder<'a> {
    basis: &'a BTreeMap<String, Kind>,
    parts: &'a BTreeMap<String, PartKind>,
    network: Network,
    inputs: Vec<InPlace>,
    /// Terminals of each element of the network.
    terminals: Vec<Vec<Terminal>>,
    diagnostics: Diagnostics,
}

fn field<'r>(record: &'r Record, key: &str) -> Option<&'r Spot<String>> {
    record.fields.iter().find(|(name, _)| name.value == key).map(|(_, value)| value)
}

impl Builder<'_> {
    fn element(&mut self, record: &Record) -> Option<(Element, Vec<Terminal>)> {
        let named = self.designator(&record.key);
        let rule = self.kind(record)?;
        self.letters(&record.key, rule);
        self.unknown_keys(record, rule);
        let terminals = self.connections(record, rule);
        let element = self.values(record, rule);
        let (terminals, mut element) = (terminals?, element?);
        element.terminals = terminals.iter().map(|terminal| terminal.node).collect();
        named.then_some((element, terminals))
    }

    fn designator(&mut self, key: &Spot<String>) -> bool {
        let word = key.value.as_str();
        let right = word.starts_with(|c: char| c.is_alphabetic())
            && word.chars().all(|c| c.is_alphanumeric() || c == '_')
            && word != "ground";
        if !right {
            self.diagnostics.push(
                Diagnostic::error(&key.place, format!("`{word}` is no reference designator"))
                    .expected("letters, then a number: Q1, R12, DS1"),
            );
        }
        right
    }

    /// The kind of a record, which is always stated.
    fn kind(&mut self, record: &Record) -> Option<&'static KindRule> {
        let stated: Vec<(&'static KindRule, &Place)> = record
            .fields
            .iter()
            .filter_map(|(key, _)| {
                KINDS.iter().find(|rule| rule.key == key.value).map(|rule| (rule, &key.place))
            })
            .collect();
        match stated.as_slice() {
            [(rule, _)] => Some(rule),
            [] => {
                let keys = KINDS.map(|rule| rule.key);
                let guess = record.fields.iter().find_map(|(key, _)| {
                    crate::diagnostic::nearest(&key.value, keys).map(|near| (key, near))
                });
                let (place, word) =
                    guess.map_or((&record.key.place, ""), |(key, _)| (&key.place, key.value.as_str()));
                self.diagnostics.push(
                    Diagnostic::error(place, format!("`{}` does not say what it is", record.key.value))
                        .expected(format!("one of the keys {}", keys.join(", ")))
                        .nearest(word, keys),
                );
                None
            }
            [_, (second, place), ..] => {
                self.diagnostics.push(
                    Diagnostic::error(place, format!("`{}` is two things at once", record.key.value))
                        .expected(format!("one kind; take out `{}` or the other", second.key)),
                );
                None
            }
        }
    }

    fn letters(&mut self, key: &Spot<String>, rule: &KindRule) {
        let letters = key.value.trim_end_matches(|c: char| !c.is_alphabetic());
        let letters = letters.split(|c: char| c.is_ascii_digit()).next().unwrap_or("");
        if !rule.letters.contains(&letters) {
            let message = format!("`{}` is an unusual designator for {}", key.value, rule.one());
            self.diagnostics.push(
                Diagnostic::warning(&key.place, message)
                    .expected(format!("a number after {}", rule.letters.join(" or "))),
            );
        }
    }

    fn unknown_keys(&mut self, record: &Record, rule: &KindRule) {
        let known: Vec<&str> = std::iter::once(rule.key)
            .chain(rule.terminals.iter().copied())
            .chain(rule.keys.iter().copied())
            .chain(COMMON_KEYS)
            .chain(VALUE_KEYS.into_iter().filter(|_| rule.value.is_some()))
            .collect();
        for (key, _) in &record.fields {
            if !known.contains(&key.value.as_str()) {
                self.diagnostics.push(
                    Diagnostic::error(&key.place, format!("{} has no `{}`", rule.one(), key.value))
                        .expected(format!("one of {}", known.join(", ")))
                        .nearest(&key.value, known.iter().copied()),
                );
            }
        }
    }

    fn connections(&mut self, record: &Record, rule: &KindRule) -> Option<Vec<Terminal>> {
        let mut terminals = Vec::new();
        for key in rule.terminals {
            match field(record, key) {
                Some(node) => {
                    if let Some(node) = self.node(node) {
                        terminals.push(node);
                    }
                }
                // The negative pole of a source is grounded where nothing else is said.
                None if *key == "minus" => {
                    terminals.push(Terminal { node: 0, place: record.key.place.clone() })
                }
                None => self.diagnostics.push(
                    Diagnostic::error(
                        &record.key.place,
                        format!("`{}` of `{}` is not connected", key, record.key.value),
                    )
                    .expected(rule.example),
                ),
            }
        }
        if terminals.len() != rule.terminals.len() {
            return None;
        }
        if terminals.iter().all(|terminal| Some(terminal.node) == terminals.first().map(|first| first.node)) {
            self.diagnostics.push(
                Diagnostic::error(
                    &record.key.place,
                    format!("all terminals of `{}` are on the same node", record.key.value),
                )
                .expected("different nodes"),
            );
            return None;
        }
        Some(terminals)
    }

    fn node(&mut self, name: &Spot<String>) -> Option<Terminal> {
        let word = name.value.as_str();
        let lower = word.to_lowercase();
        if word != "ground" && ["ground", "gnd", "0", "earth", "0v", "vss"].contains(&lower.as_str()) {
            self.diagnostics.push(
                Diagnostic::error(&name.place, format!("`{word}` is not the reference node"))
                    .expected("`ground`, which is always its name"),
            );
            return None;
        }
        let right = word.starts_with(|c: char| c.is_alphabetic())
            && word.chars().all(|c| c.is_alphanumeric() || c == '_');
        if !right {
            self.diagnostics.push(
                Diagnostic::error(&name.place, format!("`{word}` cannot name a node"))
                    .expected("a letter, then letters, digits and `_`: `lamp`, `base`, `n_12`"),
            );
            return None;
        }
        let node = match self.network.nodes.iter().position(|node| node == word) {
            Some(node) => node,
            None => {
                self.network.nodes.push(word.to_owned());
                self.network.nodes.len() - 1
            }
        };
        Some(Terminal { node, place: name.place.clone() })
    }

    fn values(&mut self, record: &Record, rule: &'static KindRule) -> Option<Element> {
        let mut element = Element {
            designator: record.key.value.clone(),
            kind: rule.kind,
            terminals: Vec::new(),
            value: None,
            resistance: None,
            cold: None,
            inductance: None,
            part: None,
            r_th: None,
            rated_power: None,
            rated_voltage: None,
            tcr: None,
            about: field(record, "about").map(|about| about.value.clone()),
            place: record.key.place.clone(),
        };
        let text = field(record, rule.key)?;
        let before = self.diagnostics.0.len();
        match field(record, "part") {
            Some(part) => element.part = self.part(part, rule),
            // The kind's own key may name the part.
            None if rule.value.is_none() || self.parts.contains_key(&text.value) => {
                element.part = self.part(text, rule)
            }
            None => {}
        }
        let source = field(record, "source").map(|text| source_of(text, &[], &mut self.diagnostics));
        let role = field(record, "spread").map(|text| Role::parse(&text.value, &text.place));
        let ageing = field(record, "ageing").map(|text| parse_ageing(&text.value, &text.place));
        let role = role.and_then(|role| self.diagnostics.keep(role));
        let ageing = ageing.and_then(|ageing| self.diagnostics.keep(ageing));
        let (inputs_before, varies, ages) = (self.inputs.len(), role.is_some(), ageing.is_some());
        let mut reader = Reader {
            basis: self.basis,
            source,
            about: element.about.clone(),
            role,
            ageing,
            inputs: &mut self.inputs,
            diagnostics: &mut self.diagnostics,
        };
        let names_part = element.part.as_deref() == Some(text.value.as_str());
        if let Some(wanted) = main_value(rule).filter(|_| !names_part) {
            read_main(&mut reader, text, rule, wanted, &mut element);
        }
        read_further(&mut reader, record, rule, &mut element);
        let made = &self.inputs[inputs_before..];
        let ages = ages && made.iter().all(|input| input.ageing.is_none());
        let idle = [
            ("spread", varies && made.is_empty(), "vary", "spread: normal"),
            ("ageing", ages, "age", "ageing: ± 2 %"),
        ];
        for (key, idle, word, example) in idle {
            if let Some(text) = field(record, key).filter(|_| idle) {
                let message = format!("`{}` has no value of its own that could {word}", record.key.value);
                self.diagnostics.push(Diagnostic::error(&text.place, message).expected(format!(
                    "a value written in place; in the basis `R_x: {{value: 1 kΩ ± 1 %, source: ..., {example}}}`"
                )));
            }
        }
        let wrong =
            self.diagnostics.0[before..].iter().any(|d| d.severity == crate::diagnostic::Severity::Error);
        (!wrong).then_some(element)
    }

    fn part(&mut self, name: &Spot<String>, rule: &KindRule) -> Option<String> {
        let wanted = rule.part?;
        match self.parts.get(&name.value) {
            Some(kind) if *kind == wanted => Some(name.value.clone()),
            Some(kind) => {
                let message = format!("the part `{}` is {}", name.value, part_words(*kind));
                self.diagnostics.push(Diagnostic::error(&name.place, message).expected(part_words(wanted)));
                None
            }
            None => {
                let fitting =
                    self.parts.iter().filter(|(_, kind)| **kind == wanted).map(|(name, _)| name.as_str());
                self.diagnostics.push(
                    Diagnostic::error(&name.place, format!("there is no part record `{}`", name.value))
                        .expected(format!("the name of a record in `parts/` that is {}", part_words(wanted)))
                        .nearest(&name.value, fitting),
                );
                None
            }
        }
    }
}

/// What the main value of a kind must be; `None` for a device.
fn main_value(rule: &'static KindRule) -> Option<Wanted> {
    let kind = Kind::of(rule.value?);
    let source = matches!(rule.kind, ElementKind::Supply | ElementKind::Current | ElementKind::Signal);
    Some(Wanted {
        kind,
        words: rule.example,
        zero: rule.kind == ElementKind::Resistor || source,
        negative: source,
    })
}

fn read_main(
    reader: &mut Reader,
    text: &Spot<String>,
    rule: &KindRule,
    wanted: Wanted,
    element: &mut Element,
) {
    let designator = element.designator.clone();
    if rule.kind == ElementKind::Filament
        && let Some(pair) = reader.rated_pair(text, &designator)
    {
        if let Some(pair) = pair {
            element.value = Some(pair.resistance);
            element.rated_voltage = Some(pair.voltage);
            element.rated_power = pair.power;
        }
        return;
    }
    element.value = reader.value(text, &designator, wanted);
}

fn read_further(reader: &mut Reader, record: &Record, rule: &KindRule, element: &mut Element) {
    let designator = element.designator.clone();
    let mut input = |key: &str, symbol: &str, wanted: Wanted| -> Option<Formula> {
        let text = field(record, key).filter(|_| rule.keys.contains(&key))?;
        reader.value(text, &format!("{designator}.{symbol}"), wanted)
    };
    const OHMS: &str = "a resistance such as `50 Ω ± 10 %`";
    let resistance = Wanted { kind: Kind::of(Dimension::OHM), words: OHMS, zero: true, negative: false };
    let winding = if rule.kind == ElementKind::Inductor { "R_w" } else { "R_s" };
    element.resistance = input("resistance", winding, resistance);
    element.cold = input("cold", "R_cold", Wanted::positive(Dimension::OHM, OHMS));
    element.inductance =
        input("inductance", "L", Wanted::positive(Dimension::HENRY, "an inductance such as `0.4 H ± 20 %`"));
    let per_watt = "a thermal resistance such as `200 K/W`";
    element.r_th = input("r_th", "R_th", Wanted::positive(Dimension::KELVIN_PER_WATT, per_watt));
    let per_kelvin = Wanted {
        kind: Kind::of(Dimension([0, 0, 0, 0, -2])),
        words: "a temperature coefficient such as `100 ppm/K` or `-100 to 100 ppm/K`",
        zero: true,
        negative: true,
    };
    element.tcr = input("tcr", "TCR", per_kelvin);
    let mut rating = |key: &str, dimension: Dimension, words: &'static str| -> Option<Formula> {
        let text = field(record, key).filter(|_| rule.keys.contains(&key))?;
        reader.rating(text, Wanted::positive(dimension, words))
    };
    let power = rating("power", Dimension::WATT, "a rated dissipation such as `0.25 W`");
    let voltage = rating("voltage", Dimension::VOLT, "a rated voltage such as `16 V`");
    element.rated_power = power.or(element.rated_power.take());
    element.rated_voltage = voltage.or(element.rated_voltage.take());
}
