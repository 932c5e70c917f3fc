//! Why a ledger was not opened, or did not do what was asked.

use std::path::Path;

use rusqlite::ErrorCode;
use thiserror::Error;

use crate::ports::LedgerFault;

/// Why a ledger was not opened.
#[derive(Debug, Error)]
pub enum OpenError {
    /// Something else stands in its place.
    #[error(
        "{path} is no ledger: {found}; name another file, or move this one away to begin a new ledger"
    )]
    NotALedger {
        /// File.
        path: String,
        /// What was found instead.
        found: String,
    },
    /// A later version of this program wrote it.
    #[error(
        "the ledger {path} has layout {found} and this program knows layouts up to {known}: use the newer version that wrote it"
    )]
    Newer {
        /// File.
        path: String,
        /// Layout of the file.
        found: i64,
        /// Newest layout known here.
        known: i64,
    },
    /// An earlier version wrote it, and it was opened for reading alone.
    #[error(
        "the ledger {path} has the older layout {found}: `nightwright ledger check` brings it up to {known} after a backup"
    )]
    Older {
        /// File.
        path: String,
        /// Layout of the file.
        found: i64,
        /// Newest layout known here.
        known: i64,
    },
    /// Another run holds it.
    #[error("the ledger {path} is in use by another run (which holds {lock}): stop that one first")]
    InUse {
        /// File.
        path: String,
        /// The lock's file.
        lock: String,
    },
    /// The storage failed, or what it gave is damaged.
    #[error(transparent)]
    Fault(#[from] LedgerFault),
}

/// What was being done when the storage failed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Doing {
    Reading,
    Writing,
}

/// Sorts a storage error by what it calls for.
pub(super) fn fault(path: &str, doing: Doing, error: rusqlite::Error) -> LedgerFault {
    let path = path.to_owned();
    match error.sqlite_error_code() {
        Some(ErrorCode::DatabaseCorrupt | ErrorCode::NotADatabase) => LedgerFault::Damaged {
            path,
            detail: error.to_string(),
        },
        Some(ErrorCode::ConstraintViolation) => LedgerFault::Contradicted {
            path,
            detail: error.to_string(),
        },
        _ if doing == Doing::Writing => LedgerFault::Unwritable {
            path,
            cause: Box::new(error),
        },
        _ => LedgerFault::Unreadable {
            path,
            cause: Box::new(error),
        },
    }
}

/// A file-system error beside the ledger's file.
pub(super) fn io_fault(path: &Path, doing: Doing, error: std::io::Error) -> LedgerFault {
    let path = path.display().to_string();
    let cause = Box::new(error);
    match doing {
        Doing::Writing => LedgerFault::Unwritable { path, cause },
        Doing::Reading => LedgerFault::Unreadable { path, cause },
    }
}
