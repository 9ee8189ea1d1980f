//! Stamps as read to log time: strictly rising seconds from the first record, with what was done to get there.

use super::Gap;
use super::columns::{TimeColumn, infer_unit};
use super::layout::Kind;
use super::ledger::Ledger;
use super::spread::{clock_grid, resolve_repeats, straighten};
use super::stamps::{MANY_STEPS, even_out, moduli, sampled_steps, untangle, usual_step};
use super::table::Table;
use crate::problem::Problem;

/// Log time of the records that stay.
#[derive(Debug, Default)]
pub struct TimeBase {
    /// s, strictly rising.
    pub time_s: Vec<f64>,
    /// Which record of the table each belongs to.
    pub record: Vec<u32>,
    pub interval_s: f64,
    pub clock_resolution_s: f64,
    pub gaps: Vec<Gap>,
    pub findings: Vec<String>,
}

/// Log time from a time column, or from a rate alone when `column` is `None`.
///
/// # Errors
/// The stamps never move, or their unit cannot be told, or a counter comes without a rate.
pub fn time_base(
    table: &Table,
    column: Option<&TimeColumn>,
    name: &str,
    rate_hz: Option<f64>,
    ledger: &mut Ledger,
) -> Result<TimeBase, Problem> {
    let raw = &table.stamps;
    let (unit_s, symbol) = unit_of(raw, column, name, rate_hz)?;
    let mut findings = Vec::new();
    match (column, rate_hz) {
        (None, Some(rate)) => findings.push(format!("time from the given rate of {rate} Hz, one step a data line")),
        (Some(time), Some(rate)) if time.counter => {
            findings.push(format!("time from the sample counter `{name}` and the given rate of {rate} Hz"));
        }
        (Some(time), _) => findings.push(format!("time from column `{name}` {}", how(time, &symbol))),
        (None, None) => {}
    }
    if raw.len() == 1 {
        return Ok(TimeBase { time_s: vec![0.0], record: vec![0], findings, ..TimeBase::default() });
    }
    let step = usual_step(raw).ok_or_else(|| {
        Problem::new(format!("the time in column `{name}` never moves forward"))
            .expected("stamps that rise")
            .remedy("name the right column in [log] time, or give rate = \"80 Hz\"")
    })?;
    let clock = column.is_some_and(|time| time.kind == Kind::Clock);
    let counters =
        if column.is_some_and(|time| time.kind == Kind::DateTime) { Vec::new() } else { moduli(unit_s, clock) };
    let untangled = untangle(raw, &table.restarts, &counters, step);
    let lines = table.line.as_slice();
    for &(index, modulus) in &untangled.rollovers {
        let what = if clock { "passed midnight or noon" } else { "rolled over" };
        ledger.entry(
            None,
            "time",
            format!("the clock {what} at line {} (range {modulus} {symbol}); unwrapped", lines[index]),
        );
        findings.push(format!("clock {what} at line {}, unwrapped", lines[index]));
    }
    for &index in &untangled.resets {
        ledger.entry(
            None,
            "time",
            format!(
                "the clock began anew at line {}; carried on one usual step after the record before, \
                 how long the logger was off is not known",
                lines[index]
            ),
        );
        findings.push(format!("clock began anew at line {}; the time lost there is not known", lines[index]));
    }
    let mut time = untangled.time;
    mend_bad_stamps(&mut time, &untangled.bad, raw, lines, ledger);

    let mut record: Vec<u32> = (0..raw.len() as u32).filter(|&index| time[index as usize].is_finite()).collect();
    if !untangled.late.is_empty() {
        for &index in &untangled.late {
            ledger.reordered(u64::from(lines[index]), || {
                format!("stamp {} stands behind a later one; moved to its place", raw[index])
            });
        }
        record.sort_by(|a, b| time[*a as usize].total_cmp(&time[*b as usize]));
    }
    let mut sorted: Vec<f64> = record.iter().map(|&index| time[index as usize]).collect();
    drop(time);
    let resolution = settle(&mut sorted, &mut record, table, step, unit_s, lines, ledger, &mut findings);

    let usual = usual_step(&sorted).unwrap_or(step);
    for index in even_out(&mut sorted, usual) {
        let line = u64::from(lines[record[index] as usize]);
        ledger.stamp_replaced(line, "stamp off an otherwise even clock; put midway between its neighbours".to_owned());
    }
    let origin = match table.early_stamp {
        Some(early) if column.is_some() && early < sorted[0] && sorted[0] - early < 50.0 * step => early,
        None | Some(_) if column.is_none() => 0.0,
        _ => sorted[0],
    };
    let time_s: Vec<f64> = sorted.iter().map(|stamp| (stamp - origin) * unit_s).collect();
    let mut base =
        TimeBase { time_s, record, clock_resolution_s: resolution * unit_s, findings, ..TimeBase::default() };
    base.interval_s = usual_interval(&base.time_s, base.clock_resolution_s);
    base.gaps = find_gaps(&base.time_s, base.interval_s, base.clock_resolution_s);
    Ok(base)
}

fn how(time: &TimeColumn, symbol: &str) -> String {
    match time.kind {
        Kind::Clock => "as clock time".to_owned(),
        Kind::DateTime => "as date and time".to_owned(),
        _ => format!("in {symbol} ({})", time.unit_source),
    }
}

/// Seconds in one unit of the stamps, and its name.
fn unit_of(
    raw: &[f64],
    column: Option<&TimeColumn>,
    name: &str,
    rate_hz: Option<f64>,
) -> Result<(f64, String), Problem> {
    let by_rate = || {
        rate_hz
            .filter(|rate| rate.is_finite() && *rate > 0.0)
            .map(|rate| (1.0 / rate, "samples".to_owned()))
            .ok_or_else(|| {
                Problem::new("the sample rate must be a positive frequency").remedy("give rate = \"80 Hz\" in [log]")
            })
    };
    let Some(time) = column else { return by_rate() };
    if time.counter {
        return by_rate();
    }
    match time.kind {
        Kind::Clock | Kind::DateTime => return Ok((1.0, "s".to_owned())),
        _ => {}
    }
    if let Some((symbol, factor)) = &time.unit {
        return Ok((*factor, symbol.clone()));
    }
    let whole = raw.iter().take(1000).all(|stamp| stamp.fract() == 0.0);
    let step = usual_step(raw).unwrap_or(0.0);
    let span = step * raw.len() as f64;
    infer_unit(raw.first().copied().unwrap_or(0.0), step, span, whole)
        .map(|(symbol, factor, why)| (factor, format!("{symbol}, {why}")))
        .ok_or_else(|| {
            Problem::new(format!("the unit of time column `{name}` cannot be told"))
                .remedy(format!("write time = {{ column = \"{name}\", unit = \"ms\" }} in [log]"))
        })
}

/// A stamp that was misread where its sample was due is put back by its neighbours; any other is dropped with its record.
fn mend_bad_stamps(time: &mut [f64], bad: &[usize], raw: &[f64], lines: &[u32], ledger: &mut Ledger) {
    let good: Vec<f64> = time.iter().copied().filter(|stamp| stamp.is_finite()).collect();
    let mean_step = match (good.first(), good.last()) {
        (Some(first), Some(last)) if good.len() > 1 => {
            usual_step(&good).unwrap_or(0.0).min((last - first) / (good.len() - 1) as f64)
        }
        _ => 0.0,
    };
    drop(good);
    let mut at = 0;
    while at < bad.len() {
        let start = bad[at];
        let mut end = start + 1;
        while at + 1 < bad.len() && bad[at + 1] == end {
            at += 1;
            end += 1;
        }
        at += 1;
        let missing = (end - start) as f64;
        let hole = (start > 0 && end < time.len()).then(|| (time[start - 1], time[end]));
        let due = hole.filter(|(a, b)| {
            let share = (b - a) / ((missing + 1.0) * mean_step);
            (0.6..1.4).contains(&share)
        });
        for index in start..end {
            match due {
                Some((a, b)) => {
                    time[index] = a + (b - a) * (index - start + 1) as f64 / (missing + 1.0);
                    let message = format!("stamp {} fits neither neighbour; put evenly between them", raw[index]);
                    ledger.stamp_replaced(u64::from(lines[index]), message);
                }
                None => {
                    ledger.dropped(u64::from(lines[index]), || format!("stamp {} fits neither neighbour", raw[index]))
                }
            }
        }
    }
}

/// Repeated stamps and what is left of disorder; returns the clock's resolution in units of the stamps.
#[expect(clippy::too_many_arguments, reason = "one step of time_base, split off for length")]
fn settle(
    sorted: &mut Vec<f64>,
    record: &mut Vec<u32>,
    table: &Table,
    step: f64,
    unit_s: f64,
    lines: &[u32],
    ledger: &mut Ledger,
    findings: &mut Vec<String>,
) -> f64 {
    let grid = clock_grid(sorted, step);
    let mut resolution = grid;
    let places: Vec<f64> = record.iter().map(|index| f64::from(lines[*index as usize])).collect();
    let mut put_on_lines = |stamps: &mut [f64]| {
        findings.push(format!("the clock's stamps step by {:.6} s", grid * unit_s));
        let interval = usual_interval(stamps, grid);
        let moved = straighten(stamps, &places, grid, interval);
        if moved > 0 {
            findings.push(format!(
                "{moved} stamps rounded to that step put on straight lines that all of them lie within a step of"
            ));
        }
    };
    if sorted.windows(2).all(|pair| pair[1] > pair[0]) {
        if grid > 0.0 {
            put_on_lines(sorted);
        }
        return resolution;
    }
    let adjacent = |index: usize| record[index] == record[index - 1] + 1;
    let same: Vec<bool> = (0..record.len())
        .map(|index| index > 0 && adjacent(index) && table.same_line[record[index] as usize])
        .collect();
    let unchanged = |index: usize| {
        let (now, then) = (record[index] as usize, record[index - 1] as usize);
        table.channels.iter().all(|channel| channel[now] == channel[then])
    };
    let repeats = resolve_repeats(sorted, &same, &unchanged, &places, step);
    if repeats.coarse {
        resolution = step;
        let message = format!(
            "the clock ticks by {} s, too coarsely for the rate of the samples; {} stamps spread evenly",
            step * unit_s,
            repeats.spread
        );
        findings.push(message.clone());
        ledger.entry(None, "time", message);
    } else if repeats.spread > 0 {
        ledger.entry(None, "time", format!("{} samples shared a stamp with their neighbour; spread", repeats.spread));
    }
    if !repeats.coarse && grid > 0.0 {
        findings.push(format!("the clock's stamps step by {:.6} s", grid * unit_s));
    }
    // Second copies go, and, as a last resort, whatever still does not rise.
    let mut duplicates = repeats.duplicates.iter().copied().peekable();
    let mut latest = f64::NEG_INFINITY;
    let mut kept = 0;
    for index in 0..sorted.len() {
        let (stamp, number) = (sorted[index], record[index]);
        if duplicates.next_if_eq(&index).is_some() {
            ledger.dropped(u64::from(lines[number as usize]), || "the record before, written once more".to_owned());
        } else if stamp <= latest {
            ledger.dropped(u64::from(lines[number as usize]), || "stamp not later than the one before".to_owned());
        } else {
            latest = stamp;
            sorted[kept] = stamp;
            record[kept] = number;
            kept += 1;
        }
    }
    sorted.truncate(kept);
    record.truncate(kept);
    resolution
}

/// Median interval; where the stamps stand on a grid, the mean of those that are no gaps, for the median then stands on it too.
fn usual_interval(time_s: &[f64], resolution_s: f64) -> f64 {
    let Some(median) = usual_step(time_s) else { return 0.0 };
    if resolution_s == 0.0 {
        return median;
    }
    let limit = (1.6 * median).max(median + 1.5 * resolution_s.min(median));
    let (sum, count) = time_s
        .windows(2)
        .map(|pair| pair[1] - pair[0])
        .filter(|step| *step <= limit)
        .fold((0.0, 0usize), |(sum, count), step| (sum + step, count + 1));
    if count > 0 { sum / count as f64 } else { median }
}

/// Intervals that stand out of the jitter: more than 1.6 usual ones, more than six standard deviations (from the median
/// absolute deviation, which the gaps themselves do not move), more than a step of the clock.
fn find_gaps(time_s: &[f64], interval_s: f64, resolution_s: f64) -> Vec<Gap> {
    let mut deviations = sampled_steps(time_s, MANY_STEPS);
    deviations.iter_mut().for_each(|value| *value = (*value - interval_s).abs());
    if deviations.len() < 2 {
        return Vec::new();
    }
    let middle = deviations.len() / 2;
    // 1.4826: standard deviation over median absolute deviation of a normal distribution.
    let sd = 1.4826 * *deviations.select_nth_unstable_by(middle, f64::total_cmp).1;
    let coarse = if resolution_s <= 2.0 * interval_s { 1.5 * resolution_s } else { 0.0 };
    let limit = (1.6 * interval_s).max(interval_s + 6.0 * sd).max(interval_s + coarse);
    time_s
        .windows(2)
        .filter(|pair| pair[1] - pair[0] > limit)
        .map(|pair| Gap {
            start_s: pair[0],
            end_s: pair[1],
            missing: ((pair[1] - pair[0]) / interval_s - 1.0).round().max(1.0) as u64,
        })
        .collect()
}
