//! Diode and Zener: exponential junction (Shockley 1949) with series resistance; breakdown as an exponential of its own.

use serde::{Deserialize, Serialize};

use super::{REFERENCE_TEMPERATURE, exponential, growth, leakage, saturation_growth, thermal_voltage};
use crate::numeric;

/// Breakdown voltage (V) below which no temperature takes a junction.
const LEAST_BREAKDOWN: f64 = 0.1;

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
    /// e^(-V_Z / slope): the breakdown exponential at zero bias.
    broken_at_zero: f64,
}

impl Diode {
    /// Applies the temperature laws at junction temperature `t_j` (K).
    pub fn at(&self, t_j: f64) -> AtTemperature {
        let grown = saturation_growth(self.energy_gap, self.saturation_exponent, t_j);
        let rise = t_j - REFERENCE_TEMPERATURE;
        let breakdown_voltage =
            (self.breakdown_voltage + self.breakdown_coefficient * rise).max(LEAST_BREAKDOWN);
        // At zero bias the exponential has not quite vanished; what is left of it there is taken away everywhere.
        let (broken_at_zero, _) = exponential(-breakdown_voltage / self.breakdown_slope);
        AtTemperature {
            thermal_voltage: thermal_voltage(t_j),
            broken_at_zero,
            parameters: Diode {
                saturation_current: self.saturation_current * numeric::exp(grown / self.emission_coefficient),
                leakage: self.leakage * numeric::exp(rise / self.leakage_e_fold),
                breakdown_voltage,
                ..*self
            },
        }
    }
}

impl AtTemperature {
    /// Current (A) from anode to cathode through the junction at `v` (V, series resistance outside) and its derivative.
    ///
    /// Zero at zero bias, of the sign of `v` elsewhere, its derivative nowhere negative; finite at any finite `v`.
    pub fn current(&self, v: f64) -> (f64, f64) {
        let p = &self.parameters;
        let n_vt = p.emission_coefficient * self.thermal_voltage;
        let (grown, slope) = growth(v / n_vt);
        let mut i = p.saturation_current * grown;
        let mut g = p.saturation_current * slope / n_vt;
        let (leaked, d_leaked) = leakage(p.leakage, v, self.thermal_voltage);
        i += leaked;
        g += d_leaked;
        if p.breakdown_voltage.is_finite() {
            let scale = p.breakdown_current / (1.0 - self.broken_at_zero);
            let (broken, slope) = exponential((-v - p.breakdown_voltage) / p.breakdown_slope);
            i -= scale * (broken - self.broken_at_zero);
            g += scale * slope / p.breakdown_slope;
        }
        (i, g)
    }
}
