//! From the solver's placements to the entries of a queue.

use crate::catalogue::{Survey, TargetId};
use crate::record::{EntryKind, Exposures, QueueEntry, ValueParts};
use crate::time::Utc;

use super::ask::Ask;
use super::build::{Meaning, NightProblem, offer_at};
use super::calibration::Occasion;
use super::offer::{Offer, Offers, Valuer};
use super::sky_table::SkyTable;
use super::slew::setup_without_slew_s;
use super::solve::Placement;

/// Everything that a queue is read from.
pub(super) struct Reading<'a> {
    pub survey: &'a Survey,
    pub sky: &'a SkyTable,
    pub ask: &'a Ask,
    pub offers: &'a [Offers],
    pub valuers: &'a [Valuer],
    pub night: &'a NightProblem,
}

impl Reading<'_> {
    /// The entries in order of time.
    pub fn entries(&self, placements: &[Placement]) -> Vec<QueueEntry> {
        let mut sorted = placements.to_vec();
        sorted.sort_unstable();
        let mut pointing_at = self
            .ask
            .pointing_at
            .as_ref()
            .and_then(|id| self.survey.targets.iter().position(|t| t.id == *id));
        let mut entries: Vec<QueueEntry> = Vec::with_capacity(sorted.len());
        let mut visited = vec![0u32; self.offers.len()];
        for placement in sorted {
            let slot = placement.start as usize;
            let entry = match &self.night.meaning[placement.task] {
                Meaning::Target(index) => {
                    let rank = visited[*index];
                    visited[*index] += 1;
                    self.science(*index, slot, rank, pointing_at)
                }
                Meaning::Standard(occasion, star) => {
                    Some(self.standard(occasion, *star, slot, pointing_at))
                }
                Meaning::Lamps(occasion) => Some(self.lamps(occasion, slot)),
            };
            if let Some(star) = self.star_of(placement.task) {
                pointing_at = Some(star);
            }
            entries.extend(entry);
        }
        entries
    }

    /// The star that a task looks at.
    pub fn star_of(&self, task: usize) -> Option<usize> {
        match &self.night.meaning[task] {
            Meaning::Target(index) => Some(self.offers[*index].target),
            Meaning::Standard(_, star) => Some(*star),
            Meaning::Lamps(_) => None,
        }
    }

    fn science(
        &self,
        index: usize,
        slot: usize,
        rank: u32,
        from: Option<usize>,
    ) -> Option<QueueEntry> {
        let offers = &self.offers[index];
        let offer = offer_at(offers, slot)?;
        let star = offers.target;
        let target = &self.survey.targets[star];
        let mut value = offer.value;
        if rank > 0 {
            value.total *= self.survey.planning.repeat_worth;
        }
        let mut entry = self.looking(star, slot, offer.middle, from);
        entry.kind = EntryKind::Science;
        entry.subject = target.id.clone();
        entry.end = later(entry.start, offer.exposing.duration_s);
        entry.exposures = offer.exposing.exposures;
        entry.predicted_rv_error_m_s = Some(offer.exposing.rv_error_m_s);
        entry.value = value;
        entry.because = self.because(offers, offer, rank);
        Some(entry)
    }

    fn because(&self, offers: &Offers, offer: &Offer, rank: u32) -> String {
        let seeing = self.sky.conditions(offers.target, offer.slot, 1.0);
        let reason = self.valuers[offers.target]
            .scorer
            .because(&seeing, &offer.value);
        if rank == 0 {
            reason
        } else {
            format!("visit {} of the night: {reason}", rank + 1)
        }
    }

    fn standard(
        &self,
        occasion: &Occasion,
        star: usize,
        slot: usize,
        from: Option<usize>,
    ) -> QueueEntry {
        let calibration = &self.survey.instrument.calibrations[occasion.calibration];
        let middle = slot + super::calibration::slots_of(calibration) / 2;
        let mut entry = self.looking(star, slot, middle, from);
        entry.kind = EntryKind::Standard;
        entry.subject = self.survey.targets[star].id.clone();
        entry.end = later(entry.start, calibration.duration_s);
        entry.exposures = Exposures {
            count: 1,
            seconds: (calibration.duration_s - self.survey.instrument.readout_s).max(0.0),
        };
        entry.because = format!("standard star for '{}'", calibration.id);
        entry
    }

    fn lamps(&self, occasion: &Occasion, slot: usize) -> QueueEntry {
        let calibration = &self.survey.instrument.calibrations[occasion.calibration];
        let start = self.sky.instant(slot);
        QueueEntry {
            kind: EntryKind::Calibration,
            subject: TargetId::new(&calibration.id),
            start,
            end: later(start, calibration.duration_s),
            setup_s: 0.0,
            exposures: Exposures {
                count: 1,
                seconds: (calibration.duration_s - self.survey.instrument.readout_s).max(0.0),
            },
            predicted_rv_error_m_s: None,
            airmass: None,
            altitude_deg: None,
            azimuth_deg: None,
            moon_separation_deg: None,
            value: ValueParts::default(),
            because: "calibration of the spectrograph".to_owned(),
        }
    }

    /// An entry with all that the sky decides; the rest is for the caller to fill.
    fn looking(&self, star: usize, slot: usize, middle: usize, from: Option<usize>) -> QueueEntry {
        let track = &self.sky.stars[star];
        let middle = middle.min(self.sky.slots - 1);
        let pointing = track.pointing(middle);
        let start = self.sky.instant(slot);
        let setup_s = match from {
            Some(from) => self.sky.star_setup_s(self.survey, from, star, slot),
            None => setup_without_slew_s(&self.survey.telescope),
        };
        QueueEntry {
            kind: EntryKind::Science,
            subject: self.survey.targets[star].id.clone(),
            start,
            end: start,
            setup_s,
            exposures: Exposures {
                count: 1,
                seconds: 0.0,
            },
            predicted_rv_error_m_s: None,
            airmass: Some(track.airmass(middle)),
            altitude_deg: Some(pointing.altitude_deg),
            azimuth_deg: Some(pointing.azimuth_deg),
            moon_separation_deg: Some(track.moon_separation_deg(middle)),
            value: ValueParts::default(),
            because: String::new(),
        }
    }
}

fn later(start: Utc, seconds: f64) -> Utc {
    start.plus_ms((seconds * 1000.0).round() as i64)
}
