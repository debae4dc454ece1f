//! Monte Carlo (JCGM 101:2008): specimens drawn by counter, bias-like axes held.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

use super::{Miss, Response, Role, chance};

/// Samples of one block; blocks are folded in order, so that it does not matter who evaluated which.
const BLOCK: usize = 256;

/// The wanted outputs of one sample.
pub type Specimen = Vec<Result<f64, Miss>>;

/// What is sampled.
pub struct Sampling<'a> {
    /// One role an axis.
    pub roles: &'a [Role],
    /// Where the bias-like axes stand, one value an axis.
    pub held: &'a [f64],
    pub samples: usize,
    pub seed: u64,
    pub threads: usize,
}

/// The point of one sample: each random axis by its own number, the others as held.
pub fn specimen(response: &dyn Response, sampling: &Sampling<'_>, sample: u64) -> Vec<f64> {
    let axes = response.axes().iter().zip(sampling.roles).zip(sampling.held).enumerate();
    axes.map(|(i, ((axis, role), held))| match role {
        Role::Bias => *held,
        Role::Random(distribution) => {
            let half = (axis.high - axis.low) / 2.0;
            let share = chance::draw(*distribution, sampling.seed, sample, i as u32);
            (axis.low + half + half * share).clamp(axis.low, axis.high)
        }
    })
    .collect()
}

/// The wanted outputs of every sample, in order of the samples: `[sample][output]`. The same for any number of threads.
pub fn sample(response: &dyn Response, wanted: &[usize], sampling: &Sampling<'_>) -> Vec<Specimen> {
    let blocks = sampling.samples.div_ceil(BLOCK);
    let slots: Vec<Mutex<Vec<Specimen>>> = (0..blocks).map(|_| Mutex::default()).collect();
    let next = AtomicUsize::new(0);
    let work = || {
        loop {
            let block = next.fetch_add(1, Ordering::Relaxed);
            let Some(slot) = slots.get(block) else { return };
            let found = one_block(response, wanted, sampling, block);
            *slot.lock().unwrap_or_else(std::sync::PoisonError::into_inner) = found;
        }
    };
    std::thread::scope(|scope| {
        for _ in 1..sampling.threads {
            scope.spawn(work);
        }
        work();
    });
    slots
        .into_iter()
        .flat_map(|slot| slot.into_inner().unwrap_or_else(std::sync::PoisonError::into_inner))
        .collect()
}

fn one_block(
    response: &dyn Response,
    wanted: &[usize],
    sampling: &Sampling<'_>,
    block: usize,
) -> Vec<Specimen> {
    let last = ((block + 1) * BLOCK).min(sampling.samples);
    let mut outputs = vec![Err(Miss::NotConverged); response.outputs()];
    (block * BLOCK..last)
        .map(|index| {
            outputs.fill(Err(Miss::NotConverged));
            response.eval(&specimen(response, sampling, index as u64), &mut outputs);
            let of = |output: &usize| match outputs.get(*output) {
                Some(Ok(value)) if !value.is_finite() => Err(Miss::NotFinite),
                Some(found) => *found,
                None => Err(Miss::Undefined),
            };
            wanted.iter().map(of).collect()
        })
        .collect()
}
