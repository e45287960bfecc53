//! The floors, one rung after the other: each gets a slice in turn, as long as it may still
//! give something.

use super::incompatible;
use super::prices::Prices;
use crate::claim::FloorProof;
use crate::engine::{Problem, Stopper};
use std::sync::Arc;

/// Entries looked at in one slice: some ten milliseconds.
const SLICE: usize = 3_000_000;

/// Climbs without a larger clique after which the search for one counts as stale.
const STALE: u32 = 100;

/// The floor search, in slices.
pub(crate) struct Ladder<'a> {
    problem: &'a Problem,
    /// The best clique known, to begin with.
    start: Vec<usize>,
    seed: u64,
    clique: Option<incompatible::Search>,
    clique_wanted: bool,
    /// Climbs since the clique grew.
    climbs: u32,
    prices: Option<Prices>,
    prices_wanted: bool,
}

impl<'a> Ladder<'a> {
    pub(crate) fn new(problem: &'a Problem, start: Vec<usize>, seed: u64) -> Ladder<'a> {
        Ladder {
            problem,
            start,
            seed,
            clique: None,
            clique_wanted: true,
            climbs: 0,
            prices: None,
            prices_wanted: true,
        }
    }

    /// Whether nothing new has come for so long that time is better spent elsewhere.
    pub(crate) fn stale(&self) -> bool {
        !self.prices_wanted && (!self.clique_wanted || self.climbs >= STALE)
    }

    /// Whether there is nothing at all left to try.
    pub(crate) fn spent(&self) -> bool {
        !self.prices_wanted && !self.clique_wanted
    }

    /// One slice towards a floor above `floor`, where a plan with `in_use` is known.
    pub(crate) fn slice(
        &mut self,
        floor: usize,
        in_use: usize,
        stop: &dyn Stopper,
    ) -> Option<FloorProof> {
        if self.clique_wanted
            && let Some(proof) = self.climb(floor, stop)
        {
            return Some(proof);
        }
        if self.prices_wanted {
            return self.price(floor, in_use, stop);
        }
        None
    }

    fn climb(&mut self, floor: usize, stop: &dyn Stopper) -> Option<FloorProof> {
        if self.clique.is_none() {
            self.clique =
                incompatible::Search::new(self.problem, &self.start, self.seed, stop);
            self.clique_wanted = self.clique.is_some();
        }
        let search = self.clique.as_mut()?;
        let mut work = 0;
        while work < SLICE && !stop.stop() {
            work += search.climb();
            self.climbs += 1;
            if search.best.len() > floor {
                self.climbs = 0;
                let pieces = search.best.iter();
                return Some(FloorProof::Incompatible {
                    pieces: pieces
                        .map(|item| Arc::clone(&self.problem.ids[*item]))
                        .collect(),
                });
            }
        }
        None
    }

    fn price(&mut self, floor: usize, in_use: usize, stop: &dyn Stopper) -> Option<FloorProof> {
        let clique = self.clique.as_ref().map_or(&self.start, |search| &search.best);
        let prices = self
            .prices
            .get_or_insert_with(|| Prices::new(self.problem, clique));
        let mut work = 0;
        while work < SLICE && !stop.stop() {
            work += prices.step_size();
            match prices.step(self.problem, floor + 1, in_use) {
                None => {
                    self.prices_wanted = false;
                    eprintln!("prices given up after {} steps", prices.count);
                    return None;
                }
                Some(Some(proof)) => return Some(proof),
                Some(None) => {}
            }
        }
        None
    }
}
