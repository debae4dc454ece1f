//! Words with quantity symbols in them: `I_C at V_CE(sat)` becomes text and symbols that the house sets slanted with an
//! upright subscript.

use serde_json::{Value, json};

use crate::formula;
use crate::markup::Math;

/// A symbol as owner, base and subscript: `Q1.V_CE(sat)` is `["Q1", "V", "CE(sat)"]`.
pub fn symbol(name: &str) -> Value {
    match formula::symbol(name) {
        Math::Symbol { owner, base, subscript } => json!([owner, base, subscript]),
        _ => json!(["", name, ""]),
    }
}

/// Text with the symbols in it picked out.
pub fn rich(text: &str) -> Value {
    let mut out: Vec<Value> = Vec::new();
    let mut plain = String::new();
    let mut rest = text;
    while !rest.is_empty() {
        let length = word(rest);
        if length == 0 {
            let next = rest.chars().next().map_or(rest.len(), char::len_utf8);
            plain.push_str(&rest[..next]);
            rest = &rest[next..];
            continue;
        }
        let (token, after) = rest.split_at(length);
        if is_symbol(token) {
            if !plain.is_empty() {
                out.push(Value::String(std::mem::take(&mut plain)));
            }
            out.push(symbol(token));
        } else {
            plain.push_str(token);
        }
        rest = after;
    }
    if !plain.is_empty() {
        out.push(Value::String(plain));
    }
    Value::Array(out)
}

/// Length in bytes of the word that `text` starts with: letters, digits, `_`, inner points, brackets in a subscript.
fn word(text: &str) -> usize {
    let mut seen_underscore = false;
    let mut open = false;
    let mut end = 0;
    let mut chars = text.char_indices().peekable();
    while let Some((at, c)) = chars.next() {
        let goes_on = match c {
            '_' => {
                seen_underscore = true;
                true
            }
            '.' => at > 0 && chars.peek().is_some_and(|(_, next)| next.is_alphanumeric()),
            '(' if seen_underscore && !open => {
                open = true;
                true
            }
            ')' if open => {
                open = false;
                true
            }
            '-' if open => true,
            _ => c.is_alphanumeric(),
        };
        if !goes_on {
            break;
        }
        end = at + c.len_utf8();
    }
    end
}

fn is_symbol(token: &str) -> bool {
    let (owner, rest) = token.rsplit_once('.').unwrap_or(("", token));
    let Some((base, subscript)) = rest.split_once('_') else { return false };
    let greek = matches!(formula::symbol(base), Math::Symbol { base: letter, .. } if letter != base);
    let short = base.chars().count() <= 2 || greek;
    let brackets = subscript.matches('(').count() == subscript.matches(')').count();
    !base.is_empty()
        && short
        && brackets
        && (1..=12).contains(&subscript.chars().count())
        && !subscript.contains('_')
        && owner.chars().count() <= 12
        && base.chars().all(char::is_alphabetic)
}
