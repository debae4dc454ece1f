//! Marking codes of resistors and capacitors, IEC 60062:2016: letters for the decimal point and for tolerances.

use super::Dimension;

/// Value (SI) and dimension of a code such as `4k7`, `R47`, `100R`, `2M2` (resistance) or `4p7`, `100n`, `µ33`
/// (capacitance). `wanted` decides where a letter could be either. `None` where the text is no such code.
pub fn value(text: &str, wanted: Option<Dimension>) -> Option<(f64, Dimension)> {
    let letter_at = text.find(|c: char| !c.is_ascii_digit())?;
    let letter = text[letter_at..].chars().next()?;
    let (before, after) = (&text[..letter_at], &text[letter_at + letter.len_utf8()..]);
    if (before.is_empty() && after.is_empty()) || !after.chars().all(|c| c.is_ascii_digit()) {
        return None;
    }
    if before.len() + after.len() > 6 {
        return None;
    }
    let (multiplier, dimension) = match letter {
        'R' => (1.0, Dimension::OHM),
        'K' | 'k' => (1e3, Dimension::OHM),
        'M' => (1e6, Dimension::OHM),
        'G' => (1e9, Dimension::OHM),
        'L' if wanted == Some(Dimension::OHM) => (1e-3, Dimension::OHM),
        'p' => (1e-12, Dimension::FARAD),
        'n' => (1e-9, Dimension::FARAD),
        'µ' | 'μ' | 'u' => (1e-6, Dimension::FARAD),
        'm' if wanted == Some(Dimension::FARAD) => (1e-3, Dimension::FARAD),
        'F' if wanted == Some(Dimension::FARAD) && !before.is_empty() && !after.is_empty() => {
            (1.0, Dimension::FARAD)
        }
        _ => return None,
    };
    if wanted.is_some_and(|wanted| wanted != dimension) {
        return None;
    }
    // Read as one decimal number, so that 4k7 is exactly what 4.7e3 is.
    let exponent = libm::log10(multiplier).round() as i32;
    let whole = if before.is_empty() { "0" } else { before };
    let fraction = if after.is_empty() { "0" } else { after };
    let number: f64 = format!("{whole}.{fraction}e{exponent}").parse().ok()?;
    Some((number, dimension))
}

/// The symmetrical relative tolerance of a letter (IEC 60062:2016, table for symmetrical relative tolerances).
pub fn tolerance(letter: char) -> Option<f64> {
    Some(match letter {
        'E' => 0.000_05,
        'L' => 0.000_1,
        'P' => 0.000_2,
        'W' => 0.000_5,
        'B' => 0.001,
        'C' => 0.002_5,
        'D' => 0.005,
        'F' => 0.01,
        'G' => 0.02,
        'H' => 0.03,
        'J' => 0.05,
        'K' => 0.1,
        'M' => 0.2,
        'N' => 0.3,
        _ => return None,
    })
}
