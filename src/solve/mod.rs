//! Plan: a network compiled for repeated solving. Operating point, small signal, thermal equilibrium.
//!
//! ```text
//! Plan::of(&network)                                                     -> Result<Plan, Failure>
//! Plan::new(nodes, &[Topology { terminals, class }])                     -> Result<Plan, Failure>
//! plan.scratch()                                                         -> Scratch        (one a thread)
//! plan.blank()                                                           -> OperatingPoint (to be reused)
//! plan.solve(&branches, ambient, thermal, start, &mut scratch)           -> Result<OperatingPoint, Failure>
//! plan.solve_into(&branches, ambient, thermal, start, &mut scratch, &mut point) -> Result<(), Failure>
//! plan.midband(&point, &branches, signal, &mut scratch)                  -> Result<Midband, Failure>
//! plan.output_resistance(&point, &branches, node, &mut scratch)          -> Result<f64, Failure>
//! region(&branch, &element_point)                                        -> Option<Region>
//! margin(Region, &branch, &element_point)                                -> Option<f64>
//! forced_gain, active_gain, overdrive (&branch, &element_point)          -> Option<f64>
//! ```
//!
//! `start` is the `solution` of a neighbouring operating point (or `None`); the caller always gives it, so that the
//! bits of a result depend on the arguments alone.

mod junction;
mod linear;
mod midband;
mod newton;
mod plan;
mod region;
mod runaway;
mod thermal;

pub use midband::Midband;
pub use plan::{Class, Plan, Scratch, Topology};
pub use region::{
    EDGE_OF_SATURATION, Region, active_gain, cut_in_voltage, forced_gain, margin, overdrive, region,
};
pub use runaway::Equilibrium;

use crate::device::{diode, transistor};

/// What the solver needs to know of one element at one point of the declared space; SI units.
#[derive(Clone, Copy, PartialEq, Debug)]
#[expect(clippy::large_enum_variant, reason = "a box would cost an allocation an element and point")]
pub enum Branch {
    /// Resistor, filament, coil (hot or cold): resistance (Ω); 0 is a short.
    Resistor {
        ohms: f64,
    },
    /// An element in state `open`, of any kind.
    Open,
    /// Capacitor: open at d.c., a short in midband.
    Capacitor,
    /// Inductor: at d.c. its winding resistance (Ω), open in midband.
    Inductor {
        ohms: f64,
    },
    /// Voltage source with source resistance.
    Supply {
        volts: f64,
        ohms: f64,
    },
    /// Current source; current enters it at its first terminal and leaves it at its second.
    Current {
        amperes: f64,
    },
    /// Small-signal source with source resistance, no d.c. voltage.
    Signal {
        ohms: f64,
    },
    Transistor {
        pnp: bool,
        parameters: transistor::Transistor,
        r_th: Option<f64>,
        probe: Probe,
    },
    Diode {
        parameters: diode::Diode,
        r_th: Option<f64>,
    },
}

/// What a bound check adds to a transistor, so that it does no better than a row of the sheet. Magnitudes, for NPN and
/// PNP alike; all zero by default.
#[derive(Clone, Copy, PartialEq, Debug, Default)]
pub struct Probe {
    /// Voltage in series with the collector (V): the terminals show V_CE greater by it at the same currents.
    pub v_ce: f64,
    /// Voltage in series with the base (V): the terminals show V_BE greater by it at the same currents.
    pub v_be: f64,
    /// Current from collector to base beside the transistor (A), at any bias and temperature.
    pub cutoff: f64,
}

/// Whether junctions are at ambient temperature, or as warm as their own dissipation makes them.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Thermal {
    ColdStart,
    /// A device without thermal resistance stays at ambient temperature ([`ElementPoint::self_heated`] is false).
    Equilibrium,
}

/// A solution that was confirmed: the current rule holds at every node to 1e-9 of the largest current into that node.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct OperatingPoint {
    /// Node voltages against ground (V), by node index.
    pub voltages: Vec<f64>,
    /// What each element carries, in network order.
    pub elements: Vec<ElementPoint>,
    /// Estimated error of any node voltage (V).
    pub error: f64,
    /// What was tried, in order; the last one gave this point.
    pub attempts: Vec<Attempt>,
    /// To start a neighbouring point from.
    pub solution: Solution,
}

/// Where Newton's method stood when it was done: a start for a neighbouring point of the same plan.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Solution {
    /// Junction voltages inside the terminal resistances (V), positive forward: base-emitter and base-collector of each
    /// transistor, anode-cathode of each diode, in network order.
    pub junctions: Vec<f64>,
    /// Currents of the two-terminal elements (A) but diodes, in network order, then node voltages but ground (V).
    pub linear: Vec<f64>,
    /// Junction temperature of each device (K), and the ambient's.
    pub temperatures: Vec<f64>,
    pub ambient: f64,
    /// For each junction the voltage (V) of a small current and that of e-fold current: what carries its voltage over to
    /// another temperature or specimen.
    pub scales: Vec<[f64; 2]>,
}

/// A way to an operating point.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Attempt {
    /// Newton's method from the given start.
    FromStart,
    /// Newton's method from nothing.
    Direct,
    /// Sources raised from zero in steps.
    SourceStepping,
    /// A conductance beside every junction lowered to zero in steps.
    ConductanceStepping,
    /// Junction temperatures relaxed from ambient.
    Warming,
}

impl Attempt {
    /// In words, for a report.
    pub fn text(self) -> &'static str {
        match self {
            Attempt::FromStart => "Newton's method from a neighbouring point",
            Attempt::Direct => "Newton's method",
            Attempt::SourceStepping => "source stepping",
            Attempt::ConductanceStepping => "conductance stepping",
            Attempt::Warming => "warming from ambient temperature",
        }
    }
}

/// Voltages across and currents into one element at its terminals (terminal resistances of a device included).
#[derive(Clone, Copy, PartialEq, Debug, Default)]
pub struct ElementPoint {
    /// Voltage of the first against the second terminal; V_CE of a transistor (negative for PNP).
    pub v: f64,
    /// Current into the first terminal: I_C of a transistor (negative for PNP).
    pub i: f64,
    /// I_B and V_BE at the terminals (transistor; negative for PNP).
    pub i_b: f64,
    pub v_be: f64,
    /// Dissipation (W); negative when a source delivers.
    pub p: f64,
    /// Junction temperature (K) of a device, ambient temperature of any other element.
    pub t_j: f64,
    /// The junction temperature was found together with the dissipation.
    pub self_heated: bool,
}

/// Why there is no solution to show.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Failure {
    /// Every method was tried; the largest current residual over its bound where the last one ended.
    NotConverged { residual: f64 },
    /// The equations do not determine every voltage and current.
    Singular,
    /// The thermal equilibrium was not found below the temperature bound.
    ThermalRunaway { element: usize },
    /// The equations have a solution, with a current that no discrete part could carry (an ideal junction straight
    /// across a supply).
    BeyondModel { element: usize },
    /// An element's branch is of another class than the plan's, lacks a terminal, or has a value without sense
    /// (not finite, negative resistance, temperature not above zero).
    Unfit { element: usize },
}
