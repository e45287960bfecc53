//! Any bytes as a journal: read or refused, and what is good is a beginning of it.
#![no_main]

use fewest::store::journal::Journal;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    if let Some(journal) = Journal::read(bytes) {
        assert!(journal.good <= bytes.len() as u64);
        let again = Journal::read(&bytes[..journal.good as usize]).unwrap();
        assert_eq!(again.records, journal.records);
        assert_eq!(again.rest, "");
    }
});
