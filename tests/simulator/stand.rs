//! The stand: what becomes of the thrust on its way to the cell.

use super::motor::{Dense, Motor, MotorCurve, STEP_S};
use std::f64::consts::{PI, TAU};

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Orientation {
    Horizontal,
    NozzleUp,
    NozzleDown,
}

impl Orientation {
    pub fn word(self) -> &'static str {
        match self {
            Orientation::Horizontal => "horizontal",
            Orientation::NozzleUp => "nozzle-up",
            Orientation::NozzleDown => "nozzle-down",
        }
    }

    /// Sign with which the motor's weight enters the force at the cell, thrust counted positive.
    pub fn weight_sign(self) -> f64 {
        match self {
            Orientation::Horizontal => 0.0,
            Orientation::NozzleUp => 1.0,
            Orientation::NozzleDown => -1.0,
        }
    }
}

/// A hit on the stand or an ejection charge: half a sine, then ringing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hit {
    /// After the end of the motor's thrust, s.
    pub after_s: f64,
    pub force_n: f64,
    pub length_s: f64,
    /// 0: does not ring.
    pub ring_hz: f64,
    pub ejection: bool,
}

impl Hit {
    fn at(&self, t: f64) -> f64 {
        if t < 0.0 {
            0.0
        } else if t < self.length_s {
            self.force_n * (PI * t / self.length_s).sin()
        } else if self.ring_hz > 0.0 {
            // Decays to 1/e in four cycles.
            let s = t - self.length_s;
            -0.4 * self.force_n * (TAU * self.ring_hz * s).sin() * (-s * self.ring_hz / 4.0).exp()
        } else {
            0.0
        }
    }

    /// Until the ringing is below 1e-9 of the hit.
    pub fn duration_s(&self) -> f64 {
        self.length_s + if self.ring_hz > 0.0 { 80.0 / self.ring_hz } else { 0.0 }
    }
}

#[derive(Debug, Clone, PartialEq)]
pub struct Stand {
    pub orientation: Orientation,
    /// Undamped natural frequency, Hz, and damping ratio; `None`: stiff.
    pub resonance: Option<(f64, f64)>,
    /// Share of the mass on the spring that is gone with the propellant; the frequency rises as it goes.
    pub lightening: f64,
    /// Whether run.toml tells of it.
    pub resonance_told: bool,
    /// Force at the cell over force of the motor.
    pub force_ratio: f64,
    /// Drift of the zero over the whole record, N/s.
    pub drift_n_s: f64,
    /// Shift of the zero by warmth after ignition: final size in N, time constant in s.
    pub thermal: Option<(f64, f64)>,
    /// Step of the zero: s after the end of thrust, size in N.
    pub step: Option<(f64, f64)>,
    pub hits: Vec<Hit>,
}

impl Default for Stand {
    fn default() -> Self {
        Stand {
            orientation: Orientation::Horizontal,
            resonance: None,
            lightening: 0.0,
            resonance_told: false,
            force_ratio: 1.0,
            drift_n_s: 0.0,
            thermal: None,
            step: None,
            hits: Vec::new(),
        }
    }
}

/// Response of y'' + 2 z w y' + w^2 y = w^2 F to a piecewise-linear F, exact at the samples.
///
/// # Formula
/// Over one step F = F0 + s t, and y = F - 2 z s / w + exp(-z w t) (A cos wd t + B sin wd t), with wd = w sqrt(1 - z^2)
/// and A, B from the state at the start of the step. `extra` steps follow with F at its last value.
pub fn second_order(force: &[f64], step_s: f64, frequency_hz: f64, damping: f64, extra: usize) -> Vec<f64> {
    let w = TAU * frequency_hz;
    let wd = w * (1.0 - damping * damping).sqrt();
    let decay = (-damping * w * step_s).exp();
    let (sin, cos) = (wd * step_s).sin_cos();
    let Some((&first, &last)) = force.first().zip(force.last()) else { return Vec::new() };
    let (mut y, mut v) = (first, 0.0);
    let mut out = Vec::with_capacity(force.len() + extra);
    out.push(y);
    for i in 1..force.len() + extra {
        let f0 = force.get(i - 1).copied().unwrap_or(last);
        let f1 = force.get(i).copied().unwrap_or(last);
        let s = (f1 - f0) / step_s;
        let a = y - f0 + 2.0 * damping * s / w;
        let b = (v - s + damping * w * a) / wd;
        let swing = a * cos + b * sin;
        y = f1 - 2.0 * damping * s / w + decay * swing;
        v = s + decay * (-damping * w * swing + wd * (b * cos - a * sin));
        out.push(y);
    }
    out
}

/// The same for a mass that falls: `inertia` is that of each sample over the first, kept over the step that ends there. Spring and
/// dashpot stay, so that w goes with 1 / sqrt(inertia) and z with w.
pub fn second_order_lightening(
    force: &[f64],
    inertia: &[f64],
    step_s: f64,
    frequency_hz: f64,
    damping: f64,
) -> Vec<f64> {
    let Some(&first) = force.first() else { return Vec::new() };
    let (mut y, mut v) = (first, 0.0);
    let mut out = vec![y];
    for (pair, mass) in force.windows(2).zip(&inertia[1..]) {
        let z = damping / mass.sqrt();
        let w = TAU * frequency_hz / mass.sqrt();
        let wd = w * (1.0 - z * z).sqrt();
        let (sin, cos) = (wd * step_s).sin_cos();
        let decay = (-z * w * step_s).exp();
        let s = (pair[1] - pair[0]) / step_s;
        let a = y - pair[0] + 2.0 * z * s / w;
        let b = (v - s + z * w * a) / wd;
        let swing = a * cos + b * sin;
        y = pair[1] - 2.0 * z * s / w + decay * swing;
        v = s + decay * (-z * w * swing + wd * (b * cos - a * sin));
        out.push(y);
    }
    out
}

/// Force at the cell, thrust counted positive, against true time.
#[derive(Debug, Clone)]
pub struct CellForce {
    dense: Dense,
    /// Weight at rest before the firing, N, signed as it enters.
    pub weight_before_n: f64,
    stand: Stand,
    ignition_s: f64,
    thrust_over_s: f64,
}

impl CellForce {
    /// `motor_start_s`: true time of the motor's first sign of life.
    pub fn new(motor: &Motor, curve: &MotorCurve, stand: &Stand, motor_start_s: f64, gravity_m_s2: f64) -> CellForce {
        let sign = stand.orientation.weight_sign();
        let whole = curve.all.integral[curve.all.integral.len() - 1];
        let lost_n = sign * motor.propellant_mass_kg * gravity_m_s2;
        let mut values: Vec<f64> =
            curve.all.values.iter().zip(&curve.all.integral).map(|(f, i)| f - lost_n * i / whole).collect();
        if let Some((frequency_hz, damping)) = stand.resonance {
            // Until the ringing has fallen to exp(-14), a millionth.
            let extra = (14.0 / (damping * TAU * frequency_hz) / STEP_S) as usize;
            if stand.lightening > 0.0 {
                let gone = |k: usize| curve.all.integral.get(k).copied().unwrap_or(whole) / whole;
                let last = values.last().copied().unwrap_or(0.0);
                values.resize(values.len() + extra, last);
                let inertia: Vec<f64> = (0..values.len()).map(|k| 1.0 - stand.lightening * gone(k)).collect();
                values = second_order_lightening(&values, &inertia, STEP_S, frequency_hz, damping);
            } else {
                values = second_order(&values, STEP_S, frequency_hz, damping, extra);
            }
        }
        CellForce {
            dense: Dense::new(motor_start_s, values),
            weight_before_n: sign * motor.mass_before_kg * gravity_m_s2,
            stand: stand.clone(),
            ignition_s: motor_start_s,
            thrust_over_s: motor_start_s + curve.all.end_s(),
        }
    }

    /// Everything but thrust and weight, N.
    fn aside(&self, t: f64) -> f64 {
        let mut force = self.stand.drift_n_s * t;
        if let Some((size_n, time_s)) = self.stand.thermal
            && t > self.ignition_s
        {
            force += size_n * (1.0 - (-(t - self.ignition_s) / time_s).exp());
        }
        if let Some((after_s, size_n)) = self.stand.step
            && t >= self.thrust_over_s + after_s
        {
            force += size_n;
        }
        for hit in &self.stand.hits {
            let since = t - self.thrust_over_s - hit.after_s;
            if since < hit.duration_s() {
                force += hit.at(since);
            }
        }
        force
    }

    /// Mean over the `window_s` ending at true time `t`.
    pub fn mean_before(&self, t: f64, window_s: f64) -> f64 {
        let carried = self.stand.force_ratio * (self.dense.mean_before(t, window_s) + self.weight_before_n);
        if window_s <= 0.0 {
            return carried + self.aside(t);
        }
        let hit_near = self.stand.hits.iter().any(|hit| {
            let since = t - self.thrust_over_s - hit.after_s;
            since > 0.0 && since - window_s < hit.duration_s()
        });
        // Drift is smooth over a window; a hit is not.
        let parts = if hit_near { 200 } else { 4 };
        let sum: f64 = (0..parts).map(|i| self.aside(t - window_s * (f64::from(i) + 0.5) / f64::from(parts))).sum();
        carried + sum / f64::from(parts)
    }
}
