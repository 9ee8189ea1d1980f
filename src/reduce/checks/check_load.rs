//! A known weight laid on the stand during the record, against the force read: an end-to-end test of cell, lever and friction.

use super::{Checks, Record};
use crate::firing::Status;
use crate::run::CheckLoadSpec;
use std::ops::Range;

/// Share by which weight and reading may differ: said, and called too much. The project's own judgement, no source.
const CAUTION: f64 = 0.005;
const FAIL: f64 = 0.02;
/// Record left out where the weight is laid on and taken off: a share of its time on the stand, and s beside it.
const EDGE_SHARE: f64 = 0.1;
const EDGE_S: f64 = 0.3;
/// End of a quiet stretch left out, where the first foot of a burn may lie, s.
const FOOT_S: f64 = 0.1;

pub fn check(c: &mut Checks, record: &Record<'_>) {
    let loads = &record.inputs.run.check_loads;
    if loads.is_empty() {
        c.add("check_load", Status::Pass, "no known weight was laid on the stand during the record");
    }
    for load in loads {
        let Some(read) = read_n(record, load) else {
            c.add(
                "check_load",
                Status::Fail,
                format!("no record between {} s and {} s to check the weight in", load.from_s, load.to_s),
            );
            continue;
        };
        let expected = load.mass_kg.value * record.gravity.value_m_s2;
        let ratio = read / expected;
        let (status, advice) = match (ratio - 1.0).abs() {
            off if off > FAIL => (Status::Fail, ADVICE),
            off if off > CAUTION => (Status::Caution, ADVICE),
            _ => (Status::Pass, ""),
        };
        c.add(
            "check_load",
            status,
            format!(
                "{:.4} kg on the stand pushes with {expected:.2} N; read {read:.2} N, ratio {ratio:.4}{advice}",
                load.mass_kg.value
            ),
        );
    }
}

const ADVICE: &str = ": friction, lever (force_ratio) or calibration is off by as much, and every force with it";

/// Force read under the weight, above what the stand rests on beside it, N.
fn read_n(record: &Record<'_>, load: &CheckLoadSpec) -> Option<f64> {
    let samples =
        |from: f64, to: f64| record.time_s.partition_point(|t| *t < from)..record.time_s.partition_point(|t| *t < to);
    let sum = |range: Range<usize>| -> (f64, usize) {
        if range.is_empty() { (0.0, 0) } else { (record.force_n[range.clone()].iter().sum(), range.len()) }
    };
    // Only the quiet stretch next to the weight says where the stand rests: the burn may follow at once.
    let guard = (FOOT_S / record.interval_s()) as usize;
    let at_rest = |from: f64, to: f64, stretch: Option<&Range<usize>>| {
        let (near, stretch) = (samples(from, to), stretch.cloned().unwrap_or(0..0));
        sum(stretch.start.max(near.start)..stretch.end.saturating_sub(guard).min(near.end))
    };
    let quiet = &record.segmentation.quiet;
    let on = samples(load.from_s, load.to_s);
    let span = load.to_s - load.from_s;
    let before = at_rest(load.from_s - span, load.from_s - EDGE_S, quiet.iter().rev().find(|q| q.start < on.start));
    let after = at_rest(load.to_s + EDGE_S, load.to_s + span, quiet.iter().find(|q| q.end > on.end));
    let loaded = sum(samples(load.from_s + EDGE_SHARE * span, load.to_s - EDGE_SHARE * span));
    let rest = (before.0 + after.0, before.1 + after.1);
    (loaded.1 > 1 && rest.1 > 1).then(|| (loaded.0 / loaded.1 as f64 - rest.0 / rest.1 as f64).abs())
}
