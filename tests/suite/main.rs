//! Every test of the project, in one binary.
mod circuit;
mod worksheet;
mod yaml;
