//! Every series that a figure shows.

use super::cases::Case;
use super::compile::Compiled;
use super::findings::{AxisFinding, Curve, CurveStyle, FigureFinding, Mark};
use super::response::InCondition;
use crate::diagnostic::Diagnostic;
use crate::markup::Math;
use crate::part::RatingQuantity;
use crate::quantity::{self, Dimension, Kind, Spread, Unit};
use crate::solve::{Branch, Class, Plan, Thermal, Topology};
use crate::spread::{Miss, Response};
use crate::worksheet::{FigureKind, FigureRequest};

/// Points along the axis of a sweep.
const SWEEP_POINTS: usize = 81;
/// Places along the axis at which the signs of all sensitivities are taken to find corners.
const CORNER_PLACES: usize = 7;
/// Base currents of a family of output characteristics, over the base current at the operating point.
const FAMILY: [f64; 5] = [0.25, 0.5, 0.75, 1.0, 1.25];

/// The series of one figure block, from the condition that it asks for (in thermal equilibrium where there is one).
///
/// # Errors
/// The figure names a transistor or an input that it can't show: an error at the figure's place.
pub(super) fn figure(
    compiled: &Compiled<'_>,
    request: &FigureRequest,
    outputs: &[usize],
    case: &Case<'_>,
) -> Result<FigureFinding, Diagnostic> {
    let condition = &case.response;
    match &request.kind {
        FigureKind::Sweep { plot, against, over, corners } => {
            let symbols: Vec<Math> =
                plot.iter().map(|formula| crate::formula::symbols(&formula.expr)).collect();
            let names: Vec<&str> = plot.iter().map(|formula| formula.text.as_str()).collect();
            sweep(compiled, request, condition, outputs, (&symbols, &names), &against.value, over, *corners)
        }
        FigureKind::OutputCharacteristics { designator, over } => {
            let element = transistor(compiled, &designator.value, request)?;
            output_characteristics(
                compiled,
                request,
                condition,
                element,
                over.as_ref().map(|over| over.spread),
            )
        }
        FigureKind::PowerDerating { designator } => {
            let element = transistor(compiled, &designator.value, request)?;
            power_derating(compiled, request, case, element)
        }
    }
}

fn transistor(
    compiled: &Compiled<'_>,
    designator: &str,
    request: &FigureRequest,
) -> Result<usize, Diagnostic> {
    let is_transistor =
        |kind| matches!(kind, crate::circuit::ElementKind::Npn | crate::circuit::ElementKind::Pnp);
    let elements = &compiled.network().elements;
    elements
        .iter()
        .position(|element| element.designator == designator && is_transistor(element.kind))
        .ok_or_else(|| {
            let names = elements.iter().filter(|e| is_transistor(e.kind)).map(|e| e.designator.as_str());
            Diagnostic::error(&request.place, format!("`{designator}` is no transistor of the circuit"))
                .expected("the designator of a transistor")
                .nearest(designator, names)
        })
}

/// Results over one input, all others nominal, with the lowest and highest of the corners where asked.
#[allow(clippy::too_many_arguments)]
fn sweep(
    compiled: &Compiled<'_>,
    request: &FigureRequest,
    condition: &InCondition<'_>,
    outputs: &[usize],
    (symbols, names): (&[Math], &[&str]),
    against: &str,
    over: &quantity::Quantity,
    corners: bool,
) -> Result<FigureFinding, Diagnostic> {
    let input = compiled.inputs.iter().position(|input| input.symbol == against).ok_or_else(|| {
        Diagnostic::error(&request.place, format!("`{against}` is no input of this note"))
            .expected("a basis value, an element's value, or T_a")
            .nearest(against, compiled.inputs.iter().map(|input| input.symbol.as_str()))
    })?;
    let record = &compiled.inputs[input];
    if over.kind.dimension != record.kind.dimension || over.spread.is_exact() {
        return Err(Diagnostic::error(&request.place, format!("the range of `{against}` does not fit it"))
            .expected(format!("a range in {}", record.unit.symbol)));
    }
    let (low, high) = (over.spread.low, over.spread.high);
    let swept = condition.with_input(input, Spread { low, nominal: (low + high) / 2.0, high });
    let axis = swept.moves().iter().position(|moves| *moves == super::response::Moves::Input(input));
    let Some(axis) = axis else {
        return Err(Diagnostic::error(
            &request.place,
            format!("`{against}` does not vary in this condition"),
        ));
    };
    let xs: Vec<f64> =
        (0..SWEEP_POINTS).map(|i| low + (high - low) * i as f64 / (SWEEP_POINTS - 1) as f64).collect();
    let at = |base: &[f64], x: f64| {
        let mut point = base.to_vec();
        point[axis] = x;
        point
    };
    let nominal = swept.nominal();
    let evaluate = |point: &[f64]| {
        let mut all = vec![Err(Miss::NotConverged); swept.outputs()];
        swept.eval(point, &mut all);
        outputs.iter().map(|&output| all[output].ok()).collect::<Vec<_>>()
    };
    let centre: Vec<Vec<Option<f64>>> = xs.iter().map(|&x| evaluate(&at(&nominal, x))).collect();
    let mut curves = Vec::new();
    for (i, name) in names.iter().enumerate() {
        curves.push(Curve {
            name: if names.len() > 1 { (*name).to_owned() } else { "nominal".to_owned() },
            points: xs.iter().zip(&centre).map(|(&x, values)| (x, values[i])).collect(),
            style: if i == 0 { CurveStyle::Nominal } else { CurveStyle::Family },
        });
    }
    if corners {
        for (i, name) in names.iter().enumerate() {
            let bases = corner_points(&swept, axis, (low, high), outputs[i]);
            let (mut lowest, mut highest) = (Vec::new(), Vec::new());
            for (&x, values) in xs.iter().zip(&centre) {
                let mut ends = values[i].map(|value| (value, value));
                for base in &bases {
                    let value = evaluate(&at(base, x))[i];
                    ends = ends.zip(value).map(|((low, high), value)| (value.min(low), value.max(high)));
                }
                lowest.push((x, ends.map(|ends| ends.0)));
                highest.push((x, ends.map(|ends| ends.1)));
            }
            let of = if names.len() > 1 { format!(" of {name}") } else { String::new() };
            curves.push(Curve { name: format!("lowest corner{of}"), points: lowest, style: CurveStyle::Low });
            curves.push(Curve {
                name: format!("highest corner{of}"),
                points: highest,
                style: CurveStyle::High,
            });
        }
    }
    let unit = axis_unit(&curves, compiled.output_kinds[outputs[0]]);
    let operating = condition.inputs[input].nominal;
    let mut marks = Vec::new();
    if (low..=high).contains(&operating)
        && let Some(y) = evaluate(&at(&nominal, operating))[0]
    {
        marks.push(Mark { name: "nominal operating point".to_owned(), x: operating, y });
    }
    let title = request.title.clone().unwrap_or_else(|| format!("{} over {against}", names.join(", ")));
    let ends = centre.first().zip(centre.last()).and_then(|(first, last)| first[0].zip(last[0]));
    let alt = match ends {
        Some((first, last)) => format!(
            "{title}. As {against} goes from {} to {}, {} goes from {} to {}.{}",
            quantity::text(low, &record.unit, 3),
            quantity::text(high, &record.unit, 3),
            names[0],
            quantity::text(first, &unit, 3),
            quantity::text(last, &unit, 3),
            if corners {
                " The lowest and the highest corner are drawn beside the nominal curve."
            } else {
                ""
            }
        ),
        None => format!("{title}. No confirmed solution at one end of the range."),
    };
    Ok(FigureFinding {
        title,
        alt,
        x: AxisFinding {
            symbol: crate::formula::symbol(against),
            title: record.description.clone().unwrap_or_default(),
            unit: record.unit.clone(),
            low,
            high,
            logarithmic: false,
        },
        y: y_axis(&curves, &marks, join(symbols), unit),
        curves,
        marks,
    })
}

/// The corners at which `output` is lowest and highest as far as the signs of the sensitivities say, at several places
/// along the swept axis; each once.
fn corner_points(
    swept: &InCondition<'_>,
    swept_axis: usize,
    (low, high): (f64, f64),
    output: usize,
) -> Vec<Vec<f64>> {
    let axes = swept.axes();
    let nominal = swept.nominal();
    let value = |point: &[f64]| {
        let mut all = vec![Err(Miss::NotConverged); swept.outputs()];
        swept.eval(point, &mut all);
        all[output].ok()
    };
    let mut bases: Vec<Vec<f64>> = Vec::new();
    for place in 0..CORNER_PLACES {
        let mut base = nominal.clone();
        base[swept_axis] = low + (high - low) * place as f64 / (CORNER_PLACES - 1) as f64;
        let (mut least, mut most) = (base.clone(), base.clone());
        for (axis, record) in axes.iter().enumerate() {
            if axis == swept_axis {
                continue;
            }
            let mut probe = base.clone();
            probe[axis] = record.low;
            let at_low = value(&probe);
            probe[axis] = record.high;
            let at_high = value(&probe);
            if let Some((at_low, at_high)) = at_low.zip(at_high) {
                let (down, up) =
                    if at_low <= at_high { (record.low, record.high) } else { (record.high, record.low) };
                (least[axis], most[axis]) = (down, up);
            }
        }
        for mut corner in [least, most] {
            corner[swept_axis] = nominal[swept_axis];
            if !bases.contains(&corner) {
                bases.push(corner);
            }
        }
    }
    bases
}

/// I_C over V_CE at several base currents, with the load line and the operating point.
fn output_characteristics(
    compiled: &Compiled<'_>,
    request: &FigureRequest,
    condition: &InCondition<'_>,
    element: usize,
    over: Option<Spread>,
) -> Result<FigureFinding, Diagnostic> {
    let record = &compiled.network().elements[element];
    let name = &record.designator;
    let nominal = condition.nominal();
    let not_solved =
        |_| Diagnostic::warning(&request.place, "no confirmed operating point: the figure is not shown");
    let point = condition.point(&nominal, &[]).map_err(not_solved)?;
    let branches = condition.branches(&nominal);
    let Branch::Transistor { pnp, .. } = branches[element] else {
        return Err(Diagnostic::error(
            &request.place,
            format!("{name} is shorted or open in this condition"),
        ));
    };
    let here = point.elements[element];
    let sign = if pnp { -1.0 } else { 1.0 };
    let highest = over.map_or_else(|| (sign * here.v * 1.5).max(5.0), |over| over.high);
    let base = if here.i_b.abs() > 1e-9 { here.i_b.abs() } else { 10e-6 };
    let mut curves = Vec::new();
    for factor in FAMILY {
        let points = characteristic(&branches[element], here.t_j, sign, factor * base, highest);
        let label =
            quantity::text(factor * base, &quantity::preferred_unit(&[base], Kind::of(Dimension::AMPERE)), 3);
        curves.push(Curve { name: format!("|I_B| = {label}"), points, style: CurveStyle::Family });
    }
    let load = load_line(condition, element, &branches, sign, highest);
    if load.len() > 1 {
        curves.push(Curve { name: "load line".to_owned(), points: load, style: CurveStyle::LoadLine });
    }
    let marks = vec![Mark { name: "operating point".to_owned(), x: sign * here.v, y: sign * here.i }];
    let unit = quantity::preferred_unit(&[sign * here.i * 1.3, base * 10.0], Kind::of(Dimension::AMPERE));
    let volts = quantity::preferred_unit(&[highest], Kind::of(Dimension::VOLT));
    let (v, i) = if pnp { ("V_EC", "I_C (out)") } else { ("V_CE", "I_C") };
    let title =
        request.title.clone().unwrap_or_else(|| format!("{name}: output characteristics and load line"));
    let alt = format!(
        "{title}. The operating point lies at {v} = {} and {i} = {} on the load line.",
        quantity::text(sign * here.v, &volts, 3),
        quantity::text(sign * here.i, &unit, 3),
    );
    let symbol = |symbol: &str| crate::formula::symbol(&format!("{name}.{symbol}"));
    Ok(FigureFinding {
        title,
        alt,
        x: AxisFinding {
            symbol: symbol(v),
            title: "collector-emitter voltage".to_owned(),
            unit: volts,
            low: 0.0,
            high: highest,
            logarithmic: false,
        },
        y: y_axis(&curves, &marks, symbol("I_C"), unit),
        curves,
        marks,
    })
}

/// Collector current over V_CE at one base current and junction temperature (magnitudes).
fn characteristic(branch: &Branch, t_j: f64, sign: f64, base: f64, highest: f64) -> Vec<(f64, Option<f64>)> {
    let two = |from, to| Topology { terminals: vec![from, to], class: Class::TwoTerminal };
    let three = Topology { terminals: vec![1, 2, 0], class: Class::Transistor };
    let Ok(plan) = Plan::new(3, &[two(1, 0), two(0, 2), three]) else { return Vec::new() };
    let Branch::Transistor { pnp, parameters, probe, .. } = *branch else { return Vec::new() };
    let mut scratch = plan.scratch();
    let mut start = None;
    (0..SWEEP_POINTS)
        .map(|i| {
            // Denser near zero, where the characteristic bends.
            let x = highest * (i as f64 / (SWEEP_POINTS - 1) as f64).powi(2);
            let branches = [
                Branch::Supply { volts: sign * x, ohms: 0.0 },
                Branch::Current { amperes: sign * base },
                Branch::Transistor { pnp, parameters, r_th: None, probe },
            ];
            let solved = plan.solve(&branches, t_j, Thermal::ColdStart, start.as_ref(), &mut scratch).ok();
            let y = solved.as_ref().map(|point| sign * point.elements[2].i);
            start = solved.map(|point| point.solution);
            (x, y)
        })
        .collect()
}

/// V_CE that the rest of the circuit leaves at each collector current, the base current held at its operating value.
fn load_line(
    condition: &InCondition<'_>,
    element: usize,
    branches: &[Branch],
    sign: f64,
    highest: f64,
) -> Vec<(f64, Option<f64>)> {
    let space = condition.space;
    let nominal = condition.nominal();
    let Ok(point) = condition.point(&nominal, &[]) else { return Vec::new() };
    let here = point.elements[element];
    let terminals = &space.network.elements[element].terminals;
    let mut topology: Vec<Topology> = space.network.elements.iter().map(Topology::of).collect();
    let two = |from, to| Topology { terminals: vec![from, to], class: Class::TwoTerminal };
    topology[element] = two(terminals[0], terminals[2]);
    topology.push(two(terminals[1], terminals[2]));
    let Ok(plan) = Plan::new(space.network.nodes.len(), &topology) else { return Vec::new() };
    let mut scratch = plan.scratch();
    let mut at = |collector: f64| {
        let mut branches = branches.to_vec();
        branches[element] = Branch::Current { amperes: sign * collector };
        branches.push(Branch::Current { amperes: here.i_b });
        let ambient = condition.ambient(&nominal);
        let solved = plan.solve(&branches, ambient, Thermal::ColdStart, None, &mut scratch).ok()?;
        Some(sign * solved.elements[element].v)
    };
    let (Some(open), Some(loaded)) = (at(0.0), at(sign * here.i)) else { return Vec::new() };
    let slope = (open - loaded) / (sign * here.i);
    if !slope.is_finite() || slope <= 0.0 {
        return Vec::new();
    }
    // From no current to where the line meets V_CE = 0, only the part inside the figure.
    const STEPS: usize = 24;
    (0..=STEPS)
        .filter_map(|i| {
            let current = open / slope * i as f64 / STEPS as f64;
            at(current).map(|v| (v, Some(current)))
        })
        .filter(|(v, _)| (-1e-9..=highest * 1.000_001).contains(v))
        .collect()
}

/// The dissipation allowed over ambient temperature, with the operating point.
fn power_derating(
    compiled: &Compiled<'_>,
    request: &FigureRequest,
    case: &Case<'_>,
    element: usize,
) -> Result<FigureFinding, Diagnostic> {
    let condition = &case.response;
    let record = &compiled.network().elements[element];
    let name = &record.designator;
    let part =
        compiled.part_of(element).ok_or_else(|| Diagnostic::error(&request.place, "no part record"))?;
    let need = |quantity, letters: &str| {
        part.rating(quantity).ok_or_else(|| {
            Diagnostic::error(&request.place, format!("the record of {} has no rating {letters}", part.name))
                .expected(format!("a rating {letters}"))
        })
    };
    let allowed = need(RatingQuantity::Dissipation, "P_tot")?;
    let hottest = need(RatingQuantity::JunctionTemperature, "T_j")?.value;
    let knee = allowed.up_to.unwrap_or(crate::device::REFERENCE_TEMPERATURE);
    let low = 233.15_f64.min(knee);
    let curves = vec![Curve {
        name: "rating".to_owned(),
        points: vec![(low, Some(allowed.value)), (knee, Some(allowed.value)), (hottest, Some(0.0))],
        style: CurveStyle::Limit,
    }];
    let mut marks = Vec::new();
    let nominal = condition.nominal();
    if let Ok(point) = condition.point(&nominal, &[]) {
        let ambient = condition.ambient(&nominal);
        marks.push(Mark { name: "nominal".to_owned(), x: ambient, y: point.elements[element].p });
    }
    if let Some((ambient, power)) = hottest_dissipation(compiled, case, element) {
        marks.push(Mark { name: "worst corner".to_owned(), x: ambient, y: power });
    }
    let unit = quantity::preferred_unit(&[allowed.value], Kind::of(Dimension::WATT));
    let title = request.title.clone().unwrap_or_else(|| format!("{name}: dissipation allowed in free air"));
    let degrees = compiled.celsius();
    let mut alt = format!(
        "{title}. {} is allowed up to {}, falling in a straight line to nothing at {}.",
        quantity::text(allowed.value, &unit, 3),
        quantity::text(knee, &degrees, 3),
        quantity::text(hottest, &degrees, 3),
    );
    for mark in &marks {
        alt.push_str(&format!(
            " {}: {} at {}.",
            mark.name,
            quantity::text(mark.y, &unit, 3),
            quantity::text(mark.x, &degrees, 3)
        ));
    }
    Ok(FigureFinding {
        title,
        alt,
        x: AxisFinding {
            symbol: crate::formula::symbol("T_a"),
            title: "ambient temperature".to_owned(),
            unit: degrees,
            low,
            high: hottest,
            logarithmic: false,
        },
        y: y_axis(&curves, &marks, crate::formula::symbol("P"), unit),
        curves,
        marks,
    })
}

/// Ambient temperature and dissipation at the corner where the dissipation comes closest to its limit.
fn hottest_dissipation(compiled: &Compiled<'_>, case: &Case<'_>, element: usize) -> Option<(f64, f64)> {
    let designator = &compiled.network().elements[element].designator;
    let outputs = compiled.stress.iter().find(|outputs| {
        outputs.demand.quantity == RatingQuantity::Dissipation && outputs.demand.designator == *designator
    })?;
    let margin = outputs.normal.or(outputs.fault)?;
    let end = case.ranges[margin].min.as_ref()?;
    let point = case.response.point(&end.at, &[]).ok()?;
    Some((case.response.ambient(&end.at), point.elements[element].p))
}

fn axis_unit(curves: &[Curve], kind: Kind) -> Unit {
    let values = curves.iter().flat_map(|curve| curve.points.iter().filter_map(|point| point.1));
    let largest = values.fold(0.0_f64, |largest, value| largest.max(value.abs()));
    quantity::preferred_unit(&[largest], kind)
}

fn y_axis(curves: &[Curve], marks: &[Mark], symbol: Math, unit: Unit) -> AxisFinding {
    let values = || {
        let curves = curves.iter().flat_map(|curve| curve.points.iter().filter_map(|point| point.1));
        curves.chain(marks.iter().map(|mark| mark.y))
    };
    let low = values().fold(f64::INFINITY, f64::min);
    let high = values().fold(f64::NEG_INFINITY, f64::max);
    let (low, high) = if low.is_finite() && high.is_finite() { (low, high) } else { (0.0, 1.0) };
    // Zero belongs to the axis unless the values lie far from it.
    let low = if low > 0.0 && low < 0.7 * high { 0.0 } else { low };
    let pad = (high - low).max(high.abs() * 1e-3).max(1e-12) * 0.06;
    AxisFinding {
        symbol,
        title: String::new(),
        unit,
        low: if low == 0.0 { 0.0 } else { low - pad },
        high: high + pad,
        logarithmic: false,
    }
}

fn join(symbols: &[Math]) -> Math {
    let mut parts = Vec::new();
    for symbol in symbols {
        if !parts.is_empty() {
            parts.push(Math::Operator { sign: ",".to_owned() });
        }
        parts.push(symbol.clone());
    }
    Math::Row { parts }
}
