//! The open document: the timetable as it stands, its history, and the answer that goes
//! with it. Solving happens on a thread of its own; [`settle`] is the only door through
//! which an answer becomes showable.
//!
//! Imports everything below `words`.

mod history;
mod safety;
mod settle;
mod solver;
mod why;

pub use history::Step;
use history::TextChange;
pub use safety::{Access, Disk, Leftover, whoami};
pub use settle::{Settled, Survey, settle};
pub use solver::{Event, Job, Solver};
pub use why::why;

use crate::claim::{FloorProof, Placement, Plan};
use crate::clock::{Instant, Zone};
use crate::document::{self, Document, Mistake, Mistakes, PlanFile, State, issued_path, plan_path};
use crate::edit::{self, Change, Edit, Refused};
use crate::store::journal::Record;
use crate::store::{Files, Locking, RealFiles, lock};
use crate::timetable::Timetable;
use crate::words;
use std::collections::HashMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use thiserror::Error;

/// Why a file could not be opened or saved.
#[derive(Debug, Error)]
pub enum Trouble {
    /// The system refused.
    #[error("{path}: {error}")]
    Io {
        /// The file.
        path: String,
        /// What it said.
        error: std::io::Error,
    },
    /// It is no timetable.
    #[error("{0}")]
    Mistakes(Box<Mistakes>),
    /// Somebody else wrote it since it was read.
    #[error("changed by someone else meanwhile; keep yours with :save OTHER.toml ({0})")]
    Changed(String),
    /// Another desk has it.
    #[error("read only: {0} has it open; keep yours with :save OTHER.toml")]
    Locked(String),
    /// There is a file of that name that is not the one opened.
    #[error("there is a file of that name already; choose another ({0})")]
    Exists(String),
}

impl Trouble {
    fn io(path: &Path, error: std::io::Error) -> Trouble {
        Trouble::Io {
            path: crate::text::clean(&path.display().to_string()).into_owned(),
            error,
        }
    }
}

/// An open timetable.
#[derive(Debug)]
pub struct Desk {
    /// Where it is saved.
    pub path: PathBuf,
    /// Doubtful places, noted on reading.
    pub warnings: Vec<Mistake>,
    document: Document,
    timetable: Timetable,
    opened: Timetable,
    history: history::History,
    /// Hash of the file's bytes when last read or written.
    on_disk: String,
    /// The text of those bytes: comparing is quicker than hashing once a frame.
    saved_text: String,
    /// The plan that a new answer stays near to.
    reference: Option<Arc<Plan>>,
    /// Where pieces that have begun stay.
    begun: Arc<HashMap<Arc<str>, Arc<str>>>,
    issued: Option<PlanFile>,
    issued_plan: Option<Arc<Plan>>,
    /// Why not fewer, as last settled, where it is more than a clique at a moment.
    floor: Option<Arc<FloorProof>>,
    generation: u64,
    settled: Option<Arc<Settled>>,
    /// The generation whose plan file is still to be written.
    plan_due: Option<u64>,
    files: Arc<dyn Files>,
    access: Access,
    safety: safety::Safety,
}

impl Desk {
    /// Opens a file, with the plan files beside it when they can be read.
    ///
    /// # Errors
    /// [`Trouble`], with every mistake in the file.
    pub fn open(path: &Path) -> Result<Desk, Trouble> {
        Desk::open_through(path, Arc::new(RealFiles))
    }

    /// The same, through a layer over the files.
    ///
    /// # Errors
    /// [`Trouble`], with every mistake in the file.
    pub fn open_through(path: &Path, files: Arc<dyn Files>) -> Result<Desk, Trouble> {
        let bytes = files
            .read(path, document::MOST_BYTES)
            .map_err(|error| Trouble::io(path, error))?;
        let name = path.display().to_string();
        let read = document::read(&name, &bytes).map_err(Trouble::Mistakes)?;
        let plan_file = |path: PathBuf| {
            let bytes = files.read(&path, document::MOST_BYTES).ok()?;
            PlanFile::read(
                &path.display().to_string(),
                std::str::from_utf8(&bytes).ok()?,
            )
            .ok()
        };
        let issued = plan_file(issued_path(path));
        let planned = plan_file(plan_path(path));
        let known = planned
            .as_ref()
            .or(issued.as_ref())
            .map(|file| file.plan.clone());
        let mut begun = HashMap::new();
        for file in planned.iter().chain(issued.as_ref()) {
            for placement in &file.plan.placements {
                begun.insert(
                    Arc::clone(&placement.piece),
                    Arc::clone(&placement.resource),
                );
            }
        }
        Ok(Desk {
            path: path.to_path_buf(),
            warnings: read.warnings,
            on_disk: document::hash(&bytes),
            saved_text: read.document.text().into(),
            document: read.document,
            opened: read.timetable.clone(),
            timetable: read.timetable,
            history: history::History::default(),
            reference: known.map(Arc::new),
            begun: Arc::new(begun),
            issued_plan: issued.as_ref().map(|file| Arc::new(file.plan.clone())),
            issued,
            floor: planned.and_then(|file| file.floor).map(Arc::new),
            generation: 0,
            settled: None,
            plan_due: None,
            files,
            access: Access::Unasked,
            safety: safety::Safety::default(),
        })
    }

    /// The timetable as it stands.
    pub fn timetable(&self) -> &Timetable {
        &self.timetable
    }

    /// The timetable as it was opened.
    pub fn opened(&self) -> &Timetable {
        &self.opened
    }

    /// The text that belongs to it.
    pub fn document(&self) -> &Document {
        &self.document
    }

    /// The last settled answer; it may still belong to an earlier state.
    pub fn settled(&self) -> Option<&Arc<Settled>> {
        self.settled.as_ref()
    }

    /// Whether the settled answer belongs to the timetable as it stands.
    pub fn is_current(&self) -> bool {
        self.settled
            .as_ref()
            .is_some_and(|settled| settled.generation == self.generation)
    }

    /// Steps that are not in the file; 0 when its bytes are the ones saved.
    pub fn unsaved(&self) -> usize {
        if self.document.text() == self.saved_text {
            0
        } else {
            self.history.unsaved().max(1)
        }
    }

    /// The steps since the file was last saved, each as its lines.
    fn unsaved_steps(&self) -> Vec<Vec<String>> {
        let zone = self.timetable.settings.zone;
        let lines = |step: &Step| {
            step.edits
                .iter()
                .map(|edit| edit::print(edit, zone))
                .collect()
        };
        self.history.since_saved().map(lines).collect()
    }

    /// The work for the solver as things stand.
    pub fn job(&self) -> Job {
        self.job_for(self.timetable.clone(), self.generation)
    }

    /// The work for a state that is only looked at.
    ///
    /// # Errors
    /// [`Refused`] when the edits cannot be made.
    pub fn preview(&self, edits: &[Edit], generation: u64) -> Result<(Timetable, Job), Refused> {
        let mut timetable = self.timetable.clone();
        for edit in edits {
            edit::apply(&mut timetable, edit)?;
        }
        let job = self.job_for(timetable.clone(), generation);
        Ok((timetable, job))
    }

    fn job_for(&self, timetable: Timetable, generation: u64) -> Job {
        Job {
            generation,
            timetable,
            reference: self.reference.clone(),
            issued: self.issued_plan.clone(),
            floor: self.floor.clone(),
            begun: Arc::clone(&self.begun),
        }
    }

    /// Takes a settled answer in, if it belongs to the present state; says whether it did.
    /// When a save was waiting for it, the plan file is due to be written.
    pub fn receive(&mut self, settled: Arc<Settled>) -> bool {
        if settled.generation != self.generation {
            return false;
        }
        self.reference = Some(Arc::new(settled.answer.plan.clone()));
        let floor = &settled.answer.floor;
        let more = floor.value() > settled.survey().load.most;
        if self.floor.as_deref().filter(|_| more) != Some(floor) {
            self.floor = more.then(|| Arc::new(floor.clone()));
        }
        self.settled = Some(settled);
        true
    }

    /// Makes edits as one step.
    ///
    /// # Errors
    /// [`Refused`]; nothing is changed then.
    pub fn make(&mut self, edits: Vec<Edit>) -> Result<(), Refused> {
        match edits.first().map(|edit| &edit.what) {
            None => return Ok(()),
            Some(_) if matches!(self.access, Access::Theirs(_)) => return Err(self.read_only()),
            Some(Change::Undo) => return self.undo(),
            Some(Change::Redo) => return self.redo(),
            Some(_) => {}
        }
        let before = self.timetable.clone();
        let mut edits_made = Vec::new();
        for edit in edits {
            edits_made.extend(self.resolve(edit)?);
        }
        let mut timetable = before.clone();
        let mut patches = Vec::new();
        for edit in &edits_made {
            let earlier = timetable.clone();
            match edit::apply(&mut timetable, edit) {
                Ok(touched) => patches.extend(self.document.follow(&earlier, &timetable, &touched)),
                Err(refused) => {
                    // All or nothing: the text goes back to where it was.
                    self.document.take_back(&patches);
                    return Err(refused);
                }
            }
        }
        // What has begun stays where it is now.
        if edits_made
            .iter()
            .any(|edit| matches!(edit.what, Change::Settle(_)))
            && let Some(plan) = &self.reference
        {
            let on = |p: &Placement| (Arc::clone(&p.piece), Arc::clone(&p.resource));
            Arc::make_mut(&mut self.begun).extend(plan.placements.iter().map(on));
        }
        self.timetable = timetable;
        self.history.push(Step {
            edits: edits_made,
            before,
            after: self.timetable.clone(),
            text: TextChange::Patches(patches),
            reference: self.reference.clone(),
        });
        self.generation += 1;
        if let Some(step) = self.history.made().last() {
            let edits = step.edits.clone();
            self.note_step(&edits);
        }
        Ok(())
    }

    fn read_only(&self) -> Refused {
        match &self.access {
            Access::Theirs(who) => Refused::ReadOnly(who.clone()),
            _ => Refused::Nothing("do"),
        }
    }

    /// Turns a swap into the two pins it means.
    fn resolve(&self, edit: Edit) -> Result<Vec<Edit>, Refused> {
        let Change::Swap(first, second) = &edit.what else {
            return Ok(vec![edit]);
        };
        if first == second {
            return Err(Refused::Itself(Arc::clone(first)));
        }
        let place = |piece: &Arc<str>| {
            let pinned = self.timetable.piece(piece).and_then(|piece| piece.pin);
            let planned = || {
                let plan = self.reference.as_ref()?;
                let placement = plan
                    .placements
                    .iter()
                    .find(|placement| placement.piece == *piece)?;
                Some(Arc::clone(&placement.resource))
            };
            pinned
                .or_else(planned)
                .ok_or_else(|| Refused::NoPlace(Arc::clone(piece)))
        };
        let (one, other) = (place(first)?, place(second)?);
        let pin = |piece: &Arc<str>, on: Arc<str>| Edit {
            what: Change::Pin {
                piece: Arc::clone(piece),
                on,
            },
            because: edit.because.clone(),
        };
        Ok(vec![pin(first, other), pin(second, one)])
    }

    /// Takes the last step back.
    ///
    /// # Errors
    /// [`Refused::Nothing`] at the beginning.
    pub fn undo(&mut self) -> Result<(), Refused> {
        let step = self.history.back().ok_or(Refused::Nothing("undo"))?;
        match &step.text {
            TextChange::Patches(patches) => self.document.take_back(patches),
            TextChange::Whole(texts) => self.document = texts.0.clone(),
        }
        self.timetable = step.before.clone();
        self.reference = step.reference.clone();
        self.generation += 1;
        self.note_walk(self.history.position(), true);
        Ok(())
    }

    /// Does the step again that was taken back.
    ///
    /// # Errors
    /// [`Refused::Nothing`] at the end.
    pub fn redo(&mut self) -> Result<(), Refused> {
        let step = self.history.forward().ok_or(Refused::Nothing("redo"))?;
        match &step.text {
            TextChange::Patches(patches) => self.document.repeat(patches),
            TextChange::Whole(texts) => self.document = texts.1.clone(),
        }
        self.timetable = step.after.clone();
        self.generation += 1;
        self.note_walk(self.history.position() - 1, false);
        Ok(())
    }

    /// Every step up to now, oldest first.
    pub fn steps(&self) -> &[Step] {
        self.history.made()
    }

    /// Reads a line of the edit language against the present state.
    ///
    /// # Errors
    /// [`edit::Misread`], with the column.
    pub fn parse(&self, line: &str, now: Instant) -> Result<Edit, edit::Misread> {
        edit::parse(
            line,
            edit::Context {
                timetable: &self.timetable,
                now,
            },
        )
    }

    /// Saves, here or under another name. The plan file follows with the next settled
    /// answer of this state, or at once when there is one. `announce` gets the journal's
    /// record of the save before the file is replaced, and makes it last.
    ///
    /// # Errors
    /// [`Trouble`]; the edits are then still here.
    pub fn save(
        &mut self,
        other: Option<&Path>,
        now: Instant,
        announce: &mut dyn FnMut(Record),
    ) -> Result<(), Trouble> {
        let path = other.unwrap_or(&self.path).to_path_buf();
        let name = crate::text::clean(&path.display().to_string()).into_owned();
        let same = path == self.path
            || std::fs::canonicalize(&path).ok().is_some_and(|there| {
                std::fs::canonicalize(&self.path).is_ok_and(|ours| ours == there)
            });
        if let Access::Theirs(who) = &self.access
            && same
        {
            return Err(Trouble::Locked(who.clone()));
        }
        if !same && path.exists() {
            return Err(Trouble::Exists(name));
        }
        if same
            && let Ok(bytes) = self.files.read(&path, document::MOST_BYTES)
            && document::hash(&bytes) != self.on_disk
        {
            return Err(Trouble::Changed(name));
        }
        let bytes = self.document.bytes();
        // Under another name the journal here has nothing to say about it.
        if same {
            announce(Record::Saved(document::hash(&bytes)));
        }
        self.files
            .replace(&path, &bytes)
            .map_err(|error| Trouble::io(&path, error))?;
        if !same {
            self.move_to(&path);
        }
        self.path = path;
        self.on_disk = document::hash(&bytes);
        self.saved_text = self.document.text().into();
        self.history.saved();
        self.new_epoch();
        self.plan_due = Some(self.generation);
        self.write_plan(now)
    }

    /// The desk goes on under another name: the lock and the journal go with it.
    fn move_to(&mut self, path: &Path) {
        self.close_journal();
        self.safety = safety::Safety::default();
        self.access = match lock(path, &whoami()) {
            Ok(Locking::Ours(lock)) => Access::Ours(lock),
            Ok(Locking::Theirs(who)) => Access::Theirs(who),
            Err(error) => Access::Nowhere(error.to_string()),
        };
    }

    /// Writes the plan file if one is due and its answer is here.
    ///
    /// # Errors
    /// [`Trouble`] from the system.
    pub fn write_plan(&mut self, now: Instant) -> Result<(), Trouble> {
        if self.plan_due != Some(self.generation) || !self.is_current() {
            return Ok(());
        }
        let Some(settled) = &self.settled else {
            return Ok(());
        };
        let revision = self.issued.as_ref().map_or(0, |issued| issued.revision);
        let file = PlanFile::of(
            &settled.answer,
            self.on_disk.clone(),
            revision,
            now,
            settled.state(),
        );
        let text = file.print(self.zone(), &|unplaced| {
            words::unplaced(&self.timetable, unplaced)
        });
        let path = plan_path(&self.path);
        self.files
            .replace(&path, text.as_bytes())
            .map_err(|error| Trouble::io(&path, error))?;
        // A better answer of the same state is written again when leaving or saving.
        self.plan_due = None;
        Ok(())
    }

    /// Whether a save still waits for its answer to write the plan file.
    pub fn plan_is_due(&self) -> bool {
        self.plan_due == Some(self.generation)
    }

    /// The zone of the timetable.
    pub fn zone(&self) -> Zone {
        self.timetable.settings.zone
    }

    /// The state of knowledge as plan files write it.
    pub fn state(&self) -> Option<State> {
        self.settled.as_ref().map(|settled| settled.state())
    }
}
