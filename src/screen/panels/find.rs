//! Finding a piece: what is typed, and what matches.

use super::sheet;
use crate::screen::draw::put;
use crate::screen::model::{Find, Model};
use crate::text::clean;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    find: &Find,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let height = (whole.height / 2)
        .max(6)
        .min(whole.height.saturating_sub(1));
    let heading = format!(
        " Find a piece by id, title or person: {} found (Enter goes there, Esc leaves)",
        find.matches.len()
    );
    let area = sheet(model, buffer, whole, height, &heading);
    let typed = clean(find.input.value()).into_owned();
    put(buffer, area, 0, 1, &format!("/{typed}"), theme.prompt);
    let room = usize::from(height).saturating_sub(2);
    let skip = (find.chosen + 1).saturating_sub(room);
    let zone = model.timetable().settings.zone;
    for (y, (at, piece)) in (2..).zip(find.matches.iter().enumerate().skip(skip).take(room)) {
        let piece = &model.rows.pieces[*piece];
        let mark = if at == find.chosen { ">" } else { " " };
        let when = zone.civil(piece.span.start).format("%a %d %b %H:%M");
        let line = format!(
            "{mark} {when}  {}  {}",
            piece.id,
            clean(&piece.request.title)
        );
        let style = if at == find.chosen {
            theme.label_here
        } else {
            theme.label
        };
        put(buffer, area, 0, y, &line, style);
    }
    let column = (1 + find.input.visual_cursor()).min(usize::from(area.width).saturating_sub(1));
    Position::new(area.x + column as u16, area.y + 1)
}
