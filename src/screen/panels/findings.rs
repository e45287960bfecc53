//! What is doubtful in the file, what cannot be, what has no place, who clashes.

use super::{in_sight, sheet};
use crate::edit::Touched;
use crate::screen::draw::put;
use crate::screen::model::Model;
use crate::text::{clean, wrap};
use crate::timetable::findings;
use crate::words;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use std::sync::Arc;

/// Every line, with the piece it is about.
pub(in crate::screen) fn lines(model: &Model) -> Vec<(String, Option<Arc<str>>)> {
    let timetable = model.desk.timetable();
    let line_of = |id: &str| {
        let request = timetable.occurrence(id).map(|(at, _)| at);
        let at = request.or_else(|| timetable.position(id))?;
        model.desk.document().line_of(&Touched::Request(at))
    };
    let at = |id: &str| line_of(id).map_or_else(String::new, |line| format!("line {line}: "));
    let mut lines = Vec::new();
    for warning in &model.desk.warnings {
        let (line, _) = warning.line_and_column(model.desk.document().text());
        lines.push((format!("line {line}: {}", warning.message), None));
    }
    let found = findings(timetable);
    let known: Vec<Arc<str>> = found
        .iter()
        .map(|finding| Arc::clone(&finding.piece))
        .collect();
    for finding in found {
        let text = format!(
            "{}{}",
            at(&finding.piece),
            words::finding(timetable, &finding)
        );
        lines.push((text, Some(finding.piece)));
    }
    if let Some(settled) = model.desk.settled() {
        let others = settled.answer().plan.unplaced.iter();
        for unplaced in others.filter(|unplaced| !known.contains(&unplaced.piece)) {
            let text = format!(
                "{}{} has no place: {}",
                at(&unplaced.piece),
                unplaced.piece,
                words::unplaced(timetable, unplaced)
            );
            lines.push((text, Some(Arc::clone(&unplaced.piece))));
        }
        for clash in &settled.survey().clashes {
            let text = format!(
                "{} is in {} and {} at once",
                clean(&clash.person),
                clash.first,
                clash.second
            );
            lines.push((text, Some(Arc::clone(&clash.first))));
        }
    }
    lines
}

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    chosen: usize,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let height = (whole.height / 2)
        .max(6)
        .min(whole.height.saturating_sub(1));
    let lines = lines(model);
    let heading = format!(
        " {}: Enter goes to one, Esc leaves",
        words::count_words(lines.len(), "finding")
    );
    let area = sheet(model, buffer, whole, height, &heading);
    if lines.is_empty() {
        put(
            buffer,
            area,
            1,
            1,
            "nothing is doubtful, everything has a place, nobody clashes",
            theme.label,
        );
    }
    let (skip, _) = in_sight(height, chosen);
    let mut y = 1;
    let mut here = 1;
    for (at, (text, _)) in lines.iter().enumerate().skip(skip) {
        // The chosen one is shown whole, the others in a line each.
        let width = usize::from(area.width).saturating_sub(2).max(1);
        let shown = if at == chosen {
            wrap(text, width)
        } else {
            vec![text.clone()]
        };
        if at == chosen {
            here = y;
        }
        for (part, text) in shown.iter().enumerate() {
            let (mark, style) = match (at == chosen, part) {
                (true, 0) => (">", theme.label_here),
                (true, _) => (" ", theme.label_here),
                (false, _) => (" ", theme.label),
            };
            put(buffer, area, 0, y, &format!("{mark}{text}"), style);
            y += 1;
        }
        if y >= height {
            break;
        }
    }
    Position::new(area.x, area.y + here.min(height.saturating_sub(1)))
}
