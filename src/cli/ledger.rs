//! `ledger`: check, back up and export the record.

use std::path::{Path, PathBuf};

use clap::{Subcommand, ValueEnum};
use serde_json::json;

use super::storage::{self, LedgerFile};
use super::{Exit, Global, Trouble, output};
use crate::ledger::{CheckReport, ExportFormat, SqliteLedger};

/// Check, back up or export the record. All three work while the daemon runs.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright ledger check
  nightwright ledger backup /backup/ledger-2026-12-01.sqlite
  nightwright ledger export tables --format csv")]
pub struct Args {
    #[command(subcommand)]
    action: Action,
}

#[derive(Debug, Subcommand)]
enum Action {
    Check(CheckArgs),
    Backup(BackupArgs),
    Export(ExportArgs),
}

/// Read every page and every row: structure, references, the journal against the tables drawn from
/// it, the accounting of the nights. Exit code 1 when anything is wrong. An older ledger is brought
/// up to date first, after a copy of it was put beside it.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:\n  nightwright ledger check --ledger nights.sqlite")]
struct CheckArgs {
    #[command(flatten)]
    file: LedgerFile,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Copy the ledger as it is at one instant, also while the daemon writes to it. Nothing is
/// overwritten.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:\n  nightwright ledger backup /backup/ledger-2026-12-01.sqlite")]
struct BackupArgs {
    /// New file to write
    to: PathBuf,
    #[command(flatten)]
    file: LedgerFile,
}

/// Write every table to a file of its own in a new folder, with times in RFC 3339.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:\n  nightwright ledger export tables --format json")]
struct ExportArgs {
    /// New folder to write
    to: PathBuf,
    #[command(flatten)]
    file: LedgerFile,
    /// How the tables are written
    #[arg(long, value_enum, default_value = "csv")]
    format: Format,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Format {
    /// A header, then a line a row
    Csv,
    /// An array of objects
    Json,
    /// VOTable 1.4 (XML) of the International Virtual Observatory Alliance
    Votable,
}

impl From<Format> for ExportFormat {
    fn from(format: Format) -> Self {
        match format {
            Format::Csv => ExportFormat::Csv,
            Format::Json => ExportFormat::Json,
            Format::Votable => ExportFormat::Votable,
        }
    }
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    match &args.action {
        Action::Check(args) => check(args, &args.file.path(global)?),
        Action::Backup(args) => backup(args, &args.file.path(global)?),
        Action::Export(args) => export(args, &args.file.path(global)?),
    }
}

fn check(args: &CheckArgs, path: &Path) -> Result<Exit, Trouble> {
    let ledger = SqliteLedger::open_existing(path)?.ok_or_else(|| storage::absent(path))?;
    let report = ledger.check()?;
    if args.json {
        output::print_json(&as_json(path, &report))?;
    } else {
        output::print(&as_text(path, &report))?;
    }
    Ok(if report.faults.is_empty() {
        Exit::Fine
    } else {
        Exit::No
    })
}

fn as_json(path: &Path, report: &CheckReport) -> serde_json::Value {
    let rows: serde_json::Map<String, serde_json::Value> = report
        .counts
        .iter()
        .map(|count| (count.table.to_owned(), count.rows.into()))
        .collect();
    json!({
        "ledger": path.display().to_string(),
        "sound": report.faults.is_empty(),
        "faults": report.faults,
        "rows": rows,
    })
}

fn as_text(path: &Path, report: &CheckReport) -> String {
    let mut lines = report.faults.clone();
    let rows = |table: &str| {
        let found = report.counts.iter().find(|count| count.table == table);
        found.map_or(0, |count| count.rows)
    };
    lines.push(match report.faults.len() {
        0 => format!(
            "{}: sound; {} facts, {} nights, {} plans, {} visits, {} weather samples",
            path.display(),
            rows("journal"),
            rows("nights"),
            rows("plan_revisions"),
            rows("visits_now"),
            rows("weather_samples"),
        ),
        1 => format!("{}: 1 fault", path.display()),
        n => format!("{}: {n} faults", path.display()),
    });
    lines.join("\n")
}

fn backup(args: &BackupArgs, path: &Path) -> Result<Exit, Trouble> {
    storage::existing(path)?.backup(&args.to)?;
    output::print(&format!(
        "{} copied to {}",
        path.display(),
        args.to.display()
    ))?;
    Ok(Exit::Fine)
}

fn export(args: &ExportArgs, path: &Path) -> Result<Exit, Trouble> {
    let counts = storage::existing(path)?.export(&args.to, args.format.into())?;
    let rows: u64 = counts.iter().map(|(_, rows)| rows).sum();
    output::print(&format!(
        "{}: {} tables with {rows} rows written to {}",
        path.display(),
        counts.len(),
        args.to.display()
    ))?;
    Ok(Exit::Fine)
}
