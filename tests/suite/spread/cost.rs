//! How many evaluations a search takes: each is an operating point in a study.

use std::sync::atomic::{AtomicUsize, Ordering};

use qsheaf::spread::{self, Method, Miss, Options};

use super::{Draw, Stage, axes};

/// Evaluations for a response with 15 axes and 60 outputs, each moved by a share of the axes: `curved` of them with a top
/// inside, the others monotone.
fn evaluations(share: f64, curved: usize, both_ends: bool) -> usize {
    let draw = Draw::new(7);
    let weights: Vec<Vec<f64>> = (0..60)
        .map(|_| (0..15).map(|_| if draw.next() < share { draw.between(-1., 1.) } else { 0. }).collect())
        .collect();
    let stage = Stage {
        axes: axes(&[("x", -1., 0., 1.); 15]),
        outputs: 60,
        equations: |at: &[f64], outputs: &mut [Result<f64, Miss>]| {
            for (index, output) in outputs.iter_mut().enumerate() {
                let sum: f64 = at.iter().zip(&weights[index]).map(|(x, w)| x * w).sum();
                let bent =
                    if index < curved { -0.8 * (at[index % 15] - 0.2) * (at[index % 15] - 0.2) } else { 0. };
                *output = Ok(libm::exp(0.3 * sum) + bent);
            }
            0
        },
        count: AtomicUsize::new(0),
    };
    let wanted = (0..60).map(|i| if both_ends { (true, true) } else { (i % 2 == 0, i % 2 == 1) }).collect();
    let found = spread::extremes(&stage, &Options { wanted });
    assert_eq!(found.len(), 60);
    stage.count.load(Ordering::Relaxed)
}

#[test]
fn a_note_of_15_axes_and_60_outputs_stays_in_budget() {
    let (monotone, curved, both) =
        (evaluations(0.4, 0, false), evaluations(0.4, 12, false), evaluations(0.4, 12, true));
    let dense = evaluations(1.0, 0, false);
    assert!(dense < 5_500, "{dense}");
    assert!(monotone < 4_000, "{monotone}");
    assert!(curved < 6_500, "{curved}");
    assert!(both < 14_500, "{both}");
}

/// The same question gives the same answer, point by point.
#[test]
fn a_search_repeats_itself() {
    assert_eq!(evaluations(0.4, 12, true), evaluations(0.4, 12, true));
}

/// What a solver leaves of its error, as a share: the same for the same point, between ±1.
fn error_of(at: &[f64]) -> f64 {
    let bits = at.iter().fold(17_u64, |hash, value| {
        (hash ^ value.to_bits()).wrapping_mul(0x9e37_79b9_7f4a_7c15).rotate_left(29)
    });
    (bits >> 11) as f64 / (1_u64 << 52) as f64 - 1.
}

/// Numerical error of the solver neither makes a monotone output look otherwise nor costs many evaluations; an output that
/// only the error moves is exact.
#[test]
fn numerical_error_is_no_change() {
    let search = |share: f64| {
        let stage = Stage {
            axes: axes(&[("x", -1., 0., 1.); 12]),
            outputs: 2,
            equations: |at: &[f64], outputs: &mut [Result<f64, Miss>]| {
                let sum: f64 = at.iter().enumerate().map(|(i, x)| x * 0.02 * i as f64).sum();
                let error = 1. + share * error_of(at);
                outputs[0] = Ok(libm::exp(sum) * error);
                outputs[1] = Ok(12. * error);
                0
            },
            count: AtomicUsize::new(0),
        };
        let found = spread::extremes(&stage, &Options::default());
        let methods: Vec<Method> =
            found.iter().flat_map(|range| [&range.min, &range.max]).flatten().map(|end| end.method).collect();
        assert_eq!(methods, [Method::Monotone, Method::Monotone, Method::Exact, Method::Exact]);
        assert!(found.iter().all(|range| range.non_monotone.is_empty() && range.interior.is_empty()));
        stage.count.load(Ordering::Relaxed)
    };
    let (clean, noisy) = (search(0.), search(1e-9));
    assert!(noisy <= clean + clean / 4, "{clean} {noisy}");
}

/// An output without any order (the gain of a transistor that is off) takes its budget and no more.
#[test]
fn disorder_ends() {
    let stage = Stage {
        axes: axes(&[("x", -1., 0., 1.); 16]),
        outputs: 1,
        equations: |at: &[f64], outputs: &mut [Result<f64, Miss>]| {
            outputs[0] = Ok(error_of(at));
            0
        },
        count: AtomicUsize::new(0),
    };
    let found = spread::extremes(&stage, &Options::default());
    let method = |end: &Option<spread::Extreme>| end.as_ref().map(|end| end.method);
    assert_eq!(
        (method(&found[0].min), method(&found[0].max)),
        (Some(Method::Searched), Some(Method::Searched))
    );
    let count = stage.count.load(Ordering::Relaxed);
    assert!(count < 3_000, "{count}");
}
