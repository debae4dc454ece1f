//! Qsheaf compiles Markdown worksheets into design notes for circuits of discrete bipolar transistors.
//!
//! The rooms below stand in the order in which data flows; a room imports only from rooms above it.

pub mod source;
pub mod diagnostic;
pub mod numeric;
pub mod markup;
pub mod quantity;
pub mod formula;
pub mod yaml;
pub mod worksheet;
pub mod settings;
pub mod device;
pub mod part;
pub mod fit;
pub mod circuit;
pub mod solve;
pub mod derive;
pub mod spread;
pub mod stress;
pub mod caution;
pub mod study;
pub mod redline;
pub mod figure;
pub mod report;
pub mod notebook;
pub mod cli;
