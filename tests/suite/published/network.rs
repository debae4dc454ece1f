//! A record's circuit as a sketch for hand analysis and as an equivalent circuit at midband.

use std::collections::BTreeMap;

use qsheaf::derive::{
    self, Attempt, EmitterCurrent, Equivalent, Increments, Kind, Match, Part, Piece, Sketch, State,
    Transistor, Unknown,
};
use qsheaf::yaml::Node;

use super::expression::Names;
use super::{factor, number, text};

/// One element with its fields as text; a variant replaces some of them.
#[derive(Clone, Debug)]
pub struct Element {
    pub name: String,
    pub kind: String,
    pub nodes: Vec<usize>,
    pub fields: BTreeMap<String, String>,
}

#[derive(Clone, Debug)]
pub struct Network {
    pub nodes: Vec<String>,
    pub elements: Vec<Element>,
    /// Whether assumed states are checked: some records leave saturation aside on purpose.
    pub checked: bool,
}

/// Fields of an element, inner maps flattened: `ss.re`, `match.ref`.
fn flatten(node: &Node, prefix: &str, into: &mut BTreeMap<String, String>) {
    for (key, value) in node.map("a map").unwrap() {
        let name = format!("{prefix}{}", key.name);
        match value.scalar("a value") {
            Ok(text) => {
                into.insert(name, text.to_owned());
            }
            Err(_) if value.map("a map").is_ok() => flatten(value, &format!("{name}."), into),
            Err(_) => {}
        }
    }
}

pub fn read(circuit: &Node, checked: bool) -> Network {
    let mut nodes = vec![text(circuit, "ground")];
    let elements = circuit
        .get("elements")
        .unwrap()
        .items()
        .iter()
        .map(|element| {
            let mut fields = BTreeMap::new();
            flatten(element, "", &mut fields);
            let names = element.get("nodes").unwrap().items().iter();
            let at = names.map(|node| {
                let name = node.scalar("a node").unwrap().to_owned();
                nodes.iter().position(|known| *known == name).unwrap_or_else(|| {
                    nodes.push(name);
                    nodes.len() - 1
                })
            });
            Element { name: text(element, "ref"), kind: text(element, "kind"), nodes: at.collect(), fields }
        })
        .collect();
    Network { nodes, elements, checked }
}

impl Element {
    fn get(&self, key: &str) -> Option<f64> {
        self.fields.get(key).map(|text| if text == "inf" { f64::INFINITY } else { number(text) })
    }

    fn is(&self, key: &str, value: &str) -> bool {
        self.fields.get(key).is_some_and(|text| text == value)
    }

    /// The value in SI units.
    pub fn value(&self) -> Option<f64> {
        Some(self.get("value")? * factor(self.fields.get("unit").map_or("1", String::as_str)))
    }
}

impl Network {
    pub fn with_variant(&self, variant: &Node) -> Network {
        let mut changed = self.clone();
        for (name, fields) in variant.get("elements").unwrap().map("elements").unwrap() {
            let element = changed.element_mut(&name.name);
            flatten(fields, "", &mut element.fields);
        }
        changed
    }

    pub fn element_mut(&mut self, name: &str) -> &mut Element {
        self.elements.iter_mut().find(|element| element.name == name).unwrap()
    }

    pub fn element(&self, name: &str) -> Option<&Element> {
        self.elements.iter().find(|element| element.name == name)
    }

    pub fn node(&self, name: &str) -> Option<usize> {
        self.nodes.iter().position(|node| node == name)
    }

    /// The network for hand analysis at d.c.; none where a transistor has no d.c. data.
    fn sketch(&self) -> Option<Sketch> {
        let pieces = self
            .elements
            .iter()
            .map(|element| Some(Piece { name: element.name.clone(), kind: self.kind(element)? }));
        Some(Sketch { nodes: self.nodes.clone(), pieces: pieces.collect::<Option<Vec<_>>>()? })
    }

    fn kind(&self, element: &Element) -> Option<Kind> {
        let n = &element.nodes;
        Some(match element.kind.as_str() {
            "resistor" => Kind::Resistor { between: [n[0], n[1]], resistance: element.value()? },
            "vsource" => Kind::Voltage { plus: n[0], minus: n[1], voltage: element.value()? },
            "isource" => Kind::Current { from: n[0], to: n[1], current: element.value()? },
            "diode" => Kind::Diode { anode: n[0], cathode: n[1], drop: element.get("v_f")? },
            "zener" => Kind::Zener { anode: n[0], cathode: n[1], breakdown: element.get("v_z")?, drop: None },
            "capacitor" => Kind::Open,
            "npn" | "pnp" => {
                let gain = element.get("beta")?;
                let matched = element.fields.get("match.ref").map(|twin| Match {
                    of: self.elements.iter().position(|other| other.name == *twin).unwrap(),
                    ratio: element.get("match.ratio").unwrap(),
                });
                Kind::Transistor(Transistor {
                    collector: n[0],
                    base: n[1],
                    emitter: n[2],
                    pnp: element.kind == "pnp",
                    gain,
                    v_be: element.get("v_be")?,
                    v_ce_saturated: element.get("v_ce_sat"),
                    emitter_current: emitter_current(element, "ie_rule"),
                    // I_CEO = (h_FE + 1) I_CBO.
                    cutoff_current: element
                        .get("i_cbo")
                        .or_else(|| Some(element.get("i_ceo")? / (gain + 1.0)))
                        .unwrap_or(0.0),
                    off_current: element.get("i_off").unwrap_or(0.0),
                    matched,
                })
            }
            other => panic!("kind {other}"),
        })
    }

    /// Names of everything that the operating point and the values of elements offer.
    pub fn names(&self) -> Result<Names, String> {
        let mut names = Names::new();
        for element in &self.elements {
            if let Some(value) = element.value() {
                names.insert(format!("{}.value", element.name), value);
            }
        }
        let Some(sketch) = self.sketch() else {
            self.small_signal_names(None, &mut names);
            return Ok(names);
        };
        let found = if self.checked {
            derive::analyse(&sketch).map_err(|refusal| format!("{refusal:?}"))?.found
        } else {
            let active = |piece: &Piece| matches!(piece.kind, Kind::Transistor(_)).then_some(State::Active);
            derive::assume(&sketch, &sketch.pieces.iter().map(active).collect::<Vec<_>>())
        };
        let of = |unknown| found.values.as_ref().and_then(|values| values.get(&unknown)).copied();
        for (k, node) in self.nodes.iter().enumerate() {
            names.insert(format!("{node}.V"), of(Unknown::Voltage(k)).unwrap_or(0.0));
        }
        for (k, element) in self.elements.iter().enumerate() {
            if let Some(current) = of(Unknown::Current(k)) {
                names.insert(format!("{}.I", element.name), current);
            }
            let Some(i_c) = of(Unknown::CollectorCurrent(k)) else { continue };
            let [c, b, e] =
                [0, 1, 2].map(|terminal| of(Unknown::Voltage(element.nodes[terminal])).unwrap_or(0.0));
            let i_b = of(Unknown::BaseCurrent(k)).unwrap();
            let i_e = of(Unknown::EmitterCurrent(k)).unwrap();
            let values = [
                ("I_C", i_c),
                ("I_B", i_b),
                ("I_E", i_e),
                ("V_CE", c - e),
                ("V_CB", c - b),
                ("V_BE", b - e),
                ("P", (i_c * (c - e)).abs()),
                ("P_total", (i_c * (c - e)).abs() + (i_b * (b - e)).abs()),
            ];
            for (name, value) in values {
                names.insert(format!("{}.{name}", element.name), value);
            }
        }
        self.small_signal_names(Some(&found), &mut names);
        Ok(names)
    }

    fn small_signal_names(&self, found: Option<&Attempt>, names: &mut Names) {
        for (k, element) in self.elements.iter().enumerate() {
            if let Some(r_e) = emitter_resistance(element, k, found) {
                names.insert(format!("{}.r_e", element.name), r_e);
            }
            if let Some(equivalent) = equivalent(element, k, found) {
                names.insert(format!("{}.h_ie", element.name), equivalent.input_resistance);
            }
        }
    }

    /// State of a transistor in words, as the records print it.
    pub fn region(&self, name: &str) -> Option<State> {
        let sketch = self.sketch()?;
        let found = derive::analyse(&sketch).ok()?.found;
        found.states[sketch.pieces.iter().position(|piece| piece.name == name)?]
    }

    /// The equivalent circuit driven by the source `drive`; voltage sources and capacitors do not change.
    pub fn increments(&self, drive: &str) -> Result<Increments, String> {
        let found = self.sketch().and_then(|sketch| Some(derive::analyse(&sketch).ok()?.found));
        let mut parts = Vec::new();
        for (k, element) in self.elements.iter().enumerate() {
            let n = &element.nodes;
            match element.kind.as_str() {
                "resistor" => {
                    parts.push(Part::Resistor { between: [n[0], n[1]], resistance: element.value().unwrap() })
                }
                "vsource" | "capacitor" if element.name != drive => {
                    parts.push(Part::Short { between: [n[0], n[1]] })
                }
                "npn" | "pnp" => parts.push(Part::Transistor {
                    collector: n[0],
                    base: n[1],
                    emitter: n[2],
                    equivalent: equivalent(element, k, found.as_ref())
                        .ok_or_else(|| format!("{} has no small-signal data", element.name))?,
                }),
                _ => {}
            }
        }
        let source = self.element(drive).ok_or_else(|| format!("no source {drive}"))?;
        Ok(Increments { nodes: self.nodes.len(), parts, drive: [source.nodes[0], source.nodes[1]] })
    }
}

fn emitter_current(element: &Element, key: &str) -> EmitterCurrent {
    if element.is(key, "ie=ic") { EmitterCurrent::AsCollector } else { EmitterCurrent::Sum }
}

/// r_e as the record gives it, or V_T over the emitter (or collector) current.
fn emitter_resistance(element: &Element, k: usize, found: Option<&Attempt>) -> Option<f64> {
    element.get("ss.re").or_else(|| {
        let from = if element.is("ss.re_from", "ic") {
            Unknown::CollectorCurrent(k)
        } else {
            Unknown::EmitterCurrent(k)
        };
        Some(element.get("ss.vt")? / found?.values.as_ref()?.get(&from)?)
    })
}

fn equivalent(element: &Element, k: usize, found: Option<&Attempt>) -> Option<Equivalent> {
    let gain = element.get("ss.hfe")?;
    let input_resistance = element.get("ss.hie").or_else(|| {
        let factor = if element.is("ss.hie_rule", "beta*re") { gain } else { gain + 1.0 };
        Some(factor * emitter_resistance(element, k, found)?)
    })?;
    let output = element.get("ss.ro").or_else(|| Some(1.0 / element.get("ss.hoe")?));
    Some(Equivalent {
        gain,
        input_resistance,
        output_resistance: output.unwrap_or(f64::INFINITY),
        emitter_current: emitter_current(element, "ss.ie_rule"),
    })
}
