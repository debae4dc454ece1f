//! A whole note as findings: a lamp switch with every kind of verdict, long tables and names from three alphabets. The
//! circuit and its numbers are invented; nothing here is solved.

use qsheaf::caution::Caution;
use qsheaf::diagnostic::{Diagnostic, Diagnostics};
use qsheaf::fit::{Bound, DiodeLaw, Law, Model, Residual, SpreadAxis};
use qsheaf::markup::{Align, Flow, Inline, Math};
use qsheaf::part::{Part, PartKind, RatingQuantity, RowQuantity};
use qsheaf::quantity::{Dimension, Distribution, Kind, Origin, Role, Shown, Source, Spread, Unit};
use qsheaf::redline::{FileMove, InputMove, Moves, ResultMove, VerdictMove};
use qsheaf::report::{Issue, Status};
use qsheaf::source::{Bundle, Digest, File, Place};
use qsheaf::spread::{Corner, Proportion, Quantile};
use qsheaf::stress::StressLine;
use qsheaf::study::*;

pub fn place(line: u32) -> Place {
    Place::new(&"lantern/lamp switch.md".into(), line, 1, 0)
}

pub fn unit(symbol: &str) -> Unit {
    let (dimension, factor) = match symbol {
        "V" => (Dimension::VOLT, 1.0),
        "mV" => (Dimension::VOLT, 1e-3),
        "A" => (Dimension::AMPERE, 1.0),
        "mA" => (Dimension::AMPERE, 1e-3),
        "µA" => (Dimension::AMPERE, 1e-6),
        "mW" => (Dimension::WATT, 1e-3),
        "W" => (Dimension::WATT, 1.0),
        "Ω" => (Dimension::OHM, 1.0),
        "K/W" => (Dimension::KELVIN_PER_WATT, 1.0),
        "°C" => return Unit { symbol: symbol.into(), kind: Kind::TEMPERATURE, factor: 1.0, offset: 273.15 },
        _ => (Dimension::NONE, 1.0),
    };
    Unit { symbol: symbol.into(), kind: Kind::of(dimension), factor, offset: 0.0 }
}

pub fn text(text: &str) -> Inline {
    Inline::Text { text: text.into() }
}

pub fn symbol(owner: &str, base: &str, subscript: &str) -> Math {
    Math::Symbol { base: base.into(), subscript: subscript.into(), owner: owner.into() }
}

fn operator(sign: &str) -> Math {
    Math::Operator { sign: sign.into() }
}

fn value(digits: &str, unit: &str) -> Math {
    Math::Number { digits: digits.into(), exponent: None, unit: unit.into() }
}

fn row(parts: Vec<Math>) -> Math {
    Math::Row { parts }
}

fn over(above: Math, below: Math) -> Math {
    Math::Fraction { above: Box::new(above), below: Box::new(below) }
}

fn source(origin: Origin, text: &str) -> Option<Source> {
    Some(Source { origin, text: text.into() })
}

fn pairs(of: &[(&str, &str)]) -> Vec<(String, String)> {
    of.iter().map(|(a, b)| (a.to_string(), b.to_string())).collect()
}

fn paragraph(words: &str) -> Flow {
    Flow::Paragraph { content: vec![text(words)] }
}

fn heading(level: u8, words: &str) -> Flow {
    Flow::Heading { level, content: vec![text(words)] }
}

fn placed(word: &str, index: usize) -> Flow {
    Flow::Placed { word: word.into(), index }
}

fn input(
    name: &str,
    what: Option<&str>,
    low: f64,
    nominal: f64,
    high: f64,
    u: &str,
    from: Option<Source>,
) -> Input {
    let unit = unit(u);
    let si = |v: f64| v * unit.factor + unit.offset;
    Input {
        symbol: name.into(),
        description: what.map(str::to_owned),
        spread: Spread { low: si(low), nominal: si(nominal), high: si(high) },
        kind: unit.kind,
        text: format!("{low} to {high} {u}"),
        bounded: true,
        unit,
        source: from,
        role: Default::default(),
        place: place(12),
    }
}

fn inputs() -> Vec<Input> {
    use Origin::*;
    vec![
        input(
            "V_bat",
            Some("battery at the lantern's terminals"),
            10.8,
            12.6,
            14.8,
            "V",
            source(Specification, "battery sheet rev 3 p. 4"),
        ),
        input(
            "V_drive",
            Some("logic output, high"),
            4.4,
            4.6,
            4.8,
            "V",
            source(Measurement, "bench book 7 p. 31"),
        ),
        input("V_off", Some("logic output, low"), 0.0, 0.1, 0.4, "V", None),
        input(
            "T_a",
            Some("inside the lantern"),
            -20.0,
            25.0,
            50.0,
            "°C",
            source(Specification, "LB-1 clause 3.2"),
        ),
        input("t_on", None, 0.3, 0.3, 0.3, "", source(Calculation, "flash code Fl(2) 5 s")),
        input(
            "k_min",
            Some("least overdrive wanted"),
            1.5,
            1.5,
            1.5,
            "",
            source(Memory, "usual for lamp loads"),
        ),
        input("R1", None, 446.5, 470.0, 493.5, "Ω", source(DataSheet, "RX-5 family rev 2 p. 1")),
        input("R2", None, 9500.0, 10000.0, 10500.0, "Ω", source(DataSheet, "RX-5 family rev 2 p. 1")),
        input(
            "DS1",
            Some("hot filament"),
            108.0,
            120.0,
            132.0,
            "Ω",
            source(Assumption, "lamp sheet gives power only; 10 % taken"),
        ),
        input(
            "R_cold",
            Some("cold filament"),
            11.2,
            14.0,
            16.8,
            "Ω",
            source(Measurement, "bench book 7 p. 33, six lamps"),
        ),
        input("R_w", Some("wiring, both ways"), 0.05, 0.1, 0.2, "Ω", source(Assumption, "4 m of 0.75 mm²")),
        input("Q1 gain", None, 90.0, 180.0, 450.0, "", source(DataSheet, "LBN-250 rev 1 p. 2, h_FE")),
        input("Q1 V_BE", None, 0.62, 0.7, 0.82, "V", source(DataSheet, "LBN-250 rev 1 p. 2")),
        input(
            "Q1 saturation",
            None,
            0.06,
            0.12,
            0.35,
            "V",
            source(DataSheet, "LBN-250 rev 1 p. 2, V_CE(sat)"),
        ),
        input("Q1 leakage", None, 0.0, 5.0, 100.0, "µA", source(DataSheet, "LBN-250 rev 1 p. 2, I_CBO")),
        input(
            "R_th",
            Some("junction to ambient, mounted"),
            180.0,
            200.0,
            220.0,
            "K/W",
            source(DataSheet, "LBN-250 rev 1 p. 1"),
        ),
        input(
            "ϑ_буй",
            Some("температура корпуса буя"),
            -10.0,
            15.0,
            45.0,
            "°C",
            source(Measurement, "журнал 4, лист 12"),
        ),
        input("V_лампа", Some("напряжение на лампе"), 10.0, 12.0, 14.0, "V", source(Standard, "IEC 60064")),
        input("I_max", None, 0.15, 0.15, 0.15, "A", source(Standard, "LB-1 clause 3.5")),
        input("η_λ", Some("useful light"), 0.02, 0.04, 0.06, "", source(Memory, "order of magnitude")),
    ]
}

fn end(value: Shown, corner: &[(&str, &str)], condition: &str, established: Established) -> End {
    End {
        value,
        corner: Corner { levels: pairs(corner), telling: corner.len() },
        condition: condition.into(),
        thermal: "equilibrium".into(),
        established,
    }
}

struct Wanted<'a> {
    label: &'a str,
    math: Math,
    spoken: &'a str,
    relation: &'a str,
    unit: &'a str,
    worst: f64,
    limit: f64,
    clause: Option<&'a str>,
    verdict: Verdict,
    flags: &'a [&'a str],
}

fn criterion(w: Wanted) -> CriterionFinding {
    let unit = unit(w.unit);
    let si = |v: f64| v * unit.factor + unit.offset;
    let not_shown = match &w.verdict {
        Verdict::NotShown { reason } => Some(Shown::NotShown(reason.clone())),
        _ => None,
    };
    let sign = if w.relation == "≥" || w.relation == ">" { 1.0 } else { -1.0 };
    CriterionFinding {
        label: w.label.into(),
        text: format!("{} {} {} {}", w.spoken, w.relation, w.limit, w.unit),
        math: Some(w.math),
        spoken: w.spoken.into(),
        over: "extremes".into(),
        conditions: vec!["on".into()],
        clause: w.clause.map(str::to_owned),
        safety: w.label == "dark",
        kind: unit.kind,
        relation: w.relation.into(),
        worst: end(
            not_shown.clone().unwrap_or(Shown::Value(si(w.worst))),
            &[
                ("V_bat", "14.8 V"),
                ("V_drive", "4.4 V"),
                ("Q1 gain", "low"),
                ("R1", "493.5 Ω"),
                ("T_a", "-20 °C"),
            ],
            "on",
            Established::Searched,
        ),
        limit: Shown::Value(si(w.limit)),
        margin: not_shown.clone().unwrap_or(Shown::Value(sign * (w.worst - w.limit) * unit.factor)),
        nominal: not_shown.unwrap_or(Shown::Value(si(w.worst * 0.9))),
        unit,
        verdict: w.verdict,
        coverage: None,
        flags: w.flags.iter().map(|f| f.to_string()).collect(),
        place: place(60),
    }
}

fn criteria() -> Vec<CriterionFinding> {
    let below = |owner: &str, base: &str, sub: &str, sign: &str, v: &str, u: &str| {
        row(vec![symbol(owner, base, sub), operator(sign), value(v, u)])
    };
    let met = || Verdict::Met;
    let assumed = |count| Verdict::MetOnAssumptions { count };
    let make = |label, math, spoken, relation, unit, worst, limit, clause, verdict, flags| {
        criterion(Wanted { label, math, spoken, relation, unit, worst, limit, clause, verdict, flags })
    };
    vec![
        make(
            "saturated",
            below("", "n", "od", "≥", "1.5", ""),
            "overdrive of Q1",
            "≥",
            "",
            1.82,
            1.5,
            Some("LB-1 3.4"),
            met(),
            &["Q1 stays saturated at all corners"],
        ),
        make(
            "cool",
            below("Q1", "T", "j", "≤", "125", "°C"),
            "junction temperature of Q1",
            "≤",
            "°C",
            71.43,
            125.0,
            Some("LB-1 3.6"),
            met(),
            &["an extreme lies inside Q1 gain (at 212)"],
        ),
        make(
            "dark",
            below("DS1", "I", "", "≤", "1", "mA"),
            "lamp current when off",
            "≤",
            "mA",
            0.1104,
            1.0,
            Some("LB-1 3.7"),
            met(),
            &[],
        ),
        make(
            "bright",
            below("DS1", "V", "", "≥", "10", "V"),
            "lamp voltage",
            "≥",
            "V",
            10.38,
            10.0,
            Some("LB-1 3.3"),
            assumed(2),
            &[],
        ),
        make(
            "inrush",
            below("Q1", "I", "C", "≤", "1", "A"),
            "collector current at inrush",
            "≤",
            "A",
            1.0437,
            1.0,
            Some("LB-1 3.5"),
            Verdict::NotMet,
            &["Q1 leaves saturation above 0.92 A"],
        ),
        make(
            "drive",
            below("PS1", "I", "", "≤", "12", "mA"),
            "drive current",
            "≤",
            "mA",
            9.126,
            12.0,
            Some("drive sheet p. 3"),
            met(),
            &[],
        ),
        make(
            "drop",
            below("Q1", "V", "CE", "≤", "400", "mV"),
            "voltage across Q1",
            "≤",
            "mV",
            331.2,
            400.0,
            None,
            met(),
            &[],
        ),
        make(
            "switching edge of the lamp current",
            below("", "t", "f", "≤", "2", ""),
            "fall time",
            "≤",
            "",
            0.0,
            2.0,
            Some("LB-1 3.9"),
            Verdict::NotShown {
                reason: "LBN-250 has no row for C_ob; get the maximum output capacitance at V_CB = 10 V"
                    .into(),
            },
            &[],
        ),
        make(
            "loss",
            below("Q1", "P", "", "≤", "250", "mW"),
            "dissipation of Q1",
            "≤",
            "mW",
            46.31,
            250.0,
            None,
            met(),
            &[],
        ),
        make(
            "base resistor",
            below("R1", "P", "", "≤", "125", "mW"),
            "dissipation of R1",
            "≤",
            "mW",
            39.18,
            125.0,
            None,
            met(),
            &[],
        ),
        make(
            "reverse battery",
            below("Q1", "V", "CE", "≥", "−0.5", "V"),
            "collector voltage with the battery reversed",
            "≥",
            "V",
            -0.4999999,
            -0.5,
            Some("LB-1 4.1"),
            assumed(1),
            &[],
        ),
        make(
            "brown-out",
            below("", "V", "bat", "≥", "9", "V"),
            "least battery voltage at which Q1 still saturates",
            "≥",
            "V",
            9.4,
            9.0,
            Some("LB-1 4.2"),
            met(),
            &[],
        ),
    ]
}

fn step(n: usize, label: &str, s: Option<Math>, symbols: Math, numbers: Math, v: f64, u: &str) -> Step {
    let unit = unit(u);
    Step {
        label: label.into(),
        text: String::new(),
        block: usize::from(n > 5),
        condition: "on".into(),
        symbol: s,
        symbols,
        numbers,
        result: Shown::Value(v * unit.factor + unit.offset),
        kind: unit.kind,
        unit,
        holds: None,
        spoken: format!("{label} by its formula"),
    }
}

fn derivation() -> Vec<Step> {
    let minus = || operator("−");
    let base =
        over(row(vec![symbol("", "V", "drive"), minus(), symbol("Q1", "V", "BE")]), symbol("", "R", "1"));
    let base_n = over(row(vec![value("4.60", "V"), minus(), value("0.75", "V")]), value("470", "Ω"));
    let long = |n: bool| {
        let mut parts = Vec::new();
        for i in 0..9 {
            if i > 0 {
                parts.push(operator("+"));
            }
            let above = if n { value("12.60", "V") } else { symbol("", "V", "bat") };
            let below =
                if n { value(&format!("{}.0", 100 + i), "Ω") } else { symbol("", "R", &format!("{i}")) };
            parts.push(over(above, below));
        }
        row(parts)
    };
    let cases = Math::Cases {
        branches: vec![
            (symbol("", "I", "1"), Some(row(vec![symbol("", "k", ""), operator("<"), value("50", "")]))),
            (symbol("", "I", "2"), None),
        ],
    };
    let root = |of: Math| Math::Root {
        radicand: Box::new(Math::Power { base: Box::new(of), exponent: Box::new(value("2", "")) }),
    };
    let call = |of: Math| Math::Call {
        name: "ln".into(),
        arguments: vec![Math::Group { inner: Box::new(over(of, value("2", ""))) }],
    };
    let mut out = vec![
        step(1, "base current", Some(symbol("", "I", "B")), base, base_n, 8.19149, "mA"),
        step(
            2,
            "collector current",
            Some(symbol("", "I", "C")),
            over(
                row(vec![symbol("", "V", "bat"), minus(), symbol("Q1", "V", "CE(sat)")]),
                symbol("DS1", "R", ""),
            ),
            over(row(vec![value("12.6", "V"), minus(), value("0.12", "V")]), value("120", "Ω")),
            104.0,
            "mA",
        ),
        step(
            3,
            "forced gain",
            Some(symbol("", "k", "")),
            over(symbol("", "I", "C"), symbol("", "I", "B")),
            over(value("104.0", "mA"), value("8.191", "mA")),
            12.696,
            "",
        ),
        step(
            4,
            "least gain needed",
            Some(symbol("", "β", "need")),
            row(vec![symbol("", "n", "od"), operator("·"), symbol("", "k", "")]),
            row(vec![value("1.5", ""), operator("·"), value("12.70", "")]),
            19.04,
            "",
        ),
        step(5, "all branches together", Some(symbol("", "I", "sum")), long(false), long(true), 1.0912, "A"),
        step(
            6,
            "heat of the junction",
            Some(symbol("Q1", "T", "j")),
            row(vec![
                symbol("", "T", "a"),
                operator("+"),
                symbol("", "R", "th"),
                operator("·"),
                symbol("Q1", "P", ""),
            ]),
            row(vec![
                value("25", "°C"),
                operator("+"),
                value("200", "K/W"),
                operator("·"),
                value("24.6", "mW"),
            ]),
            29.92,
            "°C",
        ),
        step(
            7,
            "worth a look",
            Some(symbol("", "x", "")),
            row(vec![root(symbol("", "V", "bat")), operator("·"), call(symbol("", "α", ""))]),
            cases,
            3.3,
            "",
        ),
        step(
            8,
            "enough base current",
            None,
            row(vec![
                symbol("", "I", "B"),
                operator(">"),
                value("3", ""),
                operator("·"),
                over(symbol("", "I", "C"), symbol("", "β", "")),
            ]),
            row(vec![value("8.191", "mA"), operator(">"), value("1.733", "mA")]),
            0.0,
            "",
        ),
    ];
    if let Some(last) = out.last_mut() {
        last.holds = Some(true);
    }
    out.push(Step { result: Shown::NotShown("the logarithm has no value here".into()), ..out[2].clone() });
    out
}

fn figures() -> Vec<FigureFinding> {
    let axis = |s: Math, title: &str, u: &str, low: f64, high: f64, logarithmic: bool| {
        let unit = unit(u);
        AxisFinding {
            symbol: s,
            title: title.into(),
            low: low * unit.factor + unit.offset,
            high: high * unit.factor + unit.offset,
            unit,
            logarithmic,
        }
    };
    let curve = |name: &str, style: CurveStyle, f: &dyn Fn(f64) -> Option<f64>, low: f64, high: f64| Curve {
        name: name.into(),
        points: (0..=120).map(|i| low + (high - low) * f64::from(i) / 120.0).map(|x| (x, f(x))).collect(),
        style,
    };
    let transfer = |shift: f64| move |v: f64| Some(12.6 / (1.0 + ((v - shift) / 0.06).exp()) + 0.1);
    let family = |ib: f64| move |v: f64| Some(ib * 150.0 * (1.0 - (-v / 0.15).exp()) * (1.0 + v / 80.0));
    let log_axis = axis(symbol("", "I", "C"), "Collector current", "mA", 0.01, 1000.0, true);
    let mut out = vec![
        FigureFinding {
            title: "Transfer curve of the switch, V_CE against V_drive".into(),
            alt: "The collector falls from the battery voltage to saturation between 0.5 and 1.1 V of drive at every corner.".into(),
            x: axis(symbol("", "V", "drive"), "Drive voltage", "V", 0.0, 2.0, false),
            y: axis(symbol("Q1", "V", "CE"), "Collector voltage", "V", 0.0, 14.0, false),
            curves: vec![
                curve("nominal", CurveStyle::Nominal, &transfer(0.8), 0.0, 2.0),
                curve("least, gain high, 50 °C", CurveStyle::Low, &transfer(0.65), 0.0, 2.0),
                curve("greatest, gain low, −20 °C", CurveStyle::High, &transfer(1.0), 0.0, 2.0),
                Curve { name: "limit 0.4 V".into(), points: vec![(0.0, Some(0.4)), (2.0, Some(0.4))], style: CurveStyle::Limit },
            ],
            marks: vec![Mark { name: "operating point".into(), x: 1.6, y: 0.12 }],
        },
        FigureFinding {
            title: "Output characteristics of Q1 with the load line".into(),
            alt: "The load line of the hot lamp crosses the saturated part of the curves above 0.8 mA of base current.".into(),
            x: axis(symbol("", "V", "CE"), "Collector-emitter voltage", "V", 0.0, 15.0, false),
            y: axis(symbol("", "I", "C"), "Collector current", "mA", 0.0, 160.0, false),
            curves: (1..=8)
                .map(|i| curve(&format!("I_B = {:.1} mA", 0.12 * f64::from(i)), CurveStyle::Family, &family(0.12e-3 * f64::from(i)), 0.0, 15.0))
                .chain([Curve { name: "load line".into(), points: vec![(0.0, Some(0.105)), (12.6, Some(0.0))], style: CurveStyle::LoadLine }])
                .collect(),
            marks: vec![Mark { name: "Q1, on".into(), x: 0.15, y: 0.1037 }, Mark { name: "Q1, off".into(), x: 12.6, y: 0.0 }],
        },
        FigureFinding {
            title: "Gain of Q1 over collector current".into(),
            alt: "The gain is flat between 1 and 100 mA and falls at both ends.".into(),
            x: log_axis.clone(),
            y: axis(symbol("", "h", "FE"), "Current gain", "", 10.0, 1000.0, true),
            curves: vec![Curve {
                name: "nominal, 25 °C".into(),
                points: (0..=100)
                    .map(|i| 1e-5 * 10f64.powf(f64::from(i) / 20.0))
                    .map(|x| (x, (!(2e-4..3e-4).contains(&x)).then(|| 200.0 / (1.0 + (1e-4 / x).sqrt() * 0.5 + x / 0.4))))
                    .collect(),
                style: CurveStyle::Nominal,
            }],
            marks: vec![],
        },
    ];
    let halved = |curve: &Curve| curve.points.iter().map(|(x, y)| (*x, y.map(|y| y * 0.5))).collect();
    let least = Curve { points: halved(&out[2].curves[0]), name: "least".into(), style: CurveStyle::Low };
    out[2].curves.push(least);
    out
}

fn results() -> Vec<ResultFinding> {
    let names = [
        ("I_B", "mA", 8.19),
        ("I_C", "mA", 104.0),
        ("Q1.forced_gain", "", 12.7),
        ("Q1.V_CE", "V", 0.1231),
        ("Q1.V_BE", "V", 0.7512),
        ("Q1.T_j", "°C", 29.9),
        ("Q1.P", "mW", 24.6),
        ("R1.P", "mW", 31.5),
        ("DS1.V", "V", 12.47),
        ("lamp.V", "V", 0.123),
    ];
    let mut out = Vec::new();
    for condition in ["on", "off", "inrush", "reversed battery"] {
        for (i, (name, u, value)) in names.iter().enumerate() {
            let unit = unit(u);
            let si = |v: f64| v * unit.factor + unit.offset;
            let missing = condition == "reversed battery" && i == 5;
            let shown = |v: f64| {
                if missing {
                    Shown::NotShown("no thermal resistance for the reverse direction".into())
                } else {
                    Shown::Value(si(v))
                }
            };
            out.push(ResultFinding {
                symbol: (*name).into(),
                label: (i % 3 == 0).then(|| "set beside the hand derivation".into()),
                condition: condition.into(),
                kind: unit.kind,
                nominal: shown(*value),
                min: end(
                    shown(value * 0.84),
                    &[("V_bat", "10.8 V"), ("V_drive", "4.4 V"), ("R1", "493.5 Ω"), ("Q1 gain", "low")],
                    condition,
                    Established::Vertices,
                ),
                max: end(
                    shown(value * 1.21),
                    &[
                        ("V_bat", "14.8 V"),
                        ("V_drive", "4.8 V"),
                        ("R1", "446.5 Ω"),
                        ("Q1 V_BE", "low"),
                        ("T_a", "50 °C"),
                    ],
                    condition,
                    if i % 4 == 0 { Established::Searched } else { Established::Monotone },
                ),
                unit,
                flags: if i == 6 { vec!["greatest inside Q1 gain, at 212".into()] } else { vec![] },
            });
        }
    }
    out
}

fn points() -> Vec<OperatingFinding> {
    let device = |name: &str, region: &str, on: bool| TransistorPoint {
        designator: name.into(),
        region: region.into(),
        v_be: if on { 0.7512 } else { 0.1 },
        v_ce: if on { 0.1231 } else { 12.6 },
        i_c: if on { 0.10397 } else { 5.1e-8 },
        i_b: if on { 8.19e-3 } else { -5.1e-8 },
        forced_gain: on.then_some(12.70),
        overdrive: on.then_some(14.2),
        h_fe: Some(180.3),
        power: if on { 0.01895 } else { 6.4e-7 },
        t_j: Some(if on { 302.08 } else { 298.15 }),
    };
    let of = |condition: &str, on: bool| OperatingFinding {
        condition: condition.into(),
        not_shown: None,
        nodes: pairs(&[
            ("bat", ""),
            ("base", ""),
            ("drive", ""),
            ("lamp", ""),
            ("sense", ""),
            ("температура", ""),
        ])
        .into_iter()
        .enumerate()
        .map(|(i, (name, _))| (name, if on { 12.6 / (i as f64 + 1.0) } else { 0.1 * i as f64 - 0.2 }))
        .collect(),
        transistors: vec![
            device("Q1", if on { "saturated" } else { "off" }, on),
            device("Q2", "active", true),
        ],
        elements: vec![
            ("BT1".into(), 12.6, -0.10397, -1.31),
            ("R1".into(), 3.85, 8.19e-3, 0.0315),
            ("R2".into(), 0.7512, 7.5e-5, 5.6e-5),
            ("DS1".into(), 12.47, 0.10397, 1.296),
        ],
        attempts: vec!["direct iteration".into(), "source stepping".into()],
    };
    let failed = OperatingFinding {
        not_shown: Some(
            "no solution met the current rule: the largest residual was 3 parts in a million at node base"
                .into(),
        ),
        nodes: vec![],
        transistors: vec![],
        elements: vec![],
        ..of("shorted lamp", true)
    };
    vec![of("on", true), of("off", false), failed]
}

fn stress() -> Vec<StressLine> {
    use RatingQuantity as R;
    let mut out = Vec::new();
    for condition in ["on", "off", "inrush"] {
        for (designator, quantity, u, worst, rating) in [
            ("Q1", R::CollectorEmitter, "V", 14.8, 45.0),
            ("Q1", R::EmitterBase, "V", 0.4, 5.0),
            ("Q1", R::CollectorCurrent, "A", if condition == "inrush" { 1.0437 } else { 0.137 }, 0.8),
            ("Q1", R::Dissipation, "mW", 46.3, 500.0),
            ("Q1", R::JunctionTemperature, "°C", 71.4, 150.0),
            ("R1", R::Dissipation, "mW", 39.2, 250.0),
            ("R2", R::Voltage, "V", 4.8, 200.0),
        ] {
            let unit = unit(u);
            let si = |v: f64| v * unit.factor + unit.offset;
            let missing = designator == "R2" && condition == "on";
            let bad = worst > rating * 0.8;
            out.push(StressLine {
                designator: designator.into(),
                quantity,
                condition: condition.into(),
                kind: unit.kind,
                worst: Shown::Value(si(worst)),
                corner: Corner {
                    levels: pairs(&[("V_bat", "14.8 V"), ("Q1 gain", "high"), ("T_a", "50 °C")]),
                    telling: 2,
                },
                assumptions: 0,
                thermal: "equilibrium".into(),
                rating: (!missing).then(|| si(rating)),
                limit: (!missing).then(|| si(rating * 0.8)),
                ratio: (!missing).then_some(worst / rating),
                verdict: if missing {
                    "not-shown"
                } else if bad {
                    "not-met"
                } else {
                    "met"
                }
                .into(),
                reason: missing.then(|| "the record RX-5 states no working voltage".into()),
                source: source(Origin::DataSheet, "LBN-250 rev 1 p. 1"),
                unit,
            });
        }
    }
    out
}

fn body() -> Vec<Flow> {
    let formula = Inline::Formula {
        math: row(vec![symbol("", "I", "B"), operator(">"), value("5", "mA")]),
        spoken: "base current greater than five milliampere".into(),
    };
    vec![
        heading(1, "What the switch does"),
        Flow::Paragraph {
            content: vec![
                text(
                    "The lantern of the light buoy flashes a filament lamp from a battery. A logic output drives ",
                ),
                Inline::Emphasis { content: vec![text("one NPN transistor")] },
                text(" at the low side; the base gets 8.19 mA and the transistor is "),
                Inline::Strong { content: vec![text("saturated")] },
                text(", because "),
                formula,
                text(" at every corner"),
                Inline::Footnote {
                    content: vec![paragraph(
                        "As printed in the summary; the drive is lowest when the logic supply is low and the output is loaded.",
                    )],
                },
                text(". See "),
                Inline::Link {
                    target: "https://example.org/light-list".into(),
                    content: vec![text("the light list")],
                },
                text(" for the flash code, and "),
                Inline::Code { text: "flash --code 'Fl(2)'".into() },
                text("."),
            ],
        },
        Flow::List {
            ordered: None,
            items: vec![
                vec![paragraph("The cold filament draws nine times the hot current for 80 ms.")],
                vec![
                    paragraph("The battery may be reversed by whoever services the buoy."),
                    Flow::List {
                        ordered: Some(1),
                        items: vec![
                            vec![paragraph("first by mistake,")],
                            vec![paragraph("then never again.")],
                        ],
                    },
                ],
            ],
        },
        heading(3, "Basis"),
        placed("basis", 0),
        placed("conditions", 0),
        heading(2, "Circuit"),
        paragraph("Лампа включена между батареей и коллектором; база — через R1."),
        placed("circuit", 0),
        heading(1, "Why these values"),
        paragraph(
            "Each line has one new unknown. Drops and gains are the sheet's bounds at the stated corner, not the solver's results.",
        ),
        placed("derivation", 0),
        paragraph("The junction stays cool:"),
        placed("derivation", 1),
        heading(2, "Curves"),
        placed("figure", 0),
        placed("figure", 1),
        heading(2, "What was tried"),
        Flow::Table {
            align: vec![Align::Left, Align::Right, Align::Center],
            head: vec![
                vec![text("Base resistor")],
                vec![text("Base current")],
                vec![text("Verdict of the bench")],
            ],
            rows: vec![
                vec![
                    vec![text("1 kΩ")],
                    vec![text("3.9 mA")],
                    vec![text("lamp dim after a cold night, transistor hot")],
                ],
                vec![
                    vec![text("470 Ω")],
                    vec![text("8.2 mA")],
                    vec![Inline::Strong { content: vec![text("kept")] }],
                ],
            ],
        },
        Flow::Quote { content: vec![paragraph("A lamp is a short circuit that thinks better of it.")] },
        Flow::Listing { text: "on:     {normal: yes}\noff:    {normal: yes, V_drive: 0 to 0.4 V}".into() },
        Flow::Rule,
        Flow::Image {
            path: "lantern/bench.svg".into(),
            alt: "The lantern opened on the bench".into(),
            caption: vec![text("The lantern on the bench.")],
        },
        placed("acceptance", 0),
    ]
}

pub fn findings() -> Findings {
    let resistor = Law::Diode(DiodeLaw {
        nominal: qsheaf::device::diode::Diode {
            saturation_current: 1e-12,
            emission_coefficient: 1.0,
            series_resistance: 0.0,
            leakage: 0.0,
            leakage_e_fold: 14.4,
            breakdown_voltage: 5.1,
            breakdown_current: 5e-3,
            breakdown_slope: 0.1,
            breakdown_coefficient: 0.0,
            energy_gap: 1.12,
            saturation_exponent: 3.0,
        },
        v_f: [0.0; 2],
        leakage: [1.0; 2],
        v_z: [0.0; 2],
    });
    let residual = |quantity, at: &str, v: [Option<f64>; 3], model| Residual {
        quantity,
        at: at.into(),
        min: v[0],
        typ: v[1],
        max: v[2],
        model,
    };
    Findings {
        schema: SCHEMA,
        program: "0.1.0".into(),
        note: NoteHead {
            organisation: "Harbour Lights Workshop".into(),
            note: "LB-017".into(),
            title: "Low-side lamp switch of the lantern flasher".into(),
            author: "A. Designer".into(),
            checker: None,
            approver: None,
            revision: "C".into(),
            date: "2026-10-02".into(),
            language: "en-GB".into(),
            paper: "a4".into(),
            logo: None,
            revisions: vec![
                ["A".into(), "2026-03-01".into(), "first issue".into()],
                ["B".into(), "2026-06-12".into(), "base resistor 1 kΩ → 470 Ω after the bench in the cold".into()],
                ["C".into(), "2026-10-02".into(), "second source for Q1".into()],
            ],
        },
        body: body(),
        inputs: inputs(),
        conditions: vec![
            ConditionFinding { name: "on".into(), normal: true, lasts: None, overrides: vec![] },
            ConditionFinding { name: "off".into(), normal: true, lasts: None, overrides: pairs(&[("V_drive", "0 to 0.4 V")]) },
            ConditionFinding { name: "inrush".into(), normal: true, lasts: Some("80 ms".into()), overrides: pairs(&[("DS1", "cold")]) },
            ConditionFinding { name: "reversed battery".into(), normal: false, lasts: None, overrides: pairs(&[("V_bat", "−14.8 to −10.8 V"), ("V_drive", "0 V")]) },
        ],
        elements: [
            ("BT1", "supply", "V_bat", None, vec![("plus", "bat"), ("minus", "ground")]),
            ("PS1", "supply", "V_drive", None, vec![("plus", "drive"), ("minus", "ground")]),
            ("DS1", "filament lamp", "12 V 1.2 W, cold R_cold = 14 Ω ± 20 %", None, vec![("from", "bat"), ("to", "lamp")]),
            ("R1", "resistor", "470 Ω ± 5 %", Some("RX-5"), vec![("from", "drive"), ("to", "base")]),
            ("R2", "resistor", "10 kΩ ± 5 %", Some("RX-5"), vec![("from", "base"), ("to", "ground")]),
            ("Q1", "NPN transistor", "", Some("LBN-250"), vec![("collector", "lamp"), ("base", "base"), ("emitter", "ground")]),
        ]
        .into_iter()
        .map(|(designator, kind, value, part, terminals)| ElementFinding {
            designator: designator.into(), kind: kind.into(), value: value.into(), part: part.map(str::to_owned), terminals: pairs(&terminals),
        })
        .collect(),
        points: points(),
        results: results(),
        derivation: derivation(),
        criteria: criteria(),
        spreads: vec![spread()],
        stress: stress(),
        heat: vec![HeatFinding {
            designator: "Q1".into(),
            condition: "on".into(),
            ambient: 323.15,
            r_th: 180.0,
            equilibrium: Some(EquilibriumFinding { power: 0.12, t_j: 344.75, gain: 0.62 }),
            runaway_from: Some(391.2),
            looked_at: [173.15, 473.15],
            upper: Some(402.0),
            ballast: Some(3.3),
        }],
        cautions: vec![
            Caution { hazard: "burn".into(), title: "Hot surface".into(), why: "DS1 dissipates up to 1.8 W; its glass passes 60 °C at T_a = 50 °C.".into(), measure: "Guard the lamp, let it cool before service.".into(), basis: "EN ISO 13732-1, bare metal, contact of 1 s".into() },
            Caution { hazard: "gain-dependence".into(), title: "Darkness depends on the transistor".into(), why: "The criterion “dark” is a safety function and leans on I_CBO of Q1.".into(), measure: "Add a second, independent means of switching off, or monitor the lamp current.".into(), basis: "common practice".into() },
        ],
        figures: figures(),
        trace: vec![
            ("LB-1 3.3".into(), "The lamp shall get at least 10 V.".into(), vec!["bright".into()]),
            ("LB-1 3.4".into(), "The switch shall saturate with an overdrive of 1.5.".into(), vec!["saturated".into()]),
            ("LB-1 3.5".into(), "Inrush shall stay below 1 A.".into(), vec!["inrush".into()]),
            ("LB-1 3.8".into(), "The switch shall survive a shorted lamp for 1 s.".into(), vec![]),
        ],
        models: vec![Model {
            part: "LBN-250".into(),
            law: resistor,
            axes: vec![
                SpreadAxis { name: "gain".into(), low: Bound::Sourced, high: Bound::Sourced },
                SpreadAxis { name: "V_BE".into(), low: Bound::Weak { source: Source { origin: Origin::Assumption, text: "typical less 80 mV".into() } }, high: Bound::Sourced },
                SpreadAxis { name: "leakage".into(), low: Bound::Sourced, high: Bound::Absent { wanted: "a maximum row of I_CBO at 100 °C".into() } },
            ],
            residuals: vec![
                residual(RowQuantity::CurrentGain, "I_C = 10 mA, V_CE = 5 V", [Some(90.0), Some(180.0), Some(450.0)], [89.2, 181.0, 455.0]),
                residual(RowQuantity::CurrentGain, "I_C = 150 mA, V_CE = 1 V", [Some(60.0), None, None], [58.8, 120.0, 302.0]),
                residual(RowQuantity::BaseEmitterVoltage, "I_C = 10 mA, V_CE = 5 V", [None, Some(0.66), Some(0.72)], [0.58, 0.6603, 0.72]),
                residual(RowQuantity::CollectorEmitterSaturation, "I_C = 100 mA, I_B = 5 mA", [None, Some(0.11), Some(0.3)], [0.0612, 0.1103, 0.3]),
                residual(RowQuantity::CollectorCutoff, "V_CB = 30 V", [None, Some(1e-9), Some(1e-7)], [0.0, 1e-9, 1e-7]),
            ],
            notes: vec!["No row for the output conductance: the Early effect is left out.".into()],
        }],
        parts: vec![Part {
            name: "LBN-250".into(), kind: PartKind::Npn, description: "NPN switching transistor, invented for this notebook".into(),
            rows: vec![], ratings: vec![], pulses: vec![], spread: None, digest: Digest::of(b"part"), place: place(1),
        }],
        validity: vec![
            "Junction temperatures between −40 and 150 °C.".into(),
            "Direct current; nothing is said about how fast the lamp is switched.".into(),
            "The transport form of Ebers and Moll with the base charge of Gummel and Poon; no second breakdown.".into(),
        ],
        warnings: Diagnostics(vec![Diagnostic::warning(&place(44), "the name η_λ is defined and never used")]),
        files: vec![
            ("notebook.yaml".into(), Digest::of(b"notebook")),
            ("lantern/lamp switch.md".into(), Digest::of(b"worksheet")),
            ("parts/lbn-250.yaml".into(), Digest::of(b"part")),
            ("lantern/bench.svg".into(), Digest::of(b"bench")),
        ],
        digest: Digest::of(b"all"),
    }
}

/// A criterion by three methods, one of which says nothing.
fn spread() -> SpreadFinding {
    let quantile = |value: f64| Quantile { value, low: Some(value - 0.01), high: None };
    let term = |symbol: &str, role, reach: f64| TermFinding {
        symbol: symbol.into(),
        role,
        reach,
        sensitivity: reach,
        effect: reach / 2.0,
    };
    SpreadFinding {
        criterion: "saturated".into(),
        unit: unit("V"),
        condition: "on".into(),
        thermal: "cold start".into(),
        held: pairs(&[("V_bat", "10.8 V"), ("T_a", "-20 °C")]),
        nominal: Shown::Value(0.4),
        extreme: Shown::Value(-0.02),
        combined: CombinedFinding {
            end: Shown::NotShown("not linear: use Monte Carlo or extreme value".into()),
            bias: -0.1,
            deviation: 0.05,
            coverage_factor: 2.326,
            departure: 0.4,
        },
        sampled: Some(SampledFinding {
            samples: 10_000,
            seed: 1,
            passed: 9_990,
            missing: 3,
            passing: Proportion { share: 0.999, low: 0.998, high: 0.9996 },
            confidence: 0.95,
            coverage: 0.99,
            margin: Some(quantile(0.1)),
            interval: Some([quantile(0.5), quantile(0.9)]),
            unit: unit("V"),
        }),
        terms: vec![
            term("R1", Role::UNIFORM, 0.2),
            term("V_bat", Role::Bias, -0.1),
            term("R1 ageing", Role::Bias, 0.02),
            term("ϑ_буй", Role::Random(Distribution::Normal { sigmas: 2.0 }), 1e-6),
        ],
    }
}

pub fn issue() -> Issue {
    Issue { number: 3, date: "2026-10-02".into(), status: Status::Issued, program: "0.1.0".into() }
}

pub fn moves() -> Moves {
    let volt = unit("V");
    Moves {
        since: 2,
        program: Some(("0.0.9".into(), "0.1.0".into())),
        files: vec![("parts/lbn-250.yaml".into(), FileMove::Changed)],
        inputs: vec![
            InputMove {
                symbol: "V_bat".into(),
                old: Some("10.8 to 14.4 V".into()),
                new: Some("10.8 to 14.8 V".into()),
            },
            InputMove { symbol: "Q1 gain".into(), old: None, new: Some("90 to 450".into()) },
        ],
        results: vec![ResultMove {
            symbol: "Q1.V_CE".into(),
            condition: "on".into(),
            end: "maximum".into(),
            kind: volt.kind,
            unit: volt.clone(),
            old: Some(Shown::Value(0.33120001)),
            new: Some(Shown::Value(0.33120002)),
        }],
        verdicts: vec![
            VerdictMove {
                label: "inrush".into(),
                kind: unit("A").kind,
                unit: unit("A"),
                old: Some((Verdict::Met, Shown::Value(0.012))),
                new: Some((Verdict::NotMet, Shown::Value(-0.0437))),
            },
            VerdictMove {
                label: "cool".into(),
                kind: Kind::TEMPERATURE,
                unit: unit("°C"),
                old: Some((Verdict::Met, Shown::Value(55.1))),
                new: Some((Verdict::Met, Shown::Value(53.57))),
            },
        ],
        wording: true,
        incomparable: None,
    }
}

const BENCH: &str = r##"<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 120 60"><rect x="4" y="4" width="112" height="52" fill="none" stroke="#000"/><circle cx="60" cy="30" r="16" fill="none" stroke="#000"/></svg>"##;

pub fn files() -> Bundle {
    let mut bundle = Bundle::default();
    bundle.insert(File::new("notebook.yaml", b"organisation: Harbour Lights Workshop\n".to_vec()));
    bundle.insert(File::new("lantern/lamp switch.md", b"# What the switch does\n".to_vec()));
    bundle.insert(File::new("parts/lbn-250.yaml", b"LBN-250:\n".to_vec()));
    bundle.insert(File::new("lantern/bench.svg", BENCH.as_bytes().to_vec()));
    bundle
}
