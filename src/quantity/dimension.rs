//! Dimensions over the SI base units that electronics and heat need.

use std::fmt;

use serde::{Deserialize, Serialize};

/// Twice the exponents of metre, kilogram, second, ampere, kelvin: halves appear under square roots only.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Default, Serialize, Deserialize)]
pub struct Dimension(pub [i8; 5]);

impl Dimension {
    pub const NONE: Dimension = Dimension([0; 5]);
    pub const SECOND: Dimension = Dimension([0, 0, 2, 0, 0]);
    pub const AMPERE: Dimension = Dimension([0, 0, 0, 2, 0]);
    pub const KELVIN: Dimension = Dimension([0, 0, 0, 0, 2]);
    pub const HERTZ: Dimension = Dimension([0, 0, -2, 0, 0]);
    pub const JOULE: Dimension = Dimension([4, 2, -4, 0, 0]);
    pub const WATT: Dimension = Dimension([4, 2, -6, 0, 0]);
    pub const COULOMB: Dimension = Dimension([0, 0, 2, 2, 0]);
    pub const VOLT: Dimension = Dimension([4, 2, -6, -2, 0]);
    pub const OHM: Dimension = Dimension([4, 2, -6, -4, 0]);
    pub const SIEMENS: Dimension = Dimension([-4, -2, 6, 4, 0]);
    pub const FARAD: Dimension = Dimension([-4, -2, 8, 4, 0]);
    pub const HENRY: Dimension = Dimension([4, 2, -4, -4, 0]);
    pub const KELVIN_PER_WATT: Dimension = Dimension([-4, -2, 6, 0, 2]);

    /// The dimension of a product; `None` where an exponent leaves the range that is kept.
    pub fn times(self, other: Dimension) -> Option<Dimension> {
        self.combine(other, i8::checked_add)
    }

    /// The dimension of a quotient; `None` where an exponent leaves the range that is kept.
    pub fn over(self, other: Dimension) -> Option<Dimension> {
        self.combine(other, i8::checked_sub)
    }

    fn combine(self, other: Dimension, with: fn(i8, i8) -> Option<i8>) -> Option<Dimension> {
        let mut out = [0; 5];
        for (i, slot) in out.iter_mut().enumerate() {
            *slot = with(self.0[i], other.0[i])?;
        }
        Some(Dimension(out))
    }

    /// The dimension of a power with exponent `twice / 2`; `None` where that is no whole number of half exponents.
    pub fn power(self, twice: i32) -> Option<Dimension> {
        let mut out = [0; 5];
        for (i, slot) in out.iter_mut().enumerate() {
            let product = i32::from(self.0[i]) * twice;
            if product % 2 != 0 {
                return None;
            }
            *slot = i8::try_from(product / 2).ok()?;
        }
        Some(Dimension(out))
    }
}

impl fmt::Display for Dimension {
    /// The coherent SI unit: `V`, `Ω`, or base units such as `kg·m²·s⁻³`; `1` for a plain number.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let named = [
            (Dimension::NONE, "1"),
            (Dimension::SECOND, "s"),
            (Dimension::AMPERE, "A"),
            (Dimension::KELVIN, "K"),
            (Dimension::HERTZ, "Hz"),
            (Dimension::JOULE, "J"),
            (Dimension::WATT, "W"),
            (Dimension::COULOMB, "C"),
            (Dimension::VOLT, "V"),
            (Dimension::OHM, "Ω"),
            (Dimension::SIEMENS, "S"),
            (Dimension::FARAD, "F"),
            (Dimension::HENRY, "H"),
            (Dimension::KELVIN_PER_WATT, "K/W"),
        ];
        if let Some((_, name)) = named.iter().find(|(dimension, _)| dimension == self) {
            return f.write_str(name);
        }
        let mut first = true;
        for (exponent, base) in self.0.iter().zip(["m", "kg", "s", "A", "K"]) {
            if *exponent == 0 {
                continue;
            }
            if !first {
                f.write_str("·")?;
            }
            first = false;
            f.write_str(base)?;
            match exponent {
                2 => {}
                odd if odd % 2 != 0 => write!(f, "^({odd}/2)")?,
                even => write!(f, "{}", superscript(i32::from(*even) / 2))?,
            }
        }
        Ok(())
    }
}

pub(super) fn superscript(exponent: i32) -> String {
    const DIGITS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    exponent.to_string().chars().map(|c| c.to_digit(10).map_or('⁻', |digit| DIGITS[digit as usize])).collect()
}
