//! Making notes: the issue of what is out of date, and recalculation without issuing.

use std::collections::BTreeSet;
use std::path::Path;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::redline::{self, Moves};
use crate::report::{Issue, Status};
use crate::source::{Bundle, Digest};
use crate::study::Findings;

use super::register::{self, Entry, Register, Stored, Withheld};
use super::scan::{Standing, broke_down, scan};
use super::sheet::Contents;
use super::shelf::{self, Aside, Shelf};
use super::{Notebook, workers};

/// What computes a note, with the version of the program that does.
#[derive(Clone, Copy)]
pub struct Calculation<'a> {
    pub program: &'a str,
    /// Bundle and path of the worksheet -> findings.
    pub study: &'a (dyn Fn(&Bundle, &str) -> Result<Findings, Diagnostics> + Sync),
}

/// What makes a note: the calculation, and what prints it.
#[derive(Clone, Copy)]
pub struct Press<'a> {
    pub calculation: Calculation<'a>,
    /// Findings, issue, what moved and bundle -> PDF.
    pub typeset: &'a Typeset<'a>,
}

/// Findings, issue, what moved and bundle -> PDF.
pub type Typeset<'a> =
    dyn Fn(&Findings, &Issue, Option<&Moves>, &Bundle) -> Result<Vec<u8>, Diagnostics> + Sync + 'a;

/// How to issue.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Order {
    /// Threads; the notes are the same for any number.
    pub workers: usize,
    /// Date of issue to print, `2026-10-02`; the date in each worksheet's head otherwise.
    pub date: Option<String>,
}

/// How far a run is.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Event<'a> {
    /// So many notes are out of date, of so many in the notebook.
    Begin { due: usize, all: usize },
    /// A note is finished, well or not: the path of its worksheet.
    Done { worksheet: &'a str },
}

/// A note that has an issue in the register.
#[derive(Clone, PartialEq, Debug)]
pub struct Issued {
    pub note: String,
    pub worksheet: String,
    pub entry: Entry,
    /// Why it was issued in this run; nothing where it was up to date.
    pub due: Vec<String>,
    /// What moved since the issue before.
    pub moves: Option<Moves>,
}

/// What a run did.
#[derive(Debug, Default)]
pub struct Outcome {
    /// Notes issued in this run and notes that were up to date, both in the order of their worksheets' paths.
    pub issued: Vec<Issued>,
    pub current: Vec<Issued>,
    /// Worksheets without an issue of their present state.
    pub failed: Vec<String>,
    pub diagnostics: Diagnostics,
}

/// Issues every note that is out of date: studies and typesets it, writes PDF and findings, and registers them.
///
/// Notes are worked on in parallel and registered as they are finished, so that a run that is stopped has lost nothing but
/// the notes it was working on. What is wrong with one worksheet hinders no other.
///
/// # Errors
/// Go to the outcome: the notebook, its register or the folder of issues cannot be used, or a worksheet has errors.
pub fn issue(notebook: &Notebook, press: &Press, order: &Order, progress: &mut dyn FnMut(Event)) -> Outcome {
    let mut outcome = Outcome { diagnostics: notebook.problems.clone(), ..Outcome::default() };
    let before = Shelf::open(&notebook.root)
        .map_err(Diagnostics::from)
        .and_then(|shelf| Ok((shelf, register::read(&notebook.root)?)));
    let (shelf, register) = match before {
        Ok(before) => before,
        Err(errors) => {
            outcome.diagnostics.extend(errors);
            outcome.failed = notebook.worksheets.clone();
            return outcome;
        }
    };
    let scanned = scan(notebook, &register, press.calculation.program, order.workers);
    outcome.diagnostics.extend(scanned.diagnostics);
    outcome.failed = scanned.failed;
    let all = scanned.sheets.len();
    let (due, current): (Vec<_>, Vec<_>) =
        scanned.sheets.into_iter().partition(|sheet| !sheet.due.is_empty());
    outcome.current = current.into_iter().filter_map(up_to_date).collect();
    progress(Event::Begin { due: due.len(), all });

    let taken = register.stored().map(|stored| stored.file.to_lowercase()).collect();
    let mut desk = Desk {
        shelf: &shelf,
        register: register.clone(),
        taken,
        outcome,
        made: Vec::new(),
        told: Vec::new(),
    };
    // A register from the first instant on: issues without one are a damaged notebook.
    if !due.is_empty() && register.notes.is_empty() && desk.commit().is_err() {
        desk.outcome.failed.extend(due.iter().map(|standing| standing.sheet.file.path.to_string()));
        return desk.outcome;
    }
    workers::each(
        order.workers,
        &due,
        |standing| make(notebook, press, order, &shelf, standing),
        |batch| {
            let done: Vec<usize> = batch.iter().map(|(index, _)| *index).collect();
            desk.register(batch, &due);
            for standing in done.into_iter().filter_map(|index| due.get(index)) {
                progress(Event::Done { worksheet: &standing.sheet.file.path });
            }
        },
    );
    desk.finish(notebook, &due)
}

fn up_to_date(standing: Standing) -> Option<Issued> {
    Some(Issued {
        note: standing.sheet.note,
        worksheet: standing.sheet.file.path.to_string(),
        entry: standing.last?.clone(),
        due: Vec::new(),
        moves: None,
    })
}

/// A note whose files are written aside.
struct Made {
    entry: Entry,
    pdf: Aside,
    findings: Aside,
    moves: Option<Moves>,
    warnings: Diagnostics,
}

/// The index of a note among those due, and what became of it; the outer error is what a worker said as it broke down.
type Finished = (usize, Result<Result<Made, Diagnostics>, String>);

/// Studies and typesets one note and writes its files aside.
fn make(
    notebook: &Notebook,
    press: &Press,
    order: &Order,
    shelf: &Shelf,
    standing: &Standing,
) -> Result<Made, Diagnostics> {
    let sheet = &standing.sheet;
    let (bundle, inputs) = sheet.bundle(notebook, Contents::Bytes)?;
    let mut findings = study(notebook, &press.calculation, &bundle, &sheet.file.path)?;
    let mut warnings = findings.warnings.clone();
    notebook.parts.translate(&mut warnings);
    let moves = standing.last.map(|last| moved(&notebook.root, last, &findings));
    let cleared = moves.as_ref().is_some_and(Moves::clears_signatures);
    // Nobody has seen these numbers yet: the names stay in the worksheet, the places to sign are empty.
    let withheld = Withheld::take(&mut findings.note, cleared, standing.last.map(|last| &last.withheld));
    let number = standing.last.map_or(1, |last| last.issue.saturating_add(1));
    let issue = Issue {
        number,
        date: order.date.clone().unwrap_or_else(|| sheet.date.clone()),
        status: Status::Issued,
        program: press.calculation.program.to_owned(),
    };
    let pdf = (press.typeset)(&findings, &issue, moves.as_ref(), &bundle).map_err(|errors| {
        told(notebook, errors, &format!("{}: this note cannot be typeset", sheet.file.path))
    })?;
    let mut json = serde_json::to_vec_pretty(&findings)
        .map_err(|error| Diagnostic::bare(format!("{}: findings: {error}", sheet.file.path)))?;
    json.push(b'\n');
    let [pdf_name, findings_name] = shelf::file_names(&sheet.note, number);
    let (pdf, json) = (shelf.write_aside(&pdf)?, shelf.write_aside(&json)?);
    let entry = Entry {
        issue: number,
        revision: findings.note.revision.clone(),
        date: issue.date,
        title: findings.note.title.clone(),
        program: press.calculation.program.to_owned(),
        schema: findings.schema,
        signatures_cleared: cleared,
        withheld,
        verdicts: findings.tally().whole(),
        pdf: Stored { file: pdf_name, digest: pdf.digest },
        findings: Stored { file: findings_name, digest: json.digest },
        digest: bundle.digest(),
        inputs,
    };
    Ok(Made { entry, pdf, findings: json, moves, warnings })
}

/// The study of one note, its errors at the places that people edit.
fn study(
    notebook: &Notebook,
    calculation: &Calculation,
    bundle: &Bundle,
    worksheet: &str,
) -> Result<Findings, Diagnostics> {
    (calculation.study)(bundle, worksheet)
        .map_err(|errors| told(notebook, errors, &format!("{worksheet}: this note cannot be computed")))
}

/// Errors as a run tells them; `what` stands in for an error that forgot to say anything.
fn told(notebook: &Notebook, mut errors: Diagnostics, what: &str) -> Diagnostics {
    notebook.parts.translate(&mut errors);
    if !errors.has_errors() {
        errors.push(Diagnostic::bare(what));
    }
    errors
}

/// What moved from an issue in the register to new findings.
fn moved(root: &Path, last: &Entry, findings: &Findings) -> Moves {
    match earlier(root, last) {
        Ok(old) => redline::compare(last.issue, &old, findings),
        Err(why) => {
            let files: Vec<(String, Digest)> =
                last.inputs.iter().map(|input| (input.path.clone(), input.digest)).collect();
            let program = (last.program.as_str(), findings.program.as_str());
            Moves::incomparable(last.issue, program, &files, &findings.files, why)
        }
    }
}

/// The findings of an issue, or why they are not at hand.
fn earlier(root: &Path, entry: &Entry) -> Result<Findings, String> {
    let name = &entry.findings.file;
    let bytes = std::fs::read(root.join(shelf::FOLDER).join(name))
        .map_err(|error| format!("the findings of issue {} ({name}) cannot be read: {error}", entry.issue))?;
    if Digest::of(&bytes) != entry.findings.digest {
        return Err(format!(
            "the findings of issue {} ({name}) are not those that the register knows",
            entry.issue
        ));
    }
    redline::recall(&bytes).map_err(|why| why.to_string())
}

/// Where finished notes come together: files get their names, the register grows.
struct Desk<'a> {
    shelf: &'a Shelf,
    register: Register,
    outcome: Outcome,
    /// Names of all files of issues, in lower case: some disks do not tell cases apart.
    taken: BTreeSet<String>,
    /// Notes by their index among those due, and what is to be told of them.
    made: Vec<(usize, Issued)>,
    told: Vec<(usize, Diagnostics)>,
}

impl Desk<'_> {
    fn commit(&mut self) -> Result<(), ()> {
        self.shelf.commit(&self.register).map_err(|error| self.outcome.diagnostics.push(error))
    }

    /// Names the files of finished notes and registers them all in one step.
    fn register(&mut self, batch: Vec<Finished>, due: &[Standing]) {
        let mut registered = Vec::new();
        for (index, result) in batch {
            let Some(standing) = due.get(index) else { continue };
            let placed = match result {
                Ok(Ok(made)) => {
                    self.told.push((index, made.warnings.clone()));
                    self.place(made, standing)
                }
                Ok(Err(errors)) => Err(errors),
                Err(said) => Err(broke_down(&standing.sheet.file.path, &said).into()),
            };
            match placed {
                Ok(issued) => registered.push((index, issued)),
                Err(errors) => self.told.push((index, errors)),
            }
        }
        if registered.is_empty() {
            return;
        }
        for (_, issued) in &registered {
            self.register.notes.entry(issued.note.clone()).or_default().push(issued.entry.clone());
        }
        if self.commit().is_ok() {
            self.made.extend(registered);
            return;
        }
        for (_, issued) in &registered {
            if let Some(issues) = self.register.notes.get_mut(&issued.note) {
                issues.pop();
                if issues.is_empty() {
                    self.register.notes.remove(&issued.note);
                }
            }
        }
    }

    fn place(&mut self, made: Made, standing: &Standing) -> Result<Issued, Diagnostics> {
        let mut entry = made.entry;
        for stored in [&entry.pdf, &entry.findings] {
            if !self.taken.insert(stored.file.to_lowercase()) {
                let message = format!("{} belongs to another note of the register", stored.file);
                return Err(Diagnostic::error(&standing.sheet.place, message)
                    .expected("a note number whose file names are its own")
                    .into());
            }
        }
        entry.findings = self.shelf.place(made.findings, &entry.findings.file)?;
        entry.pdf = self.shelf.place(made.pdf, &entry.pdf.file)?;
        Ok(Issued {
            note: standing.sheet.note.clone(),
            worksheet: standing.sheet.file.path.to_string(),
            entry,
            due: standing.due.clone(),
            moves: made.moves,
        })
    }

    /// The outcome in the order of the worksheets, after the folder was compared with the register.
    fn finish(mut self, notebook: &Notebook, due: &[Standing]) -> Outcome {
        shelf::reconcile(&notebook.root, self.shelf, &self.register, &mut self.outcome.diagnostics);
        self.made.sort_by_key(|(index, _)| *index);
        self.told.sort_by_key(|(index, _)| *index);
        self.told.into_iter().for_each(|(_, told)| self.outcome.diagnostics.extend(told));
        let failed = (0..due.len()).filter(|index| !self.made.iter().any(|(made, _)| made == index));
        let failed = failed.filter_map(|index| due.get(index));
        self.outcome.failed.extend(failed.map(|standing| standing.sheet.file.path.to_string()));
        self.outcome.failed.sort();
        self.outcome.issued = self.made.into_iter().map(|(_, issued)| issued).collect();
        self.outcome
    }
}

/// What a recalculation found for one worksheet.
pub struct Recalculated<R> {
    pub note: String,
    pub worksheet: String,
    /// Why a new issue is due.
    pub due: Vec<String>,
    pub result: R,
}

/// Studies notes without issuing anything; `wanted` chooses among the worksheets, `keep` what is kept of the findings (and
/// of what moved since the last issue), so that not all findings are held at once.
///
/// Returns the notes in the order of their worksheets, the worksheets that failed, and what is wrong.
pub fn recalculate<R: Send>(
    notebook: &Notebook,
    calculation: &Calculation,
    workers: usize,
    wanted: &dyn Fn(&Standing) -> bool,
    keep: &(dyn Fn(Findings, Option<Moves>) -> R + Sync),
    progress: &mut dyn FnMut(Event),
) -> (Vec<Recalculated<R>>, Vec<String>, Diagnostics) {
    let mut diagnostics = notebook.problems.clone();
    let register = match register::read(&notebook.root) {
        Ok(register) => register,
        Err(errors) => {
            diagnostics.extend(errors);
            return (Vec::new(), notebook.worksheets.clone(), diagnostics);
        }
    };
    let scanned = scan(notebook, &register, calculation.program, workers);
    diagnostics.extend(scanned.diagnostics);
    let mut failed = scanned.failed;
    let all = scanned.sheets.len();
    let chosen: Vec<Standing> = scanned.sheets.into_iter().filter(|standing| wanted(standing)).collect();
    progress(Event::Begin { due: chosen.len(), all });
    let mut results = Vec::new();
    workers::each(
        workers,
        &chosen,
        |standing| {
            let (bundle, _) = standing.sheet.bundle(notebook, Contents::Bytes)?;
            let findings = study(notebook, calculation, &bundle, &standing.sheet.file.path)?;
            let moves = standing.last.map(|last| moved(&notebook.root, last, &findings));
            Ok::<R, Diagnostics>(keep(findings, moves))
        },
        |batch| {
            for (index, result) in batch {
                if let Some(standing) = chosen.get(index) {
                    progress(Event::Done { worksheet: &standing.sheet.file.path });
                    results.push((index, result));
                }
            }
        },
    );
    results.sort_by_key(|(index, _)| *index);
    let mut done = Vec::new();
    for ((_, result), standing) in results.into_iter().zip(&chosen) {
        let path = &standing.sheet.file.path;
        match result {
            Ok(Ok(result)) => done.push(Recalculated {
                note: standing.sheet.note.clone(),
                worksheet: path.to_string(),
                due: standing.due.clone(),
                result,
            }),
            Ok(Err(errors)) => {
                diagnostics.extend(errors);
                failed.push(path.to_string());
            }
            Err(said) => {
                diagnostics.push(broke_down(path, &said));
                failed.push(path.to_string());
            }
        }
    }
    failed.sort();
    (done, failed, diagnostics)
}
