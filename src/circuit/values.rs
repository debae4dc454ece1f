//! Values of elements: a quantity written in place, which becomes an input of its own, or a formula over the basis.

use std::collections::BTreeMap;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::{Expr, Formula};
use crate::quantity::{self, Dimension, Kind, Quantity, Role, Source, Sourced, Spread};
use crate::worksheet::{Spot, quantity_as};

/// A value written with an element: an input named like its designator (`R1`) or after what it is (`DS1.R_cold`).
#[derive(Clone, PartialEq, Debug)]
pub struct InPlace {
    pub symbol: String,
    pub sourced: Sourced,
    pub description: Option<String>,
    /// How it varies within its limits, where the record says so.
    pub role: Option<Role>,
    /// How far it drifts with age, as a share of its value; a main value only.
    pub ageing: Option<Quantity>,
}

/// What the ratings of a filament say.
pub(super) struct RatedPair {
    pub resistance: Formula,
    pub voltage: Formula,
    pub power: Option<Formula>,
}

/// What values of one record are read with.
pub(super) struct Reader<'a> {
    /// Names of the design basis.
    pub basis: &'a BTreeMap<String, Kind>,
    /// Where the values of this record come from.
    pub source: Option<Source>,
    pub about: Option<String>,
    pub role: Option<Role>,
    /// Drift with age of the main value.
    pub ageing: Option<Quantity>,
    pub inputs: &'a mut Vec<InPlace>,
    pub diagnostics: &'a mut Diagnostics,
}

/// What a value must be.
#[derive(Clone, Copy)]
pub(super) struct Wanted {
    pub kind: Kind,
    /// In words with an example.
    pub words: &'static str,
    /// Zero is allowed.
    pub zero: bool,
    /// Negative values are allowed.
    pub negative: bool,
}

impl Wanted {
    pub const fn positive(dimension: Dimension, words: &'static str) -> Wanted {
        Wanted { kind: Kind::of(dimension), words, zero: false, negative: false }
    }
}

impl Reader<'_> {
    /// A value: a number in place becomes the input `symbol`; anything else is a formula over the basis.
    pub fn value(&mut self, text: &Spot<String>, symbol: &str, wanted: Wanted) -> Option<Formula> {
        if !looks_like_number(&text.value) {
            return self.formula(text, wanted);
        }
        match quantity_as(text, wanted.kind) {
            Ok(quantity) => self.in_place(quantity, text, symbol, wanted),
            // `2 * R_1` begins with a number too.
            Err(found) => match Formula::parse(&text.value, &text.place) {
                Ok(formula) if !formula.names().is_empty() => self.checked(formula, wanted),
                _ => {
                    self.diagnostics.push(found);
                    None
                }
            },
        }
    }

    /// A rating: one number in place, which is a limit and no input, or a formula over the basis.
    pub fn rating(&mut self, text: &Spot<String>, wanted: Wanted) -> Option<Formula> {
        if looks_like_number(&text.value) {
            let quantity = match quantity_as(text, wanted.kind) {
                Ok(quantity) => quantity,
                Err(found) => {
                    self.diagnostics.push(found);
                    return None;
                }
            };
            self.fits(&quantity, text, wanted)?;
            if quantity.bounded {
                self.diagnostics.push(
                    Diagnostic::error(&text.place, "a rating is one number, without a tolerance")
                        .expected(wanted.words),
                );
                return None;
            }
            return Some(literal(&quantity, text));
        }
        self.formula(text, wanted)
    }

    /// The rated voltage and power (or current) of a filament: `12 V 1.2 W ± 5 %`. Its hot resistance is the input.
    /// `None`: the text is no such pair; `Some(None)`: it is one, and wrong.
    pub fn rated_pair(&mut self, text: &Spot<String>, symbol: &str) -> Option<Option<RatedPair>> {
        let (first, second) = split_pair(text)?;
        let volts = quantity::parse(&first.value, &first.place).ok()?;
        if volts.kind != Kind::of(Dimension::VOLT) {
            return None;
        }
        let other = match quantity::parse(&second.value, &second.place) {
            Ok(other) => other,
            Err(found) => {
                self.diagnostics.push(found);
                return Some(None);
            }
        };
        let is_power = other.kind == Kind::of(Dimension::WATT);
        if (!is_power && other.kind != Kind::of(Dimension::AMPERE))
            || volts.spread.low <= 0.0
            || other.spread.low <= 0.0
        {
            self.diagnostics.push(
                Diagnostic::error(&second.place, format!("`{}` does not rate a filament", second.value))
                    .expected("rated voltage, then rated power or current above zero: `12 V 1.2 W ± 5 %`"),
            );
            return Some(None);
        }
        // A filament that takes more power at its rated voltage has the lower resistance.
        let ohms = |v: f64, other: f64| if is_power { v * v / other } else { v / other };
        let spread = Spread {
            low: ohms(volts.spread.low, other.spread.high),
            nominal: ohms(volts.spread.nominal, other.spread.nominal),
            high: ohms(volts.spread.high, other.spread.low),
        };
        let kind = Kind::of(Dimension::OHM);
        let unit = quantity::Unit { symbol: "Ω".into(), kind, factor: 1.0, offset: 0.0 };
        let bounded = volts.bounded || other.bounded;
        let quantity = Quantity { spread, kind, unit, bounded, text: text.value.clone() };
        if !(spread.low.is_finite() && spread.high.is_finite()) {
            self.diagnostics.push(
                Diagnostic::error(&text.place, "these ratings give no resistance").expected("`12 V 1.2 W`"),
            );
            return Some(None);
        }
        let value = self.input(quantity, text, symbol);
        let power = is_power.then(|| literal(&other, &second));
        Some(Some(RatedPair { resistance: value, voltage: literal(&volts, &first), power }))
    }

    fn in_place(
        &mut self,
        quantity: Quantity,
        text: &Spot<String>,
        symbol: &str,
        wanted: Wanted,
    ) -> Option<Formula> {
        self.fits(&quantity, text, wanted)?;
        Some(self.input(quantity, text, symbol))
    }

    fn fits(&mut self, quantity: &Quantity, text: &Spot<String>, wanted: Wanted) -> Option<()> {
        let message = if quantity.kind != wanted.kind {
            let found = if quantity.kind == Kind::NONE { "it has no unit" } else { "the unit does not fit" };
            format!("`{}`: {found}", text.value)
        } else if !wanted.negative && quantity.spread.low < 0.0 {
            format!("`{}` is negative", text.value)
        } else if !wanted.zero && !wanted.negative && quantity.spread.low == 0.0 {
            format!("`{}` reaches zero", text.value)
        } else {
            return Some(());
        };
        self.diagnostics.push(Diagnostic::error(&text.place, message).expected(wanted.words));
        None
    }

    fn input(&mut self, quantity: Quantity, text: &Spot<String>, symbol: &str) -> Formula {
        self.inputs.push(InPlace {
            symbol: symbol.to_owned(),
            sourced: Sourced { quantity, source: self.source.clone(), place: text.place.clone() },
            description: self.about.clone(),
            role: self.role,
            // A symbol with a point is a further value of the element.
            ageing: self.ageing.clone().filter(|_| !symbol.contains('.')),
        });
        Formula {
            expr: Expr::Name { name: symbol.to_owned(), place: text.place.clone() },
            text: symbol.to_owned(),
            place: text.place.clone(),
        }
    }

    fn formula(&mut self, text: &Spot<String>, wanted: Wanted) -> Option<Formula> {
        match Formula::parse(&text.value, &text.place) {
            Ok(formula) => self.checked(formula, wanted),
            Err(found) => {
                self.diagnostics.extend(found);
                None
            }
        }
    }

    /// Checks that a formula names the design basis only, and what it comes to.
    fn checked(&mut self, formula: Formula, wanted: Wanted) -> Option<Formula> {
        let mut right = true;
        for (name, place) in formula.names() {
            if !self.basis.contains_key(name) {
                right = false;
                self.diagnostics.push(
                    Diagnostic::error(place, format!("`{name}` is not in the design basis"))
                        .expected(format!("{}, or names of the design basis", wanted.words))
                        .nearest(name, self.basis.keys().map(String::as_str)),
                );
            }
        }
        if !right {
            return None;
        }
        let kind = |name: &str| self.basis.get(name).copied();
        match formula.kind(&kind, &mut self.basis.keys().map(String::as_str)) {
            Ok(kind) if kind == wanted.kind => Some(formula),
            Ok(kind) => {
                let message = format!("`{}` comes to {}", formula.text, kind.dimension);
                self.diagnostics.push(Diagnostic::error(&formula.place, message).expected(wanted.words));
                None
            }
            Err(found) => {
                self.diagnostics.extend(found);
                None
            }
        }
    }
}

fn literal(quantity: &Quantity, text: &Spot<String>) -> Formula {
    Formula {
        expr: Expr::Literal {
            value: quantity.spread.nominal,
            unit: quantity.unit.clone(),
            written: text.value.clone(),
            place: text.place.clone(),
        },
        text: text.value.clone(),
        place: text.place.clone(),
    }
}

fn looks_like_number(text: &str) -> bool {
    let rest = text.trim_start_matches(['+', '-', '−', '±', '.', ' ']);
    rest.starts_with(|c: char| c.is_ascii_digit())
}

/// Cuts `12 V 1.2 W ± 5 %` before the second number.
fn split_pair(text: &Spot<String>) -> Option<(Spot<String>, Spot<String>)> {
    let whole = text.value.as_str();
    let after_number = whole.find(char::is_whitespace)?;
    let at = whole
        .char_indices()
        .skip_while(|(at, _)| *at < after_number)
        .zip(whole.char_indices().skip_while(|(at, _)| *at < after_number).skip(1))
        .find(|((_, before), (_, c))| before.is_whitespace() && c.is_ascii_digit())
        .map(|(_, (at, _))| at)?;
    let cut = |from: usize, to: usize| {
        let part = whole.get(from..to).unwrap_or("").trim_end();
        Spot { value: part.to_owned(), place: text.place.within(whole, from, from + part.len()) }
    };
    Some((cut(0, at), cut(at, whole.len())))
}
