//! The program: everything is in the library; here it meets the process.

use std::io::Write;
use std::process::ExitCode;

fn main() -> ExitCode {
    // A panic has told its story already; here it only gets its exit code.
    let outcome = std::panic::catch_unwind(|| fewest::cli::run(std::env::args_os()));
    let Ok(outcome) = outcome else {
        return ExitCode::from(fewest::cli::code::FAULT);
    };
    // Whoever closed the pipe has read enough.
    let _ = std::io::stderr().write_all(outcome.err.as_bytes());
    let _ = std::io::stdout().write_all(outcome.out.as_bytes());
    ExitCode::from(outcome.code)
}
