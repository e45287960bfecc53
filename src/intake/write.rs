//! The files that intake leaves behind.

use super::{Intake, plain_cell};
use crate::clock::{Instant, Resolved, Zone};
use std::fmt::Write;
use toml_edit::Value;

/// The text of a timetable with what was taken in.
pub fn timetable_text(
    intake: &Intake,
    title: &str,
    noun: Option<&(String, String)>,
    zone: Zone,
) -> String {
    let quoted = |text: &str| Value::from(text).to_string();
    let mut text = format!(
        "[timetable]\ntitle = {}\nzone = {}\n",
        quoted(title),
        quoted(zone.name())
    );
    if let Some((one, several)) = noun {
        let _ = writeln!(text, "noun = [{}, {}]", quoted(one), quoted(several));
    }
    for (id, name) in &intake.resources {
        let _ = writeln!(text, "\n[[resource]]\nid = {}", quoted(id));
        if id != name {
            let _ = writeln!(text, "title = {}", quoted(name));
        }
    }
    for request in &intake.requests {
        let span = request.span();
        let _ = writeln!(text, "\n[[request]]\nid = {}", quoted(&request.id));
        if !request.title.is_empty() {
            let _ = writeln!(text, "title = {}", quoted(&request.title));
        }
        let _ = writeln!(
            text,
            "start = {}\nend = {}",
            written(span.start, zone),
            written(span.end, zone)
        );
        if let Some(size) = request.size {
            let _ = writeln!(text, "size = {size}");
        }
        if !request.people.is_empty() {
            let people: Vec<String> = request.people.iter().map(|person| quoted(person)).collect();
            let _ = writeln!(text, "people = [{}]", people.join(", "));
        }
        if let Some(pin) = &request.pin {
            let _ = writeln!(text, "pin = {}", quoted(pin));
        }
    }
    text
}

/// A moment in TOML: local, with an offset where the local time occurs twice.
fn written(at: Instant, zone: Zone) -> String {
    match zone.resolve(zone.civil(at)) {
        Resolved::Twice { .. } => zone.rfc3339(at),
        _ => zone.civil(at).format("%Y-%m-%dT%H:%M:%S").to_string(),
    }
}

/// The rows set aside, with line and reason in front, safe to open in a spreadsheet.
///
/// # Errors
/// Whatever the CSV writer says.
pub fn set_aside_csv(intake: &Intake) -> Result<Vec<u8>, csv::Error> {
    let mut writer = csv::WriterBuilder::new()
        .flexible(true)
        .from_writer(Vec::new());
    let own = ["line".to_string(), "reason".to_string()];
    writer.write_record(
        own.iter()
            .cloned()
            .chain(intake.heading.iter().map(|cell| plain_cell(cell))),
    )?;
    for row in &intake.set_aside {
        let own = [row.line.to_string(), plain_cell(&row.reason)];
        writer.write_record(
            own.into_iter()
                .chain(row.cells.iter().map(|cell| plain_cell(cell))),
        )?;
    }
    writer
        .into_inner()
        .map_err(|error| csv::Error::from(error.into_error()))
}
