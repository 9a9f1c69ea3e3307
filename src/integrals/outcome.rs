//! What is asked and what is answered: values with their errors and how they were got.

use super::error::IntegralError;
use crate::language::{Diagnostic, Dimension, Span, Unit};

/// How an answer was got.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum AnswerKind {
    /// It rests on no integral, and the decimal shown is the number itself.
    Exact,
    /// A rigorous enclosure: the truth lies in [value - error, value + error].
    Proved,
    /// A conservative error estimate within the tolerance.
    Estimate,
    /// The tolerance was not reached; value and error are the best so far.
    Unreached,
}

impl AnswerKind {
    /// The word in reports and JSON.
    pub fn word(self) -> &'static str {
        match self {
            AnswerKind::Exact => "exact",
            AnswerKind::Proved => "proved",
            AnswerKind::Estimate => "estimate",
            AnswerKind::Unreached => "unreached",
        }
    }
}

/// Tolerances and limits of a run.
#[derive(Clone, PartialEq, Debug)]
pub struct Settings {
    /// Error allowed, relative to the largest component.
    pub relative: f64,
    /// Error allowed in the coherent unit, whatever the value.
    pub absolute: f64,
    /// Largest number of integrand evaluations of one patch before the best value so far is returned as unreached.
    /// `None` derives it from what one evaluation costs (see [`crate::integrals`]).
    pub evaluations: Option<u64>,
}

impl Default for Settings {
    fn default() -> Self {
        Self { relative: 1e-9, absolute: 0.0, evaluations: None }
    }
}

/// One number of an answer, in coherent SI units.
#[derive(Clone, PartialEq, Debug)]
pub struct Component {
    /// Empty for a number, `x` for a vector, `xx` for a tensor.
    pub label: &'static str,
    /// The value.
    pub value: f64,
    /// Half-width of the interval that holds the truth (see [`AnswerKind`]), rounding included.
    pub error: f64,
}

/// Principal moments of a tensor of inertia, ascending, and their axes (unit vectors, one row each).
#[derive(Clone, PartialEq, Debug)]
pub struct Principal {
    /// Moments in coherent SI units.
    pub moments: [f64; 3],
    /// Bound on the error of each moment, from the errors of the tensor (Weyl's inequality).
    pub error: f64,
    /// Axes, right-handed.
    pub axes: [[f64; 3]; 3],
}

impl Principal {
    /// Bound on the sine of the angle by which an axis is off (C. Davis and W. M. Kahan, 1970, SIAM J. Numer. Anal. 7,
    /// 1); `None` where another moment is equal within the errors, because then any axis across the others will do.
    pub fn axis_error(&self, index: usize) -> Option<f64> {
        let gap = (0..3)
            .filter(|&other| other != index)
            .map(|other| (self.moments[other] - self.moments[index]).abs())
            .fold(f64::INFINITY, f64::min);
        (gap > 2.0 * self.error).then(|| self.error / (gap - self.error))
    }
}

/// One answered question.
#[derive(Clone, PartialEq, Debug)]
pub struct Answer {
    /// Its name in the sheet, or `area(patch)` where none was asked.
    pub name: String,
    /// One number, three or six of them.
    pub components: Vec<Component>,
    /// Weakest kind among the integrals it rests on.
    pub kind: AnswerKind,
    /// Why the tolerance was not reached or no proof was possible.
    pub reason: Option<String>,
    /// The error that the tolerance allows, where it was not reached although the error is known.
    pub allowed: Option<f64>,
    /// Dimension of the components.
    pub dimension: Dimension,
    /// The unit to show them in; `None` shows the coherent unit.
    pub shown_as: Option<Unit>,
    /// Integrand evaluations of the integrals it rests on.
    pub evaluations: u64,
    /// Seconds spent on the integrals it rests on.
    pub seconds: f64,
    /// The exact formula of the area of one patch, where it is proved and found at once.
    pub closed_form: Option<String>,
    /// For a tensor of inertia.
    pub principal: Option<Principal>,
    /// What the reader should know: open chain, one-sided patch, condition number.
    pub warnings: Vec<String>,
    /// Why there is no value, where there is none: the components are then NaN, the kind is [`AnswerKind::Unreached`].
    pub failure: Option<Box<AnswerFailure>>,
}

/// Why an answer has no value, and where it is defined.
#[derive(Clone, PartialEq, Debug)]
pub struct AnswerFailure {
    /// What went wrong; the message names the answer.
    pub error: IntegralError,
    /// The definition of the answer in the sheet.
    pub span: Span,
    /// Line of the definition, from 1.
    pub line: usize,
    /// Column of the definition in characters, from 1.
    pub column: usize,
}

impl AnswerFailure {
    /// The failure as a problem of the sheet, to be drawn with the text of the definition.
    pub fn diagnostic(&self) -> Diagnostic {
        let mut diagnostic = Diagnostic::error(self.error.code, self.span, self.error.message.clone());
        diagnostic.hint.clone_from(&self.error.hint);
        diagnostic
    }
}
