//! The pictures of a season.

use maud::{Markup, html};

use crate::audit::quantile;
use crate::page::{Plot, Scale, Shape, line, marker, px, svg_text};
use crate::season::{Frame, PriceOfTime, Realised, SeasonResults};
use crate::time::{DAY_MS, Utc};

/// A picture of ordinary size, units.
const SIZE: (f64, f64) = (360.0, 230.0);
/// A picture that scrolls on a phone, units wide.
const WIDE: f64 = 720.0;
/// Room for a star's name, units.
const NAME: f64 = 84.0;
/// Height of a star's row, units.
const ROW: f64 = 14.0;
/// Right ascensions of the picture of prices.
const HOURS: u32 = 24;

/// Credited visits of a programme against date: 10, 50 and 90 % of the realisations.
pub fn fan(frame: &Frame, all: &[Realised], programme: usize) -> Markup {
    let nights = frame.nights as usize;
    let mut sums: Vec<Vec<f64>> = Vec::new();
    for realised in all {
        let mut by_night = vec![0.0; nights];
        for visit in &realised.visits {
            let target = frame.targets.get(visit.star as usize);
            let mine = target.is_some_and(|t| t.programme == programme);
            if let Some(sum) = by_night.get_mut(visit.night as usize).filter(|_| mine) {
                *sum += visit.credit;
            }
        }
        let mut sum = 0.0;
        let running = by_night.iter().map(|tonight| {
            sum += tonight;
            sum
        });
        sums.push(running.collect());
    }
    let at = |night: usize, q: f64| {
        let mut values: Vec<f64> = sums.iter().filter_map(|s| s.get(night).copied()).collect();
        values.sort_by(f64::total_cmp);
        quantile(&values, q).unwrap_or(0.0)
    };
    let most = at(nights.saturating_sub(1), 0.9).max(1.0);
    let plot = Plot {
        size: SIZE,
        title: "Credited visits against date",
        x_name: "evening",
        y_name: "visits",
    };
    let first = frame.first_night().map_or(Utc::from_unix_ms(0), |night| {
        let midnight = night.date().and_time(chrono::NaiveTime::MIN).and_utc();
        Utc::from_unix_ms(midnight.timestamp_millis())
    });
    let date = |night: usize| first.plus_ms(night as i64 * DAY_MS);
    let x = Scale::time((first, date(nights)), plot.across());
    let y = Scale::linear((0.0, most), plot.upwards());
    let curve = |q: f64, class: &str| {
        let start = std::iter::once((x.at_time(first), y.at(0.0)));
        let rest = (0..nights).map(|night| (x.at_time(date(night + 1)), y.at(at(night, q))));
        line(&start.chain(rest).collect::<Vec<_>>(), class)
    };
    let marks = html! { (curve(0.5, "line-1")) (curve(0.1, "line-2")) (curve(0.9, "line-3")) };
    plot.svg(&x, &y, &[], &marks)
}

/// Smallest planet of a programme's median star against period, now and at the season's end.
pub fn masses(frame: &Frame, results: &SeasonResults, programme: usize) -> Markup {
    let Some(periods) = frame.programmes.get(programme).map(|p| &p.periods_d) else {
        return html! {};
    };
    let median = |index: usize, at_end: bool| {
        let stars = frame.targets.iter().zip(&results.targets);
        let mine = stars.filter(|(target, _)| target.programme == programme);
        let mut masses: Vec<f64> = mine
            .filter_map(|(target, result)| {
                let k = if at_end {
                    &result.smallest_k_m_s
                } else {
                    &target.smallest_k_m_s
                };
                frame.msini_earth(
                    target,
                    *periods.get(index)?,
                    k.get(index).copied().flatten()?,
                )
            })
            .collect();
        masses.sort_by(f64::total_cmp);
        quantile(&masses, 0.5)
    };
    let curve = |at_end: bool| -> Vec<(f64, f64)> {
        let points = periods.iter().enumerate();
        points
            .filter_map(|(index, period)| Some((*period, median(index, at_end)?)))
            .collect()
    };
    let (now, end) = (curve(false), curve(true));
    let values = || now.iter().chain(&end).map(|(_, mass)| *mass);
    let (least, most) = (
        values().fold(f64::INFINITY, f64::min),
        values().fold(0.0, f64::max),
    );
    if most <= 0.0 {
        return html! { p class="soft" { "No star has visits enough to determine an orbit." } };
    }
    let plot = Plot {
        size: SIZE,
        title: "Smallest planet against period",
        x_name: "period, days",
        y_name: "m sin i, Earth masses",
    };
    let ends = (periods.first().copied(), periods.last().copied());
    let x = Scale::log(
        (ends.0.unwrap_or(1.0), ends.1.unwrap_or(10.0)),
        plot.across(),
    );
    let y = Scale::log((least * 0.8, most * 1.25), plot.upwards());
    let placed = |points: &[(f64, f64)]| -> Vec<(f64, f64)> {
        points.iter().map(|(p, m)| (x.at(*p), y.at(*m))).collect()
    };
    let marks = html! {
        @if now.len() > 1 { (line(&placed(&now), "line-2")) }
        @if end.len() > 1 { (line(&placed(&end), "line-1")) }
    };
    plot.svg(&x, &y, &[], &marks)
}

/// Odds star by star, the best first.
pub fn ladder(frame: &Frame, results: &SeasonResults) -> Markup {
    let mut rows: Vec<(&str, f64, f64)> = frame
        .targets
        .iter()
        .zip(&results.targets)
        .filter(|(target, _)| target.wanted >= 1.0)
        .map(|(target, r)| (target.id.as_str(), r.odds.value, r.odds.error))
        .collect();
    rows.sort_by(|a, b| b.1.total_cmp(&a.1));
    let x = Scale::linear((0.0, 1.0), (NAME, WIDE - 60.0));
    let height = 24.0 + ROW * rows.len() as f64;
    html! {
        svg class="plot" viewBox=(format!("0 0 {} {}", px(WIDE), px(height))) role="img"
            aria-label="Odds of the wanted visits, star by star" {
            title { "Odds of the wanted visits, star by star" }
            @for (index, (name, odds, error)) in rows.iter().enumerate() {
                @let top = 4.0 + ROW * index as f64;
                (svg_text((NAME - 6.0, top + 10.5), "end", "", name))
                rect class="solid tone-1" x=(px(x.at(0.0))) y=(px(top + 2.0))
                    width=(px((x.at(*odds) - x.at(0.0)).max(0.8))) height=(px(ROW - 4.0)) {}
                path class="bar ink" d=(format!(
                    "M{} {}H{}",
                    px(x.at((odds - error).max(0.0))),
                    px(top + ROW / 2.0),
                    px(x.at((odds + error).min(1.0)))
                )) {}
                (svg_text(
                    (x.at((odds + error).min(1.0)) + 6.0, top + 10.5),
                    "start",
                    "note",
                    &format!("{:.0} %", 100.0 * odds),
                ))
            }
        }
    }
}

/// Star by night of one realisation.
pub fn mosaic(frame: &Frame, realised: Option<&Realised>) -> Markup {
    let Some(realised) = realised else {
        return html! {};
    };
    let seen: Vec<usize> = (0..frame.targets.len())
        .filter(|star| {
            let mine = |v: &&crate::season::VisitRow| v.star as usize == *star && v.credit > 0.0;
            realised.visits.iter().any(|v| mine(&v))
        })
        .collect();
    let top = 26.0;
    let height = top + ROW * seen.len() as f64 + 20.0;
    let x = Scale::linear((0.0, f64::from(frame.nights)), (NAME, WIDE - 10.0));
    let width = (x.at(1.0) - x.at(0.0)).max(0.5);
    let radius = (width / 2.0).clamp(1.2, 4.0);
    let ticks = x.ticks(8);
    html! {
        svg class="plot" viewBox=(format!("0 0 {} {}", px(WIDE), px(height))) role="img"
            aria-label="Visits of one realisation, star by night" {
            title { "Visits of one realisation, star by night" }
            (svg_text((NAME - 6.0, 16.0), "end", "note", "held"))
            @for (night, use_of) in realised.nights.iter().enumerate() {
                @let held = held_share(use_of);
                @if held > 0.0 {
                    rect class="solid soft" x=(px(x.at(night as f64))) y=(px(20.0 - 16.0 * held))
                        width=(px(width)) height=(px(16.0 * held)) {}
                }
            }
            @for (row, star) in seen.iter().enumerate() {
                @let name = frame.targets.get(*star).map_or("", |t| t.id.as_str());
                @let middle = top + ROW * (row as f64 + 0.5);
                g class="grid" { path d=(format!("M{} {}H{}", px(NAME), px(middle), px(WIDE - 10.0))) {} }
                (svg_text((NAME - 6.0, middle + 3.5), "end", "", name))
                @for visit in realised.visits.iter().filter(|v| v.star as usize == *star && v.credit > 0.0) {
                    @let shape = if visit.credit < 0.999 { Shape::Ring } else { Shape::Square };
                    (marker(shape, (x.at(f64::from(visit.night) + 0.5), middle), radius, "tone-1", ""))
                }
            }
            @for tick in &ticks {
                (svg_text((tick.at, height - 6.0), "middle", "note", &tick.label))
            }
            (svg_text((NAME - 6.0, height - 6.0), "end", "note", "night"))
        }
    }
}

fn held_share(night: &crate::season::NightRealised) -> f64 {
    let labels = crate::record::DarknessSplit::default().parts();
    let held: i64 = labels
        .iter()
        .zip(&night.parts_ms)
        .filter(|((label, _), _)| label.starts_with("held_"))
        .map(|(_, ms)| *ms)
        .sum();
    held as f64 / night.darkness_ms.max(1) as f64
}

/// Month by hour of right ascension; the figure stands in each cell.
pub fn prices(prices: &[PriceOfTime]) -> Markup {
    let mut months: Vec<&str> = prices.iter().map(|p| p.month.as_str()).collect();
    months.dedup();
    let most = prices.iter().map(|p| p.price_per_hour).fold(1e-9, f64::max);
    let (left, wide, tall) = (60.0, (WIDE - 70.0) / f64::from(HOURS), 20.0);
    let height = 24.0 + tall * months.len() as f64;
    html! {
        svg class="plot" viewBox=(format!("0 0 {} {}", px(WIDE), px(height))) role="img"
            aria-label="Price of an hour by month and right ascension" {
            title { "Price of an hour by month and right ascension" }
            @for hour in 0..HOURS {
                (svg_text((left + wide * (f64::from(hour) + 0.5), 12.0), "middle", "note", &format!("{hour} h")))
            }
            @for (row, month) in months.iter().enumerate() {
                @let top = 18.0 + tall * row as f64;
                (svg_text((left - 6.0, top + 14.0), "end", "", month))
                @for cell in prices.iter().filter(|p| p.month == *month) {
                    @let x = left + wide * f64::from(cell.ra_h);
                    rect class="solid tone-2" x=(px(x)) y=(px(top)) width=(px(wide - 1.0))
                        height=(px(tall - 1.0))
                        fill-opacity=(format!("{:.2}", 0.08 + 0.5 * cell.price_per_hour / most)) {}
                    (svg_text((x + wide / 2.0, top + 14.0), "middle", "", &format!("{:.1}", cell.price_per_hour)))
                }
            }
        }
    }
}
