//! The head and the file as a whole: what is refused, and where.

use qsheaf::source::{File, LARGEST_TEXT};
use qsheaf::worksheet;

use super::{HEAD, errors, whole};

fn bytes(bytes: Vec<u8>) -> Vec<String> {
    errors(worksheet::read(&File::new("a.md", bytes)))
}

#[test]
fn a_missing_or_open_head_is_refused() {
    assert_eq!(errors(whole("# Title\n")), ["1:1 the worksheet has no head"]);
    assert_eq!(errors(whole("---\nnote: 1\n")), ["1:1 the head is not closed"]);
    assert_eq!(errors(whole("")), ["1:1 the worksheet has no head"]);
}

#[test]
fn every_missing_key_is_named() {
    let found = errors(whole("---\nnote: HB-1\n---\n"));
    let expected = ["title", "author", "revision", "date"].map(|key| format!("1:1 the head has no `{key}`"));
    assert_eq!(found, expected);
}

#[test]
fn a_misspelt_key_is_offered_right() {
    let text = HEAD.replace("title:", "titel:");
    let Err(found) = whole(&text) else { panic!() };
    assert_eq!(found.0[0].nearest.as_deref(), Some("title"));
    assert_eq!(found.0[0].place.as_ref().map(|p| (p.line, p.column)), Some((3, 1)));
}

#[test]
fn dates_are_dates_of_the_calendar() {
    for wrong in
        ["2026-02-29", "2026-13-01", "2026-00-10", "26-01-01", "2026-1-1", "1900-02-29", "2026-06-31"]
    {
        let found = errors(whole(&HEAD.replace("2026-11-30", wrong)));
        assert_eq!(found, [format!("6:7 `{wrong}` is not a date of the calendar")]);
    }
    for right in ["2028-02-29", "2000-02-29", "2026-12-31"] {
        assert!(errors(whole(&HEAD.replace("2026-11-30", right))).is_empty(), "{right}");
    }
}

#[test]
fn malformed_yaml_is_placed() {
    let Err(found) = whole("---\nnote: [1\ntitle: x\n---\n") else { panic!() };
    let place = found.0[0].place.as_ref().unwrap();
    assert!((2..=4).contains(&place.line), "{found:#?}");
}

#[test]
fn bytes_that_are_not_text_are_placed() {
    let mut text = HEAD.as_bytes().to_vec();
    text.extend("Grüße \u{00e4}".as_bytes());
    text.push(0xff);
    assert_eq!(bytes(text), ["8:8 the byte 0xFF is not UTF-8 text"]);
    let text = format!("{HEAD}ab\u{7}c \u{e001}\n\u{202e}x\n").into_bytes();
    assert_eq!(
        bytes(text),
        [
            "8:3 the character U+0007 cannot be set",
            "8:6 the character U+E001 cannot be set",
            "9:1 the character U+202E cannot be set"
        ]
    );
}

#[test]
fn a_file_too_large_is_refused_unread() {
    let text = vec![b'a'; 3 << 20];
    assert_eq!(bytes(text), [format!("1:1 the file has {} bytes", 3 << 20)]);
    let mut right = HEAD.as_bytes().to_vec();
    while (right.len() as u64) < LARGEST_TEXT - 100 {
        right.extend(b"A line of prose about the lantern and its lamp, nothing else.\n\n");
    }
    assert!(bytes(right).is_empty());
}
