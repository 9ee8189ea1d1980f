//! The thrust curve: conditioned, reconstructed inside the cells of an averaging converter, continued beyond a cut end.

use super::{Record, figures::Figures, stand::Stand, zero, zero::Zero};
use crate::burn::tail::{self, Tail};
use crate::condition::averaging::{self, Edge};
use crate::condition::conditioned::{self, Conditioned, Peak, Through};
use crate::firing::Curves;
use crate::measure::integral;
use crate::problem::Problem;

/// Conditioned thrust with its landmarks' raw material.
pub struct Curve {
    pub conditioned: Conditioned,
    /// The curve that figures are read from: the conditioned one, or its reconstruction inside averaged cells.
    pub time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    pub peak: Peak,
    pub quiet_sd_n: f64,
    pub tail: Option<Tail>,
    /// Relative standard uncertainty of the stand's frequency, and that of its damping ratio, where its response is taken out.
    pub stand_u: Option<[f64; 2]>,
    /// Whether the curve was reconstructed inside averaged cells.
    pub reconstructed: bool,
    /// Reconstructed rise and fall of an averaging converter.
    pub rise: Option<Edge>,
    pub fall: Option<Edge>,
    /// Time that the burst takes by samples, s.
    pub burst_s: [f64; 2],
}

impl Curve {
    /// The conditioning in words.
    pub fn describe(&self, stand: Option<&Stand>) -> String {
        let mut words = Vec::new();
        if self.conditioned.resampled {
            words.push("put on an even grid by straight lines".to_string());
        }
        if let Some(stand) = stand.filter(|s| s.taken_out) {
            words.push(format!(
                "response of the stand taken out ({:.2} Hz{}, damping ratio {:.3}, {})",
                stand.frequency_hz,
                stand.frequency_after_hz.map_or(String::new(), |hz| format!(" at ignition, {hz:.2} Hz after burn-out")),
                stand.damping_ratio,
                stand.source
            ));
        }
        match self.conditioned.cutoff_hz {
            Some(hz) => words.push(format!("zero-phase Butterworth low-pass, second order run both ways, {hz:.3} Hz")),
            None if self.conditioned.band_end_hz.is_some() => {
                let hz = self.conditioned.band_end_hz.unwrap_or(0.0);
                let gain = self.conditioned.noise_gain();
                words.push(format!(
                    "the band of the compensation ends at {hz:.0} Hz (half amplitude), where it takes the noise of a reading up {gain:.1} times before smoothing"
                ));
            }
            None => words.push("no low-pass: signal reaches up to the end of the band".to_string()),
        }
        if self.conditioned.ignition.is_some() {
            words.push("ignition fitted by driving models of the rise through the stand".to_string());
        }
        if self.conditioned.smoothed {
            words.push("local straight lines over windows as long as they agree within the noise".to_string());
        }
        if self.reconstructed {
            words.push("curve inside the averaging cells reconstructed so that each keeps its mean".to_string());
        }
        words.join("; ")
    }
}

/// Above this many cells the features are long against a cell, and reconstruction changes nothing.
const MOST_CELLS: usize = 20_000;

pub fn condition(record: &Record<'_>, zero: &Zero, stand: Option<&Stand>) -> Result<Curve, Problem> {
    let time_s = &record.time_s[zero.window.clone()];
    let quiet_sd_n = zero::sample_noise(zero);
    let burst_s = [record.time_s[record.burn.start], record.time_s[zero.burst.end - 1]];
    let readings = stand.map(|s| &s.readings_n).filter(|r| r.len() == time_s.len()).unwrap_or(&zero.thrust_n);
    let mut conditioned = conditioned::condition(
        time_s,
        readings,
        record.interval_s(),
        quiet_sd_n,
        record.time_s[record.burn.end - 1] - record.time_s[record.burn.start],
        record.inputs.run.reduction.lowpass,
        stand.filter(|s| s.taken_out).map(|s| Through {
            response: s.response(),
            inertia: &s.inertia,
            ignition: s.ignition.as_ref(),
        }),
    );
    let first = conditioned.time_s.partition_point(|t| *t < burst_s[0]);
    let last = conditioned.time_s.partition_point(|t| *t <= burst_s[1]);
    let mut peak = conditioned
        .peak(first..last.max(first + 1).min(conditioned.time_s.len()), record.averaged_cells())
        .filter(|p| p.thrust_n > 0.0)
        .ok_or_else(|| Problem::new("the burst has no thrust above its zero").in_file(&record.inputs.run.log.file))?;
    if !record.clipped.is_empty() {
        // Nothing is known above the cut: the highest reading is what was measured.
        peak.thrust_n = peak.highest_n;
    }
    conditioned.settle_peak(&peak);
    let (mut curve_s, mut curve_n) = (conditioned.time_s.clone(), conditioned.thrust_n.clone());
    let (mut rise, mut fall) = (None, None);
    let mut reconstructed = false;
    if record.averaged_cells() && conditioned.time_s.len() <= MOST_CELLS {
        let r = averaging::reconstruct(&conditioned.thrust_n, quiet_sd_n);
        let origin = conditioned.time_s[0] - 0.5 * conditioned.interval_s;
        curve_s = r.position.iter().map(|p| origin + p * conditioned.interval_s).collect();
        curve_n = r.value;
        (rise, fall) = (r.rise, r.fall);
        reconstructed = true;
        if let Some((i, top)) = curve_n.iter().copied().enumerate().max_by(|a, b| a.1.total_cmp(&b.1))
            && top > peak.thrust_n
        {
            peak.noise_u_n = peak.noise_u_n.hypot(0.5 * (top - peak.thrust_n));
            peak.thrust_n = top;
            peak.time_s = curve_s[i];
        }
    } else if let Some(ignition) = &conditioned.ignition {
        // The rise is told between the samples too.
        let first = ignition.time_s.first().copied().unwrap_or(f64::INFINITY);
        let (from, to) =
            (curve_s.partition_point(|t| *t < first), curve_s.partition_point(|t| *t <= ignition.hand_over_s));
        let inner = ignition.time_s.partition_point(|t| *t <= ignition.hand_over_s);
        if from < to {
            curve_s.splice(from..to, ignition.time_s[..inner].iter().copied());
            curve_n.splice(from..to, ignition.thrust_n[..inner].iter().map(|f| f.min(peak.thrust_n)));
        }
    }
    let tail = record.burn.cut_at_end.then(|| {
        let from = zero.burst.start - zero.window.start;
        let smoothed: Vec<f64> = time_s.iter().map(|t| at(&conditioned.time_s, &conditioned.thrust_n, *t)).collect();
        tail::extrapolate(&time_s[from..], &zero.thrust_n[from..], &smoothed[from..], peak.thrust_n, quiet_sd_n)
    });
    Ok(Curve {
        conditioned,
        time_s: curve_s,
        thrust_n: curve_n,
        peak,
        quiet_sd_n,
        tail: tail.flatten(),
        reconstructed,
        stand_u: stand.filter(|s| s.taken_out).map(|s| [s.frequency_u_hz / s.frequency_hz, s.damping_u]),
        rise,
        fall,
        burst_s,
    })
}

/// Straight-line value of a curve; its end values beyond it.
pub fn at(time_s: &[f64], value: &[f64], t: f64) -> f64 {
    let i = time_s.partition_point(|x| *x <= t);
    match (i.checked_sub(1), i < time_s.len()) {
        (None, _) => value.first().copied().unwrap_or(0.0),
        (Some(k), false) => value[k],
        (Some(k), true) => value[k] + (value[k + 1] - value[k]) * (t - time_s[k]) / (time_s[k + 1] - time_s[k]),
    }
}

/// Largest change of scale that may reconcile the table's area with the total impulse.
const LARGEST_RECONCILIATION: f64 = 0.004;

/// What is drawn and tabulated.
pub fn for_display(record: &Record<'_>, zero: &Zero, curve: &Curve, figures: &Figures) -> Curves {
    let times = &figures.times;
    let window = zero.window.clone();
    let time_s = record.time_s[window.clone()].to_vec();
    let baseline_n: Vec<f64> =
        record.force_n[window.clone()].iter().zip(&zero.thrust_n).map(|(f, t)| (f - t) * record.sign).collect();
    let conditioned_n: Vec<f64> = time_s.iter().map(|t| at(&curve.time_s, &curve.thrust_n, *t)).collect();
    let mut thrust_time_s = vec![times.thrust_start_s];
    let mut thrust_n = vec![0.0];
    for (t, f) in curve.time_s.iter().zip(&curve.thrust_n) {
        if *t > times.thrust_start_s && *t < times.thrust_end_s {
            thrust_time_s.push(*t);
            thrust_n.push(*f);
        }
    }
    if let Some(tail) = curve.tail {
        let end = curve.time_s.last().copied().unwrap_or(times.thrust_start_s);
        for k in 1..=40 {
            let t = end + (times.thrust_end_s - end) * f64::from(k) / 41.0;
            thrust_time_s.push(t);
            thrust_n.push(tail.thrust_at(t - end));
        }
    }
    thrust_time_s.push(times.thrust_end_s);
    thrust_n.push(0.0);
    let area = integral::trapezoid(&thrust_time_s, &thrust_n);
    let scale = figures.total_impulse / area;
    if (scale - 1.0).abs() < LARGEST_RECONCILIATION {
        thrust_n.iter_mut().for_each(|f| *f *= scale);
    }
    let uncertainty = |t: f64, f: f64| figures.thrust_u_n(t, f);
    let known = figures.scale_known;
    Curves {
        conditioned_u_n: known.then(|| time_s.iter().zip(&conditioned_n).map(|(t, f)| uncertainty(*t, *f)).collect()),
        thrust_u_n: known.then(|| thrust_time_s.iter().zip(&thrust_n).map(|(t, f)| uncertainty(*t, *f)).collect()),
        raw_n: zero.thrust_n.clone(),
        conditioned_n,
        time_s,
        baseline_n,
        thrust_time_s,
        thrust_n,
        burn_threshold_n: super::figures::BURN_LEVEL * figures.peak_n,
        peak_time_s: curve.peak.time_s,
        pressure_pa: figures.pressure_pa.clone(),
    }
}

/// Position of an edge's foot on the log's clock, with half the range it may lie in.
pub fn edge_time(curve: &Curve, edge: &Edge, share: f64) -> (f64, f64) {
    let origin = curve.conditioned.time_s[0] - 0.5 * curve.conditioned.interval_s;
    let position = edge.foot + share * (edge.top - edge.foot);
    (origin + position * curve.conditioned.interval_s, edge.foot_half_width * curve.conditioned.interval_s)
}
