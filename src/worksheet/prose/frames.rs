//! What is open while Markdown is walked through: blocks, lists, tables, lines of text.

use std::ops::Range;

use crate::markup::Align;
use crate::worksheet::{Piece, Span};

/// Text of a line as it is collected: spans, and images that will stand on their own.
pub(super) enum Bit {
    Span(Span),
    Image(Piece),
}

pub(super) enum Frame {
    Blocks { quote: bool, pieces: Vec<Piece>, loose: Vec<Bit> },
    List { ordered: Option<u64>, items: Vec<Vec<Piece>> },
    Table { align: Vec<Align>, head: Vec<Vec<Span>>, rows: Vec<Vec<Vec<Span>>>, row: Vec<Vec<Span>> },
    Bits { what: Inner, bits: Vec<Bit> },
    Image { path: Option<String>, caption: String, alt: String, range: Range<usize> },
}

pub(super) enum Inner {
    Paragraph,
    Heading(u8),
    Cell,
    Emphasis,
    Strong,
    Struck,
    /// A link, or only its words where its target was refused.
    Link(Option<String>),
}

pub(super) fn push_piece(stack: &mut [Frame], piece: Piece) {
    for frame in stack.iter_mut().rev() {
        if let Frame::Blocks { pieces, loose, .. } = frame {
            flush(pieces, loose);
            pieces.push(piece);
            return;
        }
    }
}

pub(super) fn push_bit(stack: &mut [Frame], bit: Bit) {
    let bits = match stack.last_mut() {
        Some(Frame::Bits { bits, .. }) => bits,
        Some(Frame::Blocks { loose, .. }) => loose,
        _ => return,
    };
    // Neighbouring texts become one.
    match (bits.last_mut(), bit) {
        (_, Bit::Span(Span::Text(new))) if new.is_empty() => {}
        (Some(Bit::Span(Span::Text(text))), Bit::Span(Span::Text(new))) => text.push_str(&new),
        (_, bit) => bits.push(bit),
    }
}

/// Turns collected bits into a paragraph, with images between as pieces of their own.
pub(super) fn flush(pieces: &mut Vec<Piece>, bits: &mut Vec<Bit>) {
    let mut content = Vec::new();
    let close = |content: &mut Vec<Span>, pieces: &mut Vec<Piece>| {
        let blank = content.iter().all(|span| match span {
            Span::Text(text) => text.trim().is_empty(),
            Span::Break => true,
            _ => false,
        });
        let content = std::mem::take(content);
        if !blank {
            pieces.push(Piece::Paragraph { content });
        }
    };
    for bit in bits.drain(..) {
        match bit {
            Bit::Span(span) => content.push(span),
            Bit::Image(image) => {
                close(&mut content, pieces);
                pieces.push(image);
            }
        }
    }
    close(&mut content, pieces);
}
