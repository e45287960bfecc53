//! What the tests share.

use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::sync::Arc;

use fewest::clock::{Instant, Span};
use fewest::desk::{Job, Settled};
use fewest::document;
use fewest::engine::{Budget, Never, Stopper};
use fewest::timetable::Timetable;

/// The data for checks that is never part of the project; `None` (said aloud) when absent.
pub(crate) fn data(path: &str) -> Option<PathBuf> {
    let root = std::env::var_os("FEWEST_DATA").map_or_else(
        || Path::new(env!("CARGO_MANIFEST_DIR")).join("../shared/data"),
        PathBuf::from,
    );
    let path = root.join(path);
    if path.exists() {
        return Some(path);
    }
    eprintln!(
        "SKIPPED: {} is not here; name its folder in FEWEST_DATA",
        path.display()
    );
    None
}

/// A file of the project.
pub(crate) fn file(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(path)
}

/// Runs the program.
pub(crate) fn fewest(args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_fewest"))
        .args(args)
        .stdin(Stdio::null())
        .output()
        .unwrap()
}

/// What the program printed.
pub(crate) fn out(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).unwrap()
}

/// What it printed on standard error.
pub(crate) fn err(output: &Output) -> String {
    String::from_utf8(output.stderr.clone()).unwrap()
}

/// The timetable of a text.
pub(crate) fn timetable(text: &str) -> Timetable {
    match document::read("test.toml", text.as_bytes()) {
        Ok(read) => read.timetable,
        Err(mistakes) => panic!("{mistakes}"),
    }
}

/// A job for a timetable without any earlier plan.
pub(crate) fn job(timetable: &Timetable) -> Job {
    Job {
        generation: 0,
        timetable: timetable.clone(),
        reference: None,
        issued: None,
        floor: None,
        begun: Arc::default(),
    }
}

/// Solves until proved or out of steps; every answer on the way has passed audit.
pub(crate) fn solve(timetable: &Timetable, steps: u64) -> Arc<Settled> {
    let budget = Budget {
        seed: 1,
        steps: Some(steps),
        threads: 1,
    };
    solve_until(timetable, budget, &Never)
}

/// Solves within limits.
pub(crate) fn solve_until(
    timetable: &Timetable,
    budget: Budget,
    stop: &(dyn Stopper + Sync),
) -> Arc<Settled> {
    job(timetable).run(budget, stop, &mut |_| {}).unwrap()
}

/// A timetable of alike resources, as many as needed, from spans in minutes.
pub(crate) fn alike(spans: &[(i64, i64)]) -> Timetable {
    use fewest::timetable::{Request, Settings};
    let requests = spans.iter().enumerate().map(|(at, (start, end))| {
        let span = Span {
            start: Instant(start * 60),
            end: Instant(end * 60),
        };
        Request::plain(&format!("r{at}"), span)
    });
    Timetable::new(
        Settings::titled("alike"),
        Vec::new(),
        Vec::new(),
        Vec::new(),
        requests.collect(),
    )
}

/// A folder with copies of files of the project.
pub(crate) fn folder_with(files: &[&str]) -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    for name in files {
        let from = file(name);
        std::fs::copy(&from, folder.path().join(from.file_name().unwrap())).unwrap();
    }
    folder
}
