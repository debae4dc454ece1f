//! Names of a note: what each stands for, in which order, and whether every use of one fits.

use std::collections::BTreeMap;

use super::findings::Input;
use super::material::Material;
use crate::circuit::ElementKind;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::formula::{Formula, Relation};
use crate::quantity::Kind;
use crate::source::Place;
use crate::worksheet::{CriterionKind, DerivationKind, FigureKind};

/// Inputs and the kinds of all names but those of the derivation.
pub(super) struct Names {
    pub inputs: Vec<Input>,
    pub kinds: BTreeMap<String, Kind>,
}

impl Names {
    pub fn of(material: &Material, diagnostics: &mut Diagnostics) -> Names {
        let inputs = material.inputs();
        let mut kinds = BTreeMap::new();
        let mut places: BTreeMap<String, Place> = BTreeMap::new();
        for input in &inputs {
            if let Some(first) = places.insert(input.symbol.clone(), input.place.clone()) {
                diagnostics.push(
                    Diagnostic::error(&input.place, format!("`{}` is defined twice", input.symbol))
                        .expected(format!("another name; the first stands at {first}")),
                );
            }
            kinds.insert(input.symbol.clone(), input.kind);
        }
        for crate::circuit::Symbol { name: symbol, kind, .. } in crate::circuit::symbols(&material.network) {
            if material.worksheet.basis.iter().any(|entry| entry.name.value == symbol) {
                if let Some(entry) = material.worksheet.basis.iter().find(|entry| entry.name.value == symbol)
                {
                    diagnostics.push(
                        Diagnostic::error(
                            &entry.name.place,
                            format!("`{symbol}` also names a result of the circuit"),
                        )
                        .expected("another name for the basis value"),
                    );
                }
                continue;
            }
            kinds.entry(symbol).or_insert(kind);
        }
        Names { inputs, kinds }
    }
}

/// Checks each line of the derivation with the names known before it, and adds what it defines.
pub(super) fn check_order(
    material: &Material,
    kinds: &mut BTreeMap<String, Kind>,
    diagnostics: &mut Diagnostics,
) {
    let lines = &material.worksheet.derivation;
    let mut defined_at: BTreeMap<&str, (usize, &Formula)> = BTreeMap::new();
    for (i, line) in lines.iter().enumerate() {
        if let DerivationKind::Define { name, formula } = &line.what {
            if let Some((first, _)) = defined_at.get(name.value.as_str()) {
                diagnostics.push(
                    Diagnostic::error(&name.place, format!("`{}` is defined twice", name.value))
                        .expected(format!("another name; the first stands at {}", lines[*first].place)),
                );
            } else {
                defined_at.insert(&name.value, (i, formula));
            }
            if kinds.contains_key(&name.value) {
                diagnostics.push(
                    Diagnostic::error(
                        &name.place,
                        format!("`{}` already names an input or a result", name.value),
                    )
                    .expected("another name"),
                );
            }
        }
    }
    for (i, line) in lines.iter().enumerate() {
        let names = match &line.what {
            DerivationKind::Define { formula, .. } => formula.names(),
            DerivationKind::Assert { relation, .. } => relation.names(),
        };
        let mut early = false;
        for (name, place) in names {
            if !kinds.contains_key(name)
                && let Some((at, _)) = defined_at.get(name)
                && *at >= i
            {
                early = true;
                diagnostics.push(used_early(name, place, i, &defined_at, lines));
            }
        }
        match &line.what {
            DerivationKind::Define { name, formula } => {
                // After an early use the line's kind is unknown; its own name still counts as known further down.
                let kind = if early { None } else { diagnostics_of(kind_of(formula, kinds), diagnostics) };
                if defined_at.get(name.value.as_str()).is_none_or(|(at, _)| *at == i) {
                    kinds.entry(name.value.clone()).or_insert(kind.unwrap_or(Kind::NONE));
                }
            }
            DerivationKind::Assert { relation, .. } if !early => {
                diagnostics_of(relation_kind(relation, kinds), diagnostics);
            }
            DerivationKind::Assert { .. } => {}
        }
    }
}

/// A name used before its line: in a circle, or merely too early.
fn used_early(
    name: &str,
    place: &Place,
    line: usize,
    defined_at: &BTreeMap<&str, (usize, &Formula)>,
    lines: &[crate::worksheet::DerivationLine],
) -> Diagnostic {
    let own = match &lines[line].what {
        DerivationKind::Define { name, .. } => Some(name.value.as_str()),
        DerivationKind::Assert { .. } => None,
    };
    if let Some(own) = own
        && let Some(circle) = circle(own, name, defined_at)
    {
        return Diagnostic::error(
            place,
            format!("the derivation goes round in a circle: {}", circle.join(" → ")),
        )
        .expected("each line to use only what earlier lines define");
    }
    Diagnostic::error(place, format!("`{name}` is used before it is defined")).expected(format!(
        "the line that defines it above this one (it stands at {})",
        lines[defined_at[name].0].place
    ))
}

/// The chain from `own` over `next` back to `own`, if there is one.
fn circle(own: &str, next: &str, defined_at: &BTreeMap<&str, (usize, &Formula)>) -> Option<Vec<String>> {
    let mut chains = vec![vec![own.to_owned(), next.to_owned()]];
    let mut seen = vec![next.to_owned()];
    while let Some(chain) = chains.pop() {
        let last = chain.last()?;
        if last == own {
            return Some(chain);
        }
        let Some((_, formula)) = defined_at.get(last.as_str()) else { continue };
        for (name, _) in formula.names() {
            if name == own || (defined_at.contains_key(name) && !seen.iter().any(|s| s == name)) {
                seen.push(name.to_owned());
                let mut longer = chain.clone();
                longer.push(name.to_owned());
                chains.push(longer);
            }
        }
    }
    None
}

/// Checks criteria, figures, overrides and recalls against the names of the note.
pub(super) fn check_uses(material: &Material, kinds: &BTreeMap<String, Kind>, diagnostics: &mut Diagnostics) {
    let worksheet = &material.worksheet;
    let conditions: Vec<&str> =
        worksheet.conditions.iter().map(|condition| condition.name.value.as_str()).collect();
    let mut known_condition = |spot: &crate::worksheet::Spot<String>| {
        if !conditions.contains(&spot.value.as_str()) {
            diagnostics.push(
                Diagnostic::error(&spot.place, format!("there is no condition `{}`", spot.value))
                    .expected(if conditions.is_empty() {
                        "a `conditions` block that names it".to_owned()
                    } else {
                        format!("one of {}", conditions.join(", "))
                    })
                    .nearest(&spot.value, conditions.iter().copied()),
            );
        }
    };
    worksheet.derivation.iter().filter_map(|line| line.condition.as_ref()).for_each(&mut known_condition);
    worksheet.acceptance.iter().flat_map(|line| &line.conditions).for_each(&mut known_condition);
    worksheet.figures.iter().filter_map(|figure| figure.condition.as_ref()).for_each(&mut known_condition);
    for criterion in &worksheet.acceptance {
        match &criterion.what {
            CriterionKind::Relation(relation) => {
                diagnostics_of(relation_kind(relation, kinds), diagnostics);
            }
            CriterionKind::State { designator, .. } => {
                let transistors = || {
                    let all = material.network.elements.iter();
                    all.filter(|e| matches!(e.kind, ElementKind::Npn | ElementKind::Pnp))
                };
                if !transistors().any(|element| element.designator == designator.value) {
                    diagnostics.push(
                        Diagnostic::error(
                            &designator.place,
                            format!("`{}` is no transistor of the circuit", designator.value),
                        )
                        .expected("the designator of a transistor")
                        .nearest(&designator.value, transistors().map(|e| e.designator.as_str())),
                    );
                }
            }
        }
    }
    for figure in &worksheet.figures {
        if let FigureKind::Sweep { plot, .. } = &figure.kind {
            let found: Vec<_> = plot
                .iter()
                .filter_map(|formula| diagnostics_of(kind_of(formula, kinds), diagnostics))
                .collect();
            if found.iter().any(|kind| *kind != found[0]) {
                diagnostics.push(
                    Diagnostic::error(&figure.place, "the results of one figure have different dimensions")
                        .expected("results that share one axis"),
                );
            }
        }
    }
    for condition in &worksheet.conditions {
        for (name, quantity) in &condition.overrides {
            let Some(input) = material.inputs().into_iter().find(|input| input.symbol == name.value) else {
                let symbols: Vec<String> = material.inputs().into_iter().map(|input| input.symbol).collect();
                diagnostics.push(
                    Diagnostic::error(
                        &name.place,
                        format!("`{}` is no basis value of this note", name.value),
                    )
                    .expected("a basis value, a designator, or one of normal, lasts")
                    .nearest(&name.value, symbols.iter().map(String::as_str)),
                );
                continue;
            };
            if input.kind.dimension != quantity.kind.dimension {
                diagnostics.push(
                    Diagnostic::error(&name.place, format!("`{}` is given in another dimension", name.value))
                        .expected(format!("a value in {}", input.unit.symbol)),
                );
            }
        }
        for (name, state) in &condition.states {
            let Some(element) = material.network.elements.iter().find(|e| e.designator == name.value) else {
                let all = material.network.elements.iter().map(|e| e.designator.as_str());
                diagnostics.push(
                    Diagnostic::error(&name.place, format!("there is no element `{}`", name.value))
                        .expected("a designator of the circuit")
                        .nearest(&name.value, all),
                );
                continue;
            };
            if state.value == crate::worksheet::ElementState::Cold && element.cold.is_none() {
                diagnostics.push(
                    Diagnostic::error(&state.place, format!("{} has no cold resistance", name.value))
                        .expected("`cold:` in its record in the circuit block"),
                );
            }
        }
    }
    let criteria: Vec<&str> = worksheet.acceptance.iter().map(|line| line.label.value.as_str()).collect();
    for recall in &worksheet.recalls {
        for name in &recall.names {
            if !kinds.contains_key(&name.value) {
                diagnostics.push(
                    Diagnostic::error(&name.place, format!("unknown name `{}`", name.value))
                        .expected("a basis value, a line of the derivation, or a result of the circuit")
                        .nearest(&name.value, kinds.keys().map(String::as_str)),
                );
            }
        }
        for label in &recall.criteria {
            if !criteria.contains(&label.value.as_str()) {
                diagnostics.push(
                    Diagnostic::error(&label.place, format!("there is no criterion `{}`", label.value))
                        .expected("the label of a line of the acceptance block")
                        .nearest(&label.value, criteria.iter().copied()),
                );
            }
        }
    }
}

pub(super) fn kind_of(formula: &Formula, kinds: &BTreeMap<String, Kind>) -> Result<Kind, Diagnostics> {
    formula.kind(&|name| kinds.get(name).copied(), &mut kinds.keys().map(String::as_str))
}

pub(super) fn relation_kind(
    relation: &Relation,
    kinds: &BTreeMap<String, Kind>,
) -> Result<Kind, Diagnostics> {
    relation.kind(&|name| kinds.get(name).copied(), &mut kinds.keys().map(String::as_str))
}

pub(super) fn diagnostics_of<T, E: Into<Diagnostics>>(
    result: Result<T, E>,
    diagnostics: &mut Diagnostics,
) -> Option<T> {
    result.map_err(|errors| diagnostics.extend(errors.into())).ok()
}
