//! The degree of the response: no higher than the readings demand and the weights can tell.

use super::fit::{self, Fit, monotonic_within, value};
use super::weights::levels;
use crate::uncertainty::statistics::f_upper_tail;

/// A higher degree must be this improbable as chance.
const STRICT_LEVEL: f64 = 0.001;
const HIGHEST: usize = 3;

/// The fit chosen, and why.
#[derive(Debug, Clone)]
pub(super) struct Choice {
    pub degree: usize,
    pub fit: Fit,
    pub reason: String,
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
/// its largest departure from the lower curve must exceed what the weights could make with every error at its limit,
/// in the worst combination (the weights' forces perturbed, both curves fitted again).
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
    for degree in 2..=highest {
        let Some(better) = fit::fit(evidence.forces_n, evidence.readings, degree) else { continue };
        let Some(chance) = chance(evidence, chosen, degree) else { continue };
        if chance >= STRICT_LEVEL {
            continue;
        }
        let departure = departures(&current, &better, &distinct);
        let made = weights_could_make(evidence, chosen, degree, &distinct)?;
        let (largest, bound) = largest_with_bound(&departure, &made);
        let span = (value(&current.coefficients(), distinct[distinct.len() - 1])
            - value(&current.coefficients(), distinct[0]))
        .abs();
        let percent = |reading: f64| 100.0 * reading / span;
        if largest <= bound {
            reason = format!(
                "degree {chosen}: degree {degree} would bend the curve by {:.4} % of span, and the weights' tolerance \
                 alone could make {:.4} %",
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
             {chance:.1e} and the weights' tolerance could make {:.4} % of",
            percent(largest),
            percent(bound)
        );
        chosen = degree;
        current = better;
    }
    Some(Choice { degree: chosen, fit: current, reason })
}

/// Probability that the drop in the sum of squares is chance.
fn chance(evidence: Evidence<'_>, from: usize, to: usize) -> Option<f64> {
    let means;
    let (forces, readings) = if evidence.weight_errors.is_empty() {
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

/// The largest departure, and the bound at the same load.
fn largest_with_bound(departure: &[f64], made: &[f64]) -> (f64, f64) {
    departure
        .iter()
        .zip(made)
        .map(|(departure, made)| (departure.abs(), *made))
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .unwrap_or((0.0, f64::INFINITY))
}
