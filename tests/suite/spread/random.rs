//! Random small responses against dense grids: no grid point may beat what was found.

use super::{Draw, range};

const STEPS: usize = 24;

/// Every point of a grid over three axes from −1 to 1.
fn grid(equation: &dyn Fn(&[f64]) -> f64) -> (f64, f64) {
    let at = |i: usize| -1. + 2. * i as f64 / STEPS as f64;
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for i in 0..=STEPS {
        for j in 0..=STEPS {
            for k in 0..=STEPS {
                let value = equation(&[at(i), at(j), at(k)]);
                low = low.min(value);
                high = high.max(value);
            }
        }
    }
    (low, high)
}

/// By which share of the whole range the search missed the best of the grid, where it did.
fn compare(seed: u64, nominal: [f64; 3], equation: impl Fn(&[f64]) -> f64 + Sync) -> Option<(u64, f64)> {
    let (low, high) = grid(&equation);
    let axis = |i: usize| ("x", -1., nominal[i], 1.);
    let found = range(&[axis(0), axis(1), axis(2)], &equation);
    let (min, max) = (found.min.expect("a minimum").value, found.max.expect("a maximum").value);
    let missed = (min - low).max(high - max) / (high - low);
    (missed > 1e-6).then_some((seed, missed))
}

/// Each miss is a seed and a share of the range.
fn assert_misses(misses: &[(u64, f64)], most: usize, share: f64) {
    let worst = misses.iter().map(|miss| miss.1).fold(0., f64::max);
    assert!(misses.len() <= most && worst <= share, "{misses:?}");
}

/// Quadratic forms with every sort of curvature, and their squares.
#[test]
fn quadratic_responses() {
    let misses: Vec<(u64, f64)> = (0..300)
        .filter_map(|seed| {
            let draw = Draw::new(seed);
            let weights: Vec<f64> = (0..10).map(|_| draw.between(-1., 1.)).collect();
            let nominal = [0; 3].map(|_| draw.between(-0.7, 0.7));
            compare(seed, nominal, move |at| {
                let [x, y, z] = [at[0], at[1], at[2]];
                let terms = [x, y, z, x * x, y * y, z * z, x * y, y * z, x * z, 1.];
                terms.iter().zip(&weights).map(|(term, weight)| term * weight).sum()
            })
        })
        .collect();
    assert_misses(&misses, 0, 0.);
}

/// The smaller of two planes plus a curvature: a limit that takes over from another, as in saturation. A kink between two
/// stops of a scan may stand out above both by less than the scan can tell; such misses are rare and small.
#[test]
fn kinked_responses() {
    let misses: Vec<(u64, f64)> = (0..300)
        .filter_map(|seed| {
            let draw = Draw::new(1000 + seed);
            let weights: Vec<f64> = (0..11).map(|_| draw.between(-1., 1.)).collect();
            let nominal = [0; 3].map(|_| draw.between(-0.7, 0.7));
            compare(seed, nominal, move |at| {
                let plane = |from: usize| {
                    weights[from]
                        + weights[from + 1] * at[0]
                        + weights[from + 2] * at[1]
                        + weights[from + 3] * at[2]
                };
                plane(0).min(plane(4)) + 0.5 * weights[8] * at[0] * at[1] + 0.3 * weights[9] * at[2] * at[2]
            })
        })
        .collect();
    assert_misses(&misses, 2, 0.01);
}

/// Circuit-like quotients: a product of sums over another sum, squared.
#[test]
fn rational_responses() {
    let misses: Vec<(u64, f64)> = (0..300)
        .filter_map(|seed| {
            let draw = Draw::new(2000 + seed);
            let w: Vec<f64> = (0..9).map(|_| draw.between(-0.3, 0.3)).collect();
            let nominal = [0; 3].map(|_| draw.between(-0.7, 0.7));
            compare(seed, nominal, move |at| {
                let sum = |from: usize| 1. + (0..3).map(|i| w[from + i] * at[i]).sum::<f64>();
                let (a, b, c) = (sum(0), sum(3), sum(6));
                a * b / ((a + c) * (b + c))
            })
        })
        .collect();
    assert_misses(&misses, 0, 0.);
}

/// Every corner of a ten-axis multilinear form with random pair couplings against all 1024 vertices.
#[test]
fn multilinear_responses_of_ten_axes() {
    let misses: Vec<(u64, f64)> = (0..200)
        .filter_map(|seed| {
            let draw = Draw::new(3000 + seed);
            let linear: Vec<f64> = (0..10).map(|_| draw.between(-1., 1.)).collect();
            let coupled: Vec<f64> = (0..100).map(|_| draw.between(-0.2, 0.2)).collect();
            let equation = |at: &[f64]| {
                let mut sum = 0.;
                for i in 0..10 {
                    sum += linear[i] * at[i];
                    for j in 0..i {
                        sum += coupled[10 * i + j] * at[i] * at[j];
                    }
                }
                sum
            };
            let mut all = (f64::INFINITY, f64::NEG_INFINITY);
            for code in 0..1024_u32 {
                let at: Vec<f64> = (0..10).map(|i| if code >> i & 1 == 1 { 1. } else { -1. }).collect();
                let value = equation(&at);
                all = (all.0.min(value), all.1.max(value));
            }
            let found = range(&[("x", -1., 0.1, 1.); 10], equation);
            let (min, max) = (found.min.expect("a minimum").value, found.max.expect("a maximum").value);
            let missed = (min - all.0).max(all.1 - max) / (all.1 - all.0);
            (missed > 1e-9).then_some((seed, missed))
        })
        .collect();
    assert_misses(&misses, 0, 0.);
}
