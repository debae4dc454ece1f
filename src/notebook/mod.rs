//! The folder: what depends on what, what is out of date, the register.
//!
//! ```text
//! Notebook::open(folder)              -> Notebook     settings, worksheets, records, templates
//! scan(notebook, register, workers)   -> [Sheet]      each worksheet with what it depends on
//! sheet.bundle(notebook, ...)         -> Bundle       everything its note is made from
//! issue(notebook, press, order, ...)  -> Outcome      what is out of date, and only that, as PDF and findings
//! recalculate(notebook, press, ...)                   findings without issuing anything
//! ```
//!
//! Rules of the folder. Worksheets are all `*.md` outside `issued/`, `parts/`, `policies/`, `templates/` and hidden
//! folders; a `README.md` is none. A note depends on its worksheet, on `notebook.yaml`, on the policy, logo and templates
//! of the notebook, on the images it shows, and on each part record it uses: the record, not the file that it stands in.
//! A note is out of date when the digest over all of these, or the version of the program, is another than at its last
//! issue; times of files say nothing.

mod find;
mod issue;
mod parts;
pub mod register;
mod scan;
mod sheet;
pub mod shelf;
mod uses;
mod workers;

pub use issue::{
    Calculation, Event, Issued, Order, Outcome, Press, Recalculated, Typeset, issue, recalculate,
};
pub use parts::{Parts, Record, ranges};
pub use register::Register;
pub use scan::{Scan, Standing, scan};
pub use sheet::{Contents, Sheet};
pub use uses::{Uses, uses};

use std::path::{Path, PathBuf};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::settings::{self, Settings};
use crate::source::{self, File, LARGEST_FILE, LARGEST_TEXT, Place};

/// A notebook as it lies on the disk.
pub struct Notebook {
    /// The folder, links resolved.
    pub root: PathBuf,
    /// What `notebook.yaml` says; `None` where it cannot be read, and then no note can be made.
    pub settings: Option<Settings>,
    pub(crate) settings_file: Option<File>,
    pub(crate) policy: Option<File>,
    pub(crate) logo: Option<File>,
    pub(crate) templates: Vec<File>,
    pub parts: Parts,
    /// Paths of the worksheets, sorted.
    pub worksheets: Vec<String>,
    /// What is wrong with the notebook apart from its worksheets.
    pub problems: Diagnostics,
}

impl Notebook {
    /// Opens a notebook and reads everything but its worksheets.
    ///
    /// # Errors
    /// The folder is none, cannot be read, or has no `notebook.yaml`. Anything else that is wrong goes to `problems`, so
    /// that a run can tell of the worksheets too.
    pub fn open(folder: &Path) -> Result<Notebook, Diagnostics> {
        let shown = folder.display();
        let root = folder
            .canonicalize()
            .map_err(|error| Diagnostic::bare(format!("the folder {shown} cannot be opened: {error}")))?;
        if !root.is_dir() {
            return Err(Diagnostic::bare(format!("{shown} is no folder")).expected("a notebook").into());
        }
        match std::fs::symlink_metadata(root.join(settings::FILE)) {
            Ok(_) => {}
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
                return Err(no_notebook(folder, &root).into());
            }
            Err(error) => {
                return Err(Diagnostic::bare(format!("the folder {shown} cannot be read: {error}")).into());
            }
        }
        let mut notebook = Notebook {
            settings: None,
            settings_file: None,
            policy: None,
            logo: None,
            templates: Vec::new(),
            parts: Parts::default(),
            worksheets: Vec::new(),
            problems: Diagnostics::default(),
            root,
        };
        notebook.read_settings();
        notebook.parts = Parts::read(&notebook.root, &mut notebook.problems);
        for path in find::files(&notebook.root, "templates", &["typ"], &mut notebook.problems) {
            let template = notebook.text(&path);
            notebook.templates.extend(template);
        }
        notebook.worksheets = find::worksheets(&notebook.root, &mut notebook.problems);
        Ok(notebook)
    }

    fn read_settings(&mut self) {
        let Some(file) = self.text(settings::FILE) else { return };
        match settings::read(&file) {
            Err(errors) => self.problems.extend(errors),
            Ok(settings) => {
                let root = &self.root;
                let problems = &mut self.problems;
                let mut named = |spot: &crate::worksheet::Spot<String>, what: &str, limit: u64| {
                    let read = source::read_below(root, &spot.value, limit);
                    problems.keep(read.map_err(|error| {
                        Diagnostic::error(&spot.place, format!("`{}`: {error}", spot.value))
                            .expected(format!("the path of {what} inside the notebook"))
                    }))
                };
                let policy = settings.policy.as_ref().map(|spot| named(spot, "a policy", LARGEST_TEXT));
                let logo = settings.logo.as_ref().map(|spot| named(spot, "an image", LARGEST_FILE));
                // With a policy or logo that cannot be read there are no settings that a note could be made with.
                if !matches!(policy, Some(None)) && !matches!(logo, Some(None)) {
                    (self.policy, self.logo) = (policy.flatten(), logo.flatten());
                    self.settings = Some(settings);
                }
            }
        }
        self.settings_file = Some(file);
    }

    /// A text file of the notebook; what hinders reading it goes to the problems.
    fn text(&mut self, path: &str) -> Option<File> {
        let read = source::read_below(&self.root, path, LARGEST_TEXT);
        self.problems.keep(
            read.map_err(|error| Diagnostic::error(&Place::new(&path.into(), 1, 1, 0), error.to_string())),
        )
    }
}

fn no_notebook(folder: &Path, root: &Path) -> Diagnostic {
    let inside = std::fs::read_dir(root).into_iter().flatten().flatten();
    let mut near: Vec<PathBuf> = inside
        .filter(|entry| entry.path().join(settings::FILE).is_file())
        .map(|entry| folder.join(entry.file_name()))
        .collect();
    near.sort();
    let expected = match near.first() {
        Some(near) => format!("the folder of a notebook, such as {}", near.display()),
        None => format!("a folder with a {}; `start` makes one", settings::FILE),
    };
    Diagnostic::bare(format!("{} is no notebook: it has no {}", folder.display(), settings::FILE))
        .expected(expected)
}
