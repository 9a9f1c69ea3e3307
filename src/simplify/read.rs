//! From formulas of the graph to elements of the ring.
//!
//! Arguments of sines, hyperbolic sines and exponentials are taken apart into rational multiples of base arguments; for each
//! base the largest common unit is found first, so that sin(u) and sin(u/2) become polynomials in one pair. Manners
//! of taking apart exist, because each can give the shorter form: by terms, sin(u + v) = sin u cos v + cos u sin v, or
//! whole, where u + v is a base of its own. A third manner relates no two arguments, which keeps cos(8u) from being
//! written out in cos(u).

use super::factor::{Factored, split_square};
use super::fraction::Fraction;
use super::meter::{Exhausted, Step, spend};
use super::polynomial::Polynomial;
use super::ring::{AngleId, Kind, Ring};
use crate::expression::{BinaryFunction, Exact, ExpressionId, Function, Graph, Node};
use dashu_base::{Abs, Signed, UnsignedAbs};
use dashu_int::IBig;
use dashu_ratio::RBig;
use rustc_hash::FxHashMap;

/// How sums in arguments are treated.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Arguments {
    /// Each term is a base.
    Split,
    /// Each argument, up to a rational factor, is a base.
    Whole,
    /// Each argument is a base as it is written: sin u and sin 2u are unrelated.
    Written,
}

/// A product of formulas with integer exponents, sorted.
type Key = Vec<(ExpressionId, i32)>;

/// A sum of rational multiples of products; sorted by product.
type Linear = Vec<(Key, RBig)>;

/// Largest multiple of a base argument that is written out in its sine and cosine.
const MAXIMUM_MULTIPLE: i64 = 64;

/// Kinds of functions whose arguments share bases.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
enum Family {
    Circular,
    /// sinh, cosh, tanh and exp: they share bases because exp x = cosh x + sinh x.
    Exponential,
}

/// Decides the sign of a polynomial on the region: 1 for nonnegative, -1 for nonpositive.
pub(super) type SignOf<'a> = &'a dyn Fn(&Ring, &Polynomial) -> Option<i8>;

/// What a reading is for.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Purpose {
    /// Long numbers of the sheet act as named constants, so that they are printed as typed.
    Printing,
    /// The same, and a root stays whole where its factors could have roots of their own.
    Integrating,
    /// All numbers are numbers: what is equal is found equal.
    Proving,
}

/// Reads formulas into one ring.
pub(super) struct Reader<'a> {
    pub graph: &'a Graph,
    pub ring: Ring,
    arguments: Arguments,
    purpose: Purpose,
    known: FxHashMap<ExpressionId, Fraction>,
    units: FxHashMap<(Family, Linear), RBig>,
    /// Bases that occur in an exponential: hyperbolic functions of them are written in exponentials.
    exponential: Vec<Linear>,
    angles: FxHashMap<(Family, Linear), AngleId>,
}

impl<'a> Reader<'a> {
    /// A reader for formulas: `roots` must contain whatever is read later, since they fix the units of the bases.
    pub fn new(graph: &'a Graph, roots: &[ExpressionId], arguments: Arguments, purpose: Purpose) -> Step<Self> {
        let mut reader = Self {
            graph,
            ring: Ring::default(),
            arguments,
            purpose,
            known: FxHashMap::default(),
            units: FxHashMap::default(),
            exponential: Vec::new(),
            angles: FxHashMap::default(),
        };
        reader.find_units(roots)?;
        Ok(reader)
    }

    /// The manners of taking arguments apart that differ for these formulas.
    pub fn manners(graph: &Graph, roots: &[ExpressionId]) -> Vec<Arguments> {
        let mut manners = vec![Arguments::Split];
        if Self::has_sums(graph, roots) {
            manners.push(Arguments::Whole);
        }
        if Self::has_multiples(graph, roots) {
            manners.push(Arguments::Written);
        }
        manners
    }

    /// Whether some base occurs in one argument as a multiple, above 2, of what it is in another.
    fn has_multiples(graph: &Graph, roots: &[ExpressionId]) -> bool {
        let mut seen: Vec<(Key, RBig)> = Vec::new();
        for id in graph.reachable(roots) {
            let Node::Call(f, argument) = graph.node(id) else { continue };
            if !circular(f) && !hyperbolic(f) {
                continue;
            }
            let Ok(terms) = linear(graph, argument) else { continue };
            for (key, x) in terms.into_iter().filter(|(key, _)| !is_phase(graph, key)) {
                let x = x.abs();
                let two = RBig::from(2u8);
                let far = |y: &RBig| x > *y && &x / y > two || *y > x && y / &x > two;
                if seen.iter().any(|(known, y)| *known == key && far(y)) {
                    return true;
                }
                seen.push((key, x));
            }
        }
        false
    }

    /// Whether some argument is a sum.
    fn has_sums(graph: &Graph, roots: &[ExpressionId]) -> bool {
        graph.reachable(roots).into_iter().any(|id| match graph.node(id) {
            Node::Call(f, argument) if circular(f) || hyperbolic(f) => {
                linear(graph, argument).is_ok_and(|l| l.iter().filter(|(key, _)| !is_phase(graph, key)).count() > 1)
            }
            _ => false,
        })
    }

    fn find_units(&mut self, roots: &[ExpressionId]) -> Step<()> {
        for id in self.graph.reachable(roots) {
            let Node::Call(function, argument) = self.graph.node(id) else { continue };
            let family = match function {
                f if circular(f) => Family::Circular,
                f if hyperbolic(f) || f == Function::Exp => Family::Exponential,
                _ => continue,
            };
            for (base, coefficient) in self.bases(family, function == Function::Exp, argument)? {
                if function == Function::Exp && !self.exponential.contains(&base) {
                    self.exponential.push(base.clone());
                }
                let unit = self.units.entry((family, base)).or_insert_with(|| coefficient.clone());
                *unit = rational_gcd(unit, &coefficient);
            }
        }
        Ok(())
    }

    /// The argument as a sum of rational multiples of bases.
    fn bases(&self, family: Family, is_exp: bool, argument: ExpressionId) -> Step<Vec<(Linear, RBig)>> {
        let terms = linear(self.graph, argument)?;
        let alone = |(key, coefficient): (Key, RBig)| {
            // Plain numbers are related to no other: sin(3/2) is not written in sin(1/10).
            if key.is_empty() {
                let sign = if coefficient.is_negative() { -RBig::ONE } else { RBig::ONE };
                return (vec![(key, coefficient.abs())], sign);
            }
            (vec![(key, RBig::ONE)], coefficient)
        };
        if self.arguments == Arguments::Split || is_exp {
            return Ok(terms.into_iter().map(alone).collect());
        }
        let (phase, rest): (Linear, Linear) =
            terms.into_iter().partition(|(key, _)| family == Family::Circular && is_phase(self.graph, key));
        let mut bases: Vec<(Linear, RBig)> = phase.into_iter().map(alone).collect();
        if self.arguments == Arguments::Written && !rest.is_empty() {
            // The sign alone comes out: sin(-x) = -sin(x).
            let sign = if rest[0].1.is_negative() { -RBig::ONE } else { RBig::ONE };
            bases.push((scaled(rest, &sign), sign));
        } else if let Some((_, leading)) = rest.first().cloned() {
            let base = rest.into_iter().map(|(key, coefficient)| (key, coefficient / &leading)).collect();
            bases.push((base, leading));
        }
        Ok(bases)
    }

    /// The ring element of a formula; `Exhausted` also where the formula has none, such as a division by zero.
    pub fn read(&mut self, root: ExpressionId, sign: SignOf<'_>) -> Step<Fraction> {
        for id in self.graph.reachable(&[root]) {
            if !self.known.contains_key(&id) && is_number(self.graph, id) {
                spend(1)?;
                let value = self.node(id, sign)?;
                self.known.insert(id, value);
            }
        }
        self.known.get(&root).cloned().ok_or(Exhausted)
    }

    fn get(&mut self, id: ExpressionId, sign: SignOf<'_>) -> Step<Fraction> {
        match self.known.get(&id) {
            Some(value) => Ok(value.clone()),
            None => self.read(id, sign),
        }
    }

    fn node(&mut self, id: ExpressionId, sign: SignOf<'_>) -> Step<Fraction> {
        Ok(match self.graph.node(id) {
            Node::Number(number) => self.number(&self.graph.number_value(number).clone())?,
            Node::Pi => self.generator(Kind::Pi)?,
            Node::Symbol(symbol) => self.generator(Kind::Symbol(symbol))?,
            Node::Negate(a) => self.get(a, sign)?.negated(),
            Node::Add(a, b) => {
                let (a, b) = (self.get(a, sign)?, self.get(b, sign)?);
                self.ring.add(&a, &b)?
            }
            Node::Subtract(a, b) => {
                let (a, b) = (self.get(a, sign)?, self.get(b, sign)?);
                self.ring.subtract(&a, &b)?
            }
            Node::Multiply(a, b) => {
                let (a, b) = (self.get(a, sign)?, self.get(b, sign)?);
                self.ring.multiply(&a, &b)?
            }
            Node::Divide(a, b) => {
                let (a, b) = (self.get(a, sign)?, self.get(b, sign)?);
                self.ring.divide(&a, &b)?.ok_or(Exhausted)?
            }
            Node::Power(base, exponent) => self.power(id, base, exponent, sign)?,
            Node::Call(function, argument) => self.call(id, function, argument, sign)?,
            Node::Call2(BinaryFunction::Hypot, a, b) => {
                let (a, b) = (self.get(a, sign)?, self.get(b, sign)?);
                let square = self.ring.add(&self.ring.multiply(&a, &a)?, &self.ring.multiply(&b, &b)?)?;
                self.root(&square, 2, sign)?.map_or_else(|| self.generator(Kind::Opaque(id)), Ok)?
            }
            Node::Call2(..) | Node::Select(..) => self.generator(Kind::Opaque(id))?,
            Node::Truth(_) | Node::Less(..) | Node::LessEqual(..) | Node::And(..) | Node::Or(..) | Node::Not(_) => {
                return Err(Exhausted);
            }
        })
    }

    fn generator(&mut self, kind: Kind) -> Step<Fraction> {
        Ok(Fraction::whole(Polynomial::generator(self.ring.generator(kind)?)))
    }

    /// A small number as it is, any other one as a named constant.
    fn number(&mut self, value: &Exact) -> Step<Fraction> {
        if self.purpose == Purpose::Proving {
            return Ok(rational(value.as_rational()));
        }
        let small = value.to_fraction().filter(|&(p, q)| is_small(p, q));
        match small {
            Some((p, q)) => Ok(Fraction { divisor: IBig::from(q), ..Fraction::whole(Polynomial::integer(p)) }),
            None => {
                let literal = self.generator(Kind::Literal(value.magnitude()))?;
                Ok(if value.is_negative() { literal.negated() } else { literal })
            }
        }
    }

    fn power(
        &mut self,
        id: ExpressionId,
        base: ExpressionId,
        exponent: ExpressionId,
        sign: SignOf<'_>,
    ) -> Step<Fraction> {
        let fraction = self.graph.as_number(exponent).and_then(Exact::to_fraction);
        let Some((p, q)) = fraction.filter(|&(p, q)| p.abs() <= 64 && q <= 12) else {
            return self.generator(Kind::Opaque(id));
        };
        let base = self.get(base, sign)?;
        let root = if q == 1 { Some(base) } else { self.root(&base, q as u8, sign)? };
        match root {
            Some(root) => self.ring.power(&root, p)?.ok_or(Exhausted),
            None => self.generator(Kind::Opaque(id)),
        }
    }

    fn call(
        &mut self,
        id: ExpressionId,
        function: Function,
        argument: ExpressionId,
        sign: SignOf<'_>,
    ) -> Step<Fraction> {
        match function {
            Function::Sin | Function::Cos | Function::Tan => {
                let (cosine, sine) = self.circular(argument, sign)?;
                self.one_of(function == Function::Sin, function == Function::Cos, sine, cosine)
            }
            Function::Sinh | Function::Cosh | Function::Tanh => {
                let (cosine, sine) = self.hyperbolic(argument, sign)?;
                self.one_of(function == Function::Sinh, function == Function::Cosh, sine, cosine)
            }
            Function::Exp => {
                let mut product = Fraction::whole(Polynomial::one());
                for (base, coefficient) in self.bases(Family::Exponential, true, argument)? {
                    let (power, multiple) = self.exponential(&base, &coefficient, sign)?;
                    let power = self.ring.power(&power, multiple)?.ok_or(Exhausted)?;
                    product = self.ring.multiply(&product, &power)?;
                }
                Ok(product)
            }
            Function::Sqrt | Function::Cbrt => {
                let radicand = self.get(argument, sign)?;
                let index = if function == Function::Sqrt { 2 } else { 3 };
                self.root(&radicand, index, sign)?.map_or_else(|| self.generator(Kind::Opaque(id)), Ok)
            }
            Function::Abs => {
                let inner = self.get(argument, sign)?;
                let square = self.ring.multiply(&inner, &inner)?;
                self.root(&square, 2, sign)?.map_or_else(|| self.generator(Kind::Opaque(id)), Ok)
            }
            Function::Sign => {
                let inner = self.get(argument, sign)?;
                let own = |polynomial: &Polynomial| sign(&self.ring, polynomial);
                let below = inner.denominator.iter().map(
                    |(factor, exponent)| {
                        if exponent % 2 == 0 { Some(1) } else { own(factor) }
                    },
                );
                // Where it is 0 it is on a crease.
                match below.fold(own(&inner.numerator), |total, next| Some(total? * next?)) {
                    Some(known) if !inner.is_zero() => Ok(Fraction::whole(Polynomial::integer(i64::from(known)))),
                    _ => self.function(function, inner),
                }
            }
            _ => {
                let inner = self.get(argument, sign)?;
                self.function(function, inner)
            }
        }
    }

    /// A function that stands for itself; odd functions with the sign of the argument outside.
    fn function(&mut self, function: Function, argument: Fraction) -> Step<Fraction> {
        let odd = matches!(
            function,
            Function::Asin | Function::Atan | Function::Asinh | Function::Atanh | Function::Erf | Function::Sign
        );
        if odd && argument.is_zero() {
            return Ok(Fraction::zero());
        }
        let one = Fraction::whole(Polynomial::one());
        if matches!(function, Function::Log | Function::Acosh) && argument == one {
            return Ok(Fraction::zero());
        }
        let turned = odd && argument.numerator.leading().is_negative();
        let argument = if turned { argument.negated() } else { argument };
        let value = self.generator(Kind::Call(function, Box::new(argument)))?;
        Ok(if turned { value.negated() } else { value })
    }

    fn one_of(&self, is_sine: bool, is_cosine: bool, sine: Fraction, cosine: Fraction) -> Step<Fraction> {
        match (is_sine, is_cosine) {
            (true, _) => Ok(sine),
            (_, true) => Ok(cosine),
            _ => self.ring.divide(&sine, &cosine)?.ok_or(Exhausted),
        }
    }

    /// Cosine and sine of an argument.
    fn circular(&mut self, argument: ExpressionId, sign: SignOf<'_>) -> Step<(Fraction, Fraction)> {
        let mut total = (Fraction::whole(Polynomial::one()), Fraction::zero());
        for (base, coefficient) in self.bases(Family::Circular, false, argument)? {
            let turned = match is_phase(self.graph, &base[0].0).then(|| quarter_turns(&coefficient)) {
                Some((quarters, rest)) => {
                    let part = self.turn(&base, &rest, sign)?;
                    (0..quarters).fold(part, |(c, s), _| (s.negated(), c))
                }
                None => self.multiple(Family::Circular, &base, &coefficient, sign)?,
            };
            let (c, s) = (&total.0, &total.1);
            let ring = &self.ring;
            let cosine = ring.subtract(&ring.multiply(c, &turned.0)?, &ring.multiply(s, &turned.1)?)?;
            let sine = ring.add(&ring.multiply(s, &turned.0)?, &ring.multiply(c, &turned.1)?)?;
            total = (cosine, sine);
        }
        Ok(total)
    }

    /// Cosine and sine of a multiple of pi below a quarter turn.
    fn turn(&mut self, base: &Linear, rest: &RBig, sign: SignOf<'_>) -> Step<(Fraction, Fraction)> {
        let half = |polynomial| Fraction { divisor: IBig::from(2), ..Fraction::whole(polynomial) };
        let mut root = |radicand: i64| {
            self.ring.generator(Kind::Root(2, Polynomial::integer(radicand))).map(|g| half(Polynomial::generator(g)))
        };
        let twelfths = rest * RBig::from(12u8);
        let twelfths = if twelfths.is_int() { i64::try_from(twelfths.numerator()).ok() } else { None };
        Ok(match twelfths {
            Some(0) => (Fraction::whole(Polynomial::one()), Fraction::zero()),
            Some(2) => (root(3)?, half(Polynomial::one())),
            Some(3) => (root(2)?, root(2)?),
            Some(4) => (half(Polynomial::one()), root(3)?),
            _ => self.multiple(Family::Circular, base, rest, sign)?,
        })
    }

    /// cosh and sinh of an argument.
    fn hyperbolic(&mut self, argument: ExpressionId, sign: SignOf<'_>) -> Step<(Fraction, Fraction)> {
        let mut total = (Fraction::whole(Polynomial::one()), Fraction::zero());
        for (base, coefficient) in self.bases(Family::Exponential, false, argument)? {
            let (c, s) = if self.exponential.contains(&base) {
                let (power, multiple) = self.exponential(&base, &coefficient, sign)?;
                let up = self.ring.power(&power, multiple)?.ok_or(Exhausted)?;
                let down = self.ring.inverse(&up)?.ok_or(Exhausted)?;
                let half = Fraction { divisor: IBig::from(2), ..Fraction::whole(Polynomial::one()) };
                let sum = self.ring.add(&up, &down)?;
                let difference = self.ring.subtract(&up, &down)?;
                (self.ring.multiply(&sum, &half)?, self.ring.multiply(&difference, &half)?)
            } else {
                self.multiple(Family::Exponential, &base, &coefficient, sign)?
            };
            let ring = &self.ring;
            let cosine = ring.add(&ring.multiply(&total.0, &c)?, &ring.multiply(&total.1, &s)?)?;
            let sine = ring.add(&ring.multiply(&total.1, &c)?, &ring.multiply(&total.0, &s)?)?;
            total = (cosine, sine);
        }
        Ok(total)
    }

    /// The exponential of the unit of a base, and the multiple of the unit that `coefficient` is.
    fn exponential(&mut self, base: &Linear, coefficient: &RBig, sign: SignOf<'_>) -> Step<(Fraction, i64)> {
        let (angle, multiple) = self.angle(Family::Exponential, base, coefficient, sign)?;
        Ok((self.generator(Kind::Exp(angle))?, multiple))
    }

    /// Cosine and sine, circular or hyperbolic, of `coefficient` times a base: (c + s)^n or (c + i s)^n taken apart.
    fn multiple(
        &mut self,
        family: Family,
        base: &Linear,
        coefficient: &RBig,
        sign: SignOf<'_>,
    ) -> Step<(Fraction, Fraction)> {
        let (angle, multiple) = self.angle(family, base, coefficient, sign)?;
        let circular = family == Family::Circular;
        let sine = self.generator(if circular { Kind::Sin(angle) } else { Kind::Sinh(angle) })?.numerator;
        let cosine = self.generator(if circular { Kind::Cos(angle) } else { Kind::Cosh(angle) })?.numerator;
        let (mut c, mut s) = (Polynomial::one(), Polynomial::zero());
        for _ in 0..multiple.abs() {
            let across = s.times(&sine)?;
            let straight = c.times(&cosine)?;
            let next = if circular { straight.minus(&across) } else { straight.plus(&across) };
            s = self.ring.canonical(&s.times(&cosine)?.plus(&c.times(&sine)?))?;
            c = self.ring.canonical(&next)?;
        }
        let s = if multiple < 0 { s.negated() } else { s };
        Ok((Fraction::whole(c), Fraction::whole(s)))
    }

    /// The unit of a base as an argument, and the multiple of it that `coefficient` is.
    fn angle(&mut self, family: Family, base: &Linear, coefficient: &RBig, sign: SignOf<'_>) -> Step<(AngleId, i64)> {
        let unit = self.units.get(&(family, base.clone())).cloned().ok_or(Exhausted)?;
        let multiple = coefficient / &unit;
        let multiple = if multiple.is_int() { i64::try_from(multiple.numerator()).ok() } else { None };
        let multiple = multiple.filter(|multiple| multiple.abs() <= MAXIMUM_MULTIPLE).ok_or(Exhausted)?;
        if let Some(&known) = self.angles.get(&(family, base.clone())) {
            return Ok((known, multiple));
        }
        let mut argument = Fraction::zero();
        for (key, factor) in base {
            let factor = factor * &unit;
            let mut product = rational(&factor);
            for &(formula, exponent) in key {
                let formula = self.get(formula, sign)?;
                let power = self.ring.power(&formula, i64::from(exponent))?.ok_or(Exhausted)?;
                product = self.ring.multiply(&product, &power)?;
            }
            argument = self.ring.add(&argument, &product)?;
        }
        // Equal arguments that are written differently meet here.
        let id = match self.ring.angles.iter().position(|known| *known == argument) {
            Some(known) => AngleId(known),
            None => {
                self.ring.angles.push(argument);
                AngleId(self.ring.angles.len() - 1)
            }
        };
        self.angles.insert((family, base.clone()), id);
        Ok((id, multiple))
    }

    /// The principal root of given index; `None` where its parts have no known sign.
    ///
    /// Squares come out of a square root with their proved sign; those without stay inside.
    fn root(&mut self, radicand: &Fraction, index: u8, sign: SignOf<'_>) -> Step<Option<Fraction>> {
        if radicand.is_zero() {
            return Ok(Some(Fraction::zero()));
        }
        if index != 2 {
            if !radicand.denominator.is_empty() || radicand.divisor != IBig::ONE {
                return Ok(None);
            }
            return Ok(Some(self.generator(Kind::Root(index, radicand.numerator.clone()))?));
        }
        let mut below = Vec::new();
        // sqrt(p/q) = sqrt(p q)/q for the numbers; polynomials below have a root of their own.
        let mut above = radicand.numerator.scaled(&radicand.divisor)?;
        for (factor, exponent) in &radicand.denominator {
            match sign(&self.ring, factor) {
                Some(sign) => {
                    below.push((Fraction::whole(factor.power(exponent / 2)?), None));
                    if exponent / 2 % 2 == 1 && sign < 0 {
                        below.push((Fraction::whole(Polynomial::integer(-1)), None));
                    }
                    if exponent % 2 == 1 {
                        let positive = if sign < 0 { factor.negated() } else { factor.clone() };
                        above = if sign < 0 { above.negated() } else { above };
                        below.push((Fraction::whole(Polynomial::one()), Some(positive)));
                    }
                }
                // sqrt(p/f) = sqrt(p f)/|f|, sqrt(p/f^2) = sqrt(p)/|f|, and |f| is the root of f^2.
                None => {
                    if exponent % 2 == 1 {
                        above = self.ring.canonical(&above.times(factor)?)?;
                    }
                    let bars = self.ring.canonical(&factor.power(2)?)?;
                    let bars = self.generator(Kind::Root(2, bars))?;
                    let power = self.ring.power(&bars, i64::from(exponent.div_ceil(2)))?.ok_or(Exhausted)?;
                    below.push((power, None));
                }
            }
        }
        let Some(mut value) = self.root_of_polynomial(&above, sign)? else { return Ok(None) };
        value = self
            .ring
            .multiply(&value, &Fraction { divisor: radicand.divisor.clone(), ..Fraction::whole(Polynomial::one()) })?;
        for (divisor, root) in below {
            value = self.ring.divide(&value, &divisor)?.ok_or(Exhausted)?;
            if let Some(root) = root {
                let Some(root) = self.root_of_polynomial(&root, sign)? else { return Ok(None) };
                value = self.ring.divide(&value, &root)?.ok_or(Exhausted)?;
            }
        }
        Ok(Some(value))
    }

    fn root_of_polynomial(&mut self, radicand: &Polynomial, sign: SignOf<'_>) -> Step<Option<Fraction>> {
        // A square may show in one direction of the pairs only: 1 - cos^2.
        let squares = |factored: &Factored| factored.factors.iter().map(|(_, exponent)| exponent / 2).sum::<u32>();
        let Some(factored) = self.ring.factorings(radicand)?.into_iter().rev().max_by_key(squares) else {
            return Ok(None);
        };
        let (whole, inside) = split_square(&factored.unit.clone().abs());
        let mut outside = Polynomial::constant(whole);
        let split = self.purpose != Purpose::Integrating;
        // Roots of what is known not to be negative stand alone, so that sqrt(6) and sqrt(2) sqrt(3) meet.
        let mut roots: Vec<Polynomial> = primes(&inside).into_iter().map(Polynomial::constant).collect();
        let mut rest = if factored.unit.is_negative() { Polynomial::integer(-1) } else { Polynomial::one() };
        for (factor, exponent) in &factored.factors {
            let half = exponent / 2;
            let proved = sign(&self.ring, factor);
            let (pulled, left) = match proved {
                None if half % 2 == 1 => (half - 1, exponent - 2 * (half - 1)),
                _ => (half, exponent % 2),
            };
            outside = outside.times(&factor.power(pulled)?)?;
            if proved == Some(-1) && pulled % 2 == 1 {
                outside = outside.negated();
            }
            match proved {
                Some(1) if left == 1 && split => roots.push(self.ring.canonical(factor)?),
                Some(-1) if left == 1 && split => {
                    roots.push(self.ring.canonical(&factor.negated())?);
                    rest = rest.negated();
                }
                _ => rest = rest.times(&factor.power(left)?)?,
            }
        }
        let rest = self.ring.canonical(&rest)?;
        if !rest.is_one() {
            roots.push(rest);
        }
        let mut value = Fraction::whole(self.ring.canonical(&outside)?);
        for root in roots {
            let root = self.generator(Kind::Root(2, root))?;
            value = self.ring.multiply(&value, &root)?;
        }
        Ok(Some(value))
    }
}

/// The prime factors of a number that is square-free as far as [`split_square`] shows; a large rest stays whole.
fn primes(value: &IBig) -> Vec<IBig> {
    let mut rest = value.clone();
    let mut found = Vec::new();
    for prime in [2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47].map(IBig::from) {
        if (&rest % &prime) == IBig::ZERO {
            rest /= &prime;
            found.push(prime);
        }
    }
    if rest != IBig::ONE {
        found.push(rest);
    }
    found
}

/// Numbers that act as numbers; others act as named constants, so that 6378137 is not multiplied out.
fn is_small(p: i64, q: i64) -> bool {
    let mut rest = q;
    for prime in [2, 5] {
        while rest % prime == 0 {
            rest /= prime;
        }
    }
    // What is no decimal was not typed as one.
    let is_decimal = rest == 1;
    (q == 1 && p.abs() <= 1_000) || (q <= 16 && p.abs() <= 100) || (!is_decimal && p.abs() <= 1 << 30 && q <= 1 << 30)
}

fn circular(function: Function) -> bool {
    matches!(function, Function::Sin | Function::Cos | Function::Tan)
}

fn hyperbolic(function: Function) -> bool {
    matches!(function, Function::Sinh | Function::Cosh | Function::Tanh)
}

fn is_number(graph: &Graph, id: ExpressionId) -> bool {
    !matches!(
        graph.node(id),
        Node::Truth(_) | Node::Less(..) | Node::LessEqual(..) | Node::And(..) | Node::Or(..) | Node::Not(_)
    )
}

/// Whether a product is pi alone: a part of a turn.
fn is_phase(graph: &Graph, key: &Key) -> bool {
    matches!(key[..], [(id, 1)] if graph.node(id) == Node::Pi)
}

/// A multiple of pi as quarter turns and a rest below one.
fn quarter_turns(coefficient: &RBig) -> (u8, RBig) {
    let quarters = (coefficient * RBig::from(2u8)).floor();
    let rest = coefficient - RBig::from(quarters.clone()) / RBig::from(2u8);
    let quarters = (quarters % IBig::from(4) + IBig::from(4)) % IBig::from(4);
    (u8::try_from(quarters).expect("a residue modulo 4"), rest)
}

/// A rational number as a fraction of the ring.
pub(super) fn rational(value: &RBig) -> Fraction {
    Fraction {
        numerator: Polynomial::constant(value.numerator().clone()),
        divisor: IBig::from(value.denominator().clone()),
        denominator: Vec::new(),
    }
}

/// The largest rational number that both are integer multiples of; positive.
fn rational_gcd(a: &RBig, b: &RBig) -> RBig {
    use dashu_base::Gcd;
    let numerator = (a.numerator() * IBig::from(b.denominator().clone()))
        .unsigned_abs()
        .gcd((b.numerator() * IBig::from(a.denominator().clone())).unsigned_abs());
    RBig::from_parts(IBig::from(numerator), a.denominator() * b.denominator())
}

/// A formula as a sum of rational multiples of products, as far as it is written so; products of sums are multiplied out.
fn linear(graph: &Graph, root: ExpressionId) -> Step<Linear> {
    let mut sums: FxHashMap<ExpressionId, Linear> = FxHashMap::default();
    for id in graph.reachable(&[root]) {
        let atom = || vec![(vec![(id, 1)], RBig::ONE)];
        let constant = |value: &Exact| {
            value
                .to_fraction()
                .filter(|&(p, q)| is_small(p, q))
                .map(|(p, q)| RBig::from_parts_signed(p.into(), q.into()))
        };
        let of = |a: ExpressionId| sums.get(&a).cloned().unwrap_or_default();
        let sum = match graph.node(id) {
            Node::Number(number) => match constant(graph.number_value(number)) {
                Some(value) => vec![(Vec::new(), value)],
                None => atom(),
            },
            Node::Negate(a) => scaled(of(a), &-RBig::ONE),
            Node::Add(a, b) => combined([of(a), of(b)].concat()),
            Node::Subtract(a, b) => combined([of(a), scaled(of(b), &-RBig::ONE)].concat()),
            Node::Multiply(a, b) => product(&of(a), &of(b))?,
            Node::Divide(a, b) => match &of(b)[..] {
                [(key, coefficient)] if !coefficient.is_zero() => {
                    let inverse = key.iter().map(|&(factor, exponent)| (factor, -exponent)).collect();
                    product(&of(a), &[(inverse, RBig::ONE / coefficient)])?
                }
                _ => product(&of(a), &[(vec![(b, -1)], RBig::ONE)])?,
            },
            Node::Power(a, b) => match (graph.as_number(b).and_then(Exact::to_i64), &of(a)[..]) {
                (Some(n @ -8..=8), [(key, coefficient)]) if !coefficient.is_zero() => {
                    let key = key.iter().map(|&(factor, exponent)| (factor, exponent * n as i32)).collect();
                    vec![(key, rational_power(coefficient, n))]
                }
                _ => atom(),
            },
            _ => atom(),
        };
        if sum.len() > 32 {
            return Err(Exhausted);
        }
        sums.insert(id, sum);
    }
    Ok(sums.remove(&root).unwrap_or_default())
}

fn rational_power(value: &RBig, exponent: i64) -> RBig {
    let power = value.pow(exponent.unsigned_abs() as isize);
    if exponent < 0 { RBig::ONE / power } else { power }
}

fn scaled(sum: Linear, factor: &RBig) -> Linear {
    sum.into_iter().map(|(key, coefficient)| (key, coefficient * factor)).collect()
}

fn product(a: &[(Key, RBig)], b: &[(Key, RBig)]) -> Step<Linear> {
    spend(1 + a.len() * b.len())?;
    let mut terms = Vec::new();
    for (key, x) in a {
        for (other, y) in b {
            let mut key = key.clone();
            for &(factor, exponent) in other {
                match key.iter_mut().find(|(known, _)| *known == factor) {
                    Some((_, total)) => *total += exponent,
                    None => key.push((factor, exponent)),
                }
            }
            key.retain(|(_, exponent)| *exponent != 0);
            key.sort_unstable();
            terms.push((key, x * y));
        }
    }
    Ok(combined(terms))
}

fn combined(mut terms: Linear) -> Linear {
    terms.sort_by(|a, b| a.0.cmp(&b.0));
    let mut sum: Linear = Vec::new();
    for (key, coefficient) in terms {
        match sum.last_mut() {
            Some((last, total)) if *last == key => *total += coefficient,
            _ => sum.push((key, coefficient)),
        }
    }
    sum.retain(|(_, coefficient)| !coefficient.is_zero());
    sum
}
