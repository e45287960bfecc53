//! The load over time, with the floor as a line and the peaks marked.

use crate::screen::draw::put;
use crate::screen::model::{Areas, Model};
use crate::text::fit;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

/// A cell is full from here up, and half full from half of it: two levels a line.
const LEVELS: usize = 2;

pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, areas: &Areas) {
    let theme = &model.setup.theme;
    let area = areas.load;
    let Some(settled) = model.shown().0 else {
        return;
    };
    let load = &settled.survey().load;
    let floor = settled.receipt().floor();
    let top = floor.max(load.most).max(1);
    let height = usize::from(area.height);
    let line = Rect::new(areas.time.x, area.y, areas.time.width, area.height);
    // The row from the bottom in which the floor is drawn.
    let floor_row = (floor * height).div_ceil(top).saturating_sub(1);
    for column in 0..line.width {
        let here = load.most_within(model.view.span_of(column));
        for row in 0..height {
            let y = area.height - 1 - row as u16;
            let level = |part: usize| here * height * LEVELS >= top * (row * LEVELS + part);
            let (mark, style) = if here > 0 && level(LEVELS) {
                if here == load.most {
                    ("#", theme.peak)
                } else {
                    ("#", theme.load)
                }
            } else if here > 0 && level(1) {
                (":", theme.load)
            } else if row == floor_row {
                ("-", theme.floor)
            } else {
                continue;
            };
            put(buffer, line, column, y, mark, style);
        }
    }
    let label = |buffer: &mut Buffer, row: usize, text: &str, style| {
        let y = area.height.saturating_sub(1 + row as u16);
        put(
            buffer,
            area,
            0,
            y,
            &fit(text, usize::from(areas.time.x).saturating_sub(1)),
            style,
        );
    };
    label(buffer, floor_row, &format!(" floor {floor}"), theme.floor);
    if floor_row > 0 {
        label(
            buffer,
            0,
            &format!(" load {}", load.at(model.at)),
            theme.load,
        );
    }
}
