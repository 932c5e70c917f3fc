//! What astronomy says of the settings: what can never be had, and what was hardly meant.

use std::cmp::Ordering;

use super::Settings;
use super::finding::{Finding, Severity};
use super::year::{self, Chance, Year};
use crate::catalogue::{Calibration, Target};
use crate::score::{CannotExpose, Phase, Photometer};
use crate::time::{Night, NightDate};
use crate::units::Angle;

/// Two entries closer than this are taken for the same star: a fibre holds both.
const SAME_STAR_ARCSEC: f64 = 5.0;
/// Civil time is hardly anywhere further from the sun's than this, hours.
const LARGEST_ZONE_ERROR_H: f64 = 3.5;
/// A sign may be wrong when civil time is off by more than this and the other sign is nearer by an
/// hour, hours.
const SUSPICIOUS_ZONE_ERROR_H: f64 = 1.75;
/// A phase that is off by more than this is no phase.
const LOST_PHASE: f64 = 0.5;
/// A larger distance from the moon shuts out most of the sky around full moon.
const WIDE_MOON_DEG: f64 = 90.0;
/// Within this the moon's own glare enters the fibre.
const NARROW_MOON_DEG: f64 = 5.0;
/// A larger distance from the sun shuts out stars that stand high at dusk.
const WIDE_SUN_DEG: f64 = 100.0;

/// Everything that is impossible or doubtful in the survey as of a night, the doubts that the texts
/// themselves raised among them: the impossible first, then in the order of files and lines.
pub fn examine(settings: &Settings, tonight: NightDate) -> Vec<Finding> {
    let survey = &settings.survey;
    let first = survey.first_night.map_or(tonight, |n| n.max(tonight));
    let mut examiner = Examiner {
        settings,
        first,
        findings: settings.doubts.clone(),
    };
    examiner.longitude();
    examiner.earth_rotation();
    examiner.separations();
    let observer = settings.observer();
    let darkness = survey.planning.darkness_sun_altitude;
    match Year::new(&observer, &survey.telescope, darkness, first) {
        Ok(year) => examiner.targets(&year),
        Err(error) => examiner.find(
            Severity::Impossible,
            "survey.first_night".to_owned(),
            format!("the sky of {first} cannot be computed: {error}"),
            "move the survey into the years that can be computed",
        ),
    }
    examiner
        .findings
        .sort_by(|a, b| a.severity.cmp(&b.severity).then(a.place.cmp(&b.place)));
    examiner.findings
}

struct Examiner<'a> {
    settings: &'a Settings,
    /// Tonight, or the survey's first night when that is later.
    first: NightDate,
    findings: Vec<Finding>,
}

/// A star's chances through the year, for a visit of some length.
struct Sampled<'a> {
    chances: Vec<Chance>,
    year: &'a Year<'a>,
    duration_min: f64,
}

impl Examiner<'_> {
    fn find(&mut self, severity: Severity, key: String, message: String, hint: &str) {
        self.findings.push(Finding {
            severity,
            place: self.settings.places.of(&key),
            key,
            message,
            hint: Some(hint.to_owned()),
        });
    }

    fn targets(&mut self, year: &Year<'_>) {
        let targets = &self.settings.survey.targets;
        let places: Vec<(Angle, Angle)> = targets.iter().map(|t| moved(t, self.first)).collect();
        for (target, place) in targets.iter().zip(&places) {
            self.ephemerides(target);
            self.target(target, *place, year);
        }
        self.calibrations(&places, year);
        self.twins(&places);
    }

    fn earth_rotation(&mut self) {
        let Some(file) = &self.settings.earth_rotation else {
            return;
        };
        let Some(known) = file.rotation.known_span() else {
            return;
        };
        let night = Night::of(self.first, self.settings.survey.site.longitude).span;
        if night.end <= known.end && known.start <= night.start {
            return;
        }
        let (from, to) = (known.start, known.end);
        self.find(
            Severity::Doubtful,
            "site.earth_rotation".to_owned(),
            format!(
                "{} reaches from {from} to {to}, not to {}",
                file.file, self.first
            ),
            "fetch a newer finals2000A file from the IERS",
        );
    }

    fn longitude(&mut self) {
        let Some(offset_h) = self.settings.utc_offset_h else {
            return;
        };
        let longitude = self.settings.survey.site.longitude;
        let off_h = |deg: f64| {
            let apart = Angle::from_deg(deg - offset_h * 15.0).wrapped_signed();
            apart.deg().abs() / 15.0
        };
        let (here, mirrored) = (off_h(longitude.deg()), off_h(-longitude.deg()));
        let sign_likely = here > SUSPICIOUS_ZONE_ERROR_H && mirrored + 1.0 < here;
        if here <= LARGEST_ZONE_ERROR_H && !sign_likely {
            return;
        }
        let hint = if sign_likely {
            "longitude is positive towards the east: is the sign wrong?"
        } else {
            "mend longitude_deg or utc_offset_h"
        };
        self.find(
            Severity::Doubtful,
            "site.longitude_deg".to_owned(),
            format!(
                "found {:.3}, where the sun's time is {here:.1} h from the civil time that \
                 utc_offset_h = {offset_h} names",
                longitude.deg()
            ),
            hint,
        );
    }

    fn separations(&mut self) {
        let telescope = &self.settings.survey.telescope;
        let moon_deg = telescope.min_moon_separation.deg();
        let sun_deg = telescope.min_sun_separation.deg();
        self.moon_separation("telescope", moon_deg);
        if sun_deg > WIDE_SUN_DEG {
            self.find(
                Severity::Doubtful,
                "telescope.min_sun_separation_deg".to_owned(),
                format!("found {sun_deg:.1}, which shuts out half the sky at dusk"),
                "30 to 60 is common",
            );
        }
        let own: Vec<(String, f64)> = self
            .settings
            .survey
            .targets
            .iter()
            .filter_map(|t| Some((format!("target.{}", t.id), t.limits.min_moon_separation?)))
            .map(|(path, separation)| (path, separation.deg()))
            .collect();
        for (path, deg) in own {
            self.moon_separation(&path, deg);
        }
    }

    fn moon_separation(&mut self, path: &str, deg: f64) {
        let complaint = if deg > WIDE_MOON_DEG {
            "which shuts out most of the sky for days around full moon"
        } else if deg < NARROW_MOON_DEG {
            "so near that the moon's glare enters the fibre"
        } else {
            return;
        };
        self.find(
            Severity::Doubtful,
            format!("{path}.min_moon_separation_deg"),
            format!("found {deg:.1}, {complaint}"),
            "15 to 40 is common",
        );
    }

    fn target(&mut self, target: &Target, place: (Angle, Angle), year: &Year<'_>) {
        let path = format!("target.{}", target.id);
        if let Some(highest) = self.never_rises(target, place) {
            let limit = year::lowest_altitude_deg(&self.settings.survey.telescope, target);
            self.find(
                Severity::Impossible,
                format!("{path}.dec_deg"),
                format!("never rises above {highest:.1} degrees, but its limit is {limit:.1}"),
                "remove the target, or lower the limit (check the sign of the declination)",
            );
            return;
        }
        let duration_min = match Photometer::new(&self.settings.survey, target).best() {
            Ok(exposing) => exposing.duration_s / 60.0,
            Err(cannot) => {
                let key = match cannot {
                    CannotExpose::Saturates { .. } => format!("{path}.magnitude"),
                    _ => exposure_key(self.settings, &path),
                };
                let hint = "see its magnitude, its exposure rule and [instrument]";
                self.find(Severity::Impossible, key, cannot.to_string(), hint);
                return;
            }
        };
        let sampled = Sampled {
            chances: year.chances(target, place),
            year,
            duration_min,
        };
        self.duration(target, &path, &sampled);
    }

    /// Whether a visit, a night's visits and the total fit into the darkness that the star gets.
    fn duration(&mut self, target: &Target, path: &str, sampled: &Sampled<'_>) {
        let Sampled {
            chances,
            year,
            duration_min,
        } = sampled;
        let duration_min = *duration_min;
        let longest = chances.iter().map(|c| c.longest_min).fold(0.0, f64::max);
        if longest == 0.0 {
            let message = "is never within its limits in darkness, all year".to_owned();
            let hint = "look at its limits, the horizon and the darkness wanted";
            self.find(Severity::Impossible, path.to_owned(), message, hint);
            return;
        }
        if duration_min > longest {
            let key = exposure_key(self.settings, path);
            let message = format!(
                "a visit takes {}, longer than the {} that the star is ever up in darkness (the \
                 longest darkness is {})",
                minutes(duration_min),
                minutes(longest),
                minutes(year.longest_dark_min())
            );
            let hint = "ask for less signal, or remove the star";
            self.find(Severity::Impossible, key, message, hint);
            return;
        }
        let cadence = &target.cadence;
        let apart = f64::from(cadence.visits_per_night - 1) * cadence.separation_min;
        let needed = apart.max(f64::from(cadence.visits_per_night - 1) * duration_min);
        let fits = |c: &Chance| c.span_min >= needed + duration_min && c.longest_min > 0.0;
        if !chances.iter().any(fits) {
            let span = chances.iter().map(|c| c.span_min).fold(0.0, f64::max);
            let message = format!(
                "{} visits a night take {}, but the star is never up in darkness for more than {}",
                cadence.visits_per_night,
                minutes(needed + duration_min),
                minutes(span)
            );
            let hint = "lower visits_per_night or separation_min";
            let key = format!("{path}.visits_per_night");
            self.find(Severity::Impossible, key, message, hint);
            return;
        }
        self.total(target, path, sampled);
    }

    /// Whether the total fits between the first and the last night.
    fn total(&mut self, target: &Target, path: &str, sampled: &Sampled<'_>) {
        let cadence = &target.cadence;
        // From the survey's beginning, not from tonight: visits already made count for the total.
        let survey_begins = self.settings.survey.first_night.unwrap_or(self.first);
        let begin = cadence
            .first_night
            .map_or(survey_begins, |n| n.max(survey_begins));
        let Some(end) = cadence.last_night else {
            return;
        };
        if end < self.first {
            self.find(
                Severity::Doubtful,
                format!("{path}.last_night"),
                format!("its last night, {end}, is over: it will get no further visit"),
                "move its last night, or remove the target",
            );
            return;
        }
        let nights = self.usable_nights(sampled, begin, end);
        if nights == 0 {
            self.find(
                Severity::Impossible,
                format!("{path}.last_night"),
                format!("there is no night from {begin} to {end} in which it can be observed"),
                "move its first or last night into its season",
            );
            return;
        }
        let Some(total) = cadence.total_visits else {
            return;
        };
        let most = nights as f64 / cadence.every_nights * f64::from(cadence.visits_per_night);
        if f64::from(total) > most.ceil() {
            self.find(
                Severity::Impossible,
                format!("{path}.total_visits"),
                format!(
                    "found {total}, but its cadence over the {nights} nights from {begin} to {end} \
                     in which it can be observed gives {most:.0} at most"
                ),
                "lower the total, lower every_nights, or move last_night",
            );
        }
    }

    /// Nights of ours from `begin` to `end` in which a visit fits, to the sampling of the year.
    fn usable_nights(&self, sampled: &Sampled<'_>, begin: NightDate, end: NightDate) -> usize {
        // A survey does not last longer; a last night in the year 2200 must not take an age.
        const MOST_NIGHTS: i64 = 40 * 366;
        let last = end.nights_since(begin).min(MOST_NIGHTS);
        (0..=last)
            .map(|n| begin.plus_nights(n))
            .filter(|night| self.settings.survey.allocation.is_ours(*night))
            .filter(|night| {
                let chance = sampled.chances.get(sampled.year.index_of(*night));
                chance.is_some_and(|c| c.longest_min >= sampled.duration_min)
            })
            .count()
    }

    /// Altitude of culmination in degrees, when that is below the star's limit. The horizon profile
    /// and the nights are looked at elsewhere.
    fn never_rises(&self, target: &Target, (_, dec): (Angle, Angle)) -> Option<f64> {
        let survey = &self.settings.survey;
        let highest = 90.0 - (survey.site.latitude.deg() - dec.deg()).abs();
        let limit = year::lowest_altitude_deg(&survey.telescope, target);
        (highest < limit).then_some(highest)
    }

    fn ephemerides(&mut self, target: &Target) {
        // Midnight of the first night; half a day more or less changes no ephemeris error.
        let night = Night::of(self.first, self.settings.survey.site.longitude);
        let (whole, fraction) = night
            .span
            .start
            .plus_ms(night.span.length_ms() / 2)
            .julian_date();
        for (index, candidate) in target.candidates.iter().enumerate() {
            let error = Phase::of(candidate, whole + fraction).error;
            if error > LOST_PHASE {
                self.find(
                    Severity::Doubtful,
                    format!(
                        "target.{}.candidate[{}].period_error_d",
                        target.id,
                        index + 1
                    ),
                    format!(
                        "by {} the ephemeris is uncertain by {error:.2} of the period of {} d: \
                         the phase is lost",
                        self.first, candidate.period_d.value
                    ),
                    "take a newer conjunction time or a better period, or remove the candidate",
                );
            }
        }
    }

    fn calibrations(&mut self, places: &[(Angle, Angle)], year: &Year<'_>) {
        let survey = &self.settings.survey;
        let never_up: Vec<String> = survey
            .instrument
            .calibrations
            .iter()
            .filter(|c| !c.standards.is_empty() && !self.any_standard_up(c, places, year))
            .map(|c| c.id.clone())
            .collect();
        for id in never_up {
            self.find(
                Severity::Impossible,
                format!("instrument.calibration.{id}.standards"),
                "none of these stars is ever up in darkness".to_owned(),
                "name standards that rise above the limits",
            );
        }
    }

    fn any_standard_up(
        &self,
        calibration: &Calibration,
        places: &[(Angle, Angle)],
        year: &Year<'_>,
    ) -> bool {
        let targets = self.settings.survey.targets.iter().zip(places);
        targets
            .filter(|(target, _)| calibration.standards.contains(&target.id))
            .any(|(target, place)| {
                let chances = year.chances(target, *place);
                chances.iter().any(|c| c.longest_min > 0.0)
            })
    }

    /// Entries that are the same star, at their places of the first night.
    fn twins(&mut self, places: &[(Angle, Angle)]) {
        let targets = &self.settings.survey.targets;
        let mut order: Vec<usize> = (0..targets.len()).collect();
        let by_dec = |a: &usize, b: &usize| {
            let (a, b) = (places[*a].1, places[*b].1);
            a.partial_cmp(&b).unwrap_or(Ordering::Equal)
        };
        order.sort_by(by_dec);
        let mut twins: Vec<(usize, usize, f64)> = Vec::new();
        for (n, &i) in order.iter().enumerate() {
            for &j in &order[n + 1..] {
                if (places[j].1 - places[i].1).arcsec() > SAME_STAR_ARCSEC {
                    break;
                }
                let apart = separation(places[i], places[j]).arcsec();
                if apart < SAME_STAR_ARCSEC {
                    twins.push((i.min(j), i.max(j), apart));
                }
            }
        }
        for (first, second, apart) in twins {
            let (a, b) = (&targets[first].id, &targets[second].id);
            self.find(
                Severity::Doubtful,
                format!("target.{b}.ra_deg"),
                format!(
                    "{b} and {a} stand {apart:.1} arcseconds apart on {}: the same star twice?",
                    self.first
                ),
                "keep one of them",
            );
        }
    }
}

/// The key that sets the length of a visit, for the place of a finding.
fn exposure_key(settings: &Settings, path: &str) -> String {
    let section = settings.places.of(path);
    ["exposure_s", "signal_to_noise", "velocity_error_m_s"]
        .into_iter()
        .map(|key| format!("{path}.{key}"))
        .find(|key| settings.places.of(key) != section)
        .unwrap_or_else(|| path.to_owned())
}

fn minutes(min: f64) -> String {
    if min < 90.0 {
        format!("{min:.0} min")
    } else {
        format!("{:.1} h", min / 60.0)
    }
}

/// Place on a night by straight proper motion, which is good to a second of arc over decades.
fn moved(target: &Target, night: NightDate) -> (Angle, Angle) {
    let star = &target.star;
    let (whole, fraction) = Night::of(night, Angle::ZERO).span.start.julian_date();
    let years = 2000.0 + (whole + fraction - 2_451_545.0) / 365.25 - star.epoch_jyear;
    // At the pole right ascension means nothing; there the motion is left to the declination.
    let cos_dec = star.dec.rad().cos().max(1e-6);
    let ra = star.ra + Angle::from_arcsec(years * star.pm_ra_cosdec_mas_yr / 1000.0 / cos_dec);
    let dec = star.dec.arcsec() + years * star.pm_dec_mas_yr / 1000.0;
    let dec = Angle::from_arcsec(dec.clamp(-324_000.0, 324_000.0));
    (ra.wrapped_positive(), dec)
}

/// Angle between two directions (haversine form, which holds for small angles).
fn separation(a: (Angle, Angle), b: (Angle, Angle)) -> Angle {
    let half_dec = ((b.1 - a.1).rad() / 2.0).sin();
    let half_ra = ((b.0 - a.0).rad() / 2.0).sin();
    let haversine = half_dec * half_dec + a.1.rad().cos() * b.1.rad().cos() * half_ra * half_ra;
    Angle::from_rad(2.0 * haversine.sqrt().min(1.0).asin())
}
