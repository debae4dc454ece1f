//! The search for extremes.

use std::collections::BTreeMap;

use super::evaluate::Evaluator;
use super::{Extreme, Method, Miss, Options, Range, Response};

/// Up to so many axes every vertex is evaluated (2^7 points).
const ALL_VERTICES: usize = 7;
/// Where an axis is scanned inside, as shares of its width; odd shares keep clear of symmetric coincidences.
const INSIDE: [f64; 5] = [0.13, 0.31, 0.5, 0.69, 0.87];
/// Rounds of flipping, scanning and refining before a search gives up improving.
const ROUNDS: usize = 16;
/// Improvements below this share of the output's size are numerical noise.
const NOISE: f64 = 1e-9;
/// An axis matters if it moves the output by more than this share of the output's whole range.
const MATTERS: f64 = 1e-4;
/// An interior extreme is refined to this share of its axis.
const REFINED: f64 = 1e-9;

/// Lowest and highest value of every output of a response over its whole space.
pub fn extremes(response: &dyn Response, options: &Options) -> Vec<Range> {
    let mut search =
        Search { points: Evaluator::new(response), varying: Vec::new(), shapes: BTreeMap::new() };
    search.varying = (0..search.points.axes.len())
        .filter(|&i| search.points.axes[i].low < search.points.axes[i].high)
        .collect();
    let nominal = search.points.nominal();
    let start = search.points.point(&nominal);
    search.cross(&nominal);
    if search.varying.len() <= ALL_VERTICES {
        search.vertices(&nominal);
    }
    let outputs = response.outputs();
    let wanted = |output: usize| options.wanted.get(output).copied().unwrap_or((true, true));
    // First every output takes its own corner, so that each search below starts from the best point that any output saw.
    for output in 0..outputs {
        for highest in [false, true] {
            let (min, max) = wanted(output);
            if if highest { max } else { min } {
                search.corner_by_signs(&nominal, output, highest);
            }
        }
    }
    let mut ranges = Vec::with_capacity(outputs);
    for output in 0..outputs {
        let (min, max) = wanted(output);
        let mut found = Found::default();
        let min = min.then(|| search.end(output, false, &mut found)).flatten();
        let max = max.then(|| search.end(output, true, &mut found)).flatten();
        ranges.push((min, max, found));
    }
    // Only now is it known where an output has no value, and which regions were met.
    let missing = search.missing(outputs);
    let nominals = &search.points.seen[start].outputs;
    ranges
        .into_iter()
        .zip(missing)
        .enumerate()
        .map(|(output, ((min, max, found), missing))| Range {
            nominal: nominals[output],
            min,
            max,
            interior: found.interior,
            non_monotone: found.non_monotone,
            missing,
            regions: search.points.regions.clone(),
        })
        .collect()
}

/// What a search notices on its way.
#[derive(Default)]
struct Found {
    interior: Vec<usize>,
    non_monotone: Vec<usize>,
}

fn add(list: &mut Vec<usize>, axis: usize) {
    if !list.contains(&axis) {
        list.push(axis);
        list.sort_unstable();
    }
}

struct Search<'a> {
    points: Evaluator<'a>,
    /// Axes that vary at all.
    varying: Vec<usize>,
    /// For each output: the axes that move it, seen on the cross through nominal and at corners.
    shapes: BTreeMap<usize, Vec<usize>>,
}

impl Search<'_> {
    /// Each axis scanned from its low to its high end through `centre`.
    fn cross(&mut self, centre: &[f64]) {
        for axis in self.varying.clone() {
            for to in self.line(axis) {
                self.points.moved(centre, axis, to);
            }
        }
    }

    /// Where an axis is evaluated: ends, nominal, inside.
    fn line(&self, axis: usize) -> Vec<f64> {
        let record = &self.points.axes[axis];
        let mut line = vec![record.low];
        line.extend(INSIDE.iter().map(|share| record.low + share * (record.high - record.low)));
        line.push(record.high);
        if record.nominal > record.low && record.nominal < record.high {
            line.push(record.nominal);
        }
        line.sort_by(f64::total_cmp);
        line.dedup();
        line
    }

    fn vertices(&mut self, nominal: &[f64]) {
        let varying = self.varying.clone();
        for code in 0..1_u32 << varying.len() {
            let mut at = nominal.to_vec();
            for (bit, &axis) in varying.iter().enumerate() {
                let record = &self.points.axes[axis];
                at[axis] = if code >> bit & 1 == 1 { record.high } else { record.low };
            }
            self.points.point(&at);
        }
    }

    /// Evaluates the vertex to which the change along each axis through `centre` points.
    fn corner_by_signs(&mut self, centre: &[f64], output: usize, highest: bool) -> Option<Vec<f64>> {
        let mut corner = centre.to_vec();
        for axis in self.varying.clone() {
            let record = &self.points.axes[axis];
            let (low, high) = (record.low, record.high);
            let low_at = self.points.moved(centre, axis, low);
            let high_at = self.points.moved(centre, axis, high);
            let (at_low, at_high) = (
                self.points.seen[low_at].outputs[output].ok()?,
                self.points.seen[high_at].outputs[output].ok()?,
            );
            corner[axis] = if at_low == at_high {
                centre[axis]
            } else if (at_high > at_low) == highest {
                high
            } else {
                low
            };
        }
        self.points.point(&corner);
        Some(corner)
    }

    /// The best point seen so far for an output.
    fn best(&self, output: usize, highest: bool) -> Option<(usize, f64)> {
        let mut best: Option<(usize, f64)> = None;
        for (index, seen) in self.points.seen.iter().enumerate() {
            if let Ok(value) = seen.outputs[output]
                && best.is_none_or(|(_, best)| better(value, best, highest, 0.0))
            {
                best = Some((index, value));
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

    /// One end of an output: from the best point seen, and from the corner that the signs there point to, until nothing moves.
    fn end(&mut self, output: usize, highest: bool, found: &mut Found) -> Option<Extreme> {
        let (mut index, mut value) = self.best(output, highest)?;
        let (magnitude, range) = self.size(output);
        let noise = (NOISE * magnitude).max(f64::MIN_POSITIVE);
        if range <= noise {
            let at = self.points.nominal();
            let value = self.points.value(&at, output)?;
            return Some(Extreme { value, at, method: Method::Exact, matters: Vec::new() });
        }
        for _ in 0..ROUNDS {
            let before = value;
            // Signs derived anew at the candidate.
            let at = self.points.seen[index].at.clone();
            if let Some(corner) = self.corner_by_signs(&at, output, highest)
                && let Some(there) = self.points.value(&corner, output)
                && better(there, value, highest, noise)
            {
                (index, value) = (self.points.point(&corner), there);
            }
            (index, value) = self.along_axes(output, highest, index, value, noise);
            if !better(value, before, highest, noise) {
                (index, value) = self.pairs(output, highest, index, value, noise);
            }
            if !better(value, before, highest, noise) {
                break;
            }
        }
        let at = self.points.seen[index].at.clone();
        let matters = self.matters(output, &at);
        let mut vertex = true;
        for &axis in &matters {
            // An axis that does not move the output rests at its nominal value; that is no interior extreme.
            let record = &self.points.axes[axis];
            if at[axis] > record.low && at[axis] < record.high {
                vertex = false;
                add(&mut found.interior, axis);
            }
        }
        let monotone = self.monotone(output, &at, &matters, noise, found);
        let method = if monotone && vertex {
            Method::Monotone
        } else if vertex && self.varying.len() <= ALL_VERTICES {
            Method::Vertices
        } else {
            Method::Searched
        };
        Some(Extreme { value, at, method, matters })
    }

    /// Moves along one axis at a time, inside too, and refines what lies inside.
    fn along_axes(
        &mut self,
        output: usize,
        highest: bool,
        mut index: usize,
        mut value: f64,
        noise: f64,
    ) -> (usize, f64) {
        for axis in self.varying.clone() {
            let at = self.points.seen[index].at.clone();
            let line = if self.moves(output, &at, axis, noise) {
                self.line(axis)
            } else {
                continue;
            };
            let mut values: Vec<(f64, usize, Option<f64>)> = Vec::with_capacity(line.len());
            for to in line {
                let there = self.points.moved(&at, axis, to);
                values.push((to, there, self.points.seen[there].outputs[output].ok()));
            }
            let best = (0..values.len())
                .filter(|&i| values[i].2.is_some())
                .max_by(|&a, &b| signed(values[a].2, highest).total_cmp(&signed(values[b].2, highest)));
            let Some(best) = best else { continue };
            let Some(there) = values[best].2 else { continue };
            if better(there, value, highest, noise) {
                (index, value) = (values[best].1, there);
            }
            if best > 0 && best + 1 < values.len() && !better(value, there, highest, noise) {
                let bracket = (values[best - 1].0, values[best + 1].0);
                let (refined, there) = self.refine(output, highest, &at, axis, bracket);
                if there.is_some_and(|there| better(there, value, highest, noise)) {
                    (index, value) = (refined, there.unwrap_or(value));
                }
            }
        }
        (index, value)
    }

    /// Whether flipping an axis at a point moves an output; an axis that does not is neither scanned nor paired.
    fn moves(&mut self, output: usize, at: &[f64], axis: usize, noise: f64) -> bool {
        if self.shapes.get(&output).is_some_and(|axes| axes.contains(&axis)) {
            return true;
        }
        let here = self.points.value(at, output);
        let record = &self.points.axes[axis];
        let ends = [record.low, record.high];
        let nominal = self.points.nominal();
        let (_, range) = self.size(output);
        let least = noise.max(MATTERS * 1e-2 * range);
        let mut moved = false;
        for to in ends {
            let there = self.points.moved(at, axis, to);
            let there = self.points.seen[there].outputs[output].ok();
            moved |= here.zip(there).is_none_or(|(a, b)| (a - b).abs() > least);
        }
        if !moved {
            // Two opposite changes may cancel between the ends; the cross through nominal saw the inside.
            let line = self.line(axis);
            let centre = self.points.value(&nominal, output);
            for to in line {
                let there = self.points.moved(&nominal, axis, to);
                let there = self.points.seen[there].outputs[output].ok();
                moved |= centre.zip(there).is_some_and(|(a, b)| (a - b).abs() > least);
            }
        }
        if moved {
            let axes = self.shapes.entry(output).or_default();
            add(axes, axis);
        }
        moved
    }

    /// Golden-section search inside a bracket of one axis (Kiefer 1953).
    fn refine(
        &mut self,
        output: usize,
        highest: bool,
        at: &[f64],
        axis: usize,
        (mut low, mut high): (f64, f64),
    ) -> (usize, Option<f64>) {
        const SHARE: f64 = 0.618_033_988_749_894_9;
        let width = self.points.axes[axis].high - self.points.axes[axis].low;
        let probe = |search: &mut Self, to: f64| {
            let there = search.points.moved(at, axis, to);
            (there, search.points.seen[there].outputs[output].ok())
        };
        let (mut left, mut right) = (high - SHARE * (high - low), low + SHARE * (high - low));
        let (mut at_left, mut at_right) = (probe(self, left), probe(self, right));
        while high - low > REFINED.sqrt() * width {
            if signed(at_left.1, highest) >= signed(at_right.1, highest) {
                (high, right, at_right) = (right, left, at_left);
                left = high - SHARE * (high - low);
                at_left = probe(self, left);
            } else {
                (low, left, at_left) = (left, right, at_right);
                right = low + SHARE * (high - low);
                at_right = probe(self, right);
            }
        }
        if signed(at_left.1, highest) >= signed(at_right.1, highest) { at_left } else { at_right }
    }

    /// Flips two axes at once: what single changes cannot reach.
    fn pairs(&mut self, output: usize, highest: bool, index: usize, value: f64, noise: f64) -> (usize, f64) {
        if self.varying.len() <= ALL_VERTICES {
            return (index, value);
        }
        let at = self.points.seen[index].at.clone();
        let axes: Vec<usize> = self
            .varying
            .iter()
            .copied()
            .filter(|&axis| self.shapes.get(&output).is_some_and(|s| s.contains(&axis)))
            .collect();
        let mut best = (index, value);
        for (i, &one) in axes.iter().enumerate() {
            for &other in &axes[i + 1..] {
                let mut point = at.clone();
                for axis in [one, other] {
                    let record = &self.points.axes[axis];
                    let middle = (record.low + record.high) / 2.0;
                    point[axis] = if at[axis] < middle { record.high } else { record.low };
                }
                let there = self.points.point(&point);
                if let Ok(found) = self.points.seen[there].outputs[output]
                    && better(found, best.1, highest, noise)
                {
                    best = (there, found);
                }
            }
        }
        best
    }

    /// The axes whose change from a point moves the output, most first.
    fn matters(&mut self, output: usize, at: &[f64]) -> Vec<usize> {
        let Some(here) = self.points.value(at, output) else { return Vec::new() };
        let mut effects = Vec::new();
        for axis in self.varying.clone() {
            let record = &self.points.axes[axis];
            let mut effect = 0.0_f64;
            for to in [record.low, record.high] {
                let there = self.points.moved(at, axis, to);
                // Where the other end has no value at all, the axis matters most.
                let change = self.points.seen[there].outputs[output]
                    .map_or(f64::INFINITY, |there| (there - here).abs());
                effect = effect.max(change);
            }
            effects.push((axis, effect));
        }
        let (_, range) = self.size(output);
        effects.retain(|(_, effect)| *effect > MATTERS * range);
        effects.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.cmp(&b.0)));
        effects.into_iter().map(|(axis, _)| axis).collect()
    }

    /// Whether the output rises or falls throughout along each axis that matters, through nominal and through `at`. Notes
    /// each axis along which it does both.
    fn monotone(
        &mut self,
        output: usize,
        at: &[f64],
        matters: &[usize],
        noise: f64,
        found: &mut Found,
    ) -> bool {
        let nominal = self.points.nominal();
        let mut all = true;
        for &axis in matters {
            let mut direction = 0.0_f64;
            for base in [&nominal[..], at] {
                let mut last: Option<f64> = None;
                for to in self.line(axis) {
                    let there = self.points.moved(base, axis, to);
                    let Ok(value) = self.points.seen[there].outputs[output] else {
                        all = false;
                        continue;
                    };
                    if let Some(last) = last {
                        let change = value - last;
                        if change.abs() > noise {
                            if direction * change < 0.0 {
                                all = false;
                                add(&mut found.non_monotone, axis);
                            }
                            direction = change.signum();
                        }
                    }
                    last = Some(value);
                }
            }
        }
        all
    }

    /// For each output the first point at which it has no value.
    fn missing(&self, outputs: usize) -> Vec<Option<(Miss, Vec<f64>)>> {
        (0..outputs)
            .map(|output| {
                self.points
                    .seen
                    .iter()
                    .find_map(|seen| seen.outputs[output].err().map(|miss| (miss, seen.at.clone())))
            })
            .collect()
    }
}

fn better(value: f64, than: f64, highest: bool, by: f64) -> bool {
    if highest { value > than + by } else { value < than - by }
}

/// A value such that greater is better; worst where there is none.
fn signed(value: Option<f64>, highest: bool) -> f64 {
    value.map_or(f64::NEG_INFINITY, |value| if highest { value } else { -value })
}
