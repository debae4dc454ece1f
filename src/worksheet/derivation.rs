//! `derivation` blocks: `label: NAME = expression`, or `label: left > right` as an assertion; ` in CONDITION` at the end.

use std::collections::BTreeMap;
use std::ops::Range;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Place;

use super::fence::RawBlock;
use super::lines::{self, Line};
use super::page::Page;
use super::{DerivationKind, DerivationLine, Spot, enough};

const EXAMPLE: &str = "base current: I_B = (V_drive - Q1.V_BE) / R1";
/// The most lines of all derivation blocks together.
const MOST: usize = 1_000;

pub(super) fn read(
    page: &Page,
    block: &RawBlock,
    out: &mut Vec<DerivationLine>,
    diagnostics: &mut Diagnostics,
) {
    for line in lines::cut(page, block, diagnostics) {
        if out.len() >= MOST {
            diagnostics.push(
                Diagnostic::error(&block.place, "the derivation has too many lines")
                    .expected(format!("at most {MOST}")),
            );
            return;
        }
        if enough(diagnostics) {
            return;
        }
        out.extend(read_line(&line, block.index, diagnostics));
    }
}

fn read_line(line: &Line, block: usize, diagnostics: &mut Diagnostics) -> Option<DerivationLine> {
    let (label, rest) = line.label(EXAMPLE, diagnostics)?;
    let (rest, condition) = split_condition(line, rest);
    let text = line.text.get(rest.clone()).unwrap_or("");
    let signs = lines::comparisons(text);
    let what = match equals_sign(text) {
        Some(at) if !signs.iter().any(|sign| *sign < at) => {
            let name = line.spot(line.trimmed(rest.start..rest.start + at));
            let right = line.trimmed(rest.start + at + 1..rest.end);
            if text[at + 1..].starts_with('=') || equals_sign(&text[at + 1..]).is_some() {
                let sign = rest.start + at..rest.start + at + 1;
                diagnostics.push(
                    Diagnostic::error(&line.place(sign), "there is more than one equals sign")
                        .expected(format!("`{EXAMPLE}`; one step a line")),
                );
                return None;
            }
            if right.is_empty() {
                diagnostics.push(
                    Diagnostic::error(&name.place, format!("nothing follows `{} =`", name.value))
                        .expected(format!("`{EXAMPLE}`")),
                );
                return None;
            }
            let named = lines::check_name(&name, diagnostics);
            match line.formula(right) {
                Ok(formula) if named => DerivationKind::Define { name, formula },
                Ok(_) => return None,
                Err(found) => {
                    diagnostics.extend(found);
                    return None;
                }
            }
        }
        _ => {
            if signs.is_empty() {
                diagnostics.push(
                    Diagnostic::error(
                        &line.place(rest.clone()),
                        "this line neither defines nor asserts anything",
                    )
                    .expected(format!("`{EXAMPLE}`, or `enough: I_B > 3 * I_C / beta`")),
                );
                return None;
            }
            match line.relation(rest.clone()) {
                Ok(relation) => DerivationKind::Assert { relation, text: text.to_owned() },
                Err(found) => {
                    diagnostics.extend(found);
                    return None;
                }
            }
        }
    };
    let place = line.place(label.clone());
    let label = line.text.get(label).unwrap_or("").to_owned();
    Some(DerivationLine { label, what, condition, place, block })
}

/// Splits ` in CONDITION` off the end.
fn split_condition(line: &Line, rest: Range<usize>) -> (Range<usize>, Option<Spot<String>>) {
    let text = line.text.get(rest.clone()).unwrap_or("");
    let words = lines::words(text);
    if let [.., before, last] = words.as_slice()
        && words.len() > 2
        && text.get(before.clone()) == Some("in")
        && last.end == text.len()
    {
        let condition = line.spot(rest.start + last.start..rest.start + last.end);
        return (line.trimmed(rest.start..rest.start + before.start), Some(condition));
    }
    (rest, None)
}

/// Byte offset of the first equals sign outside brackets that is no part of `<=` or `>=`.
fn equals_sign(text: &str) -> Option<usize> {
    let mut before = ' ';
    for (at, c) in lines::outside_brackets(text) {
        let part = matches!(before, '<' | '>' | '!');
        before = c;
        if c == '=' && !part {
            return Some(at);
        }
    }
    None
}

/// Reports a name that is defined twice, or used before the line that defines it.
/// `elsewhere` gives the places of the names of the design basis and of the designators.
pub(super) fn check_order(
    lines: &[DerivationLine],
    elsewhere: &BTreeMap<&str, &Place>,
    diagnostics: &mut Diagnostics,
) {
    let mut defined: BTreeMap<&str, (usize, &Place)> = BTreeMap::new();
    let mut uses: Vec<Vec<(&str, &Place)>> = Vec::new();
    for (index, line) in lines.iter().enumerate() {
        let names;
        match &line.what {
            DerivationKind::Define { name, formula } => {
                names = formula.names();
                let first = elsewhere.get(name.value.as_str()).copied();
                let first = first.or(defined.get(name.value.as_str()).map(|(_, place)| *place));
                match first {
                    Some(first) => {
                        let message = format!("`{}` is defined twice", name.value);
                        diagnostics.push(
                            Diagnostic::error(&name.place, message)
                                .expected(format!("another name; the first stands on line {}", first.line)),
                        );
                    }
                    None => {
                        defined.insert(&name.value, (index, &name.place));
                    }
                }
            }
            DerivationKind::Assert { relation, .. } => {
                names = relation.names();
            }
        }
        uses.push(names);
    }
    for (index, names) in uses.iter().enumerate() {
        for (name, place) in names {
            let Some((at, first)) = defined.get(name).filter(|(at, _)| *at >= index) else { continue };
            if enough(diagnostics) {
                return;
            }
            let itself = *at == index;
            // The later line leans on this one again, directly or over others.
            let circular = itself || leans(*at, index, &uses, &defined);
            let message = if itself {
                format!("`{name}` is defined by itself")
            } else if circular {
                format!("the derivation is circular: `{name}` leans on this line")
            } else {
                format!("`{name}` is used before it exists")
            };
            diagnostics.push(
                Diagnostic::error(place, message)
                    .expected(format!("names of lines above; `{name}` is defined on line {}", first.line)),
            );
        }
    }
}

/// Whether the line `from` uses, directly or over others, what the line `target` defines.
fn leans(
    from: usize,
    target: usize,
    uses: &[Vec<(&str, &Place)>],
    defined: &BTreeMap<&str, (usize, &Place)>,
) -> bool {
    let mut seen = std::collections::BTreeSet::new();
    let mut open = vec![from];
    while let Some(line) = open.pop() {
        for (name, _) in uses.get(line).into_iter().flatten() {
            if let Some((next, _)) = defined.get(name) {
                if *next == target {
                    return true;
                }
                if seen.insert(*next) {
                    open.push(*next);
                }
            }
        }
    }
    false
}
