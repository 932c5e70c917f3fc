//! Photons, signal-to-noise, velocity error and the exposure that follows from them.
//!
//! Model, all per spectral pixel in the band:
//! - star: zero point × 10^(−0.4 (m + k X)) × free area of the pupil × band × throughput × what
//!   the fibre passes, relative to the reference seeing;
//! - seeing at airmass X: zenith seeing × X^0.6 (Fried 1966, JOSA 56, 1372: r₀ ∝ cos^(3/5) z);
//! - fibre: a Gaussian star image centred on a round hole passes 1 − 2^(−(D/s)²), D the hole's
//!   diameter and s the image's full width at half maximum;
//! - sky: the same zero point through the hole's area, without the loss of a point source;
//! - noise: star, sky and read-out (once an exposure), added in quadrature;
//! - velocity: σ = c / (Q √N) (Bouchy, Pepe & Queloz 2001, A&A 374, 733), N being the photons that
//!   would give the same signal-to-noise without sky and read-out.

use thiserror::Error;

use crate::catalogue::{ExposureRule, Instrument, Survey, Target};
use crate::record::Exposures;
use crate::time::Utc;

/// Speed of light in m/s (SI definition).
pub const LIGHT_M_S: f64 = 299_792_458.0;

/// A visit whose shutter would have to be open for longer is refused: no plan could use it.
pub const LONGEST_OPEN_S: f64 = 4.0 * 3600.0;

/// Exposures are given to a tenth of a second: no shutter is finer, and people read them.
const EXPOSURE_STEPS_PER_S: f64 = 10.0;

/// A star's best case is taken no lower than this airmass's zenith distance: beyond, the secant is
/// no airmass any more.
const LOWEST_CULMINATION_DEG: f64 = 75.0;

/// What the sky is like towards a star as its visit begins.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Conditions {
    /// Start of the first exposure.
    pub utc: Utc,
    /// The same instant for the star at the solar system's barycentre, BJD_TDB in days.
    pub bjd_tdb: f64,
    /// Airmass, 1 or more.
    pub airmass: f64,
    /// Seeing at the zenith (full width at half maximum), arcseconds.
    pub zenith_seeing_arcsec: f64,
    /// Sky brightness behind the star with the moon, magnitudes per square arcsecond.
    pub sky_mag_arcsec2: f64,
}

/// A visit's exposures and what they give.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Exposing {
    /// How many of how long.
    pub exposures: Exposures,
    /// Open shutter and read-outs together, seconds.
    pub duration_s: f64,
    /// Signal-to-noise per spectral pixel of all exposures together.
    pub snr: f64,
    /// Velocity error from photons, sky and read-out alone, m/s.
    pub photon_rv_error_m_s: f64,
    /// The same in quadrature with the instrument's floor and the star's jitter, m/s.
    pub rv_error_m_s: f64,
    /// Open-shutter time of the star's best case over that of this instant, 0 to 1; for a fixed
    /// exposure, which takes as long whatever the sky, the share of the best case's information
    /// (signal-to-noise squared). The best case: culmination, dark sky, typical seeing.
    pub quality: f64,
}

/// Why a star cannot be exposed on at an instant.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum CannotExpose {
    /// Too bright.
    #[error(
        "saturates after {saturates_after_s:.2} s, before the shortest exposure of {shortest_s} s ends: drop the star or lower instrument.min_exposure_s"
    )]
    Saturates {
        /// When a spectral pixel is full, seconds.
        saturates_after_s: f64,
        /// Shortest exposure, seconds.
        shortest_s: f64,
    },
    /// Too faint for what its rule asks.
    #[error(
        "needs {needed_s:.0} s of open shutter, more than {longest_s:.0} s: ask for less in its exposure rule"
    )]
    TooLong {
        /// What the rule needs, seconds; infinite when no exposure would do.
        needed_s: f64,
        /// The most that a visit may take, seconds.
        longest_s: f64,
    },
    /// The velocity model has no quality factor for the star.
    #[error("no quality factor for {temperature_k} K: give instrument.velocity.quality_factor")]
    NoQualityFactor {
        /// The star's temperature.
        temperature_k: f64,
    },
    /// The conditions are no numbers of a sky.
    #[error(
        "airmass {airmass}, seeing {seeing_arcsec} arcsec and sky {sky_mag_arcsec2} mag/arcsec² are no conditions to observe in"
    )]
    NoConditions {
        /// Airmass found.
        airmass: f64,
        /// Zenith seeing found, arcseconds.
        seeing_arcsec: f64,
        /// Sky found, mag/arcsec².
        sky_mag_arcsec2: f64,
    },
}

/// Share of a Gaussian image of that full width at half maximum which a centred round hole passes.
pub fn fibre_coupling(fibre_arcsec: f64, seeing_arcsec: f64) -> f64 {
    1.0 - (-(fibre_arcsec / seeing_arcsec).powi(2)).exp2()
}

/// Photon-noise velocity error, m/s, of so many photons at quality factor Q (Bouchy, Pepe & Queloz
/// 2001, A&A 374, 733).
pub fn photon_rv_error_m_s(quality_factor: f64, photons: f64) -> f64 {
    LIGHT_M_S / (quality_factor * photons.sqrt())
}

/// The quality factor at a temperature: straight lines between the table's points, its end values
/// beyond them; `None` for an empty table.
pub fn quality_factor(table: &[(f64, f64)], temperature_k: f64) -> Option<f64> {
    let after = table.partition_point(|p| p.0 <= temperature_k);
    match after {
        0 => table.first().map(|p| p.1),
        n if n == table.len() => table.last().map(|p| p.1),
        n => {
            let ((t0, q0), (t1, q1)) = (table[n - 1], table[n]);
            Some(q0 + (q1 - q0) * (temperature_k - t0) / (t1 - t0))
        }
    }
}

/// Detected photons per second and spectral pixel.
#[derive(Clone, Copy, Debug)]
struct Rates {
    star: f64,
    sky: f64,
}

/// What a star's exposures come to, with everything that does not change from minute to minute
/// worked out beforehand.
#[derive(Clone, Debug)]
pub struct Photometer {
    rule: ExposureRule,
    /// Detected per second and spectral pixel above the air, were the fibre to pass everything.
    star_above_air: f64,
    /// The same from a sky of magnitude zero per square arcsecond.
    sky_zero: f64,
    extinction_mag_airmass: f64,
    fibre_arcsec: f64,
    spectral_pixels: f64,
    read_noise_e: f64,
    readout_s: f64,
    saturation_e: f64,
    min_exposure_s: f64,
    max_exposure_s: f64,
    quality_factor: Option<f64>,
    temperature_k: f64,
    /// Instrument floor and stellar jitter in quadrature, m/s.
    other_error_m_s: f64,
    best: Result<Plain, CannotExpose>,
}

/// Exposures before they are compared with the best case.
#[derive(Clone, Copy, Debug)]
struct Plain {
    count: u32,
    /// Open-shutter time before rounding, seconds.
    open_s: f64,
    seconds: f64,
    snr: f64,
}

impl Photometer {
    /// For a target of the survey.
    pub fn new(survey: &Survey, target: &Target) -> Self {
        let (telescope, instrument) = (&survey.telescope, &survey.instrument);
        let radius_m = telescope.aperture_m / 2.0;
        let free_area_m2 =
            std::f64::consts::PI * radius_m * radius_m * (1.0 - telescope.obstruction);
        let band_nm = instrument.band_max_nm - instrument.band_min_nm;
        let coupling = fibre_coupling(instrument.fibre_arcsec, instrument.reference_seeing_arcsec);
        let zero_magnitude =
            instrument.zero_point_photons_s_m2_nm * free_area_m2 * band_nm * instrument.throughput
                / coupling
                / instrument.spectral_pixels;
        let fibre_area = std::f64::consts::FRAC_PI_4 * instrument.fibre_arcsec.powi(2);
        let mut photometer = Photometer {
            rule: target.exposure,
            star_above_air: zero_magnitude * from_magnitude(target.magnitude),
            sky_zero: zero_magnitude * fibre_area,
            extinction_mag_airmass: instrument.extinction_mag_airmass,
            fibre_arcsec: instrument.fibre_arcsec,
            spectral_pixels: instrument.spectral_pixels,
            read_noise_e: instrument.read_noise_e,
            readout_s: instrument.readout_s,
            saturation_e: instrument.saturation_e,
            min_exposure_s: instrument.min_exposure_s,
            max_exposure_s: instrument.max_exposure_s,
            quality_factor: quality_factor(
                &instrument.velocity.quality_factor,
                target.temperature_k,
            ),
            temperature_k: target.temperature_k,
            other_error_m_s: instrument.velocity.floor_m_s.hypot(target.jitter_m_s),
            best: Err(CannotExpose::NoQualityFactor {
                temperature_k: target.temperature_k,
            }),
        };
        photometer.best = photometer.plain(best_conditions(survey, target, instrument));
        photometer
    }

    /// The exposures that the target's rule asks for under these conditions. No exposure saturates
    /// or is longer than the longest or shorter than the shortest allowed.
    ///
    /// # Errors
    /// [`CannotExpose`].
    pub fn expose(&self, at: &Conditions) -> Result<Exposing, CannotExpose> {
        let plain = self.plain((at.airmass, at.zenith_seeing_arcsec, at.sky_mag_arcsec2))?;
        self.finish(&plain)
    }

    /// The same in the star's best case: culmination, dark sky, typical seeing.
    ///
    /// # Errors
    /// [`CannotExpose`]; then no instant will do either.
    pub fn best(&self) -> Result<Exposing, CannotExpose> {
        self.finish(&self.best?)
    }

    fn finish(&self, plain: &Plain) -> Result<Exposing, CannotExpose> {
        let factor = self.usable_quality_factor()?;
        let photons = plain.snr * plain.snr * self.spectral_pixels;
        let photon_rv_error_m_s = photon_rv_error_m_s(factor, photons);
        Ok(Exposing {
            exposures: Exposures {
                count: plain.count,
                seconds: plain.seconds,
            },
            duration_s: f64::from(plain.count) * (plain.seconds + self.readout_s),
            snr: plain.snr,
            photon_rv_error_m_s,
            rv_error_m_s: photon_rv_error_m_s.hypot(self.other_error_m_s),
            quality: self.quality(plain),
        })
    }

    fn quality(&self, plain: &Plain) -> f64 {
        // Where the best case itself is out of reach by a hair, this instant is as good as it gets.
        let Ok(best) = &self.best else { return 1.0 };
        let ratio = match self.rule {
            ExposureRule::FixedSeconds(_) => (plain.snr / best.snr).powi(2),
            ExposureRule::SignalToNoise(_) | ExposureRule::VelocityError(_) => {
                best.open_s / plain.open_s
            }
        };
        ratio.clamp(0.0, 1.0)
    }

    fn usable_quality_factor(&self) -> Result<f64, CannotExpose> {
        self.quality_factor
            .filter(|factor| *factor > 0.0)
            .ok_or(CannotExpose::NoQualityFactor {
                temperature_k: self.temperature_k,
            })
    }

    fn plain(&self, (airmass, seeing, sky): (f64, f64, f64)) -> Result<Plain, CannotExpose> {
        if !(airmass.is_finite() && airmass > 0.0 && seeing.is_finite() && seeing > 0.0)
            || sky.is_nan()
        {
            return Err(CannotExpose::NoConditions {
                airmass,
                seeing_arcsec: seeing,
                sky_mag_arcsec2: sky,
            });
        }
        let coupling = fibre_coupling(self.fibre_arcsec, seeing * airmass.powf(0.6));
        let rates = Rates {
            star: self.star_above_air
                * from_magnitude(self.extinction_mag_airmass * airmass)
                * coupling,
            sky: self.sky_zero * from_magnitude(sky),
        };
        let longest_s = self.longest_single_s(&rates)?;
        let open_s = match self.rule {
            ExposureRule::FixedSeconds(seconds) => seconds,
            ExposureRule::SignalToNoise(snr) => self.open_for_snr_s(&rates, snr, longest_s),
            ExposureRule::VelocityError(error_m_s) => {
                let factor = self.usable_quality_factor()?;
                let snr = LIGHT_M_S / (factor * error_m_s * self.spectral_pixels.sqrt());
                self.open_for_snr_s(&rates, snr, longest_s)
            }
        };
        if open_s.is_nan() || open_s > LONGEST_OPEN_S {
            return Err(CannotExpose::TooLong {
                needed_s: if open_s.is_nan() {
                    f64::INFINITY
                } else {
                    open_s
                },
                longest_s: LONGEST_OPEN_S,
            });
        }
        Ok(self.split(&rates, open_s, longest_s))
    }

    /// The longest exposure allowed by instrument and saturation.
    fn longest_single_s(&self, rates: &Rates) -> Result<f64, CannotExpose> {
        let saturates_after_s = self.saturation_e / (rates.star + rates.sky);
        if saturates_after_s < self.min_exposure_s {
            return Err(CannotExpose::Saturates {
                saturates_after_s,
                shortest_s: self.min_exposure_s,
            });
        }
        Ok(saturates_after_s.min(self.max_exposure_s))
    }

    /// Open-shutter time to a signal-to-noise: the positive root of
    /// S² t² − snr² (S + B) t − snr² n r² = 0 with as many read-outs n as the split needs.
    fn open_for_snr_s(&self, rates: &Rates, snr: f64, longest_s: f64) -> f64 {
        let wanted = snr * snr;
        let linear = wanted * (rates.star + rates.sky);
        let open_with = |count: f64| {
            let read = wanted * count * self.read_noise_e * self.read_noise_e;
            let root = (linear * linear + 4.0 * rates.star * rates.star * read).sqrt();
            (linear + root) / (2.0 * rates.star * rates.star)
        };
        let mut count = 1.0;
        loop {
            let open_s = open_with(count);
            let needed = (open_s / longest_s).ceil();
            // More read-outs need more light, which may need one more exposure: the count only
            // rises, and ends where it suffices or where the visit is refused anyway.
            if needed <= count || open_s.is_nan() || open_s > LONGEST_OPEN_S {
                return open_s;
            }
            count = needed;
        }
    }

    fn split(&self, rates: &Rates, open_s: f64, longest_s: f64) -> Plain {
        let count = (open_s / longest_s).ceil().max(1.0);
        let stepped_s = (open_s / count * EXPOSURE_STEPS_PER_S).ceil() / EXPOSURE_STEPS_PER_S;
        let seconds = stepped_s.min(longest_s).max(self.min_exposure_s);
        let gathered_s = count * seconds;
        let signal = rates.star * gathered_s;
        let noise =
            (rates.star + rates.sky) * gathered_s + count * self.read_noise_e * self.read_noise_e;
        Plain {
            count: count as u32,
            open_s: open_s.max(count * self.min_exposure_s),
            seconds,
            snr: signal / noise.sqrt(),
        }
    }
}

/// Flux relative to magnitude zero.
fn from_magnitude(magnitude: f64) -> f64 {
    (magnitude * (-0.4 * std::f64::consts::LOG2_10)).exp2()
}

/// Airmass at culmination, typical seeing, dark sky.
fn best_conditions(survey: &Survey, target: &Target, instrument: &Instrument) -> (f64, f64, f64) {
    let zenith_deg = (survey.site.latitude - target.star.dec).deg().abs();
    let airmass = 1.0 / zenith_deg.min(LOWEST_CULMINATION_DEG).to_radians().cos();
    (
        airmass,
        survey.planning.typical_seeing_arcsec,
        instrument.dark_sky_mag_arcsec2,
    )
}

#[cfg(test)]
mod tests;
