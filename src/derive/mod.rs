//! Hand analysis: assumed states, element laws with fixed drops, equations, the check of each assumption.
//!
//! What a person does on paper with a network of transistors, diodes and resistors: assume a state for every junction,
//! write Kirchhoff's and the elements' laws under that assumption, solve, and see whether the result bears the assumption
//! out (piecewise-linear analysis; Chua and Lin, Computer-Aided Analysis of Electronic Circuits, 1975, chapter 7).
//!
//! ```text
//! assume(sketch, states)     -> Attempt      values under an assumption, with what objects to it
//! analyse(sketch)            -> Analysis     assumptions in the order in which they were tried, the last one consistent
//! every_consistent(sketch)   -> [Attempt]    all consistent states of a network, both of a bistable pair
//! Increments                                 gain, input and output resistance of the equivalent circuit at midband
//! ```
//!
//! Drops and gains come from outside (a sheet's bound at a corner, a book's assumption), never from the full model, so that
//! the two can be set beside each other.

mod increments;
mod states;
mod tableau;

pub use increments::{Equivalent, Increments, Part};
pub use states::{Analysis, Attempt, Check, Objection, Refusal, State, analyse, assume, every_consistent};
pub use tableau::{Law, Unknown, Values};

/// Index of a node of a sketch; 0 is ground.
pub type Node = usize;

/// A network as it is drawn for hand analysis. Currents of two-terminal pieces count from the first terminal to the second;
/// a transistor's currents count in the direction in which it conducts, for NPN and PNP alike.
#[derive(Clone, PartialEq, Debug)]
pub struct Sketch {
    /// Names of the nodes; the first one is ground.
    pub nodes: Vec<String>,
    pub pieces: Vec<Piece>,
}

/// One element of a sketch.
#[derive(Clone, PartialEq, Debug)]
pub struct Piece {
    pub name: String,
    pub kind: Kind,
}

/// What an element of a sketch is; SI units.
#[derive(Clone, PartialEq, Debug)]
pub enum Kind {
    Resistor {
        between: [Node; 2],
        resistance: f64,
    },
    /// An ideal voltage source; its current counts from `plus` through the source to `minus`.
    Voltage {
        plus: Node,
        minus: Node,
        voltage: f64,
    },
    /// An ideal current source that takes its current out of `from` and drives it into `to`.
    Current {
        from: Node,
        to: Node,
        current: f64,
    },
    /// A junction with a fixed drop while it conducts; its current counts from anode to cathode.
    Diode {
        anode: Node,
        cathode: Node,
        drop: f64,
    },
    /// A Zener diode with a fixed voltage while it breaks down; its current counts from cathode to anode.
    Zener {
        anode: Node,
        cathode: Node,
        breakdown: f64,
        /// Forward drop, where the diode may conduct forwards as well.
        drop: Option<f64>,
    },
    /// What is open at d.c.: a capacitor.
    Open,
    Transistor(Transistor),
}

/// A transistor with fixed drops; magnitudes for both polarities.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Transistor {
    pub collector: Node,
    pub base: Node,
    pub emitter: Node,
    pub pnp: bool,
    /// h_FE; infinite where the base current is neglected.
    pub gain: f64,
    /// V_BE (V) while the emitter junction conducts.
    pub v_be: f64,
    /// V_CE (V) in saturation; without it the transistor can be active or off only.
    pub v_ce_saturated: Option<f64>,
    pub emitter_current: EmitterCurrent,
    /// I_CBO (A): I_C = h_FE I_B + (h_FE + 1) I_CBO.
    pub cutoff_current: f64,
    /// Collector current (A) while off, beyond I_CBO.
    pub off_current: f64,
    /// A twin whose collector current this one shares in the ratio given, while both are active: their V_BE is the same.
    pub matched: Option<Match>,
}

/// What a hand analysis takes for I_E.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default)]
pub enum EmitterCurrent {
    /// I_E = I_C + I_B.
    #[default]
    Sum,
    /// I_E = I_C: the base current is left out of the emitter's, as many books do.
    AsCollector,
}

/// I_C = `ratio` times the collector current of the piece `of`.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Match {
    pub of: usize,
    pub ratio: f64,
}

impl Transistor {
    /// 1 for NPN, -1 for PNP: the sign of its voltages while it conducts.
    fn sign(&self) -> f64 {
        if self.pnp { -1.0 } else { 1.0 }
    }
}
