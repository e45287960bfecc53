//! The floors, one rung after the other: each gets a slice in turn, as long as it may still
//! give something.

use super::incompatible;
use super::prices::Prices;
use crate::claim::{Case, FloorProof, OutPrices};
use crate::clock::Span;
use crate::engine::exact::cases::{self, Outcome};
use crate::engine::plans::Assignment;
use crate::engine::{Problem, Stopper};
use std::sync::Arc;

/// Entries looked at in one slice: some ten milliseconds.
const SLICE: u64 = 3_000_000;

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
    cases: Cases,
    out: Option<Prices>,
    out_wanted: bool,
    /// Only incompatibility cliques are looked for.
    only: bool,
    /// About how many entries have been looked at.
    pub(crate) work: u64,
}

/// How far the proof by cases has come.
#[derive(Default)]
struct Cases {
    /// What it is to refute.
    wanted: usize,
    /// Parts of the problem that may be enough for it.
    parts: Option<Vec<Vec<usize>>>,
    next: usize,
    round: usize,
}

/// Cases looked at in each part, round by round; the last is also the longest proof that is
/// worth keeping.
const ROUNDS: [u32; 4] = [200, 1_000, 5_000, 20_000];

/// Most pieces in a part.
const PART: usize = 250;

/// Parts besides the one that has prices.
const MOST_PARTS: usize = 8;

/// With so few pieces the cases come first.
const SMALL: usize = 40;

impl Cases {
    fn over(&self) -> bool {
        self.round >= ROUNDS.len()
    }
}

/// What a slice found.
pub(crate) enum Found {
    /// A higher floor.
    Floor(FloorProof),
    /// A plan with less than was to be refuted.
    Plan(Assignment),
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
            cases: Cases::default(),
            out: None,
            out_wanted: true,
            only: false,
            work: 0,
        }
    }

    /// Whether prices may still show that more stays out.
    pub(crate) fn out_wanted(&self) -> bool {
        self.out_wanted
    }

    /// One slice towards a proof that more than a weight of `known` stays out, where a plan
    /// leaves out `left_out`.
    pub(crate) fn stays_out(
        &mut self,
        known: u64,
        left_out: u64,
        stop: &dyn Stopper,
    ) -> Option<OutPrices> {
        let out = self.out.get_or_insert_with(|| Prices::out(self.problem));
        let until = self.work + SLICE;
        while self.work < until && !stop.stop() {
            self.work += 2 * out.step_size() as u64;
            match out.step(known as usize + 1, left_out as usize) {
                None => {
                    self.out_wanted = false;
                    return None;
                }
                Some(Some(whole)) => {
                    return Some(OutPrices {
                        unit: whole.unit,
                        prices: whole.named(self.problem),
                        weight: whole.value as u64,
                    });
                }
                Some(None) => {}
            }
        }
        None
    }

    /// Gives up everything but incompatibility cliques.
    pub(crate) fn only_cliques(&mut self, only: bool) {
        self.only = only;
        self.prices_wanted &= !only;
    }

    /// Whether nothing new has come for so long that time is better spent elsewhere.
    pub(crate) fn stale(&self) -> bool {
        let large = self.problem.items.len() > PART;
        let cases = self.only || self.cases.over() || (large && self.cases.round > 0);
        !self.prices_wanted && cases && (!self.clique_wanted || self.climbs >= STALE)
    }

    /// Whether there is nothing at all left to try.
    pub(crate) fn spent(&self) -> bool {
        !self.prices_wanted && !self.clique_wanted && (self.only || self.cases.over())
    }

    /// One slice towards a floor above `floor`, at most `aim`: what the best plan uses, or
    /// one more than there are resources when something has no place (`placing`).
    pub(crate) fn slice(
        &mut self,
        floor: usize,
        aim: usize,
        placing: bool,
        stop: &dyn Stopper,
    ) -> Option<Found> {
        // When there are few pieces, going through the cases settles it at once.
        let wanted = if placing { aim } else { floor + 1 };
        let small = self.problem.items.len() <= SMALL && self.cases.round == 0 && !self.only;
        if small && let Some(found) = self.refute(wanted, stop) {
            return Some(found);
        }
        if self.clique_wanted
            && let Some(proof) = self.climb(floor, stop)
        {
            return Some(Found::Floor(proof));
        }
        if self.prices_wanted {
            return self.price(floor, aim, stop).map(Found::Floor);
        }
        match self.only {
            true => None,
            false => self.refute(wanted, stop),
        }
    }

    /// One part of the problem, case by case.
    fn refute(&mut self, wanted: usize, stop: &dyn Stopper) -> Option<Found> {
        if self.cases.wanted != wanted {
            // Parts that were found to do with less than the old number may not do with less
            // than a smaller one.
            let parts = self.cases.parts.take();
            let parts = parts.filter(|_| self.cases.wanted < wanted);
            self.cases = Cases {
                wanted,
                parts,
                ..Cases::default()
            };
        }
        let most = *ROUNDS.get(self.cases.round)?;
        if self.cases.parts.is_none() {
            self.cases.parts = Some(self.parts());
        }
        let parts = self.cases.parts.as_deref().unwrap_or_default();
        let Some(part) = parts.get(self.cases.next) else {
            self.cases.next = 0;
            self.cases.round = if parts.is_empty() {
                ROUNDS.len()
            } else {
                self.cases.round + 1
            };
            return None;
        };
        self.cases.next += 1;
        match cases::refute(self.problem, part, wanted, most, &mut self.work, stop) {
            // Where prices refute it all, nothing had to be told apart.
            Outcome::Refuted(Case::Prices { unit, prices }) => {
                Some(Found::Floor(FloorProof::Prices {
                    unit,
                    prices,
                    value: wanted,
                }))
            }
            Outcome::Refuted(tree) => Some(Found::Floor(FloorProof::Cases {
                value: wanted,
                tree,
            })),
            Outcome::Plan(plan) => {
                let whole = part.len() == self.problem.items.len();
                // What can be done for this part will not be refuted.
                if let Some(parts) = &mut self.cases.parts {
                    self.cases.next -= 1;
                    parts.remove(self.cases.next);
                }
                whole.then_some(Found::Plan(plan))
            }
            Outcome::Open => None,
        }
    }

    /// Parts that may be enough: everything when it is small, what has a price, and what
    /// runs together without a gap, the largest load first.
    fn parts(&self) -> Vec<Vec<usize>> {
        let usable = |item: &usize| !self.problem.choices(*item).is_empty();
        let all: Vec<usize> = (0..self.problem.items.len()).filter(usable).collect();
        if all.len() <= PART {
            return vec![all];
        }
        let mut parts = Vec::new();
        if let Some((prices, _)) = self.prices.as_ref().and_then(Prices::best) {
            let mut dear = all.clone();
            let price =
                |item: &usize| -> f64 { prices[self.problem.unit_places(*item)].iter().sum() };
            dear.sort_by(|a, b| price(b).total_cmp(&price(a)));
            dear.truncate(PART);
            dear.retain(|item| price(item) > 0.01);
            dear.sort_unstable();
            parts.push(dear);
        }
        let mut by_start = all;
        // From the first unit to the last.
        let hull = |item: usize| {
            let units = self.problem.units(item);
            let end = units.iter().map(|unit| unit.core.end).max();
            let core = self.problem.items[item].core;
            Span {
                start: core.start,
                end: end.unwrap_or(core.end),
            }
        };
        by_start.sort_by_key(|item| hull(*item));
        let mut together: Vec<Vec<usize>> = Vec::new();
        let mut end = None;
        for item in by_start {
            let core = hull(item);
            if end.is_none_or(|end| end <= core.start) {
                together.push(Vec::new());
            }
            end = end.max(Some(core.end));
            if let Some(last) = together.last_mut() {
                last.push(item);
            }
        }
        together.retain(|part| part.len() <= PART);
        let load = |part: &Vec<usize>| {
            let units = part.iter().flat_map(|item| self.problem.units(*item));
            crate::overlap::largest_load(&units.map(|unit| unit.core).collect::<Vec<_>>())
        };
        together.sort_by_cached_key(|part| std::cmp::Reverse(load(part)));
        together.truncate(MOST_PARTS);
        parts.extend(together);
        parts
    }

    fn climb(&mut self, floor: usize, stop: &dyn Stopper) -> Option<FloorProof> {
        if self.clique.is_none() {
            self.clique = incompatible::Search::new(self.problem, &self.start, self.seed, stop);
            self.clique_wanted = self.clique.is_some();
        }
        let search = self.clique.as_mut()?;
        let until = self.work + SLICE;
        while self.work < until && !stop.stop() {
            self.work += search.climb() as u64;
            self.climbs += 1;
            if search.best.len() > floor {
                self.climbs = 0;
                let pieces = search.best.iter();
                return Some(FloorProof::Incompatible {
                    pieces: pieces
                        .map(|item| Arc::clone(self.problem.name(*item)))
                        .collect(),
                });
            }
        }
        None
    }

    fn price(&mut self, floor: usize, in_use: usize, stop: &dyn Stopper) -> Option<FloorProof> {
        let clique = self
            .clique
            .as_ref()
            .map_or(&self.start, |search| &search.best);
        let prices = self
            .prices
            .get_or_insert_with(|| Prices::new(self.problem, clique));
        let until = self.work + SLICE;
        while self.work < until && !stop.stop() {
            self.work += 2 * prices.step_size() as u64;
            match prices.step(floor + 1, in_use) {
                None => {
                    self.prices_wanted = false;
                    return None;
                }
                Some(Some(whole)) => {
                    return Some(FloorProof::Prices {
                        unit: whole.unit,
                        prices: whole.named(self.problem),
                        value: whole.value,
                    });
                }
                Some(None) => {}
            }
        }
        None
    }
}
