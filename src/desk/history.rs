//! Steps that were made, and those that were taken back.

use crate::claim::Plan;
use crate::document::{Document, Patch};
use crate::edit::Edit;
use crate::timetable::Timetable;
use std::sync::Arc;

/// One undoable step: the edits it consists of, and the states around it.
#[derive(Clone, Debug)]
pub struct Step {
    /// What was done.
    pub edits: Vec<Edit>,
    pub(super) before: Timetable,
    pub(super) after: Timetable,
    pub(super) text: TextChange,
    /// The plan that stood before it: undoing brings that back too.
    pub(super) reference: Option<Arc<Plan>>,
}

/// What a step did to the text.
#[derive(Clone, Debug)]
pub(super) enum TextChange {
    /// Patches that can be taken back.
    Patches(Vec<Patch>),
    /// The whole text before and after; only what is replayed as text has it.
    Whole(Box<(Document, Document)>),
}

/// A line of steps with a position in it.
#[derive(Debug, Default)]
pub(super) struct History {
    steps: Vec<Step>,
    at: usize,
    /// The position whose state is in the file; `None` when no position leads back to it.
    saved: Option<usize>,
    ever: bool,
}

impl History {
    pub(super) fn push(&mut self, step: Step) {
        if self.saved_at().is_some_and(|saved| saved > self.at) {
            (self.saved, self.ever) = (None, true);
        }
        self.steps.truncate(self.at);
        self.steps.push(step);
        self.at += 1;
    }

    pub(super) fn back(&mut self) -> Option<&Step> {
        self.at = self.at.checked_sub(1)?;
        self.steps.get(self.at)
    }

    pub(super) fn forward(&mut self) -> Option<&Step> {
        let step = self.steps.get(self.at)?;
        self.at += 1;
        Some(step)
    }

    pub(super) fn saved(&mut self) {
        (self.saved, self.ever) = (Some(self.at), true);
    }

    /// How many steps there are, those taken back included.
    pub(super) fn len(&self) -> usize {
        self.steps.len()
    }

    /// Whether what is not saved is steps made since, each of them edits: nothing that was
    /// taken back from behind the save.
    pub(super) fn is_plain(&self) -> bool {
        self.saved_at().is_some_and(|saved| saved <= self.at)
            && self.since_saved().all(|step| !step.edits.is_empty())
    }

    /// Where in the line we are.
    pub(super) fn position(&self) -> usize {
        self.at
    }

    /// The position that the file shows; the beginning as long as nothing was ever saved.
    fn saved_at(&self) -> Option<usize> {
        if self.ever { self.saved } else { Some(0) }
    }

    /// Steps between the file and now.
    pub(super) fn unsaved(&self) -> usize {
        self.saved_at()
            .map_or(self.at, |saved| saved.abs_diff(self.at))
    }

    /// The steps made since the file was saved (all of them when that point is gone).
    pub(super) fn since_saved(&self) -> impl Iterator<Item = &Step> {
        let from = self.saved_at().unwrap_or(0).min(self.at);
        self.steps[from..self.at].iter()
    }

    /// The step at a position, made or taken back.
    pub(super) fn at(&self, position: usize) -> Option<&Step> {
        self.steps.get(position)
    }

    pub(super) fn made(&self) -> &[Step] {
        &self.steps[..self.at]
    }
}
