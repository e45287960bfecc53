//! What moves in time: requests with all their dates, single dates, and what differs on them.

use super::{Refused, Touched, already, change, position, unbegun, unbegun_piece, within_years};
use crate::clock::{Instant, RepeatError, Zone};
use crate::text::clean;
use crate::timetable::{Differing, Except, Piece, Repeats, RepeatsError, Request, Timetable};
use std::sync::Arc;

/// Starts a piece elsewhere: a request with all its dates, or one date.
pub(super) fn moved(
    timetable: &mut Timetable,
    piece: &Arc<str>,
    to: Instant,
) -> Result<Vec<Touched>, Refused> {
    within_years(timetable, to)?;
    if let Some(date) = timetable.occurrence(piece) {
        unbegun_piece(timetable, piece)?;
        return differ(timetable, date, |differs, whole| {
            let by_rule = whole.repeats.as_ref().map(|r| r.dates()[date.1].start);
            if differs.fastened || whole.fastened {
                return Err(Refused::Fastened(Arc::clone(piece)));
            }
            if differs.start.or(by_rule) == Some(to) {
                return Err(already(piece, "at that time"));
            }
            differs.start = Some(to);
            Ok(())
        });
    }
    let at = position(timetable, piece)?;
    unbegun(timetable, at)?;
    within_years(timetable, to + timetable.requests[at].length)?;
    let zone = timetable.settings.zone;
    change(timetable, piece, |request| {
        if request.fastened {
            return Err(Refused::Fastened(Arc::clone(&request.id)));
        }
        if request.start == to {
            return Err(already(&request.id, "at that time"));
        }
        let before = std::mem::replace(&mut request.start, to);
        let Some(repeats) = request.repeats.clone() else {
            return Ok(());
        };
        // All its dates move as far on the clock as the first.
        let shift = zone.civil(to) - zone.civil(before);
        let moved = |at: Instant| zone.lenient(zone.civil(at) + shift);
        let days = zone.date(to) - zone.date(before);
        let names_stay = days.is_zero() && repeats.differing.iter().all(|d| !d.date.contains('T'));
        if !repeats.differing.is_empty() && !names_stay {
            return Err(Refused::DatesDiffer(Arc::clone(&request.id)));
        }
        let except = repeats.except.iter().map(|except| match except {
            Except::Date(date) => Except::Date(*date + days),
            Except::Moment(at) => Except::Moment(moved(*at)),
        });
        let also = repeats.also.iter().map(|at| moved(*at)).collect();
        repeat(request, zone, repeats.rule.clone(), also, except.collect())
    })
}

/// Works the dates of a request out again; what differs on some of them stays.
pub(super) fn repeat(
    request: &mut Request,
    zone: Zone,
    rule: Option<Arc<str>>,
    also: Vec<Instant>,
    except: Vec<Except>,
) -> Result<(), Refused> {
    let differing = request.repeats.as_ref();
    let differing = differing.map_or_else(Vec::new, |repeats| repeats.differing.clone());
    if rule.is_none() && also.is_empty() {
        if !differing.is_empty() {
            return Err(Refused::DatesDiffer(Arc::clone(&request.id)));
        }
        request.repeats = None;
        return Ok(());
    }
    let refused = |why: String| Refused::Repeats(Arc::clone(&request.id), why);
    let repeats = Repeats::new(
        (&request.id, request.start),
        zone,
        rule,
        also,
        except,
        differing,
    );
    request.repeats = Some(Arc::new(repeats.map_err(|error| match error {
        RepeatsError::Rule(error) => {
            let error = match error {
                RepeatError::NoRule(why) => RepeatError::NoRule(clean(&why).into_owned()),
                error => error,
            };
            refused(format!("cannot repeat like that: the rule {error}"))
        }
        RepeatsError::Nothing => refused("would have no date left".into()),
        RepeatsError::NoDate(..) | RepeatsError::Twice(_) => {
            Refused::DatesDiffer(Arc::clone(&request.id))
        }
    })?));
    Ok(())
}

/// Changes what differs on one date of a request that is not withdrawn.
pub(super) fn differ(
    timetable: &mut Timetable,
    (at, date): (usize, usize),
    how: impl FnOnce(&mut Differing, &Request) -> Result<(), Refused>,
) -> Result<Vec<Touched>, Refused> {
    let tables = timetable.differing_tables();
    let mut request = Request::clone(&timetable.requests[at]);
    let Some(mut repeats) = request.repeats.as_deref().cloned() else {
        return Err(Refused::UnknownPiece(Arc::clone(&request.id)));
    };
    if request.withdrawn {
        return Err(Refused::Withdrawn(Arc::clone(&request.id)));
    }
    let table = repeats.differ(date, tables, |differing| {
        how(differing, &request)?;
        // What is as the rule has it does not differ.
        let by_rule = request.repeats.as_ref().map(|r| r.dates()[date].start);
        differing.start.take_if(|start| Some(*start) == by_rule);
        differing.length.take_if(|length| *length == request.length);
        Ok(())
    })?;
    let end = Piece::of_date(&timetable.requests[at], &repeats, date)
        .span
        .end;
    within_years(timetable, end)?;
    let gone = repeats.forget_if_nothing_differs(date);
    request.repeats = Some(Arc::new(repeats));
    timetable.replace(at, request);
    if gone {
        timetable.without_tables(&[table]);
        return Ok(vec![Touched::OccurrenceGone(table)]);
    }
    Ok(vec![Touched::Occurrence(table)])
}
