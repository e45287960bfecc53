//! Plans with few changes, by ejection: put something where it should be, eject what is in
//! its way, and find places for that, within a budget of changes (ejection chains: Glover
//! 1996; here as an exact search to a growing depth, iterative deepening: Korf 1985).
//!
//! Without a limit on its cases the search is complete: whatever a plan with fewer changes
//! puts elsewhere is ejected or moved on some way through the search.

use super::wishes::Wishes;
use crate::engine::plans::{Assignment, NONE};
use crate::engine::{Problem, Stopper};

/// Pieces without a place that are looked at to find the one with the fewest ways.
const LOOKED_AT: usize = 12;

/// Which (item, resource) pairs are known to be of no use within a budget.
pub(crate) trait Useless {
    /// Whether any plan with this pair costs more than the budget.
    fn useless(&self, item: usize, resource: u32, budget: u64) -> bool;
}

/// Nothing is known.
pub(crate) struct NothingKnown;

impl Useless for NothingKnown {
    fn useless(&self, _: usize, _: u32, _: u64) -> bool {
        false
    }
}

/// A plan that is being changed.
pub(crate) struct Moves<'a> {
    problem: &'a Problem,
    wishes: &'a Wishes,
    /// Most resources in use.
    limit: usize,
    rows: Vec<Vec<(i64, i64, u32)>>,
    pub(crate) on: Assignment,
    /// Placed on this way through the search: stays.
    locked: Vec<bool>,
    /// Emptied on this way, or decided to go on working.
    closed: Vec<bool>,
    works: Vec<bool>,
    /// Resources that something was on before.
    wished: Vec<bool>,
    /// Left out for good.
    skipped: Vec<bool>,
    unplaced: Vec<u32>,
    used: usize,
    /// What everything placed costs, and at least what has no place will.
    spent: u64,
    pending: u64,
    nodes: u64,
    /// Whether the search was cut short.
    pub(crate) cut: bool,
}

/// A way to place an item.
struct Way {
    resource: u32,
    cost: u64,
    /// What is in its way.
    ejects: Vec<u32>,
}

impl<'a> Moves<'a> {
    /// Starts from a plan; what has no place in it is left out for good when `skip` says so.
    /// `None` when stopped.
    pub(crate) fn from(
        problem: &'a Problem,
        wishes: &'a Wishes,
        limit: usize,
        (plan, skip): (&[u32], &[bool]),
        stop: &dyn Stopper,
    ) -> Option<Moves<'a>> {
        let rows = problem.resources.len();
        let mut moves = Moves {
            problem,
            wishes,
            limit,
            rows: vec![Vec::new(); rows],
            on: vec![NONE; plan.len()],
            locked: vec![false; plan.len()],
            closed: vec![false; rows],
            works: vec![false; rows],
            wished: vec![false; rows],
            skipped: skip.to_vec(),
            unplaced: Vec::new(),
            used: 0,
            spent: 0,
            pending: 0,
            nodes: 0,
            cut: false,
        };
        for (item, resource) in plan.iter().enumerate() {
            if item.is_multiple_of(super::POLL) && stop.stop() {
                return None;
            }
            if moves.skipped[item] {
                continue;
            }
            for (resource, _) in wishes.places(item) {
                moves.wished[*resource as usize] = true;
            }
            moves.unplaced.push(item as u32);
            moves.pending += wishes.least(item);
            if *resource != NONE {
                moves.put(item as u32, *resource);
            }
        }
        Some(moves)
    }

    /// Whether everything has its place and no more resources are in use than may be.
    pub(crate) fn whole(&self) -> bool {
        self.unplaced.is_empty() && self.used <= self.limit
    }

    /// How many have no place.
    pub(crate) fn missing(&self) -> usize {
        self.unplaced.len()
    }

    fn put(&mut self, item: u32, resource: u32) {
        let r = resource as usize;
        self.used += usize::from(self.rows[r].is_empty());
        let class = self.problem.class_of[r];
        for span in self.problem.spans_on(item as usize, class) {
            let at = self.rows[r].partition_point(|other| other.0 < span.start.0);
            self.rows[r].insert(at, (span.start.0, span.end.0, item));
        }
        self.on[item as usize] = resource;
        self.spent += self.wishes.cost(item as usize, resource);
        self.pending -= self.wishes.least(item as usize);
        if let Some(at) = self.unplaced.iter().rposition(|other| *other == item) {
            self.unplaced.swap_remove(at);
        }
    }

    fn lift(&mut self, item: u32) {
        let resource = self.on[item as usize];
        let r = resource as usize;
        self.rows[r].retain(|(_, _, other)| *other != item);
        self.used -= usize::from(self.rows[r].is_empty());
        self.on[item as usize] = NONE;
        self.spent -= self.wishes.cost(item as usize, resource);
        self.pending += self.wishes.least(item as usize);
        self.unplaced.push(item);
    }

    /// The least that an item on a resource will cost once it has to leave it.
    fn after_leaving(&self, item: u32) -> u64 {
        let from = self.on[item as usize];
        let item = item as usize;
        let others = self.wishes.places(item).iter().filter(|(r, _)| *r != from);
        let most = others.map(|(_, saves)| *saves).max();
        self.wishes.elsewhere(item) - most.unwrap_or(0)
    }

    /// What is in the way of an item on a resource; `None` when something of it stays.
    fn in_the_way(&self, item: u32, resource: u32) -> Option<Vec<u32>> {
        let row = &self.rows[resource as usize];
        let class = self.problem.class_of[resource as usize];
        let mut found: Vec<u32> = Vec::new();
        for span in self.problem.spans_on(item as usize, class) {
            let next = row.partition_point(|other| other.0 < span.end.0);
            // What is on a row does not overlap, so ends are in order too.
            for (_, end, other) in row[..next].iter().rev() {
                if *end <= span.start.0 {
                    break;
                }
                if self.locked[*other as usize] {
                    return None;
                }
                if !found.contains(other) {
                    found.push(*other);
                }
            }
        }
        Some(found)
    }

    /// The ways to place an item within a budget, the cheapest first.
    fn ways(&self, item: u32, budget: u64, useless: &dyn Useless) -> Vec<Way> {
        let mut ways: Vec<(u64, Way)> = Vec::new();
        let before = self.spent + self.pending - self.wishes.least(item as usize);
        for class in self.problem.choices(item as usize) {
            // Of members that are empty and that nobody here wishes for one stands for all.
            let mut empty_seen = false;
            for resource in &self.problem.classes[*class as usize].members {
                let r = *resource as usize;
                let cost = self.wishes.cost(item as usize, *resource);
                if self.closed[r] || before + cost > budget {
                    continue;
                }
                if useless.useless(item as usize, *resource, budget) {
                    continue;
                }
                if self.rows[r].is_empty() && !self.wished[r] {
                    if empty_seen {
                        continue;
                    }
                    empty_seen = true;
                }
                let Some(ejects) = self.in_the_way(item, *resource) else {
                    continue;
                };
                let saved: u64 = ejects
                    .iter()
                    .map(|other| self.wishes.cost(*other as usize, *resource))
                    .sum();
                let added: u64 = ejects.iter().map(|other| self.after_leaving(*other)).sum();
                let total = before + cost + added - saved;
                if total <= budget {
                    let way = Way {
                        resource: *resource,
                        cost: total,
                        ejects,
                    };
                    ways.push((total, way));
                }
            }
        }
        ways.sort_by_key(|(total, way)| (*total, way.ejects.len(), way.resource));
        ways.into_iter().map(|(_, way)| way).collect()
    }

    /// Looks for a plan that costs no more than the budget, within so many cases; `true`
    /// leaves it in `on`. When not `cut`, there is none.
    pub(crate) fn search(
        &mut self,
        budget: u64,
        nodes: u64,
        useless: &dyn Useless,
        stop: &dyn Stopper,
    ) -> bool {
        self.nodes = nodes;
        self.cut = false;
        self.go(budget, useless, stop)
    }

    fn go(&mut self, budget: u64, useless: &dyn Useless, stop: &dyn Stopper) -> bool {
        if self.spent + self.pending > budget {
            return false;
        }
        if self.unplaced.is_empty() {
            return self.used <= self.limit || self.empty_one(budget, useless, stop);
        }
        if self.nodes == 0 || (self.nodes.is_multiple_of(64) && stop.stop()) {
            self.cut = true;
            return false;
        }
        self.nodes -= 1;
        let mut fewest: Option<(u32, Vec<Way>)> = None;
        // The latest first: it is where the search is.
        for item in self.unplaced.iter().rev().take(LOOKED_AT) {
            let ways = self.ways(*item, budget, useless);
            if ways.is_empty() {
                return false;
            }
            if fewest
                .as_ref()
                .is_none_or(|(_, least)| ways.len() < least.len())
            {
                fewest = Some((*item, ways));
            }
        }
        let Some((item, ways)) = fewest else {
            return false;
        };
        for way in ways {
            if self.spent + self.pending > budget || way.cost > budget {
                continue;
            }
            let from = way.resource;
            for other in &way.ejects {
                self.lift(*other);
            }
            self.put(item, way.resource);
            self.locked[item as usize] = true;
            if self.go(budget, useless, stop) {
                return true;
            }
            self.locked[item as usize] = false;
            self.lift(item);
            for other in way.ejects.iter().rev() {
                self.put(*other, from);
            }
            if self.cut {
                return false;
            }
        }
        false
    }

    /// More resources work than may: one of them must be emptied, each in turn.
    fn empty_one(&mut self, budget: u64, useless: &dyn Useless, stop: &dyn Stopper) -> bool {
        if self.nodes == 0 {
            self.cut = true;
            return false;
        }
        self.nodes -= 1;
        let mut candidates: Vec<(u64, usize)> = Vec::new();
        for r in 0..self.rows.len() {
            let row = &self.rows[r];
            let stays = row.is_empty() || self.works[r];
            if stays || row.iter().any(|(.., item)| self.locked[*item as usize]) {
                continue;
            }
            let mut items: Vec<u32> = row.iter().map(|(.., item)| *item).collect();
            items.sort_unstable();
            items.dedup();
            let added: u64 = items.iter().map(|item| self.after_leaving(*item)).sum();
            let saved: u64 = items
                .iter()
                .map(|item| self.wishes.cost(*item as usize, r as u32))
                .sum();
            if self.spent + added - saved.min(self.spent) <= budget {
                candidates.push((added.saturating_sub(saved), r));
            }
        }
        candidates.sort_unstable();
        let mut found = false;
        let mut tried = Vec::new();
        for (_, r) in candidates {
            let items: Vec<u32> = self.empty(r);
            self.closed[r] = true;
            if self.go(budget, useless, stop) {
                found = true;
                break;
            }
            self.closed[r] = false;
            for item in items.iter().rev() {
                self.put(*item, r as u32);
            }
            if self.cut {
                break;
            }
            // Plans in which this one rests have all been looked at.
            self.works[r] = true;
            tried.push(r);
        }
        for r in tried {
            self.works[r] = false;
        }
        found
    }

    fn empty(&mut self, r: usize) -> Vec<u32> {
        let mut items = Vec::new();
        while let Some((.., item)) = self.rows[r].last().copied() {
            self.lift(item);
            items.push(item);
        }
        items
    }

    /// Forgets what was decided on the way here.
    fn unlock(&mut self) {
        self.locked.fill(false);
        self.closed.fill(false);
        self.works.fill(false);
    }

    /// Improves a whole plan as far as short chains do: everything that is not where it
    /// costs least is brought there, if what that ejects can be placed for less than is
    /// saved.
    pub(crate) fn improve(&mut self, nodes: u64, stop: &dyn Stopper) {
        let mut again = true;
        while again && !stop.stop() {
            again = false;
            for item in 0..self.on.len() {
                let from = self.on[item];
                if from == NONE || self.skipped[item] {
                    continue;
                }
                let Some(home) = self.wishes.home(item).filter(|home| *home != from) else {
                    continue;
                };
                let (now, there) = (self.wishes.cost(item, from), self.wishes.cost(item, home));
                if there >= now {
                    continue;
                }
                let budget = self.spent - 1;
                let before = self.on.clone();
                self.unlock();
                self.lift(item as u32);
                let Some(ejects) = self.in_the_way(item as u32, home) else {
                    self.put(item as u32, from);
                    continue;
                };
                for other in &ejects {
                    self.lift(*other);
                }
                self.put(item as u32, home);
                self.locked[item] = true;
                if self.search(budget, nodes, &NothingKnown, stop) {
                    again = true;
                } else {
                    self.back_to(&before);
                }
            }
        }
        self.unlock();
    }

    fn back_to(&mut self, plan: &[u32]) {
        for (item, resource) in plan.iter().enumerate() {
            if self.on[item] != *resource && self.on[item] != NONE {
                self.lift(item as u32);
            }
        }
        for (item, resource) in plan.iter().enumerate() {
            if self.on[item] == NONE && *resource != NONE {
                self.put(item as u32, *resource);
            }
        }
    }
}
