//! The only module that touches the terminal.

use super::model::Model;
use super::update::{Effect, Msg, update};
use crate::cli::Outcome;
use crate::clock::Instant;
use crate::desk::{Event, Solver};
use crate::store;
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
const ANSWER_WITHIN: Duration = Duration::from_millis(12);

/// The same before the very first frame.
const FIRST_ANSWER_WITHIN: Duration = Duration::from_millis(80);

/// How long leaving waits for the answer that a saved plan needs.
const PLAN_WITHIN: Duration = Duration::from_secs(3);

/// Runs the screen until it is left.
pub(super) fn run(mut model: Model, break_after_first_frame: bool) -> Outcome {
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
    listen_for_input(wake);
    if let Ok(size) = screen.size() {
        update(&mut model, Msg::Resize(size.width, size.height));
    }
    solver.submit(model.desk.job());
    let mut loop_ = Loop {
        model,
        solver,
        screen,
        woken,
        dirty: true,
        waiting: Some(Watch::now() + FIRST_ANSWER_WITHIN),
    };
    let code = loop_.turn(break_after_first_frame);
    let err = loop_.rescue(code);
    if code == GONE {
        // Nothing may be written to a terminal that is no more, not even by a destructor.
        std::mem::forget(loop_.screen);
    } else {
        leave();
    }
    Outcome {
        code,
        err,
        ..Outcome::default()
    }
}

/// The exit code when the terminal is gone.
const GONE: u8 = 128 + SIGHUP as u8;

struct Loop {
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
            self.model.now = Instant(chrono::Utc::now().timestamp());
            let effects = match next {
                Wake::Signal(signal) => return Some(128 + signal as u8),
                Wake::Gone => return Some(GONE),
                Wake::Msg(msg) => {
                    if matches!(msg, Msg::Solver(Event::Settled(_))) {
                        self.waiting = None;
                    }
                    self.dirty = true;
                    update(&mut self.model, msg)
                }
            };
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
            Effect::Save { other, leave } => {
                let result = self.model.desk.save(other.as_deref(), self.model.now);
                let name = self.model.desk.path.display().to_string();
                let result = result
                    .map(|()| format!("saved {name}"))
                    .map_err(|trouble| trouble.to_string());
                let effects = update(&mut self.model, Msg::Saved { result, leave });
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
                self.finish_plan();
                return Some(0);
            }
            Effect::Suspend => {
                leave();
                let _ = signal_hook::low_level::emulate_default_handler(SIGTSTP);
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

    /// Edits that would be lost because we were told to go are kept beside the timetable as a
    /// script; says where.
    fn rescue(&self, code: u8) -> String {
        if code == 0 || self.model.desk.unsaved() == 0 {
            return String::new();
        }
        let path = self.model.desk.path.with_extension("rescued.txt");
        let lines = self.model.desk.unsaved_lines().join("\n") + "\n";
        let before = store::read_bounded(&path, 1 << 26).unwrap_or_default();
        let bytes = [before, lines.into_bytes()].concat();
        match store::write_atomically(&path, &bytes) {
            Ok(()) => format!("edits that were not saved are in {}\n", path.display()),
            Err(error) => format!("edits could not be kept: {}: {error}\n", path.display()),
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
