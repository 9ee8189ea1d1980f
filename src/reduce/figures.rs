//! Every figure of the firing with its uncertainty.

use super::curve::{self, Curve};
use super::sources::Work;
use super::zero::Zero;
use super::{Record, clipped, force, pressure};
use crate::burn::crossings::{self, Crossing};
use crate::firing::{BudgetLine, BurnTimes, Figure, MotorClass, Quantities};
use crate::measure::{class, integral};
use crate::problem::Problem;
use crate::quantity::STANDARD_GRAVITY_M_S2;
use crate::run::Role;
use crate::uncertainty::effects::{self, Acts, Budgets, DRAWN, Found, Propagated};
use crate::uncertainty::improvement::{self, two_digits};
use crate::uncertainty::monte_carlo::{self, Spread};
use rayon::prelude::*;
use std::collections::BTreeMap;

/// Burn time runs between crossings of this share of peak thrust (as NFPA 1125 tests do; read second-hand, see
/// tests/reference/item05).
pub const BURN_LEVEL: f64 = 0.05;
/// Action time between crossings of this share (Sutton and Biblarz, Rocket Propulsion Elements; from memory).
pub const ACTION_LEVEL: f64 = 0.10;
/// Rise time runs from the action level up to this share of peak.
pub(super) const RISEN_LEVEL: f64 = 0.90;
/// Initial thrust is the mean over the first part of the burn, s (common practice, no source).
const INITIAL_S: f64 = 0.5;
/// Limits of the logger's clock where run.toml states none: a plain crystal with its temperature (from memory).
pub const CRYSTAL_CLOCK: f64 = 1e-4;
/// Thrust counts as measurable down to this share of peak where the noise allows.
const MEASURABLE: f64 = 0.002;

/// Error of the smoothed curve against the standard error that noise alone leaves in it; by simulated firings.
pub(super) const SMOOTHING_BIAS: f64 = 4.0;
/// Standard uncertainty of the foot of a fast rise or fall in sample intervals, and the share of peak per interval from which
/// on it counts in full; by simulated firings.
pub(super) const EDGE_SHARE: f64 = 0.15;
pub(super) const STEEP_SHARE: f64 = 0.2;

/// All that is read from the curve.
pub struct Figures {
    pub quantities: Quantities,
    pub times: BurnTimes,
    pub class: Option<MotorClass>,
    pub budget: BTreeMap<String, Vec<BudgetLine>>,
    pub findings: Vec<String>,
    pub total_impulse: f64,
    pub peak_n: f64,
    pub scale_known: bool,
    /// Standard uncertainty of scale relative to force, of the zero in N, and of the conditioned curve in N.
    relative_u: f64,
    zero_u_n: f64,
    noise_u_n: f64,
    /// Absolute chamber pressure at the samples of the zero's window, Pa.
    pub pressure_pa: Option<Vec<f64>>,
    /// Mass that the weight shift speaks for, where it was the source.
    pub mass_from_shift: bool,
}

impl Figures {
    /// Standard uncertainty of a thrust value, N.
    pub fn thrust_u_n(&self, _time_s: f64, thrust_n: f64) -> f64 {
        ((self.relative_u * thrust_n).powi(2) + self.zero_u_n.powi(2) + self.noise_u_n.powi(2)).sqrt()
    }
}

/// Crossings of one level at both ends of the burn, and where they came from.
pub(super) struct Ends {
    pub start: Crossing,
    pub end: Crossing,
    pub start_missing: bool,
    pub end_extrapolated: bool,
    pub end_missing: bool,
}

fn ends(curve: &Curve, level_n: f64, override_s: [Option<f64>; 2]) -> Ends {
    let (t, f) = (&curve.time_s, &curve.thrust_n);
    let from = t.partition_point(|x| *x < curve.burst_s[0] - 0.25).saturating_sub(1);
    let to = (t.partition_point(|x| *x <= curve.burst_s[1]) + 2).min(t.len());
    let (t, f) = (&t[from..to], &f[from..to]);
    let exact = |time_s: f64| Crossing { time_s, sampling_half_width_s: 0.0, slope: f64::INFINITY };
    let (mut start_missing, mut end_extrapolated, mut end_missing) = (false, false, false);
    let share = level_n / curve.peak.thrust_n;
    let mut start = crossings::first_up(t, f, level_n).unwrap_or_else(|| {
        start_missing = true;
        exact(t[0])
    });
    let mut end = crossings::last_down(t, f, level_n).unwrap_or_else(|| {
        let last = t[t.len() - 1];
        match &curve.tail {
            Some(tail) => {
                end_extrapolated = true;
                let beyond = tail.time_to(level_n);
                // How far an extrapolated instant may be off: as far as the impulse beyond the record, relatively.
                let share = tail.impulse_u / tail.impulse.max(f64::MIN_POSITIVE);
                Crossing {
                    time_s: last + beyond,
                    sampling_half_width_s: beyond * share * 3f64.sqrt(),
                    slope: level_n / tail.time_constant_s,
                }
            }
            None => {
                end_missing = true;
                exact(last)
            }
        }
    });
    if let Some(edge) = &curve.rise {
        let (time_s, half) = curve::edge_time(curve, edge, share);
        start = Crossing { time_s, sampling_half_width_s: half, slope: start.slope };
    }
    if let Some(edge) = &curve.fall {
        let (time_s, half) = curve::edge_time(curve, edge, share);
        end = Crossing { time_s, sampling_half_width_s: half, slope: end.slope };
    }
    if let Some(s) = override_s[0] {
        (start, start_missing) = (exact(s), false);
    }
    if let Some(s) = override_s[1] {
        (end, end_missing, end_extrapolated) = (exact(s), false, false);
    }
    Ends { start, end, start_missing, end_extrapolated, end_missing }
}

/// First and last measurable thrust: where the curve leaves and meets what noise leaves in it.
fn thrust_limits(curve: &Curve, ends: &Ends) -> (f64, f64) {
    let (t, f) = (&curve.time_s, &curve.thrust_n);
    let errors = &curve.conditioned.standard_error_n;
    let settled = {
        let mut e = errors.clone();
        let k = e.len() / 4;
        *e.select_nth_unstable_by(k, f64::total_cmp).1
    };
    let level = (3.0 * settled).clamp(MEASURABLE * curve.peak.thrust_n, 0.8 * BURN_LEVEL * curve.peak.thrust_n);
    let mut i = t.partition_point(|x| *x < ends.start.time_s).min(t.len() - 1);
    while i > 0 && f[i] > level {
        i -= 1;
    }
    let mut k = t.partition_point(|x| *x <= ends.end.time_s).saturating_sub(1);
    while k + 1 < t.len() && f[k] > level {
        k += 1;
    }
    let mut start = t[i].min(ends.start.time_s);
    if let Some(edge) = &curve.rise {
        start = curve::edge_time(curve, edge, 0.0).0;
    }
    let end = match &curve.tail {
        // Down to what the record's own noise would still show.
        Some(tail) => t[t.len() - 1] + tail.time_to(level).max(curve.conditioned.interval_s),
        None => match &curve.fall {
            Some(edge) => curve::edge_time(curve, edge, 0.0).0,
            None => t[k].max(ends.end.time_s),
        },
    };
    (start, end)
}

/// Reads every figure from the curve.
///
/// # Errors
/// What the pressure channel is refused for.
pub fn measure(record: &Record<'_>, zero: &Zero, curve: &Curve) -> Result<Figures, Problem> {
    let run = &record.inputs.run;
    let mut findings = Vec::new();
    let (t, f) = (&record.time_s[zero.window.clone()], &zero.thrust_n);
    let inside = zero.burst.start - zero.window.start..zero.burst.end - zero.window.start;
    let (bt, bf) = (&t[inside.clone()], &f[inside.clone()]);

    let peak_n = curve.peak.thrust_n;
    let burn = ends(curve, BURN_LEVEL * peak_n, [run.reduction.burn_start_s, run.reduction.burn_end_s]);
    let action = ends(curve, ACTION_LEVEL * peak_n, [None, None]);
    let (thrust_start_s, thrust_end_s) = thrust_limits(curve, &burn);
    let (start_s, end_s) = (burn.start.time_s, burn.end.time_s);
    let times = BurnTimes {
        thrust_start_s: thrust_start_s.min(start_s),
        start_s,
        end_s,
        thrust_end_s: thrust_end_s.max(end_s),
    };

    if burn.start_missing {
        findings.push("the record starts inside the burn: burn time runs from its first sample".to_string());
    }
    if burn.end_extrapolated {
        findings
            .push("the record ends above 5 % of peak: the end of the burn lies on the extrapolated tail".to_string());
    }
    if burn.end_missing {
        findings.push(
            "the record ends above 5 % of peak and no tail can be told: burn time runs to its last sample".to_string(),
        );
    }
    let tail_impulse = curve.tail.map_or(0.0, |tail| tail.impulse);
    let total_impulse = integral::trapezoid(bt, bf) + tail_impulse;
    let last_s = bt[bt.len() - 1];
    let beyond = curve.tail.map_or(0.0, |tail| {
        if end_s > last_s { tail.impulse - tail.thrust_at(end_s - last_s) * tail.time_constant_s } else { 0.0 }
    });
    // Edges that a converter's averaging hides are drawn in the curve; between them the samples themselves are summed.
    let of_curve = |from_s: f64, to_s: f64| integral::between(&curve.time_s, &curve.thrust_n, from_s, to_s);
    let burn_impulse = if curve.rise.is_some() || curve.fall.is_some() {
        of_curve(start_s, end_s)
    } else if curve.stand_u.is_some() {
        // A stand in full swing where the interval begins holds momentum back: readings tell the whole impulse, the curve what of it
        // lies outside.
        integral::trapezoid(bt, bf) - of_curve(bt[0], start_s) - of_curve(end_s.min(last_s), last_s)
    } else {
        integral::between(bt, bf, start_s, end_s)
    } + beyond;
    let burn_time = end_s - start_s;
    let action_time = action.end.time_s - action.start.time_s;
    let initial_s = INITIAL_S.min(burn_time);
    let initial = integral::between(&curve.time_s, &curve.thrust_n, start_s, start_s + initial_s) / initial_s;
    let risen = {
        let from = curve.time_s.partition_point(|x| *x < curve.burst_s[0] - 0.25).saturating_sub(1);
        crossings::first_up(&curve.time_s[from..], &curve.thrust_n[from..], RISEN_LEVEL * peak_n)
    };
    let rise_time = risen.filter(|r| r.time_s > action.start.time_s).map(|r| r.time_s - action.start.time_s);
    let delay = ignition(record).map(|(at, u)| (burn.start.time_s - at, u));

    let mass = propellant_mass(record, zero, &mut findings);
    let work = Work {
        record,
        zero,
        curve,
        bt,
        bf,
        burn: &burn,
        action: &action,
        total_impulse,
        burn_impulse,
        burn_time,
        action_time,
        initial,
        initial_s,
        rise_time,
        delay: delay.map(|d| d.0),
    };
    let (mut effects, scale_known) = work.effects(delay.map(|d| d.1), mass.as_ref().map(|m| m.1));
    let pressure = pressure::measure(
        record,
        zero,
        &pressure::Thrust {
            curve,
            burn: &burn,
            action: &action,
            total_impulse,
            beyond_burn: total_impulse / burn_impulse,
        },
        &mut findings,
    )?;
    if let Some(pressure) = &pressure {
        effects.extend(pressure.effects.iter().cloned());
        // The same ends of the action time bound both integrals.
        for effect in effects.iter_mut().filter(|e| e.action_time != 0.0 && e.acts == Acts::Adds) {
            let edge = curve::at(&record.time_s[zero.window.clone()], &pressure.curve_pa, action.end.time_s);
            effect.pressure_action += edge * effect.action_time;
            // So do those of the burn time.
            let edge = curve::at(&record.time_s[zero.window.clone()], &pressure.curve_pa, end_s);
            effect.pressure_total += edge * effect.burn_time;
        }
    }
    effects.retain(|e| !e.is_nil());
    let relative_u =
        Propagated::collect(&effects.iter().filter(|e| is_scale(&e.source)).cloned().collect::<Vec<_>>(), |e| {
            e.peak_thrust
        })
        .standard_uncertainty()
            / peak_n;

    let mut found = Found {
        amounts: work.found(mass.as_ref().map(|m| m.0)),
        mass_from_force: mass.as_ref().is_some_and(|m| m.2.is_some()),
    };
    if let Some(pressure) = &pressure {
        pressure.amounts(&mut found.amounts, run.motor.web_thickness_m.map(|w| w.value));
    }
    let first_order: BTreeMap<&str, Propagated> =
        DRAWN.into_iter().zip(effects::first_order(&found, &effects)).collect();
    let mut b = Budgets::default();
    let mut fig = |name: &'static str, value: f64, unit: &str, known: bool| -> Figure {
        let nothing = Propagated::collect(&[], |_| 0.0);
        b.figure(name, value, unit, first_order.get(name).unwrap_or(&nothing), known)
    };
    let k = scale_known;
    let average = burn_impulse / burn_time;
    let mut q = Quantities {
        total_impulse: Some(fig("total_impulse", total_impulse, "N.s", k)),
        burn_impulse: Some(fig("burn_impulse", burn_impulse, "N.s", k)),
        burn_time: Some(fig("burn_time", burn_time, "s", true)),
        action_time: Some(fig("action_time", action_time, "s", true)),
        average_thrust: Some(fig("average_thrust", average, "N", k)),
        peak_thrust: Some(fig("peak_thrust", peak_n, "N", k)),
        initial_thrust: Some(fig("initial_thrust", initial, "N", k)),
        rise_time: rise_time.map(|v| fig("rise_time", v, "s", true)),
        ignition_delay: delay.map(|(v, _)| fig("ignition_delay", v, "s", true)),
        extrapolated_impulse: curve.tail.map(|tail| fig("extrapolated_impulse", tail.impulse, "N.s", k)),
        ..Quantities::default()
    };
    if let Some((kg, u_kg, source)) = &mass {
        let known = u_kg.is_some() && (source.is_none() || k);
        let figure = fig("propellant_mass", *kg, "kg", known);
        let ve = total_impulse / kg;
        let known = k && u_kg.is_some();
        q.specific_impulse = Some(fig("specific_impulse", ve / STANDARD_GRAVITY_M_S2, "s", known));
        q.effective_exhaust_velocity = Some(fig("effective_exhaust_velocity", ve, "m/s", known));
        q.propellant_mass = Some(Figure { source: source.clone(), ..figure });
    }
    if let Some(pressure) = &pressure {
        let mass = mass.as_ref().map(|(kg, u_kg, _)| (*kg, u_kg.is_some()));
        pressure.figures(&mut q, &found.amounts, mass, k, &mut fig);
    }
    if let (Some(before), Some(after)) = (run.motor.mass_before_kg, run.motor.mass_after_kg) {
        let known = before.standard_uncertainty.is_some() && after.standard_uncertainty.is_some();
        q.expelled_mass = Some(fig("expelled_mass", before.value - after.value, "kg", known));
    }
    if !clipped_in_burn(record).is_empty() {
        for figure in [
            &mut q.total_impulse,
            &mut q.burn_impulse,
            &mut q.average_thrust,
            &mut q.peak_thrust,
            &mut q.specific_impulse,
            &mut q.effective_exhaust_velocity,
        ]
        .into_iter()
        .flatten()
        {
            figure.bound = Some("lower".to_string());
        }
    }
    let trials = effects::trials(&found, &effects, monte_carlo::TRIALS);
    let impulse_known = q.total_impulse.as_ref().is_some_and(|f| f.standard_uncertainty.is_some());
    let impulse_trials = trials.first().filter(|_| impulse_known).cloned();
    draw_intervals(&mut q, &first_order, trials, &mut findings);
    for (key, budget) in &mut b.0 {
        if let Some((figure, [low, high])) = q.by_key_mut(key).and_then(|f| Some((&*f, f.interval_95?))) {
            improvement::suggest(budget, 0.5 * (high - low), &figure.unit);
        }
    }
    clipped::estimate(record, zero, curve, pressure.as_ref(), &mut q, &mut findings);
    let zero_u_n = [zero.baseline.before, zero.baseline.after]
        .iter()
        .flatten()
        .map(|q| q.level_u)
        .fold(0.0, f64::max)
        .hypot(zero.drift_u_n);
    Ok(Figures {
        pressure_pa: pressure.map(|p| p.curve_pa),
        class: class::classify(total_impulse, impulse_trials.as_deref(), average),
        quantities: q,
        times,
        budget: b.0,
        findings,
        total_impulse,
        peak_n,
        scale_known,
        relative_u,
        zero_u_n,
        noise_u_n: curve.peak.noise_u_n,
        mass_from_shift: found.mass_from_force,
    })
}

/// Puts the trials' shortest 95 % intervals in the place of the first-order ones, and says where the two ways differ by more than
/// the numerical tolerance of one digit (JCGM 101:2008 8.1).
fn draw_intervals(
    q: &mut Quantities,
    first_order: &BTreeMap<&str, Propagated>,
    trials: Vec<Vec<f64>>,
    findings: &mut Vec<String>,
) {
    let spreads: Vec<Option<Spread>> =
        trials.into_par_iter().map(|mut drawn| monte_carlo::spread(&mut drawn)).collect();
    let mut differ = Vec::new();
    for (key, spread) in DRAWN.iter().zip(spreads) {
        let Some(figure) = q.by_key_mut(key) else { continue };
        let (Some(propagated), Some([low, high])) = (first_order.get(key), figure.interval_95) else { continue };
        let words = key.replace('_', " ");
        let Some(spread) = spread else {
            findings.push(format!("{words}: some trials gave no number, so its interval is the first-order one"));
            continue;
        };
        let [drawn_low, drawn_high] = spread.shortest_95;
        figure.interval_95 = Some(spread.shortest_95);
        if (drawn_low - low).abs().max((drawn_high - high).abs()) > propagated.combined.numerical_tolerance() {
            let half = |low: f64, high: f64| two_digits(0.5 * (high - low));
            differ.push(format!("{words} ± {} not ± {}", half(drawn_low, drawn_high), half(low, high)));
        }
    }
    if !differ.is_empty() {
        findings.push(format!(
            "95 % intervals are those of Monte Carlo; they differ from first-order ones with normal errors by more than one digit's \
             tolerance (JCGM 101:2008 8.1), since some errors have limits and no tails, or few readings behind them: {} (SI units)",
            differ.join(", ")
        ));
    }
}

/// Stretches of clipped samples that touch the burst.
pub fn clipped_in_burn(record: &Record<'_>) -> Vec<std::ops::Range<usize>> {
    record.clipped.iter().filter(|r| r.start < record.burn.end && r.end > record.burn.start).cloned().collect()
}

const SCALE_SOURCES: [&str; 7] = [
    "calibration fit",
    "weights",
    "gravity",
    "air buoyancy",
    "beyond the heaviest weight",
    "stated accuracy",
    "force ratio",
];

fn is_scale(source: &str) -> bool {
    SCALE_SOURCES.contains(&source)
}

/// Instant of the ignition signal and its standard uncertainty, s.
fn ignition(record: &Record<'_>) -> Option<(f64, f64)> {
    let spec = record.inputs.run.channels.iter().find(|c| c.role == Role::Ignition)?;
    let values = &force::column(record.inputs, &spec.column).ok()?.values;
    let time_s = &record.inputs.log.time_s;
    let (low, high) = values.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(*v), h.max(*v)));
    // The signal may rise or fall when the current flows; its level at the start of the record is the resting one.
    let (rest, middle) = (*values.first()?, (low + high) / 2.0);
    let i = values.iter().position(|v| (*v - middle) * (rest - middle) <= 0.0)?;
    let k = i.checked_sub(1)?;
    // A digital signal changes somewhere between two samples.
    Some(((time_s[k] + time_s[i]) / 2.0, (time_s[i] - time_s[k]) / 12f64.sqrt()))
}

/// Propellant mass in kg, its standard uncertainty, and its source where it was not weighed.
fn propellant_mass(
    record: &Record<'_>,
    zero: &Zero,
    findings: &mut Vec<String>,
) -> Option<(f64, Option<f64>, Option<String>)> {
    if let Some(mass) = record.inputs.run.motor.propellant_mass_kg {
        return Some((mass.value, mass.standard_uncertainty, None));
    }
    let (kg, u) = zero.shift_mass_kg?;
    findings.push(format!(
        "propellant mass {kg:.4} kg from the weight that left the stand: not independent of the cell, and drift of the zero counts as mass"
    ));
    Some((kg, Some(u), Some("weight shift".to_string())))
}
