//! Every stretch of the record that rises out of the quiet, found on short block means.

use crate::condition::median::median;
use std::ops::Range;

/// A stretch that is not quiet. Indices are samples.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Event {
    pub start: usize,
    /// One past the last sample.
    pub end: usize,
    /// The record starts inside it.
    pub cut_at_start: bool,
    /// The record ends inside it.
    pub cut_at_end: bool,
    /// Level before and after, in the unit of the data.
    pub level_before: f64,
    pub level_after: f64,
    /// Integral over the straight line between the two levels.
    pub impulse: f64,
    /// Largest departure from that line, with its sign, of block means.
    pub peak: f64,
}

/// What is known before the search.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expectation {
    /// By how much the zero may move across a burst whose own peak is 1, beside `shift`.
    pub relative_shift: f64,
    /// By how much the zero is expected to move (weight of the propellant), same unit as the data.
    pub shift: f64,
}

/// The record as quiet stretches with events between them, in time order.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Segmentation {
    pub events: Vec<Event>,
    pub quiet: Vec<Range<usize>>,
    /// Standard deviation of a block mean in the quiet record.
    pub block_noise: f64,
    pub block: usize,
}

/// Blocks of about this length are averaged before the search, s: short against any rise that matters to the search,
/// long enough to take a fast converter's noise down.
const BLOCK_S: f64 = 0.01;
/// The signal is quiet again when it has stayed level for this long, s.
const QUIET_S: f64 = 0.3;
/// How far out of the noise a block must be to start an event, in standard deviations.
const START_SIGMAS: f64 = 8.0;

struct Blocks {
    value: Vec<f64>,
    /// Blocks that hold a reading cut by the converter or the amplifier: level for another reason than rest.
    cut: Vec<bool>,
    size: usize,
    samples: usize,
}

impl Blocks {
    fn new(data: &[f64], interval_s: f64, cut: &[Range<usize>]) -> Self {
        let size = ((BLOCK_S / interval_s.max(1e-12)).round() as usize).clamp(1, data.len().max(1));
        let mean = |c: &[f64]| c.iter().sum::<f64>() / c.len() as f64;
        let value: Vec<f64> = data.chunks(size).map(mean).collect();
        let mut in_cut = vec![false; value.len()];
        for range in cut.iter().filter(|r| !r.is_empty()) {
            let last = ((range.end - 1) / size).min(in_cut.len().saturating_sub(1));
            in_cut[(range.start / size).min(last)..=last].fill(true);
        }
        Blocks { value, cut: in_cut, size, samples: data.len() }
    }

    fn len(&self) -> usize {
        self.value.len()
    }

    fn sample(&self, block: usize) -> usize {
        (block * self.size).min(self.samples)
    }

    fn mean(&self, range: Range<usize>) -> f64 {
        let piece = &self.value[range];
        piece.iter().sum::<f64>() / piece.len().max(1) as f64
    }
}

/// Noise of the block means: windows of the record are ranked by the scatter of second differences, which neither a level
/// nor a slope disturbs, and a low rank is taken, since some of any record is quiet.
fn block_noise(blocks: &Blocks, window: usize, range: f64) -> f64 {
    let v = &blocks.value;
    let second: Vec<f64> = v
        .windows(3)
        .zip(blocks.cut.windows(3))
        .filter(|(_, cut)| !cut.contains(&true))
        .map(|(w, _)| (w[0] - 2.0 * w[1] + w[2]).abs())
        .collect();
    let mut scatter: Vec<f64> = second
        .chunks(window.max(5))
        .filter(|c| c.len() >= 4)
        .map(|c| median(c.to_vec()) / 0.6745 / 6f64.sqrt())
        .collect();
    let first = scatter.first().copied().unwrap_or(0.0);
    scatter.sort_unstable_by(f64::total_cmp);
    let low = scatter.get(scatter.len() / 5).copied().unwrap_or(0.0);
    // The first window is quiet in most records; where it is not much noisier than the quietest, it says it best.
    let noise = if first > low && first < 4.0 * low { first } else { low };
    // Coarse counts can repeat until no scatter is left; their step is the least the noise can be.
    let step = v.windows(2).map(|w| (w[1] - w[0]).abs()).filter(|d| *d > 0.0).fold(f64::INFINITY, f64::min);
    let floor = if step.is_finite() { (step / 12f64.sqrt()).min(1e-3 * range) } else { 0.0 };
    noise.max(floor).max(1e-6 * range)
}

/// Finds the events of a record with samples some `interval_s` apart. `cut`: samples at a limit of the converter or the amplifier, which
/// are level without being at rest.
pub fn find(
    time_s: &[f64],
    data: &[f64],
    interval_s: f64,
    expectation: Expectation,
    cut: &[Range<usize>],
) -> Segmentation {
    let blocks = Blocks::new(data, interval_s, cut);
    let n = blocks.len();
    if n < 4 {
        return Segmentation::default();
    }
    let block_s = interval_s * blocks.size as f64;
    let (lowest, highest) =
        blocks.value.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(*v), h.max(*v)));
    let range = highest - lowest;
    if range <= 0.0 {
        let quiet = std::iter::once(0..data.len()).collect();
        return Segmentation { quiet, block: blocks.size, ..Segmentation::default() };
    }
    let quiet_blocks = ((QUIET_S / block_s).ceil() as usize).clamp(4, 60).min(n / 2).max(2);
    let noise = block_noise(&blocks, quiet_blocks, range);
    let mut finder = Finder { blocks: &blocks, noise, quiet_blocks, threshold: START_SIGMAS * noise, expectation };
    finder.threshold = finder.threshold.max(0.003 * range);
    let (mut events, quiet) = finder.scan();
    for event in &mut events {
        measure(event, time_s, data, blocks.size);
    }
    Segmentation { events, quiet, block_noise: noise, block: blocks.size }
}

struct Finder<'a> {
    blocks: &'a Blocks,
    noise: f64,
    quiet_blocks: usize,
    threshold: f64,
    expectation: Expectation,
}

impl Finder<'_> {
    /// Whether the blocks of `range` lie level within the noise, allowing `tolerance` of steady change from the first half
    /// to the second.
    fn is_level(&self, range: Range<usize>, tolerance: f64) -> bool {
        if self.blocks.cut[range.clone()].contains(&true) {
            return false;
        }
        let middle = (range.start + range.end) / 2;
        let (first, second) = (self.blocks.mean(range.start..middle), self.blocks.mean(middle..range.end));
        let half = ((range.end - range.start) as f64 / 2.0).max(1.0);
        let change = (second - first).abs();
        let level = (first + second) / 2.0;
        let allowed = tolerance + 4.0 * self.noise * (2.0 / half).sqrt();
        change <= allowed
            && self.blocks.value[range].iter().all(|v| (v - level).abs() <= 6.0 * self.noise + 2.0 * allowed)
    }

    fn scan(&self) -> (Vec<Event>, Vec<Range<usize>>) {
        let (b, n, q) = (self.blocks, self.blocks.len(), self.quiet_blocks);
        let mut events: Vec<Event> = Vec::new();
        let mut quiet: Vec<Range<usize>> = Vec::new();
        let starts_quiet = self.first_quiet();
        let mut base = match starts_quiet {
            Some(level) => level,
            // The record begins inside a burst: the quietest level that can be had is the one it ends on.
            None => median(b.value[n - q..].to_vec()),
        };
        let mut i = 0;
        let mut open = starts_quiet.is_none().then_some((0usize, true));
        let mut quiet_from = 0;
        let mut seen = 0.0;
        let mut largest = 0.0f64;
        while i < n {
            match open {
                None => {
                    let departure = (b.value[i] - base).abs();
                    let next = b.value.get(i + 1).map_or(0.0, |v| (v - base).abs());
                    if departure > self.threshold && (next > self.threshold || departure > 3.0 * self.threshold) {
                        let mut start = i;
                        while start > quiet_from
                            && (b.value[start - 1] - base).abs() > 2.5 * self.noise
                            && i - start < 4 * q
                        {
                            start -= 1;
                        }
                        if start > quiet_from {
                            quiet.push(b.sample(quiet_from)..b.sample(start));
                        }
                        open = Some((start, start == 0));
                        largest = 0.0;
                        continue;
                    }
                    // A slowly wandering zero is followed; the start of a slow burst is not, since it departs faster.
                    seen += 1.0;
                    base += (b.value[i] - base) / f64::min(seen, 6.0 * q as f64);
                }
                Some((start, cut)) => {
                    largest = largest.max((b.value[i] - base).abs());
                    let window = (i + 1).saturating_sub(q)..i + 1;
                    let level = b.mean(window.clone());
                    let near = 6.0 * self.noise
                        + self.expectation.relative_shift * largest
                        + 1.3 * self.expectation.shift.abs();
                    if window.len() == q
                        && window.start > start
                        && (level - base).abs() <= near
                        && self.is_level(window.clone(), 0.0006 * largest)
                    {
                        events.push(self.event(start, window.start, cut, false, base, level));
                        open = None;
                        base = level;
                        seen = q as f64;
                        quiet_from = window.start;
                    }
                }
            }
            i += 1;
        }
        match open {
            None => {
                if quiet_from < n {
                    quiet.push(b.sample(quiet_from)..b.samples);
                }
            }
            Some((start, cut)) => match self.late_level(start, largest) {
                Some(from) => {
                    let level = b.mean(from..n);
                    events.push(self.event(start, from, cut, false, base, level));
                    quiet.push(b.sample(from)..b.samples);
                }
                None => events.push(self.event(start, n, cut, true, base, base)),
            },
        }
        (events, quiet)
    }

    /// Level of the first quiet stretch if the record starts quiet.
    fn first_quiet(&self) -> Option<f64> {
        let b = self.blocks;
        for length in [self.quiet_blocks, self.quiet_blocks / 2, self.quiet_blocks / 4] {
            if length >= 3 && length <= b.len() && self.is_level(0..length, 0.0) {
                return Some(b.mean(0..length));
            }
        }
        None
    }

    /// Where the record ends level, though far from the level it started on: the first block of that level stretch.
    fn late_level(&self, start: usize, largest: f64) -> Option<usize> {
        let (b, n) = (self.blocks, self.blocks.len());
        let least = (2 * self.quiet_blocks).min((n - start) / 2).max(3);
        if n < start + least + 2 || !self.is_level(n - least..n, 0.001 * largest) {
            return None;
        }
        let level = b.mean(n - least..n);
        // What still moves by much of its own height over a good part of the burst is a tail and no new zero.
        let long = ((n - start) / 6).max(least);
        let base = b.value[..start.max(1)].last().copied().unwrap_or(0.0);
        let half = long / 2;
        let change = b.mean(n - half..n) - b.mean(n - 2 * half..n - half);
        let allowed = 0.05 * (level - base).abs() + 4.0 * self.noise * (2.0 / half as f64).sqrt();
        if change.abs() > allowed && change * (level - base) < 0.0 {
            return None;
        }
        // A level as high as much of the burst is thrust that lasts to the end of the record, not a new zero.
        if (level - base).abs() > 0.25 * largest {
            return None;
        }
        let mut from = n - least;
        let near = 5.0 * self.noise + 0.002 * largest;
        while from > start + 1 && (b.value[from - 1] - level).abs() <= near {
            from -= 1;
        }
        Some(from)
    }

    fn event(&self, start: usize, end: usize, cut_at_start: bool, cut_at_end: bool, before: f64, after: f64) -> Event {
        Event {
            start: self.blocks.sample(start),
            end: self.blocks.sample(end),
            cut_at_start,
            cut_at_end,
            level_before: before,
            level_after: after,
            impulse: 0.0,
            peak: 0.0,
        }
    }
}

/// Impulse and peak of an event over the straight line between its two levels.
pub fn measure(event: &mut Event, time_s: &[f64], data: &[f64], block: usize) {
    let (t, y) = (&time_s[event.start..event.end], &data[event.start..event.end]);
    let Some((&first, &last)) = t.first().zip(t.last()) else { return };
    let span = (last - first).max(f64::MIN_POSITIVE);
    let line = |t: f64| event.level_before + (event.level_after - event.level_before) * (t - first) / span;
    event.impulse = t
        .windows(2)
        .zip(y.windows(2))
        .map(|(t, y)| (t[1] - t[0]) * (y[0] + y[1] - line(t[0]) - line(t[1])) / 2.0)
        .sum();
    for (t, y) in t.chunks(block.max(1)).zip(y.chunks(block.max(1))) {
        let n = t.len() as f64;
        let departure = y.iter().sum::<f64>() / n - line(t.iter().sum::<f64>() / n);
        if departure.abs() > event.peak.abs() {
            event.peak = departure;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    const PLAIN: Expectation = Expectation { relative_shift: 0.02, shift: 0.0 };

    fn record(rate_hz: f64, duration_s: f64, noise: f64, force: impl Fn(f64) -> f64) -> (Vec<f64>, Vec<f64>) {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(5);
        let n = (rate_hz * duration_s) as usize;
        let t: Vec<f64> = (0..n).map(|i| i as f64 / rate_hz).collect();
        let y = t
            .iter()
            .map(|&t| {
                let z: f64 = StandardNormal.sample(&mut rng);
                force(t) + noise * z
            })
            .collect();
        (t, y)
    }

    fn boxcar(t: f64, from: f64, to: f64, height: f64) -> f64 {
        if t >= from && t < to { height } else { 0.0 }
    }

    #[test]
    fn a_burn_and_a_hard_knock_after_it_are_two_events_and_the_burn_has_the_larger_impulse() {
        for rate in [10.0, 80.0, 1000.0, 10_000.0] {
            let (t, y) = record(rate, 20.0, 0.5, |t| boxcar(t, 5.0, 7.5, 100.0) + boxcar(t, 13.0, 13.11, 400.0));
            let s = find(&t, &y, 1.0 / rate, PLAIN, &[]);
            assert_eq!(s.events.len(), 2, "{rate} Hz: {:?}", s.events);
            let burn = s.events[0];
            assert!((burn.impulse - 250.0).abs() < 12.0, "{burn:?}");
            assert!((t[burn.start] - 5.0).abs() < 0.25 && (t[burn.end - 1] - 7.5).abs() < 0.35, "{burn:?}");
            assert!(burn.impulse > s.events[1].impulse && s.events[1].peak > burn.peak);
            assert_eq!(s.quiet.len(), 3);
        }
    }

    #[test]
    fn a_new_zero_after_the_burn_ends_it() {
        let (t, y) = record(200.0, 15.0, 0.3, |t| boxcar(t, 3.0, 6.0, 200.0) - boxcar(t, 6.0, 99.0, 3.0));
        let s = find(&t, &y, 0.005, PLAIN, &[]);
        assert_eq!(s.events.len(), 1);
        assert!((s.events[0].level_after + 3.0).abs() < 0.2, "{:?}", s.events);
        assert!(!s.events[0].cut_at_end);
    }

    #[test]
    fn a_tail_that_outlasts_the_record_is_told() {
        let (t, y) = record(500.0, 4.0, 0.5, |t| if t < 0.5 { 0.0 } else { 150.0 * (-(t - 0.5) / 1.5).exp() });
        let s = find(&t, &y, 0.002, PLAIN, &[]);
        assert_eq!(s.events.len(), 1);
        assert!(s.events[0].cut_at_end && !s.events[0].cut_at_start);
    }

    #[test]
    fn a_long_tail_that_is_nearly_level_at_the_end_is_no_new_zero() {
        let tail = |t: f64| {
            if t < 0.6 {
                0.0
            } else if t < 6.0 {
                150.0
            } else {
                120.0 * (-(t - 6.0) / 4.0).exp()
            }
        };
        let (t, y) = record(460.0, 14.2, 3.0, tail);
        let s = find(&t, &y, 1.0 / 460.0, PLAIN, &[]);
        assert!(s.events.last().is_some_and(|e| e.cut_at_end), "{:?}", s.events);
    }

    #[test]
    fn a_flat_plateau_is_not_taken_for_quiet() {
        let (t, y) = record(1000.0, 12.0, 0.05, |t| boxcar(t, 2.0, 3.0, 300.0) + boxcar(t, 3.0, 9.0, 60.0));
        let s = find(&t, &y, 0.001, PLAIN, &[]);
        assert_eq!(s.events.len(), 1, "{:?}", s.events);
        assert!((s.events[0].impulse - 660.0).abs() < 2.0);
    }

    #[test]
    fn a_dead_flat_record_has_no_event() {
        let t: Vec<f64> = (0..100).map(|i| i as f64 * 0.1).collect();
        assert!(find(&t, &vec![8123.0; 100], 0.1, PLAIN, &[]).events.is_empty());
    }

    #[test]
    fn noise_alone_has_no_event() {
        let (t, y) = record(80.0, 60.0, 1.0, |_| 0.0);
        assert!(find(&t, &y, 0.0125, PLAIN, &[]).events.is_empty());
    }

    #[test]
    fn a_cut_plateau_is_no_quiet_record() {
        // 2 s of rest with noise, 3 s cut at 70, 2 s of rest.
        let t: Vec<f64> = (0..700).map(|i| f64::from(i) * 0.01).collect();
        use rand::SeedableRng;
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(5);
        let mut noise =
            || -> f64 { 0.3 * rand_distr::Distribution::<f64>::sample(&rand_distr::StandardNormal, &mut rng) };
        let y: Vec<f64> = (0..700).map(|i| if (200..500).contains(&i) { 70.0 } else { noise() }).collect();
        let told = std::iter::once(200..500).collect::<Vec<_>>();
        let s = find(&t, &y, 0.01, PLAIN, &told);
        assert_eq!(s.events.len(), 1, "{:?}", s.events);
        assert!(!s.events[0].cut_at_end && s.events[0].end >= 500 && s.events[0].end < 505, "{:?}", s.events);
        assert!(s.block_noise > 0.1, "{}", s.block_noise);
    }
}
