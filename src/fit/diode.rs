//! Diode and Zener rows -> parameters and spread axes.
//!
//! Forward: V = n V_T ln(I / I_S) + I R, linear in n, n ln I_S and R; as many of them as there are rows.

use super::transistor::arithmetic;
use super::{Bound, DiodeLaw, Law, Model, Residual, SpreadAxis, row_text};
use crate::device::diode::Diode;
use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, PartKind, Row, RowQuantity};

/// What stands in where a record has no row; each use is noted.
const EMISSION: f64 = 1.8;
const E_FOLD: f64 = 10.0 / std::f64::consts::LN_2;
/// Dynamic resistance of a Zener without a row, as a share of V_Z / I_Z.
const SLOPE_SHARE: f64 = 0.02;

pub(super) fn fit(part: &Part) -> Result<Model, Diagnostics> {
    let mut notes = Vec::new();
    let mut errors = Diagnostics::default();
    let mut nominal = forward(part, &mut notes, &mut errors);
    let zener = part.kind == PartKind::Zener;
    let z_shift = if zener { breakdown(part, &mut nominal, &mut notes, &mut errors) } else { [None, None] };
    let leak = leakage(part, &mut nominal, &mut notes);
    if errors.has_errors() {
        return Err(errors);
    }
    let mut ends: [Option<(&Row, f64)>; 2] = [None, None];
    for row in part.rows_of(RowQuantity::ForwardVoltage) {
        let Some(model) = row.at.i_f.map(|i_f| drop(&nominal, row.at.t_j, i_f)) else { continue };
        let scale = row.at.t_j / REFERENCE_TEMPERATURE;
        widen(&mut ends, row, (row.min, row.max), |limit| (limit - model) / scale);
    }
    // Far below the saturation current's own scale the closed form is no pure shift: a microvolt more stays outside.
    for (end, outward) in ends.iter_mut().zip([-2e-6, 2e-6]) {
        if let Some((_, shift)) = end {
            *shift += outward;
        }
    }
    let value = |end: &Option<(&Row, f64)>| end.map_or(0.0, |(_, shift)| shift);
    let law = DiodeLaw {
        nominal,
        v_f: [value(&ends[0]), value(&ends[1])],
        leakage: [0.0, leak.map_or(1.0, |(_, factor)| factor)],
        v_z: [value(&z_shift[0]), value(&z_shift[1])],
    };
    let first = part.rows_of(RowQuantity::ForwardVoltage).next();
    let at = first.map_or(String::new(), |row| format!(" at {}", row_text(row)));
    let side = |end: Option<&Row>, wanted: String| match end {
        Some(row) if row.source.origin.is_weak() => Bound::Weak { source: row.source.clone() },
        Some(_) => Bound::Sourced,
        None => Bound::Absent { wanted },
    };
    let mut axes = vec![
        SpreadAxis {
            name: "V_F".to_owned(),
            low: side(ends[0].map(|(row, _)| row), format!("V_F min{at}")),
            high: side(ends[1].map(|(row, _)| row), format!("V_F max{at}")),
        },
        SpreadAxis {
            name: "leakage".to_owned(),
            low: Bound::Sourced,
            high: side(leak.map(|(row, _)| row), "I_R max at the working V_R and the highest T_j".to_owned()),
        },
    ];
    if zener {
        axes.push(SpreadAxis {
            name: "V_Z".to_owned(),
            low: side(z_shift[0].map(|(row, _)| row), "V_Z min at the working current".to_owned()),
            high: side(z_shift[1].map(|(row, _)| row), "V_Z max at the working current".to_owned()),
        });
    }
    let residuals = part.rows.iter().filter_map(|row| residual(row, &law)).collect();
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

/// Forward voltage (V) at a current, in closed form.
fn drop(diode: &Diode, t_j: f64, i_f: f64) -> f64 {
    let at = diode.at(t_j);
    let p = &at.parameters;
    p.emission_coefficient * at.thermal_voltage * libm::log1p(i_f / p.saturation_current)
        + i_f * p.series_resistance
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
        leakage_e_fold: E_FOLD,
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

/// Zener voltage, slope and coefficient; gives the shifts of V_Z at its limits.
fn breakdown<'p>(
    part: &'p Part,
    nominal: &mut Diode,
    notes: &mut Vec<String>,
    errors: &mut Diagnostics,
) -> [Option<(&'p Row, f64)>; 2] {
    let Some((row, i_z)) = part.rows_of(RowQuantity::ZenerVoltage).find_map(|row| Some((row, row.at.i_f?)))
    else {
        errors.push(
            Diagnostic::error(&part.place, format!("the record of {} has no row of V_Z", part.name))
                .expected("a row such as `{V_Z: {min: 4.8 V, typ: 5.1 V, max: 5.4 V}, I_Z: 5 mA}`"),
        );
        return [None, None];
    };
    nominal.breakdown_voltage = arithmetic(row);
    nominal.breakdown_current = i_z;
    let resistance = part
        .rows_of(RowQuantity::ZenerResistance)
        .find_map(|row| Some((row.at.i_f?, row.max.or(row.typ).or(row.min)?)));
    nominal.breakdown_slope = match resistance {
        Some((at, resistance)) => resistance * at,
        None => {
            notes.push("no row of r_Z: a fiftieth of V_Z / I_Z is assumed".to_owned());
            SLOPE_SHARE * nominal.breakdown_voltage
        }
    };
    match part.rows_of(RowQuantity::ZenerTemperatureCoefficient).next() {
        Some(row) => nominal.breakdown_coefficient = arithmetic(row),
        None => notes.push("no row of TC_VZ: the Zener voltage does not drift in the model".to_owned()),
    }
    let mut ends = [None, None];
    for row in part.rows_of(RowQuantity::ZenerVoltage) {
        let Some(i) = row.at.i_f else { continue };
        let model = zener_voltage(nominal, row.at.t_j, i);
        widen(&mut ends, row, (row.min, row.max), |limit| limit - model);
    }
    ends
}

/// Zener voltage (V) at a reverse current.
fn zener_voltage(diode: &Diode, t_j: f64, i_z: f64) -> f64 {
    let p = diode.at(t_j).parameters;
    p.breakdown_voltage + p.breakdown_slope * libm::log(i_z / p.breakdown_current) + i_z * p.series_resistance
        - p.breakdown_current * p.series_resistance
}

/// The leakage element; gives the deciding row and the factor at the high end of its axis.
fn leakage<'p>(part: &'p Part, nominal: &mut Diode, notes: &mut Vec<String>) -> Option<(&'p Row, f64)> {
    let limits: Vec<(&Row, f64)> =
        part.rows_of(RowQuantity::ReverseCurrent).filter_map(|row| Some((row, row.max?))).collect();
    let coolest = limits.iter().min_by(|a, b| a.0.at.t_j.total_cmp(&b.0.at.t_j))?;
    let hottest = limits.iter().max_by(|a, b| a.0.at.t_j.total_cmp(&b.0.at.t_j))?;
    if hottest.0.at.t_j - coolest.0.at.t_j > 1.0 && hottest.1 > coolest.1 {
        nominal.leakage_e_fold = (hottest.0.at.t_j - coolest.0.at.t_j) / libm::log(hottest.1 / coolest.1);
    } else {
        notes.push("one temperature of I_R: it doubles per 10 K (common practice)".to_owned());
    }
    let at_reference =
        |value: f64, t_j: f64| value * libm::exp(-(t_j - REFERENCE_TEMPERATURE) / nominal.leakage_e_fold);
    let deciding = limits
        .iter()
        .map(|(row, max)| (*row, at_reference(*max, row.at.t_j)))
        .max_by(|a, b| a.1.total_cmp(&b.1))?;
    let typical =
        part.rows_of(RowQuantity::ReverseCurrent).find_map(|row| Some(at_reference(row.typ?, row.at.t_j)));
    nominal.leakage = typical.unwrap_or(deciding.1 / 10.0);
    Some((deciding.0, (deciding.1 / nominal.leakage).max(1.0)))
}

fn residual(row: &Row, law: &DiodeLaw) -> Option<Residual> {
    let axis = match row.quantity {
        RowQuantity::ForwardVoltage => 0,
        RowQuantity::ReverseCurrent => 1,
        RowQuantity::ZenerVoltage => 2,
        _ => return None,
    };
    let value = |end: f64| -> Option<f64> {
        let mut at = [0.0; super::AXES];
        at[axis] = end;
        let diode = law.specimen(&at);
        Some(match row.quantity {
            RowQuantity::ForwardVoltage => drop(&diode, row.at.t_j, row.at.i_f?),
            RowQuantity::ZenerVoltage => zener_voltage(&diode, row.at.t_j, row.at.i_f?),
            _ => diode.at(row.at.t_j).parameters.leakage,
        })
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
