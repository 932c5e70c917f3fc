//! Texts of records as numbers, angles and instants.

use super::{Field, Found, Subject};
use crate::ephemeris::tai_minus_utc_s;
use crate::time::{NightDate, Utc};
use crate::units::Angle;

/// TT − TAI in seconds (IAU 1991 resolution A4, recommendation IV).
const TT_MINUS_TAI_S: f64 = 32.184;

/// Julian date of the origin of modified Julian dates (FITS standard 4.0, §9.2.2).
const MJD_ORIGIN_JD: f64 = 2_400_000.5;

/// No single visit lasts longer, in seconds.
const LONGEST_EXPOSURE_S: f64 = 86_400.0;

/// Makes a record from the texts that a file holds; `text` gives a field's text, absent or empty
/// ones as `None`.
///
/// # Errors
/// Why it is no record, in words.
pub(super) fn record(
    origin: &str,
    text: impl Fn(Field) -> Option<String>,
) -> Result<Found, String> {
    let number = |field: Field| -> Result<Option<f64>, String> {
        text(field).map(|text| positive(field, &text)).transpose()
    };
    let name = text(Field::Target).unwrap_or_default();
    let place = match place(text(Field::Ra), text(Field::Dec)) {
        // A name is enough: what stands for the place need not be one then.
        Err(_) if !name.is_empty() => None,
        place => place?,
    };
    let subject = Subject { name, place };
    if subject.name.is_empty() && subject.place.is_none() {
        return Err("it names no target and gives no place".to_owned());
    }
    let exposure_s = number(Field::ExposureS)?.ok_or("it gives no length of exposure")?;
    if exposure_s > LONGEST_EXPOSURE_S {
        return Err(format!(
            "the exposure of {exposure_s} s is longer than a day: it must be in seconds"
        ));
    }
    Ok(Found {
        origin: origin.to_owned(),
        subject,
        mid: middle(&text, exposure_s)?,
        exposure_s,
        snr: number(Field::Snr)?,
        rv_error_m_s: number(Field::RvErrorMS)?,
        airmass: number(Field::Airmass)?,
        note: text(Field::Note).unwrap_or_default(),
    })
}

fn number(field: Field, text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.is_finite() => Ok(value),
        _ if text.contains(',') => Err(format!(
            "{}: '{text}' is no number: the decimal mark must be a point",
            field.name()
        )),
        _ => Err(format!("{}: '{text}' is no number", field.name())),
    }
}

fn positive(field: Field, text: &str) -> Result<f64, String> {
    match number(field, text)? {
        value if value > 0.0 => Ok(value),
        value => Err(format!("{}: {value} must be above 0", field.name())),
    }
}

/// The middle of the exposure in UTC, from whichever field tells it best.
fn middle(text: &impl Fn(Field) -> Option<String>, exposure_s: f64) -> Result<Utc, String> {
    let scale = scale(text(Field::TimeScale))?;
    let half_ms = (exposure_s * 500.0).round() as i64;
    let reading = if let Some(date) = text(Field::UtcMid) {
        civil(&date, None)?
    } else if let Some(date) = text(Field::MjdMid) {
        julian(Field::MjdMid, &date)?
    } else if let Some(date) = text(Field::JdMid) {
        julian(Field::JdMid, &date)?
    } else if let Some(date) = text(Field::UtcStart) {
        civil(&date, text(Field::TimeStart))?.plus_ms(half_ms)
    } else if let Some(date) = text(Field::MjdStart) {
        julian(Field::MjdStart, &date)?.plus_ms(half_ms)
    } else if let Some(date) = text(Field::JdStart) {
        julian(Field::JdStart, &date)?.plus_ms(half_ms)
    } else {
        return Err("it gives no date".to_owned());
    };
    Ok(scale.to_utc(reading))
}

/// A time scale in which records are kept.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Scale {
    Utc,
    Tai,
    /// TDB is taken as TT: they never differ by 2 ms, and records are kept to the millisecond.
    Tt,
}

impl Scale {
    /// The UTC instant whose reading in this scale is given as if it were UTC.
    fn to_utc(self, reading: Utc) -> Utc {
        let ahead_s = match self {
            Scale::Utc => return reading,
            Scale::Tai => 0.0,
            Scale::Tt => TT_MINUS_TAI_S,
        };
        // The offset is that at the instant sought; half a minute off, it is the same but within
        // that time of a leap second, where a second step settles it.
        let step = |at: Utc| {
            let behind_ms = ((tai_minus_utc_s(at) + ahead_s) * 1000.0).round() as i64;
            reading.plus_ms(-behind_ms)
        };
        step(step(reading))
    }
}

/// Names of scales in the FITS standard 4.0, table 30.
fn scale(text: Option<String>) -> Result<Scale, String> {
    let Some(text) = text else {
        return Ok(Scale::Utc);
    };
    match text.to_ascii_uppercase().as_str() {
        "UTC" | "UT" => Ok(Scale::Utc),
        "TAI" | "IAT" => Ok(Scale::Tai),
        "TT" | "TDT" | "ET" | "TDB" => Ok(Scale::Tt),
        _ => Err(format!(
            "its times are in the scale '{text}': UTC, TAI, TT and TDB are understood"
        )),
    }
}

/// A date and time. Without an offset it is in the scale of the record (UTC unless it says so).
fn civil(date: &str, time: Option<String>) -> Result<Utc, String> {
    let refuse = || format!("'{date}' is no date and time: write it like 2026-12-01T23:30:00Z");
    let joined = match time {
        Some(time) if !date.contains(['T', ' ', ':']) => format!("{date}T{time}"),
        _ => date.replacen(' ', "T", 1),
    };
    if NightDate::parse(&joined).is_ok() {
        return Err(format!("'{date}' gives the day alone, without the time"));
    }
    let has_offset = joined.ends_with(['Z', 'z'])
        || joined
            .rsplit_once('T')
            .is_some_and(|(_, time)| time.contains(['+', '-']));
    let full = if has_offset {
        joined
    } else {
        format!("{joined}Z")
    };
    Utc::parse(&full).map_err(|_| refuse())
}

fn julian(field: Field, text: &str) -> Result<Utc, String> {
    let value = number(field, text)?;
    let modified = matches!(field, Field::MjdMid | Field::MjdStart);
    // Years 1900 to 2200, as for nights.
    let sound = if modified {
        (15_000.0..125_000.0).contains(&value)
    } else {
        (2_415_000.0..2_525_000.0).contains(&value)
    };
    if !sound {
        return Err(format!("{}: {text} is no date of our time", field.name()));
    }
    let (origin, rest) = if modified {
        (MJD_ORIGIN_JD, value)
    } else {
        (value.floor(), value - value.floor())
    };
    Ok(Utc::from_julian_date(origin, rest))
}

/// A place from the texts of its two parts.
fn place(ra: Option<String>, dec: Option<String>) -> Result<Option<(Angle, Angle)>, String> {
    let (Some(ra), Some(dec)) = (ra, dec) else {
        return Ok(None);
    };
    let (ra_deg, dec_deg) = (
        sexagesimal(&ra)
            .map(|hours| hours * 15.0)
            .or_else(|| ra.parse().ok()),
        sexagesimal(&dec).or_else(|| dec.parse().ok()),
    );
    match (ra_deg, dec_deg) {
        (Some(ra), Some(dec)) if (0.0..=360.0).contains(&ra) && (-90.0..=90.0).contains(&dec) => {
            Ok(Some((Angle::from_deg(ra), Angle::from_deg(dec))))
        }
        _ => Err(format!(
            "'{ra}', '{dec}' is no right ascension and declination"
        )),
    }
}

/// Three parts with colons or spaces between, as one number; `None` for other texts.
fn sexagesimal(text: &str) -> Option<f64> {
    let parts: Vec<&str> = text.split([':', ' ']).filter(|p| !p.is_empty()).collect();
    let [whole, minutes, seconds] = parts[..] else {
        return None;
    };
    let minutes: f64 = minutes.parse().ok().filter(|m| (0.0..60.0).contains(m))?;
    let seconds: f64 = seconds.parse().ok().filter(|s| (0.0..60.0).contains(s))?;
    let size = whole.trim_start_matches(['+', '-']).parse::<f64>().ok()?;
    let value = size + minutes / 60.0 + seconds / 3600.0;
    Some(if whole.starts_with('-') {
        -value
    } else {
        value
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn mid(fields: &[(Field, &str)]) -> Result<String, String> {
        let text = |field: Field| {
            let found = fields.iter().find(|(f, _)| *f == field);
            found.map(|(_, text)| (*text).to_owned())
        };
        middle(&text, 600.0).map(|at| at.to_string())
    }

    #[test]
    fn reads_instants_in_every_form() {
        let check = |fields: &[(Field, &str)], expected: &str| {
            assert_eq!(mid(fields).as_deref(), Ok(expected), "{fields:?}");
        };
        let at = "2026-12-01T23:30:00.000Z";
        check(&[(Field::UtcMid, "2026-12-01T23:30:00Z")], at);
        check(&[(Field::UtcMid, "2026-12-01 23:30:00")], at);
        check(&[(Field::UtcMid, "2026-12-02T00:30:00+01:00")], at);
        check(&[(Field::UtcStart, "2026-12-01T23:25:00.000")], at);
        check(
            &[
                (Field::UtcStart, "2026-12-01"),
                (Field::TimeStart, "23:25:00"),
            ],
            at,
        );
        // MJD 61375.97916666… is 2026-12-01T23:30: MJD 51544.5 is J2000.0 (2000-01-01T12:00).
        check(&[(Field::MjdMid, "61375.979166666667")], at);
        check(&[(Field::JdMid, "2461376.479166666667")], at);
        check(&[(Field::MjdStart, "61375.975694444444")], at);
        // TAI − UTC = 37 s since 2017-01-01 (IERS Bulletin C 52), TT − TAI = 32.184 s.
        let tai = (Field::TimeScale, "TAI");
        check(&[(Field::UtcMid, "2026-12-01T23:30:37"), tai], at);
        let tt = (Field::TimeScale, "TT");
        check(&[(Field::UtcMid, "2026-12-01T23:31:09.184"), tt], at);
        // Just before that leap second the offset was 36 s.
        check(
            &[(Field::UtcMid, "2017-01-01T00:00:30"), tai],
            "2016-12-31T23:59:54.000Z",
        );
        check(
            &[(Field::UtcMid, "2017-01-01T00:00:37"), tai],
            "2017-01-01T00:00:00.000Z",
        );
    }

    #[test]
    fn refuses_what_is_no_instant() {
        for fields in [
            &[(Field::UtcStart, "2026-12-01")][..],
            &[(Field::UtcMid, "01/12/26")],
            &[(Field::UtcMid, "2026-13-01T00:00:00")],
            &[(Field::MjdMid, "2461376.4")],
            &[(Field::JdMid, "61375.9")],
            &[(Field::MjdMid, "61375,9")],
            &[
                (Field::UtcMid, "2026-12-01T23:30:00"),
                (Field::TimeScale, "GPS"),
            ],
            &[],
        ] {
            assert!(mid(fields).is_err(), "{fields:?}");
        }
    }

    #[test]
    fn reads_places_in_degrees_and_in_sexagesimal() {
        let check = |ra: &str, dec: &str, expected: (f64, f64)| {
            let place = place(Some(ra.to_owned()), Some(dec.to_owned())).unwrap();
            let (ra, dec) = place.unwrap();
            assert!((ra.deg() - expected.0).abs() < 1e-9, "{ra:?}");
            assert!((dec.deg() - expected.1).abs() < 1e-9, "{dec:?}");
        };
        check("150.25", "-0.5", (150.25, -0.5));
        check("10:01:00.0", "-00:30:00", (150.25, -0.5));
        check("10 01 00", "+12 30 00", (150.25, 12.5));
        for (ra, dec) in [("10:61:00", "0"), ("370", "0"), ("0", "-91"), ("ten", "0")] {
            assert!(
                place(Some(ra.to_owned()), Some(dec.to_owned())).is_err(),
                "{ra}"
            );
        }
    }
}
