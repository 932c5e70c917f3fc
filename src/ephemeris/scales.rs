//! Time scales that count every second: TAI, TT, TDB.
//!
//! TAI − UTC comes from the leap-second table of the ERFA routines, whose last entry is
//! 2016-12-31. Outside what it knows the choice is fixed and said here: instants before 1960,
//! when UTC was not yet defined, take TAI − UTC = 0; instants after the last entry keep its 37 s,
//! since leap seconds cannot be predicted.

use std::fmt;

use chrono::{DateTime, Datelike, Days, NaiveDate, Timelike};
use sofars::ts::dat;
use thiserror::Error;

use crate::time::{DAY_MS, Utc, UtcError};

/// Seconds in a day.
pub(crate) const DAY_S: f64 = 86_400.0;
/// TT − TAI in seconds (IAU 1991 resolution A4, recommendation IV).
const TT_MINUS_TAI_S: f64 = 32.184;
/// Julian date of the standard epoch J2000.0.
pub(crate) const J2000_JD: f64 = 2_451_545.0;
/// Days in a Julian century's hundredth part, the Julian year.
pub(crate) const JULIAN_YEAR_DAYS: f64 = 365.25;

/// A Julian date in two parts, so that microseconds survive.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct JulianDate {
    /// The greater part, usually a midnight (…​.5).
    pub day: f64,
    /// The rest in days.
    pub fraction: f64,
}

impl JulianDate {
    /// This date moved by so many seconds.
    pub fn plus_s(self, seconds: f64) -> Self {
        JulianDate {
            day: self.day,
            fraction: self.fraction + seconds / DAY_S,
        }
    }

    /// Days from another date to this one.
    pub fn days_since(self, earlier: JulianDate) -> f64 {
        (self.day - earlier.day) + (self.fraction - earlier.fraction)
    }

    /// As one number, good to about 40 µs.
    pub fn single(self) -> f64 {
        self.day + self.fraction
    }

    /// Julian years since J2000.0.
    pub(crate) fn julian_years(self) -> f64 {
        ((self.day - J2000_JD) + self.fraction) / JULIAN_YEAR_DAYS
    }
}

/// With ten decimals (9 µs), or as many as the precision asked for up to 15: no digit is lost to
/// the size of the whole part.
impl fmt::Display for JulianDate {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let decimals = f.precision().unwrap_or(10).min(15);
        let scale = 10f64.powi(decimals as i32);
        let whole = self.day.floor();
        let rest = (self.day - whole) + self.fraction;
        let mut units = (rest - rest.floor()) * scale;
        let mut day = whole + rest.floor();
        units = units.round();
        if units >= scale {
            units -= scale;
            day += 1.0;
        }
        if decimals == 0 {
            return write!(f, "{day:.0}");
        }
        write!(f, "{day:.0}.{units:0decimals$.0}")
    }
}

/// An instant in International Atomic Time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tai(pub JulianDate);

/// An instant in Terrestrial Time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tt(pub JulianDate);

/// An instant in Barycentric Dynamical Time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tdb(pub JulianDate);

/// Why a text names no instant in the scales that count leap seconds.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum LeapSecondError {
    /// Not of the form asked for.
    #[error(transparent)]
    NotAnInstant(#[from] UtcError),
    /// Second 60 at the end of a minute that has none.
    #[error("'{found}' names a leap second, but none was inserted there: seconds run to 59")]
    NoLeapSecond {
        /// The text found.
        found: String,
    },
}

impl Tai {
    /// The instant of a UTC reading. A UTC instant has no reading of its own within a leap second
    /// (see [`Utc`]); [`Tai::parse_utc`] reads one.
    pub fn from_utc(utc: Utc) -> Self {
        let (day, fraction) = utc.julian_date();
        Tai(JulianDate { day, fraction }.plus_s(tai_minus_utc_s(utc)))
    }

    /// Reads RFC 3339 like [`Utc::parse`], and `23:59:60.x` of a day that ends with a leap second
    /// as the instant that it is.
    ///
    /// # Errors
    /// [`LeapSecondError`] where the text is no instant, or second 60 stands where none was
    /// inserted.
    pub fn parse_utc(text: &str) -> Result<Self, LeapSecondError> {
        const SECOND_NS: u32 = 1_000_000_000;
        let utc = Utc::parse(text)?;
        let Ok(civil) = DateTime::parse_from_rfc3339(text.trim()).map(|at| at.to_utc()) else {
            return Ok(Tai::from_utc(utc));
        };
        if civil.nanosecond() < SECOND_NS {
            return Ok(Tai::from_utc(utc));
        }
        let date = civil.date_naive();
        let before = tai_minus_utc_at_s(date, 0.0);
        let after = date
            .checked_add_days(Days::new(1))
            .map_or(before, |next| tai_minus_utc_at_s(next, 0.0));
        let last_second = civil.num_seconds_from_midnight() == 86_399;
        if !last_second || (after - before - 1.0).abs() > 1e-9 {
            return Err(LeapSecondError::NoLeapSecond {
                found: text.to_owned(),
            });
        }
        // The POSIX reading of second 60 is second 0 of the next day; that day's offset is one
        // second too large for it.
        let (day, fraction) = utc.julian_date();
        Ok(Tai(JulianDate { day, fraction }.plus_s(before)))
    }

    /// The same instant in Terrestrial Time.
    pub fn tt(self) -> Tt {
        Tt(self.0.plus_s(TT_MINUS_TAI_S))
    }
}

impl Tt {
    /// The instant of a UTC reading.
    pub fn from_utc(utc: Utc) -> Self {
        Tai::from_utc(utc).tt()
    }

    /// The same instant in TDB as seen from the centre of the Earth (Fairhead & Bretagnon 1990,
    /// A&A 229, 240). Seen from the ground it differs by up to 2.1 µs; see
    /// [`crate::ephemeris::SkyInstant::tdb`].
    pub fn tdb_geocentre(self) -> Tdb {
        let shift = sofars::ts::dtdb(self.0.day, self.0.fraction, 0.0, 0.0, 0.0, 0.0);
        Tdb(self.0.plus_s(shift))
    }
}

/// TAI − UTC in seconds at a UTC instant; see the head of this file for its bounds.
pub fn tai_minus_utc_s(utc: Utc) -> f64 {
    let days = utc.unix_ms().div_euclid(DAY_MS);
    let fraction = utc.unix_ms().rem_euclid(DAY_MS) as f64 / DAY_MS as f64;
    let date = i32::try_from(days)
        .ok()
        .and_then(NaiveDate::from_epoch_days);
    date.map_or(0.0, |date| tai_minus_utc_at_s(date, fraction))
}

fn tai_minus_utc_at_s(date: NaiveDate, fraction: f64) -> f64 {
    // The routine refuses only dates that are none, and a calendar date is one.
    dat(
        date.year(),
        date.month() as i32,
        date.day() as i32,
        fraction,
    )
    .unwrap_or(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn knows_the_leap_seconds() {
        // IERS Bulletin C 52 (2016) and C 49 (2015); 10 s at 1972-01-01 (CCIR 460).
        let check = |text: &str, expected: f64| {
            assert_eq!(
                tai_minus_utc_s(Utc::parse(text).unwrap()),
                expected,
                "{text}"
            );
        };
        check("1972-01-01T00:00:00Z", 10.0);
        check("2015-06-30T23:59:59.999Z", 35.0);
        check("2015-07-01T00:00:00Z", 36.0);
        check("2016-12-31T23:59:59.999Z", 36.0);
        check("2017-01-01T00:00:00Z", 37.0);
        check("2199-12-31T00:00:00Z", 37.0);
        check("1959-12-31T00:00:00Z", 0.0);
    }

    #[test]
    fn reads_second_sixty_only_where_there_was_one() {
        let leap = Tai::parse_utc("2016-12-31T23:59:60.500Z").unwrap();
        let after = Tai::parse_utc("2017-01-01T00:00:00.500Z").unwrap();
        let before = Tai::parse_utc("2016-12-31T23:59:59.500Z").unwrap();
        assert!((after.0.days_since(leap.0) * DAY_S - 1.0).abs() < 1e-9);
        assert!((leap.0.days_since(before.0) * DAY_S - 1.0).abs() < 1e-9);
        for wrong in ["2016-12-30T23:59:60Z", "2016-12-31T12:00:60Z"] {
            assert!(
                matches!(
                    Tai::parse_utc(wrong),
                    Err(LeapSecondError::NoLeapSecond { .. })
                ),
                "{wrong}"
            );
        }
        assert!(Tai::parse_utc("tomorrow").is_err());
    }

    #[test]
    fn writes_all_digits() {
        let check = |day: f64, fraction: f64, written: &str| {
            assert_eq!(JulianDate { day, fraction }.to_string(), written);
        };
        check(2_460_488.5, 0.067_351_847_84, "2460488.5673518478");
        check(2_460_488.5, 0.499_999_999_999, "2460489.0000000000");
        check(2_460_488.5, -0.75, "2460487.7500000000");
        let date = JulianDate {
            day: 2_460_488.5,
            fraction: 0.25,
        };
        assert_eq!(format!("{date:.3}"), "2460488.750");
        assert_eq!(format!("{date:.0}"), "2460489");
    }
}
