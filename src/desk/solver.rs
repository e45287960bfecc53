//! Solving on a thread of its own. A newer job supersedes a running one, so whoever types
//! never waits.

use super::settle::{Settled, Survey, settle};
use crate::audit;
use crate::claim::{Answer, FloorProof, Plan};
use crate::engine::{self, Budget, Flag, Problem, Reference, Stopper};
use crate::timetable::{Timetable, stays};
use std::collections::HashMap;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::mpsc::{Receiver, Sender, channel};
use std::time::{Duration, Instant};

/// After so long without an improvement the search rests: the machine is shared.
const REST_AFTER: Duration = Duration::from_secs(60);

/// A timetable to solve.
#[derive(Clone, Debug)]
pub struct Job {
    /// Which state it is; answers carry it.
    pub generation: u64,
    /// The state.
    pub timetable: Timetable,
    /// The plan to stay near to.
    pub reference: Option<Arc<Plan>>,
    /// The plan that was handed out: to stay near to it counts more.
    pub issued: Option<Arc<Plan>>,
    /// Why not fewer, as it was before: most edits leave it true.
    pub floor: Option<Arc<FloorProof>>,
    /// Where pieces that have begun stay.
    pub begun: Arc<HashMap<Arc<str>, Arc<str>>>,
}

/// What the solver says.
#[derive(Clone, Debug)]
pub enum Event {
    /// A (better) answer, checked.
    Settled(Arc<Settled>),
    /// No more will come for that state.
    Rested(u64),
    /// A fault of the program: an answer did not pass audit, or the search broke.
    Fault(String),
}

impl Job {
    /// Solves on this thread: every checked answer goes to `found`, the last is returned.
    ///
    /// # Errors
    /// A description of the program's fault when an answer does not pass audit.
    pub fn run(
        self,
        budget: Budget,
        stop: &(dyn Stopper + Sync),
        found: &mut dyn FnMut(&Arc<Settled>),
    ) -> Result<Arc<Settled>, String> {
        let began = Instant::now();
        let pieces = self.timetable.pieces();
        let stays = Arc::new(stays(&self.timetable, &pieces, &self.begun));
        let problem = Problem::new(&self.timetable, &pieces, &stays);
        let reference = self
            .reference
            .as_ref()
            .map(|plan| Reference::of(&problem, &self.timetable, plan, self.issued.as_ref()));
        // Cases are only replayed, so it takes audit to say whether they still hold.
        let holds = |floor: &&Arc<FloorProof>| match &***floor {
            FloorProof::Cases { .. } => audit::check_floor(&self.timetable, floor).is_ok(),
            _ => true,
        };
        let floor = self.floor.as_ref().filter(holds);
        let survey = Arc::new(Survey::of(self.timetable, pieces, &problem));
        let mut last: Result<Option<Arc<Settled>>, String> = Ok(None);
        let mut check = |answer: &Answer| {
            if last.is_err() {
                return;
            }
            let timed = Answer {
                stays: Arc::clone(&stays),
                seconds: began.elapsed().as_secs_f64(),
                ..answer.clone()
            };
            match settle(&survey, timed, self.generation) {
                Ok(settled) => {
                    let settled = Arc::new(settled);
                    found(&settled);
                    last = Ok(Some(settled));
                }
                Err(refusals) => {
                    let said: Vec<String> =
                        refusals.iter().take(3).map(ToString::to_string).collect();
                    last = Err(format!("an answer did not pass audit: {}", said.join("; ")));
                }
            }
        };
        let before = engine::Before {
            reference: reference.as_ref(),
            floor: floor.map(|floor| &**floor),
        };
        engine::solve(&problem, before, budget, stop, &mut check);
        last?.ok_or_else(|| "the search gave no answer".into())
    }
}

/// Stops when told to, or when nothing has improved for a while.
struct Calm {
    told: Flag,
    began: Instant,
    /// Milliseconds after the beginning of the last improvement.
    improved: AtomicU64,
}

impl Stopper for Calm {
    fn stop(&self) -> bool {
        let improved = Duration::from_millis(self.improved.load(Ordering::Relaxed));
        self.told.stop() || self.began.elapsed() > improved + REST_AFTER
    }
}

/// The solver's end for the desk's owner.
pub struct Solver {
    jobs: Sender<(Job, Flag)>,
    running: Flag,
}

impl Solver {
    /// Starts the thread; `tell` is called on it with every event.
    pub fn start(tell: impl Fn(Event) + Send + 'static) -> Solver {
        let (jobs, waiting) = channel();
        std::thread::spawn(move || work(&waiting, &tell, Job::run));
        Solver {
            jobs,
            running: Flag::default(),
        }
    }

    /// Gives it a state to solve; whatever runs is stopped.
    pub fn submit(&mut self, job: Job) {
        self.running.raise();
        self.running = Flag::default();
        // The thread only ends with the program.
        let _ = self.jobs.send((job, self.running.clone()));
    }
}

impl Drop for Solver {
    fn drop(&mut self) {
        self.running.raise();
    }
}

/// How a job is done.
type Run = fn(
    Job,
    Budget,
    &(dyn Stopper + Sync),
    &mut dyn FnMut(&Arc<Settled>),
) -> Result<Arc<Settled>, String>;

fn work(waiting: &Receiver<(Job, Flag)>, tell: &dyn Fn(Event), run: Run) {
    while let Ok(mut next) = waiting.recv() {
        // Only the newest matters.
        while let Ok(newer) = waiting.try_recv() {
            next = newer;
        }
        let (job, told) = next;
        let generation = job.generation;
        let calm = Calm {
            told,
            began: Instant::now(),
            improved: AtomicU64::new(0),
        };
        let budget = Budget {
            threads: 2,
            ..Budget::default()
        };
        let result = catch_unwind(AssertUnwindSafe(|| {
            run(job, budget, &calm, &mut |settled| {
                calm.improved
                    .store(calm.began.elapsed().as_millis() as u64, Ordering::Relaxed);
                tell(Event::Settled(Arc::clone(settled)));
            })
        }));
        match result {
            Ok(Ok(_)) => tell(Event::Rested(generation)),
            Ok(Err(fault)) => tell(Event::Fault(fault)),
            Err(_) => tell(Event::Fault(
                "the search broke; the next edit starts it again".into(),
            )),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::clock::{Instant as Moment, Span};
    use crate::timetable::{Request, Settings};

    fn job(generation: u64) -> Job {
        let request = Request::plain("a", Span::lasting(Moment(0), 60));
        Job {
            generation,
            timetable: Timetable::new(
                Settings::titled("t"),
                Vec::new(),
                Vec::new(),
                Vec::new(),
                vec![request],
            ),
            reference: None,
            issued: None,
            floor: None,
            begun: Arc::default(),
        }
    }

    #[test]
    fn a_search_that_breaks_is_said_and_the_next_one_works() {
        let (jobs, waiting) = channel();
        let (tell, told) = channel();
        let thread = std::thread::spawn(move || {
            let tell = move |event| tell.send(event).unwrap();
            work(&waiting, &tell, |job, budget, stop, found| {
                assert!(job.generation != 1, "broken on purpose");
                job.run(budget, stop, found)
            });
        });
        jobs.send((job(1), Flag::default())).unwrap();
        assert!(matches!(told.recv().unwrap(), Event::Fault(_)));
        jobs.send((job(2), Flag::default())).unwrap();
        assert!(
            matches!(told.recv().unwrap(), Event::Settled(settled) if settled.generation() == 2)
        );
        assert!(matches!(told.recv().unwrap(), Event::Rested(2)));
        drop(jobs);
        thread.join().unwrap();
    }

    #[test]
    fn a_newer_job_supersedes_a_running_one() {
        let (tell, told) = channel();
        let mut solver = Solver::start(move |event| tell.send(event).unwrap());
        for generation in 1..=50 {
            solver.submit(job(generation));
        }
        let last = told.iter().find(|event| matches!(event, Event::Rested(50)));
        assert!(last.is_some());
    }
}
