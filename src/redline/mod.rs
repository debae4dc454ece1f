//! Findings x Findings -> what moved.

mod compare;
mod facts;
mod recall;

pub use compare::{compare, stress_verdict};
pub use facts::part_lines;
pub use recall::{Unreadable, recall};

use serde::{Deserialize, Serialize};

use crate::quantity::{Kind, Shown, Unit};
use crate::study::Verdict;

/// What moved between an issue of a note and the one before it.
#[derive(Clone, PartialEq, Debug, Default, Serialize, Deserialize)]
pub struct Moves {
    /// The issue that the new one is compared with.
    pub since: u32,
    /// Program version then and now, where it changed.
    pub program: Option<(String, String)>,
    /// Input files whose content changed: path and whether it is new, changed or gone.
    pub files: Vec<(String, FileMove)>,
    pub inputs: Vec<InputMove>,
    pub results: Vec<ResultMove>,
    pub verdicts: Vec<VerdictMove>,
    /// Prose, cautions, the title or anything else that a reader sees changed.
    pub wording: bool,
    /// Why the earlier findings could not be compared with the new ones; the lists are empty then.
    #[serde(default)]
    pub incomparable: Option<String>,
}

/// What made a note move, as far as its two findings tell.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Cause {
    /// Neither inputs nor program changed.
    Nothing,
    /// The same inputs, computed by another version of the program.
    Program,
    /// Other inputs, computed by the same version.
    Inputs,
    /// Other inputs and another version: what moved may come from either.
    Both,
}

#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum FileMove {
    Added,
    Changed,
    Gone,
}

/// An input (basis value, element value, part row, rating, policy entry) with its printed value then and now.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct InputMove {
    pub symbol: String,
    /// `None` where the input is new.
    pub old: Option<String>,
    /// `None` where the input is gone.
    pub new: Option<String>,
}

/// A result whose value moved.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct ResultMove {
    pub symbol: String,
    pub condition: String,
    /// `nominal`, `minimum` or `maximum`.
    pub end: String,
    pub kind: Kind,
    pub unit: Unit,
    pub old: Option<Shown>,
    pub new: Option<Shown>,
}

/// A criterion or stress line whose verdict or margin moved.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct VerdictMove {
    /// Label of the criterion, or designator and rated quantity of a stress line.
    pub label: String,
    pub kind: Kind,
    pub unit: Unit,
    pub old: Option<(Verdict, Shown)>,
    pub new: Option<(Verdict, Shown)>,
}

impl VerdictMove {
    /// Whether the verdict itself changed, not only its margin, its reason or the number of its assumptions.
    pub fn flipped(&self) -> bool {
        let sort = |state: &Option<(Verdict, Shown)>| {
            state.as_ref().map(|(verdict, _)| std::mem::discriminant(verdict))
        };
        sort(&self.old) != sort(&self.new)
    }
}

impl Moves {
    /// Nothing moved at all.
    pub fn is_empty(&self) -> bool {
        self.program.is_none()
            && self.files.is_empty()
            && self.inputs.is_empty()
            && self.results.is_empty()
            && self.verdicts.is_empty()
            && !self.wording
            && self.incomparable.is_none()
    }

    /// Whether inputs, program or both changed.
    pub fn cause(&self) -> Cause {
        match (self.program.is_some(), !self.inputs.is_empty() || !self.files.is_empty()) {
            (false, false) => Cause::Nothing,
            (true, false) => Cause::Program,
            (false, true) => Cause::Inputs,
            (true, true) => Cause::Both,
        }
    }

    /// Whether anything moved that somebody who checked the earlier issue has not seen. Only a change of the worksheet
    /// that touches neither a value nor a word (a name, a date or a revision in its head) leaves signatures standing.
    pub fn clears_signatures(&self) -> bool {
        self.program.is_some()
            || self.incomparable.is_some()
            || self.wording
            || !self.inputs.is_empty()
            || !self.results.is_empty()
            || !self.verdicts.is_empty()
            || self.files.iter().any(|(path, _)| !path.ends_with(".md"))
    }
}
