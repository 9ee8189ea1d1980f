//! How much the readings scatter, apart from what the weights' errors make of them.

use super::degree::Evidence;
use super::fit::{self, Fit, slope};
use super::weights::levels;

/// Variance of the readings beyond what the weights make; `None` without degrees of freedom.
///
/// The residuals hold the errors of the weights too, and those are counted by themselves. So what they are expected to
/// leave in the sum of squares is taken out of it before it is divided by the degrees of freedom. Where a load was
/// repeated, the scatter of its own readings, which no weight's error enters, is the least it can be. Without a stated
/// tolerance all scatter is kept, and the same weight's error in repeated readings is not allowed to average out: the
/// scatter of the loads' means about the curve counts, when it is the larger.
pub(super) fn noise_variance(fit: &Fit, evidence: Evidence<'_>) -> Option<f64> {
    let all = fit.residual_variance()?;
    let terms = fit.scaled.len();
    let (distinct, places) = levels(evidence.forces_n);
    let mut sums = vec![(0.0f64, 0.0f64); distinct.len()];
    for (place, reading) in places.iter().zip(evidence.readings) {
        sums[*place].0 += reading;
        sums[*place].1 += 1.0;
    }
    let within: f64 = places
        .iter()
        .zip(evidence.readings)
        .map(|(place, reading)| (reading - sums[*place].0 / sums[*place].1).powi(2))
        .sum();
    let within_dof = evidence.readings.len() - distinct.len();
    let repeated = if within_dof >= 2 { within / within_dof as f64 } else { 0.0 };
    if evidence.weight_errors.is_empty() {
        let lack_dof = distinct.len().saturating_sub(terms);
        let lack = if lack_dof >= 2 && within_dof > 0 { (fit.rss - within).max(0.0) / lack_dof as f64 } else { 0.0 };
        return Some(all.max(lack));
    }
    let coefficients = fit.coefficients();
    let expected: f64 = evidence
        .weight_errors
        .iter()
        .filter_map(|shift| {
            let moved: Vec<f64> = evidence
                .forces_n
                .iter()
                .zip(shift)
                .map(|(force, shift)| slope(&coefficients, *force) * shift)
                .collect();
            fit::fit(evidence.forces_n, &moved, terms - 1).map(|left| left.rss)
        })
        .sum();
    Some(((fit.rss - expected) / fit.dof as f64).max(repeated).max(0.0))
}

#[cfg(test)]
mod tests {
    use super::*;

    const FORCES: [f64; 6] = [0.0, 10.0, 20.0, 20.0, 10.0, 0.0];
    const READINGS: [f64; 6] = [0.1, 10.2, 19.9, 20.1, 10.0, -0.1];

    /// Within-load squares: 2 x 0.1² at each of three loads, on 3 degrees of freedom.
    #[test]
    fn repeated_readings_are_the_least_there_can_be() {
        let line = fit::fit(&FORCES, &READINGS, 1).unwrap();
        let shift = vec![0.0, 5.0, 0.0, 0.0, 5.0, 0.0];
        let errors = [shift];
        let evidence = Evidence { forces_n: &FORCES, readings: &READINGS, weight_errors: &errors };
        assert!((noise_variance(&line, evidence).unwrap() - 0.02).abs() < 1e-12);
    }

    #[test]
    fn without_tolerance_all_scatter_counts() {
        let line = fit::fit(&FORCES, &READINGS, 1).unwrap();
        let evidence = Evidence { forces_n: &FORCES, readings: &READINGS, weight_errors: &[] };
        assert!((noise_variance(&line, evidence).unwrap() - line.rss / 4.0).abs() < 1e-12);
        let two = fit::fit(&[0.0, 1.0], &[0.0, 1.0], 1).unwrap();
        let evidence = Evidence { forces_n: &[0.0, 1.0], readings: &[0.0, 1.0], weight_errors: &[] };
        assert_eq!(noise_variance(&two, evidence), None);
    }
}
