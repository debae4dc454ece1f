//! The register of issues: `issued/register.json`, a readable file that says of every issue what it was made from.

use std::collections::BTreeMap;
use std::path::Path;

use serde::{Deserialize, Serialize};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{Digest, Place};
use crate::study::{NoteHead, Verdicts};

use super::shelf;

/// Name of the register in the folder of issues.
pub const FILE: &str = "register.json";
/// Version of the register's shape.
const FORMAT: u32 = 1;
/// The largest register that is read, in bytes.
const LARGEST: u64 = 256 << 20;

/// Every issue of every note, by note number; issues in ascending order.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Register {
    register: u32,
    pub notes: BTreeMap<String, Vec<Entry>>,
}

/// One issue of a note.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Entry {
    pub issue: u32,
    pub revision: String,
    /// Date of issue as printed.
    pub date: String,
    pub title: String,
    /// Program version and findings schema that made it.
    pub program: String,
    pub schema: u32,
    /// Something moved since the issue before, so that nobody has checked or approved this one yet.
    pub signatures_cleared: bool,
    /// Names that the worksheet gives and that were left out of this issue.
    pub withheld: Withheld,
    pub verdicts: Verdicts,
    pub pdf: Stored,
    pub findings: Stored,
    /// One digest over all inputs.
    pub digest: Digest,
    pub inputs: Vec<Input>,
}

/// Names of checker and approver that a worksheet gives and that stand for an earlier issue, not for this one.
///
/// A name that was left out stays out of later issues, also of such that move nothing, until the worksheet gives another
/// or has been issued without it: whoever signed an issue long ago has not seen what moved since.
#[derive(Clone, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Withheld {
    pub checker: Option<String>,
    pub approver: Option<String>,
}

impl Withheld {
    /// Takes the names out of `head` that do not stand for this issue: all of them where something `moved` since `last`,
    /// and those that `last` left out already.
    pub fn take(head: &mut NoteHead, moved: bool, last: Option<&Withheld>) -> Withheld {
        let one = |name: &mut Option<String>, before: Option<&String>| {
            name.take_if(|name| moved || before == Some(&*name))
        };
        Withheld {
            checker: one(&mut head.checker, last.and_then(|last| last.checker.as_ref())),
            approver: one(&mut head.approver, last.and_then(|last| last.approver.as_ref())),
        }
    }

    /// The names, checker first, each once.
    pub fn names(&self) -> Vec<&str> {
        let mut names: Vec<&str> =
            [&self.checker, &self.approver].into_iter().flatten().map(String::as_str).collect();
        names.dedup();
        names
    }
}

/// A file in the folder of issues.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Stored {
    pub file: String,
    pub digest: Digest,
}

/// One file that a note was made from.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Input {
    #[serde(rename = "as")]
    pub role: Role,
    pub path: String,
    pub digest: Digest,
}

/// What an input file is to a note.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Role {
    Worksheet,
    Settings,
    Policy,
    Part,
    Image,
    Logo,
    Template,
}

impl Default for Register {
    fn default() -> Self {
        Register { register: FORMAT, notes: BTreeMap::new() }
    }
}

impl Register {
    /// The latest issue of a note.
    pub fn last(&self, note: &str) -> Option<&Entry> {
        self.notes.get(note).and_then(|issues| issues.last())
    }

    /// The latest issue of every note with its number, by path and digest of its worksheet.
    pub fn by_worksheet(&self) -> BTreeMap<(&str, Digest), (&str, &Entry)> {
        let latest = self.notes.iter().filter_map(|(note, issues)| Some((note.as_str(), issues.last()?)));
        latest
            .filter_map(|(note, entry)| {
                let worksheet = entry.inputs.iter().find(|input| input.role == Role::Worksheet)?;
                Some(((worksheet.path.as_str(), worksheet.digest), (note, entry)))
            })
            .collect()
    }

    /// Names of every file that some issue consists of.
    pub fn stored(&self) -> impl Iterator<Item = &Stored> {
        self.notes.values().flatten().flat_map(|entry| [&entry.pdf, &entry.findings])
    }

    /// The register as its file holds it: the same register, the same bytes.
    ///
    /// # Errors
    /// None that a register can cause; the writer's are passed on.
    pub fn to_bytes(&self) -> Result<Vec<u8>, Diagnostic> {
        let mut bytes = serde_json::to_vec_pretty(self)
            .map_err(|error| Diagnostic::bare(format!("the register cannot be written: {error}")))?;
        bytes.push(b'\n');
        Ok(bytes)
    }
}

/// Reads the register of a notebook; a notebook that was never issued has an empty one.
///
/// # Errors
/// A register that was damaged or written by a newer version; issues without a register. Nothing is ever issued over
/// either: the numbers of the issues would begin anew.
pub fn read(root: &Path) -> Result<Register, Diagnostics> {
    let path = format!("{}/{FILE}", shelf::FOLDER);
    let place = |line: usize, column: usize| {
        Place::new(&path.as_str().into(), line.max(1) as u32, column.max(1) as u32, 0)
    };
    let full = root.join(shelf::FOLDER).join(FILE);
    let size = match std::fs::metadata(&full) {
        Ok(about) => about.len(),
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => return without(root),
        Err(error) => {
            return Err(Diagnostic::error(&place(1, 1), format!("cannot be read: {error}")).into());
        }
    };
    if size > LARGEST {
        return Err(Diagnostic::error(&place(1, 1), format!("the register has {size} bytes")).into());
    }
    let restore = "the register as the last run left it; restore it from a copy";
    let bytes = std::fs::read(&full)
        .map_err(|error| Diagnostic::error(&place(1, 1), format!("cannot be read: {error}")))?;
    let register: Register = serde_json::from_slice(&bytes).map_err(|error| {
        #[derive(Deserialize)]
        struct Cover {
            register: u32,
        }
        match serde_json::from_slice::<Cover>(&bytes) {
            // Another version's register is sound, only not for this one.
            Ok(cover) if cover.register != FORMAT => other_format(cover.register, &place(1, 1)),
            _ => {
                let at = place(error.line(), error.column());
                Diagnostic::error(&at, format!("the register is damaged: {error}")).expected(restore)
            }
        }
    })?;
    if register.register != FORMAT {
        return Err(other_format(register.register, &place(1, 1)).into());
    }
    let mut errors = Diagnostics::default();
    for (note, issues) in &register.notes {
        let ascending = issues.windows(2).all(|pair| pair[0].issue < pair[1].issue);
        if issues.is_empty() || !ascending || issues.iter().any(|entry| entry.issue == 0) {
            let message = format!("the issues of {note} are not numbered in ascending order");
            errors.push(Diagnostic::error(&place(1, 1), message).expected(restore));
        }
    }
    for stored in register.stored().filter(|stored| !shelf::is_plain_name(&stored.file)) {
        let message = format!("`{}` is no file of this folder", stored.file);
        errors.push(Diagnostic::error(&place(1, 1), message).expected(restore));
    }
    if errors.has_errors() { Err(errors) } else { Ok(register) }
}

fn other_format(found: u32, place: &Place) -> Diagnostic {
    Diagnostic::error(place, format!("the register has format {found}"))
        .expected(format!("format {FORMAT}, which this version writes"))
}

/// No register: right for a new notebook, and only for that.
fn without(root: &Path) -> Result<Register, Diagnostics> {
    let issued = shelf::names(root)?;
    match issued.iter().find(|name| shelf::is_issue(name)) {
        None => Ok(Register::default()),
        Some(name) => {
            Err(Diagnostic::bare(format!("{}/ holds issues such as {name}, but no {FILE}", shelf::FOLDER))
                .expected("the register as the last run left it; restore it from a copy")
                .into())
        }
    }
}
