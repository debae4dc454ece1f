//! `basis` blocks: named values with unit, range or tolerance, and where each comes from.

use std::collections::BTreeMap;
use std::ops::Range;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::quantity::{self, Kind, Origin, Quantity, Role, Source, Sourced};
use crate::source::Place;
use crate::yaml::{self, Key, Node, Value};

use super::fence::RawBlock;
use super::page::Page;
use super::{BasisEntry, Spot, enough, lines};

const KEYS: [&str; 5] = ["value", "source", "about", "spread", "ageing"];
const EXAMPLE: &str = "`V_bat: 10.8 to 14.8 V, usually 12.6 V [battery sheet rev 3 p. 4]`";

pub(super) fn read(
    page: &Page,
    block: &RawBlock,
    clauses: &[&str],
    out: &mut Vec<BasisEntry>,
    names: &mut BTreeMap<String, Place>,
    diagnostics: &mut Diagnostics,
) {
    let Some(node) = tree(page, block, diagnostics) else { return };
    let Some(entries) = diagnostics.keep(node.map(&format!("one value a line: {EXAMPLE}"))) else { return };
    for (key, value) in entries {
        if enough(diagnostics) {
            return;
        }
        let name = Spot { value: key.name.clone(), place: key.place.clone() };
        let named = lines::check_name(&name, diagnostics);
        if let Some(first) = names.get(&name.value) {
            diagnostics.push(
                Diagnostic::error(&name.place, format!("`{}` is defined twice", name.value))
                    .expected(format!("another name; the first stands on line {}", first.line)),
            );
        } else {
            names.insert(name.value.clone(), name.place.clone());
        }
        let Some(value) = entry(page, value, clauses, diagnostics) else { continue };
        if named {
            out.push(value.named(name, block.index));
        }
    }
}

/// The YAML tree of a block.
pub(super) fn tree(page: &Page, block: &RawBlock, diagnostics: &mut Diagnostics) -> Option<Node> {
    let first_line = page.line(block.content.start) as u32;
    match yaml::read(page.slice(block.content.clone()), page.file, first_line) {
        Ok(node) => Some(node),
        Err(found) => {
            diagnostics.extend(found);
            None
        }
    }
}

/// The text of a scalar as it is laid out in the page, so that places inside it are true: without quotes, at the place
/// of its first character. A scalar over several lines is taken as joined by the YAML reader.
pub(super) fn scalar(
    page: &Page,
    node: &Node,
    what: &str,
    diagnostics: &mut Diagnostics,
) -> Option<Spot<String>> {
    let text = diagnostics.keep(node.scalar(what))?;
    let mut place = node.place.clone();
    let written = page.slice(page.offset(&place)..page.line_range(place.line as usize).end);
    if written.starts_with(['"', '\'']) {
        place.column += 1;
        place.length = place.length.saturating_sub(2);
    }
    let indent = text.chars().take_while(|c| c.is_whitespace()).count() as u32;
    place.column += indent;
    place.length = place.length.saturating_sub(indent);
    Some(Spot { value: text.trim().to_owned(), place })
}

/// Reports what a comma in an unquoted value leaves behind: words that became a key without a value.
pub(super) fn refuse_loose_words(entries: &[(Key, Node)], diagnostics: &mut Diagnostics) -> bool {
    let mut loose = false;
    for (key, value) in entries {
        let empty = matches!(&value.value, Value::Scalar(text) if text.is_empty());
        if empty && !lines::is_name(&key.name) {
            loose = true;
            diagnostics.push(
                Diagnostic::error(&key.place, format!("`{}` stands alone after a comma", key.name)).expected(
                    "quotes round a value that holds a comma: `\"10.8 to 14.8 V, usually 12.6 V\"`",
                ),
            );
        }
    }
    loose
}

/// What stands behind the name of a basis value.
pub struct BasisValue {
    pub sourced: Sourced,
    pub description: Option<String>,
    pub role: Role,
    pub ageing: Option<Quantity>,
}

impl BasisValue {
    pub fn named(self, name: Spot<String>, block: usize) -> BasisEntry {
        let BasisValue { sourced, description, role, ageing } = self;
        BasisEntry { name, sourced, description, role, ageing, block }
    }
}

fn entry(page: &Page, node: &Node, clauses: &[&str], diagnostics: &mut Diagnostics) -> Option<BasisValue> {
    let Value::Map(entries) = &node.value else {
        return basis_text(&scalar(page, node, EXAMPLE, diagnostics)?, clauses, diagnostics);
    };
    if refuse_loose_words(entries, diagnostics) {
        return None;
    }
    yaml::refuse_unknown_keys(entries, &KEYS, diagnostics);
    let Some(value) = node.get("value") else {
        diagnostics.push(
            Diagnostic::error(&node.place, "the value is missing")
                .expected("`{value: 4.6 V ± 0.2 V, source: measured 2026-10-02, about: drive voltage}`"),
        );
        return None;
    };
    let value = scalar(page, value, "a number with its unit", diagnostics)?;
    let quantity = diagnostics.keep(quantity::parse(&value.value, &value.place))?;
    let source = match node.get("source") {
        Some(source) => {
            let text = scalar(page, source, "where the value comes from", diagnostics)?;
            Some(source_of(&text, clauses, diagnostics))
        }
        None => None,
    };
    let about = match node.get("about") {
        Some(about) => Some(scalar(page, about, "what the value is, in words", diagnostics)?.value),
        None => None,
    };
    let mut further = |key: &str, what: &str| {
        node.get(key).map(|found| scalar(page, found, what, diagnostics).ok_or(())).transpose()
    };
    let role = further("spread", "bias, uniform, triangular or normal").ok()?;
    let ageing = further("ageing", "a share of the value: `± 2 %`").ok()?;
    let role = role.map(|text| Role::parse(&text.value, &text.place));
    let ageing = ageing.map(|text| quantity::parse_ageing(&text.value, &text.place));
    Some(BasisValue {
        sourced: Sourced { quantity, source, place: value.place },
        description: about,
        role: role.map_or(Some(Role::Bias), |role| diagnostics.keep(role))?,
        ageing: match ageing {
            Some(ageing) => Some(diagnostics.keep(ageing)?),
            None => None,
        },
    })
}

/// Reads the text of a basis value, `quantity, ageing ± 1 % -- what it is [where it comes from]`: the quantity with its
/// source, what it is, and how far it drifts.
pub fn basis_text(
    text: &Spot<String>,
    clauses: &[&str],
    diagnostics: &mut Diagnostics,
) -> Option<BasisValue> {
    let parts = split(text, diagnostics)?;
    let part = |range: &Range<usize>| Spot {
        value: text.value.get(range.clone()).unwrap_or("").to_owned(),
        place: text.place.within(&text.value, range.start, range.end),
    };
    let (value, ageing) = split_ageing(part(&parts.value));
    let quantity = diagnostics.keep(quantity::parse(&value.value, &value.place))?;
    let ageing = match ageing {
        Some(text) => Some(diagnostics.keep(quantity::parse_ageing(&text.value, &text.place))?),
        None => None,
    };
    let source = parts.source.as_ref().map(|range| source_of(&part(range), clauses, diagnostics));
    let description = parts.about.as_ref().map(|range| part(range).value);
    let sourced = Sourced { quantity, source, place: value.place };
    Some(BasisValue { sourced, description, role: Role::Bias, ageing })
}

/// Cuts `2.5 V ± 1 %, ageing ± 0.2 %` before the word.
fn split_ageing(text: Spot<String>) -> (Spot<String>, Option<Spot<String>>) {
    const WORD: &str = " ageing ";
    let whole = text.value.as_str();
    let Some(at) = whole.find(WORD) else { return (text, None) };
    let cut = |from: usize, part: &str| Spot {
        value: part.to_owned(),
        place: text.place.within(whole, from, from + part.len()),
    };
    let value = whole.get(..at).unwrap_or("").trim_end_matches([',', ' ']);
    let from = at + WORD.len();
    let drift = whole.get(from..).unwrap_or("");
    (cut(0, value), Some(cut(from, drift)))
}

/// Byte ranges of the parts of a value text.
pub(super) struct Parts {
    pub value: Range<usize>,
    pub about: Option<Range<usize>>,
    pub source: Option<Range<usize>>,
}

/// Cuts `quantity -- about [source]`.
pub(super) fn split(text: &Spot<String>, diagnostics: &mut Diagnostics) -> Option<Parts> {
    let whole = text.value.as_str();
    let trimmed = |range: Range<usize>| {
        let part = whole.get(range.clone()).unwrap_or("");
        let start = range.start + part.len() - part.trim_start().len();
        start..start + part.trim().len()
    };
    let mut end = whole.len();
    let mut source = None;
    if let Some(open) = whole.find('[') {
        if !whole.ends_with(']') {
            let place = text.place.within(whole, open, whole.len());
            diagnostics.push(
                Diagnostic::error(&place, "the source is not closed, or something follows it")
                    .expected(format!("the source in square brackets at the very end: {EXAMPLE}")),
            );
            return None;
        }
        let range = trimmed(open + 1..whole.len() - 1);
        if range.is_empty() {
            let place = text.place.within(whole, open, whole.len());
            diagnostics
                .push(Diagnostic::error(&place, "the source is empty").expected("`[data sheet rev 3 p. 4]`"));
            return None;
        }
        source = Some(range);
        end = open;
    }
    let mut about = None;
    if let Some((at, dash)) = [" -- ", " — "].iter().find_map(|dash| Some((whole[..end].find(dash)?, dash)))
    {
        about = Some(trimmed(at + dash.len()..end)).filter(|range| !range.is_empty());
        end = at;
    }
    Some(Parts { value: trimmed(0..end), about, source })
}

/// Reads where a number comes from; `clauses` are those of the head, which count as the specification. Words that do not say
/// where a value comes from are warned of, because it then counts as an assumption.
pub fn source_of(text: &Spot<String>, clauses: &[&str], diagnostics: &mut Diagnostics) -> Source {
    let mut source = quantity::parse_source(&text.value);
    if clauses.iter().any(|clause| text.value.starts_with(clause)) {
        source.origin = Origin::Specification;
    }
    let lower = text.value.to_lowercase();
    let says_so = ["assum", "guess", "estimat"].iter().any(|stem| lower.contains(stem));
    if source.origin == Origin::Assumption && !says_so {
        diagnostics.push(
            Diagnostic::warning(
                &text.place,
                "it is not clear where this value comes from; it counts as an assumption",
            )
            .expected(
                "words such as `data sheet rev 3 p. 4`, `measured 2026-10-02`, `clause 3.2`, `IEC 60063`, \
                 `calculated`, `assumed`, `from memory`",
            ),
        );
    }
    source
}

/// Reads a quantity whose kind is known from where it stands, so that `4k7` may be a resistance. Another kind is left to the
/// caller, who can say what was expected.
pub fn quantity_as(text: &Spot<String>, kind: Kind) -> Result<Quantity, Diagnostic> {
    quantity::parse_as(&text.value, &text.place, kind)
        .or_else(|found| quantity::parse(&text.value, &text.place).map_err(|_| found))
}

/// Reads a quantity of a basis value that stands for another one in a condition or a figure; reports another dimension.
pub(super) fn same_kind(
    text: &Spot<String>,
    name: &str,
    wanted: &Quantity,
    diagnostics: &mut Diagnostics,
) -> Option<Quantity> {
    let quantity = diagnostics.keep(quantity_as(text, wanted.kind))?;
    if quantity.kind != wanted.kind {
        diagnostics.push(
            Diagnostic::error(&text.place, format!("`{}` is no value of `{name}`", text.value))
                .expected(format!("a value in {}, as in the design basis", unit_words(wanted))),
        );
        return None;
    }
    Some(quantity)
}

fn unit_words(quantity: &Quantity) -> String {
    if quantity.unit.symbol.is_empty() { "plain numbers".into() } else { quantity.unit.symbol.clone() }
}
