//! Python 3.11 or later, the module `math`.
//!
//! The module raises an exception where a formula is not defined; the exception is left to the caller.

use super::blocks::Blocks;
use super::language::{Called, Dialect, Helper, Lines, Program, Words, list};
use crate::expression::{BinaryFunction, Function};

pub(super) struct Python;

const WORDS: Words =
    Words { and: "and", or: "or", not: "not ", pi: "math.pi", suffix: "", is_nan: ["math.isnan(", ")"] };

const BLOCKS: Blocks = Blocks {
    constant: |name, _, text| format!("{name} = {text}"),
    declaration: |_| String::new(),
    assignment: |name, text| format!("{name} = {text}"),
    first: ["if ", ":"],
    next: ["elif ", ":"],
    last: "else:",
    end: "",
    or: " or ",
    nan: "math.nan",
};

const RESERVED: &[&str] = &[
    "False", "None", "True", "and", "as", "assert", "async", "await", "break", "class", "continue", "def", "del",
    "elif", "else", "except", "finally", "for", "from", "global", "if", "import", "in", "is", "lambda", "nonlocal",
    "not", "or", "pass", "raise", "return", "try", "while", "with", "yield", "match", "case", "type", "math", "float",
    "tuple", "print",
];

impl Dialect for Python {
    fn words(&self) -> &'static Words {
        &WORDS
    }

    fn reserved(&self) -> &'static [&'static str] {
        RESERVED
    }

    fn function(&self, function: Function) -> Called {
        match function {
            Function::Abs => Called::plain("math.fabs"),
            Function::Sign => Called::Helper(Helper::Sign),
            Function::Polygamma(_)
            | Function::BesselJ(_)
            | Function::BesselY(_)
            | Function::EllipticK(_)
            | Function::EllipticE(_) => Called::Missing,
            // The others have the names of a sheet.
            _ => Called::plain(&format!("math.{}", function.name())),
        }
    }

    fn binary(&self, function: BinaryFunction) -> Called {
        match function {
            BinaryFunction::Atan2 | BinaryFunction::Hypot => Called::plain(&format!("math.{}", function.name())),
            BinaryFunction::Min => Called::Helper(Helper::Minimum),
            BinaryFunction::Max => Called::Helper(Helper::Maximum),
        }
    }

    fn power(&self) -> Called {
        Called::plain("math.pow")
    }

    fn file(&self, program: &Program) -> String {
        let mut lines = Lines::default();
        for note in &program.notes {
            lines.push(0, format!("# {note}").trim_end());
        }
        lines.push(0, "");
        lines.push(0, "import math");
        for helper in &program.helpers {
            lines.push(0, "");
            lines.push(0, "");
            lines.text += &helper_text(*helper, &program.helper(*helper));
        }
        lines.push(0, "");
        lines.push(0, "");
        let arguments: Vec<String> = program.inputs.iter().map(|input| input.name.clone()).collect();
        lines.push(0, &list(&format!("def {}", program.function), &arguments, ":"));
        let results = program.outputs.iter().map(|output| output.original.as_str()).collect::<Vec<_>>().join(", ");
        lines.push(1, &format!("\"\"\"{results}; raises an exception where a formula is not defined.\"\"\""));
        BLOCKS.write(&program.statements, 1, &mut lines);
        match &program.results[..] {
            [one] => lines.push(1, &format!("return {one}")),
            several => {
                lines.push(1, "return (");
                several.iter().for_each(|text| lines.push(2, &format!("{text},")));
                lines.push(1, ")");
            }
        }
        lines.text
    }
}

fn helper_text(helper: Helper, name: &str) -> String {
    let body = match helper {
        Helper::Power => {
            "a, b):\n    if math.isnan(a) or math.isnan(b) or (a == 0.0 and b == 0.0):\n        return math.nan\n    return math.pow(a, b)\n"
        }
        Helper::Minimum => {
            "a, b):\n    if math.isnan(a) or math.isnan(b):\n        return math.nan\n    return b if b < a else a\n"
        }
        Helper::Maximum => {
            "a, b):\n    if math.isnan(a) or math.isnan(b):\n        return math.nan\n    return b if b > a else a\n"
        }
        Helper::Sign => "x):\n    if x > 0.0:\n        return 1.0\n    return -1.0 if x < 0.0 else x\n",
        Helper::CubeRoot | Helper::Asinh | Helper::Acosh | Helper::Atanh => {
            unreachable!("the module math has these functions")
        }
    };
    format!("def {name}({body}")
}
