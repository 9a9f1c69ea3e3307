//! MathML Core.
//!
//! Only elements of MathML Core are used, so that browsers show the page without a script. Core has no attributes for the
//! alignment of table cells; style attributes do that.

use super::name::Symbol;
use super::style::{Fence, Line, Mark, Notation};

pub(super) struct MathMl;

/// A space of 3/18 em, the thin space of mathematics.
const THIN: &str = r#"<mspace width="0.1667em"/>"#;

impl Notation for MathMl {
    fn digits(&self, digits: &str) -> String {
        format!("<mn>{digits}</mn>")
    }

    fn pi(&self) -> String {
        "<mi>π</mi>".to_owned()
    }

    fn euler(&self) -> String {
        r#"<mi mathvariant="normal">e</mi>"#.to_owned()
    }

    fn differential(&self) -> String {
        r#"<mi mathvariant="normal">d</mi>"#.to_owned()
    }

    fn symbol(&self, symbol: &Symbol) -> String {
        match symbol {
            Symbol::Greek(place) => format!("<mi>{}</mi>", Symbol::greek(*place).letter),
            Symbol::Letter(letter) => format!("<mi>{letter}</mi>"),
            Symbol::Digits(digits) => format!("<mn>{digits}</mn>"),
            // An `mi` of several letters is upright; of one letter (of any script) it would be set in italics.
            Symbol::Word(word) => format!(r#"<mi mathvariant="normal">{word}</mi>"#),
        }
    }

    fn function(&self, name: &str) -> String {
        match name {
            "Gamma" => r#"<mi mathvariant="normal">Γ</mi>"#.to_owned(),
            "psi" => "<mi>ψ</mi>".to_owned(),
            _ => format!("<mi>{name}</mi>"),
        }
    }

    fn apply(&self, function: &str, argument: &str, bare: bool) -> String {
        format!("<mrow>{function}<mo>&#x2061;</mo>{}{argument}</mrow>", if bare { THIN } else { "" })
    }

    fn mark(&self, mark: Mark) -> String {
        let operator = match mark {
            // At the beginning of a continued line these would be taken for signs of a number.
            Mark::Plus => return r#"<mo form="infix">+</mo>"#.to_owned(),
            Mark::Minus => return r#"<mo form="infix">−</mo>"#.to_owned(),
            Mark::Dot => "⋅",
            Mark::Nothing => "&#x2062;",
            Mark::Thin | Mark::BesideFunction => return format!("<mo>&#x2062;</mo>{THIN}"),
            Mark::Slash => "/",
            Mark::Comma => ",",
            Mark::Less => "&lt;",
            Mark::LessEqual => "≤",
            Mark::Greater => "&gt;",
            Mark::GreaterEqual => "≥",
            Mark::And => return words(" and "),
            Mark::Or => return words(" or "),
            Mark::Not => return words("not "),
        };
        format!("<mo>{operator}</mo>")
    }

    fn row(&self, parts: &[String]) -> String {
        match parts {
            [one] => one.clone(),
            several => format!("<mrow>{}</mrow>", several.concat()),
        }
    }

    fn negated(&self, inner: &str) -> String {
        format!(r#"<mrow><mo form="prefix">−</mo>{inner}</mrow>"#)
    }

    fn fraction(&self, above: &str, below: &str) -> String {
        format!("<mfrac>{above}{below}</mfrac>")
    }

    fn raised(&self, base: &str, exponent: &str) -> String {
        // The base is one element; where it has a subscript, both stand at the same place.
        match base.strip_prefix("<msub>").and_then(|inner| inner.strip_suffix("</msub>")) {
            Some(inner) => format!("<msubsup>{inner}{exponent}</msubsup>"),
            None => format!("<msup>{base}{exponent}</msup>"),
        }
    }

    fn lowered(&self, base: &str, index: &str) -> String {
        format!("<msub>{base}{index}</msub>")
    }

    fn square_root(&self, inner: &str) -> String {
        format!("<msqrt>{inner}</msqrt>")
    }

    fn cube_root(&self, inner: &str) -> String {
        format!("<mroot>{inner}<mn>3</mn></mroot>")
    }

    fn fenced(&self, fence: Fence, inner: &str, tall: bool) -> String {
        let (open, close) = match fence {
            Fence::Round => ("(", ")"),
            Fence::Bars => ("|", "|"),
        };
        let sign = |form: &str, sign: &str| format!(r#"<mo form="{form}" stretchy="{tall}">{sign}</mo>"#);
        format!("<mrow>{}{inner}{}</mrow>", sign("prefix", open), sign("postfix", close))
    }

    fn cases(&self, rows: &[(String, String)], otherwise: &str) -> String {
        let mut text = r#"<mrow><mo form="prefix" stretchy="true">{</mo><mtable>"#.to_owned();
        for (value, condition) in rows {
            text += &format!("<mtr>{}{}</mtr>", left_cell(value), left_cell(&(words("if ") + condition)));
        }
        let last = format!("<mtr>{}{}</mtr>", left_cell(otherwise), left_cell(&words("otherwise")));
        text + &last + "</mtable></mrow>"
    }

    fn column(&self, components: &[String]) -> String {
        let rows: String = components.iter().map(|component| format!("<mtr><mtd>{component}</mtd></mtr>")).collect();
        self.fenced(Fence::Round, &format!("<mtable>{rows}</mtable>"), true)
    }

    fn condition(&self, conditions: &str) -> String {
        format!("<mrow>{}{conditions}</mrow>", words("for "))
    }

    fn formula(&self, equations: &[Vec<Line>]) -> String {
        math(equations)
    }

    fn document(&self, equations: &[Vec<Line>]) -> String {
        let elements: Vec<String> = equations.iter().map(|lines| math(std::slice::from_ref(lines))).collect();
        format!("<div class=\"formulas\">\n{}\n</div>\n", elements.join("\n"))
    }
}

fn words(text: &str) -> String {
    // Spaces at the ends of a text element are dropped, no-break spaces are kept.
    format!("<mtext>{}</mtext>", text.replace(' ', "\u{a0}"))
}

fn left_cell(inner: &str) -> String {
    format!(r#"<mtd style="text-align: left">{inner}</mtd>"#)
}

fn math(equations: &[Vec<Line>]) -> String {
    let inner = match equations {
        [lines] if lines.len() == 1 => match &lines[0].left {
            Some(left) => format!("<mrow>{left}<mo>=</mo>{}</mrow>", lines[0].right),
            None => lines[0].right.clone(),
        },
        _ => {
            let rows: String = equations.iter().flatten().map(row).collect();
            format!(r#"<mtable displaystyle="true">{rows}</mtable>"#)
        }
    };
    format!(
        r#"<math xmlns="http://www.w3.org/1998/Math/MathML" display="block" style="margin: 0.6em 0">{inner}</math>"#
    )
}

fn row(line: &Line) -> String {
    let (left, sign) = match &line.left {
        Some(left) => (left.as_str(), "<mo>=</mo>".to_owned()),
        None => ("", format!(r#"<mspace width="{}em"/>"#, line.indent)),
    };
    let left = format!(r#"<mtd style="text-align: right; padding-right: 0">{left}</mtd>"#);
    format!("<mtr>{left}{}</mtr>", left_cell(&format!("<mrow>{sign}{}</mrow>", line.right)))
}
