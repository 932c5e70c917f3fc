//! The report as a page that needs nothing but itself.

use maud::{Markup, html};

use super::words::{self, Course, clock, from_to, hours, minutes, percent};
use super::{Heading, picture};
use crate::night::NightReport;
use crate::page::{Column, Fill, document, facts, figure, gallery, legend, table, wide_figure};
use crate::record::{Outcome, Visit};
use crate::time::Span;

pub(super) fn page(report: &NightReport, heading: &Heading<'_>) -> String {
    let title = format!("Night {} – {}", report.bounds.night, heading.survey);
    let body = html! {
        h1 { "Night " (report.bounds.night) }
        p class="soft" { (heading.survey) ", " (heading.site) }
        @for warning in words::warnings(report) { p class="caution" { strong { (warning) } } }
        (figures(report))
        (course_of_the_night(report))
        (split(report))
        (visits(report))
        (holds(report))
        (revisions(report))
        (remarks(report))
        (weather(report))
        p class="caution" { (words::CAUTION) }
    };
    document(&title, &body)
}

fn figures(report: &NightReport) -> Markup {
    let Some(dark) = report.bounds.darkness else {
        return html! { p { "There was no darkness." } };
    };
    let summary = &report.summary;
    let whole = dark.length_ms();
    let held: i64 = summary.split.held_ms.values().sum();
    let idle: i64 = summary.split.idle_ms.values().sum();
    let share = |ms: i64| html! { (format!("{:.0} %", percent(ms, whole))) };
    html! {
        (facts(&[
            ("darkness", html! { (format!("{:.2} h", hours(whole))) }),
            ("exposing", share(summary.split.exposing_ms)),
            ("held", share(held)),
            ("idle", share(idle)),
            ("visits done", html! { (summary.visits.done) }),
            ("short, lost, refused, unreported", html! {
                (summary.visits.short) ", " (summary.visits.lost) ", " (summary.visits.refused) ", "
                (summary.visits.unreported)
            }),
        ]))
        p class="soft" {
            "Dark from " (words::moment(dark.start)) " to " (words::moment(dark.end)) " UTC."
        }
    }
}

fn course_of_the_night(report: &NightReport) -> Markup {
    let Some(dark) = report.bounds.darkness else {
        return html! {};
    };
    if report.visits.is_empty() && report.holds.is_empty() {
        return html! {};
    }
    let caption = html! {
        "Visits and holds through the darkness, UTC. "
        (legend(&[
            (Fill::Plain, "exposing"),
            (Fill::Level, "standard or calibration"),
            (Fill::Faint, "slew and acquisition"),
            (Fill::Crossed, "nothing gathered"),
            (Fill::Rising, "held by the weather"),
            (Fill::Falling, "feed lost"),
            (Fill::Upright, "held for another cause"),
        ]))
    };
    wide_figure(&caption, &picture::course(report, dark))
}

fn split(report: &NightReport) -> Markup {
    let whole = report.summary.darkness.map_or(0, |dark| dark.length_ms());
    if whole == 0 {
        return html! {};
    }
    let columns = [
        Column::words("part"),
        Column::numbers("minutes"),
        Column::numbers("share"),
    ];
    let parts = report.summary.split.parts();
    let rows: Vec<Vec<Markup>> = parts
        .iter()
        .filter(|(_, ms)| *ms > 0)
        .map(|(label, ms)| {
            vec![
                html! { (words::spaced(label)) },
                html! { (format!("{:.1}", minutes(*ms))) },
                html! { (format!("{:.1} %", percent(*ms, whole))) },
            ]
        })
        .collect();
    let groups = picture::groups(&report.summary.split);
    let entries: Vec<(Fill, &str)> = groups
        .iter()
        .map(|(fill, name, _)| (*fill, *name))
        .collect();
    html! {
        h2 { "Where the darkness went" }
        (figure(&legend(&entries), &picture::split(&groups)))
        (table("Every minute of darkness, once", &columns, &rows))
    }
}

/// A column of the visits, and what stands in it.
type VisitColumn = (Column<'static>, fn(&Visit) -> Markup);

const VISIT_COLUMNS: [VisitColumn; 10] = [
    (Column::numbers("no."), |visit| html! { (number(visit)) }),
    (Column::words("subject"), |visit| html! { (visit.subject) }),
    (Column::words("UTC"), |visit| {
        if visit.exposing.is_empty() {
            html! { (clock(visit.began)) "–" }
        } else {
            span(visit.exposing)
        }
    }),
    (Column::words("outcome"), |visit| {
        let class = match visit.outcome {
            Outcome::Done => None,
            Outcome::Short => Some("warn"),
            _ => Some("bad"),
        };
        html! { span class=[class] { (words::outcome_words(visit.outcome)) } }
    }),
    (Column::numbers("exposed, s"), |visit| {
        decimals(Some(visit.exposed_s), 0)
    }),
    (Column::numbers("credit"), |visit| {
        decimals(Some(visit.credit), 2)
    }),
    (Column::numbers("airmass"), |visit| {
        decimals(visit.airmass, 2)
    }),
    (Column::numbers("S/N"), |visit| decimals(visit.snr, 0)),
    (Column::numbers("error, m/s"), |visit| {
        decimals(visit.rv_error_m_s, 2)
    }),
    (
        Column::words("note"),
        |visit| html! { @if !visit.note.is_empty() { span class="long" { (visit.note) } } },
    ),
];

fn decimals(value: Option<f64>, decimals: usize) -> Markup {
    html! { @if let Some(value) = value { (format!("{value:.decimals$}")) } }
}

/// The running number within the night, which its name ends with.
fn number(visit: &Visit) -> &str {
    visit.id.0.rsplit('-').next().unwrap_or_default()
}

/// From when to when, never broken over two lines.
fn span(span: Span) -> Markup {
    html! { (from_to(span).replace('–', "\u{2060}–\u{2060}")) }
}

/// Columns in which nothing stands are left out.
fn visits(report: &NightReport) -> Markup {
    let cells = |cell: fn(&Visit) -> Markup| -> Vec<Markup> {
        report.visits.iter().map(|visit| cell(visit)).collect()
    };
    let filled: Vec<(Column<'_>, Vec<Markup>)> = VISIT_COLUMNS
        .into_iter()
        .map(|(column, cell)| (column, cells(cell)))
        .filter(|(_, cells)| cells.iter().any(|cell| !cell.0.is_empty()))
        .collect();
    let columns: Vec<Column<'_>> = filled.iter().map(|(column, _)| *column).collect();
    let rows: Vec<Vec<Markup>> = (0..report.visits.len())
        .map(|row| {
            filled
                .iter()
                .filter_map(|(_, cells)| cells.get(row).cloned())
                .collect()
        })
        .collect();
    let night = report.bounds.night;
    let caption = format!("The name of number 0001 is {night}-0001");
    html! {
        h2 { "Visits" }
        @if rows.is_empty() { p { "None ended." } } @else { (table(&caption, &columns, &rows)) }
        @if let Some((visit, subject)) = &report.under_way {
            p class="warn" { "Visit " (visit) " to " (subject) " has not ended." }
        }
    }
}

fn holds(report: &NightReport) -> Markup {
    let columns = [
        Column::words("UTC"),
        Column::words("cause"),
        Column::numbers("minutes"),
        Column::words("in words"),
    ];
    let row = |hold: &crate::record::Hold| {
        vec![
            span(hold.span),
            html! { (words::hold(hold.cause).replace(' ', "\u{a0}")) },
            html! { (format!("{:.1}", minutes(hold.span.length_ms()))) },
            html! { span class="long" { (hold.detail) } },
        ]
    };
    let rows: Vec<Vec<Markup>> = report.holds.iter().map(row).collect();
    html! {
        h2 { "Holds" }
        @if rows.is_empty() { p { "None." } } @else {
            (table("In the order in which they began; they may overlap", &columns, &rows))
        }
    }
}

fn revisions(report: &NightReport) -> Markup {
    if report.revisions.is_empty() {
        return html! {};
    }
    let columns = [
        Column::numbers("no."),
        Column::words("UTC"),
        Column::words("cause"),
        Column::numbers("entries"),
        Column::numbers("value"),
        Column::numbers("of the bound"),
    ];
    let row = |revision: &crate::night::RevisionNote| {
        let reached = words::reached(revision);
        vec![
            html! { (revision.number) },
            html! { (clock(revision.made_at)) },
            html! { span class="long" { (words::plan_cause(&revision.cause).1) } },
            html! { (revision.entries) },
            html! { (format!("{:.2}", revision.value)) },
            html! { @if let Some(share) = reached { (format!("{share:.1} %")) } },
        ]
    };
    let rows: Vec<Vec<Markup>> = report.revisions.iter().map(row).collect();
    html! {
        h2 { "Revisions of the queue" }
        (table("What was still to come, and what no plan could have beaten", &columns, &rows))
    }
}

fn remarks(report: &NightReport) -> Markup {
    if report.remarks.is_empty() {
        return html! {};
    }
    html! {
        h2 { "What people did, and what befell the night keeper" }
        ul {
            @for remark in &report.remarks {
                li {
                    (clock(remark.at)) " "
                    strong { (remark.by.as_deref().unwrap_or("nightwright")) }
                    ": " (remark.text)
                }
            }
        }
    }
}

fn weather(report: &NightReport) -> Markup {
    let courses = words::courses(report);
    if courses.is_empty() {
        return html! {};
    }
    let drawn = |course: &Course| {
        let (name, decimals) = words::quantity(course.quantity);
        let caption = html! {
            (name) ": "
            (format!("{:.decimals$}", course.least)) " to "
            (format!("{:.decimals$}", course.greatest)) ", median "
            (format!("{:.decimals$}", course.median))
        };
        figure(&caption, &picture::weather(course, name))
    };
    let figures: Vec<Markup> = courses
        .iter()
        .filter(|c| c.values.len() > 1)
        .map(drawn)
        .collect();
    html! {
        h2 { "Weather" }
        p class="soft" { "Samples as kept, thinned to one in ten minutes while nothing changes." }
        (gallery(&figures))
    }
}
