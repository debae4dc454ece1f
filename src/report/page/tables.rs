//! Tables of the body and of the appendices.

use std::collections::BTreeMap;

use serde::Serialize;
use serde_json::{Value, json};

use crate::part::RowQuantity;
use crate::quantity::{self, Dimension, Kind, Origin, Shown, Source, Unit, digits_apart, preferred_unit};
use crate::redline::{FileMove, Moves};
use crate::stress::StressLine;
use crate::study::{Findings, Input, OperatingFinding, ResultFinding, Verdict};

use super::super::cell::{self, DIGITS, Number};
use super::summary::{established, is_wide, judged, ordered, spoken, verdict};
use super::{corner, plain, rich, shown, symbol};

/// Design basis: groups of inputs, each with its source and a mark where the source is weak.
pub(super) fn basis(findings: &Findings) -> Value {
    let designators: Vec<&str> = findings.elements.iter().map(|e| e.designator.as_str()).collect();
    let mut groups: [(&str, Vec<&Input>); 4] = [
        ("Values of the design basis", vec![]),
        ("Values of elements", vec![]),
        ("Spread of parts", vec![]),
        ("Drift with age", vec![]),
    ];
    for input in &findings.inputs {
        let group = if input.symbol.ends_with(" ageing") {
            3
        } else if input.symbol.contains(' ') {
            2
        } else if designators.contains(&input.symbol.as_str()) {
            1
        } else {
            0
        };
        groups[group].1.push(input);
    }
    let groups = groups.into_iter().filter(|(_, inputs)| !inputs.is_empty());
    json!(
        groups
            .map(|(title, inputs)| {
                let numbers = |pick: fn(&Input) -> f64| {
                    let printed = |input: &&Input| {
                        let exact = input.spread.is_exact();
                        let unit = &input.unit;
                        let nominal = pick(input) == input.spread.nominal;
                        (!exact || nominal).then(|| cell::given(pick(input), unit, 6))
                    };
                    cell::column(inputs.iter().map(printed).collect())
                };
                let columns = numbers(|i| i.spread.low).into_iter().zip(numbers(|i| i.spread.nominal));
                let columns = columns.zip(numbers(|i| i.spread.high));
                let rows: Vec<Value> = inputs
                    .iter()
                    .zip(columns)
                    .map(|(input, ((low, nominal), high))| {
                        let exact = input.spread.is_exact();
                        json!({
                            "symbol": symbol_or_words(&input.symbol),
                            "description": input.description.as_ref().map(|text| rich(text)),
                            "text": input.text,
                            "low": if exact { Value::Null } else { low },
                            "nominal": nominal,
                            "high": if exact { Value::Null } else { high },
                            "source": source(input.source.as_ref()),
                            "varies": varies(findings, input),
                        })
                    })
                    .collect();
                json!({"title": title, "rows": rows})
            })
            .collect::<Vec<_>>()
    )
}

/// How an input varies, where the note counts by that.
fn varies(findings: &Findings, input: &Input) -> Option<String> {
    (!findings.spreads.is_empty() && !input.spread.is_exact()).then(|| input.role.text())
}

/// `Q1 gain` is words, `Q1.I_C` and `V_bat` are symbols.
fn symbol_or_words(name: &str) -> Value {
    if name.contains(' ') { rich(name) } else { json!([symbol(name)]) }
}

fn source(source: Option<&Source>) -> Value {
    match source {
        None => json!({"origin": "assumption", "weak": true, "text": rich("no source given")}),
        Some(source) => json!({
            "origin": origin(source.origin),
            "weak": source.origin.is_weak(),
            "text": rich(&source.text),
        }),
    }
}

fn origin(origin: Origin) -> &'static str {
    match origin {
        Origin::DataSheet => "data sheet",
        Origin::Measurement => "measurement",
        Origin::Standard => "standard",
        Origin::Specification => "specification",
        Origin::Calculation => "calculation",
        Origin::Assumption => "assumption",
        Origin::Memory => "memory",
    }
}

pub(super) fn conditions(findings: &Findings) -> Value {
    let row = |condition: &crate::study::ConditionFinding| {
        let overrides: Vec<String> =
            condition.overrides.iter().map(|(what, is)| format!("{what}: {is}")).collect();
        json!({
            "name": condition.name,
            "kind": if condition.normal { "normal" } else { "fault" },
            "lasts": condition.lasts,
            "overrides": rich(&overrides.join("; ")),
        })
    };
    json!(findings.conditions.iter().map(row).collect::<Vec<_>>())
}

pub(super) fn circuit(findings: &Findings) -> Value {
    let row = |element: &crate::study::ElementFinding| {
        json!({
            "designator": element.designator,
            "kind": element.kind,
            "value": rich(&element.value),
            "part": element.part,
            "terminals": element.terminals,
        })
    };
    json!(findings.elements.iter().map(row).collect::<Vec<_>>())
}

pub(super) fn acceptance(findings: &Findings) -> Value {
    let row = |criterion: &crate::study::CriterionFinding| {
        let (_, key, words) = judged(criterion);
        json!({
            "label": criterion.label,
            "math": criterion.math,
            "wide": is_wide(criterion),
            "text": rich(&criterion.text),
            "spoken": spoken(criterion),
            "over": criterion.over,
            "conditions": criterion.conditions.join(", "),
            "clause": criterion.clause,
            "safety": criterion.safety,
            "key": key,
            "verdict": words,
        })
    };
    json!(findings.criteria.iter().map(row).collect::<Vec<_>>())
}

/// Operating points, one a condition; a column of one quantity has one unit over all conditions.
pub(super) fn points(findings: &Findings) -> Value {
    let all: Vec<&OperatingFinding> = findings.points.iter().collect();
    let devices = || all.iter().flat_map(|point| &point.transistors);
    let elements = || all.iter().flat_map(|point| &point.elements);
    let unit = |dimension, values: Vec<f64>| preferred_unit(&values, Kind::of(dimension));
    let units = PointUnits {
        node: unit(Dimension::VOLT, all.iter().flat_map(|p| p.nodes.iter().map(|n| n.1)).collect()),
        v_be: unit(Dimension::VOLT, devices().map(|t| t.v_be).collect()),
        v_ce: unit(Dimension::VOLT, devices().map(|t| t.v_ce).collect()),
        i_c: unit(Dimension::AMPERE, devices().map(|t| t.i_c).collect()),
        i_b: unit(Dimension::AMPERE, devices().map(|t| t.i_b).collect()),
        power: unit(Dimension::WATT, devices().map(|t| t.power).collect()),
        voltage: unit(Dimension::VOLT, elements().map(|e| e.1).collect()),
        current: unit(Dimension::AMPERE, elements().map(|e| e.2).collect()),
        heat: unit(Dimension::WATT, elements().map(|e| e.3).collect()),
    };
    json!(all.iter().map(|point| self::point(point, &units)).collect::<Vec<_>>())
}

struct PointUnits {
    node: Unit,
    v_be: Unit,
    v_ce: Unit,
    i_c: Unit,
    i_b: Unit,
    power: Unit,
    voltage: Unit,
    current: Unit,
    heat: Unit,
}

fn point(point: &OperatingFinding, units: &PointUnits) -> Value {
    let some = |value: f64, unit: &Unit| Some(fixed(value, unit));
    let nodes = cell::column(point.nodes.iter().map(|(_, v)| some(*v, &units.node)).collect());
    let devices = &point.transistors;
    let of = |unit: &Unit, pick: fn(&crate::study::TransistorPoint) -> Option<f64>| {
        cell::column(devices.iter().map(|t| pick(t).map(|value| fixed(value, unit))).collect())
    };
    let (ratio, celsius) = (Unit::none(), Unit::celsius());
    let columns = [
        of(&units.v_be, |t| Some(t.v_be)),
        of(&units.v_ce, |t| Some(t.v_ce)),
        of(&units.i_c, |t| Some(t.i_c)),
        of(&units.i_b, |t| Some(t.i_b)),
        of(&ratio, |t| t.h_fe),
        of(&ratio, |t| t.forced_gain),
        of(&ratio, |t| t.overdrive),
        of(&units.power, |t| Some(t.power)),
        of(&celsius, |t| t.t_j),
    ];
    let device = |(i, device): (usize, &crate::study::TransistorPoint)| {
        let cells: Vec<Value> = columns.iter().map(|c| c.get(i).cloned().unwrap_or_default()).collect();
        json!({"designator": device.designator, "region": device.region, "cells": cells})
    };
    let elements = &point.elements;
    let element_columns = [
        cell::column(elements.iter().map(|e| some(e.1, &units.voltage)).collect()),
        cell::column(elements.iter().map(|e| some(e.2, &units.current)).collect()),
        cell::column(elements.iter().map(|e| some(e.3, &units.heat)).collect()),
    ];
    let element = |(i, (designator, ..)): (usize, &(String, f64, f64, f64))| {
        let cells: Vec<Value> =
            element_columns.iter().map(|c| c.get(i).cloned().unwrap_or_default()).collect();
        json!({"designator": designator, "cells": cells})
    };
    json!({
        "condition": point.condition,
        "not_shown": point.not_shown.as_ref().map(|reason| rich(reason)),
        "nodes": point.nodes.iter().zip(nodes).map(|((name, _), v)| json!([name, v])).collect::<Vec<_>>(),
        "transistors": devices.iter().enumerate().map(device).collect::<Vec<_>>(),
        "elements": elements.iter().enumerate().map(element).collect::<Vec<_>>(),
        "attempts": point.attempts,
    })
}

/// A value of an operating point: four digits, two where it is far below the unit of its column.
fn fixed(value: f64, unit: &Unit) -> Number {
    let value = if value.abs() < 1e-18 { 0.0 } else { value };
    cell::number(value, unit, if unit.from_si(value).abs() < 1e-3 { 2 } else { DIGITS })
}

pub(super) fn tolerance(findings: &Findings) -> Value {
    let all = &findings.results;
    let of = |pick: fn(&ResultFinding) -> &Shown| {
        cell::column(all.iter().map(|result| shown(pick(result), &result.unit)).collect())
    };
    let columns = of(|r| &r.nominal).into_iter().zip(of(|r| &r.min.value)).zip(of(|r| &r.max.value));
    let end = |end: &crate::study::End| {
        json!({
            "corner": corner(&end.corner),
            "thermal": end.thermal,
            "how": established(end.established),
            "reason": reason(&end.value),
        })
    };
    let row = |(result, ((nominal, min), max)): (&ResultFinding, ((Value, Value), Value))| {
        json!({
            "symbol": json!([symbol(&result.symbol)]),
            "label": result.label.as_ref().map(|label| rich(label)),
            "condition": result.condition,
            "nominal": nominal,
            "reason": reason(&result.nominal),
            "min": min,
            "max": max,
            "low": end(&result.min),
            "high": end(&result.max),
            "flags": result.flags.iter().map(|flag| rich(flag)).collect::<Vec<_>>(),
        })
    };
    json!(all.iter().zip(columns).map(row).collect::<Vec<_>>())
}

fn reason(value: &Shown) -> Value {
    match value {
        Shown::Value(_) => Value::Null,
        Shown::NotShown(reason) => rich(reason),
    }
}

/// Worst value, rating and limit of stress lines, as columns.
pub(super) fn stress_lines(lines: &[&StressLine]) -> Vec<[Value; 3]> {
    let given = |value: Option<f64>, unit: &Unit| value.map(|value| cell::given(value, unit, DIGITS));
    let worst = cell::column(lines.iter().map(|line| shown(&line.worst, &line.unit)).collect());
    let rating = cell::column(lines.iter().map(|line| given(line.rating, &line.unit)).collect());
    let limit = cell::column(lines.iter().map(|line| given(line.limit, &line.unit)).collect());
    worst.into_iter().zip(rating).zip(limit).map(|((worst, rating), limit)| [worst, rating, limit]).collect()
}

/// The letter symbol of a rated or tabulated quantity.
pub(super) fn quantity_name(quantity: &impl Serialize) -> Value {
    match serde_json::to_value(quantity) {
        Ok(Value::String(name)) => json!([symbol(&name)]),
        _ => Value::Null,
    }
}

/// Stress lines, failing ones first, else in the order of the study.
pub(super) fn stress(findings: &Findings) -> Value {
    let mut all: Vec<&StressLine> = findings.stress.iter().collect();
    let rank = |line: &StressLine| match line.verdict.as_str() {
        "not-met" => 0,
        "met-on-assumptions" => 2,
        "met" => 3,
        _ => 1,
    };
    all.sort_by_key(|line| rank(line));
    let columns = stress_lines(&all);
    let row = |(line, [worst, rating, limit]): (&&StressLine, [Value; 3])| {
        let (key, words) = match rank(line) {
            0 => ("not-met", "NOT MET"),
            1 => ("not-shown", "NOT SHOWN"),
            2 => ("assumed", "MET on assumptions"),
            _ => ("met", "MET"),
        };
        json!({
            "designator": line.designator,
            "quantity": quantity_name(&line.quantity),
            "condition": line.condition,
            "worst": worst, "rating": rating, "limit": limit,
            "ratio": line.ratio.map(|ratio| format!("{:.0}\u{a0}%", ratio * 100.0)),
            "corner": corner(&line.corner),
            "thermal": line.thermal,
            "key": key, "verdict": words,
            "reason": line.reason.as_ref().map(|reason| rich(reason)),
            "source": line.source.as_ref().map(|from| source(Some(from))),
        })
    };
    json!(all.iter().zip(columns).map(row).collect::<Vec<_>>())
}

/// Fitted parts: each row of the sheet beside the model in the row's own test condition.
pub(super) fn fits(findings: &Findings) -> Value {
    let fit = |model: &crate::fit::Model| {
        let row = |residual: &crate::fit::Residual| {
            let kind = row_kind(residual.quantity);
            let words = |value: f64| plain(value, kind).text();
            json!({
                "quantity": quantity_name(&residual.quantity),
                "at": rich(&residual.at),
                "sheet": [residual.min.map(words), residual.typ.map(words), residual.max.map(words)],
                "model": residual.model.map(|value| value.is_finite().then(|| words(value))),
            })
        };
        let part = findings.parts.iter().find(|part| part.name == model.part);
        let axis = |axis: &crate::fit::SpreadAxis| json!({"name": rich(&axis.name), "low": bound(&axis.low), "high": bound(&axis.high)});
        json!({
            "part": model.part,
            "description": part.map(|part| rich(&part.description)),
            "rows": model.residuals.iter().map(row).collect::<Vec<_>>(),
            "axes": model.axes.iter().map(axis).collect::<Vec<_>>(),
            "notes": model.notes.iter().map(|note| rich(note)).collect::<Vec<_>>(),
        })
    };
    json!(findings.models.iter().map(fit).collect::<Vec<_>>())
}

fn bound(bound: &crate::fit::Bound) -> Value {
    use crate::fit::Bound;
    match bound {
        Bound::Sourced => json!({"key": "sourced", "text": []}),
        Bound::Weak { source } => json!({"key": "weak", "text": rich(&source.text)}),
        Bound::Absent { wanted } => json!({"key": "absent", "text": rich(wanted)}),
    }
}

fn row_kind(quantity: RowQuantity) -> Kind {
    use RowQuantity as Q;
    let dimension = match quantity {
        Q::CurrentGain | Q::Tolerance | Q::Ageing => Dimension::NONE,
        Q::BaseEmitterVoltage
        | Q::BaseEmitterSaturation
        | Q::CollectorEmitterSaturation
        | Q::ForwardVoltage
        | Q::ZenerVoltage => Dimension::VOLT,
        Q::CollectorCutoff | Q::ReverseCurrent => Dimension::AMPERE,
        Q::OutputConductance => Dimension::SIEMENS,
        Q::ZenerResistance | Q::ColdResistance | Q::Resistance => Dimension::OHM,
        Q::ZenerTemperatureCoefficient | Q::BaseEmitterTemperatureCoefficient => VOLT_PER_KELVIN,
        Q::ResistanceCoefficient => PER_KELVIN,
        Q::Inductance => Dimension::HENRY,
        Q::OutputCapacitance | Q::InputCapacitance => Dimension::FARAD,
        Q::TransitionFrequency => Dimension::HERTZ,
    };
    Kind::of(dimension)
}

const VOLT_PER_KELVIN: Dimension = Dimension([4, 2, -6, -2, -2]);
const PER_KELVIN: Dimension = Dimension([0, 0, 0, 0, -2]);

/// Clauses and the criteria that answer them; clauses that nothing answers come first.
pub(super) fn trace(findings: &Findings) -> Value {
    let mut all: Vec<&(String, String, Vec<String>)> = findings.trace.iter().collect();
    all.sort_by_key(|(_, _, labels)| !labels.is_empty());
    let verdicts: BTreeMap<&str, (u8, &str, String)> =
        ordered(findings).iter().map(|c| (c.label.as_str(), judged(c))).collect();
    let row = |(clause, text, labels): &&(String, String, Vec<String>)| {
        let answers: Vec<Value> = labels
            .iter()
            .map(|label| {
                let (_, key, words) =
                    verdicts.get(label.as_str()).cloned().unwrap_or((1, "not-shown", String::new()));
                json!({"label": label, "key": key, "verdict": words})
            })
            .collect();
        json!({"clause": clause, "text": rich(text), "answers": answers})
    };
    json!(all.iter().map(row).collect::<Vec<_>>())
}

/// What moved since the last issue, as words.
pub(super) fn moves(moves: &Moves) -> Value {
    let old_new = |old: &Option<Shown>, new: &Option<Shown>, unit: &Unit| {
        // Enough digits that a change can be seen.
        let digits = match (old, new) {
            (Some(Shown::Value(a)), Some(Shown::Value(b))) => digits_apart(*a, *b, unit, DIGITS),
            _ => DIGITS,
        };
        [old, new].map(|value| match value {
            None => "–".to_owned(),
            Some(Shown::NotShown(_)) => "NOT SHOWN".to_owned(),
            Some(Shown::Value(value)) => quantity::text(*value, unit, digits),
        })
    };
    let judged = |state: &Option<(Verdict, Shown)>, unit: &Unit| {
        state.as_ref().map(|(found, margin)| {
            let (_, key, words) = verdict(found);
            let margin = margin.value().map(|margin| quantity::text(margin, unit, 3));
            json!({"key": key, "verdict": words, "margin": margin})
        })
    };
    json!({
        "since": moves.since,
        "program": moves.program,
        "files": moves.files.iter().map(|(path, what)| json!([path, match what {
            FileMove::Added => "added",
            FileMove::Changed => "changed",
            FileMove::Gone => "gone",
        }])).collect::<Vec<_>>(),
        "inputs": moves.inputs.iter().map(|input| json!({
            "symbol": symbol_or_words(&input.symbol), "old": input.old, "new": input.new,
        })).collect::<Vec<_>>(),
        "results": moves.results.iter().map(|result| {
            let [old, new] = old_new(&result.old, &result.new, &result.unit);
            json!({
                "symbol": json!([symbol(&result.symbol)]), "condition": result.condition, "end": result.end,
                "old": old, "new": new,
            })
        }).collect::<Vec<_>>(),
        "verdicts": moves.verdicts.iter().map(|moved| {
            let unit = moved.unit.of_difference();
            json!({
                "label": rich(&moved.label), "flipped": moved.flipped(),
                "old": judged(&moved.old, &unit), "new": judged(&moved.new, &unit),
            })
        }).collect::<Vec<_>>(),
        "wording": moves.wording,
        "incomparable": moves.incomparable.as_deref().map(rich),
    })
}
