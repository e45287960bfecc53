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

use crate::edit::Touched;
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
