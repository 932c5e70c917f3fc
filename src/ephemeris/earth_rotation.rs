//! How the Earth turns: UT1 − UTC and the motion of the pole, as the IERS publishes them.

use std::sync::Arc;

use thiserror::Error;

use super::scales::tai_minus_utc_s;
use crate::time::{DAY_MS, Span, Utc};
use crate::units::Angle;

/// Modified Julian date of the Unix epoch.
const UNIX_EPOCH_MJD: i64 = 40_587;

/// Where values of the Earth's rotation come from, best first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum RotationQuality {
    /// Measured (flag `I` of the IERS file), or given by the caller.
    Measured,
    /// Predicted by the IERS (flag `P`).
    Predicted,
    /// The last row of the file, held after its end.
    Held,
    /// No value: UT1 is taken as UTC and the pole as still. The sky is then off by up to 13″
    /// of hour angle and 0.6″ otherwise.
    Absent,
}

/// Earth orientation at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EarthOrientation {
    /// UT1 − UTC in seconds.
    pub ut1_minus_utc_s: f64,
    /// Pole coordinate x.
    pub pole_x: Angle,
    /// Pole coordinate y.
    pub pole_y: Angle,
    /// Where the values come from.
    pub quality: RotationQuality,
}

impl EarthOrientation {
    const UNKNOWN: EarthOrientation = EarthOrientation {
        ut1_minus_utc_s: 0.0,
        pole_x: Angle::ZERO,
        pole_y: Angle::ZERO,
        quality: RotationQuality::Absent,
    };
}

/// Why an Earth-rotation file cannot be used.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum EarthRotationError {
    /// A line is too short to hold a row.
    #[error("line {line}: {length} characters are no finals2000A row (68 at least)")]
    ShortLine {
        /// Line, from 1.
        line: usize,
        /// Its length.
        length: usize,
    },
    /// A field holds no number, or an impossible one.
    #[error(
        "line {line}: '{found}' in columns {first}-{last} is no {field}; take the file from \
             the IERS anew, as finals2000A text"
    )]
    BadField {
        /// Line, from 1.
        line: usize,
        /// What should stand there.
        field: &'static str,
        /// First column, from 1.
        first: usize,
        /// Last column.
        last: usize,
        /// What stands there.
        found: String,
    },
    /// A day is missing, repeated or out of order.
    #[error("line {line}: day {found} (MJD) follows {previous}; rows must be one day apart")]
    DayOutOfOrder {
        /// Line, from 1.
        line: usize,
        /// The day found.
        found: i64,
        /// The day before it in the file.
        previous: i64,
    },
    /// No row with values.
    #[error("no row with UT1-UTC; give an IERS finals2000A file")]
    Empty,
}

#[derive(Clone, Copy, Debug, PartialEq)]
struct Row {
    /// UT1 − TAI: unlike UT1 − UTC it does not jump at a leap second.
    ut1_minus_tai_s: f64,
    pole_x_arcsec: f64,
    pole_y_arcsec: f64,
    predicted: bool,
}

#[derive(Clone, Debug, PartialEq)]
enum Source {
    Absent,
    Given(EarthOrientation),
    Table { first_mjd: i64, rows: Arc<[Row]> },
}

/// The Earth's rotation through time. Cheap to copy about.
#[derive(Clone, Debug, PartialEq)]
pub struct EarthRotation(Source);

impl EarthRotation {
    /// Nothing known: every query answers [`RotationQuality::Absent`].
    pub fn absent() -> Self {
        EarthRotation(Source::Absent)
    }

    /// The same orientation at all times.
    pub fn constant(orientation: EarthOrientation) -> Self {
        EarthRotation(Source::Given(orientation))
    }

    /// Reads the text of an IERS `finals2000A` file (Bulletin A columns; format in the IERS
    /// `readme.finals2000A`). Rows after the last prediction, which hold a date alone, are left
    /// out.
    ///
    /// # Errors
    /// [`EarthRotationError`] with the line, for the first thing wrong.
    pub fn from_finals2000a(text: &str) -> Result<Self, EarthRotationError> {
        let mut first_mjd = 0;
        let mut rows: Vec<Row> = Vec::new();
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        for (index, content) in text.lines().enumerate() {
            let line = Line {
                number: index + 1,
                content,
            };
            if content.trim().is_empty() {
                continue;
            }
            let mjd = line.mjd()?;
            let Some(row) = line.row(mjd)? else {
                break;
            };
            if rows.is_empty() {
                first_mjd = mjd;
            }
            let expected = first_mjd + rows.len() as i64;
            if mjd != expected {
                return Err(EarthRotationError::DayOutOfOrder {
                    line: line.number,
                    found: mjd,
                    previous: expected - 1,
                });
            }
            rows.push(row);
        }
        if rows.is_empty() {
            return Err(EarthRotationError::Empty);
        }
        Ok(EarthRotation(Source::Table {
            first_mjd,
            rows: rows.into(),
        }))
    }

    /// Orientation at an instant, straight lines between the daily rows (0h UTC). Before the first
    /// row nothing is known; after the last its values are held.
    pub fn at(&self, utc: Utc) -> EarthOrientation {
        match &self.0 {
            Source::Absent => EarthOrientation::UNKNOWN,
            Source::Given(orientation) => *orientation,
            Source::Table { first_mjd, rows } => from_table(*first_mjd, rows, utc),
        }
    }

    /// The worst quality within a span (its end included): what to tell the user.
    pub fn quality_over(&self, span: Span) -> RotationQuality {
        // Quality only ever falls from the first row on, and is absent before it.
        self.at(span.start).quality.max(self.at(span.end).quality)
    }

    /// The instants between which the file has rows, measured or predicted; `None` without a file.
    pub fn known_span(&self) -> Option<Span> {
        let Source::Table { first_mjd, rows } = &self.0 else {
            return None;
        };
        let at = |mjd: i64| Utc::from_unix_ms((mjd - UNIX_EPOCH_MJD) * DAY_MS);
        Some(Span::new(
            at(*first_mjd),
            at(first_mjd + rows.len() as i64 - 1),
        ))
    }
}

fn from_table(first_mjd: i64, rows: &[Row], utc: Utc) -> EarthOrientation {
    let since_first_ms = utc.unix_ms() - (first_mjd - UNIX_EPOCH_MJD) * DAY_MS;
    let Ok(index) = usize::try_from(since_first_ms.div_euclid(DAY_MS)) else {
        return EarthOrientation::UNKNOWN;
    };
    let fraction = since_first_ms.rem_euclid(DAY_MS) as f64 / DAY_MS as f64;
    let (row, quality) = match (rows.get(index), rows.get(index + 1)) {
        (Some(before), Some(after)) => {
            let quality = if before.predicted || after.predicted {
                RotationQuality::Predicted
            } else {
                RotationQuality::Measured
            };
            (between(before, after, fraction), quality)
        }
        (Some(last), None) if fraction == 0.0 => {
            let quality = if last.predicted {
                RotationQuality::Predicted
            } else {
                RotationQuality::Measured
            };
            (*last, quality)
        }
        _ => match rows.last() {
            Some(last) => (*last, RotationQuality::Held),
            None => return EarthOrientation::UNKNOWN,
        },
    };
    EarthOrientation {
        ut1_minus_utc_s: row.ut1_minus_tai_s + tai_minus_utc_s(utc),
        pole_x: Angle::from_arcsec(row.pole_x_arcsec),
        pole_y: Angle::from_arcsec(row.pole_y_arcsec),
        quality,
    }
}

fn between(before: &Row, after: &Row, fraction: f64) -> Row {
    let line = |a: f64, b: f64| a + (b - a) * fraction;
    Row {
        ut1_minus_tai_s: line(before.ut1_minus_tai_s, after.ut1_minus_tai_s),
        pole_x_arcsec: line(before.pole_x_arcsec, after.pole_x_arcsec),
        pole_y_arcsec: line(before.pole_y_arcsec, after.pole_y_arcsec),
        predicted: before.predicted || after.predicted,
    }
}

struct Line<'a> {
    number: usize,
    content: &'a str,
}

impl Line<'_> {
    /// Columns counted from 1, both included, as the format's description has them.
    fn columns(&self, first: usize, last: usize) -> Result<&str, EarthRotationError> {
        self.content
            .get(first - 1..last)
            .ok_or(EarthRotationError::ShortLine {
                line: self.number,
                length: self.content.trim_end().len(),
            })
    }

    fn number(
        &self,
        field: &'static str,
        (first, last): (usize, usize),
        limit: f64,
    ) -> Result<f64, EarthRotationError> {
        let text = self.columns(first, last)?;
        match text.trim().parse::<f64>() {
            Ok(value) if value.is_finite() && value.abs() <= limit => Ok(value),
            _ => Err(EarthRotationError::BadField {
                line: self.number,
                field,
                first,
                last,
                found: text.trim().to_owned(),
            }),
        }
    }

    fn mjd(&self) -> Result<i64, EarthRotationError> {
        let value = self.number("modified Julian date", (8, 15), 200_000.0)?;
        if value.fract() == 0.0 && value >= 0.0 {
            Ok(value as i64)
        } else {
            Err(EarthRotationError::BadField {
                line: self.number,
                field: "modified Julian date",
                first: 8,
                last: 15,
                found: value.to_string(),
            })
        }
    }

    fn predicted(&self, column: usize) -> Result<bool, EarthRotationError> {
        match self.columns(column, column)? {
            "I" => Ok(false),
            "P" => Ok(true),
            other => Err(EarthRotationError::BadField {
                line: self.number,
                field: "flag I (measured) or P (predicted)",
                first: column,
                last: column,
                found: other.to_owned(),
            }),
        }
    }

    /// `None` for a row that holds a date alone.
    fn row(&self, mjd: i64) -> Result<Option<Row>, EarthRotationError> {
        let values = self.content.get(15..).unwrap_or_default();
        if values.trim().is_empty() {
            return Ok(None);
        }
        let ut1_minus_utc = self.number("UT1-UTC in seconds", (59, 68), 1.0)?;
        let midnight = Utc::from_unix_ms((mjd - UNIX_EPOCH_MJD) * DAY_MS);
        Ok(Some(Row {
            ut1_minus_tai_s: ut1_minus_utc - tai_minus_utc_s(midnight),
            pole_x_arcsec: self.number("pole x in arcseconds", (19, 27), 2.0)?,
            pole_y_arcsec: self.number("pole y in arcseconds", (38, 46), 2.0)?,
            predicted: self.predicted(17)? || self.predicted(58)?,
        }))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A row in the layout of the IERS file.
    fn row(mjd: i64, flag: char, x: f64, y: f64, ut1_utc: f64) -> String {
        format!(
            "000000 {mjd:>5}.00 {flag} {x:>9.6} 0.000012 {y:>9.6} 0.000009  {flag}{ut1_utc:>10.7} 0.0000080"
        )
    }

    fn table(rows: &[String]) -> EarthRotation {
        EarthRotation::from_finals2000a(&rows.join("\n")).unwrap()
    }

    fn utc(text: &str) -> Utc {
        Utc::parse(text).unwrap()
    }

    #[test]
    fn interpolates_across_a_leap_second() {
        // UT1 itself runs on evenly while UTC steps back a second after 2016-12-31 (MJD 57753).
        let rotation = table(&[
            row(57753, 'I', 0.1, 0.3, -0.407),
            row(57754, 'I', 0.2, 0.5, 0.592),
        ]);
        let check = |text: &str, expected: f64| {
            let found = rotation.at(utc(text));
            assert!((found.ut1_minus_utc_s - expected).abs() < 1e-9, "{text}");
        };
        check("2016-12-31T00:00:00Z", -0.407);
        check("2016-12-31T12:00:00Z", -0.4075);
        check("2017-01-01T00:00:00Z", 0.592);
        let noon = rotation.at(utc("2016-12-31T12:00:00Z"));
        assert!((noon.pole_x.arcsec() - 0.15).abs() < 1e-9);
        assert!((noon.pole_y.arcsec() - 0.4).abs() < 1e-9);
    }

    #[test]
    fn says_where_values_come_from() {
        let rotation = table(&[
            row(60000, 'I', 0.1, 0.3, 0.1),
            row(60001, 'I', 0.1, 0.3, 0.1),
            row(60002, 'P', 0.1, 0.3, 0.1),
        ]);
        let start = Utc::from_unix_ms((60000 - UNIX_EPOCH_MJD) * DAY_MS);
        let check = |days: f64, quality: RotationQuality, value: f64| {
            let found = rotation.at(start.plus_ms((days * DAY_MS as f64) as i64));
            assert_eq!(found.quality, quality, "{days}");
            assert!((found.ut1_minus_utc_s - value).abs() < 1e-9, "{days}");
        };
        check(-0.1, RotationQuality::Absent, 0.0);
        check(0.5, RotationQuality::Measured, 0.1);
        check(1.5, RotationQuality::Predicted, 0.1);
        check(2.0, RotationQuality::Predicted, 0.1);
        check(2.1, RotationQuality::Held, 0.1);
        check(900.0, RotationQuality::Held, 0.1);
        let whole = rotation.known_span().unwrap();
        assert_eq!(rotation.quality_over(whole), RotationQuality::Predicted);
        assert_eq!(
            EarthRotation::absent().at(start).quality,
            RotationQuality::Absent
        );
    }

    #[test]
    fn names_the_line_at_fault() {
        let good = row(60000, 'I', 0.1, 0.3, 0.1);
        let check = |second: &str, expected: &str| {
            let text = format!("{good}\r\n{second}\r\n");
            let error = EarthRotation::from_finals2000a(&text).unwrap_err();
            assert!(error.to_string().contains(expected), "{error}");
        };
        check("rubbish", "line 2: 7 characters");
        check(
            &row(60002, 'I', 0.1, 0.3, 0.1),
            "line 2: day 60002 (MJD) follows 60000",
        );
        check(&row(60000, 'I', 0.1, 0.3, 0.1), "line 2: day 60000");
        check(
            &row(60001, 'X', 0.1, 0.3, 0.1),
            "line 2: 'X' in columns 17-17",
        );
        check(
            &row(60001, 'I', 9.1, 0.3, 0.1),
            "line 2: '9.100000' in columns 19-27",
        );
        check(
            &row(60001, 'I', 0.1, 0.3, f64::NAN),
            "line 2: 'NaN' in columns 59-68",
        );
        check(&good.replace("60000.00", "60001.50"), "line 2: '60001.5'");
        check(&format!("é{}", row(60001, 'I', 0.1, 0.3, 0.1)), "line 2");
        assert_eq!(
            EarthRotation::from_finals2000a("\u{feff}\n"),
            Err(EarthRotationError::Empty)
        );
    }

    #[test]
    fn stops_at_rows_that_hold_a_date_alone() {
        let rotation = table(&[
            row(60000, 'I', 0.1, 0.3, 0.1),
            format!("000000 60001.00{}", " ".repeat(100)),
        ]);
        let span = rotation.known_span().unwrap();
        assert!(span.is_empty());
    }
}
