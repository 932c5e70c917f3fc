//! The record of nights.

use thiserror::Error;

use crate::night::Fact;
use crate::record::Visit;
use crate::time::NightDate;

/// Why the ledger did not do what was asked.
#[derive(Debug, Error)]
pub enum LedgerFault {
    /// The disk is full, read-only or broken: nothing of the batch was kept.
    #[error("the ledger {path} cannot be written")]
    Unwritable {
        /// File.
        path: String,
        /// What the storage said.
        #[source]
        cause: Box<dyn std::error::Error + Send + Sync>,
    },
    /// What is in the file is not what this program wrote.
    #[error("the ledger {path} is damaged: {detail}")]
    Damaged {
        /// File.
        path: String,
        /// What was found.
        detail: String,
    },
    /// The batch gainsays what is already kept (a lease twice, a revision twice): nothing of it was
    /// kept.
    #[error("the ledger {path} already holds something else: {detail}")]
    Contradicted {
        /// File.
        path: String,
        /// Which rule of the record was broken.
        detail: String,
    },
    /// Reading failed.
    #[error("the ledger {path} cannot be read")]
    Unreadable {
        /// File.
        path: String,
        /// What the storage said.
        #[source]
        cause: Box<dyn std::error::Error + Send + Sync>,
    },
}

/// The record of nights.
pub trait Ledger {
    /// Keeps the facts, all or none. When it returns `Ok`, they are on disk and survive a power cut.
    /// The end of a visit under a report key that the ledger already holds for that visit is left
    /// out: a report counts once, however often it comes.
    ///
    /// # Errors
    /// [`LedgerFault::Unwritable`] or [`LedgerFault::Contradicted`]; nothing of the batch was kept.
    fn append(&mut self, night: NightDate, facts: &[Fact]) -> Result<(), LedgerFault>;

    /// The facts of a night in the order in which they were kept; empty for an unknown night.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    fn facts(&self, night: NightDate) -> Result<Vec<Fact>, LedgerFault>;

    /// Every visit as it stands now (amended ones as amended), by time, of nights up to and
    /// including `until`.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    fn visits(&self, until: Option<NightDate>) -> Result<Vec<Visit>, LedgerFault>;

    /// The latest night that was opened and not closed, if any.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    fn open_night(&self) -> Result<Option<NightDate>, LedgerFault>;
}
