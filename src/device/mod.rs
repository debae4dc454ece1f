//! Transistor, diode and Zener equations: currents and their derivatives over junction voltages and temperature.
//!
//! All equations are written for an NPN transistor; the solver turns signs for PNP. SI units, temperatures in kelvin.

pub mod diode;
pub mod transistor;

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
