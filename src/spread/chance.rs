//! Chance that does not depend on who draws first: numbers by counter.

use super::Distribution;

/// Redraws of a normal number beyond its limits, at most. With limits at one standard deviation one draw in three misses.
const REDRAWS: u32 = 100;

/// The number of `(seed, sample, axis)`, between -1 and 1: where a specimen lies between its limits.
pub(super) fn draw(distribution: Distribution, seed: u64, sample: u64, axis: u32) -> f64 {
    match distribution {
        Distribution::Uniform => 2.0 * pair(seed, sample, axis, 0)[0] - 1.0,
        Distribution::Triangular => {
            let [one, other] = pair(seed, sample, axis, 0);
            one + other - 1.0
        }
        Distribution::Normal { sigmas } => (0..REDRAWS)
            .map(|attempt| normal(pair(seed, sample, axis, attempt)) / sigmas)
            .find(|share| share.abs() <= 1.0)
            .unwrap_or(0.0),
    }
}

/// A number of the standard normal distribution (Box and Muller 1958; JCGM 101:2008, C.4).
fn normal([one, other]: [f64; 2]) -> f64 {
    (-2.0 * libm::log(one)).sqrt() * libm::cos(2.0 * std::f64::consts::PI * other)
}

/// Two independent numbers strictly between 0 and 1, of 52 bits each.
fn pair(seed: u64, sample: u64, axis: u32, attempt: u32) -> [f64; 2] {
    let counter = [sample as u32, (sample >> 32) as u32, axis, attempt];
    let [a, b, c, d] = philox(counter, [seed as u32, (seed >> 32) as u32]);
    let number = |high: u32, low: u32| {
        ((u64::from(high >> 6) << 26 | u64::from(low >> 6)) as f64 + 0.5) / 2.0_f64.powi(52)
    };
    [number(a, b), number(c, d)]
}

/// Philox 4x32 with ten rounds (Salmon, Moraes, Dror and Shaw, "Parallel random numbers: as easy as 1, 2, 3", Proc. SC11,
/// 2011): four random words for each counter under a key.
pub fn philox(mut counter: [u32; 4], mut key: [u32; 2]) -> [u32; 4] {
    for _ in 0..10 {
        let one = 0xd251_1f53_u64 * u64::from(counter[0]);
        let other = 0xcd9e_8d57_u64 * u64::from(counter[2]);
        counter = [
            (other >> 32) as u32 ^ counter[1] ^ key[0],
            other as u32,
            (one >> 32) as u32 ^ counter[3] ^ key[1],
            one as u32,
        ];
        key = [key[0].wrapping_add(0x9e37_79b9), key[1].wrapping_add(0xbb67_ae85)];
    }
    counter
}
