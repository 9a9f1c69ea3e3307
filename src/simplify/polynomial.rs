//! Sparse polynomials in many generators with integer coefficients.
//!
//! The polynomials of area elements are small (a handful of terms, short coefficients), so the representation is plain:
//! a list of terms, sorted by monomial, each monomial an array of exponents.

use super::meter::{Exhausted, Step, spend};
use dashu_base::{Abs, DivRem, Gcd, Sign, Signed};
use dashu_int::IBig;
use rustc_hash::FxHashMap;

/// The most generators of a ring.
pub(super) const GENERATORS: usize = 32;

/// The most terms of a polynomial.
const MAXIMUM_TERMS: usize = 4_000;

/// The most bits of a coefficient.
const MAXIMUM_BITS: usize = 2_048;

/// Exponents of the generators. Ordered lexicographically, generator 0 first.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug, Default)]
pub(super) struct Monomial(pub [u8; GENERATORS]);

impl Monomial {
    pub const ONE: Self = Self([0; GENERATORS]);

    pub fn generator(index: usize, exponent: u8) -> Self {
        let mut monomial = Self::ONE;
        monomial.0[index] = exponent;
        monomial
    }

    fn times(&self, other: &Self) -> Step<Self> {
        let mut product = *self;
        for (own, other) in product.0.iter_mut().zip(other.0) {
            *own = own.checked_add(other).ok_or(Exhausted)?;
        }
        Ok(product)
    }

    fn divided_by(&self, other: &Self) -> Option<Self> {
        let mut quotient = *self;
        for (own, other) in quotient.0.iter_mut().zip(other.0) {
            *own = own.checked_sub(other)?;
        }
        Some(quotient)
    }

    fn lowest(&self, other: &Self) -> Self {
        let mut lowest = *self;
        for (own, other) in lowest.0.iter_mut().zip(other.0) {
            *own = (*own).min(other);
        }
        lowest
    }

    pub fn is_one(&self) -> bool {
        *self == Self::ONE
    }
}

/// A polynomial; terms in falling order of their monomials, no zero coefficient.
#[derive(Clone, PartialEq, Eq, Hash, PartialOrd, Ord, Debug, Default)]
pub(super) struct Polynomial {
    terms: Vec<(Monomial, IBig)>,
}

impl Polynomial {
    pub fn zero() -> Self {
        Self::default()
    }

    pub fn one() -> Self {
        Self::integer(1)
    }

    pub fn integer(value: i64) -> Self {
        Self::constant(IBig::from(value))
    }

    pub fn constant(value: IBig) -> Self {
        Self::term(Monomial::ONE, value)
    }

    pub fn generator(index: usize) -> Self {
        Self::term(Monomial::generator(index, 1), IBig::ONE)
    }

    pub fn term(monomial: Monomial, coefficient: IBig) -> Self {
        if coefficient == IBig::ZERO { Self::zero() } else { Self { terms: vec![(monomial, coefficient)] } }
    }

    /// The sum of terms in any order, equal monomials allowed.
    pub fn collect(terms: impl IntoIterator<Item = (Monomial, IBig)>) -> Self {
        let mut sums: FxHashMap<Monomial, IBig> = FxHashMap::default();
        for (monomial, coefficient) in terms {
            *sums.entry(monomial).or_insert(IBig::ZERO) += coefficient;
        }
        let mut terms: Vec<_> = sums.into_iter().filter(|(_, coefficient)| *coefficient != IBig::ZERO).collect();
        terms.sort_unstable_by_key(|term| std::cmp::Reverse(term.0));
        Self { terms }
    }

    pub fn terms(&self) -> &[(Monomial, IBig)] {
        &self.terms
    }

    pub fn is_zero(&self) -> bool {
        self.terms.is_empty()
    }

    pub fn is_one(&self) -> bool {
        self.as_constant().is_some_and(|value| *value == IBig::ONE)
    }

    pub fn as_constant(&self) -> Option<&IBig> {
        match &self.terms[..] {
            [(monomial, value)] if monomial.is_one() => Some(value),
            _ => None,
        }
    }

    pub fn is_constant(&self) -> bool {
        self.is_zero() || self.as_constant().is_some()
    }

    /// The coefficient of the highest monomial; 0 of the zero polynomial.
    pub fn leading(&self) -> IBig {
        self.terms.first().map_or(IBig::ZERO, |(_, coefficient)| coefficient.clone())
    }

    /// Degree in one generator.
    pub fn degree(&self, generator: usize) -> u8 {
        self.terms.iter().map(|(monomial, _)| monomial.0[generator]).max().unwrap_or(0)
    }

    pub fn uses(&self, generator: usize) -> bool {
        self.terms.iter().any(|(monomial, _)| monomial.0[generator] > 0)
    }

    /// The generators that occur, in order.
    pub fn generators(&self) -> Vec<usize> {
        (0..GENERATORS).filter(|&generator| self.uses(generator)).collect()
    }

    pub fn negated(&self) -> Self {
        Self { terms: self.terms.iter().map(|(monomial, coefficient)| (*monomial, -coefficient)).collect() }
    }

    pub fn plus(&self, other: &Self) -> Self {
        self.merged(other, false)
    }

    pub fn minus(&self, other: &Self) -> Self {
        self.merged(other, true)
    }

    fn merged(&self, other: &Self, subtract: bool) -> Self {
        let mut terms = Vec::with_capacity(self.terms.len() + other.terms.len());
        let (mut left, mut right) = (self.terms.iter().peekable(), other.terms.iter().peekable());
        let signed = |coefficient: &IBig| if subtract { -coefficient } else { coefficient.clone() };
        loop {
            match (left.peek(), right.peek()) {
                (Some(&(a, x)), Some(&(b, y))) if a == b => {
                    let sum = if subtract { x - y } else { x + y };
                    if sum != IBig::ZERO {
                        terms.push((*a, sum));
                    }
                    left.next();
                    right.next();
                }
                (Some(&(a, x)), Some(&(b, _))) if a > b => {
                    terms.push((*a, x.clone()));
                    left.next();
                }
                (Some(&(a, x)), None) => {
                    terms.push((*a, x.clone()));
                    left.next();
                }
                (_, Some(&(b, y))) => {
                    terms.push((*b, signed(y)));
                    right.next();
                }
                (None, None) => return Self { terms },
            }
        }
    }

    pub fn times(&self, other: &Self) -> Step<Self> {
        spend(1 + self.terms.len() * other.terms.len())?;
        if let Some(value) = self.as_constant() {
            return other.scaled(value);
        }
        if let Some(value) = other.as_constant() {
            return self.scaled(value);
        }
        let mut products = Vec::with_capacity(self.terms.len() * other.terms.len());
        for (a, x) in &self.terms {
            for (b, y) in &other.terms {
                products.push((a.times(b)?, x * y));
            }
        }
        Self::collect(products).bounded()
    }

    pub fn scaled(&self, factor: &IBig) -> Step<Self> {
        if *factor == IBig::ZERO {
            return Ok(Self::zero());
        }
        Self { terms: self.terms.iter().map(|(monomial, x)| (*monomial, x * factor)).collect() }.bounded()
    }

    pub fn times_monomial(&self, factor: &Monomial) -> Step<Self> {
        let terms: Step<Vec<_>> = self.terms.iter().map(|(m, x)| Ok((m.times(factor)?, x.clone()))).collect();
        Ok(Self { terms: terms? })
    }

    fn bounded(self) -> Step<Self> {
        use dashu_base::BitTest;
        let long = self.terms.iter().any(|(_, x)| x.bit_len() > MAXIMUM_BITS);
        if self.terms.len() > MAXIMUM_TERMS || long { Err(Exhausted) } else { Ok(self) }
    }

    pub fn power(&self, exponent: u32) -> Step<Self> {
        let mut result = Self::one();
        for _ in 0..exponent {
            result = result.times(self)?;
        }
        Ok(result)
    }

    /// The quotient if `divisor` divides without remainder.
    pub fn divided_by(&self, divisor: &Self) -> Step<Option<Self>> {
        let Some((leading_monomial, leading)) = divisor.terms.first() else { return Ok(None) };
        for generator in 0..GENERATORS {
            if divisor.degree(generator) > self.degree(generator) && !self.is_zero() {
                return Ok(None);
            }
        }
        let mut rest = self.clone();
        let mut quotient = Vec::new();
        while let Some((monomial, coefficient)) = rest.terms.first() {
            spend(1 + divisor.terms.len())?;
            let Some(monomial) = monomial.divided_by(leading_monomial) else { return Ok(None) };
            let (coefficient, remainder) = coefficient.div_rem(leading);
            if remainder != IBig::ZERO {
                return Ok(None);
            }
            let step = divisor.times_monomial(&monomial)?.scaled(&coefficient)?;
            rest = rest.minus(&step);
            quotient.push((monomial, coefficient));
        }
        Ok(Some(Self { terms: quotient }))
    }

    /// The positive greatest common divisor of the coefficients; 0 of the zero polynomial.
    pub fn integer_content(&self) -> IBig {
        let mut content = IBig::ZERO;
        for (_, coefficient) in &self.terms {
            content = if content == IBig::ZERO { coefficient.abs() } else { IBig::from((&content).gcd(coefficient)) };
            if content == IBig::ONE {
                break;
            }
        }
        content
    }

    /// The largest monomial that divides every term; 1 of the zero polynomial.
    pub fn monomial_content(&self) -> Monomial {
        let mut monomials = self.terms.iter().map(|(monomial, _)| *monomial);
        let first = monomials.next().unwrap_or_default();
        monomials.fold(first, |content, monomial| content.lowest(&monomial))
    }

    /// The polynomial without its integer content, leading coefficient positive, and what was taken out.
    pub fn primitive(&self) -> (IBig, Self) {
        if self.is_zero() {
            return (IBig::ONE, Self::zero());
        }
        let mut content = self.integer_content();
        if self.terms[0].1.sign() == Sign::Negative {
            content = -content;
        }
        let terms = self.terms.iter().map(|(monomial, x)| (*monomial, x / &content)).collect();
        (content, Self { terms })
    }

    pub fn without_monomial(&self, content: &Monomial) -> Self {
        let lowered = |monomial: &Monomial| monomial.divided_by(content).expect("the content divides every term");
        Self { terms: self.terms.iter().map(|(monomial, x)| (lowered(monomial), x.clone())).collect() }
    }

    /// Coefficients of the powers 0, 1, ... of one generator.
    pub fn coefficients(&self, generator: usize) -> Vec<Self> {
        let mut coefficients = vec![Vec::new(); usize::from(self.degree(generator)) + 1];
        for (monomial, x) in &self.terms {
            let mut rest = *monomial;
            rest.0[generator] = 0;
            // Terms of one power stay in falling order.
            coefficients[usize::from(monomial.0[generator])].push((rest, x.clone()));
        }
        coefficients.into_iter().map(|terms| Self { terms }).collect()
    }

    /// The coefficient of the highest power of one generator.
    pub fn leading_coefficient(&self, generator: usize) -> Self {
        self.coefficients(generator).pop().unwrap_or_default()
    }

    /// The partial derivative by one generator.
    pub fn derivative(&self, generator: usize) -> Self {
        let terms = self.terms.iter().filter(|(monomial, _)| monomial.0[generator] > 0).map(|(monomial, x)| {
            let exponent = monomial.0[generator];
            let mut lower = *monomial;
            lower.0[generator] -= 1;
            (lower, x * IBig::from(exponent))
        });
        Self::collect(terms)
    }

    /// The polynomial with `generator` replaced by `replacement`.
    pub fn substituted(&self, generator: usize, replacement: &Self) -> Step<Self> {
        let mut sum = Self::zero();
        for coefficient in self.coefficients(generator).iter().rev() {
            sum = sum.times(replacement)?.plus(coefficient);
        }
        Ok(sum)
    }

    /// The polynomial with `generator` replaced by numerator/denominator, times denominator^degree.
    pub fn substituted_fraction(&self, generator: usize, numerator: &Self, denominator: &Self) -> Step<Self> {
        let coefficients = self.coefficients(generator);
        let mut sum = Self::zero();
        let mut scale = Self::one();
        for coefficient in coefficients.iter().rev() {
            sum = sum.times(numerator)?.plus(&coefficient.times(&scale)?);
            scale = scale.times(denominator)?;
        }
        Ok(sum)
    }

    /// Whether all coefficients are positive, or all negative.
    pub fn common_sign(&self) -> Option<i8> {
        let positive = self.terms.iter().any(|(_, x)| x.is_positive());
        let negative = self.terms.iter().any(|(_, x)| x.is_negative());
        match (positive, negative) {
            (true, false) => Some(1),
            (false, true) => Some(-1),
            _ => None,
        }
    }
}
