//! Printed values for table columns: the decimal points and the units of a column stand below each other.

use serde_json::Value;

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
    let plain = if (-3..7).contains(&exponent) {
        let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
        let rounded =
            if exponent >= digits as i32 { scientific.parse::<f64>().unwrap_or(value) } else { value };
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
    const PREFIXES: [(&str, f64); 8] =
        [("G", 1e9), ("M", 1e6), ("k", 1e3), ("", 1.0), ("m", 1e-3), ("µ", 1e-6), ("n", 1e-9), ("p", 1e-12)];
    let (prefix, factor) =
        PREFIXES.into_iter().find(|(_, factor)| largest >= factor * 0.9995).unwrap_or(("p", 1e-12));
    Unit { symbol: format!("{prefix}{base}"), kind, factor, offset: 0.0 }
}

/// A value with its unit for a column, or `None` where there is none.
pub fn shown(value: &Shown, unit: &Unit) -> Option<Number> {
    value.value().map(|value| number(value, unit, DIGITS, false))
}

/// The numbers of a column as text, padded with figure spaces so that decimal points and units stand below each other in
/// a face with tabular digits; `null` where there is none.
pub fn column(numbers: Vec<Option<Number>>) -> Vec<Value> {
    let widths: Vec<Option<[usize; 2]>> = numbers.iter().map(|n| n.as_ref().map(parts)).collect();
    // A number with very many digits stands out instead of pushing its whole column aside.
    let most = |side: usize, cap: usize| {
        widths.iter().flatten().map(|width| width[side]).filter(|width| *width <= cap).max().unwrap_or(0)
    };
    let (before, after) = (most(0, 5), most(1, 5));
    let set = |(number, width): (&Option<Number>, &Option<[usize; 2]>)| match (number, width) {
        (Some(number), Some([left, right])) => {
            let mut out = String::new();
            if !number.before.is_empty() {
                out.push_str(&number.before);
                out.push(SPACE);
            }
            pad(&mut out, before.saturating_sub(*left));
            out.push_str(&number.digits);
            if !number.unit.is_empty() {
                let missing = after.saturating_sub(*right);
                if missing > 0 && *right == 0 {
                    out.push(POINT_SPACE);
                    pad(&mut out, missing - 1);
                } else {
                    pad(&mut out, missing);
                }
                out.push(SPACE);
                out.push_str(&number.unit);
            }
            Value::String(out)
        }
        _ => Value::Null,
    };
    numbers.iter().zip(&widths).map(set).collect()
}

const SPACE: char = '\u{a0}';
/// As wide as a digit, and as wide as a point.
const DIGIT_SPACE: char = '\u{2007}';
const POINT_SPACE: char = '\u{2008}';

fn pad(out: &mut String, digits: usize) {
    out.extend(std::iter::repeat_n(DIGIT_SPACE, digits));
}

/// Characters before the decimal point, and from the decimal point on. A number with a power of ten has its own place.
fn parts(number: &Number) -> [usize; 2] {
    if number.digits.contains('×') {
        return [usize::MAX; 2];
    }
    let length = number.digits.chars().count();
    let before = number.digits.chars().take_while(|c| *c != '.').count();
    [before, length - before]
}
