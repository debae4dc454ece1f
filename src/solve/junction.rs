//! Devices at their junction temperature, and how far a Newton step may move a junction voltage.

use super::{Branch, Probe};
use crate::device::{diode, transistor};

/// Junction current (A) at which a junction counts as entered by [`Limit`].
const ENTRY_CURRENT: f64 = 1e-6;

/// How many folds below its entry a junction still counts as conducting for [`Limit::carried`].
const NEARLY: f64 = 5.0;

/// A device at its junction temperature.
#[derive(Clone, Copy, Debug)]
pub(super) struct Device {
    /// -1 for PNP.
    pub sign: f64,
    pub law: Law,
    /// In series with collector, base, emitter; or with a diode (first).
    pub resistances: [f64; 3],
    pub probe: Probe,
    pub limits: [Limit; 2],
}

#[derive(Clone, Copy, Debug)]
#[expect(clippy::large_enum_variant, reason = "a box would cost an allocation an element and step")]
pub(super) enum Law {
    /// In state open: no current.
    Open,
    Transistor(transistor::AtTemperature),
    Diode(diode::AtTemperature),
}

/// Bounds a Newton step of a junction voltage.
///
/// A tangent to an exponential promises far too much voltage when it is followed upwards: at `v` with current i and slope
/// i / n, a step d asks for the current i (1 + d / n), and the voltage that carries this current is v + n ln(1 + d / n).
/// That is where the step goes. A junction that does not conduct yet has no useful tangent: it goes to its `entry`, the
/// voltage of a small current, and from there on as before. (Our own derivation.)
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Limit {
    /// Voltage (V) of e-fold current, forward; entry voltage forward.
    pub fold: f64,
    pub entry: f64,
    /// The same for breakdown, counted in reverse voltage; infinite entry without breakdown.
    pub breakdown_fold: f64,
    pub breakdown_entry: f64,
}

impl Limit {
    const NONE: Limit =
        Limit { fold: 1.0, entry: f64::INFINITY, breakdown_fold: 1.0, breakdown_entry: f64::INFINITY };

    fn junction(saturation_current: f64, fold: f64) -> Limit {
        let entry = if saturation_current > 0.0 {
            (fold * libm::log(ENTRY_CURRENT / saturation_current)).max(0.0)
        } else {
            f64::INFINITY
        };
        Limit { fold, entry, ..Limit::NONE }
    }

    /// The voltage of a small forward current and that of e-fold current.
    pub fn scale(&self) -> [f64; 2] {
        [self.entry, self.fold]
    }

    /// The voltage at which a forward junction carries the current that it carried at `voltage` when its scale was `before`;
    /// a junction that does not conduct keeps its voltage.
    pub fn carried(&self, voltage: f64, before: [f64; 2]) -> f64 {
        let [entry, fold] = before;
        let conducts = voltage > entry - NEARLY * fold && self.entry.is_finite();
        if conducts { self.entry + (voltage - entry) * (self.fold / fold) } else { voltage }
    }

    /// The voltage to go to, where Newton's method would go from `from` to `to`.
    pub fn apply(&self, from: f64, to: f64) -> f64 {
        if to > self.entry || from > self.entry {
            one_way(from, to, self.fold, self.entry)
        } else if -to > self.breakdown_entry || -from > self.breakdown_entry {
            -one_way(-from, -to, self.breakdown_fold, self.breakdown_entry)
        } else {
            to
        }
    }
}

fn one_way(from: f64, to: f64, fold: f64, entry: f64) -> f64 {
    let step = to - from;
    if step.abs() <= 2.0 * fold {
        to
    } else if step < 0.0 {
        // Downwards the tangent is safe to the point where the junction stops conducting, not beyond.
        to.max(entry - 2.0 * fold)
    } else if from < entry {
        to.min(entry)
    } else {
        from + fold * libm::log(1.0 + step / fold)
    }
}

impl Device {
    /// The device of a branch at junction temperature `t_j` (K).
    pub fn prepare(branch: &Branch, t_j: f64) -> Device {
        let open = Device {
            sign: 1.0,
            law: Law::Open,
            resistances: [0.0; 3],
            probe: Probe::default(),
            limits: [Limit::NONE; 2],
        };
        match branch {
            Branch::Transistor { pnp, parameters, probe, .. } => {
                let at = parameters.at(t_j);
                let p = &at.parameters;
                let fold = p.emission_coefficient * at.thermal_voltage;
                let limit = Limit::junction(p.saturation_current, fold);
                Device {
                    sign: if *pnp { -1.0 } else { 1.0 },
                    law: Law::Transistor(at),
                    resistances: [p.collector_resistance, p.base_resistance, p.emitter_resistance],
                    probe: *probe,
                    limits: [limit; 2],
                }
            }
            Branch::Diode { parameters, .. } => {
                let at = parameters.at(t_j);
                let p = &at.parameters;
                let fold = p.emission_coefficient * at.thermal_voltage;
                let mut limit = Limit::junction(p.saturation_current, fold);
                if p.breakdown_voltage.is_finite() {
                    limit.breakdown_fold = p.breakdown_slope;
                    let decay = p.breakdown_slope * libm::log(p.breakdown_current / ENTRY_CURRENT).max(0.0);
                    limit.breakdown_entry = (p.breakdown_voltage - decay).max(0.0);
                }
                Device {
                    law: Law::Diode(at),
                    resistances: [p.series_resistance, 0.0, 0.0],
                    limits: [limit; 2],
                    ..open
                }
            }
            _ => open,
        }
    }
}
