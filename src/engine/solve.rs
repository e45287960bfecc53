//! The anytime loop: a plan at once, then better plans and better floors until they meet
//! or somebody says stop. Every improvement goes out through a callback.

mod near;

use super::bounds::ladder::{Found, Ladder};
use super::bounds::{chains, clique, hall, incompatible};
use super::changes::{Places, Wishes};
use super::plans::slices::{Known, Plans, SLICE, SLICE_WORK, Slice};
use super::plans::{Assignment, NONE, align, alike, greedy, keep, rows};
use super::{Problem, Stopper};
use crate::claim::{
    self, Answer, ChangesProof, FloorProof, HallViolation, OutPrices, Placement, Plan, Reason,
    Unplaced,
};
use crate::lookup::FastMap;
use crate::timetable::{Prefer, Timetable};
use std::sync::Arc;
use std::sync::Mutex;
use std::time::Instant;

/// Where something was before, for one item.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Kept {
    pub(crate) resource: u32,
    /// Whether its time has changed since.
    pub(crate) changed: bool,
}

/// An earlier plan to stay near to, or two of them.
#[derive(Clone, Debug)]
pub struct Reference {
    pub(crate) kept: Vec<Kept>,
    wishes: Wishes,
    /// Whether there are two plans, of which the one handed out counts first.
    two: bool,
    since: Arc<Plan>,
    prefer: Prefer,
}

impl Reference {
    /// The reference that the plan which stood before gives for a problem of that timetable,
    /// and, counting first, the one handed out.
    pub fn of(
        problem: &Problem,
        timetable: &Timetable,
        plan: &Arc<Plan>,
        issued: Option<&Arc<Plan>>,
    ) -> Reference {
        let places = Places::of(problem, timetable, plan);
        let kept = (0..problem.items.len()).map(|item| {
            let mut pieces = problem.pieces(item);
            // Where the first of it was, for one that was apart before.
            let first = pieces.clone().find_map(|piece| places.0[piece]);
            Kept {
                resource: first.map_or(NONE, |(resource, _)| resource),
                changed: pieces.any(|piece| {
                    places.0[piece].is_none_or(|(_, span)| span != problem.spans[piece])
                }),
            }
        });
        let kept = kept.collect();
        let first = issued.map(|issued| Places::of(problem, timetable, issued));
        Reference {
            kept,
            wishes: Wishes::of(problem, first.as_ref(), &places),
            two: issued.is_some(),
            since: Arc::clone(issued.unwrap_or(plan)),
            prefer: timetable.settings.prefer,
        }
    }
}

/// How a search is bounded, besides by its stopper.
#[derive(Clone, Copy, Debug)]
pub struct Budget {
    /// The same seed and steps give the same answer on one thread.
    pub seed: u64,
    /// Most steps of work (one ejection each); `None` is without end.
    pub steps: Option<u64>,
    /// With two or more, floors and plans are searched side by side.
    pub threads: usize,
}

impl Default for Budget {
    fn default() -> Budget {
        Budget {
            seed: 1,
            steps: None,
            threads: 1,
        }
    }
}

/// What is known from before.
#[derive(Clone, Copy, Debug, Default)]
pub struct Before<'a> {
    /// Earlier plans to stay near to.
    pub reference: Option<&'a Reference>,
    /// Why not fewer, of an earlier state; what no longer holds of it is dropped. Cases must
    /// have been checked.
    pub floor: Option<&'a FloorProof>,
}

/// Searches until proved, stopped or out of budget. `found` gets the first answer and then
/// every better one; the last of them is also returned.
pub fn solve(
    problem: &Problem,
    before: Before<'_>,
    budget: Budget,
    stop: &(dyn Stopper + Sync),
    found: &mut dyn FnMut(&Answer),
) -> Answer {
    let reference = before.reference;
    let mut solving = Solving {
        problem,
        reference,
        began: Instant::now(),
        floor: clique::largest(problem),
        clique: Vec::new(),
        violations: Vec::new(),
        out: None,
        best: vec![NONE; problem.items.len()],
        near: None,
        due: reference.is_some(),
        proof: None,
        other: None,
        found,
    };
    solving.pairwise_clique();
    if let Some(floor) = before.floor {
        solving.still(floor);
    }
    solving.first_plan();
    // After an edit the count should come with its reason; who opens a file wants a plan.
    if reference.is_some() {
        solving.stay_near(QUICK);
        solving.first_floor();
        solving.report();
    } else {
        solving.report();
        if solving.first_floor() {
            solving.report();
        }
    }
    if !solving.settled() && !stop.stop() {
        solving.second_plan(stop);
        if !solving.settled() {
            solving.improve(budget, stop);
        }
    }
    if solving.due {
        solving.fewest_changes(stop);
    }
    solving.answer()
}

/// The dearest a whole price may be, as in audit.
const MOST_PRICE: i64 = 1 << 40;

/// Cases of the search for few changes before the first answer, and at the end.
const QUICK: u64 = 400;
const THOROUGH: u64 = 4_000;

struct Solving<'a, 'f> {
    problem: &'a Problem,
    reference: Option<&'a Reference>,
    began: Instant,
    floor: FloorProof,
    /// A clique that shares no moment, when that is a larger one.
    clique: Vec<Arc<str>>,
    violations: Vec<HallViolation>,
    out: Option<OutPrices>,
    /// The plan with the fewest resources.
    best: Assignment,
    /// The plan with the fewest changes, where those come first.
    near: Option<Assignment>,
    /// Whether fewest changes are still to be looked for.
    due: bool,
    /// Why no fewer changes, of plans like the one that is shown.
    proof: Option<ChangesProof>,
    /// What the other choice would come to.
    other: Option<(usize, usize)>,
    found: &'f mut dyn FnMut(&Answer),
}

impl Solving<'_, '_> {
    /// Less weight left out first, then fewer resources.
    fn value(&self, on: &[u32]) -> (u64, usize) {
        rows::value(self.problem, on)
    }

    /// Where items have several units, a clique need not share a moment.
    fn pairwise_clique(&mut self) {
        let clique = clique::pairwise(self.problem, self.floor.value());
        if clique.len() > self.floor.value() {
            let pieces = clique
                .iter()
                .map(|item| Arc::clone(self.problem.name(*item)));
            self.clique = pieces.collect();
            self.floor = FloorProof::Clique {
                at: None,
                pieces: self.clique.clone(),
            };
        }
    }

    /// Takes over what still holds of an earlier floor, when that is more than is known.
    fn still(&mut self, floor: &FloorProof) {
        if let FloorProof::Cases { value, .. } = floor {
            if *value > self.floor.value() {
                self.floor = floor.clone();
            }
            return;
        }
        let units = 0..self.problem.units.len();
        let units = units.map(|unit| (&**self.problem.id_of(unit), unit));
        let units: FastMap<&str, usize> = units.collect();
        match floor {
            // The largest at any moment is known already.
            FloorProof::Clique { at: Some(_), .. } | FloorProof::Cases { .. } => {}
            FloorProof::Clique { pieces, .. } | FloorProof::Incompatible { pieces } => {
                let problem = self.problem;
                let mut clique: Vec<usize> = Vec::new();
                for unit in pieces.iter().filter_map(|piece| units.get(&**piece)) {
                    let item = problem.units[*unit].item as usize;
                    let apart = |other: &usize| incompatible::incompatible(problem, item, *other);
                    if !problem.choices(item).is_empty() && clique.iter().all(apart) {
                        clique.push(item);
                    }
                }
                self.raise(&clique);
            }
            // It may come from a file: sums of larger prices could overflow.
            FloorProof::Prices { unit, prices, .. }
                if !(1..=MOST_PRICE).contains(unit)
                    || prices
                        .iter()
                        .any(|(_, price)| !(1..=MOST_PRICE).contains(price)) => {}
            FloorProof::Prices { unit, prices, .. } => {
                let mut whole = vec![0; self.problem.units.len()];
                for (piece, price) in prices {
                    let place = units.get(&**piece);
                    let usable = place.filter(|place| {
                        let item = self.problem.units[**place].item as usize;
                        !self.problem.choices(item).is_empty()
                    });
                    if let Some(place) = usable {
                        whole[*place] = *price;
                    }
                }
                let value = chains::Chains::of(self.problem).count(&whole, *unit, &mut Vec::new());
                if value > self.floor.value() {
                    let named = whole.iter().enumerate().filter(|(_, price)| **price > 0);
                    let named =
                        named.map(|(unit, price)| (Arc::clone(self.problem.id_of(unit)), *price));
                    self.floor = FloorProof::Prices {
                        unit: *unit,
                        prices: named.collect(),
                        value,
                    };
                }
            }
        }
    }

    /// A plan at once: what was there before, as far as it still fits; where everything is
    /// alike, the best there is.
    fn first_plan(&mut self) {
        if let Some(reference) = self.reference {
            self.best = keep::near(self.problem, reference);
            if self.value(&self.best) == (0, self.floor.value()) {
                return;
            }
        }
        if let Some(alike) = alike::by_groups(self.problem) {
            self.take_if_better(alike);
        } else if self.reference.is_none() {
            // Whoever asks gets a whole plan, however little time there is.
            self.best = greedy::tightest_fit(self.problem, &super::Never);
        }
    }

    /// A plan from nothing may be better than one that keeps to an earlier plan; it takes
    /// longer, so it comes after the first answer.
    fn second_plan(&mut self, stop: &dyn Stopper) {
        if self.reference.is_some() && self.take_if_better(greedy::tightest_fit(self.problem, stop))
        {
            self.report();
        }
    }

    fn take_if_better(&mut self, on: Assignment) -> bool {
        let better = self.value(&on) < self.value(&self.best);
        if better {
            self.take(on);
        }
        better
    }

    /// Makes a plan the best one, named like the reference.
    fn take(&mut self, mut on: Assignment) {
        if let Some(reference) = self.reference {
            align::align(self.problem, &mut on, reference);
        }
        self.best = on;
        self.proof = None;
        self.due = self.reference.is_some();
        if self
            .reference
            .is_some_and(|reference| reference.prefer == Prefer::Count)
        {
            self.stay_near(QUICK);
        }
    }

    /// What can be said at once of why not fewer, and of what is left out; whether anything.
    fn first_floor(&mut self) -> bool {
        let (left_out, in_use) = self.value(&self.best);
        if left_out > 0 {
            self.violations = hall::disjoint(self.problem);
        }
        let higher =
            in_use > self.floor.value() && self.raise(&incompatible::by_groups(self.problem));
        higher || !self.violations.is_empty()
    }

    /// Takes an incompatibility clique as the floor if it is a higher one.
    fn raise(&mut self, clique: &[usize]) -> bool {
        let higher = clique.len() > self.floor.value();
        if higher {
            let pieces = clique
                .iter()
                .map(|item| Arc::clone(self.problem.name(*item)))
                .collect();
            self.floor = FloorProof::Incompatible { pieces };
        }
        higher
    }

    /// The weight that provably stays out.
    fn out_floor(&self) -> u64 {
        let items = (0..self.problem.items.len()).flat_map(|item| {
            let pieces = self.problem.pieces(item);
            pieces.map(move |piece| (&*self.problem.ids[piece], item))
        });
        let items: FastMap<&str, usize> = match self.violations.is_empty() {
            true => FastMap::default(),
            false => items.collect(),
        };
        let weight = |id: &Arc<str>| {
            let item = items.get(&**id);
            item.map_or(0, |item| self.problem.items[*item].weight)
        };
        let least = |violation: &HallViolation| {
            let mut weights: Vec<u64> = violation.pieces.iter().map(weight).collect();
            weights.sort_unstable();
            let excess = weights.len() - violation.resources.len();
            weights[..excess].iter().sum::<u64>()
        };
        self.violations.iter().map(least).sum()
    }

    fn settled(&self) -> bool {
        let (left_out, in_use) = self.value(&self.best);
        left_out == 0 && in_use == self.floor.value()
    }

    fn answer(&self) -> Answer {
        let mut plan = Plan::default();
        let shown = self.shown();
        for (item, resource) in shown.iter().enumerate() {
            let pieces = self.problem.pieces(item);
            if *resource == NONE {
                let because = self.reason(item);
                plan.unplaced.extend(pieces.map(|piece| Unplaced {
                    piece: Arc::clone(&self.problem.ids[piece]),
                    because: because.clone(),
                }));
            } else {
                plan.placements.extend(pieces.map(|piece| Placement {
                    piece: Arc::clone(&self.problem.ids[piece]),
                    resource: Arc::clone(&self.problem.resources[*resource as usize]),
                    span: self.problem.spans[piece],
                }));
            }
        }
        Answer {
            plan,
            floor: self.floor.clone(),
            clique: self.clique.clone(),
            violations: self.violations.clone(),
            out: self.out.clone(),
            changes: self.reference.map(|reference| claim::Changes {
                since: Arc::clone(&reference.since),
                proof: self.proof.clone(),
                other: self.other,
            }),
            stays: Arc::default(),
            seconds: self.began.elapsed().as_secs_f64(),
        }
    }

    fn reason(&self, item: usize) -> Reason {
        let choices = self.problem.choices(item);
        let only: Option<u32> = match choices {
            [] => return Reason::NoResource,
            [class] => match self.problem.classes[*class as usize].members.as_slice() {
                [one] => Some(*one),
                _ => None,
            },
            _ => None,
        };
        let Some(resource) = only else {
            return Reason::AllTaken;
        };
        let by = self.shown().iter().enumerate().find(|(other, on)| {
            **on == resource && self.problem.conflict(*other, item, choices[0])
        });
        by.map_or(Reason::AllTaken, |(other, _)| Reason::PinTaken {
            pin: Arc::clone(&self.problem.resources[resource as usize]),
            by: Arc::clone(self.problem.name(other)),
        })
    }

    fn report(&mut self) {
        let answer = self.answer();
        (self.found)(&answer);
    }

    fn improve(&mut self, budget: Budget, stop: &(dyn Stopper + Sync)) {
        let start: Vec<usize> = match &self.floor {
            FloorProof::Clique { at: Some(at), .. } => {
                let running = self.problem.running(*at);
                let items = running.map(|unit| self.problem.units[unit].item as usize);
                let mut items: Vec<usize> = items.collect();
                items.dedup();
                items
            }
            _ => incompatible::by_groups(self.problem),
        };
        let start: Vec<usize> = start
            .into_iter()
            .filter(|item| !self.problem.choices(*item).is_empty())
            .collect();
        let over = super::Flag::default();
        let both = BothRefs(stop, &over);
        let shared = Shared {
            problem: self.problem,
            over: over.clone(),
            state: Mutex::new(State {
                out_floor: self.out_floor(),
                out: None,
                slices: 0,
                waiting: None,
                value: self.value(&self.best),
                best: self.best.clone(),
                floor: self.floor.clone(),
                news: false,
            }),
        };
        let mut ladder = Ladder::new(self.problem, start, budget.seed);
        if budget.threads < 2 {
            let mut pace = Pace::default();
            self.plans(budget, &shared, &both, &mut || {
                while !both.stop()
                    && pace.floors_next(&ladder)
                    && shared.climb(&mut ladder, true, &both)
                {}
            });
            return;
        }
        std::thread::scope(|scope| {
            scope.spawn(|| shared.help(ladder, budget.seed, &both));
            self.plans(budget, &shared, &both, &mut || {});
            over.raise();
        });
    }

    /// Slices of the plan search, telling whoever asked of everything new; `between` runs
    /// after each.
    fn plans(
        &mut self,
        budget: Budget,
        shared: &Shared<'_>,
        stop: &dyn Stopper,
        between: &mut dyn FnMut(),
    ) {
        let mut steps_left = budget.steps.unwrap_or(u64::MAX);
        let mut plans = Plans::new(self.problem, budget.seed, true);
        let mut calm = 0;
        while steps_left > 0 && !stop.stop() {
            // What is shown should change little even while the count is still open.
            calm = if self.due { calm + 1 } else { 0 };
            if calm > CALM {
                self.fewest_changes(stop);
            }
            let slice = SLICE.min(steps_left);
            steps_left -= slice;
            let more = shared.plan(&mut plans, slice, true, stop);
            if plans.too_large() && !stop.stop() {
                // Only the floors can still do something.
                std::thread::sleep(std::time::Duration::from_millis(1));
            }
            self.hear(shared);
            if !more {
                return;
            }
            between();
            self.hear(shared);
        }
        self.hear(shared);
    }

    /// Takes over what is new, and passes it on.
    fn hear(&mut self, shared: &Shared<'_>) {
        let Some(mut state) = shared.state.lock().ok().filter(|state| state.news) else {
            return;
        };
        state.news = false;
        let (best, floor) = (state.best.clone(), state.floor.clone());
        self.out.clone_from(&state.out);
        drop(state);
        self.floor = floor;
        // One that is as good in this respect may have more changes.
        if self.value(&best) < self.value(&self.best) {
            self.take(best);
        }
        self.report();
    }
}

/// Slices without a better plan after which changes are looked at.
const CALM: u32 = 8;

/// Slices after which the first thread takes plans from others.
const ITS_SAY: u32 = 2;

/// What the threads know together.
struct State {
    best: Assignment,
    value: (u64, usize),
    floor: FloorProof,
    /// Weight that provably stays out, and the prices that say so if they say most.
    out_floor: u64,
    out: Option<OutPrices>,
    /// Slices of the first thread, and a plan that another found meanwhile.
    slices: u32,
    waiting: Option<Assignment>,
    /// Something has changed since it was last told.
    news: bool,
}

/// What the threads share.
struct Shared<'a> {
    problem: &'a Problem,
    /// Raised when plan and floor meet.
    over: super::Flag,
    state: Mutex<State>,
}

impl Shared<'_> {
    /// Changes the state; when plan and floor have met, everybody stops.
    fn change(&self, change: impl FnOnce(&mut State) -> bool) {
        let Ok(mut state) = self.state.lock() else {
            return;
        };
        state.news |= change(&mut state);
        if state.value == (0, state.floor.value()) {
            self.over.raise();
        }
    }

    /// One slice of the plan search, on the `first` thread or another; whether it may give
    /// more.
    fn plan(&self, plans: &mut Plans<'_>, steps: u64, first: bool, stop: &dyn Stopper) -> bool {
        let Ok(state) = self.state.lock() else {
            return false;
        };
        let (best, value, out_floor) = (state.best.clone(), state.value, state.out_floor);
        drop(state);
        let known = Known {
            best: &best,
            value,
            out_floor,
        };
        match plans.slice(known, steps, stop) {
            Slice::Over => return false,
            Slice::Nothing => {}
            Slice::Better(best) => self.offer(best, first),
        }
        if first {
            let waiting = self.state.lock().ok().and_then(|mut state| {
                state.slices += 1;
                let heard = state.slices >= ITS_SAY;
                state.waiting.take_if(|_| heard)
            });
            if let Some(plan) = waiting {
                self.offer(plan, true);
            }
        }
        true
    }

    /// One slice of the floors, `alone` or beside the first thread; whether there is anything
    /// left for them to find.
    fn climb(&self, ladder: &mut Ladder<'_>, alone: bool, stop: &dyn Stopper) -> bool {
        let Ok(state) = self.state.lock() else {
            return false;
        };
        let floor = state.floor.value();
        let (left_out, in_use) = state.value;
        let out_floor = state.out_floor;
        drop(state);
        if out_floor < left_out && ladder.out_wanted() {
            if let Some(out) = ladder.stays_out(out_floor, left_out, stop) {
                self.change(|state| {
                    let more = out.weight > state.out_floor;
                    if more {
                        state.out_floor = out.weight;
                        state.out = Some(out);
                    }
                    more
                });
            }
            return true;
        }
        // With something left out, the question is whether everything can be placed at all.
        let aim = match left_out {
            0 => in_use,
            _ => self.problem.resources.len() + 1,
        };
        // Where something stays out for a reason that is known, only a clique still says
        // something: the other floors would rise for that same reason and hide it.
        let known = out_floor > 0;
        if floor >= aim || (known && ladder.stale()) {
            return false;
        }
        ladder.only_cliques(known);
        match ladder.slice(floor, aim, left_out > 0, stop) {
            None => {}
            Some(Found::Floor(proof)) => self.change(|state| {
                let higher = proof.value() > state.floor.value();
                if higher {
                    state.floor = proof;
                }
                higher
            }),
            Some(Found::Plan(plan)) => self.offer(plan, alone),
        }
        true
    }

    /// Takes a plan over when it is better. The first thread has its say first, so that
    /// what is quickly found is the same every time.
    fn offer(&self, plan: Assignment, first: bool) {
        self.change(|state| {
            if !first && state.slices < ITS_SAY {
                state.waiting = Some(plan);
                return false;
            }
            let value = rows::value(self.problem, &plan);
            let better = value < state.value;
            if better {
                (state.best, state.value) = (plan, value);
            }
            better
        });
    }

    /// The second thread: floors as long as they give something, else plans from another
    /// seed and with another choice of where to go on from.
    fn help(&self, mut ladder: Ladder<'_>, seed: u64, stop: &dyn Stopper) {
        let mut plans: Option<Plans<'_>> = None;
        let mut pace = Pace::default();
        while !stop.stop() {
            if pace.floors_next(&ladder) && self.climb(&mut ladder, false, stop) {
                continue;
            }
            let plans = plans.get_or_insert_with(|| Plans::new(self.problem, !seed, false));
            let more = self.plan(plans, SLICE, false, stop) && !plans.too_large();
            if !more && (ladder.spent() || !self.climb(&mut ladder, false, stop)) {
                return;
            }
        }
    }
}

/// How time is shared out between floors and plans, by the work they have done: half and
/// half, until the floors are stale.
#[derive(Default)]
struct Pace {
    plan_slices: u64,
}

impl Pace {
    fn floors_next(&mut self, ladder: &Ladder<'_>) -> bool {
        if ladder.spent() {
            return false;
        }
        let share = if ladder.stale() { 8 } else { 1 };
        let floors = share * ladder.work <= self.plan_slices * SLICE_WORK;
        self.plan_slices += u64::from(!floors);
        floors
    }
}

/// Until one of two says so, by reference.
struct BothRefs<'a>(&'a (dyn Stopper + Sync), &'a super::Flag);

impl Stopper for BothRefs<'_> {
    fn stop(&self) -> bool {
        self.0.stop() || self.1.stop()
    }
}
