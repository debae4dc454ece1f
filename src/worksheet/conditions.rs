//! `conditions` blocks: operating states, what each overrides, how long it lasts, normal or fault.

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::quantity::{self, Dimension, Quantity};
use crate::yaml::{Key, Node};

use super::fence::RawBlock;
use super::page::Page;
use super::{BasisEntry, Condition, ElementState, Record, Spot, basis, enough, lines};

const EXAMPLE: &str = "`inrush: {normal: yes, DS1: cold, lasts: 80 ms}`";
const STATES: [(&str, ElementState); 3] =
    [("cold", ElementState::Cold), ("shorted", ElementState::Shorted), ("open", ElementState::Open)];
/// The most conditions of one worksheet.
const MOST: usize = 50;

/// What conditions may refer to.
pub(super) struct Known<'a> {
    pub basis: &'a [BasisEntry],
    pub circuit: &'a [Record],
    /// Names of the basis and designators that stand in the file, even where their values are wrong.
    pub written: &'a [String],
}

pub(super) fn read(
    page: &Page,
    block: &RawBlock,
    known: &Known,
    out: &mut Vec<Condition>,
    names: &mut Vec<String>,
    diagnostics: &mut Diagnostics,
) {
    let Some(node) = basis::tree(page, block, diagnostics) else { return };
    let Some(entries) = diagnostics.keep(node.map(&format!("one condition a line: {EXAMPLE}"))) else {
        return;
    };
    for (key, value) in entries {
        if enough(diagnostics) {
            return;
        }
        let name = Spot { value: key.name.clone(), place: key.place.clone() };
        if names.contains(&name.value) {
            let message = format!("there are two conditions `{}`", name.value);
            diagnostics.push(Diagnostic::error(&name.place, message).expected("a name of its own for each"));
        }
        if names.len() >= MOST {
            let message = "there are too many conditions";
            diagnostics.push(Diagnostic::error(&name.place, message).expected(format!("at most {MOST}")));
            return;
        }
        names.push(name.value.clone());
        let named = lines::check_name(&name, diagnostics);
        let Some(fields) = diagnostics.keep(value.map(EXAMPLE)) else { continue };
        if basis::refuse_loose_words(fields, diagnostics) {
            continue;
        }
        let mut condition =
            Condition { name, normal: true, lasts: None, overrides: Vec::new(), states: Vec::new() };
        for (key, value) in fields {
            field(page, key, value, known, &mut condition, diagnostics);
        }
        if named {
            out.push(condition);
        }
    }
}

fn field(
    page: &Page,
    key: &Key,
    value: &Node,
    known: &Known,
    condition: &mut Condition,
    diagnostics: &mut Diagnostics,
) {
    let Some(text) = basis::scalar(page, value, "one value", diagnostics) else { return };
    let name = Spot { value: key.name.clone(), place: key.place.clone() };
    match name.value.as_str() {
        "normal" => {
            if let Some(normal) = yes_or_no(&text, diagnostics) {
                condition.normal = normal;
            }
        }
        "lasts" => condition.lasts = duration(&text, diagnostics),
        _ => {
            if let Some(entry) = known.basis.iter().find(|entry| entry.name.value == name.value) {
                let quantity = basis::same_kind(&text, &name.value, &entry.sourced.quantity, diagnostics);
                condition.overrides.extend(quantity.map(|quantity| (name, quantity)));
            } else if let Some(record) = known.circuit.iter().find(|record| record.key.value == name.value) {
                let state = element_state(&text, record, diagnostics);
                condition.states.extend(state.map(|state| (name, state)));
            } else if !known.written.contains(&name.value) {
                unknown(&name, known, diagnostics);
            }
        }
    }
}

fn unknown(name: &Spot<String>, known: &Known, diagnostics: &mut Diagnostics) {
    let candidates = ["normal", "lasts"]
        .into_iter()
        .chain(known.basis.iter().map(|entry| entry.name.value.as_str()))
        .chain(known.circuit.iter().map(|record| record.key.value.as_str()));
    diagnostics.push(
        Diagnostic::error(
            &name.place,
            format!("`{}` is neither in the design basis nor in the circuit", name.value),
        )
        .expected("`normal`, `lasts`, a name of the basis, or a designator of the circuit")
        .nearest(&name.value, candidates),
    );
}

/// Reads `yes` or `no`.
pub(super) fn yes_or_no(text: &Spot<String>, diagnostics: &mut Diagnostics) -> Option<bool> {
    match text.value.as_str() {
        "yes" => Some(true),
        "no" => Some(false),
        other => {
            diagnostics.push(
                Diagnostic::error(&text.place, format!("`{other}` is neither yes nor no"))
                    .expected("yes or no"),
            );
            None
        }
    }
}

fn duration(text: &Spot<String>, diagnostics: &mut Diagnostics) -> Option<Quantity> {
    let quantity = diagnostics.keep(quantity::parse(&text.value, &text.place))?;
    if quantity.kind.dimension != Dimension::SECOND || quantity.spread.low <= 0.0 {
        diagnostics.push(
            Diagnostic::error(&text.place, format!("`{}` is not a duration", text.value))
                .expected("a time above zero, such as 80 ms"),
        );
        return None;
    }
    Some(quantity)
}

fn element_state(
    text: &Spot<String>,
    record: &Record,
    diagnostics: &mut Diagnostics,
) -> Option<Spot<ElementState>> {
    let Some((_, state)) = STATES.into_iter().find(|(name, _)| *name == text.value) else {
        diagnostics.push(
            Diagnostic::error(&text.place, format!("`{}` is no state of an element", text.value))
                .expected("cold, shorted or open; another value stands in the design basis under a name")
                .nearest(&text.value, STATES.map(|(name, _)| name)),
        );
        return None;
    };
    let has = |key: &str| record.fields.iter().any(|(name, _)| name.value == key);
    if state == ElementState::Cold && !has("filament") && !has("coil") {
        let message = format!("`{}` is never cold: it is no filament and no coil", record.key.value);
        diagnostics.push(Diagnostic::error(&text.place, message).expected("shorted or open"));
        return None;
    }
    if state == ElementState::Cold && !has("cold") && !has("part") {
        let message = format!("the cold resistance of `{}` is not given", record.key.value);
        diagnostics.push(
            Diagnostic::error(&text.place, message)
                .expected("`cold: 14 Ω` in its record, or a part that has it"),
        );
        return None;
    }
    Some(Spot { value: state, place: text.place.clone() })
}
