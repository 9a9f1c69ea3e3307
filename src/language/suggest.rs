//! Names: which are taken by the language, which are meant by other words, which one is nearest to a misspelt one.

use crate::expression::{BinaryFunction, Function};

/// Words of the language besides the functions of one and two plain arguments.
const WORDS: &[&str] = &[
    // Keywords.
    "assume",
    "on",
    "where",
    "in",
    "as",
    "and",
    "or",
    "not",
    "if",
    "sum",
    // Constants.
    "pi",
    "inf",
    // Functions with a parameter, of vectors, and differentiation.
    "bessel_j",
    "bessel_y",
    "dot",
    "cross",
    "norm",
    "unit",
    "diff",
    // Moved copies and functionals.
    "translate",
    "rotate",
    "mirror",
    "area",
    "integral",
    "flux",
    "volume",
    "centroid",
    "inertia",
];

/// Whether `name` has a meaning in every sheet, so that it cannot be defined.
pub fn is_reserved(name: &str) -> bool {
    WORDS.contains(&name) || is_function(name)
}

/// Whether `name` is a function of the table of functions.
pub(super) fn is_function(name: &str) -> bool {
    Function::NAMED.iter().any(|function| function.name() == name)
        || BinaryFunction::NAMED.iter().any(|function| function.name() == name)
        || matches!(name, "bessel_j" | "bessel_y")
}

/// The name that stands for `written` everywhere: `π` is `pi`, and letters that look alike by design of Unicode
/// (micro sign, ohm sign, angstrom sign) are one letter.
pub(super) fn canonical_name(written: &str) -> String {
    if written == "π" {
        return "pi".to_owned();
    }
    written
        .chars()
        .map(|c| match c {
            '\u{b5}' => '\u{3bc}',
            '\u{2126}' => '\u{3a9}',
            '\u{212b}' => '\u{c5}',
            c => c,
        })
        .collect()
}

/// What the language calls a function or constant that goes by another name elsewhere; `^` or `^2` where an operator
/// does the work (`pow`, `sqr`).
pub fn other_name(name: &str) -> Option<&'static str> {
    let (_, ours) = OTHER_NAMES.iter().find(|(theirs, _)| *theirs == name)?;
    Some(ours)
}

/// Names in use elsewhere, each with ours; from memory.
const OTHER_NAMES: &[(&str, &str)] = &[
    ("ln", "log"),
    ("loge", "log"),
    ("arcsin", "asin"),
    ("arccos", "acos"),
    ("arctan", "atan"),
    ("arctg", "atan"),
    ("arctan2", "atan2"),
    ("arcsinh", "asinh"),
    ("arccosh", "acosh"),
    ("arctanh", "atanh"),
    ("arsinh", "asinh"),
    ("arcosh", "acosh"),
    ("artanh", "atanh"),
    ("argsh", "asinh"),
    ("argch", "acosh"),
    ("argth", "atanh"),
    ("sen", "sin"),
    ("senh", "sinh"),
    ("tg", "tan"),
    ("sh", "sinh"),
    ("ch", "cosh"),
    ("th", "tanh"),
    ("tgh", "tanh"),
    ("root", "sqrt"),
    ("squareroot", "sqrt"),
    ("cubert", "cbrt"),
    ("fabs", "abs"),
    ("mag", "norm"),
    ("magnitude", "norm"),
    ("length", "norm"),
    ("sgn", "sign"),
    ("signum", "sign"),
    ("minimum", "min"),
    ("maximum", "max"),
    ("tgamma", "gamma"),
    ("gammaln", "lgamma"),
    ("loggamma", "lgamma"),
    ("besselj", "bessel_j"),
    ("bessely", "bessel_y"),
    ("ellipk", "elliptic_k"),
    ("ellipe", "elliptic_e"),
    ("EllipticK", "elliptic_k"),
    ("EllipticE", "elliptic_e"),
    ("normalize", "unit"),
    ("derivative", "diff"),
    ("derive", "diff"),
    ("surface", "area"),
    ("int", "integral"),
    ("center", "centroid"),
    ("PI", "pi"),
    ("Pi", "pi"),
    ("Inf", "inf"),
    ("infinity", "inf"),
    ("oo", "inf"),
    // No function of ours has the name, but an operator does the work.
    ("power", "^"),
    ("pow", "^"),
    ("sqr", "^2"),
    ("square", "^2"),
];

/// Longest name for which a neighbor is looked up.
const LONGEST_NAME: usize = 40;

/// The candidate that is most likely meant by `name`: the same letters in another case, else the one with the fewest
/// edits (insert, delete, replace, swap neighbors), if these are at most a third of the letters. The first of equals.
/// A single letter has only itself in the other case: any other letter is as near as the next.
pub fn nearest<'a>(name: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let letters: Vec<char> = name.chars().take(LONGEST_NAME + 1).collect();
    if letters.len() > LONGEST_NAME {
        return None;
    }
    let allowed = (letters.len() + 1) / 3;
    let mut best: Option<((usize, usize), &str)> = None;
    for candidate in candidates {
        if candidate == name || candidate.len() > 4 * LONGEST_NAME {
            continue;
        }
        let other: Vec<char> = candidate.chars().collect();
        let same_letters = candidate.to_lowercase() == name.to_lowercase();
        // Each letter too many is an edit.
        if !same_letters && other.len().abs_diff(letters.len()) > allowed {
            continue;
        }
        let edits = edits(&letters, &other);
        let rank = if same_letters { (0, edits) } else { (edits, 0) };
        if rank.0 <= allowed && best.is_none_or(|(least, _)| rank < least) {
            best = Some((rank, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Optimal string alignment distance (Damerau 1964): a swap of neighbors counts as one edit.
fn edits(a: &[char], b: &[char]) -> usize {
    let mut before_last: Vec<usize> = Vec::new();
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for i in 1..=a.len() {
        let mut row = vec![i];
        for j in 1..=b.len() {
            let replace = last[j - 1] + usize::from(a[i - 1] != b[j - 1]);
            let mut least = replace.min(last[j] + 1).min(row[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                least = least.min(before_last[j - 2] + 1);
            }
            row.push(least);
        }
        before_last = std::mem::replace(&mut last, row);
    }
    last[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_function_is_reserved_and_e_is_free() {
        for name in ["sin", "atan2", "bessel_j", "elliptic_k", "area", "pi", "where"] {
            assert!(is_reserved(name), "{name}");
        }
        for name in ["e", "x", "K", "H", "radius", "Sin"] {
            assert!(!is_reserved(name), "{name}");
        }
    }

    #[test]
    fn other_names_lead_to_names_of_the_language() {
        for (theirs, ours) in OTHER_NAMES {
            assert!(is_reserved(ours) || ours.starts_with('^'), "{theirs} leads to {ours}, which does not exist");
            assert!(!is_reserved(theirs), "{theirs} is a name of the language");
        }
    }

    #[test]
    fn the_nearest_name_is_found_or_none() {
        let names = ["radius", "height", "lining", "head"];
        assert_eq!(nearest("radus", names), Some("radius"));
        assert_eq!(nearest("haed", names), Some("head"));
        assert_eq!(nearest("Height", names), Some("height"));
        assert_eq!(nearest("Mpa", ["mPa", "MPa"]), Some("MPa"));
        assert_eq!(nearest("knuckle", names), None);
        assert_eq!(nearest("d", ["r", "D", "dx"]), Some("D"));
        assert_eq!(nearest("k", ["r", "D", "kk"]), None);
        assert_eq!(nearest(&"a".repeat(100_000), names), None);
    }

    #[test]
    fn letters_that_look_alike_are_one() {
        assert_eq!(canonical_name("π"), "pi");
        assert_eq!(canonical_name("\u{b5}m"), canonical_name("\u{3bc}m"));
    }
}
