//! Thrust beyond the end of a record that ends before the thrust does.

use nalgebra::{Matrix2, Vector2};

/// The extrapolated tail.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tail {
    /// Thrust at the end of the record by the fit, N.
    pub thrust_n: f64,
    /// Time constant of the blow-down, s.
    pub time_constant_s: f64,
    /// Impulse beyond the end of the record, N.s.
    pub impulse: f64,
    /// Standard uncertainty of that impulse: the fit's own, and the difference between fits over the whole and the later
    /// half of the stretch fitted.
    pub impulse_u: f64,
}

impl Tail {
    /// Thrust `after_s` seconds beyond the end of the record.
    pub fn thrust_at(&self, after_s: f64) -> f64 {
        self.thrust_n * (-after_s / self.time_constant_s).exp()
    }

    /// When the thrust falls to `level_n`, seconds beyond the end of the record.
    pub fn time_to(&self, level_n: f64) -> f64 {
        (self.time_constant_s * (self.thrust_n / level_n).ln()).max(0.0)
    }
}

/// Exponential blow-down F = A exp(-t/τ) fitted by Gauss-Newton least squares to samples with time counted back from the
/// end of the record (t <= 0). `None` where the data do not fall.
fn exponential(time_s: &[f64], thrust_n: &[f64]) -> Option<(f64, f64, Matrix2<f64>)> {
    let n = time_s.len();
    if n < 5 {
        return None;
    }
    let third = (n / 3).max(1);
    let mean = |v: &[f64]| v.iter().sum::<f64>() / v.len() as f64;
    let (early, late) = (mean(&thrust_n[..third]), mean(&thrust_n[n - third..]));
    let apart = mean(&time_s[n - third..]) - mean(&time_s[..third]);
    if late <= 0.0 || early <= late * 1.02 {
        return None;
    }
    let mut rate = (early / late).ln() / apart;
    let mut a = late * (rate * mean(&time_s[n - third..])).exp();
    let mut covariance = Matrix2::zeros();
    for _ in 0..30 {
        let (mut jtj, mut jtr, mut ss) = (Matrix2::zeros(), Vector2::zeros(), 0.0);
        for (&t, &y) in time_s.iter().zip(thrust_n) {
            let e = (-rate * t).exp();
            let j = Vector2::new(e, -a * t * e);
            let r = y - a * e;
            jtj += j * j.transpose();
            jtr += j * r;
            ss += r * r;
        }
        let inverse = jtj.try_inverse()?;
        covariance = inverse * (ss / (n as f64 - 2.0));
        let step = inverse * jtr;
        a += step[0];
        rate += step[1].clamp(-0.5 * rate, rate);
        if !(a.is_finite() && rate.is_finite()) || a <= 0.0 || rate <= 0.0 {
            return None;
        }
        if step[1].abs() < 1e-10 * rate && step[0].abs() < 1e-10 * a {
            break;
        }
    }
    Some((a, rate, covariance))
}

/// Shortest stretch fitted, samples, and by how much the next one is longer.
const SHORTEST: usize = 8;
const LONGER: f64 = 1.4;
/// A stretch is explained when its residual variance exceeds the noise's by no more than this factor, give or take scatter.
const EXPLAINED: f64 = 1.2;
/// The course of a tail is not known to be exponential: at least this share of its impulse is uncertain.
const COURSE_SHARE: f64 = 0.06;

/// The fall must be plain: its rate so many standard errors from nil, and its time constant no longer than the burst so far.
/// A level end is thrust that the record cuts off, and says nothing of how it went on.
const FALL_SIGMAS: f64 = 3.0;

/// Extrapolates the tail of a burst from its last samples: from the longest stretch up to the end of the record that an
/// exponential explains within the noise (`noise_n`, standard deviation of a sample), none of it above 70 % of peak.
pub fn extrapolate(time_s: &[f64], thrust_n: &[f64], smoothed_n: &[f64], peak_n: f64, noise_n: f64) -> Option<Tail> {
    let n = time_s.len();
    let end = *time_s.last()?;
    if *smoothed_n.last()? <= 0.0 {
        return None;
    }
    let from = smoothed_n.iter().rposition(|v| *v > 0.7 * peak_n).map_or(0, |i| i + 1);
    let back: Vec<f64> = time_s.iter().map(|t| t - end).collect();
    let mut chosen = None;
    let mut length = SHORTEST;
    let mut failures = 0;
    while length <= n - from && failures < 4 {
        let (t, f) = (&back[n - length..], &thrust_n[n - length..]);
        if let Some((a, rate, covariance)) = exponential(t, f) {
            let dof = length as f64 - 2.0;
            let rss: f64 = t.iter().zip(f).map(|(t, y)| (y - a * (-rate * t).exp()).powi(2)).sum();
            let limit = noise_n * noise_n * (EXPLAINED * dof + 3.0 * (2.0 * dof).sqrt());
            let plain = rate > FALL_SIGMAS * covariance[(1, 1)].max(0.0).sqrt() && rate * (end - time_s[0]) > 1.0;
            if plain && (chosen.is_none() || rss <= limit.max(1e-12 * peak_n * peak_n * dof)) {
                chosen = Some((a, rate, covariance, length));
                failures = 0;
            } else if plain {
                failures += 1;
            }
        }
        length = (length as f64 * LONGER).ceil() as usize;
    }
    let (a, rate, covariance, length) = chosen?;
    let impulse = a / rate;
    let sensitivity = Vector2::new(1.0 / rate, -a / (rate * rate));
    let fit_u = (sensitivity.transpose() * covariance * sensitivity)[0].max(0.0).sqrt();
    let half = n - (length / 2).max(SHORTEST.min(length));
    let other = exponential(&back[half..], &thrust_n[half..]).map_or(impulse, |(a, r, _)| a / r);
    let model_u = (0.5 * (other - impulse)).abs().min(impulse).max(COURSE_SHARE * impulse);
    Some(Tail { thrust_n: a, time_constant_s: 1.0 / rate, impulse, impulse_u: fit_u.hypot(model_u) })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_exponential_tail_is_continued() {
        let t: Vec<f64> = (0..400).map(|i| f64::from(i) * 0.005).collect();
        let f: Vec<f64> = t.iter().map(|t| 100.0 * (-t / 0.8).exp()).collect();
        let tail = extrapolate(&t, &f, &f, 100.0, 0.01).expect("tail");
        let left = 100.0 * (-1.995f64 / 0.8).exp();
        assert!((tail.impulse - left * 0.8).abs() < 1e-6 && (tail.time_constant_s - 0.8).abs() < 1e-6, "{tail:?}");
        assert!((tail.thrust_at(0.8) - left / 1f64.exp()).abs() < 1e-6);
        assert!((tail.time_to(left / 2.0) - 0.8 * 2f64.ln()).abs() < 1e-6);
    }

    #[test]
    fn a_plateau_before_the_tail_is_left_out_of_it() {
        let t: Vec<f64> = (0..4000).map(|i| f64::from(i) * 0.001).collect();
        let f: Vec<f64> = t.iter().map(|t| if *t < 3.5 { 20.0 } else { 20.0 * (-(t - 3.5) / 0.4).exp() }).collect();
        let tail = extrapolate(&t, &f, &f, 100.0, 0.05).expect("tail");
        assert!((tail.time_constant_s / 0.4 - 1.0).abs() < 0.1, "{tail:?}");
    }

    #[test]
    fn a_plateau_cannot_be_continued() {
        let t: Vec<f64> = (0..400).map(|i| f64::from(i) * 0.005).collect();
        assert_eq!(extrapolate(&t, &[30.0; 400], &[30.0; 400], 50.0, 0.1), None);
    }

    #[test]
    fn noise_about_a_level_is_no_tail() {
        use rand::SeedableRng;
        use rand_distr::{Distribution, StandardNormal};
        for seed in 0..200 {
            let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
            let t: Vec<f64> = (0..400).map(|i| f64::from(i) * 0.005).collect();
            let f: Vec<f64> = t
                .iter()
                .map(|_| {
                    let z: f64 = StandardNormal.sample(&mut rng);
                    30.0 + 0.5 * z
                })
                .collect();
            if let Some(tail) = extrapolate(&t, &f, &f, 50.0, 0.5) {
                // A stretch of noise may fall by chance, but never so slowly that the thrust would go on and on.
                assert!(tail.impulse < 30.0 * 2.0, "{seed} {tail:?}");
            }
        }
    }
}
