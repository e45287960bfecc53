//! Keeping what was planned: pieces stay where they were as long as that still fits, and
//! the rest go where they fit tightest.

use super::rows::{Rows, takers};
use super::{Assignment, NONE};
use crate::engine::{Problem, Reference};

/// A plan near the reference.
pub(crate) fn near(problem: &Problem, reference: &Reference) -> Assignment {
    let mut rows = Rows::empty(problem);
    // What did not change has the older right to its place.
    for changed in [false, true] {
        for (item, kept) in reference.kept.iter().enumerate() {
            if kept.resource == NONE || kept.changed != changed {
                continue;
            }
            if problem.allows(item, kept.resource as usize)
                && rows.gap(item, kept.resource).is_some()
            {
                rows.place(item, kept.resource);
            }
        }
    }
    let mut rest: Vec<usize> = (0..problem.items.len())
        .filter(|item| rows.on[*item] == NONE)
        .collect();
    if rest.is_empty() {
        return rows.on;
    }
    let takers = takers(problem);
    rest.sort_by_key(|item| problem.items[*item].core.start);
    for item in rest {
        rows.place_tightest(item, &takers);
    }
    rows.on
}
