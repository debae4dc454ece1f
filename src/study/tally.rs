//! How many verdicts of which kind findings hold.

use serde::{Deserialize, Serialize};

use super::findings::{Findings, Verdict};

/// How many criteria, ratings or assertions have which verdict.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Verdicts {
    pub met: usize,
    pub met_on_assumptions: usize,
    pub not_met: usize,
    pub not_shown: usize,
}

/// The verdicts of a note by what they judge.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Tally {
    /// Criteria that the worksheet states.
    pub criteria: Verdicts,
    /// Rated quantities in each condition.
    pub ratings: Verdicts,
    /// Lines of a derivation that assert something.
    pub assertions: Verdicts,
}

impl Verdicts {
    /// Every one is met, on assumptions or not.
    pub fn all_met(&self) -> bool {
        self.not_met == 0 && self.not_shown == 0
    }

    pub fn count(&self) -> usize {
        self.met + self.met_on_assumptions + self.not_met + self.not_shown
    }

    fn with(self, other: Verdicts) -> Verdicts {
        Verdicts {
            met: self.met + other.met,
            met_on_assumptions: self.met_on_assumptions + other.met_on_assumptions,
            not_met: self.not_met + other.not_met,
            not_shown: self.not_shown + other.not_shown,
        }
    }
}

impl Tally {
    /// All of them: what an exit status goes by.
    pub fn whole(&self) -> Verdicts {
        self.criteria.with(self.ratings).with(self.assertions)
    }
}

impl Findings {
    pub fn tally(&self) -> Tally {
        let mut tally = Tally {
            criteria: Verdicts::default(),
            ratings: Verdicts::default(),
            assertions: Verdicts::default(),
        };
        for criterion in &self.criteria {
            let counts = &mut tally.criteria;
            match criterion.verdict {
                Verdict::Met => counts.met += 1,
                Verdict::MetOnAssumptions { .. } => counts.met_on_assumptions += 1,
                Verdict::NotMet => counts.not_met += 1,
                Verdict::NotShown { .. } => counts.not_shown += 1,
            }
        }
        for line in &self.stress {
            let counts = &mut tally.ratings;
            match line.verdict.as_str() {
                "met" => counts.met += 1,
                "met-on-assumptions" => counts.met_on_assumptions += 1,
                "not-met" => counts.not_met += 1,
                _ => counts.not_shown += 1,
            }
        }
        for step in self.derivation.iter().filter(|step| step.symbol.is_none()) {
            let counts = &mut tally.assertions;
            match step.holds {
                Some(true) => counts.met += 1,
                Some(false) => counts.not_met += 1,
                None => counts.not_shown += 1,
            }
        }
        tally
    }
}
