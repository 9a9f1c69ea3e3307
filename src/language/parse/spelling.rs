//! Characters that a sheet does not use, and what is written instead.
//!
//! Where what is meant has room in the bytes of what was written (`**` and `^ `, `×` and `* `, `²` and `^2`), it is put
//! there: places stay what they were, and the rest of the statement is read as if it had been right.

use super::statements::{is_keyword, is_letter};
use crate::language::diagnostic::{Diagnostic, is_invisible};
use crate::language::syntax::Span;
use unicode_width::UnicodeWidthChar;

/// The result of [`respell`].
pub(super) struct Respelled {
    /// The text, as long as before.
    pub text: String,
    /// Places that could not be replaced, ascending.
    pub unreadable: Vec<usize>,
    /// One error for each wrong spelling.
    pub diagnostics: Vec<Diagnostic>,
}

/// What is wrong with a spelling.
struct Finding {
    /// Bytes it takes up.
    length: usize,
    message: String,
    hint: Option<String>,
    /// What to read instead, at most `length` bytes.
    repair: Option<&'static str>,
}

/// Finds wrong spellings outside comments, reports at most `limit` of them, and replaces those that can be replaced.
pub(super) fn respell(text: &str, limit: usize) -> Respelled {
    let mut bytes = text.as_bytes().to_vec();
    let mut unreadable = Vec::new();
    let mut diagnostics = Vec::new();
    let mut depth = 0usize;
    let mut at_line = 0usize;
    let mut last_report = None;
    let mut at = 0;
    while let Some(c) = text[at..].chars().next() {
        let rest = &text[at..];
        match c {
            '#' => {
                at += rest.find(['\n', '\r']).unwrap_or(rest.len());
                continue;
            }
            '(' | '[' => depth += 1,
            ')' | ']' => depth = depth.saturating_sub(1),
            '\n' => {
                at_line += 1;
                if opens_line_of_definition(&rest[1..]) {
                    depth = 0;
                }
            }
            _ => {}
        }
        let length = if c.is_whitespace() && !matches!(c, '\n' | '\r') || c == '\u{feff}' {
            blank(&mut bytes[at..at + c.len_utf8()], b"");
            c.len_utf8()
        } else if let Some(finding) = find(text, at, c, depth) {
            match finding.repair {
                Some(repair) => {
                    blank(&mut bytes[at..at + finding.length], repair.as_bytes());
                    depth = match repair {
                        "(" => depth + 1,
                        ")" => depth.saturating_sub(1),
                        "\n" => 0,
                        _ => depth,
                    };
                }
                None => unreadable.push(at),
            }
            // One report for all `|` of a line: it takes two of them to be wrong.
            let report = (at_line, finding.message.clone());
            let repeated = finding.repair.is_none() && last_report.as_ref() == Some(&report);
            last_report = Some(report);
            if diagnostics.len() < limit && !repeated {
                let span = Span { start: at, end: at + finding.length };
                let mut diagnostic = Diagnostic::error("spelling", span, finding.message);
                diagnostic.hint = finding.hint;
                diagnostics.push(diagnostic);
            }
            finding.length
        } else {
            c.len_utf8()
        };
        at += length;
    }
    let text = String::from_utf8(bytes).expect("whole characters are replaced by ASCII");
    Respelled { text, unreadable, diagnostics }
}

/// Puts `word` into `place` and fills up with spaces.
fn blank(place: &mut [u8], word: &[u8]) {
    let (front, back) = place.split_at_mut(word.len());
    front.copy_from_slice(word);
    back.fill(b' ');
}

/// A cheap look whether a line begins with `name =` or `assume`: an open bracket does not reach past it.
fn opens_line_of_definition(line: &str) -> bool {
    let line = line.trim_start_matches([' ', '\t']);
    let name = &line[..line.find(|c: char| !is_letter(c) && !c.is_ascii_digit()).unwrap_or(line.len())];
    name == "assume" || (!name.is_empty() && line[name.len()..].trim_start_matches([' ', '\t']).starts_with('='))
}

/// The wrong spelling at `at`, if there is one.
fn find(text: &str, at: usize, c: char, depth: usize) -> Option<Finding> {
    // Most characters; and the tables below hold none of them.
    if c.is_ascii_alphanumeric() || matches!(c, ' ' | '_' | '(' | ')' | ',' | '\n') {
        return None;
    }
    let rest = &text[at..];
    if let Some((written, meant, note)) = REPLACED.iter().find(|(written, ..)| rest.starts_with(written)) {
        let message = format!("`{written}` is not used in a sheet");
        return finding(written.len(), message, Some(format!("{note} is written `{meant}`")), Some(meant));
    }
    if let Some((written, hint)) = REFUSED.iter().find(|(written, _)| rest.starts_with(written)) {
        return finding(written.len(), format!("`{written}` is not used in a sheet"), Some((*hint).to_owned()), None);
    }
    match c {
        '=' if rest.starts_with("==") && defines(text, at) => finding(
            2,
            "a definition has a single `=`".to_owned(),
            Some(format!("write `{} = ...`", line_before(text, at).unwrap_or_default().trim())),
            Some("="),
        ),
        '=' if rest.starts_with("==") => finding(
            2,
            "two numbers cannot be compared by `==`".to_owned(),
            Some("compare by `<`, `<=`, `>` or `>=`, for instance `abs(a - b) <= 1e-9`".to_owned()),
            Some("<="),
        ),
        ';' if depth > 0 => finding(
            1,
            "`;` stands between brackets".to_owned(),
            Some("components and arguments are separated by commas".to_owned()),
            Some(","),
        ),
        ';' => finding(
            1,
            "`;` does not end a statement".to_owned(),
            Some("the end of the line does; write one statement on each line".to_owned()),
            Some("\n"),
        ),
        '\r' if !rest.starts_with("\r\n") && rest.len() > 1 => finding(
            1,
            "a carriage return without a line feed".to_owned(),
            Some("save the sheet with line ends LF or CR LF".to_owned()),
            Some("\n"),
        ),
        _ if superscript(c).is_some() => Some(superscripts(rest)),
        _ if is_used(c) => None,
        _ => {
            let length = rest.find(|other| other != c).unwrap_or(rest.len());
            let message = if c.width().unwrap_or(0) == 0 || is_invisible(c) {
                format!("the character U+{:04X}, which takes no room of its own", u32::from(c))
            } else {
                format!("`{c}` is not used in a sheet")
            };
            finding(length, message, hint_for(c).map(str::to_owned), None)
        }
    }
}

fn finding(length: usize, message: String, hint: Option<String>, repair: Option<&'static str>) -> Option<Finding> {
    Some(Finding { length, message, hint, repair })
}

/// Spelling, what it is replaced by, and what that is called.
const REPLACED: &[(&str, &str, &str)] = &[
    ("**", "^", "a power"),
    ("×", "*", "a product"),
    ("·", "*", "a product"),
    ("⋅", "*", "a product"),
    ("∙", "*", "a product"),
    ("∗", "*", "a product"),
    ("÷", "/", "a quotient"),
    ("∕", "/", "a quotient"),
    ("−", "-", "a difference"),
    ("–", "-", "a difference"),
    ("—", "-", "a difference"),
    (":=", "=", "a definition"),
    ("≤", "<=", "a comparison"),
    ("≥", ">=", "a comparison"),
    ("=<", "<=", "a comparison"),
    ("=>", ">=", "a comparison"),
    ("∞", "inf", "infinity"),
    ("//", "#", "a comment"),
    ("{", "(", "a bracket"),
    ("}", ")", "a bracket"),
    ("（", "(", "a bracket"),
    ("）", ")", "a bracket"),
    ("，", ",", "a comma"),
    ("＝", "=", "a definition"),
    ("＋", "+", "a sum"),
];

/// Spelling that cannot be replaced in place, and what to write.
const REFUSED: &[(&str, &str)] = &[
    ("&&", "both conditions: `a and b`"),
    ("||", "one of two conditions: `a or b`; a magnitude is `abs(a)`, of a vector `norm(a)`"),
    ("!=", "conditions use `<`, `<=`, `>`, `>=`; `not (a <= b)` is the opposite of one"),
    ("<>", "conditions use `<`, `<=`, `>`, `>=`; `not (a <= b)` is the opposite of one"),
    ("≠", "conditions use `<`, `<=`, `>`, `>=`; `not (a <= b)` is the opposite of one"),
    ("/*", "a comment is the rest of a line after `#`"),
];

/// What to write instead of a character that is not used at all.
fn hint_for(c: char) -> Option<&'static str> {
    Some(match c {
        '|' => "a magnitude is `abs(a)`, of a vector `norm(a)`",
        '!' => "the opposite of a condition is `not a`; a factorial is `gamma(n + 1)`",
        '&' => "both conditions: `a and b`",
        '√' => "a square root is `sqrt(a)`",
        '∑' => "a sum is `sum(i in 1..8, term)`",
        '∂' | '∇' => "a derivative is `diff(a, u)`",
        '∫' | '∬' | '∯' => "a surface integral is `integral(f, patch)`",
        '\'' | '′' | '’' => "a derivative is `diff(a, u)`; names consist of letters, digits and `_`",
        '"' | '“' | '”' | '„' | '`' | '´' => "a sheet has no quoted texts; names stand as they are",
        '½' => "one half is `1/2`",
        '¼' => "one quarter is `1/4`",
        '¾' => "three quarters are `3/4`",
        '±' => "write two statements, one for each sign",
        '~' | '≈' => "a definition is `name = ...`",
        ':' => "a definition is `name = ...`, an interval `u in [a, b]`",
        '?' => "a choice is `if(condition, a, b)`",
        '∧' | '∨' | '¬' => "conditions are joined by `and`, `or`, `not`",
        '∈' => "an interval is given as `u in [a, b]`",
        '₀'..='₉' => "write the index after the name: `r_1`",
        '…' => "the range of a sum is `1..8`",
        '$' | '@' | '\\' => "names consist of letters, digits and `_`",
        '\u{300}'..='\u{36f}' => "type the letter and its accent as one character",
        c if is_invisible(c) || c.is_control() => "delete it; such characters come along with copied text",
        _ => return None,
    })
}

/// Whether a sheet uses `c` somewhere; `%` and `°` are units.
fn is_used(c: char) -> bool {
    is_letter(c) || c.is_ascii_digit() || "+-*/^()[],.=<>%°\r\n".contains(c)
}

/// What a raised character stands for.
fn superscript(c: char) -> Option<(char, &'static str)> {
    const RAISED: &[(char, char, &str)] = &[
        ('⁰', '0', "^0"),
        ('¹', '1', "^1"),
        ('²', '2', "^2"),
        ('³', '3', "^3"),
        ('⁴', '4', "^4"),
        ('⁵', '5', "^5"),
        ('⁶', '6', "^6"),
        ('⁷', '7', "^7"),
        ('⁸', '8', "^8"),
        ('⁹', '9', "^9"),
        ('⁻', '-', "^-"),
    ];
    RAISED.iter().find(|(raised, ..)| *raised == c).map(|&(_, plain, power)| (plain, power))
}

/// `u²` is read as `u^2`; more than one raised digit only gets its hint.
fn superscripts(rest: &str) -> Finding {
    let run: String = rest.chars().take(24).take_while(|&c| superscript(c).is_some()).collect();
    let plain: String = run.chars().filter_map(superscript).map(|(plain, _)| plain).collect();
    let one = run.chars().count() == 1 && plain != "-";
    Finding {
        length: run.len(),
        message: format!("`{run}` is not used in a sheet"),
        hint: Some(format!("a power is written `^{plain}`")),
        repair: run.chars().next().filter(|_| one).and_then(superscript).map(|(_, power)| power),
    }
}

/// The line up to `at`, if it is of the length of a head of a definition.
fn line_before(text: &str, at: usize) -> Option<&str> {
    const LONGEST_HEAD: usize = 200;
    let start = text.as_bytes()[..at].iter().rev().take(LONGEST_HEAD + 1).position(|&b| b == b'\n');
    match start {
        Some(length) => Some(&text[at - length..at]),
        None if at <= LONGEST_HEAD => Some(&text[..at]),
        None => None,
    }
}

/// Whether only `name` or `name(arguments)` stands on the line before `at`.
fn defines(text: &str, at: usize) -> bool {
    let Some(head) = line_before(text, at).map(str::trim) else { return false };
    let name_length = head.find(|c: char| !is_letter(c) && !c.is_ascii_digit()).unwrap_or(head.len());
    let (name, list) = head.split_at(name_length);
    let list = list.trim();
    let is_list = list.strip_prefix('(').and_then(|list| list.strip_suffix(')'));
    let names_only = |list: &str| list.chars().all(|c| is_letter(c) || c.is_ascii_digit() || ", \t".contains(c));
    !name.is_empty() && !is_keyword(name) && name != "if" && (list.is_empty() || is_list.is_some_and(names_only))
}
