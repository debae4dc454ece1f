//! Midband small signal: capacitors are shorts, inductors are open, supplies are their source resistances, devices are
//! their slopes at the operating point.

use super::plan::{Plan, Scratch, Slot};
use super::{Branch, Failure, OperatingPoint};
use crate::circuit::Node;

/// What one signal source does in midband.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Midband {
    /// Voltage of each node (by node index) over the e.m.f. of the source; negative where a stage inverts.
    pub gain: Vec<f64>,
    /// Resistance (Ω) that the circuit shows to the source, its own resistance not included; `None` where no current
    /// flows.
    pub input_resistance: Option<f64>,
}

impl Plan {
    /// Gains and input resistance from the signal source that is element `signal`, other signal sources silent, at an
    /// operating point of these branches.
    ///
    /// # Errors
    /// [`Failure::Singular`] where the linearised circuit does not determine every voltage (a collector with nothing
    /// but an inductor and no Early effect); [`Failure::Unfit`] if element `signal` is no signal source.
    pub fn midband(
        &self,
        point: &OperatingPoint,
        branches: &[Branch],
        signal: usize,
        scratch: &mut Scratch,
    ) -> Result<Midband, Failure> {
        self.linearise(point, branches, scratch)?;
        let (Some(Branch::Signal { ohms }), Some(&Slot::Two { from, to, current })) =
            (branches.get(signal), self.slots.get(signal))
        else {
            return Err(Failure::Unfit { element: signal });
        };
        // v_from - v_to - R i = 1: an e.m.f. of one volt.
        scratch.right[self.nodes - 1 + current] = 1.0;
        self.determined(scratch)?;
        let gain: Vec<f64> = (0..self.nodes).map(|node| self.response(scratch, node)).collect();
        let i = -scratch.step[current];
        let across = if *ohms == 0.0 { 1.0 } else { gain[from] - gain[to] };
        let input = across / i;
        Ok(Midband { gain, input_resistance: input.is_finite().then_some(input) })
    }

    /// Resistance (Ω) that the circuit shows between a node and ground with every signal source silent (but its source
    /// resistance in place).
    ///
    /// # Errors
    /// As [`Plan::midband`]; [`Failure::Unfit`] if there is no such node.
    pub fn output_resistance(
        &self,
        point: &OperatingPoint,
        branches: &[Branch],
        node: Node,
        scratch: &mut Scratch,
    ) -> Result<f64, Failure> {
        self.linearise(point, branches, scratch)?;
        if node >= self.nodes {
            return Err(Failure::Unfit { element: self.slots.len() });
        }
        if node == 0 {
            return Ok(0.0);
        }
        // One ampere into the node; the equations count currents out of it.
        scratch.right[node - 1] = 1.0;
        self.determined(scratch)?;
        Ok(self.response(scratch, node))
    }

    /// Solves for the right side in `scratch`, unless rounding alone would move the result: then the circuit does not
    /// determine it (a collector that sees nothing but a reverse biased junction). One ohm relates volts to amperes where
    /// next to no voltage moves.
    fn determined(&self, scratch: &mut Scratch) -> Result<(), Failure> {
        scratch.residual.clone_from(&scratch.right);
        self.solve_linearised(scratch)?;
        let (n, m) = (self.unknowns(), self.ports);
        let most = |values: &[f64]| values.iter().fold(0.0, |most: f64, x| most.max(x.abs()));
        let volts = most(&scratch.step[self.linear..n + m]).max(most(&scratch.residual[self.nodes - 1..]));
        let amperes = most(&scratch.step[..self.linear])
            .max(most(&scratch.step[n + m..]))
            .max(most(&scratch.residual[..self.nodes - 1]));
        let mut sign = f64::EPSILON;
        for (row, right) in scratch.right.iter_mut().enumerate() {
            *right = sign * if row < self.nodes - 1 { amperes } else { volts };
            sign = -sign;
        }
        self.solve_linearised(scratch)?;
        if most(&scratch.step[self.linear..n]) > 1e-6 * volts.max(amperes) {
            return Err(Failure::Singular);
        }
        scratch.right.clone_from(&scratch.residual);
        self.solve_linearised(scratch)
    }

    fn response(&self, scratch: &Scratch, node: Node) -> f64 {
        self.column(node).map_or(0.0, |column| scratch.step[column])
    }

    /// The equations of the midband circuit, slopes at the operating point, right side zero.
    fn linearise(
        &self,
        point: &OperatingPoint,
        branches: &[Branch],
        scratch: &mut Scratch,
    ) -> Result<(), Failure> {
        self.laws(branches, scratch)?;
        if !self.take_start(&point.solution, scratch) {
            return Err(Failure::Unfit { element: self.slots.len() });
        }
        scratch.heat.temperatures.clone_from(&point.solution.temperatures);
        self.prepare(branches, scratch);
        self.evaluate(scratch, 1.0, 0.0);
        for (slot, branch) in self.slots.iter().zip(branches) {
            if let Slot::Two { current, .. } = *slot {
                match branch {
                    Branch::Capacitor => scratch.laws[current] = [1.0, 0.0, 0.0],
                    Branch::Inductor { .. } => scratch.laws[current] = [0.0, 1.0, 0.0],
                    _ => {}
                }
            }
        }
        scratch.right.fill(0.0);
        self.eliminate(scratch)
    }
}
