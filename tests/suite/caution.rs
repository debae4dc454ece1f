//! Cautions: for each rule a circuit that triggers it and a near miss that must not.

use qsheaf::caution::{self, Between, Caution, ElementFact, Facts, HeatFact, SafetyFact, Worst};
use qsheaf::circuit::ElementKind;

fn worst(value: f64) -> Option<Worst> {
    Some(Worst { value, condition: "lamp on".to_owned() })
}

fn element(designator: &str, kind: ElementKind, terminals: &[usize]) -> ElementFact {
    ElementFact {
        designator: designator.to_owned(),
        kind,
        terminals: terminals.to_vec(),
        temperature: None,
        voltage: None,
        current: None,
        energy: None,
        power_ratio: None,
        reverse_v_eb: None,
        v_ebo: None,
        resistance: None,
    }
}

fn of(elements: Vec<ElementFact>) -> Vec<Caution> {
    caution::cautions(&Facts { elements, ..Facts::default() })
}

/// The only caution, of the given hazard.
fn only(found: &[Caution], hazard: &str) -> Caution {
    assert_eq!(found.len(), 1, "{found:#?}");
    assert_eq!(found[0].hazard, hazard);
    assert!(found[0].measure.ends_with("Local codes and licensed practice decide."));
    assert!(!found[0].basis.is_empty() && !found[0].title.is_empty());
    found[0].clone()
}

#[test]
fn a_quiet_circuit_has_none() {
    let quiet = element("R1", ElementKind::Resistor, &[1, 0]);
    assert!(of(vec![quiet]).is_empty());
    assert!(caution::cautions(&Facts::default()).is_empty());
}

#[test]
fn a_hot_surface_burns() {
    let at = |celsius: f64| {
        let temperature = worst(273.15 + celsius);
        vec![ElementFact { temperature, ..element("Q1", ElementKind::Npn, &[2, 3, 0]) }]
    };
    let found = only(&of(at(88.2)), "burn");
    assert!(found.why.contains("Q1 reaches 88.2\u{a0}°C (lamp on)"), "{}", found.why);
    assert!(found.basis.contains("ISO 13732-1") && found.basis.contains("from memory"));
    assert!(of(at(64.9)).is_empty());
}

#[test]
fn the_hottest_comes_first() {
    let hot = |designator: &str, temperature| ElementFact {
        temperature: worst(temperature),
        ..element(designator, ElementKind::Npn, &[2, 3, 0])
    };
    let found = only(&of(vec![hot("Q1", 350.), hot("Q2", 300.), hot("Q3", 370.)]), "burn");
    let (third, first) = (found.why.find("Q3"), found.why.find("Q1"));
    assert!(third < first && third.is_some() && !found.why.contains("Q2"), "{}", found.why);
}

fn between(voltage: f64) -> Vec<Caution> {
    let voltage = Worst { value: voltage, condition: "surge".to_owned() };
    let highest = Some(Between { nodes: ["bus".to_owned(), "ground".to_owned()], voltage });
    caution::cautions(&Facts { highest, ..Facts::default() })
}

#[test]
fn voltage_above_the_touch_limit_shocks() {
    let found = only(&between(75.), "shock");
    assert!(found.why.contains("75.0\u{a0}V") && found.why.contains("bus") && found.why.contains("surge"));
    assert!(found.why.contains("dry places"), "{}", found.why);
    assert!(only(&between(170.), "shock").why.contains("above extra-low voltage"));
    assert!(between(59.9).is_empty());
}

fn store(kind: ElementKind, energy: f64, voltage: f64) -> Vec<Caution> {
    let (energy, voltage) = (worst(energy), worst(voltage));
    of(vec![ElementFact { energy, voltage, ..element("C1", kind, &[1, 0]) }])
}

#[test]
fn energy_in_capacitors_and_coils_is_told() {
    // 22 J at 15 V: 0.2 F. 1 mF at 100 V holds 0.1 C, far above 45 µC.
    assert!(only(&store(ElementKind::Capacitor, 22., 15.), "stored-energy").why.contains("22.0\u{a0}J"));
    assert!(only(&store(ElementKind::Capacitor, 5., 100.), "stored-energy").why.contains("100\u{a0}V"));
    only(&store(ElementKind::Inductor, 25., 12.), "stored-energy");
    // Less than 20 J below the touch voltage; 40 µC above it; plenty of energy at a voltage that drives nothing.
    assert!(store(ElementKind::Capacitor, 19., 59.).is_empty());
    assert!(store(ElementKind::Capacitor, 40e-6 * 100. / 2., 100.).is_empty());
    assert!(store(ElementKind::Capacitor, 25., 1.9).is_empty());
    assert!(store(ElementKind::Inductor, 0.5, 12.).is_empty());
}

#[test]
fn a_resistor_at_its_rating_is_a_fire() {
    let loaded =
        |kind, ratio| of(vec![ElementFact { power_ratio: worst(ratio), ..element("R1", kind, &[1, 0]) }]);
    assert!(only(&loaded(ElementKind::Resistor, 1.3), "fire").why.contains("130\u{a0}%"));
    only(&loaded(ElementKind::Resistor, 1.), "fire");
    assert!(loaded(ElementKind::Resistor, 0.99).is_empty());
    assert!(loaded(ElementKind::Filament, 1.3).is_empty());
}

#[test]
fn a_base_emitter_junction_in_reverse() {
    let reversed = |volts, v_ebo| {
        let reverse_v_eb = worst(volts);
        of(vec![ElementFact { reverse_v_eb, v_ebo, ..element("Q1", ElementKind::Npn, &[2, 3, 0]) }])
    };
    let found = only(&reversed(6.2, Some(6.)), "base-emitter-reverse");
    assert!(found.why.contains("6.20\u{a0}V") && found.why.contains("V_EBO is 6.00\u{a0}V"), "{}", found.why);
    assert!(only(&reversed(5.1, None), "base-emitter-reverse").why.contains("no V_EBO is known"));
    assert!(reversed(5.9, Some(6.)).is_empty());
    assert!(reversed(4.9, None).is_empty());
}

#[test]
fn a_safety_function_that_leans_on_gain() {
    let safety = |gains: &[&str]| {
        let gains = gains.iter().map(|gain| (*gain).to_owned()).collect();
        let safety = vec![SafetyFact { label: "C3".to_owned(), gains }];
        caution::cautions(&Facts { safety, ..Facts::default() })
    };
    assert!(
        only(&safety(&["Q1", "Q2"]), "gain-dependence")
            .why
            .contains("criterion C3 moves with the gain of Q1, Q2")
    );
    assert!(safety(&[]).is_empty());
}

#[test]
fn missing_rows_are_listed_once() {
    let row = "rating V_EBO of part LBP-120".to_owned();
    let wanted = vec![row.clone(), row.clone()];
    let found = only(&caution::cautions(&Facts { wanted, ..Facts::default() }), "missing-data");
    assert_eq!(found.why.matches(&row).count(), 1);
}

// Inductive loads. Nodes: 0 ground, 1 supply, 2 switched node, 3 base, 4 and 5 further ones.

fn supply() -> ElementFact {
    element("BT1", ElementKind::Supply, &[1, 0])
}

fn coil(terminals: [usize; 2]) -> ElementFact {
    ElementFact {
        resistance: Some(350.),
        current: worst(0.046),
        energy: worst(0.4e-3),
        ..element("K1", ElementKind::Coil, &terminals)
    }
}

fn npn(terminals: [usize; 3]) -> ElementFact {
    element("Q1", ElementKind::Npn, &terminals)
}

fn pnp(terminals: [usize; 3]) -> ElementFact {
    element("Q1", ElementKind::Pnp, &terminals)
}

fn diode(anode: usize, cathode: usize) -> ElementFact {
    element("D1", ElementKind::Diode, &[anode, cathode])
}

fn zener(anode: usize, cathode: usize) -> ElementFact {
    element("D2", ElementKind::Zener, &[anode, cathode])
}

fn resistor(designator: &str, ohms: f64, terminals: [usize; 2]) -> ElementFact {
    ElementFact { resistance: Some(ohms), ..element(designator, ElementKind::Resistor, &terminals) }
}

fn kicks(elements: &[ElementFact]) -> bool {
    let voltage = Worst { value: 14.8, condition: "charging".to_owned() };
    let highest = Some(Between { nodes: ["bat".to_owned(), "ground".to_owned()], voltage });
    let found = caution::cautions(&Facts { elements: elements.to_vec(), highest, ..Facts::default() });
    match found.as_slice() {
        [] => false,
        [one] => {
            assert_eq!(one.hazard, "inductive-kick");
            assert!(
                one.why.contains("K1") && one.why.contains("Q1") && one.why.contains("46.0\u{a0}mA"),
                "{}",
                one.why
            );
            true
        }
        _ => panic!("{found:#?}"),
    }
}

/// A relay on the low side of an NPN transistor, with further elements.
fn low_side(more: &[ElementFact]) -> bool {
    let mut elements = vec![supply(), coil([1, 2]), npn([2, 3, 0])];
    elements.extend_from_slice(more);
    kicks(&elements)
}

#[test]
fn a_low_side_switch_without_a_clamp() {
    assert!(low_side(&[]));
    // A diode across the coil, cathode at the supply.
    assert!(!low_side(&[diode(2, 1)]));
    // The wrong way round it conducts while on and blocks when the transistor opens.
    assert!(low_side(&[diode(1, 2)]));
    // From ground to the switched node it clamps the other direction only.
    assert!(low_side(&[diode(0, 2)]));
    // A capacitor across the coil is no clamp.
    assert!(low_side(&[element("C1", ElementKind::Capacitor, &[2, 1])]));
}

#[test]
fn a_zener_clamps_wherever_it_closes_the_loop() {
    assert!(!low_side(&[zener(0, 2)]));
    assert!(!low_side(&[zener(2, 1)]));
    // Collector to base: it turns the transistor on again.
    assert!(!low_side(&[zener(3, 2)]));
    // From base to emitter it protects the base, not the collector.
    assert!(low_side(&[zener(0, 3)]));
}

#[test]
fn a_resistor_in_the_way_back_must_be_small() {
    assert!(!low_side(&[diode(2, 4), resistor("R1", 330., [4, 1])]));
    assert!(low_side(&[diode(2, 4), resistor("R1", 1e4, [4, 1])]));
    assert!(low_side(&[resistor("R1", 1e5, [2, 0])]));
    assert!(!low_side(&[resistor("R1", 680., [2, 1])]));
}

#[test]
fn a_load_behind_a_resistor_is_still_switched() {
    let behind = [supply(), coil([1, 4]), resistor("R1", 100., [4, 2]), npn([2, 3, 0])];
    assert!(kicks(&behind));
    assert!(!kicks(&[&behind[..], &[diode(4, 1)]].concat()));
    // A clamp at the far side of the resistor takes over the current as well.
    assert!(!kicks(&[&behind[..], &[diode(2, 1)]].concat()));
}

#[test]
fn a_high_side_switch() {
    let high = [supply(), pnp([2, 3, 1]), coil([2, 0])];
    assert!(kicks(&high));
    assert!(!kicks(&[&high[..], &[diode(0, 2)]].concat()));
    assert!(kicks(&[&high[..], &[diode(2, 1)]].concat()));
}

#[test]
fn an_emitter_follower() {
    let follower = [supply(), npn([1, 3, 2]), coil([2, 0])];
    assert!(kicks(&follower));
    assert!(!kicks(&[&follower[..], &[diode(0, 2)]].concat()));
}

#[test]
fn a_coil_that_no_transistor_switches_or_that_carries_nothing() {
    assert!(!kicks(&[supply(), coil([1, 0]), npn([2, 3, 0]), resistor("R1", 1e3, [1, 2])]));
    let idle = ElementFact { current: worst(2e-8), ..coil([1, 2]) };
    assert!(!kicks(&[supply(), idle, npn([2, 3, 0])]));
    // A coil at the base carries base current into the junction.
    assert!(!kicks(&[supply(), coil([1, 3]), npn([2, 3, 0]), resistor("R1", 1e3, [1, 2])]));
}

/// Relay and a second stage on a supply behind a fuse resistor (node 4): the clamped relay is not blamed on the second stage.
#[test]
fn another_stage_on_the_same_supply_does_not_switch_the_coil() {
    let mut elements = vec![supply(), resistor("R1", 10., [1, 4]), coil([4, 2]), npn([2, 3, 0]), diode(2, 4)];
    let second = ElementFact { designator: "Q2".to_owned(), ..pnp([5, 3, 4]) };
    elements.extend([second, resistor("R2", 1e3, [5, 0])]);
    assert!(!kicks(&elements));
}

#[test]
fn a_bridge_needs_the_diodes_of_both_sides() {
    let q =
        |designator: &str, element: ElementFact| ElementFact { designator: designator.to_owned(), ..element };
    let bridge = vec![
        supply(),
        coil([2, 4]),
        q("Q1", pnp([2, 3, 1])),
        q("Q2", npn([2, 3, 0])),
        q("Q3", pnp([4, 5, 1])),
        q("Q4", npn([4, 5, 0])),
    ];
    assert!(kicks(&bridge));
    let one_side = [diode(2, 1), diode(0, 2)];
    assert!(kicks(&[&bridge[..], &one_side].concat()));
    let both = [diode(2, 1), diode(0, 2), diode(4, 1), diode(0, 4)];
    assert!(!kicks(&[&bridge[..], &both].concat()));
}

fn heat(gain: Option<f64>, runaway_from: Option<f64>) -> Vec<Caution> {
    let fact = HeatFact {
        designator: "Q1".to_owned(),
        condition: "lamp on".to_owned(),
        ambient: 323.15,
        gain,
        runaway_from,
        ballast: Some(3.3),
    };
    caution::cautions(&Facts { heat: vec![fact], ..Facts::default() })
}

#[test]
fn heat_that_feeds_on_itself_is_told() {
    let found = only(&heat(Some(0.62), Some(351.15)), "run-away");
    assert!(
        found.why.contains("the heat of Q1 has a loop gain of 0.62 at 50.0\u{a0}°C (lamp on)"),
        "{}",
        found.why
    );
    assert!(found.why.contains("from an ambient of 78.0\u{a0}°C"), "{}", found.why);
    assert!(found.why.contains("3.30\u{a0}Ω in its emitter"), "{}", found.why);
    assert!(found.basis.contains("common practice"));
    let found = only(&heat(None, Some(300.0)), "run-away");
    assert!(found.why.contains("Q1 runs away at 50.0\u{a0}°C"), "{}", found.why);
    // A low gain does not help where run-away begins 19 K above the highest ambient.
    only(&heat(Some(0.2), Some(323.15 + 19.0)), "run-away");
    assert!(heat(Some(0.49), None).is_empty());
    assert!(heat(Some(0.49), Some(323.15 + 21.0)).is_empty());
}
