//! Functionals as integrals: which densities each needs on every patch of its chain, and how their integrals combine.
//!
//! First and second moments are taken about a pivot, a point near the surface, so that a small part far from the origin
//! loses no digits; the parallel-axis theorem brings them to the centroid.

use super::bounded::Bounded;
use crate::calculus::Vector;
use crate::expression::{ExpressionId, Graph, SymbolId};
use crate::geometry::{Surface, density, flux_density, volume_density};
use crate::language::{Functional, FunctionalKind, SurfaceSymbols};

/// Position of the pivot of moments, as parameters of the kernels.
#[derive(Clone, Copy, Debug)]
pub(super) struct Pivot {
    pub(super) symbols: [SymbolId; 3],
    pub(super) position: [f64; 3],
}

/// The second moments in the order of tensor components: xx, yy, zz, xy, xz, yz.
const PAIRS: [(usize, usize); 6] = [(0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2)];

/// Densities per du dv that the functional needs on one patch.
pub(super) fn densities(
    graph: &mut Graph,
    surface: &Surface,
    symbols: &SurfaceSymbols,
    functional: &Functional,
    pivot: &Pivot,
) -> Vec<ExpressionId> {
    match &functional.kind {
        FunctionalKind::Area => vec![surface.element],
        FunctionalKind::Integral(f) => vec![density(graph, surface, symbols, *f)],
        FunctionalKind::Flux(field) => vec![flux_density(graph, surface, symbols, field)],
        FunctionalKind::Volume => vec![volume_density(graph, surface)],
        FunctionalKind::Centroid(rho) => {
            let (mass, r) = mass_and_arm(graph, *rho, pivot, symbols);
            weighted(graph, surface, symbols, mass, &r, &[])
        }
        FunctionalKind::Inertia { density: rho, about: None } => {
            let (mass, r) = mass_and_arm(graph, *rho, pivot, symbols);
            weighted(graph, surface, symbols, mass, &r, &PAIRS)
        }
        FunctionalKind::Inertia { density: rho, about: Some(point) } => {
            let one = graph.integer(1);
            let mass = rho.unwrap_or(one);
            let r = std::array::from_fn(|axis| {
                let position = graph.symbol(symbols.position[axis]);
                graph.subtract(position, point[axis])
            });
            tensor_entries(graph, &r)
                .into_iter()
                .map(|entry| {
                    let integrand = graph.multiply(mass, entry);
                    density(graph, surface, symbols, integrand)
                })
                .collect()
        }
    }
}

/// The density of mass (1 if absent) and the position relative to the pivot.
fn mass_and_arm(
    graph: &mut Graph,
    rho: Option<ExpressionId>,
    pivot: &Pivot,
    symbols: &SurfaceSymbols,
) -> (ExpressionId, Vector) {
    let one = graph.integer(1);
    let r = std::array::from_fn(|axis| {
        let position = graph.symbol(symbols.position[axis]);
        let origin = graph.symbol(pivot.symbols[axis]);
        graph.subtract(position, origin)
    });
    (rho.unwrap_or(one), r)
}

/// Densities of mass, first moments, and the second moments of `pairs`.
fn weighted(
    graph: &mut Graph,
    surface: &Surface,
    symbols: &SurfaceSymbols,
    mass: ExpressionId,
    r: &Vector,
    pairs: &[(usize, usize)],
) -> Vec<ExpressionId> {
    let mut integrands = vec![mass];
    integrands.extend(r.map(|arm| graph.multiply(mass, arm)));
    for &(i, j) in pairs {
        let product = graph.multiply(r[i], r[j]);
        integrands.push(graph.multiply(mass, product));
    }
    integrands.into_iter().map(|integrand| density(graph, surface, symbols, integrand)).collect()
}

/// The tensor of mechanics of a unit mass at `r`: y^2 + z^2 and cyclic, then -xy, -xz, -yz.
fn tensor_entries(graph: &mut Graph, r: &Vector) -> [ExpressionId; 6] {
    let squares = r.map(|arm| graph.square(arm));
    PAIRS.map(|(i, j)| {
        if i == j {
            graph.add(squares[(i + 1) % 3], squares[(i + 2) % 3])
        } else {
            let product = graph.multiply(r[i], r[j]);
            graph.negate(product)
        }
    })
}

/// The results of a functional from the integrals of its densities over the whole chain.
pub(super) fn combine(kind: &FunctionalKind, integrals: &[Bounded], pivot: &Pivot) -> Vec<Bounded> {
    match kind {
        FunctionalKind::Area | FunctionalKind::Integral(_) | FunctionalKind::Flux(_) | FunctionalKind::Volume => {
            integrals.to_vec()
        }
        FunctionalKind::Inertia { about: Some(_), .. } => integrals.to_vec(),
        FunctionalKind::Centroid(_) => {
            let mass = integrals[0];
            (0..3).map(|axis| Bounded::exact(pivot.position[axis]).add(integrals[1 + axis].divide(mass))).collect()
        }
        FunctionalKind::Inertia { about: None, .. } => about_centroid(integrals),
    }
}

/// Parallel-axis theorem: the second moments about the centroid are Q_ij - S_i S_j / M.
fn about_centroid(integrals: &[Bounded]) -> Vec<Bounded> {
    let mass = integrals[0];
    let moment = |i: usize, j: usize, second: Bounded| {
        let correction = integrals[1 + i].multiply(integrals[1 + j]).divide(mass);
        second.subtract(correction)
    };
    let central: Vec<Bounded> =
        PAIRS.iter().zip(&integrals[4..]).map(|(&(i, j), &second)| moment(i, j, second)).collect();
    PAIRS
        .iter()
        .enumerate()
        .map(
            |(index, &(i, j))| {
                if i == j { central[(i + 1) % 3].add(central[(i + 2) % 3]) } else { central[index].scale(-1.0) }
            },
        )
        .collect()
}
