//! Civil time in an IANA zone, and back.

use super::{DAY, Instant, Span, YEARS};
use chrono::{
    DateTime, Datelike, MappedLocalTime, NaiveDate, NaiveDateTime, NaiveTime, Offset, TimeDelta,
    TimeZone, Utc,
};

/// An IANA time zone.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Zone(chrono_tz::Tz);

/// What a civil time means in a zone.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Resolved {
    /// Exactly one moment.
    One(Instant),
    /// Skipped by a change of clock; the nearest whole minutes that exist.
    Gap {
        /// The last valid minute before the gap.
        before: NaiveDateTime,
        /// The first valid minute after it.
        after: NaiveDateTime,
    },
    /// Occurs twice because the clock goes back.
    Twice {
        /// The first time the clock shows it.
        earlier: Instant,
        /// The second time.
        later: Instant,
    },
}

impl Zone {
    /// Coordinated universal time.
    pub const UTC: Zone = Zone(chrono_tz::Tz::UTC);

    /// The zone of that IANA name.
    pub fn named(name: &str) -> Option<Zone> {
        name.parse().ok().map(Zone)
    }

    /// Its IANA name.
    pub fn name(self) -> &'static str {
        self.0.name()
    }

    /// The known name nearest to a mistyped one.
    pub fn near(name: &str) -> Option<&'static str> {
        let wanted = name.to_lowercase();
        chrono_tz::TZ_VARIANTS
            .iter()
            .map(|zone| zone.name())
            .map(|known| {
                (
                    strsim::damerau_levenshtein(&known.to_lowercase(), &wanted),
                    known,
                )
            })
            .min()
            .filter(|(distance, _)| *distance <= 4)
            .map(|(_, known)| known)
    }

    /// What the civil time means here.
    pub fn resolve(self, civil: NaiveDateTime) -> Resolved {
        match self.0.from_local_datetime(&civil) {
            MappedLocalTime::Single(at) => Resolved::One(Instant(at.timestamp())),
            MappedLocalTime::Ambiguous(a, b) => Resolved::Twice {
                earlier: Instant(a.timestamp().min(b.timestamp())),
                later: Instant(a.timestamp().max(b.timestamp())),
            },
            MappedLocalTime::None => {
                let (change, old, new) = self.change_near(civil);
                let local = |offset: i64| civil_of(change + offset);
                Resolved::Gap {
                    before: local(old) - TimeDelta::minutes(1),
                    after: local(new),
                }
            }
        }
    }

    /// The moment of a generated or imported civil time (RFC 5545, 3.3.5): the earlier
    /// of two, and inside a gap the offset from before it.
    pub fn lenient(self, civil: NaiveDateTime) -> Instant {
        match self.resolve(civil) {
            Resolved::One(at) | Resolved::Twice { earlier: at, .. } => at,
            Resolved::Gap { .. } => {
                let (_, old, _) = self.change_near(civil);
                Instant(civil.and_utc().timestamp() - old)
            }
        }
    }

    /// Seconds that the clock was last put forward by in the two hours before a moment; 0 when
    /// it was not.
    pub fn gap_before(self, at: Instant) -> i64 {
        (self.offset(at) - self.offset(at - 7_200)).max(0)
    }

    /// The change of clock within a day of a civil time: its moment in seconds, and the
    /// offsets before and after it.
    fn change_near(self, civil: NaiveDateTime) -> (i64, i64, i64) {
        let middle = civil.and_utc().timestamp();
        let (mut low, mut high) = (middle - 86_400 * 2, middle + 86_400 * 2);
        let (old, new) = (self.offset(Instant(low)), self.offset(Instant(high)));
        while high - low > 1 {
            let at = low + (high - low) / 2;
            if self.offset(Instant(at)) == old {
                low = at;
            } else {
                high = at;
            }
        }
        (high, old, new)
    }

    /// Seconds that civil time is ahead of UTC at that moment.
    pub fn offset(self, at: Instant) -> i64 {
        let civil = civil_of(at.0);
        i64::from(
            self.0
                .offset_from_utc_datetime(&civil)
                .fix()
                .local_minus_utc(),
        )
    }

    /// The civil time at a moment.
    pub fn civil(self, at: Instant) -> NaiveDateTime {
        civil_of(at.0 + self.offset(at))
    }

    /// The civil date at a moment.
    pub fn date(self, at: Instant) -> NaiveDate {
        self.civil(at).date()
    }

    /// The first moment of a civil date (the earlier one if midnight occurs twice).
    pub fn midnight(self, date: NaiveDate) -> Instant {
        self.lenient(date.and_time(NaiveTime::MIN))
    }

    /// Every civil date that a span touches, in order.
    pub fn dates(self, span: Span) -> impl Iterator<Item = NaiveDate> {
        let last = self.date(span.end - 1);
        self.date(span.start)
            .iter_days()
            .take_while(move |date| *date <= last)
    }

    /// A civil date as a span: a change of clock makes it longer or shorter.
    pub fn day(self, date: NaiveDate) -> Span {
        let start = self.midnight(date);
        let end = date
            .succ_opt()
            .map_or(start + DAY, |next| self.midnight(next));
        Span { start, end }
    }

    /// RFC 3339 with the local offset, as `2027-01-11T10:00:00+00:00`.
    pub fn rfc3339(self, at: Instant) -> String {
        format!(
            "{}{}",
            self.civil(at).format("%Y-%m-%dT%H:%M:%S"),
            self.offset_text(at)
        )
    }

    /// The offset as `+01:00`.
    fn offset_text(self, at: Instant) -> String {
        let offset = self.offset(at);
        let sign = if offset < 0 { '-' } else { '+' };
        let minutes = offset.abs() / 60;
        format!("{sign}{:02}:{:02}", minutes / 60, minutes % 60)
    }

    /// `2027-01-11 10:00`, with seconds when not zero and an offset when the civil time
    /// occurs twice: what [`parse_civil`] and this zone read back as the same moment.
    pub fn print(self, at: Instant) -> String {
        let civil = self.civil(at);
        let mut text = civil.format("%Y-%m-%d %H:%M").to_string();
        let seconds = at.0.rem_euclid(60);
        if seconds != 0 {
            text.push_str(&format!(":{seconds:02}"));
        }
        if matches!(self.resolve(civil), Resolved::Twice { .. }) {
            text.push_str(&self.offset_text(at));
        }
        text
    }

    /// The hour and minute of a moment, as `10:00`.
    pub fn time(self, at: Instant) -> String {
        self.civil(at).format("%H:%M").to_string()
    }
}

/// The civil time of a count of seconds since 1970, as if in UTC.
fn civil_of(seconds: i64) -> NaiveDateTime {
    DateTime::<Utc>::from_timestamp(seconds, 0)
        .unwrap_or(DateTime::<Utc>::MIN_UTC)
        .naive_utc()
}

/// Reads `YYYY-MM-DD`; `None` when it is no date within [`YEARS`].
pub fn parse_date(text: &str) -> Option<NaiveDate> {
    (text.len() == 10)
        .then(|| NaiveDate::parse_from_str(text, "%Y-%m-%d").ok())
        .flatten()
        .filter(|date| YEARS.contains(&date.year()))
}

/// Reads `HH:MM` or `HH:MM:SS`.
pub fn parse_time_of_day(text: &str) -> Option<NaiveTime> {
    let format = match text.len() {
        5 => "%H:%M",
        8 => "%H:%M:%S",
        _ => return None,
    };
    // A leap second is accepted by the library but is no second of ours.
    NaiveTime::parse_from_str(text, format)
        .ok()
        .filter(|_| !text.ends_with(":60"))
}

/// Reads a time of day that may carry an offset (`10:00`, `10:00:30`, `01:30+01:00`);
/// the offset is in seconds.
pub fn parse_civil(date: NaiveDate, time: &str) -> Option<(NaiveDateTime, Option<i64>)> {
    let cut = time.find(['+', '-']).unwrap_or(time.len());
    let (clock, offset) = time.split_at(cut);
    let civil = date.and_time(parse_time_of_day(clock)?);
    if offset.is_empty() {
        return Some((civil, None));
    }
    let ahead = parse_time_of_day(offset.get(1..)?).filter(|_| offset.len() == 6)?;
    let seconds = i64::from(chrono::Timelike::num_seconds_from_midnight(&ahead));
    Some((
        civil,
        Some(if offset.starts_with('-') {
            -seconds
        } else {
            seconds
        }),
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn civil(text: &str) -> NaiveDateTime {
        NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M").unwrap()
    }

    fn zone(name: &str) -> Zone {
        Zone::named(name).unwrap()
    }

    // Dates of changes: IANA time zone database, rules EU, US and LH, through chrono-tz.
    #[test]
    fn gaps_name_the_nearest_valid_minutes() {
        for (name, inside, before, after) in [
            (
                "Europe/Lisbon",
                "2027-03-28 01:30",
                "2027-03-28 00:59",
                "2027-03-28 02:00",
            ),
            (
                "America/New_York",
                "2027-03-14 02:15",
                "2027-03-14 01:59",
                "2027-03-14 03:00",
            ),
            (
                "Australia/Lord_Howe",
                "2027-10-03 02:10",
                "2027-10-03 01:59",
                "2027-10-03 02:30",
            ),
        ] {
            assert_eq!(
                zone(name).resolve(civil(inside)),
                Resolved::Gap {
                    before: civil(before),
                    after: civil(after)
                },
                "{name}"
            );
        }
    }

    #[test]
    fn doubled_times_have_an_earlier_and_a_later_reading() {
        for (name, text, apart) in [
            ("Europe/Lisbon", "2027-10-31 01:30", 3_600),
            ("America/New_York", "2027-11-07 01:30", 3_600),
            ("Australia/Lord_Howe", "2027-04-04 01:45", 1_800),
        ] {
            let Resolved::Twice { earlier, later } = zone(name).resolve(civil(text)) else {
                panic!("{name}: {text} occurs twice");
            };
            assert_eq!(later - earlier, apart, "{name}");
            assert_ne!(zone(name).print(earlier), zone(name).print(later));
        }
    }

    #[test]
    fn a_generated_time_in_a_gap_uses_the_offset_before_it() {
        let lisbon = zone("Europe/Lisbon");
        let at = lisbon.lenient(civil("2027-03-28 01:30"));
        assert_eq!(lisbon.civil(at), civil("2027-03-28 02:30"));
    }

    #[test]
    fn times_with_offsets_are_read() {
        let date = parse_date("2027-10-31").unwrap();
        assert_eq!(parse_civil(date, "01:30+01:00").unwrap().1, Some(3_600));
        assert_eq!(parse_civil(date, "01:30-03:30").unwrap().1, Some(-12_600));
        assert_eq!(parse_civil(date, "01:30:15").unwrap().1, None);
        for bad in [
            "25:00",
            "1:30",
            "01:30+1",
            "01:30+01:00:00",
            "",
            "+",
            "01:30+",
            "23:59:60",
        ] {
            assert_eq!(parse_civil(date, bad), None, "{bad}");
        }
        assert_eq!(parse_date("0027-01-01"), None);
    }

    #[test]
    fn a_near_name_is_suggested() {
        assert_eq!(Zone::near("Europe/Lisboa"), Some("Europe/Lisbon"));
    }
}
