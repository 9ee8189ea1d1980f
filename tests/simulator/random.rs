//! Firings drawn at random over wide ranges, one family a kind.
//!
//! The ranges keep to what the kind's sampling can tell at all: a spike lasts several samples, a rise is not much
//! shorter than a sample where nothing averages, and noise shrinks with the number of samples that average it out.

use super::Scenario;
use super::cell::Cell;
use super::logger::{Logger, TimeStyle};
use super::motor::{Body, Chuff, Hump, Motor, RiseKind, RoughStart, TailKind};
use super::stand::{Hit, Orientation, Stand};
use super::text::Text;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// 80 Hz to 10 kHz, noise 0.1 to 1 % of peak.
    Plain,
    /// 10 Hz converter averaging over 100 ms, burn 2 to 8 s.
    Averaging10Hz,
    /// Noise of 4 % of peak at 1 kHz.
    Noisy,
    /// Half a second before ignition, and the end cut off in the tail.
    Truncated,
    /// A stand that rings at 34 Hz, 2 % damping, logged at 1 kHz.
    Ringing,
    /// 80 Hz converter averaging over 12.5 ms.
    Averaging80Hz,
    /// The same stand, with a motor whose propellant is 10 to 40 % of what swings: the frequency rises as it burns.
    RingingLighter,
}

pub const KINDS: [Kind; 6] =
    [Kind::Plain, Kind::Averaging10Hz, Kind::Noisy, Kind::Truncated, Kind::Ringing, Kind::Averaging80Hz];

pub fn random_scenario(seed: u64) -> Scenario {
    random_scenario_kind(Kind::Plain, seed)
}

/// Draws one firing of a kind; the same seed gives the same firing.
pub fn random_scenario_kind(kind: Kind, seed: u64) -> Scenario {
    let mut rng = ChaCha8Rng::seed_from_u64(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) ^ kind as u64);
    // All else as on a stand whose mass stays.
    let (lighter, kind) =
        (kind == Kind::RingingLighter, if kind == Kind::RingingLighter { Kind::Ringing } else { kind });
    let mut draw = Draw { rng: &mut rng };
    let rate_hz = match kind {
        Kind::Plain => draw.one_of(&[80.0, 100.0, 200.0, 300.0, 500.0, 1000.0, 1000.0, 2000.0, 5000.0, 10_000.0]),
        Kind::Averaging10Hz => 10.0,
        Kind::Averaging80Hz => 80.0,
        Kind::Noisy | Kind::Ringing | Kind::RingingLighter | Kind::Truncated => 1000.0,
    };
    let averaging_s = match kind {
        Kind::Averaging10Hz | Kind::Averaging80Hz => 1.0 / rate_hz,
        _ => 0.0,
    };
    let motor = draw.motor(kind, rate_hz);
    let curve = motor.curve(0);
    let average_n = curve.smooth.integral_to(curve.smooth.end_s()) / motor.body_s;

    // Noise such that its share of the impulse is well inside what is asked for: noise / sqrt(samples) within 0.03 %
    // of peak, and quieter with a long tail, whose crossing it blurs.
    let samples = rate_hz * motor.body_s;
    let mut noise = draw.log_range(1e-3, 1e-2).min(3e-4 * samples.sqrt() * average_n / motor.peak_n);
    if motor.tail == TailKind::Exponential && motor.tail_s > 0.08 * motor.body_s {
        noise = noise.min(1.5e-3);
    }
    match kind {
        Kind::Noisy => noise = 0.04,
        Kind::Averaging10Hz => noise = draw.log_range(2e-4, 1e-3),
        Kind::Averaging80Hz | Kind::Ringing | Kind::RingingLighter => noise = noise.min(3e-3),
        Kind::Truncated => noise = noise.min(5e-3),
        Kind::Plain => {}
    }
    let peak_n = motor.peak_n;

    // Cell: a hundred thousand counts and more over the range, weights beyond the peak.
    let slope = draw.range(3e5, 3e6) / peak_n;
    let coefficients = [
        draw.range(-2e5, 2e5).round(),
        slope,
        if draw.chance(0.3) { slope * draw.range(-2e-3, 2e-3) / peak_n } else { 0.0 },
    ];
    let slow_noise_n = if draw.chance(0.3) { peak_n * 0.1 * noise.min(3e-3) } else { 0.0 };
    let hum = (rate_hz >= 300.0 && draw.chance(0.2)).then_some((peak_n * 0.5 * noise, 50.0));
    let cell = Cell {
        capacity_n: (peak_n * 2.0).ceil(),
        coefficients,
        pulls: kind == Kind::Plain && draw.chance(0.15),
        noise_n: noise * peak_n,
        slow_noise_n,
        hum,
        masses_kg: Cell::masses_up_to(peak_n * draw.range(1.05, 1.3)),
        weight_tolerance: 2e-4,
        calibration_noise_n: peak_n * 2e-5,
        calibration_seed: seed,
        ..Cell::default()
    };

    let orientation = match kind {
        Kind::Plain | Kind::Averaging80Hz => {
            draw.one_of(&[Orientation::Horizontal, Orientation::NozzleUp, Orientation::NozzleDown])
        }
        _ => Orientation::Horizontal,
    };
    let quick = rate_hz > 1500.0;
    let (before_s, after_s) = match kind {
        Kind::Truncated => (0.5, 0.0),
        _ if quick => (draw.range(1.0, 3.0), draw.range(2.0, 4.0)),
        _ => (draw.log_range(if rate_hz < 50.0 { 5.0 } else { 1.0 }, 20.0), draw.log_range(4.0, 20.0)),
    };
    let whole_s = before_s + curve.all.end_s() + after_s;
    let mut stand = Stand {
        orientation,
        drift_n_s: if kind == Kind::Truncated { 0.0 } else { peak_n * draw.range(-3e-3, 3e-3) / whole_s },
        ..Stand::default()
    };
    if kind == Kind::Plain && draw.chance(0.3) {
        stand.thermal = Some((peak_n * draw.range(-5e-4, 5e-4), draw.range(1.0, 10.0)));
    }
    if kind == Kind::Ringing {
        stand.resonance = Some((34.0, 0.02));
        stand.resonance_told = draw.chance(0.5) && !lighter;
        if lighter {
            stand.lightening = draw.range(0.1, 0.4);
        }
    }
    if kind == Kind::Plain && after_s > 3.5 && draw.chance(0.25) {
        stand.hits = draw.hits(peak_n, after_s, average_n * motor.body_s);
    }

    let glitches = if kind != Kind::Averaging10Hz && rate_hz >= 300.0 && draw.chance(0.2) { 3 } else { 0 };
    let time = draw.one_of(&[
        TimeStyle::Seconds { decimals: 6 },
        TimeStyle::Millis { decimals: 3 },
        TimeStyle::Micros,
        TimeStyle::None,
        TimeStyle::Counter,
    ]);
    let mut text = Text { header: draw.chance(0.8), ..Text::default() };
    if time != TimeStyle::Counter && draw.chance(0.25) {
        text.delimiter = draw.one_of(&[';', '\t']);
        text.decimal_comma = text.delimiter == ';';
    }
    let logger = Logger {
        rate_hz,
        averaging_s,
        jitter_s: if matches!(time, TimeStyle::Seconds { .. } | TimeStyle::Micros) && draw.chance(0.3) {
            0.02 / rate_hz
        } else {
            0.0
        },
        first_stamp_s: if matches!(time, TimeStyle::None | TimeStyle::Counter) { 0.0 } else { draw.range(0.0, 100.0) },
        time,
        glitches,
        text,
        ..Logger::default()
    };
    let cut_at = (kind == Kind::Truncated).then(|| draw.range(0.03, 0.15));
    // A scale with limits of 0.1 % of the mass, not finer than 0.1 g, in whole tenths of a gram.
    let propellant_limits_kg = (motor.propellant_mass_kg * 10.0).ceil().max(1.0) * 1e-4;
    Scenario {
        id: format!("{kind:?}{}-{seed}", if lighter { "Lighter" } else { "" }),
        seed,
        motor,
        stand,
        cell,
        logger,
        before_s,
        after_s,
        cut_at,
        propellant_limits_kg,
        ..Scenario::default()
    }
}

struct Draw<'a> {
    rng: &'a mut ChaCha8Rng,
}

impl Draw<'_> {
    fn range(&mut self, low: f64, high: f64) -> f64 {
        self.rng.random_range(low..high)
    }

    fn log_range(&mut self, low: f64, high: f64) -> f64 {
        self.range(low.ln(), high.ln()).exp()
    }

    fn chance(&mut self, part: f64) -> bool {
        self.range(0.0, 1.0) < part
    }

    fn one_of<T: Copy>(&mut self, choices: &[T]) -> T {
        choices[self.rng.random_range(0..choices.len())]
    }

    fn motor(&mut self, kind: Kind, rate_hz: f64) -> Motor {
        let interval_s = 1.0 / rate_hz;
        let slow = kind == Kind::Averaging10Hz;
        let body_s = match kind {
            Kind::Averaging10Hz => self.range(2.0, 8.0),
            Kind::Plain if rate_hz < 250.0 => self.log_range(1.2, 6.0),
            Kind::Plain => self.log_range(0.6, 6.0),
            _ => self.log_range(0.8, 5.0),
        };
        let body = match self.rng.random_range(0..5) {
            0 => Body::Neutral,
            1 => Body::Progressive { start: self.range(0.45, 0.9) },
            2 => Body::Regressive { end: self.range(0.4, 0.9) },
            3 => Body::Arched { edge: self.range(0.5, 0.9) },
            _ => Body::DualPlateau {
                sustain: self.range(0.35, 0.8),
                split: self.range(0.25, 0.6),
                blend: self.range(0.03, 0.15),
            },
        };
        let rise_s = match kind {
            Kind::Ringing => self.range(0.003, 0.02),
            Kind::Averaging10Hz => self.range(0.02, 0.3),
            Kind::Averaging80Hz => self.range(0.005, 0.1),
            _ => self.log_range((1.5 * interval_s).max(0.003), 0.1_f64.max(2.0 * interval_s)),
        };
        let tail = self.one_of(&[TailKind::Exponential, TailKind::Linear, TailKind::Cosine]);
        let longest_s = if tail == TailKind::Exponential { 0.08 } else { 0.2 } * body_s;
        let shortest_s = (2.0 * interval_s).max(0.02).min(0.9 * longest_s);
        let mut tail_s = self.log_range(shortest_s, longest_s);
        if tail == TailKind::Exponential && !slow && kind != Kind::Noisy && self.chance(0.15) {
            tail_s = self.range(0.1, 0.25) * body_s;
        }
        let mut motor = Motor {
            peak_n: self.log_range(20.0, 3000.0),
            body_s,
            body,
            rise: self.one_of(&[RiseKind::Linear, RiseKind::SCurve, RiseKind::Exponential]),
            rise_s,
            tail,
            tail_s,
            ..Motor::default()
        };
        if kind == Kind::Truncated {
            // A tail long enough to be cut in.
            motor.tail = TailKind::Exponential;
            motor.tail_s = self.range(0.03, 0.12) * body_s;
        }
        if !slow {
            if self.chance(0.2) {
                motor.spike =
                    Some(Hump { height: self.range(0.1, 0.4), width_s: self.range(0.03, 0.1).max(4.0 * interval_s) });
            }
            if self.chance(0.2) {
                motor.erosive = Some(Hump { height: self.range(0.1, 0.4), width_s: self.range(0.1, 0.25) * body_s });
            }
            if kind == Kind::Plain && rate_hz >= 300.0 && self.chance(0.1) {
                motor.rough_start = Some(RoughStart {
                    swings: self.rng.random_range(1..4),
                    duration_s: self.range(0.15, 0.3),
                    floor: self.range(0.01, 0.05),
                });
            }
            if kind == Kind::Plain && self.chance(0.1) {
                motor.chuff = Some(Chuff {
                    before_s: self.range(1.5, 5.0),
                    length_s: self.range(0.08, 0.3),
                    height: self.range(0.1, 0.6),
                });
            }
            if kind == Kind::Plain && self.chance(0.2) {
                motor.roughness = self.range(5e-4, 3e-3);
                motor.roughness_hz = self.range(20.0, 200.0).min(rate_hz / 4.0);
            }
        }
        let curve = motor.curve(0);
        let impulse = curve.smooth.integral_to(curve.smooth.end_s());
        // Specific impulse of 120 to 210 s, hardware of one to three times the propellant.
        motor.propellant_mass_kg = impulse / (super::STANDARD_GRAVITY * self.range(120.0, 210.0));
        motor.mass_before_kg = motor.propellant_mass_kg * self.range(2.0, 4.0);
        motor
    }

    /// Someone at the stand some while after the firing, or an ejection charge. Their impulse stays below the motor's.
    fn hits(&mut self, peak_n: f64, after_s: f64, impulse_n_s: f64) -> Vec<Hit> {
        if self.chance(0.4) {
            let length_s = self.range(0.01, 0.05);
            let force_n = (peak_n * self.range(0.3, 1.5)).min(0.2 * impulse_n_s / length_s);
            return vec![Hit {
                after_s: self.range(1.0, after_s - 1.5),
                force_n,
                length_s,
                ring_hz: 0.0,
                ejection: true,
            }];
        }
        let mut at_s = self.range(0.4, 0.6) * after_s;
        let mut hits = Vec::new();
        for _ in 0..self.rng.random_range(1..4) {
            let length_s = self.range(0.004, 0.02);
            let force_n = (peak_n * self.range(1.0, 4.0)).min(0.2 * impulse_n_s / length_s);
            let ring_hz = self.range(20.0, 80.0);
            hits.push(Hit { after_s: at_s, force_n, length_s, ring_hz, ejection: false });
            at_s += self.range(0.05, 0.5);
        }
        // Drift and thermal shift are read from the quiet record that is left round the hits.
        hits.retain(|h| h.after_s + h.duration_s() < after_s - 0.3);
        hits
    }
}
