//! Rules of connection: what makes a network solvable, checked before anything is solved.

use std::collections::{BTreeMap, BTreeSet};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::Expr;
use crate::quantity::Kind;

use super::build::Terminal;
use super::{Element, ElementKind, InPlace, Network};

/// Sets of nodes that are joined step by step.
struct Joined(Vec<usize>);

impl Joined {
    fn new(count: usize) -> Joined {
        Joined((0..count).collect())
    }

    fn root(&mut self, node: usize) -> usize {
        let mut at = node;
        while let Some(next) = self.0.get(at).copied().filter(|next| *next != at) {
            let over = self.0.get(next).copied().unwrap_or(next);
            if let Some(slot) = self.0.get_mut(at) {
                *slot = over;
            }
            at = next;
        }
        at
    }

    /// Joins two nodes; `false` if they were joined already.
    fn join(&mut self, one: usize, other: usize) -> bool {
        let (one, other) = (self.root(one), self.root(other));
        if let Some(slot) = self.0.get_mut(one.max(other)) {
            *slot = one.min(other);
        }
        one != other
    }
}

/// Checks names and connections of a network whose elements were all understood.
pub(super) fn check(
    network: &Network,
    terminals: &[Vec<Terminal>],
    inputs: &[InPlace],
    basis: &BTreeMap<String, Kind>,
    diagnostics: &mut Diagnostics,
) {
    names(network, inputs, basis, diagnostics);
    one_signal(network, diagnostics);
    if network.elements.is_empty() {
        return;
    }
    if !terminals.iter().flatten().any(|terminal| terminal.node == 0) {
        if let Some(first) = network.elements.first() {
            diagnostics.push(
                Diagnostic::error(&first.place, "nothing in this circuit is connected to `ground`")
                    .expected("the reference node `ground` at one element at least"),
            );
        }
        return;
    }
    let dangling = dangling(network, terminals, diagnostics);
    paths_to_ground(network, terminals, &dangling, diagnostics);
    voltage_loops(network, diagnostics);
}

/// A designator may not mean two things in a formula.
fn names(
    network: &Network,
    inputs: &[InPlace],
    basis: &BTreeMap<String, Kind>,
    diagnostics: &mut Diagnostics,
) {
    for element in &network.elements {
        let name = &element.designator;
        if network.nodes.contains(name) {
            let message = format!("`{name}` is an element and a node: `{name}.V` would mean two things");
            diagnostics
                .push(Diagnostic::error(&element.place, message).expected("another name for the node"));
        }
        // `R1: {resistor: R1}` says that the two are the same.
        let same = element.value.as_ref().is_some_and(|value| value.text == *name)
            && !inputs.iter().any(|input| input.symbol == *name);
        let clashes = basis.contains_key(name) && !same;
        if clashes {
            let message = format!("`{name}` is an element and a name of the design basis");
            diagnostics.push(
                Diagnostic::error(&element.place, message)
                    .expected(format!("another name in the basis, or `{name}` as the value of the element")),
            );
        }
    }
}

/// Midband gain is from one source.
fn one_signal(network: &Network, diagnostics: &mut Diagnostics) {
    let mut signals = network.elements.iter().filter(|element| element.kind == ElementKind::Signal);
    if let Some(first) = signals.next() {
        for second in signals {
            let message = format!("`{}` is a second signal source", second.designator);
            diagnostics.push(
                Diagnostic::error(&second.place, message)
                    .expected(format!("one; gain is counted from `{}`", first.designator)),
            );
        }
    }
}

/// Nodes with a single connection, which are reported.
fn dangling(
    network: &Network,
    terminals: &[Vec<Terminal>],
    diagnostics: &mut Diagnostics,
) -> BTreeSet<usize> {
    let mut uses: BTreeMap<usize, Vec<(usize, &Terminal)>> = BTreeMap::new();
    for (element, terminals) in terminals.iter().enumerate() {
        for terminal in terminals {
            uses.entry(terminal.node).or_default().push((element, terminal));
        }
    }
    let mut found = BTreeSet::new();
    for (node, uses) in &uses {
        let elements: BTreeSet<usize> = uses.iter().map(|(element, _)| *element).collect();
        let (Some((element, terminal)), 1, true) = (uses.first(), elements.len(), *node != 0) else {
            continue;
        };
        found.insert(*node);
        let name = network.nodes.get(*node).map_or("", String::as_str);
        let designator = network.elements.get(*element).map_or("", |element| element.designator.as_str());
        let others = network.nodes.iter().map(String::as_str).filter(|other| *other != name);
        diagnostics.push(
            Diagnostic::error(
                &terminal.place,
                format!("only `{designator}` is connected to the node `{name}`"),
            )
            .expected("two elements at every node")
            .nearest(name, others),
        );
    }
    found
}

/// What direct current can take between the terminals of an element.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Conducts {
    Yes,
    /// A capacitor.
    Alternating,
    /// A current source drives what it drives, whatever the voltage.
    Forced,
}

fn conducts(kind: ElementKind) -> Conducts {
    match kind {
        ElementKind::Capacitor => Conducts::Alternating,
        ElementKind::Current => Conducts::Forced,
        _ => Conducts::Yes,
    }
}

/// Every node needs a way to ground for direct current; otherwise its voltage, or the sum of its currents, is undefined.
fn paths_to_ground(
    network: &Network,
    terminals: &[Vec<Terminal>],
    dangling: &BTreeSet<usize>,
    diagnostics: &mut Diagnostics,
) {
    let mut direct = Joined::new(network.nodes.len());
    for element in network.elements.iter().filter(|element| conducts(element.kind) == Conducts::Yes) {
        element.terminals.windows(2).for_each(|pair| {
            if let [one, other] = pair {
                direct.join(*one, *other);
            }
        });
    }
    let mut islands: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
    for node in 0..network.nodes.len() {
        let root = direct.root(node);
        if root != direct.root(0) {
            islands.entry(root).or_default().push(node);
        }
    }
    for nodes in islands.values() {
        if nodes.iter().all(|node| dangling.contains(node)) {
            continue;
        }
        let borders = |wanted: Conducts| -> Vec<&str> {
            network
                .elements
                .iter()
                .filter(|element| conducts(element.kind) == wanted)
                .filter(|element| element.terminals.iter().any(|node| nodes.contains(node)))
                .filter(|element| element.terminals.iter().any(|node| !nodes.contains(node)))
                .map(|element| element.designator.as_str())
                .collect()
        };
        let place = terminals.iter().flatten().find(|terminal| nodes.contains(&terminal.node));
        let Some(place) = place.map(|terminal| &terminal.place) else { continue };
        diagnostics.push(island(network, nodes, &borders, place));
    }
}

fn island<'n>(
    network: &Network,
    nodes: &[usize],
    borders: &dyn Fn(Conducts) -> Vec<&'n str>,
    place: &crate::source::Place,
) -> Diagnostic {
    const MANY: usize = 5;
    let mut names: Vec<String> = nodes
        .iter()
        .take(MANY)
        .filter_map(|node| network.nodes.get(*node))
        .map(|name| format!("`{name}`"))
        .collect();
    if nodes.len() > MANY {
        names.push("others".into());
    }
    let (what, reach, have) =
        if nodes.len() == 1 { ("the node", "reaches", "has") } else { ("the nodes", "reach", "have") };
    let names = names.join(", ");
    let (capacitors, sources) = (borders(Conducts::Alternating), borders(Conducts::Forced));
    let (message, expected) = if !sources.is_empty() {
        (
            format!("only current sources lead from {what} {names}: {}", sources.join(", ")),
            "a resistor or another element that takes their current",
        )
    } else if !capacitors.is_empty() {
        (
            format!("{what} {names} {reach} ground only through capacitors: {}", capacitors.join(", ")),
            "a path for direct current, such as a resistor to ground",
        )
    } else {
        (format!("{what} {names} {have} no path to ground"), "a connection to the rest of the circuit")
    };
    Diagnostic::error(place, message).expected(expected)
}

/// Whether an element fixes the voltage between its terminals whatever the current.
fn is_ideal(element: &Element) -> bool {
    let no_resistance = match element.resistance.as_ref().map(|formula| &formula.expr) {
        None => true,
        Some(Expr::Literal { value, .. }) => *value == 0.0,
        Some(_) => false,
    };
    matches!(element.kind, ElementKind::Supply | ElementKind::Signal | ElementKind::Inductor) && no_resistance
}

/// A loop of ideal voltage sources and resistance-free inductors has no solution or none that is its own.
fn voltage_loops(network: &Network, diagnostics: &mut Diagnostics) {
    let mut joined = Joined::new(network.nodes.len());
    let mut edges: Vec<&Element> = Vec::new();
    for element in network.elements.iter().filter(|element| is_ideal(element)) {
        let [one, other] = element.terminals.as_slice() else { continue };
        if joined.join(*one, *other) {
            edges.push(element);
            continue;
        }
        let others = way(&edges, *one, *other);
        let loop_of = others.iter().map(|name| format!("`{name}`")).collect::<Vec<_>>().join(", ");
        let message = format!("`{}` closes a loop of voltage sources with {loop_of}", element.designator);
        diagnostics.push(
            Diagnostic::error(&element.place, message)
                .expected("a source resistance or winding resistance: `resistance: 0.1 Ω`"),
        );
    }
}

/// Designators along the way from one node to another over `edges`, which form no loop.
fn way<'n>(edges: &[&'n Element], from: usize, to: usize) -> Vec<&'n str> {
    let mut reached: BTreeMap<usize, (usize, &str)> = BTreeMap::new();
    let mut open = vec![from];
    while let Some(node) = open.pop() {
        for edge in edges {
            let [one, other] = edge.terminals.as_slice() else { continue };
            let next = if *one == node {
                *other
            } else if *other == node {
                *one
            } else {
                continue;
            };
            if next != from && !reached.contains_key(&next) {
                reached.insert(next, (node, &edge.designator));
                open.push(next);
            }
        }
    }
    let mut names = Vec::new();
    let mut at = to;
    while let Some((before, name)) = reached.get(&at) {
        names.push(*name);
        if *before == from {
            break;
        }
        at = *before;
    }
    names
}
