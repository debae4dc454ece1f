//! Text that is safe to typeset. What an author wrote reaches the typesetter as data (this tree, as JSON), never as
//! typesetting code, so that nothing in a worksheet can run. The house functions in `templates/` set the tree.

use serde::{Deserialize, Serialize};

/// A formula as a tree that the templates set as mathematics.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "math", rename_all = "kebab-case")]
pub enum Math {
    /// Parts side by side.
    Row {
        parts: Vec<Math>,
    },
    /// A quantity symbol: base (slanted) and subscript (upright), `V` and `CE(sat)`; an owner such as `Q1` where it has one.
    Symbol {
        base: String,
        subscript: String,
        owner: String,
    },
    /// A printed number, possibly with unit, from `quantity` printing: digits, then power of ten, then unit.
    Number {
        digits: String,
        exponent: Option<i32>,
        unit: String,
    },
    /// `+`, `−`, `·`, `=`, `≤`, `∥`
    Operator {
        sign: String,
    },
    Fraction {
        above: Box<Math>,
        below: Box<Math>,
    },
    Power {
        base: Box<Math>,
        exponent: Box<Math>,
    },
    Root {
        radicand: Box<Math>,
    },
    /// Round brackets.
    Group {
        inner: Box<Math>,
    },
    /// Vertical bars.
    Absolute {
        inner: Box<Math>,
    },
    /// A named function, set upright.
    Call {
        name: String,
        arguments: Vec<Math>,
    },
    /// Piecewise choice: value and condition; the last condition may be absent (otherwise).
    Cases {
        branches: Vec<(Math, Option<Math>)>,
    },
}

/// Running text.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "inline", rename_all = "kebab-case")]
pub enum Inline {
    Text {
        text: String,
    },
    Emphasis {
        content: Vec<Inline>,
    },
    Strong {
        content: Vec<Inline>,
    },
    Struck {
        content: Vec<Inline>,
    },
    Code {
        text: String,
    },
    /// A formula with its reading aloud.
    Formula {
        math: Math,
        spoken: String,
    },
    Link {
        target: String,
        content: Vec<Inline>,
    },
    /// The content of the footnote, set at the foot of the page.
    Footnote {
        content: Vec<Flow>,
    },
    /// A forced line break.
    Break,
}

/// A block of the body.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "flow", rename_all = "kebab-case")]
pub enum Flow {
    Heading {
        level: u8,
        content: Vec<Inline>,
    },
    Paragraph {
        content: Vec<Inline>,
    },
    List {
        ordered: Option<u64>,
        items: Vec<Vec<Flow>>,
    },
    Quote {
        content: Vec<Flow>,
    },
    Listing {
        text: String,
    },
    Rule,
    Table {
        align: Vec<Align>,
        head: Vec<Vec<Inline>>,
        rows: Vec<Vec<Vec<Inline>>>,
    },
    /// An image of the notebook by path, with its alternative text (never empty) and caption.
    Image {
        path: String,
        alt: String,
        caption: Vec<Inline>,
    },
    /// Where a fenced block stood: the block's word and its index among blocks of that word, so that what it produces
    /// (the basis table, a derivation, a figure) is set here.
    Placed {
        word: String,
        index: usize,
    },
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Align {
    Left,
    Center,
    Right,
}
