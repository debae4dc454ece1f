//! A formula read aloud.

use crate::markup::Math;

use super::{PLAIN, SIGNS};

/// The formula read aloud. Depth is bounded by the reader.
pub(super) fn speak(math: &Math, out: &mut String) {
    match math {
        Math::Row { parts } => parts.iter().for_each(|part| speak(part, out)),
        Math::Symbol { base, subscript, owner } => {
            out.push_str(&format!(" {base}"));
            if !subscript.is_empty() && !base.is_empty() {
                out.push_str(" sub");
            }
            out.push_str(&format!(" {subscript}"));
            if !owner.is_empty() {
                out.push_str(&format!(" of {owner}"));
            }
        }
        Math::Number { digits, unit, .. } => out.push_str(&format!(" {digits} {unit}")),
        Math::Operator { sign } => {
            let named = SIGNS.iter().find(|(_, shown, _)| shown == sign).map(|(.., words)| *words);
            let plain = || PLAIN.iter().find(|(c, _)| sign.starts_with(*c)).map(|(_, words)| *words);
            out.push_str(&format!(" {} ", named.or_else(plain).unwrap_or(sign)));
        }
        Math::Fraction { above, below } => {
            speak(above, out);
            out.push_str(" over ");
            speak(below, out);
        }
        Math::Power { base, exponent } => {
            speak(base, out);
            out.push_str(" to the power ");
            speak(exponent, out);
        }
        Math::Root { radicand } => {
            out.push_str(" the square root of ");
            speak(radicand, out);
        }
        Math::Group { inner } => {
            out.push_str(" open bracket ");
            speak(inner, out);
            out.push_str(" close bracket ");
        }
        Math::Absolute { inner } => {
            out.push_str(" the magnitude of ");
            speak(inner, out);
        }
        Math::Call { name, arguments } => {
            out.push_str(&format!(" {name} of "));
            for (index, argument) in arguments.iter().enumerate() {
                if index > 0 {
                    out.push_str(" and ");
                }
                speak(argument, out);
            }
        }
        Math::Cases { branches } => {
            for (value, condition) in branches {
                speak(value, out);
                match condition {
                    Some(condition) => {
                        out.push_str(" if ");
                        speak(condition, out);
                    }
                    None => out.push_str(" otherwise "),
                }
            }
        }
    }
}
