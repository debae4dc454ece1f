//! One worksheet and everything that its note depends on.

use std::sync::Arc;

use crate::circuit;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{self, Bundle, File, LARGEST_FILE, LARGEST_TEXT, Place, ReadError};
use crate::worksheet::{self, Worksheet};

use super::Notebook;
use super::register::{Entry, Input, Role};

/// The longest note number, in characters.
const LONGEST_NUMBER: usize = 60;

/// A worksheet of the notebook with the names of what it uses.
#[derive(Clone, Debug)]
pub struct Sheet {
    pub file: File,
    pub note: String,
    /// Where the note number stands; the start of the file where it is known from the register.
    pub place: Place,
    pub title: String,
    pub revision: String,
    pub date: String,
    /// Names of the part records it uses and paths of the images it shows, sorted.
    pub parts: Vec<String>,
    pub images: Vec<String>,
}

/// What of the files is wanted in a bundle.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Contents {
    /// Everything.
    Bytes,
    /// Digests of the images without their bytes: enough to see what is out of date.
    Digests,
}

/// Reads the bytes of a worksheet.
pub(super) fn read_file(notebook: &Notebook, path: &str) -> Result<File, Diagnostic> {
    source::read_below(&notebook.root, path, LARGEST_TEXT).map_err(|error| {
        let expected = match error {
            ReadError::TooLarge(..) => "a worksheet: text, its images in files of their own",
            _ => "a Markdown worksheet",
        };
        Diagnostic::error(&Place::new(&path.into(), 1, 1, 0), error.to_string()).expected(expected)
    })
}

impl Sheet {
    /// What the register knows of a worksheet that has not changed since its note was issued.
    pub(super) fn known(file: File, note: &str, entry: &Entry) -> Sheet {
        let paths = |role: Role| {
            entry.inputs.iter().filter(move |input| input.role == role).map(|input| input.path.as_str())
        };
        let place = Place::new(&file.path, 1, 1, 0);
        Sheet {
            note: note.to_owned(),
            place,
            title: entry.title.clone(),
            revision: entry.revision.clone(),
            // The register holds the date of the issue, which the worksheet's may not be; not used while up to date.
            date: entry.date.clone(),
            parts: paths(Role::Part)
                .filter_map(|path| path.split_once('#'))
                .map(|(_, name)| name.to_owned())
                .collect(),
            images: paths(Role::Image).map(str::to_owned).collect(),
            file,
        }
    }

    /// Reads a worksheet and finds everything it names.
    ///
    /// # Errors
    /// All that is wrong with it: what the worksheet room says, a note number that does not fit, parts that no record
    /// describes, images that cannot be read.
    pub(super) fn read(notebook: &Notebook, file: File) -> Result<Sheet, Diagnostics> {
        let (sheet, _) = worksheet::read(&file)?;
        let mut errors = Diagnostics::default();
        check_number(notebook, &sheet, &mut errors);
        let parts = parts(notebook, &sheet, &mut errors);
        let mut images: Vec<String> = Vec::new();
        for (path, place) in &sheet.images {
            match source::read_below(&notebook.root, path, LARGEST_FILE) {
                Ok(_) => images.push(path.clone()),
                Err(error) => errors.push(missing_image(path, place, &error)),
            }
        }
        images.sort();
        images.dedup();
        if errors.has_errors() {
            return Err(errors);
        }
        let head = sheet.head;
        Ok(Sheet {
            file,
            note: head.note.value,
            place: head.note.place,
            title: head.title.value,
            revision: head.revision.value,
            date: head.date.value,
            parts,
            images,
        })
    }

    /// Everything that the note is made from, and what each file is to it.
    ///
    /// # Errors
    /// A part without a record, an image that cannot be read, a notebook without settings; without places where the sheet
    /// comes from the register.
    pub fn bundle(
        &self,
        notebook: &Notebook,
        contents: Contents,
    ) -> Result<(Bundle, Vec<Input>), Diagnostics> {
        let mut errors = Diagnostics::default();
        let mut files: Vec<(Role, File)> = vec![(Role::Worksheet, self.file.clone())];
        if notebook.settings.is_none() {
            // What is wrong with them stands among the notebook's problems.
            return Err(errors);
        }
        files.extend(notebook.settings_file.iter().map(|file| (Role::Settings, file.clone())));
        files.extend(notebook.policy.iter().map(|file| (Role::Policy, file.clone())));
        files.extend(notebook.logo.iter().map(|file| (Role::Logo, file.clone())));
        files.extend(notebook.templates.iter().map(|file| (Role::Template, file.clone())));
        for name in &self.parts {
            match notebook.parts.records.get(name).filter(|record| !record.broken) {
                Some(record) => files.push((Role::Part, record.file.clone())),
                None => errors.push(Diagnostic::error(&self.place, format!("the record of {name} is gone"))),
            }
        }
        for path in &self.images {
            match source::read_below(&notebook.root, path, LARGEST_FILE) {
                Ok(file) if contents == Contents::Digests => {
                    files.push((Role::Image, File { bytes: Arc::from([].as_slice()), ..file }));
                }
                Ok(file) => files.push((Role::Image, file)),
                Err(error) => errors.push(missing_image(path, &self.place, &error)),
            }
        }
        if errors.has_errors() {
            return Err(errors);
        }
        let mut bundle = Bundle::default();
        let mut inputs = Vec::new();
        for (role, file) in files {
            // An image that is also the logo is one file.
            if bundle.get(&file.path).is_none() {
                inputs.push(Input { role, path: file.path.to_string(), digest: file.digest });
                bundle.insert(file);
            }
        }
        inputs.sort_by(|a, b| (a.role, &a.path).cmp(&(b.role, &b.path)));
        Ok((bundle, inputs))
    }
}

fn missing_image(path: &str, place: &Place, error: &ReadError) -> Diagnostic {
    Diagnostic::error(place, format!("the image `{path}` cannot be read: {error}"))
        .expected("the path of an image inside the notebook, relative to the worksheet")
}

fn check_number(notebook: &Notebook, sheet: &Worksheet, errors: &mut Diagnostics) {
    let number = &sheet.head.note;
    let begin = notebook.settings.as_ref().map_or("", |settings| settings.numbering.as_str());
    if number.value.chars().count() > LONGEST_NUMBER {
        errors.push(
            Diagnostic::error(&number.place, "the note number is too long")
                .expected(format!("at most {LONGEST_NUMBER} characters")),
        );
    } else if !number.value.starts_with(begin) {
        errors.push(
            Diagnostic::error(&number.place, format!("the note number `{}` does not fit", number.value))
                .expected(format!("a number that begins with `{begin}`, as notebook.yaml asks")),
        );
    }
}

/// The records that a worksheet's circuit names, sorted.
fn parts(notebook: &Notebook, sheet: &Worksheet, errors: &mut Diagnostics) -> Vec<String> {
    let known = &notebook.parts.records;
    let mut parts = Vec::new();
    for spot in sheet.circuit.iter().filter_map(circuit::part_named) {
        let name = spot.value.trim();
        match known.get(name) {
            Some(record) if record.broken => errors.push(
                Diagnostic::error(&spot.place, format!("the record of `{name}` has errors"))
                    .expected(format!("a record that can be read; see {}", record.origin)),
            ),
            Some(_) => parts.push(name.to_owned()),
            None => {
                let message = format!("there is no part record `{name}`");
                let error = Diagnostic::error(&spot.place, message);
                errors.push(match notebook.parts.unread.as_slice() {
                    [] => error
                        .expected("the name of a record in parts/")
                        .nearest(name, known.keys().map(String::as_str)),
                    unread => error.expected(format!(
                        "a record that can be read; see the errors of {}",
                        unread.join(", ")
                    )),
                });
            }
        }
    }
    parts.sort();
    parts.dedup();
    parts
}
