//! Climbing from one point until nothing moves.

use super::search::{Candidate, Goal, Search};

/// Rounds before a climb gives up improving.
const ROUNDS: usize = 40;
/// Step for slopes beside a kink, as a share of each axis.
const STEP: f64 = 1e-4;
/// Axes whose pairs are flipped, at most.
const MOST_PAIRED: usize = 16;

impl Search<'_> {
    /// Flips single axes, scans each inside, follows the direction of the last round and the ridge along a kink, flips pairs
    /// where the output is not monotone; until nothing moves.
    pub fn climb(&mut self, goal: &Goal, start: Candidate) -> Candidate {
        let mut candidate = start;
        for _ in 0..ROUNDS {
            let before = candidate;
            candidate = self.flips(goal, candidate);
            candidate = self.inside(goal, candidate);
            if self.is_spent(goal) {
                break;
            }
            if goal.improves(candidate, before) {
                candidate = self.onwards(goal, before, candidate);
                continue;
            }
            candidate = self.ridge(goal, candidate);
            if goal.improves(candidate, before) {
                continue;
            }
            if self.conflicts(goal) {
                candidate = self.pairs(goal, candidate);
            }
            if !goal.improves(candidate, before) {
                break;
            }
        }
        candidate
    }

    /// Takes the other end of single axes as long as that helps.
    fn flips(&mut self, goal: &Goal, mut candidate: Candidate) -> Candidate {
        for _ in 0..ROUNDS {
            let before = candidate;
            for axis in self.varying.clone() {
                let at = self.points.seen[candidate.index].at.clone();
                let here = candidate.value;
                for to in self.points.ends(axis) {
                    let index = self.points.moved(&at, axis, to);
                    let Some(value) = self.points.of(index, goal.output) else { continue };
                    self.note(goal, axis, (value - here) * (to - at[axis]).signum());
                    candidate = goal.better_of(candidate, Some(Candidate { index, value }));
                }
            }
            if !goal.improves(candidate, before) {
                break;
            }
        }
        candidate
    }

    /// Scans each axis that moves the output.
    pub fn inside(&mut self, goal: &Goal, mut candidate: Candidate) -> Candidate {
        for axis in self.varying.clone() {
            if self.moves(goal, candidate, axis) {
                candidate = self.scan(goal, candidate, axis);
            }
        }
        candidate
    }

    /// Goes on in the direction that a round of single steps took (Hooke and Jeeves 1961), where the candidate lies inside.
    fn onwards(&mut self, goal: &Goal, before: Candidate, candidate: Candidate) -> Candidate {
        if self.inner_axes(candidate).is_empty() {
            return candidate;
        }
        let (from, to) = (&self.points.seen[before.index].at, &self.points.seen[candidate.index].at);
        let direction: Vec<f64> = (0..to.len())
            .map(|axis| {
                let width = self.points.width(axis);
                if width > 0.0 { (to[axis] - from[axis]) / width } else { 0.0 }
            })
            .collect();
        self.along(goal, candidate, &direction)
    }

    /// Axes strictly inside of which a candidate lies.
    fn inner_axes(&self, candidate: Candidate) -> Vec<usize> {
        let at = &self.points.seen[candidate.index].at;
        let inside = |&axis: &usize| {
            let [low, high] = self.points.ends(axis);
            at[axis] > low && at[axis] < high
        };
        self.varying.iter().copied().filter(inside).collect()
    }

    /// Climbs along the ridge of a kink, where every single axis leads down: the direction that gains most on both sides is
    /// the shortest vector between their gradients (steepest ascent of Wolfe 1975 for the smaller of two functions).
    fn ridge(&mut self, goal: &Goal, candidate: Candidate) -> Candidate {
        let inner: Vec<usize> = self
            .inner_axes(candidate)
            .into_iter()
            .filter(|&axis| self.moves(goal, candidate, axis))
            .collect();
        if inner.is_empty() || self.varying.len() < 2 {
            return candidate;
        }
        let at = self.points.seen[candidate.index].at.clone();
        for axis in inner {
            let width = self.points.width(axis);
            let [low, high] = self.points.ends(axis);
            let sides = [(at[axis] - STEP * width).max(low), (at[axis] + STEP * width).min(high)];
            let gradients = sides.map(|to| {
                let mut beside = at.clone();
                beside[axis] = to;
                self.gradient(goal, &beside, (to - at[axis]).signum(), axis)
            });
            let [Some(one), Some(other)] = gradients else { continue };
            let direction = self.common_ascent(&at, one, other);
            let found = self.along(goal, candidate, &direction);
            if goal.improves(found, candidate) {
                return found;
            }
        }
        candidate
    }

    /// Gradient (per share of each axis) at a point beside a kink, by differences that stay on its side.
    fn gradient(&mut self, goal: &Goal, beside: &[f64], away: f64, kinked: usize) -> Option<Vec<f64>> {
        let here = goal.gain(self.points.value(beside, goal.output));
        let mut gradient = vec![0.0; beside.len()];
        for axis in self.varying.clone() {
            let [low, high] = self.points.ends(axis);
            let width = high - low;
            let mut step = 0.1 * STEP * width * if axis == kinked { away } else { 1.0 };
            if beside[axis] + step > high || beside[axis] + step < low {
                step = -step;
            }
            let to = (beside[axis] + step).clamp(low, high);
            let index = self.points.moved(beside, axis, to);
            let there = goal.gain(self.points.of(index, goal.output));
            let moved = (to - beside[axis]) / width;
            gradient[axis] = if moved == 0.0 { 0.0 } else { (there - here) / moved };
        }
        gradient.iter().all(|slope| slope.is_finite()).then_some(gradient)
    }

    /// The shortest vector between two gradients, without the axes along which it leaves the space.
    fn common_ascent(&self, at: &[f64], mut one: Vec<f64>, mut other: Vec<f64>) -> Vec<f64> {
        loop {
            let dot =
                |a: &dyn Fn(usize) -> f64| (0..at.len()).map(|i| a(i) * (other[i] - one[i])).sum::<f64>();
            let square = dot(&|i| other[i] - one[i]);
            let share = if square > 0.0 { (-dot(&|i| one[i]) / square).clamp(0.0, 1.0) } else { 0.0 };
            let direction: Vec<f64> = (0..at.len()).map(|i| one[i] + share * (other[i] - one[i])).collect();
            let leaves = self.varying.iter().copied().find(|&axis| {
                let [low, high] = self.points.ends(axis);
                (at[axis] <= low && direction[axis] < 0.0) || (at[axis] >= high && direction[axis] > 0.0)
            });
            match leaves {
                Some(axis) => (one[axis], other[axis]) = (0.0, 0.0),
                None => return direction,
            }
        }
    }

    /// Flips two axes at once: what single changes cannot reach. Single and paired flips together say how the output behaves
    /// as far as no three axes act on one another; the vertex that is best by that is tried as well.
    fn pairs(&mut self, goal: &Goal, candidate: Candidate) -> Candidate {
        let at = self.points.seen[candidate.index].at.clone();
        let flipped = |search: &Self, axis: usize| {
            let [low, high] = search.points.ends(axis);
            if at[axis] < (low + high) / 2.0 { high } else { low }
        };
        let mut effects: Vec<(usize, f64)> = Vec::new();
        for axis in self.varying.clone() {
            if self.moved_anywhere(goal, axis) {
                let to = flipped(self, axis);
                let index = self.points.moved(&at, axis, to);
                let effect = goal.gain(self.points.of(index, goal.output)) - goal.gain(Some(candidate.value));
                effects.push((axis, if effect.is_finite() { effect } else { -goal.range }));
            }
        }
        effects.sort_by(|a, b| b.1.abs().total_cmp(&a.1.abs()).then(a.0.cmp(&b.0)));
        effects.truncate(MOST_PAIRED);
        let count = effects.len();
        let mut coupled = vec![vec![0.0; count]; count];
        let mut best = candidate;
        for i in 0..count {
            for j in 0..i {
                let mut point = at.clone();
                for (axis, _) in [effects[i], effects[j]] {
                    point[axis] = flipped(self, axis);
                }
                let index = self.points.point(&point);
                let Some(value) = self.points.of(index, goal.output) else { continue };
                best = goal.better_of(best, Some(Candidate { index, value }));
                let effect = goal.gain(Some(value)) - goal.gain(Some(candidate.value));
                coupled[i][j] = effect - effects[i].1 - effects[j].1;
                coupled[j][i] = coupled[i][j];
            }
        }
        let single: Vec<f64> = effects.iter().map(|(_, effect)| *effect).collect();
        let mut point = at.clone();
        for (flip, (axis, _)) in best_flips(&single, &coupled).into_iter().zip(&effects) {
            if flip {
                point[*axis] = flipped(self, *axis);
            }
        }
        let index = self.points.point(&point);
        let found = self.points.of(index, goal.output).map(|value| Candidate { index, value });
        goal.better_of(best, found)
    }
}

/// The flips whose single effects and couplings add up to most, among all combinations (in the order of a Gray code, so that
/// each step changes one flip).
fn best_flips(single: &[f64], coupled: &[Vec<f64>]) -> Vec<bool> {
    let mut flips = vec![false; single.len()];
    let mut best = flips.clone();
    let mut gains = single.to_vec();
    let (mut total, mut most) = (0.0, 0.0);
    for code in 1..1_u64 << single.len() {
        let axis = code.trailing_zeros() as usize;
        let sign = if flips[axis] { -1.0 } else { 1.0 };
        total += sign * gains[axis];
        flips[axis] = !flips[axis];
        for (gain, coupling) in gains.iter_mut().zip(&coupled[axis]) {
            *gain += sign * coupling;
        }
        if total > most {
            most = total;
            best.clone_from(&flips);
        }
    }
    best
}
