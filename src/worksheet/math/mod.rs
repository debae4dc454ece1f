//! `$...$` in prose: mathematics as authors write it, either plainly (`V_CE(sat) <= 0.3 V`) or with the usual backslash
//! commands (`\frac{V_{CC}}{R_C}`), read into the tree that the templates set, with a reading aloud.

mod spoken;

use std::ops::Range;

use crate::diagnostic::nearest;
use crate::formula;
use crate::markup::Math;
use crate::quantity;

/// The deepest nesting of a formula, and its greatest length in bytes.
const DEEPEST: usize = 24;
const LONGEST: usize = 2_000;

/// What is wrong with a formula, by byte range in its text.
#[derive(Debug)]
pub(super) struct Fault {
    pub range: Range<usize>,
    pub message: String,
    pub expected: String,
    pub nearest: Option<String>,
}

/// Backslash commands that stand for a letter.
const LETTERS: [(&str, &str); 27] = [
    ("alpha", "α"),
    ("beta", "β"),
    ("gamma", "γ"),
    ("delta", "δ"),
    ("epsilon", "ε"),
    ("eta", "η"),
    ("theta", "θ"),
    ("vartheta", "ϑ"),
    ("kappa", "κ"),
    ("lambda", "λ"),
    ("mu", "μ"),
    ("nu", "ν"),
    ("pi", "π"),
    ("rho", "ρ"),
    ("sigma", "σ"),
    ("tau", "τ"),
    ("phi", "φ"),
    ("varphi", "φ"),
    ("chi", "χ"),
    ("psi", "ψ"),
    ("omega", "ω"),
    ("Gamma", "Γ"),
    ("Delta", "Δ"),
    ("Theta", "Θ"),
    ("Phi", "Φ"),
    ("Psi", "Ψ"),
    ("Omega", "Ω"),
];

/// Commands and plain spellings that stand for a sign, with the sign's name in words.
const SIGNS: [(&str, &str, &str); 30] = [
    ("\\cdot", "·", "times"),
    ("\\times", "×", "times"),
    ("\\pm", "±", "plus or minus"),
    ("\\leq", "≤", "is at most"),
    ("\\le", "≤", "is at most"),
    ("\\geq", "≥", "is at least"),
    ("\\ge", "≥", "is at least"),
    ("\\neq", "≠", "is not"),
    ("\\ne", "≠", "is not"),
    ("\\approx", "≈", "is about"),
    ("\\parallel", "∥", "in parallel with"),
    ("\\rightarrow", "→", "to"),
    ("\\to", "→", "to"),
    ("\\gg", "≫", "is much greater than"),
    ("\\ll", "≪", "is much less than"),
    ("\\infty", "∞", "infinity"),
    ("<=", "≤", "is at most"),
    (">=", "≥", "is at least"),
    ("||", "∥", "in parallel with"),
    ("+/-", "±", "plus or minus"),
    ("->", "→", "to"),
    ("=", "=", "equals"),
    ("<", "<", "is less than"),
    (">", ">", "is greater than"),
    ("+", "+", "plus"),
    ("-", "−", "minus"),
    ("*", "·", "times"),
    (",", ",", ","),
    (";", ";", ";"),
    (":", ":", ":"),
];

/// Signs that stand for themselves.
const PLAIN: [(char, &str); 14] = [
    ('·', "times"),
    ('×', "times"),
    ('±', "plus or minus"),
    ('≤', "is at most"),
    ('≥', "is at least"),
    ('≠', "is not"),
    ('≈', "is about"),
    ('∥', "in parallel with"),
    ('→', "to"),
    ('−', "minus"),
    ('≫', "is much greater than"),
    ('≪', "is much less than"),
    ('∞', "infinity"),
    ('…', "and so on"),
];

const FUNCTIONS: [&str; 12] =
    ["ln", "log", "exp", "sin", "cos", "tan", "arctan", "min", "max", "log10", "atan", "lim"];
const SPACES: [&str; 8] = ["\\left", "\\right", "\\quad", "\\,", "\\;", "\\:", "\\!", "\\ "];
/// Reads a formula.
///
/// # Errors
/// An unknown command, a bracket without its partner, an operator without operand, a formula that is too long or deep.
pub(super) fn read(text: &str) -> Result<(Math, String), Box<Fault>> {
    if text.len() > LONGEST {
        return Err(fault(0..text.len(), "the formula is too long", "a shorter formula"));
    }
    let mut reader = Reader { text, at: 0, depth: 0 };
    let row = reader.row("")?;
    if reader.at < text.len() {
        let end = text.len();
        return Err(fault(reader.at..end, "a closing bracket has no opening one", "a pair of brackets"));
    }
    if matches!(&row, Math::Row { parts } if parts.is_empty()) {
        return Err(fault(0..text.len(), "the formula is empty", "a formula between the dollar signs"));
    }
    if depth(&row) > DEEPEST {
        return Err(fault(0..text.len(), "the formula is nested too deep", "a simpler formula"));
    }
    let mut words = String::new();
    spoken::speak(&row, &mut words);
    Ok((row, words.split_whitespace().collect::<Vec<_>>().join(" ")))
}

fn fault(range: Range<usize>, message: &str, expected: &str) -> Box<Fault> {
    Box::new(Fault { range, message: message.into(), expected: expected.into(), nearest: None })
}

struct Reader<'a> {
    text: &'a str,
    at: usize,
    depth: usize,
}

impl<'a> Reader<'a> {
    fn rest(&self) -> &'a str {
        self.text.get(self.at..).unwrap_or("")
    }

    fn peek(&self) -> Option<char> {
        self.rest().chars().next()
    }

    fn skip_spaces(&mut self) {
        loop {
            let rest = self.rest();
            let trimmed = rest.trim_start();
            self.at += rest.len() - trimmed.len();
            let space = SPACES.iter().find(|space| {
                trimmed.strip_prefix(**space).is_some_and(|after| {
                    !space.ends_with(char::is_alphabetic) || !after.starts_with(char::is_alphabetic)
                })
            });
            match space {
                Some(space) => self.at += space.len(),
                None => return,
            }
        }
    }

    fn take(&mut self, what: &str) -> bool {
        let found = self.rest().starts_with(what);
        if found {
            self.at += what.len();
        }
        found
    }

    /// Parts up to one of the characters of `until` (not taken) or the end.
    fn row(&mut self, until: &str) -> Result<Math, Box<Fault>> {
        self.depth += 1;
        if self.depth > DEEPEST {
            return Err(fault(self.at..self.at + 1, "the formula is nested too deep", "a simpler formula"));
        }
        let mut parts: Vec<Math> = Vec::new();
        loop {
            self.skip_spaces();
            let Some(c) = self.peek() else { break };
            if until.contains(c) || matches!(c, ')' | ']' | '}') {
                break;
            }
            match c {
                '^' => {
                    let start = self.at;
                    self.at += 1;
                    let exponent = Box::new(self.argument()?);
                    match parts.pop().filter(|base| !matches!(base, Math::Operator { .. })) {
                        Some(base) => parts.push(Math::Power { base: Box::new(base), exponent }),
                        None => return Err(fault(start..start + 1, "nothing is raised here", "`x^2`")),
                    }
                }
                '/' => {
                    let start = self.at;
                    self.at += 1;
                    let below = self.power()?;
                    match parts.pop().filter(|above| !matches!(above, Math::Operator { .. })) {
                        Some(above) => parts.push(Math::Fraction {
                            above: Box::new(ungrouped(above)),
                            below: Box::new(ungrouped(below)),
                        }),
                        None => return Err(fault(start..start + 1, "nothing is divided here", "`a / b`")),
                    }
                }
                _ => parts.push(self.part()?),
            }
        }
        self.depth -= 1;
        let single = parts.len() == 1;
        Ok(match parts.pop() {
            Some(only) if single => only,
            Some(last) => {
                parts.push(last);
                Math::Row { parts }
            }
            None => Math::Row { parts },
        })
    }

    /// One part with its exponent, as it stands below a slash.
    fn power(&mut self) -> Result<Math, Box<Fault>> {
        self.skip_spaces();
        let start = self.at;
        if self.peek().is_none_or(|c| ")]}^/=<>".contains(c)) {
            return Err(fault(start..start + 1, "something is missing here", "what stands below the slash"));
        }
        let base = self.part()?;
        self.skip_spaces();
        if self.take("^") {
            let exponent = Box::new(self.argument()?);
            return Ok(Math::Power { base: Box::new(base), exponent });
        }
        Ok(base)
    }

    /// `{...}` or one part.
    fn argument(&mut self) -> Result<Math, Box<Fault>> {
        self.skip_spaces();
        let start = self.at;
        if self.take("{") {
            return self.closed(start, "}");
        }
        if self.take("-") || self.take("−") {
            let parts = vec![Math::Operator { sign: "−".into() }, self.part()?];
            return Ok(Math::Row { parts });
        }
        if self.peek().is_none_or(|c| ")]}^/".contains(c)) {
            return Err(fault(start..start + 1, "something is missing here", "`{...}` or a symbol"));
        }
        self.part()
    }

    fn closed(&mut self, start: usize, close: &str) -> Result<Math, Box<Fault>> {
        let inner = self.row(close)?;
        if self.take(close) {
            Ok(inner)
        } else {
            Err(fault(start..start + 1, "this bracket is not closed", &format!("a `{close}`")))
        }
    }

    fn part(&mut self) -> Result<Math, Box<Fault>> {
        let start = self.at;
        let Some(c) = self.peek() else {
            return Err(fault(start..start, "something is missing here", "a symbol or a number"));
        };
        match c {
            '(' | '[' => {
                self.at += 1;
                let inner = self.closed(start, if c == '(' { ")" } else { "]" })?;
                Ok(Math::Group { inner: Box::new(inner) })
            }
            '{' => {
                self.at += 1;
                self.closed(start, "}")
            }
            '0'..='9' => Ok(self.number()),
            '|' if !self.rest().starts_with("||") => {
                self.at += 1;
                let inner = self.closed(start, "|")?;
                Ok(Math::Absolute { inner: Box::new(inner) })
            }
            '\\' => self.command(),
            c if c.is_alphabetic() => self.word(),
            c => match self.sign(c) {
                Some(sign) => Ok(sign),
                None => {
                    let message = format!("a formula does not take `{c}`");
                    let range = start..start + c.len_utf8();
                    Err(fault(range, &message, "letters, numbers, brackets, signs and backslash commands"))
                }
            },
        }
    }

    fn sign(&mut self, c: char) -> Option<Math> {
        let rest = self.rest();
        if let Some((written, sign, _)) = SIGNS.iter().find(|(written, ..)| rest.starts_with(written)) {
            self.at += written.len();
            return Some(Math::Operator { sign: (*sign).to_owned() });
        }
        PLAIN.iter().find(|(plain, _)| *plain == c)?;
        self.at += c.len_utf8();
        Some(Math::Operator { sign: c.to_string() })
    }

    fn number(&mut self) -> Math {
        let rest = self.rest();
        let mut end = rest.find(|c: char| !c.is_ascii_digit() && c != '.').unwrap_or(rest.len());
        end = rest[..end].trim_end_matches('.').len();
        self.at += end;
        let digits = rest[..end].to_owned();
        let after = &rest[end..];
        let spaced = after.trim_start();
        let word_end = spaced
            .find(|c: char| !c.is_alphabetic() && !matches!(c, '°' | '%' | '/'))
            .unwrap_or(spaced.len());
        let word = spaced[..word_end].trim_end_matches('/');
        // A letter that goes on as `V_CC` or `V(t)` is a symbol, not a unit.
        let goes_on = spaced[word.len()..].starts_with(['_', '(', '{', '.', '^']);
        let is_unit = !word.is_empty()
            && quantity::parse_unit(word).is_some()
            && !goes_on
            && (word == "%" || after.len() > spaced.len());
        if !is_unit {
            return Math::Number { digits, exponent: None, unit: String::new() };
        }
        self.at += after.len() - spaced.len() + word.len();
        Math::Number { digits, exponent: None, unit: word.to_owned() }
    }

    fn command(&mut self) -> Result<Math, Box<Fault>> {
        let start = self.at;
        let rest = self.rest();
        let letters = rest[1..].find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(rest.len() - 1);
        let whole = &rest[..1 + letters];
        let name = &whole[1..];
        if let Some((_, sign, _)) = SIGNS.iter().find(|(written, ..)| *written == whole) {
            self.at += whole.len();
            return Ok(Math::Operator { sign: (*sign).to_owned() });
        }
        self.at += whole.len();
        match name {
            "frac" => {
                let above = Box::new(self.argument()?);
                let below = Box::new(self.argument()?);
                Ok(Math::Fraction { above, below })
            }
            "sqrt" => Ok(Math::Root { radicand: Box::new(self.argument()?) }),
            "text" | "mathrm" | "operatorname" => {
                let word = self.braced(start)?;
                Ok(Math::Symbol { base: String::new(), subscript: word, owner: String::new() })
            }
            _ if FUNCTIONS.contains(&name) => self.call(name),
            _ => match LETTERS.iter().find(|(command, _)| *command == name) {
                Some((_, letter)) => self.subscripted((*letter).to_owned(), String::new()),
                None => Err(unknown_command(name, whole, start)),
            },
        }
    }

    /// The plain text between braces.
    fn braced(&mut self, start: usize) -> Result<String, Box<Fault>> {
        self.skip_spaces();
        let missing = || fault(start..start + 1, "something is missing here", "`{...}` with plain words");
        let inside = self.rest().strip_prefix('{').ok_or_else(missing)?;
        let end = inside.find('}').ok_or_else(missing)?;
        self.at += end + 2;
        Ok(inside[..end].replace(['\\', '{'], ""))
    }

    /// A name of letters and digits: a function, or a symbol with owner and subscript.
    fn word(&mut self) -> Result<Math, Box<Fault>> {
        let word = self.alphanumeric();
        if FUNCTIONS.contains(&word.as_str()) {
            return self.call(&word);
        }
        if word == "sqrt" {
            let radicand = ungrouped(self.argument()?);
            return Ok(Math::Root { radicand: Box::new(radicand) });
        }
        let dotted = self.rest().strip_prefix('.').is_some_and(|rest| rest.starts_with(char::is_alphabetic));
        if dotted {
            self.at += 1;
            let base = self.alphanumeric();
            return self.subscripted(base, word);
        }
        let letter = LETTERS.iter().find(|(name, _)| *name == word).map(|(_, letter)| (*letter).to_owned());
        self.subscripted(letter.unwrap_or(word), String::new())
    }

    fn alphanumeric(&mut self) -> String {
        let rest = self.rest();
        let end = rest.find(|c: char| !c.is_alphanumeric()).unwrap_or(rest.len());
        self.at += end;
        rest[..end].to_owned()
    }

    fn call(&mut self, name: &str) -> Result<Math, Box<Fault>> {
        self.skip_spaces();
        let argument = ungrouped(self.power()?);
        let arguments = match argument {
            Math::Row { parts } => {
                let is_comma = |part: &Math| matches!(part, Math::Operator { sign } if sign == ",");
                parts.split(is_comma).map(|parts| Math::Row { parts: parts.to_vec() }).collect()
            }
            other => vec![other],
        };
        Ok(Math::Call { name: name.to_owned(), arguments })
    }

    /// `_x`, `_{...}` and `(sat)` after a base.
    fn subscripted(&mut self, base: String, owner: String) -> Result<Math, Box<Fault>> {
        let start = self.at;
        let mut subscript = String::new();
        if self.take("_") {
            subscript = match self.peek() {
                Some('{') => self.braced(start)?,
                Some(c) if c.is_alphanumeric() => self.alphanumeric(),
                _ => return Err(fault(start..start + 1, "the subscript is missing", "`V_CE` or `V_{CE}`")),
            };
            if let Some(word) =
                self.rest().strip_prefix('(').and_then(|rest| rest.split_once(')')).map(|p| p.0)
                && !word.is_empty()
                && word.chars().all(|c| c.is_alphanumeric() || c == '-')
            {
                subscript.push_str(&format!("({word})"));
                self.at += word.len() + 2;
            }
        }
        if !owner.is_empty() {
            // Results of the circuit are set as everywhere else in the note.
            let name = if subscript.is_empty() { base } else { format!("{base}_{subscript}") };
            return Ok(formula::symbol(&format!("{owner}.{name}")));
        }
        Ok(Math::Symbol { base, subscript, owner })
    }
}

fn unknown_command(name: &str, whole: &str, start: usize) -> Box<Fault> {
    let known: Vec<&str> = SIGNS
        .iter()
        .filter_map(|(written, ..)| written.strip_prefix('\\'))
        .chain(LETTERS.iter().map(|(name, _)| *name))
        .chain(FUNCTIONS)
        .chain(["frac", "sqrt", "text", "mathrm"])
        .collect();
    Box::new(Fault {
        range: start..start + whole.len(),
        message: format!("unknown command `{whole}` in a formula"),
        expected: "a Greek letter, a sign, \\frac, \\sqrt, \\text or a function".into(),
        nearest: nearest(name, known).map(|name| format!("\\{name}")),
    })
}

fn ungrouped(math: Math) -> Math {
    match math {
        Math::Group { inner } => *inner,
        other => other,
    }
}

/// Levels of a formula; its length bounds them.
fn depth(math: &Math) -> usize {
    let deepest = |parts: &[Math]| parts.iter().map(depth).max().unwrap_or(0);
    1 + match math {
        Math::Row { parts } | Math::Call { arguments: parts, .. } => deepest(parts),
        Math::Fraction { above: one, below: other } | Math::Power { base: one, exponent: other } => {
            depth(one).max(depth(other))
        }
        Math::Root { radicand: inner } | Math::Group { inner } | Math::Absolute { inner } => depth(inner),
        Math::Symbol { .. } | Math::Number { .. } | Math::Operator { .. } | Math::Cases { .. } => 0,
    }
}
