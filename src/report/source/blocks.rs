//! Statements as lines, for languages whose blocks differ only in their words.

use super::language::{Branch, Lines, Select, Statement, Value};

/// The words of a language around statements.
pub(super) struct Blocks {
    /// A new name with its value.
    pub constant: fn(name: &str, is_truth: bool, text: &str) -> String,
    /// Before a name gets its value in branches; empty where names are not declared there.
    pub declaration: fn(name: &str) -> String,
    pub assignment: fn(name: &str, text: &str) -> String,
    /// Before and after a condition.
    pub first: [&'static str; 2],
    pub next: [&'static str; 2],
    pub last: &'static str,
    /// After the last branch; empty where indentation ends it.
    pub end: &'static str,
    /// Between tests.
    pub or: &'static str,
    /// The undefined number.
    pub nan: &'static str,
}

impl Blocks {
    pub(super) fn write(&self, statements: &[Statement], indent: usize, lines: &mut Lines) {
        for statement in statements {
            match statement {
                Statement::Assign { name, is_truth, text } => {
                    lines.push(indent, &(self.constant)(name, *is_truth, text));
                }
                Statement::Select { name, select } => {
                    let declaration = (self.declaration)(name);
                    if !declaration.is_empty() {
                        lines.push(indent, &declaration);
                    }
                    self.select(name, select, indent, lines);
                }
            }
        }
    }

    fn select(&self, name: &str, select: &Select, indent: usize, lines: &mut Lines) {
        let mut words = self.first;
        let mut select = select;
        let mut tested: Vec<&str> = Vec::new();
        loop {
            let tests: Vec<&str> =
                select.undefined.iter().map(String::as_str).filter(|test| !tested.contains(test)).collect();
            if !tests.is_empty() {
                lines.push(indent, &format!("{}{}{}", words[0], tests.join(self.or), words[1]));
                lines.push(indent + 1, &(self.assignment)(name, self.nan));
                words = self.next;
                tested.extend(tests);
            }
            lines.push(indent, &format!("{}{}{}", words[0], select.condition, words[1]));
            self.branch(name, &select.yes, indent + 1, lines);
            words = self.next;
            match &select.no {
                Branch { statements, value: Value::Select(inner) } if statements.is_empty() => select = inner,
                other => {
                    lines.push(indent, self.last);
                    self.branch(name, other, indent + 1, lines);
                    break;
                }
            }
        }
        if !self.end.is_empty() {
            lines.push(indent, self.end);
        }
    }

    fn branch(&self, name: &str, branch: &Branch, indent: usize, lines: &mut Lines) {
        self.write(&branch.statements, indent, lines);
        match &branch.value {
            Value::Text(text) => lines.push(indent, &(self.assignment)(name, text)),
            Value::Select(inner) => self.select(name, inner, indent, lines),
        }
    }
}
