//! All keys, from the table of actions, and what the signs on the board mean.

use crate::actions::ACTIONS;
use crate::screen::draw::{blank, put};
use crate::screen::model::Model;
use crate::text::fit;
use crate::words::CAUTION;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

/// Signs on the board.
const SIGNS: [(&str, &str); 14] = [
    ("[ ]", "a piece"),
    (
        "{ }",
        "a piece that the floor counts: they need as many as it says",
    ),
    ("< >", "the piece in hand"),
    ("( )", "the piece that is carried"),
    ("?", "not yet safe on the disk (a moment after each edit)"),
    ("'", "now"),
    ("!", "pinned: stays on its resource"),
    ("=", "fastened: stays at its start"),
    ("*", "moved since the file was opened"),
    ("&", "clash: one person in two pieces at once"),
    (":", "kept free before or after a piece"),
    (".  /", "not open; closed for a while"),
    ("^2 v5", "so many rows are above and below what is shown"),
    ("# -", "the load; the floor, below which no plan can go"),
];

/// Lines of the help: groups have a heading and a blank line each.
pub(in crate::screen) const LINES: usize = ACTIONS.len() + 3 * 2 + SIGNS.len() + 1 + 3;

/// Draws over the whole screen but the last line; returns its area.
pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, whole: Rect, top: usize) -> Rect {
    let theme = &model.setup.theme;
    let area = Rect::new(
        whole.x,
        whole.y,
        whole.width,
        whole.height.saturating_sub(1),
    );
    blank(buffer, area);
    let mut lines: Vec<(String, bool)> = Vec::with_capacity(LINES);
    let mut group = "";
    for entry in &ACTIONS {
        if entry.group != group {
            if !group.is_empty() {
                lines.push((String::new(), false));
            }
            group = entry.group;
            lines.push((group.to_string(), true));
        }
        let keys = model.setup.keys.of(entry.action).join(" ");
        lines.push((format!("  {} {}", fit(&keys, 10), entry.help), false));
    }
    lines.push((String::new(), false));
    lines.push(("Signs on the board".into(), true));
    lines.extend(
        SIGNS
            .iter()
            .map(|(sign, meaning)| (format!("  {} {meaning}", fit(sign, 10)), false)),
    );
    lines.push((String::new(), false));
    let (first, second) = CAUTION.split_once("; ").unwrap_or((CAUTION, ""));
    lines.push((format!("{first};"), false));
    lines.push((second.to_string(), false));
    let room = usize::from(area.height).saturating_sub(2);
    for (y, (text, heading)) in (1..).zip(lines.iter().skip(top).take(room)) {
        let style = if *heading { theme.title } else { theme.label };
        put(buffer, area, 1, y, text, style);
    }
    let more = if top + room < lines.len() {
        "; down for more"
    } else {
        ""
    };
    put(
        buffer,
        area,
        0,
        0,
        &fit(
            &format!(" Keys and signs (Esc leaves{more})"),
            usize::from(area.width),
        ),
        theme.axis,
    );
    area
}
