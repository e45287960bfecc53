//! Byte patches: the text follows an edit by changing only the values concerned, so that
//! comments, order and layout stay as they are and undo brings the bytes back.

use super::Document;
use super::repeats::date_value;
use crate::clock::{Instant, Resolved, Zone, print_length};
use crate::edit::Touched;
use crate::timetable::{
    Closure, Count, Differing, Except, Kind, Named, Repeats, Request, Settings, TimeStated,
    Timetable,
};
use std::ops::Range;
use std::sync::Arc;
use toml_edit::{DocumentMut, InlineTable, Item, TableLike, Value};

/// One change of the text, reversible.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Patch {
    at: usize,
    old: String,
    new: String,
    table: Touched,
    /// Whether the patch adds the table (with its place inside `new`) or takes it away.
    adds: Option<Range<usize>>,
    removes: Option<Range<usize>>,
}

impl Patch {
    /// Place, length and new text, for a plain replacement of bytes.
    pub fn plain(&self) -> (usize, usize, String) {
        (self.at, self.old.len(), self.new.clone())
    }

    /// The patch that takes this one back.
    pub fn inverse(&self) -> Patch {
        Patch {
            at: self.at,
            old: self.new.clone(),
            new: self.old.clone(),
            table: self.table.clone(),
            adds: self.removes.clone(),
            removes: self.adds.clone(),
        }
    }
}

impl Document {
    /// Brings the text in line with a timetable in which `touched` has changed; the patches
    /// have been applied and can be taken back in reverse order.
    pub fn follow(
        &mut self,
        before: &Timetable,
        after: &Timetable,
        touched: &[Touched],
    ) -> Vec<Patch> {
        let zone = after.settings.zone;
        let mut patches = Vec::new();
        for table in touched {
            match table {
                Touched::RequestGone(at) => patches.extend(self.take_out(&Touched::Request(*at))),
                Touched::NamedGone(at) => patches.extend(self.take_out(&Touched::Named(*at))),
                Touched::OccurrenceGone(at) => {
                    patches.extend(self.take_out(&Touched::Occurrence(*at)));
                }
                Touched::Occurrence(at) => {
                    let Some((request, now)) = after.differing(*at) else {
                        continue;
                    };
                    let Some((_, then)) = before.differing(*at) else {
                        let mut keys = vec![
                            ("of", Value::from(request.id.as_ref())),
                            ("date", date_value(&now.date)),
                        ];
                        let nothing = Differing::nothing(&now.date, *at);
                        let differs = differing_changes(&nothing, now, zone).into_iter();
                        keys.extend(differs.filter_map(|(key, value)| Some((key, value?))));
                        patches.push(self.add(table, "occurrence", &keys));
                        continue;
                    };
                    for (key, value) in differing_changes(then, now, zone) {
                        patches.extend(self.set(table, "occurrence", key, value.map(Set::Whole)));
                    }
                }
                Touched::Settings => {
                    for (key, value) in settings_changes(&before.settings, &after.settings) {
                        patches.extend(self.set(table, "timetable", key, value.map(Set::Whole)));
                    }
                }
                Touched::Request(at) if before.requests.len() < after.requests.len() => {
                    let keys = new_request_keys(&after.requests[*at], zone);
                    patches.push(self.add(table, "request", &keys));
                }
                Touched::Request(at) => {
                    for (key, value) in
                        request_changes(&before.requests[*at], &after.requests[*at], zone)
                    {
                        patches.extend(self.set(table, "request", key, value.map(Set::Whole)));
                    }
                }
                Touched::Named(at) => {
                    let now = &after.named[*at];
                    let Some(then) = before.named.get(*at) else {
                        patches.push(self.add(table, "resource", &named_keys(now, zone)));
                        continue;
                    };
                    for (key, value) in named_changes(then, now) {
                        patches.extend(self.set(table, "resource", key, value.map(Set::Whole)));
                    }
                    if then.common.closed == now.common.closed {
                        continue;
                    }
                    let closed = |named: &Named| named.common.closed.clone().unwrap_or_default();
                    let (was, is) = (closed(then), closed(now));
                    for value in closure_changes(&was, &is, zone) {
                        patches.extend(self.set(table, "resource", "closed", Some(value)));
                    }
                }
                Touched::Kind(at) => {
                    patches.push(self.add(table, "kind", &kind_keys(&after.kinds[*at])))
                }
            }
        }
        patches
    }

    /// Takes patches back, last first.
    pub fn take_back(&mut self, patches: &[Patch]) {
        for patch in patches.iter().rev() {
            self.apply(&patch.inverse());
        }
    }

    /// Does patches again that were taken back.
    pub fn repeat(&mut self, patches: &[Patch]) {
        for patch in patches {
            self.apply(patch);
        }
    }

    fn apply(&mut self, patch: &Patch) {
        self.text
            .replace_range(patch.at..patch.at + patch.old.len(), &patch.new);
        let end = patch.at + patch.old.len();
        let moved = |byte: usize| byte + patch.new.len() - patch.old.len();
        let (places, own) = self.places(&patch.table);
        if patch.removes.is_some() {
            places.remove(own);
        } else if patch.adds.is_none() {
            places[own].end = moved(places[own].end);
        }
        let changed = patch.table.clone();
        for (table, places) in [
            (Touched::Request(usize::MAX), &mut self.requests),
            (Touched::Named(usize::MAX), &mut self.named),
            (Touched::Kind(usize::MAX), &mut self.kinds),
            (Touched::Occurrence(usize::MAX), &mut self.occurrences),
            (Touched::Settings, &mut self.head),
        ] {
            let same = std::mem::discriminant(&table) == std::mem::discriminant(&changed);
            for (at, place) in places.iter_mut().enumerate() {
                let own = same && at == own && patch.adds.is_none() && patch.removes.is_none();
                if !own && place.start >= end {
                    *place = moved(place.start)..moved(place.end);
                }
            }
        }
        if let Some(place) = &patch.adds {
            let place = patch.at + place.start..patch.at + place.end;
            let (places, own) = self.places(&patch.table);
            places.insert(own, place);
        }
    }

    /// The newline that the file uses.
    fn newline(&self) -> &'static str {
        if self.text.contains("\r\n") {
            "\r\n"
        } else {
            "\n"
        }
    }

    /// Sets or (with `None`) removes a key of a table.
    fn set(&mut self, table: &Touched, name: &str, key: &str, value: Option<Set>) -> Option<Patch> {
        let (places, at) = self.places(table);
        let place = places[at].clone();
        let fragment = &self.text[place.clone()];
        let change = change_in(fragment, name, key, value, self.newline())?;
        let patch = Patch {
            at: place.start + change.0.start,
            old: fragment[change.0].into(),
            new: change.1,
            table: table.clone(),
            adds: None,
            removes: None,
        };
        self.apply(&patch);
        Some(patch)
    }

    /// Takes a table out: its lines, and the blank line after (or before) them.
    fn take_out(&mut self, table: &Touched) -> Option<Patch> {
        let (places, own) = self.places(table);
        let place = places.get(own)?.clone();
        let text = &self.text;
        let range = if text[place.clone()].starts_with('{') {
            with_comma(text, place.clone())
        } else {
            let line_start = text[..place.start]
                .rfind('\n')
                .map_or(0, |newline| newline + 1);
            let line_end = text[place.end..]
                .find('\n')
                .map_or(text.len(), |newline| place.end + newline + 1);
            let blank = ["\r\n", "\n"]
                .into_iter()
                .find(|blank| text[line_end..].starts_with(blank));
            // At the end of the file the blank line is the one before.
            let before = ["\r\n", "\n"].into_iter().find(|blank| {
                line_end == text.len() && text[..line_start].ends_with(&blank.repeat(2))
            });
            line_start - before.map_or(0, str::len)..line_end + blank.map_or(0, str::len)
        };
        let inside = place.start - range.start..place.end - range.start;
        let patch = Patch {
            at: range.start,
            old: text[range].into(),
            new: String::new(),
            table: table.clone(),
            adds: None,
            removes: Some(inside),
        };
        self.apply(&patch);
        Some(patch)
    }

    /// Adds a table at the end of the file, or of the list when that is written in brackets.
    fn add(&mut self, table: &Touched, name: &str, keys: &[(&str, Value)]) -> Patch {
        let newline = self.newline();
        let (places, _) = self.places(table);
        let inline = places
            .last()
            .cloned()
            .filter(|place| self.text[place.clone()].starts_with('{'));
        let (at, new, place) = match inline {
            Some(last) => {
                let keys: Vec<String> = keys
                    .iter()
                    .map(|(key, value)| format!("{key} = {value}"))
                    .collect();
                let table = format!("{{ {} }}", keys.join(", "));
                (last.end, format!(", {table}"), 2..2 + table.len())
            }
            None => {
                let gap = match &*self.text {
                    text if text.is_empty() || text.ends_with("\n\n") => String::new(),
                    text if text.ends_with('\n') => newline.into(),
                    _ => newline.repeat(2),
                };
                let lines: String = keys
                    .iter()
                    .map(|(key, value)| format!("{newline}{key} = {value}"))
                    .collect();
                let table = format!("[[{name}]]{lines}");
                let place = gap.len()..gap.len() + table.len();
                (self.text.len(), format!("{gap}{table}{newline}"), place)
            }
        };
        let patch = Patch {
            at,
            old: String::new(),
            new,
            table: table.clone(),
            adds: Some(place),
            removes: None,
        };
        self.apply(&patch);
        patch
    }
}

/// What becomes of a key.
enum Set {
    Whole(Value),
    /// Elements `from..to` of an array are replaced; `whole` is the array as it is then.
    Elements {
        from: usize,
        to: usize,
        new: Vec<Value>,
        whole: Value,
    },
}

impl Set {
    fn whole(self) -> Value {
        match self {
            Set::Whole(value) | Set::Elements { whole: value, .. } => value,
        }
    }
}

/// The changes that turn one list of closures into another, one element at a time where
/// that is all it takes, so that comments between the others stay.
fn closure_changes(was: &[Closure], is: &[Closure], zone: Zone) -> Vec<Set> {
    let elements = |from, to, new: &[Closure], whole: &[Closure]| Set::Elements {
        from,
        to,
        new: new
            .iter()
            .map(|closure| closure_value(closure, zone))
            .collect(),
        whole: closures_value(whole, zone),
    };
    if was.is_empty() {
        return vec![Set::Whole(closures_value(is, zone))];
    }
    if was.len() == is.len() {
        let mut now = was.to_vec();
        let differ: Vec<usize> = (0..is.len()).filter(|at| was[*at] != is[*at]).collect();
        let change = |at: usize| {
            now[at] = is[at].clone();
            elements(at, at + 1, &is[at..=at], &now)
        };
        return differ.into_iter().map(change).collect();
    }
    let before = was.iter().zip(is).take_while(|(a, b)| a == b).count();
    let most = was.len().min(is.len()) - before;
    let after = was
        .iter()
        .rev()
        .zip(is.iter().rev())
        .take(most)
        .take_while(|(a, b)| a == b)
        .count();
    vec![elements(
        before,
        was.len() - after,
        &is[before..is.len() - after],
        is,
    )]
}

/// The bytes of an array to replace, and by what; `None` when it had better be written anew.
fn element_change(
    array: &toml_edit::Array,
    here: impl Fn(Range<usize>) -> Range<usize>,
    (from, to): (usize, usize),
    new: &[Value],
) -> Option<(Range<usize>, String)> {
    let span = |at: usize| array.get(at)?.span().map(&here);
    let text = new
        .iter()
        .map(ToString::to_string)
        .collect::<Vec<_>>()
        .join(", ");
    Some(match (from < to, new.is_empty()) {
        (true, false) => (span(from)?.start..span(to - 1)?.end, text),
        (true, true) if to < array.len() => (span(from)?.start..span(to)?.start, String::new()),
        (true, true) => (
            span(from.checked_sub(1)?)?.end..span(to - 1)?.end,
            String::new(),
        ),
        (false, _) if from < array.len() => {
            (span(from)?.start..span(from)?.start, format!("{text}, "))
        }
        (false, _) => {
            let end = span(from.checked_sub(1)?)?.end;
            (end..end, format!(", {text}"))
        }
    })
}

/// A table's text as a document of its own: whether it is written in braces, and what then
/// stands before it.
fn source_of(fragment: &str) -> (bool, &'static str, String) {
    let braces = fragment.starts_with('{');
    let lead = if braces { "x = " } else { "" };
    (braces, lead, format!("{lead}{fragment}"))
}

/// The one table of such a document.
fn table_of<'a>(
    parsed: &'a toml_edit::Document<&str>,
    braces: bool,
    name: &str,
) -> Option<&'a dyn TableLike> {
    if braces {
        return Some(parsed.get("x")?.as_inline_table()?);
    }
    let item = parsed.get(name)?;
    match item.as_array_of_tables() {
        Some(tables) => Some(tables.get(0)?),
        None => item.as_table_like(),
    }
}

/// The byte of a key in a table's text.
pub(super) fn key_in(fragment: &str, name: &str, key: &str) -> Option<usize> {
    let (braces, lead, source) = source_of(fragment);
    let parsed = toml_edit::Document::parse(source.as_str()).ok()?;
    let table = table_of(&parsed, braces, name)?;
    Some(table.key(key)?.span()?.start - lead.len())
}

/// The bytes of a table's text to replace, and by what; `None` when there is nothing to do.
fn change_in(
    fragment: &str,
    name: &str,
    key: &str,
    value: Option<Set>,
    newline: &str,
) -> Option<(Range<usize>, String)> {
    let (braces, lead, source) = source_of(fragment);
    let parsed = toml_edit::Document::parse(source.as_str()).ok()?;
    let table = table_of(&parsed, braces, name)?;
    let here = |span: Range<usize>| span.start - lead.len()..span.end - lead.len();
    match (table.get(key), value) {
        (None, None) => None,
        (Some(item), Some(set)) => {
            let Some(span) = item.as_value().and_then(Value::span).map(here) else {
                // Written as [[...]] tables: rare enough to let the library write it anew.
                return Some((0..fragment.len(), rewritten(fragment, name, key, set)?));
            };
            let by_elements = match (&set, item.as_array()) {
                (Set::Elements { from, to, new, .. }, Some(array)) => {
                    element_change(array, here, (*from, *to), new)
                }
                _ => None,
            };
            Some(by_elements.unwrap_or_else(|| (span, set.whole().to_string())))
        }
        (None, Some(set)) => {
            let line = format!("{key} = {}", set.whole());
            if braces {
                let last = table
                    .iter()
                    .filter_map(|(_, item)| item.span())
                    .map(|span| here(span).end)
                    .max();
                let (at, text) = last.map_or((1, line.clone()), |end| (end, format!(", {line}")));
                return Some((at..at, text));
            }
            // Before any table of its own below it, else after its last line.
            let below = table.iter().filter(|(_, item)| item.as_value().is_none());
            let end = below
                .filter_map(|(_, item)| item.span())
                .map(|span| span.start)
                .min();
            let at = end.map_or(fragment.len(), |below| fragment[..below].trim_end().len());
            Some((at..at, format!("{newline}{line}")))
        }
        (Some(item), None) => {
            let start = here(table.key(key)?.span()?).start;
            let end = here(item.span()?).end;
            Some((
                if braces {
                    with_comma(fragment, start..end)
                } else {
                    whole_lines(fragment, start..end)
                },
                String::new(),
            ))
        }
    }
}

/// The lines of a key with the newline before them, as keys never stand on the header's line.
fn whole_lines(fragment: &str, key: Range<usize>) -> Range<usize> {
    let start = fragment[..key.start].rfind('\n').unwrap_or(0);
    let start = if fragment[..start].ends_with('\r') {
        start - 1
    } else {
        start
    };
    let end = fragment[key.end..]
        .find('\n')
        .map_or(fragment.len(), |newline| key.end + newline);
    let end = if fragment[..end].ends_with('\r') {
        end - 1
    } else {
        end
    };
    start..end
}

/// A key in braces with the comma that is then one too many.
fn with_comma(fragment: &str, key: Range<usize>) -> Range<usize> {
    let after = fragment[key.end..].trim_start();
    if let Some(rest) = after.strip_prefix(',') {
        let next = fragment.len() - rest.trim_start().len();
        return key.start..next;
    }
    let before = fragment[..key.start].trim_end();
    before
        .strip_suffix(',')
        .map_or(key.clone(), |kept| kept.len()..key.end)
}

fn rewritten(fragment: &str, name: &str, key: &str, set: Set) -> Option<String> {
    let mut parsed: DocumentMut = fragment.parse().ok()?;
    let table = parsed.get_mut(name)?.as_array_of_tables_mut()?.get_mut(0)?;
    table.insert(key, Item::Value(set.whole()));
    Some(parsed.to_string().trim_end().into())
}

/// A moment as it is written in the file: local time, with an offset where that is doubtful.
pub(super) fn moment_value(at: Instant, zone: Zone) -> Value {
    let text = match zone.resolve(zone.civil(at)) {
        Resolved::Twice { .. } => zone.rfc3339(at),
        _ => zone.civil(at).format("%Y-%m-%dT%H:%M:%S").to_string(),
    };
    match text.parse::<toml_edit::Datetime>() {
        Ok(written) => written.into(),
        Err(_) => text.into(),
    }
}

fn closure_value(closure: &Closure, zone: Zone) -> Value {
    let mut table = InlineTable::new();
    table.insert("from", moment_value(closure.span.start, zone));
    table.insert("to", moment_value(closure.span.end, zone));
    if let Some(because) = &closure.because {
        table.insert("because", because.as_ref().into());
    }
    table.into()
}

fn closures_value(closures: &[Closure], zone: Zone) -> Value {
    let values = closures.iter().map(|closure| closure_value(closure, zone));
    Value::Array(values.collect())
}

/// The keys of a request that differ, with their new values.
fn request_changes(
    before: &Request,
    after: &Request,
    zone: Zone,
) -> Vec<(&'static str, Option<Value>)> {
    let mut changes: Vec<(&'static str, Option<Value>)> = Vec::new();
    if before.start != after.start {
        changes.push(("start", Some(moment_value(after.start, zone))));
    }
    let (was, is) = (before.span().end, after.span().end);
    if after.stated == TimeStated::End && was != is {
        changes.push(("end", Some(moment_value(is, zone))));
    }
    if after.stated == TimeStated::Length && before.length != after.length {
        changes.push(("length", Some(print_length(after.length).into())));
    }
    if before.pin != after.pin {
        changes.push((
            "pin",
            after.pin.as_ref().map(|pin| Value::from(pin.as_ref())),
        ));
    }
    let number = |value: Option<u64>| value.map(|value| Value::from(value as i64));
    let length = |value: Option<i64>| value.map(|value| Value::from(print_length(value)));
    let text = |text: &Arc<str>| (!text.is_empty()).then(|| Value::from(text.as_ref()));
    let mut note = |key, differs: bool, value: Option<Value>| {
        if differs {
            changes.push((key, value));
        }
    };
    note("title", before.title != after.title, text(&after.title));
    note("size", before.size != after.size, number(after.size));
    let weight = (after.weight > 1).then(|| Value::from(i64::from(after.weight)));
    note("weight", before.weight != after.weight, weight);
    note(
        "needs",
        before.needs != after.needs,
        list_value(&after.needs),
    );
    note(
        "people",
        before.people != after.people,
        list_value(&after.people),
    );
    note("only", before.only != after.only, list_value(&after.only));
    note(
        "never",
        before.never != after.never,
        list_value(&after.never),
    );
    note("setup", before.setup != after.setup, length(after.setup));
    note(
        "turnaround",
        before.turnaround != after.turnaround,
        length(after.turnaround),
    );
    let (was, is) = (before.repeats.as_deref(), after.repeats.as_deref());
    let rule = |repeats: Option<&Repeats>| repeats.and_then(|repeats| repeats.rule.clone());
    note(
        "repeat",
        rule(was) != rule(is),
        rule(is).map(|rule| Value::from(rule.as_ref())),
    );
    let also = |repeats: Option<&Repeats>| repeats.map_or(Vec::new(), |r| r.also.clone());
    let except = |repeats: Option<&Repeats>| repeats.map_or(Vec::new(), |r| r.except.clone());
    let list = |values: Vec<Value>| {
        (!values.is_empty()).then(|| Value::Array(values.into_iter().collect()))
    };
    let starts = also(is).into_iter().map(|at| moment_value(at, zone));
    note("also", also(was) != also(is), list(starts.collect()));
    let dates = except(is).into_iter().map(|except| match except {
        Except::Date(date) => date_value(&date.to_string()),
        Except::Moment(at) => moment_value(at, zone),
    });
    note("except", except(was) != except(is), list(dates.collect()));
    for (key, was, is) in [
        ("fastened", before.fastened, after.fastened),
        ("withdrawn", before.withdrawn, after.withdrawn),
        ("together", before.together, after.together),
    ] {
        if was != is {
            changes.push((key, is.then(|| Value::from(true))));
        }
    }
    changes
}

/// The keys that differ of what is said once for the whole timetable, with their new values.
fn settings_changes(before: &Settings, after: &Settings) -> Vec<(&'static str, Option<Value>)> {
    let mut changes = Vec::new();
    if before.settled_until != after.settled_until {
        let until = after.settled_until.map(|at| moment_value(at, after.zone));
        changes.push(("settled_until", until));
    }
    if before.prefer != after.prefer {
        changes.push(("prefer", Some(after.prefer.name().into())));
    }
    changes
}

/// The keys that differ of what differs on a date, with their new values.
fn differing_changes(
    before: &Differing,
    after: &Differing,
    zone: Zone,
) -> Vec<(&'static str, Option<Value>)> {
    let mut changes = Vec::new();
    let mut note = |key, differs: bool, value: Option<Value>| {
        if differs {
            changes.push((key, value));
        }
    };
    note(
        "start",
        before.start != after.start,
        after.start.map(|at| moment_value(at, zone)),
    );
    note(
        "length",
        before.length != after.length,
        after.length.map(|length| print_length(length).into()),
    );
    note(
        "pin",
        before.pin != after.pin,
        after.pin.as_ref().map(|pin| Value::from(pin.as_ref())),
    );
    for (key, was, is) in [
        ("fastened", before.fastened, after.fastened),
        ("withdrawn", before.withdrawn, after.withdrawn),
    ] {
        note(key, was != is, is.then(|| Value::from(true)));
    }
    changes
}

/// A list, or nothing when it is empty.
fn list_value(list: &[Arc<str>]) -> Option<Value> {
    (!list.is_empty())
        .then(|| Value::Array(list.iter().map(|text| Value::from(text.as_ref())).collect()))
}

/// The keys of a new request.
fn new_request_keys(request: &Request, zone: Zone) -> Vec<(&'static str, Value)> {
    let mut keys = vec![("id", Value::from(request.id.as_ref()))];
    let plain = Request::plain(&request.id, request.span());
    let changes = request_changes(&plain, request, zone);
    let (title, rest): (Vec<_>, Vec<_>) = changes.into_iter().partition(|(key, _)| *key == "title");
    let mut add = |list: Vec<(&'static str, Option<Value>)>| {
        keys.extend(
            list.into_iter()
                .filter_map(|(key, value)| Some((key, value?))),
        );
    };
    add(title);
    add(vec![
        ("start", Some(moment_value(request.start, zone))),
        ("end", Some(moment_value(request.span().end, zone))),
    ]);
    add(rest);
    keys
}

/// The keys of a named resource that differ, closures aside.
fn named_changes(before: &Named, after: &Named) -> Vec<(&'static str, Option<Value>)> {
    let (was, is) = (&before.common, &after.common);
    let length = |value: Option<i64>| value.map(|value| Value::from(print_length(value)));
    let list = |list: &Vec<Arc<str>>| {
        Value::Array(list.iter().map(|text| Value::from(text.as_ref())).collect())
    };
    let mut changes = Vec::new();
    let mut note = |key, differs: bool, value: Option<Value>| {
        if differs {
            changes.push((key, value));
        }
    };
    note(
        "title",
        was.title != is.title,
        is.title.as_ref().map(|title| Value::from(title.as_ref())),
    );
    note(
        "seats",
        was.seats != is.seats,
        is.seats.map(|seats| Value::from(seats as i64)),
    );
    note(
        "offers",
        was.offers != is.offers,
        is.offers.as_ref().map(list),
    );
    note("setup", was.setup != is.setup, length(is.setup));
    note(
        "turnaround",
        was.turnaround != is.turnaround,
        length(is.turnaround),
    );
    changes
}

fn named_keys(named: &Named, zone: Zone) -> Vec<(&'static str, Value)> {
    let text = |text: &Arc<str>| Value::from(text.as_ref());
    let mut keys = vec![("id", text(&named.id))];
    keys.extend(named.kind.as_ref().map(|kind| ("kind", text(kind))));
    let nothing = Named {
        id: Arc::clone(&named.id),
        kind: None,
        common: crate::timetable::Common::default(),
    };
    keys.extend(
        named_changes(&nothing, named)
            .into_iter()
            .filter_map(|(key, value)| Some((key, value?))),
    );
    keys.extend(
        named
            .common
            .closed
            .as_ref()
            .map(|closed| ("closed", closures_value(closed, zone))),
    );
    keys
}

fn kind_keys(kind: &Kind) -> Vec<(&'static str, Value)> {
    let count = match kind.count {
        Count::Of(count) => i64::from(count).into(),
        Count::AsNeeded => "as needed".into(),
    };
    vec![("id", kind.id.as_ref().into()), ("count", count)]
}
