//! `fewest apply`.

use super::{Outcome, Search, count::exit_code, notes};
use crate::clock::Instant;
use crate::desk::{Access, Desk, whoami};
use crate::edit::Change;
use crate::store;
use crate::text::clean;
use crate::words::{self, Progress};
use std::io::Read;
use std::path::Path;

/// Scripts larger than this are refused.
const MOST_BYTES: u64 = 16 << 20;

pub(super) fn apply(file: &Path, script: &Path, search: Search) -> Outcome {
    let name = clean(&script.display().to_string()).into_owned();
    let bytes = if script == Path::new("-") {
        let mut bytes = Vec::new();
        std::io::stdin()
            .take(MOST_BYTES)
            .read_to_end(&mut bytes)
            .map(|_| bytes)
    } else {
        store::read_bounded(script, MOST_BYTES)
    };
    let bytes = match bytes {
        Ok(bytes) => bytes,
        Err(error) => return Outcome::bad(format!("{name}: {error}")),
    };
    let Ok(text) = String::from_utf8(bytes) else {
        return Outcome::bad(format!("{name}: this is not UTF-8"));
    };
    let files = std::sync::Arc::new(store::RealFiles);
    let (mut desk, said) = match Desk::open_to_edit(file, &whoami(), files) {
        Ok(opened) => opened,
        Err(trouble) => return Outcome::bad(trouble),
    };
    if let Access::Theirs(who) = desk.access() {
        return Outcome::bad(format!("refused: {who} has it open; nothing was changed"));
    }
    let mut mentioned: String = said.iter().map(|line| format!("{line}\n")).collect();
    let mut taken_in = false;
    if let Some(leftover) = desk.leftover() {
        let count = words::count_words(leftover.edits, "edit");
        if search.unsaved && leftover.foreign {
            return Outcome::bad(format!(
                "{count} in a journal beside the file are for another version of it; open it on the screen; nothing was changed"
            ));
        }
        if search.unsaved {
            let (taken, all) = desk.take_in_unsaved();
            if taken < all {
                return Outcome::bad(
                    "not all unsaved edits can be taken in; open it on the screen; nothing was changed",
                );
            }
            taken_in = true;
            mentioned.push_str(&format!("{count} taken in that were not saved\n"));
        } else {
            mentioned.push_str(&format!(
                "{count} not saved in a journal beside the file were left out; the screen will offer them on the new version\n"
            ));
        }
    }
    let now = Instant(chrono::Utc::now().timestamp());
    let mut made = 0;
    for (at, line) in text.lines().enumerate() {
        let line = line.trim();
        if line.is_empty() || line.starts_with('#') {
            continue;
        }
        let nothing = "nothing was changed";
        let edit = match desk.parse(line, now) {
            Ok(edit) => edit,
            Err(misread) => {
                return Outcome::bad(format!(
                    "{name}:{}:{}: {}; {nothing}",
                    at + 1,
                    misread.column,
                    misread.message
                ));
            }
        };
        // A swap exchanges placements, so there must be some.
        if matches!(edit.what, Change::Swap(..)) && !desk.is_current() {
            match search.run(desk.job()) {
                Ok(settled) => _ = desk.receive(settled),
                Err(outcome) => return outcome,
            }
        }
        if let Err(refused) = desk.make(vec![edit]) {
            return Outcome::bad(format!("{name}:{}:1: {refused}; {nothing}", at + 1));
        }
        made += 1;
    }
    let settled = match search.run(desk.job()) {
        Ok(settled) => settled,
        Err(outcome) => return outcome,
    };
    desk.receive(std::sync::Arc::clone(&settled));
    if let Err(trouble) = desk.save(None, now, &mut |_| {}) {
        return Outcome::bad(trouble);
    }
    if taken_in {
        desk.forget_leftover();
        desk.close_journal();
    }
    let resources = desk.timetable().resources().all.len();
    let state = words::state(
        settled.receipt(),
        resources,
        &desk.timetable().settings.noun,
        Progress::AtRest,
    );
    let edits = if made == 1 { "edit" } else { "edits" };
    Outcome {
        out: format!("{made} {edits} made and saved\n{state}\n"),
        err: mentioned + &notes(&desk, file),
        code: exit_code(&settled),
    }
}
