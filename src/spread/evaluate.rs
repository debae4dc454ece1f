//! Evaluations of a response, each point once: every output of every point is kept, because outputs share corners.

use std::collections::BTreeMap;

use super::{Axis, Miss, RegionAt, Response};

/// One evaluated point.
pub(super) struct Seen {
    pub at: Vec<f64>,
    pub outputs: Vec<Result<f64, Miss>>,
}

pub(super) struct Evaluator<'a> {
    response: &'a dyn Response,
    pub axes: &'a [Axis],
    pub seen: Vec<Seen>,
    index: BTreeMap<Vec<u64>, usize>,
    pub regions: Vec<RegionAt>,
}

impl<'a> Evaluator<'a> {
    pub fn new(response: &'a dyn Response) -> Evaluator<'a> {
        Evaluator {
            response,
            axes: response.axes(),
            seen: Vec::new(),
            index: BTreeMap::new(),
            regions: Vec::new(),
        }
    }

    /// Index of the point among those seen, evaluating it if it is new.
    pub fn point(&mut self, at: &[f64]) -> usize {
        let key: Vec<u64> = at.iter().map(|value| value.to_bits()).collect();
        if let Some(index) = self.index.get(&key) {
            return *index;
        }
        let mut outputs = vec![Err(Miss::NotConverged); self.response.outputs()];
        let code = self.response.eval(at, &mut outputs);
        // A number that is none would make every comparison below false.
        for output in &mut outputs {
            if matches!(output, Ok(value) if !value.is_finite()) {
                *output = Err(Miss::NotFinite);
            }
        }
        if !self.regions.iter().any(|region| region.code == code) {
            self.regions.push(RegionAt { code, at: at.to_vec() });
        }
        self.seen.push(Seen { at: at.to_vec(), outputs });
        self.index.insert(key, self.seen.len() - 1);
        self.seen.len() - 1
    }

    /// Value of one output at a point seen.
    pub fn of(&self, index: usize, output: usize) -> Option<f64> {
        self.seen[index].outputs[output].ok()
    }

    /// Value of one output at a point.
    pub fn value(&mut self, at: &[f64], output: usize) -> Option<f64> {
        let index = self.point(at);
        self.of(index, output)
    }

    /// Index of the point that differs from `at` in one axis.
    pub fn moved(&mut self, at: &[f64], axis: usize, to: f64) -> usize {
        let mut point = at.to_vec();
        point[axis] = to;
        self.point(&point)
    }

    pub fn nominal(&self) -> Vec<f64> {
        self.axes.iter().map(|axis| axis.nominal).collect()
    }

    /// Low and high end of an axis.
    pub fn ends(&self, axis: usize) -> [f64; 2] {
        [self.axes[axis].low, self.axes[axis].high]
    }

    pub fn width(&self, axis: usize) -> f64 {
        self.axes[axis].high - self.axes[axis].low
    }
}
