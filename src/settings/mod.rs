//! The notebook's settings: `notebook.yaml`.

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{File, Place};
use crate::worksheet::{BasisEntry, Spot, basis_text};
use crate::yaml;

/// The file that makes a folder a notebook.
pub const FILE: &str = "notebook.yaml";

const KEYS: [&str; 8] =
    ["organisation", "numbering", "paper", "language", "logo", "policy", "root-sum-square", "defaults"];
const PAPERS: [&str; 2] = ["a4", "us-letter"];

/// What `notebook.yaml` says.
#[derive(Clone, Debug)]
pub struct Settings {
    pub organisation: String,
    /// What every note number begins with; empty where the notebook leaves that open.
    pub numbering: String,
    /// `a4` or `us-letter`.
    pub paper: String,
    /// Language of the notes, an IETF tag such as `en` or `en-GB`.
    pub language: String,
    /// Path of the logo inside the notebook.
    pub logo: Option<Spot<String>>,
    /// Path of the derating policy inside the notebook.
    pub policy: Option<Spot<String>>,
    /// Every criterion over extremes is combined by root-sum-square as well, and shown beside the extreme value.
    pub root_sum_square: bool,
    /// Values that every note has unless its basis gives them anew: ambient temperature, supplies.
    pub defaults: Vec<BasisEntry>,
}

/// Reads `notebook.yaml`.
///
/// # Errors
/// Malformed YAML, unknown keys, values of another sort: all of them, each with its place.
pub fn read(file: &File) -> Result<Settings, Diagnostics> {
    let origin = Place::new(&file.path, 1, 1, 0);
    let text = file.text().map_err(|at| {
        Diagnostics::from(
            Diagnostic::error(&origin, format!("byte {at} is no text")).expected("YAML in UTF-8"),
        )
    })?;
    let root = yaml::read(text, &file.path, 1)?;
    let mut errors = Diagnostics::default();
    let entries = root.map("keys such as `organisation:` and `defaults:`")?;
    yaml::refuse_unknown_keys(entries, &KEYS, &mut errors);
    let mut text_of = |key: &str, what: &str| {
        let node = root.get(key)?;
        errors.keep(
            node.scalar(what).map(|text| Spot { value: text.trim().to_owned(), place: node.place.clone() }),
        )
    };
    let organisation = text_of("organisation", "the name of the organisation");
    let numbering = text_of("numbering", "what every note number begins with, such as `LB-`");
    let paper = text_of("paper", "`a4` or `us-letter`");
    let language = text_of("language", "a language tag such as `en`");
    let logo = text_of("logo", "the path of an image inside the notebook");
    let root_sum_square = text_of("root-sum-square", "`yes` or `no`");
    let policy = text_of("policy", "the path of a derating policy inside the notebook");
    if organisation.is_none() && !errors.has_errors() {
        errors
            .push(Diagnostic::error(&origin, "the organisation is missing").expected("`organisation: ...`"));
    }
    if let Some(paper) = paper.as_ref().filter(|paper| !PAPERS.contains(&paper.value.as_str())) {
        errors.push(
            Diagnostic::error(&paper.place, format!("`{}` is no paper size here", paper.value))
                .expected("`a4` or `us-letter`")
                .nearest(&paper.value, PAPERS),
        );
    }
    let language_is_tag = |tag: &str| {
        let mut parts = tag.split('-');
        parts.next().is_some_and(|first| {
            (2..=3).contains(&first.len()) && first.chars().all(|c| c.is_ascii_lowercase())
        }) && parts
            .all(|part| (1..=8).contains(&part.len()) && part.chars().all(|c| c.is_ascii_alphanumeric()))
    };
    if let Some(tag) = language.as_ref().filter(|tag| !language_is_tag(&tag.value)) {
        errors.push(
            Diagnostic::error(&tag.place, format!("`{}` is no language tag", tag.value))
                .expected("`en`, `en-GB`"),
        );
    }
    if let Some(word) = root_sum_square.as_ref().filter(|word| !["yes", "no"].contains(&word.value.as_str()))
    {
        let message = format!("`{}` is neither yes nor no", word.value);
        errors.push(Diagnostic::error(&word.place, message).expected(
            "`yes` where every criterion over extremes shall be combined by root-sum-square as well, else `no`",
        ));
    }
    let defaults = defaults(&root, &mut errors);
    if errors.has_errors() {
        return Err(errors);
    }
    let or = |spot: Option<Spot<String>>, without: &str| {
        spot.map_or_else(|| without.to_owned(), |spot| spot.value)
    };
    Ok(Settings {
        organisation: or(organisation, ""),
        numbering: or(numbering, ""),
        paper: or(paper, PAPERS[0]),
        language: or(language, "en"),
        logo,
        policy,
        root_sum_square: root_sum_square.is_some_and(|word| word.value == "yes"),
        defaults,
    })
}

fn defaults(root: &yaml::Node, errors: &mut Diagnostics) -> Vec<BasisEntry> {
    let Some(node) = root.get("defaults") else { return Vec::new() };
    let example = "values such as `T_a: -20 to 50 °C, usually 20 °C [specification clause 3.2]`";
    let Some(entries) = errors.keep(node.map(example)) else { return Vec::new() };
    let mut found = Vec::new();
    for (key, value) in entries {
        let Some(text) = errors.keep(value.scalar(example)) else { continue };
        let spot = Spot { value: text.trim().to_owned(), place: value.place.clone() };
        let Some(value) = basis_text(&spot, &[], errors) else { continue };
        let name = Spot { value: key.name.clone(), place: key.place.clone() };
        found.push(value.named(name, 0));
    }
    found
}
