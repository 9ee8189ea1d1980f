//! Readings cut at the limit of the converter or the amplifier, recognised by their flat top.
//!
//! A flat top alone proves nothing: a slow log with coarse steps repeats its highest reading on a true plateau. It is clipping
//! where equal readings are too improbable for the roughness of the signal around them, or where they stand at a converter's
//! end code.

use crate::condition::median::median;
use std::ops::Range;

/// Readings that stand at a limit.
#[derive(Debug, Clone, PartialEq)]
pub struct Clipping {
    /// The reading at which the signal was cut, in the channel's unit.
    pub limit: f64,
    /// The limit is the highest reading of the record (else the lowest).
    pub top: bool,
    /// Stretches of readings at the limit, indices into the values, ascending.
    pub ranges: Vec<Range<usize>>,
    /// Readings at the limit in all.
    pub count: usize,
}

impl Clipping {
    /// Readings at the limit among the values `from .. to`.
    pub fn count_within(&self, from: usize, to: usize) -> usize {
        self.ranges.iter().map(|range| range.end.min(to).saturating_sub(range.start.max(from))).sum()
    }

    /// Whether the limit lies far from the level that the record mostly keeps: then what lies at it is cut thrust and no quiet record. A
    /// converter that cannot read below nil may well cut the quiet record itself.
    pub fn is_away_from_rest(&self, values: &[f64]) -> bool {
        let finite: Vec<f64> = values.iter().copied().filter(|v| v.is_finite()).collect();
        let (low, high) = finite.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(*v), h.max(*v)));
        (self.limit - median(finite)).abs() > FAR_FROM_REST * (high - low)
    }
}

/// Share of the record's range from its median to a limit that it does not rest on.
const FAR_FROM_REST: f64 = 0.3;

/// Fewer equal readings in a row prove nothing.
const SHORTEST_RUN: usize = 3;
/// Natural logarithm of the odds against chance that are asked for: about one in 160 000.
const ODDS: f64 = 12.0;
/// The roughness must exceed the step of the readings by this, or equal neighbours are ordinary.
const ROUGH_STEPS: f64 = 2.0;
/// Readings around a flat top that tell how rough the signal is.
const AROUND: usize = 64;
/// A thrust plateau wanders by at least this share of its height (common practice, no source).
const WANDER: f64 = 1e-3;
/// Share of the record's range that a limit lies away from the readings at rest.
const AWAY_FROM_REST: f64 = 0.05;
/// Share of the record's range above which a reading belongs to the burst.
const IN_BURST: f64 = 0.3;

/// Looks for clipping at the top and at the bottom of a record; at most one entry each. NaN readings are passed over.
pub fn find_clipping(values: &[f64]) -> Vec<Clipping> {
    let mut found = Vec::new();
    found.extend(at_top(values, 1.0));
    found.extend(at_top(values, -1.0));
    found
}

/// Highest reading of `sign * values`.
fn at_top(values: &[f64], sign: f64) -> Option<Clipping> {
    let value = |index: usize| sign * values[index];
    let limit = (0..values.len()).map(value).filter(|v| v.is_finite()).fold(f64::NEG_INFINITY, f64::max);
    let finite: Vec<f64> = values.iter().copied().filter(|v| v.is_finite()).map(|v| sign * v).collect();
    if finite.len() < 8 {
        return None;
    }
    let step = smallest_step(values);
    let lowest = finite.iter().copied().fold(f64::INFINITY, f64::min);
    // The stand at rest repeats its reading for long, and may do so at another level after the burn. That is no limit: a limit
    // lies well away from where the record starts and ends.
    let ends = (finite.len() / 50).max(5);
    let at_rest = median(finite[..ends].to_vec()).max(median(finite[finite.len() - ends..].to_vec()));
    let height = limit - at_rest;
    if !(height > AWAY_FROM_REST * (limit - lowest) && step > 0.0) {
        return None;
    }
    let exact = runs_above(values, sign, limit);
    if let Some(clipping) = judge(values, sign, limit, &exact, step, height) {
        return Some(clipping);
    }
    // The amplifier's own noise on its limit: a narrow band in place of one reading.
    let band = in_noise_band(values, sign, limit, step, height)?;
    Some(clipping(sign, limit, band))
}

fn clipping(sign: f64, limit: f64, ranges: Vec<Range<usize>>) -> Clipping {
    let count = ranges.iter().map(|range| range.len()).sum();
    Clipping { limit: sign * limit, top: sign > 0.0, ranges, count }
}

/// Runs of readings at or above a level.
fn runs_above(values: &[f64], sign: f64, level: f64) -> Vec<Range<usize>> {
    let mut runs: Vec<Range<usize>> = Vec::new();
    for (index, _) in values.iter().enumerate().filter(|(_, value)| sign * **value >= level) {
        match runs.last_mut() {
            Some(run) if run.end == index => run.end += 1,
            _ => runs.push(index..index + 1),
        }
    }
    runs
}

/// Smallest difference between neighbours that occurs.
fn smallest_step(values: &[f64]) -> f64 {
    let least = values
        .windows(2)
        .map(|pair| ((pair[1] - pair[0]).abs(), 1e-9 * pair[0].abs().max(pair[1].abs())))
        .filter(|(difference, rounding)| difference > rounding)
        .fold(f64::INFINITY, |least, (difference, _)| least.min(difference));
    if least.is_finite() { least } else { 0.0 }
}

/// End codes of converters of the usual widths, one-sided and two-sided.
fn is_end_code(value: f64) -> bool {
    [10, 12, 13, 14, 15, 16, 17, 18, 20, 23, 24, 31].iter().any(|&bits| {
        let full = f64::from(bits).exp2();
        value == full - 1.0 || value == -full
    })
}

fn judge(values: &[f64], sign: f64, limit: f64, runs: &[Range<usize>], step: f64, height: f64) -> Option<Clipping> {
    let longest = runs.iter().map(|run| run.len()).max()?;
    if longest < SHORTEST_RUN {
        return None;
    }
    let abrupt = enters_abruptly(values, sign, limit, runs, step);
    let whole = values.iter().filter(|v| v.is_finite()).all(|v| v.fract() == 0.0);
    if whole && is_end_code(sign * limit) && (abrupt || longest >= 2 * SHORTEST_RUN) {
        return Some(clipping(sign, limit, runs.to_vec()));
    }
    if !abrupt {
        return None;
    }
    let noise = roughness(values, sign, limit, runs, height);
    let wander = if longest_equal_elsewhere(values, sign, limit) * 2 < longest { WANDER * height } else { 0.0 };
    let rough = noise.max(wander);
    let improbable = rough >= ROUGH_STEPS * step && (longest - 1) as f64 * (rough / step).ln() > ODDS;
    improbable.then(|| clipping(sign, limit, runs.to_vec()))
}

/// The readings next to the flat top lie well below it. A true plateau in coarse steps is reached one step at a time.
fn enters_abruptly(values: &[f64], sign: f64, limit: f64, runs: &[Range<usize>], step: f64) -> bool {
    let mut depths: Vec<f64> = Vec::new();
    for run in runs.iter().filter(|run| run.len() >= SHORTEST_RUN) {
        depths.extend(run.start.checked_sub(1).map(|index| limit - sign * values[index]));
        depths.extend(values.get(run.end).map(|value| limit - sign * value));
    }
    depths.retain(|depth| depth.is_finite());
    if depths.is_empty() {
        return false;
    }
    depths.sort_by(f64::total_cmp);
    depths[depths.len() / 2] >= ROUGH_STEPS * step
}

/// Noise of the burst around the flat top, from second differences of readings that do not touch it (median of the absolute
/// value, 0.6745 * sqrt(6) of the standard deviation for white noise).
fn roughness(values: &[f64], sign: f64, limit: f64, runs: &[Range<usize>], height: f64) -> f64 {
    let (Some(first), Some(last)) = (runs.first(), runs.last()) else { return 0.0 };
    let window = &values[first.start.saturating_sub(AROUND)..(last.end + AROUND).min(values.len())];
    let floor = limit - (1.0 - IN_BURST) * height;
    let mut differences: Vec<f64> = window
        .windows(3)
        .filter(|three| three.iter().all(|v| (floor..limit).contains(&(sign * v))))
        .map(|three| (three[0] - 2.0 * three[1] + three[2]).abs())
        .collect();
    if differences.len() < 5 {
        return 0.0;
    }
    let middle = differences.len() / 2;
    *differences.select_nth_unstable_by(middle, f64::total_cmp).1 / (0.6745 * 6.0f64.sqrt())
}

/// Longest run of equal readings away from the limit: what stillness this record knows.
fn longest_equal_elsewhere(values: &[f64], sign: f64, limit: f64) -> usize {
    let (mut longest, mut length) = (1, 1);
    for pair in values.windows(2) {
        length = if pair[0] == pair[1] && sign * pair[0] != limit { length + 1 } else { 1 };
        longest = longest.max(length);
    }
    longest
}

/// Runs in a band of a thousandth of the height below the limit that are far quieter than the burst around them.
fn in_noise_band(values: &[f64], sign: f64, limit: f64, step: f64, height: f64) -> Option<Vec<Range<usize>>> {
    const LONG_ENOUGH: usize = 10;
    const QUIETER: f64 = 8.0;
    let width = WANDER * height;
    let mut runs = runs_above(values, sign, limit - width);
    let longest = runs.iter().max_by_key(|run| run.len())?.clone();
    if longest.len() < LONG_ENOUGH || !enters_abruptly(values, sign, limit, &runs, width) {
        return None;
    }
    let noise = roughness(values, sign, limit - width, &runs, height);
    let inside = &values[longest];
    let mean = inside.iter().sum::<f64>() / inside.len() as f64;
    let variance = inside.iter().map(|value| (value - mean).powi(2)).sum::<f64>() / (inside.len() - 1) as f64;
    if noise < QUIETER * variance.sqrt().max(step / 12.0f64.sqrt()) || noise < 2.0 * width {
        return None;
    }
    runs.retain(|run| run.len() >= SHORTEST_RUN);
    Some(runs)
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, Normal};

    /// A burn of 200 samples with 1 % noise over a quiet record, in steps of `step`.
    fn burn(step: f64, noise: f64, seed: u64) -> Vec<f64> {
        let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        let normal = Normal::new(0.0, noise).unwrap();
        (0..600)
            .map(|index| {
                let phase = (f64::from(index) - 200.0) / 200.0;
                let thrust = if (0.0..1.0).contains(&phase) {
                    1000.0 * (phase * std::f64::consts::PI).sin().powf(0.3)
                } else {
                    0.0
                };
                ((thrust + normal.sample(&mut random)) / step).round() * step
            })
            .collect()
    }

    #[test]
    fn a_cut_top_is_found_with_its_ranges() {
        for seed in 0..20 {
            let values: Vec<f64> = burn(0.1, 10.0, seed).into_iter().map(|v| v.min(850.0)).collect();
            let found = find_clipping(&values);
            assert_eq!(found.len(), 1, "seed {seed}");
            assert_eq!((found[0].limit, found[0].top), (850.0, true));
            assert_eq!(found[0].count, values.iter().filter(|v| **v == 850.0).count());
            assert_eq!(found[0].count_within(0, 200), 0);
        }
    }

    #[test]
    fn a_cut_bottom_is_found() {
        let values: Vec<f64> = burn(0.1, 10.0, 3).into_iter().map(|v| (-v).max(-850.0)).collect();
        let found = find_clipping(&values);
        assert_eq!((found.len(), found[0].limit, found[0].top), (1, -850.0, false));
    }

    #[test]
    fn whole_records_are_not_clipped() {
        for seed in 0..50 {
            for (step, noise) in [
                (0.1, 10.0),
                (1.0, 10.0),
                (10.0, 10.0),
                (10.0, 1.0),
                (1.0, 0.1),
                (0.1, 0.001),
                (0.01, 1e-4),
                (20.0, 0.01),
                (0.01, 0.3),
            ] {
                assert_eq!(find_clipping(&burn(step, noise, seed)), vec![], "step {step} noise {noise} seed {seed}");
            }
        }
    }

    #[test]
    fn a_still_stand_that_grew_lighter_is_not_clipped_at_the_bottom() {
        let values: Vec<f64> =
            burn(0.1, 0.001, 2).into_iter().enumerate().map(|(at, v)| if at < 300 { v + 4.0 } else { v }).collect();
        assert_eq!(find_clipping(&values), vec![]);
    }

    #[test]
    fn a_still_weight_is_not_clipped() {
        // A weight put down at once on an indicator that shows the same figure for seconds.
        let mut values = vec![0.0; 300];
        values[100..200].fill(98.1);
        values[50] = 0.01;
        assert_eq!(find_clipping(&values), vec![]);
    }

    #[test]
    fn converter_end_codes_count_even_without_noise() {
        let values: Vec<f64> = burn(1.0, 0.1, 1).into_iter().map(|v| (v * 1.2).round().min(1023.0)).collect();
        assert_eq!(find_clipping(&values).first().map(|found| found.limit), Some(1023.0));
    }

    #[test]
    fn an_amplifier_at_its_limit_still_has_a_little_noise() {
        let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(9);
        let small = Normal::new(0.0, 0.05).unwrap();
        let values: Vec<f64> = burn(0.001, 20.0, 5)
            .into_iter()
            .map(|v| if v > 800.0 { 800.0 + small.sample(&mut random) } else { v })
            .collect();
        let found = find_clipping(&values);
        assert_eq!(found.len(), 1);
        assert!((found[0].limit - 800.0).abs() < 0.5);
    }

    #[test]
    fn short_and_empty_input() {
        assert_eq!(find_clipping(&[]), vec![]);
        assert_eq!(find_clipping(&[f64::NAN; 20]), vec![]);
        assert_eq!(find_clipping(&[1.0; 20]), vec![]);
    }
}
