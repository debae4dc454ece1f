//! From what a note says to what can be evaluated: the symbols, their dimensions, and one [`Space`] for all conditions.

use std::collections::BTreeMap;

use super::findings::Input;
use super::material::{Material, aged};
use super::names::{Names, check_order, check_uses, diagnostics_of, kind_of};
use super::response::{ElementTapes, Field, Reading, Space};
use crate::circuit::{Element, ElementKind};
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::fit::Law;
use crate::formula::{Binary, Comparison, Expr, Formula, Relation, Tape};
use crate::part::{Part, RatingQuantity, RowQuantity};
use crate::quantity::{Dimension, Kind, Unit};
use crate::solve::Plan;
use crate::source::Place;
use crate::stress::Demand;
use crate::worksheet::{CriterionKind, DerivationKind, FigureKind, Region};

/// A note ready to be evaluated.
pub(super) struct Compiled<'a> {
    pub material: &'a Material,
    pub inputs: Vec<Input>,
    pub space: Space<'a>,
    /// Kind of every name.
    pub kinds: BTreeMap<String, Kind>,
    /// Slot of every name that is evaluated.
    pub slots: BTreeMap<String, usize>,
    pub criteria: Vec<CriterionOutputs>,
    /// Results to tabulate: symbol, output.
    pub results: Vec<(String, usize)>,
    pub stress: Vec<StressOutputs>,
    /// Outputs of each figure's plotted formulas.
    pub figures: Vec<Vec<usize>>,
    /// Kind of each output.
    pub output_kinds: Vec<Kind>,
}

/// Outputs of one criterion: the margin (positive when met), both sides.
#[derive(Clone, Copy, Debug)]
pub(super) struct CriterionOutputs {
    pub margin: usize,
    pub left: usize,
    /// The limit; a state criterion has none.
    pub right: Option<usize>,
}

/// A stress demand and its outputs: what is observed, the margins to the derated limit and to the rating.
pub(super) struct StressOutputs {
    pub demand: Demand,
    pub observe: usize,
    pub normal: Option<usize>,
    pub fault: Option<usize>,
}

/// Compiles a note, collecting every unknown name and every clash of dimensions.
pub(super) fn compile(material: &Material) -> Result<Compiled<'_>, Diagnostics> {
    let mut diagnostics = Diagnostics::default();
    let names = Names::of(material, &mut diagnostics);
    let mut kinds = names.kinds.clone();
    check_order(material, &mut kinds, &mut diagnostics);
    check_uses(material, &kinds, &mut diagnostics);
    if diagnostics.has_errors() {
        return Err(diagnostics);
    }
    let demands = demands(material);
    let mut readings = Readings { material, found: Vec::new(), index: BTreeMap::new() };
    readings.collect(&demands);
    let inputs = names.inputs;
    let mut slots: BTreeMap<String, usize> =
        inputs.iter().enumerate().map(|(i, input)| (input.symbol.clone(), i)).collect();
    for (name, reading) in &readings.index {
        slots.entry(name.clone()).or_insert(inputs.len() + reading);
    }
    let mut derived = Vec::new();
    for line in &material.worksheet.derivation {
        if let DerivationKind::Define { name, formula } = &line.what {
            let tape = diagnostics_of(formula.compile(&|name| slots.get(name).copied()), &mut diagnostics);
            slots.insert(name.value.clone(), inputs.len() + readings.found.len() + derived.len());
            derived.extend(tape);
        }
    }
    if diagnostics.has_errors() {
        return Err(diagnostics);
    }
    let mut outputs = Outputs {
        slots: &slots,
        kinds: &kinds,
        inputs: inputs.len(),
        readings: readings.found.len(),
        leans: Vec::new(),
        tapes: Vec::new(),
        by_text: BTreeMap::new(),
        output_kinds: Vec::new(),
    };
    outputs.leans_of_derived(&material.worksheet.derivation);
    let criteria = criteria_outputs(material, &mut outputs, &mut diagnostics);
    let results = result_outputs(material, &mut outputs, &mut diagnostics);
    let stress = demands
        .into_iter()
        .filter_map(|demand| stress_outputs(demand, &mut outputs, &mut diagnostics))
        .collect();
    let figures = material
        .worksheet
        .figures
        .iter()
        .map(|figure| match &figure.kind {
            FigureKind::Sweep { plot, .. } => {
                plot.iter().filter_map(|formula| outputs.of(formula, &mut diagnostics)).collect()
            }
            _ => Vec::new(),
        })
        .collect();
    let (tapes, output_kinds) =
        (std::mem::take(&mut outputs.tapes), std::mem::take(&mut outputs.output_kinds));
    let element_tapes = element_tapes(material, &inputs, &slots, &mut diagnostics);
    let plan = Plan::of(&material.network).map_err(|failure| {
        Diagnostics::from(Diagnostic::bare(format!("the circuit cannot be compiled: {failure:?}")))
    })?;
    let ambient = slots.get("T_a").copied().unwrap_or(0);
    if diagnostics.has_errors() {
        return Err(diagnostics);
    }
    let wants_midband = readings.found.iter().any(|reading| {
        matches!(reading, Reading::Gain(_) | Reading::InputResistance(_) | Reading::OutputResistance(_))
    });
    let space = Space {
        network: &material.network,
        plan,
        laws: material.network.elements.iter().map(|element| material.law_of(element)).collect(),
        tapes: element_tapes,
        inputs: inputs.iter().map(|input| (input.symbol.clone(), input.spread)).collect(),
        ages: ages(&inputs),
        ambient,
        signal: material.network.elements.iter().position(|element| element.kind == ElementKind::Signal),
        wants_midband,
        readings: readings.found,
        derived,
        outputs: tapes,
    };
    Ok(Compiled { material, inputs, space, kinds, slots, criteria, results, stress, figures, output_kinds })
}

/// Every rated quantity of every element.
fn demands(material: &Material) -> Vec<Demand> {
    material
        .network
        .elements
        .iter()
        .flat_map(|element| {
            let part = element.part.as_deref().and_then(|name| material.parts.get(name));
            crate::stress::demands(element, part, &material.policy)
        })
        .collect()
}

/// The readings that formulas ask for.
struct Readings<'a> {
    material: &'a Material,
    found: Vec<Reading>,
    index: BTreeMap<String, usize>,
}

impl Readings<'_> {
    fn collect(&mut self, demands: &[Demand]) {
        let worksheet = &self.material.worksheet;
        for line in &worksheet.derivation {
            let names = match &line.what {
                DerivationKind::Define { formula, .. } => formula.names(),
                DerivationKind::Assert { relation, .. } => relation.names(),
            };
            names.into_iter().for_each(|(name, _)| self.add(name));
        }
        for criterion in &worksheet.acceptance {
            match &criterion.what {
                CriterionKind::Relation(relation) => {
                    relation.names().into_iter().for_each(|(name, _)| self.add(name));
                }
                CriterionKind::State { designator, region } => {
                    self.add_state(&designator.value, *region);
                }
            }
        }
        for figure in &worksheet.figures {
            if let FigureKind::Sweep { plot, .. } = &figure.kind {
                plot.iter().flat_map(Formula::names).for_each(|(name, _)| self.add(name));
            }
        }
        worksheet.recalls.iter().flat_map(|recall| &recall.names).for_each(|name| self.add(&name.value));
        for demand in demands {
            if let Ok(formula) = Formula::parse(&demand.observe, &demand.place) {
                formula.names().into_iter().for_each(|(name, _)| self.add(name));
            }
        }
    }

    fn add(&mut self, name: &str) {
        if !self.index.contains_key(name)
            && let Some(reading) = reading(&self.material.network, name)
        {
            self.index.insert(name.to_owned(), self.found.len());
            self.found.push(reading);
        }
    }

    fn add_state(&mut self, designator: &str, region: Region) {
        let Some(element) = self.material.network.elements.iter().position(|e| e.designator == designator)
        else {
            return;
        };
        let inside = inside_name(designator, region);
        if !self.index.contains_key(&inside) {
            self.index.insert(inside, self.found.len());
            self.found.push(Reading::Inside(element, region));
        }
        self.add(&format!("{designator}.{}", judged_by(region)));
    }
}

/// The hidden name of a state's margin; no formula can be written with a blank in a name.
fn inside_name(designator: &str, region: Region) -> String {
    format!("{designator} {region:?}")
}

/// The result that tells a reader how far a transistor is inside a region.
pub(super) fn judged_by(region: Region) -> &'static str {
    match region {
        Region::Saturated => "overdrive",
        Region::Active | Region::Reverse => "V_CB",
        Region::Off => "V_BE",
    }
}

/// What a dotted name reads of the solved circuit.
pub(super) fn reading(network: &crate::circuit::Network, name: &str) -> Option<Reading> {
    let Some((owner, field)) = name.split_once('.') else {
        // A value that is a formula over the basis has no input of its own.
        let element = network.elements.iter().position(|element| element.designator == name)?;
        return Some(Reading::Element(element, Field::Stated));
    };
    if let Some(i) = network.elements.iter().position(|element| element.designator == owner) {
        let transistor = matches!(network.elements[i].kind, ElementKind::Npn | ElementKind::Pnp);
        let field = match field {
            "V" | "V_CE" => Field::Voltage,
            "I" | "I_C" => Field::Current,
            "V_BC" => Field::BaseCollector,
            "P" => Field::Power,
            "R" | "C" | "L" => Field::Value,
            "R_in" => return Some(Reading::InputResistance(i)),
            "V_BE" => Field::BaseEmitter,
            "V_EB" => Field::EmitterBase,
            "V_EC" => Field::EmitterCollector,
            "V_CB" => Field::CollectorBase,
            "I_B" => Field::BaseCurrent,
            "I_E" => Field::EmitterCurrent,
            "T_j" => Field::Temperature,
            "h_FE" => Field::ActiveGain,
            "forced_gain" => Field::ForcedGain,
            "overdrive" => Field::Overdrive,
            "W" => Field::Energy,
            _ => return None,
        };
        let of_transistor = matches!(
            field,
            Field::BaseEmitter
                | Field::EmitterBase
                | Field::EmitterCollector
                | Field::CollectorBase
                | Field::BaseCollector
                | Field::BaseCurrent
                | Field::EmitterCurrent
                | Field::ActiveGain
                | Field::ForcedGain
                | Field::Overdrive
        );
        return (transistor || !of_transistor).then_some(Reading::Element(i, field));
    }
    let node = network.nodes.iter().position(|node| node == owner)?;
    match field {
        "V" => Some(Reading::Node(node)),
        "gain" => Some(Reading::Gain(node)),
        "R_out" => Some(Reading::OutputResistance(node)),
        _ => None,
    }
}

/// The outputs of a note, each formula once.
struct Outputs<'a> {
    slots: &'a BTreeMap<String, usize>,
    kinds: &'a BTreeMap<String, Kind>,
    inputs: usize,
    readings: usize,
    /// Readings that each derived result leans on, in order.
    leans: Vec<Vec<usize>>,
    tapes: Vec<(Tape, Vec<usize>)>,
    by_text: BTreeMap<String, usize>,
    output_kinds: Vec<Kind>,
}

impl Outputs<'_> {
    fn leans_of_derived(&mut self, lines: &[crate::worksheet::DerivationLine]) {
        for line in lines {
            if let DerivationKind::Define { formula, .. } = &line.what {
                let leans = self.leans_of(formula.names().into_iter().map(|(name, _)| name));
                self.leans.push(leans);
            }
        }
    }

    fn leans_of<'n>(&self, names: impl Iterator<Item = &'n str>) -> Vec<usize> {
        let mut found = Vec::new();
        for slot in names.filter_map(|name| self.slots.get(name)) {
            let after_inputs = slot.wrapping_sub(self.inputs);
            if after_inputs < self.readings {
                found.push(after_inputs);
            } else if let Some(leans) = self.leans.get(after_inputs.wrapping_sub(self.readings)) {
                found.extend(leans);
            }
        }
        found.sort_unstable();
        found.dedup();
        found
    }

    fn of(&mut self, formula: &Formula, diagnostics: &mut Diagnostics) -> Option<usize> {
        if let Some(output) = self.by_text.get(&formula.text) {
            return Some(*output);
        }
        let kind = diagnostics_of(kind_of(formula, self.kinds), diagnostics)?;
        let output = self.push(formula, kind, diagnostics)?;
        self.by_text.insert(formula.text.clone(), output);
        Some(output)
    }

    fn push(&mut self, formula: &Formula, kind: Kind, diagnostics: &mut Diagnostics) -> Option<usize> {
        let tape = diagnostics_of(formula.compile(&|name| self.slots.get(name).copied()), diagnostics)?;
        let leans = self.leans_of(formula.names().into_iter().map(|(name, _)| name));
        self.tapes.push((tape, leans));
        self.output_kinds.push(kind);
        Some(self.tapes.len() - 1)
    }

    fn of_slot(
        &mut self,
        name: &str,
        kind: Kind,
        place: &Place,
        diagnostics: &mut Diagnostics,
    ) -> Option<usize> {
        let expr = Expr::Name { name: name.to_owned(), place: place.clone() };
        self.push(&Formula { expr, text: name.to_owned(), place: place.clone() }, kind, diagnostics)
    }
}

fn criteria_outputs(
    material: &Material,
    outputs: &mut Outputs<'_>,
    diagnostics: &mut Diagnostics,
) -> Vec<CriterionOutputs> {
    let mut found = Vec::new();
    for criterion in &material.worksheet.acceptance {
        let made = match &criterion.what {
            CriterionKind::Relation(relation) => relation_outputs(relation, outputs, diagnostics),
            CriterionKind::State { designator, region } => {
                let margin = outputs.of_slot(
                    &inside_name(&designator.value, *region),
                    Kind::NONE,
                    &criterion.place,
                    diagnostics,
                );
                let judged = format!("{}.{}", designator.value, judged_by(*region));
                let kind = outputs.kinds.get(&judged).copied().unwrap_or(Kind::NONE);
                let left = outputs.of_slot(&judged, kind, &criterion.place, diagnostics);
                margin.zip(left).map(|(margin, left)| CriterionOutputs { margin, left, right: None })
            }
        };
        found.extend(made);
    }
    found
}

fn relation_outputs(
    relation: &Relation,
    outputs: &mut Outputs<'_>,
    diagnostics: &mut Diagnostics,
) -> Option<CriterionOutputs> {
    let side =
        |expr: &Expr| Formula { expr: expr.clone(), text: String::new(), place: relation.place.clone() };
    let (left, right) = (side(&relation.left), side(&relation.right));
    let kind = diagnostics_of(kind_of(&left, outputs.kinds), diagnostics)?;
    let (greater, lesser) = match relation.operator {
        Comparison::Less | Comparison::LessEqual => (&relation.right, &relation.left),
        Comparison::Greater | Comparison::GreaterEqual => (&relation.left, &relation.right),
    };
    let margin = side(&Expr::Binary {
        operator: Binary::Subtract,
        left: Box::new(greater.clone()),
        right: Box::new(lesser.clone()),
        place: relation.place.clone(),
    });
    Some(CriterionOutputs {
        margin: outputs.push(&margin, Kind::of(kind.dimension), diagnostics)?,
        left: outputs.push(&left, kind, diagnostics)?,
        right: Some(outputs.push(&right, kind, diagnostics)?),
    })
}

fn stress_outputs(
    demand: Demand,
    outputs: &mut Outputs<'_>,
    diagnostics: &mut Diagnostics,
) -> Option<StressOutputs> {
    let mut output = |text: &str| {
        let formula = diagnostics_of(Formula::parse(text, &demand.place), diagnostics)?;
        outputs.of(&formula, diagnostics)
    };
    let observe = output(&demand.observe)?;
    let normal = demand.margin(true).and_then(|text| output(&text));
    let fault = demand.margin(false).and_then(|text| output(&text));
    Some(StressOutputs { demand, observe, normal, fault })
}

/// The results to tabulate: what the derivation defines, and what criteria and prose name of the circuit.
fn result_outputs(
    material: &Material,
    outputs: &mut Outputs<'_>,
    diagnostics: &mut Diagnostics,
) -> Vec<(String, usize)> {
    let worksheet = &material.worksheet;
    let mut wanted: Vec<(String, Place)> = Vec::new();
    for line in &worksheet.derivation {
        if let DerivationKind::Define { name, .. } = &line.what {
            wanted.push((name.value.clone(), name.place.clone()));
        }
    }
    for criterion in &worksheet.acceptance {
        if let CriterionKind::Relation(relation) = &criterion.what {
            wanted.extend(relation.names().into_iter().map(|(name, place)| (name.to_owned(), place.clone())));
        }
    }
    for name in worksheet.recalls.iter().flat_map(|recall| &recall.names) {
        wanted.push((name.value.clone(), name.place.clone()));
    }
    let mut results: Vec<(String, usize)> = Vec::new();
    for (name, place) in wanted {
        let is_input = outputs.slots.get(&name).is_some_and(|slot| *slot < outputs.inputs);
        if is_input || results.iter().any(|(known, _)| *known == name) {
            continue;
        }
        let kind = outputs.kinds.get(&name).copied().unwrap_or(Kind::NONE);
        if let Some(output) = outputs.of_slot(&name, kind, &place, diagnostics) {
            outputs.by_text.entry(name.clone()).or_insert(output);
            results.push((name, output));
        }
    }
    results
}

fn element_tapes(
    material: &Material,
    inputs: &[Input],
    slots: &BTreeMap<String, usize>,
    diagnostics: &mut Diagnostics,
) -> Vec<ElementTapes> {
    let input_slot = |name: &str| slots.get(name).copied().filter(|slot| *slot < inputs.len());
    let mut tape = |formula: &Option<Formula>| {
        formula.as_ref().and_then(|formula| diagnostics_of(formula.compile(&input_slot), diagnostics))
    };
    let mut all = Vec::new();
    for element in &material.network.elements {
        let part = element.part.as_deref().and_then(|name| material.parts.get(name));
        let (coefficient, coefficient_bound) = coefficients(element, part);
        let own_input = inputs.iter().position(|input| input.symbol == element.designator);
        all.push(ElementTapes {
            value: tape(&element.value),
            resistance: tape(&element.resistance),
            cold: tape(&element.cold),
            inductance: tape(&element.inductance),
            r_th: tape(&element.r_th),
            part_r_th: part
                .and_then(|part| part.rating(RatingQuantity::JunctionToAmbient))
                .map(|rating| rating.value),
            coefficient,
            coefficient_bound,
            tcr: tape(&element.tcr),
            own_input,
            ageing: inputs
                .iter()
                .position(|input| aged(&input.symbol) == Some(&element.designator))
                .filter(|_| own_input.is_none()),
        });
    }
    all
}

/// Inputs that drift with age, each with its drift.
fn ages(inputs: &[Input]) -> Vec<(usize, usize)> {
    let drifts = inputs.iter().enumerate().filter_map(|(drift, input)| Some((aged(&input.symbol)?, drift)));
    drifts
        .filter_map(|(name, drift)| Some((inputs.iter().position(|input| input.symbol == name)?, drift)))
        .collect()
}

/// The temperature coefficient that every specimen has, and the bound of what may go either way (1/K).
fn coefficients(element: &Element, part: Option<&Part>) -> (f64, f64) {
    if element.kind == ElementKind::Filament {
        // A filament's resistance is set by its own glow, hot or cold, not by the ambient temperature.
        return (0.0, 0.0);
    }
    let Some(row) = part.and_then(|part| part.rows_of(RowQuantity::ResistanceCoefficient).next()) else {
        return (0.0, 0.0);
    };
    match (row.min, row.typ, row.max) {
        (Some(min), _, Some(max)) => ((min + max) / 2.0, (max - min) / 2.0),
        (_, Some(typ), _) => (typ, 0.0),
        (None, None, Some(max)) => (0.0, max.abs()),
        (Some(min), None, None) => (0.0, min.abs()),
        (None, None, None) => (0.0, 0.0),
    }
}

impl Compiled<'_> {
    pub fn network(&self) -> &crate::circuit::Network {
        &self.material.network
    }

    /// The part record of an element.
    pub fn part_of(&self, element: usize) -> Option<&Part> {
        self.network().elements[element].part.as_deref().and_then(|name| self.material.parts.get(name))
    }

    /// The fitted law of an element.
    pub fn law_of(&self, element: usize) -> Option<&Law> {
        self.space.laws[element]
    }

    /// Whether a result is tabulated in a condition: one that the derivation defines for a condition belongs there only, and
    /// where prose asks for it by `at("condition", ...)`; anything else has a meaning everywhere.
    pub fn is_tabulated(&self, symbol: &str, condition: &str) -> bool {
        let worksheet = &self.material.worksheet;
        let defined_in = worksheet.derivation.iter().find_map(|line| match &line.what {
            DerivationKind::Define { name, .. } if name.value == symbol => line.condition.as_ref(),
            _ => None,
        });
        let asked = |condition: &str| {
            worksheet.recalls.iter().any(|recall| {
                recall.names.iter().any(|name| name.value == symbol)
                    && recall.source.contains(&format!("\"{condition}\""))
            })
        };
        defined_in.is_none_or(|own| own.value == condition) || asked(condition)
    }

    /// Unit in which a name's value is printed: as written for an input, by size for a result.
    pub fn unit_of_name(&self, name: &str, value: f64) -> Unit {
        match self.inputs.iter().find(|input| input.symbol == name) {
            Some(input) => input.unit.clone(),
            None => self.unit_for(self.kinds.get(name).copied().unwrap_or(Kind::NONE), &[value]),
        }
    }

    /// The unit in which results of a kind are printed when nothing else was asked: that of the largest value.
    pub fn unit_for(&self, kind: Kind, values: &[f64]) -> Unit {
        crate::quantity::preferred_unit(values, kind)
    }

    pub fn celsius(&self) -> Unit {
        crate::quantity::preferred_unit(&[], Kind { dimension: Dimension::KELVIN, point: true })
    }
}
