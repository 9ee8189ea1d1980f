//! Figures, their uncertainty by trials, and the verdict.

use super::pressure_centre::{barrowman, side_centroid};
use super::rail::{self, Exit, Launch, Stays, Thrust};
use super::vehicle::Vehicle;
use super::{Assumed, Check, Fix, Preflight, RailFigures, Source, Stability, ThrustToWeight, atmosphere};
use crate::firing::{Figure, Status};
use crate::problem::Problem;
use crate::quantity::Measured;
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::monte_carlo::{self, propagate};

/// Trials behind intervals and probabilities; the seed makes them the same each time.
pub const TRIALS: usize = 20_000;
const SEED: u64 = 1_976;
/// Probability with which each limit must be met, one-sided.
pub const CONFIDENCE: f64 = 0.975;
/// Stability margin above which a vehicle turns far into the wind, calibres (common practice, no source).
pub const LARGE_MARGIN: f64 = 3.0;

/// All numbers of one vehicle on one curve.
#[derive(Debug, Clone, Default)]
struct Outcome {
    exit: Exit,
    thrust_to_weight: f64,
    cp_m: f64,
    cg_m: [f64; 3],
    margin: [f64; 3],
    smallest: f64,
}

/// Values of the inputs that have an error, in the order of `inputs`.
const NAMES: [&str; 14] = [
    "diameter",
    "airframe_mass",
    "airframe_cg",
    "cp",
    "hardware_mass",
    "hardware_cg",
    "propellant_cg",
    "propellant_mass",
    "rail length",
    "guide_spacing",
    "foot_clearance",
    "elevation_angle",
    "gravity",
    "temperature",
];

fn inputs(v: &Vehicle, cp_m: Measured, propellant: Measured) -> [Measured; 14] {
    [
        v.diameter_m,
        v.airframe_mass_kg,
        v.airframe_cg_m,
        cp_m,
        v.motor.hardware_mass_kg,
        v.motor.hardware_cg_m,
        v.motor.propellant_cg_m,
        propellant,
        v.rail.length_m,
        v.rail.guide_spacing_m,
        v.rail.foot_clearance_m,
        v.rail.elevation_rad,
        v.site.gravity_m_s2,
        v.site.temperature_k,
    ]
}

/// Margins in calibres, and centres of gravity, m: loaded, with `burned` of the propellant gone, and empty.
fn margins(x: &[f64; 14], burned: f64) -> ([f64; 3], [f64; 3]) {
    let [d, airframe, airframe_cg, cp, hardware, hardware_cg, propellant_cg, propellant, ..] = *x;
    let cg_m = [1.0, 1.0 - burned, 0.0].map(|left| {
        (airframe * airframe_cg + hardware * hardware_cg + left * propellant * propellant_cg)
            / (airframe + hardware + left * propellant)
    });
    (cg_m.map(|cg| (cp - cg) / d), cg_m)
}

fn outcome(v: &Vehicle, x: &[f64; 14], thrust: &Thrust, factor: f64) -> Result<Outcome, Stays> {
    let [d, airframe, _, cp, hardware, _, _, propellant, length, spacing, foot, elevation, g, temperature] = *x;
    let mass = airframe + hardware + propellant;
    let area = 0.25 * std::f64::consts::PI * d * d;
    let density = atmosphere::density_kg_m3(v.site.height_m, temperature);
    let launch = Launch {
        length_m: length - spacing - foot,
        elevation_rad: elevation,
        friction_coefficient: v.rail.friction_coefficient,
        gravity_m_s2: g,
        mass_kg: mass,
        propellant_kg: propellant,
        drag_kg_m: 0.5 * density * v.drag_coefficient.unwrap_or(0.0) * area,
        thrust_factor: factor,
    };
    let exit = rail::leave(thrust, &launch)?;
    let (margin, cg_m) = margins(x, exit.burned);
    Ok(Outcome {
        thrust_to_weight: exit.mean_thrust_n / (mass * g),
        cp_m: cp,
        cg_m,
        margin,
        // The centre of gravity moves one way as propellant goes: the ends are the extremes.
        smallest: margin[1].min(margin[2]),
        exit,
    })
}

fn refused(stays: Stays, thrust: &Thrust, v: &Vehicle, mass_kg: f64) -> Problem {
    match stays {
        Stays::NeverLifts => Problem::new(format!(
            "the motor never lifts: its thrust of {:.1} N at most does not exceed weight and friction of {mass_kg:.3} kg",
            thrust.peak_n()
        ))
        .expected("a thrust of several times the weight")
        .remedy("check the units of thrust and masses, and that the motor is the right one"),
        Stays::Falls => Problem::new(format!(
            "the motor is spent before the forward guide has gone the {:.2} m to the rail's end",
            v.rail.effective_length_m()
        ))
        .expected("thrust that lasts until the vehicle leaves the rail")
        .remedy("check the units of thrust and masses, and the rail"),
    }
}

/// Checks the vehicle with the thrust of the source.
///
/// # Errors
/// No propellant mass anywhere, a vehicle that does not leave its rail.
pub fn check(v: &Vehicle, source: &Source) -> Result<Preflight, Problem> {
    let propellant = match (source.propellant_kg, v.motor.propellant_mass_kg) {
        (Some(kg), _) | (None, Some(kg)) => kg,
        (None, None) => {
            return Err(Problem::new("the thrust source carries no propellant mass, and vehicle.toml gives none")
                .expected("the propellant's mass, which burns away and is part of the weight")
                .remedy("write propellant_mass = \"412 g\" under [motor] of vehicle.toml"));
        }
    };
    let mut findings = Vec::new();
    let (cp, cp_source) = centre_of_pressure(v, &mut findings)?;
    let list = inputs(v, cp, propellant);
    let values = list.map(|m| m.value);
    let mass_kg = values[1] + values[4] + values[7];
    let now = outcome(v, &values, &source.thrust, 1.0).map_err(|s| refused(s, &source.thrust, v, mass_kg))?;

    let exact: Vec<&str> =
        NAMES.iter().zip(&list).filter(|(_, m)| m.standard_uncertainty.is_none()).map(|(n, _)| *n).collect();
    if !exact.is_empty() {
        findings.push(format!("taken as exact, since no error is stated: {}", exact.join(", ")));
    }
    findings.push(format!("gravity {:.5} m/s²: {}", v.site.gravity_m_s2.value, v.site.gravity_source));
    findings.extend(v.defaults.iter().cloned());
    if v.drag_coefficient.is_none() {
        findings.push("no drag on the rail: no drag_coefficient is given".into());
    }
    let mut sources: Vec<monte_carlo::Source> = list.iter().map(|m| Shape::of_stated(m.limits).into()).collect();
    sources.push(Shape::Normal.into());
    let thrust_u = source.relative_u.unwrap_or(0.0);
    let trials = propagate(TRIALS, &sources, OUTPUTS, SEED, |z, out| {
        let mut x = values;
        for (k, m) in list.iter().enumerate() {
            x[k] += z[k] * m.standard_uncertainty.unwrap_or(0.0);
        }
        // A vehicle that stays on the rail has no speed and no thrust to weight; its margin is the worse one of full and empty.
        let found = outcome(v, &x, &source.thrust, 1.0 + z[14] * thrust_u).unwrap_or_else(|_| {
            let (margin, _) = margins(&x, 0.0);
            Outcome { margin, smallest: margin[0].min(margin[2]), ..Outcome::default() }
        });
        out.copy_from_slice(&[
            found.exit.speed_m_s,
            found.exit.time_s,
            found.exit.mean_thrust_n,
            found.thrust_to_weight,
            found.smallest,
            x[8] - x[9] - x[10],
        ]);
    });
    // Trials without the thrust's error say nothing of what depends on it.
    let known = |k: usize| source.relative_u.is_some() || !THRUST_OUTPUTS.contains(&k);
    let q = |k: usize, value: f64, unit: &str| {
        let found = figure(value, unit, &trials[k]);
        if known(k) { found } else { Figure { standard_uncertainty: None, interval_95: None, ..found } }
    };
    let rail = RailFigures {
        effective_length: q(5, v.rail.effective_length_m(), "m"),
        exit_speed: q(0, now.exit.speed_m_s, "m/s"),
        exit_time: q(1, now.exit.time_s, "s"),
        mean_thrust: q(2, now.exit.mean_thrust_n, "N"),
        held_s: now.exit.held_s,
        lowest_thrust_n: now.exit.lowest_thrust_n,
        simple_exit_speed_m_s: rail::simple_exit_speed_m_s(source.thrust.mean_n(), &nominal_launch(v, &values)),
    };
    let held = |id: &str, value: f64, unit: &str, limit: (f64, bool), k: usize| -> Check {
        let met = trials[k].iter().filter(|x| **x >= limit.0).count() as f64 / trials[k].len() as f64;
        Check {
            id: id.to_string(),
            value,
            unit: unit.to_string(),
            limit: limit.0,
            limit_source: if limit.1 { "vehicle.toml".into() } else { "common practice, no source".into() },
            interval_95: q(k, value, unit).interval_95,
            probability_met: known(k).then_some(met),
            status: if met >= CONFIDENCE && value >= limit.0 { Status::Pass } else { Status::Fail },
        }
    };
    let checks = vec![
        held("rail_exit_speed", now.exit.speed_m_s, "m/s", v.limits.rail_exit_speed_m_s, 0),
        held("thrust_to_weight", now.thrust_to_weight, "1", v.limits.thrust_to_weight, 3),
        held("stability_margin", now.smallest, "1", v.limits.stability_margin, 4),
    ];
    if now.margin.iter().any(|m| *m > LARGE_MARGIN) {
        findings.push(format!(
            "a stability margin of {:.1} calibres: above some 3 the vehicle turns far into the wind (common practice, no source)",
            now.margin.iter().copied().fold(f64::MIN, f64::max)
        ));
    }
    let side = v.shape.as_ref().zip(v.length_m).and_then(|(s, l)| side_centroid(s, l.value));
    if side.is_some_and(|x| x < now.cg_m[0]) {
        findings.push(
            "the centroid of the side outline lies ahead of the loaded centre of gravity: at large angles to the wind, as at low speed in a gust, the vehicle may not be stable"
                .into(),
        );
    }
    let mut qualifications = source.qualifications.clone();
    if source.relative_u.is_none() {
        qualifications.push("the thrust's error is not known: no interval and no probability for what depends on it, only the other errors are held against the limits".into());
    }
    let go = checks.iter().all(|c| c.status == Status::Pass);
    let fixes = if go { Vec::new() } else { fixes(v, &values, source, &now, &checks) };
    let weight_n = mass_kg * values[12];
    Ok(Preflight {
        schema: super::SCHEMA.to_string(),
        vehicle: v.name.clone(),
        thrust_source: source.description.clone(),
        verdict: if go { "go" } else { "no-go" }.to_string(),
        qualifications,
        checks,
        fixes,
        thrust_to_weight: ThrustToWeight {
            rail_average: now.thrust_to_weight,
            peak: source.thrust.peak_n() / weight_n,
            lowest_on_rail: now.exit.lowest_thrust_n / weight_n,
            definition: "time average of thrust from first motion to exit, over lift-off mass times gravity".into(),
        },
        lift_off_mass_kg: mass_kg,
        rail,
        stability: Stability {
            cp_m: now.cp_m,
            cp_source,
            cp_side_area_m: side,
            cg_loaded_m: now.cg_m[0],
            cg_at_exit_m: now.cg_m[1],
            cg_burnout_m: now.cg_m[2],
            margin_loaded: now.margin[0],
            margin_at_exit: now.margin[1],
            margin_burnout: now.margin[2],
            margin_minimum: now.smallest,
        },
        wind_angle_at_exit_deg: v.site.wind_m_s.map(|w| wind_angle_deg(w, now.exit.speed_m_s, values[11])),
        mean_of_group: source.mean.as_ref().and_then(|t| assumed(v, &values, t)),
        assumed: None,
        findings,
        cautions: super::CAUTIONS.iter().map(|c| (*c).to_string()).collect(),
        speed_along_rail: now.exit.course,
    })
}

/// Angle of attack as the guides let go, deg: of a level wind from behind, which is the worse side of an inclined rail.
///
/// # Formula
/// atan(w sin θ/(v − w cos θ))
pub fn wind_angle_deg(wind_m_s: f64, speed_m_s: f64, elevation_rad: f64) -> f64 {
    (wind_m_s * elevation_rad.sin()).atan2(speed_m_s - wind_m_s * elevation_rad.cos()).to_degrees()
}

const OUTPUTS: usize = 6;
/// Those that hang on the thrust: exit speed and time, mean thrust, thrust to weight. The margin hardly does.
const THRUST_OUTPUTS: [usize; 4] = [0, 1, 2, 3];

fn nominal_launch(v: &Vehicle, x: &[f64; 14]) -> Launch {
    Launch {
        length_m: x[8] - x[9] - x[10],
        elevation_rad: x[11],
        friction_coefficient: v.rail.friction_coefficient,
        gravity_m_s2: x[12],
        mass_kg: x[1] + x[4] + x[7],
        propellant_kg: x[7],
        drag_kg_m: 0.0,
        thrust_factor: 1.0,
    }
}

fn figure(value: f64, unit: &str, trials: &[f64]) -> Figure {
    let mut sorted = trials.to_vec();
    let spread = monte_carlo::spread(&mut sorted);
    Figure {
        value,
        unit: unit.to_string(),
        standard_uncertainty: spread.map(|s| s.standard_deviation),
        interval_95: spread.map(|s| s.symmetric_95),
        bound: None,
        source: None,
        estimate: None,
    }
}

fn centre_of_pressure(v: &Vehicle, findings: &mut Vec<String>) -> Result<(Measured, String), Problem> {
    if let Some(cp) = v.cp_m {
        return Ok((cp, "given".into()));
    }
    let Some(cp) = v.shape.as_ref().and_then(|s| barrowman(s, v.diameter_m.value)) else {
        return Err(Problem::new("no centre of pressure can be found from the shapes")
            .expected("a nose, and fins that hold it straight")
            .remedy("write cp = \"1.12 m\" under [vehicle], or [[fins]]"));
    };
    findings.push(
        "centre of pressure by Barrowman's equations (1967), for small angles and slow flight; their own error is not known and counts nowhere"
            .into(),
    );
    Ok((Measured::of(cp), "Barrowman".into()))
}

/// The same figures for another thrust, without trials.
pub fn assumed(v: &Vehicle, values: &[f64; 14], thrust: &Thrust) -> Option<Assumed> {
    let found = outcome(v, values, thrust, 1.0).ok()?;
    let weight_n = (values[1] + values[4] + values[7]) * values[12];
    Some(Assumed {
        exit_speed_m_s: found.exit.speed_m_s,
        exit_time_s: found.exit.time_s,
        mean_thrust_n: found.exit.mean_thrust_n,
        thrust_to_weight: found.exit.mean_thrust_n / weight_n,
        margin_minimum: found.smallest,
        speed_along_rail: found.exit.course,
    })
}

/// The same check for a constant thrust that someone assumed.
pub fn assume_constant(v: &Vehicle, source: &Source, thrust_n: f64) -> Option<Assumed> {
    let propellant = source.propellant_kg.or(v.motor.propellant_mass_kg)?;
    let cp = centre_of_pressure(v, &mut Vec::new()).ok()?.0;
    let values = inputs(v, cp, propellant).map(|m| m.value);
    // Long enough to leave any rail; the propellant goes as the measured motor's does in the mean.
    let burn_s = source.thrust.total_impulse_n_s() / thrust_n.max(1e-9);
    assumed(v, &values, &Thrust::new(vec![0.0, burn_s.max(1e-6)], vec![thrust_n; 2]))
}

/// What would bring each limit that is not met within reach, each by itself.
fn fixes(v: &Vehicle, x: &[f64; 14], source: &Source, now: &Outcome, checks: &[Check]) -> Vec<Fix> {
    let mut found = Vec::new();
    for check in checks.iter().filter(|c| c.status == Status::Fail) {
        // The nominal value must exceed the limit by as much as the lower end of its interval lies below it.
        let slack = check.interval_95.map_or(0.0, |[low, _]| (check.value - low).max(0.0));
        // A tenth more, since what is changed has an error, too.
        let target = check.limit + 1.1 * slack;
        match check.id.as_str() {
            "rail_exit_speed" => {
                let speed = |extra: f64| {
                    let mut y = *x;
                    y[8] += extra;
                    outcome(v, &y, &source.thrust, 1.0).map_or(0.0, |o| o.exit.speed_m_s)
                };
                match (1..=400).map(|k| 0.05 * f64::from(k)).find(|extra| speed(*extra) >= target) {
                    Some(extra) => {
                        found.push(Fix { check: check.id.clone(), advice: format!("{extra:.2} m more rail") })
                    }
                    None => found.push(Fix {
                        check: check.id.clone(),
                        advice: "no rail up to 20 m more is long enough: a motor of more thrust, or less mass".into(),
                    }),
                }
            }
            "thrust_to_weight" => found.push(Fix {
                check: check.id.clone(),
                advice: format!(
                    "{:.0} N more thrust on the rail in the mean, or {:.3} kg less lift-off mass",
                    (target / check.value - 1.0).max(0.0) * now.exit.mean_thrust_n,
                    (1.0 - check.value / target).max(0.0) * (x[1] + x[4] + x[7])
                ),
            }),
            _ => {
                // Weight at the nose tip, worked out where the margin is smallest.
                let at_exit = now.margin[1] <= now.margin[2];
                let left = if at_exit { 1.0 - now.exit.burned } else { 0.0 };
                let (mass, cg) = (x[1] + x[4] + left * x[7], now.cg_m[if at_exit { 1 } else { 2 }]);
                let wanted = now.cp_m - target * x[0];
                let advice = if wanted > 0.0 {
                    format!(
                        "{:.3} kg at the nose tip, or fins that move the centre of pressure {:.0} mm back",
                        mass * (cg / wanted - 1.0).max(0.0),
                        1e3 * (target - check.value) * x[0]
                    )
                } else {
                    "larger fins: no weight in the nose is enough".to_string()
                };
                found.push(Fix { check: check.id.clone(), advice });
            }
        }
    }
    found
}
