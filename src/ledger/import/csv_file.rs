//! Records in a CSV file.

use csv::{ByteRecord, ReaderBuilder};
use thiserror::Error;

use super::instants::record;
use super::{Columns, Field, Found, Refusal};

/// Why a file holds no records at all.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum CsvError {
    /// A column that was mapped is not there.
    #[error("there is no column '{wanted}': the header has {found}")]
    NoSuchColumn {
        /// The name asked for.
        wanted: String,
        /// The header.
        found: String,
    },
    /// A column that every record needs is not there.
    #[error("there is no column for {wanted}: the header has {found}")]
    MissingColumn {
        /// What must be there.
        wanted: &'static str,
        /// The header.
        found: String,
    },
    /// A name stands twice in the header.
    #[error("the column '{name}' stands twice in the header")]
    TwiceNamed {
        /// The name.
        name: String,
    },
    /// The header cannot be read.
    #[error("the header cannot be read: {0}")]
    Header(String),
}

/// Reads the records of a CSV file with a header (RFC 4180; a byte-order mark, CRLF and semicolons
/// between the columns do no harm). Lines that are no records are refused one by one.
///
/// # Errors
/// [`CsvError`] where the header does not hold what every record needs.
pub fn read_csv(bytes: &[u8], columns: &Columns) -> Result<(Vec<Found>, Vec<Refusal>), CsvError> {
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    // The reader counts a line's number before the second byte of CRLF, one too few.
    let bytes = without_carriage_returns(bytes);
    let first_line = bytes.split(|b| *b == b'\n').next().unwrap_or_default();
    let delimiter = if first_line.contains(&b';') && !first_line.contains(&b',') {
        b';'
    } else {
        b','
    };
    let mut reader = ReaderBuilder::new()
        .delimiter(delimiter)
        .flexible(true)
        .from_reader(bytes.as_slice());
    let header = reader
        .headers()
        .map_err(|error| CsvError::Header(error.to_string()))?;
    let names: Vec<String> = header.iter().map(|name| name.trim().to_owned()).collect();
    let layout = Layout::of(&names, columns)?;
    let (mut found, mut refused) = (Vec::new(), Vec::new());
    let mut line = ByteRecord::new();
    loop {
        let origin = |line: u64| format!("line {line}");
        match reader.read_byte_record(&mut line) {
            Ok(false) => break,
            Ok(true) => {
                let origin = origin(line.position().map_or(0, csv::Position::line));
                match layout.read(&origin, &line) {
                    Ok(record) => found.push(record),
                    Err(reason) => refused.push(Refusal { origin, reason }),
                }
            }
            Err(error) => {
                refused.push(Refusal {
                    origin: origin(error.position().map_or(0, csv::Position::line)),
                    reason: error.to_string(),
                });
                break;
            }
        }
    }
    Ok((found, refused))
}

fn without_carriage_returns(bytes: &[u8]) -> Vec<u8> {
    let followed = bytes.iter().zip(bytes.iter().skip(1).chain(&[0]));
    let kept = followed.filter(|pair| *pair != (&b'\r', &b'\n'));
    kept.map(|(byte, _)| *byte).collect()
}

/// Which column holds which field.
struct Layout {
    places: Vec<(Field, usize)>,
    width: usize,
}

impl Layout {
    fn of(names: &[String], columns: &Columns) -> Result<Self, CsvError> {
        for (index, name) in names.iter().enumerate() {
            if names[..index].contains(name) {
                return Err(CsvError::TwiceNamed { name: name.clone() });
            }
        }
        let mut places = Vec::new();
        for (field, usual) in Field::ALL {
            let mapped = columns.mapped(field);
            let wanted = mapped.unwrap_or(usual);
            match names.iter().position(|name| name == wanted) {
                Some(index) => places.push((field, index)),
                None if mapped.is_some() => {
                    return Err(CsvError::NoSuchColumn {
                        wanted: wanted.to_owned(),
                        found: names.join(", "),
                    });
                }
                None => {}
            }
        }
        let layout = Layout {
            places,
            width: names.len(),
        };
        let missing = |wanted| CsvError::MissingColumn {
            wanted,
            found: names.join(", "),
        };
        let by_place = layout.has(&[Field::Ra]) && layout.has(&[Field::Dec]);
        if !by_place && !layout.has(&[Field::Target]) {
            return Err(missing("the target (target, or ra and dec)"));
        }
        let times = [
            Field::UtcMid,
            Field::UtcStart,
            Field::MjdMid,
            Field::MjdStart,
            Field::JdMid,
            Field::JdStart,
        ];
        if !layout.has(&times) {
            return Err(missing("the time (utc_mid, or another way to tell it)"));
        }
        if !layout.has(&[Field::ExposureS]) {
            return Err(missing("the length of exposure (exposure_s)"));
        }
        Ok(layout)
    }

    fn has(&self, fields: &[Field]) -> bool {
        self.places.iter().any(|(field, _)| fields.contains(field))
    }

    fn read(&self, origin: &str, line: &ByteRecord) -> Result<Found, String> {
        if line.len() != self.width {
            return Err(format!(
                "it has {} columns and the header {}: a decimal comma must be a point, and a text \
                 with commas stands in quotes",
                line.len(),
                self.width
            ));
        }
        let mut texts = Vec::with_capacity(self.places.len());
        for (field, index) in &self.places {
            let bytes = line.get(*index).unwrap_or_default();
            let text = std::str::from_utf8(bytes)
                .map_err(|_| format!("{} is not UTF-8 text", field.name()))?;
            texts.push((*field, text.trim()));
        }
        record(origin, |field| {
            let found = texts
                .iter()
                .find(|(f, text)| *f == field && !text.is_empty());
            found.map(|(_, text)| (*text).to_owned())
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const HEADER: &str = "target,utc_mid,exposure_s,snr,rv_error_m_s";

    fn read(text: &str, mappings: &[&str]) -> Result<(Vec<Found>, Vec<Refusal>), CsvError> {
        read_csv(text.as_bytes(), &Columns::parse(mappings).unwrap())
    }

    #[test]
    fn byte_order_mark_crlf_and_semicolons_do_no_harm() {
        let line = "A,2026-12-01T23:30:00Z,600,,1.5";
        let plain = read(&format!("{HEADER}\n{line}\n"), &[]).unwrap();
        assert_eq!(plain.0.len(), 1);
        assert_eq!((plain.0[0].snr, plain.0[0].rv_error_m_s), (None, Some(1.5)));
        let marked = format!("\u{feff}{HEADER}\r\n{line}\r\n");
        assert_eq!(read(&marked, &[]).unwrap(), plain);
        let semicolons = format!("{HEADER}\n{line}").replace(',', ";");
        assert_eq!(read(&semicolons, &[]).unwrap(), plain);
    }

    #[test]
    fn lines_that_are_no_records_are_refused_one_by_one() {
        let check = |line: &str, word: &str| {
            let text = format!("{HEADER}\nA,2026-12-01T23:30:00Z,600,,\n{line}\n");
            let (found, refused) = read(&text, &[]).unwrap();
            assert_eq!((found.len(), refused.len()), (1, 1), "{line}");
            assert_eq!(refused[0].origin, "line 3");
            assert!(refused[0].reason.contains(word), "{}", refused[0].reason);
        };
        check("A,2026-12-01T23:30:00Z,600,1,5,1,2", "columns");
        check("A,2026-12-01T23:30:00Z,600,\"1,5\",", "decimal mark");
        check("A,2026-12-01T23:30:00Z,NaN,,", "no number");
        check("A,2026-12-01T23:30:00Z,-600,,", "above 0");
        check("A,2026-12-01T23:30:00Z,,,", "no length of exposure");
        check("A,yesterday,600,,", "date");
        check("A,,600,,", "no date");
        check(",2026-12-01T23:30:00Z,600,,", "no target");
        check("A,2026-12-01T23:30:00Z,6000000,,", "longer than a day");
    }

    #[test]
    fn columns_are_found_by_mapping_or_missed_by_name() {
        let text = "OBJECT,MJD,texp\nA,61375.5,600\n";
        let mappings = ["target=OBJECT", "mjd_mid=MJD", "exposure_s=texp"];
        assert_eq!(read(text, &mappings).unwrap().0.len(), 1);
        for (text, mappings) in [
            (text, &["target=OBJECT", "mjd_mid=MJD"][..]),
            (text, &["target=STAR", "mjd_mid=MJD", "exposure_s=texp"]),
            ("target,target\n", &[]),
            ("", &[]),
        ] {
            assert!(read(text, mappings).is_err(), "{text}");
        }
        assert!(Columns::parse(&["target"]).is_err());
        assert!(Columns::parse(&["star=OBJECT"]).is_err());
    }
}
