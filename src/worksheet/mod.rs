//! text -> Worksheet: head, prose, blocks, recalls, each with its place in the file.

mod acceptance;
mod basis;
mod conditions;
mod derivation;
mod fence;
mod figure;
mod flow;
mod head;
mod lines;
mod math;
mod page;
mod prose;
mod read;
pub mod recall;
mod records;

pub use basis::{BasisValue, basis_text, quantity_as, source_of};
pub use fence::WORDS;
pub use flow::flow;
pub use head::is_date;
pub use read::read;

use crate::diagnostic::Diagnostics;
use crate::formula::{Formula, Relation};
use crate::markup::{Align, Math};
use crate::quantity::{Quantity, Role, Sourced};
use crate::source::{Digest, Place};

/// Reading a worksheet stops where so many things are wrong with it: it is probably no worksheet at all.
const ENOUGH: usize = 500;

fn enough(diagnostics: &Diagnostics) -> bool {
    diagnostics.0.len() >= ENOUGH
}

#[derive(Clone, Debug)]
pub struct Worksheet {
    /// Path inside the notebook.
    pub path: String,
    pub digest: Digest,
    pub head: Head,
    pub body: Vec<Piece>,
    pub basis: Vec<BasisEntry>,
    pub conditions: Vec<Condition>,
    /// The circuit block, not yet a network: designator -> record, in order of writing.
    pub circuit: Vec<Record>,
    pub derivation: Vec<DerivationLine>,
    pub acceptance: Vec<CriterionLine>,
    pub figures: Vec<FigureRequest>,
    /// Every recall of the prose, in order.
    pub recalls: Vec<Recall>,
    /// Every image of the prose: path inside the notebook and place.
    pub images: Vec<(String, Place)>,
}

/// A text with its place.
#[derive(Clone, PartialEq, Debug)]
pub struct Spot<T> {
    pub value: T,
    pub place: Place,
}

/// The YAML head. Every key is `note`, `title`, `author`, `checker`, `approver`, `revision`, `date`, `clauses`, `revisions`.
#[derive(Clone, Debug)]
pub struct Head {
    pub note: Spot<String>,
    pub title: Spot<String>,
    pub author: Spot<String>,
    pub checker: Option<Spot<String>>,
    pub approver: Option<Spot<String>>,
    pub revision: Spot<String>,
    /// Date of issue, ISO 8601 (checked to be a date of the calendar).
    pub date: Spot<String>,
    /// Clauses of the specification that the note must answer: id (`LB-1 3.4`) and text.
    pub clauses: Vec<(Spot<String>, String)>,
    /// Earlier revisions: revision, date, what changed.
    pub revisions: Vec<[String; 3]>,
}

/// The body as read; the study turns it into `markup::Flow` by filling in recalls.
#[derive(Clone, Debug)]
pub enum Piece {
    Heading {
        level: u8,
        content: Vec<Span>,
    },
    Paragraph {
        content: Vec<Span>,
    },
    List {
        ordered: Option<u64>,
        items: Vec<Vec<Piece>>,
    },
    Quote {
        content: Vec<Piece>,
    },
    Listing {
        text: String,
    },
    Rule,
    Table {
        align: Vec<Align>,
        head: Vec<Vec<Span>>,
        rows: Vec<Vec<Vec<Span>>>,
    },
    Image {
        path: String,
        alt: String,
        caption: Vec<Span>,
        place: Place,
    },
    /// A fenced block of ours: its word and index among blocks of that word.
    Placed {
        word: String,
        index: usize,
    },
}

#[derive(Clone, Debug)]
pub enum Span {
    Text(String),
    Emphasis(Vec<Span>),
    Strong(Vec<Span>),
    Struck(Vec<Span>),
    Code(String),
    /// `$...$`, set as mathematics; its names are not checked against the note.
    Formula {
        math: Math,
        spoken: String,
    },
    /// Index into `Worksheet::recalls`.
    Recall(usize),
    Link {
        target: String,
        content: Vec<Span>,
    },
    Footnote(Vec<Piece>),
    Break,
}

/// `{{ ... }}`: an expression of the template engine over names of the note.
#[derive(Clone, Debug)]
pub struct Recall {
    pub source: String,
    /// Symbols of the note that it names, each with its place (`I_B`, `Q1.V_CE`), and criteria in `met("...")`.
    pub names: Vec<Spot<String>>,
    pub criteria: Vec<Spot<String>>,
    pub place: Place,
}

/// `V_bat: 10.8 to 14.8 V, usually 12.6 V [battery sheet rev 3 p. 4]`; a plain text after a dash describes it.
#[derive(Clone, Debug)]
pub struct BasisEntry {
    pub name: Spot<String>,
    pub sourced: Sourced,
    /// `for` text, if the entry has one.
    pub description: Option<String>,
    /// How it varies within its limits; a value of the basis is bias-like where nothing else is said.
    pub role: Role,
    /// How far it drifts with age, as a share of its value.
    pub ageing: Option<Quantity>,
    /// Index of the basis block.
    pub block: usize,
}

/// `inrush: {normal: yes, DS1: cold, lasts: 80 ms}`
#[derive(Clone, Debug)]
pub struct Condition {
    pub name: Spot<String>,
    /// A normal operating state: derated limits apply. Otherwise a fault: ratings only.
    pub normal: bool,
    /// How long it lasts; `None` for ever.
    pub lasts: Option<Quantity>,
    /// Basis values overridden in this condition.
    pub overrides: Vec<(Spot<String>, Quantity)>,
    /// Elements in another state: `cold`, `shorted`, `open`.
    pub states: Vec<(Spot<String>, Spot<ElementState>)>,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum ElementState {
    Cold,
    Shorted,
    Open,
}

/// One record of a block: a key and a flat map of keys to texts, with places.
#[derive(Clone, Debug)]
pub struct Record {
    pub key: Spot<String>,
    pub fields: Vec<(Spot<String>, Spot<String>)>,
    pub block: usize,
}

/// `forced gain: k = I_C / I_B` or `enough: I_B > 3 * I_C / beta`
#[derive(Clone, Debug)]
pub struct DerivationLine {
    pub label: String,
    pub what: DerivationKind,
    /// The condition it is evaluated in (`in on`); the first condition otherwise.
    pub condition: Option<Spot<String>>,
    pub place: Place,
    pub block: usize,
}

#[derive(Clone, Debug)]
pub enum DerivationKind {
    Define { name: Spot<String>, formula: Formula },
    Assert { relation: Relation, text: String },
}

/// `cool: Q1.T_j <= 125 °C over extremes in on [LB-1 3.6]`
#[derive(Clone, Debug)]
pub struct CriterionLine {
    pub label: Spot<String>,
    pub what: CriterionKind,
    pub text: String,
    pub over: Over,
    /// `over coverage ...`: a share of specimens decides, not the extreme value (which still stands beside it).
    pub coverage: Option<Coverage>,
    /// Conditions it must hold in; empty: in all.
    pub conditions: Vec<Spot<String>>,
    pub clause: Option<Spot<String>>,
    /// `safety` was written: a safety function leans on it.
    pub safety: bool,
    pub place: Place,
    pub block: usize,
}

/// `over coverage 99.7 % from 20000 samples because "trimmed in test"`
#[derive(Clone, PartialEq, Debug)]
pub struct Coverage {
    /// Share of specimens that must satisfy the criterion, between a half and 0.9999.
    pub share: f64,
    /// The share as written.
    pub text: String,
    /// How many specimens are drawn, where the worksheet says so.
    pub samples: Option<usize>,
    /// Why not every specimen must satisfy it.
    pub because: String,
    pub place: Place,
}

/// There are few of these; a box would only stand in the way of matching.
#[allow(clippy::large_enum_variant)]
#[derive(Clone, Debug)]
pub enum CriterionKind {
    Relation(Relation),
    /// `Q1 saturated`
    State {
        designator: Spot<String>,
        region: Region,
    },
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Region {
    Off,
    Active,
    Saturated,
    Reverse,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Over {
    Nominal,
    Extremes,
}

/// A figure block: plot / against / over / corners / in / title, or one of the fixed kinds.
#[derive(Clone, Debug)]
pub struct FigureRequest {
    pub kind: FigureKind,
    pub title: Option<String>,
    pub condition: Option<Spot<String>>,
    pub place: Place,
}

#[derive(Clone, Debug)]
pub enum FigureKind {
    /// Results against an input, nominal and (if wanted) the band between the corners.
    Sweep { plot: Vec<Formula>, against: Spot<String>, over: Quantity, corners: bool },
    /// Output characteristics of a transistor with load line and operating point.
    OutputCharacteristics { designator: Spot<String>, over: Option<Quantity> },
    /// Dissipation allowed over ambient temperature with the operating point.
    PowerDerating { designator: Spot<String> },
}

impl Worksheet {
    /// Every part that the circuit names, with the place of each use, in order of writing.
    pub fn parts_used(&self) -> Vec<&Spot<String>> {
        const DEVICES: [&str; 4] = ["npn", "pnp", "diode", "zener"];
        let names_part = |key: &str| key == "part" || DEVICES.contains(&key);
        self.circuit
            .iter()
            .flat_map(|record| &record.fields)
            .filter(|(key, _)| names_part(&key.value))
            .map(|(_, value)| value)
            .collect()
    }

    /// Paths inside the notebook of every image, each once.
    pub fn image_paths(&self) -> std::collections::BTreeSet<&str> {
        self.images.iter().map(|(path, _)| path.as_str()).collect()
    }
}
