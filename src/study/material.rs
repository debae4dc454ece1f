//! What a note is made of: everything read from its bundle, before anything is compiled or solved.

use std::collections::{BTreeMap, BTreeSet};

use super::findings::Input;
use crate::circuit::{self, Element, ElementKind, Network};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::fit::{self, Law, Model};
use crate::part::{self, Part, PartKind};
use crate::quantity::{Kind, Origin, Quantity, Role, Source, Spread, Unit};
use crate::settings::{self, Settings};
use crate::source::{Bundle, Digest, Place};
use crate::stress::policy::{self, Policy};
use crate::worksheet::{self, Worksheet};

/// A note as read: nothing is solved yet.
pub(super) struct Material {
    pub settings: Settings,
    pub worksheet: Worksheet,
    /// Records that the circuit uses, by name.
    pub parts: BTreeMap<String, Part>,
    /// Fitted junction devices, by part name.
    pub models: BTreeMap<String, Model>,
    pub network: Network,
    /// Values written in place in the circuit block.
    pub in_place: Vec<Input>,
    pub policy: Policy,
    pub warnings: Diagnostics,
    pub files: Vec<(String, Digest)>,
    pub digest: Digest,
}

impl Material {
    /// Reads everything that the worksheet at `path` needs, collecting what is wrong in all of it.
    pub fn gather(bundle: &Bundle, path: &str) -> Result<Material, Diagnostics> {
        let mut errors = Diagnostics::default();
        let settings = match bundle.get(settings::FILE) {
            Some(file) => keep(settings::read(file), &mut errors),
            None => {
                errors.push(Diagnostic::bare(format!("the notebook has no {}", settings::FILE)));
                None
            }
        };
        let read = match bundle.get(path) {
            Some(file) => keep(worksheet::read(file), &mut errors),
            None => {
                errors.push(Diagnostic::bare(format!("there is no worksheet {path}")));
                None
            }
        };
        let parts = parts(bundle, &mut errors);
        let (Some(settings), Some((worksheet, mut warnings))) = (settings, read) else { return Err(errors) };
        missing_images(bundle, &worksheet, &mut errors);
        let policy = match &settings.policy {
            Some(named) => match bundle.get(&named.value) {
                Some(file) => keep(policy::read(file), &mut errors),
                None => {
                    errors.push(
                        Diagnostic::error(&named.place, format!("there is no policy `{}`", named.value))
                            .expected("the path of a derating policy inside the notebook"),
                    );
                    None
                }
            },
            None => Some(Policy::none()),
        };
        let basis: BTreeMap<String, crate::quantity::Kind> = settings
            .defaults
            .iter()
            .chain(&worksheet.basis)
            .map(|entry| (entry.name.value.clone(), entry.sourced.quantity.kind))
            .collect();
        let kinds: BTreeMap<String, PartKind> =
            parts.iter().map(|(name, part)| (name.clone(), part.kind)).collect();
        let built = keep(circuit::build(&worksheet.circuit, &basis, &kinds), &mut errors);
        let used: BTreeSet<&str> = built
            .iter()
            .flat_map(|built| &built.network.elements)
            .filter_map(|e| e.part.as_deref())
            .collect();
        let mut models = BTreeMap::new();
        for name in used {
            let Some(part) = parts.get(name) else { continue };
            if matches!(part.kind, PartKind::Npn | PartKind::Pnp | PartKind::Diode | PartKind::Zener) {
                models.extend(keep(fit::fit(part), &mut errors).map(|model| (name.to_owned(), model)));
            }
        }
        let (Some(policy), Some(built)) = (policy, built) else { return Err(errors) };
        if errors.has_errors() {
            return Err(errors);
        }
        warnings.extend(built.warnings);
        let used: BTreeSet<&str> = built.network.elements.iter().filter_map(|e| e.part.as_deref()).collect();
        let all_parts = parts;
        let parts = all_parts.iter().filter(|(name, _)| used.contains(name.as_str()));
        Ok(Material {
            parts: parts.map(|(name, part)| (name.clone(), part.clone())).collect(),
            settings,
            worksheet,
            models,
            in_place: in_place_values(built.inputs, &built.network, &all_parts),
            network: built.network,
            policy,
            warnings,
            files: bundle.files.iter().map(|(path, file)| (path.to_string(), file.digest)).collect(),
            digest: bundle.digest(),
        })
    }

    /// Every input of the note: the notebook's defaults that the basis does not give anew, the basis, values in place.
    pub fn inputs(&self) -> Vec<Input> {
        let given = |name: &str| self.worksheet.basis.iter().any(|entry| entry.name.value == name);
        let defaults = self.settings.defaults.iter().filter(|entry| !given(&entry.name.value));
        let entries = defaults.chain(&self.worksheet.basis).map(|entry| {
            let quantity = &entry.sourced.quantity;
            let value = Input {
                symbol: entry.name.value.clone(),
                description: entry.description.clone(),
                spread: quantity.spread,
                kind: quantity.kind,
                unit: quantity.unit.clone(),
                text: quantity.text.clone(),
                bounded: quantity.bounded,
                source: entry.sourced.source.clone(),
                role: entry.role,
                place: entry.sourced.place.clone(),
            };
            let drift = entry.ageing.clone();
            let drift = drift.map(|drift| ageing(&value.symbol, &value.place, drift, value.source.clone()));
            (value, drift)
        });
        let (values, drifts): (Vec<Input>, Vec<Option<Input>>) = entries.unzip();
        values.into_iter().chain(self.in_place.iter().cloned()).chain(drifts.into_iter().flatten()).collect()
    }

    /// The fitted law of an element, if it is a junction device.
    pub fn law_of(&self, element: &Element) -> Option<&Law> {
        element.part.as_deref().and_then(|name| self.models.get(name)).map(|model| &model.law)
    }

    pub fn model_of(&self, element: &Element) -> Option<&Model> {
        element.part.as_deref().and_then(|name| self.models.get(name))
    }
}

/// Values written in place, and behind them the drift with age of every element that has one: as written with it, or as the
/// record of its part says.
fn in_place_values(
    values: Vec<circuit::InPlace>,
    network: &Network,
    parts: &BTreeMap<String, Part>,
) -> Vec<Input> {
    let mut drifts = Vec::new();
    for element in &network.elements {
        let own = values.iter().find(|value| value.symbol == element.designator);
        let record = element.part.as_deref().and_then(|name| parts.get(name));
        let of = |drift: Quantity, source: Option<Source>| {
            ageing(&element.designator, &element.place, drift, source)
        };
        match (
            own.and_then(|own| own.ageing.clone().map(|drift| (drift, own))),
            record.and_then(Part::ageing),
        ) {
            (Some((drift, own)), _) => drifts.push(of(drift, own.sourced.source.clone())),
            (None, Some((low, high, row))) => {
                let unit = Unit::percent();
                let text = [low, high].map(|end| crate::quantity::text(end, &unit, 3)).join(" to ");
                let spread = Spread { low, nominal: 0.0, high };
                let drift = Quantity { spread, kind: Kind::NONE, unit, bounded: true, text };
                drifts.push(of(drift, Some(row.source.clone())));
            }
            (None, None) => {}
        }
    }
    values.into_iter().map(|value| in_place(value, network, parts)).chain(drifts).collect()
}

/// What the name of a drift with age ends with; no formula can be written with a blank in a name.
const AGEING: &str = " ageing";

/// The symbol of the value that an input makes drift, if it is a drift.
pub(super) fn aged(symbol: &str) -> Option<&str> {
    symbol.strip_suffix(AGEING)
}

/// The drift of a value: an input of its own, never summed with its tolerance.
fn ageing(of: &str, place: &Place, drift: Quantity, source: Option<Source>) -> Input {
    Input {
        symbol: format!("{of}{AGEING}"),
        description: Some("drift with age, as a share of the value".to_owned()),
        spread: drift.spread,
        kind: drift.kind,
        unit: drift.unit,
        text: drift.text,
        bounded: true,
        source,
        role: Role::Bias,
        place: place.clone(),
    }
}

/// How a value written in place varies: as its record or that of its part says; else a resistor, capacitor or inductor by
/// purchase tolerance, anything else (source, load, thermal resistance, temperature coefficient) like a bias.
fn role(value: &circuit::InPlace, network: &Network, parts: &BTreeMap<String, Part>) -> Role {
    let owner = value.symbol.split('.').next().unwrap_or("");
    let element = network.elements.iter().find(|element| element.designator == owner);
    let bought = matches!(
        element.map(|element| element.kind),
        Some(ElementKind::Resistor | ElementKind::Capacitor | ElementKind::Inductor)
    );
    let own = value.symbol == owner || value.symbol.ends_with(".R_w");
    let of_part = element.and_then(|e| e.part.as_deref()).and_then(|name| parts.get(name)?.spread);
    // What a record says of its value says nothing about its mounting or its drift with temperature.
    let further = [".R_th", ".TCR"].iter().any(|end| value.symbol.ends_with(end));
    match value.role {
        Some(role) if !further => role,
        _ if own && bought => of_part.unwrap_or(Role::UNIFORM),
        _ => Role::Bias,
    }
}

/// A value written in place. Where it names no source but its element names a part, the designer chose the value and the
/// part's order fixes the tolerance; without either it counts as an assumption.
fn in_place(value: circuit::InPlace, network: &Network, parts: &BTreeMap<String, Part>) -> Input {
    let role = role(&value, network, parts);
    let quantity = value.sourced.quantity;
    let part = network.elements.iter().find(|e| e.designator == value.symbol).and_then(|e| e.part.as_deref());
    let chosen = part.filter(|_| quantity.bounded).map(|part| Source {
        origin: Origin::Specification,
        text: format!("chosen here; tolerance as ordered with {part}"),
    });
    Input {
        symbol: value.symbol,
        description: value.description,
        spread: quantity.spread,
        kind: quantity.kind,
        unit: quantity.unit,
        text: quantity.text,
        bounded: quantity.bounded,
        source: value.sourced.source.or(chosen),
        role,
        place: value.sourced.place,
    }
}

/// All part records of the bundle, by name.
fn parts(bundle: &Bundle, errors: &mut Diagnostics) -> BTreeMap<String, Part> {
    let mut parts: BTreeMap<String, Part> = BTreeMap::new();
    for (path, file) in &bundle.files {
        if !path.starts_with("parts/") {
            continue;
        }
        for part in keep(part::read(file), errors).unwrap_or_default() {
            if let Some(first) = parts.get(&part.name) {
                errors.push(
                    Diagnostic::error(&part.place, format!("part `{}` has two records", part.name))
                        .expected(format!("one; the first stands at {}", first.place)),
                );
            } else {
                parts.insert(part.name.clone(), part);
            }
        }
    }
    parts
}

fn missing_images(bundle: &Bundle, worksheet: &Worksheet, errors: &mut Diagnostics) {
    for (path, place) in &worksheet.images {
        if bundle.get(path).is_none() {
            errors.push(
                Diagnostic::error(place, format!("there is no image `{path}`"))
                    .expected("the path of an image inside the notebook, as seen from the worksheet"),
            );
        }
    }
}

fn keep<T>(result: Result<T, Diagnostics>, errors: &mut Diagnostics) -> Option<T> {
    result.map_err(|found| errors.extend(found)).ok()
}
