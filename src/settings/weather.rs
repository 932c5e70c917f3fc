//! `night.toml`: weather rules and climate.

use super::defaults;
use super::feed::{self, QUANTITIES};
use super::range::Range;
use super::section::Section;
use crate::weather::{Climate, Quantity, WeatherRule, WeatherRules};

const WAIT: Range = Range::of(0.0, 86_400.0, "seconds");
const SHARE: Range = Range::of(0.0, 1.0, "");

/// Whether a large value of this quantity is the bad one.
const fn high_is_bad(quantity: Quantity) -> bool {
    !matches!(
        quantity,
        Quantity::DewPointSpreadK | Quantity::SkyBrightnessMag
    )
}

pub(super) fn read_rules(root: &Section<'_>) -> Option<WeatherRules> {
    let Some(weather) = root.section("weather") else {
        if !root.has("weather") {
            root.wrong("weather", "the section [weather] is missing");
        }
        return None;
    };
    let mut rules: Vec<WeatherRule> = Vec::new();
    for section in weather.sections("rule") {
        if let Some(rule) = rule(&section) {
            if rules.iter().any(|r| r.quantity == rule.quantity) {
                section.wrong("quantity", "has a second rule, must have one");
            }
            rules.push(rule);
        }
        section.finish();
    }
    let read = WeatherRules {
        rules,
        stale_after_s: weather.number_or(
            "stale_after_s",
            defaults::STALE_AFTER_S,
            Range::of(1.0, 86_400.0, "seconds"),
        ),
        opening_dwell_s: weather.number_or("opening_dwell_s", defaults::OPENING_DWELL_S, WAIT),
        require_safe_flag: weather.flag("require_safe_flag"),
    };
    if read.rules.is_empty() && !read.require_safe_flag && !weather.has("rule") {
        weather.doubt(
            "rule",
            "there is no rule and no safe flag is required: no weather will ever hold the night",
            Some("add a [[weather.rule]] or set require_safe_flag = true"),
        );
    }
    weather.finish();
    Some(read)
}

fn rule(section: &Section<'_>) -> Option<WeatherRule> {
    let quantity = section.need_choice("quantity", QUANTITIES);
    let range = quantity.map_or(Range::of(-1e6, 1e6, ""), feed::range_of);
    let hold_at = section.need_number("hold_at", range);
    let release_at = section.number("release_at", range).unwrap_or(hold_at);
    let dwell_s = section.number_or("dwell_s", defaults::RULE_DWELL_S, WAIT);
    let quantity = quantity?;
    let high_is_bad = high_is_bad(quantity);
    let wrong_side = if high_is_bad {
        release_at > hold_at
    } else {
        release_at < hold_at
    };
    if wrong_side {
        let (side, bad) = if high_is_bad {
            ("at or below", "large")
        } else {
            ("at or above", "small")
        };
        section.wrong(
            "release_at",
            format!(
                "found {release_at}, must be {side} hold_at, which is {hold_at}: {bad} is bad here"
            ),
        );
    }
    Some(WeatherRule {
        quantity,
        hold_at,
        release_at,
        dwell_s,
        high_is_bad,
    })
}

pub(super) fn read_climate(root: &Section<'_>) -> Option<Climate> {
    let Some(section) = root.section("climate") else {
        if !root.has("climate") {
            root.wrong("climate", "the section [climate] is missing");
        }
        return None;
    };
    if !section.has("clear_fraction") {
        section.wrong(
            "clear_fraction",
            "is missing; it must be a list of 12 numbers from 0 to 1, January to December",
        );
    }
    let climate = Climate {
        clear_fraction: section
            .numbers::<12>("clear_fraction", SHARE)
            .unwrap_or([1.0; 12]),
        clear_spell_h: section.need_number("clear_spell_h", Range::of(1.0, 1000.0, "hours")),
        night_lost: section.number_or("night_lost", 0.0, SHARE),
        seeing_median_arcsec: section.need_number(
            "seeing_median_arcsec",
            Range::above(0.0, 10.0, "arcseconds"),
        ),
        seeing_sigma_ln: section.number_or("seeing_sigma_ln", 0.3, Range::of(0.0, 2.0, "")),
        faults_per_hour: section.number_or(
            "faults_per_hour",
            0.0,
            Range::of(0.0, 10.0, "faults an hour"),
        ),
        repair_h: section.number_or("repair_h", 1.0, Range::above(0.0, 1000.0, "hours")),
    };
    section.finish();
    Some(climate)
}
