//! A notebook of tiny worksheets, and a small calculation in place of the study: it is real (its results come from the
//! inputs and from nothing else), but takes no time.
//!
//! Every note has one result, `X`: the sum of its basis values times the V_CEO of its parts. It is met up to 100 V.

use std::path::{Path, PathBuf};
use std::sync::Mutex;

use qsheaf::diagnostic::{Diagnostic, Diagnostics};
use qsheaf::notebook::{self, Calculation, Notebook, Order, Outcome, Press};
use qsheaf::part::{self, RatingQuantity};
use qsheaf::quantity::{Dimension, Kind, Shown, Unit, parse_unit};
use qsheaf::redline::Moves;
use qsheaf::report::Issue;
use qsheaf::settings;
use qsheaf::source::{Bundle, Place};
use qsheaf::spread::Corner;
use qsheaf::study::*;
use qsheaf::worksheet;

pub const PARTS: &str = "\
# Invented parts.

LBN-250:
  kind: npn
  about: NPN transistor
  source: data sheet LBN-250 rev C
  rows:
    - {h_FE: {min: 100, typ: 180, max: 300}, I_C: 150 mA, V_CE: 1 V, page: 2}
  ratings: {V_CEO: 60 V, page: 1}

# The smaller one.
LBN-120:
  kind: npn
  about: NPN transistor
  source: data sheet LBN-120 rev A
  rows:
    - {h_FE: {min: 110, typ: 200, max: 450}, I_C: 2 mA, V_CE: 5 V, page: 3}
  ratings: {V_CEO: 45 V, page: 1}
";

pub fn sheet(note: &str, part: &str, value: &str) -> String {
    format!(
        "---\nnote: {note}\ntitle: Stage {note}\nauthor: A. Author\nchecker: C. Checker\napprover: B. Boss\n\
         revision: A\ndate: 2026-03-01\n---\n\n# Stage\n\n```basis\nk: {value} [measured, log 1]\n```\n\n\
         ```circuit\nQ1: {{npn: {part}, collector: c, base: b, emitter: ground}}\n```\n"
    )
}

/// A folder with `notebook.yaml`, two parts, and four worksheets, of which `a.md`, `b.md` and `more/c.md` use LBN-250.
pub fn folder() -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    write(&folder, "notebook.yaml", "organisation: Harbour Lights Workshop\nnumbering: LB-\n");
    write(&folder, "parts/transistors.yaml", PARTS);
    write(&folder, "a.md", &sheet("LB-1", "LBN-250", "1"));
    write(&folder, "b.md", &sheet("LB-2", "LBN-250", "1.5"));
    write(&folder, "more/c.md", &sheet("LB-3", "LBN-250", "2"));
    write(&folder, "d.md", &sheet("LB-4", "LBN-120", "1"));
    folder
}

pub fn write(folder: impl AsRef<Path>, path: &str, text: &str) {
    let full = folder.as_ref().join(path);
    std::fs::create_dir_all(full.parent().unwrap()).unwrap();
    std::fs::write(full, text).unwrap();
}

pub fn read(folder: impl AsRef<Path>, path: &str) -> String {
    std::fs::read_to_string(folder.as_ref().join(path)).unwrap()
}

pub fn replace(folder: impl AsRef<Path>, path: &str, from: &str, to: &str) {
    let text = read(&folder, path);
    assert!(text.contains(from), "{path} does not hold {from}");
    write(folder, path, &text.replace(from, to));
}

/// Names and contents of everything in `issued/`.
pub fn issued(folder: impl AsRef<Path>) -> Vec<(String, Vec<u8>)> {
    let mut out = Vec::new();
    collect(&folder.as_ref().join("issued"), "", &mut out);
    out.sort();
    out
}

fn collect(folder: &Path, prefix: &str, out: &mut Vec<(String, Vec<u8>)>) {
    for entry in std::fs::read_dir(folder).into_iter().flatten() {
        let path: PathBuf = entry.unwrap().path();
        let name = format!("{prefix}{}", path.file_name().unwrap().to_str().unwrap());
        if path.is_dir() {
            collect(&path, &format!("{name}/"), out);
        } else {
            out.push((name, std::fs::read(&path).unwrap()));
        }
    }
}

pub fn pdfs(folder: impl AsRef<Path>) -> Vec<String> {
    issued(folder).into_iter().map(|(name, _)| name).filter(|name| name.ends_with(".pdf")).collect()
}

pub fn study(program: &str, bundle: &Bundle, path: &str) -> Result<Findings, Diagnostics> {
    let (sheet, warnings) = worksheet::read(bundle.get(path).unwrap())?;
    let settings = settings::read(bundle.get(settings::FILE).unwrap())?;
    let mut parts = Vec::new();
    for (_, file) in bundle.files.iter().filter(|(path, _)| path.contains('#')) {
        parts.extend(part::read(file)?);
    }
    if let Some(entry) = sheet.basis.iter().find(|entry| entry.sourced.quantity.spread.nominal < 0.0) {
        return Err(Diagnostic::error(&entry.name.place, "the value is below zero").into());
    }
    let factor: f64 = sheet.basis.iter().map(|entry| entry.sourced.quantity.spread.nominal).sum();
    let ratings = parts.iter().filter_map(|part| part.rating(RatingQuantity::CollectorEmitter));
    let x = factor * ratings.map(|rating| rating.value).sum::<f64>();
    let verdict = if x <= 100.0 { Verdict::Met } else { Verdict::NotMet };
    let head = &sheet.head;
    let name = |spot: &Option<worksheet::Spot<String>>| spot.as_ref().map(|spot| spot.value.clone());
    Ok(Findings {
        schema: SCHEMA,
        program: program.to_owned(),
        note: NoteHead {
            organisation: settings.organisation,
            note: head.note.value.clone(),
            title: head.title.value.clone(),
            author: head.author.value.clone(),
            checker: name(&head.checker),
            approver: name(&head.approver),
            revision: head.revision.value.clone(),
            date: head.date.value.clone(),
            language: settings.language,
            paper: settings.paper,
            logo: None,
            revisions: head.revisions.clone(),
        },
        body: worksheet_text(&sheet),
        inputs: sheet
            .basis
            .iter()
            .map(|entry| Input {
                symbol: entry.name.value.clone(),
                description: None,
                spread: entry.sourced.quantity.spread,
                kind: entry.sourced.quantity.kind,
                unit: entry.sourced.quantity.unit.clone(),
                text: entry.sourced.quantity.text.clone(),
                bounded: false,
                source: entry.sourced.source.clone(),
                role: entry.role,
                place: entry.sourced.place.clone(),
            })
            .collect(),
        results: vec![result("X", x)],
        criteria: vec![criterion("small", x, 100.0, verdict)],
        files: bundle.files.iter().map(|(path, file)| (path.to_string(), file.digest)).collect(),
        digest: bundle.digest(),
        parts,
        warnings,
        conditions: vec![],
        elements: vec![],
        points: vec![],
        derivation: vec![],
        spreads: vec![],
        stress: vec![],
        heat: vec![],
        cautions: vec![],
        figures: vec![],
        trace: vec![],
        models: vec![],
        validity: vec![],
    })
}

/// The prose as one paragraph of text.
fn worksheet_text(sheet: &worksheet::Worksheet) -> Vec<qsheaf::markup::Flow> {
    let text = format!("{:?}", sheet.body.iter().filter(|piece| !is_placed(piece)).collect::<Vec<_>>());
    vec![qsheaf::markup::Flow::Listing { text }]
}

fn is_placed(piece: &worksheet::Piece) -> bool {
    matches!(piece, worksheet::Piece::Placed { .. } | worksheet::Piece::Image { .. })
}

pub fn volt() -> Unit {
    parse_unit("V").unwrap()
}

pub fn end(value: f64) -> End {
    End {
        value: Shown::Value(value),
        corner: Corner::default(),
        condition: "on".into(),
        thermal: "cold start".into(),
        established: Established::Exact,
    }
}

pub fn result(symbol: &str, value: f64) -> ResultFinding {
    ResultFinding {
        symbol: symbol.into(),
        label: None,
        condition: "on".into(),
        kind: Kind::of(Dimension::VOLT),
        unit: volt(),
        nominal: Shown::Value(value),
        min: end(value),
        max: end(value),
        flags: vec![],
    }
}

pub fn criterion(label: &str, worst: f64, limit: f64, verdict: Verdict) -> CriterionFinding {
    CriterionFinding {
        label: label.into(),
        text: format!("X <= {limit} V"),
        math: None,
        spoken: String::new(),
        over: "extremes".into(),
        conditions: vec!["on".into()],
        clause: None,
        safety: false,
        kind: Kind::of(Dimension::VOLT),
        unit: volt(),
        relation: "≤".into(),
        worst: end(worst),
        limit: Shown::Value(limit),
        margin: Shown::Value(limit - worst),
        nominal: Shown::Value(worst),
        verdict,
        coverage: None,
        flags: vec![],
        place: Place::new(&"a.md".into(), 1, 1, 0),
    }
}

/// A stand-in for a page: everything that this room decides about it, readable.
pub fn typeset(findings: &Findings, issue: &Issue, moves: Option<&Moves>) -> Vec<u8> {
    format!(
        "PDF of {} issue {} of {} by {}\nchecker {:?} approver {:?}\nX {:?}\nmoves {}\n",
        findings.note.note,
        issue.number,
        issue.date,
        issue.program,
        findings.note.checker,
        findings.note.approver,
        findings.results[0].nominal,
        serde_json::to_string(&moves).unwrap()
    )
    .into_bytes()
}

pub fn issue_by(program: &str, folder: impl AsRef<Path>, workers: usize) -> Outcome {
    let notebook = Notebook::open(folder.as_ref()).unwrap_or_else(|errors| panic!("{errors:#?}"));
    notebook::issue(
        &notebook,
        &Press {
            calculation: Calculation { program, study: &|bundle, path| study(program, bundle, path) },
            typeset: &|findings, issue, moves, _| Ok(typeset(findings, issue, moves)),
        },
        &Order { workers, date: None },
        &mut |_| {},
    )
}

pub fn issue(folder: impl AsRef<Path>) -> Outcome {
    issue_by("1.0.0", folder, 2)
}

/// Paths of the worksheets that a run studied.
pub fn studied(folder: impl AsRef<Path>) -> (Outcome, Vec<String>) {
    let notebook = Notebook::open(folder.as_ref()).unwrap();
    let seen = Mutex::new(Vec::new());
    let outcome = notebook::issue(
        &notebook,
        &Press {
            calculation: Calculation {
                program: "1.0.0",
                study: &|bundle, path| {
                    seen.lock().unwrap().push(path.to_owned());
                    study("1.0.0", bundle, path)
                },
            },
            typeset: &|findings, issue, moves, _| Ok(typeset(findings, issue, moves)),
        },
        &Order { workers: 2, date: None },
        &mut |_| {},
    );
    let mut seen = seen.into_inner().unwrap();
    seen.sort();
    (outcome, seen)
}

pub fn notes(issued: &[notebook::Issued]) -> Vec<(&str, u32)> {
    issued.iter().map(|issued| (issued.note.as_str(), issued.entry.issue)).collect()
}

/// `message @ place` of every diagnostic.
pub fn told(diagnostics: &Diagnostics) -> Vec<String> {
    diagnostics
        .0
        .iter()
        .map(|found| match &found.place {
            Some(place) => format!("{place}: {}", found.message),
            None => found.message.clone(),
        })
        .collect()
}
