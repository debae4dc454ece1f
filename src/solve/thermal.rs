//! Operating point at ambient temperature, or in thermal equilibrium with the dissipation it causes itself.
//!
//! Equilibrium: T_j = T_a + R_th P for every device with a thermal resistance, P from the circuit solved at these
//! temperatures. The excess `T_a + R_th P - T_j` is brought to zero by Broyden's method (Broyden 1965; for one device
//! the secant method). Where that fails or ends in an equilibrium that could not last (loop gain above one), the
//! temperatures are followed upwards from ambient as a warming device would go through them, to the first equilibrium or
//! out of bounds.

use super::junction::Device;
use super::newton::note;
use super::plan::{Plan, Scratch, Slot};
use super::{Attempt, Branch, ElementPoint, Failure, OperatingPoint, Solution, Thermal};

/// Junction temperature above ambient (K) beyond which there is no equilibrium to look for: silicon is no transistor there.
pub const RUNAWAY_RISE: f64 = 300.0;
/// Current (A) beyond which a solution says nothing about a circuit of discrete parts.
const LARGEST_CURRENT: f64 = 1e6;
/// Excess (K) below which an equilibrium counts as found.
const EXCESS: f64 = 1e-8;
/// Change of temperature (K) above which the circuit need only be known roughly to say where to go next.
const ROUGH_STEP: f64 = 0.1;
/// Steps of Broyden's method, of warming, of the power method.
const STEPS: usize = 14;
const WARMING_STEPS: usize = 400;
const POWER_STEPS: usize = 12;
/// Relative growth of dissipation with temperature (1/K) that no junction exceeds: its current grows by less than 10 %
/// per kelvin at fixed voltage (band gap and thermal voltage), leakage likewise. Below `1 / GROWTH` of self-heating no
/// equilibrium is unstable.
const GROWTH: f64 = 0.1;

impl Plan {
    /// Operating point of the network with these branches (in network order) at ambient temperature `ambient` (K).
    ///
    /// # Errors
    /// See [`Failure`]; there is never an unconfirmed point.
    pub fn solve(
        &self,
        branches: &[Branch],
        ambient: f64,
        thermal: Thermal,
        start: Option<&Solution>,
        scratch: &mut Scratch,
    ) -> Result<OperatingPoint, Failure> {
        let mut point = self.blank();
        self.solve_into(branches, ambient, thermal, start, scratch, &mut point)?;
        Ok(point)
    }

    /// As [`Plan::solve`], into a point that is used again: nothing is allocated after the first call, but for thermal
    /// equilibria that are not found at once.
    ///
    /// # Errors
    /// See [`Failure`]. Nothing in `point` but the attempts means anything then.
    pub fn solve_into(
        &self,
        branches: &[Branch],
        ambient: f64,
        thermal: Thermal,
        start: Option<&Solution>,
        scratch: &mut Scratch,
        point: &mut OperatingPoint,
    ) -> Result<(), Failure> {
        point.attempts.clear();
        point.error = f64::INFINITY;
        self.laws(branches, scratch)?;
        self.temperatures(branches, ambient, thermal, scratch)?;
        let started = start.filter(|start| self.take_start(start, scratch));
        match started {
            Some(start) => {
                for h in 0..scratch.heat.hot.len() {
                    let device = scratch.heat.hot[h].1;
                    // The rise is more alike at another ambient than the temperature.
                    let rise = start.temperatures[device] - start.ambient;
                    scratch.heat.temperatures[device] = ambient + rise.clamp(0.0, RUNAWAY_RISE);
                }
            }
            None => self.rest(scratch),
        }
        self.prepare(branches, scratch);
        if let Some(start) = started {
            self.carry(&start.scales, scratch);
        }
        self.eliminate(scratch)?;
        let first = if started.is_some() { Attempt::FromStart } else { Attempt::Direct };
        point.error = if scratch.heat.hot.is_empty() {
            self.electrical(scratch, first, &mut point.attempts)?
        } else {
            self.equilibrium(branches, ambient, first, scratch, &mut point.attempts)?
        };
        self.write(branches, ambient, scratch, point);
        let beyond = |at: &ElementPoint| at.i.abs() > LARGEST_CURRENT || at.i_b.abs() > LARGEST_CURRENT;
        match point.elements.iter().position(beyond) {
            Some(element) => Err(Failure::BeyondModel { element }),
            None => Ok(()),
        }
    }

    /// Checks temperatures and thermal resistances; every device at ambient, and the list of those that heat themselves.
    pub(super) fn temperatures(
        &self,
        branches: &[Branch],
        ambient: f64,
        thermal: Thermal,
        scratch: &mut Scratch,
    ) -> Result<(), Failure> {
        if !(ambient.is_finite() && ambient > 0.0) {
            return Err(Failure::Unfit { element: branches.len() });
        }
        let heat = &mut scratch.heat;
        heat.temperatures.clear();
        heat.temperatures.resize(self.devices, ambient);
        heat.hot.clear();
        for (element, (slot, branch)) in self.slots.iter().zip(branches).enumerate() {
            let (Slot::Diode { device, .. } | Slot::Transistor { device, .. }) = *slot else { continue };
            let (Branch::Transistor { r_th, .. } | Branch::Diode { r_th, .. }) = *branch else { continue };
            let Some(r_th) = r_th else { continue };
            if !(r_th.is_finite() && r_th >= 0.0) {
                return Err(Failure::Unfit { element });
            }
            if thermal == Thermal::Equilibrium {
                heat.hot.push((element, device, r_th));
            }
        }
        Ok(())
    }

    /// Devices at their temperatures.
    pub(super) fn prepare(&self, branches: &[Branch], scratch: &mut Scratch) {
        scratch.prepared.clear();
        for (slot, branch) in self.slots.iter().zip(branches) {
            if let Slot::Diode { device, .. } | Slot::Transistor { device, .. } = *slot {
                scratch.prepared.push(Device::prepare(branch, scratch.heat.temperatures[device]));
            }
        }
    }

    /// The circuit at new temperatures, from the state it is in, without confirmation where that is enough (the error is
    /// infinite then); fills `heat.excess`.
    fn approximate(
        &self,
        branches: &[Branch],
        ambient: f64,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        self.reheat(branches, scratch)?;
        let error = if self.approach(scratch, largest(&scratch.heat.step) > ROUGH_STEP) {
            f64::INFINITY
        } else {
            self.electrical(scratch, Attempt::Direct, attempts)?
        };
        self.weigh(branches, ambient, scratch);
        Ok(error)
    }

    /// The circuit at new temperatures, confirmed; fills `heat.excess`. Returns the estimated voltage error (V).
    pub(super) fn follow(
        &self,
        branches: &[Branch],
        ambient: f64,
        first: Attempt,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        self.reheat(branches, scratch)?;
        let error = self.electrical(scratch, first, attempts)?;
        self.weigh(branches, ambient, scratch);
        Ok(error)
    }

    /// Devices at the temperatures in `heat.temperatures`.
    fn reheat(&self, branches: &[Branch], scratch: &mut Scratch) -> Result<(), Failure> {
        let mut changed = false;
        for h in 0..scratch.heat.hot.len() {
            let (element, device, _) = scratch.heat.hot[h];
            let now = Device::prepare(&branches[element], scratch.heat.temperatures[device]);
            let before = std::mem::replace(&mut scratch.prepared[device], now);
            changed |= now.resistances != before.resistances;
            for (j, port) in self.ports_of(element).enumerate() {
                scratch.u[port] = now.limits[j].carried(scratch.u[port], before.limits[j].scale());
            }
        }
        if changed {
            self.eliminate(scratch)?;
        }
        Ok(())
    }

    /// Takes the junction voltages of a start over to the devices as they are now: the same currents.
    fn carry(&self, scales: &[[f64; 2]], scratch: &mut Scratch) {
        for (element, slot) in self.slots.iter().enumerate() {
            let (Slot::Diode { device, .. } | Slot::Transistor { device, .. }) = *slot else { continue };
            for (j, port) in self.ports_of(element).enumerate() {
                let limit = &scratch.prepared[device].limits[j];
                scratch.u[port] = limit.carried(scratch.u[port], scales[port]);
            }
        }
    }

    /// Ports of an element's junctions.
    fn ports_of(&self, element: usize) -> std::ops::Range<usize> {
        match self.slots[element] {
            Slot::Two { .. } => 0..0,
            Slot::Diode { port, .. } => port..port + 1,
            Slot::Transistor { port, .. } => port..port + 2,
        }
    }

    /// By how much each device would be warmer than it is.
    fn weigh(&self, branches: &[Branch], ambient: f64, scratch: &mut Scratch) {
        scratch.heat.excess.clear();
        for h in 0..scratch.heat.hot.len() {
            let (element, device, r_th) = scratch.heat.hot[h];
            let p = self.element(element, &branches[element], ambient, scratch).p;
            let excess = ambient + r_th * p - scratch.heat.temperatures[device];
            scratch.heat.excess.push(excess);
        }
    }

    fn equilibrium(
        &self,
        branches: &[Branch],
        ambient: f64,
        first: Attempt,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        if let Ok(error) = self.broyden(branches, ambient, first, scratch, attempts) {
            return Ok(error);
        }
        note(attempts, Attempt::Warming);
        self.warming(branches, ambient, scratch, attempts)
    }

    /// Broyden's method on the temperatures, from those in `heat.temperatures`, with the inverse of the slope built up
    /// from one.
    fn broyden(
        &self,
        branches: &[Branch],
        ambient: f64,
        first: Attempt,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        let k = scratch.heat.hot.len();
        scratch.heat.matrix.clear();
        scratch.heat.matrix.resize(k * k, 0.0);
        (0..k).for_each(|h| scratch.heat.matrix[h * k + h] = 1.0);
        let mut error = self.follow(branches, ambient, first, scratch, attempts)?;
        let mut gain: Option<f64> = None;
        for _ in 0..STEPS {
            if largest(&scratch.heat.excess) <= EXCESS {
                if error.is_infinite() {
                    error = self.follow(branches, ambient, Attempt::FromStart, scratch, attempts)?;
                    continue;
                }
                let rise = scratch.heat.hot.iter().map(|&(_, device, _)| scratch.heat.temperatures[device]);
                let rise = rise.fold(0.0, f64::max) - ambient;
                if rise * GROWTH >= 1.0 && gain.is_none_or(|gain| gain >= 0.5) {
                    error = self.check_stable(branches, ambient, scratch, attempts)?;
                }
                return Ok(error);
            }
            let heat = &mut scratch.heat;
            heat.before.clone_from(&heat.excess);
            heat.step.clear();
            for h in 0..k {
                let step: f64 = (0..k).map(|c| heat.matrix[h * k + c] * heat.excess[c]).sum();
                heat.step.push(step);
            }
            for h in 0..k {
                let (element, device, _) = heat.hot[h];
                let to = heat.temperatures[device] + heat.step[h];
                if !(to < ambient + RUNAWAY_RISE && to > 0.5 * ambient) {
                    return Err(Failure::ThermalRunaway { element });
                }
                heat.temperatures[device] = to;
            }
            error = self.approximate(branches, ambient, scratch, attempts)?;
            let heat = &mut scratch.heat;
            // H += (s - H y) (s H) / (s H y), where y is what the excess fell by along the step s.
            heat.work.clear();
            for h in 0..k {
                let fallen: f64 =
                    (0..k).map(|c| heat.matrix[h * k + c] * (heat.before[c] - heat.excess[c])).sum();
                heat.work.push(fallen);
            }
            let scale: f64 = (0..k).map(|h| heat.step[h] * heat.work[h]).sum();
            if largest(&heat.step) > 1e-4 {
                let change = (0..k).map(|h| (heat.step[h] - (heat.before[h] - heat.excess[h])).abs());
                gain = Some(change.fold(0.0, f64::max) / largest(&heat.step));
            }
            if scale != 0.0 && scale.is_finite() {
                for c in 0..k {
                    let s_h: f64 = (0..k).map(|r| heat.step[r] * heat.matrix[r * k + c]).sum();
                    heat.before[c] = s_h / scale;
                }
                for r in 0..k {
                    let lack = heat.step[r] - heat.work[r];
                    for c in 0..k {
                        heat.matrix[r * k + c] += lack * heat.before[c];
                    }
                }
            }
        }
        Err(Failure::NotConverged { residual: largest(&scratch.heat.excess) / EXCESS })
    }

    /// Follows the temperatures from ambient as they would rise, to the first equilibrium.
    fn warming(
        &self,
        branches: &[Branch],
        ambient: f64,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        scratch.heat.temperatures.iter_mut().for_each(|t| *t = ambient);
        self.rest(scratch);
        let mut error = self.follow(branches, ambient, Attempt::Direct, scratch, attempts)?;
        let (mut pace, mut near) = (1.0_f64, 1.0_f64);
        let mut reached = scratch.heat.temperatures.clone();
        for _ in 0..WARMING_STEPS {
            let size = largest(&scratch.heat.excess);
            if size <= EXCESS {
                return Ok(error);
            }
            reached.clone_from(&scratch.heat.temperatures);
            if size <= near {
                // Close to an equilibrium that lasts, or beside one that has just ceased to be.
                if let Ok(error) = self.broyden(branches, ambient, Attempt::FromStart, scratch, attempts) {
                    return Ok(error);
                }
                near = 0.05 * size;
                scratch.heat.temperatures.clone_from(&reached);
                self.follow(branches, ambient, Attempt::FromStart, scratch, attempts)?;
            }
            let heat = &mut scratch.heat;
            heat.before.clone_from(&heat.excess);
            for h in 0..heat.hot.len() {
                let (element, device, _) = heat.hot[h];
                heat.temperatures[device] += (pace * heat.excess[h]).clamp(-20.0, 20.0);
                if heat.temperatures[device] > ambient + RUNAWAY_RISE {
                    return Err(Failure::ThermalRunaway { element });
                }
            }
            match self.follow(branches, ambient, Attempt::FromStart, scratch, attempts) {
                Ok(now) => error = now,
                Err(failure) if pace < 1e-2 => {
                    let heat = &scratch.heat;
                    let hottest =
                        (0..heat.hot.len()).max_by(|&a, &b| heat.before[a].total_cmp(&heat.before[b]));
                    // On its way out of bounds, so steeply that the circuit cannot be followed any more.
                    return match hottest {
                        Some(h) if heat.before[h] > RUNAWAY_RISE => {
                            Err(Failure::ThermalRunaway { element: heat.hot[h].0 })
                        }
                        _ => Err(failure),
                    };
                }
                Err(_) => {
                    pace *= 0.25;
                    scratch.heat.temperatures.clone_from(&reached);
                    error = self.follow(branches, ambient, Attempt::FromStart, scratch, attempts)?;
                }
            }
            let heat = &scratch.heat;
            if heat
                .before
                .iter()
                .zip(&heat.excess)
                .any(|(a, b)| a * b < 0.0 && b.abs() > (0.5 * a.abs()).max(0.1))
            {
                pace = (0.5 * pace).max(1e-3);
            }
        }
        Err(Failure::NotConverged { residual: largest(&scratch.heat.excess) / EXCESS })
    }

    /// The loop gain at the present equilibrium by the power method on the change of `T_a + R_th P` with temperature:
    /// at one or above, the equilibrium would not last. Leaves the circuit at the equilibrium again.
    fn check_stable(
        &self,
        branches: &[Branch],
        ambient: f64,
        scratch: &mut Scratch,
        attempts: &mut Vec<Attempt>,
    ) -> Result<f64, Failure> {
        const PROBE: f64 = 0.01;
        let k = scratch.heat.hot.len();
        let element = scratch.heat.hot.first().map_or(0, |hot| hot.0);
        let here = |scratch: &Scratch, h: usize| scratch.heat.temperatures[scratch.heat.hot[h].1];
        let centre: Vec<f64> = (0..k).map(|h| here(scratch, h)).collect();
        let mut direction: Vec<f64> = centre.iter().map(|t| (t - ambient).max(1e-6)).collect();
        let (mut gain, mut shift) = (f64::INFINITY, 0.0_f64);
        for _ in 0..POWER_STEPS {
            let size = largest(&direction);
            if size == 0.0 {
                gain = 0.0;
                break;
            }
            direction.iter_mut().for_each(|d| *d /= size);
            for h in 0..k {
                let device = scratch.heat.hot[h].1;
                scratch.heat.temperatures[device] = centre[h] + PROBE * direction[h];
            }
            self.follow(branches, ambient, Attempt::FromStart, scratch, attempts)?;
            let before = gain;
            let (mut along, mut square) = (0.0, 0.0);
            for h in 0..k {
                // T_a + R_th P - centre, over the probe.
                let answer = (scratch.heat.excess[h] + (here(scratch, h) - centre[h])) / PROBE;
                along += answer * direction[h];
                square += direction[h] * direction[h];
                direction[h] = answer + shift * direction[h];
            }
            gain = along / square;
            // Cooling answers (negative gain) are harmless: put out of the way of the heating ones.
            shift = shift.max(-2.0 * gain);
            if k == 1 || (gain - before).abs() < 1e-3 * gain.abs().max(1e-2) {
                break;
            }
        }
        for (&(_, device, _), t) in scratch.heat.hot.iter().zip(&centre) {
            scratch.heat.temperatures[device] = *t;
        }
        if gain >= 1.0 {
            return Err(Failure::ThermalRunaway { element });
        }
        self.follow(branches, ambient, Attempt::FromStart, scratch, attempts)
    }

    /// Reads a confirmed state out.
    fn write(&self, branches: &[Branch], ambient: f64, scratch: &Scratch, point: &mut OperatingPoint) {
        point.voltages.clear();
        point.voltages.push(0.0);
        point.voltages.extend_from_slice(&scratch.y[self.linear..]);
        point.elements.clear();
        for (element, branch) in branches.iter().enumerate() {
            point.elements.push(self.element(element, branch, ambient, scratch));
        }
        for &(element, ..) in &scratch.heat.hot {
            point.elements[element].self_heated = true;
        }
        point.solution.junctions.clone_from(&scratch.u);
        point.solution.linear.clone_from(&scratch.y);
        point.solution.temperatures.clone_from(&scratch.heat.temperatures);
        point.solution.ambient = ambient;
        point.solution.scales.clear();
        point.solution.scales.resize(self.ports, [f64::INFINITY, 1.0]);
        for (element, slot) in self.slots.iter().enumerate() {
            let (Slot::Diode { device, .. } | Slot::Transistor { device, .. }) = *slot else { continue };
            for (j, port) in self.ports_of(element).enumerate() {
                point.solution.scales[port] = scratch.prepared[device].limits[j].scale();
            }
        }
    }

    /// Voltages and currents at the terminals of one element.
    fn element(&self, element: usize, branch: &Branch, ambient: f64, scratch: &Scratch) -> ElementPoint {
        let voltage = |node| self.column(node).map_or(0.0, |column| scratch.y[column]);
        match self.slots[element] {
            Slot::Two { from, to, current } => {
                let i = scratch.y[current];
                // A resistance shows R i, which keeps its digits where the node voltages are nearly equal.
                let v = match *branch {
                    Branch::Resistor { ohms } | Branch::Inductor { ohms } | Branch::Signal { ohms } => {
                        ohms * i
                    }
                    _ => voltage(from) - voltage(to),
                };
                ElementPoint { v, i, p: v * i, t_j: ambient, ..ElementPoint::default() }
            }
            Slot::Diode { anode, cathode, port, device } => {
                let (v, i) = (voltage(anode) - voltage(cathode), scratch.i[port]);
                let t_j = scratch.heat.temperatures[device];
                ElementPoint { v, i, p: v * i, t_j, ..ElementPoint::default() }
            }
            Slot::Transistor { collector, base, emitter, port, device } => {
                let sign = scratch.prepared[device].sign;
                let (i, i_b) = (sign * scratch.i[port], sign * scratch.i[port + 1]);
                let v = voltage(collector) - voltage(emitter);
                let v_be = voltage(base) - voltage(emitter);
                let t_j = scratch.heat.temperatures[device];
                ElementPoint { v, i, i_b, v_be, p: v * i + v_be * i_b, t_j, self_heated: false }
            }
        }
    }
}

fn largest(values: &[f64]) -> f64 {
    values.iter().fold(0.0, |most, x| if x.is_nan() { f64::INFINITY } else { most.max(x.abs()) })
}
