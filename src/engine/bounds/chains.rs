//! What each resource could take at best, given prices: the dearest chain of pieces that do not
//! overlap, by a linear sweep by end (weighted interval scheduling; Kleinberg, Tardos 2006,
//! 6.1), over all resources, with what may be left out and how many resources may be used.

use crate::engine::{Problem, Stopper};

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
    pub(super) usable: Vec<bool>,
    /// Entries in all chains together.
    pub(super) entries: usize,
    /// Whether one resource costs 1, or nothing.
    pub(super) costs: bool,
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
pub(super) struct Taken {
    /// Lower bound that the prices give.
    pub(super) value: f64,
    /// Per item, how many resources take it.
    pub(super) cover: Vec<f64>,
    /// Resources that take anything.
    pub(super) used: f64,
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
    pub(super) fn take(&self, prices: &[f64], best: &mut Vec<f64>) -> Taken {
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

    /// Per chain's resource and unit, how much more it costs at least to have the unit there
    /// than those prices prove.
    pub(super) fn losses(&self, prices: &[f64], each: &mut dyn FnMut(u32, u32, f64)) {
        let (mut forward, mut worths) = (Vec::new(), Vec::with_capacity(self.list.len()));
        for chain in &self.list {
            chain.fill(prices, &mut forward);
            worths.push(forward[chain.items.len()]);
        }
        let last = match self.limit {
            Some(limit) if limit > 0 && limit < worths.len() => {
                let mut sorted = worths.clone();
                sorted.sort_by(|a, b| b.total_cmp(a));
                sorted[limit - 1]
            }
            _ => 0.0,
        };
        for ((chain, resource), worth) in self.list.iter().zip(&self.resources).zip(worths) {
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

/// The longest that any one resource can be busy.
pub(super) fn longest(chains: &Chains, lengths: &[f64]) -> f64 {
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
