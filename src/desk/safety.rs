//! What keeps edits from being lost and two people from overwriting each other: the lock, the
//! journal's records, what a crash left behind, and a file that changes underneath.

use super::history::{Step, TextChange};
use super::{Desk, Trouble};
use crate::document;
use crate::edit::{self, Edit};
use crate::lookup::FastSet;
use crate::store::journal::{self, Journal, Record, Writer, journal_path};
use crate::store::{self, Files, Lock, Locking, Written, lock};
use crate::text::clean;
use crate::words::count_words;
use std::collections::VecDeque;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Who may write.
#[derive(Debug)]
pub enum Access {
    /// Nobody asked: the file is only read, or written at once.
    Unasked,
    /// This desk.
    Ours(Lock),
    /// Another desk; what it said of itself.
    Theirs(String),
    /// There can be no lock here, because the folder cannot be written.
    Nowhere(String),
}

/// The file as it is on the disk.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Disk {
    /// As last read or written.
    Same,
    /// Somebody else wrote it.
    Changed,
    /// It cannot be read any more.
    Gone,
}

/// Edits that a session before this one made and did not save.
#[derive(Clone, Debug)]
pub struct Leftover {
    /// How many edits that makes.
    pub edits: usize,
    /// Whether they were made on another version of the file.
    pub foreign: bool,
    journal: Journal,
    text: String,
}

/// The state of safety.
#[derive(Debug)]
pub(super) struct Safety {
    outbox: Vec<Record>,
    issued: u64,
    safe: u64,
    failed: Option<String>,
    /// Records that are not known to be safe, and whom they concern.
    waiting: VecDeque<(u64, Vec<Arc<str>>)>,
    /// Steps of the history from here on were made since the last save (or opening): a replay
    /// knows them.
    epoch: usize,
    /// Whether undo has gone behind that since.
    crossed: bool,
    leftover: Option<Leftover>,
    /// A journal to go on with.
    resume: Option<(Journal, String)>,
    /// A journal that could not be read and must not be touched; why.
    blocked: Option<String>,
    pub(super) disk: Disk,
}

impl Default for Safety {
    fn default() -> Safety {
        Safety {
            outbox: Vec::new(),
            issued: 0,
            safe: 0,
            failed: None,
            waiting: VecDeque::new(),
            epoch: 0,
            crossed: false,
            leftover: None,
            resume: None,
            blocked: None,
            disk: Disk::Same,
        }
    }
}

/// A line about this user, host and process, for those who find the lock taken.
pub fn whoami() -> String {
    let user = std::env::var("USER")
        .or_else(|_| std::env::var("LOGNAME"))
        .unwrap_or_else(|_| "someone".into());
    let host = std::fs::read_to_string("/etc/hostname").unwrap_or_default();
    let since = chrono::Utc::now().format("%Y-%m-%d %H:%M UTC");
    format!(
        "{user} on {} (process {}) since {since}",
        host.trim(),
        std::process::id()
    )
}

/// How many edits a list of records comes to.
fn net(records: &[Record]) -> usize {
    let mut count = 0usize;
    for record in records {
        match record {
            Record::Step(_) | Record::Redo | Record::Text(_) => count += 1,
            Record::Undo => count = count.saturating_sub(1),
            Record::Saved(_) => {}
        }
    }
    // Done and taken back is still something that was done.
    count.max(usize::from(
        records
            .iter()
            .any(|record| !matches!(record, Record::Saved(_))),
    ))
}

/// The first name of the form `NAME.journal.kept-N` that is free.
fn kept_path(files: &dyn Files, timetable: &Path) -> PathBuf {
    let name = |number: u32| timetable.with_extension(format!("journal.kept-{number}"));
    (1..)
        .map(name)
        .find(|path| !files.exists(path))
        .unwrap_or_else(|| name(0))
}

impl Desk {
    /// Opens a file to edit it: asks for the lock, and looks for edits that were not saved.
    /// Also says in words what was found.
    ///
    /// # Errors
    /// [`Trouble`], with every mistake in the file.
    pub fn open_to_edit(
        path: &Path,
        who: &str,
        files: Arc<dyn Files>,
    ) -> Result<(Desk, Vec<String>), Trouble> {
        let access = match lock(path, who) {
            Ok(Locking::Ours(lock)) => Access::Ours(lock),
            Ok(Locking::Theirs(who)) => Access::Theirs(who),
            Err(error) => Access::Nowhere(error.to_string()),
        };
        let mut desk = Desk::open_through(path, files)?;
        desk.access = access;
        let mut notes = Vec::new();
        match &desk.access {
            Access::Theirs(_) => return Ok((desk, notes)),
            Access::Ours(_) => {
                store::remove_leftovers(path);
                store::remove_leftovers(&document::plan_path(path));
            }
            Access::Nowhere(error) => desk.safety.failed = Some(error.clone()),
            Access::Unasked => {}
        }
        desk.find_leftover(&mut notes);
        Ok((desk, notes))
    }

    fn find_leftover(&mut self, notes: &mut Vec<String>) {
        let path = journal_path(&self.path);
        if !self.files.exists(&path) {
            return;
        }
        let bytes = match self.files.read(&path, journal::MOST_BYTES) {
            Ok(bytes) => bytes,
            Err(error) => {
                // Not read, so not ours to write over or to remove.
                match self.set_aside() {
                    Ok(name) => notes.push(format!(
                        "an earlier journal cannot be read ({error}); it is kept in {name}"
                    )),
                    Err(_) => {
                        let why = format!("an earlier journal cannot be read ({error})");
                        self.safety.failed = Some(why.clone());
                        self.safety.blocked = Some(why);
                    }
                }
                return;
            }
        };
        let Some(journal) = Journal::read(&bytes) else {
            return self.keep_apart("a journal that cannot be read", notes);
        };
        let (since, foreign) = match journal.since(&self.on_disk) {
            Some(since) => (since, false),
            None => (journal.unsaved(), true),
        };
        let edits = net(since);
        match (edits, journal.rest.is_empty()) {
            (0, true) if !foreign => _ = self.files.remove(&path),
            (0, _) => self.keep_apart("a journal of which no edit can be taken in", notes),
            _ => {
                let text = String::from_utf8_lossy(&bytes).into_owned();
                self.safety.leftover = Some(Leftover {
                    edits,
                    foreign,
                    journal,
                    text,
                });
            }
        }
    }

    fn keep_apart(&mut self, what: &str, notes: &mut Vec<String>) {
        match self.set_aside() {
            Ok(name) => notes.push(format!("{what} is kept in {name}")),
            Err(error) => {
                let why = format!("{what} is in the way and cannot be set aside ({error})");
                self.safety.failed = Some(why.clone());
                self.safety.blocked = Some(why);
            }
        }
    }

    fn set_aside(&self) -> std::io::Result<String> {
        let kept = kept_path(&*self.files, &self.path);
        self.files.rename(&journal_path(&self.path), &kept)?;
        Ok(clean(&kept.display().to_string()).into_owned())
    }

    /// Who may write.
    pub fn access(&self) -> &Access {
        &self.access
    }

    /// Edits of an earlier session that wait for a decision.
    pub fn leftover(&self) -> Option<&Leftover> {
        self.safety.leftover.as_ref()
    }

    /// How many edits a journal beside the file has that are not in it; for commands that
    /// only mention them.
    pub fn peek_unsaved(&self) -> usize {
        let bytes = self
            .files
            .read(&journal_path(&self.path), journal::MOST_BYTES)
            .unwrap_or_default();
        Journal::read(&bytes).map_or(0, |journal| {
            net(journal.since(&self.on_disk).unwrap_or(journal.unsaved()))
        })
    }

    /// Takes in what a journal beside the file has that is not in it, touching nothing on the
    /// disk; says how many records, and how many there were.
    pub fn take_in_unsaved(&mut self) -> (usize, usize) {
        let bytes = self
            .files
            .read(&journal_path(&self.path), journal::MOST_BYTES)
            .unwrap_or_default();
        let Some(journal) = Journal::read(&bytes) else {
            return (0, 0);
        };
        let records = journal.since(&self.on_disk).unwrap_or(journal.unsaved());
        let taken = records
            .iter()
            .take_while(|record| self.replay(record).is_ok())
            .count();
        (taken, records.len() + usize::from(!journal.rest.is_empty()))
    }

    /// Takes in the edits of an earlier session; says how many, and the text of what could
    /// not be taken in. The journal goes on from there.
    pub fn take_in_leftover(&mut self) -> (usize, String) {
        let Some(leftover) = self.safety.leftover.take() else {
            return (0, String::new());
        };
        let records = match leftover.foreign {
            true => leftover.journal.unsaved(),
            false => leftover.journal.since(&self.on_disk).unwrap_or_default(),
        };
        let (mut taken, mut rest) = (Vec::new(), String::new());
        for (at, record) in records.iter().enumerate() {
            match self.replay(record) {
                Ok(()) => taken.push(record.clone()),
                // On another version one that does not fit says nothing about the next.
                Err(_) if leftover.foreign => rest.push_str(&format!("{record:?}\n")),
                Err(_) => {
                    records[at..]
                        .iter()
                        .for_each(|record| rest.push_str(&format!("{record:?}\n")));
                    break;
                }
            }
        }
        rest.push_str(&leftover.journal.rest);
        // What is replayed is in the journal already.
        self.forget_waiting();
        let edits = net(&taken);
        if rest.is_empty() && !leftover.foreign {
            self.safety.resume = Some((leftover.journal, leftover.text));
            return (edits, rest);
        }
        // The journal as it was is kept; what was taken in starts a new one.
        let kept = kept_path(&*self.files, &self.path);
        if let Err(error) = self.files.replace(&kept, leftover.text.as_bytes()) {
            let why = format!("the earlier journal cannot be kept ({error})");
            self.safety.failed = Some(why.clone());
            self.safety.blocked = Some(why);
            return (edits, rest);
        }
        let _ = self.files.remove(&journal_path(&self.path));
        self.safety.issued = taken.len() as u64;
        self.safety.outbox = taken;
        (edits, rest)
    }

    fn forget_waiting(&mut self) {
        self.safety.outbox.clear();
        self.safety.waiting.clear();
        (self.safety.issued, self.safety.safe) = (0, 0);
    }

    /// The edits of an earlier session have been taken in and saved otherwise.
    pub fn forget_leftover(&mut self) {
        self.safety.leftover = None;
    }

    /// Leaves the edits of an earlier session alone, in a file of their own; says which.
    ///
    /// # Errors
    /// Whatever the system says.
    pub fn set_leftover_aside(&mut self) -> std::io::Result<String> {
        let name = self.set_aside()?;
        self.safety.leftover = None;
        Ok(name)
    }

    fn replay(&mut self, record: &Record) -> Result<(), String> {
        let said = |error: &dyn std::fmt::Display| error.to_string();
        match record {
            Record::Step(lines) => {
                let mut edits = Vec::new();
                for line in lines {
                    edits.push(
                        self.parse(line, crate::clock::Instant(0))
                            .map_err(|e| said(&e))?,
                    );
                }
                self.make(edits).map_err(|e| said(&e))
            }
            Record::Undo => self.undo().map_err(|e| said(&e)),
            Record::Redo => self.redo().map_err(|e| said(&e)),
            Record::Saved(_) => Ok(()),
            Record::Text(places) => self.replace_text(places),
        }
    }

    /// Replaces bytes of the text and reads it anew, as one step.
    fn replace_text(&mut self, places: &[(usize, usize, String)]) -> Result<(), String> {
        let mut text = self.document.text().to_string();
        for (at, length, new) in places {
            let end = at
                .checked_add(*length)
                .filter(|end| text.get(*at..*end).is_some());
            text.replace_range(*at..end.ok_or("bytes that are not there")?, new);
        }
        let mark = if self.document.bytes().starts_with("\u{FEFF}".as_bytes()) {
            "\u{FEFF}"
        } else {
            ""
        };
        let read =
            document::read("", format!("{mark}{text}").as_bytes()).map_err(|e| e.to_string())?;
        let before = std::mem::replace(&mut self.timetable, read.timetable);
        let earlier = std::mem::replace(&mut self.document, read.document);
        self.history.push(Step {
            edits: Vec::new(),
            before,
            after: self.timetable.clone(),
            text: TextChange::Whole(Box::new((earlier, self.document.clone()))),
            reference: self.reference.clone(),
        });
        self.generation += 1;
        Ok(())
    }

    /// Notes what a step was, for the journal.
    pub(super) fn note_step(&mut self, edits: &[Edit]) {
        let zone = self.timetable.settings.zone;
        let lines = edits.iter().map(|edit| edit::print(edit, zone)).collect();
        let concerned = edits
            .iter()
            .filter_map(|edit| edit.what.subject().cloned())
            .collect();
        self.safety.epoch = self
            .safety
            .epoch
            .min(self.history.position().saturating_sub(1));
        self.note(Record::Step(lines), concerned);
    }

    /// Notes that the step at a position of the history was taken back or done again.
    pub(super) fn note_walk(&mut self, position: usize, back: bool) {
        let behind = position < self.safety.epoch;
        self.safety.crossed |= behind;
        let step = self.history.at(position);
        let concerned: Vec<Arc<str>> = step
            .map(|step| {
                step.edits
                    .iter()
                    .filter_map(|edit| edit.what.subject().cloned())
                    .collect()
            })
            .unwrap_or_default();
        let record = match (self.safety.crossed, back, step.map(|step| &step.text)) {
            (false, true, _) => Record::Undo,
            (false, false, _) => Record::Redo,
            (true, true, Some(TextChange::Patches(patches))) => Record::Text(
                patches
                    .iter()
                    .rev()
                    .map(|patch| patch.inverse().plain())
                    .collect(),
            ),
            (true, false, Some(TextChange::Patches(patches))) => {
                Record::Text(patches.iter().map(document::Patch::plain).collect())
            }
            (true, _, Some(TextChange::Whole(texts))) => {
                let (old, new) = if back {
                    (&texts.1, &texts.0)
                } else {
                    (&texts.0, &texts.1)
                };
                Record::Text(vec![(0, old.text().len(), new.text().into())])
            }
            (true, _, None) => return,
        };
        self.note(record, concerned);
    }

    fn note(&mut self, record: Record, concerned: Vec<Arc<str>>) {
        if matches!(self.access, Access::Unasked) {
            return;
        }
        self.safety.issued += 1;
        self.safety
            .waiting
            .push_back((self.safety.issued, concerned));
        self.safety.outbox.push(record);
    }

    /// What is still to be written into the journal.
    pub fn take_records(&mut self) -> Vec<Record> {
        std::mem::take(&mut self.safety.outbox)
    }

    /// Takes in what the scribe says.
    pub fn written(&mut self, written: &Written) {
        match written {
            Written::Safe(count) => {
                self.safety.safe = self.safety.safe.max(*count);
                self.safety.failed = None;
                while self
                    .safety
                    .waiting
                    .front()
                    .is_some_and(|(at, _)| at <= count)
                {
                    self.safety.waiting.pop_front();
                }
            }
            Written::Failed(why) => self.safety.failed = Some(clean(why).into_owned()),
        }
    }

    /// Why edits are not safe at present, when the disk refuses them.
    pub fn unsafe_because(&self) -> Option<&str> {
        self.safety.failed.as_deref()
    }

    /// Whether anything is not known to be safe yet.
    pub fn is_safe(&self) -> bool {
        self.safety.waiting.is_empty()
    }

    /// Requests with edits that are not known to be safe yet.
    pub fn not_yet_safe(&self) -> FastSet<&str> {
        self.safety
            .waiting
            .iter()
            .flat_map(|(_, ids)| ids.iter().map(|id| &**id))
            .collect()
    }

    /// The journal's writer for this desk.
    pub fn journal_writer(&mut self) -> Writer {
        let path = journal_path(&self.path);
        let files = Arc::clone(&self.files);
        if let Some(why) = &self.safety.blocked {
            return Writer::blocked(files, path, why.clone());
        }
        match self.safety.resume.take() {
            Some((journal, text)) => Writer::resume(files, path, &journal, &text),
            None => Writer::new(files, path, self.on_disk.clone()),
        }
    }

    /// A save has happened: what undo and redo may refer to begins anew.
    pub(super) fn new_epoch(&mut self) {
        self.safety.epoch = self.history.len();
        self.safety.crossed = false;
        // What was waiting is in the file now.
        self.safety.waiting.clear();
        self.safety.disk = Disk::Same;
    }

    /// Removes the journal: everything in it is saved, or was given up on purpose.
    pub fn close_journal(&self) {
        if matches!(self.access, Access::Ours(_) | Access::Nowhere(_))
            && self.safety.leftover.is_none()
            && self.safety.blocked.is_none()
        {
            let _ = self.files.remove(&journal_path(&self.path));
        }
    }

    /// The file as it is on the disk, as last looked at.
    pub fn disk(&self) -> Disk {
        self.safety.disk
    }

    /// Looks at the file again; says whether anything is new.
    pub fn look_at_disk(&mut self) -> bool {
        let now = match self.files.read(&self.path, document::MOST_BYTES) {
            Ok(bytes) if document::hash(&bytes) == self.on_disk => Disk::Same,
            Ok(_) => Disk::Changed,
            Err(_) => Disk::Gone,
        };
        std::mem::replace(&mut self.safety.disk, now) != now
    }

    /// A desk that only reads takes over the file as it was saved by the one that writes.
    ///
    /// # Errors
    /// [`Trouble`] when it cannot be read at the moment.
    pub fn follow_disk(&mut self) -> Result<(), Trouble> {
        let fresh = Desk::open_through(&self.path, Arc::clone(&self.files))?;
        self.adopt(fresh);
        self.opened = self.timetable.clone();
        Ok(())
    }

    fn adopt(&mut self, fresh: Desk) {
        let generation = self.generation + 1;
        self.document = fresh.document;
        self.timetable = fresh.timetable;
        self.saved_text = fresh.saved_text;
        self.on_disk = fresh.on_disk;
        self.begun = fresh.begun;
        self.issued = fresh.issued;
        self.issued_plan = fresh.issued_plan;
        self.warnings = fresh.warnings;
        self.generation = generation;
        self.history = super::history::History::default();
        self.forget_waiting();
        self.new_epoch();
    }

    /// Looks whether the lock is still what it was: taken anew when it has vanished, given up
    /// when another has it now, and taken over by a reader when the writer has gone. Says in
    /// words what is new.
    pub fn look_at_lock(&mut self) -> Option<String> {
        let reading = match &self.access {
            Access::Ours(lock) if lock.is_held() => return None,
            Access::Ours(_) => false,
            Access::Theirs(_) => true,
            Access::Unasked | Access::Nowhere(_) => return None,
        };
        let locking = lock(&self.path, &whoami()).ok()?;
        match (locking, reading) {
            (Locking::Ours(lock), false) => {
                self.access = Access::Ours(lock);
                None
            }
            (Locking::Ours(lock), true) if !self.files.exists(&journal_path(&self.path)) => {
                self.access = Access::Ours(lock);
                Some("the other desk has gone; this one may write now".into())
            }
            (Locking::Ours(_), true) => Some(
                "the other desk has gone and left edits; leave and open again to take them in"
                    .into(),
            ),
            (Locking::Theirs(who), false) => {
                let said = format!(
                    "the lock was taken by {who}; this desk only reads now; keep yours with :save OTHER.toml"
                );
                self.access = Access::Theirs(who);
                Some(said)
            }
            (Locking::Theirs(_), true) => None,
        }
    }

    /// The file was changed underneath: theirs is taken over, ours is kept as a file of its
    /// own; or, with `both`, ours is made once more on theirs. Says in words what came of it.
    ///
    /// # Errors
    /// [`Trouble`] when theirs cannot be read, or ours not kept.
    pub fn take_theirs(&mut self, both: bool) -> Result<String, Trouble> {
        let lines: Vec<Vec<String>> = self.unsaved_steps();
        let plain = self.history.is_plain();
        let ours = self.document.bytes();
        let any = self.document.text() != self.saved_text;
        let fresh = Desk::open_through(&self.path, Arc::clone(&self.files))?;
        let name = |number: u32| self.path.with_extension(format!("mine-{number}.toml"));
        let kept = (1..)
            .map(name)
            .find(|path| !self.files.exists(path))
            .unwrap_or_else(|| name(0));
        if any {
            // Whatever comes of it, our version is there as a whole.
            self.files
                .replace(&kept, &ours)
                .map_err(|error| Trouble::io(&kept, error))?;
        }
        let _ = self.files.remove(&journal_path(&self.path));
        self.adopt(fresh);
        let shown = clean(&kept.display().to_string()).into_owned();
        match (any, both) {
            (false, _) => return Ok("their version taken over".into()),
            (true, false) => {
                return Ok(format!(
                    "their version taken over; yours is kept in {shown}"
                ));
            }
            (true, true) if !plain => {
                return Ok(format!(
                    "their version; yours cannot be put on top of it and is kept in {shown}"
                ));
            }
            (true, true) => {}
        }
        let count = lines.len();
        let refused = lines
            .into_iter()
            .filter(|step| self.replay(&Record::Step(step.clone())).is_err())
            .count();
        if refused > 0 {
            let does = if refused == 1 { "does" } else { "do" };
            return Ok(format!(
                "their version with yours on top, but {} {does} not fit; yours is kept in {shown}",
                count_words(refused, "edit")
            ));
        }
        let _ = self.files.remove(&kept);
        Ok(format!(
            "their version, with your {} on top",
            count_words(count, "edit")
        ))
    }

    /// The file was changed underneath: ours replaces it, theirs is kept beside it. Says
    /// where; saving then goes on as usual.
    ///
    /// # Errors
    /// [`Trouble`] when theirs cannot be kept.
    pub fn keep_mine(&mut self) -> Result<String, Trouble> {
        let bytes = match self.files.read(&self.path, document::MOST_BYTES) {
            Ok(bytes) => bytes,
            Err(_) => {
                // Gone: there is nothing of theirs to keep.
                self.safety.disk = Disk::Same;
                return Ok("the file was gone and is written anew".into());
            }
        };
        let name = |number: u32| self.path.with_extension(format!("theirs-{number}.toml"));
        let kept = (1..)
            .map(name)
            .find(|path| !self.files.exists(path))
            .unwrap_or_else(|| name(0));
        self.files
            .replace(&kept, &bytes)
            .map_err(|error| Trouble::io(&kept, error))?;
        self.on_disk = document::hash(&bytes);
        Ok(format!(
            "theirs is kept in {}",
            clean(&kept.display().to_string())
        ))
    }
}
