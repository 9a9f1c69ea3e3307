//! The arguments; help, man page and completions come from here.

use crate::kernel::Lanes;
use clap::{Args, Parser, Subcommand, ValueEnum};
use std::path::PathBuf;

/// Surface integrals from formulas: area elements in closed form, compiled kernels, integrals with an error.
///
/// A sheet is a short text with a map phi(u, v), its region and the questions. Results go to standard output, messages to
/// standard error. Exit codes: 0 all that was asked was reached; 1 a tolerance was not reached (the best value is printed);
/// 2 usage; 3 the sheet is wrong; 4 a numerical failure; 5 input or output; 130 interrupted.
#[derive(Parser, Debug)]
#[command(name = "quadrel", version, max_term_width = 100)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Subcommand, Debug)]
pub enum Command {
    /// Answer the questions of a sheet, or any numbers, vectors and surfaces named
    Answer(AnswerOptions),
    /// Print the forms of a patch: tangents, E F G, dA, normal, L M N2, K, H
    Element(ElementOptions),
    /// Write positions, normals, dA and quadrature weights on a grid
    Nodes(NodesOptions),
    /// Measure what the compiled kernel of a patch costs on this machine
    Speed(SpeedOptions),
    /// Print a completion script
    Completions {
        /// The shell.
        shell: clap_complete::Shell,
    },
    /// Print the manual page
    Manual,
}

impl Command {
    /// Whether one JSON document is due on standard output.
    pub fn json(&self) -> bool {
        match self {
            Command::Answer(options) => options.json,
            Command::Element(options) => options.json || options.format == ElementFormat::Json,
            Command::Speed(options) => options.json,
            Command::Nodes(_) | Command::Completions { .. } | Command::Manual => false,
        }
    }
}

/// Kinds of answers that can be asked for.
#[derive(ValueEnum, Clone, Copy, PartialEq, Eq, Debug)]
pub enum KindOption {
    /// A conservative error estimate.
    Estimate,
    /// A rigorous enclosure; not available in this version, so such answers are unreached (exit 1).
    Proved,
}

/// Options of `answer`.
#[derive(Args, Debug)]
pub struct AnswerOptions {
    /// The sheet; `-` reads standard input.
    pub sheet: PathBuf,
    /// Values and surfaces to answer; a surface stands for its area. Default: every answer of the sheet, or the area of each patch.
    pub names: Vec<String>,
    /// Give a parameter another value: `D=3`, `D="300 [mm]"`. A bare number takes the unit that the sheet wrote. May be
    /// repeated.
    #[arg(long = "set", value_name = "NAME=VALUE")]
    pub set: Vec<String>,
    /// Error allowed, relative to the largest component. The larger of what --rel and --abs allow counts.
    #[arg(long, default_value = "1e-9", value_parser = tolerance, allow_hyphen_values = true)]
    pub rel: f64,
    /// Error allowed in the coherent unit, whatever the value.
    #[arg(long, default_value = "0", value_parser = tolerance, allow_hyphen_values = true)]
    pub abs: f64,
    /// What the error figure must be. Proofs come in a later version; estimates are conservative.
    #[arg(long, value_enum, default_value = "estimate")]
    pub kind: KindOption,
    /// Largest number of evaluations for one patch. Default: up to 20 million, fewer where one evaluation costs more than
    /// that of a short formula.
    #[arg(long)]
    pub evaluations: Option<u64>,
    /// Threads for large work; the result does not depend on it. Default: all processors.
    #[arg(long, value_parser = threads)]
    pub threads: Option<usize>,
    /// Print one JSON document.
    #[arg(long)]
    pub json: bool,
}

/// Options of `element`.
#[derive(Args, Debug)]
pub struct ElementOptions {
    /// The sheet; `-` reads standard input.
    pub sheet: PathBuf,
    /// The patch; may be left out where there is one.
    pub patch: Option<String>,
    /// Notation of a paper or source code of a language.
    #[arg(long = "as", value_enum, value_name = "FORMAT", default_value_t = ElementFormat::Text)]
    pub format: ElementFormat,
    /// Print one JSON document: the same as `--as json`.
    #[arg(long, conflicts_with = "format")]
    pub json: bool,
}

/// What `element` prints.
#[derive(ValueEnum, Clone, Copy, PartialEq, Eq, Debug)]
pub enum ElementFormat {
    /// The sheet's own syntax.
    Text,
    /// An `align*` block for amsmath.
    Latex,
    /// A block of Typst mathematics.
    Typst,
    /// MathML Core for a web page.
    Mathml,
    /// A C99 function.
    C,
    /// A Rust function.
    Rust,
    /// A Python function.
    Python,
    /// A Fortran 2008 module.
    Fortran,
    /// A Julia function.
    Julia,
    /// One JSON document.
    Json,
}

/// Rules for nodes.
#[derive(ValueEnum, Clone, Copy, PartialEq, Eq, Debug)]
pub enum RuleOption {
    /// Midpoints of equal cells.
    Midpoint,
    /// Gauss-Legendre nodes in each direction.
    Gauss,
}

/// Options of `nodes`.
#[derive(Args, Debug)]
pub struct NodesOptions {
    /// The sheet; `-` reads standard input.
    pub sheet: PathBuf,
    /// The patch, or a named chain, whose coefficients multiply the weights; may be left out where there is one patch.
    pub patch: Option<String>,
    /// Nodes along the first and the second variable.
    #[arg(long, default_value = "50x50", value_parser = grid)]
    pub grid: (usize, usize),
    /// The rule behind the weights.
    #[arg(long, value_enum, default_value = "midpoint")]
    pub rule: RuleOption,
    /// Give a parameter another value; a bare number takes the unit that the sheet wrote. May be repeated.
    #[arg(long = "set", value_name = "NAME=VALUE")]
    pub set: Vec<String>,
    /// File to write, `.npy` or `.csv` in any case; `-` writes comma-separated text to standard output.
    #[arg(long, short, default_value = "-")]
    pub output: PathBuf,
}

/// Options of `speed`.
#[derive(Args, Debug)]
pub struct SpeedOptions {
    /// The sheet; `-` reads standard input.
    pub sheet: PathBuf,
    /// The patch; may be left out where there is one.
    pub patch: Option<String>,
    /// Midpoint grid on which dA is summed.
    #[arg(long, default_value = "2000x2000", value_parser = grid)]
    pub grid: (usize, usize),
    /// Random points at which dA is written to an array.
    #[arg(long, default_value_t = 1_000_000)]
    pub scattered: usize,
    /// Threads.
    #[arg(long, default_value_t = 1, value_parser = threads)]
    pub threads: usize,
    /// Repeats; the minimum counts.
    #[arg(long, default_value_t = 11)]
    pub repeats: usize,
    /// Evaluate the closed form of dA where it is accurate (on), or the norm of the cross product (off).
    #[arg(long, value_enum, default_value_t = SimplifyOption::On)]
    pub simplify: SimplifyOption,
    /// Points in one vector of the machine code, 2 or 4. Default: as many as this machine has
    #[arg(long, value_parser = lanes)]
    pub lanes: Option<Lanes>,
    /// Give a parameter another value; a bare number takes the unit that the sheet wrote. May be repeated.
    #[arg(long = "set", value_name = "NAME=VALUE")]
    pub set: Vec<String>,
    /// Print one JSON document.
    #[arg(long)]
    pub json: bool,
}

/// Whether closed forms are evaluated.
#[derive(ValueEnum, Clone, Copy, PartialEq, Eq, Debug)]
pub enum SimplifyOption {
    /// The closed form where it is accurate.
    On,
    /// The norm of the cross product.
    Off,
}

/// More threads than this help no machine, and take long to start.
const MOST_THREADS: usize = 512;

fn tolerance(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.is_finite() && value >= 0.0 => Ok(value),
        _ => Err("a tolerance is a number of at least 0, such as 1e-9".to_owned()),
    }
}

fn threads(text: &str) -> Result<usize, String> {
    match text.parse() {
        Ok(count) if (1..=MOST_THREADS).contains(&count) => Ok(count),
        _ => Err(format!("threads are 1 to {MOST_THREADS}")),
    }
}

fn lanes(text: &str) -> Result<Lanes, String> {
    match text {
        "2" => Ok(Lanes::Two),
        "4" => Ok(Lanes::Four),
        _ => Err("lanes are 2 or 4".to_owned()),
    }
}

fn grid(text: &str) -> Result<(usize, usize), String> {
    let sizes = text.split_once('x').and_then(|(a, b)| Some((a.parse().ok()?, b.parse().ok()?)));
    match sizes {
        Some((a, b)) if a > 0 && b > 0 => Ok((a, b)),
        _ => Err("a grid is two counts joined by x, such as 100x200".to_owned()),
    }
}
