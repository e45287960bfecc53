//! What a bound rests on: restrictions are dropped one by one as long as it still holds; what
//! remains is minimal for that bound, because a bound that fails with less stated fails with
//! still less (deletion filter; Chinneck, Dravnieks 1991).

use super::bounds::incompatible;
use super::exact::cases::{self, Outcome};
use super::{Problem, Stopper};
use crate::claim::{Case, FloorProof, Ground};
use crate::timetable::{Common, Listed, Named, Piece, Request, Timetable};
use std::collections::HashMap;
use std::sync::Arc;

/// The same resources, each with a table of its own, and only some of the requests: small
/// enough to be checked over and over.
pub fn explicit(timetable: &Timetable, keep: &dyn Fn(&Request) -> bool) -> Timetable {
    let named: Vec<Named> = timetable
        .resources()
        .all
        .iter()
        .map(|resource| Named {
            id: Arc::clone(&resource.id),
            kind: resource.kind.clone(),
            common: Common {
                title: None,
                seats: resource.seats,
                offers: Some(resource.offers.to_vec()),
                setup: Some(resource.setup),
                turnaround: Some(resource.turnaround),
                open: resource.hours.opening().map(<[_]>::to_vec),
                closed: Some(resource.hours.closed().to_vec()),
            },
        })
        .collect();
    let requests = timetable.requests.iter().filter(|request| keep(request));
    Timetable::new(
        timetable.settings.as_ref().clone(),
        Vec::new(),
        named.clone(),
        (0..named.len()).map(Listed::Named).collect(),
        requests.map(|request| Request::clone(request)).collect(),
    )
}

/// Everything stated that could be a ground: first what is said of resources, then of
/// requests, pins last.
pub fn candidates(timetable: &Timetable) -> Vec<Ground> {
    let mut found = Vec::new();
    for named in &timetable.named {
        let resource = || Arc::clone(&named.id);
        for closure in named.common.closed.iter().flatten() {
            found.push(Ground::Closure {
                resource: resource(),
                span: closure.span,
            });
        }
        if named.common.open.is_some() {
            found.push(Ground::Opening {
                resource: resource(),
            });
        }
    }
    for request in &timetable.requests {
        let id = || Arc::clone(&request.id);
        found.extend(request.size.map(|size| Ground::Size {
            request: id(),
            size,
        }));
        found.extend(request.needs.iter().map(|need| Ground::Need {
            request: id(),
            need: Arc::clone(need),
        }));
        found.extend(request.never.iter().map(|name| Ground::Never {
            request: id(),
            name: Arc::clone(name),
        }));
        if !request.only.is_empty() {
            found.push(Ground::Only { request: id() });
        }
    }
    for request in timetable.requests.iter().filter(|request| request.together) {
        found.extend(request.repeats.as_ref().map(|_| Ground::Together {
            request: Arc::clone(&request.id),
        }));
    }
    for request in &timetable.requests {
        let own = request.repeats.iter().flat_map(|repeats| {
            let dates = 0..repeats.dates().len();
            dates.filter_map(|date| Some((&repeats.dates()[date].id, repeats.differs(date)?)))
        });
        match &request.pin {
            // It holds for all dates but those with a pin of their own, which goes with it.
            Some(pin) => found.push(Ground::Pin {
                piece: Arc::clone(&request.id),
                on: Arc::clone(pin),
            }),
            None => found.extend(own.filter_map(|(id, differs)| {
                Some(Ground::Pin {
                    piece: Arc::clone(id),
                    on: differs.pin.clone()?,
                })
            })),
        }
    }
    found
}

/// The timetable without that ground.
pub fn without(timetable: &Timetable, ground: &Ground) -> Timetable {
    let mut less = timetable.clone();
    let mut request = |id: &Arc<str>, change: &dyn Fn(&mut Request)| {
        if let Some(at) = less.position(id) {
            let mut changed = Request::clone(&less.requests[at]);
            change(&mut changed);
            less.replace(at, changed);
        }
    };
    match ground {
        Ground::Pin { piece, .. } | Ground::Begun { piece, .. } => unpin(&mut less, piece),
        Ground::Together { request: id } => request(id, &|request| request.together = false),
        Ground::Only { request: id } => request(id, &|request| request.only.clear()),
        Ground::Never { request: id, name } => {
            request(id, &|request| request.never.retain(|other| other != name));
        }
        Ground::Need { request: id, need } => {
            request(id, &|request| request.needs.retain(|other| other != need));
        }
        Ground::Size { request: id, .. } => request(id, &|request| request.size = None),
        Ground::Closure { resource, span } => common(&mut less, resource, &|common| {
            if let Some(closed) = &mut common.closed {
                closed.retain(|closure| closure.span != *span);
            }
        }),
        Ground::Opening { resource } => common(&mut less, resource, &|common| common.open = None),
    }
    less
}

/// Takes the pin of a request away, with those of its dates, or the pin of one date.
fn unpin(timetable: &mut Timetable, piece: &Arc<str>) {
    let dated = timetable.occurrence(piece);
    let Some(at) = dated
        .map(|(at, _)| at)
        .or_else(|| timetable.position(piece))
    else {
        return;
    };
    let mut changed = Request::clone(&timetable.requests[at]);
    if dated.is_none() {
        changed.pin = None;
    }
    if let Some(mut repeats) = changed.repeats.as_deref().cloned() {
        for date in 0..repeats.dates().len() {
            let asked = dated.is_none_or(|(_, only)| only == date);
            if asked
                && repeats
                    .differs(date)
                    .is_some_and(|differs| differs.pin.is_some())
            {
                let _ = repeats.differ::<()>(date, 0, |differing| {
                    differing.pin = None;
                    Ok(())
                });
            }
        }
        changed.repeats = Some(Arc::new(repeats));
    }
    timetable.replace(at, changed);
}

fn common(timetable: &mut Timetable, resource: &Arc<str>, change: &dyn Fn(&mut Common)) {
    if let Some(at) = timetable
        .named
        .iter()
        .position(|named| named.id == *resource)
    {
        let mut named = Named::clone(&timetable.named[at]);
        change(&mut named.common);
        timetable.named[at] = Arc::new(named);
        timetable.refresh();
    }
}

/// A minimal set of grounds on which `holds` rests, given that it holds of the timetable: the
/// smallest that a few orders of dropping give, and the timetable with nothing else stated.
pub fn minimal(
    timetable: &Timetable,
    holds: &dyn Fn(&Timetable) -> bool,
    stop: &dyn Stopper,
) -> (Vec<Ground>, Timetable) {
    let all = candidates(timetable);
    let mut reversed = all.clone();
    reversed.reverse();
    // Sizes and needs before pins, resources in between, and the other way round.
    let (of_resources, of_requests): (Vec<Ground>, Vec<Ground>) = all
        .iter()
        .cloned()
        .partition(|g| matches!(g, Ground::Closure { .. } | Ground::Opening { .. }));
    let resources_last = [of_requests, of_resources].concat();
    let mut best: Option<(Vec<Ground>, Timetable)> = None;
    for order in [all, resources_last, reversed] {
        if best.is_some() && stop.stop() {
            break;
        }
        let mut left = timetable.clone();
        let mut grounds = Vec::new();
        drop_some(&mut left, &order, holds, &mut grounds);
        if best
            .as_ref()
            .is_none_or(|(least, _)| grounds.len() < least.len())
        {
            best = Some((grounds, left));
        }
    }
    let (mut grounds, left) = best.unwrap_or_else(|| (Vec::new(), timetable.clone()));
    grounds.sort_unstable();
    (grounds, left)
}

/// Drops what can be dropped, halves first: most of what is stated has nothing to do with
/// it.
fn drop_some(
    left: &mut Timetable,
    some: &[Ground],
    holds: &dyn Fn(&Timetable) -> bool,
    grounds: &mut Vec<Ground>,
) {
    if some.is_empty() {
        return;
    }
    let less = some
        .iter()
        .fold(left.clone(), |less, ground| without(&less, ground));
    if holds(&less) {
        *left = less;
        return;
    }
    if let [one] = some {
        grounds.push(one.clone());
        return;
    }
    let (one, other) = some.split_at(some.len() / 2);
    drop_some(left, one, holds, grounds);
    drop_some(left, other, holds, grounds);
}

/// Climbs in the search for a plainer proof.
const CLIMBS: u32 = 400;

/// A proof of the same floor that is easier to follow than prices or cases, if there is one:
/// pieces of which no two can share a resource.
pub fn plainer(
    timetable: &Timetable,
    floor: &FloorProof,
    stop: &dyn Stopper,
) -> Option<FloorProof> {
    if !matches!(floor, FloorProof::Prices { .. } | FloorProof::Cases { .. }) {
        return None;
    }
    let problem = Problem::new(timetable, &timetable.pieces(), &HashMap::new());
    let mut search = incompatible::Search::new(&problem, &[], 1, stop)?;
    for _ in 0..CLIMBS {
        if search.best.len() >= floor.value() || stop.stop() {
            break;
        }
        search.climb();
    }
    let enough = search.best.len() >= floor.value();
    let names = search.best.iter().take(floor.value());
    enough.then(|| FloorProof::Incompatible {
        pieces: names.map(|item| Arc::clone(problem.name(*item))).collect(),
    })
}

/// Cases looked at for a set that cannot all be placed.
const CASES: u32 = 3_000;

/// Pieces around one without a place that are looked at.
const AROUND: usize = 60;

/// A set of pieces, the given one among them, that cannot all be placed, and the cases that
/// show it: from what runs around it, pieces are dropped one by one as long as the rest is
/// still refuted. `None` when none is found.
pub fn cannot_all(
    timetable: &Timetable,
    piece: &Piece,
    stop: &dyn Stopper,
) -> Option<(Vec<Arc<str>>, Case)> {
    let pieces = timetable.pieces();
    let problem = Problem::new(timetable, &pieces, &HashMap::new());
    let own = (0..problem.items.len())
        .find(|item| problem.pieces(*item).any(|at| problem.ids[at] == piece.id))?;
    if problem.choices(own).is_empty() {
        return None;
    }
    // What overlaps it, then what overlaps that, until there are enough.
    let mut around = vec![own];
    let mut seen = vec![false; problem.items.len()];
    seen[own] = true;
    let mut next = 0;
    while next < around.len() && around.len() < AROUND {
        let from = around[next];
        next += 1;
        for (item, seen) in seen.iter_mut().enumerate() {
            let near = !*seen && !problem.choices(item).is_empty() && problem.overlap(from, item);
            if near && around.len() < AROUND {
                *seen = true;
                around.push(item);
            }
        }
    }
    let wanted = problem.resources.len() + 1;
    let refuted =
        |items: &[usize]| match cases::refute(&problem, items, wanted, CASES, &mut 0, stop) {
            Outcome::Refuted(case) => Some(case),
            _ => None,
        };
    let mut tree = None;
    // The nearest first: the smallest beginning that is refuted.
    let mut size = 2;
    let mut set = loop {
        let some = &around[..size.min(around.len())];
        if let Some(case) = refuted(some) {
            tree = Some(case);
            break some.to_vec();
        }
        if size >= around.len() || stop.stop() {
            break Vec::new();
        }
        size = (size * 3 / 2).max(size + 1);
    };
    let mut at = set.len();
    while at > 1 && !stop.stop() {
        at -= 1;
        let mut less = set.clone();
        if less[at] == own {
            continue;
        }
        less.remove(at);
        if let Some(case) = refuted(&less) {
            (set, tree) = (less, Some(case));
        }
    }
    let names = set
        .iter()
        .map(|item| Arc::clone(problem.name(*item)))
        .collect();
    tree.map(|tree| (names, tree))
}
