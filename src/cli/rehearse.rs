//! `rehearse`: whole nights in an invented world, with the real planner and night keeper.

use std::path::PathBuf;

use serde_json::{Value, json};

use crate::ephemeris::darkness;
use crate::ledger::SqliteLedger;
use crate::night::{NightReport, NightRules};
use crate::plan::solve::Settings as Search;
use crate::plan::{Calendar, Desk, History, SkyTable};
use crate::ports::Ledger;
use crate::record::NightSummary;
use crate::report::{Heading, text};
use crate::sim::{RehearsalError, World, rehearse_night};
use crate::time::{Night, NightDate};

use super::pace::Pace;
use super::replay::Replay;
use super::stage::{Stage, out_of_range, stage};
use super::{Exit, Global, Trouble, output};

/// Steps of the planner for each queue: counted, not timed, so that a rehearsal can be repeated.
const STEPS: u64 = 1500;

/// Rehearse nights: the real planner and night keeper against a simulated observatory and weather.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright rehearse --night 2026-12-01 --nights 2 --ledger rehearsal.sqlite")]
pub struct Args {
    /// Date of the first night's evening at the site (default: tonight)
    #[arg(long, value_name = "DATE")]
    night: Option<String>,
    /// Number of nights
    #[arg(long, value_name = "N", default_value_t = 1)]
    nights: u32,
    /// Seed of weather and faults
    #[arg(long, value_name = "N", default_value_t = 1)]
    seed: u64,
    /// Ledger to write to (default: none is kept)
    #[arg(long, value_name = "FILE")]
    ledger: Option<PathBuf>,
    /// Invented seconds in a real one, to look on as it happens (default: as fast as it goes)
    #[arg(long, value_name = "X", value_parser = speed)]
    speed: Option<f64>,
    /// Recorded weather to replay in place of a drawn one: a CSV file, its columns mapped in
    /// night.toml under [recorded_weather]
    #[arg(long, value_name = "FILE")]
    weather: Option<PathBuf>,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

fn speed(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(speed) if speed > 0.0 && speed.is_finite() => Ok(speed),
        _ => Err("must be a number above 0, as 60 for a minute in a second".to_owned()),
    }
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let first = stage.night(args.night.as_deref())?;
    some_darkness(&stage, first, args.nights)?;
    let replay = match &args.weather {
        Some(path) => Some(Replay::read(path, &stage)?),
        None => None,
    };
    let mut ledger = match &args.ledger {
        Some(path) => SqliteLedger::open_exclusive(path),
        None => SqliteLedger::in_memory(),
    }?;
    let rules = NightRules::for_survey(stage.settings.weather.clone(), &stage.settings.survey);
    let mut world = World::new(args.seed, 0, stage.settings.climate.clone(), rules);
    let mut summaries = Vec::new();
    let mut pace = Pace::new(args.nights, args.speed);
    for index in 0..i64::from(args.nights) {
        let date = first.plus_nights(index);
        if let Some(replay) = &replay {
            world.recorded = Some(replay.night(date, &pace)?);
        }
        let summary = one_night(&stage, &mut world, &mut ledger, &mut pace, date)?;
        if !args.json {
            let gap = if index > 0 { "\n" } else { "" };
            let told = told(&stage, &ledger, date)?;
            pace.aside(|| output::print(&format!("{gap}{told}")))?;
        }
        summaries.push(json_of(&summary));
    }
    if args.json {
        output::print_json(&Value::Array(summaries))?;
    }
    Ok(Exit::Fine)
}

/// A night without darkness among others is a night of the record; when all are, the person meant
/// another date or has the wrong site.
fn some_darkness(stage: &Stage, first: NightDate, nights: u32) -> Result<(), Trouble> {
    let survey = &stage.settings.survey;
    let limit = survey.planning.darkness_sun_altitude;
    for index in 0..i64::from(nights) {
        let night = Night::of(first.plus_nights(index), survey.site.longitude);
        let dark = darkness(&stage.observer, night, limit).map_err(out_of_range)?;
        if dark.is_some() {
            return Ok(());
        }
    }
    let which = match nights {
        0 => "no night is asked for".to_owned(),
        1 => format!("the night {first} has no darkness"),
        _ => format!("none of the {nights} nights from {first} has darkness"),
    };
    Err(Trouble::misuse(format!("{which}, so there is nothing to rehearse")).hint(format!(
        "the sun must go below {:.0} degrees (planning.darkness_sun_altitude_deg); `nightwright sky` \
         shows the night",
        limit.deg()
    )))
}

fn one_night(
    stage: &Stage,
    world: &mut World,
    ledger: &mut SqliteLedger,
    pace: &mut Pace,
    date: NightDate,
) -> Result<NightSummary, Trouble> {
    pace.begin(date);
    let survey = &stage.settings.survey;
    let observer = &stage.observer;
    ledger.keep_targets(date, survey)?;
    let visits = ledger.visits(Some(date.plus_nights(-1)))?;
    let sky = SkyTable::compute(survey, observer, date).map_err(out_of_range)?;
    let history = History::new(survey, observer, &visits).map_err(out_of_range)?;
    let accrual = crate::plan::accrual_first(survey, history.first_night(), date);
    let calendar = Calendar::compute(survey, observer, accrual, date).map_err(out_of_range)?;
    let desk = Desk::new(survey, observer, &calendar, &sky, history);
    let search = Search {
        seed: survey.planning.seed,
        steps: STEPS,
        ..Search::default()
    };
    rehearse_night(world, (&desk, &sky), &search, ledger, pace).map_err(trouble_of)
}

/// A planner's refusal lies in what it was given, all else in the machine or the program.
fn trouble_of(error: RehearsalError) -> Trouble {
    match error {
        RehearsalError::Plan(error) => Trouble::from_error(Exit::Misuse, &error),
        RehearsalError::Night(fault) => Trouble::from_error(Exit::Machine, &fault),
    }
}

fn json_of(summary: &NightSummary) -> Value {
    let split: serde_json::Map<String, Value> = summary
        .split
        .parts()
        .into_iter()
        .map(|(label, ms)| (label, json!(ms)))
        .collect();
    let visits = &summary.visits;
    json!({
        "night": summary.night.to_string(),
        "darkness_ms": summary.darkness.map_or(0, |span| span.length_ms()),
        "split_ms": split,
        "visits": {
            "done": visits.done,
            "short": visits.short,
            "lost": visits.lost,
            "refused": visits.refused,
            "unreported": visits.unreported,
        },
    })
}

/// The night's report, as the daemon writes it.
fn told(stage: &Stage, ledger: &SqliteLedger, date: NightDate) -> Result<String, Trouble> {
    let survey = &stage.settings.survey;
    let facts = ledger.facts(date)?;
    let heading = Heading {
        survey: &survey.name,
        site: &survey.site.name,
    };
    let report = NightReport::from_facts(&facts, &survey.allocation.blocked);
    Ok(report.map_or_else(String::new, |report| text(&report, &heading)))
}
