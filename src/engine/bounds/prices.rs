//! A floor from prices: every piece gets a price, each resource takes the dearest chain of
//! pieces it could serve. What the pieces cost together, less what the resources could take
//! beyond the price of one resource, cannot be had with fewer resources (Lagrangian
//! relaxation; Geoffrion 1974).
//!
//! The prices are found in floating point by the volume algorithm (Barahona, Anbil 2000),
//! from several starts, then rounded to whole numbers and counted again in integers: no
//! claim rests on a float. The dearest chain is a linear sweep by end (weighted interval
//! scheduling; Kleinberg, Tardos 2006, 6.1).

use super::chains::{Chains, longest};
use crate::engine::Problem;
use crate::engine::problem::Unit;
use std::sync::Arc;

/// Units tried for whole prices, the plainest first: prices a reader can add up.
const UNITS: [i64; 10] = [1, 2, 3, 4, 6, 12, 60, 840, 27_720, 1_000_000];

/// The dearest a piece may be, in resources.
const MOST_PRICE: f64 = 1e5;

/// Steps from one start at most.
const STEPS_PER_START: u32 = 1_500;

/// Steps without a better value after which a start is given up.
const PATIENCE: u32 = 250;

/// The search for prices; it can be run on and on in slices.
pub(crate) struct Prices {
    chains: Chains,
    /// Where to begin, the next one last.
    starts: Vec<Vec<f64>>,
    ascent: Option<Ascent>,
    scratch: Vec<f64>,
    whole: Vec<i64>,
    /// The relaxation is known to give no more than this.
    ceiling: f64,
    /// No price may be above this.
    caps: Option<Vec<f64>>,
    /// Whole prices are rounded down: up, an item could cost more than its weight.
    down: bool,
}

/// One run of the volume algorithm.
struct Ascent {
    best: Vec<f64>,
    value: f64,
    /// The average of what was taken: nearly a fractional plan.
    cover: Vec<f64>,
    used: f64,
    factor: f64,
    most_new: f64,
    steps: u32,
    since_better: u32,
    failures: u32,
}

impl Prices {
    /// A price for every unit of the problem; `clique` is the best clique known (items): one
    /// of the starts leans on it.
    pub(crate) fn new(problem: &Problem, clique: &[usize]) -> Prices {
        let chains = Chains::of(problem);
        let count = problem.units.len();
        let mut mixed = vec![0.0; count];
        // Long pieces fill a resource: a day's worth of them is worth about one.
        let lengths: Vec<f64> = problem
            .units
            .iter()
            .map(|unit| (unit.core.end - unit.core.start) as f64)
            .collect();
        let longest_chain = longest(&chains, &lengths).max(1.0);
        for (price, length) in mixed.iter_mut().zip(&lengths) {
            *price = 0.6 * length / longest_chain;
        }
        let mut leaning = vec![0.02; count];
        for item in clique {
            let units = problem.unit_places(*item);
            let share = 1.0 / units.len() as f64;
            for unit in units {
                mixed[unit] += 0.4 * share;
                leaning[unit] = 0.9 * share;
            }
        }
        let starts = vec![leaning, mixed, vec![0.0; count]];
        Prices::from(chains, starts)
    }

    /// A search over some chains; the starts are used from the last to the first.
    pub(crate) fn from(chains: Chains, mut starts: Vec<Vec<f64>>) -> Prices {
        for start in &mut starts {
            for (price, usable) in start.iter_mut().zip(&chains.usable) {
                if !usable {
                    *price = 0.0;
                }
            }
        }
        Prices {
            chains,
            starts,
            ascent: None,
            scratch: Vec::new(),
            whole: Vec::new(),
            ceiling: f64::INFINITY,
            caps: None,
            down: false,
        }
    }

    /// A search for how much weight stays out: resources cost nothing, and no piece costs
    /// more than its weight.
    pub(crate) fn out(problem: &Problem) -> Prices {
        let mut chains = Chains::of(problem);
        chains.costs = false;
        // What has no choice at all stays out for its whole weight.
        chains.usable = vec![true; problem.units.len()];
        // The weight of an item is shared out over its units.
        let share = |unit: &Unit| {
            let item = unit.item as usize;
            problem.items[item].weight as f64 / problem.units(item).len() as f64
        };
        let weights: Vec<f64> = problem.units.iter().map(share).collect();
        let half = weights.iter().map(|weight| weight / 2.0).collect();
        let starts = vec![vec![0.0; weights.len()], half, weights.clone()];
        Prices {
            caps: Some(weights),
            down: !problem.single(),
            ..Prices::from(chains, starts)
        }
    }

    /// Work of one step, in entries looked at.
    pub(crate) fn step_size(&self) -> usize {
        self.chains.entries.max(1)
    }

    /// One step towards a floor of `wanted`, with steps as long as `aim` suggests. `None` when there is nothing more to try for
    /// it; else the proof once there is one.
    pub(crate) fn step(&mut self, wanted: usize, aim: usize) -> Option<Option<Whole>> {
        let least = wanted as f64 - 1.0;
        if self.ceiling <= least {
            return None;
        }
        let mut fresh = false;
        let mut ascent = match self.ascent.take() {
            Some(ascent) => ascent,
            None => {
                let start = self.starts.pop()?;
                let taken = self.chains.take(&start, &mut self.scratch);
                fresh = true;
                Ascent {
                    best: start,
                    value: taken.value,
                    cover: taken.cover,
                    used: taken.used,
                    factor: 0.5,
                    most_new: 0.3,
                    steps: 0,
                    since_better: 0,
                    failures: 0,
                }
            }
        };
        // Where it starts from may be enough.
        let better = fresh || self.climb(&mut ascent, aim as f64);
        if better
            && ascent.value > least + 1e-7
            && let Some(proof) = self.whole(&ascent.best, wanted)
        {
            self.ascent = Some(ascent);
            return Some(Some(proof));
        }
        // Nearly a fractional plan that uses no more than the floor: no prices can beat it.
        let lack = |item: usize| {
            if self.chains.usable[item] {
                1.0 - ascent.cover[item]
            } else {
                0.0
            }
        };
        if ascent.used < least && (0..ascent.cover.len()).all(|item| lack(item) < 0.005) {
            self.ceiling = self.ceiling.min(ascent.used);
        }
        if ascent.steps < STEPS_PER_START && ascent.since_better < PATIENCE {
            self.ascent = Some(ascent);
        }
        Some(None)
    }

    /// One step of the volume algorithm; whether the bound grew.
    fn climb(&mut self, ascent: &mut Ascent, target: f64) -> bool {
        ascent.steps += 1;
        let usable = &self.chains.usable;
        let caps = self.caps.as_deref();
        let lack = |ascent: &Ascent, item: usize| {
            let lack = 1.0 - ascent.cover[item];
            let capped = caps.is_some_and(|caps| lack > 0.0 && ascent.best[item] >= caps[item]);
            if !usable[item] || capped || (lack < 0.0 && ascent.best[item] <= 0.0) {
                0.0
            } else {
                lack
            }
        };
        let norm: f64 = (0..usable.len())
            .map(|item| lack(ascent, item).powi(2))
            .sum();
        let gap = (target + 0.05 - ascent.value).max(0.05);
        let step = if norm > 1e-12 {
            ascent.factor * gap / norm
        } else {
            0.0
        };
        let prices: Vec<f64> = (0..usable.len())
            .map(|item| {
                let price = (ascent.best[item] + step * lack(ascent, item)).max(0.0);
                caps.map_or(price, |caps| price.min(caps[item]))
            })
            .collect();
        let taken = self.chains.take(&prices, &mut self.scratch);
        // The share of the new that brings the average nearest to covering everything.
        let (mut along, mut square) = (0.0, 0.0);
        for item in (0..usable.len()).filter(|item| usable[*item]) {
            let turn = taken.cover[item] - ascent.cover[item];
            along += (1.0 - ascent.cover[item]) * turn;
            square += turn * turn;
        }
        let share = if square > 1e-12 {
            along / square
        } else {
            ascent.most_new
        };
        let share = if share < ascent.most_new / 10.0 {
            ascent.most_new / 10.0
        } else {
            share.min(ascent.most_new)
        };
        // Which way the new answer points, measured against the average.
        let agrees: f64 = (0..usable.len())
            .map(|item| lack(ascent, item) * (1.0 - taken.cover[item]))
            .sum();
        for (average, new) in ascent.cover.iter_mut().zip(&taken.cover) {
            *average += share * (new - *average);
        }
        ascent.used += share * (taken.used - ascent.used);
        let better = taken.value > ascent.value + 1e-9;
        if better {
            if taken.value > ascent.value + 1e-4 {
                ascent.since_better = 0;
            }
            ascent.best = prices;
            ascent.value = taken.value;
            ascent.failures = 0;
            if agrees > 0.0 {
                ascent.factor = (ascent.factor * 1.1).min(2.0);
            }
        } else {
            ascent.failures += 1;
            if ascent.failures.is_multiple_of(20) {
                ascent.factor = (ascent.factor * 0.66).max(1e-4);
            }
        }
        ascent.since_better += 1;
        if ascent.steps.is_multiple_of(100) {
            ascent.most_new = (ascent.most_new * 0.7).max(0.005);
        }
        better
    }

    /// Whole prices that give the wanted floor, in the plainest unit.
    fn whole(&mut self, prices: &[f64], wanted: usize) -> Option<Whole> {
        let mut best = Vec::new();
        // Where nothing fits the prices grow without end; audit takes no larger ones.
        if prices.iter().any(|price| *price > MOST_PRICE) {
            return None;
        }
        for unit in UNITS {
            self.whole.clear();
            let round = if self.down { f64::floor } else { f64::round };
            let scaled = prices.iter().map(|price| round(price * unit as f64));
            self.whole.extend(scaled.map(|price| price as i64));
            let value = self.chains.count(&self.whole, unit, &mut best);
            if value >= wanted {
                let prices = (0u32..).zip(&self.whole).filter(|(_, price)| **price > 0);
                return Some(Whole {
                    unit,
                    prices: prices.map(|(item, price)| (item, *price)).collect(),
                    value,
                });
            }
        }
        None
    }

    /// Per resource and unit, how much more it costs at least to have the unit there than the
    /// best prices so far prove; and what they prove.
    pub(crate) fn losses(&self, each: &mut dyn FnMut(u32, u32, f64)) -> Option<f64> {
        let ascent = self.ascent.as_ref()?;
        self.chains.losses(&ascent.best, each);
        Some(ascent.value)
    }

    /// The best prices so far, to begin with elsewhere.
    pub(crate) fn best(&self) -> Option<(&[f64], f64)> {
        let ascent = self.ascent.as_ref()?;
        Some((&ascent.best, ascent.value))
    }
}

/// Whole prices, what one resource costs, and the floor they prove.
pub(crate) struct Whole {
    pub(crate) unit: i64,
    /// Items and their prices, all above 0.
    pub(crate) prices: Vec<(u32, i64)>,
    pub(crate) value: usize,
}

impl Whole {
    /// The same with the names of the pieces.
    pub(crate) fn named(&self, problem: &Problem) -> Vec<(Arc<str>, i64)> {
        let named =
            |(unit, price): &(u32, i64)| (Arc::clone(problem.id_of(*unit as usize)), *price);
        self.prices.iter().map(named).collect()
    }
}
