//! The command line: arguments in, results on standard output, everything else on standard error, an exit code.

mod answer;
mod arguments;
mod element;
mod nodes;
mod output;
mod progress;
mod speed;

pub use arguments::{Arguments, Command};

use crate::integrals::IntegralError;
use crate::language::{Bindings, Model, SheetErrors, Source, check};
use crate::report::{failure_json, set_values_text, sheet_errors_json};
use clap::{CommandFactory, Parser};
use std::io::Read;
use std::path::Path;

/// What a run ends with, in the order of DESIGN: 0 reached, 1 the answer is no, 2 usage, 3 the sheet is wrong, 4 a
/// numerical failure, 5 input or output, 130 interrupted.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Exit {
    /// All that was asked was reached.
    Reached = 0,
    /// The answer is "no": a tolerance was not reached.
    No = 1,
    /// The command line is wrong.
    Usage = 2,
    /// The sheet is wrong.
    Sheet = 3,
    /// Undefined points or a divergent integral.
    Numerical = 4,
    /// A file cannot be read or written.
    Files = 5,
    /// Interrupted by the user.
    Interrupted = 130,
}

impl Exit {
    /// For a number that could not be had.
    fn of(error: &IntegralError) -> Self {
        if error.code == "limits" { Exit::Sheet } else { Exit::Numerical }
    }
}

/// Why a command could not finish.
enum Failure {
    Sheet(SheetErrors),
    Numerical(IntegralError),
    Usage(String),
    Files(String),
}

impl From<SheetErrors> for Failure {
    fn from(errors: SheetErrors) -> Self {
        Failure::Sheet(errors)
    }
}

impl From<IntegralError> for Failure {
    fn from(error: IntegralError) -> Self {
        match error.code {
            "unknown-name" => Failure::Usage(match error.hint {
                Some(hint) => format!("{}\nhint: {hint}", error.message),
                None => error.message,
            }),
            _ => Failure::Numerical(error),
        }
    }
}

impl From<std::io::Error> for Failure {
    fn from(error: std::io::Error) -> Self {
        Failure::Files(error.to_string())
    }
}

/// Runs the program with the arguments of the process.
pub fn main() -> Exit {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(error) => {
            let exit = if error.use_stderr() { Exit::Usage } else { Exit::Reached };
            let _ = error.print();
            return exit;
        }
    };
    let json = arguments.command.json();
    let result = match &arguments.command {
        Command::Answer(options) => answer::run(options),
        Command::Element(options) => element::run(options),
        Command::Nodes(options) => nodes::run(options),
        Command::Speed(options) => speed::run(options),
        Command::Completions { shell } => {
            let mut script = Vec::new();
            clap_complete::generate(*shell, &mut Arguments::command(), "quadrel", &mut script);
            output::print(&String::from_utf8_lossy(&script));
            Ok(Exit::Reached)
        }
        Command::Manual => manual(),
    };
    match result {
        Ok(exit) => exit,
        Err(failure) => report(&failure, json),
    }
}

/// The manual page: the program, each command with its options as the parser has them, and the text of `manual.roff`.
fn manual() -> Result<Exit, Failure> {
    let mut program = Arguments::command();
    program.build();
    let man = clap_mangen::Man::new(program.clone());
    let mut page = Vec::new();
    man.render_title(&mut page)?;
    man.render_name_section(&mut page)?;
    man.render_synopsis_section(&mut page)?;
    man.render_description_section(&mut page)?;
    page.extend_from_slice(b".SH COMMANDS\n");
    for command in program.get_subcommands().filter(|command| command.get_name() != "help") {
        let about = command.get_about().map(ToString::to_string).unwrap_or_default();
        page.extend_from_slice(format!(".SS \"quadrel {}\"\n{about}.\n", command.get_name()).as_bytes());
        let mut options = Vec::new();
        clap_mangen::Man::new(command.clone()).render_options_section(&mut options)?;
        page.extend_from_slice(String::from_utf8_lossy(&options).replace(".SH OPTIONS\n", "").as_bytes());
    }
    page.extend_from_slice(include_bytes!("manual.roff"));
    output::print(&String::from_utf8_lossy(&page));
    Ok(Exit::Reached)
}

/// Tells what went wrong: on standard error as text, with --json also on standard output as the one document.
fn report(failure: &Failure, json: bool) -> Exit {
    let generic = |code: &'static str, message: &str| {
        failure_json(&IntegralError { code, message: message.to_owned(), place: None, hint: None })
    };
    let (exit, document) = match failure {
        Failure::Sheet(errors) => {
            for diagnostic in &errors.diagnostics {
                output::diagnostic(&errors.source, diagnostic);
            }
            (Exit::Sheet, sheet_errors_json(errors))
        }
        Failure::Numerical(error) => {
            output::problem(&error.message);
            output::place(error);
            if let Some(hint) = &error.hint {
                output::note(&format!("hint: {hint}"));
            }
            (Exit::of(error), failure_json(error))
        }
        Failure::Usage(message) => {
            output::problem(message);
            (Exit::Usage, generic("usage", message))
        }
        Failure::Files(message) => {
            output::problem(message);
            (Exit::Files, generic("files", message))
        }
    };
    if json {
        output::print_json(&document);
    }
    exit
}

/// Reads a sheet from a file or, for `-`, from standard input.
fn read_sheet(path: &Path) -> Result<Source, Failure> {
    if path == Path::new("-") {
        let mut bytes = Vec::new();
        std::io::stdin().lock().take(1 << 21).read_to_end(&mut bytes)?;
        return Ok(Source::new("standard input", String::from_utf8_lossy(&bytes)));
    }
    let name = path.display().to_string();
    let bytes = std::fs::File::open(path)
        .and_then(|file| {
            let mut bytes = Vec::new();
            // A little beyond the largest sheet is enough to say that it is too large.
            file.take(1 << 21).read_to_end(&mut bytes)?;
            Ok(bytes)
        })
        .map_err(|error| Failure::Files(format!("{name}: {error}")))?;
    Ok(Source::new(name, String::from_utf8_lossy(&bytes)))
}

/// Reads and checks a sheet, shows its warnings, and binds its parameters.
fn load(path: &Path, settings: &[String]) -> Result<(Model, Bindings), Failure> {
    let model = check(read_sheet(path)?)?;
    for warning in &model.warnings {
        output::diagnostic(&model.source, warning);
    }
    let mut pairs = Vec::with_capacity(settings.len());
    for setting in settings {
        let Some((name, text)) = setting.split_once('=') else {
            return Err(Failure::Usage(format!("--set takes NAME=VALUE, not `{setting}`")));
        };
        pairs.push((name.trim().to_owned(), text.trim().to_owned()));
    }
    let bindings = model.bind(&pairs)?;
    Ok((model, bindings))
}

/// The values that `--set` gives, in the units of the sheet.
fn set_text(model: &Model, bindings: &Bindings, settings: &[String]) -> String {
    let is_set =
        |name: &str| settings.iter().any(|setting| setting.split_once('=').is_some_and(|(set, _)| set.trim() == name));
    set_values_text(model, bindings, &is_set)
}

/// The line that tells them, so that a bare number is seen with the unit it was taken in; empty without `--set`.
fn set_echo(model: &Model, bindings: &Bindings, settings: &[String]) -> String {
    match set_text(model, bindings, settings) {
        text if text.is_empty() => text,
        text => format!("with {text}\n"),
    }
}

/// The patch a command is about: the one named, or the only one of the sheet.
fn choose_patch(model: &Model, name: Option<&str>) -> Result<crate::language::PatchId, Failure> {
    let names: Vec<&str> = model.patches.iter().filter(|patch| patch.named).map(|patch| patch.name.as_str()).collect();
    match name {
        Some(name) => model.patch_named(name).ok_or_else(|| {
            let hint = crate::language::nearest(name, names.iter().copied()).map_or_else(
                || format!("the patches are {}", names.join(", ")),
                |near| format!("did you mean `{near}`?"),
            );
            Failure::Usage(format!("the sheet has no patch `{name}`\nhint: {hint}"))
        }),
        None => match names[..] {
            [only] => Ok(model.patch_named(only).expect("a patch of the sheet")),
            [] => Err(Failure::Usage("the sheet has no patch".to_owned())),
            _ => Err(Failure::Usage(format!("the sheet has several patches, name one of {}", names.join(", ")))),
        },
    }
}
