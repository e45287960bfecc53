//! `fewest why`.

use super::{Outcome, Search, notes};
use crate::claim::{Case, Ground};
use crate::desk::{self, Desk};
use crate::engine::Never;
use crate::text::clean;
use crate::words;
use serde::Serialize;
use std::fmt::Write;
use std::path::Path;

/// The object of `why --json`.
#[derive(Serialize)]
struct Report<'a> {
    count: usize,
    floor: usize,
    clique: usize,
    floor_by: &'static str,
    pieces: Vec<&'a str>,
    grounds: Vec<GroundOut>,
    prices: Vec<Price<'a>>,
    /// What all pins among the grounds save together.
    together: Option<usize>,
    unplaced: Vec<UnplacedOut<'a>>,
    sentence: String,
}

#[derive(Serialize)]
struct GroundOut {
    edit_or_key: String,
    place: String,
}

#[derive(Serialize)]
struct Price<'a> {
    pin: &'a str,
    saves: usize,
    proved: bool,
}

#[derive(Serialize)]
struct UnplacedOut<'a> {
    pieces: Vec<&'a str>,
    because: String,
    at: Option<String>,
    set: Vec<&'a str>,
    resources: Vec<&'a str>,
    cases: Option<usize>,
    grounds: Vec<GroundOut>,
}

pub(super) fn why(file: &Path, json: bool, search: Search) -> Outcome {
    let mut desk = match Desk::open(file) {
        Ok(desk) => desk,
        Err(trouble) => return Outcome::bad(trouble),
    };
    let unsaved = super::unsaved(&mut desk, search.unsaved);
    let settled = match search.run(desk.job()) {
        Ok(settled) => settled,
        Err(outcome) => return outcome,
    };
    let why = desk::why(&settled, &Never);
    let timetable = desk.timetable();
    let zone = timetable.settings.zone;
    let file_name = clean(&file.display().to_string()).into_owned();
    let ground = |ground: &Ground| {
        let line = desk.document().line_of_ground(timetable, ground);
        GroundOut {
            edit_or_key: words::ground(ground, zone),
            place: format!("{file_name}:{}", line.unwrap_or(1)),
        }
    };
    let report = Report {
        count: why.count,
        floor: why.floor,
        clique: why.clique,
        floor_by: why.by,
        pieces: why.pieces.iter().map(|id| &**id).collect(),
        grounds: why.grounds.iter().map(ground).collect(),
        prices: why
            .prices
            .iter()
            .map(|price| Price {
                pin: &price.pin,
                saves: price.saves,
                proved: price.proved,
            })
            .collect(),
        together: why.together.map(|(saves, _)| saves),
        unplaced: why
            .unplaced
            .iter()
            .map(|found| UnplacedOut {
                pieces: found.pieces.iter().map(|id| &**id).collect(),
                because: words::no_place(timetable, found),
                at: found.at.map(|at| zone.rfc3339(at)),
                set: found.set.iter().map(|id| &**id).collect(),
                resources: found.resources.iter().map(|id| &**id).collect(),
                cases: found.cases.as_ref().map(Case::count),
                grounds: found.grounds.iter().map(ground).collect(),
            })
            .collect(),
        sentence: words::why(timetable, &why),
    };
    let out = if json {
        match serde_json::to_string(&report) {
            Ok(text) => text + "\n",
            Err(error) => return Outcome::fault(error),
        }
    } else {
        text(&report)
    };
    Outcome {
        out,
        err: unsaved + &notes(&desk, file),
        code: super::count::exit_code(&settled),
    }
}

fn text(report: &Report<'_>) -> String {
    let mut out = String::new();
    for line in crate::text::wrap(&report.sentence, 78) {
        let _ = writeln!(out, "{line}");
    }
    let of_unplaced = report
        .unplaced
        .iter()
        .flat_map(|unplaced| &unplaced.grounds);
    let mut grounds = report.grounds.iter().chain(of_unplaced).peekable();
    if grounds.peek().is_some() {
        out.push('\n');
    }
    for ground in grounds {
        let _ = writeln!(out, "{}: {}", ground.place, ground.edit_or_key);
    }
    for price in &report.prices {
        let how = if price.proved {
            ""
        } else {
            ", as far as was found"
        };
        let _ = writeln!(out, "the pin of {} costs {}{how}", price.pin, price.saves);
    }
    out
}
