//! Reading one line of the edit language.

use super::field::{Field, KEYS, unquote};
use super::{Change, Edit};
use crate::clock::{DAY, Instant, Resolved, Span, Zone, parse_civil, parse_date, parse_length};
use crate::text::{clean, is_id, nearest};
use crate::timetable::{Prefer, Timetable};
use chrono::NaiveDate;
use std::sync::Arc;
use thiserror::Error;

/// What relative words in a line refer to.
#[derive(Clone, Copy, Debug)]
pub struct Context<'a> {
    /// Present starts, the zone, the ids.
    pub timetable: &'a Timetable,
    /// What `now` means.
    pub now: Instant,
}

/// A line that is no edit.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
#[error("column {column}: {message}")]
pub struct Misread {
    /// Counted in characters from 1.
    pub column: usize,
    /// What is wrong and what to do.
    pub message: String,
}

const VERBS: [&str; 17] = [
    "add", "set", "drop", "move", "pin", "unpin", "fasten", "loosen", "swap", "withdraw",
    "restore", "close", "reopen", "settle", "prefer", "undo", "redo",
];

/// Words of the language that this program does not act on yet.
const LATER: [&str; 2] = ["split", "join"];

/// Reads one line. Relative times (`by +30m`, `now`, a time without a date) are resolved
/// against the context.
///
/// # Errors
/// [`Misread`] with the column and what to write instead.
pub fn parse(line: &str, context: Context<'_>) -> Result<Edit, Misread> {
    let mut words = Words::of(line)?;
    let verb = words.next("an edit such as: move ID to 2027-01-11 10:30")?;
    let what = match verb.text {
        "move" => {
            let (piece, start) = words.piece(context)?;
            let to = match words.either("to", "by")? {
                "to" => words.moment(context, Some(context.timetable.settings.zone.date(start)))?,
                _ => {
                    let seconds = words.shift()?;
                    let zone = context.timetable.settings.zone;
                    if seconds % DAY == 0 {
                        // Whole days keep the time on the clock.
                        zone.lenient(zone.civil(start) + chrono::TimeDelta::seconds(seconds))
                    } else {
                        start + seconds
                    }
                }
            };
            Change::Move { piece, to }
        }
        "pin" => {
            let piece = words.piece(context)?.0;
            words.keyword("on")?;
            Change::Pin {
                piece,
                on: words.id("the id of a resource")?,
            }
        }
        "unpin" => Change::Unpin(words.piece(context)?.0),
        "fasten" => Change::Fasten(words.piece(context)?.0),
        "loosen" => Change::Loosen(words.piece(context)?.0),
        "swap" => {
            let first = words.piece(context)?.0;
            words.keyword("with")?;
            Change::Swap(first, words.piece(context)?.0)
        }
        "withdraw" => Change::Withdraw(words.piece(context)?.0),
        "restore" => Change::Restore(words.piece(context)?.0),
        verb @ ("close" | "reopen") => {
            let resource = words.id("the id of a resource")?;
            words.keyword("from")?;
            let column = words.column();
            let start = words.moment(context, None)?;
            words.keyword("to")?;
            let end = words.moment(context, Some(context.timetable.settings.zone.date(start)))?;
            if end <= start {
                return Err(words.misread_at(column, "the end must come after the start".into()));
            }
            let span = Span { start, end };
            if verb == "close" {
                Change::Close { resource, span }
            } else {
                Change::Reopen { resource, span }
            }
        }
        "add" => add(&mut words, context)?,
        "set" => {
            let id = words.known(context)?;
            let field = words.field()?;
            Change::Set { id, field }
        }
        "drop" => Change::Drop(words.known(context)?),
        "settle" => {
            words.keyword("until")?;
            let zone = context.timetable.settings.zone;
            Change::Settle(words.moment(context, Some(zone.date(context.now)))?)
        }
        "prefer" => Change::Prefer(match words.either("count", "changes")? {
            "count" => Prefer::Count,
            _ => Prefer::Changes,
        }),
        "undo" => Change::Undo,
        "redo" => Change::Redo,
        later if LATER.contains(&later) => {
            return Err(verb.misread(format!("\"{later}\" is not yet possible in this version")));
        }
        other => {
            let hint = nearest(other, VERBS.into_iter()).map_or_else(
                || format!("known are: {}", VERBS.join(", ")),
                |near| format!("did you mean \"{near}\"?"),
            );
            return Err(verb.misread(format!("\"{}\" is no edit; {hint}", clean(other))));
        }
    };
    let because = words.because()?;
    words.finish()?;
    Ok(Edit { what, because })
}

/// `add ID from ... to ...` or `add ID from ... for 1h30m`, and `add resource ID ...`.
fn add(words: &mut Words<'_>, context: Context<'_>) -> Result<Change, Misread> {
    let id = words.id("a new id")?;
    if &*id == "resource" && words.words.peek().is_some_and(|word| word.text != "from") {
        let id = words.id("a new id")?;
        let mut kind = None;
        if words.words.peek().is_some_and(|word| word.text == "kind") {
            words.keyword("kind")?;
            kind = Some(words.id("the id of a kind")?);
        }
        return Ok(Change::AddResource {
            id,
            kind,
            fields: words.fields()?,
        });
    }
    words.keyword("from")?;
    let column = words.column();
    let start = words.moment(context, None)?;
    let end = match words.either("to", "for")? {
        "to" => words.moment(context, Some(context.timetable.settings.zone.date(start)))?,
        _ => start + words.shift()?,
    };
    if end <= start {
        return Err(words.misread_at(column, "the end must come after the start".into()));
    }
    Ok(Change::Add {
        id,
        span: Span { start, end },
        fields: words.fields()?,
    })
}

#[derive(Clone, Copy)]
struct Word<'a> {
    text: &'a str,
    column: usize,
}

impl Word<'_> {
    fn misread(self, message: String) -> Misread {
        Misread {
            column: self.column,
            message,
        }
    }
}

struct Words<'a> {
    words: std::iter::Peekable<std::vec::IntoIter<Word<'a>>>,
    because: Option<(usize, &'a str)>,
    end: usize,
}

impl<'a> Words<'a> {
    fn of(line: &'a str) -> Result<Words<'a>, Misread> {
        let end = line.chars().count() + 1;
        if let Some(at) = line.chars().position(|c| c.is_control() && c != '\t') {
            return Err(Misread {
                column: at + 1,
                message: "control characters are not allowed in an edit".into(),
            });
        }
        let column = |byte: usize| line[..byte].chars().count() + 1;
        let mut words: Vec<Word<'a>> = Vec::new();
        let (mut from, mut quoted, mut escaped) = (None, false, false);
        let mut because = None;
        for (at, c) in line.char_indices().chain([(line.len(), ' ')]) {
            match (c.is_whitespace() && !quoted, from) {
                (false, None) => from = Some(at),
                (true, Some(start)) => {
                    let text = &line[start..at];
                    from = None;
                    if text == "because" && !words.is_empty() {
                        because = Some((column(start), &line[start..]));
                        break;
                    }
                    words.push(Word {
                        text,
                        column: column(start),
                    });
                }
                _ => {}
            }
            if c == '"' && !escaped {
                quoted = !quoted;
            }
            escaped = quoted && c == '\\' && !escaped;
        }
        if let Some(start) = from.filter(|_| quoted) {
            return Err(Misread {
                column: column(start),
                message: "a quotation mark is never closed".into(),
            });
        }
        Ok(Words {
            words: words.into_iter().peekable(),
            because,
            end,
        })
    }

    fn column(&mut self) -> usize {
        self.words.peek().map_or(self.end, |word| word.column)
    }

    fn misread_at(&self, column: usize, message: String) -> Misread {
        Misread { column, message }
    }

    fn next(&mut self, expected: &str) -> Result<Word<'a>, Misread> {
        let column = self.end;
        self.words.next().ok_or_else(|| Misread {
            column,
            message: format!("here belongs {expected}"),
        })
    }

    fn keyword(&mut self, word: &str) -> Result<(), Misread> {
        let found = self.next(&format!("the word \"{word}\""))?;
        if found.text == word {
            Ok(())
        } else {
            Err(found.misread(format!(
                "here belongs the word \"{word}\", not \"{}\"",
                clean(found.text)
            )))
        }
    }

    fn either(&mut self, one: &'static str, other: &'static str) -> Result<&'static str, Misread> {
        let found = self.next(&format!("the word \"{one}\" or \"{other}\""))?;
        [one, other]
            .into_iter()
            .find(|word| *word == found.text)
            .ok_or_else(|| {
                found.misread(format!(
                    "here belongs the word \"{one}\" or \"{other}\", not \"{}\"",
                    clean(found.text)
                ))
            })
    }

    fn id(&mut self, expected: &str) -> Result<Arc<str>, Misread> {
        let word = self.next(expected)?;
        if is_id(word.text) {
            Ok(word.text.into())
        } else {
            Err(word.misread(format!(
                "\"{}\" is no id; here belongs {expected}",
                clean(word.text)
            )))
        }
    }

    /// An id that the timetable knows, and its present start.
    fn piece(&mut self, context: Context<'_>) -> Result<(Arc<str>, Instant), Misread> {
        let word = self.next("the id of a request")?;
        let request = context.timetable.request(word.text);
        let request = request.map(|request| (Arc::clone(&request.id), request.start));
        let dated = || {
            let piece = context.timetable.piece(word.text)?;
            Some((piece.id, piece.span.start))
        };
        match request.or_else(dated) {
            Some(found) => Ok(found),
            None => {
                let ids = context
                    .timetable
                    .requests
                    .iter()
                    .map(|request| request.id.as_ref());
                let (of, date) = word.text.split_once('@').unwrap_or((word.text, ""));
                if let Some(request) = context.timetable.request(of) {
                    let dates = request.repeats.iter().flat_map(|r| r.dates());
                    let dates = dates.map(|dated| &*dated.id);
                    let same = dates.clone().filter(|id| id.starts_with(word.text)).min();
                    let hint = same.or_else(|| nearest(word.text, dates)).map_or_else(
                        || "names of dates are like x@2027-01-11".to_string(),
                        |near| format!("did you mean \"{near}\"?"),
                    );
                    return Err(
                        word.misread(format!("{of} has no date \"{}\"; {hint}", clean(date)))
                    );
                }
                let hint = nearest(word.text, ids).map_or_else(
                    || "the file lists them".to_string(),
                    |near| format!("did you mean \"{near}\"?"),
                );
                Err(word.misread(format!(
                    "no request is called \"{}\"; {hint}",
                    clean(word.text)
                )))
            }
        }
    }

    /// The id of a request or resource that the timetable knows.
    fn known(&mut self, context: Context<'_>) -> Result<Arc<str>, Misread> {
        let word = self.next("the id of a request or a resource")?;
        let timetable = context.timetable;
        let resource = || {
            timetable
                .resources()
                .get(word.text)
                .map(|resource| Arc::clone(&resource.id))
        };
        let request = timetable
            .request(word.text)
            .map(|request| Arc::clone(&request.id));
        let dated = || timetable.piece(word.text).map(|piece| piece.id);
        let open = || timetable.open_kind_of(word.text).map(|_| word.text.into());
        request
            .or_else(dated)
            .or_else(resource)
            .or_else(open)
            .ok_or_else(|| {
                let requests = timetable.requests.iter().map(|request| request.id.as_ref());
                let resources = timetable
                    .resources()
                    .all
                    .iter()
                    .map(|resource| resource.id.as_ref());
                if timetable.kinds.iter().any(|kind| &*kind.id == word.text) {
                    return word.misread(format!(
                        "{} is a kind; its table is changed in the file",
                        word.text
                    ));
                }
                let hint = nearest(word.text, requests.chain(resources)).map_or_else(
                    || "the file lists them".to_string(),
                    |near| format!("did you mean \"{near}\"?"),
                );
                word.misread(format!(
                    "nothing is called \"{}\"; {hint}",
                    clean(word.text)
                ))
            })
    }

    /// A key and its value.
    fn field(&mut self) -> Result<Field, Misread> {
        let key = self.next(&format!("one of: {}", KEYS.join(", ")))?;
        let instead = match key.text {
            "start" | "end" => Some("move ID to ..., or set ID length ..."),
            "pin" => Some("pin ID on ..., or unpin ID"),
            "fastened" => Some("fasten ID, or loosen ID"),
            "withdrawn" => Some("withdraw ID, or restore ID"),
            "closed" => Some("close ID from ... to ..."),
            _ => None,
        };
        if let Some(instead) = instead {
            return Err(key.misread(format!("\"{}\" has a verb of its own: {instead}", key.text)));
        }
        if !KEYS.contains(&key.text) {
            let hint = nearest(key.text, KEYS.into_iter()).map_or_else(
                || format!("known are: {}", KEYS.join(", ")),
                |near| format!("did you mean \"{near}\"?"),
            );
            return Err(key.misread(format!("\"{}\" cannot be set; {hint}", clean(key.text))));
        }
        let value = self.next("its value")?;
        Field::read(key.text, value.text).map_err(|wanted| {
            value.misread(format!(
                "\"{}\" does not fit {}; here belongs {wanted}",
                clean(value.text),
                key.text
            ))
        })
    }

    /// All keys and values that follow, each key once.
    fn fields(&mut self) -> Result<Vec<Field>, Misread> {
        let mut fields: Vec<Field> = Vec::new();
        while let Some(word) = self.words.peek().copied() {
            let field = self.field()?;
            if fields.iter().any(|other| other.key() == field.key()) {
                return Err(word.misread(format!("\"{}\" is said twice", field.key())));
            }
            fields.push(field);
        }
        Ok(fields)
    }

    /// `2027-01-11 10:30`, `10:30` on `date`, or `now`.
    fn moment(
        &mut self,
        context: Context<'_>,
        date: Option<NaiveDate>,
    ) -> Result<Instant, Misread> {
        const FORM: &str = "a time such as 2027-01-11 10:30";
        let word = self.next(FORM)?;
        if word.text == "now" {
            return Ok(context.now);
        }
        let (date, time) = match (parse_date(word.text), date) {
            (Some(date), _) => (date, self.next("a time of day such as 10:30")?),
            (None, Some(date)) => (date, word),
            (None, None) => {
                return Err(word.misread(format!(
                    "\"{}\" is no date; here belongs {FORM}",
                    clean(word.text)
                )));
            }
        };
        let (civil, offset) = parse_civil(date, time.text).ok_or_else(|| {
            time.misread(format!(
                "\"{}\" is no time; here belongs {FORM}",
                clean(time.text)
            ))
        })?;
        settle(context.timetable.settings.zone, civil, offset)
            .map_err(|message| time.misread(message))
    }

    /// `+30m`, `-1h`: seconds.
    fn shift(&mut self) -> Result<i64, Misread> {
        let word = self.next("how far, such as +30m or -1h")?;
        let (sign, length) = match word.text.strip_prefix('-') {
            Some(length) => (-1, length),
            None => (1, word.text.strip_prefix('+').unwrap_or(word.text)),
        };
        let seconds = parse_length(length)
            .map_err(|error| word.misread(format!("\"{}\" {error}", clean(word.text))))?;
        Ok(sign * seconds)
    }

    fn because(&mut self) -> Result<Option<Arc<str>>, Misread> {
        let Some((column, text)) = self.because.take() else {
            return Ok(None);
        };
        let quoted = text.strip_prefix("because").map(str::trim);
        quoted
            .and_then(unquote)
            .map(|reason| Some(reason.into()))
            .ok_or_else(|| Misread {
                column,
                message: "write the reason in quotes: because \"the projector is broken\"".into(),
            })
    }

    fn finish(&mut self) -> Result<(), Misread> {
        match self.words.next() {
            None => Ok(()),
            Some(word) => {
                Err(word.misread(format!("\"{}\" is one word too many", clean(word.text))))
            }
        }
    }
}

/// A civil time in a zone, by the rules for written times.
fn settle(
    zone: Zone,
    civil: chrono::NaiveDateTime,
    offset: Option<i64>,
) -> Result<Instant, String> {
    if let Some(offset) = offset {
        return Ok(Instant(civil.and_utc().timestamp() - offset));
    }
    match zone.resolve(civil) {
        Resolved::One(at) | Resolved::Twice { earlier: at, .. } => Ok(at),
        Resolved::Gap { before, after } => Err(format!(
            "{} does not exist in {}: the clock goes forward; the nearest are {} and {}",
            civil.format("%H:%M"),
            zone.name(),
            before.format("%H:%M"),
            after.format("%H:%M")
        )),
    }
}
