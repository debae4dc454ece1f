//! How near the heat of each transistor comes to run-away.

use serde_json::{Value, json};

use crate::quantity::{Dimension, Kind, Unit, preferred_unit, text};
use crate::study::{Findings, HeatFinding};

use super::super::cell;
use super::rich;

const DIGITS: u8 = 3;

pub(super) fn heat(findings: &Findings) -> Value {
    let all = &findings.heat;
    let of = |kind: Kind, pick: fn(&HeatFinding) -> Option<f64>| {
        let values: Vec<f64> = all.iter().filter_map(pick).collect();
        let unit = if kind == Kind::TEMPERATURE { Unit::celsius() } else { preferred_unit(&values, kind) };
        let numbers =
            all.iter().map(|line| pick(line).map(|value| cell::number(value, &unit, DIGITS))).collect();
        cell::column(numbers)
    };
    let ambient = of(Kind::TEMPERATURE, |line| Some(line.ambient));
    let r_th = of(Kind::of(Dimension::KELVIN_PER_WATT), |line| Some(line.r_th));
    let power = of(Kind::of(Dimension::WATT), |line| Some(line.equilibrium?.power));
    let t_j = of(Kind::TEMPERATURE, |line| Some(line.equilibrium?.t_j));
    let runaway = of(Kind::TEMPERATURE, |line| line.runaway_from);
    let row = |(i, line): (usize, &HeatFinding)| {
        json!({
            "designator": line.designator,
            "condition": line.condition,
            "ambient": ambient[i], "r_th": r_th[i], "power": power[i], "t_j": t_j[i],
            "gain": line.equilibrium.map(|found| format!("{:.3}", found.gain).replace('-', "−")),
            "runaway": runaway[i],
            "looked": text(line.looked_at[1], &Unit::celsius(), DIGITS),
            "more": more(line).map(|words| rich(&words)),
        })
    };
    json!(all.iter().enumerate().map(row).collect::<Vec<_>>())
}

/// What there is to say beyond the numbers.
fn more(line: &HeatFinding) -> Option<String> {
    let upper = line.upper.map(|t_j| {
        let t_j = text(t_j, &Unit::celsius(), DIGITS);
        format!("heated from outside beyond {t_j} it would run away")
    });
    let ballast = line.ballast.map(|ohms| {
        let unit = preferred_unit(&[ohms], Kind::of(Dimension::OHM));
        format!("{} in series with the emitter would bring K down to 0.5", text(ohms, &unit, DIGITS))
    });
    let told: Vec<String> = upper.into_iter().chain(ballast).collect();
    (!told.is_empty()).then(|| format!("{}: {}", line.designator, told.join("; ")))
}
