//! What a circuit offers to formulas, criteria and prose: every quantity of every element and node by its trade symbol.
//!
//! Signs are those of the terminals: currents count into the terminal, `V_BE` is base against emitter. So I_C, I_B, V_CE
//! and V_BE of a conducting PNP are negative; `V_EC` and `V_EB` are there for whoever prefers magnitudes. The current of a
//! two-terminal element counts into its first terminal (from, plus, anode), its voltage is the first terminal against the
//! second, and its power is what it takes up: negative for a source that delivers.

use crate::quantity::{Dimension, Kind};

use super::kinds::rule;
use super::{Element, ElementKind, Network};

/// One quantity that a circuit offers.
#[derive(Clone, PartialEq, Debug)]
pub struct Symbol {
    /// `Q1.V_CE`, `R1`, `lamp.V`
    pub name: String,
    pub kind: Kind,
    /// What it is, in words.
    pub about: String,
}

const VOLT: Kind = Kind::of(Dimension::VOLT);
const AMPERE: Kind = Kind::of(Dimension::AMPERE);
const WATT: Kind = Kind::of(Dimension::WATT);
const OHM: Kind = Kind::of(Dimension::OHM);
const HENRY: Kind = Kind::of(Dimension::HENRY);
const JOULE: Kind = Kind::of(Dimension::JOULE);

/// Quantities of a transistor.
const TRANSISTOR: [(&str, Kind, &str); 15] = [
    ("V_BE", VOLT, "base-emitter voltage"),
    ("V_CE", VOLT, "collector-emitter voltage"),
    ("V_CB", VOLT, "collector-base voltage"),
    ("V_EB", VOLT, "emitter-base voltage"),
    ("V_EC", VOLT, "emitter-collector voltage"),
    ("V_BC", VOLT, "base-collector voltage"),
    ("I_C", AMPERE, "collector current"),
    ("I_B", AMPERE, "base current"),
    ("I_E", AMPERE, "emitter current"),
    ("P", WATT, "dissipation"),
    ("T_j", Kind::TEMPERATURE, "junction temperature"),
    ("h_FE", Kind::NONE, "current gain in the active region"),
    ("forced_gain", Kind::NONE, "forced gain I_C/I_B in saturation"),
    ("overdrive", Kind::NONE, "overdrive: active-region gain over forced gain"),
    ("R_th", Kind::of(Dimension::KELVIN_PER_WATT), "thermal resistance junction to ambient"),
];

/// Every symbol that `network` offers, elements first, each in order of writing.
pub fn symbols(network: &Network) -> Vec<Symbol> {
    let mut out = Vec::new();
    for element in &network.elements {
        element_symbols(element, &mut out);
    }
    let signal = network.elements.iter().find(|element| element.kind == ElementKind::Signal);
    for node in network.nodes.iter().skip(1) {
        let mut add = |name: &str, kind, about: String| {
            out.push(Symbol { name: format!("{node}.{name}"), kind, about });
        };
        add("V", VOLT, format!("voltage of node {node} against ground"));
        add("R_out", OHM, format!("output resistance at node {node}"));
        if let Some(signal) = signal {
            add(
                "gain",
                Kind::NONE,
                format!("midband voltage gain from {} to node {node}", signal.designator),
            );
        }
    }
    out
}

fn element_symbols(element: &Element, out: &mut Vec<Symbol>) {
    let designator = &element.designator;
    let mut add = |name: &str, kind: Kind, about: &str| {
        let name = if name.is_empty() { designator.clone() } else { format!("{designator}.{name}") };
        out.push(Symbol { name, kind, about: format!("{about} of {designator}") });
    };
    let value = rule(element.kind).and_then(|rule| rule.value);
    if let Some(dimension) = value {
        let about = match element.kind {
            ElementKind::Capacitor => "capacitance",
            ElementKind::Inductor => "inductance",
            ElementKind::Supply => "source voltage",
            ElementKind::Signal => "signal voltage",
            ElementKind::Current => "source current",
            _ => "resistance",
        };
        add("", Kind::of(dimension), about);
        let short = match element.kind {
            ElementKind::Capacitor => Some("C"),
            ElementKind::Inductor => Some("L"),
            ElementKind::Supply | ElementKind::Signal | ElementKind::Current => None,
            _ => Some("R"),
        };
        if let Some(short) = short {
            add(short, Kind::of(dimension), about);
        }
    }
    match element.kind {
        ElementKind::Npn | ElementKind::Pnp => {
            for (name, kind, about) in TRANSISTOR {
                if name != "R_th" || element.r_th.is_some() {
                    add(name, kind, about);
                }
            }
            return;
        }
        ElementKind::Diode | ElementKind::Zener => add("T_j", Kind::TEMPERATURE, "junction temperature"),
        ElementKind::Capacitor | ElementKind::Inductor => add("W", JOULE, "stored energy"),
        ElementKind::Coil if element.inductance.is_some() || element.part.is_some() => {
            add("L", HENRY, "inductance");
            add("W", JOULE, "stored energy");
        }
        ElementKind::Signal => add("R_in", OHM, "input resistance seen by the source"),
        _ => {}
    }
    add("V", VOLT, "voltage across the terminals");
    add("I", AMPERE, "current into the first terminal");
    add("P", WATT, "power taken up by the element");
    if element.cold.is_some() {
        add("R_cold", OHM, "cold resistance");
    }
    if element.resistance.is_some() {
        let winding = element.kind == ElementKind::Inductor;
        let (name, about) =
            if winding { ("R_w", "winding resistance") } else { ("R_s", "source resistance") };
        add(name, OHM, about);
    }
    if element.r_th.is_some() {
        add("R_th", Kind::of(Dimension::KELVIN_PER_WATT), "thermal resistance");
    }
    if element.tcr.is_some() {
        add("TCR", Kind::of(Dimension([0, 0, 0, 0, -2])), "temperature coefficient of resistance");
    }
}
