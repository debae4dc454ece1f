//! Extreme value, root-sum-square and Monte Carlo, over any [`Response`].
//!
//! Worst-case practice (ECSS-Q-HB-30-01A) asks for the lowest and highest value of a result over everything that varies.
//! [`extremes`] finds both for all outputs of a response at once and says how each was established:
//!
//! * [`Method::Exact`]: nothing varies.
//! * [`Method::Monotone`]: along every axis that moves it, through nominal, through the extreme itself, from the opposite
//!   corner and from scattered vertices, the result rises throughout or falls throughout; so the extreme lies at the vertex
//!   to which all of that points, and that vertex was evaluated.
//! * [`Method::Vertices`]: every vertex was evaluated, each axis was scanned inside from the best one, and no point inside
//!   was better.
//! * [`Method::Searched`]: starts from the signs of all sensitivities and from the best points seen for any output; axes and
//!   pairs of axes flipped, each axis scanned inside and refined, ridges followed, other hills climbed, until nothing moves.
//!   This is no proof.
//!
//! [`combine`] and [`sample`] split what varies into [`Role`]s: bias-like axes stand at their worst end, random ones count as
//! standard deviations or are drawn. Extreme value decides; the other two stand beside it, and Monte Carlo decides only where
//! a note asks for a coverage and says why.

mod chance;
mod climb;
mod combine;
mod confidence;
mod evaluate;
mod line;
mod sample;
mod search;
mod starts;

use serde::{Deserialize, Serialize};

pub use crate::quantity::{Distribution, Role};
pub use chance::philox;
pub use combine::{Combine, Combined, LINEAR_WITHIN, Term, combine};
pub use confidence::{
    Proportion, Quantile, coverage_factor, coverage_interval, incomplete_beta, proportion, quantile, rank,
    samples_to_decide,
};
pub use sample::{Sampling, Specimen, sample, specimen};
pub use search::extremes;

/// Why a response has no value at a point.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Miss {
    /// The solver found no solution that it could confirm.
    NotConverged,
    /// A device finds no thermal equilibrium.
    ThermalRunaway,
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

/// Which ends of which outputs are wanted; all of them where `wanted` is empty.
#[derive(Clone, Debug, Default)]
pub struct Options {
    /// For each output: whether its minimum and its maximum are wanted.
    pub wanted: Vec<(bool, bool)>,
}

/// How an extreme was established; see the module.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Method {
    Exact,
    Monotone,
    Vertices,
    Searched,
}

/// An extreme and the point that gives it.
#[derive(Clone, PartialEq, Debug)]
pub struct Extreme {
    pub value: f64,
    /// One value an axis.
    pub at: Vec<f64>,
    pub method: Method,
    /// Axes whose change from here moves the output, most first.
    pub matters: Vec<usize>,
    /// How many of these, from the first, move it by a good part of its range: those a reader wants to be told.
    pub telling: usize,
}

/// A corner in words: inputs and their printed levels, those first that move the result most.
#[derive(Clone, PartialEq, Debug, Default, Serialize, Deserialize)]
pub struct Corner {
    /// Symbol and level: `V_bat` and `14.8 V`, `Q1 gain` and `low`.
    pub levels: Vec<(String, String)>,
    /// How many of these, from the first, move the result by more than a twentieth of its range.
    pub telling: usize,
}

/// Regions of devices at a point of the space.
#[derive(Clone, PartialEq, Debug)]
pub struct RegionAt {
    pub code: u64,
    pub at: Vec<f64>,
}

/// What one output does over the space.
#[derive(Clone, PartialEq, Debug)]
pub struct Range {
    pub nominal: Result<f64, Miss>,
    /// Absent where it was not wanted or the output has no value anywhere.
    pub min: Option<Extreme>,
    pub max: Option<Extreme>,
    /// Axes strictly inside of which an extreme lies.
    pub interior: Vec<usize>,
    /// Axes along which the output was seen to rise and to fall.
    pub non_monotone: Vec<usize>,
    /// A point of the space at which the output has no value, and why.
    pub missing: Option<(Miss, Vec<f64>)>,
    /// The combinations of regions met, each with a point that shows it; the same for all outputs.
    pub regions: Vec<RegionAt>,
}

impl Range {
    /// An output of which nothing but its nominal value is known, and the regions met when others were searched.
    pub fn unsearched(nominal: Result<f64, Miss>, regions: Vec<RegionAt>) -> Range {
        Range {
            nominal,
            min: None,
            max: None,
            interior: Vec::new(),
            non_monotone: Vec::new(),
            missing: None,
            regions,
        }
    }
}

/// Whether a margin lies clear of the numerical error. Solutions are confirmed to 1e-9 of the currents that meet at a node;
/// `scale` is the size of what is compared, and a millionth of it leaves room for what formulas do with the error.
pub fn margin_is_decided(margin: f64, scale: f64) -> bool {
    margin.abs() > 1e-6 * scale.abs()
}
