//! Floor 5: the record of nights as one SQLite file.
//!
//! Two layers are written in the same transaction. The *journal* holds every [`crate::night::Fact`]
//! in order and gives it back without loss: folding it is how a night is recovered. The tables
//! drawn from it (nights, revisions, visits, holds, weather, events) are what reports ask. Visits
//! have a third source, a person's hand ([`HandEntry`]): added, imported or amended. Nothing is ever
//! changed in place; the file itself refuses it.
//!
//! A ledger is opened in one of three ways: [`SqliteLedger::open`] to write beside others,
//! [`SqliteLedger::open_exclusive`] for the one run that keeps the nights, and
//! [`SqliteLedger::open_read_only`] to ask, which never makes a file.

mod accounts;
mod check;
mod copy;
mod error;
mod export;
mod hand;
pub mod import;
mod labels;
mod open;
mod read;
mod reports;
mod rows;
mod votable;
mod write;

#[cfg(test)]
mod tests;

use std::fs::File;

use rusqlite::Connection;

pub use check::{CheckReport, TableCount};
pub use copy::CopyError;
pub use error::OpenError;
pub use export::ExportFormat;
pub use hand::{HandEntry, HandSource, Recorded};
pub use read::{Event, NightRecord, OpenLease, PlannedVisit};

use crate::ports::LedgerFault;
use error::{Doing, fault};

/// The newest layout of the file that this program knows: the number of its last migration.
pub const LAYOUT: i64 = 2;

/// Says in the file's header that it is a ledger of this program ("NWLG").
const APPLICATION_ID: i64 = 0x4E57_4C47;

/// A ledger in a SQLite file.
pub struct SqliteLedger {
    connection: Connection,
    path: String,
    /// Held, not read: the lock ends with it.
    _lock: Option<File>,
}

impl SqliteLedger {
    /// The file, as text for messages.
    pub fn path(&self) -> &str {
        &self.path
    }

    fn reading(&self, error: rusqlite::Error) -> LedgerFault {
        fault(&self.path, Doing::Reading, error)
    }

    fn writing(&self, error: rusqlite::Error) -> LedgerFault {
        fault(&self.path, Doing::Writing, error)
    }

    fn damaged(&self, detail: String) -> LedgerFault {
        LedgerFault::Damaged {
            path: self.path.clone(),
            detail,
        }
    }
}
