//! Errors and warnings that point into a file: collecting many, and offering the nearest right spelling.

use serde::{Deserialize, Serialize};

use crate::source::Place;

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Severity {
    Error,
    Warning,
}

/// One thing that is wrong with an input, where it stands, and what was expected there.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Diagnostic {
    pub severity: Severity,
    pub place: Option<Place>,
    /// What is wrong, in one sentence without a full stop.
    pub message: String,
    /// What was expected there, or what to do.
    pub expected: Option<String>,
    /// The nearest right spelling.
    pub nearest: Option<String>,
}

impl Diagnostic {
    pub fn error(place: &Place, message: impl Into<String>) -> Diagnostic {
        Diagnostic {
            severity: Severity::Error,
            place: Some(place.clone()),
            message: message.into(),
            expected: None,
            nearest: None,
        }
    }

    pub fn warning(place: &Place, message: impl Into<String>) -> Diagnostic {
        Diagnostic { severity: Severity::Warning, ..Diagnostic::error(place, message) }
    }

    /// An error that has no place in an input file (the disk is full, a folder is missing).
    pub fn bare(message: impl Into<String>) -> Diagnostic {
        Diagnostic {
            severity: Severity::Error,
            place: None,
            message: message.into(),
            expected: None,
            nearest: None,
        }
    }

    pub fn expected(mut self, what: impl Into<String>) -> Diagnostic {
        self.expected = Some(what.into());
        self
    }

    /// Adds the nearest of `candidates` to `word`, if one is near enough.
    pub fn nearest<'a>(mut self, word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Diagnostic {
        self.nearest = nearest(word, candidates).map(str::to_owned);
        self
    }
}

/// Diagnostics as they are collected over a run, in the order found.
#[derive(Clone, PartialEq, Debug, Default, Serialize, Deserialize)]
pub struct Diagnostics(pub Vec<Diagnostic>);

impl Diagnostics {
    pub fn push(&mut self, diagnostic: Diagnostic) {
        if !self.0.contains(&diagnostic) {
            self.0.push(diagnostic);
        }
    }

    pub fn extend(&mut self, others: Diagnostics) {
        others.0.into_iter().for_each(|diagnostic| self.push(diagnostic));
    }

    pub fn has_errors(&self) -> bool {
        self.0.iter().any(|diagnostic| diagnostic.severity == Severity::Error)
    }

    /// Keeps the value and notes the error otherwise: for reading on after a mistake.
    pub fn keep<T>(&mut self, result: Result<T, Diagnostic>) -> Option<T> {
        result.map_err(|diagnostic| self.push(diagnostic)).ok()
    }
}

impl From<Diagnostic> for Diagnostics {
    fn from(diagnostic: Diagnostic) -> Self {
        Diagnostics(vec![diagnostic])
    }
}

/// The candidate nearest to `word` by optimal string alignment, if it differs by at most a third of the word (at least 1).
/// A difference in upper and lower case alone counts least.
pub fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let allowed = 2 * (word.chars().count() / 3).max(1) + 1;
    candidates
        .into_iter()
        .map(|candidate| (distance(word, candidate), candidate))
        .filter(|(distance, _)| *distance <= allowed)
        .min_by_key(|(distance, candidate)| (*distance, candidate.len()))
        .map(|(_, candidate)| candidate)
}

/// Twice the spelling distance without regard to case, and one more where the case differs.
fn distance(word: &str, candidate: &str) -> usize {
    let folded = strsim::osa_distance(&word.to_lowercase(), &candidate.to_lowercase());
    let case = strsim::osa_distance(word, candidate) > folded;
    2 * folded + usize::from(case)
}

/// Renders diagnostics for a terminal: place, line of the source with a caret below, expectation, nearest spelling.
/// `line_of` gives the text of a line of a file.
pub fn render(diagnostics: &Diagnostics, line_of: impl Fn(&str, u32) -> Option<String>) -> String {
    let mut out = String::new();
    for diagnostic in &diagnostics.0 {
        let word = match diagnostic.severity {
            Severity::Error => "error",
            Severity::Warning => "warning",
        };
        match &diagnostic.place {
            None => out.push_str(&format!("{word}: {}\n", diagnostic.message)),
            Some(place) => {
                out.push_str(&format!("{place}: {word}: {}\n", diagnostic.message));
                if let Some(line) = line_of(&place.file, place.line) {
                    out.push_str(&excerpt(&line, place));
                }
            }
        }
        if let Some(expected) = &diagnostic.expected {
            out.push_str(&format!("    expected: {expected}\n"));
        }
        if let Some(nearest) = &diagnostic.nearest {
            out.push_str(&format!("    did you mean: {nearest}\n"));
        }
    }
    out
}

/// At most 100 characters of the line around the place, control characters made visible, with carets below.
fn excerpt(line: &str, place: &Place) -> String {
    const WIDTH: usize = 100;
    let column = place.column.max(1) as usize - 1;
    let first = column.saturating_sub(WIDTH * 3 / 4);
    let shown: String =
        line.chars().skip(first).take(WIDTH).map(|c| if c.is_control() { '\u{fffd}' } else { c }).collect();
    let carets = (place.length.max(1) as usize).min(WIDTH.saturating_sub(column - first)).max(1);
    format!("    | {shown}\n    | {}{}\n", " ".repeat(column - first), "^".repeat(carets))
}
