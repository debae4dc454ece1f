//! Where the current of a coil goes when its transistor opens: a question of topology.
//!
//! A coil keeps its current. When the transistor opens, the current leaves the coil at the terminal where it left before and
//! must find a way back to the other: through diodes in their forward direction, through Zeners in either, through sources,
//! and through resistors as long as the voltage they build up stays small. Without such a way the voltage rises until
//! something breaks down.

use crate::circuit::{ElementKind, Node};

use super::ElementFact;

/// Resistors in the way back may raise the voltage to so many times the highest voltage of the circuit (common practice).
const MOST_KICK: f64 = 3.0;
/// A coil that carries less than this (A) stores nothing worth a caution: it sees leakage only.
const LEAKAGE: f64 = 1e-6;
/// Resistors up to so many times the load's own resistance still pass its current on to the transistor.
const STILL_A_LOAD: f64 = 10.0;

/// A transistor that opens the circuit of a coil for whose current there is no way back.
pub(super) struct Unclamped<'a> {
    pub coil: &'a ElementFact,
    pub transistors: Vec<&'a str>,
}

/// Every coil and inductor that a transistor switches and nothing clamps. `highest` is the highest voltage (V) of the circuit.
pub(super) fn unclamped(elements: &[ElementFact], highest: Option<f64>) -> Vec<Unclamped<'_>> {
    let graph = Graph { elements, highest };
    elements
        .iter()
        .filter(|element| is_inductive(element.kind))
        .filter(|coil| coil.current.as_ref().is_none_or(|current| current.value >= LEAKAGE))
        .filter_map(|coil| {
            let transistors = graph.without_way_back(coil);
            (!transistors.is_empty()).then_some(Unclamped { coil, transistors })
        })
        .collect()
}

fn is_inductive(kind: ElementKind) -> bool {
    matches!(kind, ElementKind::Coil | ElementKind::Inductor)
}

/// What one side of a coil leads to.
struct Side<'a> {
    /// A node held by a source.
    fixed: bool,
    /// Transistors that carry the current on.
    transistors: Vec<&'a str>,
}

impl Side<'_> {
    fn carries(&self) -> bool {
        self.fixed || !self.transistors.is_empty()
    }
}

struct Graph<'a> {
    elements: &'a [ElementFact],
    highest: Option<f64>,
}

impl<'a> Graph<'a> {
    /// Designators of the transistors that switch a coil in a direction in which it has no way back.
    fn without_way_back(&self, coil: &ElementFact) -> Vec<&'a str> {
        let [first, second] = coil.terminals[..] else { return Vec::new() };
        let fixed = self.fixed();
        let mut found: Vec<&str> = Vec::new();
        for (exit, entry) in [(first, second), (second, first)] {
            // Current flows in this direction only if something takes it at the exit and something gives it at the entry.
            let takes = self.side(coil, exit, true, &fixed);
            let gives = self.side(coil, entry, false, &fixed);
            if !(takes.carries() && gives.carries()) || self.returns(coil, exit, entry) {
                continue;
            }
            for transistor in takes.transistors.into_iter().chain(gives.transistors) {
                if !found.contains(&transistor) {
                    found.push(transistor);
                }
            }
        }
        found
    }

    /// The resistance that a coil shows its supply: what decides which resistors matter beside it.
    fn scale(&self, coil: &ElementFact) -> Option<f64> {
        let by_current = coil
            .current
            .as_ref()
            .zip(self.highest)
            .map(|(current, highest)| highest / current.value)
            .filter(|scale| scale.is_finite());
        by_current.or(coil.resistance)
    }

    /// What lies on one side of a coil, directly or through what passes its current on: downstream of `node`, where it
    /// leaves, or upstream, where it enters.
    fn side(&self, coil: &ElementFact, node: Node, downstream: bool, fixed: &[Node]) -> Side<'a> {
        let most = self.scale(coil).map_or(0.0, |scale| STILL_A_LOAD * scale);
        let mut reached = vec![node];
        let mut next = 0;
        let mut side = Side { fixed: false, transistors: Vec::new() };
        while let Some(&at) = reached.get(next) {
            next += 1;
            // A node held by a source is where every way ends.
            if fixed.contains(&at) {
                side.fixed = true;
                continue;
            }
            for element in self.elements.iter().filter(|element| element.designator != coil.designator) {
                let to = match element.terminals[..] {
                    [collector, _, emitter] => {
                        let takes_at = if element.kind == ElementKind::Npn { collector } else { emitter };
                        let gives_at = if element.kind == ElementKind::Npn { emitter } else { collector };
                        let designator = element.designator.as_str();
                        if at == if downstream { takes_at } else { gives_at }
                            && !side.transistors.contains(&designator)
                        {
                            side.transistors.push(designator);
                        }
                        continue;
                    }
                    [a, b] if a == at => b,
                    [a, b] if b == at => a,
                    _ => continue,
                };
                let passes = match element.kind {
                    ElementKind::Diode => (element.terminals.first() == Some(&at)) == downstream,
                    ElementKind::Zener | ElementKind::Coil | ElementKind::Inductor | ElementKind::Supply => {
                        true
                    }
                    ElementKind::Resistor | ElementKind::Filament => {
                        element.resistance.is_some_and(|resistance| resistance <= most)
                    }
                    _ => false,
                };
                if passes && !reached.contains(&to) {
                    reached.push(to);
                }
            }
        }
        side
    }

    /// Nodes that voltage sources hold against ground.
    fn fixed(&self) -> Vec<Node> {
        let mut fixed: Vec<Node> = vec![0];
        let mut next = 0;
        while let Some(&at) = fixed.get(next) {
            next += 1;
            for element in self.elements.iter().filter(|element| element.kind == ElementKind::Supply) {
                let [plus, minus] = element.terminals[..] else { continue };
                for (one, other) in [(plus, minus), (minus, plus)] {
                    if one == at && !fixed.contains(&other) {
                        fixed.push(other);
                    }
                }
            }
        }
        fixed
    }

    /// Whether the current of a coil finds a way from where it leaves to where it enters (Dijkstra 1959, by resistance).
    fn returns(&self, coil: &ElementFact, exit: Node, entry: Node) -> bool {
        let mut least: Vec<(Node, f64)> = vec![(exit, 0.0)];
        let mut done: Vec<Node> = Vec::new();
        loop {
            let open = least.iter().filter(|(node, _)| !done.contains(node));
            let Some(&(at, resistance)) = open.min_by(|a, b| a.1.total_cmp(&b.1)) else { return false };
            if at == entry {
                return self.is_small(coil, resistance);
            }
            done.push(at);
            for element in self.elements.iter().filter(|element| element.designator != coil.designator) {
                for (to, more) in self.conducts(element, at) {
                    let total = resistance + more;
                    match least.iter_mut().find(|(node, _)| *node == to) {
                        Some((_, known)) => *known = known.min(total),
                        None => least.push((to, total)),
                    }
                }
            }
        }
    }

    /// Whether the resistance of a way back leaves the kick small.
    fn is_small(&self, coil: &ElementFact, resistance: f64) -> bool {
        resistance == 0.0 || self.scale(coil).is_some_and(|scale| resistance <= MOST_KICK * scale)
    }

    /// Where current that arrives at a node can go on through an element, and through which resistance.
    fn conducts(&self, element: &ElementFact, at: Node) -> Vec<(Node, f64)> {
        let both_ways = |resistance: f64| match element.terminals[..] {
            [a, b] if a == at => vec![(b, resistance)],
            [a, b] if b == at => vec![(a, resistance)],
            _ => Vec::new(),
        };
        match element.kind {
            ElementKind::Diode => match element.terminals[..] {
                [anode, cathode] if anode == at => vec![(cathode, 0.0)],
                _ => Vec::new(),
            },
            ElementKind::Zener | ElementKind::Supply => both_ways(0.0),
            ElementKind::Resistor | ElementKind::Filament => element.resistance.map_or(Vec::new(), both_ways),
            // A Zener from collector to base turns the transistor on again before it breaks down.
            ElementKind::Npn | ElementKind::Pnp => match element.terminals[..] {
                [collector, base, emitter] if self.zener_joins(collector, base) => {
                    let npn = element.kind == ElementKind::Npn;
                    let (from, to) = if npn { (collector, emitter) } else { (emitter, collector) };
                    if from == at { vec![(to, 0.0)] } else { Vec::new() }
                }
                _ => Vec::new(),
            },
            _ => Vec::new(),
        }
    }

    fn zener_joins(&self, one: Node, other: Node) -> bool {
        self.elements.iter().any(|element| {
            element.kind == ElementKind::Zener
                && matches!(element.terminals[..], [a, b] if (a, b) == (one, other) || (b, a) == (one, other))
        })
    }
}
