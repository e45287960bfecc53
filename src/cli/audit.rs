//! `fewest audit`: plan files are rechecked without engine or search.

use super::{Outcome, code};
use crate::audit::{Refusal, check, check_plan};
use crate::claim::Answer;
use crate::document::{self, PlanFile, State, issued_path, plan_path};
use crate::store;
use crate::text::{clean, cut};
use crate::timetable::Timetable;
use crate::words::{self, state_name};
use std::fmt::Write;
use std::path::Path;
use std::sync::Arc;

/// Refusals written out; the rest are counted.
const MOST_SHOWN: usize = 30;

/// What came of one plan file.
enum Verdict {
    Holds { unplaced: bool, open: bool },
    Stale,
    Refused,
}

pub(super) fn audit(file: &Path) -> Outcome {
    let bytes = match store::read_bounded(file, document::MOST_BYTES) {
        Ok(bytes) => bytes,
        Err(error) => {
            return Outcome::bad(format!("{}: {error}", clean(&file.display().to_string())));
        }
    };
    let read = match document::read(&file.display().to_string(), &bytes) {
        Ok(read) => read,
        Err(mistakes) => return Outcome::bad(mistakes),
    };
    let hash = document::hash(&bytes);
    let mut outcome = Outcome::default();
    let mut verdicts = Vec::new();
    for path in [plan_path(file), issued_path(file)] {
        let name = clean(&path.display().to_string()).into_owned();
        let text = match store::read_bounded(&path, document::MOST_BYTES).map(String::from_utf8) {
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => continue,
            Err(error) => return Outcome::bad(format!("{name}: {error}")),
            Ok(Err(_)) => return Outcome::bad(format!("{name}: this is not UTF-8")),
            Ok(Ok(text)) => text,
        };
        match PlanFile::read(&path.display().to_string(), &text) {
            Ok(plan) => verdicts.push(judge(&read.timetable, &hash, &name, plan, &mut outcome)),
            Err(mistakes) => {
                outcome.err.push_str(&mistakes.to_string());
                verdicts.push(Verdict::Refused);
            }
        }
    }
    if verdicts.is_empty() {
        let _ = writeln!(
            outcome.out,
            "there is no plan file beside {}",
            clean(&file.display().to_string())
        );
    }
    let any = |test: fn(&Verdict) -> bool| verdicts.iter().any(test);
    outcome.code = if any(|v| matches!(v, Verdict::Refused)) {
        code::BAD
    } else if any(|v| matches!(v, Verdict::Holds { unplaced: true, .. })) {
        code::IMPOSSIBLE
    } else if verdicts.is_empty()
        || any(|v| matches!(v, Verdict::Stale | Verdict::Holds { open: true, .. }))
    {
        code::OPEN
    } else {
        0
    };
    outcome
}

fn judge(
    timetable: &Timetable,
    hash: &str,
    name: &str,
    file: PlanFile,
    outcome: &mut Outcome,
) -> Verdict {
    if file.timetable != hash {
        let _ = writeln!(
            outcome.out,
            "{name}: stale, the timetable has changed since; its proof does not count"
        );
        return Verdict::Stale;
    }
    let noun = &timetable.settings.noun;
    let unplaced = !file.plan.unplaced.is_empty();
    let PlanFile {
        plan,
        floor,
        violations,
        out,
        state,
        ..
    } = file;
    let Some(floor) = floor else {
        return match check_plan(timetable, &plan) {
            Err(refusals) => refuse(name, &refusals, outcome),
            Ok(in_use) => {
                let _ = writeln!(
                    outcome.out,
                    "{name}: the plan holds, {} in use; it keeps no proof{}",
                    words::count_of(in_use, noun),
                    if state == State::Between {
                        ""
                    } else {
                        ", so what it says is known does not count"
                    }
                );
                Verdict::Holds {
                    unplaced,
                    open: true,
                }
            }
        };
    };
    // What has begun stays where the plan has it.
    let begun = |id: &str| {
        let piece = timetable.piece(id);
        piece.is_some_and(|piece| piece.begun(&timetable.settings))
    };
    let placed = plan.placements.iter().filter(|p| begun(&p.piece));
    let stays = placed
        .map(|p| (Arc::clone(&p.piece), Arc::clone(&p.resource)))
        .collect();
    match check(
        timetable,
        &Answer {
            plan,
            floor,
            clique: Vec::new(),
            violations,
            out,
            changes: None,
            stays: Arc::new(stays),
            seconds: 0.0,
        },
    ) {
        Err(refusals) => refuse(name, &refusals, outcome),
        Ok(receipt) => {
            let shown = state_name(receipt.knowledge());
            if shown != said(state) {
                return refuse(
                    name,
                    &[Refusal::OtherState {
                        claimed: said(state).into(),
                        shown,
                    }],
                    outcome,
                );
            }
            let resources = timetable.resources().all.len();
            let words = words::state(&receipt, resources, noun, words::Progress::AtRest);
            let _ = writeln!(outcome.out, "{name}: plan and proof hold: {words}");
            Verdict::Holds {
                unplaced: unplaced || state == State::Impossible,
                open: state == State::Between,
            }
        }
    }
}

fn said(state: State) -> &'static str {
    match state {
        State::Proved => "proved",
        State::Between => "between",
        State::Impossible => "impossible",
    }
}

/// Cells of a refusal at most.
const LONGEST_LINE: usize = 400;

fn refuse(name: &str, refusals: &[Refusal], outcome: &mut Outcome) -> Verdict {
    for refusal in refusals.iter().take(MOST_SHOWN) {
        // Names in a plan file may be of any length.
        let said = cut(&clean(&refusal.to_string()), LONGEST_LINE);
        let _ = writeln!(outcome.err, "{name}: {said}");
    }
    if refusals.len() > MOST_SHOWN {
        let _ = writeln!(
            outcome.err,
            "{name}: and {} more",
            refusals.len() - MOST_SHOWN
        );
    }
    Verdict::Refused
}
