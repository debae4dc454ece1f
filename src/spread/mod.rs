//! Extreme value, over any [`Response`].

use serde::{Deserialize, Serialize};

/// Why a response has no value at a point.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Miss {
    /// The solver found no solution that it could confirm.
    NotConverged,
    /// The result has no meaning in this state (a forced gain of a transistor that is off).
    Undefined,
    /// A formula gave no finite number.
    NotFinite,
    /// No thermal resistance is known for the device.
    NoThermalResistance,
}

/// One axis of the declared space.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Axis {
    /// Input symbol: `V_bat`, `R1`, `Q1 gain`, `T_a`.
    pub name: String,
    pub low: f64,
    pub nominal: f64,
    pub high: f64,
}

/// What is varied and what comes out. Pure: the same point gives the same outputs.
pub trait Response: Sync {
    fn axes(&self) -> &[Axis];
    /// How many outputs [`Response::eval`] gives.
    fn outputs(&self) -> usize;
    /// All outputs at one point (one value an axis), and a code that changes when a device changes its region.
    fn eval(&self, at: &[f64], outputs: &mut [Result<f64, Miss>]) -> u64;
}
