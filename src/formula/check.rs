//! Dimensions, checked before anything is evaluated.
//!
//! A temperature (a place on the scale) and a temperature difference share the dimension kelvin but not the rules: place ±
//! difference = place, place − place = difference, place + place is an error. In a product or quotient a temperature counts
//! as thermodynamic, as in k·T. A literal in K beside a temperature in a comparison is thermodynamic too (`T_j <= 398 K`);
//! everywhere else K means a difference.

use super::{Binary, Expr, Formula, Function, Relation};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::quantity::{Dimension, Kind};

/// What is known of names: the kind of each, and all of them for the nearest spelling.
struct Names<'a> {
    kind: &'a dyn Fn(&str) -> Option<Kind>,
    all: Vec<&'a str>,
}

impl Formula {
    /// The kind of the formula's value. `kind` gives the kind of each name, `all` lists the names for the nearest spelling.
    ///
    /// # Errors
    /// Every unknown name, and the first clash of dimensions in each part, naming both sides.
    pub fn kind<'a>(
        &self,
        kind: &'a dyn Fn(&str) -> Option<Kind>,
        all: &mut dyn Iterator<Item = &'a str>,
    ) -> Result<Kind, Diagnostics> {
        self.expr.kind(kind, all)
    }
}

impl Expr {
    /// As [`Formula::kind`].
    pub fn kind<'a>(
        &self,
        kind: &'a dyn Fn(&str) -> Option<Kind>,
        all: &mut dyn Iterator<Item = &'a str>,
    ) -> Result<Kind, Diagnostics> {
        let names = Names { kind, all: all.collect() };
        let mut diagnostics = Diagnostics::default();
        let found = names.of(self, &mut diagnostics);
        found.filter(|_| !diagnostics.has_errors()).ok_or(diagnostics)
    }
}

impl Relation {
    /// The kind that both sides share.
    ///
    /// # Errors
    /// As [`Formula::kind`], and sides of different dimension.
    pub fn kind<'a>(
        &self,
        kind: &'a dyn Fn(&str) -> Option<Kind>,
        all: &mut dyn Iterator<Item = &'a str>,
    ) -> Result<Kind, Diagnostics> {
        let names = Names { kind, all: all.collect() };
        let mut diagnostics = Diagnostics::default();
        let found = names.relation(self, &mut diagnostics);
        found.filter(|_| !diagnostics.has_errors()).ok_or(diagnostics)
    }
}

impl Names<'_> {
    /// The kind of an expression, or `None` after an error was noted.
    fn of(&self, expr: &Expr, diagnostics: &mut Diagnostics) -> Option<Kind> {
        match expr {
            Expr::Literal { unit, .. } => Some(unit.kind),
            Expr::Name { name, place } => {
                let found = (self.kind)(name);
                if found.is_none() {
                    diagnostics.push(
                        Diagnostic::error(place, format!("unknown name `{name}`"))
                            .expected("a basis value, an earlier line of the derivation, or a result of the circuit")
                            .nearest(name, self.all.iter().copied()),
                    );
                }
                found
            }
            Expr::Negate(inner) => self.of(inner, diagnostics).map(thermodynamic),
            Expr::Binary { operator, left, right, .. } => {
                let sides = (self.of(left, diagnostics), self.of(right, diagnostics));
                let (Some(a), Some(b)) = sides else { return None };
                self.binary(*operator, (left, a), (right, b), expr, diagnostics)
            }
            Expr::Call { function, arguments, .. } => self.call(*function, arguments, expr, diagnostics),
            Expr::Choice { condition, then, otherwise, .. } => {
                let condition = self.relation(condition, diagnostics);
                let branches = (self.of(then, diagnostics), self.of(otherwise, diagnostics));
                let (Some(a), Some(b)) = branches else { return None };
                condition?;
                self.same((then, a), (otherwise, b), "the two values of `if`", expr, diagnostics)
            }
        }
    }

    fn relation(&self, relation: &Relation, diagnostics: &mut Diagnostics) -> Option<Kind> {
        let sides = (self.of(&relation.left, diagnostics), self.of(&relation.right, diagnostics));
        let (Some(a), Some(b)) = sides else { return None };
        let literal = |expr: &Expr| super::written_unit(expr).is_some();
        if a.dimension == b.dimension
            && a.point != b.point
            && (literal(&relation.left) && b.point || literal(&relation.right) && a.point)
        {
            return Some(Kind::TEMPERATURE);
        }
        if a == b {
            return Some(a);
        }
        diagnostics.push(clash(&relation.place, "the two sides of the comparison", a, b));
        None
    }

    fn binary(
        &self,
        operator: Binary,
        (left, a): (&Expr, Kind),
        (right, b): (&Expr, Kind),
        whole: &Expr,
        diagnostics: &mut Diagnostics,
    ) -> Option<Kind> {
        let place = whole.place();
        let too_high = || Diagnostic::error(place, "the dimension of this is out of range");
        match operator {
            Binary::Add if a.point && b.point => {
                diagnostics.push(
                    Diagnostic::error(place, "two temperatures are added")
                        .expected("a temperature and a temperature difference (in K)"),
                );
                None
            }
            Binary::Add if a.dimension == b.dimension => {
                Some(Kind { dimension: a.dimension, point: a.point || b.point })
            }
            Binary::Subtract if a.dimension == b.dimension => {
                if b.point && !a.point {
                    diagnostics.push(
                        Diagnostic::error(place, "a temperature is taken from a temperature difference")
                            .expected("a temperature on the left"),
                    );
                    return None;
                }
                Some(Kind { dimension: a.dimension, point: a.point && !b.point })
            }
            Binary::Add | Binary::Subtract => {
                let what =
                    if operator == Binary::Add { "the two sides of `+`" } else { "the two sides of `-`" };
                diagnostics.push(clash(place, what, a, b));
                None
            }
            Binary::Parallel => self.same((left, a), (right, b), "the two sides of `||`", whole, diagnostics),
            Binary::Multiply => {
                let dimension = a.dimension.times(b.dimension);
                if dimension.is_none() {
                    diagnostics.push(too_high());
                }
                dimension.map(Kind::of)
            }
            Binary::Divide => {
                let dimension = a.dimension.over(b.dimension);
                if dimension.is_none() {
                    diagnostics.push(too_high());
                }
                dimension.map(Kind::of)
            }
            Binary::Power => {
                if b.dimension != Dimension::NONE {
                    diagnostics.push(
                        Diagnostic::error(right.place(), format!("the exponent is in {}", b.dimension))
                            .expected("a plain number"),
                    );
                    return None;
                }
                if a.dimension == Dimension::NONE {
                    return Some(Kind::NONE);
                }
                let twice = constant(right)
                    .map(|value| 2.0 * value)
                    .filter(|twice| (twice - twice.round()).abs() < 1e-12 && twice.abs() < 100.0);
                let Some(twice) = twice else {
                    diagnostics.push(
                        Diagnostic::error(
                            right.place(),
                            format!("a value in {} has this exponent", a.dimension),
                        )
                        .expected("a whole number or a half, written out"),
                    );
                    return None;
                };
                let dimension = a.dimension.power(twice.round() as i32);
                if dimension.is_none() {
                    diagnostics.push(too_high());
                }
                dimension.map(Kind::of)
            }
        }
    }

    fn call(
        &self,
        function: Function,
        arguments: &[Expr],
        whole: &Expr,
        diagnostics: &mut Diagnostics,
    ) -> Option<Kind> {
        let kinds: Vec<Option<Kind>> =
            arguments.iter().map(|argument| self.of(argument, diagnostics)).collect();
        let kinds: Vec<Kind> = kinds.into_iter().collect::<Option<_>>()?;
        let (first, argument) = (*kinds.first()?, arguments.first()?);
        match function {
            Function::Min | Function::Max => {
                let mut kind = first;
                for (other, expr) in kinds.iter().zip(arguments).skip(1) {
                    kind = self.same(
                        (argument, kind),
                        (expr, *other),
                        "the values of this function",
                        whole,
                        diagnostics,
                    )?;
                }
                Some(kind)
            }
            Function::Abs => Some(thermodynamic(first)),
            Function::Sqrt => match first.dimension.power(1) {
                Some(dimension) => Some(Kind::of(dimension)),
                None => {
                    diagnostics.push(Diagnostic::error(
                        whole.place(),
                        format!("the square root of {} has no dimension", first.dimension),
                    ));
                    None
                }
            },
            _ if first.dimension == Dimension::NONE => Some(Kind::NONE),
            _ => {
                diagnostics.push(
                    Diagnostic::error(
                        argument.place(),
                        format!("`{}` is given a value in {}", function.name(), first.dimension),
                    )
                    .expected("a plain number: divide by a value of the same dimension"),
                );
                None
            }
        }
    }

    fn same(
        &self,
        (_, a): (&Expr, Kind),
        (_, b): (&Expr, Kind),
        what: &str,
        whole: &Expr,
        diagnostics: &mut Diagnostics,
    ) -> Option<Kind> {
        if a == b {
            return Some(a);
        }
        diagnostics.push(clash(whole.place(), what, a, b));
        None
    }
}

fn thermodynamic(kind: Kind) -> Kind {
    Kind::of(kind.dimension)
}

fn clash(place: &crate::source::Place, what: &str, a: Kind, b: Kind) -> Diagnostic {
    if a.dimension == b.dimension {
        let (one, other) = if a.point {
            ("a temperature", "a temperature difference")
        } else {
            ("a temperature difference", "a temperature")
        };
        return Diagnostic::error(
            place,
            format!("{what} do not fit: {one} on the left, {other} on the right"),
        )
        .expected("two temperatures (in °C) or two differences (in K)");
    }
    Diagnostic::error(place, format!("{what} do not fit: {} on the left, {} on the right", name(a), name(b)))
        .expected("the same dimension on both sides")
}

fn name(kind: Kind) -> String {
    if kind.dimension == Dimension::NONE { "a plain number".to_owned() } else { kind.dimension.to_string() }
}

/// The value of an expression of literals only.
fn constant(expr: &Expr) -> Option<f64> {
    match expr {
        Expr::Literal { value, .. } => Some(*value),
        Expr::Negate(inner) => constant(inner).map(|value| -value),
        Expr::Binary { operator, left, right, .. } => {
            let (left, right) = (constant(left)?, constant(right)?);
            Some(match operator {
                Binary::Add => left + right,
                Binary::Subtract => left - right,
                Binary::Multiply => left * right,
                Binary::Divide => left / right,
                Binary::Power | Binary::Parallel => return None,
            })
        }
        _ => None,
    }
}
