//! Diode and Zener: exponential junction with series resistance; breakdown as an exponential of its own.

use serde::{Deserialize, Serialize};

use super::{REFERENCE_TEMPERATURE, thermal_voltage};

/// Parameters at the reference temperature. `breakdown_voltage` is infinite for a plain diode.
#[derive(Clone, Copy, PartialEq, Debug, Serialize, Deserialize)]
pub struct Diode {
    /// Saturation current (A) and emission coefficient of the junction.
    pub saturation_current: f64,
    pub emission_coefficient: f64,
    /// Series resistance (Ω).
    pub series_resistance: f64,
    /// Reverse leakage beyond the saturation current (A), its e-fold in kelvin.
    pub leakage: f64,
    pub leakage_e_fold: f64,
    /// Zener voltage (V) at `breakdown_current` (A), its dynamic resistance there is `breakdown_slope / breakdown_current`.
    #[serde(deserialize_with = "super::maybe_infinite")]
    pub breakdown_voltage: f64,
    pub breakdown_current: f64,
    /// Voltage (V) that multiplies the breakdown current by e.
    pub breakdown_slope: f64,
    /// Temperature coefficient of the breakdown voltage (V/K).
    pub breakdown_coefficient: f64,
    pub energy_gap: f64,
    pub saturation_exponent: f64,
}

/// The equations at one junction temperature.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct AtTemperature {
    pub parameters: Diode,
    pub thermal_voltage: f64,
}

impl Diode {
    /// Applies the temperature laws at junction temperature `t_j` (K).
    pub fn at(&self, t_j: f64) -> AtTemperature {
        let ratio = t_j / REFERENCE_TEMPERATURE;
        let gap = self.energy_gap / thermal_voltage(t_j) * (ratio - 1.0);
        let growth = (self.saturation_exponent * libm::log(ratio) + gap) / self.emission_coefficient;
        AtTemperature {
            thermal_voltage: thermal_voltage(t_j),
            parameters: Diode {
                saturation_current: self.saturation_current * libm::exp(growth),
                leakage: self.leakage * libm::exp((t_j - REFERENCE_TEMPERATURE) / self.leakage_e_fold),
                breakdown_voltage: self.breakdown_voltage
                    + self.breakdown_coefficient * (t_j - REFERENCE_TEMPERATURE),
                ..*self
            },
        }
    }
}

impl AtTemperature {
    /// Current (A) from anode to cathode through the junction at `v` (V, series resistance outside) and its derivative.
    pub fn current(&self, v: f64) -> (f64, f64) {
        let p = &self.parameters;
        let n_vt = p.emission_coefficient * self.thermal_voltage;
        let grown = libm::exp(v / n_vt);
        let mut i = p.saturation_current * (grown - 1.0);
        let mut g = p.saturation_current * grown / n_vt;
        if p.leakage > 0.0 && v < 0.0 {
            let left = libm::exp(v / self.thermal_voltage);
            i -= p.leakage * (1.0 - left) * (1.0 - left);
            g += 2.0 * p.leakage * (1.0 - left) * left / self.thermal_voltage;
        }
        if p.breakdown_voltage.is_finite() {
            let broken = p.breakdown_current * libm::exp((-v - p.breakdown_voltage) / p.breakdown_slope);
            i -= broken;
            g += broken / p.breakdown_slope;
        }
        (i, g)
    }
}
