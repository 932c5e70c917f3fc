//! `plan`: the queue of a night, with the reasons.

use std::path::PathBuf;
use std::time::Instant;

use comfy_table::{CellAlignment, Table, presets};
use serde_json::json;

use crate::plan::solve::Settings as Search;
use crate::plan::{Ask, Calendar, Desk, History, Planned, SkyTable};
use crate::record::QueueEntry;
use crate::time::NightDate;

use super::stage::{Stage, out_of_range, stage};
use super::views::{CSV_HEADER, LeftOutView, VisitView, csv_row, round};
use super::{Exit, Global, Trouble, output};

/// Print the queue of a night: which star when and for how long, why, and why the others are not in
/// it.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright plan --night 2026-12-01
  nightwright plan --night 2026-12-01 --json --out tonight.json")]
pub struct Args {
    /// Date of the night's evening at the site (default: tonight)
    #[arg(long, value_name = "DATE")]
    night: Option<String>,
    /// Ledger with the visits so far (default: the configured one; a missing one is empty)
    #[arg(long, value_name = "FILE")]
    ledger: Option<PathBuf>,
    /// Print JSON
    #[arg(long, conflicts_with = "csv")]
    json: bool,
    /// Print the visits as CSV
    #[arg(long)]
    csv: bool,
    /// Write to a file, whole or not at all, instead of standard output
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
    /// Longest time for the search, milliseconds (default: planning.budget_ms)
    #[arg(long, value_name = "N")]
    budget_ms: Option<u64>,
    /// Most steps of the search; with the same steps and seed the plan is the same everywhere
    #[arg(long, value_name = "N")]
    budget_steps: Option<u64>,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let night = stage.night(args.night.as_deref())?;
    stage.mention_earth_rotation(night);
    let visits = stage.visits_before(args.ledger.as_deref(), night)?;
    let begun = Instant::now();
    let (sky, planned) = tonight(&stage, args, night, &visits)?;
    let elapsed_ms = begun.elapsed().as_millis() as u64;
    let text = if args.json {
        format!("{:#}\n", json_of(night, &planned, elapsed_ms))
    } else if args.csv {
        csv_of(&planned.entries)?
    } else {
        text_of(&stage, night, &sky, &planned, elapsed_ms)
    };
    match &args.out {
        None => output::print(&text)?,
        Some(path) => output::write_whole(path, &text)?,
    }
    Ok(Exit::Fine)
}

fn tonight(
    stage: &Stage,
    args: &Args,
    night: NightDate,
    visits: &[crate::record::Visit],
) -> Result<(SkyTable, Planned), Trouble> {
    let survey = &stage.settings.survey;
    let observer = &stage.observer;
    let sky = SkyTable::compute(survey, observer, night).map_err(out_of_range)?;
    let history = History::new(survey, observer, visits).map_err(out_of_range)?;
    let first = crate::plan::accrual_first(survey, history.first_night(), night);
    let calendar = Calendar::compute(survey, observer, first, night).map_err(out_of_range)?;
    let desk = Desk::new(survey, observer, &calendar, &sky, history);
    let ask = Ask::whole_night(sky.instant(0));
    let budget_ms = args.budget_ms.unwrap_or(survey.planning.budget_ms);
    let search = Search {
        seed: survey.planning.seed,
        steps: args.budget_steps.unwrap_or(u64::MAX),
        ..Search::default()
    };
    let begun = Instant::now();
    let planned = desk
        .plan(&ask, &search, &mut || {
            (begun.elapsed().as_millis() as u64) < budget_ms
        })
        .map_err(|error| Trouble::from_error(Exit::Misuse, &error))?;
    Ok((sky, planned))
}

fn json_of(night: NightDate, planned: &Planned, elapsed_ms: u64) -> serde_json::Value {
    let visits: Vec<VisitView> = planned.entries.iter().map(VisitView::from).collect();
    let left_out: Vec<LeftOutView> = planned.left_out.iter().map(LeftOutView::from).collect();
    json!({
        "night": night.to_string(),
        "planner": {
            "value": round(planned.value, 4),
            "bound": planned.bound.map(|bound| round(bound, 4)),
            "steps": planned.steps,
            "elapsed_ms": elapsed_ms,
        },
        "visits": visits,
        "left_out": left_out,
    })
}

fn csv_of(entries: &[QueueEntry]) -> Result<String, Trouble> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    let broken = |error: csv::Error| Trouble::machine("the CSV cannot be made").because(&error);
    writer.write_record(CSV_HEADER).map_err(broken)?;
    for entry in entries {
        writer.write_record(csv_row(entry)).map_err(broken)?;
    }
    let bytes = writer
        .into_inner()
        .map_err(|error| Trouble::machine("the CSV cannot be made").because(error.error()))?;
    Ok(String::from_utf8_lossy(&bytes).into_owned())
}

fn text_of(
    stage: &Stage,
    night: NightDate,
    sky: &SkyTable,
    planned: &Planned,
    elapsed_ms: u64,
) -> String {
    let mut text = format!("Night {night}, {}\n", stage.settings.survey.site.name);
    match sky.darkness {
        None => text.push_str("No darkness: the sun stays too high all night.\n"),
        Some(span) => {
            let hours = span.length_ms() as f64 / 3_600_000.0;
            text.push_str(&format!(
                "Dark from {} to {} UTC ({hours:.1} h){}\n",
                clock(span.start),
                clock(span.end),
                if sky.ours { "" } else { ", not ours" }
            ));
        }
    }
    text.push_str(&format!("{}\n", worth(planned, elapsed_ms)));
    if !planned.entries.is_empty() {
        text.push_str(&format!("\n{}\n", queue_table(&planned.entries)));
    }
    if !planned.left_out.is_empty() {
        text.push_str(&format!(
            "\nNot in the queue ({}):\n",
            planned.left_out.len()
        ));
        for left_out in &planned.left_out {
            text.push_str(&format!("  {:<12} {}\n", left_out.target, left_out.because));
        }
    }
    text
}

/// One line on value, bound and gap.
fn worth(planned: &Planned, elapsed_ms: u64) -> String {
    let proof = match planned.bound {
        Some(bound) if bound > 0.0 => format!(
            ", at most {bound:.2} was to be had: within {:.2} % of the best",
            100.0 * (bound - planned.value).max(0.0) / bound
        ),
        _ => String::new(),
    };
    format!("Worth {:.2}{proof} ({elapsed_ms} ms)", planned.value)
}

/// The queue as a table; each visit's reason stands under it.
pub fn queue_table(entries: &[QueueEntry]) -> Table {
    let mut table = Table::new();
    table.load_style(presets::NOTHING).set_header([
        "start",
        "end",
        "target",
        "exposures",
        "airmass",
        "alt",
        "moon",
        "value",
        "because",
    ]);
    for entry in entries {
        let number = |value: Option<f64>, decimals: usize| {
            value.map_or("–".to_owned(), |v| format!("{v:.decimals$}"))
        };
        table.add_row([
            clock(entry.start),
            clock(entry.end),
            entry.subject.to_string(),
            format!(
                "{} × {:.0} s",
                entry.exposures.count, entry.exposures.seconds
            ),
            number(entry.airmass, 2),
            number(entry.altitude_deg, 0),
            number(entry.moon_separation_deg, 0),
            format!("{:.2}", entry.value.total),
            entry.because.clone(),
        ]);
    }
    for column in [4, 5, 6, 7] {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    table
}

/// Hours and minutes of an instant, UTC.
pub fn clock(at: crate::time::Utc) -> String {
    at.to_string().get(11..16).unwrap_or("?").to_owned()
}
