//! A sharp peak: the thrust climbs up to a corner and falls from it, and the corner lies between two samples.
//!
//! The highest sample is below such a corner, and any smooth piece through it lower still. A polynomial piece is fitted on either side of
//! each gap near the top, each over the stretch that it explains within the noise and that tells its end best; where the two meet in
//! their gap at a kink that noise cannot make, their meeting point is the peak.

use crate::condition::scatter::Scatter;
use nalgebra::{Matrix4, Vector3, Vector4};

/// A corner found.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Corner {
    /// In samples from the first of the data.
    pub position: f64,
    pub value: f64,
    /// From noise.
    pub standard_error: f64,
    /// How far a rounded corner may stay below, as a standard uncertainty.
    pub rounding_u: f64,
}

/// Gaps up to so many samples from the top are looked at: noise may put the highest sample beside the corner, by much in a fast log.
const FARTHEST_GAP: usize = 1000;
/// Longest stretch on a side, samples.
const LONGEST: usize = 3000;
/// One side of a corner (the ignition's rise, the drop after burn-out) is so many times steeper than the other: in noise, two straight
/// flanks of a smooth hump meet above it too.
const STEEPER: f64 = 3.0;
/// A kink counts from so many standard errors of the change of slope on.
const KINK_EVIDENCE: f64 = 6.0;
/// And where one smooth cubic over both stretches leaves so many variances of noise more than the two pieces do: lines meet at a kink
/// on any hump that is short against the noise.
const SMOOTH_EVIDENCE: f64 = 16.0;
/// The meeting point may lie so far from the middle of its gap: in samples, or in its own standard errors.
const FROM_THE_GAP: f64 = 0.55;
const FROM_THE_GAP_BY_NOISE: f64 = 1.5;
/// A stretch is refused when its residuals, those of its halves or quarters, or the next power exceed noise by so many standard deviations.
const VARIANCE_LIMIT: f64 = 2.0;
const PART_LIMIT: f64 = 2.0;
const NEXT_POWER_LIMIT: f64 = 1.6;
/// Stretches whose error at the gap is within this factor of the smallest count alike.
const NEARLY_AS_WELL: f64 = 1.4;

/// A side's value and slope (per sample, away from the gap) at the middle of the gap, with their covariance.
#[derive(Debug, Clone, Copy)]
struct Side {
    value: f64,
    slope: f64,
    value_variance: f64,
    slope_variance: f64,
    covariance: f64,
    /// Samples fitted, and their residual sum of squares.
    samples: usize,
    residual: f64,
}

/// Looks for a corner near sample `top` of evenly spaced `data`.
pub fn find(data: &[f64], top: usize, scatter: &Scatter) -> Option<Corner> {
    if scatter.sample_sd() <= 0.0 || data.get(top).is_none() {
        return None;
    }
    let mut best: Option<((bool, f64), Corner)> = None;
    let mut offsets = vec![0_isize];
    let mut step = 1.0_f64;
    while step < FARTHEST_GAP as f64 {
        offsets.extend([step as isize, -(step as isize)]);
        step = (step + 1.0).max(step * 1.25);
    }
    for offset in offsets {
        let Some(gap) = top.checked_add_signed(offset).filter(|g| g + 1 < data.len()) else { continue };
        // The gap lies between the samples `gap` and `gap + 1`.
        let left = side(data[..=gap].iter().rev().copied(), scatter);
        let right = side(data[gap + 1..].iter().copied(), scatter);
        let (Some(left), Some(right)) = (left, right) else { continue };
        if left.slope >= 0.0 || right.slope >= 0.0 {
            continue;
        }
        let (climb, fall) = (-left.slope, -right.slope);
        if climb.max(fall) < STEEPER * climb.min(fall) {
            continue;
        }
        let kink = (climb + fall) / (left.slope_variance + right.slope_variance).sqrt();
        // From the middle of the gap, to the right.
        let x = (right.value - left.value) / (climb + fall);
        let x_error = (left.value_variance + right.value_variance).sqrt() / (climb + fall);
        if kink < KINK_EVIDENCE || x.abs() > FROM_THE_GAP.max(FROM_THE_GAP_BY_NOISE * x_error) {
            continue;
        }
        let value = 0.5 * (left.value + climb * x + right.value - fall * x);
        let both = &data[gap + 1 - left.samples..gap + 1 + right.samples];
        let excess = cubic_residual(both)? - left.residual - right.residual;
        if excess < SMOOTH_EVIDENCE * scatter.variance_over(both.len() as f64 / 4.0) {
            continue;
        }
        // dv/d(left) = fall/(climb + fall), dv/d(right) = climb/(climb + fall).
        let weights = [fall / (climb + fall), climb / (climb + fall)];
        let at = |s: &Side, x: f64| s.value_variance + 2.0 * x * s.covariance + x * x * s.slope_variance;
        let variance = weights[0].powi(2) * at(&left, -x) + weights[1].powi(2) * at(&right, x);
        // A rounded corner stays between the pieces' values at the samples beside the gap and the meeting point.
        let beside = (left.value - 0.5 * climb).max(right.value - 0.5 * fall);
        let reach = (value - beside).max(0.0);
        let rounding = reach / 12f64.sqrt();
        // A steep side of two samples is a line by assumption only: the corner is then taken midway.
        let steep = if climb > fall { &left } else { &right };
        let value = if steep.samples < 3 { value - 0.5 * reach } else { value };
        let corner =
            Corner { position: gap as f64 + 0.5 + x, value, standard_error: variance.sqrt(), rounding_u: rounding };
        // The true gap is one whose own pieces meet in it, and explain most that one smooth piece does not.
        let rank = (x.abs() <= 0.5, excess);
        if best.is_none_or(|(most, _)| rank > most) {
            best = Some((rank, corner));
        }
    }
    best.map(|(_, corner)| corner)
}

/// Fits the samples that lie 0.5, 1.5, … samples away from the gap.
fn side(samples: impl Iterator<Item = f64>, scatter: &Scatter) -> Option<Side> {
    let y: Vec<f64> = samples.take(LONGEST).collect();
    let origin = *y.first()?;
    let mut fits: Vec<Side> = Vec::new();
    // Σ xᵏ, k to 6; Σ xᵏ y, k to 3; Σ y²; for every length.
    let mut sums = vec![[0.0; 12]];
    let mut s = [0.0; 12];
    for (i, y) in y.iter().enumerate() {
        let (x, y) = (i as f64 + 0.5, y - origin);
        let mut power = 1.0;
        for k in 0..7 {
            s[k] += power;
            if k < 4 {
                s[7 + k] += power * y;
            }
            power *= x;
        }
        s[11] += y * y;
        sums.push(s);
    }
    let mut failures = 0;
    let mut length = 2;
    while length <= y.len() && failures < 4 {
        let fitted = (1..=2usize).find_map(|order| piece(&sums, length, order, scatter));
        failures = if fitted.is_some() { 0 } else { failures + 1 };
        fits.extend(fitted.map(|f| Side { value: f.value + origin, ..f }));
        length = (length + 1).max((length as f64 * 1.2) as usize);
    }
    let best = fits.iter().map(|f| f.value_variance).fold(f64::INFINITY, f64::min);
    fits.retain(|f| f.value_variance <= NEARLY_AS_WELL * NEARLY_AS_WELL * best);
    fits.sort_unstable_by(|a, b| a.value.total_cmp(&b.value));
    fits.get(fits.len() / 2).copied()
}

/// Residual sum of squares about one cubic.
fn cubic_residual(data: &[f64]) -> Option<f64> {
    let h = 0.5 * data.len() as f64;
    let place = |i: usize| (i as f64 + 0.5) / h - 1.0;
    let (mut normal, mut rhs) = (Matrix4::zeros(), Vector4::zeros());
    let row = |x: f64| Vector4::new(1.0, x, x * x, x * x * x);
    for (i, y) in data.iter().enumerate() {
        let r = row(place(i));
        normal += r * r.transpose();
        rhs += r * (y - data[0]);
    }
    let c = normal.try_inverse()? * rhs;
    Some(data.iter().enumerate().map(|(i, y)| (y - data[0] - c.dot(&row(place(i)))).powi(2)).sum())
}

fn piece(sums: &[[f64; 12]], length: usize, order: usize, scatter: &Scatter) -> Option<Side> {
    if length < order + 1 {
        return None;
    }
    let all = &sums[length];
    let h = length as f64;
    let solve = |order: usize| {
        let mut normal = Matrix4::identity();
        let mut rhs = Vector4::zeros();
        for i in 0..=order {
            rhs[i] = all[7 + i] / h.powi(i as i32);
            for j in 0..=order {
                normal[(i, j)] = all[i + j] / h.powi((i + j) as i32);
            }
        }
        let inverse = normal.try_inverse()?;
        let c = inverse * rhs;
        Some((inverse, c, (all[11] - c.dot(&rhs)).max(0.0)))
    };
    let (inverse, c, rss) = solve(order)?;
    let dof = h - order as f64 - 1.0;
    let white = scatter.sample_sd().powi(2);
    if dof > 0.0 && rss > white * (dof + VARIANCE_LIMIT * (2.0 * dof * scatter.dependence()).sqrt()) {
        return None;
    }
    if dof > 0.0 {
        let (_, _, next) = solve(order + 1)?;
        if rss - next > NEXT_POWER_LIMIT * NEXT_POWER_LIMIT * scatter.variance_over(h / (order as f64 + 2.0)) {
            return None;
        }
    }
    if dof > 2.0 {
        for (from, to) in [(0, length / 4), (0, length / 2), (length / 2, length), (3 * length / 4, length)] {
            if to == from {
                continue;
            }
            let difference = |k: usize| sums[to][k] - sums[from][k];
            let fitted = c[0] * difference(0)
                + c[1] * difference(1) / h
                + if order > 1 { c[2] * difference(2) / (h * h) } else { 0.0 };
            let part = (to - from) as f64;
            if (difference(7) - fitted).abs() > PART_LIMIT * scatter.sum_sd(part) {
                return None;
            }
        }
    }
    let v = scatter.variance_over(h / (order as f64 + 1.0)).max(if length < 6 { white } else { 0.0 });
    let covariance = Vector3::new(inverse[(0, 0)], inverse[(0, 1)] / h, inverse[(1, 1)] / (h * h)) * v;
    Some(Side {
        value: c[0],
        slope: c[1] / h,
        value_variance: covariance[0] + scatter.slow_variance(h / (order as f64 + 1.0)),
        covariance: covariance[1],
        slope_variance: covariance[2],
        samples: length,
        residual: rss,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn noisy(clean: impl Fn(f64) -> f64, sigma: f64, seed: u64) -> Vec<f64> {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        (0..400)
            .map(|i| {
                let z: f64 = StandardNormal.sample(&mut rng);
                clean(f64::from(i)) + sigma * z
            })
            .collect()
    }

    fn top(data: &[f64]) -> usize {
        data.iter().enumerate().max_by(|a, b| a.1.total_cmp(b.1)).map_or(0, |(i, _)| i)
    }

    /// A climb of 8 a sample to 100 at 100.4, an exponential fall to 60 with a time constant of 30 samples.
    #[test]
    fn a_spike_between_samples() {
        let clean = |x: f64| {
            if x < 100.4 { (100.0 + 8.0 * (x - 100.4)).max(0.0) } else { 60.0 + 40.0 * (-(x - 100.4) / 30.0).exp() }
        };
        let mut errors = Vec::new();
        let mut within = 0;
        for seed in 0..100 {
            let data = noisy(clean, 0.3, seed);
            let corner = find(&data, top(&data), &Scatter::white(0.3)).expect("a corner");
            errors.push(corner.value - 100.0);
            within += usize::from((corner.value - 100.0).abs() < 1.96 * corner.standard_error.hypot(corner.rounding_u));
        }
        let mean = errors.iter().sum::<f64>() / 100.0;
        // The highest sample is 0.5 to 3 below the corner before noise.
        assert!(mean.abs() < 0.15, "mean {mean}");
        assert!(within >= 85, "{within}");
    }

    #[test]
    fn a_hump_and_a_plateau_have_no_corner() {
        for seed in 0..40 {
            let hump = noisy(|x| 100.0 * (-((x - 200.0) / 60.0).powi(2)).exp(), 0.3, seed);
            assert_eq!(find(&hump, top(&hump), &Scatter::white(0.3)), None, "hump {seed}");
            let plateau = noisy(|x| if (50.0..350.0).contains(&x) { 100.0 } else { 0.0 }, 0.3, seed);
            assert_eq!(find(&plateau, 200, &Scatter::white(0.3)), None, "plateau {seed}");
        }
    }

    #[test]
    fn nothing_without_noise_or_data() {
        assert_eq!(find(&[], 0, &Scatter::white(1.0)), None);
        assert_eq!(find(&[1.0, 2.0, 1.0], 1, &Scatter::white(0.0)), None);
    }
}
