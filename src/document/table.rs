//! Reading one table key by key: known keys, types, values; every mistake with its place.

use super::Mistake;
use crate::clock::{Instant, Resolved, YEARS, Zone, parse_length, parse_time_of_day};
use crate::text::{clean, is_id, nearest};
use chrono::{NaiveDate, NaiveTime};
use std::ops::Range;
use std::sync::Arc;
use toml_edit::{Item, TableLike};

/// What was found wrong or doubtful so far.
#[derive(Default)]
pub(super) struct Notes {
    pub(super) mistakes: Vec<Mistake>,
    pub(super) warnings: Vec<Mistake>,
}

impl Notes {
    pub(super) fn mistake(&mut self, at: Range<usize>, message: impl Into<String>) {
        self.mistakes.push(Mistake {
            at,
            message: message.into(),
        });
    }
}

/// One table, named for messages (`request`, `kind` ...).
pub(super) struct Table<'a> {
    table: &'a dyn TableLike,
    /// Where to point when a key is missing.
    pub(super) head: Range<usize>,
}

impl<'a> Table<'a> {
    pub(super) fn new(table: &'a dyn TableLike, head: Range<usize>) -> Table<'a> {
        Table { table, head }
    }

    /// Notes every key that is neither in `known` nor in `later`, and those in `later`.
    pub(super) fn only(&self, what: &str, known: &[&str], later: &[&str], notes: &mut Notes) {
        for (key, item) in self.table.iter() {
            let at = self.key_place(key, item);
            if later.contains(&key) {
                notes.mistake(
                    at,
                    format!("\"{key}\" is not yet read by this version; take it out to go on"),
                );
            } else if !known.contains(&key) {
                let names = known.iter().chain(later).copied();
                let hint = nearest(key, names).map_or_else(
                    || format!("known here are {}", known.join(", ")),
                    |near| format!("did you mean \"{near}\"?"),
                );
                notes.mistake(
                    at,
                    format!("{} {what} has no key \"{}\"; {hint}", a(what), clean(key)),
                );
            }
        }
    }

    /// The byte after the last one of any value in it.
    pub(super) fn last_byte(&self) -> usize {
        fn last(item: &Item) -> usize {
            let inner = match item {
                Item::Table(table) => table.iter().map(|(_, item)| last(item)).max(),
                Item::ArrayOfTables(tables) => tables
                    .iter()
                    .flat_map(|table| table.iter().map(|(_, item)| last(item)))
                    .max(),
                _ => None,
            };
            item.span()
                .map_or(0, |span| span.end)
                .max(inner.unwrap_or(0))
        }
        self.table
            .iter()
            .map(|(_, item)| last(item))
            .max()
            .unwrap_or(0)
    }

    fn key_place(&self, key: &str, item: &Item) -> Range<usize> {
        let span = self.table.key(key).and_then(toml_edit::Key::span);
        span.or_else(|| item.span())
            .unwrap_or_else(|| self.head.clone())
    }

    /// The item of a key and where its value is.
    pub(super) fn get(&self, key: &str) -> Option<(&'a Item, Range<usize>)> {
        let item = self.table.get(key)?;
        Some((item, item.span().unwrap_or_else(|| self.head.clone())))
    }

    pub(super) fn string(&self, key: &str, notes: &mut Notes) -> Option<(Arc<str>, Range<usize>)> {
        let (item, at) = self.get(key)?;
        match item.as_str() {
            Some(text) => Some((text.into(), at)),
            None => {
                notes.mistake(at, format!("\"{key}\" is a text; write it in quotes"));
                None
            }
        }
    }

    pub(super) fn bool(&self, key: &str, notes: &mut Notes) -> bool {
        let Some((item, at)) = self.get(key) else {
            return false;
        };
        item.as_bool().unwrap_or_else(|| {
            notes.mistake(
                at,
                format!("\"{key}\" is either true or false, without quotes"),
            );
            false
        })
    }

    pub(super) fn number(
        &self,
        key: &str,
        least: i64,
        most: i64,
        notes: &mut Notes,
    ) -> Option<i64> {
        let (item, at) = self.get(key)?;
        match item.as_integer() {
            Some(number) if (least..=most).contains(&number) => Some(number),
            Some(_) => {
                notes.mistake(at, format!("\"{key}\" is from {least} to {most}"));
                None
            }
            None => {
                notes.mistake(at, format!("\"{key}\" is a whole number, without quotes"));
                None
            }
        }
    }

    pub(super) fn length(&self, key: &str, notes: &mut Notes) -> Option<i64> {
        let (text, at) = self.string(key, notes)?;
        match parse_length(&text) {
            Ok(seconds) => Some(seconds),
            Err(error) => {
                notes.mistake(at, format!("\"{}\" {error}", clean(&text)));
                None
            }
        }
    }

    /// An array of texts with their places; empty when absent.
    pub(super) fn strings(&self, key: &str, notes: &mut Notes) -> Vec<(Arc<str>, Range<usize>)> {
        let Some((item, at)) = self.get(key) else {
            return Vec::new();
        };
        let Some(array) = item.as_array() else {
            notes.mistake(
                at,
                format!("\"{key}\" is a list of texts, such as [\"one\", \"two\"]"),
            );
            return Vec::new();
        };
        let mut texts: Vec<(Arc<str>, Range<usize>)> = Vec::with_capacity(array.len());
        for value in array.iter() {
            let at = value.span().unwrap_or_else(|| at.clone());
            match value.as_str() {
                Some(text) if texts.iter().any(|(other, _)| **other == *text) => {
                    notes.warnings.push(Mistake {
                        at,
                        message: format!("\"{}\" is listed twice in \"{key}\"", clean(text)),
                    });
                }
                Some(text) => texts.push((text.into(), at)),
                None => notes.mistake(
                    at,
                    format!("\"{key}\" holds only texts; write this one in quotes"),
                ),
            }
        }
        texts
    }

    /// An array of tables, written inline or as `[[...]]`; empty when absent.
    pub(super) fn tables(&self, key: &str, notes: &mut Notes) -> Vec<Table<'a>> {
        let Some((item, at)) = self.get(key) else {
            return Vec::new();
        };
        if let Some(tables) = item.as_array_of_tables() {
            return tables
                .iter()
                .map(|table| Table::new(table, table.span().unwrap_or_else(|| at.clone())))
                .collect();
        }
        let mut found = Vec::new();
        let Some(array) = item.as_array() else {
            notes.mistake(
                at,
                format!("\"{key}\" is a list of tables, such as [{{ from = ..., to = ... }}]"),
            );
            return found;
        };
        for value in array.iter() {
            let at = value.span().unwrap_or_else(|| at.clone());
            match value.as_inline_table() {
                Some(table) => found.push(Table::new(table, at)),
                None => notes.mistake(at, format!("\"{key}\" holds only tables in braces")),
            }
        }
        found
    }

    /// The id of the table: required, of the allowed letters.
    pub(super) fn id(&self, what: &str, notes: &mut Notes) -> Option<(Arc<str>, Range<usize>)> {
        if self.get("id").is_none() {
            notes.mistake(
                self.head.clone(),
                format!("this {what} has no id; give it one, such as id = \"{what}-a\""),
            );
            return None;
        }
        let (id, at) = self.string("id", notes)?;
        if is_id(&id) {
            return Some((id, at));
        }
        notes.mistake(
            at,
            format!(
                "\"{}\" is no id; an id has letters, digits, _ . and - (at most 200)",
                clean(&id)
            ),
        );
        None
    }

    /// A civil time of day.
    pub(super) fn time_of_day(&self, key: &str, notes: &mut Notes) -> Option<NaiveTime> {
        let Some((text, at)) = self.string(key, notes) else {
            if self.get(key).is_none() {
                notes.mistake(
                    self.head.clone(),
                    format!("an opening needs \"{key}\", such as {key} = \"08:00\""),
                );
            }
            return None;
        };
        let time = parse_time_of_day(&text);
        if time.is_none() {
            notes.mistake(
                at,
                format!(
                    "\"{}\" is no time of day; write it like \"08:00\"",
                    clean(&text)
                ),
            );
        }
        time
    }

    /// A moment, by the rules for written times.
    pub(super) fn moment(
        &self,
        key: &str,
        zone: Zone,
        notes: &mut Notes,
    ) -> Option<(Instant, Range<usize>)> {
        let (item, at) = self.get(key)?;
        let Some(written) = item.as_datetime() else {
            notes.mistake(
                at,
                format!("\"{key}\" is a date and time without quotes, such as 2027-01-11T09:00:00"),
            );
            return None;
        };
        match self::moment(written, zone) {
            Ok((instant, doubled)) => {
                if let Some(warning) = doubled {
                    notes.warnings.push(Mistake {
                        at: at.clone(),
                        message: warning,
                    });
                }
                Some((instant, at))
            }
            Err(message) => {
                notes.mistake(at, message);
                None
            }
        }
    }
}

/// The article of a word.
fn a(word: &str) -> &'static str {
    match word.starts_with(['a', 'e', 'i', 'o', 'u']) {
        true => "an",
        false => "a",
    }
}

/// The moment a TOML date-time means in a zone, with a warning when it occurs twice.
pub(super) fn moment(
    written: &toml_edit::Datetime,
    zone: Zone,
) -> Result<(Instant, Option<String>), String> {
    let (Some(date), Some(time)) = (written.date, written.time) else {
        return Err("both a date and a time are needed, such as 2027-01-11T09:00:00".into());
    };
    if time.nanosecond.unwrap_or(0) != 0 {
        return Err("times are whole seconds; leave the fraction out".into());
    }
    if !YEARS.contains(&i32::from(date.year)) {
        return Err(format!(
            "the year is outside {} to {}; is it a typing mistake?",
            YEARS.start(),
            YEARS.end()
        ));
    }
    let civil = NaiveDate::from_ymd_opt(date.year.into(), date.month.into(), date.day.into())
        .and_then(|date| {
            let seconds = u32::from(time.second.unwrap_or(0));
            Some(date.and_time(NaiveTime::from_hms_opt(
                time.hour.into(),
                time.minute.into(),
                seconds,
            )?))
        })
        .ok_or("there is no such date or time")?;
    if let Some(offset) = written.offset {
        let minutes = match offset {
            toml_edit::Offset::Z => 0,
            toml_edit::Offset::Custom { minutes } => i64::from(minutes),
        };
        return Ok((Instant(civil.and_utc().timestamp() - minutes * 60), None));
    }
    match zone.resolve(civil) {
        Resolved::One(at) => Ok((at, None)),
        Resolved::Twice { earlier, later } => Ok((
            earlier,
            Some(format!(
                "{} occurs twice because the clock goes back; the earlier is taken; write {} or {} to say which",
                civil.format("%H:%M"),
                zone.rfc3339(earlier),
                zone.rfc3339(later)
            )),
        )),
        Resolved::Gap { before, after } => Err(format!(
            "{} does not exist in {} on that day, because the clock goes forward; the nearest valid times are {} and {}",
            civil.format("%H:%M"),
            zone.name(),
            before.format("%H:%M"),
            after.format("%H:%M")
        )),
    }
}
