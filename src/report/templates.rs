//! The templates: the house's own, compiled in, and those of a notebook, which win over files of the same name.
//!
//! A template is rendered twice: first by minijinja, which knows the note's head and which sections there are, and
//! chooses sections, their order and words; then by the typesetter, whose house functions set the page data.

use std::collections::BTreeMap;
use std::sync::Arc;

use minijinja::value::Value as Word;
use minijinja::{AutoEscape, Environment, ErrorKind, UndefinedBehavior};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::{Bundle, Place};

/// The folder of templates in a notebook.
const FOLDER: &str = "templates/";
/// Steps that one template may take.
const FUEL: u64 = 2_000_000;

/// The house's templates: name and text.
pub const TEMPLATES: [(&str, &str); 9] = [
    ("note.typ", include_str!("../../templates/note.typ")),
    ("house.typ", include_str!("../../templates/house.typ")),
    ("title.typ", include_str!("../../templates/title.typ")),
    ("summary.typ", include_str!("../../templates/summary.typ")),
    ("moves.typ", include_str!("../../templates/moves.typ")),
    ("cautions.typ", include_str!("../../templates/cautions.typ")),
    ("body.typ", include_str!("../../templates/body.typ")),
    ("blocks.typ", include_str!("../../templates/blocks.typ")),
    ("appendix.typ", include_str!("../../templates/appendix.typ")),
];

/// All templates by name, and the paths of those that the notebook brought.
pub(super) fn gather(files: &Bundle) -> Result<(BTreeMap<String, String>, Vec<String>), Diagnostics> {
    let mut out: BTreeMap<String, String> =
        TEMPLATES.into_iter().map(|(name, text)| (name.to_owned(), text.to_owned())).collect();
    let mut foreign = Vec::new();
    let mut errors = Diagnostics::default();
    for (path, file) in &files.files {
        let Some(name) = path.strip_prefix(FOLDER).filter(|name| name.ends_with(".typ")) else { continue };
        match file.text() {
            Ok(text) => {
                if out.insert(name.to_owned(), text.to_owned()).as_deref() != Some(text) {
                    foreign.push(path.to_string());
                }
            }
            Err(at) => errors.push(Diagnostic::error(
                &Place::new(path, 1, 1, 0),
                format!("the template is not UTF-8 text (byte {at})"),
            )),
        }
    }
    if errors.has_errors() { Err(errors) } else { Ok((out, foreign)) }
}

/// Renders every template with `context`, a JSON object that has passed the gate for printable text.
pub(super) fn render(
    templates: &BTreeMap<String, String>,
    context: &[u8],
) -> Result<BTreeMap<String, Arc<[u8]>>, Diagnostics> {
    let environment = environment();
    let context: Word = serde_json::from_slice(context).map_err(|error| {
        Diagnostic::bare(format!("the note's head cannot be given to templates: {error}"))
    })?;
    let mut out = BTreeMap::new();
    let mut errors = Diagnostics::default();
    for (name, text) in templates {
        match environment.render_named_str(name, text, context.clone()) {
            Ok(rendered) => {
                out.insert(name.clone(), rendered.into_bytes().into());
            }
            Err(error) => errors.push(diagnostic(name, &error)),
        }
    }
    if errors.has_errors() { Err(errors) } else { Ok(out) }
}

/// Words reach the typesetter as string literals only, whatever a template asks for.
fn environment() -> Environment<'static> {
    let mut environment = Environment::new();
    environment.set_undefined_behavior(UndefinedBehavior::Strict);
    environment.set_fuel(Some(FUEL));
    environment.remove_filter("safe");
    environment.remove_filter("escape");
    environment.remove_filter("e");
    environment.set_auto_escape_callback(|_| AutoEscape::Custom("typst".into()));
    environment.set_formatter(|out, _, value| {
        if value.is_undefined() {
            return Err(minijinja::Error::from(ErrorKind::UndefinedError));
        }
        let text = if value.is_none() { String::new() } else { value.to_string() };
        write!(out, "#\"{}\";", literal(&text)).map_err(|_| minijinja::Error::from(ErrorKind::WriteFailure))
    });
    environment
}

/// The inside of a string literal of the typesetter.
fn literal(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '\\' => out.push_str("\\\\"),
            '"' => out.push_str("\\\""),
            '\n' | '\r' | '\t' => out.push(' '),
            c => out.push(c),
        }
    }
    out
}

fn diagnostic(name: &str, error: &minijinja::Error) -> Diagnostic {
    let file: Arc<str> = format!("{FOLDER}{}", error.name().unwrap_or(name)).into();
    let line = error.line().and_then(|line| u32::try_from(line).ok()).unwrap_or(1);
    let what = error
        .detail()
        .map_or_else(|| error.kind().to_string(), |detail| format!("{}: {detail}", error.kind()));
    Diagnostic::error(&Place::new(&file, line, 1, 0), format!("template: {what}"))
}
