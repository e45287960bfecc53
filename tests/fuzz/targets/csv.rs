//! Any bytes as CSV: taken in or refused; what is taken in is a timetable that can be read.
#![no_main]

use fewest::clock::Zone;
use fewest::document;
use fewest::intake::{Columns, read_csv, set_aside_csv, timetable_text};
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let named = |name: &str| Some(name.to_string());
    let columns = Columns {
        id: vec!["id".into()],
        title: named("t"),
        start: "s".into(),
        end: named("e"),
        length: None,
        size: named("n"),
        people: named("p"),
        resource: named("r"),
        day: None,
        minutes_from: None,
        only: Vec::new(),
        blank: vec!["-".into()],
        as_issued: false,
        separator: b',',
        zone: Zone::named("Europe/Lisbon").unwrap(),
    };
    // The heading is given, so that the rows are what is tried.
    let text = [b"id,t,s,e,n,p,r\n", bytes].concat();
    if let Ok(intake) = read_csv(&text, &columns) {
        let text = timetable_text(&intake, "fuzz", None, columns.zone);
        if let Err(mistakes) = document::read("fuzz", text.as_bytes()) {
            panic!("{mistakes}");
        }
        let aside = set_aside_csv(&intake).unwrap();
        assert!(aside.iter().all(|b| !matches!(b, 0..=8 | 11..=12 | 14..=31)));
    }
});
