//! Blocks of lines: each begins with a label and a colon; a line that begins with white space continues the one before.

use std::ops::Range;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::{Expr, Formula, Relation};
use crate::source::Place;

use super::Spot;
use super::fence::RawBlock;
use super::page::Page;

/// One line with the lines that continue it, joined by single spaces.
pub(super) struct Line<'p> {
    page: &'p Page<'p>,
    pub text: String,
    /// For each piece: where it begins in `text`, and its byte offset in the page.
    pieces: Vec<(usize, usize)>,
}

/// Cuts a block into its lines.
pub(super) fn cut<'p>(page: &'p Page<'p>, block: &RawBlock, diagnostics: &mut Diagnostics) -> Vec<Line<'p>> {
    let mut lines: Vec<Line> = Vec::new();
    let mut offset = block.content.start;
    for written in page.slice(block.content.clone()).split_inclusive('\n') {
        let start = offset;
        offset += written.len();
        let text = written.trim_end();
        let indent = text.len() - text.trim_start().len();
        let text = &text[indent..];
        if text.is_empty() {
            continue;
        }
        match lines.last_mut() {
            Some(line) if indent > 0 => {
                line.text.push(' ');
                line.pieces.push((line.text.len(), start + indent));
                line.text.push_str(text);
            }
            _ => {
                if indent > 0 {
                    let place = page.place(start + indent..start + indent + text.len());
                    diagnostics.push(
                        Diagnostic::error(&place, "this continues a line, but there is none before it")
                            .expected("the line at the very left: `label: ...`"),
                    );
                }
                lines.push(Line { page, text: text.to_owned(), pieces: vec![(0, start + indent)] });
            }
        }
    }
    lines
}

impl Line<'_> {
    /// The place of a byte range of the joined text.
    pub fn place(&self, range: Range<usize>) -> Place {
        let at = self.pieces.iter().rev().find(|(start, _)| *start <= range.start).copied();
        let (start, offset) = at.unwrap_or((0, 0));
        let begin = offset + range.start - start;
        self.page.place(begin..begin + range.len())
    }

    pub fn spot(&self, range: Range<usize>) -> Spot<String> {
        Spot { value: self.text.get(range.clone()).unwrap_or("").to_owned(), place: self.place(range) }
    }

    /// `range` without white space at its ends.
    pub fn trimmed(&self, range: Range<usize>) -> Range<usize> {
        let text = self.text.get(range.clone()).unwrap_or("");
        let left = text.len() - text.trim_start().len();
        let start = range.start + left;
        start..start + text.trim().len()
    }

    /// Splits off the label: its range, and the range of what follows the colon.
    pub fn label(
        &self,
        example: &str,
        diagnostics: &mut Diagnostics,
    ) -> Option<(Range<usize>, Range<usize>)> {
        let whole = 0..self.text.len();
        let Some(colon) = self.text.find(':') else {
            diagnostics.push(
                Diagnostic::error(&self.place(whole), "the line has no label")
                    .expected(format!("`{example}`")),
            );
            return None;
        };
        let (label, rest) = (self.trimmed(0..colon), self.trimmed(colon + 1..self.text.len()));
        if label.is_empty() || rest.is_empty() {
            let what = if label.is_empty() { "the label is missing" } else { "nothing follows the label" };
            let place = self.place(if label.is_empty() { 0..1 } else { label.clone() });
            diagnostics.push(Diagnostic::error(&place, what).expected(format!("`{example}`")));
            return None;
        }
        Some((label, rest))
    }

    /// Parses an expression that stands at `range`.
    pub fn formula(&self, range: Range<usize>) -> Result<Formula, Diagnostics> {
        let place = self.flat(range.clone());
        let text = self.text.get(range.clone()).unwrap_or("");
        let mut formula = crate::formula::Formula::parse(text, &place)
            .map_err(|found| self.true_places(found, range.start))?;
        self.true_expr(&mut formula.expr, range.start);
        formula.place = self.place(range);
        Ok(formula)
    }

    /// Parses a relation that stands at `range`.
    pub fn relation(&self, range: Range<usize>) -> Result<Relation, Diagnostics> {
        let place = self.flat(range.clone());
        let text = self.text.get(range.clone()).unwrap_or("");
        let mut relation = crate::formula::Relation::parse(text, &place)
            .map_err(|found| self.true_places(found, range.start))?;
        self.true_relation(&mut relation, range.start);
        Ok(relation)
    }

    /// A place as if the joined text stood on one line, from column 1 of line 1 at the start of `range`.
    fn flat(&self, range: Range<usize>) -> Place {
        let length = self.text.get(range).unwrap_or("").chars().count();
        Place::new(self.page.file, 1, 1, length as u32)
    }

    /// Turns a flat place into the place in the file.
    fn true_place(&self, flat: &mut Place, start: usize) {
        let text = self.text.get(start..).unwrap_or("");
        let mut bytes = text.char_indices().map(|(at, _)| at).chain(std::iter::once(text.len()));
        let skip = (flat.column as usize).saturating_sub(1);
        let begin = start + bytes.nth(skip).unwrap_or(text.len());
        let covered: usize =
            self.text.get(begin..).unwrap_or("").chars().take(flat.length as usize).map(char::len_utf8).sum();
        *flat = self.place(begin..begin + covered);
    }

    fn true_places(&self, mut found: Diagnostics, start: usize) -> Diagnostics {
        found.0.iter_mut().filter_map(|d| d.place.as_mut()).for_each(|place| self.true_place(place, start));
        found
    }

    fn true_relation(&self, relation: &mut Relation, start: usize) {
        self.true_expr(&mut relation.left, start);
        self.true_expr(&mut relation.right, start);
        self.true_place(&mut relation.place, start);
    }

    /// Depth is bounded by the formula parser.
    fn true_expr(&self, expr: &mut Expr, start: usize) {
        match expr {
            Expr::Literal { place, .. } | Expr::Name { place, .. } => self.true_place(place, start),
            Expr::Negate(inner) => self.true_expr(inner, start),
            Expr::Binary { left, right, place, .. } => {
                self.true_expr(left, start);
                self.true_expr(right, start);
                self.true_place(place, start);
            }
            Expr::Call { arguments, place, .. } => {
                arguments.iter_mut().for_each(|argument| self.true_expr(argument, start));
                self.true_place(place, start);
            }
            Expr::Choice { condition, then, otherwise, place } => {
                self.true_relation(condition, start);
                self.true_expr(then, start);
                self.true_expr(otherwise, start);
                self.true_place(place, start);
            }
        }
    }
}

/// Characters of `text` outside brackets of any sort, with their byte offsets.
pub(super) fn outside_brackets(text: &str) -> impl Iterator<Item = (usize, char)> + '_ {
    let mut depth = 0_i32;
    text.char_indices().filter(move |(_, c)| {
        match c {
            '(' | '[' | '{' => depth += 1,
            ')' | ']' | '}' => depth = (depth - 1).max(0),
            _ => return depth == 0,
        }
        false
    })
}

/// Byte ranges of the words of `text` outside brackets, cut at white space and commas.
pub(super) fn words(text: &str) -> Vec<Range<usize>> {
    let mut words: Vec<Range<usize>> = Vec::new();
    for (at, c) in outside_brackets(text) {
        if c.is_whitespace() || c == ',' {
            continue;
        }
        match words.last_mut() {
            Some(word) if word.end == at => word.end = at + c.len_utf8(),
            _ => words.push(at..at + c.len_utf8()),
        }
    }
    words
}

/// Where comparison signs begin, outside brackets.
pub(super) fn comparisons(text: &str) -> Vec<usize> {
    outside_brackets(text).filter(|(_, c)| matches!(c, '<' | '>' | '≤' | '≥')).map(|(at, _)| at).collect()
}

/// Whether `word` is a name as the note uses it: a letter, then letters, digits and `_`, then perhaps `(sat)`.
pub(super) fn is_name(word: &str) -> bool {
    let (stem, bracket) = match word.split_once('(') {
        Some((stem, rest)) => (stem, rest.strip_suffix(')')),
        None => (word, Some("x")),
    };
    let begins = stem.chars().next().is_some_and(char::is_alphabetic);
    let stem_right = stem.chars().all(|c| c.is_alphanumeric() || c == '_');
    let bracket_right =
        bracket.is_some_and(|word| !word.is_empty() && word.chars().all(|c| c.is_alphanumeric() || c == '-'));
    let plain = !word.contains('(') || stem.contains('_');
    begins && stem_right && bracket_right && plain
}

/// Words that have a meaning of their own and cannot name a value.
const RESERVED: [&str; 30] = [
    "ground", "in", "over", "safety", "nominal", "extremes", "if", "else", "and", "or", "not", "to",
    "usually", "true", "false", "none", "met", "worst", "at", "unit", "digits", "ln", "log10", "exp", "sqrt",
    "abs", "min", "max", "normal", "lasts",
];

/// Reports a name that cannot be used for a value.
pub(super) fn check_name(name: &Spot<String>, diagnostics: &mut Diagnostics) -> bool {
    let functions = ["sin", "cos", "tan", "atan"];
    let word = name.value.as_str();
    if RESERVED.contains(&word) || functions.contains(&word) {
        let message = format!("`{word}` has a meaning of its own and cannot name a value");
        diagnostics.push(Diagnostic::error(&name.place, message).expected("another name"));
        return false;
    }
    if !is_name(word) {
        let message = format!("`{word}` cannot name a value");
        diagnostics.push(
            Diagnostic::error(&name.place, message)
                .expected("a letter, then letters, digits and `_`, such as `I_B` or `V_CE(sat)`"),
        );
        return false;
    }
    true
}
