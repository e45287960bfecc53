//! What sits on each resource, in order of time.

use super::{Assignment, NONE};
use crate::clock::Span;
use crate::engine::Problem;

/// Seconds within which two pieces on one resource count as the same day.
const SAME_DAY: i64 = 12 * 3600;

/// A plan in the making: per resource the occupied spans, disjoint and sorted.
pub(crate) struct Rows<'a> {
    problem: &'a Problem,
    rows: Vec<Vec<(Span, u32)>>,
    /// The resource of each item, or [`NONE`].
    pub(crate) on: Assignment,
    used: usize,
}

impl<'a> Rows<'a> {
    pub(crate) fn empty(problem: &'a Problem) -> Rows<'a> {
        Rows {
            problem,
            rows: vec![Vec::new(); problem.resources.len()],
            on: vec![NONE; problem.items.len()],
            used: 0,
        }
    }

    /// Whether anything sits on the resource.
    pub(crate) fn is_used(&self, resource: u32) -> bool {
        !self.rows[resource as usize].is_empty()
    }

    /// The end of what sits before the span (or the beginning of time), when the resource is
    /// free throughout it.
    pub(crate) fn free(&self, resource: u32, span: Span) -> Option<i64> {
        let row = &self.rows[resource as usize];
        let next = row.partition_point(|(other, _)| other.start < span.end);
        match next.checked_sub(1).map(|before| row[before].0) {
            None => Some(i64::MIN),
            Some(before) => (before.end <= span.start).then_some(before.end.0),
        }
    }

    /// Puts an item on a resource that is free for it.
    pub(crate) fn place(&mut self, item: usize, resource: u32) {
        let class = self.problem.class_of[resource as usize];
        let row = &mut self.rows[resource as usize];
        self.used += usize::from(row.is_empty());
        for span in self.problem.spans_on(item, class) {
            let at = row.partition_point(|(other, _)| other.start < span.start);
            row.insert(at, (span, item as u32));
        }
        self.on[item] = resource;
    }

    /// When the resource is free for all of the item: the longest time it would have been
    /// idle before any of it.
    pub(crate) fn gap(&self, item: usize, resource: u32) -> Option<i64> {
        let class = self.problem.class_of[resource as usize];
        let mut longest = 0;
        for span in self.problem.spans_on(item, class) {
            let before = self.free(resource, span)?;
            longest = longest.max(span.start.0.saturating_sub(before));
        }
        Some(longest)
    }

    /// Puts the item where it fits tightest: on a resource in use that day rather than one
    /// in use at all, and that rather than an idle one; of a class that few others could
    /// take; right after what sits before it.
    pub(crate) fn place_tightest(&mut self, item: usize, takers: &[usize]) -> bool {
        let mut best: Option<((u8, usize, i64, u32), u32)> = None;
        for class in self.problem.choices(item) {
            let mut idle_seen = false;
            for resource in &self.problem.classes[*class as usize].members {
                let used = self.is_used(*resource);
                // Idle members of a class are all the same.
                if !used && std::mem::replace(&mut idle_seen, true) {
                    continue;
                }
                if let Some(gap) = self.gap(item, *resource) {
                    let far = match (used, gap) {
                        (true, ..SAME_DAY) => 0,
                        (true, _) => 1,
                        (false, _) => 2,
                    };
                    let key = (far, takers[*class as usize], gap, *resource);
                    if best.is_none_or(|(least, _)| key < least) {
                        best = Some((key, *resource));
                    }
                }
            }
        }
        match best {
            Some((_, resource)) => {
                self.place(item, resource);
                true
            }
            None => false,
        }
    }
}

/// How many items could take each class.
pub(crate) fn takers(problem: &Problem) -> Vec<usize> {
    let mut takers = vec![0; problem.classes.len()];
    for item in 0..problem.items.len() {
        for class in problem.choices(item) {
            takers[*class as usize] += 1;
        }
    }
    takers
}

/// Distinct resources in an assignment.
fn in_use(problem: &Problem, on: &[u32]) -> usize {
    let mut used = vec![false; problem.resources.len()];
    for resource in on.iter().filter(|resource| **resource != NONE) {
        used[*resource as usize] = true;
    }
    used.into_iter().filter(|used| *used).count()
}

/// The weight of what has no place.
fn left_out(problem: &Problem, on: &[u32]) -> u64 {
    let without = on
        .iter()
        .zip(&problem.items)
        .filter(|(resource, _)| **resource == NONE);
    without.map(|(_, item)| item.weight).sum()
}

/// Less weight left out first, then fewer resources.
pub(crate) fn value(problem: &Problem, on: &[u32]) -> (u64, usize) {
    (left_out(problem, on), in_use(problem, on))
}
