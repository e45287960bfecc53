//! Why: what is left of what is stated is enough and is needed, against brute force; the
//! samples' reasons; who can take something, against what happens when it is pinned there.

use crate::optimum::{Tiny, fewest_rooms, tiny, tiny_together};
use crate::tools::{fewest, file, out, solve, timetable};
use fewest::audit;
use fewest::claim::Ground;
use fewest::desk::why;
use fewest::engine::Never;
use fewest::engine::reasons::{explicit, plainer, without};
use fewest::engine::who::{Verdict, who_can_take};
use proptest::prelude::*;
use std::collections::BTreeSet;

/// The tiny timetable with nothing stated but these grounds, and only these requests.
fn only(tiny: &Tiny, requests: &BTreeSet<usize>, grounds: &[Ground]) -> Tiny {
    let id = |at: usize| format!("r{at}");
    let mut less = tiny.clone();
    for (at, request) in less.requests.iter_mut().enumerate() {
        let has = |wanted: &dyn Fn(&Ground) -> bool| grounds.iter().any(wanted);
        if !has(&|g| matches!(g, Ground::Size { request, .. } if **request == *id(at))) {
            request.2 = 0;
        }
        if !has(&|g| matches!(g, Ground::Need { request, .. } if **request == *id(at))) {
            request.3 = false;
        }
        let pin = |g: &Ground| match g {
            Ground::Pin { piece, .. } => piece.split('@').next() == Some(&id(at)),
            _ => false,
        };
        if !has(&pin) {
            request.4 = None;
        }
        if !has(&|g| matches!(g, Ground::Never { request, .. } if **request == *id(at))) {
            request.6 = None;
        }
    }
    if !grounds
        .iter()
        .any(|ground| matches!(ground, Ground::Closure { .. }))
    {
        less.closed = None;
    }
    let keep = |at: &usize| requests.contains(at);
    let kept: Vec<usize> = (0..less.requests.len()).filter(keep).collect();
    less.again = kept
        .iter()
        .map(|at| less.again.get(*at).copied().flatten())
        .collect();
    less.requests = kept.iter().map(|at| less.requests[*at]).collect();
    // Dates that need not stay together are requests of their own.
    for (at, request) in kept.iter().enumerate() {
        let id = id(*request);
        let stays = |g: &Ground| matches!(g, Ground::Together { request } if **request == *id);
        if !grounds.iter().any(stays)
            && let Some(again) = less.again[at].take()
        {
            let mut other = less.requests[at];
            other.0 = again;
            less.requests.push(other);
            less.again.push(None);
        }
    }
    less
}

fn requests_of(pieces: &[std::sync::Arc<str>]) -> BTreeSet<usize> {
    let number =
        |piece: &std::sync::Arc<str>| piece[1..].split('@').next().unwrap().parse().unwrap();
    pieces.iter().map(number).collect()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(500))]
    /// With nothing stated but the grounds, those pieces alone still need as many rooms, or
    /// cannot all be placed; without any one of the grounds the proof no longer holds; and
    /// what a pin costs is what brute force says.
    #[test]
    fn grounds_are_enough_and_each_is_needed(tiny in prop_oneof![tiny(), tiny_together()]) {
        let read = timetable(&tiny.text());
        let settled = solve(&read, 20_000);
        let why = why(&settled, &Never);
        if why.floor > 0 {
            let requests = requests_of(&why.pieces);
            let less = only(&tiny, &requests, &why.grounds);
            let (left, used) = less.best();
            prop_assert!(left > 0 || used >= why.floor, "{why:?}");
            let floor = plainer(&read, &settled.answer().floor, &Never);
            let floor = floor.as_ref().unwrap_or(&settled.answer().floor);
            prop_assert_eq!(floor.name(), why.by);
            let small = explicit(&read, &|request| requests.contains(&request.id[1..].parse().unwrap()));
            prop_assert!(audit::check_floor(&small, floor).is_ok());
            // All that is not a ground taken away, and then one ground as well.
            let others = fewest::engine::reasons::candidates(&small);
            let others = others.iter().filter(|ground| !why.grounds.contains(ground));
            let bare = others.fold(small.clone(), |less, ground| without(&less, ground));
            prop_assert!(audit::check_floor(&bare, floor).is_ok());
            for ground in &why.grounds {
                prop_assert!(audit::check_floor(&without(&bare, ground), floor).is_err(), "{ground:?}");
            }
        }
        let all = tiny.best();
        for price in &why.prices {
            let mut less = tiny.clone();
            less.requests[requests_of(std::slice::from_ref(&price.pin)).pop_first().unwrap()].4 = None;
            let (left, used) = less.best();
            prop_assert_eq!((left, all.0), (0, 0));
            prop_assert!(price.saves == all.1 - used || !price.proved);
        }
        let placed: BTreeSet<&str> = settled.answer().plan.placements.iter().map(|p| &*p.piece).collect();
        for unplaced in &why.unplaced {
            prop_assert!(unplaced.pieces.iter().all(|piece| !placed.contains(&**piece)));
            if unplaced.set.is_empty() {
                continue;
            }
            let less = only(&tiny, &requests_of(&unplaced.set), &unplaced.grounds);
            prop_assert!(less.best().0 > 0, "{unplaced:?}");
        }
        prop_assert_eq!(why.unplaced.is_empty(), settled.receipt().unplaced() == 0);
    }

    /// What is said of a room for a piece is so: by a plan in which the piece is put there.
    #[test]
    fn who_can_take_something_is_true(tiny in prop_oneof![tiny(), tiny_together()], which in 0usize..8) {
        let read = timetable(&tiny.text());
        let settled = solve(&read, 5_000);
        let pieces = tiny.pieces();
        prop_assume!(!pieces.is_empty());
        let piece = &pieces[which % pieces.len()];
        let request = requests_of(std::slice::from_ref(piece)).pop_first().unwrap();
        let plan = &settled.answer().plan;
        let on = |id: &str| plan.placements.iter().find(|p| *p.piece == *id).map(|p| p.resource.to_string());
        let mut free = tiny.clone();
        free.requests[request].4 = None;
        let number = |id: &str| -> usize { id[5..].parse().unwrap() };
        let choices = who_can_take(&read, plan, piece);
        prop_assert_eq!(choices.len(), tiny.rooms.len());
        for choice in choices {
            let room = number(&choice.resource);
            let others: Vec<usize> = (0..tiny.requests.len())
                .filter(|other| *other != request)
                .filter(|other| on(&free_name(&tiny, *other)).is_some_and(|r| number(&r) == room))
                .filter(|other| free.collide(request, *other, room))
                .collect();
            match choice.verdict {
                Verdict::Cannot(_) => prop_assert!(!free.usable(request, room)),
                Verdict::Here => prop_assert_eq!(on(piece), Some(choice.resource.to_string())),
                Verdict::Free => prop_assert!(free.usable(request, room) && others.is_empty()),
                Verdict::Taken(by) => {
                    prop_assert!(free.usable(request, room));
                    prop_assert!(requests_of(&by).into_iter().eq(others));
                }
                Verdict::FreeIf(moves) => {
                    prop_assert!(free.usable(request, room));
                    let moved: BTreeSet<usize> = moves.iter().map(|(id, _)| requests_of(std::slice::from_ref(id)).pop_first().unwrap()).collect();
                    prop_assert!(others.iter().all(|other| moved.contains(other)));
                    for (id, to) in &moves {
                        let (other, to) = (requests_of(std::slice::from_ref(id)).pop_first().unwrap(), number(to));
                        prop_assert!(to != room && tiny.usable(other, to));
                        let clear = |third: usize| {
                            third == other
                                || third == request
                                || on(&free_name(&tiny, third)).is_none_or(|r| number(&r) != to)
                                || !tiny.collide(other, third, to)
                        };
                        prop_assert!((0..tiny.requests.len()).all(clear));
                    }
                }
            }
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(100))]
    /// The grounds are enough also where there is too much to try everything: by an integer
    /// programme in the microlp library, up to 14 requests on 5 rooms.
    #[test]
    fn grounds_are_enough_by_an_integer_programme(tiny in crate::optimum::small()) {
        let settled = solve(&timetable(&tiny.text()), 20_000);
        let why = why(&settled, &Never);
        if why.floor > 0 {
            let less = only(&tiny, &requests_of(&why.pieces), &why.grounds);
            let needed = fewest_rooms(&less);
            prop_assert!(needed.is_none_or(|needed| needed >= why.floor), "{needed:?} {why:?}");
        }
        for unplaced in why.unplaced.iter().filter(|unplaced| !unplaced.set.is_empty()) {
            let less = only(&tiny, &requests_of(&unplaced.set), &unplaced.grounds);
            prop_assert_eq!(fewest_rooms(&less), None, "{:?}", unplaced);
        }
    }
}

/// The name of a request's first piece.
fn free_name(tiny: &Tiny, request: usize) -> String {
    let before: usize = (0..request).map(|r| tiny.starts(r).count()).sum();
    tiny.pieces()[before].to_string()
}

#[test]
fn the_exam_sample_says_which_pins_cost_a_room() {
    let path = file("sample-timetables/exam-fortnight.toml");
    let path = path.to_str().unwrap();
    let output = fewest(&["why", "--json", path]);
    assert_eq!(output.status.code(), Some(0));
    let why: serde_json::Value = serde_json::from_str(&out(&output)).unwrap();
    assert_eq!(
        (why["count"].as_u64(), why["clique"].as_u64()),
        (Some(9), Some(8))
    );
    let text = std::fs::read_to_string(path).unwrap();
    let lines: Vec<&str> = text.lines().collect();
    let grounds = why["grounds"].as_array().unwrap();
    assert!(!grounds.is_empty());
    for ground in grounds {
        let line: usize = ground["place"]
            .as_str()
            .unwrap()
            .rsplit(':')
            .next()
            .unwrap()
            .parse()
            .unwrap();
        let edit = ground["edit_or_key"].as_str().unwrap();
        let on = edit.rsplit(' ').next().unwrap();
        assert!(edit.starts_with("pin "), "{edit}");
        assert_eq!(lines[line - 1], format!("pin = \"{on}\""), "{edit}");
    }
    for price in why["prices"].as_array().unwrap() {
        assert_eq!(
            (price["saves"].as_u64(), price["proved"].as_bool()),
            (Some(1), Some(true))
        );
        // Brute force by the program's own count without that pin.
        let pin = price["pin"].as_str().unwrap();
        let at = text.find(&format!("id = \"{pin}\"")).unwrap();
        let from = at + text[at..].find("pin = ").unwrap();
        let to = from + text[from..].find('\n').unwrap();
        let less = format!("{}{}", &text[..from], &text[to..]);
        assert_eq!(solve(&timetable(&less), 1_000_000).receipt().in_use(), 8);
    }
}

#[test]
fn the_depot_sample_says_why_a_duty_has_no_crew() {
    let path = file("sample-timetables/depot-shift-change.toml");
    let output = fewest(&["why", "--json", path.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(4));
    let why: serde_json::Value = serde_json::from_str(&out(&output)).unwrap();
    let unplaced = why["unplaced"].as_array().unwrap();
    assert_eq!(unplaced.len(), 1);
    assert_eq!(unplaced[0]["pieces"][0], "tow-3");
    let grounds: BTreeSet<&str> = unplaced[0]["grounds"]
        .as_array()
        .unwrap()
        .iter()
        .map(|ground| ground["edit_or_key"].as_str().unwrap())
        .collect();
    let expected = ["tow-3 needs recovery", "tow-early open", "tow-late open"];
    assert_eq!(grounds, BTreeSet::from(expected));
}

#[test]
fn where_the_clique_says_it_all_there_are_no_grounds() {
    let path = file("sample-timetables/harbour-lanes.toml");
    let output = fewest(&["why", "--json", path.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(0));
    let why: serde_json::Value = serde_json::from_str(&out(&output)).unwrap();
    assert_eq!(why["grounds"].as_array().map(Vec::len), Some(0));
    assert!(why["sentence"].as_str().unwrap().contains("overlap"));
}
