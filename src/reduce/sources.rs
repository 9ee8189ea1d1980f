//! The sources of error and what one standard uncertainty of each does to every figure.

use super::curve::{self, Curve};
use super::figures::{
    ACTION_LEVEL, BURN_LEVEL, CRYSTAL_CLOCK, EDGE_SHARE, Ends, RISEN_LEVEL, SMOOTHING_BIAS, STEEP_SHARE,
};
use super::zero::{self, Zero};
use super::{Record, force};
use crate::burn::crossings::{self, Crossing};
use crate::measure::integral;
use crate::run::Orientation;
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::effects::{Acts, Effect};

/// Half the stretch over which the swing of the stand is judged, s.
const SWING_S: f64 = 0.015;

/// What the effects are computed from.
pub(super) struct Work<'a> {
    pub record: &'a Record<'a>,
    pub zero: &'a Zero,
    pub curve: &'a Curve,
    pub bt: &'a [f64],
    pub bf: &'a [f64],
    pub burn: &'a Ends,
    pub action: &'a Ends,
    pub total_impulse: f64,
    pub burn_impulse: f64,
    pub burn_time: f64,
    pub action_time: f64,
    pub initial: f64,
    pub initial_s: f64,
    pub rise_time: Option<f64>,
    pub delay: Option<f64>,
}

impl Work<'_> {
    /// All effects, and whether the error of the scale is known.
    pub fn effects(&self, delay_u: Option<f64>, mass_u: Option<Option<f64>>) -> (Vec<Effect>, bool) {
        let (mut effects, known) = self.scale();
        effects.extend(self.zero());
        effects.extend(self.noise());
        effects.extend(self.ends(delay_u));
        effects.extend(self.stand_response());
        effects.push(self.clock());
        if let Some(Some(u)) = mass_u
            && self.record.inputs.run.motor.propellant_mass_kg.is_some()
        {
            let limits = self.record.inputs.run.motor.propellant_mass_kg.is_some_and(|m| m.limits.is_some());
            let shape = if limits { Shape::Rectangular } else { Shape::Normal };
            effects.push(Effect { propellant_mass: u, ..Effect::of("propellant mass").shaped(shape) });
        }
        if let Some(tail) = self.curve.tail {
            effects.push(Effect {
                total_impulse: tail.impulse_u,
                extrapolated_impulse: tail.impulse_u,
                burn_impulse: if self.burn.end_extrapolated { tail.impulse_u } else { 0.0 },
                ..Effect::of("tail beyond the record")
            });
        }
        (effects, known)
    }

    /// The amounts that the effects move, as they were found.
    pub fn found(&self, mass_kg: Option<f64>) -> Effect {
        Effect {
            total_impulse: self.total_impulse,
            burn_impulse: self.burn_impulse,
            burn_time: self.burn_time,
            action_time: self.action_time,
            peak_thrust: self.curve.peak.thrust_n,
            initial_thrust: self.initial,
            rise_time: self.rise_time.unwrap_or(0.0),
            ignition_delay: self.delay.unwrap_or(0.0),
            propellant_mass: mass_kg.unwrap_or(0.0),
            extrapolated_impulse: self.curve.tail.map_or(0.0, |tail| tail.impulse),
            action_impulse: integral::between(self.bt, self.bf, self.action.start.time_s, self.action.end.time_s),
            ..Effect::default()
        }
    }

    /// Errors of the force scale: each independent direction of each channel's calibration, and the force ratio.
    fn scale(&self) -> (Vec<Effect>, bool) {
        use crate::calibration::{ErrorShape, ScaleSource};
        let record = self.record;
        let mut effects = Vec::new();
        let mut known = true;
        let peak_index = self.bt.partition_point(|t| *t < self.curve.peak.time_s).min(self.bt.len() - 1);
        for channel in &record.channels {
            let Some(errors) = &channel.calibration.errors else {
                known = false;
                continue;
            };
            let force = &channel.force_n[self.zero.burst.clone()];
            let rest = self.rest_of(channel);
            for direction in errors {
                let scale = record.sign / record.force_ratio;
                let at_rest = channel.calibration.force_error_n(direction, rest);
                let change: Vec<f64> = force
                    .iter()
                    .map(|f| scale * (channel.calibration.force_error_n(direction, *f) - at_rest))
                    .collect();
                let mass_share = match (&self.zero.shift_mass_kg, record.inputs.run.motor.propellant_mass_kg) {
                    (Some((kg, _)), None) => {
                        let span = force[peak_index] - rest;
                        let relative =
                            if span != 0.0 { change[peak_index] * record.force_ratio / span.abs() } else { 0.0 };
                        kg * relative
                    }
                    _ => 0.0,
                };
                let shape = match (direction.source, &direction.shape) {
                    (ScaleSource::Fit, _) => {
                        Shape::of_estimate(channel.calibration.fit_degrees_of_freedom.unwrap_or(f64::INFINITY))
                    }
                    // Limits of one error shared by all.
                    (ScaleSource::Stated, _) | (ScaleSource::Weights, ErrorShape::Relative(_)) => Shape::Rectangular,
                    _ => Shape::Normal,
                };
                effects.push(Effect {
                    shape,
                    total_impulse: integral::trapezoid(self.bt, &change),
                    burn_impulse: integral::between(self.bt, &change, self.burn.start.time_s, self.burn.end.time_s),
                    action_impulse: integral::between(
                        self.bt,
                        &change,
                        self.action.start.time_s,
                        self.action.end.time_s,
                    ),
                    peak_thrust: change[peak_index],
                    initial_thrust: integral::between(
                        self.bt,
                        &change,
                        self.burn.start.time_s,
                        self.burn.start.time_s + self.initial_s,
                    ) / self.initial_s,
                    propellant_mass: mass_share,
                    ..Effect::of(match direction.source {
                        ScaleSource::Fit => "calibration fit",
                        ScaleSource::Weights => "weights",
                        ScaleSource::Gravity => "gravity",
                        ScaleSource::Buoyancy => "air buoyancy",
                        ScaleSource::Extrapolation => "beyond the heaviest weight",
                        ScaleSource::Stated => "stated accuracy",
                    })
                });
            }
        }
        if let Some(u) = record.inputs.run.stand.force_ratio.and_then(|r| r.standard_uncertainty) {
            let limits = record.inputs.run.stand.force_ratio.is_some_and(|r| r.limits.is_some());
            let share = u / record.force_ratio;
            effects.push(Effect {
                shape: if limits { Shape::Rectangular } else { Shape::Normal },
                acts: Acts::DividesForce(share),
                ..self.relative("force ratio", -share)
            });
        }
        (effects, known)
    }

    fn relative(&self, source: &str, r: f64) -> Effect {
        let from_force = self.record.inputs.run.motor.propellant_mass_kg.is_none();
        Effect {
            propellant_mass: if from_force { self.zero.shift_mass_kg.map_or(0.0, |(kg, _)| r * kg) } else { 0.0 },
            action_impulse: r * self.found(None).action_impulse,
            total_impulse: r * self.total_impulse,
            burn_impulse: r * self.burn_impulse,
            peak_thrust: r * self.curve.peak.thrust_n,
            initial_thrust: r * self.initial,
            ..Effect::of(source)
        }
    }

    /// The channel's force at rest before the burn, N as the calibration reads it.
    fn rest_of(&self, channel: &force::Channel<'_>) -> f64 {
        let end = self.zero.burst.start;
        let start = end.saturating_sub(200).max(self.zero.window.start.min(end));
        let quiet =
            if end > start { &channel.force_n[start..end] } else { &channel.force_n[self.zero.burst.end - 1..] };
        if quiet.is_empty() { 0.0 } else { quiet.iter().sum::<f64>() / quiet.len() as f64 }
    }

    /// Effect of a zero that is off by `course(t)`.
    fn zero_effect(&self, source: &str, course: impl Fn(f64) -> f64) -> Effect {
        let change: Vec<f64> = self.bt.iter().map(|t| -course(*t)).collect();
        let (start, end) = (&self.burn.start, &self.burn.end);
        let moved = |c: &Crossing| if c.slope > 0.0 { course(c.time_s) / c.slope } else { 0.0 };
        Effect {
            total_impulse: integral::trapezoid(self.bt, &change),
            burn_impulse: integral::between(self.bt, &change, start.time_s, end.time_s),
            action_impulse: integral::between(self.bt, &change, self.action.start.time_s, self.action.end.time_s),
            burn_time: -moved(start) - moved(end),
            action_time: -moved(&self.action.start) - moved(&self.action.end),
            peak_thrust: -course(self.curve.peak.time_s),
            initial_thrust: integral::between(self.bt, &change, start.time_s, start.time_s + self.initial_s)
                / self.initial_s,
            ..Effect::of(source)
        }
    }

    fn zero(&self) -> Vec<Effect> {
        let baseline = &self.zero.baseline;
        let mass_per_newton = match (&self.zero.shift_mass_kg, self.record.inputs.run.motor.propellant_mass_kg) {
            // Nozzle-up the mass is what the zero fell by, nozzle-down what it rose by.
            (Some(_), None) if self.record.orientation == Orientation::NozzleDown => {
                -1.0 / self.record.gravity.value_m_s2
            }
            (Some(_), None) => 1.0 / self.record.gravity.value_m_s2,
            _ => 0.0,
        };
        let mut effects = Vec::new();
        if let Some(before) = &baseline.before {
            let u = before.level_u;
            effects.push(Effect {
                propellant_mass: u * mass_per_newton,
                shape: Shape::of_estimate(before.samples.saturating_sub(2) as f64),
                ..self.zero_effect("zero before", |t| u * baseline.sensitivity(t).0)
            });
        }
        if let Some(after) = &baseline.after {
            let u = after.level_u;
            effects.push(Effect {
                propellant_mass: -u * mass_per_newton,
                shape: Shape::of_estimate(after.samples.saturating_sub(2) as f64),
                ..self.zero_effect("zero after", |t| u * baseline.sensitivity(t).1)
            });
        }
        if self.zero.drift_u_n > 0.0 {
            let u = self.zero.drift_u_n;
            // Between a straight line and a step at either end.
            effects.push(self.zero_effect("course of the zero's drift", |_| u).shaped(Shape::Rectangular));
        }
        effects
    }

    fn noise(&self) -> Vec<Effect> {
        let density = zero::noise_density(self.zero, self.record.interval_s());
        let duration = self.bt[self.bt.len() - 1] - self.bt[0];
        vec![
            Effect {
                total_impulse: (density * duration).sqrt(),
                burn_impulse: (density * self.burn_time).sqrt(),
                action_impulse: (density * self.action_time).sqrt(),
                initial_thrust: (density / self.initial_s).sqrt(),
                ..Effect::of("noise")
            },
            Effect { peak_thrust: self.curve.peak.noise_u_n, ..Effect::of("noise at the peak") },
            Effect { total_impulse: self.sampling_u(), burn_impulse: self.sampling_u(), ..Effect::of("sampling") },
        ]
    }

    /// What the straight lines between samples may miss: second differences beyond noise, each over its interval, and gaps.
    fn sampling_u(&self) -> f64 {
        let noise = 6.0 * self.curve.quiet_sd_n.powi(2);
        let mut sum = 0.0;
        // An averaging converter misses nothing between its stamps.
        if !self.record.averaged_cells() {
            for (t, f) in self.bt.windows(3).zip(self.bf.windows(3)) {
                let d = f[0] - 2.0 * f[1] + f[2];
                let excess = (d * d - 4.0 * noise).max(0.0);
                // A jump at an unknown place in one interval: jump · dt / √12, and it shows in two second differences.
                sum += excess * ((t[2] - t[0]) / 2.0).powi(2) / 24.0;
            }
        }
        for gap in &self.record.inputs.log.gaps {
            let (a, b) = (gap.start_s, gap.end_s);
            if b > self.bt[0] && a < self.bt[self.bt.len() - 1] {
                let ends = [curve::at(self.bt, self.bf, a), curve::at(self.bt, self.bf, b)];
                // Between the two ends the thrust is not known: a jump anywhere in the gap, and 2 % of thrust besides.
                let u = (ends[1] - ends[0]).abs() / 12f64.sqrt() + 0.02 * ends[0].max(ends[1]).max(0.0);
                sum += (u * (b - a)).powi(2);
            }
        }
        sum.sqrt()
    }

    fn ends(&self, delay_u: Option<f64>) -> Vec<Effect> {
        let curve = self.curve;
        let instant = |c: &Crossing, level: f64, rising: bool| {
            if c.slope.is_infinite() {
                return 0.0;
            }
            // The smoothing allows a bias of about the width of its own interval before it takes a shorter window.
            let error =
                SMOOTHING_BIAS * curve::at(&curve.conditioned.time_s, &curve.conditioned.standard_error_n, c.time_s);
            let threshold = level * curve.peak.noise_u_n;
            let noise = self.time_for(c, level * curve.peak.thrust_n, error.hypot(threshold), rising);
            // Within the interval of a crossing the middle is likelier than its ends (triangular).
            // The shape of a rise that passes within a few samples is known to a part of one interval only.
            let dt = curve.conditioned.interval_s;
            let steep = (c.slope * dt / (STEEP_SHARE * curve.peak.thrust_n)).min(1.0);
            noise.hypot(c.sampling_half_width_s / 6f64.sqrt()).hypot(EDGE_SHARE * dt * steep)
        };
        let (start_u, end_u) =
            (instant(&self.burn.start, BURN_LEVEL, true), instant(&self.burn.end, BURN_LEVEL, false));
        let (up_u, down_u) =
            (instant(&self.action.start, ACTION_LEVEL, true), instant(&self.action.end, ACTION_LEVEL, false));
        let level_n = BURN_LEVEL * curve.peak.thrust_n;
        let source = "interval ends";
        vec![
            Effect {
                burn_time: -start_u,
                burn_impulse: -level_n * start_u,
                action_time: -up_u,
                action_impulse: -ACTION_LEVEL * curve.peak.thrust_n * up_u,
                rise_time: -up_u,
                ignition_delay: delay_u.map_or(0.0, |u| u.hypot(start_u)),
                ..Effect::of(source)
            },
            Effect {
                burn_time: end_u,
                burn_impulse: level_n * end_u,
                action_time: down_u,
                action_impulse: ACTION_LEVEL * curve.peak.thrust_n * down_u,
                ..Effect::of(source)
            },
            Effect { rise_time: self.rise_time.map_or(0.0, |_| self.risen_u()), ..Effect::of(source) },
        ]
    }

    /// What an error of the stand's frequency or damping does: T = x + 2 (ζ/ω) x′ + x″/ω² moves by −2 (δω/ω) (T − x) and by
    /// 2 δζ x′/ω, both of the size of the swing T − x there. The impulse does not feel it.
    fn stand_response(&self) -> Vec<Effect> {
        let Some([frequency_u, damping_u]) = self.curve.stand_u else { return Vec::new() };
        // The phase of the swing turns within the smoothing: its effective value.
        let swing = |time_s: f64| {
            let from = self.bt.partition_point(|t| *t < time_s - SWING_S);
            let to = self.bt.partition_point(|t| *t <= time_s + SWING_S);
            let off = (from..to)
                .map(|i| (self.bf[i] - curve::at(&self.curve.time_s, &self.curve.thrust_n, self.bt[i])).powi(2));
            (off.sum::<f64>() / (to - from).max(1) as f64).sqrt()
        };
        let moved = |c: &Crossing| if c.slope > 0.0 && c.slope.is_finite() { swing(c.time_s) / c.slope } else { 0.0 };
        // Where the ignition was fitted, its own uncertainty holds the stand's already.
        let fitted = self.curve.conditioned.ignition.as_ref().is_some_and(|i| i.peak_s == self.curve.peak.time_s);
        [2.0 * frequency_u, 2.0 * damping_u]
            .into_iter()
            .map(|u| Effect {
                peak_thrust: if fitted { 0.0 } else { u * swing(self.curve.peak.time_s) },
                burn_time: u * moved(&self.burn.start).hypot(moved(&self.burn.end)),
                action_time: u * moved(&self.action.start).hypot(moved(&self.action.end)),
                ..Effect::of("stand's response")
            })
            .collect()
    }

    /// Half the time that the curve takes through `level_n` ± `error_n`: in noise it climbs down in steps, and the slope of one step
    /// says little of how far the crossing may lie off. Not less than the slope at the crossing gives.
    fn time_for(&self, c: &Crossing, level_n: f64, error_n: f64, rising: bool) -> f64 {
        let (t, f) = (&self.curve.time_s, &self.curve.thrust_n);
        let from = t.partition_point(|x| *x < self.curve.burst_s[0] - 0.25).saturating_sub(1);
        let to = (t.partition_point(|x| *x <= self.curve.burst_s[1]) + 2).min(t.len());
        let error_n = error_n.min(0.9 * level_n);
        let passing = |level: f64| {
            let found = if rising {
                crossings::first_up(&t[from..to], &f[from..to], level)
            } else {
                crossings::last_down(&t[from..to], &f[from..to], level)
            };
            found.map(|c| c.time_s)
        };
        let local = if c.slope > 0.0 { error_n / c.slope } else { 0.0 };
        match (passing(level_n - error_n), passing(level_n + error_n)) {
            (Some(low), Some(high)) => (0.5 * (low - high).abs()).max(local),
            _ => local,
        }
    }

    /// Uncertainty of the instant at which 90 % of peak is reached, s.
    fn risen_u(&self) -> f64 {
        let curve = self.curve;
        crossings::first_up(&curve.time_s, &curve.thrust_n, RISEN_LEVEL * curve.peak.thrust_n).map_or(0.0, |c| {
            let error = curve::at(&curve.conditioned.time_s, &curve.conditioned.standard_error_n, c.time_s);
            (error.hypot(RISEN_LEVEL * curve.peak.noise_u_n) / c.slope.max(f64::MIN_POSITIVE))
                .hypot(curve.conditioned.interval_s / 12f64.sqrt())
        })
    }

    /// The clock scales times and impulse together.
    fn clock(&self) -> Effect {
        let stated = self.record.inputs.run.log.clock_tolerance;
        let r = match stated {
            Some(tolerance) => tolerance.value / 3f64.sqrt(),
            None => CRYSTAL_CLOCK / 3f64.sqrt(),
        };
        Effect {
            total_impulse: r * self.total_impulse,
            burn_impulse: r * self.burn_impulse,
            burn_time: r * self.burn_time,
            action_time: r * self.action_time,
            rise_time: r * self.rise_time.unwrap_or(0.0),
            ignition_delay: r * self.delay.unwrap_or(0.0),
            action_impulse: r * self.found(None).action_impulse,
            extrapolated_impulse: r * self.found(None).extrapolated_impulse,
            acts: Acts::StretchesTime(r),
            shape: Shape::Rectangular,
            ..Effect::of("clock")
        }
    }
}
