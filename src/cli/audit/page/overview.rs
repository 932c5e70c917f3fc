//! What the page says of the survey as a whole.

use std::collections::BTreeMap;

use maud::{Markup, html};

use super::fill_of;
use crate::audit::{MonthUse, OwedCause, StarAudit, SurveyAudit, VelocityErrors};
use crate::catalogue::Survey;
use crate::cli::audit::text::{drift, mostly, number, words};
use crate::page::{
    self, Column, Fill, Plot, Scale, Shape, figure, hatch, legend, line, marker, px, svg_text,
};
use crate::record::HoldCause;
use crate::time::{Night, NightDate};

/// Stars told in each short list.
const SHORT_LIST: usize = 5;
/// With fewer visits it is too early to judge what a star can give.
const FEWEST_VISITS: usize = 5;
/// A month's row in the picture of darkness.
const ROW: f64 = 18.0;

/// Everything but the single stars.
pub fn of(survey: &Survey, audit: &SurveyAudit) -> Markup {
    let visits: usize = audit.stars.iter().map(|(_, star)| star.visits).sum();
    let owed: f64 = audit.stars.iter().map(|(_, star)| star.owed).sum();
    let never = audit
        .stars
        .iter()
        .filter(|(_, star)| star.visits == 0)
        .count();
    html! {
        (page::facts(&[
            ("stars", html! { (audit.stars.len()) }),
            ("visits credited", html! { (visits) }),
            ("visits owed", html! { (format!("{owed:.1}")) }),
            ("stars never visited", html! { (never) }),
        ]))
        h2 { "What to decide" }
        (decide(survey, audit))
        h2 { "All stars" }
        (stars(survey, audit))
        h2 { "Where the visits and the darkness went" }
        (page::gallery(&[owed_figure(audit), darkness(&audit.months)]))
        (programmes(audit))
        h2 { "Velocity errors" }
        (errors(survey, audit.errors.as_ref()))
    }
}

fn link(survey: &Survey, star: usize) -> Markup {
    let id = survey.targets[star].id.as_str();
    html! { a href=(format!("#star-{id}")) { (id) } }
}

/// The stars furthest behind, and those that can weigh least.
fn decide(survey: &Survey, audit: &SurveyAudit) -> Markup {
    let mut behind: Vec<&(usize, StarAudit)> = audit.stars.iter().collect();
    behind.sort_by(|a, b| b.1.owed.total_cmp(&a.1.owed));
    let behind: Vec<Vec<Markup>> = behind
        .into_iter()
        .filter(|(_, star)| star.owed > 0.0)
        .take(SHORT_LIST)
        .map(|(star, found)| {
            let share = if found.wanted > 0.0 {
                format!("{:.0} %", 100.0 * found.owed / found.wanted)
            } else {
                "–".to_owned()
            };
            vec![
                link(survey, *star),
                html! { (format!("{:.1}", found.owed)) },
                html! { (share) },
                html! { (mostly(found).map_or("", words)) },
            ]
        })
        .collect();
    let mut blunt: Vec<(usize, &StarAudit, (f64, f64))> = audit
        .stars
        .iter()
        .filter_map(|(star, found)| Some((*star, found, smallest(found)?)))
        .collect();
    blunt.sort_by(|a, b| b.2.1.total_cmp(&a.2.1));
    let blunt: Vec<Vec<Markup>> = blunt
        .into_iter()
        .take(SHORT_LIST)
        .map(|(star, found, (now, promised))| {
            vec![
                link(survey, star),
                html! { (format!("{now:.1}")) },
                html! { (format!("{promised:.1}")) },
                html! { (number(found.earth_irradiation_period_d, 1)) },
                html! { (found.visits) },
            ]
        })
        .collect();
    html! {
        div class="gallery" {
            (page::table(
                "To push: the most visits owed",
                &[
                    Column::words("star"),
                    Column::numbers("owed"),
                    Column::numbers("of wanted"),
                    Column::words("mostly"),
                ],
                &behind,
            ))
            (page::table(
                "To drop, perhaps: even with all wanted visits, the smallest planet found where the \
                 light is as on Earth weighs most (Earth masses, stars with 5 visits or more)",
                &[
                    Column::words("star"),
                    Column::numbers("now"),
                    Column::numbers("with all"),
                    Column::numbers("period, days"),
                    Column::numbers("visits"),
                ],
                &blunt,
            ))
        }
    }
}

/// Smallest minimum mass found where the light is as on Earth: now, and with as many visits as were
/// wanted so far (errors fall with their square root), Earth masses.
fn smallest(found: &StarAudit) -> Option<(f64, f64)> {
    let now = found.at_earth_irradiation.and_then(|at| at.msini_earth)?;
    let visits = found.visits as f64;
    (found.visits >= FEWEST_VISITS).then(|| (now, now * (visits / found.wanted.max(visits)).sqrt()))
}

fn stars(survey: &Survey, audit: &SurveyAudit) -> Markup {
    let columns = [
        Column::words("star"),
        Column::words("programme"),
        Column::numbers("visits"),
        Column::numbers("wanted"),
        Column::numbers("owed"),
        Column::words("mostly"),
        Column::numbers("overdue"),
        Column::numbers("longest gap, d"),
        Column::numbers("best σ(K), m/s"),
        Column::numbers("m sin i found, Earths"),
        Column::numbers("spread, km/s"),
    ];
    let rows: Vec<Vec<Markup>> = audit
        .stars
        .iter()
        .map(|(star, found)| {
            let target = &survey.targets[*star];
            let sigmas = found.candidates.iter().filter_map(|c| c.errors.as_ref());
            let sigma = sigmas.map(|e| e.sigma_k_m_s).min_by(f64::total_cmp);
            let mass = found.at_earth_irradiation.and_then(|at| at.msini_earth);
            vec![
                link(survey, *star),
                html! { (survey.programmes[target.programme].id) },
                html! { (found.visits) },
                html! { (format!("{:.1}", found.wanted)) },
                html! { (format!("{:.1}", found.owed)) },
                html! { (mostly(found).map_or("", words)) },
                html! { (format!("{:.1}", found.overdue)) },
                html! { (number(found.gaps.map(|g| g.longest_d), 1)) },
                html! { (number(sigma, 2)) },
                html! { (number(mass, 1)) },
                html! { (number(found.barycentric.map(|b| b.spread_km_s()), 1)) },
            ]
        })
        .collect();
    html! {
        (page::table(
            "overdue: wanted intervals since the last visit; m sin i found: where the light is as on Earth",
            &columns,
            &rows,
        ))
    }
}

/// Visits owed by cause, one bar a cause.
fn owed_figure(audit: &SurveyAudit) -> Markup {
    let mut total: BTreeMap<OwedCause, f64> = BTreeMap::new();
    for (_, found) in &audit.stars {
        for (cause, part) in &found.owed_by_cause.by_cause {
            *total.entry(*cause).or_default() += part;
        }
    }
    let most = total.values().copied().fold(1e-9, f64::max);
    let (left, width) = (82.0, 230.0);
    let height = 10.0 + ROW * total.len().max(1) as f64;
    let title = "Visits owed, by cause";
    let picture = html! {
        svg class="plot" viewBox=(format!("0 0 360 {}", px(height))) role="img" aria-label=(title) {
            title { (title) }
            @for (row, (cause, part)) in total.iter().enumerate() {
                @let top = 5.0 + ROW * row as f64;
                (svg_text((left - 6.0, top + 11.5), "end", "", words(*cause)))
                (hatch(fill_of(*cause), (left, top + 2.0), (width * part / most, ROW - 5.0)))
                (svg_text((left + width * part / most + 5.0, top + 11.5), "start", "",
                    &format!("{part:.1}")))
            }
        }
    };
    let caption =
        html! { "Visits owed by cause; a debt keeps the cause of the night on which it was due." };
    figure(&caption, &picture)
}

/// Parts of darkness that are told apart in pictures.
const PARTS: [(Fill, &str); 7] = [
    (Fill::Plain, "exposing"),
    (Fill::Level, "overhead"),
    (Fill::Upright, "calibration"),
    (Fill::Rising, "held by weather"),
    (Fill::Crossed, "held by instrument"),
    (Fill::Falling, "held by operator"),
    (Fill::Faint, "idle"),
];

fn parts(month: &MonthUse) -> [i64; 7] {
    let split = &month.split;
    let held = |causes: &[HoldCause]| {
        let ms = causes.iter().filter_map(|cause| split.held_ms.get(cause));
        ms.sum::<i64>()
    };
    [
        split.exposing_ms,
        split.overhead_ms,
        split.calibration_ms,
        held(&[HoldCause::Weather, HoldCause::FeedLost]),
        held(&[HoldCause::Instrument, HoldCause::Ledger]),
        held(&[HoldCause::Operator]),
        split.idle_ms.values().sum(),
    ]
}

/// Each month's darkness, one bar a month.
fn darkness(months: &[MonthUse]) -> Markup {
    let (left, width) = (58.0, 250.0);
    let height = 10.0 + ROW * months.len().max(1) as f64;
    let title = "Use of darkness by month";
    let picture = html! {
        svg class="plot" viewBox=(format!("0 0 360 {}", px(height))) role="img" aria-label=(title) {
            title { (title) }
            @for (row, month) in months.iter().enumerate() {
                @let top = 5.0 + ROW * row as f64;
                @let total = month.split.total_ms().max(1) as f64;
                (svg_text((left - 6.0, top + 11.5), "end", "",
                    &format!("{:04}-{:02}", month.month.0, month.month.1)))
                @for (fill, from, share) in shares(month) {
                    (hatch(fill, (left + width * from, top + 2.0), (width * share, ROW - 5.0)))
                }
                (svg_text((left + width + 5.0, top + 11.5), "start", "",
                    &format!("{:.0} h", total / 3_600_000.0)))
            }
        }
    };
    let caption = html! {
        (legend(&PARTS))
        @if months.is_empty() { "No closed night is on record." }
        @else { "Darkness of each month; the hours are its length." }
    };
    figure(&caption, &picture)
}

/// Fill, start and share of each part of a month that is not empty.
fn shares(month: &MonthUse) -> Vec<(Fill, f64, f64)> {
    let total = month.split.total_ms().max(1) as f64;
    let mut from = 0.0;
    let mut all = Vec::new();
    for ((fill, _), ms) in PARTS.iter().zip(parts(month)) {
        let share = ms as f64 / total;
        if share > 0.0 {
            all.push((*fill, from, share));
        }
        from += share;
    }
    all
}

fn programmes(audit: &SurveyAudit) -> Markup {
    let rows: Vec<Vec<Markup>> = audit
        .programmes
        .iter()
        .map(|programme| {
            vec![
                html! { (programme.programme) },
                html! { (format!("{:.0} %", 100.0 * programme.wanted_share)) },
                html! { (format!("{:.0} %", 100.0 * programme.used_share)) },
                html! { (format!("{:.1}", programme.used_s / 3600.0)) },
                html! { (format!("{:.1}", programme.owed)) },
            ]
        })
        .collect();
    page::table(
        "Programmes: shares of the used time, and visits owed to their stars",
        &[
            Column::words("programme"),
            Column::numbers("wanted"),
            Column::numbers("used"),
            Column::numbers("hours"),
            Column::numbers("owed"),
        ],
        &rows,
    )
}

/// Reported over predicted errors by night, with the nights on which drift is flagged.
fn errors(survey: &Survey, errors: Option<&VelocityErrors>) -> Markup {
    let Some(errors) = errors else {
        return html! { p { "No visit has both a predicted and a reported velocity error." } };
    };
    let (Some(first), Some(last)) = (errors.nights.first(), errors.nights.last()) else {
        return html! {};
    };
    let plot = Plot {
        size: (720.0, 210.0),
        title: "Reported over predicted velocity error, by night",
        x_name: "night",
        y_name: "reported / predicted (median of the night)",
    };
    let middle = |night: NightDate| {
        let span = Night::of(night, survey.site.longitude).span;
        span.start.plus_ms(span.length_ms() / 2)
    };
    let x = Scale::time((middle(first.night), middle(last.night)), plot.across());
    let ratios = || errors.nights.iter().map(|night| night.ratio);
    let low = ratios().fold(0.8, f64::min);
    let high = ratios().fold(1.25, f64::max);
    let y = Scale::linear((low, high), plot.upwards());
    let (left, right) = plot.across();
    let marks = html! {
        (line(&[(left, y.at(errors.ratio)), (right, y.at(errors.ratio))], "line-3"))
        @for night in &errors.nights {
            @let (shape, class) = if night.drifting {
                (Shape::Triangle, "tone-2")
            } else {
                (Shape::Ring, "tone-1")
            };
            (marker(shape, (x.at_time(middle(night.night)), y.at(night.ratio)), 2.6, class,
                &format!("{}: {:.2} over {} visits", night.night, night.ratio, night.visits)))
        }
    };
    let caption = html! {
        (drift(errors)) ". Dotted: the usual ratio; triangles: nights on which the errors have been \
         larger than usual for long or by much (Page's cumulative sum)."
    };
    page::wide_figure(&caption, &plot.svg(&x, &y, &[], &marks))
}
