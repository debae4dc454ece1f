//! Findings, moves, issue data, templates -> PDF.
//!
//! Findings are formatted to strings and trees (`page`), pass the gate that makes them printable (`safe`), and go to the
//! typesetter as a JSON file beside the templates (`templates`); the press turns these virtual files into a PDF.

mod cell;
mod page;
mod press;
mod rich;
mod safe;
mod templates;

pub use press::*;
pub use templates::TEMPLATES;

use std::sync::Arc;

use serde::{Deserialize, Serialize};
use serde_json::{Value, json};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::figure;
use crate::numeric::threads;
use crate::redline::Moves;
use crate::source::Bundle;
use crate::study::Findings;

/// What the register says about the issue that is printed.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Issue {
    pub number: u32,
    /// Date of issue, `2026-10-02`. Never the clock's.
    pub date: String,
    pub status: Status,
    /// Version of the program.
    pub program: String,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Status {
    Issued,
    /// Watermarked; has no place in the register.
    Draft,
}

/// Findings -> PDF. `files` are the note's inputs: they are attached, images are shown, and templates of the notebook win
/// over the house's own.
///
/// Errors name the template, line and column, or the image that cannot be shown.
pub fn typeset(
    findings: &Findings,
    issue: &Issue,
    moves: Option<&Moves>,
    files: &Bundle,
) -> Result<Vec<u8>, Diagnostics> {
    compile(&source(findings, issue, moves, files)?)
}

/// The virtual files that typesetting reads: templates, page data, drawings, images and attachments.
pub fn source(
    findings: &Findings,
    issue: &Issue,
    moves: Option<&Moves>,
    files: &Bundle,
) -> Result<Sources, Diagnostics> {
    let images = page::images(findings, files);
    let drawings: Vec<_> = threads::on_two(&findings.figures, figure::draw);
    let page = page::page(findings, issue, moves, &images, &drawings);
    let (texts, foreign) = templates::gather(files)?;
    let mut out = templates::render(&texts, &safe::json_bytes(&context(findings, issue, &page)))?;
    let data = safe::json_bytes(&page);
    for (index, drawing) in drawings.into_iter().enumerate() {
        out.insert(format!("figure/{index}.svg"), drawing.svg.into_bytes().into());
    }
    for path in &images {
        if let (Some(name), Some(file)) = (page::image_path(&images, path), files.get(path)) {
            out.insert(name, file.bytes.clone());
        }
    }
    let listed = attach(findings, files, &mut out)?;
    out.insert("attached.json".to_owned(), listed.to_string().into_bytes().into());
    out.insert("page.json".to_owned(), data.into());
    Ok(Sources {
        files: out,
        ident: format!("{} {}", findings.note.organisation, findings.note.note),
        creator: format!("Qsheaf {}", issue.program),
        foreign,
        images,
    })
}

/// What templates may ask while they choose sections and words: the page data without its long tables, and which
/// sections have anything to print.
fn context(findings: &Findings, issue: &Issue, page: &Value) -> Value {
    json!({
        "note": page["note"],
        "issue": {"number": issue.number, "date": issue.date, "program": issue.program,
            "draft": issue.status == Status::Draft},
        "counts": page["counts"],
        "has": {
            "moves": !page["moves"].is_null(),
            "cautions": !findings.cautions.is_empty(),
            "body": !findings.body.is_empty(),
            "points": !findings.points.is_empty(),
            "results": !findings.results.is_empty(),
            "spreads": !findings.spreads.is_empty(),
            "stress": !findings.stress.is_empty(),
            "heat": !findings.heat.is_empty(),
            "fits": !findings.models.is_empty(),
            "trace": !findings.trace.is_empty(),
            "validity": !findings.validity.is_empty(),
            "warnings": !findings.warnings.0.is_empty(),
            "earlier": page["note"]["earlier"].as_array().is_some_and(|rows| !rows.is_empty()),
            "logo": !page["note"]["logo"].is_null(),
        },
    })
}

/// Puts the inputs and the findings among the virtual files and lists them for `pdf.attach`.
fn attach(
    findings: &Findings,
    files: &Bundle,
    out: &mut std::collections::BTreeMap<String, Arc<[u8]>>,
) -> Result<Value, Diagnostics> {
    let mut list = Vec::new();
    let mut add = |name: &str, bytes: Arc<[u8]>, relation: &str, what: &str| {
        let path = format!("attached/{}", list.len());
        let name: String =
            name.chars().map(|c| if c == '\\' || c == ':' || c.is_control() { '_' } else { c }).collect();
        list.push(json!({
            "path": path, "name": name, "mime": mime(&name), "relationship": relation, "description": what,
        }));
        out.insert(path, bytes);
    };
    let text = serde_json::to_vec_pretty(findings)
        .map_err(|error| Diagnostic::bare(format!("the findings cannot be written as JSON: {error}")))?;
    add("findings.json", text.into(), "data", "Everything that this note prints, as data");
    for (path, file) in &files.files {
        let (relation, what) = match extension(path).as_deref() {
            Some("md") => ("source", "The worksheet that this note was computed from"),
            Some("yaml" | "yml") => {
                ("source", "Part record, policy or settings that this note was computed from")
            }
            Some("typ") => ("supplement", "Template of this notebook"),
            _ => ("supplement", "File that the worksheet refers to"),
        };
        add(path, file.bytes.clone(), relation, what);
    }
    Ok(Value::Array(list))
}

/// What a path ends with, in lower case; a record cut out of a file (`parts/diodes.yaml#LBD-1`) is what its file is.
fn extension(path: &str) -> Option<String> {
    path.split('#').next()?.rsplit('.').next().map(str::to_ascii_lowercase)
}

fn mime(name: &str) -> &'static str {
    match extension(name).as_deref() {
        Some("md") => "text/markdown",
        Some("yaml" | "yml") => "application/yaml",
        Some("json") => "application/json",
        Some("csv") => "text/csv",
        Some("typ" | "txt") => "text/plain",
        Some("png") => "image/png",
        Some("jpg" | "jpeg") => "image/jpeg",
        Some("svg") => "image/svg+xml",
        Some("gif") => "image/gif",
        Some("webp") => "image/webp",
        _ => "application/octet-stream",
    }
}
