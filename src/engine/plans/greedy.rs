//! Tightest fit by start time: a first plan in a moment.

use super::Assignment;
use super::rows::{Rows, takers};
use crate::engine::{Problem, Stopper};

/// A plan by start time; where two start together, the one with fewer choices first. When
/// stopped, what is not placed yet stays unplaced.
pub(crate) fn tightest_fit(problem: &Problem, stop: &dyn Stopper) -> Assignment {
    let takers = takers(problem);
    let mut order: Vec<usize> = (0..problem.items.len()).collect();
    let room = |item: &usize| -> usize {
        let classes = problem.choices(*item).iter();
        classes
            .map(|class| problem.classes[*class as usize].members.len())
            .sum()
    };
    order.sort_by_cached_key(|item| (problem.items[*item].span.start, room(item)));
    let mut rows = Rows::empty(problem);
    // Pieces with one choice cannot give way, so they sit first.
    let (single, several): (Vec<usize>, Vec<usize>) =
        order.into_iter().partition(|item| room(item) == 1);
    for (count, item) in single.into_iter().chain(several).enumerate() {
        if count % 256 == 255 && stop.stop() {
            break;
        }
        rows.place_tightest(item, &takers);
    }
    rows.on
}
