//! The checked model of a sheet: every name resolved, every kind and unit checked, every formula in one graph.
//!
//! All numbers are in coherent SI units (a sheet without units has plain numbers). Each functional (`area(head)`, ...)
//! has symbols that stand for its results, so that an answer is an ordinary formula over parameters and these symbols.

use super::diagnostic::{Diagnostic, Source};
use super::syntax::Span;
use super::unit::{Dimension, Unit};
use crate::expression::{ExpressionId, Graph, SymbolId};

/// A checked sheet.
#[derive(Clone, Debug)]
pub struct Model {
    /// The text it came from.
    pub source: Source,
    /// All formulas.
    pub graph: Graph,
    /// Numbers that the user may vary, in the order of the text.
    pub parameters: Vec<Parameter>,
    /// Conditions taken as true; false for the values given is an error.
    pub assumptions: Vec<Assumption>,
    /// `in` on derived numbers: checked claims.
    pub claims: Vec<Claim>,
    /// Patches, moved copies and patches with another region included, in the order of the text.
    pub patches: Vec<Patch>,
    /// Named chains (a named patch is not repeated here).
    pub chains: Vec<NamedChain>,
    /// Functionals in an order in which each depends only on earlier ones.
    pub functionals: Vec<Functional>,
    /// Named numbers, vectors and tensors that do not depend on a patch variable, in the order of the text:
    /// parameters, derived numbers and answers.
    pub values: Vec<NamedValue>,
    /// Symbols that an integrand or a `where` may use.
    pub surface_symbols: SurfaceSymbols,
    /// Problems that do not prevent use.
    pub warnings: Vec<Diagnostic>,
}

/// A number of the sheet that the user may vary.
#[derive(Clone, Debug)]
pub struct Parameter {
    /// Its name.
    pub name: String,
    /// The symbol that stands for it in formulas.
    pub symbol: SymbolId,
    /// Its value in the sheet, in SI units; a constant formula.
    pub default: ExpressionId,
    /// The unit it was written with: a bare `--set` takes it.
    pub unit: Option<Unit>,
    /// Its dimension.
    pub dimension: Dimension,
    /// The admissible range.
    pub range: Option<Interval>,
    /// Its definition in the text.
    pub span: Span,
}

/// An interval whose ends are formulas.
#[derive(Clone, Debug)]
pub struct Interval {
    /// Lower end.
    pub lower: Bound,
    /// Upper end.
    pub upper: Bound,
    /// Whether the lower end belongs to it.
    pub lower_closed: bool,
    /// Whether the upper end belongs to it.
    pub upper_closed: bool,
    /// Where it stands.
    pub span: Span,
}

/// An end of an interval.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Bound {
    /// A number.
    Finite(ExpressionId),
    /// `-inf`
    MinusInfinity,
    /// `inf`
    PlusInfinity,
}

/// `assume condition`
#[derive(Clone, Debug)]
pub struct Assumption {
    /// A truth formula over parameters.
    pub condition: ExpressionId,
    /// Where it stands.
    pub span: Span,
}

/// `name = ... in [lower, upper]` on a derived number.
#[derive(Clone, Debug)]
pub struct Claim {
    /// The number.
    pub name: String,
    /// Its formula.
    pub value: ExpressionId,
    /// Where it must lie.
    pub range: Interval,
}

/// Index of a patch in [`Model::patches`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct PatchId(pub usize);

/// A surface patch: a map from a region of two variables to space.
#[derive(Clone, Debug)]
pub struct Patch {
    /// Its name; a moved or cut copy has a descriptive one such as `mirror(head)`.
    pub name: String,
    /// Whether `name` is defined in the sheet under this very name.
    pub named: bool,
    /// The components of the position, in SI units.
    pub position: [ExpressionId; 3],
    /// The two variables in the order of the arguments: N = phi_first x phi_second.
    pub variables: [SymbolId; 2],
    /// Dimensions of the two variables.
    pub variable_dimensions: [Dimension; 2],
    /// The interval of each variable, in the order of the arguments. At most one of them depends on the other variable.
    pub intervals: [Interval; 2],
    /// `where`: a truth formula over variables, parameters and [`SurfaceSymbols`].
    pub trim: Option<ExpressionId>,
    /// -1 where a mirror image keeps the side of the original: N is multiplied by it.
    pub orientation: i8,
    /// Dimension of the position.
    pub dimension: Dimension,
    /// Its definition in the text.
    pub span: Span,
}

/// An integer combination of patches.
#[derive(Clone, PartialEq, Eq, Hash, Debug, Default)]
pub struct Chain {
    /// Patches with their coefficients, collected (each patch once, no zero), in the order of first appearance.
    pub terms: Vec<(i64, PatchId)>,
}

/// A chain with a name in the sheet.
#[derive(Clone, Debug)]
pub struct NamedChain {
    /// Its name.
    pub name: String,
    /// What it is.
    pub chain: Chain,
    /// Its definition in the text.
    pub span: Span,
}

/// Index of a functional in [`Model::functionals`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct FunctionalId(pub usize);

/// A question about a chain whose results are used like numbers. Equal functionals exist once.
#[derive(Clone, Debug)]
pub struct Functional {
    /// As written, e.g. `area(head)`.
    pub text: String,
    /// Which question.
    pub kind: FunctionalKind,
    /// About which chain.
    pub chain: Chain,
    /// Symbols that stand for its results: 1 number, 3 components, or 6 for a tensor (xx, yy, zz, xy, xz, yz).
    pub results: Vec<SymbolId>,
    /// Functionals whose results its formulas use.
    pub depends_on: Vec<FunctionalId>,
    /// Where it first stands.
    pub span: Span,
}

/// Kinds of questions. Formulas are over parameters, patch variables, [`SurfaceSymbols`] and earlier results.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub enum FunctionalKind {
    /// Area, with |coefficient|.
    Area,
    /// Integral of a density over area, with |coefficient|.
    Integral(ExpressionId),
    /// Flux of a field through N du dv, with the coefficient.
    Flux([ExpressionId; 3]),
    /// Signed volume, a third of the flux of the position.
    Volume,
    /// Centroid with an optional density.
    Centroid(Option<ExpressionId>),
    /// Tensor of inertia of the mechanics (off-diagonal entries are negative products).
    Inertia {
        /// Mass per area, 1 if absent.
        density: Option<ExpressionId>,
        /// Reference point; the centroid (of the same density) if absent.
        about: Option<[ExpressionId; 3]>,
    },
}

/// A named number, vector or tensor.
#[derive(Clone, Debug)]
pub struct NamedValue {
    /// Its name.
    pub name: String,
    /// 1 formula for a number, 3 for a vector, 6 for a tensor (xx, yy, zz, xy, xz, yz); over parameters and results.
    pub components: Vec<ExpressionId>,
    /// Its dimension.
    pub dimension: Dimension,
    /// The unit to show it in: the one after `as`, else the one the parameter was written with, else none (SI).
    pub shown_as: Option<Unit>,
    /// Whether it depends on a functional: it is then an answer.
    pub is_answer: bool,
    /// Functionals it depends on, through other values too.
    pub depends_on: Vec<FunctionalId>,
    /// Its definition in the text.
    pub span: Span,
}

/// Symbols with a meaning at a point of a surface.
#[derive(Clone, Copy, Debug)]
pub struct SurfaceSymbols {
    /// `x y z`
    pub position: [SymbolId; 3],
    /// `nx ny nz`
    pub unit_normal: [SymbolId; 3],
    /// `K`
    pub gauss_curvature: SymbolId,
    /// `H`
    pub mean_curvature: SymbolId,
}
