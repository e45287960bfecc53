//! The command line: arguments, what each command prints, exit codes.
//!
//! Commands return an [`Outcome`]; only `main` writes and exits. Imports everything below.

mod apply;
mod audit;
mod count;
mod intake;
mod why;

use clap::{Args, Parser, Subcommand};
use std::fmt::Write;
use std::io::IsTerminal;
use std::path::{Path, PathBuf};

/// What a command leaves behind.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Outcome {
    /// For standard output.
    pub out: String,
    /// For standard error.
    pub err: String,
    /// The exit code.
    pub code: u8,
}

/// Exit codes of the contract.
pub mod code {
    /// A fault of the program.
    pub const FAULT: u8 = 1;
    /// Bad input, bad usage, or refused.
    pub const BAD: u8 = 2;
    /// Done with something open.
    pub const OPEN: u8 = 3;
    /// Proved impossible, or something unplaced.
    pub const IMPOSSIBLE: u8 = 4;
}

impl Outcome {
    /// Bad input, with its message.
    pub fn bad(message: impl std::fmt::Display) -> Outcome {
        let mut err = message.to_string();
        if !err.ends_with('\n') {
            err.push('\n');
        }
        Outcome {
            out: String::new(),
            err,
            code: code::BAD,
        }
    }

    /// A fault of the program, with its message.
    pub fn fault(message: impl std::fmt::Display) -> Outcome {
        Outcome {
            code: code::FAULT,
            ..Outcome::bad(format!("a fault of the program: {message}"))
        }
    }
}

#[derive(Parser)]
#[command(
    name = "fewest",
    version,
    args_conflicts_with_subcommands = true,
    arg_required_else_help = true
)]
#[command(
    about = "Plans requests with times onto as few resources as possible, and proves that fewer cannot do."
)]
#[command(
    after_help = "Exit codes: 0 done; 2 bad input or refused; 3 done with something open;\n\
4 proved impossible or something unplaced; 1 a fault of the program.\n\n\
Seats, hours and rests are as the file says and are not verified;\nlocal codes and licensed practice come first."
)]
struct Cli {
    /// The timetable to open on the screen
    file: Option<PathBuf>,
    #[command(flatten)]
    look: Look,
    #[command(subcommand)]
    command: Option<Command>,
}

/// How the screen looks and listens.
#[derive(Args, Clone, Debug, Default)]
pub struct Look {
    /// Theme: daylight, ink, or a theme file
    #[arg(long, value_name = "NAME")]
    pub theme: Option<String>,
    /// Colours: none, 16, 256 or full
    #[arg(long, value_name = "DEPTH")]
    pub colours: Option<String>,
    /// Characters of plain ASCII only
    #[arg(long)]
    pub ascii: bool,
    /// A file with keys of your own
    #[arg(long, value_name = "FILE")]
    pub keys: Option<PathBuf>,
    /// Breaks on purpose, to test that the terminal is restored
    #[arg(long, hide = true)]
    pub break_after_first_frame: bool,
}

/// How long and how to search.
#[derive(Args, Clone, Copy, Debug)]
pub struct Search {
    /// Seconds to search at most
    #[arg(
        long,
        default_value_t = 10.0,
        value_name = "S",
        allow_negative_numbers = true
    )]
    seconds: f64,
    /// Steps of work at most, instead of time
    #[arg(long, value_name = "N")]
    steps: Option<u64>,
    /// The same seed and steps give the same answer on one thread
    #[arg(long, default_value_t = 1, value_name = "K")]
    seed: u64,
    /// Takes in edits that a session on the screen did not save
    #[arg(long)]
    unsaved: bool,
    /// Threads: floors and plans are searched side by side on two or more
    #[arg(long, value_name = "T", value_parser = clap::value_parser!(u16).range(1..=64))]
    threads: Option<u16>,
}

#[derive(Subcommand)]
enum Command {
    /// Fewest resources, the reason why not fewer, and what is known
    Count {
        /// The timetable
        file: PathBuf,
        /// One JSON object
        #[arg(long)]
        json: bool,
        #[command(flatten)]
        search: Search,
    },
    /// Edits from a file or -, all or none, and saves
    Apply {
        /// The timetable
        file: PathBuf,
        /// A list of edits, one a line; - for standard input
        script: PathBuf,
        #[command(flatten)]
        search: Search,
    },
    /// What forces the count above the clique, or why something has no place
    Why {
        /// The timetable
        file: PathBuf,
        /// One JSON object
        #[arg(long)]
        json: bool,
        #[command(flatten)]
        search: Search,
    },
    /// Rechecks the plan files beside FILE, without engine or search
    Audit {
        /// The timetable
        file: PathBuf,
    },
    /// Takes requests in from a CSV file
    Intake(Box<intake::IntakeArgs>),
}

/// Runs the command line.
pub fn run(args: impl IntoIterator<Item = std::ffi::OsString>) -> Outcome {
    let args: Vec<std::ffi::OsString> = args.into_iter().collect();
    if let Some(later) = later(&args) {
        return Outcome::bad(format!("\"{later}\" is not yet possible in this version"));
    }
    let cli = match Cli::try_parse_from(args) {
        Ok(cli) => cli,
        Err(error) if error.use_stderr() => {
            // What was typed is quoted in it, and may be anything.
            let said = error.to_string();
            let lines: Vec<_> = said.lines().map(crate::text::clean).collect();
            return Outcome::bad(lines.join("\n"));
        }
        Err(help) => {
            return Outcome {
                out: help.to_string(),
                ..Outcome::default()
            };
        }
    };
    match (cli.command, cli.file) {
        (Some(Command::Count { file, json, search }), _) => count::count(&file, json, search),
        (
            Some(Command::Apply {
                file,
                script,
                search,
            }),
            _,
        ) => apply::apply(&file, &script, search),
        (Some(Command::Why { file, json, search }), _) => why::why(&file, json, search),
        (Some(Command::Audit { file }), _) => audit::audit(&file),
        (Some(Command::Intake(args)), _) => intake::intake(&args),
        (None, Some(file)) if std::io::stdout().is_terminal() && std::io::stdin().is_terminal() => {
            crate::screen::open(&file, &cli.look)
        }
        (None, Some(file)) => count::count(&file, false, Search::default()),
        (None, None) => Outcome::bad("name a timetable: fewest FILE"),
    }
}

/// The command or option of a later version that was asked for, if one was.
fn later(args: &[std::ffi::OsString]) -> Option<&'static str> {
    const COMMANDS: [&str; 5] = ["ease", "issue", "differs", "handouts", "spoken"];
    let first = args.get(1)?;
    COMMANDS.into_iter().find(|command| *first == **command)
}

impl Default for Search {
    fn default() -> Search {
        Search {
            seconds: 10.0,
            steps: None,
            seed: 1,
            threads: None,
            unsaved: false,
        }
    }
}

impl Search {
    fn budget(self) -> crate::engine::Budget {
        // Work that is to be the same every time is done on one thread.
        let usual = if self.steps.is_some() { 1 } else { 2 };
        crate::engine::Budget {
            seed: self.seed,
            steps: self.steps,
            threads: self.threads.map_or(usual, usize::from),
        }
    }

    /// Runs a job within these limits.
    fn run(self, job: crate::desk::Job) -> Result<std::sync::Arc<crate::desk::Settled>, Outcome> {
        let within = if self.steps.is_some() {
            86_400.0 * 365.0
        } else {
            self.seconds
        };
        let within = std::time::Duration::try_from_secs_f64(within)
            .map_err(|_| Outcome::bad("--seconds takes a number of seconds from 0 to 10^19"))?;
        let until = std::time::Instant::now().checked_add(within);
        let until = until.ok_or_else(|| Outcome::bad("--seconds is too large"))?;
        job.run(self.budget(), &crate::engine::Until(until), &mut |_| {})
            .map_err(Outcome::fault)
    }
}

/// Takes unsaved edits in or mentions them; the line for standard error.
fn unsaved(desk: &mut crate::desk::Desk, take_in: bool) -> String {
    if !take_in {
        return match desk.peek_unsaved() {
            0 => String::new(),
            count => format!(
                "{} not saved in a journal beside the file; --unsaved takes them in\n",
                crate::words::count_words(count, "edit")
            ),
        };
    }
    match desk.take_in_unsaved() {
        (taken, all) if taken < all => {
            format!("{taken} of {all} unsaved edits taken in, the next does not fit\n")
        }
        (0, _) => String::new(),
        (taken, _) => format!(
            "{} taken in\n",
            crate::words::count_words(taken, "unsaved edit")
        ),
    }
}

/// Notes about a timetable that is opened all the same: warnings and findings.
fn notes(desk: &crate::desk::Desk, path: &Path) -> String {
    let mut notes = String::new();
    let file = path.display().to_string();
    for warning in &desk.warnings {
        let _ = write!(
            notes,
            "warning: {}",
            warning.show(&file, desk.document().text())
        );
    }
    let timetable = desk.timetable();
    for finding in crate::timetable::findings(timetable) {
        let request = timetable.occurrence(&finding.piece).map(|(at, _)| at);
        let line = request
            .or_else(|| timetable.position(&finding.piece))
            .and_then(|at| desk.document().line_of(&crate::edit::Touched::Request(at)));
        let said = crate::words::finding(timetable, &finding);
        let _ = writeln!(
            notes,
            "finding: {}:{}: {said}",
            crate::text::clean(&file),
            line.unwrap_or(0)
        );
    }
    notes
}
