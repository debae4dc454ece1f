//! The search for extremes.

use super::climb::Climb;
use super::design::{self, ALL_VERTICES, SCAN};
use super::points::{Goal, Points};
use super::{Extreme, Method, Options, Range, Response};

/// Values of an output that differ by less than this share of its magnitude are equal: numerical noise of the solver.
const NOISE: f64 = 1e-9;
/// Improvements below this share of an output's whole range are not pursued: no verdict depends on them.
const LEAST: f64 = 1e-7;
/// An axis matters if it moves the output by more than this share of the output's whole range.
pub(super) const MATTERS: f64 = 1e-4;
/// So many of the points that no neighbour beats are starts, among vertices and on a grid.
const STARTS: usize = 4;
/// A grid spans so many axes at most.
const GRID_AXES: usize = 3;
/// All corners of so many axes that turn are starts, where there are too many axes for all vertices.
const CORNER_AXES: usize = 7;

/// Lowest and highest value of every output of a response over its whole space.
pub fn extremes(response: &dyn Response, options: &Options) -> Vec<Range> {
    let mut search = Search::new(response);
    let outputs = response.outputs();
    let goals: Vec<Goal> = (0..outputs)
        .flat_map(|output| [false, true].map(|highest| Goal { output, highest }))
        .filter(|goal| {
            let (min, max) = options.wanted.get(goal.output).copied().unwrap_or((true, true));
            if goal.highest { max } else { min }
        })
        .collect();
    let mut found: Vec<Option<usize>> = goals.iter().map(|goal| search.end(*goal)).collect();
    // What was evaluated for other outputs may be better still.
    for (goal, found) in goals.iter().zip(&mut found) {
        *found = search.once_more(*goal, *found);
    }
    let ends: Vec<Option<Told>> =
        goals.iter().zip(&found).map(|(goal, found)| found.map(|at| search.tell(*goal, at))).collect();
    let mut ranges: Vec<Range> = (0..outputs).map(|output| search.empty(output)).collect();
    for (goal, told) in goals.iter().zip(ends) {
        let (Some(told), Some(range)) = (told, ranges.get_mut(goal.output)) else { continue };
        add_all(&mut range.interior, &told.interior);
        add_all(&mut range.non_monotone, &told.non_monotone);
        let slot = if goal.highest { &mut range.max } else { &mut range.min };
        *slot = Some(told.extreme);
    }
    ranges
}

/// Changes of every output from the low to the high end of every axis, the others at their nominal values; `None` where
/// the output has no value at an end. One row an output.
pub fn sensitivities(response: &dyn Response) -> Vec<Vec<Option<f64>>> {
    let mut points = Points::new(response);
    let nominal = points.point(points.axes.iter().map(|axis| axis.nominal).collect());
    let ends: Vec<(usize, usize)> = (0..points.axes.len())
        .map(|axis| {
            let (low, high) = (points.axes[axis].low, points.axes[axis].high);
            (points.moved(nominal, axis, low), points.moved(nominal, axis, high))
        })
        .collect();
    let change = |(low, high): &(usize, usize), output: usize| {
        Some(points.value(*high, output).ok()? - points.value(*low, output).ok()?)
    };
    (0..response.outputs()).map(|output| ends.iter().map(|end| change(end, output)).collect()).collect()
}

fn add_all(list: &mut Vec<usize>, axes: &[usize]) {
    list.extend(axes);
    list.sort_unstable();
    list.dedup();
}

/// What is told of an extreme.
struct Told {
    extreme: Extreme,
    interior: Vec<usize>,
    non_monotone: Vec<usize>,
}

/// What was seen along one axis through the nominal point, for one output.
#[derive(Clone, Copy, Default)]
pub(super) struct Across {
    /// Highest less lowest value.
    pub reach: f64,
    /// The output both rises and falls.
    pub bent: bool,
    /// High end less low end.
    pub effect: f64,
}

pub(super) struct Search<'a> {
    pub points: Points<'a>,
    /// Axes that vary at all.
    pub varying: Vec<usize>,
    nominal: usize,
    /// Evaluated vertices of the design with their levels, one an entry of `varying`.
    vertices: Vec<(usize, Vec<f64>)>,
    /// For each output, one entry an axis.
    across: Vec<Vec<Across>>,
}

/// Whether changes of both signs were seen.
struct Signs {
    least: f64,
    up: bool,
    down: bool,
}

impl Signs {
    fn add(&mut self, change: f64) {
        self.up |= change > self.least;
        self.down |= change < -self.least;
    }
}

impl<'a> Search<'a> {
    fn new(response: &'a dyn Response) -> Search<'a> {
        let mut points = Points::new(response);
        let varying: Vec<usize> =
            (0..points.axes.len()).filter(|&axis| points.axes[axis].low < points.axes[axis].high).collect();
        let nominal = points.point(points.axes.iter().map(|axis| axis.nominal).collect());
        let mut search = Search { points, varying, nominal, vertices: Vec::new(), across: Vec::new() };
        for axis in search.varying.clone() {
            for to in search.line(axis) {
                search.points.moved(nominal, axis, to);
            }
        }
        for levels in design::vertices(search.varying.len()) {
            let shares: Vec<f64> = levels.iter().map(|level| (level + 1.0) / 2.0).collect();
            let index = search.at_shares(&shares);
            search.vertices.push((index, levels));
        }
        for shares in design::scattered(search.varying.len()) {
            search.at_shares(&shares);
        }
        search.across = (0..response.outputs()).map(|output| search.look_across(output)).collect();
        search
    }

    /// Whether every vertex was evaluated.
    pub fn all_vertices(&self) -> bool {
        self.varying.len() <= ALL_VERTICES
    }

    /// The point at the given share of each varying axis.
    fn at_shares(&mut self, shares: &[f64]) -> usize {
        let mut at = self.points.at(self.nominal).to_vec();
        for (&axis, share) in self.varying.iter().zip(shares) {
            let record = &self.points.axes[axis];
            at[axis] =
                if *share == 1.0 { record.high } else { record.low + share * (record.high - record.low) };
        }
        self.points.point(at)
    }

    /// Where an axis is scanned, in order: both ends, inside, nominal.
    pub fn line(&self, axis: usize) -> Vec<f64> {
        let record = &self.points.axes[axis];
        let mut line = vec![record.low, record.high, record.nominal];
        line.extend(SCAN.iter().map(|share| record.low + share * (record.high - record.low)));
        line.retain(|value| *value >= record.low && *value <= record.high);
        line.sort_by(f64::total_cmp);
        line.dedup();
        line
    }

    fn look_across(&self, output: usize) -> Vec<Across> {
        let least = self.noise(output);
        (0..self.points.axes.len())
            .map(|axis| {
                if !self.varying.contains(&axis) {
                    return Across::default();
                }
                let values = self.values_along(self.nominal, axis, output);
                let low = values.iter().copied().fold(f64::INFINITY, f64::min);
                let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
                let effect = match (values.first(), values.last()) {
                    (Some(first), Some(last)) => last - first,
                    _ => 0.0,
                };
                Across { reach: (high - low).max(0.0), bent: is_bent(&values, least), effect }
            })
            .collect()
    }

    /// Values of an output at the evaluated points of a line through `from`, in order; those without a value left out.
    fn values_along(&self, from: usize, axis: usize, output: usize) -> Vec<f64> {
        let mut line = self.line(axis);
        let record = &self.points.axes[axis];
        let width = record.high - record.low;
        for share in super::climb::GLANCE {
            line.extend([record.low + share * width, record.high - share * width]);
        }
        line.push(self.points.at(from)[axis]);
        line.sort_by(f64::total_cmp);
        line.dedup();
        line.into_iter()
            .filter_map(|to| self.points.known(from, axis, to))
            .filter_map(|index| self.points.value(index, output).ok())
            .collect()
    }

    /// The least change of an output that counts.
    pub fn noise(&self, output: usize) -> f64 {
        let (range, magnitude) = self.points.size(output);
        (NOISE * magnitude).max(LEAST * range).max(f64::MIN_POSITIVE)
    }

    pub fn range(&self, output: usize) -> f64 {
        self.points.size(output).0
    }

    pub fn across(&self, output: usize, axis: usize) -> Across {
        self.across[output][axis]
    }

    /// Searches one end of an output: index of the best point.
    fn end(&mut self, goal: Goal) -> Option<usize> {
        let first = self.starts(goal).into_iter().next()?;
        if self.is_flat(goal.output) {
            return Some(self.nominal).filter(|&nominal| self.points.value(nominal, goal.output).is_ok());
        }
        let mut best = Climb::new(self, goal).from(first);
        let matters = self.matters(goal.output, best);
        let turning = self.turning(goal.output, best, &matters);
        // Where all axes but one move the output the same way everywhere, the climb has scanned the only line there is.
        if turning.len() < 2 {
            return Some(best);
        }
        let mut starts = self.starts(goal);
        starts.extend(self.vertices_on_top(goal));
        let levels = if turning.len() < GRID_AXES { 7 } else { 4 };
        starts.extend(self.grid_tops(goal, best, &turning[..turning.len().min(GRID_AXES)], levels));
        if turning.len() > GRID_AXES && !self.all_vertices() {
            starts.extend(self.grid_tops(goal, best, &turning[..turning.len().min(CORNER_AXES)], 2));
        }
        for start in starts.into_iter().filter(|&start| start != first) {
            let found = Climb::new(self, goal).from(start);
            if self.points.score(found, goal) > self.points.score(best, goal) {
                best = found;
            }
        }
        Some(best)
    }

    fn is_flat(&self, output: usize) -> bool {
        let (range, magnitude) = self.points.size(output);
        range <= NOISE * magnitude
    }

    /// Where to start, best first: the best point seen; the vertex to which the signs through nominal point; the vertex to
    /// which the signs over the whole design point.
    fn starts(&mut self, goal: Goal) -> Vec<usize> {
        let Some(best) = self.points.best(goal) else { return Vec::new() };
        let mut starts = vec![best];
        if !self.all_vertices() {
            let through_nominal: Vec<f64> =
                self.varying.iter().map(|&axis| self.across[goal.output][axis].effect).collect();
            starts.push(self.corner(goal, best, &through_nominal));
            let over_design = self.design_effects(goal.output);
            starts.push(self.corner(goal, best, &over_design));
        }
        self.best_first(&mut starts, goal);
        starts
    }

    /// With all vertices known, the best of those that no neighbour beats; otherwise the best of the design.
    fn vertices_on_top(&self, goal: Goal) -> Vec<usize> {
        let mut starts = if self.all_vertices() {
            self.tops(goal)
        } else {
            self.vertices.iter().map(|(index, _)| *index).collect()
        };
        self.best_first(&mut starts, goal);
        starts.truncate(STARTS);
        starts
    }

    /// The best points of a grid of so many levels over some axes, the other axes as at `from`: those that no neighbour on
    /// the grid beats.
    fn grid_tops(&mut self, goal: Goal, from: usize, axes: &[usize], levels: usize) -> Vec<usize> {
        let size = levels.pow(axes.len() as u32);
        let mut grid = Vec::with_capacity(size);
        for code in 0..size {
            let mut at = self.points.at(from).to_vec();
            for (place, &axis) in axes.iter().enumerate() {
                let step = code / levels.pow(place as u32) % levels;
                let record = &self.points.axes[axis];
                at[axis] = record.low + (record.high - record.low) * step as f64 / (levels - 1) as f64;
            }
            grid.push(self.points.point(at));
        }
        let score = |code: usize| grid.get(code).map(|&index| self.points.score(index, goal));
        let mut tops: Vec<usize> = (0..size)
            .filter(|&code| {
                (0..axes.len()).all(|place| {
                    let stride = levels.pow(place as u32);
                    let step = code / stride % levels;
                    (step == 0 || score(code) >= score(code - stride))
                        && (step + 1 == levels || score(code) >= score(code + stride))
                })
            })
            .map(|code| grid[code])
            .collect();
        self.best_first(&mut tops, goal);
        tops.truncate(STARTS);
        tops
    }

    fn best_first(&self, starts: &mut Vec<usize>, goal: Goal) {
        starts.retain(|&start| self.points.value(start, goal.output).is_ok());
        starts.sort_by(|a, b| {
            self.points.score(*b, goal).total_cmp(&self.points.score(*a, goal)).then(a.cmp(b))
        });
        starts.dedup();
    }

    /// Axes among those that matter along which an output was seen to rise and to fall: on lines through nominal,
    /// `at` and both best points seen, on lines beside it as far as they were evaluated, on every edge between vertices if all are known. In
    /// the order of `matters`.
    fn turning(&self, output: usize, at: usize, matters: &[usize]) -> Vec<usize> {
        let least = self.noise(output);
        let bends = self.range(output) * MATTERS;
        let mut turning: Vec<usize> = self
            .varying
            .iter()
            .enumerate()
            .filter(|&(bit, &axis)| {
                let nominal = self.across[output][axis];
                if nominal.bent && nominal.reach > bends {
                    return true;
                }
                if !matters.contains(&axis) {
                    return false;
                }
                if is_bent(&self.values_along(at, axis, output), least) {
                    return true;
                }
                let mut signs = Signs { least: bends.max(least), up: false, down: false };
                signs.add(nominal.effect);
                signs.add(self.effect_at(at, axis, output));
                for highest in [false, true] {
                    if let Some(best) = self.points.best(Goal { output, highest }) {
                        signs.add(self.effect_at(best, axis, output));
                    }
                }
                if self.all_vertices() {
                    (0..self.vertices.len()).filter(|code| code >> bit & 1 == 0).for_each(|code| {
                        signs.add(self.edge(code, bit, output));
                    });
                } else {
                    for &other in matters.iter().filter(|&&other| other != axis) {
                        let record = &self.points.axes[other];
                        for to in [record.low, record.high] {
                            if let Some(beside) = self.points.known(at, other, to) {
                                signs.add(self.effect_at(beside, axis, output));
                            }
                        }
                    }
                }
                signs.up && signs.down
            })
            .map(|(_, &axis)| axis)
            .collect();
        turning.sort_by_key(|axis| matters.iter().position(|other| other == axis).unwrap_or(matters.len()));
        turning
    }

    /// Change of an output along an edge between two vertices.
    fn edge(&self, code: usize, bit: usize, output: usize) -> f64 {
        let value = |code: usize| {
            self.vertices.get(code).and_then(|(index, _)| self.points.value(*index, output).ok())
        };
        value(code | 1 << bit).zip(value(code)).map_or(0.0, |(high, low)| high - low)
    }

    /// Change of an output from the low to the high end of an axis through a point, where both ends were evaluated.
    fn effect_at(&self, at: usize, axis: usize, output: usize) -> f64 {
        let record = &self.points.axes[axis];
        let value =
            |to: f64| self.points.known(at, axis, to).and_then(|index| self.points.value(index, output).ok());
        value(record.high).zip(value(record.low)).map_or(0.0, |(high, low)| high - low)
    }

    /// Vertices that no neighbouring vertex beats; all vertices were evaluated in the order of their levels as binary digits.
    fn tops(&self, goal: Goal) -> Vec<usize> {
        let score = |code: usize| self.vertices.get(code).map(|(index, _)| self.points.score(*index, goal));
        (0..self.vertices.len())
            .filter(|&code| {
                (0..self.varying.len()).all(|bit| score(code) >= score(code ^ 1 << bit))
                    && score(code).is_some_and(|score| score > f64::NEG_INFINITY)
            })
            .map(|code| self.vertices[code].0)
            .collect()
    }

    /// Average change of an output from low to high, over the design; one entry an entry of `varying`.
    fn design_effects(&self, output: usize) -> Vec<f64> {
        let mut effects = vec![0.0; self.varying.len()];
        for (index, levels) in &self.vertices {
            if let Ok(value) = self.points.value(*index, output) {
                effects.iter_mut().zip(levels).for_each(|(effect, level)| *effect += level * value);
            }
        }
        effects.iter().map(|sum| 2.0 * sum / self.vertices.len().max(1) as f64).collect()
    }

    /// The vertex to which effects point; an axis without effect stays where `from` has it, so that outputs share corners.
    fn corner(&mut self, goal: Goal, from: usize, effects: &[f64]) -> usize {
        let noise = self.noise(goal.output);
        let mut at = self.points.at(from).to_vec();
        for (&axis, effect) in self.varying.iter().zip(effects) {
            let record = &self.points.axes[axis];
            if effect.abs() > noise {
                at[axis] = if (*effect > 0.0) == goal.highest { record.high } else { record.low };
            } else if at[axis] > record.low && at[axis] < record.high {
                at[axis] = record.low;
            }
        }
        self.points.point(at)
    }

    /// Climbs again where a point evaluated for another output is better than what was found.
    fn once_more(&mut self, goal: Goal, found: Option<usize>) -> Option<usize> {
        let best = self.points.best(goal)?;
        let found = found?;
        let noise = self.noise(goal.output);
        if self.points.score(best, goal) <= self.points.score(found, goal) + noise {
            return Some(found);
        }
        Some(Climb::new(self, goal).from(best))
    }

    /// An output of which no end was sought yet.
    fn empty(&self, output: usize) -> Range {
        Range {
            nominal: self.points.value(self.nominal, output),
            min: None,
            max: None,
            interior: Vec::new(),
            non_monotone: Vec::new(),
            missing: self.points.missing(output),
            regions: self.points.regions.clone(),
        }
    }

    /// The axes whose change from a point moves the output, most first.
    fn matters(&mut self, output: usize, index: usize) -> Vec<usize> {
        let here = self.points.value(index, output).unwrap_or(0.0);
        let mut effects = Vec::new();
        for axis in self.varying.clone() {
            let record = &self.points.axes[axis];
            let mut effect = 0.0_f64;
            for to in [record.low, record.high] {
                let there = self.points.moved(index, axis, to);
                // Where the other end has no value at all, the axis matters most.
                let change =
                    self.points.value(there, output).map_or(f64::INFINITY, |there| (there - here).abs());
                effect = effect.max(change);
            }
            effects.push((axis, effect));
        }
        let least = self.noise(output).max(MATTERS * self.range(output));
        effects.retain(|(_, effect)| *effect > least);
        effects.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.cmp(&b.0)));
        effects.into_iter().map(|(axis, _)| axis).collect()
    }

    /// How an end was established, and what was noticed there.
    fn tell(&mut self, goal: Goal, index: usize) -> Told {
        let output = goal.output;
        let value = self.points.value(index, output).unwrap_or(f64::NAN);
        let at = self.points.at(index).to_vec();
        let missing = self.points.missing(output).is_some();
        if self.is_flat(output) && !missing {
            let extreme = Extreme { value, at, method: Method::Exact, matters: Vec::new() };
            return Told { extreme, interior: Vec::new(), non_monotone: Vec::new() };
        }
        let matters = self.matters(output, index);
        let inside = |axis: usize| {
            let record = &self.points.axes[axis];
            at[axis] > record.low && at[axis] < record.high
        };
        let interior: Vec<usize> = matters.iter().copied().filter(|&axis| inside(axis)).collect();
        let non_monotone = self.turning(output, index, &matters);
        let vertex = interior.is_empty() && !missing;
        let method = if vertex && non_monotone.is_empty() {
            Method::Monotone
        } else if vertex && self.all_vertices() {
            Method::Vertices
        } else {
            Method::Searched
        };
        Told { extreme: Extreme { value, at, method, matters }, interior, non_monotone }
    }
}

/// Whether values rise somewhere and fall somewhere, each by more than `least` in all.
fn is_bent(values: &[f64], least: f64) -> bool {
    let mut values = values.iter().copied();
    let Some(first) = values.next() else { return false };
    // Lowest and highest value so far: a rise counts from the lowest before it, a fall from the highest.
    let (mut low, mut high) = (first, first);
    let (mut rises, mut falls) = (false, false);
    for value in values {
        rises |= value - low > least;
        falls |= high - value > least;
        low = low.min(value);
        high = high.max(value);
    }
    rises && falls
}
