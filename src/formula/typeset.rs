//! Expressions as mathematics: with symbols, and with numbers and units in their place.

use super::{Binary, Comparison, Expr, Function, Relation};
use crate::markup::Math;
use crate::quantity::{self, Printed, Unit};

/// Significant digits of a value that stands in for its symbol.
const DIGITS: u8 = 4;

/// How tightly an expression binds; a looser one inside a tighter one takes brackets.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Binding {
    Sum,
    Sign,
    Product,
    /// A number with its unit: brackets only as the base of a power.
    Measured,
    Atom,
}

/// What a name turns into.
type Leaf<'a> = &'a dyn Fn(&str) -> (Math, Binding);

/// The expression with symbols.
pub fn symbols(expr: &Expr) -> Math {
    set(expr, &|name| (symbol(name), Binding::Atom)).0
}

/// The expression with each name replaced by its value (SI) in the given unit; a name without value keeps its symbol.
pub fn numbers(expr: &Expr, value_of: &dyn Fn(&str) -> Option<(f64, Unit)>) -> Math {
    set(expr, &|name| leaf_number(name, value_of)).0
}

/// A comparison with symbols.
pub fn relation_symbols(relation: &Relation) -> Math {
    relation_with(relation, &|name| (symbol(name), Binding::Atom))
}

/// A comparison with numbers.
pub fn relation_numbers(relation: &Relation, value_of: &dyn Fn(&str) -> Option<(f64, Unit)>) -> Math {
    relation_with(relation, &|name| leaf_number(name, value_of))
}

fn leaf_number(name: &str, value_of: &dyn Fn(&str) -> Option<(f64, Unit)>) -> (Math, Binding) {
    match value_of(name) {
        Some((value, unit)) => number(&quantity::print(value, &unit, DIGITS)),
        None => (symbol(name), Binding::Atom),
    }
}

fn relation_with(relation: &Relation, leaf: Leaf<'_>) -> Math {
    Math::Row {
        parts: vec![
            set(&relation.left, leaf).0,
            sign(relation.operator.sign()),
            set(&relation.right, leaf).0,
        ],
    }
}

fn number(printed: &Printed) -> (Math, Binding) {
    let binding = if printed.digits.starts_with('−') {
        Binding::Sign
    } else if printed.unit.is_empty() && printed.exponent.is_none() {
        Binding::Atom
    } else {
        Binding::Measured
    };
    let math = Math::Number {
        digits: printed.digits.clone(),
        exponent: printed.exponent,
        unit: printed.unit.clone(),
    };
    (math, binding)
}

fn sign(sign: &str) -> Math {
    Math::Operator { sign: sign.to_owned() }
}

fn grouped(math: Math) -> Math {
    Math::Group { inner: Box::new(math) }
}

/// In brackets if it binds more loosely than `least`.
fn at_least((math, binding): (Math, Binding), least: Binding) -> Math {
    if binding < least { grouped(math) } else { math }
}

fn set(expr: &Expr, leaf: Leaf<'_>) -> (Math, Binding) {
    match expr {
        Expr::Literal { value, unit, written, .. } => literal(*value, unit, written),
        Expr::Name { name, .. } => leaf(name),
        Expr::Negate(inner) => {
            let inner = at_least(set(inner, leaf), Binding::Product);
            (Math::Row { parts: vec![sign("−"), inner] }, Binding::Sign)
        }
        Expr::Binary { operator, left, right, .. } => binary(*operator, left, right, leaf),
        Expr::Call { function, arguments, .. } => {
            let arguments: Vec<Math> = arguments.iter().map(|argument| set(argument, leaf).0).collect();
            (call(*function, arguments), Binding::Atom)
        }
        Expr::Choice { condition, then, otherwise, .. } => {
            let branches = vec![
                (set(then, leaf).0, Some(relation_with(condition, leaf))),
                (set(otherwise, leaf).0, None),
            ];
            (Math::Cases { branches }, Binding::Atom)
        }
    }
}

fn binary(operator: Binary, left: &Expr, right: &Expr, leaf: Leaf<'_>) -> (Math, Binding) {
    let (a, b) = (set(left, leaf), set(right, leaf));
    let row = |left: Math, between: &str, right: Math| Math::Row { parts: vec![left, sign(between), right] };
    match operator {
        Binary::Add => (row(a.0, "+", after_sign(b, Binding::Sum)), Binding::Sum),
        Binary::Subtract => (row(a.0, "−", after_sign(b, Binding::Product)), Binding::Sum),
        Binary::Multiply => {
            (row(at_least(a, Binding::Product), "·", at_least(b, Binding::Product)), Binding::Product)
        }
        Binary::Divide => (Math::Fraction { above: Box::new(a.0), below: Box::new(b.0) }, Binding::Atom),
        Binary::Power => {
            // A fraction or a power as a base takes brackets; so does a number with a unit.
            let base = match a.0 {
                Math::Fraction { .. } | Math::Power { .. } => grouped(a.0),
                _ => at_least(a, Binding::Atom),
            };
            (Math::Power { base: Box::new(base), exponent: Box::new(b.0) }, Binding::Atom)
        }
        // Nothing in mathematics ranks `∥`; so it always stands in brackets inside something else.
        Binary::Parallel => {
            let flat = |(math, binding): (Math, Binding), expr: &Expr| match expr {
                Expr::Binary { operator: Binary::Parallel, .. } => math,
                _ => at_least((math, binding), Binding::Product),
            };
            (row(flat(a, left), "∥", flat(b, right)), Binding::Sum)
        }
    }
}

/// What follows a plus or minus sign: a leading sign of its own takes brackets.
fn after_sign((math, binding): (Math, Binding), least: Binding) -> Math {
    if binding == Binding::Sign || binding < least { grouped(math) } else { math }
}

fn call(function: Function, mut arguments: Vec<Math>) -> Math {
    let first = |arguments: &mut Vec<Math>| {
        Box::new(if arguments.is_empty() { Math::Row { parts: Vec::new() } } else { arguments.remove(0) })
    };
    match function {
        Function::Sqrt => Math::Root { radicand: first(&mut arguments) },
        Function::Abs => Math::Absolute { inner: first(&mut arguments) },
        Function::Log10 => Math::Call { name: "lg".to_owned(), arguments },
        Function::Atan => Math::Call { name: "arctan".to_owned(), arguments },
        other => Math::Call { name: other.name().to_owned(), arguments },
    }
}

/// A literal as it was written, with its digits and the printed form of its unit.
fn literal(value: f64, unit: &Unit, written: &str) -> (Math, Binding) {
    let length = quantity::number_length(written);
    let digits = &written[..length];
    if length == 0
        || digits.contains(['e', 'E'])
        || written[length..].starts_with(char::is_alphanumeric) && unit.symbol.is_empty()
    {
        return number(&quantity::print(value, unit, 6));
    }
    // An IEC 60062 code reads `4k7`: its digits alone are not the number.
    let (printed, exponent) = match digits.replace('−', "-").parse::<f64>() {
        Ok(read) if (unit.to_si(read) - value).abs() <= 1e-9 * value.abs() => (digits.to_owned(), None),
        _ => {
            let printed = quantity::print(value, unit, 6);
            (trimmed(&printed.digits), printed.exponent)
        }
    };
    number(&Printed { digits: printed, exponent, unit: unit.symbol.clone() })
}

fn trimmed(digits: &str) -> String {
    if digits.contains('.') {
        digits.trim_end_matches(['0', '\u{202f}']).trim_end_matches('.').to_owned()
    } else {
        digits.to_owned()
    }
}

/// Greek letters by name.
const GREEK: [(&str, &str); 27] = [
    ("alpha", "α"),
    ("beta", "β"),
    ("gamma", "γ"),
    ("delta", "δ"),
    ("epsilon", "ε"),
    ("zeta", "ζ"),
    ("eta", "η"),
    ("theta", "θ"),
    ("kappa", "κ"),
    ("lambda", "λ"),
    ("mu", "µ"),
    ("nu", "ν"),
    ("xi", "ξ"),
    ("pi", "π"),
    ("rho", "ρ"),
    ("sigma", "σ"),
    ("tau", "τ"),
    ("phi", "φ"),
    ("chi", "χ"),
    ("psi", "ψ"),
    ("omega", "ω"),
    ("Gamma", "Γ"),
    ("Delta", "Δ"),
    ("Theta", "Θ"),
    ("Sigma", "Σ"),
    ("Phi", "Φ"),
    ("Omega", "Ω"),
];

/// Trade words that stand for a symbol of their own after a designator.
const TRADE: [(&str, &str, &str); 4] =
    [("forced_gain", "I_C/I_B", ""), ("overdrive", "n", "od"), ("gain", "A", "v"), ("I_out", "I", "out")];

/// A name as a symbol: base slanted, subscript after the first `_`, owner before the last dot.
pub fn symbol(name: &str) -> Math {
    let (owner, rest) = match name.split_once('.') {
        Some((owner, rest)) => (owner, rest),
        None => ("", name),
    };
    if !owner.is_empty()
        && let Some((_, base, subscript)) = TRADE.iter().find(|(word, _, _)| *word == rest)
    {
        return Math::Symbol {
            base: (*base).to_owned(),
            subscript: (*subscript).to_owned(),
            owner: owner.to_owned(),
        };
    }
    let (base, subscript) = rest.split_once('_').unwrap_or((rest, ""));
    let greek = |word: &str| {
        GREEK
            .iter()
            .find(|(name, _)| *name == word)
            .map_or_else(|| word.to_owned(), |(_, letter)| (*letter).to_owned())
    };
    Math::Symbol { base: greek(base), subscript: subscript.replace('_', ","), owner: owner.to_owned() }
}

impl Comparison {
    /// In words, for reading aloud.
    pub(super) fn spoken(self) -> &'static str {
        match self {
            Comparison::Less => "is less than",
            Comparison::LessEqual => "is at most",
            Comparison::Greater => "is greater than",
            Comparison::GreaterEqual => "is at least",
        }
    }
}
