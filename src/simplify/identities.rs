//! Equal ways to write a sum of sines and cosines: one degree, tangents, doubled angles, angles added.

use super::fraction::Fraction;
use super::laurent::{Exponents, Laurent};
use super::meter::{Step, spend};
use super::plan::Printer;
use super::polynomial::{Monomial, Polynomial};
use super::ring::Pair;
use dashu_base::Signed;
use dashu_ratio::RBig;

/// The highest degree that is written in multiples of the angle.
const HIGHEST_MULTIPLE: i8 = 24;

/// The degree from which a multiple of the angle is taken without a comparison.
const HIGH_DEGREE: i8 = 7;

/// Coefficients of cosine and sine, circular or hyperbolic, of the multiples 0, 1, ... of an angle.
pub(super) struct Harmonics(Vec<[RBig; 2]>);

impl Harmonics {
    /// s^i c^j
    pub fn of(i: i8, j: i8, hyperbolic: bool) -> Self {
        let size = (i + j) as usize + 1;
        let zero = || vec![[RBig::ZERO, RBig::ZERO]; size];
        let mut now = zero();
        now[0][0] = RBig::ONE;
        let half = RBig::ONE / RBig::from(2u8);
        for by_sine in (0..i).map(|_| true).chain((0..j).map(|_| false)) {
            let mut next = zero();
            for (k, [cosine, sine]) in now.iter().enumerate() {
                let (cosine, sine) = (cosine * &half, sine * &half);
                if cosine.is_zero() && sine.is_zero() {
                    continue;
                }
                // 2 cos k cos 1 = cos(k+1) + cos(k-1), 2 sin k sin 1 = cos(k-1) - cos(k+1), ...; sinh has no minus.
                let up = k + 1;
                let (down, turned) = if k == 0 { (1, true) } else { (k - 1, false) };
                let odd = |value: RBig| if turned { -value } else { value };
                if by_sine {
                    next[up][1] += &cosine;
                    next[down][1] -= odd(cosine);
                    let sign = |value: RBig| if hyperbolic { value } else { -value };
                    next[up][0] += sign(sine.clone());
                    next[down][0] -= sign(sine);
                } else {
                    next[up][0] += &cosine;
                    next[down][0] += cosine;
                    next[up][1] += &sine;
                    next[down][1] += odd(sine);
                }
            }
            // The sine of 0.
            next[0][1] = RBig::ZERO;
            now = next;
        }
        Self(now)
    }

    fn times(mut self, x: &RBig) -> Self {
        self.0.iter_mut().flatten().for_each(|own| *own *= x);
        self
    }

    /// Multiple, 0 for a cosine and 1 for a sine, coefficient.
    pub fn parts(&self) -> impl Iterator<Item = (usize, usize, &RBig)> {
        self.0
            .iter()
            .enumerate()
            .flat_map(|(multiple, pair)| pair.iter().enumerate().map(move |(kind, x)| (multiple, kind, x)))
            .filter(|(.., x)| !x.is_zero())
    }

    fn add(&mut self, other: &Self) {
        if self.0.len() < other.0.len() {
            self.0.resize(other.0.len(), [RBig::ZERO, RBig::ZERO]);
        }
        for (own, other) in self.0.iter_mut().zip(&other.0) {
            own[0] += &other[0];
            own[1] += &other[1];
        }
    }

    fn multiples(&self) -> impl Iterator<Item = usize> + '_ {
        self.0.iter().enumerate().filter(|(_, [cosine, sine])| !cosine.is_zero() || !sine.is_zero()).map(|(k, _)| k)
    }

    fn count(&self) -> usize {
        self.0.iter().flatten().filter(|x| !x.is_zero()).count()
    }

    /// The same in powers of the pair of `unit` times the angle: Chebyshev polynomials of both kinds, whose recurrence is
    /// the same for circular and hyperbolic pairs.
    fn polynomial(&self, rest: &Exponents, unit: usize, target: &Pair) -> Vec<(Exponents, RBig)> {
        let mut terms = Vec::new();
        // Coefficients of T_k and U_k-1 by powers of the cosine.
        let mut first = (vec![RBig::ONE], vec![RBig::ZERO, RBig::ONE]);
        let mut second = (vec![RBig::ZERO], vec![RBig::ONE]);
        for [cosine, sine] in self.0.iter().step_by(unit) {
            for (coefficients, x, with_sine) in [(&first.0, cosine, 0), (&second.0, sine, 1)] {
                for (power, coefficient) in coefficients.iter().enumerate() {
                    let mut exponents = *rest;
                    exponents[target.cosine] += power as i8;
                    exponents[target.sine] += with_sine;
                    terms.push((exponents, coefficient * x));
                }
            }
            first = (first.1.clone(), recurrence(&first.0, &first.1));
            second = (second.1.clone(), recurrence(&second.0, &second.1));
        }
        terms
    }
}

/// 2 x p - q for polynomials by their coefficients.
fn recurrence(q: &[RBig], p: &[RBig]) -> Vec<RBig> {
    let mut next = vec![RBig::ZERO; p.len() + 1];
    for (power, x) in p.iter().enumerate() {
        next[power + 1] += x * RBig::from(2u8);
    }
    for (power, x) in q.iter().enumerate() {
        next[power] -= x;
    }
    next
}

fn gcd(a: usize, b: usize) -> usize {
    if b == 0 { a } else { gcd(b, a % b) }
}

impl Printer<'_> {
    /// 1/c^2 as 1 + t^2 with t = s/c the tangent, and 1/s^2 as 1 + 1/t^2; likewise for the hyperbolic pair.
    pub fn with_tangents(&self, laurent: &Laurent) -> Step<Vec<Laurent>> {
        let mut result = Vec::new();
        let mut all = laurent.clone();
        for pair in self.ring.pairs() {
            for (below, above) in [(pair.cosine, pair.sine), (pair.sine, pair.cosine)] {
                // cosh^-2 = 1 - tanh^2, sinh^-2 = coth^2 - 1
                let (one, square) = match (pair.hyperbolic, below == pair.cosine) {
                    (false, _) => (1, 1),
                    (true, true) => (1, -1),
                    (true, false) => (-1, 1),
                };
                let rewritten = |source: &Laurent| -> Option<Laurent> {
                    let applies = |e: &Exponents| e[below] == -2 && e[above] == 0;
                    if !source.terms.iter().any(|(e, _)| applies(e)) {
                        return None;
                    }
                    Some(Laurent::collect(source.terms.iter().flat_map(|(e, x)| {
                        if !applies(e) {
                            return vec![(*e, x.clone())];
                        }
                        let (mut plain, mut tangent) = (*e, *e);
                        plain[below] = 0;
                        tangent[above] = 2;
                        vec![(plain, x * RBig::from(one)), (tangent, x * RBig::from(square))]
                    })))
                };
                if let Some(one) = rewritten(laurent) {
                    result.push(one);
                }
                if below == pair.cosine
                    && let Some(next) = rewritten(&all)
                {
                    all = next;
                }
            }
        }
        if all != *laurent && !result.contains(&all) {
            result.push(all);
        }
        Ok(result)
    }

    /// The sum in the doubled angle of each pair that has even degrees only, and of all of them.
    pub fn doubled(&mut self, laurent: &Laurent) -> Step<Vec<Laurent>> {
        let mut result: Vec<Laurent> = Vec::new();
        let mut all = laurent.clone();
        for pair in self.ring.pairs().collect::<Vec<_>>() {
            for source in [laurent.clone(), all.clone()] {
                if let Some(lifted) = self.lifted(&source, &pair)? {
                    if source == all {
                        all = lifted.clone();
                    }
                    if !result.contains(&lifted) {
                        result.push(lifted);
                    }
                }
            }
        }
        result.retain(|lifted| lifted.len() <= 2 * laurent.len() + 2);
        Ok(result)
    }

    /// s^2 = (1 - C)/2, c^2 = (1 + C)/2, s c = S/2 with the pair (S, C) of twice the angle.
    pub fn lifted(&mut self, laurent: &Laurent, pair: &Pair) -> Step<Option<Laurent>> {
        let (s, c) = (pair.sine, pair.cosine);
        let even = laurent.terms.iter().all(|(e, _)| (e[s] + e[c]) % 2 == 0 && e[s] >= 0 && e[c] >= 0);
        let used = laurent.terms.iter().any(|(e, _)| e[s] > 0 || e[c] > 0);
        let high = laurent.terms.iter().any(|(e, _)| e[s] + e[c] > 8);
        if !even || !used || high {
            return Ok(None);
        }
        let Some(double) = self.multiple_pair(pair, 2)? else { return Ok(None) };
        let mut terms = Vec::new();
        for (exponents, x) in &laurent.terms {
            let mut rest = *exponents;
            let (i, j) = (rest[s], rest[c]);
            rest[s] = 0;
            rest[c] = 0;
            let mut part = vec![(rest, x.clone())];
            let half = RBig::ONE / RBig::from(2u8);
            // One mixed factor at most, the others are squares.
            if i % 2 == 1 {
                for (e, x) in &mut part {
                    e[double.sine] += 1;
                    *x *= &half;
                }
            }
            let minus = if pair.hyperbolic { (-1, 1) } else { (1, -1) };
            for _ in 0..i / 2 {
                part = times_binomial(&part, minus, double.cosine);
            }
            for _ in 0..j / 2 {
                part = times_binomial(&part, (1, 1), double.cosine);
            }
            terms.extend(part);
        }
        Ok(Some(Laurent::collect(terms)))
    }

    /// The sum in multiples of an angle where it has a high degree: by the largest multiple that all of it is in, and as a
    /// sum of sines and cosines of multiples where that has fewer terms. The first of these is far shorter where the
    /// degree is at least [`HIGH_DEGREE`]; whether that is so is told.
    pub fn in_multiples(&mut self, laurent: &Laurent) -> Step<(Vec<Laurent>, bool)> {
        let mut result = Vec::new();
        let mut shorter = false;
        for pair in self.ring.pairs().collect::<Vec<_>>() {
            let degree = |e: &Exponents| e[pair.sine] + e[pair.cosine];
            let highest = laurent.terms.iter().map(|(e, _)| degree(e)).max().unwrap_or(0);
            let below = laurent.terms.iter().any(|(e, _)| e[pair.sine] < 0 || e[pair.cosine] < 0);
            if below || !(3..=HIGHEST_MULTIPLE).contains(&highest) {
                continue;
            }
            spend(laurent.len() * usize::from(highest as u8))?;
            let mut harmonics: Vec<(Exponents, Harmonics)> = Vec::new();
            for (exponents, x) in &laurent.terms {
                let mut rest = *exponents;
                (rest[pair.sine], rest[pair.cosine]) = (0, 0);
                let own = Harmonics::of(exponents[pair.sine], exponents[pair.cosine], pair.hyperbolic).times(x);
                match harmonics.iter_mut().find(|(known, _)| *known == rest) {
                    Some((_, total)) => total.add(&own),
                    None => harmonics.push((rest, own)),
                }
            }
            let unit = harmonics.iter().fold(0, |unit, (_, own)| own.multiples().fold(unit, gcd));
            if unit > 1
                && let Some(target) = self.multiple_pair(&pair, unit)?
            {
                let terms = harmonics.iter().map(|(rest, own)| own.polynomial(rest, unit, &target));
                result.push(Laurent::collect(terms.flatten()));
                shorter |= highest >= HIGH_DEGREE;
            }
            let count: usize = harmonics.iter().map(|(_, own)| own.count()).sum();
            if count <= laurent.len() {
                result.extend(self.as_harmonics(&harmonics, &pair)?);
            }
        }
        Ok((result, shorter))
    }

    fn as_harmonics(&mut self, harmonics: &[(Exponents, Harmonics)], pair: &Pair) -> Step<Option<Laurent>> {
        let mut terms = Vec::new();
        for (rest, own) in harmonics {
            for (multiple, [cosine, sine]) in own.0.iter().enumerate() {
                let (mut with_cosine, mut with_sine) = (*rest, *rest);
                if multiple > 0 && !(cosine.is_zero() && sine.is_zero()) {
                    let Some(target) = self.multiple_pair(pair, multiple)? else { return Ok(None) };
                    with_cosine[target.cosine] += 1;
                    with_sine[target.sine] += 1;
                }
                terms.extend([(with_cosine, cosine.clone()), (with_sine, sine.clone())]);
            }
        }
        Ok(Some(Laurent::collect(terms)))
    }

    /// The pair of a multiple of an angle; `None` where the ring is full.
    pub fn multiple_pair(&mut self, pair: &Pair, multiple: usize) -> Step<Option<Pair>> {
        let factor = Fraction::whole(Polynomial::integer(multiple as i64));
        let argument = self.ring.multiply(&self.ring.angles[pair.angle.0], &factor)?;
        self.ring.pair_if_room(argument, pair.hyperbolic)
    }

    /// The sum with products of two angles joined, as long as that saves terms: s_p c_q + c_p s_q is the sine of p + q,
    /// c_p c_q + s_p s_q the cosine of p - q; likewise for hyperbolic pairs. `None` where nothing can be joined.
    pub fn joined(&mut self, laurent: &Laurent) -> Step<Option<Laurent>> {
        let pairs: Vec<Pair> =
            self.ring.pairs().filter(|pair| laurent.uses(pair.sine) && laurent.uses(pair.cosine)).collect();
        let mut result = laurent.clone();
        let mut place = 0;
        let couples: Vec<(Pair, Pair)> = pairs
            .iter()
            .enumerate()
            .flat_map(|(first, p)| pairs[first + 1..].iter().map(move |q| (*p, *q)))
            .filter(|(p, q)| p.hyperbolic == q.hyperbolic)
            .collect();
        while let Some((p, q)) = couples.get(place) {
            spend(result.len())?;
            match self.joined_once(&result, p, q)? {
                Some(next) => result = next,
                None => place += 1,
            }
        }
        Ok((result.len() < laurent.len()).then_some(result))
    }

    /// One joining of the angles of two pairs.
    fn joined_once(&mut self, laurent: &Laurent, p: &Pair, q: &Pair) -> Step<Option<Laurent>> {
        for (first, second, is_sine) in
            [((p.sine, q.cosine), (p.cosine, q.sine), true), ((p.cosine, q.cosine), (p.sine, q.sine), false)]
        {
            for (e, x) in &laurent.terms {
                if e[first.0] < 1 || e[first.1] < 1 {
                    continue;
                }
                let mut rest = *e;
                rest[first.0] -= 1;
                rest[first.1] -= 1;
                let mut other = rest;
                other[second.0] += 1;
                other[second.1] += 1;
                let Some((_, y)) = laurent.terms.iter().find(|(f, _)| *f == other) else { continue };
                let same = x == y;
                if !same && *x != -y.clone() {
                    continue;
                }
                // sin: s c + c s is the sum. cos: c c - s s is the sum, c c + s s the difference; hyperbolic: reversed.
                let added = if is_sine || p.hyperbolic { same } else { !same };
                let Some((target, turned)) = self.angle_of(p, q, added)? else { continue };
                rest[if is_sine { target.sine } else { target.cosine }] += 1;
                let x = if is_sine && turned { -x.clone() } else { x.clone() };
                let kept = laurent.terms.iter().filter(|(f, _)| f != e && *f != other).cloned();
                return Ok(Some(Laurent::collect(kept.chain([(rest, x)]))));
            }
        }
        Ok(None)
    }

    /// The pair of p + q or p - q, and whether its angle is the negative of that.
    fn angle_of(&mut self, p: &Pair, q: &Pair, added: bool) -> Step<Option<(Pair, bool)>> {
        let (first, second) = (self.ring.angles[p.angle.0].clone(), self.ring.angles[q.angle.0].clone());
        let angle = if added { self.ring.add(&first, &second)? } else { self.ring.subtract(&first, &second)? };
        let opposite = angle.negated();
        let turned = self.ring.angles.contains(&opposite)
            || (!self.ring.angles.contains(&angle) && angle.numerator.leading().is_negative());
        let pair = self.ring.pair_if_room(if turned { opposite } else { angle }, p.hyperbolic)?;
        Ok(pair.map(|pair| (pair, turned)))
    }
}

/// Terms of lower degree in a pair times s^2 + c^2 (or cosh^2 - sinh^2) until all have one degree.
pub(super) fn homogeneous(polynomial: &Polynomial, pair: &Pair) -> Step<Option<Polynomial>> {
    let degree = |monomial: &Monomial| monomial.0[pair.sine] + monomial.0[pair.cosine];
    let highest = polynomial.terms().iter().map(|(monomial, _)| degree(monomial)).max().unwrap_or(0);
    let lowest = polynomial.terms().iter().map(|(monomial, _)| degree(monomial)).min().unwrap_or(0);
    if highest == lowest || highest > 8 || polynomial.terms().iter().any(|(m, _)| (highest - degree(m)) % 2 == 1) {
        return Ok(None);
    }
    let square = |generator| Polynomial::generator(generator).power(2);
    let one = if pair.hyperbolic {
        square(pair.cosine)?.minus(&square(pair.sine)?)
    } else {
        square(pair.sine)?.plus(&square(pair.cosine)?)
    };
    let mut sum = Polynomial::zero();
    for (monomial, x) in polynomial.terms() {
        let term = Polynomial::term(*monomial, x.clone());
        sum = sum.plus(&term.times(&one.power(u32::from((highest - degree(monomial)) / 2))?)?);
    }
    Ok(Some(sum))
}

/// A sum times (a + b g)/2 for a generator g.
fn times_binomial(terms: &[(Exponents, RBig)], (a, b): (i8, i8), generator: usize) -> Vec<(Exponents, RBig)> {
    let half = |x: &RBig, sign: i8| x * RBig::from(sign) / RBig::from(2u8);
    let raised = |e: &Exponents| {
        let mut e = *e;
        e[generator] += 1;
        e
    };
    terms.iter().flat_map(|(e, x)| [(*e, half(x, a)), (raised(e), half(x, b))]).collect()
}
