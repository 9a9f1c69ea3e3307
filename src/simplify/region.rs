//! What is known of parameters and variables: ranges, assumptions, the region of the patch.

use super::fraction::Fraction;
use super::meter::Step;
use super::polynomial::Polynomial;
use super::read::{Reader, rational};
use super::ring::Kind;
use super::sign::Ranges;
use crate::expression::{ExpressionId, Graph, Node, SymbolId, evaluate_one};
use crate::language::{Bound, Interval, Model, Patch};
use dashu_base::Signed;
use dashu_int::IBig;
use dashu_ratio::RBig;

/// The formulas that [`read`] reads: a reader must know them from the start.
pub(super) fn formulas(model: &Model, patch: &Patch) -> Vec<ExpressionId> {
    let ranges = model.parameters.iter().filter_map(|parameter| parameter.range.as_ref());
    let ends = ranges.chain(&patch.intervals).flat_map(|interval| [interval.lower, interval.upper]);
    let mut formulas: Vec<ExpressionId> = ends
        .filter_map(|bound| match bound {
            Bound::Finite(formula) => Some(formula),
            Bound::MinusInfinity | Bound::PlusInfinity => None,
        })
        .collect();
    for assumption in &model.assumptions {
        formulas.extend(inequalities(&model.graph, assumption.condition).into_iter().flat_map(|(a, b)| [a, b]));
    }
    formulas
}

/// Ranges of parameters and variables, then assumptions. A bound that cannot be read is left out: less is then known.
pub(super) fn read(reader: &mut Reader<'_>, model: &Model, patch: &Patch) -> Ranges {
    let mut ranges = Ranges::default();
    for parameter in &model.parameters {
        if let Some(range) = &parameter.range {
            let _ = interval(reader, &mut ranges, parameter.symbol, range);
        }
    }
    for (variable, range) in patch.variables.iter().zip(&patch.intervals) {
        let _ = interval(reader, &mut ranges, *variable, range);
        if let Ok(generator) = reader.ring.generator(Kind::Symbol(*variable)) {
            ranges.variables.push(generator);
        }
    }
    for assumption in &model.assumptions {
        for (small, large) in inequalities(&model.graph, assumption.condition) {
            let _ = (|| -> Step<()> {
                let small = reader.read(small, &|_, _| None)?;
                let large = reader.read(large, &|_, _| None)?;
                let difference = reader.ring.subtract(&large, &small)?;
                assume_positive(reader, &mut ranges, &difference)
            })();
        }
    }
    ranges
}

fn interval(reader: &mut Reader<'_>, ranges: &mut Ranges, symbol: SymbolId, interval: &Interval) -> Step<()> {
    let generator = reader.ring.generator(Kind::Symbol(symbol))?;
    if let Bound::Finite(formula) = interval.lower {
        let bound = reader.read(formula, &|_, _| None)?;
        ranges.entry(generator).lower.push(bound);
    }
    if let Bound::Finite(formula) = interval.upper {
        let bound = reader.read(formula, &|_, _| None)?;
        ranges.entry(generator).upper.push(bound);
    }
    Ok(())
}

/// Pairs (a, b) with a < b or a <= b, as far as a condition is made of such.
fn inequalities(graph: &Graph, condition: ExpressionId) -> Vec<(ExpressionId, ExpressionId)> {
    match graph.node(condition) {
        Node::Less(a, b) | Node::LessEqual(a, b) => vec![(a, b)],
        Node::And(a, b) => [inequalities(graph, a), inequalities(graph, b)].concat(),
        _ => Vec::new(),
    }
}

/// Takes a polynomial condition `difference > 0` as a bound of a symbol in which it is linear with a number as the
/// coefficient; a lower bound if there is one.
fn assume_positive(reader: &Reader<'_>, ranges: &mut Ranges, difference: &Fraction) -> Step<()> {
    if !difference.denominator.is_empty() {
        return Ok(());
    }
    let polynomial = &difference.numerator;
    let mut found: Option<(bool, usize, Fraction)> = None;
    for generator in polynomial.generators() {
        if !matches!(reader.ring.generators[generator], Kind::Symbol(_)) || polynomial.degree(generator) != 1 {
            continue;
        }
        let coefficients = polynomial.coefficients(generator);
        let Some(slope) = coefficients[1].as_constant() else { continue };
        // slope x + rest > 0
        let inverse = rational(&RBig::from_parts_signed(IBig::from(-1), slope.clone()));
        let bound = reader.ring.multiply(&Fraction::whole(coefficients[0].clone()), &inverse)?;
        let is_lower = slope.is_positive();
        if found.as_ref().is_none_or(|(lower, ..)| is_lower && !lower) {
            found = Some((is_lower, generator, bound));
        }
    }
    if let Some((is_lower, generator, bound)) = found {
        let range = ranges.entry(generator);
        if is_lower { range.lower.push(bound) } else { range.upper.push(bound) }
    }
    Ok(())
}

/// A condition that the values of the sheet fulfil although nothing in it says so.
#[derive(Clone, Debug)]
pub(super) struct Guess {
    /// As it is written: `R > r`.
    pub text: String,
    /// The ranges with the condition.
    pub ranges: Ranges,
}

/// Conditions on the parameters in `used` that hold for the values of the sheet: signs of those without a range, then in
/// addition an order of two; at last the values themselves.
pub(super) fn guesses(reader: &mut Reader<'_>, model: &Model, ranges: &Ranges, used: &[usize]) -> Step<Vec<Guess>> {
    let mut signed = ranges.clone();
    let mut texts = Vec::new();
    let mut parameters = Vec::new();
    for parameter in &model.parameters {
        let generator = reader.ring.generator(Kind::Symbol(parameter.symbol))?;
        if !used.contains(&generator) {
            continue;
        }
        let value = evaluate_one(&model.graph, parameter.default, |_| f64::NAN);
        parameters.push((parameter.name.clone(), generator, value));
        let known = ranges.of(generator).is_some_and(|range| !range.lower.is_empty() || !range.upper.is_empty());
        if !known && value > 0.0 {
            signed.entry(generator).lower.push(Fraction::zero());
            texts.push(format!("{} > 0", parameter.name));
        } else if !known && value < 0.0 {
            signed.entry(generator).upper.push(Fraction::zero());
            texts.push(format!("{} < 0", parameter.name));
        }
    }
    let signs = texts.join(", ");
    let mut guesses = Vec::new();
    if !texts.is_empty() {
        guesses.push(Guess { text: signs.clone(), ranges: signed.clone() });
    }
    for (large, large_generator, x) in &parameters {
        for (small, small_generator, y) in &parameters {
            if x > y && *y > 0.0 {
                let mut ranges = signed.clone();
                let bound = Fraction::whole(Polynomial::generator(*small_generator));
                ranges.entry(*large_generator).lower.push(bound);
                let order = format!("{large} > {small}");
                let text = if signs.is_empty() { order } else { format!("{signs}, {order}") };
                guesses.push(Guess { text, ranges });
            }
        }
    }
    let exact = at_the_values(reader, model, ranges)?;
    guesses.push(Guess { text: "the values of the sheet, and perhaps for no others".to_owned(), ranges: exact });
    Ok(guesses)
}

/// The ranges with every parameter at its value in the sheet.
pub(super) fn at_the_values(reader: &mut Reader<'_>, model: &Model, ranges: &Ranges) -> Step<Ranges> {
    let mut exact = ranges.clone();
    for parameter in &model.parameters {
        let generator = reader.ring.generator(Kind::Symbol(parameter.symbol))?;
        if let Some(value) = model.graph.as_number(parameter.default) {
            let value = rational(value.as_rational());
            *exact.entry(generator) = super::sign::Range { lower: vec![value.clone()], upper: vec![value] };
        }
    }
    Ok(exact)
}
