//! The last gate before the typesetter: page data as JSON bytes in which every character has a glyph in an embedded font
//! and every word can be broken.

use std::collections::BTreeMap;

use serde_json::Value;

use super::press::prints;

/// A word longer than this may be broken, after every so many characters; a path or a name with separators behind them.
const LONGEST_WORD: usize = 20;
const LONGEST_NAME: usize = 12;
const PIECE: usize = 8;
const BREAK: char = '\u{200b}';

/// Serialises page data. Characters that no embedded font has, private-use, directional and control characters are
/// printed by their code point, `⟨U+202E⟩`; the archive's rules forbid them as they are.
pub(super) fn json_bytes(page: &Value) -> Vec<u8> {
    let text = page.to_string();
    let mut out = String::with_capacity(text.len() + text.len() / 16);
    let mut known: BTreeMap<char, bool> = BTreeMap::new();
    // The word being read, inside a string only: numbers of the JSON itself must stay whole.
    let mut word = String::new();
    let mut inside = false;
    let mut chars = text.chars();
    while let Some(c) = chars.next() {
        if !inside || c == '"' || c == '\\' {
            flush(&mut word, &mut out);
            inside ^= c == '"';
            if c == '\\' {
                escape(&mut chars, &mut out)
            } else {
                out.push(c)
            }
            continue;
        }
        let printable =
            c.is_ascii_graphic() || c == ' ' || *known.entry(c).or_insert_with(|| is_plain(c) && prints(c));
        if !printable {
            flush(&mut word, &mut out);
            out.push_str(&code_point(u32::from(c)));
        } else if c.is_alphanumeric() || "_+=*#/.:@&%-".contains(c) {
            word.push(c);
        } else {
            flush(&mut word, &mut out);
            out.push(c);
        }
    }
    flush(&mut word, &mut out);
    out.into_bytes()
}

/// Moves a word to the output, with places to break if it is long.
fn flush(word: &mut String, out: &mut String) {
    let length = word.chars().count();
    if length <= LONGEST_NAME {
        out.push_str(word);
    } else {
        let mut since = 0;
        for (i, c) in word.chars().enumerate() {
            out.push(c);
            since += 1;
            let separator = "_/:=".contains(c) && since > 2;
            if i + 1 < length && (separator || (length > LONGEST_WORD && since >= PIECE)) {
                out.push(BREAK);
                since = 0;
            }
        }
    }
    word.clear();
}

/// Copies an escape of a JSON string, or prints the control character that it stands for.
fn escape(chars: &mut std::str::Chars, out: &mut String) {
    match chars.next() {
        Some('u') => {
            let digits: String = chars.take(4).collect();
            out.push_str(&code_point(u32::from_str_radix(&digits, 16).unwrap_or(0xfffd)));
        }
        Some('b') => out.push_str(&code_point(8)),
        Some('f') => out.push_str(&code_point(12)),
        Some('t' | 'r') => out.push(' '),
        Some(other) => {
            out.push('\\');
            out.push(other);
        }
        None => {}
    }
}

fn code_point(code: u32) -> String {
    format!("⟨U+{code:04X}⟩")
}

/// Neither private use, nor a non-character, nor invisible, nor a mark that turns the direction of reading.
fn is_plain(c: char) -> bool {
    let code = u32::from(c);
    let private = matches!(code, 0xe000..=0xf8ff | 0xf0000..=0x10ffff);
    let invisible = matches!(code, 0x7f..=0x9f | 0x200b..=0x200f | 0x2028..=0x202e | 0x2060..=0x206f | 0xfe00..=0xfe0f
        | 0xfeff | 0xfff0..=0xffff | 0xe0000..=0xe0fff);
    !private && !invisible && code & 0xfffe != 0xfffe
}
