//! Findings of an earlier issue, read back from their file.

use std::fmt;

use serde::Deserialize;

use crate::study::{Findings, SCHEMA};

/// Why findings could not be read back.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Unreadable {
    /// They have the shape of another version: its schema number.
    Schema(u32),
    /// They are no findings at all; what the reader said.
    Malformed(String),
}

impl fmt::Display for Unreadable {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Unreadable::Schema(found) => {
                write!(f, "the earlier findings have schema {found}, this version reads schema {SCHEMA}")
            }
            Unreadable::Malformed(why) => write!(f, "the earlier findings cannot be read: {why}"),
        }
    }
}

/// Reads findings from the JSON that an issue wrote.
///
/// # Errors
/// Another schema, or JSON that holds no findings.
pub fn recall(json: &[u8]) -> Result<Findings, Unreadable> {
    #[derive(Deserialize)]
    struct Cover {
        schema: u32,
    }
    let malformed = |error: serde_json::Error| Unreadable::Malformed(error.to_string());
    let cover: Cover = serde_json::from_slice(json).map_err(malformed)?;
    if cover.schema != SCHEMA {
        return Err(Unreadable::Schema(cover.schema));
    }
    serde_json::from_slice(json).map_err(malformed)
}
