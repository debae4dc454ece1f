//! Every test of the project, in one binary.

mod circuit;
mod formula;
mod quantity;
mod solve;
mod worksheet;
mod yaml;
