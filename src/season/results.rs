//! What the realisations say together.

use super::ensemble::SeasonAsk;
use super::realisation::Tally;
use crate::audit::quantile;
use crate::catalogue::Survey;
use crate::plan::Calendar;
use crate::record::DarknessSplit;

/// What a season would give.
#[derive(Clone, Debug, PartialEq)]
pub struct SeasonResults {
    /// By target, in the order of the survey.
    pub targets: Vec<TargetResult>,
    /// Where the darkness went, summed over all realisations.
    pub split: DarknessSplit,
    /// The darkness, summed over all realisations, milliseconds.
    pub darkness_ms: i64,
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
    /// Share of the realisations that reach what is wanted.
    pub odds: f64,
    /// One standard error of the odds from the number of realisations.
    pub odds_error: f64,
}

/// Credits are shares of visits: a sum short of the wanted number by less than this has reached it.
const NEARLY: f64 = 1e-6;

impl SeasonResults {
    /// From what each realisation gathered.
    pub(super) fn of(
        survey: &Survey,
        calendar: &Calendar,
        ask: &SeasonAsk,
        tallies: &[&Tally],
    ) -> Self {
        let mut results = SeasonResults {
            targets: Vec::new(),
            split: DarknessSplit::default(),
            darkness_ms: 0,
        };
        let end = ask.first.plus_nights(i64::from(ask.nights));
        for (star, target) in survey.targets.iter().enumerate() {
            let nights = calendar.observable_nights(star, ask.first, end);
            let cadence = &target.cadence;
            let per_night = f64::from(cadence.visits_per_night) / cadence.every_nights;
            let accrued = f64::from(nights) * per_night;
            let wanted = cadence
                .total_visits
                .map_or(accrued, |total| accrued.min(f64::from(total)));
            let credits = tallies.iter().map(|tally| tally.credited[star]).collect();
            results.targets.push(TargetResult::of(wanted, credits));
        }
        for tally in tallies {
            results.split.add(&tally.split);
            results.darkness_ms += tally.darkness_ms;
        }
        results
    }
}

impl TargetResult {
    fn of(wanted: f64, mut credits: Vec<f64>) -> Self {
        credits.sort_by(f64::total_cmp);
        let at = |q: f64| quantile(&credits, q).unwrap_or(0.0);
        let count = credits.len().max(1) as f64;
        // Whole visits count: a cadence that asks for 8.6 of them is met by 8.
        let reached = credits.iter().filter(|c| **c + NEARLY >= wanted.floor());
        let odds = reached.count() as f64 / count;
        TargetResult {
            wanted,
            visits_p10: at(0.1),
            visits_p50: at(0.5),
            visits_p90: at(0.9),
            odds,
            odds_error: (odds * (1.0 - odds) / count).sqrt(),
        }
    }
}
