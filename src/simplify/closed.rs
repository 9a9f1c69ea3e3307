//! The closed forms of a patch: tangents, fundamental forms, area element, normal, curvatures.
//!
//! Factors that the components of a tangent share come out before the cross product, and those of the cross product
//! before its norm: N = g n with a primitive n, |N| = |g| sqrt(n.n). With P = n.n and l = phi_uu.n, ...
//!
//!   L = sgn(g) l/sqrt(P),   K = (l n2 - m^2)/(g P)^2,   H = sgn(g) (E n2 - 2 F m + G l)/(2 g^2 P sqrt(P)).
//!
//! Squares come out of P, each factor pulled out with its proved sign or between bars.

use super::factor::{Factored, factor, split_square};
use super::form::Form;
use super::forms::Quantity;
use super::fraction::{Fraction, common_denominator, raised};
use super::gcd::gcd;
use super::laurent::{Laurent, single_generator};
use super::meter::{Exhausted, Step, with_allowance};
use super::plan::Printer;
use super::polynomial::{GENERATORS, Polynomial};
use super::product::{Exponent, flipped, is_negative, product, ratio};
use super::radical::{binomial_root, root_in_ring};
use super::read::{Arguments, Purpose, Reader};
use super::region::{self, guesses};
use super::ring::{Directions, Kind, Pair, Ring};
use super::sign::{Ranges, sign};
use crate::calculus::{Vector, differentiate_vector};
use crate::expression::{ExpressionId, Graph, SymbolId};
use crate::language::{Model, Patch};
use dashu_base::{Abs, Signed};
use dashu_int::IBig;
use dashu_ratio::RBig;

/// Steps for the greatest common divisors of the components of a normal.
const SHARED_FACTORS: u64 = 2_000_000;

/// A value `outside * sqrt(root/below)`; the polynomials under the root are square-free.
#[derive(Clone, Debug)]
pub(super) struct Rooted {
    pub outside: Fraction,
    /// Factors of unknown sign that stand between bars, with their exponents.
    pub bars: Vec<(Polynomial, i32)>,
    pub root: Polynomial,
    pub below: Polynomial,
}

/// The geometry of a patch as elements of a ring.
pub(super) struct Elements<'a> {
    pub reader: Reader<'a>,
    pub ranges: Ranges,
    pub tangents: [[Fraction; 3]; 2],
    pub first: [Fraction; 3],
    /// g
    pub content: Fraction,
    /// n
    pub direction: [Polynomial; 3],
    /// P = n.n
    pub square: Polynomial,
    /// Conditions that signs were proved under, beyond those of the sheet.
    pub conditions: Vec<String>,
    /// Factors whose sign could not be proved.
    pub unproved: Vec<Polynomial>,
    /// The variables of the patch.
    pub variables: [SymbolId; 2],
    model: &'a Model,
    second: [Vector; 3],
}

/// The formulas that the forms are made of, in the graph.
pub(super) struct Formulas {
    pub tangents: [Vector; 2],
    pub second: [Vector; 3],
}

impl Formulas {
    pub fn new(graph: &mut Graph, patch: &Patch) -> Self {
        let tangents = patch.variables.map(|variable| differentiate_vector(graph, &patch.position, variable));
        let [u, v] = patch.variables;
        let second = [
            differentiate_vector(graph, &tangents[0], u),
            differentiate_vector(graph, &tangents[0], v),
            differentiate_vector(graph, &tangents[1], v),
        ];
        Self { tangents, second }
    }

    fn roots(&self) -> Vec<ExpressionId> {
        self.tangents.iter().chain(&self.second).flatten().copied().collect()
    }

    pub fn manners(&self, graph: &Graph) -> Vec<Arguments> {
        Reader::manners(graph, &self.roots())
    }
}

impl<'a> Elements<'a> {
    /// Reads a patch; `reversed` turns N around.
    pub fn new(
        graph: &'a Graph,
        model: &'a Model,
        patch: &Patch,
        formulas: &Formulas,
        arguments: Arguments,
    ) -> Step<Self> {
        let mut roots = formulas.roots();
        roots.extend(region::formulas(model, patch));
        let mut reader = Reader::new(graph, &roots, arguments, Purpose::Printing)?;
        let ranges = region::read(&mut reader, model, patch);
        let prove = |ring: &Ring, polynomial: &Polynomial| sign(ring, graph, &ranges, polynomial);
        let mut tangents = [(); 2].map(|()| [(); 3].map(|()| Fraction::zero()));
        for (tangent, vector) in tangents.iter_mut().zip(&formulas.tangents) {
            for (component, &formula) in tangent.iter_mut().zip(vector) {
                *component = reader.read(formula, &prove)?;
            }
        }
        let ring = &reader.ring;
        let first = [
            dot(ring, &tangents[0], &tangents[0])?,
            dot(ring, &tangents[0], &tangents[1])?,
            dot(ring, &tangents[1], &tangents[1])?,
        ];
        let (content_u, u) = take_content(ring, &tangents[0])?;
        let (content_v, v) = take_content(ring, &tangents[1])?;
        let cross = [(1, 2), (2, 0), (0, 1)];
        let mut normal = [(); 3].map(|()| Polynomial::zero());
        for (component, (i, j)) in normal.iter_mut().zip(cross) {
            *component = ring.canonical(&u[i].times(&v[j])?.minus(&u[j].times(&v[i])?))?;
        }
        let content_uv = ring.multiply(&content_u, &content_v)?;
        let shared = with_allowance(SHARED_FACTORS, || take_content(ring, &normal.clone().map(Fraction::whole)));
        let has_roots = ring.generators.iter().any(|kind| matches!(kind, Kind::Root(2, _)));
        let (content_n, mut direction) = match shared {
            Ok(found) if !has_roots => found,
            // Factors with roots are not found by a greatest common divisor; the square of the norm shows them.
            Ok((content, direction)) => match with_allowance(SHARED_FACTORS, || {
                let square =
                    dot(ring, &direction.clone().map(Fraction::whole), &direction.clone().map(Fraction::whole))?;
                without_root(ring, &square, &direction)
            }) {
                Ok(Some((factor, direction))) => (ring.multiply(&content, &factor)?, direction),
                _ => (content, direction),
            },
            Err(Exhausted) => {
                let gram =
                    ring.subtract(&ring.multiply(&first[0], &first[2])?, &ring.multiply(&first[1], &first[1])?)?;
                let scale = ring.multiply(&content_uv, &content_uv)?;
                let square = ring.divide(&gram, &scale)?.ok_or(Exhausted)?;
                without_root(ring, &square, &normal)?.ok_or(Exhausted)?
            }
        };
        if patch.orientation < 0 {
            direction = direction.map(|component| component.negated());
        }
        let content = ring.multiply(&content_uv, &content_n)?;
        let mut square = Polynomial::zero();
        for component in &direction {
            square = square.plus(&component.times(component)?);
        }
        let square = ring.canonical(&square)?;
        Ok(Self {
            reader,
            ranges,
            tangents,
            first,
            content,
            direction,
            square,
            conditions: Vec::new(),
            unproved: Vec::new(),
            variables: patch.variables,
            model,
            second: formulas.second,
        })
    }

    /// Whether what stands under the root depends on a symbol.
    pub fn root_depends_on(&self, value: &Rooted, symbol: SymbolId) -> bool {
        let depends =
            |p: &Polynomial| p.generators().into_iter().any(|g| self.ring().depends_on(g, symbol, self.reader.graph));
        depends(&value.root) || depends(&value.below)
    }

    fn ring(&self) -> &Ring {
        &self.reader.ring
    }

    /// The sign of a polynomial: from what the sheet says, else under a condition that its values fulfil.
    fn sign(&mut self, polynomial: &Polynomial) -> Step<Option<i8>> {
        let graph = self.reader.graph;
        if let Some(sign) = sign(&self.reader.ring, graph, &self.ranges, polynomial) {
            return Ok(Some(sign));
        }
        if self.unproved.contains(polynomial) {
            return Ok(None);
        }
        let used: Vec<usize> = (0..self.ring().generators.len())
            .filter(|&generator| match self.ring().generators[generator] {
                Kind::Symbol(symbol) => {
                    polynomial.generators().into_iter().any(|g| self.ring().depends_on(g, symbol, graph))
                }
                _ => false,
            })
            .collect();
        for guess in guesses(&mut self.reader, self.model, &self.ranges, &used)? {
            if let Some(sign) = sign(&self.reader.ring, graph, &guess.ranges, polynomial) {
                if !self.conditions.contains(&guess.text) {
                    self.conditions.push(guess.text);
                }
                return Ok(Some(sign));
            }
        }
        self.unproved.push(polynomial.clone());
        Ok(None)
    }

    /// |g| sqrt(P), the area element.
    pub fn element(&mut self) -> Step<Vec<Rooted>> {
        let content = self.content.clone();
        if content.is_zero() || self.square.is_zero() {
            let one = Polynomial::one();
            return Ok(vec![Rooted { outside: Fraction::zero(), bars: Vec::new(), root: one.clone(), below: one }]);
        }
        let mut candidates = Vec::new();
        for (outside, root) in self.squares(&self.square.clone())? {
            let above = self.ring().factored(&content.numerator)?;
            let mut product = Product { number: RBig::ONE, factors: Vec::new(), root };
            product.number *= RBig::from(above.unit.abs() * &outside.unit);
            product.number /= RBig::from(content.divisor.clone());
            for (factor, exponent) in above.factors.iter().chain(&outside.factors) {
                product.include(factor, *exponent as i32);
            }
            for (factor, exponent) in &content.denominator {
                product.include(factor, -(*exponent as i32));
            }
            let halved = self.half_angles(&product)?;
            for product in [product].into_iter().chain(halved) {
                candidates.push(self.with_signs(product)?);
            }
        }
        Ok(candidates)
    }

    /// Odd powers outside the root with their proved signs, the others between bars.
    fn with_signs(&mut self, product: Product) -> Step<Rooted> {
        let mut value = Fraction::whole(Polynomial::constant(product.number.numerator().clone()));
        value.divisor = IBig::from(product.number.denominator().clone());
        let mut bars = Vec::new();
        for (factor, exponent) in product.factors.iter().filter(|(_, exponent)| *exponent != 0) {
            let proved = if exponent % 2 == 0 { Some(1) } else { self.sign(factor)? };
            match proved {
                Some(sign) => {
                    let factor = if sign < 0 { factor.negated() } else { factor.clone() };
                    if *exponent > 0 {
                        value.numerator = value.numerator.times(&factor.power(*exponent as u32)?)?;
                    } else {
                        value.denominator.push((factor, exponent.unsigned_abs()));
                    }
                }
                None => bars.push((factor.clone(), *exponent)),
            }
        }
        let mut root = product.root;
        if !root.is_one()
            && let Some(known) = root_in_ring(self.ring(), &root)?
            && matches!(known.terms(), [(_, x)] if x.is_positive())
        {
            value.numerator = self.ring().product(&value.numerator, &known)?;
            root = Polynomial::one();
        }
        let mut outside = self.ring().cancelled(value)?;
        let mut below = Polynomial::one();
        for (place, kind) in self.ring().generators.iter().enumerate() {
            let Kind::Root(2, radicand) = kind else { continue };
            let generator = Polynomial::generator(place);
            if let Some(at) = outside.denominator.iter().position(|(factor, _)| *factor == generator) {
                outside.denominator[at].1 -= 1;
                outside.denominator.retain(|(_, exponent)| *exponent > 0);
                below = below.times(radicand)?;
            }
        }
        self.balanced(Rooted { outside, bars, root, below })
    }

    /// Squares that show only in half angles: 1 - cos u = 2 sin(u/2)^2. With s = 2SC, c = C^2 - S^2, 1 = C^2 + S^2 a
    /// polynomial in the pair becomes a form in S and C, where factors are unique.
    fn half_angles(&mut self, product: &Product) -> Step<Vec<Product>> {
        let mut found = Vec::new();
        for pair in self.ring().pairs().collect::<Vec<_>>() {
            if !product.root.uses(pair.sine) && !product.root.uses(pair.cosine) {
                continue;
            }
            let half = self.half_pair(&pair)?;
            let Some(numerator) = in_half_angle(&product.root, &pair, &half)? else { continue };
            let factored = factor(&numerator)?;
            if factored.factors.iter().all(|(_, exponent)| *exponent == 1) {
                continue;
            }
            let (whole, rest) = split_square(&factored.unit.clone().abs());
            let mut next = product.clone();
            next.number *= RBig::from(whole);
            next.root = Polynomial::constant(rest);
            for (factor, exponent) in &factored.factors {
                if *exponent > 1 {
                    next.include(factor, (*exponent / 2) as i32);
                }
                if exponent % 2 == 1 {
                    next.root = next.root.times(factor)?;
                }
            }
            if factored.unit.is_negative() {
                next.root = next.root.negated();
            }
            next.root = self.ring().canonical(&next.root)?;
            found.push(next.clone());
            // The other factors in the half angle as well.
            let mut all = Product { factors: Vec::new(), ..next.clone() };
            for (other, exponent) in &next.factors {
                let split = match in_half_angle(other, &pair, &half)? {
                    Some(numerator) => factor(&numerator)?,
                    None => Factored { unit: IBig::ONE, factors: vec![(other.clone(), 1)] },
                };
                let unit = RBig::from(split.unit.abs()).pow(exponent.unsigned_abs() as isize);
                all.number = if *exponent > 0 { all.number * unit } else { all.number / unit };
                for (part, own) in &split.factors {
                    all.include(part, *own as i32 * exponent);
                }
            }
            found.push(all);
        }
        Ok(found)
    }

    fn half_pair(&mut self, pair: &Pair) -> Step<Pair> {
        let half = Fraction { divisor: IBig::from(2), ..Fraction::whole(Polynomial::one()) };
        let ring = &mut self.reader.ring;
        let argument = ring.multiply(&ring.angles[pair.angle.0], &half)?;
        ring.pair_of(argument, pair.hyperbolic)
    }

    /// sqrt(f g)/f = sqrt(g/f) and f sqrt(g/f) = sqrt(f g) for factors of known sign under the root.
    fn balanced(&self, mut value: Rooted) -> Step<Rooted> {
        // Roots of the ring meet the common root.
        if !value.below.is_one() || !value.root.is_one() {
            for (place, kind) in self.ring().generators.iter().enumerate() {
                let Kind::Root(2, radicand) = kind else { continue };
                let generator = Polynomial::generator(place);
                if let Some(numerator) = value.outside.numerator.divided_by(&generator)? {
                    value.outside.numerator = numerator;
                    value.root = value.root.times(radicand)?;
                }
                let denominator = &mut value.outside.denominator;
                if let Some(at) = denominator.iter().position(|(factor, _)| *factor == generator) {
                    denominator[at].1 -= 1;
                    denominator.retain(|(_, exponent)| *exponent > 0);
                    value.below = value.below.times(radicand)?;
                }
            }
            for (factor, _) in self.ring().factored(&value.root)?.factors {
                if let (Some(root), Some(below)) =
                    (self.ring().quotient(&value.root, &factor)?, self.ring().quotient(&value.below, &factor)?)
                {
                    (value.root, value.below) = (root, below);
                }
            }
        }
        if !value.root.is_one() {
            for (factor, _) in self.ring().factored(&value.root)?.factors {
                let below = &value.outside.denominator;
                let Some(place) = below.iter().position(|(known, _)| *known == factor || *known == factor.negated())
                else {
                    continue;
                };
                let Some((positive, turned)) = self.oriented(&value.outside.denominator[place].0.clone())? else {
                    continue;
                };
                if let Some(rest) = self.ring().quotient(&value.root, &positive)? {
                    value.outside.denominator[place].1 -= 1;
                    value.outside.denominator.retain(|(_, exponent)| *exponent > 0);
                    value.root = rest;
                    value.below = value.below.times(&positive)?;
                    if turned {
                        value.outside = value.outside.negated();
                    }
                }
            }
        }
        if !value.below.is_one() && !value.outside.is_zero() {
            for (factor, _) in self.ring().factored(&value.below)?.factors {
                let Some((positive, _)) = self.oriented(&factor)? else { continue };
                if let Some(numerator) = self.ring().quotient(&value.outside.numerator, &positive)?
                    && let Some(rest) = self.ring().quotient(&value.below, &positive)?
                {
                    value.outside.numerator = numerator;
                    value.below = rest;
                    value.root = value.root.times(&positive)?;
                }
            }
        }
        Ok(value)
    }

    /// The polynomial or its negative, whichever is proved not to be negative, and whether it was turned.
    fn oriented(&self, polynomial: &Polynomial) -> Step<Option<(Polynomial, bool)>> {
        Ok(match sign(self.ring(), self.reader.graph, &self.ranges, polynomial) {
            Some(1) => Some((polynomial.clone(), false)),
            Some(_) => Some((polynomial.negated(), true)),
            None => None,
        })
    }

    /// A polynomial as squares outside and a square-free rest under the root, in the ways that look shortest.
    fn squares(&self, polynomial: &Polynomial) -> Step<Vec<(Factored, Polynomial)>> {
        let mut found: Vec<(usize, Factored, Polynomial)> = Vec::new();
        for factored in self.ring().factorings(polynomial)? {
            let (whole, rest) = split_square(&factored.unit.clone().abs());
            let mut outside = Factored { unit: whole, factors: Vec::new() };
            let mut root = Polynomial::constant(rest);
            for (factor, exponent) in factored.factors {
                if exponent > 1 {
                    outside.factors.push((factor.clone(), exponent / 2));
                }
                if exponent % 2 == 1 {
                    root = root.times(&factor)?;
                }
            }
            // P is not negative, so a negative unit belongs to an odd factor.
            let root = if factored.unit.is_negative() { root.negated() } else { root };
            let root = self.ring().canonical(&root)?;
            let size =
                3 * root.terms().len() + outside.factors.iter().map(|(factor, _)| factor.terms().len()).sum::<usize>();
            if !found.iter().any(|(_, known, r)| *known == outside && *r == root) {
                found.push((size, outside, root));
            }
        }
        found.sort_by_key(|(size, ..)| *size);
        let least = found.first().map_or(0, |(size, ..)| *size);
        found.retain(|(size, ..)| *size <= least + 2);
        Ok(found.into_iter().take(3).map(|(_, outside, root)| (outside, root)).collect())
    }

    /// l, m, n2: the second derivatives along n.
    pub fn second(&mut self) -> Step<[Fraction; 3]> {
        let graph = self.reader.graph;
        let ranges = self.ranges.clone();
        let prove = |ring: &Ring, polynomial: &Polynomial| sign(ring, graph, &ranges, polynomial);
        let mut along = [(); 3].map(|()| Fraction::zero());
        for (sum, vector) in along.iter_mut().zip(self.second) {
            for (&formula, component) in vector.iter().zip(&self.direction.clone()) {
                let second = self.reader.read(formula, &prove)?;
                let term = self.reader.ring.multiply(&second, &Fraction::whole(component.clone()))?;
                *sum = self.reader.ring.add(sum, &term)?;
            }
        }
        Ok(along)
    }
}

impl Elements<'_> {
    /// Everything but the element, which stands below the bar of normal and curvatures.
    pub fn quantities(&mut self, element: &Rooted) -> Step<Vec<(Quantity, Rooted)>> {
        let plain =
            |outside: Fraction| Rooted { outside, bars: Vec::new(), root: Polynomial::one(), below: Polynomial::one() };
        let mut values = Vec::new();
        for axis in 0..3 {
            values.push((Quantity::TangentU(axis), plain(self.tangents[0][axis].clone())));
            values.push((Quantity::TangentV(axis), plain(self.tangents[1][axis].clone())));
        }
        let [e, f, g] = self.first.clone();
        for (quantity, value) in [(Quantity::E, &e), (Quantity::F, &f), (Quantity::G, &g)] {
            values.push((quantity, plain(value.clone())));
        }
        if element.outside.is_zero() {
            return Ok(values);
        }
        // Over the element: value/(outside sqrt(root)).
        let over = |elements: &Self, value: &Fraction| -> Step<Rooted> {
            let outside = elements.ring().divide(value, &element.outside)?.ok_or(Exhausted)?;
            let bars = element.bars.iter().map(|(factor, exponent)| (factor.clone(), -exponent)).collect();
            elements.balanced(Rooted { outside, bars, root: element.below.clone(), below: element.root.clone() })
        };
        for axis in 0..3 {
            let component = Fraction::whole(self.direction[axis].clone());
            let component = self.ring().multiply(&component, &self.content)?;
            values.push((Quantity::Normal(axis), over(self, &component)?));
        }
        let [l, m, n] = self.second()?;
        for (quantity, value) in [(Quantity::L, &l), (Quantity::M, &m), (Quantity::N2, &n)] {
            let value = self.ring().multiply(value, &self.content)?;
            values.push((quantity, over(self, &value)?));
        }
        let ring = self.ring();
        let root = ring.multiply(&self.content, &Fraction::whole(self.square.clone()))?;
        let top = ring.subtract(&ring.multiply(&l, &n)?, &ring.multiply(&m, &m)?)?;
        let gauss = ring.divide(&top, &ring.multiply(&root, &root)?)?.ok_or(Exhausted)?;
        values.push((Quantity::Gauss, plain(gauss)));
        // H = (E n2 - 2 F m + G l) g/(2 W^2 dA), W^2 = g^2 P
        let two = Fraction::whole(Polynomial::integer(2));
        let outer = ring.add(&ring.multiply(&e, &n)?, &ring.multiply(&g, &l)?)?;
        let top = ring.subtract(&outer, &ring.multiply(&two, &ring.multiply(&f, &m)?)?)?;
        let mean = ring.divide(&top, &ring.multiply(&two, &root)?)?.ok_or(Exhausted)?;
        values.push((Quantity::Mean, over(self, &mean)?));
        Ok(values)
    }
}

/// |number| times the product of |factor^exponent| times sqrt(root).
#[derive(Clone)]
struct Product {
    number: RBig,
    factors: Vec<(Polynomial, i32)>,
    root: Polynomial,
}

impl Product {
    fn include(&mut self, factor: &Polynomial, exponent: i32) {
        match self.factors.iter_mut().find(|(known, _)| known == factor) {
            Some((_, total)) => *total += exponent,
            None => self.factors.push((factor.clone(), exponent)),
        }
    }
}

/// A polynomial in a pair as a form in the pair of half the angle; `None` if it does not use the pair.
fn in_half_angle(polynomial: &Polynomial, pair: &Pair, half: &Pair) -> Step<Option<Polynomial>> {
    let degree = |monomial: &super::polynomial::Monomial| monomial.0[pair.sine] + monomial.0[pair.cosine];
    let highest = polynomial.terms().iter().map(|(monomial, _)| degree(monomial)).max().unwrap_or(0);
    if highest == 0 || highest > 12 {
        return Ok(None);
    }
    let square = |generator| Polynomial::generator(generator).power(2);
    let (s2, c2) = (square(half.sine)?, square(half.cosine)?);
    let mixed = Polynomial::generator(half.sine).times(&Polynomial::generator(half.cosine))?.scaled(&IBig::from(2))?;
    // sinh = 2SC, cosh = C^2 + S^2, 1 = C^2 - S^2
    let (cosine, one) = if pair.hyperbolic { (c2.plus(&s2), c2.minus(&s2)) } else { (c2.minus(&s2), c2.plus(&s2)) };
    let mut sum = Polynomial::zero();
    for (monomial, x) in polynomial.terms() {
        let mut rest = *monomial;
        let (i, j) = (rest.0[pair.sine], rest.0[pair.cosine]);
        rest.0[pair.sine] = 0;
        rest.0[pair.cosine] = 0;
        let term = Polynomial::term(rest, x.clone())
            .times(&mixed.power(u32::from(i))?)?
            .times(&cosine.power(u32::from(j))?)?
            .times(&one.power(u32::from(highest - i - j))?)?;
        sum = sum.plus(&term);
    }
    Ok(Some(sum))
}

/// A vector without the factor that its squared length is the square of; `None` if there is none.
fn without_root(ring: &Ring, square: &Fraction, vector: &[Polynomial; 3]) -> Step<Option<(Fraction, [Polynomial; 3])>> {
    let Some(binomial) = binomial_root(ring, &square.numerator)? else { return Ok(None) };
    let factor = Fraction::whole(ring.canonical(&binomial.sum())?);
    let conjugate = ring.canonical(&binomial.conjugate())?;
    let norm = Fraction::whole(ring.product(&factor.numerator, &conjugate)?);
    let below = ring.inverse(&norm)?.ok_or(Exhausted)?;
    let mut rest = [(); 3].map(|()| Fraction::zero());
    for (rest, component) in rest.iter_mut().zip(vector) {
        *rest = ring.multiply(&Fraction::whole(ring.product(component, &conjugate)?), &below)?;
    }
    let (content, direction) = take_content(ring, &rest)?;
    Ok(Some((ring.multiply(&factor, &content)?, direction)))
}

pub(super) fn dot(ring: &Ring, a: &[Fraction; 3], b: &[Fraction; 3]) -> Step<Fraction> {
    let mut sum = Fraction::zero();
    for (a, b) in a.iter().zip(b) {
        sum = ring.add(&sum, &ring.multiply(a, b)?)?;
    }
    Ok(sum)
}

/// A factor and polynomials without a common one; tried in all directions of the pairs.
fn take_content(ring: &Ring, vector: &[Fraction; 3]) -> Step<(Fraction, [Polynomial; 3])> {
    let (denominator, divisor) = common_denominator(&[&vector[0], &vector[1], &vector[2]]);
    let mut numerators = [(); 3].map(|()| Polynomial::zero());
    for (numerator, fraction) in numerators.iter_mut().zip(vector) {
        if !fraction.is_zero() {
            *numerator = raised(fraction, &denominator, &divisor)?;
        }
    }
    let mut content = Fraction { numerator: Polynomial::one(), divisor, denominator };
    loop {
        let all: Vec<&Polynomial> = numerators.iter().collect();
        let mut best: Option<(Polynomial, Directions)> = None;
        for directions in ring.directions(&all) {
            let mut divisor = Polynomial::zero();
            for numerator in &numerators {
                divisor = gcd(&divisor, &ring.reduced(numerator, directions)?)?;
            }
            let better = best.as_ref().is_none_or(|(known, _)| known.is_constant() && !divisor.is_constant());
            if better && !divisor.is_zero() {
                best = Some((divisor, directions));
            }
        }
        let Some((divisor, directions)) = best else { break };
        if divisor.is_one() {
            break;
        }
        for numerator in &mut numerators {
            let reduced = ring.reduced(numerator, directions)?;
            *numerator = ring.canonical(&super::gcd::exact(&reduced, &divisor)?)?;
        }
        content.numerator = content.numerator.times(&divisor)?;
        if divisor.is_constant() {
            break;
        }
    }
    content.numerator = ring.canonical(&content.numerator)?;
    Ok((ring.cancelled(content)?, numerators))
}

impl Printer<'_> {
    /// The shortest form of a value.
    pub fn shortest(&mut self, value: &Rooted) -> Step<Form> {
        let form = self.rooted(value)?;
        if value.outside.is_zero() || !value.root.is_one() || !value.below.is_one() || !value.bars.is_empty() {
            return Ok(form);
        }
        let termwise = self.fraction(&value.outside)?;
        Ok(if termwise.operations() < form.operations() { termwise } else { form })
    }

    /// A value with a root, in its shortest form.
    pub fn rooted(&mut self, value: &Rooted) -> Step<Form> {
        if value.outside.is_zero() {
            return Ok(Form::integer(0));
        }
        let mut number = ratio(IBig::ONE, value.outside.divisor.clone());
        let mut exponents = [0i8; GENERATORS];
        let mut others: Vec<(Form, Exponent)> = Vec::new();
        let above = self.ring.factored(&value.outside.numerator)?;
        number *= RBig::from(above.unit.clone());
        let mut negative = is_negative(&number);
        let all = above.factors.iter().map(|(factor, exponent)| (factor, *exponent as i32));
        let below = value.outside.denominator.iter().map(|(factor, exponent)| (factor, -(*exponent as i32)));
        for (factor, exponent) in all.chain(below) {
            match single_generator(factor) {
                Some(generator) => exponents[generator] += i8::try_from(exponent).map_err(|_| Exhausted)?,
                None => {
                    let (minus, mut form) = self.sum(&Laurent::of(factor)?)?;
                    if minus && exponent % 2 != 0 {
                        negative = !negative;
                    }
                    if negative
                        && exponent % 2 != 0
                        && let Some(turned) = flipped(&form)
                    {
                        form = turned;
                        negative = false;
                    }
                    others.push((form, (i64::from(exponent), 1)));
                }
            }
        }
        for (factor, exponent) in &value.bars {
            let (_, inner) = self.sum(&Laurent::of(factor)?)?;
            others.push((Form::Call("abs".to_owned(), vec![inner]), (i64::from(*exponent), 1)));
        }
        let number = number.abs();
        let mut best: Option<Form> = None;
        for (moved_number, moved) in movable(&number, &exponents, !value.root.is_one() && value.bars.is_empty()) {
            // What moves under the root does so as its square.
            let inside = Laurent::of(&value.root)?.times(&(&moved_number * &moved_number), &moved.map(|e| 2 * e))?;
            let mut factors = others.clone();
            let mut left = exponents;
            left.iter_mut().zip(moved).for_each(|(left, moved)| *left -= moved);
            let mut left_number = &number / &moved_number;
            factors.extend(self.generator_powers(&left, &mut left_number)?);
            if !value.root.is_one() || !value.below.is_one() {
                let (minus, form) = self.sum(&inside)?;
                let form = match (minus, flipped(&form)) {
                    (false, _) => form,
                    (true, Some(turned)) => turned,
                    (true, None) => Form::Negate(Box::new(form)),
                };
                if value.below.is_one() {
                    push_root(&mut factors, form, 1);
                } else {
                    let below = self.polynomial(&value.below)?;
                    if value.root.is_one() {
                        push_root(&mut factors, below, -1);
                    } else {
                        push_root(&mut factors, product(&RBig::ONE, vec![(form, (1, 1)), (below, (-1, 1))]), 1);
                    }
                }
            }
            let form = product(&left_number, factors);
            if best.as_ref().is_none_or(|known| form.operations() < known.operations()) {
                best = Some(form);
            }
        }
        let best = best.ok_or(Exhausted)?;
        Ok(if negative { Form::Negate(Box::new(best)) } else { best })
    }
}

/// A root beside other factors: f sqrt(f) is f^(3/2), 1/(f sqrt(f)) is 1/f^(3/2).
fn push_root(factors: &mut Vec<(Form, Exponent)>, form: Form, power: i64) {
    match factors.iter_mut().find(|(known, (_, root))| *known == form && *root == 1) {
        Some((_, exponent)) => *exponent = (2 * exponent.0 + power, 2),
        None => factors.push((form, (power, 2))),
    }
}

/// What may move under the root: nothing, what stands below the bar, the numbers, or everything.
fn movable(number: &RBig, exponents: &[i8; GENERATORS], may: bool) -> Vec<(RBig, [i8; GENERATORS])> {
    let none = [0i8; GENERATORS];
    let mut choices = vec![(RBig::ONE, none)];
    if !may {
        return choices;
    }
    let below = exponents.map(|e| e.min(0));
    let divisor = ratio(IBig::ONE, IBig::from(number.denominator().clone()));
    for choice in [
        (divisor.clone(), none),
        (divisor.clone(), below),
        (RBig::ONE, below),
        (number.clone(), none),
        (number.clone(), below),
        (number.clone(), *exponents),
    ] {
        if !choices.contains(&choice) {
            choices.push(choice);
        }
    }
    choices
}
