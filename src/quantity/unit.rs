//! Units: reading what people write, and choosing what to print.

use super::{Dimension, Kind, Unit};

/// Offset of the Celsius scale (K), SI Brochure 9th edition, section 2.3.1.
const CELSIUS: f64 = 273.15;

/// A unit symbol without prefix: spellings (the first is printed), dimension, factor, whether prefixes go with it.
struct Atom {
    spellings: &'static [&'static str],
    dimension: Dimension,
    factor: f64,
    prefixes: bool,
}

const fn atom(spellings: &'static [&'static str], dimension: Dimension, factor: f64, prefixes: bool) -> Atom {
    Atom { spellings, dimension, factor, prefixes }
}

const ATOMS: [Atom; 23] = [
    atom(&["V", "volt"], Dimension::VOLT, 1.0, true),
    atom(&["A", "amp"], Dimension::AMPERE, 1.0, true),
    atom(&["Ω", "\u{2126}", "ohm", "Ohm", "ohms"], Dimension::OHM, 1.0, true),
    atom(&["S"], Dimension::SIEMENS, 1.0, true),
    atom(&["W"], Dimension::WATT, 1.0, true),
    atom(&["F"], Dimension::FARAD, 1.0, true),
    atom(&["Hz"], Dimension::HERTZ, 1.0, true),
    atom(&["H"], Dimension::HENRY, 1.0, true),
    atom(&["s"], Dimension::SECOND, 1.0, true),
    atom(&["min"], Dimension::SECOND, 60.0, false),
    atom(&["h"], Dimension::SECOND, 3600.0, false),
    atom(&["K"], Dimension::KELVIN, 1.0, true),
    atom(&["°C", "℃", "degC", "ºC"], Dimension::KELVIN, 1.0, false),
    atom(&["J"], Dimension::JOULE, 1.0, true),
    atom(&["C"], Dimension::COULOMB, 1.0, true),
    atom(&["eV"], Dimension::JOULE, crate::quantity::ELECTRONVOLT, true),
    atom(&["%", "percent"], Dimension::NONE, 1e-2, false),
    atom(&["‰"], Dimension::NONE, 1e-3, false),
    atom(&["ppm"], Dimension::NONE, 1e-6, false),
    atom(&["dB"], Dimension::NONE, 1.0, false),
    atom(&["rad"], Dimension::NONE, 1.0, true),
    atom(&["°", "deg"], Dimension::NONE, std::f64::consts::PI / 180.0, false),
    atom(&["1"], Dimension::NONE, 1.0, false),
];

const PREFIXES: [(&str, &str, f64); 14] = [
    ("T", "T", 1e12),
    ("G", "G", 1e9),
    ("M", "M", 1e6),
    ("k", "k", 1e3),
    ("m", "m", 1e-3),
    ("µ", "µ", 1e-6),
    ("μ", "µ", 1e-6),
    ("u", "µ", 1e-6),
    ("n", "n", 1e-9),
    ("p", "p", 1e-12),
    ("f", "f", 1e-15),
    ("a", "a", 1e-18),
    ("c", "c", 1e-2),
    ("d", "d", 1e-1),
];

/// Spellings offered when a unit is not known.
pub(super) const OFFERED: [&str; 34] = [
    "V", "mV", "µV", "kV", "A", "mA", "µA", "nA", "pA", "Ω", "mΩ", "kΩ", "MΩ", "W", "mW", "F", "µF", "nF",
    "pF", "H", "mH", "s", "ms", "µs", "Hz", "kHz", "K", "°C", "K/W", "mV/K", "ppm/K", "%", "dB", "mJ",
];

impl Unit {
    /// The unit of a plain number.
    pub fn none() -> Unit {
        Unit { symbol: String::new(), kind: Kind::NONE, factor: 1.0, offset: 0.0 }
    }

    pub fn percent() -> Unit {
        Unit { symbol: "%".to_owned(), kind: Kind::NONE, factor: 1e-2, offset: 0.0 }
    }

    /// The degree Celsius on the temperature scale.
    pub fn celsius() -> Unit {
        Unit { symbol: "°C".to_owned(), kind: Kind::TEMPERATURE, factor: 1.0, offset: CELSIUS }
    }

    /// The value in this unit of `si`, which is in SI units; a level in decibel of the ratio `si` for `dB`.
    pub fn from_si(&self, si: f64) -> f64 {
        if self.symbol == "dB" { 20.0 * libm::log10(si.abs()) } else { (si - self.offset) / self.factor }
    }

    /// The SI value of a value in this unit; the amplitude ratio of a level in decibel (20 dB are a factor of 10).
    pub fn to_si(&self, value: f64) -> f64 {
        if self.symbol == "dB" { libm::pow(10.0, value / 20.0) } else { value * self.factor + self.offset }
    }

    /// The same unit for a difference: a temperature difference has no offset.
    pub fn of_difference(&self) -> Unit {
        if self.kind.point {
            Unit {
                symbol: "K".to_owned(),
                kind: Kind::of(Dimension::KELVIN),
                factor: self.factor,
                offset: 0.0,
            }
        } else {
            self.clone()
        }
    }
}

/// Reads a unit: a symbol with prefix (`kΩ`, `kohm`, `uF`), or a quotient or product of them (`K/W`, `mV/°C`, `V·A`).
/// Alone, `°C` is a place on the temperature scale; in a quotient it is a temperature difference.
pub fn parse_unit(text: &str) -> Option<Unit> {
    let text = text.trim();
    if text.is_empty() {
        return None;
    }
    let text = if matches!(text, "deg C" | "° C") { "°C" } else { text };
    if let Some((symbol, dimension, factor)) = prefixed(text) {
        if symbol == "°C" {
            return Some(Unit::celsius());
        }
        return Some(Unit { symbol, kind: Kind::of(dimension), factor, offset: 0.0 });
    }
    let (above, below) = match text.split_once('/') {
        Some((above, below)) => (above, Some(below)),
        None => (text, None),
    };
    let (mut symbol, mut dimension, mut factor) = product(above)?;
    if let Some(below) = below {
        let bare = below.strip_prefix('(').and_then(|rest| rest.strip_suffix(')')).unwrap_or(below);
        let (name, under, by) = product(bare)?;
        symbol = format!("{symbol}/{}", if name.contains('·') { format!("({name})") } else { name });
        dimension = dimension.over(under)?;
        factor /= by;
    } else if !text.contains(['·', '*', '⋅']) {
        return None;
    }
    Some(Unit { symbol, kind: Kind::of(dimension), factor, offset: 0.0 })
}

/// `V·A` of symbols with prefixes; `°C` counts as a difference and prints as `K`.
fn product(text: &str) -> Option<(String, Dimension, f64)> {
    let mut symbol = String::new();
    let (mut dimension, mut factor) = (Dimension::NONE, 1.0);
    for part in text.split(['·', '*', '⋅']) {
        let part = part.trim();
        let (base, twice) = match part.strip_suffix('²') {
            Some(base) => (base, 4),
            None => (part, 2),
        };
        let (name, of, by) = prefixed(base)?;
        if name == "dB" {
            return None;
        }
        let name = if name == "°C" { "K".to_owned() } else { name };
        if !symbol.is_empty() {
            symbol.push('·');
        }
        symbol.push_str(&name);
        if twice == 4 {
            symbol.push('²');
        }
        dimension = dimension.times(of.power(twice)?)?;
        factor *= if twice == 4 { by * by } else { by };
    }
    Some((symbol, dimension, factor))
}

/// One symbol with or without prefix: printed form, dimension, factor.
fn prefixed(text: &str) -> Option<(String, Dimension, f64)> {
    let find = |text: &str| ATOMS.iter().find(|atom| atom.spellings.contains(&text));
    if let Some(atom) = find(text) {
        return Some((atom.spellings[0].to_owned(), atom.dimension, atom.factor));
    }
    PREFIXES.iter().find_map(|(spelling, printed, by)| {
        let atom = find(text.strip_prefix(spelling)?).filter(|atom| atom.prefixes)?;
        Some((format!("{printed}{}", atom.spellings[0]), atom.dimension, by * atom.factor))
    })
}

/// Prefixes that go with a column of values, largest first.
const ENGINEERING: [(&str, f64); 8] =
    [("G", 1e9), ("M", 1e6), ("k", 1e3), ("", 1.0), ("m", 1e-3), ("µ", 1e-6), ("n", 1e-9), ("p", 1e-12)];

/// One unit for a whole column of values (SI): the prefix that suits the largest of them, so that the same quantity stands
/// in the same unit. Temperatures are printed in °C and their differences in K.
pub fn preferred_unit(values: &[f64], kind: Kind) -> Unit {
    if kind.point {
        return Unit::celsius();
    }
    let plain = |symbol: String, factor: f64| Unit { symbol, kind, factor, offset: 0.0 };
    let symbol = kind.dimension.to_string();
    let takes_prefix = [
        Dimension::VOLT,
        Dimension::AMPERE,
        Dimension::OHM,
        Dimension::SIEMENS,
        Dimension::WATT,
        Dimension::FARAD,
        Dimension::HENRY,
        Dimension::SECOND,
        Dimension::HERTZ,
        Dimension::JOULE,
        Dimension::COULOMB,
    ];
    if kind.dimension == Dimension::NONE {
        return Unit { kind, ..Unit::none() };
    }
    if !takes_prefix.contains(&kind.dimension) {
        if kind.dimension.over(Dimension::VOLT) == Dimension::NONE.over(Dimension::KELVIN) {
            return plain("mV/K".to_owned(), 1e-3);
        }
        return plain(symbol, 1.0);
    }
    let largest =
        values.iter().filter(|value| value.is_finite()).fold(0.0_f64, |most, value| most.max(value.abs()));
    if largest == 0.0 {
        return plain(symbol, 1.0);
    }
    // 0.9995 so that what rounds up to the next prefix already takes it.
    let (prefix, factor) = ENGINEERING
        .into_iter()
        .find(|(_, factor)| largest >= 0.9995 * factor)
        .unwrap_or(ENGINEERING[ENGINEERING.len() - 1]);
    plain(format!("{prefix}{symbol}"), factor)
}
