//! What each element demands of its ratings.

use crate::circuit::{Element, ElementKind};
use crate::formula::Formula;
use crate::part::{Part, Rating, RatingQuantity};
use crate::quantity::{Kind, Source};
use crate::source::Place;

use super::policy::{self, Class, Policy};

/// A P_tot without its temperature holds up to 25 °C: no sheet states it for less (common practice).
const PLAIN_AMBIENT: f64 = 298.15;
/// Resistors carry their rated dissipation up to 70 °C (IEC 60115-1, from memory).
const RESISTOR_AMBIENT: f64 = 343.15;
/// Resistors carry nothing at 125 °C: the lowest of the usual ends of film resistors (common practice; 155 °C is usual).
const RESISTOR_HOTTEST: f64 = 398.15;

/// A limit that falls linearly from its full value at `up_to` to zero at `zero_at` (ambient temperatures, K).
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Falling {
    pub up_to: f64,
    pub zero_at: f64,
}

/// Which conditions a demand is judged in.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Applies {
    Always,
    /// Conditions without an end: steady current, dissipation.
    Steady,
    /// Conditions that last a limited time: peak current.
    Lasting,
}

impl Applies {
    /// Whether this is judged in a condition that lasts a limited time (`lasts`), or in one that does not.
    pub fn to(self, lasts: bool) -> bool {
        match self {
            Applies::Always => true,
            Applies::Steady => !lasts,
            Applies::Lasting => lasts,
        }
    }
}

/// One rated quantity of one element, what is observed of it, and what it may be.
#[derive(Clone, PartialEq, Debug)]
pub struct Demand {
    pub designator: String,
    pub quantity: RatingQuantity,
    /// What is observed, a formula over trade symbols; positive means stress: `abs(Q1.I_C)`, `Q1.V_EC`.
    pub observe: String,
    pub kind: Kind,
    /// The rating as the record gives it (SI).
    pub rating: Option<f64>,
    /// After the policy's derating (SI), for normal conditions.
    pub limit: Option<f64>,
    /// The row to get where the rating is missing, or where what is observed cannot be computed without it.
    pub wanted: String,
    pub source: Option<Source>,
    /// How rating and limit fall with the ambient temperature.
    pub falls: Option<Falling>,
    /// What was taken for granted in `falls`; it matters only at an ambient temperature above `falls.up_to`.
    pub assumed: Option<String>,
    /// Where another rating stands in for this one, on the safe side: why that is allowed.
    pub stands_in: Option<String>,
    pub applies: Applies,
    pub place: Place,
}

impl Demand {
    /// The bound (SI) before any fall with temperature: the derated limit in normal conditions, the rating in others.
    pub fn bound(&self, normal: bool) -> Option<f64> {
        if normal { self.limit } else { self.rating }
    }

    /// The share of its full value that a rating keeps at an ambient temperature (K): from 1 down to 0.
    pub fn share(&self, ambient: f64) -> f64 {
        self.falls.map_or(1.0, |Falling { up_to, zero_at }| {
            ((zero_at - ambient) / (zero_at - up_to)).clamp(0.0, 1.0)
        })
    }

    /// The margin as a formula over trade symbols and `T_a`, positive where the demand is met; in K for a temperature.
    /// `None` without a rating.
    pub fn margin(&self, normal: bool) -> Option<String> {
        let bound = self.bound(normal)?;
        let observe = match self.observe.strip_prefix('-') {
            Some(rest) => format!("(-{rest})"),
            None => self.observe.clone(),
        };
        if self.kind.point {
            return Some(format!("{} - {observe}", celsius(bound)));
        }
        let bound = format!("({bound} {})", self.kind.dimension);
        Some(match self.falls {
            None => format!("{bound} - {observe}"),
            Some(Falling { up_to, zero_at }) => {
                let share = format!("({} - T_a) / ({} K)", celsius(zero_at), zero_at - up_to);
                format!("{bound} * max(0, min(1, {share})) - {observe}")
            }
        })
    }

    /// What the demand leans on beside its rating, at the hottest ambient temperature (K) that it is judged at.
    pub fn assumption(&self, hottest: Option<f64>) -> Option<&str> {
        let falls = self.falls?;
        self.assumed.as_deref().filter(|_| hottest.is_none_or(|hottest| hottest > falls.up_to))
    }
}

fn celsius(kelvin: f64) -> String {
    format!("({} °C)", kelvin - 273.15)
}

/// The demands of one element: every rating that its record gives, and every rating without which it cannot be judged.
///
/// Voltages count in the direction in which the rating forbids them (a transistor's V_CE in the direction of its supply, its
/// base-emitter voltage in reverse); currents in both. `V_CBO` may be stood in for by `V_CEO`, which is never greater, a peak
/// current by the steady one.
pub fn demands(element: &Element, part: Option<&Part>, policy: &Policy) -> Vec<Demand> {
    let Some(class) = policy::class(element.kind) else { return Vec::new() };
    let maker = Maker { element, part, policy, class };
    match element.kind {
        ElementKind::Npn => maker.transistor(["V_CE", "V_CB", "V_EB"]),
        ElementKind::Pnp => maker.transistor(["V_EC", "V_BC", "V_BE"]),
        ElementKind::Diode => maker.diode(),
        ElementKind::Zener => maker.zener(),
        _ => maker.passive(),
    }
}

use RatingQuantity as Q;

struct Maker<'a> {
    element: &'a Element,
    part: Option<&'a Part>,
    policy: &'a Policy,
    class: Class,
}

impl Maker<'_> {
    fn symbol(&self, name: &str) -> String {
        format!("{}.{name}", self.element.designator)
    }

    fn either_way(&self, name: &str) -> String {
        format!("abs({})", self.symbol(name))
    }

    fn rating(&self, quantity: RatingQuantity) -> Option<&Rating> {
        self.part?.rating(quantity)
    }

    fn of_what(&self) -> String {
        match (&self.element.part, self.part) {
            (_, Some(part)) => format!("part {}", part.name),
            (Some(name), None) => format!("part {name}"),
            (None, None) => self.element.designator.clone(),
        }
    }

    /// A demand on the part's rating of a quantity.
    fn demand(&self, quantity: RatingQuantity, observe: String, applies: Applies) -> Demand {
        let rating = self.rating(quantity);
        let value = rating.map(|rating| rating.value);
        Demand {
            designator: self.element.designator.clone(),
            quantity,
            observe,
            kind: quantity.kind(),
            rating: value,
            limit: value.map(|value| self.policy.limit(self.class, quantity, value)),
            wanted: format!("rating {} of {}", quantity.symbol(), self.of_what()),
            source: rating.map(|rating| rating.source.clone()),
            falls: None,
            assumed: None,
            stands_in: None,
            applies,
            place: self.element.place.clone(),
        }
    }

    /// Lets another rating of the part stand in for a missing one.
    fn or(&self, mut demand: Demand, other: RatingQuantity, why: &str) -> Demand {
        if demand.rating.is_none()
            && let Some(rating) = self.rating(other)
        {
            demand.rating = Some(rating.value);
            // The stricter of both deratings, so that standing in never loosens a limit.
            let limits = [demand.quantity, other].map(|q| self.policy.limit(self.class, q, rating.value));
            demand.limit = Some(limits[0].min(limits[1]));
            demand.source = Some(rating.source.clone());
            demand.stands_in = Some(format!("{} stands in: {why}", other.symbol()));
        }
        demand
    }

    fn transistor(&self, [v_ce, v_cb, v_eb]: [&str; 3]) -> Vec<Demand> {
        let collector = self.either_way("I_C");
        let mut out = vec![
            self.demand(Q::CollectorEmitter, self.symbol(v_ce), Applies::Always),
            self.or(
                self.demand(Q::CollectorBase, self.symbol(v_cb), Applies::Always),
                Q::CollectorEmitter,
                "a collector stands at least as much with the emitter open as with the base open",
            ),
            self.demand(Q::EmitterBase, self.symbol(v_eb), Applies::Always),
            self.demand(Q::CollectorCurrent, collector.clone(), Applies::Steady),
            self.or(
                self.demand(Q::PeakCollectorCurrent, collector, Applies::Lasting),
                Q::CollectorCurrent,
                "a peak may be as large as the steady current",
            ),
        ];
        if self.rating(Q::BaseCurrent).is_some() {
            out.push(self.demand(Q::BaseCurrent, self.either_way("I_B"), Applies::Always));
        }
        out.push(self.device_dissipation());
        out.push(self.junction());
        out
    }

    fn diode(&self) -> Vec<Demand> {
        let forward = self.symbol("I");
        let mut out = vec![
            self.demand(Q::Reverse, format!("-{}", self.symbol("V")), Applies::Always),
            self.demand(Q::ForwardCurrent, forward.clone(), Applies::Steady),
            self.or(
                self.demand(Q::PeakForwardCurrent, forward, Applies::Lasting),
                Q::ForwardCurrent,
                "a peak may be as large as the steady current",
            ),
        ];
        // Most sheets bound a diode's heat by I_F and T_j alone.
        if self.rating(Q::Dissipation).is_some() {
            out.push(self.device_dissipation());
        }
        out.push(self.junction());
        out
    }

    fn zener(&self) -> Vec<Demand> {
        let mut out = Vec::new();
        // A Zener is rated by its current, its dissipation, or both.
        if self.rating(Q::ZenerCurrent).is_some() {
            out.push(self.demand(Q::ZenerCurrent, format!("-{}", self.symbol("I")), Applies::Steady));
        }
        if self.rating(Q::ForwardCurrent).is_some() {
            out.push(self.demand(Q::ForwardCurrent, self.symbol("I"), Applies::Steady));
        }
        if self.rating(Q::PeakForwardCurrent).is_some() {
            out.push(self.demand(Q::PeakForwardCurrent, self.symbol("I"), Applies::Lasting));
        }
        if self.rating(Q::Dissipation).is_some() || out.is_empty() {
            out.push(self.device_dissipation());
        }
        out.push(self.junction());
        out
    }

    /// P_tot, which falls to zero where the junction reaches its highest temperature without any dissipation.
    fn device_dissipation(&self) -> Demand {
        let mut demand = self.demand(Q::Dissipation, self.symbol("P"), Applies::Steady);
        let Some(rating) = self.rating(Q::Dissipation) else { return demand };
        let up_to = rating.up_to.unwrap_or(PLAIN_AMBIENT);
        if rating.up_to.is_none() {
            demand.assumed = Some(format!(
                "{} of {} holds up to 25 °C (the record says nothing of it)",
                Q::Dissipation.symbol(),
                self.of_what()
            ));
        }
        let by_resistance =
            || self.rating(Q::JunctionToAmbient).map(|r_th| up_to + r_th.value * rating.value);
        let hottest = self.rating(Q::JunctionTemperature).map(|t_j| t_j.value).or_else(by_resistance);
        match hottest.filter(|&zero_at| zero_at > up_to) {
            Some(zero_at) => demand.falls = Some(Falling { up_to, zero_at }),
            None => {
                // Without the end of the fall there is no limit above `up_to`, and so none that holds for every ambient.
                demand.rating = None;
                demand.limit = None;
                demand.wanted = format!(
                    "rating {} or {} of {}, to know how {} falls with temperature",
                    Q::JunctionTemperature.symbol(),
                    Q::JunctionToAmbient.symbol(),
                    self.of_what(),
                    Q::Dissipation.symbol()
                );
            }
        }
        demand
    }

    /// T_j; without a thermal resistance it is that row which is wanted.
    fn junction(&self) -> Demand {
        let mut demand = self.demand(Q::JunctionTemperature, self.symbol("T_j"), Applies::Always);
        if demand.rating.is_some()
            && self.element.r_th.is_none()
            && self.rating(Q::JunctionToAmbient).is_none()
        {
            demand.wanted = format!("row {} of {}", Q::JunctionToAmbient.symbol(), self.of_what());
        }
        demand
    }

    /// Resistors, capacitors, filaments and coils.
    fn passive(&self) -> Vec<Demand> {
        let (power, voltage) = (self.element.rated_power.as_ref(), self.element.rated_voltage.as_ref());
        let power = self.written(power, Q::Dissipation, self.symbol("P"), "power");
        // A lamp is named by its working point; what it may be given at most is the record's to say.
        let voltage = voltage
            .filter(|_| self.element.kind != ElementKind::Filament || self.rating(Q::Voltage).is_none());
        let voltage = self.written(voltage, Q::Voltage, self.either_way("V"), "voltage");
        let mut out = Vec::new();
        let rated = |demand: &Demand| demand.rating.is_some();
        match self.element.kind {
            ElementKind::Resistor => {
                out.push(self.resistor_dissipation(power));
                out.extend(Some(voltage).filter(rated));
            }
            ElementKind::Capacitor => out.push(voltage),
            // The rated power of a lamp is what it takes at its rated voltage: one limit, told twice.
            ElementKind::Filament => {
                out.push(if rated(&voltage) || !rated(&power) { voltage } else { power })
            }
            _ => out.extend([voltage, power].into_iter().filter(rated)),
        }
        if self.rating(Q::Current).is_some() {
            out.push(self.demand(Q::Current, self.either_way("I"), Applies::Steady));
        }
        out
    }

    /// A demand on a rating that may be written with the element; the element's own comes before the part's.
    fn written(&self, own: Option<&Formula>, quantity: RatingQuantity, observe: String, key: &str) -> Demand {
        let applies = if quantity == Q::Dissipation { Applies::Steady } else { Applies::Always };
        let mut demand = self.demand(quantity, observe, applies);
        let designator = &self.element.designator;
        match own {
            Some(own) => {
                demand.source = None;
                demand.rating = constant(own);
                demand.limit = demand.rating.map(|value| self.policy.limit(self.class, quantity, value));
                if demand.rating.is_none() {
                    demand.wanted =
                        format!("`{key}` of {designator} as a plain number, not as `{}`", own.text);
                }
            }
            None if self.part.is_none() => demand.wanted = format!("`{key}` of {designator}"),
            None => {}
        }
        demand
    }

    fn resistor_dissipation(&self, mut demand: Demand) -> Demand {
        if demand.rating.is_none() {
            return demand;
        }
        let own = self.element.rated_power.is_some();
        let part = |quantity| self.rating(quantity).filter(|_| !own);
        let up_to = part(Q::Dissipation).and_then(|rating| rating.up_to);
        let hottest = self.rating(Q::JunctionTemperature).map(|rating| rating.value);
        let falls = Falling {
            up_to: up_to.unwrap_or(RESISTOR_AMBIENT),
            zero_at: hottest.unwrap_or(RESISTOR_HOTTEST),
        };
        if up_to.is_none() || hottest.is_none() {
            demand.assumed = Some(format!(
                "{} carries its rated dissipation up to {} and nothing at {}",
                demand.designator,
                celsius(falls.up_to).trim_matches(['(', ')']),
                celsius(falls.zero_at).trim_matches(['(', ')'])
            ));
        }
        if falls.zero_at > falls.up_to {
            demand.falls = Some(falls);
        } else {
            demand.rating = None;
            demand.limit = None;
            demand.wanted = format!("rating T_j (hottest film temperature) of {}", self.of_what());
        }
        demand
    }
}

/// The value of a rating that is a plain number.
fn constant(formula: &Formula) -> Option<f64> {
    let tape = formula.compile(&|_| None).ok()?;
    Some(tape.eval(&[])).filter(|value| value.is_finite())
}
