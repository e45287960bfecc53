//! The edit language, and edits on an open document.

use crate::tools::{file, folder_with};
use fewest::clock::{Instant, Span, Zone};
use fewest::desk::Desk;
use fewest::document;
use fewest::edit::{Change, Context, Edit, Field, parse, print};
use fewest::timetable::Prefer;
use proptest::prelude::*;
use std::path::Path;
use std::sync::Arc;

const NOW: Instant = Instant(1_799_000_000);

fn desk(path: &Path) -> Desk {
    Desk::open(path).unwrap_or_else(|trouble| panic!("{trouble}"))
}

fn save(desk: &mut Desk, other: Option<&Path>) -> Result<(), fewest::desk::Trouble> {
    desk.save(other, NOW, &mut |_| {})
}

/// Makes a line's edit; `Err` with the words of the refusal.
fn make(desk: &mut Desk, line: &str) -> Result<(), String> {
    let edit = desk
        .parse(line, NOW)
        .map_err(|misread| misread.to_string())?;
    desk.make(vec![edit]).map_err(|refused| refused.to_string())
}

/// The text says exactly what the desk holds.
fn consistent(desk: &Desk) {
    let bytes = desk.document().bytes();
    let read = document::read("again", &bytes).unwrap_or_else(|mistakes| panic!("{mistakes}"));
    assert!(
        read.timetable == *desk.timetable(),
        "{}",
        desk.document().text()
    );
    assert_eq!(read.document, *desk.document(), "places follow the text");
}

const SMALL: &str = r#"# A heading comment.
[timetable]
title = "Small"
zone = "Europe/Lisbon"
settled_until = 2027-01-01T00:00:00

# Rooms.
[[kind]]
id = "big"
count = 2   # two of them

[[resource]] # the hall
id = "hall"
closed = [{ from = 2027-01-20T08:00:00, to = 2027-01-20T12:00:00, because = "repair" }] # once

# Every Monday but one.
[[request]]
id = "w"
start = 2027-01-18T15:00:00
end = 2027-01-18T16:00:00
repeat = "FREQ=WEEKLY;COUNT=4" # the term
except = [2027-02-08]

[[occurrence]]
of = "w"
date = 2027-01-25
pin = "hall" # the big one

# First.
[[request]]
id = "a"
start = 2027-01-11T09:00:00 # early
end   =   2027-01-11T11:00:00
# a note inside

[[request]]
id = "b"
  start = 2027-01-11T10:00:00
  length = "90m"
  fastened = true # by hand

[[request]]
id = "c"
start = 2027-01-12T10:00:00
end = 2027-01-12T11:00:00
pin = "big-2"
withdrawn = true

[[request]]
id = "old"
start = 2026-12-30T10:00:00
length = "1h"
"#;

fn small(text: &str) -> (tempfile::TempDir, Desk) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("small.toml");
    std::fs::write(&path, text).unwrap();
    let desk = desk(&path);
    (folder, desk)
}

#[test]
fn an_edit_changes_its_value_and_no_other_byte() {
    let cases = [
        (
            "move a to 2027-01-11 10:30",
            "start = 2027-01-11T09:00:00 # early\nend   =   2027-01-11T11:00:00",
            "start = 2027-01-11T10:30:00 # early\nend   =   2027-01-11T12:30:00",
        ),
        (
            "move a by -30m",
            "start = 2027-01-11T09:00:00 # early\nend   =   2027-01-11T11:00:00",
            "start = 2027-01-11T08:30:00 # early\nend   =   2027-01-11T10:30:00",
        ),
        (
            "move a to 14:00",
            "start = 2027-01-11T09:00:00 # early\nend   =   2027-01-11T11:00:00",
            "start = 2027-01-11T14:00:00 # early\nend   =   2027-01-11T16:00:00",
        ),
        (
            "pin a on hall",
            "end   =   2027-01-11T11:00:00",
            "end   =   2027-01-11T11:00:00\npin = \"hall\"",
        ),
        (
            "fasten a",
            "end   =   2027-01-11T11:00:00",
            "end   =   2027-01-11T11:00:00\nfastened = true",
        ),
        ("loosen b", "\n  fastened = true # by hand", ""),
        (
            "move w to 2027-01-18 16:00",
            "start = 2027-01-18T15:00:00\nend = 2027-01-18T16:00:00",
            "start = 2027-01-18T16:00:00\nend = 2027-01-18T17:00:00",
        ),
        (
            "move w@2027-01-25 to 16:30",
            "pin = \"hall\" # the big one",
            "pin = \"hall\" # the big one\nstart = 2027-01-25T16:30:00",
        ),
        (
            "unpin w@2027-01-25",
            "[[occurrence]]\nof = \"w\"\ndate = 2027-01-25\npin = \"hall\" # the big one\n\n",
            "",
        ),
        (
            "withdraw w@2027-02-01",
            "length = \"1h\"\n",
            "length = \"1h\"\n\n[[occurrence]]\nof = \"w\"\ndate = 2027-02-01\nwithdrawn = true\n",
        ),
        (
            "set w together yes",
            "except = [2027-02-08]",
            "except = [2027-02-08]\ntogether = true",
        ),
        (
            "set w repeat \"FREQ=DAILY;COUNT=10\"",
            "\"FREQ=WEEKLY;COUNT=4\"",
            "\"FREQ=DAILY;COUNT=10\"",
        ),
        (
            "settle until 2027-01-12 08:00",
            "settled_until = 2027-01-01T00:00:00",
            "settled_until = 2027-01-12T08:00:00",
        ),
        (
            "prefer changes",
            "settled_until = 2027-01-01T00:00:00",
            "settled_until = 2027-01-01T00:00:00\nprefer = \"changes\"",
        ),
        (
            "withdraw b",
            "  fastened = true # by hand",
            "  fastened = true # by hand\nwithdrawn = true",
        ),
        ("restore c", "\nwithdrawn = true", ""),
        (
            "close hall from 2027-01-11 08:00 to 2027-01-11 09:00 because \"a \\\"leak\\\"\"",
            "because = \"repair\" }]",
            "because = \"repair\" }, { from = 2027-01-11T08:00:00, to = 2027-01-11T09:00:00, because = 'a \"leak\"' }]",
        ),
        (
            "reopen hall from 2027-01-20 10:00 to 2027-01-20 13:00",
            "to = 2027-01-20T12:00:00",
            "to = 2027-01-20T10:00:00",
        ),
        (
            "close big-1 from 2027-01-11 08:00 to 2027-01-11 09:00",
            "length = \"1h\"\n",
            "length = \"1h\"\n\n[[resource]]\nid = \"big-1\"\nkind = \"big\"\nclosed = [{ from = 2027-01-11T08:00:00, to = 2027-01-11T09:00:00 }]\n",
        ),
    ];
    for newline in ["\n", "\r\n"] {
        for (line, old, new) in cases {
            let text = SMALL.replace('\n', newline);
            let (_folder, mut desk) = small(&text);
            make(&mut desk, line).unwrap_or_else(|said| panic!("{line}: {said}"));
            let expected =
                text.replacen(&old.replace('\n', newline), &new.replace('\n', newline), 1);
            assert_ne!(expected, text, "{line}: the case itself is wrong");
            assert_eq!(desk.document().text(), expected, "{line}");
            consistent(&desk);
            desk.undo().unwrap();
            assert_eq!(desk.document().text(), text, "undo {line}");
            consistent(&desk);
        }
    }
}

#[test]
fn reopening_keeps_what_is_written_between_closures() {
    let text = "[timetable]\ntitle = \"t\"\n[[resource]]\nid = \"r\"\nclosed = [ # why\n  { from = 2027-01-12T08:00:00, to = 2027-01-12T13:00:00, because = \"repair\" }, # one\n  # two\n  { from = 2027-01-13T08:00:00, to = 2027-01-13T13:00:00 }, # last\n] # end\n[[resource]]\nid = \"s\"\n[[resource.closed]]\nfrom = 2027-01-12T08:00:00\nto = 2027-01-12T13:00:00\n";
    for (line, old, new) in [
        (
            "reopen r from 2027-01-12 11:00 to 2027-01-12 14:00",
            "to = 2027-01-12T13:00:00, because",
            "to = 2027-01-12T11:00:00, because",
        ),
        (
            "reopen r from 2027-01-12 09:00 to 2027-01-12 10:00",
            "to = 2027-01-12T13:00:00, because = \"repair\" }",
            "to = 2027-01-12T09:00:00, because = \"repair\" }, { from = 2027-01-12T10:00:00, to = 2027-01-12T13:00:00, because = \"repair\" }",
        ),
        (
            "reopen r from 2027-01-13 08:00 to 2027-01-13 13:00",
            ", # one\n  # two\n  { from = 2027-01-13T08:00:00, to = 2027-01-13T13:00:00 }, # last",
            ", # last",
        ),
        (
            "close r from 2027-01-14 08:00 to 2027-01-14 09:00",
            "}, # last",
            "}, { from = 2027-01-14T08:00:00, to = 2027-01-14T09:00:00 }, # last",
        ),
    ] {
        let (_folder, mut desk) = small(text);
        make(&mut desk, line).unwrap_or_else(|said| panic!("{line}: {said}"));
        assert_eq!(desk.document().text(), text.replacen(old, new, 1), "{line}");
        consistent(&desk);
        desk.undo().unwrap();
        assert_eq!(desk.document().text(), text);
    }
    let (_folder, mut desk) = small(text);
    for line in [
        "reopen r from 2027-01-01 00:00 to 2027-02-01 00:00",
        "close s from 2027-01-15 08:00 to 2027-01-15 09:00",
        "reopen s from 2027-01-12 08:00 to 2027-01-12 09:00",
    ] {
        make(&mut desk, line).unwrap_or_else(|said| panic!("{line}: {said}"));
        consistent(&desk);
    }
    while desk.undo().is_ok() {
        consistent(&desk);
    }
    assert_eq!(desk.document().text(), text);
}

#[test]
fn another_name_never_overwrites_a_file() {
    let (folder, mut desk) = small(SMALL);
    make(&mut desk, "fasten a").unwrap();
    let other = folder.path().join("other.toml");
    std::fs::write(&other, "# precious\n").unwrap();
    let said = save(&mut desk, Some(&other)).unwrap_err().to_string();
    assert!(
        said.contains("there is a file of that name already"),
        "{said}"
    );
    assert_eq!(std::fs::read_to_string(&other).unwrap(), "# precious\n");
    // Under its own name it is the same as saving.
    let own = desk.path.clone();
    std::fs::write(&own, "# theirs\n").unwrap();
    assert!(save(&mut desk, Some(&own)).is_err());
    std::fs::write(&own, SMALL).unwrap();
    save(&mut desk, Some(&own)).unwrap();
}

#[test]
fn requests_in_braces_are_edited_in_place() {
    let text = "request = [\n  { id = \"a\", start = 2027-01-11T09:00:00, length = \"1h\", pin = \"room-1\" }, # one\n  { id = \"b\", fastened = true, start = 2027-01-11T09:00:00, length = \"1h\" },\n]\n[timetable]\ntitle = \"braces\"\nnoun = [\"room\", \"rooms\"]\n";
    let (_folder, mut desk) = small(text);
    for line in [
        "move a to 10:00",
        "unpin a",
        "loosen b",
        "fasten a",
        "withdraw b",
        "close room-2 from 2027-01-11 08:00 to 2027-01-11 09:00",
    ] {
        make(&mut desk, line).unwrap_or_else(|said| panic!("{line}: {said}"));
        consistent(&desk);
    }
    assert!(
        desk.document().text().contains(
            "{ id = \"a\", start = 2027-01-11T10:00:00, length = \"1h\", fastened = true }, # one"
        ),
        "{}",
        desk.document().text()
    );
    while desk.undo().is_ok() {
        consistent(&desk);
    }
    assert_eq!(desk.document().text(), text);
}

#[test]
fn requests_and_resources_are_added_set_and_dropped() {
    let text = SMALL.replace("settled_until = 2027-01-01T00:00:00\n", "");
    for (line, old, new) in [
        (
            "add geo-9 from 2027-01-12 09:00 to 11:00 size 40 needs \"hearing loop\",stage title \"Geo \\\"9\\\"\"",
            "length = \"1h\"\n",
            "length = \"1h\"\n\n[[request]]\nid = \"geo-9\"\ntitle = 'Geo \"9\"'\nstart = 2027-01-12T09:00:00\nend = 2027-01-12T11:00:00\nsize = 40\nneeds = [\"hearing loop\", \"stage\"]\n",
        ),
        (
            "add resource annexe kind big seats 40",
            "length = \"1h\"\n",
            "length = \"1h\"\n\n[[resource]]\nid = \"annexe\"\nkind = \"big\"\nseats = 40\n",
        ),
        (
            "set a size 210",
            "end   =   2027-01-11T11:00:00",
            "end   =   2027-01-11T11:00:00\nsize = 210",
        ),
        ("set b length 2h", "length = \"90m\"", "length = \"2h\""),
        (
            "set hall seats 180",
            "because = \"repair\" }] # once",
            "because = \"repair\" }] # once\nseats = 180",
        ),
        (
            "set big-1 turnaround 5m",
            "length = \"1h\"\n",
            "length = \"1h\"\n\n[[resource]]\nid = \"big-1\"\nkind = \"big\"\nturnaround = \"5m\"\n",
        ),
        (
            "drop a",
            "[[request]]\nid = \"a\"\nstart = 2027-01-11T09:00:00 # early\nend   =   2027-01-11T11:00:00\n# a note inside\n\n",
            "# a note inside\n\n",
        ),
        (
            "drop old",
            "\n[[request]]\nid = \"old\"\nstart = 2026-12-30T10:00:00\nlength = \"1h\"\n",
            "",
        ),
    ] {
        let (_folder, mut desk) = small(&text);
        if line.starts_with("set b") {
            make(&mut desk, "loosen b").unwrap();
        }
        let before = desk.document().text().to_string();
        make(&mut desk, line).unwrap_or_else(|said| panic!("{line}: {said}"));
        let at = before.rfind(old).unwrap();
        let expected = format!("{}{new}{}", &before[..at], &before[at + old.len()..]);
        assert_eq!(desk.document().text(), expected, "{line}");
        consistent(&desk);
        desk.undo().unwrap();
        assert_eq!(desk.document().text(), before, "undo {line}");
        consistent(&desk);
        desk.redo().unwrap();
        assert_eq!(desk.document().text(), expected, "redo {line}");
        consistent(&desk);
    }
    let (_folder, mut desk) = small(&text);
    for (line, says) in [
        (
            "add a from 2027-01-12 09:00 to 11:00",
            "a is the name of something already; choose another",
        ),
        (
            "add big-2 from 2027-01-12 09:00 to 11:00",
            "big-2 is the name of something already; choose another",
        ),
        (
            "add x from 2027-01-12 09:00 to 08:00",
            "column 12: the end must come after the start",
        ),
        ("set a seats 3", "a request has no seats"),
        ("set hall size 3", "a resource has no size"),
        ("set a only cellar", "there is no resource or kind cellar"),
        (
            "set a colour red",
            "column 7: \"colour\" cannot be set; known are: title, size, needs, people, only, never, weight, length, setup, turnaround, seats, offers, repeat, together",
        ),
        (
            "set a size many",
            "column 12: \"many\" does not fit size; here belongs a whole number, or none",
        ),
        ("set b length 3h", "b is fastened; first: loosen b"),
        (
            "drop big-1",
            "big-1 is a member of a kind; close it, or change the kind's count in the file",
        ),
        (
            "drop nothing",
            "column 6: nothing is called \"nothing\"; the file lists them",
        ),
        (
            "set a title \"open",
            "column 13: a quotation mark is never closed",
        ),
    ] {
        assert_eq!(make(&mut desk, line).expect_err(line), says, "{line}");
    }
    make(&mut desk, "pin a on hall").unwrap();
    assert_eq!(
        make(&mut desk, "drop hall").unwrap_err(),
        "w speaks of hall in its pin, only or never; change that first"
    );
}

#[test]
fn refusals_say_what_to_do() {
    let (_folder, mut desk) = small(SMALL);
    for (line, says) in [
        (
            "move b to 2027-01-11 12:00",
            "b is fastened; first: loosen b",
        ),
        (
            "move old to 2027-01-11 12:00",
            "old has begun before the time up to which everything is settled",
        ),
        (
            "withdraw old",
            "old has begun before the time up to which everything is settled",
        ),
        ("move a to 2027-01-11 09:00", "a is at that time already"),
        (
            "move a to 2300-01-01 09:00",
            "column 11: \"2300-01-01\" is no time; here belongs a time such as 2027-01-11 10:30",
        ),
        (
            "move aa to 2027-01-11 09:00",
            "column 6: no request is called \"aa\"; did you mean \"a\"?",
        ),
        (
            "pin a on big",
            "big is a kind; name one of its members, such as big-1",
        ),
        ("pin a on big-3", "no resource is called big-3"),
        ("unpin a", "a is not pinned"),
        ("pin c on hall", "c is withdrawn; first: restore c"),
        ("withdraw c", "c is withdrawn already"),
        ("restore a", "a is not withdrawn"),
        ("fasten b", "b is fastened already"),
        ("swap a with a", "a cannot be swapped with itself"),
        (
            "reopen hall from 2027-02-01 08:00 to 2027-02-01 09:00",
            "hall is not closed then",
        ),
        (
            "close hall from 2027-02-01 08:00 to 2027-02-01 07:00",
            "column 17: the end must come after the start",
        ),
        ("undo", "there is nothing to undo"),
        ("redo", "there is nothing to redo"),
        (
            "move a to 2027-03-28 01:30",
            "column 22: 01:30 does not exist in Europe/Lisbon: the clock goes forward; the nearest are 00:59 and 02:00",
        ),
        (
            "mvoe a by 1h",
            "column 1: \"mvoe\" is no edit; did you mean \"move\"?",
        ),
        (
            "split a at 10:00",
            "column 1: \"split\" is not yet possible in this version",
        ),
        (
            "move a at 10:00",
            "column 8: here belongs the word \"to\" or \"by\", not \"at\"",
        ),
        (
            "pin a on hall now",
            "column 15: \"now\" is one word too many",
        ),
        ("move a", "column 7: here belongs the word \"to\" or \"by\""),
        (
            "move a by 1x",
            "column 11: \"1x\" is not a length of time; write it like \"45s\", \"5m\", \"1h30m\" or \"1d\"",
        ),
        (
            "fasten a because sleepy",
            "column 10: write the reason in quotes: because \"the projector is broken\"",
        ),
        (
            "fasten a\u{1b}[31m",
            "column 9: control characters are not allowed in an edit",
        ),
    ] {
        assert_eq!(make(&mut desk, line).expect_err(line), says, "{line}");
        assert_eq!(desk.document().text(), SMALL, "{line}: nothing changes");
    }
}

#[test]
fn a_step_of_two_edits_is_undone_as_one_and_undo_works_across_a_save() {
    let (_folder, mut desk) = small(SMALL);
    let edits =
        ["pin a on hall", "move a to 2027-01-11 08:00"].map(|line| desk.parse(line, NOW).unwrap());
    desk.make(edits.to_vec()).unwrap();
    assert_eq!(desk.unsaved(), 1);
    save(&mut desk, None).unwrap();
    assert_eq!(desk.unsaved(), 0);
    let saved = std::fs::read_to_string(&desk.path).unwrap();
    desk.undo().unwrap();
    assert_eq!((desk.document().text(), desk.unsaved()), (SMALL, 1));
    desk.redo().unwrap();
    assert_eq!(
        (desk.document().text(), desk.unsaved()),
        (saved.as_str(), 0)
    );
    assert!(desk.undo().is_ok() && desk.undo().is_err());
    make(&mut desk, "fasten a").unwrap();
    assert!(
        desk.redo().is_err(),
        "a new edit ends what could be done again"
    );
    assert!(desk.unsaved() > 0);
}

#[test]
fn a_file_that_someone_else_changed_is_not_overwritten() {
    let (folder, mut desk) = small(SMALL);
    make(&mut desk, "fasten a").unwrap();
    std::fs::write(&desk.path, "# theirs\n").unwrap();
    let trouble = save(&mut desk, None).unwrap_err().to_string();
    assert!(
        trouble.contains("changed by someone else meanwhile"),
        "{trouble}"
    );
    assert_eq!(std::fs::read_to_string(&desk.path).unwrap(), "# theirs\n");
    let other = folder.path().join("mine.toml");
    save(&mut desk, Some(&other)).unwrap();
    assert!(
        std::fs::read_to_string(&other)
            .unwrap()
            .contains("fastened = true\n# a note inside")
    );
}

fn moment() -> impl Strategy<Value = Instant> {
    // Around a change of clock too, where a civil time occurs twice.
    prop_oneof![
        (0i64..4_000_000_000).prop_map(Instant),
        (0i64..10_800).prop_map(|s| Instant(1_824_938_000 + s)),
    ]
}

fn fresh() -> impl Strategy<Value = Arc<str>> {
    prop::sample::select(vec!["new-1", "new-2", "resource", "none", "ä.b_c"])
        .prop_map(Arc::<str>::from)
}

fn known_or_fresh() -> impl Strategy<Value = Arc<str>> {
    fresh().prop_map(|id| if &*id == "none" { "hall".into() } else { id })
}

/// Each key once, as the language wants it.
fn once(fields: Vec<Field>) -> Vec<Field> {
    let mut kept: Vec<Field> = Vec::new();
    for field in fields {
        if kept.iter().all(|other| other.key() != field.key()) {
            kept.push(field);
        }
    }
    kept
}

fn field() -> impl Strategy<Value = Field> {
    let word = || {
        prop::sample::select(vec![
            "stage",
            "two words",
            "none",
            "a,b",
            "qu\"ote\\",
            "because",
            "ä",
        ])
        .prop_map(Arc::<str>::from)
    };
    let list = move || {
        prop::collection::vec(word(), 0..4).prop_map(|list| {
            let mut kept: Vec<Arc<str>> = Vec::new();
            for item in list {
                if !kept.contains(&item) {
                    kept.push(item);
                }
            }
            kept
        })
    };
    let names = || {
        prop::sample::subsequence(vec!["hall", "big", "big-1"], 0..3)
            .prop_map(|list| list.into_iter().map(Arc::<str>::from).collect::<Vec<_>>())
    };
    let number = || prop::option::of(0u64..1000);
    let length = || prop::option::of(0i64..90_000);
    prop_oneof![
        "[ -~äß]{0,20}".prop_map(|title| Field::Title(title.into())),
        number().prop_map(Field::Size),
        number().prop_map(Field::Seats),
        list().prop_map(Field::Needs),
        list().prop_map(Field::People),
        list().prop_map(Field::Offers),
        names().prop_map(Field::Only),
        names().prop_map(Field::Never),
        (1u32..100).prop_map(Field::Weight),
        (1i64..90_000).prop_map(Field::Length),
        length().prop_map(Field::Setup),
        length().prop_map(Field::Turnaround),
        prop::option::of(prop::sample::select(vec![
            "FREQ=WEEKLY;COUNT=3",
            "FREQ=DAILY;UNTIL=20270202",
        ]))
        .prop_map(|rule| Field::Repeat(rule.map(Arc::from))),
        any::<bool>().prop_map(Field::Together),
    ]
}

fn change() -> impl Strategy<Value = Change> {
    let ids = vec![
        "a",
        "b",
        "c",
        "old",
        "w",
        "w@2027-01-18",
        "w@2027-01-25",
        "w@2027-02-01",
    ];
    let id = move || prop::sample::select(ids.clone()).prop_map(Arc::<str>::from);
    let resource =
        || prop::sample::select(vec!["hall", "big-1", "big-2"]).prop_map(Arc::<str>::from);
    let span =
        || (moment(), 1i64..1_000_000).prop_map(|(start, length)| Span::lasting(start, length));
    prop_oneof![
        (id(), moment()).prop_map(|(piece, to)| Change::Move { piece, to }),
        (id(), resource()).prop_map(|(piece, on)| Change::Pin { piece, on }),
        id().prop_map(Change::Unpin),
        id().prop_map(Change::Fasten),
        id().prop_map(Change::Loosen),
        (id(), id()).prop_map(|(a, b)| Change::Swap(a, b)),
        id().prop_map(Change::Withdraw),
        id().prop_map(Change::Restore),
        (resource(), span()).prop_map(|(resource, span)| Change::Close { resource, span }),
        (resource(), span()).prop_map(|(resource, span)| Change::Reopen { resource, span }),
        (fresh(), span(), prop::collection::vec(field(), 0..4)).prop_map(|(id, span, fields)| {
            Change::Add {
                id,
                span,
                fields: once(fields),
            }
        }),
        (
            fresh(),
            prop::option::of(prop::sample::select(vec!["big", "group"])),
            prop::collection::vec(field(), 0..3)
        )
            .prop_map(|(id, kind, fields)| Change::AddResource {
                id,
                kind: kind.map(Into::into),
                fields: once(fields)
            }),
        (prop_oneof![id(), resource(), known_or_fresh()], field())
            .prop_map(|(id, field)| Change::Set { id, field }),
        prop_oneof![id(), resource(), known_or_fresh()].prop_map(Change::Drop),
        moment().prop_map(Change::Settle),
        prop::sample::select(vec![Prefer::Count, Prefer::Changes]).prop_map(Change::Prefer),
        Just(Change::Undo),
        Just(Change::Redo),
    ]
}

proptest! {
    #[test]
    fn printing_then_reading_is_the_identity(
        what in change(),
        because in prop::option::of("[ -~äß\"\\\\]{0,30}"),
        zone in prop::sample::select(vec!["Europe/Lisbon", "America/New_York", "Australia/Lord_Howe", "Asia/Tokyo"]),
    ) {
        let mut text = SMALL.replace("Europe/Lisbon", zone);
        // `set` and `drop` speak of what is there already.
        for id in ["new-1", "new-2", "resource", "ä.b_c"] {
            text.push_str(&format!("[[request]]\nid = \"{id}\"\nstart = 2027-01-12T10:00:00\nlength = \"1h\"\n"));
        }
        let read = document::read("small", text.as_bytes()).unwrap();
        let edit = Edit { what, because: because.map(Into::into) };
        let line = print(&edit, Zone::named(zone).unwrap());
        let again = parse(&line, Context { timetable: &read.timetable, now: NOW });
        prop_assert_eq!(again, Ok(edit), "{}", line);
    }

    /// Any sequence of edits: undo all gives the starting bytes, redo all the final ones, and
    /// the text says what the desk holds at every step.
    #[test]
    fn undo_all_and_redo_all(changes in prop::collection::vec(change(), 1..25), crlf in any::<bool>()) {
        let text = if crlf { SMALL.replace('\n', "\r\n") } else { SMALL.to_string() };
        let (_folder, mut desk) = small(&text);
        for change in changes {
            let _ = desk.make(vec![change.into()]);
            consistent(&desk);
        }
        let last = desk.document().bytes();
        while desk.redo().is_ok() {}
        let end = desk.document().bytes();
        let mut steps = 0;
        while desk.undo().is_ok() { steps += 1; }
        prop_assert_eq!(desk.document().text(), &text);
        consistent(&desk);
        for _ in 0..steps { desk.redo().unwrap(); }
        prop_assert_eq!(desk.document().bytes(), end);
        prop_assert!(desk.redo().is_err());
        let _ = last;
    }

    /// No line of text makes the reader of edits panic.
    #[test]
    fn any_line_is_read_or_refused(line in "\\PC{0,80}|(move|pin|close) [a-z0-9:+ -]{0,60}") {
        let read = document::read("small", SMALL.as_bytes()).unwrap();
        let _ = parse(&line, Context { timetable: &read.timetable, now: NOW });
    }
}

#[test]
fn the_samples_survive_edits_unchanged_elsewhere() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let before = std::fs::read_to_string(&path).unwrap();
    assert_eq!(
        before,
        std::fs::read_to_string(file("sample-timetables/three-day-event.toml")).unwrap()
    );
    let mut desk = desk(&path);
    make(&mut desk, "move eels by +10m").unwrap();
    save(&mut desk, None).unwrap();
    let after = std::fs::read_to_string(&path).unwrap();
    let changed: Vec<_> = before
        .lines()
        .zip(after.lines())
        .filter(|(a, b)| a != b)
        .collect();
    assert_eq!(changed.len(), 1, "the start alone: {changed:?}");
    assert_eq!(before.lines().count(), after.lines().count());
}
