//! Which ledger a command is about, and what its faults mean for the exit code.

use std::path::{Path, PathBuf};

use super::{Exit, Global, Trouble, load};
use crate::ledger::{CopyError, OpenError, SqliteLedger};
use crate::ports::LedgerFault;

/// The argument that names a ledger.
#[derive(Debug, clap::Args)]
pub struct LedgerFile {
    /// Ledger, instead of the configured one
    #[arg(long, value_name = "FILE")]
    pub ledger: Option<PathBuf>,
}

impl LedgerFile {
    /// The file named, or the configured one; the configuration is read only for the latter.
    ///
    /// # Errors
    /// [`Trouble`] when the configuration is needed and faulty.
    pub fn path(&self, global: &Global) -> Result<PathBuf, Trouble> {
        match &self.ledger {
            Some(path) => Ok(path.clone()),
            None => Ok(PathBuf::from(load::settings(global)?.daemon.ledger)),
        }
    }
}

/// Opens to read a ledger that must be there.
///
/// # Errors
/// [`Trouble`]: exit code 2 when there is none or something else stands there, 3 when it cannot be
/// read.
pub fn existing(path: &Path) -> Result<SqliteLedger, Trouble> {
    SqliteLedger::open_read_only(path)?.ok_or_else(|| absent(path))
}

/// There is no ledger where one must be.
pub fn absent(path: &Path) -> Trouble {
    Trouble::misuse(format!("there is no ledger {}", path.display()))
        .hint("name it with --ledger FILE; `rehearse`, `run` and `log` make one")
}

impl From<OpenError> for Trouble {
    fn from(error: OpenError) -> Self {
        match error {
            OpenError::Fault(fault) => fault.into(),
            other => Trouble::from_error(Exit::Misuse, &other),
        }
    }
}

impl From<LedgerFault> for Trouble {
    fn from(fault: LedgerFault) -> Self {
        let trouble = Trouble::from_error(Exit::Machine, &fault);
        match fault {
            LedgerFault::Unwritable { .. } => {
                trouble.hint("is the disk full, or the folder read-only? nothing was kept")
            }
            LedgerFault::Damaged { .. } => trouble
                .hint("put a copy made by `ledger backup` in its place; the file is left as it is"),
            LedgerFault::Contradicted { .. } | LedgerFault::Unreadable { .. } => trouble,
        }
    }
}

impl From<CopyError> for Trouble {
    fn from(error: CopyError) -> Self {
        match error {
            CopyError::Fault(fault) => fault.into(),
            exists @ CopyError::Exists { .. } => Trouble::from_error(Exit::Misuse, &exists),
        }
    }
}
