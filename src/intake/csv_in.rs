//! Reading CSV row by row.

use super::{Columns, id_from};
use crate::claim::Placement;
use crate::clock::{Instant, Resolved, Span, YEARS, Zone, parse_civil, parse_date, parse_length};
use crate::text::{clean, nearest};
use crate::timetable::Request;
use chrono::{Datelike, NaiveDate};
use std::collections::{HashMap, HashSet};
use std::sync::Arc;

/// A row that could not be taken in.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SetAside {
    /// Its line in the file, from 1.
    pub line: u64,
    /// Why.
    pub reason: String,
    /// Its cells.
    pub cells: Vec<String>,
}

/// What came of a CSV file.
#[derive(Clone, Debug, Default)]
pub struct Intake {
    /// The heading row.
    pub heading: Vec<String>,
    /// The requests; with a resource column and not as issued, pinned.
    pub requests: Vec<Request>,
    /// Resources in order of first use: id and name as written.
    pub resources: Vec<(Arc<str>, Arc<str>)>,
    /// Where the issued plan has them, when the resource column is one.
    pub issued: Vec<Placement>,
    /// Rows left out because they cannot be read.
    pub set_aside: Vec<SetAside>,
    /// Rows left out because `only` says so.
    pub passed_over: usize,
    /// Doubtful times that were taken by a rule: line and what was done.
    pub warnings: Vec<(u64, String)>,
}

/// Reads CSV (RFC 4180 and its usual relaxations) with a heading row.
///
/// # Errors
/// A sentence, when the heading lacks a named column or the input is no CSV at all.
pub fn read_csv(bytes: &[u8], columns: &Columns) -> Result<Intake, String> {
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    let mut reader = csv::ReaderBuilder::new()
        .flexible(true)
        .delimiter(columns.separator)
        .from_reader(bytes);
    let heading = reader
        .byte_headers()
        .map_err(|error| format!("the heading row cannot be read: {error}"))?;
    let heading: Vec<String> = heading
        .iter()
        .map(|cell| String::from_utf8_lossy(cell).trim().to_string())
        .collect();
    let places = Places::of(&heading, columns)?;
    let mut taking = Taking {
        columns,
        places,
        intake: Intake {
            heading,
            ..Intake::default()
        },
        ids: HashMap::new(),
        resource_ids: HashMap::new(),
        used: HashSet::new(),
    };
    let mut last_line = 1;
    for record in reader.byte_records() {
        let record = record.map_err(|error| format!("this is not CSV: {error}"))?;
        let line = record.position().map_or(0, csv::Position::line);
        let cells: Vec<String> = record
            .iter()
            .map(|cell| String::from_utf8_lossy(cell).into_owned())
            .collect();
        last_line = line;
        let readable = record.iter().all(|cell| std::str::from_utf8(cell).is_ok());
        let expected = taking.intake.heading.len();
        let taken = if !readable {
            Err("a cell is not UTF-8".into())
        } else if cells.len() != expected {
            Err(format!(
                "it has {} cells, the heading has {expected}",
                cells.len()
            ))
        } else {
            taking.row(line, &cells)
        };
        if let Err(reason) = taken {
            taking.intake.set_aside.push(SetAside {
                line,
                reason,
                cells,
            });
        }
    }
    // A quotation mark that is never closed swallows all rows after it.
    if bytes.iter().filter(|byte| **byte == b'"').count() % 2 == 1 {
        return Err(format!(
            "a quotation mark is never closed; look from line {last_line} on"
        ));
    }
    taking.disentangle();
    Ok(taking.intake)
}

/// Where the named columns are.
struct Places {
    id: Vec<usize>,
    title: Option<usize>,
    start: usize,
    end: Option<usize>,
    length: Option<usize>,
    size: Option<usize>,
    people: Option<usize>,
    resource: Option<usize>,
    day: Option<usize>,
    only: Vec<(usize, String)>,
}

impl Places {
    fn of(heading: &[String], columns: &Columns) -> Result<Places, String> {
        let find = |name: &String| {
            let mut places = (0..heading.len()).filter(|at| heading[*at] == *name);
            match (places.next(), places.next()) {
                (Some(place), None) => Ok(place),
                (Some(_), Some(_)) => Err(format!("there are two columns \"{}\"", clean(name))),
                (None, _) => {
                    let names = heading.iter().map(String::as_str);
                    let other = [';', '\t', '|']
                        .into_iter()
                        .find(|c| heading.len() == 1 && heading[0].contains(*c));
                    let hint = match (nearest(name, names), other) {
                        (Some(near), _) => format!("did you mean \"{near}\"?"),
                        (None, Some('\t')) => {
                            "the cells seem to be separated by tabs: --separator tab".into()
                        }
                        (None, Some(c)) => {
                            format!("the cells seem to be separated by {c}: --separator \"{c}\"")
                        }
                        (None, None) => format!("there are: {}", heading.join(", ")),
                    };
                    Err(format!(
                        "there is no column \"{}\"; {}",
                        clean(name),
                        clean(&hint)
                    ))
                }
            }
        };
        let maybe = |name: &Option<String>| name.as_ref().map(find).transpose();
        Ok(Places {
            id: columns.id.iter().map(find).collect::<Result<_, _>>()?,
            title: maybe(&columns.title)?,
            start: find(&columns.start)?,
            end: maybe(&columns.end)?,
            length: maybe(&columns.length)?,
            size: maybe(&columns.size)?,
            people: maybe(&columns.people)?,
            resource: maybe(&columns.resource)?,
            day: maybe(&columns.day)?,
            only: columns
                .only
                .iter()
                .map(|(name, value)| Ok((find(name)?, value.clone())))
                .collect::<Result<_, String>>()?,
        })
    }
}

struct Taking<'a> {
    columns: &'a Columns,
    places: Places,
    intake: Intake,
    ids: HashMap<Arc<str>, u64>,
    resource_ids: HashMap<Arc<str>, Arc<str>>,
    used: HashSet<Arc<str>>,
}

impl Taking<'_> {
    fn row(&mut self, line: u64, cells: &[String]) -> Result<(), String> {
        let columns = self.columns;
        let zone = columns.zone;
        let cell = |at: usize| {
            let text = cells.get(at).map_or("", |cell| cell.trim());
            if columns.blank.iter().any(|blank| blank == text) {
                ""
            } else {
                text
            }
        };
        let named = |at: Option<usize>| at.map_or("", cell);
        if self
            .places
            .only
            .iter()
            .any(|(at, value)| cell(*at) != value)
        {
            self.intake.passed_over += 1;
            return Ok(());
        }
        let id = if self.places.id.is_empty() {
            Some(format!("row-{line}").into())
        } else {
            let parts: Vec<&str> = self
                .places
                .id
                .iter()
                .map(|at| cell(*at))
                .filter(|cell| !cell.is_empty())
                .collect();
            id_from(&parts.join("-"))
        };
        let id = id.ok_or("the id is empty")?;
        let date =
            match self.places.day {
                None => None,
                Some(at) => Some(parse_date(cell(at)).ok_or_else(|| {
                    format!("\"{}\" is no date such as 2027-01-11", clean(cell(at)))
                })?),
            };
        let mut doubtful = None;
        let start = self.time(cell(self.places.start), date, &mut doubtful)?;
        let span = match (self.places.end, self.places.length) {
            (Some(at), _) => {
                let mut end = self.time(cell(at), date, &mut doubtful)?;
                if end <= start
                    && let Some(date) = date.and_then(|date| date.succ_opt())
                {
                    // Counted within a day, an end before the start is on the next one.
                    end = self.time(cell(at), Some(date), &mut doubtful)?;
                }
                if end <= start && doubtful.is_some() {
                    // The start was put after a gap in the clock; the length stays.
                    end = end + zone.gap_before(start);
                }
                Span { start, end }
            }
            (None, Some(at)) => Span::lasting(start, length(cell(at))?),
            (None, None) => return Err("there is neither an end nor a length".into()),
        };
        if span.end <= span.start {
            return Err("the end does not come after the start".into());
        }
        if span.seconds() > 3_660 * 86_400 {
            return Err("it lasts more than ten years".into());
        }
        let size = match named(self.places.size) {
            "" => None,
            text => Some(text.parse::<u32>().map_err(|_| {
                format!("\"{}\" is no size; a whole number is needed", clean(text))
            })?),
        };
        if let Some(before) = self.ids.get(&id) {
            return Err(format!(
                "the id {id} is taken by line {before}; name more columns with --id"
            ));
        }
        self.ids.insert(Arc::clone(&id), line);
        let mut request = Request::plain(&id, span);
        request.title = named(self.places.title).into();
        request.size = size.map(u64::from);
        let people = named(self.places.people)
            .split([';', ','])
            .map(str::trim)
            .filter(|name| !name.is_empty());
        for person in people {
            let person: Arc<str> = person.into();
            if !request.people.contains(&person) {
                request.people.push(person);
            }
        }
        let resource = named(self.places.resource);
        if !resource.is_empty() {
            let resource = self.resource(resource);
            if self.columns.as_issued {
                self.intake.issued.push(Placement {
                    piece: Arc::clone(&id),
                    resource,
                    span,
                });
            } else {
                request.pin = Some(resource);
            }
        }
        self.intake.requests.push(request);
        self.intake
            .warnings
            .extend(doubtful.map(|what| (line, what)));
        Ok(())
    }

    /// The id of a resource by its name as written.
    fn resource(&mut self, name: &str) -> Arc<str> {
        if let Some(id) = self.resource_ids.get(name) {
            return Arc::clone(id);
        }
        let base = id_from(name).unwrap_or_else(|| "unnamed".into());
        let id = self.free(&base);
        self.used.insert(Arc::clone(&id));
        self.resource_ids.insert(name.into(), Arc::clone(&id));
        self.intake.resources.push((Arc::clone(&id), name.into()));
        id
    }

    fn free(&self, base: &Arc<str>) -> Arc<str> {
        if !self.used.contains(base) {
            return Arc::clone(base);
        }
        let numbered = (2..).map(|number| Arc::from(format!("{base}_{number}")));
        let mut free = numbered.filter(|id| !self.used.contains(id));
        free.next().unwrap_or_else(|| Arc::clone(base))
    }

    /// Requests and resources share their names: a resource called like a request gets
    /// another.
    fn disentangle(&mut self) {
        self.used.extend(self.ids.keys().cloned());
        let mut renamed: HashMap<Arc<str>, Arc<str>> = HashMap::new();
        for at in 0..self.intake.resources.len() {
            let id = Arc::clone(&self.intake.resources[at].0);
            if self.ids.contains_key(&id) {
                let new = self.free(&id);
                self.used.insert(Arc::clone(&new));
                self.intake.resources[at].0 = Arc::clone(&new);
                renamed.insert(id, new);
            }
        }
        for placement in &mut self.intake.issued {
            if let Some(new) = renamed.get(&placement.resource) {
                placement.resource = Arc::clone(new);
            }
        }
        for pin in self
            .intake
            .requests
            .iter_mut()
            .filter_map(|request| request.pin.as_mut())
        {
            if let Some(new) = renamed.get(pin) {
                *pin = Arc::clone(new);
            }
        }
    }

    fn time(
        &self,
        text: &str,
        date: Option<NaiveDate>,
        doubtful: &mut Option<String>,
    ) -> Result<Instant, String> {
        let zone = self.columns.zone;
        if text.is_empty() {
            return Err("a time is missing".into());
        }
        let known = |at: Instant| {
            let year = zone.date(at).year();
            if YEARS.contains(&year) {
                Ok(at)
            } else {
                Err(format!("the year {year} is out of bounds"))
            }
        };
        let since = date.or(self.columns.minutes_from);
        if let Some(since) = since
            && let Ok(minutes) = text.parse::<i32>()
        {
            return known(zone.midnight(since) + i64::from(minutes) * 60);
        }
        if self.columns.minutes_from.is_some() {
            return Err(format!("\"{}\" is no whole number of minutes", clean(text)));
        }
        let bad = || {
            format!(
                "\"{}\" is no time such as {}",
                clean(text),
                if date.is_some() {
                    "10:30"
                } else {
                    "2027-01-11 10:30"
                }
            )
        };
        let (date, clock) = match date {
            Some(date) => (date, text),
            None => {
                let (date, clock) = text.split_once(['T', ' ']).ok_or_else(bad)?;
                (parse_date(date).ok_or_else(bad)?, clock.trim())
            }
        };
        let clock = clock
            .strip_suffix('Z')
            .map_or_else(|| clock.to_string(), |clock| format!("{clock}+00:00"));
        let (civil, offset) = parse_civil(date, &clock).ok_or_else(bad)?;
        if let Some(offset) = offset {
            return known(Instant(civil.and_utc().timestamp() - offset));
        }
        match zone.resolve(civil) {
            Resolved::One(_) => {}
            Resolved::Twice { .. } => {
                *doubtful = Some(format!("{civil} occurs twice; the earlier was taken"))
            }
            Resolved::Gap { .. } => {
                *doubtful = Some(format!(
                    "{civil} does not exist; {} was taken",
                    Zone::print(zone, zone.lenient(civil))
                ));
            }
        }
        known(zone.lenient(civil))
    }
}

/// A length, or whole minutes; seconds.
fn length(text: &str) -> Result<i64, String> {
    let seconds = match text.parse::<u32>() {
        Ok(minutes) => i64::from(minutes) * 60,
        Err(_) => parse_length(text).map_err(|error| format!("\"{}\" {error}", clean(text)))?,
    };
    if seconds == 0 {
        Err("the length is 0".into())
    } else {
        Ok(seconds)
    }
}
