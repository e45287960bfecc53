//! Why not fewer, and why not everything: in sentences, then each ground with the line of the
//! file that states it.

use super::{in_sight, sheet};
use crate::claim::{Ground, Why};
use crate::screen::draw::put;
use crate::screen::model::Model;
use crate::text::wrap;
use crate::words;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use std::sync::Arc;

/// Where a line leads.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(in crate::screen) enum Target {
    Piece(Arc<str>),
    Resource(Arc<str>),
}

/// Every line, with where it leads.
pub(in crate::screen) fn lines(model: &Model) -> Vec<(String, Option<Target>)> {
    let Some((_, why)) = &model.why else {
        return vec![("looking for the reason ...".into(), None)];
    };
    let width = usize::from(model.size.0).saturating_sub(2).max(1);
    let timetable = model.desk.timetable();
    let mut lines: Vec<(String, Option<Target>)> = Vec::new();
    for line in wrap(&words::why(timetable, why), width) {
        lines.push((line, None));
    }
    let mut told: Option<usize> = None;
    for ground in grounds(why) {
        let line = model.desk.document().line_of_ground(timetable, ground);
        // The opening of a kind is stated once for all its members.
        if line.is_some() && told == line && matches!(ground, Ground::Opening { .. }) {
            continue;
        }
        told = line;
        let line = line.map_or_else(String::new, |line| format!("line {line}: "));
        let text = words::ground(ground, timetable.settings.zone);
        lines.push((format!("{line}{text}"), Some(target(timetable, ground))));
    }
    lines
}

/// The line to begin at: the first ground, when the whole sentence is in sight above it.
pub(in crate::screen) fn first(model: &Model) -> usize {
    let lines = lines(model);
    let first = lines.iter().position(|(_, target)| target.is_some());
    let room = usize::from(model.size.1).saturating_sub(5);
    first.filter(|first| *first < room).unwrap_or(0)
}

fn grounds(why: &Why) -> Vec<&Ground> {
    let of_unplaced = why.unplaced.iter().flat_map(|unplaced| &unplaced.grounds);
    let mut grounds: Vec<&Ground> = Vec::new();
    for ground in why.grounds.iter().chain(of_unplaced) {
        if !grounds.contains(&ground) {
            grounds.push(ground);
        }
    }
    grounds
}

fn target(timetable: &crate::timetable::Timetable, ground: &Ground) -> Target {
    // Of a request that repeats, the first date.
    let piece = |id: &Arc<str>| {
        let request = timetable.request(id);
        let first = request.and_then(|request| request.repeats.as_ref()?.dates().first());
        Target::Piece(first.map_or_else(|| Arc::clone(id), |dated| Arc::clone(&dated.id)))
    };
    match ground {
        Ground::Pin { piece: id, .. }
        | Ground::Begun { piece: id, .. }
        | Ground::Together { request: id }
        | Ground::Only { request: id }
        | Ground::Never { request: id, .. }
        | Ground::Need { request: id, .. }
        | Ground::Size { request: id, .. } => piece(id),
        Ground::Closure { resource, .. } | Ground::Opening { resource } => {
            Target::Resource(Arc::clone(resource))
        }
    }
}

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    chosen: usize,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let lines = lines(model);
    let height = (lines.len() as u16 + 1)
        .max(whole.height / 2)
        .min(whole.height.saturating_sub(3));
    let heading = " why: Enter on a ground goes to it, Esc leaves";
    let area = sheet(model, buffer, whole, height, heading);
    let (skip, room) = in_sight(height, chosen);
    let mut here = 1;
    for (row, (at, (text, target))) in lines.iter().enumerate().skip(skip).take(room).enumerate() {
        let y = row as u16 + 1;
        let (mark, style) = match (at == chosen, target) {
            (true, _) => (">", theme.label_here),
            (false, Some(_)) => ("-", theme.label),
            (false, None) => (" ", theme.label),
        };
        if at == chosen {
            here = y;
        }
        put(buffer, area, 0, y, &format!("{mark}{text}"), style);
    }
    Position::new(area.x, area.y + here)
}
