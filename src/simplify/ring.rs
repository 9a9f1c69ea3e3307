//! The ring that closed forms live in: polynomials in generators with known relations.
//!
//! A generator is a symbol, a sine, an exponential, a root, or any other function value that stands for itself. Sines
//! and cosines of commensurate arguments become polynomials in one pair (s, c) with s^2 + c^2 = 1, likewise sinh and cosh
//! with c^2 - s^2 = 1; a root q of index n has q^n equal to its radicand. The relations are true, so a polynomial that reduces to
//! zero is zero as a function; the converse needs the generators to be otherwise independent, which they nearly always are.

use super::fraction::Fraction;
use super::meter::{Exhausted, Step};
use super::polynomial::{GENERATORS, Polynomial};
use crate::expression::{Exact, ExpressionId, Function, Graph, SymbolId};
use dashu_int::IBig;

/// What a generator stands for.
#[derive(Clone, PartialEq, Debug)]
pub(super) enum Kind {
    Symbol(SymbolId),
    Pi,
    /// A number of the sheet that acts as a named constant.
    Literal(Exact),
    /// The sine of an angle; its cosine is the next generator.
    Sin(AngleId),
    Cos(AngleId),
    /// The hyperbolic sine of an angle; its hyperbolic cosine is the next generator.
    Sinh(AngleId),
    Cosh(AngleId),
    Exp(AngleId),
    /// The principal root of given index of a polynomial.
    Root(u8, Polynomial),
    /// Any other function of one argument.
    Call(Function, Box<Fraction>),
    /// Any other value.
    Opaque(ExpressionId),
}

/// Index of an argument in [`Ring::angles`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub(super) struct AngleId(pub usize);

/// The generators of one simplification and their relations.
#[derive(Clone, Debug, Default)]
pub(super) struct Ring {
    pub generators: Vec<Kind>,
    /// Base arguments of sines, hyperbolic sines and exponentials.
    pub angles: Vec<Fraction>,
}

/// For each pair (s, c), in order, whether s stays and c^2 is replaced; otherwise c stays and s^2 is replaced.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug, Default)]
pub(super) struct Directions(pub u32);

impl Directions {
    pub fn keeps_sine(self, pair: usize) -> bool {
        self.0 >> pair & 1 == 1
    }
}

/// A pair (s, c) = (sin, cos) or (sinh, cosh).
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Pair {
    pub sine: usize,
    pub cosine: usize,
    pub hyperbolic: bool,
    pub angle: AngleId,
}

impl Ring {
    /// The generator of a kind, added if it is new.
    pub fn generator(&mut self, kind: Kind) -> Step<usize> {
        if let Some(known) = self.generators.iter().position(|known| *known == kind) {
            return Ok(known);
        }
        // A sine is always followed by its cosine.
        let room = if matches!(kind, Kind::Sin(_) | Kind::Sinh(_)) { 2 } else { 1 };
        if self.generators.len() + room > GENERATORS {
            return Err(Exhausted);
        }
        self.generators.push(kind);
        Ok(self.generators.len() - 1)
    }

    /// The pairs (s, c), in order.
    pub fn pairs(&self) -> impl Iterator<Item = Pair> + '_ {
        let pair = |(sine, kind): (usize, &Kind)| match kind {
            Kind::Sin(angle) => Some(Pair { sine, cosine: sine + 1, hyperbolic: false, angle: *angle }),
            Kind::Sinh(angle) => Some(Pair { sine, cosine: sine + 1, hyperbolic: true, angle: *angle }),
            _ => None,
        };
        self.generators.iter().enumerate().filter_map(pair)
    }

    /// The pair of an argument, added if it is new.
    pub fn pair_of(&mut self, argument: Fraction, hyperbolic: bool) -> Step<Pair> {
        let angle = match self.angles.iter().position(|known| *known == argument) {
            Some(known) => AngleId(known),
            None => {
                self.angles.push(argument);
                AngleId(self.angles.len() - 1)
            }
        };
        let (sine, cosine) =
            if hyperbolic { (Kind::Sinh(angle), Kind::Cosh(angle)) } else { (Kind::Sin(angle), Kind::Cos(angle)) };
        let sine = self.generator(sine)?;
        let cosine = self.generator(cosine)?;
        Ok(Pair { sine, cosine, hyperbolic, angle })
    }

    /// The pair of an argument; `None` where it is new and there is no room for it.
    pub fn pair_if_room(&mut self, argument: Fraction, hyperbolic: bool) -> Step<Option<Pair>> {
        let known = self.pairs().find(|pair| pair.hyperbolic == hyperbolic && self.angles[pair.angle.0] == argument);
        match known {
            Some(pair) => Ok(Some(pair)),
            None if self.generators.len() + 2 > GENERATORS => Ok(None),
            None => self.pair_of(argument, hyperbolic).map(Some),
        }
    }

    /// All directions for the pairs that polynomials use; the first replaces every s^2.
    pub fn directions(&self, polynomials: &[&Polynomial]) -> Vec<Directions> {
        let used: Vec<usize> = self
            .pairs()
            .enumerate()
            .filter(|(_, pair)| polynomials.iter().any(|p| p.degree(pair.sine) > 1 || p.degree(pair.cosine) > 1))
            .map(|(place, _)| place)
            .take(4)
            .collect();
        (0..1u32 << used.len())
            .map(|choice| Directions(used.iter().enumerate().map(|(bit, place)| (choice >> bit & 1) << place).sum()))
            .collect()
    }

    /// The normal form for given directions: roots below their index, one generator of each pair at most linear.
    pub fn reduced(&self, polynomial: &Polynomial, directions: Directions) -> Step<Polynomial> {
        let mut result = self.without_root_powers(polynomial)?;
        for (place, pair) in self.pairs().enumerate() {
            let keeps_sine = directions.keeps_sine(place);
            let (gone, kept) = if keeps_sine { (pair.cosine, pair.sine) } else { (pair.sine, pair.cosine) };
            if result.degree(gone) < 2 {
                continue;
            }
            let square = Polynomial::generator(kept).power(2)?;
            let one = Polynomial::one();
            // s^2 = 1 - c^2, c^2 = 1 - s^2; sinh^2 = cosh^2 - 1, cosh^2 = 1 + sinh^2.
            let replacement = match (pair.hyperbolic, keeps_sine) {
                (false, _) => one.minus(&square),
                (true, false) => square.minus(&one),
                (true, true) => one.plus(&square),
            };
            result = replace_power(&result, gone, 2, &replacement)?;
        }
        Ok(result)
    }

    /// The normal form that keeps cosines.
    pub fn canonical(&self, polynomial: &Polynomial) -> Step<Polynomial> {
        self.reduced(polynomial, Directions::default())
    }

    /// The product in normal form.
    pub fn product(&self, a: &Polynomial, b: &Polynomial) -> Step<Polynomial> {
        self.canonical(&a.times(b)?)
    }

    fn without_root_powers(&self, polynomial: &Polynomial) -> Step<Polynomial> {
        let mut result = polynomial.clone();
        // Radicands contain earlier generators only.
        for (place, kind) in self.generators.iter().enumerate().rev() {
            if let Kind::Root(index, radicand) = kind
                && result.degree(place) >= *index
            {
                result = replace_power(&result, place, *index, radicand)?;
            }
        }
        Ok(result)
    }

    /// The derivative by a symbol; `None` where a generator is opaque and may depend on it.
    pub fn derivative(&self, fraction: &Fraction, symbol: SymbolId, graph: &Graph) -> Step<Option<Fraction>> {
        // (n/d)' = (n' - n sum of e f'/f)/d
        let Some(mut sum) = self.polynomial_derivative(&fraction.numerator, symbol, graph)? else { return Ok(None) };
        for (factor, exponent) in &fraction.denominator {
            let Some(slope) = self.polynomial_derivative(factor, symbol, graph)? else { return Ok(None) };
            if slope.is_zero() {
                continue;
            }
            let rate = self.multiply(&slope, &Fraction::whole(fraction.numerator.scaled(&IBig::from(*exponent))?))?;
            let Some(rate) = self.divide(&rate, &Fraction::whole(factor.clone()))? else { return Ok(None) };
            sum = self.subtract(&sum, &rate)?;
        }
        let below = Fraction { numerator: Polynomial::one(), ..fraction.clone() };
        Ok(Some(self.multiply(&sum, &below)?))
    }

    fn polynomial_derivative(
        &self,
        polynomial: &Polynomial,
        symbol: SymbolId,
        graph: &Graph,
    ) -> Step<Option<Fraction>> {
        let mut sum = Fraction::zero();
        for generator in polynomial.generators() {
            if !self.depends_on(generator, symbol, graph) {
                continue;
            }
            let Some(slope) = self.generator_derivative(generator, symbol, graph)? else { return Ok(None) };
            let term = self.multiply(&Fraction::whole(polynomial.derivative(generator)), &slope)?;
            sum = self.add(&sum, &term)?;
        }
        Ok(Some(sum))
    }

    fn generator_derivative(&self, generator: usize, symbol: SymbolId, graph: &Graph) -> Step<Option<Fraction>> {
        let whole = |generator| Fraction::whole(Polynomial::generator(generator));
        let (outer, angle) = match &self.generators[generator] {
            Kind::Symbol(own) => {
                return Ok(Some(if *own == symbol { Fraction::whole(Polynomial::one()) } else { Fraction::zero() }));
            }
            Kind::Pi | Kind::Literal(_) => return Ok(Some(Fraction::zero())),
            Kind::Sin(angle) | Kind::Sinh(angle) => (whole(generator + 1), angle),
            Kind::Cos(angle) => (whole(generator - 1).negated(), angle),
            Kind::Cosh(angle) => (whole(generator - 1), angle),
            Kind::Exp(angle) => (whole(generator), angle),
            Kind::Root(index, radicand) => {
                // q' = r' q/(n r)
                let Some(slope) = self.polynomial_derivative(radicand, symbol, graph)? else { return Ok(None) };
                let below = Fraction::whole(radicand.scaled(&IBig::from(*index))?);
                return self.divide(&self.multiply(&slope, &whole(generator))?, &below);
            }
            Kind::Call(..) | Kind::Opaque(_) => return Ok(None),
        };
        Ok(match self.derivative(&self.angles[angle.0], symbol, graph)? {
            Some(inner) => Some(self.multiply(&outer, &inner)?),
            None => None,
        })
    }

    /// Whether a generator's value depends on a symbol.
    pub fn depends_on(&self, generator: usize, symbol: SymbolId, graph: &Graph) -> bool {
        let in_polynomial = |p: &Polynomial| p.generators().into_iter().any(|g| self.depends_on(g, symbol, graph));
        match &self.generators[generator] {
            Kind::Symbol(own) => *own == symbol,
            Kind::Pi | Kind::Literal(_) => false,
            Kind::Sin(angle) | Kind::Cos(angle) | Kind::Sinh(angle) | Kind::Cosh(angle) | Kind::Exp(angle) => {
                let argument = &self.angles[angle.0];
                in_polynomial(&argument.numerator) || argument.denominator.iter().any(|(p, _)| in_polynomial(p))
            }
            Kind::Call(_, argument) => {
                in_polynomial(&argument.numerator) || argument.denominator.iter().any(|(p, _)| in_polynomial(p))
            }
            Kind::Root(_, radicand) => in_polynomial(radicand),
            Kind::Opaque(expression) => graph.depends_on(*expression, symbol),
        }
    }
}

/// Replaces `generator^index` as often as it divides.
fn replace_power(polynomial: &Polynomial, generator: usize, index: u8, replacement: &Polynomial) -> Step<Polynomial> {
    let coefficients = polynomial.coefficients(generator);
    let mut sum = Polynomial::zero();
    let mut power = Polynomial::one();
    for (whole, block) in coefficients.chunks(usize::from(index)).enumerate() {
        if whole > 0 {
            power = power.times(replacement)?;
        }
        for (rest, coefficient) in block.iter().enumerate() {
            let low = super::polynomial::Monomial::generator(generator, rest as u8);
            sum = sum.plus(&coefficient.times(&power)?.times_monomial(&low)?);
        }
    }
    Ok(sum)
}
