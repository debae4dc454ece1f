//! Part -> Model: parameters, spread axes, residuals.
//!
//! The typical column gives the nominal curve; the limits give one-sided spread axes: in every row's own test condition the
//! end of an axis reaches the row's limit or lies outside it.

mod axes;
mod check;
mod diode;
mod leakage;
pub mod simulate;
mod transistor;

use serde::{Deserialize, Serialize};

use crate::device::curve::Curve;
use crate::device::diode::Diode;
use crate::device::transistor::Transistor;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::part::{Part, PartKind, Row, RowQuantity};
use crate::quantity::{self, Dimension, Kind, Source};

/// How many spread coordinates a device has at most.
pub const AXES: usize = 4;
/// Coordinates of one device in its spread: 0 is nominal, -1 and 1 are the ends of each axis.
pub type Coordinates = [f64; AXES];

/// What bounds a spread axis on one side.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "bound", rename_all = "kebab-case")]
pub enum Bound {
    /// Minimum or maximum rows of the record, by data sheet, measurement, standard, specification or calculation.
    Sourced,
    /// The bound is an assumption or from memory.
    Weak { source: Source },
    /// There is no row that bounds this side; `wanted` says which one to get. The coordinate stays at 0 on this side.
    Absent { wanted: String },
}

/// One way in which specimens of a part differ, independent of the others.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct SpreadAxis {
    /// `gain`, `V_BE`, `saturation`, `leakage` of a transistor; `V_F`, `leakage`, `V_Z` of a diode.
    pub name: String,
    /// In words, for a corner table: what the low and the high end mean.
    pub low: Bound,
    pub high: Bound,
}

/// One data-sheet row simulated in its own test condition beside the sheet's value.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Residual {
    pub quantity: RowQuantity,
    /// The test condition as printed.
    pub at: String,
    pub min: Option<f64>,
    pub typ: Option<f64>,
    pub max: Option<f64>,
    /// What the model gives at the low end, nominal, at the high end of the axis that the row feeds.
    pub model: [f64; 3],
}

/// The law of a device with its spread.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
#[serde(tag = "law", rename_all = "kebab-case")]
#[expect(clippy::large_enum_variant, reason = "one a part: nothing is gained by a box")]
pub enum Law {
    Transistor(TransistorLaw),
    Diode(DiodeLaw),
}

/// A transistor with the deformations of its four axes: gain, V_BE, saturation, leakage.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct TransistorLaw {
    pub nominal: Transistor,
    /// Current gain at coordinate -1 and 1 (base-current terms; I_C against V_BE is kept).
    pub gain: [GainEnd; 2],
    /// Shift of V_BE (V) at coordinate -1 and 1 (transport and base current together; the gain is kept).
    pub v_be: [f64; 2],
    /// Base resistance (Ω) at coordinate -1 and 1 of the V_BE axis: what V_BE(sat) rows ask for beyond the shift.
    pub base_resistance: [f64; 2],
    /// Collector resistance (Ω) and reverse gain at coordinate -1 and 1.
    pub collector_resistance: [f64; 2],
    pub gain_reverse: [f64; 2],
    /// Factor on the cut-off current at coordinate -1 and 1; 0 at -1.
    pub leakage: [f64; 2],
    /// (I_C, forced gain) up to which a maximum row of V_CE(sat) covers saturation, with that maximum (V): results that
    /// use V_CE in saturation beyond all of these are not shown.
    pub saturation_cover: Vec<SaturationRow>,
}

/// How far the gain at one end of its axis lies from the nominal curve: logarithms of factors that multiply.
#[derive(Clone, Copy, PartialEq, Debug, Default, Serialize, Deserialize)]
pub struct GainEnd {
    /// Over the logarithm of the emitter junction's exponential current (A): what the limits at 25 °C ask for.
    pub over_current: Curve,
    /// Over the logarithm of T / 25 °C: what limits at other temperatures ask for beyond that.
    pub over_temperature: Curve,
}

/// A maximum row of V_CE(sat) or V_BE(sat).
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct SaturationRow {
    pub i_c: f64,
    pub forced_gain: f64,
    pub v_ce_max: f64,
}

/// A diode or Zener with the deformations of its axes: forward voltage, leakage, Zener voltage.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct DiodeLaw {
    pub nominal: Diode,
    /// Shift of V_F (V) at coordinate -1 and 1.
    pub v_f: [f64; 2],
    /// Factor on the leakage at coordinate -1 and 1.
    pub leakage: [f64; 2],
    /// Shift of V_Z (V) at coordinate -1 and 1; zero for a diode.
    pub v_z: [f64; 2],
}

/// A fitted part.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Model {
    pub part: String,
    pub law: Law,
    pub axes: Vec<SpreadAxis>,
    pub residuals: Vec<Residual>,
    /// What a reader should know: which effects have no row and are left out.
    pub notes: Vec<String>,
}

/// Fits the model of a transistor, diode or Zener to its record.
///
/// # Errors
/// Rows that are missing or contradict each other, at their place; a row of which the model misses a limit on the inside in
/// the row's own test condition; a part that is no junction device.
pub fn fit(part: &Part) -> Result<Model, Diagnostics> {
    let mut errors = Diagnostics::default();
    check::contradictions(part, &mut errors);
    if errors.has_errors() {
        return Err(errors);
    }
    match part.kind {
        PartKind::Npn | PartKind::Pnp => transistor::fit(part),
        PartKind::Diode | PartKind::Zener => diode::fit(part),
        _ => Err(Diagnostic::error(&part.place, format!("{} has no junction to fit", part.name)).into()),
    }
}

/// What bounds a side on which `rows` decide: any weak one among them makes it weak; without any it is open.
fn bound<'r>(rows: impl Iterator<Item = &'r Row>, wanted: impl Into<String>) -> Bound {
    let mut bound = Bound::Absent { wanted: wanted.into() };
    for row in rows {
        if row.source.origin.is_weak() {
            return Bound::Weak { source: row.source.clone() };
        }
        bound = Bound::Sourced;
    }
    bound
}

/// Each row that feeds an axis beside what `values` gives in its test condition at the low end, nominal and at the high end.
///
/// # Errors
/// A row whose bias the model cannot reach, or of which it misses a limit on the inside.
fn residuals(
    part: &Part,
    values: impl Fn(&Row) -> Option<Option<[f64; 3]>>,
) -> Result<Vec<Residual>, Diagnostics> {
    let mut errors = Diagnostics::default();
    let mut all = Vec::new();
    for row in &part.rows {
        let Some(model) = values(row) else { continue };
        let Some(model) = model else {
            check::unreachable(row, &mut errors);
            continue;
        };
        let residual = Residual {
            quantity: row.quantity,
            at: row_text(row),
            min: row.min,
            typ: row.typ,
            max: row.max,
            model,
        };
        check::kept(row, &residual, &mut errors);
        all.push(residual);
    }
    if errors.has_errors() { Err(errors) } else { Ok(all) }
}

/// A row's test condition as printed: `I_C = 150 mA, V_CE = 1 V, T_j = 25 °C`.
fn row_text(row: &Row) -> String {
    let at = &row.at;
    let zener = matches!(row.quantity, RowQuantity::ZenerVoltage | RowQuantity::ZenerResistance);
    let biases = [
        ("I_C", at.i_c, Dimension::AMPERE),
        ("I_B", at.i_b, Dimension::AMPERE),
        ("V_CE", at.v_ce, Dimension::VOLT),
        ("V_CB", at.v_cb, Dimension::VOLT),
        (if zener { "I_Z" } else { "I_F" }, at.i_f, Dimension::AMPERE),
        ("V_R", at.v_r, Dimension::VOLT),
    ];
    let mut parts: Vec<String> = biases
        .into_iter()
        .filter_map(|(name, value, dimension)| {
            let value = value?;
            let unit = quantity::preferred_unit(&[value], Kind::of(dimension));
            Some(format!("{name} = {}", short(value, &unit)))
        })
        .collect();
    parts.push(format!("T_j = {}", short(at.t_j, &quantity::Unit::celsius())));
    parts.join(", ")
}

fn current_text(amperes: f64) -> String {
    short(amperes, &quantity::preferred_unit(&[amperes], Kind::of(Dimension::AMPERE)))
}

/// A bias value without trailing zeros.
fn short(value: f64, unit: &quantity::Unit) -> String {
    let shown = libm::round(unit.from_si(value) * 1e4) / 1e4;
    format!("{shown}\u{a0}{}", unit.symbol).replace('-', "−")
}

impl TransistorLaw {
    /// The transistor of a specimen at `at` = (gain, V_BE, saturation, leakage).
    pub fn specimen(&self, at: &Coordinates) -> Transistor {
        use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
        let nominal = &self.nominal;
        let [gain, v_be, saturation, leakage] = *at;
        let end = &self.gain[usize::from(gain > 0.0)];
        let shift = between(self.v_be, v_be);
        let v_t = thermal_voltage(REFERENCE_TEMPERATURE);
        let main = libm::exp(-shift / (nominal.emission_coefficient * v_t));
        let side = libm::exp(-shift / (nominal.emitter_leakage_emission * v_t));
        let resistance = from_nominal(nominal.collector_resistance, self.collector_resistance, saturation);
        Transistor {
            saturation_current: nominal.saturation_current * main,
            gain_over_current: end.over_current.times(gain.abs()),
            gain_over_temperature: end.over_temperature.times(gain.abs()),
            emitter_leakage: nominal.emitter_leakage * side,
            base_resistance: from_nominal(nominal.base_resistance, self.base_resistance, v_be),
            collector_resistance: resistance,
            gain_reverse: from_nominal(nominal.gain_reverse, self.gain_reverse, saturation),
            cutoff_current: nominal.cutoff_current * from_nominal(1.0, self.leakage, leakage),
            ..*nominal
        }
    }
}

impl DiodeLaw {
    /// The diode of a specimen at `at` = (V_F, leakage, V_Z, unused).
    pub fn specimen(&self, at: &Coordinates) -> Diode {
        use crate::device::{REFERENCE_TEMPERATURE, thermal_voltage};
        let nominal = &self.nominal;
        let shift = between(self.v_f, at[0]);
        let n_vt = nominal.emission_coefficient * thermal_voltage(REFERENCE_TEMPERATURE);
        Diode {
            saturation_current: nominal.saturation_current * libm::exp(-shift / n_vt),
            leakage: nominal.leakage * from_nominal(1.0, self.leakage, at[1]),
            breakdown_voltage: nominal.breakdown_voltage + between(self.v_z, at[2]),
            ..*nominal
        }
    }
}

/// Straight line from the end at -1 over 0 at 0 to the end at 1.
fn between(ends: [f64; 2], at: f64) -> f64 {
    from_nominal(0.0, ends, at)
}

/// Straight line from the end at -1 over `nominal` at 0 to the end at 1.
fn from_nominal(nominal: f64, ends: [f64; 2], at: f64) -> f64 {
    nominal + at.abs() * (if at < 0.0 { ends[0] } else { ends[1] } - nominal)
}
