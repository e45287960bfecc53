//! The only module that touches the terminal.

use super::model::Model;
use super::update::{Effect, Msg, Resolve, update};
use crate::cli::Outcome;
use crate::clock::Instant;
use crate::desk::{Access, Disk, Event, Solver};
use crate::store::Scribe;
use crossterm::event::{DisableBracketedPaste, EnableBracketedPaste, KeyEventKind};
use crossterm::terminal::{
    BeginSynchronizedUpdate, EndSynchronizedUpdate, EnterAlternateScreen, LeaveAlternateScreen,
    disable_raw_mode, enable_raw_mode,
};
use crossterm::{cursor, execute, queue};
use ratatui::Terminal;
use ratatui::backend::CrosstermBackend;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM, SIGTSTP};
use std::io::{BufWriter, Stdout, Write, stdout};
use std::sync::mpsc::{Receiver, Sender, channel};
use std::time::{Duration, Instant as Watch};

/// What can wake the screen.
enum Wake {
    Msg(Msg),
    Signal(i32),
    /// The terminal is gone.
    Gone,
}

type Screen = Terminal<CrosstermBackend<BufWriter<Stdout>>>;

/// How long a first answer is waited for before a frame shows the edit without it.
const ANSWER_WITHIN: Duration = Duration::from_millis(8);

/// The same before the very first frame.
const FIRST_ANSWER_WITHIN: Duration = Duration::from_millis(80);

/// How long leaving waits for the answer that a saved plan needs.
const PLAN_WITHIN: Duration = Duration::from_secs(3);

/// Runs the screen until it is left.
pub(super) fn run(mut model: Model, break_after_first_frame: bool) -> Outcome {
    model.now = Instant(chrono::Utc::now().timestamp());
    // NO_COLOR makes the library reset what it should reverse; our own palettes take care of
    // colour, so its output is forced on.
    crossterm::style::force_color_output(true);
    let (wake, woken) = channel();
    let told = wake.clone();
    let mut solver = Solver::start(move |event: Event| {
        let _ = told.send(Wake::Msg(Msg::Solver(event)));
    });
    if let Err(error) = listen_for_signals(&wake) {
        return Outcome::fault(error);
    }
    restore_on_panic();
    let screen = match enter() {
        Ok(screen) => screen,
        Err(error) => return Outcome::bad(format!("the screen cannot be opened: {error}")),
    };
    watch_the_file(&model.desk.path, &wake);
    listen_for_input(wake.clone());
    if let Ok(size) = screen.size() {
        update(&mut model, Msg::Resize(size.width, size.height));
    }
    solver.submit(model.desk.job());
    let scribe = (model.desk.leftover().is_none()).then(|| start_scribe(&mut model, &wake));
    let mut loop_ = Loop {
        scribe,
        wake,
        given_up: false,
        model,
        solver,
        screen,
        woken,
        dirty: true,
        waiting: Some(Watch::now() + FIRST_ANSWER_WITHIN),
    };
    let code = loop_.turn(break_after_first_frame);
    loop_.close(code);
    if code == GONE {
        // Nothing may be written to a terminal that is no more, not even by a destructor.
        std::mem::forget(loop_.screen);
    } else {
        leave();
    }
    Outcome {
        code,
        ..Outcome::default()
    }
}

/// The exit code when the terminal is gone.
const GONE: u8 = 128 + SIGHUP as u8;

fn start_scribe(model: &mut Model, wake: &Sender<Wake>) -> Scribe {
    let told = wake.clone();
    Scribe::start(model.desk.journal_writer(), 0, move |written| {
        let _ = told.send(Wake::Msg(Msg::Written(written)));
    })
}

struct Loop {
    /// Writes the journal; absent while edits of an earlier session wait for a decision.
    scribe: Option<Scribe>,
    wake: Sender<Wake>,
    /// Whether unsaved edits were given up on purpose.
    given_up: bool,
    model: Model,
    solver: Solver,
    screen: Screen,
    woken: Receiver<Wake>,
    dirty: bool,
    /// Until when a frame may wait for the answer to what was just submitted.
    waiting: Option<Watch>,
}

impl Loop {
    /// Until left: drain what has come, then draw at most once. Returns the exit code.
    fn turn(&mut self, break_after_first_frame: bool) -> u8 {
        loop {
            if let Some(code) = self.drain() {
                return code;
            }
            if self.dirty {
                if self.draw().is_err() {
                    return GONE;
                }
                if break_after_first_frame {
                    panic!("broken on purpose");
                }
            }
        }
    }

    fn drain(&mut self) -> Option<u8> {
        let mut wake = match self.waiting {
            // Something must be drawn soon, with the answer if that comes in time.
            Some(until) => self
                .woken
                .recv_timeout(until.saturating_duration_since(Watch::now()))
                .ok(),
            None if self.dirty => None,
            None => self.woken.recv().ok(),
        };
        if wake.is_none() {
            self.waiting = None;
        }
        while let Some(next) = wake {
            if !matches!(next, Wake::Msg(Msg::Tick | Msg::Stirred)) {
                self.model.now = Instant(chrono::Utc::now().timestamp());
            }
            let effects = match next {
                Wake::Signal(signal) => return Some(128 + signal as u8),
                Wake::Gone => return Some(GONE),
                Wake::Msg(Msg::Stirred) => {
                    if let Some(said) = self.model.desk.look_at_lock() {
                        self.model.say(said, true);
                        if matches!(self.model.desk.access(), Access::Ours(_)) {
                            self.scribe = Some(start_scribe(&mut self.model, &self.wake));
                        }
                        self.dirty = true;
                    }
                    if !self.model.desk.look_at_disk() {
                        wake = self.woken.try_recv().ok();
                        continue;
                    }
                    self.dirty = true;
                    self.follow()
                }
                Wake::Msg(Msg::Tick) => {
                    // Only a now line that moves is worth a frame.
                    self.dirty |= self.now_moves();
                    Vec::new()
                }
                Wake::Msg(msg) => {
                    if matches!(msg, Msg::Solver(Event::Settled(_))) {
                        self.waiting = None;
                    }
                    self.dirty = true;
                    // A frame may have been drawn for the new size before we were told of it,
                    // while the terminal still had the old one.
                    if matches!(msg, Msg::Resize(..)) {
                        self.redraw();
                    }
                    update(&mut self.model, msg)
                }
            };
            self.write_journal();
            for effect in effects {
                if let Some(code) = self.perform(effect) {
                    return Some(code);
                }
            }
            wake = self.woken.try_recv().ok();
        }
        // Still waiting for an answer: go round once more before drawing.
        if self.waiting.is_some_and(|until| Watch::now() < until) {
            self.drain()
        } else {
            None
        }
    }

    fn perform(&mut self, effect: Effect) -> Option<u8> {
        match effect {
            Effect::Submit(job) => {
                self.solver.submit(*job);
                self.waiting = Some(Watch::now() + ANSWER_WITHIN);
            }
            Effect::Why(settled) => {
                let told = self.wake.clone();
                std::thread::spawn(move || {
                    let why = crate::desk::why(&settled, &crate::engine::Never);
                    let msg = Msg::Why(settled.generation(), std::sync::Arc::new(why));
                    let _ = told.send(Wake::Msg(msg));
                });
            }
            Effect::Save { other, leave } => {
                self.model.desk.look_at_disk();
                let own = other
                    .as_ref()
                    .is_none_or(|other| *other == self.model.desk.path);
                if own && self.model.desk.disk() == Disk::Changed {
                    self.model.mode = super::model::Mode::Changed;
                    return None;
                }
                let effects = self.save(other.as_deref(), leave);
                return effects.into_iter().find_map(|effect| self.perform(effect));
            }
            Effect::Leftover { take_in } => {
                let result = if take_in {
                    let (taken, rest) = self.model.desk.take_in_leftover();
                    let taken = crate::words::count_words(taken, "edit");
                    if rest.is_empty() {
                        Ok(format!("{taken} taken in; u undoes them one by one"))
                    } else {
                        Err(format!(
                            "{taken} taken in; the rest cannot be read and is kept beside the file"
                        ))
                    }
                } else {
                    let kept = self.model.desk.set_leftover_aside();
                    kept.map(|name| format!("they are kept in {name}"))
                        .map_err(|error| error.to_string())
                };
                if self.model.desk.leftover().is_none() {
                    self.scribe = Some(start_scribe(&mut self.model, &self.wake));
                    self.write_journal();
                }
                let effects = update(&mut self.model, Msg::Done(result));
                return effects.into_iter().find_map(|effect| self.perform(effect));
            }
            Effect::Resolve(how) => {
                let effects = match how {
                    Resolve::Mine => match self.model.desk.keep_mine() {
                        Ok(said) => {
                            let effects = self.save(None, false);
                            if self
                                .model
                                .message
                                .as_ref()
                                .is_none_or(|message| !message.warning)
                            {
                                self.model.say(said, false);
                            }
                            effects
                        }
                        Err(trouble) => {
                            self.model.say(trouble.to_string(), true);
                            Vec::new()
                        }
                    },
                    Resolve::Theirs | Resolve::Both => {
                        let result = self.model.desk.take_theirs(how == Resolve::Both);
                        // The journal begins anew, from their version; when theirs could not be
                        // taken, ours goes on and so does its journal.
                        if result.is_ok() {
                            self.scribe = Some(start_scribe(&mut self.model, &self.wake));
                            self.write_journal();
                        }
                        update(
                            &mut self.model,
                            Msg::Done(result.map_err(|trouble| trouble.to_string())),
                        )
                    }
                };
                return effects.into_iter().find_map(|effect| self.perform(effect));
            }
            Effect::WritePlan => {
                if let Err(trouble) = self.model.desk.write_plan(self.model.now) {
                    self.model.say(
                        format!("the plan file could not be written: {trouble}"),
                        true,
                    );
                }
            }
            Effect::Quit => {
                self.given_up = true;
                self.finish_plan();
                return Some(0);
            }
            Effect::Suspend => {
                leave();
                // Without job control nobody could wake us: then this does nothing.
                let _ = signal_hook::low_level::raise(SIGTSTP);
                match enter() {
                    Ok(screen) => self.screen = screen,
                    Err(_) => return Some(GONE),
                }
                self.redraw();
            }
            Effect::Redraw => self.redraw(),
        }
        None
    }

    /// Makes the next frame a whole one.
    fn redraw(&mut self) {
        if let Ok(size) = self.screen.size() {
            let _ = self.screen.resize(size.into_rect());
            update(&mut self.model, Msg::Resize(size.width, size.height));
        }
        self.dirty = true;
    }

    /// A plan file that still waits for its answer gets it before we go.
    fn finish_plan(&mut self) {
        let until = Watch::now() + PLAN_WITHIN;
        while self.model.desk.plan_is_due() {
            match self
                .woken
                .recv_timeout(until.saturating_duration_since(Watch::now()))
            {
                Ok(Wake::Msg(msg @ Msg::Solver(_))) => {
                    for effect in update(&mut self.model, msg) {
                        if matches!(effect, Effect::WritePlan) {
                            let _ = self.model.desk.write_plan(self.model.now);
                        }
                    }
                }
                Ok(Wake::Msg(_)) => {}
                Ok(Wake::Signal(_) | Wake::Gone) | Err(_) => return,
            }
        }
    }

    fn draw(&mut self) -> std::io::Result<()> {
        self.dirty = false;
        let size = self.screen.size()?;
        if (size.width, size.height) != self.model.size {
            update(&mut self.model, Msg::Resize(size.width, size.height));
        }
        queue!(self.screen.backend_mut(), BeginSynchronizedUpdate)?;
        let model = &self.model;
        self.screen.draw(|frame| super::draw(model, frame))?;
        queue!(self.screen.backend_mut(), EndSynchronizedUpdate)?;
        self.screen.backend_mut().flush()
    }

    /// Hands what was done to the journal's thread.
    fn write_journal(&mut self) {
        if let Some(scribe) = &self.scribe {
            for record in self.model.desk.take_records() {
                scribe.add(record);
            }
        }
    }

    fn save(&mut self, other: Option<&std::path::Path>, leave: bool) -> Vec<Effect> {
        let scribe = &self.scribe;
        let before = self.model.desk.path.clone();
        let result = self.model.desk.save(other, self.model.now, &mut |record| {
            if let Some(scribe) = scribe {
                scribe.add(record);
                // A journal that cannot be written must not keep anyone from saving.
                let _ = scribe.wait();
            }
        });
        if self.model.desk.path != before {
            self.scribe = Some(start_scribe(&mut self.model, &self.wake));
            watch_the_file(&self.model.desk.path, &self.wake);
        }
        let name = crate::text::clean(&self.model.desk.path.display().to_string()).into_owned();
        let result = result
            .map(|()| format!("saved {name}"))
            .map_err(|trouble| trouble.to_string());
        update(&mut self.model, Msg::Saved { result, leave })
    }

    /// The file is not what it was: a desk that only reads follows it, another says so.
    fn follow(&mut self) -> Vec<Effect> {
        let reads_only = matches!(self.model.desk.access(), Access::Theirs(_));
        if reads_only && self.model.desk.disk() == Disk::Changed {
            // Half a moment later it may be whole.
            let said = match self.model.desk.follow_disk() {
                Ok(()) => Ok("the file was saved by the other desk".to_string()),
                Err(_) => Err("the file cannot be read at the moment".to_string()),
            };
            return update(&mut self.model, Msg::Done(said));
        }
        update(&mut self.model, Msg::Stirred)
    }

    /// Whether the present moment has moved to another column in sight.
    fn now_moves(&mut self) -> bool {
        let now = Instant(chrono::Utc::now().timestamp());
        let columns = i64::from(self.model.areas().time.width);
        let column =
            |at| Some(self.model.view.column(at)).filter(|column| (0..columns).contains(column));
        let moves = column(now) != column(self.model.now);
        if moves {
            self.model.now = now;
        }
        moves
    }

    /// Before leaving: what was done is on the disk, and a journal that has nothing the file
    /// lacks goes away.
    fn close(&mut self, code: u8) {
        self.write_journal();
        if let Some(scribe) = &self.scribe {
            let _ = scribe.wait();
            if self.model.desk.unsaved() == 0 || (code == 0 && self.given_up) {
                self.model.desk.close_journal();
            }
        }
    }
}

trait IntoRect {
    fn into_rect(self) -> ratatui::layout::Rect;
}

impl IntoRect for ratatui::layout::Size {
    fn into_rect(self) -> ratatui::layout::Rect {
        ratatui::layout::Rect::new(0, 0, self.width, self.height)
    }
}

fn enter() -> std::io::Result<Screen> {
    enable_raw_mode()?;
    let mut out = BufWriter::with_capacity(64 << 10, stdout());
    execute!(out, EnterAlternateScreen, EnableBracketedPaste)?;
    let mut screen = Terminal::new(CrosstermBackend::new(out))?;
    // A fresh alternate screen may still show what was there before.
    let size = screen.size()?;
    queue!(
        screen.backend_mut(),
        crossterm::terminal::Clear(crossterm::terminal::ClearType::All)
    )?;
    screen.resize(size.into_rect())?;
    Ok(screen)
}

fn leave() {
    let _ = execute!(
        stdout(),
        DisableBracketedPaste,
        LeaveAlternateScreen,
        cursor::Show
    );
    let _ = disable_raw_mode();
}

/// A panic on the main thread gives the terminal back before it tells its story; one on the
/// solver's thread is caught there and must not write over the screen.
fn restore_on_panic() {
    let usual = std::panic::take_hook();
    let main = std::thread::current().id();
    std::panic::set_hook(Box::new(move |info| {
        if std::thread::current().id() == main {
            leave();
            usual(info);
        }
    }));
}

fn listen_for_input(wake: Sender<Wake>) {
    std::thread::spawn(move || {
        loop {
            let msg = match crossterm::event::read() {
                Ok(crossterm::event::Event::Key(key)) if key.kind != KeyEventKind::Release => {
                    Msg::Key(key)
                }
                Ok(crossterm::event::Event::Paste(text)) => Msg::Paste(text),
                Ok(crossterm::event::Event::Resize(columns, rows)) => Msg::Resize(columns, rows),
                Ok(_) => continue,
                Err(_) => {
                    let _ = wake.send(Wake::Gone);
                    return;
                }
            };
            if wake.send(Wake::Msg(msg)).is_err() {
                return;
            }
        }
    });
}

fn listen_for_signals(wake: &Sender<Wake>) -> std::io::Result<()> {
    let mut signals = signal_hook::iterator::Signals::new([SIGHUP, SIGTERM, SIGINT])?;
    let wake = wake.clone();
    std::thread::spawn(move || {
        for signal in signals.forever() {
            if wake.send(Wake::Signal(signal)).is_err() {
                return;
            }
        }
    });
    Ok(())
}

/// How often the file is looked at, and how often the time.
const LOOK_EVERY: Duration = Duration::from_secs(1);
const TICK_EVERY: u32 = 20;

/// Tells when the file's size or time of change differs from before, and now and then that
/// time passes.
fn watch_the_file(path: &std::path::Path, wake: &Sender<Wake>) {
    let stamp = |path: &std::path::Path| {
        let there = std::fs::metadata(path).ok()?;
        Some((there.len(), there.modified().ok()))
    };
    // The lock file is a matter of which one it is.
    let which = |path: &std::path::Path| {
        let there = std::fs::metadata(path).ok()?;
        Some(std::os::unix::fs::MetadataExt::ino(&there))
    };
    let lock = crate::store::lock_path(path);
    let (path, wake) = (path.to_path_buf(), wake.clone());
    std::thread::spawn(move || {
        let mut before = (stamp(&path), which(&lock));
        for round in 1u32.. {
            std::thread::sleep(LOOK_EVERY);
            let now = (stamp(&path), which(&lock));
            let stirred = now != before;
            before = now;
            let told = match (stirred, round.is_multiple_of(TICK_EVERY)) {
                (true, _) => wake.send(Wake::Msg(Msg::Stirred)),
                (false, true) => wake.send(Wake::Msg(Msg::Tick)),
                (false, false) => continue,
            };
            if told.is_err() {
                return;
            }
        }
    });
}
