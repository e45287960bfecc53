//! A floor from prices: every piece gets a price, each resource takes the dearest chain of
//! pieces it could serve. What the pieces cost together, less what the resources could take
//! beyond the price of one resource, cannot be had with fewer resources (Lagrangian
//! relaxation; Geoffrion 1974).
//!
//! The prices are found in floating point by the volume algorithm (Barahona, Anbil 2000),
//! from several starts, then rounded to whole numbers and counted again in integers: no
//! claim rests on a float. The dearest chain is a linear sweep by end (weighted interval
//! scheduling; Kleinberg, Tardos 2006, 6.1).

use crate::engine::problem::Unit;
use crate::engine::{Problem, Stopper};
use std::sync::Arc;

/// The takers of a class by the end of what they occupy.
struct Chain {
    members: u32,
    /// They are in use whatever happens: their own price is due.
    forced: bool,
    items: Vec<u32>,
    /// Per taker, how many takers have ended when it starts.
    before: Vec<u32>,
    /// Per taker, what it costs here beside its price; empty when nothing does.
    costs: Vec<i64>,
}

/// A resource on which some pieces may already have been put.
pub(crate) struct Held {
    /// It is in use whatever happens.
    pub(crate) forced: bool,
    /// What it holds and who it is left for: end and start of what they occupy, and the
    /// item, by end.
    pub(crate) takers: Vec<(i64, i64, u32)>,
}

/// The chains of a problem.
pub(crate) struct Chains {
    list: Vec<Chain>,
    /// The resource of each chain, where every resource has one of its own.
    resources: Vec<u32>,
    /// Items with any choice.
    usable: Vec<bool>,
    /// Entries in all chains together.
    pub(super) entries: usize,
    /// Whether one resource costs 1, or nothing.
    costs: bool,
    /// Most resources that may take anything.
    limit: Option<usize>,
    /// What may be left out.
    out: Option<Out>,
}

/// Leaving out some weight: at best the dearest for their weight (the fractional knapsack;
/// Dantzig 1957).
struct Out {
    /// Per item its units and its weight.
    items: Vec<(std::ops::Range<usize>, u64)>,
    weight: u64,
}

impl Out {
    /// What can be saved by leaving out; `cover` grows by what is.
    fn left_out(&self, prices: &[f64], cover: &mut [f64]) -> f64 {
        let price = |at: usize| -> f64 { prices[self.items[at].0.clone()].iter().sum() };
        let mut dear: Vec<(f64, usize)> = (0..self.items.len())
            .map(|at| (price(at) / self.items[at].1.max(1) as f64, at))
            .filter(|(ratio, _)| *ratio > 0.0)
            .collect();
        dear.sort_by(|a, b| b.0.total_cmp(&a.0));
        let (mut left, mut saved) = (self.weight as f64, 0.0);
        for (ratio, at) in dear {
            let (units, weight) = &self.items[at];
            let share = (left / (*weight).max(1) as f64).min(1.0);
            if share <= 0.0 {
                break;
            }
            saved += share * ratio * (*weight).max(1) as f64;
            left -= share * (*weight).max(1) as f64;
            for unit in units.clone() {
                cover[unit] += share;
            }
        }
        saved
    }

    /// The same in whole numbers, never less.
    fn left_out_whole(&self, prices: &[i64]) -> i64 {
        let price = |at: usize| -> i64 { prices[self.items[at].0.clone()].iter().sum() };
        let mut dear: Vec<(i64, i64)> = (0..self.items.len())
            .map(|at| (price(at), self.items[at].1.max(1) as i64))
            .filter(|(price, _)| *price > 0)
            .collect();
        dear.sort_by(|a, b| {
            (i128::from(b.0) * i128::from(a.1)).cmp(&(i128::from(a.0) * i128::from(b.1)))
        });
        let (mut left, mut saved) = (self.weight as i64, 0);
        for (price, weight) in dear {
            if weight <= left {
                (saved, left) = (saved + price, left - weight);
            } else {
                let part = (i128::from(price) * i128::from(left) + i128::from(weight) - 1)
                    / i128::from(weight);
                return saved + part as i64;
            }
        }
        saved
    }
}

/// What a resource takes beyond its own price, and the pieces it takes for that.
struct Taken {
    /// Lower bound that the prices give.
    value: f64,
    /// Per item, how many resources take it.
    cover: Vec<f64>,
    /// Resources that take anything.
    used: f64,
}

/// `takers` with end and start, by end.
fn chain(members: u32, forced: bool, takers: &[(i64, i64, u32)]) -> Chain {
    let before = |start: i64| takers.partition_point(|(end, ..)| *end <= start) as u32;
    Chain {
        members,
        forced,
        items: takers.iter().map(|(_, _, item)| *item).collect(),
        before: takers.iter().map(|(_, start, _)| before(*start)).collect(),
        costs: Vec::new(),
    }
}

impl Chain {
    /// Per number of takers looked at, the most that a chain among them is worth.
    fn fill(&self, prices: &[f64], best: &mut Vec<f64>) {
        best.clear();
        best.push(0.0);
        if self.costs.is_empty() {
            for (at, item) in self.items.iter().enumerate() {
                let with = prices[*item as usize] + best[self.before[at] as usize];
                best.push(best[at].max(with));
            }
            return;
        }
        for (at, item) in self.items.iter().enumerate() {
            let with = prices[*item as usize] - self.cost(at) + best[self.before[at] as usize];
            best.push(best[at].max(with));
        }
    }

    /// What a taker costs here, in resources.
    fn cost(&self, at: usize) -> f64 {
        self.costs.get(at).map_or(0.0, |cost| *cost as f64)
    }
}

impl Chains {
    pub(crate) fn of(problem: &Problem) -> Chains {
        let mut takers: Vec<Vec<(i64, i64, u32)>> = vec![Vec::new(); problem.classes.len()];
        for (at, unit) in problem.units.iter().enumerate() {
            for class in problem.choices(unit.item as usize) {
                let span = problem.occupied(at, *class);
                takers[*class as usize].push((span.end.0, span.start.0, at as u32));
            }
        }
        let list = takers.into_iter().zip(&problem.classes);
        let list: Vec<Chain> = list
            .filter(|(takers, _)| !takers.is_empty())
            .map(|(mut takers, class)| {
                takers.sort_unstable();
                chain(class.members.len() as u32, false, &takers)
            })
            .collect();
        Chains {
            entries: list.iter().map(|chain| chain.items.len()).sum(),
            usable: problem
                .units
                .iter()
                .map(|unit| !problem.choices(unit.item as usize).is_empty())
                .collect(),
            list,
            resources: Vec::new(),
            costs: true,
            limit: None,
            out: None,
        }
    }

    /// The chains of single resources where taking something costs what `cost` says (unit and
    /// resource), resources are free, at most `limit` of them may take anything, and a weight
    /// of `out` may be left out. `None` when stopped.
    pub(crate) fn costing(
        problem: &Problem,
        cost: &dyn Fn(usize, usize) -> i64,
        limit: usize,
        out: u64,
        stop: &dyn Stopper,
    ) -> Option<Chains> {
        if stop.stop() {
            return None;
        }
        let mut chains = Chains::of(problem);
        chains.costs = false;
        chains.limit = Some(limit);
        let items = 0..problem.items.len();
        chains.out = (out > 0).then(|| Out {
            items: items
                .map(|item| (problem.unit_places(item), problem.items[item].weight))
                .collect(),
            weight: out,
        });
        let classes = std::mem::take(&mut chains.list);
        // Classes without takers have no chain.
        let mut taken = vec![false; problem.classes.len()];
        for unit in &problem.units {
            for class in problem.choices(unit.item as usize) {
                taken[*class as usize] = true;
            }
        }
        let with_takers = problem
            .classes
            .iter()
            .zip(taken)
            .filter(|(_, taken)| *taken);
        for (chain, (class, _)) in classes.into_iter().zip(with_takers) {
            for member in &class.members {
                if stop.stop() {
                    return None;
                }
                let units = chain.items.iter();
                chains.list.push(Chain {
                    members: 1,
                    forced: false,
                    items: chain.items.clone(),
                    before: chain.before.clone(),
                    costs: units
                        .map(|unit| cost(*unit as usize, *member as usize))
                        .collect(),
                });
                chains.resources.push(*member);
            }
        }
        chains.entries = chains.list.iter().map(|chain| chain.items.len()).sum();
        Some(chains)
    }

    /// The chains of single resources with what is left for each of them.
    pub(crate) fn left(count: usize, resources: Vec<Held>) -> Chains {
        let mut usable = vec![false; count];
        let list: Vec<Chain> = resources
            .into_iter()
            .map(|Held { forced, takers }| {
                for (_, _, item) in &takers {
                    usable[*item as usize] = true;
                }
                chain(1, forced, &takers)
            })
            .collect();
        Chains {
            entries: list.iter().map(|chain| chain.items.len()).sum(),
            usable,
            list,
            resources: Vec::new(),
            costs: true,
            limit: None,
            out: None,
        }
    }

    /// The bound at some prices (one resource costs 1), and who takes what.
    fn take(&self, prices: &[f64], best: &mut Vec<f64>) -> Taken {
        let mut taken = Taken {
            value: prices.iter().sum(),
            cover: vec![0.0; prices.len()],
            used: 0.0,
        };
        if let Some(out) = &self.out {
            taken.value -= out.left_out(prices, &mut taken.cover);
        }
        let limit = self.limit.filter(|limit| *limit < self.list.len());
        let least = limit.map(|limit| self.limit_value(prices, limit, best));
        let mut ties = least.map_or(usize::MAX, |(_, ties)| ties);
        for chain in &self.list {
            chain.fill(prices, best);
            let mut at = chain.items.len();
            let dearest = best[at];
            let cost = if self.costs { 1.0 } else { 0.0 };
            if dearest <= cost && !chain.forced {
                continue;
            }
            if let Some((least, _)) = least {
                // Only so many of the dearest may take anything.
                if dearest < least || (dearest == least && ties == 0) {
                    continue;
                }
                ties -= usize::from(dearest == least);
            }
            let members = f64::from(chain.members);
            taken.value -= members * (dearest - cost);
            if chain.costs.is_empty() {
                taken.used += members;
            }
            while at > 0 {
                if best[at] > best[at - 1] {
                    taken.cover[chain.items[at - 1] as usize] += members;
                    taken.used += chain.cost(at - 1);
                    at = chain.before[at - 1] as usize;
                } else {
                    at -= 1;
                }
            }
        }
        taken
    }

    /// The worth of the dearest chain of the last resource that may still take anything, and
    /// how many that are worth as much may.
    fn limit_value(&self, prices: &[f64], limit: usize, best: &mut Vec<f64>) -> (f64, usize) {
        let worth = |chain: &Chain, best: &mut Vec<f64>| {
            chain.fill(prices, best);
            best[chain.items.len()]
        };
        let mut all: Vec<f64> = self.list.iter().map(|chain| worth(chain, best)).collect();
        if limit == 0 {
            return (f64::INFINITY, 0);
        }
        let (_, last, _) = all.select_nth_unstable_by(limit - 1, |a, b| b.total_cmp(a));
        let last = *last;
        let above = all.iter().filter(|worth| **worth > last).count();
        (last, limit - above)
    }

    /// The bound that whole prices give when one resource (or a cost of 1) costs `unit`.
    pub(crate) fn count(&self, prices: &[i64], unit: i64, best: &mut Vec<i64>) -> usize {
        let mut value: i64 = prices.iter().sum();
        let mut worths = Vec::new();
        for chain in &self.list {
            best.clear();
            best.push(0);
            for (at, item) in chain.items.iter().enumerate() {
                let cost = chain.costs.get(at).map_or(0, |cost| cost * unit);
                let with = prices[*item as usize] - cost + best[chain.before[at] as usize];
                best.push(best[at].max(with));
            }
            let cost = if self.costs { unit } else { 0 };
            let mut beyond = best[chain.items.len()] - cost;
            if !chain.forced {
                beyond = beyond.max(0);
            }
            match self.limit {
                Some(_) => worths.push(beyond),
                None => value -= i64::from(chain.members) * beyond,
            }
        }
        if let Some(out) = &self.out {
            value -= out.left_out_whole(prices);
        }
        if let Some(limit) = self.limit {
            worths.sort_unstable_by_key(|worth| std::cmp::Reverse(*worth));
            value -= worths.iter().take(limit).sum::<i64>();
        }
        usize::try_from((value.max(0) + unit - 1) / unit).unwrap_or(0)
    }
}

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

    /// Per chain's resource and unit, how much more it costs at least to have the unit there
    /// than the best prices so far prove; and what they prove.
    pub(crate) fn losses(&self, each: &mut dyn FnMut(u32, u32, f64)) -> Option<f64> {
        let ascent = self.ascent.as_ref()?;
        let prices = &ascent.best;
        let chains = &self.chains;
        let (mut forward, mut worths) = (Vec::new(), Vec::with_capacity(chains.list.len()));
        for chain in &chains.list {
            chain.fill(prices, &mut forward);
            worths.push(forward[chain.items.len()]);
        }
        let last = match chains.limit {
            Some(limit) if limit > 0 && limit < worths.len() => {
                let mut sorted = worths.clone();
                sorted.sort_by(|a, b| b.total_cmp(a));
                sorted[limit - 1]
            }
            _ => 0.0,
        };
        for ((chain, resource), worth) in chains.list.iter().zip(&chains.resources).zip(worths) {
            chain.fill(prices, &mut forward);
            let count = chain.items.len();
            // The dearest chain that begins after so many takers have ended.
            let mut after = vec![0.0f64; count + 2];
            let mut first = vec![f64::NEG_INFINITY; count + 2];
            for at in (0..count).rev() {
                after[at + 1] = after[at + 2].max(first[at + 1]);
                let own = prices[chain.items[at] as usize] - chain.cost(at);
                let from = chain.before[at] as usize;
                first[from] = first[from].max(own + after[at + 1]);
                let through = forward[from] + own + after[at + 1];
                each(*resource, chain.items[at], worth.max(last) - through);
            }
        }
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

/// The longest that any one resource can be busy.
fn longest(chains: &Chains, lengths: &[f64]) -> f64 {
    let mut longest: f64 = 0.0;
    let mut best = Vec::new();
    for chain in &chains.list {
        best.clear();
        best.push(0.0f64);
        for (at, item) in chain.items.iter().enumerate() {
            let with = lengths[*item as usize] + best[chain.before[at] as usize];
            best.push(best[at].max(with));
        }
        longest = longest.max(best[chain.items.len()]);
    }
    longest
}
