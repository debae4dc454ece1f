//! One search from one start: flips, scans, pairs, until nothing moves.

use super::line::{self, Sample};
use super::points::Goal;
use super::search::{MATTERS, Search};

/// Rounds before a climb gives up improving.
const ROUNDS: usize = 24;
/// Where an axis is looked at from one of its ends, as shares of its width; a closer look follows where that end is not
/// plainly the best of the line.
pub(super) const GLANCE: [f64; 3] = [0.03, 0.35, 0.7];
/// A pair of axes is flipped only if the effect of both is seen to vary by more than this share of what flipping costs.
const COUPLED: f64 = 0.2;
/// How far an axis is moved, as a share of its width, while those inside are set anew.
const NUDGE: f64 = 0.02;

pub(super) struct Climb<'s, 'a> {
    search: &'s mut Search<'a>,
    goal: Goal,
}

impl<'s, 'a> Climb<'s, 'a> {
    pub fn new(search: &'s mut Search<'a>, goal: Goal) -> Climb<'s, 'a> {
        Climb { search, goal }
    }

    /// Index of the point at which nothing moves any more.
    pub fn from(mut self, start: usize) -> usize {
        let mut here = start;
        for _ in 0..ROUNDS {
            let before = here;
            here = self.flips(here);
            here = self.inside(here);
            here = self.onward(before, here);
            if self.gains(here, before) {
                continue;
            }
            here = before;
            here = self.pairs(here);
            if here == before {
                here = self.nudges(here);
            }
            if here == before {
                break;
            }
        }
        here
    }

    fn score(&self, index: usize) -> f64 {
        self.search.points.score(index, self.goal)
    }

    fn gains(&self, there: usize, here: usize) -> bool {
        self.score(there) > self.score(here) + self.search.noise(self.goal.output)
    }

    fn ends(&self, axis: usize) -> [f64; 2] {
        let record = &self.search.points.axes[axis];
        [record.low, record.high]
    }

    fn is_inside(&self, index: usize, axis: usize) -> bool {
        let at = self.search.points.at(index)[axis];
        let [low, high] = self.ends(axis);
        at > low && at < high
    }

    /// Derives the sign of every axis at the point anew: all that gain by a flip are flipped together; where that gains less
    /// than the best single flip, that one alone. Repeats until none gains.
    fn flips(&mut self, mut here: usize) -> usize {
        for _ in 0..2 * self.search.varying.len() + 2 {
            let mut together = self.search.points.at(here).to_vec();
            let mut best = here;
            for axis in self.search.varying.clone() {
                let mut top = here;
                for to in self.ends(axis) {
                    let there = self.search.points.moved(here, axis, to);
                    if self.gains(there, top) {
                        top = there;
                        together[axis] = to;
                    }
                }
                if self.score(top) > self.score(best) {
                    best = top;
                }
            }
            if best == here {
                return here;
            }
            let all = self.search.points.point(together);
            here = if self.score(all) > self.score(best) { all } else { best };
        }
        here
    }

    /// Scans each axis inside, one after the other.
    fn inside(&mut self, mut here: usize) -> usize {
        for axis in self.search.varying.clone() {
            if self.effect(here, axis) > MATTERS * self.search.range(self.goal.output) {
                here = self.along(here, axis);
            }
        }
        here
    }

    /// The largest change that moving an axis is known to make: to its ends from here, or through nominal.
    fn effect(&mut self, here: usize, axis: usize) -> f64 {
        let output = self.goal.output;
        let Ok(value) = self.search.points.value(here, output) else { return f64::INFINITY };
        let mut effect = self.search.across(output, axis).reach;
        for to in self.ends(axis) {
            let there = self.search.points.moved(here, axis, to);
            let change = self.search.points.value(there, output).map_or(f64::INFINITY, |v| (v - value).abs());
            effect = effect.max(change);
        }
        effect
    }

    /// The best point along one axis.
    fn along(&mut self, here: usize, axis: usize) -> usize {
        let goal = self.goal;
        let at = self.search.points.at(here).to_vec();
        if self.is_plain(here, axis) {
            return here;
        }
        let mut ts = self.search.line(axis);
        ts.push(at[axis]);
        ts.sort_by(f64::total_cmp);
        ts.dedup();
        let line = |t: f64| {
            let mut point = at.clone();
            point[axis] = t;
            point
        };
        let noise = self.search.noise(goal.output);
        let points = &mut self.search.points;
        let samples: Vec<Sample> = ts.iter().map(|&t| line::sample(points, goal, &line, t)).collect();
        match line::best(points, goal, &line, &samples, noise) {
            Some(best) if best.score > self.score(here) + noise => best.index,
            _ => here,
        }
    }

    /// Whether a glance along an axis shows that the end where the point stands is the best of the line: the score falls
    /// throughout, no device changes its region, nothing bends through nominal, no parabola points to a peak near the end.
    fn is_plain(&mut self, here: usize, axis: usize) -> bool {
        let output = self.goal.output;
        if self.is_inside(here, axis) || self.search.across(output, axis).bent {
            return false;
        }
        let from = self.search.points.at(here)[axis];
        let [low, high] = self.ends(axis);
        let width = high - low;
        let noise = self.search.noise(output);
        let shares = GLANCE.into_iter().chain([1.0]);
        let mut samples = vec![Sample { t: 0.0, index: here, score: self.score(here) }];
        for share in shares {
            // Written so that the same point is met from either end.
            let to = match (from == low, share == 1.0) {
                (true, true) => high,
                (true, false) => low + share * width,
                (false, true) => low,
                (false, false) => high - share * width,
            };
            let index = self.search.points.moved(here, axis, to);
            if self.search.points.code(index) != self.search.points.code(here) {
                return false;
            }
            samples.push(Sample { t: share, index, score: self.score(index) });
        }
        let falls = samples.windows(2).all(|pair| match pair {
            [a, b] => b.score <= a.score + noise,
            _ => true,
        });
        let peak = match samples[..] {
            [a, b, c, ..] => line::peak(&[a, b, c]),
            _ => None,
        };
        falls && peak.is_none_or(|(t, gain)| t <= 0.0 || t >= GLANCE[0] || gain <= noise)
    }

    /// Goes on in the direction in which a round has moved, as long as that gains (Powell 1964): what follows a ridge that
    /// lies across the axes.
    fn onward(&mut self, from: usize, here: usize) -> usize {
        if !self.gains(here, from) {
            return here;
        }
        let at = self.search.points.at(here).to_vec();
        let mut step: Vec<f64> =
            at.iter().zip(self.search.points.at(from)).map(|(to, from)| to - from).collect();
        let mut reach = f64::INFINITY;
        for (axis, step) in step.iter_mut().enumerate() {
            let record = &self.search.points.axes[axis];
            let room = if *step > 0.0 { record.high - at[axis] } else { record.low - at[axis] };
            if *step == 0.0 || room == 0.0 {
                *step = 0.0;
            } else {
                reach = reach.min(room / *step);
            }
        }
        if step.iter().filter(|step| **step != 0.0).count() < 2 || !reach.is_finite() {
            return here;
        }
        let line = |t: f64| -> Vec<f64> { at.iter().zip(&step).map(|(at, step)| at + t * step).collect() };
        let goal = self.goal;
        let noise = self.search.noise(goal.output);
        let points = &mut self.search.points;
        let mut samples = vec![Sample { t: 0.0, index: here, score: points.score(here, goal) }];
        let mut t = 0.5_f64;
        loop {
            t = t.min(reach);
            let next = line::sample(points, goal, &line, t);
            let rises = samples.last().is_some_and(|last| next.score > last.score);
            samples.push(next);
            if !rises || t == reach {
                break;
            }
            t *= 3.0;
        }
        match line::best(points, goal, &line, &samples, noise) {
            Some(best) if best.score > points.score(here, goal) => best.index,
            _ => here,
        }
    }

    /// Flips two axes at once: what single changes cannot reach. With all vertices known there is nothing to find.
    fn pairs(&mut self, here: usize) -> usize {
        if self.search.all_vertices() {
            return here;
        }
        let axes = self.coupled(here);
        let mut best = here;
        for (i, &(one, one_to)) in axes.iter().enumerate() {
            for &(other, other_to) in &axes[i + 1..] {
                let mut point = self.search.points.at(here).to_vec();
                point[one] = one_to;
                point[other] = other_to;
                let there = self.search.points.point(point);
                if self.gains(there, best) {
                    best = there;
                }
            }
        }
        best
    }

    /// Axes with the end to flip to, whose effect depends on where the other axes stand: the change from end to end here
    /// against that through nominal. If it depends on nothing, flipping a second axis cannot make it pay.
    fn coupled(&mut self, here: usize) -> Vec<(usize, f64)> {
        let output = self.goal.output;
        let noise = self.search.noise(output);
        let mut found = Vec::new();
        for axis in self.search.varying.clone() {
            let [low, high] = self.ends(axis);
            let (at_low, at_high) =
                (self.search.points.moved(here, axis, low), self.search.points.moved(here, axis, high));
            let to = if self.search.points.at(here)[axis] < (low + high) / 2.0 { high } else { low };
            let effect =
                match (self.search.points.value(at_low, output), self.search.points.value(at_high, output)) {
                    (Ok(low), Ok(high)) => high - low,
                    _ => f64::INFINITY,
                };
            let varies = (effect - self.search.across(output, axis).effect).abs();
            if varies > noise && varies > COUPLED * effect.abs() {
                found.push((axis, to));
            }
        }
        found
    }

    /// At a point inside some axes: moves each other axis a little, sets the inner one anew, and goes on in that direction
    /// if it gains. This follows a ridge with a sharp edge, on which every single axis only falls.
    fn nudges(&mut self, here: usize) -> usize {
        let output = self.goal.output;
        let least = MATTERS * self.search.range(output);
        let mut matter = Vec::new();
        for axis in self.search.varying.clone() {
            if self.effect(here, axis) > least {
                matter.push(axis);
            }
        }
        let inner: Vec<usize> = matter.iter().copied().filter(|&axis| self.is_inside(here, axis)).collect();
        for &inside in &inner {
            for &axis in matter.iter().filter(|&&axis| axis != inside) {
                let [low, high] = self.ends(axis);
                let at = self.search.points.at(here)[axis];
                for to in [at - NUDGE * (high - low), at + NUDGE * (high - low)] {
                    let to = to.max(low).min(high);
                    if to == at {
                        continue;
                    }
                    let nudged = self.search.points.moved(here, axis, to);
                    let there = self.along(nudged, inside);
                    if self.gains(there, here) {
                        return self.onward(here, there);
                    }
                }
            }
        }
        here
    }
}
