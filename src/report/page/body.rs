//! Prose and derivation for the templates.

use serde_json::{Value, json};

use crate::markup::{Align, Flow, Inline, Math};
use crate::study::{Findings, Step};

use super::super::cell::{self, DIGITS};
use super::{image_path, rich};

/// Widest line of a derivation in em, by the estimate below; a longer one is broken at its operators.
const WIDEST: f64 = 31.0;

/// Words of blocks that the prose places, each with its indices.
pub(super) fn placed_words(body: &[Flow]) -> Value {
    let mut out: std::collections::BTreeMap<String, Vec<usize>> = std::collections::BTreeMap::new();
    visit(body, &mut |flow| {
        if let Flow::Placed { word, index } = flow {
            out.entry(word.clone()).or_default().push(*index);
        }
    });
    json!(out)
}

/// Paths of images in prose.
pub(super) fn image_paths(body: &[Flow], out: &mut Vec<String>) {
    visit(body, &mut |flow| {
        if let Flow::Image { path, .. } = flow {
            out.push(path.clone());
        }
    });
}

fn visit(flows: &[Flow], seen: &mut impl FnMut(&Flow)) {
    for flow in flows {
        seen(flow);
        match flow {
            Flow::List { items, .. } => items.iter().for_each(|item| visit(item, seen)),
            Flow::Quote { content } => visit(content, seen),
            _ => {}
        }
    }
}

/// Prose as a tree. A block that stands inside a list or a quotation is set behind it, where there is room for it. Heading
/// levels never skip one, whatever the worksheet did, for the sake of readers who navigate by
/// them.
pub(super) fn flows(body: &[Flow], images: &[String]) -> Value {
    let mut level = 0;
    let mut out = Vec::new();
    for piece in body {
        out.push(flow(piece, images, &mut level));
        if matches!(piece, Flow::List { .. } | Flow::Quote { .. }) {
            visit(std::slice::from_ref(piece), &mut |inner| {
                if let Flow::Placed { word, index } = inner {
                    out.push(json!({"flow": "placed", "word": word, "index": index}));
                }
            });
        }
    }
    Value::Array(out)
}

fn flow(piece: &Flow, images: &[String], level: &mut u8) -> Value {
    let nested = |content: &[Flow], level: &mut u8| {
        Value::Array(content.iter().map(|piece| flow(piece, images, level)).collect())
    };
    match piece {
        Flow::Heading { level: wanted, content } => {
            *level = (*wanted).clamp(1, (*level + 1).min(4));
            json!({"flow": "heading", "level": *level, "content": inlines(content)})
        }
        Flow::Paragraph { content } => json!({"flow": "paragraph", "content": inlines(content)}),
        Flow::List { ordered, items } => {
            let items: Vec<Value> = items.iter().map(|item| nested(item, level)).collect();
            json!({"flow": "list", "ordered": ordered, "items": items})
        }
        Flow::Quote { content } => json!({"flow": "quote", "content": nested(content, level)}),
        Flow::Listing { text } => json!({"flow": "listing", "text": text}),
        Flow::Rule => json!({"flow": "rule"}),
        Flow::Table { align, head, rows } => {
            let columns = rows.iter().map(Vec::len).chain([head.len(), align.len()]).max().unwrap_or(0);
            if columns == 0 {
                return json!({"flow": "nothing"});
            }
            let pad = |row: &[Vec<Inline>]| {
                let cell = |i: usize| row.get(i).map_or(json!([]), |cell| inlines(cell));
                (0..columns).map(cell).collect::<Vec<_>>()
            };
            let weights: Vec<f64> = (0..columns).map(|i| weight(head, rows, i)).collect();
            let side = |i: usize| match align.get(i) {
                Some(Align::Right) => "right",
                Some(Align::Center) => "center",
                _ => "left",
            };
            json!({
                "flow": "table",
                "align": (0..columns).map(side).collect::<Vec<_>>(),
                "weights": weights,
                "head": pad(head),
                "rows": rows.iter().map(|row| pad(row)).collect::<Vec<_>>(),
            })
        }
        Flow::Image { path, alt, caption } => json!({
            "flow": "image",
            "file": image_path(images, path),
            "path": path,
            "alt": if alt.trim().is_empty() { path } else { alt },
            "caption": inlines(caption),
        }),
        Flow::Placed { word, index } => json!({"flow": "placed", "word": word, "index": index}),
    }
}

/// Share of the width that a column of a prose table gets: between its longest word and its longest text, in letters.
fn weight(head: &[Vec<Inline>], rows: &[Vec<Vec<Inline>>], column: usize) -> f64 {
    let mut longest = 1;
    for row in rows.iter().map(Vec::as_slice).chain([head]) {
        let mut text = String::new();
        if let Some(cell) = row.get(column) {
            plain_text(cell, &mut text);
        }
        longest = longest.max(text.chars().count());
    }
    longest.clamp(4, 40) as f64
}

fn plain_text(content: &[Inline], out: &mut String) {
    for inline in content {
        match inline {
            Inline::Text { text } | Inline::Code { text } => out.push_str(text),
            Inline::Formula { spoken, .. } => out.push_str(spoken),
            Inline::Emphasis { content }
            | Inline::Strong { content }
            | Inline::Struck { content }
            | Inline::Link { content, .. } => plain_text(content, out),
            Inline::Footnote { .. } | Inline::Break => out.push(' '),
        }
    }
}

fn inlines(content: &[Inline]) -> Value {
    Value::Array(content.iter().map(inline).collect())
}

fn inline(piece: &Inline) -> Value {
    match piece {
        Inline::Text { text } => Value::String(text.clone()),
        Inline::Emphasis { content } => json!({"inline": "emphasis", "content": inlines(content)}),
        Inline::Strong { content } => json!({"inline": "strong", "content": inlines(content)}),
        Inline::Struck { content } => json!({"inline": "struck", "content": inlines(content)}),
        Inline::Code { text } => json!({"inline": "code", "text": text}),
        Inline::Formula { math, spoken } => {
            json!({"inline": "formula", "math": math, "spoken": aloud(spoken, "formula")})
        }
        Inline::Link { target, content } => {
            json!({"inline": "link", "target": safe_target(target), "content": inlines(content)})
        }
        Inline::Footnote { content } => {
            let mut level = 4;
            let flows: Vec<Value> = content.iter().map(|piece| flow(piece, &[], &mut level)).collect();
            json!({"inline": "footnote", "content": flows})
        }
        Inline::Break => json!({"inline": "break"}),
    }
}

/// Links lead to the web or to mail; anything else is printed as words.
fn safe_target(target: &str) -> Option<&str> {
    let known = ["https://", "http://", "mailto:"].iter().any(|scheme| target.starts_with(scheme));
    (known && target.len() < 2000 && !target.chars().any(|c| c.is_control() || c.is_whitespace()))
        .then_some(target)
}

fn aloud<'a>(spoken: &'a str, otherwise: &'a str) -> &'a str {
    if spoken.trim().is_empty() { otherwise } else { spoken }
}

/// Derivation blocks in order, each a list of steps.
pub(super) fn derivation(findings: &Findings) -> Value {
    let mut blocks: std::collections::BTreeMap<usize, Vec<Value>> = std::collections::BTreeMap::new();
    for (i, found) in findings.derivation.iter().enumerate() {
        blocks.entry(found.block).or_default().push(step(i + 1, found));
    }
    json!(
        blocks.into_iter().map(|(block, steps)| json!({"block": block, "steps": steps})).collect::<Vec<_>>()
    )
}

fn step(number: usize, found: &Step) -> Value {
    let defined = found.symbol.as_ref().map_or(0.0, em);
    let wide = defined + em(&found.symbols).max(em(&found.numbers)) > 0.8 * WIDEST;
    let result = found.result.value().map(|value| cell::number(value, &found.unit, DIGITS));
    let reason = match &found.result {
        crate::quantity::Shown::NotShown(reason) => Some(rich(reason)),
        crate::quantity::Shown::Value(_) => None,
    };
    json!({
        "number": number,
        "label": rich(&found.label),
        "condition": found.condition,
        "symbol": found.symbol,
        "wide": wide,
        "symbols": broken(&found.symbols),
        "numbers": broken(&found.numbers),
        "result": result.map(|n| json!({
            "math": "number", "digits": n.printed.digits, "exponent": n.printed.exponent, "unit": n.printed.unit,
        })),
        "reason": reason,
        "holds": found.holds,
        "spoken": aloud(&found.spoken, &found.label),
    })
}

/// Lines of a formula: one, or several broken before an operator at its outermost level.
fn broken(math: &Math) -> Vec<Value> {
    let whole = || vec![json!(math)];
    let Math::Row { parts } = math else { return whole() };
    if em(math) <= WIDEST {
        return whole();
    }
    let mut lines: Vec<Vec<&Math>> = vec![Vec::new()];
    let mut width = 0.0;
    let mut piece: Vec<&Math> = Vec::new();
    let breakable = |part: &Math| matches!(part, Math::Operator { sign } if ["+", "−", "-", "·", "×", "∥", "=", "≤", "≥", "<", ">"].contains(&sign.as_str()));
    for part in parts.iter().map(Some).chain([None]) {
        if part.is_none_or(breakable) {
            let piece_width: f64 = piece.iter().map(|part| em(part)).sum();
            if width > 0.0 && width + piece_width > WIDEST {
                lines.push(Vec::new());
                width = 0.0;
            }
            width += piece_width;
            if let Some(line) = lines.last_mut() {
                line.append(&mut piece);
            }
        }
        piece.extend(part);
    }
    lines.into_iter().map(|parts| json!({"math": "row", "parts": parts})).collect()
}

/// Estimated width of a formula in em.
pub(super) fn em(math: &Math) -> f64 {
    let letters = |text: &str| text.chars().count() as f64 * 0.5;
    match math {
        Math::Row { parts } => parts.iter().map(em).sum(),
        Math::Symbol { base, subscript, owner } => letters(owner) + letters(base) + 0.75 * letters(subscript),
        Math::Number { digits, exponent, unit } => {
            letters(digits) + letters(unit) + 0.3 + if exponent.is_some() { 2.2 } else { 0.0 }
        }
        Math::Operator { .. } => 1.1,
        Math::Fraction { above, below } => em(above).max(em(below)) + 0.2,
        Math::Power { base, exponent } => em(base) + 0.7 * em(exponent),
        Math::Root { radicand } => em(radicand) + 0.8,
        Math::Group { inner } | Math::Absolute { inner } => em(inner) + 0.7,
        Math::Call { name, arguments } => {
            letters(name) + 0.7 + arguments.iter().map(|argument| em(argument) + 0.5).sum::<f64>()
        }
        Math::Cases { branches } => {
            let branch = |(value, condition): &(Math, Option<Math>)| {
                em(value) + condition.as_ref().map_or(4.0, em) + 2.5
            };
            branches.iter().map(branch).fold(0.0, f64::max)
        }
    }
}
