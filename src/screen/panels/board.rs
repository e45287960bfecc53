//! Resources against time, a bar per piece. Shapes first, colours second.

use crate::clock::Span;
use crate::desk::Settled;
use crate::lookup::FastSet;
use crate::screen::draw::put;
use crate::screen::layout::{Row, RowKind};
use crate::screen::model::{Areas, Mode, Model};
use crate::text::{clean, fit};
use crate::timetable::{Piece, occupied};
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use ratatui::style::Style;

/// Draws axis and rows; returns where the focus is.
pub(in crate::screen) fn draw(model: &Model, buffer: &mut Buffer, areas: &Areas) -> Position {
    axis(model, buffer, areas);
    let marks = Marks::of(model);
    let mut focus = Position::new(areas.board.x, areas.board.y);
    let visible = model
        .rows
        .rows
        .iter()
        .enumerate()
        .skip(model.top)
        .take(usize::from(areas.board.height));
    for ((at, row), y) in visible.zip(areas.board.y..) {
        let line = Rect::new(areas.time.x, y, areas.time.width, 1);
        let here = at == model.row;
        label(
            model,
            buffer,
            Rect::new(areas.board.x, y, areas.time.x, 1),
            row,
            here,
        );
        background(model, buffer, line, row);
        now_line(model, buffer, line);
        // What is in hand comes last, so that nothing hides it.
        let (mut mine, rest): (Vec<usize>, Vec<usize>) = row
            .pieces
            .iter()
            .partition(|piece| model.here == Some(**piece));
        for piece in rest.into_iter().chain(mine.drain(..)) {
            bar(model, buffer, line, row, piece, &marks);
        }
        if here {
            let column = model
                .view
                .column(model.at)
                .clamp(0, i64::from(line.width.saturating_sub(1)));
            focus = Position::new(line.x + column as u16, y);
        }
    }
    if model.rows.rows.is_empty() {
        put(
            buffer,
            areas.board,
            0,
            0,
            "there are no requests yet",
            model.setup.theme.hint,
        );
    }
    focus
}

/// Hours along the top, and how many rows are above or below.
fn axis(model: &Model, buffer: &mut Buffer, areas: &Areas) {
    let theme = &model.setup.theme;
    let area = areas.axis;
    let zone = model.timetable().settings.zone;
    let height = usize::from(areas.board.height);
    let below = model.rows.rows.len().saturating_sub(model.top + height);
    let more = match (model.top, below) {
        (0, 0) => String::new(),
        (above, below) => format!("^{above} v{below}"),
    };
    buffer.set_style(area, theme.axis);
    put(
        buffer,
        area,
        0,
        0,
        &fit(&more, usize::from(areas.time.x)),
        theme.axis,
    );
    let line = Rect::new(areas.time.x, area.y, areas.time.width, 1);
    let mut free_from = 0;
    let mut last_date = zone.date(model.view.left - model.view.step());
    for column in 0..line.width {
        let civil = zone.civil(model.view.span_of(column).start);
        let another_day = civil.date() != last_date && (column > 0 || model.view.step() > 3600);
        last_date = civil.date();
        let since_hour = civil.and_utc().timestamp().rem_euclid(3600);
        let whole_hour = since_hour < model.view.step() && model.view.step() <= 3600;
        if column < free_from || !(another_day || whole_hour) {
            continue;
        }
        let text = if another_day {
            civil.format("%a%d").to_string()
        } else {
            civil.format("%H").to_string()
        };
        if usize::from(column) + text.len() > usize::from(line.width) {
            break;
        }
        put(buffer, line, column, 0, &text, theme.axis);
        free_from = column + text.len() as u16 + 1;
    }
}

fn label(model: &Model, buffer: &mut Buffer, area: Rect, row: &Row, here: bool) {
    let theme = &model.setup.theme;
    let style = match row.kind {
        RowKind::Unplaced => theme.warning,
        _ if here => theme.label_here,
        _ => theme.label,
    };
    let mark = if here { ">" } else { " " };
    let name = fit(
        model.row_name(&row.kind),
        usize::from(area.width).saturating_sub(2),
    );
    put(buffer, area, 0, 0, &format!("{mark}{name}"), style);
}

/// Time at which the resource is out: `/` closed, `.` not open.
fn background(model: &Model, buffer: &mut Buffer, line: Rect, row: &Row) {
    let RowKind::Resource(resource) = row.kind else {
        return;
    };
    let hours = &model.timetable().resources().all[resource].hours;
    if hours.unlimited() {
        return;
    }
    for column in 0..line.width {
        let span = model.view.span_of(column);
        let mark = if hours.closure_in(span).is_some() {
            "/"
        } else if !hours.open_through(span) {
            "."
        } else {
            continue;
        };
        put(buffer, line, column, 0, mark, model.setup.theme.closed);
    }
}

/// A dotted line at the present moment, when that is in sight.
fn now_line(model: &Model, buffer: &mut Buffer, line: Rect) {
    let column = model.view.column(model.now);
    if (0..i64::from(line.width)).contains(&column) {
        put(buffer, line, column as u16, 0, "'", model.setup.theme.floor);
    }
}

/// Which pieces wear which mark.
struct Marks<'a> {
    unsafe_yet: FastSet<&'a str>,
    settled: Option<&'a Settled>,
}

impl<'a> Marks<'a> {
    fn of(model: &'a Model) -> Marks<'a> {
        Marks {
            unsafe_yet: model.desk.not_yet_safe(),
            settled: model.shown().0.map(|settled| &**settled),
        }
    }

    fn counted(&self, piece: &Piece) -> bool {
        self.settled
            .is_some_and(|settled| settled.counts(&piece.id))
    }

    fn clashing(&self, piece: &Piece) -> bool {
        self.settled
            .is_some_and(|settled| settled.survey().clashing.contains(&piece.id))
    }
}

/// The marks of a piece: `?` not yet safe on the disk, `!` pinned, `=` fastened, `*` moved since opened, `&` clash.
fn marks(model: &Model, piece: &Piece, marks: &Marks<'_>) -> String {
    let opened = model.desk.opened().piece(&piece.id);
    let moved = opened.is_some_and(|before| before.span.start != piece.span.start);
    [
        ("!", piece.pin.is_some()),
        ("=", piece.fastened),
        ("*", moved),
        (
            "?",
            marks.unsafe_yet.contains(&*piece.request.id) || marks.unsafe_yet.contains(&*piece.id),
        ),
        ("&", marks.clashing(piece)),
    ]
    .into_iter()
    .filter_map(|(mark, set)| set.then_some(mark))
    .collect()
}

fn bar(model: &Model, buffer: &mut Buffer, line: Rect, row: &Row, at: usize, known: &Marks<'_>) {
    let theme = &model.setup.theme;
    let piece = &model.rows.pieces[at];
    if let RowKind::Resource(resource) = row.kind {
        let kept = occupied(piece, &model.timetable().resources().all[resource]);
        let before = Span {
            start: kept.start,
            end: piece.span.start,
        };
        let after = Span {
            start: piece.span.end,
            end: kept.end,
        };
        for free in [before, after]
            .into_iter()
            .filter(|free| free.seconds() > 0)
        {
            fill(model, buffer, line, free, ":", theme.buffer);
        }
    }
    let (from, to) = model.view.columns(piece.span);
    let (left, right) = (from.max(0), to.min(i64::from(line.width)));
    if left >= right {
        return;
    }
    let carried = matches!(&model.mode, Mode::Carry(carry) if carry.id == piece.id);
    let counted = known.counted(piece);
    let (open, close, style) = if carried {
        ("(", ")", theme.bar_carried)
    } else if model.here == Some(at) {
        ("<", ">", theme.bar_here)
    } else if row.kind == RowKind::Withdrawn {
        ("[", "]", theme.bar_withdrawn)
    } else if known.clashing(piece) {
        (
            if counted { "{" } else { "[" },
            if counted { "}" } else { "]" },
            theme.bar_clash,
        )
    } else if counted {
        ("{", "}", theme.bar_clique)
    } else {
        ("[", "]", theme.bar)
    };
    let cells = (right - left) as usize;
    let text = if cells == 1 {
        "|".to_string()
    } else {
        let (open, close) = (
            if from < 0 { "~" } else { open },
            if to > i64::from(line.width) {
                "~"
            } else {
                close
            },
        );
        // The axis has the date.
        let name = match piece.dated {
            Some(_) => &piece.request.id,
            None => &piece.id,
        };
        let mut inside = format!("{}{}", marks(model, piece, known), clean(name));
        // Where there is room to spare the title says more than blanks do.
        if cells > inside.len() + 10 && !piece.request.title.is_empty() {
            let title: String = piece.request.title.chars().take(cells).collect();
            inside.push_str(&format!("  {title}"));
        }
        format!("{open}{}{close}", fit(&inside, cells - 2))
    };
    put(buffer, line, left as u16, 0, &text, style);
}

fn fill(model: &Model, buffer: &mut Buffer, line: Rect, span: Span, mark: &str, style: Style) {
    let (from, to) = model.view.columns(span);
    for column in from.max(0)..to.min(i64::from(line.width)) {
        put(buffer, line, column as u16, 0, mark, style);
    }
}
