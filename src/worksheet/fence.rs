//! Fenced blocks: which are ours, and the byte range of their content.

use std::ops::Range;

use crate::diagnostic::{Diagnostic, Diagnostics, nearest};
use crate::source::Place;

use super::page::Page;

/// Info words of our blocks.
pub const WORDS: [&str; 6] = ["basis", "conditions", "circuit", "derivation", "acceptance", "figure"];
/// Words of blocks that a later version will read.
const LATER: [&str; 2] = ["selection", "bench"];

/// A fenced block of ours as it stands in the page.
pub(super) struct RawBlock {
    pub word: &'static str,
    /// Index among blocks of that word.
    pub index: usize,
    /// Byte range of the lines between the fences.
    pub content: Range<usize>,
    pub place: Place,
}

/// The block that begins at `range`, if it is one of ours and stands as ours must; `None` for a listing.
/// `outermost` says that it stands in no list, quote or footnote.
pub(super) fn read(
    page: &Page,
    info: &str,
    range: Range<usize>,
    outermost: bool,
    diagnostics: &mut Diagnostics,
) -> Option<RawBlock> {
    let first = page.line(range.start);
    let opening = page.line_range(first);
    let fence = page.slice(range.start..opening.end);
    let marks = fence.chars().next().unwrap_or('`');
    let length = fence.chars().take_while(|c| *c == marks).count();
    let last = page.line(range.end.saturating_sub(1).max(range.start));
    let closing = page.slice(page.line_range(last)).trim_start_matches([' ', '>', '\t']).trim_end();
    let closed = last > first && closing.len() >= length && closing.chars().all(|c| c == marks);
    let place = page.place(range.start..opening.end);
    if !closed {
        let message = "this block is not closed, and swallows the rest of the worksheet";
        diagnostics.push(
            Diagnostic::error(&place, message)
                .expected(format!("a line `{}` below its last line", &fence[..length])),
        );
    }
    let word = info.split_whitespace().next().unwrap_or("");
    let word_start = opening.start + page.slice(opening.clone()).find(word).unwrap_or(0);
    let word_place = page.place(word_start..word_start + word.len());
    let Some(ours) = WORDS.into_iter().find(|ours| *ours == word) else {
        refuse_near(word, &word_place, diagnostics);
        return None;
    };
    if !closed {
        return None;
    }
    if word != info.trim() {
        let rest = info.trim().strip_prefix(word).unwrap_or("").trim();
        diagnostics.push(
            Diagnostic::error(&word_place, format!("`{rest}` after the word `{ours}` means nothing"))
                .expected(format!("`{ours}` alone")),
        );
    }
    if !outermost || range.start != opening.start {
        diagnostics.push(
            Diagnostic::error(
                &place,
                format!("the `{ours}` block stands inside something else or is indented"),
            )
            .expected("the fence at the start of its line, in no list, quote or footnote"),
        );
        return None;
    }
    let content = page.line_range(first + 1).start..page.line_range(last).start;
    Some(RawBlock { word: ours, index: 0, content, place })
}

fn refuse_near(word: &str, place: &Place, diagnostics: &mut Diagnostics) {
    if LATER.contains(&word) {
        diagnostics.push(
            Diagnostic::error(place, format!("`{word}` blocks are not available in this version"))
                .expected(format!("one of {}", WORDS.join(", "))),
        );
        return;
    }
    let candidates = WORDS.into_iter().chain(LATER);
    if !word.is_empty() && nearest(word, candidates.clone()).is_some() {
        diagnostics.push(
            Diagnostic::error(place, format!("unknown block `{word}`"))
                .expected(format!("one of {}, or a word of its own for a listing", WORDS.join(", ")))
                .nearest(word, candidates),
        );
    }
}
