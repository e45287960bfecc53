//! The files as text: the timetable's TOML with the place of everything in it, byte patches
//! that leave comments and order alone, and the plan files.
//!
//! Imports `clock`, `text`, `timetable`, `edit` and `claim`.

mod cases;
mod mistake;
mod patch;
mod plan;
mod read;
mod repeats;
mod table;

pub use mistake::{Mistake, Mistakes};
pub use patch::Patch;
pub use plan::{PlanFile, State, issued_path, plan_path};
pub use read::{Read, read};

use crate::claim::Ground;
use crate::edit::Touched;
use crate::timetable::{Common, Timetable};
use sha2::{Digest, Sha256};
use std::ops::Range;

/// Files larger than this are refused before they are read as TOML.
pub const MOST_BYTES: u64 = 64 << 20;

/// The text of a timetable file, and where its tables are.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Document {
    text: String,
    bom: bool,
    /// Byte ranges from a table's header to the end of its last line.
    requests: Vec<Range<usize>>,
    named: Vec<Range<usize>>,
    kinds: Vec<Range<usize>>,
    occurrences: Vec<Range<usize>>,
    /// The one table of what is said once, as a list like the others.
    head: Vec<Range<usize>>,
}

impl Document {
    /// The bytes of the file.
    pub fn bytes(&self) -> Vec<u8> {
        let mark = if self.bom { "\u{FEFF}" } else { "" };
        [mark.as_bytes(), self.text.as_bytes()].concat()
    }

    /// The SHA-256 of the bytes, in hexadecimal.
    pub fn hash(&self) -> String {
        hash(&self.bytes())
    }

    /// The text, without a byte order mark.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// The line, from 1, on which a table begins.
    pub fn line_of(&self, table: &Touched) -> Option<usize> {
        let (places, at) = match table {
            Touched::Request(at) | Touched::RequestGone(at) => (&self.requests, *at),
            Touched::Named(at) | Touched::NamedGone(at) => (&self.named, *at),
            Touched::Kind(at) => (&self.kinds, *at),
            Touched::Occurrence(at) | Touched::OccurrenceGone(at) => (&self.occurrences, *at),
            Touched::Settings => (&self.head, 0),
        };
        let start = places.get(at)?.start;
        Some(self.text[..start].matches('\n').count() + 1)
    }

    /// The line, from 1, of a key of a table; the table's own when it is not found.
    fn line_of_key(&self, table: &Touched, key: &str) -> Option<usize> {
        let (places, at, name) = match table {
            Touched::Request(at) => (&self.requests, *at, "request"),
            Touched::Named(at) => (&self.named, *at, "resource"),
            Touched::Kind(at) => (&self.kinds, *at, "kind"),
            Touched::Occurrence(at) => (&self.occurrences, *at, "occurrence"),
            _ => return self.line_of(table),
        };
        let place = places.get(at)?.clone();
        let inside = patch::key_in(&self.text[place.clone()], name, key).unwrap_or(0);
        let before = &self.text[..place.start + inside];
        Some(before.matches('\n').count() + 1)
    }

    /// The line, from 1, on which the ground of a bound is stated. `timetable` must be the
    /// one that belongs to this text.
    pub fn line_of_ground(&self, timetable: &Timetable, ground: &Ground) -> Option<usize> {
        let request = |id: &str, key| {
            let at = timetable.position(id)?;
            self.line_of_key(&Touched::Request(at), key)
        };
        let common = |id: &str, key, states: &dyn Fn(&Common) -> bool| {
            let named = timetable.named.iter();
            let own = named.clone().position(|named| *named.id == *id);
            if let Some(at) = own.filter(|at| states(&timetable.named[*at].common)) {
                return self.line_of_key(&Touched::Named(at), key);
            }
            let kind = timetable.resources().get(id)?.kind.clone()?;
            let at = timetable.kinds.iter().position(|known| known.id == kind)?;
            self.line_of_key(&Touched::Kind(at), key)
        };
        match ground {
            Ground::Begun { .. } => {
                let at = *self.head.first().map(|place| &place.start)?;
                Some(self.text[..at].matches('\n').count() + 1)
            }
            Ground::Pin { piece, .. } => match timetable.occurrence(piece) {
                None => request(piece, "pin"),
                Some((at, date)) => {
                    let repeats = timetable.requests[at].repeats.as_ref()?;
                    let own = repeats
                        .differs(date)
                        .filter(|differs| differs.pin.is_some());
                    match own {
                        Some(own) => self.line_of_key(&Touched::Occurrence(own.table), "pin"),
                        None => self.line_of_key(&Touched::Request(at), "pin"),
                    }
                }
            },
            Ground::Together { request: id } => request(id, "together"),
            Ground::Only { request: id } => request(id, "only"),
            Ground::Never { request: id, .. } => request(id, "never"),
            Ground::Need { request: id, .. } => request(id, "needs"),
            Ground::Size { request: id, .. } => request(id, "size"),
            Ground::Closure { resource, .. } => {
                common(resource, "closed", &|common| common.closed.is_some())
            }
            Ground::Opening { resource } => {
                common(resource, "open", &|common| common.open.is_some())
            }
        }
    }

    fn places(&mut self, table: &Touched) -> (&mut Vec<Range<usize>>, usize) {
        match table {
            Touched::Request(at) | Touched::RequestGone(at) => (&mut self.requests, *at),
            Touched::Named(at) | Touched::NamedGone(at) => (&mut self.named, *at),
            Touched::Kind(at) => (&mut self.kinds, *at),
            Touched::Occurrence(at) | Touched::OccurrenceGone(at) => (&mut self.occurrences, *at),
            Touched::Settings => (&mut self.head, 0),
        }
    }
}

/// The SHA-256 of some bytes, in hexadecimal.
pub fn hash(bytes: &[u8]) -> String {
    Sha256::digest(bytes)
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect()
}
