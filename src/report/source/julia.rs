//! Julia. Special functions come from the package SpecialFunctions.

use super::blocks::Blocks;
use super::language::{Called, Dialect, Helper, Lines, Program, Words, list};
use crate::expression::{BinaryFunction, Function};

pub(super) struct Julia;

const WORDS: Words = Words { and: "&&", or: "||", not: "!", pi: "Float64(pi)", suffix: "", is_nan: ["isnan(", ")"] };

const BLOCKS: Blocks = Blocks {
    constant: |name, _, text| format!("{name} = {text}"),
    declaration: |_| String::new(),
    assignment: |name, text| format!("{name} = {text}"),
    first: ["if ", ""],
    next: ["elseif ", ""],
    last: "else",
    end: "end",
    or: " || ",
    nan: "NaN",
};

const RESERVED: &[&str] = &[
    "baremodule",
    "begin",
    "break",
    "catch",
    "const",
    "continue",
    "do",
    "else",
    "elseif",
    "end",
    "export",
    "false",
    "finally",
    "for",
    "function",
    "global",
    "if",
    "import",
    "let",
    "local",
    "macro",
    "module",
    "public",
    "quote",
    "return",
    "struct",
    "true",
    "try",
    "using",
    "while",
    "in",
    "isa",
    "where",
    "abstract",
    "mutable",
    "primitive",
    "type",
    "pi",
    "im",
    "NaN",
    "Inf",
    "Float64",
    "Real",
    "isnan",
    "abs",
    "sin",
    "cos",
    "tan",
    "asin",
    "acos",
    "atan",
    "sinh",
    "cosh",
    "tanh",
    "asinh",
    "acosh",
    "atanh",
    "exp",
    "log",
    "sqrt",
    "cbrt",
    "hypot",
    "sign",
    "min",
    "max",
    "erf",
    "erfc",
    "gamma",
    "logabsgamma",
    "polygamma",
    "besselj",
    "bessely",
    "ellipk",
    "ellipe",
];

impl Dialect for Julia {
    fn words(&self) -> &'static Words {
        &WORDS
    }

    fn reserved(&self) -> &'static [&'static str] {
        RESERVED
    }

    fn function(&self, function: Function) -> Called {
        match function {
            Function::Erf | Function::Erfc | Function::Gamma => Called::Package(function.name(), None, ""),
            // The function gives log |gamma| and the sign of gamma.
            Function::LogGamma => Called::Package("logabsgamma", None, "[1]"),
            Function::Polygamma(n) => Called::Package("polygamma", Some(n), ""),
            Function::BesselJ(n) => Called::Package("besselj", Some(n), ""),
            Function::BesselY(n) => Called::Package("bessely", Some(n), ""),
            Function::EllipticK(0) => Called::Package("ellipk", None, ""),
            Function::EllipticE(0) => Called::Package("ellipe", None, ""),
            Function::EllipticK(_) | Function::EllipticE(_) => Called::Missing,
            // The others have the names of a sheet.
            _ => Called::plain(function.name()),
        }
    }

    fn binary(&self, function: BinaryFunction) -> Called {
        match function {
            BinaryFunction::Atan2 => Called::plain("atan"),
            // NaN wins in Julia's min and max.
            BinaryFunction::Hypot | BinaryFunction::Min | BinaryFunction::Max => Called::plain(function.name()),
        }
    }

    fn power(&self) -> Called {
        Called::Helper(Helper::Power)
    }

    fn file(&self, program: &Program) -> String {
        let mut lines = Lines::default();
        for note in &program.notes {
            lines.push(0, format!("# {note}").trim_end());
        }
        lines.push(0, "");
        if !program.package.is_empty() {
            let names: Vec<&str> = program.package.iter().copied().collect();
            lines.push(0, &format!("using SpecialFunctions: {}", names.join(", ")));
            lines.push(0, "");
        }
        for helper in &program.helpers {
            lines.text += &helper_text(*helper, &program.helper(*helper));
            lines.push(0, "");
        }
        let arguments: Vec<String> = program.arguments().iter().map(|name| format!("{name}::Float64")).collect();
        lines.push(0, &list(&format!("function {}", program.function), &arguments, ""));
        BLOCKS.write(&program.statements, 1, &mut lines);
        match &program.results[..] {
            [one] => lines.push(1, &format!("return {one}")),
            several => {
                lines.push(1, "return (");
                several.iter().for_each(|text| lines.push(2, &format!("{text},")));
                lines.push(1, ")");
            }
        }
        lines.push(0, "end");
        lines.text
    }
}

fn helper_text(helper: Helper, name: &str) -> String {
    match helper {
        Helper::Power => format!(
            "function {name}(a::Float64, b::Float64)\n    if isnan(a) || isnan(b) || (a == 0.0 && b == 0.0)\n        return NaN\n    end\n    return a ^ b\nend\n"
        ),
        Helper::Minimum
        | Helper::Maximum
        | Helper::Sign
        | Helper::CubeRoot
        | Helper::Asinh
        | Helper::Acosh
        | Helper::Atanh => unreachable!("Julia has these functions"),
    }
}
