//! Who can take this? For one piece, every resource as it stands: free, free if something
//! else goes elsewhere, or not, and why not.

use crate::claim::Plan;
use crate::clock::Span;
use crate::lookup::FastMap;
use crate::timetable::{Piece, Resource, Timetable, Unfit, all_may_use, occupied};
use std::sync::Arc;

/// What holds of one resource.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// It has the piece.
    Here,
    /// Nothing is in the way.
    Free,
    /// Nothing is once these have gone there, each to a place that is free.
    FreeIf(Vec<(Arc<str>, Arc<str>)>),
    /// These are in the way and have no free place elsewhere.
    Taken(Vec<Arc<str>>),
    /// It may not take the piece.
    Cannot(Unfit),
}

/// A resource and what holds of it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Choice {
    /// The resource.
    pub resource: Arc<str>,
    /// What holds.
    pub verdict: Verdict,
}

/// Things in the way that are moved at most.
const MOST_MOVED: usize = 3;

/// Every resource, the nearest fit first: where it is, what is free (the least seats too many
/// first), what is free if something goes elsewhere, what is taken, what cannot. The piece's
/// own pin is left aside. Empty when there is no such piece.
pub fn who_can_take(timetable: &Timetable, plan: &Plan, piece: &str) -> Vec<Choice> {
    let mut item = timetable.with_what_stays(piece);
    for piece in &mut item {
        piece.pin = None;
    }
    let Some(first) = item.first() else {
        return Vec::new();
    };
    let size = first.size.unwrap_or(0);
    let rows = Rows::of(timetable, plan);
    let now = plan.placements.iter().find(|p| p.piece == first.id);
    let now = now.map(|placement| Arc::clone(&placement.resource));
    let mut choices: Vec<((u8, u64, usize), Choice)> = Vec::new();
    for (at, resource) in timetable.resources().all.iter().enumerate() {
        let verdict = match all_may_use(&item, resource) {
            Err(unfit) => Verdict::Cannot(unfit),
            Ok(()) if now.as_ref() == Some(&resource.id) => Verdict::Here,
            Ok(()) => rows.verdict(&item, at),
        };
        let rank = match &verdict {
            Verdict::Here => 0,
            Verdict::Free => 1,
            Verdict::FreeIf(moves) => 1 + moves.len() as u8,
            Verdict::Taken(_) => 100,
            Verdict::Cannot(_) => 101,
        };
        let spare = resource
            .seats
            .map_or(u64::MAX, |seats| seats.saturating_sub(size));
        let choice = Choice {
            resource: Arc::clone(&resource.id),
            verdict,
        };
        choices.push(((rank, spare, at), choice));
    }
    choices.sort_by_key(|(key, _)| *key);
    choices.into_iter().map(|(_, choice)| choice).collect()
}

/// What is on each resource.
struct Rows<'a> {
    timetable: &'a Timetable,
    pieces: FastMap<Arc<str>, Piece>,
    /// Per resource the occupied spans, with the piece.
    rows: Vec<Vec<(Span, Arc<str>)>>,
}

impl<'a> Rows<'a> {
    fn of(timetable: &'a Timetable, plan: &Plan) -> Rows<'a> {
        let all = timetable.pieces().into_iter();
        let pieces: FastMap<Arc<str>, Piece> =
            all.map(|piece| (Arc::clone(&piece.id), piece)).collect();
        let resources = timetable.resources();
        let mut rows = vec![Vec::new(); resources.all.len()];
        for placement in &plan.placements {
            let place = resources.position(&placement.resource);
            if let (Some(at), Some(piece)) = (place, pieces.get(&placement.piece)) {
                let span = occupied(piece, &resources.all[at]);
                rows[at].push((span, Arc::clone(&piece.id)));
            }
        }
        Rows {
            timetable,
            pieces,
            rows,
        }
    }

    /// What is in the way of some pieces on a resource, themselves left aside.
    fn in_the_way(&self, item: &[Piece], at: usize) -> Vec<Arc<str>> {
        let resource = &self.timetable.resources().all[at];
        let spans: Vec<Span> = item.iter().map(|piece| occupied(piece, resource)).collect();
        let others = self.rows[at].iter().filter(|(span, id)| {
            spans.iter().any(|own| own.overlaps(*span)) && item.iter().all(|piece| piece.id != *id)
        });
        others.map(|(_, id)| Arc::clone(id)).collect()
    }

    fn verdict(&self, item: &[Piece], at: usize) -> Verdict {
        let in_the_way = self.in_the_way(item, at);
        if in_the_way.is_empty() {
            return Verdict::Free;
        }
        if in_the_way.len() > MOST_MOVED {
            return Verdict::Taken(in_the_way);
        }
        let resources = &self.timetable.resources().all;
        let mut moves: Vec<(Arc<str>, Arc<str>)> = Vec::new();
        let mut gone: Vec<(usize, Vec<Piece>)> = Vec::new();
        for id in &in_the_way {
            if gone
                .iter()
                .any(|(_, moved)| moved.iter().any(|piece| piece.id == *id))
            {
                continue;
            }
            let other = self.timetable.with_what_stays(id);
            let free = |place: &usize| {
                let resource: &Resource = &resources[*place];
                *place != at
                    && all_may_use(&other, resource).is_ok()
                    && self.in_the_way(&other, *place).is_empty()
                    && gone
                        .iter()
                        .all(|(to, moved)| to != place || apart(&other, moved, resource))
            };
            // Rather onto something that is in use already.
            let mut places: Vec<usize> = (0..resources.len()).filter(free).collect();
            places.sort_by_key(|place| (self.rows[*place].is_empty(), *place));
            let Some(to) = places.first().copied() else {
                return Verdict::Taken(in_the_way);
            };
            let name = self
                .pieces
                .get(id)
                .map_or_else(|| Arc::clone(id), |piece| Arc::clone(&piece.id));
            moves.push((name, Arc::clone(&resources[to].id)));
            gone.push((to, other));
        }
        Verdict::FreeIf(moves)
    }
}

/// Whether no piece of one overlaps a piece of the other on a resource.
fn apart(one: &[Piece], other: &[Piece], resource: &Resource) -> bool {
    let clear = |a: &Piece| {
        let span = occupied(a, resource);
        other.iter().all(|b| !occupied(b, resource).overlaps(span))
    };
    one.iter().all(clear)
}
