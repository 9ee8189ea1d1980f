//! The stand's own oscillation, found in the record: a damped sine on a smooth course.
//!
//! # Formula
//! y(t) = p(t) + e^(−ζ ω t) (a cos ω_d t + b sin ω_d t), p a cubic, ω_d = ω √(1 − ζ²). For given ω and ζ the rest is linear and is
//! solved exactly; ω and ζ are then searched (variable projection, G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10
//! (1973) 413).

use crate::condition::spectrum;
use nalgebra::{DMatrix, DVector};
use std::f64::consts::PI;

/// An oscillation found.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ring {
    /// Undamped natural frequency, Hz, and its standard uncertainty.
    pub frequency_hz: f64,
    pub frequency_u_hz: f64,
    pub damping_ratio: f64,
    pub damping_u: f64,
    /// Amplitude at the start of the stretch, unit of the data.
    pub amplitude: f64,
    /// Share of the variance about the smooth course that the oscillation explains.
    pub explained: f64,
}

/// Terms of the smooth course.
const COURSE: usize = 4;
/// An oscillation counts when it explains this much of what the smooth course leaves, ...
const LEAST_EXPLAINED: f64 = 0.5;
/// ... and its amplitude is this many times the noise of a sample.
const LEAST_AMPLITUDE: f64 = 4.0;
/// Cycles that the stretch must hold, and samples a cycle.
const LEAST_CYCLES: f64 = 3.0;
const LEAST_SAMPLES_A_CYCLE: f64 = 3.5;
/// Samples used at most: a longer stretch says no more.
const MOST_SAMPLES: usize = 3000;

struct Fit {
    rss: f64,
    amplitude: f64,
    residual: Vec<f64>,
}

/// Residual of the best smooth course, with a damped sine where `sine` names one (rad/s, damping ratio).
fn project(time_s: &[f64], data: &[f64], sine: Option<(f64, f64)>) -> Option<Fit> {
    let n = time_s.len();
    let (first, span) = (time_s[0], time_s[n - 1] - time_s[0]);
    let terms = COURSE + if sine.is_some() { 2 } else { 0 };
    let mut design = DMatrix::zeros(n, terms);
    for (i, t) in time_s.iter().enumerate() {
        let x = 2.0 * (t - first) / span - 1.0;
        let mut power = 1.0;
        for k in 0..COURSE {
            design[(i, k)] = power;
            power *= x;
        }
        if let Some((omega, zeta)) = sine {
            let s = t - first;
            let decay = (-zeta * omega * s).exp();
            let phase = omega * (1.0 - zeta * zeta).sqrt() * s;
            design[(i, COURSE)] = decay * phase.cos();
            design[(i, COURSE + 1)] = decay * phase.sin();
        }
    }
    let y = DVector::from_column_slice(data);
    let normal = design.tr_mul(&design);
    let rhs = design.tr_mul(&y);
    let solution = normal.cholesky()?.solve(&rhs);
    let residual = &y - &design * &solution;
    let rss = residual.norm_squared();
    let amplitude = if sine.is_some() { solution[COURSE].hypot(solution[COURSE + 1]) } else { 0.0 };
    Some(Fit { rss, amplitude, residual: residual.as_slice().to_vec() })
}

/// Looks for one damped oscillation between `low_hz` and what the sampling shows, in a stretch in which the force runs
/// smoothly but for it. `noise` is the standard deviation of a sample.
pub fn find(time_s: &[f64], data: &[f64], noise: f64, low_hz: f64) -> Option<Ring> {
    let n = time_s.len().min(data.len()).min(MOST_SAMPLES);
    if n < 24 {
        return None;
    }
    let (time_s, data) = (&time_s[..n], &data[..n]);
    let span = time_s[n - 1] - time_s[0];
    let rate_hz = (n - 1) as f64 / span;
    let (low, high) = (low_hz.max(LEAST_CYCLES / span), rate_hz / LEAST_SAMPLES_A_CYCLE);
    if high <= low {
        return None;
    }
    let plain = project(time_s, data, None)?;
    let rss_at = |omega: f64, zeta: f64| project(time_s, data, Some((omega, zeta))).map_or(f64::INFINITY, |f| f.rss);
    // The strongest line of what the smooth course leaves; a quarter of the line width is the first step of the search.
    let step = 0.25 / span;
    let mut hz = spectrum::strongest_line(&plain.residual, rate_hz, low, high)?;
    let mut zeta = 0.02;
    let mut rss = rss_at(2.0 * PI * hz, zeta);
    let (mut dh, mut dz) = (step / 2.0, 0.015);
    for _ in 0..60 {
        let mut moved = false;
        for (h, z) in [(hz + dh, zeta), (hz - dh, zeta), (hz, zeta + dz), (hz, (zeta - dz).max(1e-4))] {
            if h < low || h > high || !(1e-4..0.4).contains(&z) {
                continue;
            }
            let r = rss_at(2.0 * PI * h, z);
            if r < rss {
                (rss, hz, zeta, moved) = (r, h, z, true);
            }
        }
        if !moved {
            dh /= 2.0;
            dz /= 2.0;
            if dh < 1e-5 * hz && dz < 1e-5 {
                break;
            }
        }
    }
    let fit = project(time_s, data, Some((2.0 * PI * hz, zeta)))?;
    let explained = 1.0 - fit.rss / plain.rss.max(f64::MIN_POSITIVE);
    let variance = (fit.rss / (n as f64 - COURSE as f64 - 4.0)).max(noise * noise * 0.25);
    // At an end of the search the sine stands in for something else.
    let inside = hz > low + step && hz < high - step && zeta < 0.35;
    if !inside || explained < LEAST_EXPLAINED || fit.amplitude < LEAST_AMPLITUDE * noise {
        return None;
    }
    // Curvature of the residual sum gives the uncertainty: RSS grows by the variance at one standard uncertainty.
    let curvature = |rss_plus: f64, rss_minus: f64, d: f64| ((rss_plus + rss_minus - 2.0 * fit.rss) / (d * d)).max(0.0);
    let (eh, ez) = (0.02 / span, 0.1 * zeta.max(0.002));
    let omega = 2.0 * PI * hz;
    let ch = curvature(rss_at(omega + 2.0 * PI * eh, zeta), rss_at(omega - 2.0 * PI * eh, zeta), eh);
    let cz = curvature(rss_at(omega, zeta + ez), rss_at(omega, zeta - ez), ez);
    let error = |c: f64| if c > 0.0 { (2.0 * variance / c).sqrt() } else { f64::INFINITY };
    let ring = Ring {
        frequency_hz: hz,
        frequency_u_hz: error(ch),
        damping_ratio: zeta,
        damping_u: error(cz),
        amplitude: fit.amplitude,
        explained,
    };
    (ring.frequency_u_hz < 0.05 * hz).then_some(ring)
}

/// Stretches looked at after an instant: begin and length, s. A rise must be over by the begin, and the motor's own course
/// must stay smooth over the length.
const STRETCHES: [(f64, f64); 4] = [(0.008, 0.15), (0.02, 0.25), (0.04, 0.4), (0.02, 0.6)];
/// Oscillations slower than this are not told from the motor's own course, Hz.
const SLOWEST_HZ: f64 = 8.0;
/// A free oscillation dies slowly; what dies faster may be the motor's own course.
const MOST_DAMPING: f64 = 0.08;
/// Nor does it go on for ever: what hardly dies is driven, by the motor or by the mains.
const LEAST_DAMPING: f64 = 0.003;
/// Frequencies found in two stretches must agree within this share: a free oscillation keeps its own, a course of thrust does not.
const AGREEMENT: f64 = 0.03;
/// Looks for the free oscillation after an instant, up to `limit_s`: one that two stretches agree on, larger than
/// `least_amplitude`.
pub fn after(
    time_s: &[f64],
    data: &[f64],
    noise: f64,
    from_s: f64,
    limit_s: f64,
    least_amplitude: f64,
) -> Option<Ring> {
    let rings: Vec<Ring> = STRETCHES
        .iter()
        .filter_map(|(begin, length)| {
            let a = time_s.partition_point(|x| *x < from_s + begin);
            let b = time_s.partition_point(|x| *x <= (from_s + begin + length).min(limit_s));
            if b < a + 24 {
                return None;
            }
            find(&time_s[a..b], &data[a..b], noise, SLOWEST_HZ)
        })
        .filter(|r| (LEAST_DAMPING..MOST_DAMPING).contains(&r.damping_ratio) && r.amplitude > least_amplitude)
        .collect();
    let alike = |a: &Ring, b: &Ring| (a.frequency_hz / b.frequency_hz - 1.0).abs() < AGREEMENT;
    rings
        .iter()
        .filter(|r| rings.iter().filter(|o| alike(r, o)).count() >= 2)
        .min_by(|a, b| (a.frequency_u_hz / a.frequency_hz).total_cmp(&(b.frequency_u_hz / b.frequency_hz)))
        .copied()
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn record(hz: f64, zeta: f64, amplitude: f64, noise: f64, seed: u64) -> (Vec<f64>, Vec<f64>) {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        let t: Vec<f64> = (0..500).map(|i| i as f64 * 0.001).collect();
        let w = 2.0 * PI * hz;
        let y = t
            .iter()
            .map(|&t| {
                let z: f64 = StandardNormal.sample(&mut rng);
                100.0 - 8.0 * t
                    + 5.0 * t * t
                    + amplitude * (-zeta * w * t).exp() * (w * (1.0 - zeta * zeta).sqrt() * t + 0.7).cos()
                    + noise * z
            })
            .collect();
        (t, y)
    }

    #[test]
    fn frequency_and_damping_of_a_ring() {
        for seed in 0..5 {
            let (t, y) = record(34.0, 0.02, 20.0, 0.5, seed);
            let ring = find(&t, &y, 0.5, 5.0).expect("ring");
            assert!((ring.frequency_hz / 34.0 - 1.0).abs() < 0.005, "{ring:?}");
            assert!((ring.damping_ratio / 0.02 - 1.0).abs() < 0.1, "{ring:?}");
            assert!((ring.frequency_hz - 34.0).abs() < 5.0 * ring.frequency_u_hz, "{ring:?}");
        }
    }

    #[test]
    fn noise_and_a_smooth_course_do_not_ring() {
        for seed in 0..20 {
            let (t, y) = record(34.0, 0.02, 0.0, 0.5, seed);
            assert_eq!(find(&t, &y, 0.5, 5.0), None);
        }
    }

    #[test]
    fn too_few_samples_are_no_evidence() {
        assert_eq!(find(&[0.0, 1.0], &[1.0, 2.0], 0.1, 1.0), None);
    }
}
