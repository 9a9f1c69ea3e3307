//! The command-line tool; everything it does is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    ExitCode::from(quadrel::cli::main() as u8)
}
