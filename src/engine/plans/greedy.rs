//! Tightest fit by start time: a first plan in a moment.

use super::Assignment;
use super::rows::{Rows, takers};
use crate::engine::{Problem, Stopper};

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
        .map(|item| (problem.items[item].span.start.0, room(item), item as u32))
        .collect();
    order.sort_unstable();
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
