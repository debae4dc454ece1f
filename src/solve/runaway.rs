//! How the heat of a circuit feeds back on itself: the loop gain of the closed circuit, and every thermal equilibrium of a
//! single device that heats itself.
//!
//! With T_j = T_a + R_th P(T_j) for every such device, a small rise of T_j causes the rise M dT with
//! M_ij = R_th,i dP_i/dT_j, the circuit closed around it. What has been disturbed dies away while the largest eigenvalue of M
//! is below one (for one device K = R_th dP/dT_j, as in Lin, Proc. IEEE 55, 1967, p. 1124, for transistors side by side);
//! at one and above it grows: thermal run-away.

use super::plan::{Plan, Scratch};
use super::thermal::RUNAWAY_RISE;
use super::{Attempt, Branch, Failure, Solution, Thermal};

/// Half the change of temperature (K) over which slopes are taken.
const PROBE: f64 = 0.01;
/// Steps of the power method, and the change of the eigenvalue at which it ends.
const POWER_STEPS: usize = 2000;
const SETTLED: f64 = 1e-9;
/// Distance (K) at which equilibria are looked for, and halvings that locate one.
const SCAN: f64 = 2.5;
const HALVINGS: usize = 40;

/// A junction temperature (K) at which dissipation and heat flow balance.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Equilibrium {
    pub t_j: f64,
    /// A disturbance dies away: the loop gain is below one.
    pub lasts: bool,
}

impl Plan {
    /// Loop gain of the circuit's heat at an equilibrium that was found: the largest eigenvalue of R_th,i dP_i/dT_j. Zero
    /// without a device that heats itself.
    ///
    /// # Errors
    /// See [`Failure`].
    pub fn loop_gain(
        &self,
        branches: &[Branch],
        ambient: f64,
        equilibrium: &Solution,
        scratch: &mut Scratch,
    ) -> Result<f64, Failure> {
        self.resume(branches, ambient, equilibrium, scratch)?;
        let k = scratch.heat.hot.len();
        let mut matrix = vec![0.0; k * k];
        for column in 0..k {
            let device = scratch.heat.hot[column].1;
            let centre = scratch.heat.temperatures[device];
            let mut sides = [Vec::new(), Vec::new()];
            for (side, sign) in sides.iter_mut().zip([-1.0, 1.0]) {
                scratch.heat.temperatures[device] = centre + sign * PROBE;
                self.balance(branches, ambient, scratch)?;
                side.clone_from(&scratch.heat.excess);
            }
            scratch.heat.temperatures[device] = centre;
            for row in 0..k {
                let own = if row == column { 2.0 * PROBE } else { 0.0 };
                matrix[row * k + column] = (sides[1][row] - sides[0][row] + own) / (2.0 * PROBE);
            }
        }
        Ok(largest_eigenvalue(&matrix, k))
    }

    /// Every thermal equilibrium between ambient temperature and `RUNAWAY_RISE` above it, coolest first, of a circuit in
    /// which one device heats itself; `None` where it is another number of devices.
    ///
    /// # Errors
    /// See [`Failure`]; the search ends quietly where the circuit cannot be followed any further upwards.
    pub fn equilibria(
        &self,
        branches: &[Branch],
        ambient: f64,
        start: &Solution,
        scratch: &mut Scratch,
    ) -> Result<Option<Vec<Equilibrium>>, Failure> {
        self.resume(branches, ambient, start, scratch)?;
        let [(_, device, _)] = scratch.heat.hot[..] else { return Ok(None) };
        let excess = |t_j: f64, scratch: &mut Scratch| -> Result<f64, Failure> {
            scratch.heat.temperatures[device] = t_j;
            self.balance(branches, ambient, scratch)?;
            Ok(scratch.heat.excess[0])
        };
        let mut found = Vec::new();
        let (mut at, mut here) = (ambient, excess(ambient, scratch)?);
        while at < ambient + RUNAWAY_RISE {
            let next = at + SCAN;
            let Ok(there) = excess(next, scratch) else { break };
            if (here >= 0.0) != (there >= 0.0) {
                let (mut low, mut high) = (at, next);
                for _ in 0..HALVINGS {
                    let middle = 0.5 * (low + high);
                    if (excess(middle, scratch)? >= 0.0) == (here >= 0.0) {
                        low = middle
                    } else {
                        high = middle
                    }
                }
                // Where heating outweighs below and cooling above, the temperature comes back.
                found.push(Equilibrium { t_j: 0.5 * (low + high), lasts: here >= 0.0 });
            }
            (at, here) = (next, there);
        }
        Ok(Some(found))
    }

    /// Takes a circuit up where it was left: devices at the temperatures of `from`, the circuit solved.
    fn resume(
        &self,
        branches: &[Branch],
        ambient: f64,
        from: &Solution,
        scratch: &mut Scratch,
    ) -> Result<(), Failure> {
        self.laws(branches, scratch)?;
        self.temperatures(branches, ambient, Thermal::Equilibrium, scratch)?;
        if !self.take_start(from, scratch) {
            return Err(Failure::Unfit { element: branches.len() });
        }
        scratch.heat.temperatures.clone_from(&from.temperatures);
        self.prepare(branches, scratch);
        self.eliminate(scratch)?;
        self.balance(branches, ambient, scratch)
    }

    /// The circuit at the temperatures in `heat.temperatures`, confirmed; fills `heat.excess`.
    fn balance(&self, branches: &[Branch], ambient: f64, scratch: &mut Scratch) -> Result<(), Failure> {
        self.follow(branches, ambient, Attempt::FromStart, scratch, &mut Vec::new()).map(|_| ())
    }
}

/// The eigenvalue with the largest real part of a small matrix, by the power method on the matrix moved so far up that it
/// stands out (Golub and Van Loan, Matrix Computations, 4th edition, section 7.3).
fn largest_eigenvalue(matrix: &[f64], k: usize) -> f64 {
    let row_sum = |row: &[f64]| row.iter().map(|value| value.abs()).sum::<f64>();
    let shift = matrix.chunks(k.max(1)).map(row_sum).fold(0.0, f64::max);
    if shift == 0.0 {
        return 0.0;
    }
    // No symmetry of the start must hide a direction.
    let mut direction: Vec<f64> = (0..k).map(|i| 1.0 + 0.1 * i as f64).collect();
    let mut value = 0.0;
    for _ in 0..POWER_STEPS {
        let next: Vec<f64> = (0..k)
            .map(|r| shift * direction[r] + (0..k).map(|c| matrix[r * k + c] * direction[c]).sum::<f64>())
            .collect();
        let square: f64 = direction.iter().map(|d| d * d).sum();
        let now = direction.iter().zip(&next).map(|(d, n)| d * n).sum::<f64>() / square - shift;
        let size = next.iter().fold(0.0_f64, |size, n| size.max(n.abs()));
        if size == 0.0 {
            return -shift;
        }
        direction = next.into_iter().map(|n| n / size).collect();
        if (now - value).abs() <= SETTLED * shift {
            return now;
        }
        value = now;
    }
    value
}
