//! `circuit` blocks: designator -> record of keys and texts. What the keys mean is the circuit's business.

use crate::diagnostic::{Diagnostic, Diagnostics};

use super::fence::RawBlock;
use super::page::Page;
use super::{Record, Spot, basis, enough};

const EXAMPLE: &str = "`R1: {resistor: 470 Ω ± 5 %, from: drive, to: base}`";
/// The most elements of one worksheet.
const MOST: usize = 500;

pub(super) fn read(page: &Page, block: &RawBlock, out: &mut Vec<Record>, diagnostics: &mut Diagnostics) {
    let Some(node) = basis::tree(page, block, diagnostics) else { return };
    let Some(entries) = diagnostics.keep(node.map(&format!("one element a line: {EXAMPLE}"))) else { return };
    for (key, value) in entries {
        if enough(diagnostics) {
            return;
        }
        if out.len() >= MOST {
            let message = "the circuit has too many elements";
            diagnostics.push(Diagnostic::error(&key.place, message).expected(format!("at most {MOST}")));
            return;
        }
        let Some(fields) = diagnostics.keep(value.map(EXAMPLE)) else { continue };
        if basis::refuse_loose_words(fields, diagnostics) {
            continue;
        }
        let mut read = Vec::new();
        for (name, value) in fields {
            let name = Spot { value: name.name.clone(), place: name.place.clone() };
            if let Some(text) = basis::scalar(page, value, "one value", diagnostics) {
                read.push((name, text));
            }
        }
        let key = Spot { value: key.name.clone(), place: key.place.clone() };
        out.push(Record { key, fields: read, block: block.index });
    }
}
