//! Findings: what is wrong with a timetable that can be opened all the same. The pieces
//! concerned stay unplaced with their reason.

use super::{Piece, Timetable, Unfit, all_may_use, items, may_use, occupied};
use crate::clock::Span;
use std::collections::HashMap;
use std::sync::Arc;

/// One finding.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Finding {
    /// The piece it is about.
    pub piece: Arc<str>,
    /// What was found.
    pub kind: FindingKind,
}

/// What can be found.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum FindingKind {
    /// It is pinned on a resource that cannot serve it.
    PinCannotServe {
        /// The resource it is pinned on.
        pin: Arc<str>,
        /// Why not.
        because: Unfit,
    },
    /// Its pin overlaps another piece's pin on the same resource.
    PinsOverlap {
        /// The resource.
        pin: Arc<str>,
        /// The other piece.
        other: Arc<str>,
    },
    /// No resource may take it.
    NoResource,
    /// It must stay with another date of its request that is pinned elsewhere.
    PinsApart {
        /// The resource it is pinned on.
        pin: Arc<str>,
        /// The other date.
        other: Arc<str>,
    },
}

/// All findings, in file order. Withdrawn pieces have none.
pub fn findings(timetable: &Timetable) -> Vec<Finding> {
    let pieces = timetable.pieces();
    let resources = timetable.resources();
    let mut found = Vec::new();
    let mut pinned: HashMap<usize, Vec<(Span, &Piece)>> = HashMap::new();
    // Requests that say the same of themselves share the search for a possible resource.
    let mut possible_before: HashMap<Wishes<'_>, Vec<usize>> = HashMap::new();
    let present: Vec<&Piece> = pieces.iter().filter(|piece| !piece.withdrawn).collect();
    for item in items(&present) {
        let item = &present[item];
        let piece = item[0];
        let mut add = |piece: &Piece, kind| {
            found.push(Finding {
                piece: Arc::clone(&piece.id),
                kind,
            })
        };
        let pin = item.iter().find_map(|piece| piece.pin.as_ref());
        let pin = pin.and_then(|pin| resources.position(pin).map(|at| (pin, at)));
        let Some((pin, at)) = pin else {
            let possible = match item {
                [piece] => {
                    let suited = possible_before.entry(Wishes::of(piece)).or_insert_with(|| {
                        (0..resources.all.len())
                            .filter(|at| super::suits(piece, &resources.all[*at]).is_ok())
                            .collect()
                    });
                    suited
                        .iter()
                        .any(|at| may_use(piece, &resources.all[*at]).is_ok())
                }
                _ => resources
                    .all
                    .iter()
                    .any(|resource| all_may_use(item, resource).is_ok()),
            };
            if !possible {
                add(piece, FindingKind::NoResource);
            }
            continue;
        };
        let apart = item
            .iter()
            .find(|piece| piece.pin.as_ref().is_some_and(|own| own != pin));
        if let Some(apart) = apart {
            add(
                apart,
                FindingKind::PinsApart {
                    pin: apart.pin.clone().unwrap_or_else(|| Arc::clone(pin)),
                    other: Arc::clone(&piece.id),
                },
            );
            continue;
        }
        if let Err(because) = all_may_use(item, &resources.all[at]) {
            add(
                piece,
                FindingKind::PinCannotServe {
                    pin: Arc::clone(pin),
                    because,
                },
            );
        }
        let others = pinned.entry(at).or_default();
        for piece in item {
            let occupied = occupied(piece, &resources.all[at]);
            if let Some((_, other)) = others.iter().find(|(span, _)| span.overlaps(occupied)) {
                add(
                    piece,
                    FindingKind::PinsOverlap {
                        pin: Arc::clone(pin),
                        other: Arc::clone(&other.id),
                    },
                );
            }
        }
        others.extend(
            item.iter()
                .map(|piece| (occupied(piece, &resources.all[at]), *piece)),
        );
    }
    found
}

/// Of what has begun, the resources that it can stay on: `known` is where it was, as far as
/// that may still take it and nothing that is pinned there, or has begun there too, is in its
/// way. Pieces with a pin of their own are left out.
pub fn stays(
    timetable: &Timetable,
    pieces: &[Piece],
    known: &HashMap<Arc<str>, Arc<str>>,
) -> HashMap<Arc<str>, Arc<str>> {
    let mut stays = HashMap::new();
    if timetable.settings.settled_until.is_none() || known.is_empty() {
        return stays;
    }
    let resources = timetable.resources();
    let present: Vec<&Piece> = pieces.iter().filter(|piece| !piece.withdrawn).collect();
    let mut taken: HashMap<usize, Vec<Span>> = HashMap::new();
    let items = items(&present);
    for item in &items {
        let item = &present[item.clone()];
        let pin = item.iter().find_map(|piece| piece.pin.as_ref());
        if let Some(at) = pin.and_then(|pin| resources.position(pin)) {
            let spans = item.iter().map(|piece| occupied(piece, &resources.all[at]));
            taken.entry(at).or_default().extend(spans);
        }
    }
    for item in items {
        let item = &present[item];
        if item.iter().any(|piece| piece.pin.is_some()) {
            continue;
        }
        let begun = item.iter().find(|piece| piece.begun(&timetable.settings));
        let known = begun.and_then(|piece| known.get(&piece.id));
        let Some(at) = known.and_then(|resource| resources.position(resource)) else {
            continue;
        };
        let resource = &resources.all[at];
        let spans: Vec<Span> = item.iter().map(|piece| occupied(piece, resource)).collect();
        let taken = taken.entry(at).or_default();
        let clear = |span: &Span| taken.iter().all(|other| !other.overlaps(*span));
        if all_may_use(item, resource).is_ok() && spans.iter().all(clear) {
            taken.extend(spans);
            let begun = item.iter().filter(|piece| piece.begun(&timetable.settings));
            stays.extend(begun.map(|piece| (Arc::clone(&piece.id), Arc::clone(&resource.id))));
        }
    }
    stays
}

/// What decides which resources suit a piece, whatever its time.
#[derive(PartialEq, Eq, Hash)]
pub(crate) struct Wishes<'a> {
    size: Option<u64>,
    needs: &'a [Arc<str>],
    only: &'a [Arc<str>],
    never: &'a [Arc<str>],
}

impl<'a> Wishes<'a> {
    /// The wishes of a piece.
    pub(crate) fn of(piece: &'a Piece) -> Wishes<'a> {
        Wishes {
            size: piece.size,
            needs: &piece.request.needs,
            only: &piece.request.only,
            never: &piece.request.never,
        }
    }
}
