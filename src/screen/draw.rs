//! One frame: every panel in its area, then the cursor.

use super::model::{LEAST, Mode, Model};
use super::panels;
use crate::text::{clean, cut, width};
use ratatui::Frame;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use ratatui::style::Style;

/// Draws the state.
pub fn draw(model: &Model, frame: &mut Frame<'_>) {
    let whole = frame.area();
    let buffer = frame.buffer_mut();
    if whole.width < LEAST.0 || whole.height < LEAST.1 {
        let text = format!("fewest needs {} x {}", LEAST.0, LEAST.1);
        put(buffer, whole, 0, 0, &text, Style::new());
        return;
    }
    let areas = model.areas_at((whole.width, whole.height));
    panels::header::draw(model, buffer, areas.header);
    let mut cursor = panels::board::draw(model, buffer, &areas);
    panels::load::draw(model, buffer, &areas);
    panels::detail::draw(model, buffer, areas.detail);
    match &model.mode {
        Mode::Help(top) => {
            let area = panels::help::draw(model, buffer, whole, *top);
            cursor = Position::new(area.x, area.y);
        }
        Mode::Find(find) => cursor = panels::find::draw(model, find, buffer, whole),
        Mode::Form(form) => cursor = panels::form::draw(model, form, buffer, whole),
        Mode::Findings(at) => cursor = panels::findings::draw(model, *at, buffer, whole),
        Mode::Why(at) => cursor = panels::why::draw(model, *at, buffer, whole),
        Mode::Who(piece, at) => cursor = panels::who::draw(model, piece, *at, buffer, whole),
        Mode::Days(at) => cursor = panels::days::draw(model, *at, buffer, whole),
        _ => {}
    }
    if let Some(typing) = panels::footer::draw(model, buffer, areas.footer) {
        cursor = typing;
    }
    if model.setup.ascii {
        to_ascii(buffer);
    }
    frame.set_cursor_position(Position::new(
        cursor.x.min(whole.width.saturating_sub(1)),
        cursor.y.min(whole.height.saturating_sub(1)),
    ));
}

/// Writes text into an area at a column and row of it, cut at its right edge; returns the
/// column after it.
pub(super) fn put(
    buffer: &mut Buffer,
    area: Rect,
    x: u16,
    y: u16,
    text: &str,
    style: Style,
) -> u16 {
    let area = area.intersection(*buffer.area());
    if y >= area.height || x >= area.width {
        return x;
    }
    let room = usize::from(area.width - x);
    let shown = clean(text);
    let text = if width(&shown) <= room {
        shown
    } else {
        cut(text, room).into()
    };
    // What was there before must not shine through: a style only adds to what a cell has.
    buffer.set_stringn(
        area.x + x,
        area.y + y,
        &text,
        usize::from(area.width - x),
        Style::reset().patch(style),
    );
    x + width(&text) as u16
}

/// Empties an area of whatever was drawn there.
pub(super) fn blank(buffer: &mut Buffer, area: Rect) {
    let area = area.intersection(*buffer.area());
    for y in area.top()..area.bottom() {
        for x in area.left()..area.right() {
            buffer[(x, y)].reset();
        }
    }
}

/// Every character outside ASCII as a question mark, one a cell.
fn to_ascii(buffer: &mut Buffer) {
    for cell in &mut buffer.content {
        // The cell behind a wide character is empty and must be filled too.
        if !cell.symbol().is_ascii() || cell.symbol().is_empty() {
            cell.set_symbol("?");
        }
    }
}
