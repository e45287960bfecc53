//! From the text of a timetable file to the timetable: all mistakes at once.

use super::table::{Notes, Table};
use super::{Document, MOST_BYTES, Mistake, Mistakes, repeats};
use crate::clock::{Instant, Span, Zone};
use crate::text::{clean, nearest};
use crate::timetable::{
    Closure, Common, Count, Days, Kind, Listed, Named, Noun, Opening, Prefer, Request, Settings,
    TimeStated, Timetable,
};
use std::collections::HashMap;
use std::ops::Range;
use std::sync::Arc;

/// A file that could be read.
#[derive(Clone, Debug)]
pub struct Read {
    /// What it states.
    pub timetable: Timetable,
    /// Its text and places.
    pub document: Document,
    /// What is doubtful in it, but does not stand in the way.
    pub warnings: Vec<Mistake>,
}

/// Most members one kind may have.
const MOST_MEMBERS: i64 = 100_000;

/// Reads the bytes of a timetable file; `file` is its name for messages.
///
/// # Errors
/// [`Mistakes`], all of them in order of place.
pub fn read(file: &str, bytes: &[u8]) -> Result<Read, Box<Mistakes>> {
    let fail = |text: &str, list: Vec<Mistake>| {
        Err(Box::new(Mistakes {
            file: file.into(),
            text: text.into(),
            list,
        }))
    };
    let one = |at: Range<usize>, message: String| vec![Mistake { at, message }];
    if bytes.len() as u64 > MOST_BYTES {
        return fail(
            "",
            one(
                0..0,
                "this file is larger than 64 MiB; split it into several timetables".into(),
            ),
        );
    }
    let text = match std::str::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => {
            let good = String::from_utf8_lossy(&bytes[..error.valid_up_to()]).into_owned();
            let message = "this byte is not UTF-8; save the file in the encoding UTF-8".into();
            return fail(&good, one(good.len()..good.len(), message));
        }
    };
    let (text, bom) = text
        .strip_prefix('\u{FEFF}')
        .map_or((text, false), |rest| (rest, true));
    let parsed = match toml_edit::Document::parse(text) {
        Ok(parsed) => parsed,
        Err(error) => {
            let at = error.span().unwrap_or(0..0);
            return fail(
                text,
                one(at, format!("this is not TOML: {}", error.message())),
            );
        }
    };
    let mut reader = Reader {
        text,
        notes: Notes::default(),
        zone: Zone::UTC,
        document: Document {
            text: String::new(),
            bom,
            requests: Vec::new(),
            named: Vec::new(),
            kinds: Vec::new(),
            occurrences: Vec::new(),
            head: Vec::new(),
        },
    };
    let root = Table::new(parsed.as_table(), 0..text.len().min(1));
    let timetable = reader.root(&root);
    let mut notes = reader.notes;
    match timetable {
        Some(timetable) if notes.mistakes.is_empty() => {
            let mut document = reader.document;
            document.text = text.into();
            Ok(Read {
                timetable,
                document,
                warnings: notes.warnings,
            })
        }
        _ => {
            notes.mistakes.sort_by_key(|mistake| mistake.at.start);
            fail(text, notes.mistakes)
        }
    }
}

struct Reader<'a> {
    text: &'a str,
    notes: Notes,
    zone: Zone,
    document: Document,
}

const COMMON: [&str; 7] = [
    "title",
    "seats",
    "offers",
    "setup",
    "turnaround",
    "open",
    "closed",
];

impl Reader<'_> {
    fn root(&mut self, root: &Table<'_>) -> Option<Timetable> {
        root.only(
            "timetable file",
            &["timetable", "kind", "resource", "request", "occurrence"],
            &["part"],
            &mut self.notes,
        );
        let settings = self.settings(root);
        let mut listed: Vec<(usize, Listed)> = Vec::new();
        let mut names = Names::default();
        let mut kinds = Vec::new();
        for table in root.tables("kind", &mut self.notes) {
            let place = self.place(&table);
            if let Some(kind) = self.kind(&table, &mut names) {
                listed.push((place.start, Listed::Kind(kinds.len())));
                self.document.kinds.push(place);
                kinds.push(kind);
            }
        }
        let mut named = Vec::new();
        for table in root.tables("resource", &mut self.notes) {
            let place = self.place(&table);
            if let Some(resource) = self.resource(&table, &kinds, &mut names) {
                listed.push((place.start, Listed::Named(named.len())));
                self.document.named.push(place);
                named.push(resource);
            }
        }
        listed.sort_by_key(|(start, _)| *start);
        if listed.is_empty()
            && let Some(settings) = &settings
        {
            // The noun may hold spaces; then it is no id and members cannot be named in a pin.
            names.open.push(Arc::clone(&settings.noun.one));
        }
        let mut requests = Vec::new();
        let mut mentions = Vec::new();
        let mut repeating: HashMap<Arc<str>, repeats::Stated> = HashMap::new();
        for table in root.tables("request", &mut self.notes) {
            let place = self.place(&table);
            if let Some(request) =
                self.request(&table, settings.as_ref(), &mut names, &mut mentions)
            {
                let stated = repeats::stated(&table, self.zone, requests.len(), &mut self.notes);
                repeating.extend(stated.map(|stated| (Arc::clone(&request.id), stated)));
                self.document.requests.push(place);
                requests.push(request);
            }
        }
        for (at, table) in root
            .tables("occurrence", &mut self.notes)
            .iter()
            .enumerate()
        {
            self.document.occurrences.push(self.place(table));
            let pin = repeats::differing(
                table,
                at,
                self.zone,
                &mut repeating,
                &names.known,
                &mut self.notes,
            );
            mentions.extend(pin.map(|(name, at)| Mention {
                name,
                at,
                kinds_too: false,
            }));
        }
        repeats::work_out(&mut requests, repeating, self.zone, &mut self.notes);
        self.check_mentions(&mentions, &names, &requests);
        let listed = listed.into_iter().map(|(_, listed)| listed).collect();
        settings.map(|settings| Timetable::new(settings, kinds, named, listed, requests))
    }

    fn settings(&mut self, root: &Table<'_>) -> Option<Settings> {
        let head = root.head.clone();
        let Some((item, at)) = root.get("timetable") else {
            let message = if self.text.trim().is_empty() {
                "this file is empty; a timetable begins with [timetable] and title = \"...\""
            } else {
                "there is no [timetable]; begin the file with [timetable] and title = \"...\""
            };
            self.notes.mistake(head, message);
            return None;
        };
        let Some(table) = item.as_table_like() else {
            self.notes.mistake(
                at,
                "\"timetable\" is a table; write [timetable] on a line of its own",
            );
            return None;
        };
        let table = Table::new(table, at);
        let place = self.place(&table);
        self.document.head.push(place);
        let notes = &mut self.notes;
        table.only(
            "timetable",
            &[
                "title",
                "zone",
                "noun",
                "grid",
                "setup",
                "turnaround",
                "leeway",
                "move_fee",
                "settled_until",
                "prefer",
            ],
            &[],
            notes,
        );
        if table.get("title").is_none() {
            notes.mistake(
                table.head.clone(),
                "the timetable has no title; add title = \"...\"",
            );
        }
        let mut settings = Settings::titled(&table.string("title", notes)?.0);
        if let Some((name, at)) = table.string("zone", notes) {
            match Zone::named(&name) {
                Some(zone) => settings.zone = zone,
                None => {
                    let hint = Zone::near(&name).map_or_else(
                        || "zones are called like \"Europe/Lisbon\"".to_string(),
                        |near| format!("did you mean \"{near}\"?"),
                    );
                    notes.mistake(
                        at,
                        format!("\"{}\" is no IANA time zone; {hint}", clean(&name)),
                    );
                }
            }
        }
        self.zone = settings.zone;
        if let Some((_, at)) = table.get("noun") {
            match table.strings("noun", notes).as_slice() {
                [(one, _), (several, _)] if !one.is_empty() && !several.is_empty() => {
                    settings.noun = Noun { one: Arc::clone(one), several: Arc::clone(several) };
                }
                _ => notes.mistake(at, "\"noun\" is two different words, one and several, such as [\"room\", \"rooms\"]"),
            }
        }
        if let Some(grid) = table.length("grid", notes) {
            if grid > 0 && grid % 60 == 0 {
                settings.grid = grid;
            } else if let Some((_, at)) = table.get("grid") {
                notes.mistake(at, "the grid is whole minutes, at least 1m");
            }
        }
        settings.setup = table.length("setup", notes).unwrap_or(settings.setup);
        settings.turnaround = table
            .length("turnaround", notes)
            .unwrap_or(settings.turnaround);
        settings.leeway = table.length("leeway", notes).unwrap_or(settings.leeway);
        if let Some(fee) = table.number("move_fee", 0, 1_000_000, notes) {
            settings.move_fee = fee as u32;
        }
        settings.settled_until = table
            .moment("settled_until", self.zone, notes)
            .map(|(at, _)| at);
        if let Some((prefer, at)) = table.string("prefer", notes) {
            match &*prefer {
                "count" => {}
                "changes" => settings.prefer = Prefer::Changes,
                _ => notes.mistake(at, "\"prefer\" is either \"count\" or \"changes\""),
            }
        }
        Some(settings)
    }

    /// From the table's head to the end of its last line; of a table in braces, the braces.
    fn place(&self, table: &Table<'_>) -> Range<usize> {
        let head = table.head.clone();
        if self.text[head.clone()].starts_with('{') {
            return head;
        }
        let last = table.last_byte().max(head.end);
        let line = self.text[last..]
            .find('\n')
            .map_or(self.text.len(), |newline| last + newline);
        head.start..self.text[..line].trim_end_matches('\r').len().max(last)
    }

    fn common(&mut self, what: &str, table: &Table<'_>) -> Common {
        let notes = &mut self.notes;
        let mut offers = None;
        if table.get("offers").is_some() {
            offers = Some(
                table
                    .strings("offers", notes)
                    .into_iter()
                    .map(|(text, _)| text)
                    .collect(),
            );
        }
        let common = Common {
            title: table.string("title", notes).map(|(title, _)| title),
            seats: table
                .number("seats", 0, u32::MAX.into(), notes)
                .map(|seats| seats as u64),
            offers,
            setup: table.length("setup", notes),
            turnaround: table.length("turnaround", notes),
            open: None,
            closed: None,
        };
        let open = self.openings(what, table);
        let closed = self.closures(table);
        Common {
            open,
            closed,
            ..common
        }
    }

    fn openings(&mut self, what: &str, table: &Table<'_>) -> Option<Vec<Opening>> {
        let (_, at) = table.get("open")?;
        let mut openings = Vec::new();
        let rules = table.tables("open", &mut self.notes);
        if rules.is_empty() {
            self.notes.mistake(at, format!("a {what} that never opens is of no use; leave \"open\" out if it is always open"));
        }
        for rule in rules {
            let notes = &mut self.notes;
            rule.only("opening", &["days", "from", "to"], &[], notes);
            let days = match rule.string("days", notes) {
                None => Some(Days::ALL),
                Some((text, at)) => {
                    let days = Days::parse(&text);
                    if days.is_none() {
                        notes.mistake(
                            at,
                            format!(
                                "\"{}\" names no days; write them like \"mon-fri\" or \"sat\"",
                                clean(&text)
                            ),
                        );
                    }
                    days
                }
            };
            let (from, to) = (
                rule.time_of_day("from", notes),
                rule.time_of_day("to", notes),
            );
            if let (Some(days), Some(from), Some(to)) = (days, from, to) {
                openings.push(Opening { days, from, to });
            }
        }
        Some(openings)
    }

    fn closures(&mut self, table: &Table<'_>) -> Option<Vec<Closure>> {
        table.get("closed")?;
        let mut closures = Vec::new();
        for entry in table.tables("closed", &mut self.notes) {
            entry.only("closure", &["from", "to", "because"], &[], &mut self.notes);
            let because = entry
                .string("because", &mut self.notes)
                .map(|(because, _)| because);
            if let Some((span, at)) = self.window(&entry, "closure") {
                if span.start >= span.end {
                    self.notes
                        .mistake(at, "the end of a closure must come after its start");
                }
                closures.push(Closure { span, because });
            }
        }
        Some(closures)
    }

    /// `from` and `to`, and where `to` is.
    fn window(&mut self, table: &Table<'_>, what: &str) -> Option<(Span, Range<usize>)> {
        for key in ["from", "to"] {
            if table.get(key).is_none() {
                self.notes
                    .mistake(table.head.clone(), format!("a {what} needs \"{key}\""));
            }
        }
        let start = table.moment("from", self.zone, &mut self.notes);
        let end = table.moment("to", self.zone, &mut self.notes);
        let ((start, _), (end, at)) = (start?, end?);
        Some((Span { start, end }, at))
    }

    fn kind(&mut self, table: &Table<'_>, names: &mut Names) -> Option<Kind> {
        table.only(
            "kind",
            &[&["id", "count"], &COMMON[..]].concat(),
            &[],
            &mut self.notes,
        );
        let id = table.id("kind", &mut self.notes);
        let count = match table.get("count") {
            None => Some(Count::Of(0)),
            Some((item, _)) if item.as_str() == Some("as needed") => Some(Count::AsNeeded),
            Some((item, at)) if item.as_integer().is_none() => {
                self.notes
                    .mistake(at, "\"count\" is a whole number or \"as needed\"");
                None
            }
            Some(_) => {
                let count = table.number("count", 0, MOST_MEMBERS, &mut self.notes);
                count.map(|count| Count::Of(count as u32))
            }
        };
        let common = self.common("kind", table);
        let ((id, at), count) = (id?, count?);
        names.add(&id, "a kind", at.clone(), &mut self.notes);
        match count {
            Count::AsNeeded => names.open.push(Arc::clone(&id)),
            Count::Of(count) => {
                for number in 1..=count {
                    names.member(&format!("{id}-{number}"), &id, at.clone(), &mut self.notes);
                }
            }
        }
        Some(Kind { id, count, common })
    }

    fn resource(&mut self, table: &Table<'_>, kinds: &[Kind], names: &mut Names) -> Option<Named> {
        table.only(
            "resource",
            &[&["id", "kind"], &COMMON[..]].concat(),
            &[],
            &mut self.notes,
        );
        let id = table.id("resource", &mut self.notes);
        let kind = table.string("kind", &mut self.notes);
        let common = self.common("resource", table);
        let (id, at) = id?;
        let of_kind = kind.as_ref().map(|(kind, _)| Arc::clone(kind));
        let overrides = names.overridden(&id, of_kind.as_deref());
        if !overrides {
            names.add(&id, "a resource", at, &mut self.notes);
        }
        if let Some((kind, at)) = kind {
            if !crate::text::is_id(&kind) {
                self.notes
                    .mistake(at, format!("\"{}\" is no id of a kind", clean(&kind)));
            } else if !kinds.iter().any(|known| known.id == kind) {
                names.add_kind(&kind, at, &mut self.notes);
            }
        }
        Some(Named {
            id,
            kind: of_kind,
            common,
        })
    }

    fn request(
        &mut self,
        table: &Table<'_>,
        settings: Option<&Settings>,
        names: &mut Names,
        mentions: &mut Vec<Mention>,
    ) -> Option<Request> {
        const KNOWN: [&str; 22] = [
            "id",
            "title",
            "start",
            "end",
            "length",
            "size",
            "needs",
            "only",
            "never",
            "people",
            "may_start",
            "weight",
            "split",
            "pin",
            "fastened",
            "withdrawn",
            "setup",
            "turnaround",
            "repeat",
            "also",
            "except",
            "together",
        ];
        table.only("request", &KNOWN, &[], &mut self.notes);
        let id = table.id("request", &mut self.notes);
        if let Some((id, at)) = &id {
            names.add(id, "a request", at.clone(), &mut self.notes);
        }
        let time = self.time(table);
        let may_start = self.windows(table);
        let notes = &mut self.notes;
        let texts = |list: Vec<(Arc<str>, Range<usize>)>| {
            list.into_iter().map(|(text, _)| text).collect::<Vec<_>>()
        };
        let only = table.strings("only", notes);
        if let Some((item, at)) = table.get("only")
            && item.as_array().is_some_and(toml_edit::Array::is_empty)
        {
            notes.mistake(
                at,
                "an empty \"only\" allows nothing; leave it out to allow everything",
            );
        }
        let never = table.strings("never", notes);
        let pin = table.string("pin", notes);
        for (list, kinds_too) in [(&only, true), (&never, true)] {
            mentions.extend(list.iter().map(|(name, at)| Mention {
                name: Arc::clone(name),
                at: at.clone(),
                kinds_too,
            }));
        }
        mentions.extend(pin.iter().map(|(name, at)| Mention {
            name: Arc::clone(name),
            at: at.clone(),
            kinds_too: false,
        }));
        let (mut start, mut length, mut stated) = (Instant(0), 1, TimeStated::End);
        if let Some(time) = &time {
            (start, length, stated) = *time;
        }
        let request = Request {
            id: id
                .as_ref()
                .map_or_else(|| "".into(), |(id, _)| Arc::clone(id)),
            title: table
                .string("title", notes)
                .map_or_else(|| "".into(), |(title, _)| title),
            start,
            length,
            stated,
            size: table
                .number("size", 0, u32::MAX.into(), notes)
                .map(|size| size as u64),
            needs: texts(table.strings("needs", notes)),
            only: texts(only),
            never: texts(never),
            people: texts(table.strings("people", notes)),
            may_start,
            weight: table
                .number("weight", 1, u32::MAX.into(), notes)
                .map_or(1, |weight| weight as u32),
            split: table.length("split", notes),
            pin: pin.map(|(pin, _)| pin),
            fastened: table.bool("fastened", notes),
            withdrawn: table.bool("withdrawn", notes),
            setup: table.length("setup", notes),
            turnaround: table.length("turnaround", notes),
            repeats: None,
            together: table.bool("together", notes),
        };
        if request.split == Some(0)
            && let Some((_, at)) = table.get("split")
        {
            notes.mistake(at, "the shortest part must have a length");
        }
        (id.is_some() && time.is_some() && settings.is_some()).then_some(request)
    }

    fn time(&mut self, table: &Table<'_>) -> Option<(Instant, i64, TimeStated)> {
        let notes = &mut self.notes;
        if table.get("start").is_none() {
            notes.mistake(
                table.head.clone(),
                "this request has no start; add start = 2027-01-11T09:00:00",
            );
        }
        let start = table.moment("start", self.zone, notes);
        match (table.get("end"), table.get("length")) {
            (None, None) => {
                notes.mistake(
                    table.head.clone(),
                    "this request has neither end nor length; add one of them",
                );
                None
            }
            (Some(_), Some((_, at))) => {
                notes.mistake(at, "this request has both end and length; keep one of them");
                None
            }
            (None, Some((_, at))) => {
                let length = table.length("length", notes)?;
                if length == 0 {
                    notes.mistake(at, "a request must last some time; the length is 0");
                    return None;
                }
                Some((start?.0, length, TimeStated::Length))
            }
            (Some((_, at)), None) => {
                let end = table.moment("end", self.zone, notes);
                let (start, end) = (start?.0, end?.0);
                if end <= start {
                    notes.mistake(at, "the end must come after the start");
                    return None;
                }
                if end - start > 3_660 * 86_400 {
                    notes.mistake(
                        at,
                        "this request lasts more than ten years; is the year right?",
                    );
                    return None;
                }
                Some((start, end - start, TimeStated::End))
            }
        }
    }

    fn windows(&mut self, table: &Table<'_>) -> Vec<Span> {
        let mut windows = Vec::new();
        for entry in table.tables("may_start", &mut self.notes) {
            entry.only("window", &["from", "to"], &[], &mut self.notes);
            if let Some((span, at)) = self.window(&entry, "window") {
                if span.start > span.end {
                    self.notes
                        .mistake(at, "a window must not end before it begins");
                }
                windows.push(span);
            }
        }
        windows
    }

    /// Names in `pin`, `only` and `never` must be known.
    fn check_mentions(&mut self, mentions: &[Mention], names: &Names, requests: &[Request]) {
        for mention in mentions {
            let name = &mention.name;
            let kind = names.known.get(name).is_some_and(|what| *what == "a kind");
            let open = names.open_member(name);
            let resource = open
                || names
                    .known
                    .get(name)
                    .is_some_and(|what| matches!(*what, "a resource" | "a member"));
            let message = if resource || (kind && mention.kinds_too) {
                continue;
            } else if kind {
                format!("\"{name}\" is a kind; a pin names one resource, such as \"{name}-1\"")
            } else if requests.iter().any(|request| request.id == *name) {
                format!("\"{name}\" is a request, not a resource")
            } else {
                let resources = names.known.iter().filter(|(_, what)| **what != "a request");
                let hint = nearest(name, resources.map(|(name, _)| &**name)).map_or_else(
                    || "name one that the file lists".to_string(),
                    |near| format!("did you mean \"{near}\"?"),
                );
                format!("there is no resource \"{}\"; {hint}", clean(name))
            };
            self.notes.mistake(mention.at.clone(), message);
        }
    }
}

/// A name in `pin`, `only` or `never`.
struct Mention {
    name: Arc<str>,
    at: Range<usize>,
    kinds_too: bool,
}

/// The one namespace of requests, resources, kinds and their members.
#[derive(Default)]
struct Names {
    known: HashMap<Arc<str>, &'static str>,
    member_of: HashMap<Arc<str>, Arc<str>>,
    /// Kinds that grow as needed.
    open: Vec<Arc<str>>,
}

impl Names {
    fn add(&mut self, id: &Arc<str>, what: &'static str, at: Range<usize>, notes: &mut Notes) {
        let taken = self
            .known
            .get(id)
            .copied()
            .or_else(|| self.open_member(id).then_some("a member"));
        match taken {
            Some("a member") => notes.mistake(
                at,
                format!("\"{id}\" is the name of a member of a kind; choose another, or give its kind to override it"),
            ),
            Some(before) if before == what => {
                notes.mistake(at, format!("{what} is called \"{id}\" already; every id is used once"));
            }
            Some(before) => notes.mistake(
                at,
                format!("{before} is called \"{id}\" already; requests, resources and kinds share their names"),
            ),
            None => {
                self.known.insert(Arc::clone(id), what);
            }
        }
    }

    /// A kind that is only named by its resources.
    fn add_kind(&mut self, id: &Arc<str>, at: Range<usize>, notes: &mut Notes) {
        if self.known.get(id) != Some(&"a kind") {
            self.add(id, "a kind", at, notes);
        }
    }

    fn member(&mut self, id: &str, kind: &Arc<str>, at: Range<usize>, notes: &mut Notes) {
        let id: Arc<str> = id.into();
        if let Some(before) = self.known.insert(Arc::clone(&id), "a member") {
            notes.mistake(
                at,
                format!("its member \"{id}\" has the name of {before}; choose another id"),
            );
        }
        self.member_of.insert(id, Arc::clone(kind));
    }

    /// Whether a resource of that id and kind is a member stated once more (and only once).
    fn overridden(&mut self, id: &Arc<str>, kind: Option<&str>) -> bool {
        let counted = self.known.get(id) == Some(&"a member")
            && self.member_of.get(id).is_some_and(|of| Some(&**of) == kind);
        let open = !self.known.contains_key(id)
            && self.open.iter().any(|of| Some(&**of) == kind)
            && self.open_member(id);
        if counted || open {
            self.known.insert(Arc::clone(id), "a resource");
        }
        counted || open
    }

    fn open_member(&self, id: &str) -> bool {
        self.open
            .iter()
            .any(|kind| crate::timetable::member_number(kind, id).is_some())
    }
}
