//! The night of a site: from local mean solar noon to the next.

use std::fmt;

use chrono::{Days, NaiveDate};
use thiserror::Error;

use super::{DAY_MS, Span, Utc};
use crate::units::Angle;

/// The calendar date of a night's evening at the site, in local mean solar time. It names the
/// night whatever the UTC date is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct NightDate(NaiveDate);

/// Why a text is no date of a night.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("'{found}' is no date of a night: write it like 2026-12-01")]
pub struct NightDateError {
    /// The text found.
    pub found: String,
}

impl NightDate {
    /// Reads `YYYY-MM-DD`; years 1900 to 2200, for which time scales are known well enough.
    ///
    /// # Errors
    /// [`NightDateError`] with the text.
    pub fn parse(text: &str) -> Result<Self, NightDateError> {
        let refuse = || NightDateError {
            found: text.to_owned(),
        };
        let date = NaiveDate::parse_from_str(text.trim(), "%Y-%m-%d").map_err(|_| refuse())?;
        let year = chrono::Datelike::year(&date);
        if (1900..=2200).contains(&year) {
            Ok(NightDate(date))
        } else {
            Err(refuse())
        }
    }

    /// The night so many nights later (or earlier, when negative).
    pub fn plus_nights(self, nights: i64) -> Self {
        let moved = if nights >= 0 {
            self.0.checked_add_days(Days::new(nights.unsigned_abs()))
        } else {
            self.0.checked_sub_days(Days::new(nights.unsigned_abs()))
        };
        NightDate(moved.unwrap_or(self.0))
    }

    /// Nights from `earlier` to this one.
    pub fn nights_since(self, earlier: NightDate) -> i64 {
        (self.0 - earlier.0).num_days()
    }

    /// The calendar date.
    pub fn date(self) -> NaiveDate {
        self.0
    }

    /// The night that the instant belongs to at this east longitude.
    pub fn at(instant: Utc, longitude: Angle) -> Self {
        let solar_ms = instant.unix_ms() + solar_offset_ms(longitude);
        let days = (solar_ms - DAY_MS / 2).div_euclid(DAY_MS);
        let epoch = NightDate(NaiveDate::default());
        epoch.plus_nights(days)
    }
}

impl fmt::Display for NightDate {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.0.format("%Y-%m-%d"))
    }
}

/// Local mean solar time minus UTC. Whole milliseconds: the split of a night needs no more.
fn solar_offset_ms(longitude: Angle) -> i64 {
    (longitude.wrapped_signed().deg() / 360.0 * DAY_MS as f64).round() as i64
}

/// A night with its bounds: local mean solar noon (12h UTC − longitude/15) to the next.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Night {
    /// The date of its evening.
    pub date: NightDate,
    /// Noon to noon.
    pub span: Span,
}

impl Night {
    /// The night of that date at this east longitude.
    pub fn of(date: NightDate, longitude: Angle) -> Self {
        let days = date.nights_since(NightDate(NaiveDate::default()));
        let noon_ms = days * DAY_MS + DAY_MS / 2 - solar_offset_ms(longitude);
        let start = Utc::from_unix_ms(noon_ms);
        Night {
            date,
            span: Span::new(start, start.plus_ms(DAY_MS)),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn night_starts_at_local_mean_solar_noon() {
        // The window of `basin_n` (longitude −116.3°) in tests/reference/sun_events.csv.
        let date = NightDate::parse("2024-01-02").unwrap();
        let night = Night::of(date, Angle::from_deg(-116.3));
        assert_eq!(night.span.start.to_string(), "2024-01-02T19:45:12.000Z");
        assert_eq!(night.span.length_ms(), DAY_MS);
    }

    #[test]
    fn every_instant_belongs_to_the_night_that_holds_it() {
        for longitude_deg in [-180.0, -116.3, 0.0, 66.9, 179.99] {
            let longitude = Angle::from_deg(longitude_deg);
            let night = Night::of(NightDate::parse("2026-12-31").unwrap(), longitude);
            for at in [night.span.start, night.span.end.plus_ms(-1)] {
                assert_eq!(NightDate::at(at, longitude), night.date, "{longitude_deg}");
            }
            assert_eq!(
                NightDate::at(night.span.end, longitude),
                night.date.plus_nights(1)
            );
        }
    }

    #[test]
    fn refuses_what_is_no_date() {
        for text in ["2026-02-30", "tomorrow", "1500-01-01", ""] {
            assert!(NightDate::parse(text).is_err(), "{text}");
        }
    }
}
