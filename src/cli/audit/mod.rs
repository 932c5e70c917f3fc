//! `audit`: whether each star gets what its planets demand.

mod csv_file;
mod depth;
mod json;
mod page;
mod text;

use std::path::{Path, PathBuf};

use crate::audit::{Record, SurveyAudit};
use crate::catalogue::Survey;
use crate::ledger::SqliteLedger;
use crate::ports::Ledger;
use crate::time::NightDate;

use super::stage::{Stage, night_date, out_of_range, stage};
use super::storage::{LedgerFile, absent};
use super::{Exit, Global, Trouble, output};

/// Audit every star: visits, debt and its causes, gaps, phases, aliases, and what they can weigh.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright audit --ledger rehearsal.sqlite
  nightwright audit --target KR0016-56 --until 2027-01-31
  nightwright audit --html audit.html

Errors of K count the visits' own velocity errors alone: neither the star's jitter nor the
instrument's floor is added to what was reported. sigma_k_with_jitter_m_s in JSON has both added.")]
pub struct Args {
    #[command(flatten)]
    ledger: LedgerFile,
    /// First night counted (default: the first of the survey or of the ledger)
    #[arg(long, value_name = "DATE")]
    since: Option<String>,
    /// Last night counted (default: last night, or the last in the ledger when that is later)
    #[arg(long, value_name = "DATE")]
    until: Option<String>,
    /// These stars alone, one alone in depth; may be given again
    #[arg(long, value_name = "ID")]
    target: Vec<String>,
    /// Print JSON
    #[arg(long, conflicts_with = "csv")]
    json: bool,
    /// Print CSV, a row for each star and candidate
    #[arg(long)]
    csv: bool,
    /// Write a page with pictures that needs nothing but itself
    #[arg(long, value_name = "FILE")]
    html: Option<PathBuf>,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let survey = &stage.settings.survey;
    let path = stage.ledger_path(args.ledger.ledger.as_deref());
    let chosen = chosen(survey, &args.target)?;
    let record = record(&stage, args, &path)?;
    let audit = SurveyAudit::of(survey, &stage.observer, &record, &chosen).map_err(out_of_range)?;
    if let Some(path) = &args.html {
        output::write_whole(path, &page::page_of(survey, &audit))?;
    }
    if args.json {
        output::print_json(&json::of(survey, &audit))?;
    } else if args.csv {
        output::print(&csv_file::of(survey, &audit)?)?;
    } else if let Some(path) = &args.html {
        output::print(&format!("{} written", path.display()))?;
    } else if let ([_], [(star, found)]) = (args.target.as_slice(), audit.stars.as_slice()) {
        output::print(&depth::of(&survey.targets[*star], found, &audit))?;
    } else {
        output::print(&text::of(survey, &audit))?;
    }
    Ok(Exit::Fine)
}

/// Indices of the stars asked for, in the order of the list.
fn chosen(survey: &Survey, ids: &[String]) -> Result<Vec<usize>, Trouble> {
    for id in ids {
        if !survey.targets.iter().any(|t| t.id.as_str() == id) {
            return Err(Trouble::misuse(format!("no target is called {id}"))
                .hint("`nightwright sky` lists the targets"));
        }
    }
    let is_chosen = |index: &usize| {
        ids.is_empty()
            || ids
                .iter()
                .any(|id| survey.targets[*index].id.as_str() == id)
    };
    Ok((0..survey.targets.len()).filter(is_chosen).collect())
}

/// What the ledger knows of the nights asked for.
fn record(stage: &Stage, args: &Args, path: &Path) -> Result<Record, Trouble> {
    let since = args.since.as_deref().map(night_date).transpose()?;
    let asked = args.until.as_deref().map(night_date).transpose()?;
    let ledger = SqliteLedger::open_read_only(path)?.ok_or_else(|| absent(path))?;
    let until = match asked {
        Some(until) => until,
        None => last_night(stage, &ledger)?,
    };
    if let Some(since) = since.filter(|since| *since > until) {
        return Err(Trouble::misuse(format!(
            "--since {since} comes after the last night counted, {until}"
        )));
    }
    let mut visits = ledger.visits(Some(until))?;
    visits.retain(|visit| since.is_none_or(|since| since <= visit.night));
    let first = since.or(ledger.first_night()?).unwrap_or(until);
    let nights = ledger.accounts(first, until)?;
    Ok(Record {
        since,
        until,
        visits,
        nights,
    })
}

/// The night before tonight, or the last of the ledger: a rehearsal's nights may lie ahead.
fn last_night(stage: &Stage, ledger: &SqliteLedger) -> Result<NightDate, Trouble> {
    let before = stage.night(None)?.plus_nights(-1);
    let recorded = ledger.last_night()?;
    Ok(recorded.map_or(before, |night| night.max(before)))
}
