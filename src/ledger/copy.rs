//! A copy of the whole ledger while others write to it, and files that appear whole or not at all.

use std::fs::File;
use std::io;
use std::path::{Path, PathBuf};

use rusqlite::Connection;
use rusqlite::backup::{Backup, StepResult};
use thiserror::Error;

use super::SqliteLedger;
use super::error::{Doing, fault, io_fault};
use crate::ports::LedgerFault;

/// Why a copy was not made.
#[derive(Debug, Error)]
pub enum CopyError {
    /// Something has that name.
    #[error("{path} exists already and is left as it is: name a new one")]
    Exists {
        /// The name.
        path: PathBuf,
    },
    /// Reading or writing failed.
    #[error(transparent)]
    Fault(#[from] LedgerFault),
}

/// Why a file did not get its name.
pub(super) enum PlaceError {
    Taken,
    Fault(LedgerFault),
}

impl From<LedgerFault> for PlaceError {
    fn from(fault: LedgerFault) -> Self {
        PlaceError::Fault(fault)
    }
}

impl SqliteLedger {
    /// Copies the ledger as it is at one instant into a new file, while others go on writing. The
    /// copy is on disk before it gets its name.
    ///
    /// # Errors
    /// [`CopyError::Exists`] when the name is taken; [`CopyError::Fault`].
    pub fn backup(&self, to: &Path) -> Result<(), CopyError> {
        copy_database(&self.connection, &self.path, to).map_err(|error| match error {
            PlaceError::Taken => CopyError::Exists {
                path: to.to_owned(),
            },
            PlaceError::Fault(fault) => CopyError::Fault(fault),
        })
    }
}

/// One step over all pages: it reads one snapshot, where several steps would begin anew after each
/// commit of another process and might never end.
pub(super) fn copy_database(from: &Connection, name: &str, to: &Path) -> Result<(), PlaceError> {
    place_copy(to, |draft| {
        let reading = |error| fault(name, Doing::Reading, error);
        let writing = |error| fault(&to.display().to_string(), Doing::Writing, error);
        let mut copy = Connection::open(draft).map_err(writing)?;
        let step = Backup::new(from, &mut copy)
            .and_then(|backup| backup.step(-1))
            .map_err(writing)?;
        if step != StepResult::Done {
            return Err(LedgerFault::Unreadable {
                path: name.to_owned(),
                cause: "another process held it for too long: try again".into(),
            });
        }
        let answer: String = copy
            .query_row("PRAGMA quick_check(1)", [], |row| row.get(0))
            .map_err(reading)?;
        if answer != "ok" {
            return Err(LedgerFault::Damaged {
                path: name.to_owned(),
                detail: answer,
            });
        }
        copy.close().map_err(|(_, error)| writing(error))
    })
}

/// Has a file written under a passing name in the same folder, flushes it and gives it its name,
/// which must be free.
pub(super) fn place_copy(
    to: &Path,
    write: impl FnOnce(&Path) -> Result<(), LedgerFault>,
) -> Result<(), PlaceError> {
    let failed = |error| PlaceError::Fault(io_fault(to, Doing::Writing, error));
    if std::fs::symlink_metadata(to).is_ok() {
        return Err(PlaceError::Taken);
    }
    let draft = tempfile::Builder::new()
        .prefix(".nightwright-")
        .permissions(readable_by_all())
        .tempfile_in(folder_of(to))
        .map_err(failed)?;
    write(draft.path())?;
    draft.as_file().sync_all().map_err(failed)?;
    match draft.persist_noclobber(to) {
        Ok(_) => sync_folder(to).map_err(failed),
        Err(error) if error.error.kind() == io::ErrorKind::AlreadyExists => Err(PlaceError::Taken),
        Err(error) => Err(failed(error.error)),
    }
}

/// As any new file: the umask takes away what the machine's owner wants taken away.
fn readable_by_all() -> std::fs::Permissions {
    std::os::unix::fs::PermissionsExt::from_mode(0o666)
}

fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    }
}

/// A new name is durable once its folder is flushed.
pub(super) fn sync_folder(path: &Path) -> io::Result<()> {
    File::open(folder_of(path))?.sync_all()
}
