//! Root-sum-square and Monte Carlo: closed forms, published examples, and figures computed elsewhere
//! (`tests/reference/spread_odds.py`).

use super::{Draw, axes};
use qsheaf::spread::{
    self, Axis, Combine, Combined, Distribution, Miss, Response, Role, Sampling, coverage_factor,
    coverage_interval, incomplete_beta, proportion, quantile, samples_to_decide,
};

const UNIFORM: Role = Role::Random(Distribution::Uniform);
const NORMAL: Role = Role::Random(Distribution::Normal { sigmas: 3.0 });

/// A response with one output.
struct One<F> {
    axes: Vec<Axis>,
    equation: F,
}

impl<F: Fn(&[f64]) -> f64 + Sync> Response for One<F> {
    fn axes(&self) -> &[Axis] {
        &self.axes
    }

    fn outputs(&self) -> usize {
        1
    }

    fn eval(&self, at: &[f64], outputs: &mut [Result<f64, Miss>]) -> u64 {
        for (axis, value) in self.axes.iter().zip(at) {
            assert!(*value >= axis.low && *value <= axis.high, "{} = {value} leaves its range", axis.name);
        }
        let value = (self.equation)(at);
        outputs[0] = if value.is_finite() { Ok(value) } else { Err(Miss::NotFinite) };
        0
    }
}

fn stage<F: Fn(&[f64]) -> f64 + Sync>(list: &[(&str, f64, f64, f64)], equation: F) -> One<F> {
    One { axes: axes(list), equation }
}

fn combined(response: &dyn Response, roles: &[Role], lowest: bool, k: f64) -> Result<Combined, Miss> {
    spread::combine(response, &Combine { output: 0, lowest, roles, held: None, coverage_factor: k })
}

fn sorted(response: &dyn Response, roles: &[Role], samples: usize, seed: u64) -> Vec<f64> {
    let held: Vec<f64> = response.axes().iter().map(|axis| axis.nominal).collect();
    let sampling = Sampling { roles, held: &held, samples, seed, threads: 2 };
    let mut values: Vec<f64> =
        spread::sample(response, &[0], &sampling).into_iter().map(|found| found[0].unwrap()).collect();
    values.sort_by(f64::total_cmp);
    values
}

fn reference() -> serde_json::Value {
    serde_json::from_str(include_str!("../../reference/spread_odds.json")).unwrap()
}

fn rows(table: &str) -> Vec<serde_json::Value> {
    reference()[table].as_array().unwrap().clone()
}

#[track_caller]
fn close(found: f64, wanted: f64, within: f64) {
    assert!((found - wanted).abs() <= within, "{found} instead of {wanted}");
}

/// Known-answer vectors that the authors distribute with the paper (`kat_vectors`, philox4x32, ten rounds).
#[test]
fn random_words_are_those_of_the_published_generator() {
    let digits_of_pi = [0x243f_6a88, 0x85a3_08d3, 0x1319_8a2e, 0x0370_7344];
    for (counter, key, words) in [
        ([0; 4], [0; 2], [0x6627_e8d5, 0xe169_c58d, 0xbc57_ac4c, 0x9b00_dbd8]),
        ([u32::MAX; 4], [u32::MAX; 2], [0x408f_276d, 0x41c8_3b0e, 0xa20b_c7c6, 0x6d54_51fd]),
        (digits_of_pi, [0xa409_3822, 0x299f_31d0], [0xd16c_fe09, 0x94fd_cceb, 0x5001_e420, 0x2412_6ea1]),
    ] {
        assert_eq!(spread::philox(counter, key), words);
    }
}

#[test]
fn limits_of_shares_agree_with_those_computed_elsewhere() {
    for row in rows("incomplete_beta") {
        let of = |key: &str| row[key].as_f64().unwrap();
        close(incomplete_beta(of("a"), of("b"), of("x")), of("value"), 1e-9);
    }
    for row in rows("proportion") {
        let of = |key: &str| row[key].as_f64().unwrap();
        let found = proportion(of("passed") as u64, of("total") as u64, of("confidence"));
        close(found.low, of("low"), 1e-9);
        close(found.high, of("high"), 1e-9);
    }
    for row in rows("coverage_factor") {
        close(coverage_factor(row[0].as_f64().unwrap()), row[1].as_f64().unwrap(), 1e-9);
    }
    assert_eq!(proportion(0, 0, 0.95).high, 1.0);
    assert_eq!(proportion(3, 2, 0.95).low, 0.0);
}

/// All of n samples pass: the lower limit at 95 % (two-sided) is 0.025^(1/n), so n = ln 0.025 / ln 0.99 = 367.1 decides.
#[test]
fn the_number_of_samples_that_decides_is_told() {
    let needed = samples_to_decide(1.0, 0.99, 0.95).unwrap();
    assert!((368..=374).contains(&needed), "{needed}");
    let close_by = samples_to_decide(0.991, 0.99, 0.95).unwrap();
    assert!((30_000..60_000).contains(&close_by), "{close_by}");
    assert_eq!(samples_to_decide(0.99, 0.99, 0.95), None);
}

/// y = 2 a - 3 b + c + 5 d with a bias on a and d and random b, c: every figure by hand.
#[test]
fn a_linear_response_is_combined_as_by_hand() {
    let list = [("a", 9.0, 10.0, 11.0), ("b", 0.9, 1.0, 1.1), ("c", -3.0, 0.0, 5.0), ("d", 1.0, 1.0, 1.2)];
    let line = |at: &[f64]| 2.0 * at[0] - 3.0 * at[1] + at[2] + 5.0 * at[3];
    let roles = [Role::Bias, UNIFORM, NORMAL, Role::Bias];
    for (lowest, bias, worse) in [(true, -2.0, -1.0), (false, 2.0 + 5.0 * 0.2, 1.0)] {
        let found = combined(&stage(&list, line), &roles, lowest, 3.0).unwrap();
        close(found.nominal, 22.0, 1e-12);
        // The limits of c are not symmetric about its nominal value: their middle is 1 above it.
        close(found.bias, bias + 1.0, 1e-12);
        let deviation = ((3.0_f64 * 0.1).powi(2) / 3.0 + (4.0_f64 / 3.0).powi(2)).sqrt();
        close(found.deviation, deviation, 1e-12);
        close(found.end, 22.0 + bias + 1.0 + worse * 3.0 * deviation, 1e-12);
        assert!(found.linear && found.departure < 1e-9, "{found:?}");
        let order: Vec<usize> = found.terms.iter().map(|term| term.axis).collect();
        assert_eq!(order, [2, 0, 3, 1], "by what each can do: 4, 2, 0.5, 0.3");
        for (term, sensitivity) in found.terms.iter().zip([1.0, 2.0, 5.0, -3.0]) {
            close(term.sensitivity, sensitivity, 1e-9);
            close(
                term.reach.abs(),
                [0.3, 0.5, 2.0, 4.0][[1, 3, 0, 2].iter().position(|&a| a == term.axis).unwrap()],
                1e-9,
            );
        }
    }
}

#[test]
fn a_triangular_input_counts_by_the_root_of_six() {
    let roles = [Role::Random(Distribution::Triangular)];
    let found =
        combined(&stage(&[("a", -1.0, 0.0, 1.0)], |at| 6.0_f64.sqrt() * at[0]), &roles, true, 2.0).unwrap();
    close(found.deviation, 1.0, 1e-12);
    close(found.end, -2.0, 1e-12);
}

#[test]
fn a_response_that_is_not_straight_is_told_so() {
    let list = [("a", -1.0, 0.0, 1.0), ("b", -1.0, 0.0, 1.0)];
    let both = [UNIFORM, UNIFORM];
    let square = combined(&stage(&list, |at| at[0] * at[0] + 0.1 * at[1]), &both, false, 3.0).unwrap();
    assert!(!square.linear, "{square:?}");
    // Straight along each axis, bent between them.
    let saddle =
        combined(&stage(&list, |at| at[0] + at[1] + 2.0 * at[0] * at[1]), &both, false, 3.0).unwrap();
    assert!(!saddle.linear, "{saddle:?}");
    // Biases that act on each other.
    let biased = [Role::Bias, Role::Bias];
    let product = combined(&stage(&list, |at| (1.0 + at[0]) * (1.0 + at[1])), &biased, false, 3.0).unwrap();
    assert!(!product.linear, "{product:?}");
    let nearly =
        combined(&stage(&list, |at| libm::exp(0.05 * at[0]) + 0.1 * at[1]), &both, false, 3.0).unwrap();
    assert!(nearly.linear && nearly.departure > 1e-4, "{nearly:?}");
    let jump = stage(&list, |at| if at[0] > 0.9 { f64::NAN } else { at[1] });
    assert_eq!(combined(&jump, &both, true, 3.0), Err(Miss::NotFinite));
    let still = combined(&stage(&list, |_| 4.0), &both, true, 3.0).unwrap();
    assert!(still.linear && still.end == 4.0 && still.terms.is_empty());
}

#[test]
fn bias_stands_where_it_is_held() {
    let stage =
        stage(&[("a", 0.0, 1.0, 4.0), ("b", -1.0, 0.0, 1.0)], |at| -(at[0] - 2.0).powi(2) + 0.5 * at[1]);
    let roles = [Role::Bias, UNIFORM];
    let ask =
        Combine { output: 0, lowest: false, roles: &roles, held: Some(&[2.0, 0.0]), coverage_factor: 1.0 };
    let found = spread::combine(&stage, &ask).unwrap();
    close(found.bias, 1.0, 1e-12);
    close(found.end, 0.5 / 3.0_f64.sqrt(), 1e-12);
}

/// JCGM 101:2008, clause 9.2 (additive model of four inputs of zero mean), values from memory. 9.2.2: normal inputs of unit
/// deviation, 95 % interval ±3.92. 9.2.3: rectangular ones of unit deviation, ±3.88 = ±2 √3 (2 - (3/5)^(1/4)), and ±3.92 by
/// the law of propagation. 9.2.4: one of them ten times as wide, ±17.0, against ±19.9.
#[test]
fn the_additive_examples_of_jcgm_101_come_out() {
    let root = 3.0_f64.sqrt();
    let sum = |at: &[f64]| at.iter().sum::<f64>();
    let wide = |last: f64| {
        [
            ("a", -root, 0.0, root),
            ("b", -root, 0.0, root),
            ("c", -root, 0.0, root),
            ("d", -root * last, 0.0, root * last),
        ]
    };
    for (last, interval, propagated, round) in [(1.0, 3.88, 3.92, 0.03), (10.0, 17.0, 19.9, 0.06)] {
        let response = stage(&wide(last), sum);
        let values = sorted(&response, &[UNIFORM; 4], 200_000, 7);
        let [low, high] = coverage_interval(&values, 0.95, 0.99).unwrap();
        close(low.value, -interval, round);
        close(high.value, interval, round);
        let k = coverage_factor(0.95);
        close(combined(&response, &[UNIFORM; 4], false, k).unwrap().end, propagated, 0.05);
    }
    // Limits at eight deviations cut nothing off.
    let normal = [Role::Random(Distribution::Normal { sigmas: 8.0 }); 4];
    let list = [("a", -8.0, 0.0, 8.0), ("b", -8.0, 0.0, 8.0), ("c", -8.0, 0.0, 8.0), ("d", -8.0, 0.0, 8.0)];
    let values = sorted(&stage(&list, sum), &normal, 200_000, 7);
    let [low, high] = coverage_interval(&values, 0.95, 0.99).unwrap();
    close(low.value, -3.92, 0.03);
    close(high.value, 3.92, 0.03);
    let mean = values.iter().sum::<f64>() / values.len() as f64;
    let deviation = (values.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / values.len() as f64).sqrt();
    close(mean, 0.0, 0.02);
    close(deviation, 2.0, 0.01);
}

/// Quantiles lie within their own stated limits of the exact ones, for sums of uniform inputs (Irwin 1927, Hall 1927) and a
/// product of normal ones. At 99.9 % confidence and twenty quantiles a right program fails one seed in fifty; this seed is fixed.
#[test]
fn quantiles_bracket_the_exact_ones() {
    let list = |n: usize| vec![("u", 0.0, 0.5, 1.0); n];
    for row in rows("irwin_hall") {
        let n = row["n"].as_u64().unwrap() as usize;
        let values = sorted(&stage(&list(n), |at| at.iter().sum()), &vec![UNIFORM; n], 20_000, 11);
        bracket(&values, &row);
    }
    let factors = [("x", 8.5, 10.0, 11.5), ("y", 2.1, 3.0, 3.9)];
    let values = sorted(&stage(&factors, |at| at[0] * at[1]), &[NORMAL; 2], 20_000, 11);
    rows("product").iter().for_each(|row| bracket(&values, row));
}

#[track_caller]
fn bracket(values: &[f64], row: &serde_json::Value) {
    let exact = row["quantile"].as_f64().unwrap();
    let found = quantile(values, row["share"].as_f64().unwrap(), 0.999).unwrap();
    let (low, high) = (found.low.unwrap(), found.high.unwrap());
    assert!(low <= exact && exact <= high, "{exact} outside {low} to {high}");
    assert!(high - low < 0.05 * (values[values.len() - 1] - values[0]), "{found:?}");
}

/// Of many runs of 200 samples, the stated limits of a quantile and of a share hold the true value about as often as they
/// say: 95 % at least, and not nearly always.
#[test]
fn stated_confidence_is_what_happens() {
    let response = stage(&[("u", 0.0, 0.5, 1.0)], |at| at[0]);
    let (mut of_quantile, mut of_share) = (0, 0);
    let runs = 600;
    for seed in 0..runs {
        let values = sorted(&response, &[UNIFORM], 200, seed);
        let found = quantile(&values, 0.9, 0.95).unwrap();
        of_quantile += u32::from(found.low.unwrap() <= 0.9 && found.high.unwrap() >= 0.9);
        let passed = values.iter().filter(|value| **value <= 0.9).count() as u64;
        let share = proportion(passed, 200, 0.95);
        of_share += u32::from(share.low <= 0.9 && share.high >= 0.9);
    }
    for held in [of_quantile, of_share] {
        let share = f64::from(held) / runs as f64;
        assert!((0.94..0.995).contains(&share), "{share}");
    }
}

#[test]
fn too_few_samples_bound_no_quantile() {
    let values: Vec<f64> = (0..20).map(f64::from).collect();
    let found = quantile(&values, 0.99, 0.95).unwrap();
    assert!(found.high.is_none() && found.low.is_some(), "{found:?}");
    assert!(quantile(&values, 0.01, 0.95).unwrap().low.is_none());
    assert!(quantile(&[], 0.5, 0.95).is_none());
}

#[test]
fn samples_do_not_depend_on_threads_and_bias_stays_held() {
    let list = [("a", 0.0, 1.0, 2.0), ("b", -1.0, 0.0, 1.0), ("c", 0.0, 1.0, 9.0)];
    let response = stage(&list, |at| if at[1] > 0.9 { f64::NAN } else { at[0] * libm::exp(at[1]) + at[2] });
    let roles = [UNIFORM, NORMAL, Role::Bias];
    let run = |threads: usize, seed: u64| {
        let sampling = Sampling { roles: &roles, held: &[1.0, 0.0, 9.0], samples: 1_500, seed, threads };
        spread::sample(&response, &[0], &sampling)
    };
    let one = run(1, 3);
    assert_eq!(one.len(), 1_500);
    assert!(one == run(2, 3) && one == run(3, 3));
    assert!(one != run(1, 4));
    assert!(one.iter().flatten().all(|value| value.is_err() || value.unwrap() >= 9.0));
    assert!(one.iter().flatten().any(|value| *value == Err(Miss::NotFinite)));
    // A longer run begins with the shorter one.
    let sampling = Sampling { roles: &roles, held: &[1.0, 0.0, 9.0], samples: 2_000, seed: 3, threads: 2 };
    assert_eq!(spread::sample(&response, &[0], &sampling)[..1_500], one[..]);
}

/// Root-sum-square and Monte Carlo agree where the response is linear and has many inputs, and both lie inside extreme value.
#[test]
fn three_methods_agree_on_what_they_should() {
    let draw = Draw::new(5);
    let weights: Vec<f64> = (0..9).map(|_| draw.between(-2.0, 2.0)).collect();
    let list = vec![("x", -1.0, 0.0, 1.0); 9];
    let response = stage(&list, |at| at.iter().zip(&weights).map(|(x, w)| x * w).sum());
    let worst: f64 = -weights.iter().map(|w| w.abs()).sum::<f64>();
    let ranges = spread::extremes(&response, &spread::Options::default());
    close(ranges[0].min.as_ref().unwrap().value, worst, 1e-9);
    let k = coverage_factor(0.98);
    let combined = combined(&response, &[UNIFORM; 9], true, k).unwrap();
    let values = sorted(&response, &[UNIFORM; 9], 50_000, 1);
    let sampled = quantile(&values, 0.01, 0.95).unwrap();
    close(combined.end, sampled.value, 0.03 * combined.end.abs());
    assert!(combined.linear && combined.end > worst && sampled.value > worst);
}
