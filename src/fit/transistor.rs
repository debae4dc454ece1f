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

use super::leakage::{self, Leakage};
use super::{
    Bound, GainEnd, Law, Model, SaturationRow, SpreadAxis, TransistorLaw, axes, residuals, simulate,
};
use crate::device::curve::Curve;
use crate::device::transistor::Transistor;
use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, Row, RowQuantity};

/// What stands in where a record has no row; each use is noted.
const EARLY_VOLTAGE: f64 = 100.0;
const REVERSE_GAIN: f64 = 3.0;
const GAIN_EXPONENT: f64 = 1.5;
/// Rounds in which the knee current in the third column of the gain curve settles, at most.
const ROUNDS: usize = 60;
const ENERGY_GAP: f64 = 1.12;
const SATURATION_EXPONENT: f64 = 3.0;

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
    let leak = cutoff(part, &mut nominal, &mut notes);
    let mut law = TransistorLaw {
        nominal,
        gain: [GainEnd::default(); 2],
        v_be: [0.0, 0.0],
        base_resistance: [nominal.base_resistance; 2],
        collector_resistance: [0.0, nominal.collector_resistance],
        gain_reverse: [nominal.gain_reverse; 2],
        leakage: [0.0, leak.high],
        saturation_cover: cover(part),
    };
    let axes = vec![
        axes::gain(part, &mut law, &mut errors),
        axes::v_be(part, &mut law),
        axes::saturation(part, &mut law, &mut notes, &mut errors),
        // No device leaks less than nothing.
        SpreadAxis { name: "leakage".to_owned(), low: Bound::Sourced, high: leak.bound },
    ];
    if errors.has_errors() {
        return Err(errors);
    }
    let residuals = residuals(part, |row| axes::ends(row, &law))?;
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

pub(super) fn is_cool(row: &Row) -> bool {
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
        cutoff_e_fold: leakage::E_FOLD,
        energy_gap: ENERGY_GAP,
        saturation_exponent: SATURATION_EXPONENT,
        gain_exponent,
        gain_over_current: Curve::ZERO,
        gain_over_temperature: Curve::ZERO,
    }
}

/// Non-negative coefficients of 1, I_C and sqrt(1 + I_C / I_K) / sqrt(I_C), by least squares of the relative deviations.
fn curve(points: &[(f64, f64)]) -> [f64; 3] {
    let mut knee = f64::INFINITY;
    let mut best = [0.0; 3];
    for _ in 0..ROUNDS {
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
        let last = knee;
        knee = if best[1] > 0.0 { best[0] / best[1] } else { f64::INFINITY };
        if knee == last || (knee / last - 1.0).abs() < 1e-12 {
            break;
        }
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
            (axes::resistance_for(nominal, row, typical(row, of_min, of_max)), row.at.i_c)
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

/// The cut-off element.
fn cutoff(part: &Part, nominal: &mut Transistor, notes: &mut Vec<String>) -> Leakage {
    if part.rows_of(RowQuantity::CollectorCutoff).next().is_none() {
        notes.push("no row of I_CBO: what an off transistor leaks is not known".to_owned());
    }
    let wanted = "I_CBO max at the working V_CB and the highest T_j";
    let leak = leakage::fit(part, RowQuantity::CollectorCutoff, wanted, notes);
    (nominal.cutoff_current, nominal.cutoff_e_fold) = (leak.nominal, leak.e_fold);
    leak
}

fn cover(part: &Part) -> Vec<SaturationRow> {
    part.rows_of(RowQuantity::CollectorEmitterSaturation)
        .filter_map(|row| {
            let (i_c, i_b) = (row.at.i_c?, row.at.i_b?);
            Some(SaturationRow { i_c, forced_gain: i_c / i_b, v_ce_max: row.max? })
        })
        .collect()
}
