//! A run that is stopped at any instant leaves the notebook as it was or finished.

use std::path::Path;
use std::process::{Command, Stdio};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::time::Duration;

use qsheaf::notebook::register;
use qsheaf::notebook::{self, Calculation, Notebook, Order, Press};
use qsheaf::source::Digest;

use super::tiny::{self, folder, issue, issued, pdfs, sheet, write};

/// The file that tells the child below what to do; without it the child does nothing.
const ASKED: &str = "asked-of-the-child.txt";

/// The process that is stopped: it issues the notebook in its working folder, and ends itself without warning after so
/// many steps (studies and typesettings) as the file says; at 0 it goes on, slowly, until it is stopped from outside.
#[test]
fn child() {
    let Ok(asked) = std::fs::read_to_string(ASKED) else { return };
    let stop: usize = asked.trim().parse().unwrap();
    let steps = AtomicUsize::new(0);
    let step = || {
        if steps.fetch_add(1, Ordering::SeqCst) + 1 == stop {
            std::process::abort();
        }
        std::thread::sleep(Duration::from_millis(1));
    };
    let notebook = Notebook::open(Path::new(".")).unwrap();
    notebook::issue(
        &notebook,
        &Press {
            calculation: Calculation {
                program: "1.0.0",
                study: &|bundle, path| {
                    step();
                    tiny::study("1.0.0", bundle, path)
                },
            },
            typeset: &|findings, issue, moves, _| {
                step();
                Ok(tiny::typeset(findings, issue, moves))
            },
        },
        &Order { workers: 2, date: None },
        &mut |_| {},
    );
}

fn start(folder: &Path, stop: usize) -> std::process::Child {
    write(folder, ASKED, &stop.to_string());
    Command::new(std::env::current_exe().unwrap())
        .args(["--exact", "notebook::kill::child", "--test-threads", "1"])
        .current_dir(folder)
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap()
}

/// Every PDF is whole, every file of the register is there with its digest.
fn sound(folder: &Path) {
    for (name, bytes) in issued(folder) {
        if name.ends_with(".pdf") {
            assert!(bytes.starts_with(b"PDF of ") && bytes.ends_with(b"\n"), "{name} is not whole");
        }
    }
    let register = register::read(folder).unwrap();
    for stored in register.stored() {
        let bytes = std::fs::read(folder.join("issued").join(&stored.file)).unwrap();
        assert_eq!(Digest::of(&bytes), stored.digest, "{}", stored.file);
    }
}

/// Issues the rest and compares with a notebook that was never disturbed.
fn completes(folder: &Path, undisturbed: &Path) {
    sound(folder);
    let outcome = issue(folder);
    assert!(!outcome.diagnostics.has_errors(), "{:#?}", outcome.diagnostics);
    sound(folder);
    let all = |folder: &Path| -> Vec<(String, Vec<u8>)> {
        issued(folder).into_iter().filter(|(name, _)| !name.starts_with("set-aside/")).collect()
    };
    assert!(all(folder) == all(undisturbed), "other files than without the disturbance");
    assert!(issue(folder).issued.is_empty());
}

#[test]
fn a_run_that_ends_at_any_step_is_completed_by_the_next() {
    let undisturbed = folder();
    issue(&undisturbed);
    for stop in 1..=8 {
        let folder = folder();
        let ended = start(folder.path(), stop).wait().unwrap();
        assert!(!ended.success());
        assert!(pdfs(&folder).len() < 4);
        completes(folder.path(), undisturbed.path());
    }
}

#[test]
fn a_run_that_is_killed_at_any_instant_is_completed_by_the_next() {
    let many = |folder: &Path| {
        for index in 10..40 {
            let text = sheet(&format!("LB-{index}"), "LBN-120", &format!("{index}"));
            write(folder, &format!("{index}.md"), &text);
        }
    };
    let undisturbed = folder();
    many(undisturbed.path());
    issue(&undisturbed);
    let mut interrupted = 0;
    for round in 0..24_u64 {
        let folder = folder();
        many(folder.path());
        let mut child = start(folder.path(), 0);
        // Spread over the run by a fixed sequence; where exactly a kill falls is the machine's affair.
        std::thread::sleep(Duration::from_micros(4_000 + round * 7_919 % 23 * 4_000));
        child.kill().unwrap();
        child.wait().unwrap();
        let left = pdfs(&folder).len();
        interrupted += usize::from(left > 0 && left < 34);
        if folder.path().join("issued/register.json").exists() || left > 0 {
            completes(folder.path(), undisturbed.path());
        } else {
            assert_eq!(issue(&folder).issued.len(), 34);
        }
    }
    println!("{interrupted} of 24 runs were stopped in the middle");
}
