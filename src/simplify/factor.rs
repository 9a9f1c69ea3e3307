//! Factors of polynomials over the integers.
//!
//! Complete for polynomials that are at most quadratic in some generator, which covers nearly everything that area
//! elements contain; beyond, even polynomials and rational roots are tried. A factor that is missed makes a printed form
//! longer, never wrong.

use super::gcd::{content, exact, square_free};
use super::meter::Step;
use super::polynomial::{Monomial, Polynomial};
use super::ring::Ring;
use dashu_base::{Abs, Gcd, SquareRootRem};
use dashu_int::{IBig, UBig};

/// A polynomial as `unit` times the product of `factor^exponent`; factors are primitive, their leading coefficients
/// positive, and no two are equal.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Factored {
    pub unit: IBig,
    pub factors: Vec<(Polynomial, u32)>,
}

/// Splits a polynomial that is not zero.
pub(super) fn factor(polynomial: &Polynomial) -> Step<Factored> {
    let (unit, primitive) = polynomial.primitive();
    let mut factors: Vec<(Polynomial, u32)> = Vec::new();
    for (part, exponent) in square_free(&primitive)? {
        for factor in irreducible(&part)? {
            match factors.iter_mut().find(|(known, _)| *known == factor) {
                Some((_, total)) => *total += exponent,
                None => factors.push((factor, exponent)),
            }
        }
    }
    Ok(Factored { unit, factors })
}

/// Factors of a square-free primitive polynomial.
fn irreducible(polynomial: &Polynomial) -> Step<Vec<Polynomial>> {
    let mut rest = polynomial.clone();
    let mut factors = Vec::new();
    for generator in polynomial.generators() {
        let inner = content(&rest, generator)?;
        if !inner.is_constant() {
            factors.extend(irreducible(&inner)?);
            rest = exact(&rest, &inner)?;
        }
    }
    if rest.is_constant() {
        return Ok(factors);
    }
    let generators = rest.generators();
    if generators.iter().any(|&g| rest.degree(g) == 1) {
        factors.push(rest);
        return Ok(factors);
    }
    if let Some(&generator) = generators.iter().find(|&&g| rest.degree(g) == 2) {
        match quadratic(&rest, generator)? {
            Some((left, right)) => {
                factors.extend(irreducible(&left)?);
                factors.extend(irreducible(&right)?);
            }
            None => factors.push(rest),
        }
        return Ok(factors);
    }
    for &generator in &generators {
        if let Some(half) = halved(&rest, generator) {
            let parts = irreducible(&half)?;
            if parts.len() > 1 || half.degree(generator) == 2 {
                for part in parts {
                    let doubled = doubled(&part, generator)?;
                    if doubled == rest {
                        factors.push(doubled);
                    } else {
                        factors.extend(irreducible(&doubled)?);
                    }
                }
                return Ok(factors);
            }
        }
    }
    if let [generator] = generators[..]
        && let Some(linear) = rational_root(&rest, generator)?
    {
        let quotient = exact(&rest, &linear)?;
        factors.push(linear);
        factors.extend(irreducible(&quotient)?);
        return Ok(factors);
    }
    factors.push(rest);
    Ok(factors)
}

/// The two factors of `a g^2 + b g + c` if its discriminant is a square.
fn quadratic(polynomial: &Polynomial, generator: usize) -> Step<Option<(Polynomial, Polynomial)>> {
    let coefficients = polynomial.coefficients(generator);
    let [c, b, a] = &coefficients[..] else { unreachable!("the degree is 2") };
    let discriminant = b.times(b)?.minus(&a.times(c)?.scaled(&IBig::from(4))?);
    let Some(root) = square_root(&discriminant)? else { return Ok(None) };
    let leading = Polynomial::generator(generator).times(&a.scaled(&IBig::from(2))?)?;
    let left = leading.plus(&b.plus(&root)).primitive().1;
    let left = exact(&left, &content(&left, generator)?)?;
    let right = exact(polynomial, &left)?;
    Ok(Some((left, right)))
}

/// The polynomial whose square is the given one, if there is one; the zero polynomial has itself.
pub(super) fn square_root(polynomial: &Polynomial) -> Step<Option<Polynomial>> {
    if polynomial.is_zero() {
        return Ok(Some(Polynomial::zero()));
    }
    let (unit, primitive) = polynomial.primitive();
    let Some(mut root) = integer_root(&unit).map(Polynomial::constant) else { return Ok(None) };
    if primitive.terms().len() > 1 && !may_be_square(&primitive) {
        return Ok(None);
    }
    for (factor, exponent) in square_free(&primitive)? {
        if exponent % 2 == 1 {
            return Ok(None);
        }
        root = root.times(&factor.power(exponent / 2)?)?;
    }
    Ok(Some(root))
}

/// A square has even degrees and a square as its leading coefficient.
fn may_be_square(polynomial: &Polynomial) -> bool {
    polynomial.generators().iter().all(|&g| polynomial.degree(g).is_multiple_of(2))
        && integer_root(&polynomial.leading()).is_some()
}

/// The square root of a positive integer that is a square.
pub(super) fn integer_root(value: &IBig) -> Option<IBig> {
    let magnitude = UBig::try_from(value.clone()).ok()?;
    let (root, rest) = magnitude.sqrt_rem();
    (rest == UBig::ZERO).then(|| IBig::from(root))
}

/// A positive integer as `root^2 * rest`, as far as small primes and a final square show.
pub(super) fn split_square(value: &IBig) -> (IBig, IBig) {
    let mut root = IBig::ONE;
    let mut rest = value.clone();
    if let Some(whole) = integer_root(&rest) {
        return (whole, IBig::ONE);
    }
    for prime in [2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47] {
        let square = IBig::from(prime * prime);
        while (&rest % &square) == IBig::ZERO {
            rest = &rest / &square;
            root *= IBig::from(prime);
        }
    }
    for prime in [2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47] {
        let prime = IBig::from(prime);
        if (&rest % &prime) == IBig::ZERO
            && let Some(whole) = integer_root(&(&rest / &prime))
        {
            return (root * whole, prime);
        }
    }
    (root, rest)
}

/// p with g for g^2, if p has even powers of g only.
fn halved(polynomial: &Polynomial, generator: usize) -> Option<Polynomial> {
    let even = polynomial.terms().iter().all(|(monomial, _)| monomial.0[generator] % 2 == 0);
    even.then(|| {
        Polynomial::collect(polynomial.terms().iter().map(|(monomial, x)| {
            let mut half = *monomial;
            half.0[generator] /= 2;
            (half, x.clone())
        }))
    })
}

fn doubled(polynomial: &Polynomial, generator: usize) -> Step<Polynomial> {
    polynomial.substituted(generator, &Polynomial::term(Monomial::generator(generator, 2), IBig::ONE))
}

/// A factor `q g - p` of a polynomial in one generator.
fn rational_root(polynomial: &Polynomial, generator: usize) -> Step<Option<Polynomial>> {
    let coefficients = polynomial.coefficients(generator);
    let number = |place: Option<&Polynomial>| place.and_then(Polynomial::as_constant).cloned();
    let (Some(last), Some(first)) = (number(coefficients.first()), number(coefficients.last())) else {
        return Ok(None);
    };
    for p in divisors(&last) {
        for q in divisors(&first) {
            if IBig::from((&p).gcd(&q)) != IBig::ONE {
                continue;
            }
            for p in [p.clone(), -p.clone()] {
                let linear = Polynomial::generator(generator).scaled(&q)?.minus(&Polynomial::constant(p));
                if polynomial.divided_by(&linear)?.is_some() {
                    return Ok(Some(linear));
                }
            }
        }
    }
    Ok(None)
}

/// Positive divisors up to 1000 of a number that is not 0.
fn divisors(value: &IBig) -> Vec<IBig> {
    let value = value.abs();
    (1..=1000).map(IBig::from).filter(|divisor| (&value % divisor) == IBig::ZERO).collect()
}

impl Ring {
    /// Factors in each direction of the pairs, the shortest first: 1 - cos^2 is sin^2 in all of them.
    pub fn factorings(&self, polynomial: &Polynomial) -> Step<Vec<Factored>> {
        let mut found: Vec<(usize, Factored)> = Vec::new();
        for directions in self.directions(&[polynomial]) {
            let mut factored = factor(&self.reduced(polynomial, directions)?)?;
            self.complete_squares(&mut factored);
            let size = factored.factors.iter().map(|(factor, _)| factor.terms().len()).sum();
            if !found.iter().any(|(_, known)| *known == factored) {
                found.push((size, factored));
            }
        }
        found.sort_by_key(|(size, _)| *size);
        Ok(found.into_iter().map(|(_, factored)| factored).collect())
    }

    /// The shortest of [`Ring::factorings`].
    pub fn factored(&self, polynomial: &Polynomial) -> Step<Factored> {
        Ok(self.factorings(polynomial)?.into_iter().next().expect("one direction at least"))
    }

    /// (1 - c)(1 + c) = s^2 and (1 - s)(1 + s) = c^2; cosh^2 - 1 = sinh^2 and sinh^2 + 1 = cosh^2.
    fn complete_squares(&self, factored: &mut Factored) {
        let one = Polynomial::one();
        for pair in self.pairs() {
            for (own, other) in [(pair.cosine, pair.sine), (pair.sine, pair.cosine)] {
                let (generator, root) = (Polynomial::generator(own), Polynomial::generator(other));
                if pair.hyperbolic && own == pair.sine {
                    let square = Polynomial::term(Monomial::generator(own, 2), IBig::ONE).plus(&one);
                    if let Some(exponent) = factored.take(&square) {
                        factored.include(root, 2 * exponent);
                    }
                    continue;
                }
                let (minus, plus) = (generator.minus(&one), generator.plus(&one));
                if !factored.has(&minus) || !factored.has(&plus) {
                    continue;
                }
                let below = factored.take(&minus).unwrap_or(0);
                let above = factored.take(&plus).unwrap_or(0);
                let shared = below.min(above);
                factored.include(minus, below - shared);
                factored.include(plus, above - shared);
                factored.include(root, 2 * shared);
                // c^2 - 1 is -s^2 for the circle, s^2 for the hyperbola.
                if !pair.hyperbolic && shared % 2 == 1 {
                    factored.unit = -factored.unit.clone();
                }
            }
        }
    }
}

impl Factored {
    fn has(&self, factor: &Polynomial) -> bool {
        self.factors.iter().any(|(known, _)| known == factor)
    }

    fn take(&mut self, factor: &Polynomial) -> Option<u32> {
        let place = self.factors.iter().position(|(known, _)| known == factor)?;
        Some(self.factors.remove(place).1)
    }

    fn include(&mut self, factor: Polynomial, exponent: u32) {
        if exponent == 0 {
            return;
        }
        match self.factors.iter_mut().find(|(known, _)| *known == factor) {
            Some((_, total)) => *total += exponent,
            None => self.factors.push((factor, exponent)),
        }
    }
}
