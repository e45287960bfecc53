//! Why not fewer, and why not everything, in sentences that can be said aloud.

use super::{count_of, list, span};
use crate::claim::{Ground, NoPlace, Why};
use crate::clock::{Instant, Zone};
use crate::text::clean;
use crate::timetable::{Piece, Prefer, Timetable};
use std::collections::BTreeMap;
use std::sync::Arc;

/// What a piece is called in a sentence: what stays together goes by the name of its request.
fn spoken(timetable: &Timetable, id: &str) -> String {
    match timetable.piece(id) {
        Some(piece) if piece.together() => piece.request.id.to_string(),
        _ => id.to_string(),
    }
}

/// A list of pieces as they are called.
fn pieces(timetable: &Timetable, ids: &[Arc<str>], most: usize) -> String {
    let mut names: Vec<String> = ids.iter().map(|id| spoken(timetable, id)).collect();
    names.dedup();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    list(&names, most)
}

/// Names in a sentence before the rest is counted.
const MOST_NAMES: usize = 9;

/// Pieces beside those that run at once that are told one by one.
const FEW: usize = 3;

/// A ground as an edit, or as the key that states it.
pub fn ground(ground: &Ground, zone: Zone) -> String {
    match ground {
        Ground::Pin { piece, on } => format!("pin {piece} on {on}"),
        Ground::Begun { piece, on } => format!("settled_until: {piece} has begun on {on}"),
        Ground::Together { request } => format!("{request} together"),
        Ground::Only { request } => format!("{request} only"),
        Ground::Never { request, name } => format!("{request} never {name}"),
        Ground::Need { request, need } => format!("{request} needs {}", clean(need)),
        Ground::Size { request, size } => format!("{request} size {size}"),
        Ground::Closure { resource, span } => format!(
            "close {resource} from {} to {}",
            zone.print(span.start),
            zone.print(span.end)
        ),
        Ground::Opening { resource } => format!("{resource} open"),
    }
}

/// Grounds in a sentence: the same sort together.
fn grounds(timetable: &Timetable, grounds: &[Ground]) -> Vec<String> {
    let mut pins: Vec<String> = Vec::new();
    let mut sorts: BTreeMap<(u8, String), Vec<&str>> = BTreeMap::new();
    for ground in grounds {
        let mut add =
            |order: u8, sort: String, name| sorts.entry((order, sort)).or_default().push(name);
        match ground {
            Ground::Pin { piece, on } => pins.push(format!("{piece} is pinned on {on}")),
            Ground::Begun { piece, on } => pins.push(format!("{piece} has begun on {on}")),
            Ground::Need { request, need } => {
                add(0, format!("# {} {}", "needs", clean(need)), request)
            }
            Ground::Size { request, .. } => add(1, "the size of".into(), request),
            Ground::Together { request } => add(6, "the dates staying together of".into(), request),
            Ground::Only { request } => add(2, "what is allowed to".into(), request),
            Ground::Never { request, .. } => add(3, "what is ruled out for".into(), request),
            Ground::Closure { resource, .. } => add(4, "the closure of".into(), resource),
            Ground::Opening { resource } => add(5, "the opening times of".into(), resource),
        }
    }
    let sorted = sorts.into_iter().map(|((_, sort), names)| {
        let all = names.len() == timetable.resources().all.len() && names.len() > 3;
        let names = match all && sort.starts_with("the ") {
            true => format!("all {}", count_of(names.len(), &timetable.settings.noun)),
            false => list(&names, MOST_NAMES),
        };
        match sort.strip_prefix("# ") {
            Some(rest) => format!(
                "{names} {}",
                if names.contains(" and ") {
                    rest.replacen("needs", "need", 1)
                } else {
                    rest.into()
                }
            ),
            None => format!("{sort} {names}"),
        }
    });
    pins.into_iter().chain(sorted).collect()
}

/// The whole answer in a few sentences.
pub fn why(timetable: &Timetable, why: &Why) -> String {
    // What has no place matters most.
    let unplaced = why
        .unplaced
        .iter()
        .map(|unplaced| no_place(timetable, unplaced));
    let mut said: Vec<String> = unplaced.collect();
    said.push(floor(timetable, why));
    let reasons = grounds(timetable, &why.grounds);
    if !reasons.is_empty() {
        let reasons: Vec<&str> = reasons.iter().map(String::as_str).collect();
        said.push(format!("That rests on this: {}.", reasons.join("; ")));
    }
    said.extend(prices(timetable, why));
    said.join(" ")
}

fn floor(timetable: &Timetable, why: &Why) -> String {
    let noun = &timetable.settings.noun;
    let (one, floor) = (clean(&noun.one), count_of(why.floor, noun));
    let names = pieces(timetable, &why.pieces, MOST_NAMES);
    let open = match why.count.cmp(&why.floor) {
        std::cmp::Ordering::Greater
            if why.unplaced.is_empty() && timetable.settings.prefer == Prefer::Changes =>
        {
            format!(
                " (The plan uses {}, because fewest changes come first.)",
                why.count
            )
        }
        std::cmp::Ordering::Greater if why.unplaced.is_empty() => format!(
            " (The plan uses {}; that fewer cannot do is not proved.)",
            why.count
        ),
        _ => String::new(),
    };
    if why.floor == 0 {
        return "Nothing has to be placed.".into();
    }
    if why.floor <= why.clique {
        let nothing = match why.grounds.is_empty() {
            true => " Nothing else that is stated adds to that.",
            false => "",
        };
        return format!(
            "It takes {floor} because so many overlap one another, and no two of those can share a {one}: {names}.{nothing}{open}"
        );
    }
    let ground = match why.by {
        "incompatible" => apart(timetable, why),
        "prices" => format!(
            "even if every {one} took whatever suits it best, fewer could not take all of {names}"
        ),
        "cases" => format!("every way to put {names} on fewer fails"),
        _ => format!("any two of {names} overlap somewhere"),
    };
    format!(
        "It takes {floor}, although no more than {} overlap one another: {ground}.{open}",
        why.clique
    )
}

/// Why no two of some pieces can share: who runs at once, and why the others have to stay
/// apart from them.
fn apart(timetable: &Timetable, why: &Why) -> String {
    let one = clean(&timetable.settings.noun.one);
    let zone = timetable.settings.zone;
    let pieces: Vec<Piece> = why
        .pieces
        .iter()
        .filter_map(|id| timetable.piece(id))
        .collect();
    let names = |pieces: &[&Piece], most: usize| {
        let ids: Vec<Arc<str>> = pieces.iter().map(|piece| Arc::clone(&piece.id)).collect();
        self::pieces(timetable, &ids, most)
    };
    // Those that run at one moment, then those of the rest, and so on.
    let mut groups: Vec<(Instant, Vec<&Piece>)> = Vec::new();
    let mut rest: Vec<&Piece> = pieces.iter().collect();
    while !rest.is_empty() {
        let running = |at: Instant| rest.iter().filter(move |piece| piece.span.contains(at));
        let moments = rest.iter().map(|piece| piece.span.start);
        let Some(at) = moments.max_by_key(|at| (running(*at).count(), std::cmp::Reverse(*at)))
        else {
            break;
        };
        let group: Vec<&Piece> = running(at).copied().collect();
        rest.retain(|piece| !piece.span.contains(at));
        groups.push((at, group));
    }
    // The largest first tells one that stands out; several are told in order of time.
    if groups.len() > 1 && pieces.len() - groups[0].1.len() > FEW {
        groups.sort_by_key(|(at, _)| *at);
    }
    let all: Vec<&Piece> = pieces.iter().collect();
    let when = |at: Instant| zone.civil(at).format("%a %d %b at %H:%M").to_string();
    match groups.as_slice() {
        [(at, first), others @ ..]
            if first.len() > 1 && !others.is_empty() && all.len() - first.len() <= FEW =>
        {
            let others = others.iter().flat_map(|(_, group)| group).map(|piece| {
                format!(
                    "{} runs at another time ({}), but may only use {}; no {one} that it may use can take any of those {} as well",
                    spoken(timetable, &piece.id),
                    span(piece.span, zone),
                    may_use(timetable, piece),
                    first.len()
                )
            });
            let others: Vec<String> = others.collect();
            format!(
                "no two of the {} pieces counted can share a {one}. {} run at once on {}: {}. {}",
                all.len(),
                first.len(),
                when(*at),
                names(first, MOST_NAMES),
                others.join("; ")
            )
        }
        [_, _, ..] if groups.len() <= 6 => {
            let said = groups.iter().map(|(at, group)| {
                format!("{} on {} ({})", group.len(), when(*at), names(group, 3))
            });
            let said: Vec<String> = said.collect();
            format!(
                "they run in groups, {}, and no {one} that may take one of a group may also take one of another",
                said.join(", ")
            )
        }
        _ => format!(
            "no two of these can share a {one}, by time or by what they may use: {}",
            names(&all, MOST_NAMES)
        ),
    }
}

/// What a piece may use.
fn may_use(timetable: &Timetable, piece: &Piece) -> String {
    let item = timetable.with_what_stays(&piece.id);
    let all = timetable.resources().all.iter();
    let may: Vec<&str> = all
        .filter(|resource| crate::timetable::all_may_use(&item, resource).is_ok())
        .map(|resource| &*resource.id)
        .collect();
    list(&may, 4)
}

fn prices(timetable: &Timetable, why: &Why) -> Option<String> {
    let noun = &timetable.settings.noun;
    let saving: Vec<String> = why
        .prices
        .iter()
        .filter(|price| price.saves > 0)
        .map(|price| {
            format!(
                "without the pin of {} {} would do",
                price.pin,
                count_of(why.count - price.saves, noun)
            )
        })
        .collect();
    let together = why.together.filter(|(saves, _)| {
        let single = why.prices.iter().map(|price| price.saves).max();
        *saves > single.unwrap_or(0)
    });
    let together = together.map(|(saves, _)| {
        format!(
            "without all of these pins together {} would do",
            count_of(why.count - saves, noun)
        )
    });
    let said: Vec<String> = saving.into_iter().chain(together).collect();
    if said.is_empty() {
        let none = !why.prices.is_empty() && why.prices.iter().all(|price| price.proved);
        return none.then(|| "No single one of these pins costs anything by itself.".into());
    }
    let mut text = said.join("; ");
    if let Some(first) = text.get(..1) {
        let upper = first.to_uppercase();
        text.replace_range(..1, &upper);
    }
    Some(format!("{text}."))
}

/// Why something has no place.
pub fn no_place(timetable: &Timetable, unplaced: &NoPlace) -> String {
    let noun = &timetable.settings.noun;
    let mut name = pieces(timetable, &unplaced.pieces, 3);
    if unplaced.pieces.len() > 1 {
        name.push_str(&format!(" ({} dates together)", unplaced.pieces.len()));
    }
    let has = "has";
    let set = pieces(timetable, &unplaced.set, MOST_NAMES);
    let reasons = grounds(timetable, &unplaced.grounds);
    let rests = match reasons.is_empty() {
        true => String::new(),
        false => format!(" That rests on this: {}.", reasons.join("; ")),
    };
    let resources: Vec<&str> = unplaced.resources.iter().map(|id| &**id).collect();
    let ground = match (unplaced.at, &unplaced.cases, resources.as_slice()) {
        (Some(_), _, []) => {
            // Nothing can take it, whatever the others do.
            let because = unplaced
                .pieces
                .first()
                .map(|id| super::reason::no_resource(timetable, &timetable.with_what_stays(id)));
            because.unwrap_or_default()
        }
        (Some(at), ..) => {
            let zone = timetable.settings.zone;
            let when = zone.civil(at).format("%a %d %b at %H:%M");
            format!(
                "{} run on {when}, and only {} may take any of them ({})",
                set,
                count_of(resources.len(), noun),
                list(&resources, 6)
            )
        }
        (None, Some(cases), _) => format!(
            "however {} are put, one of them is left over ({} looked at)",
            set,
            super::count_words(cases.count(), "case")
        ),
        (None, None, _) => return format!("{name} {has} no place; no short reason was found."),
    };
    format!("{name} {has} no place: {ground}.{rests}")
}
