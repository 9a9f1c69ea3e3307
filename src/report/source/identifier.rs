//! Names of a sheet as names of a language.

use super::Language;
use crate::report::notation::greek_name;
use rustc_hash::FxHashSet;

/// Longest name; Fortran allows 63 characters, and helpers and numbers are put after names.
const LONGEST: usize = 40;

/// The names that are taken, and the rules for new ones.
pub(super) struct Names {
    language: Language,
    reserved: &'static [&'static str],
    /// As compared: without case where the language has none.
    taken: FxHashSet<String>,
}

impl Names {
    pub(super) fn new(language: Language, reserved: &'static [&'static str]) -> Self {
        Self { language, reserved, taken: FxHashSet::default() }
    }

    /// Names for all of `originals`. Those that need no change keep theirs; the others give way.
    pub(super) fn assign(&mut self, originals: &[&str]) -> Vec<String> {
        let mut names = vec![None; originals.len()];
        // Without case, `r` keeps its name and `R` gives way.
        for capital in [false, true] {
            for (name, original) in names.iter_mut().zip(originals) {
                let has_capital = original.chars().any(char::is_uppercase);
                if has_capital == capital && self.written(original) == **original && !self.is_taken(original) {
                    self.reserve(original);
                    *name = Some((*original).to_owned());
                }
            }
        }
        names
            .into_iter()
            .zip(originals)
            .map(|(name, original)| name.unwrap_or_else(|| self.free(&self.written(original), original)))
            .collect()
    }

    /// Takes a name.
    pub(super) fn reserve(&mut self, name: &str) {
        self.taken.insert(self.compared(name));
    }

    /// A word such that no name is this word followed by digits.
    pub(super) fn prefix(&mut self) -> String {
        let clashes = |word: &str| {
            self.taken
                .iter()
                .any(|name| name.strip_prefix(word).is_some_and(|rest| rest.bytes().all(|byte| byte.is_ascii_digit())))
        };
        let mut word = "t".to_owned();
        while clashes(&word) {
            word.push('t');
        }
        word
    }

    fn compared(&self, name: &str) -> String {
        if self.language == Language::Fortran { name.to_ascii_lowercase() } else { name.to_owned() }
    }

    fn is_taken(&self, name: &str) -> bool {
        let name = self.compared(name);
        self.taken.contains(&name) || self.reserved.contains(&name.as_str())
    }

    fn free(&mut self, name: &str, original: &str) -> String {
        let mut candidate = name.to_owned();
        if self.reserved.contains(&self.compared(name).as_str()) {
            candidate.push('_');
        } else if self.is_taken(name) && original.chars().any(char::is_uppercase) {
            candidate += "_capital";
        }
        let mut free = candidate.clone();
        let mut count = 2;
        while self.is_taken(&free) {
            free = format!("{candidate}_{count}");
            count += 1;
        }
        self.reserve(&free);
        free
    }

    /// The name in the letters and the case of the language.
    fn written(&self, original: &str) -> String {
        let mut written = String::new();
        let mut before = '_';
        for letter in original.chars() {
            if letter.is_ascii_alphanumeric() {
                let small = self.language == Language::Rust && letter.is_ascii_uppercase();
                if small && before.is_ascii_lowercase() {
                    written.push('_');
                }
                written.push(if small { letter.to_ascii_lowercase() } else { letter });
            } else if letter == '_' {
                if !written.is_empty() && !written.ends_with('_') {
                    written.push('_');
                }
            } else if let Some(name) = greek_name(letter) {
                let name = if self.language == Language::Rust { name.to_ascii_lowercase() } else { name.to_owned() };
                written += &name;
            } else {
                written += &format!("x{:x}", u32::from(letter));
            }
            before = letter;
        }
        written.truncate(LONGEST);
        let written = written.trim_end_matches('_');
        match written.chars().next() {
            None => "blank".to_owned(),
            Some(first) if first.is_ascii_digit() => format!("v{written}"),
            Some(_) => written.to_owned(),
        }
    }
}
