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

/// One line through two quiet stretches.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Together {
    /// The zero before and after.
    pub fits: [QuietFit; 2],
    /// By how much the later stretch stands off the line of the earlier one, and its standard uncertainty; that is nil where the step was given.
    pub step: f64,
    pub step_u: f64,
}

/// Fits one line to two quiet stretches, the later one shifted by `step` or, where that is `None`, by a step found with it.
/// Gives the zero at `at_s[0]` (before) and `at_s[1]` (after), or `None` where two separate lines explain the stretches
/// plainly better: then the zero did not run steadily.
pub fn fit_together(
    time_s: &[f64],
    data: &[f64],
    ranges: [Range<usize>; 2],
    at_s: [f64; 2],
    step: Option<f64>,
) -> Option<Together> {
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
    Some(Together {
        fits: [at(0), at(1)],
        step: step.unwrap_or(c[2]),
        step_u: if free { covariance[(2, 2)].max(0.0).sqrt() } else { 0.0 },
    })
}

/// Slope of a quiet stretch, whether the evidence asks for one or not, and its standard uncertainty; unit per second.
pub fn slope(time_s: &[f64], data: &[f64], range: Range<usize>) -> Option<(f64, f64)> {
    fit_with(time_s, data, range, 0.0, 0.0).map(|q| (q.slope_per_s, q.slope_u))
}

/// A zero that drifts steadily and, from ignition on, by warmth besides.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Thermal {
    /// Level at ignition.
    pub level: f64,
    pub slope_per_s: f64,
    /// Where the warmth's part ends in the long run, and its time constant.
    pub amplitude: f64,
    pub time_constant_s: f64,
    /// Standard uncertainty of the level at the end of the burst.
    pub level_after_u: f64,
}

impl Thermal {
    /// Course since ignition.
    pub fn at(&self, since_s: f64) -> f64 {
        let warmth = if since_s > 0.0 { 1.0 - (-since_s / self.time_constant_s).exp() } else { 0.0 };
        self.level + self.slope_per_s * since_s + self.amplitude * warmth
    }
}

/// Blocks that a quiet stretch is averaged over before the search for a time constant.
const THERMAL_BLOCKS: usize = 240;
/// Time constants tried, s: from the first to the last by this factor.
const TIME_CONSTANTS: (f64, f64, f64) = (0.3, 60.0, 1.25);
/// The residuals of one line must exceed those of the thermal course by so many variances of a block mean, and those of two lines with
/// nothing in common must not fall short of them by more than this.
const THERMAL_EVIDENCE: f64 = 16.0;
const THERMAL_WORSE: f64 = 6.0;
/// The bend itself must be seen: a plain step must leave so many variances more.
const BEND_EVIDENCE: f64 = 9.0;

/// Looks for warmth in two quiet stretches: flat or steadily drifting before ignition, bending after the burn. `step` is added to the
/// later stretch by known causes. `at_s`: ignition and the end of the burst. `None` where the evidence does not ask for it.
pub fn fit_thermal(
    time_s: &[f64],
    data: &[f64],
    ranges: [Range<usize>; 2],
    at_s: [f64; 2],
    step: f64,
) -> Option<Thermal> {
    let mut points: Vec<(f64, f64)> = Vec::new();
    let mut within = 0.0;
    let mut own = 0.0;
    for (range, shift) in ranges.iter().zip([0.0, step]) {
        let (t, y) = (time_s.get(range.clone())?, data.get(range.clone())?);
        let size = (t.len() / THERMAL_BLOCKS).max(1);
        let blocks: Vec<(f64, f64)> = t
            .chunks_exact(size)
            .zip(y.chunks_exact(size))
            .map(|(t, y)| {
                let n = size as f64;
                (t.iter().sum::<f64>() / n - at_s[0], y.iter().sum::<f64>() / n - shift)
            })
            .collect();
        let n = blocks.len() as f64;
        if n < 12.0 {
            return None;
        }
        let (mt, my) = blocks.iter().fold((0.0, 0.0), |(a, b), p| (a + p.0 / n, b + p.1 / n));
        let (sxx, sxy, syy) = blocks.iter().fold((0.0, 0.0, 0.0), |(a, b, c), p| {
            (a + (p.0 - mt).powi(2), b + (p.0 - mt) * (p.1 - my), c + (p.1 - my).powi(2))
        });
        let rss = (syy - sxy * sxy / sxx).max(0.0);
        own += rss;
        // Differences of neighbouring block means, which no slow course shows in.
        within += blocks.windows(2).map(|w| (w[1].1 - w[0].1).powi(2)).sum::<f64>() / (2.0 * (n - 1.0));
        points.extend(blocks);
    }
    let variance = (0.5 * within).max(f64::MIN_POSITIVE);
    let solve = |tau: Option<f64>| -> Option<(Vector3<f64>, Matrix3<f64>, f64)> {
        let (mut normal, mut rhs) = (Matrix3::zeros(), Vector3::zeros());
        for (x, y) in &points {
            let warmth = tau.map_or(0.0, |tau| if *x > 0.0 { 1.0 - (-x / tau).exp() } else { 0.0 });
            let row = Vector3::new(1.0, *x, warmth);
            normal += row * row.transpose();
            rhs += row * *y;
        }
        if tau.is_none() {
            normal[(2, 2)] = 1.0;
        }
        let inverse = normal.try_inverse()?;
        let c = inverse * rhs;
        let rss: f64 = points
            .iter()
            .map(|(x, y)| {
                let warmth = tau.map_or(0.0, |tau| if *x > 0.0 { 1.0 - (-x / tau).exp() } else { 0.0 });
                (y - c[0] - c[1] * x - c[2] * warmth).powi(2)
            })
            .sum();
        rss.is_finite().then_some((c, inverse, rss))
    };
    let (_, _, line) = solve(None)?;
    let mut best: Option<(f64, Vector3<f64>, Matrix3<f64>, f64)> = None;
    let mut tau = TIME_CONSTANTS.0;
    while tau < TIME_CONSTANTS.1 {
        if let Some((c, inverse, rss)) = solve(Some(tau))
            && best.as_ref().is_none_or(|b| rss < b.3)
        {
            best = Some((tau, c, inverse, rss));
        }
        tau *= TIME_CONSTANTS.2;
    }
    let (tau, c, inverse, rss) = best?;
    // Warmth that has come before the quiet record begins again is no more than a step somewhere in between.
    let (_, _, stepped) = solve(Some(1e-6))?;
    if line - rss < THERMAL_EVIDENCE * variance
        || stepped - rss < BEND_EVIDENCE * variance
        || rss - own > THERMAL_WORSE * variance
    {
        return None;
    }
    let x = at_s[1] - at_s[0];
    let row = Vector3::new(1.0, x, 1.0 - (-x / tau).exp());
    Some(Thermal {
        level: c[0],
        slope_per_s: c[1],
        amplitude: c[2],
        time_constant_s: tau,
        level_after_u: ((row.transpose() * inverse * row)[0] * variance).max(0.0).sqrt(),
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
    fn one_drift_through_both_stretches_is_seen_as_one_line() {
        let t: Vec<f64> = (0..2000).map(|i| i as f64 * 0.01).collect();
        let y: Vec<f64> = noise(2000, 8)
            .iter()
            .zip(&t)
            .map(|(z, t)| 1.0 + 0.05 * t - if *t > 10.0 { 3.0 } else { 0.0 } + 0.2 * z)
            .collect();
        for step in [Some(-3.0), None] {
            let found = fit_together(&t, &y, [0..400, 1300..2000], [4.0, 13.0], step).expect("one line");
            let [a, b] = found.fits;
            assert!((a.level - 1.2).abs() < 4.0 * a.level_u && a.level_u < 0.03, "{step:?} {a:?}");
            assert!((b.level + 1.35).abs() < 4.0 * b.level_u && b.level_u < 0.03, "{step:?} {b:?}");
        }
        assert_eq!(fit_together(&t, &y, [0..400, 1300..2000], [4.0, 13.0], Some(0.0)), None);
    }

    #[test]
    fn warmth_after_ignition_is_told_from_a_steady_drift() {
        let t: Vec<f64> = (0..3000).map(|i| i as f64 * 0.01).collect();
        let warm = |t: f64| if t > 5.0 { 4.0 * (1.0 - (-(t - 5.0) / 3.0).exp()) } else { 0.0 };
        let data = |seed: u64, size: f64| -> Vec<f64> {
            noise(3000, seed).iter().zip(&t).map(|(z, t)| 1.0 + 0.05 * t + size * warm(*t) + 0.2 * z).collect()
        };
        let ranges = || [0..500, 800..3000];
        let found = fit_thermal(&t, &data(4, 1.0), ranges(), [5.0, 8.0], 0.0).expect("warmth");
        // At 8 s: 1 + 0.4 + 4 (1 − e⁻¹).
        assert!((found.at(3.0) - 3.928).abs() < 0.1, "{found:?} {}", found.at(3.0));
        assert!((found.time_constant_s / 3.0).ln().abs() < 0.5, "{found:?}");
        for seed in 0..20 {
            assert_eq!(fit_thermal(&t, &data(seed, 0.0), ranges(), [5.0, 8.0], 0.0), None, "{seed}");
        }
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
