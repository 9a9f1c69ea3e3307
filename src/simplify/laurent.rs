//! Sums whose terms may have negative exponents: what is written between fraction bars.

use super::meter::{Exhausted, Step};
use super::polynomial::{GENERATORS, Monomial, Polynomial};
use super::product::ratio;
use dashu_base::Gcd;
use dashu_int::IBig;
use dashu_ratio::RBig;
use rustc_hash::FxHashMap;

/// Exponents of the generators, below the fraction bar negative.
pub(super) type Exponents = [i8; GENERATORS];

/// A sum of rational multiples of monomials with exponents of either sign; sorted, no zero coefficient.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub(super) struct Laurent {
    pub terms: Vec<(Exponents, RBig)>,
}

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

    pub fn collect(terms: impl IntoIterator<Item = (Exponents, RBig)>) -> Self {
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
    pub fn content(&self) -> (RBig, Exponents, Polynomial) {
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

    /// Whether a generator stands in it.
    pub fn uses(&self, generator: usize) -> bool {
        self.terms.iter().any(|(exponents, _)| exponents[generator] != 0)
    }

    pub fn len(&self) -> usize {
        self.terms.len()
    }
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
