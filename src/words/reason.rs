//! Reasons in words.

use super::{count_of, list};
use crate::claim::{Reason, Unplaced};
use crate::engine::who::{Choice, Verdict};
use crate::text::clean;
use crate::timetable::{Finding, FindingKind, Piece, Timetable, Unfit, all_may_use};
use std::collections::BTreeMap;

/// Why one resource cannot take a piece.
pub fn unfit(unfit: &Unfit) -> String {
    match unfit {
        Unfit::Pinned(pin) => format!("it is pinned on {pin}"),
        Unfit::NotInOnly => "it is not among those allowed".into(),
        Unfit::InNever => "it is ruled out".into(),
        Unfit::TooSmall { seats, size } => format!("it seats {seats}, {size} are needed"),
        Unfit::Lacks(need) => format!("it lacks {}", clean(need)),
        Unfit::Closed(Some(because)) => format!("it is closed then ({})", clean(because)),
        Unfit::Closed(None) => "it is closed then".into(),
        Unfit::NotOpen => "it is not open then".into(),
        Unfit::Itself(one, other) => {
            format!("{one} and {other} must stay together and overlap on it")
        }
        Unfit::Other(piece, because) => format!("for {piece} {}", self::unfit(because)),
    }
}

/// What holds of a resource for a piece.
pub fn choice(choice: &Choice) -> String {
    match &choice.verdict {
        Verdict::Here => "it is there now".into(),
        Verdict::Free => "free".into(),
        Verdict::FreeIf(moves) => {
            let moves: Vec<String> = moves
                .iter()
                .map(|(piece, to)| format!("{piece} goes to {to}"))
                .collect();
            let moves: Vec<&str> = moves.iter().map(String::as_str).collect();
            format!("free if {}", list(&moves, 4))
        }
        Verdict::Taken(by) => {
            let names: Vec<&str> = by.iter().map(|id| &**id).collect();
            let (has, they) = match names.len() {
                1 => ("has", "it has"),
                _ => ("have", "they have"),
            };
            format!(
                "taken: {} {has} it, and {they} no free place elsewhere",
                list(&names, 3)
            )
        }
        Verdict::Cannot(because) => format!("cannot, because {}", unfit(because)),
    }
}

/// Why a piece has no place, in one sentence.
pub fn unplaced(timetable: &Timetable, unplaced: &Unplaced) -> String {
    let noun = &timetable.settings.noun;
    match &unplaced.because {
        Reason::Said(text) => clean(text).into_owned(),
        Reason::PinCannotServe(pin) => format!("its pin {pin} cannot serve it"),
        Reason::PinTaken { pin, by } => format!("only {pin} may take it, and {by} has it then"),
        Reason::AllTaken => format!("every {} that may take it is taken then", clean(&noun.one)),
        Reason::NoResource => {
            let item = timetable.with_what_stays(&unplaced.piece);
            match item.is_empty() {
                true => "it is unknown".into(),
                false => no_resource(timetable, &item),
            }
        }
    }
}

/// Why no resource at all may take a piece (or pieces that stay together): the reasons,
/// counted.
pub(super) fn no_resource(timetable: &Timetable, item: &[Piece]) -> String {
    let noun = &timetable.settings.noun;
    let resources = timetable.resources();
    if let Some(pin) = item.iter().find_map(|piece| piece.pin.as_ref()) {
        let because = resources
            .get(pin)
            .and_then(|resource| all_may_use(item, resource).err());
        return match because {
            Some(because) => format!("it is pinned on {pin}, but {}", unfit(&because)),
            None => format!("it must stay on {pin}"),
        };
    }
    let mut reasons: BTreeMap<String, Vec<&str>> = BTreeMap::new();
    for resource in &resources.all {
        if let Err(because) = all_may_use(item, resource) {
            // Of pieces that stay together one is enough to rule it out.
            let (because, when) = match because {
                Unfit::Other(piece, because) => {
                    let date = piece
                        .split_once('@')
                        .map_or("", |(_, date)| date)
                        .to_string();
                    (*because, format!(" on {date}"))
                }
                because if item.len() > 1 => {
                    let date = item[0].id.split_once('@').map_or("", |(_, date)| date);
                    (because, format!(" on {date}"))
                }
                because => (because, " then".into()),
            };
            let short = match because {
                Unfit::TooSmall { size, .. } => format!("with fewer than {size} seats"),
                Unfit::Lacks(need) => format!("without {}", clean(&need)),
                Unfit::Closed(_) => format!("closed{when}"),
                Unfit::NotOpen => format!("not open{when}"),
                Unfit::Itself(..) => "would have to take two of its dates at once".into(),
                Unfit::Other(..) | Unfit::NotInOnly | Unfit::InNever | Unfit::Pinned(_) => {
                    "ruled out by the request".into()
                }
            };
            reasons.entry(short).or_default().push(&resource.id);
        }
    }
    // The fewest first, by name: they are the ones that nearly could.
    let mut counted: Vec<(String, Vec<&str>)> = reasons.into_iter().collect();
    counted.sort_by_key(|(_, ids)| ids.len());
    let said: Vec<String> = counted
        .into_iter()
        .map(|(text, ids)| match ids.len() {
            ..=3 => format!("{} {text}", list(&ids, 3)),
            count => format!("{count} {text}"),
        })
        .collect();
    let said: Vec<&str> = said.iter().map(String::as_str).collect();
    if said.is_empty() {
        return format!("there is no {}", clean(&noun.one));
    }
    format!(
        "none of {} can take it: {}",
        count_of(resources.all.len(), noun),
        list(&said, 4)
    )
}

/// A finding as a sentence.
pub fn finding(timetable: &Timetable, finding: &Finding) -> String {
    let piece = &finding.piece;
    match &finding.kind {
        FindingKind::PinCannotServe { pin, because } => {
            format!("{piece} is pinned on {pin}, but {}", unfit(because))
        }
        FindingKind::PinsOverlap { pin, other } => {
            format!("{piece} and {other} are both pinned on {pin} and overlap")
        }
        FindingKind::PinsApart { pin, other } => format!(
            "{piece} is pinned on {pin}, but must stay together with {other}, which is pinned elsewhere"
        ),
        FindingKind::NoResource => {
            let because = no_resource(timetable, &timetable.with_what_stays(piece));
            format!(
                "{piece} has no possible {}: {because}",
                clean(&timetable.settings.noun.one)
            )
        }
    }
}
