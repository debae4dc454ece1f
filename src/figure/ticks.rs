//! Ticks of an axis: round numbers in steps of 1, 2 or 5 times a power of ten, or decades.

/// One tick: its position in the axis's own unit and its label, empty for a minor tick.
#[derive(Clone, PartialEq, Debug)]
pub struct Tick {
    pub at: f64,
    pub label: String,
}

/// Ticks between `low` and `high`, at most about `wanted` of them with a label.
pub fn ticks(low: f64, high: f64, logarithmic: bool, wanted: usize) -> Vec<Tick> {
    if !(low.is_finite() && high.is_finite() && low < high) {
        return Vec::new();
    }
    if logarithmic && low > 0.0 { decades(low, high, wanted) } else { linear(low, high, wanted) }
}

fn linear(low: f64, high: f64, wanted: usize) -> Vec<Tick> {
    let raw = (high - low) / wanted.max(2) as f64;
    let power = libm::floor(libm::log10(raw));
    let unit = libm::pow(10.0, power);
    let (step, digit) = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|m| (m * unit, m))
        .find(|(step, _)| *step >= raw * 0.999)
        .unwrap_or((10.0 * unit, 10.0));
    let decimals = (-(power + if digit == 10.0 { 1.0 } else { 0.0 })).max(0.0) as usize;
    let first = libm::ceil(low / step - 1e-9) as i64;
    let last = libm::floor(high / step + 1e-9) as i64;
    (first..=last.min(first + 60))
        .map(|k| {
            let at = k as f64 * step;
            Tick { at, label: plain(at, decimals) }
        })
        .collect()
}

fn plain(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    // No sign before a rounded zero.
    let zero = text.trim_start_matches('-').chars().all(|c| c == '0' || c == '.');
    if zero { text.trim_start_matches('-').to_owned() } else { text.replace('-', "−") }
}

fn decades(low: f64, high: f64, wanted: usize) -> Vec<Tick> {
    let first = libm::floor(libm::log10(low) + 1e-9) as i32;
    let last = libm::ceil(libm::log10(high) - 1e-9) as i32;
    let span = (last - first).max(1) as usize;
    let every = span.div_ceil(wanted.max(2)).max(1) as i32;
    let few = span <= 2;
    let mut out = Vec::new();
    for exponent in first..=last {
        for digit in 1..10 {
            let at = f64::from(digit) * libm::pow(10.0, f64::from(exponent));
            if at < low * (1.0 - 1e-9) || at > high * (1.0 + 1e-9) {
                continue;
            }
            let labelled =
                if digit == 1 { (exponent - first) % every == 0 } else { few && (digit == 2 || digit == 5) };
            let label = if labelled { decade_label(digit, exponent) } else { String::new() };
            out.push(Tick { at, label });
        }
    }
    out
}

fn decade_label(digit: i32, exponent: i32) -> String {
    if (-3..=4).contains(&exponent) {
        let value = f64::from(digit) * libm::pow(10.0, f64::from(exponent));
        return format!("{value:.*}", (-exponent).max(0) as usize);
    }
    const DIGITS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    let turn = |c: char| c.to_digit(10).and_then(|d| DIGITS.get(d as usize)).copied().unwrap_or('⁻');
    let power: String = exponent.to_string().chars().map(turn).collect();
    if digit == 1 { format!("10{power}") } else { format!("{digit}·10{power}") }
}
