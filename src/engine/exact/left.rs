//! What is left for each piece in a case: which resources it may still take, given the
//! pieces that have been put somewhere. `audit` works the same rules out on its own.

use crate::engine::Problem;
use crate::engine::bounds::chains::Held;

/// Most (piece, resource) pairs of a problem that is looked at case by case.
const MOST_PAIRS: usize = 2_000_000;

/// No resource yet.
const NOWHERE: u32 = u32::MAX;

/// A part of a problem, and how far it has been laid out.
pub(super) struct Left<'a> {
    pub(super) problem: &'a Problem,
    /// Items of the part.
    pub(super) items: Vec<u32>,
    /// Their units, as places in the problem: an item's one after the other.
    pub(super) units: Vec<usize>,
    /// Resources that any of them may use.
    pub(super) resources: Vec<u32>,
    /// Per place in `items` and in `resources`: pieces put there that are in the way, and
    /// one more when it may not be used at all.
    blocked: Vec<u16>,
    /// Per place in `items`: places in `resources` it may use.
    pub(super) usable: Vec<Vec<u32>>,
    /// Per place in `resources`: users with start and end of what each of their units
    /// occupies, by start; the unit's place in `units`.
    users: Vec<Vec<(i64, i64, u32)>>,
    /// Per place in `units`: the place in `items`.
    item_of: Vec<u32>,
    longest: Vec<i64>,
    /// Per place in `items`: the place in `resources`, or [`NOWHERE`].
    on: Vec<u32>,
    /// Per place in `resources`: pieces put there.
    pub(super) holds: Vec<u16>,
    /// Resources that hold anything.
    pub(super) in_use: usize,
    /// Fewer resources than this are to be refuted.
    pub(super) wanted: usize,
}

impl<'a> Left<'a> {
    /// `None` when it is too large, or something has no choice at all.
    pub(super) fn new(problem: &'a Problem, items: Vec<u32>, wanted: usize) -> Option<Left<'a>> {
        let mut place = vec![NOWHERE; problem.resources.len()];
        let mut resources: Vec<u32> = Vec::new();
        for item in &items {
            let classes = problem.choices(*item as usize);
            if classes.is_empty() {
                return None;
            }
            for class in classes {
                for member in &problem.classes[*class as usize].members {
                    if place[*member as usize] == NOWHERE {
                        place[*member as usize] = 0;
                        resources.push(*member);
                    }
                }
            }
        }
        resources.sort_unstable();
        for (at, resource) in resources.iter().enumerate() {
            place[*resource as usize] = at as u32;
        }
        let width = resources.len();
        if items.len() * width > MOST_PAIRS || items.len() >= usize::from(u16::MAX) {
            return None;
        }
        let mut blocked = vec![1u16; items.len() * width];
        let mut usable = Vec::with_capacity(items.len());
        let mut users: Vec<Vec<(i64, i64, u32)>> = vec![Vec::new(); width];
        let (mut units, mut item_of) = (Vec::new(), Vec::new());
        for (at, item) in items.iter().enumerate() {
            let mut list: Vec<u32> = Vec::new();
            let own = problem.unit_places(*item as usize);
            for class in problem.choices(*item as usize) {
                for member in &problem.classes[*class as usize].members {
                    let r = place[*member as usize];
                    blocked[at * width + r as usize] = 0;
                    for (unit, number) in own.clone().zip(units.len() as u32..) {
                        let span = problem.occupied(unit, *class);
                        users[r as usize].push((span.start.0, span.end.0, number));
                    }
                    list.push(r);
                }
            }
            item_of.extend(own.clone().map(|_| at as u32));
            units.extend(own);
            list.sort_unstable();
            usable.push(list);
        }
        for users in &mut users {
            users.sort_unstable();
        }
        let longest = users
            .iter()
            .map(|users| users.iter().map(|(start, end, _)| end - start).max());
        Some(Left {
            problem,
            longest: longest.map(|longest| longest.unwrap_or(0)).collect(),
            on: vec![NOWHERE; items.len()],
            holds: vec![0; width],
            in_use: 0,
            items,
            units,
            item_of,
            resources,
            blocked,
            usable,
            users,
            wanted,
        })
    }

    pub(super) fn placed(&self, item: usize) -> Option<usize> {
        (self.on[item] != NOWHERE).then_some(self.on[item] as usize)
    }

    /// Whether a resource may still come into use.
    fn may_begin(&self) -> bool {
        self.in_use + 1 < self.wanted
    }

    /// Whether the resource is still left for an item that is not placed.
    pub(super) fn open(&self, item: usize, r: usize) -> bool {
        self.blocked[item * self.resources.len() + r] == 0
            && (self.holds[r] > 0 || self.may_begin())
    }

    /// The resources left for an item, of alike ones not in use only the first.
    pub(super) fn choices(&self, item: usize) -> Vec<usize> {
        let mut fresh: Vec<u32> = Vec::new();
        let mut choices = Vec::new();
        for r in &self.usable[item] {
            let r = *r as usize;
            if !self.open(item, r) {
                continue;
            }
            if self.holds[r] == 0 {
                let class = self.problem.class_of[self.resources[r] as usize];
                if fresh.contains(&class) {
                    continue;
                }
                fresh.push(class);
            }
            choices.push(r);
        }
        choices
    }

    /// Puts an item on a resource that is left for it.
    pub(super) fn put(&mut self, item: usize, r: usize) {
        self.on[item] = r as u32;
        self.in_use += usize::from(self.holds[r] == 0);
        self.holds[r] += 1;
        self.shift(item, r, 1);
    }

    /// Takes it away again.
    pub(super) fn lift(&mut self, item: usize) {
        let r = self.on[item] as usize;
        self.on[item] = NOWHERE;
        self.holds[r] -= 1;
        self.in_use -= usize::from(self.holds[r] == 0);
        self.shift(item, r, u16::MAX);
    }

    fn shift(&mut self, item: usize, r: usize, step: u16) {
        let class = self.problem.class_of[self.resources[r] as usize];
        let users = &self.users[r];
        let width = self.resources.len();
        for span in self.problem.spans_on(self.items[item] as usize, class) {
            let (start, end) = (span.start.0, span.end.0);
            let from = users.partition_point(|user| user.0 <= start - self.longest[r]);
            for (other_start, other_end, other) in &users[from..] {
                if *other_start >= end {
                    break;
                }
                let other = self.item_of[*other as usize] as usize;
                if *other_end > start && other != item {
                    let cell = &mut self.blocked[other * width + r];
                    *cell = cell.wrapping_add(step);
                }
            }
        }
    }

    /// Per resource what it holds and who it is left for, by end, for a bound from prices.
    pub(super) fn chains(&self) -> Vec<Held> {
        let chain = |r: usize| {
            let left = self.users[r].iter().filter(|(_, _, unit)| {
                let item = self.item_of[*unit as usize] as usize;
                match self.placed(item) {
                    Some(on) => on == r,
                    None => self.open(item, r),
                }
            });
            let mut takers: Vec<(i64, i64, u32)> = left
                .map(|(start, end, unit)| (*end, *start, *unit))
                .collect();
            takers.sort_unstable();
            Held {
                forced: self.holds[r] > 0,
                takers,
            }
        };
        (0..self.resources.len()).map(chain).collect()
    }
}
