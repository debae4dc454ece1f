//! Findings: the product. Everything printed comes from here; the PDF and the JSON are views of it.

use serde::{Deserialize, Serialize};

use crate::caution::Caution;
use crate::diagnostic::Diagnostics;
use crate::fit::Model;
use crate::markup::{Flow, Math};
use crate::part::Part;
use crate::quantity::{Kind, Shown, Source, Spread, Unit};
use crate::source::{Digest, Place};
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
    pub stress: Vec<StressLine>,
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

/// How an extreme was established.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Established {
    Vertices,
    Monotone,
    Searched,
    /// Nothing varies: the nominal value is the only one.
    Exact,
}

/// One end of a result's range and the corner that produced it.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct End {
    pub value: Shown,
    /// Inputs that matter at this corner: symbol and its printed level (`14.8 V`, `gain low`).
    pub corner: Vec<(String, String)>,
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
    /// Region changes between corners, non-monotone axes.
    pub flags: Vec<String>,
    pub place: Place,
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
