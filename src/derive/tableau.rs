//! Equations as they are written down, one law each, and their solution (the sparse tableau of Hachtel, Brayton and
//! Gustavson, IEEE Trans. Circuit Theory 18, 1971: voltages and currents side by side, nothing eliminated beforehand).

use std::collections::BTreeMap;

use crate::numeric::dense;

use super::Node;

/// What an equation may ask for. A number is the index of a piece, or of a node.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Unknown {
    /// Voltage of a node against ground.
    Voltage(Node),
    /// Current through a two-terminal piece.
    Current(usize),
    BaseCurrent(usize),
    CollectorCurrent(usize),
    EmitterCurrent(usize),
}

/// The law behind an equation; the number is the index of a piece, or of a node.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Law {
    /// Kirchhoff's current law at a node.
    Currents(Node),
    /// Ohm's law.
    Ohm(usize),
    /// A source's voltage or current.
    Source(usize),
    /// A conducting junction's drop, a Zener's voltage, V_BE, or V_CE in saturation.
    Drop(usize),
    /// Nothing flows.
    Open(usize),
    /// I_C against I_B.
    Gain(usize),
    /// I_E against I_C and I_B.
    Emitter(usize),
    /// A matched twin's collector current.
    Match(usize),
}

/// Sum of coefficient times unknown = `right`.
#[derive(Clone, PartialEq, Debug)]
pub(super) struct Equation {
    pub law: Law,
    pub terms: Vec<(Unknown, f64)>,
    pub right: f64,
}

/// A value for every unknown, SI units.
pub type Values = BTreeMap<Unknown, f64>;

/// Pivots of equilibrated equations below this say that an unknown is not determined.
const LEAST_PIVOT: f64 = 1e-14;
/// What an equation may miss, as a share of its largest term, or of the largest term of all equations of its dimension.
const RESIDUAL: f64 = 1e-9;
const ROUNDING: f64 = 1e-13;

impl Equation {
    pub(super) fn new(law: Law, terms: impl IntoIterator<Item = (Unknown, f64)>, right: f64) -> Self {
        // The reference node has no voltage to ask for.
        let terms = terms.into_iter().filter(|(unknown, _)| *unknown != Unknown::Voltage(0)).collect();
        Equation { law, terms, right }
    }

    fn is_of_voltages(&self) -> bool {
        self.terms.iter().any(|(unknown, _)| matches!(unknown, Unknown::Voltage(_)))
    }

    /// Voltage of `plus` against `minus`, as terms.
    pub(super) fn difference(plus: Node, minus: Node) -> [(Unknown, f64); 2] {
        [(Unknown::Voltage(plus), 1.0), (Unknown::Voltage(minus), -1.0)]
    }
}

/// Kirchhoff's current law at every node but ground: `into[k]` are the currents that leave node k through pieces.
pub(super) fn node_laws(leaving: Vec<Vec<(Unknown, f64)>>) -> impl Iterator<Item = Equation> {
    leaving
        .into_iter()
        .enumerate()
        .skip(1)
        .filter(|(_, terms)| !terms.is_empty())
        .map(|(node, terms)| Equation::new(Law::Currents(node), terms, 0.0))
}

/// The unique solution of the equations, if there is one; every equation is seen to hold.
pub(super) fn solve(equations: &[Equation]) -> Option<Values> {
    let mut columns: BTreeMap<Unknown, usize> = BTreeMap::new();
    for (unknown, _) in equations.iter().flat_map(|equation| &equation.terms) {
        let next = columns.len();
        columns.entry(*unknown).or_insert(next);
    }
    let n = columns.len();
    if equations.len() != n {
        return None;
    }
    let mut matrix = vec![0.0; n * n];
    let mut right: Vec<f64> = equations.iter().map(|equation| equation.right).collect();
    for (row, equation) in equations.iter().enumerate() {
        for (unknown, coefficient) in &equation.terms {
            matrix[row * n + columns[unknown]] += coefficient;
        }
    }
    // Currents are orders of magnitude smaller than voltages: give every column the size one.
    let scale = equilibrate(&mut matrix, &mut right, n)?;
    dense::solve(&mut matrix, &mut right, LEAST_PIVOT).ok()?;
    let values: Values =
        columns.iter().map(|(unknown, &column)| (*unknown, right[column] * scale[column])).collect();
    hold(equations, &values).then_some(values)
}

/// Divides rows and then columns by their largest entries; gives what each unknown has to be multiplied by.
fn equilibrate(matrix: &mut [f64], right: &mut [f64], n: usize) -> Option<Vec<f64>> {
    for (row, right) in matrix.chunks_mut(n.max(1)).zip(right) {
        let largest = row.iter().fold(0.0_f64, |largest, value| largest.max(value.abs()));
        if largest == 0.0 {
            return None;
        }
        row.iter_mut().for_each(|value| *value /= largest);
        *right /= largest;
    }
    let mut scale = vec![0.0_f64; n];
    for (at, value) in matrix.iter().enumerate() {
        scale[at % n] = scale[at % n].max(value.abs());
    }
    for (at, value) in matrix.iter_mut().enumerate() {
        *value /= scale[at % n];
    }
    Some(scale.into_iter().map(|largest| 1.0 / largest).collect())
}

/// Whether every equation is seen to hold.
fn hold(equations: &[Equation], values: &Values) -> bool {
    let terms = |equation: &Equation| -> Vec<f64> {
        equation.terms.iter().map(|(unknown, factor)| factor * values[unknown]).collect()
    };
    let largest = |equation: &Equation| {
        terms(equation).iter().fold(equation.right.abs(), |largest, term| largest.max(term.abs()))
    };
    // Volts and amperes apart: what is nothing in the one may be much in the other.
    let mut overall = [0.0_f64; 2];
    for equation in equations {
        let most = &mut overall[usize::from(equation.is_of_voltages())];
        *most = most.max(largest(equation));
    }
    equations.iter().all(|equation| {
        let miss = (terms(equation).iter().sum::<f64>() - equation.right).abs();
        let noise = ROUNDING * overall[usize::from(equation.is_of_voltages())];
        miss <= (RESIDUAL * largest(equation)).max(noise)
    })
}
