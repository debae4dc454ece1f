//! The conditions of a note, each cold and in thermal equilibrium, searched for extremes.

use super::compile::Compiled;
use super::judge::Found;
use super::response::{Asked, Disturbance, InCondition, Moves};
use crate::circuit::ElementKind;
use crate::fit::{Bound, Law, Model};
use crate::numeric::threads;
use crate::part::RatingQuantity;
use crate::quantity::{Quantity, Role, Spread};
use crate::solve::{Branch, Region, Thermal};
use crate::spread::{self, Corner, Options, Range, Response};
use crate::worksheet::{Condition, ElementState};

/// One condition in one thermal state, with the range of every output.
pub(super) struct Case<'a> {
    /// Index of the condition.
    pub condition: usize,
    pub response: InCondition<'a>,
    pub ranges: Vec<Range>,
    /// Thermal equilibrium is an upper bound only: the condition is over before it is reached, and no pulse row is given.
    pub bound_only: bool,
}

/// A condition as the note states it; a note without a `conditions` block has one, which is normal.
pub(super) struct Stated<'a> {
    pub name: &'a str,
    pub normal: bool,
    pub lasts: Option<&'a Quantity>,
    pub written: Option<&'a Condition>,
}

/// The conditions in order of writing.
pub(super) fn stated<'a>(compiled: &'a Compiled<'_>) -> Vec<Stated<'a>> {
    let conditions = &compiled.material.worksheet.conditions;
    if conditions.is_empty() {
        return vec![Stated { name: "normal operation", normal: true, lasts: None, written: None }];
    }
    let stated = conditions.iter().map(|condition| Stated {
        name: &condition.name.value,
        normal: condition.normal,
        lasts: condition.lasts.as_ref(),
        written: Some(condition),
    });
    stated.collect()
}

/// Prepares and searches every case, on two threads; the results do not depend on how many.
pub(super) fn search<'a>(compiled: &'a Compiled<'a>, conditions: &[Stated<'_>]) -> Vec<Case<'a>> {
    let mut cases: Vec<Case<'a>> = Vec::new();
    for (index, condition) in conditions.iter().enumerate() {
        for thermal in [Thermal::Equilibrium, Thermal::ColdStart] {
            let (response, bound_only) = respond(compiled, condition, thermal);
            cases.push(Case { condition: index, response, ranges: Vec::new(), bound_only });
        }
    }
    let options: Vec<Options> =
        cases.iter().map(|case| wanted(compiled, &conditions[case.condition])).collect();
    // Equilibria take longest: begun first, they leave no thread alone at the end.
    let mut order: Vec<usize> = (0..cases.len()).collect();
    order.sort_by_key(|&index| cases[index].response.thermal == Thermal::ColdStart);
    let found = threads::on_two(&order, |&index| ranges(&cases[index].response, &options[index]));
    for (index, ranges) in order.into_iter().zip(found) {
        cases[index].ranges = ranges;
    }
    cases
}

/// The range of every output; of those of which no end is wanted the nominal value alone.
fn ranges(condition: &InCondition<'_>, options: &Options) -> Vec<Range> {
    // The first output is always asked: regions are met on the way.
    let is_asked = |output: &usize| *output == 0 || options.wanted[*output] != (false, false);
    let outputs: Vec<usize> = (0..options.wanted.len()).filter(is_asked).collect();
    let wanted = outputs.iter().map(|&output| options.wanted[output]).collect();
    let asked = Asked { condition, outputs };
    let found = spread::extremes(&asked, &Options { wanted });
    let nominal = condition.disturbed(&condition.nominal(), &[]);
    let regions = found.first().map_or_else(Vec::new, |range| range.regions.clone());
    let unsearched = |nominal| Range::unsearched(nominal, regions.clone());
    let mut all: Vec<Range> = nominal.into_iter().map(unsearched).collect();
    for (output, range) in asked.outputs.into_iter().zip(found) {
        all[output] = range;
    }
    all
}

/// The ends that this condition needs: margins downward where the criterion or demand applies, results both ways.
fn wanted(compiled: &Compiled<'_>, condition: &Stated<'_>) -> Options {
    let mut wanted = vec![(false, false); compiled.output_kinds.len()];
    for (line, outputs) in compiled.material.worksheet.acceptance.iter().zip(&compiled.criteria) {
        if line.conditions.is_empty() || line.conditions.iter().any(|c| c.value == condition.name) {
            wanted[outputs.margin].0 = true;
        }
    }
    for (symbol, output) in &compiled.results {
        if compiled.is_tabulated(symbol, condition.name) {
            wanted[*output] = (true, true);
        }
    }
    for outputs in &compiled.stress {
        if outputs.demand.applies.to(condition.lasts.is_some()) {
            match if condition.normal { outputs.normal } else { outputs.fault } {
                Some(margin) => wanted[margin].0 = true,
                None => wanted[outputs.observe].1 = true,
            }
        }
    }
    Options { wanted }
}

/// One condition as a response. Also whether its thermal equilibrium is an upper bound only.
fn respond<'a>(
    compiled: &'a Compiled<'a>,
    condition: &Stated<'_>,
    thermal: Thermal,
) -> (InCondition<'a>, bool) {
    let mut inputs: Vec<Spread> = compiled.inputs.iter().map(|input| input.spread).collect();
    let elements = &compiled.network().elements;
    let mut states: Vec<Option<ElementState>> = vec![None; elements.len()];
    if let Some(written) = condition.written {
        for (name, quantity) in &written.overrides {
            if let Some(slot) = compiled.inputs.iter().position(|input| input.symbol == name.value) {
                inputs[slot] = quantity.spread;
            }
        }
        for (name, state) in &written.states {
            if let Some(element) = elements.iter().position(|element| element.designator == name.value) {
                states[element] = Some(state.value);
            }
        }
    }
    let mut pulse = vec![None; elements.len()];
    let mut bound_only = false;
    if let Some(lasts) = condition.lasts {
        for (i, slot) in pulse.iter_mut().enumerate() {
            let device = compiled.law_of(i).is_some();
            let part = compiled.part_of(i);
            *slot = part.and_then(|part| pulse_r_th(part, lasts.spread.high));
            let steady = part.and_then(|part| part.rating(RatingQuantity::JunctionToAmbient));
            bound_only |=
                device && slot.is_none() && (steady.is_some() || compiled.space.tapes[i].r_th.is_some());
        }
    }
    let axes = device_axes(compiled);
    let response = InCondition::new(&compiled.space, thermal, inputs, states, pulse, &axes);
    (response, bound_only)
}

/// The single-pulse thermal impedance (K/W) of the shortest row that lasts at least `seconds`.
fn pulse_r_th(part: &crate::part::Part, seconds: f64) -> Option<f64> {
    part.pulses
        .iter()
        .filter(|row| row.lasts >= seconds)
        .min_by(|a, b| a.lasts.total_cmp(&b.lasts))
        .map(|row| row.impedance)
}

/// The spread axes of all devices: element, coordinate, name, low and high end as far as rows bound them.
fn device_axes(compiled: &Compiled<'_>) -> Vec<(usize, usize, String, f64, f64)> {
    let mut axes = Vec::new();
    for (i, element) in compiled.network().elements.iter().enumerate() {
        let Some(model) = compiled.material.model_of(element) else { continue };
        for (coordinate, axis) in model.axes.iter().enumerate() {
            let end = |bound: &Bound, end: f64| if matches!(bound, Bound::Absent { .. }) { 0.0 } else { end };
            axes.push((
                i,
                coordinate,
                format!("{} {}", element.designator, axis.name),
                end(&axis.low, -1.0),
                end(&axis.high, 1.0),
            ));
        }
    }
    axes
}

/// Something that no row bounds at a point of the space, and what to do about it.
pub(super) struct Gap {
    pub element: usize,
    pub disturbance: Disturbance,
    /// Which row to get.
    pub wanted: String,
}

/// Every gap in the bounds of the devices that bears on a point: absent sides of spread axes, saturation beyond the rows.
pub(super) fn gaps(compiled: &Compiled<'_>, case: &Case<'_>, at: &[f64]) -> Vec<Gap> {
    let Ok(point) = case.response.point(at, &[]) else { return Vec::new() };
    let branches = case.response.branches(at);
    let mut found = Vec::new();
    for (i, element) in compiled.network().elements.iter().enumerate() {
        let Some(model) = compiled.material.model_of(element) else { continue };
        let region = crate::solve::region(&branches[i], &point.elements[i]);
        for axis in &model.axes {
            for (bound, high) in [(&axis.low, false), (&axis.high, true)] {
                let Bound::Absent { wanted } = bound else { continue };
                let Some(disturbance) = missed(&axis.name, high, region) else { continue };
                let wanted = format!("{}: {wanted}", model.part);
                found.push(Gap { element: i, disturbance, wanted });
            }
        }
        if region == Some(Region::Saturated) {
            found.extend(uncovered(model, i, &branches[i], &point.elements[i]));
        }
    }
    found
}

/// How far a quantity that no row bounds is moved to see whether it matters: half or twice the gain, 50 mV of V_BE,
/// 0.3 V of V_CE in saturation, 10 µA of cut-off current, a tenth of a Zener voltage.
fn missed(axis: &str, high: bool, region: Option<Region>) -> Option<Disturbance> {
    Some(match (axis, high) {
        ("gain", true) => Disturbance::Gain(2.0),
        ("gain", false) => Disturbance::Gain(0.5),
        ("V_BE" | "V_F", true) => Disturbance::Junction(0.05),
        ("V_BE" | "V_F", false) => Disturbance::Junction(-0.05),
        // A transistor that is not saturated has no saturation voltage, and none keeps less than nothing.
        ("saturation", true) if region == Some(Region::Saturated) => Disturbance::Collector(0.3),
        ("leakage", true) => Disturbance::Leakage(10e-6),
        ("V_Z", true) => Disturbance::Breakdown(1.1),
        ("V_Z", false) => Disturbance::Breakdown(0.9),
        _ => return None,
    })
}

/// Saturation at a collector current or forced gain above every maximum row of V_CE(sat).
fn uncovered(
    model: &Model,
    element: usize,
    branch: &Branch,
    point: &crate::solve::ElementPoint,
) -> Option<Gap> {
    let Law::Transistor(law) = &model.law else { return None };
    let forced = crate::solve::forced_gain(branch, point)?;
    let current = point.i.abs();
    let covers = |row: &crate::fit::SaturationRow| {
        row.i_c >= current * (1.0 - 1e-9) && row.forced_gain >= forced * (1.0 - 1e-9)
    };
    if law.saturation_cover.is_empty() || law.saturation_cover.iter().any(covers) {
        return None;
    }
    let current = crate::quantity::text(current, &milliamperes(), 3);
    Some(Gap {
        element,
        disturbance: Disturbance::Collector(0.3),
        wanted: format!("{}: V_CE(sat) max at I_C ≥ {current} with I_C/I_B ≥ {forced:.1}", model.part),
    })
}

fn milliamperes() -> crate::quantity::Unit {
    crate::quantity::preferred_unit(&[1e-3], crate::quantity::Kind::of(crate::quantity::Dimension::AMPERE))
}

/// Whether the circuit has a device that heats itself, so that equilibrium differs from a cold start.
pub(super) fn heats(kind: ElementKind) -> bool {
    matches!(kind, ElementKind::Npn | ElementKind::Pnp | ElementKind::Diode | ElementKind::Zener)
}

impl Case<'_> {
    /// Hottest ambient temperature of the declared space (K).
    pub fn hottest(&self, compiled: &Compiled<'_>) -> f64 {
        self.response.inputs[compiled.space.ambient].high
    }

    pub fn thermal_name(&self) -> &'static str {
        match self.response.thermal {
            Thermal::ColdStart => "cold start",
            Thermal::Equilibrium => "equilibrium",
        }
    }

    /// How each axis varies. What a condition states of an input belongs to the condition, like a bias.
    pub fn roles(&self, compiled: &Compiled<'_>, condition: &Stated<'_>) -> Vec<Role> {
        let stated = |symbol: &str| {
            condition.written.is_some_and(|w| w.overrides.iter().any(|(name, _)| name.value == symbol))
        };
        let role = |moves: &Moves| match *moves {
            Moves::Input(input) if stated(&compiled.inputs[input].symbol) => Role::Bias,
            Moves::Input(input) => compiled.inputs[input].role,
            Moves::Device(element, _) => {
                compiled.part_of(element).and_then(|part| part.spread).unwrap_or(Role::UNIFORM)
            }
        };
        self.response.moves().iter().map(role).collect()
    }

    /// The corner at which an extreme was found.
    pub fn corner(&self, compiled: &Compiled<'_>, found: &Found) -> Corner {
        Corner { levels: self.levels(compiled, &found.at, &found.matters), telling: found.telling }
    }

    /// Inputs at a point: name and printed level.
    pub fn levels(&self, compiled: &Compiled<'_>, at: &[f64], matters: &[usize]) -> Vec<(String, String)> {
        let axes = self.response.axes();
        matters
            .iter()
            .filter_map(|&axis| {
                let record = axes.get(axis)?;
                let value = *at.get(axis)?;
                let level = match self.response.moves()[axis] {
                    Moves::Input(input) => crate::quantity::text(value, &compiled.inputs[input].unit, 3),
                    Moves::Device(..) => device_level(value),
                };
                Some((record.name.clone(), level))
            })
            .collect()
    }
}

fn device_level(value: f64) -> String {
    match value {
        v if v <= -1.0 => "low".to_owned(),
        v if v >= 1.0 => "high".to_owned(),
        0.0 => "typical".to_owned(),
        v => format!("{:+.0} % of its spread", 100.0 * v),
    }
}
