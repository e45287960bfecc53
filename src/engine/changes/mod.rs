//! Fewest changes: of the plans that leave out no more and use no more resources, one in
//! which the fewest pieces are elsewhere than before, and a proof that no fewer will do.
//!
//! Plans come from ejection (`moves`), the proof from prices: taking a piece costs 1 on every
//! resource but the one it was on, and no choice of dearest chains, on as many resources as
//! may be used, gets around that (Lagrangian relaxation, as in `bounds/prices`). The same
//! prices say which (piece, resource) pairs are of no use within a budget, which makes the
//! search for better plans short.

mod moves;
mod wishes;

pub(crate) use wishes::{FIRST, Places, Wishes};

use super::bounds::chains::Chains;
use super::bounds::prices::Prices;
use super::plans::tabu::Tabu;
use super::plans::{Assignment, NONE, rows};
use super::{Problem, Stopper};
use crate::claim::ChangesProof;
use moves::{Moves, NothingKnown, Useless};
use std::sync::Arc;

/// Unplaced pieces beyond which growing budgets are not tried from the old plan.
const MOST_MISSING: usize = 40;

/// Budgets tried one after the other, in relocations above the least.
const MOST_LEVELS: u64 = 16;

/// Cases of one improving chain.
const CHAIN: u64 = 150;

/// Attempts to lay a few resources out anew between looks at the plan, and how many of such
/// rounds may be in vain.
const ATTEMPTS: u32 = 200;
const IN_VAIN: u32 = 5;

/// Relocations above the least from which on that is worth it before prices are looked at.
const MANY: u64 = 8;

/// Steps of the ascent between looks at what it has come to.
const STEPS: u32 = 20;

/// Steps of the ascent at most.
const MOST_STEPS: u32 = 3_000;

/// Most (piece, resource) pairs that prices are looked for; beyond it only the plan counts.
const MOST_ENTRIES: usize = 3_000_000;

/// Items handled between questions whether to stop.
const POLL: usize = 128;

/// Most (item, resource) pairs for which losses are kept.
const MOST_PAIRS: usize = 4_000_000;

/// What is known of the changes a plan makes.
pub(crate) struct Known {
    /// The plan.
    pub(crate) on: Assignment,
    /// Its relocations against the plan that counts first.
    pub(crate) relocated: u64,
    /// At least so many, and why.
    pub(crate) proof: Option<ChangesProof>,
}

impl Known {
    /// Whether the plan is proved to have the fewest changes.
    pub(crate) fn proved(&self) -> bool {
        let floor = self.proof.as_ref().map_or(0, |proof| proof.value);
        floor as u64 == self.relocated
    }
}

/// The search for fewest changes of plans that leave out what `start` leaves out.
pub(crate) struct Changes<'a> {
    problem: &'a Problem,
    wishes: &'a Wishes,
    /// What one relocation against the plan that counts first costs.
    unit: u64,
    limit: usize,
    skip: Vec<bool>,
    best: Assignment,
    cost: u64,
    /// The least that everything costs by itself.
    least: u64,
}

impl<'a> Changes<'a> {
    /// From a plan, with at most `limit` resources; `two` when two plans count.
    pub(crate) fn new(
        problem: &'a Problem,
        wishes: &'a Wishes,
        two: bool,
        start: &[u32],
        limit: usize,
    ) -> Changes<'a> {
        let skip: Vec<bool> = start.iter().map(|resource| *resource == NONE).collect();
        let least = (0..start.len())
            .filter(|item| !skip[*item])
            .map(|item| wishes.least(item))
            .sum();
        Changes {
            problem,
            wishes,
            unit: if two { FIRST } else { 1 },
            limit,
            cost: match rows::value(problem, start).1 > limit {
                true => u64::MAX,
                false => wishes.total(start),
            },
            best: start.to_vec(),
            skip,
            least,
        }
    }

    /// The best plan so far, if it is one within the limit.
    pub(crate) fn plan(&self) -> Option<&Assignment> {
        (self.cost < u64::MAX).then_some(&self.best)
    }

    fn take(&mut self, on: &[u32]) -> bool {
        let cost = self.wishes.total(on);
        let better = cost < self.cost;
        if better {
            self.best = on.to_vec();
            self.cost = cost;
        }
        better
    }

    /// Relocations of the best plan against the plan that counts first.
    pub(crate) fn relocated(&self) -> u64 {
        self.cost / self.unit
    }

    /// Whether the best plan costs no more than everything does by itself.
    pub(crate) fn at_least(&self) -> bool {
        self.cost == self.least
    }

    /// A plan with few changes in a moment: growing budgets from what can stay as it is, then
    /// short improving chains from the best plan. About `nodes` cases.
    pub(crate) fn quick(&mut self, nodes: u64, stop: &dyn Stopper) {
        self.at_once(nodes, stop);
        if self.cost > self.least && self.cost < u64::MAX {
            self.improve(stop);
        }
    }

    /// Lays a few resources out anew at a time, again and again, as long as that brings
    /// something: for plans in which much has changed.
    pub(crate) fn rearrange(&mut self, seed: u64, stop: &dyn Stopper) {
        let Some(mut tabu) = Tabu::new(self.problem, &self.skip, seed) else {
            return;
        };
        if self.cost == u64::MAX || !tabu.aim(&self.best, self.limit, stop) {
            return;
        }
        tabu.wish(self.wishes);
        let (mut width, mut in_vain) = (4.0, 0);
        while in_vain < IN_VAIN && self.cost > self.least && !stop.stop() {
            tabu.rearrange(ATTEMPTS, &mut width, stop);
            in_vain += 1;
            if rows::value(self.problem, &tabu.on).1 <= self.limit && self.take(&tabu.on) {
                in_vain = 0;
            }
        }
        self.improve(stop);
    }

    /// The first half of that.
    pub(crate) fn at_once(&mut self, nodes: u64, stop: &dyn Stopper) {
        if self.cost > self.least {
            self.deepen(self.least / self.unit, nodes, &NothingKnown, stop);
        }
    }

    fn improve(&mut self, stop: &dyn Stopper) {
        let (problem, wishes) = (self.problem, self.wishes);
        let from = Moves::from(problem, wishes, self.limit, (&self.best, &self.skip), stop);
        let Some(mut moves) = from else { return };
        moves.improve(CHAIN, stop);
        if moves.whole() {
            self.take(&moves.on);
        }
    }

    /// Budgets from `from` relocations on, until a plan is found that is better than the
    /// best or the cases run out.
    fn deepen(&mut self, from: u64, nodes: u64, useless: &dyn Useless, stop: &dyn Stopper) {
        let Some(base) = self.at_home(stop) else {
            return;
        };
        for level in from..from + MOST_LEVELS {
            let budget = level * self.unit + (self.unit - 1);
            // Within the last level the second plan may still gain.
            if self.cost < u64::MAX && level > self.relocated() {
                return;
            }
            let budget = budget.min(self.cost.saturating_sub(1));
            let (problem, wishes) = (self.problem, self.wishes);
            let from = Moves::from(problem, wishes, self.limit, (&base, &self.skip), stop);
            let Some(mut moves) = from else { return };
            if moves.missing() > MOST_MISSING {
                return;
            }
            if moves.search(budget, nodes, useless, stop) {
                self.take(&moves.on);
                return;
            }
            if moves.cut || stop.stop() {
                return;
            }
        }
    }

    /// Everything where it costs least, as far as that fits together; the rest has no place.
    /// `None` when stopped.
    fn at_home(&self, stop: &dyn Stopper) -> Option<Assignment> {
        let mut rows = rows::Rows::empty(self.problem);
        for item in 0..self.skip.len() {
            if item.is_multiple_of(POLL) && stop.stop() {
                return None;
            }
            if let Some(home) = self.wishes.home(item).filter(|_| !self.skip[item])
                && self.problem.allows(item, home as usize)
                && rows.gap(item, home).is_some()
            {
                rows.place(item, home);
            }
        }
        Some(rows.on)
    }

    /// Works on plan and proof until they meet, nothing more comes, or somebody says stop;
    /// `found` hears of every better one.
    pub(crate) fn prove(&mut self, stop: &dyn Stopper, found: &mut dyn FnMut(&Known)) -> Known {
        let out: u64 = self
            .skip
            .iter()
            .zip(&self.problem.items)
            .filter(|(skip, _)| **skip)
            .map(|(_, item)| item.weight)
            .sum();
        let unproved = |changes: &Changes<'_>| Known {
            on: changes.best.clone(),
            relocated: changes.relocated(),
            proof: None,
        };
        let (problem, wishes, unit) = (self.problem, self.wishes, self.unit);
        let cost = |place: usize, resource: usize| {
            let item = problem.units[place].item as usize;
            // An item's cost is its first unit's.
            match problem.unit_places(item).start == place {
                true => (wishes.cost(item, resource as u32) / unit) as i64,
                false => 0,
            }
        };
        // Everything by itself where it costs least: prices of its own for what must move.
        let least = self.least / unit;
        if self.relocated() == least && (out == 0 || least == 0) {
            let own = (0..problem.items.len()).filter(|item| !self.skip[*item]);
            let prices = own
                .map(|item| (item, (wishes.least(item) / unit) as i64))
                .filter(|(_, price)| *price > 0)
                .map(|(item, price)| (Arc::clone(problem.name(item)), price));
            return Known {
                on: self.best.clone(),
                relocated: self.relocated(),
                proof: (least > 0).then(|| ChangesProof {
                    unit: 1,
                    prices: prices.collect(),
                    limit: self.limit,
                    value: least as usize,
                }),
            };
        }
        if self.relocated() > self.least / unit + MANY {
            self.rearrange(1, stop);
        }
        let entries = problem.units.iter().map(|unit| {
            let classes = problem.choices(unit.item as usize).iter();
            let members = classes.map(|class| problem.classes[*class as usize].members.len());
            members.sum::<usize>()
        });
        if stop.stop() || entries.sum::<usize>() > MOST_ENTRIES {
            return unproved(self);
        }
        let Some(chains) = Chains::costing(problem, &cost, self.limit, out, stop) else {
            return unproved(self);
        };
        // By itself everything costs its least: a start that proves as much.
        let start = (0..problem.units.len()).map(|place| {
            let item = problem.units[place].item as usize;
            let first = problem.unit_places(item).start == place;
            if first {
                (wishes.least(item) / unit) as f64
            } else {
                0.0
            }
        });
        let mut prices = Prices::from(chains, vec![start.collect()]);
        let mut known = Known {
            on: self.best.clone(),
            relocated: self.relocated(),
            proof: None,
        };
        let mut steps = 0;
        let mut searched = None;
        while !known.proved() && steps < MOST_STEPS && !stop.stop() {
            let floor = known.proof.as_ref().map_or(0, |proof| proof.value);
            let mut news = false;
            for _ in 0..STEPS {
                steps += 1;
                match prices.step(floor + 1, known.relocated as usize) {
                    None => steps = MOST_STEPS,
                    Some(Some(whole)) => {
                        known.proof = Some(ChangesProof {
                            unit: whole.unit,
                            prices: whole.named(problem),
                            limit: self.limit,
                            value: whole.value,
                        });
                        news = true;
                        break;
                    }
                    Some(None) => {}
                }
                if stop.stop() || steps >= MOST_STEPS {
                    break;
                }
            }
            let floor = known.proof.as_ref().map_or(0, |proof| proof.value);
            // What the prices rule out makes the search short; once for each floor.
            let due = steps >= 3 * STEPS && searched != Some(floor);
            if !known.proved() && (due || steps >= MOST_STEPS) {
                searched = Some(floor);
                if let Some(losses) = Losses::of(problem, &prices, unit) {
                    self.deepen(floor as u64, 4_000, &losses, stop);
                }
                if self.relocated() > floor as u64 {
                    self.rearrange(u64::from(steps), stop);
                }
                if self.relocated() < known.relocated {
                    (known.on, known.relocated) = (self.best.clone(), self.relocated());
                    news = true;
                }
            }
            if news {
                found(&known);
            }
        }
        known
    }
}

/// What it costs at least to have an item on a resource, by prices.
struct Losses {
    width: usize,
    unit: u64,
    /// Relocations, per item and resource.
    least: Vec<f32>,
}

impl Losses {
    fn of(problem: &Problem, prices: &Prices, unit: u64) -> Option<Losses> {
        let width = problem.resources.len();
        if width * problem.items.len() > MOST_PAIRS {
            return None;
        }
        let mut least = vec![0f32; width * problem.items.len()];
        let value = prices.losses(&mut |resource, place, loss| {
            let item = problem.units[place as usize].item as usize;
            let cell = &mut least[item * width + resource as usize];
            *cell = cell.max(loss as f32);
        })?;
        for cell in &mut least {
            *cell += value as f32;
        }
        Some(Losses { width, unit, least })
    }
}

impl Useless for Losses {
    fn useless(&self, item: usize, resource: u32, budget: u64) -> bool {
        let least = self.least[item * self.width + resource as usize];
        // A hair's breadth for what floats lose: the proof does not rest on them.
        f64::from(least) > (budget / self.unit) as f64 + 1e-3
    }
}
