//! Reasons in words.

use super::{count_of, list};
use crate::claim::{Reason, Unplaced};
use crate::text::clean;
use crate::timetable::{Finding, FindingKind, Piece, Timetable, Unfit, may_use};
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
            let piece = timetable.request(&unplaced.piece).map(Piece::of_request);
            piece.map_or_else(
                || "it is unknown".into(),
                |piece| no_resource(timetable, &piece),
            )
        }
    }
}

/// Why no resource at all may take a piece: the reasons, counted.
fn no_resource(timetable: &Timetable, piece: &Piece) -> String {
    let noun = &timetable.settings.noun;
    let resources = timetable.resources();
    if let Some(pin) = &piece.pin {
        let because = resources
            .get(pin)
            .and_then(|resource| may_use(piece, resource).err());
        return match because {
            Some(because) => format!("it is pinned on {pin}, but {}", unfit(&because)),
            None => format!("it must stay on {pin}"),
        };
    }
    let mut reasons: BTreeMap<String, Vec<&str>> = BTreeMap::new();
    for resource in &resources.all {
        if let Err(because) = may_use(piece, resource) {
            let short = match because {
                Unfit::TooSmall { size, .. } => format!("with fewer than {size} seats"),
                Unfit::Lacks(need) => format!("without {}", clean(&need)),
                Unfit::Closed(_) => "closed then".into(),
                Unfit::NotOpen => "not open then".into(),
                Unfit::NotInOnly | Unfit::InNever | Unfit::Pinned(_) => {
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
        FindingKind::NoResource => {
            let known = timetable.request(piece).map(Piece::of_request);
            let because = known
                .map(|piece| no_resource(timetable, &piece))
                .unwrap_or_default();
            format!(
                "{piece} has no possible {}: {because}",
                clean(&timetable.settings.noun.one)
            )
        }
    }
}
