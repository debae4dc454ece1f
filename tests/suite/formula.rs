//! Formulas: value, dimensions with both sides named, places, mathematics and speech.

use std::sync::Arc;

use qsheaf::formula::{self, Formula, Relation};
use qsheaf::markup::Math;
use qsheaf::quantity::{Dimension, Kind, Unit};
use qsheaf::source::Place;

fn place() -> Place {
    let file: Arc<str> = "note.md".into();
    Place::new(&file, 7, 11, 0)
}

fn kind(name: &str) -> Option<Kind> {
    Some(match name {
        "V" | "V_CC" | "Q1.V_CE" | "Q1.V_CE(sat)" => Kind::of(Dimension::VOLT),
        "I" | "I_C" => Kind::of(Dimension::AMPERE),
        "R" | "R_1" | "R_2" | "R_3" => Kind::of(Dimension::OHM),
        "beta" | "x" | "y" | "z" => Kind::NONE,
        "T_j" | "T_a" => Kind::TEMPERATURE,
        "dT" => Kind::of(Dimension::KELVIN),
        "R_th" => Kind::of(Dimension::KELVIN_PER_WATT),
        "P" => Kind::of(Dimension::WATT),
        _ => return None,
    })
}

const NAMES: [&str; 8] = ["V_CC", "I_C", "R_1", "R_2", "beta", "T_j", "T_a", "dT"];

fn value(text: &str) -> f64 {
    let slots =
        [("x", 3.0), ("y", -2.0), ("z", 0.5), ("R_1", 100.0), ("R_2", 300.0), ("T_a", 298.15), ("dT", 40.0)];
    let formula = Formula::parse(text, &place()).unwrap_or_else(|e| panic!("{text}: {e:?}"));
    let tape = formula.compile(&|name| slots.iter().position(|(n, _)| *n == name)).unwrap();
    tape.eval(&slots.map(|(_, value)| value))
}

fn found(text: &str) -> Result<Kind, String> {
    let list = |d: qsheaf::diagnostic::Diagnostics| {
        d.0.iter()
            .map(|d| {
                let near = d.nearest.as_ref().map_or(String::new(), |n| format!(" ({n}?)"));
                format!("{}: {}{near}", d.place.as_ref().unwrap().column, d.message)
            })
            .collect::<Vec<_>>()
            .join("; ")
    };
    let formula = Formula::parse(text, &place()).map_err(list)?;
    formula.kind(&kind, &mut NAMES.into_iter()).map_err(list)
}

#[test]
fn arithmetic_is_never_that_of_integers_and_powers_group_to_the_right() {
    for (text, expected) in [
        ("1/2", 0.5),
        ("7/2*2", 7.0),
        ("2^3^2", 512.0),
        ("-2^2", -4.0),
        ("2^-1", 0.5),
        ("(-2)^2", 4.0),
        ("2^-2^2", 0.0625),
        ("2 * 3 + 4", 10.0),
        ("2 - 3 - 4", -5.0),
        ("100 / 10 / 2", 5.0),
        ("2 · 3 × 4", 24.0),
        ("5 − 3", 2.0),
        ("2 - -3", 5.0),
        ("R_1 || R_2", 75.0),
        ("(R_1 || R_2 || R_2)", 60.0),
        ("R_1 + (R_2 || R_2)", 250.0),
        ("min(x, y, z)", -2.0),
        ("max(x, y, z) - min(x, y)", 5.0),
        ("abs(y)", 2.0),
        ("sqrt(x + 1)", 2.0),
        ("exp(ln(x))", 3.0),
        ("log10(1000)", 3.0),
        ("sin(0) + cos(0) + tan(0) + atan(0)", 1.0),
        ("if(x > 2, 10, 20)", 10.0),
        ("if(x < 2, 10, if(y <= -2, 30, 40))", 30.0),
        ("sqrt(2^sqrt(4)) ^ 2 + 1", 5.0),
        ("3 %", 0.03),
        ("4.7 kΩ", 4700.0),
        ("4k7 + 300 Ω", 5000.0),
        ("2.5e-3 A", 2.5e-3),
        ("25.7 mV / z", 0.0514),
        ("125 °C", 398.15),
        ("T_a + dT", 338.15),
        ("40 dB", 100.0),
        ("180 deg", std::f64::consts::PI),
    ] {
        let got = value(text);
        assert!(
            (got - expected).abs() <= 1e-12 * expected.abs().max(1e-3),
            "{text} gave {got}, not {expected}"
        );
    }
}

#[test]
fn dimensions_are_checked_and_both_sides_named() {
    for (text, expected) in [
        ("V_CC / R_1", Kind::of(Dimension::AMPERE)),
        ("V_CC * I_C", Kind::of(Dimension::WATT)),
        ("V_CC^2 / R_1", Kind::of(Dimension::WATT)),
        ("sqrt(P * R_1)", Kind::of(Dimension::VOLT)),
        ("(V_CC^2)^0.5", Kind::of(Dimension::VOLT)),
        ("(V_CC^2)^(1/2)", Kind::of(Dimension::VOLT)),
        ("T_a + R_th * P", Kind::TEMPERATURE),
        ("T_a - 10 K", Kind::TEMPERATURE),
        ("T_j - T_a", Kind::of(Dimension::KELVIN)),
        ("Q1.V_CE(sat) - Q1.V_CE", Kind::of(Dimension::VOLT)),
    ] {
        assert_eq!(found(text), Ok(expected), "{text}");
    }
    for (text, expected) in [
        ("V_CC + I_C", "11: the two sides of `+` do not fit: V on the left, A on the right"),
        ("V_CC - 3", "11: the two sides of `-` do not fit: V on the left, a plain number on the right"),
        ("T_a + T_j", "11: two temperatures are added"),
        ("dT - T_a", "11: a temperature is taken from a temperature difference"),
        ("exp(V_CC)", "15: `exp` is given a value in V"),
        ("V_CC ^ x", "18: a value in V has this exponent"),
        ("x ^ V_CC", "15: the exponent is in V"),
        ("sqrt(V_CX)", "16: unknown name `V_CX` (V_CC?)"),
        ("min(V_CC, I_C)", "11: the values of this function do not fit: V on the left, A on the right"),
        ("(R_1 || V_CC)", "12: the two sides of `||` do not fit: Ω on the left, V on the right"),
    ] {
        assert_eq!(found(text).unwrap_err(), expected, "{text}");
    }
}

#[test]
fn comparisons_know_a_temperature_from_a_difference() {
    let check = |text: &str| {
        Relation::parse(text, &place())
            .and_then(|relation| relation.kind(&kind, &mut NAMES.into_iter()))
            .map_err(|d| d.0[0].message.clone())
    };
    assert_eq!(check("T_j <= 125 °C"), Ok(Kind::TEMPERATURE));
    assert_eq!(check("T_j <= 398 K"), Ok(Kind::TEMPERATURE));
    assert_eq!(check("T_j - T_a <= 40 K"), Ok(Kind::of(Dimension::KELVIN)));
    assert!(
        check("T_j <= dT")
            .unwrap_err()
            .contains("a temperature on the left, a temperature difference on the right")
    );
    assert!(check("T_j - T_a <= 40 °C").is_ok_and(|kind| kind.point) || check("T_j - T_a <= 40 °C").is_err());
    assert!(check("V_CC <= 3 A").unwrap_err().contains("V on the left, A on the right"));
    assert!(check("1 V <= V_CC <= 3 V").unwrap_err().contains("second comparison"));
}

#[test]
fn mistakes_are_errors_with_their_place() {
    for (text, expected) in [
        ("", "11: the formula is missing"),
        ("2 R_1", "13: `R_1` is no unit"),
        ("V_CC R_1", "16: two values stand side by side"),
        ("R_1 + R_2 || R_3", "21: `||` stands beside another operator"),
        ("(V_CC", "11: this bracket is never closed"),
        ("V_CC)", "15: this bracket was never opened"),
        ("sqr(x)", "11: there is no function `sqr` (sqrt?)"),
        ("sqrt(x, y)", "11: `sqrt` was given 2 values"),
        ("min(x)", "11: `min` was given 1 values"),
        ("V_CC +", "16: a value is missing after this"),
        ("* V_CC", "11: a value is missing before `*`"),
        ("1e999", "11: this is not a finite number"),
        ("x = 3", "13: `=` has no meaning in a formula"),
        ("x == 3", "13: `==` cannot be judged on measured quantities"),
        ("3 mv", "13: `mv` is no unit (mV?)"),
        ("x < 3", "13: a comparison stands inside a formula"),
        ("if(x, 1, 2)", "11: the condition of `if` is no comparison"),
        ("1,5", "12: a comma stands outside a function"),
    ] {
        assert_eq!(found(text).unwrap_err(), expected, "{text}");
    }
    let deep = format!("{}x{}", "(".repeat(100_000), ")".repeat(100_000));
    assert!(found(&deep).is_err());
    let deep = format!("{}x{}", "(".repeat(60), ")".repeat(60));
    assert!(found(&deep).unwrap_err().contains("nested too deep"));
}

#[test]
fn random_text_is_never_a_panic() {
    let alphabet = [
        "x", "R_1", "3", "V", " ", "(", ")", "^", "-", "+", "||", ",", "if(", "<", "sqrt(", "4k7", "°C", "é",
        "\u{0}", "/", ".",
    ];
    let mut seed = 3_u64;
    for _ in 0..20_000 {
        let text: String = (0..12)
            .map(|_| {
                seed = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
                alphabet[(seed >> 33) as usize % alphabet.len()]
            })
            .collect();
        let _ = found(&text);
        let _ = Relation::parse(&text, &place());
    }
}

/// Random trees: written as text, parsed and evaluated, against an evaluation of the tree itself.
#[test]
fn random_trees_come_back_with_their_value() {
    let mut seed = 11_u64;
    let mut next = |n: u64| {
        seed = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (seed >> 33) % n
    };
    fn grow(depth: u32, next: &mut dyn FnMut(u64) -> u64) -> (String, f64) {
        if depth == 0 || next(4) == 0 {
            return match next(4) {
                0 => ("x".to_owned(), 3.0),
                1 => ("z".to_owned(), 0.5),
                2 => ("y".to_owned(), -2.0),
                _ => {
                    let n = next(9) + 1;
                    (format!("{n}"), n as f64)
                }
            };
        }
        let (a, b) = (grow(depth - 1, next), grow(depth - 1, next));
        match next(7) {
            0 => (format!("({} + {})", a.0, b.0), a.1 + b.1),
            1 => (format!("({} - {})", a.0, b.0), a.1 - b.1),
            2 => (format!("({}) * ({})", a.0, b.0), a.1 * b.1),
            3 => (format!("(({}) / ({}))", a.0, b.0), a.1 / b.1),
            4 => (format!("max({}, {})", a.0, b.0), a.1.max(b.1)),
            5 => (format!("(-{})", format_args!("({})", a.0)), -a.1),
            _ => (format!("if({} < {}, {}, {})", a.0, b.0, b.0, a.0), if a.1 < b.1 { b.1 } else { a.1 }),
        }
    }
    for _ in 0..2000 {
        let (text, expected) = grow(3, &mut next);
        if !expected.is_finite() || text.len() > 1900 {
            continue;
        }
        let got = value(&text);
        assert!(
            (got - expected).abs() <= 1e-12 * expected.abs().max(1.0) || got.is_nan(),
            "{text}: {got} {expected}"
        );
    }
}

#[test]
fn mathematics_keeps_the_grouping_of_the_tree() {
    let show = |text: &str| flat(&formula::symbols(&Formula::parse(text, &place()).unwrap().expr));
    assert_eq!(show("(V_CC - Q1.V_CE(sat)) / R_1"), "frac{V[CC]−Q1:V[CE(sat)]}{R[1]}");
    assert_eq!(show("V_CC - (I_C - x)"), "V[CC]−(I[C]−x)");
    assert_eq!(show("(V_CC + x) * beta"), "(V[CC]+x)·β");
    assert_eq!(show("(R_1 || R_2) + x"), "R[1]∥R[2]+x");
    assert_eq!(show("x * (R_1 || R_2)"), "x·(R[1]∥R[2])");
    assert_eq!(show("(x / y)^2"), "(frac{x}{y})^{2}");
    assert_eq!(show("(-x)^2"), "(−x)^{2}");
    assert_eq!(show("25.7 mV / I_C"), "frac{25.7 mV}{I[C]}");
    assert_eq!(show("4k7 * x"), "4.7 kΩ·x");
    let numbers = |text: &str| {
        let value_of = |name: &str| {
            let unit = |symbol: &str| qsheaf::quantity::parse_unit(symbol).unwrap();
            match name {
                "V_CC" => Some((12.0, unit("V"))),
                "I_C" => Some((-2e-3, unit("mA"))),
                "x" => Some((3.0, Unit::none())),
                _ => None,
            }
        };
        flat(&formula::numbers(&Formula::parse(text, &place()).unwrap().expr, &value_of))
    };
    assert_eq!(numbers("V_CC - I_C * x"), "12.00 V−−2.000 mA·3.000".replace("−−2.000 mA", "−(−2.000 mA)"));
    assert_eq!(numbers("V_CC^2"), "(12.00 V)^{2}");
}

fn flat(math: &Math) -> String {
    match math {
        Math::Row { parts } => parts.iter().map(flat).collect(),
        Math::Symbol { base, subscript, owner } => {
            let owner = if owner.is_empty() { String::new() } else { format!("{owner}:") };
            let subscript = if subscript.is_empty() { String::new() } else { format!("[{subscript}]") };
            format!("{owner}{base}{subscript}")
        }
        Math::Number { digits, unit, .. } => format!("{digits} {unit}").trim().to_owned(),
        Math::Operator { sign } => sign.clone(),
        Math::Fraction { above, below } => format!("frac{{{}}}{{{}}}", flat(above), flat(below)),
        Math::Power { base, exponent } => format!("{}^{{{}}}", flat(base), flat(exponent)),
        Math::Root { radicand } => format!("root{{{}}}", flat(radicand)),
        Math::Group { inner } => format!("({})", flat(inner)),
        Math::Absolute { inner } => format!("|{}|", flat(inner)),
        Math::Call { name, arguments } => {
            format!("{name}({})", arguments.iter().map(flat).collect::<Vec<_>>().join(","))
        }
        Math::Cases { .. } => "cases".to_owned(),
    }
}

#[test]
fn readings_aloud_tell_trees_apart() {
    let say = |text: &str| formula::spoken(&Formula::parse(text, &place()).unwrap().expr);
    assert_eq!(
        say("V_CC / R_1"),
        "the fraction with numerator V sub CC and denominator R sub 1, end fraction"
    );
    assert_eq!(say("Q1.V_CE + 3 mV"), "V sub CE of Q1 plus 3 millivolts");
    assert_ne!(say("x - (y - z)"), say("(x - y) - z"));
    assert_ne!(say("x / (y / z)"), say("(x / y) / z"));
    assert_ne!(say("(x + y)^2"), say("x + y^2"));
}
