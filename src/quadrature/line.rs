//! Adaptive integration of a vector-valued function over segments of a line.
//!
//! Each segment is probed at its ends for algebraic growth or a vertical tangent and mapped so that the integrand becomes
//! smooth ([`super::map`]); then panels are bisected until the sum of |Gauss - Kronrod| over all panels is within the
//! tolerance. That difference is the error of the 15-point Gauss rule while the value returned is the 31-point Kronrod
//! sum, so for a resolved integrand it is larger than the true error by many orders. Work is done in rounds: which panels
//! are split depends on numbers only, never on timing, so that results do not depend on threads.
//!
//! On a proved period the trapezoid rule is used instead, with prime node counts: two neighbouring counts alias the same
//! frequency only at multiples of their product.

use super::map::{MAXIMUM_ORDER, Map, Segment};
use super::nested::{Axis, Growth};
use super::rules::{KRONROD_NODES, TRAPEZOID_NODES, kronrod, trapezoid_shift};

/// Values of a vector-valued function at a batch of points, component-major: `values[k * count + i]`.
#[derive(Clone, Debug, Default)]
pub struct Samples {
    /// The values; not finite where the function is undefined.
    pub values: Vec<f64>,
    /// Absolute error of each value; empty where the values are exact up to rounding.
    pub errors: Vec<f64>,
    /// Integral of |f| behind each value; empty where it is |value|.
    pub magnitudes: Vec<f64>,
    /// Evaluations spent.
    pub evaluations: u64,
    /// For values that are not finite: the index of the point, the second coordinate at which the function was found
    /// undefined, and the component.
    pub failures: Vec<(usize, f64, usize)>,
    /// Number of points at which an inner end with growth that is not integrable, or may not be, was met.
    pub divergent: usize,
    /// Whether an integral behind a value gave up for want of evaluations.
    pub exhausted: bool,
}

/// A vector-valued function of one variable.
pub(super) trait Line {
    fn components(&self) -> usize;
    /// Values at `x`; `None` if even the least effort is more than allowed.
    fn sample(&self, x: &[f64], allowance: Allowance) -> Option<Samples>;
}

/// Evaluations that a batch of samples may take. Where each sample is an integral, each has its smallest round, and they
/// share what `usual` leaves beyond that.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Allowance {
    pub(super) usual: u64,
    pub(super) most: u64,
}

impl Allowance {
    /// What is left of a budget; more for samples that are needed in any case.
    pub(super) fn of(left: u64, needed: bool) -> Self {
        Self { usual: left, most: if needed { u64::MAX } else { left } }
    }
}

/// Not even the smallest round was within the budget.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Unaffordable {
    /// Evaluations that were made nevertheless.
    pub(super) evaluations: u64,
}

/// How exact a component must be: within `absolute`, or within `relative` times the integral of |f|.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tolerance {
    /// Absolute error allowed.
    pub absolute: f64,
    /// Error allowed relative to the integral of |f|.
    pub relative: f64,
}

impl Tolerance {
    fn allowed(&self, magnitude: f64) -> f64 {
        self.absolute.max(self.relative * magnitude).max(f64::MIN_POSITIVE)
    }
}

/// An integral over segments of a line.
#[derive(Clone, Debug)]
pub(super) struct LineSum {
    pub(super) values: Vec<f64>,
    /// Error of the rule plus the errors of the values that went in.
    pub(super) errors: Vec<f64>,
    /// Integral of |f|.
    pub(super) magnitudes: Vec<f64>,
    pub(super) evaluations: u64,
    pub(super) outcome: Outcome,
    /// The steepest growth at an end that is not integrable.
    pub(super) growth: Option<EndGrowth>,
    /// Growth of which samples cannot tell whether it is integrable.
    pub(super) doubt: Option<Growth>,
    /// Samples at which the inner integral met such an end, and all samples.
    pub(super) divergent: (usize, usize),
    /// Whether an integral behind a sample gave up for want of evaluations.
    pub(super) exhausted: bool,
}

/// From this exponent on, growth like distance^exponent is doubtful: samples cannot tell it from distance^-1.
const DOUBTFUL: f64 = -0.99;

/// From this exponent on, growth like distance^exponent is certainly not integrable.
const DIVERGENT: f64 = -1.02;

/// Growth like distance^exponent towards an end.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct EndGrowth {
    pub(super) end: f64,
    pub(super) exponent: f64,
    pub(super) component: usize,
}

impl EndGrowth {
    /// Whether the integral certainly does not exist.
    pub(super) fn diverges(self) -> bool {
        self.exponent <= DIVERGENT
    }

    pub(super) fn along(self, axis: Axis) -> Growth {
        let EndGrowth { end, exponent, component } = self;
        Growth { axis, end, exponent, component }
    }
}

/// How a line integration ended.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Outcome {
    Reached,
    /// No panel is worth splitting further: rounding or noise of the integrand.
    Noise,
    /// The budget of evaluations is spent.
    Budget,
    /// The caller asked to stop.
    Stopped,
}

/// The function is undefined at a point, and beside it too.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct NotFinite {
    pub(super) x: f64,
    pub(super) second: Option<f64>,
    pub(super) component: usize,
}

/// Largest number of bisections of one panel.
const MAXIMUM_DEPTH: u8 = 48;

/// Generations without progress after which a panel is taken to show noise only.
const MAXIMUM_STALLS: u8 = 9;

/// A panel whose error is below this multiple of rounding is not split.
const ROUNDING: f64 = 16.0 * f64::EPSILON;

/// From this many segments on, each starts as one panel: the splits have made them short.
const MANY_SEGMENTS: usize = 8;

/// On a rough line a panel keeps at least this share of the error of the panel that it is half of. A kink that no split
/// resolves loses three quarters of its error in a bisection, a jump half; both rules agree by chance more often than
/// twice in a row.
const ROUGH_SHARE: f64 = 0.125;

/// How much work a line is worth, and how far its rules are trusted.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Effort {
    /// Most evaluations; a round that would take more is not begun.
    pub(super) budget: u64,
    /// Whether the first round is made even if it takes more.
    pub(super) needed: bool,
    /// Whether the function has kinks or jumps that no split resolves.
    pub(super) rough: bool,
}

/// What the samples of a line took.
#[derive(Default)]
struct Spent {
    evaluations: u64,
    /// Samples at which the inner integral met an end with non-integrable growth, and all samples.
    divergent: (usize, usize),
    exhausted: bool,
}

impl Spent {
    fn add(&mut self, samples: &Samples) {
        self.evaluations += samples.evaluations;
        self.exhausted |= samples.exhausted;
    }
}

struct Panel {
    map: usize,
    from: f64,
    to: f64,
    depth: u8,
    stalls: u8,
    /// Errors of the panel that this one is half of; empty at the start.
    before: Vec<f64>,
    values: Vec<f64>,
    errors: Vec<f64>,
    inherited: Vec<f64>,
    magnitudes: Vec<f64>,
}

/// Samples of the smallest round over `segments`: the probes of their ends and one panel for each.
pub(super) fn least_samples(segments: usize) -> u64 {
    (PROBES.len() * 2 + KRONROD_NODES) as u64 * segments as u64
}

/// Integrates over `segments`, one after the other. `keep_going` is told the evaluations so far after each round.
pub(super) fn integrate_segments(
    line: &impl Line,
    segments: &[Segment],
    tolerances: &[Tolerance],
    effort: Effort,
    keep_going: &dyn Fn(u64) -> bool,
) -> Result<Result<LineSum, Unaffordable>, NotFinite> {
    let components = line.components();
    let Effort { budget, needed, rough } = effort;
    let mut spent = Spent::default();
    let Some((maps, growth)) = probe_ends(line, segments, effort, &mut spent) else {
        return Ok(Err(Unaffordable { evaluations: 0 }));
    };
    let whole = || (0..maps.len()).map(|map| Panel::new(map, 0.0, 1.0, 0)).collect::<Vec<Panel>>();
    let mut panels = whole();
    if !rough && maps.len() < MANY_SEGMENTS {
        panels = panels.iter().flat_map(|panel| panel.halves(0)).collect();
    }
    if !evaluate_panels(line, &maps, &mut panels, effort, false, &mut spent)? {
        panels = whole();
        if !evaluate_panels(line, &maps, &mut panels, effort, needed, &mut spent)? {
            return Ok(Err(Unaffordable { evaluations: spent.evaluations }));
        }
    }
    // On a rough line the first difference of rules alone says nothing.
    let unconfirmed = |panel: &Panel| rough && panel.before.is_empty();
    let outcome = loop {
        let total = |part: &dyn Fn(&Panel) -> &Vec<f64>, k: usize| panels.iter().map(|p| part(p)[k]).sum::<f64>();
        let allowed: Vec<f64> = (0..components).map(|k| tolerances[k].allowed(total(&|p| &p.magnitudes, k))).collect();
        let reached =
            !panels.iter().any(unconfirmed) && (0..components).all(|k| total(&|p| &p.errors, k) <= allowed[k]);
        if reached {
            break Outcome::Reached;
        }
        if !keep_going(spent.evaluations) {
            break Outcome::Stopped;
        }
        if spent.evaluations >= budget {
            break Outcome::Budget;
        }
        let share = 0.5 / panels.len() as f64;
        let weight = |panel: &Panel| {
            (0..components)
                .filter(|&k| panel.errors[k] > ROUNDING * panel.magnitudes[k])
                .map(|k| panel.errors[k] / allowed[k])
                .fold(0.0, f64::max)
        };
        let splittable = |panel: &Panel| {
            panel.depth < MAXIMUM_DEPTH
                && panel.stalls < MAXIMUM_STALLS
                && maps[panel.map].resolves(panel.from, panel.to)
        };
        let (split, kept): (Vec<Panel>, Vec<Panel>) =
            panels.into_iter().partition(|panel| splittable(panel) && (unconfirmed(panel) || weight(panel) > share));
        panels = kept;
        if split.is_empty() {
            break Outcome::Noise;
        }
        let mut halves: Vec<Panel> = split.iter().flat_map(|panel| panel.halves(panel.depth + 1)).collect();
        if !evaluate_panels(line, &maps, &mut halves, effort, false, &mut spent)? {
            panels.extend(split);
            break Outcome::Budget;
        }
        panels.append(&mut halves);
    };
    panels.sort_by(|a, b| (a.map, a.from).partial_cmp(&(b.map, b.from)).expect("panel ends are numbers"));
    let sum = |k: usize, part: &dyn Fn(&Panel) -> &Vec<f64>| compensated(panels.iter().map(|panel| part(panel)[k]));
    Ok(Ok(LineSum {
        values: (0..components).map(|k| sum(k, &|p| &p.values)).collect(),
        errors: (0..components).map(|k| sum(k, &|p| &p.errors) + sum(k, &|p| &p.inherited)).collect(),
        magnitudes: (0..components).map(|k| sum(k, &|p| &p.magnitudes)).collect(),
        evaluations: spent.evaluations,
        outcome,
        growth,
        doubt: None,
        divergent: spent.divergent,
        exhausted: spent.exhausted,
    }))
}

impl Panel {
    fn new(map: usize, from: f64, to: f64, depth: u8) -> Self {
        let none = Vec::new;
        Self {
            map,
            from,
            to,
            depth,
            stalls: 0,
            before: none(),
            values: none(),
            errors: none(),
            inherited: none(),
            magnitudes: none(),
        }
    }

    /// Factor on |Gauss - Kronrod|. Inside a smooth stretch the difference is an over-estimate by many orders; at the end of
    /// a segment, or where many bisections were needed, convergence is algebraic and both rules share part of the error.
    fn safety(&self, rough: bool) -> f64 {
        let at_end = self.from == 0.0 || self.to == 1.0;
        if rough || at_end || self.depth > 3 { 10.0 } else { 2.0 }
    }

    /// The two halves, which carry the error of the whole until they are evaluated.
    fn halves(&self, depth: u8) -> [Panel; 2] {
        let middle = 0.5 * (self.from + self.to);
        let half = |from, to| Panel {
            from,
            to,
            depth,
            stalls: self.stalls,
            errors: self.errors.clone(),
            ..Panel::new(self.map, from, to, 0)
        };
        [half(self.from, middle), half(middle, self.to)]
    }
}

/// Evaluates the rule on every panel in one batch of samples; `false` if that would take more than the budget.
fn evaluate_panels(
    line: &impl Line,
    maps: &[Map],
    panels: &mut [Panel],
    effort: Effort,
    needed: bool,
    spent: &mut Spent,
) -> Result<bool, NotFinite> {
    let rule = kronrod();
    let mut x = Vec::with_capacity(panels.len() * KRONROD_NODES);
    let mut slopes = Vec::with_capacity(x.capacity());
    let mut nudges = Vec::with_capacity(x.capacity());
    for panel in panels.iter() {
        let (middle, half) = (0.5 * (panel.from + panel.to), 0.5 * (panel.to - panel.from));
        for (node, _, _) in rule {
            let (point, slope) = maps[panel.map].at(middle + half * node);
            x.push(point);
            slopes.push(slope * half);
            nudges.push(1e-7 * slope * half);
        }
    }
    let left = effort.budget.saturating_sub(spent.evaluations);
    let allowance = Allowance::of(left, needed);
    let Some(samples) = finite_samples(line, &x, &nudges, allowance)? else { return Ok(false) };
    spent.add(&samples);
    spent.divergent.0 += samples.divergent;
    spent.divergent.1 += x.len();
    let count = x.len();
    let components = line.components();
    for (index, panel) in panels.iter_mut().enumerate() {
        let safety = panel.safety(effort.rough);
        panel.values = vec![0.0; components];
        panel.before = std::mem::replace(&mut panel.errors, vec![0.0; components]);
        panel.inherited = vec![0.0; components];
        panel.magnitudes = vec![0.0; components];
        for k in 0..components {
            let (mut fine, mut coarse, mut inherited, mut magnitude) = (0.0, 0.0, 0.0, 0.0);
            for (node, &(_, weight, coarse_weight)) in rule.iter().enumerate() {
                let i = index * KRONROD_NODES + node;
                let value = samples.values[k * count + i] * slopes[i];
                fine += weight * value;
                coarse += coarse_weight * value;
                magnitude += weight * samples.magnitude(k, i, count) * slopes[i];
                inherited += weight * samples.error(k, i, count) * slopes[i];
            }
            panel.values[k] = fine;
            panel.errors[k] = safety * (fine - coarse).abs();
            if effort.rough && !panel.before.is_empty() {
                panel.errors[k] = panel.errors[k].max(ROUGH_SHARE * panel.before[k]);
            }
            panel.inherited[k] = inherited;
            panel.magnitudes[k] = magnitude;
        }
    }
    note_progress(panels);
    Ok(true)
}

/// Counts generations in which a bisection did not help: both halves keep a good part of the error of the whole. Near a
/// singular point one half gets better; where both stay bad, the integrand is noise (or unresolved ribs, which get better
/// after a few bisections).
fn note_progress(panels: &mut [Panel]) {
    for pair in panels.chunks_exact_mut(2) {
        let [left, right] = pair else { continue };
        if left.before.is_empty() {
            continue;
        }
        let stalled = (0..left.errors.len()).any(|k| {
            let keeps = |panel: &Panel| panel.errors[k] > 0.3 * panel.before[k];
            left.before[k] > 0.0 && keeps(left) && keeps(right)
        });
        let stalls = if stalled { left.stalls + 1 } else { 0 };
        left.stalls = stalls;
        right.stalls = stalls;
    }
}

impl Samples {
    fn error(&self, k: usize, i: usize, count: usize) -> f64 {
        if self.errors.is_empty() { 0.0 } else { self.errors[k * count + i] }
    }

    fn magnitude(&self, k: usize, i: usize, count: usize) -> f64 {
        if self.magnitudes.is_empty() { self.values[k * count + i].abs() } else { self.magnitudes[k * count + i] }
    }
}

/// Samples at `x`. A point at which the function is undefined is replaced by a near one (an isolated 0/0, such as the
/// normal at a cone tip, has no weight in an integral); if that is undefined too, the function is. `None` if the samples
/// would take more than the budget.
fn finite_samples(
    line: &impl Line,
    x: &[f64],
    nudges: &[f64],
    allowance: Allowance,
) -> Result<Option<Samples>, NotFinite> {
    let Some(mut samples) = line.sample(x, allowance) else { return Ok(None) };
    let components = line.components();
    let count = x.len();
    let undefined = |samples: &Samples, i: usize, count: usize| {
        (0..components).find(|k| !samples.values[k * count + i].is_finite())
    };
    let bad: Vec<usize> = (0..count).filter(|&i| undefined(&samples, i, count).is_some()).collect();
    if bad.is_empty() {
        return Ok(Some(samples));
    }
    let moved: Vec<f64> = bad.iter().flat_map(|&i| [x[i] + nudges[i], x[i] - nudges[i]]).collect();
    let left = allowance.usual.saturating_sub(samples.evaluations);
    let again = line.sample(&moved, Allowance::of(left, true)).expect("needed samples are made");
    samples.evaluations += again.evaluations;
    samples.exhausted |= again.exhausted;
    for (position, &i) in bad.iter().enumerate() {
        let candidates = [2 * position, 2 * position + 1];
        let Some(&good) = candidates.iter().find(|&&j| undefined(&again, j, moved.len()).is_none()) else {
            let inner = samples.failures.iter().find(|(index, ..)| *index == i);
            let component = inner.map(|(.., component)| *component).or_else(|| undefined(&samples, i, count));
            return Err(NotFinite {
                x: x[i],
                second: inner.map(|(_, second, _)| *second),
                component: component.unwrap_or(0),
            });
        };
        for k in 0..components {
            samples.values[k * count + i] = again.values[k * moved.len() + good];
            if !samples.errors.is_empty() {
                samples.errors[k * count + i] = again.error(k, good, moved.len());
            }
            if !samples.magnitudes.is_empty() {
                samples.magnitudes[k * count + i] = again.magnitude(k, good, moved.len());
            }
        }
    }
    Ok(Some(samples))
}

/// Distances from an end, as fractions of the segment, at which the behaviour is probed.
const PROBES: [f64; 3] = [1e-3, 1e-6, 1e-9];

/// Chooses the orders of the map of each segment from samples near its ends; `None` if they would take more than the budget.
fn probe_ends(
    line: &impl Line,
    segments: &[Segment],
    effort: Effort,
    spent: &mut Spent,
) -> Option<(Vec<Map>, Option<EndGrowth>)> {
    let plain: Vec<Map> = segments.iter().map(|&segment| Map::new(segment, (1, 1))).collect();
    let mut x = Vec::new();
    let mut slopes = Vec::new();
    for map in &plain {
        for t in PROBES.into_iter().chain(PROBES.map(|distance| 1.0 - distance)) {
            let (point, slope) = map.at(t);
            x.push(point);
            slopes.push(slope);
        }
    }
    let samples =
        line.sample(&x, Allowance { usual: effort.budget / 8, ..Allowance::of(effort.budget, effort.needed) })?;
    spent.evaluations += samples.evaluations;
    let count = x.len();
    let mut growth: Option<EndGrowth> = None;
    let mut end_order = |first: usize, end: f64| {
        let mut order = 1;
        for k in 0..line.components() {
            let value = |j: usize| samples.values[k * count + first + j] * slopes[first + j];
            let noise = (0..3).map(|j| samples.error(k, first + j, count) * slopes[first + j]).fold(0.0, f64::max);
            let Some(exponent) = end_exponent([value(0), value(1), value(2)], noise) else { continue };
            if exponent <= DOUBTFUL && growth.is_none_or(|known| exponent < known.exponent) {
                growth = Some(EndGrowth { end, exponent, component: k });
            }
            order = order.max(order_for(exponent));
        }
        order
    };
    let maps = segments
        .iter()
        .enumerate()
        .map(|(index, &segment)| {
            let lower = end_order(6 * index, segment.from);
            let upper = end_order(6 * index + 3, segment.to);
            Map::new(segment, (lower, upper))
        })
        .collect();
    Some((maps, growth))
}

/// The exponent alpha of f ~ c + d^alpha from values at the three probe distances d, if it is below 1.
fn end_exponent(values: [f64; 3], noise: f64) -> Option<f64> {
    if values.iter().any(|value| !value.is_finite()) {
        return None;
    }
    let (first, second) = ((values[0] - values[1]).abs(), (values[1] - values[2]).abs());
    let scale = values.iter().fold(0.0_f64, |scale, value| scale.max(value.abs()));
    // A square root with a coefficient worth a substitution changes by more than 1e-6 between the last two probes;
    // less is rounding of the integrand beside its end.
    if second <= (3e-7 * scale).max(4.0 * noise) || first == 0.0 {
        return None;
    }
    let exponent = -(second / first).log10() / 3.0;
    (exponent < 0.95).then_some(exponent)
}

/// The order p for which t^(p (alpha + 1) - 1) and the following powers t^(p alpha) are smooth or nearly so.
fn order_for(exponent: f64) -> u8 {
    for order in 2..=4 {
        let multiple = exponent * f64::from(order);
        if (multiple - multiple.round()).abs() < 0.04 && multiple.round() > -f64::from(order) {
            return order;
        }
    }
    MAXIMUM_ORDER
}

/// Integrates over one period. `None` if the rule does not converge, or the budget is too small for two node counts: the
/// caller then uses [`integrate_segments`], for which enough of the budget is left.
pub(super) fn integrate_period(
    line: &impl Line,
    segment: Segment,
    tolerances: &[Tolerance],
    budget: u64,
    evaluations: &mut u64,
) -> Result<Option<LineSum>, NotFinite> {
    let components = line.components();
    let width = segment.to - segment.from;
    let mut last: Option<Vec<f64>> = None;
    let mut last_differences: Option<Vec<f64>> = None;
    // The best so far, for the case that the budget ends here.
    let mut best: Option<LineSum> = None;
    for (level, nodes) in TRAPEZOID_NODES.into_iter().enumerate() {
        let step = width / nodes as f64;
        let shift = trapezoid_shift(level);
        let x: Vec<f64> = (0..nodes).map(|i| segment.from + width * ((i as f64 + shift) / nodes as f64)).collect();
        let left = budget.saturating_sub(*evaluations);
        let Some(samples) = finite_samples(line, &x, &vec![1e-7 * step; nodes], Allowance::of(left, false))? else {
            return Ok(best);
        };
        *evaluations += samples.evaluations;
        let sum = |part: &dyn Fn(usize) -> f64| step * compensated((0..nodes).map(part));
        let values: Vec<f64> = (0..components).map(|k| sum(&|i| samples.values[k * nodes + i])).collect();
        let magnitudes: Vec<f64> = (0..components).map(|k| sum(&|i| samples.magnitude(k, i, nodes))).collect();
        let inherited: Vec<f64> = (0..components).map(|k| sum(&|i| samples.error(k, i, nodes))).collect();
        if let Some(before) = &last {
            let differences: Vec<f64> = (0..components).map(|k| (values[k] - before[k]).abs()).collect();
            // One lucky difference does not count for more than a hundredfold progress.
            let errors: Vec<f64> = (0..components)
                .map(|k| (2.0 * differences[k]).max(last_differences.as_ref().map_or(0.0, |older| 0.01 * older[k])))
                .collect();
            let reached = (0..components)
                .all(|k| errors[k] <= tolerances[k].allowed(magnitudes[k]).max(ROUNDING * magnitudes[k]));
            let sum = LineSum {
                errors: (0..components).map(|k| errors[k] + inherited[k]).collect(),
                values: values.clone(),
                magnitudes: magnitudes.clone(),
                evaluations: *evaluations,
                outcome: if reached { Outcome::Reached } else { Outcome::Budget },
                growth: None,
                doubt: None,
                divergent: (samples.divergent, nodes),
                exhausted: samples.exhausted,
            };
            if reached {
                return Ok(Some(sum));
            }
            best = Some(sum);
            let hopeless = nodes > 100
                && last_differences.as_ref().is_some_and(|older| {
                    (0..components).any(|k| differences[k] > 0.1 * older[k].max(1e-3 * magnitudes[k]))
                });
            if hopeless {
                // Panels take as much again at least.
                return Ok(if 2 * *evaluations > budget { best } else { None });
            }
            last_differences = Some(differences);
        }
        last = Some(values);
    }
    Ok(if 2 * *evaluations > budget { best } else { None })
}

/// Neumaier's compensated sum.
pub(super) fn compensated(terms: impl Iterator<Item = f64>) -> f64 {
    let (mut sum, mut rest) = (0.0_f64, 0.0_f64);
    for term in terms {
        let next = sum + term;
        rest += if sum.abs() >= term.abs() { (sum - next) + term } else { (term - next) + sum };
        sum = next;
    }
    sum + rest
}
