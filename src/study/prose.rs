//! What prose recalls: results by name, in a condition, at nominal or at an extreme.

use super::compile::Compiled;
use super::findings::{CriterionFinding, ResultFinding, Verdict};
use crate::diagnostic::Diagnostics;
use crate::markup::{Flow, Inline};
use crate::quantity::{self, Kind, Shown, Unit};
use crate::worksheet::recall::{self, Asked, End, Lookup, Print};
use crate::worksheet::{self, DerivationKind};

/// Significant digits of a recalled value when the author chose none.
const DIGITS: u8 = 3;

struct Results<'a> {
    compiled: &'a Compiled<'a>,
    criteria: &'a [CriterionFinding],
    results: &'a [ResultFinding],
    first_condition: &'a str,
}

impl Lookup for Results<'_> {
    fn met(&self, label: &str) -> Option<bool> {
        let criterion = self.criteria.iter().find(|criterion| criterion.label == label)?;
        Some(matches!(criterion.verdict, Verdict::Met | Verdict::MetOnAssumptions { .. }))
    }

    fn print(&self, asked: &Asked, print: &Print) -> Result<Vec<Inline>, String> {
        match asked {
            Asked::Worst { label } => {
                let criterion = self
                    .criteria
                    .iter()
                    .find(|criterion| criterion.label == *label)
                    .ok_or_else(|| format!("there is no criterion `{label}`"))?;
                printed(&criterion.worst.value, criterion.kind, &criterion.unit, print)
            }
            Asked::Symbol { name, condition, end } => {
                if let Some(input) = self.compiled.inputs.iter().find(|input| input.symbol == *name) {
                    let value = match end {
                        End::Nominal => input.spread.nominal,
                        End::Min => input.spread.low,
                        End::Max => input.spread.high,
                    };
                    return printed(&Shown::Value(value), input.kind, &input.unit, print);
                }
                let wanted =
                    condition.as_deref().or_else(|| self.shown_in(name)).unwrap_or(self.first_condition);
                let row = self
                    .results
                    .iter()
                    .find(|row| row.symbol == *name && row.condition == wanted)
                    .ok_or_else(|| format!("there is no result `{name}` in a condition `{wanted}`"))?;
                let value = match end {
                    End::Nominal => &row.nominal,
                    End::Min => &row.min.value,
                    End::Max => &row.max.value,
                };
                printed(value, row.kind, &row.unit, print)
            }
        }
    }
}

impl Results<'_> {
    /// The condition in which the derivation shows a name.
    fn shown_in(&self, name: &str) -> Option<&str> {
        self.compiled.material.worksheet.derivation.iter().find_map(|line| match &line.what {
            DerivationKind::Define { name: defined, .. } if defined.value == name => {
                line.condition.as_ref().map(|condition| condition.value.as_str())
            }
            _ => None,
        })
    }
}

fn printed(value: &Shown, kind: Kind, unit: &Unit, print: &Print) -> Result<Vec<Inline>, String> {
    let value = match value {
        Shown::Value(value) => *value,
        Shown::NotShown(reason) => {
            let text = format!("NOT SHOWN ({reason})");
            return Ok(vec![Inline::Strong { content: vec![Inline::Text { text }] }]);
        }
    };
    let chosen = match &print.unit {
        Some(written) => {
            let unit = quantity::parse_unit(written).ok_or_else(|| format!("`{written}` is no unit"))?;
            if unit.kind.dimension != kind.dimension {
                return Err(format!("the value is in {}, not in {written}", kind.dimension));
            }
            if kind.point { Unit::celsius() } else { unit }
        }
        None => unit.clone(),
    };
    let text = quantity::text(value, &chosen, print.digits.unwrap_or(DIGITS));
    Ok(vec![Inline::Text { text }])
}

/// The body with every recall replaced by what it names.
pub(super) fn body(
    compiled: &Compiled<'_>,
    criteria: &[CriterionFinding],
    results: &[ResultFinding],
    first_condition: &str,
    diagnostics: &mut Diagnostics,
) -> Vec<Flow> {
    let lookup = Results { compiled, criteria, results, first_condition };
    let worksheet = &compiled.material.worksheet;
    let recalled: Vec<Vec<Inline>> = worksheet
        .recalls
        .iter()
        .map(|recall| diagnostics.keep(recall::evaluate(recall, &lookup)).unwrap_or_default())
        .collect();
    worksheet::flow(&worksheet.body, &|index| recalled.get(index).cloned().unwrap_or_default())
}
