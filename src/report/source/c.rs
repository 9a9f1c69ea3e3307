//! C99.

use super::blocks::Blocks;
use super::language::{Called, Dialect, Helper, Lines, Program, Words, list};
use crate::expression::{BinaryFunction, Function};

pub(super) struct C;

const WORDS: Words =
    Words { and: "&&", or: "||", not: "!", pi: "3.14159265358979323846", suffix: "", is_nan: ["isnan(", ")"] };

const BLOCKS: Blocks = Blocks {
    constant: |name, is_truth, text| format!("const {} {name} = {text};", if is_truth { "int" } else { "double" }),
    declaration: |name| format!("double {name};"),
    assignment: |name, text| format!("{name} = {text};"),
    first: ["if (", ") {"],
    next: ["} else if (", ") {"],
    last: "} else {",
    end: "}",
    or: " || ",
    nan: "NAN",
};

/// Keywords, macros of `math.h`, and its functions as far as formulas may call them or compilers know them.
const RESERVED: &[&str] = &[
    "auto",
    "break",
    "case",
    "char",
    "const",
    "continue",
    "default",
    "do",
    "double",
    "else",
    "enum",
    "extern",
    "float",
    "for",
    "goto",
    "if",
    "inline",
    "int",
    "long",
    "register",
    "restrict",
    "return",
    "short",
    "signed",
    "sizeof",
    "static",
    "struct",
    "switch",
    "typedef",
    "union",
    "unsigned",
    "void",
    "volatile",
    "while",
    "main",
    "asm",
    "bool",
    "true",
    "false",
    "nullptr",
    "alignas",
    "alignof",
    "constexpr",
    "thread_local",
    "typeof",
    "static_assert",
    "linux",
    "unix",
    "NAN",
    "INFINITY",
    "HUGE_VAL",
    "isnan",
    "isinf",
    "signbit",
    "signgam",
    "sin",
    "cos",
    "tan",
    "asin",
    "acos",
    "atan",
    "atan2",
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
    "fabs",
    "abs",
    "hypot",
    "pow",
    "erf",
    "erfc",
    "tgamma",
    "lgamma",
    "gamma",
    "j0",
    "j1",
    "jn",
    "y0",
    "y1",
    "yn",
    "fma",
    "fmin",
    "fmax",
    "floor",
    "ceil",
    "round",
    "trunc",
];

impl Dialect for C {
    fn words(&self) -> &'static Words {
        &WORDS
    }

    fn reserved(&self) -> &'static [&'static str] {
        RESERVED
    }

    fn function(&self, function: Function) -> Called {
        match function {
            Function::Abs => Called::plain("fabs"),
            Function::Gamma => Called::plain("tgamma"),
            Function::Sign => Called::Helper(Helper::Sign),
            Function::Polygamma(_)
            | Function::BesselJ(_)
            | Function::BesselY(_)
            | Function::EllipticK(_)
            | Function::EllipticE(_) => Called::Missing,
            // The others have the names of a sheet.
            _ => Called::plain(function.name()),
        }
    }

    fn binary(&self, function: BinaryFunction) -> Called {
        match function {
            BinaryFunction::Atan2 | BinaryFunction::Hypot => Called::plain(function.name()),
            BinaryFunction::Min => Called::Helper(Helper::Minimum),
            BinaryFunction::Max => Called::Helper(Helper::Maximum),
        }
    }

    fn power(&self) -> Called {
        Called::plain("pow")
    }

    fn file(&self, program: &Program) -> String {
        let mut lines = Lines::default();
        lines.push(0, "/*");
        for note in &program.notes {
            lines.push(0, format!(" * {note}").trim_end());
        }
        lines.push(0, " */");
        lines.push(0, "#include <math.h>");
        lines.push(0, "");
        for helper in &program.helpers {
            lines.text += &helper_text(*helper, &program.helper(*helper));
            lines.push(0, "");
        }
        let single = program.outputs.len() == 1;
        let mut arguments: Vec<String> = program.arguments().iter().map(|name| format!("double {name}")).collect();
        if !single {
            arguments.extend(program.result_names().iter().map(|name| format!("double *{name}")));
        }
        if arguments.is_empty() {
            arguments.push("void".to_owned());
        }
        let kind = if single { "double" } else { "void" };
        lines.push(0, &list(&format!("{kind} {}", program.function), &arguments, ""));
        lines.push(0, "{");
        for name in &program.unused {
            lines.push(1, &format!("(void)({name}); /* the formulas do not depend on it */"));
        }
        BLOCKS.write(&program.statements, 1, &mut lines);
        match &program.results[..] {
            [one] => lines.push(1, &format!("return {one};")),
            several => {
                for (name, text) in program.result_names().iter().zip(several) {
                    lines.push(1, &format!("*{name} = {text};"));
                }
            }
        }
        lines.push(0, "}");
        lines.text
    }
}

fn helper_text(helper: Helper, name: &str) -> String {
    let body = match helper {
        Helper::Power => {
            "double a, double b)\n{\n    if (isnan(a) || isnan(b) || (a == 0.0 && b == 0.0)) {\n        return NAN;\n    }\n    return pow(a, b);\n}\n"
        }
        Helper::Minimum => {
            "double a, double b)\n{\n    if (isnan(a) || isnan(b)) {\n        return NAN;\n    }\n    return b < a ? b : a;\n}\n"
        }
        Helper::Maximum => {
            "double a, double b)\n{\n    if (isnan(a) || isnan(b)) {\n        return NAN;\n    }\n    return b > a ? b : a;\n}\n"
        }
        Helper::Sign => {
            "double x)\n{\n    if (x > 0.0) {\n        return 1.0;\n    }\n    return x < 0.0 ? -1.0 : x;\n}\n"
        }
        Helper::CubeRoot | Helper::Asinh | Helper::Acosh | Helper::Atanh => {
            unreachable!("the library of C has these functions")
        }
    };
    format!("static double {name}({body}")
}
