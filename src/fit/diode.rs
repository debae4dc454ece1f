//! Diode and Zener rows -> parameters and spread axes.
//!
//! Forward: V = n V_T ln(I / I_S) + I R, linear in n, n ln I_S and R; as many of them as there are rows.

use super::transistor::arithmetic;
use super::{Bound, DiodeLaw, Law, Model, SpreadAxis, bound, leakage, residuals, row_text, simulate};
use crate::device::diode::Diode;
use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, PartKind, Row, RowQuantity};

/// What stands in where a record has no row; each use is noted.
const EMISSION: f64 = 1.8;
/// Dynamic resistance of a Zener without a row, as a share of V_Z / I_Z.
const SLOPE_SHARE: f64 = 0.02;
/// Rounds in which an end of V_F settles, at most.
const ROUNDS: usize = 20;
/// Share of r_Z that the series resistance takes at most.
const SERIES_SHARE: f64 = 0.5;

pub(super) fn fit(part: &Part) -> Result<Model, Diagnostics> {
    let mut notes = Vec::new();
    let mut errors = Diagnostics::default();
    let mut nominal = forward(part, &mut notes, &mut errors);
    let zener = part.kind == PartKind::Zener;
    let wanted = "I_R max at the working V_R and the highest T_j";
    let leak = leakage::fit(part, RowQuantity::ReverseCurrent, wanted, &mut notes);
    (nominal.leakage, nominal.leakage_e_fold) = (leak.nominal, leak.e_fold);
    if zener {
        breakdown(part, &mut nominal, &mut notes, &mut errors);
    }
    if errors.has_errors() {
        return Err(errors);
    }
    let z_shift = breakdown_ends(part, &nominal);
    let mut ends: [Option<(&Row, f64)>; 2] = [None, None];
    for row in part.rows_of(RowQuantity::ForwardVoltage) {
        let Some(model) = shown(&nominal, row) else { continue };
        let scale = row.at.t_j / REFERENCE_TEMPERATURE;
        widen(&mut ends, row, (row.min, row.max), |limit| (limit - model) / scale);
    }
    let value = |end: &Option<(&Row, f64)>| end.map_or(0.0, |(_, shift)| shift);
    let mut law = DiodeLaw {
        nominal,
        v_f: [value(&ends[0]), value(&ends[1])],
        leakage: [0.0, leak.high],
        v_z: [value(&z_shift[0]), value(&z_shift[1])],
    };
    settle_forward(part, &mut law);
    let first = part.rows_of(RowQuantity::ForwardVoltage).next();
    let at = first.map_or(String::new(), |row| format!(" at {}", row_text(row)));
    let side = |end: &Option<(&Row, f64)>, wanted: String| bound(end.iter().map(|(row, _)| *row), wanted);
    let mut axes = vec![
        SpreadAxis {
            name: "V_F".to_owned(),
            low: side(&ends[0], format!("V_F min{at}")),
            high: side(&ends[1], format!("V_F max{at}")),
        },
        // No device leaks less than nothing.
        SpreadAxis { name: "leakage".to_owned(), low: Bound::Sourced, high: leak.bound },
    ];
    if zener {
        axes.push(SpreadAxis {
            name: "V_Z".to_owned(),
            low: side(&z_shift[0], "V_Z min at the working current".to_owned()),
            high: side(&z_shift[1], "V_Z max at the working current".to_owned()),
        });
    }
    let residuals = residuals(part, |row| {
        let axis = axis_of(row)?;
        let value = |end: f64| {
            let mut at = [0.0; super::AXES];
            at[axis] = end;
            shown(&law.specimen(&at), row)
        };
        Some((|| Some([value(-1.0)?, value(0.0)?, value(1.0)?]))())
    })?;
    Ok(Model { part: part.name.clone(), law: Law::Diode(law), axes, residuals, notes })
}

/// Moves the ends outward to what a row's limits ask for.
fn widen<'r>(
    ends: &mut [Option<(&'r Row, f64)>; 2],
    row: &'r Row,
    (min, max): (Option<f64>, Option<f64>),
    shift_for: impl Fn(f64) -> f64,
) {
    if let Some(min) = min {
        let shift = (shift_for(min) - 1e-9).min(0.0);
        if ends[0].is_none_or(|(_, least)| shift < least) {
            ends[0] = Some((row, shift));
        }
    }
    if let Some(max) = max {
        let shift = (shift_for(max) + 1e-9).max(0.0);
        if ends[1].is_none_or(|(_, most)| shift > most) {
            ends[1] = Some((row, shift));
        }
    }
}

/// Moves the ends of V_F further out until no row of V_F lies beyond them: where other currents than the junction's own flow
/// (at the scale of the saturation current, or in a soft breakdown) a shift of the junction is not quite one of the diode.
fn settle_forward(part: &Part, law: &mut DiodeLaw) {
    for (k, sign) in [(0, -1.0), (1, 1.0)] {
        for _ in 0..ROUNDS {
            let specimen = law.specimen(&[sign, 0.0, 0.0, 0.0]);
            let missing = part.rows_of(RowQuantity::ForwardVoltage).filter_map(|row| {
                let limit = if sign < 0.0 { row.min } else { row.max };
                Some(sign * (limit? - shown(&specimen, row)?) * REFERENCE_TEMPERATURE / row.at.t_j)
            });
            let most = missing.fold(0.0, f64::max);
            if most <= 0.0 {
                break;
            }
            law.v_f[k] += sign * (most + 1e-9);
        }
    }
}

/// The axis that a row feeds.
fn axis_of(row: &Row) -> Option<usize> {
    match row.quantity {
        RowQuantity::ForwardVoltage => Some(0),
        RowQuantity::ReverseCurrent => Some(1),
        RowQuantity::ZenerVoltage => Some(2),
        _ => None,
    }
}

/// What a diode shows in the test condition of a row of V_F, V_Z (V) or I_R (A).
fn shown(diode: &Diode, row: &Row) -> Option<f64> {
    let at_current = |sign: f64| Some(sign * simulate::diode_voltage(diode, row.at.t_j, sign * row.at.i_f?)?);
    match row.quantity {
        RowQuantity::ForwardVoltage => at_current(1.0),
        RowQuantity::ZenerVoltage => at_current(-1.0),
        // So little current that the series resistance takes nothing.
        _ => Some(-diode.at(row.at.t_j).current(-row.at.v_r?).0),
    }
}

fn forward(part: &Part, notes: &mut Vec<String>, errors: &mut Diagnostics) -> Diode {
    let v_t = thermal_voltage(REFERENCE_TEMPERATURE);
    let mut points: Vec<(f64, f64)> = part
        .rows_of(RowQuantity::ForwardVoltage)
        .filter(|row| (row.at.t_j - REFERENCE_TEMPERATURE).abs() < 0.6)
        .filter_map(|row| Some((row.at.i_f?, arithmetic(row))))
        .collect();
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    points.dedup_by(|a, b| a.0 == b.0);
    if points.is_empty() {
        if part.kind == PartKind::Diode {
            errors.push(
                Diagnostic::error(
                    &part.place,
                    format!("the record of {} has no row of V_F at 25 °C", part.name),
                )
                .expected("a row such as `{V_F: {typ: 0.8 V, max: 1 V}, I_F: 100 mA}`"),
            );
        } else {
            notes.push("no row of V_F: 0.75 V at 10 mA is assumed".to_owned());
        }
        points.push((10e-3, 0.75));
    }
    if points.windows(2).any(|pair| pair[1].1 < pair[0].1) {
        let place = part.rows_of(RowQuantity::ForwardVoltage).next().map_or(&part.place, |row| &row.place);
        errors.push(Diagnostic::error(
            place,
            "the rows of V_F contradict each other: the voltage falls as the current rises",
        ));
    }
    let (emission, series) = match points.as_slice() {
        [] | [_] => {
            notes.push(format!("one row of V_F: an emission coefficient of {EMISSION} is assumed"));
            (EMISSION, 0.0)
        }
        [a, .., c] if points.len() == 2 => {
            let emission = ((c.1 - a.1) / (v_t * libm::log(c.0 / a.0))).clamp(1.0, 2.2);
            let left = c.1 - a.1 - emission * v_t * libm::log(c.0 / a.0);
            (emission, (left / (c.0 - a.0)).max(0.0))
        }
        _ => slope_and_series(&points, v_t),
    };
    let logs = points.iter().map(|(i, v)| libm::log(*i) - (v - i * series) / (emission * v_t));
    let saturation_current = libm::exp(logs.sum::<f64>() / points.len() as f64);
    Diode {
        saturation_current,
        emission_coefficient: emission,
        series_resistance: series,
        leakage: 0.0,
        leakage_e_fold: leakage::E_FOLD,
        breakdown_voltage: f64::INFINITY,
        breakdown_current: 1e-3,
        breakdown_slope: 1.0,
        breakdown_coefficient: 0.0,
        energy_gap: 1.12,
        saturation_exponent: 3.0,
    }
}

/// Emission coefficient and series resistance by least squares over three rows or more.
fn slope_and_series(points: &[(f64, f64)], v_t: f64) -> (f64, f64) {
    let n = points.len() as f64;
    let mean = |f: &dyn Fn(&(f64, f64)) -> f64| points.iter().map(f).sum::<f64>() / n;
    let x = |p: &(f64, f64)| v_t * libm::log(p.0);
    let (mx, mi, mv) = (mean(&x), mean(&|p| p.0), mean(&|p| p.1));
    let sum = |f: &dyn Fn(&(f64, f64)) -> f64| points.iter().map(f).sum::<f64>();
    let (xx, ii, xi) = (
        sum(&|p| (x(p) - mx) * (x(p) - mx)),
        sum(&|p| (p.0 - mi) * (p.0 - mi)),
        sum(&|p| (x(p) - mx) * (p.0 - mi)),
    );
    let (xv, iv) = (sum(&|p| (x(p) - mx) * (p.1 - mv)), sum(&|p| (p.0 - mi) * (p.1 - mv)));
    let determinant = xx * ii - xi * xi;
    let emission = (ii * xv - xi * iv) / determinant;
    let series = (xx * iv - xi * xv) / determinant;
    if series >= 0.0 && (1.0..=2.2).contains(&emission) {
        return (emission, series);
    }
    let emission = (xv / xx).clamp(1.0, 2.2);
    (emission, ((iv - emission * xi) / ii).max(0.0))
}

/// Breakdown voltage, slope and coefficient, such that the whole diode shows V_Z and r_Z: what its series resistance and its
/// leakage take of them is taken off first.
fn breakdown(part: &Part, nominal: &mut Diode, notes: &mut Vec<String>, errors: &mut Diagnostics) {
    let Some((row, i_z)) = part.rows_of(RowQuantity::ZenerVoltage).find_map(|row| Some((row, row.at.i_f?)))
    else {
        errors.push(
            Diagnostic::error(&part.place, format!("the record of {} has no row of V_Z", part.name))
                .expected("a row such as `{V_Z: {min: 4.8 V, typ: 5.1 V, max: 5.4 V}, I_Z: 5 mA}`"),
        );
        return;
    };
    match part.rows_of(RowQuantity::ZenerTemperatureCoefficient).next() {
        Some(row) => nominal.breakdown_coefficient = arithmetic(row),
        None => notes.push("no row of TC_VZ: the Zener voltage does not drift in the model".to_owned()),
    }
    let v_z = arithmetic(row);
    let others = nominal.saturation_current + nominal.leakage;
    if others >= i_z {
        errors.push(Diagnostic::error(
            &row.place,
            "the rows of I_R and V_F leave no current to break down at this I_Z",
        ));
        return;
    }
    let resistance = part
        .rows_of(RowQuantity::ZenerResistance)
        .find_map(|row| Some((row.at.i_f?, row.max.or(row.typ).or(row.min)?)));
    let (at, resistance) = resistance.unwrap_or_else(|| {
        notes.push("no row of r_Z: a fiftieth of V_Z / I_Z is assumed".to_owned());
        (i_z, SLOPE_SHARE * v_z / i_z)
    });
    if nominal.series_resistance > SERIES_SHARE * resistance {
        nominal.series_resistance = SERIES_SHARE * resistance;
        notes.push(
            "the rows of V_F alone would show more series resistance than half of r_Z: half of r_Z is taken"
                .to_owned(),
        );
    }
    nominal.breakdown_current = i_z - others;
    nominal.breakdown_voltage = v_z - i_z * nominal.series_resistance;
    // Of the law scale (e^x - e^(-V_Z / slope)) the slope is that of scale e^x, which is hardly more than the current.
    let inner = (resistance - nominal.series_resistance) * (at - others).max(0.1 * at);
    nominal.breakdown_slope = inner;
    for _ in 0..20 {
        let left = libm::exp(-nominal.breakdown_voltage / nominal.breakdown_slope);
        let scale = nominal.breakdown_current / (1.0 - left);
        nominal.breakdown_slope = inner + (resistance - nominal.series_resistance) * scale * left;
    }
    if !(nominal.breakdown_slope > 0.0 && nominal.breakdown_slope < nominal.breakdown_voltage) {
        errors.push(Diagnostic::error(
            &row.place,
            "the rows of r_Z and V_Z contradict each other: r_Z I_Z exceeds V_Z",
        ));
    }
}

/// The shifts of V_Z at its limits.
fn breakdown_ends<'p>(part: &'p Part, nominal: &Diode) -> [Option<(&'p Row, f64)>; 2] {
    let mut ends = [None, None];
    for row in part.rows_of(RowQuantity::ZenerVoltage) {
        let Some(model) = shown(nominal, row) else { continue };
        widen(&mut ends, row, (row.min, row.max), |limit| limit - model);
    }
    ends
}
