//! The real program in a pseudo-terminal.

use crate::tools::{fewest, folder_with};
use portable_pty::{Child, CommandBuilder, MasterPty, PtySize, native_pty_system};
use std::io::{Read, Write};
use std::path::Path;
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

/// How long a screen may take to show something on a busy machine.
const PATIENCE: Duration = Duration::from_secs(20);

fn sized(cells: u16) -> std::num::NonZeroU16 {
    std::num::NonZeroU16::new(cells).unwrap()
}

/// Rows and columns.
pub(crate) fn size_of(screen: &vt100::Screen) -> (u16, u16) {
    let (rows, columns) = screen.size();
    (rows.get(), columns.get())
}

/// The program in a terminal of its own.
pub(crate) struct Terminal {
    master: Box<dyn MasterPty + Send>,
    child: Box<dyn Child + Send + Sync>,
    keys: Box<dyn Write + Send>,
    screen: Arc<Mutex<vt100::Parser>>,
    raw: Arc<Mutex<Vec<u8>>>,
}

impl Terminal {
    /// Opens a file at a size, with a cleared environment beside what is given.
    pub(crate) fn open(
        args: &[&str],
        (columns, rows): (u16, u16),
        environment: &[(&str, &str)],
    ) -> Terminal {
        let size = PtySize {
            rows,
            cols: columns,
            pixel_width: 0,
            pixel_height: 0,
        };
        let pair = native_pty_system().openpty(size).unwrap();
        let mut command = CommandBuilder::new(env!("CARGO_BIN_EXE_fewest"));
        command.args(args);
        command.env_clear();
        for (name, value) in environment {
            command.env(name, value);
        }
        let child = pair.slave.spawn_command(command).unwrap();
        drop(pair.slave);
        let screen = Arc::new(Mutex::new(vt100::Parser::new(
            sized(rows),
            sized(columns),
            0,
        )));
        let raw = Arc::new(Mutex::new(Vec::new()));
        let mut reader = pair.master.try_clone_reader().unwrap();
        let (seen, kept) = (Arc::clone(&screen), Arc::clone(&raw));
        std::thread::spawn(move || {
            let mut buffer = [0; 65_536];
            while let Ok(count @ 1..) = reader.read(&mut buffer) {
                seen.lock().unwrap().process(&buffer[..count]);
                kept.lock().unwrap().extend(&buffer[..count]);
            }
        });
        let keys = pair.master.take_writer().unwrap();
        Terminal {
            master: pair.master,
            child,
            keys,
            screen,
            raw,
        }
    }

    pub(crate) fn press(&mut self, keys: &str) {
        self.keys.write_all(keys.as_bytes()).unwrap();
        self.keys.flush().unwrap();
    }

    pub(crate) fn text(&self) -> String {
        self.screen.lock().unwrap().screen().contents()
    }

    /// The screen as it is now.
    pub(crate) fn look<T>(&self, at: impl Fn(&vt100::Screen) -> T) -> T {
        at(self.screen.lock().unwrap().screen())
    }

    /// Waits until the screen shows what is wanted.
    pub(crate) fn wait(&self, what: &str, shows: impl Fn(&str) -> bool) {
        let until = Instant::now() + PATIENCE;
        loop {
            let text = self.text();
            if shows(&text) {
                return;
            }
            assert!(Instant::now() < until, "never showed {what}:\n{text}");
            std::thread::sleep(Duration::from_millis(10));
        }
    }

    pub(crate) fn wait_for(&self, wanted: &str) {
        self.wait(wanted, |text| text.contains(wanted));
    }

    fn resize(&self, columns: u16, rows: u16) {
        self.master
            .resize(PtySize {
                rows,
                cols: columns,
                pixel_width: 0,
                pixel_height: 0,
            })
            .unwrap();
        self.screen
            .lock()
            .unwrap()
            .screen_mut()
            .set_size(sized(rows), sized(columns));
    }

    /// Waits for the end and gives the exit code.
    pub(crate) fn end(&mut self) -> u32 {
        let until = Instant::now() + PATIENCE;
        loop {
            if let Some(status) = self.child.try_wait().unwrap() {
                // What was written last is still on its way.
                std::thread::sleep(Duration::from_millis(50));
                return status.exit_code();
            }
            assert!(Instant::now() < until, "never ended:\n{}", self.text());
            std::thread::sleep(Duration::from_millis(10));
        }
    }

    /// Whether what was written last gives the terminal back: alternate screen left, pasting
    /// as usual, cursor shown.
    fn restored(&self) -> bool {
        let raw = self.raw.lock().unwrap();
        let last = |what: &[u8]| raw.windows(what.len()).rposition(|window| window == what);
        last(b"\x1b[?1049l") > last(b"\x1b[?1049h")
            && last(b"\x1b[?2004l") > last(b"\x1b[?2004h")
            && last(b"\x1b[?25h") >= last(b"\x1b[?25l")
    }

    /// Kills it without a word.
    pub(crate) fn kill(&mut self) {
        self.signal("-KILL");
        let _ = self.child.wait();
    }

    pub(crate) fn signal(&self, name: &str) {
        let pid = self.child.process_id().unwrap().to_string();
        assert!(
            std::process::Command::new("kill")
                .args([name, &pid])
                .status()
                .unwrap()
                .success()
        );
    }
}

impl Drop for Terminal {
    fn drop(&mut self) {
        let _ = self.child.kill();
    }
}

pub(crate) const XTERM: [(&str, &str); 1] = [("TERM", "xterm-256color")];

fn event() -> (tempfile::TempDir, String) {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder
        .path()
        .join("three-day-event.toml")
        .to_str()
        .unwrap()
        .to_string();
    (folder, path)
}

#[test]
fn a_piece_is_carried_the_count_follows_and_everything_is_saved() {
    let (_folder, path) = event();
    let before = std::fs::read_to_string(&path).unwrap();
    let mut terminal = Terminal::open(&[&path], (80, 24), &XTERM);
    terminal.wait_for("9 halls in use, at least 9: proved");
    terminal.wait_for("saved");
    // star-dial is one of the nine that overlap; half an hour earlier it is one of eight there.
    terminal.press("/star-dial\r");
    terminal.wait_for("star-dial  ");
    terminal.press("\r");
    terminal.wait_for("carrying star-dial");
    terminal.press("\x1b[5~\x1b[D\x1b[D");
    terminal.wait_for("starts Thu 10 Jun 11:35, was 12:45");
    terminal.wait("the count of the preview", |text| {
        text.contains("dropped here: 9 halls in use, at least 9: proved")
            && text.contains("clique 9: Fri 11 Jun")
    });
    terminal.press("\x1b");
    terminal.wait("it put back", |text| {
        text.contains("clique 9: Thu 10 Jun") && !text.contains("carrying")
    });
    // Withdrawing all that fills one more peak brings the count down, and undo up again.
    for id in ["star-dial", "night-ferry"] {
        terminal.press(&format!(":withdraw {id}\r"));
    }
    terminal.wait_for("8 halls in use, at least 8: proved");
    terminal.wait_for("2 edits not saved");
    terminal.press("u");
    terminal.wait_for("9 halls in use, at least 9: proved");
    terminal.press("U");
    terminal.wait_for("8 halls in use, at least 8: proved");
    terminal.press("uu");
    terminal.wait("nothing unsaved", |text| {
        text.lines()
            .nth(1)
            .is_some_and(|line| line.trim_end().ends_with(" saved") && !line.contains("not saved"))
    });
    terminal.press("/star-dial\r\r\x1b[5~\x1b[D\x1b[D\r");
    terminal.wait_for("* moved from 2027-06-10 12:45");
    terminal.wait_for("1 edit not saved");
    terminal.press("q");
    terminal.wait_for("s saves and leaves, y leaves without, any other key stays");
    terminal.press("x");
    terminal.wait_for("still here");
    terminal.press("qs");
    assert_eq!(terminal.end(), 0);
    assert!(terminal.restored());
    let after = std::fs::read_to_string(&path).unwrap();
    let changed: Vec<_> = before
        .lines()
        .zip(after.lines())
        .filter(|(a, b)| a != b)
        .collect();
    assert_eq!(
        changed,
        [("start = 2027-06-10T12:45:00", "start = 2027-06-10T11:35:00")]
    );
    let audit = fewest(&["audit", &path]);
    assert_eq!(audit.status.code(), Some(0), "{audit:?}");
}

#[test]
fn carrying_over_resources_pins_and_a_mistyped_edit_stays_to_be_put_right() {
    let (_folder, path) = event();
    let mut terminal = Terminal::open(&[&path], (80, 24), &XTERM);
    terminal.wait_for("proved");
    terminal.press("/map-print\r\r");
    terminal.wait_for("carrying map-print over");
    terminal.press("\x1b[B");
    terminal.wait_for("carrying map-print over");
    terminal.press("\r");
    terminal.wait_for("! pinned");
    terminal.wait_for("1 edit not saved");
    terminal.press(":moev map-print by 5m\r");
    terminal.wait_for("\"moev\" is no edit; did you mean \"move\"?");
    terminal.wait_for(":moev map-print by 5m");
    terminal.press("\x1b");
    terminal.wait("the command line gone", |text| !text.contains(":moev"));
    // Pasted text goes into a text field only: it must not leave, undo or save.
    terminal.press("\x1b[200~quy\x1b[201~");
    terminal.wait_for("pasted text goes into the command line only");
    terminal.press(":\x1b[200~unpin map-print\x1b[201~\r");
    terminal.wait("the pin gone", |text| {
        !text.contains("not saved") && !text.contains("! pinned")
    });
    terminal.press("q");
    assert_eq!(terminal.end(), 0);
}

#[test]
fn a_storm_of_sizes_leaves_a_whole_screen() {
    let (_folder, path) = event();
    let mut terminal = Terminal::open(&[&path], (80, 24), &XTERM);
    terminal.wait_for("proved");
    for round in 0..40u16 {
        terminal.resize(1 + (round * 37) % 200, 1 + (round * 13) % 60);
        if round % 5 == 0 {
            terminal.press("n");
        }
    }
    terminal.resize(30, 5);
    terminal.wait_for("fewest needs 40 x 12");
    terminal.resize(100, 30);
    // A key that means nothing clears what was said last.
    terminal.press("x");
    terminal.wait("a whole screen", |text| {
        text.contains("9 halls in use") && text.contains("? help") && text.contains("floor 9")
    });
    terminal.press("q");
    assert_eq!(terminal.end(), 0);
}

#[test]
fn the_terminal_is_given_back_after_a_panic() {
    let (_folder, path) = event();
    let mut terminal = Terminal::open(&[&path, "--break-after-first-frame"], (80, 24), &XTERM);
    assert_eq!(terminal.end(), 1);
    assert!(terminal.restored());
    terminal.wait_for("broken on purpose");
}

#[test]
fn the_terminal_is_given_back_on_signals_and_edits_are_kept() {
    for (signal, code) in [("-TERM", 143), ("-INT", 130)] {
        let (folder, path) = event();
        let mut terminal = Terminal::open(&[&path], (80, 24), &XTERM);
        terminal.wait_for("proved");
        terminal.press(":fasten eels because \"agreed\"\r");
        terminal.wait_for("1 edit not saved");
        terminal.signal(signal);
        assert_eq!(terminal.end(), code, "{signal}");
        assert!(terminal.restored(), "{signal}");
        // The journal has it; the next session offers it.
        assert!(folder.path().join("three-day-event.journal").exists());
        let count = fewest(&["count", &path]);
        assert!(
            crate::tools::err(&count).contains("1 edit not saved in a journal"),
            "{count:?}"
        );
        let mut terminal = Terminal::open(&[&path], (80, 24), &XTERM);
        terminal.wait_for("1 edit not saved last time: Enter takes them in");
        terminal.press("\r");
        terminal.wait_for("1 edit taken in");
        terminal.wait_for("1 edit not saved");
        terminal.press("qs");
        assert_eq!(terminal.end(), 0);
        let saved = std::fs::read_to_string(&path).unwrap();
        assert!(saved.contains("fastened = true"));
        assert!(
            !folder.path().join("three-day-event.journal").exists(),
            "spent"
        );
    }
}

/// A line that breaks: the terminal is gone, nothing can be written to it, and the journal
/// is whole all the same.
#[test]
fn a_hang_up_keeps_the_journal() {
    let (folder, path) = event();
    let size = PtySize {
        rows: 24,
        cols: 80,
        pixel_width: 0,
        pixel_height: 0,
    };
    let pair = native_pty_system().openpty(size).unwrap();
    let mut command = CommandBuilder::new(env!("CARGO_BIN_EXE_fewest"));
    command.arg(&path);
    command.env_clear();
    command.env("TERM", "xterm");
    let mut child = pair.slave.spawn_command(command).unwrap();
    drop(pair.slave);
    let mut reader = pair.master.try_clone_reader().unwrap();
    let mut keys = pair.master.take_writer().unwrap();
    let mut screen = vt100::Parser::new(sized(24), sized(80), 0);
    // Read here and not on a thread, so that nothing keeps the line open afterwards.
    let mut read_until = |wanted: &str| {
        let mut buffer = [0; 65_536];
        while !screen.screen().contents().contains(wanted) {
            let count = reader.read(&mut buffer).unwrap();
            screen.process(&buffer[..count]);
        }
    };
    read_until("proved");
    keys.write_all(b":fasten eels\r").unwrap();
    keys.flush().unwrap();
    read_until("1 edit not saved");
    drop((reader, keys, pair.master));
    let until = Instant::now() + PATIENCE;
    let status = loop {
        if let Some(status) = child.try_wait().unwrap() {
            break status;
        }
        assert!(Instant::now() < until, "it went on without a terminal");
        std::thread::sleep(Duration::from_millis(10));
    };
    assert_eq!(status.exit_code(), 129, "{status:?}");
    let journal = std::fs::read(folder.path().join("three-day-event.journal")).unwrap();
    let journal = fewest::store::journal::Journal::read(&journal).unwrap();
    assert_eq!((journal.records.len(), journal.rest.as_str()), (1, ""));
}

#[test]
fn an_idle_screen_writes_nothing() {
    let (_folder, path) = event();
    let mut terminal = Terminal::open(&[&path], (120, 40), &XTERM);
    terminal.wait_for("proved");
    terminal.wait_for("? help");
    std::thread::sleep(Duration::from_millis(300));
    let before = terminal.raw.lock().unwrap().len();
    // The file is looked at once a second; that alone is no reason to draw.
    std::thread::sleep(Duration::from_millis(2_500));
    assert_eq!(terminal.raw.lock().unwrap().len(), before);
    terminal.press("q");
    assert_eq!(terminal.end(), 0);
}

#[test]
fn it_works_in_one_colour_and_on_plain_terminals() {
    let coloured = |terminal: &Terminal| {
        terminal.look(|screen| {
            let (rows, columns) = size_of(screen);
            let cells = (0..rows).flat_map(|y| (0..columns).map(move |x| (y, x)));
            cells
                .filter_map(|(y, x)| screen.cell(y, x))
                .filter(|cell| {
                    cell.fgcolor() != vt100::Color::Default
                        || cell.bgcolor() != vt100::Color::Default
                })
                .count()
        })
    };
    let marked = |terminal: &Terminal| {
        terminal.look(|screen| {
            let (rows, columns) = size_of(screen);
            let cells = (0..rows).flat_map(|y| (0..columns).map(move |x| (y, x)));
            cells
                .filter_map(|(y, x)| screen.cell(y, x))
                .filter(|cell| cell.inverse() || cell.bold())
                .count()
        })
    };
    let (_folder, path) = event();
    for (environment, colours) in [
        (vec![("TERM", "xterm-256color")], true),
        (vec![("TERM", "xterm")], true),
        (vec![("TERM", "xterm-256color"), ("NO_COLOR", "1")], false),
        (vec![("TERM", "dumb")], false),
    ] {
        let mut terminal = Terminal::open(&[&path], (80, 24), &environment);
        terminal.wait_for("proved");
        terminal.wait_for("? help");
        assert_eq!(coloured(&terminal) > 0, colours, "{environment:?}");
        assert!(
            marked(&terminal) > 50,
            "{environment:?}: bars are reverse video all the same"
        );
        terminal.press("q");
        assert_eq!(terminal.end(), 0, "{environment:?}");
    }
    let mut terminal = Terminal::open(&[&path, "--theme", "ink"], (80, 24), &XTERM);
    terminal.wait_for("? help");
    assert_eq!(coloured(&terminal), 0);
    terminal.press("q");
    assert_eq!(terminal.end(), 0);
}

#[test]
fn titles_that_try_to_steer_the_terminal_cannot() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("hostile.toml");
    let titles = [
        "\\u001b]0;owned\\u0007",
        "\\u009b2J",
        "\\u202Egnp.exe",
        "e\\u0301\\u0301",
        "試験試験試験",
        "\\u200d\\u200d",
    ];
    let mut text = "[timetable]\ntitle = \"\\u001b[2Jtimetable\"\nnoun = [\"ro\\u001b[31mom\", \"rooms\"]\n[[kind]]\nid = \"hall\"\ncount = 2\ntitle = \"\\u001b[5m\"\n".to_string();
    for (at, title) in titles.iter().enumerate() {
        text.push_str(&format!("[[request]]\nid = \"r{at}\"\ntitle = \"{title}\"\npeople = [\"{title}\"]\nneeds = [\"{title}\"]\nstart = 2027-01-11T09:00:00\nlength = \"1h\"\n"));
    }
    std::fs::write(&path, text).unwrap();
    let mut terminal = Terminal::open(&[path.to_str().unwrap()], (80, 24), &XTERM);
    terminal.wait_for("? help");
    for keys in ["\x1b[B", "\x1b[B", "\x1b[C", "/r", "\x1b", "?", "\x1b"] {
        terminal.press(keys);
        std::thread::sleep(Duration::from_millis(30));
    }
    terminal.press("q");
    terminal.end();
    let raw = terminal.raw.lock().unwrap().clone();
    let text = String::from_utf8_lossy(&raw);
    for bad in [
        "\x1b]",
        "\x1b[2Jtime",
        "\x1b[31mom",
        "\u{9b}",
        "\u{202e}",
        "\x1b[5m",
    ] {
        assert!(!text.contains(bad), "{bad:?}");
    }
}

#[test]
fn without_a_terminal_the_count_is_printed() {
    let (_folder, path) = event();
    let output = fewest(&[&path]);
    assert!(crate::tools::out(&output).contains("9 halls in use, at least 9: proved"));
    assert!(Path::new(&path).exists());
}
