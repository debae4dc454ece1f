//! What the reader is warned of, and when.
//!
//! The study fills [`Facts`]: what each element comes to at its worst over all conditions. [`cautions`] goes through the
//! rules, each of which speaks at most once a note (inductive loads: once a load). Thresholds are those of published
//! standards, quoted from memory; each caution names its own.

mod clamp;
mod rules;

pub use rules::cautions;

use serde::{Deserialize, Serialize};

use crate::circuit::{Element, ElementKind, Node};

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

/// A worst value (SI units) and the condition in which it occurs.
#[derive(Clone, PartialEq, Debug)]
pub struct Worst {
    pub value: f64,
    pub condition: String,
}

/// What is known of one element over all conditions; `None` where it is not known or has no meaning.
#[derive(Clone, PartialEq, Debug)]
pub struct ElementFact {
    pub designator: String,
    pub kind: ElementKind,
    pub terminals: Vec<Node>,
    /// Hottest surface, or junction where the surface is not known (K).
    pub temperature: Option<Worst>,
    /// Largest |voltage| across a two-terminal element (V).
    pub voltage: Option<Worst>,
    /// Largest |current| through a two-terminal element (A).
    pub current: Option<Worst>,
    /// Largest stored energy (J).
    pub energy: Option<Worst>,
    /// Largest dissipation over rating.
    pub power_ratio: Option<Worst>,
    /// Largest reverse voltage of a base-emitter junction (V, positive in reverse) and its rating V_EBO.
    pub reverse_v_eb: Option<Worst>,
    pub v_ebo: Option<f64>,
    /// Highest resistance of a resistor, filament or coil (Ω).
    pub resistance: Option<f64>,
}

impl ElementFact {
    /// An element of which nothing but its place in the circuit is known.
    pub fn of(element: &Element) -> ElementFact {
        ElementFact {
            designator: element.designator.clone(),
            kind: element.kind,
            terminals: element.terminals.clone(),
            temperature: None,
            voltage: None,
            current: None,
            energy: None,
            power_ratio: None,
            reverse_v_eb: None,
            v_ebo: None,
            resistance: None,
        }
    }
}

/// The highest voltage between any two nodes.
#[derive(Clone, PartialEq, Debug)]
pub struct Between {
    /// Names of the nodes.
    pub nodes: [String; 2],
    /// V, not negative.
    pub voltage: Worst,
}

/// A criterion marked as safety-relevant.
#[derive(Clone, PartialEq, Debug)]
pub struct SafetyFact {
    pub label: String,
    /// Designators of the transistors whose gain moves its margin.
    pub gains: Vec<String>,
}

/// How near the heat of a transistor comes to run-away, at its hottest corner.
#[derive(Clone, PartialEq, Debug)]
pub struct HeatFact {
    pub designator: String,
    pub condition: String,
    /// Ambient temperature there (K).
    pub ambient: f64,
    /// Loop gain of the heat; none where the temperature runs away.
    pub gain: Option<f64>,
    /// Ambient temperature (K) from which it runs away, where that is known.
    pub runaway_from: Option<f64>,
    /// Resistance (Ω) in series with the emitter that would bring the loop gain to a half.
    pub ballast: Option<f64>,
}

/// What cautions are chosen by.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Facts {
    pub elements: Vec<ElementFact>,
    pub highest: Option<Between>,
    pub safety: Vec<SafetyFact>,
    pub heat: Vec<HeatFact>,
    /// Rows of data sheets that are needed and missing, each in words.
    pub wanted: Vec<String>,
}
