//! `figure` blocks: plot / against / over / corners / in / title.

use crate::diagnostic::{Diagnostic, Diagnostics, nearest};
use crate::formula::Formula;
use crate::quantity;
use crate::yaml::{self, Node};

use super::fence::RawBlock;
use super::page::Page;
use super::{BasisEntry, FigureKind, FigureRequest, Spot, basis, conditions};

const KEYS: [&str; 6] = ["plot", "against", "over", "corners", "in", "title"];
const OUTPUT: &str = "output characteristics of";
const DERATING: &str = "power derating of";
const EXAMPLE: &str = "`plot: Q1.V_CE`, `against: V_drive`, `over: 0 to 5 V`";
/// The most curves of one figure.
const MOST: usize = 6;

pub(super) fn read(
    page: &Page,
    block: &RawBlock,
    known: &[BasisEntry],
    diagnostics: &mut Diagnostics,
) -> Option<FigureRequest> {
    let node = basis::tree(page, block, diagnostics)?;
    let entries = diagnostics.keep(node.map(EXAMPLE))?;
    yaml::refuse_unknown_keys(entries, &KEYS, diagnostics);
    let Some(plot) = node.get("plot") else {
        diagnostics
            .push(Diagnostic::error(&block.place, "the figure does not say what it plots").expected(EXAMPLE));
        return None;
    };
    let text = |key: &str, what: &str, diagnostics: &mut Diagnostics| {
        node.get(key).and_then(|node| basis::scalar(page, node, what, diagnostics))
    };
    let title = text("title", "the title of the figure", diagnostics).map(|title| title.value);
    let condition = text("in", "a condition", diagnostics);
    let over = text("over", "a range such as `0 to 5 V`", diagnostics);
    let against = text("against", "the input along the axis", diagnostics);
    let corners = text("corners", "yes or no", diagnostics)
        .and_then(|text| conditions::yes_or_no(&text, diagnostics))
        .unwrap_or(false);
    let plots: Vec<Spot<String>> =
        plot.items().iter().filter_map(|item| basis::scalar(page, item, EXAMPLE, diagnostics)).collect();
    let fixed = plots.first().filter(|_| plots.len() == 1).and_then(|plot| fixed(plot, &over, diagnostics));
    let kind = match fixed {
        Some(kind) => {
            refuse_beside_fixed(&node, &kind, diagnostics);
            kind?
        }
        None => sweep(plots, against, over, corners, known, block, diagnostics)?,
    };
    Some(FigureRequest { kind, title, condition, place: block.place.clone() })
}

/// One of the fixed figures; `Some(None)` where it is meant but wrong.
fn fixed(
    plot: &Spot<String>,
    over: &Option<Spot<String>>,
    diagnostics: &mut Diagnostics,
) -> Option<Option<FigureKind>> {
    let (words, designator) = plot.value.rsplit_once(' ')?;
    let start = plot.value.len() - designator.len();
    let designator =
        Spot { value: designator.to_owned(), place: plot.place.within(&plot.value, start, plot.value.len()) };
    match words.trim() {
        OUTPUT => {
            let over = match over {
                Some(text) => match quantity::parse(&text.value, &text.place) {
                    Ok(quantity) => Some(quantity),
                    Err(found) => {
                        diagnostics.push(found);
                        return Some(None);
                    }
                },
                None => None,
            };
            Some(Some(FigureKind::OutputCharacteristics { designator, over }))
        }
        DERATING => Some(Some(FigureKind::PowerDerating { designator })),
        near if near.contains(' ') && nearest(near, [OUTPUT, DERATING]).is_some() => {
            diagnostics.push(
                Diagnostic::error(&plot.place, format!("unknown figure `{near}`"))
                    .expected(format!("`{OUTPUT} Q1`, `{DERATING} Q1`, or results to plot"))
                    .nearest(near, [OUTPUT, DERATING]),
            );
            Some(None)
        }
        _ => None,
    }
}

fn refuse_beside_fixed(node: &Node, kind: &Option<FigureKind>, diagnostics: &mut Diagnostics) {
    let unused: &[&str] = match kind {
        Some(FigureKind::OutputCharacteristics { .. }) => &["against", "corners"],
        Some(FigureKind::PowerDerating { .. }) => &["against", "corners", "over"],
        _ => &[],
    };
    for key in unused {
        if let Some(value) = node.get(key) {
            diagnostics.push(
                Diagnostic::error(&value.place, format!("this figure has no use for `{key}`"))
                    .expected("`plot`, `in` and `title` only"),
            );
        }
    }
}

fn sweep(
    plots: Vec<Spot<String>>,
    against: Option<Spot<String>>,
    over: Option<Spot<String>>,
    corners: bool,
    known: &[BasisEntry],
    block: &RawBlock,
    diagnostics: &mut Diagnostics,
) -> Option<FigureKind> {
    for (key, missing) in [("against", against.is_none()), ("over", over.is_none())] {
        if missing {
            let message = format!("the figure has no `{key}`");
            diagnostics.push(Diagnostic::error(&block.place, message).expected(EXAMPLE));
        }
    }
    if plots.is_empty() || plots.len() > MOST {
        let message = format!("the figure plots {} results", plots.len());
        diagnostics.push(Diagnostic::error(&block.place, message).expected(format!("1 to {MOST} results")));
        return None;
    }
    let mut formulas: Vec<Formula> = Vec::new();
    for plot in plots {
        match crate::formula::Formula::parse(&plot.value, &plot.place) {
            Ok(formula) => formulas.push(formula),
            Err(found) => diagnostics.extend(found),
        }
    }
    let (against, over) = (against?, over?);
    let entry = known.iter().find(|entry| entry.name.value == against.value);
    let quantity = match entry {
        Some(entry) => basis::same_kind(&over, &against.value, &entry.sourced.quantity, diagnostics),
        None => diagnostics.keep(quantity::parse(&over.value, &over.place)),
    }?;
    if quantity.spread.low >= quantity.spread.high {
        diagnostics.push(
            Diagnostic::error(&over.place, "a figure needs a range along its axis").expected("`0 to 5 V`"),
        );
        return None;
    }
    Some(FigureKind::Sweep { plot: formulas, against, over: quantity, corners })
}
