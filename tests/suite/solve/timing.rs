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
    for cold in [false, true] {
        let start = (!cold).then_some(&first.solution);
        let each = quickest(|k| {
            let up = if k % 2 == 0 { 1.05 } else { 0.95 };
            for (branch, from) in net.branches.iter_mut().zip(&centre) {
                if let (Branch::Resistor { ohms }, Branch::Resistor { ohms: nominal }) = (branch, from) {
                    *ohms = nominal * up;
                }
            }
            plan.solve_into(&net.branches, 298.15, thermal, start, &mut scratch, &mut point).expect("solves");
        });
        let from = if cold { "from nothing" } else { "from a neighbour" };
        println!("{name}, {thermal:?}, {from}: {each} ns; {:?}", point.attempts);
    }
    let element = net.branches.iter().position(|b| matches!(b, Branch::Transistor { .. })).expect("one");
    let (branch, at) = (&net.branches[element], &point.elements[element]);
    println!(
        "{name}: region {} ns, {:?}",
        quickest(|_| assert!(region(branch, at).is_some())),
        region(branch, at)
    );
    for wanted in [Region::Active, Region::Saturated] {
        let each = quickest(|_| assert!(margin(wanted, branch, at).is_some()));
        println!("{name}: margin {wanted:?} {each} ns");
    }
}

/// The quickest of many rounds, in nanoseconds a call: what else the machine does stays out.
fn quickest(mut f: impl FnMut(usize)) -> u128 {
    let round = |f: &mut dyn FnMut(usize)| {
        let begin = Instant::now();
        (0..100).for_each(&mut *f);
        begin.elapsed().as_nanos() / 100
    };
    (0..200).map(|_| round(&mut f)).min().unwrap_or(0)
}

#[test]
#[ignore = "prints times"]
fn operating_points() {
    let mut saturated = switch(full());
    saturated.branches[3] = Branch::Resistor { ohms: 1e3 };
    for (name, mut net) in [("saturated switch", saturated), ("two stages", two_stage(full()))] {
        measure(name, &mut net, Thermal::ColdStart);
        for branch in &mut net.branches {
            if let Branch::Transistor { r_th, .. } = branch {
                *r_th = Some(250.0);
            }
        }
        measure(name, &mut net, Thermal::Equilibrium);
    }
}
