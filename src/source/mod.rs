//! Files as bytes with digests, and places in them. The only door to the disk for inputs.

use std::collections::BTreeMap;
use std::fmt;
use std::path::Path;
use std::sync::Arc;

use serde::{Deserialize, Serialize};
use sha2::{Digest as _, Sha256};

/// The largest input file that is read, in bytes (images included).
pub const LARGEST_FILE: u64 = 16 << 20;
/// The largest worksheet, part record, policy or template, in bytes.
pub const LARGEST_TEXT: u64 = 2 << 20;

/// A SHA-256 digest (FIPS 180-4), printed as 64 hexadecimal digits.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Digest(pub [u8; 32]);

impl Digest {
    /// The digest of some bytes.
    pub fn of(bytes: &[u8]) -> Digest {
        Digest(Sha256::digest(bytes).into())
    }
}

impl fmt::Display for Digest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
    }
}

impl Serialize for Digest {
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Digest {
    fn deserialize<D: serde::Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        let mut bytes = [0; 32];
        let right = text.len() == 64
            && bytes.iter_mut().enumerate().all(|(i, byte)| {
                text.get(2 * i..2 * i + 2)
                    .and_then(|pair| u8::from_str_radix(pair, 16).ok())
                    .map(|value| *byte = value)
                    .is_some()
            });
        if right {
            Ok(Digest(bytes))
        } else {
            Err(serde::de::Error::custom("expected 64 hexadecimal digits"))
        }
    }
}

/// One input file: its path inside the notebook (always with `/`), its bytes and their digest.
#[derive(Clone, Debug)]
pub struct File {
    pub path: Arc<str>,
    pub bytes: Arc<[u8]>,
    pub digest: Digest,
}

impl File {
    pub fn new(path: &str, bytes: Vec<u8>) -> File {
        File { path: path.into(), digest: Digest::of(&bytes), bytes: bytes.into() }
    }

    /// The text, or the byte offset of the first byte that is not UTF-8.
    pub fn text(&self) -> Result<&str, usize> {
        std::str::from_utf8(&self.bytes).map_err(|error| error.valid_up_to())
    }
}

/// Everything that one note depends on, by path inside the notebook.
#[derive(Clone, Debug, Default)]
pub struct Bundle {
    pub files: BTreeMap<Arc<str>, File>,
}

impl Bundle {
    pub fn get(&self, path: &str) -> Option<&File> {
        self.files.get(path)
    }

    pub fn insert(&mut self, file: File) {
        self.files.insert(file.path.clone(), file);
    }

    /// One digest over all paths and file digests, in path order.
    pub fn digest(&self) -> Digest {
        let mut hash = Sha256::new();
        for file in self.files.values() {
            hash.update(file.path.as_bytes());
            hash.update([0]);
            hash.update(file.digest.0);
        }
        Digest(hash.finalize().into())
    }
}

/// Why an input file could not be read.
#[derive(Debug)]
pub enum ReadError {
    /// The file is larger than the limit: its size and the limit in bytes.
    TooLarge(u64, u64),
    /// The path leaves the notebook.
    Outside,
    /// A folder or a device stands there.
    NoFile,
    Io(std::io::Error),
}

impl fmt::Display for ReadError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ReadError::TooLarge(size, limit) => {
                write!(f, "the file has {size} bytes; at most {limit} are read")
            }
            ReadError::Outside => write!(f, "the path leads out of the notebook"),
            ReadError::NoFile => write!(f, "this is no plain file"),
            ReadError::Io(error) => write!(f, "{error}"),
        }
    }
}

/// Reads `path` (relative to `root`, with `/`) if it lies inside `root`, links resolved, is a plain file and is no larger
/// than `limit`.
pub fn read(root: &Path, path: &str, limit: u64) -> Result<File, ReadError> {
    read_below(&root.canonicalize().map_err(ReadError::Io)?, path, limit)
}

/// [`read`] below a `root` that is canonical already: for many files of one folder.
pub fn read_below(root: &Path, path: &str, limit: u64) -> Result<File, ReadError> {
    let full = root.join(path).canonicalize().map_err(ReadError::Io)?;
    if !full.starts_with(root) {
        return Err(ReadError::Outside);
    }
    let about = std::fs::metadata(&full).map_err(ReadError::Io)?;
    if !about.is_file() {
        return Err(ReadError::NoFile);
    }
    if about.len() > limit {
        return Err(ReadError::TooLarge(about.len(), limit));
    }
    Ok(File::new(path, std::fs::read(&full).map_err(ReadError::Io)?))
}

/// A place in a file: line and column count from 1, the column in characters.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub struct Place {
    pub file: Arc<str>,
    pub line: u32,
    pub column: u32,
    /// How many characters the place covers; 0 where that is not known.
    pub length: u32,
}

impl Place {
    pub fn new(file: &Arc<str>, line: u32, column: u32, length: u32) -> Place {
        Place { file: file.clone(), line, column, length }
    }

    /// The place of `length` bytes from byte `offset` of `text`, which is the whole text of `file`.
    pub fn of_bytes(file: &Arc<str>, text: &str, offset: usize, length: usize) -> Place {
        let offset = floor_char(text, offset);
        let before = &text[..offset];
        let start = before.rfind('\n').map_or(0, |at| at + 1);
        let end = floor_char(text, offset.saturating_add(length));
        Place {
            file: file.clone(),
            line: before.matches('\n').count() as u32 + 1,
            column: text[start..offset].chars().count() as u32 + 1,
            length: text[offset..end].lines().next().map_or(0, |line| line.chars().count()) as u32,
        }
    }

    /// The place of bytes `from..to` of `text`, where `text` is what stands on one line from this place on.
    pub fn within(&self, text: &str, from: usize, to: usize) -> Place {
        let (from, to) = (floor_char(text, from), floor_char(text, to.max(from)));
        Place {
            file: self.file.clone(),
            line: self.line,
            column: self.column + text[..from].chars().count() as u32,
            length: text[from..to].chars().count() as u32,
        }
    }
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}:{}", self.file, self.line, self.column)
    }
}

fn floor_char(text: &str, offset: usize) -> usize {
    let mut offset = offset.min(text.len());
    while !text.is_char_boundary(offset) {
        offset -= 1;
    }
    offset
}
