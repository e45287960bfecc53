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
        } else if let Effect::Why(settled) = effect {
            let why = fewest::desk::why(&settled, &Never);
            update(model, Msg::Why(settled.generation(), why.into()));
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
const PANELS: [(&str, &str); 14] = [
    ("y", "why: Enter on a ground"),
    ("t", "who can take"),
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

/// The text of a screen of that size.
fn shown(model: &Model) -> String {
    frame(model, 80, 24)
}

#[test]
fn why_leads_to_its_grounds_and_who_pins() {
    let folder = folder_with(&["sample-timetables/exam-fortnight.toml"]);
    let mut model = model(&folder.path().join("exam-fortnight.toml"), false);
    type_in(&mut model, "y");
    let text = shown(&model);
    assert!(
        text.contains("It takes 9 rooms, although no more than 8"),
        "{text}"
    );
    assert!(text.contains("line 497: pin mus-102 on gallery"), "{text}");
    // Down to the first ground, and to its piece.
    for _ in 0..12 {
        if shown(&model).contains(">line 497") {
            break;
        }
        type_in(&mut model, "v");
    }
    type_in(&mut model, "\n");
    assert!(shown(&model).contains("mus-102  "), "{}", shown(&model));
    type_in(&mut model, "t");
    let text = shown(&model);
    assert!(text.contains("who can take mus-102"), "{text}");
    assert!(text.contains("gallery      it is there now"), "{text}");
    assert!(text.contains("cannot, because"), "{text}");
    // The second is the nearest fit besides; pinned there, eight rooms do.
    type_in(&mut model, "v\n");
    assert_eq!(model.desk.unsaved(), 1);
    let pinned = model
        .desk
        .timetable()
        .request("mus-102")
        .unwrap()
        .pin
        .clone();
    assert_ne!(pinned.as_deref(), Some("gallery"));
    let job = model.desk.job();
    let settled = job.run(Budget::default(), &Never, &mut |_| {}).unwrap();
    update(&mut model, Msg::Solver(Event::Settled(settled)));
    assert!(
        shown(&model).contains("8 rooms in use"),
        "{}",
        shown(&model)
    );
}

/// Where fewest resources and fewest changes pull apart, the screen says what the other
/// choice would come to, and a key chooses.
#[test]
fn resources_and_changes_can_pull_apart() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("apart.toml");
    let mut text = "[timetable]\ntitle = \"Apart\"\nnoun = [\"crew\", \"crews\"]\n".to_string();
    for crew in ["one", "two"] {
        text.push_str(&format!("[[resource]]\nid = \"{crew}\"\n"));
    }
    for (id, from, to, pin) in [
        ("a", 8, 9, "one"),
        ("b", 8, 10, "two"),
        ("c", 10, 11, "two"),
        ("d", 11, 12, "two"),
    ] {
        text.push_str(&format!(
            "[[request]]\nid = \"{id}\"\nstart = 2027-01-11T{from:02}:00:00\nend = 2027-01-11T{to:02}:00:00\npin = \"{pin}\"\n"
        ));
    }
    std::fs::write(&path, text).unwrap();
    let mut model = model(&path, false);
    type_in(&mut model, ":unpin a\n:unpin b\n:unpin c\n:unpin d\n");
    // Without b one crew could do it all, if a went to it.
    type_in(&mut model, ":withdraw b\n");
    assert!(
        shown(&model).contains("1 crew in use, at least 1: proved"),
        "{}",
        shown(&model)
    );
    let text = shown(&model);
    assert!(
        text.contains("1 relocated (fewest), 0 with 1 crew more"),
        "{text}"
    );
    type_in(&mut model, "u");
    type_in(&mut model, "k");
    type_in(&mut model, ":withdraw b\n");
    let text = shown(&model);
    assert!(text.contains("2 crews in use, at least 1"), "{text}");
    assert!(
        text.contains("0 relocated (fewest), 1 with 1 crew fewer"),
        "{text}"
    );
    type_in(&mut model, "k");
    assert!(shown(&model).contains("1 crew in use"), "{}", shown(&model));
}

/// What has begun stays where it is, whatever else changes.
#[test]
fn what_is_settled_stays() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let mut model = model(&folder.path().join("three-day-event.toml"), false);
    let on = |model: &Model, id: &str| {
        let settled = model.desk.settled().unwrap();
        let placements = settled.answer().plan.placements.iter();
        let mut on = placements.filter(|p| *p.piece == *id);
        on.next().map(|p| p.resource.to_string())
    };
    let until = fewest::clock::Instant(1_812_621_600);
    let begun: Vec<(String, Option<String>)> = model
        .desk
        .timetable()
        .pieces()
        .iter()
        .filter(|piece| piece.span.start < until)
        .map(|piece| (piece.id.to_string(), on(&model, &piece.id)))
        .collect();
    assert!(begun.len() > 3);
    let line = format!(
        ":settle until {}\n",
        model.desk.timetable().settings.zone.print(until)
    );
    type_in(&mut model, &line);
    for line in [
        ":close salon-2 from 2027-06-11 08:00 to 2027-06-11 20:00\n",
        ":prefer changes\n",
        ":prefer count\n",
    ] {
        type_in(&mut model, line);
        for (id, was) in &begun {
            assert_eq!(on(&model, id), *was, "{id} after {line}");
        }
    }
}
