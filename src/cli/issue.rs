//! `issue`: recalculate what is out of date, write PDFs and findings, register them.

use serde_json::{Value, json};

use crate::notebook::{self, Issued, Notebook, Order, Press, shelf};

use super::progress::Progress;
use super::{Console, House, IssueArguments, UNUSABLE, press, show};

pub(super) fn run(arguments: &IssueArguments, house: &House, console: &mut Console) -> u8 {
    let notebook = match Notebook::open(&arguments.folder.path()) {
        Ok(notebook) => notebook,
        Err(errors) => {
            show::diagnostics(console, None, &errors);
            return UNUSABLE;
        }
    };
    let program = house.program.as_deref();
    let press = Press {
        calculation: house.calculation,
        typeset: &|findings, issue, moves, files| press::typeset(program, findings, issue, moves, files),
    };
    let order = Order { workers: arguments.workers.number(), date: arguments.date.clone() };
    let outcome = {
        let mut progress = Progress::new(console.watched);
        notebook::issue(&notebook, &press, &order, &mut |event| progress.show(event))
    };
    let all = outcome.issued.iter().chain(&outcome.current);
    let status = show::status(&outcome.diagnostics, all.map(|issued| &issued.entry.verdicts));
    if arguments.json {
        let value = json!({
            "program": house.calculation.program,
            "issued": outcome.issued.iter().map(as_json).collect::<Vec<_>>(),
            "current": outcome.current.iter().map(as_json).collect::<Vec<_>>(),
            "failed": outcome.failed,
            "diagnostics": show::diagnostics_json(&outcome.diagnostics),
            "status": status,
        });
        show::json_value(console, &value);
    } else {
        for issued in &outcome.issued {
            let text = format!(
                "{}/{}  {}  ({})",
                shelf::FOLDER,
                issued.entry.pdf.file,
                show::counts(&issued.entry.verdicts),
                issued.due.join("; ")
            );
            show::line(console, &text);
            let left_out = issued.entry.withheld.names();
            if !left_out.is_empty() {
                let names = left_out.join(" and ");
                show::line(console, &format!("  left out, since this issue is still to be checked: {names}"));
            }
        }
        for current in outcome.current.iter().filter(|current| !current.entry.verdicts.all_met()) {
            let text = format!(
                "{} issue {}, up to date  {}",
                current.note,
                current.entry.issue,
                show::counts(&current.entry.verdicts)
            );
            show::line(console, &text);
        }
        let failed = match outcome.failed.len() {
            0 => String::new(),
            n => format!(", {n} failed"),
        };
        let text = format!("{} issued, {} up to date{failed}", outcome.issued.len(), outcome.current.len());
        show::line(console, &text);
    }
    show::diagnostics(console, Some(&notebook.root), &outcome.diagnostics);
    status
}

fn as_json(issued: &Issued) -> Value {
    let entry = &issued.entry;
    json!({
        "note": issued.note,
        "title": entry.title,
        "worksheet": issued.worksheet,
        "issue": entry.issue,
        "revision": entry.revision,
        "date": entry.date,
        "pdf": format!("{}/{}", shelf::FOLDER, entry.pdf.file),
        "findings": format!("{}/{}", shelf::FOLDER, entry.findings.file),
        "signatures_cleared": entry.signatures_cleared,
        "withheld": entry.withheld,
        "verdicts": entry.verdicts,
        "because": issued.due,
        "moves": issued.moves,
    })
}
