//! All worksheets of a notebook, each with what it depends on, at the cost of reading and hashing.

use std::collections::BTreeMap;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{Digest, File};

use super::register::{Entry, Input, Register};
use super::sheet::{Contents, Sheet, read_file};
use super::{Notebook, shelf, workers};

/// A worksheet that can be made into a note, and how it stands.
#[derive(Clone, Debug)]
pub struct Standing<'a> {
    pub sheet: Sheet,
    pub digest: Digest,
    pub inputs: Vec<Input>,
    /// The latest issue, if there is one.
    pub last: Option<&'a Entry>,
    /// Why a new issue is due; nothing where the note is up to date.
    pub due: Vec<String>,
}

/// The worksheets of a notebook.
#[derive(Debug, Default)]
pub struct Scan<'a> {
    /// In the order of their paths.
    pub sheets: Vec<Standing<'a>>,
    /// Paths of the worksheets that cannot be made into notes.
    pub failed: Vec<String>,
    pub diagnostics: Diagnostics,
}

/// Why a new issue is due; nothing where the note is up to date.
fn due(last: Option<&Entry>, digest: Digest, inputs: &[Input], program: &str) -> Vec<String> {
    let Some(last) = last else { return vec!["never issued".to_owned()] };
    let mut reasons = Vec::new();
    if last.program != program {
        reasons.push(format!("program {} instead of {}", program, last.program));
    }
    if last.digest == digest {
        return reasons;
    }
    let by_path = |inputs: &'_ [Input]| -> BTreeMap<String, Digest> {
        inputs.iter().map(|input| (input.path.clone(), input.digest)).collect()
    };
    let (before, now) = (by_path(&last.inputs), by_path(inputs));
    for (path, digest) in &now {
        match before.get(path) {
            None => reasons.push(format!("{path} is new")),
            Some(old) if old != digest => reasons.push(format!("{path} changed")),
            Some(_) => {}
        }
    }
    let gone = before.keys().filter(|path| !now.contains_key(*path));
    reasons.extend(gone.map(|path| format!("{path} is gone")));
    reasons
}

/// Reads all worksheets. A worksheet that is as it was at the last issue of its note costs reading and hashing; any other
/// is read as a worksheet, and everything that is wrong with it is told. Two worksheets with one note number are refused
/// both: nobody could tell which of them the next issue continues.
pub fn scan<'a>(notebook: &Notebook, register: &'a Register, program: &str, threads: usize) -> Scan<'a> {
    let known = register.by_worksheet();
    let read = workers::map(threads, &notebook.worksheets, |path| {
        let file = read_file(notebook, path)?;
        let known = known.get(&(path.as_str(), file.digest)).copied();
        standing(notebook, register, program, file, known)
    });
    let mut scan = Scan::default();
    for (path, result) in notebook.worksheets.iter().zip(read) {
        match result {
            Ok(Ok(standing)) => scan.sheets.push(standing),
            Ok(Err(errors)) => scan.refuse(path, errors),
            Err(said) => scan.refuse(path, broke_down(path, &said).into()),
        }
    }
    scan.refuse_twins(notebook);
    scan
}

/// What is told of a worksheet over which the program broke down.
pub(super) fn broke_down(path: &str, said: &str) -> Diagnostic {
    Diagnostic::bare(format!("{path}: the program broke down over this worksheet: {said}"))
        .expected("a report of this defect, with the worksheet")
}

fn standing<'a>(
    notebook: &Notebook,
    register: &'a Register,
    program: &str,
    file: File,
    known: Option<(&str, &'a Entry)>,
) -> Result<Standing<'a>, Diagnostics> {
    if let Some((note, entry)) = known {
        let sheet = Sheet::known(file.clone(), note, entry);
        // What cannot be found now is told with its place below.
        if let Ok((bundle, inputs)) = sheet.bundle(notebook, Contents::Digests)
            && bundle.digest() == entry.digest
            && entry.program == program
        {
            let digest = entry.digest;
            return Ok(Standing { sheet, digest, inputs, last: Some(entry), due: Vec::new() });
        }
    }
    let sheet = Sheet::read(notebook, file)?;
    let (bundle, inputs) = sheet.bundle(notebook, Contents::Digests)?;
    let (digest, last) = (bundle.digest(), register.last(&sheet.note));
    let due = due(last, digest, &inputs, program);
    Ok(Standing { sheet, digest, inputs, last, due })
}

impl Scan<'_> {
    fn refuse(&mut self, path: &str, errors: Diagnostics) {
        self.failed.push(path.to_owned());
        self.diagnostics.extend(errors);
    }

    /// Refuses worksheets whose notes have one number, or numbers that file names cannot tell apart.
    fn refuse_twins(&mut self, notebook: &Notebook) {
        let mut by_stem: BTreeMap<String, Vec<usize>> = BTreeMap::new();
        for (index, standing) in self.sheets.iter().enumerate() {
            by_stem.entry(shelf::stem(&standing.sheet.note).to_lowercase()).or_default().push(index);
        }
        let mut twins: Vec<usize> = by_stem.into_values().filter(|all| all.len() > 1).flatten().collect();
        twins.sort_unstable();
        for &index in &twins {
            let Some(standing) = self.sheets.get(index) else { continue };
            let sheet = &standing.sheet;
            let place = match Sheet::read(notebook, sheet.file.clone()) {
                Ok(read) => read.place,
                Err(_) => sheet.place.clone(),
            };
            let others: Vec<String> = twins
                .iter()
                .filter(|other| **other != index)
                .filter_map(|other| self.sheets.get(*other))
                .filter(|other| {
                    shelf::stem(&other.sheet.note).to_lowercase() == shelf::stem(&sheet.note).to_lowercase()
                })
                .map(|other| other.sheet.file.path.to_string())
                .collect();
            let message = format!("the note number `{}` stands in {} too", sheet.note, others.join(", "));
            self.diagnostics
                .push(Diagnostic::error(&place, message).expected("a number of its own for each note"));
        }
        for index in twins.into_iter().rev() {
            let standing = self.sheets.remove(index);
            self.failed.push(standing.sheet.file.path.to_string());
        }
        self.failed.sort();
    }
}
