//! Extremes over a declared space: stages with known answers, random responses against dense grids, cost.

mod cost;
mod odds;
mod random;
mod stages;

use std::cell::Cell;
use std::sync::atomic::{AtomicUsize, Ordering};

use qsheaf::spread::{self, Axis, Extreme, Miss, Options, Range, Response};

/// A response made of the equations of a stage.
pub struct Stage<F> {
    pub axes: Vec<Axis>,
    pub outputs: usize,
    pub equations: F,
    pub count: AtomicUsize,
}

impl<F> Response for Stage<F>
where
    F: Fn(&[f64], &mut [Result<f64, Miss>]) -> u64 + Sync,
{
    fn axes(&self) -> &[Axis] {
        &self.axes
    }

    fn outputs(&self) -> usize {
        self.outputs
    }

    fn eval(&self, at: &[f64], outputs: &mut [Result<f64, Miss>]) -> u64 {
        self.count.fetch_add(1, Ordering::Relaxed);
        for (axis, value) in self.axes.iter().zip(at) {
            assert!(*value >= axis.low && *value <= axis.high, "{} = {value} leaves its range", axis.name);
        }
        (self.equations)(at, outputs)
    }
}

/// Axes as (name, low, nominal, high).
pub fn axes(list: &[(&str, f64, f64, f64)]) -> Vec<Axis> {
    list.iter()
        .map(|&(name, low, nominal, high)| Axis { name: name.to_owned(), low, nominal, high })
        .collect()
}

/// The range of a stage with one output and one region.
pub fn range(list: &[(&str, f64, f64, f64)], equation: impl Fn(&[f64]) -> f64 + Sync) -> Range {
    regions(list, |at| (equation(at), 0))
}

/// The range of a stage with one output and several regions.
pub fn regions(list: &[(&str, f64, f64, f64)], equation: impl Fn(&[f64]) -> (f64, u64) + Sync) -> Range {
    let stage = Stage {
        axes: axes(list),
        outputs: 1,
        equations: |at: &[f64], outputs: &mut [Result<f64, Miss>]| {
            let (value, region) = equation(at);
            outputs[0] = if value.is_finite() { Ok(value) } else { Err(Miss::NotFinite) };
            region
        },
        count: AtomicUsize::new(0),
    };
    let mut ranges = spread::extremes(&stage, &Options::default());
    assert_eq!(ranges.len(), 1);
    ranges.remove(0)
}

/// An extreme with its value to 1e-6 and the given axes at the given values (to 1e-3 of themselves: an extreme is flat).
pub fn assert_extreme(found: &Option<Extreme>, value: f64, at: &[(usize, f64)]) {
    let found = found.as_ref().expect("an extreme");
    let scale = value.abs().max(1e-9);
    assert!((found.value - value).abs() <= 1e-6 * scale, "{} instead of {value}: {found:?}", found.value);
    for &(axis, wanted) in at {
        let is = found.at[axis];
        assert!((is - wanted).abs() <= 1e-3 * wanted.abs().max(1e-9), "axis {axis} at {is}, not {wanted}");
    }
}

/// Numbers from 0 to 1, the same in every run (multiplier of Knuth's MMIX generator).
pub struct Draw(Cell<u64>);

impl Draw {
    pub fn new(seed: u64) -> Draw {
        Draw(Cell::new(seed.wrapping_mul(2_654_435_769).wrapping_add(1)))
    }

    pub fn next(&self) -> f64 {
        let state =
            self.0.get().wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        self.0.set(state);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    }

    pub fn between(&self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.next()
    }
}
