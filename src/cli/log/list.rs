//! `log list`.

use comfy_table::{CellAlignment, Table, presets};
use serde_json::{Value, json};

use super::super::storage::LedgerFile;
use super::super::{Exit, Global, Trouble, output};
use crate::ledger::{Recorded, SqliteLedger};
use crate::record::{EntryKind, LossCause, Outcome, Visit};
use crate::time::NightDate;

/// List the visits as they stand, in order of time.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright log list --target KR0016-56 --since 2026-11-01
  nightwright log list --all --json")]
pub struct ListArgs {
    /// This target alone
    #[arg(long, value_name = "ID")]
    target: Option<String>,
    /// First night
    #[arg(long, value_name = "NIGHT", value_parser = night)]
    since: Option<NightDate>,
    /// Last night
    #[arg(long, value_name = "NIGHT", value_parser = night)]
    until: Option<NightDate>,
    /// Also what was superseded, with who superseded it and why
    #[arg(long)]
    all: bool,
    #[command(flatten)]
    file: LedgerFile,
    /// Print JSON
    #[arg(long, conflicts_with = "csv")]
    json: bool,
    /// Print CSV
    #[arg(long)]
    csv: bool,
}

fn night(text: &str) -> Result<NightDate, String> {
    NightDate::parse(text).map_err(|error| error.to_string())
}

/// Runs the command. No ledger is an empty record.
pub fn list(args: &ListArgs, global: &Global) -> Result<Exit, Trouble> {
    let rows = match SqliteLedger::open_read_only(&args.file.path(global)?)? {
        Some(ledger) => ledger.history()?,
        None => Vec::new(),
    };
    let rows: Vec<Recorded> = rows.into_iter().filter(|row| args.wants(row)).collect();
    if args.json {
        output::print_json(&Value::Array(rows.iter().map(row_json).collect()))?;
    } else if args.csv {
        output::print(&as_csv(&rows)?)?;
    } else {
        output::print(&as_table(&rows, args.all))?;
    }
    Ok(Exit::Fine)
}

impl ListArgs {
    fn wants(&self, row: &Recorded) -> bool {
        let visit = &row.visit;
        let target = self.target.as_deref();
        (self.all || row.stands)
            && target.is_none_or(|id| visit.subject.as_str() == id)
            && self.since.is_none_or(|night| visit.night >= night)
            && self.until.is_none_or(|night| visit.night <= night)
    }
}

const fn kind_word(kind: EntryKind) -> &'static str {
    match kind {
        EntryKind::Science => "science",
        EntryKind::Standard => "standard",
        EntryKind::Calibration => "calibration",
    }
}

const fn outcome_words(outcome: Outcome) -> (&'static str, Option<&'static str>) {
    match outcome {
        Outcome::Done => ("done", None),
        Outcome::Short => ("short", None),
        Outcome::Lost(LossCause::Weather) => ("lost", Some("weather")),
        Outcome::Lost(LossCause::Instrument) => ("lost", Some("instrument")),
        Outcome::Lost(LossCause::Operator) => ("lost", Some("operator")),
        Outcome::Lost(LossCause::Acquisition) => ("lost", Some("acquisition")),
        Outcome::Lost(LossCause::Other) => ("lost", Some("other")),
        Outcome::Refused => ("refused", None),
        Outcome::Unreported => ("unreported", None),
    }
}

/// A visit as scripts read it.
pub(super) fn visit_json(visit: &Visit) -> Value {
    let (outcome, cause) = outcome_words(visit.outcome);
    let mid = visit.exposing.start.plus_ms(visit.exposing.length_ms() / 2);
    json!({
        "visit": visit.id.0,
        "night": visit.night.to_string(),
        "kind": kind_word(visit.kind),
        "target": visit.subject.as_str(),
        "began": visit.began.to_string(),
        "start": visit.exposing.start.to_string(),
        "mid": mid.to_string(),
        "end": visit.exposing.end.to_string(),
        "exposure_s": visit.exposed_s,
        "outcome": outcome,
        "cause": cause,
        "credit": visit.credit,
        "airmass": visit.airmass,
        "snr": visit.snr,
        "rv_error_m_s": visit.rv_error_m_s,
        "predicted_rv_error_m_s": visit.predicted_rv_error_m_s,
        "bjd_tdb": visit.mid_bjd_tdb.map(|bjd| format!("{bjd:.8}")),
        "note": visit.note,
    })
}

fn row_json(row: &Recorded) -> Value {
    let mut value = visit_json(&row.visit);
    value["source"] = row.source.clone().into();
    value["learnt"] = row.learnt.to_string().into();
    value["by"] = row.by.clone().into();
    value["why"] = row.why.clone().into();
    value["stands"] = row.stands.into();
    value
}

/// The same columns as in JSON.
fn as_csv(rows: &[Recorded]) -> Result<String, Trouble> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    let mut header = false;
    for row in rows.iter().map(row_json) {
        let Value::Object(row) = row else { continue };
        if !header {
            writer.write_record(row.keys()).map_err(unwritable)?;
            header = true;
        }
        let texts = row.values().map(|value| match value {
            Value::Null => String::new(),
            Value::String(text) => text.clone(),
            other => other.to_string(),
        });
        writer.write_record(texts).map_err(unwritable)?;
    }
    let bytes = writer
        .into_inner()
        .map_err(|error| unwritable(error.into_error()))?;
    Ok(String::from_utf8_lossy(&bytes).into_owned())
}

fn unwritable(error: impl std::error::Error) -> Trouble {
    Trouble::machine("the table cannot be written").because(&error)
}

fn as_table(rows: &[Recorded], all: bool) -> String {
    if rows.is_empty() {
        return "no visits".to_owned();
    }
    let number = |value: Option<f64>, decimals: usize| {
        value.map_or_else(String::new, |value| format!("{value:.decimals$}"))
    };
    let mut table = Table::new();
    table.load_style(presets::NOTHING);
    let mut header = vec![
        "visit",
        "target",
        "start (UTC)",
        "s",
        "outcome",
        "credit",
        "snr",
        "m/s",
        "by",
    ];
    if all {
        header.push("stands");
    }
    table.set_header(header);
    for row in rows {
        let visit = &row.visit;
        let (outcome, cause) = outcome_words(visit.outcome);
        let start = visit.exposing.start.to_string();
        let mut cells = vec![
            visit.id.to_string(),
            visit.subject.to_string(),
            start.get(..16).unwrap_or(&start).replace('T', " "),
            format!("{:.0}", visit.exposed_s),
            cause.map_or_else(|| outcome.to_owned(), |cause| format!("{outcome}: {cause}")),
            format!("{:.2}", visit.credit),
            number(visit.snr, 0),
            number(visit.rv_error_m_s, 2),
            row.by.clone().unwrap_or_else(|| row.source.clone()),
        ];
        if all {
            cells.push(match (&row.why, row.stands) {
                (Some(why), true) => format!("yes: {why}"),
                (None, true) => "yes".to_owned(),
                (_, false) => "no".to_owned(),
            });
        }
        table.add_row(cells);
    }
    for index in [3, 5, 6, 7] {
        if let Some(column) = table.column_mut(index) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let lines: Vec<String> = table
        .lines()
        .map(|line| line.trim_end().to_owned())
        .collect();
    lines.join("\n")
}
