//! Making, opening, locking and bringing up to date.

use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::Read;
use std::path::{Path, PathBuf};
use std::time::Duration;

use rusqlite::config::DbConfig;
use rusqlite::{Connection, MAIN_DB, OpenFlags};

use super::copy::{PlaceError, place_copy, sync_folder};
use super::error::{Doing, fault, io_fault};
use super::{APPLICATION_ID, LAYOUT, OpenError, SqliteLedger};
use crate::ports::LedgerFault;

mod migrations {
    refinery::embed_migrations!("migrations");
}

/// First bytes of every SQLite file (SQLite file format, §1.3.1).
const MAGIC: &[u8; 16] = b"SQLite format 3\0";

/// How long one process waits for another's transaction.
const BUSY_TIMEOUT: Duration = Duration::from_secs(5);

/// Up to this size the whole structure is checked when the file is opened; reading more would
/// delay the start of a night, and `ledger check` does it at leisure.
const QUICK_CHECK_BYTES: u64 = 24 << 20;

/// Of a larger file, the tables that a night's start rests on.
const TABLES_ALWAYS_CHECKED: [&str; 3] = ["nights", "night_summaries", "leases"];

/// The write-ahead log is cut back to this after a checkpoint.
const WAL_LIMIT_BYTES: i64 = 16 << 20;

const STATEMENTS_KEPT: usize = 64;

impl SqliteLedger {
    /// Opens to write beside other processes; makes the file when there is none, and brings an older
    /// one up to date after a copy of it has been put beside it (`FILE.before-vN`).
    ///
    /// # Errors
    /// [`OpenError`]; the file is then as it was.
    pub fn open(path: &Path) -> Result<Self, OpenError> {
        match identify(path)? {
            Found::Nothing => create(path)?,
            Found::SqliteFile => {}
        }
        open_to_write(path, None)
    }

    /// Opens to write as the one run that keeps the nights: a second such call on the file fails as
    /// long as the first ledger lives, in whatever process. Readers and hands ([`Self::open`]) are
    /// not kept out.
    ///
    /// # Errors
    /// [`OpenError::InUse`] beside those of [`Self::open`].
    pub fn open_exclusive(path: &Path) -> Result<Self, OpenError> {
        let found = identify(path)?;
        let lock = lock(path)?;
        if found == Found::Nothing {
            create(path)?;
        }
        open_to_write(path, Some(lock))
    }

    /// Opens to write a ledger that must already be there; `None` when there is no file.
    ///
    /// # Errors
    /// [`OpenError`]; the file is then as it was.
    pub fn open_existing(path: &Path) -> Result<Option<Self>, OpenError> {
        match identify(path)? {
            Found::Nothing => Ok(None),
            Found::SqliteFile => open_to_write(path, None).map(Some),
        }
    }

    /// Opens to ask; `None` when there is no file, which is an empty record. Writes nothing.
    ///
    /// # Errors
    /// [`OpenError`].
    pub fn open_read_only(path: &Path) -> Result<Option<Self>, OpenError> {
        if identify(path)? == Found::Nothing {
            return Ok(None);
        }
        let connection = match connect_reading(path, "") {
            // A write-ahead log needs a writable folder. Without one, and with no log left behind,
            // the file alone is the whole ledger and nobody can be changing it.
            Err(_) if !wal_holds_something(path) => connect_reading(path, "?immutable=1"),
            other => other,
        }?;
        let found = layout(&connection, path)?;
        if found < LAYOUT {
            return Err(OpenError::Older {
                path: shown(path),
                found,
                known: LAYOUT,
            });
        }
        check_structure(&connection, path)?;
        trust(&connection, path)?;
        ready(connection, path, None).map(Some)
    }

    /// A ledger in memory, gone when dropped: for a rehearsal that nobody wants to keep.
    ///
    /// # Errors
    /// [`OpenError`] when there is no memory for it.
    pub fn in_memory() -> Result<Self, OpenError> {
        let path = Path::new(":memory:");
        let mut connection = Connection::open_in_memory()
            .map_err(|error| fault(":memory:", Doing::Writing, error))?;
        migrate(&mut connection, path)?;
        ready(connection, path, None)
    }
}

/// What stands under a name.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Found {
    Nothing,
    SqliteFile,
}

fn shown(path: &Path) -> String {
    path.display().to_string()
}

fn not_a_ledger(path: &Path, found: &str) -> OpenError {
    OpenError::NotALedger {
        path: shown(path),
        found: found.to_owned(),
    }
}

/// Looks at the file without SQLite, which takes an empty file for a new database.
fn identify(path: &Path) -> Result<Found, OpenError> {
    let metadata = match fs::metadata(path) {
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => return Ok(Found::Nothing),
        Err(error) => return Err(io_fault(path, Doing::Reading, error).into()),
        Ok(metadata) => metadata,
    };
    if metadata.is_dir() {
        return Err(not_a_ledger(path, "it is a folder"));
    }
    if !metadata.is_file() {
        return Err(not_a_ledger(path, "it is a device or a pipe"));
    }
    if metadata.len() == 0 {
        return Err(not_a_ledger(path, "it is empty"));
    }
    let mut first = Vec::new();
    File::open(path)
        .and_then(|file| file.take(MAGIC.len() as u64).read_to_end(&mut first))
        .map_err(|error| io_fault(path, Doing::Reading, error))?;
    if first != MAGIC {
        return Err(not_a_ledger(
            path,
            "its first bytes are those of another kind of file",
        ));
    }
    Ok(Found::SqliteFile)
}

/// Name of a file beside the ledger.
fn beside(path: &Path, suffix: &str) -> PathBuf {
    let mut name = path.as_os_str().to_owned();
    name.push(suffix);
    PathBuf::from(name)
}

fn wal_holds_something(path: &Path) -> bool {
    fs::metadata(beside(path, "-wal")).is_ok_and(|wal| wal.len() > 0)
}

/// Takes the lock of the one run that keeps the nights. It is on a file of its own, since SQLite
/// locks parts of the ledger's; that file stays, because removing it would race with the next run.
fn lock(path: &Path) -> Result<File, OpenError> {
    let lock_path = beside(path, ".lock");
    let file = OpenOptions::new()
        .create(true)
        .truncate(false)
        .write(true)
        .open(&lock_path)
        .map_err(|error| io_fault(&lock_path, Doing::Writing, error))?;
    match file.try_lock() {
        Ok(()) => Ok(file),
        Err(TryLockError::WouldBlock) => Err(OpenError::InUse {
            path: shown(path),
            lock: shown(&lock_path),
        }),
        Err(TryLockError::Error(error)) => Err(io_fault(&lock_path, Doing::Writing, error).into()),
    }
}

/// Makes an empty ledger whole in a file of its own before it gets its name, so that a crash leaves
/// nothing that is half a ledger. Another process that was faster wins.
fn create(path: &Path) -> Result<(), OpenError> {
    let made = place_copy(path, |draft| {
        let failed = |error| fault(&shown(path), Doing::Writing, error);
        let mut connection = Connection::open(draft).map_err(failed)?;
        connection
            .pragma_update(None, "journal_mode", "WAL")
            .map_err(failed)?;
        migrate(&mut connection, path)?;
        connection.close().map_err(|(_, error)| failed(error))
    });
    match made {
        Ok(()) | Err(PlaceError::Taken) => Ok(()),
        Err(PlaceError::Fault(fault)) => Err(fault.into()),
    }
}

fn open_to_write(path: &Path, lock: Option<File>) -> Result<SqliteLedger, OpenError> {
    let failed = |error| OpenError::from(fault(&shown(path), Doing::Writing, error));
    let flags = OpenFlags::SQLITE_OPEN_READ_WRITE | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    let mut connection = Connection::open_with_flags(path, flags).map_err(failed)?;
    guard_unchecked(&connection).map_err(failed)?;
    let found = layout(&connection, path)?;
    if connection.is_readonly(MAIN_DB).map_err(failed)? {
        let cause = std::io::Error::from(std::io::ErrorKind::PermissionDenied);
        return Err(io_fault(path, Doing::Writing, cause).into());
    }
    check_structure(&connection, path)?;
    if found < LAYOUT {
        bring_up_to_date(&mut connection, path, lock.is_some())?;
    }
    connection
        .execute_batch(&format!(
            "PRAGMA journal_mode = WAL; PRAGMA synchronous = FULL; PRAGMA foreign_keys = ON;
             PRAGMA journal_size_limit = {WAL_LIMIT_BYTES};"
        ))
        .map_err(failed)?;
    // A disk that is full or a folder that is read-only is found now, not by the first visit.
    connection
        .execute_batch("BEGIN IMMEDIATE; ROLLBACK;")
        .map_err(failed)?;
    trust(&connection, path)?;
    ready(connection, path, lock)
}

/// Until a file has been found to be a sound ledger, closing it must not write to it.
fn guard_unchecked(connection: &Connection) -> rusqlite::Result<()> {
    connection.busy_timeout(BUSY_TIMEOUT)?;
    connection.set_db_config(DbConfig::SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, true)?;
    Ok(())
}

/// Lifts that guard: the last to close a sound ledger folds its write-ahead log back into it.
fn trust(connection: &Connection, path: &Path) -> Result<(), LedgerFault> {
    connection
        .set_db_config(DbConfig::SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, false)
        .map(|_| ())
        .map_err(|error| fault(&shown(path), Doing::Reading, error))
}

/// Opens so that nothing is written. The flags allow writing where the file does: a connection that
/// may not write would leave the write-ahead log's files behind when it closes.
fn connect_reading(path: &Path, query: &str) -> Result<Connection, OpenError> {
    let failed = |error| OpenError::from(fault(&shown(path), Doing::Reading, error));
    let absolute = std::path::absolute(path).map_err(|e| io_fault(path, Doing::Reading, e))?;
    let uri = format!("file:{}{query}", percent_encoded(&absolute));
    let flags = OpenFlags::SQLITE_OPEN_READ_WRITE
        | OpenFlags::SQLITE_OPEN_NO_MUTEX
        | OpenFlags::SQLITE_OPEN_URI;
    let connection = Connection::open_with_flags(uri, flags).map_err(failed)?;
    guard_unchecked(&connection).map_err(failed)?;
    connection
        .pragma_update(None, "query_only", true)
        .map_err(failed)?;
    // The first real read, which opens the write-ahead log.
    let () = connection
        .query_row("SELECT count(*) FROM sqlite_schema", [], |_| Ok(()))
        .map_err(failed)?;
    Ok(connection)
}

/// A path as it may stand in a `file:` URI (RFC 3986, §2.1).
fn percent_encoded(path: &Path) -> String {
    let plain = |byte: &u8| byte.is_ascii_alphanumeric() || b"/-_.~".contains(byte);
    path.as_os_str()
        .as_encoded_bytes()
        .iter()
        .map(|byte| match byte {
            b if plain(b) => char::from(*b).to_string(),
            b => format!("%{b:02X}"),
        })
        .collect()
}

/// The layout of the file, once it is known to be a ledger and not a newer one.
fn layout(connection: &Connection, path: &Path) -> Result<i64, OpenError> {
    let read = |name: &str| -> Result<i64, OpenError> {
        connection
            .pragma_query_value(None, name, |row| row.get(0))
            .map_err(|error| fault(&shown(path), Doing::Reading, error).into())
    };
    if read("application_id")? != APPLICATION_ID {
        return Err(not_a_ledger(
            path,
            "another program's database stands there",
        ));
    }
    let found = read("user_version")?;
    if found > LAYOUT {
        return Err(OpenError::Newer {
            path: shown(path),
            found,
            known: LAYOUT,
        });
    }
    Ok(found)
}

/// Checks that the pages hang together: all of a small file, the vital tables of a large one.
fn check_structure(connection: &Connection, path: &Path) -> Result<(), OpenError> {
    let size = fs::metadata(path).map_or(0, |metadata| metadata.len());
    let checks: Vec<String> = if size <= QUICK_CHECK_BYTES {
        vec!["PRAGMA quick_check(1)".to_owned()]
    } else {
        TABLES_ALWAYS_CHECKED
            .iter()
            .map(|table| format!("PRAGMA quick_check({table})"))
            .collect()
    };
    for check in checks {
        let answer: String = connection
            .query_row(&check, [], |row| row.get(0))
            .map_err(|error| fault(&shown(path), Doing::Reading, error))?;
        if answer != "ok" {
            return Err(LedgerFault::Damaged {
                path: shown(path),
                detail: answer,
            }
            .into());
        }
    }
    Ok(())
}

fn ready(
    connection: Connection,
    path: &Path,
    lock: Option<File>,
) -> Result<SqliteLedger, OpenError> {
    connection.set_prepared_statement_cache_capacity(STATEMENTS_KEPT);
    Ok(SqliteLedger {
        connection,
        path: shown(path),
        _lock: lock,
    })
}

/// Copies an older file aside and migrates it. A run that keeps nights must not find the layout
/// changed under it, so its lock is taken unless it is ours already.
fn bring_up_to_date(
    connection: &mut Connection,
    path: &Path,
    locked: bool,
) -> Result<(), OpenError> {
    let _lock = if locked { None } else { Some(lock(path)?) };
    let mut attempt = 1;
    loop {
        let suffix = match attempt {
            1 => format!(".before-v{LAYOUT}"),
            n => format!(".before-v{LAYOUT}-{n}"),
        };
        match super::copy::copy_database(connection, &shown(path), &beside(path, &suffix)) {
            Ok(()) => break,
            Err(PlaceError::Taken) => attempt += 1,
            Err(PlaceError::Fault(fault)) => return Err(fault.into()),
        }
    }
    migrate(connection, path)?;
    sync_folder(path).map_err(|error| io_fault(path, Doing::Writing, error))?;
    Ok(())
}

/// Runs the migrations that the file has not had.
fn migrate(connection: &mut Connection, path: &Path) -> Result<(), LedgerFault> {
    migrations::migrations::runner()
        .run(connection)
        .map(|_| ())
        .map_err(|error| LedgerFault::Unwritable {
            path: shown(path),
            cause: Box::new(error),
        })
}
