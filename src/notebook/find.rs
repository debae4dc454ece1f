//! What lies in the folder of a notebook.

use std::io;
use std::path::Path;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::settings;

/// Folders at the top of a notebook that hold something else than worksheets.
const OTHER_FOLDERS: [&str; 4] = ["issued", "parts", "policies", "templates"];
/// The deepest nesting of folders.
const DEEPEST: usize = 16;

/// Paths of the worksheets, sorted: every `*.md` but `README.md`, outside the folders for other things, outside hidden
/// folders and outside notebooks that lie in this one.
pub(super) fn worksheets(root: &Path, problems: &mut Diagnostics) -> Vec<String> {
    let mut walk = Walk { root, extensions: &["md"], found: Vec::new(), problems };
    walk.folder("", 0);
    let mut found = walk.found;
    found.retain(|path| !path.rsplit('/').next().unwrap_or(path).eq_ignore_ascii_case("readme.md"));
    found.sort();
    found
}

/// Paths of the files with one of `extensions` in a folder of the notebook and below, sorted; none without the folder.
pub(super) fn files(
    root: &Path,
    folder: &str,
    extensions: &[&str],
    problems: &mut Diagnostics,
) -> Vec<String> {
    if !root.join(folder).is_dir() {
        return Vec::new();
    }
    let mut walk = Walk { root, extensions, found: Vec::new(), problems };
    walk.folder(folder, 0);
    let mut found = walk.found;
    found.sort();
    found
}

struct Walk<'a> {
    root: &'a Path,
    extensions: &'a [&'a str],
    found: Vec<String>,
    problems: &'a mut Diagnostics,
}

impl Walk<'_> {
    fn folder(&mut self, path: &str, depth: usize) {
        if depth > DEEPEST {
            self.problems.push(Diagnostic::bare(format!("{path}: folders are nested too deep")));
            return;
        }
        if let Err(error) = self.entries(path, depth) {
            let named = if path.is_empty() { "the notebook's folder" } else { path };
            self.problems.push(Diagnostic::bare(format!("{named} cannot be read: {error}")));
        }
    }

    fn entries(&mut self, path: &str, depth: usize) -> io::Result<()> {
        for entry in std::fs::read_dir(self.root.join(path))? {
            let entry = entry?;
            let name = entry.file_name();
            let Some(name) = name.to_str() else {
                let shown = name.to_string_lossy().into_owned();
                self.problems.push(
                    Diagnostic::bare(format!("the name of `{shown}` is no text"))
                        .expected("file names in UTF-8"),
                );
                continue;
            };
            let top = path.is_empty();
            if name.starts_with('.') || (top && OTHER_FOLDERS.contains(&name)) {
                continue;
            }
            let full = if top { name.to_owned() } else { format!("{path}/{name}") };
            let sort = entry.file_type()?;
            if sort.is_dir() {
                if !entry.path().join(settings::FILE).exists() {
                    self.folder(&full, depth + 1);
                }
            } else if (sort.is_file() || sort.is_symlink())
                && name.rsplit_once('.').is_some_and(|(_, end)| self.extensions.contains(&end))
            {
                self.found.push(full);
            }
        }
        Ok(())
    }
}
