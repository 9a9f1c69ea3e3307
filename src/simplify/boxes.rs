//! Ranges of ring elements by interval arithmetic, and signs proved by cutting the region into boxes.

use super::fraction::Fraction;
use super::identities::Harmonics;
use super::meter::{Step, spend};
use super::polynomial::Polynomial;
use super::ring::{Kind, Pair, Ring};
use super::sign::Ranges;
use crate::enclosure::{Image, Interval, enclose_one, image_of, integer_power};
use crate::expression::{Exact, Function, Graph, SymbolId};
use dashu_ratio::RBig;
use rustc_hash::FxHashMap;
use std::rc::Rc;

/// The most boxes that one sign is worth.
const MOST_BOXES: usize = 300;

/// Half the highest degree in a pair that is evaluated so.
const MOST_FACTORS: u8 = 24;

/// Points that are looked at before boxes.
const SAMPLES: usize = 12;

/// Rounds in which bounds that mention other symbols become numbers.
const ROUNDS: usize = 4;

/// The degree in a pair from which a polynomial is evaluated as a sum of sines and cosines of multiples: powers lose how
/// much its terms cancel.
const HIGH_DEGREE: u8 = 4;

/// A polynomial as it is evaluated.
struct Prepared(Vec<Term>);

/// A coefficient times powers of generators times sines or cosines of multiples of angles.
struct Term {
    coefficient: Interval,
    powers: Vec<(usize, i64)>,
    multiples: Vec<(Function, usize, usize)>,
}

/// A box of the symbols, and with it a range of every generator.
#[derive(Clone)]
pub(super) struct Boxes<'a> {
    ring: &'a Ring,
    graph: &'a Graph,
    /// The radicands of square and cube roots, by generator.
    radicands: Rc<Vec<Option<Prepared>>>,
    /// By generator; of those that are no symbols computed from the symbols.
    ranges: Vec<Interval>,
}

impl<'a> Boxes<'a> {
    /// The smallest box that the ranges are known to lie in.
    pub fn new(ring: &'a Ring, graph: &'a Graph, ranges: &Ranges) -> Self {
        let radicands = ring.generators.iter().map(|kind| match kind {
            Kind::Root(_, radicand) => Some(Prepared::new(ring, radicand)),
            _ => None,
        });
        let radicands = Rc::new(radicands.collect());
        let mut boxes = Self { ring, graph, radicands, ranges: vec![Interval::ENTIRE; ring.generators.len()] };
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
                Kind::Root(2, _) => image_of(Function::Sqrt, self.radicand(place)).range,
                Kind::Root(3, _) => image_of(Function::Cbrt, self.radicand(place)).range,
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
        image_range(value.divide(rational(RBig::from(fraction.divisor.clone()))))
    }

    /// The range of a polynomial.
    fn polynomial(&self, polynomial: &Polynomial) -> Interval {
        self.prepared(&Prepared::new(self.ring, polynomial))
    }

    fn radicand(&self, generator: usize) -> Interval {
        self.radicands[generator].as_ref().map_or(Interval::ENTIRE, |radicand| self.prepared(radicand))
    }

    fn prepared(&self, prepared: &Prepared) -> Interval {
        let mut sum = Interval::ZERO;
        for Term { coefficient, powers, multiples } in &prepared.0 {
            let mut product = *coefficient;
            for &(generator, exponent) in powers {
                product = product * image_range(integer_power(self.ranges[generator], exponent));
            }
            for &(function, angle, multiple) in multiples {
                let argument = Interval::point(multiple as f64) * self.fraction(&self.ring.angles[angle]);
                product = product * image_range(image_of(function, argument));
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
        let prepared = Prepared::new(self.ring, polynomial);
        // A few points show most changes of sign, at the price of a few boxes.
        let mut sign = 0;
        for sample in 0..SAMPLES {
            let there = definite(self.at_sample(&used, sample).prepared(&prepared));
            if there != 0 && sign == -there {
                return Ok(None);
            }
            sign = if there == 0 { sign } else { there };
        }
        let mut todo = vec![self.clone()];
        for _ in 0..MOST_BOXES {
            let Some(part) = todo.pop() else { return Ok((sign != 0).then_some(sign)) };
            spend(4 * polynomial.terms().len() * (1 + used.len()))?;
            let range = part.prepared(&prepared);
            let own = match (range.lower(), range.upper()) {
                (lower, _) if lower > 0.0 || (lower == 0.0 && !strict) => 1,
                (_, upper) if upper < 0.0 || (upper == 0.0 && !strict) => -1,
                _ => {
                    // The symbol that blurs the range most is cut.
                    let blur = |symbol: usize| part.at_middle(&[symbol]).prepared(&prepared).width();
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

    /// The box of one point, from an additive recurrence with an irrational step for each symbol.
    fn at_sample(&self, symbols: &[usize], sample: usize) -> Self {
        let point = |(place, &symbol): (usize, &usize)| {
            let share = ((sample as f64 + 0.5) * [0.754_877_666, 0.569_840_291, 0.618_033_989][place % 3]).fract();
            let range = self.ranges[symbol];
            (symbol, Interval::point(range.lower() + share * (range.upper() - range.lower())))
        };
        self.with(&symbols.iter().enumerate().map(point).collect::<Vec<_>>())
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

impl Prepared {
    fn new(ring: &Ring, polynomial: &Polynomial) -> Self {
        let high: Vec<Pair> = ring
            .pairs()
            .filter(|pair| polynomial.terms().iter().any(|(m, _)| m.0[pair.sine] + m.0[pair.cosine] >= HIGH_DEGREE))
            .filter(|pair| {
                polynomial.terms().iter().all(|(m, _)| m.0[pair.sine] + m.0[pair.cosine] <= 2 * MOST_FACTORS)
            })
            .collect();
        let mut terms = FxHashMap::default();
        for (monomial, x) in polynomial.terms() {
            let mut rest = *monomial;
            let mut parts = vec![(RBig::from(x.clone()), Vec::new())];
            for pair in &high {
                let harmonics = Harmonics::of(rest.0[pair.sine] as i8, rest.0[pair.cosine] as i8, pair.hyperbolic);
                (rest.0[pair.sine], rest.0[pair.cosine]) = (0, 0);
                let functions =
                    if pair.hyperbolic { [Function::Cosh, Function::Sinh] } else { [Function::Cos, Function::Sin] };
                parts = parts
                    .iter()
                    .flat_map(|(x, known): &(RBig, Vec<(Function, usize, usize)>)| {
                        harmonics.parts().map(move |(multiple, kind, y)| {
                            let mut all = known.clone();
                            if multiple > 0 {
                                all.push((functions[kind], pair.angle.0, multiple));
                            }
                            (x * y, all)
                        })
                    })
                    .collect();
            }
            let powers: Vec<(usize, i64)> = (0..rest.0.len())
                .filter(|&generator| rest.0[generator] > 0)
                .map(|generator| (generator, i64::from(rest.0[generator])))
                .collect();
            for (x, multiples) in parts {
                *terms.entry((powers.clone(), multiples)).or_insert(RBig::ZERO) += x;
            }
        }
        let mut terms: Vec<_> = terms.into_iter().filter(|(_, x)| !x.is_zero()).collect();
        // The order of a map is no matter for a range, but for its last bits.
        terms.sort_by(|a, b| (&a.0.0, a.0.1.len()).cmp(&(&b.0.0, b.0.1.len())).then_with(|| a.1.cmp(&b.1)));
        let term = |((powers, multiples), x)| Term { coefficient: rational(x), powers, multiples };
        Self(terms.into_iter().map(term).collect())
    }
}

/// 1 or -1 where a range has no other sign.
fn definite(range: Interval) -> i8 {
    i8::from(range.lower() > 0.0) - i8::from(range.upper() < 0.0)
}

fn image_range(image: Image) -> Interval {
    if image.range.is_empty() { Interval::ENTIRE } else { image.range }
}

fn rational(value: RBig) -> Interval {
    Exact::from_rational(value).map_or(Interval::ENTIRE, |exact| Interval::from_exact(&exact))
}
