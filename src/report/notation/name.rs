//! How the name of a sheet is split into a symbol and its subscripts: `phi_u`, `R1`, `crown_radius`, `α`.

/// A Greek letter with what the notations call it.
#[derive(PartialEq, Eq, Debug)]
pub(super) struct Greek {
    /// The letter.
    pub letter: char,
    /// Its name in a sheet.
    pub name: &'static str,
    /// In LaTeX; letters that look Latin have no command there.
    pub latex: &'static str,
    /// In Typst.
    pub typst: &'static str,
}

macro_rules! greek {
    ($($letter:literal $name:literal $latex:literal $typst:literal,)*) => {
        &[$(Greek { letter: $letter, name: $name, latex: $latex, typst: $typst }),*]
    };
}

/// The alphabet, and the variant letters that have a code point of their own (those have no name in a sheet). A name gives
/// the command of that name, `phi` is `\phi`; a letter the command that looks like it, φ is `\varphi`.
const GREEK: &[Greek] = greek![
    'α' "alpha" r"\alpha" "alpha",
    'β' "beta" r"\beta" "beta",
    'γ' "gamma" r"\gamma" "gamma",
    'δ' "delta" r"\delta" "delta",
    'ε' "" r"\varepsilon" "epsilon",
    'ε' "epsilon" r"\epsilon" "epsilon",
    'ϵ' "" r"\epsilon" "epsilon.alt",
    'ζ' "zeta" r"\zeta" "zeta",
    'η' "eta" r"\eta" "eta",
    'θ' "theta" r"\theta" "theta",
    'ϑ' "" r"\vartheta" "theta.alt",
    'ι' "iota" r"\iota" "iota",
    'κ' "kappa" r"\kappa" "kappa",
    'λ' "lambda" r"\lambda" "lambda",
    'μ' "mu" r"\mu" "mu",
    'ν' "nu" r"\nu" "nu",
    'ξ' "xi" r"\xi" "xi",
    'ο' "omicron" "o" "omicron",
    'ρ' "rho" r"\rho" "rho",
    'ϱ' "" r"\varrho" "rho.alt",
    'σ' "sigma" r"\sigma" "sigma",
    'ς' "" r"\varsigma" "sigma.alt",
    'τ' "tau" r"\tau" "tau",
    'υ' "upsilon" r"\upsilon" "upsilon",
    'φ' "" r"\varphi" "phi",
    'φ' "phi" r"\phi" "phi",
    'ϕ' "" r"\phi" "phi.alt",
    'χ' "chi" r"\chi" "chi",
    'ψ' "psi" r"\psi" "psi",
    'ω' "omega" r"\omega" "omega",
    'Α' "Alpha" r"\mathrm{A}" "Alpha",
    'Β' "Beta" r"\mathrm{B}" "Beta",
    'Γ' "Gamma" r"\Gamma" "Gamma",
    'Δ' "Delta" r"\Delta" "Delta",
    'Ε' "Epsilon" r"\mathrm{E}" "Epsilon",
    'Ζ' "Zeta" r"\mathrm{Z}" "Zeta",
    'Η' "Eta" r"\mathrm{H}" "Eta",
    'Θ' "Theta" r"\Theta" "Theta",
    'Ι' "Iota" r"\mathrm{I}" "Iota",
    'Κ' "Kappa" r"\mathrm{K}" "Kappa",
    'Λ' "Lambda" r"\Lambda" "Lambda",
    'Μ' "Mu" r"\mathrm{M}" "Mu",
    'Ν' "Nu" r"\mathrm{N}" "Nu",
    'Ξ' "Xi" r"\Xi" "Xi",
    'Ο' "Omicron" r"\mathrm{O}" "Omicron",
    'Π' "Pi" r"\Pi" "Pi",
    'Ρ' "Rho" r"\mathrm{P}" "Rho",
    'Σ' "Sigma" r"\Sigma" "Sigma",
    'Τ' "Tau" r"\mathrm{T}" "Tau",
    'Υ' "Upsilon" r"\Upsilon" "Upsilon",
    'Φ' "Phi" r"\Phi" "Phi",
    'Χ' "Chi" r"\mathrm{X}" "Chi",
    'Ψ' "Psi" r"\Psi" "Psi",
    'Ω' "Omega" r"\Omega" "Omega",
];

/// The name of a Greek letter.
pub(in crate::report) fn greek_name(letter: char) -> Option<&'static str> {
    GREEK.iter().find(|greek| greek.letter == letter && !greek.name.is_empty()).map(|greek| greek.name)
}

/// One part of a name.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub(super) enum Symbol {
    /// A Greek letter, by its place in the alphabet above.
    Greek(usize),
    /// A letter, set in italics.
    Letter(char),
    /// A word, set upright.
    Word(String),
    /// A number, as a subscript.
    Digits(String),
}

impl Symbol {
    /// The letter behind a [`Symbol::Greek`].
    pub(super) fn greek(place: usize) -> &'static Greek {
        &GREEK[place]
    }

    fn new(part: &str) -> Self {
        let mut letters = part.chars();
        let single = letters.next().filter(|_| letters.next().is_none());
        let greek = GREEK.iter().position(|greek| greek.name == part || Some(greek.letter) == single);
        match (greek, single) {
            (Some(place), _) => Symbol::Greek(place),
            (None, Some(letter)) if letter.is_ascii_alphabetic() => Symbol::Letter(letter),
            _ if part.bytes().all(|byte| byte.is_ascii_digit()) => Symbol::Digits(part.to_owned()),
            _ => Symbol::Word(part.to_owned()),
        }
    }
}

/// A name for the page.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub(super) struct Name {
    /// What stands on the line.
    pub base: Symbol,
    /// What stands below it.
    pub subscripts: Vec<Symbol>,
}

impl Name {
    /// Splits at underscores, and digits from the end of the first part.
    pub(super) fn new(name: &str) -> Self {
        let mut parts = name.split('_').filter(|part| !part.is_empty());
        let Some(first) = parts.next() else { return Self::whole(name) };
        let letters = first.trim_end_matches(|c: char| c.is_ascii_digit());
        let (base, digits) = if letters.is_empty() { (first, "") } else { first.split_at(letters.len()) };
        let digits = Some(digits).filter(|digits| !digits.is_empty());
        Self { base: Symbol::new(base), subscripts: digits.into_iter().chain(parts).map(Symbol::new).collect() }
    }

    /// The name as one upright word, for names that would otherwise look like another one (`R1` beside `R_1`).
    pub(super) fn whole(name: &str) -> Self {
        Self { base: Symbol::Word(name.to_owned()), subscripts: Vec::new() }
    }

    /// Whether the base is a word of several letters, which needs a space beside its neighbors.
    pub(super) fn is_word(&self) -> bool {
        matches!(self.base, Symbol::Word(_))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_split_as_people_write_them() {
        let parts = |name: &str| {
            let Name { base, subscripts } = Name::new(name);
            (base, subscripts)
        };
        let digits = |text: &str| Symbol::Digits(text.to_owned());
        let word = |text: &str| Symbol::Word(text.to_owned());
        assert_eq!(parts("R"), (Symbol::Letter('R'), vec![]));
        assert_eq!(parts("R12"), (Symbol::Letter('R'), vec![digits("12")]));
        assert_eq!(parts("crown_radius"), (word("crown"), vec![word("radius")]));
        assert_eq!(parts("rho_u").0, parts("ρ").0);
        assert_eq!(parts("alpha1").0, parts("α").0);
        assert_eq!(parts("a_1_max"), (Symbol::Letter('a'), vec![digits("1"), word("max")]));
        assert_eq!(parts("__"), (word("__"), vec![]));
    }
}
