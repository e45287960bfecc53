//! The timetable as the engine sees it: items, classes of alike resources, who may use
//! which class.

use crate::clock::{Instant, Span};
use crate::lookup::{FastMap, FastSet};
use crate::timetable::{Hours, Piece, Resource, Timetable, Wishes, may_use, suits, suits_if_named};
use std::collections::HashMap;
use std::sync::Arc;

/// Resources that no item can tell apart. A member that somebody is pinned on has a class
/// of its own, so a pin is nothing but a choice of one class.
#[derive(Clone, Debug)]
pub struct Class {
    /// Places in the timetable's resources, in listed order.
    pub members: Vec<u32>,
    /// Seconds kept free before, unless the item says otherwise.
    pub setup: i64,
    /// Seconds kept free after.
    pub turnaround: i64,
}

/// A piece to place.
#[derive(Clone, Debug)]
pub struct Item {
    /// Its own time, without buffers.
    pub span: Span,
    /// Its time with its least buffers over the classes it may use.
    pub core: Span,
    /// How much it hurts to leave it out.
    pub weight: u32,
    setup: Option<i64>,
    turnaround: Option<i64>,
    choices: (u32, u32),
}

/// Everything the engine needs, in plain arrays.
#[derive(Clone, Debug)]
pub struct Problem {
    /// The pieces that are not withdrawn, in file order.
    pub items: Vec<Item>,
    /// Their ids.
    pub ids: Vec<Arc<str>>,
    /// The classes.
    pub classes: Vec<Class>,
    /// The class of each resource.
    pub class_of: Vec<u32>,
    /// The ids of the resources.
    pub resources: Vec<Arc<str>>,
    choices: Vec<u32>,
}

impl Problem {
    /// The problem of a timetable. `pieces` are the timetable's own; `settled` says where a
    /// piece that has begun must stay.
    pub fn new(
        timetable: &Timetable,
        pieces: &[Piece],
        settled: &HashMap<Arc<str>, Arc<str>>,
    ) -> Problem {
        let resources = &timetable.resources().all;
        let pieces: Vec<&Piece> = pieces.iter().filter(|piece| !piece.withdrawn).collect();
        let pins: Vec<Option<&Arc<str>>> = pieces
            .iter()
            .map(|piece| {
                let stays = settled
                    .get(&piece.id)
                    .filter(|_| piece.begun(&timetable.settings));
                piece.pin.as_ref().or(stays)
            })
            .collect();
        let spoken = Spoken::by(&pieces);
        let (classes, class_of) = classify(resources, &spoken, &pins);
        let mut problem = Problem {
            items: Vec::with_capacity(pieces.len()),
            ids: pieces.iter().map(|piece| Arc::clone(&piece.id)).collect(),
            classes,
            class_of,
            resources: resources
                .iter()
                .map(|resource| Arc::clone(&resource.id))
                .collect(),
            choices: Vec::new(),
        };
        problem.fill(timetable, &pieces, &pins, &spoken);
        problem
    }

    fn fill(
        &mut self,
        timetable: &Timetable,
        pieces: &[&Piece],
        pins: &[Option<&Arc<str>>],
        spoken: &Spoken<'_>,
    ) {
        let all = &timetable.resources().all;
        let representatives: Vec<&Resource> = self
            .classes
            .iter()
            .map(|class| &all[class.members[0] as usize])
            .collect();
        let classes_of = spoken.classes(all, &self.class_of);
        self.choices.reserve(spoken.named.len());
        // Most pieces say the same of themselves as many others.
        let mut suited: FastMap<Wishes<'_>, Vec<u32>> = FastMap::default();
        let mut named: Vec<u32> = Vec::new();
        let unlimited: Vec<bool> = representatives
            .iter()
            .map(|resource| resource.hours.unlimited())
            .collect();
        let open = |piece: &Piece, class: u32| {
            let resource = representatives[class as usize];
            unlimited[class as usize]
                || resource
                    .hours
                    .allow(crate::timetable::occupied(piece, resource))
        };
        // Where the same time is kept free everywhere there is nothing to compare.
        let first = self
            .classes
            .first()
            .map(|class| (class.setup, class.turnaround));
        let uniform = first.filter(|first| {
            let mut classes = self.classes.iter();
            classes.all(|class| (class.setup, class.turnaround) == *first)
        });
        for ((piece, pin), only) in pieces.iter().zip(pins).zip(&spoken.only) {
            let from = self.choices.len() as u32;
            if let Some(pin) = pin {
                let place = timetable.resources().position(pin);
                let fits = place.filter(|at| may_use(piece, &all[*at]).is_ok());
                self.choices.extend(fits.map(|at| self.class_of[at]));
            } else if !only.is_empty() {
                // Long lists of names are common where every resource is its own.
                named.clear();
                for name in &spoken.named[only.clone()] {
                    named.extend_from_slice(&classes_of[*name as usize]);
                }
                if !named.is_sorted_by(|a, b| a < b) {
                    named.sort_unstable();
                    named.dedup();
                }
                let request = &piece.request;
                let plain = request.never.is_empty() && request.needs.is_empty();
                let plain = plain && piece.size.is_none();
                let suit = named.iter().copied().filter(|class| {
                    let resource = representatives[*class as usize];
                    (plain || suits_if_named(piece, resource).is_ok()) && open(piece, *class)
                });
                self.choices.extend(suit);
            } else {
                let suited = suited.entry(Wishes::of(piece)).or_insert_with(|| {
                    let classes = representatives.iter().zip(0..);
                    classes
                        .filter(|(r, _)| suits(piece, r).is_ok())
                        .map(|(_, class)| class)
                        .collect()
                });
                let suited = suited.iter().copied();
                self.choices
                    .extend(suited.filter(|class| open(piece, *class)));
            }
            let to = self.choices.len() as u32;
            let mut item = Item {
                span: piece.span,
                core: piece.span,
                weight: piece.request.weight,
                setup: piece.request.setup,
                turnaround: piece.request.turnaround,
                choices: (from, to),
            };
            item.core = match uniform.filter(|_| from < to) {
                Some((before, after)) => item.span.widened(
                    item.setup.unwrap_or(before),
                    item.turnaround.unwrap_or(after),
                ),
                None => self.least(timetable, &item),
            };
            self.items.push(item);
        }
    }

    fn least(&self, timetable: &Timetable, item: &Item) -> Span {
        let choices = &self.choices[item.choices.0 as usize..item.choices.1 as usize];
        let classes = || choices.iter().map(|class| &self.classes[*class as usize]);
        let settings = &timetable.settings;
        let before = classes()
            .map(|class| class.setup)
            .min()
            .unwrap_or(settings.setup);
        let after = classes()
            .map(|class| class.turnaround)
            .min()
            .unwrap_or(settings.turnaround);
        item.span.widened(
            item.setup.unwrap_or(before),
            item.turnaround.unwrap_or(after),
        )
    }

    /// The classes an item may use, ascending.
    pub fn choices(&self, item: usize) -> &[u32] {
        let (from, to) = self.items[item].choices;
        &self.choices[from as usize..to as usize]
    }

    /// Whether the item may use the resource.
    pub fn allows(&self, item: usize, resource: usize) -> bool {
        self.choices(item)
            .binary_search(&self.class_of[resource])
            .is_ok()
    }

    /// The span during which the item keeps a resource of that class occupied.
    pub fn occupied(&self, item: usize, class: u32) -> Span {
        let item = &self.items[item];
        let class = &self.classes[class as usize];
        item.span.widened(
            item.setup.unwrap_or(class.setup),
            item.turnaround.unwrap_or(class.turnaround),
        )
    }

    /// Each item's time with its least buffers.
    pub fn cores(&self) -> Vec<Span> {
        self.items.iter().map(|item| item.core).collect()
    }

    /// Items that run at a moment with their least buffers.
    pub fn running(&self, at: Instant) -> impl Iterator<Item = usize> + '_ {
        (0..self.items.len()).filter(move |item| self.items[*item].core.contains(at))
    }
}

/// What tells resources apart.
#[derive(PartialEq, Eq, Hash)]
struct Likeness<'a> {
    seats: Option<u64>,
    offers: &'a [Arc<str>],
    setup: i64,
    turnaround: i64,
    hours: *const Hours,
    /// Which names in `only` and `never` mean it.
    named: (bool, Option<&'a str>),
    /// Its own place when something is pinned on it or names it.
    alone: Option<usize>,
}

/// The names of resources and kinds in `only` and `never`, each looked at once: the same
/// text in memory is the same name, and lists of them are long where every resource is its
/// own.
struct Spoken<'a> {
    names: Vec<&'a str>,
    numbers: FastMap<&'a str, u32>,
    /// Numbers of the names in `only`, piece after piece.
    named: Vec<u32>,
    /// Which of them belong to each piece.
    only: Vec<std::ops::Range<usize>>,
}

impl<'a> Spoken<'a> {
    fn by(pieces: &[&'a Piece]) -> Spoken<'a> {
        let mut spoken = Spoken {
            names: Vec::new(),
            numbers: FastMap::default(),
            named: Vec::with_capacity(pieces.iter().map(|piece| piece.request.only.len()).sum()),
            only: Vec::with_capacity(pieces.len()),
        };
        let mut seen: FastMap<*const u8, u32> = FastMap::default();
        for piece in pieces {
            let from = spoken.named.len();
            for name in &piece.request.only {
                let number = *seen
                    .entry(name.as_ptr())
                    .or_insert_with(|| spoken.number(name));
                spoken.named.push(number);
            }
            spoken.only.push(from..spoken.named.len());
            for name in &piece.request.never {
                spoken.number(name);
            }
        }
        spoken
    }

    fn number(&mut self, name: &'a str) -> u32 {
        *self.numbers.entry(name).or_insert_with(|| {
            self.names.push(name);
            self.names.len() as u32 - 1
        })
    }

    fn of(&self, name: &str) -> bool {
        self.numbers.contains_key(name)
    }

    /// The classes that each name stands for.
    fn classes(&self, resources: &[Resource], class_of: &[u32]) -> Vec<Vec<u32>> {
        let mut classes = vec![Vec::new(); self.names.len()];
        for (resource, class) in resources.iter().zip(class_of) {
            for name in resource.kind.iter().chain([&resource.id]) {
                if let Some(number) = self.numbers.get(&**name) {
                    let classes = &mut classes[*number as usize];
                    if !classes.contains(class) {
                        classes.push(*class);
                    }
                }
            }
        }
        classes
    }
}

fn classify(
    resources: &[Resource],
    spoken: &Spoken<'_>,
    pins: &[Option<&Arc<str>>],
) -> (Vec<Class>, Vec<u32>) {
    let pinned: FastSet<&str> = pins.iter().flatten().map(|pin| &***pin).collect();
    let mut known: HashMap<Likeness<'_>, u32> = HashMap::new();
    let mut classes: Vec<Class> = Vec::new();
    let mut class_of = Vec::with_capacity(resources.len());
    for (at, resource) in resources.iter().enumerate() {
        let own = spoken.of(&resource.id);
        let kind = resource.kind.as_deref().filter(|kind| spoken.of(kind));
        let likeness = Likeness {
            seats: resource.seats,
            offers: &resource.offers,
            setup: resource.setup,
            turnaround: resource.turnaround,
            hours: Arc::as_ptr(&resource.hours),
            named: (own, kind),
            alone: (own || pinned.contains(&*resource.id)).then_some(at),
        };
        let class = *known.entry(likeness).or_insert_with(|| {
            classes.push(Class {
                members: Vec::new(),
                setup: resource.setup,
                turnaround: resource.turnaround,
            });
            classes.len() as u32 - 1
        });
        classes[class as usize].members.push(at as u32);
        class_of.push(class);
    }
    (classes, class_of)
}
