//! Elementary functions with the same bits on every machine: sums and products in a fixed order, no fused operations.

pub mod dense;
mod table;
pub mod threads;

/// Above this argument e^x is infinite in double precision, below the second it is zero.
const HIGHEST: f64 = 709.782_712_893_384;
const LOWEST: f64 = -745.133_219_101_941_2;
/// 64 / ln 2.
const PER_STEP: f64 = 92.33248261689366;
/// ln 2 / 64: a part with trailing zeros, so that its multiples by up to 17 bits are exact, and the rest.
const STEP_HIGH: f64 = 0.010830424695086549;
const STEP_LOW: f64 = 1.162596423439437e-12;
/// Adding and taking away 1.5 * 2^52 rounds to the nearest whole number.
const ROUNDER: f64 = 6_755_399_441_055_744.0;

/// e^x to less than one unit in the last place (subnormal results to one); infinite above 709.78, zero below -745.13.
///
/// x = (64 m + j) ln 2 / 64 + r with |r| <= ln 2 / 128: then e^x = 2^m 2^(j/64) e^r, with 2^(j/64) from a table of two
/// parts and e^r - 1 from its Taylor series to the sixth power (P. T. P. Tang, ACM Trans. Math. Softw. 15, 1989, p. 144).
pub fn exp(x: f64) -> f64 {
    if x.is_nan() || x.abs() >= 708.0 {
        return far(x);
    }
    let (whole, significand) = reduced(x);
    significand * power_of_two(whole)
}

/// m and 2^(j/64) e^r.
fn reduced(x: f64) -> (i64, f64) {
    let steps = (x * PER_STEP + ROUNDER) - ROUNDER;
    let r = (x - steps * STEP_HIGH) - steps * STEP_LOW;
    let index = steps as i64;
    let [high, low] = table::POWERS[(index & 63) as usize];
    let square = r * r;
    let tail = 1.0 / 6.0 + r * (1.0 / 24.0) + square * (1.0 / 120.0 + r * (1.0 / 720.0));
    let grown = r + square * (0.5 + r * tail);
    (index >> 6, high + (low + high * grown))
}

/// 2^m for normal results.
fn power_of_two(m: i64) -> f64 {
    f64::from_bits(((m + 1023) as u64) << 52)
}

/// The ends of the range, and what is no number.
fn far(x: f64) -> f64 {
    if x.is_nan() {
        x
    } else if x > HIGHEST {
        f64::INFINITY
    } else if x < LOWEST {
        0.0
    } else {
        // In two factors: 2^m alone would not be a normal number.
        let (whole, significand) = reduced(x);
        let half = whole / 2;
        significand * power_of_two(half) * power_of_two(whole - half)
    }
}
