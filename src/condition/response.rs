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

#[cfg(test)]
mod tests {
    use super::*;

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
