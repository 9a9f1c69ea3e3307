//! The densities of one patch as a function on a plane region, prepared for quadrature: kernels compiled, limits and
//! trims resolved, kinks and sharp features located.

use super::error::{IntegralError, Place};
use super::hidden::small_places;
use super::roots::{SignChanges, bisect, point, sign_changes};
use super::rounding::{at_edge_of_domain, evaluate_bounded, remedy};
use super::sharp::{SharpPlace, sharp_places};
use super::structure::{Feature, Kink, features, is_periodic, kinks};
use crate::enclosure::{Image, Interval, enclose};
use crate::expression::{ExpressionId, Graph, SymbolId, evaluate, first_undefined, print_limited};
use crate::kernel::{Kernel, Program};
use crate::language::{Bindings, Bound, Patch};
use crate::quadrature::{PlaneIntegrand, Segment, Sides};
use std::sync::atomic::{AtomicU64, Ordering};

/// Densities per du dv of one patch, ready to be integrated.
pub(super) struct PatchIntegrand {
    densities: Kernel,
    parameters: Vec<f64>,
    limits: Limits,
    /// Splits of every inner line.
    breaks: Vec<f64>,
    /// Formulas whose sign changes split an inner line at places that depend on the outer variable.
    kinks: Vec<Kernel>,
    /// Work of the searches on inner lines so far, in additions; read while one thread prepares.
    searched: AtomicU64,
    /// Work of the search on an average line, and the parts it is split into.
    line_work: u64,
    line_parts: u64,
    trim: Option<Kernel>,
    /// Whether parts of lines may straddle the edge of the trim: densities are then cut point by point.
    straddles: bool,
    /// Work that finding the splits took, in additions.
    pub(super) prepared: u64,
    /// Bounds for what sharp places may hold that were not split at, for each density.
    pub(super) unsplit: Vec<f64>,
    /// Where densities have decayed to nothing before their formula overflows: (outer, inner).
    decayed: [Segment; 2],
    /// What is known for the quadrature.
    pub(super) sides: Sides,
}

enum Limits {
    Constant(Segment),
    /// Lower and upper end as functions of the outer variable; infinite ends are constants.
    Varying(Box<Kernel>, [Option<f64>; 2]),
}

/// What to integrate over one patch.
pub(super) struct Question<'a> {
    pub(super) patch: &'a Patch,
    /// Formulas of the patch's variables and parameters.
    pub(super) densities: &'a [ExpressionId],
    /// The trim with the symbols of a surface point already replaced.
    pub(super) trim: Option<ExpressionId>,
    pub(super) bindings: &'a Bindings,
}

impl Question<'_> {
    /// Compiles and examines the densities.
    ///
    /// `budget` gives the evaluations that the integrand is allowed: where the splits alone would take more, they are not
    /// made. `preparation` is the work that may go into finding them, in additions.
    pub(super) fn prepare(
        &self,
        graph: &mut Graph,
        budget: &dyn Fn(&PatchIntegrand) -> u64,
        preparation: u64,
    ) -> Result<PatchIntegrand, IntegralError> {
        let patch = self.patch;
        let outer = self.outer(graph);
        let variables = [patch.variables[outer], patch.variables[1 - outer]];
        let value_of = |symbol: SymbolId| self.bindings.value(symbol);
        let roots: Vec<ExpressionId> = self.densities.iter().copied().chain(self.trim).collect();
        let kinks = kinks(graph, &roots, variables);
        let features = features(graph, self.densities, variables);
        let inner_bounds = [patch.intervals[1 - outer].lower, patch.intervals[1 - outer].upper];
        let mut everything = roots.clone();
        everything.extend(kinks.iter().map(|kink| kink.formula));
        everything.extend(inner_bounds.iter().filter_map(|bound| finite(*bound)));
        let parameters: Vec<SymbolId> =
            graph.symbols_of(&everything).into_iter().filter(|symbol| !variables.contains(symbol)).collect();
        let compile = |graph: &Graph, formulas: &[ExpressionId]| -> Result<Kernel, IntegralError> {
            Program::new(graph, formulas, variables, &parameters)
                .map(Kernel::interpreted)
                .map_err(|error| IntegralError::new("formula", format!("{}: {error}", patch.name)))
        };
        let outer_segment = self.outer_segment(graph, outer, &value_of)?;
        let limits = match self.constant_segment(graph, 1 - outer, &value_of) {
            Some(segment) => Limits::Constant(checked(segment, patch, 1 - outer)?),
            None => {
                let zero = graph.integer(0);
                let formulas = inner_bounds.map(|bound| finite(bound).unwrap_or(zero));
                let infinite = inner_bounds.map(|bound| match bound {
                    Bound::Finite(_) => None,
                    Bound::MinusInfinity => Some(f64::NEG_INFINITY),
                    Bound::PlusInfinity => Some(f64::INFINITY),
                });
                Limits::Varying(Box::new(compile(graph, &formulas)?), infinite)
            }
        };
        let mut integrand = PatchIntegrand {
            densities: compile(graph, self.densities)?,
            parameters: parameters.iter().map(|&symbol| self.bindings.value(symbol)).collect(),
            limits,
            breaks: Vec::new(),
            kinks: Vec::new(),
            searched: AtomicU64::new(0),
            line_work: 0,
            line_parts: 1,
            trim: self.trim.map(|trim| compile(graph, &[trim])).transpose()?,
            straddles: false,
            prepared: 0,
            unsplit: vec![0.0; self.densities.len()],
            decayed: [Segment::new(f64::NEG_INFINITY, f64::INFINITY); 2],
            sides: Sides {
                outer: vec![outer_segment],
                outer_periodic: false,
                inner_periodic: false,
                outer_independent: false,
                inner_independent: false,
                rough: false,
                rounding: vec![0.0; self.densities.len()],
            },
        };
        integrand.check_limits(patch, outer, outer_segment)?;
        integrand.find_decay(outer_segment);
        let mut outer_breaks = Vec::new();
        let allowed = PREPARATION_WORK.min(preparation);
        let mut work_left = allowed;
        let mut hidden = Vec::new();
        if let (Limits::Constant(inner), true) =
            (&integrand.limits, outer_segment.from.is_finite() && outer_segment.to.is_finite())
            && inner.from.is_finite()
            && inner.to.is_finite()
        {
            let width = SMALL_PLACE * (outer_segment.to - outer_segment.from);
            for kink in kinks.iter().filter(|kink| kink.along == [true, true]).take(MOST_EXAMINED) {
                hidden.extend(small_places(graph, kink.formula, variables, [outer_segment, *inner], width, &value_of));
            }
        }
        outer_breaks.extend(integrand.find_kinks(graph, &kinks, outer_segment, hidden, &compile, &mut work_left)?);
        let places = integrand.find_sharp_places(graph, &features, outer_segment, &compile, &mut work_left)?;
        integrand.prepared = allowed - work_left;
        outer_breaks.extend(places.iter().flat_map(|place| &place.outer));
        integrand.breaks.extend(places.iter().flat_map(|place| &place.inner));
        outer_breaks.extend(middle_of_infinite(outer_segment));
        integrand.sides.outer = split(outer_segment, &mut outer_breaks);
        // Independence is needed to tell what the splits cost, periods are known only once they are settled.
        integrand.find_independence(graph, &roots, variables);
        integrand.afford(outer_segment, !kinks.is_empty(), &places, budget);
        if integrand.sides.rough {
            integrand.bound_hidden(kinks.len(), &self.largest(graph, outer_segment, variables, &integrand));
        }
        integrand.sides.rounding = self.rounding(graph, outer_segment, variables, &integrand);
        integrand.find_periods(graph, self.densities, variables, &value_of);
        Ok(integrand)
    }

    /// Integral of the rounding error of each density over a finite region, from running error analysis at a few points.
    fn rounding(
        &self,
        graph: &Graph,
        outer_segment: Segment,
        variables: [SymbolId; 2],
        integrand: &PatchIntegrand,
    ) -> Vec<f64> {
        let mut total = vec![0.0; self.densities.len()];
        let mut count = 0.0;
        for outer_share in [0.07, 0.31, 0.55, 0.93] {
            let outer = point(outer_segment, outer_share);
            let limits = integrand.limits_at(outer);
            let measure = (outer_segment.to - outer_segment.from) * (limits.to - limits.from);
            if !measure.is_finite() {
                return vec![0.0; self.densities.len()];
            }
            for inner_share in [0.11, 0.43, 0.86] {
                let inner = point(limits, inner_share);
                let bounded = evaluate_bounded(graph, self.densities, |symbol| {
                    if symbol == variables[0] {
                        outer
                    } else if symbol == variables[1] {
                        inner
                    } else {
                        self.bindings.value(symbol)
                    }
                });
                if bounded.iter().all(|density| density.error.is_finite()) {
                    for (total, density) in total.iter_mut().zip(&bounded) {
                        *total += density.error * measure;
                    }
                    count += 1.0;
                }
            }
        }
        total.iter().map(|sum| if count > 0.0 { sum / count } else { 0.0 }).collect()
    }

    /// The largest size of each density on a rectangle, where interval arithmetic bounds it.
    fn largest(
        &self,
        graph: &Graph,
        outer: Segment,
        variables: [SymbolId; 2],
        integrand: &PatchIntegrand,
    ) -> Vec<Option<f64>> {
        let Limits::Constant(inner) = integrand.limits else { return vec![None; self.densities.len()] };
        let range_of = |symbol: SymbolId| match variables.iter().position(|&variable| variable == symbol) {
            Some(0) => Interval::new(outer.from, outer.to),
            Some(_) => Interval::new(inner.from, inner.to),
            None => Interval::point(self.bindings.value(symbol)),
        };
        let size = |image: Image| image.range.is_bounded().then(|| image.range.magnitude());
        enclose(graph, self.densities, range_of).into_iter().map(size).collect()
    }

    /// Whether the interval of variable `index` depends on `other`.
    fn depends(&self, graph: &Graph, index: usize, other: SymbolId) -> bool {
        let interval = &self.patch.intervals[index];
        [interval.lower, interval.upper].iter().filter_map(|b| finite(*b)).any(|b| graph.depends_on(b, other))
    }

    /// The interval of variable `index` in numbers, if it depends on no variable.
    fn constant_segment(&self, graph: &Graph, index: usize, value_of: &impl Fn(SymbolId) -> f64) -> Option<Segment> {
        if self.depends(graph, index, self.patch.variables[1 - index]) {
            return None;
        }
        let interval = &self.patch.intervals[index];
        let number = |bound: Bound| match bound {
            Bound::Finite(formula) => evaluate(graph, &[formula], value_of)[0],
            Bound::MinusInfinity => f64::NEG_INFINITY,
            Bound::PlusInfinity => f64::INFINITY,
        };
        Some(Segment::new(number(interval.lower), number(interval.upper)))
    }

    fn outer_segment(
        &self,
        graph: &Graph,
        outer: usize,
        value_of: &impl Fn(SymbolId) -> f64,
    ) -> Result<Segment, IntegralError> {
        let segment = self
            .constant_segment(graph, outer, value_of)
            .ok_or_else(|| IntegralError::new("limits", "the limits of both variables depend on each other"))?;
        checked(segment, self.patch, outer)
    }

    /// Index of the outer variable: the second where the limits of the first depend on it.
    pub(super) fn outer(&self, graph: &Graph) -> usize {
        usize::from(self.depends(graph, 0, self.patch.variables[1]))
    }

    /// The point of the surface at which a density is undefined, for a message, and what to change if only rounding
    /// makes it so.
    pub(super) fn place(
        &self,
        graph: &Graph,
        outer: f64,
        inner: Option<f64>,
        component: usize,
    ) -> (Place, Option<String>) {
        let patch = self.patch;
        let index = self.outer(graph);
        let inner = inner.unwrap_or_else(|| {
            self.constant_segment(graph, 1 - index, &|symbol| self.bindings.value(symbol))
                .map_or(f64::NAN, |segment| point(segment, 0.5))
        });
        let mut coordinates = [outer, inner];
        if index == 1 {
            coordinates.reverse();
        }
        let value_of = |symbol: SymbolId| match patch.variables.iter().position(|&v| v == symbol) {
            Some(position) => coordinates[position],
            None => self.bindings.value(symbol),
        };
        let density = self.densities.get(component).or(self.trim.as_ref());
        // The kernel rounds differently from the tree, so that a node at the edge of its domain may be defined here.
        let undefined = density.and_then(|&density| {
            first_undefined(graph, density, value_of)
                .map(|found| (found.expression, found.value))
                .or_else(|| at_edge_of_domain(graph, density, value_of).map(|found| (found, f64::NAN)))
        });
        let hint = undefined.and_then(|(expression, _)| remedy(graph, expression, value_of));
        let position = evaluate(graph, &patch.position, value_of);
        let name = |i: usize| graph.symbol_name(patch.variables[i]).to_owned();
        let place = Place {
            patch: patch.name.clone(),
            variables: [(name(0), coordinates[0]), (name(1), coordinates[1])],
            position: [position[0], position[1], position[2]],
            expression: undefined.map_or_else(String::new, |(found, _)| print_limited(graph, found, 120)),
            value: undefined.map_or(f64::NAN, |(_, value)| value),
        };
        (place, hint)
    }
}

fn finite(bound: Bound) -> Option<ExpressionId> {
    match bound {
        Bound::Finite(formula) => Some(formula),
        Bound::MinusInfinity | Bound::PlusInfinity => None,
    }
}

/// Limits in order, or an error that names them.
fn checked(segment: Segment, patch: &Patch, index: usize) -> Result<Segment, IntegralError> {
    if segment.from.is_nan() || segment.to.is_nan() {
        return Err(IntegralError::new(
            "limits",
            format!("{}: a limit of the {} variable is undefined", patch.name, ["first", "second"][index]),
        ));
    }
    if segment.from > segment.to {
        return Err(IntegralError::new(
            "limits",
            format!("{}: the limits cross, {} > {}", patch.name, segment.from, segment.to),
        )
        .with_hint("write the smaller limit first"));
    }
    Ok(segment)
}

/// A doubly infinite line is halved, so that a peak in its middle is seen by the ends of both halves.
fn middle_of_infinite(segment: Segment) -> Option<f64> {
    (segment.from.is_infinite() && segment.to.is_infinite()).then_some(0.0)
}

/// The parts of `segment` between ascending breaks; breaks at its ends or equal up to rounding are dropped.
fn split(segment: Segment, breaks: &mut [f64]) -> Vec<Segment> {
    breaks.sort_by(f64::total_cmp);
    let size = if segment.from.is_finite() && segment.to.is_finite() {
        segment.to - segment.from
    } else {
        breaks.iter().fold(1.0, |size: f64, b| size.max(b.abs()))
    };
    let apart = 1e-13 * size;
    let mut parts = Vec::with_capacity(breaks.len() + 1);
    let mut from = segment.from;
    for &at in breaks.iter() {
        if at > from + apart && at < segment.to - apart {
            parts.push(Segment::new(from, at));
            from = at;
        }
    }
    parts.push(Segment::new(from, segment.to));
    parts
}

/// First output of a kernel at a batch of points.
fn values(kernel: &Kernel, parameters: &[f64], outer: &[f64], inner: &[f64]) -> Vec<f64> {
    let outputs = kernel.program().outputs().len();
    let mut out = vec![0.0; outputs * outer.len()];
    kernel.evaluate(parameters, outer, inner, &mut out);
    out
}

/// Evaluations of a typical inner line.
const EVALUATIONS_PER_LINE: u64 = 70;

/// What a call of a kernel for one point costs, in evaluations of a batch.
const SINGLE_CALL: u64 = 40;

/// Evaluations of one formula to find its sign changes along a variable, calls counted as some points each.
const SEARCH_EVALUATIONS: u64 = 200;

/// Work of a call of a kernel beside that of its points.
const CALL_WORK: u64 = 100;

/// Work of a search beside the evaluations: what any formula costs, however short.
const SEARCH_WORK: u64 = 10_000;

/// Evaluations of a formula in the search for its sharp places, and the work beside each.
const SHARP_EVALUATIONS: u64 = 20_000;
const SHARP_OVERHEAD: u64 = 10;

/// Work that the preparation of one patch may take, in additions.
const PREPARATION_WORK: u64 = 3_000_000_000;

/// Inner lines that may be looked at to see where the arrangement of kinks changes.
const STRUCTURE_LINES: u64 = 2_000;

/// Steps from the distance of samples to the last place.
const BISECTIONS: u64 = 46;

/// Changes of the arrangement that are told apart between two samples.
const CHANGES_TOGETHER: usize = 8;

/// Where the next change is looked for, behind one that is found, as a share of the distance of samples.
const BESIDE: f64 = 1e-6;

/// A place that is narrower than this part of the outer range is looked at by itself, and the number of formulas that are
/// examined for such places.
const SMALL_PLACE: f64 = 4.0 / STRUCTURE_SAMPLES as f64;
const MOST_EXAMINED: usize = 24;

/// Samples along the outer line at which the arrangement of kinks is compared.
const STRUCTURE_SAMPLES: usize = 97;

impl PatchIntegrand {
    fn limits_at(&self, outer: f64) -> Segment {
        match &self.limits {
            Limits::Constant(segment) => *segment,
            Limits::Varying(kernel, infinite) => {
                let ends = values(kernel, &self.parameters, &[outer], &[0.0]);
                Segment::new(infinite[0].unwrap_or(ends[0]), infinite[1].unwrap_or(ends[1]))
            }
        }
    }

    /// Limits that depend on the outer variable must not cross inside its range.
    fn check_limits(&self, patch: &Patch, outer: usize, outer_segment: Segment) -> Result<(), IntegralError> {
        if matches!(self.limits, Limits::Constant(_)) {
            return Ok(());
        }
        for i in 0..STRUCTURE_SAMPLES {
            let at = point(outer_segment, (i as f64 + 0.5) / STRUCTURE_SAMPLES as f64);
            let limits = self.limits_at(at);
            let size = limits.from.abs().max(limits.to.abs());
            if limits.from.is_nan() || limits.to.is_nan() || limits.from > limits.to + 1e-12 * size {
                let which = ["first", "second"];
                let what = if limits.from > limits.to { "cross" } else { "are undefined" };
                return Err(IntegralError::new(
                    "limits",
                    format!(
                        "{}: the limits of the {} variable {what} where the {} is {at}: [{}, {}]",
                        patch.name,
                        which[1 - outer],
                        which[outer],
                        limits.from,
                        limits.to
                    ),
                )
                .with_hint("change the limits, or trim with `where`"));
            }
        }
        Ok(())
    }

    /// Looks along infinite directions for the place where a formula overflows although it has long decayed, as
    /// sinh(v)/cosh(v)^2 does beyond v = 700; densities count as zero from there.
    fn find_decay(&mut self, outer_segment: Segment) {
        let middle = point(outer_segment, 0.37);
        let inner_segment = self.limits_at(middle);
        let others = |segment: Segment| [0.13, 0.37, 0.61, 0.89].map(|fraction| point(segment, fraction));
        let components = self.densities.program().outputs().len();
        for (axis, segment, other) in
            [(0, outer_segment, others(inner_segment)), (1, inner_segment, others(outer_segment))]
        {
            for (end, sign) in [(segment.from, -1.0), (segment.to, 1.0)] {
                if end.is_finite() {
                    continue;
                }
                let mut largest = 0.0_f64;
                let mut last = f64::INFINITY;
                for exponent in 0..80 {
                    let x = sign * 2f64.powi(exponent);
                    let (outer, inner) =
                        if axis == 0 { (vec![x; 4], other.to_vec()) } else { (other.to_vec(), vec![x; 4]) };
                    let out = values(&self.densities, &self.parameters, &outer, &inner);
                    debug_assert_eq!(out.len(), 4 * components);
                    if out.iter().any(|value| !value.is_finite()) {
                        if last <= 1e-22 * largest {
                            let edge = sign * 2f64.powi(exponent - 1);
                            if sign < 0.0 {
                                self.decayed[axis].from = edge;
                            } else {
                                self.decayed[axis].to = edge;
                            }
                        }
                        break;
                    }
                    last = out.iter().fold(0.0, |most, value| most.max(value.abs() * x.abs()));
                    largest = largest.max(last);
                }
            }
        }
    }

    /// Finds the places of kinks and prepares the search on inner lines for those that run across both variables.
    /// Returns the breaks of the outer line; what cannot be found within `work_left` makes the integrand rough.
    fn find_kinks(
        &mut self,
        graph: &Graph,
        kinks: &[Kink],
        outer_segment: Segment,
        hidden: Vec<f64>,
        compile: &impl Fn(&Graph, &[ExpressionId]) -> Result<Kernel, IntegralError>,
        work_left: &mut u64,
    ) -> Result<Vec<f64>, IntegralError> {
        let mut outer_breaks = Vec::new();
        let mut mixed = Vec::new();
        for kink in kinks {
            if *work_left == 0 {
                self.leave_rough();
                return Ok(outer_breaks);
            }
            let kernel = compile(graph, &[kink.formula])?;
            *work_left = work_left.saturating_sub(SEARCH_WORK + SEARCH_EVALUATIONS * kernel.program().work());
            match (kink.along, &self.limits) {
                ([true, false], _) => {
                    let mut f = |x: &[f64]| values(&kernel, &self.parameters, x, &vec![0.0; x.len()]);
                    let found = sign_changes(outer_segment, &mut f);
                    self.sides.rough |= !found.settled;
                    outer_breaks.extend(found.at);
                }
                ([false, true], Limits::Constant(segment)) => {
                    let mut f = |x: &[f64]| values(&kernel, &self.parameters, &vec![0.0; x.len()], x);
                    let found = sign_changes(*segment, &mut f);
                    self.sides.rough |= !found.settled;
                    self.breaks.extend(found.at);
                }
                _ => mixed.push(kernel),
            }
        }
        self.kinks = mixed;
        if !self.kinks.is_empty() || self.trim.is_some() {
            outer_breaks.extend(self.structure_changes(outer_segment, hidden, *work_left));
            *work_left = work_left.saturating_sub(self.searched.load(Ordering::Relaxed));
        }
        if self.sides.rough {
            self.leave_rough();
        }
        Ok(outer_breaks)
    }

    /// Gives up the splits at kinks that cross inner lines; rules are then trusted less.
    fn leave_rough(&mut self) {
        self.kinks.clear();
        self.line_work = 0;
        self.line_parts = 1;
        self.sides.rough = true;
        self.straddles = self.trim.is_some();
    }

    /// The sharp places of all features. One that cannot be looked at within `work_left` leaves the error unbounded.
    fn find_sharp_places(
        &mut self,
        graph: &Graph,
        features: &[Feature],
        outer_segment: Segment,
        compile: &impl Fn(&Graph, &[ExpressionId]) -> Result<Kernel, IntegralError>,
        work_left: &mut u64,
    ) -> Result<Vec<SharpPlace>, IntegralError> {
        let mut places = Vec::new();
        for &feature in features {
            if *work_left == 0 {
                self.unsplit.fill(f64::INFINITY);
                return Ok(places);
            }
            let kernel = compile(graph, &[feature.formula()])?;
            *work_left = work_left.saturating_sub(SHARP_EVALUATIONS * (SHARP_OVERHEAD + kernel.program().work()));
            places.extend(sharp_places(feature, &kernel, &self.parameters, outer_segment, &|outer| {
                self.limits_at(outer)
            }));
        }
        Ok(places)
    }

    /// Takes back all splits if the first round over them would cost more than the whole budget. Kinks then make the
    /// integrand rough, and for every sharp place what it may hold is added to the error.
    fn afford(
        &mut self,
        outer_segment: Segment,
        has_kinks: bool,
        places: &[SharpPlace],
        budget: &dyn Fn(&PatchIntegrand) -> u64,
    ) {
        if self.first_round() <= budget(self) {
            return;
        }
        self.breaks.clear();
        self.sides.outer = split(outer_segment, &mut middle_of_infinite(outer_segment).into_iter().collect::<Vec<_>>());
        if has_kinks || self.trim.is_some() {
            self.leave_rough();
        }
        for place in places {
            let [outer, inner] = place.at;
            let mut densities = vec![0.0; self.components()];
            self.evaluate(outer, &[inner], &mut densities);
            for (unsplit, density) in self.unsplit.iter_mut().zip(densities) {
                let held = density.abs() * place.extent[0] * place.extent[1];
                // A place where the density is infinite shows in the rules, which cannot come near it.
                *unsplit += if held.is_finite() { held } else { 0.0 };
            }
        }
    }

    /// Where kinks or the trim were not resolved, a place that holds no node may be cut out or jump: for each formula as
    /// much of every density as the cells between four nodes hold, added to the error. `largest` bounds the densities where
    /// that could be proved.
    fn bound_hidden(&mut self, kinks: usize, largest: &[Option<f64>]) {
        let mut mean = vec![0.0; self.components()];
        let mut count = 0.0;
        let mut whole = 0.0;
        let segments = self.sides.outer.clone();
        for segment in &segments {
            for share in [0.13, 0.47, 0.82] {
                let outer = point(*segment, share);
                let limits = self.limits_at(outer);
                let measure = (segment.to - segment.from) * (limits.to - limits.from);
                if !measure.is_finite() {
                    continue;
                }
                for inner_share in [0.11, 0.43, 0.86] {
                    let mut densities = vec![0.0; self.components()];
                    self.evaluate(outer, &[point(limits, inner_share)], &mut densities);
                    for (mean, density) in mean.iter_mut().zip(densities) {
                        *mean += if density.is_finite() { density.abs() * measure } else { 0.0 };
                    }
                    whole += measure;
                    count += 1.0;
                }
            }
        }
        let cells = 4.0 * kinks.max(1) as f64 / self.first_round().max(1) as f64;
        for ((unsplit, mean), largest) in self.unsplit.iter_mut().zip(mean).zip(largest) {
            let sum = largest.map_or(mean, |largest| largest * whole);
            *unsplit += if count > 0.0 { sum * segments.len() as f64 / count * cells } else { 0.0 };
        }
    }

    /// Evaluations of the first round of rules over all segments.
    fn first_round(&self) -> u64 {
        let of =
            |segments: usize, independent: bool| if independent { 1 } else { EVALUATIONS_PER_LINE * segments as u64 };
        let lines = of(self.sides.outer.len(), self.sides.outer_independent);
        let inner = [0.13, 0.37, 0.61, 0.89]
            .map(|share| {
                let part = self.sides.outer[(share * self.sides.outer.len() as f64) as usize];
                self.parts(point(part, share)).len()
            })
            .into_iter()
            .max()
            .unwrap_or(1);
        // Many short segments start with half the nodes.
        let halves = [self.sides.outer.len(), inner].map(|count| if count < 8 { 1 } else { 2 });
        lines.saturating_mul(of(inner, self.sides.inner_independent)) / (halves[0] * halves[1])
    }

    /// Which of the kinks `considered` cross one inner line, in order, and which parts the trim keeps: a word that changes
    /// where the arrangement changes. Also whether all crossings were found.
    fn arrangement(&self, outer: f64, considered: &dyn Fn(usize) -> bool) -> (Vec<usize>, bool) {
        let (splits, settled) = self.splits(outer, considered);
        (splits.into_iter().map(|(kink, _)| kink).chain(self.kept(outer)).collect(), settled)
    }

    /// Counts the work of one call of `kernel` in a search.
    fn count(&self, kernel: &Kernel, points: usize) {
        let work = CALL_WORK + (points as u64).max(SINGLE_CALL) * kernel.program().work();
        self.searched.fetch_add(work, Ordering::Relaxed);
    }

    /// Which parts of the line the trim keeps, as numbers beyond those of kinks.
    fn kept(&self, outer: f64) -> Vec<usize> {
        match &self.trim {
            Some(trim) if !self.straddles => {
                self.parts(outer).iter().map(|part| usize::MAX - usize::from(self.holds(trim, outer, *part))).collect()
            }
            _ => Vec::new(),
        }
    }

    fn holds(&self, trim: &Kernel, outer: f64, part: Segment) -> bool {
        self.count(trim, 1);
        values(trim, &self.parameters, &[outer], &[point(part, 0.5)])[0] == 1.0
    }

    /// Sign changes of the mixed kink formulas `considered` on one inner line: (which formula, where), ascending, and
    /// whether these are all.
    fn splits(&self, outer: f64, considered: &dyn Fn(usize) -> bool) -> (Vec<(usize, f64)>, bool) {
        let segment = self.limits_at(outer);
        if segment.from >= segment.to {
            return (Vec::new(), true);
        }
        let mut found = Vec::new();
        let mut settled = true;
        for (index, kernel) in self.kinks.iter().enumerate().filter(|(index, _)| considered(*index)) {
            let mut f = |x: &[f64]| {
                self.count(kernel, x.len());
                values(kernel, &self.parameters, &vec![outer; x.len()], x)
            };
            let changes: SignChanges = sign_changes(segment, &mut f);
            settled &= changes.settled;
            found.extend(changes.at.into_iter().map(|at| (index, at)));
        }
        found.sort_by(|a, b| a.1.total_cmp(&b.1));
        (found, settled)
    }

    /// The inner line split at fixed breaks and at sign changes of kinks; parts that the trim cuts away are still there.
    fn parts(&self, outer: f64) -> Vec<Segment> {
        let segment = self.limits_at(outer);
        if segment.from >= segment.to {
            return Vec::new();
        }
        let mut breaks = self.breaks.clone();
        breaks.extend(middle_of_infinite(segment));
        breaks.extend(self.splits(outer, &|_| true).0.into_iter().map(|(_, at)| at));
        split(segment, &mut breaks)
    }

    /// Outer values at which kinks appear, vanish, cross or leave through a limit, to the last place. Two or more changes
    /// close together may leave some unfound; the integrand is then rough. So it is where looking takes more than `work_left`.
    fn structure_changes(&mut self, outer_segment: Segment, hidden: Vec<f64>, work_left: u64) -> Vec<f64> {
        let everything = |_: usize| true;
        let even = |i: usize| point(outer_segment, (i as f64 + 0.5) / STRUCTURE_SAMPLES as f64);
        let mut samples: Vec<f64> = (0..STRUCTURE_SAMPLES).map(even).chain(hidden).collect();
        samples.sort_by(f64::total_cmp);
        samples.dedup();
        let at = |i: usize| samples[i];
        let mut changes = Vec::new();
        let (mut before, settled) = self.arrangement(at(0), &everything);
        let searched = |lines: u64| lines.saturating_mul(self.searched.load(Ordering::Relaxed));
        let mut rough = !settled || searched(samples.len() as u64) > work_left;
        let mut lines = 0;
        let mut parts = before.len() as u64 + 1;
        let all = self.kinks.len().max(1) as u64;
        for i in 1..samples.len() {
            let (here, settled) = self.arrangement(at(i), &everything);
            rough |= !settled || searched(1) > work_left;
            lines += 1;
            parts += here.len() as u64 + 1;
            if rough {
                break;
            }
            let mut low = at(i - 1);
            let mut count = 0;
            while here != before {
                if count == CHANGES_TOGETHER || lines > STRUCTURE_LINES || searched(1) > work_left {
                    rough = true;
                    break;
                }
                // Only kinks whose place in the word differs can have moved; the trim belongs to all of them.
                let differing = differing(&before, &here);
                let considered = |kink: usize| self.trim.is_some() || differing.contains(&kink);
                let known = self.arrangement(low, &considered).0;
                let mut changed = |x: &[f64]| {
                    x.iter()
                        .map(|&x| if self.arrangement(x, &considered).0 == known { 1.0 } else { -1.0 })
                        .collect::<Vec<f64>>()
                };
                let change = bisect(low, at(i), 1.0, &mut changed);
                changes.push(change);
                count += 1;
                let share = if self.trim.is_some() { all } else { differing.len() as u64 };
                lines += 2 + BISECTIONS * share.min(all) / all;
                low = change + BESIDE * (at(i) - at(i - 1));
                if low >= at(i) {
                    break;
                }
                before = self.arrangement(low, &everything).0;
            }
            before = here;
        }
        // Each sample along the outer line looks at a whole line, with the trim at its parts.
        self.line_work = searched(1) / (1 + lines);
        self.line_parts = parts / samples.len() as u64 + 1;
        self.sides.rough |= rough;
        changes
    }

    fn find_independence(&mut self, graph: &Graph, roots: &[ExpressionId], variables: [SymbolId; 2]) {
        let depends = |variable| roots.iter().any(|&root| graph.depends_on(root, variable));
        let constant_limits = matches!(self.limits, Limits::Constant(_));
        self.sides.outer_independent = constant_limits
            && !depends(variables[0])
            && self.sides.outer.iter().all(|segment| segment.from.is_finite() && segment.to.is_finite());
        self.sides.inner_independent = !depends(variables[1]) && {
            let limits = self.limits_at(point(self.sides.outer[0], 0.5));
            limits.from.is_finite() && limits.to.is_finite()
        };
    }

    /// Periods, where splits leave them intact and no kink breaks the fast convergence on them.
    fn find_periods(
        &mut self,
        graph: &Graph,
        densities: &[ExpressionId],
        variables: [SymbolId; 2],
        value_of: &dyn Fn(SymbolId) -> f64,
    ) {
        let constant_limits = matches!(self.limits, Limits::Constant(_));
        let periodic = |variable, segment: Segment| {
            (segment.to - segment.from).is_finite()
                && is_periodic(graph, densities, variables, variable, segment.to - segment.from, value_of)
        };
        if self.sides.rough {
            return;
        }
        if let [segment] = self.sides.outer[..]
            && constant_limits
        {
            self.sides.outer_periodic = periodic(variables[0], segment);
        }
        if let Limits::Constant(segment) = self.limits
            && self.breaks.is_empty()
            && self.trim.is_none()
        {
            self.sides.inner_periodic = periodic(variables[1], segment);
        }
    }
}

/// Letters of two words without their common beginning and end.
fn differing(a: &[usize], b: &[usize]) -> Vec<usize> {
    let start = a.iter().zip(b).take_while(|(x, y)| x == y).count();
    let (a, b) = (&a[start..], &b[start..]);
    let end = a.iter().rev().zip(b.iter().rev()).take_while(|(x, y)| x == y).count();
    a[..a.len() - end].iter().chain(&b[..b.len() - end]).copied().collect()
}

impl PlaneIntegrand for PatchIntegrand {
    fn components(&self) -> usize {
        self.densities.program().outputs().len()
    }

    fn inner_segments(&self, outer: f64) -> Vec<Segment> {
        let mut parts = self.parts(outer);
        if let Some(trim) = &self.trim
            && !self.straddles
        {
            parts.retain(|part| self.holds(trim, outer, *part));
        }
        parts
    }

    fn work(&self) -> u64 {
        // Kinks, limits and the trim are resolved once for each line, which has some 70 evaluations, or 31 for each part.
        let own = |kernel: &Kernel| kernel.program().work();
        let limits = match &self.limits {
            Limits::Constant(_) => 0,
            Limits::Varying(kernel, _) => own(kernel),
        };
        let trim = self.trim.as_ref().map_or(0, own);
        let (trim_of_point, trim_of_line) = if self.straddles { (trim, 0) } else { (0, trim) };
        let line = self.line_work + trim_of_line + limits;
        let evaluations = EVALUATIONS_PER_LINE.max(31 * self.line_parts);
        // A call for one point costs as much as one for some tens.
        let calls = if self.sides.inner_independent { SINGLE_CALL } else { 1 };
        calls * (own(&self.densities) + trim_of_point) + line / evaluations + 1
    }

    fn evaluate(&self, outer: f64, inner: &[f64], out: &mut [f64]) {
        let outers = vec![outer; inner.len()];
        self.densities.evaluate(&self.parameters, &outers, inner, out);
        if let Some(trim) = &self.trim
            && self.straddles
        {
            let kept = values(trim, &self.parameters, &outers, inner);
            for (i, _) in kept.iter().enumerate().filter(|(_, kept)| **kept != 1.0) {
                for k in 0..self.components() {
                    out[k * inner.len() + i] = 0.0;
                }
            }
        }
        let [outer_range, inner_range] = self.decayed;
        let everywhere = |range: Segment| range.from.is_infinite() && range.to.is_infinite();
        if everywhere(outer_range) && everywhere(inner_range) {
            return;
        }
        for (i, &x) in inner.iter().enumerate() {
            let beyond = |x: f64, range: Segment| x < range.from || x > range.to;
            if beyond(x, inner_range) || beyond(outer, outer_range) {
                for k in 0..self.components() {
                    out[k * inner.len() + i] = 0.0;
                }
            }
        }
    }
}
