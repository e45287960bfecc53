//! Applying an edit to a timetable.

use super::{Change, Edit};
use crate::clock::{Instant, YEARS};
use crate::timetable::{Closure, Common, Count, Kind, Listed, Named, Request, Timetable, subtract};
use chrono::Datelike;
use std::sync::Arc;
use thiserror::Error;

/// Why an edit is refused. Nothing was changed.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
pub enum Refused {
    /// No such request.
    #[error("no request is called {0}")]
    UnknownPiece(Arc<str>),
    /// No such resource.
    #[error("no resource is called {0}")]
    UnknownResource(Arc<str>),
    /// A kind where one resource is meant.
    #[error("{0} is a kind; name one of its members, such as {0}-1")]
    IsKind(Arc<str>),
    /// A move of a fastened piece.
    #[error("{0} is fastened; first: loosen {0}")]
    Fastened(Arc<str>),
    /// A change of something that has begun.
    #[error("{0} has begun before the time up to which everything is settled")]
    Begun(Arc<str>),
    /// Already so.
    #[error("{piece} is {state} already")]
    Already {
        /// The piece.
        piece: Arc<str>,
        /// How it is.
        state: &'static str,
    },
    /// Not so.
    #[error("{piece} is not {state}")]
    NotSo {
        /// The piece.
        piece: Arc<str>,
        /// How it is not.
        state: &'static str,
    },
    /// A withdrawn request is left alone until it is restored.
    #[error("{0} is withdrawn; first: restore {0}")]
    Withdrawn(Arc<str>),
    /// Two different pieces are needed.
    #[error("{0} cannot be swapped with itself")]
    Itself(Arc<str>),
    /// A swap of something without a place.
    #[error("{0} has no place that could be swapped")]
    NoPlace(Arc<str>),
    /// Nothing closed in that stretch.
    #[error("{0} is not closed then")]
    NotClosed(Arc<str>),
    /// The year is out of bounds.
    #[error("that is outside the years {} to {}", YEARS.start(), YEARS.end())]
    Year,
    /// Undo without history, and the like.
    #[error("there is nothing to {0}")]
    Nothing(&'static str),
}

/// What an edit changed, so that the file can follow.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Touched {
    /// The request at that place.
    Request(usize),
    /// The named resource at that place; it may be new.
    Named(usize),
    /// The kind at that place, which is new, so that the resources implied so far stay.
    Kind(usize),
}

/// Applies a change to the timetable and says what it touched. `Swap`, `Undo` and `Redo`
/// are the desk's to resolve and are refused here.
///
/// # Errors
/// [`Refused`]; the timetable is then unchanged.
pub fn apply(timetable: &mut Timetable, edit: &Edit) -> Result<Vec<Touched>, Refused> {
    match &edit.what {
        Change::Move { piece, to } => moved(timetable, piece, *to),
        Change::Pin { piece, on } => {
            let open = on.as_ref();
            if timetable.resources().get(open).is_none() && timetable.open_kind_of(open).is_none() {
                return Err(if is_kind(timetable, open) {
                    Refused::IsKind(Arc::clone(on))
                } else {
                    Refused::UnknownResource(Arc::clone(on))
                });
            }
            change(timetable, piece, |request| {
                if request.pin.as_ref() == Some(on) {
                    return Err(already(request, "pinned there"));
                }
                request.pin = Some(Arc::clone(on));
                Ok(())
            })
        }
        Change::Unpin(piece) => change(timetable, piece, |request| match request.pin.take() {
            Some(_) => Ok(()),
            None => Err(not_so(request, "pinned")),
        }),
        Change::Fasten(piece) => change(timetable, piece, |request| {
            if std::mem::replace(&mut request.fastened, true) {
                return Err(already(request, "fastened"));
            }
            Ok(())
        }),
        Change::Loosen(piece) => change(timetable, piece, |request| {
            if !std::mem::replace(&mut request.fastened, false) {
                return Err(not_so(request, "fastened"));
            }
            Ok(())
        }),
        Change::Withdraw(piece) => {
            let at = position(timetable, piece)?;
            unbegun(timetable, at)?;
            let mut request = Request::clone(&timetable.requests[at]);
            if std::mem::replace(&mut request.withdrawn, true) {
                return Err(already(&request, "withdrawn"));
            }
            timetable.replace(at, request);
            Ok(vec![Touched::Request(at)])
        }
        Change::Restore(piece) => {
            let at = position(timetable, piece)?;
            let mut request = Request::clone(&timetable.requests[at]);
            if !std::mem::replace(&mut request.withdrawn, false) {
                return Err(not_so(&request, "withdrawn"));
            }
            timetable.replace(at, request);
            Ok(vec![Touched::Request(at)])
        }
        Change::Close { resource, span } => {
            let closure = Closure {
                span: *span,
                because: edit.because.clone(),
            };
            within_years(timetable, span.start)?;
            within_years(timetable, span.end)?;
            closures(timetable, resource, |closed| {
                closed.push(closure);
                Ok(())
            })
        }
        Change::Reopen { resource, span } => closures(timetable, resource, |closed| {
            let left = subtract(closed, *span);
            if left == *closed {
                return Err(Refused::NotClosed(Arc::clone(resource)));
            }
            *closed = left;
            Ok(())
        }),
        Change::Swap(first, _) => Err(Refused::NoPlace(Arc::clone(first))),
        Change::Undo => Err(Refused::Nothing("undo")),
        Change::Redo => Err(Refused::Nothing("redo")),
    }
}

fn already(request: &Request, state: &'static str) -> Refused {
    Refused::Already {
        piece: Arc::clone(&request.id),
        state,
    }
}

fn not_so(request: &Request, state: &'static str) -> Refused {
    Refused::NotSo {
        piece: Arc::clone(&request.id),
        state,
    }
}

fn position(timetable: &Timetable, piece: &Arc<str>) -> Result<usize, Refused> {
    timetable
        .position(piece)
        .ok_or_else(|| Refused::UnknownPiece(Arc::clone(piece)))
}

fn is_kind(timetable: &Timetable, id: &str) -> bool {
    let named = timetable
        .named
        .iter()
        .filter_map(|named| named.kind.as_deref());
    let mut kinds = timetable
        .kinds
        .iter()
        .map(|kind| kind.id.as_ref())
        .chain(named);
    kinds.any(|kind| kind == id)
}

fn unbegun(timetable: &Timetable, at: usize) -> Result<(), Refused> {
    let request = &timetable.requests[at];
    match timetable.settings.settled_until {
        Some(until) if request.start < until => Err(Refused::Begun(Arc::clone(&request.id))),
        _ => Ok(()),
    }
}

fn within_years(timetable: &Timetable, at: Instant) -> Result<(), Refused> {
    let fits = YEARS.contains(&timetable.settings.zone.date(at).year());
    if fits { Ok(()) } else { Err(Refused::Year) }
}

/// Changes one request that is neither withdrawn nor begun.
fn change(
    timetable: &mut Timetable,
    piece: &Arc<str>,
    how: impl FnOnce(&mut Request) -> Result<(), Refused>,
) -> Result<Vec<Touched>, Refused> {
    let at = position(timetable, piece)?;
    let mut request = Request::clone(&timetable.requests[at]);
    if request.withdrawn {
        return Err(Refused::Withdrawn(Arc::clone(piece)));
    }
    how(&mut request)?;
    timetable.replace(at, request);
    Ok(vec![Touched::Request(at)])
}

fn moved(
    timetable: &mut Timetable,
    piece: &Arc<str>,
    to: Instant,
) -> Result<Vec<Touched>, Refused> {
    let at = position(timetable, piece)?;
    unbegun(timetable, at)?;
    within_years(timetable, to)?;
    within_years(timetable, to + timetable.requests[at].length)?;
    change(timetable, piece, |request| {
        if request.fastened {
            return Err(Refused::Fastened(Arc::clone(&request.id)));
        }
        if request.start == to {
            return Err(already(request, "at that time"));
        }
        request.start = to;
        Ok(())
    })
}

/// Changes the closures of a resource. A member without a table of its own gets one; where
/// neither kind nor resource is stated, the implied kind is stated first.
fn closures(
    timetable: &mut Timetable,
    resource: &Arc<str>,
    how: impl FnOnce(&mut Vec<Closure>) -> Result<(), Refused>,
) -> Result<Vec<Touched>, Refused> {
    let (mut closed, kind) = match timetable.resources().get(resource) {
        Some(known) => (known.hours.closed().to_vec(), known.kind.clone()),
        // A member of a kind that grows as needed may be closed before it is first used.
        None => match timetable.open_kind_of(resource) {
            Some(kind) => (Vec::new(), Some(kind)),
            None if is_kind(timetable, resource) => {
                return Err(Refused::IsKind(Arc::clone(resource)));
            }
            None => return Err(Refused::UnknownResource(Arc::clone(resource))),
        },
    };
    how(&mut closed)?;
    let mut touched = Vec::new();
    if let Some(at) = timetable
        .named
        .iter()
        .position(|named| named.id == *resource)
    {
        let mut named = Named::clone(&timetable.named[at]);
        named.common.closed = Some(closed);
        timetable.named[at] = Arc::new(named);
        touched.push(Touched::Named(at));
    } else {
        if timetable.listed.is_empty() {
            timetable.kinds.push(Arc::new(Kind {
                id: Arc::clone(&timetable.settings.noun.one),
                count: Count::AsNeeded,
                common: Common::default(),
            }));
            timetable.listed.push(Listed::Kind(0));
            touched.push(Touched::Kind(0));
        }
        let at = timetable.named.len();
        timetable.named.push(Arc::new(Named {
            id: Arc::clone(resource),
            kind,
            common: Common {
                closed: Some(closed),
                ..Common::default()
            },
        }));
        timetable.listed.push(Listed::Named(at));
        touched.push(Touched::Named(at));
    }
    timetable.refresh();
    Ok(touched)
}
