//! The days strip: each day with its load, the floor, what is in use; Enter goes there.

use super::{in_sight, sheet};
use crate::clock::Instant;
use crate::screen::draw::put;
use crate::screen::model::{Mode, Model};
use chrono::NaiveDate;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use std::collections::{BTreeMap, BTreeSet};

/// One day.
#[derive(Clone, Debug)]
pub(in crate::screen) struct Day {
    pub(in crate::screen) date: NaiveDate,
    pub(in crate::screen) first: Instant,
    load: usize,
    /// No plan can do with fewer that day: its load, or the pieces of the floor's proof then.
    floor: usize,
    in_use: usize,
    pieces: usize,
}

/// The days on which something starts or runs, in order; worked out when first asked for.
pub(in crate::screen) fn days(model: &Model) -> &[Day] {
    model.days.get_or_init(|| work_out(model))
}

/// A piece is counted on so many dates at most.
const MOST_DATES: usize = 400;

fn work_out(model: &Model) -> Vec<Day> {
    let zone = model.timetable().settings.zone;
    let mut found: BTreeMap<NaiveDate, (Instant, usize, BTreeSet<usize>)> = BTreeMap::new();
    for (at, piece) in model
        .rows
        .pieces
        .iter()
        .enumerate()
        .filter(|(_, piece)| !piece.withdrawn)
    {
        for date in zone.dates(piece.span).take(MOST_DATES) {
            let start = piece.span.start.max(zone.midnight(date));
            let day = found.entry(date).or_insert((start, 0, BTreeSet::new()));
            day.0 = day.0.min(start);
            day.1 += 1;
            day.2.extend(model.rows.on[at]);
        }
    }
    let settled = model.shown().0;
    let load = settled.map(|settled| &settled.survey().load);
    let mut counted: BTreeMap<NaiveDate, usize> = BTreeMap::new();
    for piece in model
        .rows
        .pieces
        .iter()
        .filter(|piece| settled.is_some_and(|s| s.counts(&piece.id)))
    {
        for date in zone.dates(piece.span).take(MOST_DATES) {
            *counted.entry(date).or_default() += 1;
        }
    }
    found
        .into_iter()
        .map(|(date, (first, pieces, resources))| {
            let load = load.map_or(0, |load| load.most_within(zone.day(date)));
            let floor = load.max(counted.get(&date).copied().unwrap_or(0));
            Day {
                floor,
                date,
                first,
                load,
                in_use: resources.len(),
                pieces,
            }
        })
        .collect()
}

/// The days as a short list, for the side of a wide screen.
pub(in crate::screen) fn list(model: &Model, buffer: &mut Buffer, area: Rect) {
    let theme = &model.setup.theme;
    let today = model.timetable().settings.zone.date(model.at);
    let days = days(model);
    let room = usize::from(area.height).saturating_sub(1);
    let here = days.iter().position(|day| day.date >= today).unwrap_or(0);
    let skip = (here + 1).saturating_sub(room);
    put(
        buffer,
        area,
        1,
        0,
        "day         in use  load  pieces",
        theme.title,
    );
    for (y, day) in (1..area.height).zip(days.iter().skip(skip)) {
        let (mark, style) = if day.date == today {
            (">", theme.label_here)
        } else {
            (" ", theme.label)
        };
        let text = format!(
            "{mark}{}  {:>6}  {:>4}  {:>6}",
            day.date.format("%a %d %b"),
            day.in_use,
            day.load,
            day.pieces
        );
        put(buffer, area, 0, y, &text, style);
    }
}

/// Opens the strip on the day in hand.
pub(in crate::screen) fn open(model: &mut Model) {
    let today = model.timetable().settings.zone.date(model.at);
    let at = days(model)
        .iter()
        .position(|day| day.date >= today)
        .unwrap_or(0);
    model.mode = Mode::Days(at);
}

/// Draws over the lower part of the screen; returns where the cursor belongs.
pub(in crate::screen) fn draw(
    model: &Model,
    chosen: usize,
    buffer: &mut Buffer,
    whole: Rect,
) -> Position {
    let theme = &model.setup.theme;
    let days = days(model);
    let height = (days.len() as u16 + 1)
        .max(4)
        .min(whole.height * 2 / 3)
        .min(whole.height.saturating_sub(1));
    let floor = model
        .shown()
        .0
        .map_or(0, |settled| settled.receipt().floor());
    let heading = format!(" Days (floor of the whole: {floor}): Enter goes there, Esc leaves");
    let area = sheet(model, buffer, whole, height, &heading);
    let (skip, room) = in_sight(height, chosen);
    let most = days
        .iter()
        .map(|day| day.in_use)
        .max()
        .unwrap_or(1)
        .max(floor)
        .max(1);
    let bar_room = usize::from(area.width).saturating_sub(57).min(60);
    for (y, (at, day)) in (1..).zip(days.iter().enumerate().skip(skip).take(room)) {
        let (mark, style) = if at == chosen {
            (">", theme.label_here)
        } else {
            (" ", theme.label)
        };
        let text = format!(
            "{mark}{}  {:>3} in use  floor {:>3}  load {:>3}  {:>4} pieces  ",
            day.date.format("%a %d %b"),
            day.in_use,
            day.floor,
            day.load,
            day.pieces
        );
        let x = put(buffer, area, 0, y, &text, style);
        let cells = |count: usize| count * bar_room / most;
        put(buffer, area, x, y, &"#".repeat(cells(day.load)), theme.load);
        let idle = cells(day.in_use).saturating_sub(cells(day.load));
        put(
            buffer,
            area,
            x + cells(day.load) as u16,
            y,
            &"+".repeat(idle),
            theme.open,
        );
    }
    let y = (chosen.saturating_sub(skip) as u16 + 1).min(height.saturating_sub(1));
    Position::new(area.x, area.y + y)
}
