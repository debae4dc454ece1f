//! The body as read -> the flow that is typeset: recalls filled in.

use crate::markup::{Flow, Inline};

use super::{Piece, Span};

/// Fills recalls in: `recalled` gives what stands for `Worksheet::recalls[index]`. Depth is bounded by the reader.
pub fn flow(body: &[Piece], recalled: &dyn Fn(usize) -> Vec<Inline>) -> Vec<Flow> {
    body.iter().map(|piece| one(piece, recalled)).collect()
}

fn one(piece: &Piece, recalled: &dyn Fn(usize) -> Vec<Inline>) -> Flow {
    let line = |content: &[Span]| inlines(content, recalled);
    match piece {
        Piece::Heading { level, content } => Flow::Heading { level: *level, content: line(content) },
        Piece::Paragraph { content } => Flow::Paragraph { content: line(content) },
        Piece::List { ordered, items } => {
            Flow::List { ordered: *ordered, items: items.iter().map(|item| flow(item, recalled)).collect() }
        }
        Piece::Quote { content } => Flow::Quote { content: flow(content, recalled) },
        Piece::Listing { text } => Flow::Listing { text: text.clone() },
        Piece::Rule => Flow::Rule,
        Piece::Table { align, head, rows } => Flow::Table {
            align: align.clone(),
            head: head.iter().map(|cell| line(cell)).collect(),
            rows: rows.iter().map(|row| row.iter().map(|cell| line(cell)).collect()).collect(),
        },
        Piece::Image { path, alt, caption, .. } => {
            Flow::Image { path: path.clone(), alt: alt.clone(), caption: line(caption) }
        }
        Piece::Placed { word, index } => Flow::Placed { word: word.clone(), index: *index },
    }
}

fn inlines(content: &[Span], recalled: &dyn Fn(usize) -> Vec<Inline>) -> Vec<Inline> {
    let mut out = Vec::with_capacity(content.len());
    for span in content {
        let inner = |content: &[Span]| inlines(content, recalled);
        out.push(match span {
            Span::Recall(index) => {
                out.extend(recalled(*index));
                continue;
            }
            Span::Text(text) => Inline::Text { text: text.clone() },
            Span::Emphasis(content) => Inline::Emphasis { content: inner(content) },
            Span::Strong(content) => Inline::Strong { content: inner(content) },
            Span::Struck(content) => Inline::Struck { content: inner(content) },
            Span::Code(text) => Inline::Code { text: text.clone() },
            Span::Formula { math, spoken } => Inline::Formula { math: math.clone(), spoken: spoken.clone() },
            Span::Link { target, content } => {
                Inline::Link { target: target.clone(), content: inner(content) }
            }
            Span::Footnote(pieces) => Inline::Footnote { content: flow(pieces, recalled) },
            Span::Break => Inline::Break,
        });
    }
    out
}
