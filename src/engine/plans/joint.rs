//! Exact re-optimisation of a few resources at once: everything on them, a little of what has
//! no place, and their stand-ins for rest are laid out anew by a sweep over time. The state
//! after each piece is, per resource, the rank of the end of what runs there; equal states
//! are merged, the cheapest are kept (beam search, Lowerre 1976). A result that costs the
//! same is taken too: a step sideways that the tabu search would not find.

use super::NONE;
use super::tabu::Tabu;
use crate::engine::random::Random;

/// Most resources at once; a state is one byte for each.
const MOST: usize = 8;

/// States kept after each piece.
const BEAM: usize = 300;

/// Pieces without a place that are tried along.
const ALONG: usize = 2;

/// Most pieces laid out at once: their ends have ranks below [`RESTS`]. Where the resources
/// hold more, a window of time is laid out and the rest stays.
const MOST_PIECES: usize = 120;

/// The stand-in that keeps a resource idle, in place of a rank: above all of them, and
/// below 128, so that all bytes of a state can be compared at once.
const RESTS: u8 = 127;

/// Slots of the table that finds equal states: a power of two well above what one layer
/// can offer.
const SLOTS: usize = 8192;

/// Per resource the rank of the end of what runs there (0 for nothing), one byte each.
type State = u64;

/// The high bit of every byte.
const HIGH: u64 = 0x8080_8080_8080_8080;

/// The high bit of every byte in which `state` is at most `limit`; all are below 128.
fn at_most(state: State, limit: u64) -> u64 {
    ((limit | HIGH) - state) & HIGH
}

/// The state without what is at most `over` (byte by byte).
fn without(state: State, over: u64) -> State {
    state & !((at_most(state, over) >> 7) * 0xff)
}

fn rank(state: State, k: usize) -> u8 {
    (state >> (8 * k)) as u8
}

fn with_rank(state: State, k: usize, rank: u8) -> State {
    (state & !(0xff << (8 * k))) | (u64::from(rank) << (8 * k))
}

/// One way to a state.
#[derive(Clone, Copy)]
struct Way {
    state: State,
    cost: u64,
    before: u16,
    /// The resource chosen for the last piece, or `MOST` when it was dropped.
    choice: u8,
    /// Decides between ways of the same cost: every one of them is as likely.
    lot: u32,
}

/// A piece on the resources at hand, one byte for each; ranks are among the ends there.
#[derive(Clone, Copy, Default)]
struct Here {
    /// The high bit where it may go.
    allowed: u64,
    /// Its own rank.
    rank: u64,
    /// The highest rank that has ended when it starts.
    free: u64,
    /// The highest rank that has ended before anything from this piece on starts.
    over: u64,
}

/// A few resources, and what is laid out on them anew.
struct Around {
    /// By start.
    items: Vec<u32>,
    resources: Vec<usize>,
    /// Per resource the end of what stays before, and the start of what stays after.
    edges: Vec<(i64, i64)>,
    /// Per resource what stays in between, by start: items of several units are left where
    /// they are.
    fixed: Vec<Vec<(i64, i64)>>,
}

/// What is used again from one call to the next.
pub(crate) struct Scratch {
    pieces: Vec<Here>,
    /// Start, end, and whether it may go there, on the resource that is being looked at.
    spans: Vec<Option<(i64, i64)>>,
    ends: Vec<i64>,
    /// Ways of all layers, one after the other.
    ways: Vec<Way>,
    layers: Vec<usize>,
    next: Vec<Way>,
    order: Vec<(u64, u32)>,
    /// Per slot the round it was used in, and a place in `next`.
    slots: Vec<(u32, u32)>,
    round: u32,
}

impl Scratch {
    pub(crate) fn new() -> Scratch {
        Scratch {
            pieces: Vec::new(),
            spans: Vec::new(),
            ends: Vec::new(),
            ways: Vec::new(),
            layers: Vec::new(),
            next: Vec::new(),
            order: Vec::new(),
            slots: vec![(0, 0); SLOTS],
            round: 0,
        }
    }

    /// Offers a way to the next layer; of two to the same state the cheaper stays, ties at
    /// random.
    fn offer(&mut self, mut way: Way, random: &mut Random) {
        way.lot = random.next() as u32;
        let mut slot = (way.state.wrapping_mul(0x9e37_79b9_7f4a_7c15) >> 48) as usize % SLOTS;
        loop {
            let (round, at) = self.slots[slot];
            if round != self.round {
                self.slots[slot] = (self.round, self.next.len() as u32);
                self.next.push(way);
                return;
            }
            let known = &mut self.next[at as usize];
            if known.state == way.state {
                if (way.cost, way.lot) < (known.cost, known.lot) {
                    *known = way;
                }
                return;
            }
            slot = (slot + 1) % SLOTS;
        }
    }

    /// Keeps the cheapest of the next layer, ties at random, and moves on to it. Returns how
    /// many there were.
    fn advance(&mut self) -> usize {
        let count = self.next.len();
        self.layers.push(self.ways.len());
        if count > BEAM {
            self.order.clear();
            for (at, way) in self.next.iter().enumerate() {
                // The cost first; the low bits decide ties.
                let key = way.cost << 24 | u64::from(way.lot >> 8);
                self.order.push((key, at as u32));
            }
            self.order.select_nth_unstable(BEAM);
            let kept = self.order[..BEAM]
                .iter()
                .map(|(_, at)| self.next[*at as usize]);
            self.ways.extend(kept);
        } else {
            self.ways.extend_from_slice(&self.next);
        }
        self.next.clear();
        self.round += 1;
        count
    }
}

impl Tabu<'_> {
    /// Rearranges until `until` says so, or everything has its place; `width` is the number
    /// of resources at once and adapts itself. Returns how many attempts there were.
    pub(crate) fn rearrange(
        &mut self,
        attempts: u32,
        width: &mut f64,
        stop: &dyn crate::engine::Stopper,
    ) {
        let mut scratch = std::mem::replace(&mut self.scratch, Scratch::new());
        for attempt in 0..attempts {
            let done = self.done() && self.wishes.is_none();
            if done || (attempt % 8 == 7 && stop.stop()) {
                break;
            }
            let around = self.neighbourhood(*width as usize);
            if around.resources.len() < 2 {
                break;
            }
            let fullest = self.lay_out(&mut scratch, &around);
            // Slowly: one crowded neighbourhood says little about the next.
            if fullest > BEAM {
                *width = (*width - 0.1).max(2.0);
            } else if fullest < BEAM / 3 {
                *width = (*width + 0.1).min(MOST as f64);
            }
        }
        self.scratch = scratch;
    }

    /// A few resources that could exchange pieces, by a walk from something without a place,
    /// and the pieces to lay out on them, by start.
    fn neighbourhood(&mut self, width: usize) -> Around {
        let mut resources: Vec<usize> = Vec::with_capacity(width);
        let mut along: Vec<u32> = Vec::new();
        let total = self.rows.len();
        match self.unplaced.len() {
            _ if self.wishes.is_some() => resources.extend(self.away_from_home()),
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
            let Some(item) = item else { continue };
            // Of two, the one with which more can be exchanged.
            let two = [self.some_resource_for(item), self.some_resource_for(item)];
            let next = two.into_iter().flatten();
            let next = next.filter(|r| !resources.contains(r));
            resources.extend(next.max_by_key(|r| self.exchanges(here, *r)));
        }
        let several = |item: &u32| self.problem.units(*item as usize).len() > 1;
        let mut items = along;
        items.retain(|item| !several(item));
        let mut fixed = vec![Vec::new(); resources.len()];
        for (r, fixed) in resources.iter().zip(&mut fixed) {
            for (start, end, item) in &self.rows[*r] {
                match several(item) {
                    true => fixed.push((*start, *end)),
                    false => items.push(*item),
                }
            }
        }
        let key = |item: &u32| (self.problem.items[*item as usize].core, *item);
        items.sort_unstable_by_key(key);
        let mut edges = vec![(i64::MIN, i64::MAX); resources.len()];
        if items.len() > MOST_PIECES {
            let centre = self.random.below(items.len());
            let centre = match self.unplaced.is_empty() {
                true => centre,
                false => items
                    .iter()
                    .position(|item| self.on[*item as usize] == NONE)
                    .unwrap_or(centre),
            };
            let from = centre.saturating_sub(MOST_PIECES / 2);
            items = items[from..items.len().min(from + MOST_PIECES)].to_vec();
            let (first, last) = (key(&items[0]), key(&items[items.len() - 1]));
            for (r, (begin, finish)) in resources.iter().zip(&mut edges) {
                for (start, end, item) in self.rows[*r].iter().filter(|(.., i)| !several(i)) {
                    if key(item) < first {
                        *begin = (*begin).max(*end);
                    } else if key(item) > last {
                        *finish = (*finish).min(*start);
                    }
                }
            }
        }
        Around {
            items,
            resources,
            edges,
            fixed,
        }
    }

    /// Where something is that was elsewhere before, and where it was.
    fn away_from_home(&mut self) -> Vec<usize> {
        let Some(wishes) = self.wishes else {
            return Vec::new();
        };
        let away = |item: &usize| {
            let on = self.on[*item];
            on != NONE && wishes.cost(*item, on) > wishes.least(*item)
        };
        let away: Vec<usize> = (0..self.on.len()).filter(away).collect();
        if away.is_empty() {
            return Vec::new();
        }
        let item = away[self.random.below(away.len())];
        let home = wishes.home(item).map(|home| home as usize);
        let mut places: Vec<usize> = home.into_iter().collect();
        places.push(self.on[item] as usize);
        places.dedup();
        places
    }

    /// How many pieces on either resource the other could take, clashes aside.
    fn exchanges(&self, a: usize, b: usize) -> usize {
        let (class_a, class_b) = (self.problem.class_of[a], self.problem.class_of[b]);
        let takes = |row: usize, class: u32| {
            let items = self.rows[row].iter();
            items
                .filter(|(_, _, item)| {
                    let choices = self.problem.choices(*item as usize);
                    choices.binary_search(&class).is_ok()
                })
                .count()
        };
        takes(a, class_b) + takes(b, class_a)
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
    fn lay_out(&mut self, scratch: &mut Scratch, around: &Around) -> usize {
        let (items, resources) = (&around.items, &around.resources);
        let count = resources.len();
        let resting = resources.iter().filter(|r| self.resting[**r]).count();
        let rests = (resting + self.rest_unplaced.min(1)).min(count);
        let dropped: u64 = items
            .iter()
            .filter(|item| self.on[**item as usize] == NONE)
            .map(|item| u64::from(self.weight[*item as usize]))
            .sum();
        let bound = match self.wishes {
            None => dropped + (rests - resting) as u64 * u64::from(self.rest_weight),
            Some(wishes) => {
                let here = items.iter().map(|item| *item as usize);
                here.map(|item| wishes.cost(item, self.on[item])).sum()
            }
        };
        // The least that the pieces from each on will cost.
        let mut coming = vec![0; items.len() + 1];
        if let Some(wishes) = self.wishes {
            for (at, item) in items.iter().enumerate().rev() {
                let here = resources
                    .iter()
                    .filter(|r| self.problem.allows(*item as usize, **r));
                let least = here.map(|r| wishes.cost(*item as usize, *r as u32)).min();
                coming[at] = coming[at + 1] + least.unwrap_or(0);
            }
        }
        self.prepare(scratch, around);
        let mut random = self.random.clone();
        scratch.ways.clear();
        scratch.layers.clear();
        self.beginnings(scratch, around, rests, bound);
        let mut fullest = 0;
        for (at, item) in items.iter().enumerate() {
            let weight = u64::from(self.weight[*item as usize]);
            let here = scratch.pieces[at];
            // What has ended before anything still to come is nothing.
            let over = scratch.pieces[at + 1].over;
            let first = scratch.layers[at];
            let last = scratch.ways.len();
            for place in first..last {
                let way = scratch.ways[place];
                let before = (place - first) as u16;
                if self.wishes.is_none() && way.cost + weight <= bound {
                    let dropped = Way {
                        state: without(way.state, over),
                        cost: way.cost + weight,
                        before,
                        choice: MOST as u8,
                        lot: 0,
                    };
                    scratch.offer(dropped, &mut random);
                }
                let mut free = at_most(way.state, here.free) & here.allowed;
                while free != 0 {
                    let k = free.trailing_zeros() as usize / 8;
                    free &= free - 1;
                    let byte = 0xff << (8 * k);
                    let mut cost = way.cost;
                    if let Some(wishes) = self.wishes {
                        cost += wishes.cost(*item as usize, resources[k] as u32);
                        if cost + coming[at + 1] > bound {
                            continue;
                        }
                    }
                    let put = Way {
                        state: without(way.state & !byte | here.rank & byte, over),
                        cost,
                        before,
                        choice: k as u8,
                        lot: 0,
                    };
                    scratch.offer(put, &mut random);
                }
            }
            let found = scratch.advance();
            fullest = fullest.max(found);
            if found == 0 {
                self.random = random;
                return fullest;
            }
        }
        self.random = random;
        self.take_over(scratch, items, resources);
        fullest
    }

    /// Spans and ranks of the pieces on the resources; one more entry stands for the end.
    fn prepare(&self, scratch: &mut Scratch, around: &Around) {
        let (items, resources) = (&around.items, &around.resources);
        scratch.pieces.clear();
        scratch.pieces.resize(items.len() + 1, Here::default());
        for (k, r) in resources.iter().enumerate() {
            let class = self.problem.class_of[*r];
            let span = |item: &u32| {
                let choices = self.problem.choices(*item as usize);
                choices.binary_search(&class).ok()?;
                // What is laid out anew has one unit.
                let unit = self.problem.unit_places(*item as usize).start;
                let span = self.problem.occupied(unit, class);
                let (begin, finish) = around.edges[k];
                let fixed = &around.fixed[k];
                let next = fixed.partition_point(|(start, _)| *start < span.end.0);
                let before = fixed[..next].last();
                let clear = before.is_none_or(|(_, end)| *end <= span.start.0);
                (clear && begin <= span.start.0 && span.end.0 <= finish)
                    .then_some((span.start.0, span.end.0))
            };
            scratch.spans.clear();
            scratch.spans.extend(items.iter().map(span));
            scratch.ends.clear();
            let ends = scratch.spans.iter().flatten().map(|(_, end)| *end);
            scratch.ends.extend(ends);
            scratch.ends.sort_unstable();
            scratch.ends.dedup();
            let ended = |by: i64| scratch.ends.partition_point(|end| *end <= by) as u64;
            let mut coming = i64::MAX;
            let spans = scratch.spans.iter().copied().chain([None]);
            let spans: Vec<Option<(i64, i64)>> = spans.collect();
            for (here, span) in scratch.pieces.iter_mut().zip(spans).rev() {
                if let Some((start, end)) = span {
                    coming = coming.min(start);
                    here.allowed |= 0x80 << (8 * k);
                    here.rank |= ended(end) << (8 * k);
                    here.free |= ended(start) << (8 * k);
                }
                here.over |= ended(coming) << (8 * k);
            }
        }
    }

    /// Which of the resources rest from the beginning: every way to choose them.
    fn beginnings(&self, scratch: &mut Scratch, around: &Around, rests: usize, bound: u64) {
        scratch.layers.push(0);
        let count = around.resources.len();
        // Where something stays before or after, the resource cannot rest.
        let stays =
            |k: &usize| around.edges[*k] != (i64::MIN, i64::MAX) || !around.fixed[*k].is_empty();
        let working = (0..count).filter(stays).fold(0, |set, k| set | 1 << k);
        for set in 0u32..1 << count {
            let resting = set.count_ones() as usize;
            let fewer = rests.saturating_sub(resting) as u64;
            let cost = fewer * u64::from(self.rest_weight);
            let dear = cost > bound || (fewer > 0 && self.wishes.is_some());
            if resting > rests || dear || set & working != 0 {
                continue;
            }
            let chosen = (0..count).filter(|k| set & (1 << k) != 0);
            scratch.ways.push(Way {
                state: chosen.fold(0, |state, k| with_rank(state, k, RESTS)),
                cost,
                before: 0,
                choice: MOST as u8,
                lot: 0,
            });
        }
        scratch.next.clear();
        scratch.round += 1;
    }

    fn take_over(&mut self, scratch: &Scratch, items: &[u32], resources: &[usize]) {
        let last = scratch.layers.last().copied().unwrap_or(0);
        let cheapest = (last..scratch.ways.len()).min_by_key(|at| scratch.ways[*at].cost);
        let Some(mut at) = cheapest else { return };
        let mut choices = vec![MOST as u8; items.len()];
        for layer in (1..scratch.layers.len()).rev() {
            let way = &scratch.ways[at];
            choices[layer - 1] = way.choice;
            at = scratch.layers[layer - 1] + usize::from(way.before);
        }
        let rests = scratch.ways[at].state;
        for item in items {
            let on = self.on[*item as usize];
            if on != NONE {
                self.eject(*item, on as usize);
            }
        }
        for r in resources {
            if std::mem::replace(&mut self.resting[*r], false) {
                self.rest_unplaced += 1;
            }
        }
        for (k, r) in resources.iter().enumerate() {
            if rank(rests, k) == RESTS {
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
