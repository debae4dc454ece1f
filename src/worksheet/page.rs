//! The text of one worksheet with the places in it.

use std::ops::Range;
use std::sync::Arc;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{File, LARGEST_TEXT, Place};

/// Stands for the first bytes of a recall while the prose is parsed; refused in input.
pub(super) const MARK: char = '\u{e000}';

/// The longest line, in bytes: places are counted along it.
const LONGEST_LINE: usize = 32 << 10;

/// The text of a worksheet; every place is looked up here, in logarithmic time.
pub(super) struct Page<'a> {
    pub file: &'a Arc<str>,
    pub text: &'a str,
    /// Byte offset of the start of each line.
    starts: Vec<usize>,
}

impl<'a> Page<'a> {
    /// # Errors
    /// A file that is too large, is not UTF-8, or holds control or private-use characters.
    pub fn new(source: &'a File) -> Result<Page<'a>, Diagnostics> {
        let origin = Place::new(&source.path, 1, 1, 0);
        if source.bytes.len() as u64 > LARGEST_TEXT {
            return Err(Diagnostic::error(&origin, format!("the file has {} bytes", source.bytes.len()))
                .expected(format!("a worksheet of at most {LARGEST_TEXT} bytes"))
                .into());
        }
        let text = match source.text() {
            Ok(text) => text,
            Err(offset) => return Err(not_text(source, offset).into()),
        };
        let starts =
            std::iter::once(0).chain(text.match_indices('\n').map(|(at, _)| at + 1)).collect::<Vec<_>>();
        let page = Page { file: &source.path, text, starts };
        let mut refused = page.refused_characters();
        if let Some(line) = (1..=page.starts.len()).find(|line| page.line_range(*line).len() > LONGEST_LINE) {
            let place = Place::new(page.file, line as u32, 1, 0);
            let message = format!("the line has {} bytes", page.line_range(line).len());
            refused.push(
                Diagnostic::error(&place, message).expected(format!("at most {LONGEST_LINE} in a line")),
            );
        }
        if refused.has_errors() { Err(refused) } else { Ok(page) }
    }

    /// Line number of a byte offset, counted from 1.
    pub fn line(&self, offset: usize) -> usize {
        self.starts.partition_point(|start| *start <= offset).max(1)
    }

    /// Byte range of a line (counted from 1) without its line end.
    pub fn line_range(&self, line: usize) -> Range<usize> {
        let start = self.starts.get(line.saturating_sub(1)).copied().unwrap_or(self.text.len());
        let end = self.starts.get(line).map_or(self.text.len(), |next| next.saturating_sub(1)).max(start);
        let end = if self.slice(start..end).ends_with('\r') { end - 1 } else { end };
        start..end
    }

    /// The place of a byte range; it covers at most the rest of its first line.
    pub fn place(&self, range: Range<usize>) -> Place {
        let line = self.line(range.start);
        let whole = self.line_range(line);
        let start = range.start.clamp(whole.start, whole.end);
        let end = range.end.clamp(start, whole.end);
        let column = self.slice(whole.start..start).chars().count() + 1;
        let length = self.slice(start..end).chars().count();
        Place::new(self.file, line as u32, column as u32, length as u32)
    }

    /// The text of a byte range; empty where the range does not fall on characters.
    pub fn slice(&self, range: Range<usize>) -> &'a str {
        self.text.get(range).unwrap_or("")
    }

    /// Byte offset of a place of this page.
    pub fn offset(&self, place: &Place) -> usize {
        let line = self.line_range(place.line as usize);
        let skip = (place.column as usize).saturating_sub(1);
        let text = self.slice(line.clone());
        line.start + text.char_indices().nth(skip).map_or(text.len(), |(at, _)| at)
    }

    fn refused_characters(&self) -> Diagnostics {
        const ENOUGH: usize = 20;
        let mut diagnostics = Diagnostics::default();
        let odd = self.text.char_indices().filter(|(offset, c)| {
            (c.is_control() && !matches!(c, '\n' | '\r' | '\t'))
                || matches!(c, '\u{e000}'..='\u{f8ff}' | '\u{2028}' | '\u{2029}' | '\u{202a}'..='\u{202e}')
                || matches!(c, '\u{2066}'..='\u{2069}')
                || (*c == '\u{feff}' && *offset > 0)
        });
        for (offset, c) in odd.take(ENOUGH) {
            let place = self.place(offset..offset + c.len_utf8());
            let message = format!("the character U+{:04X} cannot be set", u32::from(c));
            diagnostics.push(Diagnostic::error(&place, message).expected("plain text in UTF-8"));
        }
        diagnostics
    }
}

fn not_text(source: &File, offset: usize) -> Diagnostic {
    let valid = source.bytes.get(..offset).unwrap_or(&[]);
    let valid = std::str::from_utf8(valid).unwrap_or("");
    let place = Place::of_bytes(&source.path, valid, offset, 0);
    let byte = source.bytes.get(offset).copied().unwrap_or(0);
    Diagnostic::error(&place, format!("the byte 0x{byte:02X} is not UTF-8 text"))
        .expected("a worksheet as plain text in UTF-8")
}
