//! Captures of the real screen, kept true: `captures/NAME.txt` holds what a person sees, and
//! below it the style of every run of cells that is not plain. `FEWEST_ACCEPT=1` writes them
//! anew.

use crate::terminal::{Terminal, size_of};
use crate::tools::{file, folder_with};
use std::fmt::Write;

/// The screen as text, then its styles.
fn dump(screen: &vt100::Screen) -> String {
    let (rows, columns) = size_of(screen);
    let mut text = String::new();
    for line in screen.rows(0, columns) {
        let _ = writeln!(text, "|{line:<width$}|", width = usize::from(columns));
    }
    let style = |y, x| {
        let cell = screen.cell(y, x)?;
        let mut names: Vec<String> = Vec::new();
        for (colour, what) in [(cell.fgcolor(), "fg"), (cell.bgcolor(), "bg")] {
            match colour {
                vt100::Color::Default => {}
                vt100::Color::Idx(index) => names.push(format!("{what}{index}")),
                vt100::Color::Rgb(r, g, b) => names.push(format!("{what}#{r:02x}{g:02x}{b:02x}")),
            }
        }
        for (set, name) in [
            (cell.bold(), "bold"),
            (cell.dim(), "dim"),
            (cell.inverse(), "reversed"),
            (cell.underline(), "underlined"),
        ] {
            names.extend(set.then(|| name.to_string()));
        }
        (!names.is_empty()).then(|| names.join(" "))
    };
    text.push('\n');
    for y in 0..rows {
        let mut x = 0;
        while x < columns {
            let here = style(y, x);
            let from = x;
            while x < columns && style(y, x) == here {
                x += 1;
            }
            if let Some(here) = here {
                let _ = writeln!(text, "{y}: {from}-{}: {here}", x - 1);
            }
        }
    }
    let (y, x) = screen.cursor_position();
    let _ = writeln!(text, "cursor {y},{x}");
    text
}

fn capture(name: &str, sample: &str, size: (u16, u16), no_color: bool, keys: &[(&str, &str)]) {
    let folder = folder_with(&[&format!("sample-timetables/{sample}.toml")]);
    let path = folder.path().join(format!("{sample}.toml"));
    let mut environment = vec![("TERM", "xterm-256color")];
    if no_color {
        environment.push(("NO_COLOR", "1"));
    }
    let mut terminal = Terminal::open(&[path.to_str().unwrap()], size, &environment);
    terminal.wait("the count", |text| text.contains("proved"));
    terminal.wait_for("? help");
    for (keys, shows) in keys {
        terminal.press(keys);
        terminal.wait_for(shows);
    }
    // A frame is written in pieces; it is whole when it stays as it is.
    let mut seen = terminal.look(dump);
    loop {
        std::thread::sleep(std::time::Duration::from_millis(150));
        let again = terminal.look(dump);
        if again == seen {
            break;
        }
        seen = again;
    }
    let kept = file(&format!("tests/captures/{name}.txt"));
    if std::env::var_os("FEWEST_ACCEPT").is_some() {
        std::fs::write(&kept, &seen).unwrap();
    }
    let expected = std::fs::read_to_string(&kept).unwrap_or_default();
    assert!(
        expected == seen,
        "{name} looks different now (FEWEST_ACCEPT=1 takes it):\n{seen}"
    );
}

#[test]
fn the_event_as_people_see_it() {
    for (no_color, suffix) in [(false, "colour"), (true, "no-color")] {
        for size in [(80, 24), (200, 50)] {
            let name = format!("event-{}x{}-{suffix}", size.0, size.1);
            capture(&name, "three-day-event", size, no_color, &[]);
        }
    }
}

#[test]
fn the_exams_as_people_see_them() {
    for (no_color, suffix) in [(false, "colour"), (true, "no-color")] {
        for size in [(80, 24), (200, 50)] {
            let name = format!("exams-{}x{}-{suffix}", size.0, size.1);
            capture(&name, "exam-fortnight", size, no_color, &[]);
        }
    }
}

#[test]
fn carrying_finding_and_help_as_people_see_them() {
    let carry = [
        ("/star-dial\r", "star-dial  "),
        ("\r", "carrying"),
        ("\x1b[5~\x1b[D\x1b[D", "11:35, was 12:45"),
        ("", "Fri 11 Jun"),
    ];
    capture(
        "carry-80x24-no-color",
        "three-day-event",
        (80, 24),
        true,
        &carry,
    );
    capture(
        "find-80x24-no-color",
        "three-day-event",
        (80, 24),
        true,
        &[("/eel", "found (Enter goes there")],
    );
    capture(
        "form-80x24-no-color",
        "three-day-event",
        (80, 24),
        true,
        &[("e", "Enter makes the changes")],
    );
    capture(
        "days-80x24-no-color",
        "exam-fortnight",
        (80, 24),
        true,
        &[("d", "Days (floor of the whole")],
    );
    capture(
        "help-80x24-no-color",
        "three-day-event",
        (80, 24),
        true,
        &[("?", "Keys and signs")],
    );
}

#[test]
fn why_and_who_as_people_see_them() {
    let proved = ("", "at least 9: proved");
    capture(
        "why-80x24-no-color",
        "exam-fortnight",
        (80, 24),
        true,
        &[proved, ("y", "line 497")],
    );
    capture(
        "who-80x24-no-color",
        "exam-fortnight",
        (80, 24),
        true,
        &[proved, ("t", "who can take")],
    );
    capture(
        "evenings-80x24-no-color",
        "spring-evenings",
        (80, 24),
        true,
        &[("", "at least 6: proved")],
    );
}

#[test]
fn the_depot_as_people_see_it() {
    // Better plans and floors come in for a moment; these are the last ones.
    let whole = [("", "22 crews in use"), ("", "floor 22")];
    for (no_color, suffix) in [(false, "colour"), (true, "no-color")] {
        let name = format!("depot-80x24-{suffix}");
        capture(&name, "depot-shift-change", (80, 24), no_color, &whole);
    }
    let findings = [whole[0], whole[1], ("i", "tow-3 has no possible crew")];
    capture(
        "findings-80x24-no-color",
        "depot-shift-change",
        (80, 24),
        true,
        &findings,
    );
}
