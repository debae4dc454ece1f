//! Rows of a data sheet simulated in their own test conditions: one device, its terminal resistances, a given bias.

use crate::device::transistor::{AtTemperature, Transistor};

/// Junction voltages (V) between which solutions are looked for.
const LOWEST: f64 = -200.0;
const HIGHEST: f64 = 1.6;
/// Halvings: 200 V over 2^64 is below any resolution.
const HALVINGS: usize = 64;

/// A device at the bias of a row, as its terminals show it.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct AtBias {
    pub v_be: f64,
    pub v_ce: f64,
    pub i_b: f64,
}

/// `f` rises from negative to positive between `low` and `high`: where it crosses zero.
fn crossing(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> Option<f64> {
    if !(f(high) >= 0.0) {
        return None;
    }
    for _ in 0..HALVINGS {
        let middle = (low + high) / 2.0;
        if f(middle) < 0.0 {
            low = middle;
        } else {
            high = middle;
        }
    }
    Some((low + high) / 2.0)
}

/// The device in the active region at collector current `i_c` and terminal voltage `v_ce`.
pub(super) fn active(transistor: &Transistor, t_j: f64, i_c: f64, v_ce: f64) -> Option<AtBias> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    let inside = |v_be: f64| {
        // The emitter's drop needs the base current, which is small beside I_C: two passes settle it.
        let mut i_b = 0.0;
        let mut currents = at.currents(v_be, v_be - v_ce);
        for _ in 0..3 {
            let intrinsic = v_ce - i_c * p.collector_resistance - (i_c + i_b) * p.emitter_resistance;
            currents = at.currents(v_be, v_be - intrinsic);
            i_b = currents.i_b;
        }
        currents
    };
    let v_be = crossing(0.0, HIGHEST, |v_be| inside(v_be).i_c - i_c)?;
    let i_b = inside(v_be).i_b;
    Some(AtBias { v_be: v_be + i_b * p.base_resistance + (i_c + i_b) * p.emitter_resistance, v_ce, i_b })
}

/// The device with collector current `i_c` and base current `i_b` forced: saturated where `i_b` is more than enough.
pub(super) fn forced(transistor: &Transistor, t_j: f64, i_c: f64, i_b: f64) -> Option<AtBias> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    // For each collector junction voltage the emitter junction that carries i_c; the base current then rises with it.
    let v_be_of = |v_bc: f64| crossing(0.0, HIGHEST, |v_be| at.currents(v_be, v_bc).i_c - i_c);
    let surplus = |v_bc: f64| v_be_of(v_bc).map_or(f64::NAN, |v_be| at.currents(v_be, v_bc).i_b - i_b);
    let v_bc = crossing(LOWEST, most(&at), surplus)?;
    let v_be = v_be_of(v_bc)?;
    Some(AtBias {
        v_be: v_be + i_b * p.base_resistance + (i_c + i_b) * p.emitter_resistance,
        v_ce: v_be - v_bc + i_c * p.collector_resistance + (i_c + i_b) * p.emitter_resistance,
        i_b,
    })
}

/// The highest collector junction voltage worth trying: beyond it even the reverse current alone is absurd.
fn most(at: &AtTemperature) -> f64 {
    let v_t = at.parameters.emission_coefficient * at.thermal_voltage;
    (v_t * libm::log(1e3 / at.parameters.saturation_current)).min(HIGHEST)
}
