//! The plan search in slices: weighted tabu, then laying out a few resources anew together,
//! in turn, always from the best plan that anyone has found.

use super::{Assignment, NONE, rows, tabu};
use crate::engine::{Problem, Stopper};

/// Steps of the tabu search in one slice.
pub(crate) const SLICE: u64 = 5_000;

/// Rearrangements after each slice, and how many more after each that was in vain: the
/// longer nothing comes, the less the short steps have to give.
const REARRANGED: u32 = 1_000;
const MORE: u32 = 200;
const MOST_REARRANGED: u32 = 8_000;

/// About how much work that is, in the entries that the floors count.
pub(crate) const SLICE_WORK: u64 = 30_000_000;

/// When some pieces provably cannot be placed, the count of the rest has no floor of its
/// own to meet; after so many steps without a better one it is left.
const ENOUGH_FOR_THE_REST: u64 = 200_000;

/// What a slice came to.
pub(crate) enum Slice {
    /// A better plan.
    Better(Assignment),
    /// Nothing yet.
    Nothing,
    /// Nothing more will come.
    Over,
}

/// What is known when a slice begins.
#[derive(Clone, Copy)]
pub(crate) struct Known<'a> {
    /// The best plan.
    pub(crate) best: &'a [u32],
    /// Weight left out by it, and resources in use.
    pub(crate) value: (u64, usize),
    /// Weight that provably stays out.
    pub(crate) out_floor: u64,
}

/// One worker.
pub(crate) struct Plans<'a> {
    problem: &'a Problem,
    seed: u64,
    skip: Vec<bool>,
    search: Option<tabu::Tabu<'a>>,
    /// The search in which other pieces may be left out than in the best plan.
    others: Option<tabu::Tabu<'a>>,
    /// The value it started from and the target it aims at.
    aimed: Option<((u64, usize), usize)>,
    since_better: u64,
    /// Slices in vain.
    slices: u32,
    /// Slices altogether.
    turns: u32,
    width: f64,
    /// Go back to where the least weight was missing rather than the fewest pieces.
    by_weight: bool,
}

impl<'a> Plans<'a> {
    pub(crate) fn new(problem: &'a Problem, seed: u64, by_weight: bool) -> Plans<'a> {
        let skip = vec![false; problem.items.len()];
        Plans {
            search: tabu::Tabu::new(problem, &skip, seed),
            others: None,
            problem,
            seed,
            skip,
            aimed: None,
            since_better: 0,
            slices: 0,
            turns: 0,
            width: 4.0,
            by_weight,
        }
    }

    /// Whether the problem is too large for it.
    pub(crate) fn too_large(&self) -> bool {
        self.search.is_none()
    }

    /// A plan with at most `target` resources that leaves out no more weight, whichever pieces
    /// that is.
    fn leave_out_others(
        &mut self,
        known: Known<'_>,
        target: usize,
        steps: u64,
        stop: &dyn Stopper,
    ) -> Option<Assignment> {
        if self.others.is_none() {
            let nothing = vec![false; self.problem.items.len()];
            self.others = tabu::Tabu::new(self.problem, &nothing, self.seed);
        }
        let search = self.others.as_mut()?;
        if !search.aim(known.best, target, stop) {
            return None;
        }
        let (problem, mut better) = (self.problem, None);
        search.run(steps, stop, &mut |left, on| {
            let as_little = better.is_none() && left <= known.value.0;
            if as_little && rows::value(problem, on) < known.value {
                better = Some(on.to_vec());
            }
        });
        better
    }

    /// Up to `steps` steps and what goes with them.
    pub(crate) fn slice(&mut self, known: Known<'_>, steps: u64, stop: &dyn Stopper) -> Slice {
        let (left_out, in_use) = known.value;
        // Provably no more can be placed: the rest is worth a better count all the same.
        let rest = left_out > 0 && left_out == known.out_floor;
        if rest && !self.skip.iter().any(|skipped| *skipped) {
            self.skip = known
                .best
                .iter()
                .map(|resource| *resource == NONE)
                .collect();
            self.search = tabu::Tabu::new(self.problem, &self.skip, self.seed);
            self.aimed = None;
        }
        if rest && (in_use == 0 || self.since_better >= ENOUGH_FOR_THE_REST) {
            return Slice::Over;
        }
        let placing = left_out > 0 && !rest;
        let target = if placing {
            self.problem.resources.len()
        } else {
            in_use - 1
        };
        self.since_better += steps;
        self.turns += 1;
        // Other pieces that weigh no more may leave less to the rest.
        if rest && self.turns.is_multiple_of(2) {
            let found = self.leave_out_others(known, target, steps, stop);
            return found.map_or(Slice::Nothing, |better| {
                self.since_better = 0;
                Slice::Better(better)
            });
        }
        let Some(search) = &mut self.search else {
            return Slice::Nothing;
        };
        if self.aimed != Some((known.value, target)) {
            if !search.aim(known.best, target, stop) {
                self.aimed = None;
                return Slice::Nothing;
            }
            self.aimed = Some((known.value, target));
        }
        let mut better: Option<Assignment> = None;
        let mut least = left_out;
        if placing && self.turns.is_multiple_of(2) {
            // What is left out is judged by real weights, not by those that the search has
            // grown: from the best plan, with nothing else in mind.
            search.forget();
            if !search.aim(known.best, target, stop) {
                self.aimed = None;
                return Slice::Nothing;
            }
        } else if placing {
            search.run(steps, stop, &mut |left, on| {
                if left < least {
                    least = left;
                    better = Some(on.to_vec());
                }
            });
        } else {
            // Near the end what is missing is one piece that no chain of ejections brings
            // in: then several resources are laid out anew together.
            search.run_and_return(steps, self.by_weight, stop);
        }
        if !search.done() {
            let attempts = REARRANGED.saturating_add(MORE * self.slices);
            self.slices += 1;
            search.rearrange(attempts.min(MOST_REARRANGED), &mut self.width, stop);
            if placing && search.left_out < least {
                better = Some(search.on.clone());
            }
        }
        if search.done() {
            better = Some(search.on.clone());
        }
        match better {
            Some(better) if rows::value(self.problem, &better) < known.value => {
                self.since_better = 0;
                self.slices = 0;
                Slice::Better(better)
            }
            _ => Slice::Nothing,
        }
    }
}
