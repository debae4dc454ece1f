//! The YAML tree: exact places, and what is refused.

use std::sync::Arc;

use qsheaf::yaml::{self, Value};

fn read(text: &str) -> Result<yaml::Node, String> {
    let file: Arc<str> = "sheet.md".into();
    yaml::read(text, &file, 10).map_err(|diagnostics| {
        diagnostics
            .0
            .iter()
            .map(|d| format!("{}: {}", d.place.as_ref().map_or(String::new(), |p| p.to_string()), d.message))
            .collect::<Vec<_>>()
            .join("\n")
    })
}

#[test]
fn scalars_stay_as_typed_and_know_their_place() {
    let node = read(
        "V_bat: 10.8 to 14.8 V, usually 12.6 V   [battery sheet p. 4]\nR1: {resistor: 4k7 ± 1 %, to: b}\n",
    )
    .unwrap();
    let Value::Map(entries) = &node.value else { panic!("a map") };
    assert_eq!(entries[0].1.scalar("").unwrap(), "10.8 to 14.8 V, usually 12.6 V   [battery sheet p. 4]");
    assert_eq!(entries[0].1.place.to_string(), "sheet.md:10:8");
    let record = &entries[1].1;
    assert_eq!(record.get("resistor").unwrap().scalar("").unwrap(), "4k7 ± 1 %");
    assert_eq!(record.get("to").unwrap().place.to_string(), "sheet.md:11:31");
    for text in ["1e3", "1.50", "0", "~", "no", "0x10"] {
        assert_eq!(read(&format!("a: {text}")).unwrap().get("a").unwrap().scalar("").unwrap(), text);
    }
}

#[test]
fn whatever_hides_meaning_is_refused_with_its_place() {
    for (text, expected) in [
        ("a: 1\nb: 2\na: 3\n", "sheet.md:12:1: `a` stands twice"),
        ("a: 4 V #4\n", "sheet.md:10:8: everything from ` #` on would be ignored silently"),
        ("a: &x 4\n", "sheet.md:10:4: an anchor (`&name`) is not allowed here"),
        ("a: !!int 4\n", "sheet.md:10:4: a tag (`!name`) is not allowed here"),
        ("a: 1\n---\nb: 2\n", "sheet.md:11:1: a second YAML document begins here"),
    ] {
        let found = read(text).unwrap_err();
        assert!(found.starts_with(expected), "{text:?} gave {found:?}");
    }
    assert!(read("a: '4 #4'\n# a comment of its own\n").is_ok());
}

#[test]
fn malformed_text_is_an_error_and_never_a_panic() {
    for text in [
        "a: [1, 2",
        "{",
        "a: b: c",
        "- a\nb: c",
        "\t- x",
        "a: \"",
        "? [",
        "\u{0}",
        "%",
        "a: {b: 1 V [x], c: 2}",
    ] {
        let _ = read(text);
    }
    assert!(read("a: [1, 2").is_err());
    assert!(read(&"[".repeat(100_000)).is_err());
    let mut seed = 7_u64;
    for _ in 0..3000 {
        let bytes: Vec<u8> = (0..60)
            .map(|_| {
                seed = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
                b" {}[]:,-#&*!|>'\"%@`\nab1\t"[(seed >> 33) as usize % 24]
            })
            .collect();
        let _ = read(std::str::from_utf8(&bytes).unwrap());
    }
}
