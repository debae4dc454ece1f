//! Text -> expression, by way of evalexpr's operator tree.

use evalexpr::{Node, Operator};

use super::lex::{Lexer, Token, Word, rewrite};
use super::{Binary, Comparison, Expr, Formula, Function, Relation};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Place;

impl Formula {
    /// Parses an expression that begins at `place`.
    ///
    /// # Errors
    /// What a reader would not take for a formula, with its place.
    pub fn parse(text: &str, place: &Place) -> Result<Formula, Diagnostics> {
        let lexer = Lexer { text, place };
        let expr = lexer.tokens().and_then(|tokens| tree(&lexer, &tokens)).map_err(Diagnostics::from)?;
        Ok(Formula { expr, text: text.trim().to_owned(), place: place.within(text, 0, text.len()) })
    }
}

impl Relation {
    /// Parses `left <= right` (or `<`, `>`, `>=`, `≤`, `≥`) that begins at `place`.
    ///
    /// # Errors
    /// As [`Formula::parse`], for each side; also where there is no comparison, or more than one.
    pub fn parse(text: &str, place: &Place) -> Result<Relation, Diagnostics> {
        let lexer = Lexer { text, place };
        let found = comparisons(text);
        let (from, to, operator) = match found.as_slice() {
            [one] => *one,
            [] => {
                return Err(lexer
                    .error(0, text.len(), "a comparison is missing")
                    .expected("one of <, <=, >, >= between two values")
                    .into());
            }
            [_, second, ..] => {
                return Err(lexer
                    .error(second.0, second.1, "a second comparison stands here")
                    .expected("one comparison a line: write two lines for a band")
                    .into());
            }
        };
        let mut errors = Diagnostics::default();
        let mut side = |from: usize, to: usize| {
            let part = &text[from..to];
            if part.trim().is_empty() {
                errors.push(lexer.error(from, to.max(from + 1), "a side of the comparison is missing"));
                return None;
            }
            match Formula::parse(part, &place.within(text, from, to)) {
                Ok(formula) => Some(formula.expr),
                Err(found) => {
                    errors.extend(found);
                    None
                }
            }
        };
        match (side(0, from), side(to, text.len())) {
            (Some(left), Some(right)) => {
                Ok(Relation { left, operator, right, place: place.within(text, 0, text.len()) })
            }
            _ => Err(errors),
        }
    }
}

/// Comparisons outside brackets: from, to, which.
fn comparisons(text: &str) -> Vec<(usize, usize, Comparison)> {
    let mut found = Vec::new();
    let mut depth = 0_i32;
    let mut skip_to = 0;
    for (at, c) in text.char_indices() {
        if at < skip_to {
            continue;
        }
        let next_equals = text[at + c.len_utf8()..].starts_with('=');
        let operator = match c {
            '(' => {
                depth += 1;
                continue;
            }
            ')' => {
                depth -= 1;
                continue;
            }
            '<' if next_equals => Comparison::LessEqual,
            '>' if next_equals => Comparison::GreaterEqual,
            '<' => Comparison::Less,
            '>' => Comparison::Greater,
            '≤' => Comparison::LessEqual,
            '≥' => Comparison::GreaterEqual,
            _ => continue,
        };
        skip_to = at + c.len_utf8() + usize::from(next_equals && matches!(c, '<' | '>'));
        if depth == 0 {
            found.push((at, skip_to, operator));
        }
    }
    found
}

fn tree(lexer: &Lexer<'_>, tokens: &[Token]) -> Result<Expr, Diagnostic> {
    let whole = |message: &str| lexer.error(0, lexer.text.len(), message);
    let parsed = evalexpr::build_operator_tree(&rewrite(tokens)).map_err(|_| {
        whole("this is not a formula").expected("operators between values, balanced brackets")
    })?;
    let operands: Vec<&Expr> = tokens
        .iter()
        .filter_map(|token| match &token.word {
            Word::Operand(expr) => Some(expr),
            _ => None,
        })
        .collect();
    let calls: Vec<&Token> =
        tokens.iter().filter(|token| matches!(token.word, Word::Function(_) | Word::If)).collect();
    let mut builder = Builder { lexer, operands, calls, next_call: 0 };
    builder.expr(&parsed)
}

struct Builder<'a> {
    lexer: &'a Lexer<'a>,
    operands: Vec<&'a Expr>,
    calls: Vec<&'a Token>,
    next_call: usize,
}

impl Builder<'_> {
    fn expr(&mut self, node: &Node) -> Result<Expr, Diagnostic> {
        let children = node.children();
        let not_understood = || {
            self.lexer
                .error(0, self.lexer.text.len(), "this is not a formula")
                .expected("a single expression")
        };
        match node.operator() {
            Operator::RootNode => match children {
                [only] => self.expr(only),
                _ => Err(not_understood()),
            },
            Operator::VariableIdentifierRead { identifier } => {
                let index: Option<usize> =
                    identifier.strip_prefix('v').and_then(|number| number.parse().ok());
                index
                    .and_then(|index| self.operands.get(index))
                    .map(|expr| (*expr).clone())
                    .ok_or_else(not_understood)
            }
            Operator::Neg => match children {
                [inner] => Ok(Expr::Negate(Box::new(self.expr(inner)?))),
                _ => Err(not_understood()),
            },
            Operator::FunctionIdentifier { identifier } => {
                let name = identifier.clone();
                self.call(&name, children)
            }
            operator => {
                let operator = match operator {
                    Operator::Add => Binary::Add,
                    Operator::Sub => Binary::Subtract,
                    Operator::Mul => Binary::Multiply,
                    Operator::Div => Binary::Divide,
                    Operator::Exp => Binary::Power,
                    Operator::Or => Binary::Parallel,
                    _ => return Err(not_understood()),
                };
                let [left, right] = children else { return Err(not_understood()) };
                let (left, right) = (self.expr(left)?, self.expr(right)?);
                let place = join(left.place(), right.place());
                Ok(Expr::Binary { operator, left: Box::new(left), right: Box::new(right), place })
            }
        }
    }

    fn call(&mut self, name: &str, children: &[Node]) -> Result<Expr, Diagnostic> {
        let token = self.calls.get(self.next_call).copied();
        self.next_call += 1;
        let (from, to) = token.map_or((0, self.lexer.text.len()), |token| (token.from, token.to));
        let place = self.lexer.place.within(self.lexer.text, from, to);
        let arguments = arguments(children);
        let written = &self.lexer.text[from..to];
        let arity = |wanted: &str| {
            Diagnostic::error(&place, format!("`{written}` was given {} values", arguments.len()))
                .expected(wanted)
        };
        if name == "choice" {
            let [condition, then, otherwise] = arguments.as_slice() else {
                return Err(arity("`if(condition, value, value)`"));
            };
            let condition = self.condition(condition, &place)?;
            return Ok(Expr::Choice {
                condition: Box::new(condition),
                then: Box::new(self.expr(then)?),
                otherwise: Box::new(self.expr(otherwise)?),
                place,
            });
        }
        let index: usize =
            name.strip_prefix('f').and_then(|number| number.parse().ok()).unwrap_or(usize::MAX);
        let Some(function) = Function::ALL.get(index).copied() else {
            return Err(Diagnostic::error(&place, format!("there is no function `{written}`")));
        };
        let enough = match function {
            Function::Min | Function::Max => arguments.len() >= 2,
            _ => arguments.len() == 1,
        };
        if !enough {
            return Err(arity(match function {
                Function::Min | Function::Max => "two values or more",
                _ => "one value",
            }));
        }
        let arguments = arguments.into_iter().map(|node| self.expr(node)).collect::<Result<Vec<_>, _>>()?;
        Ok(Expr::Call { function, arguments, place })
    }

    fn condition(&mut self, node: &Node, place: &Place) -> Result<Relation, Diagnostic> {
        let node = unwrapped(node);
        let operator = match node.operator() {
            Operator::Lt => Comparison::Less,
            Operator::Leq => Comparison::LessEqual,
            Operator::Gt => Comparison::Greater,
            Operator::Geq => Comparison::GreaterEqual,
            _ => {
                return Err(Diagnostic::error(place, "the condition of `if` is no comparison")
                    .expected("`if(a < b, value, value)`"));
            }
        };
        let [left, right] = node.children() else {
            return Err(Diagnostic::error(place, "a side of the comparison is missing"));
        };
        let (left, right) = (self.expr(left)?, self.expr(right)?);
        let place = join(left.place(), right.place());
        Ok(Relation { left, operator, right, place })
    }
}

/// The arguments of a call: the children of its tuple, or its one child.
fn arguments(children: &[Node]) -> Vec<&Node> {
    let mut found: Vec<&Node> = children.iter().collect();
    while let [only] = found.as_slice() {
        match only.operator() {
            Operator::RootNode | Operator::Tuple => {
                let inner: Vec<&Node> = only.children().iter().collect();
                if inner.is_empty() || (*only.operator() == Operator::RootNode && inner.len() > 1) {
                    break;
                }
                let tuple = *only.operator() == Operator::Tuple;
                found = inner;
                if tuple {
                    break;
                }
            }
            _ => break,
        }
    }
    found
}

/// The node inside brackets.
fn unwrapped(mut node: &Node) -> &Node {
    while let (Operator::RootNode, [only]) = (node.operator(), node.children()) {
        node = only;
    }
    node
}

/// The place from the start of one to the end of the other, where both stand on one line.
pub(super) fn join(left: &Place, right: &Place) -> Place {
    let mut place = left.clone();
    if left.line == right.line && right.column >= left.column {
        place.length = right.column + right.length - left.column;
    }
    place
}
