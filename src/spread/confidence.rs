//! What a finite number of samples says about a share or a quantile, whatever the distribution.

use serde::{Deserialize, Serialize};

/// Steps of a bisection between two doubles: each halves the interval.
const HALVINGS: usize = 200;
/// Terms of a continued fraction, at most; it needs of the order of the root of its arguments.
const TERMS: usize = 20_000;
/// Numbers of samples beyond this are not worth asking for.
const MOST_SAMPLES: u64 = 100_000_000;

/// A share of samples with the limits between which the true share lies.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct Proportion {
    pub share: f64,
    pub low: f64,
    pub high: f64,
}

/// A quantile of samples with the order statistics between which the true quantile lies; absent where there are too few
/// samples to bound it.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct Quantile {
    pub value: f64,
    pub low: Option<f64>,
    pub high: Option<f64>,
}

/// The share of `passed` among `total` samples with its two-sided limits at `confidence` (Clopper and Pearson, Biometrika 26,
/// 1934, p. 404): never narrower than it says, also at the ends. Without samples nothing is known.
pub fn proportion(passed: u64, total: u64, confidence: f64) -> Proportion {
    if total == 0 || passed > total {
        return Proportion { share: 0.0, low: 0.0, high: 1.0 };
    }
    let tail = (1.0 - confidence) / 2.0;
    let (k, n) = (passed as f64, total as f64);
    let at_most = |x: f64| incomplete_beta(k, n - k + 1.0, x);
    let at_least = |x: f64| incomplete_beta(k + 1.0, n - k, x);
    Proportion {
        share: k / n,
        low: if passed == 0 { 0.0 } else { crossing(|x| at_most(x) >= tail) },
        high: if passed == total { 1.0 } else { crossing(|x| at_least(x) >= 1.0 - tail) },
    }
}

/// How many samples would decide whether a share lies above or below `wanted`, if `share` of them went on to pass; `None`
/// where no sensible number does.
pub fn samples_to_decide(share: f64, wanted: f64, confidence: f64) -> Option<u64> {
    let decides = |total: u64| {
        let found = proportion((share * total as f64).round() as u64, total, confidence);
        found.low >= wanted || found.high < wanted
    };
    let mut high = 16;
    while !decides(high) {
        high *= 2;
        if high > MOST_SAMPLES {
            return None;
        }
    }
    let mut low = high / 2;
    while high - low > (high / 64).max(1) {
        let middle = low + (high - low) / 2;
        if decides(middle) { high = middle } else { low = middle }
    }
    Some(high)
}

/// The quantile below which `share` of a population lies, from its sorted samples, with the order statistics that bound it at
/// `confidence` without any assumption on the distribution (David and Nagaraja, Order Statistics, 3rd edition, 7.1; from
/// memory). `None` without samples.
pub fn quantile(sorted: &[f64], share: f64, confidence: f64) -> Option<Quantile> {
    let n = sorted.len();
    let value = *sorted.get(rank(n, share) - 1)?;
    let tail = (1.0 - confidence) / 2.0;
    // Probability that at least `rank` of the samples lie below the true quantile.
    let at_least = |rank: usize| incomplete_beta(rank as f64, (n - rank + 1) as f64, share);
    // At least so many lie below it almost surely: the last rank for which that holds; and the first that hardly any reach.
    let low = last(n, |rank| at_least(rank) >= 1.0 - tail);
    let high = last(n, |rank| at_least(rank) > tail) + 1;
    let of = |rank: usize| rank.checked_sub(1).and_then(|index| sorted.get(index)).copied();
    Some(Quantile { value, low: of(low), high: of(high) })
}

/// The rank, from 1 to `n`, of the sample that stands for a quantile: at least `share` of the samples lie no higher.
pub fn rank(n: usize, share: f64) -> usize {
    // A share such as 1 - 0.99 is a little more than a hundredth in binary.
    ((share * n as f64 - 1e-6).ceil() as usize).clamp(1, n.max(1))
}

/// The probabilistically symmetric interval that covers `share` of a population (JCGM 101:2008, 7.7), each end with its
/// sampling error at `confidence`.
pub fn coverage_interval(sorted: &[f64], share: f64, confidence: f64) -> Option<[Quantile; 2]> {
    let outside = (1.0 - share) / 2.0;
    Some([quantile(sorted, outside, confidence)?, quantile(sorted, 1.0 - outside, confidence)?])
}

/// The coverage factor k for which a normal quantity lies within k standard deviations of its mean with probability `share`
/// (JCGM 100:2008, table G.1).
pub fn coverage_factor(share: f64) -> f64 {
    // Beyond ten standard deviations nothing is left in double precision.
    10.0 * crossing(|x| libm::erf(10.0 * x / std::f64::consts::SQRT_2) >= share)
}

/// The greatest rank of 1 to `n` for which a property holds that holds up to some rank; 0 where it never does.
fn last(n: usize, holds: impl Fn(usize) -> bool) -> usize {
    let (mut low, mut high) = (0, n + 1);
    while high - low > 1 {
        let middle = low + (high - low) / 2;
        if holds(middle) { low = middle } else { high = middle }
    }
    low
}

/// Where between 0 and 1 a property begins to hold.
fn crossing(holds: impl Fn(f64) -> bool) -> f64 {
    let (mut low, mut high) = (0.0, 1.0);
    for _ in 0..HALVINGS {
        let middle = (low + high) / 2.0;
        if middle <= low || middle >= high {
            break;
        }
        if holds(middle) { high = middle } else { low = middle }
    }
    high
}

/// The regularised incomplete beta function I_x(a, b) for a, b > 0, by its continued fraction (NIST Digital Library of
/// Mathematical Functions, 8.17.22) in the form of Lentz (1976).
pub fn incomplete_beta(a: f64, b: f64, x: f64) -> f64 {
    if x <= 0.0 {
        return 0.0;
    }
    if x >= 1.0 {
        return 1.0;
    }
    // Where the fraction converges fast; the other side by symmetry (8.17.4).
    if x > (a + 1.0) / (a + b + 2.0) {
        return 1.0 - incomplete_beta(b, a, 1.0 - x);
    }
    let logarithm =
        libm::lgamma(a + b) - libm::lgamma(a) - libm::lgamma(b) + a * libm::log(x) + b * libm::log1p(-x);
    let safe = |value: f64| if value.abs() < 1e-300 { 1e-300 } else { value };
    let mut c = 1.0;
    let mut d = 1.0 / safe(1.0 - (a + b) * x / (a + 1.0));
    let mut fraction = d;
    for m in 1..TERMS {
        let m = m as f64;
        let even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
        let odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
        let mut factor = 1.0;
        for term in [even, odd] {
            d = 1.0 / safe(1.0 + term * d);
            c = safe(1.0 + term / c);
            factor = c * d;
            fraction *= factor;
        }
        if (factor - 1.0).abs() < 1e-15 {
            break;
        }
    }
    libm::exp(logarithm) * fraction / a
}
