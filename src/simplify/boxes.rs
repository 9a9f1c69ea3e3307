//! Ranges of ring elements by interval arithmetic, and signs proved by cutting the region into boxes.

use super::fraction::Fraction;
use super::meter::{Step, spend};
use super::polynomial::Polynomial;
use super::ring::{Kind, Ring};
use super::sign::Ranges;
use crate::enclosure::{Image, Interval, enclose_one, image_of, integer_power};
use crate::expression::{Exact, Function, Graph, SymbolId};
use dashu_int::IBig;
use dashu_ratio::RBig;

/// The most boxes that one sign is worth.
const MOST_BOXES: usize = 300;

/// Rounds in which bounds that mention other symbols become numbers.
const ROUNDS: usize = 4;

/// A box of the symbols, and with it a range of every generator.
#[derive(Clone)]
pub(super) struct Boxes<'a> {
    ring: &'a Ring,
    graph: &'a Graph,
    /// By generator; of those that are no symbols computed from the symbols.
    ranges: Vec<Interval>,
}

impl<'a> Boxes<'a> {
    /// The smallest box that the ranges are known to lie in.
    pub fn new(ring: &'a Ring, graph: &'a Graph, ranges: &Ranges) -> Self {
        let mut boxes = Self { ring, graph, ranges: vec![Interval::ENTIRE; ring.generators.len()] };
        boxes.refresh();
        for _ in 0..ROUNDS {
            for (symbol, range) in &ranges.symbols {
                let end = |bounds: &[Fraction], side: fn(Interval) -> f64, best: fn(f64, f64) -> f64, none: f64| {
                    bounds.iter().map(|bound| side(boxes.fraction(bound))).fold(none, best)
                };
                let lower = end(&range.lower, Interval::lower, f64::max, f64::NEG_INFINITY);
                let upper = end(&range.upper, Interval::upper, f64::min, f64::INFINITY);
                if lower <= upper {
                    boxes.ranges[*symbol] = Interval::new(lower, upper);
                }
            }
            boxes.refresh();
        }
        boxes
    }

    /// The ranges of all generators that are functions of others; these come before them.
    fn refresh(&mut self) {
        for place in 0..self.ring.generators.len() {
            let range = match &self.ring.generators[place] {
                Kind::Symbol(_) => continue,
                Kind::Pi => Interval::pi(),
                Kind::Literal(value) => Interval::from_exact(value),
                Kind::Sin(angle) => self.image(Function::Sin, angle.0),
                Kind::Cos(angle) => self.image(Function::Cos, angle.0),
                Kind::Sinh(angle) => self.image(Function::Sinh, angle.0),
                Kind::Cosh(angle) => self.image(Function::Cosh, angle.0),
                Kind::Exp(angle) => self.image(Function::Exp, angle.0),
                Kind::Root(2, radicand) => image_of(Function::Sqrt, self.polynomial(radicand)).range,
                Kind::Root(3, radicand) => image_of(Function::Cbrt, self.polynomial(radicand)).range,
                Kind::Root(index, _) if index % 2 == 0 => Interval::new(0.0, f64::INFINITY),
                Kind::Root(..) => Interval::ENTIRE,
                Kind::Call(function, argument) => image_of(*function, self.fraction(argument)).range,
                Kind::Opaque(expression) => {
                    let range_of = |symbol: SymbolId| {
                        let known = self.ring.generators.iter().position(|kind| *kind == Kind::Symbol(symbol));
                        known.map_or(Interval::ENTIRE, |place| self.ranges[place])
                    };
                    enclose_one(self.graph, *expression, range_of).range
                }
            };
            // Nowhere defined on the box: nothing follows from that.
            self.ranges[place] = if range.is_empty() { Interval::ENTIRE } else { range };
        }
    }

    fn image(&self, function: Function, angle: usize) -> Interval {
        image_of(function, self.fraction(&self.ring.angles[angle])).range
    }

    /// The range of a generator.
    pub fn generator(&self, generator: usize) -> Interval {
        self.ranges[generator]
    }

    /// The range of a fraction.
    pub fn fraction(&self, fraction: &Fraction) -> Interval {
        let mut value = self.polynomial(&fraction.numerator);
        for (factor, exponent) in &fraction.denominator {
            let below = image_range(integer_power(self.polynomial(factor), i64::from(*exponent)));
            value = image_range(value.divide(below));
        }
        image_range(value.divide(number(&fraction.divisor)))
    }

    /// The range of a polynomial.
    pub fn polynomial(&self, polynomial: &Polynomial) -> Interval {
        let mut sum = Interval::ZERO;
        for (monomial, x) in polynomial.terms() {
            let mut product = number(x);
            for (generator, &exponent) in monomial.0.iter().enumerate().filter(|(_, exponent)| **exponent > 0) {
                product = product * image_range(integer_power(self.ranges[generator], i64::from(exponent)));
            }
            sum = sum + product;
        }
        sum
    }

    /// The sign of a polynomial, proved box by box: 1 if it is nowhere negative, -1 if nowhere positive; strictly so where
    /// `strict`. `None` too where a symbol that it depends on has no bounded range.
    pub fn sign(&self, polynomial: &Polynomial, strict: bool) -> Step<Option<i8>> {
        let used: Vec<usize> = (0..self.ring.generators.len())
            .filter(|&place| match self.ring.generators[place] {
                Kind::Symbol(symbol) => {
                    polynomial.generators().into_iter().any(|g| self.ring.depends_on(g, symbol, self.graph))
                }
                _ => false,
            })
            .collect();
        if used.iter().any(|&symbol| !self.ranges[symbol].is_bounded()) {
            return Ok(None);
        }
        let mut sign = 0;
        let mut todo = vec![self.clone()];
        for _ in 0..MOST_BOXES {
            let Some(part) = todo.pop() else { return Ok((sign != 0).then_some(sign)) };
            spend(4 * polynomial.terms().len() * (1 + used.len()))?;
            let range = part.polynomial(polynomial);
            let own = match (range.lower(), range.upper()) {
                (lower, _) if lower > 0.0 || (lower == 0.0 && !strict) => 1,
                (_, upper) if upper < 0.0 || (upper == 0.0 && !strict) => -1,
                _ => {
                    // One point may show the other sign; else the symbol that blurs the range most is cut.
                    let middle = part.at_middle(&used).polynomial(polynomial);
                    let there = i8::from(middle.lower() > 0.0) - i8::from(middle.upper() < 0.0);
                    if there != 0 && sign == -there {
                        return Ok(None);
                    }
                    sign = if there == 0 { sign } else { there };
                    let blur = |symbol: usize| part.at_middle(&[symbol]).polynomial(polynomial).width();
                    let Some(cut) = used.iter().copied().min_by(|&a, &b| blur(a).total_cmp(&blur(b))) else {
                        return Ok(None);
                    };
                    let (whole, at) = (part.ranges[cut], part.ranges[cut].midpoint());
                    for half in [Interval::new(whole.lower(), at), Interval::new(at, whole.upper())] {
                        todo.push(part.with(&[(cut, half)]));
                    }
                    continue;
                }
            };
            if sign == -own {
                return Ok(None);
            }
            sign = own;
        }
        Ok(None)
    }

    fn at_middle(&self, symbols: &[usize]) -> Self {
        let points: Vec<(usize, Interval)> =
            symbols.iter().map(|&symbol| (symbol, Interval::point(self.ranges[symbol].midpoint()))).collect();
        self.with(&points)
    }

    fn with(&self, symbols: &[(usize, Interval)]) -> Self {
        let mut boxes = self.clone();
        for &(symbol, range) in symbols {
            boxes.ranges[symbol] = range;
        }
        boxes.refresh();
        boxes
    }
}

fn image_range(image: Image) -> Interval {
    if image.range.is_empty() { Interval::ENTIRE } else { image.range }
}

fn number(value: &IBig) -> Interval {
    match i64::try_from(value) {
        Ok(small) if small.unsigned_abs() < 1 << 53 => Interval::point(small as f64),
        _ => Exact::from_rational(RBig::from(value.clone()))
            .map_or(Interval::ENTIRE, |exact| Interval::from_exact(&exact)),
    }
}
