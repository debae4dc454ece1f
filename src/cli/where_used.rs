//! `where-used`: the worksheets and designators that use a part.

use serde_json::json;

use crate::diagnostic::Diagnostic;
use crate::notebook::{self, Notebook, Uses};

use super::{Console, MET, UNUSABLE, WhereUsedArguments, show};

pub(super) fn run(arguments: &WhereUsedArguments, console: &mut Console) -> u8 {
    let notebook = match Notebook::open(&arguments.folder.path()) {
        Ok(notebook) => notebook,
        Err(errors) => {
            show::diagnostics(console, None, &errors);
            return UNUSABLE;
        }
    };
    let part = arguments.part.as_str();
    let (all, mut diagnostics) = notebook::uses(&notebook);
    let mut parts: Vec<&str> = notebook.parts.records.keys().map(String::as_str).collect();
    parts.extend(all.iter().flat_map(|uses| uses.parts.keys()).map(String::as_str));
    let found: Vec<(&Uses, &Vec<String>)> =
        all.iter().filter_map(|uses| Some((uses, uses.parts.get(part)?))).collect();
    if !parts.contains(&part) {
        diagnostics.push(
            Diagnostic::bare(format!("no record and no worksheet names a part `{part}`"))
                .expected("the name of a part record of the notebook")
                .nearest(part, parts.iter().copied()),
        );
    }
    let status = if diagnostics.has_errors() { UNUSABLE } else { MET };
    if arguments.json {
        let rows: Vec<_> = found
            .iter()
            .map(|(uses, designators)| {
                json!({
                    "worksheet": uses.worksheet, "note": uses.note, "title": uses.title,
                    "designators": designators,
                })
            })
            .collect();
        let value = json!({
            "part": part,
            "record": notebook.parts.records.get(part).map(|record| record.origin.to_string()),
            "used": rows,
            "diagnostics": show::diagnostics_json(&diagnostics),
            "status": status,
        });
        show::json_value(console, &value);
    } else {
        for (uses, designators) in &found {
            let text =
                format!("{}  {}  {}  ({})", uses.worksheet, designators.join(", "), uses.note, uses.title);
            show::line(console, &text);
        }
        if found.is_empty() && parts.contains(&part) {
            show::line(console, &format!("no worksheet uses {part}"));
        }
    }
    show::diagnostics(console, Some(&notebook.root), &diagnostics);
    status
}
