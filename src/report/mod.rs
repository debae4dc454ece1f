//! Findings, moves, issue data, templates -> PDF.

mod press;

pub use press::*;
