//! Hand analysis: states that are assumed, what objects to them, and networks with more than one answer.

use qsheaf::derive::{
    self, Check, EmitterCurrent, Equivalent, Increments, Kind, Match, Part, Piece, Refusal, Sketch, State,
    Transistor, Unknown,
};

fn sketch(nodes: &[&str], pieces: Vec<(&str, Kind)>) -> Sketch {
    Sketch {
        nodes: nodes.iter().map(|name| (*name).to_owned()).collect(),
        pieces: pieces.into_iter().map(|(name, kind)| Piece { name: name.to_owned(), kind }).collect(),
    }
}

fn resistor(from: usize, to: usize, resistance: f64) -> Kind {
    Kind::Resistor { between: [from, to], resistance }
}

fn supply(plus: usize, voltage: f64) -> Kind {
    Kind::Voltage { plus, minus: 0, voltage }
}

fn transistor(collector: usize, base: usize, emitter: usize, gain: f64) -> Transistor {
    Transistor {
        collector,
        base,
        emitter,
        pnp: false,
        gain,
        v_be: 0.7,
        v_ce_saturated: Some(0.2),
        emitter_current: EmitterCurrent::Sum,
        cutoff_current: 0.0,
        off_current: 0.0,
        matched: None,
    }
}

/// Supply, base and collector resistor, grounded emitter; driven from `drive`.
fn stage(drive: f64, base: f64, collector: f64) -> Sketch {
    sketch(
        &["ground", "vcc", "in", "b", "c"],
        vec![
            ("VCC", supply(1, 12.0)),
            ("VIN", supply(2, drive)),
            ("RB", resistor(2, 3, base)),
            ("RC", resistor(1, 4, collector)),
            ("Q1", Kind::Transistor(transistor(4, 3, 0, 100.0))),
        ],
    )
}

fn of(attempt: &derive::Attempt, unknown: Unknown) -> f64 {
    attempt.values.as_ref().unwrap()[&unknown]
}

#[track_caller]
fn close(found: f64, expected: f64) {
    assert!((found - expected).abs() <= 1e-12 + 1e-9 * expected.abs(), "{found} instead of {expected}");
}

#[test]
fn an_assumption_that_fails_is_told_and_answered() {
    // I_B = 4.3 V / 4.3 kΩ = 1 mA would be 100 mA through 1 kΩ: saturated.
    let found = derive::analyse(&stage(5.0, 4300.0, 1000.0)).unwrap();
    assert_eq!(found.failed.len(), 1);
    let objection = found.failed[0].objections[0];
    assert_eq!((objection.piece, objection.check), (4, Check::AboveSaturation));
    close(objection.found, 12.0 - 100.0);
    assert_eq!(found.found.states[4], Some(State::Saturated));
    close(of(&found.found, Unknown::CollectorCurrent(4)), 11.8e-3);
    close(of(&found.found, Unknown::EmitterCurrent(4)), 12.8e-3);
    // Without drive it is off, and the base follows the input.
    let found = derive::analyse(&stage(0.3, 4300.0, 1000.0)).unwrap();
    assert_eq!(found.failed[0].objections[0].check, Check::CurrentFlows);
    assert_eq!(found.found.states[4], Some(State::Off));
    close(of(&found.found, Unknown::Voltage(3)), 0.3);
    close(of(&found.found, Unknown::Voltage(4)), 12.0);
    // In between the first assumption holds.
    let found = derive::analyse(&stage(5.0, 430_000.0, 1000.0)).unwrap();
    assert!(found.failed.is_empty());
    close(of(&found.found, Unknown::Voltage(4)), 11.0);
}

#[test]
fn leakage_of_a_transistor_that_is_off_flows_through_both_of_its_resistors() {
    let mut leaky = stage(0.0, 10_000.0, 1000.0);
    let cut = Transistor { cutoff_current: 10e-6, off_current: 5e-6, ..transistor(4, 3, 0, 100.0) };
    leaky.pieces[4].kind = Kind::Transistor(cut);
    let found = derive::analyse(&leaky).unwrap().found;
    assert_eq!(found.states[4], Some(State::Off));
    close(of(&found, Unknown::Voltage(3)), 0.1);
    close(of(&found, Unknown::Voltage(4)), 12.0 - 15e-3);
    // Enough leakage through enough base resistance turns it on.
    if let Kind::Resistor { resistance, .. } = &mut leaky.pieces[2].kind {
        *resistance = 100_000.0;
    }
    let found = derive::analyse(&leaky).unwrap().found;
    assert_eq!(found.states[4], Some(State::Active));
    close(of(&found, Unknown::BaseCurrent(4)), -7e-6);
    close(of(&found, Unknown::CollectorCurrent(4)), 100.0 * -7e-6 + 101.0 * 10e-6);
}

/// Two stages, each driving the other's base.
fn pair() -> Sketch {
    sketch(
        &["ground", "vcc", "c1", "c2", "b1", "b2"],
        vec![
            ("VCC", supply(1, 12.0)),
            ("RC1", resistor(1, 2, 1000.0)),
            ("RC2", resistor(1, 3, 1000.0)),
            ("RB1", resistor(3, 4, 10_000.0)),
            ("RB2", resistor(2, 5, 10_000.0)),
            ("Q1", Kind::Transistor(transistor(2, 4, 0, 100.0))),
            ("Q2", Kind::Transistor(transistor(3, 5, 0, 100.0))),
        ],
    )
}

#[test]
fn a_bistable_pair_has_both_of_its_states_and_the_one_between() {
    let mut states: Vec<_> = derive::every_consistent(&pair())
        .unwrap()
        .iter()
        .map(|attempt| (attempt.states[5].unwrap(), attempt.states[6].unwrap()))
        .collect();
    states.sort();
    assert_eq!(
        states,
        [(State::Off, State::Saturated), (State::Active, State::Active), (State::Saturated, State::Off)]
    );
}

#[test]
fn the_other_polarity_is_the_mirror_image() {
    for drive in [0.3, 1.0, 5.0] {
        let plain = stage(drive, 20_000.0, 1000.0);
        let mut mirrored = plain.clone();
        for piece in &mut mirrored.pieces {
            match &mut piece.kind {
                Kind::Voltage { voltage, .. } => *voltage = -*voltage,
                Kind::Transistor(transistor) => transistor.pnp = true,
                _ => {}
            }
        }
        let (plain, mirrored) = (derive::analyse(&plain).unwrap(), derive::analyse(&mirrored).unwrap());
        assert_eq!(plain.found.states, mirrored.found.states);
        for (unknown, value) in plain.found.values.unwrap() {
            let sign = match unknown {
                Unknown::Voltage(_) | Unknown::Current(_) => -1.0,
                _ => 1.0,
            };
            close(of(&mirrored.found, unknown), sign * value);
        }
    }
}

#[test]
fn diodes_and_zeners_block_conduct_and_break_down() {
    let clamp = |volts: f64| {
        sketch(
            &["ground", "in", "out"],
            vec![
                ("VIN", supply(1, volts)),
                ("R1", resistor(1, 2, 1000.0)),
                ("DZ", Kind::Zener { anode: 0, cathode: 2, breakdown: 5.1, drop: Some(0.7) }),
                ("D1", Kind::Diode { anode: 2, cathode: 0, drop: 8.0 }),
            ],
        )
    };
    for (volts, state, out) in
        [(12.0, State::Breakdown, 5.1), (3.0, State::Blocking, 3.0), (-12.0, State::Conducting, -0.7)]
    {
        let found = derive::analyse(&clamp(volts)).unwrap().found;
        assert_eq!((found.states[2], found.states[3]), (Some(state), Some(State::Blocking)));
        close(of(&found, Unknown::Voltage(2)), out);
        close(of(&found, Unknown::Current(2)), (volts - out) / 1000.0);
    }
}

#[test]
fn what_cannot_be_analysed_is_refused() {
    // A transistor that has to saturate without a saturation voltage to go by.
    let mut unknown = stage(5.0, 4300.0, 1000.0);
    let blind = Transistor { v_ce_saturated: None, ..transistor(4, 3, 0, 100.0) };
    unknown.pieces[4].kind = Kind::Transistor(blind);
    assert_eq!(derive::analyse(&unknown), Err(Refusal::NoConsistentState));
    // A base that nothing drives is not determined.
    let floating = sketch(
        &["ground", "vcc", "b"],
        vec![("VCC", supply(1, 5.0)), ("Q1", Kind::Transistor(transistor(1, 2, 0, 100.0)))],
    );
    let attempt = derive::assume(&floating, &[None, Some(State::Off)]);
    assert_eq!(attempt.values, None);
    assert!(!attempt.is_consistent());
    let crowd: Vec<_> = (0..40).map(|_| ("Q", Kind::Transistor(transistor(1, 1, 0, 100.0)))).collect();
    assert_eq!(derive::every_consistent(&sketch(&["ground", "a"], crowd)), Err(Refusal::TooManyJunctions));
}

#[test]
fn twins_share_a_current_that_their_common_drop_leaves_open() {
    let twin = |of: Option<usize>, collector: usize| {
        let matched = of.map(|of| Match { of, ratio: 3.0 });
        Kind::Transistor(Transistor { matched, ..transistor(collector, 0, 3, f64::INFINITY) })
    };
    let tail = |matched: Option<usize>| {
        sketch(
            &["ground", "c1", "c2", "e", "vee"],
            vec![
                ("VP", supply(1, 10.0)),
                ("VQ", supply(2, 10.0)),
                ("VEE", supply(4, -10.0)),
                ("IT", Kind::Current { from: 3, to: 4, current: 4e-3 }),
                ("Q1", twin(None, 1)),
                ("Q2", twin(matched, 2)),
            ],
        )
    };
    let found = derive::analyse(&tail(Some(4))).unwrap().found;
    close(of(&found, Unknown::CollectorCurrent(4)), 1e-3);
    close(of(&found, Unknown::CollectorCurrent(5)), 3e-3);
    // Two equal drops in parallel say nothing about how the current divides.
    let active = Some(State::Active);
    assert_eq!(derive::assume(&tail(None), &[None, None, None, None, active, active]).values, None);
}

#[test]
fn the_equivalent_circuit_gives_gain_and_both_resistances() {
    // An emitter follower: gain (h_fe + 1) R_E / (h_ie + (h_fe + 1) R_E), and what its ends show.
    let equivalent = Equivalent {
        gain: 100.0,
        input_resistance: 2500.0,
        output_resistance: f64::INFINITY,
        emitter_current: EmitterCurrent::Sum,
    };
    let follower = Increments {
        nodes: 4,
        parts: vec![
            Part::Resistor { between: [1, 2], resistance: 1000.0 },
            Part::Transistor { collector: 0, base: 2, emitter: 3, equivalent },
            Part::Resistor { between: [3, 0], resistance: 470.0 },
        ],
        drive: [1, 0],
    };
    let at_base = 2500.0 + 101.0 * 470.0;
    close(follower.gains().unwrap()[3], 101.0 * 470.0 / (1000.0 + at_base));
    close(follower.input_resistance().unwrap(), 1000.0 + at_base);
    let seen = 3500.0 / 101.0;
    close(follower.output_resistance(3).unwrap(), 470.0 * seen / (470.0 + seen));
    // Emitter current as the collector's: a hundred instead of a hundred and one.
    let mut rough = follower.clone();
    if let Part::Transistor { equivalent, .. } = &mut rough.parts[1] {
        equivalent.emitter_current = EmitterCurrent::AsCollector;
    }
    close(rough.input_resistance().unwrap(), 1000.0 + 2500.0 + 100.0 * 470.0);
}
