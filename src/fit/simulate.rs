//! Rows of a data sheet simulated in their own test conditions: one device, its terminal resistances, a given bias.
//!
//! Every result is confirmed: the currents at the junction voltages found are the wanted ones to [`CONFIRMED`], else there is
//! none. Unknowns are found by Newton's method on the logarithm of a current, which is nearly straight over a junction's
//! voltage, inside a bracket that every value narrows.

use crate::device::diode;
use crate::device::transistor::{AtTemperature, Currents, Transistor};

/// Junction voltages (V) between which solutions are looked for.
const LOWEST: f64 = -200.0;
const HIGHEST: f64 = 1.6;
/// Steps of a search at most, and the step (V) at which it ends.
const STEPS: usize = 120;
const LEAST_STEP: f64 = 1e-15;
/// Logarithm of a current that has vanished or turned round.
const NO_CURRENT: f64 = -1e3;
/// Relative difference between a current and the wanted one up to which a solution counts.
pub const CONFIRMED: f64 = 1e-9;

/// A transistor at a bias, as its terminals show it, with the voltages of its junctions inside the terminal resistances.
/// Signs of an NPN; volts and amperes.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct AtBias {
    pub v_be: f64,
    pub v_ce: f64,
    pub i_c: f64,
    pub i_b: f64,
    pub u_be: f64,
    pub u_bc: f64,
}

/// Where a rising function crosses zero between `low` and `high`; `f` gives its value and slope. Newton's method from
/// `start`; halving where a tangent leads out of the bracket or steps do not shrink. Without a crossing it ends at an end of
/// the bracket: callers confirm what they get.
fn crossing(mut low: f64, mut high: f64, start: f64, mut f: impl FnMut(f64) -> (f64, f64)) -> f64 {
    let mut at = start.clamp(low, high);
    let (mut last, mut before) = (high - low, high - low);
    for _ in 0..STEPS {
        let (value, slope) = f(at);
        if value == 0.0 {
            break;
        }
        if value < 0.0 {
            low = at;
        } else {
            high = at;
        }
        let tangent = at - value / slope;
        let shrinks = (tangent - at).abs() <= 0.5 * before;
        let next =
            if tangent > low && tangent < high && shrinks { tangent } else { low + 0.5 * (high - low) };
        (before, last) = (last, (next - at).abs());
        at = next;
        if last <= LEAST_STEP * at.abs().max(1.0) {
            break;
        }
    }
    at
}

/// Logarithm of a current over the wanted one, and its slope from that of the current.
fn log_ratio(current: f64, slope: f64, wanted: f64) -> (f64, f64) {
    if current > 0.0 { (libm::log(current / wanted), slope / current) } else { (NO_CURRENT, 0.0) }
}

fn is_confirmed(current: f64, wanted: f64) -> bool {
    wanted.is_finite() && (current - wanted).abs() <= CONFIRMED * wanted.abs()
}

/// Base-emitter junction voltage that carries the forward transport current `forward` (A), knee included.
fn emitter_start(at: &AtTemperature, forward: f64) -> f64 {
    let p = &at.parameters;
    let with_knee = forward * (1.0 + forward / p.knee_current_forward);
    p.emission_coefficient * at.thermal_voltage * libm::log1p(with_knee / p.saturation_current)
}

fn at_bias(p: &Transistor, now: &Currents, u_be: f64, u_bc: f64) -> AtBias {
    let emitter = (now.i_c + now.i_b) * p.emitter_resistance;
    AtBias {
        v_be: u_be + now.i_b * p.base_resistance + emitter,
        v_ce: u_be - u_bc + now.i_c * p.collector_resistance + emitter,
        i_c: now.i_c,
        i_b: now.i_b,
        u_be,
        u_bc,
    }
}

/// The device at collector current `i_c` (A) and terminal voltage `v_ce` (V), junction temperature `t_j` (K); `None` where it
/// does not carry that current between zero and the highest junction voltage.
pub fn active(transistor: &Transistor, t_j: f64, i_c: f64, v_ce: f64) -> Option<AtBias> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    let mut u_be = emitter_start(&at, i_c);
    let mut i_b = 0.0;
    // The emitter's drop needs the base current, which is small beside I_C: few rounds settle it, one without resistance.
    for _ in 0..STEPS {
        let u_ce = v_ce - i_c * p.collector_resistance - (i_c + i_b) * p.emitter_resistance;
        u_be = crossing(0.0, HIGHEST, u_be, |u_be| {
            let now = at.currents(u_be, u_be - u_ce);
            log_ratio(now.i_c, now.di_c_dv_be + now.di_c_dv_bc, i_c)
        });
        let now = at.currents(u_be, u_be - u_ce);
        let moved = (now.i_b - i_b) * p.emitter_resistance;
        i_b = now.i_b;
        if moved.abs() <= LEAST_STEP {
            return is_confirmed(now.i_c, i_c).then(|| at_bias(p, &now, u_be, u_be - u_ce));
        }
    }
    None
}

/// The device with collector current `i_c` and base current `i_b` (A) forced, at junction temperature `t_j` (K): saturated
/// where `i_b` is more than enough; `None` where it cannot carry `i_c` at any voltage.
///
/// The emitter junction follows the collector junction such that I_C is kept; along that line I_B rises with V_BC, and its
/// slope there is known from the four derivatives of the device. The start is the closed form of Ebers and Moll (1954).
pub fn forced(transistor: &Transistor, t_j: f64, i_c: f64, i_b: f64) -> Option<AtBias> {
    let at = transistor.at(t_j);
    let p = &at.parameters;
    let n_vt = p.emission_coefficient * at.thermal_voltage;
    let (forward, reverse) = (1.0 / p.gain_forward, 1.0 / p.gain_reverse);
    // I_C = F - R - R / beta_R and I_B = F / beta_F + R / beta_R, solved for R and F.
    let back = ((i_b - i_c * forward) / (reverse + (1.0 + reverse) * forward)).max(0.0);
    let mut u_be = emitter_start(&at, i_c + back * (1.0 + reverse));
    let start = n_vt * libm::log1p(back / p.saturation_current);
    let emitter = |u_bc: f64, near: f64| {
        crossing(0.0, HIGHEST, near, |u_be| {
            let now = at.currents(u_be, u_bc);
            log_ratio(now.i_c, now.di_c_dv_be, i_c)
        })
    };
    let u_bc = crossing(LOWEST, most(&at), start, |u_bc| {
        u_be = emitter(u_bc, u_be);
        let now = at.currents(u_be, u_bc);
        log_ratio(now.i_b, now.di_b_dv_bc - now.di_b_dv_be * now.di_c_dv_bc / now.di_c_dv_be, i_b)
    });
    let u_be = emitter(u_bc, u_be);
    let now = at.currents(u_be, u_bc);
    (is_confirmed(now.i_c, i_c) && is_confirmed(now.i_b, i_b)).then(|| at_bias(p, &now, u_be, u_bc))
}

/// The highest collector junction voltage worth trying: beyond it even the reverse current alone is absurd.
fn most(at: &AtTemperature) -> f64 {
    let n_vt = at.parameters.emission_coefficient * at.thermal_voltage;
    (n_vt * libm::log(1e3 / at.parameters.saturation_current)).min(HIGHEST)
}

/// The reverse gain (at the reference temperature) at which the device with `i_c` and `i_b` (A) forced shows `v_ce` (V).
/// Infinite where it shows no less at any reverse gain, zero where it shows less at any, `None` where no voltage of the
/// emitter junction carries the currents.
///
/// Closed but for the emitter junction: I_C + I_B does not contain the reverse gain, which gives V_BE; what of I_B the
/// emitter junction does not take, the collector junction takes.
pub fn reverse_gain_at(transistor: &Transistor, t_j: f64, i_c: f64, i_b: f64, v_ce: f64) -> Option<f64> {
    let over_temperature = transistor.at(t_j).parameters.gain_reverse / transistor.gain_reverse;
    let at = Transistor { gain_reverse: f64::INFINITY, ..*transistor }.at(t_j);
    let p = &at.parameters;
    let n_vt = p.emission_coefficient * at.thermal_voltage;
    let u_ce = v_ce - i_c * p.collector_resistance - (i_c + i_b) * p.emitter_resistance;
    let wanted = i_c + i_b;
    let u_be = crossing(0.0, HIGHEST, emitter_start(&at, wanted), |u_be| {
        let now = at.currents(u_be, u_be - u_ce);
        let slope = now.di_c_dv_be + now.di_c_dv_bc + now.di_b_dv_be + now.di_b_dv_bc;
        log_ratio(now.i_c + now.i_b, slope, wanted)
    });
    let now = at.currents(u_be, u_be - u_ce);
    if !is_confirmed(now.i_c + now.i_b, wanted) {
        return None;
    }
    let taken = i_b - now.i_b;
    let back = p.saturation_current * libm::expm1((u_be - u_ce) / n_vt);
    Some(if taken <= 0.0 { f64::INFINITY } else { back.max(0.0) / taken / over_temperature })
}

/// Terminal voltage (V, from anode to cathode) of a diode that carries `current` (A, negative in breakdown) at junction
/// temperature `t_j` (K), series resistance included; `None` where it cannot.
pub fn diode_voltage(diode: &diode::Diode, t_j: f64, current: f64) -> Option<f64> {
    let at = diode.at(t_j);
    let p = &at.parameters;
    let forward = current > 0.0;
    let (sign, start, end) = if forward {
        (1.0, p.emission_coefficient * at.thermal_voltage * libm::log1p(current / p.saturation_current), 10.0)
    } else {
        let end = if p.breakdown_voltage.is_finite() { 2.0 * p.breakdown_voltage + 10.0 } else { 2e3 };
        (-1.0, p.breakdown_voltage, end)
    };
    let u = crossing(0.0, end, start, |u| {
        let (i, slope) = at.current(sign * u);
        log_ratio(sign * i, slope, current.abs())
    });
    let (i, _) = at.current(sign * u);
    is_confirmed(i, current).then_some(sign * u + current * p.series_resistance)
}
