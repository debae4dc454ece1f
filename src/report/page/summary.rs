//! The summary page: every criterion with its verdict, failing ones first, and the stress lines counted.

use serde_json::{Value, json};

use crate::quantity::digits_apart;
use crate::study::{CriterionFinding, Established, Findings, Verdict, Verdicts};

use super::super::cell::{self, DIGITS, Number};
use super::body::em;
use super::tables::{quantity_name, stress_lines};
use super::{corner, rich};

pub(super) fn counts_value(findings: &Findings) -> Value {
    let tally = findings.tally();
    let weak = |wanted: fn(&crate::quantity::Origin) -> bool| {
        findings.inputs.iter().filter(|i| i.source.as_ref().is_some_and(|s| wanted(&s.origin))).count()
    };
    let unsourced = findings.inputs.iter().filter(|input| input.source.is_none()).count();
    let assumption = weak(|origin| matches!(origin, crate::quantity::Origin::Assumption)) + unsourced;
    let memory = weak(|origin| matches!(origin, crate::quantity::Origin::Memory));
    let of = |counts: Verdicts| {
        json!({
            "all": counts.count(),
            "met": counts.met, "assumed": counts.met_on_assumptions,
            "not_met": counts.not_met, "not_shown": counts.not_shown,
        })
    };
    let by_coverage = findings.criteria.iter().filter(|criterion| criterion.coverage.is_some()).count();
    json!({
        "by_coverage": by_coverage,
        "criteria": of(tally.criteria), "stress": of(tally.ratings), "assertions": of(tally.assertions),
        "inputs": findings.inputs.len(),
        "assumption": assumption, "memory": memory,
    })
}

/// Rank of a verdict on the page, its key for the templates, its words.
pub(super) fn verdict(verdict: &Verdict) -> (u8, &'static str, String) {
    match verdict {
        Verdict::NotMet => (0, "not-met", "NOT MET".to_owned()),
        Verdict::NotShown { .. } => (1, "not-shown", "NOT SHOWN".to_owned()),
        Verdict::MetOnAssumptions { count: 1 } => (2, "assumed", "MET on 1 assumption".to_owned()),
        Verdict::MetOnAssumptions { count } => (2, "assumed", format!("MET on {count} assumptions")),
        Verdict::Met => (3, "met", "MET".to_owned()),
    }
}

/// As [`verdict`] of a criterion; one by coverage says so.
pub(super) fn judged(finding: &CriterionFinding) -> (u8, &'static str, String) {
    let (rank, key, words) = verdict(&finding.verdict);
    match &finding.coverage {
        Some(coverage) => (rank, key, format!("{words} at {} coverage", coverage.asked)),
        None => (rank, key, words),
    }
}

/// Criteria in the order of the page.
pub(super) fn ordered(findings: &Findings) -> Vec<&CriterionFinding> {
    let mut all: Vec<&CriterionFinding> = findings.criteria.iter().collect();
    all.sort_by_key(|criterion| verdict(&criterion.verdict).0);
    all
}

pub(super) fn criteria(findings: &Findings) -> Vec<Value> {
    let all = ordered(findings);
    let limit = cell::column(all.iter().map(|c| limit(c)).collect());
    let worst = cell::column(all.iter().map(|c| worst(c)).collect());
    let margin = cell::column(all.iter().map(|c| margin(c)).collect());
    let columns = limit.into_iter().zip(worst).zip(margin);
    all.iter().zip(columns).map(|(c, ((limit, worst), margin))| criterion(c, limit, worst, margin)).collect()
}

fn criterion(finding: &CriterionFinding, limit: Value, worst: Value, margin: Value) -> Value {
    let (_, key, words) = judged(finding);
    let reason = match &finding.verdict {
        Verdict::NotShown { reason } => Some(rich(reason)),
        _ => None,
    };
    let mut place = Vec::new();
    if !finding.worst.condition.is_empty() {
        place.push(format!("in {}", finding.worst.condition));
    }
    if !finding.worst.thermal.is_empty() {
        place.push(finding.worst.thermal.clone());
    }
    json!({
        "label": finding.label,
        "key": key,
        "verdict": words,
        "reason": reason,
        "math": finding.math,
        "wide": is_wide(finding),
        "text": rich(&finding.text),
        "spoken": spoken(finding),
        "clause": finding.clause,
        "safety": finding.safety,
        "coverage": finding.coverage.as_ref().map(|coverage| {
            json!({"statement": rich(&coverage.statement), "because": rich(&coverage.because)})
        }),
        "limit": limit,
        "worst": worst,
        "margin": margin,
        "corner": corner(&finding.worst.corner),
        "where": place.join(", "),
        "how": established(finding.worst.established),
        "flags": finding.flags.iter().map(|flag| rich(flag)).collect::<Vec<_>>(),
    })
}

/// Whether the demand is too wide to be kept on one line of a table's column.
pub(super) fn is_wide(finding: &CriterionFinding) -> bool {
    finding.math.as_ref().is_some_and(|math| em(math) > 12.0)
}

/// What is read aloud for the criterion; never empty.
pub(super) fn spoken(finding: &CriterionFinding) -> &str {
    if finding.spoken.trim().is_empty() {
        if finding.text.trim().is_empty() { &finding.label } else { &finding.text }
    } else {
        &finding.spoken
    }
}

pub(super) fn established(how: Established) -> &'static str {
    match how {
        Established::Vertices => "all corners",
        Established::Monotone => "monotone, verified",
        Established::Searched => "searched",
        Established::Sampled => "bounding specimen of those drawn",
        Established::Exact => "nothing varies",
    }
}

fn limit(finding: &CriterionFinding) -> Option<Number> {
    let mut number = cell::given(finding.limit.value()?, &finding.unit, 6);
    if ["≤", "≥", "<", ">", "="].contains(&finding.relation.as_str()) {
        number.before = finding.relation.clone();
    }
    Some(number)
}

/// The worst value with as many digits as it takes not to contradict the verdict.
fn worst(finding: &CriterionFinding) -> Option<Number> {
    let value = finding.worst.value.value()?;
    let digits =
        finding.limit.value().map_or(DIGITS, |limit| digits_apart(value, limit, &finding.unit, DIGITS));
    Some(cell::number(value, &finding.unit, digits))
}

/// A margin is a difference: between temperatures it is in kelvin.
fn margin(finding: &CriterionFinding) -> Option<Number> {
    Some(cell::number(finding.margin.value()?, &finding.unit.of_difference(), 3))
}

/// Stress lines for the first page: those that are not met or not shown.
pub(super) fn stresses(findings: &Findings) -> Vec<Value> {
    let mut failing: Vec<_> =
        findings.stress.iter().filter(|line| !line.verdict.starts_with("met")).collect();
    failing.sort_by_key(|line| u8::from(line.verdict != "not-met"));
    let columns = stress_lines(&failing);
    failing
        .iter()
        .zip(columns)
        .map(|(line, [worst, _, limit])| {
            let not_met = line.verdict == "not-met";
            let mut place = vec![format!("in {}", line.condition)];
            if !line.thermal.is_empty() {
                place.push(line.thermal.clone());
            }
            json!({
                "designator": line.designator,
                "quantity": quantity_name(&line.quantity),
                "key": if not_met { "not-met" } else { "not-shown" },
                "verdict": if not_met { "NOT MET" } else { "NOT SHOWN" },
                "reason": line.reason.as_ref().map(|reason| rich(reason)),
                "worst": worst, "limit": limit,
                "ratio": line.ratio.map(|ratio| format!("{:.0}\u{a0}%", ratio * 100.0)),
                "corner": corner(&line.corner),
                "where": place.join(", "),
            })
        })
        .collect()
}
