//! The motor: thrust as a function of time, and what is true of it by definition.
//!
//! A motor is a body (the shape of the burn), a rise, a tail and optional irregularities. It is sampled densely and
//! from there on treated as exactly piecewise linear, so that its integral and crossings are exact.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;

/// Step of the dense curve, s (20 kHz): 60 steps in the fastest rise of 3 ms.
pub const STEP_S: f64 = 5e-5;

/// Shape between rise and tail, as a fraction of the highest level against the fraction of the burn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Body {
    Neutral,
    /// Climbs from `start` to 1, and ends sharply there.
    Progressive {
        start: f64,
    },
    /// Falls from 1 to `end`.
    Regressive {
        end: f64,
    },
    /// A parabola over the burn: `edge` at both ends, 1 in the middle.
    Arched {
        edge: f64,
    },
    /// Boost at 1 until `split` of the burn, then sustain at `sustain`; the change takes `blend` of the burn.
    DualPlateau {
        sustain: f64,
        split: f64,
        blend: f64,
    },
    /// The trapezoid's and other test shapes' straight lines: (fraction of the burn, level).
    Straight([(f64, f64); 3]),
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum RiseKind {
    Linear,
    SCurve,
    /// 1 - exp(-3 t / time): 95 % after `rise_s`.
    Exponential,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TailKind {
    /// `tail_s` is the time constant.
    Exponential,
    Linear,
    Cosine,
}

/// Something added on top of the body: `height` as a fraction of the body's highest level.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hump {
    pub height: f64,
    /// Decay time of a spike, or half-width of an erosive hump, s.
    pub width_s: f64,
}

/// Thrust that swings near zero and back before it settles.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RoughStart {
    pub swings: u32,
    pub duration_s: f64,
    /// Thrust left at the bottom of a swing, as a fraction.
    pub floor: f64,
}

/// A short burst, then nothing for a while, then the burn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Chuff {
    /// From the start of the chuff to the start of the burn, s.
    pub before_s: f64,
    pub length_s: f64,
    /// Of the peak.
    pub height: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Motor {
    pub peak_n: f64,
    /// From first thrust to where the tail begins, s.
    pub body_s: f64,
    pub body: Body,
    pub rise: RiseKind,
    pub rise_s: f64,
    pub tail: TailKind,
    pub tail_s: f64,
    pub spike: Option<Hump>,
    pub erosive: Option<Hump>,
    pub rough_start: Option<RoughStart>,
    pub chuff: Option<Chuff>,
    /// Standard deviation of the combustion roughness as a fraction of thrust. It is part of the impulse, but the
    /// peak and the crossings are those of the curve without it.
    pub roughness: f64,
    /// Middle of the band the roughness fills, Hz.
    pub roughness_hz: f64,
    pub propellant_mass_kg: f64,
    /// Of the whole motor before the firing, propellant included.
    pub mass_before_kg: f64,
    /// From the ignition signal to first thrust, s.
    pub ignition_lag_s: f64,
}

impl Default for Motor {
    fn default() -> Self {
        Motor {
            peak_n: 500.0,
            body_s: 2.0,
            body: Body::Neutral,
            rise: RiseKind::SCurve,
            rise_s: 0.03,
            tail: TailKind::Exponential,
            tail_s: 0.08,
            spike: None,
            erosive: None,
            rough_start: None,
            chuff: None,
            roughness: 0.0,
            roughness_hz: 60.0,
            propellant_mass_kg: 0.6,
            mass_before_kg: 1.5,
            ignition_lag_s: 0.12,
        }
    }
}

/// A function sampled every [`STEP_S`], exactly piecewise linear between, zero before and constant after.
#[derive(Debug, Clone, PartialEq)]
pub struct Dense {
    pub start_s: f64,
    pub values: Vec<f64>,
    /// Integral from the start to each sample.
    pub integral: Vec<f64>,
}

impl Dense {
    pub fn new(start_s: f64, values: Vec<f64>) -> Dense {
        let mut total = 0.0;
        let mut integral = Vec::with_capacity(values.len());
        let mut last: Option<f64> = None;
        for &value in &values {
            if let Some(before) = last {
                total += 0.5 * (before + value) * STEP_S;
            }
            integral.push(total);
            last = Some(value);
        }
        Dense { start_s, values, integral }
    }

    fn last(&self) -> usize {
        self.values.len() - 1
    }

    pub fn end_s(&self) -> f64 {
        self.start_s + self.last() as f64 * STEP_S
    }

    pub fn at(&self, time_s: f64) -> f64 {
        let place = (time_s - self.start_s) / STEP_S;
        if place < 0.0 {
            return 0.0;
        }
        let i = place as usize;
        if i >= self.last() {
            return self.values[self.last()];
        }
        self.values[i] + (place - i as f64) * (self.values[i + 1] - self.values[i])
    }

    /// Integral from the start to `time_s`.
    pub fn integral_to(&self, time_s: f64) -> f64 {
        let place = (time_s - self.start_s) / STEP_S;
        if place < 0.0 {
            return 0.0;
        }
        let i = place as usize;
        if i >= self.last() {
            return self.integral[self.last()] + (place - self.last() as f64) * STEP_S * self.values[self.last()];
        }
        let part = place - i as f64;
        let slope = self.values[i + 1] - self.values[i];
        self.integral[i] + STEP_S * part * (self.values[i] + 0.5 * part * slope)
    }

    /// Mean over the `window_s` that end at `time_s`; the value itself for a window of zero.
    pub fn mean_before(&self, time_s: f64, window_s: f64) -> f64 {
        if window_s <= 0.0 {
            return self.at(time_s);
        }
        (self.integral_to(time_s) - self.integral_to(time_s - window_s)) / window_s
    }

    /// First upward and last downward crossing of `level`.
    pub fn outer_crossings(&self, level: f64) -> Option<(f64, f64)> {
        let first = self.values.iter().position(|&v| v >= level)?;
        let last = self.values.iter().rposition(|&v| v >= level)?;
        let cross = |low: usize, high: usize| {
            let (a, b) = (self.values[low], self.values[high]);
            let part = if b == a { 0.0 } else { (level - a) / (b - a) };
            self.start_s + STEP_S * (low as f64 + part * (high as f64 - low as f64))
        };
        let up = if first == 0 { self.start_s } else { cross(first - 1, first) };
        let down = if last == self.last() { self.end_s() } else { cross(last + 1, last) };
        Some((up, down))
    }

    /// First upward crossing of `level`.
    pub fn first_above(&self, level: f64) -> Option<f64> {
        self.outer_crossings(level).map(|(up, _)| up)
    }

    pub fn peak(&self) -> (f64, f64) {
        let mut best = (self.start_s, f64::NEG_INFINITY);
        for (i, &value) in self.values.iter().enumerate() {
            if value > best.1 {
                best = (self.start_s + i as f64 * STEP_S, value);
            }
        }
        best
    }
}

/// The motor's thrust against seconds since the first sign of life (chuff or burn).
#[derive(Debug, Clone)]
pub struct MotorCurve {
    /// The burn without roughness.
    pub smooth: Dense,
    /// The burn with it.
    pub burn: Dense,
    /// Chuff and burn together: what the stand feels.
    pub all: Dense,
    pub chuff_impulse_n_s: f64,
    /// Start and end of the chuff.
    pub chuff_s: Option<(f64, f64)>,
}

fn body_level(body: &Body, x: f64) -> f64 {
    match *body {
        Body::Neutral => 1.0,
        Body::Progressive { start } => start + (1.0 - start) * x,
        Body::Regressive { end } => 1.0 - (1.0 - end) * x,
        Body::Arched { edge } => edge + (1.0 - edge) * 4.0 * x * (1.0 - x),
        Body::DualPlateau { sustain, split, blend } => {
            let part = ((x - split) / blend).clamp(0.0, 1.0);
            1.0 - (1.0 - sustain) * smooth_step(part)
        }
        Body::Straight(points) => {
            let (mut level, mut place) = (points[0].1, points[0].0);
            for &(to, height) in &points[1..] {
                if x <= to {
                    return level + (height - level) * (x - place) / (to - place).max(1e-12);
                }
                (place, level) = (to, height);
            }
            level
        }
    }
}

fn smooth_step(x: f64) -> f64 {
    0.5 - 0.5 * (std::f64::consts::PI * x.clamp(0.0, 1.0)).cos()
}

impl Motor {
    fn level(&self, t: f64) -> f64 {
        let mut level = body_level(&self.body, (t / self.body_s).clamp(0.0, 1.0));
        if let Some(spike) = self.spike {
            level += spike.height * (-((t - self.rise_s).max(0.0) / spike.width_s)).exp();
        }
        if let Some(hump) = self.erosive {
            // Centred one and a half widths after the rise, so that it starts and ends inside the burn.
            let x = (t - self.rise_s - 1.5 * hump.width_s) / hump.width_s;
            level += hump.height * (-0.5 * x * x * 4.0).exp();
        }
        let x = t / self.rise_s;
        level *= match self.rise {
            RiseKind::Linear => x.clamp(0.0, 1.0),
            RiseKind::SCurve => smooth_step(x),
            RiseKind::Exponential => 1.0 - (-3.0 * x.max(0.0)).exp(),
        };
        if let Some(rough) = self.rough_start {
            let part = (t - self.rise_s) / rough.duration_s;
            if (0.0..1.0).contains(&part) {
                let swing = (std::f64::consts::PI * part * f64::from(rough.swings)).sin().powi(2);
                level *= 1.0 - (1.0 - rough.floor) * swing;
            }
        }
        level
    }

    /// Length of the tail until it is gone, s. An exponential is followed for ten time constants (to 0.005 %).
    pub fn tail_length_s(&self) -> f64 {
        if self.tail == TailKind::Exponential { 10.0 * self.tail_s } else { self.tail_s }
    }

    /// Samples the thrust; the same seed gives the same roughness.
    pub fn curve(&self, seed: u64) -> MotorCurve {
        let steps = ((self.body_s + self.tail_length_s()) / STEP_S).ceil() as usize + 2;
        let at_end = self.level(self.body_s);
        let mut values = Vec::with_capacity(steps);
        for i in 0..steps {
            let t = i as f64 * STEP_S;
            values.push(if t <= self.body_s {
                self.level(t)
            } else {
                let x = (t - self.body_s) / self.tail_s;
                at_end
                    * match self.tail {
                        TailKind::Exponential => (-x).exp(),
                        TailKind::Linear => (1.0 - x).max(0.0),
                        TailKind::Cosine => 1.0 - smooth_step(x),
                    }
            });
        }
        if let Some(last) = values.last_mut() {
            *last = 0.0;
        }
        let highest = values.iter().copied().fold(0.0, f64::max);
        for value in &mut values {
            *value *= self.peak_n / highest;
        }
        let offset_s = self.chuff.map_or(0.0, |c| c.before_s);
        let rough = self.with_roughness(&values, seed);
        let mut all = Vec::new();
        let mut chuff_s = None;
        let mut chuff_impulse_n_s = 0.0;
        if let Some(chuff) = self.chuff {
            let lead = (chuff.before_s / STEP_S).round() as usize;
            for i in 0..lead {
                let t = i as f64 * STEP_S;
                let x = t / chuff.length_s;
                // Fast up, slow down.
                let shape = if x < 0.25 { smooth_step(4.0 * x) } else { 1.0 - smooth_step((x - 0.25) / 0.75) };
                all.push(chuff.height * self.peak_n * shape);
            }
            chuff_impulse_n_s = Dense::new(0.0, all.clone()).integral.last().copied().unwrap_or(0.0);
            chuff_s = Some((0.0, chuff.length_s));
        }
        all.extend_from_slice(&rough);
        MotorCurve {
            smooth: Dense::new(offset_s, values),
            burn: Dense::new(offset_s, rough),
            all: Dense::new(0.0, all),
            chuff_impulse_n_s,
            chuff_s,
        }
    }

    /// Thrust times 1 + noise through a two-pole band-pass round `roughness_hz`.
    fn with_roughness(&self, values: &[f64], seed: u64) -> Vec<f64> {
        if self.roughness <= 0.0 {
            return values.to_vec();
        }
        let mut rng = ChaCha8Rng::seed_from_u64(seed ^ 0x0072_6f75_6768);
        let omega = std::f64::consts::TAU * self.roughness_hz * STEP_S;
        // Pole radius for a bandwidth of half the middle frequency.
        let radius = (-0.25 * omega).exp();
        let (a1, a2) = (2.0 * radius * omega.cos(), -radius * radius);
        // Variance of a two-pole process driven by unit noise.
        let variance = (1.0 - a2) / ((1.0 + a2) * ((1.0 - a2).powi(2) - a1 * a1));
        let gain = self.roughness / variance.sqrt();
        let (mut y1, mut y2) = (0.0, 0.0);
        values
            .iter()
            .map(|&value| {
                let drive: f64 = rng.sample(StandardNormal);
                let y = a1 * y1 + a2 * y2 + drive;
                (y2, y1) = (y1, y);
                value * (1.0 + gain * y)
            })
            .collect()
    }
}
