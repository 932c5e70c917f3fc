//! What the audit asks of the nights.

use std::collections::{BTreeMap, BTreeSet};

use super::SqliteLedger;
use super::read::NightRecord;
use super::rows::RowError;
use crate::audit::NightAccount;
use crate::catalogue::TargetId;
use crate::night::Fact;
use crate::ports::LedgerFault;
use crate::record::Hold;
use crate::time::{NightDate, Span, Utc};

/// Targets by night.
type ByNight = BTreeMap<NightDate, BTreeSet<TargetId>>;
/// By night when its last plan began, and how many visits this had for each target.
type LastPlans = BTreeMap<NightDate, (Utc, BTreeMap<TargetId, u32>)>;

impl SqliteLedger {
    /// What was kept of the nights from `first` to `last`, both included, in order; nights that
    /// were never opened are left out.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn accounts(
        &self,
        first: NightDate,
        last: NightDate,
    ) -> Result<Vec<NightAccount>, LedgerFault> {
        let records = self.nights(first, last)?;
        let (Some(begin), Some(end)) = (records.first(), records.last()) else {
            return Ok(Vec::new());
        };
        let holds = self.holds(Span::new(begin.span.start, end.span.end))?;
        let mut planned = self.planned_targets(first, last)?;
        let mut last_plans = self.last_plans(first, last)?;
        let mut paused = self.paused_by_people(first, last)?;
        self.add_paused_by_settings(&records, &mut paused)?;
        Ok(records
            .into_iter()
            .map(|record| NightAccount {
                night: record.night,
                darkness: record.darkness,
                holds: holds_within(&holds, record.span),
                planned: planned.remove(&record.night).unwrap_or_default(),
                last_plan: last_plans.remove(&record.night),
                paused: paused.remove(&record.night).unwrap_or_default(),
                split: record.summary.map(|summary| summary.split),
            })
            .collect())
    }

    /// Targets that some revision of a night's plan had.
    fn planned_targets(&self, first: NightDate, last: NightDate) -> Result<ByNight, LedgerFault> {
        let rows = self.collect(
            "SELECT DISTINCT p.night, v.subject
             FROM plan_revisions AS p JOIN planned_visits AS v ON v.revision = p.seq
             WHERE p.night BETWEEN ? AND ? AND v.kind = 'science'",
            [first.to_string(), last.to_string()],
            |row| {
                let night: String = row.get(0)?;
                let subject: String = row.get(1)?;
                let night = NightDate::parse(&night).map_err(RowError::from)?;
                Ok((night, TargetId::new(&subject)))
            },
        )?;
        Ok(grouped(rows))
    }

    fn last_plans(&self, first: NightDate, last: NightDate) -> Result<LastPlans, LedgerFault> {
        let rows = self.collect(
            "SELECT p.night, p.from_unix_ms, v.subject, count(*)
             FROM plan_revisions AS p JOIN planned_visits AS v ON v.revision = p.seq
             WHERE p.night BETWEEN ? AND ? AND v.kind = 'science'
               AND p.number = (SELECT max(q.number) FROM plan_revisions AS q WHERE q.night = p.night)
             GROUP BY p.seq, v.subject",
            [first.to_string(), last.to_string()],
            |row| {
                let (night, subject): (String, String) = (row.get(0)?, row.get(2)?);
                let night = NightDate::parse(&night).map_err(RowError::from)?;
                let from = Utc::from_unix_ms(row.get(1)?);
                Ok((night, from, TargetId::new(&subject), row.get::<_, u32>(3)?))
            },
        )?;
        let mut plans = LastPlans::new();
        for (night, from, target, visits) in rows {
            let (_, targets) = plans.entry(night).or_insert((from, BTreeMap::new()));
            targets.insert(target, visits);
        }
        Ok(plans)
    }

    /// Targets that a person paused and did not let go on in the same night.
    fn paused_by_people(&self, first: NightDate, last: NightDate) -> Result<ByNight, LedgerFault> {
        let mut paused = ByNight::new();
        for event in self.events(first, last)? {
            match event.fact {
                Fact::TargetPaused { target, .. } => {
                    paused.entry(event.night).or_default().insert(target);
                }
                Fact::TargetResumed { target, .. } => {
                    paused.entry(event.night).or_default().remove(&target);
                }
                _ => {}
            }
        }
        Ok(paused)
    }

    /// Targets that the settings of those nights had paused.
    fn add_paused_by_settings(
        &self,
        records: &[NightRecord],
        paused: &mut ByNight,
    ) -> Result<(), LedgerFault> {
        let snapshots = self.collect(
            "SELECT target, night, json_extract(body, '$.paused')
             FROM target_snapshots ORDER BY target, night, id",
            [],
            |row| {
                let (target, night): (String, String) = (row.get(0)?, row.get(1)?);
                let is_paused: Option<bool> = row.get(2)?;
                let night = NightDate::parse(&night).map_err(RowError::from)?;
                Ok((TargetId::new(&target), night, is_paused == Some(true)))
            },
        )?;
        for of_target in snapshots.chunk_by(|a, b| a.0 == b.0) {
            for (index, (target, from, is_paused)) in of_target.iter().enumerate() {
                let until = of_target.get(index + 1).map(|next| next.1);
                let holds = |night: NightDate| *from <= night && until.is_none_or(|u| night < u);
                for record in records.iter().filter(|r| *is_paused && holds(r.night)) {
                    let targets = paused.entry(record.night).or_default();
                    targets.insert(target.clone());
                }
            }
        }
        Ok(())
    }
}

fn grouped(rows: Vec<(NightDate, TargetId)>) -> ByNight {
    let mut by_night = ByNight::new();
    for (night, target) in rows {
        by_night.entry(night).or_default().insert(target);
    }
    by_night
}

/// The holds, in order of their start, that touch a span; cut to it.
fn holds_within(holds: &[Hold], span: Span) -> Vec<Hold> {
    // A hold lasts to the end of its night at most, so that one begun a day before is over.
    let first = holds.partition_point(|h| h.span.start < span.start.plus_ms(-crate::time::DAY_MS));
    holds[first..]
        .iter()
        .take_while(|hold| hold.span.start < span.end)
        .map(|hold| Hold {
            span: hold.span.intersect(&span),
            ..hold.clone()
        })
        .filter(|hold| !hold.span.is_empty())
        .collect()
}
