//! Undoing the response of the stand, a mass on a spring.
//!
//! # Formula
//! The cell reads x where the motor pushes with T: T = x + (2 ζ/ω) x′ + x″/ω², ω = 2π f, ζ the damping ratio (second-order
//! system; textbook, from memory). The derivatives are taken of x smoothed by a Gaussian of standard deviation s, i.e. x is
//! convolved with G + (2 ζ/ω) G′ + G″/ω²; a Gaussian does not overshoot, and s is as short as noise allows.

use std::f64::consts::PI;

/// Natural frequency and damping ratio of the stand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Response {
    pub frequency_hz: f64,
    pub damping_ratio: f64,
}

/// Noise of a sample that the compensation may leave, as a share of peak: later smoothing takes it down further.
const NOISE_SHARE: f64 = 0.01;
/// Shortest smoothing, in sample intervals, and longest, as a share of the period of the stand.
const SHORTEST: f64 = 0.8;
const LONGEST: f64 = 0.08;

/// The kernel that turns readings at `interval_s` into the force on the motor's side, centred.
pub fn kernel(response: Response, interval_s: f64, noise_share: f64) -> Vec<f64> {
    let (steady, inertial) = kernels(response, interval_s, noise_share);
    steady.iter().zip(&inertial).map(|(a, b)| a + b).collect()
}

/// Where the band of the compensation ends: the frequency at which its smoothing leaves half, Hz. A Gaussian of standard deviation s
/// leaves exp(−(2 π f s)²/2).
pub fn band_end_hz(response: Response, interval_s: f64, noise_share: f64) -> f64 {
    (2.0 * 2f64.ln()).sqrt() / (2.0 * PI * smoothing_s(response, interval_s, noise_share))
}

/// Standard deviation of the Gaussian, s.
fn smoothing_s(response: Response, interval_s: f64, noise_share: f64) -> f64 {
    let omega = 2.0 * PI * response.frequency_hz;
    let second = 1.0 / (omega * omega);
    // Variance that G″ leaves of white noise: 3/(8 √π s⁵) times the interval.
    let gain = (NOISE_SHARE / noise_share.max(1e-9)).max(1.0);
    let s = (second * second * 3.0 / (8.0 * PI.sqrt()) * interval_s / (gain * gain)).powf(0.2);
    s.min(LONGEST / response.frequency_hz).max(SHORTEST * interval_s)
}

/// The kernel in two parts: force of spring and dashpot, and that of the mass, which falls with it.
pub fn kernels(response: Response, interval_s: f64, noise_share: f64) -> (Vec<f64>, Vec<f64>) {
    let omega = 2.0 * PI * response.frequency_hz;
    let (first, second) = (2.0 * response.damping_ratio / omega, 1.0 / (omega * omega));
    let s = smoothing_s(response, interval_s, noise_share);
    let half = (5.0 * s / interval_s).ceil() as i64;
    let times: Vec<f64> = (-half..=half).map(|k| k as f64 * interval_s).collect();
    let gauss: Vec<f64> = times.iter().map(|t| (-0.5 * (t / s).powi(2)).exp()).collect();
    let norm: f64 = gauss.iter().sum();
    // Sampled derivatives are set right so that they are exact for parabolas: no level or slope leaks into them.
    let d1: Vec<f64> = times.iter().zip(&gauss).map(|(t, g)| -t * g).collect();
    let d1_norm: f64 = d1.iter().zip(&times).map(|(d, t)| -d * t).sum();
    let spread = times.iter().zip(&gauss).map(|(t, g)| t * t * g).sum::<f64>() / norm;
    let d2: Vec<f64> = times.iter().zip(&gauss).map(|(t, g)| (t * t - spread) * g).collect();
    let d2_norm: f64 = d2.iter().zip(&times).map(|(d, t)| d * t * t / 2.0).sum();
    let steady = (0..times.len()).map(|k| gauss[k] / norm + first * d1[k] / d1_norm).collect();
    (steady, d2.iter().map(|d| second * d / d2_norm).collect())
}

/// Convolves evenly spaced data with a centred kernel; beyond the ends the end values go on.
pub fn apply(kernel: &[f64], data: &[f64]) -> Vec<f64> {
    let half = (kernel.len() / 2) as isize;
    let last = data.len() as isize - 1;
    (0..data.len() as isize)
        .map(|i| {
            kernel
                .iter()
                .enumerate()
                // Convolution: the kernel runs against the data.
                .map(|(k, w)| w * data[(i + half - k as isize).clamp(0, last) as usize])
                .sum()
        })
        .collect()
}

/// Readings a period from which on a reading that no stand can give is told from a sharp step of thrust, ...
const LEAST_READINGS: f64 = 20.0;
/// ... by so many standard deviations of noise.
const TIMES_NOISE: f64 = 8.0;

/// Thrust that jumps leaves a kink in the course of the mass; the cubic misses it by up to this share of (ω dt)² times the jump
/// (0.104, the jump midway between two readings), taken with a margin.
const KINK: f64 = 0.15;

/// Lone readings that no mass on a spring can give, whatever pushes it, with what stands between their neighbours: a mass does not jump.
/// `noise`: standard deviation of a reading.
pub fn impossible(time_s: &[f64], data: &[f64], frequency_hz: f64, noise: f64) -> Vec<(usize, f64)> {
    // The cubic through two neighbours on either side, at their own times.
    let between = |t: &[f64], w: &[f64]| -> f64 {
        let others = [0, 1, 3, 4];
        let weight =
            |k: usize| others.iter().filter(|j| **j != k).map(|j| (t[2] - t[*j]) / (t[k] - t[*j])).product::<f64>();
        others.iter().map(|k| w[*k] * weight(*k)).sum()
    };
    let off: Vec<(f64, f64)> =
        time_s.windows(5).zip(data.windows(5)).map(|(t, w)| (w[2] - between(t, w), 0.5 * (t[3] - t[1]))).collect();
    let highest = data.iter().fold(0.0_f64, |h, v| h.max(v.abs()));
    // Even neighbours' noise adds 34/36 of a reading's variance.
    let by_noise = TIMES_NOISE * noise * (70f64 / 36.0).sqrt();
    let limit = |interval_s: f64| by_noise + KINK * highest * (2.0 * PI * frequency_hz * interval_s).powi(2);
    let fine = |interval_s: f64| frequency_hz * interval_s * LEAST_READINGS < 1.0;
    let largest_near =
        |k: usize| (k.saturating_sub(2)..(k + 3).min(off.len())).all(|i| off[i].0.abs() <= off[k].0.abs());
    (0..off.len())
        .filter(|k| noise > 0.0 && fine(off[*k].1) && off[*k].0.abs() > limit(off[*k].1) && largest_near(*k))
        .map(|k| (k + 2, data[k + 2] - off[k].0))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_reading_that_a_mass_cannot_give() {
        let mut data: Vec<f64> =
            (0..400).map(|i| if i < 100 { 0.0 } else { 100.0 - 100.0 * (0.2136 * f64::from(i - 100)).cos() }).collect();
        // Stamps off by a twentieth of an interval, and readings with them.
        let time_s: Vec<f64> =
            (0..400).map(|i| 0.001 * (f64::from(i) + 0.05 * f64::from(i * 7 % 5 - 2) / 2.0)).collect();
        for (t, x) in time_s.iter().zip(&mut data).skip(100) {
            *x = 100.0 - 100.0 * (213.6 * (t - 0.1).max(0.0)).cos();
        }
        // A thrust that jumps from nil to full within one interval is none.
        assert!(impossible(&time_s, &data, 34.0, 0.3).is_empty());
        let was = data[250];
        data[250] += 16.0;
        let found = impossible(&time_s, &data, 34.0, 0.3);
        assert!(found.len() == 1 && found[0].0 == 250 && (found[0].1 - was).abs() < 0.2, "{found:?}");
        assert!(
            impossible(&time_s, &data, 340.0, 0.3).is_empty()
                && impossible(&time_s[..3], &data[..3], 34.0, 0.3).is_empty()
        );
    }

    /// tests/reference/sdof_trapezoid_fn38_zeta003_1kHz.csv: computed in closed form, checked with scipy lsim (3e-12).
    #[test]
    fn the_reference_response_is_undone() {
        let text = include_str!("../../tests/reference/sdof_trapezoid_fn38_zeta003_1kHz.csv");
        let rows: Vec<Vec<f64>> = text
            .lines()
            .skip(1)
            .map(|l| l.split(',').filter_map(|x| x.parse().ok()).collect())
            .filter(|r: &Vec<f64>| r.len() >= 3)
            .collect();
        assert!(rows.len() > 500);
        let (input, output): (Vec<f64>, Vec<f64>) = rows.iter().map(|r| (r[1], r[2])).unzip();
        let k = kernel(Response { frequency_hz: 38.0, damping_ratio: 0.03 }, 0.001, 1e-5);
        let found = apply(&k, &output);
        let top = input.iter().copied().fold(f64::MIN, f64::max);
        let naive = output.iter().copied().fold(f64::MIN, f64::max);
        assert!(naive > 1.03 * top, "the vector rings: {naive} over {top}");
        let worst = found.iter().zip(&input).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        // Only the corners of the trapezoid are rounded, over about one sample.
        assert!(worst < 0.05 * top, "{worst} of {top}");
        let peak = found.iter().copied().fold(f64::MIN, f64::max);
        assert!((peak / top - 1.0).abs() < 0.003, "{peak} against {top}");
    }

    #[test]
    fn a_level_passes_unchanged() {
        let k = kernel(Response { frequency_hz: 34.0, damping_ratio: 0.02 }, 0.001, 0.003);
        assert!(apply(&k, &[7.0; 200]).iter().all(|v| (v - 7.0).abs() < 1e-9));
    }
}
