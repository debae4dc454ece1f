//! `acceptance` blocks: `label: relation or state [over extremes] [in condition, ...] [safety] [clause]`.
//!
//! Instead of extremes a share of specimens may be asked for, with the reason in quotes:
//! `over coverage 99 % because "trimmed in test"`, `over coverage 99.7 % from 20000 samples because "..."`.

use std::ops::Range;

use crate::diagnostic::{self, Diagnostic, Diagnostics};

use super::fence::RawBlock;
use super::lines::{self, Line};
use super::page::Page;
use super::{Coverage, CriterionKind, CriterionLine, Over, Region, Spot, enough};

mod coverage;

use coverage::Reason;

const EXAMPLE: &str = "cool: Q1.T_j <= 125 °C over extremes in on [LB-1 3.6]";
const REGIONS: [(&str, Region); 4] = [
    ("off", Region::Off),
    ("active", Region::Active),
    ("saturated", Region::Saturated),
    ("reverse", Region::Reverse),
];
const TAIL: [&str; 3] = ["over", "in", "safety"];
/// The most criteria of one worksheet.
const MOST: usize = 500;

pub(super) fn read(
    page: &Page,
    block: &RawBlock,
    out: &mut Vec<CriterionLine>,
    labels: &mut Vec<String>,
    diagnostics: &mut Diagnostics,
) {
    for line in lines::cut(page, block, diagnostics) {
        if enough(diagnostics) {
            return;
        }
        if labels.len() >= MOST {
            diagnostics.push(
                Diagnostic::error(&block.place, "there are too many criteria")
                    .expected(format!("at most {MOST}")),
            );
            return;
        }
        let Some((label, rest)) = line.label(EXAMPLE, diagnostics) else { continue };
        let label = line.spot(label);
        if labels.contains(&label.value) {
            let message = format!("there are two criteria `{}`", label.value);
            diagnostics
                .push(Diagnostic::error(&label.place, message).expected("a label of its own for each"));
        }
        if label.value.contains('"') {
            let message = "a label with quotes cannot be recalled";
            diagnostics.push(Diagnostic::error(&label.place, message).expected("a label without quotes"));
        }
        labels.push(label.value.clone());
        out.extend(read_line(&line, label, rest, block.index, diagnostics));
    }
}

fn read_line(
    line: &Line,
    label: Spot<String>,
    rest: Range<usize>,
    block: usize,
    diagnostics: &mut Diagnostics,
) -> Option<CriterionLine> {
    let (reason, text) = coverage::cut_reason(line, rest.clone(), diagnostics)?;
    let (rest, clause) = split_clause(line, rest, &text, diagnostics)?;
    let text = text.get(..rest.len()).unwrap_or("");
    let words = lines::words(text);
    let first_of_tail = words.iter().position(|word| {
        let word_text = text.get(word.clone()).unwrap_or("");
        TAIL.contains(&word_text) && word.start > 0
    });
    let tail = first_of_tail.map_or(&[][..], |at| words.get(at..).unwrap_or(&[]));
    let body_end = tail.first().map_or(text.len(), |word| word.start);
    let body = line.trimmed(rest.start..rest.start + body_end);
    let tail: Vec<Spot<String>> =
        tail.iter().map(|word| line.spot(rest.start + word.start..rest.start + word.end)).collect();
    let tail = read_tail(&tail, reason, diagnostics);
    let told = diagnostics.0.len();
    let what = read_what(line, body.clone(), diagnostics);
    if what.is_none()
        && let Some(misspelt) = misspelt_tail(line, &rest, text, &words)
    {
        // What the demand's grammar made of the rest of the line would lead astray.
        diagnostics.0.truncate(told);
        diagnostics.push(misspelt);
    }
    let Tail { over, coverage, conditions, safety } = tail?;
    Some(CriterionLine {
        place: label.place.clone(),
        label,
        what: what?,
        text: line.text.get(body).unwrap_or("").to_owned(),
        over,
        coverage,
        conditions,
        clause,
        safety,
        block,
    })
}

/// A word that stands where `over` or `safety` was meant, in a demand that cannot be read.
fn misspelt_tail(line: &Line, rest: &Range<usize>, text: &str, words: &[Range<usize>]) -> Option<Diagnostic> {
    words.iter().skip(1).find_map(|word| {
        let found = text.get(word.clone()).filter(|found| found.chars().all(char::is_alphabetic))?;
        let meant = diagnostic::nearest(found, ["over", "safety"]).filter(|meant| *meant != found)?;
        let place = line.place(rest.start + word.start..rest.start + word.end);
        let error = Diagnostic::error(&place, format!("`{found}` cannot follow a demand"));
        Some(error.expected(format!("`{EXAMPLE}`")).nearest(found, [meant]))
    })
}

/// Splits `[clause]` off the end. `text` is what stands at `rest`, a reason in quotes blanked.
fn split_clause(
    line: &Line,
    rest: Range<usize>,
    text: &str,
    diagnostics: &mut Diagnostics,
) -> Option<(Range<usize>, Option<Spot<String>>)> {
    if !text.ends_with(']') {
        if let Some(at) = text.find('[') {
            let place = line.place(rest.start + at..rest.start + at + 1);
            diagnostics.push(
                Diagnostic::error(&place, "the clause is not closed or something follows it")
                    .expected(format!("the clause in square brackets at the very end: `{EXAMPLE}`")),
            );
            return None;
        }
        return Some((rest, None));
    }
    let Some(open) = text.rfind('[') else {
        let place = line.place(rest.end - 1..rest.end);
        diagnostics
            .push(Diagnostic::error(&place, "this bracket closes nothing").expected(format!("`{EXAMPLE}`")));
        return None;
    };
    let clause = line.trimmed(rest.start + open + 1..rest.end - 1);
    if clause.is_empty() {
        let place = line.place(rest.start + open..rest.end);
        diagnostics.push(Diagnostic::error(&place, "the clause is empty").expected("`[LB-1 3.6]`"));
        return None;
    }
    Some((line.trimmed(rest.start..rest.start + open), Some(line.spot(clause))))
}

/// What stands behind the demand.
struct Tail {
    over: Over,
    coverage: Option<Coverage>,
    conditions: Vec<Spot<String>>,
    safety: bool,
}

fn read_tail(words: &[Spot<String>], reason: Option<Reason>, diagnostics: &mut Diagnostics) -> Option<Tail> {
    let (mut over, mut conditions, mut safety) = (None, Vec::new(), false);
    let (mut coverage, mut reason) = (None, reason);
    let mut right = true;
    let mut at = 0;
    while let Some(word) = words.get(at) {
        at += 1;
        match word.value.as_str() {
            "safety" => safety = true,
            "over" if over.is_none() && words.get(at).is_some_and(|word| word.value == "coverage") => {
                // Extremes are searched all the same: they stand beside the share.
                over = Some(Over::Extremes);
                coverage = coverage::read(words, &mut at, reason.take(), diagnostics);
                right &= coverage.is_some();
            }
            "over" => {
                let (next, wanted) = match words.get(at) {
                    Some(next) if next.value == "nominal" => (next, Some(Over::Nominal)),
                    Some(next) if next.value == "extremes" => (next, Some(Over::Extremes)),
                    Some(next) => (next, None),
                    None => (word, None),
                };
                at += 1;
                if wanted.is_none() || over.is_some() {
                    right = false;
                    let message = format!("`{}` does not say over what the criterion holds", next.value);
                    diagnostics.push(
                        Diagnostic::error(&next.place, message)
                            .expected("`over extremes`, `over nominal` or `over coverage 99 % because \"...\"`, once")
                            .nearest(&next.value, ["extremes", "nominal", "coverage"]),
                    );
                }
                if wanted.is_none() && words.get(at).is_some_and(|word| coverage::is_number(&word.value)) {
                    // A misspelt coverage: what follows it is none of the words expected here.
                    at -= 1;
                    coverage::read(words, &mut at, reason.take(), diagnostics);
                }
                over = wanted;
            }
            "in" => {
                let before = conditions.len();
                while let Some(condition) = words.get(at).filter(|word| !TAIL.contains(&word.value.as_str()))
                {
                    conditions.push(condition.clone());
                    at += 1;
                }
                if conditions.len() == before {
                    right = false;
                    diagnostics.push(
                        Diagnostic::error(&word.place, "no condition follows `in`")
                            .expected("`in on, inrush`"),
                    );
                }
            }
            other => {
                right = false;
                diagnostics.push(
                    Diagnostic::error(&word.place, format!("`{other}` means nothing here"))
                        .expected("`over extremes`, `over nominal`, `in CONDITION`, `safety`, `[clause]`")
                        .nearest(other, TAIL),
                );
            }
        }
    }
    if let Some(reason) = reason {
        right = false;
        diagnostics.push(
            Diagnostic::error(&reason.place, "this reason belongs to nothing")
                .expected(format!("it behind a coverage: `{}`", coverage::EXAMPLE)),
        );
    }
    right.then_some(Tail { over: over.unwrap_or(Over::Extremes), coverage, conditions, safety })
}

fn read_what(line: &Line, body: Range<usize>, diagnostics: &mut Diagnostics) -> Option<CriterionKind> {
    let text = line.text.get(body.clone()).unwrap_or("");
    let place = line.place(body.clone());
    let signs = lines::comparisons(text);
    if signs.len() > 1 {
        diagnostics.push(
            Diagnostic::error(&place, "a criterion has one limit")
                .expected("two lines, one for each limit, each with a label of its own"),
        );
        return None;
    }
    if signs.len() == 1 {
        return match line.relation(body) {
            Ok(relation) => Some(CriterionKind::Relation(relation)),
            Err(found) => {
                diagnostics.extend(found);
                None
            }
        };
    }
    let words = lines::words(text);
    if let [designator, region] = words.as_slice() {
        let designator = line.spot(body.start + designator.start..body.start + designator.end);
        let word = line.spot(body.start + region.start..body.start + region.end);
        if let Some((_, region)) = REGIONS.into_iter().find(|(name, _)| *name == word.value) {
            return Some(CriterionKind::State { designator, region });
        }
        diagnostics.push(
            Diagnostic::error(&word.place, format!("`{}` is not the state of a transistor", word.value))
                .expected("off, active, saturated or reverse; or a limit such as `<= 125 °C`")
                .nearest(&word.value, REGIONS.map(|(name, _)| name)),
        );
        return None;
    }
    diagnostics.push(
        Diagnostic::error(&place, "this is neither a limit nor the state of a transistor")
            .expected(format!("`{EXAMPLE}`, or `on: Q1 saturated`")),
    );
    None
}
