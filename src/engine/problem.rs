//! The timetable as the engine sees it: items and their times, classes of alike resources, who may use
//! which class.

use crate::clock::{Instant, Span};
use crate::lookup::{FastMap, FastSet};
use crate::timetable::{
    Hours, Piece, Resource, Timetable, Wishes, items, itself, may_use, occupied, suits,
    suits_if_named,
};
use std::collections::HashMap;
use std::ops::Range;
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

/// What goes on one resource as a whole: a piece, or pieces that stay together.
#[derive(Clone, Debug)]
pub struct Item {
    /// The time of its first unit with its least buffers over the classes it may use.
    pub core: Span,
    /// How much it hurts to leave it out: its pieces together.
    pub weight: u64,
    /// Its places in [`Problem::units`].
    units: (u32, u32),
    /// Its places in [`Problem::ids`].
    pieces: (u32, u32),
    /// Least seconds kept free before and after.
    least: (i64, i64),
    setup: Option<i64>,
    turnaround: Option<i64>,
    choices: (u32, u32),
}

/// A stretch of time of an item. Of items with several pieces only those units are kept
/// that can make a difference: where the same meets again in the same way (equal weeks), one
/// meeting stands for all.
#[derive(Clone, Copy, Debug)]
pub struct Unit {
    /// Whose.
    pub item: u32,
    /// The piece's place in [`Problem::ids`].
    pub piece: u32,
    /// Its own time, without buffers.
    pub span: Span,
    /// Its time with its item's least buffers.
    pub core: Span,
}

/// Everything the engine needs, in plain arrays.
#[derive(Clone, Debug)]
pub struct Problem {
    /// What is placed as a whole, in file order.
    pub items: Vec<Item>,
    /// Their stretches of time: an item's one after the other, by start.
    pub units: Vec<Unit>,
    /// The pieces that are not withdrawn, in file order: an item's one after the other.
    pub ids: Vec<Arc<str>>,
    /// Their times.
    pub spans: Vec<Span>,
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
        let items = items(&pieces);
        let spoken = Spoken::by(&pieces);
        let (classes, class_of) = classify(resources, &spoken, &pins);
        let mut problem = Problem {
            items: Vec::with_capacity(items.len()),
            units: Vec::with_capacity(pieces.len()),
            ids: pieces.iter().map(|piece| Arc::clone(&piece.id)).collect(),
            spans: pieces.iter().map(|piece| piece.span).collect(),
            classes,
            class_of,
            resources: resources
                .iter()
                .map(|resource| Arc::clone(&resource.id))
                .collect(),
            choices: Vec::new(),
        };
        problem.fill(timetable, &pieces, &items, &pins, &spoken);
        if problem.items.len() < problem.ids.len() {
            problem.without_what_repeats();
        }
        problem
    }

    fn fill(
        &mut self,
        timetable: &Timetable,
        pieces: &[&Piece],
        items: &[Range<usize>],
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
            unlimited[class as usize] || resource.hours.allow(occupied(piece, resource))
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
        for range in items {
            let (item, pins) = (&pieces[range.clone()], &pins[range.clone()]);
            let (piece, only) = (item[0], &spoken.only[range.start]);
            let from = self.choices.len() as u32;
            let pin = pins.iter().flatten().next();
            // Pieces that stay together must be pinned alike, and fit one after the other.
            let fits_all = |resource: &Resource| match item {
                [_] => true,
                _ => {
                    let open = |piece: &&Piece| {
                        let hours = &resource.hours;
                        hours.unlimited() || hours.allow(occupied(piece, resource))
                    };
                    item.iter().all(open) && itself(item, resource).is_none()
                }
            };
            if let Some(pin) = pin {
                let alike = pins.iter().flatten().all(|other| other == pin);
                let place = timetable.resources().position(pin).filter(|_| alike);
                let fits =
                    place.filter(|at| may_use(piece, &all[*at]).is_ok() && fits_all(&all[*at]));
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
                    (plain || suits_if_named(piece, resource).is_ok())
                        && open(piece, *class)
                        && fits_all(resource)
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
                self.choices.extend(suited.filter(|class| {
                    open(piece, *class) && fits_all(representatives[*class as usize])
                }));
            }
            let to = self.choices.len() as u32;
            let first_unit = self.units.len() as u32;
            let mut new = Item {
                core: piece.span,
                weight: item
                    .iter()
                    .map(|piece| u64::from(piece.request.weight))
                    .sum(),
                units: (first_unit, first_unit + item.len() as u32),
                pieces: (range.start as u32, range.end as u32),
                least: (0, 0),
                setup: piece.request.setup,
                turnaround: piece.request.turnaround,
                choices: (from, to),
            };
            new.least = match uniform.filter(|_| from < to) {
                Some((before, after)) => {
                    (new.setup.unwrap_or(before), new.turnaround.unwrap_or(after))
                }
                None => self.least(timetable, &new),
            };
            let unit = |(at, piece): (usize, &&Piece)| Unit {
                item: self.items.len() as u32,
                piece: (range.start + at) as u32,
                span: piece.span,
                core: piece.span.widened(new.least.0, new.least.1),
            };
            self.units.extend(item.iter().enumerate().map(unit));
            self.units[first_unit as usize..].sort_by_key(|unit| unit.span);
            new.core = self.units[first_unit as usize].core;
            self.items.push(new);
        }
    }

    fn least(&self, timetable: &Timetable, item: &Item) -> (i64, i64) {
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
        (
            item.setup.unwrap_or(before),
            item.turnaround.unwrap_or(after),
        )
    }

    /// Drops units that can make no difference: stretches without a gap in which everything
    /// meets as it does, at other times, in a stretch that is kept.
    fn without_what_repeats(&mut self) {
        // Nothing that two stretches keep free may touch, wherever it goes.
        let widest = |item: &Item, own: Option<i64>, of: fn(&Class) -> i64| {
            let classes = self.choices[item.choices.0 as usize..item.choices.1 as usize].iter();
            let most = classes
                .map(|class| of(&self.classes[*class as usize]))
                .max();
            own.unwrap_or(most.unwrap_or(0))
        };
        // What has no choice keeps its least buffers in cliques all the same.
        let wide: Vec<(i64, i64)> = self
            .items
            .iter()
            .map(|item| {
                (
                    widest(item, item.setup, |class| class.setup).max(item.least.0),
                    widest(item, item.turnaround, |class| class.turnaround).max(item.least.1),
                )
            })
            .collect();
        let mut order: Vec<u32> = (0..self.units.len() as u32).collect();
        let whole = |unit: &Unit| {
            let (before, after) = wide[unit.item as usize];
            unit.span.widened(before, after)
        };
        order.sort_unstable_by_key(|unit| (whole(&self.units[*unit as usize]), *unit));
        let mut stretches: Vec<Vec<u32>> = Vec::new();
        let mut end = None;
        for unit in order {
            let span = whole(&self.units[unit as usize]);
            if end.is_none_or(|end| end <= span.start) {
                stretches.push(Vec::new());
            }
            end = end.max(Some(span.end));
            if let Some(last) = stretches.last_mut() {
                last.push(unit);
            }
        }
        let mut larger_first: Vec<usize> = (0..stretches.len()).collect();
        larger_first.sort_by_key(|at| std::cmp::Reverse(stretches[*at].len()));
        // Where each item is in what is kept: the stretch, and when it starts there.
        let mut known: Vec<Vec<(usize, i64)>> = vec![Vec::new(); self.items.len()];
        let mut kept: Vec<FastSet<(u32, i64, i64)>> = Vec::new();
        let mut keep = vec![false; self.units.len()];
        for at in larger_first {
            let entry = |unit: u32, shift: i64| {
                let unit = &self.units[unit as usize];
                (
                    unit.item,
                    unit.span.start.0 + shift,
                    unit.span.end.0 + shift,
                )
            };
            let stretch = &stretches[at];
            let (item, start, _) = entry(stretch[0], 0);
            let again = known[item as usize].iter().any(|(other, there)| {
                let shift = there - start;
                stretch
                    .iter()
                    .all(|unit| kept[*other].contains(&entry(*unit, shift)))
            });
            if again {
                continue;
            }
            for unit in stretch {
                keep[*unit as usize] = true;
                let (item, start, _) = entry(*unit, 0);
                known[item as usize].push((kept.len(), start));
            }
            kept.push(stretch.iter().map(|unit| entry(*unit, 0)).collect());
        }
        let mut units = Vec::new();
        for item in &mut self.items {
            let (from, to) = (item.units.0 as usize, item.units.1 as usize);
            let first = units.len();
            units.extend((from..to).filter(|at| keep[*at]).map(|at| self.units[at]));
            item.units = (first as u32, units.len() as u32);
            item.core = units[first].core;
        }
        self.units = units;
    }

    /// The units of an item, by start.
    pub fn units(&self, item: usize) -> &[Unit] {
        let (from, to) = self.items[item].units;
        &self.units[from as usize..to as usize]
    }

    /// The places of an item's units in [`Problem::units`].
    pub fn unit_places(&self, item: usize) -> Range<usize> {
        let (from, to) = self.items[item].units;
        from as usize..to as usize
    }

    /// The pieces of an item, as places in [`Problem::ids`].
    pub fn pieces(&self, item: usize) -> Range<usize> {
        let (from, to) = self.items[item].pieces;
        from as usize..to as usize
    }

    /// The id of the piece that a unit is.
    pub fn id_of(&self, unit: usize) -> &Arc<str> {
        &self.ids[self.units[unit].piece as usize]
    }

    /// The id of the piece that stands for an item: that of its first unit.
    pub fn name(&self, item: usize) -> &Arc<str> {
        self.id_of(self.items[item].units.0 as usize)
    }

    /// Whether every item has one unit.
    pub fn single(&self) -> bool {
        self.units.len() == self.items.len()
    }

    /// Whether two items, both allowed there, are in each other's way on a resource of that
    /// class.
    pub fn conflict(&self, a: usize, b: usize, class: u32) -> bool {
        let (mut one, mut two) = (self.spans_on(a, class), self.spans_on(b, class));
        let (mut x, mut y) = (one.next(), two.next());
        while let (Some(p), Some(q)) = (x, y) {
            if p.overlaps(q) {
                return true;
            }
            // Spans of one item do not overlap where it may go.
            if p.start < q.start {
                x = one.next();
            } else {
                y = two.next();
            }
        }
        false
    }

    /// Whether two items overlap at all, each with its least buffers.
    pub fn overlap(&self, a: usize, b: usize) -> bool {
        let (one, two) = (self.units(a), self.units(b));
        if let ([one], [two]) = (one, two) {
            return one.core.overlaps(two.core);
        }
        one.iter()
            .any(|unit| two.iter().any(|other| unit.core.overlaps(other.core)))
    }

    /// The stretches in which the item keeps a resource of that class occupied, by start.
    pub fn spans_on(&self, item: usize, class: u32) -> impl Iterator<Item = Span> + '_ {
        let (before, after) = self.buffers(item, class);
        let units = self.units(item).iter();
        units.map(move |unit| unit.span.widened(before, after))
    }

    /// Seconds that the item keeps free before and after on a resource of that class.
    fn buffers(&self, item: usize, class: u32) -> (i64, i64) {
        let item = &self.items[item];
        let class = &self.classes[class as usize];
        (
            item.setup.unwrap_or(class.setup),
            item.turnaround.unwrap_or(class.turnaround),
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

    /// The span during which a unit keeps a resource of that class occupied.
    pub fn occupied(&self, unit: usize, class: u32) -> Span {
        let unit = &self.units[unit];
        let (before, after) = self.buffers(unit.item as usize, class);
        unit.span.widened(before, after)
    }

    /// Each piece's time with its item's least buffers.
    pub fn cores(&self) -> Vec<Span> {
        let mut cores = Vec::with_capacity(self.ids.len());
        for item in &self.items {
            let pieces = item.pieces.0 as usize..item.pieces.1 as usize;
            let spans = self.spans[pieces].iter();
            cores.extend(spans.map(|span| span.widened(item.least.0, item.least.1)));
        }
        cores
    }

    /// Units that run at a moment with their least buffers.
    pub fn running(&self, at: Instant) -> impl Iterator<Item = usize> + '_ {
        (0..self.units.len()).filter(move |unit| self.units[*unit].core.contains(at))
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
