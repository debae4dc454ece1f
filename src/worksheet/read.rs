//! The order in which the parts of a worksheet are read: each block sees what it may refer to.

use std::collections::BTreeMap;

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{File, Place};

use super::fence::RawBlock;
use super::page::Page;
use super::prose::{self, Body};
use super::{
    BasisEntry, Condition, CriterionLine, DerivationLine, FigureRequest, Head, Record, Spot, Worksheet,
    acceptance, basis, conditions, derivation, enough, figure, head, records,
};

/// Reads a worksheet; warnings come with it.
///
/// # Errors
/// Everything that is wrong with the text, not only the first: each with its place, what was expected there and the nearest
/// right spelling. Names of circuit results (`Q1.V_CE`) and parts are not known here; the study checks those.
pub fn read(file: &File) -> Result<(Worksheet, Diagnostics), Diagnostics> {
    let page = Page::new(file)?;
    let mut diagnostics = Diagnostics::default();
    let (head, from) = head::split(&page, &mut diagnostics);
    let body = prose::read(&page, from, &mut diagnostics);
    let blocks = Blocks::read(&page, &body.blocks, head.as_ref(), &mut diagnostics);
    blocks.check(&body, head.as_ref(), &mut diagnostics);
    if enough(&diagnostics) {
        let place = Place::new(&file.path, 1, 1, 0);
        diagnostics.push(
            Diagnostic::error(&place, "so much is wrong here that the rest is not read")
                .expected("a Markdown worksheet"),
        );
    }
    match head {
        Some(head) if !diagnostics.has_errors() => {
            let worksheet = Worksheet {
                path: file.path.to_string(),
                digest: file.digest,
                head,
                body: body.pieces,
                basis: blocks.basis,
                conditions: blocks.conditions,
                circuit: blocks.circuit,
                derivation: blocks.derivation,
                acceptance: blocks.acceptance,
                figures: blocks.figures,
                recalls: body.recalls,
                images: body.images,
            };
            Ok((worksheet, diagnostics))
        }
        _ => Err(diagnostics),
    }
}

#[derive(Default)]
struct Blocks {
    basis: Vec<BasisEntry>,
    /// Names of the basis as written, also of entries whose value is wrong.
    basis_names: BTreeMap<String, Place>,
    circuit: Vec<Record>,
    conditions: Vec<Condition>,
    /// Names of conditions and labels of criteria as written.
    condition_names: Vec<String>,
    labels: Vec<String>,
    derivation: Vec<DerivationLine>,
    acceptance: Vec<CriterionLine>,
    figures: Vec<FigureRequest>,
}

impl Blocks {
    fn read(page: &Page, raw: &[RawBlock], head: Option<&Head>, diagnostics: &mut Diagnostics) -> Blocks {
        let of = |word: &'static str| raw.iter().filter(move |block| block.word == word);
        let clauses: Vec<&str> =
            head.iter().flat_map(|head| &head.clauses).map(|(clause, _)| clause.value.as_str()).collect();
        let mut blocks = Blocks::default();
        for block in of("basis") {
            basis::read(page, block, &clauses, &mut blocks.basis, &mut blocks.basis_names, diagnostics);
        }
        for block in of("circuit") {
            records::read(page, block, &mut blocks.circuit, diagnostics);
        }
        let written: Vec<String> = blocks.basis_names.keys().cloned().collect();
        for block in of("conditions") {
            let known =
                conditions::Known { basis: &blocks.basis, circuit: &blocks.circuit, written: &written };
            let names = &mut blocks.condition_names;
            conditions::read(page, block, &known, &mut blocks.conditions, names, diagnostics);
        }
        for block in of("derivation") {
            derivation::read(page, block, &mut blocks.derivation, diagnostics);
        }
        for block in of("acceptance") {
            acceptance::read(page, block, &mut blocks.acceptance, &mut blocks.labels, diagnostics);
        }
        for block in of("figure") {
            if !enough(diagnostics) {
                blocks.figures.extend(figure::read(page, block, &blocks.basis, diagnostics));
            }
        }
        blocks
    }

    /// Checks what the blocks and the prose say of each other.
    fn check(&self, body: &Body, head: Option<&Head>, diagnostics: &mut Diagnostics) {
        let elsewhere: BTreeMap<&str, &Place> = (self.circuit.iter())
            .map(|record| (record.key.value.as_str(), &record.key.place))
            .chain(self.basis_names.iter().map(|(name, place)| (name.as_str(), place)))
            .collect();
        derivation::check_order(&self.derivation, &elsewhere, diagnostics);
        let conditions = (self.derivation.iter().filter_map(|line| line.condition.as_ref()))
            .chain(self.acceptance.iter().flat_map(|line| &line.conditions))
            .chain(self.figures.iter().filter_map(|figure| figure.condition.as_ref()))
            .chain(&body.conditions);
        for name in conditions {
            refuse_unknown(name, &self.condition_names, "condition", diagnostics);
        }
        for label in body.recalls.iter().flat_map(|recall| &recall.criteria) {
            refuse_unknown(label, &self.labels, "criterion", diagnostics);
        }
        let clauses: Vec<String> =
            head.iter().flat_map(|head| &head.clauses).map(|(clause, _)| clause.value.clone()).collect();
        if !clauses.is_empty() {
            for clause in self.acceptance.iter().filter_map(|line| line.clause.as_ref()) {
                refuse_unknown(clause, &clauses, "clause in the head", diagnostics);
            }
        }
    }
}

fn refuse_unknown(name: &Spot<String>, known: &[String], what: &str, diagnostics: &mut Diagnostics) {
    if enough(diagnostics) || known.contains(&name.value) {
        return;
    }
    let expected = match known {
        [] => format!("the worksheet has no {what}"),
        _ => format!("one of {}", known.join(", ")),
    };
    diagnostics.push(
        Diagnostic::error(&name.place, format!("there is no {what} `{}`", name.value))
            .expected(expected)
            .nearest(&name.value, known.iter().map(String::as_str)),
    );
}
