//! Transistor, diode and Zener equations: currents and their derivatives over junction voltages and temperature.
//!
//! All equations are written for an NPN transistor; the solver turns signs for PNP. SI units, temperatures in kelvin.

pub mod curve;
pub mod diode;
pub mod transistor;

use crate::numeric;

/// Elementary charge in coulomb (exact; CODATA 2022, SI 2019).
pub const ELEMENTARY_CHARGE: f64 = 1.602_176_634e-19;
/// Boltzmann constant in joule per kelvin (exact; CODATA 2022, SI 2019).
pub const BOLTZMANN: f64 = 1.380_649e-23;
/// The temperature at which model parameters are stated: 25 °C in kelvin.
pub const REFERENCE_TEMPERATURE: f64 = 298.15;

/// Thermal voltage kT/q in volt.
pub fn thermal_voltage(temperature: f64) -> f64 {
    BOLTZMANN * temperature / ELEMENTARY_CHARGE
}

/// Reads a parameter that is infinite where its effect is switched off; JSON has no infinity and writes `null`.
fn maybe_infinite<'de, D: serde::Deserializer<'de>>(deserializer: D) -> Result<f64, D::Error> {
    use serde::Deserialize;
    Ok(Option::<f64>::deserialize(deserializer)?.unwrap_or(f64::INFINITY))
}

/// Exponent beyond which a junction's exponential goes on along its tangent.
///
/// Silicon junctions carry their rated currents below 50; e^120 times any saturation current is beyond any part, and a
/// solution there is refused by the solver. The tangent keeps currents and slopes finite at any voltage.
const LAST_EXPONENT: f64 = 120.0;

/// e^x and its derivative, along the tangent beyond [`LAST_EXPONENT`]: never infinite.
fn exponential(x: f64) -> (f64, f64) {
    if x > LAST_EXPONENT {
        let last = numeric::exp(LAST_EXPONENT);
        (last * (1.0 + (x - LAST_EXPONENT)), last)
    } else {
        let grown = numeric::exp(x);
        (grown, grown)
    }
}

/// [`exponential`] less one, accurate near zero.
fn growth(x: f64) -> (f64, f64) {
    if x.abs() < 1e-3 {
        // The next term of the series is below 2e-18 of the first.
        let grown = x * (1.0 + x * (0.5 + x * (1.0 / 6.0 + x * (1.0 / 24.0 + x * (1.0 / 120.0)))));
        (grown, 1.0 + grown)
    } else {
        let (grown, slope) = exponential(x);
        (grown - 1.0, slope)
    }
}

/// A leakage element at forward voltage `v` (V): `-current (1 - e^(v / V_T))^2` under reverse bias and nothing under
/// forward bias, with its derivative. The square makes value and slope vanish together at zero bias.
fn leakage(current: f64, v: f64, thermal_voltage: f64) -> (f64, f64) {
    if current == 0.0 || v >= 0.0 {
        return (0.0, 0.0);
    }
    let (fallen, left) = growth(v / thermal_voltage);
    (-current * fallen * fallen, -2.0 * current * fallen * left / thermal_voltage)
}

/// Factor of a saturation current at `t_j` (K) over that at the reference temperature, as a logarithm:
/// `m ln(T / T_0) + E_g q / k (1 / T_0 - 1 / T)` (energy gap in eV, exponent m).
fn saturation_growth(energy_gap: f64, exponent: f64, t_j: f64) -> f64 {
    let ratio = t_j / REFERENCE_TEMPERATURE;
    exponent * libm::log(ratio) + energy_gap / thermal_voltage(t_j) * (ratio - 1.0)
}
