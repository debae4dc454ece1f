//! Printed values for table columns: the decimal points and the units of a column stand below each other.

use serde_json::Value;

use crate::quantity::{Printed, Shown, Unit, print};

/// Significant digits of a computed value in a table.
pub const DIGITS: u8 = 4;

/// A printed number with what stands before it (`≤`).
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Number {
    pub before: String,
    pub printed: Printed,
}

impl Number {
    /// As running text.
    pub fn text(&self) -> String {
        let printed = self.printed.text();
        if self.before.is_empty() { printed } else { format!("{}{SPACE}{printed}", self.before) }
    }
}

/// `value` (SI) in `unit` to `digits` significant digits.
pub fn number(value: f64, unit: &Unit, digits: u8) -> Number {
    Number { before: String::new(), printed: print(value, unit, digits) }
}

/// A value that somebody wrote down, without the zeros that printing adds: `125 °C`, not `125.000 °C`.
pub fn given(value: f64, unit: &Unit, digits: u8) -> Number {
    let mut out = number(value, unit, digits);
    if out.printed.digits.contains('.') {
        let digits = out.printed.digits.trim_end_matches(['0', NARROW]);
        out.printed.digits = digits.trim_end_matches('.').to_owned();
    }
    out
}

/// A value with its unit for a column, or `None` where there is none.
pub fn shown(value: &Shown, unit: &Unit) -> Option<Number> {
    value.value().map(|value| number(value, unit, DIGITS))
}

/// The numbers of a column as text, padded with figure spaces so that decimal points and units stand below each other in
/// a face with tabular digits; `null` where there is none.
pub fn column(numbers: Vec<Option<Number>>) -> Vec<Value> {
    let widths: Vec<Option<[Width; 2]>> = numbers.iter().map(|n| n.as_ref().map(parts)).collect();
    // A number with very many digits stands out instead of pushing its whole column aside.
    let most = |side: usize| {
        let fitting = widths.iter().flatten().map(|width| width[side]).filter(|width| width.digits <= 5);
        fitting.fold(Width::default(), Width::most)
    };
    let (before, after) = (most(0), most(1));
    let set = |(number, width): (&Option<Number>, &Option<[Width; 2]>)| match (number, width) {
        (Some(number), Some([left, right])) => {
            let mut out = String::new();
            if !number.before.is_empty() {
                out.push_str(&number.before);
                out.push(SPACE);
            }
            before.pad_from(left, &mut out);
            let plain = Printed { unit: String::new(), ..number.printed.clone() };
            out.push_str(&plain.text());
            if !number.printed.unit.is_empty() {
                after.pad_from(right, &mut out);
                if number.printed.unit != "°" {
                    out.push(SPACE);
                }
                out.push_str(&number.printed.unit);
            }
            Value::String(out)
        }
        _ => Value::Null,
    };
    numbers.iter().zip(&widths).map(set).collect()
}

const SPACE: char = '\u{a0}';
/// Between groups of three digits.
const NARROW: char = '\u{202f}';
/// As wide as a digit, and as wide as a point.
const DIGIT_SPACE: char = '\u{2007}';
const POINT_SPACE: char = '\u{2008}';

/// How wide a part of a number is: digits (and sign), decimal point, spaces between groups.
#[derive(Clone, Copy, PartialEq, Debug, Default)]
struct Width {
    digits: usize,
    points: usize,
    gaps: usize,
}

impl Width {
    fn of(text: &str) -> Width {
        let points = text.matches('.').count();
        let gaps = text.matches(NARROW).count();
        Width { digits: text.chars().count() - points - gaps, points, gaps }
    }

    fn most(self, other: Width) -> Width {
        Width {
            digits: self.digits.max(other.digits),
            points: self.points.max(other.points),
            gaps: self.gaps.max(other.gaps),
        }
    }

    /// Adds the spaces that `narrower` lacks.
    fn pad_from(&self, narrower: &Width, out: &mut String) {
        let missing =
            |wide: usize, narrow: usize, space: char| std::iter::repeat_n(space, wide.saturating_sub(narrow));
        out.extend(missing(self.points, narrower.points, POINT_SPACE));
        out.extend(missing(self.digits, narrower.digits, DIGIT_SPACE));
        out.extend(missing(self.gaps, narrower.gaps, NARROW));
    }
}

/// What stands before the decimal point, and what stands from it on. A number with a power of ten has its own place.
fn parts(number: &Number) -> [Width; 2] {
    if number.printed.exponent.is_some() {
        return [Width { digits: usize::MAX, points: 1, gaps: usize::MAX }; 2];
    }
    let digits = &number.printed.digits;
    let (whole, rest) = digits.split_at(digits.find('.').unwrap_or(digits.len()));
    [Width::of(whole), Width::of(rest)]
}
