//! Why not fewer, and why not everything: from what audit has let through, dropping what is
//! stated piece by piece and having audit recheck what remains.

use super::{Job, Settled};
use crate::audit::{self, Knowledge};
use crate::claim::{FloorProof, Ground, HallViolation, NoPlace, PinPrice, Why};
use crate::edit::Change;
use crate::engine::reasons::{cannot_all, explicit, minimal, plainer, without};
use crate::engine::{Budget, Either, Flag, Stopper, Until};
use crate::lookup::FastSet;
use crate::timetable::{Piece, Prefer, Resource, Timetable, all_may_use};
use std::collections::HashMap;
use std::sync::Arc;
use std::time::{Duration, Instant};

/// How long the search without one pin may take.
const PER_PIN: Duration = Duration::from_millis(1_500);

/// Pins that are priced at most.
const MOST_PINS: usize = 12;

/// Pieces without a place that are explained at most.
const MOST_UNPLACED: usize = 20;

/// How long the search for a set that cannot all be placed may take.
const PER_PIECE: Duration = Duration::from_secs(2);

/// Answers "why not fewer" for a settled answer, and "why not everything" when something has
/// no place.
pub fn why(settled: &Settled, stop: &(dyn Stopper + Sync)) -> Why {
    let (answer, receipt) = (settled.answer(), settled.receipt());
    let stated = &settled.survey().timetable;
    let (as_it_is, begun) = with_begun(stated, &answer.stays);
    let timetable = &as_it_is;
    let plainer = plainer(timetable, &answer.floor, stop);
    let plainer = plainer.filter(|plainer| audit::check_floor(timetable, plainer).is_ok());
    let floor = plainer.as_ref().unwrap_or(&answer.floor);
    let mut why = Why {
        count: receipt.in_use(),
        floor: receipt.floor(),
        clique: settled.clique(),
        by: floor.name(),
        pieces: floor.pieces(),
        grounds: Vec::new(),
        prices: Vec::new(),
        together: None,
        unplaced: Vec::new(),
    };
    if why.floor > 0 {
        let small = only_with(timetable, &why.pieces);
        let holds = |less: &Timetable| audit::check_floor(less, floor).is_ok();
        if holds(&small) {
            why.grounds = minimal(&small, &holds, stop).0;
        }
    }
    if why.floor > why.clique {
        price_pins(settled, timetable, &mut why, stop);
    }
    let mut seen: FastSet<Arc<str>> = FastSet::default();
    for unplaced in &answer.plan.unplaced {
        if why.unplaced.len() == MOST_UNPLACED || stop.stop() {
            break;
        }
        let Some(piece) = timetable.piece(&unplaced.piece) else {
            continue;
        };
        if !piece.together() || seen.insert(Arc::clone(&piece.request.id)) {
            let same = answer.plan.unplaced.iter().map(|other| &other.piece);
            let pieces = same.filter(|id| {
                **id == piece.id
                    || (piece.together() && id.split('@').next() == Some(&*piece.request.id))
            });
            let pieces = pieces.cloned().collect();
            why.unplaced
                .push(no_place(timetable, &answer.violations, pieces, stop));
        }
    }
    let mut of_unplaced: Vec<&mut Vec<Ground>> = Vec::new();
    of_unplaced.extend(
        why.unplaced
            .iter_mut()
            .map(|unplaced| &mut unplaced.grounds),
    );
    for grounds in of_unplaced.into_iter().chain([&mut why.grounds]) {
        let own = own_pins(stated, grounds);
        grounds.extend(own);
    }
    let of_unplaced = why
        .unplaced
        .iter_mut()
        .map(|unplaced| &mut unplaced.grounds);
    for ground in of_unplaced.chain([&mut why.grounds]).flatten() {
        if let Ground::Pin { piece, on } = ground
            && begun.contains(piece)
        {
            let (piece, on) = (Arc::clone(piece), Arc::clone(on));
            *ground = Ground::Begun { piece, on };
        }
    }
    why.prices.retain(|price| !begun.contains(&price.pin));
    why
}

/// Where a request's pin is a ground, the pins of its dates are part of it.
fn own_pins(timetable: &Timetable, grounds: &[Ground]) -> Vec<Ground> {
    let mut own = Vec::new();
    for ground in grounds {
        let Ground::Pin { piece, .. } = ground else {
            continue;
        };
        let repeats = timetable
            .request(piece)
            .and_then(|request| request.repeats.as_ref());
        let Some(repeats) = repeats else { continue };
        for date in 0..repeats.dates().len() {
            let differs = repeats.differs(date).filter(|differs| !differs.withdrawn);
            own.extend(
                differs
                    .and_then(|differs| differs.pin.as_ref())
                    .map(|pin| Ground::Pin {
                        piece: Arc::clone(&repeats.dates()[date].id),
                        on: Arc::clone(pin),
                    }),
            );
        }
    }
    own
}

/// The timetable with what has begun pinned where it is, and which pieces those are.
fn with_begun(
    timetable: &Timetable,
    stays: &HashMap<Arc<str>, Arc<str>>,
) -> (Timetable, FastSet<Arc<str>>) {
    let (mut pinned, mut begun) = (timetable.clone(), FastSet::default());
    for (piece, on) in stays {
        let pin = Change::Pin {
            piece: Arc::clone(piece),
            on: Arc::clone(on),
        };
        if crate::edit::apply(&mut pinned, &pin.into()).is_ok() {
            begun.insert(Arc::clone(piece));
        }
    }
    (pinned, begun)
}

/// The timetable with the requests of these pieces alone.
fn only_with(timetable: &Timetable, pieces: &[Arc<str>]) -> Timetable {
    let of = |piece: &Arc<str>| piece.split('@').next().map(Arc::<str>::from);
    let requests: FastSet<Arc<str>> = pieces.iter().filter_map(of).collect();
    explicit(timetable, &|request| requests.contains(&request.id))
}

fn price_pins(
    settled: &Settled,
    timetable: &Timetable,
    why: &mut Why,
    stop: &(dyn Stopper + Sync),
) {
    let pins: Vec<&Ground> = why
        .grounds
        .iter()
        .filter(|ground| matches!(ground, Ground::Pin { .. }))
        .take(MOST_PINS)
        .collect();
    // With something left out the count says nothing.
    if settled.receipt().unplaced() > 0 {
        return;
    }
    for pin in &pins {
        let Ground::Pin { piece, .. } = pin else {
            continue;
        };
        if stop.stop() {
            return;
        }
        if let Some((saves, proved)) = saved(settled, &without(timetable, pin), stop) {
            why.prices.push(PinPrice {
                pin: Arc::clone(piece),
                saves,
                proved,
            });
        }
    }
    if pins.len() > 1 {
        let none = pins
            .iter()
            .fold(timetable.clone(), |less, pin| without(&less, pin));
        why.together = saved(settled, &none, stop);
    }
}

/// How many resources fewer it takes with less stated, and whether that is proved.
fn saved(
    settled: &Settled,
    less: &Timetable,
    stop: &(dyn Stopper + Sync),
) -> Option<(usize, bool)> {
    let mut timetable = less.clone();
    // It is the count that is asked for, whatever comes first in the plan.
    Arc::make_mut(&mut timetable.settings).prefer = Prefer::Count;
    let job = Job {
        generation: 0,
        timetable,
        reference: Some(Arc::new(settled.answer().plan.clone())),
        issued: None,
        floor: None,
        begun: Arc::default(),
    };
    let budget = Budget {
        threads: 2,
        ..Budget::default()
    };
    // Once the count is proved nobody waits for fewest changes.
    let enough = Flag::default();
    let within = Either(Until(Instant::now() + PER_PIN), enough.clone());
    let mut proved_yet = |settled: &Arc<Settled>| {
        if matches!(settled.receipt().knowledge(), Knowledge::Proved(_)) {
            enough.raise();
        }
    };
    let until = Either(within, Told(stop));
    let found = job.run(budget, &until, &mut proved_yet).ok()?;
    let receipt = found.receipt();
    let saves = settled.receipt().in_use().checked_sub(receipt.in_use())?;
    let proved = matches!(receipt.knowledge(), Knowledge::Proved(_));
    (receipt.unplaced() == 0).then_some((saves, proved))
}

/// Another stopper, by reference.
struct Told<'a>(&'a (dyn Stopper + Sync));

impl Stopper for Told<'_> {
    fn stop(&self) -> bool {
        self.0.stop()
    }
}

/// Why the piece (with what it stays together with) has no place.
fn no_place(
    timetable: &Timetable,
    violations: &[HallViolation],
    pieces: Vec<Arc<str>>,
    stop: &(dyn Stopper + Sync),
) -> NoPlace {
    let mut found = NoPlace {
        pieces,
        set: Vec::new(),
        at: None,
        resources: Vec::new(),
        cases: None,
        grounds: Vec::new(),
    };
    let ours =
        |violation: &&HallViolation| violation.pieces.iter().any(|id| found.pieces.contains(id));
    if let Some(violation) = violations.iter().find(ours) {
        let violation = smallest(timetable, violation, &found.pieces);
        let small = only_with(timetable, &violation.pieces);
        let holds = |less: &Timetable| still_short(less, &violation);
        if holds(&small) {
            found.grounds = minimal(&small, &holds, stop).0;
        }
        found.set = violation.pieces;
        found.at = Some(violation.at);
        found.resources = violation.resources;
        return found;
    }
    let Some(piece) = found.pieces.first().and_then(|id| timetable.piece(id)) else {
        return found;
    };
    let until = Either(Until(Instant::now() + PER_PIECE), Told(stop));
    let Some((set, tree)) = cannot_all(timetable, &piece, &until) else {
        return found;
    };
    let small = only_with(timetable, &set);
    let claimed = FloorProof::Cases {
        value: timetable.resources().all.len() + 1,
        tree,
    };
    let holds = |less: &Timetable| audit::check_floor(less, &claimed).is_ok();
    if !holds(&small) {
        return found;
    }
    found.grounds = minimal(&small, &holds, stop).0;
    found.set = set;
    if let FloorProof::Cases { tree, .. } = claimed {
        found.cases = Some(tree);
    }
    found
}

/// Whether the pieces still have fewer resources than there are of them, whatever those are.
fn still_short(timetable: &Timetable, violation: &HallViolation) -> bool {
    audit::check_violations(timetable, std::slice::from_ref(violation)).is_ok()
}

/// The violation with as few pieces as possible, one of ours among them.
fn smallest(timetable: &Timetable, violation: &HallViolation, ours: &[Arc<str>]) -> HallViolation {
    let mut small = violation.clone();
    let mut at = small.pieces.len();
    while at > 0 {
        at -= 1;
        if ours.contains(&small.pieces[at])
            && small.pieces.iter().filter(|id| ours.contains(id)).count() == 1
        {
            continue;
        }
        let mut less = small.clone();
        less.pieces.remove(at);
        less.resources = usable(timetable, &less.pieces);
        if less.pieces.len() > less.resources.len() && still_short(timetable, &less) {
            small = less;
        }
    }
    small
}

/// Every resource that any of the pieces may use.
fn usable(timetable: &Timetable, pieces: &[Arc<str>]) -> Vec<Arc<str>> {
    let items: Vec<Vec<Piece>> = pieces
        .iter()
        .map(|id| timetable.with_what_stays(id))
        .collect();
    let may = |resource: &&Resource| items.iter().any(|item| all_may_use(item, resource).is_ok());
    let all = timetable.resources().all.iter();
    all.filter(may)
        .map(|resource| Arc::clone(&resource.id))
        .collect()
}
