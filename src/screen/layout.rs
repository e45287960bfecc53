//! Which piece is in which row.

use crate::claim::Plan;
use crate::clock::{Instant, Span, merge};
use crate::engine::partition;
use crate::lookup::FastMap;
use crate::timetable::{Piece, Timetable};
use std::sync::Arc;

/// What a row is.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum RowKind {
    /// A resource, by its place in the timetable's resources.
    Resource(usize),
    /// Pieces without a place.
    Unplaced,
    /// Withdrawn pieces.
    Withdrawn,
}

/// One row of the board.
#[derive(Clone, Debug)]
pub struct Row {
    /// What it is.
    pub kind: RowKind,
    /// Places in [`Rows::pieces`], by start.
    pub pieces: Vec<usize>,
}

/// The whole board.
#[derive(Clone, Debug, Default)]
pub struct Rows {
    /// Every piece.
    pub pieces: Vec<Piece>,
    /// The rows, top to bottom.
    pub rows: Vec<Row>,
    /// The row of each piece.
    pub row_of: Vec<usize>,
    /// The resource each piece is on.
    pub on: Vec<Option<usize>>,
}

impl Rows {
    /// Lays a timetable out by a plan. While the plan is of an earlier state (`stale`), pins
    /// come before it, so that a bar moves at once. A piece that is `held` over a resource
    /// shows there.
    pub fn of(
        timetable: &Timetable,
        plan: Option<&Plan>,
        stale: bool,
        held: Option<(&str, usize)>,
    ) -> Rows {
        let pieces = timetable.pieces();
        let resources = timetable.resources();
        let planned: FastMap<&str, &Arc<str>> = plan
            .map(|plan| {
                plan.placements
                    .iter()
                    .map(|p| (&*p.piece, &p.resource))
                    .collect()
            })
            .unwrap_or_default();
        let place = |piece: &Piece| {
            if piece.withdrawn {
                return None;
            }
            if let Some((_, resource)) = held.filter(|(id, _)| *id == &*piece.id) {
                return Some(resource);
            }
            let pinned = piece.pin.as_ref().filter(|_| stale);
            let resource = pinned.or_else(|| planned.get(&*piece.id).copied())?;
            resources.position(resource)
        };
        let on: Vec<Option<usize>> = pieces.iter().map(place).collect();
        let mut by_resource: Vec<Vec<usize>> = vec![Vec::new(); resources.all.len()];
        let (mut unplaced, mut withdrawn) = (Vec::new(), Vec::new());
        for (at, piece) in pieces.iter().enumerate() {
            match on[at] {
                Some(resource) => by_resource[resource].push(at),
                None if piece.withdrawn => withdrawn.push(at),
                None => unplaced.push(at),
            }
        }
        let mut rows = Vec::new();
        lanes(&pieces, &unplaced, &RowKind::Unplaced, &mut rows);
        // Of what is made as needed, one idle member is enough to carry something to.
        let mut idle_shown = false;
        for (resource, mut here) in by_resource.into_iter().enumerate() {
            let idle = here.is_empty() && resources.all[resource].as_needed;
            if idle && std::mem::replace(&mut idle_shown, true) {
                continue;
            }
            here.sort_by_key(|at| pieces[*at].span);
            rows.push(Row {
                kind: RowKind::Resource(resource),
                pieces: here,
            });
        }
        lanes(&pieces, &withdrawn, &RowKind::Withdrawn, &mut rows);
        let mut row_of = vec![0; pieces.len()];
        for (at, row) in rows.iter().enumerate() {
            for piece in &row.pieces {
                row_of[*piece] = at;
            }
        }
        Rows {
            pieces,
            rows,
            row_of,
            on,
        }
    }

    /// The place of a piece, by id.
    pub fn find(&self, id: &str) -> Option<usize> {
        self.pieces.iter().position(|piece| *piece.id == *id)
    }
}

/// Stretches of at least two hours in which nothing is open and nothing runs, to whole hours:
/// the board folds them away.
pub(super) fn folds(timetable: &Timetable, pieces: &[Piece]) -> Vec<Span> {
    const SHORTEST: i64 = 2 * 3600;
    let mut seen: Vec<*const crate::timetable::Hours> = Vec::new();
    let mut open: Vec<Span> = Vec::new();
    for resource in &timetable.resources().all {
        let hours = Arc::as_ptr(&resource.hours);
        if seen.contains(&hours) {
            continue;
        }
        seen.push(hours);
        match resource.hours.known_windows() {
            Some(windows) => open.extend(windows),
            None => return Vec::new(),
        }
    }
    let mut open = merge(open);
    let inside = |span: Span| {
        let next = open.partition_point(|window| window.start <= span.start);
        next > 0 && open[next - 1].end >= span.end
    };
    let outside: Vec<Span> = pieces
        .iter()
        .map(|piece| piece.span)
        .filter(|span| !inside(*span))
        .collect();
    if !outside.is_empty() {
        open.extend(outside);
        open = merge(open);
    }
    let closed = open.windows(2).map(|pair| Span {
        start: Instant((pair[0].end.0 + 3599).div_euclid(3600) * 3600),
        end: Instant(pair[1].start.0.div_euclid(3600) * 3600),
    });
    closed.filter(|span| span.seconds() >= SHORTEST).collect()
}

/// Rows for pieces that may overlap: as few as will show them all.
fn lanes(pieces: &[Piece], list: &[usize], kind: &RowKind, rows: &mut Vec<Row>) {
    let spans: Vec<Span> = list.iter().map(|at| pieces[*at].span).collect();
    let (lane_of, count) = partition(&spans);
    let mut lanes: Vec<Vec<usize>> = vec![Vec::new(); count];
    for (at, lane) in list.iter().zip(lane_of) {
        lanes[lane as usize].push(*at);
    }
    for mut here in lanes {
        here.sort_by_key(|at| pieces[*at].span);
        rows.push(Row {
            kind: kind.clone(),
            pieces: here,
        });
    }
}
