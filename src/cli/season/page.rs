//! A season as a page with pictures.

use maud::{Markup, html};

use crate::cli::season::pictures;
use crate::page::{Column, document, facts, figure, gallery, table, wide_figure};
use crate::season::{Difference, Frame, Realised, SeasonResults};

/// Odds that are counted as a promise that can be made.
const LIKELY: f64 = 0.8;

/// The whole page.
pub fn of(
    frame: &Frame,
    (results, all): (&SeasonResults, &[Realised]),
    against: Option<&(String, Difference)>,
) -> String {
    let title = format!("Season from {}, {} nights", frame.first, frame.nights);
    let fans: Vec<Markup> = frame
        .programmes
        .iter()
        .enumerate()
        .map(|(index, programme)| {
            let caption = html! {
                (programme.id) ": credited visits, all stars together. Solid: half of the \
                 realisations stay below; dashed: a tenth; dotted: nine tenths."
            };
            figure(&caption, &pictures::fan(frame, all, index))
        })
        .collect();
    let masses: Vec<Markup> = frame
        .programmes
        .iter()
        .enumerate()
        .map(|(index, programme)| {
            let caption = html! {
                (programme.id) ": smallest planet found, median star. Solid: at the season's end; \
                 dashed: now, where the visits before it suffice."
            };
            figure(&caption, &pictures::masses(frame, results, index))
        })
        .collect();
    let body = html! {
        h1 { (title) }
        p { "Realisations differ in weather, seeing, faults and in what the observatory makes of \
             its visits. Errors are standard errors from their number." }
        (facts(&headlines(results)))
        @if let Some((name, difference)) = against { (comparison(name, difference)) }
        h2 { "Visits as the season goes" }
        (gallery(&fans))
        h2 { "Odds of what is wanted" }
        (wide_figure(
            &html! { "Share of the realisations in which a star gets the visits that its cadence \
                      asks for; stars that cannot be observed are left out." },
            &pictures::ladder(frame, results),
        ))
        h2 { "One realisation, night by night" }
        (wide_figure(
            &html! { "Realisation " (all.first().map_or(0, |r| r.number)) ". Square: a whole visit; \
                      ring: a part of one. Bars above: share of the darkness that was held." },
            &pictures::mosaic(frame, all.first()),
        ))
        h2 { "Price of time" }
        (wide_figure(
            &html! { "Value that an hour is worth while a right ascension stands on the meridian. \
                      Where it is low, new stars have room; an empty cell was not looked at or is \
                      never on the meridian in darkness." },
            &pictures::prices(&results.prices),
        ))
        h2 { "What can be weighed" }
        (gallery(&masses))
        h2 { "Star by star" }
        (stars(frame, results))
        h2 { "Months" }
        (months(results))
        p class="caution" { "This is a simulation of what would be chosen. Whether the observatory may \
            open is decided by its own interlocks, local rules and qualified people." }
    };
    document(&title, &body)
}

fn headlines(results: &SeasonResults) -> Vec<(&'static str, Markup)> {
    let share = |label: &str| {
        let found = results.darkness.iter().find(|(l, _)| l == label);
        100.0 * found.map_or(0.0, |(_, share)| *share)
    };
    let lost: f64 = results
        .darkness
        .iter()
        .filter(|(label, _)| label.starts_with("held_"))
        .map(|(_, share)| 100.0 * share)
        .sum();
    let wanted = || results.targets.iter().filter(|t| t.wanted >= 1.0);
    let likely = wanted().filter(|t| t.odds.value >= LIKELY);
    vec![
        ("Realisations", html! { (results.realisations) }),
        (
            "Stars at 80 % or more",
            html! { (likely.count()) " of " (wanted().count()) },
        ),
        (
            "Exposing",
            html! { (format!("{:.1} %", share("exposing"))) },
        ),
        ("Held", html! { (format!("{lost:.1} %")) }),
        (
            "Worst error of odds",
            html! { (format!("± {:.1} %", 100.0 * results.worst_error())) },
        ),
    ]
}

fn comparison(name: &str, difference: &Difference) -> Markup {
    let columns = [
        Column::words("star"),
        Column::numbers("visits"),
        Column::numbers("against"),
        Column::numbers("change"),
        Column::numbers("±"),
    ];
    let mean = |value: Option<f64>| value.map_or_else(|| "–".to_owned(), |v| format!("{v:.2}"));
    let mut changed: Vec<_> = difference.targets.iter().collect();
    changed.retain(|t| t.difference.value != 0.0);
    changed.sort_by(|a, b| b.difference.value.total_cmp(&a.difference.value));
    let rows: Vec<Vec<Markup>> = changed
        .into_iter()
        .map(|t| {
            vec![
                html! { (t.target) },
                html! { (mean(t.visits)) },
                html! { (mean(t.visits_against)) },
                html! { (format!("{:+.2}", t.difference.value)) },
                html! { (format!("{:.2}", t.difference.error)) },
            ]
        })
        .collect();
    html! {
        h2 { "Against " (name) ", under the same weather" }
        p { (format!(
            "Open time {:+.1} ± {:.1} h; stars that get what is wanted {:+.2} ± {:.2}.",
            difference.exposing_h.value,
            difference.exposing_h.error,
            difference.reached.value,
            difference.reached.error
        )) }
        (table("Credited visits, mean; who wins stands first, stars without any change are left out", &columns, &rows))
    }
}

fn stars(frame: &Frame, results: &SeasonResults) -> Markup {
    let columns = [
        Column::words("star"),
        Column::numbers("wanted"),
        Column::numbers("10 %"),
        Column::numbers("50 %"),
        Column::numbers("90 %"),
        Column::numbers("odds"),
        Column::numbers("longest gap, d"),
        Column::numbers("owed"),
        Column::words("owed most to"),
        Column::numbers("σ(K), m/s"),
        Column::numbers("windows"),
    ];
    let number = |value: &Option<f64>, decimals: usize| {
        value.map_or_else(|| "–".to_owned(), |v| format!("{v:.decimals$}"))
    };
    let rows: Vec<Vec<Markup>> = frame
        .targets
        .iter()
        .zip(&results.targets)
        .map(|(target, result)| {
            let sigmas: Vec<String> = result.sigma_k_m_s.iter().map(|s| number(s, 2)).collect();
            let windows = result.windows.iter();
            let windows: Vec<String> = windows
                .map(|odds| format!("{:.0} %", 100.0 * odds.value))
                .collect();
            let causes = result.owed_by_cause.iter();
            let most = causes.max_by(|a, b| a.1.total_cmp(b.1));
            let most = most.map_or_else(String::new, |(cause, _)| cause.replace('_', " "));
            let odds = (100.0 * result.odds.value, 100.0 * result.odds.error);
            vec![
                html! { (target.id) },
                html! { (format!("{:.1}", result.wanted)) },
                html! { (format!("{:.1}", result.visits_p10)) },
                html! { (format!("{:.1}", result.visits_p50)) },
                html! { (format!("{:.1}", result.visits_p90)) },
                html! { (format!("{:.0} ± {:.0} %", odds.0, odds.1)) },
                html! { (number(&result.longest_gap_p50, 1)) },
                html! { (format!("{:.1}", result.owed)) },
                html! { (most) },
                html! { (sigmas.join(", ")) },
                html! { (windows.join(", ")) },
            ]
        })
        .collect();
    table(
        "Visits in the season, and what they determine at its end",
        &columns,
        &rows,
    )
}

fn months(results: &SeasonResults) -> Markup {
    let columns = [
        Column::words("month"),
        Column::numbers("darkness, h"),
        Column::numbers("lost, h"),
        Column::numbers("exposing, h"),
        Column::numbers("asked for over usable"),
    ];
    let rows: Vec<Vec<Markup>> = results
        .months
        .iter()
        .map(|month| {
            let exposing_h = month.parts_h.first().copied().unwrap_or(0.0);
            vec![
                html! { (month.month) },
                html! { (format!("{:.1}", month.darkness_h)) },
                html! { (format!("{:.1}", month.lost_h)) },
                html! { (format!("{exposing_h:.1}")) },
                html! { (format!("{:.2}", month.oversubscription)) },
            ]
        })
        .collect();
    table("Means over the realisations", &columns, &rows)
}
