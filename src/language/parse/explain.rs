//! Why a statement could not be read: from the place where the grammar gave up, and the symbols around it, to a
//! message and a hint.

use super::statements::Token;
use crate::language::diagnostic::Diagnostic;
use crate::language::syntax::Span;

pub(super) fn explain(text: &str, tokens: &[Token], place: usize, _is_value: bool) -> Diagnostic {
    let at = tokens.partition_point(|token| token.span.end <= place);
    match tokens.get(at) {
        Some(token) => {
            Diagnostic::error("unexpected", token.span, format!("`{}` is not expected here", token.text(text)))
        }
        None => Diagnostic::error("unexpected", Span { start: place, end: place }, "the statement ends too early"),
    }
}
