//! Title, what is known, the day, what is not saved.

use crate::audit::Knowledge;
use crate::desk::{Access, Disk};
use crate::screen::draw::put;
use crate::screen::model::{Mode, Model};
use crate::text::{fit, width};
use crate::words;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, area: Rect) {
    let theme = &model.setup.theme;
    let timetable = model.timetable();
    let settings = &timetable.settings;
    let (settled, current) = model.shown();
    let (state, style) = match settled {
        None => ("counting".to_string(), theme.open),
        Some(settled) => {
            let resources = timetable.resources().all.len();
            let said = words::state(settled.receipt(), resources, &settings.noun, model.progress);
            let style = match settled.receipt().knowledge() {
                _ if !current => theme.open,
                Knowledge::Proved(_) => theme.proved,
                Knowledge::Between { .. } => theme.open,
                Knowledge::Impossible { .. } => theme.impossible,
            };
            let lead = if matches!(model.mode, Mode::Carry(_)) {
                "dropped here: "
            } else {
                ""
            };
            (
                format!(
                    "{lead}{said}{}",
                    if current { "" } else { " (before this edit)" }
                ),
                style,
            )
        }
    };
    let room = usize::from(area.width).saturating_sub(width(&state) + 2);
    put(
        buffer,
        area,
        0,
        0,
        &fit(&settings.title, room.min(60)),
        theme.title,
    );
    let x = usize::from(area.width).saturating_sub(width(&state));
    put(buffer, area, x as u16, 0, &state, style);

    let day = settings
        .zone
        .civil(model.at)
        .format("%a %d %b %Y")
        .to_string();
    let mut x = put(buffer, area, 0, 1, &day, theme.title);
    let (saved, calm) = standing(model);
    if let Some(settled) = settled {
        let load = &settled.survey().load;
        let mut peaks = words::peaks(settled.clique(), load, settings.zone);
        if settled.receipt().floor() > settled.clique() {
            // What the braces on the board are about.
            let floor = settled.receipt().floor();
            peaks = peaks.replacen(':', &format!(", {{ }} need {floor}:"), 1);
        }
        if let Some(changes) = words::changes(settled.answer(), settled.receipt(), &settings.noun) {
            peaks = format!("{changes}   {peaks}");
        }
        let room = usize::from(area.width).saturating_sub(usize::from(x) + 3 + width(&saved) + 1);
        x = put(
            buffer,
            area,
            x + 3,
            1,
            &crate::text::cut(&peaks, room),
            theme.label,
        );
    }
    let style = if calm { theme.hint } else { theme.warning };
    let right = area.width.saturating_sub(width(&saved) as u16).max(x + 1);
    put(buffer, area, right, 1, &saved, style);
}

/// What becomes of the edits, and whether that is as it should be.
fn standing(model: &Model) -> (String, bool) {
    if let Access::Theirs(who) = model.desk.access() {
        return (format!("read only: {}", crate::text::cut(who, 30)), false);
    }
    let unsaved = match model.desk.unsaved() {
        0 if model.desk.disk() == Disk::Same => return ("saved".into(), true),
        0 => return ("changed on disk".into(), false),
        count => crate::words::count_words(count, "edit"),
    };
    if let Some(why) = model.desk.unsafe_because() {
        return (
            format!("{unsaved} NOT SAFE: {}", crate::text::cut(why, 30)),
            false,
        );
    }
    if model.desk.disk() == Disk::Same {
        (format!("{unsaved} not saved"), false)
    } else {
        (format!("{unsaved}, changed on disk"), false)
    }
}
