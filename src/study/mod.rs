//! Bundle -> Findings: the one place that knows the order.
//!
//! ```text
//! material   bundle -> what a note is made of: worksheet, parts, models, network, policy
//! names      -> symbols with dimensions, checked wherever they are used
//! compile    -> symbols with dimensions and slots; tapes; what is observed
//! cases      -> every condition, cold and in equilibrium, as a Response, searched for extremes
//! judge      -> criteria and tabulated results; stressed -> stress lines, cautions
//! odds       -> root-sum-square and Monte Carlo beside a criterion, where they are asked for
//! points     -> operating points, steps of the derivation; series -> figures; prose -> recalls
//! ```

mod cases;
mod compile;
mod findings;
mod heat;
mod judge;
mod material;
mod names;
mod odds;
mod points;
mod prose;
mod response;
mod series;
mod stressed;
mod tally;

pub use findings::*;
pub use tally::{Tally, Verdicts};

use crate::diagnostic::Diagnostics;
use crate::numeric::threads;
use crate::solve::Thermal;
use crate::source::Bundle;

/// Studies one note: everything that `path` and the other files of its bundle say.
///
/// # Errors
/// Everything that is wrong with the inputs, each with its place. A result that cannot be confirmed is no error; it is NOT
/// SHOWN in the findings.
pub fn study(bundle: &Bundle, path: &str) -> Result<Findings, Diagnostics> {
    let material = material::Material::gather(bundle, path)?;
    let compiled = compile::compile(&material)?;
    let conditions = cases::stated(&compiled);
    let cases = cases::search(&compiled, &conditions);
    let judge = judge::Judge::new(&compiled, &cases, &conditions);
    let mut diagnostics = material.warnings.clone();
    let (criteria, spreads) = judge::criteria(&judge);
    let results = judge::results(&judge);
    let stress = stressed::lines(&judge);
    let heat = heat::lines(&judge);
    let cautions = stressed::cautions(&judge, &criteria, &stress, &heat);
    let first = conditions.first().map_or("", |condition| condition.name);
    let body = prose::body(&compiled, &criteria, &results, first, &mut diagnostics);
    let derivation = points::steps(&compiled, &cases, &conditions, &mut diagnostics);
    let figures = figures(&compiled, &cases, &conditions, &mut diagnostics);
    if diagnostics.has_errors() {
        return Err(diagnostics);
    }
    let head = &material.worksheet.head;
    let text = |spot: &Option<crate::worksheet::Spot<String>>| spot.as_ref().map(|spot| spot.value.clone());
    Ok(Findings {
        schema: SCHEMA,
        program: env!("CARGO_PKG_VERSION").to_owned(),
        note: NoteHead {
            organisation: material.settings.organisation.clone(),
            note: head.note.value.clone(),
            title: head.title.value.clone(),
            author: head.author.value.clone(),
            checker: text(&head.checker),
            approver: text(&head.approver),
            revision: head.revision.value.clone(),
            date: head.date.value.clone(),
            language: material.settings.language.clone(),
            paper: material.settings.paper.clone(),
            logo: text(&material.settings.logo),
            revisions: head.revisions.clone(),
        },
        body,
        inputs: compiled.inputs.clone(),
        conditions: conditions.iter().map(condition_finding).collect(),
        elements: points::elements(&compiled),
        points: points::operating_points(&compiled, &cases, &conditions),
        trace: trace(&material, &criteria),
        results,
        derivation,
        criteria,
        heat,
        stress,
        cautions,
        figures,
        models: material.models.values().cloned().collect(),
        parts: material.parts.values().cloned().collect(),
        validity: validity(&material, !spreads.is_empty()),
        spreads,
        warnings: diagnostics,
        files: material.files.clone(),
        digest: material.digest,
    })
}

fn figures(
    compiled: &compile::Compiled<'_>,
    cases: &[cases::Case<'_>],
    conditions: &[cases::Stated<'_>],
    diagnostics: &mut Diagnostics,
) -> Vec<FigureFinding> {
    let requests: Vec<_> = compiled.material.worksheet.figures.iter().zip(&compiled.figures).collect();
    let drawn = threads::on_two(&requests, |(request, outputs)| {
        let wanted = request.condition.as_ref().map(|condition| condition.value.as_str());
        let index = wanted.and_then(|name| conditions.iter().position(|c| c.name == name)).unwrap_or(0);
        let settled = |case: &&cases::Case<'_>| {
            case.condition == index && case.response.thermal == Thermal::Equilibrium
        };
        let case = cases.iter().find(settled)?;
        Some(series::figure(compiled, request, outputs, case))
    });
    let kept = drawn.into_iter().flatten().map(|drawn| {
        drawn.unwrap_or_else(|diagnostic| {
            // A block keeps its number: what cannot be drawn stands as an empty figure with the reason as its title.
            let figure = FigureFinding::not_shown(&diagnostic.message);
            diagnostics.push(diagnostic);
            figure
        })
    });
    kept.collect()
}

fn condition_finding(condition: &cases::Stated<'_>) -> ConditionFinding {
    let mut overrides = Vec::new();
    if let Some(written) = condition.written {
        for (name, quantity) in &written.overrides {
            overrides.push((name.value.clone(), quantity.text.clone()));
        }
        for (name, state) in &written.states {
            overrides.push((name.value.clone(), format!("{:?}", state.value).to_lowercase()));
        }
    }
    ConditionFinding {
        name: condition.name.to_owned(),
        normal: condition.normal,
        lasts: condition.lasts.map(|quantity| quantity.text.clone()),
        overrides,
    }
}

/// Each clause with the criteria that answer it, uncovered clauses first; a criterion's clause that the head does not list
/// stands with an empty text.
fn trace(material: &material::Material, criteria: &[CriterionFinding]) -> Vec<(String, String, Vec<String>)> {
    let answers = |clause: &str| -> Vec<String> {
        let found = criteria.iter().filter(|criterion| criterion.clause.as_deref() == Some(clause));
        found.map(|criterion| criterion.label.clone()).collect()
    };
    let mut trace: Vec<(String, String, Vec<String>)> = Vec::new();
    for (clause, text) in &material.worksheet.head.clauses {
        trace.push((clause.value.clone(), text.clone(), answers(&clause.value)));
    }
    for clause in criteria.iter().filter_map(|criterion| criterion.clause.as_deref()) {
        if !trace.iter().any(|(known, _, _)| known == clause) {
            trace.push((clause.to_owned(), String::new(), answers(clause)));
        }
    }
    trace.sort_by_key(|(_, _, labels)| !labels.is_empty());
    trace
}

/// Limits of validity of the models used, one sentence each.
fn validity(material: &material::Material, statistical: bool) -> Vec<String> {
    let mut sentences = vec![
        "Direct-current operating points and midband behaviour only: nothing is said about switching times, oscillation or \
         noise."
            .to_owned(),
        "Transistors follow the transport form of Ebers and Moll (1954) with the base charge of Gummel and Poon (1970); \
         quasi-saturation, breakdown and second breakdown are not in the model, and results beyond a rating are not to be \
         relied on."
            .to_owned(),
        "Spread axes of a part are independent of each other and each reaches the limits of its rows; specimens of one part \
         number may differ from each other as far as the rows allow."
            .to_owned(),
        "Every junction is judged just after a cold start (at ambient temperature) and in thermal equilibrium with its own \
         dissipation; heating of one part by another is not counted."
            .to_owned(),
    ];
    let kinds = |kind| material.network.elements.iter().any(|element| element.kind == kind);
    if kinds(crate::circuit::ElementKind::Filament) || kinds(crate::circuit::ElementKind::Coil) {
        sentences.push(
            "A filament or coil has its stated resistance, hot or cold as the condition says; it does not warm up in the \
             model."
                .to_owned(),
        );
    }
    if statistical {
        sentences.push(
            "Root-sum-square and Monte Carlo take specimens as independent of each other and, where nothing else is declared, \
             as uniformly distributed between their limits (JCGM 100:2008, 4.3.7); a temperature coefficient of unknown sign \
             goes with the tolerance of its specimen. A lot that lies near one limit as a whole is not covered."
                .to_owned(),
        );
    }
    for (name, model) in &material.models {
        for note in &model.notes {
            sentences.push(format!("{name}: {note}."));
        }
    }
    sentences
}
