//! The parts of the screen. Each draws one area from the state and changes nothing.

pub(super) mod board;
pub(super) mod days;
pub(super) mod detail;
pub(super) mod find;
pub(super) mod findings;
pub(super) mod footer;
pub(super) mod form;
pub(super) mod header;
pub(super) mod help;
pub(super) mod load;
pub(super) mod who;
pub(super) mod why;

use super::draw::{blank, put};
use super::model::{Mode, Model};
use crate::actions::Action;
use crate::text::fit;
use crossterm::event::{KeyCode, KeyEvent};
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

/// A sheet over the lower part of the screen, empty but for its heading; the last line of the
/// screen stays free for what is said.
fn sheet(model: &Model, buffer: &mut Buffer, whole: Rect, height: u16, heading: &str) -> Rect {
    let top = whole.height.saturating_sub(1 + height);
    let area = Rect::new(whole.x, top, whole.width, height);
    blank(buffer, area);
    let heading = fit(heading, usize::from(area.width));
    put(buffer, area, 0, 0, &heading, model.setup.theme.axis);
    area
}

/// Of a list under a heading on a sheet of that height: lines before the first one in sight,
/// and how many are, so that the chosen one is among them.
fn in_sight(height: u16, chosen: usize) -> (usize, usize) {
    let room = usize::from(height).saturating_sub(1).max(1);
    ((chosen + 1).saturating_sub(room), room)
}

/// A key in one of the panels that list something: up and down, Enter goes, all else leaves.
pub(super) fn listed(model: &mut Model, key: KeyEvent, action: Option<Action>) {
    let count = match &model.mode {
        Mode::Findings(_) => findings::lines(model).len(),
        Mode::Why(_) => why::lines(model).len(),
        _ => days::days(model).len(),
    };
    let (Mode::Findings(chosen) | Mode::Days(chosen) | Mode::Why(chosen)) = &mut model.mode else {
        return;
    };
    let page = usize::from(model.size.1) / 2;
    match action {
        Some(Action::Up) => *chosen = chosen.saturating_sub(1),
        Some(Action::Down) => *chosen += 1,
        Some(Action::PageUp) => *chosen = chosen.saturating_sub(page),
        Some(Action::PageDown) => *chosen += page,
        Some(Action::First) => *chosen = 0,
        Some(Action::Last) => *chosen = count,
        _ if key.code == KeyCode::Enter => return go(model),
        _ => {
            model.mode = Mode::Board;
            return;
        }
    }
    *chosen = (*chosen).min(count.saturating_sub(1));
}

fn go(model: &mut Model) {
    match std::mem::replace(&mut model.mode, Mode::Board) {
        Mode::Findings(chosen) => {
            let line = findings::lines(model).into_iter().nth(chosen);
            if let Some(piece) = line
                .and_then(|(_, id)| id)
                .and_then(|id| model.rows.find(&id))
            {
                model.show_day(model.rows.pieces[piece].span.start);
                model.take(piece);
            }
        }
        Mode::Why(chosen) => {
            let line = why::lines(model).into_iter().nth(chosen);
            match line.and_then(|(_, target)| target) {
                Some(why::Target::Piece(id)) => {
                    if let Some(piece) = model.rows.find(&id) {
                        model.show_day(model.rows.pieces[piece].span.start);
                        model.take(piece);
                    }
                }
                Some(why::Target::Resource(id)) => {
                    let rows = model.rows.rows.iter();
                    let row = rows
                        .map(|row| model.row_name(&row.kind))
                        .position(|name| *name == *id);
                    match row {
                        Some(row) => super::update::to_row(model, row),
                        None => model.say(format!("{id} is not in use"), false),
                    }
                }
                // A line of the sentence leads nowhere.
                None => model.mode = Mode::Why(chosen),
            }
        }
        Mode::Days(chosen) => {
            if let Some(first) = days::days(model).get(chosen).map(|day| day.first) {
                model.at = first;
                model.show_day(first);
                model.take_at(first);
            }
        }
        _ => {}
    }
}
