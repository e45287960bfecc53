//! The resources there are: named ones, members of kinds, and those made as needed.

use super::{Closure, Common, Count, Hours, Kind, Listed, Named, Opening, Piece, Timetable};
use crate::clock::{DAY, Instant, Span};
use crate::lookup::FastMap;
use std::collections::{HashMap, HashSet};
use std::sync::Arc;

/// One thing that is handed out.
#[derive(Clone, Debug)]
pub struct Resource {
    /// Its id.
    pub id: Arc<str>,
    /// Shown beside the id.
    pub title: Option<Arc<str>>,
    /// The kind it belongs to.
    pub kind: Option<Arc<str>>,
    /// Most that fit; absent is no limit.
    pub seats: Option<u64>,
    /// What it offers, sorted.
    pub offers: Arc<[Arc<str>]>,
    /// Seconds kept free before, unless the request says otherwise.
    pub setup: i64,
    /// Seconds kept free after.
    pub turnaround: i64,
    /// When it can be used.
    pub hours: Arc<Hours>,
    /// Whether it is one of as many as needed.
    pub as_needed: bool,
}

/// Every resource in listed order, and where to find it.
#[derive(Clone, Debug, Default)]
pub struct Resources {
    /// In listed order; of a kind that grows as needed, as many as could ever be used.
    pub all: Vec<Resource>,
    by_id: FastMap<Arc<str>, usize>,
    /// Whether any kind grows as needed.
    pub open_ended: bool,
}

impl Resources {
    /// The place of a resource in `all`.
    pub fn position(&self, id: &str) -> Option<usize> {
        self.by_id.get(id).copied()
    }

    /// The resource of that id.
    pub fn get(&self, id: &str) -> Option<&Resource> {
        self.position(id).map(|at| &self.all[at])
    }

    /// Works out the resources of a timetable.
    pub(super) fn of(timetable: &Timetable) -> Resources {
        let mut making = Making::new(timetable);
        if timetable.listed.is_empty() {
            making.members(&implied_kind(timetable));
        }
        for listed in &timetable.listed {
            match listed {
                Listed::Kind(at) => making.members(&timetable.kinds[*at]),
                Listed::Named(at) => making.named(&timetable.named[*at]),
            }
        }
        making.resources
    }
}

/// With neither kind nor resource stated: as many alike as needed, called by the noun.
fn implied_kind(timetable: &Timetable) -> Kind {
    Kind {
        id: Arc::clone(&timetable.settings.noun.one),
        count: Count::AsNeeded,
        common: Common::default(),
    }
}

/// The ids of the kinds that grow as needed.
pub(super) fn open_kinds(timetable: &Timetable) -> impl Iterator<Item = Arc<str>> + '_ {
    let implied = timetable
        .listed
        .is_empty()
        .then(|| Arc::clone(&timetable.settings.noun.one));
    timetable
        .kinds
        .iter()
        .filter(|kind| kind.count == Count::AsNeeded)
        .map(|kind| Arc::clone(&kind.id))
        .chain(implied)
}

/// The number of a member called `KIND-NUMBER`, from 1.
pub(crate) fn member_number(kind: &str, id: &str) -> Option<u32> {
    id.strip_prefix(kind)?
        .strip_prefix('-')
        .filter(|digits| digits.bytes().all(|b| b.is_ascii_digit()) && !digits.starts_with('0'))?
        .parse()
        .ok()
}

/// Hours already made, by what they state.
type KnownHours = HashMap<(Option<Vec<Opening>>, Vec<Closure>), Arc<Hours>>;

struct Making<'a> {
    timetable: &'a Timetable,
    resources: Resources,
    overrides: HashMap<&'a str, &'a Arc<Named>>,
    hours: KnownHours,
    horizon: Span,
}

impl<'a> Making<'a> {
    fn new(timetable: &'a Timetable) -> Making<'a> {
        let (mut first, mut last) = (Instant(i64::MAX), Instant(i64::MIN));
        let mut seen = |span: Span| {
            first = first.min(span.start);
            last = last.max(span.end);
        };
        for request in &timetable.requests {
            match &request.repeats {
                None => seen(request.span()),
                Some(repeats) => (0..repeats.dates().len())
                    .for_each(|date| seen(Piece::of_date(request, repeats, date).span)),
            }
        }
        if first > last {
            (first, last) = (Instant(0), Instant(0));
        }
        Making {
            timetable,
            resources: Resources::default(),
            overrides: timetable
                .named
                .iter()
                .map(|named| (named.id.as_ref(), named))
                .collect(),
            hours: HashMap::new(),
            // Some room for moves; beyond it windows are worked out one by one.
            horizon: Span {
                start: first,
                end: last,
            }
            .widened(30 * DAY, 30 * DAY),
        }
    }

    fn members(&mut self, kind: &Kind) {
        let numbers: Vec<u32> = match kind.count {
            Count::Of(count) => (1..=count).collect(),
            Count::AsNeeded => {
                self.resources.open_ended = true;
                self.needed(kind)
            }
        };
        for number in numbers {
            let id: Arc<str> = format!("{}-{number}", kind.id).into();
            let own = self.overrides.get(id.as_ref()).map(|named| &named.common);
            let common = own.map_or_else(|| kind.common.clone(), |own| inherit(own, &kind.common));
            self.push(id, Some(&kind.id), &common, kind.count == Count::AsNeeded);
        }
    }

    fn named(&mut self, named: &Named) {
        let kind = named
            .kind
            .as_ref()
            .and_then(|id| self.timetable.kinds.iter().find(|kind| kind.id == *id));
        let member =
            kind.is_some_and(
                |kind| match (kind.count, member_number(&kind.id, &named.id)) {
                    (_, None) => false,
                    (Count::AsNeeded, Some(_)) => true,
                    (Count::Of(count), Some(number)) => number <= count,
                },
            );
        if !member {
            // One that is no numbered member belongs to its kind by name only.
            self.push(
                Arc::clone(&named.id),
                named.kind.as_ref(),
                &named.common,
                false,
            );
        }
    }

    /// Members of an open-ended kind that some plan could ever use: one for every piece of
    /// the largest load, beside those that a pin, a wish or a table of their own names.
    fn needed(&self, kind: &Kind) -> Vec<u32> {
        let number = |id: &str| member_number(&kind.id, id);
        let mut stated: HashSet<u32> = HashSet::new();
        let settings = &self.timetable.settings;
        let occupied = |piece: &Piece| {
            let own = &piece.request;
            let setup = own.setup.or(kind.common.setup).unwrap_or(settings.setup);
            let turnaround = own
                .turnaround
                .or(kind.common.turnaround)
                .unwrap_or(settings.turnaround);
            piece.span.widened(setup, turnaround)
        };
        let mut pieces = self.timetable.pieces();
        pieces.retain(|piece| !piece.withdrawn);
        for piece in &pieces {
            let request = &piece.request;
            let names = request.only.iter().chain(&request.never).chain(&piece.pin);
            stated.extend(names.filter_map(|name| number(name)));
        }
        let spans: Vec<Span> = pieces.iter().map(occupied).collect();
        let most = match pieces.iter().any(Piece::together) {
            false => most_at_once(&spans),
            true => first_fit(&super::items(&pieces), &spans),
        };
        stated.extend(
            self.timetable
                .named
                .iter()
                .filter_map(|named| number(&named.id)),
        );
        let mut numbers: Vec<u32> = (1..).filter(|n| !stated.contains(n)).take(most).collect();
        numbers.extend(stated);
        numbers.sort_unstable();
        numbers
    }

    fn push(&mut self, id: Arc<str>, kind: Option<&Arc<str>>, common: &Common, as_needed: bool) {
        let settings = &self.timetable.settings;
        let stated = (
            common.open.clone(),
            common.closed.clone().unwrap_or_default(),
        );
        let horizon = self.horizon;
        let hours = self
            .hours
            .entry(stated)
            .or_insert_with_key(|(open, closed)| {
                Arc::new(Hours::new(
                    open.clone(),
                    closed.clone(),
                    settings.zone,
                    horizon,
                ))
            });
        let mut offers = common.offers.clone().unwrap_or_default();
        offers.sort_unstable();
        let resource = Resource {
            id: Arc::clone(&id),
            title: common.title.clone(),
            kind: kind.cloned(),
            seats: common.seats,
            offers: offers.into(),
            setup: common.setup.unwrap_or(settings.setup),
            turnaround: common.turnaround.unwrap_or(settings.turnaround),
            hours: Arc::clone(hours),
            as_needed,
        };
        let at = self.resources.all.len();
        if let std::collections::hash_map::Entry::Vacant(place) = self.resources.by_id.entry(id) {
            place.insert(at);
            self.resources.all.push(resource);
        }
    }
}

/// What `own` states, and `kind`'s word on the rest.
fn inherit(own: &Common, kind: &Common) -> Common {
    Common {
        title: own.title.clone().or_else(|| kind.title.clone()),
        seats: own.seats.or(kind.seats),
        offers: own.offers.clone().or_else(|| kind.offers.clone()),
        setup: own.setup.or(kind.setup),
        turnaround: own.turnaround.or(kind.turnaround),
        open: own.open.clone().or_else(|| kind.open.clone()),
        closed: own.closed.clone().or_else(|| kind.closed.clone()),
    }
}

/// The largest number of spans at one moment.
fn most_at_once(spans: &[Span]) -> usize {
    let mut ends: Vec<(Instant, i32)> = Vec::with_capacity(2 * spans.len());
    for span in spans {
        ends.push((span.start, 1));
        ends.push((span.end, -1));
    }
    // Ends sort before starts at the same moment: back to back is no overlap.
    ends.sort_unstable();
    let (mut load, mut most) = (0, 0);
    for (_, step) in ends {
        load += step;
        most = most.max(load);
    }
    most as usize
}

/// How many resources the items take when each goes on the first that is free for all of
/// its spans: as many as any plan could need, where items of several spans may need more
/// than ever run at once.
fn first_fit(items: &[std::ops::Range<usize>], spans: &[Span]) -> usize {
    let mut rows: Vec<std::collections::BTreeMap<Instant, Instant>> = Vec::new();
    for item in items {
        let free = |row: &std::collections::BTreeMap<Instant, Instant>| {
            spans[item.clone()].iter().all(|span| {
                let before = row.range(..span.end).next_back();
                before.is_none_or(|(_, end)| *end <= span.start)
            })
        };
        let at = rows.iter().position(free).unwrap_or_else(|| {
            rows.push(std::collections::BTreeMap::new());
            rows.len() - 1
        });
        rows[at].extend(
            spans[item.clone()]
                .iter()
                .map(|span| (span.start, span.end)),
        );
    }
    rows.len()
}
