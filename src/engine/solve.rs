//! The anytime loop: a plan at once, then better plans and better floors until they meet
//! or somebody says stop. Every improvement goes out through a callback.

use super::bounds::{clique, hall, incompatible};
use super::plans::{Assignment, NONE, align, alike, greedy, keep, rows, tabu};
use super::{Problem, Stopper};
use crate::claim::{Answer, FloorProof, HallViolation, Placement, Plan, Reason, Unplaced};
use crate::lookup::FastMap;
use crate::timetable::Timetable;
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

/// An earlier plan to stay near to.
#[derive(Clone, Debug)]
pub struct Reference(pub(crate) Vec<Kept>);

impl Reference {
    /// The reference that a plan gives for a problem of that timetable.
    pub fn of(problem: &Problem, timetable: &Timetable, plan: &Plan) -> Reference {
        let resources = timetable.resources();
        // Placements are listed in the order of the items, as a rule; the map is for the rest.
        let mut before: FastMap<&str, &Placement> = FastMap::default();
        let in_order = plan.placements.len() == problem.ids.len()
            && problem
                .ids
                .iter()
                .zip(&plan.placements)
                .all(|(id, p)| *id == p.piece);
        if !in_order {
            before.extend(plan.placements.iter().map(|p| (&*p.piece, p)));
        }
        let kept = problem
            .ids
            .iter()
            .zip(&problem.items)
            .enumerate()
            .map(|(at, (id, item))| {
                let placement = if in_order {
                    plan.placements.get(at)
                } else {
                    before.get(&**id).copied()
                };
                let place = placement.and_then(|p| resources.position(&p.resource));
                Kept {
                    resource: place.map_or(NONE, |place| place as u32),
                    changed: placement.is_none_or(|p| p.span != item.span),
                }
            });
        Reference(kept.collect())
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

/// Steps of the plan search between two looks at the floors.
const SLICE: u64 = 5_000;

/// Rearrangements after each slice.
const REARRANGED: u32 = 150;

/// When some pieces provably cannot be placed, the count of the rest has no floor of its
/// own to meet; after so many steps without a better one it is left.
const ENOUGH_FOR_THE_REST: u64 = 200_000;

/// Searches until proved, stopped or out of budget. `found` gets the first answer and then
/// every better one; the last of them is also returned.
pub fn solve(
    problem: &Problem,
    reference: Option<&Reference>,
    budget: Budget,
    stop: &(dyn Stopper + Sync),
    found: &mut dyn FnMut(&Answer),
) -> Answer {
    let mut solving = Solving {
        problem,
        reference,
        began: Instant::now(),
        floor: clique::largest(problem),
        violations: Vec::new(),
        best: vec![NONE; problem.items.len()],
        found,
    };
    solving.first_plan();
    solving.first_floor();
    solving.report();
    if !solving.settled() && !stop.stop() {
        solving.second_plan(stop);
        if !solving.settled() {
            solving.improve(budget, stop);
        }
    }
    solving.answer()
}

struct Solving<'a, 'f> {
    problem: &'a Problem,
    reference: Option<&'a Reference>,
    began: Instant,
    floor: FloorProof,
    violations: Vec<HallViolation>,
    best: Assignment,
    found: &'f mut dyn FnMut(&Answer),
}

impl Solving<'_, '_> {
    /// Less weight left out first, then fewer resources.
    fn value(&self, on: &[u32]) -> (u64, usize) {
        (
            rows::left_out(self.problem, on),
            rows::in_use(self.problem, on),
        )
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
    }

    fn first_floor(&mut self) {
        let (left_out, in_use) = self.value(&self.best);
        if left_out > 0 {
            self.violations = hall::disjoint(self.problem);
        }
        if in_use > self.floor.value() {
            self.raise(&incompatible::by_groups(self.problem));
        }
    }

    /// Takes an incompatibility clique as the floor if it is a higher one.
    fn raise(&mut self, clique: &[usize]) -> bool {
        let higher = clique.len() > self.floor.value();
        if higher {
            let pieces = clique
                .iter()
                .map(|item| Arc::clone(&self.problem.ids[*item]))
                .collect();
            self.floor = FloorProof::Incompatible { pieces };
        }
        higher
    }

    /// The weight that provably stays out.
    fn out_floor(&self) -> u64 {
        let weight = |id: &Arc<str>| {
            let at = self.problem.ids.iter().position(|other| other == id);
            at.map_or(0, |at| u64::from(self.problem.items[at].weight))
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
        for (item, resource) in self.best.iter().enumerate() {
            let piece = Arc::clone(&self.problem.ids[item]);
            if *resource == NONE {
                plan.unplaced.push(Unplaced {
                    piece,
                    because: self.reason(item),
                });
            } else {
                plan.placements.push(Placement {
                    piece,
                    resource: Arc::clone(&self.problem.resources[*resource as usize]),
                    span: self.problem.items[item].span,
                });
            }
        }
        Answer {
            plan,
            floor: self.floor.clone(),
            violations: self.violations.clone(),
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
        let span = self.problem.occupied(item, choices[0]);
        let by = self.best.iter().enumerate().find(|(other, on)| {
            **on == resource && self.problem.occupied(*other, choices[0]).overlaps(span)
        });
        by.map_or(Reason::AllTaken, |(other, _)| Reason::PinTaken {
            pin: Arc::clone(&self.problem.resources[resource as usize]),
            by: Arc::clone(&self.problem.ids[other]),
        })
    }

    fn report(&mut self) {
        let answer = self.answer();
        (self.found)(&answer);
    }

    fn improve(&mut self, budget: Budget, stop: &(dyn Stopper + Sync)) {
        let start: Vec<usize> = match &self.floor {
            FloorProof::Clique { at, .. } => self.problem.running(*at).collect(),
            FloorProof::Incompatible { .. } => incompatible::by_groups(self.problem),
        };
        let start: Vec<usize> = start
            .into_iter()
            .filter(|item| !self.problem.choices(*item).is_empty())
            .collect();
        let seed = budget.seed;
        let mut floors = Floors {
            problem: self.problem,
            start,
            seed,
            search: None,
            wanted: true,
        };
        if budget.threads < 2 {
            return self.plans(budget, stop, &mut |solving: &mut Self| {
                floors
                    .step(stop)
                    .is_some_and(|clique| solving.raise(&clique))
            });
        }
        let news: Mutex<Option<Vec<usize>>> = Mutex::new(None);
        let over = super::Flag::default();
        let both = BothRefs(stop, &over);
        std::thread::scope(|scope| {
            scope.spawn(|| {
                while !both.stop() && floors.wanted {
                    if let Some(clique) = floors.step(&both)
                        && let Ok(mut news) = news.lock()
                    {
                        *news = Some(clique);
                    }
                }
            });
            self.plans(budget, stop, &mut |solving: &mut Self| {
                let clique = news.lock().ok().and_then(|mut news| news.take());
                clique.is_some_and(|clique| solving.raise(&clique))
            });
            over.raise();
        });
    }

    /// Slices of the plan search, with a look at the floors (`raised`) after each.
    fn plans(
        &mut self,
        budget: Budget,
        stop: &(dyn Stopper + Sync),
        raised: &mut dyn FnMut(&mut Self) -> bool,
    ) {
        let mut steps_left = budget.steps.unwrap_or(u64::MAX);
        let mut skip = vec![false; self.problem.items.len()];
        let mut search = tabu::Tabu::new(self.problem, &skip, budget.seed);
        let mut aimed = None;
        let mut since_better = 0;
        let mut width = 4.0;
        while steps_left > 0 && !stop.stop() {
            let (left_out, in_use) = self.value(&self.best);
            if left_out == 0 && in_use == self.floor.value() {
                return;
            }
            // Provably no more can be placed: the rest is worth a better count all the same.
            let rest = left_out > 0 && left_out == self.out_floor();
            if rest && !skip.iter().any(|skipped| *skipped) {
                skip = self.best.iter().map(|resource| *resource == NONE).collect();
                search = tabu::Tabu::new(self.problem, &skip, budget.seed);
                aimed = None;
            }
            if rest && (in_use == 0 || since_better >= ENOUGH_FOR_THE_REST) {
                return;
            }
            let target = if left_out > 0 && !rest {
                self.problem.resources.len()
            } else {
                in_use - 1
            };
            let slice = SLICE.min(steps_left);
            steps_left -= slice;
            since_better += slice;
            if let Some(search) = &mut search {
                if aimed != Some(target) {
                    if !search.aim(&self.best, target, stop) {
                        return;
                    }
                    aimed = Some(target);
                }
                let mut least = left_out;
                let mut better: Option<Assignment> = None;
                let placing = left_out > 0 && !rest;
                if placing {
                    search.run(slice, stop, &mut |left, on| {
                        if left < least {
                            least = left;
                            better = Some(on.to_vec());
                        }
                    });
                } else {
                    // Near the end what is missing is one piece that no chain of ejections
                    // brings in: then several resources are laid out anew together.
                    search.run_and_return(slice, stop);
                }
                if !search.done() {
                    search.rearrange(REARRANGED, &mut width, stop);
                    if placing && search.left_out < least {
                        better = Some(search.on.clone());
                    }
                }
                if search.done() {
                    better = Some(search.on.clone());
                }
                if let Some(better) = better
                    && self.value(&better) < self.value(&self.best)
                {
                    self.take(better);
                    since_better = 0;
                    aimed = None;
                    self.report();
                }
            } else if !stop.stop() {
                // Too large for the tables: only the floors can still do something.
                std::thread::sleep(std::time::Duration::from_millis(1));
            }
            if raised(self) {
                self.report();
            }
        }
    }
}

/// The floor search, made when it is first needed.
struct Floors<'a> {
    problem: &'a Problem,
    start: Vec<usize>,
    seed: u64,
    search: Option<incompatible::Search>,
    wanted: bool,
}

impl Floors<'_> {
    /// A few climbs; the clique when it grew.
    fn step(&mut self, stop: &dyn Stopper) -> Option<Vec<usize>> {
        if !self.wanted {
            return None;
        }
        if self.search.is_none() {
            self.search = incompatible::Search::new(self.problem, &self.start, self.seed, stop);
            self.wanted = self.search.is_some();
        }
        let search = self.search.as_mut()?;
        search.climb().then(|| search.best.clone())
    }
}

/// Until one of two says so, by reference.
struct BothRefs<'a>(&'a (dyn Stopper + Sync), &'a super::Flag);

impl Stopper for BothRefs<'_> {
    fn stop(&self) -> bool {
        self.0.stop() || self.1.stop()
    }
}
