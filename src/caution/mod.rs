//! What the reader is warned of, and when.

use serde::{Deserialize, Serialize};

/// One caution of a note.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Caution {
    /// `burn`, `shock`, `stored-energy`, `inductive-kick`, `fire`, `base-emitter-reverse`, `gain-dependence`, `missing-data`.
    pub hazard: String,
    pub title: String,
    /// Why it appears here, with the numbers and the designators.
    pub why: String,
    /// The usual measure.
    pub measure: String,
    /// Where the threshold comes from: a standard, or "common practice".
    pub basis: String,
}
