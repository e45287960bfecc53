//! Interval partitioning (Gupta, Lee, Leung 1979; the greedy by start time uses exactly as
//! many resources as the largest clique): exact in O(n log n) where the members of a group
//! are alike to all of its items.

use super::{Assignment, NONE};
use crate::clock::Span;
use crate::engine::Problem;
use std::collections::BTreeMap;

/// The largest clique and the fewest resources of alike spans: the same number, because
/// interval graphs are perfect.
pub fn bound_and_count(spans: &[Span]) -> usize {
    crate::overlap::largest_load(spans)
}

/// Puts spans on as few alike rows as possible: the row of each, and how many rows.
pub fn partition(spans: &[Span]) -> (Vec<u32>, usize) {
    let mut starts: Vec<(i64, u32)> = spans.iter().map(|span| span.start.0).zip(0..).collect();
    let mut ends: Vec<(i64, u32)> = spans.iter().map(|span| span.end.0).zip(0..).collect();
    starts.sort_unstable();
    ends.sort_unstable();
    let mut row_of = vec![0; spans.len()];
    let mut free: Vec<u32> = Vec::new();
    let (mut ended, mut rows) = (0, 0);
    for (start, span) in starts {
        while ends[ended].0 <= start {
            free.push(row_of[ends[ended].1 as usize]);
            ended += 1;
        }
        // The row freed last: it fits tightest.
        row_of[span as usize] = free.pop().unwrap_or_else(|| {
            rows += 1;
            rows - 1
        });
    }
    (row_of, rows as usize)
}

/// Partitions every group, when the items fall into groups with exactly the same choices,
/// no two groups have a class in common, each item occupies the same span wherever it may
/// go, and the members are enough. The plan is then the best there is.
pub(crate) fn by_groups(problem: &Problem) -> Option<Assignment> {
    // What has several stretches makes other graphs than intervals do.
    if !problem.single() {
        return None;
    }
    let mut groups: BTreeMap<&[u32], Vec<usize>> = BTreeMap::new();
    // Most problems are not like that, which shows at the first few items.
    let mut owner: Vec<&[u32]> = vec![&[]; problem.classes.len()];
    for item in 0..problem.items.len() {
        let choices = problem.choices(item);
        for class in choices {
            let owner = &mut owner[*class as usize];
            if owner.is_empty() {
                *owner = choices;
            } else if *owner != choices {
                return None;
            }
        }
    }
    for item in 0..problem.items.len() {
        let choices = problem.choices(item);
        let (first, rest) = choices.split_first()?;
        let span = problem.occupied(item, *first);
        if rest
            .iter()
            .any(|class| problem.occupied(item, *class) != span)
        {
            return None;
        }
        groups.entry(choices).or_default().push(item);
    }
    let mut on = vec![NONE; problem.items.len()];
    for (choices, items) in groups {
        let spans: Vec<Span> = items.iter().map(|item| problem.items[*item].core).collect();
        let (rows, count) = partition(&spans);
        let mut members: Vec<u32> = choices
            .iter()
            .flat_map(|class| problem.classes[*class as usize].members.iter().copied())
            .collect();
        members.sort_unstable();
        if count > members.len() {
            return None;
        }
        for (item, row) in items.into_iter().zip(rows) {
            on[item] = members[row as usize];
        }
    }
    Some(on)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::clock::Instant;
    use proptest::prelude::*;

    /// The fewest rows by trying everything: an oracle that shares nothing with the greedy.
    fn fewest(spans: &[Span], at: usize, rows: &mut Vec<Vec<Span>>, best: &mut usize) {
        if rows.len() >= *best {
            return;
        }
        let Some(span) = spans.get(at) else {
            *best = rows.len();
            return;
        };
        for row in 0..rows.len() {
            if rows[row].iter().all(|other| !other.overlaps(*span)) {
                rows[row].push(*span);
                fewest(spans, at + 1, rows, best);
                rows[row].pop();
            }
        }
        rows.push(vec![*span]);
        fewest(spans, at + 1, rows, best);
        rows.pop();
    }

    proptest! {
        #[test]
        fn partitioning_agrees_with_brute_force(raw in prop::collection::vec((0i64..12, 1i64..8), 0..8)) {
            let spans: Vec<Span> = raw.iter().map(|(s, l)| Span::lasting(Instant(*s), *l)).collect();
            let (rows, count) = partition(&spans);
            for a in 0..spans.len() {
                for b in 0..a {
                    prop_assert!(rows[a] != rows[b] || !spans[a].overlaps(spans[b]));
                }
            }
            let mut best = usize::MAX;
            fewest(&spans, 0, &mut Vec::new(), &mut best);
            prop_assert_eq!(count, best);
            prop_assert_eq!(bound_and_count(&spans), best);
        }
    }
}
