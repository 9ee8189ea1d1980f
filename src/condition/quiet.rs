//! The quiet record: its level, its slope and its noise.

use std::ops::Range;

/// Noise of a quiet stretch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct QuietFit {
    /// Time the level belongs to, s.
    pub at_s: f64,
    /// Level at that time, in the unit of the data.
    pub level: f64,
    /// Unit per second; 0 where the evidence does not ask for a slope.
    pub slope_per_s: f64,
    /// Standard uncertainty of the level at `at_s`, with the noise's own correlation.
    pub level_u: f64,
    pub slope_u: f64,
    /// Standard deviation of single samples about the line.
    pub sample_sd: f64,
    /// Two-sided spectral density of the noise at low frequency, unit² s: an integral over T s has variance density·T.
    pub low_frequency_density: f64,
    pub samples: usize,
    pub duration_s: f64,
}

impl QuietFit {
    pub fn level_at(&self, time_s: f64) -> f64 {
        self.level + self.slope_per_s * (time_s - self.at_s)
    }
}

/// How many standard errors a slope must reach before it is used.
const SLOPE_EVIDENCE: f64 = 5.0;

/// Fits the quiet samples `range` and gives the level at `at_s`. `None` for fewer than 2 samples.
pub fn fit(time_s: &[f64], data: &[f64], range: Range<usize>, at_s: f64) -> Option<QuietFit> {
    let (t, y) = (time_s.get(range.clone())?, data.get(range)?);
    let n = t.len();
    if n < 2 {
        return None;
    }
    let nf = n as f64;
    let centre = t.iter().sum::<f64>() / nf;
    let mean = y.iter().sum::<f64>() / nf;
    let spread: f64 = t.iter().map(|t| (t - centre) * (t - centre)).sum();
    let slope = t.iter().zip(y).map(|(t, y)| (t - centre) * (y - mean)).sum::<f64>() / spread;
    let duration_s = (t[n - 1] - t[0]) * nf / (nf - 1.0);
    let residual = |i: usize, slope: f64| y[i] - mean - slope * (t[i] - centre);
    let sd_about = |slope: f64, dof: f64| ((0..n).map(|i| residual(i, slope).powi(2)).sum::<f64>() / dof).sqrt();
    let sd_line = sd_about(slope, (nf - 2.0).max(1.0));
    // Batch means carry whatever correlation the noise has; without enough samples the noise is taken as white.
    let batches = (n / 8).min(24);
    let inflation = |slope: f64, sd: f64| -> f64 {
        if batches < 6 || sd <= 0.0 {
            return 1.0;
        }
        let length = n / batches;
        let means: Vec<f64> = (0..batches)
            .map(|b| (b * length..(b + 1) * length).map(|i| residual(i, slope)).sum::<f64>() / length as f64)
            .collect();
        let m = means.iter().sum::<f64>() / batches as f64;
        let variance = means.iter().map(|v| (v - m) * (v - m)).sum::<f64>() / (batches as f64 - 2.0);
        (variance * length as f64 / (sd * sd)).max(1.0)
    };
    let slope_error = sd_line * (inflation(slope, sd_line) / spread).sqrt();
    let use_slope = n >= 20 && slope.abs() > SLOPE_EVIDENCE * slope_error && slope_error > 0.0;
    let (used, used_u, sd) =
        if use_slope { (slope, slope_error, sd_line) } else { (0.0, 0.0, sd_about(0.0, nf - 1.0)) };
    let factor = inflation(used, sd);
    let level_u = (sd * sd * factor / nf + (used_u * (at_s - centre)).powi(2)).sqrt();
    Some(QuietFit {
        at_s,
        level: mean + used * (at_s - centre),
        slope_per_s: used,
        level_u,
        slope_u: slope_error,
        sample_sd: sd,
        low_frequency_density: sd * sd * factor * duration_s / nf,
        samples: n,
        duration_s,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn noise(n: usize, seed: u64) -> Vec<f64> {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        (0..n).map(|_| StandardNormal.sample(&mut rng)).collect()
    }

    #[test]
    fn level_and_its_uncertainty_of_white_noise() {
        let t: Vec<f64> = (0..1000).map(|i| i as f64 * 0.01).collect();
        let mut hits = 0;
        for seed in 0..200 {
            let y: Vec<f64> = noise(1000, seed).iter().map(|z| 5.0 + z).collect();
            let q = fit(&t, &y, 0..1000, 9.99).expect("fit");
            if (q.level - 5.0).abs() < 1.96 * q.level_u {
                hits += 1;
            }
        }
        // 95 % of 200 is 190, with a standard deviation of 3.
        assert!((181..=199).contains(&hits), "{hits}");
    }

    #[test]
    fn a_plain_slope_is_carried_to_the_instant_asked_for() {
        let t: Vec<f64> = (0..500).map(|i| i as f64 * 0.01).collect();
        let y: Vec<f64> = noise(500, 3).iter().zip(&t).map(|(z, t)| 2.0 * t + 0.1 * z).collect();
        let q = fit(&t, &y, 0..500, 6.0).expect("fit");
        assert!((q.level - 12.0).abs() < 4.0 * q.level_u && q.level_u < 0.05, "{q:?}");
    }

    #[test]
    fn correlated_noise_widens_the_level() {
        let t: Vec<f64> = (0..2000).map(|i| i as f64 * 0.001).collect();
        let z = noise(2000, 11);
        let mut y = vec![0.0; 2000];
        for i in 1..2000 {
            y[i] = 0.9 * y[i - 1] + z[i];
        }
        let q = fit(&t, &y, 0..2000, 1.0).expect("fit");
        assert!(q.level_u > 2.0 * q.sample_sd / 2000f64.sqrt(), "{q:?}");
    }
}
