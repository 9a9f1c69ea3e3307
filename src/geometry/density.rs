//! The integrand of a surface integral as a density per du dv.
//!
//! An integrand f over a surface becomes f |N|. Where f is a polynomial of low degree in the unit normal and the
//! curvatures, with anything as coefficients,
//!
//!   f = f_0 + f_x nx + f_y ny + f_z nz + f_K K + f_H H + f_HH H^2,
//!
//! the powers of |N| that would cancel are never written: n dA is N du dv, so the density is
//! f_0 |N| + f_x N_x + f_y N_y + f_z N_z + ..., which stays defined and smooth where the map is not regular.

use super::surface::{Curvature, Surface};
use crate::calculus::{Vector, dot};
use crate::expression::{ExpressionId, Graph, Node, SymbolId};
use crate::language::SurfaceSymbols;
use rustc_hash::FxHashMap;

/// `integrand * |N|`, with the symbols of a surface point replaced by formulas of the patch's variables.
///
/// # Examples
/// See `tests/geometry.rs`.
pub fn density(
    graph: &mut Graph,
    surface: &Surface,
    symbols: &SurfaceSymbols,
    integrand: ExpressionId,
) -> ExpressionId {
    let Some(terms) = expand(graph, symbols, integrand) else {
        let value = at_point(graph, surface, symbols, &[integrand])[0];
        return graph.multiply(value, surface.element);
    };
    let mut total = graph.integer(0);
    let position = position_replacements(surface, symbols);
    for (monomial, coefficient) in terms {
        let coefficient = graph.substitute(&[coefficient], &position)[0];
        let base = monomial_density(graph, surface, monomial);
        let term = graph.multiply(coefficient, base);
        total = graph.add(total, term);
    }
    total
}

/// `F.N`, the flux of `field` per du dv; the components of the field may use the symbols of a surface point.
pub fn flux_density(graph: &mut Graph, surface: &Surface, symbols: &SurfaceSymbols, field: &Vector) -> ExpressionId {
    let normal = symbols.unit_normal.map(|symbol| graph.symbol(symbol));
    let component = dot(graph, field, &normal);
    density(graph, surface, symbols, component)
}

/// `phi.N/3`: over a closed surface with N outward its integral is the volume inside (Gauss's theorem).
pub fn volume_density(graph: &mut Graph, surface: &Surface) -> ExpressionId {
    let product = dot(graph, &surface.position, &surface.normal);
    let third = graph.fraction(1, 3);
    graph.multiply(third, product)
}

/// `formulas` with position, unit normal and curvatures of the surface in place of their symbols.
pub fn at_point(
    graph: &mut Graph,
    surface: &Surface,
    symbols: &SurfaceSymbols,
    formulas: &[ExpressionId],
) -> Vec<ExpressionId> {
    let used = graph.symbols_of(formulas);
    let mut replacements = position_replacements(surface, symbols);
    if symbols.unit_normal.iter().any(|symbol| used.contains(symbol)) {
        let normal = surface.unit_normal(graph);
        replacements.extend(symbols.unit_normal.into_iter().zip(normal));
    }
    if used.contains(&symbols.gauss_curvature) {
        replacements.push((symbols.gauss_curvature, surface.gauss_curvature(graph)));
    }
    if used.contains(&symbols.mean_curvature) {
        replacements.push((symbols.mean_curvature, surface.mean_curvature(graph)));
    }
    graph.substitute(formulas, &replacements)
}

fn position_replacements(surface: &Surface, symbols: &SurfaceSymbols) -> Vec<(SymbolId, ExpressionId)> {
    symbols.position.into_iter().zip(surface.position).collect()
}

/// Products of surface quantities whose density has a form of its own.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
enum Monomial {
    One,
    Normal(usize),
    Gauss,
    Mean,
    SquaredMean,
}

impl Monomial {
    fn times(self, other: Monomial) -> Option<Monomial> {
        match (self, other) {
            (Monomial::One, factor) | (factor, Monomial::One) => Some(factor),
            (Monomial::Mean, Monomial::Mean) => Some(Monomial::SquaredMean),
            _ => None,
        }
    }
}

fn monomial_density(graph: &mut Graph, surface: &Surface, monomial: Monomial) -> ExpressionId {
    let curvature = |graph: &mut Graph| -> Curvature { surface.curvature(graph) };
    match monomial {
        Monomial::One => surface.element,
        Monomial::Normal(axis) => surface.normal[axis],
        Monomial::Gauss => curvature(graph).gauss_density(graph),
        Monomial::Mean => curvature(graph).mean_density(graph),
        Monomial::SquaredMean => curvature(graph).squared_mean_density(graph),
    }
}

/// Monomials in ascending order, each with its coefficient.
type Polynomial = Vec<(Monomial, ExpressionId)>;

/// `integrand` as a polynomial in unit normal and curvatures, or `None` if it is not one of the form above.
///
/// Only the parts that depend on these symbols are taken apart; the coefficients are the formulas as they stand.
fn expand(graph: &mut Graph, symbols: &SurfaceSymbols, integrand: ExpressionId) -> Option<Polynomial> {
    let monomial_of = |symbol: SymbolId| {
        if symbol == symbols.gauss_curvature {
            return Some(Monomial::Gauss);
        }
        if symbol == symbols.mean_curvature {
            return Some(Monomial::Mean);
        }
        symbols.unit_normal.iter().position(|&axis| axis == symbol).map(Monomial::Normal)
    };
    // Nodes that depend on none of the symbols are absent; those that are no such polynomial hold `None`.
    let mut known: FxHashMap<ExpressionId, Option<Polynomial>> = FxHashMap::default();
    for id in graph.reachable(&[integrand]) {
        let node = graph.node(id);
        let expanded = match node {
            Node::Symbol(symbol) => match monomial_of(symbol) {
                Some(monomial) => Some(vec![(monomial, graph.integer(1))]),
                None => continue,
            },
            _ if node.children().as_slice().iter().all(|child| !known.contains_key(child)) => continue,
            _ => expand_node(graph, node, &known),
        };
        known.insert(id, expanded);
    }
    known.remove(&integrand).unwrap_or_else(|| Some(vec![(Monomial::One, integrand)]))
}

fn expand_node(
    graph: &mut Graph,
    node: Node,
    known: &FxHashMap<ExpressionId, Option<Polynomial>>,
) -> Option<Polynomial> {
    let of = |id: ExpressionId| known.get(&id).cloned().unwrap_or_else(|| Some(vec![(Monomial::One, id)]));
    match node {
        Node::Negate(a) => Some(of(a)?.into_iter().map(|(monomial, c)| (monomial, graph.negate(c))).collect()),
        Node::Add(a, b) => Some(combine(graph, &of(a)?, &of(b)?, Graph::add)),
        Node::Subtract(a, b) => Some(combine(graph, &of(a)?, &of(b)?, Graph::subtract)),
        Node::Multiply(a, b) => product(graph, &of(a)?, &of(b)?),
        Node::Divide(a, b) if !known.contains_key(&b) => {
            Some(of(a)?.into_iter().map(|(monomial, c)| (monomial, graph.divide(c, b))).collect())
        }
        Node::Power(a, b) if graph.as_number(b).is_some_and(|exponent| exponent.to_i64() == Some(2)) => {
            product(graph, &of(a)?, &of(a)?)
        }
        Node::Select(condition, yes, no) if !known.contains_key(&condition) => {
            Some(combine(graph, &of(yes)?, &of(no)?, |graph, a, b| graph.select(condition, a, b)))
        }
        _ => None,
    }
}

/// `operation` on the coefficients of equal monomials, 0 standing for an absent one.
fn combine(
    graph: &mut Graph,
    a: &Polynomial,
    b: &Polynomial,
    operation: impl Fn(&mut Graph, ExpressionId, ExpressionId) -> ExpressionId,
) -> Polynomial {
    let coefficient = |graph: &mut Graph, polynomial: &Polynomial, monomial: Monomial| {
        polynomial.iter().find(|(own, _)| *own == monomial).map_or_else(|| graph.integer(0), |&(_, c)| c)
    };
    let mut monomials: Vec<Monomial> = a.iter().chain(b).map(|&(monomial, _)| monomial).collect();
    monomials.sort_unstable();
    monomials.dedup();
    let combined = monomials.into_iter().map(|monomial| {
        let (left, right) = (coefficient(graph, a, monomial), coefficient(graph, b, monomial));
        (monomial, operation(graph, left, right))
    });
    combined.collect()
}

fn product(graph: &mut Graph, a: &Polynomial, b: &Polynomial) -> Option<Polynomial> {
    let mut total = Polynomial::new();
    for &(left, c) in a {
        for &(right, d) in b {
            let term = vec![(left.times(right)?, graph.multiply(c, d))];
            total = combine(graph, &total, &term, Graph::add);
        }
    }
    Some(total)
}
