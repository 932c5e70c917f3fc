//! `plan`: the queue of a night, with the reasons.

use std::path::{Path, PathBuf};
use std::time::Instant;

use serde_json::json;

use crate::plan::solve as solver;
use crate::plan::{
    Ask, Calendar, Desk, History, HourPrice, PlanError, Planned, SkyTable, accrual_first,
};
use crate::record::QueueEntry;
use crate::time::NightDate;

use super::stage::{Stage, out_of_range, stage};
use super::{Exit, Global, Trouble, output};
use crate::page::queue::{CSV_HEADER, LeftOutView, VisitView, csv_row, round};

/// Print the queue of a night: which star when and for how long, why, and why the others are not in
/// it.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright plan --night 2026-12-01
  nightwright plan --night 2026-12-01 --json --out tonight.json
  nightwright plan --night 2026-12-01 --problem night.json
  nightwright plan --solve night.json --budget-ms 2000")]
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
    /// Write the night's exact problem to a file, for a solver of your own, instead of planning
    #[arg(long, value_name = "FILE", conflicts_with_all = ["json", "csv", "out"])]
    problem: Option<PathBuf>,
    /// Solve a problem file and print the plan as JSON; no configuration is read
    #[arg(long, value_name = "FILE", conflicts_with_all = ["night", "ledger", "csv", "problem"])]
    solve: Option<PathBuf>,
    /// Longest time for the search, milliseconds (default: planning.budget_ms)
    #[arg(long, value_name = "N")]
    budget_ms: Option<u64>,
    /// Most steps of the search; with the same steps and seed the plan is the same everywhere
    #[arg(long, value_name = "N")]
    budget_steps: Option<u64>,
}

/// Longest time for a problem file without `--budget-ms`, milliseconds.
const SOLVE_MS: u64 = 2000;

/// A night at the desk with its plan.
struct Tonight {
    night: NightDate,
    sky: SkyTable,
    planned: Planned,
    hours: Vec<HourPrice>,
    elapsed_ms: u64,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    if let Some(file) = &args.solve {
        put(args, &solved(args, file)?)?;
        return Ok(Exit::Fine);
    }
    let stage = stage(global)?;
    let night = stage.night(args.night.as_deref())?;
    stage.mention_earth_rotation(night);
    let visits = stage.visits_before(args.ledger.as_deref(), night)?;
    let begun = Instant::now();
    let survey = &stage.settings.survey;
    let observer = &stage.observer;
    let sky = SkyTable::compute(survey, observer, night).map_err(out_of_range)?;
    if sky.slots == 0 {
        return Err(no_darkness(&stage, night));
    }
    let history = History::new(survey, observer, &visits).map_err(out_of_range)?;
    let first = accrual_first(survey, history.first_night(), night);
    let calendar = Calendar::compute(survey, observer, first, night).map_err(out_of_range)?;
    let desk = Desk::new(survey, observer, &calendar, &sky, history);
    let ask = Ask::whole_night(sky.instant(0));
    if let Some(file) = &args.problem {
        let problem = desk.problem(&ask).map_err(refused)?.problem;
        output::write_whole(
            file,
            &format!("{}\n", solver::json::write_problem(&problem)),
        )?;
        return Ok(Exit::Fine);
    }
    let budget_ms = args.budget_ms.unwrap_or(survey.planning.budget_ms);
    let search = search(args, survey.planning.seed);
    let mut going = || (begun.elapsed().as_millis() as u64) < budget_ms;
    let planned = desk.plan(&ask, &search, &mut going).map_err(refused)?;
    let hours = desk.hour_prices(&ask, &planned).map_err(refused)?;
    let elapsed_ms = begun.elapsed().as_millis() as u64;
    let tonight = Tonight {
        night,
        sky,
        planned,
        hours,
        elapsed_ms,
    };
    let text = if args.json {
        format!("{:#}\n", json_of(&tonight))
    } else if args.csv {
        csv_of(&tonight.planned.entries)?
    } else {
        text_of(&stage, &tonight)
    };
    put(args, &text)?;
    Ok(Exit::Fine)
}

fn search(args: &Args, seed: u64) -> solver::Settings {
    solver::Settings {
        seed,
        steps: args.budget_steps.unwrap_or(u64::MAX),
        ..solver::Settings::default()
    }
}

fn put(args: &Args, text: &str) -> Result<(), Trouble> {
    match &args.out {
        None => output::print(text),
        Some(path) => output::write_whole(path, text),
    }
}

fn refused(error: PlanError) -> Trouble {
    Trouble::from_error(Exit::Misuse, &error)
}

fn no_darkness(stage: &Stage, night: NightDate) -> Trouble {
    let limit = stage.settings.survey.planning.darkness_sun_altitude.deg();
    Trouble::misuse(format!(
        "the night {night} has no darkness, so there is nothing to plan"
    ))
    .hint(format!(
        "the sun must go below {limit:.0} degrees (planning.darkness_sun_altitude_deg); \
             `nightwright sky` shows the night"
    ))
}

/// The plan of a problem file, as JSON.
fn solved(args: &Args, file: &Path) -> Result<String, Trouble> {
    let shown = file.display();
    let text = std::fs::read_to_string(file).map_err(|error| {
        let message = format!("the problem {shown} cannot be read");
        match error.kind() {
            std::io::ErrorKind::NotFound | std::io::ErrorKind::InvalidData => {
                Trouble::misuse(message).because(&error)
            }
            _ => Trouble::machine(message).because(&error),
        }
    })?;
    let problem = solver::json::read_problem(&text).map_err(|error| {
        Trouble::misuse(format!("{shown} cannot be solved"))
            .because(&error)
            .hint("`nightwright plan --problem FILE` writes a file of this format")
    })?;
    let begun = Instant::now();
    let budget_ms = args.budget_ms.unwrap_or(match args.budget_steps {
        Some(_) => u64::MAX,
        None => SOLVE_MS,
    });
    let mut going = || (begun.elapsed().as_millis() as u64) < budget_ms;
    let solution = solver::solve(&problem, &search(args, 1), None, &mut going)
        .map_err(|error| Trouble::from_error(Exit::Misuse, &error))?;
    let elapsed_ms = begun.elapsed().as_millis() as u64;
    Ok(format!(
        "{}\n",
        solver::json::write_solution(&solution, elapsed_ms)
    ))
}

fn json_of(tonight: &Tonight) -> serde_json::Value {
    let planned = &tonight.planned;
    let visits: Vec<VisitView> = planned.entries.iter().map(VisitView::from).collect();
    let left_out: Vec<LeftOutView> = planned.left_out.iter().map(LeftOutView::from).collect();
    let hours: Vec<serde_json::Value> = tonight
        .hours
        .iter()
        .map(|hour| json!({"start": hour.start.to_string(), "value": round(hour.value, 4)}))
        .collect();
    json!({
        "night": tonight.night.to_string(),
        "planner": {
            "value": round(planned.value, 4),
            "bound": planned.bound.map(|bound| round(bound, 4)),
            "steps": planned.steps,
            "elapsed_ms": tonight.elapsed_ms,
        },
        "price_by_hour": hours,
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

fn text_of(stage: &Stage, tonight: &Tonight) -> String {
    let (night, planned) = (tonight.night, &tonight.planned);
    let mut text = format!("Night {night}, {}\n", stage.settings.survey.site.name);
    if let Some(span) = tonight.sky.darkness {
        let hours = span.length_ms() as f64 / 3_600_000.0;
        text.push_str(&format!(
            "Dark from {} to {} UTC ({hours:.1} h){}\n",
            clock(span.start),
            clock(span.end),
            if tonight.sky.ours { "" } else { ", not ours" }
        ));
    }
    text.push_str(&format!("{}\n", worth(planned, tonight.elapsed_ms)));
    if !planned.entries.is_empty() {
        text.push_str(&format!("\n{}", queue_lines(&planned.entries)));
        text.push_str(&format!("\n{}", hour_lines(&tonight.hours)));
    }
    if !planned.left_out.is_empty() {
        text.push_str(&format!(
            "\nNot in the queue ({}):\n",
            planned.left_out.len()
        ));
        for left_out in &planned.left_out {
            let because = output::wrapped(&left_out.because, 15);
            text.push_str(&format!(
                "  {:<12} {}",
                left_out.target,
                because.trim_start()
            ));
        }
    }
    text
}

/// What each hour is worth, with a bar against the dearest.
fn hour_lines(hours: &[HourPrice]) -> String {
    let dearest = hours.iter().map(|hour| hour.value).fold(0.0, f64::max);
    let mut text =
        "Price of telescope time: what the night would lose without the hour\n".to_owned();
    for hour in hours {
        let bar = (40.0 * hour.value / dearest.max(f64::MIN_POSITIVE)).round() as usize;
        let line = format!(
            " {}  {:>6.2}  {}",
            clock(hour.start),
            hour.value,
            "▪".repeat(bar)
        );
        text.push_str(&format!("{}\n", line.trim_end()));
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

/// The queue in lines; each visit's reason stands under it.
pub fn queue_lines(entries: &[QueueEntry]) -> String {
    let mut text = format!(
        " start  end    {:<12} {:<13} {:>7} {:>4} {:>5} {:>6}\n",
        "target", "exposures", "airmass", "alt°", "moon°", "value"
    );
    for entry in entries {
        let number = |value: Option<f64>, decimals: usize| {
            value.map_or("–".to_owned(), |v| format!("{v:.decimals$}"))
        };
        let exposures = format!(
            "{} × {:.0} s",
            entry.exposures.count, entry.exposures.seconds
        );
        text.push_str(&format!(
            " {}  {}  {:<12} {exposures:<13} {:>7} {:>4} {:>5} {:>6.2}\n",
            clock(entry.start),
            clock(entry.end),
            entry.subject,
            number(entry.airmass, 2),
            number(entry.altitude_deg, 0),
            number(entry.moon_separation_deg, 0),
            entry.value.total,
        ));
        text.push_str(&output::wrapped(&entry.because, 15));
    }
    text
}

/// Hours and minutes of an instant, UTC.
pub fn clock(at: crate::time::Utc) -> String {
    at.to_string().get(11..16).unwrap_or("?").to_owned()
}
