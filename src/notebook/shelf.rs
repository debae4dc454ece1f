//! The folder of issues, `issued/`: what stands there stays there.
//!
//! A file is written aside under a hidden name in the same folder, flushed to the disk, and renamed to its name only if
//! nothing has that name yet; the register is replaced last, in one step. So a run that is stopped at any instant leaves
//! one of two things behind, and the next run (which holds the lock) clears up after it:
//!
//! - files written aside: removed;
//! - complete files of an issue that did not reach the register. If the next run makes the very same bytes, it keeps them
//!   as that issue; otherwise they are moved to `issued/set-aside/`, with their digest in the name, and are never lost.

use std::collections::BTreeSet;
use std::fs::TryLockError;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

use tempfile::TempPath;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Digest;

use super::register::{self, Register, Stored};

/// The folder of issues in a notebook.
pub const FOLDER: &str = "issued";
/// Where files go that no register speaks of.
pub const SET_ASIDE: &str = "set-aside";
/// What the names of files begin with that are not yet complete.
const ASIDE: &str = ".aside-";
/// Held by the run that may write.
const LOCK: &str = ".lock";

/// The folder of issues, locked for this run.
pub struct Shelf {
    folder: PathBuf,
    /// The operating system drops the lock with the file, however the run ends.
    _lock: std::fs::File,
}

/// A complete file that does not have its name yet.
pub struct Aside {
    path: TempPath,
    pub digest: Digest,
}

impl Shelf {
    /// Opens the folder, makes it where it does not exist, locks it, and removes what an earlier run left incomplete.
    ///
    /// # Errors
    /// Another run holds the lock; the folder cannot be written.
    pub fn open(root: &Path) -> Result<Shelf, Diagnostic> {
        let folder = root.join(FOLDER);
        let failed = |error: io::Error| {
            Diagnostic::bare(format!("{FOLDER}/ cannot be written: {error}"))
                .expected("a folder in which this program may make files")
        };
        std::fs::create_dir_all(&folder).map_err(failed)?;
        let lock = std::fs::File::options()
            .create(true)
            .truncate(false)
            .write(true)
            .open(folder.join(LOCK))
            .map_err(failed)?;
        lock.try_lock().map_err(|error| match error {
            TryLockError::WouldBlock => {
                Diagnostic::bare("another run is issuing notes of this notebook right now")
                    .expected("one run at a time; try again when it has ended")
            }
            TryLockError::Error(error) => failed(error),
        })?;
        for entry in std::fs::read_dir(&folder).map_err(failed)? {
            let entry = entry.map_err(failed)?;
            if entry.file_name().to_string_lossy().starts_with(ASIDE) {
                std::fs::remove_file(entry.path()).map_err(failed)?;
            }
        }
        Ok(Shelf { folder, _lock: lock })
    }

    /// Writes a file aside and flushes it to the disk.
    pub fn write_aside(&self, bytes: &[u8]) -> Result<Aside, Diagnostic> {
        self.aside(bytes)
            .map_err(|error| Diagnostic::bare(format!("{FOLDER}/ cannot be written: {error}")))
            .map(|path| Aside { path, digest: Digest::of(bytes) })
    }

    fn aside(&self, bytes: &[u8]) -> io::Result<TempPath> {
        let mut builder = tempfile::Builder::new();
        builder.prefix(ASIDE);
        #[cfg(unix)]
        {
            use std::os::unix::fs::PermissionsExt;
            // Readable to whom the umask lets read, as any other file of the notebook.
            builder.permissions(std::fs::Permissions::from_mode(0o666));
        }
        let mut file = builder.tempfile_in(&self.folder)?;
        file.write_all(bytes)?;
        file.as_file().sync_all()?;
        Ok(file.into_temp_path())
    }

    /// Gives a file its name. Never overwrites: the same bytes under that name are kept, others are set aside.
    ///
    /// Only files that no register speaks of can stand in the way, since issue numbers only grow.
    pub fn place(&self, aside: Aside, name: &str) -> Result<Stored, Diagnostic> {
        let stored = Stored { file: name.to_owned(), digest: aside.digest };
        let target = self.folder.join(name);
        let failed = |error: io::Error| Diagnostic::bare(format!("{FOLDER}/{name}: {error}"));
        match std::fs::read(&target) {
            Ok(found) if Digest::of(&found) == aside.digest => return Ok(stored),
            Ok(_) => drop(self.set_aside(name)?),
            Err(error) if error.kind() == io::ErrorKind::NotFound => {}
            Err(error) => return Err(failed(error)),
        }
        aside.path.persist_noclobber(&target).map_err(|error| failed(error.error))?;
        Ok(stored)
    }

    /// Replaces the register in one step, after the files it speaks of are on the disk under their names.
    pub fn commit(&self, register: &Register) -> Result<(), Diagnostic> {
        let bytes = register.to_bytes()?;
        let write = || -> io::Result<()> {
            self.sync()?;
            let aside = self.aside(&bytes)?;
            aside.persist(self.folder.join(register::FILE)).map_err(|error| error.error)?;
            self.sync()
        };
        write().map_err(|error| {
            Diagnostic::bare(format!("{FOLDER}/{} cannot be written: {error}", register::FILE))
        })
    }

    /// Moves a file out of the way, to a name that holds its digest. Returns the new name inside the notebook.
    pub fn set_aside(&self, name: &str) -> Result<String, Diagnostic> {
        let (stem, end) = name.rsplit_once('.').unwrap_or((name, ""));
        let act = || -> io::Result<String> {
            let from = self.folder.join(name);
            let digest = Digest::of(&std::fs::read(&from)?).to_string();
            let to = format!("{stem}-{}.{end}", digest.get(..12).unwrap_or(&digest));
            let folder = self.folder.join(SET_ASIDE);
            std::fs::create_dir_all(&folder)?;
            std::fs::rename(from, folder.join(&to))?;
            self.sync()?;
            Ok(format!("{FOLDER}/{SET_ASIDE}/{to}"))
        };
        act().map_err(|error| Diagnostic::bare(format!("{FOLDER}/{name} cannot be moved: {error}")))
    }

    /// Flushes the folder itself, so that names survive a loss of power.
    fn sync(&self) -> io::Result<()> {
        if cfg!(unix) { std::fs::File::open(&self.folder)?.sync_all() } else { Ok(()) }
    }
}

/// The names of the files in the folder of issues; none where there is no folder.
pub fn names(root: &Path) -> Result<BTreeSet<String>, Diagnostic> {
    let failed = |error: io::Error| Diagnostic::bare(format!("{FOLDER}/ cannot be read: {error}"));
    let entries = match std::fs::read_dir(root.join(FOLDER)) {
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(BTreeSet::new()),
        entries => entries.map_err(failed)?,
    };
    let mut names = BTreeSet::new();
    for entry in entries {
        let entry = entry.map_err(failed)?;
        names.extend(entry.file_name().to_str().map(str::to_owned));
    }
    Ok(names)
}

/// What differs between the register and the folder: files of issues that no register speaks of are set aside, and files
/// that are gone are told. All of it as warnings.
pub(super) fn reconcile(root: &Path, shelf: &Shelf, register: &Register, out: &mut Diagnostics) {
    let Some(names) = out.keep(names(root)) else { return };
    let known: BTreeSet<&str> = register.stored().map(|stored| stored.file.as_str()).collect();
    let warning = |message: String| Diagnostic {
        severity: crate::diagnostic::Severity::Warning,
        ..Diagnostic::bare(message)
    };
    for name in names.iter().filter(|name| is_issue(name) && !known.contains(name.as_str())) {
        match shelf.set_aside(name) {
            Ok(to) => out.push(warning(format!("{FOLDER}/{name} is in no register; it now lies in {to}"))),
            Err(error) => out.push(error),
        }
    }
    for name in known.into_iter().filter(|name| !names.contains(*name)) {
        out.push(
            warning(format!("{FOLDER}/{name} is gone, though the register speaks of it"))
                .expected("issued files stay; restore it from a copy"),
        );
    }
}

/// The files of an issue: PDF and findings.
pub fn file_names(note: &str, issue: u32) -> [String; 2] {
    let stem = stem(note);
    [format!("{stem}-issue-{issue}.pdf"), format!("{stem}-issue-{issue}.json")]
}

/// A note number as the beginning of a file name: what file systems would not take becomes `_`.
pub fn stem(note: &str) -> String {
    let kept = |c: char| c.is_alphanumeric() || matches!(c, '-' | '_' | '.');
    let stem: String = note.chars().map(|c| if kept(c) { c } else { '_' }).collect();
    if stem.starts_with('.') { format!("_{stem}") } else { stem }
}

/// Whether a name is one that [`file_names`] makes.
pub fn is_issue(name: &str) -> bool {
    let stem = name.strip_suffix(".pdf").or_else(|| name.strip_suffix(".json"));
    stem.and_then(|stem| stem.rsplit_once("-issue-")).is_some_and(|(note, number)| {
        !note.is_empty() && !number.is_empty() && number.bytes().all(|byte| byte.is_ascii_digit())
    })
}

/// Whether a name leads nowhere else than to a file of the folder.
pub(super) fn is_plain_name(name: &str) -> bool {
    !name.is_empty() && !name.starts_with('.') && !name.contains(['/', '\\', '\0', ':'])
}
