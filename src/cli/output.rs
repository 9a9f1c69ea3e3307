//! Where text goes: results to standard output, messages to standard error, color only where a terminal shows it.

use super::Exit;
use crate::integrals::IntegralError;
use crate::language::{Diagnostic, Part, Severity, Source};
use std::io::{ErrorKind, Write};

/// Prints a result. A reader that has gone away is not an error; a full disk ends the run.
pub(super) fn print(text: &str) {
    let mut out = std::io::stdout().lock();
    if let Err(error) = out.write_all(text.as_bytes()).and_then(|()| out.flush())
        && error.kind() != ErrorKind::BrokenPipe
    {
        problem(&format!("standard output: {error}"));
        std::process::exit(Exit::Files as i32);
    }
}

/// Prints the one JSON document.
pub(super) fn print_json(document: &serde_json::Value) {
    let text = serde_json::to_string_pretty(document).unwrap_or_default();
    print(&(text + "\n"));
}

/// A message about what went wrong.
pub(super) fn problem(text: &str) {
    message(&format!("\x1b[1;31merror\x1b[0m: {text}"));
}

/// Where in space a number could not be had.
pub(super) fn place(error: &IntegralError) {
    if let Some(place) = &error.place {
        let [x, y, z] = place.position;
        note(&format!("at the position ({x}, {y}, {z})"));
    }
}

/// A line of explanation.
pub(super) fn note(text: &str) {
    message(text);
}

/// Several such lines, each with its end.
pub(super) fn notes(lines: &str) {
    let _ = write!(anstream::stderr().lock(), "{lines}");
}

/// Writes to standard error; colors are taken out where it is no terminal or NO_COLOR is set.
fn message(text: &str) {
    let _ = writeln!(anstream::stderr().lock(), "{text}");
}

/// A diagnostic of a sheet with its place.
pub(super) fn diagnostic(source: &Source, diagnostic: &Diagnostic) {
    let color = match diagnostic.severity {
        Severity::Error => "\x1b[1;31m",
        Severity::Warning => "\x1b[1;33m",
    };
    let style = |part: Part, text: &str| match part {
        Part::Marker(_) => format!("{color}{text}\x1b[0m"),
        _ => text.to_owned(),
    };
    let drawn = source.draw_styled(diagnostic, &style);
    let _ = write!(anstream::stderr().lock(), "{drawn}");
}
