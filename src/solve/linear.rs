//! The part of the equations that stays the same during a solution, eliminated once; and small dense systems.
//!
//! Written out as plain loops in a fixed order without fused operations: the same bits on every machine.

use super::Failure;

/// A pivot below this share of what its column held before counts as nothing.
const PIVOT_FLOOR: f64 = 1e-14;

/// `rows x width` coefficients of equations that are linear in `n` unknowns y, and in `width - n` further columns
/// (junction voltages and junction currents) that stay symbolic. Rows outnumber y by the junctions; eliminating y leaves
/// as many equations as junctions.
#[derive(Clone, Debug, Default)]
pub(super) struct Elimination {
    n: usize,
    rows: usize,
    width: usize,
    a: Vec<f64>,
    /// Row that was solved for each unknown.
    pivot: Vec<usize>,
    inverse: Vec<f64>,
    /// Rows without a pivot, in order: the equations that are left.
    pub left: Vec<usize>,
    used: Vec<bool>,
    /// `row[target] -= factor * row[source]`, in order.
    steps: Vec<(usize, usize, f64)>,
    /// Entries right of each pivot: where those of unknown k end, column, value.
    ends: Vec<usize>,
    entries: Vec<(usize, f64)>,
    /// What stands in the rows that are left, right of the `n` unknowns.
    pub rest: Vec<f64>,
}

impl Elimination {
    pub fn clear(&mut self, n: usize, rows: usize, width: usize) {
        (self.n, self.rows, self.width) = (n, rows, width);
        self.a.clear();
        self.a.resize(rows * width, 0.0);
    }

    #[inline]
    pub fn add(&mut self, row: usize, column: usize, value: f64) {
        self.a[row * self.width + column] += value;
    }

    /// Gaussian elimination with partial pivoting of the `n` unknowns.
    pub fn factor(&mut self) -> Result<(), Failure> {
        let (n, rows, width) = (self.n, self.rows, self.width);
        self.pivot.clear();
        self.inverse.clear();
        self.steps.clear();
        self.used.clear();
        self.used.resize(rows, false);
        for k in 0..n {
            let (mut best, mut row) = (0.0, usize::MAX);
            let mut seen = 0.0_f64;
            for r in 0..rows {
                let size = self.a[r * width + k].abs();
                seen = seen.max(size);
                if !self.used[r] && size > best {
                    (best, row) = (size, r);
                }
            }
            if row == usize::MAX || !best.is_finite() || best < PIVOT_FLOOR * seen {
                return Err(Failure::Singular);
            }
            self.used[row] = true;
            self.pivot.push(row);
            let inverse = 1.0 / self.a[row * width + k];
            self.inverse.push(inverse);
            for r in 0..rows {
                if self.used[r] || self.a[r * width + k] == 0.0 {
                    continue;
                }
                let factor = self.a[r * width + k] * inverse;
                self.steps.push((r, row, factor));
                let (target, source) = two_rows(&mut self.a, width, r, row);
                target[k] = 0.0;
                for (t, s) in target[k + 1..].iter_mut().zip(&source[k + 1..]) {
                    *t -= factor * s;
                }
            }
        }
        self.left.clear();
        self.left.extend((0..rows).filter(|&r| !self.used[r]));
        self.rest.clear();
        for &row in &self.left {
            self.rest.extend_from_slice(&self.a[row * width + n..][..width - n]);
        }
        self.entries.clear();
        self.ends.clear();
        for k in 0..n {
            let row = &self.a[self.pivot[k] * width..][..width];
            for (column, &value) in row.iter().enumerate().skip(k + 1) {
                if value != 0.0 {
                    self.entries.push((column, value));
                }
            }
            self.ends.push(self.entries.len());
        }
        Ok(())
    }

    /// Applies the row operations to a right side (one value a row).
    pub fn reduce(&self, right: &mut [f64]) {
        for &(target, source, factor) in &self.steps {
            right[target] -= factor * right[source];
        }
    }

    /// Fills the first `n` of `unknowns` from a reduced right side, the others being known.
    pub fn substitute(&self, right: &[f64], unknowns: &mut [f64]) {
        for k in (0..self.n).rev() {
            let begin = if k == 0 { 0 } else { self.ends[k - 1] };
            let mut sum = right[self.pivot[k]];
            for &(column, value) in &self.entries[begin..self.ends[k]] {
                sum -= value * unknowns[column];
            }
            unknowns[k] = sum * self.inverse[k];
        }
    }
}

/// Two different rows of a matrix at once.
fn two_rows(a: &mut [f64], width: usize, target: usize, source: usize) -> (&mut [f64], &[f64]) {
    if target < source {
        let (low, high) = a.split_at_mut(source * width);
        (&mut low[target * width..][..width], &high[..width])
    } else {
        let (low, high) = a.split_at_mut(target * width);
        (&mut high[..width], &low[source * width..][..width])
    }
}
