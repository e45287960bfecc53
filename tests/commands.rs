//! The commands as others call them: output, exit codes, files left behind.

use crate::tools::{err, fewest, file, folder_with, out};
use serde_json::Value;
use std::path::Path;
use std::process::Command;

fn write(folder: &Path, name: &str, text: &str) -> String {
    let path = folder.join(name);
    std::fs::write(&path, text).unwrap();
    path.to_str().unwrap().to_string()
}

const TWO: &str = "[timetable]\ntitle = \"Two\"\nnoun = [\"crew\", \"crews\"]\n\n[[resource]]\nid = \"north\"\n\n[[resource]]\nid = \"south\"\n";

fn request(id: &str, more: &str) -> String {
    format!("\n[[request]]\nid = \"{id}\"\nstart = 2027-01-11T09:00:00\nlength = \"1h\"\n{more}")
}

#[test]
fn the_exit_code_says_what_is_known() {
    let folder = tempfile::tempdir().unwrap();
    let f = folder.path();
    let proved = write(
        f,
        "proved.toml",
        &format!("{TWO}{}{}", request("a", ""), request("b", "")),
    );
    let full = write(
        f,
        "full.toml",
        &format!(
            "{TWO}{}{}{}",
            request("a", ""),
            request("b", ""),
            request("c", "weight = 2\n")
        ),
    );
    let bad = write(f, "bad.toml", "[timetable]\n");
    let nobody = write(
        f,
        "nobody.toml",
        &format!(
            "{TWO}{}{}",
            request("a", "needs = [\"licence\"]\n"),
            request("b", "")
        ),
    );
    for (args, code) in [
        (vec!["count", &proved], 0),
        (vec!["count", &full], 4),
        (vec!["count", &bad], 2),
        (vec!["count", &nobody], 4),
        (vec!["count", "no-such-file.toml"], 2),
        (vec!["count", f.to_str().unwrap()], 2),
        (vec!["count", &proved, "--seconds", "-1"], 2),
        (vec!["count", &proved, "--threads", "0"], 2),
        (vec!["count"], 2),
        (vec!["cuont", &proved], 2),
        (vec!["--help"], 0),
        (vec!["why", &proved], 0),
        (vec!["audit", &proved], 3),
        (vec![proved.as_str()], 0),
    ] {
        let output = fewest(&args);
        assert_eq!(
            output.status.code(),
            Some(code),
            "{args:?}: {}{}",
            out(&output),
            err(&output)
        );
        assert_eq!(
            err(&output).is_empty(),
            !matches!(code, 2) && args != ["count", &nobody],
            "{args:?}: {}",
            err(&output)
        );
    }
    let text = out(&fewest(&["count", &full]));
    assert!(
        text.contains("needs at least 3, has 2; 1 unplaced (proved least)"),
        "{text}"
    );
    let output = fewest(&["count", &nobody]);
    assert!(
        err(&output).contains(
            "nobody.toml:11: a has no possible crew: none of 2 crews can take it: north and south without licence"
        ),
        "{}",
        err(&output)
    );
    assert!(
        out(&output).contains("cannot all fit: 1 unplaced (proved least); 1 crew in use"),
        "{}",
        out(&output)
    );
}

#[test]
fn count_json_is_as_in_the_contract() {
    let folder = tempfile::tempdir().unwrap();
    let people = "people = [\"driver\"]\n";
    let text = format!(
        "{TWO}{}{}{}{}",
        request("a", people),
        request("b", people),
        request("c", ""),
        request("d", "withdrawn = true\n")
    );
    let path = write(folder.path(), "a.toml", &text);
    let report: Value =
        serde_json::from_slice(&fewest(&["count", "--json", &path]).stdout).unwrap();
    let mut keys: Vec<&str> = report
        .as_object()
        .unwrap()
        .keys()
        .map(String::as_str)
        .collect();
    keys.sort_unstable();
    assert_eq!(
        keys,
        [
            "clashes",
            "clique",
            "days",
            "floor",
            "floor_by",
            "in_use",
            "peaks",
            "pieces",
            "placements",
            "requests",
            "resources",
            "seconds",
            "state",
            "title",
            "unplaced",
            "unplaced_floor",
            "unplaced_weight"
        ]
    );
    assert_eq!(report["title"], "Two");
    assert_eq!(
        (&report["requests"], &report["pieces"], &report["resources"]),
        (&3.into(), &3.into(), &2.into())
    );
    assert_eq!(
        (&report["state"], &report["floor_by"]),
        (&"impossible".into(), &"clique".into())
    );
    assert_eq!(
        (&report["in_use"], &report["floor"], &report["clique"]),
        (&2.into(), &3.into(), &3.into())
    );
    assert_eq!(
        (&report["unplaced_weight"], &report["unplaced_floor"]),
        (&1.into(), &1.into())
    );
    assert_eq!(
        report["days"],
        serde_json::json!([{ "date": "2027-01-11", "in_use": 2, "clique": 3 }])
    );
    assert_eq!(
        report["peaks"],
        serde_json::json!([{ "from": "2027-01-11T09:00:00+00:00", "to": "2027-01-11T10:00:00+00:00", "pieces": ["a", "b", "c"] }])
    );
    assert_eq!(
        report["clashes"],
        serde_json::json!([{ "person": "driver", "pieces": ["a", "b"] }])
    );
    assert_eq!(report["placements"].as_object().unwrap().len(), 2);
    assert_eq!(report["unplaced"].as_array().unwrap().len(), 1);
    // As many as needed: the number of resources is open.
    let path = write(
        folder.path(),
        "open.toml",
        &format!(
            "[timetable]\ntitle = \"Open\"\n{}",
            request("a", "pin = \"resource-7\"\n")
        ),
    );
    let report: Value =
        serde_json::from_slice(&fewest(&["count", "--json", &path]).stdout).unwrap();
    assert_eq!(
        (&report["resources"], &report["placements"]["a"]),
        (&Value::Null, &"resource-7".into())
    );
}

#[test]
fn count_never_writes_and_the_same_steps_give_the_same() {
    let folder = folder_with(&["sample-timetables/exam-fortnight.toml"]);
    let path = folder.path().join("exam-fortnight.toml");
    let run = || {
        let output = fewest(&[
            "count",
            "--json",
            path.to_str().unwrap(),
            "--steps",
            "20000",
            "--seed",
            "3",
            "--threads",
            "1",
        ]);
        let mut report: Value = serde_json::from_slice(&output.stdout).unwrap();
        report.as_object_mut().unwrap().remove("seconds");
        report
    };
    assert_eq!(run(), run());
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 1);
}

#[test]
fn apply_makes_all_edits_or_none_and_its_plan_passes_audit() {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let (name, before) = (path.to_str().unwrap(), std::fs::read(&path).unwrap());
    let script = write(
        folder.path(),
        "bad.txt",
        "# a note\nmove map-print to 2027-06-10 13:10\n\nmove map-print to nowhere\n",
    );
    let output = fewest(&["apply", name, &script]);
    assert_eq!(output.status.code(), Some(2));
    assert!(
        err(&output).contains("bad.txt:4:19: \"nowhere\" is no time"),
        "{}",
        err(&output)
    );
    assert!(err(&output).ends_with("nothing was changed\n"));
    assert_eq!(std::fs::read(&path).unwrap(), before);
    let script = write(
        folder.path(),
        "good.txt",
        "move map-print to 2027-06-10 13:10\nmove star-dial by +10m\nundo\nswap mud with quiet-sea\nwithdraw tunnel because \"speaker ill\"\n",
    );
    let output = fewest(&["apply", name, &script]);
    assert_eq!(output.status.code(), Some(0), "{}", err(&output));
    assert!(
        out(&output).starts_with("5 edits made and saved\n"),
        "{}",
        out(&output)
    );
    let text = std::fs::read_to_string(&path).unwrap();
    assert!(text.contains("start = 2027-06-10T13:10:00") && !text.contains("star-dial to"));
    let output = fewest(&["audit", name]);
    assert_eq!(
        output.status.code(),
        Some(0),
        "{}{}",
        out(&output),
        err(&output)
    );
    assert!(
        out(&output).contains("plan and proof hold"),
        "{}",
        out(&output)
    );
    // Anything said by hand afterwards makes the plan stale.
    std::fs::write(&path, text + "# a word more\n").unwrap();
    let output = fewest(&["audit", name]);
    assert_eq!(output.status.code(), Some(3));
    assert!(out(&output).contains("stale"));
}

#[test]
fn apply_reads_standard_input() {
    use std::io::Write;
    let folder = tempfile::tempdir().unwrap();
    let path = write(
        folder.path(),
        "a.toml",
        &format!("{TWO}{}", request("a", "")),
    );
    let mut child = Command::new(env!("CARGO_BIN_EXE_fewest"))
        .args(["apply", &path, "-"])
        .stdin(std::process::Stdio::piped())
        .stdout(std::process::Stdio::piped())
        .spawn()
        .unwrap();
    child
        .stdin
        .take()
        .unwrap()
        .write_all(b"pin a on south\n")
        .unwrap();
    let output = child.wait_with_output().unwrap();
    assert_eq!(
        out(&output),
        "1 edit made and saved\n1 crew in use, at least 1: proved\n"
    );
    assert!(
        std::fs::read_to_string(&path)
            .unwrap()
            .ends_with("length = \"1h\"\npin = \"south\"\n")
    );
}

#[test]
fn intake_sets_rows_aside_and_says_why() {
    let folder = tempfile::tempdir().unwrap();
    let csv = write(
        folder.path(),
        "in.csv",
        "id,day,from,to,room,who,seats\n\
         a,2027-01-11,09:00,10:30,\"Hall, big\",ann;bo,20\n\
         b,2027-01-11,23:00,01:00,a,,\n\
         b,2027-01-12,09:00,10:00,x,,\n\
         c,2027-01-32,09:00,10:00,x,,\n\
         d,2027-01-11,9 o'clock,10:00,x,,\n\
         e,2027-01-11,600,660,-,,many\n\
         \"=cmd()\",2027-01-11,09:00,,x,,\n\
         f,2027-01-11,600,660,-,,\n",
    );
    let path = folder.path().join("out.toml");
    let args = [
        "intake",
        &csv,
        "--out",
        path.to_str().unwrap(),
        "--id",
        "id",
        "--day",
        "day",
        "--start",
        "from",
        "--end",
        "to",
        "--resource",
        "room",
        "--people",
        "who",
        "--size",
        "seats",
        "--blank",
        "-",
        "--noun",
        "hall,halls",
    ];
    let output = fewest(&args);
    assert_eq!(output.status.code(), Some(3), "{}", err(&output));
    let said = err(&output);
    for line in [
        "in.csv:4: the id b is taken by line 3; name more columns with --id",
        "in.csv:5: \"2027-01-32\" is no date such as 2027-01-11",
        "in.csv:6: \"9 o'clock\" is no time such as 10:30",
        "in.csv:7: \"many\" is no size; a whole number is needed",
        "in.csv:8: a time is missing",
    ] {
        assert!(said.contains(line), "{line}: {said}");
    }
    let text = std::fs::read_to_string(&path).unwrap();
    assert!(
        text.contains("id = \"Hall-big\"\ntitle = \"Hall, big\"")
            && text.contains("pin = \"Hall-big\""),
        "{text}"
    );
    // The resource called like a request got another id.
    assert!(
        text.contains("id = \"a_2\"\ntitle = \"a\"") && text.contains("pin = \"a_2\""),
        "{text}"
    );
    assert!(
        text.contains("people = [\"ann\", \"bo\"]") && text.contains("end = 2027-01-12T01:00:00"),
        "{text}"
    );
    let aside = std::fs::read_to_string(folder.path().join("out.set-aside.csv")).unwrap();
    assert_eq!(aside.lines().count(), 6);
    assert!(
        aside.contains(",'=cmd(),") && !aside.contains(",=cmd()"),
        "{aside}"
    );
    let again = fewest(&args);
    assert_eq!(again.status.code(), Some(2));
    assert!(err(&again).contains("is there already"));
    assert_eq!(std::fs::read_to_string(&path).unwrap(), text);
    let output = fewest(&[
        "intake", &csv, "--out", "x.toml", "--start", "form", "--end", "to",
    ]);
    assert!(
        err(&output).contains("there is no column \"form\"; did you mean \"from\"?"),
        "{}",
        err(&output)
    );
}

#[test]
fn messages_about_hostile_files_are_clean() {
    let folder = tempfile::tempdir().unwrap();
    let path = write(
        folder.path(),
        "a.toml",
        &format!(
            "{TWO}{}",
            request(
                "a",
                "title = \"\\u001b]0;owned\\u0007\"\nneeds = [\"\\u001b[31m\"]\n"
            )
        ),
    );
    let output = fewest(&["count", &path]);
    for text in [out(&output), err(&output)] {
        assert!(
            text.chars().all(|c| c == '\n' || !c.is_control()),
            "{text:?}"
        );
    }
    assert_eq!(output.status.code(), Some(4));
}

#[test]
fn the_core_prints_nothing_and_reads_no_environment() {
    fn walk(folder: &Path, check: &mut dyn FnMut(&Path, &str)) {
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                walk(&path, check)
            } else {
                check(&path, &std::fs::read_to_string(&path).unwrap())
            }
        }
    }
    let mut seen = 0;
    for module in [
        "engine",
        "audit",
        "overlap",
        "claim",
        "timetable",
        "edit",
        "clock",
    ] {
        walk(&file(&format!("src/{module}")), &mut |path, text| {
            seen += 1;
            for word in [
                "println!",
                "eprintln!",
                "std::env",
                "std::fs",
                "crossterm",
                "ratatui",
                "std::io",
            ] {
                assert!(!text.contains(word), "{} speaks of {word}", path.display());
            }
        });
    }
    assert!(seen > 20);
    // The checker shares definitions only.
    walk(&file("src/audit"), &mut |path, text| {
        for module in ["engine", "overlap", "document", "desk", "words", "store"] {
            assert!(
                !text.contains(&format!("crate::{module}")),
                "{} imports {module}",
                path.display()
            );
        }
    });
}

#[test]
fn what_cannot_be_printed_is_not_called_done() {
    if !Path::new("/dev/full").exists() {
        return eprintln!("SKIPPED: there is no /dev/full here");
    }
    let path = file("sample-timetables/three-day-event.toml");
    let command = format!(
        "{} count {} > /dev/full",
        env!("CARGO_BIN_EXE_fewest"),
        path.display()
    );
    let output = Command::new("sh").args(["-c", &command]).output().unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert!(
        err(&output).starts_with("standard output: "),
        "{}",
        err(&output)
    );
}

#[test]
fn later_commands_are_refused_as_not_yet_and_usage_is_clean() {
    for command in ["ease", "issue", "differs", "handouts", "spoken"] {
        let output = fewest(&[command, "a.toml"]);
        assert_eq!(
            err(&output),
            format!("\"{command}\" is not yet possible in this version\n")
        );
    }
    let output = fewest(&["count", "\u{1b}[31m", "--bo\u{1b}[31m"]);
    assert!(
        err(&output).chars().all(|c| c == '\n' || !c.is_control()),
        "{:?}",
        err(&output)
    );
}

#[test]
fn as_many_as_needed_includes_those_that_wishes_name() {
    let folder = tempfile::tempdir().unwrap();
    let head = "[timetable]\ntitle = \"never\"\n[[kind]]\nid = \"k\"\ncount = \"as needed\"\n";
    let text = format!(
        "{head}{}{}{}",
        request("a", "never = [\"k-1\"]\n"),
        request("b", "never = [\"k-1\", \"k-2\"]\n"),
        request("c", "only = [\"k-6\"]\n")
    );
    let path = write(folder.path(), "a.toml", &text);
    let report: Value =
        serde_json::from_slice(&fewest(&["count", "--json", &path]).stdout).unwrap();
    assert_eq!(
        (&report["state"], &report["in_use"]),
        (&"proved".into(), &3.into())
    );
}

#[test]
fn the_least_that_stays_out_is_proved_where_all_want_the_same() {
    let folder = tempfile::tempdir().unwrap();
    for count in 2..8 {
        let requests: String = (0..count)
            .map(|at| request(&format!("r{at}"), ""))
            .collect();
        let path = write(folder.path(), "a.toml", &format!("{TWO}{requests}"));
        let report: Value =
            serde_json::from_slice(&fewest(&["count", "--json", &path]).stdout).unwrap();
        assert_eq!(
            (&report["unplaced_weight"], &report["unplaced_floor"]),
            (&(count - 2).into(), &(count - 2).into())
        );
    }
}

#[test]
fn intake_notices_rows_that_would_be_lost() {
    let folder = tempfile::tempdir().unwrap();
    let run = |name: &str, text: &str, more: &[&str]| {
        let csv = write(folder.path(), name, text);
        let path = folder.path().join(name).with_extension("toml");
        let base = [
            "intake",
            &csv,
            "--out",
            path.to_str().unwrap(),
            "--id",
            "id",
            "--start",
            "s",
            "--end",
            "e",
        ];
        let output = fewest(&[&base[..], more].concat());
        (
            output.status.code(),
            err(&output),
            std::fs::read_to_string(path).unwrap_or_default(),
        )
    };
    let row = "2027-01-11 09:00,2027-01-11 10:00";
    let (code, said, _) = run("quote.csv", &format!("id,s,e\n\"a,{row}\nb,{row}\n"), &[]);
    assert!(
        code == Some(2) && said.contains("a quotation mark is never closed; look from line 2 on"),
        "{said}"
    );
    let (code, said, text) = run(
        "cells.csv",
        &format!("id,s,e\na,{row},x\nb,{row}\nc\n"),
        &[],
    );
    assert!(
        code == Some(3)
            && said.contains(":2: it has 4 cells, the heading has 3")
            && said.contains(":4: it has 1 cells"),
        "{said}"
    );
    assert_eq!(text.matches("[[request]]").count(), 1);
    let (code, said, _) = run("twice.csv", &format!("id,s,s,e\na,1,{row}\n"), &[]);
    assert!(
        code == Some(2) && said.contains("there are two columns \"s\""),
        "{said}"
    );
    let semicolons = format!("id,s,e\na,{row}\n").replace(',', ";");
    let (_, said, _) = run("semi.csv", &semicolons, &[]);
    assert!(
        said.contains("the cells seem to be separated by ;: --separator \";\""),
        "{said}"
    );
    assert_eq!(
        run("semi2.csv", &semicolons, &["--separator", ";"]).0,
        Some(0)
    );
    let (code, said, text) = run(
        "gap.csv",
        "id,s,e\na,2027-03-28 01:30,2027-03-28 02:30\n",
        &["--zone", "Europe/Lisbon"],
    );
    assert!(
        code == Some(0)
            && said.contains("2027-03-28 01:30:00 does not exist; 2027-03-28 02:30 was taken"),
        "{said}"
    );
    assert!(
        text.contains("start = 2027-03-28T02:30:00\nend = 2027-03-28T03:30:00"),
        "{text}"
    );
}

#[test]
fn a_closed_pipe_ends_quietly() {
    let path = file("sample-timetables/three-day-event.toml");
    let command = format!(
        "{} count {} | head -n 1",
        env!("CARGO_BIN_EXE_fewest"),
        path.display()
    );
    let output = Command::new("sh").args(["-c", &command]).output().unwrap();
    assert_eq!(
        (out(&output).as_str(), err(&output).as_str()),
        ("Waterside days\n", "")
    );
}
