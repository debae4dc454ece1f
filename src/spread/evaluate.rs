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
    /// Index of each point by the digest of its bits; where two points share one, the later stands at the next free number.
    index: BTreeMap<u64, usize>,
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
        let mut key = digest(at);
        while let Some(&index) = self.index.get(&key) {
            if is_same(&self.seen[index].at, at) {
                return index;
            }
            key = key.wrapping_add(1);
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

/// A number for the bits of a point: each value folded in by a multiplication (Fowler, Noll and Vo, FNV-1a, by words).
fn digest(at: &[f64]) -> u64 {
    at.iter().fold(0xcbf2_9ce4_8422_2325, |digest, value| {
        let mixed = (digest ^ value.to_bits()).wrapping_mul(0x0000_0100_0000_01b3);
        mixed ^ mixed >> 29
    })
}

fn is_same(one: &[f64], other: &[f64]) -> bool {
    one.iter().zip(other).all(|(one, other)| one.to_bits() == other.to_bits())
}
