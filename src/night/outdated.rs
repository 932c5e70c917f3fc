//! When the weather has moved so far from what the queue was planned for that the rest of the night
//! is planned afresh: the wind closes or opens a part of the sky, or the seeing asks for other
//! exposures.

use super::rules::NightRules;
use crate::time::MonotonicMs;
use crate::units::Angle;
use crate::weather::{Quantity, WeatherSample};

/// A wind that has turned so far shields another part of the sky, degrees. Half of it is left to a
/// wind vane's restlessness (common practice, no source).
const TURNED_DEG: f64 = 30.0;

/// What a plan took the weather to be.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct PlannedFor {
    at: MonotonicMs,
    seeing_arcsec: Option<f64>,
    wind: Option<(f64, Angle)>,
}

impl PlannedFor {
    /// A plan that is asked for now takes the weather to be this.
    pub(super) fn of(sample: Option<&WeatherSample>, at: MonotonicMs) -> Self {
        let value = |quantity| sample.and_then(|s| s.values.get(&quantity).copied());
        PlannedFor {
            at,
            seeing_arcsec: value(Quantity::SeeingArcsec),
            wind: value(Quantity::WindMS).zip(sample.and_then(|s| s.wind_from)),
        }
    }

    /// Whether a plan made for `self` no longer fits what is `now`. Never sooner than
    /// `rules.weather_replan_every_s` after it: weather that flutters must not keep the planner busy.
    pub(super) fn is_outdated_by(&self, now: &PlannedFor, rules: &NightRules) -> bool {
        let age_ms = now.at.0 - self.at.0;
        if age_ms < super::accounting::seconds_ms(rules.weather_replan_every_s) {
            return false;
        }
        self.wind_differs(now, rules) || self.seeing_differs(now, rules)
    }

    fn wind_differs(&self, now: &PlannedFor, rules: &NightRules) -> bool {
        let Some(above_m_s) = rules.wind_avoided_above_m_s else {
            return false;
        };
        let closes = |of: &PlannedFor| of.wind.filter(|(speed_m_s, _)| *speed_m_s > above_m_s);
        match (closes(self), closes(now)) {
            (None, None) => false,
            (Some((_, then)), Some((_, now))) => {
                (now - then).wrapped_signed().deg().abs() > TURNED_DEG
            }
            _ => true,
        }
    }

    fn seeing_differs(&self, now: &PlannedFor, rules: &NightRules) -> bool {
        match (
            self.seeing_arcsec.or(rules.typical_seeing_arcsec),
            now.seeing_arcsec,
        ) {
            (Some(then), Some(now)) if then > 0.0 && now > 0.0 => {
                (now / then).ln().abs() > rules.seeing_replan_ratio.ln()
            }
            _ => false,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::time::Utc;
    use crate::weather::WeatherRules;

    fn rules() -> NightRules {
        let mut rules = NightRules::new(WeatherRules {
            rules: Vec::new(),
            stale_after_s: 120.0,
            opening_dwell_s: 0.0,
            require_safe_flag: false,
        });
        rules.wind_avoided_above_m_s = Some(9.0);
        rules
    }

    fn weather(second: i64, wind: (f64, f64), seeing_arcsec: f64) -> PlannedFor {
        let sample = WeatherSample {
            at: Utc::from_unix_ms(1000 * second),
            values: [
                (Quantity::WindMS, wind.0),
                (Quantity::SeeingArcsec, seeing_arcsec),
            ]
            .into(),
            wind_from: Some(Angle::from_deg(wind.1)),
            safe: None,
        };
        PlannedFor::of(Some(&sample), MonotonicMs(1000 * second))
    }

    #[test]
    fn wind_and_seeing_outdate_a_plan_only_where_they_change_it_and_not_too_often() {
        let plan = weather(0, (8.0, 350.0), 1.0);
        let windy = weather(0, (10.0, 350.0), 1.0);
        let check = |plan: &PlannedFor, now: PlannedFor, outdated: bool| {
            assert_eq!(
                plan.is_outdated_by(&now, &rules()),
                outdated,
                "{plan:?} {now:?}"
            );
        };
        check(&plan, weather(900, (8.9, 100.0), 1.0), false);
        check(&plan, weather(900, (9.1, 350.0), 1.0), true);
        check(&plan, weather(899, (9.1, 350.0), 1.0), false);
        check(&windy, weather(900, (11.0, 10.0), 1.0), false);
        check(&windy, weather(900, (11.0, 30.0), 1.0), true);
        check(&windy, weather(900, (8.0, 350.0), 1.0), true);
        check(&plan, weather(900, (8.0, 350.0), 1.49), false);
        check(&plan, weather(900, (8.0, 350.0), 1.51), true);
        check(&plan, weather(900, (8.0, 350.0), 0.65), true);
        // The first plan of a night is asked for before there is any weather.
        let mut typical = rules();
        typical.typical_seeing_arcsec = Some(1.0);
        let blind = PlannedFor::of(None, MonotonicMs(0));
        assert!(blind.is_outdated_by(&weather(900, (1.0, 0.0), 1.6), &typical));
        assert!(!blind.is_outdated_by(&weather(900, (1.0, 0.0), 1.3), &typical));
        assert!(!blind.is_outdated_by(&weather(900, (1.0, 0.0), 1.6), &rules()));
        // A feed without these quantities outdates nothing, nor does a wind that is never avoided.
        check(&plan, PlannedFor::of(None, MonotonicMs(900_000)), false);
        let mut careless = rules();
        careless.wind_avoided_above_m_s = None;
        let storm = weather(900, (20.0, 90.0), 1.0);
        assert!(!plan.is_outdated_by(&storm, &careless));
    }
}
