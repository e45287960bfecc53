//! Tightest fit by start time: a first plan in a moment.

use super::Assignment;
use super::rows::{Rows, takers};
use crate::engine::{Problem, Stopper};
use std::cmp::Reverse;

/// A plan by start time; where two start together, the one with fewer choices first. When
/// stopped, what is not placed yet stays unplaced.
pub(crate) fn tightest_fit(problem: &Problem, stop: &dyn Stopper) -> Assignment {
    let takers = takers(problem);
    let members: Vec<u32> = problem
        .classes
        .iter()
        .map(|class| class.members.len() as u32)
        .collect();
    let room = |item: usize| -> u32 {
        let classes = problem.choices(item).iter();
        classes.map(|class| members[*class as usize]).sum()
    };
    let mut order: Vec<(i64, u32, u32)> = (0..problem.items.len())
        .map(|item| {
            let first = problem.units(item)[0].span.start.0;
            (first, room(item), item as u32)
        })
        .collect();
    if problem.single() {
        order.sort_unstable();
    } else {
        // What has several stretches is the harder to place the more there are.
        let stretches = |item: &u32| problem.units(*item as usize).len();
        order.sort_by_key(|(start, room, item)| (Reverse(stretches(item)), *start, *room, *item));
    }
    let mut rows = Rows::empty(problem);
    // Pieces with one choice cannot give way, so they sit first.
    let singles = order.iter().filter(|(_, room, _)| *room == 1);
    let others = order.iter().filter(|(_, room, _)| *room != 1);
    let order = singles.chain(others).map(|(.., item)| *item as usize);
    for (count, item) in order.enumerate() {
        if count % 256 == 255 && stop.stop() {
            break;
        }
        rows.place_tightest(item, &takers);
    }
    rows.on
}
