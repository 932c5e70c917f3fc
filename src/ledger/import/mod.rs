//! Records of observations made before, or elsewhere: read from files, matched with the list of
//! targets and with what the ledger knows, and kept in one transaction.
//!
//! Reading ([`read_csv`], [`read_fits`]) gives [`Found`] records and refusals; [`Matcher`] turns a
//! record into a visit of a target; [`SqliteLedger::import`] tells what is new.

mod columns;
mod csv_file;
mod fits_file;
mod instants;
mod matcher;

use std::collections::{BTreeMap, BTreeSet};

pub use columns::{ColumnError, Columns, Field};
pub use csv_file::{CsvError, read_csv};
pub use fits_file::{fits_files, read_fits};
pub use matcher::Matcher;

use super::{HandEntry, HandSource, SqliteLedger};
use crate::catalogue::TargetId;
use crate::ports::LedgerFault;
use crate::record::{EntryKind, Outcome, Visit, VisitId};
use crate::time::{Span, Utc};
use crate::units::Angle;

/// Two records of a target whose middles lie no further apart are the same one.
const SAME_MIDDLE_MS: i64 = 1000;

/// How a record says which star it is of.
#[derive(Clone, Debug, PartialEq)]
pub struct Subject {
    /// The name that stands there; empty where none does.
    pub name: String,
    /// The place that stands there (ICRS, right ascension and declination).
    pub place: Option<(Angle, Angle)>,
}

/// A record of an observation as a file tells it.
#[derive(Clone, Debug, PartialEq)]
pub struct Found {
    /// Line or file, for messages.
    pub origin: String,
    /// Which star.
    pub subject: Subject,
    /// Middle of the exposure.
    pub mid: Utc,
    /// Length of the exposure, seconds.
    pub exposure_s: f64,
    /// Signal-to-noise.
    pub snr: Option<f64>,
    /// Velocity error, m/s.
    pub rv_error_m_s: Option<f64>,
    /// Airmass.
    pub airmass: Option<f64>,
    /// Anything else worth keeping.
    pub note: String,
}

/// A record that was not taken, and why.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Refusal {
    /// Line or file.
    pub origin: String,
    /// Why, in words.
    pub reason: String,
}

/// What an import did, or would do.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct ImportReport {
    /// New visits, and leases that were settled.
    pub taken: usize,
    /// Of those, the leases without a word that were settled.
    pub settled: Vec<VisitId>,
    /// Records that the ledger, or an earlier line, had already.
    pub known: usize,
    /// Records not taken.
    pub refused: Vec<Refusal>,
}

/// The span of an exposure about its middle.
pub fn exposure_span(mid: Utc, exposure_s: f64) -> Span {
    let length_ms = (exposure_s * 1000.0).round() as i64;
    let start = mid.plus_ms(-(length_ms / 2));
    Span::new(start, start.plus_ms(length_ms))
}

fn middle_ms(span: Span) -> i64 {
    span.start.unix_ms() + span.length_ms() / 2
}

impl SqliteLedger {
    /// Sorts visits made from records into new ones, known ones and those that settle a lease
    /// without a word, and keeps the first and the last, all or none. With `dry_run` nothing is kept
    /// and the report tells what would have been.
    ///
    /// # Errors
    /// [`LedgerFault`]; nothing was kept.
    pub fn import(
        &mut self,
        visits: Vec<(String, Visit)>,
        by: &str,
        now: Utc,
        dry_run: bool,
    ) -> Result<ImportReport, LedgerFault> {
        let mut known = Known::of(self)?;
        let mut report = ImportReport::default();
        let mut entries = Vec::new();
        for (origin, visit) in visits {
            match known.judge(&visit) {
                Judgement::Known => report.known += 1,
                Judgement::UnderWay(lease) => report.refused.push(Refusal {
                    origin,
                    reason: format!(
                        "visit {lease} of {} is under way at that time: import again when it has ended",
                        visit.subject
                    ),
                }),
                Judgement::Settles(lease) => {
                    let visit = self.settled(&lease, visit)?;
                    report.settled.push(lease);
                    entries.push(entry(visit, by, Some("settles a lease without a word")));
                }
                Judgement::New => entries.push(entry(visit, by, None)),
            }
        }
        report.taken = entries.len();
        if !dry_run && !entries.is_empty() {
            self.keep_by_hand(&entries, now)?;
        }
        Ok(report)
    }

    /// The visit that was leased, with what the record tells of it.
    fn settled(&self, lease: &VisitId, told: Visit) -> Result<Visit, LedgerFault> {
        let Some(leased) = self.visit(lease)? else {
            return Ok(told);
        };
        let wanted_s = leased.planned.total_s();
        let credit = if wanted_s > 0.0 {
            (told.exposed_s / wanted_s).clamp(0.0, 1.0)
        } else {
            1.0
        };
        Ok(Visit {
            exposing: told.exposing,
            exposed_s: told.exposed_s,
            outcome: if credit < 1.0 {
                Outcome::Short
            } else {
                Outcome::Done
            },
            credit,
            airmass: told.airmass.or(leased.airmass),
            snr: told.snr,
            rv_error_m_s: told.rv_error_m_s,
            mid_bjd_tdb: told.mid_bjd_tdb,
            note: told.note,
            ..leased
        })
    }
}

fn entry(visit: Visit, by: &str, why: Option<&str>) -> HandEntry {
    HandEntry {
        visit,
        source: HandSource::Import,
        by: by.to_owned(),
        why: why.map(str::to_owned),
    }
}

/// What is to be done with a record.
enum Judgement {
    New,
    Known,
    Settles(VisitId),
    UnderWay(VisitId),
}

/// What the ledger knows of one target.
#[derive(Default)]
struct KnownTarget {
    /// Middles of all exposures ever told of, superseded ones included: a record that was amended
    /// since must not come back when its file is read again.
    middles: BTreeSet<i64>,
    /// Spans of the exposures that the observatory reported. The telescope exposes on one star at a
    /// time, so a record in the middle of one is a record of it.
    reported: Vec<Span>,
    /// Leases without a word; `true` where it may be settled.
    leases: Vec<(Span, VisitId, bool)>,
}

struct Known(BTreeMap<TargetId, KnownTarget>);

impl Known {
    fn of(ledger: &SqliteLedger) -> Result<Self, LedgerFault> {
        let mut targets: BTreeMap<TargetId, KnownTarget> = BTreeMap::new();
        for row in ledger.history()? {
            let visit = row.visit;
            if visit.kind != EntryKind::Science || visit.exposing.is_empty() {
                continue;
            }
            if visit.outcome == Outcome::Unreported || visit.outcome == Outcome::Refused {
                continue;
            }
            let known = targets.entry(visit.subject).or_default();
            known.middles.insert(middle_ms(visit.exposing));
            if row.source == "report" {
                known.reported.push(visit.exposing);
            }
        }
        for lease in ledger.leases_without_word()? {
            let known = targets.entry(lease.subject).or_default();
            known
                .leases
                .push((lease.span, lease.visit, lease.unreported));
        }
        Ok(Known(targets))
    }

    fn judge(&mut self, visit: &Visit) -> Judgement {
        let known = self.0.entry(visit.subject.clone()).or_default();
        let mid = middle_ms(visit.exposing);
        let near = mid - SAME_MIDDLE_MS..=mid + SAME_MIDDLE_MS;
        let at = Utc::from_unix_ms(mid);
        if known.middles.range(near).next().is_some()
            || known.reported.iter().any(|span| span.contains(at))
        {
            return Judgement::Known;
        }
        let lease = known.leases.iter().position(|(span, ..)| span.contains(at));
        if let Some(index) = lease {
            if !known.leases[index].2 {
                return Judgement::UnderWay(known.leases[index].1.clone());
            }
            let (_, settled, _) = known.leases.swap_remove(index);
            known.middles.insert(mid);
            return Judgement::Settles(settled);
        }
        known.middles.insert(mid);
        Judgement::New
    }
}
