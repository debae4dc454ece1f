//! Curves as runs of points inside the plot, and dashes along them.

use super::Scale;

type Point = (f64, f64);

/// The parts of a curve inside the plot. A missing value ends a run; so does leaving the plot, at its border.
pub(crate) fn runs(points: &[(f64, Option<f64>)], x: &Scale, y: &Scale) -> Vec<Vec<Point>> {
    let mut out: Vec<Vec<Point>> = Vec::new();
    let mut previous: Option<Point> = None;
    let window = (x.ends(), y.ends());
    for (px, py) in points {
        let here = x.place(*px).zip(py.and_then(|v| y.place(v)));
        if let (Some(from), Some(to)) = (previous, here)
            && let Some((a, b)) = clip(from, to, window)
        {
            match out.last_mut() {
                Some(run) if run.last() == Some(&a) => run.push(b),
                _ => out.push(vec![a, b]),
            }
        }
        previous = here;
    }
    out
}

/// The part of a segment inside a window (Liang and Barsky 1984).
fn clip(from: Point, to: Point, window: ((f64, f64), (f64, f64))) -> Option<(Point, Point)> {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let ((left, right), (top, bottom)) = window;
    let (mut enter, mut leave) = (0.0f64, 1.0f64);
    let sides = [(-dx, from.0 - left), (dx, right - from.0), (-dy, from.1 - top), (dy, bottom - from.1)];
    for (step, room) in sides {
        if step == 0.0 {
            if room < 0.0 {
                return None;
            }
            continue;
        }
        let at = room / step;
        if step < 0.0 { enter = enter.max(at) } else { leave = leave.min(at) }
    }
    if enter > leave {
        return None;
    }
    let at = |t: f64| (from.0 + t * dx, from.1 + t * dy);
    let start = if enter == 0.0 { from } else { at(enter) };
    let end = if leave == 1.0 { to } else { at(leave) };
    Some((start, end))
}

/// Cuts a run into dashes: `pattern` is drawn, left out, drawn ... in points; empty gives the run itself.
pub(crate) fn dashes(run: &[Point], pattern: &[f64]) -> Vec<Vec<Point>> {
    if pattern.is_empty() {
        return vec![run.to_vec()];
    }
    let mut out = Vec::new();
    let (mut phase, mut left) = (0usize, pattern[0]);
    let mut dash: Vec<Point> = run.first().copied().into_iter().collect();
    for pair in run.windows(2) {
        let [mut from, to] = [pair[0], pair[1]];
        loop {
            let length = libm::hypot(to.0 - from.0, to.1 - from.1);
            if length <= left {
                left -= length;
                if phase % 2 == 0 {
                    dash.push(to);
                }
                break;
            }
            let part = left / length;
            let cut = (from.0 + part * (to.0 - from.0), from.1 + part * (to.1 - from.1));
            if phase % 2 == 0 {
                dash.push(cut);
                out.push(std::mem::take(&mut dash));
            } else {
                dash = vec![cut];
            }
            from = cut;
            phase += 1;
            left = pattern[phase % pattern.len()];
        }
    }
    if phase % 2 == 0 && dash.len() > 1 {
        out.push(dash);
    }
    out
}

/// Where a curve's name points: the end that lies furthest right.
pub(crate) fn name_end(runs: &[Vec<Point>]) -> Option<Point> {
    runs.iter().flatten().copied().max_by(|a, b| a.0.total_cmp(&b.0))
}
