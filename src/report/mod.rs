//! Findings, moves, issue data, templates -> PDF.

mod cell;
mod press;
mod rich;

pub use press::*;
