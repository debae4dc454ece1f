//! Rows that cannot all be true, before a fit; limits that it misses on the inside, after it.

use super::{Residual, row_text};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, Row};

/// Rounding by which an end may miss a limit; fits aim a thousand times further outside.
const ROUNDING: f64 = 1e-12;

/// Refuses rows of one quantity in one test condition that contradict each other, at the later of the two.
pub(super) fn contradictions(part: &Part, errors: &mut Diagnostics) {
    for (i, later) in part.rows.iter().enumerate() {
        for earlier in &part.rows[..i] {
            if earlier.quantity != later.quantity || earlier.at != later.at {
                continue;
            }
            if let Some(what) = conflict(later, earlier) {
                errors.push(
                    Diagnostic::error(
                        &later.place,
                        format!(
                            "{} contradicts the row at {} in the same test condition ({}): {what}",
                            later.quantity.symbol(),
                            earlier.place,
                            row_text(later)
                        ),
                    )
                    .expected("one of the two rows to be taken out or corrected"),
                );
            }
        }
    }
}

/// What two rows in one test condition cannot both say.
fn conflict(later: &Row, earlier: &Row) -> Option<&'static str> {
    let above = |a: Option<f64>, b: Option<f64>| a.zip(b).is_some_and(|(a, b)| a > b);
    if above(later.min, earlier.max) {
        Some("its minimum lies above the maximum there")
    } else if above(earlier.min, later.max) {
        Some("its maximum lies below the minimum there")
    } else if above(later.typ, earlier.max) || above(earlier.min, later.typ) {
        Some("its typical value lies outside the limits there")
    } else if above(earlier.typ, later.max) || above(later.min, earlier.typ) {
        Some("the typical value there lies outside its limits")
    } else {
        None
    }
}

/// Refuses a model of which an end lies inside a limit of a row in the row's own test condition.
pub(super) fn kept(row: &Row, residual: &Residual, errors: &mut Diagnostics) {
    let [low, _, high] = residual.model;
    let hair = |limit: f64| ROUNDING * limit.abs();
    let inside = [
        ("minimum", row.min, row.min.is_some_and(|min| low.is_nan() || low > min + hair(min)), low),
        ("maximum", row.max, row.max.is_some_and(|max| high.is_nan() || high < max - hair(max)), high),
    ];
    for (which, limit, missed, model) in inside {
        if let (true, Some(limit)) = (missed, limit) {
            errors.push(
                Diagnostic::error(
                    &row.place,
                    format!(
                        "no specimen of the fitted model reaches the {which} of {} at {}: {limit:.6e} in the row, {model:.6e} \
                         in the model (SI units)",
                        row.quantity.symbol(),
                        residual.at
                    ),
                )
                .expected("rows that one device can keep"),
            );
        }
    }
}

/// Says that a row's bias cannot be reached by the fitted model.
pub(super) fn unreachable(row: &Row, errors: &mut Diagnostics) {
    errors.push(
        Diagnostic::error(
            &row.place,
            format!("the fitted model cannot reach this row's bias ({})", row_text(row)),
        )
        .expected("a bias that the other rows allow: a forced gain I_C/I_B below the gain that the rows of h_FE give"),
    );
}
