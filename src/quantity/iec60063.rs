//! Preferred number series for resistors and capacitors, IEC 60063:2015.

/// E24: the values of one decade, of which E12, E6 and E3 take every second, fourth and eighth.
const E24: [u16; 24] =
    [10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91];

/// The values of one decade from 1 up to 10 of series E3, E6, E12, E24, E48, E96 or E192, ascending; `None` for another.
///
/// E48, E96 and E192 are 10^(k/n) rounded to three digits, with the one exception of the standard: 9.20 in E192, where
/// rounding would give 9.19.
pub fn series(n: usize) -> Option<Vec<f64>> {
    match n {
        3 | 6 | 12 | 24 => Some(E24.iter().step_by(24 / n).map(|value| f64::from(*value) / 10.0).collect()),
        48 | 96 | 192 => Some(
            (0..n)
                .map(|k| {
                    let exact = libm::pow(10.0, k as f64 / n as f64);
                    if n == 192 && k == 185 { 9.20 } else { libm::round(exact * 100.0) / 100.0 }
                })
                .collect(),
        ),
        _ => None,
    }
}
