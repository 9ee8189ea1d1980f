//! Smoothing that is as long as the data allow at each instant: local straight-line fits to the left, to the right and to
//! both sides, each over the longest window whose estimates still agree with all shorter ones.
//!
//! Method: local polynomial approximation with the intersection of confidence intervals (V. Katkovnik, IEEE Trans. Signal
//! Process. 47 (1999) 2567), with one-sided windows so that an ignition rise or a sharp end is not rounded off and nothing
//! overshoots beside it.

/// A smoothed curve with the standard error that noise leaves in it.
#[derive(Debug, Clone, PartialEq)]
pub struct Smoothed {
    pub value: Vec<f64>,
    pub standard_error: Vec<f64>,
}

/// A lone sample's error is so many times its neighbours'.
const LONE_ERROR: f64 = 2.5;
/// Noise throws a sample this many standard deviations out at most.
const THROWN_BY_NOISE: f64 = 5.0;

/// Half-width of the confidence intervals that must meet, in standard errors.
const AGREEMENT: f64 = 2.6;

/// Where the window lies.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Side {
    Left,
    Right,
    Both,
}

/// Running sums of y and i·y; the second is taken about moving origins by the caller.
struct Sums {
    y: Vec<f64>,
    iy: Vec<f64>,
}

impl Sums {
    fn new(data: &[f64]) -> Self {
        let (mut y, mut iy) = (Vec::with_capacity(data.len() + 1), Vec::with_capacity(data.len() + 1));
        let (mut sy, mut siy) = (0.0, 0.0);
        y.push(0.0);
        iy.push(0.0);
        for (i, v) in data.iter().enumerate() {
            sy += v;
            siy += i as f64 * v;
            y.push(sy);
            iy.push(siy);
        }
        Sums { y, iy }
    }

    /// Least-squares line through samples `from..to`, evaluated at index `at`.
    fn line_at(&self, from: usize, to: usize, at: usize) -> f64 {
        let n = (to - from) as f64;
        let sum = self.y[to] - self.y[from];
        if to - from < 3 {
            return sum / n;
        }
        let centre = (from + to - 1) as f64 / 2.0;
        let moment = (self.iy[to] - self.iy[from]) - centre * sum;
        let spread = n * (n * n - 1.0) / 12.0;
        sum / n + moment / spread * (at as f64 - centre)
    }
}

/// Weights of the straight-line estimate, for its variance under correlated noise.
fn weights(length: usize, position: usize) -> Vec<f64> {
    let n = length as f64;
    if length < 3 {
        return vec![1.0 / n; length];
    }
    let centre = (n - 1.0) / 2.0;
    let spread = n * (n * n - 1.0) / 12.0;
    (0..length).map(|i| 1.0 / n + (i as f64 - centre) * (position as f64 - centre) / spread).collect()
}

/// Standard error of a weighted sum of noise whose autocorrelation (lag 0 = 1) is given; lags beyond it count as nil.
fn error_factor(weights: &[f64], autocorrelation: &[f64]) -> f64 {
    let mut sum = 0.0;
    for (lag, r) in autocorrelation.iter().enumerate().take(weights.len()) {
        let products: f64 = weights.iter().zip(&weights[lag..]).map(|(a, b)| a * b).sum();
        sum += if lag == 0 { products * r } else { 2.0 * products * r };
    }
    sum.max(0.0).sqrt()
}

/// Window lengths, some 1.4 apart, from one sample to `longest`.
fn lengths(longest: usize) -> Vec<usize> {
    let mut list = vec![1, 2, 3, 4];
    while let Some(&last) = list.last() {
        let next = (last as f64 * 1.4).round() as usize;
        if next > longest {
            break;
        }
        list.push(next);
    }
    list.retain(|&l| l <= longest.max(1));
    list
}

/// Smooths evenly spaced `data` with noise of standard deviation `sigma` (one value a sample) and the given
/// autocorrelation (lag 0 = 1), over windows of at most `longest` samples a side.
///
/// With no noise the data come back as they are.
pub fn smooth(data: &[f64], sigma: &[f64], autocorrelation: &[f64], longest: usize) -> Smoothed {
    let n = data.len();
    let lengths = lengths(longest.min(n));
    let sums = Sums::new(data);
    let factors: Vec<[f64; 2]> = lengths
        .iter()
        .map(|&l| {
            [error_factor(&weights(l, 0), autocorrelation), error_factor(&weights(2 * l - 1, l - 1), autocorrelation)]
        })
        .collect();
    let mut value = Vec::with_capacity(n);
    let mut standard_error = Vec::with_capacity(n);
    for i in 0..n {
        if sigma[i] <= 0.0 {
            value.push(data[i]);
            standard_error.push(0.0);
            continue;
        }
        let (mut total, mut weight_sum) = (0.0, 0.0);
        let mut smallest = f64::INFINITY;
        for side in [Side::Left, Side::Right, Side::Both] {
            let (estimate, error) = longest_agreeing(&sums, n, i, side, sigma[i], &lengths, &factors);
            let w = 1.0 / (error * error);
            total += w * estimate;
            weight_sum += w;
            smallest = smallest.min(error);
        }
        value.push(total / weight_sum);
        // The three estimates share their data, so the best of them is what can be claimed.
        standard_error.push(smallest);
    }
    bridge_lone_samples(&mut value, &mut standard_error, sigma);
    Smoothed { value, standard_error }
}

/// A sample that noise threw far out agrees with no window that holds it, and would stand as it is between neighbours that are known
/// far better: it gets their mean. What noise cannot have thrown so far stays.
fn bridge_lone_samples(value: &mut [f64], standard_error: &mut [f64], sigma: &[f64]) {
    for i in 1..value.len().saturating_sub(1) {
        let beside = standard_error[i - 1].max(standard_error[i + 1]);
        let mean = 0.5 * (value[i - 1] + value[i + 1]);
        let between = (value[i - 1] - value[i + 1]).abs();
        let out = (value[i] - mean).abs();
        if standard_error[i] > LONE_ERROR * beside && out > between && out < THROWN_BY_NOISE * sigma[i] {
            (value[i], standard_error[i]) = (mean, beside);
        }
    }
}

fn longest_agreeing(
    sums: &Sums,
    n: usize,
    i: usize,
    side: Side,
    sigma: f64,
    lengths: &[usize],
    factors: &[[f64; 2]],
) -> (f64, f64) {
    let (mut low, mut high) = (f64::NEG_INFINITY, f64::INFINITY);
    let mut best = (sums.y[i + 1] - sums.y[i], sigma);
    for (&length, factor) in lengths.iter().zip(factors) {
        let (from, to, factor) = match side {
            Side::Left if i + 1 >= length => (i + 1 - length, i + 1, factor[0]),
            Side::Right if i + length <= n => (i, i + length, factor[0]),
            Side::Both if i + 1 >= length && i + length <= n => (i + 1 - length, i + length, factor[1]),
            _ => break,
        };
        let estimate = sums.line_at(from, to, i);
        let error = sigma * factor;
        low = low.max(estimate - AGREEMENT * error);
        high = high.min(estimate + AGREEMENT * error);
        if low > high {
            break;
        }
        if error <= best.1 {
            best = (estimate, error);
        }
    }
    best
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn noisy(clean: &[f64], sigma: f64, seed: u64) -> Vec<f64> {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        clean
            .iter()
            .map(|c| {
                let z: f64 = StandardNormal.sample(&mut rng);
                c + sigma * z
            })
            .collect()
    }

    #[test]
    fn a_step_stays_a_step() {
        let clean: Vec<f64> = (0..600).map(|i| if i < 200 { 0.0 } else { 100.0 }).collect();
        let data = noisy(&clean, 1.0, 1);
        let smoothed = smooth(&data, &vec![1.0; 600], &[1.0], 150);
        for i in (20..190).chain(210..580) {
            assert!((smoothed.value[i] - clean[i]).abs() < 2.0, "sample {i}: {}", smoothed.value[i]);
        }
        assert!(smoothed.value[199] < 5.0 && smoothed.value[200] > 95.0);
        let top = smoothed.value.iter().cloned().fold(f64::MIN, f64::max);
        assert!(top < 102.5, "{top}");
    }

    #[test]
    fn without_noise_nothing_changes() {
        let data: Vec<f64> = (0..100).map(|i| (i as f64 * 0.3).sin()).collect();
        assert_eq!(smooth(&data, &vec![0.0; 100], &[1.0], 30).value, data);
    }

    #[test]
    fn noise_on_a_line_is_averaged_away() {
        let clean: Vec<f64> = (0..1000).map(|i| 50.0 + 0.05 * i as f64).collect();
        let smoothed = smooth(&noisy(&clean, 1.0, 7), &vec![1.0; 1000], &[1.0], 200);
        let rms = (smoothed.value.iter().zip(&clean).map(|(a, b)| (a - b) * (a - b)).sum::<f64>() / 1000.0).sqrt();
        assert!(rms < 0.25, "{rms}");
    }

    #[test]
    fn a_line_estimate_at_its_end_has_four_times_the_variance_of_a_mean() {
        // Variance of a straight-line fit of n points at its end: (4n - 2) / (n (n + 1)).
        let factor = error_factor(&weights(50, 0), &[1.0]);
        assert!((factor * factor - 198.0 / (50.0 * 51.0)).abs() < 1e-12);
    }
}
