//! Stress lines and the facts that cautions are chosen by.

use super::cases::Stated;
use super::compile::StressOutputs;
use super::findings::{CriterionFinding, HeatFinding, Verdict};
use super::judge::Judge;
use super::response::Moves;
use crate::caution::{self, Between, Caution, ElementFact, Facts, HeatFact, SafetyFact, Worst};
use crate::circuit::ElementKind;
use crate::part::RatingQuantity;
use crate::quantity::Shown;
use crate::solve::Thermal;
use crate::spread::{Corner, Response};
use crate::stress::{self, Judged, StressLine};
use crate::worksheet::Over;

/// Every rated quantity of every element in every condition.
pub(super) fn lines(judge: &Judge<'_>) -> Vec<StressLine> {
    let mut lines = Vec::new();
    for outputs in &judge.compiled.stress {
        for (index, condition) in judge.conditions.iter().enumerate() {
            if outputs.demand.applies.to(condition.lasts.is_some()) {
                lines.push(line(judge, outputs, index, condition));
            }
        }
    }
    lines
}

fn line(judge: &Judge<'_>, outputs: &StressOutputs, index: usize, condition: &Stated<'_>) -> StressLine {
    let demand = &outputs.demand;
    let margin = if condition.normal { outputs.normal } else { outputs.fault };
    let hottest =
        judge.cases.iter().find(|case| case.condition == index).map(|case| case.hottest(judge.compiled));
    let mut judged = Judged {
        condition: condition.name.to_owned(),
        normal: condition.normal,
        thermal: String::new(),
        worst: Shown::NotShown(format!("missing: {}", demand.wanted)),
        margin: None,
        ambient: None,
        hottest,
        corner: Corner::default(),
        assumptions: 0,
        open: None,
    };
    let Some(margin) = margin else {
        // Without a rating there is no margin; the value is still worth seeing.
        match judge.end(outputs.observe, true, |c| c == index) {
            Ok(found) => judged.worst = Shown::Value(found.value),
            Err(reason) => judged.worst = Shown::NotShown(reason),
        }
        return stress::line(demand, judged);
    };
    let size = |_: &super::judge::Found| demand.rating.unwrap_or(0.0);
    let ruling = judge.rule(margin, Over::Extremes, |c| c == index, size);
    if let Some(found) = &ruling.worst {
        let case = &judge.cases[found.case];
        judged.thermal = case.thermal_name().to_owned();
        judged.worst = judge
            .at(found, outputs.observe)
            .map_or_else(|| Shown::NotShown("no value at the worst corner".to_owned()), Shown::Value);
        judged.margin = Some(found.value);
        judged.ambient = Some(case.response.ambient(&found.at));
        judged.corner = case.corner(judge.compiled, found);
    }
    match ruling.verdict {
        Verdict::Met | Verdict::NotMet => {}
        Verdict::MetOnAssumptions { count } => judged.assumptions = count,
        Verdict::NotShown { reason } if judged.margin.is_some_and(|margin| margin >= 0.0) => {
            judged.open = Some(reason)
        }
        Verdict::NotShown { reason } => {
            // Negative, but leaning on what no row bounds: no confirmed violation.
            judged.worst = Shown::NotShown(reason);
            judged.margin = None;
        }
    }
    stress::line(demand, judged)
}

/// Cautions of the note.
pub(super) fn cautions(
    judge: &Judge<'_>,
    criteria: &[CriterionFinding],
    stress: &[StressLine],
    heat: &[HeatFinding],
) -> Vec<Caution> {
    let heat = heat.iter().map(|found| HeatFact {
        designator: found.designator.clone(),
        condition: found.condition.clone(),
        ambient: found.ambient,
        gain: found.equilibrium.map(|equilibrium| equilibrium.gain),
        runaway_from: found.runaway_from,
        ballast: found.ballast,
    });
    caution::cautions(&Facts { heat: heat.collect(), ..facts(judge, criteria, stress) })
}

fn facts(judge: &Judge<'_>, criteria: &[CriterionFinding], stress: &[StressLine]) -> Facts {
    let compiled = judge.compiled;
    let mut facts = Facts::default();
    let points = corner_points(judge);
    for (i, element) in compiled.network().elements.iter().enumerate() {
        let mut fact = ElementFact::of(element);
        let part = compiled.part_of(i);
        fact.v_ebo =
            part.and_then(|part| part.rating(RatingQuantity::EmitterBase)).map(|rating| rating.value);
        for point in &points {
            let at = &point.elements[i];
            let keep = |slot: &mut Option<Worst>, value: f64| {
                if slot.as_ref().is_none_or(|worst| value > worst.value) {
                    *slot = Some(Worst { value, condition: point.condition.to_owned() });
                }
            };
            match element.kind {
                ElementKind::Npn | ElementKind::Pnp => {
                    let sign = if element.kind == ElementKind::Npn { 1.0 } else { -1.0 };
                    keep(&mut fact.reverse_v_eb, -sign * at.v_be);
                    if at.self_heated {
                        keep(&mut fact.temperature, at.t_j);
                    }
                }
                kind => {
                    keep(&mut fact.voltage, at.v.abs());
                    keep(&mut fact.current, at.i.abs());
                    if super::cases::heats(kind) && at.self_heated {
                        keep(&mut fact.temperature, at.t_j);
                    }
                    if let Some(store) = point.stores[i] {
                        let across = if kind == ElementKind::Capacitor { at.v } else { at.i };
                        keep(&mut fact.energy, store * across * across / 2.0);
                    }
                }
            }
        }
        fact.resistance = compiled
            .inputs
            .iter()
            .find(|input| input.symbol == element.designator)
            .map(|input| input.spread.high)
            .filter(|_| {
                matches!(element.kind, ElementKind::Resistor | ElementKind::Filament | ElementKind::Coil)
            });
        for line in stress.iter().filter(|line| line.designator == element.designator) {
            if line.quantity == RatingQuantity::Dissipation
                && let Some(ratio) = line.ratio
                && fact.power_ratio.as_ref().is_none_or(|worst| ratio > worst.value)
            {
                fact.power_ratio = Some(Worst { value: ratio, condition: line.condition.clone() });
            }
        }
        facts.elements.push(fact);
    }
    for point in &points {
        for (a, one) in point.voltages.iter().enumerate() {
            for (b, other) in point.voltages.iter().enumerate().skip(a + 1) {
                let value = (one - other).abs();
                if facts.highest.as_ref().is_none_or(|highest| value > highest.voltage.value) {
                    let name = |node: usize| compiled.network().nodes[node].clone();
                    facts.highest = Some(Between {
                        nodes: [name(b), name(a)],
                        voltage: Worst { value, condition: point.condition.to_owned() },
                    });
                }
            }
        }
    }
    facts.safety = safety(judge, criteria);
    facts.wanted = wanted(criteria, stress);
    facts
}

/// The circuit at one corner that some result singled out.
struct AtCorner<'a> {
    condition: &'a str,
    voltages: Vec<f64>,
    elements: Vec<crate::solve::ElementPoint>,
    /// Capacitance or inductance of each element that stores energy.
    stores: Vec<Option<f64>>,
}

/// Operating points at nominal and at every corner that decided a criterion or a stress line.
fn corner_points<'a>(judge: &'a Judge<'_>) -> Vec<AtCorner<'a>> {
    let compiled = judge.compiled;
    let mut margins: Vec<usize> = compiled.criteria.iter().map(|outputs| outputs.margin).collect();
    margins
        .extend(compiled.stress.iter().flat_map(|outputs| outputs.normal.into_iter().chain(outputs.fault)));
    let mut points = Vec::new();
    for case in judge.cases {
        let mut corners = vec![case.response.nominal()];
        for margin in &margins {
            if let Some(end) = &case.ranges[*margin].min
                && !corners.contains(&end.at)
            {
                corners.push(end.at.clone());
            }
        }
        // Pulses are over before equilibrium; what it would come to is no fact about the surface.
        if case.bound_only && case.response.thermal == Thermal::Equilibrium {
            continue;
        }
        for corner in corners {
            if let Ok(point) = case.response.point(&corner, &[]) {
                points.push(AtCorner {
                    condition: judge.conditions[case.condition].name,
                    stores: case.response.stores(&corner),
                    voltages: point.voltages,
                    elements: point.elements,
                });
            }
        }
    }
    points
}

/// Safety-relevant criteria and the transistors whose gain moves their margin.
fn safety(judge: &Judge<'_>, criteria: &[CriterionFinding]) -> Vec<SafetyFact> {
    let mut found = Vec::new();
    for (criterion, outputs) in criteria.iter().zip(&judge.compiled.criteria).filter(|(c, _)| c.safety) {
        let mut gains: Vec<String> = Vec::new();
        for case in judge.cases {
            let applies = criterion.conditions.is_empty()
                || criterion.conditions.iter().any(|name| name == judge.conditions[case.condition].name);
            let Some(end) = case.ranges[outputs.margin].min.as_ref().filter(|_| applies) else { continue };
            for &axis in &end.matters {
                if let Moves::Device(element, 0) = case.response.moves()[axis] {
                    let designator = &judge.compiled.network().elements[element];
                    let transistor = matches!(designator.kind, ElementKind::Npn | ElementKind::Pnp);
                    if transistor && !gains.contains(&designator.designator) {
                        gains.push(designator.designator.clone());
                    }
                }
            }
            debug_assert!(end.matters.iter().all(|&axis| axis < case.response.axes().len()));
        }
        found.push(SafetyFact { label: criterion.label.clone(), gains });
    }
    found
}

/// The rows that verdicts miss, each once.
fn wanted(criteria: &[CriterionFinding], stress: &[StressLine]) -> Vec<String> {
    let mut rows: Vec<String> = Vec::new();
    let reasons = criteria
        .iter()
        .filter_map(|criterion| match &criterion.verdict {
            Verdict::NotShown { reason } => Some(reason.clone()),
            _ => None,
        })
        .chain(
            stress.iter().filter(|line| line.verdict == "not-shown").filter_map(|line| line.reason.clone()),
        );
    for reason in reasons {
        let row = reason
            .split_once("get ")
            .or_else(|| reason.split_once("missing: "))
            .map(|(_, row)| row.to_owned());
        if let Some(row) = row.filter(|row| !rows.contains(row)) {
            rows.push(row);
        }
    }
    rows
}
