//! Expressions read aloud. Every composite part is closed in words, so that two different trees never share a reading.

use super::{Binary, Expr, Function, Relation};

/// The reading of an expression.
pub fn spoken(expr: &Expr) -> String {
    match expr {
        Expr::Literal { written, unit, value, .. } => {
            let digits = crate::quantity::number_length(written);
            let plain = written.get(..digits).filter(|number| !number.is_empty());
            match plain {
                Some(number) if !unit.symbol.is_empty() || digits == written.len() => {
                    format!("{number} {}", unit_in_words(&unit.symbol)).trim().to_owned()
                }
                _ => format!("{} {}", unit.from_si(*value), unit_in_words(&unit.symbol)).trim().to_owned(),
            }
        }
        Expr::Name { name, .. } => spoken_name(name),
        Expr::Negate(inner) => format!("minus {}", operand(inner)),
        Expr::Binary { operator, left, right, .. } => match operator {
            Binary::Add => format!("{} plus {}", operand(left), operand(right)),
            Binary::Subtract => format!("{} minus {}", operand(left), operand(right)),
            Binary::Multiply => format!("{} times {}", operand(left), operand(right)),
            Binary::Divide => {
                format!(
                    "the fraction with numerator {} and denominator {}, end fraction",
                    spoken(left),
                    spoken(right)
                )
            }
            Binary::Power => format!("{} to the power {}, end power", operand(left), spoken(right)),
            Binary::Parallel => format!("{} in parallel with {}", operand(left), operand(right)),
        },
        Expr::Call { function, arguments, .. } => {
            let list: Vec<String> = arguments.iter().map(spoken).collect();
            format!(
                "{} of {}, end {}",
                function_in_words(*function),
                list.join(", and "),
                function_in_words(*function)
            )
        }
        Expr::Choice { condition, then, otherwise, .. } => format!(
            "if {}, then {}, otherwise {}, end if",
            spoken_relation(condition),
            spoken(then),
            spoken(otherwise)
        ),
    }
}

/// The reading of a comparison.
pub fn spoken_relation(relation: &Relation) -> String {
    format!("{} {} {}", spoken(&relation.left), relation.operator.spoken(), spoken(&relation.right))
}

/// A part of an operation: anything that is itself an operation stands in spoken brackets.
fn operand(expr: &Expr) -> String {
    match expr {
        Expr::Negate(_) | Expr::Binary { .. } => format!("open bracket {} close bracket", spoken(expr)),
        _ => spoken(expr),
    }
}

/// A name: `Q1.V_CE` is read as "V sub CE of Q1".
pub fn spoken_name(name: &str) -> String {
    let (owner, rest) = match name.split_once('.') {
        Some((owner, rest)) => (Some(owner), rest),
        None => (None, name),
    };
    let own = match rest.split_once('_') {
        Some((base, subscript)) => format!("{base} sub {}", subscript.replace('_', " ")),
        None => rest.to_owned(),
    };
    match owner {
        Some(owner) => format!("{own} of {owner}"),
        None => own,
    }
}

fn function_in_words(function: Function) -> &'static str {
    match function {
        Function::Ln => "the natural logarithm",
        Function::Log10 => "the decimal logarithm",
        Function::Exp => "the exponential function",
        Function::Sqrt => "the square root",
        Function::Abs => "the absolute value",
        Function::Min => "the smallest",
        Function::Max => "the largest",
        Function::Sin => "the sine",
        Function::Cos => "the cosine",
        Function::Tan => "the tangent",
        Function::Atan => "the arc tangent",
    }
}

/// A unit symbol in words where a voice would stumble; the symbol otherwise.
fn unit_in_words(symbol: &str) -> String {
    let known = [
        ("V", "volts"),
        ("mV", "millivolts"),
        ("µV", "microvolts"),
        ("A", "amperes"),
        ("mA", "milliamperes"),
        ("µA", "microamperes"),
        ("nA", "nanoamperes"),
        ("Ω", "ohms"),
        ("kΩ", "kilohms"),
        ("MΩ", "megohms"),
        ("W", "watts"),
        ("mW", "milliwatts"),
        ("°C", "degrees Celsius"),
        ("K", "kelvins"),
        ("%", "percent"),
        ("K/W", "kelvins per watt"),
        ("mV/K", "millivolts per kelvin"),
        ("F", "farads"),
        ("µF", "microfarads"),
        ("nF", "nanofarads"),
        ("H", "henries"),
        ("mH", "millihenries"),
        ("s", "seconds"),
        ("ms", "milliseconds"),
        ("Hz", "hertz"),
        ("J", "joules"),
        ("mJ", "millijoules"),
    ];
    known
        .iter()
        .find(|(unit, _)| *unit == symbol)
        .map_or_else(|| symbol.to_owned(), |(_, words)| (*words).to_owned())
}
