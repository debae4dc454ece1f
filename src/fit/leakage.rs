//! Rows of I_CBO and I_R -> leakage at the reference temperature, its growth, the factor at the high end, what bounds it.

use super::{Bound, bound};
use crate::device::REFERENCE_TEMPERATURE;
use crate::part::{Part, Row, RowQuantity};
use crate::quantity::{Origin, Source};

/// Ten kelvin double a leakage (common practice).
pub(super) const E_FOLD: f64 = 10.0 / std::f64::consts::LN_2;
/// Without a typical value the curve starts a decade below the limit.
const BELOW_LIMIT: f64 = 10.0;

/// The leakage of a part over temperature: `nominal * e^((T - 25 °C) / e_fold)`.
pub(super) struct Leakage {
    /// At the reference temperature (A).
    pub nominal: f64,
    /// Temperature rise (K) that multiplies it by e.
    pub e_fold: f64,
    /// Factor at the high end of the axis.
    pub high: f64,
    pub bound: Bound,
}

/// Fits a leakage to the rows of `quantity`. The maximum rows at the coolest and the hottest temperature give its growth;
/// the high end covers every maximum row. With one temperature only, the growth is an assumption, and so is the bound.
pub(super) fn fit(part: &Part, quantity: RowQuantity, wanted: &str, notes: &mut Vec<String>) -> Leakage {
    let symbol = quantity.symbol();
    let rows: Vec<&Row> = part.rows_of(quantity).collect();
    let limits: Vec<(f64, f64)> = rows.iter().filter_map(|row| Some((row.at.t_j, row.max?))).collect();
    let grown = growth(&limits);
    if grown.is_none() && !rows.is_empty() {
        notes.push(format!(
            "one temperature of {symbol}: it is taken to double per 10 K (common practice), and its bound counts as an \
             assumption"
        ));
    }
    let e_fold = grown.unwrap_or(E_FOLD);
    let at_reference = |value: f64, t_j: f64| value * libm::exp(-(t_j - REFERENCE_TEMPERATURE) / e_fold);
    let highest = limits.iter().map(|(t_j, max)| at_reference(*max, *t_j)).fold(0.0, f64::max);
    let typical = rows
        .iter()
        .find_map(|row| Some(at_reference(row.typ.or(row.min.filter(|_| highest == 0.0))?, row.at.t_j)));
    let nominal = typical.unwrap_or(highest / BELOW_LIMIT);
    let high = if nominal > 0.0 { (highest / nominal).max(1.0) } else { 1.0 };
    let mut bound = bound(rows.iter().copied().filter(|row| row.max.is_some()), wanted);
    if bound == Bound::Sourced && grown.is_none() {
        let text = format!("{symbol} doubles per 10 K, common practice; the record has one temperature");
        bound = Bound::Weak { source: Source { origin: Origin::Assumption, text } };
    }
    Leakage { nominal, e_fold, high, bound }
}

/// Temperature rise (K) per factor e between the limits (K, A) at the coolest and the hottest temperature.
fn growth(limits: &[(f64, f64)]) -> Option<f64> {
    // Of several limits at one temperature the largest.
    let order = |a: &(f64, f64), b: &(f64, f64)| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1));
    let hot = limits.iter().copied().max_by(order)?;
    let cool = limits.iter().copied().min_by(|a, b| a.0.total_cmp(&b.0).then(b.1.total_cmp(&a.1)))?;
    (hot.0 - cool.0 > 1.0 && cool.1 > 0.0 && hot.1 > cool.1)
        .then(|| (hot.0 - cool.0) / libm::log(hot.1 / cool.1))
}
