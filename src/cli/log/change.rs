//! `log add` and `log amend`.

use serde_json::json;

use super::super::stage::{now, stage};
use super::super::storage::{self, LedgerFile};
use super::super::{Exit, Global, Trouble, output};
use super::list::visit_json;
use super::{CauseWord, OutcomeWord, Person, instant, positive, share};
use crate::ledger::import::{Found, Matcher, Subject, exposure_span};
use crate::ledger::{HandEntry, HandSource, SqliteLedger};
use crate::record::{Outcome, Visit, VisitId};
use crate::time::Utc;
use crate::units::Angle;

/// Add a visit that the ledger does not know.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright log add KR0016-56 --at 2026-12-01T23:30:00Z --exposure-s 900 --snr 85 --rv-error 1.4")]
pub struct AddArgs {
    /// The target
    target: String,
    /// Middle of the exposure, UTC like 2026-12-01T23:30:00Z
    #[arg(long, value_name = "UTC", value_parser = instant)]
    at: Utc,
    /// Open-shutter time in seconds
    #[arg(long, value_name = "S", value_parser = positive)]
    exposure_s: f64,
    #[command(flatten)]
    told: Told,
    #[command(flatten)]
    person: Person,
    #[command(flatten)]
    file: LedgerFile,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Say something else of a visit than what stands. What stood is kept beneath.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright log amend 2026-12-01-0003 --outcome lost --cause weather --why 'cloud in the spectrum'")]
pub struct AmendArgs {
    /// The visit, as `log list` names it
    visit: String,
    /// Why what stands is wrong
    #[arg(long, value_name = "TEXT")]
    why: String,
    /// Middle of the exposure, UTC like 2026-12-01T23:30:00Z
    #[arg(long, value_name = "UTC", value_parser = instant)]
    at: Option<Utc>,
    /// Open-shutter time in seconds
    #[arg(long, value_name = "S", value_parser = positive)]
    exposure_s: Option<f64>,
    /// The target that it was in truth
    #[arg(long, value_name = "ID")]
    target: Option<String>,
    #[command(flatten)]
    told: Told,
    #[command(flatten)]
    person: Person,
    #[command(flatten)]
    file: LedgerFile,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// What may be told of a visit.
#[derive(Debug, clap::Args)]
struct Told {
    /// How it ended
    #[arg(long, value_enum)]
    outcome: Option<OutcomeWord>,
    /// Why it was lost
    #[arg(long, value_enum)]
    cause: Option<CauseWord>,
    /// Share of a full visit that it counts for, 0 to 1
    #[arg(long, value_name = "SHARE", value_parser = share)]
    credit: Option<f64>,
    /// Signal-to-noise
    #[arg(long, value_name = "X", value_parser = positive)]
    snr: Option<f64>,
    /// Velocity error, m/s
    #[arg(long, value_name = "M_S", value_parser = positive)]
    rv_error: Option<f64>,
    /// Airmass at the middle
    #[arg(long, value_name = "X", value_parser = positive)]
    airmass: Option<f64>,
    /// A remark
    #[arg(long, value_name = "TEXT")]
    note: Option<String>,
}

impl Told {
    fn says_nothing(&self) -> bool {
        self.outcome.is_none()
            && self.cause.is_none()
            && self.credit.is_none()
            && self.snr.is_none()
            && self.rv_error.is_none()
            && self.airmass.is_none()
            && self.note.is_none()
    }

    /// Puts what was told in place of what stands.
    fn apply(&self, visit: &mut Visit) -> Result<(), Trouble> {
        if let Some(word) = self.outcome {
            visit.outcome = word.with(self.cause)?;
            visit.credit = match visit.outcome {
                Outcome::Done => 1.0,
                Outcome::Short => short_credit(visit, self.credit)?,
                Outcome::Lost(_) | Outcome::Refused | Outcome::Unreported => 0.0,
            };
        } else if self.cause.is_some() {
            return Err(Trouble::misuse("--cause goes with --outcome lost alone"));
        }
        visit.credit = self.credit.unwrap_or(visit.credit);
        visit.snr = self.snr.or(visit.snr);
        visit.rv_error_m_s = self.rv_error.or(visit.rv_error_m_s);
        visit.airmass = self.airmass.or(visit.airmass);
        if let Some(note) = &self.note {
            visit.note.clone_from(note);
        }
        Ok(())
    }
}

/// A visit that was stopped early counts for what was gathered of what was planned.
fn short_credit(visit: &Visit, told: Option<f64>) -> Result<f64, Trouble> {
    let planned_s = visit.planned.total_s();
    match told {
        Some(credit) => Ok(credit),
        None if planned_s > visit.exposed_s => Ok(visit.exposed_s / planned_s),
        None => Err(Trouble::misuse(
            "what share of a full visit a short one counts for is not known: tell it with --credit",
        )),
    }
}

/// Runs `log add`.
pub fn add(args: &AddArgs, global: &Global) -> Result<Exit, Trouble> {
    let stage = stage(global)?;
    let path = stage.ledger_path(args.file.ledger.as_deref());
    let matcher = Matcher::new(&stage.settings.survey, &stage.observer, Angle::ZERO);
    let found = Found {
        origin: "--at".to_owned(),
        subject: Subject {
            name: args.target.clone(),
            place: None,
        },
        mid: args.at,
        exposure_s: args.exposure_s,
        snr: None,
        rv_error_m_s: None,
        airmass: None,
        note: String::new(),
    };
    let mut visit = matcher.visit(&found).map_err(Trouble::misuse)?;
    args.told.apply(&mut visit)?;
    let entry = HandEntry {
        visit,
        source: HandSource::Log,
        by: args.person.by.clone(),
        why: None,
    };
    keep(SqliteLedger::open(&path)?, entry, "added", args.json)
}

/// Runs `log amend`.
pub fn amend(args: &AmendArgs, global: &Global) -> Result<Exit, Trouble> {
    if args.why.trim().is_empty() {
        return Err(Trouble::misuse("--why must say why what stands is wrong"));
    }
    let moved = args.at.is_some() || args.exposure_s.is_some() || args.target.is_some();
    if !moved && args.told.says_nothing() {
        return Err(Trouble::misuse("nothing to amend was told")
            .hint("`nightwright log amend --help` lists what may be told"));
    }
    let stage = stage(global)?;
    let path = stage.ledger_path(args.file.ledger.as_deref());
    let Some(ledger) = SqliteLedger::open_existing(&path)? else {
        return Err(storage::absent(&path));
    };
    let id = VisitId(args.visit.clone());
    let mut visit = ledger.visit(&id)?.ok_or_else(|| {
        Trouble::misuse(format!("there is no visit {id} in {}", path.display()))
            .hint("`nightwright log list` names the visits")
    })?;
    if moved {
        let matcher = Matcher::new(&stage.settings.survey, &stage.observer, Angle::ZERO);
        retime(args, &matcher, &mut visit)?;
    }
    args.told.apply(&mut visit)?;
    let entry = HandEntry {
        visit,
        source: HandSource::Amendment,
        by: args.person.by.clone(),
        why: Some(args.why.clone()),
    };
    keep(ledger, entry, "amended", args.json)
}

/// Another target, middle or length: what follows from them follows.
fn retime(args: &AmendArgs, matcher: &Matcher<'_>, visit: &mut Visit) -> Result<(), Trouble> {
    if let Some(name) = &args.target {
        visit.subject = matcher.named(name).map_err(Trouble::misuse)?.id.clone();
    }
    let stood = visit.exposing;
    let mid = args
        .at
        .unwrap_or_else(|| stood.start.plus_ms(stood.length_ms() / 2));
    if args.at.is_some() || args.exposure_s.is_some() {
        visit.exposed_s = args.exposure_s.unwrap_or(visit.exposed_s);
        visit.exposing = exposure_span(mid, visit.exposed_s);
        if args.at.is_some() {
            visit.night = matcher.night(mid);
            visit.began = visit.exposing.start;
        }
    }
    visit.mid_bjd_tdb = matcher.bjd_tdb(&visit.subject, mid);
    Ok(())
}

fn keep(
    mut ledger: SqliteLedger,
    entry: HandEntry,
    done: &str,
    json: bool,
) -> Result<Exit, Trouble> {
    let names = ledger.keep_by_hand(std::slice::from_ref(&entry), now())?;
    let mut visit = entry.visit;
    if let Some(name) = names.into_iter().next() {
        visit.id = name;
    }
    if json {
        output::print_json(&json!({ "done": done, "visit": visit_json(&visit) }))?;
    } else {
        output::print(&format!(
            "{done} {}: {} in the night {}",
            visit.id, visit.subject, visit.night
        ))?;
    }
    Ok(Exit::Fine)
}
