//! `verify`: recalculate and print verdicts; write nothing.

use serde_json::{Value, json};

use crate::notebook::{self, Notebook, Recalculated};
use crate::quantity::{self, Shown, Unit};
use crate::study::{Findings, Verdict, Verdicts};

use super::progress::Progress;
use super::{Console, House, UNUSABLE, VerifyArguments, show};

/// What is kept of a note's findings.
struct Verified {
    title: String,
    verdicts: Verdicts,
    judged: Vec<Judged>,
    warnings: crate::diagnostic::Diagnostics,
}

/// One criterion, rating or asserting line.
struct Judged {
    /// `criterion`, `rating`, `assertion`.
    sort: &'static str,
    label: String,
    text: String,
    condition: String,
    thermal: String,
    clause: Option<String>,
    verdict: Verdict,
    worst: Shown,
    limit: Shown,
    margin: Shown,
    unit: Unit,
}

pub(super) fn run(arguments: &VerifyArguments, house: &House, console: &mut Console) -> u8 {
    let notebook = match Notebook::open(&arguments.folder.path()) {
        Ok(notebook) => notebook,
        Err(errors) => {
            show::diagnostics(console, None, &errors);
            return UNUSABLE;
        }
    };
    let (notes, failed, mut diagnostics) = {
        let mut progress = Progress::new(console.watched);
        notebook::recalculate(
            &notebook,
            &house.calculation,
            arguments.workers.number(),
            &|_| true,
            &|findings, _| verified(&findings),
            &mut |event| progress.show(event),
        )
    };
    for note in &notes {
        let mut warnings = note.result.warnings.clone();
        notebook.parts.translate(&mut warnings);
        diagnostics.extend(warnings);
    }
    let status = show::status(&diagnostics, notes.iter().map(|note| &note.result.verdicts));
    if arguments.json {
        let value = json!({
            "program": house.calculation.program,
            "notes": notes.iter().map(as_json).collect::<Vec<_>>(),
            "failed": failed,
            "diagnostics": show::diagnostics_json(&diagnostics),
            "status": status,
        });
        show::json_value(console, &value);
    } else {
        notes.iter().for_each(|note| print(console, note));
    }
    show::diagnostics(console, Some(&notebook.root), &diagnostics);
    status
}

fn verified(findings: &Findings) -> Verified {
    let mut judged: Vec<Judged> = Vec::new();
    for found in &findings.criteria {
        judged.push(Judged {
            sort: "criterion",
            label: found.label.clone(),
            text: match &found.coverage {
                Some(coverage) => format!("{} over coverage {}", found.text, coverage.asked),
                None => found.text.clone(),
            },
            condition: found.worst.condition.clone(),
            thermal: found.worst.thermal.clone(),
            clause: found.clause.clone(),
            verdict: found.verdict.clone(),
            worst: found.worst.value.clone(),
            limit: found.limit.clone(),
            margin: found.margin.clone(),
            unit: found.unit.clone(),
        });
    }
    for line in &findings.stress {
        let limit = line.limit.map_or_else(|| Shown::NotShown("no limit".to_owned()), Shown::Value);
        let margin = match (&line.worst, line.limit) {
            (Shown::Value(worst), Some(limit)) => Shown::Value(limit - worst),
            _ => Shown::NotShown("no margin".to_owned()),
        };
        judged.push(Judged {
            sort: "rating",
            label: format!("{} {}", line.designator, line.quantity.symbol()),
            text: String::new(),
            condition: line.condition.clone(),
            thermal: line.thermal.clone(),
            clause: None,
            verdict: crate::redline::stress_verdict(line),
            worst: line.worst.clone(),
            limit,
            margin,
            unit: line.unit.clone(),
        });
    }
    for step in findings.derivation.iter().filter(|step| step.symbol.is_none()) {
        let verdict = match (step.holds, &step.result) {
            (Some(true), _) => Verdict::Met,
            (Some(false), _) => Verdict::NotMet,
            (None, Shown::NotShown(reason)) => Verdict::NotShown { reason: reason.clone() },
            (None, _) => Verdict::NotShown { reason: "not decided".to_owned() },
        };
        let none = || Shown::NotShown("a yes or no".to_owned());
        judged.push(Judged {
            sort: "assertion",
            label: step.label.clone(),
            text: step.text.clone(),
            condition: step.condition.clone(),
            thermal: String::new(),
            clause: None,
            verdict,
            worst: none(),
            limit: none(),
            margin: none(),
            unit: step.unit.clone(),
        });
    }
    // Failing ones first, whatever they are; ratings behind the criteria of the same verdict.
    judged.sort_by_key(|judged| show::verdict(&judged.verdict).0);
    Verified {
        title: findings.note.title.clone(),
        verdicts: findings.tally().whole(),
        judged,
        warnings: findings.warnings.clone(),
    }
}

fn print(console: &mut Console, note: &Recalculated<Verified>) {
    let found = &note.result;
    show::line(console, &format!("{}  {}  ({})", note.note, found.title, note.worksheet));
    // A rating that is met is one of many; the count tells.
    let worth = |judged: &&Judged| judged.sort != "rating" || show::verdict(&judged.verdict).0 < 2;
    for judged in found.judged.iter().filter(worth) {
        let (_, _, words) = show::verdict(&judged.verdict);
        show::line(console, &format!("  {words:<12} {}", sentence(judged)));
    }
    let state = if note.due.is_empty() { "up to date" } else { "out of date" };
    show::line(console, &format!("  in all: {}; {state}", show::counts(&found.verdicts)));
}

fn sentence(judged: &Judged) -> String {
    let mut out = judged.label.clone();
    if !judged.text.is_empty() {
        out.push_str(&format!(": {}", judged.text));
    }
    if let Some(clause) = &judged.clause {
        out.push_str(&format!(" [{clause}]"));
    }
    if let (Shown::Value(worst), Shown::Value(limit)) = (&judged.worst, &judged.limit) {
        // As many digits as it takes that rounding does not contradict the verdict.
        let digits = quantity::digits_apart(*worst, *limit, &judged.unit, show::DIGITS);
        let [worst, limit] = [worst, limit].map(|value| quantity::text(*value, &judged.unit, digits));
        out.push_str(&format!("; worst {worst}, limit {limit}"));
    }
    if let Shown::Value(_) = judged.margin {
        let margin = show::shown(&judged.margin, &judged.unit.of_difference(), 3);
        out.push_str(&format!(", margin {margin}"));
    }
    let place: Vec<&str> =
        [judged.condition.as_str(), judged.thermal.as_str()].into_iter().filter(|s| !s.is_empty()).collect();
    if !place.is_empty() {
        out.push_str(&format!(" ({})", place.join(", ")));
    }
    if let Verdict::NotShown { reason } = &judged.verdict {
        out.push_str(&format!("; {reason}"));
    }
    out
}

fn as_json(note: &Recalculated<Verified>) -> Value {
    let judged = |judged: &Judged| {
        let (_, key, _) = show::verdict(&judged.verdict);
        let reason = match &judged.verdict {
            Verdict::NotShown { reason } => Some(reason),
            _ => None,
        };
        json!({
            "sort": judged.sort,
            "label": judged.label,
            "text": judged.text,
            "condition": judged.condition,
            "thermal": judged.thermal,
            "clause": judged.clause,
            "verdict": key,
            "assumptions": match judged.verdict {
                Verdict::MetOnAssumptions { count } => count,
                _ => 0,
            },
            "reason": reason,
            "worst": judged.worst.value(),
            "limit": judged.limit.value(),
            "margin": judged.margin.value(),
            "unit": judged.unit.symbol,
        })
    };
    json!({
        "note": note.note,
        "title": note.result.title,
        "worksheet": note.worksheet,
        "out_of_date": note.due,
        "verdicts": note.result.verdicts,
        "judged": note.result.judged.iter().map(judged).collect::<Vec<_>>(),
    })
}
