//! The commands: what they print, where, and with which exit status.

use std::path::Path;
use std::process::{Command, Output, Stdio};

use qsheaf::cli::{Console, House, run};
use qsheaf::notebook::Calculation;
use serde_json::Value;

use crate::notebook::tiny::{self, folder, issued, pdfs, read, replace, sheet, write};

/// Exit status, standard output, standard error of a command with the small calculation in place of the study. What is
/// typeset is typeset for good.
fn tiny_run(arguments: &[&str]) -> (u8, String, String) {
    let (mut out, mut err) = (Vec::new(), Vec::new());
    let house = House {
        calculation: Calculation {
            program: "1.0.0",
            study: &|bundle, path| tiny::study("1.0.0", bundle, path),
        },
        program: Some(env!("CARGO_BIN_EXE_qsheaf").into()),
    };
    let mut console = Console { out: &mut out, err: &mut err, watched: false };
    let all = std::iter::once("qsheaf").chain(arguments.iter().copied()).map(Into::into);
    let status = run(all, &house, &mut console);
    (status, String::from_utf8(out).unwrap(), String::from_utf8(err).unwrap())
}

/// The program itself, in a folder.
fn program(folder: &Path, arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_qsheaf"))
        .args(arguments)
        .current_dir(folder)
        .stdin(Stdio::null())
        .output()
        .unwrap()
}

fn text(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).unwrap()
}

fn path(folder: &tempfile::TempDir) -> &str {
    folder.path().to_str().unwrap()
}

#[test]
fn a_new_notebook_issues_at_once() {
    let place = tempfile::tempdir().unwrap();
    let started = program(place.path(), &["start", "mine"]);
    assert_eq!(started.status.code(), Some(0));
    assert!(text(&started.stdout).contains("mine/notebook.yaml"));
    let folder = place.path().join("mine");
    let output = program(&folder, &["issue"]);
    assert_eq!(text(&output.stderr), "", "no errors, no warnings, no progress bar");
    assert_eq!(output.status.code(), Some(0), "every criterion is met");
    assert_eq!(pdfs(&folder), ["DN-1-issue-1.pdf"]);
    assert!(read(&folder, "issued/register.json").contains("\"not_met\": 0"));
    let again = program(&folder, &["issue"]);
    assert_eq!(text(&again.stdout), "0 issued, 1 up to date\n");
    // A folder with anything in it is left alone.
    let refused = program(place.path(), &["start", "mine"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(text(&refused.stderr).contains("mine is not empty"));
    std::fs::create_dir(place.path().join("empty")).unwrap();
    assert_eq!(program(place.path(), &["start", "empty"]).status.code(), Some(0));
    write(place.path(), "file", "x");
    let refused = program(place.path(), &["start", "file"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(text(&refused.stderr).contains("cannot be made"));

    // The record and its fit, the uses, the redline of the same notebook.
    let part = program(&folder, &["part", "EX-N1"]);
    assert_eq!(part.status.code(), Some(0));
    let printed = text(&part.stdout);
    for wanted in [
        "EX-N1  NPN switching transistor",
        "h_FE at I_C = 150\u{a0}mA, V_CE = 5\u{a0}V: min 100, typ 170, max 300",
        "rating V_CEO: 40\u{a0}V",
        "saturation current: ",
        "gain: low by rows of the record",
    ] {
        assert!(printed.contains(wanted), "{wanted}\n{printed}");
    }
    let family = program(&folder, &["part", "EX-R1"]);
    assert!(text(&family.stdout).contains("TCR") && !text(&family.stdout).contains("Model"));
    let unknown = program(&folder, &["part", "EX-N2"]);
    assert_eq!(unknown.status.code(), Some(2));
    assert!(text(&unknown.stderr).contains("did you mean: EX-N1"));
    let used = program(&folder, &["where-used", "EX-R1"]);
    assert_eq!(text(&used.stdout), "load-switch.md  R1, R2, R3  DN-1  (Load switch)\n");
    let nothing = program(&folder, &["redline"]);
    assert!(text(&nothing.stdout).contains("since issue 1: nothing moved"), "{}", text(&nothing.stdout));
    replace(&folder, "load-switch.md", "120 Ω ± 1 %", "100 Ω ± 1 %");
    let moved = program(&folder, &["redline", "DN-1"]);
    let printed = text(&moved.stdout);
    for wanted in [
        "inputs changed, the same program",
        "input  R3: 120 Ω ± 1 % → 100 Ω ± 1 %",
        "result  k in on",
        "margin  saturated: MET on ",
        "file  load-switch.md changed",
    ] {
        assert!(printed.contains(wanted), "{wanted}\n{printed}");
    }
    assert_eq!(pdfs(&folder).len(), 1, "a redline issues nothing");
    let verified = program(&folder, &["verify", "--json"]);
    let value: Value = serde_json::from_slice(&verified.stdout).unwrap();
    assert_eq!(value["notes"][0]["out_of_date"][0], "load-switch.md changed");
    assert_eq!(value["notes"][0]["verdicts"]["not_met"], 0);
}

#[test]
fn exit_statuses_tell_met_from_not_met_from_unusable() {
    let folder = folder();
    let (status, out, err) = tiny_run(&["issue", path(&folder)]);
    assert_eq!(status, 1, "{out}{err}");
    assert!(out.contains("issued/LB-3-issue-1.pdf  1 NOT MET  (never issued)"));
    assert!(out.ends_with("4 issued, 0 up to date\n"));
    let (status, out, _) = tiny_run(&["issue", path(&folder)]);
    assert_eq!(status, 1, "what is up to date counts too");
    assert_eq!(out, "LB-3 issue 1, up to date  1 NOT MET\n0 issued, 4 up to date\n");
    replace(&folder, "more/c.md", "k: 2 ", "k: 1 ");
    assert_eq!(tiny_run(&["issue", path(&folder)]).0, 0);
    replace(&folder, "a.md", "npn: LBN-250", "npn: LBN-25");
    let (status, out, err) = tiny_run(&["issue", path(&folder)]);
    assert_eq!(status, 2);
    assert_eq!(out, "0 issued, 3 up to date, 1 failed\n");
    assert_eq!(
        err,
        "a.md:18:11: error: there is no part record `LBN-25`\n    | Q1: {npn: LBN-25, collector: c, base: b, \
         emitter: ground}\n    |           ^^^^^^\n    expected: the name of a record in parts/\n    did you mean: \
         LBN-250\n1 error\n"
    );
    assert_eq!(tiny_run(&["verify", path(&folder)]).0, 2);
}

#[test]
fn the_notebook_is_worksheets_or_the_folder_here_where_none_is_named() {
    let place = tempfile::tempdir().unwrap();
    assert_eq!(program(place.path(), &["start", "worksheets"]).status.code(), Some(0));
    for arguments in [&["where-used", "EX-R1"][..], &["part", "EX-R1"], &["redline"], &["verify"]] {
        let output = program(place.path(), arguments);
        assert_eq!(output.status.code(), Some(0), "{arguments:?} {}", text(&output.stderr));
    }
    let output = program(place.path(), &["redline", "DN-1"]);
    assert!(text(&output.stdout).contains("DN-1  ") && text(&output.stdout).contains("never issued"));
    // Inside the notebook it is the folder here.
    let output = program(&place.path().join("worksheets"), &["where-used", "EX-R1"]);
    assert_eq!(text(&output.stdout), "load-switch.md  R1, R2, R3  DN-1  (Load switch)\n");
    // A folder of that name without settings is no notebook, and does not stand in the way of one.
    let folder = folder();
    write(&folder, "worksheets/e.md", &sheet("LB-5", "LBN-120", "1"));
    let output = program(folder.path(), &["where-used", "LBN-120"]);
    assert_eq!(text(&output.stdout).lines().count(), 2, "{}", text(&output.stdout));
}

#[test]
fn names_left_out_of_a_new_issue_are_told() {
    let folder = folder();
    let (_, out, _) = tiny_run(&["issue", path(&folder)]);
    assert!(!out.contains("left out"));
    replace(&folder, "d.md", "k: 1 ", "k: 1.1 ");
    let (_, out, _) = tiny_run(&["issue", path(&folder)]);
    assert!(
        out.starts_with(
            "issued/LB-4-issue-2.pdf  1 met  (d.md changed)\n  left out, since this issue is still to be checked: C. \
             Checker and B. Boss\n"
        ),
        "{out}"
    );
}

#[test]
fn verify_prints_failing_verdicts_first_and_writes_nothing() {
    let folder = folder();
    let (status, out, err) = tiny_run(&["verify", path(&folder)]);
    assert_eq!((status, err.as_str()), (1, ""));
    assert!(out.contains("LB-3  Stage LB-3  (more/c.md)\n  NOT MET      small: X <= 100 V; worst 120.0\u{a0}V, limit 100.0\u{a0}V, margin −20.0\u{a0}V (on, cold start)\n  in all: 1 NOT MET; out of date\n"), "{out}");
    assert!(!folder.path().join("issued").exists());
    let (_, json, _) = tiny_run(&["verify", "--json", path(&folder)]);
    let value: Value = serde_json::from_str(&json).unwrap();
    assert_eq!(value["status"], 1);
    let note = &value["notes"][3];
    assert_eq!(
        (note["note"].as_str(), note["judged"][0]["verdict"].as_str()),
        (Some("LB-3"), Some("not-met"))
    );
    assert_eq!(note["judged"][0]["margin"], -20.0);
    assert_eq!(value["notes"].as_array().unwrap().len(), 4);
}

#[test]
fn where_used_names_worksheets_and_designators() {
    let folder = folder();
    let (status, out, _) = tiny_run(&["where-used", "LBN-120", path(&folder)]);
    assert_eq!((status, out.as_str()), (0, "d.md  Q1  LB-4  (Stage LB-4)\n"));
    let (_, json, _) = tiny_run(&["where-used", "LBN-250", "--json", path(&folder)]);
    let value: Value = serde_json::from_str(&json).unwrap();
    let sheets: Vec<&str> =
        value["used"].as_array().unwrap().iter().map(|used| used["worksheet"].as_str().unwrap()).collect();
    assert_eq!(sheets, ["a.md", "b.md", "more/c.md"]);
    assert_eq!(value["record"], "parts/transistors.yaml");
    write(&folder, "parts/more.yaml", "LBN-300:\n  kind: npn\n  source: data sheet LBN-300\n");
    let (status, out, _) = tiny_run(&["where-used", "LBN-300", path(&folder)]);
    assert_eq!((status, out.as_str()), (0, "no worksheet uses LBN-300\n"));
    let (status, out, err) = tiny_run(&["where-used", "LBN-12O", path(&folder)]);
    assert_eq!((status, out.as_str()), (2, ""));
    assert!(err.contains("did you mean: LBN-120"));
    // A part that is named without a record is found too: that is what one looks for.
    replace(&folder, "d.md", "npn: LBN-120", "npn: LBN-999");
    let (status, out, _) = tiny_run(&["where-used", "LBN-999", path(&folder)]);
    assert_eq!((status, out.as_str()), (0, "d.md  Q1  LB-4  (Stage LB-4)\n"));
}

#[test]
fn redlines_are_for_one_note_or_all() {
    let folder = folder();
    let (_, out, _) = tiny_run(&["redline", path(&folder)]);
    assert_eq!(out.matches("never issued").count(), 4);
    tiny_run(&["issue", path(&folder)]);
    replace(&folder, "parts/transistors.yaml", "V_CEO: 60 V", "V_CEO: 50 V");
    let (status, out, err) = tiny_run(&["redline", "LB-3", path(&folder)]);
    assert_eq!((status, err.as_str()), (0, ""));
    assert_eq!(
        out,
        "LB-3  Stage LB-3  (more/c.md)\n  since issue 1: inputs changed, the same program\n  verdict  small: NOT MET \
         by −20.0\u{a0}V → MET by 0.00\u{a0}V\n  input  LBN-250 rating V_CEO: 60\u{a0}V → 50\u{a0}V\n  result  X in \
         on, nominal: 120.0\u{a0}V → 100.0\u{a0}V\n  file  parts/transistors.yaml#LBN-250 changed\n"
            .replace("0.00\u{a0}V", "0\u{a0}V")
    );
    let (_, json, _) = tiny_run(&["redline", path(&folder), "--json"]);
    let value: Value = serde_json::from_str(&json).unwrap();
    let causes: Vec<&str> =
        value["notes"].as_array().unwrap().iter().map(|note| note["cause"].as_str().unwrap()).collect();
    assert_eq!(causes, ["inputs", "inputs", "nothing", "inputs"]);
    let (status, _, err) = tiny_run(&["redline", "LB-33", path(&folder)]);
    assert_eq!(status, 2);
    assert!(err.contains("no worksheet has the note number `LB-33`") && err.contains("did you mean: LB-3"));
}

#[test]
fn issue_tells_as_json_what_it_did() {
    let folder = folder();
    write(&folder, "bad.md", &sheet("LB-9", "LBN-777", "1"));
    let (status, out, err) = tiny_run(&["issue", "--json", "--date", "2026-12-24", path(&folder)]);
    let value: Value = serde_json::from_str(&out).unwrap();
    assert_eq!((status, value["status"].as_u64()), (2, Some(2)));
    assert_eq!(value["issued"][0]["pdf"], "issued/LB-1-issue-1.pdf");
    assert_eq!(value["issued"][0]["date"], "2026-12-24");
    assert_eq!(value["failed"][0], "bad.md");
    assert_eq!(value["diagnostics"][0]["place"]["line"], 18);
    assert!(err.contains("bad.md:18:11"));
}

#[test]
fn what_is_issued_is_a_pdf_that_carries_its_findings() {
    let folder = folder();
    tiny_run(&["issue", path(&folder)]);
    let files = issued(&folder);
    let pdf = &files.iter().find(|(name, _)| name == "LB-1-issue-1.pdf").unwrap().1;
    let document = lopdf::Document::load_mem(pdf).unwrap();
    assert!(!document.get_pages().is_empty());
}

#[test]
fn templates_of_a_notebook_are_typeset_in_a_process_with_a_limit() {
    let folder = folder();
    write(&folder, "templates/cautions.typ", "#import \"house.typ\": *\n\n= A heading of our own\n");
    let (status, _, err) = tiny_run(&["issue", path(&folder)]);
    assert_eq!((status, err.as_str()), (1, ""));
    assert_eq!(pdfs(&folder).len(), 4);
    write(&folder, "templates/body.typ", "#import \"house.typ\": *\n\n#nothing-of-that-name()\n");
    let (status, _, err) = tiny_run(&["issue", path(&folder)]);
    assert_eq!(status, 2);
    assert!(err.contains("templates/body.typ:3:2: error: typesetting: unknown variable"), "{err}");
    assert_eq!(pdfs(&folder).len(), 4);
}

#[test]
fn arguments_that_make_no_sense_are_refused_with_a_word_on_what_does() {
    for (arguments, said) in [
        (&["isue"][..], "issue"),
        (&["issue", "--workers", "0"], "0"),
        (&["issue", "--date", "2026-02-30"], "year-month-day"),
        (&["where-used"], "PART"),
        (&[], "issue"),
    ] {
        let (status, out, err) = tiny_run(arguments);
        assert_eq!((status, out.as_str()), (2, ""), "{arguments:?}");
        assert!(err.contains(said), "{err}");
    }
    let (status, out, err) = tiny_run(&["--help"]);
    assert_eq!((status, err.as_str()), (0, ""));
    for command in ["issue", "verify", "where-used", "redline", "part", "start", "Exit status"] {
        assert!(out.contains(command), "{command}");
    }
    assert!(!out.contains("typeset-sources"));
    let (status, out, _) = tiny_run(&["--version"]);
    assert_eq!((status, out.as_str()), (0, concat!("qsheaf ", env!("CARGO_PKG_VERSION"), "\n")));
}

#[test]
fn a_folder_that_is_no_notebook_is_refused_by_every_command() {
    let empty = tempfile::tempdir().unwrap();
    for arguments in [&["issue"][..], &["verify"], &["redline"], &["where-used", "X"], &["part", "X"]] {
        let output = program(empty.path(), arguments);
        assert_eq!(output.status.code(), Some(2), "{arguments:?}");
        assert!(text(&output.stderr).contains("is no notebook: it has no notebook.yaml"));
        assert_eq!(text(&output.stdout), "");
    }
}

#[test]
fn a_closed_pipe_is_no_reason_to_break_down() {
    let folder = folder();
    let mut child = Command::new(env!("CARGO_BIN_EXE_qsheaf"))
        .args(["where-used", "LBN-250"])
        .current_dir(folder.path())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(0));
    assert_eq!(text(&output.stderr), "");
}
