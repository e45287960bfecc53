//! `fewest count`.

use super::{Outcome, Search, code, notes};
use crate::audit::Knowledge;
use crate::clock::Span;
use crate::desk::{Desk, Settled};
use crate::text::clean;
use crate::words::{self, Progress};
use serde::Serialize;
use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::fmt::Write;
use std::path::Path;

/// The object of `count --json`.
#[derive(Serialize)]
struct Report<'a> {
    title: &'a str,
    requests: usize,
    pieces: usize,
    resources: Option<usize>,
    state: &'static str,
    in_use: usize,
    floor: usize,
    clique: usize,
    floor_by: &'static str,
    days: Vec<Day>,
    peaks: Vec<PeakOut<'a>>,
    placements: BTreeMap<&'a str, &'a str>,
    unplaced: Vec<UnplacedOut<'a>>,
    unplaced_weight: u64,
    unplaced_floor: u64,
    /// Pieces elsewhere than in the plan handed out, else the one saved; absent without one.
    #[serde(skip_serializing_if = "Option::is_none")]
    relocated: Option<usize>,
    #[serde(skip_serializing_if = "Option::is_none")]
    relocated_floor: Option<usize>,
    clashes: Vec<ClashOut<'a>>,
    seconds: f64,
}

#[derive(Serialize)]
struct Day {
    date: String,
    in_use: usize,
    clique: usize,
}

#[derive(Serialize)]
struct PeakOut<'a> {
    from: String,
    to: String,
    pieces: Vec<&'a str>,
}

#[derive(Serialize)]
struct UnplacedOut<'a> {
    piece: &'a str,
    because: String,
}

#[derive(Serialize)]
struct ClashOut<'a> {
    person: &'a str,
    pieces: [&'a str; 2],
}

pub(super) fn count(file: &Path, json: bool, search: Search) -> Outcome {
    let mut desk = match Desk::open(file) {
        Ok(desk) => desk,
        Err(trouble) => return Outcome::bad(trouble),
    };
    let unsaved = super::unsaved(&mut desk, search.unsaved);
    let settled = match search.run(desk.job()) {
        Ok(settled) => settled,
        Err(outcome) => return outcome,
    };
    let report = report(&settled);
    let out = if json {
        match serde_json::to_string(&report) {
            Ok(text) => text + "\n",
            Err(error) => return Outcome::fault(error),
        }
    } else {
        text(&settled, &report)
    };
    Outcome {
        out,
        err: unsaved + &notes(&desk, file),
        code: exit_code(&settled),
    }
}

/// The exit code that an answer calls for.
pub(super) fn exit_code(settled: &Settled) -> u8 {
    match settled.receipt().knowledge() {
        _ if settled.receipt().unplaced() > 0 => code::IMPOSSIBLE,
        Knowledge::Impossible { .. } => code::IMPOSSIBLE,
        Knowledge::Between { .. } => code::OPEN,
        Knowledge::Proved(_) => 0,
    }
}

fn report(settled: &Settled) -> Report<'_> {
    let (survey, receipt, answer) = (settled.survey(), settled.receipt(), settled.answer());
    let timetable = &survey.timetable;
    let zone = timetable.settings.zone;
    let resources = timetable.resources();
    let peaks = survey.load.peaks();
    // One pass over the pieces by start serves every peak in turn.
    let mut by_start: Vec<(usize, Span)> = survey.cores.clone();
    by_start.sort_by_key(|(_, span)| span.start);
    let mut running: Vec<(usize, Span)> = Vec::new();
    let mut next = 0;
    let peaks = peaks.iter().map(|peak| {
        while let Some((at, span)) = by_start
            .get(next)
            .filter(|(_, span)| span.start <= peak.span.start)
        {
            running.push((*at, *span));
            next += 1;
        }
        running.retain(|(_, span)| span.end > peak.span.start);
        let mut pieces: Vec<usize> = running.iter().map(|(at, _)| *at).collect();
        pieces.sort_unstable();
        PeakOut {
            from: zone.rfc3339(peak.span.start),
            to: zone.rfc3339(peak.span.end),
            pieces: pieces.iter().map(|at| &*survey.pieces[*at].id).collect(),
        }
    });
    Report {
        title: &timetable.settings.title,
        requests: timetable
            .requests
            .iter()
            .filter(|request| !request.withdrawn)
            .count(),
        pieces: survey.cores.len(),
        resources: (!resources.open_ended).then_some(resources.all.len()),
        state: words::state_name(receipt.knowledge()),
        in_use: receipt.in_use(),
        floor: receipt.floor(),
        clique: settled.clique(),
        floor_by: answer.floor.name(),
        days: days(settled),
        peaks: peaks.collect(),
        placements: answer
            .plan
            .placements
            .iter()
            .map(|p| (&*p.piece, &*p.resource))
            .collect(),
        unplaced: answer
            .plan
            .unplaced
            .iter()
            .map(|u| UnplacedOut {
                piece: &u.piece,
                because: words::unplaced(timetable, u),
            })
            .collect(),
        unplaced_weight: receipt.unplaced_weight(),
        unplaced_floor: receipt.unplaced_floor(),
        relocated: receipt.changes().map(|changes| changes.relocated()),
        relocated_floor: receipt.changes().map(|changes| changes.floor()),
        clashes: survey
            .clashes
            .iter()
            .map(|c| ClashOut {
                person: &c.person,
                pieces: [&c.first, &c.second],
            })
            .collect(),
        seconds: answer.seconds,
    }
}

/// Every date on which something runs (least buffers included), with its distinct resources
/// and its largest load.
fn days(settled: &Settled) -> Vec<Day> {
    let survey = settled.survey();
    let zone = survey.timetable.settings.zone;
    let placed: HashMap<&str, &str> = settled
        .answer()
        .plan
        .placements
        .iter()
        .map(|p| (&*p.piece, &*p.resource))
        .collect();
    let mut used: BTreeMap<chrono::NaiveDate, BTreeSet<&str>> = BTreeMap::new();
    for (at, span) in &survey.cores {
        for date in zone.dates(*span) {
            let resources = used.entry(date).or_default();
            resources.extend(placed.get(&*survey.pieces[*at].id));
        }
    }
    used.into_iter()
        .map(|(date, resources)| Day {
            date: date.to_string(),
            in_use: resources.len(),
            clique: survey.load.most_within(zone.day(date)),
        })
        .collect()
}

/// Lines of the day table; longer timetables are cut.
const MOST_DAYS: usize = 31;

fn text(settled: &Settled, report: &Report<'_>) -> String {
    let survey = settled.survey();
    let settings = &survey.timetable.settings;
    let noun = &settings.noun;
    let (resources, zone) = (survey.timetable.resources().all.len(), settings.zone);
    let mut out = format!("{}\n", clean(report.title));
    let state = words::state(settled.receipt(), resources, noun, Progress::AtRest);
    let _ = writeln!(out, "{state}");
    if let Some(changes) = words::changes(settled.answer(), settled.receipt(), noun) {
        let _ = writeln!(out, "{changes}");
    }
    let _ = writeln!(out, "{}", words::peaks(report.clique, &survey.load, zone));
    if let Some(peak) = report.peaks.first() {
        let _ = writeln!(
            out,
            "  they all overlap then: {}",
            words::list(&peak.pieces, 12)
        );
    }
    let names = settled.answer().floor.pieces();
    let names: Vec<&str> = names.iter().map(|id| &**id).collect();
    let one = clean(&noun.one);
    let ground = match report.floor_by {
        "incompatible" => Some(format!(
            "no two of these can share a {one}, by time or by what they may use"
        )),
        "prices" => Some(format!(
            "even if every {one} takes what suits it best, fewer cannot take all of these"
        )),
        "cases" => Some("every way to do with fewer fails at these".into()),
        _ => None,
    };
    if let Some(ground) = ground {
        let list = words::list(&names, 12);
        let _ = writeln!(out, "at least {}: {ground}: {list}", report.floor);
    }
    let _ = writeln!(out, "\n{:<10}  {:>6}  {:>6}", "day", "in use", "clique");
    for day in report.days.iter().take(MOST_DAYS) {
        let _ = writeln!(
            out,
            "{:<10}  {:>6}  {:>6}",
            day.date, day.in_use, day.clique
        );
    }
    if report.days.len() > MOST_DAYS {
        let _ = writeln!(out, "and {} more days", report.days.len() - MOST_DAYS);
    }
    for unplaced in &report.unplaced {
        let _ = writeln!(out, "unplaced: {}: {}", unplaced.piece, unplaced.because);
    }
    for clash in report.clashes.iter().take(20) {
        let _ = writeln!(
            out,
            "clash: {} is in {} and {}",
            clean(clash.person),
            clash.pieces[0],
            clash.pieces[1]
        );
    }
    if report.clashes.len() > 20 {
        let _ = writeln!(out, "and {} more clashes", report.clashes.len() - 20);
    }
    out
}
