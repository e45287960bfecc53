//! Repeats by the rules of RFC 5545 (RRULE, 3.3.10 and 3.8.5.3): from a rule and a first
//! start to the starts it gives.
//!
//! The rule is worked out in civil time, as if the clock never changed, and each start then
//! means a moment by 3.3.5: of a time that occurs twice the earlier, inside a gap the offset
//! from before it.

use super::{Instant, YEARS, Zone, parse_date, parse_time_of_day};
use chrono::{Datelike, NaiveDateTime, NaiveTime, TimeZone};
use rrule::{RRule, RRuleSet, Tz, Unvalidated};
use thiserror::Error;

/// Most starts that one rule may give.
pub const MOST_STARTS: usize = 5_000;

/// Why a rule cannot be used.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
pub enum RepeatError {
    /// Not by the grammar of RFC 5545, or more than it allows. The text may hold what the
    /// rule held: clean it before showing it.
    #[error("is no rule of RFC 5545 ({0}); write it like \"FREQ=WEEKLY;COUNT=10\"")]
    NoRule(String),
    /// It would go on for ever.
    #[error("never ends; add COUNT=... or UNTIL=...")]
    Endless,
    /// It gives too many.
    #[error("gives more than {MOST_STARTS} dates; is it a typing mistake?")]
    TooMany,
    /// The first start is none of its dates: RFC 5545 leaves open what that means.
    #[error("does not give the start itself; begin on a date of the rule")]
    OtherStart,
    /// A date outside the years.
    #[error("leads outside the years {} to {}", YEARS.start(), YEARS.end())]
    Year,
}

/// The starts that a rule gives, in order of civil time. The first start must be one of them,
/// unless it is left out anyway (`first_left_out`).
///
/// # Errors
/// [`RepeatError`].
pub fn starts(
    rule: &str,
    first: Instant,
    first_left_out: bool,
    zone: Zone,
) -> Result<Vec<Instant>, RepeatError> {
    if !rule.split(';').any(|part| {
        let key = part.split('=').next().unwrap_or_default().trim();
        key.eq_ignore_ascii_case("COUNT") || key.eq_ignore_ascii_case("UNTIL")
    }) {
        // Whether it is a rule at all is the first thing to say.
        civil_starts(rule, zone.civil(first), zone, 1)?;
        return Err(RepeatError::Endless);
    }
    let says = |wanted: &str| {
        let mut keys = rule.split(';').filter_map(|part| part.split('=').next());
        keys.any(|key| key.trim().eq_ignore_ascii_case(wanted))
    };
    if says("COUNT") && says("UNTIL") {
        let both = "COUNT and UNTIL exclude each other";
        return Err(RepeatError::NoRule(both.into()));
    }
    let civil = civil_starts(rule, zone.civil(first), zone, MOST_STARTS + 1)?;
    if civil.is_empty() {
        return Err(RepeatError::NoRule("it gives no date at all".into()));
    }
    if civil.len() > MOST_STARTS {
        return Err(RepeatError::TooMany);
    }
    let begins = civil.first() == Some(&zone.civil(first));
    if !begins && !first_left_out {
        return Err(RepeatError::OtherStart);
    }
    if civil.iter().any(|at| !YEARS.contains(&at.year())) {
        return Err(RepeatError::Year);
    }
    let mut starts: Vec<Instant> = civil.into_iter().map(|at| zone.lenient(at)).collect();
    if begins {
        // Of a doubled time the file may have said which one it means.
        starts[0] = first;
    }
    Ok(starts)
}

/// The first `most` starts in civil time.
///
/// # Errors
/// [`RepeatError::NoRule`].
pub fn civil_starts(
    rule: &str,
    first: NaiveDateTime,
    zone: Zone,
    most: usize,
) -> Result<Vec<NaiveDateTime>, RepeatError> {
    let mut parts = Vec::new();
    for part in rule.split(';') {
        match part.split_once('=') {
            Some((key, value)) if key.trim().eq_ignore_ascii_case("UNTIL") => {
                let until = until(value.trim(), zone).ok_or_else(|| {
                    let (from, to) = (YEARS.start(), YEARS.end());
                    RepeatError::NoRule(format!("UNTIL={value} is no date from {from} to {to}"))
                })?;
                if until < first {
                    return Err(RepeatError::NoRule("UNTIL is before the start".into()));
                }
                parts.push(format!("UNTIL={}", until.format("%Y%m%dT%H%M%SZ")));
            }
            _ => parts.push(part.to_string()),
        }
    }
    let rule: RRule<Unvalidated> = parts
        .join(";")
        .parse()
        .map_err(|error: rrule::RRuleError| RepeatError::NoRule(error.to_string()))?;
    let start = Tz::UTC.from_utc_datetime(&first);
    let rule = rule
        .validate(start)
        .map_err(|error| RepeatError::NoRule(error.to_string()))?;
    let most = u16::try_from(most).unwrap_or(u16::MAX);
    let found = RRuleSet::new(start).rrule(rule).limit().all(most);
    let mut civil: Vec<NaiveDateTime> = found.dates.iter().map(|at| at.naive_utc()).collect();
    civil.dedup();
    Ok(civil)
}

/// What UNTIL means in civil time: a moment in UTC, a civil time, or a whole day.
fn until(text: &str, zone: Zone) -> Option<NaiveDateTime> {
    let digits = |from: usize, to: usize| text.get(from..to);
    let date = format!("{}-{}-{}", digits(0, 4)?, digits(4, 6)?, digits(6, 8)?);
    let date = parse_date(&date)?;
    if text.len() == 8 {
        return Some(date.and_time(NaiveTime::from_hms_opt(23, 59, 59)?));
    }
    let (clock, utc) = match text.strip_suffix(['Z', 'z']) {
        Some(clock) => (clock, true),
        None => (text, false),
    };
    let clock = clock.get(8..)?.strip_prefix(['T', 't'])?;
    let clock =
        (clock.len() == 6).then(|| format!("{}:{}:{}", &clock[..2], &clock[2..4], &clock[4..]))?;
    let civil = date.and_time(parse_time_of_day(&clock)?);
    Some(match utc {
        true => zone.civil(Instant(civil.and_utc().timestamp())),
        false => civil,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(zone: Zone, text: &str) -> Instant {
        let civil = NaiveDateTime::parse_from_str(text, "%Y-%m-%d %H:%M").unwrap();
        zone.lenient(civil)
    }

    #[test]
    fn the_time_on_the_clock_stays_across_a_change_of_clock() {
        let lisbon = Zone::named("Europe/Lisbon").unwrap();
        // The clock goes forward on 2027-03-28 (IANA time zone database, rule EU).
        let first = at(lisbon, "2027-03-22 09:00");
        let starts = starts("FREQ=WEEKLY;COUNT=2", first, false, lisbon).unwrap();
        assert_eq!(starts[1], at(lisbon, "2027-03-29 09:00"));
        assert_eq!(starts[1] - starts[0], 7 * 86_400 - 3_600);
    }

    #[test]
    fn a_date_in_a_gap_takes_the_offset_from_before_it() {
        let lisbon = Zone::named("Europe/Lisbon").unwrap();
        let first = at(lisbon, "2027-03-27 01:30");
        let starts = starts("FREQ=DAILY;COUNT=3", first, false, lisbon).unwrap();
        assert_eq!(starts[1], at(lisbon, "2027-03-28 02:30"));
        assert_eq!(starts[2], at(lisbon, "2027-03-29 01:30"));
    }

    #[test]
    fn until_is_a_moment_a_civil_time_or_a_day() {
        let york = Zone::named("America/New_York").unwrap();
        let first = at(york, "1997-09-02 09:00");
        let count = |rule: &str| starts(rule, first, false, york).unwrap().len();
        assert_eq!(count("FREQ=DAILY;UNTIL=19970904T130000Z"), 3);
        assert_eq!(count("FREQ=DAILY;UNTIL=19970904T125959Z"), 2);
        assert_eq!(count("FREQ=DAILY;UNTIL=19970904T090000"), 3);
        assert_eq!(count("FREQ=DAILY;UNTIL=19970904"), 3);
    }

    #[test]
    fn what_is_no_rule_or_never_ends_is_said() {
        let first = at(Zone::UTC, "2027-01-11 09:00");
        let says = |rule: &str| starts(rule, first, false, Zone::UTC).unwrap_err();
        assert!(matches!(says("every week"), RepeatError::NoRule(_)));
        assert!(matches!(says(""), RepeatError::NoRule(_)));
        assert!(matches!(
            says("FREQ=WEEKLY;UNTIL=soon"),
            RepeatError::NoRule(_)
        ));
        assert_eq!(says("FREQ=WEEKLY"), RepeatError::Endless);
        assert_eq!(says("FREQ=DAILY;COUNT=9999"), RepeatError::TooMany);
        // 2027-01-11 is a Monday.
        assert_eq!(
            says("FREQ=WEEKLY;BYDAY=TU;COUNT=3"),
            RepeatError::OtherStart
        );
    }
}
