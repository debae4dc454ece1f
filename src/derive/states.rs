//! States of junctions: what is assumed, what follows, what objects, what is assumed next.

use super::tableau::{self, Equation, Law, Unknown, Values};
use super::{EmitterCurrent, Kind, Node, Sketch, Transistor};

/// What a junction device is assumed to do.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum State {
    /// Transistor: neither junction conducts.
    Off,
    Active,
    Saturated,
    /// Diode: no current.
    Blocking,
    Conducting,
    /// Zener diode: at its Zener voltage.
    Breakdown,
}

/// What an assumed state asks of the values that follow from it.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Check {
    /// The current through the junction flows in its conducting direction.
    CurrentFlows,
    /// V_BE, or a diode's forward voltage, stays below the drop.
    BelowDrop,
    /// V_CE stays above V_CE(sat), or above zero where that is not known.
    AboveSaturation,
    /// I_C stays below h_FE I_B.
    BelowGain,
    /// The reverse voltage stays below the Zener voltage.
    BelowBreakdown,
}

/// A check that fails.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Objection {
    /// Index of the piece.
    pub piece: usize,
    pub check: Check,
    /// What was found and what it was to be above or below (A or V).
    pub found: f64,
    pub limit: f64,
    /// By how much it fails, as a share of what the check compares.
    pub share: f64,
}

/// One assumption about all junctions, carried through.
#[derive(Clone, PartialEq, Debug)]
pub struct Attempt {
    /// One for each piece; none for pieces without junction.
    pub states: Vec<Option<State>>,
    /// Absent where the equations have no unique solution, so that the assumption cannot hold.
    pub values: Option<Values>,
    pub objections: Vec<Objection>,
}

impl Attempt {
    /// The assumption is borne out by its result.
    pub fn is_consistent(&self) -> bool {
        self.values.is_some() && self.objections.is_empty()
    }
}

/// Assumptions in the order in which they were tried.
#[derive(Clone, PartialEq, Debug)]
pub struct Analysis {
    /// What failed, in order.
    pub failed: Vec<Attempt>,
    pub found: Attempt,
}

/// Why there is no hand analysis.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Refusal {
    /// No assumption about the junctions is borne out by its result.
    NoConsistentState,
    /// More junctions than can be tried one by one.
    TooManyJunctions,
}

/// Assumptions that are tried one after the other before all of them are gone through.
const STEPS: usize = 40;
/// The most assumptions that are gone through.
const MOST: usize = 100_000;
/// A check fails only by more than this share of what it compares: an edge of saturation is no contradiction.
const TOLERANCE: f64 = 1e-9;

fn states_of(kind: &Kind) -> &'static [State] {
    match kind {
        Kind::Diode { .. } => &[State::Conducting, State::Blocking],
        Kind::Zener { drop: None, .. } => &[State::Breakdown, State::Blocking],
        Kind::Zener { .. } => &[State::Breakdown, State::Blocking, State::Conducting],
        Kind::Transistor(transistor) if transistor.v_ce_saturated.is_none() => &[State::Active, State::Off],
        Kind::Transistor(_) => &[State::Active, State::Saturated, State::Off],
        Kind::Resistor { .. } | Kind::Voltage { .. } | Kind::Current { .. } | Kind::Open => &[],
    }
}

/// The values that follow from assumed `states` (one for each piece), and what objects to them.
pub fn assume(sketch: &Sketch, states: &[Option<State>]) -> Attempt {
    let values = tableau::solve(&equations(sketch, states));
    let objections = values.as_ref().map_or_else(Vec::new, |values| objections(sketch, states, values));
    Attempt { states: states.to_vec(), values, objections }
}

/// Assumes every transistor active and every diode conducting, and changes the state that is contradicted most, until none
/// is; where that goes round in a circle, all combinations are gone through.
///
/// # Errors
/// No consistent state, or too many junctions to say so.
pub fn analyse(sketch: &Sketch) -> Result<Analysis, Refusal> {
    let mut states: Vec<Option<State>> =
        sketch.pieces.iter().map(|piece| states_of(&piece.kind).first().copied()).collect();
    let mut failed: Vec<Attempt> = Vec::new();
    while failed.len() < STEPS {
        let attempt = assume(sketch, &states);
        if attempt.is_consistent() {
            return Ok(Analysis { failed, found: attempt });
        }
        let Some(next) = revised(sketch, &attempt) else { break };
        failed.push(attempt);
        if failed.iter().any(|earlier| earlier.states == next) {
            break;
        }
        states = next;
    }
    let mut all = Combinations::new(sketch)?;
    let found = all.find_map(|states| Some(assume(sketch, &states)).filter(Attempt::is_consistent));
    found.map(|found| Analysis { failed, found }).ok_or(Refusal::NoConsistentState)
}

/// Every assumption that is borne out by its result: two stable and one unstable for a bistable pair.
///
/// # Errors
/// More combinations than can be gone through.
pub fn every_consistent(sketch: &Sketch) -> Result<Vec<Attempt>, Refusal> {
    let all = Combinations::new(sketch)?;
    Ok(all.map(|states| assume(sketch, &states)).filter(Attempt::is_consistent).collect())
}

/// The assumption that answers to the worst objection, if there is one.
fn revised(sketch: &Sketch, attempt: &Attempt) -> Option<Vec<Option<State>>> {
    let worst = attempt.objections.iter().max_by(|a, b| a.share.total_cmp(&b.share))?;
    let instead = match (attempt.states[worst.piece]?, worst.check) {
        (State::Active, Check::AboveSaturation) => State::Saturated,
        (State::Active | State::Saturated, Check::CurrentFlows) => State::Off,
        (State::Conducting | State::Breakdown, _) => State::Blocking,
        (State::Blocking, Check::BelowBreakdown) => State::Breakdown,
        (State::Blocking, _) => State::Conducting,
        _ => State::Active,
    };
    let possible = states_of(&sketch.pieces[worst.piece].kind).contains(&instead);
    possible.then(|| {
        let mut states = attempt.states.clone();
        states[worst.piece] = Some(instead);
        states
    })
}

/// All combinations of states, the last junction changing fastest.
struct Combinations<'s> {
    sketch: &'s Sketch,
    next: usize,
    count: usize,
}

impl<'s> Combinations<'s> {
    fn new(sketch: &'s Sketch) -> Result<Self, Refusal> {
        let count = sketch
            .pieces
            .iter()
            .try_fold(1_usize, |count, piece| count.checked_mul(states_of(&piece.kind).len().max(1)))
            .filter(|count| *count <= MOST)
            .ok_or(Refusal::TooManyJunctions)?;
        Ok(Combinations { sketch, next: 0, count })
    }
}

impl Iterator for Combinations<'_> {
    type Item = Vec<Option<State>>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.next >= self.count {
            return None;
        }
        let mut rest = self.next;
        self.next += 1;
        let mut states = vec![None; self.sketch.pieces.len()];
        for (state, piece) in states.iter_mut().zip(&self.sketch.pieces).rev() {
            let possible = states_of(&piece.kind);
            if !possible.is_empty() {
                *state = Some(possible[rest % possible.len()]);
                rest /= possible.len();
            }
        }
        Some(states)
    }
}

/// All laws of a sketch under assumed states.
fn equations(sketch: &Sketch, states: &[Option<State>]) -> Vec<Equation> {
    let mut leaving: Vec<Vec<(Unknown, f64)>> = vec![Vec::new(); sketch.nodes.len()];
    let mut found = Vec::new();
    for (k, piece) in sketch.pieces.iter().enumerate() {
        let current = Unknown::Current(k);
        let mut through = |from: Node, to: Node| {
            leaving[from].push((current, 1.0));
            leaving[to].push((current, -1.0));
        };
        let nothing = || Equation::new(Law::Open(k), [(current, 1.0)], 0.0);
        let across =
            |plus, minus, voltage| Equation::new(Law::Drop(k), Equation::difference(plus, minus), voltage);
        match &piece.kind {
            Kind::Resistor { between: [from, to], resistance } => {
                through(*from, *to);
                let [plus, minus] = Equation::difference(*from, *to);
                found.push(Equation::new(Law::Ohm(k), [plus, minus, (current, -resistance)], 0.0));
            }
            Kind::Voltage { plus, minus, voltage } => {
                through(*plus, *minus);
                let terms = Equation::difference(*plus, *minus);
                found.push(Equation::new(Law::Source(k), terms, *voltage));
            }
            Kind::Current { from, to, current: driven } => {
                through(*from, *to);
                found.push(Equation::new(Law::Source(k), [(current, 1.0)], *driven));
            }
            Kind::Diode { anode, cathode, drop } => {
                through(*anode, *cathode);
                found.push(match states[k] {
                    Some(State::Conducting) => across(*anode, *cathode, *drop),
                    _ => nothing(),
                });
            }
            Kind::Zener { anode, cathode, breakdown, drop } => {
                through(*cathode, *anode);
                found.push(match (states[k], drop) {
                    (Some(State::Breakdown), _) => across(*cathode, *anode, *breakdown),
                    (Some(State::Conducting), Some(drop)) => across(*anode, *cathode, *drop),
                    _ => nothing(),
                });
            }
            Kind::Open => {}
            Kind::Transistor(transistor) => {
                let sign = transistor.sign();
                leaving[transistor.collector].push((Unknown::CollectorCurrent(k), sign));
                leaving[transistor.base].push((Unknown::BaseCurrent(k), sign));
                leaving[transistor.emitter].push((Unknown::EmitterCurrent(k), -sign));
                found.extend(transistor_laws(k, transistor, states));
            }
        }
    }
    found.extend(tableau::node_laws(leaving));
    found
}

/// The three laws of a transistor in its assumed state.
fn transistor_laws(k: usize, transistor: &Transistor, states: &[Option<State>]) -> [Equation; 3] {
    let Transistor { collector, base, emitter, gain, v_be, cutoff_current, off_current, .. } = *transistor;
    let sign = transistor.sign();
    let (i_b, i_c, i_e) = (Unknown::BaseCurrent(k), Unknown::CollectorCurrent(k), Unknown::EmitterCurrent(k));
    let drop = || Equation::new(Law::Drop(k), Equation::difference(base, emitter), sign * v_be);
    let emitter_law = match transistor.emitter_current {
        EmitterCurrent::Sum => Equation::new(Law::Emitter(k), [(i_e, 1.0), (i_c, -1.0), (i_b, -1.0)], 0.0),
        EmitterCurrent::AsCollector => Equation::new(Law::Emitter(k), [(i_e, 1.0), (i_c, -1.0)], 0.0),
    };
    match states[k] {
        Some(State::Active) => {
            let twin = transistor.matched.filter(|twin| states.get(twin.of) == Some(&Some(State::Active)));
            let junction = match twin {
                Some(twin) => {
                    let terms = [(i_c, 1.0), (Unknown::CollectorCurrent(twin.of), -twin.ratio)];
                    Equation::new(Law::Match(k), terms, 0.0)
                }
                None => drop(),
            };
            let gain_law = if gain.is_finite() {
                Equation::new(Law::Gain(k), [(i_c, 1.0), (i_b, -gain)], (gain + 1.0) * cutoff_current)
            } else {
                Equation::new(Law::Gain(k), [(i_b, 1.0)], 0.0)
            };
            [junction, gain_law, emitter_law]
        }
        Some(State::Saturated) => {
            let v_ce = sign * transistor.v_ce_saturated.unwrap_or(0.0);
            [drop(), Equation::new(Law::Drop(k), Equation::difference(collector, emitter), v_ce), emitter_law]
        }
        // Off: what leaks from collector to base leaves by the base, the rest by the emitter.
        _ => [
            Equation::new(Law::Open(k), [(i_b, 1.0)], -cutoff_current),
            Equation::new(Law::Open(k), [(i_c, 1.0)], cutoff_current + off_current),
            Equation::new(Law::Emitter(k), [(i_e, 1.0)], off_current),
        ],
    }
}

fn objections(sketch: &Sketch, states: &[Option<State>], values: &Values) -> Vec<Objection> {
    let of = |unknown: Unknown| values.get(&unknown).copied().unwrap_or(0.0);
    let voltage = |plus: Node, minus: Node| of(Unknown::Voltage(plus)) - of(Unknown::Voltage(minus));
    let largest_of = |is_current: bool| {
        let of_kind = values.iter().filter(|(name, _)| matches!(name, Unknown::Voltage(_)) != is_current);
        of_kind.fold(0.0_f64, |largest, (_, value)| largest.max(value.abs()))
    };
    let (most_volts, most_amperes) = (largest_of(false), largest_of(true));
    let mut found = Vec::new();
    for (k, (piece, state)) in sketch.pieces.iter().zip(states).enumerate() {
        let Some(state) = state else { continue };
        // Each check asks that `excess` is not positive.
        let mut ask = |check: Check, value: f64, limit: f64, excess: f64| {
            let size = match check {
                Check::CurrentFlows | Check::BelowGain => most_amperes,
                Check::BelowDrop | Check::AboveSaturation | Check::BelowBreakdown => most_volts,
            };
            if excess > TOLERANCE * size {
                found.push(Objection { piece: k, check, found: value, limit, share: excess / size });
            }
        };
        match (&piece.kind, state) {
            (Kind::Transistor(transistor), State::Off) => {
                let v_be = transistor.sign() * voltage(transistor.base, transistor.emitter);
                ask(Check::BelowDrop, v_be, transistor.v_be, v_be - transistor.v_be);
            }
            (Kind::Transistor(transistor), state) => {
                let (i_b, i_c) = (of(Unknown::BaseCurrent(k)), of(Unknown::CollectorCurrent(k)));
                let flows = if transistor.gain.is_finite() { i_b + transistor.cutoff_current } else { i_c };
                ask(Check::CurrentFlows, flows, 0.0, -flows);
                if *state == State::Active {
                    let v_ce = transistor.sign() * voltage(transistor.collector, transistor.emitter);
                    let least = transistor.v_ce_saturated.unwrap_or(0.0);
                    ask(Check::AboveSaturation, v_ce, least, least - v_ce);
                } else {
                    let most = transistor.gain * i_b;
                    ask(Check::BelowGain, i_c, most, i_c - most);
                }
            }
            (Kind::Diode { .. } | Kind::Zener { .. }, State::Conducting) => {
                // A Zener's current counts the other way.
                let forward = if matches!(piece.kind, Kind::Zener { .. }) { -1.0 } else { 1.0 };
                let current = forward * of(Unknown::Current(k));
                ask(Check::CurrentFlows, current, 0.0, -current);
            }
            (Kind::Zener { .. }, State::Breakdown) => {
                let current = of(Unknown::Current(k));
                ask(Check::CurrentFlows, current, 0.0, -current);
            }
            (Kind::Diode { anode, cathode, drop }, _) => {
                let forward = voltage(*anode, *cathode);
                ask(Check::BelowDrop, forward, *drop, forward - drop);
            }
            (Kind::Zener { anode, cathode, breakdown, drop }, _) => {
                let reverse = voltage(*cathode, *anode);
                ask(Check::BelowBreakdown, reverse, *breakdown, reverse - breakdown);
                if let Some(drop) = drop {
                    ask(Check::BelowDrop, -reverse, *drop, -reverse - drop);
                }
            }
            _ => {}
        }
    }
    found
}
