//! Part records are cut out of their files.

use qsheaf::diagnostic::Diagnostics;
use qsheaf::notebook::ranges;

use super::tiny;

fn cut(text: &str) -> Result<Vec<(String, u32, &str)>, Diagnostics> {
    let found = ranges(text, &"parts/x.yaml".into())?;
    Ok(found.into_iter().map(|(key, range)| (key.name, key.place.line, &text[range])).collect())
}

#[test]
fn a_record_reaches_from_its_name_to_the_last_of_its_lines() {
    let records = cut(tiny::PARTS).unwrap();
    assert_eq!(records.len(), 2);
    assert_eq!((records[0].0.as_str(), records[0].1), ("LBN-250", 3));
    assert!(records[0].2.starts_with("LBN-250:\n  kind: npn"));
    // Neither the comment above the next record nor the blank line before it belongs to this one.
    assert!(records[0].2.ends_with("ratings: {V_CEO: 60 V, page: 1}"));
    assert!(records[1].2.ends_with("ratings: {V_CEO: 45 V, page: 1}"));
}

#[test]
fn comments_and_blank_lines_between_records_belong_to_neither() {
    let spaced = tiny::PARTS.replace("# The smaller one.", "\n\n# Another word.\n\n# And more.\n");
    let texts =
        |text: &str| cut(text).unwrap().into_iter().map(|record| record.2.to_owned()).collect::<Vec<_>>();
    assert_eq!(texts(&spaced), texts(tiny::PARTS));
    // An indented comment does belong to its record.
    let inside = tiny::PARTS.replace("\n# The smaller one.", "  # A word on the first.\n");
    assert_ne!(texts(&inside)[0], texts(tiny::PARTS)[0]);
    assert_eq!(texts(&inside)[1], texts(tiny::PARTS)[1]);
}

#[test]
fn line_ends_and_byte_order_marks_do_not_shift_a_record() {
    let text = format!("\u{feff}{}", tiny::PARTS.replace('\n', "\r\n"));
    let records = cut(&text).unwrap();
    assert_eq!(records.len(), 2);
    assert!(records[1].2.starts_with("LBN-120:\r\n"));
}

#[test]
fn a_record_inside_a_line_is_refused_with_its_place() {
    let errors = cut("{A: {kind: npn}, B: {kind: pnp}}\n").unwrap_err();
    assert_eq!(errors.0.len(), 2);
    let place = errors.0[1].place.as_ref().unwrap();
    assert_eq!((place.line, place.column), (1, 18));
}

#[test]
fn a_file_without_records_is_empty() {
    assert!(cut("").unwrap().is_empty());
    assert!(cut("# nothing yet\n").unwrap().is_empty());
}
