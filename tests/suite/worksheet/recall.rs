//! Recalls: what they may say, what they find, and what they come to.

use std::cell::RefCell;

use qsheaf::markup::Inline;
use qsheaf::worksheet::recall::{Asked, End, Lookup, Print, evaluate};

use super::{body, errors};

const BLOCKS: &str = "```conditions\non: {normal: yes}\noff: {normal: yes}\n```\n\n\
    ```acceptance\ncool: T_a <= 50 °C\nit's: T_a <= 50 °C\n```\n";

fn recall_errors(recall: &str) -> Vec<String> {
    errors(body(&format!("{recall}\n\n{BLOCKS}")))
}

/// Answers with what it was asked, and remembers it.
#[derive(Default)]
struct Echo(RefCell<Vec<(Asked, Print)>>);

impl Lookup for Echo {
    fn met(&self, label: &str) -> Option<bool> {
        Some(label == "cool")
    }

    fn print(&self, asked: &Asked, print: &Print) -> Result<Vec<Inline>, String> {
        if print.unit.as_deref() == Some("kg") {
            return Err("a current is not printed in kg".into());
        }
        self.0.borrow_mut().push((asked.clone(), print.clone()));
        Ok(vec![Inline::Text { text: "value".into() }])
    }
}

fn evaluated(recall: &str) -> Result<(String, Vec<(Asked, Print)>), String> {
    let (worksheet, _) = body(&format!("{recall}\n\n{BLOCKS}")).unwrap_or_else(|found| panic!("{found:#?}"));
    let echo = Echo::default();
    match evaluate(&worksheet.recalls[0], &echo) {
        Ok(inlines) => {
            let text = inlines
                .iter()
                .map(|inline| match inline {
                    Inline::Text { text } => text.as_str(),
                    _ => "?",
                })
                .collect();
            Ok((text, echo.0.into_inner()))
        }
        Err(found) => Err(found.message),
    }
}

fn symbol(name: &str, condition: Option<&str>, end: End) -> Asked {
    Asked::Symbol { name: name.into(), condition: condition.map(String::from), end }
}

fn printed(unit: Option<&str>, digits: Option<u8>) -> Print {
    Print { unit: unit.map(String::from), digits }
}

#[test]
fn a_name_is_asked_for_as_it_stands() {
    for (recall, asked, print) in [
        ("{{ I_B }}", symbol("I_B", None, End::Nominal), printed(None, None)),
        ("{{ I_B | unit(\"mA\", 3) }}", symbol("I_B", None, End::Nominal), printed(Some("mA"), Some(3))),
        ("{{Q1.V_CE(sat)|digits(2)}}", symbol("Q1.V_CE(sat)", None, End::Nominal), printed(None, Some(2))),
        (
            "{{ R_th(j-a) | unit('K/W') }}",
            symbol("R_th(j-a)", None, End::Nominal),
            printed(Some("K/W"), None),
        ),
        ("{{ max(I_B) }}", symbol("I_B", None, End::Max), printed(None, None)),
        ("{{ min(at(\"off\", I_B)) }}", symbol("I_B", Some("off"), End::Min), printed(None, None)),
        ("{{ at('off', nominal(β_F)) }}", symbol("β_F", Some("off"), End::Nominal), printed(None, None)),
        (
            "{{ worst(\"cool\") | unit(\"°C\") }}",
            Asked::Worst { label: "cool".into() },
            printed(Some("°C"), None),
        ),
    ] {
        assert_eq!(evaluated(recall), Ok(("value".into(), vec![(asked, print)])), "{recall}");
    }
}

#[test]
fn words_are_chosen_by_verdicts() {
    assert_eq!(evaluated("{{ \"kept\" if met(\"cool\") else \"not kept\" }}").unwrap().0, "kept");
    assert_eq!(evaluated("{{ 'a' if not met(\"cool\") else 'b' }}").unwrap().0, "b");
    assert_eq!(evaluated("{{ 'a' if met(\"cool\") and met(\"it's\") else 'b' }}").unwrap().0, "b");
    assert_eq!(evaluated("{{ 'never }} seen' if met(\"it's\") else '}}' }}").unwrap().0, "}}");
    assert_eq!(evaluated("{{ 'x' if met(\"it's\") }}").unwrap().0, "");
    // The branch not taken is not looked up.
    assert_eq!(evaluated("{{ 'a' if met(\"cool\") else I_B }}").unwrap().1, []);
}

#[test]
fn a_wrong_unit_is_reported_when_it_is_printed() {
    assert_eq!(evaluated("{{ I_B | unit('kg') }}"), Err("a current is not printed in kg".into()));
    assert!(evaluated("{{ I_B | digits(40) }}").unwrap_err().contains("1 to 12 significant digits"));
    assert!(evaluated("{{ met('cool') }}").unwrap_err().contains("neither a text nor a value"));
    assert!(evaluated("{{ max('x') }}").unwrap_err().contains("a name of the note"));
}

#[test]
fn what_a_recall_may_not_do_is_placed() {
    for (recall, expected) in [
        ("{{ I_B + I_C }}", "8:8 a recall does not take `+`"),
        ("a {{ I_B * 2 }}", "8:10 a recall does not take `*`"),
        ("{{ 'x' if I_B > I_C else 'y' }}", "8:15 a recall does not take `>`"),
        ("{{ 'x' ~ I_B }}", "8:8 a recall does not take `~`"),
        ("{{ [I_B] }}", "8:4 a recall does not take `[`"),
        ("{{ }}", "8:1 the recall is empty"),
        ("{{ I_B | unt('mA') }}", "8:10 unknown filter `unt`"),
        ("{{ wrst('cool') }}", "8:4 unknown function `wrst`"),
        ("{{ met(cool) }}", "8:4 `met` needs the label of a criterion"),
        ("{{ 'a' if met('col') else 'b' }}", "8:16 there is no criterion `col`"),
        ("{{ at('of', I_B) }}", "8:8 there is no condition `of`"),
        ("{{ 'a' if I_B else 'b' }}", "8:11 `I_B` is neither true nor false"),
        ("{{ I_B I_C }}", "8:1 this recall is malformed: unexpected input after expression"),
        ("{{ 'a }}", "8:4 a recall does not take `'a`"),
    ] {
        let found = recall_errors(recall);
        assert!(found.first().is_some_and(|first| first == expected), "{recall}: {found:?}");
    }
}

#[test]
fn misspelt_labels_are_offered_right() {
    let Err(found) = body(&format!("{{{{ worst('coll') }}}}\n\n{BLOCKS}")) else { panic!() };
    assert_eq!(found.0[0].nearest.as_deref(), Some("cool"));
}

#[test]
fn deep_brackets_are_an_error_not_a_crash() {
    let deep = format!("{{{{ {}I_B{} }}}}", "(".repeat(400), ")".repeat(400));
    assert!(!recall_errors(&deep).is_empty());
    let long = format!("{{{{ '{}' }}}}", "x".repeat(2000));
    assert_eq!(recall_errors(&long), ["8:1 the recall has 2002 bytes"]);
}
