//! Files that are no ledger, are damaged, newer, older or in use.

use std::fs;
use std::path::Path;

use rusqlite::Connection;

use super::{ended, night, opened, scratch};
use crate::ledger::{CopyError, LAYOUT, OpenError, SqliteLedger};
use crate::ports::{Ledger, LedgerFault};
use crate::record::Outcome;

fn filled(path: &Path) {
    let mut ledger = SqliteLedger::open(path).unwrap();
    for number in 0..200 {
        ledger
            .append(night(), &[ended(number, "k", Outcome::Done)])
            .unwrap();
    }
}

type Way = fn(&Path) -> Result<(), OpenError>;

/// Every way of opening refuses the file and leaves its bytes alone.
fn check_refused(path: &Path, expected: impl Fn(&OpenError) -> bool) {
    let before = fs::read(path).unwrap();
    let ways: [Way; 3] = [
        |path| SqliteLedger::open(path).map(drop),
        |path| SqliteLedger::open_exclusive(path).map(drop),
        |path| SqliteLedger::open_read_only(path).map(drop),
    ];
    for open in ways {
        let error = open(path).unwrap_err();
        assert!(expected(&error), "{error:?}");
        assert_eq!(fs::read(path).unwrap(), before);
    }
}

#[test]
fn an_absent_ledger_is_made_only_by_one_who_writes() {
    let (_folder, path) = scratch();
    assert!(SqliteLedger::open_read_only(&path).unwrap().is_none());
    assert!(SqliteLedger::open_existing(&path).unwrap().is_none());
    assert!(!path.exists());
    SqliteLedger::open(&path).unwrap();
    assert!(SqliteLedger::open_read_only(&path).unwrap().is_some());
}

#[test]
fn refuses_what_is_no_ledger() {
    let (_folder, path) = scratch();
    let no_ledger = |error: &OpenError| matches!(error, OpenError::NotALedger { .. });
    for bytes in [
        b"".to_vec(),
        b"half".to_vec(),
        (0..=255).cycle().take(9000).collect(),
    ] {
        fs::write(&path, bytes).unwrap();
        check_refused(&path, no_ledger);
    }
    fs::remove_file(&path).unwrap();
    Connection::open(&path)
        .unwrap()
        .execute_batch("CREATE TABLE mine (x)")
        .unwrap();
    check_refused(&path, no_ledger);
    fs::remove_file(&path).unwrap();
    fs::create_dir(&path).unwrap();
    assert!(no_ledger(&SqliteLedger::open(&path).map(drop).unwrap_err()));
}

#[test]
fn refuses_a_truncated_or_scribbled_ledger() {
    let (_folder, path) = scratch();
    filled(&path);
    let sound = fs::read(&path).unwrap();
    let damaged =
        |error: &OpenError| matches!(error, OpenError::Fault(LedgerFault::Damaged { .. }));
    for length in [100, 4096, 5000, sound.len() / 2, sound.len() - 4096] {
        fs::write(&path, &sound[..length]).unwrap();
        check_refused(&path, damaged);
    }
    // Every page but the first, in turn, overwritten.
    let mut refused = 0;
    for page in 1..sound.len() / 4096 {
        let mut bytes = sound.clone();
        bytes[page * 4096..(page + 1) * 4096].fill(0xA5);
        fs::write(&path, &bytes).unwrap();
        refused += usize::from(SqliteLedger::open(&path).is_err());
        assert_eq!(fs::read(&path).unwrap(), bytes, "page {page}");
    }
    assert_eq!(refused, sound.len() / 4096 - 1);
}

#[test]
fn refuses_a_newer_ledger() {
    let (_folder, path) = scratch();
    filled(&path);
    let connection = Connection::open(&path).unwrap();
    connection
        .pragma_update(None, "user_version", LAYOUT + 1)
        .unwrap();
    connection.close().unwrap();
    check_refused(
        &path,
        |error| matches!(error, OpenError::Newer { found, .. } if *found == LAYOUT + 1),
    );
}

#[test]
fn an_older_ledger_is_copied_before_it_is_migrated() {
    let (folder, path) = scratch();
    // Layout 0: a file that carries our mark and no table yet.
    let connection = Connection::open(&path).unwrap();
    connection
        .execute_batch("PRAGMA application_id = 0x4E574C47; CREATE TABLE old (x); DROP TABLE old;")
        .unwrap();
    connection.close().unwrap();
    assert!(matches!(
        SqliteLedger::open_read_only(&path),
        Err(OpenError::Older { found: 0, .. })
    ));
    let taken = folder
        .path()
        .join(format!("ledger.sqlite.before-v{LAYOUT}"));
    fs::write(&taken, "somebody's").unwrap();
    let mut ledger = SqliteLedger::open(&path).unwrap();
    ledger.append(night(), &[opened(night())]).unwrap();
    assert_eq!(fs::read(&taken).unwrap(), b"somebody's");
    let copy = folder
        .path()
        .join(format!("ledger.sqlite.before-v{LAYOUT}-2"));
    let version: i64 = Connection::open(copy)
        .unwrap()
        .pragma_query_value(None, "user_version", |row| row.get(0))
        .unwrap();
    assert_eq!(version, 0);
}

#[test]
fn one_run_keeps_the_nights_and_others_read_and_copy() {
    let (folder, path) = scratch();
    let mut keeper = SqliteLedger::open_exclusive(&path).unwrap();
    assert!(matches!(
        SqliteLedger::open_exclusive(&path),
        Err(OpenError::InUse { .. })
    ));
    keeper.append(night(), &[opened(night())]).unwrap();
    let reader = SqliteLedger::open_read_only(&path).unwrap().unwrap();
    let hand = SqliteLedger::open(&path).unwrap();
    assert_eq!(reader.facts(night()).unwrap(), hand.facts(night()).unwrap());
    let copy = folder.path().join("copy.sqlite");
    reader.backup(&copy).unwrap();
    assert!(matches!(
        reader.backup(&copy),
        Err(CopyError::Exists { .. })
    ));
    drop(keeper);
    SqliteLedger::open_exclusive(&path).unwrap();
    let copied = SqliteLedger::open_read_only(&copy).unwrap().unwrap();
    assert_eq!(copied.facts(night()).unwrap(), [opened(night())]);
}

#[test]
fn a_reader_writes_nothing() {
    let (_folder, path) = scratch();
    filled(&path);
    let before = fs::read(&path).unwrap();
    let mut reader = SqliteLedger::open_read_only(&path).unwrap().unwrap();
    let refused = reader.append(night(), &[opened(night())]);
    assert!(
        matches!(refused, Err(LedgerFault::Unwritable { .. })),
        "{refused:?}"
    );
    drop(reader);
    assert_eq!(fs::read(&path).unwrap(), before);
    assert!(!path.with_extension("sqlite-wal").exists());
}
