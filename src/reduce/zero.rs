//! The zero under the burn, with the weight of the motor taken along.

use super::Record;
use crate::burn::events::Event;
use crate::condition::baseline::Baseline;
use crate::condition::quiet::{self, QuietFit};
use crate::measure::integral;
use crate::run::Orientation;
use std::ops::Range;

/// The zero and what it says of the weight.
pub struct Zero {
    pub baseline: Baseline,
    /// Samples integrated: the burst with a margin after it.
    pub burst: Range<usize>,
    /// Thrust (force less zero) of the samples `window`, N.
    pub thrust_n: Vec<f64>,
    /// Samples of the burst and some quiet record on either side.
    pub window: Range<usize>,
    /// Mass that the weight shift of a vertical stand speaks for, kg, with its standard uncertainty.
    pub shift_mass_kg: Option<(f64, f64)>,
    /// The weight shifted the wrong way.
    pub wrong_way: bool,
    /// Part of the shift that weight does not explain, N.
    pub drift_n: f64,
    /// Standard uncertainty of the zero's course between its ends, N (rectangular between the straight line and a step at
    /// either end, beyond what noise explains).
    pub drift_u_n: f64,
}

/// Quiet record used on either side, at most so many burst lengths, and at least so many seconds where there are so many.
const BURSTS_OF_QUIET: f64 = 2.0;
const LEAST_QUIET_S: f64 = 3.0;

/// Rounds of zero, impulse and weight until they agree.
const WEIGHT_ROUNDS: usize = 6;

pub fn correct(record: &Record<'_>) -> Zero {
    let (time_s, burn) = (&record.time_s, &record.burn);
    let n = time_s.len();
    let burst_s = time_s[burn.end - 1] - time_s[burn.start];
    let keep_s = (BURSTS_OF_QUIET * burst_s).max(LEAST_QUIET_S);
    let before = quiet_before(record, burn, keep_s);
    let (after, margin) = quiet_after(record, burn, keep_s, burst_s);
    let burst = burn.start.saturating_sub(record.segmentation.block)..(burn.end + margin).min(n);
    let start_s = time_s[burn.start];
    let end_s = time_s[burst.end - 1];
    let fit = |range: Option<Range<usize>>, at_s: f64| range.and_then(|r| quiet::fit(time_s, &record.force_n, r, at_s));
    let (before_fit, after_fit) = (fit(before.clone(), start_s), fit(after.clone(), end_s));

    let downward = match record.orientation {
        Orientation::Horizontal => 0.0,
        Orientation::NozzleUp => -1.0,
        Orientation::NozzleDown => 1.0,
    };
    let weighed = record.inputs.run.motor.propellant_mass_kg;
    let plain = Baseline::new(before_fit, after_fit, start_s, end_s, 0.0);
    let shift = plain.shift_n();
    let shift_u = plain.shift_u_n().unwrap_or(0.0);
    let mut wrong_way = false;
    let weight_shift_n = match (downward == 0.0, weighed, shift) {
        (true, ..) => 0.0,
        (false, Some(mass), _) => downward * mass.value * record.gravity.value_m_s2,
        (false, None, Some(shift)) if shift * downward > 0.0 => shift,
        (false, None, _) => 0.0,
    };
    if let (false, Some(shift)) = (downward == 0.0, shift) {
        let expected = weighed.map_or(0.0, |m| m.value * record.gravity.value_m_s2);
        wrong_way = shift * downward < -3.0 * shift_u && shift.abs() > 0.2 * expected;
    }
    let baseline = Baseline::new(before_fit, after_fit, start_s, end_s, weight_shift_n);
    let drift_n = baseline.drift_n;
    let excess = (drift_n * drift_n - shift_u * shift_u).max(0.0).sqrt();
    let drift_u_n = excess / 12f64.sqrt();
    let shift_mass_kg = match (downward == 0.0, shift) {
        (false, Some(shift)) if shift * downward > 0.0 => {
            Some((shift.abs() / record.gravity.value_m_s2, shift_u / record.gravity.value_m_s2))
        }
        _ => None,
    };

    let pad = ((0.4 * burst_s).max(0.5) / record.interval_s()).ceil() as usize;
    let lower = before.as_ref().map_or(burn.start, |r| r.start);
    let upper = after.as_ref().map_or(burst.end, |r| r.end);
    let window = burst.start.saturating_sub(pad).max(lower.min(burst.start))..(burst.end + pad).min(upper.max(burst.end));
    let thrust_n = subtract(record, &baseline, &window, &burst);
    Zero { baseline, burst, thrust_n, window, shift_mass_kg, wrong_way, drift_n, drift_u_n }
}

/// Force less zero over `window`; the weight part goes with impulse, so impulse and zero are found in turn.
fn subtract(record: &Record<'_>, baseline: &Baseline, window: &Range<usize>, burst: &Range<usize>) -> Vec<f64> {
    let time_s = &record.time_s[window.clone()];
    let force_n = &record.force_n[window.clone()];
    let (start_s, end_s) = (record.time_s[burst.start], record.time_s[burst.end - 1]);
    let line = |t: f64| ((t - start_s) / (end_s - start_s).max(f64::MIN_POSITIVE)).clamp(0.0, 1.0);
    let mut fraction: Vec<f64> = time_s.iter().map(|t| line(*t)).collect();
    let rounds = if baseline.weight_shift_n == 0.0 { 1 } else { WEIGHT_ROUNDS };
    let mut thrust_n = Vec::new();
    for round in 0..rounds {
        thrust_n = force_n
            .iter()
            .zip(time_s)
            .zip(&fraction)
            .map(|((force, time), fraction)| force - baseline.at(*time, *fraction))
            .collect::<Vec<f64>>();
        if round + 1 < rounds {
            let (from, to) = (burst.start - window.start, burst.end - window.start);
            let running = integral::cumulative(&time_s[from..to], &thrust_n[from..to]);
            let total = running.last().copied().unwrap_or(0.0);
            if total <= 0.0 {
                break;
            }
            for (i, f) in fraction.iter_mut().enumerate() {
                *f = if i < from {
                    0.0
                } else if i >= to {
                    1.0
                } else {
                    (running[i - from] / total).clamp(0.0, 1.0)
                };
            }
        }
    }
    thrust_n
}

/// Quiet samples just before the burn, the last of them left out since a slow start may lie in them.
fn quiet_before(record: &Record<'_>, burn: &Event, keep_s: f64) -> Option<Range<usize>> {
    let range = record.segmentation.quiet.iter().rev().find(|r| r.end <= burn.start)?;
    let guard = 2 * record.segmentation.block;
    let end = if range.len() > 8 * guard { range.end - guard } else { range.end };
    let from_s = record.time_s[end - 1] - keep_s;
    let start = range.start.max(record.time_s.partition_point(|t| *t < from_s));
    (end - start >= 2).then_some(start..end)
}

/// Quiet samples after the burn, and how many of the first are integrated with it, since a tail may still fade in them.
fn quiet_after(record: &Record<'_>, burn: &Event, keep_s: f64, burst_s: f64) -> (Option<Range<usize>>, usize) {
    let Some(range) = record.segmentation.quiet.iter().find(|r| r.start >= burn.end) else { return (None, 0) };
    let margin = (range.len() as f64 * 0.3).min(0.4 * burst_s / record.interval_s()) as usize;
    let start = range.start + margin;
    let to_s = record.time_s[start.min(range.end - 1)] + keep_s;
    let end = range.end.min(record.time_s.partition_point(|t| *t <= to_s));
    if end < start + 2 { (None, 0) } else { (Some(start..end), margin) }
}

/// The noise of single samples in the quiet record, N.
pub fn sample_noise(zero: &Zero) -> f64 {
    let pool = [zero.baseline.before, zero.baseline.after];
    let (sum, weight) = pool
        .iter()
        .flatten()
        .fold((0.0, 0.0), |(s, w): (f64, f64), q: &QuietFit| (s + q.sample_sd.powi(2) * q.samples as f64, w + q.samples as f64));
    if weight > 0.0 { (sum / weight).sqrt() } else { 0.0 }
}

/// Two-sided low-frequency density of the quiet noise, N² s.
pub fn noise_density(zero: &Zero, interval_s: f64) -> f64 {
    let quiet = [zero.baseline.before, zero.baseline.after];
    quiet
        .iter()
        .flatten()
        .map(|q| q.low_frequency_density)
        .fold(sample_noise(zero).powi(2) * interval_s, f64::max)
}
