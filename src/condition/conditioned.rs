//! The conditioned curve: even grid, zero-phase low-pass where the spectrum shows noise alone, then smoothing that is as
//! long as the data allow; and the peak of that curve with the bias that noise and smoothing give it taken out.

use crate::condition::adaptive::{self, Smoothed};
use crate::condition::ignition::Ignition;
use crate::condition::median::median;
use crate::condition::response::{self, Response};
use crate::condition::scatter::Scatter;
use crate::condition::{corner, lowpass, peak, spectrum};
use crate::run::Lowpass;
/// Thrust conditioned over one burst and its surroundings.
#[derive(Debug, Clone, PartialEq)]
pub struct Conditioned {
    /// Evenly spaced, s.
    pub time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    /// What noise leaves in it, N.
    pub standard_error_n: Vec<f64>,
    pub interval_s: f64,
    /// Cutoff of the low-pass; `None` when none was needed.
    pub cutoff_hz: Option<f64>,
    /// Whether smoothing of varying length was applied.
    pub smoothed: bool,
    /// The samples were not evenly spaced and were put on an even grid first.
    pub resampled: bool,
    /// Noise of single samples during the burst (quiet noise and roughness of combustion), N.
    pub noise_n: Vec<f64>,
    autocorrelation: Vec<f64>,
    longest: usize,
    /// On the grid before any filter, with its noise, for the fit of the peak.
    samples_n: Vec<f64>,
    sample_noise_n: Vec<f64>,
    /// Noise of single samples in the quiet record, before any filter, N.
    quiet_noise_n: f64,
    noise_gain: f64,
    /// Where the compensation of the stand's response ends, Hz.
    pub band_end_hz: Option<f64>,
    /// The ignition by models driven through the stand; the curve follows it there.
    pub ignition: Option<Ignition>,
}

/// The stand to be seen through.
#[derive(Debug, Clone, Copy)]
pub struct Through<'a> {
    /// As it is at ignition.
    pub response: Response,
    /// Mass on the spring over that at ignition, one a sample; empty where it stays.
    pub inertia: &'a [f64],
    pub ignition: Option<&'a Ignition>,
}

/// The signal must stand this far out of the noise floor (in power) to count.
const SIGNAL_ABOVE_NOISE: f64 = 4.0;
/// The cutoff is put this far above the last frequency that carries signal, so that the low-pass takes noise and no signal.
const CUTOFF_MARGIN: f64 = 2.5;
/// No low-pass above this share of the sample rate: there is nothing left to take away.
const HIGHEST_CUTOFF: f64 = 0.35;
/// Below this number of samples the noise during the burst cannot be told from its shape.
const LEAST_FOR_BURN_NOISE: usize = 200;

/// What the choice of the stretch adds to the error of a fit around the peak, as a factor.
const CHOICE_OF_STRETCH: f64 = std::f64::consts::SQRT_2;
/// A corner is believed where its error is at most this share of it, and where it stands above the smooth piece by so many standard
/// errors of their difference.
const LARGEST_CORNER_ERROR: f64 = 0.03;
const CORNER_EVIDENCE: f64 = 2.5;
/// A fitted ignition is nearly as sure as the readings up to this factor of their uncertainty.
const NEARLY_AS_SURE: f64 = 2.0;
/// Parts of the burst whose tops are looked at, where they reach this share of the highest.
const PARTS: usize = 16;
const NEARLY_HIGHEST: f64 = 0.97;
/// The burst counts as level, to see how it scatters, from its first to its last crossing of this share of the peak.
const LEVEL_PART: f64 = 0.3;

/// Straight-line values of a sampled curve at an even grid over its own span.
fn even_grid(time_s: &[f64], value: &[f64], interval_s: f64) -> (Vec<f64>, Vec<f64>) {
    let (Some(&first), Some(&last)) = (time_s.first(), time_s.last()) else { return (Vec::new(), Vec::new()) };
    let n = ((last - first) / interval_s).round().max(1.0) as usize + 1;
    let step = (last - first) / (n - 1) as f64;
    let mut k = 0;
    let mut times = Vec::with_capacity(n);
    let mut values = Vec::with_capacity(n);
    for i in 0..n {
        let t = first + step * i as f64;
        while k + 2 < time_s.len() && time_s[k + 1] < t {
            k += 1;
        }
        let (t0, t1) = (time_s[k], time_s[k + 1]);
        times.push(t);
        values.push(value[k] + (value[k + 1] - value[k]) * ((t - t0) / (t1 - t0)).clamp(0.0, 1.0));
    }
    (times, values)
}

/// Noise of single samples: the quiet record's, or that during the burst where it is larger, from second differences in
/// windows (neither a level nor a slope disturbs them).
fn local_noise(value: &[f64], quiet_sd: f64) -> Vec<f64> {
    let n = value.len();
    if n < LEAST_FOR_BURN_NOISE {
        return vec![quiet_sd; n];
    }
    let window = (n / 12).clamp(48, 2000);
    let second: Vec<f64> = value.windows(3).map(|w| (w[0] - 2.0 * w[1] + w[2]).abs()).collect();
    // Median absolute second difference of white noise: 0.6745 √6 standard deviations.
    let levels: Vec<f64> = second.chunks(window).map(|c| median(c.to_vec()) / (0.6745 * 6f64.sqrt())).collect();
    (0..n)
        .map(|i| {
            let x = (i as f64 / window as f64 - 0.5).clamp(0.0, (levels.len() - 1) as f64);
            let k = (x.floor() as usize).min(levels.len().saturating_sub(2));
            let next = levels.get(k + 1).copied().unwrap_or(levels[k]);
            (levels[k] + (next - levels[k]) * (x - k as f64)).max(quiet_sd)
        })
        .collect()
}

/// Cutoff from the spectrum of the burst against its noise floor; `None`: signal or nothing but a flat floor up to the end
/// of the band.
fn choose_cutoff(value: &[f64], rate_hz: f64, noise_sd: f64) -> Option<f64> {
    let s = spectrum::welch(value, rate_hz, spectrum::segment_for(value.len(), 2))?;
    let floor = 2.0 * noise_sd * noise_sd / rate_hz;
    if floor <= 0.0 || s.density.len() < 16 {
        return None;
    }
    // Neighbouring bins are averaged, since a single bin of a short record scatters as much as its own size.
    let smooth: Vec<f64> = s.density.windows(5).map(|w| w.iter().sum::<f64>() / 5.0).collect();
    let last = smooth.iter().rposition(|d| *d > SIGNAL_ABOVE_NOISE * floor)?;
    let cutoff = CUTOFF_MARGIN * s.frequency_hz[last + 2];
    (cutoff < HIGHEST_CUTOFF * rate_hz).then_some(cutoff)
}

/// Autocorrelation that the low-pass gives white noise, and the share of its standard deviation that is left.
fn filtered_noise(cutoff_hz: f64, rate_hz: f64) -> (Vec<f64>, f64) {
    let half = (4.0 * rate_hz / cutoff_hz).ceil() as usize;
    let mut pulse = vec![0.0; 2 * half + 1];
    pulse[half] = 1.0;
    let kernel = lowpass::zero_phase(&pulse, cutoff_hz, rate_hz);
    let product = |lag: usize| -> f64 { kernel.iter().zip(&kernel[lag..]).map(|(a, b)| a * b).sum() };
    let power = product(0);
    ((0..half).map(|lag| product(lag) / power).collect(), power.sqrt())
}

/// Conditions `thrust_n` (calibrated, zero taken away, possibly unevenly spaced; at least 2 samples, time increasing).
///
/// `quiet_sd_n`: noise of single samples in the quiet record. `burst_s`: length of the burst, which limits the windows.
pub fn condition(
    time_s: &[f64],
    thrust_n: &[f64],
    interval_s: f64,
    quiet_sd_n: f64,
    burst_s: f64,
    wanted: Option<Lowpass>,
    stand: Option<Through<'_>>,
) -> Conditioned {
    let uneven = time_s.windows(2).any(|w| ((w[1] - w[0]) / interval_s - 1.0).abs() > 0.02);
    let (grid_s, mut value) =
        if uneven { even_grid(time_s, thrust_n, interval_s) } else { (time_s.to_vec(), thrust_n.to_vec()) };
    let n = grid_s.len();
    let interval_s = (grid_s[n - 1] - grid_s[0]) / (n - 1).max(1) as f64;
    let rate_hz = 1.0 / interval_s;
    let mut noise_n = local_noise(&value, quiet_sd_n);
    let typical = median(noise_n.clone());
    let mut autocorrelation = vec![1.0];
    let mut quiet_noise_n = quiet_sd_n;
    let (mut band_end_hz, mut noise_gain) = (None, 1.0);
    if let Some(Through { response, inertia, .. }) = stand {
        let highest = value.iter().copied().fold(f64::MIN_POSITIVE, f64::max);
        let kernel = response::kernel(response, interval_s, typical / highest);
        band_end_hz = Some(response::band_end_hz(response, interval_s, typical / highest));
        if inertia.len() == time_s.len() {
            let inertia = if uneven { even_grid(time_s, inertia, interval_s).1 } else { inertia.to_vec() };
            let (steady, inertial) = response::kernels(response, interval_s, typical / highest);
            let (steady, inertial) = (response::apply(&steady, &value), response::apply(&inertial, &value));
            value = steady.iter().zip(&inertial).zip(&inertia).map(|((a, b), m)| a + m * b).collect();
        } else {
            value = response::apply(&kernel, &value);
        }
        let product = |lag: usize| -> f64 { kernel.iter().zip(&kernel[lag..]).map(|(a, b)| a * b).sum() };
        let power = product(0);
        autocorrelation = (0..kernel.len()).map(|lag| product(lag) / power).collect();
        // Roughness that the second differences showed is the stand's swing in part; the quiet noise is what is amplified.
        noise_gain = power.sqrt();
        quiet_noise_n = quiet_sd_n * noise_gain;
        noise_n = vec![quiet_noise_n; n];
    }
    let cutoff_hz = match wanted {
        Some(Lowpass::Off) => None,
        Some(Lowpass::CutoffHz(hz)) => (hz < 0.5 * rate_hz).then_some(hz),
        // The compensation has a band of its own.
        None if stand.is_some() => None,
        None => choose_cutoff(&value, rate_hz, typical),
    };
    let (samples_n, sample_noise_n) = (value.clone(), noise_n.clone());
    if let Some(hz) = cutoff_hz {
        value = lowpass::zero_phase(&value, hz, rate_hz);
        let (correlation, left) = filtered_noise(hz, rate_hz);
        autocorrelation = correlation;
        noise_n.iter_mut().for_each(|s| *s *= left);
    }
    let longest = ((0.3 * burst_s / interval_s) as usize).clamp(1, n);
    let mut conditioned = Conditioned {
        time_s: grid_s,
        standard_error_n: noise_n.clone(),
        thrust_n: Vec::new(),
        interval_s,
        cutoff_hz,
        smoothed: wanted.is_none(),
        resampled: uneven,
        noise_n,
        autocorrelation,
        longest,
        samples_n,
        sample_noise_n,
        quiet_noise_n,
        noise_gain,
        band_end_hz,
        // A person's low-pass is exactly what is applied.
        ignition: stand.and_then(|s| s.ignition).filter(|_| wanted.is_none()).cloned(),
    };
    if wanted.is_none() {
        let Smoothed { value, standard_error } = conditioned.smooth(&value, 0..n);
        conditioned.thrust_n = value;
        conditioned.standard_error_n = standard_error;
        conditioned.follow_ignition();
    } else {
        conditioned.thrust_n = value;
    }
    conditioned
}

/// The peak of a conditioned curve.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Peak {
    pub time_s: f64,
    /// By the fit around it, N.
    pub thrust_n: f64,
    /// Standard uncertainty from noise and smoothing, N.
    pub noise_u_n: f64,
    /// Highest value of the curve as it stands, N.
    pub highest_n: f64,
}

impl Conditioned {
    /// By how much the compensation of the stand's response takes up the noise of a reading; 1 without it.
    pub fn noise_gain(&self) -> f64 {
        self.noise_gain
    }

    fn smooth(&self, value: &[f64], range: std::ops::Range<usize>) -> Smoothed {
        adaptive::smooth(value, &self.noise_n[range], &self.autocorrelation, self.longest)
    }

    /// Puts the ignition in the place of the smoothed readings up to where it hands over, and fades from there to its end.
    fn follow_ignition(&mut self) {
        let Some(ignition) = &self.ignition else { return };
        let (Some(&first), Some(&last)) = (ignition.time_s.first(), ignition.time_s.last()) else { return };
        for (i, t) in self.time_s.iter().enumerate() {
            if *t < first || *t >= last {
                continue;
            }
            let (value, error) = ignition.at(*t);
            let share = ((last - t) / (last - ignition.hand_over_s)).clamp(0.0, 1.0);
            self.thrust_n[i] += share * (value - self.thrust_n[i]);
            self.standard_error_n[i] += share * (error - self.standard_error_n[i]);
        }
    }

    /// Peak between the grid indices of `range`. `averaged`: the samples are means over their intervals, which a corner between them
    /// cannot be told from.
    pub fn peak(&self, range: std::ops::Range<usize>, averaged: bool) -> Option<Peak> {
        let read = self.peak_of_readings(range, averaged)?;
        let Some(ignition) = &self.ignition else { return Some(read) };
        let (Some(&first), Some(&last)) = (ignition.time_s.first(), ignition.time_s.last()) else { return Some(read) };
        let fitted = Peak { time_s: ignition.peak_s, thrust_n: ignition.peak_n, noise_u_n: ignition.peak_u_n, ..read };
        // One top, told twice: the one that is known better counts. Two tops: the higher, where it plainly is.
        let one = (first..=last).contains(&read.time_s);
        let better = if one {
            // Readings with the stand taken out round a sharp top off, so that a higher one counts where it is nearly as sure.
            fitted.noise_u_n < read.noise_u_n
                || fitted.noise_u_n < NEARLY_AS_SURE * read.noise_u_n
                    && fitted.thrust_n - read.thrust_n > read.noise_u_n
        } else {
            fitted.thrust_n - read.thrust_n > fitted.noise_u_n.hypot(read.noise_u_n)
        };
        // Where the two ways do not agree, neither is as sure as it seems.
        let open = if one { 0.5 * (fitted.thrust_n - read.thrust_n).abs() } else { 0.0 };
        let chosen = if better { fitted } else { read };
        Some(Peak { noise_u_n: chosen.noise_u_n.hypot(open.min(ignition.peak_u_n.max(read.noise_u_n))), ..chosen })
    }

    fn peak_of_readings(&self, range: std::ops::Range<usize>, averaged: bool) -> Option<Peak> {
        let piece = self.thrust_n.get(range.clone())?;
        let (at, highest_n) = piece.iter().copied().enumerate().max_by(|a, b| a.1.total_cmp(&b.1))?;
        let at = range.start + at;
        let plain =
            Peak { time_s: self.time_s[at], thrust_n: highest_n, noise_u_n: self.standard_error_n[at], highest_n };
        if !self.smoothed || self.sample_noise_n[at] <= 0.0 {
            return Some(plain);
        }
        let scatter = self.scatter(&range, at);
        let fitted = peak::fit(self.samples_n.get(range.clone())?, at - range.start, &scatter)?;
        let tops = if averaged { Vec::new() } else { self.tops(&range, at) };
        let corners: Vec<(usize, corner::Corner)> = tops
            .into_iter()
            .filter_map(|top| corner::find(&self.samples_n, top, &scatter).map(|c| (top, c)))
            .filter(|(_, c)| c.standard_error < LARGEST_CORNER_ERROR * c.value)
            .collect();
        let above = |c: &corner::Corner| c.value - fitted.value;
        let error = |c: &corner::Corner| c.standard_error.hypot(fitted.standard_error);
        // Either it is known better than the smooth piece, or it stands plainly above it.
        let sharp = corners
            .iter()
            .filter(|(_, c)| {
                above(c) > CORNER_EVIDENCE * error(c)
                    || (c.standard_error < fitted.standard_error && above(c) > -CORNER_EVIDENCE * error(c))
            })
            .max_by(|a, b| a.1.value.total_cmp(&b.1.value))
            .copied();
        if let Some((top, corner)) = sharp {
            return Some(Peak {
                time_s: self.time_s[top],
                thrust_n: corner.value,
                noise_u_n: (corner.standard_error * CHOICE_OF_STRETCH).hypot(corner.rounding_u),
                ..plain
            });
        }
        // What the choice of the stretch adds is of the order of the fit's own error.
        let noise_u_n = (fitted.standard_error * CHOICE_OF_STRETCH).hypot(fitted.choice_u);
        // A corner that may be there without standing out plainly: anywhere between the smooth piece and a little above it.
        let hidden_corner = corners.iter().map(|(_, c)| above(c) + error(c)).fold(0.0, f64::max) / 12f64.sqrt();
        let noise_u_n = noise_u_n.hypot(hidden_corner);
        // Between samples a bent curve may stand higher by an eighth of its second difference.
        let bent = match (at.checked_sub(1).and_then(|k| self.thrust_n.get(k)), self.thrust_n.get(at + 1)) {
            (Some(before), Some(after)) => (2.0 * self.thrust_n[at] - before - after).abs() / 8.0,
            _ => 0.0,
        };
        let noise_u_n = noise_u_n.hypot(bent);
        let hidden = peak::between_samples(&self.samples_n, at, self.sample_noise_n[at]);
        let (excess, excess_u) = hidden.unwrap_or((0.0, 0.0));
        Some(Peak { thrust_n: fitted.value + excess, noise_u_n: noise_u_n.hypot(excess_u), ..plain })
    }

    /// The top, and the tops of other parts of the burst that are nearly as high: a spike may stand beside a long hump.
    fn tops(&self, burst: &std::ops::Range<usize>, at: usize) -> Vec<usize> {
        let part = (burst.len() / PARTS).max(1);
        let mut tops = vec![at];
        for from in burst.clone().step_by(part) {
            let to = (from + part).min(burst.end);
            let top = (from..to).max_by(|a, b| self.thrust_n[*a].total_cmp(&self.thrust_n[*b])).unwrap_or(from);
            // A top at the seam of two parts is no top.
            let inside = top > from && top + 1 < to;
            if inside && top.abs_diff(at) > part / 2 && self.thrust_n[top] > NEARLY_HIGHEST * self.thrust_n[at] {
                tops.push(top);
            }
        }
        tops
    }

    /// How the samples scatter in the quiet record and in the level part of the burst.
    fn scatter(&self, burst: &std::ops::Range<usize>, at: usize) -> Scatter {
        let level = LEVEL_PART * self.thrust_n[at];
        let up = burst.start + self.thrust_n[burst.clone()].iter().take_while(|f| **f < level).count();
        let down = burst.end - self.thrust_n[burst.clone()].iter().rev().take_while(|f| **f < level).count();
        let quiet = [0..burst.start, burst.end..self.samples_n.len()];
        Scatter::measure(&self.samples_n, &quiet, up..down.max(up), self.quiet_noise_n)
    }

    /// Makes the curve agree with its corrected peak: noise that stands above the peak is cut to it, and the highest
    /// sample is put at it.
    pub fn settle_peak(&mut self, peak: &Peak) {
        for (v, t) in self.thrust_n.iter_mut().zip(&self.time_s) {
            if *v > peak.thrust_n || *t == peak.time_s {
                *v = peak.thrust_n;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_chacha::ChaCha8Rng;
    use rand_distr::{Distribution, StandardNormal};

    fn noisy(clean: &[f64], sigma: f64, seed: u64) -> Vec<f64> {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        clean
            .iter()
            .map(|c| {
                let z: f64 = StandardNormal.sample(&mut rng);
                c + sigma * z
            })
            .collect()
    }

    fn time(n: usize, rate_hz: f64) -> Vec<f64> {
        (0..n).map(|i| i as f64 / rate_hz).collect()
    }

    #[test]
    fn the_peak_of_a_noisy_plateau_is_the_plateau() {
        let t = time(4000, 1000.0);
        let clean: Vec<f64> = t.iter().map(|&t| if (1.0..3.0).contains(&t) { 100.0 } else { 0.0 }).collect();
        let mut errors = Vec::new();
        for seed in 0..20 {
            let c = condition(&t, &noisy(&clean, 4.0, seed), 0.001, 4.0, 2.0, None, None);
            let p = c.peak(0..c.time_s.len(), false).expect("peak");
            errors.push((p.thrust_n - 100.0) / 100.0);
        }
        let mean = errors.iter().sum::<f64>() / 20.0;
        let worst = errors.iter().fold(0.0f64, |w, e| w.max(e.abs()));
        assert!(mean.abs() < 0.01 && worst < 0.03, "mean {mean}, worst {worst}: {errors:?}");
    }

    #[test]
    fn a_sharp_peak_is_kept() {
        let t = time(3000, 1000.0);
        let clean: Vec<f64> =
            t.iter().map(|&t| if (1.0..2.0).contains(&t) { 60.0 + 40.0 * (t - 1.0) } else { 0.0 }).collect();
        for seed in 0..10 {
            let c = condition(&t, &noisy(&clean, 0.5, seed), 0.001, 0.5, 1.0, None, None);
            let p = c.peak(0..c.time_s.len(), false).expect("peak");
            assert!((p.thrust_n - 99.96).abs() < 0.5, "{p:?}");
        }
    }

    #[test]
    fn a_low_cutoff_is_chosen_for_a_slow_burst_in_noise() {
        let t = time(6000, 1000.0);
        let clean: Vec<f64> = t.iter().map(|&t| 100.0 * (-(t - 3.0) * (t - 3.0) / 0.5).exp()).collect();
        let c = condition(&t, &noisy(&clean, 2.0, 3), 0.001, 2.0, 3.0, None, None);
        let cutoff = c.cutoff_hz.expect("cutoff");
        assert!((2.0..60.0).contains(&cutoff), "{cutoff}");
    }

    #[test]
    fn an_override_is_taken_as_it_is() {
        let t = time(500, 100.0);
        let y: Vec<f64> = t.iter().map(|t| (t * 40.0).sin()).collect();
        let off = condition(&t, &y, 0.01, 0.1, 5.0, Some(Lowpass::Off), None);
        assert_eq!(off.thrust_n, y);
        let cut = condition(&t, &y, 0.01, 0.1, 5.0, Some(Lowpass::CutoffHz(20.0)), None);
        assert_eq!(cut.cutoff_hz, Some(20.0));
        assert_eq!(cut.thrust_n, lowpass::zero_phase(&y, 20.0, 100.0));
    }
}
