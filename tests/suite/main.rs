//! Every test of the project, in one binary.

mod circuit;
mod demo;
mod device;
mod figure;
mod fit;
mod formula;
mod house;
mod numeric;
mod quantity;
mod report;
mod solve;
mod study;
mod worksheet;
mod yaml;
