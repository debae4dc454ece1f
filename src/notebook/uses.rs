//! Which worksheet uses which part, and under which designators.

use std::collections::BTreeMap;

use crate::circuit;
use crate::diagnostic::Diagnostics;
use crate::worksheet;

use super::Notebook;
use super::sheet::read_file;

/// The parts of one worksheet.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Uses {
    pub worksheet: String,
    pub note: String,
    pub title: String,
    /// Part name -> reference designators, in the order of the circuit.
    pub parts: BTreeMap<String, Vec<String>>,
}

/// The parts of every worksheet that can be read, in the order of their paths, and what is wrong with the others.
pub fn uses(notebook: &Notebook) -> (Vec<Uses>, Diagnostics) {
    let mut diagnostics = notebook.problems.clone();
    let mut all = Vec::new();
    for path in &notebook.worksheets {
        let read = read_file(notebook, path).map_err(Diagnostics::from);
        match read.and_then(|file| worksheet::read(&file)) {
            Err(errors) => diagnostics.extend(errors),
            Ok((sheet, _)) => {
                let mut parts: BTreeMap<String, Vec<String>> = BTreeMap::new();
                for record in &sheet.circuit {
                    if let Some(part) = circuit::part_named(record) {
                        let designator = record.key.value.clone();
                        parts.entry(part.value.trim().to_owned()).or_default().push(designator);
                    }
                }
                all.push(Uses {
                    worksheet: path.clone(),
                    note: sheet.head.note.value,
                    title: sheet.head.title.value,
                    parts,
                });
            }
        }
    }
    (all, diagnostics)
}
