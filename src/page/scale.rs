//! From values to places in a picture, and the values worth naming.

use chrono::{DateTime, Datelike, Months, NaiveDate, TimeZone, Utc as ChronoUtc};

use crate::time::{DAY_MS, Utc};

/// A named place on an axis.
#[derive(Clone, Debug, PartialEq)]
pub struct Tick {
    /// Where, in the units of the picture.
    pub at: f64,
    /// What is written there; empty for a place that is marked and not named.
    pub label: String,
}

/// Turns values into places along one axis. Values outside the domain land outside the range.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scale {
    kind: Kind,
    /// Domain, after taking the logarithm where the scale is one.
    domain: (f64, f64),
    range: (f64, f64),
}

#[derive(Clone, Copy, Debug, PartialEq)]
enum Kind {
    Linear,
    Log,
    Time,
}

/// Least width of a domain, so that a single value can be drawn: it lands in the middle.
const NARROWEST: f64 = 1e-9;

impl Scale {
    /// Even steps from `domain.0` at `range.0` to `domain.1` at `range.1`.
    pub fn linear(domain: (f64, f64), range: (f64, f64)) -> Self {
        Scale::of(Kind::Linear, domain, range)
    }

    /// Even factors. Values of the domain that are not above 0 are taken as the smallest number.
    pub fn log(domain: (f64, f64), range: (f64, f64)) -> Self {
        let log = |value: f64| value.max(f64::MIN_POSITIVE).log10();
        Scale::of(Kind::Log, (log(domain.0), log(domain.1)), range)
    }

    /// Instants.
    pub fn time(domain: (Utc, Utc), range: (f64, f64)) -> Self {
        let ms = |at: Utc| at.unix_ms() as f64;
        Scale::of(Kind::Time, (ms(domain.0), ms(domain.1)), range)
    }

    fn of(kind: Kind, domain: (f64, f64), range: (f64, f64)) -> Self {
        let narrow = (domain.1 - domain.0).abs() < NARROWEST;
        let domain = if narrow {
            (domain.0 - 0.5, domain.0 + 0.5)
        } else {
            domain
        };
        Scale {
            kind,
            domain,
            range,
        }
    }

    /// The places between which the domain lies.
    pub fn range(&self) -> (f64, f64) {
        self.range
    }

    /// Where a value stands; for [`Scale::time`] use [`Scale::at_time`].
    pub fn at(&self, value: f64) -> f64 {
        let value = match self.kind {
            Kind::Log => value.max(f64::MIN_POSITIVE).log10(),
            Kind::Linear | Kind::Time => value,
        };
        let share = (value - self.domain.0) / (self.domain.1 - self.domain.0);
        self.range.0 + share * (self.range.1 - self.range.0)
    }

    /// Where an instant stands.
    pub fn at_time(&self, at: Utc) -> f64 {
        self.at(at.unix_ms() as f64)
    }

    /// Round values within the domain, about `wanted` of them (for logarithms every decade, with
    /// the values 2 and 5 between where there are few; for instants hours, days, months or years).
    pub fn ticks(&self, wanted: usize) -> Vec<Tick> {
        let named = match self.kind {
            Kind::Linear => linear_ticks(self.ordered(), wanted),
            Kind::Log => log_ticks(self.ordered(), wanted),
            Kind::Time => time_ticks(self.ordered(), wanted),
        };
        let place = |(value, label): (f64, String)| Tick {
            at: self.at(value),
            label,
        };
        named.into_iter().map(place).collect()
    }

    fn ordered(&self) -> (f64, f64) {
        let (a, b) = self.domain;
        (a.min(b), a.max(b))
    }
}

/// Steps of 1, 2 or 5 times a power of ten.
fn linear_ticks((low, high): (f64, f64), wanted: usize) -> Vec<(f64, String)> {
    let rough = (high - low) / wanted.max(1) as f64;
    let power = 10f64.powf(rough.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|factor| factor * power)
        .find(|step| *step >= rough * 0.999)
        .unwrap_or(10.0 * power);
    let decimals = (-(step.log10() + 1e-9).floor()).max(0.0) as usize;
    let first = (low / step - 1e-9).ceil() as i64;
    let last = (high / step + 1e-9).floor() as i64;
    (first..=last)
        .map(|n| n as f64 * step)
        .map(|value| (value, format!("{:.decimals$}", value + 0.0)))
        .collect()
}

fn log_ticks((low, high): (f64, f64), wanted: usize) -> Vec<(f64, String)> {
    let decades = (high - low).max(NARROWEST);
    let factors: &[f64] = if decades * 3.0 <= 1.5 * wanted as f64 {
        &[1.0, 2.0, 5.0]
    } else {
        &[1.0]
    };
    let stride = (decades / wanted.max(1) as f64).ceil().max(1.0) as i32;
    let mut ticks = Vec::new();
    let mut decade = low.floor() as i32;
    while f64::from(decade) <= high {
        for factor in factors {
            let value = factor * 10f64.powi(decade);
            let inside = (low - 1e-9..=high + 1e-9).contains(&value.log10());
            if inside && decade.rem_euclid(stride) == 0 {
                ticks.push((value, short(value, decade)));
            }
        }
        decade += 1;
    }
    ticks
}

/// A value of a decade with as many decimals as it needs.
fn short(value: f64, decade: i32) -> String {
    if (-4..=5).contains(&decade) {
        let decimals = (-decade).max(0) as usize;
        format!("{value:.decimals$}")
    } else {
        format!("{value:e}")
    }
}

/// Steps of instants: milliseconds, and how the label is written.
const TIME_STEPS: [(i64, &str); 9] = [
    (DAY_MS / 48, "%H:%M"),
    (DAY_MS / 24, "%H:%M"),
    (DAY_MS / 12, "%H:%M"),
    (DAY_MS / 8, "%H:%M"),
    (DAY_MS / 4, "%H:%M"),
    (DAY_MS, "%b %-d"),
    (2 * DAY_MS, "%b %-d"),
    (7 * DAY_MS, "%b %-d"),
    (14 * DAY_MS, "%b %-d"),
];
/// Steps of whole months.
const MONTH_STEPS: [u32; 7] = [1, 2, 3, 6, 12, 24, 60];
/// Mean length of a month of the Gregorian calendar, ms.
const MONTH_MS: f64 = 30.436_875 * DAY_MS as f64;

fn time_ticks((low, high): (f64, f64), wanted: usize) -> Vec<(f64, String)> {
    let rough = (high - low) / wanted.max(1) as f64;
    let step = TIME_STEPS.iter().find(|(ms, _)| *ms as f64 >= rough * 0.9);
    match step {
        Some((ms, format)) => even_instants((low, high), *ms, format),
        None => month_ticks((low, high), rough),
    }
}

fn even_instants((low, high): (f64, f64), step_ms: i64, format: &str) -> Vec<(f64, String)> {
    let first = (low / step_ms as f64).ceil() as i64;
    let last = (high / step_ms as f64).floor() as i64;
    (first..=last)
        .filter_map(|n| {
            let ms = n * step_ms;
            let at = ChronoUtc.timestamp_millis_opt(ms).single()?;
            Some((ms as f64, at.format(format).to_string()))
        })
        .collect()
}

fn month_ticks((low, high): (f64, f64), rough: f64) -> Vec<(f64, String)> {
    let step = MONTH_STEPS
        .into_iter()
        .find(|months| f64::from(*months) * MONTH_MS >= rough * 0.9)
        .unwrap_or(120);
    let mut ticks = Vec::new();
    let Some(begin) = DateTime::from_timestamp_millis(low as i64) else {
        return ticks;
    };
    let mut month = NaiveDate::from_ymd_opt(begin.year(), 1, 1);
    while let Some(date) = month {
        let at = date.and_time(chrono::NaiveTime::MIN).and_utc();
        let ms = at.timestamp_millis() as f64;
        if ms > high {
            break;
        }
        if ms >= low {
            let whole_year = date.month() == 1;
            let format = if whole_year { "%Y" } else { "%b" };
            ticks.push((ms, at.format(format).to_string()));
        }
        month = date.checked_add_months(Months::new(step));
    }
    ticks
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn check(scale: &Scale, wanted: usize, expected: &[&str]) {
        let labels: Vec<String> = scale.ticks(wanted).into_iter().map(|t| t.label).collect();
        assert_eq!(labels, expected);
    }

    fn utc(text: &str) -> Utc {
        Utc::parse(text).unwrap()
    }

    #[test]
    fn round_values_are_named() {
        let range = (0.0, 100.0);
        check(
            &Scale::linear((0.0, 1.0), range),
            5,
            &["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"],
        );
        check(&Scale::linear((-3.0, 12.0), range), 4, &["0", "5", "10"]);
        check(&Scale::linear((12.0, -3.0), range), 4, &["0", "5", "10"]);
        check(
            &Scale::log((0.7, 25.0), range),
            5,
            &["1", "2", "5", "10", "20"],
        );
        check(
            &Scale::log((0.01, 10_000.0), range),
            4,
            &["0.01", "1", "100", "10000"],
        );
        let night = (utc("2026-12-01T18:10:00Z"), utc("2026-12-02T06:00:00Z"));
        check(
            &Scale::time(night, range),
            4,
            &["21:00", "00:00", "03:00", "06:00"],
        );
        let year = (utc("2026-11-15T00:00:00Z"), utc("2027-06-15T00:00:00Z"));
        check(&Scale::time(year, range), 4, &["2027", "Mar", "May"]);
    }

    #[test]
    fn the_ends_of_the_domain_are_those_of_the_range() {
        let scale = Scale::log((1.0, 100.0), (50.0, 10.0));
        for (value, at) in [(1.0, 50.0), (10.0, 30.0), (100.0, 10.0)] {
            assert!((scale.at(value) - at).abs() < 1e-9);
        }
        let single = Scale::linear((7.0, 7.0), (0.0, 10.0));
        assert_eq!(single.at(7.0), 5.0);
        assert!(scale.at(0.0).is_finite());
    }

    proptest! {
        #[test]
        fn ticks_stand_within_the_range_and_are_not_many(
            low in -1e6f64..1e6, width in 1e-6f64..1e6, wanted in 2usize..12,
        ) {
            let scale = Scale::linear((low, low + width), (0.0, 300.0));
            let ticks = scale.ticks(wanted);
            prop_assert!(ticks.len() <= wanted + 2, "{}", ticks.len());
            for tick in ticks {
                prop_assert!((-0.01..=300.01).contains(&tick.at), "{tick:?}");
            }
        }
    }
}
