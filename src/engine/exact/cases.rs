//! A proof by cases: put one piece on each resource that is left for it, in turn, and refute
//! every case. The piece with the fewest choices comes first, then the one that overlaps
//! most (after Brelaz 1979). A case is refuted when a piece has no resource left, when at
//! one moment too few are left for those that run (Hall 1935), or by prices. Of alike
//! resources not in use only one is tried.
//!
//! The tree is the proof; when every case but one fails, what remains may be a plan.

use super::left::Left;
use crate::claim::Case;
use crate::clock::Instant;
use crate::engine::bounds::chains::Chains;
use crate::engine::bounds::prices::Prices;
use crate::engine::plans::{Assignment, NONE};
use crate::engine::{Problem, Stopper};
use std::sync::Arc;

/// What came of it.
pub(crate) enum Outcome {
    /// Fewer resources cannot do.
    Refuted(Case),
    /// They can, for the part that was looked at: the resource of each item.
    Plan(Assignment),
    /// Too many cases, or stopped.
    Open,
}

/// Cases within cases beyond which the search goes no deeper.
const DEEPEST: usize = 200;

/// Prices are only looked at while there are few (piece, resource) pairs.
const MOST_PRICED: usize = 6_000;

/// Steps of the volume algorithm in one case.
const PRICE_STEPS: u32 = 60;

/// Tries to refute that the items, a part of a problem, can do with fewer resources than
/// `wanted`, within so many cases. `work` grows by about the number of entries looked at.
pub(crate) fn refute(
    problem: &Problem,
    items: &[usize],
    wanted: usize,
    most: u32,
    work: &mut u64,
    stop: &dyn Stopper,
) -> Outcome {
    let items: Vec<u32> = items.iter().map(|item| *item as u32).collect();
    let Some(left) = Left::new(problem, items, wanted) else {
        return Outcome::Open;
    };
    let degree = |item: &u32| {
        let others = left.items.iter();
        others
            .filter(|other| problem.overlap(*item as usize, **other as usize))
            .count() as u32
    };
    let units = left
        .items
        .iter()
        .flat_map(|item| problem.units(*item as usize));
    let mut moments: Vec<i64> = units.map(|unit| unit.core.start.0).collect();
    moments.sort_unstable();
    moments.dedup();
    let mut search = Search {
        degree: left.items.iter().map(degree).collect(),
        running: moments
            .iter()
            .map(|at| {
                let runs = |item: &usize| {
                    let units = problem.units(left.items[*item] as usize).iter();
                    units.clone().any(|unit| unit.core.contains(Instant(*at)))
                };
                (*at, (0..left.items.len()).filter(runs).collect())
            })
            .collect(),
        left,
        budget: most,
        per_case: 0,
        work: 0,
        stop,
        plan: None,
    };
    let start = vec![0.0; search.left.units.len()];
    let pairs: usize = search.left.usable.iter().map(Vec::len).sum();
    search.per_case = (4 * pairs + search.running.len() * search.left.resources.len()) as u64;
    let found = search.refute(0, &start, None);
    *work += search.work;
    match found {
        Some(case) => Outcome::Refuted(case),
        None => search.plan.map_or(Outcome::Open, Outcome::Plan),
    }
}

struct Search<'a> {
    left: Left<'a>,
    degree: Vec<u32>,
    /// Moments, and who runs then.
    running: Vec<(i64, Vec<usize>)>,
    budget: u32,
    /// What one case costs, about, without its prices.
    per_case: u64,
    work: u64,
    stop: &'a dyn Stopper,
    plan: Option<Assignment>,
}

impl Search<'_> {
    fn name(&self, item: usize) -> Arc<str> {
        Arc::clone(self.left.problem.name(self.left.items[item] as usize))
    }

    /// The piece of an item that runs at a moment.
    fn name_at(&self, item: usize, at: Instant) -> Arc<str> {
        let problem = self.left.problem;
        let mut units = problem.unit_places(self.left.items[item] as usize);
        let unit = units.find(|unit| problem.units[*unit].core.contains(at));
        unit.map_or_else(|| self.name(item), |unit| Arc::clone(problem.id_of(unit)))
    }

    /// A refutation of the case at hand; `None` when there is none to be had: then a plan
    /// may have been found. `last` is the piece that was put somewhere just now.
    fn refute(&mut self, depth: usize, prices: &[f64], last: Option<usize>) -> Option<Case> {
        if self.budget == 0 || depth > DEEPEST || self.stop.stop() {
            return None;
        }
        self.budget -= 1;
        self.work += self.per_case;
        let mut chosen: Option<(usize, Vec<usize>)> = None;
        for item in 0..self.left.items.len() {
            if self.left.placed(item).is_some() {
                continue;
            }
            let choices = self.left.choices(item);
            if choices.is_empty() {
                return Some(Case::NoPlace {
                    piece: self.name(item),
                });
            }
            let key = |item: usize, count: usize| (count, std::cmp::Reverse(self.degree[item]));
            if chosen
                .as_ref()
                .is_none_or(|(best, list)| key(item, choices.len()) < key(*best, list.len()))
            {
                chosen = Some((item, choices));
            }
        }
        let Some((item, choices)) = chosen else {
            self.keep_plan();
            return None;
        };
        if let Some(case) = self.short(last) {
            return Some(case);
        }
        let mut better = None;
        if choices.len() > 1 {
            match self.priced(prices) {
                Ok(case) => return Some(case),
                Err(found) => better = found,
            }
        }
        let prices = better.as_deref().unwrap_or(prices);
        let mut on = Vec::with_capacity(choices.len());
        for r in choices {
            self.left.put(item, r);
            let case = self.refute(depth + 1, prices, Some(item));
            self.left.lift(item);
            let resource = self.left.resources[r] as usize;
            on.push((Arc::clone(&self.left.problem.resources[resource]), case?));
        }
        Some(Case::Place {
            piece: self.name(item),
            on,
        })
    }

    fn keep_plan(&mut self) {
        let mut on = vec![NONE; self.left.problem.items.len()];
        for (at, item) in self.left.items.iter().enumerate() {
            if let Some(r) = self.left.placed(at) {
                on[*item as usize] = self.left.resources[r];
            }
        }
        self.plan = Some(on);
    }

    /// A moment at which too few resources are left for those that run and have no place,
    /// among the moments that the last piece has changed.
    fn short(&self, last: Option<usize>) -> Option<Case> {
        let width = self.left.resources.len();
        let fresh = self.left.wanted.saturating_sub(1 + self.left.in_use);
        let core = |item: usize| self.left.problem.items[self.left.items[item] as usize].core;
        // Once no more resources may begin, every moment is as tight; what has several units
        // changes moments far apart.
        let single = self.left.problem.single();
        let near = last.filter(|_| fresh > 0 && single).map(core);
        for (at, running) in &self.running {
            if near.is_some_and(|near| {
                Instant(*at) >= near.end || running.iter().all(|i| core(*i).end <= near.start)
            }) {
                continue;
            }
            let waiting: Vec<usize> = running
                .iter()
                .copied()
                .filter(|item| self.left.placed(*item).is_none())
                .collect();
            if waiting.len() < 2 {
                continue;
            }
            // Bipartite matching by augmenting paths (Kuhn 1955).
            let mut taken: Vec<Option<usize>> = vec![None; width];
            for item in &waiting {
                let mut seen = vec![false; width];
                if !self.augment(*item, &mut seen, &mut taken) {
                    // Whoever was reached on the way competes for no more than was seen.
                    let reached = (0..width).filter(|r| seen[*r]).filter_map(|r| taken[r]);
                    let mut pieces: Vec<usize> = reached.chain([*item]).collect();
                    pieces.sort_unstable();
                    return Some(self.shortage(*at, &pieces));
                }
            }
            // All of them together may need more resources to begin than may.
            let held = (0..width).filter(|r| self.left.holds[*r] > 0);
            let held = held
                .filter(|r| waiting.iter().any(|item| self.left.open(*item, *r)))
                .count();
            if waiting.len() > held + fresh {
                return Some(self.shortage(*at, &waiting));
            }
        }
        None
    }

    fn shortage(&self, at: i64, pieces: &[usize]) -> Case {
        Case::Short {
            at: Instant(at),
            pieces: pieces
                .iter()
                .map(|item| self.name_at(*item, Instant(at)))
                .collect(),
        }
    }

    fn augment(&self, item: usize, seen: &mut [bool], taken: &mut [Option<usize>]) -> bool {
        for r in &self.left.usable[item] {
            let r = *r as usize;
            if seen[r] || !self.left.open(item, r) {
                continue;
            }
            seen[r] = true;
            if taken[r].is_none_or(|other| self.augment(other, seen, taken)) {
                taken[r] = Some(item);
                return true;
            }
        }
        false
    }

    /// A refutation by prices, or the best prices that were found.
    fn priced(&mut self, start: &[f64]) -> Result<Case, Option<Vec<f64>>> {
        let chains = self.left.chains();
        let pairs: usize = chains.iter().map(|held| held.takers.len()).sum();
        if pairs > MOST_PRICED {
            return Err(None);
        }
        let chains = Chains::left(self.left.units.len(), chains);
        let mut search = Prices::from(chains, vec![start.to_vec()]);
        for step in 0..PRICE_STEPS {
            self.work += 2 * pairs as u64;
            match search.step(self.left.wanted, self.left.wanted) {
                None => break,
                Some(Some(whole)) => {
                    let prices = whole.prices.iter();
                    return Ok(Case::Prices {
                        unit: whole.unit,
                        prices: prices
                            .map(|(unit, price)| {
                                let unit = self.left.units[*unit as usize];
                                (Arc::clone(self.left.problem.id_of(unit)), *price)
                            })
                            .collect(),
                    });
                }
                // Far below what is wanted: not worth more.
                Some(None) => {
                    let value = search.best().map_or(0.0, |(_, value)| value);
                    if step == PRICE_STEPS / 2 && value < self.left.wanted as f64 - 2.0 {
                        break;
                    }
                }
            }
        }
        Err(search.best().map(|(prices, _)| prices.to_vec()))
    }
}
