//! The YAML head between two `---` lines at the very start of a worksheet.

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Place;
use crate::yaml::{self, Node, Value};

use super::page::Page;
use super::{Head, Spot};

const KEYS: [&str; 9] =
    ["note", "title", "author", "checker", "approver", "revision", "date", "clauses", "revisions"];
const REVISION_KEYS: [&str; 3] = ["revision", "date", "change"];

/// Splits the head off: the head, if it could be read, and the byte offset at which the body begins.
pub(super) fn split(page: &Page, diagnostics: &mut Diagnostics) -> (Option<Head>, usize) {
    let begin = if page.text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
    let first = page.line_range(1);
    let example = "a head between two lines of three dashes: `---`, `note: ...`, `title: ...`, `---`";
    if page.slice(begin..first.end).trim_end() != "---" {
        let place = page.place(begin..first.end);
        diagnostics.push(Diagnostic::error(&place, "the worksheet has no head").expected(example));
        return (None, begin);
    }
    let lines = page.line(page.text.len());
    let close = (2..=lines).find(|line| page.slice(page.line_range(*line)).trim_end() == "---");
    let Some(close) = close else {
        diagnostics.push(
            Diagnostic::error(&page.place(begin..first.end), "the head is not closed")
                .expected("a line `---` below its last key"),
        );
        return (None, page.text.len());
    };
    let inside = page.line_range(2).start..page.line_range(close).start;
    let body = page.line_range(close + 1).start;
    let head = match yaml::read(page.slice(inside), page.file, 2) {
        Ok(node) => read(&node, page, diagnostics),
        Err(found) => {
            diagnostics.extend(found);
            None
        }
    };
    (head, body)
}

fn read(node: &Node, page: &Page, diagnostics: &mut Diagnostics) -> Option<Head> {
    let entries = diagnostics.keep(node.map("the keys of the head: `note: ...`, `title: ...`"))?;
    yaml::refuse_unknown_keys(entries, &KEYS, diagnostics);
    let first = page.place(page.line_range(1));
    let mandatory = |key: &str, what: &str, diagnostics: &mut Diagnostics| match node.get(key) {
        Some(value) => text(value, what, diagnostics),
        None => {
            let message = format!("the head has no `{key}`");
            diagnostics.push(Diagnostic::error(&first, message).expected(format!("`{key}: {what}`")));
            None
        }
    };
    let note = mandatory("note", "the number of the note", diagnostics);
    let title = mandatory("title", "the title of the note", diagnostics);
    let author = mandatory("author", "who wrote it", diagnostics);
    let revision = mandatory("revision", "the revision, such as A", diagnostics);
    let date = mandatory("date", "the date of issue, year-month-day", diagnostics);
    let date = date.filter(|date| calendar_date(&date.value, &date.place, diagnostics));
    // A key left empty is a signature still to come.
    let person = |key: &str, diagnostics: &mut Diagnostics| {
        node.get(key)
            .filter(|value| value.value != Value::Scalar(String::new()))
            .and_then(|value| text(value, "a name", diagnostics))
    };
    let checker = person("checker", diagnostics);
    let approver = person("approver", diagnostics);
    let clauses = node.get("clauses").map(|value| clauses(value, diagnostics)).unwrap_or_default();
    let revisions = node.get("revisions").map(|value| revisions(value, diagnostics)).unwrap_or_default();
    Some(Head {
        note: note?,
        title: title?,
        author: author?,
        checker,
        approver,
        revision: revision?,
        date: date?,
        clauses,
        revisions,
    })
}

fn text(node: &Node, what: &str, diagnostics: &mut Diagnostics) -> Option<Spot<String>> {
    let value = diagnostics.keep(node.scalar(what))?;
    Some(Spot { value: value.split_whitespace().collect::<Vec<_>>().join(" "), place: node.place.clone() })
}

fn clauses(node: &Node, diagnostics: &mut Diagnostics) -> Vec<(Spot<String>, String)> {
    let what = "a map from each clause to what it asks for: `LB-1 3.4: the driver saturates`";
    let Some(entries) = diagnostics.keep(node.map(what)) else { return Vec::new() };
    let mut clauses = Vec::new();
    for (key, value) in entries {
        if let Some(asked) = text(value, "what the clause asks for", diagnostics) {
            clauses.push((Spot { value: key.name.clone(), place: key.place.clone() }, asked.value));
        }
    }
    clauses
}

fn revisions(node: &Node, diagnostics: &mut Diagnostics) -> Vec<[String; 3]> {
    let what = "`{revision: A, date: 2026-01-31, change: first issue}`";
    let mut revisions = Vec::new();
    for item in node.items() {
        let Some(entries) = diagnostics.keep(item.map(what)) else { continue };
        yaml::refuse_unknown_keys(entries, &REVISION_KEYS, diagnostics);
        let fields = REVISION_KEYS.map(|key| match item.get(key) {
            Some(value) => text(value, what, diagnostics),
            None => {
                diagnostics.push(
                    Diagnostic::error(&item.place, format!("the revision has no `{key}`")).expected(what),
                );
                None
            }
        });
        if let [Some(revision), Some(date), Some(change)] = fields {
            calendar_date(&date.value, &date.place, diagnostics);
            revisions.push([revision.value, date.value, change.value]);
        }
    }
    revisions
}

/// Whether `text` is a date of the Gregorian calendar in the form of ISO 8601, `2026-01-31`.
pub fn is_date(text: &str) -> bool {
    date_parts(text).is_some_and(|(year, month, day)| {
        let leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
        let days = match month {
            2 if leap => 29,
            2 => 28,
            4 | 6 | 9 | 11 => 30,
            1..=12 => 31,
            _ => 0,
        };
        year >= 1900 && (1..=days).contains(&day)
    })
}

/// [`is_date`], and reports it otherwise.
fn calendar_date(text: &str, place: &Place, diagnostics: &mut Diagnostics) -> bool {
    let right = is_date(text);
    if !right {
        diagnostics.push(
            Diagnostic::error(place, format!("`{text}` is not a date of the calendar"))
                .expected("year-month-day, such as 2026-01-31"),
        );
    }
    right
}

fn date_parts(text: &str) -> Option<(u32, u32, u32)> {
    let bytes = text.as_bytes();
    let shape = bytes.len() == 10
        && bytes
            .iter()
            .enumerate()
            .all(|(i, b)| if i == 4 || i == 7 { *b == b'-' } else { b.is_ascii_digit() });
    if !shape {
        return None;
    }
    let number = |range: std::ops::Range<usize>| text.get(range)?.parse::<u32>().ok();
    Some((number(0..4)?, number(5..7)?, number(8..10)?))
}
