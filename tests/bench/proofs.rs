//! How much is proved, and how fast: one line per instance with answer, floor, by what,
//! seconds, and memory so far.
//!
//! `cargo bench --bench proofs -- SET SECONDS [PART-OF-NAME [SEED]]`, such as `keb137 10`
//! or `shifts30 20`: published instances (Krishnamoorthy, Ernst, Baatar, EJOR 219, 2012;
//! Fages, Lapegue, CP 2013). The data are not part of the project; they are looked for in
//! `../shared/data` or the folder named in `FEWEST_DATA`.
//!
//! `cargo bench --bench proofs -- family-N SECONDS [PART-OF-NAME [SEED]]`: twenty timetables
//! of N requests as `tests/family.rs` describes them, with answers known by construction.
//!
//! `cargo bench --bench proofs -- edits-N SECONDS [SEED]`: a hundred random edits on a
//! timetable of the family with N requests, each from the same plan: time to the first
//! repaired plan, and to a plan whose resources and changes are both proved to be the fewest.
//!
//! `cargo bench --bench proofs -- term SECONDS`: five terms of 15 weeks, 2,000 weekly requests
//! kept together on 150 rooms; the answer is not known, the floor and the gap are of interest.
#![allow(clippy::unwrap_used, reason = "a benchmark may panic")]
#![allow(clippy::print_stdout, reason = "a benchmark prints what it measures")]

use fewest::audit::Knowledge;
use fewest::claim::{FloorProof, Plan};
use fewest::clock::{Instant, Span};
use fewest::desk::{Job, Settled};
use fewest::edit::{Change, Edit};
use fewest::engine::{Budget, Until};
use fewest::timetable::{Listed, Named, Request, Settings, Timetable, may_use};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::{Duration, Instant as Watch};

#[path = "../family.rs"]
mod family;

/// Reads an instance: tasks as requests, workers as resources, qualifications as `only`.
fn read(path: &Path) -> Timetable {
    let text = std::fs::read_to_string(path).unwrap();
    let mut lines = text
        .lines()
        .filter(|line| !line.starts_with('#') && !line.trim().is_empty());
    let mut count = |name: &str| -> usize {
        let line = lines.by_ref().find(|line| line.starts_with(name)).unwrap();
        line.split('=').nth(1).unwrap().trim().parse().unwrap()
    };
    let jobs = count("Jobs");
    let mut rest = text
        .lines()
        .filter(|line| !line.starts_with('#') && !line.trim().is_empty());
    rest.find(|line| line.starts_with("Jobs"));
    let numbers = |line: &str| -> Vec<i64> {
        line.replace(':', " ")
            .split_whitespace()
            .map(|n| n.parse().unwrap())
            .collect()
    };
    let mut requests: Vec<Request> = (0..jobs)
        .map(|task| {
            let span = numbers(rest.next().unwrap());
            let span = Span {
                start: Instant(span[0] * 60),
                end: Instant(span[1] * 60),
            };
            Request::plain(&format!("t{task}"), span)
        })
        .collect();
    let workers: usize = rest
        .next()
        .unwrap()
        .split('=')
        .nth(1)
        .unwrap()
        .trim()
        .parse()
        .unwrap();
    let names: Vec<Arc<str>> = (0..workers)
        .map(|worker| format!("w{worker}").into())
        .collect();
    for name in &names {
        for task in &numbers(rest.next().unwrap())[1..] {
            requests[*task as usize].only.push(Arc::clone(name));
        }
    }
    let named = names.iter().map(|id| Named {
        id: Arc::clone(id),
        kind: None,
        common: Default::default(),
    });
    let listed = (0..workers).map(Listed::Named).collect();
    Timetable::new(
        Settings::titled("instance"),
        Vec::new(),
        named.collect(),
        listed,
        requests,
    )
}

fn memory() -> u64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"));
    line.and_then(|line| line.trim().trim_end_matches(" kB").parse::<u64>().ok())
        .unwrap_or(0)
        >> 10
}

/// An instance with what is known of it.
struct Instance {
    name: String,
    timetable: Timetable,
    /// Proved bounds on the answer.
    floor: usize,
    best: usize,
}

/// Seeds of the family in a benchmark.
const SEEDS: std::ops::Range<u64> = 1..21;

fn made(n: usize, part: &str) -> impl Iterator<Item = Instance> + '_ {
    let made = SEEDS.map(move |seed| (seed, family::make(n, seed)));
    made.map(move |(seed, made)| {
        let read = fewest::document::read("family.toml", made.text.as_bytes());
        Instance {
            name: format!("{}-{n}-{seed:02}_", made.kind),
            timetable: read
                .unwrap_or_else(|mistakes| panic!("{mistakes}"))
                .timetable,
            floor: made.answer,
            best: made.answer,
        }
    })
    .filter(move |instance| instance.name.contains(part))
}

/// A random edit: of ten, four moves by up to two hours, two pins on a room that suits, two
/// closures of a room in use for one to four hours, one withdrawal, one pin on any room.
fn random_edit(timetable: &Timetable, plan: &Plan, dice: &mut family::Dice) -> Option<Edit> {
    let pieces = timetable.pieces();
    let piece = &pieces[dice.below(pieces.len())];
    let id = Arc::clone(&piece.id);
    let resources = &timetable.resources().all;
    let on = &resources[dice.below(resources.len())];
    let what = match dice.below(10) {
        0..4 => Change::Move {
            piece: id,
            to: piece.span.start + 900 * (dice.below(17) as i64 - 8),
        },
        4..6 => {
            let mut free = piece.clone();
            free.pin = None;
            may_use(&free, on).ok()?;
            Change::Pin {
                piece: id,
                on: Arc::clone(&on.id),
            }
        }
        6..8 => {
            let used = &plan.placements[dice.below(plan.placements.len())];
            let length = 3_600 * (1 + dice.below(4) as i64);
            Change::Close {
                resource: Arc::clone(&used.resource),
                span: Span::lasting(used.span.start, length),
            }
        }
        8 => Change::Withdraw(id),
        _ => Change::Pin {
            piece: id,
            on: Arc::clone(&on.id),
        },
    };
    Some(what.into())
}

fn edits(n: usize, seconds: f64, seed: u64) {
    let made = family::make(n, seed);
    let read = fewest::document::read("family.toml", made.text.as_bytes());
    let timetable = read
        .unwrap_or_else(|mistakes| panic!("{mistakes}"))
        .timetable;
    let job = |timetable: &Timetable, before: Option<(&Arc<Plan>, &Arc<FloorProof>)>| Job {
        generation: 0,
        timetable: timetable.clone(),
        reference: before.map(|(plan, _)| Arc::clone(plan)),
        issued: None,
        floor: before.map(|(_, floor)| Arc::clone(floor)),
        begun: Arc::default(),
    };
    let budget = Budget {
        seed: 1,
        steps: None,
        threads: 2,
    };
    let until = || Until(Watch::now() + Duration::from_secs_f64(seconds));
    let base = job(&timetable, None)
        .run(budget, &until(), &mut |_| {})
        .unwrap();
    let plan = Arc::new(base.answer().plan.clone());
    let floor = Arc::new(base.answer().floor.clone());
    println!(
        "{}-{n}-{seed}: {} rooms in use",
        made.kind,
        base.receipt().in_use()
    );
    let mut dice = family::Dice(seed);
    let (mut firsts, mut dones, mut proved, mut all) = (Vec::new(), Vec::new(), 0, 0);
    while all < 100 {
        let Some(edit) = random_edit(&timetable, &plan, &mut dice) else {
            continue;
        };
        let mut changed = timetable.clone();
        if fewest::edit::apply(&mut changed, &edit).is_err() {
            continue;
        }
        all += 1;
        let line = fewest::edit::print(&edit, timetable.settings.zone);
        let watch = Watch::now();
        let (mut first, mut done) = (None, None);
        let fewest = |settled: &Settled| {
            let receipt = settled.receipt();
            let count = match receipt.knowledge() {
                Knowledge::Proved(_) => true,
                Knowledge::Between { .. } => false,
                Knowledge::Impossible { least, .. } => least,
            };
            count && receipt.changes().is_some_and(|changes| changes.fewest())
        };
        let settled = job(&changed, Some((&plan, &floor)))
            .run(budget, &until(), &mut |settled| {
                _ = first.get_or_insert(watch.elapsed());
                if fewest(settled) {
                    _ = done.get_or_insert(watch.elapsed());
                }
            })
            .unwrap();
        let ms = |time: Option<Duration>| time.map_or(f64::INFINITY, |t| t.as_secs_f64() * 1e3);
        let receipt = settled.receipt();
        let changes = receipt.changes().unwrap();
        proved += usize::from(fewest(&settled));
        firsts.push(ms(first));
        dones.push(ms(done));
        println!(
            "{line:<60} {:>4} rooms {:>3} out {:>4} relocated, at least {:>4} {:>8.1} {:>9.1} ms",
            receipt.in_use(),
            receipt.unplaced(),
            changes.relocated(),
            changes.floor(),
            ms(first),
            ms(done)
        );
    }
    firsts.sort_by(f64::total_cmp);
    dones.sort_by(f64::total_cmp);
    println!(
        "first plan median {:.1} ms, p90 {:.1}; fewest proved for {proved} of {all}, median {:.1} ms, p90 {:.1}; {} MiB",
        firsts[50],
        firsts[90],
        dones[50],
        dones[90],
        memory()
    );
}

fn terms() -> impl Iterator<Item = Instance> {
    (1..6).map(|seed| {
        let made = family::term(2_000, 150, seed);
        let read = fewest::document::read("term.toml", made.text.as_bytes());
        Instance {
            name: format!("term-{seed}"),
            timetable: read
                .unwrap_or_else(|mistakes| panic!("{mistakes}"))
                .timetable,
            floor: 0,
            best: made.answer,
        }
    })
}

/// The published instances, each read when its turn comes; `None` when they are not here.
fn published(set: &str, part: &str) -> Option<impl Iterator<Item = Instance>> {
    let root = std::env::var_os("FEWEST_DATA")
        .map_or_else(|| PathBuf::from("../shared/data"), PathBuf::from);
    let folder = root.join("smptsp");
    let Ok(answers) = std::fs::read_to_string(folder.join("answers.csv")) else {
        println!(
            "SKIPPED: {} is not here; name its folder in FEWEST_DATA",
            folder.display()
        );
        return None;
    };
    let wanted = answers.lines().skip(1).filter_map(|line| {
        let cells: Vec<String> = line.split(',').map(str::to_string).collect();
        (cells[0] == set && cells[1].contains(part)).then_some(cells)
    });
    let wanted: Vec<Vec<String>> = wanted.collect();
    let folder = folder.join(set);
    Some(wanted.into_iter().map(move |cells| Instance {
        timetable: read(&folder.join(format!("{}.dat", cells[1]))),
        floor: cells[5].parse().unwrap(),
        best: cells[6].parse().unwrap(),
        name: cells[1].clone(),
    }))
}

fn main() {
    let args: Vec<String> = std::env::args()
        .skip(1)
        .filter(|arg| !arg.starts_with("--"))
        .collect();
    let set = args.first().map_or("keb137", String::as_str);
    let seconds: f64 = args.get(1).map_or(10.0, |text| text.parse().unwrap());
    let part = args.get(2).map_or("", String::as_str);
    let seed: u64 = args.get(3).map_or(1, |text| text.parse().unwrap());
    if let Some(n) = set.strip_prefix("edits-") {
        return edits(n.parse().unwrap(), seconds, part.parse().unwrap_or(2));
    }
    let instances: Box<dyn Iterator<Item = Instance>> = match set.strip_prefix("family-") {
        Some(n) => Box::new(made(n.parse().unwrap(), part)),
        None if set == "term" => Box::new(terms()),
        None => match published(set, part) {
            Some(instances) => Box::new(instances),
            None => return,
        },
    };
    println!(
        "{:<30} {:>6} {:>6} {:>6} {:>12} {:>8} {:>9} {:>9} {:>6}",
        "instance", "answer", "floor", "clique", "by", "state", "first ms", "seconds", "MiB"
    );
    let (mut proved, mut all, mut above) = (0, 0, 0);
    let (mut times, mut firsts) = (Vec::new(), Vec::new());
    for instance in instances {
        let job = Job {
            generation: 0,
            timetable: instance.timetable,
            reference: None,
            issued: None,
            floor: None,
            begun: Arc::default(),
        };
        let watch = Watch::now();
        let until = Until(watch + Duration::from_secs_f64(seconds));
        let mut first = None;
        let budget = Budget {
            seed,
            steps: None,
            threads: 2,
        };
        let settled = job
            .run(budget, &until, &mut |_| {
                _ = first.get_or_insert(watch.elapsed())
            })
            .unwrap();
        let taken = watch.elapsed().as_secs_f64();
        let receipt = settled.receipt();
        let state = match receipt.knowledge() {
            Knowledge::Proved(_) => "proved",
            Knowledge::Between { .. } => "between",
            Knowledge::Impossible { .. } => "impossible",
        };
        assert!(
            receipt.floor() <= instance.best
                && (receipt.unplaced() > 0 || receipt.in_use() >= instance.floor),
            "{}: {receipt:?}, known are {}..{}",
            instance.name,
            instance.floor,
            instance.best
        );
        all += 1;
        above += usize::from(instance.best > settled.survey().load.most);
        if state == "proved" {
            proved += 1;
        }
        times.push(if state == "proved" {
            taken
        } else {
            f64::INFINITY
        });
        let first = first.unwrap_or_default().as_secs_f64() * 1e3;
        firsts.push(first);
        let answer = match receipt.unplaced() {
            0 => receipt.in_use().to_string(),
            left => format!("{}-{left}", receipt.in_use()),
        };
        println!(
            "{:<30} {:>6} {:>6} {:>6} {:>12} {:>8} {:>9.1} {:>9.3} {:>6}",
            instance.name,
            answer,
            receipt.floor(),
            settled.survey().load.most,
            settled.answer().floor.name(),
            state,
            first,
            taken,
            memory()
        );
    }
    times.sort_by(f64::total_cmp);
    firsts.sort_by(f64::total_cmp);
    let median = |list: &[f64]| list.get(list.len() / 2).copied().unwrap_or(f64::NAN);
    println!(
        "{proved} of {all} proved within {seconds} s; median {:.3} s; first plan median {:.1} ms; the answer is above the clique in {above}",
        median(&times),
        median(&firsts)
    );
}
