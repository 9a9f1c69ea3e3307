//! Proof that a polynomial keeps its sign on the region, under the ranges of the parameters and the assumptions.
//!
//! Each generator is written as a rational function of a variable that runs over [0, inf): x in [a, b] is
//! (a + b t)/(1 + t), x > a is a + t, a sine is put into the box of its values. If the numerator that results has
//! coefficients of one sign only, the polynomial has that sign (the criterion of Polya and Bernstein; sufficient, not
//! necessary). Exact arithmetic throughout. Directions of the pairs, factors, and halves of the region are tried in turn.

use super::boxes::Boxes;
use super::factor::factor;
use super::fraction::Fraction;
use super::meter::Step;
use super::polynomial::{GENERATORS, Monomial, Polynomial};
use super::ring::{AngleId, Kind, Ring};
use crate::expression::{Exact, Graph};
use dashu_int::IBig;
use dashu_ratio::RBig;
use std::cell::OnceCell;
use std::f64::consts::PI;

/// Bounds of a symbol, as elements of the ring; several lower or upper ones may be known.
#[derive(Clone, Debug, Default)]
pub(super) struct Range {
    pub lower: Vec<Fraction>,
    pub upper: Vec<Fraction>,
}

/// What is known of the symbols.
#[derive(Clone, Debug, Default)]
pub(super) struct Ranges {
    /// By generator; a generator that is missing is any real number.
    pub symbols: Vec<(usize, Range)>,
    /// The generators that are halved when a first attempt fails: the variables of the patch.
    pub variables: Vec<usize>,
}

/// How often the region is halved in each variable.
const HALVINGS: u32 = 3;

/// The largest number of choices between several bounds of one symbol.
const CHOICES: usize = 12;

impl Ranges {
    pub fn of(&self, generator: usize) -> Option<&Range> {
        self.symbols.iter().find(|(own, _)| *own == generator).map(|(_, range)| range)
    }

    pub fn entry(&mut self, generator: usize) -> &mut Range {
        let place = match self.symbols.iter().position(|(own, _)| *own == generator) {
            Some(place) => place,
            None => {
                self.symbols.push((generator, Range::default()));
                self.symbols.len() - 1
            }
        };
        &mut self.symbols[place].1
    }
}

/// 1 if the polynomial is proved nonnegative, -1 if nonpositive.
pub(super) fn sign(ring: &Ring, graph: &Graph, ranges: &Ranges, polynomial: &Polynomial) -> Option<i8> {
    Prover::new(ring, graph, ranges, false).sign(polynomial, HALVINGS).ok().flatten()
}

/// Like [`sign`], and the polynomial is proved not to vanish inside the region.
pub(super) fn strict_sign(ring: &Ring, graph: &Graph, ranges: &Ranges, polynomial: &Polynomial) -> Option<i8> {
    Prover::new(ring, graph, ranges, true).sign(polynomial, HALVINGS).ok().flatten()
}

struct Prover<'a> {
    ring: &'a Ring,
    graph: &'a Graph,
    ranges: &'a Ranges,
    /// Whether zeros inside the region must be excluded. Variables and parameters are inside their ranges for t > 0; the
    /// boxes of functions are widened instead, because a function takes its extreme values inside.
    strict: bool,
    boxes: OnceCell<Boxes<'a>>,
}

/// How much a strict proof widens boxes.
const MARGIN: (i64, u64) = (1, 1_000);

/// Pairs, by their sines, whose generators stand for the functions of twice the angle in a polynomial.
type Doubled = Vec<usize>;

/// A generator as numerator/denominator in the variable that takes its place; the denominator is positive.
struct Cover {
    numerator: Polynomial,
    denominator: Polynomial,
}

impl<'a> Prover<'a> {
    fn new(ring: &'a Ring, graph: &'a Graph, ranges: &'a Ranges, strict: bool) -> Self {
        Self { ring, graph, ranges, strict, boxes: OnceCell::new() }
    }

    /// The ranges of the generators, where they are bounded by numbers.
    fn boxes(&self) -> &Boxes<'a> {
        self.boxes.get_or_init(|| Boxes::new(self.ring, self.graph, self.ranges))
    }

    fn sign(&self, polynomial: &Polynomial, halvings: u32) -> Step<Option<i8>> {
        let canonical = self.ring.canonical(polynomial)?;
        if let Some(sign) = self.at_once(&canonical)? {
            return Ok(Some(sign));
        }
        let factored = factor(&canonical)?;
        if factored.factors.len() > 1 || factored.factors.iter().any(|(_, exponent)| *exponent > 1) {
            let mut sign = if factored.unit < IBig::ZERO { -1 } else { 1 };
            let mut complete = true;
            for (factor, _) in factored.factors.iter().filter(|(_, exponent)| exponent % 2 == 1) {
                match self.sign(factor, 0)? {
                    Some(own) => sign *= own,
                    None => complete = false,
                }
            }
            if complete {
                return Ok(Some(sign));
            }
        }
        if halvings == 0 {
            return Ok(None);
        }
        match self.by_halves(&canonical, halvings)? {
            Some(sign) => Ok(Some(sign)),
            None => self.boxes().sign(&canonical, self.strict),
        }
    }

    fn at_once(&self, polynomial: &Polynomial) -> Step<Option<i8>> {
        for directions in self.ring.directions(&[polynomial]) {
            let reduced = self.ring.reduced(polynomial, directions)?;
            if let Some(sign) = self.with_choices(&reduced, &Doubled::new())? {
                return Ok(Some(sign));
            }
        }
        let (lifted, doubled) = self.lifted(polynomial)?;
        if doubled.is_empty() { Ok(None) } else { self.with_choices(&lifted, &doubled) }
    }

    fn with_choices(&self, polynomial: &Polynomial, doubled: &Doubled) -> Step<Option<i8>> {
        for choice in 0..CHOICES {
            match self.attempt(polynomial, doubled, choice)? {
                Attempt::Proved(sign) => return Ok(Some(sign)),
                Attempt::Open { more: false } => break,
                Attempt::Open { more: true } => {}
            }
        }
        Ok(None)
    }

    /// A positive multiple of the polynomial in the double angle of each pair that has even degrees only: 2 s^2 is
    /// 1 - C, 2 c^2 is 1 + C, 2 s c is S. The sines and cosines of an angle are boxed one by one, which loses that
    /// 2 c^2 - 1 is a single cosine.
    fn lifted(&self, polynomial: &Polynomial) -> Step<(Polynomial, Doubled)> {
        let mut lifted = polynomial.clone();
        let mut doubled = Doubled::new();
        for pair in self.ring.pairs() {
            let degrees = |monomial: &Monomial| monomial.0[pair.sine] + monomial.0[pair.cosine];
            let highest = lifted.terms().iter().map(|(monomial, _)| degrees(monomial)).max().unwrap_or(0);
            let even = lifted.terms().iter().all(|(monomial, _)| degrees(monomial) % 2 == 0);
            if pair.hyperbolic || !even || highest == 0 || highest > 8 {
                continue;
            }
            let cosine = Polynomial::generator(pair.cosine);
            let (minus, plus) = (Polynomial::one().minus(&cosine), Polynomial::one().plus(&cosine));
            let mut sum = Polynomial::zero();
            for (monomial, x) in lifted.terms() {
                let (i, j) = (monomial.0[pair.sine], monomial.0[pair.cosine]);
                let mut rest = *monomial;
                rest.0[pair.sine] = i % 2;
                rest.0[pair.cosine] = 0;
                let missing = u32::from(highest - i - j) / 2;
                let term = Polynomial::term(rest, x * IBig::from(2).pow(missing as usize));
                sum = sum.plus(&term.times(&minus.power(u32::from(i / 2))?)?.times(&plus.power(u32::from(j / 2))?)?);
            }
            lifted = sum;
            doubled.push(pair.sine);
        }
        Ok((lifted, doubled))
    }

    /// Both halves of the region, in the first variable that occurs, directly or in a function.
    fn by_halves(&self, polynomial: &Polynomial, halvings: u32) -> Step<Option<i8>> {
        for &variable in &self.ranges.variables {
            let Kind::Symbol(symbol) = self.ring.generators[variable] else { continue };
            let occurs = polynomial.generators().iter().any(|&g| self.ring.depends_on(g, symbol, self.graph));
            let Some(range) = self.ranges.of(variable).filter(|_| occurs) else { continue };
            let ([lower, ..], [upper, ..]) = (&range.lower[..], &range.upper[..]) else { continue };
            let half = Fraction { divisor: IBig::from(2), ..Fraction::whole(Polynomial::one()) };
            let middle = self.ring.multiply(&self.ring.add(lower, upper)?, &half)?;
            let mut signs = [None; 2];
            for (place, (lower, upper)) in [(lower, &middle), (&middle, upper)].into_iter().enumerate() {
                let mut ranges = self.ranges.clone();
                *ranges.entry(variable) = Range { lower: vec![lower.clone()], upper: vec![upper.clone()] };
                // The next halving takes the other variable.
                ranges.variables.rotate_left(1);
                let part = Prover::new(self.ring, self.graph, &ranges, self.strict);
                signs[place] = match part.at_once(polynomial)? {
                    Some(sign) => Some(sign),
                    None if halvings > 1 => part.by_halves(polynomial, halvings - 1)?,
                    None => None,
                };
                if signs[place].is_none() {
                    return Ok(None);
                }
            }
            if signs[0] == signs[1] {
                return Ok(signs[0]);
            }
            return Ok(None);
        }
        Ok(None)
    }

    /// One substitution; `choice` picks among several bounds of the symbols.
    fn attempt(&self, polynomial: &Polynomial, doubled: &Doubled, choice: usize) -> Step<Attempt> {
        let mut rest = polynomial.clone();
        let mut done = [false; GENERATORS];
        let mut spare = GENERATORS;
        let mut choices = Choices { left: choice, more: false };
        // Functions first, then symbols, each before those that its bounds mention.
        let functions =
            (0..self.ring.generators.len()).filter(|&g| !matches!(self.ring.generators[g], Kind::Symbol(_)));
        let numbers = |g: &usize| matches!(self.ring.generators[*g], Kind::Pi | Kind::Literal(_));
        for generator in functions.clone().filter(|g| !numbers(g)) {
            let Some(next) = self.replaced(&rest, generator, doubled, &mut spare, &mut choices)? else {
                return Ok(Attempt::Open { more: choices.more });
            };
            rest = next;
        }
        while let Some(generator) = self.next_symbol(&rest, &done) {
            let Some(next) = self.replaced(&rest, generator, doubled, &mut spare, &mut choices)? else {
                return Ok(Attempt::Open { more: choices.more });
            };
            rest = next;
            done[generator] = true;
        }
        for generator in functions.filter(numbers) {
            let Some(next) = self.replaced(&rest, generator, doubled, &mut spare, &mut choices)? else {
                return Ok(Attempt::Open { more: choices.more });
            };
            rest = next;
        }
        Ok(match rest.common_sign() {
            Some(sign) => Attempt::Proved(sign),
            None => Attempt::Open { more: choices.more },
        })
    }

    /// A symbol that occurs and that no bound of another one mentions.
    fn next_symbol(&self, polynomial: &Polynomial, done: &[bool; GENERATORS]) -> Option<usize> {
        let waiting: Vec<usize> = (0..self.ring.generators.len())
            .filter(|&g| !done[g] && matches!(self.ring.generators[g], Kind::Symbol(_)) && polynomial.uses(g))
            .collect();
        let mentioned = |g: usize| waiting.iter().any(|&other| other != g && self.mentions(other, g));
        waiting.iter().copied().find(|&g| !mentioned(g)).or(waiting.first().copied())
    }

    fn mentions(&self, symbol: usize, other: usize) -> bool {
        let uses = |fraction: &Fraction| {
            fraction.numerator.uses(other) || fraction.denominator.iter().any(|(factor, _)| factor.uses(other))
        };
        self.ranges.of(symbol).is_some_and(|range| range.lower.iter().chain(&range.upper).any(uses))
    }

    /// The polynomial with a generator covered; `None` if nothing is known that helps.
    fn replaced(
        &self,
        polynomial: &Polynomial,
        generator: usize,
        doubled: &Doubled,
        spare: &mut usize,
        choices: &mut Choices,
    ) -> Step<Option<Polynomial>> {
        if !polynomial.uses(generator) {
            return Ok(Some(polynomial.clone()));
        }
        let even = polynomial.terms().iter().all(|(monomial, _)| monomial.0[generator] % 2 == 0);
        if even
            && !self.strict
            && let Some(cover) = self.square_cover(generator, doubled)?
        {
            let halved = Polynomial::collect(polynomial.terms().iter().map(|(monomial, x)| {
                let mut half = *monomial;
                half.0[generator] /= 2;
                (half, x.clone())
            }));
            return Ok(Some(halved.substituted_fraction(generator, &cover.numerator, &cover.denominator)?));
        }
        let cover = match self.cover(generator, doubled, choices)? {
            Some(cover) => cover,
            None => {
                // Any real number: the difference of two that are not negative.
                *spare -= 1;
                if *spare < self.ring.generators.len() {
                    return Ok(None);
                }
                let difference = Polynomial::generator(generator).minus(&Polynomial::generator(*spare));
                Cover { numerator: difference, denominator: Polynomial::one() }
            }
        };
        Ok(Some(polynomial.substituted_fraction(generator, &cover.numerator, &cover.denominator)?))
    }

    fn cover(&self, generator: usize, doubled: &Doubled, choices: &mut Choices) -> Step<Option<Cover>> {
        let t = Polynomial::generator(generator);
        let whole = |numerator| Ok(Some(Cover { numerator, denominator: Polynomial::one() }));
        match &self.ring.generators[generator] {
            Kind::Symbol(_) => match self.ranges.of(generator) {
                Some(range) => self.symbol_cover(range, t, choices),
                None => Ok(None),
            },
            // 333/106 < pi < 355/113
            Kind::Pi => {
                between(&RBig::from_parts(333.into(), 106u8.into()), &RBig::from_parts(355.into(), 113u8.into()), &t)
            }
            Kind::Literal(value) => {
                let value = exact_rational(value);
                between(&value, &value, &t)
            }
            Kind::Sin(angle) | Kind::Cos(angle) => {
                let (lower, upper) = self.circular_box(*angle, generator, doubled);
                between(&lower, &upper, &t)
            }
            Kind::Cosh(_) if self.strict => {
                whole(t.plus(&Polynomial::one()).scaled(&IBig::from(2))?.minus(&Polynomial::one()))
            }
            Kind::Cosh(_) => whole(t.plus(&Polynomial::one())),
            Kind::Sinh(angle) => {
                let range = self.boxes().fraction(&self.ring.angles[angle.0]);
                if self.strict && range.contains(0.0) {
                    Ok(None)
                } else if range.lower() >= 0.0 {
                    whole(t)
                } else if range.upper() <= 0.0 {
                    whole(t.negated())
                } else {
                    Ok(None)
                }
            }
            Kind::Exp(_) => whole(t),
            Kind::Root(index, radicand) if index % 2 == 0 => {
                // A root vanishes only with its radicand.
                if self.strict && !radicand.is_constant() && self.sign(radicand, 0)? != Some(1) {
                    return Ok(None);
                }
                whole(t)
            }
            Kind::Root(..) | Kind::Call(..) | Kind::Opaque(_) => {
                let range = self.boxes().generator(generator);
                if range.lower() >= 0.0 {
                    whole(t)
                } else if range.upper() <= 0.0 {
                    whole(t.negated())
                } else {
                    Ok(None)
                }
            }
        }
    }

    /// The square of a generator, where its range is known.
    fn square_cover(&self, generator: usize, doubled: &Doubled) -> Step<Option<Cover>> {
        let t = Polynomial::generator(generator);
        match &self.ring.generators[generator] {
            Kind::Sin(angle) | Kind::Cos(angle) => {
                let (lower, upper) = self.circular_box(*angle, generator, doubled);
                let (a, b) = (&lower * &lower, &upper * &upper);
                let straddles = lower < RBig::ZERO && upper > RBig::ZERO;
                let least = if straddles { RBig::ZERO } else { a.clone().min(b.clone()) };
                between(&least, &a.max(b), &t)
            }
            Kind::Sinh(_) => Ok(Some(Cover { numerator: t, denominator: Polynomial::one() })),
            Kind::Opaque(_) | Kind::Call(..) | Kind::Root(..) => {
                Ok(Some(Cover { numerator: t, denominator: Polynomial::one() }))
            }
            Kind::Symbol(_) => match self.ranges.of(generator) {
                // Symmetric limits: the square runs from 0 to the square of the end.
                Some(range) => match (&range.lower[..], &range.upper[..]) {
                    ([lower], [upper]) if *lower == upper.negated() => {
                        let square = self.ring.multiply(upper, upper)?;
                        let numerator = square.numerator.times(&t)?;
                        let below = square.denominator_product()?;
                        Ok(Some(Cover { numerator, denominator: below.times(&t.plus(&Polynomial::one()))? }))
                    }
                    ([], _) | (_, []) if range.lower.is_empty() && range.upper.is_empty() => {
                        Ok(Some(Cover { numerator: t, denominator: Polynomial::one() }))
                    }
                    _ => Ok(None),
                },
                None => Ok(Some(Cover { numerator: t, denominator: Polynomial::one() })),
            },
            _ => Ok(None),
        }
    }

    fn symbol_cover(&self, range: &Range, t: Polynomial, choices: &mut Choices) -> Step<Option<Cover>> {
        let mut known = Vec::new();
        for bounds in [&range.lower, &range.upper] {
            let mut usable = Vec::new();
            for bound in bounds {
                // A denominator must be known to be positive.
                let mut positive = true;
                for (factor, exponent) in &bound.denominator {
                    positive &= exponent % 2 == 0 || self.at_once(factor)? == Some(1);
                }
                if positive {
                    usable.push(bound);
                }
            }
            known.push(usable);
        }
        let lower = choices.pick(&known[0]);
        let upper = choices.pick(&known[1]);
        Ok(match (lower, upper) {
            (Some(lower), Some(upper)) => {
                let (below, above) = (lower.denominator_product()?, upper.denominator_product()?);
                let numerator = lower.numerator.times(&above)?.plus(&upper.numerator.times(&below)?.times(&t)?);
                let denominator = below.times(&above)?.times(&t.plus(&Polynomial::one()))?;
                Some(Cover { numerator, denominator })
            }
            (Some(lower), None) => {
                let denominator = lower.denominator_product()?;
                Some(Cover { numerator: lower.numerator.plus(&t.times(&denominator)?), denominator })
            }
            (None, Some(upper)) => {
                let denominator = upper.denominator_product()?;
                Some(Cover { numerator: upper.numerator.minus(&t.times(&denominator)?), denominator })
            }
            (None, None) => None,
        })
    }

    /// A box for the sine or cosine that a generator stands for.
    fn circular_box(&self, angle: AngleId, generator: usize, doubled: &Doubled) -> (RBig, RBig) {
        let (lower, upper, inside) = self.exact_box(angle, generator, doubled);
        if !self.strict || !inside {
            return (lower, upper);
        }
        let margin = RBig::from_parts(MARGIN.0.into(), MARGIN.1.into());
        (lower - &margin, upper + margin)
    }

    /// The box, and whether an end of it may be attained inside the range of the argument.
    fn exact_box(&self, angle: AngleId, generator: usize, doubled: &Doubled) -> (RBig, RBig, bool) {
        let sine = matches!(self.ring.generators[generator], Kind::Sin(_));
        let twice = doubled.contains(&if sine { generator } else { generator - 1 });
        let factor = if twice { 2u8 } else { 1 };
        let argument = &self.ring.angles[angle.0];
        let whole = (-RBig::ONE, RBig::ONE, true);
        if let Ok(Some((from, to))) = self.turns(argument) {
            // In units of a quarter turn; the sine is the cosine a quarter turn earlier.
            let shift = if sine { RBig::ONE } else { RBig::ZERO };
            let quarter = |turns: &RBig| turns * RBig::from(2 * factor) - &shift;
            let (from, to) = (quarter(&from), quarter(&to));
            let (lower, upper) = cosine_range(&from, &to);
            // The cosine turns at even numbers of quarters.
            let half = |x: &RBig| x / RBig::from(2u8);
            let turns_inside = half(&from).floor() + IBig::ONE < half(&to).ceil();
            return (lower, upper, turns_inside);
        }
        let range = self.boxes().fraction(argument);
        let (lower, upper) = (range.lower() * f64::from(factor), range.upper() * f64::from(factor));
        if !(upper - lower < 6.0 && lower.abs() < 1e6) {
            return whole;
        }
        // A margin far above the rounding errors, but none at 0; the ends are then exact in the quarter-turn arithmetic.
        let shift = if sine { RBig::ONE } else { RBig::ZERO };
        let quarter = |x: f64, margin: f64| {
            let turns = if x == 0.0 { 0.0 } else { x / (PI / 2.0) + margin };
            RBig::try_from(turns).unwrap_or(RBig::ZERO) - &shift
        };
        let (from, to) = (quarter(lower, -1e-9), quarter(upper, 1e-9));
        let (lower, upper) = cosine_range(&from, &to);
        (lower, upper, true)
    }

    /// The range of an argument as multiples of pi, where it is known to be such.
    fn turns(&self, argument: &Fraction) -> Step<Option<(RBig, RBig)>> {
        let symbols: Vec<usize> = (0..self.ring.generators.len())
            .filter(|&g| self.uses(argument, g) && !matches!(self.ring.generators[g], Kind::Pi))
            .collect();
        if symbols.is_empty() {
            return Ok(self.multiple_of_pi(argument).map(|turns| (turns.clone(), turns)));
        }
        for &symbol in &symbols {
            // argument = slope * symbol
            let Some(range) = self.ranges.of(symbol) else { continue };
            let inverse = Fraction::whole(Polynomial::generator(symbol));
            let Some(slope) = self.ring.divide(argument, &inverse)? else { continue };
            if self.uses(&slope, symbol) {
                continue;
            }
            for lower in &range.lower {
                for upper in &range.upper {
                    let from = self.multiple_of_pi(&self.ring.multiply(&slope, lower)?);
                    let to = self.multiple_of_pi(&self.ring.multiply(&slope, upper)?);
                    if let (Some(from), Some(to)) = (from, to) {
                        return Ok(Some(if from <= to { (from, to) } else { (to, from) }));
                    }
                }
            }
        }
        Ok(None)
    }

    fn uses(&self, fraction: &Fraction, generator: usize) -> bool {
        fraction.numerator.uses(generator) || fraction.denominator.iter().any(|(factor, _)| factor.uses(generator))
    }

    fn multiple_of_pi(&self, fraction: &Fraction) -> Option<RBig> {
        if fraction.is_zero() {
            return Some(RBig::ZERO);
        }
        let pi = self.ring.generators.iter().position(|kind| *kind == Kind::Pi)?;
        match fraction.numerator.terms() {
            [(monomial, x)] if fraction.denominator.is_empty() => {
                let mut rest = *monomial;
                rest.0[pi] = rest.0[pi].checked_sub(1)?;
                rest.is_one().then(|| RBig::from_parts_signed(x.clone(), fraction.divisor.clone()))
            }
            _ => None,
        }
    }
}

enum Attempt {
    Proved(i8),
    Open { more: bool },
}

/// Takes one of several bounds at each place, all combinations in turn.
struct Choices {
    left: usize,
    more: bool,
}

impl Choices {
    fn pick<'b>(&mut self, bounds: &[&'b Fraction]) -> Option<&'b Fraction> {
        let count = bounds.len().max(1);
        let place = self.left % count;
        self.left /= count;
        // Bounds that came last are the sharper ones: assumptions follow ranges.
        self.more |= place + 1 < count;
        bounds.len().checked_sub(1 + place).map(|at| bounds[at])
    }
}

/// (a + b t)/(1 + t)
fn between(lower: &RBig, upper: &RBig, t: &Polynomial) -> Step<Option<Cover>> {
    let (a, b) = (lower.numerator(), IBig::from(lower.denominator().clone()));
    let (c, d) = (upper.numerator(), IBig::from(upper.denominator().clone()));
    let numerator = Polynomial::constant(a * &d).plus(&t.scaled(&(c * &b))?);
    let denominator = t.plus(&Polynomial::one()).scaled(&(b * d))?;
    Ok(Some(Cover { numerator, denominator }))
}

/// The range of the cosine for arguments between two numbers of quarter turns.
fn cosine_range(from: &RBig, to: &RBig) -> (RBig, RBig) {
    let contains = |residue: i64| {
        // Some residue + 4k in [from, to]
        let k = ((from - RBig::from(residue)) / RBig::from(4u8)).ceil();
        RBig::from(residue) + RBig::from(4u8) * RBig::from(k) <= *to
    };
    let (first, second) = (cosine_box(from), cosine_box(to));
    let mut lower = first.0.min(second.0);
    let mut upper = first.1.max(second.1);
    if contains(0) {
        upper = RBig::ONE;
    }
    if contains(2) {
        lower = -RBig::ONE;
    }
    (lower, upper)
}

/// A box for the cosine of a number of quarter turns; exact at multiples of a third.
fn cosine_box(quarters: &RBig) -> (RBig, RBig) {
    let thirds = quarters * RBig::from(3u8);
    if thirds.is_int() {
        let residue = thirds.numerator() % IBig::from(12);
        let residue = i64::try_from(residue).expect("a residue is small").rem_euclid(12);
        let half = RBig::from_parts(IBig::ONE, 2u8.into());
        let exact = match residue {
            0 => Some(RBig::ONE),
            2 | 10 => Some(half),
            3 | 9 => Some(RBig::ZERO),
            4 | 8 => Some(-half),
            6 => Some(-RBig::ONE),
            _ => None,
        };
        if let Some(exact) = exact {
            return (exact.clone(), exact);
        }
    }
    let value = pxfm::f_cos(quarters.to_f64().value() * (PI / 2.0));
    let end = |x: f64| RBig::try_from((x * 1e12).round()).unwrap_or(RBig::ZERO) / RBig::from(1_000_000_000_000u64);
    (end(value - 1e-11).max(-RBig::ONE), end(value + 1e-11).min(RBig::ONE))
}

/// An exact number of the graph as a rational number.
fn exact_rational(value: &Exact) -> RBig {
    value.as_rational().clone()
}
