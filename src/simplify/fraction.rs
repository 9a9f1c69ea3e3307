//! Quotients of polynomials with factored denominators.
//!
//! Denominators stay products: a common denominator is then a matter of exponents, and a sum that loses a factor is
//! divided by it at once.

use super::factor::{Factored, factor};
use super::meter::Step;
use super::polynomial::Polynomial;
use super::ring::{Kind, Ring};
use dashu_base::Gcd;
use dashu_int::IBig;

/// `numerator / (divisor * product of factor^exponent)`; the divisor is positive, factors are primitive with a positive
/// leading coefficient and different from each other.
#[derive(Clone, PartialEq, Debug)]
pub(super) struct Fraction {
    pub numerator: Polynomial,
    pub divisor: IBig,
    pub denominator: Vec<(Polynomial, u32)>,
}

impl Fraction {
    pub fn zero() -> Self {
        Self::whole(Polynomial::zero())
    }

    pub fn whole(numerator: Polynomial) -> Self {
        Self { numerator, divisor: IBig::ONE, denominator: Vec::new() }
    }

    pub fn is_zero(&self) -> bool {
        self.numerator.is_zero()
    }

    pub fn negated(&self) -> Self {
        Self { numerator: self.numerator.negated(), ..self.clone() }
    }

    /// The whole denominator as a polynomial.
    pub fn denominator_product(&self) -> Step<Polynomial> {
        let mut product = Polynomial::constant(self.divisor.clone());
        for (factor, exponent) in &self.denominator {
            product = product.times(&factor.power(*exponent)?)?;
        }
        Ok(product)
    }
}

impl Ring {
    pub fn add(&self, a: &Fraction, b: &Fraction) -> Step<Fraction> {
        if a.is_zero() {
            return Ok(b.clone());
        }
        if b.is_zero() {
            return Ok(a.clone());
        }
        let (denominator, divisor) = common_denominator(&[a, b]);
        let left = raised(a, &denominator, &divisor)?;
        let right = raised(b, &denominator, &divisor)?;
        self.cancelled(Fraction { numerator: self.canonical(&left.plus(&right))?, divisor, denominator })
    }

    pub fn subtract(&self, a: &Fraction, b: &Fraction) -> Step<Fraction> {
        self.add(a, &b.negated())
    }

    pub fn multiply(&self, a: &Fraction, b: &Fraction) -> Step<Fraction> {
        let mut denominator = a.denominator.clone();
        for (factor, exponent) in &b.denominator {
            include(&mut denominator, factor, *exponent);
        }
        let numerator = self.product(&a.numerator, &b.numerator)?;
        self.cancelled(Fraction { numerator, divisor: &a.divisor * &b.divisor, denominator })
    }

    /// `None` for a divisor that is zero.
    pub fn divide(&self, a: &Fraction, b: &Fraction) -> Step<Option<Fraction>> {
        Ok(match self.inverse(b)? {
            Some(inverse) => Some(self.multiply(a, &inverse)?),
            None => None,
        })
    }

    /// `None` for zero.
    pub fn inverse(&self, a: &Fraction) -> Step<Option<Fraction>> {
        if a.is_zero() {
            return Ok(None);
        }
        let Factored { unit, factors: denominator } = self.factored(&a.numerator)?;
        let mut numerator = Polynomial::constant(a.divisor.clone());
        for (factor, exponent) in &a.denominator {
            numerator = self.canonical(&numerator.times(&factor.power(*exponent)?)?)?;
        }
        let negative = unit < IBig::ZERO;
        let divisor = if negative { -unit } else { unit };
        let numerator = if negative { numerator.negated() } else { numerator };
        Ok(Some(self.cancelled(Fraction { numerator, divisor, denominator })?))
    }

    /// Integer power; `None` for a negative power of zero.
    pub fn power(&self, a: &Fraction, exponent: i64) -> Step<Option<Fraction>> {
        let base = if exponent < 0 {
            let Some(inverse) = self.inverse(a)? else { return Ok(None) };
            inverse
        } else {
            a.clone()
        };
        let mut result = Fraction::whole(Polynomial::one());
        for _ in 0..exponent.unsigned_abs() {
            result = self.multiply(&result, &base)?;
        }
        Ok(Some(result))
    }

    /// Divides common factors out.
    pub fn cancelled(&self, fraction: Fraction) -> Step<Fraction> {
        let Fraction { mut numerator, mut divisor, mut denominator } = fraction;
        if numerator.is_zero() {
            return Ok(Fraction::zero());
        }
        self.resolve_roots(&mut numerator, &mut divisor, &mut denominator)?;
        for (factor, exponent) in &mut denominator {
            while *exponent > 0 {
                let Some(quotient) = self.quotient(&numerator, factor)? else { break };
                numerator = quotient;
                *exponent -= 1;
            }
        }
        denominator.retain(|(_, exponent)| *exponent > 0);
        let shared = IBig::from(numerator.integer_content().gcd(&divisor));
        if shared != IBig::ONE {
            numerator = numerator.divided_by(&Polynomial::constant(shared.clone()))?.expect("it divides the content");
            divisor /= shared;
        }
        Ok(Fraction { numerator, divisor, denominator })
    }

    /// Square roots below the bar: q^2 becomes the radicand, and q above a radicand becomes 1/q.
    fn resolve_roots(
        &self,
        numerator: &mut Polynomial,
        divisor: &mut IBig,
        denominator: &mut Vec<(Polynomial, u32)>,
    ) -> Step<()> {
        for (place, kind) in self.generators.iter().enumerate().rev() {
            let Kind::Root(2, radicand) = kind else { continue };
            let root = Polynomial::generator(place);
            if let Some(at) = denominator.iter().position(|(factor, exponent)| *factor == root && *exponent > 1) {
                let squares = denominator[at].1 / 2;
                denominator[at].1 %= 2;
                let factored = factor(radicand)?;
                for (factor, exponent) in factored.factors {
                    include(denominator, &factor, exponent * squares);
                }
                for _ in 0..squares {
                    *divisor *= &factored.unit;
                }
                if *divisor < IBig::ZERO {
                    *divisor = -divisor.clone();
                    *numerator = numerator.negated();
                }
                denominator.retain(|(_, exponent)| *exponent > 0);
            }
            // The radicand is primitive where it stands below as a factor of its own.
            let (unit, primitive) = radicand.primitive();
            if let Some(at) = denominator.iter().position(|(factor, _)| *factor == primitive)
                && let Some(quotient) = self.quotient(numerator, &root)?
            {
                *numerator = quotient.scaled(&unit)?;
                denominator[at].1 -= 1;
                include(denominator, &root, 1);
                denominator.retain(|(_, exponent)| *exponent > 0);
            }
        }
        Ok(())
    }

    /// The quotient in normal form if `divisor` divides `dividend` in some direction of the pairs.
    pub fn quotient(&self, dividend: &Polynomial, divisor: &Polynomial) -> Step<Option<Polynomial>> {
        if let Some(quotient) = dividend.divided_by(divisor)? {
            return Ok(Some(quotient));
        }
        if let Some(place) = super::laurent::single_generator(divisor)
            && let Kind::Root(2, radicand) = &self.generators[place]
        {
            // (a r + b q)/q = a q + b for q^2 = r
            let coefficients = dividend.coefficients(place);
            if let Some((first, [second])) = coefficients.split_first()
                && let Some(first) = first.divided_by(radicand)?
            {
                return Ok(Some(first.times(divisor)?.plus(second)));
            }
            if let Some(quotient) = dividend.divided_by(radicand)? {
                return Ok(Some(quotient.times(divisor)?));
            }
        }
        let relevant = self.pairs().any(|pair| divisor.uses(pair.sine) || divisor.uses(pair.cosine));
        if !relevant {
            return Ok(None);
        }
        for directions in self.directions(&[dividend, divisor]) {
            let (high, low) = (self.reduced(dividend, directions)?, self.reduced(divisor, directions)?);
            if let Some(quotient) = high.divided_by(&low)? {
                return Ok(Some(self.canonical(&quotient)?));
            }
        }
        Ok(None)
    }
}

/// The least common denominator of fractions.
pub(super) fn common_denominator(fractions: &[&Fraction]) -> (Vec<(Polynomial, u32)>, IBig) {
    let mut denominator: Vec<(Polynomial, u32)> = Vec::new();
    let mut divisor = IBig::ONE;
    for fraction in fractions {
        let shared = IBig::from((&divisor).gcd(&fraction.divisor));
        divisor = divisor * &fraction.divisor / shared;
        for (factor, exponent) in &fraction.denominator {
            match denominator.iter_mut().find(|(known, _)| known == factor) {
                Some((_, highest)) => *highest = (*highest).max(*exponent),
                None => denominator.push((factor.clone(), *exponent)),
            }
        }
    }
    (denominator, divisor)
}

/// The numerator over a larger denominator.
pub(super) fn raised(fraction: &Fraction, denominator: &[(Polynomial, u32)], divisor: &IBig) -> Step<Polynomial> {
    let mut numerator = fraction.numerator.scaled(&(divisor / &fraction.divisor))?;
    for (factor, exponent) in denominator {
        let own = fraction.denominator.iter().find(|(known, _)| known == factor).map_or(0, |(_, own)| *own);
        numerator = numerator.times(&factor.power(exponent - own)?)?;
    }
    Ok(numerator)
}

fn include(denominator: &mut Vec<(Polynomial, u32)>, factor: &Polynomial, exponent: u32) {
    match denominator.iter_mut().find(|(known, _)| known == factor) {
        Some((_, total)) => *total += exponent,
        None => denominator.push((factor.clone(), exponent)),
    }
}
