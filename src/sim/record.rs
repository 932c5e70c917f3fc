//! A recorded weather file: CSV with a header, its columns mapped in the settings.

use std::sync::Arc;

use chrono::Datelike;
use csv::StringRecord;
use thiserror::Error;

use super::weather::Recorded;
use crate::settings::{MappedValue, Readings, RecordedWeather, csv_line_of};
use crate::time::{Night, NightDate, Span, Utc};
use crate::units::Angle;
use crate::weather::WeatherSample;

const HOUR_MS: f64 = 3_600_000.0;
/// A line stands until this many times the ordinary distance between two lines has gone by: one
/// that comes a little late is borne, a missing one is not.
const STANDS_FOR: f64 = 1.5;
/// Cells that say "not measured", besides the empty one; without regard to case.
const NOT_MEASURED: [&str; 4] = ["nan", "na", "null", "-"];

/// A file in the wrong format has a fault in every line; more than this many help nobody.
const MOST_FAULTS: usize = 100;

/// What is wrong in a recorded weather file, and where.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub struct RecordFault {
    /// Line of the file, from 1.
    pub line: usize,
    /// Column by its name in the header, where one is to blame.
    pub column: Option<String>,
    /// What was found and what would do.
    pub detail: String,
}

impl std::fmt::Display for RecordFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match &self.column {
            Some(column) => write!(f, "{}: {column}: {}", self.line, self.detail),
            None => write!(f, "{}: {}", self.line, self.detail),
        }
    }
}

/// Weather as it was recorded.
#[derive(Clone, Debug, PartialEq)]
pub struct Record {
    samples: Arc<[WeatherSample]>,
    valid_ms: i64,
}

impl Record {
    /// Reads a file's text.
    ///
    /// # Errors
    /// The [`RecordFault`]s of the file, the first hundred of them.
    pub fn read(text: &str, mapping: &RecordedWeather) -> Result<Self, Vec<RecordFault>> {
        let text = text.trim_start_matches('\u{feff}');
        let mut reader = csv::ReaderBuilder::new()
            .flexible(true)
            .has_headers(false)
            .comment(Some(b'#'))
            .trim(csv::Trim::All)
            .from_reader(text.as_bytes());
        let mut reading: Option<Reading<'_>> = None;
        let mut faults = Vec::new();
        let mut samples: Vec<WeatherSample> = Vec::new();
        for row in reader.records() {
            let row = match row {
                Ok(row) => row,
                Err(error) => {
                    let line = line_of(text, error.position());
                    faults.push(flaw(None, format!("this is no CSV: {error}")).on(line));
                    break;
                }
            };
            // Found anew for each fault: it is costly, and a sound file needs none.
            let line = || line_of(text, row.position());
            match &reading {
                None => match Reading::of(&row, mapping) {
                    Ok(columns) => reading = Some(columns),
                    Err(missing) => {
                        return Err(missing.into_iter().map(|flaw| flaw.on(line())).collect());
                    }
                },
                Some(reading) => match reading.sample(&row, samples.last()) {
                    Ok(sample) => samples.push(sample),
                    Err(flaw) => faults.push(flaw.on(line())),
                },
            }
            if faults.len() == MOST_FAULTS {
                break;
            }
        }
        if faults.is_empty() && samples.is_empty() {
            faults.push(flaw(None, "there is no weather in it".to_owned()).on(1));
        }
        if !faults.is_empty() {
            return Err(faults);
        }
        let valid_ms = stands_for_ms(&samples);
        Ok(Record {
            samples: samples.into(),
            valid_ms,
        })
    }

    /// The samples in order of time.
    pub fn samples(&self) -> &Arc<[WeatherSample]> {
        &self.samples
    }

    /// From the first sample until the last one no longer stands.
    pub fn span(&self) -> Span {
        let first = self.samples.first().map(|sample| sample.at);
        let last = self.samples.last().map(|sample| sample.at);
        let (first, last) = first.zip(last).unwrap_or((EPOCH, EPOCH));
        Span::new(first, last.plus_ms(self.valid_ms))
    }

    /// The record moved by so many milliseconds, to be replayed.
    pub fn moved(&self, shift_ms: i64) -> Recorded {
        Recorded {
            samples: Arc::clone(&self.samples),
            shift_ms,
            valid_ms: self.valid_ms,
        }
    }

    /// The record as it is to be replayed in a night, with the night that it was recorded in: the
    /// same one, or, where the record has nothing of it, the same evening of the year in the latest
    /// year that it has. `None`: it has none of these.
    pub fn for_night(&self, night: NightDate, longitude: Angle) -> Option<(Recorded, NightDate)> {
        let last_year = NightDate::at(self.span().end, longitude).date().year();
        let first_year = NightDate::at(self.span().start, longitude).date().year();
        let others = (first_year..=last_year).rev();
        let others = others.filter_map(|year| same_evening(night, year));
        let source = std::iter::once(night)
            .chain(others)
            .find(|night| self.has(Night::of(*night, longitude).span))?;
        let shift_ms =
            Night::of(night, longitude).span.start - Night::of(source, longitude).span.start;
        Some((self.moved(shift_ms), source))
    }

    fn has(&self, span: Span) -> bool {
        let from = self
            .samples
            .partition_point(|sample| sample.at < span.start);
        self.samples
            .get(from)
            .is_some_and(|sample| span.contains(sample.at))
    }
}

const EPOCH: Utc = Utc::from_unix_ms(0);

/// That evening in another year; the 28th for a 29th of February that is not there.
fn same_evening(night: NightDate, year: i32) -> Option<NightDate> {
    let date = night.date();
    let moved = date
        .with_year(year)
        .or_else(|| date.with_day(28).and_then(|d| d.with_year(year)))?;
    Some(night.plus_nights((moved - date).num_days()))
}

fn stands_for_ms(samples: &[WeatherSample]) -> i64 {
    let mut steps: Vec<i64> = samples.windows(2).map(|p| p[1].at - p[0].at).collect();
    steps.sort_unstable();
    // A single line stands for an hour: nothing says how long.
    let median = steps.get(steps.len() / 2).map_or(HOUR_MS, |ms| *ms as f64);
    (STANDS_FOR * median) as i64
}

/// A fault whose line is still to be found.
struct Flaw {
    column: Option<String>,
    detail: String,
}

impl Flaw {
    fn on(self, line: usize) -> RecordFault {
        RecordFault {
            line,
            column: self.column,
            detail: self.detail,
        }
    }
}

fn flaw(column: Option<&str>, detail: String) -> Flaw {
    Flaw {
        column: column.map(str::to_owned),
        detail,
    }
}

fn line_of(text: &str, position: Option<&csv::Position>) -> usize {
    csv_line_of(text, position.map_or(0, csv::Position::byte))
}

/// Where the wanted columns stand in this file.
struct Reading<'a> {
    mapping: &'a RecordedWeather,
    width: usize,
    time: usize,
    safe: Option<(&'a str, usize)>,
    values: Vec<(&'a MappedValue, usize)>,
}

impl<'a> Reading<'a> {
    fn of(header: &StringRecord, mapping: &'a RecordedWeather) -> Result<Self, Vec<Flaw>> {
        let mut missing = Vec::new();
        let mut place = |name: &str| {
            let found = header.iter().position(|cell| cell == name);
            if found.is_none() {
                let there: Vec<&str> = header.iter().collect();
                missing.push(flaw(
                    Some(name),
                    format!("there is no such column, there are: {}", there.join(", ")),
                ));
            }
            found.unwrap_or_default()
        };
        let reading = Reading {
            mapping,
            width: header.len(),
            time: place(&mapping.time_column),
            safe: mapping.safe_column.as_deref().map(|n| (n, place(n))),
            values: mapping.values.iter().map(|v| (v, place(&v.from))).collect(),
        };
        if missing.is_empty() {
            Ok(reading)
        } else {
            Err(missing)
        }
    }

    fn sample(
        &self,
        row: &StringRecord,
        before: Option<&WeatherSample>,
    ) -> Result<WeatherSample, Flaw> {
        if row.len() != self.width {
            let (found, wanted) = (row.len(), self.width);
            let detail = format!("found {found} cells, must be {wanted} as in the header");
            return Err(flaw(None, detail));
        }
        let cell = |index: usize| row.get(index).unwrap_or_default();
        let at = self.time(cell(self.time))?;
        if before.is_some_and(|before| at <= before.at) {
            let column = Some(self.mapping.time_column.as_str());
            let detail = format!("{at} does not come after the line before");
            return Err(flaw(column, detail));
        }
        let mut readings = Readings::default();
        for (mapped, index) in &self.values {
            if let Some(number) =
                number(cell(*index)).map_err(|detail| flaw(Some(&mapped.from), detail))?
            {
                readings
                    .take(mapped, number)
                    .map_err(|error| flaw(Some(&mapped.from), error.to_string()))?;
            }
        }
        let safe = match self.safe {
            Some((name, index)) => {
                verdict(cell(index)).map_err(|detail| flaw(Some(name), detail))?
            }
            None => None,
        };
        Ok(readings.sample(at, safe))
    }

    fn time(&self, text: &str) -> Result<Utc, Flaw> {
        let ahead_ms = (self.mapping.utc_offset_h * HOUR_MS) as i64;
        let read = self.mapping.time_format.read(text);
        read.map(|at| at.plus_ms(-ahead_ms)).ok_or_else(|| {
            flaw(
                Some(&self.mapping.time_column),
                format!("found \"{text}\", no time as recorded_weather.time_format says"),
            )
        })
    }
}

fn not_measured(text: &str) -> bool {
    text.is_empty()
        || NOT_MEASURED
            .iter()
            .any(|word| text.eq_ignore_ascii_case(word))
}

fn number(text: &str) -> Result<Option<f64>, String> {
    if not_measured(text) {
        return Ok(None);
    }
    let number = text.parse().ok().filter(|number: &f64| number.is_finite());
    number
        .map(Some)
        .ok_or_else(|| format!("found \"{text}\", must be a number or empty"))
}

fn verdict(text: &str) -> Result<Option<bool>, String> {
    if not_measured(text) {
        return Ok(None);
    }
    match text.to_ascii_lowercase().as_str() {
        "true" | "1" => Ok(Some(true)),
        "false" | "0" => Ok(Some(false)),
        _ => Err(format!(
            "found \"{text}\", must be true, false, 1, 0 or empty"
        )),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::settings::{MappedKind, TimeFormat};
    use crate::weather::Quantity;

    fn mapping() -> RecordedWeather {
        let value = |quantity, from: &str, factor| MappedValue {
            kind: MappedKind::Quantity(quantity),
            from: from.to_owned(),
            factor,
            offset: 0.0,
        };
        RecordedWeather {
            time_column: "when".to_owned(),
            time_format: TimeFormat::Pattern("%Y-%m-%d %H:%M".to_owned()),
            utc_offset_h: 2.0,
            safe_column: Some("ok".to_owned()),
            values: vec![
                value(Quantity::WindMS, "wind km/h", 1.0 / 3.6),
                value(Quantity::HumidityPercent, "rh", 1.0),
            ],
        }
    }

    const HEADER: &str = "when,ok,wind km/h,spare,rh\n";

    fn faults(rows: &str) -> Vec<String> {
        let read = Record::read(&format!("{HEADER}{rows}"), &mapping());
        read.unwrap_err().iter().map(ToString::to_string).collect()
    }

    #[test]
    fn columns_are_found_by_name_and_turned_into_the_units_of_the_rules() {
        let text = format!(
            "\u{feff}# a station\r\n{HEADER}2024-01-02 22:00,1,36,x,50\r\n\
             2024-01-02 22:05,FALSE,,x,NaN\r\n2024-01-02 22:10,,18,x,51\r\n"
        );
        let record = Record::read(&text, &mapping()).unwrap();
        let [first, second, third] = record.samples().as_ref() else {
            panic!("three lines");
        };
        assert_eq!(first.at, Utc::parse("2024-01-02T20:00:00Z").unwrap());
        assert!((first.values[&Quantity::WindMS] - 10.0).abs() < 1e-12);
        assert_eq!(
            (first.safe, second.safe, third.safe),
            (Some(true), Some(false), None)
        );
        assert!(second.values.is_empty());
        let minutes = |m: i64| {
            Utc::parse("2024-01-02T20:10:00Z")
                .unwrap()
                .plus_ms(m * 30_000)
        };
        // A line every five minutes stands for seven and a half.
        assert_eq!(record.span().end, minutes(15));
    }

    #[test]
    fn every_fault_is_told_with_its_line_and_column() {
        let rows = "2024-01-02 22:00,1,36,x,50\n2024-01-02 22:00,1,36,x,50\n\
                    2024-01-02 22:05,perhaps,36,x,50\n02.01.2024,1,36,x,50\n\
                    2024-01-02 22:10,1,fast,x,50\n2024-01-02 22:15,1,36\n";
        let told = faults(rows);
        let starts = [
            "3: when:",
            "4: ok:",
            "5: when:",
            "6: wind km/h:",
            "7: found 3",
        ];
        assert_eq!(told.len(), starts.len(), "{told:#?}");
        for (told, start) in told.iter().zip(starts) {
            assert!(told.starts_with(start), "{told}");
        }
    }

    #[test]
    fn a_header_without_the_columns_and_an_empty_file_are_refused() {
        let told = Record::read("when,ok,wind\n", &mapping()).unwrap_err();
        let columns: Vec<_> = told.iter().filter_map(|f| f.column.as_deref()).collect();
        assert_eq!(columns, ["wind km/h", "rh"]);
        assert_eq!(faults(""), ["1: there is no weather in it"]);
        assert!(Record::read("", &mapping()).is_err());
    }

    #[test]
    fn a_night_is_found_in_its_year_or_in_another() {
        let longitude = Angle::from_deg(-70.0);
        let rows = "2024-12-02 02:00,1,36,x,50\n2024-12-02 03:00,1,36,x,50\n";
        let record = Record::read(&format!("{HEADER}{rows}"), &mapping()).unwrap();
        let night = |text| NightDate::parse(text).unwrap();
        let find = |text| record.for_night(night(text), longitude);
        let (as_is, source) = find("2024-12-01").unwrap();
        assert_eq!((as_is.shift_ms, source), (0, night("2024-12-01")));
        let (moved, source) = find("2026-12-01").unwrap();
        assert_eq!(source, night("2024-12-01"));
        assert_eq!(moved.shift_ms, 730 * 86_400_000);
        assert!(find("2026-12-02").is_none());
        // In the moved night the feed gives the line of the same time of day, freshly stamped.
        let utc = Utc::parse("2026-12-02T00:30:00Z").unwrap();
        let sample = moved.at(utc).unwrap();
        assert_eq!(sample.at, utc);
        assert_eq!(sample.safe, Some(true));
    }
}
