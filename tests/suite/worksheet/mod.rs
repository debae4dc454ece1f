//! Worksheets: head, prose, blocks, recalls, and every error with its place.

mod blocks;
mod garbage;
mod golden;
mod head;
mod prose;
mod recall;

use qsheaf::diagnostic::{Diagnostic, Diagnostics, Severity};
use qsheaf::source::File;
use qsheaf::worksheet::{self, Worksheet};

pub const HEAD: &str =
    "---\nnote: HB-007\ntitle: Lamp switch\nauthor: A. Keeper\nrevision: A\ndate: 2026-11-30\n---\n";

/// Reads a worksheet whose head is [`HEAD`]; the body begins on line 8.
pub fn body(text: &str) -> Result<(Worksheet, Diagnostics), Diagnostics> {
    whole(&format!("{HEAD}{text}"))
}

pub fn whole(text: &str) -> Result<(Worksheet, Diagnostics), Diagnostics> {
    worksheet::read(&File::new("notes/lamp.md", text.as_bytes().to_vec()))
}

/// The errors of a worksheet, as `line:column message`.
pub fn errors(result: Result<(Worksheet, Diagnostics), Diagnostics>) -> Vec<String> {
    match result {
        Ok(_) => Vec::new(),
        Err(found) => found.0.iter().filter(|d| d.severity == Severity::Error).map(line).collect(),
    }
}

pub fn line(diagnostic: &Diagnostic) -> String {
    match &diagnostic.place {
        Some(place) => format!("{}:{} {}", place.line, place.column, diagnostic.message),
        None => diagnostic.message.clone(),
    }
}
