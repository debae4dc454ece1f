//! The demonstration notebook from worksheet to PDF.

use qsheaf::report::{Issue, Status};
use qsheaf::source::{Bundle, File};
use qsheaf::study::{Findings, study};

fn folder() -> std::path::PathBuf {
    std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("worksheets")
}

pub fn bundle(worksheet: &str) -> Bundle {
    let mut bundle = Bundle::default();
    let mut paths =
        vec!["notebook.yaml".to_owned(), "policies/harbour.yaml".to_owned(), worksheet.to_owned()];
    for entry in std::fs::read_dir(folder().join("parts")).unwrap() {
        paths.push(format!("parts/{}", entry.unwrap().file_name().to_string_lossy()));
    }
    for path in paths {
        bundle.insert(File::new(&path, std::fs::read(folder().join(&path)).unwrap()));
    }
    bundle
}

pub fn findings(worksheet: &str) -> Findings {
    study(&bundle(worksheet), worksheet).unwrap_or_else(|errors| {
        panic!(
            "{}",
            qsheaf::diagnostic::render(&errors, |file, line| {
                let text = std::fs::read_to_string(folder().join(file)).ok()?;
                text.lines().nth(line as usize - 1).map(str::to_owned)
            })
        )
    })
}

fn show(worksheet: &str) {
    let start = std::time::Instant::now();
    let findings = findings(worksheet);
    println!("{worksheet}: studied in {:?}", start.elapsed());
    for criterion in &findings.criteria {
        println!(
            "  {}: {:?} worst {:?} margin {:?} nominal {:?} at {:?} {} {} {:?} {:?}",
            criterion.label,
            criterion.verdict,
            criterion.worst.value,
            criterion.margin,
            criterion.nominal,
            criterion.worst.corner,
            criterion.worst.condition,
            criterion.worst.thermal,
            criterion.worst.established,
            criterion.flags
        );
    }
    for line in findings.stress.iter().filter(|line| line.verdict != "met") {
        println!(
            "  stress {} {:?} {}: {} {:?} worst {:?} limit {:?}",
            line.designator, line.quantity, line.condition, line.verdict, line.reason, line.worst, line.limit
        );
    }
    for caution in &findings.cautions {
        println!("  caution {}: {}", caution.hazard, caution.why);
    }
    println!("  warnings {:?}", findings.warnings.0.iter().map(|d| &d.message).collect::<Vec<_>>());
    let issue = Issue {
        number: 1,
        date: findings.note.date.clone(),
        status: Status::Issued,
        program: findings.program.clone(),
    };
    let start = std::time::Instant::now();
    let pdf = qsheaf::report::typeset(&findings, &issue, None, &bundle(worksheet))
        .unwrap_or_else(|errors| panic!("{errors:#?}"));
    println!("  typeset in {:?}, {} bytes", start.elapsed(), pdf.len());
    let path = std::path::Path::new(env!("CARGO_TARGET_TMPDIR")).join(worksheet.replace(".md", ".pdf"));
    std::fs::write(path, pdf).unwrap();
}

#[test]
fn look() {
    for worksheet in [
        "lamp-switch.md",
        "telemetry-switch.md",
        "daylight-sensor.md",
        "horn-relay.md",
        "microphone-stage.md",
    ] {
        if let Err(error) = std::panic::catch_unwind(|| show(worksheet)) {
            println!("{worksheet} {:?}", error.downcast_ref::<String>());
        }
    }
}
