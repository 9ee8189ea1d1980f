//! The chamber-pressure channel.

mod levels;

use self::levels::{outside, rest};
use super::curve::Curve;
use super::figures::Ends;
use super::steady::{self, Course};
use super::zero::Zero;
use super::{Record, force};
use crate::calibration::{Calibration, ErrorShape};
use crate::condition::{averaging, clipping, conditioned};
use crate::firing::{Figure, Quantities};
use crate::log::Column;
use crate::measure::integral;
use crate::measure::pressure::{self, WebTime};
use crate::problem::Problem;
use crate::quantity::Measured;
use crate::run::{PressureReference, Role};
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::effects::Effect;

/// Samples before the burst at which the pressure may already rise.
const BEFORE_BURST: usize = 3;
/// The pressure must rise above its noise by this to be one.
const ABOVE_NOISE: f64 = 10.0;

/// The pressure of one firing.
pub(super) struct Pressure {
    /// Absolute, Pa, at the samples of the zero's window, conditioned.
    pub curve_pa: Vec<f64>,
    /// What of it is air: the rest pushes.
    pub air_pa: f64,
    pub peak_pa: f64,
    /// What noise leaves of the highest pressure, Pa.
    pub peak_noise_pa: f64,
    pub action_integral_pa_s: f64,
    /// Over the burn time, raised by the share of the impulse outside it.
    pub total_integral_pa_s: f64,
    pub throat_area_m2: Option<f64>,
    /// Growth of the throat's area through the burn, as a share, where it was measured.
    pub growth: f64,
    pub web_s: Option<f64>,
    pub effects: Vec<Effect>,
    /// The scale of the channel has a stated error, and its zero was seen.
    pub known: bool,
    pub throat_known: bool,
    pub web_known: bool,
    /// Cut at a limit during the burn.
    pub clipped: bool,
    /// The thrust was.
    pub thrust_clipped: bool,
}

/// What the figures need to know of thrust.
pub(super) struct Thrust<'a> {
    pub curve: &'a Curve,
    pub burn: &'a Ends,
    pub action: &'a Ends,
    pub total_impulse: f64,
    /// Total impulse over burn impulse.
    pub beyond_burn: f64,
}

/// Reads the pressure channel, where there is one. What was found and assumed goes to `findings`.
///
/// # Errors
/// More than one pressure channel; a column that is not there; readings that the calibration cannot invert.
pub(super) fn measure(
    record: &Record<'_>,
    zero: &Zero,
    thrust: &Thrust<'_>,
    findings: &mut Vec<String>,
) -> Result<Option<Pressure>, Problem> {
    let run = &record.inputs.run;
    let Some((reading_pa, calibration, column, absolute)) = readings(record, zero)? else { return Ok(None) };
    let time_s = &record.time_s[zero.window.clone()];
    let burst = zero.burst.start - zero.window.start..zero.burst.end - zero.window.start;
    let rest = rest(&reading_pa, burst.clone());
    let (outside_pa, outside_limits, words) = outside(record);
    let noise = rest.before.map_or(0.0, |l| l.sample_pa);
    // Slow noise sums up to more over a stretch than white noise of the same size.
    let slow = rest.before.map_or(1.0, |l| {
        let white = l.sample_pa / (burst.start as f64).sqrt();
        if white > 0.0 { l.u_pa / white } else { 1.0 }
    });
    let level = rest.before.map_or(if absolute { outside_pa } else { 0.0 }, |l| l.pa);
    if rest.before.is_none() {
        findings.push(
            "no quiet record before the burst: the zero of the pressure was not seen, so no uncertainty is given for its figures"
                .into(),
        );
    }
    let scale_u = calibration.force_uncertainty_n(level).unwrap_or(0.0);
    let mut zero_limits = 0.0;
    // What is above the outside air pushes; an absolute reading keeps its own scale.
    let shift = if absolute {
        let off = level - outside_pa;
        if off.abs() > outside_limits + 2.0 * (scale_u + rest.before.map_or(0.0, |l| l.u_pa)) {
            zero_limits = off.abs();
            findings.push(format!(
                "pressure before ignition reads {:.0} hPa, where the air has {:.0} hPa ({words}): the transducer's zero may be off by that, and its figures are that much more uncertain; is it a gauge one?",
                level / 100.0,
                outside_pa / 100.0
            ));
        }
        outside_pa
    } else {
        findings
            .push(format!("{words}; added to the gauge pressure, whose zero ({level:.0} Pa) is read before ignition"));
        level
    };
    if rest.drift_pa != 0.0 {
        findings.push(format!(
            "the zero of the pressure moves by {:+.0} Pa across the burst: taken away evenly along it",
            rest.drift_pa
        ));
    }
    let (starts, ends) = (record.time_s[zero.burst.start], record.time_s[zero.burst.end - 1]);
    let drift = |t: f64| rest.drift_pa * ((t - starts) / (ends - starts).max(f64::MIN_POSITIVE)).clamp(0.0, 1.0);
    let above: Vec<f64> = reading_pa.iter().zip(time_s).map(|(p, t)| p - shift - drift(*t)).collect();
    let burst_s = thrust.curve.burst_s;
    let smooth = conditioned::condition(
        time_s,
        &above,
        record.interval_s(),
        noise,
        record.time_s[record.burn.end - 1] - record.time_s[record.burn.start],
        run.reduction.lowpass,
        None,
    );
    let last = smooth.time_s.partition_point(|t| *t <= burst_s[1]);
    let first = smooth.time_s.partition_point(|t| *t < burst_s[0]).min(last.saturating_sub(1));
    let peak = smooth.peak(first..last, record.averaged_cells());
    let Some(mut peak) = peak.filter(|p| p.thrust_n > ABOVE_NOISE * noise && p.thrust_n > 0.0) else {
        findings.push(
            "the pressure does not rise during the burn: no figures from it. Look at the transducer, its column and its sign"
                .into(),
        );
        return Ok(None);
    };
    if record.averaged_cells() {
        // As with thrust: the means of cells hide what stood between their ends.
        let top = averaging::reconstruct(&smooth.thrust_n, noise).value.into_iter().fold(0.0, f64::max);
        if top > peak.thrust_n {
            peak.noise_u_n = peak.noise_u_n.hypot(0.5 * (top - peak.thrust_n));
            peak.thrust_n = top;
        }
    }
    let clipped = clipping::find_clipping(&column.values)
        .iter()
        .flat_map(|c| c.ranges.iter())
        .any(|r| r.start < record.burn.end && r.end > record.burn.start);
    if clipped {
        // Nothing is known above the cut: the highest reading is what was measured.
        peak.thrust_n = peak.highest_n;
        findings.push(
            "the pressure is cut off at a limit during the burn: peak, mean and characteristic velocity are lower bounds, the thrust coefficient an upper one"
                .into(),
        );
    }
    let thrust_clipped = !super::figures::clipped_in_burn(record).is_empty();
    let (from, to) = (thrust.action.start.time_s, thrust.action.end.time_s);
    let (burn_from, burn_to) = (thrust.burn.start.time_s, thrust.burn.end.time_s);
    let over_action = |y: &[f64]| integral::between(time_s, y, from, to);
    // Beyond a record that ends early the pressure is taken to fall as the extrapolated thrust does.
    let beyond_burn = if thrust.burn.end_extrapolated {
        thrust.total_impulse / integral::between(time_s, &zero.thrust_n, burn_from, burn_to)
    } else {
        thrust.beyond_burn
    };
    let over_burn = |y: &[f64]| integral::between(time_s, y, burn_from, burn_to) * beyond_burn;
    let action_integral_pa_s = over_action(&above) + outside_pa * (to - from);
    let total_integral_pa_s = over_burn(&above) + outside_pa * (burn_to - burn_from) * thrust.beyond_burn;

    let mut effects = Vec::new();
    for direction in calibration.errors.iter().flatten() {
        let error = |p: f64| calibration.force_error_n(direction, p);
        let at_rest = if absolute { 0.0 } else { error(level) };
        let change: Vec<f64> = reading_pa.iter().map(|p| error(*p) - at_rest).collect();
        effects.push(Effect {
            peak_pressure: error(peak.thrust_n + shift) - at_rest,
            pressure_action: over_action(&change),
            pressure_total: over_burn(&change),
            ..Effect::of("pressure scale").shaped(match direction.shape {
                ErrorShape::Relative(_) => Shape::Rectangular,
                _ => Shape::Normal,
            })
        });
    }
    // `course`: of an error of the level along the burst, as a share.
    let level_effect = |source: &str, u: f64, shape: Shape, course: &dyn Fn(f64) -> f64| {
        let change: Vec<f64> = time_s.iter().map(|t| u * course(*t)).collect();
        Effect {
            peak_pressure: u * course(peak.time_s),
            pressure_action: over_action(&change),
            pressure_total: over_burn(&change),
            ..Effect::of(source).shaped(shape)
        }
    };
    let even = |_: f64| 1.0;
    if absolute {
        effects.push(level_effect("zero of the pressure", zero_limits / 3f64.sqrt(), Shape::Rectangular, &even));
    } else {
        let level_u = rest.before.map_or(0.0, |l| l.u_pa);
        effects.push(level_effect("air pressure", outside_limits / 3f64.sqrt(), Shape::Rectangular, &even));
        effects.push(level_effect("zero of the pressure", level_u, Shape::Normal, &even));
    }
    // Between a step at the start and one at the end.
    let course_u = 0.5 * rest.drift_pa.abs() / 3f64.sqrt();
    effects.push(level_effect("course of the pressure's zero", course_u, Shape::Rectangular, &even));
    let sums = |span: f64| slow * noise * (span * record.interval_s()).sqrt();
    effects.push(Effect { peak_pressure: peak.noise_u_n, ..Effect::of("noise at the highest pressure") });
    effects.push(Effect {
        pressure_action: sums(to - from),
        pressure_total: sums(burn_to - burn_from),
        ..Effect::of("noise of the pressure")
    });
    // What burns outside the burn time is taken to flow as it pushes; how far that holds nobody measured.
    let outside_burn = (beyond_burn - 1.0).max(0.0) * total_integral_pa_s;
    effects.push(Effect {
        pressure_total: outside_burn / 3f64.sqrt(),
        ..Effect::of("pressure outside the burn time").shaped(Shape::Rectangular)
    });

    let throat = throat(record, &mut effects, findings);
    let web = web(
        &smooth.time_s[first.saturating_sub(BEFORE_BURST)..last],
        &smooth.thrust_n[first.saturating_sub(BEFORE_BURST)..last],
        run.motor.web_thickness_m.is_some(),
        findings,
    );
    let mut web_known = false;
    if let (Some(web), Some(thickness)) = (&web, run.motor.web_thickness_m) {
        // A knee as sharp as the tangents would have it, or as early before it as the bisector's cut.
        // The start lies between two samples as well.
        let interval = std::f64::consts::SQRT_2 * record.interval_s();
        let u = (web.knee_s - web.end_s).hypot(web.choice_s).hypot(interval) / 3f64.sqrt();
        effects.push(Effect { web_time: u, ..Effect::of("end of the web").shaped(Shape::Rectangular) });
        web_known = thickness.standard_uncertainty.is_some();
        match thickness.standard_uncertainty {
            Some(u) => {
                effects.push(Effect { web_thickness: u, ..Effect::of("web thickness").shaped(stated(&thickness)) })
            }
            None => findings.push("no limits are given for the web thickness: no uncertainty of the burn rate".into()),
        }
    }
    if !clipped && !thrust_clipped {
        findings.extend(steady::words(&Course {
            time_s,
            thrust_n: &zero.thrust_n,
            above_pa: &above,
            outside_pa,
            action_s: [from, to],
            throat_area_m2: throat.map(|t| t.area_m2),
            growth: throat.map_or(0.0, |t| t.growth),
        }));
    }
    let curve_pa = time_s.iter().map(|t| super::curve::at(&smooth.time_s, &smooth.thrust_n, *t) + outside_pa).collect();
    Ok(Some(Pressure {
        curve_pa,
        air_pa: outside_pa,
        peak_pa: peak.thrust_n + outside_pa,
        peak_noise_pa: peak.noise_u_n,
        action_integral_pa_s,
        total_integral_pa_s,
        throat_area_m2: throat.map(|t| t.area_m2),
        growth: throat.map_or(0.0, |t| t.growth),
        web_s: web.map(|w| w.end_s - w.start_s),
        effects,
        known: calibration.errors.is_some() && rest.before.is_some(),
        throat_known: throat.is_some_and(|t| t.known),
        web_known,
        clipped,
        thrust_clipped,
    }))
}

/// Readings of the pressure channel in Pa on its own scale over the zero's window, what they came from, and whether they are
/// absolute.
type Readings<'a> = (Vec<f64>, &'a Calibration, &'a Column, bool);

fn readings<'a>(record: &Record<'a>, zero: &Zero) -> Result<Option<Readings<'a>>, Problem> {
    let inputs = record.inputs;
    let run = &inputs.run;
    let mut channels = run.channels.iter().zip(&inputs.calibrations).filter(|(spec, _)| spec.role == Role::Pressure);
    let Some((spec, calibration)) = channels.next() else { return Ok(None) };
    let in_run = |problem: Problem| match &run.path {
        Some(path) => problem.in_file(path),
        None => problem.in_file(&run.log.file),
    };
    if channels.next().is_some() {
        return Err(in_run(
            Problem::new("two channels with role = \"pressure\"")
                .expected("one: the chamber pressure")
                .remedy("leave the other [[channel]] out"),
        ));
    }
    let Some(calibration) = calibration else {
        return Err(in_run(
            Problem::new("the pressure channel has no calibration and no unit of pressure")
                .expected("unit = \"bar\" (or Pa, kPa, MPa, psi), or a calibration of the transducer"),
        ));
    };
    let column = force::column(inputs, &spec.column)?;
    let mut reading_pa = Vec::with_capacity(zero.window.len());
    for value in &column.values[zero.window.clone()] {
        reading_pa.push(calibration.force_n(*value).map_err(|p| p.in_file(&run.log.file))?);
    }
    Ok(Some((reading_pa, calibration, column, spec.reference == Some(PressureReference::Absolute))))
}

fn stated(measured: &Measured) -> Shape {
    if measured.limits.is_some() { Shape::Rectangular } else { Shape::Normal }
}

/// The throat: its mean area, whether its error is known, and its growth in area as a share.
#[derive(Debug, Clone, Copy)]
struct Throat {
    area_m2: f64,
    known: bool,
    growth: f64,
}

fn throat(record: &Record<'_>, effects: &mut Vec<Effect>, findings: &mut Vec<String>) -> Option<Throat> {
    let motor = &record.inputs.run.motor;
    let before = motor.throat_diameter_m?;
    let (area_m2, wear) = pressure::throat_area(before.value, motor.throat_diameter_after_m.map(|d| d.value));
    let diameters = [Some(before), motor.throat_diameter_after_m];
    let given: Vec<Measured> = diameters.into_iter().flatten().collect();
    let known = given.iter().all(|d| d.standard_uncertainty.is_some());
    if known {
        // One caliper measures both: its error is taken as the same, so that the two do not average out.
        let area_u = given.iter().map(|d| 0.5 * std::f64::consts::PI * d.value * d.standard_uncertainty.unwrap_or(0.0));
        effects.push(Effect {
            throat_area: area_u.sum::<f64>() / given.len() as f64,
            ..Effect::of("throat diameter").shaped(stated(&before))
        });
    } else {
        findings.push(
            "no limits are given for a throat diameter: no uncertainty of characteristic velocity and thrust coefficient".into(),
        );
    }
    let growth = motor.throat_diameter_after_m.map_or(0.0, |after| (after.value / before.value).powi(2) - 1.0);
    if wear > 0.0 {
        findings.push(format!(
            "the throat changed by {:+.1} % in area: the mean is used, and when in the burn it changed counts as uncertain",
            100.0 * growth
        ));
        effects.push(Effect {
            throat_area: wear / 3f64.sqrt(),
            ..Effect::of("wear of the throat").shaped(Shape::Rectangular)
        });
    }
    Some(Throat { area_m2, known, growth })
}

/// Makes a figure of its key, value and unit, and whether its scale is known.
pub(super) type MakeFigure<'a> = dyn FnMut(&'static str, f64, &str, bool) -> Figure + 'a;

impl Pressure {
    /// Puts what the figures are made of into `a`.
    pub fn amounts(&self, a: &mut Effect, web_thickness_m: Option<f64>) {
        a.peak_pressure = self.peak_pa;
        a.pressure_action = self.action_integral_pa_s;
        a.pressure_total = self.total_integral_pa_s;
        a.throat_area = self.throat_area_m2.unwrap_or(0.0);
        a.web_time = self.web_s.unwrap_or(0.0);
        a.web_thickness = web_thickness_m.unwrap_or(0.0);
    }

    /// Puts the figures made of the amounts `a` into `q`. `mass`: propellant in kg, and whether its error is known.
    pub fn figures(
        &self,
        q: &mut Quantities,
        a: &Effect,
        mass: Option<(f64, bool)>,
        thrust_known: bool,
        figure: &mut MakeFigure<'_>,
    ) {
        q.peak_pressure = Some(figure("peak_pressure", a.peak_pressure, "Pa", self.known));
        q.mean_pressure = Some(figure("mean_pressure", a.pressure_action / a.action_time, "Pa", self.known));
        if let (Some(area), Some((kg, known))) = (self.throat_area_m2, mass) {
            let c = pressure::characteristic_velocity(area, a.pressure_total, kg);
            let all_known = self.known && self.throat_known && known;
            q.characteristic_velocity = Some(figure("characteristic_velocity", c, "m/s", all_known));
        }
        // With both cut off, nothing is known of their quotient.
        if let Some(area) = self.throat_area_m2.filter(|_| !(self.clipped && self.thrust_clipped)) {
            let c = pressure::thrust_coefficient(a.action_impulse, area, a.pressure_action);
            let all_known = self.known && self.throat_known && thrust_known;
            q.thrust_coefficient = Some(figure("thrust_coefficient", c, "1", all_known));
        }
        if let (true, Some(time)) = (a.web_thickness > 0.0, self.web_s) {
            q.burn_rate = Some(figure("burn_rate", a.web_thickness / time, "m/s", self.web_known));
        }
        let bound = |figure: &mut Option<Figure>, side: &str| {
            if let Some(figure) = figure {
                figure.bound = Some(side.to_string());
            }
        };
        if self.clipped {
            bound(&mut q.peak_pressure, "lower");
            bound(&mut q.mean_pressure, "lower");
            bound(&mut q.characteristic_velocity, "lower");
            bound(&mut q.thrust_coefficient, "upper");
        } else if self.thrust_clipped {
            bound(&mut q.thrust_coefficient, "lower");
        }
    }
}

fn web(time_s: &[f64], above_pa: &[f64], wanted: bool, findings: &mut Vec<String>) -> Option<WebTime> {
    if !wanted {
        return None;
    }
    let web = pressure::web_time(time_s, above_pa);
    match &web {
        Some(web) => findings.push(format!(
            "web burning time {:.3} s: from 10 % of the highest pressure to the aft-tangent bisector, on axes scaled by the time from 10 % to 10 % and by the highest pressure; the tangents meet {:.3} s later",
            web.end_s - web.start_s,
            web.knee_s - web.end_s
        )),
        None => findings.push("no knee in the pressure's tail-off: no burn rate".into()),
    }
    web
}
