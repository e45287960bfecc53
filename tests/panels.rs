//! Every panel at every size, and borders that stay aligned whatever the titles.

use crate::tools::folder_with;
use crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
use fewest::actions::Keys;
use fewest::desk::{Desk, Event};
use fewest::engine::{Budget, Never};
use fewest::screen::{Depth, Effect, Model, Msg, Setup, Theme, draw, update};
use proptest::prelude::*;
use ratatui::Terminal;
use ratatui::backend::TestBackend;
use std::path::Path;

fn model(path: &Path, ascii: bool) -> Model {
    let theme = Theme::named("daylight", Depth::Palette).unwrap().unwrap();
    let setup = Setup {
        theme,
        keys: Keys::default(),
        ascii,
    };
    let mut model = Model::new(Desk::open(path).unwrap(), setup);
    update(&mut model, Msg::Resize(80, 24));
    let job = model.desk.job();
    perform(&mut model, vec![Effect::Submit(Box::new(job))]);
    model
}

/// Solves on the spot what the screen would have solved behind it.
fn perform(model: &mut Model, effects: Vec<Effect>) {
    for effect in effects {
        if let Effect::Submit(job) = effect {
            let budget = Budget {
                steps: Some(1),
                ..Budget::default()
            };
            let settled = job.run(budget, &Never, &mut |_| {}).unwrap();
            update(model, Msg::Solver(Event::Settled(settled)));
        }
    }
}

fn press(model: &mut Model, code: KeyCode) {
    let effects = update(model, Msg::Key(KeyEvent::new(code, KeyModifiers::NONE)));
    perform(model, effects);
}

fn type_in(model: &mut Model, text: &str) {
    for c in text.chars() {
        let code = match c {
            '\n' => KeyCode::Enter,
            '\u{1b}' => KeyCode::Esc,
            '>' => KeyCode::Right,
            'v' => KeyCode::Down,
            '\t' => KeyCode::Tab,
            c => KeyCode::Char(c),
        };
        press(model, code);
    }
}

fn frame(model: &Model, columns: u16, rows: u16) -> String {
    let mut terminal = Terminal::new(TestBackend::new(columns, rows)).unwrap();
    terminal.draw(|frame| draw(model, frame)).unwrap();
    // The test backend cannot print what has no columns.
    if columns == 0 {
        String::new()
    } else {
        terminal.backend().to_string()
    }
}

/// Keys that open each panel, and what it shows at 80x24.
const PANELS: [(&str, &str); 12] = [
    ("", "? help"),
    ("?", "Keys and signs"),
    ("/el", "Find a piece"),
    (":pin", ":pin"),
    (":mvoe\n", "is no edit"),
    ("\n>>", "dropped here"),
    ("a", "a new request"),
    ("e", "Enter makes the changes"),
    ("i", "findings"),
    ("d", "Days (floor of the whole"),
    ("fq", "any other key stays"),
    ("vv>c", ":close "),
];

#[test]
fn every_panel_survives_every_size() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let mut frames = 0;
    for (keys, shows) in PANELS {
        let mut model = model(&path, false);
        type_in(&mut model, keys);
        let seen = frame(&model, 80, 24);
        assert!(
            seen.contains(shows),
            "{keys:?} should show {shows:?}:\n{seen}"
        );
        for columns in 0..=100u16 {
            for rows in 0..=40u16 {
                // The model learns of a size after the frame has it, as in life.
                let seen = frame(&model, columns, rows);
                if rows > 0 && (20..40).contains(&columns) {
                    assert!(
                        seen.contains("fewest needs 40 x 12"),
                        "{columns}x{rows}:\n{seen}"
                    );
                }
                frames += 1;
                if (columns + rows) % 7 == 0 {
                    update(&mut model, Msg::Resize(columns, rows));
                    frame(&model, columns, rows);
                }
            }
        }
    }
    assert_eq!(frames, PANELS.len() * 101 * 41);
}

#[test]
fn the_present_moment_is_a_line_when_it_is_in_sight() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let mut model = model(&folder.path().join("three-day-event.toml"), false);
    let column = |model: &Model| {
        let seen = frame(model, 80, 24);
        let row = seen
            .lines()
            .find(|line| line.contains(" studio-3"))
            .unwrap()
            .to_string();
        row.chars().position(|c| c == '\'')
    };
    assert_eq!(column(&model), None, "another year");
    model.now = model.view.left + 3 * model.view.step();
    // The quotation mark of the dump's own border comes first.
    assert_eq!(
        column(&model),
        Some(usize::from(model.areas().time.x) + 3 + 1)
    );
}

#[test]
fn plain_ascii_is_plain_ascii() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.toml");
    let text = "[timetable]\ntitle = \"Prüfungen 試験\"\n[[request]]\nid = \"ä\"\ntitle = \"試験 é\"\nstart = 2027-01-11T09:00:00\nlength = \"4h\"\n";
    std::fs::write(&path, text).unwrap();
    let mut plain = model(&path, true);
    for keys in ["", "?", "\u{1b}/", "\u{1b}e"] {
        type_in(&mut plain, keys);
        let mut terminal = Terminal::new(TestBackend::new(80, 24)).unwrap();
        terminal.draw(|frame| draw(&plain, frame)).unwrap();
        assert!(
            terminal
                .backend()
                .buffer()
                .content
                .iter()
                .all(|cell| cell.symbol().is_ascii())
        );
    }
}

fn title() -> impl Strategy<Value = String> {
    prop_oneof![
        "\\PC{0,40}",
        Just("試験試験試験試験試験試験".to_string()),
        Just("e\u{301}\u{301}\u{301}".repeat(20)),
        Just("שלום עולם".to_string()),
        Just("\u{202E}\u{1b}[2J\u{7f}\u{9b}31m".to_string()),
        Just("👩‍👩‍👧‍👦🏳️‍🌈".repeat(5)),
        Just("x".repeat(10_000)),
        Just("\u{200b}\u{200d}\u{fe0f}".to_string()),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(60))]
    /// Whatever the titles: every bar begins and ends where its times say, the label column
    /// stays whole, and no control character is in any cell.
    #[test]
    fn borders_stay_aligned_whatever_the_titles(titles in prop::collection::vec(title(), 4), columns in 60u16..200) {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a.toml");
        let quoted = |text: &str| toml_edit_string(text);
        let mut text = format!("[timetable]\ntitle = {}\n[[resource]]\nid = \"north\"\ntitle = {}\n[[resource]]\nid = \"south\"\n", quoted(&titles[0]), quoted(&titles[1]));
        for (at, title) in titles.iter().enumerate() {
            text.push_str(&format!(
                "[[request]]\nid = \"r{at}\"\ntitle = {}\npeople = [{}]\nstart = 2027-01-11T{:02}:00:00\nlength = \"90m\"\npin = \"{}\"\n",
                quoted(title), quoted(title), 8 + at * 2, if at % 2 == 0 { "north" } else { "south" }
            ));
        }
        std::fs::write(&path, text).unwrap();
        let mut model = model(&path, false);
        update(&mut model, Msg::Resize(columns, 24));
        let mut terminal = Terminal::new(TestBackend::new(columns, 24)).unwrap();
        terminal.draw(|frame| draw(&model, frame)).unwrap();
        let buffer = terminal.backend().buffer();
        let areas = model.areas();
        for cell in &buffer.content {
            prop_assert!(cell.symbol().chars().all(|c| !c.is_control()), "{:?}", cell.symbol());
        }
        for (row, y) in model.rows.rows.iter().zip(areas.board.y..) {
            for piece in &row.pieces {
                let (from, to) = model.view.columns(model.rows.pieces[*piece].span);
                let at = |x: i64| buffer[(areas.time.x + x as u16, y)].symbol().to_string();
                prop_assert!(["[", "{", "<"].contains(&at(from).as_str()), "{:?}", at(from));
                prop_assert!(["]", "}", ">"].contains(&at(to - 1).as_str()), "{:?}", at(to - 1));
            }
        }
    }
}

/// A TOML string of any text.
fn toml_edit_string(text: &str) -> String {
    let mut quoted = String::from("\"");
    for c in text.chars() {
        quoted.push_str(&format!("\\U{:08x}", u32::from(c)));
    }
    quoted + "\""
}
