//! `redline`: what moved since the last issue, recalculated.

use std::path::{Path, PathBuf};

use serde_json::json;

use crate::diagnostic::Diagnostic;
use crate::notebook::register;
use crate::notebook::{self, Notebook};
use crate::quantity::{self, Shown, Unit};
use crate::redline::{Cause, FileMove, Moves};
use crate::study::{Verdict, Verdicts};

use super::progress::Progress;
use super::{Console, House, RedlineArguments, UNUSABLE, here, show};

/// What is kept of a note.
struct Redlined {
    title: String,
    verdicts: Verdicts,
    /// `None` where the note was never issued.
    moves: Option<Moves>,
}

pub(super) fn run(arguments: &RedlineArguments, house: &House, console: &mut Console) -> u8 {
    let (note, folder) = asked(arguments);
    let notebook = match Notebook::open(&folder) {
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
            &|standing| note.is_none_or(|note| standing.sheet.note == note),
            &|findings, moves| Redlined {
                title: findings.note.title.clone(),
                verdicts: findings.tally().whole(),
                moves,
            },
            &mut |event| progress.show(event),
        )
    };
    if let Some(note) = note.filter(|_| notes.is_empty() && failed.is_empty()) {
        let known = register::read(&notebook.root).map(|register| register.notes).unwrap_or_default();
        let (all, _) = notebook::uses(&notebook);
        let numbers = all.iter().map(|uses| uses.note.as_str()).chain(known.keys().map(String::as_str));
        diagnostics.push(
            Diagnostic::bare(format!("no worksheet has the note number `{note}`"))
                .expected("the number of a note, or the folder of a notebook")
                .nearest(note, numbers),
        );
    }
    let status = show::status(&diagnostics, notes.iter().map(|note| &note.result.verdicts));
    if arguments.json {
        let rows: Vec<_> = notes
            .iter()
            .map(|note| {
                json!({
                    "note": note.note, "title": note.result.title, "worksheet": note.worksheet,
                    "moves": note.result.moves,
                    "cause": note.result.moves.as_ref().map(Moves::cause),
                    "verdicts": note.result.verdicts,
                })
            })
            .collect();
        let value = json!({
            "program": house.calculation.program,
            "notes": rows,
            "failed": failed,
            "diagnostics": show::diagnostics_json(&diagnostics),
            "status": status,
        });
        show::json_value(console, &value);
    } else {
        for note in &notes {
            let head = format!("{}  {}  ({})", note.note, note.result.title, note.worksheet);
            show::line(console, &head);
            match &note.result.moves {
                None => show::line(console, "  never issued"),
                Some(moves) => lines(moves).iter().for_each(|text| show::line(console, &format!("  {text}"))),
            }
        }
    }
    show::diagnostics(console, Some(&notebook.root), &diagnostics);
    status
}

/// The note and the folder that are meant: a single argument that is a folder is no note number.
fn asked(arguments: &RedlineArguments) -> (Option<&str>, PathBuf) {
    match (arguments.note.as_deref(), &arguments.folder) {
        (note, Some(folder)) => (note, folder.clone()),
        (Some(only), None) if Path::new(only).is_dir() => (None, PathBuf::from(only)),
        (note, None) => (note, here()),
    }
}

/// What moved, a line each, what matters most first.
fn lines(moves: &Moves) -> Vec<String> {
    let mut out = vec![format!("since issue {}: {}", moves.since, cause(moves))];
    out.extend(moves.incomparable.as_ref().map(|why| format!("no values to compare: {why}")));
    for moved in &moves.verdicts {
        let unit = moved.unit.of_difference();
        let state = |state: &Option<(Verdict, Shown)>| match state {
            None => "–".to_owned(),
            Some((verdict, margin)) => {
                let (_, _, words) = show::verdict(verdict);
                match margin {
                    Shown::Value(margin) => format!("{words} by {}", quantity::text(*margin, &unit, 3)),
                    Shown::NotShown(_) => words,
                }
            }
        };
        let flipped = if moved.flipped() { "verdict" } else { "margin" };
        out.push(format!("{flipped}  {}: {} → {}", moved.label, state(&moved.old), state(&moved.new)));
    }
    for moved in &moves.inputs {
        let text = |text: &Option<String>| text.clone().unwrap_or_else(|| "–".to_owned());
        out.push(format!("input  {}: {} → {}", moved.symbol, text(&moved.old), text(&moved.new)));
    }
    for moved in &moves.results {
        let [old, new] = values(&moved.old, &moved.new, &moved.unit);
        out.push(format!("result  {} in {}, {}: {old} → {new}", moved.symbol, moved.condition, moved.end));
    }
    for (path, what) in &moves.files {
        let what = match what {
            FileMove::Added => "is new",
            FileMove::Changed => "changed",
            FileMove::Gone => "is gone",
        };
        out.push(format!("file  {path} {what}"));
    }
    if moves.wording {
        out.push("the wording changed".to_owned());
    }
    out
}

fn cause(moves: &Moves) -> String {
    let program = moves.program.as_ref().map(|(old, new)| format!("program {old} → {new}"));
    match (moves.cause(), program) {
        (Cause::Program, Some(program)) => format!("{program}; no input changed"),
        (Cause::Both, Some(program)) => {
            format!("{program}, and inputs changed: what moved may come from either")
        }
        (Cause::Inputs, _) => "inputs changed, the same program".to_owned(),
        _ => "nothing moved".to_owned(),
    }
}

/// Two values with enough digits that a change can be seen.
fn values(old: &Option<Shown>, new: &Option<Shown>, unit: &Unit) -> [String; 2] {
    let digits = match (old, new) {
        (Some(Shown::Value(old)), Some(Shown::Value(new))) => {
            quantity::digits_apart(*old, *new, unit, show::DIGITS)
        }
        _ => show::DIGITS,
    };
    [old, new].map(|value| value.as_ref().map_or_else(|| "–".to_owned(), |v| show::shown(v, unit, digits)))
}
