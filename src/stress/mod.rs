//! Ratings, derating, junction temperature: judges quantities it is given.
//!
//! ```text
//! policy::read(file)                 -> Policy         the notebook's derating
//! demands(element, part, policy)     -> [Demand]       what is rated, observed, allowed
//! demand.margin(normal)              -> formula text   what the study takes to its worst corner
//! line(demand, judged)               -> StressLine     the verdict, ready to print
//! ```

mod demand;
pub mod policy;

pub use demand::{Applies, Demand, Falling, demands};
pub use policy::Policy;

use serde::{Deserialize, Serialize};

use crate::part::RatingQuantity;
use crate::quantity::{Kind, Shown, Source, Unit, preferred_unit};
use crate::spread::{Corner, margin_is_decided};

/// One rated quantity of one element in one condition at its worst corner. The study fills the value and the verdict.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct StressLine {
    pub designator: String,
    pub quantity: RatingQuantity,
    pub condition: String,
    pub kind: Kind,
    pub unit: Unit,
    pub worst: Shown,
    /// Inputs that matter at the worst corner.
    pub corner: Corner,
    pub thermal: String,
    /// Absolute maximum rating as the sheet gives it, and at this temperature if it falls with temperature.
    pub rating: Option<f64>,
    /// Limit after the policy's derating (normal conditions); equal to the rating otherwise.
    pub limit: Option<f64>,
    /// Worst value over rating.
    pub ratio: Option<f64>,
    /// `met`, `met-on-assumptions`, `not-met`, `not-shown`; the reason, where there is more to say.
    pub verdict: String,
    /// How many assumptions a line that is `met-on-assumptions` rests on.
    pub assumptions: usize,
    pub reason: Option<String>,
    pub source: Option<Source>,
}

/// What the study found for one demand in one condition: the corner at which the margin is least.
#[derive(Clone, PartialEq, Debug)]
pub struct Judged {
    pub condition: String,
    /// A normal condition, in which the derated limit holds.
    pub normal: bool,
    /// `cold start` or `equilibrium`.
    pub thermal: String,
    /// The observed quantity there, or why there is none.
    pub worst: Shown,
    /// Least margin; `None` without a rating or without a value.
    pub margin: Option<f64>,
    /// Ambient temperature there (K).
    pub ambient: Option<f64>,
    /// Hottest ambient temperature of the declared space (K); `None` where it is not known.
    pub hottest: Option<f64>,
    pub corner: Corner,
    /// How many bounds that matter here are assumptions or from memory, those of the rating not counted.
    pub assumptions: usize,
    /// Why nothing is shown although there are numbers (a bound that is only typical).
    pub open: Option<String>,
}

/// The printable line of a demand. The rating's own weak source and an assumed fall with temperature count as assumptions.
pub fn line(demand: &Demand, judged: Judged) -> StressLine {
    let share = judged.ambient.map_or(1.0, |ambient| demand.share(ambient));
    let rating = demand.rating.map(|rating| rating * share);
    let limit = demand.bound(judged.normal).map(|limit| limit * share);
    let worst = judged.worst.value();
    let ratio = match (worst, rating) {
        // A temperature has no meaningful ratio.
        (Some(worst), Some(rating)) if rating > 0.0 && !demand.kind.point => Some((worst / rating).max(0.0)),
        _ => None,
    };
    let (verdict, assumptions, reason) = verdict(demand, &judged);
    let sizes: Vec<f64> = worst.into_iter().chain(rating).chain(limit).collect();
    StressLine {
        designator: demand.designator.clone(),
        quantity: demand.quantity,
        condition: judged.condition,
        kind: demand.kind,
        unit: preferred_unit(&sizes, demand.kind),
        worst: judged.worst,
        corner: judged.corner,
        thermal: judged.thermal,
        rating,
        limit,
        ratio,
        verdict: verdict.to_owned(),
        assumptions,
        reason,
        source: demand.source.clone(),
    }
}

/// Verdict, number of assumptions that it rests on, and reason.
fn verdict(demand: &Demand, judged: &Judged) -> (&'static str, usize, Option<String>) {
    let not_shown = |reason: String| ("not-shown", 0, Some(reason));
    let Some(bound) = demand.bound(judged.normal) else {
        return not_shown(format!("missing: {}", demand.wanted));
    };
    if let Shown::NotShown(reason) = &judged.worst {
        return not_shown(reason.clone());
    }
    let Some(margin) = judged.margin.filter(|margin| margin.is_finite()) else {
        return not_shown("no margin was found".to_owned());
    };
    let scale = bound.abs().max(judged.worst.value().unwrap_or(0.0).abs());
    if !margin_is_decided(margin, scale) {
        return not_shown("the margin lies inside the numerical error".to_owned());
    }
    if margin < 0.0 {
        // A confirmed violation stands, however typical the other bounds are.
        return ("not-met", 0, demand.stands_in.clone());
    }
    if let Some(open) = &judged.open {
        return not_shown(open.clone());
    }
    let assumed = demand.assumption(judged.hottest);
    let weak = demand.source.as_ref().is_some_and(|source| source.origin.is_weak());
    let count = judged.assumptions + usize::from(weak) + usize::from(assumed.is_some());
    let mut reasons: Vec<String> = Vec::new();
    if weak {
        reasons.push(format!("the rating {} is assumed or from memory", demand.quantity.symbol()));
    }
    reasons.extend(assumed.map(str::to_owned));
    reasons.extend(demand.stands_in.clone());
    let reason = (!reasons.is_empty()).then(|| reasons.join("; "));
    (if count > 0 { "met-on-assumptions" } else { "met" }, count, reason)
}
