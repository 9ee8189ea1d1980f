//! The checks: each says what was looked at, what was found and what to do about it.

mod check_load;

use super::figures::{self, CRYSTAL_CLOCK, Figures};
use super::{Record, bursts, curve::Curve, stand::Stand, zero::Zero};
use crate::firing::{BurstKind, Check, Status};
use crate::run::Orientation;

/// Limits the checks hold the firing against. All are the project's own judgement, no source.
mod limit {
    /// Uncertainty of the impulse that the zero alone may make, as a share of the impulse.
    pub const ZERO_SHARE: f64 = 0.002;
    /// Quiet record either side below which its level is called poorly known, s.
    pub const QUIET_S: f64 = 1.0;
    /// Drift of the zero as a share of peak thrust: said, and called too much.
    pub const DRIFT_CAUTION: f64 = 0.005;
    pub const DRIFT_FAIL: f64 = 0.05;
    /// Samples over the burn below which the curve is called coarse.
    pub const SAMPLES: f64 = 40.0;
    /// Share of the burn in gaps: said, and called too much.
    pub const GAP_FAIL: f64 = 0.05;
    /// Share of the records repaired or dropped: said, and called too much.
    pub const REPAIR_CAUTION: f64 = 0.001;
    pub const REPAIR_FAIL: f64 = 0.05;
    /// Noise as a share of peak: said, and called too much.
    pub const NOISE_CAUTION: f64 = 0.02;
    pub const NOISE_FAIL: f64 = 0.2;
    /// Natural frequency of the stand, as a share of the sample rate, above which its swing is not followed.
    pub const RINGING_SHARE: f64 = 0.25;
    /// Swings of the stand during the burn below which they are not told from the motor's own course (common practice, no source).
    pub const SLOW_STAND_CYCLES: f64 = 10.0;
    /// Relative standard uncertainty of the force scale that is called poor.
    pub const SCALE: f64 = 0.005;
    /// Specific impulse that no solid propellant exceeds on the ground, and none that burns as one falls short of, s (from memory).
    pub const MOST_ISP_S: f64 = 330.0;
    pub const LEAST_ISP_S: f64 = 20.0;
    /// Mass by weight shift against weighed mass, in standard uncertainties and as a share.
    pub const MASS_SIGMAS: f64 = 3.0;
    pub const MASS_FAIL: f64 = 0.15;
}

struct Checks(Vec<Check>);

impl Checks {
    fn add(&mut self, id: &str, status: Status, message: impl Into<String>) {
        self.0.push(Check { id: id.to_string(), status, message: message.into() });
    }
}

fn percent(x: f64) -> String {
    format!("{:.2} %", 100.0 * x)
}

pub fn all(record: &Record<'_>, zero: &Zero, curve: &Curve, figures: &Figures, stand: Option<&Stand>) -> Vec<Check> {
    let mut c = Checks(Vec::new());
    readings(&mut c, record);
    calibration(&mut c, record, figures);
    zeros(&mut c, record, zero, figures);
    sampling(&mut c, record, figures);
    ringing(&mut c, record, figures, stand);
    signal(&mut c, record, curve, figures);
    mass(&mut c, record, zero, figures);
    check_load::check(&mut c, record);
    other_bursts(&mut c, record);
    overrides(&mut c, record);
    c.0
}

fn readings(c: &mut Checks, record: &Record<'_>) {
    let inside = figures::clipped_in_burn(record);
    let samples: usize = inside.iter().map(|r| r.len()).sum();
    match record.clipped_at {
        Some(at) if !inside.is_empty() => c.add(
            "clipping",
            Status::Fail,
            format!(
                "{samples} samples of the burn are cut at a reading of {at}: impulse and peak are lower bounds. Lower the gain or take a larger cell"
            ),
        ),
        Some(at) => c.add(
            "clipping",
            Status::Caution,
            format!("readings are cut at {at}, but outside the burn: its figures are not touched"),
        ),
        None => c.add("clipping", Status::Pass, "no reading is cut at a limit of converter or amplifier"),
    }
    let burst = record.burn.start..record.burn.end;
    let over: Vec<String> = record
        .channels
        .iter()
        .filter_map(|ch| {
            let capacity = ch.calibration.capacity_n?;
            let inside = ch.force_n[burst.clone()].iter().fold(0.0, |m: f64, f| m.max(f.abs()));
            let anywhere = ch.force_n.iter().fold(0.0, |m: f64, f| m.max(f.abs()));
            (anywhere > capacity).then(|| {
                format!(
                    "{} read {anywhere:.0} N{}, its capacity is {capacity:.0} N",
                    ch.calibration.name,
                    if inside > capacity { " in the burn" } else { " outside the burn" }
                )
            })
        })
        .collect();
    let in_burn = over.iter().any(|m| m.contains(" in the burn"));
    match (over.is_empty(), in_burn) {
        (true, _) => c.add("overload", Status::Pass, "no cell was loaded above its capacity, where one is stated"),
        (false, true) => {
            c.add("overload", Status::Fail, format!("{}: calibrate the cell again before it is used", over.join("; ")));
        }
        (false, false) => {
            c.add("overload", Status::Caution, format!("{}: check the cell's zero and slope", over.join("; ")));
        }
    }
}

fn calibration(c: &mut Checks, record: &Record<'_>, figures: &Figures) {
    let mut beyond = Vec::new();
    for ch in &record.channels {
        if let Some([_, top]) = ch.calibration.range_n {
            let highest = ch.force_n[record.burn.start..record.burn.end].iter().fold(0.0, |m: f64, f| m.max(f.abs()));
            if highest > 1.02 * top.abs() {
                beyond.push(format!(
                    "{highest:.0} N read on {}, heaviest calibration load {top:.0} N",
                    ch.calibration.name
                ));
            }
        }
    }
    if beyond.is_empty() {
        c.add("calibration_range", Status::Pass, "the thrust lies within the calibration, where it has a range");
    } else {
        c.add(
            "calibration_range",
            Status::Caution,
            format!("{}: uncertainty widened; calibrate with heavier weights", beyond.join("; ")),
        );
    }
    let peak = figures.quantities.peak_thrust.as_ref();
    let relative = peak.and_then(|p| Some(p.standard_uncertainty? / p.value));
    match (figures.scale_known, relative) {
        (false, _) => c.add(
            "calibration_quality",
            Status::Caution,
            "nothing is known of the error of the force scale: no uncertainty is given for what depends on it. Calibrate with weights, or state `accuracy` of the channel",
        ),
        (true, Some(u)) if u > limit::SCALE => c.add(
            "calibration_quality",
            Status::Caution,
            format!("peak thrust is known to ± {} only; see the uncertainty budget for what to improve", percent(1.96 * u)),
        ),
        _ => c.add("calibration_quality", Status::Pass, "the force scale has a stated error, and it is small enough"),
    }
}

fn zeros(c: &mut Checks, record: &Record<'_>, zero: &Zero, figures: &Figures) {
    let burst_s = record.time_s[record.burn.end - 1] - record.time_s[record.burn.start];
    for (id, fit, side) in
        [("baseline_before", zero.baseline.before, "before"), ("baseline_after", zero.baseline.after, "after")]
    {
        match fit {
            None if id == "baseline_before" => c.add(
                id,
                Status::Fail,
                "no quiet record before the burn: the zero rests on the record after it alone. Start the log earlier",
            ),
            None if record.burn.cut_at_end => c.add(
                id,
                Status::Fail,
                "the record ends before the thrust does: no zero after the burn; the tail is extrapolated and its impulse given apart. Log for longer",
            ),
            None => c.add(
                id,
                Status::Caution,
                "no quiet record after the burn: the zero before it is used throughout, and drift goes unseen",
            ),
            Some(q) => {
                let share = q.level_u * burst_s / figures.total_impulse.abs();
                let text = format!(
                    "{} samples over {:.2} s {side} the burn, level known to ± {:.3} N",
                    q.samples,
                    q.duration_s,
                    1.96 * q.level_u
                );
                if q.duration_s < limit::QUIET_S || share > limit::ZERO_SHARE {
                    c.add(id, Status::Caution, format!("{text}: short or unsteady; leave the stand alone for longer"));
                } else {
                    c.add(id, Status::Pass, text);
                }
            }
        }
    }
    let vertical = record.orientation != Orientation::Horizontal;
    let share = zero.drift_n.abs() / figures.peak_n;
    let noise = zero.baseline.shift_u_n().unwrap_or(f64::INFINITY);
    let what = if vertical { "beyond what the propellant's weight explains" } else { "between before and after" };
    if zero.baseline.shift_n().is_none() {
        c.add(
            "baseline_shift",
            Status::Caution,
            "the zero is known on one side of the burn only: its drift cannot be seen",
        );
    } else if zero.wrong_way {
        c.add(
            "baseline_shift",
            Status::Fail,
            "the zero moved the wrong way for the stated orientation: check `orientation`, and whether something fell on or off the stand",
        );
    } else if zero.drift_n.abs() > 3.0 * noise && share > limit::DRIFT_CAUTION {
        let status = if share > limit::DRIFT_FAIL { Status::Fail } else { Status::Caution };
        c.add(
            "baseline_shift",
            status,
            format!(
                "the zero moved by {:.3} N {what} ({} of peak): taken as {}, uncertainty widened",
                zero.drift_n,
                percent(share),
                zero.course()
            ),
        );
    } else {
        c.add(
            "baseline_shift",
            Status::Pass,
            format!("the zero moved by {:.3} N {what} ({} of peak)", zero.drift_n, percent(share)),
        );
    }
}

fn sampling(c: &mut Checks, record: &Record<'_>, figures: &Figures) {
    let burn_time = figures.times.end_s - figures.times.start_s;
    let samples = burn_time / record.interval_s();
    let rate = 1.0 / record.interval_s();
    let averaged = record.averaged_cells();
    if samples < limit::SAMPLES {
        c.add(
            "sampling",
            Status::Caution,
            format!(
                "{samples:.0} samples over the burn ({rate:.1} Hz): times and peak rest on few samples{}. Log faster if you can",
                if averaged { ", though each is a mean over its interval" } else { "" }
            ),
        );
    } else {
        let clock = match &record.inputs.run.log.clock_tolerance {
            Some(t) => format!("clock within ± {}", percent(t.value)),
            None => format!(
                "clock taken as a crystal, within ± {} (from memory; state `clock_tolerance`)",
                percent(CRYSTAL_CLOCK)
            ),
        };
        c.add("sampling", Status::Pass, format!("{samples:.0} samples over the burn ({rate:.1} Hz); {clock}"));
    }
    let (start, end) = (figures.times.thrust_start_s, figures.times.thrust_end_s);
    let half = record.inputs.run.log.averaging_s.map_or(0.0, |a| 0.5 * a);
    let inside: Vec<f64> = record
        .inputs
        .log
        .gaps
        .iter()
        .map(|g| (g.end_s - half).min(end) - (g.start_s - half).max(start))
        .filter(|s| *s > 0.0)
        .collect();
    let share = inside.iter().sum::<f64>() / (end - start).max(f64::MIN_POSITIVE);
    match inside.len() {
        0 => c.add("gaps", Status::Pass, "no gap in the record during thrust"),
        n => c.add(
            "gaps",
            if share > limit::GAP_FAIL { Status::Fail } else { Status::Caution },
            format!("{n} gaps cover {} of the thrust: bridged by straight lines, uncertainty widened", percent(share)),
        ),
    }
    let r = record.inputs.log.records;
    let share = (r.repaired + r.dropped) as f64 / (r.read.max(1)) as f64;
    let text = format!("{} records read: {} kept, {} repaired, {} dropped", r.read, r.kept, r.repaired, r.dropped);
    let status = if share > limit::REPAIR_FAIL {
        Status::Fail
    } else if share > limit::REPAIR_CAUTION {
        Status::Caution
    } else {
        Status::Pass
    };
    c.add("repairs", status, text);
}

fn ringing(c: &mut Checks, record: &Record<'_>, figures: &Figures, stand: Option<&Stand>) {
    let rate_hz = 1.0 / record.interval_s();
    match stand {
        None => c.add("ringing", Status::Pass, "no oscillation of the stand found: nothing taken out"),
        Some(s) if s.taken_out && s.frequency_hz > limit::RINGING_SHARE * rate_hz => c.add(
            "ringing",
            Status::Caution,
            format!(
                "the stand rings at {:.1} Hz, too fast for {rate_hz:.0} samples a second: peak and rise may be the stand's. Log faster",
                s.frequency_hz
            ),
        ),
        Some(s) if s.taken_out && (figures.times.end_s - figures.times.start_s) * s.frequency_hz < limit::SLOW_STAND_CYCLES => c.add(
            "ringing",
            Status::Caution,
            format!(
                "the stand swings at {:.1} Hz, {:.1} times during the burn: that slow, its swing and the motor's own course are hard to tell apart, and what was taken out may be the motor's. Stiffen the stand",
                s.frequency_hz,
                (figures.times.end_s - figures.times.start_s) * s.frequency_hz
            ),
        ),
        Some(s) if !s.taken_out && s.share_of_peak.is_some_and(|a| a > 0.0) => c.add(
            "ringing",
            Status::Caution,
            format!(
                "a swing at {:.1} Hz by {} of peak after ignition, which may be the stand's or the motor's own: not taken out, so peak and rise may be high by as much. Give natural_frequency and damping_ratio from a tap test under [stand]",
                s.frequency_hz,
                percent(s.share_of_peak.unwrap_or(0.0))
            ),
        ),
        Some(s) if !s.taken_out => c.add(
            "ringing",
            Status::Pass,
            format!("the stand rings at {:.1} Hz when knocked, but not after ignition: nothing taken out", s.frequency_hz),
        ),
        Some(s) => c.add(
            "ringing",
            Status::Caution,
            format!(
                "the stand rings at {:.2} Hz{}, damping ratio {:.3} ({}){}: its response is taken out of the curve; peak, rise and crossings rest on that{}",
                s.frequency_hz,
                s.frequency_after_hz.map_or(String::new(), |hz| format!(" at ignition and {hz:.2} Hz after burn-out")),
                s.damping_ratio,
                s.source,
                s.share_of_peak.map_or(String::new(), |a| format!(", swinging by {} of peak", percent(a))),
                s.contradicts.map_or(String::new(), |n| format!(
                    ". The record contradicts the frequency told in run.toml by {n:.0} standard uncertainties"
                ))
            ),
        ),
    }
}

fn signal(c: &mut Checks, record: &Record<'_>, curve: &Curve, figures: &Figures) {
    let noise = curve.quiet_sd_n / figures.peak_n;
    let text = format!("noise of single samples {} of peak", percent(noise));
    if noise > limit::NOISE_FAIL {
        c.add("noise", Status::Fail, format!("{text}: the curve cannot be trusted"));
    } else if noise > limit::NOISE_CAUTION {
        c.add(
            "noise",
            Status::Caution,
            format!("{text}: a raw 5 % crossing would mean nothing, so times come from the smoothed curve"),
        );
    } else {
        c.add("noise", Status::Pass, text);
    }
    if record.sign < 0.0 {
        c.add(
            "polarity",
            Status::Caution,
            "readings fall during thrust: the thrust pulls where the weights pushed; signs turned. The calibration holds for pull only if the cell is alike in both directions",
        );
    } else {
        c.add("polarity", Status::Pass, "readings rise with thrust");
    }
}

fn mass(c: &mut Checks, record: &Record<'_>, zero: &Zero, figures: &Figures) {
    let weighed = record.inputs.run.motor.propellant_mass_kg;
    let isp_s = figures.quantities.specific_impulse.as_ref().map(|f| f.value);
    if let Some(isp_s) = isp_s.filter(|s| !(limit::LEAST_ISP_S..limit::MOST_ISP_S).contains(s)) {
        c.add(
            "propellant_mass",
            Status::Fail,
            format!(
                "a specific impulse of {isp_s:.0} s is none that a solid motor has (some 50 to 300 s): the unit of the time, of the force or of the propellant's mass is wrong, or the calibration is"
            ),
        );
        return;
    }
    match (weighed, zero.shift_mass_kg) {
        (Some(mass), Some((kg, u))) => {
            let off = kg - mass.value;
            let u = u.hypot(mass.standard_uncertainty.unwrap_or(0.0));
            let share = off.abs() / mass.value;
            let text = format!(
                "weight that left the stand speaks for {kg:.4} kg ± {:.4} kg, weighed {:.4} kg",
                1.96 * u,
                mass.value
            );
            if off.abs() <= limit::MASS_SIGMAS * u || share < 0.02 {
                c.add("propellant_mass", Status::Pass, format!("{text}: they agree"));
            } else if share < limit::MASS_FAIL {
                c.add("propellant_mass", Status::Caution, format!("{text}: drift of the zero, or nozzle and liner lost besides"));
            } else {
                c.add("propellant_mass", Status::Fail, format!("{text}: check calibration, gravity, orientation and the weighing"));
            }
        }
        (Some(mass), None) => c.add(
            "propellant_mass",
            Status::Pass,
            format!("weighed {:.4} kg; the stand carries no weight shift to hold it against", mass.value),
        ),
        (None, Some((kg, u))) if figures.mass_from_shift => c.add(
            "propellant_mass",
            Status::Caution,
            format!(
                "not weighed: {kg:.4} kg ± {:.4} kg from the weight that left the stand, which is not independent of the cell. Warmth of the cell after ignition passes for mass and is not in the ±: it may be several per cent off",
                1.96 * u
            ),
        ),
        _ => c.add(
            "propellant_mass",
            Status::Caution,
            "not weighed: no specific impulse. Weigh the motor before and after, or the propellant",
        ),
    }
}

fn other_bursts(c: &mut Checks, record: &Record<'_>) {
    let others: Vec<String> = record
        .segmentation
        .events
        .iter()
        .filter(|e| e.end <= record.burn.start || e.start >= record.burn.end)
        .filter(|e| e.peak.abs() > bursts::LEAST_PEAK * record.burn.peak.abs())
        .map(|e| {
            let kind = match bursts::kind(e, &record.burn, &record.time_s, &record.inputs.run.check_loads, 1.0) {
                BurstKind::Burn => "burn",
                BurstKind::Chuff => "chuff",
                BurstKind::Knock => "knock",
                BurstKind::Ejection => "ejection",
                BurstKind::Other => "other",
            };
            format!("{kind} at {:.2} s, {:.2} N·s, peak {:.1} N", record.time_s[e.start], e.impulse, e.peak)
        })
        .collect();
    if others.is_empty() {
        c.add("other_bursts", Status::Pass, "the burn is the only burst of the record");
    } else {
        c.add(
            "other_bursts",
            Status::Caution,
            format!("the burn is the burst with the largest impulse; left out: {}", others.join("; ")),
        );
    }
}

fn overrides(c: &mut Checks, record: &Record<'_>) {
    let r = &record.inputs.run.reduction;
    let mut set = Vec::new();
    if let Some(s) = r.burn_start_s {
        set.push(format!("burn_start = {s} s"));
    }
    if let Some(s) = r.burn_end_s {
        set.push(format!("burn_end = {s} s"));
    }
    if let Some(b) = r.burst {
        set.push(format!("burst = {b}"));
    }
    match r.lowpass {
        Some(crate::run::Lowpass::Off) => set.push("lowpass = off".to_string()),
        Some(crate::run::Lowpass::CutoffHz(hz)) => set.push(format!("lowpass = {hz} Hz")),
        None => {}
    }
    if set.is_empty() {
        c.add("override", Status::Pass, "nothing set by hand");
    } else {
        c.add("override", Status::Caution, format!("set by hand in run.toml: {}", set.join(", ")));
    }
}
