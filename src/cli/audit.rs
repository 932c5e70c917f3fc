//! `audit`: whether each star gets what its planets demand.

use std::path::PathBuf;

use comfy_table::{CellAlignment, Table, presets};
use rayon::prelude::*;
use serde_json::{Value, json};

use crate::audit::{CandidateAudit, DETECTION_SNR, StarAudit, StarRecord};
use crate::catalogue::{Survey, Target};
use crate::ephemeris::{EphemerisError, Observer, SkyInstant, StarMotion};
use crate::plan::{Calendar, History, accrual_first};
use crate::ports::Ledger;
use crate::score::{CreditedVisit, Standing};
use crate::time::{Night, NightDate, Utc};

use super::stage::{Stage, night_date, out_of_range, stage};
use super::storage::{LedgerFile, absent};
use super::views::round;
use super::{Exit, Global, Trouble, output};
use crate::ledger::SqliteLedger;

/// Audit every star: visits, debt, gaps, phases, and what they can weigh.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright audit --ledger rehearsal.sqlite
  nightwright audit --target KR0016-56 --until 2027-01-31 --json

Errors of K count the visits' own velocity errors alone: neither the star's jitter nor the
instrument's floor is added to what was reported.")]
pub struct Args {
    #[command(flatten)]
    ledger: LedgerFile,
    /// Last night counted (default: last night, or the last in the ledger when that is later)
    #[arg(long, value_name = "DATE")]
    until: Option<String>,
    /// These stars alone; may be given again
    #[arg(long, value_name = "ID")]
    target: Vec<String>,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// A star with its audit.
struct Row<'a> {
    target: &'a Target,
    audit: StarAudit,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let path: PathBuf = stage.ledger_path(args.ledger.ledger.as_deref());
    let ledger = SqliteLedger::open_read_only(&path)?.ok_or_else(|| absent(&path))?;
    let survey = &stage.settings.survey;
    let chosen = chosen(survey, &args.target)?;
    let until = match &args.until {
        Some(text) => night_date(text)?,
        None => last_night(&stage, &ledger)?,
    };
    let visits = ledger.visits(Some(until))?;
    let history = History::new(survey, &stage.observer, &visits).map_err(out_of_range)?;
    let rows = audit(&stage, &history, until, &chosen)?;
    if args.json {
        let targets: Vec<Value> = rows.iter().map(json_of).collect();
        output::print_json(&json!({
            "until": until.to_string(),
            "detection_snr": DETECTION_SNR,
            "targets": targets,
        }))?;
    } else {
        output::print(&text_of(until, &rows))?;
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

/// The night before tonight, or the last of the ledger: a rehearsal's nights may lie ahead.
fn last_night(stage: &Stage, ledger: &SqliteLedger) -> Result<NightDate, Trouble> {
    let before = stage.night(None)?.plus_nights(-1);
    let recorded = ledger.visits(None)?.iter().map(|visit| visit.night).max();
    Ok(recorded.map_or(before, |night| night.max(before)))
}

fn audit<'a>(
    stage: &'a Stage,
    history: &History,
    until: NightDate,
    chosen: &[usize],
) -> Result<Vec<Row<'a>>, Trouble> {
    let survey = &stage.settings.survey;
    let observer = &stage.observer;
    let next = until.plus_nights(1);
    let now = Night::of(until, survey.site.longitude).span.end;
    let first = accrual_first(survey, history.first_night(), next);
    let calendar = Calendar::compute(survey, observer, first, next).map_err(out_of_range)?;
    let standings = history.standings(survey, &calendar, first, next);
    chosen
        .par_iter()
        .map(|index| star(survey, observer, (*index, &standings[*index]), now))
        .collect::<Result<Vec<_>, _>>()
        .map_err(out_of_range)
}

fn star<'a>(
    survey: &'a Survey,
    observer: &Observer,
    star: (usize, &Standing),
    now: Utc,
) -> Result<Row<'a>, EphemerisError> {
    let (index, standing) = star;
    let target = &survey.targets[index];
    let velocities = barycentric_km_s(observer, target, &standing.credited)?;
    let record = StarRecord {
        target,
        programme: &survey.programmes[target.programme],
        standing,
        barycentric_km_s: &velocities,
        now,
    };
    Ok(Row {
        target,
        audit: StarAudit::of(&record),
    })
}

fn barycentric_km_s(
    observer: &Observer,
    target: &Target,
    visits: &[CreditedVisit],
) -> Result<Vec<f64>, EphemerisError> {
    let motion = StarMotion::of(&target.star);
    visits
        .iter()
        .map(|visit| {
            let sky = SkyInstant::at(observer, visit.mid)?;
            Ok(sky.barycentric_correction_m_s(&motion) / 1000.0)
        })
        .collect()
}

fn json_of(row: &Row<'_>) -> Value {
    let audit = &row.audit;
    let gaps = audit.gaps.as_ref();
    let candidates: Vec<Value> = audit.candidates.iter().map(candidate_json).collect();
    let sensitivity: Vec<Value> = audit
        .sensitivity
        .iter()
        .map(|s| {
            json!({
                "period_days": round(s.period_d, 4),
                "k_m_s": round(s.k_m_s, 4),
                "msini_earth": s.msini_earth.map(|m| round(m, 4)),
            })
        })
        .collect();
    let peaks: Vec<Value> = audit
        .peaks
        .iter()
        .map(|peak| {
            json!({
                "frequency_per_day": round(peak.frequency_per_day, 7),
                "power": round(peak.power, 5),
                "name": peak.name,
            })
        })
        .collect();
    json!({
        "target": row.target.id.as_str(),
        "visits": audit.visits,
        "credited": round(audit.credited, 4),
        "wanted": round(audit.wanted, 4),
        "owed": round(audit.owed, 4),
        "overdue": round(audit.overdue, 4),
        "longest_gap_days": gaps.map(|g| round(g.longest_d, 5)),
        "waiting_days": audit.waiting_d.map(|d| round(d, 5)),
        "gaps_days": {
            "median": gaps.map(|g| round(g.median_d, 5)),
            "p90": gaps.map(|g| round(g.p90_d, 5)),
            "longest": gaps.map(|g| round(g.longest_d, 5)),
        },
        "candidates": candidates,
        "sensitivity": sensitivity,
        "window_peaks": peaks,
        "barycentric_km_s": {
            "min": audit.barycentric.map(|b| round(b.min_km_s, 5)),
            "max": audit.barycentric.map(|b| round(b.max_km_s, 5)),
            "spread": audit.barycentric.map(|b| round(b.spread_km_s(), 5)),
        },
    })
}

fn candidate_json(candidate: &CandidateAudit) -> Value {
    let aliases: Vec<f64> = candidate
        .aliases
        .iter()
        .map(|alias| round(alias.period_d, 6))
        .collect();
    let errors = candidate.errors.as_ref();
    json!({
        "period_days": candidate.period_d,
        "largest_phase_gap": round(candidate.coverage.largest_gap, 5),
        "evenness": round(candidate.coverage.evenness.statistic, 5),
        "evenness_p": round(candidate.coverage.evenness.p, 6),
        "sigma_k_m_s": errors.map(|e| round(e.sigma_k_m_s, 5)),
        "sigma_phase_m_s": errors.map(|e| round(e.sigma_phase_m_s, 5)),
        "sigma_k_eccentric_m_s": errors
            .and_then(|e| e.eccentric.as_ref())
            .map(|e| round(e.sigma_k_m_s, 5)),
        "msini_earth": candidate.mass.and_then(|m| m.msini_earth).map(|m| round(m, 4)),
        "sigma_msini_earth": candidate.mass.map(|m| round(m.sigma_earth, 5)),
        "aliases_days": aliases,
    })
}

fn text_of(until: NightDate, rows: &[Row<'_>]) -> String {
    let mut table = Table::new();
    table.load_style(presets::NOTHING).set_header([
        "target",
        "visits",
        "owed",
        "overdue",
        "gap",
        "longest",
        "period",
        "phase gap",
        "even",
        "σ(K)",
        "σ(m sin i)",
    ]);
    for row in rows {
        add_rows(&mut table, row);
    }
    for column in 1..11 {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let mut text = format!("Through the night of {until}\n\n");
    for line in table.lines() {
        text.push_str(line.trim_end());
        text.push('\n');
    }
    text.push_str(
        "\noverdue: wanted intervals since the last visit · gap: median and longest, days\n\
         phase gap: widest part of the orbit without a visit · even: odds that even phases look so\n\
         σ(K) in m/s and σ(m sin i) in Earth masses from the visits' own velocity errors\n",
    );
    text
}

/// A line for the star with its first candidate, one more for each further candidate.
fn add_rows(table: &mut Table, row: &Row<'_>) {
    let number = |value: Option<f64>, decimals: usize| {
        value.map_or_else(|| "–".to_owned(), |v| format!("{v:.decimals$}"))
    };
    let audit = &row.audit;
    let star = [
        row.target.id.to_string(),
        audit.visits.to_string(),
        format!("{:.1}", audit.owed),
        format!("{:.1}", audit.overdue),
        number(audit.gaps.map(|g| g.median_d), 1),
        number(audit.gaps.map(|g| g.longest_d), 1),
    ];
    let none = || ["–"; 5].map(str::to_owned);
    let cells = |candidate: &CandidateAudit| {
        [
            format!("{:.4}", candidate.period_d),
            format!("{:.0} %", 100.0 * candidate.coverage.largest_gap),
            format!("{:.2}", candidate.coverage.evenness.p),
            number(candidate.errors.as_ref().map(|e| e.sigma_k_m_s), 2),
            number(candidate.mass.map(|m| m.sigma_earth), 2),
        ]
    };
    let first = audit.candidates.first().map_or_else(none, cells);
    table.add_row(star.into_iter().chain(first));
    for candidate in audit.candidates.iter().skip(1) {
        let blank = std::array::from_fn::<String, 6, _>(|_| String::new());
        table.add_row(blank.into_iter().chain(cells(candidate)));
    }
}
