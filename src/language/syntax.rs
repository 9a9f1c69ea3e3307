//! The syntax tree of a sheet: what was written and where, before names and kinds are checked.
//!
//! Expressions live in an arena ([`Sheet::expressions`]) and refer to each other by [`SyntaxId`], so that no pass over
//! them needs recursion on depth. An operand always has a smaller index than the expression that contains it.

use crate::expression::Exact;

/// A range of bytes in the text of the sheet.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default)]
pub struct Span {
    /// First byte.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
}

/// A name as written, with its place.
#[derive(Clone, PartialEq, Debug)]
pub struct Name {
    /// The name; `π` is already `pi`.
    pub text: String,
    /// Where it stands.
    pub span: Span,
}

/// Index of an expression in [`Sheet::expressions`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct SyntaxId(pub u32);

/// A whole sheet.
#[derive(Clone, Debug, Default)]
pub struct Sheet {
    /// Arena of all expressions.
    pub expressions: Vec<Syntax>,
    /// The statements that could be read, in the order of the text.
    pub statements: Vec<Statement>,
    /// Names whose definitions could not be read, so that their uses need not be reported as unknown.
    pub unread: Vec<Name>,
}

impl Sheet {
    /// The expression at `id`.
    pub fn get(&self, id: SyntaxId) -> &Syntax {
        &self.expressions[id.0 as usize]
    }
}

/// One expression and its place.
#[derive(Clone, Debug)]
pub struct Syntax {
    /// Where it stands, brackets around it left out.
    pub span: Span,
    /// What it is.
    pub kind: SyntaxKind,
}

/// What an expression is.
#[derive(Clone, Debug)]
pub enum SyntaxKind {
    /// A number, with the unit in brackets after it.
    Number {
        /// The exact value as typed, before the unit.
        value: Exact,
        /// `[m/s^2]`, if there is one.
        unit: Option<UnitSyntax>,
    },
    /// A name that is not followed by an opening parenthesis. `pi` and `inf` come as names too.
    Name(String),
    /// `callee(arguments)`
    Call {
        /// What stands before the parenthesis.
        callee: Name,
        /// The arguments, in order.
        arguments: Vec<SyntaxId>,
    },
    /// `(a, b, c)`: two or more components (three are due; the checker says so).
    Vector(Vec<SyntaxId>),
    /// `base.x`, `base.xy`
    Component {
        /// The vector or tensor.
        base: SyntaxId,
        /// What stands after the dot.
        field: Name,
    },
    /// `-a`
    Negate(SyntaxId),
    /// `not a`
    Not(SyntaxId),
    /// `a + b` and the other operators of two operands.
    Binary {
        /// Which one.
        operator: Operator,
        /// Where the operator itself stands.
        operator_span: Span,
        /// Left operand.
        left: SyntaxId,
        /// Right operand.
        right: SyntaxId,
    },
    /// `a < b <= c`: one or more comparisons that must all hold.
    Compare {
        /// The first operand.
        first: SyntaxId,
        /// Each comparison with its right operand.
        rest: Vec<(Comparison, SyntaxId)>,
    },
    /// `sum(i in 1..8, term)`
    Sum {
        /// The index.
        index: Name,
        /// First value.
        from: SyntaxId,
        /// Last value, included.
        to: SyntaxId,
        /// The term.
        term: SyntaxId,
    },
}

/// An operator of two operands.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
#[allow(missing_docs)]
pub enum Operator {
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
    And,
    Or,
}

/// A comparison.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
#[allow(missing_docs)]
pub enum Comparison {
    Less,
    LessEqual,
    Greater,
    GreaterEqual,
}

/// A unit as written: a product of powers of named units.
#[derive(Clone, PartialEq, Debug)]
pub struct UnitSyntax {
    /// Name, exponent (numerator, denominator) of each factor; a divisor has a negative exponent.
    pub factors: Vec<(Name, (i32, i32))>,
    /// The brackets and what is between them.
    pub span: Span,
}

/// One statement.
#[derive(Clone, Debug)]
pub enum Statement {
    /// `name = ...` or `name(arguments) = ...`
    Definition(DefinitionSyntax),
    /// `assume condition`
    Assume {
        /// The condition.
        condition: SyntaxId,
        /// The whole statement.
        span: Span,
    },
}

/// A definition with everything that may follow its right side.
#[derive(Clone, Debug)]
pub struct DefinitionSyntax {
    /// What is defined.
    pub name: Name,
    /// `Some` for `name(arguments) = ...`.
    pub arguments: Option<Vec<Name>>,
    /// The right side.
    pub value: SyntaxId,
    /// `on v in [0, a], u in [0, 2*pi]`, in the order written.
    pub region: Option<Vec<IntervalSyntax>>,
    /// `where condition`
    pub trim: Option<SyntaxId>,
    /// `in (0, 10]` after a number: the admissible range.
    pub range: Option<RangeSyntax>,
    /// `as [mm^2]`
    pub shown_as: Option<UnitSyntax>,
    /// The whole statement.
    pub span: Span,
}

/// `v in [0, a]` after `on`.
#[derive(Clone, Debug)]
pub struct IntervalSyntax {
    /// The variable.
    pub variable: Name,
    /// The interval.
    pub range: RangeSyntax,
}

/// An interval in standard notation: `[0, a)`, `(0, inf)`.
#[derive(Clone, Debug)]
pub struct RangeSyntax {
    /// Lower end (`-inf` comes as the negation of the name `inf`).
    pub lower: SyntaxId,
    /// Upper end.
    pub upper: SyntaxId,
    /// Whether the lower end belongs to the interval.
    pub lower_closed: bool,
    /// Whether the upper end belongs to the interval.
    pub upper_closed: bool,
    /// `[5 m...]`: brackets included.
    pub span: Span,
}
