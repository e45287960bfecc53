//! Requests that repeat: the dates of one, and what differs on some of them.

use crate::clock::{Instant, RepeatError, Zone, starts};
use crate::lookup::FastMap;
use crate::text::nearest;
use chrono::{NaiveDate, NaiveDateTime, Timelike};
use std::sync::Arc;

/// How a request repeats (RFC 5545: RRULE, RDATE, EXDATE), and what differs on some dates.
/// Its dates follow from the rest and are worked out when it is made.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Repeats {
    /// The rule, as stated.
    pub rule: Option<Arc<str>>,
    /// Further starts.
    pub also: Vec<Instant>,
    /// Dates left out.
    pub except: Vec<Except>,
    /// What differs on a date, in file order.
    pub differing: Vec<Differing>,
    dates: Vec<Dated>,
    /// Where each date is, by the part of its name after the `@`.
    places: FastMap<Arc<str>, usize>,
}

/// A date that is left out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Except {
    /// Every start on that civil date.
    Date(NaiveDate),
    /// That start.
    Moment(Instant),
}

/// A date of a request that repeats.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Dated {
    /// `chem-101@2027-01-11`, with `T0900` where a date has several: by the start that the
    /// rule gives, wherever it is moved.
    pub id: Arc<str>,
    /// When it starts by the rule.
    pub start: Instant,
    /// The place in [`Repeats::differing`] of what differs on it.
    pub differs: Option<usize>,
}

/// What differs on one date.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Differing {
    /// Which date: the part of its name after the `@`.
    pub date: Arc<str>,
    /// Its place among all such tables of the file, from 0.
    pub table: usize,
    /// Starts then instead.
    pub start: Option<Instant>,
    /// Lasts so many seconds instead.
    pub length: Option<i64>,
    /// Stays on that resource.
    pub pin: Option<Arc<str>>,
    /// Stays at its start.
    pub fastened: bool,
    /// Out of the plan.
    pub withdrawn: bool,
}

impl Differing {
    /// A date on which nothing differs yet.
    pub fn nothing(date: &str, table: usize) -> Differing {
        Differing {
            date: date.into(),
            table,
            start: None,
            length: None,
            pin: None,
            fastened: false,
            withdrawn: false,
        }
    }
}

/// Why a request cannot repeat like that.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum RepeatsError {
    /// The rule is none.
    Rule(RepeatError),
    /// Every date is left out.
    Nothing,
    /// Something differs on what is none of its dates: the place in the list, and the name of
    /// the date that is nearest to it.
    NoDate(usize, Option<Arc<str>>),
    /// Something differs twice on the same date: the later place in the list.
    Twice(usize),
}

impl Repeats {
    /// The repeats of the request `id` that first starts at `first`.
    ///
    /// # Errors
    /// [`RepeatsError`], the first that is found.
    pub fn new(
        (id, first): (&str, Instant),
        zone: Zone,
        rule: Option<Arc<str>>,
        also: Vec<Instant>,
        except: Vec<Except>,
        differing: Vec<Differing>,
    ) -> Result<Repeats, RepeatsError> {
        let left_out = |start: &Instant| {
            except.iter().any(|except| match except {
                Except::Date(date) => zone.date(*start) == *date,
                Except::Moment(at) => at == start,
            })
        };
        let mut found = match &rule {
            Some(rule) => {
                starts(rule, first, left_out(&first), zone).map_err(RepeatsError::Rule)?
            }
            None => vec![first],
        };
        found.extend(&also);
        found.sort_unstable();
        found.dedup();
        found.retain(|start| !left_out(start));
        if found.is_empty() {
            return Err(RepeatsError::Nothing);
        }
        let civil: Vec<NaiveDateTime> = found.iter().map(|at| zone.civil(*at)).collect();
        let mut dates: Vec<Dated> = Vec::with_capacity(found.len());
        let mut places = FastMap::default();
        for (at, start) in found.iter().enumerate() {
            let alone = |other: Option<&NaiveDateTime>| {
                other.is_none_or(|other| other.date() != civil[at].date())
            };
            let several =
                !alone(at.checked_sub(1).and_then(|at| civil.get(at))) || !alone(civil.get(at + 1));
            let mut name = dated_name(civil[at], several);
            // The clock showed it twice.
            if places.contains_key(&*name) {
                name.push('b');
            }
            dates.push(Dated {
                id: format!("{id}@{name}").into(),
                start: *start,
                differs: None,
            });
            places.insert(Arc::from(name), at);
        }
        for (at, differing) in differing.iter().enumerate() {
            let Some(place) = places.get(&differing.date).copied() else {
                let names = || places.keys().map(|name| &**name);
                let day = differing.date.split('T').next().unwrap_or_default();
                let same = names().filter(|name| name.starts_with(day)).min();
                let near = same.or_else(|| nearest(&differing.date, names()));
                return Err(RepeatsError::NoDate(at, near.map(Arc::from)));
            };
            if dates[place].differs.replace(at).is_some() {
                return Err(RepeatsError::Twice(at));
            }
        }
        Ok(Repeats {
            rule,
            also,
            except,
            differing,
            dates,
            places,
        })
    }

    /// Changes what differs on the date at that place; if nothing did yet, its table is the
    /// one numbered `tables`. Returns the table's number.
    ///
    /// # Errors
    /// Whatever `how` refuses with; nothing is changed then.
    pub(crate) fn differ<E>(
        &mut self,
        date: usize,
        tables: usize,
        how: impl FnOnce(&mut Differing) -> Result<(), E>,
    ) -> Result<usize, E> {
        let known = self.dates[date].differs;
        let name = self.dates[date]
            .id
            .split_once('@')
            .map_or("", |(_, name)| name);
        let mut differing = match known {
            Some(at) => self.differing[at].clone(),
            None => Differing::nothing(name, tables),
        };
        how(&mut differing)?;
        let table = differing.table;
        match known {
            Some(at) => self.differing[at] = differing,
            None => {
                self.dates[date].differs = Some(self.differing.len());
                self.differing.push(differing);
            }
        }
        Ok(table)
    }

    /// Takes out what differs on the date at that place when that is nothing any more;
    /// whether it was.
    pub(crate) fn forget_if_nothing_differs(&mut self, date: usize) -> bool {
        let Some(at) = self.dates[date].differs else {
            return false;
        };
        let differing = &self.differing[at];
        if *differing != Differing::nothing(&differing.date, differing.table) {
            return false;
        }
        self.differing.remove(at);
        for dated in &mut self.dates {
            dated.differs = match dated.differs {
                Some(other) if other == at => None,
                Some(other) if other > at => Some(other - 1),
                other => other,
            };
        }
        true
    }

    /// Its dates, by start.
    pub fn dates(&self) -> &[Dated] {
        &self.dates
    }

    /// The place of a date, by the part of its name after the `@`.
    pub fn date(&self, name: &str) -> Option<usize> {
        self.places.get(name).copied()
    }

    /// What differs on the date at that place.
    pub fn differs(&self, date: usize) -> Option<&Differing> {
        self.dates[date].differs.map(|at| &self.differing[at])
    }
}

/// The part of an occurrence's name after the `@`.
fn dated_name(civil: NaiveDateTime, several: bool) -> String {
    let form = match (several, civil.second()) {
        (false, _) => "%Y-%m-%d",
        (true, 0) => "%Y-%m-%dT%H%M",
        (true, _) => "%Y-%m-%dT%H%M%S",
    };
    civil.format(form).to_string()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(text: &str) -> Instant {
        let civil = NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M").unwrap();
        Zone::UTC.lenient(civil)
    }

    fn names(repeats: &Repeats) -> Vec<&str> {
        repeats.dates().iter().map(|dated| &*dated.id).collect()
    }

    #[test]
    fn names_are_dates_with_the_time_where_a_date_has_several() {
        let repeats = Repeats::new(
            ("a", at("2027-01-11 09:00")),
            Zone::UTC,
            Some("FREQ=WEEKLY;COUNT=3".into()),
            vec![at("2027-01-18 14:00")],
            vec![Except::Date(NaiveDate::from_ymd_opt(2027, 1, 25).unwrap())],
            Vec::new(),
        )
        .unwrap();
        assert_eq!(
            names(&repeats),
            ["a@2027-01-11", "a@2027-01-18T0900", "a@2027-01-18T1400"]
        );
        assert_eq!(repeats.date("2027-01-18T1400"), Some(2));
        assert_eq!(repeats.date("2027-01-18"), None);
    }

    #[test]
    fn what_differs_must_be_on_one_of_its_dates_and_once() {
        let make = |dates: &[&str]| {
            let differing = dates.iter().map(|date| Differing::nothing(date, 0));
            Repeats::new(
                ("a", at("2027-01-11 09:00")),
                Zone::UTC,
                Some("FREQ=DAILY;COUNT=2".into()),
                Vec::new(),
                Vec::new(),
                differing.collect(),
            )
        };
        assert!(make(&["2027-01-12"]).is_ok());
        assert_eq!(
            make(&["2027-01-13"]),
            Err(RepeatsError::NoDate(0, Some("2027-01-11".into())))
        );
        assert_eq!(
            make(&["2027-01-12", "2027-01-12"]),
            Err(RepeatsError::Twice(1))
        );
    }
}
