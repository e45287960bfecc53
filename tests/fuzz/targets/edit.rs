//! Any line as an edit: read or refused; printed and read again it is the same; applied, the
//! text says what the timetable holds, and undo brings the bytes back.
#![no_main]

use fewest::clock::Instant;
use fewest::document;
use fewest::edit::{Context, apply, parse, print};
use libfuzzer_sys::fuzz_target;

const TIMETABLE: &str = include_str!("../../cases/valid/everything.toml");

fuzz_target!(|line: &str| {
    let read = document::read("fuzz", TIMETABLE.as_bytes()).unwrap();
    let (mut timetable, mut document) = (read.timetable, read.document);
    let mut patches = Vec::new();
    for line in line.lines().take(6) {
        let context = Context { timetable: &timetable, now: Instant(1_799_000_000) };
        let Ok(edit) = parse(line, context) else { continue };
        let printed = print(&edit, timetable.settings.zone);
        assert_eq!(parse(&printed, context).as_ref(), Ok(&edit), "{printed}");
        let before = timetable.clone();
        if let Ok(touched) = apply(&mut timetable, &edit) {
            patches.extend(document.follow(&before, &timetable, &touched));
            let again = document::read("again", &document.bytes()).unwrap();
            assert!(again.timetable == timetable, "{printed}\n{}", document.text());
            assert_eq!(again.document, document, "{printed}");
        } else {
            assert!(timetable == before);
        }
    }
    document.take_back(&patches);
    assert_eq!(document.text(), TIMETABLE);
});
