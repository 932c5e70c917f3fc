//! The audit's statistics against general-purpose libraries.

use std::f64::consts::TAU;
use std::fs;
use std::path::Path;

use nightwright::audit::{Measurement, OrbitErrors, SpectralWindow, window_power};
use nightwright::catalogue::{Candidate, Measured};
use nightwright::units::Angle;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rmpfit::{MPFitter, MPResult};

const T0: f64 = 2_461_000.0;

fn candidate(period_d: f64, eccentric_terms: bool) -> Candidate {
    let exact = |value| Measured { value, error: 0.0 };
    Candidate {
        period_d: exact(period_d),
        conjunction_bjd_tdb: exact(T0),
        semi_amplitude_m_s: None,
        eccentricity: 0.0,
        argument: Angle::ZERO,
        eccentric_terms,
    }
}

/// Lines of numbers under a header; lines that begin with `#` are remarks.
fn rows(name: &str) -> Vec<Vec<f64>> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("tests/audit")
        .join(name);
    let text = fs::read_to_string(path).expect("the table stands beside the test");
    text.lines()
        .filter(|line| !line.starts_with('#'))
        .skip(1)
        .map(|line| line.split(',').map(|n| n.parse().unwrap()).collect())
        .collect()
}

/// A standard normal deviate (Box & Muller 1958, Annals of Mathematical Statistics 29, 610).
fn normal(rng: &mut ChaCha8Rng) -> f64 {
    let (a, b): (f64, f64) = (rng.random(), rng.random());
    (-2.0 * (1.0 - a).ln()).sqrt() * (TAU * b).cos()
}

/// Uneven phases, uneven errors.
fn uneven_visits(count: usize, period_d: f64, rng: &mut ChaCha8Rng) -> Vec<Measurement> {
    (0..count)
        .map(|i| Measurement {
            bjd_tdb: T0 + period_d * (i as f64 + 0.6 * rng.random::<f64>().powi(2)),
            rv_error_m_s: 0.8 + 1.5 * rng.random::<f64>(),
        })
        .collect()
}

/// Invented velocities, to be fitted.
struct Velocities<'a> {
    visits: &'a [Measurement],
    period_d: f64,
    velocities_m_s: Vec<f64>,
}

/// γ − K sin(2πφ + δ), and with five parameters + a cos 4πφ + b sin 4πφ.
fn model(parameters: &[f64], angle: f64) -> f64 {
    let circular = parameters[0] - parameters[1] * (angle + parameters[2]).sin();
    match parameters.get(3..5) {
        Some(harmonic) => {
            circular + harmonic[0] * (2.0 * angle).cos() + harmonic[1] * (2.0 * angle).sin()
        }
        None => circular,
    }
}

impl Velocities<'_> {
    fn angle(&self, visit: &Measurement) -> f64 {
        TAU * ((visit.bjd_tdb - T0) / self.period_d).fract()
    }
}

impl MPFitter for Velocities<'_> {
    fn eval(&mut self, parameters: &[f64], deviates: &mut [f64]) -> MPResult<()> {
        for (i, deviate) in deviates.iter_mut().enumerate() {
            let visit = &self.visits[i];
            let foreseen = model(parameters, self.angle(visit));
            *deviate = (self.velocities_m_s[i] - foreseen) / visit.rv_error_m_s;
        }
        Ok(())
    }

    fn number_of_points(&self) -> usize {
        self.visits.len()
    }
}

fn deviation(values: &[f64]) -> f64 {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    (values.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt()
}

/// Levenberg–Marquardt fits (rmpfit 2.0, a port of MINPACK's) of invented velocities with noise:
/// scatters of K, of phase × K, and of an amplitude of the first harmonic.
fn monte_carlo(visits: &[Measurement], period_d: f64, terms: usize, seed: u64) -> [f64; 3] {
    const TRIALS: usize = 3000;
    // K far above its error: the bound is reached where the model is as good as linear.
    const K_M_S: f64 = 40.0;
    let truth = [7.0, K_M_S, 0.0, 0.0, 0.0];
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let mut found: [Vec<f64>; 5] = Default::default();
    for _ in 0..TRIALS {
        let mut fit = Velocities {
            visits,
            period_d,
            velocities_m_s: Vec::new(),
        };
        fit.velocities_m_s = visits
            .iter()
            .map(|v| model(&truth, fit.angle(v)) + v.rv_error_m_s * normal(&mut rng))
            .collect();
        let mut parameters = truth[..terms].to_vec();
        fit.mpfit(&mut parameters).unwrap();
        for (values, parameter) in found.iter_mut().zip(parameters) {
            values.push(parameter);
        }
    }
    let harmonic = match terms {
        5 => deviation(&found[3]).hypot(deviation(&found[4])) / 2f64.sqrt(),
        _ => 0.0,
    };
    [deviation(&found[1]), K_M_S * deviation(&found[2]), harmonic]
}

/// A scatter of 3000 fits is itself known to 1/√6000 = 1.3 %: four of these.
fn close(found: f64, expected: f64) {
    assert!((found / expected - 1.0).abs() < 0.052, "{found} {expected}");
}

#[test]
fn bounds_on_orbit_errors_agree_with_fits_of_invented_velocities() {
    let mut rng = ChaCha8Rng::seed_from_u64(11);
    for (count, period_d) in [(12, 3.7), (60, 41.0)] {
        let visits = uneven_visits(count, period_d, &mut rng);
        let errors = OrbitErrors::of(&candidate(period_d, true), &visits).unwrap();
        let [sigma_k, sigma_phase, _] = monte_carlo(&visits, period_d, 3, 5);
        close(errors.sigma_k_m_s, sigma_k);
        close(errors.sigma_phase_m_s, sigma_phase);
        let [sigma_k, _, harmonic] = monte_carlo(&visits, period_d, 5, 6);
        let eccentric = errors.eccentric.unwrap();
        close(eccentric.sigma_k_m_s, sigma_k);
        close(eccentric.sigma_harmonic_m_s, harmonic);
        // Terms that are free besides can only cost.
        assert!(eccentric.sigma_k_m_s >= errors.sigma_k_m_s);
    }
}

#[test]
fn even_phases_reach_the_limit_of_many_visits() {
    // σ_K = σ √(2/N) for N even phases: the cosine and sine columns are orthogonal to each other and
    // to the zero point, and the mean of sin² is ½.
    for count in [8, 50, 400] {
        let visits: Vec<Measurement> = (0..count)
            .map(|i| Measurement {
                bjd_tdb: T0 + 10.0 * f64::from(i) * (1.0 + 1.0 / f64::from(count)),
                rv_error_m_s: 2.0,
            })
            .collect();
        let errors = OrbitErrors::of(&candidate(10.0, false), &visits).unwrap();
        let limit = 2.0 * (2.0 / f64::from(count)).sqrt();
        assert!((errors.sigma_k_m_s / limit - 1.0).abs() < 1e-9);
        assert_eq!(errors.eccentric, None);
    }
}

#[test]
fn an_unknown_phase_gives_the_mean_over_all_phases() {
    let mut rng = ChaCha8Rng::seed_from_u64(12);
    let visits = uneven_visits(20, 5.0, &mut rng);
    let mut lost = candidate(5.0, false);
    lost.conjunction_bjd_tdb.error = 50.0;
    let errors = OrbitErrors::of(&lost, &visits).unwrap();
    let mean = OrbitErrors::mean_sigma_k_m_s(5.0, &visits).unwrap();
    assert!((errors.sigma_k_m_s / mean - 1.0).abs() < 1e-9);
    assert!((errors.sigma_phase_m_s / mean - 1.0).abs() < 1e-9);
}

#[test]
fn too_few_phases_determine_no_orbit() {
    let visit = |days: f64| Measurement {
        bjd_tdb: T0 + days,
        rv_error_m_s: 1.0,
    };
    let orbit = candidate(10.0, true);
    assert_eq!(OrbitErrors::of(&orbit, &[]), None);
    assert_eq!(OrbitErrors::of(&orbit, &[visit(1.0), visit(3.0)]), None);
    let same = [visit(1.0), visit(11.0), visit(21.0)];
    assert_eq!(OrbitErrors::of(&orbit, &same), None);
    let three = [visit(1.0), visit(4.0), visit(7.5)];
    let errors = OrbitErrors::of(&orbit, &three).unwrap();
    assert_eq!(errors.eccentric, None);
}

#[test]
fn the_window_agrees_with_a_general_purpose_lomb_scargle() {
    // tests/audit/window_power.csv by tests/audit/make_window.py: astropy's LombScargle of ones, no
    // mean taken out, standard normalisation; scipy's agreed to 1e-9 when the table was made.
    // Frequencies are printed to 1e-9 a day, which over 1200 days moves a phase by 8e-6.
    let times: Vec<f64> = rows("window_times.csv").into_iter().map(|r| r[0]).collect();
    assert_eq!(times.len(), 216);
    let table = rows("window_power.csv");
    assert!(table.len() > 400);
    for row in &table {
        let power = window_power(&times, row[0], 2)[1];
        assert!((power - row[1]).abs() < 1e-8, "{row:?} {power}");
    }
    // The recurrence over a whole grid meets the same values where its points lie nearest.
    let window = SpectralWindow::of(&times, 3.2).unwrap();
    let strongest = &window.peaks(3)[0];
    let largest = table
        .iter()
        .filter(|row| row[0] > 0.5)
        .map(|row| row[1])
        .fold(0.0, f64::max);
    assert!(
        (strongest.frequency_per_day - 1.0).abs() < 0.001,
        "{strongest:?}"
    );
    assert!((strongest.power - largest).abs() < 0.005, "{strongest:?}");
}
