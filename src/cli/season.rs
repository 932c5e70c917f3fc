//! `season`: what can honestly be promised.

use comfy_table::{CellAlignment, Table, presets};
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::{Value, json};

use crate::season::{Ensemble, SeasonAsk, SeasonError, SeasonResults};

use super::stage::{Stage, stage};
use super::storage::LedgerFile;
use super::views::round;
use super::{Exit, Global, Trouble, output};

/// Nights by default: half a year.
const NIGHTS: u32 = 182;

/// Simulate the season ahead, many times over: what each star gets, and with which odds.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright season --night 2026-12-01 --nights 30 --realisations 20
  nightwright season --nights 182 --realisations 100 --json > season.json

The season starts from the ledger's visits when there is one. Same seed, same answer, on any number
of threads.")]
pub struct Args {
    /// First night (default: tonight)
    #[arg(long, value_name = "DATE")]
    night: Option<String>,
    /// Number of nights
    #[arg(long, value_name = "N", default_value_t = NIGHTS, value_parser = clap::value_parser!(u32).range(1..=3660))]
    nights: u32,
    /// Number of realisations
    #[arg(long, value_name = "R", default_value_t = 20, value_parser = clap::value_parser!(u32).range(1..=100_000))]
    realisations: u32,
    /// Seed of weather and faults
    #[arg(long, value_name = "S", default_value_t = 1)]
    seed: u64,
    /// Threads (default: one a core)
    #[arg(long, value_name = "T", value_parser = clap::value_parser!(u16).range(1..=1024))]
    threads: Option<u16>,
    #[command(flatten)]
    ledger: LedgerFile,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let first = stage.night(args.night.as_deref())?;
    stage.mention_earth_rotation(first.plus_nights(i64::from(args.nights)));
    let visits = stage.visits_before(args.ledger.ledger.as_deref(), first)?;
    let ask = SeasonAsk {
        first,
        nights: args.nights,
        realisations: args.realisations,
        seed: args.seed,
    };
    let ensemble = Ensemble::new(&stage.settings, &stage.observer, ask, &visits)?;
    let bar = progress(u64::from(args.nights) * u64::from(args.realisations));
    let threads = args.threads.map_or(0, usize::from);
    let results = ensemble.run(threads, &|| bar.inc(1))?;
    bar.finish_and_clear();
    if args.json {
        output::print_json(&json_of(&stage, args, &results))?;
    } else {
        output::print(&text_of(&stage, args, &results))?;
    }
    Ok(Exit::Fine)
}

/// Shown on a terminal alone, with the rate and the time left.
fn progress(nights: u64) -> ProgressBar {
    let bar = ProgressBar::new(nights);
    let template = "{wide_bar} {pos}/{len} nights  {per_sec}  {eta} left";
    if let Ok(style) = ProgressStyle::with_template(template) {
        bar.set_style(style);
    }
    bar
}

impl From<SeasonError> for Trouble {
    fn from(error: SeasonError) -> Self {
        let exit = match error {
            SeasonError::Sky(_) => Exit::Misuse,
            SeasonError::Night { .. } | SeasonError::Threads(_) => Exit::Machine,
        };
        Trouble::from_error(exit, &error)
    }
}

fn json_of(stage: &Stage, args: &Args, results: &SeasonResults) -> Value {
    let targets = stage.settings.survey.targets.iter();
    let rows: Vec<Value> = targets
        .zip(&results.targets)
        .map(|(target, result)| {
            json!({
                "target": target.id.as_str(),
                "wanted": round(result.wanted, 3),
                "visits_p10": round(result.visits_p10, 3),
                "visits_p50": round(result.visits_p50, 3),
                "visits_p90": round(result.visits_p90, 3),
                "odds": round(result.odds, 5),
                "odds_error": round(result.odds_error, 5),
            })
        })
        .collect();
    let darkness_ms = results.darkness_ms.max(1) as f64;
    let darkness: serde_json::Map<String, Value> = results
        .split
        .parts()
        .into_iter()
        .map(|(label, ms)| (label, json!(round(ms as f64 / darkness_ms, 6))))
        .collect();
    json!({
        "nights": args.nights,
        "realisations": args.realisations,
        "targets": rows,
        "darkness": darkness,
    })
}

fn text_of(stage: &Stage, args: &Args, results: &SeasonResults) -> String {
    let mut table = Table::new();
    table
        .load_style(presets::NOTHING)
        .set_header(["target", "wanted", "10 %", "50 %", "90 %", "odds", "±"]);
    for (target, result) in stage.settings.survey.targets.iter().zip(&results.targets) {
        table.add_row([
            target.id.to_string(),
            format!("{:.1}", result.wanted),
            format!("{:.1}", result.visits_p10),
            format!("{:.1}", result.visits_p50),
            format!("{:.1}", result.visits_p90),
            format!("{:.0} %", 100.0 * result.odds),
            format!("{:.0}", 100.0 * result.odds_error),
        ]);
    }
    for column in 1..7 {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let mut text = format!(
        "{} nights, {} realisations, seed {}\n\n",
        args.nights, args.realisations, args.seed
    );
    for line in table.lines() {
        text.push_str(line.trim_end());
        text.push('\n');
    }
    text.push_str(
        "\nwanted: what the cadence asks for in these nights · 10, 50, 90 %: visits that so many of\n\
         the realisations stay below · odds: of reaching the wanted number, ± its standard error\n\n",
    );
    let darkness_ms = results.darkness_ms.max(1) as f64;
    text.push_str("Of the darkness\n");
    for (label, ms) in results.split.parts().into_iter().filter(|(_, ms)| *ms > 0) {
        let share = 100.0 * ms as f64 / darkness_ms;
        text.push_str(&format!("  {label:<24} {share:>5.1} %\n"));
    }
    text
}
