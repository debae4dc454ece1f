//! The search for extremes: where it starts, and what may be said of what it found.

use super::evaluate::Evaluator;
use super::{Extreme, Method, Miss, Options, Range, Response};

/// Up to so many axes every vertex is evaluated (2^7 points).
pub(super) const ALL_VERTICES: usize = 7;
/// Improvements below this share of the output's size are numerical noise.
const NOISE: f64 = 1e-9;
/// An axis matters if it moves the output by more than this share of the output's whole range.
const MATTERS: f64 = 1e-4;
/// An axis tells if it moves the output by more than this share of the output's whole range.
const TELLS: f64 = 0.05;
/// Changes below this share of the output's whole range are no rise and no fall.
const FLAT: f64 = 1e-6;
/// An output that varies by less than this share of its size is not searched for other hills.
const WORTHWHILE: f64 = 1e-2;
/// Points that the search for one end may add before it rests with what it has.
const BUDGET: usize = 600;
/// How often a search starts again from a corner that what it has seen points to.
const RESTARTS: usize = 4;

/// One end of one output.
pub(super) struct Goal {
    pub output: usize,
    pub highest: bool,
    /// Improvements up to this are none.
    pub noise: f64,
    /// Difference between the highest and the lowest value seen when the search began.
    pub range: f64,
    /// Number of points seen at which the search for this end goes on to no further hill, ridge or pair.
    pub until: usize,
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

/// How an output was seen to change along an axis.
#[derive(Clone, Copy, Default)]
struct Course {
    rises: bool,
    falls: bool,
    /// Its largest change in one step.
    most: f64,
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
    pub vertices: Vec<usize>,
    /// Indices of vertices from which each axis was flipped for all outputs.
    pub crossed: Vec<usize>,
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
    /// One end of an output; `None` where it has no value anywhere.
    fn end(&mut self, output: usize, highest: bool) -> Option<(Goal, Candidate)> {
        let best = self.best(output, highest)?;
        let (magnitude, range) = self.size(output);
        let noise = (NOISE * magnitude).max(f64::MIN_POSITIVE);
        let until = self.points.seen.len() + BUDGET;
        let goal = Goal { output, highest, noise, range, until };
        let nominal = self.points.nominal();
        if range <= 10.0 * noise {
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
            if self.conflicts(&goal) && range > WORTHWHILE * magnitude && !self.is_spent(&goal) {
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

    /// The extreme with its method and the axes that matter there.
    fn describe(&mut self, goal: &Goal, candidate: Candidate) -> Extreme {
        let at = self.points.seen[candidate.index].at.clone();
        if goal.range <= 10.0 * goal.noise {
            let (method, matters) = (Method::Exact, Vec::new());
            return Extreme { value: candidate.value, at, method, matters, telling: 0 };
        }
        let whole = self.courses_are_whole(goal, &at);
        let (matters, telling) = self.matters(goal, candidate);
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
        Extreme { value: candidate.value, at, method, matters, telling }
    }

    /// Whether the search for an end has added as many points as it may.
    pub fn is_spent(&self, goal: &Goal) -> bool {
        self.points.seen.len() >= goal.until
    }

    /// Notes a change of an output towards the high end of an axis.
    pub fn note(&mut self, goal: &Goal, axis: usize, change: f64) {
        if change.abs() > 10.0 * goal.noise + FLAT * goal.range {
            let course = &mut self.courses[goal.output][axis];
            course.rises |= change > 0.0;
            course.falls |= change < 0.0;
            course.most = course.most.max(change.abs());
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
        // Nominal lines were evaluated in full for all outputs at once.
        let brief = !self.goes_both_ways(goal, axis) && at != self.points.nominal();
        let mut last = None;
        let mut whole = true;
        for to in self.stops(axis, brief) {
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

    /// Whether an axis was seen to move an output by what matters.
    pub fn moved_anywhere(&self, goal: &Goal, axis: usize) -> bool {
        self.courses[goal.output][axis].most > MATTERS * goal.range
    }

    /// Whether an output was seen to rise and to fall along an axis.
    pub fn goes_both_ways(&self, goal: &Goal, axis: usize) -> bool {
        self.courses[goal.output][axis].goes_both_ways()
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
            there.is_none_or(|there| (there - candidate.value).abs() > goal.noise + MATTERS * goal.range)
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

    /// The axes whose change from a candidate moves the output, most first, and how many of them tell.
    fn matters(&mut self, goal: &Goal, candidate: Candidate) -> (Vec<usize>, usize) {
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
        let tells = effects.iter().filter(|(_, effect)| *effect > TELLS * goal.range).count();
        let telling = tells.max(effects.len().min(1));
        (effects.into_iter().map(|(axis, _)| axis).collect(), telling)
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
