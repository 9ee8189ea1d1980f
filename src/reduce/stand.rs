//! The stand's oscillation: told in run.toml, or found after ignition, after burn-out or in a knock.

use super::{Record, bursts, zero::Zero};
use crate::condition::ringing::{self, Ring};
use crate::firing::BurstKind;

/// What is known of the stand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stand {
    pub frequency_hz: f64,
    pub frequency_u_hz: f64,
    pub damping_ratio: f64,
    pub damping_u: f64,
    pub source: &'static str,
    /// Amplitude after ignition as a share of peak, where it was seen there.
    pub share_of_peak: Option<f64>,
}

/// Stretches looked at after an instant: begin and length, s. A rise must be over by the begin, and the motor's own course
/// must stay smooth over the length.
const STRETCHES: [(f64, f64); 4] = [(0.008, 0.15), (0.02, 0.25), (0.04, 0.4), (0.02, 0.6)];
/// Oscillations slower than this are not told from the motor's own course, Hz.
const SLOWEST_HZ: f64 = 8.0;
/// A free oscillation dies slowly; what dies faster may be the motor's own course.
const MOST_DAMPING: f64 = 0.12;
/// Oscillations smaller than this share of peak change no figure.
const LEAST_SHARE: f64 = 0.004;

pub fn find(record: &Record<'_>, zero: &Zero) -> Option<Stand> {
    let told = &record.inputs.run.stand;
    if let Some(frequency) = told.natural_frequency_hz {
        // A frequency without a damping ratio: what bolted steel stands show, 1 to 5 % (from memory).
        let damping = told.damping_ratio.map_or(0.03, |d| d.value);
        return Some(Stand {
            frequency_hz: frequency.value,
            frequency_u_hz: frequency.standard_uncertainty.unwrap_or(0.01 * frequency.value),
            damping_ratio: damping,
            damping_u: told.damping_ratio.and_then(|d| d.standard_uncertainty).unwrap_or(0.3 * damping),
            source: "run.toml",
            share_of_peak: None,
        });
    }
    let t = &record.time_s[zero.window.clone()];
    let f = &zero.thrust_n;
    let inside = zero.burst.start - zero.window.start..zero.burst.end - zero.window.start;
    let highest = f[inside.clone()].iter().copied().fold(0.0, f64::max);
    let half = f[inside.clone()].iter().position(|v| *v > 0.5 * highest)? + inside.start;
    let noise = super::zero::sample_noise(zero);
    let burst_s = t[inside.end - 1] - t[inside.start];
    let seen = |time_s: &[f64], force_n: &[f64], from_s: f64, limit_s: f64| -> Option<Ring> {
        STRETCHES
            .iter()
            .filter_map(|(begin, length)| {
                let a = time_s.partition_point(|x| *x < from_s + begin);
                let b = time_s.partition_point(|x| *x <= (from_s + begin + length).min(limit_s));
                if b < a + 24 {
                    return None;
                }
                ringing::find(&time_s[a..b], &force_n[a..b], noise, SLOWEST_HZ)
            })
            .filter(|r| r.damping_ratio < MOST_DAMPING && r.amplitude > LEAST_SHARE * highest)
            .min_by(|a, b| (a.frequency_u_hz / a.frequency_hz).total_cmp(&(b.frequency_u_hz / b.frequency_hz)))
    };
    if let Some(ring) = seen(t, f, t[half], t[half] + 0.6 * burst_s) {
        return Some(of(ring, "ring after ignition", Some(ring.amplitude / highest)));
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
    knock.map(|ring| of(ring, "ring of a knock", Some(0.0)))
}

fn of(ring: Ring, source: &'static str, share_of_peak: Option<f64>) -> Stand {
    Stand {
        frequency_hz: ring.frequency_hz,
        frequency_u_hz: ring.frequency_u_hz,
        damping_ratio: ring.damping_ratio,
        damping_u: ring.damping_u,
        source,
        share_of_peak,
    }
}

impl Stand {
    /// Whether the response is to be taken out of the curve.
    pub fn matters(&self) -> bool {
        self.share_of_peak.is_none_or(|s| s > 0.0)
    }
}
