//! The benchmark: `cargo bench`. Whole processes of the release build, medians and ratios in one run.
//!
//! - **note**: issuing the largest demonstration note (read, solve, draw, typeset, write) against typesetting alone of the same
//!   generated sources, each in a fresh process, in turns, 20 pairs. At most 1.3.
//! - **unchanged**: `issue` on 200 worksheets of which nothing changed (all times touched), against reading and hashing the same
//!   files. At most 5.
//! - **affected**: 1, 10, 100 of 200 worksheets changed: exactly so many new PDFs, in at most the time for nothing changed plus
//!   1.2 k / 200 of issuing all.
//! - **memory**: peak resident memory while issuing 200 notes with 2 workers. Below 400 MB (Linux only).
//! - **kills**: 100 runs killed at random instants: every PDF is whole, the register agrees with the folder, the next run
//!   completes.
//!
//! `cargo bench -- note unchanged` runs some of them.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use qsheaf::report::{self, Issue, Status};
use qsheaf::source::{Bundle, Digest, File};
use qsheaf::study::study;

const LARGEST: &str = "lamp-switch.md";
const NOTES: usize = 200;

fn program() -> &'static str {
    env!("CARGO_BIN_EXE_qsheaf")
}

fn demo() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("worksheets")
}

fn main() {
    let asked: Vec<String> = std::env::args().skip(1).filter(|argument| !argument.starts_with('-')).collect();
    let wants = |name: &str| asked.is_empty() || asked.iter().any(|asked| asked == name);
    let work = tempfile::tempdir().expect("a folder to work in");
    let mut kept = true;
    if wants("note") {
        kept &= note(work.path());
    }
    if ["unchanged", "affected", "memory", "kills"].iter().any(|name| wants(name)) {
        let notebook = work.path().join("many");
        many(&notebook);
        let all = first_issue(&notebook, wants("memory"), &mut kept);
        let nothing = wants("unchanged").then(|| unchanged(&notebook, &mut kept));
        if wants("affected") {
            let nothing = nothing.unwrap_or_else(|| unchanged(&notebook, &mut kept));
            affected(&notebook, nothing, all, &mut kept);
        }
        if wants("kills") {
            kept &= kills(&notebook);
        }
    }
    println!("{}", if kept { "every bound is kept" } else { "A BOUND IS MISSED" });
    std::process::exit(if kept { 0 } else { 1 });
}

fn verdict(kept: bool) -> &'static str {
    if kept { "kept" } else { "MISSED" }
}

fn median(mut times: Vec<Duration>) -> Duration {
    times.sort();
    times[times.len() / 2]
}

fn copy(from: &Path, to: &Path) {
    std::fs::create_dir_all(to).unwrap();
    for entry in std::fs::read_dir(from).unwrap().map(Result::unwrap) {
        let (source, target) = (entry.path(), to.join(entry.file_name()));
        if source.is_dir() {
            if entry.file_name() != "issued" {
                copy(&source, &target);
            }
        } else {
            std::fs::copy(&source, &target).unwrap();
        }
    }
}

/// The demonstration notebook without its worksheets.
fn base(folder: &Path) {
    copy(&demo(), folder);
    for entry in std::fs::read_dir(folder).unwrap().map(Result::unwrap) {
        if entry.path().extension().is_some_and(|ending| ending == "md") {
            std::fs::remove_file(entry.path()).unwrap();
        }
    }
}

fn read(folder: &Path, paths: &[&str]) -> Bundle {
    let mut bundle = Bundle::default();
    for path in paths {
        bundle.insert(File::new(path, std::fs::read(folder.join(path)).unwrap()));
    }
    bundle
}

fn issue(notebook: &Path, workers: usize) -> Duration {
    let start = Instant::now();
    let status = Command::new(program())
        .args(["issue", "--workers", &workers.to_string()])
        .arg(notebook)
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .status()
        .unwrap();
    assert!(matches!(status.code(), Some(0 | 1)), "issue ended with {status}");
    start.elapsed()
}

fn note(work: &Path) -> bool {
    let notebook = work.join("one");
    base(&notebook);
    std::fs::copy(demo().join(LARGEST), notebook.join(LARGEST)).unwrap();
    let parts = ["parts/transistors.yaml", "parts/passives.yaml", "parts/diodes.yaml"];
    let mut paths = vec!["notebook.yaml", "policies/harbour.yaml", LARGEST];
    paths.extend(parts);
    let bundle = read(&notebook, &paths);
    let findings = study(&bundle, LARGEST).expect("the demonstration is right");
    let order = Issue {
        number: 1,
        date: findings.note.date.clone(),
        status: Status::Issued,
        program: findings.program.clone(),
    };
    let sources = report::source(&findings, &order, None, &bundle).expect("sources").to_bytes();
    let file = work.join("sources");
    std::fs::write(&file, &sources).unwrap();
    let typeset = || {
        let start = Instant::now();
        let out = Command::new(program())
            .arg("typeset-sources")
            .stdin(std::fs::File::open(&file).unwrap())
            .stderr(Stdio::null())
            .output()
            .unwrap();
        assert!(out.status.success() && out.stdout.starts_with(b"%PDF"));
        start.elapsed()
    };
    let (mut whole, mut alone) = (Vec::new(), Vec::new());
    for _ in 0..20 {
        let _ = std::fs::remove_dir_all(notebook.join("issued"));
        whole.push(issue(&notebook, 2));
        alone.push(typeset());
    }
    let studied = (0..20).map(|_| {
        let start = Instant::now();
        study(&bundle, LARGEST).expect("the demonstration is right");
        start.elapsed()
    });
    println!("note: its study alone, in a warm process: {:.1?}", median(studied.collect()));
    let (whole, alone) = (median(whole), median(alone));
    let ratio = whole.as_secs_f64() / alone.as_secs_f64();
    println!(
        "note: issue {whole:.1?}, typesetting alone {alone:.1?}: ratio {ratio:.2} (at most 1.3: {})",
        verdict(ratio <= 1.3)
    );
    ratio <= 1.3
}

/// A notebook of 200 worksheets: the five of the demonstration, renumbered.
fn many(notebook: &Path) {
    base(notebook);
    let sheets: Vec<String> =
        ["lamp-switch", "telemetry-switch", "daylight-sensor", "horn-relay", "microphone-stage"]
            .iter()
            .map(|name| std::fs::read_to_string(demo().join(format!("{name}.md"))).unwrap())
            .collect();
    for i in 0..NOTES {
        let text = &sheets[i % sheets.len()];
        let number = text.lines().find_map(|line| line.strip_prefix("note: ")).unwrap();
        let text = text.replacen(&format!("note: {number}"), &format!("note: LB-{}", 1000 + i), 1);
        std::fs::write(notebook.join(format!("sheet-{i:03}.md")), text).unwrap();
    }
}

fn pdfs(notebook: &Path) -> usize {
    let entries = std::fs::read_dir(notebook.join("issued")).unwrap().map(Result::unwrap);
    entries.filter(|entry| entry.path().extension().is_some_and(|ending| ending == "pdf")).count()
}

fn first_issue(notebook: &Path, memory: bool, kept: &mut bool) -> Duration {
    let start = Instant::now();
    let mut child = Command::new(program())
        .args(["issue", "--workers", "2"])
        .arg(notebook)
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let mut peak = 0_u64;
    loop {
        if let Ok(status) = std::fs::read_to_string(format!("/proc/{}/status", child.id())) {
            let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"));
            let kilobytes = line.and_then(|line| line.split_whitespace().next()?.parse().ok());
            peak = peak.max(kilobytes.unwrap_or(0));
        }
        if child.try_wait().unwrap().is_some() {
            break;
        }
        std::thread::sleep(Duration::from_millis(20));
    }
    let all = start.elapsed();
    assert_eq!(pdfs(notebook), NOTES);
    println!("all: {NOTES} notes in {all:.1?}");
    if memory {
        let right = peak > 0 && peak < 400_000;
        println!("memory: peak {} MB with 2 workers (below 400: {})", peak / 1000, verdict(right));
        *kept &= right;
    }
    all
}

/// Every file below a folder but what was issued.
fn inputs(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(folder).unwrap().map(Result::unwrap) {
        let path = entry.path();
        if path.is_dir() {
            if entry.file_name() != "issued" {
                inputs(&path, found);
            }
        } else {
            found.push(path);
        }
    }
}

fn unchanged(notebook: &Path, kept: &mut bool) -> Duration {
    let mut files = Vec::new();
    inputs(notebook, &mut files);
    for file in &files {
        let text = std::fs::read(file).unwrap();
        std::fs::write(file, text).unwrap();
    }
    let before = pdfs(notebook);
    let (mut runs, mut hashes) = (Vec::new(), Vec::new());
    for _ in 0..20 {
        runs.push(issue(notebook, 2));
        // The baseline is a process too, so that both pay for starting one.
        let start = Instant::now();
        assert!(Command::new(program()).arg("--version").stdout(Stdio::null()).status().unwrap().success());
        for file in &files {
            std::hint::black_box(Digest::of(&std::fs::read(file).unwrap()));
        }
        hashes.push(start.elapsed());
    }
    assert_eq!(pdfs(notebook), before, "something was issued although nothing changed");
    let (run, hash) = (median(runs), median(hashes));
    let ratio = run.as_secs_f64() / hash.as_secs_f64();
    println!(
        "unchanged: issue {run:.1?}, reading and hashing {hash:.1?}: ratio {ratio:.2} (at most 5: {})",
        verdict(ratio <= 5.0)
    );
    *kept &= ratio <= 5.0;
    run
}

fn affected(notebook: &Path, nothing: Duration, all: Duration, kept: &mut bool) {
    for (round, k) in [1_usize, 10, 100].into_iter().enumerate() {
        let before = pdfs(notebook);
        for i in 0..k {
            let path = notebook.join(format!("sheet-{:03}.md", i * (NOTES / k)));
            let text = std::fs::read_to_string(&path).unwrap();
            std::fs::write(&path, format!("{text}\nRound {round} changed this note.\n")).unwrap();
        }
        let time = issue(notebook, 2);
        let bound = nothing + all.mul_f64(1.2 * k as f64 / NOTES as f64);
        let new = pdfs(notebook) - before;
        let right = new == k && time <= bound;
        println!(
            "affected: {k} of {NOTES}: {new} new PDFs in {time:.1?} (at most {bound:.1?}: {})",
            verdict(right)
        );
        *kept &= right;
    }
}

fn kills(notebook: &Path) -> bool {
    let mut seed = 20_261_201_u64;
    let mut random = || {
        seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (seed >> 33) as f64 / (1_u64 << 31) as f64
    };
    let small = notebook.with_file_name("kills");
    base(&small);
    for i in 0..10 {
        std::fs::copy(notebook.join(format!("sheet-{i:03}.md")), small.join(format!("sheet-{i:03}.md")))
            .unwrap();
    }
    let whole = issue(&small, 2);
    let mut right = true;
    for round in 0..100 {
        for i in 0..10 {
            let path = small.join(format!("sheet-{i:03}.md"));
            let text = std::fs::read_to_string(&path).unwrap();
            let body = text.split("\nKill ").next().unwrap().to_owned();
            std::fs::write(&path, format!("{body}\nKill {round}.\n")).unwrap();
        }
        let mut child = Command::new(program())
            .args(["issue", "--workers", "2"])
            .arg(&small)
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .unwrap();
        std::thread::sleep(whole.mul_f64(random()));
        child.kill().unwrap();
        child.wait().unwrap();
        right &= sound(&small);
    }
    issue(&small, 2);
    let done = sound(&small);
    println!("kills: 100, all sound: {}; the next run completes: {}", verdict(right), verdict(done));
    right && done
}

/// Every PDF is whole, and every issue of the register has its files with the digests that it states.
fn sound(notebook: &Path) -> bool {
    let issued = notebook.join("issued");
    let mut right = true;
    for entry in std::fs::read_dir(&issued).unwrap().map(Result::unwrap) {
        if entry.path().extension().is_some_and(|ending| ending == "pdf") {
            let bytes = std::fs::read(entry.path()).unwrap();
            right &= lopdf::Document::load_mem(&bytes).is_ok();
        }
    }
    let text = std::fs::read_to_string(issued.join("register.json")).unwrap();
    let register: serde_json::Value = serde_json::from_str(&text).expect("a register");
    let mut stated = Vec::new();
    collect(&register, &mut stated);
    for (name, digest) in stated {
        right &=
            std::fs::read(issued.join(&name)).is_ok_and(|bytes| Digest::of(&bytes).to_string() == digest);
    }
    right
}

/// Every issued file that the register names, with its digest.
fn collect(value: &serde_json::Value, found: &mut Vec<(String, String)>) {
    match value {
        serde_json::Value::Object(map) => {
            let text = |key: &str| map.get(key).and_then(|value| value.as_str()).map(str::to_owned);
            if let (Some(name), Some(digest)) = (text("file"), text("digest")) {
                found.push((name, digest));
            }
            map.values().for_each(|value| collect(value, found));
        }
        serde_json::Value::Array(items) => items.iter().for_each(|value| collect(value, found)),
        _ => {}
    }
}
