//! No edit is lost: disks that fail, programs that are killed, two people at once.

use crate::terminal::{Terminal, XTERM};
use crate::tools::{err, fewest, folder_with};
use fewest::clock::Instant;
use fewest::desk::{Access, Desk, Disk};
use fewest::document;
use fewest::store::journal::{Journal, Record, Writer, journal_path};
use fewest::store::{Files, Out};
use std::collections::BTreeMap;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex};

const NOW: Instant = Instant(1_799_000_000);

const TIMETABLE: &str = "# a comment\n[timetable]\ntitle = \"Safe\"\n[[resource]]\nid = \"north\"\n[[resource]]\nid = \"south\"\n[[request]]\nid = \"a\"\nstart = 2027-01-11T09:00:00\nlength = \"1h\" # an hour\n[[request]]\nid = \"b\"\nstart = 2027-01-11T09:30:00\nend = 2027-01-11T10:30:00\n";

/// What goes wrong.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Fault {
    /// The disk is full: nothing of the call is done.
    Full,
    /// A write stops half way through.
    Short,
    /// The device fails: a sync reports it.
    Device,
    /// The power goes: this and every later call fails, and what was not synced is forgotten.
    Power,
}

#[derive(Clone, Debug, Default)]
struct File {
    /// What is on the disk for certain.
    kept: Vec<u8>,
    /// What is there as long as the power is.
    now: Vec<u8>,
}

#[derive(Debug, Default)]
struct Inside {
    files: BTreeMap<PathBuf, File>,
    calls: usize,
    fault: Option<(usize, Fault)>,
    off: bool,
    /// A file that may be neither read nor renamed.
    locked_up: Option<PathBuf>,
}

/// Files in memory that count calls and fail at one of them.
#[derive(Clone, Debug, Default)]
struct Faulty(Arc<Mutex<Inside>>);

impl Faulty {
    fn with(path: &Path, bytes: &[u8]) -> Faulty {
        let faulty = Faulty::default();
        let file = File {
            kept: bytes.to_vec(),
            now: bytes.to_vec(),
        };
        faulty.0.lock().unwrap().files.insert(path.into(), file);
        faulty
    }

    fn failing(&self, at: usize, fault: Fault) {
        let mut inside = self.0.lock().unwrap();
        inside.fault = Some((inside.calls + at, fault));
    }

    fn calls(&self) -> usize {
        self.0.lock().unwrap().calls
    }

    /// What the next start finds: after a power cut only what was synced, and of the rest the
    /// first half, as it may happen.
    fn after_the_end(&self, power_cut: bool) -> Faulty {
        let inside = self.0.lock().unwrap();
        let files = inside.files.iter().map(|(path, file)| {
            let now = if power_cut && file.now.starts_with(&file.kept) {
                let torn = file.kept.len() + (file.now.len() - file.kept.len()) / 2;
                file.now[..torn].to_vec()
            } else if power_cut {
                file.kept.clone()
            } else {
                file.now.clone()
            };
            (
                path.clone(),
                File {
                    kept: now.clone(),
                    now,
                },
            )
        });
        Faulty(Arc::new(Mutex::new(Inside {
            files: files.collect(),
            ..Inside::default()
        })))
    }

    /// Counts a call; says what goes wrong with it.
    fn call(&self) -> io::Result<Option<Fault>> {
        let mut inside = self.0.lock().unwrap();
        inside.calls += 1;
        let hit = inside
            .fault
            .filter(|(at, _)| *at == inside.calls)
            .map(|(_, fault)| fault);
        if hit == Some(Fault::Power) {
            inside.off = true;
        }
        if inside.off {
            return Err(io::Error::other("the power is gone"));
        }
        match hit {
            Some(Fault::Full) => Err(io::Error::from_raw_os_error(28)),
            hit => Ok(hit),
        }
    }
}

struct FaultyOut(Faulty, PathBuf);

impl Out for FaultyOut {
    fn write(&mut self, bytes: &[u8]) -> io::Result<()> {
        let fault = self.0.call()?;
        let mut inside = self.0.0.lock().unwrap();
        let file = inside
            .files
            .get_mut(&self.1)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        let count = if fault.is_some() {
            bytes.len() / 2
        } else {
            bytes.len()
        };
        file.now.extend(&bytes[..count]);
        if fault.is_some() {
            Err(io::Error::from_raw_os_error(28))
        } else {
            Ok(())
        }
    }

    fn sync(&mut self) -> io::Result<()> {
        if self.0.call()?.is_some() {
            return Err(io::Error::from_raw_os_error(5));
        }
        let mut inside = self.0.0.lock().unwrap();
        let file = inside
            .files
            .get_mut(&self.1)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        file.kept.clone_from(&file.now);
        Ok(())
    }

    fn cut(&mut self, length: u64) -> io::Result<()> {
        if self.0.call()?.is_some() {
            return Err(io::Error::from_raw_os_error(5));
        }
        let mut inside = self.0.0.lock().unwrap();
        let file = inside
            .files
            .get_mut(&self.1)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        file.now.truncate(length as usize);
        Ok(())
    }
}

impl Files for Faulty {
    fn read(&self, path: &Path, _most: u64) -> io::Result<Vec<u8>> {
        let inside = self.0.lock().unwrap();
        if inside.locked_up.as_deref() == Some(path) {
            return Err(io::Error::from(io::ErrorKind::PermissionDenied));
        }
        let file = inside
            .files
            .get(path)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        Ok(file.now.clone())
    }

    fn append(&self, path: &Path) -> io::Result<Box<dyn Out>> {
        if self.call()?.is_some() {
            return Err(io::Error::from_raw_os_error(5));
        }
        self.0.lock().unwrap().files.entry(path.into()).or_default();
        Ok(Box::new(FaultyOut(self.clone(), path.into())))
    }

    fn replace(&self, path: &Path, bytes: &[u8]) -> io::Result<()> {
        // Write, sync and rename of a temporary file are three calls; only after the last is
        // the new file there, and then it is there for good.
        for _ in 0..3 {
            if self.call()?.is_some() {
                return Err(io::Error::from_raw_os_error(28));
            }
        }
        let file = File {
            kept: bytes.to_vec(),
            now: bytes.to_vec(),
        };
        self.0.lock().unwrap().files.insert(path.into(), file);
        Ok(())
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        if self.call()?.is_some() {
            return Err(io::Error::from_raw_os_error(5));
        }
        let mut inside = self.0.lock().unwrap();
        if inside.locked_up.as_deref() == Some(from) {
            return Err(io::Error::from(io::ErrorKind::PermissionDenied));
        }
        let file = inside
            .files
            .remove(from)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        inside.files.insert(to.into(), file);
        Ok(())
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        if self.call()?.is_some() {
            return Err(io::Error::from_raw_os_error(5));
        }
        self.0.lock().unwrap().files.remove(path);
        Ok(())
    }

    fn exists(&self, path: &Path) -> bool {
        self.0.lock().unwrap().files.contains_key(path)
    }

    fn length(&self, path: &Path) -> io::Result<u64> {
        let inside = self.0.lock().unwrap();
        let file = inside
            .files
            .get(path)
            .ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))?;
        Ok(file.now.len() as u64)
    }
}

/// A session as the screen runs it, without the threads: every edit goes into the journal,
/// and is safe when that says so.
struct Session {
    desk: Desk,
    writer: Writer,
    /// The text after every edit that was shown as safe.
    safe: Vec<String>,
    /// What should be there now.
    now: String,
}

impl Session {
    fn open(path: &Path, files: &Faulty) -> Session {
        let (mut desk, _) = Desk::open_to_edit(path, "test", Arc::new(files.clone())).unwrap();
        if desk.leftover().is_some() {
            desk.take_in_leftover();
        }
        let mut writer = desk.journal_writer();
        for record in desk.take_records() {
            let _ = writer.add(&record);
        }
        let now = desk.document().text().to_string();
        Session {
            desk,
            writer,
            safe: vec![now.clone()],
            now,
        }
    }

    fn edit(&mut self, line: &str) {
        let edit = self
            .desk
            .parse(line, NOW)
            .unwrap_or_else(|misread| panic!("{line}: {misread}"));
        if self.desk.make(vec![edit]).is_err() {
            return;
        }
        self.now = self.desk.document().text().to_string();
        let mut safe = true;
        for record in self.desk.take_records() {
            safe &= self.writer.add(&record).is_ok();
        }
        if safe {
            self.safe.push(self.now.clone());
        }
    }

    fn save(&mut self) -> bool {
        let writer = &mut self.writer;
        self.desk
            .save(None, NOW, &mut |record| _ = writer.add(&record))
            .is_ok()
    }
}

const SCRIPT: [&str; 13] = [
    "move a to 2027-01-11 10:00",
    "pin b on south",
    "undo",
    "redo",
    "SAVE",
    "fasten a because \"agreed\"",
    "undo",
    "undo",
    "undo",
    "redo",
    "add c from 2027-01-12 09:00 to 10:00 size 4",
    "SAVE",
    "close north from 2027-01-11 08:00 to 2027-01-11 09:00",
];

fn run(session: &mut Session) {
    for line in SCRIPT {
        if line == "SAVE" {
            _ = session.save()
        } else {
            session.edit(line)
        }
    }
}

/// For every call of a scripted session and every fault: whatever was shown as safe is there
/// on reopening, and nothing is damaged.
#[test]
fn no_fault_of_the_disk_loses_what_was_shown_as_safe() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let calls = {
        let files = Faulty::with(&path, TIMETABLE.as_bytes());
        let mut session = Session::open(&path, &files);
        run(&mut session);
        assert_eq!(session.safe.last(), Some(&session.now));
        files.calls()
    };
    let mut injected = 0;
    for at in 1..=calls {
        for fault in [Fault::Full, Fault::Short, Fault::Device, Fault::Power] {
            let files = Faulty::with(&path, TIMETABLE.as_bytes());
            let (safe, now) = {
                let mut session = Session::open(&path, &files);
                files.failing(at, fault);
                run(&mut session);
                (session.safe.clone(), session.now.clone())
            };
            injected += 1;
            for power_cut in [true, fault == Fault::Power] {
                let files = files.after_the_end(power_cut);
                let again = Session::open(&path, &files);
                let found = again.desk.document().text();
                let last = safe.last().unwrap();
                // What was shown as safe, or something later that happened to be written.
                assert!(
                    found == last || found == now || later(&found, &safe, &path),
                    "fault {fault:?} at call {at}, power cut {power_cut}:\nfound {found}\nsafe {last}"
                );
                document::read("again", found.as_bytes()).unwrap();
            }
        }
    }
    eprintln!("{injected} faults injected over {calls} calls");
    assert!(injected > 100);
}

/// Whether a text is a state of the script at or after the last safe one.
fn later(found: &&str, safe: &[String], path: &Path) -> bool {
    let files = Faulty::with(path, TIMETABLE.as_bytes());
    let mut session = Session::open(path, &files);
    let mut states = vec![session.now.clone()];
    for line in SCRIPT {
        if line == "SAVE" {
            _ = session.save()
        } else {
            session.edit(line)
        }
        states.push(session.now.clone());
    }
    let last = states
        .iter()
        .rposition(|state| Some(state) == safe.last())
        .unwrap_or(0);
    let first = states
        .iter()
        .position(|state| Some(state) == safe.last())
        .unwrap_or(0);
    states[first.min(last)..]
        .iter()
        .any(|state| state == *found)
}

/// A journal cut at every byte, or with any bit flipped, never refuses to open and never
/// gives an edit that was not made.
#[test]
fn broken_journals_never_give_a_wrong_edit() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    let mut states = vec![TIMETABLE.to_string()];
    {
        let mut session = Session::open(&path, &files);
        for line in SCRIPT.iter().filter(|line| **line != "SAVE") {
            session.edit(line);
            states.push(session.now.clone());
        }
    }
    let bytes = files.read(&journal_path(&path), u64::MAX).unwrap();
    let check = |bytes: Vec<u8>, what: String| {
        let files = Faulty::with(&path, TIMETABLE.as_bytes());
        files.0.lock().unwrap().files.insert(
            journal_path(&path),
            File {
                kept: bytes.clone(),
                now: bytes,
            },
        );
        let session = Session::open(&path, &files);
        assert!(
            states
                .iter()
                .any(|state| state == session.desk.document().text()),
            "{what}"
        );
    };
    for cut in 0..=bytes.len() {
        check(bytes[..cut].to_vec(), format!("cut at {cut}"));
    }
    for bit in 0..bytes.len() * 8 {
        let mut flipped = bytes.clone();
        flipped[bit / 8] ^= 1 << (bit % 8);
        check(flipped, format!("bit {bit} flipped"));
    }
    eprintln!("{} truncations, {} flips", bytes.len() + 1, bytes.len() * 8);
}

#[test]
fn replaying_gives_the_desk_as_it_was() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let files = Faulty::with(&path, &std::fs::read(&path).unwrap());
    let mut session = Session::open(&path, &files);
    let ids: Vec<_> = session
        .desk
        .timetable()
        .requests
        .iter()
        .map(|request| request.id.clone())
        .collect();
    let mut numbers: u64 = 11;
    for _ in 0..400 {
        numbers = numbers
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        let (what, id) = (
            (numbers >> 33) % 9,
            &ids[(numbers >> 40) as usize % ids.len()],
        );
        if session.desk.timetable().request(id).is_none() {
            continue;
        }
        match what {
            0 => session.edit(&format!("move {id} by +5m")),
            1 => session.edit(&format!("pin {id} on main-hall")),
            2 => session.edit(&format!("withdraw {id}")),
            3 => session.edit(&format!("set {id} size 7")),
            4 => session.edit("undo"),
            5 => session.edit("redo"),
            6 => session.edit(&format!("drop {id}")),
            7 => session.edit(&format!("fasten {id} because \"said so\"")),
            _ => assert!(session.save()),
        }
    }
    let (text, timetable) = (session.now.clone(), session.desk.timetable().clone());
    drop(session);
    let again = Session::open(&path, &files.after_the_end(true));
    assert_eq!(again.desk.document().text(), text);
    assert!(*again.desk.timetable() == timetable);
}

#[test]
fn a_journal_of_another_version_is_offered_on_this_one() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    {
        let mut session = Session::open(&path, &files);
        session.edit("fasten a");
        session.edit("pin b on south");
    }
    let theirs = TIMETABLE.replace("id = \"a\"", "id = \"aa\"");
    files.replace(&path, theirs.as_bytes()).unwrap();
    let (mut desk, _) = Desk::open_to_edit(&path, "test", Arc::new(files.clone())).unwrap();
    let leftover = desk.leftover().unwrap();
    assert!(leftover.foreign && leftover.edits == 2);
    let (taken, rest) = desk.take_in_leftover();
    assert_eq!(taken, 1, "the one that fits");
    assert!(rest.contains("fasten a"), "{rest}");
    assert!(desk.document().text().contains("pin = \"south\""));
    // The journal as it was is kept, and a new one starts with what was taken in.
    let kept = files
        .read(&path.with_extension("journal.kept-1"), u64::MAX)
        .unwrap();
    assert_eq!(Journal::read(&kept).unwrap().records.len(), 2);
    let mut writer = desk.journal_writer();
    for record in desk.take_records() {
        writer.add(&record).unwrap();
    }
    let text = desk.document().text().to_string();
    drop(desk);
    assert_eq!(Session::open(&path, &files).now, text);
}

/// What was taken back before a save and done again after it, what was taken back from behind
/// a save, and edits on top of either: reopening gives what was on the screen.
#[test]
fn undo_and_redo_around_saves_are_replayed() {
    for script in [
        &["withdraw b", "undo", "SAVE", "redo", "fasten a"][..],
        &["withdraw b", "undo", "SAVE", "redo"],
        &["withdraw b", "SAVE", "undo"],
        &[
            "withdraw b",
            "fasten a",
            "SAVE",
            "undo",
            "undo",
            "redo",
            "pin a on north",
        ],
        &[
            "withdraw b",
            "fasten a",
            "undo",
            "SAVE",
            "undo",
            "redo",
            "redo",
            "undo",
        ],
        &[
            "fasten a",
            "SAVE",
            "undo",
            "pin a on north",
            "undo",
            "redo",
            "SAVE",
            "undo",
        ],
        &[
            "fasten a",
            "undo",
            "withdraw b",
            "SAVE",
            "undo",
            "SAVE",
            "redo",
            "undo",
        ],
    ] {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("safe.toml");
        let files = Faulty::with(&path, TIMETABLE.as_bytes());
        let now = {
            let mut session = Session::open(&path, &files);
            for line in script {
                if *line == "SAVE" {
                    assert!(session.save())
                } else {
                    session.edit(line)
                }
            }
            session.desk.document().text().to_string()
        };
        let again = Session::open(&path, &files.after_the_end(true));
        assert_eq!(again.desk.document().text(), now, "{script:?}");
    }
}

#[test]
fn a_journal_that_cannot_be_read_is_never_touched() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    Session::open(&path, &files).edit("fasten a");
    let journal = files.read(&journal_path(&path), u64::MAX).unwrap();
    files.0.lock().unwrap().locked_up = Some(journal_path(&path));
    {
        let mut session = Session::open(&path, &files);
        session.edit("withdraw b");
        assert_eq!(session.safe.len(), 1, "nothing is shown as safe");
        assert!(
            session
                .desk
                .unsafe_because()
                .unwrap()
                .contains("cannot be read")
        );
        session.desk.close_journal();
    }
    files.0.lock().unwrap().locked_up = None;
    assert_eq!(files.read(&journal_path(&path), u64::MAX).unwrap(), journal);
}

#[test]
fn a_journal_that_is_overwritten_or_removed_is_written_anew() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    let mut session = Session::open(&path, &files);
    session.edit("fasten a");
    let nonsense = File {
        kept: b"nonsense\n".to_vec(),
        now: b"nonsense\n".to_vec(),
    };
    files
        .0
        .lock()
        .unwrap()
        .files
        .insert(journal_path(&path), nonsense);
    session.edit("withdraw b");
    files.remove(&journal_path(&path)).unwrap();
    session.edit("pin a on north");
    let now = session.now.clone();
    assert_eq!(session.safe.last(), Some(&now));
    drop(session);
    assert_eq!(Session::open(&path, &files.after_the_end(true)).now, now);
}

/// A desk that only reads, or whose journal is not its own, writes over nobody's journal and
/// nobody's file, whatever it is told.
#[test]
fn a_reader_overwrites_neither_file_nor_journal() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    std::fs::write(&path, TIMETABLE).unwrap();
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    let mut session = Session::open(&path, &files);
    session.edit("fasten a");
    let journal = files.read(&journal_path(&path), u64::MAX).unwrap();
    let (mut reader, _) = Desk::open_to_edit(&path, "reader", Arc::new(files.clone())).unwrap();
    assert!(matches!(reader.access(), Access::Theirs(_)));
    let mut announced = 0;
    for other in [None, Some(path.as_path())] {
        let said = reader
            .save(other, NOW, &mut |_| announced += 1)
            .unwrap_err()
            .to_string();
        assert!(said.contains("read only"), "{said}");
    }
    // A writer that began nothing there leaves what it finds.
    let mut writer = reader.journal_writer();
    for _ in 0..2 {
        assert!(writer.add(&Record::Step(vec!["fasten b".into()])).is_err());
        assert_eq!(files.read(&journal_path(&path), u64::MAX).unwrap(), journal);
    }
    let other = folder.path().join("other.toml");
    reader
        .save(Some(&other), NOW, &mut |_| announced += 1)
        .unwrap();
    assert_eq!(announced, 0);
    assert_eq!(files.read(&journal_path(&path), u64::MAX).unwrap(), journal);
    assert_eq!(files.read(&path, u64::MAX).unwrap(), TIMETABLE.as_bytes());
}

/// Their version is nonsense: taking it fails, and ours goes on with its journal whole.
#[test]
fn a_version_that_cannot_be_taken_costs_no_edit() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let mut terminal = Terminal::open(&[path.to_str().unwrap()], (80, 24), &XTERM);
    terminal.wait_for("proved");
    terminal.press(":fasten eels\r");
    terminal.wait_for("1 edit not saved");
    std::fs::write(&path, "nonsense\n").unwrap();
    terminal.press("s");
    terminal.wait_for("m mine, t theirs, b both");
    terminal.press("b");
    terminal.wait_for("this is not TOML");
    terminal.press(":fasten mud\r");
    terminal.wait_for("2 edits");
    terminal.signal("-TERM");
    assert_eq!(terminal.end(), 143);
    let journal = Journal::read(&std::fs::read(journal_path(&path)).unwrap()).unwrap();
    let made = ["fasten eels", "fasten mud"].map(|line| Record::Step(vec![line.into()]));
    assert_eq!(journal.records, made);
}

#[test]
fn a_lock_that_vanishes_is_taken_again_and_one_that_is_left_is_taken_over() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    let open = || {
        Desk::open_to_edit(&path, "test", Arc::new(files.clone()))
            .unwrap()
            .0
    };
    let mut one = open();
    std::fs::remove_file(fewest::store::lock_path(&path)).unwrap();
    assert_eq!(one.look_at_lock(), None);
    let mut other = open();
    assert!(
        matches!(other.access(), Access::Theirs(_)),
        "it was taken again"
    );
    assert_eq!(other.look_at_lock(), None);
    drop(one);
    assert!(other.look_at_lock().unwrap().contains("may write now"));
    assert!(matches!(other.access(), Access::Ours(_)));
    // Removed, and somebody else was quicker.
    std::fs::remove_file(fewest::store::lock_path(&path)).unwrap();
    let third = open();
    assert!(matches!(third.access(), Access::Ours(_)));
    assert!(other.look_at_lock().unwrap().contains("only reads now"));
    drop(other);
    assert!(
        fewest::store::lock_path(&path).exists(),
        "not the loser's to remove"
    );
}

#[test]
fn apply_beside_unsaved_edits_loses_neither() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let name = path.to_str().unwrap();
    let leave_unsaved = |line: &str| {
        let (mut desk, _) =
            Desk::open_to_edit(&path, "test", Arc::new(fewest::store::RealFiles)).unwrap();
        let mut writer = desk.journal_writer();
        let edit = desk.parse(line, NOW).unwrap();
        desk.make(vec![edit]).unwrap();
        for record in desk.take_records() {
            writer.add(&record).unwrap();
        }
    };
    let script = folder.path().join("script");
    std::fs::write(&script, "fasten eels\n").unwrap();
    leave_unsaved("withdraw tunnel");
    let output = fewest(&["apply", name, script.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(0));
    assert!(
        err(&output).contains("1 edit not saved in a journal beside the file were left out"),
        "{}",
        err(&output)
    );
    let (mut desk, _) =
        Desk::open_to_edit(&path, "test", Arc::new(fewest::store::RealFiles)).unwrap();
    assert!(desk.leftover().unwrap().foreign);
    desk.take_in_leftover();
    assert!(
        desk.timetable().request("tunnel").unwrap().withdrawn
            && desk.timetable().request("eels").unwrap().fastened
    );
    drop(desk);
    let _ = std::fs::remove_file(journal_path(&path));
    leave_unsaved("withdraw mud");
    std::fs::write(&script, "loosen eels\n").unwrap();
    let output = fewest(&["apply", name, script.to_str().unwrap(), "--unsaved"]);
    assert_eq!(output.status.code(), Some(0), "{}", err(&output));
    let text = std::fs::read_to_string(&path).unwrap();
    assert!(text.contains("withdrawn = true") && !journal_path(&path).exists());
}

#[test]
fn a_full_disk_is_said_and_edits_go_on() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("safe.toml");
    let files = Faulty::with(&path, TIMETABLE.as_bytes());
    let mut session = Session::open(&path, &files);
    session.edit("fasten a");
    files.failing(1, Fault::Short);
    session.edit("fasten b");
    assert_eq!(session.safe.len(), 2, "not safe");
    session.edit("withdraw b");
    assert_eq!(
        session.safe.last(),
        Some(&session.now),
        "safe again, with what had waited"
    );
    let now = session.now.clone();
    drop(session);
    let again = Session::open(&path, &files.after_the_end(true));
    assert_eq!(again.desk.document().text(), now);
}

#[test]
fn someone_elses_version_is_never_overwritten_unasked() {
    for (what, mine_wins) in [("mine", true), ("theirs", false), ("both", false)] {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("safe.toml");
        let files = Faulty::with(&path, TIMETABLE.as_bytes());
        let mut session = Session::open(&path, &files);
        session.edit("fasten a");
        session.edit("pin b on south");
        let theirs = TIMETABLE
            .replace("09:30", "09:45")
            .replace("id = \"a\"", "id = \"aa\"");
        files.replace(&path, theirs.as_bytes()).unwrap();
        assert!(session.desk.look_at_disk());
        assert_eq!(session.desk.disk(), Disk::Changed);
        assert!(!session.save());
        assert_eq!(files.read(&path, 1 << 20).unwrap(), theirs.as_bytes());
        match what {
            "mine" => {
                session.desk.keep_mine().unwrap();
                assert!(session.save());
                assert_eq!(
                    files
                        .read(&path.with_extension("theirs-1.toml"), 1 << 20)
                        .unwrap(),
                    theirs.as_bytes()
                );
            }
            "theirs" => {
                let said = session.desk.take_theirs(false).unwrap();
                assert!(said.contains("safe.mine-1.toml"), "{said}");
                assert_eq!(
                    files
                        .read(&path.with_extension("mine-1.toml"), 1 << 20)
                        .unwrap(),
                    session.now.as_bytes()
                );
            }
            _ => {
                let said = session.desk.take_theirs(true).unwrap();
                assert!(said.contains("1 edit does not fit"), "{said}");
                assert!(
                    session.desk.document().text().contains("09:45")
                        && session.desk.document().text().contains("pin = \"south\"")
                );
                assert_eq!(
                    files
                        .read(&path.with_extension("mine-1.toml"), 1 << 20)
                        .unwrap(),
                    session.now.as_bytes()
                );
            }
        }
        assert_eq!(
            session.desk.document().text().contains("\"aa\""),
            !mine_wins,
            "{what}"
        );
    }
}

/// What was taken back from behind a save cannot be put on top of another version: it is said
/// and kept, never called done.
#[test]
fn an_undo_behind_a_save_is_kept_when_theirs_is_taken() {
    for both in [false, true] {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("safe.toml");
        let files = Faulty::with(&path, TIMETABLE.as_bytes());
        let mut session = Session::open(&path, &files);
        session.edit("withdraw b");
        assert!(session.save());
        session.edit("undo");
        let ours = session.now.clone();
        let theirs = [files.read(&path, 1 << 20).unwrap(), b"# theirs\n".to_vec()].concat();
        files.replace(&path, &theirs).unwrap();
        session.desk.look_at_disk();
        let said = session.desk.take_theirs(both).unwrap();
        assert!(
            said.contains("yours") && said.contains("safe.mine-1.toml"),
            "{said}"
        );
        assert_eq!(
            files
                .read(&path.with_extension("mine-1.toml"), 1 << 20)
                .unwrap(),
            ours.as_bytes()
        );
        assert_eq!(session.desk.document().bytes(), theirs);
    }
}

#[test]
fn a_second_desk_reads_only_and_follows_and_apply_is_refused() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let name = path.to_str().unwrap();
    let mut one = Terminal::open(&[name], (80, 24), &XTERM);
    one.wait_for("proved");
    let mut other = Terminal::open(&[name], (100, 24), &XTERM);
    other.wait_for("read only: ");
    other.press(":fasten eels\r");
    other.wait_for("has it open");
    other.press("\x1b");
    let script = folder.path().join("script");
    std::fs::write(&script, "fasten eels\n").unwrap();
    let apply = fewest(&["apply", name, script.to_str().unwrap()]);
    assert_eq!(apply.status.code(), Some(2));
    assert!(
        err(&apply).starts_with("refused: ") && err(&apply).contains("has it open"),
        "{}",
        err(&apply)
    );
    one.press(":move star-dial to 2027-06-10 11:35\r");
    one.wait_for("1 edit not saved");
    one.press("s");
    one.wait_for(" saved");
    other.wait_for("saved by the other desk");
    other.wait_for("clique 9: Fri 11 Jun");
    one.press("q");
    assert_eq!(one.end(), 0);
    other.press("q");
    assert_eq!(other.end(), 0);
    assert!(!folder.path().join("three-day-event.lock").exists());
}

#[test]
fn a_file_changed_between_opening_and_saving_is_a_question() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let mut terminal = Terminal::open(&[path.to_str().unwrap()], (80, 24), &XTERM);
    terminal.wait_for("proved");
    terminal.press(":fasten eels\r");
    terminal.wait_for("1 edit not saved");
    let theirs = std::fs::read_to_string(&path).unwrap() + "# theirs\n";
    std::fs::write(&path, &theirs).unwrap();
    terminal.press("s");
    terminal.wait_for("m mine, t theirs, b both");
    terminal.press("x");
    terminal.wait_for("nothing was saved");
    assert_eq!(std::fs::read_to_string(&path).unwrap(), theirs);
    terminal.press("sb");
    terminal.wait_for("their version, with your 1 edit on top");
    terminal.press("s");
    terminal.wait_for(" saved");
    let both = std::fs::read_to_string(&path).unwrap();
    assert!(both.ends_with("# theirs\n") && both.contains("fastened = true"));
    terminal.press("q");
    assert_eq!(terminal.end(), 0);
}

/// The real program, killed at 100 moments of a session that types edits: on reopening there
/// is a beginning of what was typed, at least as far as the screen had shown it as safe.
#[test]
fn killed_at_any_moment_nothing_safe_is_lost() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let name = path.to_str().unwrap();
    let original = std::fs::read(&path).unwrap();
    let desk = Desk::open(&path).unwrap();
    // Those of the day that is shown first, so that their bars can be seen.
    let zone = desk.zone();
    let first = desk
        .timetable()
        .requests
        .iter()
        .filter(|r| zone.date(r.start).to_string() == "2027-06-10");
    let ids: Vec<String> = first
        .filter(|r| !r.fastened)
        .map(|r| r.id.to_string())
        .collect();
    let mut numbers: u64 = 5;
    let (mut kills, mut kept) = (0, 0);
    for round in 0..100u64 {
        std::fs::write(&path, &original).unwrap();
        let _ = std::fs::remove_file(journal_path(&path));
        let mut terminal = Terminal::open(&[name], (80, 24), &XTERM);
        terminal.wait_for("proved");
        let lines: Vec<String> = ids
            .iter()
            .skip(round as usize % 4)
            .take(20)
            .map(|id| format!("fasten {id}"))
            .collect();
        for line in &lines[..3] {
            terminal.press(&format!(":{line}\r"));
        }
        // Three are waited for until no bar wears "not yet safe"; three are on their way.
        terminal.wait("the first three safe", |text| {
            text.contains("3 edits not saved")
                && text.lines().skip(3).take(12).all(|row| !row.contains('?'))
        });
        let rest: String = lines[3..].iter().map(|line| format!(":{line}\r")).collect();
        terminal.press(&rest);
        numbers = numbers
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        std::thread::sleep(std::time::Duration::from_micros((numbers >> 33) % 8_000));
        terminal.kill();
        kills += 1;
        assert_eq!(
            std::fs::read(&path).unwrap(),
            original,
            "the file itself is untouched"
        );
        let bytes = std::fs::read(journal_path(&path)).unwrap();
        let journal = Journal::read(&bytes).unwrap();
        let made: Vec<Record> = lines
            .iter()
            .map(|line| Record::Step(vec![line.clone()]))
            .collect();
        assert!(
            journal.records.len() >= 3 && made.starts_with(&journal.records),
            "{:?}",
            journal.records
        );
        kept += journal.records.len();
        let (mut again, _) =
            Desk::open_to_edit(&path, "test", Arc::new(fewest::store::RealFiles)).unwrap();
        assert!(
            matches!(again.access(), Access::Ours(_)),
            "the lock of the dead is free"
        );
        assert_eq!(again.take_in_leftover().0, journal.records.len());
    }
    eprintln!("{kills} kills, {kept} edits kept");
}
