//! A function of one variable through given points.

use serde::{Deserialize, Serialize};

/// Points of a curve at most.
pub const NODES: usize = 8;

/// A function through given points: monotone between two of them, constant beyond the outermost, without a jump in value or
/// slope. Cubic pieces (Fritsch and Carlson, SIAM J. Numer. Anal. 17, 1980, p. 238), the slope at a point the harmonic mean
/// of those of the straight lines to its neighbours, or zero where they differ in sign; nowhere steeper than twice the
/// steepest of these lines. Without points it is zero.
#[derive(Clone, Copy, PartialEq, Debug, Default, Serialize, Deserialize)]
#[serde(into = "Vec<[f64; 2]>", try_from = "Vec<[f64; 2]>")]
pub struct Curve {
    count: usize,
    at: [f64; NODES],
    value: [f64; NODES],
    slope: [f64; NODES],
}

impl Curve {
    /// Zero everywhere.
    pub const ZERO: Curve = Curve { count: 0, at: [0.0; NODES], value: [0.0; NODES], slope: [0.0; NODES] };

    /// The curve through `points` (place, value), places rising; `None` for other orders, more than [`NODES`] points, or
    /// what is no number.
    pub fn through(points: &[[f64; 2]]) -> Option<Curve> {
        let rises = points.windows(2).all(|pair| pair[0][0] < pair[1][0]);
        if points.len() > NODES || !rises || points.iter().flatten().any(|x| !x.is_finite()) {
            return None;
        }
        let mut curve = Curve { count: points.len(), ..Curve::ZERO };
        for (k, [at, value]) in points.iter().enumerate() {
            (curve.at[k], curve.value[k]) = (*at, *value);
        }
        let secant = |k: usize| (points[k + 1][1] - points[k][1]) / (points[k + 1][0] - points[k][0]);
        for k in 1..points.len().saturating_sub(1) {
            let (before, after) = (secant(k - 1), secant(k));
            if before * after > 0.0 {
                curve.slope[k] = 2.0 * before * after / (before + after);
            }
        }
        Some(curve)
    }

    pub fn is_zero(&self) -> bool {
        self.count == 0
    }

    /// The curve with all values multiplied.
    pub fn times(&self, factor: f64) -> Curve {
        Curve { value: self.value.map(|v| v * factor), slope: self.slope.map(|s| s * factor), ..*self }
    }

    /// Value and slope at `x`.
    pub fn at(&self, x: f64) -> (f64, f64) {
        let places = &self.at[..self.count];
        let Some((first, last)) = places.first().zip(places.last()) else { return (0.0, 0.0) };
        if x <= *first {
            return (self.value[0], 0.0);
        }
        if x >= *last {
            return (self.value[self.count - 1], 0.0);
        }
        let k = places.iter().take_while(|at| **at < x).count().saturating_sub(1);
        let Some(width) = places.get(k + 1).map(|next| next - places[k]) else { return (f64::NAN, f64::NAN) };
        let t = (x - places[k]) / width;
        let rise = self.value[k + 1] - self.value[k];
        let (left, right) = (self.slope[k] * width, self.slope[k + 1] * width);
        let (square, cubic) = (3.0 * rise - 2.0 * left - right, left + right - 2.0 * rise);
        let value = self.value[k] + t * (left + t * (square + t * cubic));
        (value, (left + t * (2.0 * square + 3.0 * t * cubic)) / width)
    }
}

impl From<Curve> for Vec<[f64; 2]> {
    fn from(curve: Curve) -> Self {
        (0..curve.count).map(|k| [curve.at[k], curve.value[k]]).collect()
    }
}

impl TryFrom<Vec<[f64; 2]>> for Curve {
    type Error = String;

    fn try_from(points: Vec<[f64; 2]>) -> Result<Self, String> {
        Curve::through(&points).ok_or_else(|| format!("{} points that are no curve", points.len()))
    }
}
