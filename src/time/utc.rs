//! Civil time at the edge, and the clock that never steps.

use std::fmt;
use std::ops::{Add, Sub};

use chrono::{DateTime, SecondsFormat, TimeDelta};
use thiserror::Error;

/// An instant in UTC, as POSIX milliseconds (every day has 86 400 000 of them).
///
/// A leap second has no instant of its own here: `23:59:60.x` reads as the same instant as
/// `00:00:00.x` of the next day. Differences across a leap second are therefore one second short;
/// none has been inserted since 2017-01-01. Time scales that count it (TAI, TT, TDB) are made in
/// the ephemeris.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Utc(i64);

/// Why a text is no instant.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("'{found}' is no UTC instant: write it like 2026-12-01T23:30:00Z")]
pub struct UtcError {
    /// The text found.
    pub found: String,
}

impl Utc {
    /// From POSIX milliseconds.
    pub const fn from_unix_ms(ms: i64) -> Self {
        Utc(ms)
    }

    /// POSIX milliseconds.
    pub const fn unix_ms(self) -> i64 {
        self.0
    }

    /// Reads RFC 3339 (`2026-12-01T23:30:00Z`; an offset is taken into account, and a text
    /// without any is refused, since local time may have been meant).
    ///
    /// # Errors
    /// [`UtcError`] with the text, when it is not of that form.
    pub fn parse(text: &str) -> Result<Self, UtcError> {
        let refuse = || UtcError {
            found: text.to_owned(),
        };
        let parsed = DateTime::parse_from_rfc3339(text.trim()).map_err(|_| refuse())?;
        Ok(Utc(parsed.timestamp_millis()))
    }

    /// This instant moved by so many milliseconds.
    pub const fn plus_ms(self, ms: i64) -> Self {
        Utc(self.0.saturating_add(ms))
    }

    /// Julian date in UTC as a whole part (…​.5) and the fraction of the day.
    pub fn julian_date(self) -> (f64, f64) {
        let day = self.0.div_euclid(super::DAY_MS);
        let in_day = self.0.rem_euclid(super::DAY_MS);
        (
            super::UNIX_EPOCH_JD + day as f64,
            in_day as f64 / super::DAY_MS as f64,
        )
    }

    /// From a Julian date in UTC, rounded to the millisecond.
    pub fn from_julian_date(whole: f64, fraction: f64) -> Self {
        let days = (whole - super::UNIX_EPOCH_JD) + fraction;
        Utc((days * super::DAY_MS as f64).round() as i64)
    }
}

impl Add<TimeDelta> for Utc {
    type Output = Utc;
    fn add(self, delta: TimeDelta) -> Utc {
        self.plus_ms(delta.num_milliseconds())
    }
}

/// Milliseconds between two instants.
impl Sub for Utc {
    type Output = i64;
    fn sub(self, earlier: Utc) -> i64 {
        self.0 - earlier.0
    }
}

/// RFC 3339 with milliseconds and `Z`.
impl fmt::Display for Utc {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match DateTime::from_timestamp_millis(self.0) {
            Some(at) => f.write_str(&at.to_rfc3339_opts(SecondsFormat::Millis, true)),
            None => write!(f, "{} ms", self.0),
        }
    }
}

/// Milliseconds on a clock that never steps, from an arbitrary start. Deadlines are kept on it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub struct MonotonicMs(pub i64);

impl MonotonicMs {
    /// This reading moved by so many milliseconds.
    pub const fn plus_ms(self, ms: i64) -> Self {
        MonotonicMs(self.0.saturating_add(ms))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_and_writes_rfc3339() {
        let check = |text: &str, written: &str| {
            assert_eq!(Utc::parse(text).unwrap().to_string(), written);
        };
        check("2026-12-01T23:30:00Z", "2026-12-01T23:30:00.000Z");
        check("2026-12-01T23:30:00.0625+01:00", "2026-12-01T22:30:00.062Z");
        check("2016-12-31T23:59:60.500Z", "2017-01-01T00:00:00.500Z");
        assert!(Utc::parse("2026-12-01T23:30:00").is_err());
        assert!(Utc::parse("yesterday").is_err());
    }

    #[test]
    fn julian_date_of_the_standard_epoch() {
        // J2000.0 is JD 2451545.0 (IAU 1994 resolution C7), here as a UTC reading.
        let (whole, fraction) = Utc::parse("2000-01-01T12:00:00Z").unwrap().julian_date();
        assert_eq!(whole + fraction, 2_451_545.0);
        assert_eq!(
            Utc::from_julian_date(whole, fraction).unix_ms(),
            946_728_000_000
        );
    }
}
