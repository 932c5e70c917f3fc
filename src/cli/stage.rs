//! What most commands begin with: settings, observer, the night meant, the visits so far.

use std::path::{Path, PathBuf};

use crate::ephemeris::{EarthRotation, EphemerisError, Observer, RotationQuality};
use crate::ledger::SqliteLedger;
use crate::ports::Ledger;
use crate::record::Visit;
use crate::settings::Settings;
use crate::time::{Night, NightDate, Utc};

use super::{Exit, Global, Trouble, load, output};

/// Settings with the observer made from them.
pub struct Stage {
    /// The checked settings.
    pub settings: Settings,
    /// Site and rotation of the Earth.
    pub observer: Observer,
}

/// Loads the configuration folder.
///
/// # Errors
/// [`Trouble`] with every fault.
pub fn stage(global: &Global) -> Result<Stage, Trouble> {
    let settings = load::settings(global)?;
    let earth_rotation = match &settings.earth_rotation {
        None => EarthRotation::absent(),
        Some(file) => EarthRotation::from_finals2000a(&file.text).map_err(|error| {
            Trouble::misuse(format!("{} is no Earth-rotation file", file.file))
                .because(&error)
                .hint("give the path of an IERS finals2000A file in site.earth_rotation")
        })?,
    };
    let observer = Observer::new(settings.survey.site.clone(), earth_rotation);
    Ok(Stage { settings, observer })
}

impl Stage {
    /// The night that an argument names, or the one that the clock stands in.
    ///
    /// # Errors
    /// [`Trouble`] when the argument is no date.
    pub fn night(&self, argument: Option<&str>) -> Result<NightDate, Trouble> {
        match argument {
            Some(text) => night_date(text),
            None => Ok(NightDate::at(now(), self.settings.survey.site.longitude)),
        }
    }

    /// Says on standard error what is not known of the Earth's rotation in a night.
    pub fn mention_earth_rotation(&self, date: NightDate) {
        let night = Night::of(date, self.settings.survey.site.longitude);
        let note = match self.observer.earth_rotation.quality_over(night.span) {
            RotationQuality::Measured | RotationQuality::Predicted => return,
            RotationQuality::Held => {
                "the Earth-rotation file ends before this night: its last value is held, which is \
                 wrong by some tenths of a second of time after a year; renew site.earth_rotation"
            }
            RotationQuality::Absent => {
                "no Earth-rotation data for this night: UT1 is taken as UTC, which is wrong by up \
                 to 0.9 s of time (13\" of hour angle); give site.earth_rotation"
            }
        };
        output::complain(&format!("note: {note}"));
    }

    /// The ledger's path: the argument, or the configured one.
    pub fn ledger_path(&self, argument: Option<&Path>) -> PathBuf {
        argument.map_or_else(
            || PathBuf::from(&self.settings.daemon.ledger),
            Path::to_path_buf,
        )
    }

    /// Visits of the nights before `tonight`; none when there is no ledger yet.
    ///
    /// # Errors
    /// [`Trouble`] when the file is no sound ledger.
    pub fn visits_before(
        &self,
        ledger: Option<&Path>,
        tonight: NightDate,
    ) -> Result<Vec<Visit>, Trouble> {
        let path = self.ledger_path(ledger);
        match SqliteLedger::open_read_only(&path)? {
            None => Ok(Vec::new()),
            Some(ledger) => Ok(ledger.visits(Some(tonight.plus_nights(-1)))?),
        }
    }
}

/// Reads a night's date from an argument.
///
/// # Errors
/// [`Trouble`] when it is none.
pub fn night_date(text: &str) -> Result<NightDate, Trouble> {
    NightDate::parse(text).map_err(|error| Trouble::misuse(error.to_string()))
}

/// A year that the sky cannot be worked out for.
pub fn out_of_range(error: EphemerisError) -> Trouble {
    Trouble::from_error(Exit::Misuse, &error)
}

/// The wall clock.
pub fn now() -> Utc {
    Utc::from_unix_ms(chrono::Utc::now().timestamp_millis())
}
