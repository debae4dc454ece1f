//! Every test of the project, in one binary.

mod figure;
mod report;
