//! What the visit times alone do to a periodogram: the spectral window and its aliases.

use std::f64::consts::TAU;

/// Grid points in the width of a peak, 1 / baseline: the highest point of a peak is then within
/// 2 % of its top.
const POINTS_PER_PEAK: f64 = 6.0;
/// Grid points between two exact starts of the recurrence: its rounding stays below 1e-13.
const RESTART_EVERY: usize = 256;
/// Visits taken together through the grid: their angles stay in the nearest cache.
const CHUNK: usize = 256;
/// Peaks nearer than so many widths are one.
const PEAK_WIDTHS_APART: f64 = 1.5;
/// Days in a tropical-to-sidereal day: sidereal days in a solar one, 1.002737909 (IAU 1982; the
/// Explanatory Supplement to the Astronomical Almanac, 3rd ed., §3.6).
const SIDEREAL_PER_DAY: f64 = 1.002_737_909;
/// Mean synodic month, days (Meeus 1998, Astronomical Algorithms, ch. 49).
const SYNODIC_MONTH_D: f64 = 29.530_589;
/// Julian year, days.
const YEAR_D: f64 = 365.25;
/// An alias keeps at least this share of the signal's power: below, the true peak stands clear.
const ALIAS_POWER: f64 = 0.5;

/// A strong frequency of the sampling.
#[derive(Clone, Debug, PartialEq)]
pub struct Peak {
    /// Cycles a day.
    pub frequency_per_day: f64,
    /// Lomb–Scargle power of the window, 0 to 1 (1: every visit at the same phase or the opposite).
    pub power: f64,
    /// What it comes from, where that is natural.
    pub name: Option<String>,
}

/// A period that this sampling mixes up with a candidate's.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Alias {
    /// Days.
    pub period_d: f64,
    /// Power of the window at the frequency between the two.
    pub power: f64,
}

/// Lomb–Scargle power of the sampling itself (of the constant 1, no mean taken out, standard
/// normalisation; VanderPlas 2018, ApJS 236, 16, §7.3) on a grid of frequencies.
#[derive(Clone, Debug, PartialEq)]
pub struct SpectralWindow {
    /// Power at `k × step_per_day` for k = 0, 1, …
    pub power: Vec<f64>,
    /// Step, cycles a day.
    pub step_per_day: f64,
    /// 1 / baseline: frequencies nearer than this cannot be told apart, cycles a day.
    pub resolution_per_day: f64,
}

impl SpectralWindow {
    /// Of visits at these times (days), up to a frequency in cycles a day. `None` with fewer than
    /// two visits or all of them at one time.
    pub fn of(times_d: &[f64], up_to_per_day: f64) -> Option<Self> {
        let first = times_d.iter().copied().min_by(f64::total_cmp)?;
        let last = times_d.iter().copied().max_by(f64::total_cmp)?;
        let baseline_d = last - first;
        if !(baseline_d.is_finite() && baseline_d > 0.0) {
            return None;
        }
        let resolution_per_day = 1.0 / baseline_d;
        let step_per_day = resolution_per_day / POINTS_PER_PEAK;
        let count = (up_to_per_day / step_per_day).ceil() as usize + 1;
        Some(SpectralWindow {
            power: window_power(times_d, step_per_day, count),
            step_per_day,
            resolution_per_day,
        })
    }

    /// The strongest peaks outside the central one, strongest first, at most `most`.
    pub fn peaks(&self, most: usize) -> Vec<Peak> {
        let mut tops: Vec<(f64, f64)> = (1..self.power.len().saturating_sub(1))
            .filter(|k| self.power[*k] >= self.power[k - 1] && self.power[*k] > self.power[k + 1])
            .map(|k| self.top_near(k))
            .filter(|(frequency, _)| *frequency > PEAK_WIDTHS_APART * self.resolution_per_day)
            .collect();
        tops.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.total_cmp(&b.0)));
        let mut peaks: Vec<Peak> = Vec::new();
        for (frequency_per_day, power) in tops {
            let apart = PEAK_WIDTHS_APART * self.resolution_per_day;
            let near = |peak: &Peak| (peak.frequency_per_day - frequency_per_day).abs() < apart;
            if peaks.len() < most && !peaks.iter().any(near) {
                peaks.push(Peak {
                    frequency_per_day,
                    power,
                    name: natural_name(frequency_per_day, self.resolution_per_day),
                });
            }
        }
        peaks
    }

    /// Top of the parabola through a grid maximum and its neighbours.
    fn top_near(&self, k: usize) -> (f64, f64) {
        let (before, top, after) = (self.power[k - 1], self.power[k], self.power[k + 1]);
        let bend = before - 2.0 * top + after;
        let shift = if bend < 0.0 {
            (0.5 * (before - after) / bend).clamp(-0.5, 0.5)
        } else {
            0.0
        };
        let power = top - 0.25 * (before - after) * shift;
        ((k as f64 + shift) * self.step_per_day, power.min(1.0))
    }
}

/// The periods, strongest first, at which a signal of that period would stand with at least half of
/// its power: |f ± f_w| for the peaks f_w of the window that keep that much. Periods longer than the
/// baseline are left out, since nothing tells them from a trend.
pub fn aliases(period_d: f64, peaks: &[Peak], resolution_per_day: f64) -> Vec<Alias> {
    let frequency = 1.0 / period_d;
    let mut found: Vec<Alias> = Vec::new();
    for peak in peaks.iter().filter(|peak| peak.power >= ALIAS_POWER) {
        for alias in [
            (frequency - peak.frequency_per_day).abs(),
            frequency + peak.frequency_per_day,
        ] {
            let apart = |from: f64| (alias - from).abs() > resolution_per_day;
            let is_new = found.iter().all(|other| apart(1.0 / other.period_d));
            if alias > resolution_per_day && apart(frequency) && is_new {
                found.push(Alias {
                    period_d: 1.0 / alias,
                    power: peak.power,
                });
            }
        }
    }
    found
}

/// The natural cause of a frequency in the sampling, where one lies within `tolerance` (cycles a
/// day): the nearest of sidereal and solar day, synodic month and year with their first harmonics.
pub fn natural_name(frequency_per_day: f64, tolerance: f64) -> Option<String> {
    let mut nearest: Option<(f64, String)> = None;
    for (base, name) in [
        (1.0, "solar day"),
        (SIDEREAL_PER_DAY, "sidereal day"),
        (1.0 / SYNODIC_MONTH_D, "synodic month"),
        (1.0 / YEAR_D, "year"),
    ] {
        for harmonic in 1..=4u32 {
            let distance = (frequency_per_day - f64::from(harmonic) * base).abs();
            // A harmonic must be nearer by more than rounding to displace a simpler name.
            let nearer = nearest
                .as_ref()
                .is_none_or(|(best, _)| distance < best - 1e-12);
            if distance <= tolerance && nearer {
                let full = match harmonic {
                    1 => name.to_owned(),
                    n => format!("{name}, harmonic {n}"),
                };
                nearest = Some((distance, full));
            }
        }
    }
    nearest.map(|(_, name)| name)
}

/// Sums over the visits at one frequency.
#[derive(Clone, Copy, Default)]
struct Sums {
    cos: f64,
    sin: f64,
    cos2: f64,
    sin2: f64,
}

/// Lomb–Scargle power of the constant 1 at `k × step_per_day`, k below `count` (Lomb 1976, Astrophys.
/// Space Sci. 39, 447; Scargle 1982, ApJ 263, 835). Exact, not gridded: the angles of a chunk of
/// visits are turned from one frequency to the next, which costs a few multiplications each and no
/// sine; visits × frequencies of 10⁹ take about a second.
pub fn window_power(times_d: &[f64], step_per_day: f64, count: usize) -> Vec<f64> {
    let mut sums = vec![Sums::default(); count];
    let reference = times_d.first().copied().unwrap_or(0.0);
    for chunk in times_d.chunks(CHUNK) {
        let since: Vec<f64> = chunk.iter().map(|time| time - reference).collect();
        for (block, out) in sums.chunks_mut(RESTART_EVERY).enumerate() {
            let start = step_per_day * (block * RESTART_EVERY) as f64;
            add_block(&since, start, step_per_day, out);
        }
    }
    sums.into_iter()
        .map(|s| power_of(&s, times_d.len() as f64))
        .collect()
}

fn add_block(since_d: &[f64], start_per_day: f64, step_per_day: f64, sums: &mut [Sums]) {
    let angles = |frequency: f64| -> (Vec<f64>, Vec<f64>) {
        let turn = |time: &f64| TAU * (frequency * time).fract();
        since_d
            .iter()
            .map(|time| {
                let (sin, cos) = turn(time).sin_cos();
                (cos, sin)
            })
            .unzip()
    };
    let (mut cos, mut sin) = angles(start_per_day);
    let (cos_step, sin_step) = angles(step_per_day);
    for sum in sums {
        let lanes = add_lanes(&cos, &sin);
        sum.cos += lanes.cos;
        sum.sin += lanes.sin;
        sum.cos2 += lanes.cos2;
        sum.sin2 += lanes.sin2;
        for (((c, s), dc), ds) in cos.iter_mut().zip(&mut sin).zip(&cos_step).zip(&sin_step) {
            let turned = *c * dc - *s * ds;
            *s = *s * dc + *c * ds;
            *c = turned;
        }
    }
}

/// Sums kept in several lanes, which the processor adds side by side.
fn add_lanes(cos: &[f64], sin: &[f64]) -> Sums {
    const LANES: usize = 4;
    let mut lanes = [[0.0f64; LANES]; 4];
    let (whole_cos, rest_cos) = cos.as_chunks::<LANES>();
    let (whole_sin, rest_sin) = sin.as_chunks::<LANES>();
    for (c, s) in whole_cos.iter().zip(whole_sin) {
        for i in 0..LANES {
            lanes[0][i] += c[i];
            lanes[1][i] += s[i];
            lanes[2][i] += c[i] * c[i] - s[i] * s[i];
            lanes[3][i] += 2.0 * c[i] * s[i];
        }
    }
    let mut total = Sums {
        cos: lanes[0].iter().sum(),
        sin: lanes[1].iter().sum(),
        cos2: lanes[2].iter().sum(),
        sin2: lanes[3].iter().sum(),
    };
    for (c, s) in rest_cos.iter().zip(rest_sin) {
        total.cos += c;
        total.sin += s;
        total.cos2 += c * c - s * s;
        total.sin2 += 2.0 * c * s;
    }
    total
}

/// P = ((Σ cos)² / Σ cos² + (Σ sin)² / Σ sin²) / N with angles counted from τ, where
/// tan 2ωτ = Σ sin 2ωt / Σ cos 2ωt makes Σ sin cos vanish.
fn power_of(sums: &Sums, n: f64) -> f64 {
    let length = sums.cos2.hypot(sums.sin2);
    let double = sums.sin2.atan2(sums.cos2);
    let (sin_tau, cos_tau) = (double / 2.0).sin_cos();
    let cosines = sums.cos * cos_tau + sums.sin * sin_tau;
    let sines = sums.sin * cos_tau - sums.cos * sin_tau;
    let (cos_squared, sin_squared) = ((n + length) / 2.0, (n - length) / 2.0);
    // Where all visits share a phase the sines vanish with their squares: nothing is left to add.
    let second = if sin_squared > 1e-9 * n {
        sines * sines / sin_squared
    } else {
        0.0
    };
    ((cosines * cosines / cos_squared + second) / n).clamp(0.0, 1.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Nights of one site: every third night, an hour of spread, half of each year.
    fn site_like() -> Vec<f64> {
        (0..1000)
            .filter(|night| night % 3 == 0 && night % 365 < 180)
            .map(|night| 2_461_000.8 + f64::from(night) + 0.02 * f64::from(night * 7 % 5))
            .collect()
    }

    #[test]
    fn finds_the_day_and_the_year_and_names_them() {
        let window = SpectralWindow::of(&site_like(), 1.1).unwrap();
        assert!((window.power[0] - 1.0).abs() < 1e-12);
        let peaks = window.peaks(12);
        assert!(peaks.windows(2).all(|pair| pair[0].power >= pair[1].power));
        let day = peaks
            .iter()
            .find(|peak| (peak.frequency_per_day - 1.0).abs() < 0.000_5)
            .unwrap();
        assert_eq!(day.name.as_deref(), Some("solar day"));
        assert!(day.power > 0.8, "{day:?}");
        // Sampling every third night leaves a peak at a third of a day that nature does not name.
        let third = peaks
            .iter()
            .find(|peak| (peak.frequency_per_day - 1.0 / 3.0).abs() < 0.000_5)
            .unwrap();
        assert_eq!(third.name, None);
        let found = aliases(10.0, &peaks, window.resolution_per_day);
        for period in [1.0 / 0.9, 1.0 / 1.1, 1.0 / (1.0 / 3.0 - 0.1)] {
            let near = |alias: &Alias| (1.0 / alias.period_d - 1.0 / period).abs() < 0.001;
            assert!(found.iter().any(near), "{period}: {found:?}");
        }
    }

    #[test]
    fn names_what_is_natural() {
        let check = |frequency: f64, tolerance: f64, name: Option<&str>| {
            assert_eq!(natural_name(frequency, tolerance).as_deref(), name);
        };
        check(1.0, 0.001, Some("solar day"));
        check(1.002_74, 0.001, Some("sidereal day"));
        check(2.005_48, 0.001, Some("sidereal day, harmonic 2"));
        check(1.0 / 29.53, 0.001, Some("synodic month"));
        check(0.002_74, 0.000_5, Some("year"));
        check(0.4, 0.001, None);
    }

    #[test]
    fn refuses_what_has_no_baseline() {
        assert_eq!(SpectralWindow::of(&[], 1.0), None);
        assert_eq!(SpectralWindow::of(&[5.0], 1.0), None);
        assert_eq!(SpectralWindow::of(&[5.0, 5.0], 1.0), None);
    }

    proptest! {
        #[test]
        fn the_recurrence_agrees_with_sines_and_cosines(
            times in proptest::collection::vec(0.0f64..3000.0, 2..600),
            k in 0usize..900,
        ) {
            let step = 0.003_7;
            let power = window_power(&times, step, 900);
            let frequency = step * k as f64;
            let angle = |time: &f64| TAU * frequency * (time - times[0]);
            let sum = |of: &dyn Fn(f64) -> f64| times.iter().map(|t| of(angle(t))).sum::<f64>();
            let direct = Sums {
                cos: sum(&f64::cos),
                sin: sum(&f64::sin),
                cos2: sum(&|a| (2.0 * a).cos()),
                sin2: sum(&|a| (2.0 * a).sin()),
            };
            let expected = power_of(&direct, times.len() as f64);
            prop_assert!((power[k] - expected).abs() < 1e-7, "{} {}", power[k], expected);
        }
    }
}
