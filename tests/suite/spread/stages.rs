//! Stages whose extremes are known in closed form. Each comment derives the answer.

use qsheaf::spread::Method;

use super::{assert_extreme, range, regions};

const V_T: f64 = 0.025_852;

fn method(found: &Option<qsheaf::spread::Extreme>) -> Method {
    found.as_ref().expect("an extreme").method
}

/// P = I_C (V − I_C R) with I_C = β I_B until saturation: a parabola in I_C with its top V²/(4R) at I_C = V/(2R). The supply
/// is highest and the load lowest there: 13² / (4 · 99); β = V / (2 R I_B). In saturation the transistor takes nothing.
#[test]
fn transistor_power_peaks_inside_the_gain_range() {
    let found = range(&[("V", 11., 12., 13.), ("R", 99., 100., 101.), ("gain", 50., 120., 300.)], |at| {
        let current = (at[2] * 1e-3).min(at[0] / at[1]);
        current * (at[0] - current * at[1])
    });
    assert_extreme(&found.max, 169. / 396., &[(0, 13.), (1, 99.), (2, 13. / (2. * 99. * 1e-3))]);
    assert!(found.min.is_some_and(|min| min.value.abs() < 1e-12));
    assert_eq!(found.interior, [2]);
    assert!(found.non_monotone.contains(&2));
    assert_eq!(method(&found.max), Method::Searched);
}

/// P = V² R_L / (R_s + R_L)² is greatest at R_L = R_s (Jacobi): V² / (4 R_s). The least is at the end farther from R_s in
/// the logarithm: R_L = 200.
#[test]
fn power_transfer_peaks_at_equal_resistances() {
    let found = range(&[("V", 9., 10., 11.), ("R_s", 50., 50., 50.), ("R_L", 20., 100., 200.)], |at| {
        at[0] * at[0] * at[2] / ((at[1] + at[2]) * (at[1] + at[2]))
    });
    assert_extreme(&found.max, 121. / 200., &[(0, 11.), (2, 50.)]);
    assert_extreme(&found.min, 81. * 200. / 62_500., &[(0, 9.), (2, 200.)]);
    assert_eq!(found.interior, [2]);
    assert_eq!(found.non_monotone, [2]);
}

/// P = (V − I R_s − V_o) I: top (V − V_o)² / (4 R_s) at I = (V − V_o) / (2 R_s) = 10.5 / 18 A.
#[test]
fn series_pass_dissipation_peaks_at_half_the_short_circuit_current() {
    let found = range(
        &[("V", 14., 15., 15.5), ("R_s", 9., 10., 11.), ("V_o", 5., 5.1, 5.2), ("I", 0., 0.3, 0.7)],
        |at| (at[0] - at[3] * at[1] - at[2]) * at[3],
    );
    assert_extreme(&found.max, 10.5 * 10.5 / 36., &[(0, 15.5), (1, 9.), (2, 5.), (3, 10.5 / 18.)]);
    assert_eq!(found.interior, [3]);
}

/// V R_2 / (R_1 + R_2) rises with V and R_2 and falls with R_1 everywhere.
#[test]
fn a_divider_is_monotone() {
    let found =
        range(&[("V", 11., 12., 13.), ("R_1", 9.5e3, 1e4, 1.05e4), ("R_2", 4.465e3, 4.7e3, 4.935e3)], |at| {
            at[0] * at[2] / (at[1] + at[2])
        });
    assert_extreme(&found.max, 13. * 4.935 / (9.5 + 4.935), &[(0, 13.), (1, 9.5e3), (2, 4.935e3)]);
    assert_extreme(&found.min, 11. * 4.465 / (10.5 + 4.465), &[(0, 11.), (1, 1.05e4), (2, 4.465e3)]);
    assert_eq!((method(&found.min), method(&found.max)), (Method::Monotone, Method::Monotone));
    assert!(found.interior.is_empty() && found.non_monotone.is_empty());
}

/// P = V_Z ((V − V_Z) / R − I_L): at V = 13, R = 95, I_L = 0 the top over V_Z is V² / (4R) at V_Z = V / 2 = 6.5.
#[test]
fn zener_dissipation_peaks_inside_its_tolerance() {
    let found = range(
        &[("V", 11., 12., 13.), ("R", 95., 100., 105.), ("I_L", 0., 5e-3, 2e-2), ("V_Z", 5., 5.5, 7.)],
        |at| (at[3] * ((at[0] - at[3]) / at[1] - at[2])).max(0.),
    );
    assert_extreme(&found.max, 169. / 380., &[(0, 13.), (1, 95.), (2, 0.), (3, 6.5)]);
    assert_eq!(found.interior, [3]);
}

/// Drive margin m = 0.5 V − 2 mV/K (T − T₀) + 5 mV 2^((T − T₀)/10 K): the falling threshold against leakage that doubles each
/// 10 K. dm/dT = 0 where 2^(x/10) = 10 · 2 mV / (5 mV ln 2): x = 10 log₂(4 / ln 2) = 25.287 K.
#[test]
fn opposing_temperature_effects_meet_at_an_interior_ambient() {
    let found = range(&[("T_a", 253.15, 298.15, 343.15)], |at| {
        let x = at[0] - 298.15;
        0.5 - 2e-3 * x + 5e-3 * libm::exp2(x / 10.)
    });
    let ln2 = std::f64::consts::LN_2;
    let x = 10. * libm::log2(4. / ln2);
    assert_extreme(&found.min, 0.5 - 2e-3 * x + 5e-3 * 4. / ln2, &[(0, 298.15 + x)]);
    assert_extreme(&found.max, 0.5 + 0.09 + 5e-3 * libm::exp2(-4.5), &[(0, 253.15)]);
    assert_eq!((&found.interior[..], &found.non_monotone[..]), (&[0][..], &[0][..]));
}

/// Load power at a current limit: I² R as long as the transistor is active, V² / R once it saturates. The kink at R = V / I
/// is the top: V I = 13 · 0.03.
#[test]
fn load_power_peaks_at_the_kink_between_active_and_saturated() {
    let found = regions(&[("V", 11., 12., 13.), ("I", 0.02, 0.025, 0.03), ("R", 50., 300., 800.)], |at| {
        let active = at[1] * at[2] < at[0];
        let power = if active { at[1] * at[1] * at[2] } else { at[0] * at[0] / at[2] };
        (power, u64::from(active))
    });
    assert_extreme(&found.max, 0.39, &[(0, 13.), (1, 0.03), (2, 13. / 0.03)]);
    assert_eq!(found.interior, [2]);
    assert_eq!(found.regions.len(), 2);
}

/// (g₁ − 1)(g₂ − 1) is a saddle with its flat point at nominal: no sensitivity there points anywhere. Its corners give ±0.01.
#[test]
fn a_saddle_of_opposing_tolerances() {
    let found = range(&[("g_1", 0.9, 1., 1.1), ("g_2", 0.9, 1., 1.1)], |at| (at[0] - 1.) * (at[1] - 1.));
    assert_extreme(&found.max, 0.01, &[]);
    assert_extreme(&found.min, -0.01, &[]);
    assert_eq!(found.non_monotone.len(), 2);
    assert_eq!(method(&found.max), Method::Vertices);
}

/// The same saddle among ten other tolerances, too many for all vertices: Σ 0.001 x_i adds 0.01 at its corner.
#[test]
fn a_saddle_among_many_axes() {
    let mut list = vec![("g_1", 0.9, 1., 1.1), ("g_2", 0.9, 1., 1.1)];
    list.extend([("x", -1., 0., 1.); 10]);
    let found =
        range(&list, |at| (at[0] - 1.) * (at[1] - 1.) + at[2..].iter().map(|x| 1e-3 * x).sum::<f64>());
    assert_extreme(&found.max, 0.02, &[(2, 1.), (11, 1.)]);
    assert_extreme(&found.min, -0.02, &[(2, -1.), (11, -1.)]);
    assert!(found.non_monotone.contains(&0) || found.non_monotone.contains(&1));
    assert_eq!((method(&found.min), method(&found.max)), (Method::Searched, Method::Searched));
}

/// A clamped output: nothing that varies moves it.
#[test]
fn a_flat_output_is_exact() {
    let found = range(&[("V", 11., 12., 13.), ("R", 95., 100., 105.)], |at| at[0].min(5.) + 0. * at[1]);
    assert_extreme(&found.max, 5., &[(0, 12.), (1, 100.)]);
    assert_extreme(&found.min, 5., &[(0, 12.), (1, 100.)]);
    assert_eq!((method(&found.min), method(&found.max)), (Method::Exact, Method::Exact));
    assert!(found.interior.is_empty() && found.non_monotone.is_empty());
    assert!(found.max.is_some_and(|max| max.matters.is_empty()));
}

/// Flat over most of an axis: the transistor is saturated (V_CE = 0.2) from a gain of 80 on, below that V − β I_B R, with
/// V = 8.2, I_B R = 0.1: 3.2 at a gain of 50. The axis rests at a vertex for the maximum, anywhere for the minimum.
#[test]
fn an_output_flat_over_most_of_an_axis() {
    let found = range(&[("gain", 50., 150., 300.)], |at| (8.2 - at[0] * 0.1).max(0.2));
    assert_extreme(&found.max, 3.2, &[(0, 50.)]);
    assert_extreme(&found.min, 0.2, &[]);
    assert!(found.non_monotone.is_empty());
    assert_eq!(method(&found.max), Method::Monotone);
}

/// A threshold stage follows its input up to 5.2 V and then trips to 0.2 V: the least upper bound 5.2 V is approached from
/// below, inside the axis.
#[test]
fn a_discontinuous_change_of_region() {
    let found = regions(&[("V", 3., 4., 9.)], |at| {
        if at[0] <= 5.2 { (at[0], 0) } else { (0.2 + (at[0] - 5.2) / 100., 1) }
    });
    assert_extreme(&found.max, 5.2, &[(0, 5.2)]);
    assert_extreme(&found.min, 0.2, &[(0, 5.2)]);
    assert_eq!(found.regions.len(), 2);
    assert_eq!((&found.interior[..], &found.non_monotone[..]), (&[0][..], &[0][..]));
}

/// f = x₀ (0.5 − Σ w x_i) + Σ c x_i over ±1, w = 0.05 i mod 0.2 ..., is linear in every axis. At nominal ∂f/∂x₀ = 0.5 > 0; the
/// maximum is the larger of 0.5 + Σ|c − w| (x₀ = 1) and −0.5 + Σ|c + w| (x₀ = −1), which is x₀ = −1 for c = w.
#[test]
fn sixteen_axes_with_the_wrong_sign_at_nominal() {
    let list = [("x", -1., 0., 1.); 16];
    let weight = |i: usize| 0.04 + 0.01 * i as f64;
    let found = range(&list, |at| {
        let sums = (1..16).map(|i| weight(i) * at[i]).sum::<f64>();
        at[0] * (0.5 - sums) + sums
    });
    let total: f64 = (1..16).map(weight).sum();
    // c = w: x₀ = 1 leaves 0.5, x₀ = −1 gives −0.5 + 2 Σ w.
    assert_extreme(&found.max, 2. * total - 0.5, &[(0, -1.), (1, 1.), (15, 1.)]);
    assert_extreme(&found.min, -2. * total - 0.5, &[(0, -1.), (1, -1.), (15, -1.)]);
    assert!(found.non_monotone.contains(&0));
}

/// f = x y − 0.1 (x + y) from nominal (0.5, 0.5): the signs there point to (1, 1) with 0.8; each single flip gives −1; both
/// together give (−1, −1) with 1.2. Eight small tolerances forbid all vertices.
#[test]
fn a_coupled_pair_needs_both_flips() {
    let mut list = vec![("x", -1., 0.5, 1.), ("y", -1., 0.5, 1.)];
    list.extend([("z", -1., 0., 1.); 8]);
    let found = range(&list, |at| {
        at[0] * at[1] - 0.1 * (at[0] + at[1]) + at[2..].iter().map(|z| 0.01 * z).sum::<f64>()
    });
    assert_extreme(&found.max, 1.28, &[(0, -1.), (1, -1.), (2, 1.)]);
    assert_extreme(&found.min, -1.08, &[(2, -1.)]);
}

/// I_E = (V_B − V_BE) / (R_E + R_B / (β + 1)) is monotone in all of its five inputs.
#[test]
fn an_emitter_degenerated_stage_is_monotone() {
    let found = range(
        &[
            ("V_B", 1.9, 2., 2.1),
            ("V_BE", 0.6, 0.65, 0.7),
            ("R_E", 990., 1e3, 1010.),
            ("R_B", 9.5e3, 1e4, 1.05e4),
            ("gain", 100., 180., 300.),
        ],
        |at| (at[0] - at[1]) / (at[2] + at[3] / (at[4] + 1.)),
    );
    assert_extreme(&found.max, 1.5 / (990. + 9.5e3 / 301.), &[(4, 300.)]);
    assert_extreme(&found.min, 1.2 / (1010. + 1.05e4 / 101.), &[(4, 100.)]);
    assert_eq!((method(&found.min), method(&found.max)), (Method::Monotone, Method::Monotone));
}

/// Two stages in a row: I = β₁ β₂ I_B, P = I (V − I R) until saturation. The top V² / (4R) lies on a whole curve of
/// β₁ β₂ = V / (2 R I_B); one of the two gains must be inside.
#[test]
fn a_ridge_across_two_gains() {
    let found = range(
        &[
            ("V", 11., 12., 13.),
            ("R", 9.5, 10., 10.5),
            ("gain_1", 30., 60., 120.),
            ("gain_2", 30., 60., 120.),
        ],
        |at| {
            let current = (at[2] * at[3] * 1e-4).min(at[0] / at[1]);
            current * (at[0] - current * at[1])
        },
    );
    assert_extreme(&found.max, 169. / 38., &[(0, 13.), (1, 9.5)]);
    let product = found.max.as_ref().map_or(0., |max| max.at[2] * max.at[3]);
    assert!((product / (13. / (2. * 9.5 * 1e-4)) - 1.).abs() < 1e-3);
    assert!(!found.interior.is_empty());
}

/// One side of a long-tailed pair: share s = 1 / (1 + exp(−v/V_T)) of the tail current I, P = s I (V − s I R). With V = 6,
/// I R = 10 V the top V² / (4R) lies at s = 0.3: v = V_T ln(0.3 / 0.7).
#[test]
fn a_long_tailed_pair_dissipates_most_off_balance() {
    let found = range(&[("v", -0.1, 0.01, 0.1), ("V", 5., 5.5, 6.)], |at| {
        let current = 1e-3 / (1. + libm::exp(-at[0] / V_T));
        current * (at[1] - current * 1e4)
    });
    assert_extreme(&found.max, 36. / 4e4, &[(0, V_T * libm::log(0.3 / 0.7)), (1, 6.)]);
    assert_eq!(found.interior, [0]);
}

/// Lower resistor of a divider: V² R_2 / (R_1 + R_2)² has its top V² / (4 R_1) at R_2 = R_1 with R_1 least: 95 inside 80..150.
#[test]
fn a_divider_resistor_takes_most_when_equal() {
    let found = range(&[("R_1", 95., 100., 105.), ("R_2", 80., 120., 150.)], |at| {
        100. * at[1] / ((at[0] + at[1]) * (at[0] + at[1]))
    });
    assert_extreme(&found.max, 100. / 380., &[(0, 95.), (1, 95.)]);
    // Least at R_1 = 105: 100 · 150 / 255² = 0.23068, or 100 · 80 / 185² = 0.23375.
    assert_extreme(&found.min, 15_000. / 65_025., &[(0, 105.), (1, 150.)]);
    assert_eq!(found.interior, [1]);
}

/// The magnitude of a bridge's voltage is 0 at balance R_1 R_4 = R_2 R_3, a V-shaped valley inside the tolerances; its
/// maximum 10 |1.1/2.0 − 0.9/2.0| = 1 V lies at a vertex.
#[test]
fn a_bridge_balances_inside() {
    let resistor = ("R", 90., 98., 110.);
    let found = range(&[resistor, resistor, resistor, resistor], |at| {
        10. * (at[1] / (at[0] + at[1]) - at[3] / (at[2] + at[3])).abs()
    });
    assert!(found.min.as_ref().is_some_and(|min| min.value.abs() < 1e-6), "{found:?}");
    assert_extreme(&found.max, 1., &[]);
    assert!(!found.non_monotone.is_empty());
    assert_eq!(method(&found.max), Method::Vertices);
}

/// Class B pair: P = 2 V V_p / (π R) − V_p² / (2R) has its top 2 V² / (π² R) at V_p = 2 V / π (textbook result).
#[test]
fn a_class_b_pair_dissipates_most_below_full_swing() {
    let pi = std::f64::consts::PI;
    let found = range(&[("V", 14., 15., 16.), ("V_p", 0., 6., 14.), ("R", 7.6, 8., 8.4)], |at| {
        2. * at[0] * at[1] / (pi * at[2]) - at[1] * at[1] / (2. * at[2])
    });
    assert_extreme(&found.max, 512. / (pi * pi * 7.6), &[(0, 16.), (1, 32. / pi), (2, 7.6)]);
    assert_eq!(found.interior, [1]);
}

/// Halfway through a resistive switching edge the power is V I / 4: V I s (1 − s) with s the share of the edge.
#[test]
fn a_switching_edge_peaks_halfway() {
    let found = range(&[("V", 11., 12., 14.8), ("I", 0.09, 0.1, 0.11), ("s", 0., 0.2, 1.)], |at| {
        at[0] * at[1] * at[2] * (1. - at[2])
    });
    assert_extreme(&found.max, 14.8 * 0.11 / 4., &[(0, 14.8), (1, 0.11), (2, 0.5)]);
    assert!(found.min.is_some_and(|min| min.value == 0.));
}

/// Noise factor 1 + (e² + i² R²) / (4kT R) is least at R = e / i: 1 + 2 e i / 4kT; e = 4 nV, i = 2 pA give R = 2 kΩ.
#[test]
fn a_noise_factor_has_its_least_value_inside() {
    let four_kt = 1.6e-20;
    let found = range(&[("R", 200., 600., 2e4), ("e", 4e-9, 5e-9, 6e-9)], |at| {
        1. + (at[1] * at[1] + 4e-24 * at[0] * at[0]) / (four_kt * at[0])
    });
    assert_extreme(&found.min, 1. + 2. * 4e-9 * 2e-12 / four_kt, &[(0, 2e3), (1, 4e-9)]);
    // The top is at an end: at R = 200 with e high 1 + 3.616e-17 / 3.2e-18, at R = 2e4 1 + 1.636e-15 / 3.2e-16.
    assert_extreme(&found.max, 1. + (3.6e-17 + 1.6e-19) / 3.2e-18, &[(0, 200.), (1, 6e-9)]);
    assert_eq!((&found.interior[..], &found.non_monotone[..]), (&[0][..], &[0][..]));
}

/// Gain I R / V_T grows with bias until the collector meets the base: beyond V_C = 1 V it collapses as the headroom left,
/// (V − I R). Gain = min(I R, 4 (V − I R)) / V_T, top at I R = 0.8 V.
#[test]
fn a_gain_peaks_where_headroom_ends() {
    let found = range(&[("V", 8., 9., 10.), ("I", 0.5e-3, 1e-3, 2e-3), ("R", 4e3, 5e3, 6e3)], |at| {
        let drop = at[1] * at[2];
        drop.min(4. * (at[0] - drop)) / V_T
    });
    assert_extreme(&found.max, 8. / V_T, &[(0, 10.)]);
    assert!(!found.interior.is_empty());
}

/// A push-pull stage on unequal supplies: at drive s its conducting half dissipates |s| k (V − |s| k R) and each half has a
/// top V² / (4R): 36 / 4 on the positive side, 49 / 4 on the negative, which must be found from a positive nominal.
#[test]
fn the_higher_of_two_humps() {
    let found = range(&[("s", -8., 3., 8.), ("R", 1., 1.05, 1.1)], |at| {
        let (drive, supply) = if at[0] > 0. { (at[0], 6.) } else { (-at[0], 7.) };
        let current = drive.min(supply / at[1]);
        current * (supply - current * at[1])
    });
    assert_extreme(&found.max, 49. / 4., &[(0, -3.5), (1, 1.)]);
    assert_eq!(found.interior, [0]);
}

/// A resonant load: |H| = 1 / √((1 − u²)² + (u/Q)²) has its top Q / √(1 − 1/(4Q²)) at u² = 1 − 1/(2Q²); Q is largest there.
#[test]
fn a_resonance_inside_a_frequency_band() {
    let found = range(&[("u", 0.4, 0.7, 1.6), ("Q", 8., 10., 12.)], |at| {
        let u = at[0];
        let (real, imaginary) = (1. - u * u, u / at[1]);
        1. / (real * real + imaginary * imaginary).sqrt()
    });
    assert_extreme(
        &found.max,
        12. / (1. - 1. / 576_f64).sqrt(),
        &[(0, (1. - 1. / 288_f64).sqrt()), (1, 12.)],
    );
    assert_eq!(found.interior, [0]);
}

/// Two stages limit one another: f = min(2x − y, 2y − x) over 0.1..1 and 0.2..0.9 rises only along x = y: at (0.9, 0.9) it
/// is 0.9; x may go on to 1, which lowers 2y − x. No single axis climbs the ridge.
#[test]
fn a_kinked_ridge_is_climbed_diagonally() {
    let found = range(&[("x", 0.1, 0.4, 1.), ("y", 0.2, 0.4, 0.9)], |at| {
        (2. * at[0] - at[1]).min(2. * at[1] - at[0])
    });
    assert_extreme(&found.max, 0.9, &[(0, 0.9), (1, 0.9)]);
    // Least: 2x − y at (0.1, 0.9) is −0.7, 2y − x at (1, 0.2) is −0.6.
    assert_extreme(&found.min, -0.7, &[(0, 0.1), (1, 0.9)]);
}

/// A narrow valley across two axes: f = −(x + y − 1)² − 0.01 (x − y)² has its top 0 at (0.5, 0.5), far from nominal.
#[test]
fn a_rotated_ridge_is_followed_to_its_top() {
    let found = range(&[("x", 0., 0.05, 1.), ("y", 0., 0.8, 1.)], |at| {
        let (sum, difference) = (at[0] + at[1] - 1., at[0] - at[1]);
        1. - sum * sum - 0.01 * difference * difference
    });
    assert_extreme(&found.max, 1., &[]);
    assert_eq!(found.interior, [0, 1]);
}

/// A relay driver has no solution at all above 14 V: that is told, and the rest is still bounded.
#[test]
fn a_space_with_a_hole_tells_where() {
    let found = range(&[("V", 10., 12., 15.), ("R", 90., 100., 110.)], |at| {
        if at[0] > 14. { f64::NAN } else { at[0] / at[1] }
    });
    let (_, at) = found.missing.expect("a point without a value");
    assert!(at[0] > 14.);
    assert_extreme(&found.max, 14. / 90., &[(1, 90.)]);
    assert_eq!(method(&found.max), Method::Searched);
    assert_eq!(found.nominal, Ok(0.12));
}
