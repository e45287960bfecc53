//! Applying an edit to a timetable.

mod dates;

use super::field::Field;
use super::{Change, Edit};
use crate::clock::{Instant, YEARS};
use crate::timetable::{Closure, Common, Count, Kind, Listed, Named, Request, Timetable, subtract};
use chrono::Datelike;
use dates::{differ, moved, repeat};
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
    /// The name is used.
    #[error("{0} is the name of something already; choose another")]
    Taken(Arc<str>),
    /// A name in only or never that is unknown.
    #[error("there is no resource or kind {0}")]
    UnknownName(Arc<str>),
    /// A field that belongs to the other sort of thing.
    #[error("a {what} has no {key}")]
    NoSuchField {
        /// Request or resource.
        what: &'static str,
        /// The key.
        key: &'static str,
    },
    /// Something else names it.
    #[error("{by} speaks of {id} in its pin, only or never; change that first")]
    SpokenOf {
        /// What was to be dropped.
        id: Arc<str>,
        /// A request that names it.
        by: Arc<str>,
    },
    /// A member cannot be dropped, its kind counts it.
    #[error("{0} is a member of a kind; close it, or change the kind's count in the file")]
    Member(Arc<str>),
    /// Without it, what is said of others would mean something else.
    #[error("{0} is the last of its kind; close it instead")]
    LastOne(Arc<str>),
    /// Another desk writes.
    #[error("read only: {0} has it open")]
    ReadOnly(String),
    /// It is so for all dates of the request.
    #[error("all dates of {0} are {1}; first: {2} {0}")]
    Whole(Arc<str>, &'static str, &'static str),
    /// The dates of a request cannot be worked out any more.
    #[error("{0} {1}")]
    Repeats(Arc<str>, String),
    /// Dates with something of their own would get other names.
    #[error(
        "some dates of {0} differ from the rest and would lose their names; undo what differs on them first"
    )]
    DatesDiffer(Arc<str>),
    /// A single date cannot be taken out of the file.
    #[error("{0} is one date of a request; withdraw it instead")]
    OneDate(Arc<str>),
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
    /// The request that was at that place is gone.
    RequestGone(usize),
    /// The named resource that was at that place is gone.
    NamedGone(usize),
    /// The table of what differs on a date, at that place among them; it may be new.
    Occurrence(usize),
    /// The table of what differs on a date that was at that place is gone.
    OccurrenceGone(usize),
    /// What is said once for the whole timetable.
    Settings,
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
            unbegun_piece(timetable, piece)?;
            if let Some(date) = timetable.occurrence(piece) {
                return differ(timetable, date, |differs, whole| {
                    let pin = Some(Arc::clone(on));
                    if differs.pin.as_ref().or(whole.pin.as_ref()) == pin.as_ref() {
                        return Err(already(piece, "pinned there"));
                    }
                    differs.pin = pin;
                    Ok(())
                });
            }
            change(timetable, piece, |request| {
                if request.pin.as_ref() == Some(on) {
                    return Err(already(&request.id, "pinned there"));
                }
                request.pin = Some(Arc::clone(on));
                Ok(())
            })
        }
        Change::Unpin(piece)
        | Change::Fasten(piece)
        | Change::Loosen(piece)
        | Change::Withdraw(piece)
        | Change::Restore(piece)
            if timetable.occurrence(piece).is_some() =>
        {
            let Some(date) = timetable.occurrence(piece) else {
                return Err(Refused::UnknownPiece(Arc::clone(piece)));
            };
            if matches!(edit.what, Change::Withdraw(_) | Change::Unpin(_)) {
                unbegun_piece(timetable, piece)?;
            }
            differ(timetable, date, |differs, whole| match &edit.what {
                Change::Unpin(_) => match differs.pin.take() {
                    Some(_) => Ok(()),
                    None if whole.pin.is_some() => {
                        Err(Refused::Whole(Arc::clone(&whole.id), "pinned", "unpin"))
                    }
                    None => Err(not_so(piece, "pinned")),
                },
                Change::Fasten(_) if differs.fastened || whole.fastened => {
                    Err(already(piece, "fastened"))
                }
                Change::Fasten(_) => {
                    differs.fastened = true;
                    Ok(())
                }
                Change::Loosen(_) if differs.fastened => {
                    differs.fastened = false;
                    Ok(())
                }
                Change::Loosen(_) if whole.fastened => {
                    Err(Refused::Whole(Arc::clone(&whole.id), "fastened", "loosen"))
                }
                Change::Loosen(_) => Err(not_so(piece, "fastened")),
                Change::Withdraw(_) if differs.withdrawn => Err(already(piece, "withdrawn")),
                Change::Withdraw(_) => {
                    differs.withdrawn = true;
                    Ok(())
                }
                _ if differs.withdrawn => {
                    differs.withdrawn = false;
                    Ok(())
                }
                _ => Err(not_so(piece, "withdrawn")),
            })
        }
        Change::Unpin(piece) if unbegun_piece(timetable, piece).is_err() => {
            Err(Refused::Begun(Arc::clone(piece)))
        }
        Change::Unpin(piece) => change(timetable, piece, |request| match request.pin.take() {
            Some(_) => Ok(()),
            None => Err(not_so(&request.id, "pinned")),
        }),
        Change::Fasten(piece) => change(timetable, piece, |request| {
            if std::mem::replace(&mut request.fastened, true) {
                return Err(already(&request.id, "fastened"));
            }
            Ok(())
        }),
        Change::Loosen(piece) => change(timetable, piece, |request| {
            if !std::mem::replace(&mut request.fastened, false) {
                return Err(not_so(&request.id, "fastened"));
            }
            Ok(())
        }),
        Change::Withdraw(piece) => {
            let at = position(timetable, piece)?;
            unbegun(timetable, at)?;
            let mut request = Request::clone(&timetable.requests[at]);
            if std::mem::replace(&mut request.withdrawn, true) {
                return Err(already(&request.id, "withdrawn"));
            }
            timetable.replace(at, request);
            Ok(vec![Touched::Request(at)])
        }
        Change::Restore(piece) => {
            let at = position(timetable, piece)?;
            let mut request = Request::clone(&timetable.requests[at]);
            if !std::mem::replace(&mut request.withdrawn, false) {
                return Err(not_so(&request.id, "withdrawn"));
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
        Change::Add { id, span, fields } => {
            free(timetable, id)?;
            within_years(timetable, span.start)?;
            within_years(timetable, span.end)?;
            let mut request = Request::plain(id, *span);
            for field in fields {
                set_request(timetable, &mut request, field)?;
            }
            timetable.push(request);
            Ok(vec![Touched::Request(timetable.requests.len() - 1)])
        }
        Change::AddResource { id, kind, fields } => {
            free(timetable, id)?;
            if let Some(kind) = kind.as_ref().filter(|kind| !is_kind(timetable, kind)) {
                free(timetable, kind)?;
            }
            let mut common = Common::default();
            for field in fields {
                set_common(&mut common, field)?;
            }
            let mut touched = state_the_implied_kind(timetable);
            let at = timetable.named.len();
            timetable.named.push(Arc::new(Named {
                id: Arc::clone(id),
                kind: kind.clone(),
                common,
            }));
            timetable.listed.push(Listed::Named(at));
            timetable.refresh();
            touched.push(Touched::Named(at));
            Ok(touched)
        }
        Change::Settle(until) => {
            within_years(timetable, *until)?;
            if timetable.settings.settled_until == Some(*until) {
                return Err(Refused::Nothing("settle: it is settled until then already"));
            }
            Arc::make_mut(&mut timetable.settings).settled_until = Some(*until);
            Ok(vec![Touched::Settings])
        }
        Change::Prefer(prefer) => {
            if timetable.settings.prefer == *prefer {
                return Err(Refused::Nothing("do: that is preferred already"));
            }
            Arc::make_mut(&mut timetable.settings).prefer = *prefer;
            Ok(vec![Touched::Settings])
        }
        Change::Set { id, field } if timetable.occurrence(id).is_some() => {
            let Field::Length(length) = field else {
                return Err(Refused::NoSuchField {
                    what: "date of a request",
                    key: field.key(),
                });
            };
            unbegun_piece(timetable, id)?;
            let Some(date) = timetable.occurrence(id) else {
                return Err(Refused::UnknownPiece(Arc::clone(id)));
            };
            differ(timetable, date, |differs, whole| {
                if differs.fastened || whole.fastened {
                    return Err(Refused::Fastened(Arc::clone(id)));
                }
                if differs.length.unwrap_or(whole.length) == *length {
                    return Err(already(id, "so"));
                }
                differs.length = Some(*length);
                Ok(())
            })
        }
        Change::Set { id, field } => match timetable.position(id) {
            Some(at) => {
                unbegun(timetable, at)?;
                let mut request = Request::clone(&timetable.requests[at]);
                set_request(timetable, &mut request, field)?;
                within_years(timetable, request.span().end)?;
                if request == *timetable.requests[at] {
                    return Err(already(&request.id, "so"));
                }
                timetable.replace(at, request);
                if matches!(field, Field::Only(_) | Field::Never(_)) {
                    timetable.refresh();
                }
                Ok(vec![Touched::Request(at)])
            }
            None => {
                let (mut before, mut after) = (Common::default(), Common::default());
                let touched = with_named(timetable, id, |common| {
                    before.clone_from(common);
                    set_common(common, field)?;
                    after.clone_from(common);
                    Ok(())
                })?;
                if before == after {
                    return Err(Refused::Already {
                        piece: Arc::clone(id),
                        state: "so",
                    });
                }
                Ok(touched)
            }
        },
        Change::Drop(id) => drop_it(timetable, id),
        Change::Swap(first, _) => Err(Refused::NoPlace(Arc::clone(first))),
        Change::Undo => Err(Refused::Nothing("undo")),
        Change::Redo => Err(Refused::Nothing("redo")),
    }
}

fn already(piece: &Arc<str>, state: &'static str) -> Refused {
    Refused::Already {
        piece: Arc::clone(piece),
        state,
    }
}

fn not_so(piece: &Arc<str>, state: &'static str) -> Refused {
    Refused::NotSo {
        piece: Arc::clone(piece),
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

/// The same for one piece: a request that does not repeat, or a date.
fn unbegun_piece(timetable: &Timetable, piece: &Arc<str>) -> Result<(), Refused> {
    match timetable.piece(piece) {
        Some(date) if date.begun(&timetable.settings) => Err(Refused::Begun(Arc::clone(piece))),
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

/// Changes the closures of a resource.
fn closures(
    timetable: &mut Timetable,
    resource: &Arc<str>,
    how: impl FnOnce(&mut Vec<Closure>) -> Result<(), Refused>,
) -> Result<Vec<Touched>, Refused> {
    let known = timetable.resources().get(resource);
    let mut closed = known.map_or_else(Vec::new, |known| known.hours.closed().to_vec());
    with_named(timetable, resource, |common| {
        how(&mut closed)?;
        common.closed = Some(closed);
        Ok(())
    })
}

/// Changes what a resource states. A member without a table of its own gets one; where
/// neither kind nor resource is stated, the implied kind is stated first.
fn with_named(
    timetable: &mut Timetable,
    resource: &Arc<str>,
    how: impl FnOnce(&mut Common) -> Result<(), Refused>,
) -> Result<Vec<Touched>, Refused> {
    let kind = match timetable.resources().get(resource) {
        Some(known) => known.kind.clone(),
        // A member of a kind that grows as needed may be spoken of before it is first used.
        None => match timetable.open_kind_of(resource) {
            Some(kind) => Some(kind),
            None if is_kind(timetable, resource) => {
                return Err(Refused::IsKind(Arc::clone(resource)));
            }
            None => return Err(Refused::UnknownResource(Arc::clone(resource))),
        },
    };
    if let Some(at) = timetable
        .named
        .iter()
        .position(|named| named.id == *resource)
    {
        let mut named = Named::clone(&timetable.named[at]);
        how(&mut named.common)?;
        timetable.named[at] = Arc::new(named);
        timetable.refresh();
        return Ok(vec![Touched::Named(at)]);
    }
    let mut common = Common::default();
    how(&mut common)?;
    let mut touched = state_the_implied_kind(timetable);
    let at = timetable.named.len();
    timetable.named.push(Arc::new(Named {
        id: Arc::clone(resource),
        kind,
        common,
    }));
    timetable.listed.push(Listed::Named(at));
    touched.push(Touched::Named(at));
    timetable.refresh();
    Ok(touched)
}

/// With neither kind nor resource stated there is an implied kind; before anything else is
/// stated it must be, or it would be gone.
fn state_the_implied_kind(timetable: &mut Timetable) -> Vec<Touched> {
    if !timetable.listed.is_empty() {
        return Vec::new();
    }
    timetable.kinds.push(Arc::new(Kind {
        id: Arc::clone(&timetable.settings.noun.one),
        count: Count::AsNeeded,
        common: Common::default(),
    }));
    timetable.listed.push(Listed::Kind(0));
    vec![Touched::Kind(0)]
}

/// Whether a name is still free.
fn free(timetable: &Timetable, id: &Arc<str>) -> Result<(), Refused> {
    let taken = timetable.position(id).is_some()
        || timetable.resources().get(id).is_some()
        || timetable.open_kind_of(id).is_some()
        || is_kind(timetable, id);
    if taken {
        Err(Refused::Taken(Arc::clone(id)))
    } else {
        Ok(())
    }
}

fn set_request(timetable: &Timetable, request: &mut Request, field: &Field) -> Result<(), Refused> {
    let known = |names: &[Arc<str>]| {
        let unknown = names.iter().find(|name| {
            timetable.resources().get(name).is_none()
                && !is_kind(timetable, name)
                && timetable.open_kind_of(name).is_none()
        });
        unknown.map_or(Ok(()), |name| Err(Refused::UnknownName(Arc::clone(name))))
    };
    match field {
        Field::Title(title) => request.title = Arc::clone(title),
        Field::Size(size) => request.size = *size,
        Field::Needs(needs) => request.needs.clone_from(needs),
        Field::People(people) => request.people.clone_from(people),
        Field::Only(only) => {
            known(only)?;
            request.only.clone_from(only);
        }
        Field::Never(never) => {
            known(never)?;
            request.never.clone_from(never);
        }
        Field::Weight(weight) => request.weight = *weight,
        Field::Length(_) if request.fastened => {
            return Err(Refused::Fastened(Arc::clone(&request.id)));
        }
        Field::Length(length) => request.length = *length,
        Field::Setup(setup) => request.setup = *setup,
        Field::Turnaround(turnaround) => request.turnaround = *turnaround,
        Field::Together(together) => request.together = *together,
        Field::Repeat(rule) => {
            let repeats = request.repeats.clone();
            let also = repeats.as_ref().map_or_else(Vec::new, |r| r.also.clone());
            let except = repeats.map_or_else(Vec::new, |r| r.except.clone());
            repeat(request, timetable.settings.zone, rule.clone(), also, except)?;
        }
        Field::Seats(_) | Field::Offers(_) => {
            return Err(Refused::NoSuchField {
                what: "request",
                key: field.key(),
            });
        }
    }
    Ok(())
}

fn set_common(common: &mut Common, field: &Field) -> Result<(), Refused> {
    match field {
        Field::Title(title) => {
            common.title = Some(Arc::clone(title)).filter(|title| !title.is_empty())
        }
        Field::Seats(seats) => common.seats = *seats,
        Field::Offers(offers) => common.offers = Some(offers.clone()),
        Field::Setup(setup) => common.setup = *setup,
        Field::Turnaround(turnaround) => common.turnaround = *turnaround,
        other => {
            return Err(Refused::NoSuchField {
                what: "resource",
                key: other.key(),
            });
        }
    }
    Ok(())
}

fn drop_it(timetable: &mut Timetable, id: &Arc<str>) -> Result<Vec<Touched>, Refused> {
    if timetable.occurrence(id).is_some() {
        return Err(Refused::OneDate(Arc::clone(id)));
    }
    if let Some(at) = timetable.position(id) {
        unbegun(timetable, at)?;
        let differing = timetable.requests[at].repeats.iter();
        let mut tables: Vec<usize> = differing
            .flat_map(|repeats| repeats.differing.iter().map(|differing| differing.table))
            .collect();
        tables.sort_unstable_by_key(|table| std::cmp::Reverse(*table));
        timetable.remove(at);
        timetable.without_tables(&tables);
        let mut touched: Vec<Touched> = tables.into_iter().map(Touched::OccurrenceGone).collect();
        touched.push(Touched::RequestGone(at));
        return Ok(touched);
    }
    let Some(at) = timetable.named.iter().position(|named| named.id == *id) else {
        return Err(if timetable.resources().get(id).is_some() {
            Refused::Member(Arc::clone(id))
        } else {
            Refused::UnknownResource(Arc::clone(id))
        });
    };
    let names = |request: &&Arc<Request>| {
        let differing = request
            .repeats
            .iter()
            .flat_map(|repeats| &repeats.differing);
        let pins = differing.filter_map(|differing| differing.pin.as_ref());
        let lists = request.only.iter().chain(&request.never);
        let mut names = lists.chain(&request.pin).chain(pins);
        names.any(|name| name == id)
    };
    if let Some(by) = timetable.requests.iter().find(names) {
        return Err(Refused::SpokenOf {
            id: Arc::clone(id),
            by: Arc::clone(&by.id),
        });
    }
    let only_one = timetable.listed.len() == 1;
    let named = timetable.named.remove(at);
    let alone = named.kind.as_ref().is_some_and(|kind| {
        !is_kind(timetable, kind)
            && timetable.requests.iter().any(|request| {
                request
                    .only
                    .iter()
                    .chain(&request.never)
                    .any(|name| name == kind)
            })
    });
    if only_one || alone {
        // The last of its kind, or of all: what is said of the rest would change its meaning.
        timetable.named.insert(at, named);
        return Err(Refused::LastOne(Arc::clone(id)));
    }
    timetable
        .listed
        .retain(|listed| *listed != Listed::Named(at));
    for listed in &mut timetable.listed {
        if let Listed::Named(place) = listed
            && *place > at
        {
            *place -= 1;
        }
    }
    timetable.refresh();
    Ok(vec![Touched::NamedGone(at)])
}
