//! The bipolar transistor: transport form of Ebers and Moll (1954), with the base charge of Gummel and Poon (1970).

use serde::{Deserialize, Serialize};

use super::curve::Curve;
use super::{REFERENCE_TEMPERATURE, growth, leakage, saturation_growth, thermal_voltage};
use crate::numeric;

/// `1 - V_BC / V_AF - V_BE / V_AR` below which the base charge goes on along the tangent to its reciprocal.
const LEAST_WIDTH: f64 = 0.1;

/// Parameters at the reference temperature. Infinite `early_*` and `knee_current_*` and zero `*_leakage` switch the
/// effect off, which leaves the transport form of Ebers and Moll.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct Transistor {
    /// Transport saturation current I_S (A).
    pub saturation_current: f64,
    /// Emission coefficient of the transport current, 1 for an ideal junction.
    pub emission_coefficient: f64,
    /// Ideal forward and reverse current gain.
    #[serde(deserialize_with = "super::maybe_infinite")]
    pub gain_forward: f64,
    pub gain_reverse: f64,
    /// Early voltages (V).
    #[serde(deserialize_with = "super::maybe_infinite")]
    pub early_voltage_forward: f64,
    #[serde(deserialize_with = "super::maybe_infinite")]
    pub early_voltage_reverse: f64,
    /// High-level injection knee of the forward transport current (A).
    #[serde(deserialize_with = "super::maybe_infinite")]
    pub knee_current_forward: f64,
    /// Base-emitter recombination current: saturation value (A) and emission coefficient.
    pub emitter_leakage: f64,
    pub emitter_leakage_emission: f64,
    /// Terminal resistances (Ω).
    pub base_resistance: f64,
    pub collector_resistance: f64,
    pub emitter_resistance: f64,
    /// Collector-base cut-off current (A) at the reference temperature, an element of its own.
    pub cutoff_current: f64,
    /// Temperature rise (K) that multiplies the cut-off current by e.
    pub cutoff_e_fold: f64,
    /// Energy gap (eV) and temperature exponent of the saturation current.
    pub energy_gap: f64,
    pub saturation_exponent: f64,
    /// Temperature exponent of the gains.
    pub gain_exponent: f64,
    /// How far this specimen's forward gain lies from what the parameters above give, as the logarithm of a factor: over
    /// the logarithm of the emitter junction's exponential current (A), and over that of T / 25 °C. It acts on the base
    /// current alone; I_C against V_BE stays as it is.
    #[serde(default, skip_serializing_if = "Curve::is_zero")]
    pub gain_over_current: Curve,
    #[serde(default, skip_serializing_if = "Curve::is_zero")]
    pub gain_over_temperature: Curve,
}

/// Currents into collector and base of the intrinsic transistor and their derivatives over its junction voltages.
#[derive(Clone, Copy, PartialEq, Debug, Default)]
pub struct Currents {
    pub i_c: f64,
    pub i_b: f64,
    pub di_c_dv_be: f64,
    pub di_c_dv_bc: f64,
    pub di_b_dv_be: f64,
    pub di_b_dv_bc: f64,
}

/// The equations at one junction temperature, temperature laws already applied.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct AtTemperature {
    pub parameters: Transistor,
    pub thermal_voltage: f64,
    /// ln I_S.
    log_saturation: f64,
}

impl Transistor {
    /// Applies the temperature laws at junction temperature `t_j` (K).
    ///
    /// A knee current below eight times the saturation current is raised to that: no transistor has one, and the base
    /// charge would stop being real.
    pub fn at(&self, t_j: f64) -> AtTemperature {
        let grown = saturation_growth(self.energy_gap, self.saturation_exponent, t_j);
        let log_ratio = libm::log(t_j / REFERENCE_TEMPERATURE);
        let gain = numeric::exp(self.gain_exponent * log_ratio);
        let own = gain * numeric::exp(self.gain_over_temperature.at(log_ratio).0);
        let side = numeric::exp(grown / self.emitter_leakage_emission) / own;
        let saturation_current = self.saturation_current * numeric::exp(grown);
        let bent = !self.gain_over_current.is_zero();
        AtTemperature {
            thermal_voltage: thermal_voltage(t_j),
            log_saturation: if bent { libm::log(saturation_current) } else { 0.0 },
            parameters: Transistor {
                saturation_current,
                gain_forward: self.gain_forward * own,
                gain_reverse: self.gain_reverse * gain,
                knee_current_forward: self.knee_current_forward.max(8.0 * saturation_current),
                emitter_leakage: self.emitter_leakage * side,
                cutoff_current: self.cutoff_current
                    * numeric::exp((t_j - REFERENCE_TEMPERATURE) / self.cutoff_e_fold),
                ..*self
            },
        }
    }
}

impl AtTemperature {
    /// Collector and base current of the intrinsic transistor (without terminal resistances) at `v_be`, `v_bc` (V).
    ///
    /// Finite, with continuous derivatives, at any finite voltages. The cut-off element carries its full current under
    /// a reverse bias of a few thermal voltages, nothing at zero bias, and does not conduct forward.
    pub fn currents(&self, v_be: f64, v_bc: f64) -> Currents {
        let p = &self.parameters;
        let n_vt = p.emission_coefficient * self.thermal_voltage;
        let (forward, d_forward) = junction(p.saturation_current, v_be, n_vt);
        let (reverse, d_reverse) = junction(p.saturation_current, v_bc, n_vt);
        let (leak, d_leak) =
            junction(p.emitter_leakage, v_be, p.emitter_leakage_emission * self.thermal_voltage);

        // Base charge: q_b = q_1 / 2 * (1 + sqrt(1 + 4 q_2)), Early effect in q_1, the knee in q_2 >= -1/8.
        let width = 1.0 - v_bc / p.early_voltage_forward - v_be / p.early_voltage_reverse;
        let (q_1, dq_1) = reciprocal(width);
        let (dq_1_dv_be, dq_1_dv_bc) = (-dq_1 / p.early_voltage_reverse, -dq_1 / p.early_voltage_forward);
        let root = (1.0 + 4.0 * (forward / p.knee_current_forward)).sqrt();
        let q_b = q_1 * (1.0 + root) / 2.0;
        let dq_b_dv_be = dq_1_dv_be * (1.0 + root) / 2.0 + q_1 / root * (d_forward / p.knee_current_forward);
        let dq_b_dv_bc = dq_1_dv_bc * (1.0 + root) / 2.0;

        let transport = (forward - reverse) / q_b;
        let dt_dv_be = (d_forward - transport * dq_b_dv_be) / q_b;
        let dt_dv_bc = (-d_reverse - transport * dq_b_dv_bc) / q_b;

        // The cut-off current flows from collector to base.
        let (cutoff, d_cutoff) = leakage(p.cutoff_current, v_bc, self.thermal_voltage);

        // What the emitter junction takes from the base.
        let (mut base, mut d_base) = (forward / p.gain_forward + leak, d_forward / p.gain_forward + d_leak);
        if !p.gain_over_current.is_zero() {
            let (log_gain, slope) = p.gain_over_current.at(self.log_saturation + v_be / n_vt);
            let factor = numeric::exp(-log_gain);
            d_base = factor * (d_base - base * slope / n_vt);
            base *= factor;
        }

        Currents {
            i_c: transport - reverse / p.gain_reverse - cutoff,
            i_b: base + reverse / p.gain_reverse + cutoff,
            di_c_dv_be: dt_dv_be,
            di_c_dv_bc: dt_dv_bc - d_reverse / p.gain_reverse - d_cutoff,
            di_b_dv_be: d_base,
            di_b_dv_bc: d_reverse / p.gain_reverse + d_cutoff,
        }
    }
}

/// Current of an exponential junction and its derivative.
fn junction(saturation: f64, v: f64, n_vt: f64) -> (f64, f64) {
    if saturation == 0.0 {
        return (0.0, 0.0);
    }
    let (grown, slope) = growth(v / n_vt);
    (saturation * grown, saturation * slope / n_vt)
}

/// `1 / width` and its derivative; below [`LEAST_WIDTH`], where a real base would long be punched through or turned over,
/// the tangent, so that the base charge stays positive and its derivative continuous.
fn reciprocal(width: f64) -> (f64, f64) {
    let at = width.max(LEAST_WIDTH);
    let value = 1.0 / at;
    let slope = -value * value;
    (value + slope * (width - at), slope)
}
