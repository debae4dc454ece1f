//! Page data: everything that the templates print, as strings and trees, in the order in which it is printed. Templates
//! compute nothing.

mod body;
mod heat;
mod spreads;
mod summary;
mod tables;

use serde_json::{Value, json};

use crate::figure::Drawing;
use crate::quantity::{Kind, Shown, Unit};
use crate::redline::Moves;
use crate::source::Bundle;
use crate::spread::Corner;
use crate::study::{FigureFinding, Findings};

use super::cell::{self, DIGITS, Number};
use super::rich::{rich, symbol};
use super::{Issue, Status};
use crate::quantity::preferred_unit;

/// How many revisions the first page lists.
const REVISIONS: usize = 5;

/// The page data of one note. `images` are the paths of the notebook's images in the order of their virtual files,
/// `drawings` the figures of the findings in order.
pub(crate) fn page(
    findings: &Findings,
    issue: &Issue,
    moves: Option<&Moves>,
    images: &[String],
    drawings: &[Drawing],
) -> Value {
    let note = &findings.note;
    let placed = body::placed_words(&findings.body);
    let revisions: Vec<Value> = note.revisions.iter().map(|row| json!(row)).collect();
    let earlier = revisions.len().saturating_sub(REVISIONS);
    json!({
        "note": {
            "organisation": note.organisation,
            "number": note.note,
            "title": note.title,
            "author": note.author,
            "checker": note.checker,
            "approver": note.approver,
            "revision": note.revision,
            "date": issue.date,
            "ymd": ymd(&issue.date).or_else(|| ymd(&note.date)).unwrap_or([1970, 1, 1]),
            "language": language(&note.language),
            "paper": if note.paper == "us-letter" { "us-letter" } else { "a4" },
            "logo": note.logo.as_ref().and_then(|logo| image_path(images, logo)),
            // The first page has room for the latest; the rest go to the end of the note.
            "revisions": revisions[earlier..],
            "earlier": revisions[..earlier],
        },
        "issue": {
            "number": issue.number,
            "draft": issue.status == Status::Draft,
            "program": issue.program,
            "schema": findings.schema,
        },
        "running": {
            "number": short(&note.note, 24), "title": short(&note.title, 70), "revision": short(&note.revision, 12),
        },
        "counts": summary::counts_value(findings),
        "summary": summary::criteria(findings),
        "stresses": summary::stresses(findings),
        "moves": moves.filter(|moves| !moves.is_empty()).map(tables::moves),
        "cautions": findings.cautions.iter().map(|caution| json!({
            "title": rich(&caution.title), "why": rich(&caution.why), "measure": rich(&caution.measure),
            "basis": rich(&caution.basis), "hazard": caution.hazard,
        })).collect::<Vec<_>>(),
        "body": body::flows(&findings.body, images),
        "placed": placed,
        "basis": tables::basis(findings),
        "conditions": tables::conditions(findings),
        "circuit": tables::circuit(findings),
        "derivation": body::derivation(findings),
        "acceptance": tables::acceptance(findings),
        "figures": findings.figures.iter().zip(drawings).enumerate().map(drawing).collect::<Vec<_>>(),
        "points": tables::points(findings),
        "tolerance": tables::tolerance(findings),
        "spreads": spreads::spreads(findings),
        "stress": tables::stress(findings),
        "heat": heat::heat(findings),
        "fits": tables::fits(findings),
        "trace": tables::trace(findings),
        "validity": findings.validity.iter().map(|text| rich(text)).collect::<Vec<_>>(),
        "warnings": findings.warnings.0.iter().map(|warning| {
            let place = warning.place.as_ref().map(|place| place.to_string());
            json!({"place": place, "message": rich(&warning.message)})
        }).collect::<Vec<_>>(),
        "files": findings.files.iter().map(|(path, digest)| json!([path, grouped(&digest.to_string())]))
            .collect::<Vec<_>>(),
        "digest": grouped(&findings.digest.to_string()),
    })
}

fn drawing((index, (finding, drawn)): (usize, (&FigureFinding, &Drawing))) -> Value {
    let axis = |axis: &crate::study::AxisFinding| json!({"title": axis.title, "symbol": axis.symbol, "unit": axis.unit.symbol});
    json!({
        "file": format!("figure/{index}.svg"),
        "title": rich(&finding.title),
        "alt": if finding.alt.trim().is_empty() { &finding.title } else { &finding.alt },
        "width": drawn.width, "height": drawn.height, "plot": drawn.plot,
        "x": axis(&finding.x), "y": axis(&finding.y),
        "x_ticks": drawn.x_ticks, "y_ticks": drawn.y_ticks,
        "name": drawn.name,
        "names": drawn.names.iter().map(|(at, name)| json!([at, rich(&short(name, 60))])).collect::<Vec<_>>(),
        "marks": drawn.marks.iter().map(|(x, y, name)| json!([x, y, rich(&short(name, 60))])).collect::<Vec<_>>(),
    })
}

/// The virtual path of an image of the notebook.
pub(crate) fn image_path(images: &[String], path: &str) -> Option<String> {
    let index = images.iter().position(|image| image == path)?;
    let kind = match path.rsplit('.').next().map(str::to_ascii_lowercase).as_deref() {
        Some("svg") => "svg",
        Some("jpg" | "jpeg") => "jpg",
        Some("gif") => "gif",
        Some("webp") => "webp",
        _ => "png",
    };
    Some(format!("image/{index}.{kind}"))
}

/// Paths of all images that the note shows, logo first, each once, as far as the bundle holds them.
pub(crate) fn images(findings: &Findings, files: &Bundle) -> Vec<String> {
    let mut out: Vec<String> = findings.note.logo.iter().cloned().collect();
    body::image_paths(&findings.body, &mut out);
    let mut seen = std::collections::BTreeSet::new();
    out.retain(|path| files.get(path).is_some() && seen.insert(path.clone()));
    out
}

/// Year, month and day of `2026-10-02`.
pub(crate) fn ymd(date: &str) -> Option<[u16; 3]> {
    let mut parts = date.trim().splitn(3, '-').map(|part| part.parse::<u16>().ok());
    let [year, month, day] = [parts.next()??, parts.next()??, parts.next()??];
    let leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    let days = match month {
        2 => 28 + u16::from(leap),
        4 | 6 | 9 | 11 => 30,
        1..=12 => 31,
        _ => return None,
    };
    ((1..=days).contains(&day) && (1..=9999).contains(&year)).then_some([year, month, day])
}

/// Language and region (BCP 47) as far as the typesetter takes them; English otherwise.
fn language(tag: &str) -> Value {
    let mut parts = tag.split(['-', '_']);
    let fits = |part: &str, lengths: &[usize]| {
        lengths.contains(&part.len()) && part.bytes().all(|b| b.is_ascii_alphabetic())
    };
    let language = parts.next().filter(|part| fits(part, &[2, 3])).unwrap_or("en").to_ascii_lowercase();
    let region = parts.next().filter(|part| fits(part, &[2])).map(str::to_ascii_uppercase);
    json!([language, region])
}

/// A digest in groups of eight, so that it can be read and broken over lines.
fn grouped(hex: &str) -> String {
    let mut out = String::with_capacity(hex.len() + 8);
    for (i, c) in hex.chars().enumerate() {
        if i > 0 && i % 8 == 0 {
            out.push(' ');
        }
        out.push(c);
    }
    out
}

/// A corner as words: `V_bat 14.8 V`, `Q1 gain low`, apart by commas; a level stays with its symbol on one line. What tells
/// little is counted only; empty where nothing varies.
fn corner(corner: &Corner) -> Value {
    let rest = corner.levels.len().saturating_sub(corner.telling);
    let told = levels(corner.levels.get(..corner.telling).unwrap_or(&corner.levels));
    rich(&if rest == 0 { told } else { format!("{told} and {rest}\u{a0}more") })
}

/// Levels apart by commas.
fn levels(levels: &[(String, String)]) -> String {
    let level = |(symbol, level): &(String, String)| {
        let text = format!("{symbol} {level}");
        if text.chars().count() <= 20 { text.replace(' ', "\u{a0}") } else { text }
    };
    levels.iter().map(level).collect::<Vec<_>>().join(", ")
}

/// At most `most` characters, the rest told by dots: for the running head only.
fn short(text: &str, most: usize) -> String {
    if text.chars().count() <= most {
        return text.to_owned();
    }
    text.chars().take(most.saturating_sub(1)).chain(['…']).collect()
}

fn shown(value: &Shown, unit: &Unit) -> Option<Number> {
    cell::shown(value, unit)
}

/// A value of a part record in the coherent unit with a fitting prefix.
fn plain(value: f64, kind: Kind) -> Number {
    cell::given(value, &preferred_unit(&[value], kind), DIGITS)
}
