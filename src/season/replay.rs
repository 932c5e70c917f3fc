//! Recorded weather in blocks: a season is made of pieces of the record, each from about the same
//! time of the year.

use chrono::Datelike;
use rand::RngExt;

use super::ensemble::SeasonError;
use crate::sim::{Purpose, Record, Recorded, stream};
use crate::time::{Night, NightDate};
use crate::units::Angle;

/// Nights that are taken from the record in one piece, so that spells of weather stay whole.
const BLOCK_NIGHTS: i64 = 5;
/// A block comes from up to so many nights before or after its time of the year.
const AROUND_NIGHTS: i64 = 15;
/// So many places in the record are tried before the season gives up on a night.
const TRIES: usize = 60;

/// A record to draw blocks from.
pub struct Blocks<'a> {
    /// The record.
    pub record: &'a Record,
    /// The site's longitude.
    pub longitude: Angle,
    /// First night of the season: blocks are counted from it.
    pub first: NightDate,
    /// Seed of all chance.
    pub seed: u64,
}

impl Blocks<'_> {
    /// The weather of a night: drawn by block, so that it does not depend on what is planned.
    pub(super) fn night(
        &self,
        realisation: u32,
        night: NightDate,
    ) -> Result<Recorded, SeasonError> {
        let within = night.nights_since(self.first).rem_euclid(BLOCK_NIGHTS);
        let begin = night.plus_nights(-within);
        let mut rng = stream(self.seed, realisation, begin, Purpose::Sky);
        let span = self.record.span();
        let year_of = |at| NightDate::at(at, self.longitude).date().year();
        let (first_year, last_year) = (year_of(span.start), year_of(span.end));
        for _ in 0..TRIES {
            let year = rng.random_range(first_year..=last_year);
            let shift = rng.random_range(-AROUND_NIGHTS..=AROUND_NIGHTS);
            let years = i64::from(year - begin.date().year());
            // Within a day of the same date: leap days do not matter to a block of two weeks.
            let moved = (years as f64 * 365.25).round() as i64 + shift;
            let wanted = night.plus_nights(moved);
            let found = self.record.for_night(wanted, self.longitude);
            if let Some((mut recorded, source)) = found.filter(|(_, source)| *source == wanted) {
                let start = |date| Night::of(date, self.longitude).span.start;
                recorded.shift_ms = start(night) - start(source);
                return Ok(recorded);
            }
        }
        Err(SeasonError::NoWeather { night })
    }
}
