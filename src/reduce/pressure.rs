//! The chamber-pressure channel.

use super::curve::Curve;
use super::figures::Ends;
use super::zero::Zero;
use super::{Record, force};
use crate::condition::{clipping, conditioned};
use crate::firing::{Figure, Quantities};
use crate::measure::integral;
use crate::measure::pressure::{self, WebTime};
use crate::problem::Problem;
use crate::run::{PressureReference, Role};
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::effects::Effect;

/// Mean air pressure at sea level, Pa, and how it falls with height in the troposphere (ISO 2533:1975, standard atmosphere; from
/// memory).
const SEA_LEVEL_PA: f64 = 101_325.0;
const LAPSE_PER_M: f64 = 2.255_77e-5;
const LAPSE_EXPONENT: f64 = 5.255_88;
/// How far the weather may take the air pressure from that, limits, Pa (common practice, no source).
const WEATHER_PA: f64 = 3000.0;
/// A change of thrust over pressure between the halves of the burn from which on it is worth a look.
const STEADY: f64 = 0.03;

/// The pressure of one firing.
pub(super) struct Pressure {
    /// Absolute, Pa, at the samples of the zero's window, conditioned.
    pub curve_pa: Vec<f64>,
    pub peak_pa: f64,
    pub action_integral_pa_s: f64,
    /// Over the burn time, raised by the share of the impulse outside it.
    pub total_integral_pa_s: f64,
    pub throat_area_m2: Option<f64>,
    pub web_s: Option<f64>,
    pub effects: Vec<Effect>,
    /// The scale of the channel has a stated error.
    pub known: bool,
    pub clipped: bool,
    pub findings: Vec<String>,
}

/// Air pressure outside the motor, Pa, half its limits' width, and where it came from.
fn outside(record: &Record<'_>) -> (f64, f64, String) {
    let run = &record.inputs.run;
    if let Some(stated) = run.conditions.get("air_pressure") {
        let get = |key: &str| stated.get(key).and_then(serde_json::Value::as_f64);
        if let Some(value) = get("value") {
            // A barometer read to a hectopascal.
            let limits = get("standard_uncertainty").map_or(100.0, |u| u * 3f64.sqrt());
            return (value, limits, "air pressure as stated under [conditions]".into());
        }
    }
    let height = run.site.height_m.map_or(0.0, |h| h.value);
    let value = SEA_LEVEL_PA * (1.0 - LAPSE_PER_M * height).powf(LAPSE_EXPONENT);
    let words = format!(
        "no air_pressure under [conditions]: {:.0} hPa ± {:.0} hPa taken from the standard atmosphere at {height:.0} m",
        value / 100.0,
        WEATHER_PA / 100.0
    );
    (value, WEATHER_PA, words)
}

/// What the figures need to know of thrust.
pub(super) struct Thrust<'a> {
    pub curve: &'a Curve,
    pub burn: &'a Ends,
    pub action: &'a Ends,
    /// Total impulse over burn impulse.
    pub beyond_burn: f64,
}

/// Reads the pressure channel, where there is one.
///
/// # Errors
/// More than one pressure channel; a column that is not there; readings that the calibration cannot invert.
pub(super) fn measure(record: &Record<'_>, zero: &Zero, thrust: &Thrust<'_>) -> Result<Option<Pressure>, Problem> {
    let run = &record.inputs.run;
    let mut channels =
        run.channels.iter().zip(&record.inputs.calibrations).filter(|(spec, _)| spec.role == Role::Pressure);
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
        return Err(in_run(Problem::new("the pressure channel has no calibration and no unit of pressure")));
    };
    let column = force::column(record.inputs, &spec.column)?;
    let mut findings = Vec::new();
    let window = zero.window.clone();
    let time_s = &record.time_s[window.clone()];
    let mut reading_pa = Vec::with_capacity(time_s.len());
    for value in &column.values[window.clone()] {
        reading_pa.push(calibration.force_n(*value).map_err(|p| p.in_file(&run.log.file))?);
    }
    let quiet = ..zero.burst.start.saturating_sub(window.start).max(2).min(reading_pa.len());
    let rest = &reading_pa[quiet];
    let n = rest.len().max(1) as f64;
    let level = rest.iter().sum::<f64>() / n;
    let noise = (rest.iter().map(|p| (p - level).powi(2)).sum::<f64>() / (n - 1.0).max(1.0)).sqrt();
    let (outside_pa, outside_limits, words) = outside(record);
    // Pressure above the outside air, whatever the transducer counts from: its own zero is read before ignition.
    let shift = match spec.reference {
        Some(PressureReference::Absolute) => {
            let off = level - outside_pa;
            if off.abs() > outside_limits.max(3.0 * noise) {
                findings.push(format!(
                    "pressure before ignition reads {:.0} hPa, the air outside should have {:.0} hPa: zero of the transducer",
                    level / 100.0,
                    outside_pa / 100.0
                ));
            }
            outside_pa
        }
        _ => {
            findings.push(format!("{words}; added to the gauge pressure, whose zero is read before ignition"));
            level
        }
    };
    let absolute = spec.reference == Some(PressureReference::Absolute);
    let base_pa = if absolute { 0.0 } else { outside_pa };
    let above: Vec<f64> = reading_pa.iter().map(|p| p - shift).collect();
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
    let first = smooth.time_s.partition_point(|t| *t < burst_s[0]);
    let last = smooth.time_s.partition_point(|t| *t <= burst_s[1]).min(smooth.time_s.len());
    let Some(peak) = smooth.peak(first..last.max(first + 1), record.averaged_cells()) else { return Ok(None) };
    // To absolute: gauge above the air, absolute by its own scale.
    let lift = if absolute { shift } else { base_pa };
    let (from, to) = (thrust.action.start.time_s, thrust.action.end.time_s);
    let (burn_from, burn_to) = (thrust.burn.start.time_s, thrust.burn.end.time_s);
    let action_above = integral::between(time_s, &above, from, to);
    let burn_above = integral::between(time_s, &above, burn_from, burn_to);
    let action_integral_pa_s = action_above + lift * (to - from);
    let total_integral_pa_s = (burn_above + lift * (burn_to - burn_from)) * thrust.beyond_burn;

    let mut effects = Vec::new();
    let mut known = true;
    match &calibration.errors {
        Some(errors) => {
            for direction in errors {
                let error = |p: f64| calibration.force_error_n(direction, p);
                let at_rest = if absolute { 0.0 } else { error(level) };
                let change: Vec<f64> = reading_pa.iter().map(|p| error(*p) - at_rest).collect();
                effects.push(Effect {
                    peak_pressure: error(peak.thrust_n + shift) - at_rest,
                    pressure_action: integral::between(time_s, &change, from, to),
                    pressure_total: integral::between(time_s, &change, burn_from, burn_to) * thrust.beyond_burn,
                    ..Effect::of("pressure scale").shaped(match direction.shape {
                        crate::calibration::ErrorShape::Relative(_) => Shape::Rectangular,
                        _ => Shape::Normal,
                    })
                });
            }
        }
        None => known = false,
    }
    let level_everywhere = |source: &str, u: f64, shape: Shape| Effect {
        peak_pressure: u,
        pressure_action: u * (to - from),
        pressure_total: u * (burn_to - burn_from) * thrust.beyond_burn,
        ..Effect::of(source).shaped(shape)
    };
    if !absolute {
        effects.push(level_everywhere("air pressure", outside_limits / 3f64.sqrt(), Shape::Rectangular));
        effects.push(level_everywhere("zero of the pressure", noise / n.sqrt(), Shape::Normal));
    }
    let sums = |span: f64| noise * (span * record.interval_s()).sqrt();
    effects.push(Effect { peak_pressure: peak.noise_u_n, ..Effect::of("noise at the highest pressure") });
    effects.push(Effect {
        pressure_action: sums(to - from),
        pressure_total: sums(burn_to - burn_from),
        ..Effect::of("noise of the pressure")
    });
    // What burns outside the burn time is taken to flow as it pushes; how far that holds nobody measured.
    let outside_burn = (thrust.beyond_burn - 1.0).max(0.0) * total_integral_pa_s;
    effects.push(Effect {
        pressure_total: outside_burn / 3f64.sqrt(),
        ..Effect::of("pressure outside the burn time").shaped(Shape::Rectangular)
    });

    let motor = &run.motor;
    let throat_area_m2 = motor.throat_diameter_m.map(|d| {
        let (area, wear) = pressure::throat_area(d.value, motor.throat_diameter_after_m.map(|d| d.value));
        for diameter in [motor.throat_diameter_m, motor.throat_diameter_after_m].into_iter().flatten() {
            let share = if motor.throat_diameter_after_m.is_some() { 0.5 } else { 1.0 };
            if let Some(u) = diameter.standard_uncertainty {
                let shape = if diameter.limits.is_some() { Shape::Rectangular } else { Shape::Normal };
                effects.push(Effect {
                    throat_area: share * 0.5 * std::f64::consts::PI * diameter.value * u,
                    ..Effect::of("throat diameter").shaped(shape)
                });
            } else {
                findings.push("no limits are given for a throat diameter: its error is not counted".into());
            }
        }
        if wear > 0.0 {
            findings.push(format!(
                "the throat grew by {:.1} % in area: the mean is used, and when in the burn it grew counts as uncertain",
                100.0 * 2.0 * wear / (area - wear)
            ));
            effects.push(Effect { throat_area: wear / 3f64.sqrt(), ..Effect::of("wear of the throat").shaped(Shape::Rectangular) });
        }
        area
    });
    let web = web(&smooth, motor.web_thickness_m.is_some(), &mut findings);
    if let (Some(web), Some(thickness)) = (&web, motor.web_thickness_m) {
        // A knee as sharp as the tangents would have it, or as early before it as the bisector's cut.
        let u = (web.knee_s - web.end_s).abs().hypot(record.interval_s()) / 3f64.sqrt();
        effects.push(Effect { web_time: u, ..Effect::of("end of the web") });
        match thickness.standard_uncertainty {
            Some(u) => {
                effects.push(Effect { web_thickness: u, ..Effect::of("web thickness").shaped(Shape::Rectangular) })
            }
            None => findings.push("no limits are given for the web thickness: its error is not counted".into()),
        }
    }
    findings.extend(steadiness(record, zero, &above, from, to, throat_area_m2));
    let clipped = clipping::find_clipping(&column.values)
        .iter()
        .flat_map(|c| c.ranges.iter())
        .any(|r| r.start < record.burn.end && r.end > record.burn.start);
    if clipped {
        findings.push("the pressure is cut off at a limit during the burn: its figures are lower bounds".into());
    }
    let curve_pa = time_s.iter().map(|t| super::curve::at(&smooth.time_s, &smooth.thrust_n, *t) + lift).collect();
    Ok(Some(Pressure {
        curve_pa,
        peak_pa: peak.thrust_n + lift,
        action_integral_pa_s,
        total_integral_pa_s,
        throat_area_m2,
        web_s: web.map(|w| w.end_s - w.start_s),
        effects,
        known,
        clipped,
        findings,
    }))
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
            q.characteristic_velocity = Some(figure("characteristic_velocity", c, "m/s", self.known && known));
        }
        if let Some(area) = self.throat_area_m2 {
            let c = pressure::thrust_coefficient(a.action_impulse, area, a.pressure_action);
            q.thrust_coefficient = Some(figure("thrust_coefficient", c, "1", self.known && thrust_known));
        }
        if let (true, Some(time)) = (a.web_thickness > 0.0, self.web_s) {
            q.burn_rate = Some(figure("burn_rate", a.web_thickness / time, "m/s", true));
        }
        if self.clipped {
            for figure in
                [&mut q.peak_pressure, &mut q.mean_pressure, &mut q.characteristic_velocity].into_iter().flatten()
            {
                figure.bound = Some("lower".to_string());
            }
        }
    }
}

fn web(smooth: &conditioned::Conditioned, wanted: bool, findings: &mut Vec<String>) -> Option<WebTime> {
    if !wanted {
        return None;
    }
    let web = pressure::web_time(&smooth.time_s, &smooth.thrust_n);
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

/// Thrust over pressure in the first and the second half of the action time.
fn steadiness(
    record: &Record<'_>,
    zero: &Zero,
    above: &[f64],
    from: f64,
    to: f64,
    area: Option<f64>,
) -> Option<String> {
    let time_s = &record.time_s[zero.window.clone()];
    let middle = 0.5 * (from + to);
    let ratio =
        |a: f64, b: f64| integral::between(time_s, &zero.thrust_n, a, b) / integral::between(time_s, above, a, b);
    let (early, late) = (ratio(from, middle), ratio(middle, to));
    let change = late / early - 1.0;
    if !change.is_finite() {
        return None;
    }
    let words = if change.abs() < STEADY {
        "steady: nozzle and cell agree with the pressure through the burn".to_string()
    } else {
        "not steady: the throat wore, the nozzle went, or cell or transducer drifted".to_string()
    };
    let size = area.map_or(String::new(), |a| {
        format!(" ({:.3} and {:.3} of the throat area times gauge pressure)", early / a, late / a)
    });
    Some(format!(
        "thrust over pressure changes by {:+.1} % from the first to the second half of the action time{size}, {words}",
        100.0 * change
    ))
}
