//! When a resource can be used: weekly opening times and closures.

use crate::clock::{Instant, Span, Zone, merge};
use chrono::{Datelike, Days as DateDays, NaiveDate, NaiveTime};
use std::sync::Arc;

/// Days of the week, Monday first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Days(u8);

const NAMES: [&str; 7] = ["mon", "tue", "wed", "thu", "fri", "sat", "sun"];

impl Days {
    /// Every day.
    pub const ALL: Days = Days(0x7f);

    /// Reads `mon-fri`, `sat`, `mon,wed-thu`; a range may wrap around the week's end.
    pub fn parse(text: &str) -> Option<Days> {
        let day = |name: &str| NAMES.iter().position(|known| *known == name.trim());
        let mut set = 0;
        for part in text.split(',') {
            let (from, to) = match part.split_once('-') {
                Some((from, to)) => (day(from)?, day(to)?),
                None => (day(part)?, day(part)?),
            };
            for step in 0..=(to + 7 - from) % 7 {
                set |= 1 << ((from + step) % 7);
            }
        }
        Some(Days(set))
    }

    fn contains(self, date: NaiveDate) -> bool {
        self.0 & (1 << date.weekday().num_days_from_monday()) != 0
    }
}

/// One weekly opening; a `to` at or before `from` ends the next day, and `days` names
/// the day of `from`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Opening {
    /// On which days it begins.
    pub days: Days,
    /// Civil time it begins.
    pub from: NaiveTime,
    /// Civil time it ends.
    pub to: NaiveTime,
}

/// A stretch in which a resource is out.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct Closure {
    /// Half-open.
    pub span: Span,
    /// The stated reason.
    pub because: Option<Arc<str>>,
}

/// Opening times and closures of one resource, with the open windows worked out over the
/// time the timetable speaks of.
#[derive(Clone, Debug)]
pub struct Hours {
    opening: Option<Vec<Opening>>,
    closed: Vec<Closure>,
    zone: Zone,
    known: Option<Span>,
    windows: Vec<Span>,
}

impl PartialEq for Hours {
    /// Equal when the same is stated.
    fn eq(&self, other: &Self) -> bool {
        self.opening == other.opening && self.closed == other.closed && self.zone == other.zone
    }
}

/// Longer horizons are worked out piece by piece instead of at once.
const LONGEST_KNOWN: i64 = 20 * 366 * 86_400;

impl Hours {
    /// Hours whose windows are known over `horizon`; `opening` of `None` is always.
    pub fn new(
        opening: Option<Vec<Opening>>,
        closed: Vec<Closure>,
        zone: Zone,
        horizon: Span,
    ) -> Hours {
        let mut hours = Hours {
            opening,
            closed,
            zone,
            known: None,
            windows: Vec::new(),
        };
        if hours.opening.is_some() && horizon.seconds() <= LONGEST_KNOWN {
            hours.windows = hours.windows_over(horizon);
            hours.known = Some(horizon);
        }
        hours
    }

    /// The open windows over the time the timetable speaks of; `None` when it is always open
    /// (or the time is too long to be worked out at once).
    pub fn known_windows(&self) -> Option<&[Span]> {
        self.known.map(|_| self.windows.as_slice())
    }

    /// Whether it is always open and never closed.
    pub fn unlimited(&self) -> bool {
        self.opening.is_none() && self.closed.is_empty()
    }

    /// The openings, as stated; `None` is always.
    pub fn opening(&self) -> Option<&[Opening]> {
        self.opening.as_deref()
    }

    /// The closures, as stated.
    pub fn closed(&self) -> &[Closure] {
        &self.closed
    }

    /// The closure that the span runs into, if any.
    pub fn closure_in(&self, span: Span) -> Option<&Closure> {
        self.closed
            .iter()
            .find(|closure| closure.span.overlaps(span))
    }

    /// Whether the opening times alone contain the whole span.
    pub fn open_through(&self, span: Span) -> bool {
        if self.opening.is_none() {
            return true;
        }
        let inside = |windows: &[Span]| {
            let next = windows.partition_point(|window| window.start <= span.start);
            next > 0 && windows[next - 1].end >= span.end
        };
        match self.known {
            Some(known) if known.covers(span) => inside(&self.windows),
            _ => inside(&self.windows_over(span)),
        }
    }

    /// Whether the span can be used: open throughout, and not closed.
    pub fn allow(&self, span: Span) -> bool {
        self.open_through(span) && self.closure_in(span).is_none()
    }

    /// Open windows that begin near `over`, joined where they touch.
    pub fn windows_over(&self, over: Span) -> Vec<Span> {
        let Some(opening) = &self.opening else {
            return vec![over];
        };
        let last = self.zone.date(over.end);
        let mut date = self.zone.date(over.start) - DateDays::new(1);
        let mut windows = Vec::new();
        while date <= last {
            for rule in opening.iter().filter(|rule| rule.days.contains(date)) {
                let ends_on = if rule.to <= rule.from {
                    date + DateDays::new(1)
                } else {
                    date
                };
                let span = Span {
                    start: self.zone.lenient(date.and_time(rule.from)),
                    end: self.zone.lenient(ends_on.and_time(rule.to)),
                };
                // A change of clock can swallow a short window whole.
                if span.start < span.end {
                    windows.push(span);
                }
            }
            date = date + DateDays::new(1);
        }
        merge(windows)
    }
}

/// The closures without the moments of `from`; a closure cut in two keeps its reason.
pub fn subtract(closed: &[Closure], from: Span) -> Vec<Closure> {
    let mut left = Vec::new();
    for closure in closed {
        let cut = |start: Instant, end: Instant| {
            (start < end).then(|| Closure {
                span: Span { start, end },
                because: closure.because.clone(),
            })
        };
        if closure.span.overlaps(from) {
            left.extend(cut(closure.span.start, from.start));
            left.extend(cut(from.end, closure.span.end));
        } else {
            left.push(closure.clone());
        }
    }
    left
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::clock::parse_civil;

    fn hours(days: &str, from: &str, to: &str, zone: &str) -> Hours {
        let time = |text| crate::clock::parse_time_of_day(text).unwrap();
        let rule = Opening {
            days: Days::parse(days).unwrap(),
            from: time(from),
            to: time(to),
        };
        let far = Span {
            start: Instant(0),
            end: Instant(1),
        };
        Hours::new(
            Some(vec![rule]),
            Vec::new(),
            Zone::named(zone).unwrap(),
            far,
        )
    }

    fn span(zone: &str, date: &str, from: &str, length: i64) -> Span {
        let date = crate::clock::parse_date(date).unwrap();
        let zone = Zone::named(zone).unwrap();
        Span::lasting(zone.lenient(parse_civil(date, from).unwrap().0), length)
    }

    #[test]
    fn days_are_read() {
        assert_eq!(Days::parse("mon-sun"), Some(Days::ALL));
        assert_eq!(Days::parse("sat-mon"), Days::parse("mon,sat,sun"));
        assert_eq!(Days::parse("mon-fry"), None);
        assert_eq!(Days::parse(""), None);
    }

    #[test]
    fn an_opening_over_midnight_belongs_to_the_day_it_begins() {
        let night = hours("fri", "22:00", "06:00", "Europe/Lisbon");
        // 2027-01-15 is a Friday.
        assert!(night.allow(span("Europe/Lisbon", "2027-01-15", "22:00", 8 * 3600)));
        assert!(night.allow(span("Europe/Lisbon", "2027-01-16", "05:00", 3600)));
        assert!(!night.allow(span("Europe/Lisbon", "2027-01-16", "05:00", 3601)));
        assert!(!night.allow(span("Europe/Lisbon", "2027-01-16", "22:00", 60)));
    }

    #[test]
    fn touching_openings_join_and_a_change_of_clock_keeps_civil_time() {
        let always = hours("mon-sun", "00:00", "00:00", "Europe/Lisbon");
        assert!(always.allow(span("Europe/Lisbon", "2027-03-27", "12:00", 5 * 86_400)));
        // On 2027-03-28 Lisbon's clocks go forward at 01:00: this night has seven hours.
        let night = hours("sat", "22:00", "06:00", "Europe/Lisbon");
        assert!(night.allow(span("Europe/Lisbon", "2027-03-27", "22:00", 7 * 3600)));
        assert!(!night.allow(span("Europe/Lisbon", "2027-03-27", "22:00", 7 * 3600 + 1)));
        // On 2027-04-04 Lord Howe's go back by half an hour at 02:00.
        let island = hours("sat", "22:00", "06:00", "Australia/Lord_Howe");
        assert!(island.allow(span(
            "Australia/Lord_Howe",
            "2027-04-03",
            "22:00",
            8 * 3600 + 1800
        )));
        assert!(!island.allow(span(
            "Australia/Lord_Howe",
            "2027-04-03",
            "22:00",
            8 * 3600 + 1801
        )));
    }

    #[test]
    fn reopening_cuts_a_closure_in_two() {
        let span = |start, end| Span {
            start: Instant(start),
            end: Instant(end),
        };
        let closure = Closure {
            span: span(0, 100),
            because: Some("repair".into()),
        };
        let left = subtract(&[closure], span(40, 60));
        assert_eq!(
            left.iter().map(|c| c.span).collect::<Vec<_>>(),
            [span(0, 40), span(60, 100)]
        );
        assert!(left.iter().all(|c| c.because.as_deref() == Some("repair")));
    }
}
