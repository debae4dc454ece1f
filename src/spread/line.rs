//! Searching along one line of the space: scanning an axis, refining what lies between its points.

use super::search::{Candidate, Goal, Search};

/// Where an axis is scanned inside, as shares of its width. The outer two tell whether the output still improves inwards from
/// an end; the others keep clear of symmetric coincidences.
const INSIDE: [f64; 5] = [0.003, 0.21, 0.47, 0.76, 0.997];
/// The same where everything seen of an output goes one way along the axis.
const BRIEF: [f64; 3] = [0.003, 0.47, 0.997];
/// Where another line is scanned, as shares of its length.
const ALONG: [f64; 6] = [0.003, 0.03, 0.15, 0.4, 0.7, 1.0];
/// A kink or jump is located to this share of the line.
const REFINED: f64 = 1e-9;
/// Evaluations after which a refinement rests with what it has.
const MOST_STEPS: usize = 90;
/// The greater share of a golden section.
const GOLDEN: f64 = 0.618_033_988_749_894_9;

/// One point of a line: parameter, index of the point seen, value such that greater is better (`-∞` where there is none).
#[derive(Clone, Copy)]
struct Probe {
    t: f64,
    index: usize,
    gain: f64,
}

impl Search<'_> {
    /// Where an axis is evaluated: ends, nominal, inside; or, briefly, next to the ends and once between.
    pub fn stops(&self, axis: usize, brief: bool) -> Vec<f64> {
        let record = &self.points.axes[axis];
        let inside = if brief { &BRIEF[..] } else { &INSIDE[..] };
        let mut stops = vec![record.low];
        stops.extend(inside.iter().map(|share| record.low + share * (record.high - record.low)));
        stops.push(record.high);
        if !brief && record.nominal > record.low && record.nominal < record.high {
            stops.push(record.nominal);
        }
        stops.sort_by(f64::total_cmp);
        stops.dedup();
        stops
    }

    /// The best point of the line along one axis through a candidate.
    pub fn scan(&mut self, goal: &Goal, candidate: Candidate, axis: usize) -> Candidate {
        let at = self.points.seen[candidate.index].at.clone();
        let brief = !self.goes_both_ways(goal, axis) && self.points.ends(axis).contains(&at[axis]);
        let mut line = self.probes(goal, &at, axis, brief);
        if brief && self.goes_both_ways(goal, axis) {
            line = self.probes(goal, &at, axis, false);
        }
        let width = self.points.width(axis);
        let place = |t: f64| {
            let mut point = at.clone();
            point[axis] = t;
            point
        };
        let best = self.best_of_line(goal, &line, width, &place);
        goal.better_of(candidate, best)
    }

    /// The stops of an axis and the point itself, evaluated. Notes how the output rises and falls on the way.
    fn probes(&mut self, goal: &Goal, at: &[f64], axis: usize, brief: bool) -> Vec<Probe> {
        let mut stops = self.stops(axis, brief);
        if !stops.contains(&at[axis]) {
            stops.push(at[axis]);
            stops.sort_by(f64::total_cmp);
        }
        let line: Vec<Probe> = stops
            .into_iter()
            .map(|to| {
                let index = self.points.moved(at, axis, to);
                Probe { t: to, index, gain: goal.gain(self.points.of(index, goal.output)) }
            })
            .collect();
        for pair in line.windows(2) {
            let [one, next] = pair else { continue };
            let values = (self.points.of(one.index, goal.output), self.points.of(next.index, goal.output));
            if let (Some(one), Some(next)) = values {
                self.note(goal, axis, next - one);
            }
        }
        line
    }

    /// The best point from `at` on in a direction (in shares of each axis), up to the end of the space.
    pub fn along(&mut self, goal: &Goal, candidate: Candidate, direction: &[f64]) -> Candidate {
        let at = self.points.seen[candidate.index].at.clone();
        let mut length = f64::INFINITY;
        for &axis in &self.varying {
            let [low, high] = self.points.ends(axis);
            let step = direction[axis] * (high - low);
            if step > 0.0 {
                length = length.min((high - at[axis]) / step);
            } else if step < 0.0 {
                length = length.min((low - at[axis]) / step);
            }
        }
        if !(length.is_finite() && length > 0.0) {
            return candidate;
        }
        let ends: Vec<[f64; 2]> = (0..at.len()).map(|axis| self.points.ends(axis)).collect();
        let place = |t: f64| {
            (0..at.len())
                .map(|axis| {
                    let [low, high] = ends[axis];
                    let to = (at[axis] + t * direction[axis] * (high - low)).clamp(low, high);
                    // Rounding must not leave a point just beside an end.
                    let near = 1e-12 * (high - low);
                    if direction[axis] == 0.0 {
                        at[axis]
                    } else if to - low <= near {
                        low
                    } else if high - to <= near {
                        high
                    } else {
                        to
                    }
                })
                .collect()
        };
        let mut line = vec![Probe { t: 0.0, index: candidate.index, gain: goal.gain(Some(candidate.value)) }];
        for share in ALONG {
            line.push(self.probe(goal, share * length, &place));
        }
        let best = self.best_of_line(goal, &line, length, &place);
        goal.better_of(candidate, best)
    }

    fn probe(&mut self, goal: &Goal, t: f64, place: &dyn Fn(f64) -> Vec<f64>) -> Probe {
        let index = self.points.point(&place(t));
        Probe { t, index, gain: goal.gain(self.points.of(index, goal.output)) }
    }

    /// The best of a line's points, refined between its neighbours where it is no end.
    fn best_of_line(
        &mut self,
        goal: &Goal,
        line: &[Probe],
        width: f64,
        place: &dyn Fn(f64) -> Vec<f64>,
    ) -> Option<Candidate> {
        let mut best = 0;
        for (i, probe) in line.iter().enumerate() {
            if probe.gain > line[best].gain {
                best = i;
            }
        }
        let mut found = *line.get(best)?;
        if let [before, middle, after] = line.get(best.wrapping_sub(1)..best + 2).unwrap_or_default() {
            found = self.refine(goal, [*before, *middle, *after], width, place);
        }
        self.points.of(found.index, goal.output).map(|value| Candidate { index: found.index, value })
    }

    /// The top inside a bracket by parabolas through its three points, each second step a golden section (Brent 1973, chapter
    /// 5), so that kinks and jumps are closed in on as well.
    fn refine(
        &mut self,
        goal: &Goal,
        [mut left, mut top, mut right]: [Probe; 3],
        width: f64,
        place: &dyn Fn(f64) -> Vec<f64>,
    ) -> Probe {
        let mut hopeless = 0;
        for step in 0..MOST_STEPS {
            let open = right.t - left.t;
            if open <= REFINED * width || top.gain - left.gain.min(right.gain) <= goal.noise {
                break;
            }
            let golden = if right.t - top.t > top.t - left.t {
                top.t + (1.0 - GOLDEN) * (right.t - top.t)
            } else {
                top.t - (1.0 - GOLDEN) * (top.t - left.t)
            };
            let mut t = golden;
            if let Some((vertex, gain)) = parabola(left, top, right).filter(|_| step % 2 == 0) {
                // Two parabolas in a row, with a section between them, that promise nothing.
                hopeless = if gain <= 0.1 * goal.noise { hopeless + 1 } else { 0 };
                if hopeless == 2 {
                    break;
                }
                let least = 0.01 * open;
                t = vertex.clamp(left.t + least, right.t - least);
                if (t - top.t).abs() < least {
                    // Beside the top on its wider side, so that the bracket closes.
                    t = top.t + if golden > top.t { least } else { -least };
                }
            }
            if t <= left.t || t >= right.t || t == top.t {
                break;
            }
            let probe = self.probe(goal, t, place);
            match (probe.gain > top.gain, t < top.t) {
                (true, true) => (right, top) = (top, probe),
                (true, false) => (left, top) = (top, probe),
                (false, true) => left = probe,
                (false, false) => right = probe,
            }
        }
        top
    }
}

/// Vertex of the parabola through three points, and how much it lies above the middle one; `None` where it is no top.
fn parabola(left: Probe, top: Probe, right: Probe) -> Option<(f64, f64)> {
    let (a, b) = (top.t - left.t, right.t - top.t);
    let (slope_a, slope_b) = ((top.gain - left.gain) / a, (right.gain - top.gain) / b);
    let bend = (slope_b - slope_a) / (a + b);
    if !bend.is_finite() || bend >= 0.0 {
        return None;
    }
    let slope = (slope_a * b + slope_b * a) / (a + b);
    let vertex = top.t - slope / (2.0 * bend);
    vertex.is_finite().then(|| (vertex, -slope * slope / (4.0 * bend)))
}
