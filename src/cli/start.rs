//! `start`: a new notebook that can be issued at once.

use std::io::{self, Write};
use std::path::Path;

use crate::diagnostic::Diagnostic;

use super::{Console, MET, StartArguments, UNUSABLE, show};

/// The files of a new notebook. The one that makes a folder a notebook comes last, so that a start that was interrupted
/// has made none.
const FILES: [(&str, &str); 4] = [
    ("parts/parts.yaml", include_str!("start/parts.yaml")),
    ("policies/derating.yaml", include_str!("start/derating.yaml")),
    ("load-switch.md", include_str!("start/load-switch.md")),
    ("notebook.yaml", include_str!("start/notebook.yaml")),
];

pub(super) fn run(arguments: &StartArguments, console: &mut Console) -> u8 {
    let folder = &arguments.folder;
    let shown = folder.display();
    let made = match empty(folder) {
        Ok(true) => FILES.iter().try_for_each(|(path, text)| write(&folder.join(path), text)),
        Ok(false) => {
            let error = Diagnostic::bare(format!("{shown} is not empty"))
                .expected("a folder that does not exist yet, or an empty one");
            show::diagnostics(console, None, &error.into());
            return UNUSABLE;
        }
        Err(error) => Err(error),
    };
    if let Err(error) = made {
        let error = Diagnostic::bare(format!("the notebook {shown} cannot be made: {error}"));
        show::diagnostics(console, None, &error.into());
        return UNUSABLE;
    }
    for (path, _) in FILES {
        show::line(console, &folder.join(path).display().to_string());
    }
    show::line(console, &format!("next: qsheaf issue {shown}"));
    MET
}

/// Whether the folder is empty or does not exist.
fn empty(folder: &Path) -> io::Result<bool> {
    match std::fs::read_dir(folder) {
        Ok(mut entries) => Ok(entries.next().is_none()),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(true),
        Err(error) => Err(error),
    }
}

fn write(path: &Path, text: &str) -> io::Result<()> {
    if let Some(folder) = path.parent() {
        std::fs::create_dir_all(folder)?;
    }
    let mut file = std::fs::File::create_new(path)?;
    file.write_all(text.as_bytes())
}
