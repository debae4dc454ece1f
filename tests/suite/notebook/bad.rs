//! Notebooks that cannot be used, wholly or in part.

use std::path::Path;

use qsheaf::notebook::Notebook;
use qsheaf::notebook::shelf::{Shelf, file_names, is_issue, stem};

use super::tiny::{folder, issue, issued, notes, pdfs, read, replace, sheet, told, write};

#[test]
fn a_folder_that_is_no_notebook_says_what_was_expected() {
    let empty = tempfile::tempdir().unwrap();
    let errors = Notebook::open(empty.path()).err().unwrap();
    assert!(errors.0[0].message.contains("has no notebook.yaml"));
    write(&empty, "inside/notebook.yaml", "organisation: O\n");
    let errors = Notebook::open(empty.path()).err().unwrap();
    assert!(errors.0[0].expected.as_ref().unwrap().ends_with("inside"));
    let errors = Notebook::open(&empty.path().join("nowhere")).err().unwrap();
    assert!(errors.0[0].message.contains("nowhere cannot be opened"));
    let file = empty.path().join("inside/notebook.yaml");
    assert!(Notebook::open(&file).err().unwrap().0[0].message.contains("is no folder"));
}

#[test]
fn malformed_settings_are_told_with_their_place_and_the_worksheets_errors_too() {
    let folder = folder();
    write(&folder, "notebook.yaml", "organisation: Harbour\npapr: a4\npolicy: policies/none.yaml\n");
    replace(&folder, "a.md", "title: Stage LB-1", "titel: Stage LB-1");
    let outcome = issue(&folder);
    let found = told(&outcome.diagnostics);
    assert!(found.contains(&"notebook.yaml:2:1: unknown key `papr`".to_owned()), "{found:?}");
    assert!(found.contains(&"a.md:3:1: unknown key `titel`".to_owned()), "{found:?}");
    assert!(outcome.issued.is_empty() && outcome.failed.len() == 4);
    write(&folder, "notebook.yaml", "organisation: Harbour\npolicy: policies/none.yaml\n");
    let found = told(&issue(&folder).diagnostics);
    assert!(
        found.iter().any(|text| text.starts_with("notebook.yaml:2:9: `policies/none.yaml`")),
        "{found:?}"
    );
    write(&folder, "notebook.yaml", "organisation: Harbour\nlogo: ../logo.png\n");
    std::fs::write(folder.path().parent().unwrap().join("logo.png"), "outside").unwrap();
    let found = told(&issue(&folder).diagnostics);
    assert!(found.iter().any(|text| text.contains("leads out of the notebook")), "{found:?}");
}

#[test]
fn two_worksheets_with_one_number_are_refused_both() {
    let folder = folder();
    issue(&folder);
    write(&folder, "twin.md", &sheet("LB-1", "LBN-250", "3"));
    let outcome = issue(&folder);
    assert_eq!(outcome.failed, ["a.md", "twin.md"]);
    let found = told(&outcome.diagnostics);
    assert_eq!(
        found,
        [
            "a.md:2:7: the note number `LB-1` stands in twin.md too",
            "twin.md:2:7: the note number `LB-1` stands in a.md too"
        ]
    );
    assert_eq!(pdfs(&folder).len(), 4);
    // Numbers that only a file system could not tell apart are refused as well.
    write(&folder, "twin.md", &sheet("LB-2/1", "LBN-250", "3"));
    write(&folder, "other.md", &sheet("LB-2_1", "LBN-250", "3"));
    assert_eq!(issue(&folder).failed, ["other.md", "twin.md"]);
}

#[test]
fn a_number_that_does_not_fit_the_notebook_is_an_error_at_its_place() {
    let folder = folder();
    write(&folder, "x.md", &sheet("XY-1", "LBN-250", "1"));
    let outcome = issue(&folder);
    assert_eq!(told(&outcome.diagnostics), ["x.md:2:7: the note number `XY-1` does not fit"]);
    assert_eq!(outcome.issued.len(), 4);
}

#[test]
fn impossible_rows_are_told_where_they_stand_in_the_file() {
    let folder = folder();
    replace(&folder, "parts/transistors.yaml", "min: 110, typ: 200, max: 450", "min: 500, max: 450");
    let outcome = issue(&folder);
    let found = told(&outcome.diagnostics);
    assert!(found[0].starts_with("parts/transistors.yaml:17:14: h_FE: the minimum lies above"), "{found:?}");
    assert_eq!(found[1], "d.md:18:11: the record of `LBN-120` has errors");
    assert_eq!(outcome.failed, ["d.md"]);
    assert_eq!(outcome.issued.len(), 3);
}

#[test]
fn a_part_file_that_cannot_be_read_is_told_and_blamed() {
    let folder = folder();
    issue(&folder);
    write(&folder, "parts/broken.yaml", "LBN-7: {kind: npn\n");
    write(&folder, "e.md", &sheet("LB-5", "LBN-7", "1"));
    let outcome = issue(&folder);
    let found = told(&outcome.diagnostics);
    assert!(found[0].starts_with("parts/broken.yaml:"), "{found:?}");
    assert_eq!(found[1], "e.md:18:11: there is no part record `LBN-7`");
    assert!(outcome.diagnostics.0[1].expected.as_ref().unwrap().contains("parts/broken.yaml"));
    assert_eq!(outcome.current.len(), 4);
    write(&folder, "parts/broken.yaml", "LBN-250:\n  kind: npn\n");
    std::fs::remove_file(folder.path().join("e.md")).unwrap();
    let outcome = issue(&folder);
    let found = told(&outcome.diagnostics);
    assert!(found.contains(&"parts/transistors.yaml:3:1: there are two records `LBN-250`".to_owned()));
    // Which of the two is meant nobody can tell: who names it is refused, and nobody else.
    assert_eq!(outcome.failed, ["a.md", "b.md", "more/c.md"]);
    assert!(found.contains(&"a.md:18:11: the record of `LBN-250` has errors".to_owned()), "{found:?}");
    assert!(outcome.issued.is_empty() && outcome.current.len() == 1);
}

#[test]
fn an_image_that_is_missing_is_told_at_its_place_even_if_the_worksheet_did_not_change() {
    let folder = folder();
    write(&folder, "images/board.png", "an image");
    replace(&folder, "a.md", "# Stage\n", "# Stage\n\n![The board](images/board.png)\n");
    issue(&folder);
    std::fs::remove_file(folder.path().join("images/board.png")).unwrap();
    let outcome = issue(&folder);
    assert!(told(&outcome.diagnostics)[0].starts_with("a.md:13:1: the image `images/board.png`"));
    assert_eq!((outcome.failed.as_slice(), outcome.current.len()), (["a.md".to_owned()].as_slice(), 3));
}

#[test]
fn garbage_and_giants_are_told_and_the_others_issued() {
    let folder = folder();
    std::fs::write(folder.path().join("garbage.md"), [0xff, 0xfe, 0, 1, 2, 200]).unwrap();
    let giant = std::fs::File::create(folder.path().join("giant.md")).unwrap();
    giant.set_len(50 << 20).unwrap();
    std::fs::create_dir(folder.path().join("folder.md")).unwrap();
    let outcome = issue(&folder);
    assert_eq!(outcome.failed, ["garbage.md", "giant.md"]);
    let found = told(&outcome.diagnostics);
    assert!(found[0].starts_with("garbage.md:1:1: ") && found[1].starts_with("giant.md:1:1: the file has"));
    assert_eq!(outcome.issued.len(), 4);
}

#[test]
fn only_worksheets_are_worksheets() {
    let folder = folder();
    for path in ["README.md", "issued/x.md", "parts/x.md", "policies/x.md", "templates/x.md", ".hidden/x.md"]
    {
        write(&folder, path, "no head");
    }
    write(&folder, "inner/notebook.yaml", "organisation: Another\n");
    write(&folder, "inner/x.md", "a worksheet of another notebook");
    write(&folder, "sub/parts/y.md", &sheet("LB-9", "LBN-250", "1"));
    let notebook = Notebook::open(folder.path()).unwrap();
    assert_eq!(notebook.worksheets, ["a.md", "b.md", "d.md", "more/c.md", "sub/parts/y.md"]);
}

#[cfg(unix)]
#[test]
fn links_out_of_the_notebook_are_refused() {
    let folder = folder();
    let outside = tempfile::tempdir().unwrap();
    write(&outside, "secret.md", &sheet("LB-8", "LBN-250", "1"));
    std::os::unix::fs::symlink(outside.path().join("secret.md"), folder.path().join("link.md")).unwrap();
    std::os::unix::fs::symlink(outside.path(), folder.path().join("linked")).unwrap();
    let outcome = issue(&folder);
    assert_eq!(told(&outcome.diagnostics), ["link.md:1:1: the path leads out of the notebook"]);
    assert_eq!(outcome.issued.len(), 4);
}

#[test]
fn a_damaged_register_stops_everything_and_is_left_alone() {
    let folder = folder();
    issue(&folder);
    let text = read(&folder, "issued/register.json");
    let cases = [
        (text[..text.len() / 2].to_owned(), "the register is damaged"),
        (text.replacen("\"register\": 1", "\"register\": 7", 1), "the register has format 7"),
        (text.replacen("\"issue\": 1", "\"issue\": 0", 1), "not numbered in ascending order"),
        (text.replacen("LB-1-issue-1.json", "../../LB-1.json", 1), "is no file of this folder"),
        ("<<<<<<< mine\n".to_owned(), "the register is damaged"),
    ];
    for (damaged, said) in cases {
        write(&folder, "issued/register.json", &damaged);
        let outcome = issue(&folder);
        let found = told(&outcome.diagnostics);
        assert!(found[0].starts_with("issued/register.json:") && found[0].contains(said), "{found:?}");
        assert_eq!(outcome.failed.len(), 4);
        assert_eq!(read(&folder, "issued/register.json"), damaged);
    }
    std::fs::remove_file(folder.path().join("issued/register.json")).unwrap();
    let found = told(&issue(&folder).diagnostics);
    assert!(found[0].contains("but no register.json"), "{found:?}");
    write(&folder, "issued/register.json", &text);
    assert_eq!(issue(&folder).current.len(), 4);
}

#[test]
fn a_folder_of_issues_that_cannot_be_written_is_told() {
    let folder = folder();
    write(&folder, "issued", "a file where the folder should be");
    let outcome = issue(&folder);
    assert!(told(&outcome.diagnostics)[0].starts_with("issued/ cannot be written"));
    assert_eq!(outcome.failed.len(), 4);
}

#[test]
fn one_run_at_a_time_and_a_lock_that_was_left_does_not_block() {
    let folder = folder();
    let held = Shelf::open(folder.path()).ok().unwrap();
    let outcome = issue(&folder);
    assert!(told(&outcome.diagnostics)[0].contains("another run is issuing"));
    assert!(outcome.issued.is_empty() && pdfs(&folder).is_empty());
    drop(held);
    assert!(folder.path().join("issued/.lock").exists());
    assert_eq!(issue(&folder).issued.len(), 4);
}

#[test]
fn two_runs_at_once_issue_every_note_once() {
    let folder = folder();
    let path: &Path = folder.path();
    let issued_notes: usize = std::thread::scope(|scope| {
        let runs: Vec<_> = (0..4).map(|_| scope.spawn(move || issue(path).issued.len())).collect();
        runs.into_iter().map(|run| run.join().unwrap()).sum()
    });
    let rest = issue(path);
    assert_eq!(issued_notes + rest.issued.len(), 4);
    assert!(issued(path).iter().all(|(name, _)| !name.contains("issue-2")));
}

#[test]
fn files_that_no_register_knows_are_kept_if_they_are_right_and_set_aside_if_not() {
    let folder = folder();
    let other = tempfile::tempdir().unwrap();
    issue(&folder);
    let made = issued(&folder);
    let pdf = made.iter().find(|(name, _)| name == "LB-1-issue-1.pdf").unwrap().1.clone();
    // A run that was stopped between naming its files and registering them.
    for path in ["notebook.yaml", "parts/transistors.yaml", "a.md", "b.md"] {
        write(&other, path, &read(&folder, path));
    }
    write(&other, "issued/register.json", "{\"register\": 1, \"notes\": {}}");
    std::fs::write(other.path().join("issued/LB-1-issue-1.pdf"), &pdf).unwrap();
    write(&other, "issued/LB-2-issue-1.pdf", "made from inputs that have changed since");
    write(&other, "issued/LB-7-issue-3.json", "of a note that is gone");
    write(&other, "issued/.aside-xyz", "half of");
    write(&other, "issued/LB-1-issue-1-signed.pdf", "somebody's own file");
    let outcome = issue(&other);
    assert_eq!(notes(&outcome.issued), [("LB-1", 1), ("LB-2", 1)]);
    let after = issued(&other);
    let names: Vec<&str> = after.iter().map(|(name, _)| name.as_str()).collect();
    assert_eq!(after.iter().find(|(name, _)| name == "LB-1-issue-1.pdf").unwrap().1, pdf);
    assert!(!names.contains(&".aside-xyz") && names.contains(&"LB-1-issue-1-signed.pdf"));
    let aside: Vec<&&str> = names.iter().filter(|name| name.starts_with("set-aside/")).collect();
    assert_eq!(aside.len(), 2, "{names:?}");
    assert!(
        aside[0].starts_with("set-aside/LB-2-issue-1-") && aside[1].starts_with("set-aside/LB-7-issue-3-")
    );
    let kept = after.iter().find(|(name, _)| name.starts_with("set-aside/LB-2")).unwrap();
    assert_eq!(kept.1, b"made from inputs that have changed since");
    assert!(issue(&other).diagnostics.0.is_empty());
}

#[test]
fn note_numbers_become_names_that_every_disk_takes() {
    assert_eq!(file_names("LB-101", 2), ["LB-101-issue-2.pdf", "LB-101-issue-2.json"]);
    assert_eq!(stem("LB 1/2:ä"), "LB_1_2_ä");
    assert_eq!(stem("../x"), "_.._x");
    assert!(is_issue("LB-101-issue-2.pdf") && is_issue("a-issue-1-issue-10.json"));
    for name in ["register.json", "LB-1-issue-.pdf", "-issue-1.pdf", "LB-1-issue-1-signed.pdf", "x.pdf"] {
        assert!(!is_issue(name), "{name}");
    }
}
