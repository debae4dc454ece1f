//! Thermal run-away: at the hottest corner of each transistor the loop gain of the circuit's heat, the ambient temperature at
//! which it reaches one, and the emitter resistance that would keep it low.

use super::cases::Case;
use super::findings::{EquilibriumFinding, HeatFinding};
use super::judge::Judge;
use super::response::Disturbance;
use crate::circuit::ElementKind;
use crate::part::RatingQuantity;
use crate::solve::{Failure, Thermal};
use crate::spread::Miss;

/// Ambient temperatures (K) between which run-away is looked for, and the step and halvings of the search.
const LOOKED_AT: [f64; 2] = [273.15 - 100.0, 273.15 + 200.0];
const STEP: f64 = 10.0;
const HALVINGS: usize = 10;
/// Loop gain that a ballast should bring the circuit down to (common practice: a factor of two from run-away).
const WANTED_GAIN: f64 = 0.5;
/// Ballast (Ω): where the search begins, what is too much to be one, and the halvings that locate the least.
const FIRST_BALLAST: f64 = 0.01;
const MOST_BALLAST: f64 = 1e4;
const BALLAST_HALVINGS: usize = 12;

/// One line for each transistor that heats itself, in each condition that lasts.
pub(super) fn lines(judge: &Judge<'_>) -> Vec<HeatFinding> {
    let mut found = Vec::new();
    for case in judge.cases.iter().filter(|case| case.response.thermal == Thermal::Equilibrium) {
        let condition = &judge.conditions[case.condition];
        if condition.lasts.is_some() {
            continue;
        }
        for (element, record) in judge.compiled.network().elements.iter().enumerate() {
            if !matches!(record.kind, ElementKind::Npn | ElementKind::Pnp) {
                continue;
            }
            let hottest = hottest(judge, case, &record.designator);
            found.extend(line(case, element, &record.designator, condition.name, &hottest));
        }
    }
    found
}

/// The corner at which a transistor's junction is hottest, one at which it runs away if there is any; nominal where nothing
/// asks for it.
fn hottest(judge: &Judge<'_>, case: &Case<'_>, designator: &str) -> Vec<f64> {
    let asked = judge.compiled.stress.iter().find(|outputs| {
        outputs.demand.designator == designator
            && outputs.demand.quantity == RatingQuantity::JunctionTemperature
    });
    let normal = judge.conditions[case.condition].normal;
    let corner = asked.and_then(|outputs| {
        let margin = if normal { outputs.normal } else { outputs.fault };
        let range = &case.ranges[margin.unwrap_or(outputs.observe)];
        match &range.missing {
            Some((Miss::ThermalRunaway, at)) => Some(at),
            _ => (if margin.is_some() { &range.min } else { &range.max }).as_ref().map(|corner| &corner.at),
        }
    });
    corner.map_or_else(|| case.response.nominal(), Clone::clone)
}

/// `None` where the transistor does not heat itself, or the corner has no solution for another reason than heat.
fn line(
    case: &Case<'_>,
    element: usize,
    designator: &str,
    condition: &str,
    at: &[f64],
) -> Option<HeatFinding> {
    let response = &case.response;
    let r_th = response.r_th(at, element)?;
    let ambient = response.ambient(at);
    let equilibrium = match response.heat(at, &[]) {
        Ok(heat) => {
            let own = &heat.point.elements[element];
            Some(EquilibriumFinding { power: own.p, t_j: own.t_j, gain: heat.gain })
        }
        Err(Failure::ThermalRunaway { .. }) => None,
        Err(_) => return None,
    };
    let upper =
        equilibrium.and_then(|_| response.equilibria(at)?.iter().find(|one| !one.lasts).map(|one| one.t_j));
    let tame = equilibrium.is_some_and(|found| found.gain <= WANTED_GAIN);
    Some(HeatFinding {
        designator: designator.to_owned(),
        condition: condition.to_owned(),
        ambient,
        r_th,
        equilibrium,
        runaway_from: runaway_from(case, at, ambient),
        looked_at: LOOKED_AT,
        upper,
        ballast: if tame { None } else { ballast(case, at, element) },
    })
}

/// The ambient temperature (K) from which there is no equilibrium that lasts; `None` if there is one, or none, as far as is
/// looked.
fn runaway_from(case: &Case<'_>, at: &[f64], ambient: f64) -> Option<f64> {
    let lasts = |ambient: f64| {
        let there = case.response.at_ambient(at, ambient)?;
        Some(case.response.heat(&there, &[]).is_ok_and(|heat| heat.gain < 1.0))
    };
    let upwards = lasts(ambient)?;
    let [lowest, highest] = LOOKED_AT;
    let (mut low, mut high) = (ambient, ambient);
    while upwards && lasts(high)? {
        if high >= highest {
            return None;
        }
        (low, high) = (high, (high + STEP).min(highest));
    }
    while !upwards && !lasts(low)? {
        if low <= lowest {
            return None;
        }
        (low, high) = ((low - STEP).max(lowest), low);
    }
    for _ in 0..HALVINGS {
        let middle = 0.5 * (low + high);
        if lasts(middle)? { low = middle } else { high = middle }
    }
    Some(0.5 * (low + high))
}

/// The least resistance (Ω) in series with the emitter that brings the loop gain down to what is wanted.
fn ballast(case: &Case<'_>, at: &[f64], element: usize) -> Option<f64> {
    let enough = |ohms: f64| {
        let heat = case.response.heat(at, &[(element, Disturbance::Ballast(ohms))]);
        heat.is_ok_and(|heat| heat.gain <= WANTED_GAIN)
    };
    let mut high = FIRST_BALLAST;
    while !enough(high) {
        high *= 2.0;
        if high > MOST_BALLAST {
            return None;
        }
    }
    let mut low = 0.5 * high;
    for _ in 0..BALLAST_HALVINGS {
        let middle = 0.5 * (low + high);
        if enough(middle) { high = middle } else { low = middle }
    }
    Some(high)
}
