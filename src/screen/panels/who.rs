//! Who can take this? Every resource for the piece in hand, the nearest fit first.

use super::{in_sight, sheet};
use crate::engine::who::{Choice, who_can_take};
use crate::screen::draw::put;
use crate::screen::model::Model;
use crate::words;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};

/// The resources for a piece, in the order of the lines.
pub(in crate::screen) fn choices(model: &Model, piece: &str) -> Vec<Choice> {
    let Some(settled) = model.desk.settled() else {
        return Vec::new();
    };
    who_can_take(model.desk.timetable(), &settled.answer().plan, piece)
}

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    piece: &str,
    chosen: usize,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let height = (whole.height * 2 / 3)
        .max(6)
        .min(whole.height.saturating_sub(3));
    let heading = format!(" who can take {piece}: Enter pins it there, Esc leaves");
    let area = sheet(model, buffer, whole, height, &heading);
    let choices = choices(model, piece);
    let width = choices.iter().map(|choice| choice.resource.len()).max();
    let width = width.unwrap_or(0).min(22);
    let (skip, room) = in_sight(height, chosen);
    let mut here = 1;
    for (row, (at, choice)) in choices.iter().enumerate().skip(skip).take(room).enumerate() {
        let y = row as u16 + 1;
        let (mark, style) = match at == chosen {
            true => (">", theme.label_here),
            false => (" ", theme.label),
        };
        if at == chosen {
            here = y;
        }
        let name = crate::text::fit(&choice.resource, width);
        let said = words::choice(choice);
        put(buffer, area, 0, y, &format!("{mark}{name}  {said}"), style);
    }
    Position::new(area.x, area.y + here)
}
