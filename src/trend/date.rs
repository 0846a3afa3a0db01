//! Moments in time as logs write them: RFC 3339, in UTC when written, with any offset when read.

use serde::{Deserialize, Deserializer, Serialize, Serializer, de};
use std::fmt;
use std::str::FromStr;

/// Seconds of a day.
const DAY_S: i64 = 86_400;

/// A moment, in whole seconds since the beginning of 1970 (UTC, leap seconds not counted).
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Moment(pub i64);

/// What is no moment.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{0}` is no date; write it as 2026-11-30, 2026-11-30T14:05Z or 2026-11-30T14:05:30+01:00")]
pub struct NoMoment(String);

impl Moment {
    /// The day alone, `2026-11-30`.
    #[must_use]
    pub fn day(self) -> String {
        let (year, month, day) = civil(self.0.div_euclid(DAY_S));
        format!("{year:04}-{month:02}-{day:02}")
    }
}

impl fmt::Display for Moment {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let second = self.0.rem_euclid(DAY_S);
        write!(f, "{}T{:02}:{:02}:{:02}Z", self.day(), second / 3600, second / 60 % 60, second % 60)
    }
}

impl FromStr for Moment {
    type Err = NoMoment;

    fn from_str(text: &str) -> Result<Self, NoMoment> {
        parse(text.trim().as_bytes()).map(Self).ok_or_else(|| NoMoment(text.to_owned()))
    }
}

impl Serialize for Moment {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Moment {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = std::borrow::Cow::<'de, str>::deserialize(deserializer)?;
        text.parse().map_err(de::Error::custom)
    }
}

/// Days since 1970-01-01 of a date of the Gregorian calendar: years begin in March, so that the leap day is the last.
fn days(year: i64, month: i64, day: i64) -> i64 {
    let year = if month <= 2 { year - 1 } else { year };
    let of_year = (153 * ((month + 9) % 12) + 2) / 5 + day - 1;
    // 719 468 days from 0000-03-01 to 1970-01-01.
    365 * year + year.div_euclid(4) - year.div_euclid(100) + year.div_euclid(400) + of_year - 719_468
}

/// Year, month and day of a count of days since 1970-01-01.
fn civil(count: i64) -> (i64, i64, i64) {
    let days_from_march = count + 719_468;
    let era = days_from_march.div_euclid(146_097);
    let of_era = days_from_march.rem_euclid(146_097);
    let year_of_era = (of_era - of_era / 1460 + of_era / 36_524 - of_era / 146_096) / 365;
    let of_year = of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let month_from_march = (5 * of_year + 2) / 153;
    let month = if month_from_march < 10 { month_from_march + 3 } else { month_from_march - 9 };
    let year = year_of_era + 400 * era + i64::from(month <= 2);
    (year, month, of_year - (153 * month_from_march + 2) / 5 + 1)
}

/// Reads a date, or a date with a time; no time is midnight, no offset is UTC.
fn parse(text: &[u8]) -> Option<i64> {
    let date = text.get(..10)?;
    if date[4] != b'-' || date[7] != b'-' {
        return None;
    }
    let (year, month, day) = (number(&date[..4])?, number(&date[5..7])?, number(&date[8..])?);
    let count = days(year, month, day);
    // A day that the month does not have comes back as another one.
    if civil(count) != (year, month, day) {
        return None;
    }
    let rest = &text[10..];
    let Some((b'T' | b't' | b' ', clock)) = rest.split_first().map(|(first, clock)| (*first, clock)) else {
        return rest.is_empty().then_some(count * DAY_S);
    };
    let (second, offset) = time_of_day(clock)?;
    Some(count * DAY_S + second - offset_s(offset)?)
}

/// Seconds since midnight, and what stands behind the time. Parts of a second are read and left out.
fn time_of_day(clock: &[u8]) -> Option<(i64, &[u8])> {
    let (hour, minute) = (number(clock.get(..2)?)?, number(clock.get(3..5)?)?);
    if clock[2] != b':' {
        return None;
    }
    let mut rest = &clock[5..];
    let mut second = 0;
    if rest.first() == Some(&b':') {
        second = number(rest.get(1..3)?)?;
        rest = &rest[3..];
        if rest.first() == Some(&b'.') {
            let digits = rest[1..].iter().take_while(|byte| byte.is_ascii_digit()).count();
            rest = (digits > 0).then(|| &rest[1 + digits..])?;
        }
    }
    (hour < 24 && minute < 60 && second <= 60).then_some((3600 * hour + 60 * minute + second, rest))
}

fn offset_s(text: &[u8]) -> Option<i64> {
    match text {
        [] | [b'Z' | b'z'] => Some(0),
        [sign @ (b'+' | b'-'), hour @ .., b':', m1, m2] if hour.len() == 2 => {
            let (hour, minute) = (number(hour)?, number(&[*m1, *m2])?);
            let size = 3600 * hour + 60 * minute;
            (hour < 24 && minute < 60).then_some(if *sign == b'+' { size } else { -size })
        }
        _ => None,
    }
}

fn number(digits: &[u8]) -> Option<i64> {
    digits.iter().try_fold(0, |sum, digit| digit.is_ascii_digit().then(|| 10 * sum + i64::from(digit - b'0')))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn seconds(text: &str) -> Option<i64> {
        text.parse().ok().map(|moment: Moment| moment.0)
    }

    #[test]
    fn known_moments_have_their_known_counts() {
        // RFC 3339, 5.8, against the count that every Unix system gives for them.
        assert_eq!(seconds("1970-01-01"), Some(0));
        assert_eq!(seconds("1985-04-12T23:20:50.52Z"), Some(482_196_050));
        assert_eq!(seconds("1996-12-19T16:39:57-08:00"), Some(851_042_397));
        assert_eq!(seconds("2001-09-09 01:46:40"), Some(1_000_000_000));
        assert_eq!(seconds("2000-02-29T00:00Z"), Some(951_782_400));
    }

    #[test]
    fn every_day_of_eight_centuries_comes_back() {
        for count in -146_097..=146_097 {
            let (year, month, day) = civil(count);
            assert_eq!(days(year, month, day), count);
            let moment = Moment(count * DAY_S + 45_296);
            assert_eq!(moment.to_string().parse(), Ok(moment));
        }
    }

    #[test]
    fn what_is_no_date_is_refused() {
        for wrong in [
            "",
            "yesterday",
            "2026-02-30",
            "2026-13-01",
            "2026-11-30T25:00",
            "2026-11-30T10",
            "2026-11-30x",
            "2026-11-30T10:00+1",
            "2026-11-30T10:00:00.Z",
            "30.11.2026",
            "2026-11-30T10:00Zjunk",
            "２０２６-11-30",
        ] {
            assert_eq!(seconds(wrong), None, "{wrong}");
        }
    }
}
