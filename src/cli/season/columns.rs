//! Every visit of every realisation as a Parquet file.

use std::fs::File;
use std::path::Path;
use std::sync::Arc;

use parquet::basic::Compression;
use parquet::data_type::{ByteArray, ByteArrayType, DoubleType, Int32Type, Int64Type};
use parquet::errors::ParquetError;
use parquet::file::properties::WriterProperties;
use parquet::file::writer::{
    SerializedColumnWriter, SerializedFileWriter, SerializedRowGroupWriter,
};
use parquet::schema::parser::parse_message_type;

use crate::cli::Trouble;
use crate::season::{Frame, Realised, VisitRow};

/// The columns in order. Times are milliseconds of Unix time.
const SCHEMA: &str = "message visits {
    required int32 realisation;
    required binary target (STRING);
    required binary programme (STRING);
    required binary night (STRING);
    required int64 start (TIMESTAMP(MILLIS, true));
    required int64 end (TIMESTAMP(MILLIS, true));
    required double exposed_s;
    required double credit;
    required binary outcome (STRING);
    optional double airmass;
    optional double rv_error_m_s;
}";

/// Writes the file: a row group a realisation.
///
/// # Errors
/// [`Trouble`] when the disk does not let it.
pub fn write(path: &Path, frame: &Frame, all: &[Realised]) -> Result<(), Trouble> {
    written(path, frame, all).map_err(|error| {
        Trouble::machine(format!("{} cannot be written", path.display())).because(&error)
    })
}

fn written(path: &Path, frame: &Frame, all: &[Realised]) -> Result<(), ParquetError> {
    let schema = Arc::new(parse_message_type(SCHEMA)?);
    let properties = WriterProperties::builder()
        .set_compression(Compression::SNAPPY)
        .build();
    let mut file = SerializedFileWriter::new(File::create(path)?, schema, Arc::new(properties))?;
    for realised in all {
        let mut group = file.next_row_group()?;
        Group {
            frame,
            realised,
            visits: &realised.visits,
        }
        .write(&mut group)?;
        group.close()?;
    }
    file.close()?;
    Ok(())
}

struct Group<'a> {
    frame: &'a Frame,
    realised: &'a Realised,
    visits: &'a [VisitRow],
}

impl Group<'_> {
    fn write(&self, group: &mut SerializedRowGroupWriter<'_, File>) -> Result<(), ParquetError> {
        let mut index = 0;
        while let Some(mut column) = group.next_column()? {
            self.column(index, &mut column)?;
            column.close()?;
            index += 1;
        }
        Ok(())
    }

    fn column(
        &self,
        index: usize,
        to: &mut SerializedColumnWriter<'_>,
    ) -> Result<(), ParquetError> {
        let first = self.frame.first_night();
        let target = |v: &VisitRow| self.frame.targets.get(v.star as usize);
        let programme = |v: &VisitRow| self.frame.programmes.get(target(v)?.programme);
        let night =
            |v: &VisitRow| first.map(|first| first.plus_nights(i64::from(v.night)).to_string());
        match index {
            0 => {
                let number = i32::try_from(self.realised.number).unwrap_or(i32::MAX);
                let values = vec![number; self.visits.len()];
                to.typed::<Int32Type>().write_batch(&values, None, None)?;
            }
            1 => self.texts(to, |v| target(v).map_or(String::new(), |t| t.id.clone()))?,
            2 => self.texts(to, |v| programme(v).map_or(String::new(), |p| p.id.clone()))?,
            3 => self.texts(to, |v| night(v).unwrap_or_default())?,
            4 => self.times(to, |v| v.start_unix_ms)?,
            5 => self.times(to, |v| v.end_unix_ms)?,
            6 => self.numbers(to, |v| v.exposed_s)?,
            7 => self.numbers(to, |v| v.credit)?,
            8 => self.texts(to, |v| v.outcome.clone())?,
            9 => self.known(to, |v| v.airmass)?,
            _ => self.known(to, |v| v.rv_error_m_s)?,
        }
        Ok(())
    }

    fn texts(
        &self,
        to: &mut SerializedColumnWriter<'_>,
        of: impl Fn(&VisitRow) -> String,
    ) -> Result<(), ParquetError> {
        let texts = self.visits.iter().map(|v| of(v).into_bytes().into());
        let values: Vec<ByteArray> = texts.collect();
        to.typed::<ByteArrayType>()
            .write_batch(&values, None, None)?;
        Ok(())
    }

    fn times(
        &self,
        to: &mut SerializedColumnWriter<'_>,
        of: impl Fn(&VisitRow) -> i64,
    ) -> Result<(), ParquetError> {
        let values: Vec<i64> = self.visits.iter().map(of).collect();
        to.typed::<Int64Type>().write_batch(&values, None, None)?;
        Ok(())
    }

    fn numbers(
        &self,
        to: &mut SerializedColumnWriter<'_>,
        of: impl Fn(&VisitRow) -> f64,
    ) -> Result<(), ParquetError> {
        let values: Vec<f64> = self.visits.iter().map(of).collect();
        to.typed::<DoubleType>().write_batch(&values, None, None)?;
        Ok(())
    }

    /// What may be unknown: the values that are there, and for each row whether one is.
    fn known(
        &self,
        to: &mut SerializedColumnWriter<'_>,
        of: impl Fn(&VisitRow) -> Option<f64>,
    ) -> Result<(), ParquetError> {
        let all: Vec<Option<f64>> = self.visits.iter().map(of).collect();
        let values: Vec<f64> = all.iter().flatten().copied().collect();
        let there: Vec<i16> = all.iter().map(|v| i16::from(v.is_some())).collect();
        to.typed::<DoubleType>()
            .write_batch(&values, Some(&there), None)?;
        Ok(())
    }
}
