//! Criteria and tabulated results: the worst of all cases, what it leans on, and the verdict.

use std::cell::RefCell;
use std::collections::BTreeMap;

use super::cases::{self, Case, Gap, Stated};
use super::compile::{Compiled, judged_by};
use super::findings::{CriterionFinding, End, Established, ResultFinding, SpreadFinding, Verdict};
use super::response::Moves;
use crate::fit::Bound;
use crate::quantity::{Kind, Origin, Shown, Unit};
use crate::solve::Thermal;
use crate::spread::{self, Corner, Method, Miss, Response};
use crate::worksheet::{CriterionKind, CriterionLine, Over};

/// A gap matters to a criterion if missing it moves the margin by more than this share of the margin.
const SHARE_OF_MARGIN: f64 = 0.1;
/// A gap matters to a tabulated end if missing it moves the value by more than this share of it.
const SHARE_OF_VALUE: f64 = 0.01;

/// What happens to all outputs when a gap at a point is missed.
type Missed = (Gap, Vec<Result<f64, Miss>>);

/// A case and the bits of a point of its space.
type Visited = (usize, Vec<u64>);

/// Judges against all cases of a note; keeps what it evaluated, because many results share a corner.
pub(super) struct Judge<'a> {
    pub compiled: &'a Compiled<'a>,
    pub cases: &'a [Case<'a>],
    pub conditions: &'a [Stated<'a>],
    missed: RefCell<BTreeMap<Visited, std::rc::Rc<Vec<Missed>>>>,
}

/// One end of one output in one case.
#[derive(Clone)]
pub(super) struct Found {
    pub case: usize,
    pub value: f64,
    pub at: Vec<f64>,
    pub established: Established,
    pub matters: Vec<usize>,
    /// How many of these tell, from the first.
    pub telling: usize,
}

/// What a verdict rests on.
pub(super) struct Ruling {
    pub verdict: Verdict,
    pub worst: Option<Found>,
    pub reason: Option<String>,
}

impl<'a> Judge<'a> {
    pub fn new(compiled: &'a Compiled<'a>, cases: &'a [Case<'a>], conditions: &'a [Stated<'a>]) -> Judge<'a> {
        Judge { compiled, cases, conditions, missed: RefCell::default() }
    }

    /// The lowest (or highest) value of an output over the cases of some conditions, or why there is none.
    pub fn end(&self, output: usize, highest: bool, wanted: impl Fn(usize) -> bool) -> Result<Found, String> {
        let mut best: Option<Found> = None;
        for (index, case) in self.cases.iter().enumerate().filter(|(_, case)| wanted(case.condition)) {
            let range = &case.ranges[output];
            if let Some((miss, _)) = &range.missing {
                return Err(reason(*miss, self.conditions[case.condition].name, case.thermal_name()));
            }
            let Some(end) = (if highest { &range.max } else { &range.min }) else {
                return Err(reason(
                    Miss::NotConverged,
                    self.conditions[case.condition].name,
                    case.thermal_name(),
                ));
            };
            let better = best
                .as_ref()
                .is_none_or(|best| if highest { end.value > best.value } else { end.value < best.value });
            if better {
                best = Some(Found {
                    case: index,
                    value: end.value,
                    at: end.at.clone(),
                    established: established(end.method),
                    matters: end.matters.clone(),
                    telling: end.telling,
                });
            }
        }
        best.ok_or_else(|| "no condition asks for it".to_owned())
    }

    /// The nominal value of an output in thermal equilibrium, worst (lowest) over some conditions.
    fn nominal(&self, output: usize, wanted: impl Fn(usize) -> bool) -> Result<Found, String> {
        let mut best: Option<Found> = None;
        let settled =
            |case: &Case<'_>| case.response.thermal == Thermal::Equilibrium && wanted(case.condition);
        for (index, case) in self.cases.iter().enumerate().filter(|(_, case)| settled(case)) {
            let value = case.ranges[output]
                .nominal
                .map_err(|miss| reason(miss, self.conditions[case.condition].name, case.thermal_name()))?;
            if best.as_ref().is_none_or(|best| value < best.value) {
                best = Some(Found {
                    case: index,
                    value,
                    at: case.response.nominal(),
                    established: Established::Exact,
                    matters: Vec::new(),
                    telling: 0,
                });
            }
        }
        best.ok_or_else(|| "no condition asks for it".to_owned())
    }

    /// Another output at a point that was found.
    pub fn at(&self, found: &Found, output: usize) -> Option<f64> {
        self.cases[found.case].response.disturbed(&found.at, &[]).get(output)?.ok()
    }

    fn missed(&self, found: &Found) -> std::rc::Rc<Vec<Missed>> {
        let key = (found.case, found.at.iter().map(|value| value.to_bits()).collect::<Vec<_>>());
        if let Some(known) = self.missed.borrow().get(&key) {
            return known.clone();
        }
        let case = &self.cases[found.case];
        let all = cases::gaps(self.compiled, case, &found.at)
            .into_iter()
            .map(|gap| {
                let outputs = case.response.disturbed(&found.at, &[(gap.element, gap.disturbance)]);
                (gap, outputs)
            })
            .collect();
        let all = std::rc::Rc::new(all);
        self.missed.borrow_mut().insert(key, std::rc::Rc::clone(&all));
        all
    }

    /// The rows to get, where missing one would move the margin by more than its share (or turn a violation).
    pub fn leans_on_gaps(&self, found: &Found, margin: usize) -> Option<String> {
        let mut wanted: Vec<String> = Vec::new();
        for (gap, outputs) in self.missed(found).iter() {
            let matters = match outputs.get(margin) {
                Some(Ok(moved)) if found.value >= 0.0 => found.value - moved > SHARE_OF_MARGIN * found.value,
                Some(Ok(moved)) => *moved >= 0.0,
                // What cannot be solved with the gap open is not shown without it either.
                _ => found.value >= 0.0,
            };
            if matters && !wanted.contains(&gap.wanted) {
                wanted.push(gap.wanted.clone());
            }
        }
        (!wanted.is_empty()).then(|| format!("no row bounds it; get {}", wanted.join("; ")))
    }

    /// How many bounds that are assumptions or from memory a margin leans on at a point.
    pub fn weak_bounds(&self, found: &Found, margin: usize) -> usize {
        let case = &self.cases[found.case];
        let mut count = 0;
        for (i, moves) in case.response.moves().iter().enumerate() {
            if !found.matters.contains(&i) {
                continue;
            }
            count += usize::from(match *moves {
                Moves::Input(input) => is_weak(&self.compiled.inputs[input]),
                Moves::Device(element, coordinate) => {
                    let element = &self.compiled.network().elements[element];
                    let axis =
                        self.compiled.material.model_of(element).and_then(|model| model.axes.get(coordinate));
                    axis.is_some_and(|axis| {
                        let bound = if found.at[i] < 0.0 { &axis.low } else { &axis.high };
                        matches!(bound, Bound::Weak { .. })
                    })
                }
            });
        }
        for (input, record) in self.compiled.inputs.iter().enumerate() {
            let varies = case.response.moves().contains(&Moves::Input(input));
            if !varies && is_weak(record) && case.response.depends_on(&found.at, input, margin) {
                count += 1;
            }
        }
        count
    }

    /// The verdict on an output that must not be negative. `scale` is the size of what is compared.
    pub fn rule(
        &self,
        margin: usize,
        over: Over,
        wanted: impl Fn(usize) -> bool,
        scale: impl Fn(&Found) -> f64,
    ) -> Ruling {
        let worst = match over {
            Over::Extremes => self.end(margin, false, &wanted),
            Over::Nominal => self.nominal(margin, &wanted),
        };
        let worst = match worst {
            Ok(worst) => worst,
            Err(reason) => {
                // Something has no value; a violation elsewhere is confirmed all the same.
                let violating = self.any_violation(margin, over, &wanted);
                return match violating {
                    Some(found) => self.judged(margin, found, &scale),
                    None => Ruling {
                        verdict: Verdict::NotShown { reason: reason.clone() },
                        worst: None,
                        reason: Some(reason),
                    },
                };
            }
        };
        self.judged(margin, worst, &scale)
    }

    fn judged(&self, margin: usize, worst: Found, scale: &impl Fn(&Found) -> f64) -> Ruling {
        let case = &self.cases[worst.case];
        let not_shown = |worst: Found, reason: String| Ruling {
            verdict: Verdict::NotShown { reason: reason.clone() },
            worst: Some(worst),
            reason: Some(reason),
        };
        if !spread::margin_is_decided(worst.value, scale(&worst)) {
            return not_shown(worst, "the margin lies inside the numerical error".to_owned());
        }
        if let Some(reason) = self.leans_on_gaps(&worst, margin) {
            return not_shown(worst, reason);
        }
        if worst.value < 0.0 && case.bound_only && case.response.thermal == Thermal::Equilibrium {
            let condition = &self.conditions[case.condition];
            let lasts = condition.lasts.map_or("", |quantity| quantity.text.as_str());
            return not_shown(
                worst,
                format!(
                    "{} is over after {lasts}, before thermal equilibrium; get a row Z_th(j-a) for a pulse of at \
                     least {lasts}",
                    condition.name
                ),
            );
        }
        let verdict = if worst.value < 0.0 {
            Verdict::NotMet
        } else {
            match self.weak_bounds(&worst, margin) {
                0 => Verdict::Met,
                count => Verdict::MetOnAssumptions { count },
            }
        };
        Ruling { verdict, worst: Some(worst), reason: None }
    }

    fn any_violation(&self, margin: usize, over: Over, wanted: &impl Fn(usize) -> bool) -> Option<Found> {
        let mut best: Option<Found> = None;
        for condition in (0..self.conditions.len()).filter(|condition| wanted(*condition)) {
            let found = match over {
                Over::Extremes => self.end(margin, false, |c| c == condition),
                Over::Nominal => self.nominal(margin, |c| c == condition),
            };
            if let Ok(found) = found
                && found.value < 0.0
                && best.as_ref().is_none_or(|best| found.value < best.value)
            {
                best = Some(found);
            }
        }
        best
    }

    /// An end as findings show it.
    pub fn shown(&self, found: Option<&Found>, value: Shown) -> End {
        match found {
            Some(found) => {
                let case = &self.cases[found.case];
                End {
                    value,
                    corner: case.corner(self.compiled, found),
                    condition: self.conditions[case.condition].name.to_owned(),
                    thermal: case.thermal_name().to_owned(),
                    established: found.established,
                }
            }
            None => End {
                value,
                corner: Corner::default(),
                condition: String::new(),
                thermal: String::new(),
                established: Established::Searched,
            },
        }
    }

    /// What a reader should know of an output's behaviour over the space: interior extremes, axes along which it is not
    /// monotone, and regions that change between corners.
    pub fn flags(&self, output: usize, wanted: impl Fn(usize) -> bool) -> Vec<String> {
        let mut inside: Vec<String> = Vec::new();
        let mut turning: Vec<String> = Vec::new();
        for case in self.cases.iter().filter(|case| wanted(case.condition)) {
            let Some(range) = case.ranges.get(output) else { continue };
            for (axes, names) in [(&range.interior, &mut inside), (&range.non_monotone, &mut turning)] {
                for &axis in axes {
                    let name = &case.response.axes()[axis].name;
                    if !names.contains(name) {
                        names.push(name.clone());
                    }
                }
            }
        }
        turning.retain(|name| !inside.contains(name));
        let mut flags = Vec::new();
        if !inside.is_empty() {
            flags.push(format!("extreme inside the range of {}", inside.join(", ")));
        }
        if !turning.is_empty() {
            flags.push(format!("not monotone along {}", turning.join(", ")));
        }
        flags
    }

    /// Transistors whose region differs between corners, in words, one condition at a time.
    pub fn region_changes(&self, wanted: impl Fn(usize) -> bool) -> Vec<String> {
        let mut changes = Vec::new();
        let transistors: Vec<&str> = self
            .compiled
            .network()
            .elements
            .iter()
            .filter(|e| matches!(e.kind, crate::circuit::ElementKind::Npn | crate::circuit::ElementKind::Pnp))
            .map(|e| e.designator.as_str())
            .collect();
        for (index, condition) in self.conditions.iter().enumerate().filter(|(index, _)| wanted(*index)) {
            let mut met: Vec<std::collections::BTreeSet<&'static str>> =
                vec![Default::default(); transistors.len()];
            for case in self.cases.iter().filter(|case| case.condition == index) {
                let codes = case.ranges.first().map(|range| range.regions.as_slice()).unwrap_or_default();
                for code in codes.iter().map(|region| region.code).filter(|code| *code != u64::MAX) {
                    for (i, regions) in met.iter_mut().rev().enumerate() {
                        regions.insert(super::response::region_name((code >> (2 * i)) & 3));
                    }
                }
            }
            for (name, regions) in transistors.iter().zip(&met) {
                if regions.len() > 1 {
                    let list: Vec<&str> = regions.iter().copied().collect();
                    changes.push(format!(
                        "{name} is {} between corners in {}",
                        list.join(" or "),
                        condition.name
                    ));
                }
            }
        }
        changes
    }
}

/// An input whose spread is an assumption: from memory or assumed, without source, or taken as exact without a clause
/// or a standard that says so.
pub(super) fn is_weak(input: &super::findings::Input) -> bool {
    match &input.source {
        None => true,
        Some(source) if source.origin.is_weak() => true,
        Some(source) => !input.bounded && !matches!(source.origin, Origin::Standard | Origin::Specification),
    }
}

fn established(method: Method) -> Established {
    match method {
        Method::Vertices => Established::Vertices,
        Method::Monotone => Established::Monotone,
        Method::Searched => Established::Searched,
        Method::Exact => Established::Exact,
    }
}

/// Why there is no value, in words.
pub(super) fn reason(miss: Miss, condition: &str, thermal: &str) -> String {
    let why = match miss {
        Miss::NotConverged => "the solver found no operating point that it could confirm",
        Miss::Undefined => "the result has no meaning in this state of the circuit",
        Miss::NotFinite => "the formula gives no finite number",
        Miss::ThermalRunaway => "a device finds no thermal equilibrium",
        Miss::NoThermalResistance => {
            "no thermal resistance is known; get R_th(j-a), or state r_th with the element"
        }
    };
    format!("{why} somewhere in {condition}, {thermal}")
}

/// Which conditions a criterion must hold in.
pub(super) fn wanted<'j>(
    conditions: &'j [Stated<'j>],
    line: &'j CriterionLine,
) -> impl Fn(usize) -> bool + 'j {
    move |index| {
        line.conditions.is_empty() || line.conditions.iter().any(|c| c.value == conditions[index].name)
    }
}

/// All criteria of the note, judged; and those by several methods of which that was asked.
pub(super) fn criteria(judge: &Judge<'_>) -> (Vec<CriterionFinding>, Vec<SpreadFinding>) {
    let lines = &judge.compiled.material.worksheet.acceptance;
    let mut spreads = Vec::new();
    let criteria = lines.iter().zip(&judge.compiled.criteria).map(|(line, outputs)| {
        let (mut finding, ruling) = criterion(judge, line, outputs);
        spreads.extend(super::odds::beside(judge, line, outputs, &ruling, &mut finding));
        finding
    });
    (criteria.collect(), spreads)
}

fn criterion(
    judge: &Judge<'_>,
    line: &CriterionLine,
    outputs: &super::compile::CriterionOutputs,
) -> (CriterionFinding, Ruling) {
    let compiled = judge.compiled;
    let holds_in = wanted(judge.conditions, line);
    let size = |found: &Found| {
        let value = |output: usize| judge.at(found, output).unwrap_or(0.0).abs();
        match outputs.right {
            Some(right) => value(outputs.left) + value(right),
            None => 1.0,
        }
    };
    let ruling = judge.rule(outputs.margin, line.over, &holds_in, size);
    let kind = compiled.output_kinds[outputs.left];
    let left = ruling.worst.as_ref().and_then(|found| judge.at(found, outputs.left));
    let right = ruling.worst.as_ref().and_then(|found| judge.at(found, outputs.right?));
    let unknown = || Shown::NotShown(ruling.reason.clone().unwrap_or_else(|| "not shown".to_owned()));
    let shown = |value: Option<f64>| value.map_or_else(unknown, Shown::Value);
    let (relation, math, spoken, unit) = match &line.what {
        CriterionKind::Relation(relation) => (
            relation.operator.sign().to_owned(),
            Some(crate::formula::relation_symbols(relation)),
            crate::formula::spoken_relation(relation),
            crate::formula::written_unit(&relation.right)
                .filter(|unit| unit.kind.dimension == kind.dimension)
                .unwrap_or_else(|| unit_of(compiled, kind, [left, right])),
        ),
        CriterionKind::State { designator, region } => {
            let name = format!("{region:?}").to_lowercase();
            let judged = judged_by(*region);
            (
                name.clone(),
                None,
                format!("{} {name}, judged by {judged}", designator.value),
                unit_of(compiled, kind, [left, None]),
            )
        }
    };
    let nominal = judge.nominal(outputs.left, &holds_in);
    let limit = match &line.what {
        CriterionKind::Relation(_) => shown(right),
        CriterionKind::State { region: crate::worksheet::Region::Saturated, .. } => Shown::Value(1.0),
        CriterionKind::State { .. } => Shown::NotShown("a state has no single limit".to_owned()),
    };
    let mut flags = judge.flags(outputs.margin, &holds_in);
    if matches!(line.what, CriterionKind::State { .. }) {
        flags.extend(judge.region_changes(&holds_in));
    }
    let finding = CriterionFinding {
        label: line.label.value.clone(),
        text: line.text.clone(),
        math,
        spoken,
        over: match line.over {
            Over::Nominal => "nominal".to_owned(),
            Over::Extremes => "extremes".to_owned(),
        },
        conditions: line.conditions.iter().map(|condition| condition.value.clone()).collect(),
        clause: line.clause.as_ref().map(|clause| clause.value.clone()),
        safety: line.safety,
        kind,
        unit,
        relation,
        worst: judge.shown(ruling.worst.as_ref(), shown(left)),
        limit,
        margin: shown(ruling.worst.as_ref().map(|found| found.value)),
        nominal: match nominal {
            Ok(found) => Shown::Value(found.value),
            Err(reason) => Shown::NotShown(reason),
        },
        verdict: ruling.verdict.clone(),
        coverage: None,
        flags,
        place: line.place.clone(),
    };
    (finding, ruling)
}

pub(super) fn unit_of(compiled: &Compiled<'_>, kind: Kind, values: [Option<f64>; 2]) -> Unit {
    let values: Vec<f64> = values.into_iter().flatten().collect();
    compiled.unit_for(kind, &values)
}

/// The tolerance table: every result in every condition.
pub(super) fn results(judge: &Judge<'_>) -> Vec<ResultFinding> {
    let compiled = judge.compiled;
    let labels: BTreeMap<&str, &str> = compiled
        .material
        .worksheet
        .derivation
        .iter()
        .filter_map(|line| match &line.what {
            crate::worksheet::DerivationKind::Define { name, .. } => {
                Some((name.value.as_str(), line.label.as_str()))
            }
            crate::worksheet::DerivationKind::Assert { .. } => None,
        })
        .collect();
    let mut rows = Vec::new();
    for (symbol, output) in &compiled.results {
        let mut of_symbol = Vec::new();
        let tabulated = |condition: &Stated<'_>| compiled.is_tabulated(symbol, condition.name);
        for (index, condition) in judge.conditions.iter().enumerate().filter(|(_, c)| tabulated(c)) {
            let end = |highest: bool| {
                let found = judge.end(*output, highest, |c| c == index);
                match found {
                    Ok(found) => {
                        let gap = tabulated_gap(judge, &found, *output, highest);
                        let value = gap.map_or(Shown::Value(found.value), Shown::NotShown);
                        judge.shown(Some(&found), value)
                    }
                    Err(reason) => judge.shown(None, Shown::NotShown(reason)),
                }
            };
            let nominal = match judge.nominal(*output, |c| c == index) {
                Ok(found) => Shown::Value(found.value),
                Err(reason) => Shown::NotShown(reason),
            };
            of_symbol.push((condition.name.to_owned(), nominal, end(false), end(true), index));
        }
        let kind = compiled.output_kinds[*output];
        let values: Vec<f64> = of_symbol.iter().filter_map(|row| row.1.value()).collect();
        let unit = compiled.unit_for(kind, &values);
        for (condition, nominal, min, max, index) in of_symbol {
            rows.push(ResultFinding {
                symbol: symbol.clone(),
                label: labels.get(symbol.as_str()).map(|label| (*label).to_owned()),
                condition,
                kind,
                unit: unit.clone(),
                nominal,
                min,
                max,
                flags: judge.flags(*output, |c| c == index),
            });
        }
    }
    rows
}

/// The row to get, where a gap in the bounds would move a tabulated end outward by more than its share.
fn tabulated_gap(judge: &Judge<'_>, found: &Found, output: usize, highest: bool) -> Option<String> {
    let mut wanted: Vec<String> = Vec::new();
    for (gap, outputs) in judge.missed(found).iter() {
        let outward = match outputs.get(output) {
            Some(Ok(moved)) if highest => moved - found.value,
            Some(Ok(moved)) => found.value - moved,
            _ => f64::INFINITY,
        };
        if outward > SHARE_OF_VALUE * found.value.abs() && outward > 1e-12 && !wanted.contains(&gap.wanted) {
            wanted.push(gap.wanted.clone());
        }
    }
    (!wanted.is_empty()).then(|| format!("typical data only; get {}", wanted.join("; ")))
}
