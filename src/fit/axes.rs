//! The one-sided spread of a transistor: gain, V_BE, saturation.
//!
//! **Gain.** Each end is a curve of its own: the nominal gain times a factor that at every row's collector current is what the
//! row's limit asks for, between rows a value between theirs, and beyond the outermost rows constant; likewise over
//! temperature where rows at other temperatures exist. The factor acts on the base current alone.

use super::simulate::{self, AtBias};
use super::transistor::is_cool;
use super::{Bound, GainEnd, SpreadAxis, TransistorLaw, bound, check, row_text};
use crate::device::REFERENCE_TEMPERATURE;
use crate::device::curve::{Curve, NODES};
use crate::device::transistor::Transistor;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, Row, RowQuantity};

/// An end is aimed this far (relative, or in volt) outside a limit, so that rounding does not leave it inside.
const OUTSIDE: f64 = 1e-9;
/// A specimen whose gain differs from the typical curve by more than this factor speaks of contradictory rows.
const WIDEST_GAIN: f64 = 12.0;
/// How much the factor on the gain (its logarithm) may rise and fall per e-fold of current. The base current rises at least
/// with the root of the junction's exponential current; a gain that rose faster would make it fall with V_BE, and a curve
/// is at most twice as steep as these lines. Where rows are steeper, the milder one gives way, outward.
const STEEPEST_RISE: f64 = 0.2;
const STEEPEST_FALL: f64 = 0.5;
/// No specimen is taken to have less reverse gain than this.
const LEAST_REVERSE_GAIN: f64 = 0.02;

/// One side of an axis.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Side {
    Low,
    High,
}

impl Side {
    const BOTH: [Side; 2] = [Side::Low, Side::High];

    fn limit(self, row: &Row) -> Option<f64> {
        match self {
            Side::Low => row.min,
            Side::High => row.max,
        }
    }

    /// -1 towards the low end, 1 towards the high one.
    fn sign(self) -> f64 {
        match self {
            Side::Low => -1.0,
            Side::High => 1.0,
        }
    }

    fn word(self) -> &'static str {
        match self {
            Side::Low => "min",
            Side::High => "max",
        }
    }

    /// What bounds this side: all rows that state its limit take part.
    fn bound<'r>(self, rows: impl Iterator<Item = &'r Row>, wanted: String) -> Bound {
        bound(rows.filter(|row| self.limit(row).is_some()), wanted)
    }
}

/// How far out (as the logarithm of a factor, not below zero) the gain has to be for a limit of a row.
struct Depth<'r> {
    row: &'r Row,
    /// Logarithm of the emitter junction's exponential current (A) in the row's test condition.
    current: f64,
    depth: f64,
}

pub(super) fn gain(part: &Part, law: &mut TransistorLaw, errors: &mut Diagnostics) -> SpreadAxis {
    for (k, side) in Side::BOTH.into_iter().enumerate() {
        let mut depths = Vec::new();
        for row in part.rows_of(RowQuantity::CurrentGain) {
            let Some(limit) = side.limit(row) else { continue };
            match depth(&law.nominal, row, limit, side) {
                Some(depth) => depths.push(depth),
                None => check::unreachable(row, errors),
            }
        }
        let widest = depths.iter().max_by(|a, b| a.depth.total_cmp(&b.depth));
        if let Some(widest) = widest.filter(|widest| widest.depth > libm::log(WIDEST_GAIN)) {
            errors.push(
                Diagnostic::error(
                    &widest.row.place,
                    "the rows of h_FE contradict each other: no one curve with one spread meets them",
                )
                .expected("rows of one gain group, with typical values where the sheet gives them"),
            );
        }
        law.gain[k] = gain_end(&depths, side);
    }
    let rows = || part.rows_of(RowQuantity::CurrentGain);
    let at = rows().next().map_or(String::new(), |row| format!(" at {}", row_text(row)));
    let end = |side: Side| side.bound(rows(), format!("h_FE {}{at}", side.word()));
    SpreadAxis { name: "gain".to_owned(), low: end(Side::Low), high: end(Side::High) }
}

/// The depth at which the base current in a row's test condition is what its limit says. Only what the emitter junction
/// takes from the base changes along the axis; the collector junction's part is taken off before.
fn depth<'r>(nominal: &Transistor, row: &'r Row, limit: f64, side: Side) -> Option<Depth<'r>> {
    let i_c = row.at.i_c?;
    let found = simulate::active(nominal, row.at.t_j, i_c, row.at.v_ce?)?;
    let at = nominal.at(row.at.t_j);
    let bare = Transistor { gain_reverse: f64::INFINITY, cutoff_current: 0.0, ..*nominal }.at(row.at.t_j);
    let base = bare.currents(found.u_be, found.u_bc).i_b;
    let wanted = i_c / limit - (found.i_b - base);
    if wanted <= 0.0 || base <= 0.0 {
        return None;
    }
    let junction = at.parameters.saturation_current;
    let exponent = found.u_be / (nominal.emission_coefficient * at.thermal_voltage);
    Some(Depth {
        row,
        current: libm::log(junction) + exponent,
        depth: (side.sign() * libm::log(base / wanted) + OUTSIDE).max(0.0),
    })
}

/// An end of the gain axis from the depths that its limits ask for.
fn gain_end(depths: &[Depth<'_>], side: Side) -> GainEnd {
    let has_cool = depths.iter().any(|depth| is_cool(depth.row));
    // Without a limit at 25 °C those at other temperatures hold for all.
    let is_cool = |depth: &&Depth<'_>| is_cool(depth.row) || !has_cool;
    let points = depths.iter().filter(is_cool).map(|depth| [depth.current, depth.depth]).collect();
    let cool = thinned(not_too_steep(ordered(points), side));
    let Some(curve) = Curve::through(&cool) else { return GainEnd::default() };
    // No temperature turns a low end into a high one.
    let least = -cool.iter().map(|point| point[1]).fold(f64::INFINITY, f64::min);
    let mut other: Vec<[f64; 2]> = depths
        .iter()
        .filter(|depth| !is_cool(depth))
        .map(|depth| {
            let more = depth.depth - curve.at(depth.current).0;
            [libm::log(depth.row.at.t_j / REFERENCE_TEMPERATURE), (more + OUTSIDE).max(least)]
        })
        .collect();
    if !other.is_empty() {
        other.push([0.0, 0.0]);
    }
    let over_temperature = Curve::through(&thinned(ordered(other))).unwrap_or_default();
    GainEnd { over_current: curve.times(side.sign()), over_temperature: over_temperature.times(side.sign()) }
}

/// Points in rising order; of several at one place the outermost.
fn ordered(mut points: Vec<[f64; 2]>) -> Vec<[f64; 2]> {
    points.sort_by(|a, b| a[0].total_cmp(&b[0]).then(b[1].total_cmp(&a[1])));
    points.dedup_by(|later, kept| {
        let same = later[0] - kept[0] < 1e-6;
        kept[1] = if same { kept[1].max(later[1]) } else { kept[1] };
        same
    });
    points
}

/// Moves depths outward until no line between two points is steeper than the base current allows.
fn not_too_steep(points: Vec<[f64; 2]>, side: Side) -> Vec<[f64; 2]> {
    let outward = |[at, depth]: [f64; 2]| {
        let wanted = points.iter().map(|[from, reached]| {
            // Depth falls on the way from `from` to `at`; at the low end, to the right, that is a rising gain.
            let gain_rises = (at > *from) == (side == Side::Low);
            let rate = if gain_rises { STEEPEST_RISE } else { STEEPEST_FALL };
            reached - rate * (at - from).abs()
        });
        [at, wanted.fold(depth, f64::max)]
    };
    points.iter().copied().map(outward).collect()
}

/// Takes out inner points until a curve can hold them; the neighbours of each move outward to its depth.
fn thinned(mut points: Vec<[f64; 2]>) -> Vec<[f64; 2]> {
    while points.len() > NODES {
        let cost = |k: usize| {
            (points[k][1] - points[k - 1][1]).max(0.0) + (points[k][1] - points[k + 1][1]).max(0.0)
        };
        let Some(k) = (1..points.len() - 1).min_by(|a, b| cost(*a).total_cmp(&cost(*b))) else { break };
        let [_, depth] = points.remove(k);
        for neighbour in [k - 1, k] {
            points[neighbour][1] = points[neighbour][1].max(depth);
        }
    }
    points
}

fn forced(transistor: &Transistor, row: &Row) -> Option<AtBias> {
    simulate::forced(transistor, row.at.t_j, row.at.i_c?, row.at.i_b?)
}

/// V_BE of a row of V_BE or V_BE(sat).
fn v_be_of(transistor: &Transistor, row: &Row) -> Option<f64> {
    let found = match row.quantity {
        RowQuantity::BaseEmitterVoltage => {
            simulate::active(transistor, row.at.t_j, row.at.i_c?, row.at.v_ce?)
        }
        _ => forced(transistor, row),
    };
    found.map(|at| at.v_be)
}

/// The shift comes from rows of V_BE, or from those of V_BE(sat) where there are none for a side; what rows of V_BE(sat) ask
/// for beyond it is the base resistance's, and the shift's again where no resistance is left to take away.
pub(super) fn v_be(part: &Part, law: &mut TransistorLaw) -> SpreadAxis {
    let on = || part.rows_of(RowQuantity::BaseEmitterVoltage);
    let saturated = || part.rows_of(RowQuantity::BaseEmitterSaturation);
    for (k, side) in Side::BOTH.into_iter().enumerate() {
        let outside = |model: f64, limit: f64| side.sign() * (limit - model) + OUTSIDE;
        // A shift at the reference temperature acts in proportion to the temperature elsewhere.
        let asked = |model: Option<f64>, row: &Row| {
            Some((outside(model?, side.limit(row)?) * REFERENCE_TEMPERATURE / row.at.t_j).max(0.0))
        };
        let has_on = on().any(|row| side.limit(row).is_some());
        let rows = on().chain(saturated().filter(|_| !has_on));
        let most = rows.filter_map(|row| asked(v_be_of(&law.nominal, row), row)).fold(0.0, f64::max);
        law.v_be[k] = side.sign() * most;
        for row in saturated() {
            let specimen = law.specimen(&[0.0, side.sign(), 0.0, 0.0]);
            let model = v_be_of(&specimen, row);
            if let (Some(model), Some(limit), Some(i_b)) = (model, side.limit(row), row.at.i_b) {
                let more = side.sign() * outside(model, limit).max(0.0) / i_b;
                law.base_resistance[k] = (specimen.base_resistance + more).max(0.0);
                let model = v_be_of(&law.specimen(&[0.0, side.sign(), 0.0, 0.0]), row);
                law.v_be[k] += side.sign() * asked(model, row).unwrap_or(0.0);
            }
        }
    }
    let first = on().chain(saturated()).next();
    let end = |side: Side| {
        let wanted = first.map_or_else(
            || format!("V_BE {} at the working current", side.word()),
            |row| format!("{} {} at {}", row.quantity.symbol(), side.word(), row_text(row)),
        );
        side.bound(on().chain(saturated()), wanted)
    };
    SpreadAxis { name: "V_BE".to_owned(), low: end(Side::Low), high: end(Side::High) }
}

/// The collector resistance at which a row's V_CE(sat) is `wanted`; zero where the junctions alone give more.
pub(super) fn resistance_for(transistor: &Transistor, row: &Row, wanted: f64) -> Option<f64> {
    let bare = Transistor { collector_resistance: 0.0, ..*transistor };
    Some(((wanted - forced(&bare, row)?.v_ce) / row.at.i_c?).max(0.0))
}

pub(super) fn saturation(
    part: &Part,
    law: &mut TransistorLaw,
    notes: &mut Vec<String>,
    errors: &mut Diagnostics,
) -> SpreadAxis {
    let rows = || part.rows_of(RowQuantity::CollectorEmitterSaturation);
    for row in rows().chain(part.rows_of(RowQuantity::BaseEmitterSaturation)) {
        // With the collector junction reversed it is no row of a saturated transistor.
        if forced(&law.nominal, row).is_none_or(|at| at.u_bc <= 0.0) {
            check::unreachable(row, errors);
        }
    }
    let own = law.nominal.gain_reverse;
    let worst = worst_saturation(&law.nominal, rows(), notes);
    let best = best_saturation(&law.nominal, rows());
    law.gain_reverse = [best.gain_reverse, worst.gain_reverse.min(own)];
    law.collector_resistance = [best.collector_resistance, worst.collector_resistance];
    let current = part
        .rows_of(RowQuantity::CurrentGain)
        .filter_map(|row| row.at.i_c)
        .fold(None, |most: Option<f64>, i_c| Some(most.map_or(i_c, |most| most.max(i_c))));
    let at = current.map_or(String::new(), |i_c| format!(" (I_C up to {})", super::current_text(i_c)));
    let wanted = format!("V_CE(sat) max at or above the working I_C and I_C/I_B{at}");
    SpreadAxis {
        name: "saturation".to_owned(),
        // Nothing keeps less than the junctions alone.
        low: Bound::Sourced,
        high: Side::High.bound(rows(), wanted),
    }
}

/// At high current the resistance speaks, at low current the reverse gain: the maximum row at the highest current sets the
/// one, the others lower the other as far as they need, and what is still missing goes to the resistance.
fn worst_saturation<'r>(
    nominal: &Transistor,
    rows: impl Iterator<Item = &'r Row>,
    notes: &mut Vec<String>,
) -> Transistor {
    let mut limits: Vec<(&Row, f64)> =
        rows.filter_map(|row| Some((row, row.max? * (1.0 + OUTSIDE)))).collect();
    limits.sort_by(|a, b| a.0.at.i_c.unwrap_or(0.0).total_cmp(&b.0.at.i_c.unwrap_or(0.0)));
    let mut worst = *nominal;
    let needs = |worst: &Transistor, row: &Row, max: f64| {
        resistance_for(worst, row, max).unwrap_or(0.0).max(nominal.collector_resistance)
    };
    let Some((top, others)) = limits.split_last() else { return worst };
    for _ in 0..2 {
        worst.collector_resistance = needs(&worst, top.0, top.1);
        for (row, max) in others {
            worst.gain_reverse = reverse_gain_for(&worst, row, *max);
        }
    }
    if worst.gain_reverse <= LEAST_REVERSE_GAIN {
        notes.push(format!(
            "the rows of V_CE(sat) max ask for a reverse gain below {LEAST_REVERSE_GAIN}; the collector resistance takes the \
             rest, which puts the corner outside other rows"
        ));
    }
    worst.collector_resistance =
        limits.iter().map(|(row, max)| needs(&worst, row, *max)).fold(nominal.collector_resistance, f64::max);
    worst
}

/// Without collector resistance, and with as much reverse gain as minimum rows of V_CE(sat) ask for.
fn best_saturation<'r>(nominal: &Transistor, rows: impl Iterator<Item = &'r Row>) -> Transistor {
    let mut best = Transistor { collector_resistance: 0.0, ..*nominal };
    for row in rows {
        if let (Some(min), Some(i_c), Some(i_b)) = (row.min, row.at.i_c, row.at.i_b) {
            let wanted = min * (1.0 - OUTSIDE);
            let gain = simulate::reverse_gain_at(&best, row.at.t_j, i_c, i_b, wanted).unwrap_or(0.0);
            if gain.is_finite() {
                best.gain_reverse = best.gain_reverse.max(gain);
            }
        }
    }
    best
}

/// The reverse gain, from [`LEAST_REVERSE_GAIN`] to the device's own, at which a row's V_CE(sat) comes nearest to `wanted`.
fn reverse_gain_for(transistor: &Transistor, row: &Row, wanted: f64) -> f64 {
    let own = transistor.gain_reverse;
    let (Some(i_c), Some(i_b)) = (row.at.i_c, row.at.i_b) else { return own };
    let found = simulate::reverse_gain_at(transistor, row.at.t_j, i_c, i_b, wanted);
    found.map_or(own, |gain| gain.max(LEAST_REVERSE_GAIN).min(own))
}

/// What the model gives in a row's own test condition at the low end, nominal and at the high end of the axis that the row
/// feeds; outer `None` for a row that feeds none, inner for a bias that the model cannot reach.
pub(super) fn ends(row: &Row, law: &TransistorLaw) -> Option<Option<[f64; 3]>> {
    let axis = match row.quantity {
        RowQuantity::CurrentGain => 0,
        RowQuantity::BaseEmitterVoltage | RowQuantity::BaseEmitterSaturation => 1,
        RowQuantity::CollectorEmitterSaturation => 2,
        RowQuantity::CollectorCutoff => 3,
        _ => return None,
    };
    let value = |end: f64| -> Option<f64> {
        let mut at = [0.0; super::AXES];
        at[axis] = end;
        let transistor = law.specimen(&at);
        match row.quantity {
            RowQuantity::CurrentGain => {
                let i_c = row.at.i_c?;
                simulate::active(&transistor, row.at.t_j, i_c, row.at.v_ce?).map(|at| i_c / at.i_b)
            }
            RowQuantity::CollectorEmitterSaturation => forced(&transistor, row).map(|at| at.v_ce),
            RowQuantity::CollectorCutoff => Some(transistor.at(row.at.t_j).parameters.cutoff_current),
            _ => v_be_of(&transistor, row),
        }
    };
    let all = || Some([value(-1.0)?, value(0.0)?, value(1.0)?]);
    Some(all())
}
