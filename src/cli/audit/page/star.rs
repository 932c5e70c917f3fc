//! One star's pictures.

use maud::{Markup, html};

use super::{calendar, dial};
use crate::audit::{DETECTION_SNR, SpectralWindow, StarAudit, SurveyAudit};
use crate::catalogue::Target;
use crate::cli::audit::text::{drift, mostly, number, words};
use crate::page::{self, Plot, Rule, Scale, Shape, figure, line, marker, svg_text};
use crate::score::Standing;

/// Points drawn of a window: more than the picture is wide would not be seen.
const WINDOW_POINTS: usize = 330;

/// The section of the star in a row of the audit.
pub fn of(target: &Target, audit: &SurveyAudit, row: usize, open: bool) -> Markup {
    let (star, standing) = (&audit.stars[row].1, &audit.standings[row]);
    let velocities = &audit.barycentric_km_s[row];
    html! {
        details id=(format!("star-{}", target.id)) open[open] {
            summary { strong { (target.id) } " " (in_short(star)) }
            @if let Some(errors) = star.errors.as_ref().filter(|e| e.drifting_since().is_some()) {
                p class="warn" { (drift(errors)) }
            }
            (page::gallery(&pictures(target, star, (standing, velocities))))
        }
    }
}

fn in_short(star: &StarAudit) -> String {
    let causes = mostly(star).map_or(String::new(), |cause| format!(", mostly {}", words(cause)));
    format!(
        "{} visit{}, {:.1} owed{causes}; overdue {:.1}",
        star.visits,
        if star.visits == 1 { "" } else { "s" },
        star.owed,
        star.overdue
    )
}

fn pictures(
    target: &Target,
    star: &StarAudit,
    (standing, velocities): (&Standing, &[f64]),
) -> Vec<Markup> {
    let mut all = Vec::new();
    if let Some(calendar) = calendar::of(star, standing) {
        let gaps = star.gaps.map_or(String::new(), |gaps| {
            format!(
                "; gaps of {:.1} days (median), {:.1} (longest)",
                gaps.median_d, gaps.longest_d
            )
        });
        all.push(figure(
            &html! { "Nights with visits, and nights on which one was due and none came" (gaps) "." },
            &calendar,
        ));
    }
    for candidate in &star.candidates {
        let errors = candidate.errors.as_ref();
        let caption = html! {
            "Orbit of " (format!("{:.4}", candidate.period_d)) " days: phase clockwise, time outwards, \
             strokes as long as the phase is unsure; the heavy rim is the widest gap ("
            (format!("{:.0}", 100.0 * candidate.coverage.largest_gap)) " %). Kuiper's V "
            (format!("{:.2}", candidate.coverage.evenness.statistic)) ", odds of even phases "
            (format!("{:.2}", candidate.coverage.evenness.p)) ". σ(K) "
            (number(errors.map(|e| e.sigma_k_m_s), 2)) " m/s, σ(m sin i) "
            (number(candidate.mass.map(|m| m.sigma_earth), 2)) " Earth masses."
            @if !candidate.aliases.is_empty() {
                " Not told from "
                @for (index, alias) in candidate.aliases.iter().take(4).enumerate() {
                    @if index > 0 { ", " }
                    (format!("{:.4}", alias.period_d))
                }
                " days."
            }
        };
        all.push(figure(&caption, &dial::of(candidate, &standing.credited)));
    }
    all.extend(smallest(target, star));
    all.extend(star.window.as_ref().map(|window| sampling(star, window)));
    all.extend(barycentre(star, standing, velocities));
    all
}

/// The smallest planet found, against period.
fn smallest(target: &Target, star: &StarAudit) -> Option<Markup> {
    let masses = target.mass_msun.is_some();
    let value = |found: &crate::audit::Sensitivity| {
        if masses {
            found.msini_earth.unwrap_or(f64::NAN)
        } else {
            found.k_m_s
        }
    };
    let (first, last) = (star.sensitivity.first()?, star.sensitivity.last()?);
    let plot = Plot {
        size: (360.0, 230.0),
        title: "Smallest planet that these visits would find, against period",
        x_name: "period, days",
        y_name: if masses {
            "m sin i, Earth masses"
        } else {
            "K, m/s"
        },
    };
    let known: Vec<(f64, f64, f64)> = star
        .candidates
        .iter()
        .filter_map(|candidate| {
            let mass = candidate.mass.filter(|_| masses)?;
            Some((candidate.period_d, mass.msini_earth?, mass.sigma_earth))
        })
        .collect();
    let values = star.sensitivity.iter().map(value);
    let all: Vec<f64> = values
        .chain(known.iter().map(|(_, mass, _)| *mass))
        .collect();
    let low = all.iter().copied().fold(f64::INFINITY, f64::min);
    let high = all.iter().copied().fold(0.0, f64::max);
    let x = Scale::log((first.period_d, last.period_d), plot.across());
    let y = Scale::log((0.8 * low, 1.25 * high), plot.upwards());
    let points: Vec<(f64, f64)> = star
        .sensitivity
        .iter()
        .map(|found| (x.at(found.period_d), y.at(value(found))))
        .collect();
    let rules: Vec<Rule<'_>> = star
        .earth_irradiation_period_d
        .filter(|period| (first.period_d..=last.period_d).contains(period))
        .map(|period| Rule {
            at: x.at(period),
            name: "light as on Earth",
        })
        .into_iter()
        .collect();
    let marks = html! {
        (line(&points, "line-1"))
        @for (period, mass, sigma) in &known {
            (error_bar(x.at(*period), (y.at((mass - sigma).max(0.8 * low)), y.at(mass + sigma))))
            (marker(Shape::Diamond, (x.at(*period), y.at(*mass)), 3.5, "tone-2",
                &format!("candidate at {period:.4} days: {mass:.2} ± {sigma:.2}")))
        }
    };
    let caption = html! {
        "Smallest planet found at " (format!("{DETECTION_SNR:.0}")) " times the error of K, circular orbit"
        @if !known.is_empty() { "; diamonds: candidates with their guessed mass and its error" }
        "."
    };
    Some(figure(&caption, &plot.svg(&x, &y, &rules, &marks)))
}

fn error_bar(x: f64, (from, to): (f64, f64)) -> Markup {
    html! { path class="bar tone-2" d=(format!("M{} {}V{}", page::px(x), page::px(from), page::px(to))) {} }
}

/// The spectral window with its strongest peaks.
fn sampling(star: &StarAudit, window: &SpectralWindow) -> Markup {
    let plot = Plot {
        size: (360.0, 200.0),
        title: "Power of the sampling alone, against frequency",
        x_name: "cycles a day",
        y_name: "power of the window",
    };
    let last = window.power.len().saturating_sub(1) as f64 * window.step_per_day;
    let x = Scale::linear((0.0, last), plot.across());
    let y = Scale::linear((0.0, 1.1), plot.upwards());
    // The highest of each stretch: what a thinner line would hide is what matters here.
    let stretch = window.power.len().div_ceil(WINDOW_POINTS).max(1);
    let points: Vec<(f64, f64)> = window
        .power
        .chunks(stretch)
        .enumerate()
        .map(|(index, powers)| {
            let middle = (index * stretch) as f64 + 0.5 * (powers.len() - 1) as f64;
            let top = powers.iter().copied().fold(0.0, f64::max);
            (x.at(middle * window.step_per_day), y.at(top.min(1.0)))
        })
        .collect();
    let named: Vec<(f64, f64, &str)> = star
        .peaks
        .iter()
        .filter_map(|peak| Some((peak.frequency_per_day, peak.power, peak.name.as_deref()?)))
        .take(4)
        .collect();
    let marks = html! {
        (line(&points, "line-1 thin"))
        @for (index, (frequency, power, name)) in named.iter().enumerate() {
            (marker(Shape::Triangle, (x.at(*frequency), y.at(*power) - 5.0), 3.0, "tone-2",
                &format!("{name}: {power:.2} at {frequency:.4} a day")))
            (svg_text((x.at(*frequency), y.at(*power) - 10.0), "middle", "small",
                &(index + 1).to_string()))
        }
    };
    let caption = html! {
        "Spectral window of the visits: a signal comes back at every peak's distance from itself."
        @for (index, (frequency, power, name)) in named.iter().enumerate() {
            " " (index + 1) ": " (name) " (" (format!("{frequency:.4}")) " a day, power "
            (format!("{power:.2}")) ")."
        }
    };
    figure(&caption, &plot.svg(&x, &y, &[], &marks))
}

/// Barycentric velocity of the visits, through time.
fn barycentre(star: &StarAudit, standing: &Standing, velocities: &[f64]) -> Option<Markup> {
    // One visit shows no spread.
    let range = star.barycentric.filter(|_| standing.credited.len() > 1)?;
    let (first, last) = (standing.credited.first()?, standing.credited.last()?);
    let plot = Plot {
        size: (360.0, 190.0),
        title: "Barycentric velocity of the visits, through time",
        x_name: "date",
        y_name: "barycentric velocity, km/s",
    };
    let x = Scale::time((first.mid, last.mid), plot.across());
    let margin = 0.05 * range.spread_km_s().max(1.0);
    let y = Scale::linear(
        (range.min_km_s - margin, range.max_km_s + margin),
        plot.upwards(),
    );
    let marks = html! {
        @for (visit, velocity) in standing.credited.iter().zip(velocities) {
            (marker(Shape::Ring, (x.at_time(visit.mid), y.at(*velocity)), 2.2, "tone-1", ""))
        }
    };
    let caption = html! {
        "Barycentric velocity: a spread of " (format!("{:.1}", range.spread_km_s()))
        " km/s, " (format!("{:.0}", 100.0 * star.spread_share))
        " % of what is wanted to move the star's lines across those of the air."
    };
    Some(figure(&caption, &plot.svg(&x, &y, &[], &marks)))
}
