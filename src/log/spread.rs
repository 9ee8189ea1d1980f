//! Stamps that repeat: a coarse clock, whose samples are spread, told from records written twice, which are dropped.

use super::stamps::sampled_steps;

/// What became of repeated stamps.
#[derive(Debug, Default, PartialEq)]
pub struct Repeats {
    /// Records written twice (indices of the second copies).
    pub duplicates: Vec<usize>,
    /// Records whose stamp was moved off one they shared.
    pub spread: usize,
    /// The clock ticks too coarsely for the rate of the samples.
    pub coarse: bool,
}

/// A share of repeated stamps above which the clock, not the writing, repeats: a terminal seldom writes one record in fifty twice.
const COARSE_SHARE: f64 = 0.02;

/// Finds duplicates and spreads shared stamps. `time` does not fall; `same_line[i]`: record i is written exactly as record i-1;
/// `unchanged(i)`: its readings are those of record i-1; `place`: a number that counts records, dropped ones included;
/// `step`: the usual step of stamps that move. Duplicates keep their stamp and are for the caller to remove.
pub fn resolve_repeats(
    time: &mut [f64],
    same_line: &[bool],
    unchanged: &dyn Fn(usize) -> bool,
    place: &[f64],
    step: f64,
) -> Repeats {
    let mut out = Repeats::default();
    let count = time.len();
    let repeats: Vec<usize> = (1..count).filter(|&index| time[index] == time[index - 1]).collect();
    if repeats.is_empty() {
        return out;
    }
    let identical = repeats.iter().filter(|&&index| same_line[index]).count();
    let fresh = (1..count).filter(|&index| time[index] != time[index - 1]);
    let (still, moving) =
        fresh.fold((0usize, 0usize), |(still, all), index| (still + usize::from(unchanged(index)), all + 1));
    // Everything written twice: the copies agree although the readings change from stamp to stamp.
    let twice = identical * 20 >= repeats.len() * 19 && still * 2 < moving;
    if !twice && repeats.len() > 1 && repeats.len() as f64 > COARSE_SHARE * (count - 1) as f64 {
        out.coarse = true;
    } else {
        for &index in &repeats {
            // A hole beside it shows that the sample is a true one with a late or early stamp.
            let first = index.saturating_sub(2);
            let last = (index + 1).min(count - 1);
            let hole = time[last] - time[first] >= ((last - first) as f64 - 0.5) * step;
            if same_line[index] && (twice || !hole) {
                out.duplicates.push(index);
            }
        }
    }
    let mut kept: Vec<usize> = Vec::with_capacity(count - out.duplicates.len());
    let mut duplicates = out.duplicates.iter().copied().peekable();
    kept.extend((0..count).filter(|&index| duplicates.next_if_eq(&index).is_none()));
    let stamps: Vec<f64> = kept.iter().map(|&index| time[index]).collect();
    let places: Vec<f64> = kept.iter().map(|&index| place[index]).collect();
    let moved = if out.coarse { spread_all(&stamps, &places, step) } else { spread_locally(&stamps, step) };
    for ((&index, was), now) in kept.iter().zip(&stamps).zip(&moved) {
        out.spread += usize::from(was != now);
        time[index] = *now;
    }
    out
}

/// Runs of equal stamps as `(start, end)`.
fn runs(stamps: &[f64]) -> Vec<(usize, usize)> {
    let mut out = Vec::new();
    let mut start = 0;
    for index in 1..=stamps.len() {
        if index == stamps.len() || stamps[index] != stamps[start] {
            out.push((start, index));
            start = index;
        }
    }
    out
}

/// Each run evenly over the interval to the next stamp; the first and the last run may be cut and take their neighbour's spacing.
fn spread_locally(stamps: &[f64], step: f64) -> Vec<f64> {
    let mut out = stamps.to_vec();
    let runs = runs(stamps);
    for (number, &(start, end)) in runs.iter().enumerate() {
        let length = end - start;
        if length == 1 {
            continue;
        }
        let next = runs.get(number + 1).map(|run| (stamps[run.0], run.1 - run.0));
        let previous = number.checked_sub(1).and_then(|at| runs.get(at)).map(|run| run.1 - run.0);
        match (previous, next) {
            // Cut at its start: its samples end where the next stamp begins.
            (None, Some((stamp, neighbour))) if stamp - stamps[start] <= 1.6 * step && neighbour > length => {
                let spacing = step / neighbour as f64;
                for (left, stamp_of) in (1..=length).rev().zip(&mut out[start..end]) {
                    *stamp_of = stamp - left as f64 * spacing;
                }
            }
            (previous, next) => {
                let span = next.map_or(step, |(stamp, _)| (stamp - stamps[start]).min(step * 1.6));
                let divisor = if next.is_none() { length.max(previous.unwrap_or(0)) } else { length };
                for (place, stamp_of) in out[start..end].iter_mut().enumerate() {
                    *stamp_of = stamps[start] + span * place as f64 / divisor as f64;
                }
            }
        }
    }
    out
}

/// A coarse clock over an even sampler: a straight line through the stamps of each unbroken stretch, where all stamps lie
/// within one tick of it; else locally.
fn spread_all(stamps: &[f64], places: &[f64], step: f64) -> Vec<f64> {
    let mut out = spread_locally(stamps, step);
    let mut start = 0;
    for end in 1..=stamps.len() {
        if end < stamps.len() && stamps[end] - stamps[end - 1] <= 1.6 * step {
            continue;
        }
        if let Some(line) = straight(&stamps[start..end], &places[start..end], step) {
            let rises = start == 0 || line[0] > out[start - 1];
            let ends_before = end == stamps.len() || line.last().is_some_and(|last| *last < out[end]);
            if rises && ends_before {
                out[start..end].copy_from_slice(&line);
            }
        }
        start = end;
    }
    out
}

/// Records in the shortest stretch that is put on a line.
const SHORTEST_LINE: usize = 32;

/// A stamp that was mended by its neighbours may lie off by more than rounding does.
const MENDED: f64 = 1.3;

/// An even sampler's stamps, rounded to a clock's ticks, put back on straight lines over the records' places, wherever all stamps of a stretch
/// lie within a tick of one; how many were moved. `step`: mean step.
pub fn straighten(stamps: &mut [f64], places: &[f64], tick: f64, step: f64) -> usize {
    let mut moved = 0;
    let mut start = 0;
    for end in 1..=stamps.len() {
        // Records that are missing are missing in both; lines that are none, or time that was lost, in one.
        let unbroken = end < stamps.len()
            && ((places[end] - places[end - 1]) - (stamps[end] - stamps[end - 1]) / step).abs() < 1.0;
        if !unbroken {
            moved += straighten_stretch(stamps, places, start..end, tick);
            start = end;
        }
    }
    moved
}

/// One stretch as a whole, or, where its clock runs unevenly, in halves.
fn straighten_stretch(stamps: &mut [f64], places: &[f64], range: std::ops::Range<usize>, tick: f64) -> usize {
    if range.len() < SHORTEST_LINE {
        return 0;
    }
    let Some(line) = straight(&stamps[range.clone()], &places[range.clone()], MENDED * tick) else {
        let middle = range.start + range.len() / 2;
        return straighten_stretch(stamps, places, range.start..middle, tick)
            + straighten_stretch(stamps, places, middle..range.end, tick);
    };
    let rises = range.start == 0 || line[0] > stamps[range.start - 1];
    let ends_before = range.end == stamps.len() || line.last().is_some_and(|last| *last < stamps[range.end]);
    if !(rises && ends_before) {
        return 0;
    }
    stamps[range.clone()].copy_from_slice(&line);
    range.len()
}

/// Least-squares line of stamp over place, if the stamps scatter about it by no more than a tick.
fn straight(stamps: &[f64], places: &[f64], tick: f64) -> Option<Vec<f64>> {
    let ticks = stamps.windows(2).filter(|pair| pair[1] != pair[0]).count();
    if ticks < 3 {
        return None;
    }
    let count = stamps.len() as f64;
    let mean_place = places.iter().sum::<f64>() / count;
    let mean_stamp = stamps.iter().map(|stamp| stamp - stamps[0]).sum::<f64>() / count + stamps[0];
    let (mut cross, mut square) = (0.0, 0.0);
    for (stamp, place) in stamps.iter().zip(places) {
        cross += (stamp - mean_stamp) * (place - mean_place);
        square += (place - mean_place).powi(2);
    }
    let slope = cross / square;
    if slope.is_nan() || slope <= 0.0 {
        return None;
    }
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    let mut line = Vec::with_capacity(stamps.len());
    for (stamp, place) in stamps.iter().zip(places) {
        let value = mean_stamp + slope * (place - mean_place);
        low = low.min(stamp - value);
        high = high.max(stamp - value);
        line.push(value);
    }
    // Rounding down to a tick scatters by just under one; a tenth more for the line's own error.
    (high - low <= 1.1 * tick && line.windows(2).all(|pair| pair[1] > pair[0])).then_some(line)
}

/// The grid the stamps stand on, where it is coarse against the steps; 0 where it is fine or does not show.
pub fn clock_grid(time: &[f64], step: f64) -> f64 {
    let mut steps = sampled_steps(time, 5000);
    let repeats = steps.contains(&0.0);
    steps.retain(|value| *value > 0.0 && *value < 20.0 * step);
    if steps.len() < 4 {
        return 0.0;
    }
    steps.sort_by(f64::total_cmp);
    let tolerance = 1e-6 * step;
    // Even steps with a gap now and then: a whole multiple of the step is what is missing, not what the clock can tell.
    let even = steps.iter().filter(|value| (*value - step).abs() <= tolerance).count();
    let whole = steps.iter().filter(|value| (*value / step - (*value / step).round()).abs() <= 0.01).count();
    // 480 Hz by a clock of milliseconds: eleven steps of 2 ms and one of 3 ms, which is no whole multiple.
    if !repeats && even * 10 >= steps.len() * 9 && whole * 50 >= steps.len() * 49 {
        return 0.0;
    }
    // A step that comes but twice, to and from one mended stamp, says nothing of the clock.
    let rare = |k: usize| {
        let alike = |other: usize| steps.get(other).is_some_and(|s| (s - steps[k]).abs() <= tolerance);
        steps.len() >= 20
            && !(alike(k.wrapping_sub(1)) && alike(k + 1) || alike(k.wrapping_sub(2)) && k >= 2 || alike(k + 2))
    };
    let common: Vec<f64> = (0..steps.len()).filter(|k| !rare(*k)).map(|k| steps[k]).collect();
    let mut grid = f64::INFINITY;
    for pair in common.windows(2) {
        let difference = pair[1] - pair[0];
        if difference > tolerance {
            grid = grid.min(difference);
        }
    }
    // Jitter of a fine clock has no grid that shows; a grid below a fiftieth of the step does not matter.
    if !(grid >= 0.02 * step && grid < 20.0 * step) {
        return 0.0;
    }
    let on_grid = steps.iter().filter(|value| (*value / grid - (*value / grid).round()).abs() < 0.03).count();
    if on_grid * 20 >= steps.len() * 19 { grid } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn resolve(stamps: &[f64], values: &[f64]) -> (Vec<f64>, Repeats) {
        let mut time = stamps.to_vec();
        let same: Vec<bool> = (0..stamps.len())
            .map(|index| index > 0 && stamps[index] == stamps[index - 1] && values[index] == values[index - 1])
            .collect();
        let places: Vec<f64> = (0..stamps.len()).map(|index| index as f64).collect();
        let step = super::super::stamps::usual_step(stamps).unwrap();
        let repeats = resolve_repeats(&mut time, &same, &|index| values[index] == values[index - 1], &places, step);
        (time, repeats)
    }

    #[test]
    fn coarse_clock_comes_back_even() {
        // 80 Hz stamped in tenths of a second, readings that never change.
        let stamps: Vec<f64> = (0..400).map(|index| (f64::from(index) * 0.125).floor()).collect();
        let (time, repeats) = resolve(&stamps, &vec![5.0; 400]);
        assert!(repeats.coarse && repeats.duplicates.is_empty());
        // The slope of the line errs by far less than one sample over the record.
        for pair in time.windows(2) {
            assert!((pair[1] - pair[0] - 0.125).abs() < 1e-3, "{pair:?}");
        }
    }

    #[test]
    fn uneven_sampler_under_a_coarse_clock_is_spread_between_ticks() {
        let stamps = [0.0, 0.0, 0.0, 0.0, 1.0, 2.0, 2.0, 2.0, 2.0, 2.0, 2.0, 2.0, 2.0, 3.0, 4.0, 4.0];
        let values: Vec<f64> = (0..16).map(f64::from).collect();
        let (time, repeats) = resolve(&stamps, &values);
        assert!(repeats.coarse);
        assert_eq!(time[5..7], [2.0, 2.125]);
        assert!(time.windows(2).all(|pair| pair[1] > pair[0]));
    }

    #[test]
    fn a_record_written_twice_is_a_duplicate() {
        let mut stamps: Vec<f64> = (0..50).map(|index| f64::from(index) * 10.0).collect();
        let mut values: Vec<f64> = (0..50).map(f64::from).collect();
        stamps.insert(21, 200.0);
        values.insert(21, 20.0);
        let (_, repeats) = resolve(&stamps, &values);
        assert_eq!(repeats.duplicates, vec![21]);
        assert!(!repeats.coarse);
    }

    #[test]
    fn a_late_stamp_in_a_quiet_record_is_a_sample_not_a_duplicate() {
        let mut stamps: Vec<f64> = (0..50).map(f64::from).collect();
        stamps[21] = 20.0;
        let (time, repeats) = resolve(&stamps, &[7.0; 50]);
        assert!(repeats.duplicates.is_empty());
        assert!(time.windows(2).all(|pair| pair[1] > pair[0]));
    }

    #[test]
    fn every_record_written_twice() {
        let stamps: Vec<f64> = (0..100).map(|index| f64::from(index / 2)).collect();
        let values: Vec<f64> = (0..100).map(|index| f64::from((index / 2 * 37) % 11)).collect();
        let (_, repeats) = resolve(&stamps, &values);
        assert_eq!(repeats.duplicates.len(), 50);
    }

    #[test]
    fn a_clock_of_milliseconds_over_a_still_record_at_1200_hz() {
        let stamps: Vec<f64> = (0..1200).map(|index| (f64::from(index) / 1.2).floor()).collect();
        let (time, repeats) = resolve(&stamps, &[7.0; 1200]);
        assert!(repeats.duplicates.is_empty());
        // The line through the stamps errs by a small part of a tick over a thousand ticks.
        assert!(time.windows(2).all(|pair| (pair[1] - pair[0] - 1.0 / 1.2).abs() < 1e-3));
    }

    #[test]
    fn grids() {
        let milliseconds: Vec<f64> = (0..300).map(|index| (f64::from(index) * 3.333).floor()).collect();
        assert_eq!(clock_grid(&milliseconds, 3.0), 1.0);
        let microseconds: Vec<f64> =
            milliseconds.iter().enumerate().map(|(i, v)| v * 1000.0 + (i * 7 % 13) as f64).collect();
        assert_eq!(clock_grid(&microseconds, 3000.0), 0.0);
    }

    /// 480 samples a second by a clock of milliseconds, three lines garbled, a restart after which lines that are no records follow.
    #[test]
    fn rounded_stamps_of_an_even_sampler_are_put_back() {
        let interval = 1000.0 / 480.0;
        let places: Vec<f64> = (0..2000)
            .filter(|i| ![300, 301, 1500].contains(i))
            .map(|i| f64::from(i + if i > 900 { 7 } else { 0 }))
            .collect();
        let truth: Vec<f64> =
            (0..2000).filter(|i| ![300, 301, 1500].contains(i)).map(|i| f64::from(i) * interval + 0.3).collect();
        let mut stamps: Vec<f64> = truth.iter().map(|t| t.round()).collect();
        assert!((clock_grid(&stamps, 2.0) - 1.0).abs() < 1e-9);
        let moved = straighten(&mut stamps, &places, 1.0, interval);
        assert_eq!(moved, 1997);
        let worst = stamps.iter().zip(&truth).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        // A line through n stamps rounded to 1 ms is good to 0.29/√n ms and twice that at its ends.
        assert!(worst < 0.1, "{worst}");
        assert!(stamps.windows(2).all(|p| p[1] > p[0]));
    }

    /// A sampler that is not even by more than a tick keeps its stamps.
    #[test]
    fn uneven_stamps_are_left_alone() {
        let was: Vec<f64> = (0..500).map(|i| f64::from(i * 10 + [0, 3, 0, 4, 2][(i % 5) as usize])).collect();
        let places: Vec<f64> = (0..500).map(f64::from).collect();
        let mut stamps = was.clone();
        assert_eq!(straighten(&mut stamps, &places, 1.0, 10.0), 0);
        assert_eq!(stamps, was);
    }
}
