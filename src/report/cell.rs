//! Printed values for table columns: the decimal points and the units of a column stand below each other.

use serde_json::{Value, json};

use crate::quantity::{Dimension, Kind, Shown, Unit};

/// Significant digits of a computed value in a table.
pub const DIGITS: usize = 4;

/// A printed number: digits (with sign), unit, and what stands before it (`≤`).
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Number {
    pub before: String,
    pub digits: String,
    pub unit: String,
}

impl Number {
    /// As running text.
    pub fn text(&self) -> String {
        let mut out = String::new();
        for part in [&self.before, &self.digits, &self.unit] {
            if !part.is_empty() {
                if !out.is_empty() {
                    out.push('\u{a0}');
                }
                out.push_str(part);
            }
        }
        out
    }
}

/// `value` (SI) in `unit` to `digits` significant digits; whole numbers of a limit are kept short by `trim`.
pub fn number(value: f64, unit: &Unit, digits: usize, trim: bool) -> Number {
    let shown = (value - unit.offset) / if unit.factor == 0.0 { 1.0 } else { unit.factor };
    Number { before: String::new(), digits: significant(shown, digits, trim), unit: unit.symbol.clone() }
}

/// `value` to `digits` significant digits, with a true minus sign; a power of ten where plain digits would be long.
pub fn significant(value: f64, digits: usize, trim: bool) -> String {
    if !value.is_finite() {
        return "–".to_owned();
    }
    if value == 0.0 {
        return "0".to_owned();
    }
    let digits = digits.clamp(1, 15);
    let scientific = format!("{:.*e}", digits - 1, value);
    let (mantissa, exponent) = scientific.split_once('e').unwrap_or((&scientific, "0"));
    let exponent: i32 = exponent.parse().unwrap_or(0);
    let plain = if (-4..7).contains(&exponent) {
        let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
        let rounded = if exponent >= digits as i32 {
            scientific.parse::<f64>().unwrap_or(value)
        } else {
            value
        };
        let text = format!("{rounded:.decimals$}");
        if trim { trimmed(&text) } else { text }
    } else {
        let mantissa = if trim { trimmed(mantissa) } else { mantissa.to_owned() };
        format!("{mantissa}\u{a0}×\u{a0}10{}", superscript(exponent))
    };
    plain.replace('-', "−")
}

fn trimmed(text: &str) -> String {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text.to_owned()
    }
}

fn superscript(exponent: i32) -> String {
    const DIGITS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    let turn = |c: char| c.to_digit(10).and_then(|digit| DIGITS.get(digit as usize)).copied().unwrap_or('⁻');
    exponent.to_string().chars().map(turn).collect()
}

/// The unit in which a column of values of one dimension is printed: the coherent unit with the prefix that puts the
/// largest value between 1 and 1000. Temperatures are printed in °C.
pub fn common_unit(kind: Kind, values: impl IntoIterator<Item = f64>) -> Unit {
    if kind.point {
        return Unit { symbol: "°C".to_owned(), kind, factor: 1.0, offset: 273.15 };
    }
    let base = kind.dimension.to_string();
    let plain = |symbol: &str| Unit { symbol: symbol.to_owned(), kind, factor: 1.0, offset: 0.0 };
    if kind.dimension == Dimension::NONE {
        return plain("");
    }
    const PREFIXED: [Dimension; 10] = [
        Dimension::VOLT,
        Dimension::AMPERE,
        Dimension::WATT,
        Dimension::OHM,
        Dimension::SIEMENS,
        Dimension::FARAD,
        Dimension::HENRY,
        Dimension::SECOND,
        Dimension::HERTZ,
        Dimension::JOULE,
    ];
    let largest = values.into_iter().filter(|v| v.is_finite()).fold(0.0f64, |most, v| most.max(v.abs()));
    if largest == 0.0 || !PREFIXED.contains(&kind.dimension) {
        return plain(&base);
    }
    const PREFIXES: [(&str, f64); 8] = [
        ("G", 1e9),
        ("M", 1e6),
        ("k", 1e3),
        ("", 1.0),
        ("m", 1e-3),
        ("µ", 1e-6),
        ("n", 1e-9),
        ("p", 1e-12),
    ];
    let (prefix, factor) =
        PREFIXES.into_iter().find(|(_, factor)| largest >= factor * 0.9995).unwrap_or(("p", 1e-12));
    Unit { symbol: format!("{prefix}{base}"), kind, factor, offset: 0.0 }
}

/// A value with its unit for a column, or `None` where there is none.
pub fn shown(value: &Shown, unit: &Unit) -> Option<Number> {
    value.value().map(|value| number(value, unit, DIGITS, false))
}

/// Sets the numbers of a column below each other: padding before the digits and between digits and unit, in em.
pub fn column(numbers: Vec<Option<Number>>) -> Vec<Value> {
    let widths: Vec<Option<(f64, f64)>> = numbers.iter().map(|n| n.as_ref().map(parts)).collect();
    let most = |pick: fn(&(f64, f64)) -> f64| {
        widths.iter().flatten().map(pick).fold(0.0f64, |most, width| most.max(width))
    };
    // A number with many digits would push the whole column aside; beyond this it stands out to the left.
    let (before, after) = (most(|w| w.0).min(4.0), most(|w| w.1).min(3.0));
    let set = |(number, width): (&Option<Number>, &Option<(f64, f64)>)| match (number, width) {
        (Some(number), Some((left, right))) => json!({
            "r": number.before, "d": number.digits, "u": number.unit,
            "a": round(before - left), "b": round(after - right),
        }),
        _ => Value::Null,
    };
    numbers.iter().zip(&widths).map(set).collect()
}

/// Width in em of what stands before the decimal point and of what follows it, in the text face with tabular digits.
fn parts(number: &Number) -> (f64, f64) {
    let (whole, rest) = match number.digits.find('.') {
        Some(at) => number.digits.split_at(at),
        None => (number.digits.as_str(), ""),
    };
    let before = if number.before.is_empty() { 0.0 } else { width(&number.before) + SPACE };
    (before + width(whole), width(rest))
}

/// Advance widths of the text face in em: digits, sign and point; anything else counts as a digit.
const DIGIT: f64 = 0.465;
const SPACE: f64 = 0.25;

fn width(text: &str) -> f64 {
    text.chars()
        .map(|c| match c {
            '−' | '≤' | '≥' | '<' | '>' | '=' | '×' | '±' => 0.56,
            '.' => 0.24,
            '\u{a0}' => SPACE,
            '⁰'..='⁹' | '¹' | '²' | '³' | '⁻' => 0.3,
            _ => DIGIT,
        })
        .sum()
}

fn round(em: f64) -> f64 {
    (em.max(0.0) * 1000.0).round() / 1000.0
}
