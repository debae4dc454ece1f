//! Worked examples of textbooks (tests/reference/published, sources in each record) under each book's own assumptions:
//! hand analysis by `derive`, hand formulas by the worksheet's formula language.

mod expression;
mod network;

use std::path::Path;
use std::sync::Arc;

use qsheaf::derive::State;
use qsheaf::yaml::{self, Node};

use expression::Names;
use network::Network;

/// What is left out, by record and quantity, with the reason.
const EXCLUDED: [(&str, &str, &str); 1] = [(
    "neamen-coupling-low-corner-7-3",
    "f_L",
    "a corner frequency of the network: no frequency response yet",
)];

/// How far a value may lie from the unrounded one, as a share of it.
const CLOSE: f64 = 1e-5;

fn text(node: &Node, key: &str) -> String {
    node.get(key).and_then(|value| value.scalar("a value").ok()).unwrap_or("").to_owned()
}

fn number(text: &str) -> f64 {
    text.parse().unwrap_or_else(|_| panic!("{text} is no number"))
}

/// SI value of a unit as the records write it; temperatures stay in degrees.
fn factor(unit: &str) -> f64 {
    match unit {
        "" | "1" | "V" | "A" | "ohm" | "W" | "Hz" | "F" | "degC" | "degC/W" | "dB" | "A/ohm" | "s" => 1.0,
        "mA" | "mV" | "mW" | "mA/V" | "mW/degC" | "ms" => 1e-3,
        "uA" | "uW" | "us" | "uF" | "uS" => 1e-6,
        "nF" | "nA" | "ns" => 1e-9,
        "pF" | "ps" => 1e-12,
        "kohm" | "kHz" => 1e3,
        "Mohm" | "MHz" => 1e6,
        "GHz" => 1e9,
        "%" => 0.01,
        other => panic!("unit {other}"),
    }
}

fn records() -> Vec<Node> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/published");
    let mut files: Vec<_> = std::fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    files.sort();
    files
        .iter()
        .filter(|path| path.extension().is_some_and(|ending| ending == "yaml"))
        .flat_map(|path| {
            let name: Arc<str> = path.file_name().unwrap().to_string_lossy().into();
            let tree = yaml::read(&std::fs::read_to_string(path).unwrap(), &name, 1);
            tree.unwrap_or_else(|errors| panic!("{name}: {errors:?}")).items().to_vec()
        })
        .collect()
}

/// Values that a record gives or derives beside its circuit.
fn given(record: &Node, names: &mut Names) -> Result<(), String> {
    for (key, value) in record.get("given").unwrap().map("given").unwrap() {
        let found = match value.scalar("a number") {
            Ok(text) => number(text),
            Err(_) => number(&text(value, "value")) * factor(&text(value, "unit")),
        };
        names.insert(key.name.clone(), found);
    }
    let Some(derived) = record.get("derive") else { return Ok(()) };
    for (key, value) in derived.map("derive").unwrap() {
        let found = expression::value(value.scalar("a formula").unwrap(), names, &|_, _| Ok(None))?;
        names.insert(key.name.clone(), found);
    }
    Ok(())
}

/// What an expression asks of the network beyond names.
fn ask(network: &Network, names: &Names, call: &str, of: &[String]) -> Result<Option<f64>, String> {
    let known = |suffix: &str| {
        let name = format!("{}.{suffix}", of[0]);
        names.get(&name).copied().map(Some).ok_or_else(|| format!("no {name}"))
    };
    let node = |name: &String| network.node(name).ok_or_else(|| format!("no node {name}"));
    let singular = || "the equivalent circuit is singular".to_owned();
    Ok(match call {
        "ib" => return known("I_B"),
        "ic" => return known("I_C"),
        "vce" => return known("V_CE"),
        "i" => return known("I"),
        "ptot" => return known("P_total"),
        "bet" => Some(number(&network.element(&of[0]).ok_or("no element")?.fields["beta"])),
        "gain" => {
            let gains = network.increments(&of[0])?.gains().ok_or_else(singular)?;
            let from = of.get(2).map_or(Ok(1.0), |from| Ok::<f64, String>(gains[node(from)?]))?;
            Some(gains[node(&of[1])?] / from)
        }
        "zin" => Some(network.increments(&of[0])?.input_resistance().ok_or_else(singular)?),
        "zout" => {
            let increments = network.increments("VS")?;
            Some(increments.output_resistance(node(&of[0])?).ok_or_else(singular)?)
        }
        _ => None,
    })
}

/// Adjusts elements until the record's targets hold: bisection of each in turn until none moves.
fn adjusted(record: &Node, mut network: Network) -> Result<Network, String> {
    let Some(targets) = record.get("solve") else { return Ok(network) };
    for _ in 0..8 {
        for target in targets.items() {
            let wanted = number(&text(target, "equals")) * factor(&text(target, "unit"));
            let name = text(target, "element");
            let misses = |network: &mut Network, tried: f64| -> Result<f64, String> {
                let element = network.element_mut(&name);
                element.fields.insert("value".to_owned(), format!("{tried:e}"));
                element.fields.insert("unit".to_owned(), "1".to_owned());
                let names = network.names()?;
                let asked = |call: &str, of: &[String]| ask(network, &names, call, of);
                Ok(expression::value(&text(target, "target"), &names, &asked)? - wanted)
            };
            let (mut low, mut high) = (number(&text(target, "lo")), number(&text(target, "hi")));
            let rises = misses(&mut network, low)? < 0.0;
            for _ in 0..60 {
                let middle = (low + high) / 2.0;
                if (misses(&mut network, middle)? < 0.0) == rises { low = middle } else { high = middle }
            }
            misses(&mut network, (low + high) / 2.0)?;
        }
    }
    Ok(network)
}

/// A printed figure's half unit in its last digit.
fn half_unit(printed: &str) -> f64 {
    let (digits, exponent) = printed.split_once(['e', 'E']).unwrap_or((printed, "0"));
    let decimals = digits.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    0.5 * 10_f64.powi(exponent.parse::<i32>().unwrap() - i32::try_from(decimals).unwrap())
}

/// What one asked quantity comes to, against what is known of it.
fn judge(value: f64, asked: &Node, check: &Node) -> Result<(), String> {
    let unit = factor(&text(asked, "unit"));
    let found = value / unit;
    let exact = number(&text(check, "value"));
    if found.is_nan() || (found - exact).abs() > CLOSE * exact.abs() {
        return Err(format!("{found} instead of {exact}"));
    }
    let printed = text(asked, "printed");
    // The records' values carry seven digits, so that an edge of rounding is known no better.
    let close = half_unit(&printed) * (1.0 + 1e-6) + 1e-7 * exact.abs();
    if text(check, "verdict") == "agrees" && (found - number(&printed)).abs() > close {
        return Err(format!("{found} is not within half a unit of the printed {printed}"));
    }
    Ok(())
}

/// The state of a transistor that the hand analysis ends in, against the record's word for it.
fn region(found: Option<State>, check: &Node) -> Result<(), String> {
    let word = text(check, "value");
    let expected = match word.as_str() {
        "sat" => State::Saturated,
        "active" => State::Active,
        "off" => State::Off,
        _ => return Err(format!("`{word}` is no state")),
    };
    if found == Some(expected) { Ok(()) } else { Err(format!("{found:?} instead of {expected:?}")) }
}

fn run(record: &Node) -> Vec<(String, Result<(), String>)> {
    let checked = record.get("check_region").is_none_or(|node| node.scalar("").unwrap() != "false");
    let base = record
        .get("circuit")
        .filter(|circuit| circuit.get("elements").is_some())
        .map(|circuit| adjusted(record, network::read(circuit, checked)));
    let asked = record.get("asked").unwrap().items();
    let checks = record.get("check").unwrap().items();
    assert_eq!(asked.len(), checks.len());
    asked
        .iter()
        .zip(checks)
        .map(|(asked, check)| {
            let outcome = || -> Result<(), String> {
                let mut names = Names::new();
                let network = match &base {
                    Some(network) => {
                        let network = network.clone()?;
                        Some(match asked.get("variant") {
                            Some(name) => network.with_variant(
                                record.get("variants").unwrap().get(name.scalar("").unwrap()).unwrap(),
                            ),
                            None => network,
                        })
                    }
                    None => None,
                };
                if let Some(network) = &network {
                    names = network.names()?;
                }
                given(record, &mut names)?;
                let answer = |call: &str, of: &[String]| match &network {
                    Some(network) => ask(network, &names, call, of),
                    None => Ok(None),
                };
                if let Some(name) = text(asked, "expression").strip_suffix(".region") {
                    return region(network.as_ref().and_then(|network| network.region(name)), check);
                }
                judge(expression::value(&text(asked, "expression"), &names, &answer)?, asked, check)
            };
            (text(asked, "quantity"), outcome())
        })
        .collect()
}

fn excluded(id: &str, quantity: &str) -> bool {
    EXCLUDED.iter().any(|(record, left_out, _)| *record == id && *left_out == quantity)
}

#[test]
fn worked_examples_come_out_as_in_the_books() {
    let records = records();
    assert_eq!(records.len(), 162);
    let mut wrong = Vec::new();
    let (mut passed, mut quantities, mut left_out) = (0, 0, 0);
    for record in &records {
        let id = text(record, "id");
        let mut whole = true;
        for (quantity, outcome) in run(record) {
            if excluded(&id, &quantity) {
                left_out += 1;
                whole = false;
                continue;
            }
            quantities += 1;
            if let Err(reason) = outcome {
                whole = false;
                wrong.push(format!("{id}, {quantity}: {reason}"));
            }
        }
        passed += usize::from(whole);
    }
    println!("{passed} of {} examples whole, {quantities} quantities", records.len());
    assert!(wrong.is_empty(), "{} of {quantities} quantities:\n{}", wrong.len(), wrong.join("\n"));
    assert_eq!(left_out, EXCLUDED.len(), "an exclusion names nothing");
    assert!(passed >= 160, "{passed} examples");
}
