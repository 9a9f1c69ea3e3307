//! What a notation has to say; everything is built from these pieces.

use super::name::Symbol;

/// Signs between formulas.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Mark {
    Plus,
    Minus,
    /// A visible multiplication sign.
    Dot,
    /// Juxtaposition.
    Nothing,
    /// Juxtaposition with a thin space, beside words and differentials.
    Thin,
    /// Juxtaposition before or after the name of a function.
    BesideFunction,
    /// A division within an exponent.
    Slash,
    Comma,
    Less,
    LessEqual,
    Greater,
    GreaterEqual,
    And,
    Or,
    Not,
}

/// What may enclose a formula.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Fence {
    Round,
    Bars,
}

/// One line of the page.
#[derive(Clone, Debug)]
pub(super) struct Line {
    /// What stands left of the equals sign; `None` in a continued line and in a formula without a name.
    pub left: Option<String>,
    /// The formula.
    pub right: String,
    /// Steps of indentation of a continued line.
    pub indent: usize,
}

/// A notation. Every text that is passed in and out is a complete piece.
pub(super) trait Notation {
    /// Decimal digits with at most a point, without an exponent.
    fn digits(&self, digits: &str) -> String;
    fn pi(&self) -> String;
    /// Euler's number, upright, because `e` is a free name.
    fn euler(&self) -> String;
    /// The upright `d` of a differential.
    fn differential(&self) -> String;
    fn symbol(&self, symbol: &Symbol) -> String;
    /// The name of a function, upright.
    fn function(&self, name: &str) -> String;
    /// A function before an argument, which has its own brackets or needs none.
    fn apply(&self, function: &str, argument: &str, bare: bool) -> String;
    fn mark(&self, mark: Mark) -> String;
    /// Pieces side by side.
    fn row(&self, parts: &[String]) -> String;
    /// A minus sign in front.
    fn negated(&self, inner: &str) -> String;
    fn fraction(&self, above: &str, below: &str) -> String;
    fn raised(&self, base: &str, exponent: &str) -> String;
    fn lowered(&self, base: &str, index: &str) -> String;
    fn square_root(&self, inner: &str) -> String;
    fn cube_root(&self, inner: &str) -> String;
    /// `tall`: the brackets must grow with what they enclose.
    fn fenced(&self, fence: Fence, inner: &str, tall: bool) -> String;
    /// Values with their conditions, and the value otherwise.
    fn cases(&self, rows: &[(String, String)], otherwise: &str) -> String;
    /// A column vector.
    fn column(&self, components: &[String]) -> String;
    /// `for R > r`
    fn condition(&self, conditions: &str) -> String;
    /// Lines without a name, for use within the mathematics of a document.
    fn formula(&self, equations: &[Vec<Line>]) -> String;
    /// Equations, each with its lines, as a block that stands by itself.
    fn document(&self, equations: &[Vec<Line>]) -> String;
}
