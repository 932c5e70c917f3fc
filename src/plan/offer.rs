//! What a target offers at each minute of the night: how long a visit would take then and what it
//! would be worth.

use crate::catalogue::{Survey, Target, TargetId};
use crate::record::ValueParts;
use crate::score::{CannotExpose, Conditions, Exposing, NotWanted, Photometer, Scorer};
use crate::time::Utc;

use super::ask::Ask;
use super::limits::{Limit, Limits, wind_forbids};
use super::sky_table::SkyTable;

/// Attempts in one night after which a target that keeps failing is left alone.
const MOST_FAILED_ATTEMPTS: u32 = 2;

/// Worth added to an urgent target: it goes before anything that is merely due.
const URGENT_WORTH: f64 = 25.0;

/// A visit that could start at a minute of the grid.
#[derive(Clone, Debug, PartialEq)]
pub struct Offer {
    /// Minute of darkness at which the first exposure starts.
    pub slot: usize,
    /// Whole minutes until the last read-out has ended.
    pub slots: usize,
    /// Minute whose conditions decided.
    pub middle: usize,
    /// How it would be exposed.
    pub exposing: Exposing,
    /// What it would be worth.
    pub value: ValueParts,
}

/// What is needed to value one target through one night.
#[derive(Clone, Debug)]
pub struct Valuer {
    /// Its exposures.
    pub photometer: Photometer,
    /// Its value.
    pub scorer: Scorer,
}

/// All that a target offers tonight.
#[derive(Clone, Debug)]
pub struct Offers {
    /// Index of the target in the survey.
    pub target: usize,
    /// Visits that may still be made tonight.
    pub visits: u32,
    /// Least minutes from start to start of two visits.
    pub gap_slots: usize,
    /// By start, rising.
    pub starts: Vec<Offer>,
    /// Why there are no starts, or how the night was narrowed.
    pub narrowed: Narrowed,
}

/// Why a target offers nothing, or less than the whole night.
#[derive(Clone, Debug, PartialEq)]
pub enum Narrowed {
    /// It is not wanted tonight at all.
    NotWanted(String),
    /// Minutes of what is left of the night lost to each limit, the first broken one counting.
    ByLimits(Vec<(Limit, usize)>),
}

/// What one target offers in the part of the night that is asked for.
pub fn offers(survey: &Survey, sky: &SkyTable, ask: &Ask, star: usize, valuer: &Valuer) -> Offers {
    let target = &survey.targets[star];
    let narrowed_to = |narrowed: Narrowed, visits: u32, starts: Vec<Offer>| Offers {
        target: star,
        visits,
        gap_slots: (target.cadence.separation_min.ceil() as usize).max(1),
        starts,
        narrowed,
    };
    let visits = match visits_left(ask, target) {
        Ok(visits) => visits,
        Err(why) => return narrowed_to(Narrowed::NotWanted(why), 0, Vec::new()),
    };
    let urgent_until = urgent_until(ask, &target.id);
    let refused = valuer.scorer.refused();
    if let (Some(why), None) = (refused, urgent_until) {
        return narrowed_to(Narrowed::NotWanted(why.to_string()), 0, Vec::new());
    }
    let maker = OfferMaker {
        survey,
        sky,
        ask,
        star,
        valuer,
        urgent_until,
    };
    let (starts, by_limits) = maker.all();
    narrowed_to(Narrowed::ByLimits(by_limits), visits, starts)
}

fn urgent_until(ask: &Ask, target: &TargetId) -> Option<Utc> {
    let asked = ask.urgent.iter().filter(|urgent| urgent.target == *target);
    asked.map(|urgent| urgent.until).max()
}

/// Visits that may still be made tonight, or why none.
fn visits_left(ask: &Ask, target: &Target) -> Result<u32, String> {
    let id = target.id.as_str();
    let urgent = urgent_until(ask, &target.id).is_some();
    if target.paused || ask.paused.contains(id) {
        return Err("paused".to_owned());
    }
    if ask.failed_attempts(id) >= MOST_FAILED_ATTEMPTS && !urgent {
        return Err(format!(
            "{MOST_FAILED_ATTEMPTS} attempts tonight came to nothing"
        ));
    }
    let done = ask.credited_visits(id);
    let wanted = target.cadence.visits_per_night;
    match wanted.saturating_sub(done) {
        0 if urgent => Ok(1),
        0 => Err(format!("has had its {done} of {wanted} visits tonight")),
        left => Ok(left),
    }
}

struct OfferMaker<'a> {
    survey: &'a Survey,
    sky: &'a SkyTable,
    ask: &'a Ask,
    star: usize,
    valuer: &'a Valuer,
    urgent_until: Option<Utc>,
}

impl OfferMaker<'_> {
    /// Every start, and the minutes that each limit took.
    fn all(&self) -> (Vec<Offer>, Vec<(Limit, usize)>) {
        let first = self.sky.first_slot_from(self.ask.from);
        let limits: Vec<Limits> = (0..self.sky.slots)
            .map(|slot| self.limits_at(slot))
            .collect();
        let clear_until = clear_runs(&limits);
        let mut starts = Vec::new();
        let mut lost = [0usize; Limit::ALL.len()];
        for slot in first..self.sky.slots {
            let offer = if limits[slot].is_empty() {
                self.at(slot, clear_until[slot])
            } else {
                Err(limits[slot])
            };
            match offer {
                Ok(Some(offer)) => starts.push(offer),
                Ok(None) => {}
                Err(broken) => {
                    if let Some(index) = Limit::ALL.iter().position(|limit| broken.has(*limit)) {
                        lost[index] += 1;
                    }
                }
            }
        }
        let narrowed = Limit::ALL.into_iter().zip(lost).filter(|(_, n)| *n > 0);
        (starts, narrowed.collect())
    }

    /// Limits of the sky, and those of tonight.
    fn limits_at(&self, slot: usize) -> Limits {
        let star = &self.sky.stars[self.star];
        let wind = wind_forbids(
            self.survey.telescope.wind.as_ref(),
            self.ask.wind.as_ref(),
            star.pointing(slot).azimuth_deg,
        );
        star.limits[slot]
            .with_if(Limit::Wind, wind)
            .with_if(Limit::Blocked, !self.sky.is_usable(slot))
    }

    /// The visit that could start at a free minute; `Ok(None)` when it is worth nothing then.
    fn at(&self, slot: usize, clear_until: usize) -> Result<Option<Offer>, Limits> {
        let unmade = |_: CannotExpose| Limits::NONE.with(Limit::Exposure);
        if self.too_soon(slot) {
            return Err(Limits::NONE.with(Limit::Separation));
        }
        // Conditions in the middle decide, and where the middle is depends on the length: one
        // step from the length at the start is enough, as conditions change by per cents an hour.
        let guess = self.expose(slot).map_err(unmade)?;
        let last = clear_until.max(slot + 1) - 1;
        let middle = (slot + whole_slots(guess.duration_s) / 2).min(last);
        let exposing = self.expose(middle).map_err(unmade)?;
        let slots = whole_slots(exposing.duration_s);
        if slot + slots > clear_until {
            return Err(self.what_ends(clear_until));
        }
        let value = self.value(slot, &exposing);
        if value.total <= 0.0 && self.is_avoided(slot, slots) {
            return Err(Limits::NONE.with(Limit::Avoided));
        }
        let offer = Offer {
            slot,
            slots,
            middle,
            exposing,
            value,
        };
        Ok((value.total > 0.0).then_some(offer))
    }

    fn too_soon(&self, slot: usize) -> bool {
        let not_wanted = self.valuer.scorer.not_wanted(self.sky.instant(slot));
        matches!(not_wanted, Some(NotWanted::TooSoon { .. }))
    }

    fn is_avoided(&self, slot: usize, slots: usize) -> bool {
        let star = &self.sky.stars[self.star];
        let span = (star.bjd_tdb(slot), star.bjd_tdb(slot + slots));
        self.valuer.scorer.forbidden_by(span.0, span.1).is_some()
    }

    fn value(&self, slot: usize, exposing: &Exposing) -> ValueParts {
        let end = self
            .sky
            .instant(slot)
            .plus_ms((exposing.duration_s * 1000.0).round() as i64);
        let conditions = self.conditions(slot);
        let mut value = self.valuer.scorer.value(&conditions, exposing, end);
        // An urgent star is wanted whatever its cadence says, but not inside a window to avoid.
        let slots = whole_slots(exposing.duration_s);
        let in_time = self.urgent_until.is_some_and(|until| end <= until);
        if in_time && !self.is_avoided(slot, slots) {
            value.window += URGENT_WORTH;
            value.total += URGENT_WORTH * value.quality;
        }
        value
    }

    /// The limit at which a free run ends: the end of darkness blocks as well.
    fn what_ends(&self, clear_until: usize) -> Limits {
        if clear_until < self.sky.slots {
            self.limits_at(clear_until)
        } else {
            Limits::NONE.with(Limit::Blocked)
        }
    }

    fn expose(&self, slot: usize) -> Result<Exposing, CannotExpose> {
        self.valuer.photometer.expose(&self.conditions(slot))
    }

    fn conditions(&self, slot: usize) -> Conditions {
        let seeing = self
            .ask
            .zenith_seeing_arcsec
            .unwrap_or(self.survey.planning.typical_seeing_arcsec);
        self.sky.conditions(self.star, slot, seeing)
    }
}

fn whole_slots(duration_s: f64) -> usize {
    ((duration_s / 60.0).ceil() as usize).max(1)
}

/// For each minute the first broken one at or after it (or the end of the night).
fn clear_runs(limits: &[Limits]) -> Vec<usize> {
    let mut until = limits.len();
    let mut runs = vec![0; limits.len()];
    for slot in (0..limits.len()).rev() {
        if !limits[slot].is_empty() {
            until = slot;
        }
        runs[slot] = until;
    }
    runs
}
