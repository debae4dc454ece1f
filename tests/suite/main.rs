//! Every test of the project, in one binary.

mod circuit;
mod figure;
mod fit;
mod formula;
mod quantity;
mod report;
mod solve;
mod worksheet;
mod yaml;
