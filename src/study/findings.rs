//! Findings: the product. Everything printed comes from here; the PDF and the JSON are views of it.

use serde::{Deserialize, Serialize};

use crate::caution::Caution;
use crate::diagnostic::Diagnostics;
use crate::fit::Model;
use crate::markup::{Flow, Math};
use crate::part::Part;
use crate::quantity::{Kind, Role, Shown, Source, Spread, Unit};
use crate::source::{Digest, Place};
use crate::spread::{Corner, Proportion, Quantile};
use crate::stress::StressLine;

/// Version of this shape; a register keeps it with every issue.
pub const SCHEMA: u32 = 2;

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Findings {
    pub schema: u32,
    /// Program version that computed them.
    pub program: String,
    pub note: NoteHead,
    /// Prose with its recalls filled in; blocks stand in it as `Flow::Placed`.
    pub body: Vec<Flow>,
    pub inputs: Vec<Input>,
    pub conditions: Vec<ConditionFinding>,
    pub elements: Vec<ElementFinding>,
    /// Nominal operating points, one a condition.
    pub points: Vec<OperatingFinding>,
    /// Named results of the derivation and those that criteria or prose use, over the declared space.
    pub results: Vec<ResultFinding>,
    pub derivation: Vec<Step>,
    pub criteria: Vec<CriterionFinding>,
    /// Criteria by several methods, where the note or the notebook asks for that.
    #[serde(default)]
    pub spreads: Vec<SpreadFinding>,
    pub stress: Vec<StressLine>,
    pub heat: Vec<HeatFinding>,
    pub cautions: Vec<Caution>,
    pub figures: Vec<FigureFinding>,
    /// Clauses and the labels of the criteria that answer each.
    pub trace: Vec<(String, String, Vec<String>)>,
    pub models: Vec<Model>,
    pub parts: Vec<Part>,
    /// Limits of validity of the models used, and assumptions of the method, one sentence each.
    pub validity: Vec<String>,
    pub warnings: Diagnostics,
    /// Path and digest of each input file, and one digest over all.
    pub files: Vec<(String, Digest)>,
    pub digest: Digest,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct NoteHead {
    pub organisation: String,
    pub note: String,
    pub title: String,
    pub author: String,
    pub checker: Option<String>,
    pub approver: Option<String>,
    pub revision: String,
    pub date: String,
    pub language: String,
    /// `a4` or `us-letter`.
    pub paper: String,
    /// Path of the logo inside the notebook.
    pub logo: Option<String>,
    pub revisions: Vec<[String; 3]>,
}

/// One value of the design basis, an element's value written in place, or a spread axis of a part.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Input {
    pub symbol: String,
    pub description: Option<String>,
    pub spread: Spread,
    pub kind: Kind,
    pub unit: Unit,
    pub text: String,
    /// A tolerance or range was written.
    pub bounded: bool,
    /// Where it comes from; `None` counts as an assumption.
    pub source: Option<Source>,
    /// How it varies within its limits.
    #[serde(default)]
    pub role: Role,
    pub place: Place,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct ConditionFinding {
    pub name: String,
    pub normal: bool,
    pub lasts: Option<String>,
    /// Symbol or designator and what it is in this condition.
    pub overrides: Vec<(String, String)>,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct ElementFinding {
    pub designator: String,
    /// In words: `NPN transistor`, `resistor`, `filament lamp`.
    pub kind: String,
    pub value: String,
    pub part: Option<String>,
    /// Terminal and node.
    pub terminals: Vec<(String, String)>,
}

/// The nominal operating point in one condition, in thermal equilibrium.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct OperatingFinding {
    pub condition: String,
    /// Set when no solution was confirmed: why. The tables are empty then.
    pub not_shown: Option<String>,
    pub nodes: Vec<(String, f64)>,
    pub transistors: Vec<TransistorPoint>,
    /// Designator, voltage (V), current (A), dissipation (W) of every other element.
    pub elements: Vec<(String, f64, f64, f64)>,
    /// The methods tried, in order; the last one succeeded unless `not_shown`.
    pub attempts: Vec<String>,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct TransistorPoint {
    pub designator: String,
    /// `off`, `active`, `saturated`, `reverse`.
    pub region: String,
    pub v_be: f64,
    pub v_ce: f64,
    pub i_c: f64,
    pub i_b: f64,
    /// I_C / I_B when saturated.
    pub forced_gain: Option<f64>,
    /// Active-region gain at this current over forced gain, when saturated.
    pub overdrive: Option<f64>,
    pub h_fe: Option<f64>,
    pub power: f64,
    /// Junction temperature (K) in equilibrium; `None` without a thermal resistance.
    pub t_j: Option<f64>,
}

/// How near a transistor's heat comes to run-away, at the corner at which its junction is hottest. Temperatures in K.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct HeatFinding {
    pub designator: String,
    pub condition: String,
    /// Ambient temperature of the corner.
    pub ambient: f64,
    pub r_th: f64,
    /// The equilibrium there; none where the temperature runs away.
    pub equilibrium: Option<EquilibriumFinding>,
    /// Ambient temperature from which no equilibrium lasts; none between the ends of what was looked at.
    pub runaway_from: Option<f64>,
    pub looked_at: [f64; 2],
    /// Junction temperature beyond which a transistor that was heated from outside does not come back, where there is one
    /// and a single device heats itself.
    pub upper: Option<f64>,
    /// Least resistance (Ω) in series with the emitter for a loop gain of one half, where it is above that.
    pub ballast: Option<f64>,
}

/// A thermal equilibrium.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct EquilibriumFinding {
    /// Dissipation (W) and junction temperature (K).
    pub power: f64,
    pub t_j: f64,
    /// Loop gain of the closed circuit: R_th dP/dT_j, the largest eigenvalue where several devices heat themselves.
    pub gain: f64,
}

/// How an extreme was established.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Established {
    Vertices,
    Monotone,
    Searched,
    /// The specimen that bounds the share asked for, among those drawn.
    Sampled,
    /// Nothing varies: the nominal value is the only one.
    Exact,
}

/// One end of a result's range and the corner that produced it.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct End {
    pub value: Shown,
    /// Inputs that matter there.
    pub corner: Corner,
    pub condition: String,
    /// `cold start` or `equilibrium`.
    pub thermal: String,
    pub established: Established,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct ResultFinding {
    pub symbol: String,
    pub label: Option<String>,
    pub condition: String,
    pub kind: Kind,
    pub unit: Unit,
    pub nominal: Shown,
    pub min: End,
    pub max: End,
    /// An extreme lies inside an axis, or the result is not monotone along one: which.
    pub flags: Vec<String>,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "verdict", rename_all = "kebab-case")]
pub enum Verdict {
    Met,
    MetOnAssumptions { count: usize },
    NotMet,
    NotShown { reason: String },
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct CriterionFinding {
    pub label: String,
    /// The criterion as written.
    pub text: String,
    pub math: Option<Math>,
    pub spoken: String,
    pub over: String,
    pub conditions: Vec<String>,
    pub clause: Option<String>,
    pub safety: bool,
    pub kind: Kind,
    pub unit: Unit,
    /// `≤`, `≥`, `<`, `>`; or the region of a state criterion.
    pub relation: String,
    /// Left side and right side at the worst corner; for a state, what is judged (overdrive, V_BC) and its bound.
    pub worst: End,
    pub limit: Shown,
    /// Distance to the limit, positive when met, in the criterion's unit.
    pub margin: Shown,
    pub nominal: Shown,
    pub verdict: Verdict,
    /// A share of specimens decided, not the extreme value.
    #[serde(default)]
    pub coverage: Option<CoverageFinding>,
    /// Region changes between corners, non-monotone axes.
    pub flags: Vec<String>,
    pub place: Place,
}

/// What a verdict by coverage says, so that it is never taken for one by extreme value.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct CoverageFinding {
    /// The share asked for, as written: `99 %`.
    pub asked: String,
    /// Why not every specimen must satisfy the criterion, in the author's words.
    pub because: String,
    /// What was found, in a sentence, the extreme value beside it.
    pub statement: String,
}

/// The margin of one criterion by up to three methods.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct SpreadFinding {
    /// Label of the criterion.
    pub criterion: String,
    /// Unit of the margin.
    pub unit: Unit,
    pub condition: String,
    /// `cold start` or `equilibrium`.
    pub thermal: String,
    /// Bias-like inputs and where they stand.
    pub held: Vec<(String, String)>,
    pub nominal: Shown,
    /// Extreme value, worst over all cases of the criterion.
    pub extreme: Shown,
    pub combined: CombinedFinding,
    pub sampled: Option<SampledFinding>,
    /// What each input can do to the margin, greatest first.
    pub terms: Vec<TermFinding>,
}

/// Root-sum-square (SI units of the margin).
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct CombinedFinding {
    /// Nominal, biases and the coverage factor times the deviation; or why that says nothing.
    pub end: Shown,
    pub bias: f64,
    pub deviation: f64,
    pub coverage_factor: f64,
    /// Greatest departure from the straight line, as a share of the change from nominal to end.
    pub departure: f64,
}

/// Monte Carlo.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct SampledFinding {
    pub samples: u64,
    pub seed: u64,
    /// Samples that satisfy the criterion, clear of the numerical error, and samples without a value.
    pub passed: u64,
    pub missing: u64,
    /// Share of specimens that satisfy it, with its limits at `confidence`.
    pub passing: Proportion,
    pub confidence: f64,
    /// Share asked for, and the margin that so many specimens keep, with its sampling error.
    pub coverage: f64,
    pub margin: Option<Quantile>,
    /// The interval that covers the share of what is judged, with the sampling error of each end, and its unit.
    pub interval: Option<[Quantile; 2]>,
    pub unit: Unit,
}

/// What one input can do to a margin.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct TermFinding {
    pub symbol: String,
    pub role: Role,
    /// Change of the margin for a unit of the input (SI units; a spread axis of a part runs from -1 to 1).
    pub sensitivity: f64,
    /// Change of the margin for the half-width of the input (SI unit of the margin).
    pub reach: f64,
    /// Change of the margin where the bias stands, or for one standard deviation.
    pub effect: f64,
}

/// One line of the derivation: symbols, numbers, result.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Step {
    pub label: String,
    /// As written, without label and condition.
    pub text: String,
    /// Index of the derivation block it stands in.
    pub block: usize,
    pub condition: String,
    /// Left side: the symbol defined; `None` for an assertion.
    pub symbol: Option<Math>,
    pub symbols: Math,
    pub numbers: Math,
    pub result: Shown,
    pub kind: Kind,
    pub unit: Unit,
    /// For an assertion: whether it holds at nominal.
    pub holds: Option<bool>,
    pub spoken: String,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct FigureFinding {
    pub title: String,
    /// The message in words, for readers who cannot see it.
    pub alt: String,
    pub x: AxisFinding,
    pub y: AxisFinding,
    pub curves: Vec<Curve>,
    pub marks: Vec<Mark>,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct AxisFinding {
    /// Symbol as typeset, and its name in words.
    pub symbol: Math,
    pub title: String,
    pub unit: Unit,
    pub low: f64,
    pub high: f64,
    pub logarithmic: bool,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Curve {
    pub name: String,
    /// SI values; gaps where the solver had no confirmed solution.
    pub points: Vec<(f64, Option<f64>)>,
    pub style: CurveStyle,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum CurveStyle {
    Nominal,
    Low,
    High,
    LoadLine,
    Limit,
    Family,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Mark {
    pub name: String,
    pub x: f64,
    pub y: f64,
}

impl FigureFinding {
    /// A figure that cannot be drawn, with the reason.
    pub fn not_shown(reason: &str) -> FigureFinding {
        let axis = || AxisFinding {
            symbol: Math::Row { parts: Vec::new() },
            title: String::new(),
            unit: Unit::none(),
            low: 0.0,
            high: 1.0,
            logarithmic: false,
        };
        let title = format!("NOT SHOWN: {reason}");
        FigureFinding {
            alt: title.clone(),
            title,
            x: axis(),
            y: axis(),
            curves: Vec::new(),
            marks: Vec::new(),
        }
    }
}
