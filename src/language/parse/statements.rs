//! Cuts the text of a sheet into statements, before any grammar: symbols, line rule, nesting.
//!
//! A line end closes a statement unless a bracket is open, the line ends in an operator, a comma, `=` or a keyword, or
//! the next line starts with `on`, `where`, `in`, `as` or a comma. A line that begins like a definition
//! (`name =`, `name(a, b) =`, `assume`) always opens a statement: neither brackets nor operators can hold an `=`, so
//! correct sheets are not affected, and an unclosed bracket costs one statement instead of the rest of the sheet.

use crate::language::syntax::Span;

/// Largest nesting of brackets, powers and signs. The parser and the passes after it need stack in proportion to it.
pub(super) const MAXIMUM_NESTING: usize = 256;

/// What kind of symbol a token is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum TokenKind {
    Number,
    Name,
    /// `assume on where in as and or not`
    Keyword,
    /// `[...]` directly after a number or `as`, as far as it goes on its line.
    Unit,
    /// `(` or `[`
    Open,
    /// `)` or `]`
    Close,
    Comma,
    Equals,
    /// `+ - * / ^ < <= > >=`
    Operator,
    /// `..`
    Dots,
    /// `.`
    Dot,
    /// Anything else.
    Other,
}

/// One symbol of the text.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Token {
    pub kind: TokenKind,
    pub span: Span,
    /// Whether it is the first one on its line.
    pub first_on_line: bool,
}

impl Token {
    /// The token as written.
    pub fn text<'a>(&self, text: &'a str) -> &'a str {
        &text[self.span.start..self.span.end]
    }
}

/// All tokens of `text`; comments and white space are left out.
pub(super) fn tokens(text: &str) -> Vec<Token> {
    let mut tokens: Vec<Token> = Vec::new();
    let mut first_on_line = true;
    let mut at = 0;
    while let Some(c) = text[at..].chars().next() {
        if c == '\n' {
            first_on_line = true;
            at += 1;
        } else if matches!(c, ' ' | '\t' | '\r') {
            at += 1;
        } else if c == '#' {
            at += line_length(&text[at..]);
        } else {
            let unit_is_due = tokens.last().is_some_and(|last| {
                last.kind == TokenKind::Number || (last.kind == TokenKind::Keyword && last.text(text) == "as")
            });
            let (kind, length) = token(&text[at..], c, unit_is_due);
            tokens.push(Token { kind, span: Span { start: at, end: at + length }, first_on_line });
            first_on_line = false;
            at += length;
        }
    }
    tokens
}

/// Kind and length of the token at the start of `rest`, whose first character is `c`.
fn token(rest: &str, c: char, unit_is_due: bool) -> (TokenKind, usize) {
    use TokenKind::*;
    let second = rest.as_bytes().get(1).copied();
    match c {
        '0'..='9' => (Number, number_length(rest)),
        '.' if second.is_some_and(|b| b.is_ascii_digit()) => (Number, number_length(rest)),
        '.' if second == Some(b'.') => (Dots, 2),
        '.' => (Dot, 1),
        '[' if unit_is_due => (Unit, unit_length(rest)),
        '(' | '[' => (Open, 1),
        ')' | ']' => (Close, 1),
        ',' => (Comma, 1),
        '=' => (Equals, 1),
        '<' | '>' if second == Some(b'=') => (Operator, 2),
        '+' | '-' | '*' | '/' | '^' | '<' | '>' => (Operator, 1),
        _ if is_letter(c) => {
            let length = rest.find(|c: char| !is_letter(c) && !c.is_ascii_digit()).unwrap_or(rest.len());
            (if is_keyword(&rest[..length]) { Keyword } else { Name }, length)
        }
        _ => (Other, c.len_utf8()),
    }
}

/// Whether a name may contain (and start with) `c`.
pub(super) fn is_letter(c: char) -> bool {
    c == '_' || c.is_alphabetic()
}

/// Whether `word` has a place in the grammar and so cannot be a name.
pub(super) fn is_keyword(word: &str) -> bool {
    matches!(word, "assume" | "on" | "where" | "in" | "as" | "and" | "or" | "not")
}

fn line_length(rest: &str) -> usize {
    rest.find('\n').unwrap_or(rest.len())
}

/// Up to the closing bracket, or to the end of the line where there is none.
fn unit_length(rest: &str) -> usize {
    match rest.find([']', '\n', '#']) {
        Some(at) if rest[at..].starts_with(']') => at + 1,
        end => rest[..end.unwrap_or(rest.len())].trim_end().len(),
    }
}

/// The same rule as `decimal` in the grammar.
fn number_length(rest: &str) -> usize {
    let bytes = rest.as_bytes();
    let digits = |from: usize| bytes[from..].iter().take_while(|b| b.is_ascii_digit()).count();
    let exponent = |from: usize| {
        if !matches!(bytes.get(from), Some(b'e' | b'E')) {
            return 0;
        }
        let sign = usize::from(matches!(bytes.get(from + 1), Some(b'+' | b'-')));
        match digits((from + 1 + sign).min(bytes.len())) {
            0 => 0,
            count => 1 + sign + count,
        }
    };
    let mut length = digits(0);
    if bytes.get(length) == Some(&b'.') {
        let decimals = digits(length + 1);
        let after = rest[length + 1..].chars().next();
        let bare_point = exponent(length + 1) > 0 || !after.is_some_and(|c| c == '.' || is_letter(c));
        if decimals > 0 || bare_point {
            length += 1 + decimals;
        }
    }
    length + exponent(length)
}

/// Index ranges of the tokens of each statement.
pub(super) fn split(text: &str, tokens: &[Token]) -> Vec<std::ops::Range<usize>> {
    let mut statements = Vec::new();
    let mut start = 0;
    let mut depth = 0usize;
    for (at, token) in tokens.iter().enumerate() {
        if at > start && token.first_on_line {
            let line_ends =
                depth == 0 && !goes_on_after(&tokens[at - 1]) && !continues_statement(token, token.text(text));
            if line_ends || opens_definition(text, &tokens[at..]) {
                statements.push(start..at);
                start = at;
                depth = 0;
            }
        }
        match token.kind {
            TokenKind::Open => depth += 1,
            TokenKind::Close => depth = depth.saturating_sub(1),
            _ => {}
        }
    }
    if start < tokens.len() {
        statements.push(start..tokens.len());
    }
    statements
}

fn goes_on_after(last: &Token) -> bool {
    use TokenKind::*;
    matches!(last.kind, Operator | Comma | Equals | Keyword)
}

fn continues_statement(first: &Token, text: &str) -> bool {
    match first.kind {
        TokenKind::Comma => true,
        TokenKind::Keyword => matches!(text, "on" | "where" | "in" | "as"),
        _ => false,
    }
}

/// Whether the tokens begin with `name =`, `name(a, b) =` or `assume`. Looks no further than the first symbol that
/// cannot stand in a list of arguments, an opening bracket included, so that all looks together stay linear.
fn opens_definition(text: &str, tokens: &[Token]) -> bool {
    use TokenKind::*;
    let kind = |at: usize| tokens.get(at).map(|token| token.kind);
    match (kind(0), kind(1)) {
        (Some(Keyword), _) if tokens[0].text(text) == "assume" => true,
        (Some(Name | Keyword), Some(Equals)) => true,
        (Some(Name | Keyword), Some(Open)) => {
            let list = tokens[2..].iter().take_while(|token| matches!(token.kind, Name | Keyword | Comma)).count();
            kind(2 + list) == Some(Close) && kind(3 + list) == Some(Equals)
        }
        _ => false,
    }
}

/// The first token at which a statement nests deeper than [`MAXIMUM_NESTING`]: open brackets, plus the powers, signs
/// and `not`s that are still waiting for their operand at each of them.
pub(super) fn too_deep(text: &str, tokens: &[Token]) -> Option<Token> {
    let mut waiting = vec![0usize];
    let mut total = 0;
    let mut operand_before = false;
    for token in tokens {
        let word = token.text(text);
        match token.kind {
            TokenKind::Open => {
                waiting.push(0);
                total += 1;
            }
            TokenKind::Close => {
                if waiting.len() > 1 {
                    total -= 1 + waiting.pop().unwrap_or(0);
                }
            }
            TokenKind::Operator | TokenKind::Keyword if word == "^" || word == "not" || !operand_before => {
                *waiting.last_mut()? += 1;
                total += 1;
            }
            TokenKind::Operator | TokenKind::Keyword | TokenKind::Comma | TokenKind::Equals | TokenKind::Dots => {
                total -= std::mem::take(waiting.last_mut()?);
            }
            TokenKind::Number | TokenKind::Name | TokenKind::Unit | TokenKind::Dot | TokenKind::Other => {}
        }
        if total > MAXIMUM_NESTING {
            return Some(*token);
        }
        operand_before = matches!(token.kind, TokenKind::Number | TokenKind::Name | TokenKind::Unit | TokenKind::Close);
    }
    None
}
