//! Words of an expression with their places, and its rewriting for the parser.
//!
//! The parser (evalexpr) knows neither units nor places, groups powers to the left and ranks `||` below `+`. So each operand
//! is replaced by a placeholder name `v0`, `v1`, ... in source order, powers are bracketed to the right, and `||` may only stand
//! beside other `||` inside its own brackets. Leaves of the parser's tree in order are the operands in source order.

use super::{Expr, Function};
use crate::diagnostic::Diagnostic;
use crate::quantity::{self, Unit, iec60062, number_length, parse_unit};
use crate::source::Place;

/// The longest expression, in bytes, and the deepest nesting of its brackets.
pub(super) const LONGEST: usize = 2000;
pub(super) const DEEPEST: usize = 40;

#[derive(Clone, Debug)]
pub(super) enum Word {
    Operand(Expr),
    Function(Function),
    /// The word `if` of a piecewise choice.
    If,
    /// One of `+ - * / ^ | , ( )`; `|` stands for parallel, `<`, `l`, `>`, `g` for the comparisons.
    Sign(char),
}

#[derive(Clone, Debug)]
pub(super) struct Token {
    pub word: Word,
    pub from: usize,
    pub to: usize,
}

/// Subscripts in brackets that belong to the symbol before them, as letter symbols of IEC 60747 have them.
const SUBSCRIPTS: [&str; 13] =
    ["sat", "on", "off", "j-a", "j-c", "c-s", "s-a", "th", "max", "min", "pk", "cold", "hot"];

pub(super) struct Lexer<'a> {
    pub text: &'a str,
    pub place: &'a Place,
}

impl Lexer<'_> {
    pub fn error(&self, from: usize, to: usize, message: impl Into<String>) -> Diagnostic {
        Diagnostic::error(&self.place.within(self.text, from, to), message)
    }

    /// All words of the text.
    pub fn tokens(&self) -> Result<Vec<Token>, Diagnostic> {
        if self.text.len() > LONGEST {
            return Err(self
                .error(0, 1, format!("the formula has {} bytes", self.text.len()))
                .expected(format!("at most {LONGEST} bytes; split it over several lines")));
        }
        let mut tokens: Vec<Token> = Vec::new();
        let mut at = 0;
        while let Some(c) = self.text[at..].chars().next() {
            if c.is_whitespace() {
                at += c.len_utf8();
                continue;
            }
            let token = self.token(at, c)?;
            at = token.to;
            tokens.push(token);
        }
        self.check(&tokens)?;
        Ok(tokens)
    }

    fn token(&self, at: usize, c: char) -> Result<Token, Diagnostic> {
        let rest = &self.text[at..];
        let sign =
            |sign: char, length: usize| Ok(Token { word: Word::Sign(sign), from: at, to: at + length });
        for (spelling, code) in [
            ("||", '|'),
            ("<=", 'l'),
            (">=", 'g'),
            ("≤", 'l'),
            ("≥", 'g'),
            ("∥", '|'),
            ("==", '='),
            ("!=", '!'),
        ] {
            if rest.starts_with(spelling) {
                if matches!(code, '=' | '!') {
                    return Err(self
                        .error(at, at + 2, format!("`{spelling}` cannot be judged on measured quantities"))
                        .expected("one of <, <=, >, >="));
                }
                return sign(code, spelling.len());
            }
        }
        match c {
            '+' | '*' | '/' | '^' | '(' | ')' | ',' | '<' | '>' => sign(c, 1),
            '-' | '−' | '–' => sign('-', c.len_utf8()),
            '·' | '×' | '⋅' => sign('*', c.len_utf8()),
            _ if c.is_ascii_digit() || (c == '.' && number_length(rest) > 0) => self.number(at),
            _ if c.is_alphabetic() || c == '_' => self.name(at),
            _ => Err(self
                .error(at, at + c.len_utf8(), format!("`{c}` has no meaning in a formula"))
                .expected("names, numbers with units, + - * / ^ ||, brackets and functions")),
        }
    }

    /// A number with its unit.
    fn number(&self, at: usize) -> Result<Token, Diagnostic> {
        let rest = &self.text[at..];
        let word_end = rest.find(|c: char| !c.is_alphanumeric()).unwrap_or(rest.len());
        let literal = |value: f64, unit: Unit, to: usize| Token {
            word: Word::Operand(Expr::Literal {
                value,
                unit,
                written: self.text[at..to].to_owned(),
                place: self.place.within(self.text, at, to),
            }),
            from: at,
            to,
        };
        if let Some((value, dimension)) = iec60062::value(&rest[..word_end], None) {
            let unit = quantity::preferred_unit(&[value], quantity::Kind::of(dimension));
            return Ok(literal(value, unit, at + word_end));
        }
        let length = number_length(rest);
        let value: f64 = rest[..length].parse().unwrap_or(f64::NAN);
        if !value.is_finite() {
            return Err(self
                .error(at, at + length.max(1), "this is not a finite number")
                .expected("a number between 1e-300 and 1e300"));
        }
        match self.unit(at + length)? {
            Some((unit, to)) => {
                let si = unit.to_si(value);
                Ok(literal(si, unit, to))
            }
            None => Ok(literal(value, Unit::none(), at + length)),
        }
    }

    /// The unit that begins at or after `at`, and where it ends: the longest run that is one.
    fn unit(&self, at: usize) -> Result<Option<(Unit, usize)>, Diagnostic> {
        let rest = &self.text[at..];
        let from = at + (rest.len() - rest.trim_start_matches([' ', '\u{a0}', '\u{202f}']).len());
        let rest = &self.text[from..];
        let length =
            rest.find(|c: char| !(c.is_alphanumeric() || "°%‰Ω_/·⋅²".contains(c))).unwrap_or(rest.len());
        let mut word = &rest[..length];
        if !word.starts_with(|c: char| c.is_alphabetic() || "°%‰".contains(c)) {
            return Ok(None);
        }
        let first = word.find(['/', '·', '⋅']).map_or(word, |at| &word[..at]);
        loop {
            if let Some(unit) = parse_unit(word) {
                return Ok(Some((unit, from + word.len())));
            }
            match word.rfind(['/', '·', '⋅']) {
                Some(cut) => word = &word[..cut],
                None => break,
            }
        }
        Err(self
            .error(from, from + first.len(), format!("`{first}` is no unit"))
            .expected("a unit after a number; write `·` between a number and a name")
            .nearest(first, ["V", "mV", "A", "mA", "µA", "Ω", "kΩ", "W", "mW", "°C", "K", "K/W", "%"]))
    }

    /// A name with its dots and bracketed subscript, a function, or `if`.
    fn name(&self, at: usize) -> Result<Token, Diagnostic> {
        let rest = &self.text[at..];
        let mut end = rest
            .char_indices()
            .find(|(i, c)| {
                let dot = *c == '.' && rest[i + 1..].starts_with(|c: char| c.is_alphanumeric() || c == '_');
                !(c.is_alphanumeric() || *c == '_' || dot)
            })
            .map_or(rest.len(), |(i, _)| i);
        let word = &rest[..end];
        let called = rest[end..].trim_start().starts_with('(');
        if called {
            if word == "if" {
                return Ok(Token { word: Word::If, from: at, to: at + end });
            }
            if let Some(function) = Function::named(word) {
                return Ok(Token { word: Word::Function(function), from: at, to: at + end });
            }
            let subscript = rest[end..].strip_prefix('(').and_then(|inner| inner.split_once(')'));
            match subscript {
                Some((inner, _)) if SUBSCRIPTS.contains(&inner) => {
                    end += inner.len() + 2;
                    // `Q1.V_CE(sat)` ends here; `R_th(j-a)` too.
                }
                _ => {
                    return Err(self
                        .error(at, at + end, format!("there is no function `{word}`"))
                        .expected(format!(
                            "one of {}, if; or `·` before the bracket",
                            Function::names().join(", ")
                        ))
                        .nearest(word, Function::names()));
                }
            }
        } else if word == "if" || Function::named(word).is_some_and(|_| word.len() > 1) {
            return Err(self
                .error(at, at + end, format!("`{word}` is a function"))
                .expected(format!("`{word}(...)`")));
        }
        let name = rest[..end].to_owned();
        let place = self.place.within(self.text, at, at + end);
        Ok(Token { word: Word::Operand(Expr::Name { name, place }), from: at, to: at + end })
    }

    /// What the parser would take and a reader would not: two operands side by side, unbalanced or too many brackets, `||`
    /// beside another operator, a comma or a comparison outside its place.
    fn check(&self, tokens: &[Token]) -> Result<(), Diagnostic> {
        let Some(last) = tokens.last() else {
            return Err(self
                .error(0, 0, "the formula is missing")
                .expected("an expression such as `V_CC / R_1`"));
        };
        // For each open bracket: where it is, signs seen inside, whether it belongs to a function.
        let mut open: Vec<(usize, Level)> = vec![(0, Level::default())];
        let mut operand_before = false;
        for (i, token) in tokens.iter().enumerate() {
            let here = |message: &str| self.error(token.from, token.to, message);
            let level = open.last_mut().map(|(_, level)| level);
            match &token.word {
                Word::Operand(_) | Word::Function(_) | Word::If => {
                    if operand_before {
                        return Err(here("two values stand side by side")
                            .expected("an operator between them, such as `·`"));
                    }
                    operand_before = matches!(token.word, Word::Operand(_));
                }
                Word::Sign('(') => {
                    if operand_before {
                        return Err(here("a bracket follows a value directly")
                            .expected("an operator between them, such as `·`"));
                    }
                    if open.len() > DEEPEST {
                        return Err(here("brackets are nested too deep")
                            .expected(format!("at most {DEEPEST} levels")));
                    }
                    let call = i.checked_sub(1).and_then(|i| tokens.get(i));
                    let commas = call.is_some_and(|t| matches!(t.word, Word::Function(_) | Word::If));
                    let compares = call.is_some_and(|t| matches!(t.word, Word::If));
                    open.push((token.from, Level { commas, compares, ..Level::default() }));
                }
                Word::Sign(')') => {
                    if !operand_before {
                        return Err(here("a value is missing before the bracket"));
                    }
                    if open.len() == 1 {
                        return Err(
                            here("this bracket was never opened").expected("`(` before it, or no bracket")
                        );
                    }
                    open.pop();
                }
                Word::Sign(sign) => {
                    let minus = *sign == '-' && !operand_before;
                    if !operand_before && !minus {
                        return Err(here(&format!(
                            "a value is missing before `{}`",
                            &self.text[token.from..token.to]
                        )));
                    }
                    operand_before = false;
                    if let Some(level) = level {
                        match sign {
                            ',' if !level.commas => {
                                return Err(here("a comma stands outside a function")
                                    .expected("`.` as decimal point, or no comma"));
                            }
                            ',' => *level = Level { commas: true, ..Level::default() },
                            '<' | '>' | 'l' | 'g' if !level.compares => {
                                return Err(here("a comparison stands inside a formula")
                                    .expected("comparisons only in `if(condition, value, value)`"));
                            }
                            '<' | '>' | 'l' | 'g' => *level = Level { commas: true, ..Level::default() },
                            '|' => level.parallel = true,
                            _ if minus => {}
                            _ => level.other = true,
                        }
                        if level.parallel && level.other {
                            return Err(here("`||` stands beside another operator")
                                .expected("brackets that say what is in parallel: `R_1 + (R_2 || R_3)`"));
                        }
                    }
                }
            }
            if matches!(token.word, Word::Sign(')')) {
                operand_before = true;
            }
        }
        if let Some((at, _)) = open.get(1) {
            return Err(self.error(*at, at + 1, "this bracket is never closed").expected("`)`"));
        }
        if !operand_before {
            return Err(self
                .error(last.from, last.to, "a value is missing after this")
                .expected("a name or a number"));
        }
        Ok(())
    }
}

#[derive(Clone, Copy, Default)]
struct Level {
    commas: bool,
    compares: bool,
    parallel: bool,
    other: bool,
}

/// The tokens as text for the parser, operands replaced by `v0`, `v1`, ... in order.
pub(super) fn rewrite(tokens: &[Token]) -> String {
    let mut out = String::new();
    let mut operand = 0;
    let mut at = 0;
    while at < tokens.len() {
        at = emit(tokens, at, &mut operand, &mut out);
    }
    out
}

/// Writes the token at `at`, and after a power its whole exponent in brackets; gives the next position.
fn emit(tokens: &[Token], at: usize, operand: &mut usize, out: &mut String) -> usize {
    match &tokens[at].word {
        Word::Operand(_) => {
            out.push_str(&format!("v{operand} "));
            *operand += 1;
        }
        Word::Function(function) => out.push_str(&format!("f{} ", *function as usize)),
        Word::If => out.push_str("choice "),
        Word::Sign('^') => {
            out.push_str("^(");
            let next = exponent(tokens, at + 1, operand, out);
            out.push(')');
            return next;
        }
        Word::Sign(sign) => out.push_str(match sign {
            '|' => "||",
            'l' => "<=",
            'g' => ">=",
            '<' => "<",
            '>' => ">",
            '+' => "+",
            '-' => "-",
            '*' => "*",
            '/' => "/",
            ',' => ",",
            '(' => "(",
            _ => ")",
        }),
    }
    at + 1
}

/// The exponent that begins at `at`: signs, then a value, call or bracket, then a further power.
fn exponent(tokens: &[Token], mut at: usize, operand: &mut usize, out: &mut String) -> usize {
    while matches!(tokens.get(at).map(|t| &t.word), Some(Word::Sign('-'))) {
        at = emit(tokens, at, operand, out);
    }
    if matches!(tokens.get(at).map(|t| &t.word), Some(Word::Function(_) | Word::If)) {
        at = emit(tokens, at, operand, out);
    }
    if matches!(tokens.get(at).map(|t| &t.word), Some(Word::Sign('('))) {
        let mut depth = 0;
        while at < tokens.len() {
            match &tokens[at].word {
                Word::Sign('(') => depth += 1,
                Word::Sign(')') => depth -= 1,
                _ => {}
            }
            at = emit(tokens, at, operand, out);
            if depth == 0 {
                break;
            }
        }
    } else if at < tokens.len() {
        at = emit(tokens, at, operand, out);
    }
    if matches!(tokens.get(at).map(|t| &t.word), Some(Word::Sign('^'))) {
        at = emit(tokens, at, operand, out);
    }
    at
}
