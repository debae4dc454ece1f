//! Transistor rows -> parameters and spread axes.
//!
//! The nominal curve follows the typical column. At a collector current I_C the transport current of the emitter junction is
//! I_C (1 + I_C / I_K) (Gummel and Poon 1970, with V_BC = 0), so that
//!
//! ```text
//! 1 / h_FE = 1 / beta + I_C / (beta I_K) + A sqrt(1 + I_C / I_K) / sqrt(I_C)
//! ```
//!
//! with the base-emitter recombination current (emission coefficient 2) in the last term: linear in three non-negative
//! coefficients, which least squares of the relative deviations finds exactly.

use super::simulate::{self, AtBias};
use super::{Bound, Law, Model, Residual, SaturationRow, SpreadAxis, TransistorLaw, row_text};
use crate::device::transistor::Transistor;
use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, Row, RowQuantity};

/// What stands in where a record has no row; each use is noted.
const EARLY_VOLTAGE: f64 = 100.0;
const REVERSE_GAIN: f64 = 3.0;
const GAIN_EXPONENT: f64 = 1.5;
/// No specimen is taken to have less reverse gain than this.
const LEAST_REVERSE_GAIN: f64 = 0.02;
/// Ten kelvin double the cut-off current (common practice).
const CUTOFF_E_FOLD: f64 = 10.0 / std::f64::consts::LN_2;
const ENERGY_GAP: f64 = 1.12;
const SATURATION_EXPONENT: f64 = 3.0;
/// A specimen whose gain differs from the typical curve by more than this factor speaks of contradictory rows.
const WIDEST_GAIN: f64 = 12.0;

pub(super) fn fit(part: &Part) -> Result<Model, Diagnostics> {
    let mut notes = Vec::new();
    let mut errors = Diagnostics::default();
    let mut nominal = gain_curve(part, &mut notes, &mut errors);
    if errors.has_errors() {
        return Err(errors);
    }
    saturation_current(part, &mut nominal, &mut notes, &mut errors);
    base_resistance(part, &mut nominal);
    saturation(part, &mut nominal, &mut notes);
    let leakage = cutoff(part, &mut nominal, &mut notes);
    let mut law = TransistorLaw {
        nominal,
        gain: [1.0, 1.0],
        v_be: [0.0, 0.0],
        base_resistance: [nominal.base_resistance; 2],
        collector_resistance: [0.0, nominal.collector_resistance],
        gain_reverse: [nominal.gain_reverse; 2],
        leakage: [0.0, leakage],
        saturation_cover: cover(part),
    };
    let axes = vec![
        gain_axis(part, &mut law, &mut errors),
        v_be_axis(part, &mut law),
        saturation_axis(part, &mut law, &mut errors),
        leakage_axis(part),
    ];
    if errors.has_errors() {
        return Err(errors);
    }
    let residuals = part.rows.iter().filter_map(|row| residual(row, &law)).collect();
    Ok(Model { part: part.name.clone(), law: Law::Transistor(law), axes, residuals, notes })
}

/// The value that stands for a row on the typical curve: typical, else the geometric mean of the limits, else a limit
/// moved by the ratio that other rows show between typical and limit.
fn typical(row: &Row, of_min: f64, of_max: f64) -> f64 {
    match (row.min, row.typ, row.max) {
        (_, Some(typ), _) => typ,
        (Some(min), None, Some(max)) => (min * max).sqrt(),
        (Some(min), None, None) => min * of_min,
        (None, None, Some(max)) => max * of_max,
        (None, None, None) => f64::NAN,
    }
}

/// Mean ratios of the typical value to minimum and to maximum over rows that give both.
fn ratios(rows: &[&Row]) -> (f64, f64) {
    let mean = |values: Vec<f64>| {
        if values.is_empty() {
            1.0
        } else {
            libm::exp(values.iter().map(|v| libm::log(*v)).sum::<f64>() / values.len() as f64)
        }
    };
    let of = |limit: fn(&Row) -> Option<f64>| {
        rows.iter().filter_map(|row| Some(typical_with_both(row)? / limit(row)?)).collect::<Vec<_>>()
    };
    (mean(of(|row| row.min)), mean(of(|row| row.max)))
}

fn typical_with_both(row: &Row) -> Option<f64> {
    row.typ.or_else(|| Some((row.min? * row.max?).sqrt()))
}

fn is_cool(row: &Row) -> bool {
    (row.at.t_j - REFERENCE_TEMPERATURE).abs() < 0.6
}

/// Gain against current, Early voltage, temperature exponent.
fn gain_curve(part: &Part, notes: &mut Vec<String>, errors: &mut Diagnostics) -> Transistor {
    let rows: Vec<&Row> = part.rows_of(RowQuantity::CurrentGain).collect();
    let cool: Vec<&Row> = rows.iter().copied().filter(|row| is_cool(row)).collect();
    if cool.is_empty() {
        errors.push(
            Diagnostic::error(
                &part.place,
                format!("the record of {} has no row of h_FE at 25 °C", part.name),
            )
            .expected("a row such as `{h_FE: {min: 100, max: 300}, I_C: 10 mA, V_CE: 5 V}`"),
        );
    }
    let early = part
        .rows_of(RowQuantity::OutputConductance)
        .find_map(|row| Some(row.at.i_c? / typical(row, 1.0, 1.0) - row.at.v_ce?))
        .filter(|early| *early > 1.0);
    let early_voltage_forward = early.unwrap_or_else(|| {
        notes.push(format!("no row of h_oe: an Early voltage of {EARLY_VOLTAGE} V is assumed"));
        EARLY_VOLTAGE
    });
    let (of_min, of_max) = ratios(&cool);
    // Points of 1 / h_FE at V_CB = 0.
    let points: Vec<(f64, f64)> = cool
        .iter()
        .filter_map(|row| {
            let early = 1.0 + (row.at.v_ce? - 0.7).max(0.0) / early_voltage_forward;
            Some((row.at.i_c?, early / typical(row, of_min, of_max)))
        })
        .collect();
    let [flat, high, low] = curve(&points);
    let gain_forward = if flat > 0.0 { 1.0 / flat } else { f64::INFINITY };
    let gain_forward = gain_forward.min(1e5);
    let knee = if high > 0.0 { 1.0 / (gain_forward * high) } else { f64::INFINITY };
    if points.len() < 2 {
        notes.push("one row of h_FE: the gain does not depend on current (Ebers and Moll 1954)".to_owned());
    }
    let gain_exponent = exponent(&rows, of_min, of_max).unwrap_or_else(|| {
        notes.push(format!(
            "no row of h_FE at another temperature: the gain follows T^{GAIN_EXPONENT}, about +0.5 % per kelvin \
             (common practice)"
        ));
        GAIN_EXPONENT
    });
    Transistor {
        saturation_current: 1e-14,
        emission_coefficient: 1.0,
        gain_forward,
        gain_reverse: REVERSE_GAIN,
        early_voltage_forward,
        early_voltage_reverse: f64::INFINITY,
        knee_current_forward: knee,
        // The coefficient A is turned into a saturation value once I_S is known.
        emitter_leakage: low,
        emitter_leakage_emission: 2.0,
        base_resistance: 0.0,
        collector_resistance: 0.0,
        emitter_resistance: 0.0,
        cutoff_current: 0.0,
        cutoff_e_fold: CUTOFF_E_FOLD,
        energy_gap: ENERGY_GAP,
        saturation_exponent: SATURATION_EXPONENT,
        gain_exponent,
    }
}

/// Non-negative coefficients of 1, I_C and sqrt(1 + I_C / I_K) / sqrt(I_C), by least squares of the relative deviations.
fn curve(points: &[(f64, f64)]) -> [f64; 3] {
    let mut knee = f64::INFINITY;
    let mut best = [0.0; 3];
    for _ in 0..4 {
        let columns = |i: f64| [1.0, i, (1.0 + i / knee).sqrt() / i.sqrt()];
        let mut found: Option<(f64, [f64; 3])> = None;
        // Every set of coefficients that may differ from zero, small sets first; more only where they help.
        for set in [0b001_u8, 0b011, 0b101, 0b111] {
            if set.count_ones() as usize > points.len() {
                continue;
            }
            let Some(solution) = least_squares(points, &columns, set) else { continue };
            if solution.iter().any(|c| *c < 0.0) {
                continue;
            }
            let misfit: f64 = points
                .iter()
                .map(|(i, y)| {
                    let c = columns(*i);
                    let model: f64 = c.iter().zip(&solution).map(|(c, s)| c * s).sum();
                    (model / y - 1.0) * (model / y - 1.0)
                })
                .sum();
            if found.is_none_or(|(least, _)| misfit < least - 1e-12) {
                found = Some((misfit, solution));
            }
        }
        let Some((_, solution)) = found else { break };
        best = solution;
        knee = if best[1] > 0.0 { best[0] / best[1] } else { f64::INFINITY };
    }
    best
}

/// Normal equations of at most three columns, each equation divided by its value.
fn least_squares(points: &[(f64, f64)], columns: &dyn Fn(f64) -> [f64; 3], set: u8) -> Option<[f64; 3]> {
    let used: Vec<usize> = (0..3).filter(|bit| set >> bit & 1 == 1).collect();
    // Scale each column to one, so that the pivots can be judged.
    let scale: Vec<f64> = used
        .iter()
        .map(|&c| points.iter().map(|(i, y)| (columns(*i)[c] / y).abs()).fold(0.0, f64::max))
        .collect();
    let n = used.len();
    let mut matrix = vec![vec![0.0; n + 1]; n];
    for (i, y) in points {
        let row: Vec<f64> = used.iter().zip(&scale).map(|(&c, s)| columns(*i)[c] / y / s).collect();
        for a in 0..n {
            for b in 0..n {
                matrix[a][b] += row[a] * row[b];
            }
            matrix[a][n] += row[a];
        }
    }
    for pivot in 0..n {
        let best = (pivot..n).max_by(|&a, &b| matrix[a][pivot].abs().total_cmp(&matrix[b][pivot].abs()))?;
        matrix.swap(pivot, best);
        if matrix[pivot][pivot].abs() < 1e-9 {
            return None;
        }
        for row in 0..n {
            if row != pivot {
                let factor = matrix[row][pivot] / matrix[pivot][pivot];
                let above = matrix[pivot].clone();
                for (value, above) in matrix[row].iter_mut().zip(above).skip(pivot) {
                    *value -= factor * above;
                }
            }
        }
    }
    let mut solution = [0.0; 3];
    for (k, &c) in used.iter().enumerate() {
        solution[c] = matrix[k][n] / matrix[k][k] / scale[k];
    }
    Some(solution)
}

/// Temperature exponent of the gain from rows at the same current and two temperatures.
fn exponent(rows: &[&Row], of_min: f64, of_max: f64) -> Option<f64> {
    let mut found = Vec::new();
    for row in rows.iter().filter(|row| !is_cool(row)) {
        let twin = rows
            .iter()
            .find(|other| is_cool(other) && other.at.i_c == row.at.i_c && other.at.v_ce == row.at.v_ce);
        let Some(twin) = twin else { continue };
        // Compare like with like: typical with typical, minimum with minimum.
        let ratio = match (row.typ.zip(twin.typ), row.min.zip(twin.min), row.max.zip(twin.max)) {
            (Some((hot, cool)), _, _) | (None, Some((hot, cool)), _) | (None, None, Some((hot, cool))) => {
                hot / cool
            }
            _ => typical(row, of_min, of_max) / typical(twin, of_min, of_max),
        };
        found.push(libm::log(ratio) / libm::log(row.at.t_j / twin.at.t_j));
    }
    (!found.is_empty()).then(|| found.iter().sum::<f64>() / found.len() as f64)
}

/// I_S from the rows of V_BE, its temperature law from the row of its coefficient.
fn saturation_current(
    part: &Part,
    nominal: &mut Transistor,
    notes: &mut Vec<String>,
    errors: &mut Diagnostics,
) {
    let leakage = nominal.emitter_leakage;
    let v_t = thermal_voltage(REFERENCE_TEMPERATURE);
    let on: Vec<&Row> = part.rows_of(RowQuantity::BaseEmitterVoltage).filter(|row| is_cool(row)).collect();
    let sat: Vec<&Row> =
        part.rows_of(RowQuantity::BaseEmitterSaturation).filter(|row| is_cool(row)).collect();
    let rows = if on.is_empty() { &sat } else { &on };
    let of_knee = |i_c: f64| i_c * (1.0 + i_c / nominal.knee_current_forward);
    let logs: Vec<f64> =
        rows.iter().filter_map(|row| Some(libm::log(of_knee(row.at.i_c?)) - arithmetic(row) / v_t)).collect();
    if logs.is_empty() {
        notes.push("no row of V_BE: 0.7 V at the current of the first row of h_FE is assumed".to_owned());
        let i_c = part.rows_of(RowQuantity::CurrentGain).find_map(|row| row.at.i_c).unwrap_or(10e-3);
        nominal.saturation_current = of_knee(i_c) * libm::exp(-0.7 / v_t);
    } else {
        nominal.saturation_current = libm::exp(logs.iter().sum::<f64>() / logs.len() as f64);
    }
    // A sqrt(I_F) = I_L (I_F / I_S)^(1/2)
    nominal.emitter_leakage = leakage * nominal.saturation_current.sqrt();
    let coefficient = part.rows_of(RowQuantity::BaseEmitterTemperatureCoefficient).next();
    match coefficient {
        Some(row) => {
            // dV_BE/dT = (V_BE - E_g - m V_T) / T at constant current.
            let i_c = row.at.i_c.or_else(|| rows.iter().find_map(|row| row.at.i_c)).unwrap_or(10e-3);
            let v_be = v_t * libm::log(of_knee(i_c) / nominal.saturation_current);
            let gap = v_be - SATURATION_EXPONENT * v_t - arithmetic(row) * REFERENCE_TEMPERATURE;
            if !(0.5..2.5).contains(&gap) {
                errors.push(
                    Diagnostic::error(&row.place, "no junction has such a temperature coefficient")
                        .expected("about -2 mV/K for silicon, with its minus sign"),
                );
            }
            nominal.energy_gap = gap;
        }
        None => notes.push(format!(
            "no row of TC_VBE: V_BE falls with temperature as an energy gap of {ENERGY_GAP} V demands, about -2 mV/K \
             (common practice)"
        )),
    }
}

/// Typical value, middle of the limits, or the one limit, of a voltage or coefficient.
pub(super) fn arithmetic(row: &Row) -> f64 {
    match (row.min, row.typ, row.max) {
        (_, Some(typ), _) => typ,
        (Some(min), None, Some(max)) => (min + max) / 2.0,
        (Some(only), None, None) | (None, None, Some(only)) => only,
        (None, None, None) => f64::NAN,
    }
}

/// Base resistance: what the rows of V_BE(sat) show beyond the junction, averaged; none where there are no rows of V_BE.
fn base_resistance(part: &Part, nominal: &mut Transistor) {
    if part.rows_of(RowQuantity::BaseEmitterVoltage).next().is_none() {
        return;
    }
    let found: Vec<f64> = part
        .rows_of(RowQuantity::BaseEmitterSaturation)
        .filter(|row| is_cool(row))
        .filter_map(|row| {
            let (i_c, i_b) = (row.at.i_c?, row.at.i_b?);
            let junction = simulate::forced(nominal, row.at.t_j, i_c, i_b)?.v_be;
            Some(((arithmetic(row) - junction) / i_b).max(0.0))
        })
        .collect();
    if !found.is_empty() {
        nominal.base_resistance = found.iter().sum::<f64>() / found.len() as f64;
    }
}

fn forced(transistor: &Transistor, row: &Row) -> Option<AtBias> {
    simulate::forced(transistor, row.at.t_j, row.at.i_c?, row.at.i_b?)
}

/// The collector resistance at which a row's V_CE(sat) is `wanted`; zero where the junctions alone give more.
fn resistance_for(transistor: &Transistor, row: &Row, wanted: f64) -> Option<f64> {
    let bare = Transistor { collector_resistance: 0.0, ..*transistor };
    Some(((wanted - forced(&bare, row)?.v_ce) / row.at.i_c?).max(0.0))
}

/// Collector resistance from the rows of V_CE(sat).
fn saturation(part: &Part, nominal: &mut Transistor, notes: &mut Vec<String>) {
    let rows: Vec<&Row> =
        part.rows_of(RowQuantity::CollectorEmitterSaturation).filter(|row| is_cool(row)).collect();
    if rows.is_empty() {
        notes.push(
            "no row of V_CE(sat): saturation is that of the junctions alone, which flatters it".to_owned(),
        );
        return;
    }
    let (of_min, of_max) = ratios(&rows);
    // The row at the largest current speaks of the resistance most clearly; weigh by current.
    let (mut sum, mut weight) = (0.0, 0.0);
    for row in rows {
        if let (Some(resistance), Some(i_c)) =
            (resistance_for(nominal, row, typical(row, of_min, of_max)), row.at.i_c)
        {
            sum += resistance * i_c;
            weight += i_c;
        }
    }
    if weight > 0.0 {
        nominal.collector_resistance = sum / weight;
    }
    notes.push(format!(
        "a reverse gain of {REVERSE_GAIN} is assumed; the rows of V_CE(sat) set the collector resistance"
    ));
}

/// The cut-off element; gives the factor on it at the high end of the leakage axis.
fn cutoff(part: &Part, nominal: &mut Transistor, notes: &mut Vec<String>) -> f64 {
    let rows: Vec<&Row> = part.rows_of(RowQuantity::CollectorCutoff).collect();
    let limits: Vec<(f64, f64)> = rows.iter().filter_map(|row| Some((row.at.t_j, row.max?))).collect();
    let Some(first) = rows.first() else {
        notes.push("no row of I_CBO: what an off transistor leaks is not known".to_owned());
        return 0.0;
    };
    let coolest = limits.iter().copied().min_by(|a, b| a.0.total_cmp(&b.0));
    let hottest = limits.iter().copied().max_by(|a, b| a.0.total_cmp(&b.0));
    match coolest.zip(hottest) {
        Some((cool, hot)) if hot.0 - cool.0 > 1.0 && hot.1 > cool.1 => {
            nominal.cutoff_e_fold = (hot.0 - cool.0) / libm::log(hot.1 / cool.1);
        }
        _ => notes.push("one temperature of I_CBO: it doubles per 10 K (common practice)".to_owned()),
    }
    let at_reference =
        |value: f64, t_j: f64| value * libm::exp(-(t_j - REFERENCE_TEMPERATURE) / nominal.cutoff_e_fold);
    let typical = rows.iter().find_map(|row| Some(at_reference(row.typ?, row.at.t_j)));
    let highest = limits.iter().map(|(t_j, max)| at_reference(*max, *t_j)).fold(0.0, f64::max);
    nominal.cutoff_current = match typical {
        Some(typical) => typical,
        // Without a typical value the curve starts a decade below the limit.
        None if highest > 0.0 => highest / 10.0,
        None => at_reference(arithmetic(first), first.at.t_j),
    };
    if highest > 0.0 { (highest / nominal.cutoff_current).max(1.0) } else { 1.0 }
}

fn cover(part: &Part) -> Vec<SaturationRow> {
    part.rows_of(RowQuantity::CollectorEmitterSaturation)
        .filter_map(|row| {
            let (i_c, i_b) = (row.at.i_c?, row.at.i_b?);
            Some(SaturationRow { i_c, forced_gain: i_c / i_b, v_ce_max: row.max? })
        })
        .collect()
}

/// What bounds a side: the rows that reach it decide; any weak one among them makes it weak.
fn bound(deciding: Option<&Row>, wanted: String) -> Bound {
    match deciding {
        Some(row) if row.source.origin.is_weak() => Bound::Weak { source: row.source.clone() },
        Some(_) => Bound::Sourced,
        None => Bound::Absent { wanted },
    }
}

fn gain_axis(part: &Part, law: &mut TransistorLaw, errors: &mut Diagnostics) -> SpreadAxis {
    let mut ends: [Option<(&Row, f64)>; 2] = [None, None];
    for row in part.rows_of(RowQuantity::CurrentGain) {
        let (Some(i_c), Some(v_ce)) = (row.at.i_c, row.at.v_ce) else { continue };
        let Some(model) = simulate::active(&law.nominal, row.at.t_j, i_c, v_ce).map(|at| i_c / at.i_b) else {
            errors.push(Diagnostic::error(&row.place, "the fitted model cannot reach this row's bias"));
            continue;
        };
        // The gain scales with the factor, so that one division reaches the limit; a hair more stays on the unsafe side.
        if let Some(min) = row.min {
            let factor = (min / model * (1.0 - 1e-9)).min(1.0);
            if ends[0].is_none_or(|(_, least)| factor < least) {
                ends[0] = Some((row, factor));
            }
        }
        if let Some(max) = row.max {
            let factor = (max / model * (1.0 + 1e-9)).max(1.0);
            if ends[1].is_none_or(|(_, most)| factor > most) {
                ends[1] = Some((row, factor));
            }
        }
    }
    for (end, row) in ends.iter().flatten().map(|(row, factor)| (*factor, *row)) {
        if !(1.0 / WIDEST_GAIN..=WIDEST_GAIN).contains(&end) {
            errors.push(
                Diagnostic::error(
                    &row.place,
                    "the rows of h_FE contradict each other: no one curve with one spread meets them",
                )
                .expected("rows of one gain group, with typical values where the sheet gives them"),
            );
        }
    }
    law.gain = [ends[0].map_or(1.0, |(_, factor)| factor), ends[1].map_or(1.0, |(_, factor)| factor)];
    let first = part.rows_of(RowQuantity::CurrentGain).next();
    let wanted = |which: &str| {
        first.map_or_else(|| format!("h_FE {which}"), |row| format!("h_FE {which} at {}", row_text(row)))
    };
    SpreadAxis {
        name: "gain".to_owned(),
        low: bound(ends[0].map(|(row, _)| row), wanted("min")),
        high: bound(ends[1].map(|(row, _)| row), wanted("max")),
    }
}

/// V_BE of a row in the nominal model.
fn v_be_of(transistor: &Transistor, row: &Row) -> Option<f64> {
    match row.quantity {
        RowQuantity::BaseEmitterVoltage => {
            simulate::active(transistor, row.at.t_j, row.at.i_c?, row.at.v_ce?).map(|at| at.v_be)
        }
        RowQuantity::BaseEmitterSaturation => forced(transistor, row).map(|at| at.v_be),
        _ => None,
    }
}

fn v_be_axis(part: &Part, law: &mut TransistorLaw) -> SpreadAxis {
    let mut ends: [Option<(&Row, f64)>; 2] = [None, None];
    let rows = part.rows.iter().filter(|row| {
        matches!(row.quantity, RowQuantity::BaseEmitterVoltage | RowQuantity::BaseEmitterSaturation)
    });
    let has_on = part.rows_of(RowQuantity::BaseEmitterVoltage).any(|row| row.max.is_some());
    for row in rows.clone() {
        if row.quantity == RowQuantity::BaseEmitterSaturation && has_on {
            continue;
        }
        let Some(model) = v_be_of(&law.nominal, row) else { continue };
        // A shift at the reference temperature acts in proportion to the temperature elsewhere.
        let scale = row.at.t_j / REFERENCE_TEMPERATURE;
        if let Some(min) = row.min {
            let shift = ((min - model) / scale - 1e-9).min(0.0);
            if ends[0].is_none_or(|(_, least)| shift < least) {
                ends[0] = Some((row, shift));
            }
        }
        if let Some(max) = row.max {
            let shift = ((max - model) / scale + 1e-9).max(0.0);
            if ends[1].is_none_or(|(_, most)| shift > most) {
                ends[1] = Some((row, shift));
            }
        }
    }
    law.v_be = [ends[0].map_or(0.0, |(_, shift)| shift), ends[1].map_or(0.0, |(_, shift)| shift)];
    // What the rows of V_BE(sat) ask for beyond that is the base resistance's.
    let mut shifted = law.specimen(&[0.0, 1.0, 0.0, 0.0]);
    for row in part.rows_of(RowQuantity::BaseEmitterSaturation) {
        if let (Some(max), Some(i_b), Some(at)) = (row.max, row.at.i_b, forced(&shifted, row)) {
            shifted.base_resistance += ((max * (1.0 + 1e-9) - at.v_be) / i_b).max(0.0);
        }
    }
    law.base_resistance = [law.nominal.base_resistance, shifted.base_resistance];
    let first = rows.clone().next();
    let wanted = |which: &str| {
        first.map_or_else(
            || format!("V_BE {which} at the working current"),
            |row| format!("{} {which} at {}", row.quantity.symbol(), row_text(row)),
        )
    };
    SpreadAxis {
        name: "V_BE".to_owned(),
        low: bound(ends[0].map(|(row, _)| row), wanted("min")),
        high: bound(ends[1].map(|(row, _)| row), wanted("max")),
    }
}

fn saturation_axis(part: &Part, law: &mut TransistorLaw, errors: &mut Diagnostics) -> SpreadAxis {
    let mut limits: Vec<(&Row, f64)> = part
        .rows_of(RowQuantity::CollectorEmitterSaturation)
        .filter_map(|row| Some((row, row.max? * (1.0 + 1e-9))))
        .collect();
    limits.sort_by(|a, b| a.0.at.i_c.unwrap_or(0.0).total_cmp(&b.0.at.i_c.unwrap_or(0.0)));
    for (row, _) in &limits {
        if forced(&law.nominal, row).is_none() {
            errors.push(
                Diagnostic::error(&row.place, "the fitted model cannot carry this row's I_C with its I_B")
                    .expected("a forced gain I_C/I_B below the gain that the rows of h_FE give"),
            );
        }
    }
    // At high current the resistance speaks, at low current the reverse gain: the row at the highest current sets the one,
    // the others lower the other as far as they need, and what is still missing goes to the resistance.
    let mut worst = law.nominal;
    let needs = |worst: &Transistor, row: &Row, max: f64| resistance_for(worst, row, max).unwrap_or(0.0);
    if let Some((top, others)) = limits.split_last() {
        for _ in 0..2 {
            worst.collector_resistance = needs(&worst, top.0, top.1).max(law.nominal.collector_resistance);
            for (row, max) in others {
                worst.gain_reverse = reverse_gain_for(&worst, row, *max).min(worst.gain_reverse);
            }
        }
        let most = limits.iter().map(|(row, max)| needs(&worst, row, *max)).fold(0.0, f64::max);
        worst.collector_resistance = most.max(law.nominal.collector_resistance);
    }
    law.gain_reverse = [law.nominal.gain_reverse, worst.gain_reverse];
    let most = worst.collector_resistance;
    let deciding = limits.iter().map(|(row, _)| *row).find(|row| row.source.origin.is_weak());
    let deciding = deciding.or_else(|| limits.first().map(|(row, _)| *row));
    // Nothing keeps less than the junctions alone.
    law.collector_resistance = [0.0, most];
    let current = part
        .rows_of(RowQuantity::CurrentGain)
        .filter_map(|row| row.at.i_c)
        .fold(None, |most: Option<f64>, i_c| Some(most.map_or(i_c, |most| most.max(i_c))));
    let at = current.map_or(String::new(), |i_c| format!(" (I_C up to {})", super::current_text(i_c)));
    SpreadAxis {
        name: "saturation".to_owned(),
        low: Bound::Sourced,
        high: bound(deciding, format!("V_CE(sat) max at or above the working I_C and I_C/I_B{at}")),
    }
}

/// The reverse gain, from [`LEAST_REVERSE_GAIN`] to the device's own, at which a row's V_CE(sat) comes nearest to `wanted`.
fn reverse_gain_for(transistor: &Transistor, row: &Row, wanted: f64) -> f64 {
    let own = transistor.gain_reverse;
    let (Some(i_c), Some(i_b)) = (row.at.i_c, row.at.i_b) else { return own };
    let found = simulate::reverse_gain_at(transistor, row.at.t_j, i_c, i_b, wanted);
    found.map_or(own, |gain| gain.max(LEAST_REVERSE_GAIN).min(own))
}

fn leakage_axis(part: &Part) -> SpreadAxis {
    let deciding = part.rows_of(RowQuantity::CollectorCutoff).find(|row| row.max.is_some());
    SpreadAxis {
        name: "leakage".to_owned(),
        // No device leaks less than nothing.
        low: Bound::Sourced,
        high: bound(deciding, "I_CBO max at the working V_CB and the highest T_j".to_owned()),
    }
}

/// A row beside what the model gives in its own test condition at the low end, nominal and at the high end of its axis.
fn residual(row: &Row, law: &TransistorLaw) -> Option<Residual> {
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
    Some(Residual {
        quantity: row.quantity,
        at: row_text(row),
        min: row.min,
        typ: row.typ,
        max: row.max,
        model: [value(-1.0)?, value(0.0)?, value(1.0)?],
    })
}
