//! The form of fields.

use super::sheet;
use crate::screen::draw::put;
use crate::screen::form::Form;
use crate::screen::model::Model;
use crate::text::{clean, fit};
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    form: &Form,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let height = (form.fields.len() as u16 + 1).min(whole.height.saturating_sub(1));
    let about = form.id.as_deref().unwrap_or("a new request");
    let heading = format!(" {about}: Enter makes the changes, Tab goes on, Esc leaves");
    let area = sheet(model, buffer, whole, height, &heading);
    let room = usize::from(area.width).saturating_sub(14);
    let mut cursor = Position::new(area.x, area.y);
    // The chosen field is in sight however low the screen is.
    let shown = usize::from(height).saturating_sub(1).max(1);
    let skip = (form.chosen + 1).saturating_sub(shown);
    for (y, (at, field)) in (1..).zip(form.fields.iter().enumerate().skip(skip).take(shown)) {
        let here = at == form.chosen;
        let style = if here { theme.label_here } else { theme.label };
        let mark = if here { ">" } else { " " };
        put(
            buffer,
            area,
            0,
            y,
            &format!("{mark}{}", fit(field.label, 11)),
            style,
        );
        let value = clean(field.input.value()).into_owned();
        let skipped = if here {
            field.input.visual_scroll(room)
        } else {
            0
        };
        let value: String = value.chars().skip(skipped).collect();
        let x = put(buffer, area, 13, y, &value, theme.prompt);
        if here {
            let column = field
                .input
                .visual_cursor()
                .saturating_sub(skipped)
                .min(room);
            cursor = Position::new(area.x + 13 + column as u16, area.y + y);
            put(
                buffer,
                area,
                x.max(13 + column as u16 + 1) + 2,
                y,
                field.help,
                theme.hint,
            );
        }
    }
    cursor
}
