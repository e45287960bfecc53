//! Tightest fit by start time: a first plan in a moment.

use super::Assignment;
use super::rows::{Rows, takers};
use crate::engine::Problem;

/// A plan by start time; where two start together, the one with fewer choices first.
pub(crate) fn tightest_fit(problem: &Problem) -> Assignment {
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
    for item in single.into_iter().chain(several) {
        rows.place_tightest(item, &takers);
    }
    rows.on
}
