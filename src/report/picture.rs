//! The pictures of the page.

use maud::{Markup, html};

use super::words::Course;
use crate::night::NightReport;
use crate::page::{Fill, Plot, Scale, hatch, line, px, svg_text};
use crate::record::{DarknessSplit, EntryKind, HoldCause, Visit};
use crate::time::{Span, Utc};

/// Width of the course of the night, and the place of its lanes and axis.
const WIDTH: f64 = 720.0;
const LEFT: f64 = 52.0;
const RIGHT: f64 = 708.0;
const VISITS: (f64, f64) = (4.0, 34.0);
const HOLDS: (f64, f64) = (46.0, 24.0);
const AXIS: f64 = 78.0;
const HEIGHT: f64 = 102.0;

/// Visits and holds through the darkness, one lane each.
pub(super) fn course(report: &NightReport, dark: Span) -> Markup {
    let x = Scale::time((dark.start, dark.end), (LEFT, RIGHT));
    let place = |at: Utc| x.at_time(at).clamp(LEFT, RIGHT);
    html! {
        svg class="plot" viewBox=(format!("0 0 {} {}", px(WIDTH), px(HEIGHT))) role="img"
            aria-label="visits and holds through the darkness" {
            title { "visits and holds through the darkness" }
            g class="axis" {
                path d=(format!("M{} {}H{}", px(LEFT), px(AXIS), px(RIGHT))) {}
                @for tick in x.ticks(10) {
                    path d=(format!("M{} {}v4", px(tick.at), px(AXIS))) {}
                    (svg_text((tick.at, AXIS + 16.0), "middle", "", &tick.label))
                }
            }
            (svg_text((LEFT - 6.0, VISITS.0 + 21.0), "end", "name", "visits"))
            (svg_text((LEFT - 6.0, HOLDS.0 + 16.0), "end", "name", "holds"))
            @for visit in &report.visits { (of_visit(visit, place)) }
            @for hold in &report.holds {
                @let ends = (place(hold.span.start), place(hold.span.end));
                g {
                    title { (hold.cause.label()) ": " (hold.detail) }
                    (area(of_hold(hold.cause), HOLDS, ends))
                }
            }
        }
    }
}

fn of_visit(visit: &Visit, place: impl Fn(Utc) -> f64) -> Markup {
    let fill = match visit.kind {
        _ if visit.credit <= 0.0 => Fill::Crossed,
        EntryKind::Science => Fill::Plain,
        EntryKind::Standard | EntryKind::Calibration => Fill::Level,
    };
    let (began, start) = (place(visit.began), place(visit.exposing.start));
    // What exposed nothing is a narrow mark where it began.
    let end =
        place(visit.exposing.end).max(start + if visit.exposing.is_empty() { 3.0 } else { 0.0 });
    html! {
        g {
            title { (visit.subject) }
            (area(Fill::Faint, VISITS, (began, start)))
            (area(fill, VISITS, (start, end)))
        }
    }
}

fn area(fill: Fill, (top, height): (f64, f64), (from, to): (f64, f64)) -> Markup {
    html! { @if to > from { (hatch(fill, (from, top), (to - from, height))) } }
}

const fn of_hold(cause: HoldCause) -> Fill {
    match cause {
        HoldCause::Weather => Fill::Rising,
        HoldCause::FeedLost => Fill::Falling,
        HoldCause::Instrument | HoldCause::Operator | HoldCause::Ledger => Fill::Upright,
    }
}

/// The split in groups: how each is filled, its name, its length; those that are empty left out.
pub(super) fn groups(split: &DarknessSplit) -> Vec<(Fill, &'static str, i64)> {
    let held = |causes: &[HoldCause]| -> i64 {
        causes
            .iter()
            .filter_map(|cause| split.held_ms.get(cause))
            .sum()
    };
    let other = [
        HoldCause::Instrument,
        HoldCause::Operator,
        HoldCause::Ledger,
    ];
    let groups = [
        (Fill::Plain, "exposing", split.exposing_ms),
        (Fill::Level, "calibration", split.calibration_ms),
        (Fill::Dotted, "overhead", split.overhead_ms),
        (
            Fill::Rising,
            "held by the weather",
            held(&[HoldCause::Weather]),
        ),
        (Fill::Falling, "feed lost", held(&[HoldCause::FeedLost])),
        (Fill::Upright, "held for another cause", held(&other)),
        (Fill::Faint, "idle", split.idle_ms.values().sum()),
    ];
    groups.into_iter().filter(|(_, _, ms)| *ms > 0).collect()
}

/// One bar of the whole darkness.
pub(super) fn split(groups: &[(Fill, &str, i64)]) -> Markup {
    const BAR: (f64, f64) = (360.0, 26.0);
    let whole: i64 = groups.iter().map(|(_, _, ms)| ms).sum();
    let x = Scale::linear((0.0, whole as f64), (0.0, BAR.0));
    let mut from = 0;
    let mut parts = Vec::new();
    for (fill, name, ms) in groups {
        parts.push((*fill, *name, x.at(from as f64), x.at((from + ms) as f64)));
        from += ms;
    }
    html! {
        svg class="plot" viewBox=(format!("0 0 {} {}", px(BAR.0), px(BAR.1))) role="img"
            aria-label="shares of the darkness" {
            title { "shares of the darkness" }
            @for (fill, name, from, to) in parts {
                g { title { (name) } (hatch(fill, (from, 0.0), (to - from, BAR.1))) }
            }
        }
    }
}

/// One quantity through the night.
pub(super) fn weather(course: &Course, name: &str) -> Markup {
    let plot = Plot {
        size: (360.0, 150.0),
        title: name,
        x_name: "UTC",
        y_name: name,
    };
    let ends = course.values.first().zip(course.values.last());
    let Some(((first, _), (last, _))) = ends else {
        return html! {};
    };
    let x = Scale::time((*first, *last), plot.across());
    // A little air around the line; a flat one gets a step of its last decimal.
    let (_, decimals) = super::words::quantity(course.quantity);
    let step = 10_f64.powi(-(decimals as i32));
    let air = (0.08 * (course.greatest - course.least)).max(step);
    let y = Scale::linear((course.least - air, course.greatest + air), plot.upwards());
    let points: Vec<(f64, f64)> = course
        .values
        .iter()
        .map(|(at, value)| (x.at_time(*at), y.at(*value)))
        .collect();
    plot.svg(&x, &y, &[], &line(&points, "line-1"))
}
