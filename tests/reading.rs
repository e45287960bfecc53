//! Files that can be read, and files that cannot: `cases/valid` opens, `cases/invalid` has one
//! mistake each with the whole message beside it (`NAME.says`).

use crate::tools::file;
use fewest::document;
use proptest::prelude::*;
use std::path::PathBuf;

fn cases(folder: &str) -> Vec<PathBuf> {
    let mut paths: Vec<PathBuf> = std::fs::read_dir(file(folder))
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| {
            path.extension()
                .is_some_and(|extension| extension == "toml")
        })
        .collect();
    paths.sort();
    assert!(!paths.is_empty(), "{folder} has cases");
    paths
}

#[test]
fn invalid_files_say_what_is_wrong_and_what_to_do() {
    let accept = std::env::var_os("FEWEST_ACCEPT").is_some();
    for path in cases("tests/cases/invalid") {
        let name = path.file_name().unwrap().to_string_lossy().into_owned();
        let Err(mistakes) = document::read(&name, &std::fs::read(&path).unwrap()) else {
            panic!("{name} should not be read");
        };
        let says = path.with_extension("says");
        if accept {
            std::fs::write(&says, mistakes.to_string()).unwrap();
        }
        let expected = std::fs::read_to_string(&says).unwrap_or_default();
        assert_eq!(
            mistakes.to_string(),
            expected,
            "{name}; FEWEST_ACCEPT=1 takes the new wording"
        );
    }
}

#[test]
fn valid_files_open() {
    for path in cases("tests/cases/valid") {
        let name = path.file_name().unwrap().to_string_lossy().into_owned();
        let bytes = std::fs::read(&path).unwrap();
        let read = document::read(&name, &bytes).unwrap_or_else(|mistakes| panic!("{mistakes}"));
        assert_eq!(read.document.bytes(), bytes, "{name} is kept byte by byte");
    }
}

#[test]
fn what_is_too_large_or_no_text_is_refused() {
    let large = vec![b'#'; (document::MOST_BYTES + 1) as usize];
    let said = document::read("large.toml", &large)
        .unwrap_err()
        .to_string();
    assert_eq!(
        said,
        "large.toml:1:1: this file is larger than 64 MiB; split it into several timetables\n"
    );
    let said = document::read("latin.toml", b"[timetable]\ntitle = \"caf\xe9\"\n")
        .unwrap_err()
        .to_string();
    assert!(
        said.starts_with("latin.toml:2:13: this byte is not UTF-8"),
        "{said}"
    );
}

proptest! {
    /// Bounded mutations of a real file: read or refused, never a panic, and every message
    /// is free of control characters.
    #[test]
    fn mutated_files_never_break_the_reader(
        cuts in prop::collection::vec((0usize..24_000, 0usize..40, "[\\x00-\\x7f]{0,6}"), 1..6)
    ) {
        let mut text = std::fs::read_to_string(file("sample-timetables/three-day-event.toml")).unwrap();
        for (at, length, new) in cuts {
            let at = (0..=at.min(text.len())).rev().find(|at| text.is_char_boundary(*at)).unwrap_or(0);
            let end = (at + length).min(text.len());
            let end = (end..=text.len()).find(|end| text.is_char_boundary(*end)).unwrap_or(text.len());
            text.replace_range(at..end, &new);
        }
        if let Err(mistakes) = document::read("mutated\u{1b}.toml", text.as_bytes()) {
            prop_assert!(mistakes.to_string().chars().all(|c| !c.is_control() || c == '\n'));
            prop_assert!(!mistakes.list.is_empty());
        }
    }
}

proptest! {
    /// Any CSV, and bounded mutations of a real one: taken in or refused; what is taken in is
    /// a timetable that can be read.
    #[test]
    fn mutated_csv_never_breaks_the_intake(
        cuts in prop::collection::vec((0usize..400, 0usize..20, "[\\x00-\\x7f]{0,5}"), 0..6),
        wild in prop::option::of("\\PC{0,80}"),
    ) {
        use fewest::intake::{Columns, read_csv, set_aside_csv, timetable_text};
        let mut text = wild.unwrap_or_default();
        if text.is_empty() {
            for row in 0..6 {
                text.push_str(&format!("a{row},Title {row},2027-01-11 {:02}:00,2027-01-11 {:02}:30,{row},x;y,\"Hall {row}, big\"\n", 8 + row, 9 + row));
            }
        }
        for (at, length, new) in cuts {
            let at = (0..=at.min(text.len())).rev().find(|at| text.is_char_boundary(*at)).unwrap_or(0);
            let end = (at + length).min(text.len());
            let end = (end..=text.len()).find(|end| text.is_char_boundary(*end)).unwrap_or(text.len());
            text.replace_range(at..end, &new);
        }
        let named = |name: &str| Some(name.to_string());
        let columns = Columns {
            id: vec!["id".into()], title: named("t"), start: "s".into(), end: named("e"), length: None, size: named("n"),
            people: named("p"), resource: named("r"), day: None, minutes_from: None, only: Vec::new(),
            blank: vec!["-".into()], as_issued: false, separator: b',',
            zone: fewest::clock::Zone::named("Europe/Lisbon").unwrap(),
        };
        if let Ok(intake) = read_csv(format!("id,t,s,e,n,p,r\n{text}").as_bytes(), &columns) {
            let written = timetable_text(&intake, "csv", None, columns.zone);
            if let Err(mistakes) = document::read("csv", written.as_bytes()) {
                prop_assert!(false, "{}", mistakes);
            }
            let aside = set_aside_csv(&intake).unwrap();
            prop_assert!(!aside.windows(2).any(|pair| pair[0] == b',' && b"=+@".contains(&pair[1])));
        }
    }
}
