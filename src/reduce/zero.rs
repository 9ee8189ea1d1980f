//! The zero under the burn, with the weight of the motor taken along.

use super::Record;
use crate::burn::events::Event;
use crate::condition::baseline::Baseline;
use crate::condition::quiet::{self, QuietFit, Together};
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

impl Zero {
    /// How the drift was taken to go, in words.
    pub fn course(&self) -> String {
        match self.baseline.thermal {
            Some(warm) => format!(
                "steady drift of {:.4} N/s and warmth growing after ignition by {:.3} N with a time constant of {:.1} s (the quiet record bends after the burn and not before)",
                warm.slope_per_s, warm.amplitude, warm.time_constant_s
            ),
            None => "steady drift".to_string(),
        }
    }
}

/// Quiet record used on either side, at most so many burst lengths, and at least so many seconds where there are so many.
const BURSTS_OF_QUIET: f64 = 2.0;
const LEAST_QUIET_S: f64 = 3.0;

/// Drift through the burst that a zero known on one side only is allowed for, at most, as a share of peak.
const ONE_SIDED_SHARE: f64 = 0.001;

/// A drift is used on a stand whose weight shift is to be found with it from this many standard errors on.
const SLOPE_SEEN: f64 = 3.0;
/// What of a slope's standard error over the burst may hide in either level where no drift is seen.
const HIDDEN_DRIFT: f64 = 0.35;

/// Time constants below this share of the burst are a tail's where the zero seems to fall.
const TAIL_SHARE: f64 = 0.5;

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
    let downward = match record.orientation {
        Orientation::Horizontal => 0.0,
        Orientation::NozzleUp => -1.0,
        Orientation::NozzleDown => 1.0,
    };
    let weighed = record.inputs.run.motor.propellant_mass_kg;
    let (before_fit, after_fit) = levels(record, &before, &after, [start_s, end_s], downward);
    let known_step = known_step(record, downward);
    let thermal = match (&before, &after, known_step) {
        (Some(b), Some(a), Some(step)) => {
            quiet::fit_thermal(time_s, &record.force_n, [b.clone(), a.clone()], [start_s, end_s], step)
                // A zero that comes down soon after the burn is the tail of the thrust fading.
                .filter(|warm| warm.amplitude > 0.0 || warm.time_constant_s > TAIL_SHARE * burst_s)
        }
        _ => None,
    };
    let (before_fit, after_fit) = match (thermal, before_fit, after_fit) {
        (Some(warm), Some(b), Some(a)) => (
            Some(QuietFit { level: warm.level, slope_per_s: warm.slope_per_s, level_covariance: 0.0, ..b }),
            Some(QuietFit {
                level: warm.at(end_s - start_s) + known_step.unwrap_or(0.0),
                level_u: warm.level_after_u.max(a.level_u),
                level_covariance: 0.0,
                ..a
            }),
        ),
        _ => (before_fit, after_fit),
    };
    let plain = Baseline::new(before_fit, after_fit, start_s, end_s, 0.0);
    // What left the stand is the step beside the drift, which goes on through the burn.
    let step = match (&before, &after) {
        (Some(b), Some(a)) if downward != 0.0 => weight_step(record, b, a, [start_s, end_s]),
        _ => None,
    };
    let shift = step.map(|s| s.0).or(plain.shift_n());
    let shift_u = step.map(|s| s.1).or(plain.shift_u_n()).unwrap_or(0.0);
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
    let mut baseline = Baseline::new(before_fit, after_fit, start_s, end_s, weight_shift_n);
    baseline.thermal = thermal;
    let drift_n = baseline.drift_n;
    let excess = (drift_n * drift_n - plain.shift_u_n().unwrap_or(0.0).powi(2)).max(0.0).sqrt();
    // With a zero on one side only, whatever slope its stretch could hide goes on through the burst, within reason.
    let one_sided = match (before_fit, after_fit) {
        (Some(q), None) | (None, Some(q)) => (0.5 * q.slope_u * burst_s).min(ONE_SIDED_SHARE * burn.peak.abs()),
        _ => 0.0,
    };
    // A straight line between the ends would be off by this in the mean; how much of that the choice of the bent course leaves open
    // nobody measured: a third.
    let course = match thermal {
        Some(warm) => {
            let length = end_s - start_s;
            let mean = (0..=50).map(|k| warm.at(length * f64::from(k) / 50.0)).sum::<f64>() / 51.0;
            (mean - 0.5 * (warm.level + warm.at(length))).abs() / 3.0
        }
        None => excess / 12f64.sqrt(),
    };
    let drift_u_n = course.hypot(one_sided);
    let shift_mass_kg = match (downward == 0.0, shift) {
        (false, Some(shift)) if shift * downward > 0.0 => {
            Some((shift.abs() / record.gravity.value_m_s2, shift_u / record.gravity.value_m_s2))
        }
        _ => None,
    };

    let pad = ((0.4 * burst_s).max(0.5) / record.interval_s()).ceil() as usize;
    let lower = before.as_ref().map_or(burn.start, |r| r.start);
    let upper = after.as_ref().map_or(burst.end, |r| r.end);
    let window =
        burst.start.saturating_sub(pad).max(lower.min(burst.start))..(burst.end + pad).min(upper.max(burst.end));
    let thrust_n = subtract(record, &baseline, &window, &burst);
    Zero { baseline, burst, thrust_n, window, shift_mass_kg, wrong_way, drift_n, drift_u_n }
}

/// By how much the zero steps for known reasons: not at all on a horizontal stand, by the propellant's weight on a vertical one where
/// it was weighed.
fn known_step(record: &Record<'_>, downward: f64) -> Option<f64> {
    match (downward == 0.0, record.inputs.run.motor.propellant_mass_kg) {
        (true, _) => Some(0.0),
        (false, Some(mass)) => Some(downward * mass.value * record.gravity.value_m_s2),
        (false, None) => None,
    }
}

/// By how much the zero steps beside a steady drift, and its standard uncertainty: `None` where no drift is seen, so that the plain difference
/// says it best.
///
/// The drift through the burn is what the slopes on both sides make of it; half of what these differ by, and of what they may differ by
/// unseen, counts as the standard uncertainty of the drift between them.
fn weight_step(record: &Record<'_>, before: &Range<usize>, after: &Range<usize>, at_s: [f64; 2]) -> Option<(f64, f64)> {
    let (t, f) = (&record.time_s, &record.force_n);
    let slopes = [quiet::slope(t, f, before.clone())?, quiet::slope(t, f, after.clone())?];
    let length = at_s[1] - at_s[0];
    let [(b, b_u), (a, a_u)] = slopes;
    let bend = 0.5 * length * (a - b).hypot(a_u.hypot(b_u));
    match quiet::fit_together(t, f, [before.clone(), after.clone()], at_s, None) {
        Some(one) => {
            let q = one.fits[0];
            (q.slope_per_s.abs() >= SLOPE_SEEN * q.slope_u).then(|| (one.step, one.step_u.hypot(bend)))
        }
        None => {
            let (b, a) = (quiet::fit(t, f, before.clone(), at_s[0])?, quiet::fit(t, f, after.clone(), at_s[1])?);
            let drift = 0.5 * (b.slope_per_s + a.slope_per_s) * length;
            Some((a.level - b.level - drift, a.level_u.hypot(b.level_u).hypot(bend)))
        }
    }
}

/// Zero at both ends of the burst: one line through both quiet stretches where that explains them, else a line each.
fn levels(
    record: &Record<'_>,
    before: &Option<Range<usize>>,
    after: &Option<Range<usize>>,
    at_s: [f64; 2],
    downward: f64,
) -> (Option<QuietFit>, Option<QuietFit>) {
    let (t, f) = (&record.time_s, &record.force_n);
    let step = known_step(record, downward);
    match (before, after) {
        (Some(b_range), Some(a_range)) => {
            match quiet::fit_together(t, f, [b_range.clone(), a_range.clone()], at_s, step) {
                Some(Together { fits: [b, a], .. })
                    if step.is_none() && b.slope_per_s.abs() < SLOPE_SEEN * b.slope_u =>
                {
                    // No drift to be seen: the weight that left is the difference of two plain means, and what drift may hide in it counts.
                    let plain = |r: &Range<usize>, q: QuietFit, at: f64, hidden: f64| {
                        let n = r.len().max(1) as f64;
                        let mean = f[r.clone()].iter().sum::<f64>() / n;
                        let noise = (q.low_frequency_density / q.duration_s.max(f64::MIN_POSITIVE)).sqrt();
                        QuietFit {
                            at_s: at,
                            level: mean,
                            slope_per_s: 0.0,
                            level_u: noise.hypot(hidden),
                            level_covariance: 0.0,
                            ..q
                        }
                    };
                    let hidden = HIDDEN_DRIFT * b.slope_u * (at_s[1] - at_s[0]);
                    (Some(plain(b_range, b, at_s[0], hidden)), Some(plain(a_range, a, at_s[1], hidden)))
                }
                Some(Together { fits: [b, a], .. }) => (Some(b), Some(a)),
                None => (quiet::fit(t, f, b_range.clone(), at_s[0]), quiet::fit(t, f, a_range.clone(), at_s[1])),
            }
        }
        // A zero known on one side is carried through the burst: only a plain slope is carried with it.
        (b, a) => {
            let alone = |r: &Option<Range<usize>>, at: f64| {
                r.clone().and_then(|r| quiet::fit_with(t, f, r, at, quiet::SLOPE_EVIDENCE_BEYOND))
            };
            (alone(b, at_s[0]), alone(a, at_s[1]))
        }
    }
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
    let (sum, weight) = pool.iter().flatten().fold((0.0, 0.0), |(s, w): (f64, f64), q: &QuietFit| {
        (s + q.sample_sd.powi(2) * q.samples as f64, w + q.samples as f64)
    });
    if weight > 0.0 { (sum / weight).sqrt() } else { 0.0 }
}

/// Two-sided low-frequency density of the quiet noise, N² s.
pub fn noise_density(zero: &Zero, interval_s: f64) -> f64 {
    let quiet = [zero.baseline.before, zero.baseline.after];
    quiet.iter().flatten().map(|q| q.low_frequency_density).fold(sample_noise(zero).powi(2) * interval_s, f64::max)
}
