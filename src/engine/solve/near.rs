//! Staying near to an earlier plan: few changes at once, the fewest once resources are settled,
//! and what the other choice would come to.

use super::{Reference, Solving, THOROUGH};
use crate::engine::changes::{self, Changes};
use crate::engine::plans::Assignment;
use crate::engine::{Never, Stopper};
use crate::timetable::Prefer;

impl Solving<'_, '_> {
    /// Fewer changes in a moment, with no more resources and nothing more left out.
    pub(super) fn stay_near(&mut self, nodes: u64) {
        let Some(reference) = self.reference else {
            return;
        };
        let first = reference.prefer == Prefer::Changes;
        let limit = match first {
            true => self.problem.resources.len(),
            false => self.value(&self.best).1,
        };
        let (problem, wishes, two) = (self.problem, &reference.wishes, reference.two);
        let mut changes = Changes::new(problem, wishes, two, &self.best, limit);
        changes.at_once(nodes, &Never);
        match (first, changes.plan()) {
            (_, None) => {}
            (true, Some(plan)) => self.near = Some(plan.clone()),
            (false, Some(plan)) => self.best.clone_from(plan),
        }
    }

    /// The plan that is shown: the one with the fewest changes where those come first and it
    /// leaves out no more.
    pub(super) fn shown(&self) -> &Assignment {
        let left_out = self.value(&self.best).0;
        let near = self.near.as_ref();
        near.filter(|near| self.value(near).0 <= left_out)
            .unwrap_or(&self.best)
    }

    /// Fewest changes and their proof, once resources are settled as far as they will be.
    pub(super) fn fewest_changes(&mut self, stop: &dyn Stopper) {
        let Some(reference) = self.reference else {
            return;
        };
        self.due = false;
        let first = reference.prefer == Prefer::Changes;
        let (problem, wishes, two) = (self.problem, &reference.wishes, reference.two);
        let all = problem.resources.len();
        let start = self.shown().clone();
        let limit = if first { all } else { self.value(&start).1 };
        let mut changes = Changes::new(problem, wishes, two, &start, limit);
        changes.quick(THOROUGH, stop);
        let known = changes.prove(stop, &mut |known| {
            self.keep(known, first);
            self.report();
        });
        let (proof, other) = (self.proof.clone(), self.other);
        self.keep(&known, first);
        if first {
            self.as_few_as_the_same_changes_allow(reference, &known, stop);
        }
        // Where nothing moves for its own sake, no other choice moves less.
        self.other = None;
        if first || !changes.at_least() {
            self.other = self.other_choice(reference, &start, &known, stop);
        }
        if *self.shown() != start || self.proof != proof || self.other != other {
            self.report();
        }
    }

    /// With the same changes, fewer resources, where changes come first.
    fn as_few_as_the_same_changes_allow(
        &mut self,
        reference: &Reference,
        known: &changes::Known,
        stop: &dyn Stopper,
    ) {
        let mut on = known.on.clone();
        while let Some(limit) = self.value(&on).1.checked_sub(1).filter(|_| !stop.stop()) {
            let (wishes, two) = (&reference.wishes, reference.two);
            let mut fewer = Changes::new(self.problem, wishes, two, &on, limit);
            fewer.quick(THOROUGH, stop);
            let same = fewer
                .plan()
                .filter(|_| fewer.relocated() <= known.relocated);
            match same {
                Some(plan) => on.clone_from(plan),
                None => break,
            }
        }
        self.near = Some(on);
    }

    /// What the other choice would come to, if it is another.
    fn other_choice(
        &self,
        reference: &Reference,
        start: &[u32],
        known: &changes::Known,
        stop: &dyn Stopper,
    ) -> Option<(usize, usize)> {
        let first = reference.prefer == Prefer::Changes;
        let (from, limit) = match first {
            true => (&*self.best, self.value(&self.best).1),
            false => (start, self.problem.resources.len()),
        };
        let (wishes, two) = (&reference.wishes, reference.two);
        let mut other = Changes::new(self.problem, wishes, two, from, limit);
        other.quick(THOROUGH, stop);
        let shown = (self.value(self.shown()).1, known.relocated);
        let found = (self.value(other.plan()?).1, other.relocated());
        let apart = match first {
            true => found.0 < shown.0 && found.1 > shown.1,
            false => found.1 < shown.1,
        };
        apart.then_some((found.0, found.1 as usize))
    }

    fn keep(&mut self, known: &changes::Known, first: bool) {
        match first {
            true => self.near = Some(known.on.clone()),
            false => self.best.clone_from(&known.on),
        }
        self.proof.clone_from(&known.proof);
    }
}
