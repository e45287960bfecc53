//! Speed and memory, as ratios within one run and as medians.
//!
//! `cargo bench` prints, beside criterion's own figures, the ratio of the bound, the count
//! and the placed plan to sorting the same spans, the peak memory so far, and the time from
//! an edit to a redrawn 120x40 frame. No test depends on any of it.
#![allow(clippy::unwrap_used, reason = "a benchmark may panic")]
#![allow(clippy::print_stdout, reason = "a benchmark prints what it measures")]
#![allow(missing_docs, reason = "criterion generates undocumented functions")]

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
use fewest::actions::Keys;
use fewest::clock::{Instant, Span};
use fewest::desk::{Desk, Event, Solver};
use fewest::engine::{bound_and_count, partition};
use fewest::screen::{Depth, Effect, Model, Msg, Setup, Theme, draw, update};
use fewest::store::RealFiles;
use fewest::store::journal::{Record, Writer, journal_path};
use ratatui::Terminal;
use ratatui::backend::{CrosstermBackend, TestBackend};
use std::fmt::Write;
use std::hint::black_box;
use std::sync::Arc;
use std::sync::mpsc::{Receiver, channel};
use std::time::{Duration, Instant as Watch};

/// Numbers below a bound, from a seed (a linear congruential generator, Knuth's MMIX).
struct Numbers(u64);

impl Numbers {
    fn below(&mut self, bound: u64) -> u64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 33) % bound
    }
}

/// Alike spans: starts uniform over a fortnight in five-minute steps, lengths uniform from
/// 15 minutes to 4 hours.
fn spans(count: usize) -> Vec<Span> {
    let mut numbers = Numbers(42);
    (0..count)
        .map(|_| {
            let start = Instant(numbers.below(14 * 288) as i64 * 300);
            Span::lasting(start, 900 * (1 + numbers.below(16)) as i64)
        })
        .collect()
}

/// The median time of a piece of work in seconds.
fn median(rounds: usize, mut work: impl FnMut()) -> f64 {
    let mut times: Vec<Duration> = (0..rounds)
        .map(|_| {
            let watch = Watch::now();
            work();
            watch.elapsed()
        })
        .collect();
    times.sort_unstable();
    times[rounds / 2].as_secs_f64()
}

/// Peak resident memory of this process so far, in MiB; 0 where the system does not say.
fn peak_memory() -> u64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap_or_default();
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"));
    line.and_then(|line| line.trim().trim_end_matches(" kB").parse::<u64>().ok())
        .unwrap_or(0)
        >> 10
}

fn alike(criterion: &mut Criterion) {
    println!(
        "\nalike, times over sorting the same spans (bound and count: at most 3; placed plan: at most 8)"
    );
    println!(
        "{:>8} {:>10} {:>10} {:>10} {:>10}",
        "spans", "sort us", "count", "placed", "peak MiB"
    );
    for count in [1_000, 10_000, 100_000] {
        let spans = spans(count);
        let rounds = 2_000_000 / count;
        let sort = median(rounds, || {
            let mut sorted = spans.clone();
            sorted.sort_unstable();
            black_box(sorted);
        });
        let bound = median(rounds, || _ = black_box(bound_and_count(black_box(&spans))));
        let placed = median(rounds, || _ = black_box(partition(black_box(&spans))));
        println!(
            "{count:>8} {:>10.0} {:>10.2} {:>10.2} {:>10}",
            sort * 1e6,
            bound / sort,
            placed / sort,
            peak_memory()
        );
    }
    let mut group = criterion.benchmark_group("alike");
    for count in [1_000, 10_000, 100_000] {
        let spans = spans(count);
        group.bench_with_input(BenchmarkId::new("sort", count), &spans, |bencher, spans| {
            bencher.iter(|| {
                let mut sorted = spans.clone();
                sorted.sort_unstable();
                sorted
            });
        });
        group.bench_with_input(
            BenchmarkId::new("bound and count", count),
            &spans,
            |bencher, spans| {
                bencher.iter(|| bound_and_count(spans));
            },
        );
        group.bench_with_input(
            BenchmarkId::new("placed plan", count),
            &spans,
            |bencher, spans| {
                bencher.iter(|| partition(spans));
            },
        );
    }
    group.finish();
}

/// A desk of so many requests: alike as needed, or on 300 rooms of 12 sizes with openings.
fn timetable(count: usize, rooms: bool) -> String {
    let mut text = "[timetable]\ntitle = \"Speed\"\nnoun = [\"room\", \"rooms\"]\n".to_string();
    if rooms {
        for room in 0..300 {
            let seats = 20 * (1 + room % 12);
            let _ = writeln!(
                text,
                "[[resource]]\nid = \"hall-{room}\"\nseats = {seats}\nopen = [{{ from = \"07:00\", to = \"23:00\" }}]"
            );
        }
    }
    let mut numbers = Numbers(7);
    for request in 0..count {
        let (day, minute) = (1 + numbers.below(14), 480 + 5 * numbers.below(132));
        let _ = writeln!(
            text,
            "[[request]]\nid = \"r{request}\"\ntitle = \"Request number {request}\"\nstart = 2027-01-{day:02}T{:02}:{:02}:00\nlength = \"{}m\"\nsize = {}\npeople = [\"person-{}\"]",
            minute / 60,
            minute % 60,
            15 * (1 + numbers.below(8)),
            5 + numbers.below(150),
            numbers.below(3_000)
        );
    }
    text
}

fn model(text: &str) -> (tempfile::TempDir, Model) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("speed.toml");
    std::fs::write(&path, text).unwrap();
    let theme = Theme::named("daylight", Depth::Palette).unwrap().unwrap();
    let setup = Setup {
        theme,
        keys: Keys::default(),
        ascii: false,
    };
    (folder, Model::new(Desk::open(&path).unwrap(), setup))
}

/// A screen with its solver, as the program runs them.
struct Running {
    model: Model,
    solver: Solver,
    told: Receiver<Event>,
}

impl Running {
    fn new(model: Model) -> Running {
        let (tell, told) = channel();
        let solver = Solver::start(move |event| {
            let _ = tell.send(event);
        });
        Running {
            model,
            solver,
            told,
        }
    }

    /// A key as the program's loop takes it: an answer that comes within 8 ms is part of the
    /// frame, else the frame shows the edit alone and the answer comes in the next.
    fn key_within(&mut self, code: KeyCode) {
        let watch = Watch::now();
        for effect in update(
            &mut self.model,
            Msg::Key(KeyEvent::new(code, KeyModifiers::NONE)),
        ) {
            if let Effect::Submit(job) = effect {
                self.solver.submit(*job);
            }
        }
        while !self.model.desk.is_current() {
            let left = Duration::from_millis(8).saturating_sub(watch.elapsed());
            match self.told.recv_timeout(left) {
                Ok(event) => _ = update(&mut self.model, Msg::Solver(event)),
                Err(_) => return,
            }
        }
    }

    /// Waits for the answer to what was done last.
    fn catch_up(&mut self) {
        while !self.model.desk.is_current() {
            let event = self.told.recv().unwrap();
            update(&mut self.model, Msg::Solver(event));
        }
    }

    /// A key, and the first answer to what it did.
    fn key(&mut self, code: KeyCode) {
        let effects = update(
            &mut self.model,
            Msg::Key(KeyEvent::new(code, KeyModifiers::NONE)),
        );
        self.perform(effects);
    }

    fn perform(&mut self, effects: Vec<Effect>) {
        for effect in effects {
            if let Effect::Submit(job) = effect {
                self.solver.submit(*job);
                while !self.model.desk.is_current() {
                    let event = self.told.recv().unwrap();
                    update(&mut self.model, Msg::Solver(event));
                }
            }
        }
    }
}

fn edit_to_frame(_: &mut Criterion) {
    println!(
        "\nfrom an edit to a redrawn 120x40 frame, 10,000 requests, without the disk (at most 16 ms median)"
    );
    println!(
        "{:>16} {:>12} {:>12} {:>10}",
        "resources", "median ms", "p99 ms", "peak MiB"
    );
    for (name, rooms) in [("alike, as needed", false), ("300 unlike", true)] {
        let (_folder, model) = model(&timetable(10_000, rooms));
        let mut running = Running::new(model);
        let mut terminal = Terminal::new(TestBackend::new(120, 40)).unwrap();
        update(&mut running.model, Msg::Resize(120, 40));
        let job = running.model.desk.job();
        running.perform(vec![Effect::Submit(Box::new(job))]);
        let mut numbers = Numbers(3);
        let mut times = Vec::new();
        for _ in 0..200 {
            let line = format!(
                ":move r{} by {}5m",
                numbers.below(10_000),
                if numbers.below(2) == 0 { "-" } else { "+" }
            );
            for c in line.chars() {
                running.key(KeyCode::Char(c));
            }
            let watch = Watch::now();
            running.key(KeyCode::Enter);
            terminal.draw(|frame| draw(&running.model, frame)).unwrap();
            times.push(watch.elapsed());
        }
        times.sort_unstable();
        let at = |share: usize| times[times.len() * share / 100].as_secs_f64() * 1e3;
        println!(
            "{name:>16} {:>12.2} {:>12.2} {:>10}",
            at(50),
            at(99),
            peak_memory()
        );
        assert!(running.model.desk.unsaved() > 100, "the edits were made");
    }
}

/// A place in a vector of times.
fn share(times: &mut [Duration], percent: usize) -> f64 {
    times.sort_unstable();
    times[(times.len() - 1) * percent / 100].as_secs_f64() * 1e3
}

/// A writer that only counts.
#[derive(Clone, Default)]
struct Count(std::rc::Rc<std::cell::Cell<usize>>);

impl std::io::Write for Count {
    fn write(&mut self, bytes: &[u8]) -> std::io::Result<usize> {
        self.0.set(self.0.get() + bytes.len());
        Ok(bytes.len())
    }

    fn flush(&mut self) -> std::io::Result<()> {
        Ok(())
    }
}

fn screen(_: &mut Criterion) {
    println!(
        "\n10,000 requests on 300 unlike rooms (first frame at most 150 ms; key to frame at most 16 ms at p99)"
    );
    let text = timetable(10_000, true);
    let mut first = Vec::new();
    for _ in 0..7 {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("speed.toml");
        std::fs::write(&path, &text).unwrap();
        let watch = Watch::now();
        let theme = Theme::named("daylight", Depth::Palette).unwrap().unwrap();
        let setup = Setup {
            theme,
            keys: Keys::default(),
            ascii: false,
        };
        let (desk, _) = Desk::open_to_edit(&path, "bench", Arc::new(RealFiles)).unwrap();
        let model = Model::new(desk, setup);
        let mut running = Running::new(model);
        update(&mut running.model, Msg::Resize(120, 40));
        let opened = watch.elapsed();
        let job = running.model.desk.job();
        running.perform(vec![Effect::Submit(Box::new(job))]);
        let mut terminal = Terminal::new(TestBackend::new(120, 40)).unwrap();
        terminal.draw(|frame| draw(&running.model, frame)).unwrap();
        first.push((watch.elapsed(), opened));
    }
    first.sort_unstable();
    let (whole, opened) = first[first.len() / 2];
    println!(
        "first frame with its answer: median {:.0} ms (opened after {:.0} ms)",
        whole.as_secs_f64() * 1e3,
        opened.as_secs_f64() * 1e3
    );

    let (_folder, model) = model(&text);
    let mut running = Running::new(model);
    let count = Count::default();
    let mut terminal = Terminal::with_options(
        CrosstermBackend::new(count.clone()),
        ratatui::TerminalOptions {
            viewport: ratatui::Viewport::Fixed(ratatui::layout::Rect::new(0, 0, 120, 40)),
        },
    )
    .unwrap();
    update(&mut running.model, Msg::Resize(120, 40));
    let job = running.model.desk.job();
    running.perform(vec![Effect::Submit(Box::new(job))]);
    let mut bytes = |running: &Running| {
        let before = count.0.get();
        terminal.draw(|frame| draw(&running.model, frame)).unwrap();
        count.0.get() - before
    };
    let whole = bytes(&running);
    let idle = bytes(&running);
    let (mut keys, mut steps, mut edits) = (Vec::new(), Vec::new(), Vec::new());
    let mut numbers = Numbers(9);
    for _ in 0..300 {
        let code =
            [KeyCode::Left, KeyCode::Right, KeyCode::Up, KeyCode::Down][numbers.below(4) as usize];
        let watch = Watch::now();
        running.key(code);
        steps.push(bytes(&running));
        keys.push(watch.elapsed());
    }
    for _ in 0..100 {
        let watch = Watch::now();
        running.key_within(KeyCode::Char('f'));
        edits.push(bytes(&running));
        keys.push(watch.elapsed());
        running.catch_up();
        bytes(&running);
        running.key(KeyCode::Char('u'));
        bytes(&running);
        running.key(KeyCode::Right);
        bytes(&running);
    }
    steps.sort_unstable();
    edits.sort_unstable();
    println!(
        "key to frame: median {:.2} ms, p99 {:.2} ms",
        share(&mut keys, 50),
        share(&mut keys, 99)
    );
    println!(
        "bytes per 120x40 frame: first {whole}, idle {idle}, cursor step median {} (most {}), edit median {} (most {})",
        steps[steps.len() / 2],
        steps[steps.len() - 1],
        edits[edits.len() / 2],
        edits[edits.len() - 1]
    );
}

fn journal(_: &mut Criterion) {
    let folder = tempfile::tempdir_in(".").unwrap();
    let path = folder.path().join("speed.toml");
    std::fs::write(&path, timetable(1_000, false)).unwrap();
    let (desk, _) = Desk::open_to_edit(&path, "bench", Arc::new(RealFiles)).unwrap();
    let hash = desk.document().hash();
    drop(desk);
    let mut writer = Writer::new(Arc::new(RealFiles), journal_path(&path), hash);
    let mut times = Vec::new();
    for edit in 0..10_000 {
        let line = if edit % 2 == 0 {
            format!("fasten r{}", edit / 2 % 1_000)
        } else {
            format!("loosen r{}", edit / 2 % 1_000)
        };
        let watch = Watch::now();
        writer.add(&Record::Step(vec![line])).unwrap();
        times.push(watch.elapsed());
    }
    println!(
        "\njournal, one edit with sync: median {:.3} ms, p99 {:.3} ms",
        share(&mut times, 50),
        share(&mut times, 99)
    );
    let watch = Watch::now();
    let (mut desk, _) = Desk::open_to_edit(&path, "bench", Arc::new(RealFiles)).unwrap();
    let (taken, rest) = desk.take_in_leftover();
    println!(
        "opening with {taken} edits to replay: {:.0} ms (at most 1,000)",
        watch.elapsed().as_secs_f64() * 1e3
    );
    assert!(taken == 10_000 && rest.is_empty());
}

criterion_group! {
    name = benches;
    config = Criterion::default().sample_size(20).measurement_time(Duration::from_secs(2)).without_plots();
    targets = alike, edit_to_frame, screen, journal
}
criterion_main!(benches);
