//! `survey.toml`: programmes, nights, planning.

use super::defaults;
use super::range::Range;
use super::section::Section;
use crate::catalogue::{Allocation, Planning, Programme};
use crate::time::{NightDate, Span, SpanSet};
use crate::units::Angle;

/// What `survey.toml` says.
pub(super) struct SurveyPart {
    pub(super) name: String,
    pub(super) first_night: Option<NightDate>,
    /// The files named by `survey.targets`; empty: whichever is there.
    pub(super) target_files: Vec<String>,
    pub(super) programmes: Vec<Programme>,
    pub(super) allocation: Allocation,
    pub(super) planning: Planning,
}

/// A factor: nothing at all up to a hundred times.
pub(super) const WEIGHT: Range = Range::of(0.0, 100.0, "");
const PERIOD: Range = Range::of(0.05, 10_000.0, "days");
const SHARE: Range = Range::of(0.0, 1.0, "");

pub(super) fn read(root: &Section<'_>) -> Option<SurveyPart> {
    let programmes = programmes(root);
    let allocation = root.section("allocation").map(allocation);
    let planning = planning(root.section("planning"));
    let Some(survey) = root.section("survey") else {
        if !root.has("survey") {
            root.wrong("survey", "the section [survey] is missing");
        }
        return None;
    };
    let part = SurveyPart {
        name: survey.need_text("name"),
        first_night: survey.night("first_night"),
        target_files: survey.texts("targets"),
        programmes,
        allocation: allocation.unwrap_or_default(),
        planning,
    };
    survey.finish();
    Some(part)
}

fn programmes(root: &Section<'_>) -> Vec<Programme> {
    let mut programmes: Vec<Programme> = Vec::new();
    for section in root.sections("programme") {
        let programme = programme(&section);
        if programmes.iter().any(|p| p.id == programme.id) {
            let message = format!("found \"{}\" a second time, must be once", programme.id);
            section.wrong("id", message);
        }
        programmes.push(programme);
        section.finish();
    }
    if programmes.is_empty() && !root.has("programme") {
        root.wrong("programme", "there is none; one [[programme]] at least");
    }
    let shares: f64 = programmes.iter().map(|p| p.share).sum();
    if shares > 1.0 + 1e-9 {
        root.doubt(
            "programme",
            format!("the shares add up to {shares:.2}, more than all of the time"),
            Some("lower the shares until they add up to 1 or less"),
        );
    }
    programmes
}

fn programme(section: &Section<'_>) -> Programme {
    let id = section.need_text("id");
    let programme = Programme {
        label: section.text_or("label", &id),
        id,
        weight: section.number_or("weight", defaults::WEIGHT, WEIGHT),
        share: section.need_number("share", SHARE),
        min_period_d: section.number_or("min_period_d", defaults::MIN_PERIOD_D, PERIOD),
        max_period_d: section.number_or("max_period_d", defaults::MAX_PERIOD_D, PERIOD),
    };
    if programme.max_period_d <= programme.min_period_d {
        let (low, high) = (programme.min_period_d, programme.max_period_d);
        section.wrong(
            "max_period_d",
            format!("found {high}, must be above min_period_d, which is {low}"),
        );
    }
    programme
}

fn allocation(section: Section<'_>) -> Allocation {
    let blocked = section.instant_pairs("blocked");
    let allocation = Allocation {
        nights: section.night_pairs("nights"),
        blocked: SpanSet::from_spans(blocked.into_iter().map(|(a, b)| Span::new(a, b))),
    };
    section.finish();
    allocation
}

fn planning(section: Option<Section<'_>>) -> Planning {
    let mut planning = Planning {
        darkness_sun_altitude: Angle::from_deg(defaults::DARKNESS_SUN_ALTITUDE_DEG),
        coverage_share: defaults::COVERAGE_SHARE,
        season_boost: defaults::SEASON_BOOST,
        share_pull: defaults::SHARE_PULL,
        repeat_worth: defaults::REPEAT_WORTH,
        barycentric_spread_km_s: defaults::BARYCENTRIC_SPREAD_KM_S,
        typical_seeing_arcsec: 1.2,
        budget_ms: defaults::BUDGET_MS,
        seed: defaults::SEED,
    };
    let Some(section) = section else {
        return planning;
    };
    if let Some(deg) = section.number(
        "darkness_sun_altitude_deg",
        Range::of(-30.0, -0.9, "degrees"),
    ) {
        planning.darkness_sun_altitude = Angle::from_deg(deg);
    }
    for (key, value, range) in [
        ("coverage_share", &mut planning.coverage_share, SHARE),
        (
            "season_boost",
            &mut planning.season_boost,
            Range::of(0.0, 10.0, ""),
        ),
        (
            "share_pull",
            &mut planning.share_pull,
            Range::of(0.0, 10.0, ""),
        ),
        ("repeat_worth", &mut planning.repeat_worth, SHARE),
        (
            "barycentric_spread_km_s",
            &mut planning.barycentric_spread_km_s,
            Range::above(0.0, 60.0, "km/s"),
        ),
        (
            "typical_seeing_arcsec",
            &mut planning.typical_seeing_arcsec,
            Range::above(0.0, 10.0, "arcseconds"),
        ),
    ] {
        *value = section.number_or(key, *value, range);
    }
    if let Some(ms) = section.whole("budget_ms", Range::of(10.0, 600_000.0, "milliseconds")) {
        planning.budget_ms = ms;
    }
    // Whole numbers up to 2⁵³ are exact in the number that TOML is read into.
    if let Some(seed) = section.whole("seed", Range::of(0.0, 9_007_199_254_740_992.0, "")) {
        planning.seed = seed;
    }
    section.finish();
    planning
}
