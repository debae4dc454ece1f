//! A formula compiled for repeated evaluation: reverse Polish over a small stack, no allocation.

use super::{Binary, Comparison, Expr, Formula, Function};
use crate::diagnostic::Diagnostic;

/// Deepest stack of a tape; brackets are bounded well below it. Most tapes need far less, which is sooner made ready.
const STACK: usize = 64;
const SHALLOW: usize = 4;

#[derive(Clone, Copy, PartialEq, Debug)]
enum Op {
    Push(f64),
    Load(usize),
    Negate,
    Binary(Binary),
    Call(Function),
    /// Left, right, value if so, value if not.
    Choose(Comparison),
}

/// A compiled formula. Slots and result are in SI units.
#[derive(Clone, PartialEq, Debug)]
pub struct Tape {
    ops: Vec<Op>,
    /// Whether a stack of [`SHALLOW`] values is enough.
    is_shallow: bool,
}

impl Formula {
    /// Compiles the formula; `slot` gives the index of each name among the values of [`Tape::eval`].
    ///
    /// # Errors
    /// A name without slot, or an expression that is nested too deep.
    pub fn compile(&self, slot: &dyn Fn(&str) -> Option<usize>) -> Result<Tape, Diagnostic> {
        let mut ops = Vec::new();
        emit(&self.expr, slot, &mut ops)?;
        let (mut depth, mut deepest) = (0_usize, 0_usize);
        for op in &ops {
            depth = match op {
                Op::Push(_) | Op::Load(_) => depth + 1,
                Op::Negate | Op::Call(_) if !matches!(op, Op::Call(Function::Min | Function::Max)) => depth,
                Op::Choose(_) => depth - 3,
                _ => depth - 1,
            };
            deepest = deepest.max(depth);
            if depth > STACK {
                return Err(Diagnostic::error(&self.place, "the formula is nested too deep")
                    .expected("several shorter lines"));
            }
        }
        Ok(Tape { ops, is_shallow: deepest <= SHALLOW })
    }
}

fn emit(expr: &Expr, slot: &dyn Fn(&str) -> Option<usize>, ops: &mut Vec<Op>) -> Result<(), Diagnostic> {
    match expr {
        Expr::Literal { value, .. } => ops.push(Op::Push(*value)),
        Expr::Name { name, place } => {
            let found =
                slot(name).ok_or_else(|| Diagnostic::error(place, format!("`{name}` has no value here")))?;
            ops.push(Op::Load(found));
        }
        Expr::Negate(inner) => {
            emit(inner, slot, ops)?;
            ops.push(Op::Negate);
        }
        Expr::Binary { operator, left, right, .. } => {
            emit(left, slot, ops)?;
            emit(right, slot, ops)?;
            ops.push(Op::Binary(*operator));
        }
        Expr::Call { function, arguments, .. } => {
            for (i, argument) in arguments.iter().enumerate() {
                emit(argument, slot, ops)?;
                let folds = matches!(function, Function::Min | Function::Max);
                if !folds || i > 0 {
                    ops.push(Op::Call(*function));
                }
            }
        }
        Expr::Choice { condition, then, otherwise, .. } => {
            for part in [&condition.left, &condition.right, then, otherwise] {
                emit(part, slot, ops)?;
            }
            ops.push(Op::Choose(condition.operator));
        }
    }
    Ok(())
}

impl Tape {
    /// The value over `slots`; not-a-number where a slot is missing or the mathematics has no value.
    pub fn eval(&self, slots: &[f64]) -> f64 {
        match *self.ops.as_slice() {
            [Op::Push(value)] => value,
            [Op::Load(slot)] => slots.get(slot).copied().unwrap_or(f64::NAN),
            _ if self.is_shallow => self.run(slots, [f64::NAN; SHALLOW + 1]),
            _ => self.run(slots, [f64::NAN; STACK + 1]),
        }
    }

    fn run<const N: usize>(&self, slots: &[f64], mut stack: [f64; N]) -> f64 {
        let mut top = 0;
        for op in &self.ops {
            match *op {
                Op::Push(value) => {
                    stack[top] = value;
                    top += 1;
                }
                Op::Load(slot) => {
                    stack[top] = slots.get(slot).copied().unwrap_or(f64::NAN);
                    top += 1;
                }
                Op::Negate => stack[top - 1] = -stack[top - 1],
                Op::Binary(operator) => {
                    top -= 1;
                    stack[top - 1] = binary(operator, stack[top - 1], stack[top]);
                }
                Op::Call(function @ (Function::Min | Function::Max)) => {
                    top -= 1;
                    stack[top - 1] = extreme(function, stack[top - 1], stack[top]);
                }
                Op::Call(function) => stack[top - 1] = call(function, stack[top - 1]),
                Op::Choose(comparison) => {
                    top -= 3;
                    let holds = comparison.holds(stack[top - 1], stack[top]);
                    let undecided = stack[top - 1].is_nan() || stack[top].is_nan();
                    stack[top - 1] = match holds {
                        _ if undecided => f64::NAN,
                        true => stack[top + 1],
                        false => stack[top + 2],
                    };
                }
            }
        }
        stack[0]
    }
}

fn binary(operator: Binary, left: f64, right: f64) -> f64 {
    match operator {
        Binary::Add => left + right,
        Binary::Subtract => left - right,
        Binary::Multiply => left * right,
        Binary::Divide => left / right,
        Binary::Power => libm::pow(left, right),
        // A short in parallel with anything is a short, another short included.
        Binary::Parallel if left == 0.0 && right == 0.0 => 0.0,
        Binary::Parallel => left * right / (left + right),
    }
}

fn extreme(function: Function, left: f64, right: f64) -> f64 {
    if left.is_nan() || right.is_nan() {
        return f64::NAN;
    }
    if function == Function::Min { left.min(right) } else { left.max(right) }
}

fn call(function: Function, value: f64) -> f64 {
    match function {
        Function::Ln => libm::log(value),
        Function::Log10 => libm::log10(value),
        Function::Exp => libm::exp(value),
        Function::Sqrt => value.sqrt(),
        Function::Abs => value.abs(),
        Function::Sin => libm::sin(value),
        Function::Cos => libm::cos(value),
        Function::Tan => libm::tan(value),
        Function::Atan => libm::atan(value),
        // Folded two at a time before; a single value is its own extreme.
        Function::Min | Function::Max => value,
    }
}
