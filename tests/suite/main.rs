//! Every test of the project, in one binary.
mod worksheet;
mod yaml;
