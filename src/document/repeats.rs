//! Reading what repeats: `repeat`, `also`, `except` of a request, and the tables of what
//! differs on a date.

use super::Mistake;
use super::table::{Notes, Table, moment};
use crate::clock::{Instant, RepeatError, Zone};
use crate::text::{clean, nearest};
use crate::timetable::{Differing, Except, Repeats, RepeatsError, Request};
use chrono::NaiveDate;
use std::collections::HashMap;
use std::ops::Range;
use std::sync::Arc;

/// How a request says that it repeats, with the places of it all.
pub(super) struct Stated {
    request: usize,
    rule: Option<(Arc<str>, Range<usize>)>,
    also: Vec<Instant>,
    except: Vec<Except>,
    differing: Vec<(Differing, Range<usize>)>,
    head: Range<usize>,
}

/// What the table of the request at that place says of repeats, if anything.
pub(super) fn stated(
    table: &Table<'_>,
    zone: Zone,
    request: usize,
    notes: &mut Notes,
) -> Option<Stated> {
    let rule = table.string("repeat", notes);
    let also = moments(table, "also", zone, notes);
    let except = excepts(table, zone, notes);
    if rule.is_none() && also.is_empty() {
        if let Some((_, at)) = table.get("except") {
            notes.mistake(
                at,
                "\"except\" leaves dates out of a repeating request; this one says no \"repeat\"",
            );
        }
        return None;
    }
    Some(Stated {
        request,
        rule,
        also,
        except,
        differing: Vec::new(),
        head: table.head.clone(),
    })
}

/// The values of a list, each with its place; a mistake when it is none.
fn values<'a>(
    table: &Table<'a>,
    key: &str,
    form: &str,
    notes: &mut Notes,
) -> Vec<(&'a toml_edit::Value, Range<usize>)> {
    let Some((item, at)) = table.get(key) else {
        return Vec::new();
    };
    let Some(array) = item.as_array() else {
        notes.mistake(at, format!("\"{key}\" is a list, such as {key} = [{form}]"));
        return Vec::new();
    };
    let place = |value: &toml_edit::Value| value.span().unwrap_or_else(|| at.clone());
    array.iter().map(|value| (value, place(value))).collect()
}

fn moments(table: &Table<'_>, key: &str, zone: Zone, notes: &mut Notes) -> Vec<Instant> {
    const FORM: &str = "2027-01-20T09:00:00";
    let mut found = Vec::new();
    for (value, at) in values(table, key, FORM, notes) {
        let Some(written) = value.as_datetime() else {
            notes.mistake(
                at,
                format!("\"{key}\" holds dates with a time, without quotes, such as {FORM}"),
            );
            continue;
        };
        match moment(written, zone) {
            Ok((instant, doubled)) => {
                found.push(instant);
                notes
                    .warnings
                    .extend(doubled.map(|message| Mistake { at, message }));
            }
            Err(message) => notes.mistake(at, message),
        }
    }
    found
}

fn excepts(table: &Table<'_>, zone: Zone, notes: &mut Notes) -> Vec<Except> {
    const FORM: &str = "2027-01-18";
    let mut found = Vec::new();
    for (value, at) in values(table, "except", FORM, notes) {
        let written = value.as_datetime();
        match written.and_then(|written| Some((written.date?, written))) {
            None => notes.mistake(
                at,
                format!("\"except\" holds dates without quotes, such as {FORM}"),
            ),
            Some((date, written)) if written.time.is_none() => match civil_date(date) {
                Some(date) => found.push(Except::Date(date)),
                None => notes.mistake(at, "there is no such date"),
            },
            Some((_, written)) => match moment(written, zone) {
                Ok((instant, _)) => found.push(Except::Moment(instant)),
                Err(message) => notes.mistake(at, message),
            },
        }
    }
    found
}

fn civil_date(date: toml_edit::Date) -> Option<NaiveDate> {
    NaiveDate::from_ymd_opt(date.year.into(), date.month.into(), date.day.into())
}

/// Takes in a table of what differs on a date; its place among them is `at`. Returns the
/// pin that it states, with its place.
pub(super) fn differing(
    table: &Table<'_>,
    at: usize,
    zone: Zone,
    repeating: &mut HashMap<Arc<str>, Stated>,
    known: &HashMap<Arc<str>, &'static str>,
    notes: &mut Notes,
) -> Option<(Arc<str>, Range<usize>)> {
    table.only(
        "occurrence",
        &[
            "of",
            "date",
            "start",
            "length",
            "pin",
            "fastened",
            "withdrawn",
        ],
        &[],
        notes,
    );
    let date = date(table, notes);
    let start = table.moment("start", zone, notes).map(|(start, _)| start);
    let length = table.length("length", notes);
    if length == Some(0)
        && let Some((_, at)) = table.get("length")
    {
        notes.mistake(at, "an occurrence must last some time; the length is 0");
    }
    let pin = table.string("pin", notes);
    let (fastened, withdrawn) = (
        table.bool("fastened", notes),
        table.bool("withdrawn", notes),
    );
    if table.get("of").is_none() {
        notes.mistake(
            table.head.clone(),
            "this occurrence does not say of which request; add of = \"...\"",
        );
    }
    let (of, of_at) = table.string("of", notes)?;
    let Some(stated) = repeating.get_mut(&of) else {
        let message = if known.get(&of) == Some(&"a request") {
            format!("\"{of}\" does not repeat, so it has no dates that could differ")
        } else {
            let hint = nearest(&of, repeating.keys().map(|id| &**id)).map_or_else(
                || "name a request that repeats".to_string(),
                |near| format!("did you mean \"{near}\"?"),
            );
            format!("there is no request \"{}\"; {hint}", clean(&of))
        };
        notes.mistake(of_at, message);
        return pin;
    };
    if let Some((date, date_at)) = date {
        let pin = pin.as_ref().map(|(pin, _)| Arc::clone(pin));
        let differing = Differing {
            start,
            length,
            pin,
            fastened,
            withdrawn,
            ..Differing::nothing(&date, at)
        };
        stated.differing.push((differing, date_at));
    }
    pin
}

/// The date of such a table as names have it: `2027-01-18`, or `2027-01-18T0900`.
fn date(table: &Table<'_>, notes: &mut Notes) -> Option<(String, Range<usize>)> {
    let Some((item, at)) = table.get("date") else {
        notes.mistake(
            table.head.clone(),
            "this occurrence has no date; add date = 2027-01-18",
        );
        return None;
    };
    let written = item
        .as_datetime()
        .filter(|written| written.offset.is_none());
    let Some((date, written)) = written.and_then(|w| Some((civil_date(w.date?)?, w))) else {
        notes.mistake(
            at,
            "\"date\" is the date by the rule, without quotes, such as 2027-01-18 (with a time where a date has several)",
        );
        return None;
    };
    let time = written.time.map(|time| {
        let seconds = time.second.filter(|second| *second != 0);
        let seconds = seconds.map_or_else(String::new, |second| format!("{second:02}"));
        format!("T{:02}{:02}{seconds}", time.hour, time.minute)
    });
    Some((format!("{date}{}", time.unwrap_or_default()), at))
}

/// Works out the dates of every request that repeats.
pub(super) fn work_out(
    requests: &mut [Request],
    repeating: HashMap<Arc<str>, Stated>,
    zone: Zone,
    notes: &mut Notes,
) {
    for stated in repeating.into_values() {
        let request = &mut requests[stated.request];
        let (differing, places): (Vec<Differing>, Vec<Range<usize>>) =
            stated.differing.into_iter().unzip();
        let names: Vec<Arc<str>> = differing.iter().map(|d| Arc::clone(&d.date)).collect();
        let rule = stated.rule.as_ref().map(|(rule, _)| Arc::clone(rule));
        let found = Repeats::new(
            (&request.id, request.start),
            zone,
            rule,
            stated.also,
            stated.except,
            differing,
        );
        let rule_at = || {
            let rule = stated.rule.as_ref();
            rule.map_or_else(|| stated.head.clone(), |(_, at)| at.clone())
        };
        match found {
            Ok(repeats) => request.repeats = Some(Arc::new(repeats)),
            Err(RepeatsError::Rule(error)) => {
                let rule = stated.rule.as_ref().map_or("", |(rule, _)| rule);
                let error = match error {
                    RepeatError::NoRule(why) => RepeatError::NoRule(clean(&why).into_owned()),
                    error => error,
                };
                notes.mistake(rule_at(), format!("\"{}\" {error}", clean(rule)));
            }
            Err(RepeatsError::Nothing) => notes.mistake(
                rule_at(),
                "every date is left out; withdraw the request instead",
            ),
            Err(RepeatsError::NoDate(at, near)) => {
                let near = near.map_or_else(String::new, |near| {
                    let time = if near.contains('T') {
                        " (with its time, as that date has several)"
                    } else {
                        ""
                    };
                    format!("; did you mean {near}{time}?")
                });
                let date = &names[at];
                notes.mistake(
                    places[at].clone(),
                    format!("{} has no date {date} by its rule{near}", request.id),
                );
            }
            Err(RepeatsError::Twice(at)) => notes.mistake(
                places[at].clone(),
                format!("{} says twice what differs on {}", request.id, names[at]),
            ),
        }
    }
}

/// The date-time of an occurrence's name, for a file.
pub(super) fn date_value(name: &str) -> toml_edit::Value {
    let written = match name.split_once('T') {
        None => name.to_string(),
        Some((date, time)) => {
            let part = |from: usize| time.get(from..from + 2).unwrap_or("00");
            format!("{date}T{}:{}:{}", part(0), part(2), part(4))
        }
    };
    written
        .parse::<toml_edit::Datetime>()
        .map_or_else(|_| written.into(), Into::into)
}
