//! Stress: policies, demands and their margins as formulas, lines with verdicts.

use std::collections::BTreeMap;

use qsheaf::circuit::{self, Element};
use qsheaf::diagnostic::Diagnostics;
use qsheaf::formula::Formula;
use qsheaf::part::{self, Part, RatingQuantity as Q};
use qsheaf::quantity::{Dimension, Kind, Origin, Shown};
use qsheaf::source::{File, Place};
use qsheaf::spread::Corner;
use qsheaf::stress::policy::{Class, Derated};
use qsheaf::stress::{self, Applies, Demand, Judged, Policy, policy};
use qsheaf::worksheet;

const POLICY: &str = "name: Harbour derating\nsource: specification HE-100 clause 7\n\
    transistor: {V_CEO: 75 %, I_C: 75 %, I_CM: 90 %, P_tot: 60 %, T_j: 115 °C}\n\
    diode: {V_R: 70 %, I_F: 75 %}\nresistor: {P: 50 %, V: 80 %}\ncapacitor: {V: 60 %}\n";

const PARTS: &str = "LBN-250:
  kind: npn
  source: data sheet LBN-250 rev C
  ratings: {V_CEO: 60 V, V_EBO: 5 V, I_C: 1 A, I_CM: 2 A, P_tot: {value: 0.75 W, up to: 25 °C}, T_j: 150 °C, R_th(j-a): 160 K/W}
LBP-120:
  kind: pnp
  source: data sheet LBP-120 rev A
  ratings: {V_CEO: 40 V, V_CBO: 50 V, I_C: 0.5 A, P_tot: 0.5 W}
LBD-1:
  kind: diode
  source: from memory
  ratings: {V_R: 100 V, I_F: 1 A, T_j: 150 °C}
LBZ-62:
  kind: zener
  source: data sheet LBZ-62 rev B
  ratings: {P_tot: {value: 0.4 W, up to: 50 °C}, T_j: 175 °C, R_th(j-a): 300 K/W}
LBR-25:
  kind: resistor
  source: data sheet LBR-25 rev B
  ratings: {P_tot: {value: 0.25 W, up to: 70 °C}, T_j: 155 °C, V: 250 V}
LBK-12:
  kind: coil
  source: data sheet LBK-12 rev A
  ratings: {V: 15 V}
";

const CIRCUIT: &str = "BT1: {supply: 12 V, plus: bat}\n\
    Q1: {npn: LBN-250, collector: lamp, base: base, emitter: ground}\n\
    Q2: {pnp: LBP-120, collector: base, base: lamp, emitter: bat}\n\
    D1: {diode: LBD-1, anode: lamp, cathode: bat}\n\
    D2: {zener: LBZ-62, anode: ground, cathode: base}\n\
    R1: {resistor: 470 Ω, power: 0.25 W, from: bat, to: base}\n\
    R2: {resistor: 1 kΩ, part: LBR-25, from: bat, to: base}\n\
    R3: {resistor: 1 kΩ, from: bat, to: base}\n\
    C1: {capacitor: 10 µF, voltage: 25 V, from: bat, to: ground}\n\
    C2: {capacitor: 10 µF, from: bat, to: ground}\n\
    DS1: {filament: 14 V 1.2 W ± 5 %, from: bat, to: lamp}\n\
    K1: {coil: 320 Ω, part: LBK-12, from: bat, to: lamp}\n";

struct Bench {
    elements: Vec<Element>,
    parts: Vec<Part>,
    policy: Policy,
    kinds: BTreeMap<String, Kind>,
}

fn file(name: &str, text: &str) -> File {
    File::new(name, text.as_bytes().to_vec())
}

fn bench() -> Bench {
    let parts = part::read(&file("parts.yaml", PARTS)).unwrap_or_else(|found| panic!("{found:#?}"));
    let head = "---\nnote: HB-1\ntitle: T\nauthor: A. Keeper\nrevision: A\ndate: 2026-11-30\n---\n";
    let text = format!("{head}```circuit\n{CIRCUIT}```\n");
    let (worksheet, _) = worksheet::read(&file("a.md", &text)).unwrap_or_else(|found| panic!("{found:#?}"));
    let part_kinds = parts.iter().map(|part| (part.name.clone(), part.kind)).collect();
    let built = circuit::build(&worksheet.circuit, &BTreeMap::new(), &part_kinds)
        .unwrap_or_else(|found| panic!("{found:#?}"));
    let mut kinds: BTreeMap<String, Kind> =
        circuit::symbols(&built.network).into_iter().map(|symbol| (symbol.name, symbol.kind)).collect();
    kinds.insert("T_a".to_owned(), Kind::TEMPERATURE);
    let policy = policy::read(&file("p.yaml", POLICY)).unwrap_or_else(|found| panic!("{found:#?}"));
    Bench { elements: built.network.elements, parts, policy, kinds }
}

impl Bench {
    fn demands(&self, designator: &str, policy: &Policy) -> Vec<Demand> {
        let element =
            self.elements.iter().find(|element| element.designator == designator).expect("an element");
        let part = element.part.as_ref().and_then(|name| self.parts.iter().find(|part| part.name == *name));
        stress::demands(element, part, policy)
    }

    fn demand(&self, designator: &str, quantity: Q) -> Demand {
        let demands = self.demands(designator, &self.policy);
        demands.into_iter().find(|demand| demand.quantity == quantity).expect("a demand")
    }

    /// Value of a formula with the given symbols, its kind checked against the circuit's symbols.
    fn value(&self, text: &str, kind: Kind, at: &[(&str, f64)]) -> f64 {
        let place = Place::new(&"demand".into(), 1, 1, 0);
        let formula = Formula::parse(text, &place).unwrap_or_else(|found| panic!("`{text}`: {found:#?}"));
        let found = formula
            .kind(&|name| self.kinds.get(name).copied(), &mut std::iter::empty())
            .unwrap_or_else(|found| panic!("`{text}`: {found:#?}"));
        assert_eq!(found, kind, "`{text}`");
        let slot = |name: &str| at.iter().position(|(symbol, _)| *symbol == name);
        let tape = formula.compile(&slot).unwrap_or_else(|found| panic!("`{text}`: {found:#?}"));
        tape.eval(&at.iter().map(|(_, value)| *value).collect::<Vec<_>>())
    }

    fn margin(&self, demand: &Demand, normal: bool, at: &[(&str, f64)]) -> f64 {
        let kind = Kind::of(demand.kind.dimension);
        self.value(&demand.margin(normal).expect("a margin"), kind, at)
    }
}

fn close(is: f64, wanted: f64) {
    assert!((is - wanted).abs() <= 1e-9 * wanted.abs().max(1.), "{is} instead of {wanted}");
}

fn quantities(demands: &[Demand]) -> Vec<Q> {
    demands.iter().map(|demand| demand.quantity).collect()
}

#[test]
fn a_policy_derates_what_it_names() {
    let policy = bench().policy;
    assert_eq!(policy.name, "Harbour derating");
    assert_eq!(policy.source.as_ref().map(|source| source.origin), Some(Origin::Specification));
    close(policy.limit(Class::Transistor, Q::CollectorEmitter, 60.), 45.);
    close(policy.limit(Class::Transistor, Q::JunctionTemperature, 423.15), 388.15);
    // A limit above the rating never loosens it.
    close(policy.limit(Class::Transistor, Q::JunctionTemperature, 373.15), 373.15);
    close(policy.limit(Class::Resistor, Q::Dissipation, 0.25), 0.125);
    // Nothing is said of a diode's T_j.
    close(policy.limit(Class::Diode, Q::JunctionTemperature, 423.15), 423.15);
    assert_eq!(policy.derated(Class::Capacitor, Q::Voltage), Some(Derated::Share(0.6)));
    close(Policy::none().limit(Class::Transistor, Q::CollectorEmitter, 60.), 60.);
}

fn refusals(text: &str) -> Vec<String> {
    let found: Diagnostics = policy::read(&file("p.yaml", text)).expect_err("an error");
    found
        .0
        .iter()
        .map(|found| {
            let place = found.place.as_ref().map_or((0, 0), |place| (place.line, place.column));
            format!("{}:{} {} ({})", place.0, place.1, found.message, found.nearest.as_deref().unwrap_or(""))
        })
        .collect()
}

#[test]
fn a_policy_that_is_wrong_is_refused_with_its_place() {
    let head = "name: A\nsource: clause 7\n";
    for (text, wanted) in [
        ("transistr: {V_CEO: 75 %}\n", "3:1 unknown key `transistr` (transistor)"),
        ("transistor: {V_CE0: 75 %}\n", "3:14 unknown key `V_CE0` (V_CEO)"),
        ("resistor: {V_CEO: 75 %}\n", "3:12 unknown key `V_CEO` ()"),
        ("resistor: {P: 120 %}\n", "3:15 `120 %` is no share of a rating ()"),
        ("resistor: {P: 0 %}\n", "3:15 `0 %` is no share of a rating ()"),
        ("resistor: {P: 60 % ± 5 %}\n", "3:15 the limit of `P` has a tolerance ()"),
        ("transistor: {T_j: 75 %}\n", "3:19 this is a value in"),
        ("transistor: {T_j: 115 K}\n", "3:19 this is a temperature difference, not a temperature ()"),
        ("transistor: 75 %\n", "3:13 one value stands where a map belongs ()"),
    ] {
        let found = refusals(&format!("{head}{text}"));
        assert!(found.len() == 1 && found[0].starts_with(wanted.trim_end_matches(')')), "{text}: {found:?}");
    }
    let found = refusals("transistor: {V_CEO: 750 %, I_D: 1 %}\n");
    assert_eq!(found.len(), 4, "name, source and both limits: {found:?}");
    assert!(policy::read(&File::new("p.yaml", vec![0xff, 0xfe])).is_err());
}

#[test]
fn every_policy_of_the_notebook_can_be_read() {
    let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("worksheets/policies");
    let mut count = 0;
    for entry in std::fs::read_dir(folder).expect("the folder of policies") {
        let path = entry.expect("an entry").path();
        let text = std::fs::read(&path).expect("a policy");
        let policy =
            policy::read(&File::new("p.yaml", text)).unwrap_or_else(|found| panic!("{path:?} {found:#?}"));
        assert!(policy.derated(Class::Transistor, Q::JunctionTemperature).is_some());
        count += 1;
    }
    assert!(count >= 1);
}

#[test]
fn each_kind_of_element_demands_its_ratings() {
    let bench = bench();
    let all = |designator: &str| quantities(&bench.demands(designator, &bench.policy));
    use Q::*;
    let transistor = [
        CollectorEmitter,
        CollectorBase,
        EmitterBase,
        CollectorCurrent,
        PeakCollectorCurrent,
        Dissipation,
        JunctionTemperature,
    ];
    assert_eq!(all("Q1"), transistor);
    assert_eq!(all("Q2"), transistor);
    assert_eq!(all("D1"), [Reverse, ForwardCurrent, PeakForwardCurrent, JunctionTemperature]);
    assert_eq!(all("D2"), [Dissipation, JunctionTemperature]);
    assert_eq!(all("R1"), [Dissipation]);
    assert_eq!(all("R2"), [Dissipation, Voltage]);
    assert_eq!(all("C1"), [Voltage]);
    assert_eq!(all("C2"), [Voltage]);
    // What a lamp takes at its rated voltage is no second limit.
    assert_eq!(all("DS1"), [Voltage]);
    assert_eq!(all("K1"), [Voltage]);
    assert!(all("BT1").is_empty());
}

#[test]
fn what_is_observed_is_positive_under_stress() {
    let bench = bench();
    let observe = |designator: &str, quantity| bench.demand(designator, quantity).observe;
    assert_eq!(observe("Q1", Q::CollectorEmitter), "Q1.V_CE");
    assert_eq!(observe("Q2", Q::CollectorEmitter), "Q2.V_EC");
    assert_eq!(observe("Q1", Q::EmitterBase), "Q1.V_EB");
    assert_eq!(observe("Q2", Q::EmitterBase), "Q2.V_BE");
    assert_eq!(observe("D1", Q::Reverse), "-D1.V");
    for element in &bench.elements {
        for demand in bench.demands(&element.designator, &bench.policy) {
            // Every formula is of the rating's kind over symbols that the circuit offers.
            let at: Vec<(&str, f64)> = bench.kinds.keys().map(|name| (name.as_str(), 1.)).collect();
            bench.value(&demand.observe, demand.kind, &at);
            if demand.rating.is_some() {
                bench.margin(&demand, true, &at);
                bench.margin(&demand, false, &at);
            }
        }
    }
}

#[test]
fn margins_count_from_the_derated_limit_in_normal_conditions() {
    let bench = bench();
    let demand = bench.demand("Q1", Q::CollectorEmitter);
    assert_eq!((demand.rating, demand.limit), (Some(60.), Some(45.)));
    close(bench.margin(&demand, true, &[("Q1.V_CE", 14.8)]), 30.2);
    close(bench.margin(&demand, false, &[("Q1.V_CE", 14.8)]), 45.2);
    let demand = bench.demand("D1", Q::Reverse);
    close(bench.margin(&demand, true, &[("D1.V", -14.8)]), 70. - 14.8);
    let demand = bench.demand("Q1", Q::JunctionTemperature);
    close(bench.margin(&demand, true, &[("Q1.T_j", 373.15)]), 15.);
    close(bench.margin(&demand, false, &[("Q1.T_j", 373.15)]), 50.);
    let demand = bench.demand("Q1", Q::CollectorCurrent);
    close(bench.margin(&demand, true, &[("Q1.I_C", -0.25)]), 0.5);
}

/// 0.75 W up to 25 °C, nothing at 150 °C: 0.6 W at 50 °C, of which the policy leaves 60 %.
#[test]
fn dissipation_falls_with_the_ambient_temperature() {
    let bench = bench();
    let demand = bench.demand("Q1", Q::Dissipation);
    for (ambient, limit) in [(253.15, 0.75), (298.15, 0.75), (323.15, 0.6), (423.15, 0.), (433.15, 0.)] {
        close(bench.margin(&demand, false, &[("Q1.P", 0.1), ("T_a", ambient)]), limit - 0.1);
        close(bench.margin(&demand, true, &[("Q1.P", 0.1), ("T_a", ambient)]), 0.6 * limit - 0.1);
        close(demand.share(ambient), limit / 0.75);
    }
    assert_eq!(demand.assumption(Some(400.)), None);
    // Without its temperature and without T_j or a thermal resistance nothing says where a rating ends.
    let demand = bench.demand("Q2", Q::Dissipation);
    assert_eq!((demand.rating, demand.margin(false)), (None, None));
    assert!(demand.wanted.contains("R_th(j-a) of part LBP-120"), "{}", demand.wanted);
}

#[test]
fn a_resistor_falls_as_its_part_says_or_as_assumed() {
    let bench = bench();
    let demand = bench.demand("R2", Q::Dissipation);
    // Halfway from 70 °C to 155 °C half of it is left, and half of that after derating.
    close(bench.margin(&demand, true, &[("R2.P", 0.), ("T_a", 273.15 + 112.5)]), 0.0625);
    assert_eq!(demand.assumption(None), None);
    let demand = bench.demand("R1", Q::Dissipation);
    assert_eq!(demand.rating, Some(0.25));
    close(demand.share(273.15 + 97.5), 0.5);
    assert!(demand.assumption(Some(333.15)).is_none());
    assert!(demand.assumption(Some(353.15)).is_some_and(|text| text.contains("70 °C")));
    let demand = bench.demand("R3", Q::Dissipation);
    assert_eq!((demand.rating, demand.wanted.as_str()), (None, "`power` of R3"));
    assert_eq!(bench.demand("C2", Q::Voltage).wanted, "`voltage` of C2");
}

#[test]
fn another_rating_stands_in_on_the_safe_side() {
    let bench = bench();
    let demand = bench.demand("Q1", Q::CollectorBase);
    assert_eq!((demand.rating, demand.limit), (Some(60.), Some(45.)));
    assert!(demand.stands_in.is_some_and(|text| text.starts_with("V_CEO")));
    let demand = bench.demand("Q2", Q::CollectorBase);
    assert_eq!((demand.rating, demand.stands_in), (Some(50.), None));
    let demand = bench.demand("Q2", Q::PeakCollectorCurrent);
    assert_eq!((demand.rating, demand.limit), (Some(0.5), Some(0.375)));
    assert_eq!(bench.demand("Q2", Q::EmitterBase).rating, None);
    assert_eq!(bench.demand("Q2", Q::EmitterBase).wanted, "rating V_EBO of part LBP-120");
}

#[test]
fn peaks_belong_to_conditions_that_end() {
    let bench = bench();
    let steady = bench.demand("Q1", Q::CollectorCurrent).applies;
    let peak = bench.demand("Q1", Q::PeakCollectorCurrent).applies;
    assert_eq!((steady, peak), (Applies::Steady, Applies::Lasting));
    assert!(steady.to(false) && !steady.to(true) && !peak.to(false) && peak.to(true));
    assert!(Applies::Always.to(true) && Applies::Always.to(false));
}

#[test]
fn without_thermal_resistance_that_row_is_wanted() {
    let bench = bench();
    assert_eq!(bench.demand("D1", Q::JunctionTemperature).wanted, "row R_th(j-a) of part LBD-1");
    assert_eq!(bench.demand("Q2", Q::JunctionTemperature).wanted, "rating T_j of part LBP-120");
}

fn judged(worst: f64, margin: f64) -> Judged {
    Judged {
        condition: "lamp on".to_owned(),
        normal: true,
        thermal: "equilibrium".to_owned(),
        worst: Shown::Value(worst),
        margin: Some(margin),
        ambient: Some(323.15),
        hottest: Some(323.15),
        corner: Corner { levels: vec![("V_bat".to_owned(), "14.8 V".to_owned())], telling: 1 },
        assumptions: 0,
        open: None,
    }
}

#[test]
fn lines_carry_verdict_ratio_and_falling_limit() {
    let bench = bench();
    let demand = bench.demand("Q1", Q::Dissipation);
    let line = stress::line(&demand, judged(0.3, 0.06));
    assert_eq!((line.verdict.as_str(), line.reason), ("met", None));
    close(line.rating.expect("a rating"), 0.6);
    close(line.limit.expect("a limit"), 0.36);
    close(line.ratio.expect("a ratio"), 0.5);
    assert_eq!((line.unit.symbol.as_str(), line.kind), ("mW", Kind::of(Dimension::WATT)));
    assert_eq!(line.source.map(|source| source.origin), Some(Origin::DataSheet));

    let verdict = |demand: &Demand, judged: Judged| {
        let line = stress::line(demand, judged);
        (line.verdict, line.reason.unwrap_or_default())
    };
    assert_eq!(verdict(&demand, judged(0.4, -0.04)).0, "not-met");
    assert_eq!(verdict(&demand, Judged { assumptions: 2, ..judged(0.3, 0.06) }).0, "met-on-assumptions");
    let open = || Some("only typical".to_owned());
    assert_eq!(
        verdict(&demand, Judged { open: open(), ..judged(0.3, 0.06) }),
        ("not-shown".to_owned(), "only typical".to_owned())
    );
    // One confirmed violation stands, typical or not.
    assert_eq!(verdict(&demand, Judged { open: open(), ..judged(0.4, -0.04) }).0, "not-met");
    assert!(verdict(&demand, judged(0.36, 1e-9)).1.contains("numerical error"));
    assert_eq!(verdict(&demand, Judged { margin: None, ..judged(0.3, 0.) }).0, "not-shown");
    let unsolved = Judged { worst: Shown::NotShown("no solution".to_owned()), ..judged(0., 0.) };
    assert_eq!(verdict(&demand, unsolved), ("not-shown".to_owned(), "no solution".to_owned()));
    let missing = bench.demand("Q2", Q::EmitterBase);
    assert_eq!(verdict(&missing, judged(1., 4.)).1, "missing: rating V_EBO of part LBP-120");
    // A rating from memory is an assumption.
    let memory = bench.demand("D1", Q::ForwardCurrent);
    assert_eq!(verdict(&memory, judged(0.1, 0.65)).0, "met-on-assumptions");
    // A temperature has no ratio.
    let hot = bench.demand("Q1", Q::JunctionTemperature);
    assert_eq!(stress::line(&hot, judged(373.15, 15.)).ratio, None);
}
