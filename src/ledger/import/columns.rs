//! What a record may hold, and under which name a file holds it.

use std::collections::BTreeMap;

use thiserror::Error;

/// What a record may hold.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Field {
    /// Name of the star.
    Target,
    /// Right ascension: degrees, or hours, minutes and seconds.
    Ra,
    /// Declination: degrees, or degrees, minutes and seconds.
    Dec,
    /// Middle of the exposure, date and time.
    UtcMid,
    /// Start of the exposure, date and time.
    UtcStart,
    /// Time of day of the start, where the date stands alone.
    TimeStart,
    /// Middle of the exposure, modified Julian date.
    MjdMid,
    /// Start of the exposure, modified Julian date.
    MjdStart,
    /// Middle of the exposure, Julian date.
    JdMid,
    /// Start of the exposure, Julian date.
    JdStart,
    /// Time scale of the times.
    TimeScale,
    /// Length of the exposure, seconds.
    ExposureS,
    /// Signal-to-noise.
    Snr,
    /// Velocity error, m/s.
    RvErrorMS,
    /// Airmass.
    Airmass,
    /// Remark.
    Note,
}

impl Field {
    /// All fields, with their names in mappings and CSV headers.
    pub const ALL: [(Field, &'static str); 16] = [
        (Field::Target, "target"),
        (Field::Ra, "ra"),
        (Field::Dec, "dec"),
        (Field::UtcMid, "utc_mid"),
        (Field::UtcStart, "utc_start"),
        (Field::TimeStart, "time_start"),
        (Field::MjdMid, "mjd_mid"),
        (Field::MjdStart, "mjd_start"),
        (Field::JdMid, "jd_mid"),
        (Field::JdStart, "jd_start"),
        (Field::TimeScale, "time_scale"),
        (Field::ExposureS, "exposure_s"),
        (Field::Snr, "snr"),
        (Field::RvErrorMS, "rv_error_m_s"),
        (Field::Airmass, "airmass"),
        (Field::Note, "note"),
    ];

    /// Keywords of a FITS header in which the field is looked for, best first. Dates, times and
    /// scales are those of the FITS standard 4.0, §9 and table 22; the rest is common practice, no
    /// source.
    pub(super) const fn fits_keywords(self) -> &'static [&'static str] {
        match self {
            Field::Target => &["OBJECT"],
            // No CRVALn: in a spectrum these are wavelengths and orders.
            Field::Ra => &["RA", "OBJRA"],
            Field::Dec => &["DEC", "OBJDEC"],
            Field::UtcMid => &["DATE-AVG"],
            Field::UtcStart => &["DATE-BEG", "DATE-OBS"],
            Field::TimeStart => &["TIME-OBS", "UTC", "UT", "UTSTART"],
            Field::MjdMid => &["MJD-AVG"],
            Field::MjdStart => &["MJD-BEG", "MJD-OBS"],
            Field::JdMid => &["JD-AVG"],
            Field::JdStart => &["JD"],
            Field::TimeScale => &["TIMESYS"],
            Field::ExposureS => &["XPOSURE", "EXPTIME", "EXPOSURE"],
            Field::Snr => &["SNR"],
            Field::RvErrorMS => &["RVERR", "RV_ERR"],
            Field::Airmass => &["AIRMASS"],
            Field::Note => &[],
        }
    }

    /// The field's name in mappings and CSV headers.
    pub fn name(self) -> &'static str {
        let found = Field::ALL.iter().find(|(field, _)| *field == self);
        found.map_or("", |(_, name)| name)
    }
}

/// Why a mapping was not understood.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum ColumnError {
    /// Not of the form FIELD=NAME.
    #[error("'{found}' maps nothing: write FIELD=NAME, like target=OBJECT")]
    NoMapping {
        /// The text found.
        found: String,
    },
    /// Not a field.
    #[error("'{found}' is no field of a record: the fields are {known}")]
    NoField {
        /// The text found.
        found: String,
        /// All fields.
        known: String,
    },
}

/// Under which name each field stands, where it is not the usual one.
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct Columns(BTreeMap<Field, String>);

impl Columns {
    /// From texts of the form FIELD=NAME; a later one replaces an earlier one of the same field.
    ///
    /// # Errors
    /// [`ColumnError`] for the first that is not understood.
    pub fn parse<S: AsRef<str>>(mappings: &[S]) -> Result<Self, ColumnError> {
        let mut columns = BTreeMap::new();
        for mapping in mappings {
            let mapping = mapping.as_ref();
            let (field, name) = match mapping.split_once('=') {
                Some((field, name)) if !name.trim().is_empty() => (field.trim(), name.trim()),
                _ => {
                    return Err(ColumnError::NoMapping {
                        found: mapping.to_owned(),
                    });
                }
            };
            let known = Field::ALL.iter().find(|(_, name)| *name == field);
            let Some((field, _)) = known else {
                let names: Vec<&str> = Field::ALL.iter().map(|(_, name)| *name).collect();
                return Err(ColumnError::NoField {
                    found: field.to_owned(),
                    known: names.join(", "),
                });
            };
            columns.insert(*field, name.to_owned());
        }
        Ok(Columns(columns))
    }

    /// The name under which a field was said to stand.
    pub(super) fn mapped(&self, field: Field) -> Option<&str> {
        self.0.get(&field).map(String::as_str)
    }
}
