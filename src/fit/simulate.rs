//! Rows of a data sheet simulated in their own test conditions: one device, its terminal resistances, a given bias.

use crate::device::transistor::{AtTemperature, Transistor};

/// Junction voltages (V) between which solutions are looked for.
const LOWEST: f64 = -200.0;
const HIGHEST: f64 = 1.6;
/// Steps of a search at most, and the width (V) at which it ends.
const STEPS: usize = 200;
const WIDTH: f64 = 1e-14;

/// A device at the bias of a row, as its terminals show it.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct AtBias {
    pub v_be: f64,
    pub v_ce: f64,
    pub i_b: f64,
}

/// `f` rises from negative to positive between `low` and `high`: where it crosses zero. Regula falsi in the Illinois form
/// (Dowell and Jarratt 1971), halving where that is slow.
fn crossing(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> Option<f64> {
    let (mut at_low, mut at_high) = (f(low), f(high));
    if at_high.is_nan() || at_high < 0.0 {
        return None;
    }
    if at_low >= 0.0 {
        return Some(low);
    }
    for step in 0..STEPS {
        if high - low <= WIDTH * high.abs().max(1.0) {
            break;
        }
        let straight = high - at_high * (high - low) / (at_high - at_low);
        let halve = step % 3 == 2 || !(straight > low && straight < high);
        let middle = if halve { (low + high) / 2.0 } else { straight };
        let there = f(middle);
        if there == 0.0 {
            return Some(middle);
        }
        if there < 0.0 {
            (low, at_low) = (middle, there);
            at_high /= 2.0;
        } else {
            (high, at_high) = (middle, there);
            at_low /= 2.0;
        }
    }
    Some((low + high) / 2.0)
}

/// Logarithm of a current over the wanted one: nearly a straight line over the junction voltage.
fn log_ratio(current: f64, wanted: f64) -> f64 {
    if current > 0.0 { libm::log(current / wanted).max(-1e3) } else { -1e3 }
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
    let v_be = crossing(0.0, HIGHEST, |v_be| log_ratio(inside(v_be).i_c, i_c))?;
    let i_b = inside(v_be).i_b;
    Some(AtBias { v_be: v_be + i_b * p.base_resistance + (i_c + i_b) * p.emitter_resistance, v_ce, i_b })
}

/// The device with collector current `i_c` and base current `i_b` forced: saturated where `i_b` is more than enough.
pub(super) fn forced(transistor: &Transistor, t_j: f64, i_c: f64, i_b: f64) -> Option<AtBias> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    // For each collector junction voltage the emitter junction that carries i_c; the base current then rises with it.
    let v_be_of = |v_bc: f64| crossing(0.0, HIGHEST, |v_be| log_ratio(at.currents(v_be, v_bc).i_c, i_c));
    let surplus =
        |v_bc: f64| v_be_of(v_bc).map_or(f64::NAN, |v_be| log_ratio(at.currents(v_be, v_bc).i_b, i_b));
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
