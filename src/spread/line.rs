//! The best point of one line through the space: scan, then refine (Brent 1973, chapter 5: golden section with parabolas).

use super::points::{Goal, Points};

/// A line through the space: where parameter `t` lies.
pub(super) type Line<'l> = &'l dyn Fn(f64) -> Vec<f64>;

/// A sample of a line.
#[derive(Clone, Copy)]
pub(super) struct Sample {
    pub t: f64,
    pub index: usize,
    pub score: f64,
}

/// Share of a line's width to which a smooth extreme is located; its value is then good to the square of it.
const SMOOTH: f64 = 1e-6;
/// Share of a line's width to which a kink or a jump is located.
const KINK: f64 = 1e-10;

/// The best point of a line among samples (in order of `t`, two at least) and what refining finds around each promising
/// local maximum of the score. `noise` is the least change of a score that counts.
pub(super) fn best(
    points: &mut Points,
    goal: Goal,
    line: Line,
    samples: &[Sample],
    noise: f64,
) -> Option<Sample> {
    let mut best = samples.iter().copied().max_by(|a, b| a.score.total_cmp(&b.score))?;
    if best.score == f64::NEG_INFINITY {
        return None;
    }
    for [a, b, c] in brackets(points, goal, line, samples, noise) {
        let gain = (b.score - a.score).max(b.score - c.score);
        if gain > noise && b.score + gain.min(f64::MAX) > best.score {
            let found = refine(points, goal, line, [a, b, c], noise);
            if found.score > best.score {
                best = found;
            }
        }
    }
    Some(best)
}

/// Three samples each around a local maximum; one just inside an end only where a parabola points to it.
fn brackets(points: &mut Points, goal: Goal, line: Line, samples: &[Sample], noise: f64) -> Vec<[Sample; 3]> {
    let mut found: Vec<[Sample; 3]> = samples
        .windows(3)
        .filter_map(|three| <[Sample; 3]>::try_from(three).ok())
        .filter(|[a, b, c]| b.score >= a.score && b.score >= c.score)
        .collect();
    let ends = match samples {
        [a, b, c] => vec![[*a, *b, *c], [*c, *b, *a]],
        [a, b, c, .., d, e, f] => vec![[*a, *b, *c], [*f, *e, *d]],
        [a, b, c, d] => vec![[*a, *b, *c], [*d, *c, *b]],
        [a, b, c, d, e] => vec![[*a, *b, *c], [*e, *d, *c]],
        _ => Vec::new(),
    };
    for [end, next, third] in ends {
        if end.score > next.score
            && let Some((t, gain)) = peak(&[end, next, third])
            && gain > noise
            && (t - end.t) * (t - next.t) < 0.0
        {
            let there = sample(points, goal, line, t);
            if there.score > end.score {
                found.push([end, there, next]);
            }
        }
    }
    found
}

/// Where the parabola through three samples is highest, and by how much it lies there above the first.
pub(super) fn peak([a, b, c]: &[Sample; 3]) -> Option<(f64, f64)> {
    let first = (b.score - a.score) / (b.t - a.t);
    let second = ((c.score - b.score) / (c.t - b.t) - first) / (c.t - a.t);
    if !(second < 0.0) || !first.is_finite() {
        return None;
    }
    let t = (a.t + b.t) / 2.0 - first / (2.0 * second);
    Some((t, first * (t - a.t) + second * (t - a.t) * (t - b.t)))
}

pub(super) fn sample(points: &mut Points, goal: Goal, line: Line, t: f64) -> Sample {
    let index = points.point(line(t));
    Sample { t, index, score: points.score(index, goal) }
}

/// The best point inside a bracket whose middle is no worse than its ends.
pub(super) fn refine(
    points: &mut Points,
    goal: Goal,
    line: Line,
    [a, b, c]: [Sample; 3],
    noise: f64,
) -> Sample {
    let width = (c.t - a.t).abs();
    let (low, high) = if a.t < c.t { (a, c) } else { (c, a) };
    let mut bracket = Bracket { low, high, best: b, second: b, third: b };
    bracket.narrow(points, goal, line, SMOOTH * width, noise);
    let fall = bracket.best.score - bracket.low.score.min(bracket.high.score);
    if fall > noise / 10.0 {
        bracket.second = bracket.best;
        bracket.third = bracket.best;
        bracket.narrow(points, goal, line, KINK * width, noise);
    }
    bracket.best
}

struct Bracket {
    low: Sample,
    high: Sample,
    best: Sample,
    second: Sample,
    third: Sample,
}

impl Bracket {
    /// Narrows the bracket until it is about four times as wide as `least`, or flat.
    fn narrow(&mut self, points: &mut Points, goal: Goal, line: Line, least: f64, noise: f64) {
        const GOLDEN: f64 = 0.381_966_011_250_105_1;
        let (mut step, mut before) = (0.0_f64, 0.0_f64);
        for _ in 0..80 {
            let best = self.best;
            let middle = (self.low.t + self.high.t) / 2.0;
            if (best.t - middle).abs() <= 2.0 * least - (self.high.t - self.low.t) / 2.0 {
                return;
            }
            if best.score - self.low.score.min(self.high.score) < noise / 100.0 {
                return;
            }
            let parabola = self.parabola().filter(|to| {
                before.abs() > least
                    && (to - best.t).abs() < before.abs() / 2.0
                    && *to > self.low.t
                    && *to < self.high.t
            });
            match parabola {
                Some(to) => {
                    before = step;
                    step = to - best.t;
                    if to - self.low.t < 2.0 * least || self.high.t - to < 2.0 * least {
                        step = least.copysign(middle - best.t);
                    }
                }
                None => {
                    before = if best.t < middle { self.high.t - best.t } else { self.low.t - best.t };
                    step = GOLDEN * before;
                }
            }
            let to = best.t + if step.abs() >= least { step } else { least.copysign(step) };
            self.take(sample(points, goal, line, to));
        }
    }

    /// Where the parabola through the three best samples is highest.
    fn parabola(&self) -> Option<f64> {
        let (x, w, v) = (self.best, self.second, self.third);
        let r = (x.t - w.t) * (x.score - v.score);
        let q = (x.t - v.t) * (x.score - w.score);
        let to = x.t - ((x.t - v.t) * q - (x.t - w.t) * r) / (2.0 * (q - r));
        to.is_finite().then_some(to)
    }

    fn take(&mut self, new: Sample) {
        if new.score >= self.best.score {
            if new.t < self.best.t {
                self.high = self.best;
            } else {
                self.low = self.best;
            }
            self.third = self.second;
            self.second = self.best;
            self.best = new;
            return;
        }
        if new.t < self.best.t {
            self.low = new;
        } else {
            self.high = new;
        }
        if new.score >= self.second.score || self.second.t == self.best.t {
            self.third = self.second;
            self.second = new;
        } else if new.score >= self.third.score
            || self.third.t == self.best.t
            || self.third.t == self.second.t
        {
            self.third = new;
        }
    }
}
