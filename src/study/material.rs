//! What a note is made of: everything read from its bundle, before anything is compiled or solved.

use std::collections::{BTreeMap, BTreeSet};

use super::findings::Input;
use crate::circuit::{self, Element, Network};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::fit::{self, Law, Model};
use crate::part::{self, Part, PartKind};
use crate::quantity::{Origin, Source};
use crate::settings::{self, Settings};
use crate::source::{Bundle, Digest};
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
        let parts = parts.iter().filter(|(name, _)| used.contains(name.as_str()));
        Ok(Material {
            parts: parts.map(|(name, part)| (name.clone(), part.clone())).collect(),
            settings,
            worksheet,
            models,
            in_place: built.inputs.into_iter().map(|value| in_place(value, &built.network)).collect(),
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
            Input {
                symbol: entry.name.value.clone(),
                description: entry.description.clone(),
                spread: quantity.spread,
                kind: quantity.kind,
                unit: quantity.unit.clone(),
                text: quantity.text.clone(),
                bounded: quantity.bounded,
                source: entry.sourced.source.clone(),
                place: entry.sourced.place.clone(),
            }
        });
        entries.chain(self.in_place.iter().cloned()).collect()
    }

    /// The fitted law of an element, if it is a junction device.
    pub fn law_of(&self, element: &Element) -> Option<&Law> {
        element.part.as_deref().and_then(|name| self.models.get(name)).map(|model| &model.law)
    }

    pub fn model_of(&self, element: &Element) -> Option<&Model> {
        element.part.as_deref().and_then(|name| self.models.get(name))
    }
}

/// A value written in place. Where it names no source but its element names a part, the designer chose the value and the
/// part's order fixes the tolerance; without either it counts as an assumption.
fn in_place(value: circuit::InPlace, network: &Network) -> Input {
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
