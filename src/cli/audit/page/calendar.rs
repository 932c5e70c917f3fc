//! A star's nights as a calendar: months downwards, days across.

use std::collections::BTreeMap;

use chrono::Datelike;
use maud::{Markup, html};

use super::fill_of;
use crate::audit::{OwedCause, StarAudit};
use crate::cli::audit::text::words;
use crate::page::{Fill, hatch, px, svg_text};
use crate::score::Standing;
use crate::time::NightDate;

/// A day's cell.
const CELL: f64 = 9.6;
const LEFT: f64 = 52.0;
const TOP: f64 = 20.0;
const WIDTH: f64 = 360.0;

/// What a night brought.
#[derive(Clone, Copy, PartialEq)]
enum Mark {
    Visits(usize),
    Unserved(OwedCause),
}

/// The calendar; `None` without a night to show.
pub fn of(star: &StarAudit, standing: &Standing) -> Option<Markup> {
    let mut marks: BTreeMap<NightDate, Mark> = BTreeMap::new();
    for (night, cause) in &star.owed_by_cause.unserved {
        marks.insert(*night, Mark::Unserved(*cause));
    }
    for visits in standing.credited.chunk_by(|a, b| a.night == b.night) {
        if let Some(first) = visits.first() {
            marks.insert(first.night, Mark::Visits(visits.len()));
        }
    }
    let (first, last) = (marks.keys().next()?, marks.keys().next_back()?);
    let origin = month(*first);
    let rows = month(*last) - origin + 1;
    let height = TOP + rows as f64 * CELL + 6.0;
    let title = "Calendar of visits and of nights on which a visit was due and none came";
    Some(html! {
        svg class="plot" viewBox=(format!("0 0 {WIDTH} {}", px(height))) role="img"
            aria-label=(title) {
            title { (title) }
            @for day in [1, 5, 10, 15, 20, 25, 30] {
                (svg_text((x(day) + CELL / 2.0, TOP - 6.0), "middle", "small", &day.to_string()))
            }
            @for row in 0..rows {
                @let index = origin + row;
                @let (year, number) = (index.div_euclid(12), index.rem_euclid(12) + 1);
                (svg_text(
                    (LEFT - 6.0, TOP + row as f64 * CELL + CELL - 1.8),
                    "end",
                    "small",
                    &format!("{year:04}-{number:02}"),
                ))
            }
            @for run in runs(&marks) {
                (cell(&run, month(run.first) - origin))
            }
        }
    })
}

/// Months since year 0.
fn month(night: NightDate) -> i64 {
    let date = night.date();
    i64::from(date.year()) * 12 + i64::from(date.month0())
}

fn x(day: u32) -> f64 {
    LEFT + f64::from(day - 1) * CELL
}

/// Nights of one month in a row with the same mark.
struct Run {
    first: NightDate,
    nights: u32,
    mark: Mark,
}

/// Nights told together where they are alike: three years of a star are then a few dozen shapes.
fn runs(marks: &BTreeMap<NightDate, Mark>) -> Vec<Run> {
    let mut runs: Vec<Run> = Vec::new();
    for (night, mark) in marks {
        match runs.last_mut() {
            Some(run)
                if run.mark == *mark
                    && matches!(mark, Mark::Unserved(_))
                    && month(run.first) == month(*night)
                    && night.nights_since(run.first) == i64::from(run.nights) =>
            {
                run.nights += 1;
            }
            _ => runs.push(Run {
                first: *night,
                nights: 1,
                mark: *mark,
            }),
        }
    }
    runs
}

fn cell(run: &Run, row: i64) -> Markup {
    let corner = (
        x(run.first.date().day()) + 0.6,
        TOP + row as f64 * CELL + 0.6,
    );
    let size = (f64::from(run.nights) * CELL - 1.2, CELL - 1.2);
    let (fill, meaning) = match run.mark {
        Mark::Visits(1) => (Fill::Plain, "1 visit".to_owned()),
        Mark::Visits(n) => (Fill::Plain, format!("{n} visits")),
        Mark::Unserved(cause) => (fill_of(cause), format!("due, none: {}", words(cause))),
    };
    let count = match run.mark {
        Mark::Visits(n) if n > 1 => Some(n),
        _ => None,
    };
    html! {
        g {
            title {
                (run.first)
                @if run.nights > 1 { " and " (run.nights - 1) " more" }
                ": " (meaning)
            }
            (hatch(fill, corner, size))
            @if let Some(count) = count {
                (svg_text(
                    (corner.0 + size.0 / 2.0, corner.1 + size.1 - 1.4),
                    "middle",
                    "small inverse",
                    &count.to_string(),
                ))
            }
        }
    }
}
