//! Products of powers of generators: tangents, doubled angles, roots and exponentials joined.

use super::form::Form;
use super::fraction::Fraction;
use super::laurent::Exponents;
use super::meter::Step;
use super::plan::Printer;
use super::polynomial::Polynomial;
use super::product::Exponent;
use super::ring::{Kind, Pair};
use dashu_int::IBig;
use dashu_ratio::RBig;

/// Forms with their exponents.
type Powers = Vec<(Form, Exponent)>;

impl Printer<'_> {
    /// Powers of generators: s^i/c^i is a power of the tangent, and half angles are doubled where that is shorter. Numbers
    /// that this brings in are multiplied into `number`.
    pub fn generator_powers(&mut self, exponents: &Exponents, number: &mut RBig) -> Step<Vec<(Form, Exponent)>> {
        let mut rest = *exponents;
        let mut factors = Vec::new();
        self.merge_half_angles(&mut rest, number)?;
        for pair in self.ring.pairs().collect::<Vec<_>>() {
            let (i, j) = (rest[pair.sine], rest[pair.cosine]);
            if i == 0 && j == 0 {
                continue;
            }
            rest[pair.sine] = 0;
            rest[pair.cosine] = 0;
            if i == -j {
                let name = if pair.hyperbolic { "tanh" } else { "tan" };
                let argument = self.argument(pair.angle.0)?;
                factors.push((Form::Call(name.to_owned(), vec![argument]), (i64::from(i), 1)));
                continue;
            }
            let plain = self.plain_pair(&pair, i, j)?;
            match self.doubled_pair(&pair, i, j)? {
                Some((doubled, scale)) if cost(&doubled, &(&*number * &scale)) < cost(&plain, number) => {
                    *number *= scale;
                    factors.extend(doubled);
                }
                _ => factors.extend(plain),
            }
        }
        if let Some(exponential) = self.joint_exponential(&mut rest)? {
            factors.push((exponential, (1, 1)));
        }
        for side in [1, -1] {
            if let Some(radicand) = self.joint_root(&mut rest, side)? {
                factors.push((radicand, (i64::from(side), 2)));
            }
        }
        for (generator, &exponent) in rest.iter().enumerate().filter(|(_, exponent)| **exponent != 0) {
            factors.push((self.generator(generator)?, (i64::from(exponent), 1)));
        }
        Ok(factors)
    }

    /// Several square roots above the bar (side 1) or below it (side -1) as one: their common radicand.
    fn joint_root(&mut self, rest: &mut Exponents, side: i8) -> Step<Option<Form>> {
        let roots: Vec<(usize, Polynomial)> = (0..self.ring.generators.len())
            .filter(|&generator| rest[generator] == side)
            .filter_map(|generator| match &self.ring.generators[generator] {
                Kind::Root(2, radicand) => Some((generator, radicand.clone())),
                _ => None,
            })
            .collect();
        let mut product = Polynomial::one();
        for (generator, radicand) in &roots {
            if super::factor::square_root(radicand)?.is_some() {
                continue;
            }
            let joined = self.ring.canonical(&product.times(radicand)?)?;
            // A product of long sums is longer than the two.
            if joined.terms().len() <= 1 + product.terms().len().max(radicand.terms().len()) {
                product = joined;
                rest[*generator] = 0;
            }
        }
        if product.is_one() { Ok(None) } else { Ok(Some(self.polynomial(&product)?)) }
    }

    /// All exponentials as one: exp(a)^i exp(b)^j = exp(i a + j b).
    fn joint_exponential(&mut self, rest: &mut Exponents) -> Step<Option<Form>> {
        let mut argument = Fraction::zero();
        for (generator, exponent) in rest.iter_mut().enumerate().filter(|(_, exponent)| **exponent != 0) {
            let Some(Kind::Exp(angle)) = self.ring.generators.get(generator) else { continue };
            let multiple = Fraction::whole(Polynomial::integer(i64::from(*exponent)));
            let term = self.ring.multiply(&self.ring.angles[angle.0], &multiple)?;
            argument = self.ring.add(&argument, &term)?;
            *exponent = 0;
        }
        if argument.is_zero() {
            return Ok(None);
        }
        Ok(Some(Form::Call("exp".to_owned(), vec![self.fraction(&argument)?])))
    }

    /// s^i c^j as (S/2)^k s^(i-k) c^(j-k) with the sine of twice the angle, where that is shorter or meets other powers of
    /// that angle.
    fn merge_half_angles(&mut self, rest: &mut Exponents, number: &mut RBig) -> Step<()> {
        let applies = |rest: &Exponents, pair: &Pair| i32::from(rest[pair.sine]) * i32::from(rest[pair.cosine]) > 0;
        let mut todo: Vec<Pair> = self.ring.pairs().filter(|pair| applies(rest, pair)).collect();
        while let Some(pair) = todo.pop() {
            let (own_sine, own_cosine) = (rest[pair.sine], rest[pair.cosine]);
            let i = own_sine.signum() * own_sine.abs().min(own_cosine.abs());
            let Some(double) = self.multiple_pair(&pair, 2)? else { continue };
            let meets = rest[double.sine] != 0 || rest[double.cosine] != 0;
            let scale = RBig::from(2u8).pow(isize::from(i.abs()));
            let scaled = if i > 0 { &*number / &scale } else { &*number * &scale };
            let plain = self.plain_pair(&pair, own_sine, own_cosine)?;
            let mut doubled = self.plain_pair(&double, i, 0)?;
            doubled.extend(self.plain_pair(&pair, own_sine - i, own_cosine - i)?);
            if meets || cost(&doubled, &scaled) < cost(&plain, number) {
                (rest[pair.sine], rest[pair.cosine]) = (own_sine - i, own_cosine - i);
                rest[double.sine] += i;
                *number = scaled;
                todo.retain(|pair| applies(rest, pair));
                if applies(rest, &double) && !todo.contains(&double) {
                    todo.push(double);
                }
            }
        }
        Ok(())
    }

    fn plain_pair(&mut self, pair: &Pair, i: i8, j: i8) -> Step<Vec<(Form, Exponent)>> {
        let mut factors = Vec::new();
        for (generator, exponent) in [(pair.sine, i), (pair.cosine, j)] {
            if exponent != 0 {
                factors.push((self.generator(generator)?, (i64::from(exponent), 1)));
            }
        }
        Ok(factors)
    }

    /// s^i c^j in twice the angle: s c = S/2, then s^2 = (1 - C)/2 or c^2 = (1 + C)/2; `None` if an odd power is left.
    fn doubled_pair(&mut self, pair: &Pair, i: i8, j: i8) -> Step<Option<(Powers, RBig)>> {
        let shared = if i.signum() == j.signum() { i.signum() * i.abs().min(j.abs()) } else { 0 };
        let (i, j) = (i - shared, j - shared);
        if i % 2 != 0 || j % 2 != 0 || (i != 0 && j != 0) {
            return Ok(None);
        }
        let Some(Pair { sine, cosine, .. }) = self.multiple_pair(pair, 2)? else { return Ok(None) };
        let mut factors = Vec::new();
        if shared != 0 {
            factors.push((self.generator(sine)?, (i64::from(shared), 1)));
        }
        let one = (false, Form::integer(1));
        let squares = (i + j) / 2;
        if squares != 0 {
            let cosine = self.generator(cosine)?;
            // sinh^2 = (cosh 2x - 1)/2
            let terms = match (i != 0, pair.hyperbolic) {
                (true, true) => vec![(false, cosine), (true, Form::integer(1))],
                (true, false) => vec![one, (true, cosine)],
                (false, _) => vec![one, (false, cosine)],
            };
            factors.push((Form::Sum(terms), (i64::from(squares), 1)));
        }
        let halvings = i64::from(shared) + i64::from(squares);
        let two = RBig::from(2u8).pow(halvings.abs() as isize);
        Ok(Some((factors, if halvings > 0 { RBig::ONE / two } else { two })))
    }
}

/// Operations of factors and the number before them.
fn cost(factors: &[(Form, Exponent)], number: &RBig) -> usize {
    let powers = |(form, (power, _)): &(Form, Exponent)| 1 + form.operations() + usize::from(power.abs() > 1);
    let one = dashu_int::UBig::ONE;
    let numbers = usize::from(number.numerator() != &IBig::ONE) + usize::from(number.denominator() != &one);
    factors.iter().map(powers).sum::<usize>() + numbers
}
