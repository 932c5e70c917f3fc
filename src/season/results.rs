//! What the realisations say together.

use std::collections::BTreeMap;

use super::frame::{Frame, FrameTarget, month_of};
use super::realised::{Realised, StarRealised};
use crate::audit::quantile;
use crate::record::DarknessSplit;

/// Credits are shares of visits: a sum short of the wanted number by less than this has reached it.
const NEARLY: f64 = 1e-6;
const HOUR_MS: f64 = 3_600_000.0;

/// What a season would give.
#[derive(Clone, Debug, PartialEq)]
pub struct SeasonResults {
    /// Number of realisations.
    pub realisations: usize,
    /// By target, in the order of the survey.
    pub targets: Vec<TargetResult>,
    /// By programme, in the order of the survey.
    pub programmes: Vec<ProgrammeResult>,
    /// Parts of the darkness with their labels, shares of the whole.
    pub darkness: Vec<(String, f64)>,
    /// By night: hours of darkness, and of each part the mean over the realisations.
    pub nights: Vec<NightUse>,
    /// By month.
    pub months: Vec<MonthUse>,
    /// By month and hour of right ascension, where a price was worked out.
    pub prices: Vec<PriceOfTime>,
}

/// What a season would give one target.
#[derive(Clone, Debug, PartialEq)]
pub struct TargetResult {
    /// Visits that its cadence asks for within the season, at most its total.
    pub wanted: f64,
    /// Credited visits: a tenth of the realisations give fewer.
    pub visits_p10: f64,
    /// Half give fewer.
    pub visits_p50: f64,
    /// Nine tenths give fewer.
    pub visits_p90: f64,
    /// Mean, with its standard error.
    pub visits_mean: Estimate,
    /// Share of the realisations that reach what is wanted.
    pub odds: Estimate,
    /// Median over the realisations, days; `None` where half of them have fewer than two visits.
    pub longest_gap_p50: Option<f64>,
    /// Mean of what is owed at the end.
    pub owed: f64,
    /// The same by cause.
    pub owed_by_cause: BTreeMap<String, f64>,
    /// Error of K by candidate, m/s: median; `None` where half of the realisations determine none.
    pub sigma_k_m_s: Vec<Option<f64>>,
    /// Semi-amplitude of the smallest planet found by the programme's periods, m/s: median.
    pub smallest_k_m_s: Vec<Option<f64>>,
    /// Odds that each window to catch is caught at least once.
    pub windows: Vec<Estimate>,
}

/// A mean with its standard error from the number of realisations.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Estimate {
    /// The mean.
    pub value: f64,
    /// Its standard error.
    pub error: f64,
}

/// What a season would give a programme.
#[derive(Clone, Debug, PartialEq)]
pub struct ProgrammeResult {
    /// Share of the used time.
    pub share_used: Estimate,
    /// Hours of open time in the season.
    pub hours: Estimate,
}

/// One night's mean use.
#[derive(Clone, Debug, PartialEq)]
pub struct NightUse {
    /// The night.
    pub night: String,
    /// Hours of darkness.
    pub darkness_h: f64,
    /// Mean hours by part, in the order of [`SeasonResults::darkness`].
    pub parts_h: Vec<f64>,
}

/// A month's mean use.
#[derive(Clone, Debug, PartialEq)]
pub struct MonthUse {
    /// As 2026-12.
    pub month: String,
    /// Hours of darkness.
    pub darkness_h: f64,
    /// Mean hours by part.
    pub parts_h: Vec<f64>,
    /// Mean hours that were held or not ours.
    pub lost_h: f64,
    /// Hours of visits that the cadences ask for, over the hours that were not lost.
    pub oversubscription: f64,
}

/// What an hour of telescope time is worth while a right ascension stands on the meridian.
#[derive(Clone, Debug, PartialEq)]
pub struct PriceOfTime {
    /// As 2026-12.
    pub month: String,
    /// Whole hours, 0 to 23.
    pub ra_h: u32,
    /// Value lost if an hour were taken away; a star worth less than this an hour has no room.
    pub price_per_hour: f64,
    /// Hours that were looked at.
    pub hours: f64,
}

impl SeasonResults {
    /// Of some realisations of a season, in any order of theirs: the sums are made in order of
    /// their numbers.
    pub fn of(frame: &Frame, realised: &[Realised]) -> Self {
        let mut all: Vec<&Realised> = realised.iter().collect();
        all.sort_by_key(|r| r.number);
        let labels: Vec<String> = DarknessSplit::default()
            .parts()
            .into_iter()
            .map(|(label, _)| label)
            .collect();
        let nights = nights(frame, &all, labels.len());
        SeasonResults {
            realisations: all.len(),
            targets: frame
                .targets
                .iter()
                .enumerate()
                .map(|(star, target)| {
                    let ends: Vec<&StarRealised> =
                        all.iter().filter_map(|r| r.stars.get(star)).collect();
                    TargetResult::of(target, &ends)
                })
                .collect(),
            programmes: programmes(frame, &all),
            darkness: shares(&labels, &nights),
            months: months(frame, &nights, &labels),
            nights,
            prices: prices(frame, &all),
        }
    }

    /// The largest error of any target's odds. For odds of 0 or 1 the plain standard error is 0
    /// however few the realisations: so two successes and two failures are added first (Agresti &
    /// Coull 1998, The American Statistician 52, 119).
    pub fn worst_error(&self) -> f64 {
        let n = self.realisations as f64 + 4.0;
        let error = |target: &TargetResult| {
            let odds = (target.odds.value * self.realisations as f64 + 2.0) / n;
            (odds * (1.0 - odds) / n).sqrt()
        };
        self.targets.iter().map(error).fold(0.0, f64::max)
    }
}

impl Estimate {
    /// Mean and standard error of the mean; the error is 0 for a single value, which tells none.
    pub fn mean(values: &[f64]) -> Self {
        let count = values.len() as f64;
        if values.is_empty() {
            return Estimate::default();
        }
        let value = values.iter().sum::<f64>() / count;
        let square: f64 = values.iter().map(|v| (v - value) * (v - value)).sum();
        let error = if values.len() > 1 {
            (square / (count - 1.0) / count).sqrt()
        } else {
            0.0
        };
        Estimate { value, error }
    }

    /// A share of so many, with the standard error √(p(1−p)/n).
    pub fn share(of: impl Iterator<Item = bool>) -> Self {
        let (yes, count) = of.fold((0.0, 0.0), |(yes, count), is| {
            (yes + f64::from(u8::from(is)), count + 1.0)
        });
        if count == 0.0 {
            return Estimate::default();
        }
        let value = yes / count;
        Estimate {
            value,
            error: (value * (1.0 - value) / count).sqrt(),
        }
    }
}

impl FrameTarget {
    /// Whether so many credited visits are what was wanted. Whole visits count: a cadence that asks
    /// for 8.6 of them is met by 8.
    pub fn is_reached(&self, credited: f64) -> bool {
        credited + NEARLY >= self.wanted.floor()
    }
}

impl TargetResult {
    fn of(target: &FrameTarget, ends: &[&StarRealised]) -> Self {
        let credits: Vec<f64> = ends.iter().map(|end| end.credited).collect();
        let mut sorted = credits.clone();
        sorted.sort_by(f64::total_cmp);
        let at = |q: f64| quantile(&sorted, q).unwrap_or(0.0);
        let count = ends.len().max(1) as f64;
        let mut owed_by_cause: BTreeMap<String, f64> = BTreeMap::new();
        for (cause, part) in ends.iter().flat_map(|end| &end.owed_by_cause) {
            *owed_by_cause.entry(cause.clone()).or_default() += part / count;
        }
        let middle = |index: usize, of: fn(&StarRealised) -> &[Option<f64>]| {
            let values = ends.iter().map(|end| of(end).get(index).copied().flatten());
            median(&values.collect::<Vec<_>>())
        };
        let periods = ends.first().map_or(0, |end| end.smallest_k_m_s.len());
        let gaps: Vec<Option<f64>> = ends.iter().map(|end| end.longest_gap_d).collect();
        TargetResult {
            wanted: target.wanted,
            visits_p10: at(0.1),
            visits_p50: at(0.5),
            visits_p90: at(0.9),
            visits_mean: Estimate::mean(&credits),
            odds: Estimate::share(credits.iter().map(|c| target.is_reached(*c))),
            longest_gap_p50: median(&gaps),
            owed: ends.iter().map(|end| end.owed).sum::<f64>() / count,
            owed_by_cause,
            sigma_k_m_s: (0..target.candidates_d.len())
                .map(|index| middle(index, |end| &end.sigma_k_m_s))
                .collect(),
            smallest_k_m_s: (0..periods)
                .map(|index| middle(index, |end| &end.smallest_k_m_s))
                .collect(),
            windows: (0..target.windows.len())
                .map(|w| Estimate::share(ends.iter().map(|end| end.caught.get(w) == Some(&true))))
                .collect(),
        }
    }
}

/// The median, what is not determined counting as larger than all else.
fn median(values: &[Option<f64>]) -> Option<f64> {
    let mut all: Vec<f64> = values.iter().map(|v| v.unwrap_or(f64::INFINITY)).collect();
    all.sort_by(f64::total_cmp);
    quantile(&all, 0.5).filter(|value| value.is_finite())
}

fn programmes(frame: &Frame, all: &[&Realised]) -> Vec<ProgrammeResult> {
    let share = |index: usize| {
        let of = |r: &&Realised| {
            let total: f64 = r.used_s.iter().sum();
            let used = r.used_s.get(index).copied().unwrap_or(0.0);
            if total > 0.0 { used / total } else { 0.0 }
        };
        Estimate::mean(&all.iter().map(of).collect::<Vec<_>>())
    };
    let hours = |index: usize| {
        let of = |r: &&Realised| r.used_s.get(index).copied().unwrap_or(0.0) / 3600.0;
        Estimate::mean(&all.iter().map(of).collect::<Vec<_>>())
    };
    (0..frame.programmes.len())
        .map(|index| ProgrammeResult {
            share_used: share(index),
            hours: hours(index),
        })
        .collect()
}

fn nights(frame: &Frame, all: &[&Realised], parts: usize) -> Vec<NightUse> {
    let Some(first) = frame.first_night() else {
        return Vec::new();
    };
    let count = all.len().max(1) as f64;
    (0..frame.nights as usize)
        .map(|index| {
            let ended = || all.iter().filter_map(|r| r.nights.get(index));
            let hours = |part: usize| {
                let ms = ended()
                    .filter_map(|night| night.parts_ms.get(part))
                    .sum::<i64>();
                ms as f64 / HOUR_MS / count
            };
            NightUse {
                night: first.plus_nights(index as i64).to_string(),
                darkness_h: ended().next().map_or(0, |n| n.darkness_ms) as f64 / HOUR_MS,
                parts_h: (0..parts).map(hours).collect(),
            }
        })
        .collect()
}

fn shares(labels: &[String], nights: &[NightUse]) -> Vec<(String, f64)> {
    let darkness: f64 = nights.iter().map(|night| night.darkness_h).sum();
    let share = |part: usize| {
        let hours: f64 = nights.iter().filter_map(|n| n.parts_h.get(part)).sum();
        if darkness > 0.0 {
            hours / darkness
        } else {
            0.0
        }
    };
    labels
        .iter()
        .enumerate()
        .map(|(part, label)| (label.clone(), share(part)))
        .collect()
}

fn months(frame: &Frame, nights: &[NightUse], labels: &[String]) -> Vec<MonthUse> {
    let is_lost = |label: &String| label.starts_with("held_") || label == "idle_not_ours";
    frame
        .wanted_h
        .iter()
        .map(|wanted| {
            let of_month = || nights.iter().filter(|n| n.night.starts_with(&wanted.month));
            let darkness_h: f64 = of_month().map(|n| n.darkness_h).sum();
            let parts_h: Vec<f64> = (0..labels.len())
                .map(|part| of_month().filter_map(|n| n.parts_h.get(part)).sum())
                .collect();
            let lost = labels
                .iter()
                .zip(&parts_h)
                .filter(|(label, _)| is_lost(label));
            let lost_h: f64 = lost.map(|(_, hours)| hours).sum();
            let usable_h = darkness_h - lost_h;
            MonthUse {
                month: wanted.month.clone(),
                darkness_h,
                parts_h,
                lost_h,
                oversubscription: if usable_h > 0.0 {
                    wanted.hours / usable_h
                } else {
                    0.0
                },
            }
        })
        .collect()
}

fn prices(frame: &Frame, all: &[&Realised]) -> Vec<PriceOfTime> {
    let Some(first) = frame.first_night() else {
        return Vec::new();
    };
    let mut cells: BTreeMap<(String, u32), (f64, f64)> = BTreeMap::new();
    for sample in all.iter().flat_map(|r| &r.prices) {
        let month = month_of(first.plus_nights(i64::from(sample.night)));
        let (value, hours) = cells.entry((month, sample.ra_h)).or_default();
        *value += sample.value;
        *hours += sample.hours;
    }
    cells
        .into_iter()
        .filter(|(_, (_, hours))| *hours > 0.0)
        .map(|((month, ra_h), (value, hours))| PriceOfTime {
            month,
            ra_h,
            price_per_hour: value / hours,
            hours,
        })
        .collect()
}

/// What changes between two scenarios under the same weather.
#[derive(Clone, Debug, PartialEq)]
pub struct Difference {
    /// By target of either, in the order of the first; those of one alone with zeros for the other.
    pub targets: Vec<TargetDifference>,
    /// Hours of open time, first minus second.
    pub exposing_h: Estimate,
    /// Wanted targets reached, first minus second.
    pub reached: Estimate,
}

/// What changes for a target: the first scenario minus the second.
#[derive(Clone, Debug, PartialEq)]
pub struct TargetDifference {
    /// Its id.
    pub target: String,
    /// Mean visits in the first scenario; `None` where it is not in it.
    pub visits: Option<f64>,
    /// In the second.
    pub visits_against: Option<f64>,
    /// Difference of credited visits, with the error of the mean of pairs under the same weather.
    pub difference: Estimate,
    /// Difference of the odds, likewise.
    pub odds_difference: Estimate,
}

impl Difference {
    /// First minus second, realisation by realisation: pairs of one number had the same weather.
    pub fn of(first: (&Frame, &[Realised]), second: (&Frame, &[Realised])) -> Self {
        let pairs: Vec<(&Realised, &Realised)> = first
            .1
            .iter()
            .filter_map(|a| Some((a, second.1.iter().find(|b| b.number == a.number)?)))
            .collect();
        let mut ids: Vec<&str> = first.0.targets.iter().map(|t| t.id.as_str()).collect();
        for target in &second.0.targets {
            if !ids.contains(&target.id.as_str()) {
                ids.push(&target.id);
            }
        }
        let targets = ids
            .into_iter()
            .map(|id| target_difference(id, (first.0, second.0), &pairs))
            .collect();
        let of = |value: &dyn Fn(&Frame, &Realised) -> f64| {
            let differences = pairs
                .iter()
                .map(|(a, b)| value(first.0, a) - value(second.0, b));
            Estimate::mean(&differences.collect::<Vec<_>>())
        };
        Difference {
            targets,
            exposing_h: of(&|_, r| r.used_s.iter().sum::<f64>() / 3600.0),
            reached: of(&|frame, r| {
                let stars = frame.targets.iter().zip(&r.stars);
                stars
                    .filter(|(t, star)| t.is_reached(star.credited))
                    .count() as f64
            }),
        }
    }
}

fn target_difference(
    id: &str,
    frames: (&Frame, &Frame),
    pairs: &[(&Realised, &Realised)],
) -> TargetDifference {
    let place = |frame: &Frame| frame.targets.iter().position(|t| t.id == id);
    let (here, there) = (place(frames.0), place(frames.1));
    let credited = |place: Option<usize>, r: &Realised| {
        place
            .and_then(|star| r.stars.get(star))
            .map_or(0.0, |s| s.credited)
    };
    let reached = |frame: &Frame, place: Option<usize>, r: &Realised| {
        let target = place.and_then(|star| frame.targets.get(star));
        target.is_some_and(|t| t.is_reached(credited(place, r)))
    };
    let number = |is: bool| f64::from(u8::from(is));
    let collect = |of: &dyn Fn(&Realised, &Realised) -> f64| {
        Estimate::mean(&pairs.iter().map(|(a, b)| of(a, b)).collect::<Vec<_>>())
    };
    TargetDifference {
        target: id.to_owned(),
        visits: here.map(|_| collect(&|a, _| credited(here, a)).value),
        visits_against: there.map(|_| collect(&|_, b| credited(there, b)).value),
        difference: collect(&|a, b| credited(here, a) - credited(there, b)),
        odds_difference: collect(&|a, b| {
            number(reached(frames.0, here, a)) - number(reached(frames.1, there, b))
        }),
    }
}
