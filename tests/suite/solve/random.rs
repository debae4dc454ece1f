//! Laws that every network keeps, on random ones: the current rule at every node, every element's own law, Tellegen's
//! theorem; nothing is accepted that an independent check would refuse.

use qsheaf::device::transistor::Transistor;
use qsheaf::solve::{Attempt, Branch, Failure, OperatingPoint, Thermal};

use super::net::{Net, full, ideal, plain_diode, zener};

/// Numbers by counter (SplitMix64: Steele, Lea, Flood 2014).
struct Numbers(u64);

impl Numbers {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64
    }

    fn below(&mut self, count: usize) -> usize {
        (self.next() * count as f64) as usize % count
    }

    fn decades(&mut self, low: f64, high: f64) -> f64 {
        low * libm::pow(high / low, self.next())
    }

    fn transistor(&mut self) -> Transistor {
        let base = if self.next() < 0.3 { ideal() } else { full() };
        Transistor {
            saturation_current: self.decades(1e-16, 1e-12),
            gain_forward: self.decades(20.0, 800.0),
            gain_reverse: self.decades(0.5, 20.0),
            ..base
        }
    }
}

/// A node for a base or an anode: with `guard` one of its own behind a resistance, else any.
fn guarded(net: &mut Net, n: &mut Numbers, nodes: usize, guard: bool, least: f64) -> usize {
    let to = n.below(nodes);
    if !guard {
        return to;
    }
    let node = net.nodes;
    net.resistor(to, node, n.decades(least, 1e6));
    node
}

/// A network in which a resistor joins every node to an earlier one. With `guard` there is a resistance before every
/// base and every anode, as sensible networks have; without, junctions stand anywhere.
fn network(seed: u64, guard: bool) -> (Net, f64) {
    let mut n = Numbers(seed.wrapping_mul(0x5851_f42d_4c95_7f2d));
    let mut net = Net::default();
    let volts = 3.0 + 27.0 * n.next();
    net.supply(1, 0, volts);
    if n.next() < 0.4 {
        let sign = if n.next() < 0.5 { -1.0 } else { 1.0 };
        net.two(2, 0, Branch::Supply { volts: sign * (1.0 + 11.0 * n.next()), ohms: n.decades(0.01, 100.0) });
    }
    let held = net.nodes;
    let nodes = held + 2 + n.below(6);
    for node in held..nodes {
        let to = n.below(node);
        net.resistor(node, to, n.decades(10.0, 1e6));
    }
    for _ in 0..n.below(4) {
        let (a, b) = (n.below(nodes), n.below(nodes));
        if a != b {
            net.resistor(a, b, n.decades(0.1, 1e7));
        }
    }
    for _ in 0..1 + n.below(4) {
        let (collector, emitter) = (n.below(nodes), n.below(nodes));
        let base = guarded(&mut net, &mut n, nodes, guard, 10.0);
        let parameters = n.transistor();
        let terminals = [collector, base, emitter];
        if n.next() < 0.5 {
            net.npn(terminals, parameters)
        } else {
            net.pnp(terminals, parameters)
        };
    }
    for _ in 0..n.below(3) {
        let anode = guarded(&mut net, &mut n, nodes, guard, 1.0);
        let diode = if n.next() < 0.5 { plain_diode() } else { zener(3.0 + 12.0 * n.next()) };
        net.diode(anode, n.below(nodes), diode);
    }
    (net, 233.15 + 160.0 * n.next())
}

fn check(net: &Net, point: &OperatingPoint, seed: u64) {
    let residual = net.residual(point);
    assert!(residual < 1.0, "network {seed}: residual {residual} over its bound");
    assert!(point.error <= 1e-9 * point.voltages.iter().fold(1.0, |h: f64, v| h.max(v.abs())));
    // Tellegen 1952: what sources give is what the others take.
    let (mut sum, mut size) = (0.0, 0.0);
    for (element, at) in point.elements.iter().enumerate() {
        let by_nodes: f64 = net.elements[element]
            .terminals
            .iter()
            .zip(net.terminal_currents(point, element))
            .map(|(&node, current)| point.voltages[node] * current)
            .sum();
        sum += by_nodes;
        size += by_nodes.abs();
        assert!((at.p - by_nodes).abs() <= 1e-9 * (size + 1e-12), "network {seed}, element {element}");
    }
    assert!(sum.abs() <= 1e-9 * size + 1e-18, "network {seed}: {sum:e} of {size:e} W is lost");
}

/// Solves 1500 networks; failures, and how many found another solution from another start.
fn survey(guard: bool) -> (Vec<(u64, Failure)>, usize) {
    let (mut failed, mut differ) = (Vec::new(), 0);
    let mut ways = std::collections::BTreeMap::new();
    for seed in 0..1500 {
        let (net, ambient) = network(seed, guard);
        let plan = net.plan();
        let mut scratch = plan.scratch();
        let cold = Thermal::ColdStart;
        match plan.solve(&net.branches, ambient, cold, None, &mut scratch) {
            Err(failure) => failed.push((seed, failure)),
            Ok(point) => {
                check(&net, &point, seed);
                *ways.entry(point.attempts.clone()).or_insert(0) += 1;
                // From a solution 20 K warmer at another supply.
                let mut near = net.clone();
                near.branches[0] = Branch::Supply { volts: 3.0, ohms: 0.1 };
                if let Ok(start) = plan.solve(&near.branches, ambient + 20.0, cold, None, &mut scratch) {
                    let start = Some(&start.solution);
                    let again = plan.solve(&net.branches, ambient, cold, start, &mut scratch);
                    let again = again.unwrap_or_else(|failure| panic!("network {seed}: {failure:?}"));
                    check(&net, &again, seed);
                    let far = |(a, b): (&f64, &f64)| (a - b).abs() > 1e-8;
                    differ += usize::from(point.voltages.iter().zip(&again.voltages).any(far));
                }
            }
        }
    }
    println!("guard {guard}: {differ} differ; ways {ways:?}; failed {failed:?}");
    (failed, differ)
}

#[test]
fn sensible_networks_are_solved() {
    let (failed, differ) = survey(true);
    assert_eq!(failed, []);
    assert_eq!(differ, 0);
}

/// With junctions anywhere, some networks put junctions straight across a supply; what is
/// accepted is right all the same.
#[test]
fn any_network_is_right_or_fails() {
    let (failed, differ) = survey(false);
    let beyond = failed.iter().filter(|(_, failure)| matches!(failure, Failure::BeyondModel { .. })).count();
    assert!(failed.len() < 120 && beyond >= 20, "{beyond} of {}", failed.len());
    assert!(differ < 5, "{differ}");
}

/// Networks that plain Newton's method does not solve: source stepping and conductance stepping do.
#[test]
fn stepping_takes_over() {
    let mut ways = std::collections::BTreeSet::new();
    for seed in [1634, 2451, 2456, 2474, 4165, 4208, 12898, 12943] {
        let (net, ambient) = network(seed, true);
        let point = net.solve(ambient).unwrap_or_else(|failure| panic!("network {seed}: {failure:?}"));
        check(&net, &point, seed);
        ways.extend(point.attempts.last().copied());
    }
    assert!(
        ways.contains(&Attempt::SourceStepping) && ways.contains(&Attempt::ConductanceStepping),
        "{ways:?}"
    );
}
