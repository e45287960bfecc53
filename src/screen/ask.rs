//! What is asked of the program rather than told: why not fewer, and who can take something.

use super::model::{Mode, Model};
use super::update::{Effect, make};
use crate::actions::Action;
use crate::edit::Change;
use crate::engine::who::Verdict;
use crossterm::event::{KeyCode, KeyEvent};
use std::sync::Arc;

/// Opens the reason for the count; it is worked out beside the screen.
pub(super) fn why(model: &mut Model) -> Vec<Effect> {
    let Some(settled) = model.desk.settled().filter(|_| model.desk.is_current()) else {
        model.say("there is no answer yet to give a reason for", true);
        return Vec::new();
    };
    let generation = settled.generation();
    let count = settled.receipt().in_use();
    let known = model.why.as_ref();
    let fresh = known.is_some_and(|(of, why)| {
        *of == generation && why.count == count && why.floor == settled.receipt().floor()
    });
    let effect = Effect::Why(Arc::clone(settled));
    model.mode = Mode::Why(0);
    if fresh {
        return Vec::new();
    }
    model.why = None;
    vec![effect]
}

/// Opens the list of resources for the piece in hand.
pub(super) fn who(model: &mut Model) {
    let here = model.here.and_then(|here| model.rows.pieces.get(here));
    match here {
        Some(piece) if piece.withdrawn => {
            let said = format!(
                "{} is withdrawn; first: restore {}",
                piece.id, piece.request.id
            );
            model.say(said, true);
        }
        Some(piece) => model.mode = Mode::Who(Arc::clone(&piece.id), 0),
        None => model.say("take a piece in hand first", true),
    }
}

/// A key in the list of resources: up and down, Enter pins, all else leaves.
pub(super) fn choosing(model: &mut Model, key: KeyEvent, action: Option<Action>) -> Vec<Effect> {
    let page = usize::from(model.size.1) / 2;
    let Mode::Who(piece, chosen) = &model.mode else {
        return Vec::new();
    };
    let (piece, chosen) = (Arc::clone(piece), *chosen);
    let choices = super::panels::who::choices(model, &piece);
    let to = match action {
        Some(Action::Up) => chosen.saturating_sub(1),
        Some(Action::Down) => chosen + 1,
        Some(Action::PageUp) => chosen.saturating_sub(page),
        Some(Action::PageDown) => chosen + page,
        Some(Action::First) => 0,
        Some(Action::Last) => choices.len(),
        _ => {
            model.mode = Mode::Board;
            let Some(choice) = choices.get(chosen).filter(|_| key.code == KeyCode::Enter) else {
                return Vec::new();
            };
            let on = Arc::clone(&choice.resource);
            if let Verdict::Cannot(_) | Verdict::Taken(_) = choice.verdict {
                let said = crate::words::choice(choice);
                model.say(
                    format!("{on}: {said} (:pin {piece} on {on} does it all the same)"),
                    true,
                );
                return Vec::new();
            }
            return make(model, vec![Change::Pin { piece, on }.into()]);
        }
    };
    model.mode = Mode::Who(piece, to.min(choices.len().saturating_sub(1)));
    Vec::new()
}
