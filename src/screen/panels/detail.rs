//! What is in hand: the piece, its choices, its neighbours, its clashes.

use crate::claim::Reason;
use crate::clock::Span;
use crate::screen::draw::put;
use crate::screen::layout::RowKind;
use crate::screen::model::{Carry, Mode, Model};
use crate::text::{clean, cut, wrap};
use crate::timetable::{Piece, may_use, occupied};
use crate::words;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use ratatui::style::Style;

pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, area: Rect) {
    let theme = &model.setup.theme;
    let lines = match model.here {
        Some(here) => of_piece(model, here),
        None => of_row(model),
    };
    let style = |tone| match tone {
        Tone::Head => theme.title,
        Tone::Plain => Style::new(),
        Tone::Warn => theme.warning,
    };
    let room = usize::from(area.width).saturating_sub(2);
    if area.height <= 8 {
        for (y, (text, tone)) in (0..area.height).zip(lines) {
            put(buffer, area, 1, y, &cut(&text, room), style(tone));
        }
        return;
    }
    // At the side there is room for whole sentences, and for the days below them.
    let wrapped = lines
        .iter()
        .flat_map(|(text, tone)| wrap(text, room).into_iter().map(|line| (line, *tone)));
    let mut y = 0;
    for (text, tone) in wrapped.take(usize::from(area.height)) {
        put(buffer, area, 1, y, &text, style(tone));
        y += 1;
    }
    let rest = Rect {
        y: area.y + y + 1,
        height: area.height.saturating_sub(y + 1),
        ..area
    };
    if rest.height > 2 {
        super::days::list(model, buffer, rest);
    }
}

#[derive(Clone, Copy)]
enum Tone {
    Head,
    Plain,
    Warn,
}

fn of_row(model: &Model) -> Vec<(String, Tone)> {
    let Some(row) = model.rows.rows.get(model.row) else {
        return Vec::new();
    };
    let RowKind::Resource(resource) = row.kind else {
        return vec![(
            format!("{} pieces in this row", row.pieces.len()),
            Tone::Head,
        )];
    };
    let timetable = model.timetable();
    let resource = &timetable.resources().all[resource];
    let title = resource.title.as_deref().unwrap_or("");
    let offers: Vec<&str> = resource.offers.iter().map(|offer| &**offer).collect();
    let seats = resource.seats.map_or_else(
        || "no limit of seats".to_string(),
        |seats| format!("seats {seats}"),
    );
    vec![
        (format!("{}  {}", resource.id, clean(title)), Tone::Head),
        (
            format!("{seats}; offers {}", clean(&words::list(&offers, 6))),
            Tone::Plain,
        ),
        (
            format!("{} pieces in all; none in hand", row.pieces.len()),
            Tone::Plain,
        ),
    ]
}

fn of_piece(model: &Model, here: usize) -> Vec<(String, Tone)> {
    let timetable = model.timetable();
    let piece = &model.rows.pieces[here];
    let mut lines = vec![head(model, piece), (facts(model, here), Tone::Plain)];
    if let Mode::Carry(carry) = &model.mode {
        lines[0] = held(model, carry, piece);
        lines.extend(cautions(model, carry, piece));
    }
    let settled = model.shown().0;
    let without = settled.and_then(|settled| {
        settled
            .answer()
            .plan
            .unplaced
            .iter()
            .find(|u| u.piece == piece.id)
    });
    if let Some(without) = without {
        lines.push((
            format!("no place: {}", words::unplaced(timetable, without)),
            Tone::Warn,
        ));
    }
    let clashes = settled
        .map(|settled| settled.survey().clashes.as_slice())
        .unwrap_or_default();
    for clash in clashes
        .iter()
        .filter(|clash| clash.first == piece.id || clash.second == piece.id)
    {
        let other = if clash.first == piece.id {
            &clash.second
        } else {
            &clash.first
        };
        lines.push((
            format!("clash: {} is also in {other}", clean(&clash.person)),
            Tone::Warn,
        ));
    }
    if !piece.withdrawn && without.is_none_or(|without| without.because != Reason::NoResource) {
        lines.push((choices(model, here), Tone::Plain));
    }
    let people: Vec<&str> = piece
        .request
        .people
        .iter()
        .map(|person| &**person)
        .collect();
    if !people.is_empty() {
        lines.push((
            format!("people: {}", clean(&words::list(&people, 8))),
            Tone::Plain,
        ));
    }
    lines
}

/// Id, title, and what has been decided about it.
fn head(model: &Model, piece: &Piece) -> (String, Tone) {
    let zone = model.timetable().settings.zone;
    let mut states = Vec::new();
    if piece.pin.is_some() {
        states.push("! pinned".to_string());
    }
    if piece.fastened {
        states.push("= fastened".into());
    }
    if let Some(before) = model.desk.opened().piece(&piece.id)
        && before.span.start != piece.span.start
    {
        states.push(format!("* moved from {}", zone.print(before.span.start)));
    }
    if piece.withdrawn {
        states.push("withdrawn".into());
    }
    let counted = model
        .shown()
        .0
        .is_some_and(|settled| settled.counts(&piece.id));
    if counted {
        states.push("{ } counted in the floor".into());
    }
    let states = if states.is_empty() {
        String::new()
    } else {
        format!("   {}", states.join(", "))
    };
    (
        format!("{}  {}{states}", piece.id, clean(&piece.request.title)),
        Tone::Head,
    )
}

fn facts(model: &Model, here: usize) -> String {
    let timetable = model.timetable();
    let zone = timetable.settings.zone;
    let piece = &model.rows.pieces[here];
    let mut text = words::span(piece.span, zone);
    if let Some(resource) = model.rows.on[here] {
        text.push_str(&format!(" on {}", timetable.resources().all[resource].id));
    }
    if let Some(size) = piece.size {
        text.push_str(&format!("   size {size}"));
    }
    if piece.request.weight > 1 {
        text.push_str(&format!("   weight {}", piece.request.weight));
    }
    let needs: Vec<&str> = piece.request.needs.iter().map(|need| &**need).collect();
    if !needs.is_empty() {
        text.push_str(&format!("   needs {}", clean(&words::list(&needs, 4))));
    }
    text
}

fn held(model: &Model, carry: &Carry, piece: &Piece) -> (String, Tone) {
    let zone = model.timetable().settings.zone;
    let over = carry.over.map_or_else(String::new, |over| {
        format!(" over {}", carry.timetable.resources().all[over].id)
    });
    let when = |at| zone.civil(at).format("%a %d %b %H:%M").to_string();
    let from = if carry.start == carry.home_start {
        String::new()
    } else if zone.date(carry.start) == zone.date(carry.home_start) {
        format!(", was {}", zone.time(carry.home_start))
    } else {
        format!(", was {}", when(carry.home_start))
    };
    let text = format!(
        "carrying {}{over}: starts {}{from}",
        piece.id,
        when(carry.start)
    );
    (text, Tone::Head)
}

/// What speaks against dropping it here; it may be dropped all the same.
fn cautions(model: &Model, carry: &Carry, piece: &Piece) -> Vec<(String, Tone)> {
    let mut lines = Vec::new();
    let present = model.desk.timetable().piece(&piece.id);
    if let Some(present) = present
        && !present.start_allowed(carry.start, &model.timetable().settings)
    {
        lines.push((
            "outside the times it may start; it can be dropped here all the same".to_string(),
            Tone::Warn,
        ));
    }
    if let Some(over) = carry.over {
        let resource = &carry.timetable.resources().all[over];
        let mut there = piece.clone();
        there.pin = None;
        if let Err(because) = may_use(&there, resource) {
            lines.push((
                format!("{} cannot take it: {}", resource.id, words::unfit(&because)),
                Tone::Warn,
            ));
        }
    }
    lines
}

/// Which resources could take it, and which of those are free then.
fn choices(model: &Model, here: usize) -> String {
    let timetable = model.timetable();
    let resources = &timetable.resources().all;
    let mut piece = model.rows.pieces[here].clone();
    let pinned = piece.pin.take();
    let mut could = 0;
    let mut free = Vec::new();
    let mut taken: Vec<Option<Vec<Span>>> = vec![None; resources.len()];
    for row in &model.rows.rows {
        if let RowKind::Resource(resource) = row.kind {
            let others = row.pieces.iter().filter(|other| **other != here);
            taken[resource] = Some(
                others
                    .map(|other| occupied(&model.rows.pieces[*other], &resources[resource]))
                    .collect(),
            );
        }
    }
    for (resource, taken) in resources.iter().zip(&taken) {
        // Members that are made as needed and not in use yet have no row.
        let Some(taken) = taken else { continue };
        if let Ok(span) = may_use(&piece, resource) {
            could += 1;
            if !taken.iter().any(|other| other.overlaps(span)) {
                free.push(&*resource.id);
            }
        }
    }
    let noun = &timetable.settings.noun;
    let pinned = if pinned.is_some() {
        "but for its pin "
    } else {
        ""
    };
    format!(
        "{pinned}{} could take it; free then: {}",
        words::count_of(could, noun),
        words::list(&free, 8)
    )
}
