//! The stand's oscillation: told in run.toml, or found after ignition, after burn-out or in a knock.

use super::{Record, bursts, figures, zero::Zero};
use crate::condition::ignition::{self, Ignition, Known};
use crate::condition::response::{self, Response};
use crate::condition::ringing::{self, Ring};
use crate::firing::BurstKind;

/// What is known of the stand.
#[derive(Debug, Clone, PartialEq)]
pub struct Stand {
    /// At ignition.
    pub frequency_hz: f64,
    pub frequency_u_hz: f64,
    pub damping_ratio: f64,
    pub damping_u: f64,
    pub source: &'static str,
    /// Amplitude after ignition as a share of peak, where it was seen there.
    pub share_of_peak: Option<f64>,
    /// Whether the response is taken out of the curve.
    pub taken_out: bool,
    /// After burn-out, where a ring there shows that the mass on the spring has become less: frequency, Hz.
    pub frequency_after_hz: Option<f64>,
    /// Mass on the spring over that at ignition, at the samples of the zero's window; empty where it stays.
    pub inertia: Vec<f64>,
    /// The ignition by models driven through the stand.
    pub ignition: Option<Ignition>,
    /// Thrust as read, without the readings that no mass on a spring can give, and how many these were; empty where nothing is taken out.
    pub readings_n: Vec<f64>,
    pub impossible: usize,
    /// By how many standard uncertainties the record contradicts what run.toml tells of the frequency.
    pub contradicts: Option<f64>,
}

impl Stand {
    pub fn response(&self) -> Response {
        Response { frequency_hz: self.frequency_hz, damping_ratio: self.damping_ratio }
    }

    fn known(&self) -> Known {
        Known {
            frequency_hz: self.frequency_hz,
            frequency_u_hz: self.frequency_u_hz,
            damping_ratio: self.damping_ratio,
            damping_u: self.damping_u,
        }
    }
}

/// Cycles over which the curve must be calmer without the oscillation, the share of a cycle averaged before its ups and downs
/// are added up, and by how many amplitudes these must shrink.
const CONFIRMED_CYCLES: f64 = 8.0;
/// Cycles before the rise that are looked at with it.
const CONFIRMED_LEAD: f64 = 2.0;
const BLOCK_OF_CYCLE: f64 = 0.12;
const CALMER: f64 = 1.5;
/// By how many amplitudes the top of the curve must come down with the overshoot.
const LOWER: f64 = 0.3;
/// Oscillations smaller than this share of peak change no figure.
const LEAST_SHARE: f64 = 0.004;

/// The ignition is fitted up to this share of the burst.
const FITTED_SHARE: f64 = 0.6;
/// A ring tells the stand no better than to this share of its damping and frequency: what the motor does meanwhile is in it too.
const DAMPING_FLOOR: f64 = 0.1;
const FREQUENCY_FLOOR: f64 = 0.002;
/// From so many standard uncertainties on the record contradicts what it was told.
const CONTRADICTION: f64 = 3.0;
/// A ring after burn-out counts from so many times the noise of a sample on.
const LEAST_AFTER: f64 = 6.0;
/// The frequency has risen where the ring after burn-out says so by so many standard uncertainties, and by no more than this factor.
const RISEN_EVIDENCE: f64 = 4.0;
const MOST_RISEN: f64 = 1.6;

/// What is known of the stand from run.toml or the record.
pub fn find(record: &Record<'_>, zero: &Zero) -> Option<Stand> {
    let mut stand = identify(record, zero)?;
    if !stand.taken_out {
        return Some(stand);
    }
    let t = &record.time_s[zero.window.clone()];
    let mut readings = zero.thrust_n.clone();
    let impossible = response::impossible(t, &readings, stand.frequency_hz, super::zero::sample_noise(zero));
    for (i, value) in &impossible {
        readings[*i] = *value;
    }
    stand.impossible = impossible.len();
    if !figures::clipped_in_burn(record).is_empty() {
        stand.readings_n = readings;
        return Some(stand);
    }
    let f = &readings;
    let inside = zero.burst.start - zero.window.start..zero.burst.end - zero.window.start;
    let highest = f[inside.clone()].iter().copied().fold(0.0, f64::max);
    let half = f[inside.clone()].iter().position(|v| *v > 0.5 * highest)? + inside.start;
    let noise = super::zero::sample_noise(zero);
    let end_s = t[inside.end - 1];
    lighten(&mut stand, t, f, inside.clone(), noise, (LEAST_SHARE * highest).max(LEAST_AFTER * noise));
    let mut known = stand.known();
    known.frequency_u_hz = known.frequency_u_hz.max(FREQUENCY_FLOOR * known.frequency_hz);
    known.damping_u = known.damping_u.max(DAMPING_FLOOR * known.damping_ratio);
    let limit_s = t[half] + FITTED_SHARE * (end_s - t[inside.start]);
    let inertia = |time_s: f64| -> f64 {
        let i = t.partition_point(|x| *x < time_s);
        stand.inertia.get(i.min(t.len() - 1)).copied().unwrap_or(1.0)
    };
    if !record.averaged_cells() {
        stand.ignition = ignition::fit(t, f, noise, [t[half], limit_s], known, inertia);
    }
    if let Some(ignition) = &stand.ignition {
        let seen = ignition.stand;
        let off = (seen.frequency_hz - stand.frequency_hz).abs() / stand.frequency_u_hz.hypot(seen.frequency_u_hz);
        stand.contradicts = (stand.source == "run.toml" && off > CONTRADICTION).then_some(off);
        (stand.frequency_hz, stand.frequency_u_hz) = (seen.frequency_hz, seen.frequency_u_hz);
        (stand.damping_ratio, stand.damping_u) = (seen.damping_ratio, seen.damping_u);
    }
    stand.readings_n = readings;
    Some(stand)
}

/// Looks for the ring after burn-out; where it is faster, the mass on the spring has fallen with the propellant that is gone.
fn lighten(stand: &mut Stand, t: &[f64], f: &[f64], inside: std::ops::Range<usize>, noise: f64, least: f64) {
    let end_s = t[inside.end - 1];
    let highest = f[inside.clone()].iter().copied().fold(0.0, f64::max);
    let low = f[..inside.end].iter().rposition(|v| *v > 0.1 * highest).unwrap_or(inside.end - 1);
    let last_s = t[t.len() - 1];
    let rings = [t[low], end_s].map(|from| ringing::after(t, f, noise, from, last_s, least));
    let Some(ring) = rings.into_iter().flatten().min_by(|a, b| a.frequency_u_hz.total_cmp(&b.frequency_u_hz)) else {
        return;
    };
    let factor = ring.frequency_hz / stand.frequency_hz;
    let u = ring.frequency_u_hz.hypot(stand.frequency_u_hz);
    if factor > MOST_RISEN || ring.frequency_hz - stand.frequency_hz < RISEN_EVIDENCE * u {
        return;
    }
    stand.frequency_after_hz = Some(ring.frequency_hz);
    // 1/ω² goes with the mass, and the mass with the impulse delivered.
    let gone = 1.0 - 1.0 / (factor * factor);
    let mut delivered = vec![0.0; t.len()];
    for i in inside.start.max(1)..t.len() {
        let step = if i < inside.end { 0.5 * (f[i] + f[i - 1]).max(0.0) * (t[i] - t[i - 1]) } else { 0.0 };
        delivered[i] = delivered[i - 1] + step;
    }
    let whole = delivered[t.len() - 1].max(f64::MIN_POSITIVE);
    stand.inertia = delivered.iter().map(|d| 1.0 - gone * d / whole).collect();
}

fn identify(record: &Record<'_>, zero: &Zero) -> Option<Stand> {
    let told = &record.inputs.run.stand;
    if let Some(frequency) = told.natural_frequency_hz {
        // A frequency without a damping ratio: what bolted steel stands show, 1 to 5 % (from memory).
        let damping = told.damping_ratio.map_or(0.03, |d| d.value);
        let ring = Ring {
            frequency_hz: frequency.value,
            frequency_u_hz: frequency.standard_uncertainty.unwrap_or(0.01 * frequency.value),
            damping_ratio: damping,
            damping_u: told.damping_ratio.and_then(|d| d.standard_uncertainty).unwrap_or(0.3 * damping),
            amplitude: 0.0,
            explained: 1.0,
        };
        return Some(of(ring, "run.toml", None, true));
    }
    let t = &record.time_s[zero.window.clone()];
    let f = &zero.thrust_n;
    let inside = zero.burst.start - zero.window.start..zero.burst.end - zero.window.start;
    let highest = f[inside.clone()].iter().copied().fold(0.0, f64::max);
    let half = f[inside.clone()].iter().position(|v| *v > 0.5 * highest)? + inside.start;
    let noise = super::zero::sample_noise(zero);
    let burst_s = t[inside.end - 1] - t[inside.start];
    let seen = |time_s: &[f64], force_n: &[f64], from_s: f64, limit_s: f64| -> Option<Ring> {
        ringing::after(time_s, force_n, noise, from_s, limit_s, LEAST_SHARE * highest)
    };
    if let Some(ring) = seen(t, f, t[half], t[half] + 0.6 * burst_s) {
        let lead = ((CONFIRMED_LEAD / ring.frequency_hz / record.interval_s()) as usize).max(8);
        let from = half.saturating_sub(lead);
        let mut course = f[from..inside.end].to_vec();
        // A lone wild reading on the swing, undone with it, would be wilder.
        for (i, value) in response::impossible(&t[from..inside.end], &course, ring.frequency_hz, noise) {
            course[i] = value;
        }
        let sure = confirmed(&course, record, &ring, noise / highest);
        return Some(of(ring, "ring after ignition", Some(ring.amplitude / highest), sure));
    }
    let knock = record
        .segmentation
        .events
        .iter()
        .filter(|e| {
            e.start >= record.burn.end
                && bursts::kind(e, &record.burn, &record.time_s, &record.inputs.run.check_loads, 1.0)
                    == BurstKind::Knock
        })
        .find_map(|e| {
            let range = e.start..e.end;
            seen(
                &record.time_s[range.clone()],
                &record.force_n[range],
                record.time_s[e.start],
                record.time_s[e.end - 1],
            )
        });
    // A knock shows the stand's frequency, but where ignition shows no ring there is nothing to take out.
    knock.map(|ring| of(ring, "ring of a knock", Some(0.0), false))
}

/// Whether taking the oscillation out leaves a calmer curve: a stand that swings overshoots, so without its swing the curve
/// goes up and down less and stands no higher. What merely looked like a swing (a spike that dies away, a hump) does not
/// pass this, since undoing a swing that was not there makes one.
fn confirmed(force_n: &[f64], record: &Record<'_>, ring: &Ring, noise_share: f64) -> bool {
    let dt = record.interval_s();
    let length = ((CONFIRMED_CYCLES / ring.frequency_hz / dt) as usize).min(force_n.len());
    let block = ((BLOCK_OF_CYCLE / ring.frequency_hz / dt) as usize).max(1);
    let kernel = response::kernel(
        Response { frequency_hz: ring.frequency_hz, damping_ratio: ring.damping_ratio },
        dt,
        noise_share,
    );
    let before = &force_n[..length];
    let after = response::apply(&kernel, before);
    let course = |f: &[f64]| -> (f64, f64) {
        let means: Vec<f64> = f.chunks(block).map(|c| c.iter().sum::<f64>() / c.len() as f64).collect();
        let ups_and_downs = means.windows(2).map(|w| (w[1] - w[0]).abs()).sum();
        (ups_and_downs, means.iter().copied().fold(f64::MIN, f64::max))
    };
    // The last samples lean on what lies beyond the stretch.
    let end = length.saturating_sub(kernel.len()).max(1);
    let ((moved, top), (moved_after, top_after)) = (course(&before[..end]), course(&after[..end]));
    moved_after < moved - CALMER * ring.amplitude && top_after < top - LOWER * ring.amplitude
}

fn of(ring: Ring, source: &'static str, share_of_peak: Option<f64>, taken_out: bool) -> Stand {
    Stand {
        frequency_hz: ring.frequency_hz,
        frequency_u_hz: ring.frequency_u_hz,
        damping_ratio: ring.damping_ratio,
        damping_u: ring.damping_u,
        source,
        share_of_peak,
        taken_out,
        frequency_after_hz: None,
        inertia: Vec::new(),
        ignition: None,
        readings_n: Vec::new(),
        impossible: 0,
        contradicts: None,
    }
}
