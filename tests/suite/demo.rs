//! The demonstration notebook from worksheet to PDF: what each note finds, and that it typesets.

use qsheaf::diagnostic;
use qsheaf::report::{self, Issue, Status};
use qsheaf::source::{Bundle, File};
use qsheaf::study::{Findings, Verdict, study};

const SHEETS: [&str; 5] =
    ["lamp-switch.md", "telemetry-switch.md", "daylight-sensor.md", "horn-relay.md", "microphone-stage.md"];

fn folder() -> std::path::PathBuf {
    std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("worksheets")
}

/// Everything that a note of the demonstration may need.
pub fn bundle(worksheet: &str) -> Bundle {
    let mut paths =
        vec!["notebook.yaml".to_owned(), "policies/harbour.yaml".to_owned(), worksheet.to_owned()];
    for entry in std::fs::read_dir(folder().join("parts")).unwrap() {
        paths.push(format!("parts/{}", entry.unwrap().file_name().to_string_lossy()));
    }
    let mut bundle = Bundle::default();
    for path in paths {
        bundle.insert(File::new(&path, std::fs::read(folder().join(&path)).unwrap()));
    }
    bundle
}

fn findings(worksheet: &str) -> Findings {
    study(&bundle(worksheet), worksheet).unwrap_or_else(|errors| {
        let line_of = |file: &str, line: u32| {
            let text = std::fs::read_to_string(folder().join(file)).ok()?;
            text.lines().nth(line as usize - 1).map(str::to_owned)
        };
        panic!("{}", diagnostic::render(&errors, line_of))
    })
}

fn verdict<'a>(findings: &'a Findings, label: &str) -> &'a Verdict {
    &findings.criteria.iter().find(|criterion| criterion.label == label).unwrap().verdict
}

#[test]
fn every_note_finds_what_its_prose_deals_with() {
    for (sheet, open) in SHEETS.into_iter().zip([&[][..], &[], &["changeover, low"], &["pull-in"], &[]]) {
        let found = findings(sheet);
        let not_met: Vec<&str> = found
            .criteria
            .iter()
            .filter(|c| !matches!(c.verdict, Verdict::Met | Verdict::MetOnAssumptions { .. }))
            .map(|c| c.label.as_str())
            .collect();
        assert_eq!(not_met, open, "{sheet}");
        let stress: Vec<String> = found
            .stress
            .iter()
            .filter(|line| !line.verdict.starts_with("met"))
            .map(|line| {
                format!("{} {:?} {} {:?}", line.designator, line.quantity, line.condition, line.reason)
            })
            .collect();
        assert!(stress.is_empty(), "{sheet}: {stress:#?}");
        assert!(found.points.iter().all(|point| point.not_shown.is_none()), "{sheet}");
        assert!(!found.figures.is_empty() && !found.results.is_empty() && !found.derivation.is_empty());
    }
    assert_eq!(*verdict(&findings("daylight-sensor.md"), "changeover, low"), Verdict::NotMet);
    let Verdict::NotShown { reason } = verdict(&findings("horn-relay.md"), "pull-in").clone() else {
        panic!()
    };
    assert!(reason.contains("get LBN-150: V_CE(sat) max"), "{reason}");
}

/// The forced gain, base and collector current of the lamp switch, by hand from the worksheet's own numbers.
#[test]
fn the_lamp_switch_agrees_with_a_hand_calculation() {
    let found = findings("lamp-switch.md");
    let nominal = |symbol: &str| {
        found
            .results
            .iter()
            .find(|r| r.symbol == symbol && r.condition == "on")
            .unwrap()
            .nominal
            .value()
            .unwrap()
    };
    // V_BE about 0.8 V and V_CE about 0.1 V: (4.6 - 0.8) / 330 - 0.8 / 10 k and (12.6 - 0.1) / 120.
    assert!((nominal("I_B") - 11.4e-3).abs() < 0.2e-3);
    assert!((nominal("I_C") - 104.2e-3).abs() < 0.5e-3);
    assert!((nominal("k") - nominal("I_C") / nominal("I_B")).abs() < 1e-9);
}

/// The one criterion by coverage: met by the share asked for though not at the extremes, and told as such.
#[test]
fn the_microphone_stage_is_judged_by_coverage_where_it_says_why() {
    let found = findings("microphone-stage.md");
    let criterion = found.criteria.iter().find(|criterion| criterion.label == "few trimmed").unwrap();
    assert_eq!(criterion.verdict, Verdict::Met);
    assert!(criterion.coverage.as_ref().unwrap().statement.contains("not by extreme value"));
    let [spread] = found.spreads.as_slice() else { panic!() };
    assert!(spread.extreme.value().unwrap() < 0.0 && criterion.margin.value().unwrap() > 0.0);
    let of = |symbol: &str| spread.terms.iter().find(|term| term.symbol == symbol).unwrap();
    // The gain is about R3 / (R4 + r_e): a hundredth of R3 is a hundredth of the gain; half of that with age.
    let gain = spread.nominal.value().unwrap() + 10.4;
    assert!((of("R3").reach.abs() / (0.01 * gain) - 1.0).abs() < 0.05, "{:?}", of("R3"));
    assert!((of("R3 ageing").reach.abs() / (0.005 * gain) - 1.0).abs() < 0.05, "{:?}", of("R3 ageing"));
    assert!(spread.held.iter().any(|(symbol, level)| symbol == "R3 ageing" && level.starts_with('−')));
    for sheet in ["lamp-switch.md", "horn-relay.md"] {
        assert!(findings(sheet).spreads.is_empty(), "{sheet} asks for nothing of the kind");
    }
}

#[test]
fn every_note_typesets_to_the_same_bytes_twice() {
    for sheet in SHEETS {
        let found = findings(sheet);
        let issue = Issue {
            number: 1,
            date: found.note.date.clone(),
            status: Status::Issued,
            program: found.program.clone(),
        };
        let files = bundle(sheet);
        let one =
            report::typeset(&found, &issue, None, &files).unwrap_or_else(|errors| panic!("{errors:#?}"));
        let again = report::typeset(&findings(sheet), &issue, None, &files).unwrap();
        assert!(one == again, "{sheet}: other bytes");
        let document = lopdf::Document::load_mem(&one).unwrap();
        assert!((5..25).contains(&document.get_pages().len()));
    }
}

#[test]
fn findings_come_back_from_json_as_they_were() {
    let found = findings("microphone-stage.md");
    let text = serde_json::to_string(&found).unwrap();
    let back: Findings = serde_json::from_str(&text).unwrap();
    assert_eq!(back, found);
}

/// Prints how long each demonstration note takes to study and to typeset.
#[test]
#[ignore = "prints times"]
fn times() {
    for sheet in SHEETS {
        let files = bundle(sheet);
        let start = std::time::Instant::now();
        let found = study(&files, sheet).unwrap();
        let studied = start.elapsed();
        let issue = Issue {
            number: 1,
            date: found.note.date.clone(),
            status: Status::Issued,
            program: String::new(),
        };
        let sources = report::source(&found, &issue, None, &files).unwrap();
        let sourced = start.elapsed() - studied;
        let pdf = report::compile(&sources).unwrap();
        let all = start.elapsed();
        println!(
            "{sheet}: studied {studied:.1?}, sources {sourced:.1?}, typeset {:.1?}",
            all - studied - sourced
        );
        let path = std::path::Path::new(env!("CARGO_TARGET_TMPDIR")).join(sheet.replace(".md", ".pdf"));
        std::fs::write(path, pdf).unwrap();
    }
}
