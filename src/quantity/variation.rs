//! How a quantity varies within its limits (ECSS-Q-HB-30-01A splits every variation like this): bias-like or at random, and
//! then by which distribution.

use serde::{Deserialize, Serialize};

use crate::diagnostic::Diagnostic;
use crate::source::Place;

use super::{Kind, Quantity, Spread};

/// Where a normal distribution has its limits when nothing else is stated: at three standard deviations (common practice).
pub const LIMITS_AT: f64 = 3.0;
/// Standard deviations at which the limits of a normal distribution may be stated.
const SIGMAS: std::ops::RangeInclusive<f64> = 1.0..=8.0;
const WORDS: [&str; 4] = ["bias", "uniform", "triangular", "normal"];

/// How a random quantity lies within its limits, which are symmetric about their middle.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "distribution", rename_all = "kebab-case")]
pub enum Distribution {
    /// Nothing is known but the limits: rectangular (JCGM 100:2008, 4.3.7).
    Uniform,
    /// Values near the middle are likelier (JCGM 100:2008, 4.3.9).
    Triangular,
    /// Limits at so many standard deviations; a specimen beyond them is not delivered.
    Normal { sigmas: f64 },
}

/// What is done with a variation.
#[derive(Clone, Copy, PartialEq, Debug, Default, Serialize, Deserialize)]
#[serde(tag = "role", rename_all = "kebab-case")]
pub enum Role {
    /// The same for every specimen at a time, or drifting one way (supply, ambient, load, age): it stays at its worst end and
    /// is added algebraically.
    #[default]
    Bias,
    /// Another value for every specimen (purchase tolerance).
    Random(Distribution),
}

impl Distribution {
    /// Standard deviation as a share of the half-width (JCGM 100:2008, 4.3).
    pub fn deviation(self) -> f64 {
        match self {
            Distribution::Uniform => 1.0 / 3.0_f64.sqrt(),
            Distribution::Triangular => 1.0 / 6.0_f64.sqrt(),
            Distribution::Normal { sigmas } => 1.0 / sigmas,
        }
    }
}

impl Role {
    pub const UNIFORM: Role = Role::Random(Distribution::Uniform);

    /// Reads `bias`, `uniform`, `triangular`, `normal` or `normal 2 sigma`.
    ///
    /// # Errors
    /// Another word, or limits at a number of standard deviations that makes no sense.
    pub fn parse(text: &str, place: &Place) -> Result<Role, Diagnostic> {
        let mut words = text.split_whitespace();
        let word = words.next().unwrap_or("");
        let rest: Vec<&str> = words.collect();
        let found = match (word, rest.as_slice()) {
            ("bias", []) => Some(Role::Bias),
            ("uniform", []) => Some(Role::UNIFORM),
            ("triangular", []) => Some(Role::Random(Distribution::Triangular)),
            ("normal", []) => Some(Role::Random(Distribution::Normal { sigmas: LIMITS_AT })),
            ("normal", [number, "sigma" | "σ"]) => number
                .parse()
                .ok()
                .filter(|sigmas| SIGMAS.contains(sigmas))
                .map(|sigmas| Role::Random(Distribution::Normal { sigmas })),
            _ => None,
        };
        found.ok_or_else(|| {
            Diagnostic::error(place, format!("`{text}` does not say how a value varies"))
                .expected("bias, uniform, triangular, normal (limits at 3 sigma) or `normal 2 sigma`")
                .nearest(word, WORDS)
        })
    }

    /// In words, for the reader.
    pub fn text(self) -> String {
        match self {
            Role::Bias => "bias-like".to_owned(),
            Role::Random(Distribution::Uniform) => "random, uniform".to_owned(),
            Role::Random(Distribution::Triangular) => "random, triangular".to_owned(),
            Role::Random(Distribution::Normal { sigmas }) => format!("random, normal, limits at {sigmas} σ"),
        }
    }
}

/// Reads how far a value drifts with age, as a share of it: `± 2 %`, `-1 to 3 %`.
///
/// # Errors
/// No such share, or one that takes the whole value away.
pub fn parse_ageing(text: &str, place: &Place) -> Result<Quantity, Diagnostic> {
    let wrong = || {
        Diagnostic::error(place, format!("`{text}` is no drift with age"))
            .expected("a share of the value: `± 2 %`, `-1 to 3 %`")
    };
    let either = ["±", "+/-"].iter().find_map(|sign| text.trim().strip_prefix(sign));
    let mut found = super::parse(either.unwrap_or(text).trim(), place).map_err(|_| wrong())?;
    let Spread { low, high, .. } = found.spread;
    let spread = match either {
        Some(_) if found.spread.is_exact() && high >= 0.0 => Spread { low: -high, nominal: 0.0, high },
        None if low <= 0.0 && high >= 0.0 => Spread { low, nominal: 0.0, high },
        _ => return Err(wrong()),
    };
    if found.kind != Kind::NONE || spread.low <= -1.0 || spread.high >= 10.0 {
        return Err(wrong());
    }
    found.spread = spread;
    found.bounded = true;
    found.text = text.trim().to_owned();
    Ok(found)
}
