//! Replays a proof by cases. The rules of what is left are worked out here once more.

use super::check::Facts;
use super::{MOST_PRICE, Refusal, dearest};
use crate::claim::Case;
use crate::clock::Span;
use crate::lookup::{FastMap, FastSet};
use crate::timetable::Piece;
use std::collections::HashMap;
use std::sync::Arc;

/// Cases within cases beyond which a proof is refused.
const DEEPEST: usize = 1_000;

/// What the proof speaks of: a piece, with what it stays together with.
struct Spoken<'a> {
    pieces: Vec<&'a Piece>,
    /// Places of the resources it may use, ascending.
    usable: Vec<usize>,
    on: Option<usize>,
}

pub(super) struct Replay<'a, 'r> {
    facts: &'a Facts<'a>,
    wanted: usize,
    pieces: Vec<Spoken<'a>>,
    places: FastMap<Arc<str>, usize>,
    /// Per resource a number that alike ones share.
    alike: Vec<usize>,
    /// Per resource, what has been put there.
    held: Vec<Vec<Span>>,
    refusals: &'r mut Vec<Refusal>,
}

/// Checks that the tree refutes every way to do with fewer than `wanted` resources.
pub(super) fn replay(
    facts: &Facts<'_>,
    wanted: usize,
    spoken: &[&Piece],
    tree: &Case,
    refusals: &mut Vec<Refusal>,
) {
    let resources = &facts.timetable.resources().all;
    let mut pieces: Vec<Spoken<'_>> = Vec::with_capacity(spoken.len());
    let mut places: FastMap<Arc<str>, usize> = FastMap::default();
    let mut numbers: FastMap<usize, usize> = FastMap::default();
    for piece in spoken {
        let item = facts.item(piece);
        let at = *numbers.entry(item).or_insert_with(|| {
            pieces.push(Spoken {
                pieces: facts.of_item(item).collect(),
                usable: facts.least(piece).1,
                on: None,
            });
            pieces.len() - 1
        });
        places.insert(Arc::clone(&piece.id), at);
    }
    // Alike to all of these pieces: the same of them may use it, with the same time kept
    // free around them.
    let mut users: Vec<Vec<usize>> = vec![Vec::new(); resources.len()];
    for (at, piece) in pieces.iter().enumerate() {
        for resource in &piece.usable {
            users[*resource].push(at);
        }
    }
    let mut kinds: HashMap<(Vec<usize>, i64, i64), usize> = HashMap::new();
    let alike = users.into_iter().zip(resources).map(|(users, resource)| {
        let count = kinds.len();
        let likeness = (users, resource.setup, resource.turnaround);
        *kinds.entry(likeness).or_insert(count)
    });
    let alike = alike.collect();
    let mut replay = Replay {
        facts,
        wanted,
        places,
        pieces,
        alike,
        held: vec![Vec::new(); resources.len()],
        refusals,
    };
    replay.case(tree, 0);
}

impl Replay<'_, '_> {
    fn refuse(&mut self, why: impl Into<String>) {
        self.refusals.push(Refusal::BadCase(why.into().into()));
    }

    fn in_use(&self) -> usize {
        self.held.iter().filter(|held| !held.is_empty()).count()
    }

    /// The place of a piece that has not been put anywhere.
    fn waiting(&mut self, id: &Arc<str>) -> Option<usize> {
        let at = self.places.get(id).copied();
        let at = at.filter(|at| self.pieces[*at].on.is_none());
        if at.is_none() {
            self.refuse(format!("{id} has a place already, or does not count"));
        }
        at
    }

    fn occupied(&self, piece: usize, resource: usize) -> Vec<Span> {
        let resource = &self.facts.timetable.resources().all[resource];
        let pieces = self.pieces[piece].pieces.iter();
        pieces
            .map(|piece| Facts::occupied(piece, resource))
            .collect()
    }

    /// The resources left for a piece without a place.
    fn left(&self, piece: usize) -> Vec<usize> {
        let may_begin = self.in_use() + 1 < self.wanted;
        let usable = self.pieces[piece].usable.iter().copied();
        usable
            .filter(|r| {
                let spans = self.occupied(piece, *r);
                let held = &self.held[*r];
                let free = |span: &Span| held.iter().all(|other| !other.overlaps(*span));
                let clear = spans.iter().all(free);
                clear && (may_begin || !held.is_empty())
            })
            .collect()
    }

    fn case(&mut self, case: &Case, depth: usize) {
        if depth > DEEPEST {
            return self.refuse("its cases lie too deep within each other");
        }
        match case {
            Case::NoPlace { piece } => {
                if let Some(at) = self.waiting(piece)
                    && !self.left(at).is_empty()
                {
                    self.refuse(format!("{piece} still has a place"));
                }
            }
            Case::Place { piece, on } => self.place(piece, on, depth),
            Case::Short { at, pieces } => self.short(*at, pieces),
            Case::Prices { unit, prices } => self.prices(*unit, prices),
        }
    }

    fn place(&mut self, id: &Arc<str>, on: &[(Arc<str>, Case)], depth: usize) {
        let Some(piece) = self.waiting(id) else {
            return;
        };
        let resources = self.facts.timetable.resources();
        let left = self.left(piece);
        let stated: Vec<Option<usize>> = on.iter().map(|(r, _)| resources.position(r)).collect();
        let stands_for = |r: usize| {
            let twin = |other: usize| {
                self.held[r].is_empty()
                    && self.held[other].is_empty()
                    && self.alike[r] == self.alike[other]
            };
            stated.iter().flatten().any(|s| *s == r || twin(*s))
        };
        if let Some(r) = left.iter().find(|r| !stands_for(**r)) {
            let resource = Arc::clone(&resources.all[*r].id);
            return self.refuse(format!("{id} could also go on {resource}"));
        }
        for ((name, case), at) in on.iter().zip(stated) {
            let Some(at) = at.filter(|at| left.contains(at)) else {
                return self.refuse(format!("{id} cannot go on {name}"));
            };
            let spans = self.occupied(piece, at);
            let before = self.held[at].len();
            self.held[at].extend(spans);
            self.pieces[piece].on = Some(at);
            self.case(case, depth + 1);
            self.pieces[piece].on = None;
            self.held[at].truncate(before);
            if !self.refusals.is_empty() {
                return;
            }
        }
    }

    fn short(&mut self, at: crate::clock::Instant, pieces: &[Arc<str>]) {
        let mut left: Vec<usize> = Vec::new();
        let mut seen: Vec<usize> = Vec::new();
        for id in pieces {
            let Some(piece) = self.waiting(id) else {
                return;
            };
            let mut named = self.pieces[piece]
                .pieces
                .iter()
                .filter(|named| named.id == *id);
            let runs = named.any(|named| self.facts.least(named).0.contains(at));
            if seen.contains(&piece) || !runs {
                return self.refuse(format!("{id} does not count at that moment"));
            }
            seen.push(piece);
            left.extend(self.left(piece));
        }
        left.sort_unstable();
        left.dedup();
        let held = left.iter().filter(|r| !self.held[**r].is_empty()).count();
        let fresh = left.len() - held;
        let may_begin = self.wanted.saturating_sub(1 + self.in_use());
        if held + fresh.min(may_begin) >= pieces.len() {
            self.refuse("a claimed shortage has enough resources left");
        }
    }

    fn prices(&mut self, unit: i64, prices: &[(Arc<str>, i64)]) {
        let fits = |price: &i64| (1..=MOST_PRICE).contains(price);
        if !fits(&unit) || !prices.iter().all(|(_, price)| fits(price)) {
            return self.refusals.push(Refusal::BadPrices);
        }
        let mut chains: Vec<Vec<(Span, i64)>> = vec![Vec::new(); self.held.len()];
        let mut seen: FastSet<&Arc<str>> = FastSet::default();
        for (id, price) in prices {
            let known = self.places.get(id).copied();
            let Some(piece) = known.filter(|_| seen.insert(id)) else {
                return self.refuse(format!("{id} does not count, or is priced twice"));
            };
            let left = match self.pieces[piece].on {
                Some(on) => vec![on],
                None => self.left(piece),
            };
            for r in left {
                let resource = &self.facts.timetable.resources().all[r];
                let named = self.pieces[piece]
                    .pieces
                    .iter()
                    .find(|named| named.id == *id);
                let span = named.map(|named| Facts::occupied(named, resource));
                chains[r].extend(span.map(|span| (span, *price)));
            }
        }
        let mut value: i128 = prices.iter().map(|(_, price)| i128::from(*price)).sum();
        for (chain, held) in chains.iter_mut().zip(&self.held) {
            let beyond = i128::from(dearest(chain)) - i128::from(unit);
            value -= if held.is_empty() {
                beyond.max(0)
            } else {
                beyond
            };
        }
        // More than one resource less than wanted would have to be paid for.
        if value <= i128::from(unit) * (self.wanted as i128 - 1) {
            self.refuse("its prices do not add up");
        }
    }
}
