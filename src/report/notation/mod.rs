//! Formulas in the notations of papers and web pages: LaTeX, Typst, MathML Core.
//!
//! What a formula looks like is decided once, in `walk` (parentheses, juxtaposition, which functions go without brackets) and
//! `lines` (where a long formula breaks, which parts get a name of their own). A notation only says how to write a fraction,
//! a root, a line; so the three agree on everything else.

mod latex;
mod lines;
mod mathml;
mod name;
mod style;
mod typst;
mod walk;

use crate::simplify::Form;
use latex::Latex;
use lines::Layout;
use mathml::MathMl;
pub(in crate::report) use name::greek_name;
use style::Notation;
use typst::Typst;

/// A named formula, or a named vector.
#[derive(Clone, Debug)]
pub struct Equation {
    /// What stands left of the equals sign, as a name of a sheet (`E`, `N_x`, `phi_u`); `dA` is the differential of A.
    pub name: String,
    /// One formula, or the components of a vector.
    pub right: Vec<Form>,
    /// Variables whose differentials follow the formula: dA = W du dv has `u` and `v`. Empty for an ordinary formula.
    pub differentials: Vec<String>,
}

impl Equation {
    /// `name = right`
    pub fn new(name: impl Into<String>, right: Form) -> Self {
        Self { name: name.into(), right: vec![right], differentials: Vec::new() }
    }
}

/// A list of equations that stands by itself.
///
/// Parts that do not fit a line get names of their own, defined just before the equation that uses them.
///
/// ```
/// use quadrel::report::notation::{Document, Equation};
/// use quadrel::simplify::{Form, NameKind};
///
/// let radius = Form::Name("R_1".into(), NameKind::Parameter);
/// let square = Form::Power(Box::new(radius), Box::new(Form::integer(2)));
/// let document = Document { equations: vec![Equation::new("E", square)], ..Document::default() };
/// assert_eq!(document.latex(), "\\begin{align*}\n  E &= R_{1}^{2}\n\\end{align*}\n");
/// ```
#[derive(Clone, Debug, Default)]
pub struct Document {
    /// What the names in the equations stand for; printed first.
    pub definitions: Vec<Equation>,
    /// The equations.
    pub equations: Vec<Equation>,
    /// Conditions under which the equations hold; printed last.
    pub conditions: Vec<Form>,
}

impl Document {
    /// An `align*` block for a document with the package `amsmath`.
    pub fn latex(&self) -> String {
        self.write(&Latex)
    }

    /// A block of mathematics, dollar signs included.
    pub fn typst(&self) -> String {
        self.write(&Typst)
    }

    /// One `math` element for each equation, in a `div`, ready to be put into a page.
    pub fn mathml(&self) -> String {
        self.write(&MathMl)
    }

    fn write(&self, notation: &dyn Notation) -> String {
        let mut layout = Layout::new(notation, self);
        for equation in self.definitions.iter().chain(&self.equations) {
            layout.equation(equation);
        }
        layout.conditions(&self.conditions);
        notation.document(&layout.finish())
    }
}

/// A formula for the mathematics mode of LaTeX with `amsmath`; several lines if it is long.
pub fn latex(form: &Form) -> String {
    one(&Latex, form)
}

/// A formula for the mathematics mode of Typst; several lines if it is long.
pub fn typst(form: &Form) -> String {
    one(&Typst, form)
}

/// A formula as a `math` element of MathML Core.
pub fn mathml(form: &Form) -> String {
    one(&MathMl, form)
}

fn one(notation: &dyn Notation, form: &Form) -> String {
    let unnamed = Document { equations: vec![Equation::new("", form.clone())], ..Document::default() };
    let mut layout = Layout::new(notation, &unnamed);
    layout.formula(form);
    notation.formula(&layout.finish())
}
