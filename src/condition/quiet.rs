//! The quiet record: its level, its slope and its noise.

use nalgebra::{Matrix3, Vector3};
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
    /// Covariance of this level with that of the other stretch, where one line was fitted to both; else nil.
    pub level_covariance: f64,
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

    /// Degrees of freedom behind `level_u`: those of the samples where their noise is white, those of the batch means that showed
    /// its correlation where it is not.
    pub fn degrees_of_freedom(&self) -> f64 {
        let white = self.sample_sd * self.sample_sd * self.duration_s / self.samples.max(1) as f64;
        let count =
            if self.low_frequency_density > white * (1.0 + 1e-9) { batches(self.samples) } else { self.samples };
        count.saturating_sub(2).max(1) as f64
    }
}

/// Stretches whose means show the noise's correlation.
fn batches(samples: usize) -> usize {
    (samples / 8).min(24)
}

/// How many standard errors a slope must reach before it is used up to the edge of its own stretch. Low, since a slope left
/// out shifts the level, while one that is used for nothing only widens it.
pub const SLOPE_EVIDENCE: f64 = 2.0;
/// The same where the slope is to be carried far beyond its stretch.
pub const SLOPE_EVIDENCE_BEYOND: f64 = 6.0;

/// Fits the quiet samples `range` and gives the level at `at_s`. `None` for fewer than 2 samples.
pub fn fit(time_s: &[f64], data: &[f64], range: Range<usize>, at_s: f64) -> Option<QuietFit> {
    fit_with(time_s, data, range, at_s, SLOPE_EVIDENCE)
}

/// As [`fit`], a slope being used from `evidence` standard errors on.
pub fn fit_with(time_s: &[f64], data: &[f64], range: Range<usize>, at_s: f64, evidence: f64) -> Option<QuietFit> {
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
    let batches = batches(n);
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
    let use_slope = n >= 20 && slope.abs() > evidence * slope_error && slope_error > 0.0;
    let (used, sd) = if use_slope { (slope, sd_line) } else { (0.0, sd_about(0.0, nf - 1.0)) };
    let factor = inflation(used, sd);
    // A slope too small to be seen may still be there, so its error counts whether it is used or not.
    let level_u = (sd * sd * factor / nf + (slope_error * (at_s - centre)).powi(2)).sqrt();
    Some(QuietFit {
        at_s,
        level: mean + used * (at_s - centre),
        slope_per_s: used,
        level_u,
        slope_u: slope_error,
        level_covariance: 0.0,
        sample_sd: sd,
        low_frequency_density: sd * sd * factor * duration_s / nf,
        samples: n,
        duration_s,
    })
}

/// Largest ratio of the variance that one line leaves beyond two to the variance within, at which one line is kept.
const ONE_LINE_LIMIT: f64 = 4.0;

/// Fits one line to two quiet stretches, the later one shifted by `step` or, where that is `None`, by a step found with it.
/// Gives the zero at `at_s[0]` (before) and `at_s[1]` (after), or `None` where two separate lines explain the stretches
/// plainly better: then the zero did not run steadily.
pub fn fit_together(
    time_s: &[f64],
    data: &[f64],
    ranges: [Range<usize>; 2],
    at_s: [f64; 2],
    step: Option<f64>,
) -> Option<[QuietFit; 2]> {
    let apart = [fit(time_s, data, ranges[0].clone(), at_s[0])?, fit(time_s, data, ranges[1].clone(), at_s[1])?];
    let sums = |range: &Range<usize>, shift: f64| -> [f64; 6] {
        let mut s = [0.0; 6];
        for (t, y) in time_s[range.clone()].iter().zip(&data[range.clone()]) {
            let (x, y) = (t - at_s[0], y - shift);
            s[0] += 1.0;
            s[1] += x;
            s[2] += x * x;
            s[3] += y;
            s[4] += x * y;
            s[5] += y * y;
        }
        s
    };
    let (a, b) = (sums(&ranges[0], 0.0), sums(&ranges[1], step.unwrap_or(0.0)));
    // Level, slope and, where it is free, step.
    let free = step.is_none();
    let normal = Matrix3::new(
        a[0] + b[0],
        a[1] + b[1],
        if free { b[0] } else { 0.0 },
        a[1] + b[1],
        a[2] + b[2],
        if free { b[1] } else { 0.0 },
        if free { b[0] } else { 0.0 },
        if free { b[1] } else { 0.0 },
        if free { b[0] } else { 1.0 },
    );
    let rhs = Vector3::new(a[3] + b[3], a[4] + b[4], if free { b[3] } else { 0.0 });
    let inverse = normal.try_inverse()?;
    let c = inverse * rhs;
    let together = (a[5] + b[5] - c.dot(&rhs)).max(0.0);
    // Two lines of their own, whatever slope is in each.
    let own = |s: &[f64; 6]| {
        let (sxx, sxy, syy) = (s[2] - s[1] * s[1] / s[0], s[4] - s[1] * s[3] / s[0], s[5] - s[3] * s[3] / s[0]);
        if sxx > 0.0 { (syy - sxy * sxy / sxx).max(0.0) } else { syy.max(0.0) }
    };
    let n = a[0] + b[0];
    let within = (own(&a) + own(&b)) / (n - 4.0).max(1.0);
    // Correlated noise is not that many independent samples.
    let inflation = apart
        .iter()
        .map(|q| {
            q.low_frequency_density * q.samples as f64 / (q.sample_sd.powi(2) * q.duration_s).max(f64::MIN_POSITIVE)
        })
        .fold(1.0, f64::max);
    let terms = if free { 1.0 } else { 2.0 };
    let excess = (together - own(&a) - own(&b)) / terms;
    if n < 12.0 || excess > ONE_LINE_LIMIT * within * inflation {
        return None;
    }
    let covariance = inverse * (within * inflation);
    let row = |k: usize| Vector3::new(1.0, at_s[k] - at_s[0], if k == 1 && free { 1.0 } else { 0.0 });
    let between = |k: usize, l: usize| (row(k).transpose() * covariance * row(l))[0];
    let at = |k: usize| {
        let x = at_s[k] - at_s[0];
        let shift = if k == 1 { step.unwrap_or(c[2]) } else { 0.0 };
        QuietFit {
            at_s: at_s[k],
            level: c[0] + c[1] * x + shift,
            slope_per_s: c[1],
            level_u: between(k, k).max(0.0).sqrt(),
            slope_u: covariance[(1, 1)].max(0.0).sqrt(),
            level_covariance: between(0, 1),
            ..apart[k]
        }
    };
    Some([at(0), at(1)])
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
    fn one_drift_through_both_stretches_is_seen_as_one_line() {
        let t: Vec<f64> = (0..2000).map(|i| i as f64 * 0.01).collect();
        let y: Vec<f64> = noise(2000, 8)
            .iter()
            .zip(&t)
            .map(|(z, t)| 1.0 + 0.05 * t - if *t > 10.0 { 3.0 } else { 0.0 } + 0.2 * z)
            .collect();
        for step in [Some(-3.0), None] {
            let [a, b] = fit_together(&t, &y, [0..400, 1300..2000], [4.0, 13.0], step).expect("one line");
            assert!((a.level - 1.2).abs() < 4.0 * a.level_u && a.level_u < 0.03, "{step:?} {a:?}");
            assert!((b.level + 1.35).abs() < 4.0 * b.level_u && b.level_u < 0.03, "{step:?} {b:?}");
        }
        assert_eq!(fit_together(&t, &y, [0..400, 1300..2000], [4.0, 13.0], Some(0.0)), None);
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
        // 24 batches about a line, against 2000 samples about it where the noise is white.
        assert_eq!(q.degrees_of_freedom(), 22.0);
        let white = QuietFit { low_frequency_density: q.sample_sd.powi(2) * q.duration_s / 2000.0, ..q };
        assert_eq!(white.degrees_of_freedom(), 1998.0);
    }
}
