//! Hall violations at a moment (Hall 1935): more pieces run than there are resources that
//! any of them may use. Covers a piece without any possible resource, two overlapping pins,
//! and a clique above the number of resources.

use crate::claim::HallViolation;
use crate::clock::Instant;
use crate::engine::Problem;
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

/// Sets of choices beyond which only the smallest are looked at.
const MOST_SETS: usize = 300;

/// Violations that share no piece, found set of choices by set of choices, smallest first:
/// for each, the pieces that may use nothing outside it are swept by time.
pub(crate) fn disjoint(problem: &Problem) -> Vec<HallViolation> {
    let mut sets: BTreeMap<(usize, &[u32]), Vec<usize>> = BTreeMap::new();
    for item in 0..problem.items.len() {
        let choices = problem.choices(item);
        sets.entry((room(problem, choices), choices))
            .or_default()
            .push(item);
    }
    let everything: Vec<u32> = (0..problem.classes.len() as u32).collect();
    sets.entry((problem.resources.len(), &everything))
        .or_default();
    let mut taken = vec![false; problem.items.len()];
    let mut found = Vec::new();
    let last = (problem.resources.len(), everything.as_slice());
    let chosen = sets.keys().take(MOST_SETS).copied().chain([last]);
    let mut seen = BTreeSet::new();
    for (room, set) in chosen {
        if !seen.insert((room, set)) {
            continue;
        }
        let inside = sets
            .iter()
            .filter(|((_, choices), _)| subset(choices, set))
            .flat_map(|(_, items)| items.iter().copied())
            .filter(|item| !taken[*item]);
        let mut inside: Vec<usize> = inside.collect();
        let units = inside.drain(..).flat_map(|item| problem.unit_places(item));
        let mut units: Vec<usize> = units.collect();
        units.sort_unstable_by_key(|unit| problem.units[*unit].core);
        sweep(problem, &units, room, set, &mut taken, &mut found);
    }
    found
}

/// Resources in a set of classes.
fn room(problem: &Problem, set: &[u32]) -> usize {
    set.iter()
        .map(|class| problem.classes[*class as usize].members.len())
        .sum()
}

/// Whether one ascending list lies inside another.
fn subset(small: &[u32], large: &[u32]) -> bool {
    small.len() <= large.len() && small.iter().all(|class| large.binary_search(class).is_ok())
}

/// Goes through `units` by start and takes out a violation whenever too many run at once,
/// at the moment when most of them do: just before one of them ends.
fn sweep(
    problem: &Problem,
    units: &[usize],
    room: usize,
    set: &[u32],
    taken: &mut [bool],
    found: &mut Vec<HallViolation>,
) {
    let mut running: Vec<usize> = Vec::new();
    let core = |unit: usize| problem.units[unit].core;
    let item = |unit: usize| problem.units[unit].item as usize;
    let mut take = |running: &mut Vec<usize>, taken: &mut [bool]| {
        // All of them run when the last of them has started.
        if let Some(at) = running.iter().map(|unit| core(*unit).start).max() {
            found.push(violation(problem, running, set, at));
        }
        for unit in running.drain(..) {
            taken[item(unit)] = true;
        }
    };
    for unit in units {
        let at = core(*unit).start;
        let ends = running.iter().any(|other| core(*other).end <= at);
        if ends && running.len() > room {
            take(&mut running, taken);
        }
        running.retain(|other| core(*other).end > at);
        // What goes on one resource as a whole counts once.
        let counted = running.iter().any(|other| item(*other) == item(*unit));
        if !taken[item(*unit)] && !counted {
            running.push(*unit);
        }
    }
    if running.len() > room {
        take(&mut running, taken);
    }
}

fn violation(problem: &Problem, units: &[usize], set: &[u32], at: Instant) -> HallViolation {
    let members = set
        .iter()
        .flat_map(|class| &problem.classes[*class as usize].members);
    HallViolation {
        at,
        pieces: units
            .iter()
            .map(|unit| Arc::clone(problem.id_of(*unit)))
            .collect(),
        resources: members
            .map(|r| Arc::clone(&problem.resources[*r as usize]))
            .collect(),
    }
}
