//! The journal beside a timetable: every edit since the file was opened, one line each, each
//! line's checksum covering the one before, so that whatever can be read is exactly what was
//! written.
//!
//! ```text
//! fewest-journal 1 SHA-256-OF-THE-TIMETABLE
//! CHECKSUM move chem-101 to 2027-01-11 10:30
//! CHECKSUM + pin bio-204 on hall-b
//! CHECKSUM move bio-204 to 2027-01-11 11:00
//! CHECKSUM undo
//! CHECKSUM saved SHA-256
//! CHECKSUM text [[120,19,"2027-01-11T09:00:00"]]
//! ```
//! A line with `+` is one step with the next. `text` replaces bytes (place, length, new): what
//! undo and redo do to a file that has been saved in between, where `undo` alone would refer
//! to a state that is nowhere any more.

use super::files::{Files, Out};
use sha2::{Digest, Sha256};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

const NAME: &str = "fewest-journal 1 ";

/// Journals larger than this are set aside unread.
pub const MOST_BYTES: u64 = 256 << 20;

/// `NAME.journal` beside `NAME.toml`.
pub fn journal_path(timetable: &Path) -> PathBuf {
    timetable.with_extension("journal")
}

/// One thing that was done.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Record {
    /// Edits that are one step.
    Step(Vec<String>),
    /// The last step was taken back.
    Undo,
    /// It was done again.
    Redo,
    /// The timetable was about to be saved with that hash.
    Saved(String),
    /// Bytes of the file's text were replaced, one after the other.
    Text(Vec<(usize, usize, String)>),
}

impl Record {
    /// Its lines, without checksums.
    fn lines(&self) -> Vec<String> {
        match self {
            Record::Step(edits) => {
                let last = edits.len().saturating_sub(1);
                let line = |(at, edit): (usize, &String)| {
                    if at < last {
                        format!("+ {edit}")
                    } else {
                        edit.clone()
                    }
                };
                edits.iter().enumerate().map(line).collect()
            }
            Record::Undo => vec!["undo".into()],
            Record::Redo => vec!["redo".into()],
            Record::Saved(hash) => vec![format!("saved {hash}")],
            Record::Text(places) => {
                vec![format!(
                    "text {}",
                    serde_json::to_string(places).unwrap_or_default()
                )]
            }
        }
    }
}

/// What could be read of a journal.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Journal {
    /// The hash of the timetable it starts from.
    pub base: String,
    /// What was done, up to the first line that cannot be trusted.
    pub records: Vec<Record>,
    /// Bytes up to there.
    pub good: u64,
    /// What follows, as text.
    pub rest: String,
    chain: [u8; 32],
}

fn link(chain: &[u8; 32], line: &str) -> [u8; 32] {
    let mut hasher = Sha256::new();
    hasher.update(chain);
    hasher.update(line.as_bytes());
    hasher.finalize().into()
}

fn checksum(chain: &[u8; 32]) -> String {
    chain[..8]
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect()
}

impl Journal {
    /// Reads a journal's bytes; `None` when not even its header can be trusted.
    pub fn read(bytes: &[u8]) -> Option<Journal> {
        let end = bytes.iter().position(|byte| *byte == b'\n')?;
        let header = std::str::from_utf8(&bytes[..end]).ok()?;
        // The header covers itself, so that a flipped bit in the hash is noticed.
        let (header, sum) = header.rsplit_once(' ')?;
        let base = header.strip_prefix(NAME)?;
        let chain = link(&[0; 32], header);
        if base.len() != 64 || sum != checksum(&chain) {
            return None;
        }
        let mut journal = Journal {
            base: base.into(),
            good: end as u64 + 1,
            chain,
            ..Journal::default()
        };
        let mut step: Vec<String> = Vec::new();
        let (mut at, mut running) = (end + 1, chain);
        while let Some(length) = bytes[at..].iter().position(|byte| *byte == b'\n') {
            let Ok(line) = std::str::from_utf8(&bytes[at..at + length]) else {
                break;
            };
            let Some((sum, said)) = line.split_once(' ') else {
                break;
            };
            let next = link(&running, said);
            if sum != checksum(&next) {
                break;
            }
            running = next;
            at += length + 1;
            if let Some(edit) = said.strip_prefix("+ ") {
                step.push(edit.into());
                continue;
            }
            journal.records.push(match said {
                "undo" => Record::Undo,
                "redo" => Record::Redo,
                said => match (said.strip_prefix("saved "), said.strip_prefix("text ")) {
                    (Some(hash), _) => Record::Saved(hash.into()),
                    (None, Some(places)) => match serde_json::from_str(places) {
                        Ok(places) => Record::Text(places),
                        Err(_) => break,
                    },
                    (None, None) => {
                        step.push(said.into());
                        Record::Step(std::mem::take(&mut step))
                    }
                },
            });
            // Half a step is no step.
            (journal.good, journal.chain) = (at as u64, running);
        }
        journal.rest = String::from_utf8_lossy(&bytes[journal.good as usize..]).into_owned();
        Some(journal)
    }

    /// What was done after the journal last knew the file as it is now: `None` when it never
    /// did. Where a save was announced and never happened, what came before it counts too.
    pub fn since(&self, on_disk: &str) -> Option<&[Record]> {
        let saved = |record: &Record| matches!(record, Record::Saved(hash) if hash == on_disk);
        match self.records.iter().rposition(saved) {
            Some(at) => Some(&self.records[at + 1..]),
            None => (self.base == on_disk).then_some(&self.records),
        }
    }

    /// What was done after the last save that was announced.
    pub fn unsaved(&self) -> &[Record] {
        let saved = self
            .records
            .iter()
            .rposition(|record| matches!(record, Record::Saved(_)));
        &self.records[saved.map_or(0, |at| at + 1)..]
    }
}

/// A journal that is being written. Nothing is written before the first record.
pub struct Writer {
    files: Arc<dyn Files>,
    path: PathBuf,
    base: String,
    out: Option<Box<dyn Out>>,
    good: u64,
    chain: Option<[u8; 32]>,
    /// Whether the last write failed and may have left part of a line.
    torn: bool,
    waiting: String,
    /// What is in the file, to write it again should it vanish or be overwritten.
    kept: String,
    /// Why nothing may be written: there is a journal that could not be read.
    blocked: Option<String>,
}

impl Writer {
    /// A new journal for a timetable of that hash.
    pub fn new(files: Arc<dyn Files>, path: PathBuf, base: String) -> Writer {
        Writer {
            files,
            path,
            base,
            out: None,
            good: 0,
            chain: None,
            torn: false,
            waiting: String::new(),
            kept: String::new(),
            blocked: None,
        }
    }

    /// A writer that never writes: what is there must not be touched.
    pub fn blocked(files: Arc<dyn Files>, path: PathBuf, why: String) -> Writer {
        let mut writer = Writer::new(files, path, String::new());
        writer.blocked = Some(why);
        writer
    }

    /// Goes on with a journal that was read.
    pub fn resume(files: Arc<dyn Files>, path: PathBuf, journal: &Journal, text: &str) -> Writer {
        let mut writer = Writer::new(files, path, journal.base.clone());
        (writer.good, writer.chain) = (journal.good, Some(journal.chain));
        // Whatever follows the last good line is cut off before anything is added.
        writer.torn = true;
        writer.kept = text.get(..journal.good as usize).unwrap_or_default().into();
        writer
    }

    /// Adds a record and makes it last. When that fails the record waits and is written with
    /// the next one.
    ///
    /// # Errors
    /// Whatever the system says; nothing that waits is safe then.
    pub fn add(&mut self, record: &Record) -> io::Result<()> {
        let mut chain = match self.chain {
            Some(chain) => chain,
            None => {
                let header = format!("{NAME}{}", self.base);
                let chain = link(&[0; 32], &header);
                self.waiting
                    .push_str(&format!("{header} {}\n", checksum(&chain)));
                chain
            }
        };
        for line in record.lines() {
            chain = link(&chain, &line);
            self.waiting
                .push_str(&format!("{} {line}\n", checksum(&chain)));
        }
        self.chain = Some(chain);
        self.flush()
    }

    /// Writes what waits.
    ///
    /// # Errors
    /// Whatever the system says.
    pub fn flush(&mut self) -> io::Result<()> {
        if self.waiting.is_empty() {
            return Ok(());
        }
        let written = self.write();
        if written.is_err() {
            // The file may have vanished with its folder: it is opened anew next time. Only what
            // was begun to be written can be torn.
            (self.torn, self.out) = (self.torn || self.out.is_some(), None);
        } else {
            self.good += self.waiting.len() as u64;
            self.kept.push_str(&std::mem::take(&mut self.waiting));
        }
        written
    }

    fn write(&mut self) -> io::Result<()> {
        if let Some(why) = &self.blocked {
            return Err(io::Error::other(why.clone()));
        }
        // What follows the last good line after a failed write is ours and is cut off.
        let there = if self.files.exists(&self.path) {
            self.files.length(&self.path)?
        } else {
            0
        };
        if there > 0 && self.kept.is_empty() && !self.torn {
            // Nothing of it is ours: it is another's, and stays as it is.
            return Err(io::Error::new(
                io::ErrorKind::AlreadyExists,
                "another journal is in the way",
            ));
        }
        if there != self.good && !(self.torn && there > self.good) {
            // Removed or overwritten from under us: written anew as a whole.
            let whole = [self.kept.as_bytes(), self.waiting.as_bytes()].concat();
            self.out = None;
            self.files.replace(&self.path, &whole)?;
            self.torn = false;
            return Ok(());
        }
        let out = match &mut self.out {
            Some(out) => out,
            None => self.out.insert(self.files.append(&self.path)?),
        };
        if self.torn {
            out.cut(self.good)?;
            self.torn = false;
        }
        out.write(self.waiting.as_bytes())?;
        out.sync()
    }

    /// The path of the journal.
    pub fn path(&self) -> &Path {
        &self.path
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::store::RealFiles;

    fn written(folder: &Path) -> (Vec<u8>, Vec<Record>) {
        let path = folder.join("a.journal");
        let mut writer = Writer::new(Arc::new(RealFiles), path.clone(), "0".repeat(64));
        let records = vec![
            Record::Step(vec!["move a to 2027-01-11 10:30".into()]),
            Record::Step(vec![
                "pin b on hall".into(),
                "move b to 2027-01-11 11:00 because \"ä\"".into(),
            ]),
            Record::Undo,
            Record::Redo,
            Record::Saved("1".repeat(64)),
            Record::Step(vec!["fasten a".into()]),
        ];
        for record in &records {
            writer.add(record).unwrap();
        }
        (std::fs::read(path).unwrap(), records)
    }

    #[test]
    fn what_is_written_is_read_and_found_by_the_files_hash() {
        let folder = tempfile::tempdir().unwrap();
        let (bytes, records) = written(folder.path());
        let journal = Journal::read(&bytes).unwrap();
        assert_eq!(
            (&journal.records, journal.good, journal.rest.as_str()),
            (&records, bytes.len() as u64, "")
        );
        assert_eq!(journal.since(&"1".repeat(64)), Some(&records[5..]));
        assert_eq!(
            journal.since(&"0".repeat(64)),
            Some(&records[..]),
            "the announced save never happened"
        );
        assert_eq!(journal.since(&"2".repeat(64)), None);
    }

    #[test]
    fn cut_at_every_byte_it_gives_a_beginning_of_what_was_written() {
        let folder = tempfile::tempdir().unwrap();
        let (bytes, records) = written(folder.path());
        for cut in 0..=bytes.len() {
            let Some(journal) = Journal::read(&bytes[..cut]) else {
                continue;
            };
            assert!(records.starts_with(&journal.records), "cut at {cut}");
            assert!(journal.good <= cut as u64);
        }
    }

    #[test]
    fn a_flipped_bit_never_gives_another_edit() {
        let folder = tempfile::tempdir().unwrap();
        let (bytes, records) = written(folder.path());
        let mut readable = 0;
        for bit in 0..bytes.len() * 8 {
            let mut bytes = bytes.clone();
            bytes[bit / 8] ^= 1 << (bit % 8);
            let Some(journal) = Journal::read(&bytes) else {
                continue;
            };
            assert!(records.starts_with(&journal.records), "bit {bit}");
            readable += 1;
        }
        assert!(readable > 1_000);
    }

    #[test]
    fn it_goes_on_after_a_torn_end() {
        let folder = tempfile::tempdir().unwrap();
        let (bytes, records) = written(folder.path());
        let path = folder.path().join("a.journal");
        std::fs::write(&path, &bytes[..bytes.len() - 3]).unwrap();
        let journal = Journal::read(&std::fs::read(&path).unwrap()).unwrap();
        assert_eq!(journal.records.len(), records.len() - 1);
        assert!(journal.rest.contains("fasten"));
        let text = std::fs::read_to_string(&path).unwrap();
        let mut writer = Writer::resume(Arc::new(RealFiles), path.clone(), &journal, &text);
        writer.add(&Record::Step(vec!["loosen a".into()])).unwrap();
        let journal = Journal::read(&std::fs::read(&path).unwrap()).unwrap();
        assert_eq!(
            journal.records.last(),
            Some(&Record::Step(vec!["loosen a".into()]))
        );
        assert_eq!(journal.rest, "");
        // Removed in between, it comes back whole.
        std::fs::remove_file(&path).unwrap();
        writer
            .add(&Record::Text(vec![(3, 1, "x\n\"".into())]))
            .unwrap();
        let again = Journal::read(&std::fs::read(&path).unwrap()).unwrap();
        assert_eq!(again.records[..journal.records.len()], journal.records[..]);
        assert_eq!(
            again.records.last(),
            Some(&Record::Text(vec![(3, 1, "x\n\"".into())]))
        );
    }
}
