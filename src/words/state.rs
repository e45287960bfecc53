//! The state of knowledge in words.

use crate::audit::{Knowledge, Receipt};
use crate::clock::Zone;
use crate::overlap::Peak;
use crate::text::clean;
use crate::timetable::Noun;

/// What the search is doing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Progress {
    /// Still at it.
    Searching,
    /// At rest: done, out of time, or told to stop.
    AtRest,
}

/// `9 rooms`, in the file's own noun.
pub fn count_of(count: usize, noun: &Noun) -> String {
    let word = if count == 1 { &noun.one } else { &noun.several };
    format!("{count} {}", clean(word))
}

/// What is known of an answer, in one line.
pub fn state(receipt: &Receipt, resources: usize, noun: &Noun, progress: Progress) -> String {
    let in_use = count_of(receipt.in_use(), noun);
    match receipt.knowledge() {
        Knowledge::Proved(proved) if proved.count() == 0 => {
            format!("nothing to place: {in_use} in use")
        }
        Knowledge::Proved(_) => format!("{in_use} in use, at least {}: proved", receipt.floor()),
        Knowledge::Between { floor, .. } => {
            let left = match receipt.unplaced() {
                0 => String::new(),
                count => format!("; {count} unplaced"),
            };
            let doing = match progress {
                Progress::Searching => "searching",
                Progress::AtRest => "not proved",
            };
            format!("{in_use} in use, at least {floor}{left}: {doing}")
        }
        Knowledge::Impossible { least, .. } => {
            let count = receipt.unplaced();
            let how = match (least, progress) {
                (true, _) => "proved least",
                (false, Progress::Searching) => "searching",
                (false, Progress::AtRest) => "not proved least",
            };
            if receipt.floor() > resources {
                let floor = receipt.floor();
                format!("needs at least {floor}, has {resources}; {count} unplaced ({how})")
            } else {
                format!("cannot all fit: {count} unplaced ({how}); {in_use} in use")
            }
        }
    }
}

/// The name of a state in the contract.
pub fn state_name(knowledge: Knowledge) -> &'static str {
    match knowledge {
        Knowledge::Proved(_) => "proved",
        Knowledge::Between { .. } => "between",
        Knowledge::Impossible { .. } => "impossible",
    }
}

/// The largest clique and when it is reached.
pub fn peaks(clique: usize, peaks: &[Peak], zone: Zone) -> String {
    let Some(first) = peaks.first() else {
        return "nothing overlaps".into();
    };
    let day = zone.civil(first.span.start).format("%a %d %b");
    let more = match peaks.len() {
        1 => String::new(),
        count => format!(", first of {count} peaks"),
    };
    format!(
        "clique {clique}: {day} {}-{}{more}",
        zone.time(first.span.start),
        zone.time(first.span.end)
    )
}
