//! What moved between two findings of one note.

use qsheaf::caution::Caution;
use qsheaf::markup::{Flow, Math};
use qsheaf::part;
use qsheaf::quantity::{Kind, Origin, Shown, Source, Spread};
use qsheaf::redline::{Cause, FileMove, Moves, Unreadable, compare, recall, stress_verdict};
use qsheaf::source::{Bundle, Digest, File, Place};
use qsheaf::study::*;

use crate::notebook::tiny::{self, PARTS, criterion, end, result, sheet, volt};
use crate::report::fixture;

/// Findings of a small note, with two results and two criteria.
fn findings() -> Findings {
    let mut bundle = Bundle::default();
    bundle.insert(File::new("notebook.yaml", b"organisation: Harbour Lights Workshop\n".to_vec()));
    bundle.insert(File::new("a.md", sheet("LB-1", "LBN-250", "1").into_bytes()));
    let record = PARTS.split("# The smaller one.").next().unwrap();
    bundle.insert(File::new("parts/t.yaml#LBN-250", record.as_bytes().to_vec()));
    let mut findings = tiny::study("1.0.0", &bundle, "a.md").unwrap();
    let mut ranged = result("Y", 2.0);
    (ranged.min, ranged.max) = (end(1.0), end(3.0));
    findings.results.push(ranged);
    findings.criteria.push(criterion("wide", 3.0, 5.0, Verdict::MetOnAssumptions { count: 2 }));
    findings
}

fn moved(change: impl FnOnce(&mut Findings)) -> Moves {
    let old = findings();
    let mut new = findings();
    change(&mut new);
    compare(3, &old, &new)
}

fn inputs(moves: &Moves) -> Vec<(&str, Option<&str>, Option<&str>)> {
    moves
        .inputs
        .iter()
        .map(|input| (input.symbol.as_str(), input.old.as_deref(), input.new.as_deref()))
        .collect()
}

#[test]
fn the_same_findings_have_not_moved() {
    let moves = moved(|_| {});
    assert!(moves.is_empty() && !moves.clears_signatures());
    assert_eq!((moves.since, moves.cause()), (3, Cause::Nothing));
}

#[test]
fn an_input_shows_what_tells_its_two_versions_apart() {
    let moves = moved(|new| {
        new.inputs[0].text = "1.2".into();
        new.inputs[0].spread = Spread::exact(1.2);
    });
    assert_eq!(inputs(&moves), [("k", Some("1"), Some("1.2"))]);
    let moves = moved(|new| {
        new.inputs[0].source = Some(Source { origin: Origin::Memory, text: "from memory".into() });
    });
    assert_eq!(inputs(&moves), [("k", Some("1 [measured, log 1]"), Some("1 [from memory]"))]);
    let moves = moved(|new| new.inputs[0].spread.high = 1.5);
    assert_eq!(
        inputs(&moves),
        [(
            "k",
            Some("1.000\u{202f}00 to 1.000\u{202f}00, nominal 1.000\u{202f}00"),
            Some("1.000\u{202f}00 to 1.500\u{202f}00, nominal 1.000\u{202f}00")
        )]
    );
    // Noise below what anybody prints is no change.
    assert!(moved(|new| new.inputs[0].spread.high = 1.0 + 1e-13).is_empty());
}

#[test]
fn rows_and_ratings_of_parts_are_named_with_their_test_condition() {
    let changed = |from: &str, to: &str| {
        let text = PARTS.split("# The smaller one.").next().unwrap();
        assert!(text.contains(from));
        let file = File::new("parts/t.yaml#LBN-250", text.replace(from, to).into_bytes());
        moved(move |new| new.parts = part::read(&file).unwrap())
    };
    let row = "LBN-250 h_FE at I_C = 150\u{a0}mA, V_CE = 1\u{a0}V";
    let moves = changed("min: 100", "min: 90");
    assert_eq!(inputs(&moves), [(row, Some("min 100, typ 180, max 300"), Some("min 90, typ 180, max 300"))]);
    assert_eq!(moves.cause(), Cause::Inputs);
    let moves = changed("V_CEO: 60 V", "V_CEO: 80 V");
    assert_eq!(inputs(&moves), [("LBN-250 rating V_CEO", Some("60\u{a0}V"), Some("80\u{a0}V"))]);
    // Another page or revision is another source.
    let moves = changed("rev C", "rev D");
    assert!(
        moves.inputs.iter().any(|input| input.symbol == row && input.new.as_ref().unwrap().contains("rev D"))
    );
    // A row at another current is another row: one is new, one is gone.
    let moves = changed("I_C: 150 mA", "I_C: 100 mA");
    assert_eq!((moves.inputs[0].old.is_none(), moves.inputs[1].new.is_none()), (true, true));
    assert_eq!(moves.inputs.len(), 2);
}

#[test]
fn results_move_end_by_end_beyond_what_can_be_printed() {
    let moves = moved(|new| new.results[1].max.value = Shown::Value(3.5));
    assert_eq!(moves.results.len(), 1);
    let row = &moves.results[0];
    assert_eq!((row.symbol.as_str(), row.condition.as_str(), row.end.as_str()), ("Y", "on", "maximum"));
    assert_eq!((&row.old, &row.new), (&Some(Shown::Value(3.0)), &Some(Shown::Value(3.5))));
    assert!(moved(|new| new.results[1].max.value = Shown::Value(3.0 + 1e-10)).is_empty());
    assert_eq!(moved(|new| new.results[1].max.value = Shown::Value(3.0 + 1e-8)).results.len(), 1);
    // Noise is measured against the result's range, so a minimum near zero does not move for nothing.
    let near_zero = |value: f64| {
        let mut note = findings();
        note.results[1].min.value = Shown::Value(value);
        note
    };
    assert!(compare(1, &near_zero(1e-13), &near_zero(3e-13)).is_empty());
    // A result without a range is one line, not three.
    assert_eq!(moved(|new| new.results[0] = result("X", 1.0)).results.len(), 1);
}

#[test]
fn results_that_are_new_gone_or_no_longer_shown_are_told() {
    let moves = moved(|new| {
        new.results[0].symbol = "Z".into();
        new.results[1].nominal = Shown::NotShown("two operating points".into());
    });
    let rows: Vec<(&str, bool, bool)> =
        moves.results.iter().map(|row| (row.symbol.as_str(), row.old.is_some(), row.new.is_some())).collect();
    assert_eq!(rows, [("Z", false, true), ("Y", true, true), ("X", true, false)]);
    // Another reason for not showing something is no other result.
    let hidden = |reason: &str| {
        let mut note = findings();
        note.results[0].nominal = Shown::NotShown(reason.into());
        note
    };
    assert!(compare(1, &hidden("one"), &hidden("another")).is_empty());
}

#[test]
fn verdicts_flip_and_margins_move() {
    let moves = moved(|new| {
        new.criteria[0].verdict = Verdict::NotMet;
        new.criteria[0].margin = Shown::Value(-3.0);
        new.criteria[1].margin = Shown::Value(1.9);
    });
    let rows: Vec<(&str, bool)> =
        moves.verdicts.iter().map(|moved| (moved.label.as_str(), moved.flipped())).collect();
    assert_eq!(rows, [("small", true), ("wide", false)]);
    // More assumptions are a change, but no flip.
    let moves = moved(|new| new.criteria[1].verdict = Verdict::MetOnAssumptions { count: 3 });
    assert!(!moves.verdicts[0].flipped() && moves.verdicts.len() == 1);
    // Another reason is none.
    let hidden = |reason: &str| {
        let mut note = findings();
        note.criteria[0].verdict = Verdict::NotShown { reason: reason.into() };
        note
    };
    assert!(compare(1, &hidden("one"), &hidden("another")).is_empty());
    let moves = moved(|new| drop(new.criteria.remove(0)));
    assert!(moves.verdicts[0].flipped() && moves.verdicts[0].new.is_none());
    let moves = moved(|new| new.criteria[0].text = "X <= 110 V".into());
    assert_eq!(moves.inputs[0].symbol, "criterion small");
    assert!(moves.clears_signatures());
}

#[test]
fn stress_lines_are_judged_like_criteria() {
    let mut old = fixture::findings();
    old.stress.truncate(1);
    let mut new = old.clone();
    let line = &mut new.stress[0];
    line.verdict = if line.verdict == "not-met" { "met" } else { "not-met" }.into();
    assert_ne!(stress_verdict(&old.stress[0]), stress_verdict(line));
    let moves = compare(1, &old, &new);
    let label = &moves.verdicts[0].label;
    assert!(label.starts_with(&old.stress[0].designator) && label.contains(old.stress[0].quantity.symbol()));
    assert!(moves.verdicts[0].flipped());
}

#[test]
fn conditions_elements_and_circuits_are_inputs() {
    let old = fixture::findings();
    let mut new = fixture::findings();
    new.conditions[0].normal = !new.conditions[0].normal;
    new.elements[0].terminals[0].1 = "elsewhere".into();
    let moves = compare(1, &old, &new);
    let condition = format!("condition {}", old.conditions[0].name);
    let element = format!("{} connections", old.elements[0].designator);
    let symbols: Vec<&str> = moves.inputs.iter().map(|input| input.symbol.as_str()).collect();
    assert_eq!(symbols, [condition.as_str(), element.as_str()]);
}

#[test]
fn files_that_changed_came_or_went_are_named() {
    let moves = moved(|new| {
        new.files[0].1 = Digest::of(b"another");
        new.files.retain(|(path, _)| path != "notebook.yaml");
        new.files.push(("images/board.png".into(), Digest::of(b"image")));
    });
    assert_eq!(
        moves.files,
        [
            ("a.md".to_owned(), FileMove::Changed),
            ("images/board.png".to_owned(), FileMove::Added),
            ("notebook.yaml".to_owned(), FileMove::Gone),
        ]
    );
}

#[test]
fn a_name_a_date_and_a_revision_leave_signatures_standing_and_nothing_else_does() {
    let worksheet = |new: &mut Findings| {
        let file = new.files.iter_mut().find(|(path, _)| path == "a.md").unwrap();
        file.1 = Digest::of(b"another head");
    };
    let moves = moved(|new| {
        worksheet(new);
        new.note.checker = Some("Another".into());
        new.note.approver = None;
        new.note.revision = "B".into();
        new.note.date = "2026-04-01".into();
        new.note.revisions.push(["B".into(), "2026-04-01".into(), "checked".into()]);
    });
    assert!(!moves.clears_signatures() && !moves.is_empty());
    let changes: [&dyn Fn(&mut Findings); 8] = [
        &|new| new.program = "1.0.1".into(),
        &|new| new.note.title = "Another title".into(),
        &|new| new.note.author = "Another author".into(),
        &|new| new.inputs[0].text = "1.0".into(),
        &|new| new.results[1].min.value = Shown::Value(0.9),
        &|new| new.criteria[1].margin = Shown::Value(1.0),
        &|new| {
            worksheet(new);
            new.body.push(Flow::Rule);
        },
        &|new| new.files.iter_mut().filter(|(path, _)| path != "a.md").for_each(|f| f.1 = Digest::of(b"x")),
    ];
    for (index, change) in changes.iter().enumerate() {
        assert!(moved(|new| change(new)).clears_signatures(), "change {index}");
    }
}

#[test]
fn what_no_list_speaks_of_still_clears_signatures() {
    let figure = fixture::findings().figures[0].clone();
    let mut old = findings();
    old.figures = vec![figure];
    let rewritten = |change: &dyn Fn(&mut Findings)| {
        let mut new = old.clone();
        new.files.iter_mut().filter(|(path, _)| path == "a.md").for_each(|f| f.1 = Digest::of(b"rewritten"));
        change(&mut new);
        compare(1, &old, &new)
    };
    // Another range under the same title, another description, another limit of validity.
    assert!(rewritten(&|new| new.figures[0].x.high *= 2.0).clears_signatures());
    assert!(rewritten(&|new| new.inputs[0].description = Some("a factor".into())).wording);
    assert!(rewritten(&|new| new.validity.push("Only indoors.".into())).wording);
    // A longer head moves every line, and a reader sees none of it.
    let shifted = rewritten(&|new| {
        new.inputs.iter_mut().for_each(|input| input.place.line += 1);
        new.criteria.iter_mut().for_each(|criterion| criterion.place.line += 1);
        new.digest = Digest::of(b"all, rewritten");
        new.note.date = "2026-04-01".into();
    });
    assert!(!shifted.clears_signatures(), "{shifted:?}");
}

#[test]
fn numbers_recalled_in_the_prose_are_no_new_wording() {
    let body = |new: &mut Findings| new.body = vec![Flow::Listing { text: "now 3.4 mA".into() }];
    assert!(!moved(body).wording);
    let moves = moved(|new| {
        body(new);
        new.files[0].1 = Digest::of(b"rewritten");
    });
    assert!(moves.wording);
}

#[test]
fn other_formulas_and_cautions_are_new_wording() {
    let step = |base: &str, numbers: &str| {
        let symbol =
            |text: &str| Math::Symbol { base: text.into(), subscript: String::new(), owner: String::new() };
        Step {
            text: String::new(),
            label: "current".into(),
            block: 0,
            condition: "on".into(),
            symbol: Some(symbol("I")),
            symbols: symbol(base),
            numbers: symbol(numbers),
            result: Shown::Value(1.0),
            kind: Kind::NONE,
            unit: volt(),
            holds: None,
            spoken: String::new(),
        }
    };
    let with = |step: Step| {
        let mut note = findings();
        note.derivation = vec![step];
        note
    };
    assert!(compare(1, &with(step("U", "1")), &with(step("V", "1"))).wording);
    assert!(!compare(1, &with(step("U", "1")), &with(step("U", "2"))).wording);
    let caution = |why: &str| Caution {
        hazard: "burn".into(),
        title: "Hot surface".into(),
        why: why.into(),
        measure: "guard".into(),
        basis: "common practice".into(),
    };
    assert!(moved(|new| new.cautions.push(caution("70 °C"))).wording);
    let with = |why: &str| {
        let mut note = findings();
        note.cautions.push(caution(why));
        note
    };
    assert!(!compare(1, &with("70 °C"), &with("71 °C")).wording);
}

#[test]
fn program_and_inputs_are_told_apart() {
    let program = moved(|new| {
        new.program = "1.1.0".into();
        new.results[0] = result("X", 61.0);
    });
    assert_eq!(program.cause(), Cause::Program);
    let both = moved(|new| {
        new.program = "1.1.0".into();
        new.inputs[0].text = "2".into();
    });
    assert_eq!(both.cause(), Cause::Both);
}

#[test]
fn findings_are_read_back_as_they_were_written() {
    let findings = findings();
    let json = serde_json::to_vec_pretty(&findings).unwrap();
    assert_eq!(recall(&json).unwrap(), findings);
    let other = String::from_utf8(json).unwrap().replacen("\"schema\": 2", "\"schema\": 0", 1);
    assert_eq!(recall(other.as_bytes()), Err(Unreadable::Schema(0)));
    assert!(matches!(recall(b"{\"schema\": 2}"), Err(Unreadable::Malformed(_))));
    assert!(matches!(recall(b"%PDF-1.7"), Err(Unreadable::Malformed(_))));
    let text = recall(other.as_bytes()).unwrap_err().to_string();
    assert!(text.contains("schema 0") && text.contains("schema 2"));
}

#[test]
fn names_that_stand_twice_are_both_compared() {
    let twice = |second: &str| {
        let mut note = findings();
        let mut again = note.inputs[0].clone();
        again.text = second.into();
        again.place = Place::new(&"a.md".into(), 9, 1, 0);
        note.inputs.push(again);
        note
    };
    let moves = compare(1, &twice("5"), &twice("6"));
    assert_eq!(inputs(&moves), [("k (2)", Some("5"), Some("6"))]);
}
