//! What several commands print: diagnostics, verdicts, counts.

use std::cell::RefCell;
use std::collections::BTreeMap;
use std::path::Path;

use serde_json::{Value, json};

use crate::diagnostic::{self, Diagnostics, Severity};
use crate::quantity::{self, Shown, Unit};
use crate::source::{self, LARGEST_TEXT};
use crate::study::{Verdict, Verdicts};

use super::{Console, MET, NOT_MET, UNUSABLE};

/// Significant digits of a printed result.
pub(super) const DIGITS: u8 = 4;

/// Writes a line of results. A closed pipe is the reader's wish to see no more.
pub(super) fn line(console: &mut Console, text: &str) {
    let _ = writeln!(console.out, "{text}");
}

/// Writes a JSON value as the whole of the results.
pub(super) fn json_value(console: &mut Console, value: &Value) {
    let _ = writeln!(console.out, "{value:#}");
}

/// Writes all diagnostics with the lines they speak of, and how many there are.
pub(super) fn diagnostics(console: &mut Console, root: Option<&Path>, diagnostics: &Diagnostics) {
    if diagnostics.0.is_empty() {
        return;
    }
    let texts: RefCell<BTreeMap<String, Option<String>>> = RefCell::default();
    let rendered = diagnostic::render(diagnostics, |file, line| {
        let mut texts = texts.borrow_mut();
        let text = texts.entry(file.to_owned()).or_insert_with(|| {
            let bytes = source::read(root?, file, LARGEST_TEXT).ok()?.bytes;
            Some(String::from_utf8_lossy(&bytes).into_owned())
        });
        text.as_ref()?.lines().nth(line.checked_sub(1)? as usize).map(str::to_owned)
    });
    let of = |severity| diagnostics.0.iter().filter(|found| found.severity == severity).count();
    let counts = [(of(Severity::Error), "error"), (of(Severity::Warning), "warning")];
    let counts: Vec<String> =
        counts.into_iter().filter(|(n, _)| *n > 0).map(|(n, what)| plural(n, what)).collect();
    let _ = writeln!(console.err, "{rendered}{}", counts.join(", "));
}

pub(super) fn plural(count: usize, what: &str) -> String {
    format!("{count} {what}{}", if count == 1 { "" } else { "s" })
}

/// The exit status of a run.
pub(super) fn status<'a>(diagnostics: &Diagnostics, verdicts: impl IntoIterator<Item = &'a Verdicts>) -> u8 {
    if diagnostics.has_errors() {
        UNUSABLE
    } else if verdicts.into_iter().all(Verdicts::all_met) {
        MET
    } else {
        NOT_MET
    }
}

/// Counts in words, the ones that matter most first: `1 NOT MET, 2 NOT SHOWN, 14 met`.
pub(super) fn counts(verdicts: &Verdicts) -> String {
    let all = [
        (verdicts.not_met, "NOT MET"),
        (verdicts.not_shown, "NOT SHOWN"),
        (verdicts.met_on_assumptions, "met on assumptions"),
        (verdicts.met, "met"),
    ];
    let some: Vec<String> =
        all.into_iter().filter(|(n, _)| *n > 0).map(|(n, what)| format!("{n} {what}")).collect();
    if some.is_empty() { "no criteria".to_owned() } else { some.join(", ") }
}

/// Rank of a verdict (failing ones first), its key in JSON, and its words.
pub(super) fn verdict(verdict: &Verdict) -> (u8, &'static str, String) {
    match verdict {
        Verdict::NotMet => (0, "not-met", "NOT MET".to_owned()),
        Verdict::NotShown { .. } => (1, "not-shown", "NOT SHOWN".to_owned()),
        Verdict::MetOnAssumptions { count } => {
            (2, "met-on-assumptions", format!("MET on {}", plural(*count, "assumption")))
        }
        Verdict::Met => (3, "met", "MET".to_owned()),
    }
}

/// A value as printed, or that there is none.
pub(super) fn shown(value: &Shown, unit: &Unit, digits: u8) -> String {
    match value {
        Shown::Value(value) => quantity::text(*value, unit, digits),
        Shown::NotShown(_) => "not shown".to_owned(),
    }
}

/// Diagnostics as JSON.
pub(super) fn diagnostics_json(diagnostics: &Diagnostics) -> Value {
    json!(diagnostics)
}
