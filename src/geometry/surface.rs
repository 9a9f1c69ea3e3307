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
//! parallel. For the same reason EG - F^2 in the curvatures is |N|^2. With N = g a, g the factors that the components
//! share, and l = phi_uu.a, m = phi_uv.a, n2 = phi_vv.a (no unit vector anywhere)
//!
//!   K = (l n2 - m^2)/(g^2 |a|^4),   H = (E n2 - 2Fm + G l)/(2 g |g| |a|^3),
//!
//! which leaves one division for each curvature and no power of g to cancel.

use super::content::{collect, take_content};
use crate::calculus::{Vector, cross, differentiate_vector, divide, dot, negate, norm, scale, squared_norm};
use crate::expression::{ExpressionId, Graph, SymbolId};
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
    /// g: the factors that the components of N share, as far as they are written as factors.
    pub content: ExpressionId,
    /// |g|
    pub content_size: ExpressionId,
    /// a: N without the shared factors, N = g a.
    pub direction: Vector,
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

/// Coefficients of the second fundamental form, with the unit normal.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SecondForm {
    /// L = phi_uu.n
    pub l: ExpressionId,
    /// M = phi_uv.n
    pub m: ExpressionId,
    /// N2 = phi_vv.n
    pub n: ExpressionId,
}

/// Curvatures as fractions, so that a density can cancel a power of |N|, see the top of the file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Curvature {
    /// l n2 - m^2
    gauss: ExpressionId,
    /// E n2 - 2Fm + G l
    mean: ExpressionId,
    /// g
    content: ExpressionId,
    /// |g|
    content_size: ExpressionId,
    /// |a|
    length: ExpressionId,
    /// |a|^2 = a.a
    length_squared: ExpressionId,
    /// |N| = |g| |a|
    element: ExpressionId,
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
        let (content, content_size) = collect(graph, [first, second, third]);
        let normal = scale(graph, content, &direction);
        let length = norm(graph, &direction);
        let element = graph.multiply(content_size, length);
        Self { position, variables, tangents, normal, element, content, content_size, direction }
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

    /// L, M, N2; undefined where the map is not regular.
    pub fn second_form(&self, graph: &mut Graph) -> SecondForm {
        let [l, m, n] = self.second_derivatives(graph).map(|second| {
            let along = dot(graph, &second, &self.normal);
            graph.divide(along, self.element)
        });
        SecondForm { l, m, n }
    }

    /// What both curvatures are made of.
    pub fn curvature(&self, graph: &mut Graph) -> Curvature {
        let FirstForm { e, f, g } = self.first_form(graph);
        let [l, m, n] = self.second_derivatives(graph).map(|second| dot(graph, &second, &self.direction));
        let product = graph.multiply(l, n);
        let mixed = graph.square(m);
        let gauss = graph.subtract(product, mixed);

        let (en, gl) = (graph.multiply(e, n), graph.multiply(g, l));
        let outer = graph.add(en, gl);
        let fm = graph.multiply(f, m);
        let two = graph.integer(2);
        let twice = graph.multiply(two, fm);
        let mean = graph.subtract(outer, twice);

        Curvature {
            gauss,
            mean,
            content: self.content,
            content_size: self.content_size,
            length: norm(graph, &self.direction),
            length_squared: squared_norm(graph, &self.direction),
            element: self.element,
        }
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
    /// K = (l n2 - m^2)/(g |a|^2)^2
    pub fn gauss_curvature(&self, graph: &mut Graph) -> ExpressionId {
        let base = graph.multiply(self.content, self.length_squared);
        let divisor = graph.square(base);
        graph.divide(self.gauss, divisor)
    }

    /// H = (E n2 - 2Fm + G l)/(2 g |a|^2 |N|)
    pub fn mean_curvature(&self, graph: &mut Graph) -> ExpressionId {
        let base = self.mean_divisor(graph);
        let divisor = graph.multiply(base, self.element);
        graph.divide(self.mean, divisor)
    }

    /// K |N|, the density of the total curvature: (l n2 - m^2)/(|g| |a|^3)
    pub fn gauss_density(&self, graph: &mut Graph) -> ExpressionId {
        let cube = graph.multiply(self.length_squared, self.length);
        let divisor = graph.multiply(self.content_size, cube);
        graph.divide(self.gauss, divisor)
    }

    /// H |N|: (E n2 - 2Fm + G l)/(2 g |a|^2)
    pub fn mean_density(&self, graph: &mut Graph) -> ExpressionId {
        let divisor = self.mean_divisor(graph);
        graph.divide(self.mean, divisor)
    }

    /// H^2 |N|, the density of the bending energy: (H |N|)^2/|N|
    pub fn squared_mean_density(&self, graph: &mut Graph) -> ExpressionId {
        let density = self.mean_density(graph);
        let square = graph.square(density);
        graph.divide(square, self.element)
    }

    /// 2 g |a|^2
    fn mean_divisor(&self, graph: &mut Graph) -> ExpressionId {
        let two = graph.integer(2);
        let twice = graph.multiply(two, self.content);
        graph.multiply(twice, self.length_squared)
    }
}
