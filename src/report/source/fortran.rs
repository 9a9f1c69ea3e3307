//! Fortran 2008: a module with one procedure, and the functions that the language lacks.

use super::blocks::Blocks;
use super::language::{Branch, Called, Dialect, Helper, Lines, Program, Select, Statement, Value, Words};
use crate::expression::{BinaryFunction, Function};

pub(super) struct Fortran;

/// Longest line; the standard allows 132 characters.
const LONGEST_LINE: usize = 110;

/// Deeper blocks are not indented further, so that lines have room.
const DEEPEST_INDENT: usize = 24;

const WORDS: Words = Words {
    and: ".and.",
    or: ".or.",
    not: ".not. ",
    pi: "3.14159265358979323846_real64",
    suffix: "_real64",
    is_nan: ["ieee_is_nan(", ")"],
};

const BLOCKS: Blocks = Blocks {
    constant: |name, _, text| format!("{name} = {text}"),
    declaration: |_| String::new(),
    assignment: |name, text| format!("{name} = {text}"),
    first: ["if (", ") then"],
    next: ["else if (", ") then"],
    last: "else",
    end: "end if",
    or: " .or. ",
    nan: "ieee_value(0.0_real64, ieee_quiet_nan)",
};

/// Keywords that begin statements, intrinsic functions that the formulas may call. Compared without case.
const RESERVED: &[&str] = &[
    "if",
    "then",
    "else",
    "end",
    "endif",
    "do",
    "function",
    "subroutine",
    "module",
    "program",
    "result",
    "return",
    "stop",
    "call",
    "use",
    "implicit",
    "none",
    "real",
    "integer",
    "logical",
    "pure",
    "contains",
    "intent",
    "in",
    "out",
    "where",
    "select",
    "case",
    "associate",
    "block",
    "data",
    "print",
    "write",
    "read",
    "type",
    "class",
    "real64",
    "ieee_is_nan",
    "ieee_value",
    "ieee_quiet_nan",
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
    "abs",
    "hypot",
    "erf",
    "erfc",
    "gamma",
    "log_gamma",
    "bessel_jn",
    "bessel_yn",
    "sign",
    "min",
    "max",
    "huge",
];

impl Dialect for Fortran {
    fn words(&self) -> &'static Words {
        &WORDS
    }

    fn reserved(&self) -> &'static [&'static str] {
        RESERVED
    }

    fn function(&self, function: Function) -> Called {
        match function {
            Function::Cbrt => Called::Helper(Helper::CubeRoot),
            Function::Sign => Called::Helper(Helper::Sign),
            Function::LogGamma => Called::plain("log_gamma"),
            Function::BesselJ(n) => Called::Around(format!("bessel_jn({n}, "), ")"),
            Function::BesselY(n) => Called::Around(format!("bessel_yn({n}, "), ")"),
            Function::Polygamma(_) | Function::EllipticK(_) | Function::EllipticE(_) => Called::Missing,
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
        Called::Helper(Helper::Power)
    }

    fn file(&self, program: &Program) -> String {
        let mut lines = Lines::default();
        for note in &program.notes {
            for line in words_in_lines(note) {
                lines.push(0, format!("! {line}").trim_end());
            }
        }
        let name = &program.function;
        lines.push(0, &format!("module {name}_formulas"));
        lines.push(1, "use, intrinsic :: iso_fortran_env, only: real64");
        lines.push(1, "use, intrinsic :: ieee_arithmetic, only: ieee_is_nan, ieee_value, ieee_quiet_nan");
        lines.push(1, "implicit none");
        lines.push(1, "private");
        lines.push(1, &format!("public :: {name}"));
        lines.push(0, "contains");
        procedure(program, &mut lines);
        for helper in &program.helpers {
            lines.push(0, "");
            lines.text += &helper_text(*helper, &program.helper(*helper));
        }
        lines.push(0, &format!("end module {name}_formulas"));
        lines.text.lines().map(continued).collect()
    }
}

fn procedure(program: &Program, lines: &mut Lines) {
    let name = &program.function;
    let mut arguments = program.arguments();
    let results = program.result_names();
    let single = results.len() == 1;
    if !single {
        arguments.extend(&results);
    }
    let listed = arguments.join(", ");
    let kind = if single { "function" } else { "subroutine" };
    let result = if single { format!(" result({})", results[0]) } else { String::new() };
    lines.push(1, &format!("pure {kind} {name}({listed}){result}"));
    let declare = |kind: &str, names: &[&str], lines: &mut Lines| {
        // A declaration of its own for every few names: a statement has at most 255 continuations.
        names.chunks(20).for_each(|names| lines.push(2, &format!("{kind} :: {}", names.join(", "))));
    };
    declare("real(real64), intent(in)", &program.arguments(), lines);
    declare(if single { "real(real64)" } else { "real(real64), intent(out)" }, &results, lines);
    let (mut numbers, mut truths) = (Vec::new(), Vec::new());
    temporaries(&program.statements, &mut numbers, &mut truths);
    declare("real(real64)", &numbers, lines);
    declare("logical", &truths, lines);
    for unused in &program.unused {
        lines.push(2, &format!("associate (unused => {unused}) ! the formulas do not depend on it"));
        lines.push(2, "end associate");
    }
    BLOCKS.write(&program.statements, 2, lines);
    for (result, text) in results.iter().zip(&program.results) {
        lines.push(2, &format!("{result} = {text}"));
    }
    lines.push(1, &format!("end {kind} {name}"));
}

/// The names that statements introduce.
fn temporaries<'p>(statements: &'p [Statement], numbers: &mut Vec<&'p str>, truths: &mut Vec<&'p str>) {
    for statement in statements {
        match statement {
            Statement::Assign { name, is_truth: true, .. } => truths.push(name),
            Statement::Assign { name, .. } => numbers.push(name),
            Statement::Select { name, select } => {
                numbers.push(name);
                select_temporaries(select, numbers, truths);
            }
        }
    }
}

fn select_temporaries<'p>(select: &'p Select, numbers: &mut Vec<&'p str>, truths: &mut Vec<&'p str>) {
    for Branch { statements, value } in [&select.yes, &select.no] {
        temporaries(statements, numbers, truths);
        if let Value::Select(inner) = value {
            select_temporaries(inner, numbers, truths);
        }
    }
}

/// A line of code, continued at spaces where it is too long.
fn continued(line: &str) -> String {
    let code = line.trim_start();
    let indent = (line.len() - code.len()).min(DEEPEST_INDENT);
    if code.starts_with('!') {
        return format!("{line}\n");
    }
    let (mut text, mut rest) = (String::new(), code);
    let mut margin = " ".repeat(indent);
    while margin.len() + rest.len() > LONGEST_LINE {
        let Some(at) = rest[..LONGEST_LINE - margin.len()].rfind(' ') else { break };
        text += &format!("{margin}{} &\n", rest[..at].trim_end());
        rest = &rest[at + 1..];
        margin = " ".repeat(indent + 4);
    }
    text + &format!("{margin}{rest}\n")
}

/// A comment in lines; words may have any length.
fn words_in_lines(note: &str) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in note.split(' ') {
        let last = lines.last_mut().expect("there is a line");
        if !last.is_empty() && last.chars().count() + word.chars().count() > LONGEST_LINE - 4 {
            lines.push(word.to_owned());
        } else {
            if !last.is_empty() {
                last.push(' ');
            }
            last.push_str(word);
        }
    }
    lines
}

fn helper_text(helper: Helper, name: &str) -> String {
    let (arguments, body) = match helper {
        Helper::Power => (
            "a, b",
            "        if (ieee_is_nan(a) .or. ieee_is_nan(b) .or. (abs(a) <= 0.0_real64 .and. abs(b) <= 0.0_real64)) then
            y = ieee_value(0.0_real64, ieee_quiet_nan)
        else
            y = a**b
        end if
",
        ),
        Helper::Minimum => (
            "a, b",
            "        if (ieee_is_nan(a) .or. ieee_is_nan(b)) then
            y = ieee_value(0.0_real64, ieee_quiet_nan)
        else if (b < a) then
            y = b
        else
            y = a
        end if
",
        ),
        Helper::Maximum => (
            "a, b",
            "        if (ieee_is_nan(a) .or. ieee_is_nan(b)) then
            y = ieee_value(0.0_real64, ieee_quiet_nan)
        else if (b > a) then
            y = b
        else
            y = a
        end if
",
        ),
        Helper::Sign => (
            "x",
            "        if (x > 0.0_real64) then
            y = 1.0_real64
        else if (x < 0.0_real64) then
            y = -1.0_real64
        else
            y = x
        end if
",
        ),
        // The power is good to a few units in the last place; one step of Newton's method makes up for them.
        Helper::CubeRoot => (
            "x",
            "        y = sign(abs(x)**(1.0_real64 / 3.0_real64), x)
        if (abs(x) > 0.0_real64 .and. abs(x) <= huge(x)) y = y - (y * y * y - x) / (3.0_real64 * y * y)
",
        ),
        Helper::Asinh | Helper::Acosh | Helper::Atanh => unreachable!("Fortran has these functions"),
    };
    format!(
        "    pure function {name}({arguments}) result(y)
        real(real64), intent(in) :: {arguments}
        real(real64) :: y
{body}    end function {name}
"
    )
}
