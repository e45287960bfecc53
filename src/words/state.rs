//! The state of knowledge in words.

use crate::audit::{Knowledge, Receipt};
use crate::claim::Answer;
use crate::clock::{Instant, Resolved, Span, Zone};
use crate::overlap::Load;
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

/// `1 edit`, `2 edits`: a word of our own with a plain plural.
pub fn count_words(count: usize, word: &str) -> String {
    format!("{count} {word}{}", if count == 1 { "" } else { "s" })
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

/// What relocates against the earlier plan, and what the other choice would come to; `None`
/// when nothing relocates and there is no choice.
pub fn changes(answer: &Answer, receipt: &Receipt, noun: &Noun) -> Option<String> {
    let found = receipt.changes()?;
    let other = answer.changes.as_ref().and_then(|changes| changes.other);
    let mut said = match (found.relocated(), found.fewest()) {
        (0, _) if other.is_none() => return None,
        (count, true) => format!("{count} relocated (fewest)"),
        (count, false) => format!("{count} relocated (at least {})", found.floor()),
    };
    if let Some((in_use, relocated)) = other {
        let here = receipt.in_use();
        let more = count_of(in_use.abs_diff(here), noun);
        match in_use > here {
            true => said.push_str(&format!(", {relocated} with {more} more")),
            false => said.push_str(&format!(", {relocated} with {more} fewer")),
        }
    }
    Some(said)
}

/// What the other choice would come to, as a sentence, where fewest resources and fewest
/// changes pull apart.
pub fn other_choice(answer: &Answer, receipt: &Receipt, noun: &Noun) -> Option<String> {
    let (in_use, relocated) = answer.changes.as_ref()?.other?;
    let here = receipt.in_use();
    let more = count_of(in_use.abs_diff(here), noun);
    Some(match in_use > here {
        true => format!("with {more} more only {relocated} would relocate"),
        false => format!("{more} fewer would relocate {relocated}"),
    })
}

/// The name of a state in the contract.
pub fn state_name(knowledge: Knowledge) -> &'static str {
    match knowledge {
        Knowledge::Proved(_) => "proved",
        Knowledge::Between { .. } => "between",
        Knowledge::Impossible { .. } => "impossible",
    }
}

/// The largest clique and when it is reached; one that is larger than any load has no
/// moment of its own.
pub fn peaks(clique: usize, load: &Load, zone: Zone) -> String {
    let peaks = load.peaks();
    let Some(first) = peaks.first() else {
        return "nothing overlaps".into();
    };
    let clique = match clique > load.most {
        true => format!("{clique} over different times, {} at once", load.most),
        false => clique.to_string(),
    };
    let more = match peaks.len() {
        1 => String::new(),
        count => format!(", first of {count} peaks"),
    };
    format!("clique {clique}: {}{more}", span(first.span, zone))
}

/// `Mon 11 Jan 09:00-11:00`, with the day of the end when that is another, and offsets where
/// a time occurs twice.
pub fn span(span: Span, zone: Zone) -> String {
    let doubled = |at: Instant| matches!(zone.resolve(zone.civil(at)), Resolved::Twice { .. });
    let offset = |at: Instant| {
        let text = zone.rfc3339(at);
        if doubled(at) {
            text[text.len() - 6..].to_string()
        } else {
            String::new()
        }
    };
    let day = |at: Instant| zone.civil(at).format("%a %d %b").to_string();
    let (start, end) = (span.start, span.end);
    let end_day = if zone.date(start) == zone.date(end) {
        String::new()
    } else {
        format!("{} ", day(end))
    };
    format!(
        "{} {}{}-{end_day}{}{}",
        day(start),
        zone.time(start),
        offset(start),
        zone.time(end),
        offset(end)
    )
}

/// What to say of a moment that the clock shows twice.
pub fn doubled(at: Instant, zone: Zone) -> Option<String> {
    match zone.resolve(zone.civil(at)) {
        Resolved::Twice { .. } => Some(format!(
            "{} occurs twice because the clock goes back; {} was taken",
            zone.time(at),
            zone.print(at)
        )),
        _ => None,
    }
}
