//! The whole record as files that other programs read.

use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::path::Path;

use rusqlite::types::ValueRef;
use rusqlite::{Row, Statement};
use serde_json::{Map, Value};

use super::copy::sync_folder;
use super::error::{Doing, io_fault};
use super::votable::{Datatype, Votable};
use super::{CopyError, SqliteLedger};
use crate::ports::LedgerFault;
use crate::time::Utc;

/// What is exported, in this order: every table but the journal's own bookkeeping, and the views
/// that show what stands.
pub(super) const TABLES: [&str; 16] = [
    "nights",
    "night_summaries",
    "darkness_parts",
    "plan_revisions",
    "planned_visits",
    "left_out",
    "visits",
    "visits_now",
    "leases",
    "lease_extensions",
    "holds_now",
    "weather_samples",
    "events",
    "target_snapshots",
    "journal",
    "hold_ends",
];

/// Instants are kept in columns of this ending and exported as RFC 3339 under [`UTC_SUFFIX`].
const UNIX_MS_SUFFIX: &str = "_unix_ms";
const UTC_SUFFIX: &str = "_utc";

/// How tables are written.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ExportFormat {
    /// A header and a line a row (RFC 4180).
    Csv,
    /// An array of objects.
    Json,
    /// VOTable 1.4 in its TABLEDATA form (IVOA Recommendation of 2019-10-21).
    Votable,
}

impl ExportFormat {
    const fn extension(self) -> &'static str {
        match self {
            ExportFormat::Csv => "csv",
            ExportFormat::Json => "json",
            ExportFormat::Votable => "vot",
        }
    }
}

/// A table being written.
enum Sink {
    Csv(Box<csv::Writer<BufWriter<File>>>),
    Json(BufWriter<File>, bool),
    Votable(Votable<File>),
}

impl SqliteLedger {
    /// Writes every table to a file of its own in a new folder, which gets its name when all are
    /// there. Gives the number of rows by table.
    ///
    /// # Errors
    /// [`CopyError::Exists`] when the name is taken; [`CopyError::Fault`].
    pub fn export(
        &self,
        folder: &Path,
        format: ExportFormat,
    ) -> Result<Vec<(&'static str, u64)>, CopyError> {
        if fs::symlink_metadata(folder).is_ok() {
            return Err(CopyError::Exists {
                path: folder.to_owned(),
            });
        }
        let failed = |error| io_fault(folder, Doing::Writing, error);
        let parent = match folder.parent() {
            Some(parent) if !parent.as_os_str().is_empty() => parent,
            _ => Path::new("."),
        };
        let draft = tempfile::Builder::new()
            .prefix(".nightwright-")
            .permissions(std::os::unix::fs::PermissionsExt::from_mode(0o777))
            .tempdir_in(parent)
            .map_err(failed)?;
        let mut counts = Vec::with_capacity(TABLES.len());
        for table in TABLES {
            let file = draft.path().join(format!("{table}.{}", format.extension()));
            counts.push((table, self.export_table(table, &file, format)?));
        }
        fs::rename(draft.path(), folder).map_err(failed)?;
        // It has its name now and is no passing folder any more.
        let _ = draft.keep();
        sync_folder(folder).map_err(failed)?;
        Ok(counts)
    }

    fn export_table(
        &self,
        table: &str,
        path: &Path,
        format: ExportFormat,
    ) -> Result<u64, LedgerFault> {
        let failed = |error| io_fault(path, Doing::Writing, error);
        let mut statement = self
            .connection
            .prepare(&format!("SELECT * FROM {table} ORDER BY 1, 2"))
            .map_err(|error| self.reading(error))?;
        let columns = columns_of(&statement);
        let file = BufWriter::new(File::create(path).map_err(failed)?);
        let mut sink = Sink::new(file, format, table, &columns).map_err(failed)?;
        let mut rows = statement.query([]).map_err(|error| self.reading(error))?;
        let mut count = 0;
        while let Some(row) = rows.next().map_err(|error| self.reading(error))? {
            let values = row_values(row, &columns).map_err(|error| self.reading(error))?;
            sink.write(&columns, values).map_err(failed)?;
            count += 1;
        }
        sink.finish().map_err(failed)?;
        Ok(count)
    }
}

/// A column's name as exported, and what it holds.
struct Column {
    name: String,
    instant: bool,
    datatype: Datatype,
}

fn columns_of(statement: &Statement<'_>) -> Vec<Column> {
    let columns = statement.columns();
    let described = columns.map(|column| {
        let stem = column.name().strip_suffix(UNIX_MS_SUFFIX);
        let datatype = match column.decl_type() {
            _ if stem.is_some() => Datatype::Text,
            Some("INTEGER") => Datatype::Long,
            Some("REAL") => Datatype::Double,
            _ => Datatype::Text,
        };
        Column {
            name: stem.map_or_else(
                || column.name().to_owned(),
                |stem| format!("{stem}{UTC_SUFFIX}"),
            ),
            instant: stem.is_some(),
            datatype,
        }
    });
    described.collect()
}

fn row_values(row: &Row<'_>, columns: &[Column]) -> rusqlite::Result<Vec<Value>> {
    let mut values = Vec::with_capacity(columns.len());
    for (index, column) in columns.iter().enumerate() {
        values.push(match row.get_ref(index)? {
            ValueRef::Null => Value::Null,
            ValueRef::Integer(ms) if column.instant => {
                Value::from(Utc::from_unix_ms(ms).to_string())
            }
            ValueRef::Integer(number) => Value::from(number),
            ValueRef::Real(number) => Value::from(number),
            ValueRef::Text(bytes) | ValueRef::Blob(bytes) => {
                Value::from(String::from_utf8_lossy(bytes).into_owned())
            }
        });
    }
    Ok(values)
}

impl Sink {
    fn new(
        mut file: BufWriter<File>,
        format: ExportFormat,
        table: &str,
        columns: &[Column],
    ) -> std::io::Result<Self> {
        match format {
            ExportFormat::Csv => {
                let mut writer = csv::Writer::from_writer(file);
                writer.write_record(columns.iter().map(|column| &column.name))?;
                Ok(Sink::Csv(Box::new(writer)))
            }
            ExportFormat::Json => {
                file.write_all(b"[")?;
                Ok(Sink::Json(file, true))
            }
            ExportFormat::Votable => {
                let fields: Vec<(&str, Datatype)> = columns
                    .iter()
                    .map(|column| (column.name.as_str(), column.datatype))
                    .collect();
                Ok(Sink::Votable(Votable::begin(file, table, &fields)?))
            }
        }
    }

    fn write(&mut self, columns: &[Column], values: Vec<Value>) -> std::io::Result<()> {
        match self {
            Sink::Csv(writer) => Ok(writer.write_record(values.iter().map(plain_text))?),
            Sink::Json(file, first) => {
                file.write_all(if *first { b"\n" } else { b",\n" })?;
                *first = false;
                let names = columns.iter().map(|column| column.name.clone());
                let object: Map<String, Value> = names.zip(values).collect();
                Ok(serde_json::to_writer(file, &object)?)
            }
            Sink::Votable(votable) => votable.row(&values),
        }
    }

    /// Ends the file and has it on disk.
    fn finish(self) -> std::io::Result<()> {
        let mut file = match self {
            Sink::Csv(writer) => writer.into_inner().map_err(|e| e.into_error())?,
            Sink::Json(mut file, _) => {
                file.write_all(b"\n]\n")?;
                file
            }
            Sink::Votable(votable) => votable.end()?,
        };
        file.flush()?;
        file.get_ref().sync_all()
    }
}

/// Text bare, absence as nothing, numbers as in JSON.
fn plain_text(value: &Value) -> String {
    match value {
        Value::Null => String::new(),
        Value::String(text) => text.clone(),
        other => other.to_string(),
    }
}
