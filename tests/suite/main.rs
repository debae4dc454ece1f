//! Every test of the project, in one binary.
mod yaml;
mod formula;
mod quantity;
