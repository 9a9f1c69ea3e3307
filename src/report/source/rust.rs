//! Rust, the standard library only.
//!
//! The standard library's asinh, acosh and atanh lose digits near the ends of their domains (`acosh` near 1 most), so
//! these three are written with `ln_1p`.

use super::blocks::Blocks;
use super::language::{Called, Dialect, Helper, Lines, Program, Words, list};
use crate::expression::{BinaryFunction, Function};

pub(super) struct Rust;

const WORDS: Words =
    Words { and: "&&", or: "||", not: "!", pi: "std::f64::consts::PI", suffix: "", is_nan: ["f64::is_nan(", ")"] };

const BLOCKS: Blocks = Blocks {
    constant: |name, _, text| format!("let {name} = {text};"),
    declaration: |name| format!("let {name}: f64;"),
    assignment: |name, text| format!("{name} = {text};"),
    first: ["if ", " {"],
    next: ["} else if ", " {"],
    last: "} else {",
    end: "}",
    or: " || ",
    nan: "f64::NAN",
};

const RESERVED: &[&str] = &[
    "as", "break", "const", "continue", "crate", "dyn", "else", "enum", "extern", "false", "fn", "for", "if", "impl",
    "in", "let", "loop", "match", "mod", "move", "mut", "pub", "ref", "return", "self", "static", "struct", "super",
    "trait", "true", "type", "unsafe", "use", "where", "while", "async", "await", "abstract", "become", "box", "do",
    "final", "gen", "macro", "override", "priv", "try", "typeof", "unsized", "virtual", "yield", "main", "std", "f64",
];

impl Dialect for Rust {
    fn words(&self) -> &'static Words {
        &WORDS
    }

    fn reserved(&self) -> &'static [&'static str] {
        RESERVED
    }

    fn function(&self, function: Function) -> Called {
        match function {
            Function::Log => Called::plain("f64::ln"),
            Function::Sign => Called::Helper(Helper::Sign),
            Function::Asinh => Called::Helper(Helper::Asinh),
            Function::Acosh => Called::Helper(Helper::Acosh),
            Function::Atanh => Called::Helper(Helper::Atanh),
            Function::Erf
            | Function::Erfc
            | Function::Gamma
            | Function::LogGamma
            | Function::Polygamma(_)
            | Function::BesselJ(_)
            | Function::BesselY(_)
            | Function::EllipticK(_)
            | Function::EllipticE(_) => Called::Missing,
            // The others have the names of a sheet.
            _ => Called::plain(&format!("f64::{}", function.name())),
        }
    }

    fn binary(&self, function: BinaryFunction) -> Called {
        match function {
            BinaryFunction::Atan2 | BinaryFunction::Hypot => Called::plain(&format!("f64::{}", function.name())),
            BinaryFunction::Min => Called::Helper(Helper::Minimum),
            BinaryFunction::Max => Called::Helper(Helper::Maximum),
        }
    }

    fn power(&self) -> Called {
        Called::plain("f64::powf")
    }

    fn file(&self, program: &Program) -> String {
        let mut lines = Lines::default();
        for note in &program.notes {
            lines.push(0, format!("// {note}").trim_end());
        }
        lines.push(0, "");
        let arguments: Vec<String> = program.arguments().iter().map(|name| format!("{name}: f64")).collect();
        let result = match program.outputs.len() {
            1 => "f64".to_owned(),
            count => format!("[f64; {count}]"),
        };
        let results = program.outputs.iter().map(|output| output.original.as_str()).collect::<Vec<_>>().join(", ");
        lines.push(0, &format!("/// {results}"));
        lines.push(0, &list(&format!("pub fn {}", program.function), &arguments, &format!(" -> {result} {{")));
        for name in &program.unused {
            lines.push(1, &format!("let _ = {name}; // the formulas do not depend on it"));
        }
        BLOCKS.write(&program.statements, 1, &mut lines);
        match &program.results[..] {
            [one] => lines.push(1, one),
            several => {
                lines.push(1, "[");
                several.iter().for_each(|text| lines.push(2, &format!("{text},")));
                lines.push(1, "]");
            }
        }
        lines.push(0, "}");
        for helper in &program.helpers {
            lines.push(0, "");
            lines.text += &helper_text(*helper, &program.helper(*helper));
        }
        lines.text
    }
}

fn helper_text(helper: Helper, name: &str) -> String {
    let body = match helper {
        Helper::Power => {
            "a: f64, b: f64) -> f64 {\n    if f64::is_nan(a) || f64::is_nan(b) || (a == 0.0 && b == 0.0) {\n        f64::NAN\n    } else {\n        f64::powf(a, b)\n    }\n}\n"
        }
        Helper::Minimum => {
            "a: f64, b: f64) -> f64 {\n    if f64::is_nan(a) || f64::is_nan(b) {\n        f64::NAN\n    } else if b < a {\n        b\n    } else {\n        a\n    }\n}\n"
        }
        Helper::Maximum => {
            "a: f64, b: f64) -> f64 {\n    if f64::is_nan(a) || f64::is_nan(b) {\n        f64::NAN\n    } else if b > a {\n        b\n    } else {\n        a\n    }\n}\n"
        }
        Helper::Sign => {
            "x: f64) -> f64 {\n    if x > 0.0 {\n        1.0\n    } else if x < 0.0 {\n        -1.0\n    } else {\n        x\n    }\n}\n"
        }
        Helper::Asinh => {
            "x: f64) -> f64 {\n    let a = f64::abs(x);\n    f64::copysign(f64::ln_1p(a + a * (a / (1.0 + f64::hypot(1.0, a)))), x)\n}\n"
        }
        Helper::Acosh => {
            "x: f64) -> f64 {\n    if x < 1.0 {\n        f64::NAN\n    } else {\n        let t = x - 1.0;\n        f64::ln_1p(t + f64::sqrt(t) * f64::sqrt(x + 1.0))\n    }\n}\n"
        }
        Helper::Atanh => {
            "x: f64) -> f64 {\n    let a = f64::abs(x);\n    f64::copysign(0.5 * f64::ln_1p(2.0 * a / (1.0 - a)), x)\n}\n"
        }
        Helper::CubeRoot => unreachable!("the standard library has this function"),
    };
    format!("fn {name}({body}")
}
