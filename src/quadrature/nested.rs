//! Integration over a plane region as an integral of integrals: for each value of the outer variable the inner line is
//! integrated with its own splits, maps and errors, and those errors are carried into the outer sum.

use super::line::{
    Allowance, Effort, EndGrowth, Line, LineSum, NotFinite, Outcome, Samples, Tolerance, Unaffordable,
    integrate_period, integrate_segments, least_samples,
};
use super::map::{Map, Segment};
use super::rules::gauss_legendre;
use rayon::prelude::*;
use std::sync::atomic::{AtomicU64, Ordering};

/// A vector-valued function on a plane region.
pub trait PlaneIntegrand: Sync {
    /// Number of components.
    fn components(&self) -> usize;

    /// The parts of the inner line that belong to the region, ascending, split where the function has a kink.
    fn inner_segments(&self, outer: f64) -> Vec<Segment>;

    /// Values at points of one inner line: `out[k * inner.len() + i]`.
    fn evaluate(&self, outer: f64, inner: &[f64], out: &mut [f64]);

    /// About what one evaluation costs, in additions; decides whether threads are used, never a result.
    fn work(&self) -> u64;
}

/// What is known about the region and the function along its two variables.
#[derive(Clone, PartialEq, Debug)]
pub struct Sides {
    /// Parts of the outer line, split where the inner integral has a kink.
    pub outer: Vec<Segment>,
    /// Whether the function is proved periodic along the outer line, one or more periods of which are integrated.
    pub outer_periodic: bool,
    /// Whether the function is proved periodic along every inner line.
    pub inner_periodic: bool,
    /// Whether function and inner limits are independent of the outer variable.
    pub outer_independent: bool,
    /// Whether the function is independent of the inner variable.
    pub inner_independent: bool,
    /// Whether there are kinks or jumps that no split resolves: rules are then trusted less.
    pub rough: bool,
    /// Integral of the rounding error of each component over the region, 0 where it is not known.
    pub rounding: Vec<f64>,
}

/// An integral and how well it is known.
#[derive(Clone, PartialEq, Debug)]
pub struct Integral {
    /// Values of the components.
    pub values: Vec<f64>,
    /// Conservative error estimates, rounding included.
    pub errors: Vec<f64>,
    /// Integrals of the absolute values.
    pub magnitudes: Vec<f64>,
    /// Evaluations of the function.
    pub evaluations: u64,
    /// The part of the errors that no refinement can reduce: rounding.
    pub rounding: Vec<f64>,
    /// Why the tolerance was not reached; `None` if it was.
    pub limit: Option<Limit>,
}

/// Why an integration stopped short of its tolerance.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Limit {
    /// The budget of evaluations was spent.
    Evaluations,
    /// Rounding errors of the integrand are larger than the tolerance.
    Rounding,
    /// The caller asked to stop.
    Stopped,
    /// The function grows so fast that samples cannot tell whether the integral exists.
    Growth(Growth),
}

/// Why there is no value.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Failure {
    /// The function is undefined at (outer, inner) and beside it.
    NotFinite {
        /// Outer coordinate.
        outer: f64,
        /// Inner coordinate, where it is known.
        inner: Option<f64>,
        /// The component.
        component: usize,
    },
    /// The function grows towards an end so fast that the integral does not exist.
    Divergent(Growth),
}

/// Growth towards an end of a line, as far as samples show it.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Growth {
    /// The line it is seen on.
    pub axis: Axis,
    /// The end: a number or an infinity.
    pub end: f64,
    /// The function grows like distance^exponent towards a finite end, like x^(-2 - exponent) towards an infinite one.
    pub exponent: f64,
    /// The component.
    pub component: usize,
}

/// Which of the two variables.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Axis {
    /// The outer one.
    Outer,
    /// The inner one.
    Inner,
}

/// Integrates `function` over its region until each component k is within `tolerance(k, value, magnitude)`.
///
/// `tolerance` gives the error allowed for a component with this value and this integral of |f|. `keep_going` is told the
/// evaluations so far and returns whether to go on.
///
/// `budget` is the largest number of evaluations; the first look, 9 x 9 points for each part of the region, and a second
/// look beside undefined points are made in any case. A budget below the smallest round of rules, some 37 x 37 points for
/// each part, leaves the first look with infinite errors. Results have the same bits for any number of threads.
///
/// # Errors
/// If the function is undefined on more than isolated points or grows so fast that the integral does not exist.
pub fn integrate(
    function: &dyn PlaneIntegrand,
    sides: &Sides,
    tolerance: &dyn Fn(usize, f64, f64) -> f64,
    budget: u64,
    keep_going: &dyn Fn(u64) -> bool,
) -> Result<Integral, Failure> {
    let components = function.components();
    let rounding = |k: usize, sum: &LineSum| ROUNDING_PER_SUM * sum.magnitudes[k] + 2.0 * sides.rounding[k];
    let mut spent = 0;
    let (mut values, mut magnitudes) = coarse(function, sides, &mut spent);
    let mut before: Option<Integral> = None;
    for attempt in 0..4 {
        // Half of what is allowed for the outer rule, a quarter for the inner integrals, the rest for rounding.
        // Nothing can be had below the rounding of the function itself.
        let allowed: Vec<f64> =
            (0..components).map(|k| tolerance(k, values[k], magnitudes[k]).max(4.0 * sides.rounding[k])).collect();
        let length: f64 = sides.outer.iter().map(|segment| segment.to - segment.from).sum();
        let inner_tolerances: Vec<Tolerance> = (0..components)
            .map(|k| Tolerance {
                absolute: if length.is_finite() { 0.2 * allowed[k] / length } else { 0.0 },
                relative: 0.2 * allowed[k] / magnitudes[k].max(f64::MIN_POSITIVE),
            })
            .collect();
        let outer_tolerances: Vec<Tolerance> =
            allowed.iter().map(|&absolute| Tolerance { absolute: 0.5 * absolute, relative: 0.0 }).collect();
        let longest = INNER_BUDGET.max(budget / 600);
        let line = OuterLine { function, sides, tolerances: inner_tolerances, longest, cost: AtomicU64::new(64) };
        let watch = |evaluations: u64| keep_going(spent + evaluations);
        let sum = integrate_outer(&line, sides, &outer_tolerances, budget.saturating_sub(spent), &watch)?;
        spent += match &sum {
            Ok(LineSum { evaluations, .. }) | Err(Unaffordable { evaluations }) => *evaluations,
        };
        let Ok(sum) = sum else {
            // Not even the smallest round: what there is has no error bound, or that of the round before.
            let guess = || Integral {
                errors: vec![f64::INFINITY; components],
                rounding: vec![0.0; components],
                values: values.clone(),
                magnitudes: magnitudes.clone(),
                evaluations: spent,
                limit: None,
            };
            let limit = Some(Limit::Evaluations);
            return Ok(Integral { evaluations: spent, limit, ..before.unwrap_or_else(guess) });
        };
        values.clone_from(&sum.values);
        magnitudes.clone_from(&sum.magnitudes);
        let errors: Vec<f64> =
            (0..components).map(|k| sum.errors[k].max(CLAIM * allowed[k]) + rounding(k, &sum)).collect();
        let short =
            (0..components).any(|k| errors[k] > tolerance(k, values[k], magnitudes[k]).max(8.0 * sides.rounding[k]));
        let limit = match sum.outcome {
            Outcome::Stopped => Some(Limit::Stopped),
            _ if sum.doubt.is_some() => sum.doubt.map(Limit::Growth),
            _ if !short => None,
            Outcome::Budget => Some(Limit::Evaluations),
            _ if spent >= budget => Some(Limit::Evaluations),
            Outcome::Noise if sum.exhausted => Some(Limit::Evaluations),
            Outcome::Noise => Some(Limit::Rounding),
            Outcome::Reached if attempt == 3 && sum.exhausted => Some(Limit::Evaluations),
            Outcome::Reached if attempt == 3 => Some(Limit::Rounding),
            // The first guess at the size of the integral was too large: once more with the better one.
            Outcome::Reached => None,
        };
        let again = short && limit.is_none();
        let rounding = (0..components).map(|k| rounding(k, &sum)).collect();
        let integral =
            Integral { values: sum.values, errors, magnitudes: sum.magnitudes, evaluations: spent, rounding, limit };
        if !again {
            return Ok(integral);
        }
        before = Some(integral);
    }
    unreachable!("the last attempt returns")
}

/// Bound for the rounding of the integrand and of the sum, relative to the integral of |f|.
///
/// Integrands are short formulas of functions within a few units in the last place; cancellation inside them shows in
/// the differences between rules, which are counted besides.
const ROUNDING_PER_SUM: f64 = 64.0 * f64::EPSILON;

/// An estimate never claims more than two digits beyond what was asked for: rules were refined no further than that, so
/// their agreement says nothing about what both of them miss below it.
const CLAIM: f64 = 0.01;

/// Evaluations after which one inner line gives up, its error then counts as it is; more where the whole budget is larger
/// than usual, fewer where the lines of a batch would spend more than is left.
const INNER_BUDGET: u64 = 30_000;

/// Work in one batch of lines, in additions, above which threads are worth their start-up.
const PARALLEL_WORK: u64 = 20_000_000;

struct OuterLine<'a> {
    function: &'a dyn PlaneIntegrand,
    sides: &'a Sides,
    tolerances: Vec<Tolerance>,
    /// Most evaluations of one inner line.
    longest: u64,
    /// Evaluations of an average line so far; only steers whether threads are used, never a result.
    cost: AtomicU64,
}

struct InnerLine<'a> {
    function: &'a dyn PlaneIntegrand,
    outer: f64,
}

impl Line for InnerLine<'_> {
    fn components(&self) -> usize {
        self.function.components()
    }

    fn sample(&self, x: &[f64], allowance: Allowance) -> Option<Samples> {
        if x.len() as u64 > allowance.most {
            return None;
        }
        let mut values = vec![0.0; x.len() * self.components()];
        self.function.evaluate(self.outer, x, &mut values);
        Some(Samples { values, evaluations: x.len() as u64, ..Samples::default() })
    }
}

impl OuterLine<'_> {
    /// The integral over one inner line; `budget` is at least [`OuterLine::least`] for its segments.
    fn inner_integral(&self, outer: f64, segments: &[Segment], budget: u64) -> Result<LineSum, NotFinite> {
        let line = InnerLine { function: self.function, outer };
        let mut evaluations = 0;
        if self.sides.inner_independent {
            return Ok(constant_line(&line, segments, Allowance::of(budget, true)).expect("needed samples are made"));
        }
        if self.sides.inner_periodic
            && let [segment] = segments[..]
            && let Some(sum) = integrate_period(&line, segment, &self.tolerances, budget, &mut evaluations)?
        {
            return Ok(sum);
        }
        let effort = Effort { budget: budget.saturating_sub(evaluations), needed: true, rough: self.sides.rough };
        let sum = integrate_segments(&line, segments, &self.tolerances, effort, &|_| true)?;
        let mut sum = sum.expect("the needed first round is made");
        sum.evaluations += evaluations;
        Ok(sum)
    }

    /// Evaluations of the smallest round over the segments of an inner line.
    fn least(&self, segments: &[Segment]) -> u64 {
        if self.sides.inner_independent { 1 } else { least_samples(segments.len()) }
    }
}

/// The integral of a function that does not change along the line; `None` if one sample is more than the budget.
fn constant_line(line: &impl Line, segments: &[Segment], allowance: Allowance) -> Option<LineSum> {
    let components = line.components();
    let length: f64 = segments.iter().map(|segment| segment.to - segment.from).sum();
    let middle: Vec<f64> = segments.iter().take(1).map(|s| s.from + 0.5 * (s.to - s.from)).collect();
    let samples = line.sample(&middle, allowance)?;
    let at = |part: &[f64], k: usize| part.get(k).copied().unwrap_or(0.0);
    let values: Vec<f64> = (0..components).map(|k| length * at(&samples.values, k)).collect();
    let magnitudes = if samples.magnitudes.is_empty() {
        values.iter().map(|value| value.abs()).collect()
    } else {
        (0..components).map(|k| length * at(&samples.magnitudes, k)).collect()
    };
    Some(LineSum {
        values,
        errors: (0..components).map(|k| length * at(&samples.errors, k)).collect(),
        magnitudes,
        evaluations: samples.evaluations,
        outcome: Outcome::Reached,
        growth: None,
        doubt: None,
        divergent: (samples.divergent, middle.len()),
        exhausted: samples.exhausted,
    })
}

impl Line for OuterLine<'_> {
    fn components(&self) -> usize {
        self.function.components()
    }

    fn sample(&self, x: &[f64], allowance: Allowance) -> Option<Samples> {
        let expected = self.cost.load(Ordering::Relaxed) * x.len() as u64;
        let parallel = expected.saturating_mul(self.function.work()) > PARALLEL_WORK;
        let segments: Vec<Vec<Segment>> = if parallel {
            x.par_iter().map(|&outer| self.function.inner_segments(outer)).collect()
        } else {
            x.iter().map(|&outer| self.function.inner_segments(outer)).collect()
        };
        // Every line has its smallest round; what is left is shared equally.
        let least: u64 = segments.iter().map(|segments| self.least(segments)).sum();
        if least > allowance.most {
            return None;
        }
        let more = allowance.usual.saturating_sub(least) / x.len().max(1) as u64;
        let integral = |(outer, segments): (&f64, &Vec<Segment>)| {
            let least = self.least(segments);
            self.inner_integral(*outer, segments, (least + more).min(self.longest.max(least)))
        };
        let lines: Vec<Result<LineSum, NotFinite>> = if parallel {
            x.par_iter().zip(&segments).map(integral).collect()
        } else {
            x.iter().zip(&segments).map(integral).collect()
        };
        let components = self.components();
        let size = components * x.len();
        let mut samples = Samples {
            values: vec![f64::NAN; size],
            errors: vec![0.0; size],
            magnitudes: vec![0.0; size],
            ..Samples::default()
        };
        for (i, line) in lines.into_iter().enumerate() {
            match line {
                Ok(sum) => {
                    for k in 0..components {
                        samples.values[k * x.len() + i] = sum.values[k];
                        samples.errors[k * x.len() + i] = sum.errors[k];
                        samples.magnitudes[k * x.len() + i] = sum.magnitudes[k];
                    }
                    samples.evaluations += sum.evaluations;
                    samples.divergent += usize::from(
                        sum.growth.is_some_and(|growth| growth.diverges() || sum.outcome != Outcome::Reached),
                    );
                    samples.exhausted |= sum.exhausted || sum.outcome == Outcome::Budget;
                }
                Err(failure) => samples.failures.push((i, failure.x, failure.component)),
            }
        }
        if !x.is_empty() {
            self.cost.store(samples.evaluations / x.len() as u64 + 1, Ordering::Relaxed);
        }
        Some(samples)
    }
}

fn integrate_outer(
    line: &OuterLine<'_>,
    sides: &Sides,
    tolerances: &[Tolerance],
    budget: u64,
    keep_going: &dyn Fn(u64) -> bool,
) -> Result<Result<LineSum, Unaffordable>, Failure> {
    let not_finite = |failure: NotFinite| Failure::NotFinite {
        outer: failure.x,
        inner: failure.second,
        component: failure.component,
    };
    let mut evaluations = 0;
    let sum = if sides.outer_independent {
        constant_line(line, &sides.outer, Allowance::of(budget, false)).ok_or(Unaffordable { evaluations: 0 })
    } else if sides.outer_periodic
        && let [segment] = sides.outer[..]
        && let Some(sum) = integrate_period(line, segment, tolerances, budget, &mut evaluations).map_err(not_finite)?
    {
        Ok(sum)
    } else {
        let effort = Effort { budget: budget.saturating_sub(evaluations), needed: false, rough: sides.rough };
        let mut sum = integrate_segments(line, &sides.outer, tolerances, effort, keep_going).map_err(not_finite)?;
        match &mut sum {
            Ok(LineSum { evaluations: own, .. }) | Err(Unaffordable { evaluations: own }) => *own += evaluations,
        }
        sum
    };
    let mut sum = match sum {
        Ok(sum) => sum,
        Err(unaffordable) => return Ok(Err(unaffordable)),
    };
    // Growth that is not integrable is said so; where samples cannot tell, there is a value but no error bound.
    let (divergent, samples) = sum.divergent;
    let inside = if 2 * divergent > samples { growth_inside(line, sides) } else { None };
    let along = sum.growth.filter(|_| sum.outcome != Outcome::Reached);
    let found = inside.map(|growth| (growth, Axis::Inner)).or(along.map(|growth| (growth, Axis::Outer)));
    if let Some((growth, axis)) = found {
        if growth.diverges() {
            return Err(Failure::Divergent(growth.along(axis)));
        }
        sum.errors[growth.component] = f64::INFINITY;
        sum.doubt = Some(growth.along(axis));
    }
    match sum.values.iter().position(|value| !value.is_finite()) {
        Some(component) => {
            let outer = sides.outer.first().map_or(0.5, |segment| Map::new(*segment, (1, 1)).at(0.5).0);
            Err(Failure::NotFinite { outer, inner: None, component })
        }
        None => Ok(Ok(sum)),
    }
}

/// Growth at an end of the inner line in the middle.
fn growth_inside(line: &OuterLine<'_>, sides: &Sides) -> Option<EndGrowth> {
    let middle = sides.outer.first().map_or(0.5, |segment| Map::new(*segment, (1, 1)).at(0.4321).0);
    let segments = line.function.inner_segments(middle);
    line.inner_integral(middle, &segments, line.least(&segments)).ok()?.growth
}

/// First guess at the values and the integrals of |f|: a tensor rule with few nodes. Undefined samples are skipped.
fn coarse(function: &dyn PlaneIntegrand, sides: &Sides, evaluations: &mut u64) -> (Vec<f64>, Vec<f64>) {
    let components = function.components();
    let (nodes, weights) = gauss_legendre(9);
    let mut values = vec![0.0; components];
    let mut magnitudes = vec![0.0; components];
    for &outer_segment in &sides.outer {
        let outer_map = Map::new(outer_segment, (1, 1));
        for (outer_node, outer_weight) in nodes.iter().zip(&weights) {
            let (outer, outer_slope) = outer_map.at(0.5 + 0.5 * outer_node);
            for inner_segment in function.inner_segments(outer) {
                let inner_map = Map::new(inner_segment, (1, 1));
                let mapped: Vec<(f64, f64)> = nodes.iter().map(|node| inner_map.at(0.5 + 0.5 * node)).collect();
                let inner: Vec<f64> = mapped.iter().map(|(x, _)| *x).collect();
                let mut out = vec![0.0; components * inner.len()];
                function.evaluate(outer, &inner, &mut out);
                *evaluations += inner.len() as u64;
                for k in 0..components {
                    for (i, (_, inner_slope)) in mapped.iter().enumerate() {
                        let value =
                            out[k * inner.len() + i] * 0.25 * outer_weight * weights[i] * outer_slope * inner_slope;
                        if value.is_finite() {
                            values[k] += value;
                            magnitudes[k] += value.abs();
                        }
                    }
                }
            }
        }
    }
    (values, magnitudes)
}
