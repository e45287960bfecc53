//! What is stated: requests, kinds, named resources, opening times, and what follows
//! from them before anything is planned (the resources there are, the pieces to place,
//! who may use what).
//!
//! Imports `clock` and `text`. Everything is cheap to clone: an edit copies the one
//! request it changes and shares the rest, so that history and background solving can
//! hold on to whole snapshots.

mod finding;
mod hours;
mod piece;
mod repeats;
mod resources;
mod stated;

pub(crate) use finding::Wishes;
pub use finding::{Finding, FindingKind, findings, stays};
pub use hours::{Closure, Days, Hours, Opening, subtract};
pub use piece::{
    Piece, Unfit, all_may_use, items, itself, least_buffers, may_use, occupied, suits,
    suits_if_named,
};
pub use repeats::{Dated, Differing, Except, Repeats, RepeatsError};
pub(crate) use resources::member_number;
pub use resources::{Resource, Resources};
pub use stated::{Common, Count, Kind, Listed, Named, Noun, Prefer, Request, Settings, TimeStated};

use crate::lookup::FastMap;
use std::sync::Arc;

/// A whole timetable as stated.
#[derive(Clone, Debug)]
pub struct Timetable {
    /// What is said once for all.
    pub settings: Arc<Settings>,
    /// The kinds, in file order.
    pub kinds: Vec<Arc<Kind>>,
    /// The named resources (and overridden members), in file order.
    pub named: Vec<Arc<Named>>,
    /// File order over both tables.
    pub listed: Vec<Listed>,
    /// The requests, in file order.
    pub requests: Vec<Arc<Request>>,
    /// Where each request is in `requests`, by id.
    ids: Arc<FastMap<Arc<str>, usize>>,
    /// What there is to hand out; follows from the rest.
    resources: Arc<Resources>,
}

impl PartialEq for Timetable {
    /// Equal when the same things are stated in the same order.
    fn eq(&self, other: &Self) -> bool {
        self.settings == other.settings
            && self.kinds == other.kinds
            && self.named == other.named
            && self.listed == other.listed
            && self.requests == other.requests
    }
}

impl Timetable {
    /// A timetable of these statements. Ids are expected to be unique; a later request
    /// of the same id is not found by id.
    pub fn new(
        settings: Settings,
        kinds: Vec<Kind>,
        named: Vec<Named>,
        listed: Vec<Listed>,
        requests: Vec<Request>,
    ) -> Timetable {
        let requests: Vec<Arc<Request>> = requests.into_iter().map(Arc::new).collect();
        let mut ids = FastMap::default();
        ids.reserve(requests.len());
        for (at, request) in requests.iter().enumerate() {
            ids.entry(Arc::clone(&request.id)).or_insert(at);
        }
        let mut timetable = Timetable {
            settings: Arc::new(settings),
            kinds: kinds.into_iter().map(Arc::new).collect(),
            named: named.into_iter().map(Arc::new).collect(),
            listed,
            requests,
            ids: Arc::new(ids),
            resources: Arc::new(Resources::default()),
        };
        timetable.refresh();
        timetable
    }

    /// Works the resources out again after a change of what they follow from.
    pub fn refresh(&mut self) {
        self.resources = Arc::new(Resources::of(self));
    }

    /// What there is to hand out, in listed order.
    pub fn resources(&self) -> &Resources {
        &self.resources
    }

    /// The place of a request in [`Timetable::requests`].
    pub fn position(&self, id: &str) -> Option<usize> {
        self.ids.get(id).copied()
    }

    /// The request of that id.
    pub fn request(&self, id: &str) -> Option<&Arc<Request>> {
        self.position(id).map(|at| &self.requests[at])
    }

    /// Replaces one request; resources are worked out again where some are made as needed.
    pub fn replace(&mut self, at: usize, request: Request) {
        let before = std::mem::replace(&mut self.requests[at], Arc::new(request));
        let now = &self.requests[at];
        // How many there must be follows from times, buffers and names; nothing else.
        let same = before.span() == now.span()
            && (before.setup, before.turnaround) == (now.setup, now.turnaround)
            && before.withdrawn == now.withdrawn
            && (&before.pin, &before.only, &before.never) == (&now.pin, &now.only, &now.never)
            && (&before.repeats, before.together) == (&now.repeats, now.together);
        if self.resources.open_ended && !same {
            self.refresh();
        }
    }

    /// Adds a request at the end.
    pub fn push(&mut self, request: Request) {
        Arc::make_mut(&mut self.ids)
            .entry(Arc::clone(&request.id))
            .or_insert(self.requests.len());
        self.requests.push(Arc::new(request));
        self.refresh();
    }

    /// Takes a request out; those after it move up.
    pub fn remove(&mut self, at: usize) {
        self.requests.remove(at);
        let ids = self
            .requests
            .iter()
            .enumerate()
            .map(|(at, request)| (Arc::clone(&request.id), at));
        self.ids = Arc::new(ids.collect());
        self.refresh();
    }

    /// Every piece there is to place or has been withdrawn, in file order; the dates of a
    /// request one after the other.
    pub fn pieces(&self) -> Vec<Piece> {
        let mut pieces = Vec::with_capacity(self.requests.len());
        for request in &self.requests {
            match &request.repeats {
                None => pieces.push(Piece::of_request(request)),
                Some(repeats) => {
                    let dates = 0..repeats.dates().len();
                    pieces.extend(dates.map(|date| Piece::of_date(request, repeats, date)));
                }
            }
        }
        pieces
    }

    /// The request of which an id names a date, and that date's place.
    pub fn occurrence(&self, id: &str) -> Option<(usize, usize)> {
        let (request, date) = id.split_once('@')?;
        let at = self.position(request)?;
        let repeats = self.requests[at].repeats.as_ref()?;
        Some((at, repeats.date(date)?))
    }

    /// The piece of that id.
    pub fn piece(&self, id: &str) -> Option<Piece> {
        if let Some((at, date)) = self.occurrence(id) {
            let request = &self.requests[at];
            let repeats = request.repeats.as_ref()?;
            return Some(Piece::of_date(request, repeats, date));
        }
        let request = self.request(id).filter(|request| request.repeats.is_none());
        request.map(Piece::of_request)
    }

    /// The piece of that id, with the dates that it stays together with after it; empty when
    /// there is none.
    pub fn with_what_stays(&self, id: &str) -> Vec<Piece> {
        let Some(piece) = self.piece(id) else {
            return Vec::new();
        };
        let mut item = vec![piece];
        let request = Arc::clone(&item[0].request);
        if let Some(repeats) = request.repeats.as_ref().filter(|_| request.together) {
            let dates = (0..repeats.dates().len()).map(|at| Piece::of_date(&request, repeats, at));
            item.extend(dates.filter(|date| !date.withdrawn && *date.id != *id));
        }
        item
    }

    /// How many tables of what differs on a date there are.
    pub fn differing_tables(&self) -> usize {
        let repeating = self.requests.iter().filter_map(|r| r.repeats.as_ref());
        repeating.map(|repeats| repeats.differing.len()).sum()
    }

    /// Numbers the tables of what differs on a date anew after those at `gone` went.
    pub(crate) fn without_tables(&mut self, gone: &[usize]) {
        if gone.is_empty() {
            return;
        }
        for request in &mut self.requests {
            let Some(repeats) = request.repeats.as_ref().filter(|r| !r.differing.is_empty()) else {
                continue;
            };
            let mut repeats = Repeats::clone(repeats);
            for differing in &mut repeats.differing {
                differing.table -= gone.iter().filter(|at| **at < differing.table).count();
            }
            Arc::make_mut(request).repeats = Some(Arc::new(repeats));
        }
    }

    /// The table of what differs on a date at that place of the file, and its request.
    pub fn differing(&self, table: usize) -> Option<(&Arc<Request>, &Differing)> {
        self.requests.iter().find_map(|request| {
            let differing = request.repeats.as_ref()?.differing.iter();
            let mut differing = differing.filter(|differing| differing.table == table);
            Some((request, differing.next()?))
        })
    }

    /// The kind that grows as needed of which an id names a member, used or not.
    pub fn open_kind_of(&self, id: &str) -> Option<Arc<str>> {
        resources::open_kinds(self).find(|kind| resources::member_number(kind, id).is_some())
    }
}
