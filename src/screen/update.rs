//! What each message does to the state. No input or output here: what has to happen outside
//! is returned as effects.

use super::carry;
use super::layout::RowKind;
use super::model::{Find, Mode, Model};
use crate::actions::Action;
use crate::claim::Why;
use crate::clock::Instant;
use crate::desk::{Disk, Event, Job, Settled};
use crate::edit::{Change, Edit};
use crate::store::Written;
use crate::text::clean;
use crate::timetable::Prefer;
use crate::words::Progress;
use crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
use fuzzy_matcher::FuzzyMatcher;
use fuzzy_matcher::skim::SkimMatcherV2;
use std::path::PathBuf;
use std::sync::Arc;
use tui_input::{Input, InputRequest};

/// What comes in.
#[derive(Clone, Debug)]
pub enum Msg {
    /// A key was pressed.
    Key(KeyEvent),
    /// Text was pasted.
    Paste(String),
    /// The terminal has a new size.
    Resize(u16, u16),
    /// The solver says something.
    Solver(Event),
    /// Why not fewer, for the state of that generation.
    Why(u64, Arc<Why>),
    /// The journal's thread says something.
    Written(Written),
    /// The file on the disk is not what it was.
    Stirred,
    /// A while has passed.
    Tick,
    /// Something outside has been done; the desk may have another state.
    Done(Result<String, String>),
    /// A save has ended; on success, perhaps the program may leave.
    Saved {
        /// What went wrong, if something did.
        result: Result<String, String>,
        /// Whether to leave then.
        leave: bool,
    },
}

/// What has to happen outside.
#[derive(Clone, Debug)]
pub enum Effect {
    /// Solve this.
    Submit(Box<Job>),
    /// Save, perhaps under another name, and perhaps leave then.
    Save {
        /// The other name.
        other: Option<PathBuf>,
        /// Whether to leave then.
        leave: bool,
    },
    /// Find out why not fewer.
    Why(Arc<Settled>),
    /// The plan that a save waited for is here.
    WritePlan,
    /// Take in the edits of an earlier session, or leave them in a file of their own.
    Leftover {
        /// Whether to take them in.
        take_in: bool,
    },
    /// Someone else changed the file: what becomes of theirs and ours.
    Resolve(Resolve),
    /// Leave.
    Quit,
    /// Back to the shell until it brings us to the front again.
    Suspend,
    /// Draw everything anew.
    Redraw,
}

/// What becomes of two versions.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Resolve {
    /// Ours replaces theirs, which is kept beside it.
    Mine,
    /// Theirs is taken over, ours is kept as a script.
    Theirs,
    /// Ours is made once more on theirs.
    Both,
}

/// One message, one new state.
pub fn update(model: &mut Model, msg: Msg) -> Vec<Effect> {
    match msg {
        Msg::Key(key) => keyed(model, key),
        Msg::Paste(text) => {
            pasted(model, &text);
            Vec::new()
        }
        Msg::Resize(columns, rows) => {
            model.resized(columns, rows);
            Vec::new()
        }
        Msg::Solver(event) => heard(model, event),
        Msg::Why(generation, why) => {
            // One that was asked of an earlier state may come late.
            let current = model.desk.settled().map(|settled| settled.generation());
            if current != Some(generation) {
                return Vec::new();
            }
            model.why = Some((generation, why));
            if let Mode::Why(0) = model.mode {
                model.mode = Mode::Why(super::panels::why::first(model));
            }
            Vec::new()
        }
        Msg::Written(written) => {
            let before = model.desk.unsafe_because().is_some();
            model.desk.written(&written);
            if let (false, Some(why)) = (before, model.desk.unsafe_because()) {
                let said = format!(
                    "edits are not safe ({why}): they go on in memory only; :save OTHER.toml keeps them elsewhere"
                );
                model.say(said, true);
            }
            Vec::new()
        }
        Msg::Stirred => {
            match (model.desk.access(), model.desk.disk()) {
                (_, Disk::Same) => {}
                (_, Disk::Changed) => model.say(
                    "someone else has changed the file; saving will ask what to do",
                    true,
                ),
                (_, Disk::Gone) => model.say("the file has gone; saving writes it anew", true),
            }
            Vec::new()
        }
        Msg::Tick => Vec::new(),
        Msg::Done(result) => {
            match result {
                Ok(said) => model.say(said, false),
                Err(said) => model.say(said, true),
            }
            model.mode = Mode::Board;
            model.progress = Progress::Searching;
            model.refresh();
            vec![Effect::Submit(Box::new(model.desk.job()))]
        }
        Msg::Saved {
            result: Ok(_),
            leave: true,
        } => vec![Effect::Quit],
        Msg::Saved { result, .. } => {
            match result {
                Ok(said) => model.say(said, false),
                Err(said) => model.say(said, true),
            }
            model.mode = Mode::Board;
            Vec::new()
        }
    }
}

fn heard(model: &mut Model, event: Event) -> Vec<Effect> {
    match event {
        Event::Settled(settled) => {
            if settled.generation() == model.preview_generation
                && matches!(model.mode, Mode::Carry(_))
            {
                model.preview = Some(settled);
                model.refresh();
            } else if model.desk.receive(settled) {
                model.refresh();
                tell_of_the_other_choice(model);
                if model.desk.plan_is_due() {
                    return vec![Effect::WritePlan];
                }
            }
        }
        Event::Rested(generation) => {
            let (shown, current) = model.shown();
            if current && shown.is_some_and(|shown| shown.generation() == generation) {
                model.progress = Progress::AtRest;
            }
        }
        Event::Fault(said) => model.say(format!("a fault of the program: {said}"), true),
    }
    Vec::new()
}

/// Where fewest resources and fewest changes pull apart, says what the other would cost.
fn tell_of_the_other_choice(model: &mut Model) {
    let noun = &model.timetable().settings.noun;
    let said = model
        .desk
        .settled()
        .and_then(|settled| crate::words::other_choice(settled.answer(), settled.receipt(), noun));
    if let Some(said) = said
        && model.message.is_none()
        && matches!(model.mode, Mode::Board)
    {
        let key = model
            .setup
            .keys
            .of(Action::Prefer)
            .first()
            .copied()
            .unwrap_or("k");
        model.say(format!("{said} ({key} prefers that)"), false);
    }
}

/// The name of a key, as the table of actions has it.
fn name(key: KeyEvent) -> Option<String> {
    let plain = match key.code {
        KeyCode::Char(' ') => "space".into(),
        KeyCode::Char(c) => c.to_string(),
        KeyCode::Left => "left".into(),
        KeyCode::Right => "right".into(),
        KeyCode::Up => "up".into(),
        KeyCode::Down => "down".into(),
        KeyCode::Home => "home".into(),
        KeyCode::End => "end".into(),
        KeyCode::PageUp => "pageup".into(),
        KeyCode::PageDown => "pagedown".into(),
        KeyCode::Enter => "enter".into(),
        KeyCode::Esc => "esc".into(),
        KeyCode::Tab => "tab".into(),
        KeyCode::Backspace => "backspace".into(),
        _ => return None,
    };
    Some(if key.modifiers.contains(KeyModifiers::CONTROL) {
        format!("ctrl-{plain}")
    } else {
        plain
    })
}

fn keyed(model: &mut Model, key: KeyEvent) -> Vec<Effect> {
    model.message = None;
    let action = name(key).and_then(|name| model.setup.keys.meaning(&name));
    match (&mut model.mode, action) {
        (Mode::Command(_) | Mode::Find(_), Some(Action::Suspend)) | (_, Some(Action::Suspend)) => {
            vec![Effect::Suspend]
        }
        (_, Some(Action::Redraw)) => vec![Effect::Redraw],
        (Mode::Form(_), _) => super::form::keyed(model, key),
        (Mode::Command(_), _) => commanding(model, key),
        (Mode::Find(_), _) => finding(model, key),
        (Mode::Leave, _) => leaving(model, key),
        (Mode::Leftover, _) => match key.code {
            KeyCode::Enter => vec![Effect::Leftover { take_in: true }],
            KeyCode::Char('k') => vec![Effect::Leftover { take_in: false }],
            _ => Vec::new(),
        },
        (Mode::Changed, _) => {
            model.mode = Mode::Board;
            match key.code {
                KeyCode::Char('m') => vec![Effect::Resolve(Resolve::Mine)],
                KeyCode::Char('t') => vec![Effect::Resolve(Resolve::Theirs)],
                KeyCode::Char('b') => vec![Effect::Resolve(Resolve::Both)],
                _ => {
                    model.say("nothing was saved", false);
                    Vec::new()
                }
            }
        }
        (Mode::Who(..), action) => super::ask::choosing(model, key, action),
        (Mode::Findings(_) | Mode::Days(_) | Mode::Why(_), action) => {
            super::panels::listed(model, key, action);
            Vec::new()
        }
        (Mode::Help(_), action) => {
            helped(model, action);
            Vec::new()
        }
        (_, None) => Vec::new(),
        (Mode::Carry(_), Some(action)) => carry::carrying(model, action),
        (Mode::Board, Some(action)) => acting(model, action),
    }
}

fn pasted(model: &mut Model, text: &str) {
    let line: String = clean(text.lines().next().unwrap_or(""))
        .chars()
        .take(1_000)
        .collect();
    let insert = |input: &mut Input| {
        for c in line.chars() {
            input.handle(InputRequest::InsertChar(c));
        }
    };
    let more = text.trim_end().lines().count() > 1;
    match &mut model.mode {
        Mode::Command(input) => {
            insert(input);
            if more {
                model.say(
                    "only the first pasted line was taken; fewest apply takes many",
                    true,
                );
            }
        }
        Mode::Find(find) => {
            insert(&mut find.input);
            look_up(model);
        }
        Mode::Form(form) => {
            let chosen = form.chosen;
            insert(&mut form.fields[chosen].input);
        }
        _ => model.say(
            "pasted text goes into the command line only; : opens it",
            false,
        ),
    }
}

pub(super) fn typed(input: &mut Input, key: KeyEvent) {
    let control = key.modifiers.contains(KeyModifiers::CONTROL);
    let request = match key.code {
        KeyCode::Char('w') if control => InputRequest::DeletePrevWord,
        KeyCode::Char('u') if control => InputRequest::DeleteLine,
        KeyCode::Char('a') if control => InputRequest::GoToStart,
        KeyCode::Char('e') if control => InputRequest::GoToEnd,
        KeyCode::Char(c) if !control => InputRequest::InsertChar(c),
        KeyCode::Backspace => InputRequest::DeletePrevChar,
        KeyCode::Delete => InputRequest::DeleteNextChar,
        KeyCode::Left => InputRequest::GoToPrevChar,
        KeyCode::Right => InputRequest::GoToNextChar,
        KeyCode::Home => InputRequest::GoToStart,
        KeyCode::End => InputRequest::GoToEnd,
        _ => return,
    };
    input.handle(request);
}

/// Whether a key leaves what is open: Esc and Ctrl-C do, whatever else is bound.
fn leaves(key: KeyEvent) -> bool {
    key.code == KeyCode::Esc
        || (key.code == KeyCode::Char('c') && key.modifiers.contains(KeyModifiers::CONTROL))
}

fn helped(model: &mut Model, action: Option<Action>) {
    let page = usize::from(model.size.1).saturating_sub(4).max(1);
    let Mode::Help(top) = &mut model.mode else {
        return;
    };
    match action {
        Some(Action::Up) => *top = top.saturating_sub(1),
        Some(Action::Down) => *top += 1,
        Some(Action::PageUp) => *top = top.saturating_sub(page),
        Some(Action::PageDown) => *top += page,
        Some(Action::First) => *top = 0,
        _ => model.mode = Mode::Board,
    }
    if let Mode::Help(top) = &mut model.mode {
        *top = (*top).min(super::panels::help::LINES.saturating_sub(page));
    }
}

fn leaving(model: &mut Model, key: KeyEvent) -> Vec<Effect> {
    model.mode = Mode::Board;
    match key.code {
        KeyCode::Char('y') => vec![Effect::Quit],
        KeyCode::Char('s') => save(model, true),
        _ => {
            model.say("still here", false);
            Vec::new()
        }
    }
}

/// Saves, unless someone else has changed the file: then it asks.
fn save(model: &mut Model, leave: bool) -> Vec<Effect> {
    if model.desk.disk() != Disk::Changed {
        return vec![Effect::Save { other: None, leave }];
    }
    model.mode = Mode::Changed;
    Vec::new()
}

fn leave(model: &mut Model) -> Vec<Effect> {
    if model.desk.unsaved() == 0 {
        return vec![Effect::Quit];
    }
    model.mode = Mode::Leave;
    Vec::new()
}

fn commanding(model: &mut Model, key: KeyEvent) -> Vec<Effect> {
    let Mode::Command(input) = &mut model.mode else {
        return Vec::new();
    };
    if leaves(key) {
        model.mode = Mode::Board;
        return Vec::new();
    }
    if key.code != KeyCode::Enter {
        typed(input, key);
        return Vec::new();
    }
    let line = input.value().trim().to_string();
    let stays = std::mem::replace(&mut model.mode, Mode::Board);
    match line.split_once(' ').unwrap_or((&line, "")) {
        ("", _) => Vec::new(),
        ("leave", "") => leave(model),
        ("help", "") => {
            model.mode = Mode::Help(0);
            Vec::new()
        }
        ("save", "") => save(model, false),
        ("save", other) => vec![Effect::Save {
            other: Some(PathBuf::from(other.trim())),
            leave: false,
        }],
        _ => {
            let edit = match model.desk.parse(&line, model.now) {
                Ok(edit) => edit,
                Err(misread) => {
                    // What was typed stays, to be put right.
                    model.mode = stays;
                    model.say(misread.to_string(), true);
                    return Vec::new();
                }
            };
            let doubled = match &edit.what {
                Change::Move { to, .. } => crate::words::doubled(*to, model.desk.zone()),
                _ => None,
            };
            let effects = make(model, vec![edit]);
            if let (None, Some(doubled)) = (&model.message, doubled) {
                model.say(doubled, false);
            }
            if model
                .message
                .as_ref()
                .is_some_and(|message| message.warning)
            {
                model.mode = stays;
            }
            effects
        }
    }
}

fn finding(model: &mut Model, key: KeyEvent) -> Vec<Effect> {
    let Mode::Find(find) = &mut model.mode else {
        return Vec::new();
    };
    if leaves(key) {
        model.mode = Mode::Board;
        return Vec::new();
    }
    match key.code {
        KeyCode::Up => find.chosen = find.chosen.saturating_sub(1),
        KeyCode::Down => find.chosen = (find.chosen + 1).min(find.matches.len().saturating_sub(1)),
        KeyCode::Enter => {
            let chosen = find.matches.get(find.chosen).copied();
            model.mode = Mode::Board;
            match chosen {
                Some(piece) => {
                    let start = model.rows.pieces[piece].span.start;
                    if !model.view.span(model.areas().time.width).contains(start) {
                        model.show_day(start);
                    }
                    model.take(piece);
                }
                None => model.say("nothing found", false),
            }
        }
        _ => {
            typed(&mut find.input, key);
            look_up(model);
        }
    }
    Vec::new()
}

/// Most matches kept.
const MOST_FOUND: usize = 200;

/// Finds the pieces that match what is typed, best first.
fn look_up(model: &mut Model) {
    let Mode::Find(find) = &mut model.mode else {
        return;
    };
    let wanted = find.input.value();
    let matcher = SkimMatcherV2::default();
    let mut scored: Vec<(i64, usize)> = Vec::new();
    for (at, piece) in model.rows.pieces.iter().enumerate() {
        let request = &piece.request;
        // A huge title is not matched to its end.
        let title: String = request.title.chars().take(200).collect();
        let best = |word: &str| {
            [piece.id.as_ref(), title.as_str()]
                .into_iter()
                .chain(request.people.iter().map(AsRef::as_ref))
                .filter_map(|text| matcher.fuzzy_match(text, word))
                .max()
        };
        // Every word counts on its own: one may be of the id, another of the title.
        let scores: Option<Vec<i64>> = wanted.split_whitespace().map(best).collect();
        scored.extend(scores.map(|scores| (scores.iter().sum(), at)));
    }
    scored.sort_by_key(|(score, at)| (std::cmp::Reverse(*score), *at));
    find.matches = scored
        .into_iter()
        .take(MOST_FOUND)
        .map(|(_, at)| at)
        .collect();
    find.chosen = 0;
}

/// Makes edits as one step and has the result solved.
pub(super) fn make(model: &mut Model, edits: Vec<Edit>) -> Vec<Effect> {
    match model.desk.make(edits) {
        Ok(()) => {
            model.progress = Progress::Searching;
            model.refresh();
            vec![Effect::Submit(Box::new(model.desk.job()))]
        }
        Err(refused) => {
            model.say(refused.to_string(), true);
            Vec::new()
        }
    }
}

fn acting(model: &mut Model, action: Action) -> Vec<Effect> {
    match action {
        Action::Left | Action::Right => sideways(model, action == Action::Right),
        Action::Up => to_row(model, model.row.saturating_sub(1)),
        Action::Down => to_row(model, model.row + 1),
        Action::PageUp => to_row(model, model.row.saturating_sub(page(model))),
        Action::PageDown => to_row(model, model.row + page(model)),
        Action::First | Action::Last => {
            let row = model.rows.rows.get(model.row);
            let end = row.and_then(|row| {
                if action == Action::First {
                    row.pieces.first()
                } else {
                    row.pieces.last()
                }
            });
            if let Some(piece) = end.copied() {
                model.take(piece);
            }
        }
        Action::DayBefore => another_day(model, false),
        Action::DayAfter => another_day(model, true),
        Action::NextPeak => peak(model, true),
        Action::PeakBefore => peak(model, false),
        Action::Closer | Action::Wider => zoom(model, action == Action::Closer),
        Action::Find => {
            model.mode = Mode::Find(Find::default());
            look_up(model);
        }
        Action::Command => model.mode = Mode::Command(Input::default()),
        Action::Help => model.mode = Mode::Help(0),
        Action::Leave => return leave(model),
        Action::Save => return save(model, false),
        Action::Add | Action::Set => super::form::open(model, action == Action::Add),
        Action::Drop => return drop_request(model),
        Action::Findings => model.mode = Mode::Findings(0),
        Action::Days => super::panels::days::open(model),
        Action::Why => return super::ask::why(model),
        Action::Who => super::ask::who(model),
        Action::Prefer => {
            let prefer = match model.desk.timetable().settings.prefer {
                Prefer::Count => Prefer::Changes,
                Prefer::Changes => Prefer::Count,
            };
            let effects = make(model, vec![Change::Prefer(prefer).into()]);
            if !effects.is_empty() {
                let said = match prefer {
                    Prefer::Count => "fewest resources come first now",
                    Prefer::Changes => "fewest changes come first now",
                };
                model.say(said, false);
            }
            return effects;
        }
        Action::Undo => return make(model, vec![Change::Undo.into()]),
        Action::Redo => return make(model, vec![Change::Redo.into()]),
        Action::Carry => carry::lift(model),
        Action::Pin | Action::Fasten | Action::Withdraw => return toggle(model, action),
        Action::Close | Action::Reopen => prefill(model, action),
        Action::PutBack | Action::Suspend | Action::Redraw => {}
    }
    model.keep_in_sight();
    Vec::new()
}

pub(super) fn zoom(model: &mut Model, closer: bool) {
    model.view = model.view.zoomed(closer, model.at);
    model.fitted = false;
}

fn page(model: &Model) -> usize {
    usize::from(model.areas().board.height).max(1)
}

pub(super) fn to_row(model: &mut Model, row: usize) {
    model.row = row.min(model.rows.rows.len().saturating_sub(1));
    let Some(here) = model.rows.rows.get(model.row) else {
        return;
    };
    let visible = model.view.span(model.areas().time.width);
    let spans = here
        .pieces
        .iter()
        .map(|at| (*at, model.rows.pieces[*at].span));
    // The piece under the moment in hand, else the nearest one in sight.
    let near = spans
        .filter(|(_, span)| span.overlaps(visible))
        .min_by_key(|(_, span)| {
            if span.contains(model.at) {
                0
            } else {
                1 + (span.start - model.at).abs()
            }
        });
    model.here = near.map(|(at, _)| at);
}

fn sideways(model: &mut Model, right: bool) {
    let Some(row) = model.rows.rows.get(model.row) else {
        return;
    };
    let place = model
        .here
        .and_then(|here| row.pieces.iter().position(|piece| *piece == here));
    let start = |piece: &&usize| model.rows.pieces[**piece].span.start;
    let next = match (place, right) {
        (Some(place), true) => row.pieces.get(place + 1),
        (Some(place), false) => place
            .checked_sub(1)
            .and_then(|before| row.pieces.get(before)),
        (None, true) => row.pieces.iter().find(|piece| start(piece) > model.at),
        (None, false) => row
            .pieces
            .iter()
            .rev()
            .find(|piece| start(piece) < model.at),
    };
    match next.copied() {
        Some(piece) => model.take(piece),
        None => model.say(
            if right {
                "no piece after it in this row"
            } else {
                "no piece before it in this row"
            },
            false,
        ),
    }
}

fn another_day(model: &mut Model, after: bool) {
    let zone = model.timetable().settings.zone;
    let today = zone.date(model.at);
    let starts = model.rows.pieces.iter().map(|piece| piece.span.start);
    let next = if after {
        starts
            .filter(|start| zone.date(*start) > today)
            .min_by_key(|start| (zone.date(*start), *start))
    } else {
        starts
            .filter(|start| zone.date(*start) < today)
            .min_by_key(|start| (std::cmp::Reverse(zone.date(*start)), *start))
    };
    let Some(at) = next else {
        model.say(
            if after {
                "nothing after this day"
            } else {
                "nothing before this day"
            },
            false,
        );
        return;
    };
    model.at = at;
    model.show_day(at);
    model.take_at(at);
}

fn peak(model: &mut Model, next: bool) {
    let (settled, _) = model.shown();
    let peaks = settled
        .map(|settled| settled.survey().load.peaks())
        .unwrap_or_default();
    let starts: Vec<Instant> = peaks.iter().map(|peak| peak.span.start).collect();
    // The peak one is in counts as the present one, wherever in it the piece began.
    let within = peaks.iter().position(|peak| {
        let here = model.here.map(|here| model.rows.pieces[here].span);
        here.is_some_and(|here| here.overlaps(peak.span))
            && model
                .view
                .span(model.areas().time.width)
                .overlaps(peak.span)
    });
    let found = match (within, next) {
        (Some(at), true) => Some((at + 1) % starts.len()),
        (Some(at), false) => Some((at + starts.len() - 1) % starts.len()),
        (None, true) => starts
            .iter()
            .position(|start| *start > model.at)
            .or(Some(0)),
        (None, false) => starts
            .iter()
            .rposition(|start| *start < model.at)
            .or(starts.len().checked_sub(1)),
    };
    let Some((at, start)) = found.and_then(|at| Some((at, *starts.get(at)?))) else {
        model.say("nothing overlaps, so there is no peak", false);
        return;
    };
    model.show_day(start);
    model.take_at(start);
    model.say(format!("peak {} of {}", at + 1, starts.len()), false);
}

/// The piece in hand, or a word that there is none.
pub(super) fn in_hand(model: &mut Model) -> Option<usize> {
    if model.here.is_none() {
        model.say("no piece here; arrows go to one, / finds one", false);
    }
    model.here
}

fn toggle(model: &mut Model, action: Action) -> Vec<Effect> {
    let Some(here) = in_hand(model) else {
        return Vec::new();
    };
    let piece = &model.rows.pieces[here];
    let id = Arc::clone(&piece.id);
    let change = match action {
        Action::Pin if piece.pin.is_some() => Change::Unpin(id),
        Action::Pin => match model.rows.on[here] {
            Some(resource) => Change::Pin {
                piece: id,
                on: Arc::clone(&model.timetable().resources().all[resource].id),
            },
            None => {
                model.say(
                    format!("{id} has no place it could be pinned on; carry it to one"),
                    true,
                );
                return Vec::new();
            }
        },
        Action::Fasten if piece.fastened => Change::Loosen(id),
        Action::Fasten => Change::Fasten(id),
        _ if piece.withdrawn => Change::Restore(id),
        _ => Change::Withdraw(id),
    };
    make(model, vec![change.into()])
}

/// Takes the request in hand out of the file.
fn drop_request(model: &mut Model) -> Vec<Effect> {
    let Some(here) = in_hand(model) else {
        return Vec::new();
    };
    let id = Arc::clone(&model.rows.pieces[here].request.id);
    make(model, vec![Change::Drop(id).into()])
}

/// Opens the command line with a closure of the row's resource, ready to be put right.
fn prefill(model: &mut Model, action: Action) {
    let Some(RowKind::Resource(resource)) =
        model.rows.rows.get(model.row).map(|row| row.kind.clone())
    else {
        model.say("this row is no resource", true);
        return;
    };
    let timetable = model.timetable();
    let zone = timetable.settings.zone;
    let resource = &timetable.resources().all[resource];
    let (verb, span) = if action == Action::Close {
        let day = zone.date(model.at);
        let end = model
            .rows
            .pieces
            .iter()
            .filter(|piece| zone.date(piece.span.start) == day)
            .map(|piece| piece.span.end);
        (
            "close",
            (
                model.at,
                end.max().unwrap_or(model.at + 3600).max(model.at + 3600),
            ),
        )
    } else {
        match resource
            .hours
            .closed()
            .iter()
            .find(|closure| closure.span.end > model.at)
            .or(resource.hours.closed().last())
        {
            Some(closure) => ("reopen", (closure.span.start, closure.span.end)),
            None => {
                let id = Arc::clone(&resource.id);
                model.say(format!("{id} is nowhere closed"), false);
                return;
            }
        }
    };
    let line = format!(
        "{verb} {} from {} to {}",
        resource.id,
        zone.print(span.0),
        zone.print(span.1)
    );
    model.mode = Mode::Command(Input::new(line));
}
