//! Markdown: what it becomes, and what is refused where.

use qsheaf::markup::{Align, Math};
use qsheaf::worksheet::{Piece, Span};

use super::{body, errors};

fn pieces(text: &str) -> Vec<Piece> {
    body(text).unwrap_or_else(|found| panic!("{found:#?}")).0.body
}

fn text(span: &Span) -> &str {
    match span {
        Span::Text(text) | Span::Code(text) => text,
        _ => "",
    }
}

#[test]
fn recalls_survive_emphasis_tables_links_and_code() {
    let found = pieces("*a {{ x_1 }} b* **{{ x_2 }}** [w {{ x_3 }}](https://a.b) `{{ x_4 }}` {{ x_5 }}_\n");
    let [Piece::Paragraph { content }] = found.as_slice() else { panic!("{found:#?}") };
    assert!(matches!(&content[0], Span::Emphasis(inner) if matches!(inner[1], Span::Recall(0))));
    assert!(matches!(&content[2], Span::Strong(inner) if matches!(inner[0], Span::Recall(1))));
    assert!(matches!(&content[4], Span::Link { content, .. } if matches!(content[1], Span::Recall(2))));
    assert_eq!(text(&content[6]), "{{ x_4 }}");
    assert!(matches!(content[8], Span::Recall(3)));
    assert_eq!(text(&content[9]), "_");

    let found = pieces("| a | b |\n|:-:|--:|\n| {{ x | unit('V') }} | ~~c~~ |\n");
    let [Piece::Table { align, head, rows }] = found.as_slice() else { panic!("{found:#?}") };
    assert_eq!(align, &[Align::Center, Align::Right]);
    assert_eq!((head.len(), rows.len()), (2, 1));
    assert!(matches!(rows[0][0][0], Span::Recall(0)));
    assert!(matches!(rows[0][1][0], Span::Struck(_)));
}

#[test]
fn lists_quotes_images_listings_and_rules() {
    let found = pieces(
        "1. one\n2. two\n   - deeper\n\n> quoted\n\nbefore ![what](a/b.png \"Caption\") after\n\n---\n\n\
         ```c\nint x; // {{ y }}\n```\n",
    );
    assert!(matches!(&found[0], Piece::List { ordered: Some(1), items } if items.len() == 2));
    assert!(matches!(&found[1], Piece::Quote { content } if content.len() == 1));
    assert!(matches!(&found[2], Piece::Paragraph { .. }));
    assert!(matches!(&found[3], Piece::Image { path, alt, caption, .. }
        if path == "notes/a/b.png" && alt == "what" && text(&caption[0]) == "Caption"));
    assert!(matches!(&found[4], Piece::Paragraph { .. }));
    assert!(matches!(&found[5], Piece::Rule));
    assert!(matches!(&found[6], Piece::Listing { text } if text == "int x; // {{ y }}\n"));
}

#[test]
fn a_rule_of_dashes_in_the_body_is_a_rule() {
    assert!(matches!(pieces("a\n\n---\n\nnote: x\n\n---\n").as_slice(), [_, Piece::Rule, _, Piece::Rule]));
}

#[test]
fn images_may_stand_beside_the_worksheet_or_above_it() {
    let (worksheet, _) = body("![x](../images/./a.png)\n").unwrap();
    assert_eq!(worksheet.image_paths().into_iter().collect::<Vec<_>>(), ["images/a.png"]);
    for outside in ["../../a.png", "/etc/a.png", "https://a.b/c.png", "..", "c:\\a.png"] {
        let found = errors(body(&format!("![x](<{outside}>)\n")));
        assert_eq!(found, [format!("8:1 the image `{outside}` does not lie inside the notebook")]);
    }
}

#[test]
fn what_prose_refuses_is_placed() {
    for (prose, expected) in [
        ("a <b>c</b>\n", "8:3 HTML is not read here: a worksheet is data"),
        ("x\n\n<div>\n\ny\n", "10:1 HTML is not read here: a worksheet is data"),
        ("<!-- c -->\n", "8:1 HTML is not read here: a worksheet is data"),
        ("see [^q] there\n", "8:5 there is no footnote `q`"),
        ("[^q]: unused\n", "8:1 the footnote `q` is never referred to"),
        ("a[^q] b[^q]\n\n[^q]: x\n", "8:8 the footnote `q` is referred to twice"),
        ("a[^q]\n\n[^q]: x[^r]\n\n[^r]: y\n", "10:8 a footnote refers to a footnote"),
        ("{{ a\n", "8:1 this recall is not closed on its line"),
        ("ä {{ a\n", "8:3 this recall is not closed on its line"),
        ("x }} y\n", "8:3 this closes a recall that was never opened on its line"),
        ("{% if x %}\n", "8:1 a worksheet takes no statements of the template engine"),
        ("![](a.png)\n", "8:1 the image has no alternative text"),
        ("![{{ x }}](a.png)\n", "8:3 a recall stands in the alternative text of an image"),
        ("![x]({{y}}.png)\n", "8:6 a recall stands in the path or the caption of an image"),
        ("# ![x](a.png)\n", "8:3 an image cannot stand in a heading, table, link or emphasis"),
        ("[x](https://{{ x }})\n", "8:13 a recall stands in the address of a link"),
        ("[x](file:///a)\n", "8:1 a report cannot lead to `file:///a`"),
        ("[x]: https://{{ x }}\n", "8:14 this recall stands where nothing is printed"),
        ("$a + {{ x }}$\n", "8:6 a recall stands in a formula"),
        ("$\\frca{a}{b}$\n", "8:2 unknown command `\\frca` in a formula"),
        ("$(a$\n", "8:2 this bracket is not closed"),
        ("$a)$\n", "8:3 a closing bracket has no opening one"),
        ("$a / $\n", "8:1 "),
    ] {
        let found = errors(body(prose));
        match expected {
            "8:1 " => assert!(found.is_empty() || found[0].starts_with("8:"), "{prose}: {found:?}"),
            _ => assert_eq!(found.first().map(String::as_str), Some(expected), "{prose}: {found:?}"),
        }
    }
}

#[test]
fn escapes_and_entities_stay_text() {
    let found = pieces("\\{{ a }\\} &lt;b&gt; 3 < 4 \\<i\\>\n");
    let [Piece::Paragraph { content }] = found.as_slice() else { panic!("{found:#?}") };
    assert_eq!(content.iter().map(text).collect::<String>(), "{{ a }} <b> 3 < 4 <i>");
}

fn formula(written: &str) -> (Math, String) {
    let found = pieces(&format!("${written}$\n"));
    let [Piece::Paragraph { content }] = found.as_slice() else { panic!("{found:#?}") };
    let [Span::Formula { math, spoken }] = content.as_slice() else { panic!("{content:#?}") };
    (math.clone(), spoken.clone())
}

#[test]
fn formulas_read_plain_and_with_commands() {
    for (written, spoken) in [
        ("V_CE(sat) <= 0.3 V", "V sub CE(sat) is at most 0.3 V"),
        ("\\frac{V_{CC} - V_{BE}}{R_B}", "V sub CC minus V sub BE over R sub B"),
        ("a/b", "a over b"),
        ("(a + b)/c", "a plus b over c"),
        ("x^2 + y^{-1}", "x to the power 2 plus y to the power minus 1"),
        ("\\sqrt{x}", "the square root of x"),
        ("sqrt(x)", "the square root of x"),
        ("|A_v|", "the magnitude of A sub v"),
        ("R_1 || R_2", "R sub 1 in parallel with R sub 2"),
        ("I_C \\approx \\beta I_B", "I sub C is about β I sub B"),
        ("Q1.V_BE", "V sub BE of Q1"),
        ("\\ln(a)", "ln of a"),
        ("25 °C", "25 °C"),
        ("10 %", "10 %"),
        ("200 K/W", "200 K/W"),
        ("Q1.forced_gain", "I_C/I_B of Q1"),
        ("2 R_L", "2 R sub L"),
        ("\\left( a \\right)", "open bracket a close bracket"),
    ] {
        assert_eq!(formula(written).1, spoken, "{written}");
    }
    assert!(matches!(formula("a/b").0, Math::Fraction { .. }));
    let symbol = Math::Symbol { base: "R".into(), subscript: "E".into(), owner: "Q1".into() };
    assert_eq!(formula("Q1.R_E").0, symbol);
}
