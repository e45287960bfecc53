//! The largest clique of the overlap graph: spans on a line pairwise overlap exactly when
//! they share a moment (Helly's theorem on the line), so a sweep finds it.

use crate::claim::FloorProof;
use crate::engine::Problem;
use crate::overlap::load;
use std::sync::Arc;

/// A largest clique, at the beginning of the first peak.
pub(crate) fn largest(problem: &Problem) -> FloorProof {
    let cores: Vec<_> = problem.units.iter().map(|unit| unit.core).collect();
    let load = load(&cores);
    let Some(peak) = load.peaks().first().copied() else {
        return FloorProof::Clique {
            at: Some(crate::clock::Instant(0)),
            pieces: Vec::new(),
        };
    };
    let at = peak.span.start;
    let pieces = problem
        .running(at)
        .map(|unit| Arc::clone(problem.id_of(unit)))
        .collect();
    FloorProof::Clique {
        at: Some(at),
        pieces,
    }
}

/// Most items among which a clique without a moment of its own is looked for.
const MOST: usize = 4_000;

/// Work that is put into it, in pairs looked at.
const WORK: usize = 4_000_000;

/// A clique of items that overlap one another somewhere, larger than `known`; empty when
/// none is found, or every item has one unit: then only moments count (Helly).
///
/// From each item, by how many it overlaps, one is grown greedily; within its work this is
/// the same every time.
pub(crate) fn pairwise(problem: &Problem, known: usize) -> Vec<usize> {
    let count = problem.items.len();
    if problem.single() || count > MOST {
        return Vec::new();
    }
    let others = near(problem);
    let mut order: Vec<usize> = (0..count).collect();
    order.sort_by_key(|item| std::cmp::Reverse(others[*item].len()));
    let mut best: Vec<usize> = Vec::new();
    let mut work = 0;
    for first in &order {
        if others[*first].len() < known.max(best.len()) {
            continue;
        }
        let mut clique = vec![*first];
        let mut left = others[*first].clone();
        while !left.is_empty() && clique.len() + left.len() > known.max(best.len()) {
            // The one that leaves most to go on with.
            let degree = |item: &usize| left.iter().filter(|o| meets(&others, *item, **o)).count();
            work += left.len() * left.len();
            let Some(next) = left.iter().copied().max_by_key(degree) else {
                break;
            };
            clique.push(next);
            left.retain(|other| *other != next && meets(&others, next, *other));
        }
        if clique.len() > known.max(best.len()) {
            best = clique;
        }
        if work > WORK {
            break;
        }
    }
    best
}

/// Per item, those that it overlaps, ascending.
fn near(problem: &Problem) -> Vec<Vec<usize>> {
    let mut order: Vec<usize> = (0..problem.units.len()).collect();
    order.sort_unstable_by_key(|unit| problem.units[*unit].core);
    let mut others: Vec<Vec<usize>> = vec![Vec::new(); problem.items.len()];
    let mut running: Vec<usize> = Vec::new();
    for unit in order {
        let here = problem.units[unit];
        running.retain(|other| problem.units[*other].core.end > here.core.start);
        for other in &running {
            let other = problem.units[*other].item;
            if other != here.item {
                others[other as usize].push(here.item as usize);
                others[here.item as usize].push(other as usize);
            }
        }
        running.push(unit);
    }
    for list in &mut others {
        list.sort_unstable();
        list.dedup();
    }
    others
}

fn meets(others: &[Vec<usize>], a: usize, b: usize) -> bool {
    others[a].binary_search(&b).is_ok()
}
