//! From what a feed or a file gives to a weather sample: units, differences, plausible ranges.

use std::collections::BTreeMap;

use chrono::{DateTime, NaiveDateTime};
use thiserror::Error;

use super::feed::{MappedKind, MappedValue, TimeFormat};
use crate::time::Utc;
use crate::units::Angle;
use crate::weather::{Quantity, WeatherSample};

/// Temperatures of air, dew and sky that a working sensor can give, °C (common practice, no source:
/// generous, so that only sentinels such as −9999 and broken units fall outside). They are checked
/// here because only their differences go further.
const TEMPERATURE_C: (f64, f64) = (-200.0, 80.0);
/// Azimuths are written from −180 or from 0.
const AZIMUTH_DEG: (f64, f64) = (-180.0, 360.0);

/// A value that cannot be.
#[derive(Clone, Debug, PartialEq, Error)]
#[error("{what} = {value} {unit}, which cannot be")]
pub struct Implausible {
    /// Of what.
    pub what: &'static str,
    /// The value in `unit`.
    pub value: f64,
    /// Its unit.
    pub unit: &'static str,
}

/// Values as they come in, on their way to a sample.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Readings {
    values: BTreeMap<Quantity, f64>,
    air_c: Option<f64>,
    dew_point_c: Option<f64>,
    sky_c: Option<f64>,
    wind_from: Option<Angle>,
}

impl Readings {
    /// Takes a value in as it is written, in the unit of its mapping.
    ///
    /// # Errors
    /// [`Implausible`] for a temperature or an azimuth that cannot be. Quantities that have rules
    /// are judged with them, not here.
    pub fn take(&mut self, mapped: &MappedValue, written: f64) -> Result<(), Implausible> {
        self.set(mapped.kind, mapped.to_standard(written))
    }

    /// Takes a value in, in the standard unit of its kind.
    ///
    /// # Errors
    /// As [`Readings::take`].
    pub fn set(&mut self, kind: MappedKind, value: f64) -> Result<(), Implausible> {
        match kind {
            MappedKind::Quantity(quantity) => {
                self.values.insert(quantity, value);
            }
            MappedKind::AirTemperature => {
                self.air_c = Some(temperature("the air temperature", value)?);
            }
            MappedKind::DewPoint => {
                self.dew_point_c = Some(temperature("the dew point", value)?);
            }
            MappedKind::SkyTemperature => {
                self.sky_c = Some(temperature("the sky temperature", value)?);
            }
            MappedKind::WindFrom => {
                let degrees = within("the wind's direction", value, AZIMUTH_DEG, "deg")?;
                self.wind_from = Some(Angle::from_deg(degrees.rem_euclid(360.0)));
            }
        }
        Ok(())
    }

    /// The sample. Differences of temperatures that were not given are made where both are there.
    pub fn sample(mut self, at: Utc, safe: Option<bool>) -> WeatherSample {
        let differences = [
            (Quantity::DewPointSpreadK, self.air_c, self.dew_point_c),
            (Quantity::SkyMinusAirK, self.sky_c, self.air_c),
        ];
        for (quantity, minuend, subtrahend) in differences {
            if let Some((minuend, subtrahend)) = minuend.zip(subtrahend) {
                self.values.entry(quantity).or_insert(minuend - subtrahend);
            }
        }
        WeatherSample {
            at,
            values: self.values,
            wind_from: self.wind_from,
            safe,
        }
    }
}

fn temperature(what: &'static str, value: f64) -> Result<f64, Implausible> {
    within(what, value, TEMPERATURE_C, "degC")
}

/// NaN is within nothing.
fn within(
    what: &'static str,
    value: f64,
    (least, greatest): (f64, f64),
    unit: &'static str,
) -> Result<f64, Implausible> {
    if (least..=greatest).contains(&value) {
        Ok(value)
    } else {
        Err(Implausible { what, value, unit })
    }
}

/// Years from 1900 to 2200: what lies outside is a broken clock or the wrong unit.
const UNIX_S: (f64, f64) = (-2_208_988_800.0, 7_258_118_400.0);

impl TimeFormat {
    /// The instant that a text means; `None` when it is not written in this way.
    pub fn read(&self, text: &str) -> Option<Utc> {
        let text = text.trim();
        match self {
            TimeFormat::Rfc3339 => sane(Utc::parse(text).ok()?.unix_ms() as f64 / 1000.0),
            TimeFormat::UnixSeconds | TimeFormat::UnixMilliseconds => {
                self.read_number(text.parse().ok()?)
            }
            TimeFormat::Pattern(pattern) => by_pattern(text, pattern),
        }
    }

    /// The instant that a number means; `None` when instants are not written as numbers.
    pub fn read_number(&self, number: f64) -> Option<Utc> {
        match self {
            TimeFormat::UnixSeconds => sane(number),
            TimeFormat::UnixMilliseconds => sane(number / 1000.0),
            TimeFormat::Rfc3339 | TimeFormat::Pattern(_) => None,
        }
    }
}

/// A pattern with an offset of its own (`%z`) is taken at its word, any other as UTC.
fn by_pattern(text: &str, pattern: &str) -> Option<Utc> {
    let unix_ms = match DateTime::parse_from_str(text, pattern) {
        Ok(at) => at.timestamp_millis(),
        Err(_) => NaiveDateTime::parse_from_str(text, pattern)
            .ok()?
            .and_utc()
            .timestamp_millis(),
    };
    sane(unix_ms as f64 / 1000.0)
}

fn sane(unix_s: f64) -> Option<Utc> {
    let (least, greatest) = UNIX_S;
    (least..greatest)
        .contains(&unix_s)
        .then(|| Utc::from_unix_ms((unix_s * 1000.0).round() as i64))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn mapped(kind: MappedKind, factor: f64, offset: f64) -> MappedValue {
        MappedValue {
            kind,
            from: String::new(),
            factor,
            offset,
        }
    }

    #[test]
    fn differences_are_made_from_temperatures_in_any_unit() {
        let mut readings = Readings::default();
        // 50 °F is 10 °C, 276.15 K is 3 °C.
        let air = mapped(MappedKind::AirTemperature, 5.0 / 9.0, -160.0 / 9.0);
        let dew = mapped(MappedKind::DewPoint, 1.0, -273.15);
        readings.take(&air, 50.0).unwrap();
        readings.take(&dew, 276.15).unwrap();
        readings.set(MappedKind::SkyTemperature, -15.0).unwrap();
        let sample = readings.sample(Utc::from_unix_ms(0), None);
        assert!((sample.values[&Quantity::DewPointSpreadK] - 7.0).abs() < 1e-9);
        assert!((sample.values[&Quantity::SkyMinusAirK] + 25.0).abs() < 1e-9);
    }

    #[test]
    fn a_difference_that_was_measured_wins_over_one_that_is_made() {
        let mut readings = Readings::default();
        readings.set(MappedKind::AirTemperature, 10.0).unwrap();
        readings.set(MappedKind::DewPoint, 3.0).unwrap();
        let spread = MappedKind::Quantity(Quantity::DewPointSpreadK);
        readings.set(spread, 6.5).unwrap();
        let sample = readings.sample(Utc::from_unix_ms(0), Some(true));
        assert_eq!(sample.values[&Quantity::DewPointSpreadK], 6.5);
    }

    #[test]
    fn sentinels_do_not_pass_as_temperatures_or_azimuths() {
        for kind in [
            MappedKind::AirTemperature,
            MappedKind::DewPoint,
            MappedKind::SkyTemperature,
            MappedKind::WindFrom,
        ] {
            for value in [-9999.0, 6999.0, f64::NAN, f64::INFINITY] {
                assert!(Readings::default().set(kind, value).is_err(), "{kind:?}");
            }
        }
        let mut readings = Readings::default();
        readings.set(MappedKind::WindFrom, -90.0).unwrap();
        let sample = readings.sample(Utc::from_unix_ms(0), None);
        assert!((sample.wind_from.unwrap().deg() - 270.0).abs() < 1e-9);
    }

    #[test]
    fn instants_are_read_in_their_format_alone() {
        let pattern = |text: &str| TimeFormat::Pattern(text.to_owned());
        let check = |format: &TimeFormat, text: &str, written: Option<&str>| {
            let read = format.read(text).map(|at| at.to_string());
            assert_eq!(read.as_deref(), written, "{format:?} {text}");
        };
        let evening = Some("2026-12-01T23:30:00.000Z");
        check(&TimeFormat::Rfc3339, "2026-12-02T00:30:00+01:00", evening);
        check(&TimeFormat::UnixSeconds, "1796167800", evening);
        check(&TimeFormat::UnixMilliseconds, "1796167800000", evening);
        check(&pattern("%Y-%m-%d %H:%M"), "2026-12-01 23:30", evening);
        check(
            &pattern("%d.%m.%Y %H:%M %z"),
            "02.12.2026 00:30 +0100",
            evening,
        );
        // Seconds where milliseconds are meant, and the reverse of it.
        check(&TimeFormat::UnixSeconds, "1796167800000", None);
        check(&TimeFormat::Rfc3339, "1796167800", None);
        check(&TimeFormat::Rfc3339, "2026-12-01T23:30:00", None);
        check(&TimeFormat::UnixSeconds, "NaN", None);
        check(&pattern("%Y-%m-%d %H:%M"), "2026-13-01 23:30", None);
    }
}
