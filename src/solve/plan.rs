//! A network compiled once: which unknown and which equation belongs to which element.
//!
//! The equations are those of modified nodal analysis (Ho, Ruehli, Brennan 1975), with the current of **every**
//! two-terminal element as an unknown of its own and the junction voltages of devices as unknowns too. A current is then
//! never the difference of two nearly equal node voltages over a resistance, so that the current rule can hold to 1e-9
//! beside a milliohm as well as beside a gigaohm, and zero resistances need no special case.
//!
//! Unknowns: y = currents of two-terminal elements, then node voltages; u = junction voltages. Equations: the current
//! rule at each node but ground, the law of each two-terminal element, one voltage equation a junction.

use super::junction::Device;
use super::linear::Elimination;
use super::newton::size;
use super::{Branch, ElementPoint, Failure, OperatingPoint, Solution};
use crate::circuit::{ElementKind, Network, Node};

/// How many terminals an element has, and which law.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Class {
    /// Resistor, capacitor, inductor, source: terminals first, second.
    TwoTerminal,
    /// Terminals anode, cathode.
    Diode,
    /// Terminals collector, base, emitter.
    Transistor,
}

/// One element of a network as the plan needs it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Topology {
    pub terminals: Vec<Node>,
    pub class: Class,
}

/// An element's place among unknowns and equations.
#[derive(Clone, Copy, Debug)]
pub(super) enum Slot {
    /// Terminals; index of the current among y.
    Two { from: Node, to: Node, current: usize },
    /// Terminals; index of the junction; index among devices.
    Diode { anode: Node, cathode: Node, port: usize, device: usize },
    /// Terminals; index of the base-emitter junction, the base-collector junction follows; index among devices.
    Transistor { collector: Node, base: Node, emitter: Node, port: usize, device: usize },
}

/// A network compiled for repeated solving.
#[derive(Clone, Debug)]
pub struct Plan {
    pub(super) nodes: usize,
    pub(super) slots: Vec<Slot>,
    /// Two-terminal elements, junctions, devices.
    pub(super) linear: usize,
    pub(super) ports: usize,
    pub(super) devices: usize,
    /// The other junction of the same transistor, of each junction; of a diode the junction itself.
    pub(super) partners: Vec<usize>,
}

/// Working storage of one thread; after the first solution nothing more is allocated.
#[derive(Clone, Debug, Default)]
pub struct Scratch {
    /// Nodes, unknowns y and junctions that the storage is sized for.
    pub(super) sized: (usize, usize, usize),
    pub(super) elimination: Elimination,
    /// Law of each two-terminal element: `alpha (v_from - v_to) - rho i = epsilon`.
    pub(super) laws: Vec<[f64; 3]>,
    pub(super) prepared: Vec<Device>,
    /// State: y, u, and junction currents with their slopes (two a junction) at u.
    pub(super) y: Vec<f64>,
    pub(super) u: Vec<f64>,
    /// What u lacks in digits: the junction voltages are u + low. A saturated transistor whose collector carries nothing
    /// needs its junction voltages finer than a double holds them, for its collector current to vanish.
    pub(super) low: Vec<f64>,
    pub(super) i: Vec<f64>,
    pub(super) slopes: Vec<f64>,
    pub(super) residual: Vec<f64>,
    /// Size of the largest term of each equation.
    pub(super) largest: Vec<f64>,
    /// Sum of the currents out of each node (ground included) and the largest of them.
    pub(super) node_sum: Vec<f64>,
    pub(super) node_largest: Vec<f64>,
    pub(super) right: Vec<f64>,
    pub(super) step: Vec<f64>,
    pub(super) jacobian: Vec<f64>,
    pub(super) small: Vec<f64>,
    /// Last good state while stepping.
    pub(super) kept_y: Vec<f64>,
    pub(super) kept_u: Vec<f64>,
    pub(super) heat: Heat,
}

/// Working storage of the thermal equilibrium; one value a device that heats itself.
#[derive(Clone, Debug, Default)]
pub(super) struct Heat {
    pub temperatures: Vec<f64>,
    /// Element, device, thermal resistance of each device that heats itself.
    pub hot: Vec<(usize, usize, f64)>,
    pub excess: Vec<f64>,
    pub before: Vec<f64>,
    pub step: Vec<f64>,
    pub matrix: Vec<f64>,
    pub work: Vec<f64>,
}

impl Topology {
    /// What the plan needs to know of one element of a circuit.
    pub fn of(element: &crate::circuit::Element) -> Topology {
        let class = match element.kind {
            ElementKind::Npn | ElementKind::Pnp => Class::Transistor,
            ElementKind::Diode | ElementKind::Zener => Class::Diode,
            _ => Class::TwoTerminal,
        };
        Topology { terminals: element.terminals.clone(), class }
    }
}

impl Plan {
    /// Compiles a circuit.
    ///
    /// # Errors
    /// [`Failure::Unfit`] for an element with a wrong number of terminals or an unknown node.
    pub fn of(network: &Network) -> Result<Plan, Failure> {
        let elements: Vec<Topology> = network.elements.iter().map(Topology::of).collect();
        Plan::new(network.nodes.len(), &elements)
    }

    /// Compiles a network of `nodes` nodes (ground, node 0, included).
    ///
    /// # Errors
    /// [`Failure::Unfit`] for an element with a wrong number of terminals or an unknown node.
    pub fn new(nodes: usize, elements: &[Topology]) -> Result<Plan, Failure> {
        let mut plan = Plan {
            nodes: nodes.max(1),
            slots: Vec::with_capacity(elements.len()),
            linear: 0,
            ports: 0,
            devices: 0,
            partners: Vec::new(),
        };
        for (element, topology) in elements.iter().enumerate() {
            if topology.terminals.iter().any(|&node| node >= plan.nodes) {
                return Err(Failure::Unfit { element });
            }
            let (port, device) = (plan.ports, plan.devices);
            let slot = match (topology.class, &topology.terminals[..]) {
                (Class::TwoTerminal, &[from, to]) => {
                    plan.linear += 1;
                    Slot::Two { from, to, current: plan.linear - 1 }
                }
                (Class::Diode, &[anode, cathode]) => {
                    plan.partners.push(port);
                    plan.ports += 1;
                    plan.devices += 1;
                    Slot::Diode { anode, cathode, port, device }
                }
                (Class::Transistor, &[collector, base, emitter]) => {
                    plan.partners.extend([port + 1, port]);
                    plan.ports += 2;
                    plan.devices += 1;
                    Slot::Transistor { collector, base, emitter, port, device }
                }
                _ => return Err(Failure::Unfit { element }),
            };
            plan.slots.push(slot);
        }
        Ok(plan)
    }

    /// Number of nodes, ground included.
    pub fn nodes(&self) -> usize {
        self.nodes
    }

    /// Number of elements.
    pub fn elements(&self) -> usize {
        self.slots.len()
    }

    /// Working storage for one thread.
    pub fn scratch(&self) -> Scratch {
        Scratch::default()
    }

    /// An operating point to be filled by [`Plan::solve_into`], again and again.
    pub fn blank(&self) -> OperatingPoint {
        OperatingPoint {
            voltages: vec![0.0; self.nodes],
            elements: vec![ElementPoint::default(); self.slots.len()],
            error: f64::INFINITY,
            attempts: Vec::with_capacity(8),
            solution: Solution::default(),
        }
    }

    /// Number of unknowns y.
    #[inline]
    pub(super) fn unknowns(&self) -> usize {
        self.linear + self.nodes - 1
    }

    /// Column of a node's voltage among y; `None` for ground.
    #[inline]
    pub(super) fn column(&self, node: Node) -> Option<usize> {
        node.checked_sub(1).map(|k| self.linear + k)
    }

    /// Writes the laws of two-terminal elements at d.c. into `scratch`, and checks every branch against its slot.
    pub(super) fn laws(&self, branches: &[Branch], scratch: &mut Scratch) -> Result<(), Failure> {
        if branches.len() != self.slots.len() {
            return Err(Failure::Unfit { element: branches.len().min(self.slots.len()) });
        }
        size(self, scratch);
        scratch.laws.clear();
        for (element, (slot, branch)) in self.slots.iter().zip(branches).enumerate() {
            let law = match (slot, *branch) {
                (Slot::Two { .. }, Branch::Resistor { ohms } | Branch::Inductor { ohms }) => [1.0, ohms, 0.0],
                (Slot::Two { .. }, Branch::Signal { ohms }) => [1.0, ohms, 0.0],
                (Slot::Two { .. }, Branch::Supply { volts, ohms }) => [1.0, ohms, volts],
                (Slot::Two { .. }, Branch::Current { amperes }) => [0.0, 1.0, -amperes],
                (Slot::Two { .. }, Branch::Open | Branch::Capacitor) => [0.0, 1.0, 0.0],
                (Slot::Diode { .. }, Branch::Open | Branch::Diode { .. }) => continue,
                (Slot::Transistor { .. }, Branch::Open | Branch::Transistor { .. }) => continue,
                _ => return Err(Failure::Unfit { element }),
            };
            if !law.iter().all(|x| x.is_finite()) || law[1] < 0.0 {
                return Err(Failure::Unfit { element });
            }
            scratch.laws.push(law);
        }
        Ok(())
    }

    /// Fills and eliminates the constant part of the equations from `scratch.laws` and `scratch.prepared`.
    pub(super) fn eliminate(&self, scratch: &mut Scratch) -> Result<(), Failure> {
        let (n, m) = (self.unknowns(), self.ports);
        let matrix = &mut scratch.elimination;
        matrix.clear(n, n + m, n + 2 * m);
        for slot in &self.slots {
            match *slot {
                Slot::Two { from, to, current } => {
                    let [alpha, rho, _] = scratch.laws[current];
                    let row = self.nodes - 1 + current;
                    matrix.add(row, current, -rho);
                    for (node, sign) in [(from, 1.0), (to, -1.0)] {
                        if let Some(column) = self.column(node) {
                            matrix.add(node - 1, current, sign);
                            matrix.add(row, column, sign * alpha);
                        }
                    }
                }
                Slot::Diode { anode, cathode, port, device } => {
                    let (row, i) = (n + port, n + m + port);
                    matrix.add(row, n + port, -1.0);
                    matrix.add(row, i, -scratch.prepared[device].resistances[0]);
                    for (node, sign) in [(anode, 1.0), (cathode, -1.0)] {
                        if let Some(column) = self.column(node) {
                            matrix.add(node - 1, i, sign);
                            matrix.add(row, column, sign);
                        }
                    }
                }
                Slot::Transistor { collector, base, emitter, port, device } => {
                    let Device { sign, resistances: [r_c, r_b, r_e], .. } = scratch.prepared[device];
                    let (be, bc) = (n + port, n + port + 1);
                    let (i_c, i_b) = (n + m + port, n + m + port + 1);
                    for (row, column, value) in [
                        (be, be, -1.0),
                        (be, i_c, -r_e),
                        (be, i_b, -r_b - r_e),
                        (bc, bc, -1.0),
                        (bc, i_c, r_c),
                        (bc, i_b, -r_b),
                    ] {
                        matrix.add(row, column, value);
                    }
                    for (node, c, b, v_be, v_bc) in [
                        (collector, sign, 0.0, 0.0, -sign),
                        (base, 0.0, sign, sign, sign),
                        (emitter, -sign, -sign, -sign, 0.0),
                    ] {
                        if let Some(column) = self.column(node) {
                            matrix.add(node - 1, i_c, c);
                            matrix.add(node - 1, i_b, b);
                            matrix.add(be, column, v_be);
                            matrix.add(bc, column, v_bc);
                        }
                    }
                }
            }
        }
        matrix.factor()
    }
}
