//! The burn among the bursts, and what the others are.

use crate::burn::events::{self, Event, Segmentation};
use crate::firing::BurstKind;
use crate::problem::Problem;
use crate::run::{CheckLoadSpec, ReductionSpec};

/// Shortest stretch that an impact of the stand may ring and still be called one, s.
const KNOCK_S: f64 = 0.6;
/// A burst after the burn that stands this far above it is an impact, however long it rings: no ejection pushes so hard.
const KNOCK_HEIGHT: f64 = 1.2;
/// A burst of less than this share of the burn's peak is not told apart from the record's own unrest.
pub const LEAST_PEAK: f64 = 0.01;

/// Whether the burst is a known weight laid on the stand.
fn is_check_load(event: &Event, time_s: &[f64], loads: &[CheckLoadSpec]) -> bool {
    let (start, end) = (time_s[event.start], time_s[event.end - 1]);
    loads.iter().any(|l| start < l.to_s && end > l.from_s)
}

/// Index of the burn: the burst a person named, else that with the largest impulse, never merely the largest peak.
pub fn choose(
    segmentation: &Segmentation,
    time_s: &[f64],
    loads: &[CheckLoadSpec],
    reduction: &ReductionSpec,
) -> Result<usize, Problem> {
    let events = &segmentation.events;
    if let Some(number) = reduction.burst {
        if number == 0 || number > events.len() {
            return Err(Problem::new(format!(
                "[reduction] burst = {number}, but the log holds {} bursts",
                events.len()
            ))
            .expected(format!("a number from 1 to {}", events.len().max(1)))
            .remedy("run `burntally inspect` on the log to see its bursts"));
        }
        return Ok(number - 1);
    }
    if let (Some(start), Some(end)) = (reduction.burn_start_s, reduction.burn_end_s)
        && let Some(i) =
            events.iter().position(|e| time_s[e.start] < end && time_s[e.end - 1] > start && e.impulse != 0.0)
    {
        return Ok(i);
    }
    (0..events.len())
        .filter(|&i| !is_check_load(&events[i], time_s, loads))
        .max_by(|&a, &b| events[a].impulse.abs().total_cmp(&events[b].impulse.abs()))
        .ok_or_else(|| {
            Problem::new("no burst found: the force channel stays within its noise from start to end")
                .expected("a stretch in which the force rises out of the quiet record")
                .remedy("check that `column` in [[channel]] names the load cell, or look with `burntally inspect`")
        })
}

/// A level after the burn that is off by this share of its peak may be a tail that seemed level for a moment.
const TAIL_LEVEL: f64 = 0.002;
/// The level after what follows must be off by at most this share of that.
const TAIL_GONE: f64 = 0.3;
/// What follows may stand out by this share of the burn's peak and still be its tail.
const TAIL_PEAK: f64 = 0.1;

/// A block is off the level of rest from so many standard deviations of a block on.
const REST_SIGMAS: f64 = 5.0;

/// Joins the burn to what follows it where that is its own tail: a slow tail may look level for a moment, still above the zero that
/// `shift` leads to from the level before, and the record comes down to that zero only later.
pub fn take_up_tail(segmentation: &mut Segmentation, chosen: usize, shift: f64, time_s: &[f64], force_n: &[f64]) {
    while let (Some(burn), Some(next)) =
        (segmentation.events.get(chosen).copied(), segmentation.events.get(chosen + 1).copied())
    {
        let next = if next.cut_at_end { come_to_rest(&next, segmentation, force_n) } else { next };
        let sign = burn.impulse.signum();
        let zero = burn.level_before + shift;
        let (off, left) = ((burn.level_after - zero) * sign, (next.level_after - zero).abs());
        let gap_s = time_s[next.start] - time_s[burn.end - 1];
        let is_tail = off > TAIL_LEVEL * burn.peak.abs()
            && left < TAIL_GONE * off
            && next.peak.abs() < TAIL_PEAK * burn.peak.abs()
            && gap_s < 0.5 * (time_s[burn.end - 1] - time_s[burn.start]);
        if !is_tail {
            break;
        }
        let mut joined = Event { end: next.end, cut_at_end: next.cut_at_end, level_after: next.level_after, ..burn };
        events::measure(&mut joined, time_s, force_n, segmentation.block);
        segmentation.events[chosen] = joined;
        segmentation.events.remove(chosen + 1);
        segmentation.quiet.retain(|q| q.start < burn.end || q.start >= next.end);
        if next.end < force_n.len() && !segmentation.quiet.iter().any(|q| q.start >= next.end) {
            segmentation.quiet.push(next.end..force_n.len());
        }
    }
}

/// An event that the search left open to the end of the record, ended where its last third's level is first kept to.
fn come_to_rest(event: &Event, segmentation: &Segmentation, force_n: &[f64]) -> Event {
    let last = event.end - (event.end - event.start) / 3;
    let mean = |f: &[f64]| f.iter().sum::<f64>() / f.len().max(1) as f64;
    let level = mean(&force_n[last.min(event.end - 1)..event.end]);
    let near = REST_SIGMAS * segmentation.block_noise;
    let block = segmentation.block.max(1);
    let from = (event.start..last)
        .step_by(block)
        .rfind(|i| (mean(&force_n[*i..(*i + block).min(event.end)]) - level).abs() > near)
        .map_or(event.start, |i| (i + block).min(last));
    Event { end: from, cut_at_end: false, level_after: level, ..*event }
}

/// Drops events too small beside the burn to be told from the record's own unrest, and joins the quiet on either side: a tail
/// that fades under the search's threshold leaves such events.
pub fn join_quiet(segmentation: &mut Segmentation, burn: &Event) {
    let small = |e: &Event| e.start != burn.start && e.peak.abs() < LEAST_PEAK * burn.peak.abs();
    for event in segmentation.events.iter().filter(|e| small(e)) {
        let before = segmentation.quiet.iter().position(|q| q.end == event.start);
        let after = segmentation.quiet.iter().position(|q| q.start == event.end);
        match (before, after) {
            (Some(b), Some(a)) => {
                segmentation.quiet[b].end = segmentation.quiet[a].end;
                segmentation.quiet.remove(a);
            }
            (Some(b), None) => segmentation.quiet[b].end = event.end,
            (None, Some(a)) => segmentation.quiet[a].start = event.start,
            (None, None) => {}
        }
    }
    segmentation.events.retain(|e| !small(e));
}

/// What a burst other than the burn is; `sign` is that of thrust.
pub fn kind(event: &Event, burn: &Event, time_s: &[f64], loads: &[CheckLoadSpec], sign: f64) -> BurstKind {
    if event.start == burn.start {
        return BurstKind::Burn;
    }
    if is_check_load(event, time_s, loads) {
        return BurstKind::Other;
    }
    let duration = time_s[event.end - 1] - time_s[event.start];
    let (peak, impulse) = (event.peak * sign, event.impulse * sign);
    // An impact swings through zero and leaves little impulse for its height, or stands far above the burn for a moment.
    let swings = impulse.abs() < 0.25 * peak.abs() * duration;
    if event.start > burn.start {
        if peak.abs() > KNOCK_HEIGHT * burn.peak.abs() || (duration < KNOCK_S && swings) {
            BurstKind::Knock
        } else if duration < 1.0 && peak.abs() > 0.02 * burn.peak.abs() {
            BurstKind::Ejection
        } else {
            BurstKind::Other
        }
    } else if peak > 0.0 && impulse > 0.0 && !(duration < 0.15 && swings) {
        BurstKind::Chuff
    } else if duration < KNOCK_S {
        BurstKind::Knock
    } else {
        BurstKind::Other
    }
}
