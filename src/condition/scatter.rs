//! How far means over neighbouring samples scatter, by how many samples they take.
//!
//! White noise leaves a mean of n samples with variance σ²/n. Mains hum, rough combustion and what a filter leaves do not: their
//! means scatter more at some lengths and less at others. Whatever is judged against noise over n samples must be judged against
//! the scatter at that length.

use std::ops::Range;

/// Scatter at lengths of 1, 2, 4, … samples.
#[derive(Debug, Clone, PartialEq)]
pub struct Scatter {
    /// Variance of a mean over 2ᵏ neighbouring samples times 2ᵏ; σ² at every k for white noise.
    by_length: Vec<f64>,
    /// Variance of single samples, slow parts included.
    sample_variance: f64,
    /// Variance of the slow part (a hum, a rough combustion), and the length in samples at which it shows most: about half its period.
    slow: (f64, f64),
}

/// Blocks of three that a length must have before its scatter is believed.
const LEAST_BLOCKS: usize = 24;
/// Scatter during the burn counts as more than the quiet record's from this many standard deviations of its own estimate on.
const EXCESS_EVIDENCE: f64 = 3.0;
/// Relative standard deviation of a variance from the median of n independent absolute values: 2 × 1.17 / √n (from memory: a median
/// absolute deviation is 37 % as efficient as a standard deviation).
const MEDIAN_ERROR: f64 = 2.34;

impl Scatter {
    pub fn white(sigma: f64) -> Self {
        Scatter { by_length: vec![sigma * sigma], sample_variance: sigma * sigma, slow: (0.0, 0.0) }
    }

    /// Scatter of evenly spaced `data`: the quiet stretches give it, `busy` (the burn's level part) adds to it where it plainly scatters
    /// more. `sigma`: noise of single samples in the quiet record, the floor.
    pub fn measure(data: &[f64], quiet: &[Range<usize>], busy: Range<usize>, sigma: f64) -> Self {
        let white = sigma * sigma;
        let (mut by_length, mut slow) = (Vec::new(), (0.0_f64, 0.0_f64));
        for k in 0..20 {
            let length = 1_usize << k;
            let at_rest =
                quiet.iter().filter_map(|r| second_differences(data.get(r.clone())?, length)).max_by_key(|d| d.1);
            let in_burn = data.get(busy.clone()).and_then(|d| second_differences(d, length));
            if at_rest.is_none() && in_burn.is_none() {
                break;
            }
            // Without quiet record at this length the shorter one speaks for it.
            let rest =
                at_rest.map(|(variance, _)| variance * length as f64).or(by_length.last().copied()).unwrap_or(white);
            let mut here = rest;
            if let Some((variance, blocks)) = in_burn {
                let scaled = variance * length as f64;
                if scaled > rest.max(white) * (1.0 + EXCESS_EVIDENCE * MEDIAN_ERROR / (blocks as f64).sqrt()) {
                    here = scaled;
                }
            }
            let certain = at_rest.map_or(0, |d| d.1).max(in_burn.map_or(0, |d| d.1));
            if k > 0 && here > white * (1.0 + EXCESS_EVIDENCE * MEDIAN_ERROR / (certain as f64).sqrt()) {
                // Means over half the period of noise in a narrow band give second differences of 6.5 times its variance, taken here for
                // 6 times: the excess at the length where it is largest is the variance of the slow part itself.
                let variance = (here - white) / length as f64;
                if variance > slow.0 {
                    slow = (variance, length as f64);
                }
            }
            by_length.push(if k == 0 { here.max(white) } else { here });
        }
        if by_length.is_empty() {
            return Scatter::white(sigma);
        }
        let sample_variance = by_length[0].max(white) + slow.0;
        Scatter { by_length, sample_variance, slow }
    }

    /// Standard deviation of single samples, slow parts included.
    pub fn sample_sd(&self) -> f64 {
        self.sample_variance.sqrt()
    }

    /// Variance that white noise would need for means over `samples` samples to scatter as they do.
    pub fn variance_over(&self, samples: f64) -> f64 {
        let last = self.by_length.len() - 1;
        let x = samples.max(1.0).log2().clamp(0.0, last as f64);
        let k = (x.floor() as usize).min(last.saturating_sub(1));
        let (a, b) = (self.by_length[k], self.by_length[(k + 1).min(last)]);
        a + (b - a) * (x - k as f64)
    }

    /// What the slow part adds to the variance of a level over `samples` samples: all of it where they are short against it.
    pub fn slow_variance(&self, samples: f64) -> f64 {
        if self.slow.1 > 0.0 { self.slow.0 * (1.0 - samples / (2.0 * self.slow.1)).max(0.0) } else { 0.0 }
    }

    /// Standard deviation of the sum of so many neighbouring samples.
    pub fn sum_sd(&self, samples: f64) -> f64 {
        (samples * self.variance_over(samples) + samples * samples * self.slow_variance(samples)).sqrt()
    }

    /// How many times more the samples depend on each other than white noise would, 1 or more.
    pub fn dependence(&self) -> f64 {
        let highest = self.by_length.iter().copied().fold(0.0, f64::max);
        (highest / self.sample_variance).max(1.0)
    }
}

/// Variance of a mean over `length` samples from the second differences of means over neighbouring blocks (neither a level nor a
/// slope shows in them; a steady bend is taken off as their median), by the median so that edges do not count; and the number of
/// independent differences. For independent blocks a second difference has 6 times a block's variance.
fn second_differences(data: &[f64], length: usize) -> Option<(f64, usize)> {
    let independent = data.len() / (3 * length);
    if independent < LEAST_BLOCKS {
        return None;
    }
    let mut running = Vec::with_capacity(data.len() + 1);
    running.push(0.0);
    let origin = data[0];
    for v in data {
        running.push(running[running.len() - 1] + (v - origin));
    }
    let mean = |from: usize| (running[from + length] - running[from]) / length as f64;
    let step = (length / 2).max(1);
    let mut d: Vec<f64> = (0..=data.len() - 3 * length)
        .step_by(step)
        .map(|i| mean(i) - 2.0 * mean(i + length) + mean(i + 2 * length))
        .collect();
    let middle = d.len() / 2;
    let bend = *d.select_nth_unstable_by(middle, f64::total_cmp).1;
    d.iter_mut().for_each(|v| *v = (*v - bend).abs());
    let spread = *d.select_nth_unstable_by(middle, f64::total_cmp).1 / 0.6745;
    Some((spread * spread / 6.0, independent))
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

    fn quiet(samples: usize) -> Range<usize> {
        0..samples
    }

    #[test]
    fn white_noise_scatters_alike_at_every_length() {
        let data = noise(20_000, 1);
        let s = Scatter::measure(&data, &[quiet(8000)], 8000..20_000, 1.0);
        for length in [1.0, 3.0, 16.0, 100.0] {
            // 111 blocks of the longest kind: a variance good to 2.34/√83 = 26 %, held to three times that.
            assert!((s.variance_over(length) - 1.0).abs() < 0.7, "{length}: {}", s.variance_over(length));
        }
        assert!((s.sample_sd() - 1.0).abs() < 0.1, "{s:?}");
    }

    #[test]
    fn a_wave_in_the_burn_shows_at_its_own_length_and_not_beyond() {
        // Quiet, then a level of 100 with a wave of 67.3 samples and amplitude 2.
        let data: Vec<f64> = noise(20_000, 2)
            .iter()
            .enumerate()
            .map(|(i, z)| {
                0.5 * z + if i < 8000 { 0.0 } else { 100.0 + 2.0 * (i as f64 * std::f64::consts::TAU / 67.3).sin() }
            })
            .collect();
        let s = Scatter::measure(&data, &[quiet(8000)], 8001..20_000, 0.5);
        assert!((s.variance_over(1.0) - 0.25).abs() < 0.05, "{s:?}");
        // Half a period: blocks of 32 with means of 4/π amplitude alternate; far beyond any noise.
        assert!(s.variance_over(32.0) > 20.0 * 0.25, "{s:?}");
        // Blocks of two periods hardly see it.
        assert!(s.variance_over(128.0) < 0.1 * s.variance_over(32.0), "{s:?}");
        // Its variance is 2; a steady wave has no outliers, so that the median of its size gives it 2.4 times too high (1.1 times for
        // noise in a band).
        assert!(s.sample_sd().powi(2) > 2.0 && s.sample_sd().powi(2) < 6.0, "{s:?}");
        assert!(s.dependence() > 2.0);
    }

    #[test]
    fn a_bend_is_no_scatter() {
        let data: Vec<f64> = noise(12_000, 3)
            .iter()
            .enumerate()
            .map(|(i, z)| 0.1 * z + if i < 4000 { 0.0 } else { 100.0 - ((i as f64 - 8000.0) / 800.0).powi(2) })
            .collect();
        let s = Scatter::measure(&data, &[quiet(4000)], 4001..12_000, 0.1);
        assert!(s.sample_sd() < 0.12, "{s:?}");
    }
}
