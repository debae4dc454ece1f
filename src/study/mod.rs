//! Bundle -> Findings: the one place that knows the order.

mod findings;

pub use findings::*;
