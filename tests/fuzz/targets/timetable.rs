//! Any bytes as a timetable file: read or refused; what is read is kept byte by byte, and
//! solving it gives an answer that passes audit.
#![no_main]

use fewest::document;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    match document::read("fuzz", bytes) {
        Ok(read) => {
            assert_eq!(read.document.bytes(), bytes);
            let _ = fewest::timetable::findings(&read.timetable);
            if read.timetable.requests.len() < 50 && read.timetable.resources().all.len() < 50 {
                let job = fewest::desk::Job {
                    generation: 0,
                    timetable: read.timetable,
                    reference: None,
                    issued: None,
                    floor: None,
                    begun: Default::default(),
                };
                let budget = fewest::engine::Budget { steps: Some(500), ..Default::default() };
                job.run(budget, &fewest::engine::Never, &mut |_| {}).unwrap();
            }
        }
        Err(mistakes) => assert!(mistakes.to_string().chars().all(|c| c == '\n' || !c.is_control())),
    }
});
