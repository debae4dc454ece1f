//! Newton's method on the junction voltages, with a limit on each junction's step; source and conductance stepping.

use super::linear::solve_small;
use super::plan::{Plan, Scratch, Slot};
use super::{Attempt, Branch, Failure, Probe, Solution};
use crate::circuit::Node;
use crate::device::{diode, transistor};

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
/// Junction current (A) at which a junction counts as entered by [`Limit`].
const ENTRY_CURRENT: f64 = 1e-6;

/// A device at its junction temperature.
#[derive(Clone, Copy, Debug)]
pub(super) struct Device {
    /// -1 for PNP.
    pub sign: f64,
    pub law: Law,
    /// In series with collector, base, emitter; or with a diode (first).
    pub resistances: [f64; 3],
    pub probe: Probe,
    pub limits: [Limit; 2],
}

#[derive(Clone, Copy, Debug)]
pub(super) enum Law {
    /// In state open: no current.
    Open,
    Transistor(transistor::AtTemperature),
    Diode(diode::AtTemperature),
}

/// Bounds a Newton step of a junction voltage.
///
/// A tangent to an exponential promises far too much voltage when it is followed upwards: at `v` with current i and slope
/// i / n, a step d asks for the current i (1 + d / n), and the voltage that carries this current is v + n ln(1 + d / n).
/// That is where the step goes. A junction that does not conduct yet has no useful tangent: it goes to its `entry`, the
/// voltage of a small current, and from there on as before. (Nagel 1975 gives the history of such limits.)
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Limit {
    /// Voltage (V) of e-fold current, forward; entry voltage forward.
    pub fold: f64,
    pub entry: f64,
    /// The same for breakdown, counted in reverse voltage; infinite entry without breakdown.
    pub breakdown_fold: f64,
    pub breakdown_entry: f64,
}

impl Limit {
    const NONE: Limit =
        Limit { fold: 1.0, entry: f64::INFINITY, breakdown_fold: 1.0, breakdown_entry: f64::INFINITY };

    fn junction(saturation_current: f64, fold: f64) -> Limit {
        let entry = if saturation_current > 0.0 {
            (fold * libm::log(ENTRY_CURRENT / saturation_current)).max(0.0)
        } else {
            f64::INFINITY
        };
        Limit { fold, entry, ..Limit::NONE }
    }

    /// The voltage to go to, where Newton's method would go from `from` to `to`.
    fn apply(&self, from: f64, to: f64) -> f64 {
        if to > self.entry || from > self.entry {
            one_way(from, to, self.fold, self.entry)
        } else if -to > self.breakdown_entry || -from > self.breakdown_entry {
            -one_way(-from, -to, self.breakdown_fold, self.breakdown_entry)
        } else {
            to
        }
    }
}

fn one_way(from: f64, to: f64, fold: f64, entry: f64) -> f64 {
    let step = to - from;
    if step.abs() <= 2.0 * fold {
        to
    } else if step < 0.0 {
        // Downwards the tangent is safe to the point where the junction stops conducting, not beyond.
        to.max(entry - 2.0 * fold)
    } else if from < entry {
        to.min(entry)
    } else {
        from + fold * libm::log(1.0 + step / fold)
    }
}

impl Device {
    /// The device of a branch at junction temperature `t_j` (K).
    pub fn prepare(branch: &Branch, t_j: f64) -> Device {
        let open = Device {
            sign: 1.0,
            law: Law::Open,
            resistances: [0.0; 3],
            probe: Probe::default(),
            limits: [Limit::NONE; 2],
        };
        match branch {
            Branch::Transistor { pnp, parameters, probe, .. } => {
                let at = parameters.at(t_j);
                let p = &at.parameters;
                let fold = p.emission_coefficient * at.thermal_voltage;
                let limit = Limit::junction(p.saturation_current, fold);
                Device {
                    sign: if *pnp { -1.0 } else { 1.0 },
                    law: Law::Transistor(at),
                    resistances: [p.collector_resistance, p.base_resistance, p.emitter_resistance],
                    probe: *probe,
                    limits: [limit; 2],
                }
            }
            Branch::Diode { parameters, .. } => {
                let at = parameters.at(t_j);
                let p = &at.parameters;
                let fold = p.emission_coefficient * at.thermal_voltage;
                let mut limit = Limit::junction(p.saturation_current, fold);
                if p.breakdown_voltage.is_finite() {
                    limit.breakdown_fold = p.breakdown_slope;
                    limit.breakdown_entry = p.breakdown_voltage
                        - p.breakdown_slope * libm::log(p.breakdown_current / ENTRY_CURRENT).max(0.0);
                }
                Device {
                    law: Law::Diode(at),
                    resistances: [p.series_resistance, 0.0, 0.0],
                    limits: [limit; 2],
                    ..open
                }
            }
            _ => open,
        }
    }
}

/// How far sources are raised, and what stands beside every junction.
#[derive(Clone, Copy, Debug)]
struct Stage {
    sources: f64,
    /// Conductance (S) beside every junction.
    conductance: f64,
    /// Whether the acceptance rule must hold, or nearness is enough.
    last: bool,
    steps: usize,
}

const WHOLE: Stage = Stage { sources: 1.0, conductance: 0.0, last: true, steps: STEPS };

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
        let (n, m) = (self.unknowns(), self.ports);
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
            } else if moved <= 1e3 * bound {
                return Ok(moved);
            }
            for (right, residual) in scratch.right.iter_mut().zip(&scratch.residual) {
                *right = -residual;
            }
            self.solve_linearised(scratch)?;
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
            debug_assert!(scratch.u.len() == m);
            if !moved.is_finite() {
                return Err(Failure::NotConverged { residual: f64::INFINITY });
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
        small.clear();
        jacobian.clear();
        for &row in &elimination.left {
            small.push(right[row]);
            for j in 0..m {
                jacobian.push(elimination.at(row, n + j));
            }
        }
        for (r, &row) in elimination.left.iter().enumerate() {
            let line = &mut jacobian[r * m..][..m];
            self.each_port(|j, partner| {
                line[j] += elimination.at(row, n + m + j) * slopes[2 * j];
                if let Some(other) = partner {
                    line[other] += elimination.at(row, n + m + j) * slopes[2 * j + 1];
                }
            });
        }
        solve_small(jacobian, small)?;
        step[n..n + m].copy_from_slice(small);
        self.each_port(|j, partner| {
            let other = partner.map_or(0.0, |other| slopes[2 * j + 1] * small[other]);
            step[n + m + j] = slopes[2 * j] * small[j] + other;
        });
        elimination.substitute(right, step);
        Ok(())
    }

    /// Calls `f` with each junction and, for a transistor, the other one.
    fn each_port(&self, mut f: impl FnMut(usize, Option<usize>)) {
        for slot in &self.slots {
            match *slot {
                Slot::Two { .. } => {}
                Slot::Diode { port, .. } => f(port, None),
                Slot::Transistor { port, .. } => {
                    f(port, Some(port + 1));
                    f(port + 1, Some(port));
                }
            }
        }
    }

    /// All equations at the state in `scratch`, from the device laws: residuals, the size of their largest terms, the
    /// sum of currents out of each node, junction currents and their slopes.
    pub(super) fn evaluate(&self, scratch: &mut Scratch, sources: f64, conductance: f64) {
        let (n, m, rows) = (self.unknowns(), self.ports, self.unknowns() + self.ports);
        fill(&mut scratch.residual, rows);
        fill(&mut scratch.largest, rows);
        fill(&mut scratch.right, rows);
        fill(&mut scratch.step, n + 2 * m);
        fill(&mut scratch.node_sum, self.nodes);
        fill(&mut scratch.node_largest, self.nodes);
        scratch.i.resize(m, 0.0);
        scratch.slopes.resize(2 * m, 0.0);
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

/// Notes an attempt, once in a row.
pub(super) fn note(attempts: &mut Vec<Attempt>, attempt: Attempt) {
    if attempts.last() != Some(&attempt) {
        attempts.push(attempt);
    }
}
