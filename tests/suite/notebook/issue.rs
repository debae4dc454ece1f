//! What is out of date, what is issued, what the register says of it.

use qsheaf::notebook::register::{self, Role};
use qsheaf::notebook::{self, Calculation, Event, Notebook, Order, Press};
use qsheaf::redline::Cause;

use super::tiny::{self, folder, issue, issue_by, issued, notes, pdfs, read, replace, studied, told, write};

#[test]
fn a_new_notebook_is_issued_whole() {
    let folder = folder();
    let outcome = issue(&folder);
    assert!(outcome.diagnostics.0.is_empty(), "{:#?}", outcome.diagnostics);
    assert_eq!(notes(&outcome.issued), [("LB-1", 1), ("LB-2", 1), ("LB-4", 1), ("LB-3", 1)]);
    assert_eq!(outcome.issued[0].due, ["never issued"]);
    let names: Vec<String> = issued(&folder).into_iter().map(|(name, _)| name).collect();
    assert_eq!(names.iter().filter(|name| name.starts_with("LB-")).count(), 8);
    assert!(names.contains(&"LB-3-issue-1.json".to_owned()));
    // The first issue is for those who are to check it: their names stand in it.
    assert!(read(&folder, "issued/LB-1-issue-1.pdf").contains("checker Some(\"C. Checker\")"));
    assert!(outcome.issued[2].entry.verdicts.all_met() && !outcome.issued[3].entry.verdicts.all_met());
}

#[test]
fn the_register_names_every_input_and_every_file_with_its_digest() {
    let folder = folder();
    issue(&folder);
    let register = register::read(folder.path()).unwrap();
    let entry = register.last("LB-3").unwrap();
    let inputs: Vec<(Role, &str)> =
        entry.inputs.iter().map(|input| (input.role, input.path.as_str())).collect();
    assert_eq!(
        inputs,
        [
            (Role::Worksheet, "more/c.md"),
            (Role::Settings, "notebook.yaml"),
            (Role::Part, "parts/transistors.yaml#LBN-250"),
        ]
    );
    let files = issued(&folder);
    for stored in register.stored() {
        let (_, bytes) = files.iter().find(|(name, _)| *name == stored.file).unwrap();
        assert_eq!(qsheaf::source::Digest::of(bytes), stored.digest);
    }
    // Written and read again, the register is the same, byte for byte.
    let text = read(&folder, "issued/register.json");
    assert_eq!(String::from_utf8(register.to_bytes().unwrap()).unwrap(), text);
    assert!(text.lines().count() > 100, "meant for readers");
}

#[test]
fn nothing_changed_issues_nothing_and_studies_nothing() {
    let folder = folder();
    issue(&folder);
    let before = issued(&folder);
    for path in ["a.md", "notebook.yaml", "parts/transistors.yaml"] {
        let text = read(&folder, path);
        write(&folder, path, &text); // touched, the same content
    }
    let (outcome, seen) = studied(&folder);
    assert!(seen.is_empty(), "{seen:?}");
    assert!(outcome.issued.is_empty() && outcome.current.len() == 4);
    assert_eq!(issued(&folder), before);
}

#[test]
fn a_changed_worksheet_is_issued_again_and_no_other() {
    let folder = folder();
    issue(&folder);
    let before = issued(&folder);
    replace(&folder, "b.md", "k: 1.5", "k: 1.6");
    let (outcome, seen) = studied(&folder);
    assert_eq!(seen, ["b.md"]);
    assert_eq!(notes(&outcome.issued), [("LB-2", 2)]);
    assert_eq!(outcome.issued[0].due, ["b.md changed"]);
    let after = issued(&folder);
    for (name, bytes) in &before {
        if name.starts_with("LB-") {
            assert!(after.contains(&(name.clone(), bytes.clone())), "{name} was touched");
        }
    }
    assert_eq!(after.len(), before.len() + 2);
}

#[test]
fn a_changed_record_touches_its_users_only() {
    let folder = folder();
    issue(&folder);
    replace(&folder, "parts/transistors.yaml", "V_CEO: 60 V", "V_CEO: 50 V");
    let outcome = issue(&folder);
    assert_eq!(notes(&outcome.issued), [("LB-1", 2), ("LB-2", 2), ("LB-3", 2)]);
    assert_eq!(outcome.issued[0].due, ["parts/transistors.yaml#LBN-250 changed"]);
    assert_eq!(notes(&outcome.current), [("LB-4", 1)]);
    let moves = outcome.issued[2].moves.as_ref().unwrap();
    assert_eq!((moves.since, moves.cause()), (1, Cause::Inputs));
    let rating = &moves.inputs[0];
    assert_eq!(rating.symbol, "LBN-250 rating V_CEO");
    assert_eq!((rating.old.as_deref(), rating.new.as_deref()), (Some("60\u{a0}V"), Some("50\u{a0}V")));
    assert_eq!((moves.results.len(), moves.results[0].end.as_str()), (1, "nominal"));
    assert!(moves.verdicts[0].flipped(), "2 times 50 V is met, 2 times 60 V was not");
    // A word between the records, or a record that nobody uses yet, touches nobody.
    replace(&folder, "parts/transistors.yaml", "# The smaller one.", "# The smaller one, for sensors.");
    let more = format!("{}\nLBN-9:\n  kind: npn\n", read(&folder, "parts/transistors.yaml"));
    write(&folder, "parts/transistors.yaml", &more);
    assert!(issue(&folder).issued.is_empty());
}

#[test]
fn a_record_that_moves_to_another_file_is_a_change() {
    let folder = folder();
    issue(&folder);
    let (first, second) = tiny::PARTS.split_once("# The smaller one.").unwrap();
    write(&folder, "parts/transistors.yaml", first);
    write(&folder, "parts/small.yaml", second);
    let outcome = issue(&folder);
    assert_eq!(notes(&outcome.issued), [("LB-4", 2)]);
    let moves = outcome.issued[0].moves.as_ref().unwrap();
    assert!(moves.inputs.is_empty() && moves.results.is_empty() && moves.files.len() == 2);
}

#[test]
fn settings_policy_templates_and_images_are_inputs_too() {
    let folder = folder();
    write(&folder, "policies/p.yaml", "name: P\n");
    write(&folder, "images/board.png", "not really an image");
    write(&folder, "notebook.yaml", "organisation: Harbour Lights Workshop\npolicy: policies/p.yaml\n");
    replace(&folder, "a.md", "# Stage\n", "# Stage\n\n![The board](images/board.png)\n");
    issue(&folder);
    assert!(issue(&folder).issued.is_empty());
    write(&folder, "images/board.png", "another image");
    assert_eq!(notes(&issue(&folder).issued), [("LB-1", 2)]);
    write(&folder, "policies/p.yaml", "name: Q\n");
    assert_eq!(issue(&folder).issued.len(), 4);
    write(&folder, "templates/title.typ", "A title.\n");
    assert_eq!(issue(&folder).issued.len(), 4);
    replace(&folder, "notebook.yaml", "Workshop", "Works");
    assert_eq!(issue(&folder).issued.len(), 4);
    assert!(issue(&folder).issued.is_empty());
}

#[test]
fn a_new_program_version_is_told_apart_from_changed_inputs() {
    let folder = folder();
    issue_by("1.0.0", &folder, 2);
    let outcome = issue_by("1.1.0", &folder, 2);
    assert_eq!(outcome.issued.len(), 4);
    assert_eq!(outcome.issued[0].due, ["program 1.1.0 instead of 1.0.0"]);
    let moves = outcome.issued[0].moves.as_ref().unwrap();
    assert_eq!(moves.cause(), Cause::Program);
    assert_eq!(moves.program, Some(("1.0.0".into(), "1.1.0".into())));
    replace(&folder, "a.md", "k: 1 ", "k: 1.2 ");
    let outcome = issue_by("1.2.0", &folder, 2);
    let causes: Vec<Cause> =
        outcome.issued.iter().map(|issued| issued.moves.as_ref().unwrap().cause()).collect();
    assert_eq!(causes, [Cause::Both, Cause::Program, Cause::Program, Cause::Program]);
    assert!(issue_by("1.2.0", &folder, 2).issued.is_empty());
}

#[test]
fn names_of_checker_and_approver_go_when_anything_moved_and_stay_when_nothing_did() {
    let folder = folder();
    let first = issue(&folder);
    assert!(first.issued.iter().all(|issued| issued.entry.withheld.names().is_empty()));
    // The next revision moves nothing: whoever checked issue 1 has checked this one.
    replace(&folder, "b.md", "revision: A", "revision: B");
    let outcome = issue(&folder);
    assert!(!outcome.issued[0].entry.signatures_cleared);
    assert!(read(&folder, "issued/LB-2-issue-2.pdf").contains("checker Some(\"C. Checker\")"));
    replace(&folder, "a.md", "k: 1 ", "k: 1.2 ");
    let outcome = issue(&folder);
    assert!(outcome.issued[0].entry.signatures_cleared);
    assert!(read(&folder, "issued/LB-1-issue-2.pdf").contains("checker None approver None"));
    assert_eq!(outcome.issued[0].entry.withheld.names(), ["C. Checker", "B. Boss"]);
    // A word of the prose does move something.
    replace(&folder, "a.md", "# Stage\n", "# Stage\n\nAnother sentence.\n");
    assert!(issue(&folder).issued[0].entry.signatures_cleared);
    // So does a new version of the program.
    assert!(issue_by("2.0.0", &folder, 1).issued.iter().all(|issued| issued.entry.signatures_cleared));
}

#[test]
fn a_name_that_was_left_out_stays_out_until_it_is_written_anew() {
    let folder = folder();
    issue(&folder);
    let signed = |issue: u32| {
        let page = read(&folder, &format!("issued/LB-1-issue-{issue}.pdf"));
        page.lines().nth(1).unwrap().to_owned()
    };
    replace(&folder, "a.md", "k: 1 ", "k: 1.2 ");
    issue(&folder);
    // Issue 3 moves nothing, but nobody has checked issue 2 either: the names in the head are those of issue 1.
    replace(&folder, "a.md", "revision: A", "revision: B");
    let outcome = issue(&folder);
    assert_eq!(notes(&outcome.issued), [("LB-1", 3)]);
    assert!(!outcome.issued[0].entry.signatures_cleared);
    assert_eq!(outcome.issued[0].entry.withheld.names(), ["C. Checker", "B. Boss"]);
    assert_eq!(signed(3), "checker None approver None");
    // Somebody else checks it: that name stands, the approver's is still the old one.
    replace(&folder, "a.md", "checker: C. Checker", "checker: D. Checker");
    issue(&folder);
    assert_eq!(signed(4), "checker Some(\"D. Checker\") approver None");
    // The approver's name is taken out, and written again by who approves what now stands there.
    replace(&folder, "a.md", "approver: B. Boss\n", "");
    issue(&folder);
    assert_eq!(signed(5), "checker Some(\"D. Checker\") approver None");
    replace(&folder, "a.md", "checker: D. Checker\n", "checker: D. Checker\napprover: B. Boss\n");
    let outcome = issue(&folder);
    assert_eq!(signed(6), "checker Some(\"D. Checker\") approver Some(\"B. Boss\")");
    assert!(outcome.issued[0].entry.withheld.names().is_empty());
}

#[test]
fn any_number_of_workers_gives_the_same_bytes() {
    let all: Vec<_> = [1, 2, 3, 64]
        .into_iter()
        .map(|workers| {
            let folder = folder();
            issue_by("1.0.0", &folder, workers);
            replace(&folder, "parts/transistors.yaml", "V_CEO: 60 V", "V_CEO: 50 V");
            issue_by("1.0.0", &folder, workers);
            issued(&folder)
        })
        .collect();
    assert!(all.windows(2).all(|pair| pair[0] == pair[1]));
}

#[test]
fn errors_of_one_worksheet_hinder_no_other_and_all_are_told() {
    let folder = folder();
    issue(&folder);
    replace(&folder, "a.md", "k: 1 ", "k: -1 ");
    replace(&folder, "b.md", "npn: LBN-250", "npn: LBN-251");
    replace(&folder, "d.md", "k: 1 ", "k: 3 ");
    let outcome = issue(&folder);
    assert_eq!(notes(&outcome.issued), [("LB-4", 2)]);
    assert_eq!(outcome.failed, ["a.md", "b.md"]);
    let told = told(&outcome.diagnostics);
    assert_eq!(told, ["b.md:18:11: there is no part record `LBN-251`", "a.md:14:1: the value is below zero"]);
    assert_eq!(outcome.diagnostics.0[0].nearest.as_deref(), Some("LBN-250"));
    assert_eq!(pdfs(&folder).len(), 5);
}

#[test]
fn a_worker_that_breaks_down_is_told_and_the_others_go_on() {
    let folder = folder();
    let notebook = Notebook::open(folder.path()).unwrap();
    let outcome = notebook::issue(
        &notebook,
        &Press {
            calculation: Calculation {
                program: "1.0.0",
                study: &|bundle, path| {
                    assert!(path != "b.md", "what no input should reach");
                    tiny::study("1.0.0", bundle, path)
                },
            },
            typeset: &|findings, issue, moves, _| Ok(tiny::typeset(findings, issue, moves)),
        },
        &Order { workers: 2, date: None },
        &mut |_| {},
    );
    assert_eq!(outcome.issued.len(), 3);
    assert_eq!(outcome.failed, ["b.md"]);
    assert!(told(&outcome.diagnostics)[0].contains("what no input should reach"));
}

#[test]
fn a_date_of_issue_may_be_given() {
    let folder = folder();
    let notebook = Notebook::open(folder.path()).unwrap();
    let mut events = Vec::new();
    let outcome = notebook::issue(
        &notebook,
        &Press {
            calculation: Calculation {
                program: "1.0.0",
                study: &|bundle, path| tiny::study("1.0.0", bundle, path),
            },
            typeset: &|findings, issue, moves, _| Ok(tiny::typeset(findings, issue, moves)),
        },
        &Order { workers: 1, date: Some("2026-12-24".into()) },
        &mut |event| {
            events.push(match event {
                Event::Begin { due, all } => format!("{due} of {all}"),
                Event::Done { worksheet } => worksheet.to_owned(),
            });
        },
    );
    assert_eq!(outcome.issued[0].entry.date, "2026-12-24");
    assert!(read(&folder, "issued/LB-1-issue-1.pdf").contains("of 2026-12-24 by"));
    assert_eq!(events.len(), 5);
    assert_eq!(events[0], "4 of 4");
    // The date printed is no input: the note stays up to date.
    assert!(issue(&folder).issued.is_empty());
}

#[test]
fn findings_that_are_gone_are_said_and_the_files_still_compared() {
    let folder = folder();
    issue(&folder);
    std::fs::remove_file(folder.path().join("issued/LB-1-issue-1.json")).unwrap();
    write(&folder, "issued/LB-2-issue-1.json", "{\"schema\": 99}");
    replace(&folder, "parts/transistors.yaml", "V_CEO: 60 V", "V_CEO: 50 V");
    let outcome = issue(&folder);
    let first = outcome.issued[0].moves.as_ref().unwrap();
    assert!(first.incomparable.as_ref().unwrap().contains("cannot be read"));
    assert_eq!(first.files.len(), 1);
    let second = outcome.issued[1].moves.as_ref().unwrap();
    assert!(second.incomparable.as_ref().unwrap().contains("not those that the register knows"));
    assert!(outcome.issued.iter().all(|issued| issued.entry.signatures_cleared));
    assert!(told(&outcome.diagnostics).iter().any(|text| text.contains("LB-1-issue-1.json is gone")));
}

#[test]
fn a_renumbered_note_begins_anew_and_leaves_the_old_issues() {
    let folder = folder();
    issue(&folder);
    replace(&folder, "a.md", "note: LB-1", "note: LB-10");
    let outcome = issue(&folder);
    assert_eq!(notes(&outcome.issued), [("LB-10", 1)]);
    assert!(pdfs(&folder).contains(&"LB-1-issue-1.pdf".to_owned()));
    assert!(issue(&folder).issued.is_empty());
}
