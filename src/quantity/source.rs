//! Where a number comes from, read from what the author wrote in brackets.

use super::{Origin, Source};

/// Words that begin a source, and what they say of it.
const BEGINNINGS: [(&str, Origin); 22] = [
    ("data sheet", Origin::DataSheet),
    ("datasheet", Origin::DataSheet),
    ("measured", Origin::Measurement),
    ("measurement", Origin::Measurement),
    ("bench", Origin::Measurement),
    ("standard", Origin::Standard),
    ("iec ", Origin::Standard),
    ("iso ", Origin::Standard),
    ("en ", Origin::Standard),
    ("ieee ", Origin::Standard),
    ("si brochure", Origin::Standard),
    ("specification", Origin::Specification),
    ("clause", Origin::Specification),
    ("drawing", Origin::Specification),
    ("calculated", Origin::Calculation),
    ("calculation", Origin::Calculation),
    ("computed", Origin::Calculation),
    ("assumed", Origin::Assumption),
    ("assumption", Origin::Assumption),
    ("estimate", Origin::Assumption),
    ("memory", Origin::Memory),
    ("from memory", Origin::Memory),
];

/// Reads a source. What begins with none of the known words counts as a data sheet if it speaks of a sheet, as a
/// specification if it names a document by revision, page, clause or number, and as an assumption otherwise: words alone
/// bound nothing.
pub fn parse_source(text: &str) -> Source {
    let text = text.trim();
    let lower = text.to_lowercase();
    let origin = BEGINNINGS.iter().find(|(begin, _)| lower.starts_with(begin)).map(|(_, origin)| *origin);
    let origin = origin.unwrap_or_else(|| {
        if lower.contains("sheet") {
            Origin::DataSheet
        } else if lower.contains("assum") || lower.contains("guess") {
            Origin::Assumption
        } else if lower.chars().any(|c| c.is_ascii_digit()) || lower.contains("specification") {
            Origin::Specification
        } else {
            Origin::Assumption
        }
    });
    Source { origin, text: text.to_owned() }
}
