//! Nothing panics, and nothing takes for ever, whatever stands in the file.

use qsheaf::source::File;
use qsheaf::worksheet;

use super::{HEAD, body, errors, golden::LAMP};

/// xorshift64*: Marsaglia 2003, Vigna 2016.
struct Random(u64);

impl Random {
    fn below(&mut self, bound: usize) -> usize {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        (self.0.wrapping_mul(0x2545_f491_4f6c_dd1d) >> 33) as usize % bound
    }
}

const SCRAPS: [&str; 42] = [
    "{{",
    "}}",
    "{%",
    "```",
    "~~~",
    "basis",
    "circuit\n",
    "acceptance\n",
    "derivation\n",
    "figure\n",
    "\n",
    "\n\n",
    ": ",
    "|",
    "---",
    "[",
    "]",
    "(",
    ")",
    "$",
    "$$",
    "*",
    "_",
    "`",
    "\\",
    "<",
    ">",
    "é",
    "Ω",
    "±",
    "\t",
    "  ",
    "[^a]",
    "[^a]: ",
    "![",
    "](",
    "Q1",
    "I_B",
    " = ",
    "\"",
    "'",
    "\r\n",
];

#[test]
fn random_scraps_never_panic() {
    let mut random = Random(7);
    for _ in 0..3_000 {
        let mut text = String::from(HEAD);
        for _ in 0..random.below(60) {
            text.push_str(SCRAPS[random.below(SCRAPS.len())]);
        }
        let _ = worksheet::read(&File::new("a.md", text.into_bytes()));
    }
}

#[test]
fn a_worksheet_with_damaged_bytes_never_panics() {
    let mut random = Random(11);
    for _ in 0..1_500 {
        let mut bytes = LAMP.as_bytes().to_vec();
        for _ in 0..1 + random.below(8) {
            let at = random.below(bytes.len());
            match random.below(4) {
                0 => bytes[at] = random.below(256) as u8,
                1 => bytes.truncate(at.max(1)),
                2 => {
                    bytes.remove(at);
                }
                _ => {
                    let scrap = SCRAPS[random.below(SCRAPS.len())];
                    bytes.splice(at..at, scrap.bytes());
                }
            }
            if bytes.is_empty() {
                break;
            }
        }
        let _ = worksheet::read(&File::new("a.md", bytes));
    }
}

#[test]
fn binary_garbage_is_refused() {
    let mut random = Random(13);
    let bytes: Vec<u8> = (0..100_000).map(|_| random.below(256) as u8).collect();
    assert_eq!(errors(worksheet::read(&File::new("a.md", bytes))).len(), 1);
}

#[test]
fn deep_nesting_is_an_error() {
    for open in ["- ", "> ", "1. ", "*a ", "[", "![", "**a _b "] {
        let text = format!("{}x\n", open.repeat(30_000 / open.len()));
        let _ = body(&text);
    }
    assert!(errors(body(&format!("{}x\n", "> ".repeat(10_000))))[0].contains("nested too deep"));
    assert!(errors(body(&format!("{}x\n", "- ".repeat(10_000))))[0].contains("nested too deep"));
    for formula in ["((((", "x^", "a/", "\\sqrt ", "sin ", "|", "\\frac{", "{", "-"] {
        let _ = body(&format!("${}x$\n", formula.repeat(400)));
    }
    let yaml = format!("```basis\na: {}\n```\n", "{a: ".repeat(5_000));
    assert!(!errors(body(&yaml)).is_empty());
}

#[test]
fn a_large_file_of_mistakes_is_read_quickly() {
    let begin = std::time::Instant::now();
    for scrap in [
        "<b> ",
        "{{ a + }} ",
        "{{ ",
        "[^a] ",
        "$\\x$ ",
        "`",
        "![](a.png) ",
        "*",
        "```basys\n```\n",
        "[a](b:c) ",
    ] {
        let text = scrap.repeat(20_000 / scrap.len()) + "\n\n";
        let text = text.repeat(50);
        let found = errors(body(&text));
        assert!(found.len() <= 510, "{scrap}: {}", found.len());
        println!("{scrap:?} {:?}", begin.elapsed());
    }
    for (word, line) in [
        ("derivation", "a: x = y +\n"),
        ("acceptance", "a: Q1 satur\n"),
        ("derivation", "x\n"),
        ("basis", "- x\n"),
    ] {
        let text = format!("```{word}\n{}```\n", line.repeat(500_000 / line.len()));
        assert!(errors(body(&text)).len() <= 510);
        println!("{word} {:?}", begin.elapsed());
    }
    // Generous: the bound is there to catch a quadratic step, which would take minutes.
    assert!(begin.elapsed().as_secs() < 60, "{:?}", begin.elapsed());
}
