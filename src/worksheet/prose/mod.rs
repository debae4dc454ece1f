//! Markdown -> pieces of the body: prose with its recalls, images and listings, and where our own blocks stand.

mod frames;
mod targets;

use std::collections::{BTreeMap, BTreeSet};
use std::ops::Range;

use pulldown_cmark::{Alignment, CodeBlockKind, CowStr, Event, Options, Parser, Tag, TagEnd};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::markup::Align;
use crate::source::Place;

use self::frames::{Bit, Frame, Inner, flush, push_bit, push_piece};
use super::fence::{self, RawBlock};
use super::page::{MARK, Page};
use super::{Piece, Recall, Span, Spot, enough, math, recall};

/// The deepest nesting of lists, quotes, emphasis and so on.
const DEEPEST: usize = 24;
/// The most recalls of one worksheet.
const MOST_RECALLS: usize = 5_000;
const FOOTNOTE: &str = "`[^1]` in the text and `[^1]: what it says` on a line of its own";

/// What the body holds.
#[derive(Default)]
pub(super) struct Body {
    pub pieces: Vec<Piece>,
    pub blocks: Vec<RawBlock>,
    pub recalls: Vec<Recall>,
    /// Conditions that recalls name.
    pub conditions: Vec<Spot<String>>,
    pub images: Vec<(String, Place)>,
}

type Events<'a> = [(Event<'a>, Range<usize>)];

/// Reads the body, which begins at byte `from` of the page.
pub(super) fn read(page: &Page, from: usize, diagnostics: &mut Diagnostics) -> Body {
    let (masked, recalls) = recall::mask(page.text, from);
    let options = Options::ENABLE_TABLES
        | Options::ENABLE_FOOTNOTES
        | Options::ENABLE_STRIKETHROUGH
        | Options::ENABLE_MATH;
    let events: Vec<(Event, Range<usize>)> = Parser::new_ext(masked.get(from..).unwrap_or(""), options)
        .into_offset_iter()
        .map(|(event, range)| (event, range.start + from..range.end + from))
        .collect();
    let mut walk = Walk {
        page,
        masked: &masked,
        recalls,
        definitions: definitions(&events),
        referred: events
            .iter()
            .filter_map(|(event, _)| match event {
                Event::FootnoteReference(label) => Some(label.to_string()),
                _ => None,
            })
            .collect(),
        cited: BTreeSet::new(),
        numbers: BTreeMap::new(),
        seen: BTreeSet::new(),
        body: Body::default(),
        diagnostics,
    };
    let pieces = walk.pieces(&events, &events, false);
    walk.finish();
    let mut body = walk.body;
    body.pieces = pieces;
    body
}

/// Footnote labels and the range of events between the start and the end of each definition.
fn definitions(events: &Events) -> BTreeMap<String, Range<usize>> {
    let mut found = BTreeMap::new();
    let mut open = Vec::new();
    for (index, (event, _)) in events.iter().enumerate() {
        match event {
            Event::Start(Tag::FootnoteDefinition(label)) => open.push((label.to_string(), index + 1)),
            Event::End(TagEnd::FootnoteDefinition) => {
                if let Some((label, start)) = open.pop() {
                    found.entry(label).or_insert(start..index);
                }
            }
            _ => {}
        }
    }
    found
}

struct Walk<'p, 'd> {
    page: &'p Page<'p>,
    masked: &'p str,
    /// Recalls of the text by byte offset.
    recalls: BTreeMap<usize, Range<usize>>,
    definitions: BTreeMap<String, Range<usize>>,
    /// Labels that some reference names.
    referred: BTreeSet<String>,
    /// Labels whose footnote was set.
    cited: BTreeSet<String>,
    /// Index of each recall that was read, by byte offset.
    numbers: BTreeMap<usize, Option<usize>>,
    /// Offsets of marks that were met anywhere.
    seen: BTreeSet<usize>,
    body: Body,
    diagnostics: &'d mut Diagnostics,
}

impl Walk<'_, '_> {
    /// The pieces of `events`, a slice of `all`.
    fn pieces(&mut self, events: &Events, all: &Events, inside_footnote: bool) -> Vec<Piece> {
        let mut stack = vec![Frame::Blocks { quote: false, pieces: Vec::new(), loose: Vec::new() }];
        // How many tags are open that are left out.
        let mut left_out = 0_usize;
        let mut index = 0;
        while let Some((event, range)) = events.get(index).filter(|_| !enough(self.diagnostics)) {
            index += 1;
            match event {
                Event::Start(_) if left_out > 0 => left_out += 1,
                Event::End(_) if left_out > 0 => left_out -= 1,
                _ if left_out > 0 => {}
                Event::Start(_) if stack.len() > DEEPEST => {
                    self.error(range.clone(), "lists, quotes and emphasis are nested too deep")
                        .expected(format!("at most {DEEPEST} levels"))
                        .push(self.diagnostics);
                    self.pass_over(range.clone());
                    left_out = 1;
                }
                Event::Start(Tag::CodeBlock(kind)) => {
                    let mut end = index;
                    let mut text = String::new();
                    while let Some((event, range)) = events.get(end) {
                        end += 1;
                        match event {
                            Event::Text(part) => text.push_str(&self.restored(part, range.clone())),
                            Event::End(TagEnd::CodeBlock) => break,
                            _ => {}
                        }
                    }
                    index = end;
                    let outermost = stack.len() == 1 && !inside_footnote;
                    let piece = self.code_block(kind, text, range.clone(), outermost);
                    push_piece(&mut stack, piece);
                }
                Event::Start(Tag::HtmlBlock) => {
                    self.html(range.clone());
                    left_out = 1;
                }
                Event::Start(Tag::FootnoteDefinition(label)) => {
                    if !self.referred.contains(label.as_ref()) {
                        let message = format!("the footnote `{label}` is never referred to");
                        self.diagnostics.push(
                            Diagnostic::error(&self.page.place(range.clone()), message).expected(FOOTNOTE),
                        );
                        self.pass_over(range.clone());
                    }
                    left_out = 1;
                }
                Event::Start(tag) => self.start(tag, range.clone(), &mut stack),
                Event::End(_) => self.end(&mut stack),
                Event::Text(text) => self.text(text, range.clone(), &mut stack),
                Event::Code(text) => {
                    let text = self.restored(text, range.clone());
                    self.bit(&mut stack, Span::Code(text));
                }
                Event::InlineMath(text) | Event::DisplayMath(text) => {
                    let dollars = if matches!(event, Event::InlineMath(_)) { 1 } else { 2 };
                    if let Some(span) = self.formula(text, range.clone(), dollars) {
                        self.bit(&mut stack, span);
                    }
                }
                Event::Html(_) | Event::InlineHtml(_) => self.html(range.clone()),
                Event::FootnoteReference(label) => {
                    if let Some(span) = self.footnote(label, range.clone(), all, inside_footnote) {
                        self.bit(&mut stack, span);
                    }
                }
                Event::SoftBreak => self.bit(&mut stack, Span::Text(" ".into())),
                Event::HardBreak => self.bit(&mut stack, Span::Break),
                Event::Rule => push_piece(&mut stack, Piece::Rule),
                Event::TaskListMarker(_) => {}
            }
        }
        while stack.len() > 1 {
            self.end(&mut stack);
        }
        match stack.pop() {
            Some(Frame::Blocks { mut pieces, mut loose, .. }) => {
                flush(&mut pieces, &mut loose);
                pieces
            }
            _ => Vec::new(),
        }
    }

    fn start(&mut self, tag: &Tag, range: Range<usize>, stack: &mut Vec<Frame>) {
        let bits = |what| Frame::Bits { what, bits: Vec::new() };
        let blocks = |quote| Frame::Blocks { quote, pieces: Vec::new(), loose: Vec::new() };
        stack.push(match tag {
            Tag::Paragraph => bits(Inner::Paragraph),
            Tag::Heading { level, .. } => bits(Inner::Heading(*level as u8)),
            Tag::BlockQuote(_) => blocks(true),
            Tag::List(ordered) => Frame::List { ordered: *ordered, items: Vec::new() },
            Tag::Table(align) => Frame::Table {
                align: align.iter().map(alignment).collect(),
                head: Vec::new(),
                rows: Vec::new(),
                row: Vec::new(),
            },
            Tag::TableCell => bits(Inner::Cell),
            Tag::Emphasis => bits(Inner::Emphasis),
            Tag::Strong => bits(Inner::Strong),
            Tag::Strikethrough => bits(Inner::Struck),
            Tag::Link { dest_url, title, .. } => bits(Inner::Link(self.target(dest_url, title, range))),
            Tag::Image { dest_url, title, .. } => Frame::Image {
                path: self.image_path(dest_url, title, range.clone()),
                caption: title.to_string(),
                alt: String::new(),
                range,
            },
            Tag::Item => blocks(false),
            // A row is collected in a frame of its own and then joins its table.
            Tag::TableHead | Tag::TableRow => {
                Frame::Table { align: Vec::new(), head: Vec::new(), rows: Vec::new(), row: Vec::new() }
            }
            // Nothing else is switched on.
            _ => bits(Inner::Emphasis),
        });
    }

    fn end(&mut self, stack: &mut Vec<Frame>) {
        if stack.len() < 2 {
            return;
        }
        match stack.pop() {
            Some(Frame::Blocks { quote, mut pieces, mut loose }) => {
                flush(&mut pieces, &mut loose);
                match stack.last_mut() {
                    Some(Frame::List { items, .. }) if !quote => items.push(pieces),
                    _ => push_piece(stack, Piece::Quote { content: pieces }),
                }
            }
            Some(Frame::List { ordered, items }) => push_piece(stack, Piece::List { ordered, items }),
            Some(Frame::Table { align, head, rows, row }) => match stack.last_mut() {
                Some(Frame::Table { head, rows, .. }) => {
                    if head.is_empty() && rows.is_empty() {
                        *head = row;
                    } else {
                        rows.push(row);
                    }
                }
                _ => push_piece(stack, Piece::Table { align, head, rows }),
            },
            Some(Frame::Bits { what, bits }) => self.end_bits(what, bits, stack),
            Some(Frame::Image { path, caption, alt, range }) => {
                if let Some(image) = self.image(path, caption, &alt, range) {
                    self.place_image(image, stack);
                }
            }
            None => {}
        }
    }

    fn end_bits(&mut self, what: Inner, bits: Vec<Bit>, stack: &mut [Frame]) {
        if let Inner::Paragraph = what {
            let mut pieces = Vec::new();
            let mut bits = bits;
            flush(&mut pieces, &mut bits);
            pieces.into_iter().for_each(|piece| push_piece(stack, piece));
            return;
        }
        let content: Vec<Span> = bits
            .into_iter()
            .filter_map(|bit| match bit {
                Bit::Span(span) => Some(span),
                Bit::Image(_) => None,
            })
            .collect();
        let span = match what {
            Inner::Heading(level) => return push_piece(stack, Piece::Heading { level, content }),
            Inner::Cell => {
                if let Some(Frame::Table { row, .. }) = stack.last_mut() {
                    row.push(content);
                }
                return;
            }
            Inner::Link(Some(target)) => Span::Link { target, content },
            Inner::Link(None) => {
                return content.into_iter().for_each(|span| push_bit(stack, Bit::Span(span)));
            }
            Inner::Strong => Span::Strong(content),
            Inner::Struck => Span::Struck(content),
            Inner::Emphasis | Inner::Paragraph => Span::Emphasis(content),
        };
        push_bit(stack, Bit::Span(span));
    }

    fn bit(&mut self, stack: &mut [Frame], span: Span) {
        if let Some(Frame::Image { alt, .. }) =
            stack.iter_mut().rev().find(|f| matches!(f, Frame::Image { .. }))
        {
            match span {
                Span::Text(text) | Span::Code(text) => alt.push_str(&text),
                Span::Formula { spoken, .. } => alt.push_str(&spoken),
                _ => {}
            }
            return;
        }
        push_bit(stack, Bit::Span(span));
    }

    fn text(&mut self, text: &str, range: Range<usize>, stack: &mut [Frame]) {
        self.look_for_braces(text, range.clone());
        let in_image = stack.iter().any(|frame| matches!(frame, Frame::Image { .. }));
        let marks = self.marks(range.clone());
        if in_image && !marks.is_empty() {
            return self.misplaced(range, "the alternative text of an image");
        }
        let mut rest = text;
        for offset in marks {
            let Some(at) = rest.find(MARK).filter(|_| !enough(self.diagnostics)) else { break };
            let length = self.recalls.get(&offset).map_or(MARK.len_utf8(), |range| range.len());
            self.bit(stack, Span::Text(rest[..at].to_owned()));
            if let Some(number) = self.recall(offset) {
                self.bit(stack, Span::Recall(number));
            }
            rest = rest.get(at + length..).unwrap_or("");
        }
        if !rest.is_empty() {
            self.bit(stack, Span::Text(rest.to_owned()));
        }
    }

    fn look_for_braces(&mut self, text: &str, range: Range<usize>) {
        for (brace, message) in [
            ("{{", "this recall is not closed on its line"),
            ("}}", "this closes a recall that was never opened on its line"),
            ("{%", "a worksheet takes no statements of the template engine"),
        ] {
            if let Some(at) = text.find(brace) {
                let start = range.start + at;
                // An escape takes the backslash out of the text.
                if self.page.slice(start.saturating_sub(1)..start) == "\\" {
                    continue;
                }
                self.error(start..start + 2, message)
                    .expected("`{{ name }}` on one line, or `\\{` for the braces themselves")
                    .push(self.diagnostics);
            }
        }
        // A reference to a footnote that does not exist is left as text by the parser.
        let source = self.page.slice(range.start..self.page.line_range(self.page.line(range.start)).end);
        let label = source.strip_prefix("[^").and_then(|rest| rest.split_once(']')).map(|(label, _)| label);
        if let Some(label) = label.filter(|label| !label.is_empty() && !label.contains([' ', '['])) {
            let names: Vec<&str> = self.definitions.keys().map(String::as_str).collect();
            let end = range.start + label.len() + 3;
            let diagnostic = self.error(range.start..end, &format!("there is no footnote `{label}`"));
            diagnostic.expected(FOOTNOTE).nearest(label, names).push(self.diagnostics);
        }
    }

    /// Byte offsets of the recalls within a range of the text.
    fn marks(&mut self, range: Range<usize>) -> Vec<usize> {
        let marks: Vec<usize> = self.recalls.range(range).map(|(offset, _)| *offset).collect();
        self.seen.extend(&marks);
        marks
    }

    /// Counts recalls as met where something about their surroundings has been reported already.
    fn pass_over(&mut self, range: Range<usize>) {
        self.marks(range);
    }

    fn recall(&mut self, offset: usize) -> Option<usize> {
        if let Some(number) = self.numbers.get(&offset) {
            return *number;
        }
        let range = self.recalls.get(&offset)?.clone();
        let place = self.page.place(range.clone());
        let number = match recall::scan(self.page.slice(range), &place) {
            Err(found) => {
                self.diagnostics.extend(found);
                None
            }
            Ok(_) if self.body.recalls.len() >= MOST_RECALLS => {
                self.diagnostics.push(
                    Diagnostic::error(&place, "the worksheet has too many recalls")
                        .expected(format!("at most {MOST_RECALLS}")),
                );
                None
            }
            Ok(scanned) => {
                self.body.recalls.push(scanned.recall);
                self.body.conditions.extend(scanned.conditions);
                Some(self.body.recalls.len() - 1)
            }
        };
        self.numbers.insert(offset, number);
        number
    }

    fn misplaced(&mut self, range: Range<usize>, where_: &str) {
        for offset in self.marks(range) {
            let end = self.recalls.get(&offset).map_or(offset, |range| range.end);
            self.error(offset..end, &format!("a recall stands in {where_}"))
                .expected("recalls in running text, headings, tables and footnotes only")
                .push(self.diagnostics);
        }
    }

    /// Literal text (code): recalls are what they look like.
    fn restored(&mut self, text: &str, range: Range<usize>) -> String {
        let mut out = String::with_capacity(text.len());
        let mut rest = text;
        for offset in self.marks(range) {
            let (Some(at), Some(range)) = (rest.find(MARK), self.recalls.get(&offset)) else { break };
            out.push_str(&rest[..at]);
            out.push_str(self.page.slice(range.clone()));
            rest = rest.get(at + range.len()..).unwrap_or("");
        }
        out.push_str(rest);
        out
    }

    fn code_block(
        &mut self,
        kind: &CodeBlockKind,
        text: String,
        range: Range<usize>,
        outermost: bool,
    ) -> Piece {
        let CodeBlockKind::Fenced(info) = kind else { return Piece::Listing { text } };
        self.pass_over(range.clone());
        match fence::read(self.page, info, range, outermost, self.diagnostics) {
            Some(mut block) => {
                block.index = self.body.blocks.iter().filter(|other| other.word == block.word).count();
                let piece = Piece::Placed { word: block.word.to_owned(), index: block.index };
                self.body.blocks.push(block);
                piece
            }
            None => Piece::Listing { text },
        }
    }

    fn html(&mut self, range: Range<usize>) {
        self.pass_over(range.clone());
        self.error(range, "HTML is not read here: a worksheet is data")
            .expected("Markdown, or a backslash before `<` for the sign itself")
            .push(self.diagnostics);
    }

    fn formula(&mut self, text: &CowStr, range: Range<usize>, dollars: usize) -> Option<Span> {
        if text.contains(MARK) {
            self.misplaced(range, "a formula");
            return None;
        }
        let start = range.start + dollars;
        match math::read(text) {
            Ok((math, spoken)) => Some(Span::Formula { math, spoken }),
            Err(found) => {
                let place = self.page.place(start + found.range.start..start + found.range.end);
                let mut diagnostic = Diagnostic::error(&place, found.message).expected(found.expected);
                diagnostic.nearest = found.nearest;
                self.diagnostics.push(diagnostic);
                None
            }
        }
    }

    fn footnote(
        &mut self,
        label: &str,
        range: Range<usize>,
        all: &Events,
        inside_footnote: bool,
    ) -> Option<Span> {
        let definition = self.definitions.get(label)?.clone();
        if inside_footnote {
            self.error(range, "a footnote refers to a footnote")
                .expected("the text of the other footnote itself")
                .push(self.diagnostics);
            return None;
        }
        if !self.cited.insert(label.to_owned()) {
            self.error(range, &format!("the footnote `{label}` is referred to twice"))
                .expected(
                    "one reference to each footnote: it is set at the foot of the page of its reference",
                )
                .push(self.diagnostics);
            return None;
        }
        Some(Span::Footnote(self.pieces(all.get(definition)?, all, true)))
    }

    /// Reports recalls that stand where nothing is printed.
    fn finish(&mut self) {
        let lost: Vec<Range<usize>> = self
            .recalls
            .iter()
            .filter(|(offset, _)| !self.seen.contains(offset))
            .map(|(_, range)| range.clone())
            .collect();
        for range in lost {
            if enough(self.diagnostics) {
                return;
            }
            self.error(range, "this recall stands where nothing is printed")
                .expected("recalls in running text, headings, tables and footnotes only")
                .push(self.diagnostics);
        }
    }

    fn error(&self, range: Range<usize>, message: &str) -> Draft {
        Draft(Diagnostic::error(&self.page.place(range), message))
    }
}

/// A diagnostic on its way into the collection.
struct Draft(Diagnostic);

impl Draft {
    fn expected(self, what: impl Into<String>) -> Draft {
        Draft(self.0.expected(what))
    }

    fn nearest(self, word: &str, candidates: Vec<&str>) -> Draft {
        Draft(self.0.nearest(word, candidates))
    }

    fn push(self, diagnostics: &mut Diagnostics) {
        diagnostics.push(self.0);
    }
}

fn alignment(alignment: &Alignment) -> Align {
    match alignment {
        Alignment::Center => Align::Center,
        Alignment::Right => Align::Right,
        Alignment::None | Alignment::Left => Align::Left,
    }
}
