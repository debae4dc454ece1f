//! Every test of the project, in one binary.

mod formula;
mod quantity;
mod solve;
mod yaml;
