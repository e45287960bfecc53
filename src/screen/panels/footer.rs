//! The last line: what is typed, what was said, or the keys that matter now.

use crate::actions::{ACTIONS, Action};
use crate::screen::draw::{blank, put};
use crate::screen::model::{Mode, Model};
use crate::text::{clean, width, wrap};
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};

/// Draws it; returns where the cursor belongs when something is typed or asked here.
pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, area: Rect) -> Option<Position> {
    let theme = &model.setup.theme;
    blank(buffer, area);
    if let Mode::Leave = model.mode {
        let text = format!(
            "{} not saved: s saves and leaves, y leaves without, any other key stays",
            match model.desk.unsaved() {
                1 => "1 edit".to_string(),
                count => format!("{count} edits"),
            }
        );
        let x = put(buffer, area, 0, 0, &text, theme.warning);
        return Some(Position::new(area.x + x, area.y));
    }
    if let Some(question) = question(model) {
        let x = put(buffer, area, 0, 0, &question, theme.warning);
        return Some(Position::new(area.x + x, area.y));
    }
    if let Some(message) = &model.message {
        let style = if message.warning {
            theme.warning
        } else {
            theme.prompt
        };
        if let Mode::Command(input) = &model.mode {
            // What is wrong above, what was typed below it.
            let above = Rect::new(area.x, area.y.saturating_sub(1), area.width, 1);
            blank(buffer, above);
            put(buffer, above, 0, 0, &message.text, style);
            return Some(typed(model, input, buffer, area));
        }
        // A long one takes the lines above it too, rather than lose its end.
        let lines = wrap(&message.text, usize::from(area.width).max(1));
        let lines = &lines[lines.len().saturating_sub(4)..];
        for (up, line) in lines.iter().rev().enumerate() {
            let y = area.y.saturating_sub(up as u16);
            let here = Rect::new(area.x, y, area.width, 1);
            blank(buffer, here);
            put(buffer, here, 0, 0, line, style);
        }
        return None;
    }
    match &model.mode {
        Mode::Command(input) => Some(typed(model, input, buffer, area)),
        Mode::Carry(_) => {
            put(
                buffer,
                area,
                0,
                0,
                "arrows carry it in time and over resources; Enter drops it; Esc puts it back",
                theme.prompt,
            );
            None
        }
        _ => {
            put(
                buffer,
                area,
                0,
                0,
                &hints(model, usize::from(area.width)),
                theme.hint,
            );
            None
        }
    }
}

/// What must be decided before anything else.
fn question(model: &Model) -> Option<String> {
    match &model.mode {
        Mode::Leftover => model.desk.leftover().map(|leftover| {
            let count = crate::words::count_words(leftover.edits, "edit");
            if leftover.foreign {
                format!(
                    "{count} for another version of this file: Enter tries them, k keeps them apart"
                )
            } else {
                format!("{count} not saved last time: Enter takes them in, k keeps them apart")
            }
        }),
        Mode::Changed => {
            Some("changed by someone else: m mine, t theirs, b both, any other key: not now".into())
        }
        _ => None,
    }
}

fn typed(model: &Model, input: &tui_input::Input, buffer: &mut Buffer, area: Rect) -> Position {
    let room = usize::from(area.width).saturating_sub(2);
    let skipped = input.visual_scroll(room);
    let shown: String = {
        // Whole characters from the left until what is cut off is wide enough.
        let mut cut = 0;
        let clean = clean(input.value());
        let from = clean.char_indices().find(|(_, c)| {
            let here = cut >= skipped;
            cut += width(c.encode_utf8(&mut [0; 4]));
            here
        });
        from.map_or_else(String::new, |(at, _)| clean[at..].to_string())
    };
    put(
        buffer,
        area,
        0,
        0,
        &format!(":{shown}"),
        model.setup.theme.prompt,
    );
    let column = input.visual_cursor().saturating_sub(skipped).min(room);
    Position::new(area.x + 1 + column as u16, area.y)
}

/// What is hinted at, the most needed first.
const HINTS: [Action; 14] = [
    Action::Help,
    Action::Carry,
    Action::Undo,
    Action::Save,
    Action::Leave,
    Action::Find,
    Action::Command,
    Action::Why,
    Action::Who,
    Action::NextPeak,
    Action::Pin,
    Action::Fasten,
    Action::Withdraw,
    Action::Close,
];

/// As many of the usual keys as fit; help always does.
fn hints(model: &Model, room: usize) -> String {
    let key = |action: Action| {
        let keys = model.setup.keys.of(action);
        keys.first().map_or_else(String::new, |key| match *key {
            "enter" => "Enter".into(),
            key => key.to_string(),
        })
    };
    let mut text = String::new();
    for action in HINTS {
        let entry = ACTIONS.iter().find(|entry| entry.action == action);
        if let Some(hint) = entry.and_then(|entry| entry.hint) {
            let gap = if text.is_empty() { "" } else { "  " };
            let more = format!("{gap}{} {hint}", key(action));
            if width(&text) + width(&more) <= room {
                text.push_str(&more);
            }
        }
    }
    text
}
