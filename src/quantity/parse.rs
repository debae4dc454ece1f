//! Quantities as people write them: `24 V ± 10 %`, `10.8 to 14.8 V, usually 12.6 V`, `4k7 ± 1 %`, `5 V +10 % -5 %`.

use super::unit::{OFFERED, parse_unit};
use super::{Dimension, Kind, Quantity, Spread, Unit, iec60062};
use crate::diagnostic::Diagnostic;
use crate::source::Place;

const EXAMPLES: &str = "a quantity such as `24 V ± 10 %`, `10.8 to 14.8 V, usually 12.6 V` or `4.7 kΩ`";

/// Reads a quantity that begins at `place`. A bare number is a plain number; an IEC 60062 code brings its own unit.
///
/// # Errors
/// Whatever is not understood, with its place: nothing after a quantity is ignored.
pub fn parse(text: &str, place: &Place) -> Result<Quantity, Diagnostic> {
    Reader { text, at: 0, place, implied: None }.quantity()
}

/// Reads a quantity whose kind is known from where it stands, so that `4k7` is a resistance and `100n` a capacitance.
///
/// # Errors
/// As [`parse`], and a unit of another dimension.
pub fn parse_as(text: &str, place: &Place, kind: Kind) -> Result<Quantity, Diagnostic> {
    let quantity = Reader { text, at: 0, place, implied: Some(kind) }.quantity()?;
    if quantity.kind.dimension != kind.dimension {
        return Err(Diagnostic::error(
            &place.within(text, 0, text.len()),
            format!("this is a value in {}, not in {}", quantity.kind.dimension, kind.dimension),
        )
        .expected(format!("a value in {}", kind.dimension)));
    }
    Ok(quantity)
}

struct Reader<'a> {
    text: &'a str,
    at: usize,
    place: &'a Place,
    implied: Option<Kind>,
}

/// A number as read, with its unit if one stood there.
struct Read {
    value: f64,
    unit: Option<Unit>,
    /// Relative tolerance from the letter at the end of an IEC 60062 code.
    tolerance: Option<f64>,
    from: usize,
    to: usize,
}

impl<'a> Reader<'a> {
    fn rest(&self) -> &'a str {
        &self.text[self.at..]
    }

    fn blanks(&mut self) {
        let trimmed = self.rest().trim_start();
        self.at = self.text.len() - trimmed.len();
    }

    fn take(&mut self, words: &[&str]) -> bool {
        self.blanks();
        for word in words {
            if let Some(after) = self.rest().strip_prefix(word) {
                let letters = word.chars().all(char::is_alphabetic);
                if letters && after.chars().next().is_some_and(char::is_alphanumeric) {
                    continue;
                }
                self.at += word.len();
                return true;
            }
        }
        false
    }

    fn error(&self, from: usize, to: usize, message: impl Into<String>) -> Diagnostic {
        Diagnostic::error(&self.place.within(self.text, from, to), message)
    }

    fn quantity(mut self) -> Result<Quantity, Diagnostic> {
        let mut first = self.read()?;
        let mut quantity = if self.take(&["to", "…", "..", "–"]) {
            self.range(first)?
        } else {
            if first.unit.is_none() {
                first.unit = self.implied_unit();
            }
            self.toleranced(first)?
        };
        self.blanks();
        if self.at < self.text.len() {
            return Err(self
                .error(
                    self.at,
                    self.text.len(),
                    format!("`{}` is not understood here", self.rest().trim_end()),
                )
                .expected("`± tolerance`, `to` another value, `, usually` a value, or nothing more"));
        }
        quantity.text = self.text.trim().to_owned();
        Ok(quantity)
    }

    fn implied_unit(&self) -> Option<Unit> {
        let kind = self.implied.filter(|kind| kind.dimension == Dimension::NONE)?;
        Some(Unit { kind, ..Unit::none() })
    }

    /// `low to high unit`, perhaps `, usually nominal unit`.
    fn range(&mut self, first: Read) -> Result<Quantity, Diagnostic> {
        let second = self.read()?;
        let unit = second.unit.clone().or_else(|| first.unit.clone()).unwrap_or_else(Unit::none);
        let low_unit = first.unit.clone().unwrap_or_else(|| unit.clone());
        self.same_dimension(&low_unit, &unit, first.from, second.to)?;
        let (low, high) = (low_unit.to_si(first.value), unit.to_si(second.value));
        if low > high {
            return Err(self
                .error(first.from, second.to, "the low end lies above the high end")
                .expected("the smaller value first"));
        }
        let comma = self.take(&[","]);
        let nominal = if self.take(&["usually", "typically", "nominal"]) {
            let usual = self.read()?;
            let usual_unit = usual.unit.clone().unwrap_or_else(|| unit.clone());
            self.same_dimension(&usual_unit, &unit, usual.from, usual.to)?;
            let value = usual_unit.to_si(usual.value);
            if !(low..=high).contains(&value) {
                return Err(self
                    .error(usual.from, usual.to, "the usual value lies outside the range")
                    .expected("a value between the ends of the range"));
            }
            value
        } else if comma {
            return Err(self
                .error(self.at, self.text.len(), "something is missing after the comma")
                .expected("`usually` and a value"));
        } else {
            (low + high) / 2.0
        };
        Ok(self.made(Spread { low, nominal, high }, unit, true))
    }

    fn same_dimension(&self, one: &Unit, other: &Unit, from: usize, to: usize) -> Result<(), Diagnostic> {
        if one.kind == other.kind {
            return Ok(());
        }
        Err(self
            .error(from, to, format!("{} and {} do not go together", named(one), named(other)))
            .expected("values in units of one dimension"))
    }

    /// `nominal unit`, perhaps with a tolerance.
    fn toleranced(&mut self, first: Read) -> Result<Quantity, Diagnostic> {
        let unit = first.unit.clone().unwrap_or_else(Unit::none);
        let nominal = unit.to_si(first.value);
        if let Some(relative) = first.tolerance {
            let by = relative * nominal;
            return Ok(self.made(Spread { low: nominal - by, nominal, high: nominal + by }, unit, true));
        }
        if self.take(&["±", "+/-", "+-"]) {
            let by = self.deviation(nominal, &unit)?;
            return Ok(self.made(Spread { low: nominal - by, nominal, high: nominal + by }, unit, true));
        }
        if self.take(&["+"]) {
            let up = self.deviation(nominal, &unit)?;
            self.take(&["/", ","]);
            let from = self.at;
            if !self.take(&["-", "−"]) {
                return Err(self
                    .error(from, self.text.len(), "the lower tolerance is missing")
                    .expected("`+10 % -5 %`"));
            }
            let down = self.deviation(nominal, &unit)?;
            return Ok(self.made(Spread { low: nominal - down, nominal, high: nominal + up }, unit, true));
        }
        Ok(self.made(Spread::exact(nominal), unit, false))
    }

    /// A deviation from `nominal` in SI units: relative in % or ppm, or a difference in the nominal's dimension.
    fn deviation(&mut self, nominal: f64, unit: &Unit) -> Result<f64, Diagnostic> {
        let read = self.read()?;
        let given = read.unit.clone();
        if read.value < 0.0 {
            return Err(self
                .error(read.from, read.to, "a tolerance is not negative")
                .expected("a value without sign"));
        }
        let relative = |unit: &Unit| matches!(unit.symbol.as_str(), "%" | "‰" | "ppm");
        match given {
            Some(given) if relative(&given) && !relative(unit) => {
                if unit.kind.point {
                    return Err(self
                        .error(read.from, read.to, "a relative tolerance of a temperature says nothing")
                        .expected("a difference such as `± 5 K`"));
                }
                Ok((read.value * given.factor * nominal).abs())
            }
            Some(given) => {
                let (given, unit) = (given.of_difference(), unit.of_difference());
                self.same_dimension(&given, &unit, read.from, read.to)?;
                Ok(read.value * given.factor)
            }
            // `24 V ± 2` counts in the unit before it only where there is none to miss.
            None if unit.symbol.is_empty() => Ok(read.value),
            None => Err(self
                .error(read.from, read.to, "the tolerance has no unit")
                .expected(format!("`%` or a value in {}", unit.symbol))),
        }
    }

    fn made(&self, spread: Spread, unit: Unit, bounded: bool) -> Quantity {
        Quantity { spread, kind: unit.kind, unit, bounded, text: String::new() }
    }

    /// A number with its unit, or an IEC 60062 code.
    fn read(&mut self) -> Result<Read, Diagnostic> {
        self.blanks();
        let from = self.at;
        let rest = self.rest();
        let length = number_length(rest);
        if length == 0 {
            if let Some(read) = self.code("") {
                self.at = read.to;
                return Ok(read);
            }
            let end = from + rest.find([' ', ',']).unwrap_or(rest.len());
            let message = if rest.is_empty() {
                "a value is missing".to_owned()
            } else {
                format!("`{}` is no number", &self.text[from..end])
            };
            return Err(self.error(from, end, message).expected(EXAMPLES));
        }
        let digits = &rest[..length];
        if let Some(read) = self.code(digits) {
            self.at = read.to;
            return Ok(read);
        }
        self.at += length;
        let value: f64 = digits.replace('−', "-").parse().unwrap_or(f64::NAN);
        if !value.is_finite() {
            return Err(self
                .error(from, self.at, format!("`{digits}` is not a finite number"))
                .expected(EXAMPLES));
        }
        let unit = self.unit()?;
        Ok(Read { value, unit, tolerance: None, from, to: self.at })
    }

    /// The unit after a number, if one stands there.
    fn unit(&mut self) -> Result<Option<Unit>, Diagnostic> {
        let back = self.at;
        self.blanks();
        let from = self.at;
        let rest = self.rest();
        let length = rest
            .char_indices()
            .find(|(i, c)| {
                let slash_before_sign = *c == '/' && rest[i + 1..].trim_start().starts_with(['-', '−']);
                !(c.is_alphabetic() || "°%‰Ω/·⋅*²().1".contains(*c)) || slash_before_sign
            })
            .map_or(rest.len(), |(i, _)| i);
        let word = &rest[..length];
        let word = word.trim_end_matches('.');
        if word.is_empty() || matches!(word, "to" | "usually" | "typically" | "nominal") {
            self.at = back;
            return Ok(None);
        }
        if word == "deg" && rest[length..].trim_start().starts_with('C') {
            self.at = from + rest.find('C').map_or(length, |at| at + 1);
            return Ok(Some(Unit::celsius()));
        }
        match parse_unit(word) {
            Some(unit) => {
                self.at = from + word.len();
                Ok(Some(unit))
            }
            None => Err(self
                .error(from, from + word.len(), format!("`{word}` is no unit"))
                .expected("a unit such as V, mA, kΩ, µF, °C, K/W, mV/K or %")
                .nearest(word, OFFERED)),
        }
    }

    /// An IEC 60062 code (`4k7`, `R47`, `100n`, `4R7J`) at the reading position, of which `digits` were seen.
    fn code(&self, digits: &str) -> Option<Read> {
        let rest = self.rest();
        if !digits.chars().all(|c| c.is_ascii_digit()) {
            return None;
        }
        let end = rest.find(|c: char| !c.is_alphanumeric()).unwrap_or(rest.len());
        let word = &rest[..end];
        let wanted = self.implied.map(|kind| kind.dimension);
        let mut tolerance = None;
        let found = iec60062::value(word, wanted).or_else(|| {
            let letter = word.chars().next_back()?;
            tolerance = iec60062::tolerance(letter);
            tolerance.and(iec60062::value(&word[..word.len() - letter.len_utf8()], wanted))
        });
        let (value, dimension) = found?;
        let unit = super::preferred_unit(&[value], Kind::of(dimension));
        Some(Read {
            value: value / unit.factor,
            unit: Some(unit),
            tolerance,
            from: self.at,
            to: self.at + end,
        })
    }
}

fn named(unit: &Unit) -> String {
    if unit.symbol.is_empty() { "a plain number".to_owned() } else { format!("`{}`", unit.symbol) }
}

/// The length in bytes of the number at the start of `text`: sign, digits, point, exponent.
pub(crate) fn number_length(text: &str) -> usize {
    let bytes = text.as_bytes();
    let mut at = match text.chars().next() {
        Some(sign @ ('+' | '-' | '−')) => sign.len_utf8(),
        _ => 0,
    };
    let digits = |from: usize| bytes[from..].iter().take_while(|byte| byte.is_ascii_digit()).count();
    let whole = digits(at);
    at += whole;
    let mut any = whole > 0;
    if bytes.get(at) == Some(&b'.') {
        let fraction = digits(at + 1);
        if fraction > 0 {
            at += 1 + fraction;
            any = true;
        }
    }
    if !any {
        return 0;
    }
    if matches!(bytes.get(at), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(bytes.get(at + 1), Some(b'+' | b'-')));
        let exponent = digits(at + 1 + sign);
        if exponent > 0 {
            at += 1 + sign + exponent;
        }
    }
    at
}
