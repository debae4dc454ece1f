//! `part`: a record and the model fitted to it, as text.

use crate::device::diode::Diode;
use crate::device::transistor::Transistor;
use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::fit::{self, Bound, Law, Model, Residual};
use crate::notebook::Notebook;
use crate::part::{self, Part};
use crate::quantity::{self, Kind, Unit};
use crate::redline;

use super::{Console, MET, PartArguments, UNUSABLE, show};

pub(super) fn run(arguments: &PartArguments, console: &mut Console) -> u8 {
    let notebook = match Notebook::open(&arguments.folder.path()) {
        Ok(notebook) => notebook,
        Err(errors) => {
            show::diagnostics(console, None, &errors);
            return UNUSABLE;
        }
    };
    match text(&notebook, &arguments.name) {
        Ok(text) => {
            show::line(console, text.trim_end());
            MET
        }
        Err(mut errors) => {
            notebook.parts.translate(&mut errors);
            show::diagnostics(console, Some(&notebook.root), &errors);
            UNUSABLE
        }
    }
}

fn text(notebook: &Notebook, name: &str) -> Result<String, Diagnostics> {
    let Some(record) = notebook.parts.records.get(name) else {
        let mut errors = notebook.problems.clone();
        errors.push(
            Diagnostic::bare(format!("there is no part record `{name}`"))
                .expected("the name of a record in parts/")
                .nearest(name, notebook.parts.records.keys().map(String::as_str)),
        );
        return Err(errors);
    };
    let parts = part::read(&record.file)?;
    let Some(part) = parts.first() else {
        return Err(Diagnostic::bare(format!("the record of `{name}` is empty")).into());
    };
    let mut out = describe(part, &record.origin);
    if part.kind.is_junction_device() {
        out.push_str(&model(&fit::fit(part)?));
    }
    Ok(out)
}

fn describe(part: &Part, origin: &str) -> String {
    let mut out = format!("{}  {}  ({origin})\n", part.name, part.description);
    for (name, text, source) in redline::part_lines(part) {
        out.push_str(&format!("  {name}: {text}  [{source}]\n"));
    }
    out
}

fn model(model: &Model) -> String {
    let mut out = String::from("\nModel at 25 °C\n");
    let parameters = match &model.law {
        Law::Transistor(law) => transistor(&law.nominal),
        Law::Diode(law) => diode(&law.nominal),
    };
    for (name, value, unit) in parameters {
        out.push_str(&format!("  {name}: {}\n", parameter(value, unit)));
    }
    out.push_str("\nSpread\n");
    for axis in &model.axes {
        out.push_str(&format!("  {}: low {}, high {}\n", axis.name, bound(&axis.low), bound(&axis.high)));
    }
    out.push_str(
        "\nRows of the record, and what the model gives in their test condition: low, nominal, high\n",
    );
    for residual in &model.residuals {
        out.push_str(&format!("  {}\n", row(residual)));
    }
    if !model.notes.is_empty() {
        out.push('\n');
    }
    for note in &model.notes {
        out.push_str(&format!("  {note}\n"));
    }
    out
}

/// Name, value in SI units and the unit's symbol.
type Parameter = (&'static str, f64, &'static str);

fn transistor(law: &Transistor) -> Vec<Parameter> {
    vec![
        ("saturation current", law.saturation_current, "A"),
        ("emission coefficient", law.emission_coefficient, ""),
        ("forward gain", law.gain_forward, ""),
        ("reverse gain", law.gain_reverse, ""),
        ("forward Early voltage", law.early_voltage_forward, "V"),
        ("reverse Early voltage", law.early_voltage_reverse, "V"),
        ("forward knee current", law.knee_current_forward, "A"),
        ("base-emitter leakage", law.emitter_leakage, "A"),
        ("its emission coefficient", law.emitter_leakage_emission, ""),
        ("base resistance", law.base_resistance, "Ω"),
        ("collector resistance", law.collector_resistance, "Ω"),
        ("emitter resistance", law.emitter_resistance, "Ω"),
        ("cut-off current", law.cutoff_current, "A"),
        ("temperature rise that multiplies it by e", law.cutoff_e_fold, "K"),
        ("energy gap (eV)", law.energy_gap, ""),
        ("temperature exponent of the saturation current", law.saturation_exponent, ""),
        ("temperature exponent of the gains", law.gain_exponent, ""),
    ]
}

fn diode(law: &Diode) -> Vec<Parameter> {
    let mut out = vec![
        ("saturation current", law.saturation_current, "A"),
        ("emission coefficient", law.emission_coefficient, ""),
        ("series resistance", law.series_resistance, "Ω"),
        ("leakage", law.leakage, "A"),
        ("temperature rise that multiplies it by e", law.leakage_e_fold, "K"),
        ("energy gap (eV)", law.energy_gap, ""),
        ("temperature exponent of the saturation current", law.saturation_exponent, ""),
    ];
    if law.breakdown_voltage.is_finite() {
        out.extend([
            ("Zener voltage", law.breakdown_voltage, "V"),
            ("at", law.breakdown_current, "A"),
            ("voltage that multiplies the Zener current by e", law.breakdown_slope, "V"),
        ]);
    }
    out
}

fn parameter(value: f64, unit: &str) -> String {
    if value.is_infinite() {
        return "left out".to_owned();
    }
    let unit = quantity::parse_unit(unit).unwrap_or_else(Unit::none);
    // A prefix where there is one; numbers far from 1 without a unit print as powers of ten.
    let unit = if unit.symbol.is_empty() { unit } else { quantity::preferred_unit(&[value], unit.kind) };
    quantity::text(value, &unit, show::DIGITS)
}

fn bound(bound: &Bound) -> String {
    match bound {
        Bound::Sourced => "by rows of the record".to_owned(),
        Bound::Weak { source } => format!("assumed [{}]", source.text),
        Bound::Absent { wanted } => format!("not bounded (wanted: {wanted})"),
    }
}

fn row(residual: &Residual) -> String {
    let kind = Kind::of(residual.quantity.dimension());
    let columns = [("min", residual.min), ("typ", residual.typ), ("max", residual.max)];
    let given: Vec<f64> = columns.iter().filter_map(|(_, value)| *value).collect();
    let unit = quantity::preferred_unit(&given, kind);
    let sheet: Vec<String> = columns
        .into_iter()
        .filter_map(|(name, value)| Some(format!("{name} {}", quantity::text(value?, &unit, show::DIGITS))))
        .collect();
    let model = residual.model.map(|value| quantity::text(value, &unit, show::DIGITS));
    format!("{} at {}: {} | {}", residual.quantity.symbol(), residual.at, sheet.join(", "), model.join(", "))
}
