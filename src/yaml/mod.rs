//! YAML as a plain tree in which every key and every scalar has its place. The one room that knows the YAML library.
//!
//! Scalars stay text: `4k7`, `1.50`, `no` and `~` reach the rooms below exactly as they were typed, and each room reads
//! them by its own grammar. Anchors, aliases, tags, several documents, duplicate keys and trailing comments are refused,
//! because each of them lets a value say something else than what a reader sees.

use std::sync::Arc;

use saphyr_parser::{Event, Parser, Span};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Place;

/// The largest YAML text that is read, in bytes.
pub const LARGEST: usize = 1 << 20;
/// The deepest nesting of maps and lists.
pub const DEEPEST: usize = 12;

/// A value with the place where it begins.
#[derive(Clone, PartialEq, Debug)]
pub struct Node {
    pub value: Value,
    pub place: Place,
}

#[derive(Clone, PartialEq, Debug)]
pub enum Value {
    Scalar(String),
    List(Vec<Node>),
    /// In the order of writing; no key twice.
    Map(Vec<(Key, Node)>),
}

#[derive(Clone, PartialEq, Debug)]
pub struct Key {
    pub name: String,
    pub place: Place,
}

impl Node {
    /// The text of a scalar, or an error that says what was found instead of `what`.
    pub fn scalar(&self, what: &str) -> Result<&str, Diagnostic> {
        match &self.value {
            Value::Scalar(text) if text.trim().is_empty() => {
                Err(Diagnostic::error(&self.place, "the value is missing").expected(what))
            }
            Value::Scalar(text) => Ok(text),
            Value::List(_) => {
                Err(Diagnostic::error(&self.place, "a list stands where one value belongs").expected(what))
            }
            Value::Map(_) => {
                Err(Diagnostic::error(&self.place, "a map stands where one value belongs").expected(what))
            }
        }
    }

    /// The entries of a map, or an error that says what was found instead of `what`. Nothing at all is an empty map.
    pub fn map(&self, what: &str) -> Result<&[(Key, Node)], Diagnostic> {
        match &self.value {
            Value::Map(entries) => Ok(entries),
            Value::Scalar(text) if text.is_empty() => Ok(&[]),
            Value::Scalar(_) => {
                Err(Diagnostic::error(&self.place, "one value stands where a map belongs").expected(what))
            }
            Value::List(_) => {
                Err(Diagnostic::error(&self.place, "a list stands where a map belongs").expected(what))
            }
        }
    }

    /// The items of a list; a scalar or map counts as a list of one.
    pub fn items(&self) -> &[Node] {
        match &self.value {
            Value::List(items) => items,
            _ => std::slice::from_ref(self),
        }
    }

    /// The entry of a map with that key.
    pub fn get(&self, name: &str) -> Option<&Node> {
        match &self.value {
            Value::Map(entries) => entries.iter().find(|(key, _)| key.name == name).map(|(_, node)| node),
            _ => None,
        }
    }
}

/// Reports every key of `entries` that is not among `known`, with the nearest of them.
pub fn refuse_unknown_keys(entries: &[(Key, Node)], known: &[&str], diagnostics: &mut Diagnostics) {
    for (key, _) in entries {
        if !known.contains(&key.name.as_str()) {
            diagnostics.push(
                Diagnostic::error(&key.place, format!("unknown key `{}`", key.name))
                    .expected(format!("one of {}", known.join(", ")))
                    .nearest(&key.name, known.iter().copied()),
            );
        }
    }
}

/// Reads one YAML document. `text` is what stands in `file` from the start of line `first_line` on.
///
/// # Errors
/// Malformed YAML, or anything refused (see the module), each with its place.
pub fn read(text: &str, file: &Arc<str>, first_line: u32) -> Result<Node, Diagnostics> {
    let origin = Place::new(file, first_line, 1, 0);
    if text.len() > LARGEST {
        return Err(Diagnostic::error(&origin, format!("the YAML text has {} bytes", text.len()))
            .expected(format!("at most {LARGEST} bytes"))
            .into());
    }
    let mut diagnostics = refuse_trailing_comments(text, file, first_line);
    let tree = Reader { parser: Parser::new_from_str(text), text, file, first_line, origin }.document();
    match tree {
        Ok(node) => {
            refuse_duplicates(&node, &mut diagnostics);
            if diagnostics.has_errors() { Err(diagnostics) } else { Ok(node) }
        }
        Err(diagnostic) => {
            diagnostics.push(*diagnostic);
            Err(diagnostics)
        }
    }
}

struct Reader<'a> {
    parser: Parser<'a, saphyr_parser::StrInput<'a>>,
    text: &'a str,
    file: &'a Arc<str>,
    first_line: u32,
    origin: Place,
}

/// Boxed: an error is rare and a diagnostic is large.
type Step<T> = Result<T, Box<Diagnostic>>;

impl<'a> Reader<'a> {
    fn document(mut self) -> Step<Node> {
        let mut root = None;
        loop {
            let (event, span) = self.next()?;
            match event {
                Event::StreamEnd => break,
                Event::StreamStart | Event::DocumentEnd | Event::Nothing => {}
                Event::DocumentStart(_) if root.is_some() => {
                    return Err(Box::new(
                        Diagnostic::error(&self.place(span), "a second YAML document begins here")
                            .expected("one document"),
                    ));
                }
                Event::DocumentStart(_) => {}
                other => root = Some(self.node(other, span, 0)?),
            }
        }
        Ok(root.unwrap_or(Node { value: Value::Scalar(String::new()), place: self.origin.clone() }))
    }

    fn next(&mut self) -> Step<(Event<'a>, Span)> {
        match self.parser.next_event() {
            Some(Ok(found)) => Ok(found),
            Some(Err(error)) => {
                let (line, column) = (error.marker().line(), error.marker().col());
                let place = self.place_at(line, column, 0);
                let written = self.text.lines().nth(line.saturating_sub(1)).unwrap_or("");
                Err(Box::new(
                    Diagnostic::error(&place, format!("this is not valid YAML: {}", error.info()))
                        .expected(expectation(written)),
                ))
            }
            None => Err(Box::new(Diagnostic::error(&self.origin, "the YAML text ends too early"))),
        }
    }

    fn node(&mut self, event: Event<'a>, span: Span, depth: usize) -> Step<Node> {
        let place = self.place(span);
        if depth > DEEPEST {
            return Err(Box::new(
                Diagnostic::error(&place, "maps and lists are nested too deep")
                    .expected(format!("at most {DEEPEST} levels")),
            ));
        }
        let refused = |what: &str| {
            Err(Box::new(
                Diagnostic::error(&place, format!("{what} is not allowed here"))
                    .expected("the value itself, written out"),
            ))
        };
        let value = match event {
            Event::Alias(_) => return refused("an alias (`*name`)"),
            Event::Scalar(_, _, anchor, _)
            | Event::SequenceStart(anchor, _)
            | Event::MappingStart(anchor, _)
                if anchor != 0 =>
            {
                return refused("an anchor (`&name`)");
            }
            Event::Scalar(_, _, _, Some(_))
            | Event::SequenceStart(_, Some(_))
            | Event::MappingStart(_, Some(_)) => return refused("a tag (`!name`)"),
            Event::Scalar(text, ..) => Value::Scalar(text.into_owned()),
            Event::SequenceStart(..) => {
                let mut items = Vec::new();
                loop {
                    match self.next()? {
                        (Event::SequenceEnd, _) => break Value::List(items),
                        (event, span) => items.push(self.node(event, span, depth + 1)?),
                    }
                }
            }
            Event::MappingStart(..) => {
                let mut entries = Vec::new();
                loop {
                    match self.next()? {
                        (Event::MappingEnd, _) => break Value::Map(entries),
                        (event, span) => {
                            let key = self.node(event, span, depth + 1)?;
                            let name = key.scalar("a key, which is a single name").map_err(Box::new)?;
                            let key = Key { name: name.to_owned(), place: key.place.clone() };
                            let (event, span) = self.next()?;
                            entries.push((key, self.node(event, span, depth + 1)?));
                        }
                    }
                }
            }
            _ => return Err(Box::new(Diagnostic::error(&place, "the YAML text ends too early"))),
        };
        Ok(Node { value, place })
    }

    fn place(&self, span: Span) -> Place {
        let length = if span.start.line() == span.end.line() {
            span.end.col().saturating_sub(span.start.col())
        } else {
            0
        };
        self.place_at(span.start.line(), span.start.col(), length)
    }

    fn place_at(&self, line: usize, column: usize, length: usize) -> Place {
        let line = self.first_line + (line.max(1) - 1) as u32;
        Place::new(self.file, line, column as u32 + 1, length as u32)
    }
}

/// What to tell an author about a line that YAML does not take.
fn expectation(line: &str) -> &'static str {
    if line.contains('\t') {
        "spaces: YAML takes no tabs for indentation"
    } else if line.contains('{') || line.contains('[') {
        "quotes round a value that holds a comma, a bracket or `: `"
    } else if line.matches(": ").count() > 1 {
        "one `key: value` a line; put quotes round a value that holds `: `"
    } else {
        "`key: value`, with the keys of one map below each other"
    }
}

/// A plain value silently ends at ` #`; so comments may only have lines of their own.
fn refuse_trailing_comments(text: &str, file: &Arc<str>, first_line: u32) -> Diagnostics {
    let mut diagnostics = Diagnostics::default();
    for (number, line) in text.lines().enumerate() {
        if line.trim_start().starts_with('#') {
            continue;
        }
        let mut quote = None;
        let mut before = ' ';
        for (column, c) in line.chars().enumerate() {
            match quote {
                Some(mark) if c == mark => quote = None,
                Some(_) => {}
                None if (c == '"' || c == '\'') && !before.is_alphanumeric() => quote = Some(c),
                None if c == '#' && before.is_whitespace() => {
                    let place = Place::new(file, first_line + number as u32, column as u32 + 1, 1);
                    diagnostics.push(
                        Diagnostic::error(&place, "everything from ` #` on would be ignored silently")
                            .expected(
                                "quotes round a value that holds ` #`, or the comment on a line of its own",
                            ),
                    );
                    break;
                }
                None => {}
            }
            before = c;
        }
    }
    diagnostics
}

fn refuse_duplicates(node: &Node, diagnostics: &mut Diagnostics) {
    match &node.value {
        Value::Scalar(_) => {}
        Value::List(items) => items.iter().for_each(|item| refuse_duplicates(item, diagnostics)),
        Value::Map(entries) => {
            let mut seen = std::collections::BTreeMap::new();
            for (key, value) in entries {
                if let Some(first) = seen.insert(key.name.as_str(), key.place.line) {
                    diagnostics.push(
                        Diagnostic::error(&key.place, format!("`{}` stands twice", key.name))
                            .expected(format!("each key once; the first is on line {first}")),
                    );
                }
                refuse_duplicates(value, diagnostics);
            }
        }
    }
}
