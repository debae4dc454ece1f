//! Expressions: lexing, dimensions, value, typeset form, spoken form, compiled tape.

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
