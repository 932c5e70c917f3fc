//! Streams of chance that do not depend on each other, nor on what is planned.

use chrono::Datelike;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

use crate::time::NightDate;

/// What a stream of chance is for. Each has its own, so that a draw more or less for one purpose
/// changes nothing for another: two scenarios with the same seed see the same weather.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Purpose {
    /// Clear or cloudy, hour by hour.
    Sky,
    /// Seeing.
    Seeing,
    /// Wind and the other quantities.
    Air,
    /// Faults of the instrument.
    Faults,
    /// Outages of the weather feed.
    Feed,
    /// What the observatory makes of its visits.
    Observatory,
}

/// The stream for one purpose in one night of one realisation. The four numbers are the cipher's
/// key itself, so no two streams share a beginning.
pub fn stream(seed: u64, realisation: u32, night: NightDate, purpose: Purpose) -> ChaCha8Rng {
    let day = night.date().num_days_from_ce();
    let mut key = [0_u8; 32];
    key[..8].copy_from_slice(&seed.to_le_bytes());
    key[8..12].copy_from_slice(&realisation.to_le_bytes());
    key[12..16].copy_from_slice(&day.to_le_bytes());
    key[16] = purpose as u8;
    ChaCha8Rng::from_seed(key)
}

/// True with that probability.
pub fn happens(rng: &mut ChaCha8Rng, odds: f64) -> bool {
    rng.random::<f64>() < odds
}

/// An exponential waiting time with that mean; endless for a mean that is not finite.
pub fn exponential(rng: &mut ChaCha8Rng, mean: f64) -> f64 {
    let uniform: f64 = rng.random();
    -mean * (1.0 - uniform).ln()
}

/// A standard normal deviate (Box & Muller 1958, Ann. Math. Statist. 29, 610).
pub fn normal(rng: &mut ChaCha8Rng) -> f64 {
    let (radius, angle): (f64, f64) = (rng.random(), rng.random());
    (-2.0 * (1.0 - radius).ln()).sqrt() * (std::f64::consts::TAU * angle).cos()
}

/// Uniform between two bounds.
pub fn between(rng: &mut ChaCha8Rng, least: f64, greatest: f64) -> f64 {
    least + (greatest - least) * rng.random::<f64>()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn streams_differ_in_every_number_and_repeat() {
        let night = NightDate::parse("2026-12-01").unwrap();
        let first = |seed, realisation, night, purpose| -> u64 {
            stream(seed, realisation, night, purpose).random()
        };
        let base = first(1, 2, night, Purpose::Sky);
        assert_eq!(base, first(1, 2, night, Purpose::Sky));
        let others = [
            first(2, 2, night, Purpose::Sky),
            first(1, 3, night, Purpose::Sky),
            first(1, 2, night.plus_nights(1), Purpose::Sky),
            first(1, 2, night, Purpose::Seeing),
        ];
        assert!(others.iter().all(|other| *other != base));
    }

    #[test]
    fn deviates_have_their_moments() {
        let night = NightDate::parse("2026-12-01").unwrap();
        let mut rng = stream(7, 0, night, Purpose::Air);
        let draws = 40_000;
        let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
        let waits: Vec<f64> = (0..draws).map(|_| exponential(&mut rng, 3.0)).collect();
        let bells: Vec<f64> = (0..draws).map(|_| normal(&mut rng)).collect();
        let squares: Vec<f64> = bells.iter().map(|z| z * z).collect();
        // Five standard errors: 3/√n, 1/√n and √2/√n times five.
        let error = 5.0 / f64::from(draws).sqrt();
        assert!((mean(&waits) - 3.0).abs() < 3.0 * error);
        assert!(mean(&bells).abs() < error);
        assert!((mean(&squares) - 1.0).abs() < 2_f64.sqrt() * error);
    }
}
