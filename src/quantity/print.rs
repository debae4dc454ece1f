//! Printing by the rules of the SI Brochure (9th edition, chapter 5) and ISO 80000-1: a space before the unit, a true minus
//! sign, thin spaces between groups of three from five digits on, significant digits kept.

use super::Unit;

/// A printed quantity in pieces: digits with sign, power of ten where plain digits would be long, unit.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Printed {
    pub digits: String,
    pub exponent: Option<i32>,
    pub unit: String,
}

const NARROW: char = '\u{202f}';
const NO_BREAK: char = '\u{a0}';
/// More significant digits than a double holds would be noise.
const MOST_DIGITS: u8 = 15;

/// `si` (SI units) in `unit` to `digits` significant digits.
pub fn print(si: f64, unit: &Unit, digits: u8) -> Printed {
    let (digits, exponent) = significant(unit.from_si(si), digits);
    Printed { digits, exponent, unit: unit.symbol.clone() }
}

/// [`print`] as running text with no-break spaces: `−4.70 mA`, `25 °C`, `30°`.
pub fn text(si: f64, unit: &Unit, digits: u8) -> String {
    print(si, unit, digits).text()
}

impl Printed {
    pub fn text(&self) -> String {
        let mut out = self.digits.clone();
        if let Some(exponent) = self.exponent {
            out.push_str(&format!("{NO_BREAK}×{NO_BREAK}10{}", super::dimension::superscript(exponent)));
        }
        // The degree sign of a plane angle stands close to its number; every other unit takes a space.
        if !self.unit.is_empty() {
            if self.unit != "°" {
                out.push(NO_BREAK);
            }
            out.push_str(&self.unit);
        }
        out
    }
}

/// A number to `digits` significant digits, and the power of ten that goes with it where it is very large or small.
pub fn significant(value: f64, digits: u8) -> (String, Option<i32>) {
    if !value.is_finite() {
        return (
            if value.is_nan() {
                "–"
            } else if value > 0.0 {
                "∞"
            } else {
                "−∞"
            }
            .to_owned(),
            None,
        );
    }
    let digits = usize::from(digits.clamp(1, MOST_DIGITS));
    if value == 0.0 {
        return ("0".to_owned(), None);
    }
    let scientific = format!("{value:.*e}", digits - 1);
    let (mantissa, exponent) = scientific.split_once('e').unwrap_or((&scientific, "0"));
    let exponent: i32 = exponent.parse().unwrap_or(0);
    if !(-4..7).contains(&exponent) {
        return (mantissa.replace('-', "−"), Some(exponent));
    }
    let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
    // Digits before the point that are not significant are zeros, not noise.
    let rounded: f64 = if exponent >= digits as i32 { scientific.parse().unwrap_or(value) } else { value };
    (grouped(&format!("{rounded:.decimals$}")), None)
}

/// Thin spaces between groups of three digits where there are five or more on a side of the point.
fn grouped(plain: &str) -> String {
    let (sign, number) = plain.strip_prefix('-').map_or(("", plain), |rest| ("−", rest));
    let (whole, fraction) = number.split_once('.').map_or((number, None), |(w, f)| (w, Some(f)));
    let mut out = sign.to_owned();
    for (i, c) in whole.chars().enumerate() {
        if i > 0 && whole.len() >= 5 && (whole.len() - i) % 3 == 0 {
            out.push(NARROW);
        }
        out.push(c);
    }
    if let Some(fraction) = fraction {
        out.push('.');
        for (i, c) in fraction.chars().enumerate() {
            if i > 0 && fraction.len() >= 5 && i % 3 == 0 {
                out.push(NARROW);
            }
            out.push(c);
        }
    }
    out
}

/// The fewest significant digits, from `digits` on, at which two values that differ also print differently, so that rounding
/// never contradicts a verdict.
pub fn digits_apart(one: f64, other: f64, unit: &Unit, digits: u8) -> u8 {
    if one == other {
        return digits;
    }
    (digits..=MOST_DIGITS)
        .find(|&n| significant(unit.from_si(one), n) != significant(unit.from_si(other), n))
        .unwrap_or(MOST_DIGITS)
}
