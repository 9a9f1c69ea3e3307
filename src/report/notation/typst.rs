//! Typst.

use super::name::Symbol;
use super::style::{Fence, Line, Mark, Notation};

pub(super) struct Typst;

/// Functions that Typst knows by name.
const KNOWN: &[&str] =
    &["sin", "cos", "tan", "arcsin", "arccos", "arctan", "sinh", "cosh", "tanh", "exp", "ln", "min", "max"];

impl Notation for Typst {
    fn digits(&self, digits: &str) -> String {
        digits.to_owned()
    }

    fn pi(&self) -> String {
        "pi".to_owned()
    }

    fn euler(&self) -> String {
        "upright(e)".to_owned()
    }

    fn differential(&self) -> String {
        "upright(d)".to_owned()
    }

    fn symbol(&self, symbol: &Symbol) -> String {
        match symbol {
            Symbol::Greek(place) => Symbol::greek(*place).typst.to_owned(),
            Symbol::Letter(letter) => letter.to_string(),
            Symbol::Digits(digits) => digits.clone(),
            Symbol::Word(word) => format!("\"{word}\""),
        }
    }

    fn function(&self, name: &str) -> String {
        match name {
            "Gamma" | "psi" => name.to_owned(),
            _ if KNOWN.contains(&name) || name.len() == 1 => name.to_owned(),
            _ => format!("op(\"{name}\")"),
        }
    }

    fn apply(&self, function: &str, argument: &str, bare: bool) -> String {
        if bare { format!("{function} {argument}") } else { format!("{function}{argument}") }
    }

    fn mark(&self, mark: Mark) -> String {
        match mark {
            Mark::Plus => "+",
            Mark::Minus => "-",
            Mark::Dot => "dot",
            Mark::Nothing | Mark::BesideFunction => "",
            Mark::Thin => "thin",
            // A bare slash would make a fraction.
            Mark::Slash => r"\/",
            Mark::Comma => ",",
            Mark::Less => "<",
            Mark::LessEqual => "<=",
            Mark::Greater => ">",
            Mark::GreaterEqual => ">=",
            Mark::And => "\"and\"",
            Mark::Or => "\"or\"",
            Mark::Not => "\"not\"",
        }
        .to_owned()
    }

    fn row(&self, parts: &[String]) -> String {
        let mut row = String::new();
        for part in parts.iter().filter(|part| !part.is_empty()) {
            let close = row.is_empty() || part == "," || part == r"\/" || row.ends_with(r"\/");
            row += if close { "" } else { " " };
            row += part;
        }
        row
    }

    fn negated(&self, inner: &str) -> String {
        format!("-{inner}")
    }

    fn fraction(&self, above: &str, below: &str) -> String {
        format!("frac({above}, {below})")
    }

    fn raised(&self, base: &str, exponent: &str) -> String {
        format!("{base}^{}", grouped(exponent))
    }

    fn lowered(&self, base: &str, index: &str) -> String {
        format!("{base}_{}", grouped(index))
    }

    fn square_root(&self, inner: &str) -> String {
        format!("sqrt({inner})")
    }

    fn cube_root(&self, inner: &str) -> String {
        format!("root(3, {inner})")
    }

    fn fenced(&self, fence: Fence, inner: &str, _: bool) -> String {
        match fence {
            Fence::Round => format!("({inner})"),
            Fence::Bars => format!("abs({inner})"),
        }
    }

    fn cases(&self, rows: &[(String, String)], otherwise: &str) -> String {
        let mut text = "cases(".to_owned();
        for (value, condition) in rows {
            text += &format!("{value} & \"if\" {condition}, ");
        }
        text + &format!("{otherwise} & \"otherwise\")")
    }

    fn column(&self, components: &[String]) -> String {
        format!("vec({})", components.join(", "))
    }

    fn condition(&self, conditions: &str) -> String {
        format!("\"for\" {conditions}")
    }

    fn formula(&self, equations: &[Vec<Line>]) -> String {
        match equations {
            [lines] if lines.len() == 1 => lines[0].right.clone(),
            _ => rows(equations),
        }
    }

    fn document(&self, equations: &[Vec<Line>]) -> String {
        format!("$\n  {}\n$\n", rows(equations))
    }
}

/// Parentheses that group and are not shown; none around a single character.
fn grouped(text: &str) -> String {
    if text.chars().count() == 1 { text.to_owned() } else { format!("({text})") }
}

fn rows(equations: &[Vec<Line>]) -> String {
    let rows: Vec<String> = equations.iter().flatten().map(row).collect();
    rows.join(" \\\n  ")
}

fn row(line: &Line) -> String {
    match &line.left {
        Some(left) => format!("{left} &= {}", line.right),
        None => format!("& {}{}", "quad ".repeat(line.indent), line.right),
    }
}
