//! Newton's method on the junction voltages, with a limit on each junction's step; source and conductance stepping.

use super::junction::{Device, Law};
use super::plan::{Plan, Scratch, Slot};
use super::{Attempt, Failure, Solution};
use crate::circuit::Node;
use crate::device::transistor;
use crate::numeric::dense;

/// A pivot below this means that the linearised network has no unique solution.
const LEAST_PIVOT: f64 = 1e-300;
/// Current residual at a node, as a share of the largest current into it, above which a solution does not count.
pub(super) const CURRENT_RESIDUAL: f64 = 1e-9;
/// Current residual (A) that always counts as nothing.
pub(super) const CURRENT_FLOOR: f64 = 1e-18;
/// Estimated voltage error (V, and relative to the highest node voltage above 1 V) beyond which a solution does not count.
pub(super) const VOLTAGE_ERROR: f64 = 1e-9;
/// Newton steps of a plain attempt, and of one stage while stepping.
const STEPS: usize = 80;
const STAGE_STEPS: usize = 30;
/// Stages that a stepping attempt may take.
const STAGES: usize = 120;
/// Share of a junction voltage below which a step only goes to its lower digits (see `Scratch::low`), where currents are
/// straight lines: otherwise the rounding of the exponential's argument would be thrown anew with every step.
const FINE: f64 = 100.0 * f64::EPSILON;

/// How far sources are raised, and what stands beside every junction.
#[derive(Clone, Copy, Debug)]
struct Stage {
    sources: f64,
    /// Conductance (S) beside every junction.
    conductance: f64,
    /// Whether the acceptance rule must hold, or a step of so many times the accepted voltage error is near enough.
    last: bool,
    near: f64,
    steps: usize,
}

const WHOLE: Stage = Stage { sources: 1.0, conductance: 0.0, last: true, near: NEAR, steps: STEPS };
/// Newton's method converges quadratically: after a step of 1 µV the next one is far below what is accepted, after one of
/// 0.1 mV the dissipation is right to a hundred-thousandth.
const NEAR: f64 = 1e3;
const ROUGHLY: f64 = 1e5;

impl Plan {
    /// Solves at the temperatures that `scratch.prepared` stands for; `scratch.y`, `u` hold the start and receive the
    /// state. Returns the estimated voltage error (V).
    pub(super) fn electrical(
        &self,
        scratch: &mut Scratch,
        first: Attempt,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        note(attempts, first);
        let mut outcome = self.newton(scratch, WHOLE);
        if outcome.is_err() && first != Attempt::Direct {
            note(attempts, Attempt::Direct);
            self.rest(scratch);
            outcome = self.newton(scratch, WHOLE);
        }
        if outcome.is_err() {
            note(attempts, Attempt::SourceStepping);
            self.rest(scratch);
            outcome = self.source_stepping(scratch);
        }
        if outcome.is_err() {
            note(attempts, Attempt::ConductanceStepping);
            self.rest(scratch);
            outcome = self.conductance_stepping(scratch);
        }
        outcome
    }

    /// Newton's method from the present state to where its steps are so small that the next one would be accepted, without
    /// confirming it, or `roughly` to a ten-thousandth of a volt; false where it does not get there.
    pub(super) fn approach(&self, scratch: &mut Scratch, roughly: bool) -> bool {
        let near = if roughly { ROUGHLY } else { NEAR };
        self.newton(scratch, Stage { last: false, near, steps: STAGE_STEPS, ..WHOLE }).is_ok()
    }

    /// Everything at zero.
    pub(super) fn rest(&self, scratch: &mut Scratch) {
        scratch.y.clear();
        scratch.y.resize(self.unknowns(), 0.0);
        fill(&mut scratch.u, self.ports);
        fill(&mut scratch.low, self.ports);
    }

    /// Takes over a start; false if it does not belong to this plan.
    pub(super) fn take_start(&self, start: &Solution, scratch: &mut Scratch) -> bool {
        let fits = start.junctions.len() == self.ports
            && start.linear.len() == self.unknowns()
            && start.temperatures.len() == self.devices
            && start.scales.len() == self.ports
            && start.junctions.iter().chain(&start.linear).chain(&start.temperatures).all(|x| x.is_finite());
        if fits {
            scratch.y.clear();
            scratch.y.extend_from_slice(&start.linear);
            scratch.u.clear();
            scratch.u.extend_from_slice(&start.junctions);
            fill(&mut scratch.low, self.ports);
        }
        fits
    }

    fn source_stepping(&self, scratch: &mut Scratch) -> Result<f64, Failure> {
        let (mut reached, mut stride) = (0.0_f64, 0.1_f64);
        keep(scratch);
        for _ in 0..STAGES {
            let sources = (reached + stride).min(1.0);
            let stage = Stage { sources, last: false, steps: STAGE_STEPS, ..WHOLE };
            if self.newton(scratch, stage).is_ok() {
                if sources == 1.0 {
                    return self.newton(scratch, WHOLE);
                }
                reached = sources;
                stride *= 1.5;
                keep(scratch);
            } else {
                recall(scratch);
                stride *= 0.25;
                if stride < 1e-6 {
                    break;
                }
            }
        }
        Err(Failure::NotConverged { residual: self.current_residual(scratch) })
    }

    fn conductance_stepping(&self, scratch: &mut Scratch) -> Result<f64, Failure> {
        let (mut reached, mut ratio) = (1.0_f64, 0.1_f64);
        let mut stage = Stage { conductance: reached, last: false, steps: STAGE_STEPS, ..WHOLE };
        self.newton(scratch, stage)?;
        keep(scratch);
        for _ in 0..STAGES {
            stage.conductance = reached * ratio;
            if self.newton(scratch, stage).is_ok() {
                reached = stage.conductance;
                ratio = (ratio * ratio).max(0.05);
                keep(scratch);
                if reached < 1e-13 {
                    return self.newton(scratch, WHOLE);
                }
            } else {
                recall(scratch);
                ratio = ratio.sqrt();
                if ratio > 0.999 {
                    break;
                }
            }
        }
        Err(Failure::NotConverged { residual: self.current_residual(scratch) })
    }

    /// Newton's method from the state in `scratch`; the estimated error of any voltage when it is accepted.
    fn newton(&self, scratch: &mut Scratch, stage: Stage) -> Result<f64, Failure> {
        let n = self.unknowns();
        let mut moved = f64::INFINITY;
        for _ in 0..stage.steps {
            self.evaluate(scratch, stage.sources, stage.conductance);
            let bound = VOLTAGE_ERROR * self.highest(scratch);
            if stage.last {
                if moved <= bound && self.current_residual(scratch) <= 1.0 {
                    let error = moved + self.rounding(scratch)?;
                    if error <= bound {
                        return Ok(error);
                    }
                }
            } else if moved <= stage.near * bound {
                return Ok(moved);
            }
            for (right, residual) in scratch.right.iter_mut().zip(&scratch.residual) {
                *right = -residual;
            }
            self.solve_linearised(scratch)?;
            if !scratch.step.iter().all(|step| step.is_finite()) {
                return Err(Failure::NotConverged { residual: f64::INFINITY });
            }
            let mut limited = false;
            moved = 0.0;
            for (k, y) in scratch.y.iter_mut().enumerate() {
                *y += scratch.step[k];
                if k >= self.linear {
                    moved = moved.max(scratch.step[k].abs());
                }
            }
            for slot in &self.slots {
                let (port, count, device) = match *slot {
                    Slot::Two { .. } => continue,
                    Slot::Diode { port, device, .. } => (port, 1, device),
                    Slot::Transistor { port, device, .. } => (port, 2, device),
                };
                for j in 0..count {
                    let from = scratch.u[port + j];
                    let step = scratch.low[port + j] + scratch.step[n + port + j];
                    if step.abs() <= FINE * from.abs() {
                        scratch.low[port + j] = step;
                        moved = moved.max(scratch.step[n + port + j].abs());
                        continue;
                    }
                    let to = from + step;
                    let allowed = scratch.prepared[device].limits[j].apply(from, to);
                    limited |= allowed != to;
                    moved = moved.max((allowed - from).abs());
                    scratch.u[port + j] = allowed;
                    scratch.low[port + j] = if allowed == to { (from - to) + step } else { 0.0 };
                }
            }
            if limited {
                moved = f64::INFINITY;
            }
        }
        self.evaluate(scratch, stage.sources, stage.conductance);
        Err(Failure::NotConverged { residual: self.current_residual(scratch) })
    }

    /// Highest node voltage, but at least 1 V.
    fn highest(&self, scratch: &Scratch) -> f64 {
        scratch.y[self.linear..].iter().fold(1.0, |high: f64, v| high.max(v.abs()))
    }

    /// What the rounding of the residuals does to the voltages: the step that residuals of one unit in the last place of
    /// their largest terms, with alternating signs, ask for (V).
    fn rounding(&self, scratch: &mut Scratch) -> Result<f64, Failure> {
        let mut sign = 1.0;
        for (right, largest) in scratch.right.iter_mut().zip(&scratch.largest) {
            *right = sign * f64::EPSILON * largest;
            sign = -sign;
        }
        self.solve_linearised(scratch)?;
        Ok(scratch.step[self.linear..self.unknowns()].iter().fold(0.0, |most: f64, v| most.max(v.abs())))
    }

    /// Largest current residual over its bound, over all nodes; accepted up to 1.
    pub(super) fn current_residual(&self, scratch: &Scratch) -> f64 {
        let mut worst = 0.0_f64;
        for (sum, largest) in scratch.node_sum.iter().zip(&scratch.node_largest) {
            let bound = (CURRENT_RESIDUAL * largest).max(CURRENT_FLOOR);
            let over = sum.abs() / bound;
            if over.is_nan() {
                return f64::INFINITY;
            }
            worst = worst.max(over);
        }
        worst
    }

    /// Solves the equations linearised at `scratch.u` for the right side in `scratch.right` (which is used up) into
    /// `scratch.step`: y, u, junction currents.
    pub(super) fn solve_linearised(&self, scratch: &mut Scratch) -> Result<(), Failure> {
        let (n, m) = (self.unknowns(), self.ports);
        let Scratch { elimination, right, step, jacobian, small, slopes, .. } = scratch;
        elimination.reduce(right);
        for (r, &row) in elimination.left.iter().enumerate() {
            small[r] = right[row];
            let line = &mut jacobian[r * m..][..m];
            let (by_voltage, by_current) = elimination.rest[2 * r * m..][..2 * m].split_at(m);
            line.copy_from_slice(by_voltage);
            for (j, &partner) in self.partners.iter().enumerate() {
                line[j] += by_current[j] * slopes[2 * j];
                line[partner] += by_current[j] * slopes[2 * j + 1];
            }
        }
        dense::solve(jacobian, small, LEAST_PIVOT).map_err(|dense::Singular| Failure::Singular)?;
        step[n..n + m].copy_from_slice(small);
        for (j, &partner) in self.partners.iter().enumerate() {
            step[n + m + j] = slopes[2 * j] * small[j] + slopes[2 * j + 1] * small[partner];
        }
        elimination.substitute(right, step);
        Ok(())
    }

    /// All equations at the state in `scratch`, from the device laws: residuals, the size of their largest terms, the
    /// sum of currents out of each node, junction currents and their slopes.
    pub(super) fn evaluate(&self, scratch: &mut Scratch, sources: f64, conductance: f64) {
        let n = self.unknowns();
        scratch.node_sum.fill(0.0);
        scratch.node_largest.fill(0.0);
        let Scratch {
            residual, largest, node_sum, node_largest, y, u, low, i, slopes, prepared, laws, ..
        } = scratch;
        let voltage = |node: Node| self.column(node).map_or(0.0, |column| y[column]);
        let mut out_of = |node: Node, current: f64| {
            node_sum[node] += current;
            node_largest[node] = node_largest[node].max(current.abs());
        };
        let mut equation = |row: usize, terms: &[f64]| {
            let (mut sum, mut most) = (0.0, 0.0_f64);
            for term in terms {
                sum += term;
                most = most.max(term.abs());
            }
            residual[row] = sum;
            largest[row] = most;
        };
        for slot in &self.slots {
            match *slot {
                Slot::Two { from, to, current } => {
                    let [alpha, rho, epsilon] = laws[current];
                    let flow = y[current];
                    out_of(from, flow);
                    out_of(to, -flow);
                    let terms =
                        [alpha * voltage(from), -alpha * voltage(to), -rho * flow, -sources * epsilon];
                    equation(self.nodes - 1 + current, &terms);
                }
                Slot::Diode { anode, cathode, port, device } => {
                    let Device { law, resistances: [r_s, ..], .. } = &prepared[device];
                    let (flow, slope) = match law {
                        Law::Diode(at) => at.current(u[port]),
                        _ => (0.0, 0.0),
                    };
                    slopes[2 * port] = slope + conductance;
                    slopes[2 * port + 1] = 0.0;
                    i[port] = flow + conductance * u[port] + slopes[2 * port] * low[port];
                    out_of(anode, i[port]);
                    out_of(cathode, -i[port]);
                    equation(
                        n + port,
                        &[voltage(anode), -voltage(cathode), -u[port], -low[port], -r_s * i[port]],
                    );
                }
                Slot::Transistor { collector, base, emitter, port, device } => {
                    let Device { sign, law, resistances: [r_c, r_b, r_e], probe, .. } = &prepared[device];
                    let (u_be, u_bc) = (u[port], u[port + 1]);
                    let now = match law {
                        Law::Transistor(at) => at.currents(u_be, u_bc),
                        _ => transistor::Currents::default(),
                    };
                    let cutoff = sources * probe.cutoff;
                    slopes[2 * port] = now.di_c_dv_be;
                    slopes[2 * port + 1] = now.di_c_dv_bc - conductance;
                    slopes[2 * port + 2] = now.di_b_dv_bc + conductance;
                    slopes[2 * port + 3] = now.di_b_dv_be + conductance;
                    let (d_be, d_bc) = (low[port], low[port + 1]);
                    let i_c = now.i_c + cutoff - conductance * u_bc
                        + (slopes[2 * port] * d_be + slopes[2 * port + 1] * d_bc);
                    let i_b = now.i_b - cutoff
                        + conductance * (u_be + u_bc)
                        + (slopes[2 * port + 3] * d_be + slopes[2 * port + 2] * d_bc);
                    (i[port], i[port + 1]) = (i_c, i_b);
                    out_of(collector, sign * i_c);
                    out_of(base, sign * i_b);
                    out_of(emitter, -sign * (i_c + i_b));
                    let v_b = sign * voltage(base) - sources * probe.v_be;
                    let v_e = sign * voltage(emitter);
                    let v_c = sign * voltage(collector) - sources * probe.v_ce;
                    equation(n + port, &[v_b, -v_e, -u_be, -d_be, -r_b * i_b, -r_e * (i_b + i_c)]);
                    equation(n + port + 1, &[v_b, -v_c, -u_bc, -d_bc, -r_b * i_b, r_c * i_c]);
                }
            }
        }
        residual[..self.nodes - 1].copy_from_slice(&node_sum[1..]);
        largest[..self.nodes - 1].copy_from_slice(&node_largest[1..]);
    }
}

/// Storage for networks of this size, all zero.
pub(super) fn size(plan: &Plan, scratch: &mut Scratch) {
    let (n, m, rows) = (plan.unknowns(), plan.ports, plan.unknowns() + plan.ports);
    if scratch.sized != (plan.nodes, n, m) {
        fill(&mut scratch.residual, rows);
        fill(&mut scratch.largest, rows);
        fill(&mut scratch.right, rows);
        fill(&mut scratch.step, n + 2 * m);
        fill(&mut scratch.node_sum, plan.nodes);
        fill(&mut scratch.node_largest, plan.nodes);
        fill(&mut scratch.i, m);
        fill(&mut scratch.slopes, 2 * m);
        fill(&mut scratch.jacobian, m * m);
        fill(&mut scratch.small, m);
        scratch.sized = (plan.nodes, n, m);
    }
}

fn fill(values: &mut Vec<f64>, length: usize) {
    values.clear();
    values.resize(length, 0.0);
}

fn keep(scratch: &mut Scratch) {
    scratch.kept_y.clone_from(&scratch.y);
    scratch.kept_u.clone_from(&scratch.u);
}

fn recall(scratch: &mut Scratch) {
    scratch.y.clone_from(&scratch.kept_y);
    scratch.u.clone_from(&scratch.kept_u);
    scratch.low.iter_mut().for_each(|low| *low = 0.0);
}

/// Notes an attempt, once in a row; going on from a temperature to the next is not worth a note.
pub(super) fn note(attempts: &mut Vec<Attempt>, attempt: Attempt) {
    let going_on = attempt == Attempt::FromStart && !attempts.is_empty();
    if attempts.last() != Some(&attempt) && !going_on {
        attempts.push(attempt);
    }
}
