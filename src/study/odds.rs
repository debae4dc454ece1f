//! Root-sum-square and Monte Carlo beside the extreme value of a criterion, and the verdict where a note asks for a coverage.
//!
//! Bias-like inputs stand at the worst end of the criterion: where the search for extremes found it, and then at whichever
//! end of each makes a small set of specimens worse, until nothing moves. Condition and thermal state are the worst as well.

use super::cases::Case;
use super::compile::CriterionOutputs;
use super::findings::{
    CombinedFinding, CoverageFinding, CriterionFinding, Established, SampledFinding, SpreadFinding,
    TermFinding, Verdict,
};
use super::judge::{Found, Judge, Ruling, reason, wanted};
use crate::numeric::threads;
use crate::quantity::{self, Role, Shown, Unit};
use crate::solve::Thermal;
use crate::spread::{
    self, Combine, Combined, LINEAR_WITHIN, Miss, Proportion, Quantile, Response, Sampling, Specimen,
};
use crate::worksheet::{Coverage, CriterionLine, Over};

/// Key of the random numbers; the same in every note, so that a note can be recalculated.
const SEED: u64 = 1_012_008;
/// Confidence of the limits of a share, two-sided.
const CONFIDENCE: f64 = 0.95;
/// Specimens that are drawn where the worksheet states no number: so many that ten of them may fail where the share is just
/// met, and no fewer than this.
const LEAST_SAMPLES: usize = 10_000;
const FAILING: f64 = 10.0;
/// Specimens by which the worst end of the bias-like inputs is settled, and how often all are gone through.
const PILOT: usize = 1_000;
const ROUNDS: usize = 4;
/// Coverage factor where no coverage is asked for (three standard deviations, common practice).
const COVERAGE_FACTOR: f64 = 3.0;

/// The specimens of one case.
struct Drawn {
    case: usize,
    roles: Vec<Role>,
    held: Vec<f64>,
    /// Margin and left side of each.
    values: Vec<Specimen>,
    passed: u64,
    /// Margins inside the numerical error.
    undecided: u64,
    missing: u64,
    /// The specimen than which so many are better as the share asks for.
    tail: usize,
}

/// The other methods beside a criterion, where the line or the notebook asks for them; a coverage decides its verdict.
pub(super) fn beside(
    judge: &Judge<'_>,
    line: &CriterionLine,
    outputs: &CriterionOutputs,
    ruling: &Ruling,
    finding: &mut CriterionFinding,
) -> Option<SpreadFinding> {
    let extreme = finding.margin.clone();
    match &line.coverage {
        Some(coverage) => {
            let drawn = draw(judge, line, outputs, coverage)?;
            // One side of the margin counts, so the factor is that of one side too.
            let factor = spread::coverage_factor(2.0 * coverage.share - 1.0);
            let combined = combine(judge, outputs, drawn.case, &drawn.roles, &drawn.held, factor);
            decide(judge, outputs, coverage, &drawn, &combined, finding);
            let sampled = sampled(judge, coverage, &drawn, finding);
            Some(compared(judge, finding, extreme, drawn.case, &drawn.held, &combined, factor, Some(sampled)))
        }
        None if judge.compiled.material.settings.root_sum_square && line.over == Over::Extremes => {
            let worst = ruling.worst.as_ref()?;
            let case = &judge.cases[worst.case];
            let roles = case.roles(judge.compiled, &judge.conditions[case.condition]);
            let combined = combine(judge, outputs, worst.case, &roles, &worst.at, COVERAGE_FACTOR);
            Some(compared(judge, finding, extreme, worst.case, &worst.at, &combined, COVERAGE_FACTOR, None))
        }
        None => None,
    }
}

/// Draws specimens in every case of the criterion and keeps the case in which fewest pass.
fn draw(
    judge: &Judge<'_>,
    line: &CriterionLine,
    outputs: &CriterionOutputs,
    coverage: &Coverage,
) -> Option<Drawn> {
    let (compiled, cases, conditions) = (judge.compiled, judge.cases, judge.conditions);
    let holds_in = wanted(conditions, line);
    let asked: Vec<usize> = (0..cases.len()).filter(|&case| holds_in(cases[case].condition)).collect();
    let count = coverage
        .samples
        .unwrap_or_else(|| LEAST_SAMPLES.max((FAILING / (1.0 - coverage.share)).ceil() as usize));
    let drawn = threads::on_two(&asked, |&index| {
        let case = &cases[index];
        let roles = case.roles(compiled, &conditions[case.condition]);
        let held = settle(case, &roles, outputs.margin, coverage.share);
        let sampling = Sampling { roles: &roles, held: &held, samples: count, seed: SEED, threads: 1 };
        let values = spread::sample(&case.response, &[outputs.margin, outputs.left], &sampling);
        Some(counted(index, roles, held, values, outputs, coverage.share))
    });
    let tail = |drawn: &Drawn| margin_of(&drawn.values[drawn.tail]);
    drawn
        .into_iter()
        .flatten()
        .min_by(|a, b| a.passed.cmp(&b.passed).then(tail(a).total_cmp(&tail(b))).then(a.case.cmp(&b.case)))
}

/// The margin of a specimen; one without a value is worse than any.
fn margin_of(values: &[Result<f64, Miss>]) -> f64 {
    values.first().and_then(|margin| margin.ok()).unwrap_or(f64::NEG_INFINITY)
}

/// Where the bias-like axes stand: from the worst corner, each taken to its other ends as long as the tail of a few specimens
/// gets worse.
fn settle(case: &Case<'_>, roles: &[Role], margin: usize, share: f64) -> Vec<f64> {
    let tail = |held: &[f64]| {
        let sampling = Sampling { roles, held, samples: PILOT, seed: SEED + 1, threads: 1 };
        let found = spread::sample(&case.response, &[margin], &sampling);
        let mut margins: Vec<f64> = found.iter().map(|values| margin_of(values)).collect();
        margins.sort_by(f64::total_cmp);
        margins[spread::rank(PILOT, 1.0 - share) - 1]
    };
    let corner = case.ranges[margin].min.as_ref().map(|extreme| extreme.at.clone());
    let mut held = corner.unwrap_or_else(|| case.response.nominal());
    let mut worst = tail(&held);
    for _ in 0..ROUNDS {
        let before = worst;
        for (i, axis) in case.response.axes().iter().enumerate().filter(|(i, _)| roles[*i] == Role::Bias) {
            for end in [axis.low, axis.high] {
                let mut tried = held.clone();
                tried[i] = end;
                let found = if held[i] == end { worst } else { tail(&tried) };
                // Improvements in the last digits are none.
                if found < worst - 1e-9 * worst.abs() {
                    (held, worst) = (tried, found);
                }
            }
        }
        if worst >= before {
            break;
        }
    }
    held
}

fn counted(
    case: usize,
    roles: Vec<Role>,
    held: Vec<f64>,
    values: Vec<Specimen>,
    outputs: &CriterionOutputs,
    share: f64,
) -> Drawn {
    let (mut passed, mut undecided, mut missing) = (0, 0, 0);
    for found in &values {
        let Some((margin, left)) = found[0].ok().zip(found[1].ok()) else {
            missing += 1;
            continue;
        };
        // Both sides of a relation are about as large where the margin is small; a state is judged on a scale of one.
        let scale = if outputs.right.is_some() { 2.0 * left.abs() } else { 1.0 };
        if !spread::margin_is_decided(margin, scale) {
            undecided += 1;
        } else if margin > 0.0 {
            passed += 1;
        }
    }
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_by(|&a, &b| margin_of(&values[a]).total_cmp(&margin_of(&values[b])).then(a.cmp(&b)));
    let tail = order[spread::rank(values.len(), 1.0 - share) - 1];
    Drawn { case, roles, held, values, passed, undecided, missing, tail }
}

fn combine(
    judge: &Judge<'_>,
    outputs: &CriterionOutputs,
    case: usize,
    roles: &[Role],
    held: &[f64],
    coverage_factor: f64,
) -> Result<Combined, Miss> {
    let ask = Combine { output: outputs.margin, lowest: true, roles, held: Some(held), coverage_factor };
    spread::combine(&judge.cases[case].response, &ask)
}

impl Drawn {
    /// The share of specimens that pass: undecided ones count against the lower limit and for the upper one.
    fn passing(&self) -> Proportion {
        let total = self.values.len() as u64;
        let sure = spread::proportion(self.passed, total, CONFIDENCE);
        let most = spread::proportion(self.passed + self.undecided, total, CONFIDENCE);
        Proportion { high: most.high, ..sure }
    }

    /// The specimen that bounds the share asked for.
    fn tail(&self, judge: &Judge<'_>, matters: Vec<usize>) -> Found {
        let sampling = Sampling {
            roles: &self.roles,
            held: &self.held,
            samples: self.values.len(),
            seed: SEED,
            threads: 1,
        };
        Found {
            case: self.case,
            value: margin_of(&self.values[self.tail]),
            at: spread::specimen(&judge.cases[self.case].response, &sampling, self.tail as u64),
            established: Established::Sampled,
            telling: matters.len(),
            matters,
        }
    }
}

/// Puts the verdict by coverage in the place of that by extreme value, and says that it is one.
fn decide(
    judge: &Judge<'_>,
    outputs: &CriterionOutputs,
    coverage: &Coverage,
    drawn: &Drawn,
    combined: &Result<Combined, Miss>,
    finding: &mut CriterionFinding,
) {
    let case = &judge.cases[drawn.case];
    let condition = &judge.conditions[case.condition];
    let all = || (0..drawn.roles.len()).collect();
    let matters: Vec<usize> =
        combined.as_ref().map_or_else(|_| all(), |c| c.terms.iter().map(|term| term.axis).collect());
    let bias: Vec<usize> = matters.iter().copied().filter(|&axis| drawn.roles[axis] == Role::Bias).collect();
    let mut tail = drawn.tail(judge, matters);
    let passing = drawn.passing();
    let total = drawn.values.len();
    let limits = format!(
        "95 % limits {} to {}",
        percent(passing.low, coverage.share),
        percent(passing.high, coverage.share)
    );
    let counts = format!("{} of {total} specimens satisfy it ({limits})", drawn.passed);
    let gap = if tail.value.is_finite() { judge.leans_on_gaps(&tail, outputs.margin) } else { None };
    let not_shown =
        |why: String| Verdict::NotShown { reason: format!("coverage of {}: {why}", coverage.text) };
    finding.verdict = if let Some(gap) = gap {
        not_shown(gap)
    } else if passing.high < coverage.share {
        if case.bound_only && case.response.thermal == Thermal::Equilibrium {
            not_shown(format!(
                "{counts} in thermal equilibrium, but {} is over before it; get a row Z_th(j-a)",
                condition.name
            ))
        } else {
            Verdict::NotMet
        }
    } else if passing.low >= coverage.share {
        match judge.weak_bounds(&tail, outputs.margin) {
            0 => Verdict::Met,
            count => Verdict::MetOnAssumptions { count },
        }
    } else {
        not_shown(format!("{counts}, which does not decide it; {}", more_samples(drawn, coverage)))
    };
    let unit = finding.unit.of_difference();
    let at_extremes = match &finding.margin {
        Shown::Value(margin) => {
            format!("the margin at the extremes is {}", quantity::text(*margin, &unit, 3))
        }
        Shown::NotShown(_) => "there is no extreme value".to_owned(),
    };
    let missing = match drawn.missing {
        0 => String::new(),
        count => format!("; {count} specimens have no value and count as failing"),
    };
    finding.coverage = Some(CoverageFinding {
        asked: coverage.text.clone(),
        because: coverage.because.clone(),
        statement: format!(
            "Judged by coverage of {}, not by extreme value: {counts}{missing}; {at_extremes}",
            coverage.text
        ),
    });
    finding.over = format!("coverage {}", coverage.text);
    // What was said of the search for extremes does not bear on this verdict.
    finding.flags.clear();
    let no_value = || {
        let miss =
            drawn.values[drawn.tail].iter().find_map(|value| value.err()).unwrap_or(Miss::NotConverged);
        Shown::NotShown(reason(miss, condition.name, case.thermal_name()))
    };
    let [margin, left] =
        [0, 1].map(|i| drawn.values[drawn.tail][i].map_or_else(|_| no_value(), Shown::Value));
    finding.margin = margin;
    if let Some(right) = outputs.right.and_then(|right| judge.at(&tail, right)) {
        finding.limit = Shown::Value(right);
    }
    (tail.telling, tail.matters) = (bias.len(), bias);
    finding.worst = judge.shown(Some(&tail), left);
}

/// How many samples would decide.
fn more_samples(drawn: &Drawn, coverage: &Coverage) -> String {
    let share = drawn.passed as f64 / drawn.values.len() as f64;
    match spread::samples_to_decide(share, coverage.share, CONFIDENCE) {
        Some(count) if drawn.undecided == 0 => {
            let count = count.div_ceil(1_000) * 1_000;
            format!("it takes about {count} samples if the share stays the same: `from {count} samples`")
        }
        _ => "no number of samples would".to_owned(),
    }
}

/// A share in percent, with so many digits that it differs from the one asked for.
fn percent(share: f64, asked: f64) -> String {
    let unit = Unit::percent();
    quantity::text(share, &unit, quantity::digits_apart(share, asked, &unit, 4))
}

fn sampled(
    judge: &Judge<'_>,
    coverage: &Coverage,
    drawn: &Drawn,
    finding: &CriterionFinding,
) -> SampledFinding {
    let sorted = |output: usize| {
        let mut values: Vec<f64> = drawn.values.iter().filter_map(|found| found[output].ok()).collect();
        values.sort_by(f64::total_cmp);
        values
    };
    let mut margins: Vec<f64> = drawn.values.iter().map(|found| margin_of(found)).collect();
    margins.sort_by(f64::total_cmp);
    let finite = |end: Option<f64>| end.filter(|end| end.is_finite());
    let margin = spread::quantile(&margins, 1.0 - coverage.share, CONFIDENCE)
        .filter(|found| found.value.is_finite())
        .map(|found| Quantile { low: finite(found.low), high: finite(found.high), ..found });
    let interval = spread::coverage_interval(&sorted(1), coverage.share, CONFIDENCE);
    let ends = interval.map(|[low, high]| [low.value, high.value]);
    let unit = match ends {
        Some(ends) if finding.unit.symbol.is_empty() => judge.compiled.unit_for(finding.kind, &ends),
        _ => finding.unit.clone(),
    };
    SampledFinding {
        samples: drawn.values.len() as u64,
        seed: SEED,
        passed: drawn.passed,
        missing: drawn.missing,
        passing: drawn.passing(),
        confidence: CONFIDENCE,
        coverage: coverage.share,
        margin,
        interval,
        unit,
    }
}

#[allow(clippy::too_many_arguments)]
fn compared(
    judge: &Judge<'_>,
    finding: &CriterionFinding,
    extreme: Shown,
    case: usize,
    held: &[f64],
    combined: &Result<Combined, Miss>,
    coverage_factor: f64,
    sampled: Option<SampledFinding>,
) -> SpreadFinding {
    let case = &judge.cases[case];
    let condition = judge.conditions[case.condition].name;
    let none = |miss: Miss| Shown::NotShown(reason(miss, condition, case.thermal_name()));
    let name = |axis: usize| case.response.axes()[axis].name.clone();
    let (nominal, combined, terms, bias) = match combined {
        Ok(found) => {
            let end = if found.linear {
                Shown::Value(found.end)
            } else {
                Shown::NotShown(format!(
                    "not linear: the response departs from a straight line by {:.0} % of the change, more than {:.0} %; \
                     use Monte Carlo or extreme value",
                    100.0 * found.departure,
                    100.0 * LINEAR_WITHIN
                ))
            };
            let terms = found.terms.iter().map(|term| TermFinding {
                symbol: name(term.axis),
                role: term.role,
                sensitivity: term.sensitivity,
                reach: term.reach,
                effect: term.effect,
            });
            let bias = found.terms.iter().filter(|term| term.role == Role::Bias).map(|term| term.axis);
            let (bias, terms) = (bias.collect::<Vec<usize>>(), terms.collect());
            let combined = CombinedFinding {
                end,
                bias: found.bias,
                deviation: found.deviation,
                coverage_factor,
                departure: found.departure,
            };
            (Shown::Value(found.nominal), combined, terms, bias)
        }
        Err(miss) => {
            let combined = CombinedFinding {
                end: none(*miss),
                bias: 0.0,
                deviation: 0.0,
                coverage_factor,
                departure: 0.0,
            };
            (none(*miss), combined, Vec::new(), Vec::new())
        }
    };
    SpreadFinding {
        criterion: finding.label.clone(),
        unit: finding.unit.of_difference(),
        condition: condition.to_owned(),
        thermal: case.thermal_name().to_owned(),
        held: case.levels(judge.compiled, held, &bias),
        nominal,
        extreme,
        combined,
        sampled,
        terms,
    }
}
