//! Carrying a piece along time and over resources: a preview that writes nothing until it is
//! dropped, with the count following at each step.

use super::layout::RowKind;
use super::model::{Carry, Mode, Model};
use super::update::{Effect, in_hand, make, zoom};
use crate::actions::Action;
use crate::words::Progress;
use std::sync::Arc;

/// Takes the piece in hand up.
pub(super) fn lift(model: &mut Model) {
    let Some(here) = in_hand(model) else { return };
    let piece = &model.rows.pieces[here];
    let id = Arc::clone(&piece.id);
    if piece.withdrawn {
        model.say(format!("{id} is withdrawn; first restore it"), true);
        return;
    }
    let over = model.rows.on[here];
    model.preview = None;
    model.mode = Mode::Carry(Box::new(Carry {
        id,
        home_start: piece.span.start,
        home: over,
        start: piece.span.start,
        over,
        timetable: model.desk.timetable().clone(),
    }));
    model.refresh();
}

/// A key while something is carried.
pub(super) fn carrying(model: &mut Model, action: Action) -> Vec<Effect> {
    let grid = model.desk.timetable().settings.grid;
    match action {
        Action::Left => shift(model, -grid),
        Action::Right => shift(model, grid),
        Action::PageUp => shift(model, -hour(grid)),
        Action::PageDown => shift(model, hour(grid)),
        Action::DayBefore => shift(model, -crate::clock::DAY),
        Action::DayAfter => shift(model, crate::clock::DAY),
        Action::Up => over(model, false),
        Action::Down => over(model, true),
        Action::Carry => drop_here(model),
        Action::PutBack | Action::Undo => {
            put_back(model);
            vec![Effect::Submit(Box::new(model.desk.job()))]
        }
        Action::Closer | Action::Wider => {
            zoom(model, action == Action::Closer);
            Vec::new()
        }
        _ => {
            model.say(
                "a piece is in your hand: Enter drops it, Esc puts it back",
                false,
            );
            Vec::new()
        }
    }
}

/// An hour in whole grid steps, at least one.
fn hour(grid: i64) -> i64 {
    (3600 / grid).max(1) * grid
}

/// Moves what is carried in time by seconds of the clock on the wall.
fn shift(model: &mut Model, seconds: i64) -> Vec<Effect> {
    let zone = model.desk.zone();
    let Mode::Carry(carry) = &mut model.mode else {
        return Vec::new();
    };
    let to = if seconds.abs() == crate::clock::DAY {
        // The same time of another day, whatever the clock does in between.
        zone.lenient(zone.civil(carry.start) + chrono::TimeDelta::seconds(seconds))
    } else {
        carry.start + seconds
    };
    let before = std::mem::replace(&mut carry.start, to);
    preview(model, |carry| carry.start = before)
}

/// Holds what is carried over the next resource up or down.
fn over(model: &mut Model, down: bool) -> Vec<Effect> {
    let resources: Vec<usize> = model
        .rows
        .rows
        .iter()
        .filter_map(|row| match row.kind {
            RowKind::Resource(resource) => Some(resource),
            _ => None,
        })
        .collect();
    let Mode::Carry(carry) = &mut model.mode else {
        return Vec::new();
    };
    let place = carry
        .over
        .and_then(|over| resources.iter().position(|resource| *resource == over));
    let next = match (place, down) {
        (Some(place), true) => resources.get(place + 1),
        (Some(place), false) => place.checked_sub(1).and_then(|above| resources.get(above)),
        (None, _) => resources.first(),
    };
    let Some(next) = next.copied() else {
        model.say("no resource further on", false);
        return Vec::new();
    };
    let before = carry.over.replace(next);
    preview(model, |carry| carry.over = before)
}

/// Has the state solved as it would be; when the edits are refused, takes the step back.
fn preview(model: &mut Model, back: impl FnOnce(&mut Carry)) -> Vec<Effect> {
    let generation = model.next_preview();
    let Mode::Carry(carry) = &mut model.mode else {
        return Vec::new();
    };
    match model.desk.preview(&carry.edits(), generation) {
        Ok((timetable, job)) => {
            carry.timetable = timetable;
            model.progress = Progress::Searching;
            model.refresh();
            vec![Effect::Submit(Box::new(job))]
        }
        Err(refused) => {
            back(carry);
            model.say(refused.to_string(), true);
            Vec::new()
        }
    }
}

fn put_back(model: &mut Model) {
    model.mode = Mode::Board;
    model.preview = None;
    model.refresh();
}

fn drop_here(model: &mut Model) -> Vec<Effect> {
    let Mode::Carry(carry) = &model.mode else {
        return Vec::new();
    };
    let edits = carry.edits();
    put_back(model);
    if edits.is_empty() {
        model.say("put back where it was", false);
        return vec![Effect::Submit(Box::new(model.desk.job()))];
    }
    make(model, edits)
}
