//! What the samples are made to show. The numbers were also found by an exact integer
//! programme (HiGHS, the clique formulation) outside the project.

use crate::tools::{err, fewest, file, solve};
use fewest::audit::Knowledge;
use fewest::claim::FloorProof;
use fewest::document;
use fewest::edit::{Change, apply};
use fewest::timetable::{FindingKind, Timetable, findings};

fn sample(name: &str) -> Timetable {
    let path = file(&format!("sample-timetables/{name}.toml"));
    let read = document::read(name, &std::fs::read(path).unwrap())
        .unwrap_or_else(|mistakes| panic!("{mistakes}"));
    assert!(
        read.warnings.is_empty() && findings(&read.timetable).is_empty(),
        "{name}"
    );
    read.timetable
}

#[test]
fn the_event_takes_nine_halls_and_has_room_to_move() {
    let event = sample("three-day-event");
    let settled = solve(&event, 100_000);
    assert!(matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 9));
    assert_eq!(settled.survey().load.most, 9);
    assert!(matches!(settled.answer().floor, FloorProof::Clique { .. }));
    assert!(settled.survey().clashes.is_empty());
    // Seven moves within what the sessions allow bring it down to seven halls (found by the
    // exact programme outside; cost 400).
    let mut moved = event.clone();
    for (id, time) in [
        ("map-print", "2027-06-10 13:10"),
        ("star-dial", "2027-06-10 11:35"),
        ("young-crew", "2027-06-11 10:55"),
        ("school-river", "2027-06-11 13:55"),
        ("night-ferry", "2027-06-11 13:40"),
        ("sound-walk", "2027-06-12 10:50"),
        ("barge-homes", "2027-06-12 13:25"),
    ] {
        let line = format!("move {id} to {time}");
        let context = fewest::edit::Context {
            timetable: &moved,
            now: fewest::clock::Instant(0),
        };
        let edit = fewest::edit::parse(&line, context).unwrap();
        let Change::Move { to, .. } = &edit.what else {
            panic!("{line}")
        };
        assert!(
            event.piece(id).unwrap().start_allowed(*to, &event.settings),
            "{line} is within may_start"
        );
        apply(&mut moved, &edit).unwrap();
    }
    let settled = solve(&moved, 1_000_000);
    assert_eq!(settled.receipt().in_use(), 7, "{:?}", settled.receipt());
    assert!(settled.survey().clashes.is_empty());
}

#[test]
fn two_pins_force_a_ninth_room_on_the_exams() {
    let exams = sample("exam-fortnight");
    let settled = solve(&exams, 1_000_000);
    assert!(
        matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 9),
        "{:?}",
        settled.receipt()
    );
    assert_eq!(settled.survey().load.most, 8);
    assert!(matches!(
        settled.answer().floor,
        FloorProof::Incompatible { .. }
    ));
    assert!(settled.survey().clashes.is_empty());
    for pin in ["phil-101", "mus-102"] {
        let mut without = exams.clone();
        apply(&mut without, &Change::Unpin(pin.into()).into()).unwrap();
        let settled = solve(&without, 1_000_000);
        assert!(
            matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 8),
            "{pin}"
        );
    }
}

#[test]
fn one_duty_at_the_depot_nobody_can_take() {
    let path = file("sample-timetables/depot-shift-change.toml");
    let read = document::read("depot", &std::fs::read(&path).unwrap())
        .unwrap_or_else(|mistakes| panic!("{mistakes}"));
    let found = findings(&read.timetable);
    assert_eq!(found.len(), 1);
    assert_eq!(
        (&*found[0].piece, &found[0].kind),
        ("tow-3", &FindingKind::NoResource)
    );
    let settled = solve(&read.timetable, 50_000);
    assert_eq!(
        settled.receipt().knowledge(),
        Knowledge::Impossible {
            unplaced_floor: 3,
            least: true
        }
    );
    assert_eq!(
        (settled.receipt().unplaced(), settled.receipt().in_use()),
        (1, 22)
    );
    // Without it the rest is placed, on no fewer crews (found by the exact programme outside).
    let mut without = read.timetable.clone();
    apply(&mut without, &Change::Withdraw("tow-3".into()).into()).unwrap();
    let settled = solve(&without, 200_000);
    assert!(
        matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 22),
        "{:?}",
        settled.receipt()
    );
    assert_eq!(
        fewest(&["count", path.to_str().unwrap()]).status.code(),
        Some(4)
    );
}

#[test]
fn the_harbour_ropes_out_seven_lanes() {
    let settled = solve(&sample("harbour-lanes"), 0);
    assert!(matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == 7));
    assert_eq!(settled.survey().load.most, 7);
    assert!(settled.survey().timetable.resources().open_ended);
}

#[test]
fn the_readme_commands_work_on_the_samples() {
    for name in ["three-day-event", "exam-fortnight", "harbour-lanes"] {
        let output = fewest(&[
            "count",
            file(&format!("sample-timetables/{name}.toml"))
                .to_str()
                .unwrap(),
        ]);
        assert_eq!(
            (output.status.code(), err(&output).as_str()),
            (Some(0), ""),
            "{name}"
        );
    }
    let readme = std::fs::read_to_string(file("README.md")).unwrap();
    assert!(readme.contains("count sample-timetables/three-day-event.toml"));
}
