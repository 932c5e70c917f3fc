//! A season's figures for the terminal.

use comfy_table::{CellAlignment, Table, presets};

use crate::season::{Difference, Frame, PriceOfTime, SeasonResults};

/// Cells of the price of time that are told: the dearest and the cheapest.
const PRICES_TOLD: usize = 5;
/// A difference of less than so many of its errors is not told.
const TOLD_SIGMAS: f64 = 2.0;

/// Everything that fits.
pub fn of(frame: &Frame, results: &SeasonResults) -> String {
    let mut text = format!(
        "{} nights from {}, {} realisations, seed {}\n\n",
        frame.nights, frame.first, results.realisations, frame.seed
    );
    text.push_str(&targets(frame, results));
    text.push_str(
        "\nwanted: what the cadence asks for in these nights · 10, 50, 90 %: visits that so many of\n\
         the realisations stay below · odds: of reaching the wanted number, ± its standard error ·\n\
         gap: longest, days, median · owed: at the end, mean · σ(K): m/s, median, by candidate\n\n",
    );
    text.push_str(&programmes(frame, results));
    text.push_str("\nOf the darkness\n");
    for (label, share) in results.darkness.iter().filter(|(_, share)| *share > 0.0) {
        text.push_str(&format!("  {label:<24} {:>5.1} %\n", 100.0 * share));
    }
    text.push('\n');
    text.push_str(&months(results));
    text.push_str(&prices(&results.prices));
    text
}

fn targets(frame: &Frame, results: &SeasonResults) -> String {
    let mut table = table(&[
        "target", "wanted", "10 %", "50 %", "90 %", "odds", "±", "gap", "owed", "σ(K)", "windows",
    ]);
    let number = |value: &Option<f64>, decimals: usize| {
        value.map_or_else(|| "–".to_owned(), |v| format!("{v:.decimals$}"))
    };
    for (target, result) in frame.targets.iter().zip(&results.targets) {
        let sigmas: Vec<String> = result.sigma_k_m_s.iter().map(|s| number(s, 2)).collect();
        let windows: Vec<String> = result
            .windows
            .iter()
            .map(|odds| format!("{:.0} %", 100.0 * odds.value))
            .collect();
        table.add_row([
            target.id.clone(),
            format!("{:.1}", result.wanted),
            format!("{:.1}", result.visits_p10),
            format!("{:.1}", result.visits_p50),
            format!("{:.1}", result.visits_p90),
            format!("{:.0} %", 100.0 * result.odds.value),
            format!("{:.0}", 100.0 * result.odds.error),
            number(&result.longest_gap_p50, 1),
            format!("{:.1}", result.owed),
            sigmas.join(" "),
            windows.join(" "),
        ]);
    }
    lines(table)
}

fn programmes(frame: &Frame, results: &SeasonResults) -> String {
    let mut table = table(&["programme", "wanted", "used", "±", "hours"]);
    for (programme, result) in frame.programmes.iter().zip(&results.programmes) {
        table.add_row([
            programme.id.clone(),
            format!("{:.1} %", 100.0 * programme.share_wanted),
            format!("{:.1} %", 100.0 * result.share_used.value),
            format!("{:.1}", 100.0 * result.share_used.error),
            format!("{:.1}", result.hours.value),
        ]);
    }
    lines(table)
}

fn months(results: &SeasonResults) -> String {
    let mut table = table(&[
        "month",
        "darkness, h",
        "lost, h",
        "exposing, h",
        "asked for",
    ]);
    for month in &results.months {
        table.add_row([
            month.month.clone(),
            format!("{:.1}", month.darkness_h),
            format!("{:.1}", month.lost_h),
            format!("{:.1}", month.parts_h.first().copied().unwrap_or(0.0)),
            format!("{:.2}", month.oversubscription),
        ]);
    }
    let mut text = lines(table);
    text.push_str(
        "lost: held or not ours · asked for: hours that the cadences ask for, over those not lost\n",
    );
    text
}

fn prices(prices: &[PriceOfTime]) -> String {
    if prices.is_empty() {
        return String::new();
    }
    let mut sorted: Vec<&PriceOfTime> = prices.iter().collect();
    sorted.sort_by(|a, b| a.price_per_hour.total_cmp(&b.price_per_hour));
    let told = |cells: &[&PriceOfTime]| {
        let cell = |p: &&PriceOfTime| {
            let (month, ra_h) = (&p.month, p.ra_h);
            format!("{month} {ra_h} h ({:.2})", p.price_per_hour)
        };
        cells.iter().map(cell).collect::<Vec<_>>().join(", ")
    };
    let few = sorted.len().min(PRICES_TOLD);
    let cheap = told(&sorted[..few]);
    sorted.reverse();
    let dear = told(&sorted[..few]);
    let body = format!("dearest: {dear}. Cheapest, where new stars have room: {cheap}.");
    format!(
        "\nPrice of an hour by month and right ascension on the meridian\n{}",
        crate::cli::output::wrapped(&body, 2)
    )
}

/// Who wins and who pays.
pub fn difference(name: &str, difference: &Difference) -> String {
    let mut text = format!("\nAgainst {name}, under the same weather\n");
    text.push_str(&format!(
        "  open time {:+.1} ± {:.1} h · targets that reach what is wanted {:+.2} ± {:.2}\n\n",
        difference.exposing_h.value,
        difference.exposing_h.error,
        difference.reached.value,
        difference.reached.error
    ));
    let mut table = table(&["target", "visits", "against", "change", "±", "odds", "±"]);
    let mean = |value: Option<f64>| value.map_or_else(|| "–".to_owned(), |v| format!("{v:.1}"));
    let mut rows = 0;
    for target in &difference.targets {
        let change = target.difference;
        let one_side = target.visits.is_none() || target.visits_against.is_none();
        let told = one_side || change.value.abs() > TOLD_SIGMAS * change.error;
        if !told || (change.value == 0.0 && !one_side) {
            continue;
        }
        rows += 1;
        table.add_row([
            target.target.clone(),
            mean(target.visits),
            mean(target.visits_against),
            format!("{:+.2}", change.value),
            format!("{:.2}", change.error),
            format!("{:+.0} %", 100.0 * target.odds_difference.value),
            format!("{:.0}", 100.0 * target.odds_difference.error),
        ]);
    }
    if rows > 0 {
        text.push_str(&lines(table));
    }
    let rest = difference.targets.len() - rows;
    text.push_str(&format!(
        "{rest} targets change by less than {TOLD_SIGMAS:.0} standard errors\n"
    ));
    text
}

fn table(header: &[&str]) -> Table {
    let mut table = Table::new();
    table
        .load_style(presets::NOTHING)
        .set_header(header.iter().copied());
    for column in 1..header.len() {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    table
}

fn lines(table: Table) -> String {
    let mut text = String::new();
    for line in table.lines() {
        text.push_str(line.trim_end());
        text.push('\n');
    }
    text
}
