//! The part records of a notebook, each cut out of its file, so that a note depends on the records it uses and on nothing
//! else that stands in the same file.

use std::collections::BTreeMap;
use std::ops::Range;
use std::path::Path;
use std::sync::Arc;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part;
use crate::source::{self, File, LARGEST_TEXT, Place};
use crate::yaml;

use super::find;

/// The folder of part records.
pub const FOLDER: &str = "parts";

/// One record: `parts/transistors.yaml#LBN-250` with the text of that record alone.
#[derive(Clone, Debug)]
pub struct Record {
    pub name: String,
    pub file: File,
    /// The file it stands in and how many lines stand before it.
    pub origin: Arc<str>,
    pub lines_before: u32,
    /// It has been reported what is wrong with it.
    pub broken: bool,
}

/// All records of a notebook by name.
#[derive(Clone, Debug, Default)]
pub struct Parts {
    pub records: BTreeMap<String, Record>,
    /// Files that could not be read: what they hold is not known.
    pub unread: Vec<String>,
}

/// Where each record stands in the text of a part file: its name, its first line (from 1) and its bytes, without blank
/// lines and unindented comments at its end.
///
/// # Errors
/// Malformed YAML; a record that does not begin at the start of a line.
pub fn ranges(text: &str, path: &Arc<str>) -> Result<Vec<(yaml::Key, Range<usize>)>, Diagnostics> {
    let begin = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
    let body = text.get(begin..).unwrap_or("");
    let root = yaml::read(body, path, 1)?;
    let entries = root.map("part records: `NAME:` and below it `kind:`, `rows:`, `ratings:`")?;
    let starts: Vec<usize> =
        std::iter::once(0).chain(body.match_indices('\n').map(|(at, _)| at + 1)).collect();
    let start_of = |line: u32| starts.get(line as usize - 1).copied().unwrap_or(body.len());
    let mut errors = Diagnostics::default();
    let mut out = Vec::new();
    for (index, (key, _)) in entries.iter().enumerate() {
        if key.place.column != 1 {
            errors.push(
                Diagnostic::error(&key.place, format!("the record `{}` begins inside a line", key.name))
                    .expected("each record at the start of a line: `NAME:`, its keys indented below"),
            );
            continue;
        }
        let next = entries.get(index + 1).map_or(body.len(), |(next, _)| start_of(next.place.line));
        let start = start_of(key.place.line);
        let record = body.get(start..next).unwrap_or("");
        out.push((key.clone(), begin + start..begin + start + content(record).len()));
    }
    if errors.has_errors() { Err(errors) } else { Ok(out) }
}

/// A record without the blank lines and unindented comments that end it: those speak of what follows.
fn content(record: &str) -> &str {
    let mut kept = record;
    loop {
        let trimmed = kept.trim_end_matches(['\n', '\r', ' ', '\t']);
        let last = trimmed.rfind('\n').map_or(0, |at| at + 1);
        match trimmed.get(last..) {
            Some(line) if line.starts_with('#') && last > 0 => kept = &trimmed[..last],
            _ => return trimmed,
        }
    }
}

impl Parts {
    /// Reads every part file of the notebook and checks every record.
    pub(super) fn read(root: &Path, problems: &mut Diagnostics) -> Parts {
        let mut parts = Parts::default();
        for path in find::files(root, FOLDER, &["yaml", "yml"], problems) {
            if let Err(errors) = parts.add(root, &path, problems) {
                problems.extend(errors);
                parts.unread.push(path);
            }
        }
        parts
    }

    fn add(&mut self, root: &Path, path: &str, problems: &mut Diagnostics) -> Result<(), Diagnostics> {
        let path: Arc<str> = path.into();
        let origin = Place::new(&path, 1, 1, 0);
        let file = source::read_below(root, &path, LARGEST_TEXT)
            .map_err(|error| Diagnostic::error(&origin, error.to_string()).expected("part records"))?;
        let text = file.text().map_err(|at| {
            Diagnostic::error(&origin, format!("byte {at} is no text")).expected("YAML in UTF-8")
        })?;
        for (key, range) in ranges(text, &path)? {
            if let Some(first) = self.records.get_mut(&key.name) {
                // Which of the two is meant nobody can tell, so that no note is made from either.
                first.broken = true;
                let message = format!("there are two records `{}`", key.name);
                problems.push(Diagnostic::error(&key.place, message).expected(format!(
                    "a name of its own; the first stands in {} on line {}",
                    first.origin,
                    first.lines_before + 1
                )));
                continue;
            }
            let slice = text.get(range).unwrap_or("").as_bytes().to_vec();
            let mut record = Record {
                file: File::new(&format!("{path}#{}", key.name), slice),
                origin: path.clone(),
                lines_before: key.place.line - 1,
                name: key.name.clone(),
                broken: false,
            };
            let checked = part::read(&record.file);
            record.broken = checked.is_err();
            self.records.insert(key.name, record);
            if let Err(mut errors) = checked {
                self.translate(&mut errors);
                problems.extend(errors);
            }
        }
        Ok(())
    }

    /// Turns places in cut-out records into places in the files that people edit.
    pub fn translate(&self, diagnostics: &mut Diagnostics) {
        for place in diagnostics.0.iter_mut().filter_map(|diagnostic| diagnostic.place.as_mut()) {
            let record = place.file.split_once('#').and_then(|(_, name)| self.records.get(name));
            if let Some(record) = record.filter(|record| record.file.path == place.file) {
                place.file = record.origin.clone();
                place.line += record.lines_before;
            }
        }
    }
}
