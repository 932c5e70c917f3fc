//! Which target a record is of, and the visit that it makes.

use std::collections::BTreeMap;

use super::{Found, Subject, exposure_span};
use crate::catalogue::{Survey, Target, TargetId};
use crate::ephemeris::{Observer, SkyInstant, Star, StarMotion};
use crate::record::{EntryKind, Exposures, Outcome, Visit, VisitId};
use crate::time::{NightDate, Utc};
use crate::units::Angle;

/// Matches records with the targets of a survey.
pub struct Matcher<'a> {
    targets: &'a [Target],
    observer: &'a Observer,
    /// Name without case, blanks and dashes → index; `None` where two targets share it.
    names: BTreeMap<String, Option<usize>>,
    radius: Angle,
}

/// What the sky says of an exposure's middle.
struct Middle {
    bjd_tdb: Option<f64>,
    airmass: Option<f64>,
}

impl<'a> Matcher<'a> {
    /// A matcher that takes a place for a target's when it lies within `radius` of it.
    pub fn new(survey: &'a Survey, observer: &'a Observer, radius: Angle) -> Self {
        let mut names = BTreeMap::new();
        for (index, target) in survey.targets.iter().enumerate() {
            names
                .entry(plain(target.id.as_str()))
                .and_modify(|known| *known = None)
                .or_insert(Some(index));
        }
        Matcher {
            targets: &survey.targets,
            observer,
            names,
            radius,
        }
    }

    /// The target of that name: as written, or but for case, blanks, dashes and underlines where
    /// that leaves one alone.
    ///
    /// # Errors
    /// Why there is none, in words.
    pub fn named(&self, name: &str) -> Result<&'a Target, String> {
        if let Some(target) = self.targets.iter().find(|t| t.id.as_str() == name) {
            return Ok(target);
        }
        match self.names.get(&plain(name)) {
            Some(Some(index)) => Ok(&self.targets[*index]),
            Some(None) => Err(format!(
                "several targets are called '{name}' but for case and dashes"
            )),
            None => Err(format!("no target of the configuration is called '{name}'")),
        }
    }

    /// The visit that a record makes, without a name yet.
    ///
    /// # Errors
    /// Why it makes none, in words.
    pub fn visit(&self, found: &Found) -> Result<Visit, String> {
        let target = self.target(&found.subject, found.mid)?;
        let exposing = exposure_span(found.mid, found.exposure_s);
        let middle = self.middle(&target.star, found.mid);
        Ok(Visit {
            id: VisitId(String::new()),
            night: NightDate::at(found.mid, self.observer.site.longitude),
            kind: EntryKind::Science,
            subject: target.id.clone(),
            began: exposing.start,
            exposing,
            exposed_s: found.exposure_s,
            planned: Exposures {
                count: 1,
                seconds: found.exposure_s,
            },
            outcome: Outcome::Done,
            credit: 1.0,
            airmass: found.airmass.or(middle.airmass),
            snr: found.snr,
            rv_error_m_s: found.rv_error_m_s,
            predicted_rv_error_m_s: None,
            mid_bjd_tdb: middle.bjd_tdb,
            note: found.note.clone(),
        })
    }

    /// Barycentric date of a target at an instant; `None` outside the years that the ephemeris
    /// knows, or where the configuration has no such target.
    pub fn bjd_tdb(&self, target: &TargetId, at: Utc) -> Option<f64> {
        let target = self.targets.iter().find(|t| t.id == *target)?;
        self.middle(&target.star, at).bjd_tdb
    }

    /// The night of the site that holds an instant.
    pub fn night(&self, at: Utc) -> NightDate {
        NightDate::at(at, self.observer.site.longitude)
    }

    fn middle(&self, star: &Star, at: Utc) -> Middle {
        let Ok(sky) = SkyInstant::at(self.observer, at) else {
            return Middle {
                bjd_tdb: None,
                airmass: None,
            };
        };
        let motion = StarMotion::of(star);
        let place = sky.star(&motion);
        Middle {
            bjd_tdb: Some(sky.bjd_tdb(&motion).single()),
            airmass: (place.altitude.deg() > 0.0).then_some(place.airmass),
        }
    }

    /// By name where one of ours stands there, else by place.
    fn target(&self, subject: &Subject, at: Utc) -> Result<&'a Target, String> {
        let by_name = if subject.name.is_empty() {
            Err("it names no target".to_owned())
        } else {
            self.named(&subject.name)
        };
        match (by_name, subject.place) {
            (Ok(target), _) => Ok(target),
            (Err(reason), None) => Err(reason),
            (Err(reason), Some(place)) => self
                .nearest(place, at)
                .map_err(|place_reason| format!("{reason}, and {place_reason}")),
        }
    }

    fn nearest(&self, (ra, dec): (Angle, Angle), at: Utc) -> Result<&'a Target, String> {
        let years = years_since_2000(at);
        let distances = self.targets.iter().map(|target| {
            let (target_ra, target_dec) = moved(&target.star, years);
            (separation(ra, dec, target_ra, target_dec), target)
        });
        let nearest = distances.min_by(|a, b| a.0.rad().total_cmp(&b.0.rad()));
        match nearest {
            Some((distance, target)) if distance <= self.radius => Ok(target),
            Some((distance, target)) => Err(format!(
                "the nearest to its place is {}, {:.0}″ away (more than {:.0}″)",
                target.id,
                distance.arcsec(),
                self.radius.arcsec()
            )),
            None => Err("there are no targets".to_owned()),
        }
    }
}

/// Julian years (365.25 days) since J2000.0, JD 2451545.0; UTC will do for a place.
fn years_since_2000(at: Utc) -> f64 {
    let (day, fraction) = at.julian_date();
    ((day - 2_451_545.0) + fraction) / 365.25
}

/// A star's place carried along by its proper motion, straight: a match within arcseconds needs no
/// more.
fn moved(star: &Star, years_since_2000: f64) -> (Angle, Angle) {
    let years = years_since_2000 + 2000.0 - star.epoch_jyear;
    let ra = star.pm_ra_cosdec_mas_yr * years / 1000.0 / star.dec.rad().cos().max(1e-6);
    let dec = star.pm_dec_mas_yr * years / 1000.0;
    (
        star.ra + Angle::from_arcsec(ra),
        star.dec + Angle::from_arcsec(dec),
    )
}

/// Angle between two places (the haversine formula, sound for small angles).
fn separation(ra1: Angle, dec1: Angle, ra2: Angle, dec2: Angle) -> Angle {
    let half = |a: Angle, b: Angle| ((a.rad() - b.rad()) / 2.0).sin().powi(2);
    let h = half(dec1, dec2) + dec1.rad().cos() * dec2.rad().cos() * half(ra1, ra2);
    Angle::from_rad(2.0 * h.sqrt().min(1.0).asin())
}

fn plain(name: &str) -> String {
    let kept = name
        .chars()
        .filter(|c| !c.is_whitespace() && !"-_".contains(*c));
    kept.flat_map(char::to_lowercase).collect()
}
