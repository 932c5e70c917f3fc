//! One way in which the season could go.

use std::collections::BTreeMap;

use super::check;
use super::ensemble::{SeasonAsk, SeasonError};
use super::frame::{Frame, measurements, smallest_k, to_catch};
use super::realised::{NightRealised, PriceSample, Realised, StarRealised, VisitRow};
use super::replay::Blocks;
use crate::audit::{Accounts, GapStatistics, NightAccount, OrbitErrors, attribute_owed};
use crate::catalogue::Survey;
use crate::ephemeris::Observer;
use crate::night::{Fact, NightRules};
use crate::plan::solve::Settings as Search;
use crate::plan::{Ask, Calendar, Desk, History, SkyTable, accrual_first};
use crate::ports::Ledger;
use crate::record::{EntryKind, NightSummary, Outcome, Visit};
use crate::score::{CreditedVisit, WindowVerdict, judge, owed};
use crate::settings::Settings;
use crate::sim::{MemoryLedger, RehearsalError, Unwatched, World, rehearse_night};
use crate::time::NightDate;

/// One realisation in so many prices the time...
const PRICED_REALISATIONS: u32 = 10;
/// ... on one night in so many: a price is worked out with a bound, which costs as much as several
/// nights.
const PRICED_NIGHTS: u32 = 4;
/// Steps of the bound behind a price.
const PRICE_STEPS: u64 = 12;
/// Parts of what is owed may differ from the whole by so much, visits: rounding.
const ROUNDING: f64 = 1e-6;
/// Milliseconds in a day, as a real number.
const DAY_MS: f64 = 86_400_000.0;

/// A season under way.
pub(super) struct Realisation {
    number: u32,
    world: World,
    history: History,
    accounts: Vec<NightAccount>,
    season_visits: Vec<Visit>,
    realised: Realised,
}

/// What all realisations share in a season.
pub(super) struct Shared<'a> {
    pub survey: &'a Survey,
    pub observer: &'a Observer,
    pub calendar: &'a Calendar,
    pub frame: &'a Frame,
    pub ask: &'a SeasonAsk,
    pub search: &'a Search,
    pub blocks: Option<&'a Blocks<'a>>,
    /// Visits before the season.
    pub before: &'a [Visit],
}

impl Realisation {
    /// At the season's beginning, with the history that it starts from.
    pub(super) fn new(ask: &SeasonAsk, settings: &Settings, history: History, number: u32) -> Self {
        let survey = &settings.survey;
        let rules = NightRules::for_survey(settings.weather.clone(), survey);
        let stars = survey.targets.iter().map(|target| StarRealised {
            caught: to_catch(target).map(|_| false).collect(),
            ..StarRealised::default()
        });
        Realisation {
            number,
            world: World::new(ask.seed, number, settings.climate.clone(), rules),
            history,
            accounts: Vec::new(),
            season_visits: Vec::new(),
            realised: Realised {
                number,
                stars: stars.collect(),
                used_s: vec![0.0; survey.programmes.len()],
                nights: Vec::new(),
                prices: Vec::new(),
                visits: Vec::new(),
            },
        }
    }

    /// Lets a night happen and remembers it.
    pub(super) fn night(
        &mut self,
        shared: &Shared<'_>,
        (index, sky): (u32, &SkyTable),
    ) -> Result<(), SeasonError> {
        let night = sky.night.date;
        let broken = |cause: RehearsalError| SeasonError::Night {
            night,
            seed: shared.ask.seed,
            realisation: self.number,
            cause: Box::new(cause),
        };
        if let Some(blocks) = shared.blocks {
            self.world.recorded = Some(blocks.night(self.number, night)?);
        }
        let mut ledger = MemoryLedger::default();
        let desk = Desk::new(
            shared.survey,
            shared.observer,
            shared.calendar,
            sky,
            self.history.clone(),
        );
        let prices = self.prices(shared, (index, sky), &desk)?;
        let here = (&desk, sky);
        let mut world = self.world.clone();
        let summary = rehearse_night(&mut world, here, shared.search, &mut ledger, &mut Unwatched)
            .map_err(broken)?;
        let unread = |fault: crate::ports::LedgerFault| broken(RehearsalError::Night(fault.into()));
        let visits = ledger.visits(None).map_err(unread)?;
        let facts = ledger.facts(night).map_err(unread)?;
        check::night(shared.survey, sky, &facts, (&summary, &visits))
            .map_err(|detail| self.violated(shared.ask, Some(night), detail))?;
        self.world = world;
        self.realised.prices.extend(prices);
        self.accounts.push(account(sky, &facts, &summary));
        for visit in &visits {
            self.history.add(shared.survey, shared.observer, visit)?;
        }
        self.remember(shared.survey, index, &summary, &visits);
        self.season_visits.extend(visits);
        self.catch_windows(shared.survey, night);
        Ok(())
    }

    fn violated(&self, ask: &SeasonAsk, night: Option<NightDate>, detail: String) -> SeasonError {
        SeasonError::Violated {
            night: night.map_or_else(|| "the season's end".to_owned(), |n| format!("night {n}")),
            seed: ask.seed,
            realisation: self.number,
            detail,
        }
    }

    /// What the hours of the night are worth, on the nights and in the realisations that look.
    fn prices(
        &self,
        shared: &Shared<'_>,
        (index, sky): (u32, &SkyTable),
        desk: &Desk<'_>,
    ) -> Result<Vec<PriceSample>, SeasonError> {
        let looks = self.number.is_multiple_of(PRICED_REALISATIONS)
            && index.is_multiple_of(PRICED_NIGHTS)
            && sky.ours;
        let (true, Some(dark), Some(target)) = (looks, sky.darkness, shared.survey.targets.first())
        else {
            return Ok(Vec::new());
        };
        let refused = |cause| SeasonError::Night {
            night: sky.night.date,
            seed: shared.ask.seed,
            realisation: self.number,
            cause: Box::new(RehearsalError::Plan(cause)),
        };
        let ask = Ask::whole_night(dark.start);
        let search = Search {
            bound_steps: PRICE_STEPS,
            ..shared.search.clone()
        };
        let planned = desk.plan(&ask, &search, &mut || true).map_err(refused)?;
        let hours = desk.hour_prices(&ask, &planned).map_err(refused)?;
        let sample = |price: &crate::plan::HourPrice| {
            let slot = sky.first_slot_from(price.start);
            let slots = (sky.slots - slot).min(60);
            let middle = (slot + slots / 2).min(sky.slots.saturating_sub(1));
            // What stands on the meridian: a star's right ascension plus its hour angle.
            let hour_angle_deg = sky.stars.first()?.pointing(middle).hour_angle_deg;
            let meridian_deg = (target.star.ra.deg() + hour_angle_deg).rem_euclid(360.0);
            Some(PriceSample {
                night: index,
                ra_h: ((meridian_deg / 15.0) as u32).min(23),
                hours: slots as f64 / 60.0,
                value: price.value,
            })
        };
        Ok(hours.iter().filter_map(sample).collect())
    }

    fn tonight(&self, star: usize, night: NightDate) -> impl Iterator<Item = &CreditedVisit> {
        let visits = self.history.credited(star).iter().rev();
        visits.take_while(move |visit| visit.night >= night)
    }

    fn catch_windows(&mut self, survey: &Survey, night: NightDate) {
        for (star, target) in survey.targets.iter().enumerate() {
            for (row, (_, window)) in to_catch(target).enumerate() {
                let Some(candidate) = target.candidates.get(window.candidate) else {
                    continue;
                };
                let caught = self.tonight(star, night).any(|visit| {
                    let half_d = visit_half_d(visit, &self.season_visits);
                    let span = (visit.mid_bjd_tdb - half_d, visit.mid_bjd_tdb + half_d);
                    matches!(
                        judge(window, candidate, span.0, span.1),
                        WindowVerdict::Caught(_)
                    )
                });
                let flags = &mut self.realised.stars[star].caught;
                if let Some(flag) = flags.get_mut(row) {
                    *flag |= caught;
                }
            }
        }
    }

    fn remember(&mut self, survey: &Survey, index: u32, summary: &NightSummary, visits: &[Visit]) {
        let parts = summary.split.parts();
        self.realised.nights.push(NightRealised {
            darkness_ms: summary.darkness.map_or(0, |span| span.length_ms()),
            parts_ms: parts.into_iter().map(|(_, ms)| ms).collect(),
        });
        for visit in visits.iter().filter(|v| v.kind == EntryKind::Science) {
            let found = survey
                .targets
                .iter()
                .position(|target| target.id == visit.subject);
            let Some(star) = found else { continue };
            self.realised.stars[star].credited += visit.credit;
            if visit.credit > 0.0 {
                let used = self.realised.used_s.get_mut(survey.targets[star].programme);
                if let Some(used) = used {
                    *used += visit.exposing.length_ms() as f64 / 1000.0;
                }
            }
            self.realised.visits.push(row(index, star, visit));
        }
    }

    /// What it has come to, checked.
    pub(super) fn end(mut self, shared: &Shared<'_>) -> Result<Realised, SeasonError> {
        let survey = shared.survey;
        let next = shared.ask.end();
        let first = accrual_first(survey, self.history.first_night(), shared.ask.first);
        let standings = self.history.standings(survey, shared.calendar, first, next);
        let visits: Vec<Visit> = shared
            .before
            .iter()
            .chain(&self.season_visits)
            .cloned()
            .collect();
        let accounts = Accounts::new(
            (survey, shared.observer),
            shared.calendar,
            (&self.accounts, &visits),
            (first, next),
        )?;
        for (star, target) in survey.targets.iter().enumerate() {
            let standing = &standings[star];
            let owed = owed(target, standing);
            let credited: f64 = standing.credited.iter().map(|v| v.credit).sum();
            let total = target.cadence.total_visits;
            let missing = total.map(|total| (f64::from(total) - credited).max(0.0));
            let causes = attribute_owed(&target.cadence, &accounts.facts(star), missing);
            if (causes.total() - owed).abs() > ROUNDING {
                let sum = causes.total();
                let detail = format!("{} is owed {owed} visits, its causes {sum}", target.id);
                return Err(self.violated(shared.ask, None, detail));
            }
            let season = standing
                .credited
                .iter()
                .filter(|visit| visit.night >= shared.ask.first);
            let times_d: Vec<f64> = season.map(|visit| visit.mid_bjd_tdb).collect();
            let known = measurements(&standing.credited);
            let periods = shared.frame.programmes.get(target.programme);
            let result = &mut self.realised.stars[star];
            result.longest_gap_d = GapStatistics::of(&times_d).map(|gaps| gaps.longest_d);
            result.owed = owed;
            result.owed_by_cause = causes
                .by_cause
                .iter()
                .map(|(cause, part)| (cause.label().to_owned(), *part))
                .collect();
            result.sigma_k_m_s = target
                .candidates
                .iter()
                .map(|candidate| Some(OrbitErrors::of(candidate, &known)?.sigma_k_m_s))
                .collect();
            result.smallest_k_m_s = periods.map_or(Vec::new(), |programme| {
                smallest_k(&standing.credited, &programme.periods_d)
            });
        }
        Ok(self.realised)
    }
}

/// Half the length of a credited visit, days; 0 for one that is not of the season.
fn visit_half_d(credited: &CreditedVisit, visits: &[Visit]) -> f64 {
    let found = visits
        .iter()
        .rev()
        .find(|visit| visit.exposing.contains(credited.mid));
    found.map_or(0.0, |visit| {
        visit.exposing.length_ms() as f64 / 2.0 / DAY_MS
    })
}

fn account(sky: &SkyTable, facts: &[Fact], summary: &NightSummary) -> NightAccount {
    let revisions = facts.iter().filter_map(|fact| match fact {
        Fact::PlanPublished(revision) => Some(revision),
        _ => None,
    });
    let science = |kind: EntryKind| kind == EntryKind::Science;
    let mut account = NightAccount {
        night: sky.night.date,
        darkness: sky.darkness,
        holds: check::holds(facts, sky.night.span.end),
        planned: Default::default(),
        last_plan: None,
        paused: Default::default(),
        split: Some(summary.split.clone()),
    };
    for revision in revisions {
        let mut counts = BTreeMap::new();
        for entry in revision.entries.iter().filter(|e| science(e.kind)) {
            account.planned.insert(entry.subject.clone());
            *counts.entry(entry.subject.clone()).or_insert(0) += 1;
        }
        // As the ledger tells it: a plan without visits to targets is no last plan.
        account.last_plan = (!counts.is_empty()).then_some((revision.from, counts));
    }
    account
}

fn row(index: u32, star: usize, visit: &Visit) -> VisitRow {
    let outcome = match visit.outcome {
        Outcome::Done => "done",
        Outcome::Short => "short",
        Outcome::Lost(_) => "lost",
        Outcome::Refused => "refused",
        Outcome::Unreported => "unreported",
    };
    VisitRow {
        star: u32::try_from(star).unwrap_or(u32::MAX),
        night: index,
        start_unix_ms: visit.exposing.start.unix_ms(),
        end_unix_ms: visit.exposing.end.unix_ms(),
        exposed_s: visit.exposed_s,
        credit: visit.credit,
        outcome: outcome.to_owned(),
        airmass: visit.airmass,
        rv_error_m_s: visit.rv_error_m_s.or(visit.predicted_rv_error_m_s),
    }
}
