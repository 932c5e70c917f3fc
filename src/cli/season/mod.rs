//! `season`: what can honestly be promised.

#[cfg(feature = "parquet")]
mod columns;
mod edit;
mod json;
mod page;
mod pictures;
mod text;

use std::path::{Path, PathBuf};

use indicatif::{ProgressBar, ProgressStyle};

use crate::ephemeris::Observer;
use crate::record::Visit;
use crate::season::{
    Difference, Effort, Ensemble, Frame, Realised, SeasonAsk, SeasonError, SeasonResults, Store,
    StoreError, shard,
};
use crate::settings::Settings;
use crate::sim::Record;

use super::replay::Replay;
use super::stage::{Stage, stage};
use super::storage::LedgerFile;
use super::{Exit, Global, Trouble, output};
use edit::Edits;

/// Nights by default: half a year.
const NIGHTS: u32 = 182;

/// Simulate the season ahead, many times over: what each star gets, and with which odds.
#[derive(Debug, clap::Args)]
#[command(
    args_conflicts_with_subcommands = true,
    after_help = "Example:
  nightwright season --night 2026-12-01 --nights 30 --realisations 20
  nightwright season --without KR0016-56 --set target.KR0016-15.weight=2
  nightwright season --realisations 400 --shard 3/8 --out season-a
  nightwright season merge season-a

The season starts from the ledger's visits when there is one. Same seed, same answer, on any number
of threads. An edit, or --against, runs both scenarios under the same weather and tells what
changes. With --out an interrupted season goes on where it was when the same command is given again."
)]
pub struct Args {
    #[command(subcommand)]
    also: Option<Also>,
    /// First night (default: tonight)
    #[arg(long, value_name = "DATE")]
    night: Option<String>,
    /// Number of nights
    #[arg(long, value_name = "N", default_value_t = NIGHTS, value_parser = clap::value_parser!(u32).range(1..=3660))]
    nights: u32,
    /// Number of realisations
    #[arg(long, value_name = "R", default_value_t = 20, value_parser = clap::value_parser!(u32).range(1..=100_000))]
    realisations: u32,
    /// Stop before the last realisation once no star's odds are less certain than this (0.05: five
    /// in a hundred); looked at after every 24
    #[arg(long, value_name = "E", value_parser = error_wanted)]
    until_error: Option<f64>,
    /// Seed of weather and faults
    #[arg(long, value_name = "S", default_value_t = 1)]
    seed: u64,
    /// Threads (default: one a core)
    #[arg(long, value_name = "T", value_parser = clap::value_parser!(u16).range(1..=1024))]
    threads: Option<u16>,
    #[command(flatten)]
    edits: Edits,
    /// Compare with this configuration folder under the same weather
    #[arg(long, value_name = "DIR")]
    against: Option<PathBuf>,
    /// Recorded weather in place of a drawn one, in blocks of five nights from about the same time
    /// of the year: a CSV file, its columns mapped in night.toml under [recorded_weather]
    #[arg(long, value_name = "FILE")]
    weather: Option<PathBuf>,
    /// Keep every ended realisation in this folder, and take those that are there
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Run one part in so many of the realisations, as 3/8; `season merge` puts them together
    #[arg(long, value_name = "K/N", value_parser = shard_of, requires = "out", conflicts_with_all = ["against", "until_error"])]
    shard: Option<(u32, u32)>,
    #[command(flatten)]
    ledger: LedgerFile,
    #[command(flatten)]
    faces: Faces,
}

/// How the figures are shown.
#[derive(Debug, clap::Args)]
struct Faces {
    /// Print JSON
    #[arg(long)]
    json: bool,
    /// Write a page with pictures that needs nothing but itself
    #[arg(long, value_name = "FILE")]
    html: Option<PathBuf>,
    /// Write every visit of every realisation as a Parquet file (in a program built with
    /// --features parquet)
    #[arg(long, value_name = "FILE")]
    parquet: Option<PathBuf>,
}

/// What can be done with a season besides running it.
#[derive(Debug, clap::Subcommand)]
enum Also {
    /// Put the realisations of one season together from the folders that they were kept in.
    Merge {
        /// Folders given to --out
        #[arg(required = true, value_name = "DIR")]
        folders: Vec<PathBuf>,
        #[command(flatten)]
        faces: Faces,
    },
}

fn error_wanted(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(error) if error > 0.0 && error < 1.0 => Ok(error),
        _ => Err("must be a number between 0 and 1, as 0.05".to_owned()),
    }
}

fn shard_of(text: &str) -> Result<(u32, u32), String> {
    let parts = text.split_once('/');
    let read = parts.and_then(|(k, n)| Some((k.parse().ok()?, n.parse().ok()?)));
    match read {
        Some((k, n)) if 1 <= k && k <= n => Ok((k, n)),
        _ => Err("must be K/N with K from 1 to N, as 3/8".to_owned()),
    }
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    if let Some(Also::Merge { folders, faces }) = &args.also {
        refuse_columns(faces)?;
        let (frame, all) = Store::merge(folders)?;
        show(faces, &frame, &all, None)?;
        return Ok(Exit::Fine);
    }
    refuse_columns(&args.faces)?;
    let plain = stage(global)?;
    let first = plain.night(args.night.as_deref())?;
    plain.mention_earth_rotation(first.plus_nights(i64::from(args.nights)));
    let visits = plain.visits_before(args.ledger.ledger.as_deref(), first)?;
    let replay = match &args.weather {
        Some(path) => Some(Replay::read(path, &plain)?),
        None => None,
    };
    let job = Job {
        args,
        ask: SeasonAsk {
            first,
            nights: args.nights,
            seed: args.seed,
        },
        visits: &visits,
        record: replay.as_ref().map(Replay::record),
        bar: progress(args),
    };
    let edited = match args.edits.is_empty() {
        true => None,
        false => Some(args.edits.settings(&global.config)?),
    };
    let settings = edited.as_ref().unwrap_or(&plain.settings);
    let (frame, all) = job.run(settings, args.out.as_deref())?;
    let other = match (&args.against, &edited, args.shard) {
        (_, _, Some(_)) => None,
        (Some(folder), _, _) => Some((folder.display().to_string(), other(folder)?)),
        (None, Some(_), _) => Some((global.config.display().to_string(), plain)),
        (None, None, _) => None,
    };
    let against = match other {
        Some((name, other)) => {
            let kept = args.out.as_ref().map(|out| out.join("against"));
            let (base, others) = job.run(&other.settings, kept.as_deref())?;
            let difference = Difference::of((&frame, &all), (&base, &others));
            Some((name, difference))
        }
        None => None,
    };
    job.bar.finish_and_clear();
    show(&args.faces, &frame, &all, against.as_ref())?;
    Ok(Exit::Fine)
}

fn other(folder: &Path) -> Result<Stage, Trouble> {
    stage(&Global {
        config: folder.to_owned(),
    })
}

/// What the scenarios of one command have in common.
struct Job<'a> {
    args: &'a Args,
    ask: SeasonAsk,
    visits: &'a [Visit],
    record: Option<&'a Record>,
    bar: ProgressBar,
}

impl Job<'_> {
    fn run(
        &self,
        settings: &Settings,
        out: Option<&Path>,
    ) -> Result<(Frame, Vec<Realised>), Trouble> {
        let observer: Observer = settings.observer();
        let here = (settings, &observer);
        let ensemble = Ensemble::new(here, self.ask.clone(), self.visits, self.record)?;
        let store = match out {
            Some(folder) => Some(Store::open(folder, ensemble.frame())?),
            None => None,
        };
        let (number, of) = self.args.shard.unwrap_or((1, 1));
        let effort = Effort {
            numbers: shard(self.args.realisations, number, of),
            threads: self.args.threads.map_or(0, usize::from),
            until_error: self.args.until_error,
        };
        let all = ensemble.run(&effort, store.as_ref(), &|nights| self.bar.inc(nights))?;
        Ok((ensemble.frame().clone(), all))
    }
}

fn show(
    faces: &Faces,
    frame: &Frame,
    all: &[Realised],
    against: Option<&(String, Difference)>,
) -> Result<(), Trouble> {
    let results = SeasonResults::of(frame, all);
    if let Some(path) = &faces.html {
        output::write_whole(path, &page::of(frame, (&results, all), against))?;
    }
    if let Some(path) = &faces.parquet {
        write_columns(path, frame, all)?;
    }
    if faces.json {
        let mut value = json::of(frame, &results);
        if let Some((name, difference)) = against {
            value["comparison"] = json::difference(name, difference);
        }
        return output::print_json(&value);
    }
    let mut text = text::of(frame, &results);
    if let Some((name, difference)) = against {
        text.push_str(&text::difference(name, difference));
    }
    output::print(&text)
}

#[cfg(feature = "parquet")]
fn write_columns(path: &Path, frame: &Frame, all: &[Realised]) -> Result<(), Trouble> {
    columns::write(path, frame, all)
}

#[cfg(not(feature = "parquet"))]
fn write_columns(_: &Path, _: &Frame, _: &[Realised]) -> Result<(), Trouble> {
    // Refused before the run, see `refuse_columns`.
    Ok(())
}

/// Told before a long run, not after it.
fn refuse_columns(faces: &Faces) -> Result<(), Trouble> {
    match &faces.parquet {
        Some(path) if !cfg!(feature = "parquet") => {
            let message = format!(
                "{} cannot be written: this program has no Parquet",
                path.display()
            );
            Err(Trouble::misuse(message)
                .hint("build it with `cargo build --release --features parquet`"))
        }
        _ => Ok(()),
    }
}

/// Shown on a terminal alone, with the rate and the time left.
fn progress(args: &Args) -> ProgressBar {
    let (number, of) = args.shard.unwrap_or((1, 1));
    let realisations = shard(args.realisations, number, of).len() as u64;
    let two = args.against.is_some() || (!args.edits.is_empty() && args.shard.is_none());
    let scenarios = if two { 2 } else { 1 };
    let bar = ProgressBar::new(u64::from(args.nights) * realisations * scenarios);
    let template = "{wide_bar} {pos}/{len} nights  {per_sec}  {eta} left";
    if let Ok(style) = ProgressStyle::with_template(template) {
        bar.set_style(style);
    }
    bar
}

impl From<SeasonError> for Trouble {
    fn from(error: SeasonError) -> Self {
        let exit = match error {
            SeasonError::Sky(_) | SeasonError::NoWeather { .. } => Exit::Misuse,
            SeasonError::Store(error) => return error.into(),
            SeasonError::Night { .. } | SeasonError::Violated { .. } | SeasonError::Threads(_) => {
                Exit::Machine
            }
        };
        Trouble::from_error(exit, &error)
    }
}

impl From<StoreError> for Trouble {
    fn from(error: StoreError) -> Self {
        let exit = match error {
            StoreError::Io { .. } => Exit::Machine,
            _ => Exit::Misuse,
        };
        Trouble::from_error(exit, &error)
    }
}
