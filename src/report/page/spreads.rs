//! The margin of a criterion by several methods, and what each input can do to it.

use serde_json::{Value, json};

use crate::quantity::{self, Shown, Unit, digits_apart};
use crate::spread::Quantile;
use crate::study::{Findings, SampledFinding, SpreadFinding};

use super::super::cell::{self, DIGITS};
use super::{levels, rich};

/// Inputs that are printed for one criterion; the findings hold all.
const INPUTS: usize = 8;
/// Digits of what is said in words.
const FEW: u8 = 3;

/// Every criterion that was judged by more than one method.
pub(super) fn spreads(findings: &Findings) -> Value {
    json!(findings.spreads.iter().map(spread).collect::<Vec<_>>())
}

fn spread(found: &SpreadFinding) -> Value {
    let words = |value: f64| quantity::text(value, &found.unit, FEW);
    let combined = &found.combined;
    let mut methods = vec![
        ("Nominal", shown(&found.nominal), reason(&found.nominal).unwrap_or_default()),
        (
            "Extreme value",
            shown(&found.extreme),
            reason(&found.extreme).unwrap_or_else(|| "everything at its worst at once".to_owned()),
        ),
        (
            "Root-sum-square",
            shown(&combined.end),
            reason(&combined.end).unwrap_or_else(|| {
                format!(
                    "biases {}, standard deviation {}, coverage factor k = {:.3}; departs from a straight line by {:.1} %",
                    words(combined.bias),
                    words(combined.deviation),
                    combined.coverage_factor,
                    100.0 * combined.departure
                )
            }),
        ),
    ];
    if let Some(sampled) = &found.sampled {
        let margin = sampled.margin.map(|margin| margin.value);
        methods.push(("Monte Carlo", margin, drawn(sampled, &found.unit)));
    }
    let numbers =
        methods.iter().map(|(_, value, _)| value.map(|value| cell::number(value, &found.unit, DIGITS)));
    let methods: Vec<Value> = cell::column(numbers.collect())
        .into_iter()
        .zip(&methods)
        .map(|(number, (name, _, how))| json!({"name": name, "margin": number, "how": rich(how)}))
        .collect();
    let printed = &found.terms[..found.terms.len().min(INPUTS)];
    let numbers = |pick: fn(&crate::study::TermFinding) -> f64| {
        cell::column(printed.iter().map(|term| Some(cell::number(pick(term), &found.unit, FEW))).collect())
    };
    let columns = numbers(|term| term.reach).into_iter().zip(numbers(|term| term.effect));
    let terms: Vec<Value> = printed
        .iter()
        .zip(columns)
        .map(|(term, (reach, effect))| {
            json!({"symbol": rich(&term.symbol), "role": term.role.text(), "reach": reach, "effect": effect})
        })
        .collect();
    json!({
        "criterion": found.criterion,
        "where": format!("in {}, {}", found.condition, found.thermal),
        "held": rich(&levels(&found.held)),
        "methods": methods,
        "interval": found.sampled.as_ref().and_then(interval).map(|text| rich(&text)),
        "terms": terms,
        "more": found.terms.len() - printed.len(),
    })
}

fn shown(value: &Shown) -> Option<f64> {
    value.value()
}

fn reason(value: &Shown) -> Option<String> {
    match value {
        Shown::Value(_) => None,
        Shown::NotShown(reason) => Some(format!("not shown: {reason}")),
    }
}

/// What was drawn and what came of it.
fn drawn(sampled: &SampledFinding, unit: &Unit) -> String {
    let error = sampled.margin.and_then(|margin| between(&margin, unit));
    let missing = match sampled.missing {
        0 => String::new(),
        count => format!(", {count} without a value"),
    };
    let asked = percent(sampled.coverage, sampled.coverage);
    format!(
        "kept by {asked} of specimens{}; {} of {} satisfy the criterion{missing}: {} % limits of the share {} to {}; seed {}",
        error.map(|text| format!(" ({text} with its sampling error)")).unwrap_or_default(),
        sampled.passed,
        sampled.samples,
        100.0 * sampled.confidence,
        percent(sampled.passing.low, sampled.coverage),
        percent(sampled.passing.high, sampled.coverage),
        sampled.seed
    )
}

fn between(found: &Quantile, unit: &Unit) -> Option<String> {
    let (low, high) = found.low.zip(found.high)?;
    Some(format!("{} to {}", quantity::text(low, unit, DIGITS), quantity::text(high, unit, DIGITS)))
}

/// The interval that covers the share, each end with its sampling error.
fn interval(sampled: &SampledFinding) -> Option<String> {
    let [low, high] = sampled.interval?;
    let end = |end: &Quantile| {
        let error = between(end, &sampled.unit).map(|text| format!(" ({text})")).unwrap_or_default();
        format!("{}{error}", quantity::text(end.value, &sampled.unit, DIGITS))
    };
    Some(format!(
        "{} of specimens lie between {} and {}, in brackets the sampling error",
        percent(sampled.coverage, sampled.coverage),
        end(&low),
        end(&high)
    ))
}

fn percent(share: f64, asked: f64) -> String {
    let unit = Unit::percent();
    if share == asked {
        return cell::given(share, &unit, 6).text();
    }
    quantity::text(share, &unit, digits_apart(share, asked, &unit, DIGITS))
}
