//! Evaluated points of a response, each evaluated once: outputs share corners, so every output of every point is kept.

use std::collections::BTreeMap;

use super::{Axis, Miss, RegionAt, Response};

/// What is sought: the highest or the lowest value of one output.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Goal {
    pub output: usize,
    pub highest: bool,
}

/// The extremes of one output over the points seen so far, and the first point at which it had no value.
#[derive(Clone, Copy, Default)]
struct Track {
    low: Option<(f64, usize)>,
    high: Option<(f64, usize)>,
    missing: Option<(Miss, usize)>,
}

pub(super) struct Points<'a> {
    response: &'a dyn Response,
    pub axes: &'a [Axis],
    outputs: usize,
    at: Vec<Vec<f64>>,
    /// All outputs of the first point, then all of the second, ...
    values: Vec<Result<f64, Miss>>,
    codes: Vec<u64>,
    index: BTreeMap<Vec<u64>, usize>,
    tracks: Vec<Track>,
    pub regions: Vec<RegionAt>,
}

impl<'a> Points<'a> {
    pub fn new(response: &'a dyn Response) -> Points<'a> {
        let outputs = response.outputs();
        Points {
            response,
            axes: response.axes(),
            outputs,
            at: Vec::new(),
            values: Vec::new(),
            codes: Vec::new(),
            index: BTreeMap::new(),
            tracks: vec![Track::default(); outputs],
            regions: Vec::new(),
        }
    }

    /// Index of a point, evaluating it if it is new. The point is brought inside the space first.
    pub fn point(&mut self, mut at: Vec<f64>) -> usize {
        for (value, axis) in at.iter_mut().zip(self.axes) {
            *value = value.max(axis.low).min(axis.high) + 0.0;
        }
        let key = key(&at);
        if let Some(&known) = self.index.get(&key) {
            return known;
        }
        let here = self.at.len();
        let first = self.values.len();
        self.values.resize(first + self.outputs, Err(Miss::NotConverged));
        let code = self.response.eval(&at, &mut self.values[first..]);
        for (value, track) in self.values[first..].iter_mut().zip(&mut self.tracks) {
            if value.is_ok_and(|value| !value.is_finite()) {
                *value = Err(Miss::NotFinite);
            }
            match *value {
                Ok(value) => {
                    if track.low.is_none_or(|(low, _)| value < low) {
                        track.low = Some((value, here));
                    }
                    if track.high.is_none_or(|(high, _)| value > high) {
                        track.high = Some((value, here));
                    }
                }
                Err(miss) => track.missing = track.missing.or(Some((miss, here))),
            }
        }
        if !self.regions.iter().any(|region| region.code == code) {
            self.regions.push(RegionAt { code, at: at.clone() });
        }
        self.at.push(at);
        self.codes.push(code);
        self.index.insert(key, here);
        here
    }

    /// Index of the point that differs from another in one axis.
    pub fn moved(&mut self, from: usize, axis: usize, to: f64) -> usize {
        let mut at = self.at[from].clone();
        at[axis] = to;
        self.point(at)
    }

    /// The same, if that point was evaluated.
    pub fn known(&self, from: usize, axis: usize, to: f64) -> Option<usize> {
        let mut at = self.at[from].clone();
        at[axis] = to + 0.0;
        self.index.get(&key(&at)).copied()
    }

    pub fn at(&self, index: usize) -> &[f64] {
        &self.at[index]
    }

    pub fn code(&self, index: usize) -> u64 {
        self.codes[index]
    }

    pub fn value(&self, index: usize, output: usize) -> Result<f64, Miss> {
        self.values[index * self.outputs + output]
    }

    /// How good a point is: greater is better; worst where the output has no value.
    pub fn score(&self, index: usize, goal: Goal) -> f64 {
        match self.value(index, goal.output) {
            Ok(value) if goal.highest => value,
            Ok(value) => -value,
            Err(_) => f64::NEG_INFINITY,
        }
    }

    /// The best point seen.
    pub fn best(&self, goal: Goal) -> Option<usize> {
        let track = &self.tracks[goal.output];
        if goal.highest { track.high } else { track.low }.map(|(_, index)| index)
    }

    /// Width of the values of an output seen so far, and their largest magnitude.
    pub fn size(&self, output: usize) -> (f64, f64) {
        match self.tracks[output] {
            Track { low: Some((low, _)), high: Some((high, _)), .. } => {
                (high - low, low.abs().max(high.abs()))
            }
            _ => (0.0, 0.0),
        }
    }

    /// The first point seen at which an output has no value, and why.
    pub fn missing(&self, output: usize) -> Option<(Miss, Vec<f64>)> {
        self.tracks[output].missing.map(|(miss, index)| (miss, self.at[index].clone()))
    }
}

fn key(at: &[f64]) -> Vec<u64> {
    at.iter().map(|value| value.to_bits()).collect()
}
