//! The comparison of two findings of one note.

use std::collections::BTreeMap;

use serde_json::Value;

use crate::diagnostic::Diagnostics;
use crate::markup::Math;
use crate::quantity::{Kind, Shown, Unit};
use crate::source::Digest;
use crate::stress::StressLine;
use crate::study::{CriterionFinding, Findings, ResultFinding, Verdict};

use super::facts::{Fact, facts};
use super::{FileMove, InputMove, Moves, ResultMove, VerdictMove};

/// Values that differ by less than this share of their size are the same: nobody could print the difference.
const SAME: f64 = 1e-9;
/// A margin whose verdict stands counts as moved from this share of it on: less would print alike.
const MARGIN: f64 = 1e-3;

/// What moved from `old`, the findings of issue `since`, to `new`.
///
/// Values are compared to a relative 1e-9 of the size of the result; lists keep the order of `new`, what is gone follows.
pub fn compare(since: u32, old: &Findings, new: &Findings) -> Moves {
    let files = files(&old.files, &new.files);
    let rewritten = files.iter().any(|(path, _)| path.ends_with(".md"));
    let mut moves = Moves {
        since,
        program: (old.program != new.program).then(|| (old.program.clone(), new.program.clone())),
        inputs: inputs(&facts(old), &facts(new)),
        results: results(&old.results, &new.results),
        verdicts: verdicts(old, new),
        wording: words_moved(old, new, rewritten),
        files,
        incomparable: None,
    };
    // What no list above speaks of (the range of a figure, a description) must not pass for nothing.
    if rewritten && !moves.clears_signatures() {
        moves.wording = printed(old) != printed(new);
    }
    moves
}

/// Everything of a note that somebody who signs it answers for: without the places of things in files, without digests,
/// and without those parts of the head that tell of the signing itself.
fn printed(findings: &Findings) -> Value {
    let mut copy = findings.clone();
    (copy.files, copy.warnings) = (Vec::new(), Diagnostics::default());
    let head = &mut copy.note;
    (head.checker, head.approver, head.revisions) = (None, None, Vec::new());
    (head.revision, head.date) = (String::new(), String::new());
    // Findings that cannot be told as data are no issue, and never came here.
    let mut value = serde_json::to_value(&copy).unwrap_or_default();
    forget(&mut value, &["place", "digest"]);
    value
}

fn forget(value: &mut Value, keys: &[&str]) {
    match value {
        Value::Object(map) => {
            map.retain(|key, _| !keys.contains(&key.as_str()));
            map.values_mut().for_each(|value| forget(value, keys));
        }
        Value::Array(items) => items.iter_mut().for_each(|value| forget(value, keys)),
        _ => {}
    }
}

impl Moves {
    /// What can be said where the findings of issue `since` are not at hand: program and files from the register.
    pub fn incomparable(
        since: u32,
        program: (&str, &str),
        old_files: &[(String, Digest)],
        new_files: &[(String, Digest)],
        why: String,
    ) -> Moves {
        Moves {
            since,
            program: (program.0 != program.1).then(|| (program.0.to_owned(), program.1.to_owned())),
            files: files(old_files, new_files),
            incomparable: Some(why),
            ..Moves::default()
        }
    }
}

fn files(old: &[(String, Digest)], new: &[(String, Digest)]) -> Vec<(String, FileMove)> {
    let old: BTreeMap<&str, Digest> = old.iter().map(|(path, digest)| (path.as_str(), *digest)).collect();
    let new: BTreeMap<&str, Digest> = new.iter().map(|(path, digest)| (path.as_str(), *digest)).collect();
    let mut out: BTreeMap<&str, FileMove> = BTreeMap::new();
    for (path, digest) in &new {
        match old.get(path) {
            None => out.insert(path, FileMove::Added),
            Some(before) if before != digest => out.insert(path, FileMove::Changed),
            Some(_) => None,
        };
    }
    out.extend(old.keys().filter(|path| !new.contains_key(*path)).map(|path| (*path, FileMove::Gone)));
    out.into_iter().map(|(path, what)| (path.to_owned(), what)).collect()
}

fn inputs(old: &[Fact], new: &[Fact]) -> Vec<InputMove> {
    let before: BTreeMap<&str, &Fact> = old.iter().map(|fact| (fact.name.as_str(), fact)).collect();
    let now: BTreeMap<&str, &Fact> = new.iter().map(|fact| (fact.name.as_str(), fact)).collect();
    let moved = |fact: &Fact| {
        let (old, new) = match before.get(fact.name.as_str()) {
            None => (None, fact.text()),
            Some(before) => {
                let (old, new) = before.apart(fact)?;
                (Some(old.to_owned()), new)
            }
        };
        Some(InputMove { symbol: fact.name.clone(), old, new: Some(new.to_owned()) })
    };
    let gone = old.iter().filter(|fact| !now.contains_key(fact.name.as_str()));
    let gone = gone.map(|fact| InputMove {
        symbol: fact.name.clone(),
        old: Some(fact.text().to_owned()),
        new: None,
    });
    new.iter().filter_map(moved).chain(gone).collect()
}

/// Whether two results are the same as far as anybody could print them; `size` is what they are measured against.
fn same(old: &Shown, new: &Shown, size: f64) -> bool {
    match (old, new) {
        (Shown::Value(old), Shown::Value(new)) => old == new || (old - new).abs() <= SAME * size,
        // Why something is not shown may be told in other words.
        (Shown::NotShown(_), Shown::NotShown(_)) => true,
        _ => false,
    }
}

fn size(values: &[&Shown]) -> f64 {
    values.iter().filter_map(|shown| shown.value()).fold(0.0, |most: f64, value| most.max(value.abs()))
}

fn results(old: &[ResultFinding], new: &[ResultFinding]) -> Vec<ResultMove> {
    let key = |result: &ResultFinding| (result.symbol.clone(), result.condition.clone());
    let before: BTreeMap<_, _> = old.iter().map(|result| (key(result), result)).collect();
    let now: BTreeMap<_, _> = new.iter().map(|result| (key(result), result)).collect();
    let row = |result: &ResultFinding, end: &str, old: Option<&Shown>, new: Option<&Shown>| ResultMove {
        symbol: result.symbol.clone(),
        condition: result.condition.clone(),
        end: end.to_owned(),
        kind: result.kind,
        unit: result.unit.clone(),
        old: old.cloned(),
        new: new.cloned(),
    };
    let mut out = Vec::new();
    for result in new {
        let Some(before) = before.get(&key(result)) else {
            out.push(row(result, "nominal", None, Some(&result.nominal)));
            continue;
        };
        let ends = [
            ("nominal", &before.nominal, &result.nominal),
            ("minimum", &before.min.value, &result.min.value),
            ("maximum", &before.max.value, &result.max.value),
        ];
        let size = size(&ends.map(|(_, old, _)| old)).max(size(&ends.map(|(_, _, new)| new)));
        // A result without a range has one value, not three that are the same.
        let flat = ends.iter().all(|(_, old, new)| *old == ends[0].1 && *new == ends[0].2);
        let moved = ends.into_iter().take(if flat { 1 } else { 3 });
        let moved = moved.filter(|(_, old, new)| !same(old, new, size));
        out.extend(moved.map(|(end, old, new)| row(result, end, Some(old), Some(new))));
    }
    let gone = old.iter().filter(|result| !now.contains_key(&key(result)));
    out.extend(gone.map(|result| row(result, "nominal", Some(&result.nominal), None)));
    out
}

fn verdicts(old: &Findings, new: &Findings) -> Vec<VerdictMove> {
    let (old, new) = (judgements(old), judgements(new));
    let before: BTreeMap<&str, &Judgement> = old.iter().map(|found| (found.label.as_str(), found)).collect();
    let now: BTreeMap<&str, &Judgement> = new.iter().map(|found| (found.label.as_str(), found)).collect();
    let state = |found: &Judgement| Some((found.verdict.clone(), found.margin.clone()));
    let row = |found: &Judgement, old, new| VerdictMove {
        label: found.label.clone(),
        kind: found.kind,
        unit: found.unit.clone(),
        old,
        new,
    };
    let mut out = Vec::new();
    for found in &new {
        match before.get(found.label.as_str()) {
            None => out.push(row(found, None, state(found))),
            Some(before) => {
                let size = before.size.max(found.size);
                let margins = self::size(&[&before.margin, &found.margin]);
                if !same_verdict(&before.verdict, &found.verdict)
                    || !same(&before.margin, &found.margin, size.max(margins * MARGIN / SAME))
                {
                    out.push(row(found, state(before), state(found)));
                }
            }
        }
    }
    let gone = old.iter().filter(|found| !now.contains_key(found.label.as_str()));
    out.extend(gone.map(|found| row(found, state(found), None)));
    out
}

/// The same verdict on the same number of assumptions; reasons may be told in other words.
fn same_verdict(old: &Verdict, new: &Verdict) -> bool {
    old == new || matches!((old, new), (Verdict::NotShown { .. }, Verdict::NotShown { .. }))
}

/// A criterion or a stress line, reduced to what a redline compares.
struct Judgement {
    label: String,
    kind: Kind,
    unit: Unit,
    verdict: Verdict,
    margin: Shown,
    size: f64,
}

fn judgements(findings: &Findings) -> Vec<Judgement> {
    findings.criteria.iter().map(criterion).chain(findings.stress.iter().map(stress)).collect()
}

fn criterion(finding: &CriterionFinding) -> Judgement {
    Judgement {
        label: finding.label.clone(),
        kind: finding.kind,
        unit: finding.unit.clone(),
        verdict: finding.verdict.clone(),
        margin: finding.margin.clone(),
        size: size(&[&finding.worst.value, &finding.limit, &finding.margin]),
    }
}

/// The verdict of a stress line.
pub fn stress_verdict(line: &StressLine) -> Verdict {
    let reason = line.reason.clone().unwrap_or_default();
    match line.verdict.as_str() {
        "met" => Verdict::Met,
        "met-on-assumptions" => Verdict::MetOnAssumptions { count: line.assumptions },
        "not-met" => Verdict::NotMet,
        _ => Verdict::NotShown { reason },
    }
}

fn stress(line: &StressLine) -> Judgement {
    let margin = match (&line.worst, line.limit) {
        (Shown::Value(worst), Some(limit)) => Shown::Value(limit - worst),
        (Shown::NotShown(reason), _) => Shown::NotShown(reason.clone()),
        (_, None) => Shown::NotShown("no limit".to_owned()),
    };
    Judgement {
        label: format!("{} {} in {}", line.designator, line.quantity.symbol(), line.condition),
        kind: line.kind,
        unit: line.unit.clone(),
        verdict: stress_verdict(line),
        size: size(&[&line.worst, &margin]).max(line.limit.map_or(0.0, f64::abs)),
        margin,
    }
}

/// Whether a reader finds other words. Numbers recalled in the prose move with the results and are told there; so the
/// prose counts where the worksheet was rewritten.
fn words_moved(old: &Findings, new: &Findings, rewritten: bool) -> bool {
    let (a, b) = (&old.note, &new.note);
    let head = [&a.organisation, &a.note, &a.title, &a.author, &a.language, &a.paper]
        != [&b.organisation, &b.note, &b.title, &b.author, &b.language, &b.paper]
        || a.logo != b.logo;
    let cautions = |findings: &Findings| -> Vec<(String, String)> {
        findings.cautions.iter().map(|caution| (caution.hazard.clone(), caution.title.clone())).collect()
    };
    head || cautions(old) != cautions(new)
        || formulas(old) != formulas(new)
        || old.trace != new.trace
        || titles(old) != titles(new)
        || (rewritten && old.body != new.body)
}

/// The derivation as written, without its numbers.
fn formulas(findings: &Findings) -> Vec<(&str, &str, &Math)> {
    let steps = findings.derivation.iter();
    steps.map(|step| (step.label.as_str(), step.condition.as_str(), &step.symbols)).collect()
}

fn titles(findings: &Findings) -> Vec<[&str; 3]> {
    findings
        .figures
        .iter()
        .map(|figure| [figure.title.as_str(), figure.x.title.as_str(), figure.y.title.as_str()])
        .collect()
}
