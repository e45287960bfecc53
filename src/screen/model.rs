//! The one state of the screen.

use super::layout::{RowKind, Rows};
use super::theme::Theme;
use super::view::View;
use crate::actions::Keys;
use crate::claim::{Reason, Why};
use crate::clock::{Instant, Span};
use crate::desk::{Desk, Settled};
use crate::edit::{Change, Edit};
use crate::text::width;
use crate::timetable::Timetable;
use crate::words::Progress;
use ratatui::layout::Rect;
use std::sync::Arc;
use tui_input::Input;

/// What the user chose about look and keys.
#[derive(Clone, Debug)]
pub struct Setup {
    /// Styles.
    pub theme: Theme,
    /// Keys.
    pub keys: Keys,
    /// Characters of plain ASCII only.
    pub ascii: bool,
}

/// A line for the user, until the next key.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Message {
    /// What it says.
    pub text: String,
    /// Whether something went wrong.
    pub warning: bool,
}

/// A piece in the hand.
#[derive(Clone, Debug)]
pub struct Carry {
    /// Which.
    pub id: Arc<str>,
    /// Where it started.
    pub home_start: Instant,
    /// The resource it was on.
    pub home: Option<usize>,
    /// Where it would start now.
    pub start: Instant,
    /// The resource it is held over.
    pub over: Option<usize>,
    /// The timetable as it would be.
    pub timetable: Timetable,
}

impl Carry {
    /// The edits that dropping it here means.
    pub fn edits(&self) -> Vec<Edit> {
        let mut edits = Vec::new();
        if self.over != self.home
            && let Some(over) = self.over
        {
            let on = Arc::clone(&self.timetable.resources().all[over].id);
            edits.push(
                Change::Pin {
                    piece: Arc::clone(&self.id),
                    on,
                }
                .into(),
            );
        }
        if self.start != self.home_start {
            edits.push(
                Change::Move {
                    piece: Arc::clone(&self.id),
                    to: self.start,
                }
                .into(),
            );
        }
        edits
    }
}

/// A search in progress.
#[derive(Clone, Debug, Default)]
pub struct Find {
    /// What is typed.
    pub input: Input,
    /// Pieces that match, best first.
    pub matches: Vec<usize>,
    /// The chosen one of them.
    pub chosen: usize,
}

/// What the keys act on.
#[derive(Clone, Debug)]
pub enum Mode {
    /// The board.
    Board,
    /// A piece is carried.
    Carry(Box<Carry>),
    /// The command line.
    Command(Input),
    /// Finding a piece.
    Find(Find),
    /// The help, scrolled by so many lines.
    Help(usize),
    /// The question before leaving.
    Leave,
    /// The question about edits that an earlier session did not save.
    Leftover,
    /// The question about a file that someone else has changed.
    Changed,
    /// What is doubtful or cannot be, scrolled by so many lines.
    Findings(usize),
    /// Why not fewer, with the chosen line.
    Why(usize),
    /// Who can take a piece, with the chosen resource.
    Who(Arc<str>, usize),
    /// The days, with the chosen one.
    Days(usize),
    /// A form of fields for one request or resource.
    Form(Box<super::form::Form>),
}

/// The state.
#[derive(Debug)]
pub struct Model {
    /// The open document.
    pub desk: Desk,
    /// Look and keys.
    pub setup: Setup,
    /// Columns and rows of the terminal.
    pub size: (u16, u16),
    /// The board.
    pub rows: Rows,
    /// The visible time.
    pub view: View,
    /// The first visible row.
    pub top: usize,
    /// The row in hand.
    pub row: usize,
    /// The moment in hand.
    pub at: Instant,
    /// The piece in hand.
    pub here: Option<usize>,
    /// What the keys act on.
    pub mode: Mode,
    /// For the user.
    pub message: Option<Message>,
    /// Why not fewer, and of which state that was asked.
    pub why: Option<(u64, Arc<Why>)>,
    /// The answer for what is carried.
    pub preview: Option<Arc<Settled>>,
    /// Which preview that must be.
    pub preview_generation: u64,
    /// Whether the search goes on.
    pub progress: Progress,
    /// What `now` means.
    pub now: Instant,
    seen: bool,
    /// The days, as far as anyone asked.
    pub(super) days: std::cell::OnceCell<Vec<super::panels::days::Day>>,
    /// Whether the view shows a whole day and should go on doing so at another size.
    pub fitted: bool,
}

/// Generations of previews, apart from those of the desk.
const PREVIEWS: u64 = 1 << 63;

impl Model {
    /// The screen of an open timetable.
    pub fn new(desk: Desk, setup: Setup) -> Model {
        let view = View::showing(Span::lasting(Instant(0), 3600), 60, Arc::from([]));
        let mut model = Model {
            desk,
            setup,
            size: (80, 24),
            rows: Rows::default(),
            view,
            top: 0,
            row: 0,
            at: Instant(0),
            here: None,
            mode: Mode::Board,
            message: None,
            why: None,
            preview: None,
            preview_generation: PREVIEWS,
            progress: Progress::Searching,
            now: Instant(0),
            seen: false,
            days: std::cell::OnceCell::new(),
            fitted: true,
        };
        if !model.desk.warnings.is_empty() {
            let count = model.desk.warnings.len();
            model.say(
                format!("{count} doubtful times in the file; fewest count lists them"),
                true,
            );
        }
        if model.desk.leftover().is_some() {
            model.mode = Mode::Leftover;
        }
        model.refresh();
        model
    }

    /// Where everything is on the screen.
    pub fn areas(&self) -> Areas {
        self.areas_at(self.size)
    }

    /// Where everything is on a screen of that size: a frame may be of another size than the
    /// last message said.
    pub fn areas_at(&self, size: (u16, u16)) -> Areas {
        Areas::of(size, self.label_width())
    }

    /// The timetable that is shown: with what is carried where it is held.
    pub fn timetable(&self) -> &Timetable {
        match &self.mode {
            Mode::Carry(carry) => &carry.timetable,
            _ => self.desk.timetable(),
        }
    }

    /// The answer that is shown, and whether it belongs to what is shown.
    pub fn shown(&self) -> (Option<&Arc<Settled>>, bool) {
        match (&self.mode, &self.preview) {
            (Mode::Carry(carry), _) if carry.edits().is_empty() => {
                (self.desk.settled(), self.desk.is_current())
            }
            (Mode::Carry(_), Some(preview)) => (
                Some(preview),
                preview.generation() == self.preview_generation,
            ),
            (Mode::Carry(_), None) => (self.desk.settled(), false),
            _ => (self.desk.settled(), self.desk.is_current()),
        }
    }

    /// The next generation for a preview.
    pub fn next_preview(&mut self) -> u64 {
        self.preview_generation = (self.preview_generation + 1) | PREVIEWS;
        self.preview_generation
    }

    /// Says something until the next key.
    pub fn say(&mut self, text: impl Into<String>, warning: bool) {
        self.message = Some(Message {
            text: text.into(),
            warning,
        });
    }

    /// Lays the board out anew and keeps what is in hand in hand.
    pub fn refresh(&mut self) {
        let held = self
            .here
            .and_then(|here| self.rows.pieces.get(here))
            .map(|piece| Arc::clone(&piece.id));
        let (settled, current) = self.shown();
        let plan = settled.map(|settled| &settled.answer().plan);
        let over = match &self.mode {
            Mode::Carry(carry) => carry.over.map(|over| (&*carry.id, over)),
            _ => None,
        };
        self.rows = Rows::of(self.timetable(), plan, !current, over);
        self.days.take();
        let folds = super::layout::folds(self.timetable(), &self.rows.pieces);
        self.view = self.view.clone().with_folds(folds.into());
        self.row = self.row.min(self.rows.rows.len().saturating_sub(1));
        self.here = held.and_then(|id| self.rows.find(&id));
        if !self.seen && (current || self.desk.settled().is_none()) {
            self.seen = current;
            self.first_look();
        } else if let Some(here) = self.here {
            self.row = self.rows.row_of[here];
            self.at = self.rows.pieces[here].span.start;
        }
        self.keep_in_sight();
    }

    /// Shows the day of the first peak (or of the first piece) and takes a piece of it; what
    /// has no place comes before that.
    fn first_look(&mut self) {
        // What nobody can take is there to stay; the rest may find a place in a moment.
        let unplaced = self.desk.settled().and_then(|settled| {
            let unplaced = &settled.answer().plan.unplaced;
            let nowhere = unplaced
                .iter()
                .find(|unplaced| unplaced.because == Reason::NoResource);
            nowhere.or(unplaced.first())
        });
        if let Some(piece) = unplaced.and_then(|unplaced| self.rows.find(&unplaced.piece)) {
            self.show_day(self.rows.pieces[piece].span.start);
            self.take(piece);
            return;
        }
        let peak = self
            .desk
            .settled()
            .and_then(|settled| settled.survey().load.peaks().first().copied());
        let first = self.rows.pieces.iter().map(|piece| piece.span.start).min();
        let Some(at) = peak.map(|peak| peak.span.start).or(first) else {
            return;
        };
        self.show_day(at);
        self.take_at(at);
    }

    /// Shows the day that a moment is in.
    pub fn show_day(&mut self, at: Instant) {
        let zone = self.timetable().settings.zone;
        let date = zone.date(at);
        let that_day = self
            .rows
            .pieces
            .iter()
            .filter(|piece| zone.date(piece.span.start) == date);
        let (mut start, mut end) = (at, at + 1);
        for piece in that_day {
            start = start.min(piece.span.start);
            end = end.max(piece.span.end);
        }
        let start = Instant(start.0.div_euclid(3600) * 3600);
        let folds = super::layout::folds(self.timetable(), &self.rows.pieces);
        self.view = View::showing(Span { start, end }, self.areas().time.width, folds.into());
        self.fitted = true;
    }

    /// Another size: a day that was fitted to the old one is fitted to the new one.
    pub fn resized(&mut self, columns: u16, rows: u16) {
        self.size = (columns, rows);
        if self.fitted && !self.rows.pieces.is_empty() {
            self.show_day(self.at);
        }
        self.keep_in_sight();
    }

    /// Takes a piece that runs at a moment, from the topmost row that has one.
    pub fn take_at(&mut self, at: Instant) {
        self.at = at;
        let running = |row: &super::layout::Row| {
            row.pieces
                .iter()
                .copied()
                .find(|piece| self.rows.pieces[*piece].span.contains(at))
        };
        match self.rows.rows.iter().find_map(running) {
            Some(piece) => self.take(piece),
            None => self.keep_in_sight(),
        }
    }

    /// Takes a piece in hand.
    pub fn take(&mut self, piece: usize) {
        self.here = Some(piece);
        self.row = self.rows.row_of[piece];
        self.at = self.rows.pieces[piece].span.start;
        self.keep_in_sight();
    }

    /// Moves the visible part so that what is in hand is in it.
    pub fn keep_in_sight(&mut self) {
        let areas = self.areas();
        self.view = self.view.following(self.at, areas.time.width);
        let height = usize::from(areas.board.height).max(1);
        if self.row < self.top || self.row >= self.top + height {
            // A page rather than a line: fewer bytes over a slow line.
            self.top = self.row.saturating_sub(height / 3);
        }
        self.top = self.top.min(self.rows.rows.len().saturating_sub(height));
    }

    /// What a row is called.
    pub fn row_name(&self, row: &RowKind) -> &str {
        match row {
            RowKind::Resource(resource) => &self.timetable().resources().all[*resource].id,
            RowKind::Unplaced => "no place",
            RowKind::Withdrawn => "withdrawn",
        }
    }

    fn label_width(&self) -> u16 {
        let most = if self.size.0 >= 120 { 22 } else { 12 };
        let longest = self
            .timetable()
            .resources()
            .all
            .iter()
            .take(500)
            .map(|resource| width(&resource.id))
            .max();
        (longest.unwrap_or(0).clamp(9, most) + 2) as u16
    }
}

/// Where the parts of the screen are.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Areas {
    /// Title and state.
    pub header: Rect,
    /// Dates and hours.
    pub axis: Rect,
    /// All rows, labels included.
    pub board: Rect,
    /// The columns of time, over axis, board and load.
    pub time: Rect,
    /// The load.
    pub load: Rect,
    /// What is in hand.
    pub detail: Rect,
    /// Messages, hints, what is typed.
    pub footer: Rect,
}

/// From this width on there is a side.
const WIDE: u16 = 120;

/// Columns of the side.
const SIDE: u16 = 40;

/// Below this size there is only a line that says so.
pub(super) const LEAST: (u16, u16) = (40, 12);

impl Areas {
    fn of((columns, rows): (u16, u16), label: u16) -> Areas {
        if columns < LEAST.0 || rows < LEAST.1 {
            return Areas::default();
        }
        // From about 120 columns on what is in hand has a place of its own at the side.
        let side = if columns >= WIDE { SIDE } else { 0 };
        let whole = columns;
        let columns = columns - side;
        let load = if rows >= 36 { 6 } else { 3 };
        let detail = match rows {
            _ if side > 0 => 0,
            30.. => 6,
            _ => 4.min(rows / 5),
        };
        let board = rows - 2 - 1 - load - detail - 1;
        let mut y = 0;
        let mut next = |height: u16| {
            let area = Rect::new(0, y, columns, height);
            y += height;
            area
        };
        let (header, axis, board) = (next(2), next(1), next(board));
        let (load, mut detail, footer) = (next(load), next(detail), next(1));
        let header = Rect {
            width: whole,
            ..header
        };
        let footer = Rect {
            width: whole,
            ..footer
        };
        if side > 0 {
            detail = Rect::new(columns, axis.y, side, rows - 3);
        }
        let label = label.min(columns / 2);
        let time = Rect::new(
            label,
            axis.y,
            columns - label,
            axis.height + board.height + load.height,
        );
        Areas {
            header,
            axis,
            board,
            time,
            load,
            detail,
            footer,
        }
    }
}
