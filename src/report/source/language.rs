//! What a language has to say.

use crate::expression::{BinaryFunction, Function};
use std::collections::BTreeSet;

/// A function of our own that stands beside the formulas, where the language has none with the right meaning.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub(super) enum Helper {
    /// `a ^ b` for an exponent that is not a number: undefined for 0^0.
    Power,
    /// NaN wins.
    Minimum,
    /// NaN wins.
    Maximum,
    /// sign(0) = 0
    Sign,
    CubeRoot,
    Asinh,
    Acosh,
    Atanh,
}

impl Helper {
    pub(super) const ALL: &[Helper] = &[
        Helper::Power,
        Helper::Minimum,
        Helper::Maximum,
        Helper::Sign,
        Helper::CubeRoot,
        Helper::Asinh,
        Helper::Acosh,
        Helper::Atanh,
    ];

    /// Its name in a file, which begins with that of the function so that files can be put together.
    pub(super) fn name_beside(self, function: &str) -> String {
        format!("{function}_{}", self.name())
    }

    fn name(self) -> &'static str {
        match self {
            Helper::Power => "power",
            Helper::Minimum => "minimum",
            Helper::Maximum => "maximum",
            Helper::Sign => "sign",
            Helper::CubeRoot => "cube_root",
            Helper::Asinh => "asinh",
            Helper::Acosh => "acosh",
            Helper::Atanh => "atanh",
        }
    }
}

/// How a function is called.
#[derive(Clone, Debug)]
pub(super) enum Called {
    /// Text before and after the arguments.
    Around(String, &'static str),
    /// A function of our own.
    Helper(Helper),
    /// A function of a package, with a leading argument where it has one, and text after the call.
    Package(&'static str, Option<u8>, &'static str),
    /// The language has none.
    Missing,
}

impl Called {
    pub(super) fn plain(name: &str) -> Self {
        Called::Around(format!("{name}("), ")")
    }
}

/// One statement of a function body.
#[derive(Clone, Debug)]
pub(super) enum Statement {
    /// A new name for a value.
    Assign { name: String, is_truth: bool, text: String },
    /// A new name for the value of the selected branch.
    Select { name: String, select: Select },
}

/// `if`
#[derive(Clone, Debug)]
pub(super) struct Select {
    /// Tests, one of which holds where the condition is undefined, and so the value.
    pub undefined: Vec<String>,
    pub condition: String,
    pub yes: Branch,
    pub no: Branch,
}

/// What is done in a branch, and its value.
#[derive(Clone, Debug)]
pub(super) struct Branch {
    pub statements: Vec<Statement>,
    pub value: Value,
}

/// The value of a branch.
#[derive(Clone, Debug)]
pub(super) enum Value {
    Text(String),
    /// Another `if`, whose value is that of the branch.
    Select(Box<Select>),
}

/// An argument or a result.
#[derive(Clone, Debug)]
pub(super) struct Named {
    /// Its name in the sheet.
    pub original: String,
    /// Its name in the language.
    pub name: String,
}

/// A function with everything that its file needs.
#[derive(Clone, Debug)]
pub(super) struct Program {
    /// Lines of the comment at the head, without the signs of a comment.
    pub notes: Vec<String>,
    pub function: String,
    pub inputs: Vec<Named>,
    /// Names of inputs that no formula uses.
    pub unused: Vec<String>,
    pub outputs: Vec<Named>,
    pub statements: Vec<Statement>,
    /// Texts of the results.
    pub results: Vec<String>,
    pub helpers: BTreeSet<Helper>,
    /// Functions taken from a package.
    pub package: BTreeSet<&'static str>,
}

impl Program {
    /// The name of a helper in this file.
    pub(super) fn helper(&self, helper: Helper) -> String {
        helper.name_beside(&self.function)
    }

    /// Names of the arguments.
    pub(super) fn arguments(&self) -> Vec<&str> {
        self.inputs.iter().map(|input| input.name.as_str()).collect()
    }

    /// Names of the results.
    pub(super) fn result_names(&self) -> Vec<&str> {
        self.outputs.iter().map(|output| output.name.as_str()).collect()
    }
}

/// Words between conditions and other fixed parts of expressions.
pub(super) struct Words {
    pub and: &'static str,
    pub or: &'static str,
    /// Before what is denied.
    pub not: &'static str,
    pub pi: &'static str,
    /// After a literal number.
    pub suffix: &'static str,
    /// Before and after what is tested for being undefined.
    pub is_nan: [&'static str; 2],
}

/// A language.
pub(super) trait Dialect: Sync {
    fn words(&self) -> &'static Words;
    /// Words that cannot be names, and names of the library that the formulas may use.
    fn reserved(&self) -> &'static [&'static str];
    fn function(&self, function: Function) -> Called;
    fn binary(&self, function: BinaryFunction) -> Called;
    /// `a ^ b` for a literal exponent, as text around the arguments.
    fn power(&self) -> Called;
    /// The whole file.
    fn file(&self, program: &Program) -> String;
}

/// Lines with their indentation.
#[derive(Default)]
pub(super) struct Lines {
    pub text: String,
}

impl Lines {
    pub(super) fn push(&mut self, indent: usize, line: &str) {
        if !line.is_empty() {
            self.text += &"    ".repeat(indent);
            self.text += line;
        }
        self.text.push('\n');
    }
}

/// A list in parentheses: on one line, or one item a line where that would be too long.
pub(super) fn list(before: &str, items: &[String], after: &str) -> String {
    let line = format!("{before}({}){after}", items.join(", "));
    if line.len() <= 100 || items.is_empty() {
        return line;
    }
    format!("{before}(\n    {}\n){after}", items.join(",\n    "))
}
