//! The screen: one state, one update without input or output, panels that only draw, and
//! `run` which alone touches the terminal.
//!
//! Imports everything below.

mod ask;
mod carry;
mod draw;
mod form;
mod layout;
mod model;
mod panels;
mod run;
mod theme;
mod update;
mod view;

pub use draw::draw;
pub use layout::{Row, RowKind, Rows};
pub use model::{Model, Setup};
pub use theme::{Depth, Theme};
pub use update::{Effect, Msg, update};

use crate::actions::Keys;
use crate::cli::{Look, Outcome};
use crate::desk::{Desk, whoami};
use crate::store::RealFiles;
use crate::text::clean;
use std::path::Path;
use std::sync::Arc;

/// Opens a timetable on the screen and stays until it is left.
pub fn open(file: &Path, look: &Look) -> Outcome {
    let setup = match setup(look) {
        Ok(setup) => setup,
        Err(message) => return Outcome::bad(message),
    };
    match Desk::open_to_edit(file, &whoami(), Arc::new(RealFiles)) {
        Ok((desk, notes)) => {
            let mut model = Model::new(desk, setup);
            if let Some(note) = notes.first() {
                model.say(note.clone(), true);
            }
            run::run(model, look.break_after_first_frame)
        }
        Err(trouble) => Outcome::bad(trouble),
    }
}

fn setup(look: &Look) -> Result<Setup, String> {
    let depth = Depth::find(look.colours.as_deref(), |key| std::env::var(key).ok())?;
    let read = |path: &Path| {
        std::fs::read_to_string(path)
            .map_err(|error| format!("{}: {error}", clean(&path.display().to_string())))
    };
    let name = look.theme.as_deref().unwrap_or("daylight");
    let theme = match Theme::named(name, depth) {
        Some(theme) => theme?,
        None => {
            let said = |message| format!("theme {}: {message}", clean(name));
            Theme::parse(&read(Path::new(name)).map_err(said)?, depth).map_err(said)?
        }
    };
    let keys = match &look.keys {
        None => Keys::default(),
        Some(path) => Keys::with_file(&read(path)?)
            .map_err(|message| format!("{}: {message}", clean(&path.display().to_string())))?,
    };
    Ok(Setup {
        theme,
        keys,
        ascii: look.ascii,
    })
}
