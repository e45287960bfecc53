//! The program: everything is in the library; here it meets the process.

use std::io::Write;
use std::process::ExitCode;

fn main() -> ExitCode {
    // A panic has told its story already; here it only gets its exit code.
    let outcome = std::panic::catch_unwind(|| fewest::cli::run(std::env::args_os()));
    let Ok(outcome) = outcome else {
        return ExitCode::from(fewest::cli::code::FAULT);
    };
    let _ = std::io::stderr().write_all(outcome.err.as_bytes());
    if outcome.out.is_empty() {
        // What a screen may have left half written is not for us to try again.
        return ExitCode::from(outcome.code);
    }
    let mut out = std::io::stdout();
    match out
        .write_all(outcome.out.as_bytes())
        .and_then(|()| out.flush())
    {
        Ok(()) => ExitCode::from(outcome.code),
        // Whoever closed the pipe has read enough.
        Err(error) if error.kind() == std::io::ErrorKind::BrokenPipe => {
            ExitCode::from(outcome.code)
        }
        Err(error) => {
            let _ = writeln!(std::io::stderr(), "standard output: {error}");
            ExitCode::from(fewest::cli::code::FAULT)
        }
    }
}
