//! Part records: what a data sheet gives, row by row, each with its source. Letter symbols follow IEC 60747.

mod read;

pub use read::read;

use serde::{Deserialize, Serialize};

use crate::quantity::{Dimension, Kind, Role, Source};
use crate::source::{Digest, Place};

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum PartKind {
    Npn,
    Pnp,
    Diode,
    Zener,
    /// A family of resistors: tolerance, temperature coefficient, rating.
    Resistor,
    Capacitor,
    Filament,
    Coil,
}

/// One part record.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Part {
    pub name: String,
    pub kind: PartKind,
    pub description: String,
    pub rows: Vec<Row>,
    pub ratings: Vec<Rating>,
    /// Thermal impedance of single pulses.
    pub pulses: Vec<Pulse>,
    /// How specimens lie within their limits, where the record says so.
    #[serde(default)]
    pub spread: Option<Role>,
    /// Record file and its digest.
    pub digest: Digest,
    pub place: Place,
}

/// What a row states; units are SI throughout, temperatures in kelvin.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub enum RowQuantity {
    /// Static forward current transfer ratio h_FE = I_C / I_B in the active region.
    #[serde(rename = "h_FE")]
    CurrentGain,
    #[serde(rename = "V_BE")]
    BaseEmitterVoltage,
    #[serde(rename = "V_BE(sat)")]
    BaseEmitterSaturation,
    #[serde(rename = "V_CE(sat)")]
    CollectorEmitterSaturation,
    #[serde(rename = "I_CBO")]
    CollectorCutoff,
    /// Output conductance h_oe (A/V) at I_C, V_CE.
    #[serde(rename = "h_oe")]
    OutputConductance,
    /// Forward voltage of a diode at I_F.
    #[serde(rename = "V_F")]
    ForwardVoltage,
    /// Reverse current of a diode at V_R.
    #[serde(rename = "I_R")]
    ReverseCurrent,
    /// Zener voltage at I_Z.
    #[serde(rename = "V_Z")]
    ZenerVoltage,
    /// Dynamic resistance of a Zener at I_Z.
    #[serde(rename = "r_Z")]
    ZenerResistance,
    /// Temperature coefficient of the Zener voltage (V/K).
    #[serde(rename = "TC_VZ")]
    ZenerTemperatureCoefficient,
    /// Temperature coefficient of the base-emitter voltage (V/K), negative.
    #[serde(rename = "TC_VBE")]
    BaseEmitterTemperatureCoefficient,
    /// Temperature coefficient of resistance (1/K).
    #[serde(rename = "TCR")]
    ResistanceCoefficient,
    /// Relative tolerance of a resistor, capacitor or coil family.
    #[serde(rename = "tolerance")]
    Tolerance,
    /// Drift of the value of a resistor, capacitor or coil family with age, as a share of it; apart from its tolerance.
    #[serde(rename = "ageing")]
    Ageing,
    #[serde(rename = "R_cold")]
    ColdResistance,
    #[serde(rename = "R")]
    Resistance,
    #[serde(rename = "L")]
    Inductance,
    #[serde(rename = "C_ob")]
    OutputCapacitance,
    #[serde(rename = "C_ib")]
    InputCapacitance,
    #[serde(rename = "f_T")]
    TransitionFrequency,
}

/// The bias and temperature at which a row holds, SI units, magnitudes for NPN and PNP alike.
#[derive(Clone, Copy, PartialEq, Debug, Default, Serialize, Deserialize)]
pub struct TestCondition {
    pub i_c: Option<f64>,
    pub i_b: Option<f64>,
    pub v_ce: Option<f64>,
    pub v_cb: Option<f64>,
    /// Forward current of a diode, Zener current of a Zener.
    pub i_f: Option<f64>,
    pub v_r: Option<f64>,
    /// Junction temperature in kelvin (298.15 where the record says nothing else).
    pub t_j: f64,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Row {
    pub quantity: RowQuantity,
    pub at: TestCondition,
    pub min: Option<f64>,
    pub typ: Option<f64>,
    pub max: Option<f64>,
    pub source: Source,
    pub place: Place,
}

/// Absolute maximum ratings and thermal data; SI units.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug, Serialize, Deserialize)]
pub enum RatingQuantity {
    #[serde(rename = "V_CEO")]
    CollectorEmitter,
    #[serde(rename = "V_CBO")]
    CollectorBase,
    #[serde(rename = "V_EBO")]
    EmitterBase,
    #[serde(rename = "I_C")]
    CollectorCurrent,
    #[serde(rename = "I_CM")]
    PeakCollectorCurrent,
    #[serde(rename = "I_B")]
    BaseCurrent,
    /// Total dissipation at the case or ambient temperature given with it.
    #[serde(rename = "P_tot")]
    Dissipation,
    #[serde(rename = "T_j")]
    JunctionTemperature,
    /// Thermal resistance junction to ambient (K/W).
    #[serde(rename = "R_th(j-a)")]
    JunctionToAmbient,
    #[serde(rename = "R_th(j-c)")]
    JunctionToCase,
    /// Reverse voltage of a diode.
    #[serde(rename = "V_R")]
    Reverse,
    #[serde(rename = "I_F")]
    ForwardCurrent,
    #[serde(rename = "I_FM")]
    PeakForwardCurrent,
    #[serde(rename = "I_Z")]
    ZenerCurrent,
    /// Working voltage of a resistor, capacitor, filament or coil.
    #[serde(rename = "V")]
    Voltage,
    #[serde(rename = "I")]
    Current,
}

#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Rating {
    pub quantity: RatingQuantity,
    pub value: f64,
    /// Ambient temperature up to which the rating holds in full (P_tot), kelvin.
    pub up_to: Option<f64>,
    pub source: Source,
    pub place: Place,
}

/// Thermal impedance junction to ambient for a single pulse.
#[derive(Clone, PartialEq, Debug, Serialize, Deserialize)]
pub struct Pulse {
    /// Length of the pulse (s).
    pub lasts: f64,
    /// Z_th(j-a) at its end (K/W).
    pub impedance: f64,
    pub source: Source,
    pub place: Place,
}

impl PartKind {
    /// Transistors and diodes, whose model is fitted from the rows.
    pub fn is_junction_device(self) -> bool {
        matches!(self, PartKind::Npn | PartKind::Pnp | PartKind::Diode | PartKind::Zener)
    }
}

impl RowQuantity {
    pub const ALL: [RowQuantity; 21] = [
        RowQuantity::CurrentGain,
        RowQuantity::BaseEmitterVoltage,
        RowQuantity::BaseEmitterSaturation,
        RowQuantity::CollectorEmitterSaturation,
        RowQuantity::CollectorCutoff,
        RowQuantity::OutputConductance,
        RowQuantity::ForwardVoltage,
        RowQuantity::ReverseCurrent,
        RowQuantity::ZenerVoltage,
        RowQuantity::ZenerResistance,
        RowQuantity::ZenerTemperatureCoefficient,
        RowQuantity::BaseEmitterTemperatureCoefficient,
        RowQuantity::ResistanceCoefficient,
        RowQuantity::Tolerance,
        RowQuantity::Ageing,
        RowQuantity::ColdResistance,
        RowQuantity::Resistance,
        RowQuantity::Inductance,
        RowQuantity::OutputCapacitance,
        RowQuantity::InputCapacitance,
        RowQuantity::TransitionFrequency,
    ];

    /// The letter symbol, as a record writes it.
    pub fn symbol(self) -> &'static str {
        match self {
            RowQuantity::CurrentGain => "h_FE",
            RowQuantity::BaseEmitterVoltage => "V_BE",
            RowQuantity::BaseEmitterSaturation => "V_BE(sat)",
            RowQuantity::CollectorEmitterSaturation => "V_CE(sat)",
            RowQuantity::CollectorCutoff => "I_CBO",
            RowQuantity::OutputConductance => "h_oe",
            RowQuantity::ForwardVoltage => "V_F",
            RowQuantity::ReverseCurrent => "I_R",
            RowQuantity::ZenerVoltage => "V_Z",
            RowQuantity::ZenerResistance => "r_Z",
            RowQuantity::ZenerTemperatureCoefficient => "TC_VZ",
            RowQuantity::BaseEmitterTemperatureCoefficient => "TC_VBE",
            RowQuantity::ResistanceCoefficient => "TCR",
            RowQuantity::Tolerance => "tolerance",
            RowQuantity::Ageing => "ageing",
            RowQuantity::ColdResistance => "R_cold",
            RowQuantity::Resistance => "R",
            RowQuantity::Inductance => "L",
            RowQuantity::OutputCapacitance => "C_ob",
            RowQuantity::InputCapacitance => "C_ib",
            RowQuantity::TransitionFrequency => "f_T",
        }
    }

    pub fn dimension(self) -> Dimension {
        const PER_KELVIN: Dimension = Dimension([0, 0, 0, 0, -2]);
        const VOLT_PER_KELVIN: Dimension = Dimension([4, 2, -6, -2, -2]);
        match self {
            RowQuantity::CurrentGain | RowQuantity::Tolerance | RowQuantity::Ageing => Dimension::NONE,
            RowQuantity::BaseEmitterVoltage
            | RowQuantity::BaseEmitterSaturation
            | RowQuantity::CollectorEmitterSaturation
            | RowQuantity::ForwardVoltage
            | RowQuantity::ZenerVoltage => Dimension::VOLT,
            RowQuantity::CollectorCutoff | RowQuantity::ReverseCurrent => Dimension::AMPERE,
            RowQuantity::OutputConductance => Dimension::SIEMENS,
            RowQuantity::ZenerResistance | RowQuantity::ColdResistance | RowQuantity::Resistance => {
                Dimension::OHM
            }
            RowQuantity::ZenerTemperatureCoefficient | RowQuantity::BaseEmitterTemperatureCoefficient => {
                VOLT_PER_KELVIN
            }
            RowQuantity::ResistanceCoefficient => PER_KELVIN,
            RowQuantity::Inductance => Dimension::HENRY,
            RowQuantity::OutputCapacitance | RowQuantity::InputCapacitance => Dimension::FARAD,
            RowQuantity::TransitionFrequency => Dimension::HERTZ,
        }
    }

    /// The bias without which a row of this quantity says nothing.
    pub fn needs(self) -> &'static [&'static str] {
        match self {
            RowQuantity::CurrentGain | RowQuantity::BaseEmitterVoltage | RowQuantity::OutputConductance => {
                &["I_C", "V_CE"]
            }
            RowQuantity::BaseEmitterSaturation | RowQuantity::CollectorEmitterSaturation => &["I_C", "I_B"],
            RowQuantity::CollectorCutoff => &["V_CB"],
            RowQuantity::ForwardVoltage => &["I_F"],
            RowQuantity::ReverseCurrent => &["V_R"],
            RowQuantity::ZenerVoltage | RowQuantity::ZenerResistance => &["I_Z"],
            _ => &[],
        }
    }
}

impl RatingQuantity {
    pub const ALL: [RatingQuantity; 16] = [
        RatingQuantity::CollectorEmitter,
        RatingQuantity::CollectorBase,
        RatingQuantity::EmitterBase,
        RatingQuantity::CollectorCurrent,
        RatingQuantity::PeakCollectorCurrent,
        RatingQuantity::BaseCurrent,
        RatingQuantity::Dissipation,
        RatingQuantity::JunctionTemperature,
        RatingQuantity::JunctionToAmbient,
        RatingQuantity::JunctionToCase,
        RatingQuantity::Reverse,
        RatingQuantity::ForwardCurrent,
        RatingQuantity::PeakForwardCurrent,
        RatingQuantity::ZenerCurrent,
        RatingQuantity::Voltage,
        RatingQuantity::Current,
    ];

    /// The letter symbol, as a record writes it.
    pub fn symbol(self) -> &'static str {
        match self {
            RatingQuantity::CollectorEmitter => "V_CEO",
            RatingQuantity::CollectorBase => "V_CBO",
            RatingQuantity::EmitterBase => "V_EBO",
            RatingQuantity::CollectorCurrent => "I_C",
            RatingQuantity::PeakCollectorCurrent => "I_CM",
            RatingQuantity::BaseCurrent => "I_B",
            RatingQuantity::Dissipation => "P_tot",
            RatingQuantity::JunctionTemperature => "T_j",
            RatingQuantity::JunctionToAmbient => "R_th(j-a)",
            RatingQuantity::JunctionToCase => "R_th(j-c)",
            RatingQuantity::Reverse => "V_R",
            RatingQuantity::ForwardCurrent => "I_F",
            RatingQuantity::PeakForwardCurrent => "I_FM",
            RatingQuantity::ZenerCurrent => "I_Z",
            RatingQuantity::Voltage => "V",
            RatingQuantity::Current => "I",
        }
    }

    pub fn kind(self) -> Kind {
        match self {
            RatingQuantity::CollectorEmitter
            | RatingQuantity::CollectorBase
            | RatingQuantity::EmitterBase
            | RatingQuantity::Reverse
            | RatingQuantity::Voltage => Kind::of(Dimension::VOLT),
            RatingQuantity::CollectorCurrent
            | RatingQuantity::PeakCollectorCurrent
            | RatingQuantity::BaseCurrent
            | RatingQuantity::ForwardCurrent
            | RatingQuantity::PeakForwardCurrent
            | RatingQuantity::ZenerCurrent
            | RatingQuantity::Current => Kind::of(Dimension::AMPERE),
            RatingQuantity::Dissipation => Kind::of(Dimension::WATT),
            RatingQuantity::JunctionTemperature => Kind::TEMPERATURE,
            RatingQuantity::JunctionToAmbient | RatingQuantity::JunctionToCase => {
                Kind::of(Dimension::KELVIN_PER_WATT)
            }
        }
    }
}

impl Part {
    pub fn rating(&self, quantity: RatingQuantity) -> Option<&Rating> {
        self.ratings.iter().find(|rating| rating.quantity == quantity)
    }

    /// How far values drift with age, down and up, as a share of them.
    pub fn ageing(&self) -> Option<(f64, f64, &Row)> {
        let row = self.rows_of(RowQuantity::Ageing).next()?;
        let (low, high) = match (row.min, row.max) {
            (Some(min), Some(max)) => (min.min(0.0), max.max(0.0)),
            (Some(one), None) | (None, Some(one)) => (-one.abs(), one.abs()),
            (None, None) => return None,
        };
        Some((low, high, row))
    }

    pub fn rows_of(&self, quantity: RowQuantity) -> impl Iterator<Item = &Row> {
        self.rows.iter().filter(move |row| row.quantity == quantity)
    }
}
