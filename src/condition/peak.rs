//! The highest thrust: a straight or parabolic piece fitted to the raw samples around the top of the conditioned curve,
//! over the longest stretch that such a piece explains within the noise.
//!
//! The highest sample of a noisy curve is too high, and that of a smoothed one too low; a fit over the longest stretch that
//! it explains has neither fault, and with little noise it shrinks to the sample itself.

use crate::condition::scatter::Scatter;
use nalgebra::{Matrix4, Vector4};

/// The peak by the fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PeakFit {
    /// Position of the peak in samples from the first of the data (whole or between).
    pub position: f64,
    pub value: f64,
    pub standard_error: f64,
    /// What the choice of the stretch leaves open: the standard deviation of the values among those that do nearly as well, and a shoulder
    /// that may hide at its end.
    pub choice_u: f64,
    /// Samples used.
    pub samples: usize,
}

/// Longest stretch to either side, samples.
const LONGEST: usize = 20_000;
/// A fit is refused when its residuals exceed the noise by more than this many standard deviations of a variance.
const VARIANCE_LIMIT: f64 = 2.5;
/// Or when the mean residual of a part of the stretch is off by more than this many standard errors.
const PART_LIMIT: f64 = 2.5;
/// Shortest part looked at, samples.
const SHORTEST_PART: usize = 4;
/// Or when the next power of time, fitted too, would differ from nil by more than this many standard errors.
const NEXT_POWER_LIMIT: f64 = 1.6;

/// Fits whose standard error is within this factor of the smallest count alike.
const NEARLY_AS_WELL: f64 = 1.5;

/// Share of the way from the highest sample to the crossing of the two lines beside it that a peak is taken to reach.
const TOWARDS_CROSSING: f64 = 0.6;
/// The flat side must fall by this many standard errors a sample.
const FLAT_EVIDENCE: f64 = 4.0;

/// Running sums from the top outwards: Σ y, Σ x y, Σ x² y, Σ x³ y, Σ y², x counted from the top.
struct Sums(Vec<[f64; 5]>);

impl Sums {
    fn new(values: impl Iterator<Item = (f64, f64)>) -> Self {
        let mut sums = vec![[0.0; 5]];
        let mut s = [0.0; 5];
        for (x, y) in values {
            s[0] += y;
            s[1] += x * y;
            s[2] += x * x * y;
            s[3] += x * x * x * y;
            s[4] += y * y;
            sums.push(s);
        }
        Sums(sums)
    }
}

fn lengths(longest: usize) -> Vec<usize> {
    let mut list = vec![0, 1, 2, 3, 4];
    while let Some(&last) = list.last() {
        let next = (last as f64 * 1.3).ceil() as usize;
        if next > longest {
            break;
        }
        list.push(next);
    }
    list.retain(|l| *l <= longest);
    list
}

/// Sum of xᵏ over x = -left ..= right.
fn powers(left: usize, right: usize) -> [f64; 7] {
    let side = |n: usize, sign: f64| -> [f64; 7] {
        let n = n as f64;
        [
            n,
            sign * n * (n + 1.0) / 2.0,
            n * (n + 1.0) * (2.0 * n + 1.0) / 6.0,
            sign * (n * (n + 1.0) / 2.0).powi(2),
            n * (n + 1.0) * (2.0 * n + 1.0) * (3.0 * n * n + 3.0 * n - 1.0) / 30.0,
            sign * n * n * (n + 1.0).powi(2) * (2.0 * n * n + 2.0 * n - 1.0) / 12.0,
            n * (n + 1.0) * (2.0 * n + 1.0) * (3.0 * n.powi(4) + 6.0 * n.powi(3) - 3.0 * n + 1.0) / 42.0,
        ]
    };
    let (l, r) = (side(left, -1.0), side(right, 1.0));
    let mut s = [0.0; 7];
    for k in 0..7 {
        s[k] = l[k] + r[k];
    }
    s[0] += 1.0;
    s
}

/// Fits around sample `top` of evenly spaced `data` whose noise scatters as `scatter` tells.
pub fn fit(data: &[f64], top: usize, scatter: &Scatter) -> Option<PeakFit> {
    let origin = *data.get(top)?;
    let sigma = scatter.sample_sd();
    let plain = PeakFit { position: top as f64, value: origin, standard_error: sigma, choice_u: 0.0, samples: 1 };
    if sigma <= 0.0 {
        return Some(plain);
    }
    // Counted from the top sample in both coordinates, so that the sums stay small.
    let right_sums =
        Sums::new(data[top + 1..].iter().take(LONGEST).enumerate().map(|(k, y)| ((k + 1) as f64, y - origin)));
    let left_sums =
        Sums::new(data[..top].iter().rev().take(LONGEST).enumerate().map(|(k, y)| (-((k + 1) as f64), y - origin)));
    let mut candidates = vec![plain];
    let right_lengths = lengths(right_sums.0.len() - 1);
    for left in lengths(left_sums.0.len() - 1) {
        let mut failures = 0;
        for &right in &right_lengths {
            let n = left + right + 1;
            if n < 4 {
                continue;
            }
            let mut accepted = false;
            for order in 0..3usize {
                if n < order + 4 {
                    break;
                }
                if let Some(candidate) = piece(&left_sums, &right_sums, left, right, order, scatter) {
                    accepted = true;
                    candidates.push(PeakFit {
                        position: top as f64 + candidate.position,
                        value: origin + candidate.value,
                        ..candidate
                    });
                    // A simpler piece that explains the stretch is preferred to a more flexible one.
                    break;
                }
            }
            // Longer stretches than several that no piece explains are not explained either.
            failures = if accepted { 0 } else { failures + 1 };
            if failures >= 4 {
                break;
            }
        }
    }
    // One stretch among several that do nearly as well may owe its place to chance: the middle one is taken.
    let best = candidates.iter().map(|c| c.standard_error).fold(f64::INFINITY, f64::min);
    candidates.retain(|c| c.standard_error <= NEARLY_AS_WELL * best);
    candidates.sort_unstable_by(|a, b| a.value.total_cmp(&b.value));
    let chosen = candidates.get(candidates.len() / 2)?;
    let n = candidates.len() as f64;
    let mean = candidates.iter().map(|c| c.value).sum::<f64>() / n;
    let choice_u = (candidates.iter().map(|c| (c.value - mean).powi(2)).sum::<f64>() / n).sqrt();
    Some(PeakFit { choice_u: choice_u.hypot(chosen.choice_u), ..*chosen })
}

/// What a peak between two samples may add to the highest sample `top`, and the standard uncertainty of that.
///
/// Where a steep line leads up to the gap beside the highest sample and a flatter one down from it, the two carried on cross
/// above both samples. A sharp peak reaches that crossing and a rounded one stays below: most of the way is taken, and all
/// of it counts as uncertain.
pub fn between_samples(data: &[f64], top: usize, sigma: f64) -> Option<(f64, f64)> {
    let at = |k: isize| data.get(usize::try_from(top as isize + k).ok()?).copied();
    // The gap on the side of `step` (-1: before, 1: after the highest sample), the steep line on one side of it and the flat
    // one on the other; the flat one from three samples, since noise matters to it.
    let crossing = |first: isize, steep_first: bool| -> Option<f64> {
        let step = if steep_first { 1 } else { -1 };
        let near = if steep_first { first } else { first + 1 };
        let (a0, a1) = (at(near - step)?, at(near)?);
        let (b0, b1, b2) = (at(near + step)?, at(near + 2 * step)?, at(near + 3 * step)?);
        let (steep, flat) = (a1 - a0, (b0 - b2) / 2.0);
        if flat < FLAT_EVIDENCE * sigma / 2f64.sqrt() || steep < 3.0 * flat {
            return None;
        }
        // x from the near end of the gap: a1 + steep x against the flat line, which is at its mean one sample beyond b0.
        let line_at_gap = (b0 + b1 + b2) / 3.0 + 2.0 * flat;
        let x = (line_at_gap - a1) / (steep + flat);
        (0.0..=1.0).contains(&x).then(|| a1 + steep * x - at(0).unwrap_or(f64::INFINITY))
    };
    let all = [crossing(-1, true), crossing(0, true), crossing(-1, false), crossing(0, false)];
    let excess = all.into_iter().flatten().fold(0.0, f64::max);
    (excess > 0.0).then_some((TOWARDS_CROSSING * excess, excess / 12f64.sqrt()))
}

fn piece(ls: &Sums, rs: &Sums, left: usize, right: usize, order: usize, scatter: &Scatter) -> Option<PeakFit> {
    let (l, r) = (ls.0.get(left)?, rs.0.get(right)?);
    let n = (left + right + 1) as f64;
    let p = powers(left, right);
    // Scaled to the stretch, so that the normal equations stay well conditioned.
    let h = (left.max(right)) as f64;
    let solve = |order: usize| -> Option<(Matrix4<f64>, Vector4<f64>, f64)> {
        let mut normal = Matrix4::identity();
        let mut rhs = Vector4::zeros();
        for i in 0..=order {
            rhs[i] = (l[i] + r[i]) / h.powi(i as i32);
            for j in 0..=order {
                normal[(i, j)] = p[i + j] / h.powi((i + j) as i32);
            }
        }
        let inverse = normal.try_inverse()?;
        let c = inverse * rhs;
        Some((inverse, c, (l[4] + r[4] - c.dot(&rhs)).max(0.0)))
    };
    let (inverse, c, rss) = solve(order)?;
    let dof = n - 1.0 - order as f64;
    let sigma = scatter.sample_sd();
    if rss > sigma * sigma * (dof + VARIANCE_LIMIT * (2.0 * dof * scatter.dependence()).sqrt()) {
        return None;
    }
    // The next power must have nothing to add that noise could not.
    let (_, _, next) = solve(order + 1)?;
    if rss - next > NEXT_POWER_LIMIT * NEXT_POWER_LIMIT * scatter.variance_over(n / (order as f64 + 2.0)) {
        return None;
    }
    let value = |x: f64| c[0] + c[1] * x / h + c[2] * (x / h).powi(2);
    // Residual sums of the parts to either side, and of their outer and inner ends: a bend or a drop shows there first (the inner
    // end is an end of the stretch too where the other side is short).
    for (sums, length, sign) in [(ls, left, -1.0), (rs, right, 1.0)] {
        let ends = (1..20).map(|k| length >> k).take_while(|part| *part >= SHORTEST_PART);
        let parts = ends.flat_map(|part| [(0, part), (length - part, length)]).chain([(0, length)]);
        for (from, to) in parts {
            if to - from < 2 {
                continue;
            }
            let measured = sums.0[to][0] - sums.0[from][0];
            let q = |k: usize| {
                let (far, near) = (powers(0, to), powers(0, from));
                (far[k] - near[k]) * if k == 1 { sign } else { 1.0 }
            };
            let fitted = c[0] * q(0) + c[1] * q(1) / h + c[2] * q(2) / (h * h);
            let part = (to - from) as f64;
            if (measured - fitted).abs() > PART_LIMIT * scatter.sum_sd(part) {
                return None;
            }
        }
    }
    let (from, to) = (-(left as f64), right as f64);
    let mut at = if value(from) > value(to) { from } else { to };
    if order == 2 && c[2] < 0.0 {
        let vertex = -c[1] * h / (2.0 * c[2]);
        if vertex > from && vertex < to {
            at = vertex;
        }
    }
    if order == 0 {
        at = 0.0;
    }
    let g =
        Vector4::new(1.0, if order > 0 { at / h } else { 0.0 }, if order > 1 { (at / h).powi(2) } else { 0.0 }, 0.0);
    let length = n / (order as f64 + 1.0);
    let variance =
        scatter.variance_over(length) * (g.transpose() * inverse * g)[0].max(0.0) + scatter.slow_variance(length);
    let standard_error = variance.sqrt();
    // At an end of the stretch the curve may bend away from the piece for a while before that shows: a shoulder of m samples stays
    // within the limit of a part while slope · m / 3 < limit · σ / √m, and the piece's end then stands too high by up to half of slope · m.
    let slope = (c[1] / h + 2.0 * c[2] * at / (h * h)).abs();
    let at_end = order > 0 && (at == from || at == to);
    let shoulder_u = if at_end && slope > 0.0 {
        let length = (3.0 * PART_LIMIT * sigma / slope).powf(2.0 / 3.0).min(n);
        slope * length / 2.0 / 3f64.sqrt()
    } else {
        0.0
    };
    Some(PeakFit { position: at, value: value(at), standard_error, choice_u: shoulder_u, samples: left + right + 1 })
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn errors(clean: &[f64], top: usize, sigma: f64) -> (f64, f64) {
        let truth = clean.iter().copied().fold(f64::MIN, f64::max);
        let all: Vec<f64> = (0..40)
            .map(|seed| {
                let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
                let data: Vec<f64> = clean
                    .iter()
                    .map(|c| {
                        let z: f64 = StandardNormal.sample(&mut rng);
                        c + sigma * z
                    })
                    .collect();
                fit(&data, top, &Scatter::white(sigma)).expect("fit").value / truth - 1.0
            })
            .collect();
        (all.iter().sum::<f64>() / 40.0, all.iter().fold(0.0, |w, e| e.abs().max(w)))
    }

    #[test]
    fn plateau_sawtooth_and_hump() {
        let plateau: Vec<f64> = (0..3000).map(|i| if (500..2500).contains(&i) { 100.0 } else { 0.0 }).collect();
        let saw: Vec<f64> =
            (0..3000).map(|i| if (1000..2000).contains(&i) { 60.0 + 0.04 * (i - 1000) as f64 } else { 0.0 }).collect();
        let hump: Vec<f64> = (0..3000).map(|i| 100.0 * (-((f64::from(i) - 1500.0) / 700.0).powi(2)).exp()).collect();
        for (curve, top, sigma, mean_limit, worst_limit) in [
            (&plateau, 1300, 1.0, 0.0005, 0.003),
            (&plateau, 501, 4.0, 0.002, 0.01),
            (&saw, 1998, 0.5, 0.001, 0.004),
            (&saw, 1995, 4.0, 0.006, 0.025),
            (&hump, 1480, 0.5, 0.001, 0.002),
            (&hump, 1400, 4.0, 0.005, 0.015),
        ] {
            let (mean, worst) = errors(curve, top, sigma);
            assert!(
                mean.abs() < mean_limit && worst < worst_limit,
                "top {top} sigma {sigma}: mean {mean} worst {worst}"
            );
        }
    }

    #[test]
    fn a_peak_between_samples() {
        // A ramp of 50 a sample, reached at 70, meets a fall of 5 a sample from 100 at 70 + 50 x = 105 - 5 x, x = 35/55.
        let (excess, u) = between_samples(&[0.0, 20.0, 70.0, 100.0, 95.0, 90.0, 85.0], 3, 0.1).expect("excess");
        let crossing = 70.0 + 50.0 * 35.0 / 55.0 - 100.0;
        assert!((excess - 0.6 * crossing).abs() < 1e-9 && (u - crossing / 12f64.sqrt()).abs() < 1e-9);
        // A hump is no sharp peak, and noise is no slope.
        assert_eq!(between_samples(&[80.0, 90.0, 97.0, 100.0, 97.0, 90.0, 80.0], 3, 0.1), None);
        assert_eq!(between_samples(&[0.0, 20.0, 70.0, 100.0, 99.9, 99.8, 99.7], 3, 0.1), None);
    }

    #[test]
    fn without_noise_the_sample_itself() {
        assert_eq!(fit(&[1.0, 5.0, 2.0], 1, &Scatter::white(0.0)).expect("fit").value, 5.0);
    }
}
