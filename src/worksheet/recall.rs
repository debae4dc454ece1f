//! Recalls: `{{ ... }}` in prose names results and chooses words. It does no arithmetic.
//!
//! An expression is scanned here first: every name, condition and criterion in it is found with its place, and anything
//! else than naming and choosing is refused. What is left is rewritten so that each name becomes a plain variable (the
//! template engine would take `Q1.V_CE(sat)` for an attribute and a call) and evaluated by the template engine.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::Arc;

use minijinja::value::{Object, ObjectRepr, Value};
use minijinja::{Environment, Error, ErrorKind};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::markup::Inline;
use crate::source::Place;

use super::page::MARK;
use super::{Recall, Spot};

/// Functions that a recall may call.
pub const FUNCTIONS: [&str; 6] = ["met", "worst", "min", "max", "nominal", "at"];
/// Filters that a recall may use.
pub const FILTERS: [&str; 2] = ["unit", "digits"];
const KEYWORDS: [&str; 5] = ["if", "else", "and", "or", "not"];
/// Instructions of the template engine that one recall may take.
const FUEL: u64 = 2_000;
/// The longest recall, in bytes, and the most digits that it may ask for.
const LONGEST: usize = 1_000;
const MOST_DIGITS: u64 = 12;

/// Which value of a result is recalled.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum End {
    Nominal,
    Min,
    Max,
}

/// What a recall asks for.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Asked {
    /// A symbol of the note, in the condition named (otherwise the first one), at nominal or at an extreme.
    Symbol { name: String, condition: Option<String>, end: End },
    /// The worst value of a criterion.
    Worst { label: String },
}

/// How the value is to be printed: the unit's symbol and the number of significant digits, where they were chosen.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Print {
    pub unit: Option<String>,
    pub digits: Option<u8>,
}

/// Where a recall gets its values from.
pub trait Lookup {
    /// Whether the criterion is met (on assumptions or not); not shown counts as not met. `None`: no such criterion.
    fn met(&self, label: &str) -> Option<bool>;
    /// The value printed; an error says why it cannot be printed so (no such symbol, a unit of another dimension).
    fn print(&self, asked: &Asked, print: &Print) -> Result<Vec<Inline>, String>;
}

/// Replaces each recall of one line by a mark and padding of the same length in bytes, so that Markdown sees a word.
/// Gives the masked text and the recalls by byte offset.
pub(super) fn mask(text: &str, from: usize) -> (String, BTreeMap<usize, Range<usize>>) {
    let mut masked = String::with_capacity(text.len());
    let mut found = BTreeMap::new();
    let mut at = from;
    masked.push_str(text.get(..from).unwrap_or(""));
    while let Some(next) = text.get(at..).and_then(|rest| rest.find("{{")) {
        let start = at + next;
        let line_end = text[start..].find('\n').map_or(text.len(), |end| start + end);
        masked.push_str(&text[at..start]);
        if text[..start].ends_with('\\') {
            masked.push_str("{{");
            at = start + 2;
        } else if let Some(length) = closing(&text[start..line_end]) {
            masked.push(MARK);
            masked.extend(std::iter::repeat_n('x', length - MARK.len_utf8()));
            found.insert(start, start..start + length);
            at = start + length;
        } else {
            // Nothing closes a recall on the rest of this line.
            masked.push_str(&text[start..line_end]);
            at = line_end;
        }
    }
    masked.push_str(text.get(at..).unwrap_or(""));
    (masked, found)
}

/// Length of the recall that `line` begins with: up to `}}` outside quotes, or else to any `}}`.
fn closing(line: &str) -> Option<usize> {
    let mut quote = None;
    let mut before = ' ';
    for (offset, c) in line.char_indices().skip(2) {
        match quote {
            Some(mark) if c == mark => quote = None,
            Some(_) => {}
            None if c == '"' || c == '\'' => quote = Some(c),
            None if c == '}' && before == '}' => return Some(offset + 1),
            None => {}
        }
        before = c;
    }
    line.get(2..)?.find("}}").map(|at| at + 4)
}

/// One token of a recall with its byte range in the expression.
#[derive(Clone, PartialEq, Debug)]
struct Token {
    what: What,
    range: Range<usize>,
}

#[derive(Clone, PartialEq, Debug)]
enum What {
    Name(String),
    Text(String),
    Number(u64),
    Sign(char),
    /// A character or sign that a recall has no use for, and what to say about it.
    Refused(String, &'static str),
}

const ARITHMETIC: &str =
    "names, functions and filters only; arithmetic stands on a derivation line, and is recalled by name";
const COMPARING: &str = "`met(\"label\")`; a comparison stands on an acceptance line";
const JOINING: &str = "the words around the recall, or one text in quotes";

fn tokens(text: &str) -> Vec<Token> {
    let mut tokens = Vec::new();
    let mut at = 0;
    while let Some(c) = text.get(at..).and_then(|rest| rest.chars().next()) {
        let rest = &text[at..];
        let (what, length) = if c.is_whitespace() {
            at += c.len_utf8();
            continue;
        } else if c == '"' || c == '\'' {
            quoted(rest, c)
        } else if c.is_alphabetic() || c == '_' {
            let length = name_length(rest);
            (What::Name(rest[..length].to_owned()), length)
        } else if c.is_ascii_digit() {
            let length = rest.find(|c: char| !c.is_ascii_digit()).unwrap_or(rest.len());
            match rest[..length].parse() {
                Ok(number) => (What::Number(number), length),
                Err(_) => (What::Refused(rest[..length].to_owned(), "a small whole number"), length),
            }
        } else if matches!(c, '(' | ')' | ',' | '|') {
            (What::Sign(c), 1)
        } else {
            let advice = match c {
                '<' | '>' | '=' | '!' | '≤' | '≥' => COMPARING,
                '~' => JOINING,
                _ => ARITHMETIC,
            };
            (What::Refused(c.to_string(), advice), c.len_utf8())
        };
        tokens.push(Token { what, range: at..at + length });
        at += length.max(1);
    }
    tokens
}

fn quoted(rest: &str, quote: char) -> (What, usize) {
    match rest[1..].find(quote) {
        Some(end) if rest[1..=end].contains('\\') => {
            (What::Refused("\\".into(), "a text in quotes without a backslash"), end + 2)
        }
        Some(end) => (What::Text(rest[1..=end].to_owned()), end + 2),
        None => (What::Refused(rest.to_owned(), "a closing quote"), rest.len()),
    }
}

/// Length in bytes of a name with owner and bracketed subscript: `I_B`, `Q1.V_CE`, `V_CE(sat)`, `R_th(j-a)`.
fn name_length(rest: &str) -> usize {
    let is_name = |c: char| c.is_alphanumeric() || c == '_' || c == '.';
    let end = rest.find(|c| !is_name(c)).unwrap_or(rest.len());
    let end = rest[..end].trim_end_matches('.').len();
    if FUNCTIONS.contains(&&rest[..end]) || FILTERS.contains(&&rest[..end]) || !rest[..end].contains('_') {
        return end;
    }
    let bracket = rest[end..].strip_prefix('(').and_then(|inside| {
        let close = inside.find(')')?;
        let word = &inside[..close];
        (!word.is_empty() && word.chars().all(|c| c.is_alphanumeric() || c == '-')).then_some(close + 2)
    });
    end + bracket.unwrap_or(0)
}

/// What a scan finds.
pub(super) struct Scanned {
    pub recall: Recall,
    pub conditions: Vec<Spot<String>>,
}

/// Reads one recall without evaluating it. `whole` is the recall with its braces; `place` is the place of its first brace.
pub(super) fn scan(whole: &str, place: &Place) -> Result<Scanned, Diagnostics> {
    let inner = whole.strip_prefix("{{").and_then(|rest| rest.strip_suffix("}}")).unwrap_or(whole);
    let source = inner.trim();
    let skip = 2 + inner.len() - inner.trim_start().len();
    let spot = |range: &Range<usize>| place.within(whole, skip + range.start, skip + range.end);
    let all = Place { length: whole.chars().count() as u32, ..place.clone() };
    if source.is_empty() {
        return Err(Diagnostic::error(&all, "the recall is empty").expected("a name: `{{ I_B }}`").into());
    }
    if source.len() > LONGEST {
        let message = format!("the recall has {} bytes", source.len());
        return Err(Diagnostic::error(&all, message).expected(format!("at most {LONGEST}")).into());
    }
    let tokens = tokens(source);
    let mut diagnostics = Diagnostics::default();
    let (mut names, mut criteria, mut conditions) = (Vec::new(), Vec::new(), Vec::new());
    let refused = tokens.iter().any(|token| matches!(token.what, What::Refused(..)));
    for (index, token) in tokens.iter().enumerate() {
        let sign = |at: Option<usize>| match at.and_then(|at| tokens.get(at)).map(|token| &token.what) {
            Some(What::Sign(sign)) => Some(*sign),
            _ => None,
        };
        let (before, after) = (sign(index.checked_sub(1)), sign(Some(index + 1)));
        match &token.what {
            What::Refused(text, advice) => {
                let message = format!("a recall does not take `{text}`");
                diagnostics.push(Diagnostic::error(&spot(&token.range), message).expected(*advice));
            }
            What::Name(name) if before == Some('|') => {
                known(name, &FILTERS, "filter", &spot(&token.range), &mut diagnostics)
            }
            What::Name(name) if KEYWORDS.contains(&name.as_str()) => {}
            What::Name(name) if after == Some('(') => {
                known(name, &FUNCTIONS, "function", &spot(&token.range), &mut diagnostics);
                let argument = tokens.get(index + 2);
                match (name.as_str(), argument.map(|token| (&token.what, &token.range))) {
                    ("met" | "worst", Some((What::Text(label), range))) => {
                        criteria.push(Spot { value: label.clone(), place: spot(&inside_quotes(range)) })
                    }
                    ("at", Some((What::Text(name), range))) => {
                        conditions.push(Spot { value: name.clone(), place: spot(&inside_quotes(range)) })
                    }
                    ("met" | "worst", _) => diagnostics.push(
                        Diagnostic::error(
                            &spot(&token.range),
                            format!("`{name}` needs the label of a criterion"),
                        )
                        .expected(format!("`{name}(\"label\")`")),
                    ),
                    ("at", _) => diagnostics.push(
                        Diagnostic::error(&spot(&token.range), "`at` needs a condition and a name")
                            .expected("`at(\"off\", I_B)`"),
                    ),
                    _ => {}
                }
            }
            What::Name(name) => {
                let name = Spot { value: name.clone(), place: spot(&token.range) };
                if !refused && is_condition(&tokens, index) {
                    let message = format!("`{}` is neither true nor false", name.value);
                    diagnostics.push(Diagnostic::error(&name.place, message).expected(COMPARING));
                }
                names.push(name);
            }
            What::Text(_) | What::Number(_) | What::Sign(_) => {}
        }
    }
    let recall = Recall { source: source.to_owned(), names, criteria, place: all };
    if !diagnostics.has_errors()
        && let Err(error) = environment(BTreeMap::new()).compile_expression(&rewrite(source).0)
    {
        diagnostics.push(syntax(&recall.place, &error));
    }
    if diagnostics.has_errors() { Err(diagnostics) } else { Ok(Scanned { recall, conditions }) }
}

/// Whether a name stands where something true or false belongs.
fn is_condition(tokens: &[Token], index: usize) -> bool {
    let keyword = |token: Option<&Token>, words: &[&str]| matches!(token.map(|token| &token.what), Some(What::Name(name)) if words.contains(&name.as_str()));
    let before = tokens.get(..index).unwrap_or(&[]).iter().rev().find(|token| token.what != What::Sign('('));
    let after = tokens.get(index + 1..).unwrap_or(&[]).iter().find(|token| token.what != What::Sign(')'));
    keyword(before, &["if", "and", "or", "not"]) || keyword(after, &["and", "or"])
}

fn inside_quotes(range: &Range<usize>) -> Range<usize> {
    range.start + 1..range.end.saturating_sub(1)
}

fn known(name: &str, names: &[&str], what: &str, place: &Place, diagnostics: &mut Diagnostics) {
    if !names.contains(&name) {
        diagnostics.push(
            Diagnostic::error(place, format!("unknown {what} `{name}`"))
                .expected(format!("one of {}", names.join(", ")))
                .nearest(name, names.iter().copied()),
        );
    }
}

fn syntax(place: &Place, error: &Error) -> Diagnostic {
    let detail = error.detail().unwrap_or("it cannot be read");
    Diagnostic::error(place, format!("this recall is malformed: {detail}")).expected(
        "such as `{{ I_B | unit(\"mA\", 3) }}` or `{{ \"kept\" if met(\"label\") else \"not kept\" }}`",
    )
}

/// The expression with each name of the note as a variable `v0`, `v1`, ..., and the names in that order.
fn rewrite(source: &str) -> (String, Vec<String>) {
    let tokens = tokens(source);
    let (mut out, mut names) = (String::new(), Vec::new());
    for (index, token) in tokens.iter().enumerate() {
        let piped = index > 0 && tokens.get(index - 1).is_some_and(|t| t.what == What::Sign('|'));
        let called = tokens.get(index + 1).is_some_and(|t| t.what == What::Sign('('));
        out.push(' ');
        match &token.what {
            What::Name(name) if !piped && !called && !KEYWORDS.contains(&name.as_str()) => {
                out.push_str(&format!("v{}", names.len()));
                names.push(name.clone());
            }
            _ => out.push_str(&source[token.range.clone()]),
        }
    }
    (out, names)
}

/// A value on its way through functions and filters; it has no number until it is printed.
#[derive(Clone, PartialEq, Debug)]
struct Reading {
    asked: Asked,
    print: Print,
}

impl Object for Reading {
    fn repr(self: &Arc<Self>) -> ObjectRepr {
        ObjectRepr::Plain
    }
}

fn refuse<T>(message: &str) -> Result<T, Error> {
    Err(Error::new(ErrorKind::InvalidOperation, message.to_owned()))
}

fn reading(value: &Value) -> Result<Reading, Error> {
    match value.downcast_object_ref::<Reading>() {
        Some(reading) => Ok(reading.clone()),
        None => refuse("a name of the note belongs here, not a text"),
    }
}

fn with_end(value: Value, wanted: End) -> Result<Value, Error> {
    let mut reading = reading(&value)?;
    match &mut reading.asked {
        Asked::Symbol { end, .. } => *end = wanted,
        Asked::Worst { .. } => return refuse("the worst value of a criterion has no other end"),
    }
    Ok(Value::from_object(reading))
}

fn with_digits(mut reading: Reading, digits: Option<u64>) -> Result<Value, Error> {
    if let Some(digits) = digits {
        if !(1..=MOST_DIGITS).contains(&digits) {
            return refuse("1 to 12 significant digits can be printed");
        }
        reading.print.digits = Some(digits as u8);
    }
    Ok(Value::from_object(reading))
}

fn environment(met: BTreeMap<String, bool>) -> Environment<'static> {
    let mut environment = Environment::empty();
    environment.set_fuel(Some(FUEL));
    environment.add_function("met", move |label: String| match met.get(&label) {
        Some(met) => Ok(*met),
        None => refuse("there is no such criterion"),
    });
    environment.add_function("worst", |label: String| {
        Value::from_object(Reading { asked: Asked::Worst { label }, print: Print::default() })
    });
    environment.add_function("min", |value: Value| with_end(value, End::Min));
    environment.add_function("max", |value: Value| with_end(value, End::Max));
    environment.add_function("nominal", |value: Value| with_end(value, End::Nominal));
    environment.add_function("at", |wanted: String, value: Value| {
        let mut reading = reading(&value)?;
        match &mut reading.asked {
            Asked::Symbol { condition, .. } => *condition = Some(wanted),
            Asked::Worst { .. } => return refuse("a criterion names its own conditions"),
        }
        Ok(Value::from_object(reading))
    });
    environment.add_filter("unit", |value: Value, unit: String, digits: Option<u64>| {
        let mut reading = reading(&value)?;
        reading.print.unit = Some(unit);
        with_digits(reading, digits)
    });
    environment.add_filter("digits", |value: Value, digits: u64| with_digits(reading(&value)?, Some(digits)));
    environment
}

/// Evaluates one recall: the text or the printed value that stands in its place.
///
/// # Errors
/// A name, criterion or unit that `lookup` refuses, or an expression that comes to neither a text nor a value.
pub fn evaluate(recall: &Recall, lookup: &dyn Lookup) -> Result<Vec<Inline>, Diagnostic> {
    let mut met = BTreeMap::new();
    for label in &recall.criteria {
        let verdict = lookup.met(&label.value).ok_or_else(|| {
            Diagnostic::error(&label.place, format!("there is no criterion `{}`", label.value))
        })?;
        met.insert(label.value.clone(), verdict);
    }
    let environment = environment(met);
    let (expression, names) = rewrite(&recall.source);
    let variables: BTreeMap<String, Value> = names
        .into_iter()
        .enumerate()
        .map(|(index, name)| {
            let asked = Asked::Symbol { name, condition: None, end: End::Nominal };
            (format!("v{index}"), Value::from_object(Reading { asked, print: Print::default() }))
        })
        .collect();
    let value = environment
        .compile_expression(&expression)
        .and_then(|compiled| compiled.eval(variables))
        .map_err(|error| syntax(&recall.place, &error))?;
    if let Some(reading) = value.downcast_object_ref::<Reading>() {
        return lookup
            .print(&reading.asked, &reading.print)
            .map_err(|message| Diagnostic::error(&recall.place, message));
    }
    match value.as_str() {
        // A choice without `else` says nothing otherwise.
        None if value.is_undefined() => Ok(Vec::new()),
        Some(text) => Ok(vec![Inline::Text { text: text.to_owned() }]),
        None => Err(Diagnostic::error(&recall.place, "this recall comes to neither a text nor a value")
            .expected("a name, or a choice of words with `if ... else ...`")),
    }
}
