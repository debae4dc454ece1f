//! Networks written down in a line an element, and residuals computed apart from the solver.

use qsheaf::device::{diode::Diode, transistor::Transistor};
use qsheaf::solve::{Branch, Class, Failure, OperatingPoint, Plan, Probe, Thermal, Topology};

/// A network under construction; node 0 is ground.
#[derive(Clone, Default)]
pub struct Net {
    pub nodes: usize,
    pub elements: Vec<Topology>,
    pub branches: Vec<Branch>,
}

impl Net {
    fn add(&mut self, class: Class, terminals: &[usize], branch: Branch) -> usize {
        self.nodes = terminals.iter().fold(self.nodes.max(1), |most, &node| most.max(node + 1));
        self.elements.push(Topology { terminals: terminals.to_vec(), class });
        self.branches.push(branch);
        self.branches.len() - 1
    }

    pub fn two(&mut self, from: usize, to: usize, branch: Branch) -> usize {
        self.add(Class::TwoTerminal, &[from, to], branch)
    }

    pub fn resistor(&mut self, from: usize, to: usize, ohms: f64) -> usize {
        self.two(from, to, Branch::Resistor { ohms })
    }

    pub fn supply(&mut self, plus: usize, minus: usize, volts: f64) -> usize {
        self.two(plus, minus, Branch::Supply { volts, ohms: 0.0 })
    }

    pub fn npn(&mut self, terminals: [usize; 3], parameters: Transistor) -> usize {
        let branch = Branch::Transistor { pnp: false, parameters, r_th: None, probe: Probe::default() };
        self.add(Class::Transistor, &terminals, branch)
    }

    pub fn pnp(&mut self, terminals: [usize; 3], parameters: Transistor) -> usize {
        let branch = Branch::Transistor { pnp: true, parameters, r_th: None, probe: Probe::default() };
        self.add(Class::Transistor, &terminals, branch)
    }

    pub fn diode(&mut self, anode: usize, cathode: usize, parameters: Diode) -> usize {
        self.add(Class::Diode, &[anode, cathode], Branch::Diode { parameters, r_th: None })
    }

    pub fn plan(&self) -> Plan {
        Plan::new(self.nodes, &self.elements).expect("the network fits")
    }

    pub fn solve(&self, ambient: f64) -> Result<OperatingPoint, Failure> {
        let plan = self.plan();
        plan.solve(&self.branches, ambient, Thermal::ColdStart, None, &mut plan.scratch())
    }

    pub fn hot(&self, ambient: f64) -> Result<OperatingPoint, Failure> {
        let plan = self.plan();
        plan.solve(&self.branches, ambient, Thermal::Equilibrium, None, &mut plan.scratch())
    }

    /// Currents into the terminals of an element, as the point states them.
    pub fn terminal_currents(&self, point: &OperatingPoint, element: usize) -> Vec<f64> {
        let at = &point.elements[element];
        match self.elements[element].class {
            Class::Transistor => vec![at.i, at.i_b, -at.i - at.i_b],
            _ => vec![at.i, -at.i],
        }
    }

    /// The worst of: current residual at a node over its bound; disagreement of an element's law with the stated
    /// voltages and currents, in volts over `1e-9 * highest node voltage`. Below 1 where a point deserves acceptance.
    pub fn residual(&self, point: &OperatingPoint) -> f64 {
        let mut sums = vec![(0.0_f64, 0.0_f64); self.nodes];
        let highest = point.voltages.iter().fold(1.0_f64, |high, v| high.max(v.abs()));
        let mut worst = 0.0_f64;
        for (element, (topology, branch)) in self.elements.iter().zip(&self.branches).enumerate() {
            for (&node, current) in topology.terminals.iter().zip(self.terminal_currents(point, element)) {
                sums[node].0 += current;
                sums[node].1 = sums[node].1.max(current.abs());
            }
            let volts = law(branch, &topology.terminals, point, element);
            worst = worst.max(volts / (1e-9 * highest));
        }
        for (sum, largest) in sums {
            worst = worst.max(sum.abs() / (1e-9 * largest).max(1e-18));
        }
        worst
    }
}

/// Disagreement (V) of an element with its law.
fn law(branch: &Branch, terminals: &[usize], point: &OperatingPoint, element: usize) -> f64 {
    let at = &point.elements[element];
    let v = |k: usize| point.voltages[terminals[k]];
    match branch {
        Branch::Resistor { ohms } | Branch::Inductor { ohms } | Branch::Signal { ohms } => {
            (v(0) - v(1) - ohms * at.i).abs().max((at.v - (v(0) - v(1))).abs())
        }
        Branch::Supply { volts, ohms } => (v(0) - v(1) - volts - ohms * at.i).abs(),
        Branch::Current { amperes } => (at.i - amperes).abs() * 1e3,
        Branch::Open | Branch::Capacitor => at.i.abs() * 1e6,
        Branch::Diode { parameters, .. } => {
            let now = parameters.at(at.t_j);
            let (current, slope) = now.current(at.v - now.parameters.series_resistance * at.i);
            in_volts(current - at.i, slope, current)
        }
        Branch::Transistor { pnp, parameters, .. } => {
            let s = if *pnp { -1.0 } else { 1.0 };
            let now = parameters.at(at.t_j);
            let p = &now.parameters;
            let (i_c, i_b) = (s * at.i, s * at.i_b);
            let u_be = s * at.v_be - p.base_resistance * i_b - p.emitter_resistance * (i_c + i_b);
            let u_ce = s * at.v - p.collector_resistance * i_c - p.emitter_resistance * (i_c + i_b);
            let is = now.currents(u_be, u_be - u_ce);
            let c = in_volts(is.i_c - i_c, is.di_c_dv_be.abs() + is.di_c_dv_bc.abs(), is.i_c);
            let b = in_volts(is.i_b - i_b, is.di_b_dv_be.abs() + is.di_b_dv_bc.abs(), is.i_b);
            let terminals = (at.v - (v(0) - v(2))).abs().max((at.v_be - (v(1) - v(2))).abs());
            c.max(b).max(terminals)
        }
    }
}

/// The voltage that explains a difference of currents at this slope; rounding of the current itself counts as none.
fn in_volts(difference: f64, slope: f64, current: f64) -> f64 {
    let rest = (difference.abs() - 1e-12 * current.abs() - 1e-21).max(0.0);
    if rest == 0.0 { 0.0 } else { rest / slope }
}

/// An ideal small-signal transistor: Ebers and Moll, nothing else.
pub fn ideal() -> Transistor {
    Transistor {
        saturation_current: 1e-14,
        emission_coefficient: 1.0,
        gain_forward: 200.0,
        gain_reverse: 4.0,
        early_voltage_forward: f64::INFINITY,
        early_voltage_reverse: f64::INFINITY,
        knee_current_forward: f64::INFINITY,
        emitter_leakage: 0.0,
        emitter_leakage_emission: 2.0,
        base_resistance: 0.0,
        collector_resistance: 0.0,
        emitter_resistance: 0.0,
        cutoff_current: 0.0,
        cutoff_e_fold: 14.4,
        energy_gap: 1.12,
        saturation_exponent: 3.0,
        gain_exponent: 1.5,
        gain_over_current: qsheaf::device::curve::Curve::ZERO,
        gain_over_temperature: qsheaf::device::curve::Curve::ZERO,
    }
}

/// A transistor with every effect the equations know.
pub fn full() -> Transistor {
    Transistor {
        early_voltage_forward: 74.0,
        early_voltage_reverse: 18.0,
        knee_current_forward: 0.3,
        emitter_leakage: 3e-13,
        emitter_leakage_emission: 1.9,
        base_resistance: 8.0,
        collector_resistance: 0.7,
        emitter_resistance: 0.12,
        cutoff_current: 2e-9,
        ..ideal()
    }
}

pub fn plain_diode() -> Diode {
    Diode {
        saturation_current: 2.5e-9,
        emission_coefficient: 1.75,
        series_resistance: 0.0,
        leakage: 0.0,
        leakage_e_fold: 14.4,
        breakdown_voltage: f64::INFINITY,
        breakdown_current: 5e-3,
        breakdown_slope: 0.05,
        breakdown_coefficient: 0.0,
        energy_gap: 1.11,
        saturation_exponent: 3.0,
    }
}

pub fn zener(volts: f64) -> Diode {
    Diode { breakdown_voltage: volts, breakdown_coefficient: 3e-4, series_resistance: 0.8, ..plain_diode() }
}

/// A lamp switch: 12.6 V, 10.5 Ω lamp, 4.6 V through 470 Ω into the base.
pub fn switch(parameters: Transistor) -> Net {
    let mut net = Net::default();
    net.supply(1, 0, 12.6);
    net.supply(2, 0, 4.6);
    net.resistor(1, 3, 100.0);
    net.resistor(2, 4, 4700.0);
    net.npn([3, 4, 0], parameters);
    net
}

/// A divider-biased stage with its four resistances, and an emitter follower after it.
pub fn two_stage(parameters: Transistor) -> Net {
    let mut net = Net::default();
    net.supply(1, 0, 12.0);
    net.resistor(1, 2, 82e3);
    net.resistor(2, 0, 15e3);
    net.resistor(1, 3, 4.7e3);
    net.resistor(4, 0, 1e3);
    net.npn([3, 2, 4], parameters);
    net.npn([1, 3, 5], parameters);
    net.resistor(5, 0, 2.2e3);
    net
}
