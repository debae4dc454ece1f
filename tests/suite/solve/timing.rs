//! How long one operating point takes. Prints; run with `--ignored --nocapture`.

use std::time::Instant;

use qsheaf::solve::{Branch, Region, Thermal, margin, region};

use super::net::{Net, full, switch, two_stage};

/// Nanoseconds an operating point takes when each start is a neighbour that differs by a corner step.
fn measure(name: &str, net: &mut Net, thermal: Thermal) {
    let plan = net.plan();
    let mut scratch = plan.scratch();
    let centre = net.branches.clone();
    let first = plan.solve(&centre, 298.15, thermal, None, &mut scratch).expect("solves");
    let mut point = plan.blank();
    let count = 20_000;
    for cold in [false, true] {
        let begin = Instant::now();
        let mut regions = 0;
        for k in 0..count {
            let up = if k % 2 == 0 { 1.05 } else { 0.95 };
            for (branch, from) in net.branches.iter_mut().zip(&centre) {
                if let (Branch::Resistor { ohms }, Branch::Resistor { ohms: nominal }) = (branch, from) {
                    *ohms = nominal * up;
                }
            }
            let start = (!cold).then_some(&first.solution);
            plan.solve_into(&net.branches, 298.15, thermal, start, &mut scratch, &mut point).expect("solves");
            regions += usize::from(region(&net.branches[4], &point.elements[4]) == Some(Region::Saturated));
        }
        let each = begin.elapsed().as_nanos() / count;
        println!(
            "{name}, {thermal:?}, {}: {each} ns an operating point; {regions} saturated, {:?}",
            if cold { "from nothing" } else { "from a neighbour" },
            point.attempts,
        );
    }
    let element = net.branches.iter().position(|b| matches!(b, Branch::Transistor { .. })).expect("one");
    for wanted in [Region::Active, Region::Saturated] {
        let begin = Instant::now();
        let mut sum = 0.0;
        for _ in 0..count {
            sum += margin(wanted, &net.branches[element], &point.elements[element]).expect("has a margin");
        }
        let each = begin.elapsed().as_nanos() / count;
        println!("{name}: margin {wanted:?} {each} ns; {}", sum / count as f64);
    }
}

#[test]
#[ignore = "prints times"]
fn operating_points() {
    for mut net in [switch(full()), two_stage(full())] {
        let name = if net.branches.len() == 5 { "switch" } else { "two stages" };
        measure(name, &mut net, Thermal::ColdStart);
        for branch in &mut net.branches {
            if let Branch::Transistor { r_th, .. } = branch {
                *r_th = Some(250.0);
            }
        }
        measure(name, &mut net, Thermal::Equilibrium);
    }
}
