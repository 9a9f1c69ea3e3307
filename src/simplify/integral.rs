//! Antiderivatives in one variable, by a short list of rules.
//!
//! Every rule proposes a formula; none is believed. A proposal counts only after its derivative, taken in the graph and read
//! into a fresh ring, has been reduced to the integrand, and only where no denominator of it can vanish on the way.

use super::fraction::Fraction;
use super::meter::Step;
use super::polynomial::{Monomial, Polynomial};
use super::ring::{Kind, Ring};
use super::sign::{Ranges, sign};
use crate::expression::{Function, Graph, SymbolId};
use dashu_int::IBig;

/// Looks for antiderivatives of ring elements.
pub(super) struct Integrator<'a> {
    pub graph: &'a Graph,
    pub ring: &'a Ring,
    pub ranges: &'a Ranges,
    pub variable: SymbolId,
}

/// An antiderivative `plain + sum of coefficient * function(argument)`.
#[derive(Clone, Debug)]
pub(super) struct Antiderivative {
    pub plain: Fraction,
    pub functions: Vec<(Fraction, Function, Fraction)>,
}

impl Antiderivative {
    fn plain(plain: Fraction) -> Self {
        Self { plain, functions: Vec::new() }
    }
}

impl Integrator<'_> {
    /// The proposal of the first rule that fits.
    pub fn antiderivative(&self, ring: &mut Ring, integrand: &Fraction) -> Step<Option<Antiderivative>> {
        let variable = self.generator_of_variable(ring)?;
        if !self.depends(integrand) {
            let whole = Fraction::whole(Polynomial::generator(variable));
            return Ok(Some(Antiderivative::plain(ring.multiply(integrand, &whole)?)));
        }
        if let Some(found) = self.polynomial(integrand)? {
            return Ok(Some(Antiderivative::plain(found)));
        }
        if let Some(found) = self.power_of_root(integrand)? {
            return Ok(Some(Antiderivative::plain(found)));
        }
        if let Some(found) = self.power_of_factor(integrand)? {
            return Ok(Some(Antiderivative::plain(found)));
        }
        if let Some(found) = self.root_of_quadratic(ring, integrand)? {
            return Ok(Some(found));
        }
        self.square_of_quadratic(ring, integrand)
    }

    fn generator_of_variable(&self, ring: &mut Ring) -> Step<usize> {
        ring.generator(Kind::Symbol(self.variable))
    }

    fn depends(&self, fraction: &Fraction) -> bool {
        self.polynomial_depends(&fraction.numerator)
            || fraction.denominator.iter().any(|(factor, _)| self.polynomial_depends(factor))
    }

    fn polynomial_depends(&self, polynomial: &Polynomial) -> bool {
        polynomial.generators().into_iter().any(|g| self.ring.depends_on(g, self.variable, self.graph))
    }

    fn derivative(&self, fraction: &Fraction) -> Step<Option<Fraction>> {
        self.ring.derivative(fraction, self.variable, self.graph)
    }

    /// Sums of u^n times powers of one sine, cosine, hyperbolic function or exponential of a linear argument.
    fn polynomial(&self, integrand: &Fraction) -> Step<Option<Fraction>> {
        if integrand
            .denominator
            .iter()
            .any(|(factor, _)| self.polynomial_depends(factor) && !self.is_exponential(factor))
        {
            return Ok(None);
        }
        // Negative powers of exponentials stay below; everything else below is constant.
        let mut total = Fraction::zero();
        for (monomial, x) in integrand.numerator.terms() {
            let term = Fraction {
                numerator: Polynomial::term(*monomial, x.clone()),
                divisor: integrand.divisor.clone(),
                denominator: integrand.denominator.clone(),
            };
            let Some(found) = self.term(&self.ring.cancelled(term)?, 0)? else { return Ok(None) };
            total = self.ring.add(&total, &found)?;
        }
        Ok(Some(total))
    }

    fn is_exponential(&self, factor: &Polynomial) -> bool {
        super::laurent::single_generator(factor).is_some_and(|g| matches!(self.ring.generators[g], Kind::Exp(_)))
    }

    /// One term: integration by parts lowers the power of u, recursion the power of a cosine.
    fn term(&self, term: &Fraction, depth: u32) -> Step<Option<Fraction>> {
        if depth > 40 {
            return Ok(None);
        }
        if !self.depends(term) {
            let mut ring = self.ring.clone();
            let variable = self.generator_of_variable(&mut ring)?;
            return Ok(Some(self.ring.multiply(term, &Fraction::whole(Polynomial::generator(variable)))?));
        }
        let [(monomial, x)] = term.numerator.terms() else {
            // A relation made several terms of one.
            let mut total = Fraction::zero();
            for (monomial, x) in term.numerator.terms() {
                let part = Fraction { numerator: Polynomial::term(*monomial, x.clone()), ..term.clone() };
                let Some(found) = self.term(&part, depth + 1)? else { return Ok(None) };
                total = self.ring.add(&total, &found)?;
            }
            return Ok(Some(total));
        };
        let dependent: Vec<usize> = (0..self.ring.generators.len())
            .filter(|&g| monomial.0[g] > 0 && self.ring.depends_on(g, self.variable, self.graph))
            .collect();
        let own = dependent.iter().copied().find(|&g| self.ring.generators[g] == Kind::Symbol(self.variable));
        let rest: Vec<usize> = dependent.iter().copied().filter(|&g| Some(g) != own).collect();
        let exponential_below = term.denominator.iter().any(|(factor, _)| self.polynomial_depends(factor));
        if rest.is_empty() && !exponential_below {
            let g = own.expect("something depends on the variable");
            let n = monomial.0[g];
            let raised = Monomial::generator(g, 1);
            let numerator = Polynomial::term(*monomial, x.clone()).times_monomial(&raised)?;
            let below = Fraction { numerator, divisor: &term.divisor * IBig::from(n + 1), ..term.clone() };
            return Ok(Some(self.ring.cancelled(below)?));
        }
        // The part without u.
        let mut bare = *monomial;
        let power = own.map_or(0, |g| std::mem::take(&mut bare.0[g]));
        let bare = Fraction { numerator: Polynomial::term(bare, x.clone()), ..term.clone() };
        let Some(inner) = self.functions(&bare, &rest, depth)? else { return Ok(None) };
        let Some(own) = own.filter(|_| power > 0) else { return Ok(Some(inner)) };
        // int u^n g = u^n G - n int u^(n-1) G
        let outer = Fraction::whole(Polynomial::generator(own).power(u32::from(power))?);
        let lower =
            Fraction::whole(Polynomial::generator(own).power(u32::from(power) - 1)?.scaled(&IBig::from(power))?);
        let rest = self.ring.multiply(&lower, &inner)?;
        let Some(rest) = self.term(&rest, depth + 1)? else { return Ok(None) };
        Ok(Some(self.ring.subtract(&self.ring.multiply(&outer, &inner)?, &rest)?))
    }

    /// A constant times powers of the functions of one linear argument.
    fn functions(&self, term: &Fraction, generators: &[usize], depth: u32) -> Step<Option<Fraction>> {
        let exponential: Vec<usize> = (0..self.ring.generators.len())
            .filter(|&g| matches!(self.ring.generators[g], Kind::Exp(_)))
            .filter(|&g| {
                let below = Polynomial::generator(g);
                generators.contains(&g) || term.denominator.iter().any(|(factor, _)| *factor == below)
            })
            .filter(|&g| self.ring.depends_on(g, self.variable, self.graph))
            .collect();
        if !exponential.is_empty() {
            // f' = rate f with a constant rate.
            if generators.iter().any(|g| !exponential.contains(g)) {
                return Ok(None);
            }
            let Some(slope) = self.derivative(term)? else { return Ok(None) };
            let Some(rate) = self.ring.divide(&slope, term)? else { return Ok(None) };
            if self.depends(&rate) {
                return Ok(None);
            }
            return self.ring.divide(term, &rate);
        }
        let used: Vec<_> =
            self.ring.pairs().filter(|p| generators.contains(&p.sine) || generators.contains(&p.cosine)).collect();
        let [pair] = used[..] else { return Ok(None) };
        if generators.iter().any(|g| *g != pair.sine && *g != pair.cosine) {
            return Ok(None);
        }
        let Some(rate) = self.derivative(&self.ring.angles[pair.angle.0])? else { return Ok(None) };
        if self.depends(&rate) || rate.is_zero() {
            return Ok(None);
        }
        let [(monomial, _)] = term.numerator.terms() else { return Ok(None) };
        let (i, n) = (monomial.0[pair.sine], monomial.0[pair.cosine]);
        let mut constant = term.clone();
        let mut bare = *monomial;
        bare.0[pair.sine] = 0;
        bare.0[pair.cosine] = 0;
        constant.numerator = Polynomial::term(bare, term.numerator.terms()[0].1.clone());
        let Some(scale) = self.ring.divide(&constant, &rate)? else { return Ok(None) };
        let (s, c) = (Polynomial::generator(pair.sine), Polynomial::generator(pair.cosine));
        let over = |polynomial: Polynomial, divisor: u8| Fraction {
            divisor: IBig::from(divisor),
            ..Fraction::whole(polynomial)
        };
        match i {
            1 => {
                // int s c^n = -c^(n+1)/(n+1); sinh cosh^n has the plus sign.
                let power = c.power(u32::from(n) + 1)?;
                let power = if pair.hyperbolic { power } else { power.negated() };
                Ok(Some(self.ring.multiply(&scale, &over(power, n + 1))?))
            }
            0 if n == 1 => Ok(Some(self.ring.multiply(&scale, &Fraction::whole(s))?)),
            0 => {
                // int c^n = c^(n-1) s/n + (n-1)/n int c^(n-2), the same for cosh.
                let first = self.ring.multiply(&scale, &over(c.power(u32::from(n) - 1)?.times(&s)?, n))?;
                let lower = c.power(u32::from(n) - 2)?.scaled(&IBig::from(n - 1))?;
                let lower = self.ring.multiply(&constant, &over(lower, n))?;
                let Some(rest) = self.term(&lower, depth + 1)? else { return Ok(None) };
                Ok(Some(self.ring.add(&first, &rest)?))
            }
            _ => Ok(None),
        }
    }

    /// The square root that depends on the variable, its radicand, and whether it stands above the bar.
    fn single_root(&self, integrand: &Fraction) -> Option<(usize, Polynomial, bool)> {
        let mut found = None;
        for (place, kind) in self.ring.generators.iter().enumerate() {
            let Kind::Root(2, radicand) = kind else { continue };
            if !self.ring.depends_on(place, self.variable, self.graph) {
                continue;
            }
            let below = integrand.denominator.iter().any(|(factor, _)| *factor == Polynomial::generator(place));
            if integrand.numerator.uses(place) || below {
                if found.is_some() {
                    return None;
                }
                found = Some((place, radicand.clone(), !below));
            }
        }
        found
    }

    /// r' r^(1/2) and r' r^(-1/2).
    fn power_of_root(&self, integrand: &Fraction) -> Step<Option<Fraction>> {
        let Some((place, radicand, above)) = self.single_root(integrand) else { return Ok(None) };
        let root = Fraction::whole(Polynomial::generator(place));
        let bare =
            if above { self.ring.divide(integrand, &root)? } else { Some(self.ring.multiply(integrand, &root)?) };
        let Some(bare) = bare else { return Ok(None) };
        let Some(slope) = self.derivative(&Fraction::whole(radicand.clone()))? else { return Ok(None) };
        let Some(ratio) = self.ring.divide(&bare, &slope)? else { return Ok(None) };
        if self.depends(&ratio) {
            return Ok(None);
        }
        let (power, factor) = if above {
            (
                self.ring.multiply(&Fraction::whole(radicand), &root)?,
                Fraction { divisor: IBig::from(3), ..Fraction::whole(Polynomial::integer(2)) },
            )
        } else {
            (root, Fraction::whole(Polynomial::integer(2)))
        };
        Ok(Some(self.ring.multiply(&self.ring.multiply(&ratio, &factor)?, &power)?))
    }

    /// f' f^(-n), n > 1; and 1/cos^2, 1/cosh^2.
    fn power_of_factor(&self, integrand: &Fraction) -> Step<Option<Fraction>> {
        for (factor, exponent) in &integrand.denominator {
            if !self.polynomial_depends(factor) || sign(self.ring, self.graph, self.ranges, factor).is_none() {
                continue;
            }
            let whole = Fraction::whole(factor.clone());
            if let Some(pair) = self.ring.pairs().find(|pair| *factor == Polynomial::generator(pair.cosine))
                && *exponent == 2
            {
                // (s/c)' = rate/c^2
                let Some(rate) = self.derivative(&self.ring.angles[pair.angle.0])? else { continue };
                let square = self.ring.multiply(&whole, &whole)?;
                let Some(ratio) = self.ring.divide(&self.ring.multiply(integrand, &square)?, &rate)? else { continue };
                if !self.depends(&ratio) {
                    let sine = Fraction::whole(Polynomial::generator(pair.sine));
                    return self.ring.divide(&self.ring.multiply(&ratio, &sine)?, &whole);
                }
            }
            if *exponent < 2 {
                continue;
            }
            let Some(slope) = self.derivative(&whole)? else { continue };
            let power = self.ring.power(&whole, i64::from(*exponent))?.unwrap_or_else(Fraction::zero);
            let Some(ratio) = self.ring.divide(&self.ring.multiply(integrand, &power)?, &slope)? else { continue };
            if self.depends(&ratio) {
                continue;
            }
            let lower = self.ring.power(&whole, i64::from(*exponent) - 1)?.unwrap_or_else(Fraction::zero);
            let scale = Fraction { divisor: IBig::from(exponent - 1), ..Fraction::whole(Polynomial::integer(-1)) };
            return self.ring.divide(&self.ring.multiply(&ratio, &scale)?, &lower);
        }
        Ok(None)
    }

    /// Generators w that a substitution may use, with w'.
    fn substitutions(&self) -> Step<Vec<(usize, Fraction)>> {
        let mut found = Vec::new();
        for (place, kind) in self.ring.generators.iter().enumerate() {
            let usable = matches!(kind, Kind::Symbol(_) | Kind::Sin(_) | Kind::Cos(_) | Kind::Sinh(_) | Kind::Cosh(_));
            if usable
                && self.ring.depends_on(place, self.variable, self.graph)
                && let Some(slope) = self.derivative(&Fraction::whole(Polynomial::generator(place)))?
            {
                found.push((place, slope));
            }
        }
        Ok(found)
    }

    /// a w^2 + b with a and b free of the variable.
    fn quadratic_in(&self, polynomial: &Polynomial, w: usize) -> Step<Option<(Polynomial, Polynomial)>> {
        for directions in self.ring.directions(&[polynomial]).into_iter().chain([Default::default()]) {
            let reduced = self.ring.reduced(polynomial, directions)?;
            let coefficients = reduced.coefficients(w);
            if let [b, middle, a] = &coefficients[..]
                && middle.is_zero()
                && !self.polynomial_depends(a)
                && !self.polynomial_depends(b)
            {
                return Ok(Some((a.clone(), b.clone())));
            }
        }
        Ok(None)
    }

    /// w' sqrt(a w^2 + b): w sqrt(..)/2 + b/(2 sqrt a) asinh(w sqrt(a/b)), with asin for a negative a.
    fn root_of_quadratic(&self, ring: &mut Ring, integrand: &Fraction) -> Step<Option<Antiderivative>> {
        let Some((place, radicand, above)) = self.single_root(integrand) else { return Ok(None) };
        let root = Fraction::whole(Polynomial::generator(place));
        let bare =
            if above { self.ring.divide(integrand, &root)? } else { Some(self.ring.multiply(integrand, &root)?) };
        let Some(bare) = bare else { return Ok(None) };
        for (w, slope) in self.substitutions()? {
            let Some(scale) = self.ring.divide(&bare, &slope)? else { continue };
            if self.depends(&scale) {
                continue;
            }
            let Some((a, b)) = self.quadratic_in(&radicand, w)? else { continue };
            let positive = |p: &Polynomial| sign(self.ring, self.graph, self.ranges, p);
            let (Some(of_a), Some(1)) = (positive(&a), positive(&b)) else { continue };
            let (function, a) = if of_a > 0 { (Function::Asinh, a) } else { (Function::Asin, a.negated()) };
            let root_a = root_of(ring, &a)?;
            let root_b = root_of(ring, &b)?;
            let w = Fraction::whole(Polynomial::generator(w));
            let Some(argument) = ring.divide(&ring.multiply(&w, &root_a)?, &root_b)? else { continue };
            let half = Fraction { divisor: IBig::from(2), ..scale.clone() };
            let half = Fraction { divisor: &scale.divisor * IBig::from(2), ..half };
            if above {
                let plain = ring.multiply(&half, &ring.multiply(&w, &root)?)?;
                let Some(coefficient) = ring.divide(&ring.multiply(&half, &Fraction::whole(b))?, &root_a)? else {
                    continue;
                };
                return Ok(Some(Antiderivative { plain, functions: vec![(coefficient, function, argument)] }));
            }
            let Some(coefficient) = ring.divide(&scale, &root_a)? else { continue };
            return Ok(Some(Antiderivative {
                plain: Fraction::zero(),
                functions: vec![(coefficient, function, argument)],
            }));
        }
        Ok(None)
    }

    /// w'/(b - a w^2)^2: w/(2 b (b - a w^2)) + atanh(w sqrt(a/b))/(2 b sqrt(a b)); w'/(b - a w^2) likewise.
    fn square_of_quadratic(&self, ring: &mut Ring, integrand: &Fraction) -> Step<Option<Antiderivative>> {
        for (w, slope) in self.substitutions()? {
            let Some(quotient) = self.ring.divide(integrand, &slope)? else { continue };
            let mut below = Polynomial::one();
            let mut constant = quotient.clone();
            constant.denominator.clear();
            for (factor, exponent) in &quotient.denominator {
                if self.polynomial_depends(factor) {
                    below = below.times(&factor.power(*exponent)?)?;
                } else {
                    constant.denominator.push((factor.clone(), *exponent));
                }
            }
            if self.depends(&constant) {
                continue;
            }
            let square = super::factor::square_root(&self.ring.canonical(&below)?)?;
            let (quadratic, squared) = match square {
                Some(root) => (root, true),
                None => (below, false),
            };
            let Some((a, b)) = self.quadratic_in(&quadratic, w)? else { continue };
            let positive = |p: &Polynomial| sign(self.ring, self.graph, self.ranges, p);
            let (Some(of_a), Some(of_b)) = (positive(&a), positive(&b)) else { continue };
            // Turned so that b is positive; the square does not notice.
            let turned = of_b < 0;
            let (a, b) = if turned { (a.negated(), b.negated()) } else { (a, b) };
            let of_a = if turned { -of_a } else { of_a };
            let constant = if turned && !squared { constant.negated() } else { constant };
            let (function, a) = if of_a < 0 { (Function::Atanh, a.negated()) } else { (Function::Atan, a) };
            let (root_a, root_b) = (root_of(ring, &a)?, root_of(ring, &b)?);
            let w = Fraction::whole(Polynomial::generator(w));
            let Some(argument) = ring.divide(&ring.multiply(&w, &root_a)?, &root_b)? else { continue };
            let roots = ring.multiply(&root_a, &root_b)?;
            let b = Fraction::whole(b);
            if !squared {
                let Some(coefficient) = ring.divide(&constant, &roots)? else { continue };
                return Ok(Some(Antiderivative {
                    plain: Fraction::zero(),
                    functions: vec![(coefficient, function, argument)],
                }));
            }
            let quadratic = Fraction::whole(if turned { quadratic.negated() } else { quadratic });
            let two_b = ring.multiply(&Fraction::whole(Polynomial::integer(2)), &b)?;
            let Some(first) = ring.divide(&ring.multiply(&constant, &w)?, &ring.multiply(&two_b, &quadratic)?)? else {
                continue;
            };
            let Some(coefficient) = ring.divide(&constant, &ring.multiply(&two_b, &roots)?)? else { continue };
            return Ok(Some(Antiderivative { plain: first, functions: vec![(coefficient, function, argument)] }));
        }
        Ok(None)
    }
}

/// The square root of a polynomial that is proved not to be negative, its square factors taken out as they are: a wrong
/// sign would fail the proof by differentiation.
fn root_of(ring: &mut Ring, polynomial: &Polynomial) -> Step<Fraction> {
    let factored = ring.factored(polynomial)?;
    let (whole, rest) = super::factor::split_square(&factored.unit);
    let mut outside = Polynomial::constant(whole);
    let mut inside = Polynomial::constant(rest);
    for (factor, exponent) in &factored.factors {
        outside = outside.times(&factor.power(exponent / 2)?)?;
        inside = inside.times(&factor.power(exponent % 2)?)?;
    }
    let inside = ring.canonical(&inside)?;
    let outside = Fraction::whole(ring.canonical(&outside)?);
    if inside.is_one() {
        return Ok(outside);
    }
    let root = Fraction::whole(Polynomial::generator(ring.generator(Kind::Root(2, inside))?));
    ring.multiply(&outside, &root)
}
