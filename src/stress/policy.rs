//! Derating policies: which share of a rating a notebook allows in normal conditions.
//!
//! ```yaml
//! name: Harbour electronics derating
//! source: specification HE-100 clause 7
//! transistor: {V_CEO: 75 %, I_C: 75 %, P_tot: 60 %, T_j: 115 °C}
//! resistor: {P: 60 %, V: 80 %}
//! ```
//! A limit on junction temperature is a temperature; every other limit is a share of the rating, at most 100 %.

use crate::circuit::ElementKind;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::RatingQuantity;
use crate::quantity::{self, Kind, Source};
use crate::source::{File, Place};
use crate::worksheet::{Spot, source_of};
use crate::yaml::{self, Key, Node};

/// What a policy tells apart.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Class {
    Transistor,
    Diode,
    Zener,
    Resistor,
    Capacitor,
    Filament,
    Coil,
}

use RatingQuantity as Q;

/// The classes with their key and the ratings that can be derated.
const CLASSES: [(Class, &str, &[RatingQuantity]); 7] = [
    (
        Class::Transistor,
        "transistor",
        &[
            Q::CollectorEmitter,
            Q::CollectorBase,
            Q::EmitterBase,
            Q::CollectorCurrent,
            Q::PeakCollectorCurrent,
            Q::BaseCurrent,
            Q::Dissipation,
            Q::JunctionTemperature,
        ],
    ),
    (
        Class::Diode,
        "diode",
        &[Q::Reverse, Q::ForwardCurrent, Q::PeakForwardCurrent, Q::Dissipation, Q::JunctionTemperature],
    ),
    (
        Class::Zener,
        "zener",
        &[Q::ZenerCurrent, Q::ForwardCurrent, Q::PeakForwardCurrent, Q::Dissipation, Q::JunctionTemperature],
    ),
    (Class::Resistor, "resistor", &[Q::Dissipation, Q::Voltage, Q::Current]),
    (Class::Capacitor, "capacitor", &[Q::Voltage]),
    (Class::Filament, "filament", &[Q::Voltage, Q::Dissipation, Q::Current]),
    (Class::Coil, "coil", &[Q::Voltage, Q::Dissipation, Q::Current]),
];

/// A limit in normal conditions.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Derated {
    /// Share of the rating, above 0 and at most 1.
    Share(f64),
    /// Absolute temperature (K).
    Temperature(f64),
}

/// A derating policy.
#[derive(Clone, PartialEq, Debug)]
pub struct Policy {
    /// Empty where there is no policy.
    pub name: String,
    /// Where the policy comes from.
    pub source: Option<Source>,
    limits: Vec<(Class, RatingQuantity, Derated)>,
}

impl Policy {
    /// No derating: the limit is the rating.
    pub fn none() -> Policy {
        Policy { name: String::new(), source: None, limits: Vec::new() }
    }

    /// The limit in normal conditions of a rating (SI); the rating itself where the policy says nothing of it.
    pub fn limit(&self, class: Class, quantity: RatingQuantity, rating: f64) -> f64 {
        match self.derated(class, quantity) {
            Some(Derated::Share(share)) => share * rating,
            Some(Derated::Temperature(limit)) => limit.min(rating),
            None => rating,
        }
    }

    /// What the policy says of a rating.
    pub fn derated(&self, class: Class, quantity: RatingQuantity) -> Option<Derated> {
        self.limits.iter().find(|(c, q, _)| *c == class && *q == quantity).map(|(_, _, derated)| *derated)
    }
}

/// The class under which a policy speaks of an element; `None` for what has no ratings.
pub fn class(kind: ElementKind) -> Option<Class> {
    match kind {
        ElementKind::Npn | ElementKind::Pnp => Some(Class::Transistor),
        ElementKind::Diode => Some(Class::Diode),
        ElementKind::Zener => Some(Class::Zener),
        ElementKind::Resistor => Some(Class::Resistor),
        ElementKind::Capacitor => Some(Class::Capacitor),
        ElementKind::Filament => Some(Class::Filament),
        ElementKind::Coil => Some(Class::Coil),
        ElementKind::Inductor | ElementKind::Supply | ElementKind::Current | ElementKind::Signal => None,
    }
}

/// The key of a rating inside a class: dissipation of a passive part is plain `P`.
fn key(class: Class, quantity: RatingQuantity) -> &'static str {
    let device = matches!(class, Class::Transistor | Class::Diode | Class::Zener);
    if quantity == Q::Dissipation && !device { "P" } else { quantity.symbol() }
}

/// Reads a policy file.
///
/// # Errors
/// Malformed YAML, unknown keys, limits that are no limits: all of them, each with its place.
pub fn read(file: &File) -> Result<Policy, Diagnostics> {
    let origin = Place::new(&file.path, 1, 1, 0);
    let text = file.text().map_err(|at| {
        Diagnostics::from(
            Diagnostic::error(&origin, format!("byte {at} is no text")).expected("YAML in UTF-8"),
        )
    })?;
    let root = yaml::read(text, &file.path, 1)?;
    let mut errors = Diagnostics::default();
    let entries = root.map("`name:`, `source:` and limits such as `resistor: {P: 60 %}`")?;
    let known: Vec<&str> = ["name", "source"].into_iter().chain(CLASSES.map(|(_, key, _)| key)).collect();
    yaml::refuse_unknown_keys(entries, &known, &mut errors);
    let mut text_of = |key: &str, what: &str| match root.get(key) {
        Some(node) => errors.keep(
            node.scalar(what).map(|text| Spot { value: text.trim().to_owned(), place: node.place.clone() }),
        ),
        None => {
            errors
                .push(Diagnostic::error(&origin, format!("`{key}` of the policy is missing")).expected(what));
            None
        }
    };
    let name = text_of("name", "what the policy is called");
    let source = text_of("source", "where it comes from: a specification, a standard, `assumed: ...`");
    let mut policy = Policy::none();
    policy.name = name.map_or_else(String::new, |name| name.value);
    policy.source = source.map(|source| source_of(&source, &[], &mut errors));
    for (class, key, quantities) in CLASSES {
        if let Some(node) = root.get(key) {
            limits(node, class, quantities, &mut policy, &mut errors);
        }
    }
    // A source of which it is not clear what it is gives a warning, and that is no reason to refuse the policy.
    if errors.has_errors() { Err(errors) } else { Ok(policy) }
}

fn limits(
    node: &Node,
    class: Class,
    quantities: &[RatingQuantity],
    policy: &mut Policy,
    errors: &mut Diagnostics,
) {
    let keys: Vec<&str> = quantities.iter().map(|&quantity| key(class, quantity)).collect();
    let expected = format!("limits of {}", keys.join(", "));
    let Some(entries) = errors.keep(node.map(&expected)) else { return };
    yaml::refuse_unknown_keys(entries, &keys, errors);
    for (name, value) in entries {
        let Some(&quantity) = quantities.iter().find(|&&quantity| key(class, quantity) == name.name) else {
            continue;
        };
        if let Some(derated) = errors.keep(limit(name, value, quantity)) {
            policy.limits.push((class, quantity, derated));
        }
    }
}

fn limit(key: &Key, node: &Node, quantity: RatingQuantity) -> Result<Derated, Diagnostic> {
    let temperature = quantity == Q::JunctionTemperature;
    let (kind, what) = if temperature {
        (Kind::TEMPERATURE, "a temperature such as `115 °C`")
    } else {
        (Kind::NONE, "a share of the rating, at most 100 %, such as `75 %`")
    };
    let text = node.scalar(what)?;
    let found = quantity::parse_as(text, &node.place, kind).map_err(|found| found.expected(what))?;
    let value = found.spread.nominal;
    let refused = |message: String| Err(Diagnostic::error(&node.place, message).expected(what));
    if found.bounded {
        return refused(format!("the limit of `{}` has a tolerance", key.name));
    }
    if temperature {
        return Ok(Derated::Temperature(value));
    }
    if value > 0.0 && value <= 1.0 {
        Ok(Derated::Share(value))
    } else {
        refused(format!("`{}` is no share of a rating", text.trim()))
    }
}
