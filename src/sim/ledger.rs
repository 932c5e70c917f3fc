//! A ledger that forgets when it is dropped.

use std::collections::{BTreeMap, BTreeSet};

use crate::night::Fact;
use crate::ports::{Ledger, LedgerFault};
use crate::record::{Visit, VisitId};
use crate::time::NightDate;

const NAME: &str = "in memory";

/// The record of nights in memory: for rehearsals that leave nothing behind, and for tests.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct MemoryLedger {
    nights: BTreeMap<NightDate, Vec<Fact>>,
    broken: bool,
}

impl MemoryLedger {
    /// Makes every write fail from now on, or work again.
    pub fn set_broken(&mut self, broken: bool) {
        self.broken = broken;
    }
}

impl Ledger for MemoryLedger {
    fn append(&mut self, night: NightDate, facts: &[Fact]) -> Result<(), LedgerFault> {
        if self.broken {
            return Err(LedgerFault::Unwritable {
                path: NAME.to_owned(),
                cause: "no space left on device".into(),
            });
        }
        let kept = self.nights.entry(night).or_default();
        let mut leases: BTreeSet<&VisitId> = kept.iter().filter_map(lease_of).collect();
        if let Some(twice) = facts
            .iter()
            .filter_map(lease_of)
            .find(|v| !leases.insert(v))
        {
            return Err(LedgerFault::Contradicted {
                path: NAME.to_owned(),
                detail: format!("visit {twice} was handed out before"),
            });
        }
        kept.extend_from_slice(facts);
        Ok(())
    }

    fn facts(&self, night: NightDate) -> Result<Vec<Fact>, LedgerFault> {
        Ok(self.nights.get(&night).cloned().unwrap_or_default())
    }

    fn visits(&self, until: Option<NightDate>) -> Result<Vec<Visit>, LedgerFault> {
        let mut latest: BTreeMap<&VisitId, &Visit> = BTreeMap::new();
        let nights = self.nights.iter();
        for (_, facts) in nights.filter(|(night, _)| until.is_none_or(|last| **night <= last)) {
            for fact in facts {
                if let Fact::VisitEnded { visit, .. } = fact {
                    latest.insert(&visit.id, visit);
                }
            }
        }
        let mut visits: Vec<Visit> = latest.into_values().cloned().collect();
        visits.sort_by_key(|visit| visit.began);
        Ok(visits)
    }

    fn open_night(&self) -> Result<Option<NightDate>, LedgerFault> {
        let is_open = |facts: &[Fact]| !facts.iter().any(|f| matches!(f, Fact::NightClosed(_)));
        let open = self.nights.iter().rev().find(|(_, facts)| is_open(facts));
        Ok(open.map(|(night, _)| *night))
    }
}

fn lease_of(fact: &Fact) -> Option<&VisitId> {
    match fact {
        Fact::LeaseGranted(lease) => Some(&lease.visit),
        _ => None,
    }
}
