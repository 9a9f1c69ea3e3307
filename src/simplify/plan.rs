//! The shortest way to write a polynomial: a bounded search.
//!
//! A polynomial has many equal forms: sums in either function of a pair, with both (homogeneous), in doubled angles; products;
//! sums grouped by powers of a generator or by degree; completed squares. Each plan's parts are planned in turn, the results
//! remembered. The plain sum is always at hand, so the search can stop anywhere; it stops on a count of steps.

use super::factor::factor;
use super::form::{Form, NameKind};
use super::fraction::Fraction;
use super::meter::{Exhausted, Step, spend};
use super::polynomial::{GENERATORS, Monomial, Polynomial};
use super::product::{Exponent, is_negative, powered, product, ratio, signed_product, sum};
use super::ring::{Kind, Pair, Ring};
use crate::expression::{ExpressionId, Graph, SymbolId};
use dashu_base::{Abs, Gcd, UnsignedAbs};
use dashu_int::IBig;
use dashu_ratio::RBig;
use rustc_hash::FxHashMap;

/// Exponents of the generators, below the fraction bar negative.
type Exponents = [i8; GENERATORS];

/// A sum of rational multiples of monomials with exponents of either sign; sorted, no zero coefficient.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub(super) struct Laurent {
    terms: Vec<(Exponents, RBig)>,
}

/// Forms with their exponents.
type Powers = Vec<(Form, Exponent)>;

/// Operations that no opaque function is printed beyond.
const LONGEST_FUNCTION: usize = 400;

/// The plans explored at each place, the most promising ones by a rough estimate.
const BEAM: usize = 5;

/// A form and whether it is subtracted.
pub(super) type SignedForm = (bool, Form);

impl Laurent {
    pub fn of(polynomial: &Polynomial) -> Step<Self> {
        let exponents = |monomial: &Monomial| -> Step<Exponents> {
            let mut signed = [0; GENERATORS];
            for (place, &exponent) in monomial.0.iter().enumerate() {
                signed[place] = i8::try_from(exponent).map_err(|_| Exhausted)?;
            }
            Ok(signed)
        };
        let terms: Step<Vec<_>> =
            polynomial.terms().iter().map(|(m, x)| Ok((exponents(m)?, RBig::from(x.clone())))).collect();
        Ok(Self { terms: terms? })
    }

    fn collect(terms: impl IntoIterator<Item = (Exponents, RBig)>) -> Self {
        let mut sums: FxHashMap<Exponents, RBig> = FxHashMap::default();
        for (exponents, x) in terms {
            *sums.entry(exponents).or_insert(RBig::ZERO) += x;
        }
        let mut terms: Vec<_> = sums.into_iter().filter(|(_, x)| !x.is_zero()).collect();
        terms.sort_unstable_by_key(|term| std::cmp::Reverse(term.0));
        Self { terms }
    }

    /// The sum times a monomial with a rational coefficient.
    pub fn times(&self, number: &RBig, exponents: &Exponents) -> Step<Self> {
        let shifted = |own: &Exponents| -> Step<Exponents> {
            let mut total = *own;
            for (total, shift) in total.iter_mut().zip(exponents) {
                *total = total.checked_add(*shift).ok_or(Exhausted)?;
            }
            Ok(total)
        };
        let terms: Step<Vec<_>> = self.terms.iter().map(|(e, x)| Ok((shifted(e)?, x * number))).collect();
        Ok(Self { terms: terms? })
    }

    /// The common factor, number (with the sign of the leading term) and monomial, and the polynomial that is left.
    fn content(&self) -> (RBig, Exponents, Polynomial) {
        let mut lowest = self.terms.first().map_or([0; GENERATORS], |(exponents, _)| *exponents);
        for (exponents, _) in &self.terms {
            for (low, own) in lowest.iter_mut().zip(exponents) {
                *low = (*low).min(*own);
            }
        }
        let mut divisor = IBig::ONE;
        for (_, x) in &self.terms {
            let q = IBig::from(x.denominator().clone());
            divisor = &divisor * &q / IBig::from((&divisor).gcd(&q));
        }
        let polynomial = Polynomial::collect(self.terms.iter().map(|(exponents, x)| {
            let mut monomial = Monomial::ONE;
            for (place, (own, low)) in exponents.iter().zip(&lowest).enumerate() {
                monomial.0[place] = (own - low) as u8;
            }
            (monomial, x.numerator() * &divisor / IBig::from(x.denominator().clone()))
        }));
        let (unit, primitive) = polynomial.primitive();
        (ratio(unit, divisor), lowest, primitive)
    }

    fn len(&self) -> usize {
        self.terms.len()
    }
}

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

    fn argument(&mut self, angle: usize) -> Step<Form> {
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
        if self.nodes == 0 {
            return Ok(best);
        }
        self.nodes -= 1;
        spend(50 * laurent.len())?;
        self.improve(laurent, &mut best)?;
        self.known.insert(laurent.clone(), best.clone());
        Ok(best)
    }

    fn improve(&mut self, laurent: &Laurent, best: &mut SignedForm) -> Step<()> {
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
        }
        for tangents in self.with_tangents(laurent)? {
            self.planned(&tangents, best)?;
        }
        if is_free {
            for doubled in self.doubled(laurent)? {
                let form = self.sum(&doubled)?;
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
        Ok(variants)
    }

    /// 1/c^2 as 1 + t^2 with t = s/c the tangent, and 1/s^2 as 1 + 1/t^2; likewise for the hyperbolic pair.
    fn with_tangents(&self, laurent: &Laurent) -> Step<Vec<Laurent>> {
        let mut result = Vec::new();
        let mut all = laurent.clone();
        for pair in self.ring.pairs() {
            for (below, above) in [(pair.cosine, pair.sine), (pair.sine, pair.cosine)] {
                // cosh^-2 = 1 - tanh^2, sinh^-2 = coth^2 - 1
                let (one, square) = match (pair.hyperbolic, below == pair.cosine) {
                    (false, _) => (1, 1),
                    (true, true) => (1, -1),
                    (true, false) => (-1, 1),
                };
                let rewritten = |source: &Laurent| -> Option<Laurent> {
                    let applies = |e: &Exponents| e[below] == -2 && e[above] == 0;
                    if !source.terms.iter().any(|(e, _)| applies(e)) {
                        return None;
                    }
                    Some(Laurent::collect(source.terms.iter().flat_map(|(e, x)| {
                        if !applies(e) {
                            return vec![(*e, x.clone())];
                        }
                        let (mut plain, mut tangent) = (*e, *e);
                        plain[below] = 0;
                        tangent[above] = 2;
                        vec![(plain, x * RBig::from(one)), (tangent, x * RBig::from(square))]
                    })))
                };
                if let Some(one) = rewritten(laurent) {
                    result.push(one);
                }
                if below == pair.cosine
                    && let Some(next) = rewritten(&all)
                {
                    all = next;
                }
            }
        }
        if all != *laurent && !result.contains(&all) {
            result.push(all);
        }
        Ok(result)
    }

    /// The sum in the doubled angle of each pair that has even degrees only, and of all of them.
    fn doubled(&mut self, laurent: &Laurent) -> Step<Vec<Laurent>> {
        let mut result: Vec<Laurent> = Vec::new();
        let mut all = laurent.clone();
        for pair in self.ring.pairs() {
            for source in [laurent.clone(), all.clone()] {
                if let Some(lifted) = self.lifted(&source, &pair)? {
                    if source == all {
                        all = lifted.clone();
                    }
                    if !result.contains(&lifted) {
                        result.push(lifted);
                    }
                }
            }
        }
        result.retain(|lifted| lifted.len() <= 2 * laurent.len() + 2);
        Ok(result)
    }

    /// s^2 = (1 - C)/2, c^2 = (1 + C)/2, s c = S/2 with the pair (S, C) of twice the angle.
    fn lifted(&mut self, laurent: &Laurent, pair: &Pair) -> Step<Option<Laurent>> {
        let (s, c) = (pair.sine, pair.cosine);
        let even = laurent.terms.iter().all(|(e, _)| (e[s] + e[c]) % 2 == 0 && e[s] >= 0 && e[c] >= 0);
        let used = laurent.terms.iter().any(|(e, _)| e[s] > 0 || e[c] > 0);
        let high = laurent.terms.iter().any(|(e, _)| e[s] + e[c] > 8);
        if !even || !used || high {
            return Ok(None);
        }
        let double = self.double_pair(pair)?;
        let mut terms = Vec::new();
        for (exponents, x) in &laurent.terms {
            let mut rest = *exponents;
            let (i, j) = (rest[s], rest[c]);
            rest[s] = 0;
            rest[c] = 0;
            let mut part = vec![(rest, x.clone())];
            let half = RBig::ONE / RBig::from(2u8);
            // One mixed factor at most, the others are squares.
            if i % 2 == 1 {
                for (e, x) in &mut part {
                    e[double.sine] += 1;
                    *x *= &half;
                }
            }
            let minus = if pair.hyperbolic { (-1, 1) } else { (1, -1) };
            for _ in 0..i / 2 {
                part = times_binomial(&part, minus, double.cosine);
            }
            for _ in 0..j / 2 {
                part = times_binomial(&part, (1, 1), double.cosine);
            }
            terms.extend(part);
        }
        Ok(Some(Laurent::collect(terms)))
    }

    fn double_pair(&mut self, pair: &Pair) -> Step<Pair> {
        let two = Fraction::whole(Polynomial::integer(2));
        let argument = self.ring.multiply(&self.ring.angles[pair.angle.0], &two)?;
        self.ring.pair_of(argument, pair.hyperbolic)
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
            let form = self.carried_out(&plan)?;
            keep(best, form);
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

    fn carried_out(&mut self, plan: &Plan) -> Step<SignedForm> {
        let mut terms = Vec::new();
        for part in &plan.parts {
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
        Ok(signed_sum(terms))
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

    /// Powers of generators: s^i/c^i is a power of the tangent, and half angles are doubled where that is shorter. Numbers
    /// that this brings in are multiplied into `number`.
    pub fn generator_powers(&mut self, exponents: &Exponents, number: &mut RBig) -> Step<Vec<(Form, Exponent)>> {
        let mut rest = *exponents;
        let mut factors = Vec::new();
        self.merge_half_angles(&mut rest, number)?;
        for pair in self.ring.pairs() {
            let (i, j) = (rest[pair.sine], rest[pair.cosine]);
            if i == 0 && j == 0 {
                continue;
            }
            rest[pair.sine] = 0;
            rest[pair.cosine] = 0;
            if i == -j {
                let name = if pair.hyperbolic { "tanh" } else { "tan" };
                let argument = self.argument(pair.angle.0)?;
                factors.push((Form::Call(name.to_owned(), vec![argument]), (i64::from(i), 1)));
                continue;
            }
            let plain = self.plain_pair(&pair, i, j)?;
            match self.doubled_pair(&pair, i, j)? {
                Some((doubled, scale)) if cost(&doubled, &(&*number * &scale)) < cost(&plain, number) => {
                    *number *= scale;
                    factors.extend(doubled);
                }
                _ => factors.extend(plain),
            }
        }
        if let Some(exponential) = self.joint_exponential(&mut rest)? {
            factors.push((exponential, (1, 1)));
        }
        for side in [1, -1] {
            if let Some(radicand) = self.joint_root(&mut rest, side)? {
                factors.push((radicand, (i64::from(side), 2)));
            }
        }
        for (generator, &exponent) in rest.iter().enumerate().filter(|(_, exponent)| **exponent != 0) {
            factors.push((self.generator(generator)?, (i64::from(exponent), 1)));
        }
        Ok(factors)
    }

    /// Several square roots above the bar (side 1) or below it (side -1) as one: their common radicand.
    fn joint_root(&mut self, rest: &mut Exponents, side: i8) -> Step<Option<Form>> {
        let roots: Vec<(usize, Polynomial)> = (0..self.ring.generators.len())
            .filter(|&generator| rest[generator] == side)
            .filter_map(|generator| match &self.ring.generators[generator] {
                Kind::Root(2, radicand) => Some((generator, radicand.clone())),
                _ => None,
            })
            .collect();
        let mut product = Polynomial::one();
        for (generator, radicand) in &roots {
            if super::factor::square_root(radicand)?.is_none() {
                product = self.ring.canonical(&product.times(radicand)?)?;
                rest[*generator] = 0;
            }
        }
        if product.is_one() { Ok(None) } else { Ok(Some(self.polynomial(&product)?)) }
    }

    /// All exponentials as one: exp(a)^i exp(b)^j = exp(i a + j b).
    fn joint_exponential(&mut self, rest: &mut Exponents) -> Step<Option<Form>> {
        let mut argument = Fraction::zero();
        for (generator, exponent) in rest.iter_mut().enumerate().filter(|(_, exponent)| **exponent != 0) {
            let Some(Kind::Exp(angle)) = self.ring.generators.get(generator) else { continue };
            let multiple = Fraction::whole(Polynomial::integer(i64::from(*exponent)));
            let term = self.ring.multiply(&self.ring.angles[angle.0], &multiple)?;
            argument = self.ring.add(&argument, &term)?;
            *exponent = 0;
        }
        if argument.is_zero() {
            return Ok(None);
        }
        Ok(Some(Form::Call("exp".to_owned(), vec![self.fraction(&argument)?])))
    }

    /// s^i c^i as (S/2)^i with the sine of twice the angle, where that is shorter or meets other powers of that angle.
    fn merge_half_angles(&mut self, rest: &mut Exponents, number: &mut RBig) -> Step<()> {
        let mut place = 0;
        while let Some(pair) = self.ring.pairs().get(place).copied() {
            place += 1;
            let i = rest[pair.sine];
            if i == 0 || i != rest[pair.cosine] {
                continue;
            }
            let double = self.double_pair(&pair)?;
            let meets = rest[double.sine] != 0 || rest[double.cosine] != 0;
            let scale = RBig::from(2u8).pow(isize::from(i.abs()));
            let scaled = if i > 0 { &*number / &scale } else { &*number * &scale };
            let plain = self.plain_pair(&pair, i, i)?;
            let doubled = self.plain_pair(&double, i, 0)?;
            if meets || cost(&doubled, &scaled) < cost(&plain, number) {
                (rest[pair.sine], rest[pair.cosine]) = (0, 0);
                rest[double.sine] += i;
                *number = scaled;
                // The doubled pair may stand anywhere in the list.
                place = 0;
            }
        }
        Ok(())
    }

    fn plain_pair(&mut self, pair: &Pair, i: i8, j: i8) -> Step<Vec<(Form, Exponent)>> {
        let mut factors = Vec::new();
        for (generator, exponent) in [(pair.sine, i), (pair.cosine, j)] {
            if exponent != 0 {
                factors.push((self.generator(generator)?, (i64::from(exponent), 1)));
            }
        }
        Ok(factors)
    }

    /// s^i c^j in twice the angle: s c = S/2, then s^2 = (1 - C)/2 or c^2 = (1 + C)/2; `None` if an odd power is left.
    fn doubled_pair(&mut self, pair: &Pair, i: i8, j: i8) -> Step<Option<(Powers, RBig)>> {
        let shared = if i.signum() == j.signum() { i.signum() * i.abs().min(j.abs()) } else { 0 };
        let (i, j) = (i - shared, j - shared);
        if i % 2 != 0 || j % 2 != 0 || (i != 0 && j != 0) {
            return Ok(None);
        }
        let Pair { sine, cosine, .. } = self.double_pair(pair)?;
        let mut factors = Vec::new();
        if shared != 0 {
            factors.push((self.generator(sine)?, (i64::from(shared), 1)));
        }
        let one = (false, Form::integer(1));
        let squares = (i + j) / 2;
        if squares != 0 {
            let cosine = self.generator(cosine)?;
            // sinh^2 = (cosh 2x - 1)/2
            let terms = match (i != 0, pair.hyperbolic) {
                (true, true) => vec![(false, cosine), (true, Form::integer(1))],
                (true, false) => vec![one, (true, cosine)],
                (false, _) => vec![one, (false, cosine)],
            };
            factors.push((Form::Sum(terms), (i64::from(squares), 1)));
        }
        let halvings = i64::from(shared) + i64::from(squares);
        let two = RBig::from(2u8).pow(halvings.abs() as isize);
        Ok(Some((factors, if halvings > 0 { RBig::ONE / two } else { two })))
    }
}

/// Operations of factors and the number before them.
fn cost(factors: &[(Form, Exponent)], number: &RBig) -> usize {
    let powers = |(form, (power, _)): &(Form, Exponent)| 1 + form.operations() + usize::from(power.abs() > 1);
    let one = dashu_int::UBig::ONE;
    let numbers = usize::from(number.numerator() != &IBig::ONE) + usize::from(number.denominator() != &one);
    factors.iter().map(powers).sum::<usize>() + numbers
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

/// Terms of lower degree in a pair times s^2 + c^2 (or cosh^2 - sinh^2) until all have one degree.
fn homogeneous(polynomial: &Polynomial, pair: &Pair) -> Step<Option<Polynomial>> {
    let degree = |monomial: &Monomial| monomial.0[pair.sine] + monomial.0[pair.cosine];
    let highest = polynomial.terms().iter().map(|(monomial, _)| degree(monomial)).max().unwrap_or(0);
    let lowest = polynomial.terms().iter().map(|(monomial, _)| degree(monomial)).min().unwrap_or(0);
    if highest == lowest || highest > 8 || polynomial.terms().iter().any(|(m, _)| (highest - degree(m)) % 2 == 1) {
        return Ok(None);
    }
    let square = |generator| Polynomial::generator(generator).power(2);
    let one = if pair.hyperbolic {
        square(pair.cosine)?.minus(&square(pair.sine)?)
    } else {
        square(pair.sine)?.plus(&square(pair.cosine)?)
    };
    let mut sum = Polynomial::zero();
    for (monomial, x) in polynomial.terms() {
        let term = Polynomial::term(*monomial, x.clone());
        sum = sum.plus(&term.times(&one.power(u32::from((highest - degree(monomial)) / 2))?)?);
    }
    Ok(Some(sum))
}

/// A sum times (a + b g)/2 for a generator g.
fn times_binomial(terms: &[(Exponents, RBig)], (a, b): (i8, i8), generator: usize) -> Vec<(Exponents, RBig)> {
    let half = |x: &RBig, sign: i8| x * RBig::from(sign) / RBig::from(2u8);
    let raised = |e: &Exponents| {
        let mut e = *e;
        e[generator] += 1;
        e
    };
    terms.iter().flat_map(|(e, x)| [(*e, half(x, a)), (raised(e), half(x, b))]).collect()
}

/// The generator, if the polynomial is one alone.
pub(super) fn single_generator(polynomial: &Polynomial) -> Option<usize> {
    match polynomial.terms() {
        [(monomial, x)] if *x == IBig::ONE && monomial.0.iter().map(|&e| u32::from(e)).sum::<u32>() == 1 => {
            monomial.0.iter().position(|&e| e == 1)
        }
        _ => None,
    }
}

/// A sum in which a leading minus sign is taken out if every term has one.
fn signed_sum(terms: Vec<(bool, Form)>) -> SignedForm {
    if terms.iter().all(|(negative, _)| *negative) {
        (true, sum(terms.into_iter().map(|(_, term)| (false, term)).collect()))
    } else {
        (false, sum(terms))
    }
}

/// Keeps the shorter form; a sign outside counts as an operation.
fn keep(best: &mut SignedForm, candidate: SignedForm) {
    // Of equally long forms the one with fewer sums inside each other.
    let cost = |(negative, form): &SignedForm| (form.operations() + usize::from(*negative), form.sums());
    if cost(&candidate) < cost(best) {
        *best = candidate;
    }
}
