//! Formulas as source text: C99, Fortran 2008, Julia, Python, Rust.
//!
//! `lower` turns the graph into straight-line statements, one temporary for each shared part, with the operations in the
//! order of the graph; branches hold what only they use, so a branch that is not selected is not computed. A language
//! says how a call, a literal, a statement and a function look. What a language lacks is an error, never left out.

mod blocks;
mod c;
mod fortran;
mod identifier;
mod julia;
mod language;
mod lower;
mod python;
mod rust;

use crate::expression::{ExpressionId, Graph, SymbolId};
use language::Dialect;
use thiserror::Error;

/// A language that formulas are written in.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub enum Language {
    /// C99 with `math.h`.
    C,
    /// Fortran 2008, a module.
    Fortran,
    /// Julia; special functions come from the package SpecialFunctions.
    Julia,
    /// Python 3.11 or later with the module `math`.
    Python,
    /// Rust, the standard library only.
    Rust,
}

impl Language {
    /// All languages.
    pub const ALL: &[Language] = &[Language::C, Language::Fortran, Language::Julia, Language::Python, Language::Rust];

    /// The name for people.
    pub fn name(self) -> &'static str {
        match self {
            Language::C => "C99",
            Language::Fortran => "Fortran 2008",
            Language::Julia => "Julia",
            Language::Python => "Python",
            Language::Rust => "Rust",
        }
    }

    fn dialect(self) -> &'static dyn Dialect {
        match self {
            Language::C => &c::C,
            Language::Fortran => &fortran::Fortran,
            Language::Julia => &julia::Julia,
            Language::Python => &python::Python,
            Language::Rust => &rust::Rust,
        }
    }
}

/// What to write.
#[derive(Clone, Copy, Debug)]
pub struct Request<'a> {
    /// Where the formulas are.
    pub graph: &'a Graph,
    /// Name of the function; it is changed where the language does not allow it.
    pub function: &'a str,
    /// Arguments in their order.
    pub inputs: &'a [SymbolId],
    /// Results with their names.
    pub outputs: &'a [(String, ExpressionId)],
    /// Comment at the head: units, version, sheet; any number of lines.
    pub notes: &'a str,
}

/// Why formulas cannot be written in a language.
#[derive(Clone, PartialEq, Eq, Error, Debug)]
pub enum SourceError {
    /// The language and its standard library lack a function.
    #[error("{language} has no function {function} in its standard library")]
    Unsupported {
        /// The function, as a sheet names it.
        function: String,
        /// The language.
        language: &'static str,
    },
    /// A formula depends on a symbol that is not an input.
    #[error("{name} is not among the inputs")]
    MissingInput {
        /// The symbol.
        name: String,
    },
    /// A result is a truth value.
    #[error("{name} is a condition, not a number")]
    Condition {
        /// The output.
        name: String,
    },
    /// A constant is beyond the range of double precision.
    #[error("a constant is too large for double precision")]
    Constant,
    /// The formulas would take too many statements.
    #[error("the formulas take more than {limit} operations, those repeated in branches included")]
    TooLong {
        /// The most that are written.
        limit: usize,
    },
    /// `if` in `if` beyond what compilers take.
    #[error("conditions are nested deeper than {limit}")]
    TooDeep {
        /// The deepest nesting that is written.
        limit: usize,
    },
}

/// The formulas as the text of a source file.
///
/// ```
/// use quadrel::expression::{Function, Graph};
/// use quadrel::report::source::{Language, Request, source};
///
/// let mut graph = Graph::new();
/// let (r, v) = (graph.new_symbol("r"), graph.new_symbol("v"));
/// let (radius, angle) = (graph.symbol(r), graph.symbol(v));
/// let sine = graph.call(Function::Sin, angle);
/// let height = graph.multiply(radius, sine);
/// let outputs = [("z".to_owned(), height)];
/// let request = Request { graph: &graph, function: "height", inputs: &[r, v], outputs: &outputs, notes: "lengths in m" };
/// let text = source(Language::C, &request)?;
/// assert!(text.ends_with("double height(double r, double v)\n{\n    return r * sin(v);\n}\n"));
/// # Ok::<(), quadrel::report::source::SourceError>(())
/// ```
///
/// # Errors
/// What the language cannot say, see [`SourceError`].
pub fn source(language: Language, request: &Request<'_>) -> Result<String, SourceError> {
    let dialect = language.dialect();
    let program = lower::lower(language, dialect, request)?;
    Ok(dialect.file(&program))
}
