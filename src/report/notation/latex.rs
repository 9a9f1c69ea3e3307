//! LaTeX with `amsmath`.

use super::name::Symbol;
use super::style::{Fence, Line, Mark, Notation};

pub(super) struct Latex;

/// Functions with a command of their own.
const COMMANDS: &[&str] =
    &["sin", "cos", "tan", "arcsin", "arccos", "arctan", "sinh", "cosh", "tanh", "exp", "ln", "min", "max"];

impl Notation for Latex {
    fn digits(&self, digits: &str) -> String {
        digits.to_owned()
    }

    fn pi(&self) -> String {
        r"\pi".to_owned()
    }

    fn euler(&self) -> String {
        r"\mathrm{e}".to_owned()
    }

    fn differential(&self) -> String {
        r"\mathrm{d}".to_owned()
    }

    fn symbol(&self, symbol: &Symbol) -> String {
        match symbol {
            Symbol::Greek(place) => Symbol::greek(*place).latex.to_owned(),
            Symbol::Letter(letter) => letter.to_string(),
            Symbol::Digits(digits) => digits.clone(),
            Symbol::Word(word) if word.is_ascii() => format!(r"\mathrm{{{}}}", word.replace('_', r"\_")),
            // Letters beyond ASCII are input characters of text only.
            Symbol::Word(word) => format!(r"\text{{{}}}", word.replace('_', r"\_")),
        }
    }

    fn function(&self, name: &str) -> String {
        match name {
            "Gamma" => r"\Gamma".to_owned(),
            "psi" => r"\psi".to_owned(),
            _ if COMMANDS.contains(&name) => format!(r"\{name}"),
            _ if name.len() == 1 => name.to_owned(),
            _ => format!(r"\operatorname{{{name}}}"),
        }
    }

    fn apply(&self, function: &str, argument: &str, bare: bool) -> String {
        if bare { format!("{function} {argument}") } else { format!("{function}{argument}") }
    }

    fn mark(&self, mark: Mark) -> String {
        match mark {
            Mark::Plus => "+",
            Mark::Minus => "-",
            Mark::Dot => r"\cdot",
            Mark::Nothing | Mark::BesideFunction => "",
            Mark::Thin => r"\,",
            Mark::Slash => "/",
            Mark::Comma => ",",
            Mark::Less => "<",
            Mark::LessEqual => r"\le",
            Mark::Greater => ">",
            Mark::GreaterEqual => r"\ge",
            Mark::And => r"\text{ and }",
            Mark::Or => r"\text{ or }",
            Mark::Not => r"\text{not }",
        }
        .to_owned()
    }

    fn row(&self, parts: &[String]) -> String {
        let mut row = String::new();
        for part in parts.iter().filter(|part| !part.is_empty()) {
            let close = row.is_empty() || part == "," || part == "/" || row.ends_with('/');
            row += if close { "" } else { " " };
            row += part;
        }
        row
    }

    fn negated(&self, inner: &str) -> String {
        format!("-{inner}")
    }

    fn fraction(&self, above: &str, below: &str) -> String {
        format!(r"\frac{{{above}}}{{{below}}}")
    }

    fn raised(&self, base: &str, exponent: &str) -> String {
        format!("{base}^{{{exponent}}}")
    }

    fn lowered(&self, base: &str, index: &str) -> String {
        format!("{base}_{{{index}}}")
    }

    fn square_root(&self, inner: &str) -> String {
        format!(r"\sqrt{{{inner}}}")
    }

    fn cube_root(&self, inner: &str) -> String {
        format!(r"\sqrt[3]{{{inner}}}")
    }

    fn fenced(&self, fence: Fence, inner: &str, tall: bool) -> String {
        match (fence, tall) {
            (Fence::Round, false) => format!("({inner})"),
            (Fence::Round, true) => format!(r"\left({inner}\right)"),
            (Fence::Bars, false) => format!(r"\lvert {inner} \rvert"),
            (Fence::Bars, true) => format!(r"\left\lvert {inner} \right\rvert"),
        }
    }

    fn cases(&self, rows: &[(String, String)], otherwise: &str) -> String {
        let mut text = r"\begin{cases} ".to_owned();
        for (value, condition) in rows {
            text += &format!(r"{value} & \text{{if }} {condition} \\ ");
        }
        text + &format!(r"{otherwise} & \text{{otherwise}} \end{{cases}}")
    }

    fn column(&self, components: &[String]) -> String {
        format!(r"\begin{{pmatrix}} {} \end{{pmatrix}}", components.join(r" \\ "))
    }

    fn condition(&self, conditions: &str) -> String {
        format!(r"\text{{for }} {conditions}")
    }

    fn formula(&self, equations: &[Vec<Line>]) -> String {
        match equations {
            [lines] if lines.len() == 1 => lines[0].right.clone(),
            _ => format!("\\begin{{aligned}}\n{}\\end{{aligned}}", rows(equations)),
        }
    }

    fn document(&self, equations: &[Vec<Line>]) -> String {
        format!("\\begin{{align*}}\n{}\\end{{align*}}\n", rows(equations))
    }
}

fn rows(equations: &[Vec<Line>]) -> String {
    let rows: Vec<String> = equations.iter().flatten().map(row).collect();
    format!("  {}\n", rows.join(" \\\\\n  "))
}

fn row(line: &Line) -> String {
    match &line.left {
        Some(left) => format!("{left} &= {}", line.right),
        None => format!("&{} {}", r"\quad".repeat(line.indent), line.right),
    }
}
