//! One condition of a note as a [`Response`]: a point of the declared space in, every result of the note out.

use std::sync::Mutex;

use crate::circuit::{ElementKind, Network};
use crate::fit::{AXES, Coordinates, Law};
use crate::formula::Tape;
use crate::quantity::Spread;
use crate::solve::{self, Branch, ElementPoint, Failure, OperatingPoint, Plan, Probe, Scratch, Thermal};
use crate::spread::{Axis, Miss, Response};
use crate::worksheet::{ElementState, Region};

/// Temperature at which resistances are stated: 25 °C in kelvin.
const STATED_AT: f64 = crate::device::REFERENCE_TEMPERATURE;

/// What formulas may read of a solved circuit.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) enum Reading {
    /// Voltage of a node against ground.
    Node(usize),
    Element(usize, Field),
    /// Midband voltage gain from the signal source to a node.
    Gain(usize),
    /// Midband output resistance at a node.
    OutputResistance(usize),
    /// Midband input resistance that the signal source sees.
    InputResistance(usize),
    /// How far a transistor is inside a region; positive inside.
    Inside(usize, Region),
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Field {
    /// Voltage of the first against the second terminal; V_CE of a transistor.
    Voltage,
    /// Current into the first terminal; I_C of a transistor.
    Current,
    /// The element's main value as stated, over the inputs.
    Stated,
    BaseCollector,
    Power,
    /// Resistance in this condition at this temperature; capacitance or inductance of a store.
    Value,
    BaseEmitter,
    CollectorBase,
    EmitterCollector,
    EmitterBase,
    BaseCurrent,
    EmitterCurrent,
    Temperature,
    ActiveGain,
    ForcedGain,
    Overdrive,
    /// Stored energy of a capacitor, inductor or coil.
    Energy,
}

/// The values of one element over the inputs.
#[derive(Default)]
pub(super) struct ElementTapes {
    pub value: Option<Tape>,
    /// Source or winding resistance.
    pub resistance: Option<Tape>,
    pub cold: Option<Tape>,
    pub inductance: Option<Tape>,
    /// Thermal resistance as mounted; the part's otherwise.
    pub r_th: Option<Tape>,
    /// Steady thermal resistance of the part (K/W).
    pub part_r_th: Option<f64>,
    /// Temperature coefficient (1/K) that every specimen has (copper), and the bound of one of either sign.
    pub coefficient: f64,
    pub coefficient_bound: f64,
    /// Coefficient written with the element; it stands in the place of the part's.
    pub tcr: Option<Tape>,
    /// The input whose tolerance the element carries, for the sign of the coefficient bound.
    pub own_input: Option<usize>,
    /// The input by whose share a value over the basis drifts with age; an input of the element's own drifts itself.
    pub ageing: Option<usize>,
}

/// What all conditions of a note share.
pub(super) struct Space<'a> {
    pub network: &'a Network,
    pub plan: Plan,
    pub laws: Vec<Option<&'a Law>>,
    pub tapes: Vec<ElementTapes>,
    /// Nominal inputs and their spreads, by slot.
    pub inputs: Vec<(String, Spread)>,
    /// Inputs that drift with age, each with the input that says by which share.
    pub ages: Vec<(usize, usize)>,
    /// Which input is the ambient temperature.
    pub ambient: usize,
    pub readings: Vec<Reading>,
    /// Derived results in an order in which each uses earlier ones only.
    pub derived: Vec<Tape>,
    /// What is observed, and the readings that each leans on (for the reason when there is no value).
    pub outputs: Vec<(Tape, Vec<usize>)>,
    /// Index of the signal source, if the circuit has one.
    pub signal: Option<usize>,
    /// Some reading asks for midband results.
    pub wants_midband: bool,
}

impl Space<'_> {
    pub fn slots(&self) -> usize {
        self.inputs.len() + self.readings.len() + self.derived.len()
    }
}

/// One way in which a bound that no row gives might be missed.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) enum Disturbance {
    /// Current gain times a factor.
    Gain(f64),
    /// V_BE or V_F greater by a voltage.
    Junction(f64),
    /// V_CE in saturation greater by a voltage.
    Collector(f64),
    /// Cut-off or leakage current greater by a current.
    Leakage(f64),
    /// Zener voltage times a factor.
    Breakdown(f64),
    /// A resistance (Ω) in series with the emitter.
    Ballast(f64),
}

/// An operating point in thermal equilibrium and the loop gain of its heat.
pub(super) struct Heat {
    pub point: OperatingPoint,
    pub gain: f64,
}

/// What an axis of the declared space moves.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Moves {
    Input(usize),
    /// Element and spread coordinate.
    Device(usize, usize),
}

/// One condition, cold or in thermal equilibrium.
pub(super) struct InCondition<'a> {
    pub space: &'a Space<'a>,
    pub thermal: Thermal,
    /// Inputs as this condition has them.
    pub inputs: Vec<Spread>,
    pub states: Vec<Option<ElementState>>,
    /// Thermal resistance of the parts in this condition, where a pulse row replaces the steady one.
    pub pulse_r_th: Vec<Option<f64>>,
    axes: Vec<Axis>,
    moves: Vec<Moves>,
    start: Option<crate::solve::Solution>,
    /// How the nominal point was found, with no neighbour to start from.
    pub attempts: Vec<solve::Attempt>,
    work: Mutex<Work>,
}

struct Work {
    slots: Vec<f64>,
    coordinates: Vec<Coordinates>,
    branches: Vec<Branch>,
    misses: Vec<Option<Miss>>,
    scratch: Scratch,
    point: OperatingPoint,
}

impl<'a> InCondition<'a> {
    /// Sets up a condition: inputs with its overrides, states of elements, and the devices' bounded spread axes.
    pub fn new(
        space: &'a Space<'a>,
        thermal: Thermal,
        inputs: Vec<Spread>,
        states: Vec<Option<ElementState>>,
        pulse_r_th: Vec<Option<f64>>,
        device_axes: &[(usize, usize, String, f64, f64)],
    ) -> InCondition<'a> {
        let mut axes = Vec::new();
        let mut moves = Vec::new();
        for (i, spread) in inputs.iter().enumerate() {
            if !spread.is_exact() {
                axes.push(Axis {
                    name: space.inputs[i].0.clone(),
                    low: spread.low,
                    nominal: spread.nominal,
                    high: spread.high,
                });
                moves.push(Moves::Input(i));
            }
        }
        for (element, coordinate, name, low, high) in device_axes {
            if low < high {
                axes.push(Axis { name: name.clone(), low: *low, nominal: 0.0, high: *high });
                moves.push(Moves::Device(*element, *coordinate));
            }
        }
        let elements = space.network.elements.len();
        let mut condition = InCondition {
            space,
            thermal,
            inputs,
            states,
            pulse_r_th,
            axes,
            moves,
            start: None,
            attempts: Vec::new(),
            work: Mutex::new(Work {
                slots: vec![0.0; space.slots()],
                coordinates: vec![[0.0; AXES]; elements],
                branches: vec![Branch::Open; elements],
                misses: vec![None; space.readings.len()],
                scratch: space.plan.scratch(),
                point: space.plan.blank(),
            }),
        };
        if let Ok(point) = condition.point(&condition.nominal(), &[]) {
            condition.attempts = point.attempts;
            condition.start = Some(point.solution);
        }
        condition
    }

    pub fn moves(&self) -> &[Moves] {
        &self.moves
    }

    /// The nominal point, one value an axis.
    pub fn nominal(&self) -> Vec<f64> {
        self.axes.iter().map(|axis| axis.nominal).collect()
    }

    /// The full operating point at a point of the space, with disturbances of elements.
    pub fn point(&self, at: &[f64], disturbed: &[(usize, Disturbance)]) -> Result<OperatingPoint, Failure> {
        let mut work = self.work();
        self.solve(&mut work, at, disturbed)?;
        Ok(work.point.clone())
    }

    /// All outputs at a point of the space, with disturbances of elements.
    pub fn disturbed(&self, at: &[f64], disturbed: &[(usize, Disturbance)]) -> Vec<Result<f64, Miss>> {
        let mut outputs = vec![Err(Miss::NotConverged); self.space.outputs.len()];
        self.evaluate(at, disturbed, None, &mut outputs);
        outputs
    }

    /// The operating point with the loop gain of its heat, and all equilibria where a single device heats itself.
    pub fn heat(&self, at: &[f64], disturbed: &[(usize, Disturbance)]) -> Result<Heat, Failure> {
        let mut work = self.work();
        let ambient = self.prepare(&mut work, at, disturbed);
        let Work { branches, scratch, point, .. } = &mut *work;
        let plan = &self.space.plan;
        plan.solve_into(branches, ambient, self.thermal, self.start.as_ref(), scratch, point)?;
        let gain = plan.loop_gain(branches, ambient, &point.solution, scratch)?;
        Ok(Heat { point: point.clone(), gain })
    }

    /// All thermal equilibria at a point, where a single device heats itself.
    pub fn equilibria(&self, at: &[f64]) -> Option<Vec<solve::Equilibrium>> {
        let mut work = self.work();
        let ambient = self.prepare(&mut work, at, &[]);
        let Work { branches, scratch, .. } = &mut *work;
        let start = self.start.as_ref()?;
        self.space.plan.equilibria(branches, ambient, start, scratch).ok()?
    }

    /// The thermal resistance (K/W) of an element as this condition has it.
    pub fn r_th(&self, at: &[f64], element: usize) -> Option<f64> {
        match self.branches(at)[element] {
            Branch::Transistor { r_th, .. } | Branch::Diode { r_th, .. } => r_th,
            _ => None,
        }
    }

    /// A point at another ambient temperature (K), inside its range or not; `None` where no axis is the ambient.
    pub fn at_ambient(&self, at: &[f64], ambient: f64) -> Option<Vec<f64>> {
        let axis = self.moves.iter().position(|moves| *moves == Moves::Input(self.space.ambient))?;
        let mut moved = at.to_vec();
        moved[axis] = ambient;
        Some(moved)
    }

    /// Values of all inputs, readings and derived results at a point; not-a-number where there is none.
    pub fn slots(&self, at: &[f64]) -> Result<Vec<f64>, Failure> {
        let mut work = self.work();
        self.solve(&mut work, at, &[])?;
        self.read(&mut work);
        Ok(work.slots.clone())
    }

    /// The same condition with one input swept over a range.
    pub fn with_input(&self, input: usize, spread: Spread) -> InCondition<'a> {
        let mut inputs = self.inputs.clone();
        inputs[input] = spread;
        let device_axes: Vec<(usize, usize, String, f64, f64)> = self
            .moves
            .iter()
            .zip(&self.axes)
            .filter_map(|(moves, axis)| match *moves {
                Moves::Device(element, coordinate) => {
                    Some((element, coordinate, axis.name.clone(), axis.low, axis.high))
                }
                Moves::Input(_) => None,
            })
            .collect();
        let (states, pulses) = (self.states.clone(), self.pulse_r_th.clone());
        InCondition::new(self.space, self.thermal, inputs, states, pulses, &device_axes)
    }

    /// Whether an output moves with an input that does not vary, a thousandth up and down.
    pub fn depends_on(&self, at: &[f64], input: usize, output: usize) -> bool {
        let nominal = self.inputs[input].nominal;
        let step = if nominal == 0.0 { 1e-3 } else { nominal.abs() * 1e-3 };
        let values: Vec<Option<f64>> = [nominal - step, nominal, nominal + step]
            .into_iter()
            .map(|value| {
                let swept = self.with_input(input, Spread::exact(value));
                swept.disturbed(at, &[])[output].ok()
            })
            .collect();
        let [Some(low), Some(here), Some(high)] = values[..] else { return true };
        let moved = (low - here).abs().max((high - here).abs());
        moved > 1e-8 * here.abs().max(1e-12)
    }

    /// Capacitance or inductance of each element that stores energy.
    pub fn stores(&self, at: &[f64]) -> Vec<Option<f64>> {
        let mut work = self.work();
        self.prepare(&mut work, at, &[]);
        let elements = self.space.network.elements.iter().zip(&self.space.tapes);
        elements
            .map(|(element, tapes)| match element.kind {
                ElementKind::Capacitor | ElementKind::Inductor => {
                    tapes.value.as_ref().map(|tape| tape.eval(&work.slots))
                }
                _ => tapes.inductance.as_ref().map(|tape| tape.eval(&work.slots)),
            })
            .collect()
    }

    /// The ambient temperature at a point (K).
    pub fn ambient(&self, at: &[f64]) -> f64 {
        let ambient = self.space.ambient;
        self.moves
            .iter()
            .zip(at)
            .find(|(moves, _)| **moves == Moves::Input(ambient))
            .map_or(self.inputs[ambient].nominal, |(_, value)| *value)
    }

    /// The branches at a point: what the solver was given.
    pub fn branches(&self, at: &[f64]) -> Vec<Branch> {
        let mut work = self.work();
        self.prepare(&mut work, at, &[]);
        work.branches.clone()
    }

    fn work(&self) -> std::sync::MutexGuard<'_, Work> {
        // A poisoned lock holds working storage only, which every use fills anew.
        self.work.lock().unwrap_or_else(std::sync::PoisonError::into_inner)
    }

    fn prepare(&self, work: &mut Work, at: &[f64], disturbed: &[(usize, Disturbance)]) -> f64 {
        for (slot, spread) in work.slots.iter_mut().zip(&self.inputs) {
            *slot = spread.nominal;
        }
        work.coordinates.iter_mut().for_each(|coordinates| *coordinates = [0.0; AXES]);
        for (moves, value) in self.moves.iter().zip(at) {
            match *moves {
                Moves::Input(input) => work.slots[input] = *value,
                Moves::Device(element, axis) => work.coordinates[element][axis] = *value,
            }
        }
        for &(value, drift) in &self.space.ages {
            work.slots[value] *= 1.0 + work.slots[drift];
        }
        let ambient = work.slots[self.space.ambient];
        for element in 0..self.space.network.elements.len() {
            work.branches[element] = self.branch(element, &work.slots, &work.coordinates[element], ambient);
        }
        for &(element, disturbance) in disturbed {
            disturb(&mut work.branches[element], disturbance);
        }
        ambient
    }

    fn solve(&self, work: &mut Work, at: &[f64], disturbed: &[(usize, Disturbance)]) -> Result<(), Failure> {
        let ambient = self.prepare(work, at, disturbed);
        self.space.plan.solve_into(
            &work.branches,
            ambient,
            self.thermal,
            self.start.as_ref(),
            &mut work.scratch,
            &mut work.point,
        )
    }

    /// What the solver needs to know of one element.
    fn branch(&self, element: usize, slots: &[f64], at: &Coordinates, ambient: f64) -> Branch {
        let record = &self.space.network.elements[element];
        let tapes = &self.space.tapes[element];
        let number =
            |tape: &Option<Tape>, without: f64| tape.as_ref().map_or(without, |tape| tape.eval(slots));
        match self.states[element] {
            Some(ElementState::Open) => return Branch::Open,
            Some(ElementState::Shorted) => return Branch::Resistor { ohms: 0.0 },
            _ => {}
        }
        let r_th =
            tapes.r_th.as_ref().map(|tape| tape.eval(slots)).or(self.pulse_r_th[element]).or(tapes.part_r_th);
        match (record.kind, self.space.laws[element]) {
            (ElementKind::Resistor | ElementKind::Filament | ElementKind::Coil, _) => {
                let cold = self.states[element] == Some(ElementState::Cold);
                let tape = if cold { &tapes.cold } else { &tapes.value };
                let aged = tapes.ageing.map_or(1.0, |drift| 1.0 + slots[drift]);
                Branch::Resistor { ohms: number(tape, f64::NAN) * aged * self.drift(tapes, slots, ambient) }
            }
            (ElementKind::Capacitor, _) => Branch::Capacitor,
            (ElementKind::Inductor, _) => Branch::Inductor { ohms: number(&tapes.resistance, 0.0) },
            (ElementKind::Supply, _) => {
                Branch::Supply { volts: number(&tapes.value, f64::NAN), ohms: number(&tapes.resistance, 0.0) }
            }
            (ElementKind::Current, _) => Branch::Current { amperes: number(&tapes.value, f64::NAN) },
            (ElementKind::Signal, _) => Branch::Signal { ohms: number(&tapes.resistance, 0.0) },
            (kind @ (ElementKind::Npn | ElementKind::Pnp), Some(Law::Transistor(law))) => {
                Branch::Transistor {
                    pnp: kind == ElementKind::Pnp,
                    parameters: law.specimen(at),
                    r_th,
                    probe: Probe::default(),
                }
            }
            (_, Some(Law::Diode(law))) => Branch::Diode { parameters: law.specimen(at), r_th },
            // The circuit room lets no device without a part record through, nor one of another kind.
            _ => Branch::Open,
        }
    }

    /// Factor on a resistance at this ambient temperature. A coefficient of unknown sign acts in the direction in which
    /// this specimen already lies, which is the worst that its sign can do.
    fn drift(&self, tapes: &ElementTapes, slots: &[f64], ambient: f64) -> f64 {
        let rise = ambient - STATED_AT;
        let side = tapes.own_input.map_or(0.0, |input| {
            let spread = &self.inputs[input];
            // As bought: what it drifted with age says nothing about the specimen.
            let drift =
                self.space.ages.iter().find(|(value, _)| *value == input).map(|(_, drift)| slots[*drift]);
            let bought = slots[input] / (1.0 + drift.unwrap_or(0.0));
            let half = if bought < spread.nominal {
                spread.nominal - spread.low
            } else {
                spread.high - spread.nominal
            };
            if half > 0.0 { ((bought - spread.nominal) / half).clamp(-1.0, 1.0) } else { 0.0 }
        });
        let coefficient = tapes.tcr.as_ref().map_or(tapes.coefficient, |tape| tape.eval(slots));
        1.0 + coefficient * rise + tapes.coefficient_bound * rise.abs() * side
    }

    /// The outputs whose numbers stand in `asked`, or all; the code of all regions.
    fn evaluate(
        &self,
        at: &[f64],
        disturbed: &[(usize, Disturbance)],
        asked: Option<&[usize]>,
        outputs: &mut [Result<f64, Miss>],
    ) -> u64 {
        let mut work = self.work();
        if let Err(failure) = self.solve(&mut work, at, disturbed) {
            outputs.fill(Err(match failure {
                Failure::ThermalRunaway { .. } => Miss::ThermalRunaway,
                _ => Miss::NotConverged,
            }));
            return u64::MAX;
        }
        self.read(&mut work);
        for (i, output) in outputs.iter_mut().enumerate() {
            let (tape, leans_on) = &self.space.outputs[asked.map_or(i, |asked| asked[i])];
            let value = tape.eval(&work.slots);
            *output = if value.is_finite() {
                Ok(value)
            } else {
                Err(leans_on.iter().find_map(|&reading| work.misses[reading]).unwrap_or(Miss::NotFinite))
            };
        }
        self.regions(&work)
    }

    /// Fills the slots of readings and derived results from the solved point.
    fn read(&self, work: &mut Work) {
        let space = self.space;
        let first = space.inputs.len();
        let midband = match space.signal {
            Some(signal) if space.wants_midband => {
                space.plan.midband(&work.point, &work.branches, signal, &mut work.scratch).ok()
            }
            _ => None,
        };
        for (i, reading) in space.readings.iter().enumerate() {
            let value = match *reading {
                Reading::Node(node) => Ok(work.point.voltages[node]),
                Reading::Element(element, field) => self.field(
                    element,
                    field,
                    &work.point.elements[element],
                    &work.branches[element],
                    &work.slots,
                ),
                Reading::Inside(element, region) => {
                    solve::margin(as_solved(region), &work.branches[element], &work.point.elements[element])
                        .ok_or(Miss::Undefined)
                }
                Reading::Gain(node) => {
                    midband.as_ref().and_then(|m| m.gain.get(node).copied()).ok_or(Miss::Undefined)
                }
                Reading::InputResistance(_) => {
                    midband.as_ref().and_then(|m| m.input_resistance).ok_or(Miss::Undefined)
                }
                Reading::OutputResistance(node) => space
                    .plan
                    .output_resistance(&work.point, &work.branches, node, &mut work.scratch)
                    .map_err(|_| Miss::Undefined),
            };
            work.misses[i] = value.err();
            work.slots[first + i] = value.unwrap_or(f64::NAN);
        }
        let first = first + space.readings.len();
        for (i, tape) in space.derived.iter().enumerate() {
            work.slots[first + i] = tape.eval(&work.slots);
        }
    }

    fn field(
        &self,
        element: usize,
        field: Field,
        point: &ElementPoint,
        branch: &Branch,
        slots: &[f64],
    ) -> Result<f64, Miss> {
        let tapes = &self.space.tapes[element];
        let main = || tapes.value.as_ref().map(|tape| tape.eval(slots)).ok_or(Miss::Undefined);
        Ok(match field {
            Field::Voltage => point.v,
            Field::Current => point.i,
            Field::Stated => main()?,
            Field::BaseCollector => point.v_be - point.v,
            Field::Power => point.p,
            Field::Value => match branch {
                Branch::Resistor { ohms } => *ohms,
                _ => main()?,
            },
            Field::BaseEmitter => point.v_be,
            Field::EmitterBase => -point.v_be,
            Field::CollectorBase => point.v - point.v_be,
            Field::EmitterCollector => -point.v,
            Field::BaseCurrent => point.i_b,
            Field::EmitterCurrent => -(point.i + point.i_b),
            Field::Temperature if self.thermal == Thermal::Equilibrium && !point.self_heated => {
                return Err(Miss::NoThermalResistance);
            }
            Field::Temperature => point.t_j,
            Field::ActiveGain => solve::active_gain(branch, point).ok_or(Miss::Undefined)?,
            Field::ForcedGain => solve::forced_gain(branch, point).ok_or(Miss::Undefined)?,
            Field::Overdrive => solve::overdrive(branch, point).ok_or(Miss::Undefined)?,
            Field::Energy => match self.space.network.elements[element].kind {
                ElementKind::Capacitor => main()? * point.v * point.v / 2.0,
                ElementKind::Inductor => main()? * point.i * point.i / 2.0,
                _ => {
                    let henry =
                        tapes.inductance.as_ref().map(|tape| tape.eval(slots)).ok_or(Miss::Undefined)?;
                    henry * point.i * point.i / 2.0
                }
            },
        })
    }

    /// A code of all regions: two bits a transistor.
    fn regions(&self, work: &Work) -> u64 {
        let mut code = 0_u64;
        for (branch, point) in work.branches.iter().zip(&work.point.elements) {
            if let Some(region) = solve::region(branch, point) {
                code = code.wrapping_mul(4).wrapping_add(region as u64);
            }
        }
        code
    }
}

impl Response for InCondition<'_> {
    fn axes(&self) -> &[Axis] {
        &self.axes
    }

    fn outputs(&self) -> usize {
        self.space.outputs.len()
    }

    fn eval(&self, at: &[f64], outputs: &mut [Result<f64, Miss>]) -> u64 {
        self.evaluate(at, &[], None, outputs)
    }
}

/// Some outputs of a condition: what it is searched for.
pub(super) struct Asked<'c, 'a> {
    pub condition: &'c InCondition<'a>,
    /// Numbers of the outputs.
    pub outputs: Vec<usize>,
}

impl Response for Asked<'_, '_> {
    fn axes(&self) -> &[Axis] {
        &self.condition.axes
    }

    fn outputs(&self) -> usize {
        self.outputs.len()
    }

    fn eval(&self, at: &[f64], outputs: &mut [Result<f64, Miss>]) -> u64 {
        self.condition.evaluate(at, &[], Some(&self.outputs), outputs)
    }
}

/// In words what a code of one transistor means.
pub(super) fn region_name(code: u64) -> &'static str {
    match code {
        0 => solve::Region::Off.text(),
        1 => solve::Region::Active.text(),
        2 => solve::Region::Saturated.text(),
        _ => solve::Region::Reverse.text(),
    }
}

fn as_solved(region: Region) -> solve::Region {
    match region {
        Region::Off => solve::Region::Off,
        Region::Active => solve::Region::Active,
        Region::Saturated => solve::Region::Saturated,
        Region::Reverse => solve::Region::Reverse,
    }
}

fn disturb(branch: &mut Branch, disturbance: Disturbance) {
    match (branch, disturbance) {
        (Branch::Transistor { parameters, .. }, Disturbance::Gain(factor)) => {
            parameters.gain_forward *= factor;
            parameters.emitter_leakage /= factor;
        }
        (Branch::Transistor { parameters, .. }, Disturbance::Ballast(ohms)) => {
            parameters.emitter_resistance += ohms
        }
        (Branch::Transistor { probe, .. }, Disturbance::Junction(volts)) => probe.v_be += volts,
        (Branch::Transistor { probe, .. }, Disturbance::Collector(volts)) => probe.v_ce += volts,
        (Branch::Transistor { probe, .. }, Disturbance::Leakage(amperes)) => probe.cutoff += amperes,
        (Branch::Diode { parameters, .. }, Disturbance::Junction(volts)) => {
            let n_vt = parameters.emission_coefficient * crate::device::thermal_voltage(STATED_AT);
            parameters.saturation_current *= libm::exp(-volts / n_vt);
        }
        (Branch::Diode { parameters, .. }, Disturbance::Leakage(amperes)) => parameters.leakage += amperes,
        (Branch::Diode { parameters, .. }, Disturbance::Breakdown(factor)) => {
            parameters.breakdown_voltage *= factor
        }
        _ => {}
    }
}
