//! Networks against `tests/reference/solve_networks.py` (scipy and mpmath, equations written apart), to 1e-9.

use qsheaf::device::{diode::Diode, transistor::Transistor};
use qsheaf::solve::{Branch, Class};
use serde::Deserialize;

use super::net::Net;

#[derive(Deserialize)]
struct Table {
    cases: Vec<Case>,
}

#[derive(Deserialize)]
struct Case {
    name: String,
    ambient: f64,
    elements: Vec<Element>,
    voltages: std::collections::BTreeMap<String, f64>,
    /// Element, I_C or forward current, I_B.
    currents: Vec<(usize, f64, f64)>,
    temperatures: Vec<(usize, f64)>,
}

#[derive(Deserialize)]
#[serde(tag = "kind", rename_all = "kebab-case")]
enum Element {
    Resistor { nodes: [String; 2], ohms: f64 },
    Supply { nodes: [String; 2], volts: f64 },
    Diode { nodes: [String; 2], parameters: Diode, r_th: Option<f64> },
    Npn { nodes: [String; 3], parameters: Transistor, r_th: Option<f64> },
    Pnp { nodes: [String; 3], parameters: Transistor, r_th: Option<f64> },
}

/// Difference as a share of the expected value.
fn off(is: f64, expected: f64, floor: f64) -> f64 {
    (is - expected).abs() / expected.abs().max(floor)
}

#[test]
fn networks_agree_with_an_independent_solution() {
    let table: Table =
        serde_json::from_str(include_str!("../../reference/solve_networks.json")).expect("the table is JSON");
    assert!(table.cases.len() >= 100, "{} cases", table.cases.len());
    let mut worst = (0.0, String::new());
    for case in &table.cases {
        let mut names = vec!["ground".to_owned()];
        let mut net = Net::default();
        for element in &case.elements {
            let (Element::Resistor { nodes, .. }
            | Element::Supply { nodes, .. }
            | Element::Diode { nodes, .. }) = element
            else {
                let (Element::Npn { nodes, parameters, r_th } | Element::Pnp { nodes, parameters, r_th }) =
                    element
                else {
                    unreachable!()
                };
                let terminals = nodes.each_ref().map(|name| node(&mut names, name));
                let pnp = matches!(element, Element::Pnp { .. });
                let k = if pnp { net.pnp(terminals, *parameters) } else { net.npn(terminals, *parameters) };
                set_r_th(&mut net.branches[k], *r_th);
                continue;
            };
            let [from, to] = nodes.each_ref().map(|name| node(&mut names, name));
            match element {
                Element::Resistor { ohms, .. } => net.resistor(from, to, *ohms),
                Element::Supply { volts, .. } => net.supply(from, to, *volts),
                Element::Diode { parameters, r_th, .. } => {
                    let k = net.diode(from, to, *parameters);
                    set_r_th(&mut net.branches[k], *r_th);
                    k
                }
                _ => unreachable!(),
            };
        }
        let point = net.hot(case.ambient).unwrap_or_else(|failure| panic!("{}: {failure:?}", case.name));
        assert!(net.residual(&point) < 1.0, "{}", case.name);
        let mut differences = Vec::new();
        for (name, &volts) in &case.voltages {
            // A node that is almost at ground beside the supply is known to so much of the highest voltage.
            differences.push(off(point.voltages[node(&mut names, name)], volts, 1e-6));
        }
        for &(element, i, i_b) in &case.currents {
            // The floor is the rounding of a cut-off junction's saturation and leakage currents.
            differences.push(off(point.elements[element].i, i, 1e-15));
            if net.elements[element].class == Class::Transistor {
                differences.push(off(point.elements[element].i_b, i_b, 1e-15));
            }
        }
        for &(element, t) in &case.temperatures {
            differences.push(off(point.elements[element].t_j, t, 1.0));
            assert!(point.elements[element].self_heated);
        }
        let most = differences.into_iter().fold(0.0, f64::max);
        if most > worst.0 {
            worst = (most, case.name.clone());
        }
        assert!(most < 1e-9, "{}: off by {most:e}", case.name);
    }
    println!("worst: {:e} in {}", worst.0, worst.1);
}

fn node(names: &mut Vec<String>, name: &str) -> usize {
    names.iter().position(|known| known == name).unwrap_or_else(|| {
        names.push(name.to_owned());
        names.len() - 1
    })
}

fn set_r_th(branch: &mut Branch, value: Option<f64>) {
    if let Branch::Transistor { r_th, .. } | Branch::Diode { r_th, .. } = branch {
        *r_th = value;
    }
}
