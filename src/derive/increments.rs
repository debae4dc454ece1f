//! The equivalent circuit at midband: each transistor its input resistance and its controlled source, what is constant a
//! short circuit; gain, input and output resistance by hand (for example Millman and Halkias, Integrated Electronics, 1972,
//! chapter 8).

use super::tableau::{self, Equation, Law, Unknown, Values};
use super::{EmitterCurrent, Node};

/// A network of small changes; node 0 is ground.
#[derive(Clone, PartialEq, Debug)]
pub struct Increments {
    /// How many nodes there are, ground included.
    pub nodes: usize,
    pub parts: Vec<Part>,
    /// Plus and minus of the source whose change drives the rest.
    pub drive: [Node; 2],
}

/// One element of the equivalent circuit, in Ω.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Part {
    Resistor {
        between: [Node; 2],
        resistance: f64,
    },
    /// What does not change: a d.c. supply, a large capacitor.
    Short {
        between: [Node; 2],
    },
    Transistor {
        collector: Node,
        base: Node,
        emitter: Node,
        equivalent: Equivalent,
    },
}

/// A transistor's equivalent for small changes.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Equivalent {
    /// h_fe.
    pub gain: f64,
    /// h_ie, r_pi (Ω) between base and emitter.
    pub input_resistance: f64,
    /// r_o, 1 / h_oe (Ω) between collector and emitter; infinite where it is neglected.
    pub output_resistance: f64,
    pub emitter_current: EmitterCurrent,
}

impl Increments {
    /// Change of each node's voltage for one volt of the source, ground first; none where a node is not determined.
    pub fn gains(&self) -> Option<Vec<f64>> {
        let values = self.solve(1.0, None)?;
        Some(self.voltages(&values))
    }

    /// Resistance (Ω) that the source sees.
    pub fn input_resistance(&self) -> Option<f64> {
        let values = self.solve(1.0, None)?;
        Some(-1.0 / values.get(&Unknown::Current(self.parts.len()))?)
    }

    /// Resistance (Ω) between a node and ground with the source at rest.
    pub fn output_resistance(&self, node: Node) -> Option<f64> {
        let values = self.solve(0.0, Some(node))?;
        self.voltages(&values).get(node).copied()
    }

    fn voltages(&self, values: &Values) -> Vec<f64> {
        (0..self.nodes).map(|node| values.get(&Unknown::Voltage(node)).copied().unwrap_or(0.0)).collect()
    }

    /// The network with the source at `volts`, and one ampere driven into a node where one is given.
    fn solve(&self, volts: f64, into: Option<Node>) -> Option<Values> {
        let mut leaving: Vec<Vec<(Unknown, f64)>> = vec![Vec::new(); self.nodes];
        let mut found = Vec::new();
        let mut shorts = Vec::new();
        let mut through = |k: usize, [from, to]: [Node; 2]| {
            leaving[from].push((Unknown::Current(k), 1.0));
            leaving[to].push((Unknown::Current(k), -1.0));
        };
        let mut transistors = Vec::new();
        for (k, part) in self.parts.iter().enumerate() {
            match *part {
                Part::Resistor { between, resistance } => {
                    through(k, between);
                    let [plus, minus] = Equation::difference(between[0], between[1]);
                    let terms = [plus, minus, (Unknown::Current(k), -resistance)];
                    found.push(Equation::new(Law::Ohm(k), terms, 0.0));
                }
                Part::Short { between } => shorts.push((k, between, 0.0)),
                Part::Transistor { collector, base, emitter, equivalent } => {
                    if equivalent.output_resistance.is_finite() {
                        through(k, [collector, emitter]);
                        let [plus, minus] = Equation::difference(collector, emitter);
                        let terms = [plus, minus, (Unknown::Current(k), -equivalent.output_resistance)];
                        found.push(Equation::new(Law::Ohm(k), terms, 0.0));
                    }
                    transistors.push((k, [collector, base, emitter], equivalent));
                }
            }
        }
        shorts.push((self.parts.len(), self.drive, volts));
        for (k, [plus, minus], voltage) in shorts {
            // What is shorted to itself says nothing.
            if plus != minus {
                through(k, [plus, minus]);
                found.push(Equation::new(Law::Source(k), Equation::difference(plus, minus), voltage));
            }
        }
        for (k, [collector, base, emitter], equivalent) in transistors {
            let (i_b, i_c, i_e) =
                (Unknown::BaseCurrent(k), Unknown::CollectorCurrent(k), Unknown::EmitterCurrent(k));
            leaving[collector].push((i_c, 1.0));
            leaving[base].push((i_b, 1.0));
            leaving[emitter].push((i_e, -1.0));
            let [plus, minus] = Equation::difference(base, emitter);
            let terms = [plus, minus, (i_b, -equivalent.input_resistance)];
            found.push(Equation::new(Law::Ohm(k), terms, 0.0));
            found.push(Equation::new(Law::Gain(k), [(i_c, 1.0), (i_b, -equivalent.gain)], 0.0));
            let sum = if equivalent.emitter_current == EmitterCurrent::Sum { -1.0 } else { 0.0 };
            found.push(Equation::new(Law::Emitter(k), [(i_e, 1.0), (i_c, -1.0), (i_b, sum)], 0.0));
        }
        found.extend(tableau::node_laws(leaving));
        if let Some(node) = into {
            let law = found.iter_mut().find(|equation| equation.law == Law::Currents(node))?;
            law.right = 1.0;
        }
        tableau::solve(&found)
    }
}
