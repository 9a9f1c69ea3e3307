//! The shortest way to write a polynomial: a bounded search.
//!
//! A polynomial has many equal forms: sums in either function of a pair, with both (homogeneous), in doubled angles; products;
//! sums grouped by powers of a generator or by degree; completed squares. Each plan's parts are planned in turn, the results
//! remembered. The plain sum is always at hand, so the search can stop anywhere; it stops on a count of steps.

use super::factor::factor;
use super::form::{Form, NameKind};
use super::fraction::Fraction;
use super::identities::homogeneous;
use super::laurent::{Exponents, Laurent, single_generator};
use super::meter::{Exhausted, Step, spend};
use super::polynomial::{GENERATORS, Polynomial};
use super::product::{is_negative, powered, product, ratio, signed_product, sum};
use super::ring::{Kind, Ring};
use crate::expression::{ExpressionId, Graph, SymbolId};
use dashu_base::{Abs, UnsignedAbs};
use dashu_int::IBig;
use dashu_ratio::RBig;
use rustc_hash::FxHashMap;

/// Operations that no opaque function is printed beyond.
const LONGEST_FUNCTION: usize = 400;

/// The plans explored at each place, the most promising ones by a rough estimate.
const BEAM: usize = 2;

/// The equal polynomials that are planned, those of the fewest terms.
const VARIANTS: usize = 4;

/// A form and whether it is subtracted.
pub(super) type SignedForm = (bool, Form);

/// Writes ring elements as forms.
pub(super) struct Printer<'a> {
    pub ring: Ring,
    graph: &'a Graph,
    variables: [SymbolId; 2],
    known: FxHashMap<Laurent, SignedForm>,
    names: FxHashMap<usize, Form>,
    nodes: usize,
}

impl<'a> Printer<'a> {
    /// A printer that explores at most `nodes` sums.
    pub fn new(ring: Ring, graph: &'a Graph, variables: [SymbolId; 2], nodes: usize) -> Self {
        Self { ring, graph, variables, known: FxHashMap::default(), names: FxHashMap::default(), nodes }
    }

    /// Allows the search another number of sums.
    pub fn refill(&mut self, nodes: usize) {
        self.nodes = nodes;
    }

    /// A generator as a form.
    pub fn generator(&mut self, generator: usize) -> Step<Form> {
        if let Some(known) = self.names.get(&generator) {
            return Ok(known.clone());
        }
        let call = |name: &str, argument: Form| Form::Call(name.to_owned(), vec![argument]);
        let form = match self.ring.generators[generator].clone() {
            Kind::Symbol(symbol) => {
                let kind = if self.variables.contains(&symbol) { NameKind::Variable } else { NameKind::Parameter };
                Form::Name(self.graph.symbol_name(symbol).to_owned(), kind)
            }
            Kind::Pi => Form::Pi,
            Kind::Literal(value) => Form::exact(&value),
            Kind::Sin(angle) => call("sin", self.argument(angle.0)?),
            Kind::Cos(angle) => call("cos", self.argument(angle.0)?),
            Kind::Sinh(angle) => call("sinh", self.argument(angle.0)?),
            Kind::Cosh(angle) => call("cosh", self.argument(angle.0)?),
            Kind::Exp(angle) => call("exp", self.argument(angle.0)?),
            Kind::Root(index, radicand) => {
                if index == 2
                    && let Some(inner) = super::factor::square_root(&radicand)?
                {
                    call("abs", self.polynomial(&inner)?)
                } else {
                    let inner = self.polynomial(&radicand)?;
                    match index {
                        2 => call("sqrt", inner),
                        3 => call("cbrt", inner),
                        _ => powered(&inner, 1, i64::from(index)),
                    }
                }
            }
            Kind::Call(function, argument) => {
                let argument = self.fraction(&argument)?;
                Form::function(function, argument)
            }
            Kind::Opaque(expression) => self.opaque(expression)?,
        };
        let form = match form {
            Form::Power(base, _) if matches!(self.ring.generators[generator], Kind::Root(..)) => {
                let Kind::Root(index, _) = self.ring.generators[generator] else { unreachable!("just matched") };
                let exponent = Form::Product(vec![Form::integer(1)], vec![Form::integer(u64::from(index))]);
                Form::Power(base, Box::new(exponent))
            }
            other => other,
        };
        self.names.insert(generator, form.clone());
        Ok(form)
    }

    fn opaque(&self, expression: ExpressionId) -> Step<Form> {
        Form::of(self.graph, expression, &self.variables, LONGEST_FUNCTION).ok_or(Exhausted)
    }

    pub fn argument(&mut self, angle: usize) -> Step<Form> {
        let argument = self.ring.angles[angle].clone();
        self.fraction(&argument)
    }

    /// A fraction: one bar, or term by term where that is shorter.
    pub fn fraction(&mut self, fraction: &Fraction) -> Step<Form> {
        let number = ratio(IBig::ONE, fraction.divisor.clone());
        let mut exponents = [0i8; GENERATORS];
        let mut below = Vec::new();
        for (factor, exponent) in &fraction.denominator {
            match single_generator(factor) {
                Some(generator) => exponents[generator] -= i8::try_from(*exponent).map_err(|_| Exhausted)?,
                None => below.push((factor.clone(), *exponent)),
            }
        }
        let numerator = Laurent::of(&fraction.numerator)?.times(&number, &exponents)?;
        let (negative, form) = self.sum(&numerator)?;
        let mut factors = vec![(form, (1, 1))];
        for (factor, exponent) in below {
            factors.push((self.polynomial(&factor)?, (-i64::from(exponent), 1)));
        }
        let form = if factors.len() == 1 { factors.remove(0).0 } else { product(&RBig::ONE, factors) };
        Ok(if negative { Form::Negate(Box::new(form)) } else { form })
    }

    /// A polynomial; its sign is written where it costs least.
    pub fn polynomial(&mut self, polynomial: &Polynomial) -> Step<Form> {
        let (negative, form) = self.sum(&Laurent::of(polynomial)?)?;
        Ok(if negative { Form::Negate(Box::new(form)) } else { form })
    }

    /// The shortest form found for a sum, and whether it is to be subtracted.
    pub fn sum(&mut self, laurent: &Laurent) -> Step<SignedForm> {
        if laurent.len() == 0 {
            return Ok((false, Form::integer(0)));
        }
        if let [(exponents, x)] = &laurent.terms[..] {
            return Ok((is_negative(x), self.monomial(exponents, x)?));
        }
        if let Some(known) = self.known.get(laurent) {
            return Ok(known.clone());
        }
        // A plan may come back to this sum: it then finds the plain form.
        let mut best = self.flat(laurent)?;
        self.known.insert(laurent.clone(), best.clone());
        let (multiples, shorter) = self.in_multiples(laurent)?;
        if shorter {
            for other in multiples {
                let form = self.sum(&other)?;
                keep(&mut best, form);
            }
            self.known.insert(laurent.clone(), best.clone());
            return Ok(best);
        }
        if self.nodes == 0 {
            return Ok(best);
        }
        self.nodes -= 1;
        spend(50 * laurent.len())?;
        self.improve(laurent, multiples, &mut best)?;
        self.known.insert(laurent.clone(), best.clone());
        Ok(best)
    }

    fn improve(&mut self, laurent: &Laurent, multiples: Vec<Laurent>, best: &mut SignedForm) -> Step<()> {
        let (number, exponents, polynomial) = laurent.content();
        let is_free = exponents == [0; GENERATORS] && number.clone().abs().is_one();
        if !is_free {
            // The common factor outside; or only what stands above the bar, the rest term by term.
            let inner = Laurent::of(&polynomial)?;
            let whole = self.with_content(&number, &exponents, &inner)?;
            keep(best, whole);
            let above = exponents.map(|e| e.max(0));
            let below = exponents.map(|e| e.min(0));
            let top = RBig::from(number.numerator().clone().unsigned_abs());
            let mixed = above != [0; GENERATORS] || !top.is_one();
            let divided = below != [0; GENERATORS] || number.denominator() != &dashu_int::UBig::ONE;
            if mixed && divided {
                let bottom = ratio(number.numerator().signum(), IBig::from(number.denominator().clone()));
                let inner = inner.times(&bottom, &below)?;
                let partly = self.with_content(&top, &above, &inner)?;
                keep(best, partly);
            }
            if !divided {
                return Ok(());
            }
        }
        for variant in self.variants(&polynomial)? {
            if is_free {
                self.factored(&variant, is_negative(&number), best)?;
            }
            let shown = Laurent::of(&variant)?.times(&number, &exponents)?;
            self.planned(&shown, best)?;
            if let Some(joined) = self.joined(&shown)? {
                let form = self.sum(&joined)?;
                keep(best, form);
            }
        }
        for tangents in self.with_tangents(laurent)? {
            self.planned(&tangents, best)?;
        }
        if is_free {
            for other in self.doubled(laurent)?.into_iter().chain(multiples) {
                let form = self.sum(&other)?;
                keep(best, form);
            }
        }
        Ok(())
    }

    fn with_content(&mut self, number: &RBig, exponents: &Exponents, inner: &Laurent) -> Step<SignedForm> {
        let (negative, form) = self.sum(inner)?;
        let mut magnitude = number.clone().abs();
        let mut factors = self.generator_powers(exponents, &mut magnitude)?;
        factors.push((form, (1, 1)));
        Ok(signed_product(negative != is_negative(number), &magnitude, factors))
    }

    /// Equal polynomials: either function of each pair eliminated, or both kept in terms of one degree.
    fn variants(&self, polynomial: &Polynomial) -> Step<Vec<Polynomial>> {
        let mut variants = vec![polynomial.clone()];
        for directions in self.ring.directions(&[polynomial]) {
            let reduced = self.ring.reduced(polynomial, directions)?;
            if !variants.contains(&reduced) {
                variants.push(reduced);
            }
        }
        let first = variants[variants.len().min(2) - 1].clone();
        for pair in self.ring.pairs() {
            for base in [polynomial, &first] {
                if let Some(homogeneous) = homogeneous(base, &pair)?
                    && !variants.contains(&homogeneous)
                {
                    variants.push(homogeneous);
                }
            }
        }
        // All pairs at once.
        let mut all = polynomial.clone();
        for pair in self.ring.pairs() {
            if let Some(next) = homogeneous(&all, &pair)? {
                all = next;
            }
        }
        if !variants.contains(&all) {
            variants.push(all);
        }
        let shortest = variants.iter().map(|variant| variant.terms().len()).min().unwrap_or(0);
        variants.retain(|variant| variant.terms().len() <= 2 * shortest + 4);
        variants.sort_by_key(|variant| variant.terms().len());
        variants.truncate(VARIANTS);
        Ok(variants)
    }

    fn factored(&mut self, polynomial: &Polynomial, negated: bool, best: &mut SignedForm) -> Step<()> {
        let factored = factor(polynomial)?;
        if factored.factors.len() < 2 && factored.factors.iter().all(|(_, exponent)| *exponent == 1) {
            return Ok(());
        }
        let mut negative = negated != (factored.unit < IBig::ZERO);
        let mut factors = Vec::new();
        for (factor, exponent) in &factored.factors {
            let (minus, form) = self.sum(&Laurent::of(factor)?)?;
            negative ^= minus && exponent % 2 == 1;
            factors.push((form, (i64::from(*exponent), 1)));
        }
        keep(best, signed_product(negative, &RBig::from(factored.unit.abs()), factors));
        Ok(())
    }

    /// The plans for one sum as it stands: groupings and completed squares.
    fn planned(&mut self, laurent: &Laurent, best: &mut SignedForm) -> Step<()> {
        let flat = self.flat(laurent)?;
        keep(best, flat);
        let mut plans: Vec<(usize, Plan)> = Vec::new();
        for plan in self.plans(laurent)? {
            let estimate = plan.estimate();
            if !plans.iter().any(|(_, known)| *known == plan) {
                plans.push((estimate, plan));
            }
        }
        plans.sort_by_key(|(estimate, _)| *estimate);
        for (_, plan) in plans.into_iter().take(BEAM) {
            if let Some(form) = self.carried_out(&plan, best.1.operations())? {
                keep(best, form);
            }
        }
        Ok(())
    }

    fn plans(&self, laurent: &Laurent) -> Step<Vec<Plan>> {
        let mut plans = Vec::new();
        if laurent.len() < 3 {
            return Ok(plans);
        }
        let used: Vec<usize> =
            (0..self.ring.generators.len()).filter(|&g| laurent.terms.iter().any(|(e, _)| e[g] != 0)).collect();
        for &generator in &used {
            plans.extend(grouped(laurent, |e| {
                let mut key = [0; GENERATORS];
                key[generator] = e[generator];
                key
            }));
            plans.extend(completed_square(laurent, generator, 1)?);
            plans.extend(completed_square(laurent, generator, 2)?);
        }
        plans.extend(binomial_squares(laurent));
        for pair in self.ring.pairs() {
            plans.extend(grouped(laurent, |e| {
                let mut key = [0; GENERATORS];
                key[pair.sine] = e[pair.sine];
                key[pair.cosine] = e[pair.cosine];
                key
            }));
        }
        let variable = |g: usize| matches!(self.ring.generators[g], Kind::Symbol(s) if self.variables.contains(&s));
        let parameter = |g: usize| matches!(self.ring.generators[g], Kind::Symbol(s) if !self.variables.contains(&s));
        let degree = |e: &Exponents, set: &dyn Fn(usize) -> bool| -> i32 {
            used.iter().filter(|&&g| set(g)).map(|&g| i32::from(e[g])).sum()
        };
        plans.extend(classified(laurent, |e| degree(e, &variable)));
        plans.extend(classified(laurent, |e| degree(e, &parameter)));
        plans.extend(classified(laurent, |e| degree(e, &|_| true)));
        plans.extend(classified(laurent, |e| degree(e, &|g| !parameter(g))));
        Ok(plans)
    }

    /// The parts written and added; `None` as soon as that takes more than `limit` operations.
    fn carried_out(&mut self, plan: &Plan, limit: usize) -> Step<Option<SignedForm>> {
        let mut terms: Vec<(bool, Form)> = Vec::new();
        let mut operations = 0;
        for part in &plan.parts {
            operations += terms.last().map_or(0, |(_, term)| 1 + term.operations());
            if operations > limit {
                return Ok(None);
            }
            let (negative, inner) = self.sum(&part.sum)?;
            let negative = (negative && part.power % 2 == 1) != is_negative(&part.number);
            if part.power == 1 && part.number.clone().abs().is_one() && part.factor == [0; GENERATORS] {
                terms.push((negative, inner));
                continue;
            }
            let mut magnitude = part.number.clone().abs();
            let mut factors = self.generator_powers(&part.factor, &mut magnitude)?;
            factors.push((inner, (i64::from(part.power), 1)));
            terms.push(signed_product(negative, &magnitude, factors));
        }
        Ok(Some(signed_sum(terms)))
    }

    /// Term by term.
    fn flat(&mut self, laurent: &Laurent) -> Step<SignedForm> {
        let mut terms = Vec::with_capacity(laurent.len());
        for (exponents, x) in &laurent.terms {
            terms.push((is_negative(x), self.monomial(exponents, x)?));
        }
        Ok(signed_sum(terms))
    }

    /// A monomial without its sign.
    fn monomial(&mut self, exponents: &Exponents, number: &RBig) -> Step<Form> {
        let mut magnitude = number.clone().abs();
        let factors = self.generator_powers(exponents, &mut magnitude)?;
        Ok(product(&magnitude, factors))
    }
}

/// Parts that add up to a sum: each a number times a monomial times a power of a sum.
#[derive(Clone, PartialEq, Debug)]
struct Plan {
    parts: Vec<Part>,
}

#[derive(Clone, PartialEq, Debug)]
struct Part {
    number: RBig,
    factor: Exponents,
    sum: Laurent,
    power: u8,
}

impl Plan {
    /// A rough count of operations: powers, products and sums of all parts as they stand.
    fn estimate(&self) -> usize {
        let monomial =
            |e: &Exponents| e.iter().map(|&e| if e == 0 { 0 } else { 1 + usize::from(e.abs() > 1) }).sum::<usize>();
        let sum = |laurent: &Laurent| laurent.terms.iter().map(|(e, _)| 1 + monomial(e)).sum::<usize>();
        self.parts.iter().map(|part| monomial(&part.factor) + sum(&part.sum) + usize::from(part.power > 1)).sum()
    }
}

/// Terms grouped by a monomial that is taken out of each group.
fn grouped(laurent: &Laurent, key: impl Fn(&Exponents) -> Exponents) -> Option<Plan> {
    let groups = groups(laurent, &key)?;
    let parts = groups.into_iter().map(|(key, terms)| {
        let terms = terms.into_iter().map(|(e, x)| {
            let mut rest = e;
            rest.iter_mut().zip(key).for_each(|(rest, key)| *rest -= key);
            (rest, x)
        });
        Part { number: RBig::ONE, factor: key, sum: Laurent::collect(terms), power: 1 }
    });
    Some(Plan { parts: parts.collect() })
}

/// Terms grouped by a number, nothing taken out.
fn classified(laurent: &Laurent, key: impl Fn(&Exponents) -> i32) -> Option<Plan> {
    let groups = groups(laurent, &key)?;
    let part = |terms| Part { number: RBig::ONE, factor: [0; GENERATORS], sum: Laurent::collect(terms), power: 1 };
    Some(Plan { parts: groups.into_iter().map(|(_, terms)| part(terms)).collect() })
}

/// Groups with equal keys, if there are at least two and one holds at least two terms.
#[allow(clippy::type_complexity)]
fn groups<K: PartialEq>(laurent: &Laurent, key: &impl Fn(&Exponents) -> K) -> Option<Vec<(K, Vec<(Exponents, RBig)>)>> {
    let mut groups: Vec<(K, Vec<(Exponents, RBig)>)> = Vec::new();
    for (exponents, x) in &laurent.terms {
        let own = key(exponents);
        match groups.iter_mut().find(|(known, _)| *known == own) {
            Some((_, terms)) => terms.push((*exponents, x.clone())),
            None => groups.push((own, vec![(*exponents, x.clone())])),
        }
    }
    (groups.len() > 1 && groups.len() < laurent.len()).then_some(groups)
}

/// a x^2 + b x + c = a (x + b/2a)^2 + (c - b^2/4a) for x a power of a generator and a one term.
fn completed_square(laurent: &Laurent, generator: usize, step: i8) -> Step<Option<Plan>> {
    let degree = |e: &Exponents| e[generator];
    if laurent.terms.iter().any(|(e, _)| ![0, step, 2 * step].contains(&degree(e))) {
        return Ok(None);
    }
    let of_degree = |wanted: i8| {
        Laurent::collect(laurent.terms.iter().filter(|(e, _)| degree(e) == wanted).map(|(e, x)| {
            let mut rest = *e;
            rest[generator] = 0;
            (rest, x.clone())
        }))
    };
    let (a, b, c) = (of_degree(2 * step), of_degree(step), of_degree(0));
    let [(square, number)] = &a.terms[..] else { return Ok(None) };
    if b.len() == 0 || b.len() > 6 {
        return Ok(None);
    }
    // A square a goes inside: (sqrt(a) x + b/(2 sqrt(a)))^2, which divides by less.
    let root = crate::expression::Exact::from_rational(number.clone()).and_then(|number| number.square_root());
    let (number, outside, inside) = match root {
        Some(root) if square.iter().all(|e| e % 2 == 0) => {
            (RBig::ONE, [0; GENERATORS], (root.as_rational().clone(), square.map(|e| e / 2)))
        }
        _ => (number.clone(), *square, (RBig::ONE, [0; GENERATORS])),
    };
    let mut below = outside;
    below.iter_mut().zip(inside.1).for_each(|(below, e)| *below += e);
    // No new division comes in: (x + y/z)^2 reads worse than what it replaces.
    if (0..GENERATORS).any(|place| below[place] > 0 && b.terms.iter().any(|(e, _)| e[place] < below[place])) {
        return Ok(None);
    }
    let half = b.times(&(RBig::ONE / (RBig::from(2u8) * &number * &inside.0)), &below.map(|e| -e))?;
    let mut rest = c.terms.clone();
    for (e, x) in &half.terms {
        for (f, y) in &half.terms {
            let mut total = outside;
            for (place, total) in total.iter_mut().enumerate() {
                *total = total.checked_add(e[place]).and_then(|t| t.checked_add(f[place])).ok_or(Exhausted)?;
            }
            rest.push((total, -(&number * x * y)));
        }
    }
    let rest = Laurent::collect(rest);
    let mut base = half.terms;
    let mut lead = inside.1;
    lead[generator] = step;
    base.push((lead, inside.0));
    let mut parts = vec![Part { number, factor: outside, sum: Laurent::collect(base), power: 2 }];
    if rest.len() > 0 {
        parts.push(Part { number: RBig::ONE, factor: [0; GENERATORS], sum: rest, power: 1 });
    }
    Ok(Some(Plan { parts }))
}

/// Terms a^2, 2 a b, b^2 of a sum as (a + b)^2, numbers that the squares share outside.
fn binomial_squares(laurent: &Laurent) -> Vec<Plan> {
    let half = |e: &Exponents| e.iter().all(|e| e % 2 == 0).then(|| e.map(|e| e / 2));
    let mut plans = Vec::new();
    for (first, (e, x)) in laurent.terms.iter().enumerate() {
        for (f, y) in &laurent.terms[first + 1..] {
            let (Some(a), Some(b)) = (half(e), half(f)) else { continue };
            let Some(ratio) = crate::expression::Exact::from_rational(y / x).and_then(|ratio| ratio.square_root())
            else {
                continue;
            };
            let mut mixed = a;
            mixed.iter_mut().zip(b).for_each(|(mixed, b)| *mixed += b);
            // x (a + r b)^2 = x a^2 + 2 x r a b + x r^2 b^2
            let ratio = ratio.as_rational().clone();
            let middle = RBig::from(2u8) * x * &ratio;
            let Some((_, found)) = laurent.terms.iter().find(|(e, _)| *e == mixed) else { continue };
            if found.clone().abs() != middle.clone().abs() {
                continue;
            }
            let ratio = if *found == middle { ratio } else { -ratio };
            let base = Laurent::collect([(a, RBig::ONE), (b, ratio)]);
            let rest = laurent.terms.iter().filter(|(g, _)| g != e && g != f && *g != mixed).cloned();
            let mut parts = vec![Part { number: x.clone(), factor: [0; GENERATORS], sum: base, power: 2 }];
            let rest = Laurent::collect(rest);
            if rest.len() > 0 {
                parts.push(Part { number: RBig::ONE, factor: [0; GENERATORS], sum: rest, power: 1 });
            }
            plans.push(Plan { parts });
        }
    }
    plans
}

/// A sum in which a leading minus sign is taken out if every term has one.
fn signed_sum(terms: Vec<(bool, Form)>) -> SignedForm {
    let negative = terms.iter().all(|(negative, _)| *negative);
    match sum(terms.into_iter().map(|(own, term)| (own != negative, term)).collect()) {
        // Numbers that cancel may leave one term.
        Form::Negate(inner) => (!negative, *inner),
        form => (negative, form),
    }
}

/// Keeps the shorter form; a sign outside counts as an operation.
fn keep(best: &mut SignedForm, candidate: SignedForm) {
    let cost = |(negative, form): &SignedForm| form.operations() + usize::from(*negative);
    let order = cost(&candidate).cmp(&cost(best));
    if order.then_with(|| candidate.1.clutter().cmp(&best.1.clutter())).is_lt() {
        *best = candidate;
    }
}
