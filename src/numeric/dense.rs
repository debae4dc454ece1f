//! Small dense systems of linear equations: Gaussian elimination with scaled partial pivoting (Golub and Van Loan, Matrix
//! Computations, 4th edition, section 3.4). Plain loops in a fixed order, so that every machine gives the same bits.

/// The equations have no unique finite solution.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Singular;

/// Solves `a x = b` (`m x m`, row by row) in place, with partial pivoting over rows scaled to their largest entry;
/// `x` replaces `b`. A pivot smaller than `least_pivot` (rows scaled to one) counts as none.
///
/// # Errors
/// No unique finite solution.
pub fn solve(a: &mut [f64], b: &mut [f64], least_pivot: f64) -> Result<(), Singular> {
    let m = b.len();
    for r in 0..m {
        let largest = a[r * m..][..m].iter().fold(0.0_f64, |largest, x| largest.max(x.abs()));
        if largest == 0.0 || !largest.is_finite() {
            return Err(Singular);
        }
        let scale = 1.0 / largest;
        if !scale.is_finite() {
            return Err(Singular);
        }
        a[r * m..][..m].iter_mut().for_each(|x| *x *= scale);
        b[r] *= scale;
    }
    for k in 0..m {
        let mut row = k;
        for r in k + 1..m {
            if a[r * m + k].abs() > a[row * m + k].abs() {
                row = r;
            }
        }
        if a[row * m + k].abs() < least_pivot {
            return Err(Singular);
        }
        if row != k {
            for c in 0..m {
                a.swap(row * m + c, k * m + c);
            }
            b.swap(row, k);
        }
        let inverse = 1.0 / a[k * m + k];
        for r in k + 1..m {
            let factor = a[r * m + k] * inverse;
            if factor != 0.0 {
                for c in k + 1..m {
                    a[r * m + c] -= factor * a[k * m + c];
                }
                b[r] -= factor * b[k];
            }
        }
    }
    for k in (0..m).rev() {
        let mut sum = b[k];
        for c in k + 1..m {
            sum -= a[k * m + c] * b[c];
        }
        b[k] = sum / a[k * m + k];
        if !b[k].is_finite() {
            return Err(Singular);
        }
    }
    Ok(())
}
