//! Blocks: every error with its place.

use qsheaf::diagnostic::{Diagnostic, Severity};

use super::{body, errors, line};

/// Errors of one block; its first line is line 9 of the file.
fn block(word: &str, text: &str) -> Vec<String> {
    errors(body(&format!("```{word}\n{text}```\n")))
}

fn first(text: &str) -> Diagnostic {
    match body(text) {
        Ok((_, warnings)) => warnings.0.first().cloned().expect("a warning"),
        Err(found) => found.0[0].clone(),
    }
}

#[test]
fn misspelt_and_later_blocks() {
    let found = first("```Circuit\n```\n");
    assert_eq!(
        (line(&found).as_str(), found.nearest.as_deref()),
        ("8:4 unknown block `Circuit`", Some("circuit"))
    );
    assert_eq!(first("```basys\n```\n").nearest.as_deref(), Some("basis"));
    assert_eq!(first("```derivations\n```\n").nearest.as_deref(), Some("derivation"));
    assert_eq!(block("bench", ""), ["8:4 `bench` blocks are not available in this version"]);
    assert_eq!(block("selection", ""), ["8:4 `selection` blocks are not available in this version"]);
    assert_eq!(block("basis x", "a: 1 V\n"), ["8:4 `x` after the word `basis` means nothing"]);
    assert_eq!(block("text", "anything: [\n"), Vec::<String>::new());
    assert_eq!(block("", "anything: [\n"), Vec::<String>::new());
    let open = "```basis\na: 1 V\n";
    assert_eq!(errors(body(open)), ["8:1 this block is not closed, and swallows the rest of the worksheet"]);
    let inside = errors(body("- x\n\n  ```basis\n  a: 1 V\n  ```\n"));
    assert_eq!(inside, ["10:3 the `basis` block stands inside something else or is indented"]);
}

#[test]
fn basis_errors() {
    assert_eq!(block("basis", "V_a: 1 V\nV_a: 2 V\n"), ["10:1 `V_a` stands twice"]);
    let two = errors(body("```basis\nV_a: 1 V\n```\n\n```basis\nV_a: 2 V\n```\n"));
    assert_eq!(two, ["13:1 `V_a` is defined twice"]);
    assert_eq!(block("basis", "1a: 1 V\n"), ["9:1 `1a` cannot name a value"]);
    assert_eq!(block("basis", "sin: 1 V\n"), ["9:1 `sin` has a meaning of its own and cannot name a value"]);
    assert_eq!(
        block("basis", "V_a: 1 V [sheet\n"),
        ["9:10 the source is not closed, or something follows it"]
    );
    assert_eq!(block("basis", "V_a: 1 V [ ]\n"), ["9:10 the source is empty"]);
    assert_eq!(block("basis", "V_a: {vaule: 1 V}\n")[0], "9:7 unknown key `vaule`");
    assert_eq!(block("basis", "V_a:\n"), ["9:4 the value is missing"]);
    assert_eq!(
        block("basis", "V_a: 1 V # note\n"),
        ["9:10 everything from ` #` on would be ignored silently"]
    );
    let wrong = first("```basis\nV_a:  'bogus V'\n```\n");
    assert_eq!(wrong.place.map(|place| (place.line, place.column)), Some((9, 8)));
    let comma = "9:20 `usually 12 V` stands alone after a comma";
    assert_eq!(block("basis", "V_a: {value: 10 V, usually 12 V}\n"), [comma]);
    let comma = "9:20 `usually 12 V` stands alone after a comma";
    assert_eq!(block("circuit", "B1: {supply: 10 V, usually 12 V, plus: a}\n"), [comma]);
}

#[test]
fn an_unclear_source_counts_as_an_assumption() {
    let found = first("```basis\nV_a: 1 V [somewhere]\n```\n");
    assert_eq!(found.severity, Severity::Warning);
    assert_eq!(found.place.map(|place| (place.line, place.column)), Some((9, 11)));
}

const BASIS: &str = "```basis\nV_d: 4.6 V [assumed]\n```\n```circuit\nR1: {resistor: 1 kΩ, from: a, to: b}\n\
    DS1: {filament: 12 V 1.2 W, from: a, to: b}\n```\n";

fn conditions(text: &str) -> Vec<String> {
    errors(body(&format!("{BASIS}```conditions\n{text}```\n")))
}

#[test]
fn condition_errors() {
    assert_eq!(conditions("on: {normal: maybe}\n"), ["16:14 `maybe` is neither yes nor no"]);
    assert_eq!(
        conditions("on: {V_e: 1 V}\n"),
        ["16:6 `V_e` is neither in the design basis nor in the circuit"]
    );
    assert_eq!(conditions("on: {V_d: 1 A}\n"), ["16:11 `1 A` is no value of `V_d`"]);
    assert_eq!(conditions("on: {R1: opne}\n"), ["16:10 `opne` is no state of an element"]);
    assert_eq!(conditions("on: {R1: cold}\n"), ["16:10 `R1` is never cold: it is no filament and no coil"]);
    assert_eq!(conditions("on: {DS1: cold}\n"), ["16:11 the cold resistance of `DS1` is not given"]);
    assert_eq!(conditions("on: {lasts: 5 V}\n"), ["16:13 `5 V` is not a duration"]);
    assert_eq!(
        conditions("in: {normal: yes}\n"),
        ["16:1 `in` has a meaning of its own and cannot name a value"]
    );
    assert_eq!(conditions("on: {normal: yes}\noff: {R1: open, V_d: 0 to 1 V}\n"), Vec::<String>::new());
}

#[test]
fn derivation_errors() {
    assert_eq!(block("derivation", "x = 1\n"), ["9:1 the line has no label"]);
    assert_eq!(block("derivation", "a:\n"), ["9:1 nothing follows the label"]);
    assert_eq!(block("derivation", "a: 1 + 2\n"), ["9:4 this line neither defines nor asserts anything"]);
    assert_eq!(block("derivation", "a: x = 1 = 2\n"), ["9:6 there is more than one equals sign"]);
    assert_eq!(block("derivation", "a: x =\n"), ["9:4 nothing follows `x =`"]);
    assert_eq!(block("derivation", "a: 2x = 1\n"), ["9:4 `2x` cannot name a value"]);
    assert_eq!(block("derivation", "a: x = 1\nb: x = 2\n"), ["10:4 `x` is defined twice"]);
    assert_eq!(block("derivation", "a: x = y\nb: y = 2\n"), ["9:8 `y` is used before it exists"]);
    assert_eq!(
        block("derivation", "a: x = y + 1\nb: y = x\n"),
        ["9:8 the derivation is circular: `y` leans on this line"]
    );
    assert_eq!(block("derivation", "a: x = x + 1\n"), ["9:8 `x` is defined by itself"]);
    assert_eq!(block("derivation", "a: x = 1 in of\n"), ["9:13 there is no condition `of`"]);
    assert_eq!(
        block("derivation", "  a: x = 1\n"),
        ["9:3 this continues a line, but there is none before it"]
    );
    assert_eq!(block("derivation", "a: x = 1\n\n   + 2\nb: y = x\n"), Vec::<String>::new());
}

#[test]
fn acceptance_errors() {
    assert_eq!(
        block("acceptance", "a: T_a\n"),
        ["9:4 this is neither a limit nor the state of a transistor"]
    );
    assert_eq!(block("acceptance", "a: Q1 satrated\n"), ["9:7 `satrated` is not the state of a transistor"]);
    assert_eq!(block("acceptance", "a: 1 < T_a < 3\n"), ["9:4 a criterion has one limit"]);
    assert_eq!(
        block("acceptance", "a: T_a < 3 over corners\n"),
        ["9:17 `corners` does not say over what the criterion holds"]
    );
    assert_eq!(block("acceptance", "a: T_a < 3 ovr extremes\n"), ["9:12 `ovr` cannot follow a demand"]);
    assert_eq!(block("acceptance", "a: Q1 off saftey\n"), ["9:11 `saftey` cannot follow a demand"]);
    assert_eq!(block("acceptance", "a: T_a < 3 in\n"), ["9:12 no condition follows `in`"]);
    assert_eq!(block("acceptance", "a: T_a < 3 over nominal safty\n"), ["9:25 `safty` means nothing here"]);
    assert_eq!(
        block("acceptance", "a: T_a < 3 [c] x\n"),
        ["9:12 the clause is not closed or something follows it"]
    );
    for (tail, expected) in [
        (
            "over coverage 99 %",
            "9:17 a coverage needs a reason: extreme value decides unless the note says why not",
        ),
        (
            "over coverage 99 % because \"\"",
            "9:17 a coverage needs a reason: extreme value decides unless the note says why not",
        ),
        ("over coverage because \"x\"", "9:17 no share of specimens follows `coverage`"),
        (
            "over coverage 100 % because \"x\"",
            "9:26 every specimen is `over extremes`; samples cannot show it",
        ),
        ("over coverage 99 because \"x\"", "9:26 `99` is no share of specimens that samples can decide"),
        ("over coverage 3 % because \"x\"", "9:26 `3 %` is no share of specimens that samples can decide"),
        ("over coverage 99 % because of test", "9:31 no reason in quotes follows"),
        ("over coverge 99 % because \"x\"", "9:17 `coverge` does not say over what the criterion holds"),
        ("over extremes because \"x\"", "9:26 this reason belongs to nothing"),
        ("over coverage 99 % from many because \"x\"", "9:36 `many` is no number of samples"),
    ] {
        assert_eq!(block("acceptance", &format!("a: T_a < 3 {tail}\n")), [expected], "{tail}");
    }
    assert_eq!(block("acceptance", "a: T_a < 3 []\n"), ["9:12 the clause is empty"]);
    assert_eq!(block("acceptance", "a: T_a < 3\na: T_a < 4\n"), ["10:1 there are two criteria `a`"]);
    assert_eq!(block("acceptance", "a: T_a < 3 in onn\n"), ["9:15 there is no condition `onn`"]);
    assert_eq!(first("```acceptance\na: Q1 Saturated\n```\n").nearest.as_deref(), Some("saturated"));
}

#[test]
fn clauses_of_the_head_are_known() {
    let text = super::HEAD.replace("date:", "clauses: {LB-1 3.4: it saturates}\ndate:");
    let found = errors(super::whole(&format!("{text}```acceptance\na: T_a < 3 [LB-1 3.5]\n```\n")));
    assert_eq!(found, ["10:13 there is no clause in the head `LB-1 3.5`"]);
}

#[test]
fn figure_errors() {
    assert_eq!(
        block("figure", "plot: Q1.V_CE\n"),
        ["8:1 the figure has no `against`", "8:1 the figure has no `over`"]
    );
    assert_eq!(block("figure", "against: V_a\n"), ["8:1 the figure does not say what it plots"]);
    assert_eq!(
        block("figure", "plot: a\nagainst: b\nover: 1 V\n"),
        ["11:7 a figure needs a range along its axis"]
    );
    assert_eq!(
        block("figure", "plot: output characterstics of Q1\n")[0],
        "9:7 unknown figure `output characterstics of`"
    );
    assert_eq!(
        block("figure", "plot: power derating of Q1\ncorners: yes\n"),
        ["10:10 this figure has no use for `corners`"]
    );
    assert_eq!(block("figure", "plott: a\n")[0], "9:1 unknown key `plott`");
    assert_eq!(
        block("figure", "plot: power derating of Q1\nin: onn\n"),
        ["10:5 there is no condition `onn`"]
    );
}

#[test]
fn every_error_of_a_worksheet_is_listed() {
    let text = "```basis\n1x: 1 V\n```\n\n```derivation\nno label\n```\n\n{{ a + b }}\n\n![](x.png)\n";
    let found = errors(body(text));
    assert_eq!(found.len(), 4, "{found:#?}");
}
