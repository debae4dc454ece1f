//! Root-sum-square: biases added algebraically, random terms as standard deviations (JCGM 100:2008, clause 5), and whether the
//! response is straight enough for that.

use super::{Axis, Miss, Response, Role};

/// A response that departs from its straight line by more than this share of the combined change is not linear.
pub const LINEAR_WITHIN: f64 = 0.1;

/// What is combined.
pub struct Combine<'a> {
    pub output: usize,
    /// Low values of the output are the worse ones.
    pub lowest: bool,
    /// One role an axis.
    pub roles: &'a [Role],
    /// Where the bias-like axes stand (one value an axis); without it each goes to its own worse end.
    pub held: Option<&'a [f64]>,
    /// How many standard deviations are counted.
    pub coverage_factor: f64,
}

/// What one axis contributes.
#[derive(Clone, PartialEq, Debug)]
pub struct Term {
    pub axis: usize,
    pub role: Role,
    /// Change of the output for a unit of the input, from both sides.
    pub sensitivity: f64,
    /// The same from below and from above only; they agree where the response is straight.
    pub one_sided: [f64; 2],
    /// Bias: change of the output from nominal to where the axis stands. Random: that for one standard deviation upwards.
    pub effect: f64,
    /// Change of the output for the half-width of the axis: what the input can do.
    pub reach: f64,
    /// Change of the output from nominal to the middle of the limits of a random axis: a bias of its own.
    pub shift: f64,
}

/// A combined result.
#[derive(Clone, PartialEq, Debug)]
pub struct Combined {
    pub nominal: f64,
    /// Algebraic sum of all biases, shifts of the middle among them.
    pub bias: f64,
    /// Combined standard deviation of the random terms.
    pub deviation: f64,
    pub coverage_factor: f64,
    /// Nominal value, bias, and the coverage factor times the deviation towards the worse side.
    pub end: f64,
    /// Greatest departure from the straight line, as a share of the change from nominal to end; 1 where it is all there is.
    pub departure: f64,
    /// The departure is small enough; else the result supports no statement.
    pub linear: bool,
    /// Terms that change the output, the greatest reach first.
    pub terms: Vec<Term>,
}

/// Combines what varies. Every random axis is taken one standard deviation to both sides of its middle (JCGM 100:2008, 5.1.3,
/// note 2), the others at nominal; then the straight line is compared with the response at the coverage factor times the
/// deviation along each axis (at most at its limit), with all biases together, and in the direction in which the random terms
/// most likely reach the end.
///
/// # Errors
/// The response has no value at one of these points.
pub fn combine(response: &dyn Response, ask: &Combine<'_>) -> Result<Combined, Miss> {
    let axes = response.axes();
    let nominal: Vec<f64> = axes.iter().map(|axis| axis.nominal).collect();
    let value = |at: &[f64]| {
        let mut outputs = vec![Err(Miss::NotConverged); response.outputs()];
        response.eval(at, &mut outputs);
        outputs.get(ask.output).copied().unwrap_or(Err(Miss::Undefined))
    };
    let start = value(&nominal)?;
    let line = Line { axes, nominal: &nominal, start, ask, value: &value };
    let mut terms = Vec::new();
    let mut bent = 0.0_f64;
    let mut centre = nominal.clone();
    for (axis, role) in ask.roles.iter().enumerate().take(axes.len()) {
        if axes[axis].low >= axes[axis].high {
            continue;
        }
        let (term, to, departs) = match *role {
            Role::Bias => line.bias(axis)?,
            Role::Random(distribution) => line.random(axis, distribution.deviation(), *role)?,
        };
        centre[axis] = to;
        bent = bent.max(departs);
        terms.push(term);
    }
    let bias: f64 =
        terms.iter().map(|term| if term.role == Role::Bias { term.effect } else { term.shift }).sum();
    let random = || terms.iter().filter(|term| term.role != Role::Bias);
    let deviation = random().map(|term| term.effect * term.effect).sum::<f64>().sqrt();
    let worse = if ask.lowest { -1.0 } else { 1.0 };
    let end = start + bias + worse * ask.coverage_factor * deviation;
    bent = bent.max((value(&centre)? - (start + bias)).abs());
    if deviation > 0.0 {
        let (mut far, mut predicted) = (centre, start + bias);
        for term in random().filter(|term| term.effect != 0.0) {
            let (one, half) = line.widths(term.axis);
            let wanted = worse * ask.coverage_factor * term.effect / deviation * one;
            let step = wanted.clamp(-half, half);
            far[term.axis] = line.inside(term.axis, far[term.axis] + step);
            predicted += term.effect * step / one;
        }
        bent = bent.max((value(&far)? - predicted).abs());
    }
    // What the solver leaves open is no bend.
    let departure = if bent <= 1e-9 * start.abs() { 0.0 } else { bent / bent.max((end - start).abs()) };
    terms.retain(|term| term.reach != 0.0 || term.effect != 0.0 || term.shift != 0.0);
    terms.sort_by(|a, b| b.reach.abs().total_cmp(&a.reach.abs()).then(a.axis.cmp(&b.axis)));
    Ok(Combined {
        nominal: start,
        bias,
        deviation,
        coverage_factor: ask.coverage_factor,
        end,
        departure,
        linear: departure <= LINEAR_WITHIN,
        terms,
    })
}

/// The straight line through nominal, and where it is compared with the response.
struct Line<'a> {
    axes: &'a [Axis],
    nominal: &'a [f64],
    start: f64,
    ask: &'a Combine<'a>,
    value: &'a dyn Fn(&[f64]) -> Result<f64, Miss>,
}

impl Line<'_> {
    fn at(&self, axis: usize, to: f64) -> Result<f64, Miss> {
        let mut point = self.nominal.to_vec();
        point[axis] = self.inside(axis, to);
        (self.value)(&point)
    }

    fn inside(&self, axis: usize, to: f64) -> f64 {
        to.clamp(self.axes[axis].low, self.axes[axis].high)
    }

    /// One standard deviation of a random axis, and its half-width.
    fn widths(&self, axis: usize) -> (f64, f64) {
        let half = (self.axes[axis].high - self.axes[axis].low) / 2.0;
        match self.ask.roles[axis] {
            Role::Random(distribution) => (half * distribution.deviation(), half),
            Role::Bias => (half, half),
        }
    }

    /// A bias-like axis: its term, where it stands, and no departure (that of all biases together is taken at once).
    fn bias(&self, axis: usize) -> Result<(Term, f64, f64), Miss> {
        let record = &self.axes[axis];
        let [low, high] = [self.at(axis, record.low)? - self.start, self.at(axis, record.high)? - self.start];
        let (to, effect) = match self.ask.held.and_then(|held| held.get(axis)) {
            Some(&held) => (held, self.at(axis, held)? - self.start),
            None => {
                let worse = if self.ask.lowest { -1.0 } else { 1.0 };
                let mut found = (record.nominal, 0.0);
                for (end, effect) in [(record.low, low), (record.high, high)] {
                    if worse * effect > worse * found.1 {
                        found = (end, effect);
                    }
                }
                found
            }
        };
        let slope = |change: f64, width: f64| if width == 0.0 { 0.0 } else { change / width };
        let term = Term {
            axis,
            role: Role::Bias,
            sensitivity: slope(high - low, record.high - record.low),
            one_sided: [slope(-low, record.nominal - record.low), slope(high, record.high - record.nominal)],
            effect,
            reach: (high - low) / 2.0,
            shift: 0.0,
        };
        Ok((term, to, 0.0))
    }

    /// A random axis: its term, its middle, and how far the response departs from the line along it.
    fn random(&self, axis: usize, share: f64, role: Role) -> Result<(Term, f64, f64), Miss> {
        let record = &self.axes[axis];
        let middle = record.low + (record.high - record.low) / 2.0;
        let half = (record.high - record.low) / 2.0;
        let one = share * half;
        let here = self.at(axis, middle)?;
        let below = here - self.at(axis, middle - one)?;
        let above = self.at(axis, middle + one)? - here;
        let effect = (below + above) / 2.0;
        let far = (self.ask.coverage_factor * one).min(half);
        let mut departs = 0.0_f64;
        for step in [-far, far] {
            let predicted = here + effect * step / one;
            departs = departs.max((self.at(axis, middle + step)? - predicted).abs());
        }
        let term = Term {
            axis,
            role,
            sensitivity: effect / one,
            one_sided: [below / one, above / one],
            effect,
            reach: effect / share,
            shift: here - self.start,
        };
        Ok((term, middle, departs))
    }
}
