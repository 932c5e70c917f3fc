//! What most commands begin with: settings, observer, the night meant, the visits so far.

use std::path::{Path, PathBuf};

use crate::ephemeris::{EphemerisError, Observer};
use crate::ledger::SqliteLedger;
use crate::ports::Ledger;
use crate::record::Visit;
use crate::settings::Settings;
use crate::time::{Night, NightDate, Utc};

use super::{Exit, Global, Trouble, load};

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
    let observer = settings.observer();
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
        load::mention_rotation(self.observer.earth_rotation.quality_over(night.span));
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
