//! First- and second-order geometry of a patch as formulas.
//!
//! For a map phi of (u, v), in the order of the patch's arguments,
//!
//!   N = s phi_u x phi_v   (s = -1 for mirror images that keep their side, else 1),   dA = |N| du dv,   n = N/|N|,
//!   E = phi_u.phi_u, F = phi_u.phi_v, G = phi_v.phi_v,   L = phi_uu.n, M = phi_uv.n, N2 = phi_vv.n,
//!   K = (L N2 - M^2)/(EG - F^2),   H = (E N2 - 2FM + G L)/(2 (EG - F^2)).
//!
//! With the outward normal a sphere of radius r has H = -1/r. The area element is the norm of the cross product, never
//! sqrt(EG - F^2): the two are equal (Lagrange's identity), but the difference cancels where the tangents are nearly
//! parallel. For the same reason EG - F^2 in the curvatures is |N|^2, and the second form is kept along N (not n), which
//! leaves one division for each curvature.

use super::content::take_content;
use crate::calculus::{Vector, cross, differentiate_vector, divide, dot, negate, norm, scale, squared_norm};
use crate::expression::{ExpressionId, Function, Graph, SymbolId};
use crate::language::Patch;

/// Position, tangents, normal and area element of a patch.
///
/// Everything of second order is built on demand by the methods, because it is several times as large; since equal
/// formulas exist once in the graph, asking twice costs nothing.
#[derive(Clone, Debug, PartialEq)]
pub struct Surface {
    /// phi
    pub position: Vector,
    /// The two variables in the order of the arguments.
    pub variables: [SymbolId; 2],
    /// The partial derivatives of phi by the two variables.
    pub tangents: [Vector; 2],
    /// N, not normalized: it vanishes where the map is not regular.
    pub normal: Vector,
    /// |N|, the area element per du dv.
    pub element: ExpressionId,
    /// |N|^2 = N.N
    pub element_squared: ExpressionId,
}

/// Coefficients of the first fundamental form.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct FirstForm {
    /// E = phi_u.phi_u
    pub e: ExpressionId,
    /// F = phi_u.phi_v
    pub f: ExpressionId,
    /// G = phi_v.phi_v
    pub g: ExpressionId,
}

/// Coefficients of the second fundamental form, with respect to n or (where said) to N.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SecondForm {
    /// L = phi_uu.n
    pub l: ExpressionId,
    /// M = phi_uv.n
    pub m: ExpressionId,
    /// N2 = phi_vv.n
    pub n: ExpressionId,
}

/// Curvatures as fractions over powers of |N|, so that a density can cancel one power.
///
/// K = gauss/|N|^4, H = mean/(2 |N|^3).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Curvature {
    /// (phi_uu.N)(phi_vv.N) - (phi_uv.N)^2
    pub gauss: ExpressionId,
    /// E phi_vv.N - 2 F phi_uv.N + G phi_uu.N
    pub mean: ExpressionId,
    /// |N|
    pub element: ExpressionId,
    /// |N|^2 = N.N
    pub element_squared: ExpressionId,
}

impl Surface {
    /// The surface of a patch.
    pub fn new(graph: &mut Graph, patch: &Patch) -> Self {
        Self::from_map(graph, patch.position, patch.variables, patch.orientation < 0)
    }

    /// The surface of the map `position` of `variables`; `reversed` turns N around.
    pub fn from_map(graph: &mut Graph, position: Vector, variables: [SymbolId; 2], reversed: bool) -> Self {
        let tangents = variables.map(|variable| differentiate_vector(graph, &position, variable));
        // N = g a with the shared factors of the tangents, and of their cross product, in g; |N| = |g| |a|.
        let [(first, u), (second, v)] = [0, 1].map(|i| take_content(graph, &tangents[i]));
        let rest = cross(graph, &u, &v);
        let (third, mut direction) = take_content(graph, &rest);
        if reversed {
            direction = negate(graph, &direction);
        }
        let pair = graph.multiply(first, second);
        let content = graph.multiply(pair, third);
        let normal = scale(graph, content, &direction);
        let (size, length) = (graph.call(Function::Abs, content), norm(graph, &direction));
        let element = graph.multiply(size, length);
        let (square, length) = (graph.square(content), squared_norm(graph, &direction));
        let element_squared = graph.multiply(square, length);
        Self { position, variables, tangents, normal, element, element_squared }
    }

    /// n = N/|N|; undefined where the map is not regular.
    pub fn unit_normal(&self, graph: &mut Graph) -> Vector {
        divide(graph, &self.normal, self.element)
    }

    /// E, F, G.
    pub fn first_form(&self, graph: &mut Graph) -> FirstForm {
        let [u, v] = &self.tangents;
        FirstForm { e: squared_norm(graph, u), f: dot(graph, u, v), g: squared_norm(graph, v) }
    }

    /// phi_uu, phi_uv, phi_vv.
    pub fn second_derivatives(&self, graph: &mut Graph) -> [Vector; 3] {
        let [u, v] = self.variables;
        [
            differentiate_vector(graph, &self.tangents[0], u),
            differentiate_vector(graph, &self.tangents[0], v),
            differentiate_vector(graph, &self.tangents[1], v),
        ]
    }

    /// L, M, N2 with the unit normal.
    pub fn second_form(&self, graph: &mut Graph) -> SecondForm {
        let along = self.second_form_along_normal(graph);
        let [l, m, n] = [along.l, along.m, along.n].map(|coefficient| graph.divide(coefficient, self.element));
        SecondForm { l, m, n }
    }

    /// phi_uu.N, phi_uv.N, phi_vv.N with the normal as it is, so |N| times L, M, N2.
    pub fn second_form_along_normal(&self, graph: &mut Graph) -> SecondForm {
        let [l, m, n] = self.second_derivatives(graph).map(|second| dot(graph, &second, &self.normal));
        SecondForm { l, m, n }
    }

    /// The numerators of both curvatures and the |N| they are divided by.
    pub fn curvature(&self, graph: &mut Graph) -> Curvature {
        let first = self.first_form(graph);
        let second = self.second_form_along_normal(graph);
        let product = graph.multiply(second.l, second.n);
        let mixed = graph.square(second.m);
        let gauss = graph.subtract(product, mixed);

        let (en, gl) = (graph.multiply(first.e, second.n), graph.multiply(first.g, second.l));
        let outer = graph.add(en, gl);
        let fm = graph.multiply(first.f, second.m);
        let two = graph.integer(2);
        let twice = graph.multiply(two, fm);
        let mean = graph.subtract(outer, twice);

        Curvature { gauss, mean, element: self.element, element_squared: self.element_squared }
    }

    /// K, the product of the principal curvatures.
    pub fn gauss_curvature(&self, graph: &mut Graph) -> ExpressionId {
        self.curvature(graph).gauss_curvature(graph)
    }

    /// H, the mean of the principal curvatures; negative where the surface bends away from n, as a sphere does from
    /// its outward normal.
    pub fn mean_curvature(&self, graph: &mut Graph) -> ExpressionId {
        self.curvature(graph).mean_curvature(graph)
    }
}

impl Curvature {
    /// K = gauss/|N|^4
    pub fn gauss_curvature(&self, graph: &mut Graph) -> ExpressionId {
        let fourth = graph.square(self.element_squared);
        graph.divide(self.gauss, fourth)
    }

    /// H = mean/(2 |N|^3)
    pub fn mean_curvature(&self, graph: &mut Graph) -> ExpressionId {
        let cube = self.element_cubed(graph);
        let two = graph.integer(2);
        let divisor = graph.multiply(two, cube);
        graph.divide(self.mean, divisor)
    }

    /// K |N|, the density of the total curvature: gauss/|N|^3
    pub fn gauss_density(&self, graph: &mut Graph) -> ExpressionId {
        let cube = self.element_cubed(graph);
        graph.divide(self.gauss, cube)
    }

    /// H |N|: mean/(2 |N|^2)
    pub fn mean_density(&self, graph: &mut Graph) -> ExpressionId {
        let two = graph.integer(2);
        let divisor = graph.multiply(two, self.element_squared);
        graph.divide(self.mean, divisor)
    }

    /// H^2 |N|, the density of the bending energy: (mean/(2 |N|^2))^2/|N|
    pub fn squared_mean_density(&self, graph: &mut Graph) -> ExpressionId {
        let density = self.mean_density(graph);
        let square = graph.square(density);
        graph.divide(square, self.element)
    }

    fn element_cubed(&self, graph: &mut Graph) -> ExpressionId {
        graph.multiply(self.element_squared, self.element)
    }
}
