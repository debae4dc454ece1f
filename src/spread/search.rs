//! The search for extremes: where it starts, and what may be said of what it found.

use super::evaluate::Evaluator;
use super::{Extreme, Method, Miss, Options, Range, Response};

/// Up to so many axes every vertex is evaluated (2^7 points).
const ALL_VERTICES: usize = 7;
/// Up to so many axes every combination of low end, middle and high end is evaluated (3^4 points).
const ALL_LEVELS: usize = 4;
/// Scattered vertices from which each axis is flipped, to see whether outputs go both ways.
const CROSSED: usize = 6;
/// Improvements below this share of the output's size are numerical noise.
const NOISE: f64 = 1e-9;
/// An axis matters if it moves the output by more than this share of the output's whole range.
const MATTERS: f64 = 1e-4;
/// Changes below this share of the output's whole range are no rise and no fall.
const FLAT: f64 = 1e-6;
/// How often a search starts again from a corner that what it has seen points to.
const RESTARTS: usize = 4;
/// How many other hills are climbed where an output rises and falls.
const HILLS: usize = 4;
/// How many points are asked whether they lie on another hill, at most.
const STARTS: usize = 48;
/// Points that differ by less than this share of every axis belong to one hill.
const APART: f64 = 0.3;

/// One end of one output.
pub(super) struct Goal {
    pub output: usize,
    pub highest: bool,
    /// Improvements up to this are none.
    pub noise: f64,
    /// Difference between the highest and the lowest value seen when the search began.
    pub range: f64,
}

/// A point that may be the extreme.
#[derive(Clone, Copy)]
pub(super) struct Candidate {
    pub index: usize,
    pub value: f64,
}

impl Goal {
    /// A value such that greater is better; worst where there is none.
    pub fn gain(&self, value: Option<f64>) -> f64 {
        value.map_or(f64::NEG_INFINITY, |value| if self.highest { value } else { -value })
    }

    /// Whether a candidate is better than another by more than noise.
    pub fn improves(&self, candidate: Candidate, than: Candidate) -> bool {
        self.gain(Some(candidate.value)) > self.gain(Some(than.value)) + self.noise
    }

    /// The other candidate if it is better by more than noise, else the first.
    pub fn better_of(&self, first: Candidate, other: Option<Candidate>) -> Candidate {
        other.filter(|&other| self.improves(other, first)).unwrap_or(first)
    }
}

/// Whether an output was seen to rise and to fall along an axis.
#[derive(Clone, Copy, Default)]
struct Course {
    rises: bool,
    falls: bool,
}

impl Course {
    fn goes_both_ways(self) -> bool {
        self.rises && self.falls
    }
}

pub(super) struct Search<'a> {
    pub points: Evaluator<'a>,
    /// Axes that vary at all.
    pub varying: Vec<usize>,
    /// Indices of all vertices, where they were all evaluated: bit i of the position is the end of the i-th varying axis.
    vertices: Vec<usize>,
    /// Indices of vertices from which each axis was flipped for all outputs.
    crossed: Vec<usize>,
    /// For each output and axis.
    courses: Vec<Vec<Course>>,
}

/// Lowest and highest value of every output of a response over its whole space.
pub fn extremes(response: &dyn Response, options: &Options) -> Vec<Range> {
    let outputs = response.outputs();
    let points = Evaluator::new(response);
    let axes = points.axes;
    let mut search = Search {
        varying: (0..axes.len()).filter(|&axis| axes[axis].low < axes[axis].high).collect(),
        vertices: Vec::new(),
        crossed: Vec::new(),
        courses: vec![vec![Course::default(); axes.len()]; outputs],
        points,
    };
    let nominal = search.points.nominal();
    let start = search.points.point(&nominal);
    search.seed(&nominal);
    let ends: Vec<(usize, bool)> = (0..outputs)
        .flat_map(|output| {
            let (min, max) = options.wanted.get(output).copied().unwrap_or((true, true));
            [min.then_some((output, false)), max.then_some((output, true))]
        })
        .flatten()
        .collect();
    // First every output takes its own corner, so that each search below starts from the best point that any output saw.
    for &(output, highest) in &ends {
        search.nominal_corner(&nominal, output, highest);
    }
    let searched: Vec<Option<(Goal, Candidate)>> =
        ends.iter().map(|&(output, highest)| search.end(output, highest)).collect();
    // What one end shows of an output tells how the other was established; so this comes last.
    let mut found: Vec<[Option<Extreme>; 2]> = vec![[None, None]; outputs];
    for (goal, candidate) in searched.into_iter().flatten() {
        found[goal.output][usize::from(goal.highest)] = Some(search.describe(&goal, candidate));
    }
    found
        .into_iter()
        .enumerate()
        .map(|(output, [min, max])| {
            let interior = search.interior([&min, &max]);
            Range {
                nominal: search.points.seen[start].outputs[output],
                min,
                max,
                interior,
                non_monotone: search.non_monotone(output),
                // Only now is it known where an output has no value, and which regions were met.
                missing: search.missing(output),
                regions: search.points.regions.clone(),
            }
        })
        .collect()
}

impl Search<'_> {
    /// Points that every output starts from: each axis through nominal, all vertices or a scatter of them, a scatter inside.
    fn seed(&mut self, nominal: &[f64]) {
        let varying = self.varying.clone();
        for &axis in &varying {
            for to in self.stops(axis) {
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
    fn nominal_corner(&mut self, nominal: &[f64], output: usize, highest: bool) -> usize {
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

    /// One end of an output; `None` where it has no value anywhere.
    fn end(&mut self, output: usize, highest: bool) -> Option<(Goal, Candidate)> {
        let best = self.best(output, highest)?;
        let (magnitude, range) = self.size(output);
        let noise = (NOISE * magnitude).max(f64::MIN_POSITIVE);
        let goal = Goal { output, highest, noise, range };
        let nominal = self.points.nominal();
        if range <= noise {
            let index = self.points.point(&nominal);
            let flat = self.points.of(index, output).map(|value| Candidate { index, value });
            return Some((goal, flat.unwrap_or(best)));
        }
        self.note_seeds(&goal);
        let corner = self.nominal_corner(&nominal, output, highest);
        let corner = self.points.of(corner, output).map(|value| Candidate { index: corner, value });
        let mut candidate = self.climb(&goal, corner.unwrap_or(best));
        if goal.improves(best, candidate) {
            candidate = self.climb(&goal, best);
        }
        self.note_opposite(&goal, candidate);
        for _ in 0..RESTARTS {
            let before = candidate;
            if self.conflicts(&goal) {
                // Again, since pairs are flipped only where the output is known to go both ways.
                candidate = self.climb(&goal, candidate);
                candidate = self.other_hills(&goal, candidate);
            }
            let pointed = self.corner_of_courses(&goal, candidate);
            let seen = self.best(output, highest);
            for start in [pointed, seen].into_iter().flatten() {
                if goal.improves(start, candidate) {
                    candidate = self.climb(&goal, start);
                }
            }
            if !goal.improves(candidate, before) {
                break;
            }
        }
        Some((goal, candidate))
    }

    /// Climbs from further points, best first, that a valley parts from every top climbed so far: other hills.
    fn other_hills(&mut self, goal: &Goal, candidate: Candidate) -> Candidate {
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
            if tops.len() > HILLS || tried.len() > STARTS {
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
        [0.25, 0.5, 0.75].into_iter().all(|share| {
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

    /// The extreme with its method and the axes that matter there.
    fn describe(&mut self, goal: &Goal, candidate: Candidate) -> Extreme {
        let at = self.points.seen[candidate.index].at.clone();
        if goal.range <= goal.noise {
            return Extreme { value: candidate.value, at, method: Method::Exact, matters: Vec::new() };
        }
        let whole = self.courses_are_whole(goal, &at);
        let matters = self.matters(goal, candidate);
        let at_ends = |axis: &usize| self.points.ends(*axis).contains(&at[*axis]);
        let vertex = matters.iter().all(at_ends);
        let pointed = self.corner_of_courses(goal, candidate);
        let is_pointed_to =
            pointed.is_some_and(|corner| (corner.value - candidate.value).abs() <= goal.noise);
        let method = if vertex && whole && is_pointed_to && !self.conflicts(goal) {
            Method::Monotone
        } else if vertex && self.varying.len() <= ALL_VERTICES {
            Method::Vertices
        } else {
            Method::Searched
        };
        Extreme { value: candidate.value, at, method, matters }
    }

    /// Notes a change of an output towards the high end of an axis.
    pub fn note(&mut self, goal: &Goal, axis: usize, change: f64) {
        if change.abs() > goal.noise + FLAT * goal.range {
            let course = &mut self.courses[goal.output][axis];
            course.rises |= change > 0.0;
            course.falls |= change < 0.0;
        }
    }

    /// Notes the changes along each axis through nominal and along the edges between all vertices.
    fn note_seeds(&mut self, goal: &Goal) {
        let nominal = self.points.nominal();
        for (bit, axis) in self.varying.clone().into_iter().enumerate() {
            self.line_is_whole(goal, &nominal, axis);
            for index in self.crossed.clone() {
                let at = self.points.seen[index].at.clone();
                self.note_edge(goal, &at, axis);
            }
            for code in (0..self.vertices.len()).filter(|code| code >> bit & 1 == 0) {
                let ends = [self.vertices[code], self.vertices[code | 1 << bit]];
                if let [Some(low), Some(high)] = ends.map(|index| self.points.of(index, goal.output)) {
                    self.note(goal, axis, high - low);
                }
            }
        }
    }

    /// Notes the changes along one axis through a point; false where the output has no value on the way.
    fn line_is_whole(&mut self, goal: &Goal, at: &[f64], axis: usize) -> bool {
        let mut last = None;
        let mut whole = true;
        for to in self.stops(axis) {
            let index = self.points.moved(at, axis, to);
            let value = self.points.of(index, goal.output);
            whole &= value.is_some();
            if let (Some(last), Some(value)) = (last, value) {
                self.note(goal, axis, value - last);
            }
            last = value.or(last);
        }
        whole
    }

    /// Notes the changes along each axis that moves the output, through nominal and through a point.
    fn courses_are_whole(&mut self, goal: &Goal, at: &[f64]) -> bool {
        let nominal = self.points.nominal();
        let mut whole = true;
        for axis in self.varying.clone() {
            if self.moved_anywhere(goal, axis) {
                whole &= self.line_is_whole(goal, &nominal, axis);
                whole &= self.line_is_whole(goal, at, axis);
            }
        }
        whole
    }

    /// Whether an axis was seen to move an output at all.
    pub fn moved_anywhere(&self, goal: &Goal, axis: usize) -> bool {
        let course = self.courses[goal.output][axis];
        course.rises || course.falls
    }

    /// Whether an output both rises and falls along any axis.
    pub fn conflicts(&self, goal: &Goal) -> bool {
        self.courses[goal.output].iter().any(|course| course.goes_both_ways())
    }

    /// Whether an axis is worth scanning at a candidate: it moves the output there or does so through nominal.
    pub fn moves(&mut self, goal: &Goal, candidate: Candidate, axis: usize) -> bool {
        if self.moved_anywhere(goal, axis) {
            return true;
        }
        let at = self.points.seen[candidate.index].at.clone();
        self.points.ends(axis).into_iter().any(|end| {
            let index = self.points.moved(&at, axis, end);
            let there = self.points.of(index, goal.output);
            there.is_none_or(|there| (there - candidate.value).abs() > goal.noise + FLAT * goal.range)
        })
    }

    /// The vertex to which everything seen of an output points, the axes along which it goes both ways as in the candidate.
    fn corner_of_courses(&mut self, goal: &Goal, candidate: Candidate) -> Option<Candidate> {
        let mut corner = self.points.seen[candidate.index].at.clone();
        for axis in self.varying.clone() {
            let course = self.courses[goal.output][axis];
            if course.rises != course.falls {
                corner[axis] = self.points.ends(axis)[usize::from(course.rises == goal.highest)];
            }
        }
        let index = self.points.point(&corner);
        self.points.of(index, goal.output).map(|value| Candidate { index, value })
    }

    /// Notes the changes along each axis at the corner opposite to a candidate, where signs differ if they do anywhere.
    fn note_opposite(&mut self, goal: &Goal, candidate: Candidate) {
        let mut corner = self.points.seen[candidate.index].at.clone();
        let axes: Vec<usize> =
            self.varying.iter().copied().filter(|&axis| self.moved_anywhere(goal, axis)).collect();
        for &axis in &axes {
            let [low, high] = self.points.ends(axis);
            corner[axis] = if corner[axis] < (low + high) / 2.0 { high } else { low };
        }
        for axis in axes {
            self.note_edge(goal, &corner, axis);
        }
    }

    /// Notes the change from end to end of one axis through a point.
    fn note_edge(&mut self, goal: &Goal, at: &[f64], axis: usize) {
        let values = self.points.ends(axis).map(|end| {
            let index = self.points.moved(at, axis, end);
            self.points.of(index, goal.output)
        });
        if let [Some(low), Some(high)] = values {
            self.note(goal, axis, high - low);
        }
    }

    /// The best point seen so far for an output.
    fn best(&self, output: usize, highest: bool) -> Option<Candidate> {
        let mut best: Option<Candidate> = None;
        for (index, seen) in self.points.seen.iter().enumerate() {
            let Ok(value) = seen.outputs[output] else { continue };
            if best.is_none_or(|best| if highest { value > best.value } else { value < best.value }) {
                best = Some(Candidate { index, value });
            }
        }
        best
    }

    /// Size of an output over all points seen: largest magnitude and range.
    fn size(&self, output: usize) -> (f64, f64) {
        let values = || self.points.seen.iter().filter_map(|seen| seen.outputs[output].ok());
        let low = values().fold(f64::INFINITY, f64::min);
        let high = values().fold(f64::NEG_INFINITY, f64::max);
        (low.abs().max(high.abs()), high - low)
    }

    /// The axes whose change from a candidate moves the output, most first.
    fn matters(&mut self, goal: &Goal, candidate: Candidate) -> Vec<usize> {
        let at = self.points.seen[candidate.index].at.clone();
        let mut effects = Vec::new();
        for axis in self.varying.clone() {
            let mut effect = 0.0_f64;
            for to in self.points.ends(axis) {
                let index = self.points.moved(&at, axis, to);
                // Where the other end has no value at all, the axis matters most.
                let there = self.points.of(index, goal.output);
                effect = effect.max(there.map_or(f64::INFINITY, |there| (there - candidate.value).abs()));
            }
            effects.push((axis, effect));
        }
        effects.retain(|(_, effect)| *effect > MATTERS * goal.range);
        effects.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.cmp(&b.0)));
        effects.into_iter().map(|(axis, _)| axis).collect()
    }

    /// Axes that matter and strictly inside of which an extreme lies. An axis that does not move the output rests anywhere.
    fn interior(&self, extremes: [&Option<Extreme>; 2]) -> Vec<usize> {
        let mut inside: Vec<usize> = extremes
            .into_iter()
            .flatten()
            .flat_map(|extreme| extreme.matters.iter().map(|&axis| (axis, extreme.at[axis])))
            .filter(|&(axis, at)| !self.points.ends(axis).contains(&at))
            .map(|(axis, _)| axis)
            .collect();
        inside.sort_unstable();
        inside.dedup();
        inside
    }

    fn non_monotone(&self, output: usize) -> Vec<usize> {
        let courses = self.courses[output].iter().enumerate();
        courses.filter(|(_, course)| course.goes_both_ways()).map(|(axis, _)| axis).collect()
    }

    /// The first point at which an output has no value.
    fn missing(&self, output: usize) -> Option<(Miss, Vec<f64>)> {
        let missing =
            |seen: &super::evaluate::Seen| seen.outputs[output].err().map(|miss| (miss, seen.at.clone()));
        self.points.seen.iter().find_map(missing)
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
