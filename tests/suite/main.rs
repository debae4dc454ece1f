//! Every test of the project, in one binary.

mod caution;
mod circuit;
mod cli;
mod demo;
mod derive;
mod device;
mod figure;
mod fit;
mod formula;
mod house;
mod notebook;
mod numeric;
mod published;
mod quantity;
mod redline;
mod report;
mod solve;
mod spread;
mod stress;
mod study;
mod worksheet;
mod yaml;
