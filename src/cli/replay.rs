//! `--weather FILE`: a recorded weather file, and the part of it that a night replays.

use std::fs;
use std::path::{Path, PathBuf};

use crate::sim::{Record, Recorded};
use crate::time::NightDate;
use crate::units::Angle;

use super::pace::Pace;
use super::stage::Stage;
use super::{Trouble, output};

/// A larger file is no weather of one site: a line a minute for ten years is smaller.
const LARGEST: u64 = 1 << 30;
/// Of the faults of a file, so many are shown.
const SHOWN_FAULTS: usize = 20;

/// A recorded weather file at a site.
pub struct Replay {
    path: PathBuf,
    record: Record,
    longitude: Angle,
}

impl Replay {
    /// Reads a file as `[recorded_weather]` maps it.
    ///
    /// # Errors
    /// [`Trouble`] with file, line and column of what is wrong.
    pub fn read(path: &Path, stage: &Stage) -> Result<Self, Trouble> {
        let Some(mapping) = &stage.settings.daemon.recorded_weather else {
            return Err(
                Trouble::misuse("night.toml does not say how a recorded file is read")
                    .hint("add [recorded_weather], see README.md"),
            );
        };
        let cannot = || format!("{} cannot be read", path.display());
        let size = fs::metadata(path)
            .map_err(|error| Trouble::misuse(cannot()).because(&error))?
            .len();
        if size > LARGEST {
            return Err(Trouble::misuse(format!(
                "{}: it is larger than 1 GB",
                cannot()
            )));
        }
        let text =
            fs::read_to_string(path).map_err(|error| Trouble::misuse(cannot()).because(&error))?;
        let record = Record::read(&text, mapping).map_err(|faults| {
            let name = path.display();
            let lines = faults.iter().take(SHOWN_FAULTS);
            let lines = lines.map(|fault| format!("{name}:{fault}")).collect();
            let more = faults.len().saturating_sub(SHOWN_FAULTS);
            let more = if more > 0 {
                format!("; {more} more are not shown")
            } else {
                String::new()
            };
            Trouble::misuse(format!("{name} is no weather record{more}"))
                .details(lines)
                .hint("[recorded_weather] in night.toml says how it is read")
        })?;
        Ok(Replay {
            path: path.to_owned(),
            record,
            longitude: stage.settings.survey.site.longitude,
        })
    }

    /// The record itself.
    pub fn record(&self) -> &Record {
        &self.record
    }

    /// What the file has for a night. Weather of another year is announced.
    ///
    /// # Errors
    /// [`Trouble`] when it has nothing for it.
    pub fn night(&self, date: NightDate, pace: &Pace) -> Result<Recorded, Trouble> {
        let name = self.path.display();
        let Some((recorded, source)) = self.record.for_night(date, self.longitude) else {
            let span = self.record.span();
            return Err(Trouble::misuse(format!(
                "{name} has no weather for the night {date}, nor for that evening in another year"
            ))
            .hint(format!("it runs from {} to {}", span.start, span.end)));
        };
        if source != date {
            pace.aside(|| {
                output::complain(&format!(
                    "{date}: the weather of the night {source} is replayed"
                ));
            });
        }
        Ok(recorded)
    }
}
