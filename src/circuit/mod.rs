//! Elements, nodes, connection rules, and the symbols that a circuit offers to formulas.

mod build;
mod kinds;
mod rules;
mod symbols;
mod values;

pub use build::{Built, build};
pub use kinds::part_named;
pub use symbols::{Symbol, symbols};
pub use values::InPlace;

use serde::{Deserialize, Serialize};

use crate::formula::Formula;
use crate::source::Place;

/// Index of a node; 0 is `ground`.
pub type Node = usize;

/// A network as written: nodes by name and elements by designator.
#[derive(Clone, Debug, Default)]
pub struct Network {
    /// Node names; `nodes[0]` is `ground`.
    pub nodes: Vec<String>,
    pub elements: Vec<Element>,
}

#[derive(Clone, Debug)]
pub struct Element {
    pub designator: String,
    pub kind: ElementKind,
    /// Nodes in the order that the kind gives: plus, minus; from, to; anode, cathode; collector, base, emitter.
    pub terminals: Vec<Node>,
    /// The element's main value over inputs (V, A, Ω, F, H); `None` for a device. A value written in place makes an input
    /// of its own, named like the designator.
    pub value: Option<Formula>,
    /// Series resistance of a source (Ω), winding resistance of an inductor (Ω), hot resistance of a filament is `value`.
    pub resistance: Option<Formula>,
    /// Cold resistance of a filament or coil (Ω).
    pub cold: Option<Formula>,
    /// Inductance of a coil (H).
    pub inductance: Option<Formula>,
    /// Part record.
    pub part: Option<String>,
    /// Thermal resistance junction to ambient as mounted (K/W), where it differs from the part's.
    pub r_th: Option<Formula>,
    /// Rated dissipation (W) and working voltage (V) written with the element.
    pub rated_power: Option<Formula>,
    pub rated_voltage: Option<Formula>,
    /// Temperature coefficient of resistance (1/K) written with the element.
    pub tcr: Option<Formula>,
    /// What it is, in words.
    pub about: Option<String>,
    pub place: Place,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum ElementKind {
    Npn,
    Pnp,
    Diode,
    Zener,
    Resistor,
    Filament,
    Coil,
    Capacitor,
    Inductor,
    /// Independent voltage source.
    Supply,
    /// Independent current source; current leaves it at `to`.
    Current,
    /// Small-signal source: no d.c. voltage of its own, drives midband gain; with source resistance.
    Signal,
}
