//! Findings to PDF: what stands in the file, that it keeps its standards, and that text stays text.

pub mod fixture;
mod pdf;

use qsheaf::markup::{Flow, Inline, Math};
use qsheaf::quantity::{Origin, Shown, Source};
use qsheaf::report::{Sources, Status, compile, press, source, typeset};
use qsheaf::source::{Bundle, File};
use qsheaf::study::{Findings, Verdict};

use fixture::{files, findings, issue, moves};
use pdf::Pdf;

fn sources(findings: &Findings, files: &Bundle) -> Sources {
    source(findings, &issue(), Some(&moves()), files).unwrap_or_else(|errors| panic!("{errors:#?}"))
}

fn note(findings: &Findings, files: &Bundle) -> Vec<u8> {
    let (pdf, warnings) = press(&sources(findings, files));
    assert!(warnings.0.is_empty(), "{warnings:#?}");
    pdf.unwrap_or_else(|errors| panic!("{errors:#?}"))
}

#[test]
fn a_whole_note_keeps_its_standards() {
    let bytes = note(&findings(), &files());
    let pdf = Pdf::read(&bytes);
    assert_eq!(pdf.pages(), 12);
    let xmp = pdf.xmp();
    for part in [
        "<pdfaid:part>3</pdfaid:part>",
        "<pdfaid:conformance>A</pdfaid:conformance>",
        "<pdfuaid:part>1</pdfuaid:part>",
    ] {
        assert!(xmp.contains(part), "{part} is not in {xmp}");
    }
    assert!(xmp.contains("LB-017 Low-side lamp switch of the lantern flasher"), "{xmp}");
    assert_eq!(pdf.language().to_ascii_lowercase(), "en-gb");
    assert!(pdf.is_tagged());
    assert_eq!(pdf.created(), "D:20261002");
    assert!(pdf.fonts_embedded() >= 5);
    assert_eq!(pdf.raster_images(), 0, "figures are drawn as vectors");
}

#[test]
fn every_formula_and_figure_can_be_read_aloud() {
    let findings = findings();
    let pdf_bytes = note(&findings, &files());
    let pdf = Pdf::read(&pdf_bytes);
    let alternatives = pdf.alternatives();
    let (formulas, silent) = pdf.silent_formulas_and_figures();
    assert_eq!(silent, 0, "formulas or figures without an alternative text");
    assert!(formulas > 30, "{formulas}");
    for figure in &findings.figures {
        assert!(alternatives.iter().any(|alt| alt == &figure.alt), "{}", figure.alt);
    }
    for criterion in &findings.criteria {
        assert!(alternatives.iter().any(|alt| alt == &criterion.spoken), "{}", criterion.spoken);
    }
    assert!(alternatives.iter().any(|alt| alt == "The lantern opened on the bench"));
}

#[test]
fn inputs_and_findings_are_attached() {
    let findings = findings();
    let bytes = note(&findings, &files());
    let pdf = Pdf::read(&bytes);
    let attached = pdf.attached();
    let names: Vec<&str> = attached.iter().map(|file| file.name.as_str()).collect();
    for name in [
        "findings.json",
        "lantern/lamp switch.md",
        "parts/lbn-250.yaml",
        "notebook.yaml",
        "lantern/bench.svg",
    ] {
        assert!(names.contains(&name), "{name} is not among {names:?}");
    }
    let json = attached.iter().find(|file| file.name == "findings.json").expect("found above");
    let back: Findings = serde_json::from_slice(&json.bytes).expect("the attached findings can be read");
    assert_eq!(back.criteria.len(), findings.criteria.len());
    assert_eq!(json.mime, "application/json");
    assert_eq!(json.relationship, "Data");
    let worksheet = attached.iter().find(|file| file.name.ends_with(".md")).expect("found above");
    assert_eq!(worksheet.relationship, "Source");
    assert_eq!(worksheet.bytes, b"# What the switch does\n");
}

#[test]
fn what_a_reviewer_looks_for_is_printed() {
    let bytes = note(&findings(), &files());
    let pdf = Pdf::read(&bytes);
    let first = pdf.text(1);
    for words in [
        "Harbour Lights Workshop",
        "LB-017",
        "sheet 1 of 12",
        "issue 3, revision C",
        "A. Designer",
        "2026-10-02",
        "Issued",
        "1 NOT MET",
        "1 NOT SHOWN",
        "2 MET on assumptions",
        "8 MET",
        "19 MET",
        "3 rest on an assumption, 2 on memory",
        "get the maximum output capacitance",
        "reverse battery",
        "the record RX-5 states no working voltage",
        "second source for Q1",
    ] {
        assert!(first.contains(words), "{words:?} is not on the first page:\n{first}");
    }
    let at = |words: &str| first.find(words).unwrap_or_else(|| panic!("{words} is not on the first page"));
    assert!(at("inrush") < at("switching edge"), "failing criteria come first");
    assert!(at("switching edge") < at("bright") && at("bright") < at("saturated"));
    let all = pdf.all_text();
    for words in [
        "What moved since issue 2",
        "0.331 200 01",
        "0.331 200 02",
        "Hot surface",
        "температура корпуса буя",
        "напряжение на лампе",
        "NO CRITERION",
        "DOES NOT HOLD",
        "the largest residual was 3 parts in a million",
        "As printed in the summary",
        "flash --code 'Fl(2)'",
        "Limits of validity",
    ] {
        let expected = words != "DOES NOT HOLD";
        assert_eq!(all.contains(words), expected, "{words:?}");
    }
    // The uncovered clause stands before the covered ones.
    assert!(all.find("LB-1 3.8").expect("printed") < all.rfind("LB-1 3.3").expect("printed"));
    let outline = pdf.outline();
    for heading in
        ["Summary", "Cautions", "What the switch does", "Why these values", "Operating points", "Ratings"]
    {
        assert!(outline.iter().any(|title| title.contains(heading)), "{heading} is not among {outline:?}");
    }
    for page in 1..=pdf.pages() {
        let text = pdf.text(page);
        assert!(
            text.contains("LB-017") && text.contains(&format!("sheet {page} of 12")),
            "page {page}: {text}"
        );
    }
}

#[test]
fn the_same_findings_give_the_same_bytes_on_any_number_of_threads() {
    let once = note(&findings(), &files());
    let others: Vec<Vec<u8>> = std::thread::scope(|scope| {
        let running: Vec<_> = (0..3).map(|_| scope.spawn(|| note(&findings(), &files()))).collect();
        running.into_iter().map(|thread| thread.join().expect("typeset")).collect()
    });
    assert!(others.iter().all(|other| *other == once));
}

#[test]
fn a_draft_is_marked_and_has_no_issue_number() {
    let mut draft = issue();
    draft.status = Status::Draft;
    let bytes = typeset(&findings(), &draft, None, &files()).expect("typeset");
    let pdf = Pdf::read(&bytes);
    let first = pdf.text(1);
    assert!(first.contains("DRAFT") && first.contains("draft, revision C"), "{first}");
    assert!(!first.contains("issue 3"));
    assert!(!pdf.all_text().contains("What moved since"));
}

#[test]
fn letter_paper_and_an_almost_empty_note() {
    let mut empty = findings();
    empty.note.paper = "us-letter".into();
    empty.note.language = "not a language".into();
    empty.note.date = "some day".into();
    empty.note.revisions.clear();
    empty.criteria.clear();
    empty.spreads.clear();
    empty.body.clear();
    empty.inputs.clear();
    empty.conditions.clear();
    empty.elements.clear();
    empty.points.clear();
    empty.results.clear();
    empty.derivation.clear();
    empty.stress.clear();
    empty.cautions.clear();
    empty.figures.clear();
    empty.trace.clear();
    empty.models.clear();
    empty.validity.clear();
    empty.warnings.0.clear();
    empty.files.clear();
    let bytes = typeset(&empty, &issue(), None, &Bundle::default()).expect("typeset");
    let pdf = Pdf::read(&bytes);
    assert_eq!(pdf.paper(), (612, 792));
    assert_eq!(pdf.language(), "en");
    assert_eq!(pdf.pages(), 1);
}

/// Text that would run, end a string, or break the archive's rules, if any of it were taken for more than text.
const HOSTILE: &str = "#eval(\"1+1\") \\ \" ' $x$ <b> ] } #{ } `raw` *b* _i_ @ref // /* {{ 7*7 }} {% raw %}";

/// Puts hostile text into every string of the findings, behind what stands there.
pub fn poisoned() -> Findings {
    let mut tree = serde_json::to_value(findings()).expect("findings are data");
    poison(&mut tree, "");
    serde_json::from_value(tree).expect("still findings")
}

fn poison(tree: &mut serde_json::Value, key: &str) {
    // Words that name a variant, a colour of a file or a digest are not free text.
    const FIXED: [&str; 24] = [
        "flow",
        "inline",
        "math",
        "verdict",
        "law",
        "bound",
        "origin",
        "established",
        "role",
        "distribution",
        "quantity",
        "style",
        "align",
        "digest",
        "kind",
        "severity",
        "paper",
        "language",
        "date",
        "file",
        "path",
        "target",
        "relation",
        "word",
    ];
    match tree {
        serde_json::Value::String(text) if !FIXED.contains(&key) => {
            let digest = text.len() == 64 && text.bytes().all(|b| b.is_ascii_hexdigit());
            if !digest {
                text.push_str(HOSTILE);
            }
        }
        serde_json::Value::Array(items) => items.iter_mut().for_each(|item| poison(item, key)),
        serde_json::Value::Object(fields) => fields.iter_mut().for_each(|(name, item)| poison(item, name)),
        _ => {}
    }
}

#[test]
fn hostile_text_in_every_field_is_printed_as_text() {
    let bytes = note(&poisoned(), &files());
    let pdf = Pdf::read(&bytes);
    let all = pdf.all_text();
    for words in ["#eval(\"1+1\")", "{{ 7*7 }}", "$x$", "`raw`", "*b*", "@ref", "/*"] {
        assert!(
            all.matches(words).count() > 100,
            "{words:?} is printed {} times",
            all.matches(words).count()
        );
    }
    assert!(pdf.xmp().contains("#eval("), "the title keeps its text");
}

/// Characters that no font has or that turn the text around, and words without an end.
pub fn strange() -> Findings {
    let mut strange = findings();
    let endless = "Überspannungsbegrenzerdurchbruchspannung".repeat(12);
    let odd = "漢字 \u{1f600} \u{202e}dlrow\u{202c} \u{7} \u{e000} \u{feff} \u{200b} a\u{301}x \u{0} ﷽";
    strange.note.title = format!("{odd} {}", strange.note.title);
    strange.criteria[0].label = endless.clone();
    strange.criteria[1].clause = Some(odd.into());
    strange.inputs[0].description = Some(endless.clone());
    strange.inputs[1].symbol = format!("V_{endless}");
    strange.results[0].symbol = format!("Q1.I_{endless}");
    strange.elements[0].value = endless.clone();
    strange.elements[1].designator = endless.clone();
    strange.stress[0].designator = endless.clone();
    strange.body.insert(
        1,
        Flow::Paragraph {
            content: vec![
                Inline::Text { text: format!("{odd} {endless}") },
                Inline::Code { text: endless.clone() },
            ],
        },
    );
    strange.derivation[0].symbol =
        Some(Math::Symbol { base: endless.clone(), subscript: odd.into(), owner: String::new() });
    strange.derivation[1].symbols =
        Math::Symbol { base: endless.clone(), subscript: endless.clone(), owner: "Q1".into() };
    strange.figures[0].curves[0].name = endless.clone();
    strange
}

#[test]
fn characters_without_a_glyph_and_endless_words_keep_to_the_page() {
    let strange = strange();
    let bytes = note(&strange, &files());
    let pdf = Pdf::read(&bytes);
    let all = pdf.all_text();
    for words in ["⟨U+6F22⟩", "⟨U+202E⟩", "⟨U+E000⟩", "⟨U+0000⟩"] {
        assert!(all.contains(words), "{words}");
    }
}

#[test]
fn rounding_never_contradicts_a_verdict() {
    let mut close = findings();
    let limit = 0.4;
    close.criteria[6].worst.value = Shown::Value(limit * (1.0 + 3e-7));
    close.criteria[6].limit = Shown::Value(limit);
    close.criteria[6].verdict = Verdict::NotMet;
    let bytes = note(&close, &files());
    let first = Pdf::read(&bytes).text(1);
    assert!(first.contains("400.0001"), "{first}");
}

#[test]
fn a_notebook_brings_its_own_template_and_logo() {
    let mut bundle = files();
    let logo = r##"<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 30 10"><path d="M0 10 L15 0 L30 10 Z" fill="#000"/></svg>"##;
    bundle.insert(File::new("house/logo.svg", logo.as_bytes().to_vec()));
    let template = "#import \"house.typ\": *\n= House order of {{ note.organisation }}\n{% if counts.criteria.not_met > 0 %}Not for release.{% endif %}\n";
    bundle.insert(File::new("templates/summary.typ", template.as_bytes().to_vec()));
    let mut own = findings();
    own.note.logo = Some("house/logo.svg".into());
    own.note.organisation = "Lights #1 \"Harbour\" \\ Co 漢".into();
    let made = sources(&own, &bundle);
    assert_eq!(made.foreign, ["templates/summary.typ"]);
    let bytes = compile(&made).expect("typeset");
    let pdf = Pdf::read(&bytes);
    let first = pdf.text(1);
    assert!(first.contains("House order of Lights #1 \"Harbour\" \\ Co"), "{first}");
    assert!(first.replace(' ', "").contains("Co⟨U+6F22⟩Notforrelease."), "{first}");
    assert!(pdf.alternatives().iter().any(|alt| alt.starts_with("Logo of Lights")));
    assert!(made.foreign.len() == 1 && sources(&findings(), &files()).foreign.is_empty());
}

#[test]
fn mistakes_in_a_template_point_at_its_line() {
    let wrong = |text: &str| {
        let mut bundle = files();
        bundle.insert(File::new("templates/cautions.typ", text.as_bytes().to_vec()));
        let errors = typeset(&findings(), &issue(), None, &bundle).expect_err("an error");
        let place = errors.0[0].place.clone().expect("a place");
        (place.file.to_string(), place.line, errors.0[0].message.clone())
    };
    let cautions = "templates/cautions.typ".to_string();
    let (file, line, message) = wrong("first\n\n#no-such-thing\n");
    assert_eq!((file, line), (cautions.clone(), 3));
    assert!(message.contains("no-such-thing"), "{message}");
    for forbidden in ["#eval(\"1\")", "#plugin(\"x.wasm\")", "#std.eval(\"1\")"] {
        let (_, line, message) = wrong(&format!("x\n{forbidden}"));
        assert_eq!(line, 2, "{forbidden}: {message}");
    }
    let (file, line, _) = wrong("x\n\n\n{{ note.no_such_name }}");
    assert_eq!((file, line), (cautions.clone(), 4));
    let (_, _, message) = wrong("{{ note.title | safe }}");
    assert!(message.contains("safe"), "{message}");
    let (_, line, _) = wrong("\n#read(\"/etc/passwd\")");
    assert_eq!(line, 2);
    let (file, _, _) = wrong("#datetime.today()");
    assert_eq!(file, cautions);
}

#[test]
fn weak_sources_are_marked_where_they_are_used() {
    let mut one = findings();
    for input in &mut one.inputs {
        input.source = Some(Source { origin: Origin::Standard, text: "S-1".into() });
    }
    one.inputs[3].source = None;
    let bytes = note(&one, &files());
    let pdf = Pdf::read(&bytes);
    assert!(pdf.text(1).contains("1 rests on an assumption, 0 on memory"));
    let squeezed = pdf.all_text().replace(' ', "");
    assert_eq!(squeezed.matches("†assumption,nosourcegiven").count(), 1);
}

#[test]
fn sources_travel_to_another_process() {
    let sources = sources(&findings(), &files());
    let bytes = sources.to_bytes();
    assert_eq!(Sources::from_bytes(&bytes), Some(sources));
    assert_eq!(Sources::from_bytes(&bytes[..bytes.len() - 1]), None);
    assert_eq!(Sources::from_bytes(b"[1]\n"), None);
}

#[test]
fn an_image_that_cannot_be_decoded_is_named() {
    let mut bundle = files();
    bundle.insert(File::new("lantern/bench.svg", b"not an image".to_vec()));
    let errors = typeset(&findings(), &issue(), None, &bundle).expect_err("an error");
    let expected = errors.0[0].expected.clone().unwrap_or_default();
    assert!(expected.contains("lantern/bench.svg"), "{errors:#?}");
}

#[test]
fn many_revisions_leave_the_summary_on_the_first_page() {
    let mut old = findings();
    old.note.revisions =
        (0..40).map(|i| [format!("R{i}"), "2026-01-01".into(), format!("change number {i}")]).collect();
    let bytes = note(&old, &files());
    let pdf = Pdf::read(&bytes);
    let first = pdf.text(1);
    assert!(first.contains("change number 39") && !first.contains("change number 34"), "{first}");
    assert!(first.contains("inrush"));
    assert!((0..40).all(|i| pdf.all_text().contains(&format!("change number {i}"))));
}

#[test]
fn a_block_inside_a_list_is_set_once_behind_it() {
    let mut nested = findings();
    nested.body = vec![
        Flow::List {
            ordered: None,
            items: vec![vec![Flow::Placed { word: "figure".into(), index: 2 }], vec![]],
        },
        Flow::Table { align: vec![], head: vec![], rows: vec![] },
        Flow::Placed { word: "unheard of".into(), index: 7 },
        Flow::Image { path: "not/in/the/notebook.png".into(), alt: String::new(), caption: vec![] },
    ];
    let bytes = note(&nested, &files());
    let all = Pdf::read(&bytes).all_text();
    assert_eq!(all.matches("Gain of Q1 over collector current").count(), 1);
    assert!(all.contains("notebook.png is missing"));
    // What the prose does not place is printed all the same.
    for words in
        ["Values of the design basis", "Transfer curve of the switch", "base current", "collector lamp"]
    {
        assert!(all.contains(words), "{words}");
    }
}
