//! Where searches start: points that every output shares, and other hills.

use super::search::{ALL_VERTICES, Candidate, Goal, Search};

/// Up to so many axes every combination of low end, middle and high end is evaluated (3^4 points).
const ALL_LEVELS: usize = 4;
/// Scattered vertices from which each axis is flipped, to see whether outputs go both ways.
const CROSSED: usize = 6;
/// How many other hills are climbed where an output rises and falls.
const HILLS: usize = 4;
/// How many points are asked whether they lie on another hill, at most.
const STARTS: usize = 16;
/// Points that differ by less than this share of every axis belong to one hill.
const APART: f64 = 0.3;

impl Search<'_> {
    /// Points that every output starts from: each axis through nominal, all vertices or a scatter of them, a scatter inside.
    pub fn seed(&mut self, nominal: &[f64]) {
        let varying = self.varying.clone();
        for &axis in &varying {
            for to in self.stops(axis, false) {
                self.points.moved(nominal, axis, to);
            }
        }
        if varying.len() <= ALL_VERTICES {
            for code in 0..1_usize << varying.len() {
                let index = self.vertex(nominal, |bit| code >> bit & 1 == 1);
                self.vertices.push(index);
            }
        } else {
            for row in 1..=2 * varying.len() {
                // Bits of van der Corput numbers in prime bases: no two rows alike, ends in balance.
                let index = self.vertex(nominal, |bit| scatter(row, bit) >= 0.5);
                if row <= CROSSED {
                    self.crossed.push(index);
                    let at = self.points.seen[index].at.clone();
                    for &axis in &varying {
                        for end in self.points.ends(axis) {
                            self.points.moved(&at, axis, end);
                        }
                    }
                }
            }
        }
        if varying.len() <= ALL_LEVELS {
            for code in 0..3_usize.pow(varying.len() as u32) {
                let mut at = nominal.to_vec();
                let mut digits = code;
                for &axis in &varying {
                    let [low, high] = self.points.ends(axis);
                    at[axis] = [low, (low + high) / 2.0, high][digits % 3];
                    digits /= 3;
                }
                self.points.point(&at);
            }
        } else {
            for row in 1..=varying.len() + 8 {
                let mut at = nominal.to_vec();
                for (bit, &axis) in varying.iter().enumerate() {
                    let [low, high] = self.points.ends(axis);
                    at[axis] = (low + scatter(row, bit) * (high - low)).clamp(low, high);
                }
                self.points.point(&at);
            }
        }
    }

    fn vertex(&mut self, nominal: &[f64], at_high: impl Fn(usize) -> bool) -> usize {
        let mut at = nominal.to_vec();
        for (bit, &axis) in self.varying.iter().enumerate() {
            at[axis] = self.points.ends(axis)[usize::from(at_high(bit))];
        }
        self.points.point(&at)
    }

    /// Evaluates the vertex to which the change along each axis through nominal points.
    pub fn nominal_corner(&mut self, nominal: &[f64], output: usize, highest: bool) -> usize {
        let mut corner = nominal.to_vec();
        for axis in self.varying.clone() {
            let ends = self.points.ends(axis);
            let values = ends.map(|end| {
                let index = self.points.moved(nominal, axis, end);
                self.points.of(index, output)
            });
            if let [Some(low), Some(high)] = values
                && low != high
            {
                corner[axis] = ends[usize::from((high > low) == highest)];
            }
        }
        self.points.point(&corner)
    }

    /// Climbs from further points, best first, that a valley parts from every top climbed so far: other hills.
    pub fn other_hills(&mut self, goal: &Goal, candidate: Candidate) -> Candidate {
        let mut order: Vec<Candidate> = self
            .points
            .seen
            .iter()
            .enumerate()
            .filter_map(|(index, seen)| {
                seen.outputs[goal.output].ok().map(|value| Candidate { index, value })
            })
            .collect();
        order.sort_by(|a, b| goal.gain(Some(b.value)).total_cmp(&goal.gain(Some(a.value))));
        let mut best = candidate;
        let mut tops = vec![candidate.index];
        let mut tried = vec![candidate.index];
        for start in order {
            if tops.len() > HILLS || tried.len() > STARTS || self.is_spent(goal) {
                break;
            }
            if !tried.iter().all(|&index| self.apart(index, start.index)) {
                continue;
            }
            tried.push(start.index);
            if tops.iter().any(|&top| self.on_one_hill(goal, start, top)) {
                continue;
            }
            // Scanned first: a flip may leap off the hill.
            let foot = self.inside(goal, start);
            let top = self.climb(goal, foot);
            tops.push(top.index);
            best = goal.better_of(best, Some(top));
        }
        best
    }

    /// Whether no valley lies between a point and a top (Ursem 1999): nothing on the way is worse than the point.
    fn on_one_hill(&mut self, goal: &Goal, start: Candidate, top: usize) -> bool {
        let from = self.points.seen[start.index].at.clone();
        let to = self.points.seen[top].at.clone();
        [1.0 / 3.0, 2.0 / 3.0].into_iter().all(|share| {
            let at: Vec<f64> = from
                .iter()
                .zip(&to)
                .map(|(from, to)| if from == to { *from } else { from + share * (to - from) })
                .collect();
            let gain = goal.gain(self.points.value(&at, goal.output));
            gain >= goal.gain(Some(start.value)) - goal.noise
        })
    }

    /// Whether two points differ by a good part of the width of some axis.
    fn apart(&self, one: usize, other: usize) -> bool {
        let (one, other) = (&self.points.seen[one].at, &self.points.seen[other].at);
        self.varying.iter().any(|&axis| (one[axis] - other[axis]).abs() > APART * self.points.width(axis))
    }
}

/// Number `row` of van der Corput's sequence in the base of axis `bit` (Halton 1960), scrambled by a multiplier so that high
/// bases do not run in step.
fn scatter(row: usize, bit: usize) -> f64 {
    const PRIMES: [usize; 24] =
        [2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47, 53, 59, 61, 67, 71, 73, 79, 83, 89];
    let base = PRIMES[bit % PRIMES.len()];
    let multiplier = base / 2 + usize::from(base > 3 && base % 4 == 3);
    let mut rest = row + 31 * (bit / PRIMES.len());
    let (mut value, mut share) = (0.0, 1.0 / base as f64);
    while rest > 0 {
        value += (rest % base * multiplier.max(1) % base) as f64 * share;
        rest /= base;
        share /= base as f64;
    }
    value
}
