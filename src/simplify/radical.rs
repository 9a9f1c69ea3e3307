//! Squares that show only with the roots among the generators: P x^2 + 2 sqrt(P Q) x + Q = (sqrt(P) x + sqrt(Q))^2.
//!
//! This is what the area element of a tube is made of: the speed of its curve and its curvature are roots, and dA is
//! linear in them.

use super::factor::square_root;
use super::meter::{Step, spend};
use super::polynomial::Polynomial;
use super::ring::{Kind, Ring};
use dashu_int::IBig;

/// A sum whose square is known: `lead + rest`. The product with `lead - rest` has fewer roots.
pub(super) struct Binomial {
    pub lead: Polynomial,
    pub rest: Polynomial,
}

impl Binomial {
    pub fn sum(&self) -> Polynomial {
        self.lead.plus(&self.rest)
    }

    pub fn conjugate(&self) -> Polynomial {
        self.lead.minus(&self.rest)
    }
}

/// The binomial whose square a polynomial is, if it is quadratic in some generator and has roots among its coefficients.
pub(super) fn binomial_root(ring: &Ring, polynomial: &Polynomial) -> Step<Option<Binomial>> {
    let is_root = |g: usize| matches!(ring.generators[g], Kind::Root(2, _));
    if !polynomial.generators().into_iter().any(is_root) {
        return Ok(None);
    }
    for directions in ring.directions(&[polynomial]) {
        let reduced = ring.reduced(polynomial, directions)?;
        for generator in reduced.generators() {
            if reduced.degree(generator) != 2 || is_root(generator) {
                continue;
            }
            spend(reduced.terms().len())?;
            let coefficients = reduced.coefficients(generator);
            let [last, middle, first] = &coefficients[..] else { continue };
            if last.is_zero() || middle.is_zero() {
                continue;
            }
            let (Some(first), Some(last)) = (root_in_ring(ring, first)?, root_in_ring(ring, last)?) else { continue };
            let double = ring.canonical(&first.times(&last)?.scaled(&IBig::from(2))?)?;
            let middle = ring.canonical(middle)?;
            let lead = first.times(&Polynomial::generator(generator))?;
            if double == middle {
                return Ok(Some(Binomial { lead, rest: last }));
            }
            if double.negated() == middle {
                return Ok(Some(Binomial { lead: lead.negated(), rest: last }));
            }
        }
    }
    Ok(None)
}

/// A polynomial whose square is the given one in the ring: radicands that divide it give their roots.
pub(super) fn root_in_ring(ring: &Ring, polynomial: &Polynomial) -> Step<Option<Polynomial>> {
    let mut rest = ring.canonical(polynomial)?;
    let mut root = Polynomial::one();
    for (place, kind) in ring.generators.iter().enumerate() {
        let Kind::Root(2, radicand) = kind else { continue };
        let mut exponent = 0;
        while let Some(quotient) = ring.quotient(&rest, radicand)? {
            rest = quotient;
            exponent += 1;
        }
        root = ring.product(&root, &Polynomial::generator(place).power(exponent)?)?;
    }
    for directions in ring.directions(&[&rest]) {
        if let Some(square) = square_root(&ring.reduced(&rest, directions)?)? {
            return Ok(Some(ring.product(&root, &square)?));
        }
    }
    Ok(None)
}
