//! `over coverage 99 % because "trimmed in test"`: the share, and the reason that it needs.

use std::ops::Range;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::quantity::{self, Kind};
use crate::source::Place;
use crate::worksheet::lines::Line;
use crate::worksheet::{Coverage, Spot};

pub(super) const EXAMPLE: &str = "over coverage 99 % because \"trimmed in test\"";
/// Shares that samples can decide: what lies below is no demand, what lies above takes too many.
const SHARES: [f64; 2] = [0.5, 0.9999];
/// Samples that a worksheet may ask for.
const SAMPLES: [usize; 2] = [1_000, 1_000_000];
const WORD: &str = "because";
/// Marks that open and close a reason.
const QUOTES: [(char, char); 3] = [('"', '"'), ('“', '”'), ('„', '“')];

/// A reason with its place.
pub(super) struct Reason {
    pub text: String,
    pub place: Place,
}

/// Cuts `because "..."` out of what stands at `rest`, where it is: the reason, and the text with spaces in its place (as many
/// bytes), so that words in it mean nothing. `None` where the quotes are missing.
pub(super) fn cut_reason(
    line: &Line,
    rest: Range<usize>,
    diagnostics: &mut Diagnostics,
) -> Option<(Option<Reason>, String)> {
    let text = line.text.get(rest.clone()).unwrap_or("");
    let Some(at) = word_at(text) else { return Some((None, text.to_owned())) };
    let behind = text.get(at + WORD.len()..).unwrap_or("");
    let open = at + WORD.len() + behind.len() - behind.trim_start().len();
    let quoted = text.get(open..).and_then(inside_quotes);
    let Some((inner, length)) = quoted else {
        diagnostics.push(
            Diagnostic::error(
                &line.place(rest.start + at..rest.start + at + WORD.len()),
                "no reason in quotes follows",
            )
            .expected(format!("`{EXAMPLE}`")),
        );
        return None;
    };
    let end = open + length;
    let place = line.place(rest.start + at..rest.start + end);
    let blanked =
        [text.get(..at).unwrap_or(""), &" ".repeat(end - at), text.get(end..).unwrap_or("")].concat();
    Some((Some(Reason { text: inner.trim().to_owned(), place }), blanked))
}

/// Where the word stands, apart from others, before any quotes.
fn word_at(text: &str) -> Option<usize> {
    let before_quotes = text.find(QUOTES.map(|(open, _)| open)).unwrap_or(text.len());
    text.match_indices(WORD).map(|(at, _)| at).find(|&at| {
        let before = text.get(..at).and_then(|text| text.chars().next_back());
        let after = text.get(at + WORD.len()..).and_then(|text| text.chars().next());
        let apart = |c: Option<char>| c.is_none_or(|c| !c.is_alphanumeric() && c != '_' && c != '.');
        at <= before_quotes && at > 0 && apart(before) && apart(after)
    })
}

/// What stands in the quotes with which `text` begins, and how many bytes it takes with them.
fn inside_quotes(text: &str) -> Option<(&str, usize)> {
    let first = text.chars().next()?;
    let (_, close) = QUOTES.into_iter().find(|(open, _)| *open == first)?;
    let inner = text.get(first.len_utf8()..)?;
    let end = inner.find(close)?;
    Some((inner.get(..end)?, first.len_utf8() + end + close.len_utf8()))
}

/// Reads `coverage 99 % [from 20000 samples]`, which begins at word `at`, and sets `at` behind it.
pub(super) fn read(
    words: &[Spot<String>],
    at: &mut usize,
    reason: Option<Reason>,
    diagnostics: &mut Diagnostics,
) -> Option<Coverage> {
    let word = words.get(*at)?;
    *at += 1;
    let mut right = true;
    let (text, place) = share_text(words, at, word);
    let share = match quantity::parse(&text, &place) {
        Ok(found) if found.kind == Kind::NONE && !found.bounded => Some(found.spread.nominal),
        _ => None,
    };
    let share = share.filter(|share| (SHARES[0]..=SHARES[1]).contains(share));
    if share.is_none() {
        right = false;
        let message = match text.as_str() {
            "" => "no share of specimens follows `coverage`".to_owned(),
            "100 %" | "100%" => "every specimen is `over extremes`; samples cannot show it".to_owned(),
            text => format!("`{text}` is no share of specimens that samples can decide"),
        };
        diagnostics
            .push(Diagnostic::error(&place, message).expected(format!("from 50 % to 99.99 %: `{EXAMPLE}`")));
    }
    let samples = match samples(words, at, diagnostics) {
        Ok(samples) => samples,
        Err(()) => {
            right = false;
            None
        }
    };
    let because = reason.filter(|reason| !reason.text.is_empty());
    if because.is_none() {
        diagnostics.push(
            Diagnostic::error(
                &word.place,
                "a coverage needs a reason: extreme value decides unless the note says why not",
            )
            .expected(format!("`{EXAMPLE}`")),
        );
    }
    let (share, because) = (share?, because?);
    right.then(|| Coverage { share, text, samples, because: because.text, place: word.place.clone() })
}

/// Whether a word begins like a share.
pub(super) fn is_number(word: &str) -> bool {
    word.starts_with(|c: char| c.is_ascii_digit())
}

/// `99.7 %` or `99.7%`, and its place; where it is missing, the word before it.
fn share_text(words: &[Spot<String>], at: &mut usize, word: &Spot<String>) -> (String, Place) {
    let Some(number) = words.get(*at).filter(|word| is_number(&word.value)) else {
        return (String::new(), word.place.clone());
    };
    *at += 1;
    if words.get(*at).is_some_and(|unit| unit.value == "%") {
        *at += 1;
        return (format!("{} %", number.value), number.place.clone());
    }
    (number.value.clone(), number.place.clone())
}

/// `from 20000 samples`, where it stands.
fn samples(
    words: &[Spot<String>],
    at: &mut usize,
    diagnostics: &mut Diagnostics,
) -> Result<Option<usize>, ()> {
    let Some(from) = words.get(*at).filter(|word| word.value == "from") else { return Ok(None) };
    *at += 1;
    let number = words.get(*at).unwrap_or(from);
    *at += 1;
    if words.get(*at).is_some_and(|word| word.value == "samples") {
        *at += 1;
    }
    match number.value.parse::<usize>() {
        Ok(count) if (SAMPLES[0]..=SAMPLES[1]).contains(&count) => Ok(Some(count)),
        _ => {
            diagnostics.push(
                Diagnostic::error(&number.place, format!("`{}` is no number of samples", number.value))
                    .expected(format!(
                        "from {} to {}: `over coverage 99 % from 20000 samples because \"...\"`",
                        SAMPLES[0], SAMPLES[1]
                    )),
            );
            Err(())
        }
    }
}
