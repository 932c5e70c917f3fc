//! All parts together.

use super::{
    CadenceTerm, Conditions, Coverage, CoverageTable, Exposing, NotWanted, Standing, WindowVerdict,
    judge, season_factor,
};
use crate::catalogue::{Survey, Target};
use crate::record::ValueParts;
use crate::time::{DAY_MS, NightDate, Span, Utc};

/// BJD_TDB and the Julian date in UTC differ by less: light-time 500 s, TDB − UTC 69 s and some to
/// come.
const BARYCENTRE_MARGIN_D: f64 = 0.01;

/// The night that is scored.
#[derive(Clone, Debug, PartialEq)]
pub struct Tonight {
    /// Its date.
    pub night: NightDate,
    /// What may be asked about: darkness, or what is left of it.
    pub span: Span,
    /// Share term of each programme ([`super::share_factors`]); 1 for one that is not listed.
    pub share_factors: Vec<f64>,
}

/// What visits to one star are worth through one night.
#[derive(Clone, Debug)]
pub struct Scorer {
    target: Target,
    cadence: CadenceTerm,
    coverage: CoverageTable,
    coverage_share: f64,
    weight: f64,
    share: f64,
    season: f64,
    owed: f64,
}

impl Scorer {
    /// From the visits so far. Where many nights follow one another, keep a [`Coverage`] and use
    /// [`Scorer::with_coverage`].
    pub fn new(survey: &Survey, target: &Target, standing: &Standing, tonight: &Tonight) -> Self {
        let mut coverage = Coverage::new(survey, target);
        coverage.add_visits(
            standing
                .credited
                .iter()
                .map(|visit| (visit.mid_bjd_tdb, visit.rv_error_m_s)),
        );
        Scorer::with_coverage(survey, target, standing, tonight, &coverage)
    }

    /// The same with the coverage at hand; it must hold the standing's visits.
    pub fn with_coverage(
        survey: &Survey,
        target: &Target,
        standing: &Standing,
        tonight: &Tonight,
        coverage: &Coverage,
    ) -> Self {
        let planning = &survey.planning;
        let programme_weight = survey
            .programmes
            .get(target.programme)
            .map_or(1.0, |programme| programme.weight);
        let julian = |at: Utc| {
            let (whole, fraction) = at.julian_date();
            whole + fraction
        };
        Scorer {
            cadence: CadenceTerm::new(target, standing, tonight.night, planning.repeat_worth),
            coverage: coverage.table(
                julian(tonight.span.start) - BARYCENTRE_MARGIN_D,
                julian(tonight.span.end) + BARYCENTRE_MARGIN_D,
            ),
            coverage_share: planning.coverage_share,
            weight: target.weight * programme_weight,
            share: tonight
                .share_factors
                .get(target.programme)
                .copied()
                .unwrap_or(1.0),
            season: season_factor(target, standing, planning.season_boost),
            owed: super::owed(target, standing),
            target: target.clone(),
        }
    }

    /// The value of a visit from `at.utc` to `end`, in parts. Its total is 0 where the star is not
    /// wanted (see [`Scorer::not_wanted`]) or a window to avoid is touched (see
    /// [`Scorer::forbidden_by`]).
    pub fn value(&self, at: &Conditions, exposing: &Exposing, end: Utc) -> ValueParts {
        let half_d = (end - at.utc) as f64 / 2.0 / DAY_MS as f64;
        let mut parts = ValueParts {
            coverage: self.coverage.at(at.bjd_tdb + half_d),
            quality: exposing.quality,
            weight: self.weight,
            share: self.share,
            season: self.season,
            ..ValueParts::default()
        };
        let Ok(cadence) = self.cadence.at(at.utc) else {
            return parts;
        };
        parts.cadence = cadence;
        let Some(window) = self.window_worth(at.bjd_tdb, at.bjd_tdb + 2.0 * half_d) else {
            return parts;
        };
        parts.window = window;
        let s = self.coverage_share;
        parts.total = parts.weight
            * parts.share
            * parts.season
            * parts.quality
            * (cadence * ((1.0 - s) + s * parts.coverage) + window);
        parts
    }

    /// Sum over the windows to catch; `None` within one to avoid.
    fn window_worth(&self, start_bjd: f64, end_bjd: f64) -> Option<f64> {
        let mut worth = 0.0;
        for window in &self.target.windows {
            let Some(candidate) = self.target.candidates.get(window.candidate) else {
                continue;
            };
            match judge(window, candidate, start_bjd, end_bjd) {
                WindowVerdict::Indifferent => {}
                WindowVerdict::Caught(more) => worth += more,
                WindowVerdict::Forbidden => return None,
            }
        }
        Some(worth)
    }

    /// Why a visit at that instant is not wanted, if so.
    pub fn not_wanted(&self, at: Utc) -> Option<NotWanted> {
        self.cadence.at(at).err()
    }

    /// Why no visit is wanted all night, if so.
    pub fn refused(&self) -> Option<NotWanted> {
        self.cadence.refused()
    }

    /// The label of the window to avoid that a visit between two times (BJD_TDB) would touch.
    pub fn forbidden_by(&self, start_bjd: f64, end_bjd: f64) -> Option<&str> {
        let windows = self.target.windows.iter();
        windows
            .filter_map(|window| {
                let candidate = self.target.candidates.get(window.candidate)?;
                let verdict = judge(window, candidate, start_bjd, end_bjd);
                (verdict == WindowVerdict::Forbidden).then_some(window.label.as_str())
            })
            .next()
    }

    /// The reasons for a visit's value in plain words, for the queue.
    pub fn because(&self, at: &Conditions, parts: &ValueParts) -> String {
        let mut reasons = vec![self.cadence_reason(at.utc)];
        if self.owed >= 0.05 {
            reasons.push(format!("owed {:.1}", self.owed));
        }
        if self.coverage_share > 0.0 {
            reasons.push(self.coverage_reason(parts.coverage));
        }
        if parts.window > 0.0 {
            reasons.push(self.window_reason(at.bjd_tdb));
        }
        if parts.season >= 1.1 {
            reasons.push(format!("season ends (×{:.2})", parts.season));
        }
        if (parts.share - 1.0).abs() >= 0.1 {
            let side = if parts.share > 1.0 { "below" } else { "above" };
            reasons.push(format!("programme {side} its share (×{:.2})", parts.share));
        }
        reasons.push(format!("quality {:.2}", parts.quality));
        reasons.join(", ")
    }

    fn cadence_reason(&self, now: Utc) -> String {
        let overdue = self.cadence.overdue(now);
        if overdue < 0.95 {
            format!("early at {overdue:.2} of its interval")
        } else if overdue < 1.25 {
            "due".to_owned()
        } else {
            format!("overdue at {overdue:.1} intervals")
        }
    }

    fn coverage_reason(&self, coverage: f64) -> String {
        let what = match self.target.candidates.as_slice() {
            [] => "the period grid".to_owned(),
            [only] => format!("the {:.4} d orbit", only.period_d.value),
            several => format!("{} orbits", several.len()),
        };
        format!("{:.0} % of the best phase for {what}", 100.0 * coverage)
    }

    fn window_reason(&self, bjd_tdb: f64) -> String {
        let caught: Vec<&str> = self
            .target
            .windows
            .iter()
            .filter(|window| {
                let candidate = self.target.candidates.get(window.candidate);
                candidate.is_some_and(|c| {
                    matches!(judge(window, c, bjd_tdb, bjd_tdb), WindowVerdict::Caught(_))
                })
            })
            .map(|window| window.label.as_str())
            .collect();
        format!("catches {}", caught.join(" and "))
    }
}

#[cfg(test)]
mod tests;
