//! Weighted tabu over what has no place yet: put an unplaced item somewhere, eject what is
//! in its way, remember not to go straight back, and let what stays unplaced grow heavier.
//!
//! Idle resources are items too: for a target of `k` out of `W` resources there are `W - k`
//! stand-ins that want a whole resource for themselves. So choosing which resources work is
//! ordinary ejection. Ejection with growing weights follows the guided ejection search of
//! Nagata and Braysy (2009); tabu tenures follow Glover (1989).

use super::{Assignment, NONE};
use crate::engine::changes::Wishes;
use crate::engine::random::Random;
use crate::engine::{Problem, Stopper};

/// Above this many (item, resource) pairs the tables would not fit into memory sensibly.
const MOST_PAIRS: usize = 20_000_000;

/// Unplaced items looked at in one step.
const LOOKED_AT: usize = 16;

/// Weights are halved this often, so that old trouble is forgotten.
const HALVE_EVERY: u64 = 100_000;

/// A class as the search needs it: who may use it, by start; an item has an entry for each
/// of its units.
struct Takers {
    items: Vec<u32>,
    spans: Vec<(i64, i64)>,
    longest: i64,
}

impl Takers {
    /// Places in `items` whose spans could overlap `[start, end)`.
    fn near(&self, start: i64, end: i64) -> std::ops::Range<usize> {
        let from = self
            .spans
            .partition_point(|span| span.0 <= start - self.longest);
        let to = self.spans.partition_point(|span| span.0 < end);
        from..to.max(from)
    }
}

/// What a step may do.
#[derive(Clone, Copy)]
enum Step {
    Put {
        item: u32,
        resource: u32,
        choice: usize,
    },
    Rest {
        resource: u32,
    },
}

/// The search and its memory; it can be run on and on in slices.
pub(crate) struct Tabu<'a> {
    pub(super) problem: &'a Problem,
    takers: Vec<Takers>,
    /// Per item, in the order of its choices: the places of its units in that class's takers.
    places: Vec<Vec<u32>>,
    /// Per resource and place: the weight of what is in the way there.
    cost: Vec<Vec<u32>>,
    until: Vec<Vec<u64>>,
    rest_until: Vec<u64>,
    pub(super) rows: Vec<Vec<(i64, i64, u32)>>,
    row_weight: Vec<u64>,
    pub(super) resting: Vec<bool>,
    pub(super) rest_weight: u32,
    pub(super) rest_unplaced: usize,
    /// The resource of each item.
    pub(crate) on: Assignment,
    pub(super) weight: Vec<u32>,
    pub(super) unplaced: Vec<u32>,
    /// Real weight of what is unplaced.
    pub(crate) left_out: u64,
    skipped: Vec<bool>,
    by_weight: bool,
    /// Where the least was missing in this slice, while that is watched.
    low: Option<(u64, Assignment, Vec<bool>)>,
    step: u64,
    /// What it costs to have an item on a resource, when fewest changes are wanted.
    pub(super) wishes: Option<&'a Wishes>,
    pub(super) random: Random,
    pub(super) scratch: super::joint::Scratch,
}

impl<'a> Tabu<'a> {
    /// A search from a plan; items with no choice and those in `skip` are left alone.
    /// `None` when the tables would be too large.
    pub(crate) fn new(problem: &'a Problem, skip: &[bool], seed: u64) -> Option<Tabu<'a>> {
        let mut takers: Vec<Vec<(i64, i64, u32)>> = vec![Vec::new(); problem.classes.len()];
        for item in 0..problem.items.len() {
            for class in problem.choices(item) {
                let spans = problem.spans_on(item, *class);
                takers[*class as usize]
                    .extend(spans.map(|span| (span.start.0, span.end.0, item as u32)));
            }
        }
        let members = problem.classes.iter().map(|class| class.members.len());
        let pairs: usize = takers.iter().zip(members).map(|(t, m)| t.len() * m).sum();
        if pairs > MOST_PAIRS {
            return None;
        }
        let mut places = vec![Vec::new(); problem.items.len()];
        let takers: Vec<Takers> = takers
            .into_iter()
            .map(|mut list| {
                list.sort_unstable();
                for (at, (_, _, item)) in list.iter().enumerate() {
                    // Classes come in ascending order, as choices are listed.
                    places[*item as usize].push(at as u32);
                }
                Takers {
                    longest: list
                        .iter()
                        .map(|(start, end, _)| end - start)
                        .max()
                        .unwrap_or(0),
                    spans: list.iter().map(|(start, end, _)| (*start, *end)).collect(),
                    items: list.into_iter().map(|(_, _, item)| item).collect(),
                }
            })
            .collect();
        let rows = problem.resources.len();
        let table = |r: usize| takers[problem.class_of[r] as usize].items.len();
        Some(Tabu {
            problem,
            places,
            cost: (0..rows).map(|r| vec![0; table(r)]).collect(),
            until: (0..rows).map(|r| vec![0; table(r)]).collect(),
            takers,
            rest_until: vec![0; rows],
            rows: vec![Vec::new(); rows],
            row_weight: vec![0; rows],
            resting: vec![false; rows],
            rest_weight: 1,
            rest_unplaced: 0,
            on: vec![NONE; problem.items.len()],
            weight: problem
                .items
                .iter()
                .map(|item| item.weight.min(1 << 12) as u32)
                .collect(),
            unplaced: Vec::new(),
            left_out: 0,
            skipped: skip.to_vec(),
            by_weight: true,
            low: None,
            step: 0,
            wishes: None,
            random: Random::seeded(seed),
            scratch: super::joint::Scratch::new(),
        })
    }

    /// From now on it only rearranges, at least cost by these wishes.
    pub(crate) fn wish(&mut self, wishes: &'a Wishes) {
        self.wishes = Some(wishes);
    }

    /// Forgets how the weights have grown; to be followed by [`Tabu::aim`].
    pub(crate) fn forget(&mut self) {
        for (weight, item) in self.weight.iter_mut().zip(&self.problem.items) {
            *weight = item.weight.min(1 << 12) as u32;
        }
        self.rest_weight = 1;
    }

    /// Takes over a plan and aims at `target` resources; weights stay. `false` when stopped
    /// before it was done: the search is then of no use.
    pub(crate) fn aim(&mut self, plan: &[u32], target: usize, stop: &dyn Stopper) -> bool {
        for cost in &mut self.cost {
            if stop.stop() {
                return false;
            }
            cost.fill(0);
        }
        self.rows.iter_mut().for_each(Vec::clear);
        self.row_weight.fill(0);
        self.on.fill(NONE);
        self.unplaced.clear();
        self.left_out = 0;
        for (item, resource) in plan.iter().enumerate() {
            if item % 64 == 63 && stop.stop() {
                return false;
            }
            if self.skipped[item] || self.problem.choices(item).is_empty() {
                continue;
            }
            self.unplaced.push(item as u32);
            self.left_out += self.problem.items[item].weight;
            if *resource != NONE {
                self.put(item as u32, *resource);
            }
        }
        self.resting = self.rows.iter().map(Vec::is_empty).collect();
        let wanted = self.rows.len().saturating_sub(target);
        let mut resting = self.resting.iter().filter(|resting| **resting).count();
        for resource in 0..self.rows.len() {
            if resting > wanted && self.resting[resource] {
                self.resting[resource] = false;
                resting -= 1;
            }
        }
        self.rest_unplaced = wanted - resting;
        true
    }

    /// Goes back to an earlier state of this search; weights stay.
    pub(crate) fn back_to(&mut self, on: &[u32], resting: &[bool]) {
        for r in 0..self.rows.len() {
            while let Some((_, _, item)) = self.rows[r].last().copied() {
                self.eject(item, r);
            }
        }
        for (item, resource) in on.iter().enumerate() {
            if *resource != NONE {
                self.put(item as u32, *resource);
            }
        }
        self.rest_unplaced += self.resting.iter().filter(|rests| **rests).count();
        self.resting.copy_from_slice(resting);
        self.rest_unplaced -= self.resting.iter().filter(|rests| **rests).count();
    }

    /// The weight of what is missing, as it has grown, or how much is.
    fn missing(&self) -> u64 {
        if !self.by_weight {
            return (self.unplaced.len() + self.rest_unplaced) as u64;
        }
        let weight = |item: &u32| u64::from(self.weight[*item as usize]);
        let pieces: u64 = self.unplaced.iter().map(weight).sum();
        pieces + self.rest_unplaced as u64 * u64::from(self.rest_weight)
    }

    /// Up to `steps` steps, then back to the state in which the least weight was missing, or
    /// the fewest pieces.
    pub(crate) fn run_and_return(&mut self, steps: u64, by_weight: bool, stop: &dyn Stopper) {
        self.by_weight = by_weight;
        self.low = Some((u64::MAX, Vec::new(), Vec::new()));
        self.run(steps, stop, &mut |_, _| {});
        if let Some((missing, on, resting)) = self.low.take()
            && self.missing() > missing
        {
            self.back_to(&on, &resting);
        }
    }

    /// Whether everything has its place, idle stand-ins included.
    pub(crate) fn done(&self) -> bool {
        self.unplaced.is_empty() && self.rest_unplaced == 0
    }

    /// Up to `steps` steps; stops early when done. In between, `better` is offered every
    /// state with less real weight left out than `best`.
    pub(crate) fn run(
        &mut self,
        steps: u64,
        stop: &dyn Stopper,
        better: &mut dyn FnMut(u64, &[u32]),
    ) {
        for count in 0..steps {
            if self.done() || (count % 256 == 255 && stop.stop()) {
                return;
            }
            self.step += 1;
            if self.step.is_multiple_of(HALVE_EVERY) {
                self.halve();
            }
            let Some((gain, chosen)) = self.choose() else {
                // Everything is tabu; the tenures run out by themselves.
                continue;
            };
            self.act(chosen);
            if gain >= 0 {
                for item in &self.unplaced {
                    self.weight[*item as usize] += 1;
                }
                self.rest_weight += u32::from(self.rest_unplaced > 0);
            }
            better(self.left_out, &self.on);
            if self
                .low
                .as_ref()
                .is_some_and(|(least, ..)| self.missing() < *least)
            {
                self.low = Some((self.missing(), self.on.clone(), self.resting.clone()));
            }
        }
    }

    /// The step with the least ejected weight over own weight, ties at random; `None` when
    /// all are tabu.
    fn choose(&mut self) -> Option<(i64, Step)> {
        let mut best: Option<(i64, Step)> = None;
        let mut ties = 0;
        let count = self.unplaced.len();
        let mut random = std::mem::replace(&mut self.random, Random::seeded(0));
        let mut offer = |gain: i64, step: Step, random: &mut Random| match best
            .as_ref()
            .map(|(least, _)| gain.cmp(least))
        {
            None | Some(std::cmp::Ordering::Less) => (best, ties) = (Some((gain, step)), 1),
            Some(std::cmp::Ordering::Equal) => {
                ties += 1;
                if random.below(ties) == 0 {
                    best = Some((gain, step));
                }
            }
            Some(std::cmp::Ordering::Greater) => {}
        };
        for look in 0..count.min(LOOKED_AT) {
            let pick = if count <= LOOKED_AT {
                look
            } else {
                random.below(count)
            };
            let item = self.unplaced[pick];
            let own = i64::from(self.weight[item as usize]);
            let choices = self.problem.choices(item as usize);
            let units = self.problem.units(item as usize).len();
            let places = self.places[item as usize].chunks_exact(units);
            for (choice, (class, places)) in choices.iter().zip(places).enumerate() {
                let at = places[0] as usize;
                for resource in &self.problem.classes[*class as usize].members {
                    let r = *resource as usize;
                    let rest = if self.resting[r] {
                        i64::from(self.rest_weight)
                    } else {
                        0
                    };
                    // What is in the way of several units counts several times: dearer than
                    // it is, and never free when it is not.
                    let in_the_way: i64 = match places {
                        [at] => i64::from(self.cost[r][*at as usize]),
                        _ => places
                            .iter()
                            .map(|at| i64::from(self.cost[r][*at as usize]))
                            .sum(),
                    };
                    let ejected = in_the_way + rest;
                    if ejected == 0 || self.until[r][at] <= self.step {
                        offer(
                            ejected - own,
                            Step::Put {
                                item,
                                resource: *resource,
                                choice,
                            },
                            &mut random,
                        );
                    }
                }
            }
        }
        if self.rest_unplaced > 0 {
            let own = i64::from(self.rest_weight);
            for r in 0..self.rows.len() {
                if !self.resting[r] && (self.row_weight[r] == 0 || self.rest_until[r] <= self.step)
                {
                    let gain = self.row_weight[r].min(i64::MAX as u64 / 2) as i64 - own;
                    offer(gain, Step::Rest { resource: r as u32 }, &mut random);
                }
            }
        }
        self.random = random;
        best
    }

    fn act(&mut self, step: Step) {
        let tenure = |tabu: &mut Tabu<'_>| {
            let waiting = (tabu.unplaced.len() + tabu.rest_unplaced) as u64;
            tabu.step + 2 * waiting + 2 + tabu.random.below(10) as u64
        };
        match step {
            Step::Put {
                item,
                resource,
                choice,
            } => {
                let r = resource as usize;
                if self.resting[r] {
                    self.resting[r] = false;
                    self.rest_unplaced += 1;
                    self.rest_until[r] = tenure(self);
                }
                let class = self.problem.class_of[r] as usize;
                let units = self.problem.units(item as usize).len();
                for unit in choice * units..(choice + 1) * units {
                    let place = self.places[item as usize][unit] as usize;
                    let (start, end) = self.takers[class].spans[place];
                    while let Some(other) = self.in_the_way(r, start, end) {
                        self.eject(other, r);
                        let place = self.places_of(other, class)[0] as usize;
                        self.until[r][place] = tenure(self);
                    }
                }
                self.put(item, resource);
            }
            Step::Rest { resource } => {
                let r = resource as usize;
                let class = self.problem.class_of[r] as usize;
                while let Some((_, _, other)) = self.rows[r].last().copied() {
                    self.eject(other, r);
                    let place = self.places_of(other, class)[0] as usize;
                    self.until[r][place] = tenure(self);
                }
                self.resting[r] = true;
                self.rest_unplaced -= 1;
            }
        }
    }

    fn in_the_way(&self, r: usize, start: i64, end: i64) -> Option<u32> {
        let row = &self.rows[r];
        let next = row.partition_point(|other| other.0 < end);
        let before = row[..next].last()?;
        (before.1 > start).then_some(before.2)
    }

    /// The places of the item's units among the takers of a class it may use.
    fn places_of(&self, item: u32, class: usize) -> &[u32] {
        let choices = self.problem.choices(item as usize);
        let at = choices.partition_point(|choice| (*choice as usize) < class);
        let units = self.problem.units(item as usize).len();
        &self.places[item as usize][at * units..(at + 1) * units]
    }

    /// Adds `step` to the cost of everything that overlaps the span on the resource.
    fn spread(&mut self, r: usize, (start, end): (i64, i64), step: u32) {
        let takers = &self.takers[self.problem.class_of[r] as usize];
        let cost = &mut self.cost[r];
        for at in takers.near(start, end) {
            if takers.spans[at].1 > start {
                cost[at] = cost[at].wrapping_add(step);
            }
        }
    }

    pub(super) fn put(&mut self, item: u32, resource: u32) {
        let r = resource as usize;
        let class = self.problem.class_of[r] as usize;
        self.on[item as usize] = resource;
        let weight = self.weight[item as usize];
        self.row_weight[r] += u64::from(weight);
        for unit in 0..self.problem.units(item as usize).len() {
            let place = self.places_of(item, class)[unit] as usize;
            let (start, end) = self.takers[class].spans[place];
            let at = self.rows[r].partition_point(|other| other.0 < start);
            self.rows[r].insert(at, (start, end, item));
            self.spread(r, (start, end), weight);
        }
        if let Some(at) = self.unplaced.iter().position(|other| *other == item) {
            self.unplaced.swap_remove(at);
            self.left_out -= self.problem.items[item as usize].weight;
        }
    }

    pub(super) fn eject(&mut self, item: u32, r: usize) {
        let class = self.problem.class_of[r] as usize;
        self.rows[r].retain(|(_, _, other)| *other != item);
        self.on[item as usize] = NONE;
        let weight = self.weight[item as usize];
        self.row_weight[r] -= u64::from(weight);
        for unit in 0..self.problem.units(item as usize).len() {
            let place = self.places_of(item, class)[unit] as usize;
            let span = self.takers[class].spans[place];
            self.spread(r, span, weight.wrapping_neg());
        }
        self.unplaced.push(item);
        self.left_out += self.problem.items[item as usize].weight;
    }

    fn halve(&mut self) {
        for weight in self.weight.iter_mut().chain([&mut self.rest_weight]) {
            *weight = (*weight / 2).max(1);
        }
        for cost in &mut self.cost {
            cost.fill(0);
        }
        self.row_weight.fill(0);
        for r in 0..self.rows.len() {
            for (start, end, item) in self.rows[r].clone() {
                self.spread(r, (start, end), self.weight[item as usize]);
            }
        }
        for (item, r) in self.on.iter().enumerate().filter(|(_, r)| **r != NONE) {
            self.row_weight[*r as usize] += u64::from(self.weight[item]);
        }
    }
}
