//! Single readings that cannot be: converter full scale, zero rows, flipped bits, empty fields.
//!
//! A reading is a glitch only if both of its sides agree about what should stand there and it does not: the level and slope
//! before it and after it meet, with little noise, far from the reading. A rise, a step, a peak between samples, ringing and
//! rough combustion all leave at least one side in disagreement or the noise too large.

use crate::log::{Log, Repair};
use std::collections::HashSet;

/// Readings on each side that must agree.
const SIDE: usize = 3;
/// Readings on each side that tell the local noise.
const WINDOW: usize = 24;
/// A glitch stands off by more than so many times the local noise. A normal distribution passes this once in 10^32 readings;
/// the margin is for noise that is not normal.
const TIMES_NOISE: f64 = 12.0;
/// And by more than so many times what the readings of its own sides move by.
const TIMES_SIDES: f64 = 5.0;
/// On an edge the sides move by much: there a lone reading must be jumped up to and down from, by nearly the same amount each, more than
/// so many times as far as any other two neighbours near it lie apart. A thrust that rises so much faster at the last and falls as fast
/// is none.
const TIMES_JUMPS: f64 = 2.0;
/// Share of the smaller jump by which its two neighbours may differ.
const JUMPS_ALIKE: f64 = 0.15;
/// Longest run of bad readings that is bridged: a zero row may come twice.
const LONGEST_GLITCH: usize = 2;
/// Longest run of missing readings that is bridged.
const LONGEST_EMPTY: usize = 3;

/// Repairs glitches in place and bridges short runs of missing readings; one `Repair` a reading, in order.
///
/// `time_s`, `values` and `line` have one element a record. Longer runs of NaN stay.
pub fn repair_glitches(time_s: &[f64], values: &mut [f64], line: &[u32], column: &str) -> Vec<Repair> {
    repair_indices(time_s, values)
        .into_iter()
        .map(|(index, found)| Repair {
            line: line.get(index).map(|line| u64::from(*line)),
            column: Some(column.to_owned()),
            kind: "glitch".to_owned(),
            message: if found.is_nan() {
                format!("no reading; {} put between its neighbours", shown(values[index]))
            } else {
                format!("reading {} fits neither side; replaced by {}", shown(found), shown(values[index]))
            },
        })
        .collect()
}

/// Repairs in place; index and the value found there, ascending.
pub fn repair_indices(time_s: &[f64], values: &mut [f64]) -> Vec<(usize, f64)> {
    let count = values.len().min(time_s.len());
    let mut repaired: Vec<(usize, f64)> = Vec::new();
    bridge_empty(&time_s[..count], &mut values[..count], &mut repaired);
    let floor = quantisation(&values[..count]);
    let mut index = 1;
    while index + 1 < count {
        // Cheap first: most readings lie near the one before.
        if !stands_out(values, index, floor) {
            index += 1;
            continue;
        }
        let run = (1..=LONGEST_GLITCH).find(|&length| is_glitch(values, index, length, floor));
        match run {
            Some(length) => {
                let (before, after) = (index - 1, index + length);
                for at in index..after {
                    repaired.push((at, values[at]));
                    values[at] = between(time_s, values, before, after, at);
                }
                index = after;
            }
            None => index += 1,
        }
    }
    repaired.sort_by_key(|(index, _)| *index);
    repaired
}

fn shown(value: f64) -> String {
    let text = format!("{value:.6}");
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

fn between(time_s: &[f64], values: &[f64], before: usize, after: usize, at: usize) -> f64 {
    let share = (time_s[at] - time_s[before]) / (time_s[after] - time_s[before]);
    let share = if share.is_finite() { share } else { 0.5 };
    values[before] + share * (values[after] - values[before])
}

/// Interpolates runs of up to three NaN that have a reading on both sides.
fn bridge_empty(time_s: &[f64], values: &mut [f64], repaired: &mut Vec<(usize, f64)>) {
    let empty = values.iter().filter(|value| value.is_nan()).count();
    // A channel that is empty more often than not now and then is sampled more slowly than the log: that is no damage.
    if empty == 0 || empty * 5 > values.len() {
        return;
    }
    let mut index = 0;
    while index < values.len() {
        if !values[index].is_nan() {
            index += 1;
            continue;
        }
        let start = index;
        while index < values.len() && values[index].is_nan() {
            index += 1;
        }
        if start > 0 && index < values.len() && index - start <= LONGEST_EMPTY {
            for at in start..index {
                values[at] = between(time_s, values, start - 1, index, at);
                repaired.push((at, f64::NAN));
            }
        }
    }
}

/// Smallest difference between readings that occurs: the converter's step, below which nothing can be told.
fn quantisation(values: &[f64]) -> f64 {
    let mut least = f64::INFINITY;
    for pair in values.windows(2) {
        let difference = (pair[1] - pair[0]).abs();
        // Rounding of decimal fractions leaves differences at the end of the mantissa.
        if difference > 1e-9 * pair[0].abs().max(pair[1].abs()) && difference < least {
            least = difference;
        }
    }
    if least.is_finite() { least } else { 0.0 }
}

/// The reading lies outside the two before it (the one before, at the start).
fn stands_out(values: &[f64], index: usize, floor: f64) -> bool {
    let here = values[index];
    let (a, b) = (values[index.saturating_sub(2)], values[index - 1]);
    let (low, high) = (a.min(b), a.max(b));
    here > high + 3.0 * floor || here < low - 3.0 * floor
}

/// Whether the readings `index .. index + length` are glitches.
fn is_glitch(values: &[f64], index: usize, length: usize, floor: f64) -> bool {
    let after = index + length;
    if after >= values.len() {
        return false;
    }
    let before_side = &values[index.saturating_sub(SIDE)..index];
    let after_side = &values[after..(after + SIDE).min(values.len())];
    // At the ends of the record one side may be short, not both.
    if before_side.is_empty() || before_side.len() + after_side.len() <= SIDE {
        return false;
    }
    let suspect = &values[index..after];
    if before_side.iter().chain(after_side).chain(suspect).any(|value| !value.is_finite()) {
        return false;
    }
    // Two in a row must be the same wrong reading; two different ones may well be a short event.
    if suspect.windows(2).any(|pair| pair[0] != pair[1]) {
        return false;
    }
    let (b, a) = (values[index - 1], values[after]);
    let noise = local_noise(values, index, after).max(floor);
    // What the sides move by, slope, roughness and disagreement alike.
    let moves = range(before_side).max(range(after_side)).max((a - b).abs()).max(floor);
    let across = (length + 1) as f64;
    (index..after).all(|at| {
        let share = (at - index + 1) as f64 / across;
        let off = (values[at] - (b + share * (a - b))).abs();
        off > TIMES_NOISE * noise && (off > TIMES_SIDES * moves || (length == 1 && is_jumped_to(values, at)))
    })
}

/// Whether both jumps, to the reading and from it, dwarf all others on either side.
fn is_jumped_to(values: &[f64], at: usize) -> bool {
    let (b, a) = (values[at - 1], values[at + 1]);
    let least = (values[at] - b).abs().min((values[at] - a).abs());
    let jumps = |side: &[f64]| side.windows(2).map(|w| (w[1] - w[0]).abs()).fold(0.0, f64::max);
    let (before, behind) =
        (&values[at.saturating_sub(SIDE + 1)..at], &values[at + 1..(at + SIDE + 2).min(values.len())]);
    before.len() > SIDE
        && behind.len() > SIDE
        && least > TIMES_JUMPS * jumps(before).max(jumps(behind))
        && (a - b).abs() < JUMPS_ALIKE * least
}

fn range(side: &[f64]) -> f64 {
    let high = side.iter().fold(f64::NEG_INFINITY, |most, value| most.max(*value));
    let low = side.iter().fold(f64::INFINITY, |least, value| least.min(*value));
    high - low
}

/// Standard deviation of the noise around a suspect run: the larger of its two sides, from second differences that do not
/// touch it.
///
/// # Formula
/// For white noise of standard deviation s the second difference x\[k-1\] - 2 x\[k\] + x\[k+1\] has standard deviation
/// s * sqrt(6), and the median of its absolute value is 0.6745 of that (normal distribution). The 80 % point, 1.2816 standard
/// deviations, is taken beside the median, so that noise in bursts counts; another glitch in the window does not reach it.
fn local_noise(values: &[f64], index: usize, after: usize) -> f64 {
    let before = &values[index.saturating_sub(WINDOW)..index];
    let behind = &values[after..(after + WINDOW).min(values.len())];
    let sides = [side_noise(before), side_noise(behind)];
    // A side too short to tell leaves it to the other.
    sides.iter().flatten().copied().fold(f64::NAN, f64::max)
}

fn side_noise(side: &[f64]) -> Option<f64> {
    let mut differences = [0.0f64; WINDOW];
    let mut count = 0;
    for three in side.windows(3) {
        let difference = (three[0] - 2.0 * three[1] + three[2]).abs();
        if difference.is_finite() {
            differences[count] = difference;
            count += 1;
        }
    }
    let known = &mut differences[..count];
    if known.is_empty() {
        return None;
    }
    known.sort_by(f64::total_cmp);
    let at = |share: f64| known[((count - 1) as f64 * share) as usize];
    Some((at(0.5) / 0.6745).max(at(0.8) / 1.2816) / 6.0f64.sqrt())
}

/// Applies `repair_glitches` to a channel of a log and keeps its books: a record counts as repaired once, however many of its
/// channels were. Records whose reading stays missing are dropped, and the hole listed as a gap by the caller's next look at
/// `time_s`. An index out of range does nothing.
pub fn repair_channel(log: &mut Log, column_index: usize) {
    let Some(column) = log.columns.get_mut(column_index) else { return };
    let repairs = repair_glitches(&log.time_s, &mut column.values, &log.line, &column.name);
    let known: HashSet<u64> = log
        .repairs
        .iter()
        .filter(|repair| matches!(repair.kind.as_str(), "glitch" | "time"))
        .filter_map(|repair| repair.line)
        .collect();
    let fresh: HashSet<u64> =
        repairs.iter().filter_map(|repair| repair.line).filter(|line| !known.contains(line)).collect();
    log.records.repaired += fresh.len() as u64;
    log.records.kept = log.records.kept.saturating_sub(fresh.len() as u64);
    log.repairs.extend(repairs);
    drop_missing(log, column_index, &known, &fresh);
    log.repairs.sort_by_key(|repair| repair.line.unwrap_or(0));
}

/// Takes out the records in which the channel has no reading.
fn drop_missing(log: &mut Log, column_index: usize, known: &HashSet<u64>, fresh: &HashSet<u64>) {
    let keep: Vec<bool> = log.columns[column_index].values.iter().map(|value| value.is_finite()).collect();
    let missing = keep.iter().filter(|keep| !**keep).count();
    if missing == 0 {
        return;
    }
    let name = log.columns[column_index].name.clone();
    let mut runs: Vec<(usize, usize)> = Vec::new();
    for (index, _) in keep.iter().enumerate().filter(|(_, keep)| !**keep) {
        match runs.last_mut() {
            Some((_, end)) if *end == index => *end += 1,
            _ => runs.push((index, index + 1)),
        }
        // A dropped record is dropped, whatever was repaired in it before.
        let line = u64::from(log.line[index]);
        if known.contains(&line) || fresh.contains(&line) {
            log.records.repaired = log.records.repaired.saturating_sub(1);
        } else {
            log.records.kept = log.records.kept.saturating_sub(1);
        }
        log.records.dropped += 1;
    }
    const LISTED_AT_MOST: usize = 200;
    for (start, end) in runs.iter().take(LISTED_AT_MOST) {
        log.repairs.push(Repair {
            line: Some(u64::from(log.line[*start])),
            column: Some(name.clone()),
            kind: "dropped".to_owned(),
            message: format!("no reading in {} records from here to line {}", end - start, log.line[end - 1]),
        });
        if *start > 0 && *end < log.time_s.len() && missing * 5 <= keep.len() {
            log.gaps.push(crate::log::Gap {
                start_s: log.time_s[start - 1],
                end_s: log.time_s[*end],
                missing: (end - start) as u64,
            });
        }
    }
    if runs.len() > LISTED_AT_MOST {
        log.repairs.push(Repair {
            line: None,
            column: Some(name),
            kind: "dropped".to_owned(),
            message: format!(
                "{missing} records without a reading in all; only the first {LISTED_AT_MOST} places are listed"
            ),
        });
    }
    log.gaps.sort_by(|a, b| a.start_s.total_cmp(&b.start_s));
    let mut index = 0;
    let mut retain = |_: &f64| {
        index += 1;
        keep[index - 1]
    };
    log.time_s.retain(&mut retain);
    let mut flags = keep.iter();
    log.line.retain(|_| *flags.next().unwrap_or(&true));
    for column in &mut log.columns {
        let mut flags = keep.iter();
        column.values.retain(|_| *flags.next().unwrap_or(&true));
    }
    // A channel slower than the log sets its own interval.
    if missing * 5 > keep.len() {
        let mut steps: Vec<f64> = log.time_s.windows(2).map(|pair| pair[1] - pair[0]).collect();
        if !steps.is_empty() {
            let middle = (steps.len() - 1) / 2;
            log.interval_s = *steps.select_nth_unstable_by(middle, f64::total_cmp).1;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::log::{Column, Records};
    use rand::{Rng, SeedableRng};
    use rand_chacha::ChaCha8Rng;
    use rand_distr::{Distribution, Exp1, Normal, StandardNormal};

    fn repair(values: &[f64]) -> (Vec<f64>, Vec<usize>) {
        let time_s: Vec<f64> = (0..values.len()).map(|index| index as f64 * 0.0125).collect();
        let mut values = values.to_vec();
        let repaired = repair_indices(&time_s, &mut values).into_iter().map(|(index, _)| index).collect();
        (values, repaired)
    }

    /// Counts of an 80 Hz converter: quiet, a burn of 2.5 s with a rise of one sample and an 8 % noise, tail.
    fn firing(seed: u64, noise: f64, rough: f64) -> Vec<f64> {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        (0..800)
            .map(|index| {
                let phase = (f64::from(index) - 300.0) / 200.0;
                let thrust = if (0.0..1.0).contains(&phase) { 40_000.0 * (1.0 - 0.5 * phase) } else { 0.0 };
                let quiet: f64 = StandardNormal.sample(&mut random);
                let burning: f64 = StandardNormal.sample(&mut random);
                (8100.0 + thrust * (1.0 + rough * burning) + noise * quiet).round()
            })
            .collect()
    }

    #[test]
    fn a_wild_reading_at_the_end_of_the_rise_is_repaired_and_a_spike_there_is_not() {
        let rise = |top: &[f64]| -> Vec<f64> {
            let mut random = ChaCha8Rng::seed_from_u64(7);
            let mut noise = || -> f64 { StandardNormal.sample(&mut random) };
            let mut values: Vec<f64> = (0..50).map(|_| 10.0 * noise()).collect();
            values.extend([2000.0, 4000.0, 6000.0, 6500.0]);
            values.extend(top);
            values.extend((0..50).map(|_| 6500.0 + 10.0 * noise()));
            values
        };
        assert_eq!(repair(&rise(&[11_500.0])).1, [54]);
        // As high as the rise was fast, or as wide as two readings, it may be the motor's.
        assert!(repair(&rise(&[8500.0])).1.is_empty());
        assert!(repair(&rise(&[11_500.0, 9000.0])).1.is_empty());
    }

    #[test]
    fn a_firing_without_glitches_is_left_alone() {
        for seed in 0..200 {
            for (noise, rough) in [(20.0, 0.0), (20.0, 0.01), (200.0, 0.08), (0.1, 0.0), (0.4, 0.02)] {
                let (_, repaired) = repair(&firing(seed, noise, rough));
                assert!(repaired.is_empty(), "seed {seed}, noise {noise}, rough {rough}: {repaired:?}");
            }
        }
    }

    #[test]
    fn full_scale_zero_rows_and_flipped_bits_are_found_in_quiet_and_burn() {
        for seed in 0..50 {
            let clean = firing(seed, 20.0, 0.005);
            // A burn reading wanders by 200 counts; the flipped bit is the 14th.
            for (at, wrong) in
                [(100, 8_388_607.0), (400, 8_388_607.0), (150, 0.0), (420, 0.0), (200, 8100.0 + 16_384.0)]
            {
                let mut values = clean.clone();
                values[at] = wrong;
                let (mended, repaired) = repair(&values);
                assert_eq!(repaired, vec![at], "seed {seed} at {at}");
                // Midway between neighbours: off by at most a few times their noise.
                assert!((mended[at] - clean[at]).abs() < 1500.0, "seed {seed} at {at}");
            }
        }
    }

    #[test]
    fn two_zero_rows_in_a_row_are_found_and_a_short_event_is_not() {
        let mut values = firing(1, 20.0, 0.0);
        values[400] = 0.0;
        values[401] = 0.0;
        assert_eq!(repair(&values).1, vec![400, 401]);
        let mut values = firing(1, 20.0, 0.0);
        values[100] = 20_000.0;
        values[101] = 14_000.0;
        assert!(repair(&values).1.is_empty());
    }

    #[test]
    fn rises_steps_peaks_and_ringing_are_left_alone() {
        let step: Vec<f64> = (0..100).map(|index| if index < 50 { 0.0 } else { 900.0 }).collect();
        let two_steps: Vec<f64> = (0..100)
            .map(|i| {
                if i < 50 {
                    0.0
                } else if i == 50 {
                    400.0
                } else {
                    900.0
                }
            })
            .collect();
        let overshoot: Vec<f64> = (0..100)
            .map(|i| {
                if i < 50 {
                    0.0
                } else if i == 50 {
                    1300.0
                } else {
                    900.0
                }
            })
            .collect();
        let peak: Vec<f64> = (0..100).map(|i| 1000.0 * (-(f64::from(i - 50) / 2.0).powi(2)).exp()).collect();
        let ringing: Vec<f64> = (0..100)
            .map(|i| {
                if i < 50 {
                    0.0
                } else {
                    900.0 * (1.0 - (-0.1 * f64::from(i - 50)).exp() * (3.0 * f64::from(i - 50)).cos())
                }
            })
            .collect();
        let plateau: Vec<f64> = peak.iter().map(|v| v.min(700.0)).collect();
        for values in [step, two_steps, overshoot, peak, ringing, plateau] {
            assert!(repair(&values).1.is_empty(), "{values:?}");
        }
    }

    #[test]
    fn quantised_quiet_readings_are_left_alone() {
        let mut random = ChaCha8Rng::seed_from_u64(4);
        let values: Vec<f64> = (0..20_000).map(|_| if random.next_u32() % 50 == 0 { 1.0 } else { 0.0 }).collect();
        assert!(repair(&values).1.is_empty());
        let normal = Normal::new(0.0, 0.8).unwrap();
        let values: Vec<f64> = (0..20_000).map(|_| f64::round(normal.sample(&mut random))).collect();
        assert!(repair(&values).1.is_empty());
    }

    #[test]
    fn spiky_combustion_noise_is_left_alone() {
        // Two-sided exponential noise: excess kurtosis 3.
        let mut random = ChaCha8Rng::seed_from_u64(11);
        let values: Vec<f64> = (0..100_000)
            .map(|_| {
                let size: f64 = Exp1.sample(&mut random);
                if random.next_u32() % 2 == 0 { 800.0 + 10.0 * size } else { 800.0 - 10.0 * size }
            })
            .collect();
        // A reading twelve local deviations off comes a few times in a million at this tail.
        assert!(repair(&values).1.len() <= 1, "{:?}", repair(&values).1);
    }

    #[test]
    fn short_runs_without_reading_are_bridged_and_long_ones_left() {
        let mut values: Vec<f64> = (0..60).map(f64::from).collect();
        values[10] = f64::NAN;
        values[20..23].fill(f64::NAN);
        values[40..44].fill(f64::NAN);
        let (mended, repaired) = repair(&values);
        assert_eq!(repaired, vec![10, 20, 21, 22]);
        assert_eq!(mended[21], 21.0);
        assert!(mended[41].is_nan());
    }

    fn log(columns: Vec<Vec<f64>>) -> Log {
        let count = columns[0].len();
        Log {
            time_s: (0..count).map(|index| index as f64 * 0.0125).collect(),
            line: (0..count as u32).map(|index| index + 2).collect(),
            columns: columns
                .into_iter()
                .enumerate()
                .map(|(at, values)| Column { name: format!("c{at}"), number: at + 2, unit: None, values })
                .collect(),
            available: Vec::new(),
            interval_s: 0.0125,
            clock_resolution_s: 0.0,
            gaps: Vec::new(),
            records: Records { read: count as u64, kept: count as u64, repaired: 0, dropped: 0 },
            repairs: Vec::new(),
            findings: Vec::new(),
            sha256: String::new(),
            bytes: 0,
        }
    }

    #[test]
    fn a_record_counts_once_and_a_missing_stretch_is_dropped() {
        let clean = firing(2, 20.0, 0.0);
        let (mut one, mut two) = (clean.clone(), clean);
        one[100] = 0.0;
        two[100] = 0.0;
        two[200..210].fill(f64::NAN);
        let mut log = log(vec![one, two]);
        repair_channel(&mut log, 0);
        repair_channel(&mut log, 1);
        repair_channel(&mut log, 7);
        assert_eq!(log.records, Records { read: 800, kept: 789, repaired: 1, dropped: 10 });
        assert_eq!(log.time_s.len(), 790);
        assert!(log.columns.iter().all(|column| column.values.len() == 790));
        assert_eq!(log.gaps.len(), 1);
        assert_eq!(log.gaps[0].missing, 10);
        assert!(log.repairs.iter().any(|repair| repair.line == Some(102) && repair.kind == "glitch"));
    }
}
