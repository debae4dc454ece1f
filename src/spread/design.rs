//! Points that every output shares, chosen before anything is known of the response.

/// Up to so many axes every vertex is evaluated (2^8 points).
pub(super) const ALL_VERTICES: usize = 8;
/// Shares of its width at which an axis is scanned through the nominal point, and where a closer look is taken.
pub(super) const SCAN: [f64; 9] = [0.03, 0.13, 0.25, 0.37, 0.5, 0.63, 0.75, 0.87, 0.97];
/// Scattered points inside the space.
const SCATTERED: usize = 32;

/// Levels (-1 or 1 an axis) of the vertices to evaluate: all of them for few axes; otherwise a two-level design in which
/// the levels of each axis are balanced against those of every other axis and of every pair of others (Plackett and Burman
/// 1946 with the signs of all its rows reversed once).
pub(super) fn vertices(axes: usize) -> Vec<Vec<f64>> {
    if axes <= ALL_VERTICES {
        return (0..1_u32 << axes)
            .map(|code| (0..axes).map(|i| level(code >> i & 1 == 1)).collect())
            .collect();
    }
    let rows = (axes as u32 + 1).next_power_of_two();
    (0..2 * rows)
        .map(|row| {
            let reversed = row >= rows;
            (1..=axes as u32)
                .map(|column| level(((row % rows) & column).count_ones() % 2 == 1) * -level(!reversed))
                .collect()
        })
        .collect()
}

fn level(high: bool) -> f64 {
    if high { 1.0 } else { -1.0 }
}

/// Evenly scattered points, each coordinate as a share of its axis: multiples of powers of the root of
/// `x^(axes + 1) = x + 1`, modulo 1 (an additive recurrence; the plane's golden section for one axis).
pub(super) fn scattered(axes: usize) -> Vec<Vec<f64>> {
    let mut root = 2.0_f64;
    for _ in 0..60 {
        root = libm::pow(1.0 + root, 1.0 / (axes as f64 + 1.0));
    }
    (1..=SCATTERED)
        .map(|k| {
            let mut power = 1.0;
            (0..axes)
                .map(|_| {
                    power /= root;
                    let value = 0.5 + k as f64 * power;
                    value - value.floor()
                })
                .collect()
        })
        .collect()
}
