//! Plans and proofs that are wrong, each refused for the right reason.

use crate::tools::{err, fewest, file, folder_with};
use std::path::Path;

/// A script applied to a sample leaves a plan that audit lets through; here it is broken in
/// one place at a time.
fn planned() -> (tempfile::TempDir, String, String) {
    let folder = folder_with(&["sample-timetables/three-day-event.toml"]);
    let path = folder.path().join("three-day-event.toml");
    let script = folder.path().join("script");
    std::fs::write(&script, "fasten eels\nwithdraw tunnel\n").unwrap();
    let name = path.to_str().unwrap().to_string();
    assert_eq!(
        fewest(&["apply", &name, script.to_str().unwrap()])
            .status
            .code(),
        Some(0)
    );
    let plan = std::fs::read_to_string(folder.path().join("three-day-event.plan.toml")).unwrap();
    assert_eq!(fewest(&["audit", &name]).status.code(), Some(0));
    (folder, name, plan)
}

/// The lines of one placement.
fn placement(plan: &str, piece: &str) -> String {
    let start = plan
        .find(&format!("[[placement]]\npiece = \"{piece}\""))
        .unwrap();
    let rest = &plan[start..];
    let end = rest[1..].find("\n[").map_or(rest.len(), |at| at + 2);
    rest[..end].to_string()
}

fn with(plan: &str, piece: &str, change: impl Fn(&str) -> String) -> String {
    let old = placement(plan, piece);
    plan.replace(&old, &change(&old))
}

/// The value of a key in a placement.
fn value<'a>(placement: &'a str, key: &str) -> &'a str {
    let at = placement.find(&format!("{key} = \"")).unwrap() + key.len() + 4;
    placement[at..].split('"').next().unwrap()
}

#[test]
fn corrupted_plans_are_refused_with_the_right_reason() {
    let (folder, name, plan) = planned();
    let on = |piece: &str| value(&placement(&plan, piece), "resource").to_string();
    let proof_pieces = plan
        .split("pieces = [")
        .nth(1)
        .unwrap()
        .split(']')
        .next()
        .unwrap()
        .to_string();
    let first = proof_pieces.split('"').nth(1).unwrap().to_string();
    let cases: Vec<(&str, String, String)> = vec![
        (
            "forgotten",
            with(&plan, "eels", |_| String::new()),
            "the plan forgets eels".into(),
        ),
        (
            "twice",
            with(&plan, "eels", |old| format!("{old}\n{old}")),
            "the plan has eels twice".into(),
        ),
        (
            "double booked",
            with(&plan, "map-print", |old| {
                old.replace(&on("map-print"), &on("loop-tour"))
            }),
            format!(
                "{} has loop-tour and map-print at the same time",
                on("loop-tour")
            ),
        ),
        (
            "does not suit",
            with(&plan, "eels", |old| old.replace(&on("eels"), "boathouse")),
            "boathouse may not take eels: it is too small".into(),
        ),
        (
            "other time",
            with(&plan, "eels", |old| {
                old.replace("T12:", "T11:").replace("T11:", "T10:")
            }),
            "eels is planned at another time than the timetable says".into(),
        ),
        (
            "unknown resource",
            with(&plan, "eels", |old| old.replace(&on("eels"), "cellar")),
            "eels is placed on cellar, which the timetable does not have".into(),
        ),
        (
            "unknown piece",
            format!(
                "{plan}\n{}",
                placement(&plan, "eels").replace("eels", "snakes")
            ),
            "the plan speaks of piece snakes".into(),
        ),
        (
            "withdrawn",
            format!(
                "{plan}\n{}",
                placement(&plan, "eels").replace("eels", "tunnel")
            ),
            "tunnel is withdrawn, yet the plan has it".into(),
        ),
        (
            "the proof counts what is withdrawn",
            plan.replace(&format!("    \"{first}\""), "    \"tunnel\""),
            "the bound counts tunnel, which is unknown or withdrawn".into(),
        ),
        (
            "the proof counts one twice",
            plan.replacen(
                &format!("    \"{first}\",\n"),
                &format!("    \"{first}\",\n    \"{first}\",\n"),
                1,
            )
            .replace("floor = 9", "floor = 10"),
            format!("the bound counts {first} twice"),
        ),
        (
            "the proof is one short of its claim",
            plan.replacen(&format!("    \"{first}\",\n"), "", 1),
            "it claims at least 9, but its proof gives 8".into(),
        ),
        (
            "the clique does not run then",
            plan.replace(
                "by = \"clique\"\nat = \"2027-06-1",
                "by = \"clique\"\nat = \"2027-07-1",
            ),
            format!("the clique counts {first}, which does not run at its moment"),
        ),
        (
            "no clique by incompatibility",
            {
                let from = plan.find("by = \"clique\"").unwrap();
                let to = plan[from..].find("pieces").unwrap() + from;
                let lie = format!("{}by = \"incompatible\"\n{}", &plan[..from], &plan[to..]);
                lie.replace(&proof_pieces, &format!("{proof_pieces}    \"mud\",\n"))
                    .replace("floor = 9", "floor = 10")
            },
            "cannot share a resource, but".into(),
        ),
        (
            "claims more than it shows",
            plan.replace("state = \"proved\"", "state = \"between\""),
            "the plan file says \"between\", but what it shows is \"proved\"".into(),
        ),
        (
            "another format",
            plan.replace("format = 1", "format = 2"),
            "plan files of format 2 are not known".into(),
        ),
        (
            "not TOML",
            plan.replace("[[placement]]", "[[placement]"),
            "this is no plan file".into(),
        ),
    ];
    let path = folder.path().join("three-day-event.plan.toml");
    for (what, corrupted, says) in cases {
        assert!(corrupted != plan, "{what}: the case itself changes nothing");
        std::fs::write(&path, corrupted).unwrap();
        let output = fewest(&["audit", &name]);
        assert_eq!(output.status.code(), Some(2), "{what}: {}", err(&output));
        assert!(
            err(&output).contains(&says),
            "{what}: {} should say {says}",
            err(&output)
        );
    }
}

/// `tests/cases/refused-plans`: for each timetable one plan with a proof that holds
/// (`NAME.good.plan.toml`), and plans with one lie each (`NAME.LIE.plan.toml`) beside what
/// audit says to it (`NAME.LIE.says`).
#[test]
fn a_folder_of_lies_is_refused() {
    let folder = file("tests/cases/refused-plans");
    let mut lies = 0;
    for entry in std::fs::read_dir(&folder).unwrap() {
        let path = entry.unwrap().path();
        let name = path.file_name().unwrap().to_str().unwrap();
        let Some((base, what)) = name
            .strip_suffix(".plan.toml")
            .and_then(|n| n.split_once('.'))
        else {
            continue;
        };
        let place = tempfile::tempdir().unwrap();
        let timetable = place.path().join(format!("{base}.toml"));
        std::fs::copy(folder.join(format!("{base}.toml")), &timetable).unwrap();
        std::fs::copy(&path, place.path().join(format!("{base}.plan.toml"))).unwrap();
        let output = fewest(&["audit", timetable.to_str().unwrap()]);
        if what == "good" {
            // 4: proved that not everything fits.
            let code = if base == "out" { 4 } else { 0 };
            assert_eq!(output.status.code(), Some(code), "{name}: {}", err(&output));
            continue;
        }
        lies += 1;
        let says = std::fs::read_to_string(folder.join(format!("{base}.{what}.says"))).unwrap();
        let said = err(&output).replace(&format!("{}/", place.path().display()), "");
        assert_eq!(output.status.code(), Some(2), "{name}: {said}");
        assert_eq!(said, says, "{name}");
    }
    assert!(lies >= 30, "only {lies}");
}

#[test]
fn shortages_are_rechecked() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.toml");
    let request = |id: &str| {
        format!(
            "[[request]]\nid = \"{id}\"\nstart = 2027-01-11T09:00:00\nlength = \"1h\"\npin = \"north\"\n"
        )
    };
    let head =
        "[timetable]\ntitle = \"t\"\n[[resource]]\nid = \"north\"\n[[resource]]\nid = \"south\"\n";
    std::fs::write(&path, format!("{head}{}{}", request("a"), request("b"))).unwrap();
    let name = path.to_str().unwrap();
    let script = folder.path().join("script");
    std::fs::write(&script, "fasten a\n").unwrap();
    assert_eq!(
        fewest(&["apply", name, script.to_str().unwrap()])
            .status
            .code(),
        Some(4)
    );
    assert_eq!(fewest(&["audit", name]).status.code(), Some(4));
    let plan_path = folder.path().join("a.plan.toml");
    let plan = std::fs::read_to_string(&plan_path).unwrap();
    let resources = plan.find("resources = [").unwrap();
    let list = &plan[resources..plan[resources..].find(']').unwrap() + resources];
    for (what, corrupted, says) in [
        (
            "leaves one out",
            plan.replace(list, "resources = ["),
            "the shortage leaves out north, which may take a",
        ),
        (
            "has enough",
            plan.replace(list, "resources = [\"north\", \"south\""),
            "a claimed shortage has enough resources",
        ),
    ] {
        assert!(corrupted != plan, "{what}");
        std::fs::write(&plan_path, corrupted).unwrap();
        let output = fewest(&["audit", name]);
        assert_eq!(output.status.code(), Some(2), "{what}");
        assert!(err(&output).contains(says), "{what}: {}", err(&output));
    }
    assert!(Path::new(&plan_path).exists());
}
