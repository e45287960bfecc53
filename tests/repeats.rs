//! Requests that repeat: the rules against the examples printed in RFC 5545, items of
//! several spans against graphs with known answers and against brute force, and edits of
//! single dates.

use crate::tools::{solve, timetable};
use fewest::audit::Knowledge;
use fewest::clock::{Zone, civil_starts, starts};
use fewest::engine::Problem;
use fewest::overlap::overlap_graph;
use proptest::prelude::*;
use std::collections::{BTreeSet, HashMap};
use std::fmt::Write;

/// First start, rule, what RFC 5545 prints for it (the beginning, where that goes on).
type Example = (&'static str, &'static str, &'static str);

/// Section 3.8.5.3 of RFC 5545 (Desruisseaux 2009), in the order of the section, and the two
/// examples of 3.3.10; America/New_York throughout. Copied from memory of the text; dates are
/// written as year, then month and days. The example "every 3 hours from 9 to 5" is left out:
/// its UNTIL contradicts what is printed.
const EXAMPLES: [Example; 40] = [
    (
        "1997-09-02 09:00",
        "FREQ=DAILY;COUNT=10",
        "1997 9: 2 3 4 5 6 7 8 9 10 11",
    ),
    (
        "1997-12-20 09:00",
        "FREQ=DAILY;UNTIL=19971224T000000Z",
        "1997 12: 20 21 22 23",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=DAILY;INTERVAL=2",
        "1997 9: 2 4 6 8 10 12 14 16 18 20 22 24 26 28 30 10: 2 4 6",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=DAILY;INTERVAL=10;COUNT=5",
        "1997 9: 2 12 22 10: 2 12",
    ),
    (
        "1998-01-01 09:00",
        "FREQ=YEARLY;UNTIL=20000131T140000Z;BYMONTH=1;BYDAY=SU,MO,TU,WE,TH,FR,SA",
        "1998 1: 1 2 3 4 5 6 7 8 9 10 11 12 13 14 15 16 17 18 19 20 21 22 23 24 25 26 27 28 29 30 31 1999 1: 1 2",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;COUNT=10",
        "1997 9: 2 9 16 23 30 10: 7 14 21 28 11: 4",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;UNTIL=19971224T000000Z",
        "1997 9: 2 9 16 23 30 10: 7 14 21 28 11: 4 11 18 25 12: 2 9 16 23",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;INTERVAL=2;WKST=SU",
        "1997 9: 2 16 30 10: 14 28 11: 11 25 12: 9 23 1998 1: 6 20 2: 3",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;UNTIL=19971007T000000Z;WKST=SU;BYDAY=TU,TH",
        "1997 9: 2 4 9 11 16 18 23 25 30 10: 2",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;COUNT=10;WKST=SU;BYDAY=TU,TH",
        "1997 9: 2 4 9 11 16 18 23 25 30 10: 2",
    ),
    (
        "1997-09-01 09:00",
        "FREQ=WEEKLY;INTERVAL=2;UNTIL=19971224T000000Z;WKST=SU;BYDAY=MO,WE,FR",
        "1997 9: 1 3 5 15 17 19 29 10: 1 3 13 15 17 27 29 31 11: 10 12 14 24 26 28 12: 8 10 12 22",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=WEEKLY;INTERVAL=2;COUNT=8;WKST=SU;BYDAY=TU,TH",
        "1997 9: 2 4 16 18 30 10: 2 14 16",
    ),
    (
        "1997-09-05 09:00",
        "FREQ=MONTHLY;COUNT=10;BYDAY=1FR",
        "1997 9: 5 10: 3 11: 7 12: 5 1998 1: 2 2: 6 3: 6 4: 3 5: 1 6: 5",
    ),
    (
        "1997-09-05 09:00",
        "FREQ=MONTHLY;UNTIL=19971224T000000Z;BYDAY=1FR",
        "1997 9: 5 10: 3 11: 7 12: 5",
    ),
    (
        "1997-09-07 09:00",
        "FREQ=MONTHLY;INTERVAL=2;COUNT=10;BYDAY=1SU,-1SU",
        "1997 9: 7 28 11: 2 30 1998 1: 4 25 3: 1 29 5: 3 31",
    ),
    (
        "1997-09-22 09:00",
        "FREQ=MONTHLY;COUNT=6;BYDAY=-2MO",
        "1997 9: 22 10: 20 11: 17 12: 22 1998 1: 19 2: 16",
    ),
    (
        "1997-09-28 09:00",
        "FREQ=MONTHLY;BYMONTHDAY=-3",
        "1997 9: 28 10: 29 11: 28 12: 29 1998 1: 29 2: 26",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=MONTHLY;COUNT=10;BYMONTHDAY=2,15",
        "1997 9: 2 15 10: 2 15 11: 2 15 12: 2 15 1998 1: 2 15",
    ),
    (
        "1997-09-30 09:00",
        "FREQ=MONTHLY;COUNT=10;BYMONTHDAY=1,-1",
        "1997 9: 30 10: 1 31 11: 1 30 12: 1 31 1998 1: 1 31 2: 1",
    ),
    (
        "1997-09-10 09:00",
        "FREQ=MONTHLY;INTERVAL=18;COUNT=10;BYMONTHDAY=10,11,12,13,14,15",
        "1997 9: 10 11 12 13 14 15 1999 3: 10 11 12 13",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=MONTHLY;INTERVAL=2;BYDAY=TU",
        "1997 9: 2 9 16 23 30 11: 4 11 18 25 1998 1: 6 13 20 27 3: 3 10 17 24 31",
    ),
    (
        "1997-06-10 09:00",
        "FREQ=YEARLY;COUNT=10;BYMONTH=6,7",
        "1997 6: 10 7: 10 1998 6: 10 7: 10 1999 6: 10 7: 10 2000 6: 10 7: 10 2001 6: 10 7: 10",
    ),
    (
        "1997-03-10 09:00",
        "FREQ=YEARLY;INTERVAL=2;COUNT=10;BYMONTH=1,2,3",
        "1997 3: 10 1999 1: 10 2: 10 3: 10 2001 1: 10 2: 10 3: 10 2003 1: 10 2: 10 3: 10",
    ),
    (
        "1997-01-01 09:00",
        "FREQ=YEARLY;INTERVAL=3;COUNT=10;BYYEARDAY=1,100,200",
        "1997 1: 1 4: 10 7: 19 2000 1: 1 4: 9 7: 18 2003 1: 1 4: 10 7: 19 2006 1: 1",
    ),
    (
        "1997-05-19 09:00",
        "FREQ=YEARLY;BYDAY=20MO",
        "1997 5: 19 1998 5: 18 1999 5: 17",
    ),
    (
        "1997-05-12 09:00",
        "FREQ=YEARLY;BYWEEKNO=20;BYDAY=MO",
        "1997 5: 12 1998 5: 11 1999 5: 17",
    ),
    (
        "1997-03-13 09:00",
        "FREQ=YEARLY;BYMONTH=3;BYDAY=TH",
        "1997 3: 13 20 27 1998 3: 5 12 19 26 1999 3: 4 11 18 25",
    ),
    (
        "1997-06-05 09:00",
        "FREQ=YEARLY;BYDAY=TH;BYMONTH=6,7,8",
        "1997 6: 5 12 19 26 7: 3 10 17 24 31 8: 7 14 21 28 1998 6: 4 11 18 25",
    ),
    (
        "1998-02-13 09:00",
        "FREQ=MONTHLY;BYDAY=FR;BYMONTHDAY=13",
        "1998 2: 13 3: 13 11: 13 1999 8: 13 2000 10: 13",
    ),
    (
        "1997-09-13 09:00",
        "FREQ=MONTHLY;BYDAY=SA;BYMONTHDAY=7,8,9,10,11,12,13",
        "1997 9: 13 10: 11 11: 8 12: 13 1998 1: 10 2: 7 3: 7 4: 11 5: 9 6: 13",
    ),
    (
        "1996-11-05 09:00",
        "FREQ=YEARLY;INTERVAL=4;BYMONTH=11;BYDAY=TU;BYMONTHDAY=2,3,4,5,6,7,8",
        "1996 11: 5 2000 11: 7 2004 11: 2",
    ),
    (
        "1997-09-04 09:00",
        "FREQ=MONTHLY;COUNT=3;BYDAY=TU,WE,TH;BYSETPOS=3",
        "1997 9: 4 10: 7 11: 6",
    ),
    (
        "1997-09-29 09:00",
        "FREQ=MONTHLY;BYDAY=MO,TU,WE,TH,FR;BYSETPOS=-2",
        "1997 9: 29 10: 30 11: 27 12: 30 1998 1: 29 2: 26 3: 30",
    ),
    (
        "1997-08-05 09:00",
        "FREQ=WEEKLY;INTERVAL=2;COUNT=4;BYDAY=TU,SU;WKST=MO",
        "1997 8: 5 10 19 24",
    ),
    (
        "1997-08-05 09:00",
        "FREQ=WEEKLY;INTERVAL=2;COUNT=4;BYDAY=TU,SU;WKST=SU",
        "1997 8: 5 17 19 31",
    ),
    (
        "2007-01-15 09:00",
        "FREQ=MONTHLY;BYMONTHDAY=15,30;COUNT=5",
        "2007 1: 15 30 2: 15 3: 15 30",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=MINUTELY;INTERVAL=15;COUNT=6",
        "09:00 09:15 09:30 09:45 10:00 10:15",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=MINUTELY;INTERVAL=90;COUNT=4",
        "09:00 10:30 12:00 13:30",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=DAILY;BYHOUR=9,10,11,12,13,14,15,16;BYMINUTE=0,20,40",
        "09:00 09:20 09:40 10:00 10:20 10:40 11:00",
    ),
    (
        "1997-09-02 09:00",
        "FREQ=MINUTELY;INTERVAL=20;BYHOUR=9,10,11,12,13,14,15,16",
        "09:00 09:20 09:40 10:00 10:20 10:40 11:00",
    ),
];

fn civil(text: &str) -> chrono::NaiveDateTime {
    chrono::NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M").unwrap()
}

/// Reads `1997 9: 2 3 10: 1`, or times of the first day.
fn printed(first: &str, text: &str) -> Vec<chrono::NaiveDateTime> {
    let (day, time) = first.split_once(' ').unwrap();
    if text.contains(":0") || text.contains(":1") {
        let times = text.split(' ');
        return times.map(|time| civil(&format!("{day} {time}"))).collect();
    }
    let (mut year, mut month, mut dates) = ("", "", Vec::new());
    for word in text.split(' ') {
        match word.strip_suffix(':') {
            Some(named) => month = named,
            None if word.len() == 4 => year = word,
            None => dates.push(civil(&format!("{year}-{month:0>2}-{word:0>2} {time}"))),
        }
    }
    dates
}

#[test]
fn rules_give_the_dates_that_rfc_5545_prints() {
    let york = Zone::named("America/New_York").unwrap();
    for (first, rule, dates) in EXAMPLES {
        let dates = printed(first, dates);
        let bounded = rule.contains("COUNT") || rule.contains("UNTIL");
        let most = if bounded { 1_000 } else { dates.len() };
        let found = civil_starts(rule, civil(first), york, most).unwrap();
        // What the section prints with "..." is its beginning.
        let whole = bounded && !rule.contains("UNTIL=2000");
        assert!(found.starts_with(&dates), "{rule}: {found:?}");
        assert!(!whole || found.len() == dates.len(), "{rule}: {found:?}");
        if bounded {
            let moments = starts(rule, york.lenient(civil(first)), false, york).unwrap();
            let again: Vec<_> = moments.iter().map(|at| york.civil(*at)).collect();
            assert_eq!(again, found, "{rule}");
        }
    }
}

/// "Every Friday the 13th" of RFC 5545, 3.8.5.3: the first start is none and is left out by
/// an EXDATE.
#[test]
fn a_first_start_that_is_left_out_need_not_be_of_the_rule() {
    let read = timetable(
        r#"
[timetable]
title = "Fridays"
zone = "America/New_York"
[[request]]
id = "a"
start = 1997-09-02T09:00:00
length = "1h"
repeat = "FREQ=MONTHLY;BYDAY=FR;BYMONTHDAY=13;UNTIL=20001231"
except = [1997-09-02T09:00:00]
"#,
    );
    let ids: Vec<String> = read.pieces().iter().map(|p| p.id.to_string()).collect();
    let dates = [
        "1998-02-13",
        "1998-03-13",
        "1998-11-13",
        "1999-08-13",
        "2000-10-13",
    ];
    assert_eq!(ids, dates.map(|date| format!("a@{date}")));
}

/// A graph by its edges, as a timetable (Szpilrajn-Marczewski 1945): a vertex is a request
/// with a date for each edge at it and one of its own, all of them kept together.
fn as_timetable(vertices: usize, edges: &[(usize, usize)]) -> String {
    let mut text = "[timetable]\ntitle = \"graph\"\n".to_string();
    let slot = |at: usize| format!("2027-01-{:02}T{:02}:00:00", 1 + at / 20, at % 20);
    for vertex in 0..vertices {
        let at = edges
            .iter()
            .enumerate()
            .filter(|(_, (a, b))| *a == vertex || *b == vertex);
        let also: Vec<String> = at.map(|(edge, _)| slot(vertices + edge)).collect();
        let _ = writeln!(
            text,
            "[[request]]\nid = \"v{vertex}\"\nstart = {}\nlength = \"1h\"\nalso = [{}]\ntogether = true",
            slot(vertex),
            also.join(", ")
        );
    }
    text
}

/// Mycielski's construction (1955): no triangle more, one colour more.
fn mycielski(vertices: usize, edges: &[(usize, usize)]) -> (usize, Vec<(usize, usize)>) {
    let mut all = edges.to_vec();
    for (a, b) in edges {
        all.push((*a, vertices + b));
        all.push((*b, vertices + a));
    }
    all.extend((0..vertices).map(|v| (vertices + v, 2 * vertices)));
    (2 * vertices + 1, all)
}

/// The overlap graph of the items, by the spans of their pieces.
fn overlap_of(text: &str) -> BTreeSet<(usize, usize)> {
    let read = timetable(text);
    let pieces = read.pieces();
    let spans: Vec<_> = pieces.iter().map(|piece| piece.span).collect();
    let vertex = |piece: usize| -> usize {
        let request = &pieces[piece].request.id;
        request[1..].parse().unwrap()
    };
    let graph = overlap_graph(&spans, usize::MAX).graph;
    let pairs = graph.edge_indices().map(|edge| {
        let (a, b) = graph.edge_endpoints(edge).unwrap();
        let (a, b) = (vertex(a.index()), vertex(b.index()));
        (a.min(b), a.max(b))
    });
    pairs.collect()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(60))]
    #[test]
    fn every_graph_can_occur(
        vertices in 1usize..9,
        raw in prop::collection::btree_set((0usize..9, 0usize..9), 0..20),
    ) {
        let edges: Vec<(usize, usize)> = raw
            .into_iter()
            .filter(|(a, b)| a < b && *b < vertices)
            .collect();
        let text = as_timetable(vertices, &edges);
        let wanted: BTreeSet<(usize, usize)> = edges.iter().copied().collect();
        prop_assert_eq!(overlap_of(&text), wanted);
        // The engine's items overlap in the same way, whatever it leaves out as equal.
        let read = timetable(&text);
        let problem = Problem::new(&read, &read.pieces(), &HashMap::new());
        for a in 0..vertices {
            for b in a + 1..vertices {
                prop_assert_eq!(problem.overlap(a, b), edges.contains(&(a, b)));
            }
        }
        // The chromatic number by trying everything.
        let settled = solve(&read, 20_000);
        let proved = match settled.receipt().knowledge() {
            Knowledge::Proved(proved) => Some(proved.count()),
            _ => None,
        };
        prop_assert_eq!(proved, Some(chromatic(vertices, &edges)));
        prop_assert_eq!(settled.clique(), largest_clique(vertices, &edges));
    }
}

/// The fewest colours, by trying everything.
fn chromatic(vertices: usize, edges: &[(usize, usize)]) -> usize {
    fn go(
        at: usize,
        colours: &mut Vec<usize>,
        most: usize,
        edges: &[(usize, usize)],
        n: usize,
    ) -> bool {
        if at == n {
            return true;
        }
        let used = colours.iter().max().map_or(0, |most| most + 1);
        (0..most.min(used + 1)).any(|colour| {
            let clash = edges.iter().any(|(a, b)| {
                (*a == at && *b < at && colours[*b] == colour)
                    || (*b == at && *a < at && colours[*a] == colour)
            });
            if clash {
                return false;
            }
            colours.push(colour);
            let found = go(at + 1, colours, most, edges, n);
            colours.pop();
            found
        })
    }
    (0..)
        .find(|most| go(0, &mut Vec::new(), *most, edges, vertices))
        .unwrap()
}

fn largest_clique(vertices: usize, edges: &[(usize, usize)]) -> usize {
    let sets = 0u32..1 << vertices;
    let clique = |set: &u32| {
        let inside: Vec<usize> = (0..vertices).filter(|v| set & (1 << v) != 0).collect();
        inside
            .iter()
            .enumerate()
            .all(|(at, b)| inside[..at].iter().all(|a| edges.contains(&(*a, *b))))
    };
    let largest = sets.filter(clique).map(u32::count_ones).max();
    largest.unwrap_or(0) as usize
}

/// Mycielski's graphs have a clique of 2; their chromatic numbers are 4, 5 and 6 with 11, 23
/// and 47 vertices (Mycielski 1955). Odd cycles: clique 2, answer 3.
#[test]
fn graphs_with_a_known_answer() {
    for length in [5, 7, 9, 21] {
        let edges: Vec<_> = (0..length).map(|v| (v, (v + 1) % length)).collect();
        let settled = solve(&timetable(&as_timetable(length, &edges)), 100_000);
        assert_eq!(settled.clique(), 2);
        assert!(
            matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 3),
            "cycle of {length}: {:?}",
            settled.receipt()
        );
        assert_eq!(settled.answer().floor.name(), "cases");
    }
    let mut graph = (5, (0..5).map(|v| (v, (v + 1) % 5)).collect::<Vec<_>>());
    for (answer, vertices) in [(4, 11), (5, 23), (6, 47)] {
        graph = mycielski(graph.0, &graph.1);
        assert_eq!(graph.0, vertices);
        let settled = solve(&timetable(&as_timetable(graph.0, &graph.1)), 200_000);
        let receipt = settled.receipt();
        assert_eq!(settled.clique(), 2);
        assert_eq!(
            (receipt.unplaced(), receipt.in_use()),
            (0, answer),
            "{vertices}"
        );
        assert!(receipt.floor() <= answer);
        if answer < 6 {
            assert!(
                matches!(receipt.knowledge(), Knowledge::Proved(_)),
                "{receipt:?}"
            );
        }
    }
}

/// A term in which everything is kept together: the engine keeps one week of it, all of it
/// can be placed, and the plan keeps every request on one room.
#[test]
fn equal_weeks_are_recognised() {
    let read = timetable(&crate::family::term(60, 5, 3).text);
    let pieces = read.pieces();
    assert!(pieces.len() > 60 * 14);
    let problem = Problem::new(&read, &pieces, &HashMap::new());
    assert_eq!(problem.items.len(), 60);
    assert!(problem.single(), "{} units", problem.units.len());
    let settled = solve(&read, 200_000);
    assert_eq!(settled.receipt().unplaced(), 0);
    let mut rooms: HashMap<&str, BTreeSet<&str>> = HashMap::new();
    for placement in &settled.answer().plan.placements {
        let request = placement.piece.split('@').next().unwrap();
        rooms
            .entry(request)
            .or_default()
            .insert(&placement.resource);
    }
    assert!(rooms.values().all(|rooms| rooms.len() == 1));
}
