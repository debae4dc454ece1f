//! Region of a transistor by its junctions; forced gain, active-region gain, overdrive; distances to each region's edge.
//!
//! - The **emitter junction conducts** from the cut-in voltage on: 0.5 V at 25 °C and 2 mV less per kelvin (silicon;
//!   Millman and Halkias, Integrated Electronics, 1972, from memory). The **collector junction**, while the emitter
//!   junction is off, likewise.
//! - While the emitter junction conducts, the collector junction counts as conducting by what it does: when it takes so
//!   much of the base current that the forced gain I_C / I_B lies more than a hundredth below the active-region gain at
//!   this collector current ([`EDGE_OF_SATURATION`]). With an intrinsic V_CB of zero or more (the edge of
//!   quasi-saturation) this is never so; it begins about 0.4 to 0.5 V of forward bias beyond, where textbooks put
//!   V_CE(sat) near 0.2 V.
//!
//! | emitter junction | collector junction | region |
//! |---|---|---|
//! | off | off | off |
//! | conducts | off | active |
//! | conducts | conducts | saturated |
//! | off | conducts | reverse |
//!
//! **Active-region gain** h_FE is I_C / I_B of the same device at the same junction temperature and collector current
//! with the intrinsic collector-base voltage at zero. **Overdrive** is h_FE over forced gain.

use super::{Branch, ElementPoint};
use crate::device::{REFERENCE_TEMPERATURE, transistor};

/// Overdrive beyond which a conducting transistor counts as saturated.
pub const EDGE_OF_SATURATION: f64 = 1.01;

/// Bound for overdrives, which grow without limit as the collector current goes to zero.
const LARGEST_OVERDRIVE: f64 = 1e6;

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Region {
    Off,
    Active,
    Saturated,
    Reverse,
}

impl Region {
    /// As criteria and reports write it.
    pub fn text(self) -> &'static str {
        match self {
            Region::Off => "off",
            Region::Active => "active",
            Region::Saturated => "saturated",
            Region::Reverse => "reverse",
        }
    }
}

/// Forward voltage (V) from which a silicon junction counts as conducting, at junction temperature `t_j` (K).
pub fn cut_in_voltage(t_j: f64) -> f64 {
    (0.5 - 2e-3 * (t_j - REFERENCE_TEMPERATURE)).max(0.1)
}

/// A transistor's bias with the signs of an NPN.
struct Bias {
    at: transistor::AtTemperature,
    v_ce: f64,
    v_be: f64,
    i_c: f64,
    i_b: f64,
    /// Voltages of the junctions inside terminal resistances and probe voltages.
    u_be: f64,
    u_bc: f64,
    probe_v_ce: f64,
    cut_in: f64,
}

impl Bias {
    fn of(branch: &Branch, point: &ElementPoint) -> Option<Bias> {
        let Branch::Transistor { pnp, parameters, probe, .. } = branch else { return None };
        let sign = if *pnp { -1.0 } else { 1.0 };
        let at = parameters.at(point.t_j);
        let [v_ce, v_be, i_c, i_b] = [point.v, point.v_be, point.i, point.i_b].map(|x| sign * x);
        let p = &at.parameters;
        let u_be = v_be - probe.v_be - p.base_resistance * i_b - p.emitter_resistance * (i_b + i_c);
        let u_ce = v_ce - probe.v_ce - p.collector_resistance * i_c - p.emitter_resistance * (i_b + i_c);
        let all = [v_ce, v_be, i_c, i_b, u_be, u_ce];
        all.iter().all(|x| x.is_finite()).then_some(Bias {
            at,
            v_ce,
            v_be,
            i_c,
            i_b,
            u_be,
            u_bc: u_be - u_ce,
            probe_v_ce: probe.v_ce,
            cut_in: cut_in_voltage(point.t_j),
        })
    }

    fn emitter_on(&self) -> bool {
        self.v_be >= self.cut_in
    }

    /// h_FE at this collector current and the base-emitter voltage there.
    fn active_gain(&self) -> Option<f64> {
        gain_at(&self.at, self.i_c, 0.0, self.u_be).map(|(gain, _)| gain)
    }

    /// Bounded overdrive; what it means where a current has vanished or turned round.
    fn overdrive(&self) -> Option<f64> {
        if self.i_b <= 0.0 {
            return Some(0.0);
        }
        if self.i_c <= 0.0 {
            return Some(LARGEST_OVERDRIVE);
        }
        Some((self.active_gain()? * self.i_b / self.i_c).min(LARGEST_OVERDRIVE))
    }

    fn collector_on(&self) -> Option<bool> {
        if self.emitter_on() {
            Some(self.u_bc > 0.0 && self.overdrive()? > EDGE_OF_SATURATION)
        } else {
            Some(self.v_be - self.v_ce >= self.cut_in)
        }
    }

    fn region(&self) -> Option<Region> {
        Some(match (self.emitter_on(), self.collector_on()?) {
            (false, false) => Region::Off,
            (true, false) => Region::Active,
            (true, true) => Region::Saturated,
            (false, true) => Region::Reverse,
        })
    }

    /// V_CE at the terminals (V) where this collector current is at the edge of saturation.
    fn edge_voltage(&self) -> Option<f64> {
        let i_c = self.i_c.max(1e-3 * self.i_b);
        let (gain, u_be) = gain_at(&self.at, i_c, 0.0, self.u_be)?;
        // ln(overdrive - 1) rises steadily with the bias of the collector junction: secant steps between bounds.
        let target = libm::log(EDGE_OF_SATURATION - 1.0);
        let (mut low, mut high) = (0.0, u_be + 0.2);
        let (mut u_bc, mut near) = ((u_be - 0.15).max(0.5 * u_be), u_be);
        let mut last: Option<(f64, f64)> = None;
        for _ in 0..60 {
            let (forced, at_edge) = gain_at(&self.at, i_c, u_bc, near)?;
            near = at_edge;
            let off = libm::log((gain / forced - 1.0).max(1e-12)) - target;
            if off.abs() < 1e-7 || high - low < 1e-12 {
                let p = &self.at.parameters;
                let i_b = i_c / forced;
                let drops = p.collector_resistance * i_c + p.emitter_resistance * (i_c + i_b);
                return Some(near - u_bc + drops + self.probe_v_ce);
            }
            if off > 0.0 {
                high = u_bc;
            } else {
                low = u_bc;
            }
            let secant = last.map(|(u, o)| u_bc - off * (u_bc - u) / (off - o));
            last = Some((u_bc, off));
            u_bc = match secant {
                Some(u) if u > low && u < high => u,
                _ => 0.5 * (low + high),
            };
        }
        None
    }

    fn margin(&self, region: Region) -> Option<f64> {
        let emitter = self.v_be - self.cut_in;
        let collector = self.v_be - self.v_ce - self.cut_in;
        Some(match region {
            Region::Off => -emitter.max(collector),
            Region::Reverse => collector.min(-emitter),
            Region::Saturated if emitter < 0.0 => {
                emitter.min(self.overdrive().map_or(0.0, |n| n.min(1.0) - EDGE_OF_SATURATION))
            }
            Region::Saturated if self.u_bc <= 0.0 => self.overdrive()?.min(1.0) - EDGE_OF_SATURATION,
            Region::Saturated => self.overdrive()? - EDGE_OF_SATURATION,
            Region::Active if self.i_c.max(self.i_b) <= 0.0 => emitter,
            Region::Active => match self.edge_voltage() {
                Some(edge) => emitter.min(self.v_ce - edge),
                // Too little current to have an edge.
                None => (emitter < 0.0).then_some(emitter)?,
            },
        })
    }
}

/// Gain I_C / I_B and base-emitter voltage of the intrinsic transistor at collector current `i_c` (A, above zero) and
/// `u_bc` (V), by Newton's method on the logarithm of the current, which is nearly straight.
fn gain_at(at: &transistor::AtTemperature, i_c: f64, u_bc: f64, near: f64) -> Option<(f64, f64)> {
    let fold = at.parameters.emission_coefficient * at.thermal_voltage;
    if i_c.is_nan() || i_c <= 0.0 || at.parameters.saturation_current <= 0.0 {
        return None;
    }
    let mut u_be = near.clamp(0.0, 2.0);
    for _ in 0..100 {
        let now = at.currents(u_be, u_bc);
        if now.i_c <= 0.0 {
            u_be += 4.0 * fold;
            continue;
        }
        let step = -libm::log(now.i_c / i_c) * now.i_c / now.di_c_dv_be;
        if !step.is_finite() {
            return None;
        }
        if step.abs() < 1e-10 {
            let gain = now.i_c / now.i_b;
            return (now.i_b > 0.0 && gain.is_finite()).then_some((gain, u_be));
        }
        u_be += step.clamp(-8.0 * fold, 8.0 * fold);
    }
    None
}

/// Region of a transistor; `None` for any other element.
pub fn region(branch: &Branch, point: &ElementPoint) -> Option<Region> {
    Bias::of(branch, point)?.region()
}

/// I_C / I_B; `None` for another element, or where one of the currents does not flow in its forward direction.
pub fn forced_gain(branch: &Branch, point: &ElementPoint) -> Option<f64> {
    let bias = Bias::of(branch, point)?;
    (bias.i_c > 0.0 && bias.i_b > 0.0).then_some(bias.i_c / bias.i_b)
}

/// Active-region gain h_FE at this collector current and junction temperature, intrinsic V_CB = 0; `None` for another
/// element or without forward collector current.
pub fn active_gain(branch: &Branch, point: &ElementPoint) -> Option<f64> {
    Bias::of(branch, point)?.active_gain()
}

/// Active-region gain over forced gain, at most 1e6 (also where no collector current is left); 0 without forward base
/// current. `None` for another element.
pub fn overdrive(branch: &Branch, point: &ElementPoint) -> Option<f64> {
    Bias::of(branch, point)?.overdrive()
}

/// How far a transistor is inside a region (positive) or outside (negative), continuous across the edge:
///
/// - saturated: overdrive less [`EDGE_OF_SATURATION`]; while the emitter junction is off, no more than V_BE less cut-in
///   voltage (V);
/// - active: the smaller of V_BE less cut-in voltage, and V_CE less the V_CE at which this collector current is at the
///   edge of saturation (V);
/// - off: cut-in voltage less the greater of V_BE and V_BC (V);
/// - reverse: the smaller of V_BC less cut-in voltage, and cut-in voltage less V_BE (V).
pub fn margin(region: Region, branch: &Branch, point: &ElementPoint) -> Option<f64> {
    Bias::of(branch, point)?.margin(region)
}
