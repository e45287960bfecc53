//! Pieces, and which resource may take which.

use super::{Repeats, Request, Resource, Settings, Timetable};
use crate::clock::{Instant, Span};
use std::sync::Arc;

/// What is placed: a request, or one of its dates.
#[derive(Clone, Debug)]
pub struct Piece {
    /// Its id: the request's, or with the date (`chem-101@2027-01-11`).
    pub id: Arc<str>,
    /// The request it comes from.
    pub request: Arc<Request>,
    /// Its own time, without buffers.
    pub span: Span,
    /// The resource it stays on.
    pub pin: Option<Arc<str>>,
    /// Stays at its start.
    pub fastened: bool,
    /// Out of the plan.
    pub withdrawn: bool,
    /// Seats it takes.
    pub size: Option<u64>,
    /// Its start by the rule, when it is one of several dates.
    pub dated: Option<Instant>,
}

impl Piece {
    /// The one piece of a request.
    pub fn of_request(request: &Arc<Request>) -> Piece {
        Piece {
            id: Arc::clone(&request.id),
            request: Arc::clone(request),
            span: request.span(),
            pin: request.pin.clone(),
            fastened: request.fastened,
            withdrawn: request.withdrawn,
            size: request.size,
            dated: None,
        }
    }

    /// One date of a request that repeats.
    pub fn of_date(request: &Arc<Request>, repeats: &Repeats, date: usize) -> Piece {
        let dated = &repeats.dates()[date];
        let mut piece = Piece {
            id: Arc::clone(&dated.id),
            span: Span::lasting(dated.start, request.length),
            dated: Some(dated.start),
            ..Piece::of_request(request)
        };
        if let Some(differs) = repeats.differs(date) {
            let start = differs.start.unwrap_or(dated.start);
            piece.span = Span::lasting(start, differs.length.unwrap_or(request.length));
            if differs.pin.is_some() {
                piece.pin.clone_from(&differs.pin);
            }
            piece.fastened |= differs.fastened;
            piece.withdrawn |= differs.withdrawn;
        }
        piece
    }

    /// Whether it stays with the other dates of its request.
    pub fn together(&self) -> bool {
        self.request.together && self.dated.is_some()
    }

    /// Whether it may start at that moment.
    pub fn start_allowed(&self, at: Instant, settings: &Settings) -> bool {
        self.request
            .start_allowed(at, self.span.start, self.dated, settings)
    }

    /// Whether it began before the moment up to which everything is settled.
    pub fn begun(&self, settings: &Settings) -> bool {
        settings
            .settled_until
            .is_some_and(|until| self.span.start < until)
    }
}

/// Why a resource cannot take a piece.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Unfit {
    /// Pinned to another.
    Pinned(Arc<str>),
    /// Not among those it may only use.
    NotInOnly,
    /// Among those it never uses.
    InNever,
    /// Fewer seats than its size.
    TooSmall {
        /// Seats there are.
        seats: u64,
        /// Seats it takes.
        size: u64,
    },
    /// Does not offer something it needs.
    Lacks(Arc<str>),
    /// Runs into a closure, with its reason if one is stated.
    Closed(Option<Arc<str>>),
    /// Not open throughout.
    NotOpen,
    /// Its dates must stay together, and these two overlap on it.
    Itself(Arc<str>, Arc<str>),
    /// It stays with its other dates, and for this one something is in the way.
    Other(Arc<str>, Box<Unfit>),
}

/// The items that pieces form, as ranges of `pieces` (withdrawn ones left out by the
/// caller): dates that stay together are one, everything else is one of its own.
pub fn items<P: std::borrow::Borrow<Piece>>(pieces: &[P]) -> Vec<std::ops::Range<usize>> {
    let mut items: Vec<std::ops::Range<usize>> = Vec::with_capacity(pieces.len());
    for (at, piece) in pieces.iter().enumerate() {
        let piece: &Piece = piece.borrow();
        let with = items.last_mut().filter(|last| {
            let before: &Piece = pieces[last.start].borrow();
            piece.together() && Arc::ptr_eq(&before.request, &piece.request)
        });
        match with {
            Some(last) => last.end = at + 1,
            None => items.push(at..at + 1),
        }
    }
    items
}

/// Two dates of one item that overlap on a resource, buffers included.
pub fn itself<'p, P: std::borrow::Borrow<Piece>>(
    item: &'p [P],
    resource: &Resource,
) -> Option<(&'p Piece, &'p Piece)> {
    if item.len() < 2 {
        return None;
    }
    let mut by_start: Vec<(Span, &Piece)> = item
        .iter()
        .map(|piece| (occupied(piece.borrow(), resource), piece.borrow()))
        .collect();
    by_start.sort_unstable_by_key(|(span, _)| *span);
    // By start, the first two that overlap are neighbours.
    by_start
        .windows(2)
        .find(|pair| pair[0].0.overlaps(pair[1].0))
        .map(|pair| (pair[0].1, pair[1].1))
}

/// The time the piece would keep the resource occupied, buffers included; the request's
/// own buffers come before the resource's.
pub fn occupied(piece: &Piece, resource: &Resource) -> Span {
    piece.span.widened(
        piece.request.setup.unwrap_or(resource.setup),
        piece.request.turnaround.unwrap_or(resource.turnaround),
    )
}

/// Whether one of the names means the resource or its kind.
fn named(names: &[Arc<str>], resource: &Resource) -> bool {
    names
        .iter()
        .any(|name| *name == resource.id || resource.kind.as_ref().is_some_and(|kind| name == kind))
}

/// Whether the resource suits the piece at any time (its pin aside).
///
/// # Errors
/// The first reason against it.
pub fn suits(piece: &Piece, resource: &Resource) -> Result<(), Unfit> {
    let only = &piece.request.only;
    if !only.is_empty() && !named(only, resource) {
        return Err(Unfit::NotInOnly);
    }
    suits_if_named(piece, resource)
}

/// The same for a resource that is known to be among those the piece may only use.
///
/// # Errors
/// The first reason against it.
pub fn suits_if_named(piece: &Piece, resource: &Resource) -> Result<(), Unfit> {
    let request = &piece.request;
    if named(&request.never, resource) {
        return Err(Unfit::InNever);
    }
    if let (Some(size), Some(seats)) = (piece.size, resource.seats)
        && size > seats
    {
        return Err(Unfit::TooSmall { seats, size });
    }
    match request
        .needs
        .iter()
        .find(|need| resource.offers.binary_search(need).is_err())
    {
        Some(need) => Err(Unfit::Lacks(Arc::clone(need))),
        None => Ok(()),
    }
}

/// Whether the piece may use the resource at its time, and the span it then occupies.
///
/// # Errors
/// The first reason against it.
pub fn may_use(piece: &Piece, resource: &Resource) -> Result<Span, Unfit> {
    if let Some(pin) = piece.pin.as_ref().filter(|pin| **pin != resource.id) {
        return Err(Unfit::Pinned(Arc::clone(pin)));
    }
    suits(piece, resource)?;
    let span = occupied(piece, resource);
    if let Some(closure) = resource.hours.closure_in(span) {
        return Err(Unfit::Closed(closure.because.clone()));
    }
    if !resource.hours.open_through(span) {
        return Err(Unfit::NotOpen);
    }
    Ok(span)
}

/// Whether pieces that stay together may all use the resource at their times.
///
/// # Errors
/// The first reason against it.
pub fn all_may_use<P: std::borrow::Borrow<Piece>>(
    item: &[P],
    resource: &Resource,
) -> Result<(), Unfit> {
    for (at, piece) in item.iter().enumerate() {
        let piece: &Piece = piece.borrow();
        may_use(piece, resource).map_err(|because| match at {
            0 => because,
            _ => Unfit::Other(Arc::clone(&piece.id), Box::new(because)),
        })?;
    }
    match itself(item, resource) {
        Some((one, other)) => Err(Unfit::Itself(Arc::clone(&one.id), Arc::clone(&other.id))),
        None => Ok(()),
    }
}

/// The piece's span with its least buffers over the resources it may use: what load,
/// clique and overlap graph count. A piece that no resource may take keeps its own
/// buffers, or the timetable's.
pub fn least_buffers(timetable: &Timetable, piece: &Piece) -> Span {
    let mut least: Option<(i64, i64)> = None;
    for resource in &timetable.resources().all {
        if let Ok(span) = may_use(piece, resource) {
            let (before, after) = (piece.span.start - span.start, span.end - piece.span.end);
            least = Some(least.map_or((before, after), |(b, a)| (b.min(before), a.min(after))));
        }
    }
    let (before, after) = least.unwrap_or((
        piece.request.setup.unwrap_or(timetable.settings.setup),
        piece
            .request
            .turnaround
            .unwrap_or(timetable.settings.turnaround),
    ));
    piece.span.widened(before, after)
}
