//! Links and images: where they lead, and what is said of them.

use std::ops::Range;

use crate::diagnostic::Diagnostic;
use crate::worksheet::page::MARK;
use crate::worksheet::{Piece, Span};

use super::Walk;
use super::frames::{Bit, Frame, Inner, push_bit};

impl Walk<'_, '_> {
    pub(super) fn target(&mut self, target: &str, title: &str, range: Range<usize>) -> Option<String> {
        if target.contains(MARK) || title.contains(MARK) {
            let marked = self.after_words(&range);
            self.misplaced(marked, "the address of a link");
            return None;
        }
        let scheme = target.split_once(':').map(|(scheme, _)| scheme.to_ascii_lowercase());
        if matches!(scheme.as_deref(), Some("http" | "https" | "mailto")) {
            return Some(target.to_owned());
        }
        // An address of mail that stands in angle brackets has no scheme.
        if target.contains('@') && !target.contains([':', '/']) {
            return Some(format!("mailto:{target}"));
        }
        self.error(range, &format!("a report cannot lead to `{target}`"))
            .expected("an address that begins with https:, http: or mailto:")
            .push(self.diagnostics);
        None
    }

    pub(super) fn image_path(&mut self, target: &str, title: &str, range: Range<usize>) -> Option<String> {
        if target.contains(MARK) || title.contains(MARK) {
            let marked = self.after_words(&range);
            self.misplaced(marked, "the path or the caption of an image");
            return None;
        }
        match inside_notebook(self.page.file, target) {
            Some(path) => Some(path),
            None => {
                self.error(range, &format!("the image `{target}` does not lie inside the notebook"))
                    .expected("a path relative to the worksheet, such as `images/board.png`")
                    .push(self.diagnostics);
                None
            }
        }
    }

    /// The part of a link or image after its words.
    fn after_words(&self, range: &Range<usize>) -> Range<usize> {
        let text = self.masked.get(range.clone()).unwrap_or("");
        range.start + text.rfind("](").map_or(0, |at| at + 2)..range.end
    }

    pub(super) fn image(
        &mut self,
        path: Option<String>,
        caption: String,
        alt: &str,
        range: Range<usize>,
    ) -> Option<Piece> {
        let path = path?;
        let place = self.page.place(range.clone());
        if alt.trim().is_empty() {
            self.error(range, "the image has no alternative text")
                .expected("what the image shows, in words: `![the board seen from above](board.png)`")
                .push(self.diagnostics);
            return None;
        }
        self.body.images.push((path.clone(), place.clone()));
        let caption = if caption.is_empty() { Vec::new() } else { vec![Span::Text(caption)] };
        Some(Piece::Image { path, alt: alt.trim().to_owned(), caption, place })
    }

    pub(super) fn place_image(&mut self, image: Piece, stack: &mut [Frame]) {
        match stack.last() {
            Some(Frame::Bits { what: Inner::Paragraph, .. } | Frame::Blocks { .. }) => {
                push_bit(stack, Bit::Image(image))
            }
            _ => {
                if let Piece::Image { place, .. } = image {
                    self.diagnostics.push(
                        Diagnostic::error(
                            &place,
                            "an image cannot stand in a heading, table, link or emphasis",
                        )
                        .expected("the image in a paragraph of its own"),
                    );
                }
            }
        }
    }
}

/// A path relative to the folder of `worksheet` as a path inside the notebook; `None` where it leads out of it.
fn inside_notebook(worksheet: &str, target: &str) -> Option<String> {
    if target.is_empty() || target.starts_with('/') || target.contains(['\\', ':', '\0']) {
        return None;
    }
    let mut parts: Vec<&str> = worksheet.split('/').collect();
    parts.pop();
    for part in target.split('/') {
        match part {
            "" | "." => {}
            ".." => {
                parts.pop()?;
            }
            name => parts.push(name),
        }
    }
    (!parts.is_empty()).then(|| parts.join("/"))
}
