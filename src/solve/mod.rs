//! Plan: a network compiled for repeated solving. Operating point, small signal, thermal equilibrium.

use crate::circuit::ElementKind;
use crate::device::{diode, transistor};

/// What the solver needs to know of one element at one point of the declared space; SI units.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Branch {
    /// Resistor, filament, coil (hot or cold): resistance (Ω); 0 is a short.
    Resistor {
        ohms: f64,
    },
    /// Capacitor at d.c., or an element in state `open`.
    Open,
    /// Inductor at d.c. with its winding resistance (Ω).
    Inductor {
        ohms: f64,
    },
    /// Voltage source with source resistance.
    Supply {
        volts: f64,
        ohms: f64,
    },
    /// Current source; current leaves it at its second terminal.
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
    },
    Diode {
        parameters: diode::Diode,
        r_th: Option<f64>,
    },
}

/// Whether junctions are at ambient temperature, or as warm as their own dissipation makes them.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Thermal {
    ColdStart,
    Equilibrium,
}

/// A solution that was confirmed: the current rule holds at every node to 1e-9 of the largest current into that node.
#[derive(Clone, PartialEq, Debug)]
pub struct OperatingPoint {
    /// Node voltages against ground (V), by node index.
    pub voltages: Vec<f64>,
    /// What each element carries, in network order.
    pub elements: Vec<ElementPoint>,
    /// Estimated error of any node voltage (V).
    pub error: f64,
}

/// Voltages across and currents into one element at its terminals (terminal resistances of a device included).
#[derive(Clone, Copy, PartialEq, Debug, Default)]
pub struct ElementPoint {
    /// Voltage of the first against the second terminal; V_CE of a transistor (negative for PNP).
    pub v: f64,
    /// Current into the first terminal: I_C of a transistor (negative for PNP).
    pub i: f64,
    /// I_B and V_BE at the terminals (transistor).
    pub i_b: f64,
    pub v_be: f64,
    /// Dissipation (W); negative when a source delivers.
    pub p: f64,
    /// Junction temperature (K) of a device.
    pub t_j: f64,
}

/// Why there is no solution to show.
#[derive(Clone, PartialEq, Debug)]
pub enum Failure {
    /// Every method was tried; the last residual over its bound.
    NotConverged {
        residual: f64,
    },
    Singular,
    /// The thermal equilibrium was not found below the temperature bound (K).
    ThermalRunaway {
        element: usize,
    },
}

/// Kinds that the plan stamps as voltage-defined branches.
pub fn is_voltage_defined(kind: ElementKind) -> bool {
    matches!(kind, ElementKind::Supply | ElementKind::Inductor)
}
