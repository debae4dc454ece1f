//! The rules: threshold, reason with numbers, usual measure.

use crate::circuit::ElementKind;
use crate::quantity::{Dimension, Kind, preferred_unit, text};

use super::clamp::{self, Unclamped};
use super::{Caution, ElementFact, Facts, HeatFact, Worst};

/// Uncoated metal burns at a touch of one second from 65 °C on (ISO 13732-1, from memory).
const TOUCH: f64 = 338.15;
/// D.c. voltage up to which no protection against touch is asked for in dry places (IEC 60364-4-41, IEC 62368-1).
const TOUCH_VOLTAGE: f64 = 60.0;
/// Limit of extra-low voltage for ripple-free d.c. (IEC 61140, IEC 60364-4-41).
const EXTRA_LOW: f64 = 120.0;
/// Energy that is hazardous at 2 V and more (IEC 60950-1, from memory).
const HAZARDOUS_ENERGY: f64 = 20.0;
const HAZARDOUS_ENERGY_VOLTAGE: f64 = 2.0;
/// Charge that is hazardous to touch above the touch voltage (IEC 61010-1, from memory).
const HAZARDOUS_CHARGE: f64 = 45e-6;
/// Loop gain of a transistor's heat above which less than a factor of two is left, and the ambient temperature (K) above the
/// highest one at which run-away should begin at the earliest (common practice).
const HEAT_GAIN: f64 = 0.5;
const HEAT_ROOM: f64 = 20.0;
/// Reverse voltage that base-emitter junctions stand where the sheet is silent: breakdown starts at 5 V to 6 V.
const USUAL_V_EBO: f64 = 5.0;

const DEFER: &str = "Local codes and licensed practice decide.";

/// The cautions of a note, in the order of the hazards' weight.
pub fn cautions(facts: &Facts) -> Vec<Caution> {
    let mut out = Vec::new();
    out.extend(shock(facts));
    out.extend(stored_energy(facts));
    out.extend(fire(facts));
    out.extend(burn(facts));
    let highest = facts.highest.as_ref().map(|between| between.voltage.value);
    out.extend(clamp::unclamped(&facts.elements, highest).iter().map(inductive_kick));
    out.extend(runaway(facts));
    out.extend(base_emitter_reverse(facts));
    out.extend(gain_dependence(facts));
    out.extend(missing_data(facts));
    out
}

fn caution(hazard: &str, title: &str, why: String, measure: &str, basis: &str) -> Caution {
    Caution {
        hazard: hazard.to_owned(),
        title: title.to_owned(),
        why,
        measure: format!("{measure} {DEFER}"),
        basis: basis.to_owned(),
    }
}

fn shown(value: f64, kind: Kind) -> String {
    text(value, &preferred_unit(&[value], kind), 3)
}

const VOLT: Kind = Kind::of(Dimension::VOLT);

/// `Q1 reaches 88.2 °C (lamp on)` for each element that a rule picks, hottest or highest first.
fn list(
    facts: &Facts,
    pick: impl Fn(&ElementFact) -> Option<&Worst>,
    words: impl Fn(&ElementFact, &Worst) -> String,
) -> Option<String> {
    let mut picked: Vec<(&ElementFact, &Worst)> =
        facts.elements.iter().filter_map(|element| Some((element, pick(element)?))).collect();
    picked.sort_by(|a, b| b.1.value.total_cmp(&a.1.value));
    let words: Vec<String> = picked
        .iter()
        .map(|(element, worst)| format!("{} ({})", words(element, worst), worst.condition))
        .collect();
    (!words.is_empty()).then(|| words.join("; "))
}

fn burn(facts: &Facts) -> Option<Caution> {
    let hot = list(
        facts,
        |element| element.temperature.as_ref().filter(|worst| worst.value > TOUCH),
        |element, worst| format!("{} reaches {}", element.designator, shown(worst.value, Kind::TEMPERATURE)),
    )?;
    Some(caution(
        "burn",
        "Hot surface",
        format!("At its worst corner {hot}. Metal burns the skin at a touch of one second from 65 °C on."),
        "Keep fingers away until it has cooled, guard it or mark it, give it room or a heat sink.",
        "ISO 13732-1: burn threshold of uncoated metal, contact of 1 s (quoted from memory)",
    ))
}

fn shock(facts: &Facts) -> Option<Caution> {
    let between = facts.highest.as_ref().filter(|between| between.voltage.value > TOUCH_VOLTAGE)?;
    let Worst { value, condition } = &between.voltage;
    let [one, other] = &between.nodes;
    let limits = if *value > EXTRA_LOW {
        "That is above extra-low voltage (120 V ripple-free direct voltage, 50 V alternating)."
    } else {
        "That is above what may be touched in dry places (60 V direct voltage, 25 V alternating; 30 V and 12 V where wet)."
    };
    Some(caution(
        "shock",
        "Dangerous voltage",
        format!("Up to {} stand between {one} and {other} ({condition}). {limits}", shown(*value, VOLT)),
        "Switch off, discharge and check before touching; cover live parts; keep one hand away.",
        "IEC 61140 and IEC 60364-4-41: limits of extra-low voltage (quoted from memory)",
    ))
}

fn stored_energy(facts: &Facts) -> Option<Caution> {
    let stores = list(
        facts,
        |element| element.energy.as_ref().filter(|energy| is_hazardous(element, energy.value)),
        |element, energy| {
            let joule = shown(energy.value, Kind::of(Dimension::JOULE));
            match &element.voltage {
                Some(voltage) if element.kind == ElementKind::Capacitor => {
                    format!("{} stores {joule} at up to {}", element.designator, shown(voltage.value, VOLT))
                }
                _ => format!("{} stores {joule}", element.designator),
            }
        },
    )?;
    Some(caution(
        "stored-energy",
        "Stored energy",
        format!("{stores}. It stays there after the supply is switched off."),
        "Discharge through a resistor and measure before touching; give large capacitors a bleeder resistor; keep rings \
         and tools away from their terminals.",
        "IEC 60950-1: 20 J at 2 V or more; IEC 61010-1: 45 µC above the touch voltage (quoted from memory)",
    ))
}

/// Whether stored energy (J) burns or shocks.
fn is_hazardous(element: &ElementFact, energy: f64) -> bool {
    if element.kind != ElementKind::Capacitor {
        return energy >= HAZARDOUS_ENERGY;
    }
    // A capacitor of unknown voltage is taken for one above every threshold of voltage.
    let Some(voltage) = element.voltage.as_ref().map(|worst| worst.value) else {
        return energy >= HAZARDOUS_ENERGY;
    };
    let charge = if voltage > 0.0 { 2.0 * energy / voltage } else { 0.0 };
    (energy >= HAZARDOUS_ENERGY && voltage >= HAZARDOUS_ENERGY_VOLTAGE)
        || (charge > HAZARDOUS_CHARGE && voltage > TOUCH_VOLTAGE)
}

fn fire(facts: &Facts) -> Option<Caution> {
    let loaded = list(
        facts,
        |element| {
            let ratio = element.power_ratio.as_ref().filter(|_| element.kind == ElementKind::Resistor)?;
            // At its rating includes what numerical error puts just below it.
            (ratio.value >= 1.0 - 1e-6).then_some(ratio)
        },
        |element, ratio| format!("{} dissipates {} of its rating", element.designator, percent(ratio.value)),
    )?;
    Some(caution(
        "fire",
        "Overloaded resistor",
        format!(
            "{loaded}. A resistor at or above its rating chars, drifts and can set fire to what is near."
        ),
        "Take one of twice the dissipation, a flameproof or fusible type, and keep it off the board.",
        "IEC 60115-1 rating; half of it as the usual load is common practice",
    ))
}

fn percent(ratio: f64) -> String {
    format!("{}\u{a0}%", crate::quantity::significant(100.0 * ratio, 3).0)
}

fn inductive_kick(found: &Unclamped<'_>) -> Caution {
    let coil = &found.coil.designator;
    let current = found.coil.current.as_ref().map_or(String::new(), |current| {
        format!(" of up to {} ({})", shown(current.value, Kind::of(Dimension::AMPERE)), current.condition)
    });
    let energy = found.coil.energy.as_ref().map_or(String::new(), |energy| {
        format!(" {} stored in it go", shown(energy.value, Kind::of(Dimension::JOULE)))
    });
    let energy = if energy.is_empty() { " Its stored energy goes".to_owned() } else { energy };
    let transistors = found.transistors.join(", ");
    caution(
        "inductive-kick",
        "Inductive load without a clamp",
        format!(
            "When {transistors} opens, the current{current} of {coil} finds no way back: no diode or Zener takes it over. \
             Its voltage rises until {transistors} breaks down.{energy} into the break-down."
        ),
        "A diode across the load, against the supply (slow release), or with a Zener or resistor in series (fast \
         release), or a Zener across the transistor below its V_CEO.",
        "common practice",
    )
}

fn runaway(facts: &Facts) -> Option<Caution> {
    let is_near = |heat: &&HeatFact| {
        let short = heat.runaway_from.is_some_and(|from| from < heat.ambient + HEAT_ROOM);
        heat.gain.is_none_or(|gain| gain > HEAT_GAIN) || short
    };
    let told: Vec<String> = facts.heat.iter().filter(is_near).map(runaway_words).collect();
    (!told.is_empty()).then(|| {
        caution(
            "run-away",
            "Thermal run-away",
            told.join("; "),
            "Put a resistor in series with the emitter, let the bias follow the transistor's temperature, lower the collector \
             voltage or the thermal resistance.",
            "common practice: a loop gain of the heat of at most one half, and 20 K between the highest ambient temperature \
             and run-away",
        )
    })
}

fn runaway_words(heat: &HeatFact) -> String {
    let HeatFact { designator, condition, ambient, .. } = heat;
    let ambient = shown(*ambient, Kind::TEMPERATURE);
    let mut words = match heat.gain {
        Some(gain) => {
            format!("the heat of {designator} has a loop gain of {gain:.2} at {ambient} ({condition})")
        }
        None => format!("{designator} runs away at {ambient} ({condition})"),
    };
    if let Some(from) = heat.runaway_from {
        words += &format!(", it runs away from an ambient of {}", shown(from, Kind::TEMPERATURE));
    }
    if let Some(ohms) = heat.ballast {
        words += &format!(
            "; {} in its emitter would bring the gain to 0.5",
            shown(ohms, Kind::of(Dimension::OHM))
        );
    }
    words
}

fn base_emitter_reverse(facts: &Facts) -> Option<Caution> {
    let reversed = list(
        facts,
        |element| {
            element.reverse_v_eb.as_ref().filter(|worst| worst.value > element.v_ebo.unwrap_or(USUAL_V_EBO))
        },
        |element, worst| {
            let bound = element.v_ebo.map_or_else(
                || format!("no V_EBO is known, {} is usual", shown(USUAL_V_EBO, VOLT)),
                |rating| format!("V_EBO is {}", shown(rating, VOLT)),
            );
            format!(
                "the base-emitter junction of {} sees {} in reverse; {bound}",
                element.designator,
                shown(worst.value, VOLT)
            )
        },
    )?;
    Some(caution(
        "base-emitter-reverse",
        "Base-emitter junction driven in reverse",
        format!(
            "At its worst corner {reversed}. Reverse break-down lowers the gain for good, even at small currents."
        ),
        "A diode across base and emitter, or in series with the emitter or base, or a base divider.",
        "V_EBO of the data sheet; 5 V where there is none (common practice)",
    ))
}

fn gain_dependence(facts: &Facts) -> Option<Caution> {
    let leans: Vec<String> = facts
        .safety
        .iter()
        .filter(|fact| !fact.gains.is_empty())
        .map(|fact| format!("criterion {} moves with the gain of {}", fact.label, fact.gains.join(", ")))
        .collect();
    if leans.is_empty() {
        return None;
    }
    Some(caution(
        "gain-dependence",
        "A safety-relevant function leans on transistor gain",
        format!(
            "The margin of a criterion marked as safety depends on gain: {}. Gain spreads widely between specimens, falls \
             with cold and ages.",
            leans.join("; ")
        ),
        "Saturate with ample overdrive, set gain by resistors, or add a second, independent means.",
        "common practice",
    ))
}

fn missing_data(facts: &Facts) -> Option<Caution> {
    if facts.wanted.is_empty() {
        return None;
    }
    let mut wanted: Vec<&str> = Vec::new();
    for row in &facts.wanted {
        if !wanted.contains(&row.as_str()) {
            wanted.push(row);
        }
    }
    Some(caution(
        "missing-data",
        "Worst-case data are missing",
        format!("Not every result could be bounded. Missing: {}.", wanted.join("; ")),
        "Get these rows from the maker, or measure enough specimens and say so; typical values bound nothing.",
        "ECSS-Q-HB-30-01A: worst-case analysis rests on bounds (quoted from memory)",
    ))
}
