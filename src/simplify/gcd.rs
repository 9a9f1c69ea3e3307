//! Greatest common divisors and square-free parts of polynomials.
//!
//! Recursive: a polynomial is taken as one in a main generator whose coefficients are polynomials in the others. The
//! common divisor of two primitive ones comes from their primitive remainder sequence (Knuth, The Art of Computer
//! Programming 2, 4.6.1); a look at images modulo a prime ends the common case of coprime polynomials at once.

use super::meter::{Step, spend};
use super::polynomial::{GENERATORS, Monomial, Polynomial};
use dashu_base::Gcd;
use dashu_int::IBig;

/// The greatest common divisor, leading coefficient positive; of 0 and b, b.
pub(super) fn gcd(a: &Polynomial, b: &Polynomial) -> Step<Polynomial> {
    if a.is_zero() {
        return Ok(b.primitive_sign());
    }
    if b.is_zero() {
        return Ok(a.primitive_sign());
    }
    let integers = IBig::from(a.integer_content().gcd(&b.integer_content()));
    let (monomial_a, monomial_b) = (a.monomial_content(), b.monomial_content());
    let mut shared = Monomial::ONE;
    for generator in 0..GENERATORS {
        shared.0[generator] = monomial_a.0[generator].min(monomial_b.0[generator]);
    }
    let a = a.without_monomial(&monomial_a).primitive().1;
    let b = b.without_monomial(&monomial_b).primitive().1;
    gcd_primitive(a, b)?.times(&Polynomial::term(shared, integers))
}

/// The common divisor of two polynomials without integer and monomial content.
fn gcd_primitive(mut a: Polynomial, mut b: Polynomial) -> Step<Polynomial> {
    if a == b {
        return Ok(a);
    }
    // A generator that only one of them has cannot be in the divisor: its coefficients take the polynomial's place.
    loop {
        if a.is_constant() || b.is_constant() {
            return Ok(Polynomial::one());
        }
        if let Some(generator) = (0..GENERATORS).find(|&g| a.uses(g) && !b.uses(g)) {
            a = content(&a, generator)?;
        } else if let Some(generator) = (0..GENERATORS).find(|&g| b.uses(g) && !a.uses(g)) {
            b = content(&b, generator)?;
        } else {
            break;
        }
    }
    let main = a.generators().into_iter().min_by_key(|&g| a.degree(g).min(b.degree(g))).expect("not constant");
    if coprime_images(&a, &b, main) {
        return gcd(&content(&a, main)?, &content(&b, main)?);
    }
    for (small, large) in [(&a, &b), (&b, &a)] {
        if large.divided_by(small)?.is_some() {
            return Ok(small.primitive_sign());
        }
    }
    let (content_a, content_b) = (content(&a, main)?, content(&b, main)?);
    let shared = gcd(&content_a, &content_b)?;
    let mut high = exact(&a, &content_a)?;
    let mut low = exact(&b, &content_b)?;
    if high.degree(main) < low.degree(main) {
        std::mem::swap(&mut high, &mut low);
    }
    while low.uses(main) {
        let rest = pseudo_remainder(&high, &low, main)?;
        if rest.is_zero() {
            return Ok(low.times(&shared)?.primitive_sign());
        }
        let next = exact(&rest, &content(&rest, main)?)?;
        high = low;
        low = next;
    }
    Ok(shared.primitive_sign())
}

/// The common divisor of the coefficients of the powers of `generator`.
pub(super) fn content(polynomial: &Polynomial, generator: usize) -> Step<Polynomial> {
    let mut divisor = Polynomial::zero();
    let mut coefficients = polynomial.coefficients(generator);
    coefficients.sort_by_key(|coefficient| coefficient.terms().len());
    for coefficient in coefficients.iter().filter(|coefficient| !coefficient.is_zero()) {
        divisor = gcd(&divisor, coefficient)?;
        if divisor.is_one() {
            break;
        }
    }
    Ok(divisor)
}

/// The quotient of a division that is known to be exact.
pub(super) fn exact(dividend: &Polynomial, divisor: &Polynomial) -> Step<Polynomial> {
    Ok(dividend.divided_by(divisor)?.expect("the divisor was computed as one"))
}

impl Polynomial {
    /// The polynomial or its negative, leading coefficient positive.
    pub fn primitive_sign(&self) -> Polynomial {
        if self.leading() < IBig::ZERO { self.negated() } else { self.clone() }
    }
}

/// The remainder of `high` times a power of the leading coefficient of `low`.
fn pseudo_remainder(high: &Polynomial, low: &Polynomial, main: usize) -> Step<Polynomial> {
    let degree = low.degree(main);
    let leading = low.leading_coefficient(main);
    let mut rest = high.clone();
    while !rest.is_zero() && rest.degree(main) >= degree {
        spend(1)?;
        let shift = Monomial::generator(main, rest.degree(main) - degree);
        let top = rest.leading_coefficient(main);
        rest = rest.times(&leading)?.minus(&low.times(&top)?.times_monomial(&shift)?);
    }
    Ok(rest)
}

/// A prime below 2^31: products of residues fit in 64 bits.
const PRIME: u64 = 2_147_483_629;

/// Whether images of two polynomials, all generators but `main` set to numbers modulo a prime, have no common divisor.
/// Then neither has the pair a common divisor that uses `main`: the degree of a divisor can only drop where its leading
/// coefficient vanishes, and that divides a leading coefficient that was seen not to vanish.
fn coprime_images(a: &Polynomial, b: &Polynomial, main: usize) -> bool {
    let (mut high, mut low) = (image(a, main), image(b, main));
    if *high.last().unwrap_or(&0) == 0 || *low.last().unwrap_or(&0) == 0 {
        return false;
    }
    while low.len() > 1 {
        let rest = remainder(high, &low);
        high = low;
        low = rest;
    }
    !low.is_empty()
}

/// Coefficients of the image in `main`, lowest first; the highest may be 0.
fn image(polynomial: &Polynomial, main: usize) -> Vec<u64> {
    let mut coefficients = vec![0; usize::from(polynomial.degree(main)) + 1];
    for (monomial, x) in polynomial.terms() {
        let mut value = residue(x);
        for (generator, &exponent) in monomial.0.iter().enumerate() {
            if generator != main {
                let base = 1_000_003 + 7_919 * generator as u64;
                for _ in 0..exponent {
                    value = value * base % PRIME;
                }
            }
        }
        let place = &mut coefficients[usize::from(monomial.0[main])];
        *place = (*place + value) % PRIME;
    }
    coefficients
}

fn residue(x: &IBig) -> u64 {
    let rest = x % IBig::from(PRIME);
    let rest = i64::try_from(rest).expect("a residue is small");
    rest.rem_euclid(PRIME as i64) as u64
}

/// The remainder modulo the prime, without leading zeros; `low` has a leading coefficient that is not 0.
fn remainder(mut high: Vec<u64>, low: &[u64]) -> Vec<u64> {
    let inverse = inverse_modulo(low[low.len() - 1]);
    while high.len() >= low.len() {
        let factor = high[high.len() - 1] * inverse % PRIME;
        let shift = high.len() - low.len();
        for (place, &x) in low.iter().enumerate() {
            let taken = factor * x % PRIME;
            high[shift + place] = (high[shift + place] + PRIME - taken) % PRIME;
        }
        while high.last() == Some(&0) {
            high.pop();
        }
    }
    high
}

/// x^(p-2), by Fermat's little theorem the inverse of x.
fn inverse_modulo(x: u64) -> u64 {
    let (mut result, mut base, mut exponent) = (1, x, PRIME - 2);
    while exponent > 0 {
        if exponent & 1 == 1 {
            result = result * base % PRIME;
        }
        base = base * base % PRIME;
        exponent >>= 1;
    }
    result
}

/// Square-free factors with their exponents: the product of `factor^exponent` is the primitive part. Yun's method in
/// one generator after another.
pub(super) fn square_free(polynomial: &Polynomial) -> Step<Vec<(Polynomial, u32)>> {
    let mut factors = Vec::new();
    let monomial = polynomial.monomial_content();
    for (generator, &exponent) in monomial.0.iter().enumerate().filter(|(_, exponent)| **exponent > 0) {
        factors.push((Polynomial::generator(generator), u32::from(exponent)));
    }
    let mut rest = polynomial.without_monomial(&monomial).primitive().1;
    while let Some(main) = rest.generators().into_iter().min_by_key(|&g| rest.degree(g)) {
        let inner = content(&rest, main)?;
        let mut part = exact(&rest, &inner)?;
        rest = inner;
        // Yun: with p = prod f_k^k, g = gcd(p, p'), the f_k come out one after the other.
        let derivative = part.derivative(main);
        let repeated = gcd(&part, &derivative)?;
        if repeated.is_constant() {
            factors.push((part, 1));
            continue;
        }
        let mut square_free = exact(&part, &repeated)?;
        let mut rate = exact(&derivative, &repeated)?.minus(&square_free.derivative(main));
        let mut exponent = 1;
        while square_free.uses(main) {
            spend(1)?;
            let factor = gcd(&square_free, &rate)?;
            if !factor.is_constant() {
                factors.push((factor.clone(), exponent));
            }
            square_free = exact(&square_free, &factor)?;
            rate = exact(&rate, &factor)?.minus(&square_free.derivative(main));
            exponent += 1;
            part = square_free.clone();
        }
        debug_assert!(part.is_constant());
    }
    Ok(factors)
}
