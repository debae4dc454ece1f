//! Ratings, derating, junction temperature: judges quantities it is given.

use serde::{Deserialize, Serialize};

use crate::part::RatingQuantity;
use crate::quantity::{Kind, Shown, Source, Unit};

/// One rated quantity of one element in one condition at its worst corner. The study fills the value and the verdict.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct StressLine {
    pub designator: String,
    pub quantity: RatingQuantity,
    pub condition: String,
    pub kind: Kind,
    pub unit: Unit,
    pub worst: Shown,
    /// Inputs that matter at the worst corner: symbol and level.
    pub corner: Vec<(String, String)>,
    pub thermal: String,
    /// Absolute maximum rating as the sheet gives it, and at this temperature if it falls with temperature.
    pub rating: Option<f64>,
    /// Limit after the policy's derating (normal conditions); equal to the rating otherwise.
    pub limit: Option<f64>,
    /// Worst value over rating.
    pub ratio: Option<f64>,
    /// `met`, `not-met`, `not-shown` and the reason.
    pub verdict: String,
    pub reason: Option<String>,
    pub source: Option<Source>,
}
