//! Expressions: lexing, dimensions, value, typeset form, spoken form, compiled tape.
//!
//! ```text
//! Formula::parse(text, place)           -> Formula            what was written, as a tree with places
//! formula.kind(kind of each name)       -> Kind               dimensions checked before anything is evaluated
//! formula.compile(slot of each name)    -> Tape, tape.eval(values)
//! symbols, numbers                      -> markup::Math       as mathematics: with symbols, with numbers and units
//! spoken                                -> String             read aloud without ambiguity
//! ```

mod check;
mod lex;
mod parse;
mod speech;
mod tape;
mod typeset;

pub use speech::{spoken, spoken_name, spoken_relation};
pub use tape::Tape;
pub use typeset::{numbers, relation_numbers, relation_symbols, symbol, symbols};

use crate::quantity::Unit;
use crate::source::Place;

/// A parsed expression with its text and place.
#[derive(Clone, Debug)]
pub struct Formula {
    pub expr: Expr,
    pub text: String,
    pub place: Place,
}

/// An expression tree of our own; evalexpr's tree never leaves this room.
#[derive(Clone, Debug)]
pub enum Expr {
    /// A literal in SI units with the unit it was written in and its digits as written.
    Literal {
        value: f64,
        unit: Unit,
        written: String,
        place: Place,
    },
    /// A name: `R_1`, `Q1.V_CE`, `lamp.V`.
    Name {
        name: String,
        place: Place,
    },
    Negate(Box<Expr>),
    Binary {
        operator: Binary,
        left: Box<Expr>,
        right: Box<Expr>,
        place: Place,
    },
    Call {
        function: Function,
        arguments: Vec<Expr>,
        place: Place,
    },
    /// Piecewise choice: condition, value if so, value if not.
    Choice {
        condition: Box<Relation>,
        then: Box<Expr>,
        otherwise: Box<Expr>,
        place: Place,
    },
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Binary {
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
    /// Resistors in parallel: `R_1 || R_2`.
    Parallel,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Function {
    Ln,
    Log10,
    Exp,
    Sqrt,
    Abs,
    Min,
    Max,
    Sin,
    Cos,
    Tan,
    Atan,
}

/// `left operator right`.
#[derive(Clone, Debug)]
pub struct Relation {
    pub left: Expr,
    pub operator: Comparison,
    pub right: Expr,
    pub place: Place,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Comparison {
    Less,
    LessEqual,
    Greater,
    GreaterEqual,
}

impl Comparison {
    /// As typeset: `<`, `≤`, `>`, `≥`.
    pub fn sign(self) -> &'static str {
        match self {
            Comparison::Less => "<",
            Comparison::LessEqual => "≤",
            Comparison::Greater => ">",
            Comparison::GreaterEqual => "≥",
        }
    }

    /// Whether `left` stands in this relation to `right`.
    pub fn holds(self, left: f64, right: f64) -> bool {
        match self {
            Comparison::Less => left < right,
            Comparison::LessEqual => left <= right,
            Comparison::Greater => left > right,
            Comparison::GreaterEqual => left >= right,
        }
    }
}

impl Function {
    pub(crate) const ALL: [Function; 11] = [
        Function::Ln,
        Function::Log10,
        Function::Exp,
        Function::Sqrt,
        Function::Abs,
        Function::Min,
        Function::Max,
        Function::Sin,
        Function::Cos,
        Function::Tan,
        Function::Atan,
    ];

    pub fn name(self) -> &'static str {
        match self {
            Function::Ln => "ln",
            Function::Log10 => "log10",
            Function::Exp => "exp",
            Function::Sqrt => "sqrt",
            Function::Abs => "abs",
            Function::Min => "min",
            Function::Max => "max",
            Function::Sin => "sin",
            Function::Cos => "cos",
            Function::Tan => "tan",
            Function::Atan => "atan",
        }
    }

    fn names() -> Vec<&'static str> {
        Function::ALL.iter().map(|function| function.name()).collect()
    }

    fn named(name: &str) -> Option<Function> {
        Function::ALL.into_iter().find(|function| function.name() == name)
    }
}

impl Expr {
    pub fn place(&self) -> &Place {
        match self {
            Expr::Literal { place, .. }
            | Expr::Name { place, .. }
            | Expr::Binary { place, .. }
            | Expr::Call { place, .. }
            | Expr::Choice { place, .. } => place,
            Expr::Negate(inner) => inner.place(),
        }
    }

    /// Every name with its place, in source order.
    pub fn names(&self) -> Vec<(&str, &Place)> {
        let mut found = Vec::new();
        self.collect_names(&mut found);
        found
    }

    fn collect_names<'e>(&'e self, found: &mut Vec<(&'e str, &'e Place)>) {
        match self {
            Expr::Literal { .. } => {}
            Expr::Name { name, place } => found.push((name, place)),
            Expr::Negate(inner) => inner.collect_names(found),
            Expr::Binary { left, right, .. } => {
                left.collect_names(found);
                right.collect_names(found);
            }
            Expr::Call { arguments, .. } => {
                arguments.iter().for_each(|argument| argument.collect_names(found))
            }
            Expr::Choice { condition, then, otherwise, .. } => {
                condition.left.collect_names(found);
                condition.right.collect_names(found);
                then.collect_names(found);
                otherwise.collect_names(found);
            }
        }
    }
}

impl Formula {
    /// Every name with its place, in source order.
    pub fn names(&self) -> Vec<(&str, &Place)> {
        self.expr.names()
    }
}

impl Relation {
    /// Every name of both sides with its place, in source order.
    pub fn names(&self) -> Vec<(&str, &Place)> {
        let mut found = self.left.names();
        found.extend(self.right.names());
        found
    }
}

/// The unit of an expression that is a literal, if it is one: the unit that a limit was written in.
pub fn written_unit(expr: &Expr) -> Option<Unit> {
    match expr {
        Expr::Literal { unit, .. } => Some(unit.clone()),
        Expr::Negate(inner) => written_unit(inner),
        _ => None,
    }
}
