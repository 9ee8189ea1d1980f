//! The degree of the response: no higher than the readings demand and the weights can tell.

use super::fit::{self, Fit, monotonic_within, value};
use super::noise::noise_variance;
use super::weights::levels;
use crate::uncertainty::statistics::{f_upper_tail, t_two_sided};

/// A higher degree must be this improbable as chance.
const STRICT_LEVEL: f64 = 0.001;
/// Curvature less improbable than this as chance, but not adopted, is suspected: it counts as an error of the curve.
const SUSPECT_LEVEL: f64 = 0.05;
const HIGHEST: usize = 3;

/// The fit chosen, and why.
#[derive(Debug, Clone)]
pub(super) struct Choice {
    pub degree: usize,
    pub fit: Fit,
    pub reason: String,
    /// Curvature suspected but not adopted: what it would add to the coefficients of the force in newtons.
    pub suspected: Option<Vec<f64>>,
}

/// Points to fit: forces and readings, and what one standard uncertainty of each independent error of the weights does
/// to the forces, N (rectangular limits are √3 times as far; empty: no tolerance stated).
#[derive(Debug, Clone, Copy)]
pub(super) struct Evidence<'a> {
    pub forces_n: &'a [f64],
    pub readings: &'a [f64],
    pub weight_errors: &'a [Vec<f64>],
}

/// The lowest degree the points do not speak against.
///
/// A further degree must pass both tests. First: the sum of squares it takes away, by the F test at 0.1 %; without a
/// stated tolerance the means of each load are tested, since the same weight errs alike each time it hangs. Second:
/// its largest departure from the lower curve must exceed what the weights could make with every error at its limit, in
/// the worst combination (the weights' forces perturbed, both curves fitted again), by more than the scatter of the
/// readings makes at the same level: weights and scatter together could pass where neither does alone.
pub(super) fn choose(evidence: Evidence<'_>) -> Option<Choice> {
    let (distinct, _) = levels(evidence.forces_n);
    let highest = HIGHEST.min(distinct.len().saturating_sub(2));
    let mut chosen = 1;
    let mut current = fit::fit(evidence.forces_n, evidence.readings, 1)?;
    let mut reason = if highest < 2 {
        format!("a straight line: {} distinct loads are too few to look for curvature", distinct.len())
    } else {
        "a straight line: no higher degree fits better than chance allows".to_string()
    };
    let mut suspected = None;
    let by_means_chance = |from, to| chance(evidence, true, from, to);
    for degree in 2..=highest {
        let Some(better) = fit::fit(evidence.forces_n, evidence.readings, degree) else { continue };
        let Some(chance) = chance(evidence, evidence.weight_errors.is_empty(), chosen, degree) else { continue };
        // the means again: the same weight hung twice must not make suspicion certain
        if by_means_chance(chosen, degree).is_some_and(|chance| chance < SUSPECT_LEVEL) {
            suspected = Some(added(&current, &better));
        }
        if chance >= STRICT_LEVEL {
            continue;
        }
        let departure = departures(&current, &better, &distinct);
        let made = weights_could_make(evidence, chosen, degree, &distinct)?;
        let noise = departure_noise(&current, &better, evidence, &distinct);
        let (largest, bound) = largest_with_bound(&departure, &made, &noise);
        let span = (value(&current.coefficients(), distinct[distinct.len() - 1])
            - value(&current.coefficients(), distinct[0]))
        .abs();
        let percent = |reading: f64| 100.0 * reading / span;
        if largest <= bound {
            reason = format!(
                "degree {chosen}: degree {degree} would bend the curve by {:.4} % of span, and the weights' \
                 tolerance with the scatter of the readings could make {:.4} %",
                percent(largest),
                percent(bound)
            );
            continue;
        }
        let (low, high) = (distinct[0], distinct[distinct.len() - 1]);
        if !monotonic_within(&better.coefficients(), low, high) {
            reason = format!("degree {chosen}: degree {degree} would turn over within the calibrated range");
            continue;
        }
        reason = format!(
            "degree {degree}: it bends by {:.4} % of span from degree {chosen}, which chance makes with probability \
             {chance:.1e} and the weights' tolerance \
             with the scatter of the readings could make {:.4} %",
            percent(largest),
            percent(bound)
        );
        chosen = degree;
        current = better;
        suspected = None;
    }
    Some(Choice { degree: chosen, fit: current, reason, suspected })
}

/// Probability that the drop in the sum of squares is chance.
fn chance(evidence: Evidence<'_>, by_means: bool, from: usize, to: usize) -> Option<f64> {
    let means;
    let (forces, readings) = if by_means {
        means = level_means(evidence.forces_n, evidence.readings);
        (means.0.as_slice(), means.1.as_slice())
    } else {
        (evidence.forces_n, evidence.readings)
    };
    let lower = fit::fit(forces, readings, from)?;
    let higher = fit::fit(forces, readings, to)?;
    if higher.dof == 0 {
        return None;
    }
    let added = (to - from) as f64;
    // readings carry about sixteen digits: below that the residual is rounding
    let rounding = readings.iter().map(|reading| (reading * f64::EPSILON * 4.0).powi(2)).sum::<f64>();
    if lower.rss <= rounding {
        return Some(1.0);
    }
    let statistic = (lower.rss - higher.rss) / added / (higher.rss.max(rounding) / higher.dof as f64);
    f_upper_tail(statistic, added, higher.dof as f64)
}

/// One point a load: the mean reading there.
fn level_means(forces_n: &[f64], readings: &[f64]) -> (Vec<f64>, Vec<f64>) {
    let (distinct, places) = levels(forces_n);
    let mut sums = vec![(0.0, 0usize); distinct.len()];
    for (place, reading) in places.iter().zip(readings) {
        sums[*place].0 += reading;
        sums[*place].1 += 1;
    }
    let means = sums.iter().map(|(sum, count)| sum / (*count).max(1) as f64).collect();
    (distinct, means)
}

/// Coefficients of the higher curve less those of the lower one.
fn added(lower: &Fit, higher: &Fit) -> Vec<f64> {
    let lower = lower.coefficients();
    let of_lower = |power: usize| lower.get(power).copied().unwrap_or(0.0);
    higher.coefficients().iter().enumerate().map(|(power, coefficient)| coefficient - of_lower(power)).collect()
}

fn departures(lower: &Fit, higher: &Fit, forces_n: &[f64]) -> Vec<f64> {
    let (lower, higher) = (lower.coefficients(), higher.coefficients());
    forces_n.iter().map(|force| value(&higher, *force) - value(&lower, *force)).collect()
}

/// Largest departure the weights could make at each load, every error at its limit in the worst combination.
fn weights_could_make(evidence: Evidence<'_>, from: usize, to: usize, distinct: &[f64]) -> Option<Vec<f64>> {
    let refit = |forces: &[f64]| {
        let lower = fit::fit(forces, evidence.readings, from)?;
        let higher = fit::fit(forces, evidence.readings, to)?;
        Some(departures(&lower, &higher, distinct))
    };
    let base = refit(evidence.forces_n)?;
    let mut sum = vec![0.0; distinct.len()];
    for error in evidence.weight_errors {
        let forces: Vec<f64> =
            evidence.forces_n.iter().zip(error).map(|(force, shift)| force + 3f64.sqrt() * shift).collect();
        let Some(moved) = refit(&forces) else { continue };
        for ((sum, moved), base) in sum.iter_mut().zip(&moved).zip(&base) {
            *sum += (moved - base).abs();
        }
    }
    Some(sum)
}

/// How far scatter of the readings moves the departure at each load, at the strict level.
///
/// # Formula
/// For nested least squares the variance of p_high(F) − p_low(F) is σ² (x'(X'X)⁻¹x of the higher less that of the lower
/// degree), x the powers of F; σ² from the residuals of the higher degree.
fn departure_noise(lower: &Fit, higher: &Fit, evidence: Evidence<'_>, forces_n: &[f64]) -> Vec<f64> {
    let factor = t_two_sided(1.0 - STRICT_LEVEL, higher.dof as f64).unwrap_or(f64::INFINITY);
    let variance = noise_variance(higher, evidence).unwrap_or(f64::INFINITY);
    let leverage = |force: &f64| (higher.leverage(*force) - lower.leverage(*force)).max(0.0);
    forces_n.iter().map(|force| factor * (variance * leverage(force)).sqrt()).collect()
}

/// The largest departure, and at the same load what weights and scatter could make of it together.
fn largest_with_bound(departure: &[f64], made: &[f64], noise: &[f64]) -> (f64, f64) {
    departure
        .iter()
        .zip(made)
        .zip(noise)
        .map(|((departure, made), noise)| (departure.abs(), made + noise))
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .unwrap_or((0.0, f64::INFINITY))
}
