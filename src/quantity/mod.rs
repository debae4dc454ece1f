//! A number with dimension, spread and source.
//!
//! One unit system inside (SI, `f64`), units only at the edges. A temperature is kept in kelvin; [`Kind::point`] tells a
//! temperature on the thermodynamic scale (printed in °C) from a temperature difference (printed in K), so that the
//! 273.15 K between the scales never enters a difference.

mod dimension;
pub mod iec60062;
pub mod iec60063;
mod parse;
mod print;
mod source;
mod unit;
mod variation;

pub use dimension::Dimension;
pub(crate) use parse::{number_length, spaced_celsius};
pub use parse::{parse, parse_as};
pub use print::{Printed, digits_apart, print, significant, text};
pub use source::parse_source;
pub use unit::{parse_unit, preferred_unit};
pub use variation::{Distribution, LIMITS_AT, Role, parse_ageing};

use serde::{Deserialize, Serialize};

use crate::source::Place;

/// Electronvolt in joule (exact; CODATA 2022, SI 2019).
pub const ELECTRONVOLT: f64 = 1.602_176_634e-19;

/// What sort of quantity a number is.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
pub struct Kind {
    pub dimension: Dimension,
    /// A temperature, not a temperature difference. Only ever set with dimension kelvin.
    pub point: bool,
}

impl Kind {
    pub const NONE: Kind = Kind::of(Dimension::NONE);
    pub const TEMPERATURE: Kind = Kind { dimension: Dimension::KELVIN, point: true };

    pub const fn of(dimension: Dimension) -> Kind {
        Kind { dimension, point: false }
    }
}

/// A unit as it is written: `value_si = value * factor + offset`.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Unit {
    /// As printed: `mA`, `kΩ`, `°C`, `K/W`, `%`; empty for a plain number.
    pub symbol: String,
    pub kind: Kind,
    pub factor: f64,
    pub offset: f64,
}

/// Low, nominal and high value in SI units, `low <= nominal <= high`.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct Spread {
    pub low: f64,
    pub nominal: f64,
    pub high: f64,
}

impl Spread {
    pub const fn exact(value: f64) -> Spread {
        Spread { low: value, nominal: value, high: value }
    }

    pub fn is_exact(&self) -> bool {
        self.low == self.high
    }
}

/// A quantity as somebody wrote it.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Quantity {
    pub spread: Spread,
    pub kind: Kind,
    /// The unit in which it was written and is printed.
    pub unit: Unit,
    /// A tolerance or range was written; a bare number has none, and its spread is exact.
    pub bounded: bool,
    /// As written, for the reader.
    pub text: String,
}

/// Where a number comes from.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Origin {
    DataSheet,
    Measurement,
    Standard,
    Specification,
    Calculation,
    Assumption,
    Memory,
}

impl Origin {
    /// Such a number bounds nothing by itself: a verdict that leans on it says so.
    pub fn is_weak(self) -> bool {
        matches!(self, Origin::Assumption | Origin::Memory)
    }
}

/// Where a number comes from, as somebody wrote it.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Source {
    pub origin: Origin,
    /// Document, revision, page; or what is assumed and why.
    pub text: String,
}

/// A result: a number that was confirmed, or why there is none. No result travels as a bare number.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Shown {
    Value(f64),
    NotShown(String),
}

impl Shown {
    pub fn value(&self) -> Option<f64> {
        match self {
            Shown::Value(value) => Some(*value),
            Shown::NotShown(_) => None,
        }
    }
}

/// A named quantity with its source and its place in a file.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Sourced {
    pub quantity: Quantity,
    /// `None` where the author named no source; it then counts as an assumption.
    pub source: Option<Source>,
    pub place: Place,
}
