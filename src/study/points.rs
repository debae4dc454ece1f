//! Nominal operating points as tables, and the steps of the derivation.

use super::cases::{Case, Stated};
use super::compile::Compiled;
use super::findings::{ElementFinding, OperatingFinding, Step, TransistorPoint};
use crate::circuit::ElementKind;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::{self, Formula, Tape};
use crate::quantity::{Kind, Shown, Unit};
use crate::solve::{self, Branch, Failure, Thermal};
use crate::worksheet::DerivationKind;

/// The nominal operating point of every condition in thermal equilibrium.
pub(super) fn operating_points(
    compiled: &Compiled<'_>,
    cases: &[Case<'_>],
    conditions: &[Stated<'_>],
) -> Vec<OperatingFinding> {
    let settled = cases.iter().filter(|case| case.response.thermal == Thermal::Equilibrium);
    settled.map(|case| operating_point(compiled, case, conditions[case.condition].name)).collect()
}

fn operating_point(compiled: &Compiled<'_>, case: &Case<'_>, condition: &str) -> OperatingFinding {
    let nominal = case.response.nominal();
    let network = compiled.network();
    let mut finding = OperatingFinding {
        condition: condition.to_owned(),
        not_shown: None,
        nodes: Vec::new(),
        transistors: Vec::new(),
        elements: Vec::new(),
        attempts: Vec::new(),
    };
    let point = match case.response.point(&nominal, &[]) {
        Ok(point) => point,
        Err(failure) => {
            finding.not_shown = Some(failed(failure, compiled));
            return finding;
        }
    };
    let branches = case.response.branches(&nominal);
    finding.attempts = case.response.attempts.iter().map(|attempt| attempt.text().to_owned()).collect();
    finding.nodes = network.nodes.iter().cloned().zip(point.voltages.iter().copied()).skip(1).collect();
    for ((element, branch), at) in network.elements.iter().zip(&branches).zip(&point.elements) {
        match branch {
            Branch::Transistor { .. } => finding.transistors.push(TransistorPoint {
                designator: element.designator.clone(),
                region: solve::region(branch, at)
                    .map_or("unknown", |region| super::response::region_name(region as u64))
                    .to_owned(),
                v_be: at.v_be,
                v_ce: at.v,
                i_c: at.i,
                i_b: at.i_b,
                forced_gain: solve::forced_gain(branch, at),
                overdrive: solve::overdrive(branch, at),
                h_fe: solve::active_gain(branch, at),
                power: at.p,
                t_j: at.self_heated.then_some(at.t_j),
            }),
            _ => finding.elements.push((element.designator.clone(), at.v, at.i, at.p)),
        }
    }
    finding
}

fn failed(failure: Failure, compiled: &Compiled<'_>) -> String {
    let name = |element: usize| {
        compiled
            .network()
            .elements
            .get(element)
            .map_or("an element", |element| element.designator.as_str())
            .to_owned()
    };
    match failure {
        Failure::NotConverged { residual } => {
            format!(
                "no method confirmed an operating point (the current rule is missed by {residual:.1e} of its bound)"
            )
        }
        Failure::Singular => "the circuit's equations do not fix every voltage and current".to_owned(),
        Failure::ThermalRunaway { element } => format!("{} finds no thermal equilibrium", name(element)),
        Failure::BeyondModel { element } => format!("{} carries more than any model covers", name(element)),
        Failure::Unfit { element } => format!("{} has a value without sense here", name(element)),
    }
}

/// The circuit as a list.
pub(super) fn elements(compiled: &Compiled<'_>) -> Vec<ElementFinding> {
    let network = compiled.network();
    network
        .elements
        .iter()
        .map(|element| {
            let own = compiled.inputs.iter().find(|input| input.symbol == element.designator);
            let value = match (own, &element.value) {
                (Some(input), _) => input.text.clone(),
                (None, Some(formula)) => formula.text.clone(),
                (None, None) => String::new(),
            };
            ElementFinding {
                designator: element.designator.clone(),
                kind: kind_in_words(element.kind).to_owned(),
                value,
                part: element.part.clone(),
                terminals: terminal_names(element.kind)
                    .iter()
                    .zip(&element.terminals)
                    .map(|(name, node)| ((*name).to_owned(), network.nodes[*node].clone()))
                    .collect(),
            }
        })
        .collect()
}

pub(super) fn kind_in_words(kind: ElementKind) -> &'static str {
    match kind {
        ElementKind::Npn => "NPN transistor",
        ElementKind::Pnp => "PNP transistor",
        ElementKind::Diode => "diode",
        ElementKind::Zener => "Zener diode",
        ElementKind::Resistor => "resistor",
        ElementKind::Filament => "filament lamp",
        ElementKind::Coil => "relay coil",
        ElementKind::Capacitor => "capacitor",
        ElementKind::Inductor => "inductor",
        ElementKind::Supply => "voltage source",
        ElementKind::Current => "current source",
        ElementKind::Signal => "signal source",
    }
}

fn terminal_names(kind: ElementKind) -> &'static [&'static str] {
    match kind {
        ElementKind::Npn | ElementKind::Pnp => &["collector", "base", "emitter"],
        ElementKind::Diode | ElementKind::Zener => &["anode", "cathode"],
        ElementKind::Supply | ElementKind::Signal => &["plus", "minus"],
        _ => &["from", "to"],
    }
}

/// Every line of the derivation at the nominal point of its condition in thermal equilibrium.
pub(super) fn steps(
    compiled: &Compiled<'_>,
    cases: &[Case<'_>],
    conditions: &[Stated<'_>],
    diagnostics: &mut Diagnostics,
) -> Vec<Step> {
    let mut steps = Vec::new();
    let solved: Vec<Option<Vec<f64>>> = conditions
        .iter()
        .enumerate()
        .map(|(index, _)| {
            let case = cases
                .iter()
                .find(|case| case.condition == index && case.response.thermal == Thermal::Equilibrium)?;
            case.response.slots(&case.response.nominal()).ok()
        })
        .collect();
    for line in &compiled.material.worksheet.derivation {
        let index = line
            .condition
            .as_ref()
            .and_then(|wanted| conditions.iter().position(|condition| condition.name == wanted.value))
            .unwrap_or(0);
        let Some(condition) = conditions.get(index) else { continue };
        let slots = solved.get(index).and_then(Option::as_deref);
        let value_of = |name: &str| -> Option<(f64, Unit)> {
            let value = *slots?.get(*compiled.slots.get(name)?)?;
            value.is_finite().then(|| (value, compiled.unit_of_name(name, value)))
        };
        let no_value = || {
            Shown::NotShown(match slots {
                None => format!("no operating point was confirmed in {}", condition.name),
                Some(_) => "a quantity of this line has no value in this state of the circuit".to_owned(),
            })
        };
        let evaluate = |formula: &Formula| -> Option<f64> {
            let tape: Tape = formula.compile(&|name| compiled.slots.get(name).copied()).ok()?;
            Some(tape.eval(slots?)).filter(|value| value.is_finite())
        };
        let step = match &line.what {
            DerivationKind::Define { name, formula } => {
                let kind = compiled.kinds.get(&name.value).copied().unwrap_or(Kind::NONE);
                let value = evaluate(formula);
                Step {
                    label: line.label.clone(),
                    text: format!("{} = {}", name.value, formula.text),
                    block: line.block,
                    condition: condition.name.to_owned(),
                    symbol: Some(formula::symbol(&name.value)),
                    symbols: formula::symbols(&formula.expr),
                    numbers: formula::numbers(&formula.expr, &value_of),
                    unit: compiled.unit_for(kind, value.as_slice()),
                    result: value.map_or_else(no_value, Shown::Value),
                    kind,
                    holds: None,
                    spoken: format!(
                        "{} equals {}",
                        formula::spoken_name(&name.value),
                        formula::spoken(&formula.expr)
                    ),
                }
            }
            DerivationKind::Assert { relation, text } => {
                let side = |expr: &formula::Expr| {
                    evaluate(&Formula { expr: expr.clone(), text: String::new(), place: line.place.clone() })
                };
                let (left, right) = (side(&relation.left), side(&relation.right));
                let holds = left.zip(right).map(|(left, right)| relation.operator.holds(left, right));
                if holds == Some(false) {
                    diagnostics.push(Diagnostic::warning(
                        &line.place,
                        format!("`{}` does not hold at nominal values", line.label),
                    ));
                }
                Step {
                    label: line.label.clone(),
                    text: text.clone(),
                    block: line.block,
                    condition: condition.name.to_owned(),
                    symbol: None,
                    symbols: formula::relation_symbols(relation),
                    numbers: formula::relation_numbers(relation, &value_of),
                    result: left.map_or_else(no_value, Shown::Value),
                    kind: Kind::NONE,
                    unit: compiled.unit_for(Kind::NONE, &[]),
                    holds,
                    spoken: formula::spoken_relation(relation),
                }
            }
        };
        steps.push(step);
    }
    steps
}
