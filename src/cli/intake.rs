//! `fewest intake`.

use super::{Outcome, code};
use crate::claim::{Plan, Reason, Unplaced};
use crate::clock::{Instant, Zone, parse_date};
use crate::document::{self, PlanFile, State, issued_path};
use crate::intake::{Columns, Intake, read_csv, set_aside_csv, timetable_text};
use crate::store;
use crate::text::clean;
use std::collections::HashSet;
use std::fmt::Write;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Input larger than this is refused.
const MOST_BYTES: u64 = 256 << 20;

#[derive(clap::Args)]
pub(super) struct IntakeArgs {
    /// The CSV file, with a heading row
    input: PathBuf,
    /// The timetable to write; it must not exist yet
    #[arg(long, value_name = "FILE")]
    out: PathBuf,
    /// Columns that make the id, joined by -
    #[arg(long, value_name = "A,B", value_delimiter = ',')]
    id: Vec<String>,
    /// Column with the title
    #[arg(long, value_name = "COLUMN")]
    title: Option<String>,
    /// Column with the start
    #[arg(long, value_name = "COLUMN")]
    start: String,
    /// Column with the end; this or --length is needed
    #[arg(
        long,
        value_name = "COLUMN",
        conflicts_with = "length",
        required_unless_present = "length"
    )]
    end: Option<String>,
    /// Column with the length: 1h30m, or whole minutes
    #[arg(long, value_name = "COLUMN")]
    length: Option<String>,
    /// Column with the size
    #[arg(long, value_name = "COLUMN")]
    size: Option<String>,
    /// Column with people, separated by ; or ,
    #[arg(long, value_name = "COLUMN")]
    people: Option<String>,
    /// Column with the resource: a pin, or with --as-issued an issued plan
    #[arg(long, value_name = "COLUMN")]
    resource: Option<String>,
    /// Column with the date that start and end count within (HH:MM or minutes)
    #[arg(long, value_name = "COLUMN", conflicts_with = "minutes_from")]
    day: Option<String>,
    /// Start and end are whole minutes since this date began
    #[arg(long, value_name = "DATE")]
    minutes_from: Option<String>,
    /// Only rows in which the column has the value
    #[arg(long, value_name = "COLUMN=VALUE")]
    only: Vec<String>,
    /// Cells with this content count as empty
    #[arg(long, value_name = "VALUE")]
    blank: Vec<String>,
    /// The resource column is a plan that was issued
    #[arg(long, requires = "resource")]
    as_issued: bool,
    /// What separates the cells: one character, or tab
    #[arg(long, default_value = ",", value_name = "CHARACTER")]
    separator: String,
    /// IANA zone of the times
    #[arg(long, default_value = "UTC", value_name = "ZONE")]
    zone: String,
    /// What one resource and several are called
    #[arg(long, value_name = "ONE,SEVERAL")]
    noun: Option<String>,
}

pub(super) fn intake(args: &IntakeArgs) -> Outcome {
    match take_in(args) {
        Ok(outcome) | Err(outcome) => outcome,
    }
}

fn columns(args: &IntakeArgs) -> Result<Columns, Outcome> {
    let zone = Zone::named(&args.zone).ok_or_else(|| {
        let hint = Zone::near(&args.zone)
            .map_or_else(String::new, |near| format!("; did you mean {near}?"));
        Outcome::bad(format!(
            "--zone {}: there is no such IANA zone{hint}",
            clean(&args.zone)
        ))
    })?;
    let minutes_from = match &args.minutes_from {
        None => None,
        Some(text) => Some(parse_date(text).ok_or_else(|| {
            Outcome::bad(format!(
                "--minutes-from {}: this is no date such as 2027-01-11",
                clean(text)
            ))
        })?),
    };
    let separator = match args.separator.as_str() {
        "tab" => b'\t',
        other if other.len() == 1 && !other.starts_with(['"', '\r', '\n']) => other.as_bytes()[0],
        _ => {
            return Err(Outcome::bad(
                "--separator takes one character, or the word tab",
            ));
        }
    };
    let mut only = Vec::new();
    for condition in &args.only {
        let (column, value) = condition.split_once('=').ok_or_else(|| {
            Outcome::bad(format!(
                "--only {}: write it as COLUMN=VALUE",
                clean(condition)
            ))
        })?;
        only.push((column.to_string(), value.to_string()));
    }
    Ok(Columns {
        id: args.id.clone(),
        title: args.title.clone(),
        start: args.start.clone(),
        end: args.end.clone(),
        length: args.length.clone(),
        size: args.size.clone(),
        people: args.people.clone(),
        resource: args.resource.clone(),
        day: args.day.clone(),
        minutes_from,
        only,
        blank: args.blank.clone(),
        as_issued: args.as_issued,
        separator,
        zone,
    })
}

fn take_in(args: &IntakeArgs) -> Result<Outcome, Outcome> {
    let io = |path: &Path, error: std::io::Error| {
        Outcome::bad(format!("{}: {error}", clean(&path.display().to_string())))
    };
    let columns = columns(args)?;
    let noun = match args.noun.as_deref().map(|noun| noun.split_once(',')) {
        None => None,
        Some(Some((one, several))) if !one.is_empty() && !several.is_empty() => {
            Some((one.to_string(), several.to_string()))
        }
        Some(_) => {
            return Err(Outcome::bad(
                "--noun: write it as ONE,SEVERAL, such as room,rooms",
            ));
        }
    };
    let set_aside = args.out.with_extension("set-aside.csv");
    for path in [&args.out, &issued_path(&args.out), &set_aside] {
        if path.exists() {
            return Err(Outcome::bad(format!(
                "{} is there already; name another --out",
                clean(&path.display().to_string())
            )));
        }
    }
    let bytes =
        store::read_bounded(&args.input, MOST_BYTES).map_err(|error| io(&args.input, error))?;
    let intake = read_csv(&bytes, &columns).map_err(|message| {
        Outcome::bad(format!(
            "{}: {message}",
            clean(&args.input.display().to_string())
        ))
    })?;
    let title = args.input.file_stem().map_or_else(
        || "Requests".into(),
        |stem| stem.to_string_lossy().into_owned(),
    );
    let text = timetable_text(&intake, &title, noun.as_ref(), columns.zone);
    document::read(&args.out.display().to_string(), text.as_bytes()).map_err(Outcome::bad)?;
    store::write_atomically(&args.out, text.as_bytes()).map_err(|error| io(&args.out, error))?;
    if args.as_issued {
        let path = issued_path(&args.out);
        let plan =
            issued(&intake, document::hash(text.as_bytes())).print(columns.zone, &|unplaced| {
                match &unplaced.because {
                    Reason::Said(said) => said.to_string(),
                    _ => String::new(),
                }
            });
        store::write_atomically(&path, plan.as_bytes()).map_err(|error| io(&path, error))?;
    }
    let mut outcome = Outcome {
        out: summary(&intake, &args.out),
        ..Outcome::default()
    };
    for (line, what) in intake.warnings.iter().take(20) {
        let _ = writeln!(
            outcome.err,
            "warning: {}:{line}: {}",
            clean(&args.input.display().to_string()),
            clean(what)
        );
    }
    if !intake.set_aside.is_empty() {
        let rows = set_aside_csv(&intake).map_err(Outcome::fault)?;
        store::write_atomically(&set_aside, &rows).map_err(|error| io(&set_aside, error))?;
        for row in intake.set_aside.iter().take(20) {
            let _ = writeln!(
                outcome.err,
                "{}:{}: {}",
                clean(&args.input.display().to_string()),
                row.line,
                clean(&row.reason)
            );
        }
        let _ = writeln!(
            outcome.err,
            "{} set aside, to be found in {}",
            several(intake.set_aside.len(), "row"),
            clean(&set_aside.display().to_string())
        );
        outcome.code = code::OPEN;
    }
    Ok(outcome)
}

fn summary(intake: &Intake, out: &Path) -> String {
    let mut text = format!(
        "{} taken in, written to {}\n",
        several(intake.requests.len(), "request"),
        clean(&out.display().to_string())
    );
    if intake.passed_over > 0 {
        let _ = writeln!(
            text,
            "{} passed over because of --only",
            several(intake.passed_over, "row")
        );
    }
    text
}

/// `1 row`, `2 rows`.
fn several(count: usize, word: &str) -> String {
    format!("{count} {word}{}", if count == 1 { "" } else { "s" })
}

/// The resource column as the plan that was issued.
fn issued(intake: &Intake, timetable: String) -> PlanFile {
    let placed: HashSet<&Arc<str>> = intake
        .issued
        .iter()
        .map(|placement| &placement.piece)
        .collect();
    let without = intake
        .requests
        .iter()
        .filter(|request| !placed.contains(&request.id));
    PlanFile {
        timetable,
        revision: 1,
        at: Instant(chrono::Utc::now().timestamp()),
        state: State::Between,
        plan: Plan {
            unplaced: without
                .map(|request| Unplaced {
                    piece: Arc::clone(&request.id),
                    because: Reason::Said("the input names no resource".into()),
                })
                .collect(),
            placements: intake.issued.clone(),
        },
        floor: None,
        violations: Vec::new(),
        out: None,
    }
}
