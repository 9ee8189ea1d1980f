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
use crate::uncertainty::propagation;
use nalgebra::DMatrix;

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
            let shape = Shape::of_stated(self.record.inputs.run.motor.propellant_mass_kg.and_then(|m| m.limits));
            effects.push(Effect { propellant_mass: u, ..Effect::of("propellant mass").shaped(shape) });
        }
        let motor = &self.record.inputs.run.motor;
        for (weighed, sign) in [(motor.mass_before_kg, 1.0), (motor.mass_after_kg, -1.0)] {
            if let Some((mass, u)) = weighed.and_then(|m| Some((m, m.standard_uncertainty?))) {
                effects.push(Effect {
                    expelled_mass: sign * u,
                    ..Effect::of("weighing").shaped(Shape::of_stated(mass.limits))
                });
            }
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
            expelled_mass: match (
                self.record.inputs.run.motor.mass_before_kg,
                self.record.inputs.run.motor.mass_after_kg,
            ) {
                (Some(before), Some(after)) => before.value - after.value,
                _ => 0.0,
            },
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
        let g = &record.gravity;
        let gravity_relative = g.standard_uncertainty / g.value_m_s2;
        let mut site_gravity = Effect::of("gravity");
        for (number, channel) in record.channels.iter().enumerate() {
            let Some(errors) = &channel.calibration.errors else {
                known = false;
                continue;
            };
            let force = &channel.force_n[self.zero.burst.clone()];
            let rest = self.rest_of(channel);
            // The part of the weight shift that this cell carries, as it reads it, and the whole.
            let (shift, whole_shift) = self.weight_shift(force[peak_index] - rest);
            for direction in errors {
                let scale = record.sign / record.force_ratio;
                let error = |f: f64| channel.calibration.force_error_n(direction, f);
                let at_rest = error(rest);
                let change: Vec<f64> = force.iter().map(|f| scale * (error(*f) - at_rest)).collect();
                let between = |from: f64, to: f64| integral::between(self.bt, &change, from, to);
                let start_s = self.burn.start.time_s;
                let effect = Effect {
                    total_impulse: integral::trapezoid(self.bt, &change),
                    burn_impulse: between(start_s, self.burn.end.time_s),
                    action_impulse: between(self.action.start.time_s, self.action.end.time_s),
                    peak_thrust: change[peak_index],
                    initial_thrust: between(start_s, start_s + self.initial_s) / self.initial_s,
                    propellant_mass: self.mass_of_shift().map_or(0.0, |kg| {
                        if whole_shift == 0.0 { 0.0 } else { kg * (error(rest + shift) - at_rest) / whole_shift }
                    }),
                    ..Effect::default()
                };
                let dof = channel.calibration.fit_degrees_of_freedom.unwrap_or(f64::INFINITY);
                let (source, shape, scatter) = match direction.source {
                    // All coefficients of a fit are judged by one scatter.
                    ScaleSource::Fit => ("calibration fit", Shape::of_estimate(dof), Some(number)),
                    ScaleSource::Weights => ("weights", Shape::Rectangular, None),
                    ScaleSource::Gravity => {
                        if direction.shape == ErrorShape::Relative(gravity_relative) {
                            // Gravity of the run's own site: one error for all cells, and none of it in a mass, which is the
                            // force divided by the same gravity.
                            site_gravity.total_impulse += effect.total_impulse;
                            site_gravity.burn_impulse += effect.burn_impulse;
                            site_gravity.action_impulse += effect.action_impulse;
                            site_gravity.peak_thrust += effect.peak_thrust;
                            site_gravity.initial_thrust += effect.initial_thrust;
                            continue;
                        }
                        ("gravity", Shape::Normal, None)
                    }
                    ScaleSource::Buoyancy => ("air buoyancy", Shape::Rectangular, None),
                    ScaleSource::Extrapolation => ("beyond the heaviest weight", Shape::Normal, None),
                    ScaleSource::Stated => ("stated accuracy", Shape::Rectangular, None),
                };
                effects.push(Effect { source: source.to_string(), shape, scatter, ..effect });
            }
        }
        if let Some(kg) = self.mass_of_shift()
            && site_gravity.is_nil()
        {
            // The scale owes nothing to the site's gravity, so the mass does.
            site_gravity.propellant_mass = -gravity_relative * kg;
        }
        effects.push(site_gravity);
        if let Some(u) = record.inputs.run.stand.force_ratio.and_then(|r| r.standard_uncertainty) {
            let share = u / record.force_ratio;
            effects.push(Effect {
                shape: Shape::of_stated(record.inputs.run.stand.force_ratio.and_then(|r| r.limits)),
                acts: Acts::DividesForce(share),
                ..self.relative("force ratio", -share)
            });
        }
        (effects, known)
    }

    /// Mass that the weight shift gave, kg, where it was not weighed.
    fn mass_of_shift(&self) -> Option<f64> {
        match self.record.inputs.run.motor.propellant_mass_kg {
            Some(_) => None,
            None => self.zero.shift_mass_kg.map(|(kg, _)| kg),
        }
    }

    /// By how much the lost weight moved the force of a cell that `span` of the peak fell to, and of all cells, N as they read it.
    fn weight_shift(&self, span: f64) -> (f64, f64) {
        let (record, kg) = (self.record, self.mass_of_shift().unwrap_or(0.0));
        let downward = if record.orientation == Orientation::NozzleDown { 1.0 } else { -1.0 };
        let whole = record.sign * downward * kg * record.gravity.value_m_s2 * record.force_ratio;
        let thrust = record.sign * record.force_ratio * self.curve.peak.thrust_n;
        (whole * span / thrust, whole)
    }

    fn relative(&self, source: &str, r: f64) -> Effect {
        Effect {
            propellant_mass: self.mass_of_shift().map_or(0.0, |kg| r * kg),
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
                / self.initial_s
                + moved(start) * self.initial_per_second(),
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
        // Levels fitted apart err apart; one line through both has errors that move both.
        let levels = match (&baseline.before, &baseline.after) {
            (Some(before), Some(after)) if before.level_covariance != 0.0 => {
                let (b, a, both) = (before.level_u.powi(2), after.level_u.powi(2), before.level_covariance);
                let dof = before.degrees_of_freedom().min(after.degrees_of_freedom());
                let directions = propagation::directions(&DMatrix::from_row_slice(2, 2, &[b, both, both, a]));
                directions.iter().map(|d| ("zero", [d[0], d[1]], dof)).collect()
            }
            (before, after) => {
                let mut apart = Vec::new();
                apart.extend(before.map(|q| ("zero before", [q.level_u, 0.0], q.degrees_of_freedom())));
                apart.extend(after.map(|q| ("zero after", [0.0, q.level_u], q.degrees_of_freedom())));
                apart
            }
        };
        for (source, [before, after], dof) in levels {
            let course = |t: f64| {
                let (of_before, of_after) = baseline.sensitivity(t);
                before * of_before + after * of_after
            };
            effects.push(Effect {
                propellant_mass: (before - after) * mass_per_newton,
                shape: Shape::of_estimate(dof),
                ..self.zero_effect(source, course)
            });
        }
        if mass_per_newton != 0.0
            && let (Some((_, mass_u)), Some(level_u)) = (self.zero.shift_mass_kg, baseline.shift_u_n())
        {
            // What the drift through the burn may have done beside what the levels at its ends say.
            let beyond = (mass_u.powi(2) - (level_u * mass_per_newton).powi(2)).max(0.0).sqrt();
            effects.push(Effect { propellant_mass: beyond, ..Effect::of("course of the zero's drift") });
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
            // Mostly a jump at either end of the burn, each anywhere within an interval.
            Effect { total_impulse: self.sampling_u(), burn_impulse: self.sampling_u(), ..Effect::of("sampling") }
                .shaped(Shape::Triangular),
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
        // Noise, place between two samples (the middle likelier than the ends), and shape of a fast edge: one standard
        // uncertainty of each, s.
        let instant = |c: &Crossing, level: f64, rising: bool| {
            if c.slope.is_infinite() {
                return [0.0; 3];
            }
            // The smoothing allows a bias of about the width of its own interval before it takes a shorter window.
            let error =
                SMOOTHING_BIAS * curve::at(&curve.conditioned.time_s, &curve.conditioned.standard_error_n, c.time_s);
            let threshold = level * curve.peak.noise_u_n;
            let noise = self.time_for(c, level * curve.peak.thrust_n, error.hypot(threshold), rising);
            // The shape of a rise that passes within a few samples is known to a part of one interval only.
            let dt = curve.conditioned.interval_s;
            let steep = (c.slope * dt / (STEEP_SHARE * curve.peak.thrust_n)).min(1.0);
            [noise, c.sampling_half_width_s / 6f64.sqrt(), EDGE_SHARE * dt * steep]
        };
        let start = instant(&self.burn.start, BURN_LEVEL, true);
        let end = instant(&self.burn.end, BURN_LEVEL, false);
        let up = instant(&self.action.start, ACTION_LEVEL, true);
        let down = instant(&self.action.end, ACTION_LEVEL, false);
        let level_n = BURN_LEVEL * curve.peak.thrust_n;
        let action_n = ACTION_LEVEL * curve.peak.thrust_n;
        let source = "interval ends";
        let mut effects = Vec::new();
        for (part, shape) in [Shape::Normal, Shape::Triangular, Shape::Normal].into_iter().enumerate() {
            effects.push(Effect {
                burn_time: -start[part],
                burn_impulse: -level_n * start[part],
                action_time: -up[part],
                action_impulse: -action_n * up[part],
                rise_time: -up[part],
                initial_thrust: start[part] * self.initial_per_second(),
                ignition_delay: delay_u.map_or(0.0, |_| start[part]),
                ..Effect::of(source).shaped(shape)
            });
            effects.push(Effect {
                burn_time: end[part],
                burn_impulse: level_n * end[part],
                action_time: down[part],
                action_impulse: action_n * down[part],
                ..Effect::of(source).shaped(shape)
            });
        }
        effects.push(Effect { rise_time: self.rise_time.map_or(0.0, |_| self.risen_u()), ..Effect::of(source) });
        // The signal changed anywhere between two samples.
        effects.push(Effect {
            ignition_delay: -delay_u.unwrap_or(0.0),
            ..Effect::of("ignition signal").shaped(Shape::Rectangular)
        });
        effects
    }

    /// What the initial thrust gains when the start of its stretch is set later, N/s: thrust at the end for thrust at the start.
    fn initial_per_second(&self) -> f64 {
        let thrust = |time_s: f64| curve::at(&self.curve.time_s, &self.curve.thrust_n, time_s);
        let start_s = self.burn.start.time_s;
        (thrust(start_s + self.initial_s) - thrust(start_s)) / self.initial_s
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
