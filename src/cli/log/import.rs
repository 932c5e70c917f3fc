//! `log import`.

use std::fs;
use std::path::{Path, PathBuf};

use indicatif::{ProgressBar, ProgressStyle};
use rayon::prelude::*;
use serde_json::{Value, json};

use super::super::stage::{now, stage};
use super::super::storage::LedgerFile;
use super::super::{Exit, Global, Trouble, output};
use super::Person;
use crate::ledger::SqliteLedger;
use crate::ledger::import::{
    Columns, Found, ImportReport, Matcher, Refusal, fits_files, read_csv, read_fits,
};
use crate::record::Visit;
use crate::units::Angle;

/// No table of records is larger; something else in its place is not read to its end.
const LARGEST_CSV: u64 = 1 << 30;

/// So many refusals are told one by one; `--json` has all.
const REFUSALS_TOLD: usize = 50;

/// Take records of observations made elsewhere or before: a CSV file, or the headers of a folder of
/// FITS files.
///
/// A record is taken once, however often it is imported. One that falls within a lease of its
/// target on which no word came settles that lease. Everything is kept in one transaction. The exit
/// code is 1 when there were records and none could be used.
#[derive(Debug, clap::Args)]
#[command(after_help = "The CSV needs a header; the usual one is
  target,utc_mid,exposure_s,snr,rv_error_m_s
Other names are mapped with --column FIELD=NAME, for a FITS file to a keyword. The fields:
  target · ra and dec (to match by place) · utc_mid, utc_start (with time_start), mjd_mid,
  mjd_start, jd_mid or jd_start · time_scale (UTC, TAI, TT, TDB) · exposure_s · snr · rv_error_m_s
  · airmass · note

Example:
  nightwright log import history.csv --dry-run
  nightwright log import old.csv --column target=OBJECT --column mjd_mid=MJD
  nightwright log import spectra/ --column rv_error_m_s=DRS_RVERR --radius-arcsec 10")]
pub struct ImportArgs {
    /// CSV file, FITS file, or folder of FITS files
    from: PathBuf,
    /// Name under which a field stands (may be given again)
    #[arg(long = "column", value_name = "FIELD=NAME")]
    columns: Vec<String>,
    /// Farthest that a place may lie from a target's to be taken for it
    #[arg(long, value_name = "ARCSEC", value_parser = super::positive, default_value = "30")]
    radius_arcsec: f64,
    /// Tell what would be taken and keep nothing
    #[arg(long)]
    dry_run: bool,
    #[command(flatten)]
    person: Person,
    #[command(flatten)]
    file: LedgerFile,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Runs the command.
pub fn import(args: &ImportArgs, global: &Global) -> Result<Exit, Trouble> {
    let columns =
        Columns::parse(&args.columns).map_err(|error| Trouble::from_error(Exit::Misuse, &error))?;
    let stage = stage(global)?;
    let path = stage.ledger_path(args.file.ledger.as_deref());
    let (found, mut refused) = records(&args.from, &columns)?;
    let records = found.len() + refused.len();
    let radius = Angle::from_arcsec(args.radius_arcsec);
    let matcher = Matcher::new(&stage.settings.survey, &stage.observer, radius);
    let visits = matched(&matcher, &found, &mut refused);
    let mut report = kept(args, &path, visits)?;
    refused.append(&mut report.refused);
    refused.sort_by_cached_key(|refusal| (line_number(&refusal.origin), refusal.origin.clone()));
    report.refused = refused;
    if args.json {
        output::print_json(&as_json(args, &report))?;
    } else {
        output::print(&as_text(args, &report))?;
    }
    let useless = records > 0 && report.taken == 0 && report.known == 0;
    Ok(if useless { Exit::No } else { Exit::Fine })
}

/// All records of the file or folder, and what is none.
fn records(from: &Path, columns: &Columns) -> Result<(Vec<Found>, Vec<Refusal>), Trouble> {
    let shown = from.display();
    let unreadable = |error: std::io::Error| {
        let message = format!("{shown} cannot be read");
        match error.kind() {
            std::io::ErrorKind::NotFound => Trouble::misuse(message).because(&error),
            _ => Trouble::machine(message).because(&error),
        }
    };
    let metadata = fs::metadata(from).map_err(unreadable)?;
    let extension = from.extension().and_then(|e| e.to_str()).unwrap_or("");
    if metadata.is_dir() {
        let files = fits_files(from).map_err(unreadable)?;
        if files.is_empty() {
            return Err(
                Trouble::misuse(format!("there are no FITS files in {shown}"))
                    .hint("their names end in .fits, .fit or .fts"),
            );
        }
        return Ok(fits_records(&files, columns));
    }
    if ["fits", "fit", "fts"].contains(&extension.to_ascii_lowercase().as_str()) {
        return Ok(fits_records(&[from.to_owned()], columns));
    }
    if !metadata.is_file() || metadata.len() > LARGEST_CSV {
        return Err(Trouble::misuse(format!("{shown} is no table of records")));
    }
    let bytes = fs::read(from).map_err(unreadable)?;
    read_csv(&bytes, columns).map_err(|error| {
        Trouble::from_error(Exit::Misuse, &error)
            .details(vec![format!("{shown}:")])
            .hint("map the columns with --column FIELD=NAME; see `nightwright log import --help`")
    })
}

fn fits_records(files: &[PathBuf], columns: &Columns) -> (Vec<Found>, Vec<Refusal>) {
    let bar = progress("headers", files.len());
    let read: Vec<Result<Found, Refusal>> = files
        .par_iter()
        .map(|file| {
            bar.inc(1);
            read_fits(file, columns).map_err(|reason| Refusal {
                origin: file.display().to_string(),
                reason,
            })
        })
        .collect();
    bar.finish_and_clear();
    let (mut found, mut refused) = (Vec::new(), Vec::new());
    for record in read {
        match record {
            Ok(record) => found.push(record),
            Err(refusal) => refused.push(refusal),
        }
    }
    (found, refused)
}

/// Lines are told in their order, files by name.
fn line_number(origin: &str) -> Option<u64> {
    origin.strip_prefix("line ")?.parse().ok()
}

/// The visits that the records make, each with its line or file.
fn matched(
    matcher: &Matcher<'_>,
    found: &[Found],
    refused: &mut Vec<Refusal>,
) -> Vec<(String, Visit)> {
    let bar = progress("records", found.len());
    let made: Vec<Result<Visit, String>> = found
        .par_iter()
        .map(|record| {
            bar.inc(1);
            matcher.visit(record)
        })
        .collect();
    bar.finish_and_clear();
    let mut visits = Vec::with_capacity(made.len());
    for (record, visit) in found.iter().zip(made) {
        let origin = record.origin.clone();
        match visit {
            Ok(visit) => visits.push((origin, visit)),
            Err(reason) => refused.push(Refusal { origin, reason }),
        }
    }
    visits
}

/// A bar on standard error, where that is a terminal.
fn progress(what: &str, length: usize) -> ProgressBar {
    let bar = ProgressBar::new(length as u64);
    if let Ok(style) = ProgressStyle::with_template("{msg} {wide_bar} {pos}/{len} {eta}") {
        bar.set_style(style);
    }
    bar.with_message(what.to_owned())
}

fn kept(
    args: &ImportArgs,
    path: &Path,
    visits: Vec<(String, Visit)>,
) -> Result<ImportReport, Trouble> {
    // Where nothing is to be kept no ledger is made: an empty one in memory answers as well.
    let mut ledger = if args.dry_run || visits.is_empty() {
        match SqliteLedger::open_read_only(path)? {
            Some(ledger) => ledger,
            None => SqliteLedger::in_memory()?,
        }
    } else {
        SqliteLedger::open(path)?
    };
    Ok(ledger.import(visits, &args.person.by, now(), args.dry_run)?)
}

fn as_json(args: &ImportArgs, report: &ImportReport) -> Value {
    let refusals = report.refused.iter();
    let refusals = refusals.map(|r| json!({ "at": r.origin, "reason": r.reason }));
    let settled: Vec<&str> = report.settled.iter().map(|id| id.0.as_str()).collect();
    json!({
        "dry_run": args.dry_run,
        "taken": report.taken,
        "already_known": report.known,
        "refused": report.refused.len(),
        "settled": settled,
        "refusals": refusals.collect::<Vec<Value>>(),
    })
}

fn as_text(args: &ImportArgs, report: &ImportReport) -> String {
    let told = report.refused.iter().take(REFUSALS_TOLD);
    let mut lines: Vec<String> = told
        .map(|refusal| format!("refused {}: {}", refusal.origin, refusal.reason))
        .collect();
    let rest = report.refused.len().saturating_sub(REFUSALS_TOLD);
    if rest > 0 {
        lines.push(format!("and {rest} more (all with --json)"));
    }
    if !report.settled.is_empty() {
        let names: Vec<&str> = report.settled.iter().map(|id| id.0.as_str()).collect();
        lines.push(format!(
            "settled leases without a word: {}",
            names.join(", ")
        ));
    }
    lines.push(format!(
        "{}taken {}, already known {}, refused {}",
        if args.dry_run { "dry run: " } else { "" },
        report.taken,
        report.known,
        report.refused.len()
    ));
    lines.join("\n")
}
