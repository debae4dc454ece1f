//! Where a number comes from, read from what the author wrote in brackets.

use super::{Origin, Source};

/// Words that begin a source, and what they say of it.
const BEGINNINGS: [(&str, Origin); 24] = [
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
    ("estimated", Origin::Assumption),
    ("data sheets", Origin::DataSheet),
    ("memory", Origin::Memory),
    ("from memory", Origin::Memory),
];

/// Words beside which a document is named.
const IN_A_DOCUMENT: [&str; 14] = [
    "p",
    "pp",
    "page",
    "pages",
    "rev",
    "revision",
    "clause",
    "section",
    "table",
    "figure",
    "edition",
    "issue",
    "drawing",
    "specification",
];

/// A word such as `LB-1` or `3.4`: what documents and their clauses are called, not how many of something there are.
fn is_designation(word: &str) -> bool {
    let has = |wanted: fn(char) -> bool| word.chars().any(wanted);
    has(|c| c.is_ascii_digit()) && has(|c| c.is_ascii_uppercase()) && has(|c| c == '-')
}

/// Reads a source. What begins with none of the known words is from memory or assumed if it says so anywhere, counts as a
/// data sheet if it speaks of a sheet, as a specification if it names a document (`LB-1`) or a page, revision or clause,
/// and as an assumption otherwise: words alone bound nothing.
pub fn parse_source(text: &str) -> Source {
    let text = text.trim();
    let lower = text.to_lowercase();
    let begins = |begin: &str| {
        lower
            .strip_prefix(begin)
            .is_some_and(|rest| begin.ends_with(' ') || !rest.starts_with(|c: char| c.is_alphanumeric()))
    };
    let words: Vec<&str> = lower.split(|c: char| !c.is_alphanumeric()).collect();
    let origin = BEGINNINGS.iter().find(|(begin, _)| begins(begin)).map(|(_, origin)| *origin);
    let origin = origin.unwrap_or_else(|| {
        if words.contains(&"memory") {
            Origin::Memory
        } else if lower.contains("assum") || lower.contains("guess") {
            Origin::Assumption
        } else if words.iter().any(|word| matches!(*word, "sheet" | "sheets" | "datasheet")) {
            Origin::DataSheet
        } else if lower.contains('§')
            || words.iter().any(|word| IN_A_DOCUMENT.contains(word))
            || text.split_whitespace().any(is_designation)
        {
            Origin::Specification
        } else {
            Origin::Assumption
        }
    });
    Source { origin, text: text.to_owned() }
}
