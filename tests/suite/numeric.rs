//! The exponential function against mpmath (tests/reference/numeric_exp.py).

use qsheaf::numeric::exp;

#[test]
fn exp_is_within_one_unit_in_the_last_place() {
    let mut exact = 0;
    let text = include_str!("../reference/numeric_exp.csv");
    for line in text.lines() {
        let (x, wanted) = line.split_once(',').unwrap();
        let of = |word: &str| f64::from_bits(u64::from_str_radix(word, 16).unwrap());
        let (x, wanted) = (of(x), of(wanted));
        let off = exp(x).to_bits().abs_diff(wanted.to_bits());
        assert!(off <= 1, "exp({x:e}) = {:e}, not {wanted:e}", exp(x));
        exact += usize::from(off == 0);
    }
    let all = text.lines().count();
    // An error below 0.55 units rounds to the nearest double nearly always.
    assert!(all > 2500 && exact * 100 > all * 95, "{exact} of {all}");
}

#[test]
fn exp_at_the_ends_of_its_range() {
    assert_eq!(exp(f64::INFINITY), f64::INFINITY);
    assert_eq!(exp(f64::NEG_INFINITY), 0.0);
    assert_eq!((exp(709.79), exp(-745.2)), (f64::INFINITY, 0.0));
    assert!(exp(f64::NAN).is_nan());
    assert_eq!(exp(0.0), 1.0);
}

#[test]
fn exp_never_falls_while_its_argument_rises() {
    for k in -4000..4000 {
        let edge = (f64::from(k) + 0.5) * std::f64::consts::LN_2 / 64.0;
        let mut before = exp(edge - 1e-13);
        for step in -999..1000 {
            let now = exp(edge + f64::from(step) * 1e-16);
            assert!(now >= before * (1.0 - 2e-16), "at {edge}");
            before = now;
        }
    }
}

#[test]
fn exp_agrees_with_another_implementation() {
    let mut x = -700.0;
    while x < 700.0 {
        assert!((exp(x) / libm::exp(x) - 1.0).abs() < 4.5e-16, "{x}");
        x += 0.0917;
    }
}
