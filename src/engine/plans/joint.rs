//! Exact re-optimisation of a few resources at once: everything on them, a little of what has
//! no place, and their stand-ins for rest are laid out anew by a sweep over time. The state
//! after each piece is what runs on each of the resources; equal states are merged, the
//! cheapest are kept (beam search, Lowerre 1976). A result that costs the same is taken too:
//! a step sideways that the tabu search would not find.

use super::NONE;
use super::tabu::Tabu;
use crate::lookup::FastMap;

/// Most resources at once; a state is one number for each.
const MOST: usize = 8;

/// States kept after each piece.
const BEAM: usize = 300;

/// Pieces without a place that are tried along.
const ALONG: usize = 2;

/// The stand-in that keeps a resource idle.
const RESTS: u16 = u16::MAX;

/// What runs on each resource: 0 for nothing, else the place of a piece in the list plus one.
type State = [u16; MOST];

/// One way to a state.
struct Way {
    state: State,
    cost: u64,
    before: u32,
    /// The resource chosen for the last piece, or `MOST` when it was dropped.
    choice: u8,
}

impl Tabu<'_> {
    /// So many attempts; stops early when everything has its place. `width` is the number of
    /// resources at once and adapts itself.
    pub(crate) fn rearrange(
        &mut self,
        attempts: u32,
        width: &mut usize,
        stop: &dyn crate::engine::Stopper,
    ) {
        for attempt in 0..attempts {
            if self.done() || (attempt % 8 == 7 && stop.stop()) {
                return;
            }
            let (items, resources) = self.neighbourhood(*width);
            if resources.len() < 2 {
                return;
            }
            let fullest = self.lay_out(&items, &resources);
            if fullest >= BEAM {
                *width = (*width - 1).max(2);
            } else if fullest < BEAM / 4 {
                *width = (*width + 1).min(MOST);
            }
        }
    }

    /// A few resources that could exchange pieces, by a walk from something without a place.
    fn neighbourhood(&mut self, width: usize) -> (Vec<u32>, Vec<usize>) {
        let mut resources: Vec<usize> = Vec::with_capacity(width);
        let mut along: Vec<u32> = Vec::new();
        let total = self.rows.len();
        match self.unplaced.len() {
            0 => resources.push(self.random.below(total)),
            count => {
                for _ in 0..ALONG.min(count) {
                    let item = self.unplaced[self.random.below(count)];
                    if !along.contains(&item) {
                        along.push(item);
                    }
                }
                resources.extend(self.some_resource_for(along[0]));
            }
        }
        // A resource at rest beside the others lets the stand-ins move too.
        if self.rest_unplaced > 0 || self.random.below(3) == 0 {
            let from = self.random.below(total);
            let resting = (0..total)
                .map(|r| (from + r) % total)
                .find(|r| self.resting[*r]);
            resources.extend(resting.filter(|r| !resources.contains(r)));
        }
        for _ in 0..4 * width {
            if resources.len() >= width.min(total) {
                break;
            }
            let Some(here) = resources
                .get(self.random.below(resources.len().max(1)))
                .copied()
            else {
                break;
            };
            let item = match self.rows[here].len() {
                0 => along.first().copied(),
                count => Some(self.rows[here][self.random.below(count)].2),
            };
            if let Some(next) = item.and_then(|item| self.some_resource_for(item))
                && !resources.contains(&next)
            {
                resources.push(next);
            }
        }
        let mut items = along;
        for r in &resources {
            items.extend(self.rows[*r].iter().map(|(_, _, item)| *item));
        }
        items.sort_unstable_by_key(|item| (self.problem.items[*item as usize].core, *item));
        (items, resources)
    }

    fn some_resource_for(&mut self, item: u32) -> Option<usize> {
        let choices = self.problem.choices(item as usize);
        if choices.is_empty() {
            return None;
        }
        let class = choices[self.random.below(choices.len())];
        let members = &self.problem.classes[class as usize].members;
        Some(members[self.random.below(members.len())] as usize)
    }

    /// Lays the pieces out on the resources as cheaply as the beam finds; returns how many
    /// states the fullest layer had.
    fn lay_out(&mut self, items: &[u32], resources: &[usize]) -> usize {
        if items.len() >= usize::from(RESTS) - 1 {
            return BEAM;
        }
        let count = resources.len();
        let resting = resources.iter().filter(|r| self.resting[**r]).count();
        let rests = (resting + self.rest_unplaced.min(1)).min(count);
        let dropped: u64 = items
            .iter()
            .filter(|item| self.on[**item as usize] == NONE)
            .map(|item| u64::from(self.weight[*item as usize]))
            .sum();
        let bound = dropped + (rests - resting) as u64 * u64::from(self.rest_weight);
        // Per resource and piece: its span there, if it may go there.
        let span = |item: u32, r: usize| {
            let class = self.problem.class_of[r];
            let may = self
                .problem
                .choices(item as usize)
                .binary_search(&class)
                .is_ok();
            may.then(|| self.problem.occupied(item as usize, class))
                .map(|span| (span.start.0, span.end.0))
        };
        let spans: Vec<Vec<Option<(i64, i64)>>> = items
            .iter()
            .map(|item| resources.iter().map(|r| span(*item, *r)).collect())
            .collect();
        // The earliest start still to come on each resource: what ended by then is nothing.
        let mut coming = vec![[i64::MAX; MOST]; items.len() + 1];
        for at in (0..items.len()).rev() {
            coming[at] = coming[at + 1];
            for (k, span) in spans[at].iter().enumerate() {
                if let Some((start, _)) = span {
                    coming[at][k] = coming[at][k].min(*start);
                }
            }
        }
        let mut layers: Vec<Vec<Way>> = vec![self.beginnings(count, rests, bound)];
        let mut fullest = 0;
        for (at, item) in items.iter().enumerate() {
            let weight = u64::from(self.weight[*item as usize]);
            let mut found: FastMap<State, usize> = FastMap::default();
            let mut next: Vec<Way> = Vec::new();
            let mut offer = |way: Way, random: &mut crate::engine::random::Random| {
                if way.cost > bound {
                    return;
                }
                match found.entry(way.state) {
                    std::collections::hash_map::Entry::Occupied(known) => {
                        let known = &mut next[*known.get()];
                        if way.cost < known.cost || (way.cost == known.cost && random.below(2) == 0)
                        {
                            *known = way;
                        }
                    }
                    std::collections::hash_map::Entry::Vacant(place) => {
                        place.insert(next.len());
                        next.push(way);
                    }
                }
            };
            let mut random = self.random.clone();
            for (before, way) in layers[at].iter().enumerate() {
                let clear = |mut state: State| {
                    for (k, running) in state.iter_mut().enumerate().take(count) {
                        let over = |place: u16| {
                            spans[usize::from(place) - 1][k]
                                .is_some_and(|(_, end)| end <= coming[at + 1][k])
                        };
                        if *running != 0 && *running != RESTS && over(*running) {
                            *running = 0;
                        }
                    }
                    state
                };
                let before = before as u32;
                offer(
                    Way {
                        state: clear(way.state),
                        cost: way.cost + weight,
                        before,
                        choice: MOST as u8,
                    },
                    &mut random,
                );
                for k in 0..count {
                    let Some((start, _)) = spans[at][k] else {
                        continue;
                    };
                    let free = match way.state[k] {
                        0 => true,
                        RESTS => false,
                        place => {
                            spans[usize::from(place) - 1][k].is_some_and(|(_, end)| end <= start)
                        }
                    };
                    if free {
                        let mut state = way.state;
                        state[k] = at as u16 + 1;
                        offer(
                            Way {
                                state: clear(state),
                                cost: way.cost,
                                before,
                                choice: k as u8,
                            },
                            &mut random,
                        );
                    }
                }
            }
            self.random = random;
            fullest = fullest.max(next.len());
            if next.len() > BEAM {
                // Which of the dearest are cut off must not always favour the same.
                let start = self.random.below(next.len());
                next.rotate_left(start);
                next.sort_by_key(|way| way.cost);
                next.truncate(BEAM);
            }
            if next.is_empty() {
                return fullest;
            }
            layers.push(next);
        }
        self.take_over(items, resources, &layers);
        fullest
    }

    /// Which of the resources rest from the beginning: every way to choose them.
    fn beginnings(&self, count: usize, rests: usize, bound: u64) -> Vec<Way> {
        let ways = (0u32..1 << count)
            .filter(|set| set.count_ones() as usize <= rests)
            .map(|set| {
                let mut state: State = [0; MOST];
                for (k, place) in state.iter_mut().enumerate().take(count) {
                    if set & (1 << k) != 0 {
                        *place = RESTS;
                    }
                }
                let missing = rests - set.count_ones() as usize;
                Way {
                    state,
                    cost: missing as u64 * u64::from(self.rest_weight),
                    before: 0,
                    choice: MOST as u8,
                }
            });
        ways.filter(|way| way.cost <= bound).collect()
    }

    fn take_over(&mut self, items: &[u32], resources: &[usize], layers: &[Vec<Way>]) {
        let Some(last) = layers.last() else { return };
        let Some(mut at) = (0..last.len()).min_by_key(|at| last[*at].cost) else {
            return;
        };
        let mut choices = vec![MOST as u8; items.len()];
        for layer in (1..layers.len()).rev() {
            let way = &layers[layer][at];
            choices[layer - 1] = way.choice;
            at = way.before as usize;
        }
        let rests = layers[0][at].state;
        for r in resources {
            while let Some((_, _, item)) = self.rows[*r].last().copied() {
                self.eject(item, *r);
            }
            if std::mem::replace(&mut self.resting[*r], false) {
                self.rest_unplaced += 1;
            }
        }
        for (k, r) in resources.iter().enumerate() {
            if rests[k] == RESTS {
                self.resting[*r] = true;
                self.rest_unplaced -= 1;
            }
        }
        for (item, choice) in items.iter().zip(choices) {
            if let Some(r) = resources.get(usize::from(choice)) {
                self.put(*item, *r as u32);
            }
        }
    }
}
