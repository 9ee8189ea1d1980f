//! Plain statistics of a few numbers.

use crate::uncertainty::statistics;

/// Mean and standard deviation (n − 1); the latter `None` for one value.
pub fn mean_and_sd(values: &[f64]) -> Option<(f64, Option<f64>)> {
    let n = values.len() as f64;
    if values.is_empty() {
        return None;
    }
    let mean = values.iter().sum::<f64>() / n;
    let squares = squares_about(values, mean);
    Some((mean, (values.len() > 1).then(|| (squares / (n - 1.0)).sqrt())))
}

/// Sum of squares about `centre`.
pub fn squares_about(values: &[f64], centre: f64) -> f64 {
    values.iter().map(|v| (v - centre).powi(2)).sum()
}

/// A mean with the errors that all its values share: half-width of the 95 % interval.
///
/// # Formula
/// √((t s/√n)² + (1.96 u_s)²), t of n − 1 degrees of freedom. (One t of effective degrees of freedom, JCGM 100:2008 G.4.1, would make the
/// interval narrower when an error is added, since the shared part is taken as known.)
pub fn half_width_95(sd: f64, n: usize, shared_u: f64) -> Option<f64> {
    let own = if sd > 0.0 { statistics::t_two_sided(0.95, n as f64 - 1.0)? * sd / (n as f64).sqrt() } else { 0.0 };
    Some(own.hypot(statistics::t_two_sided(0.95, f64::INFINITY)? * shared_u))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_value_has_no_spread() {
        assert_eq!(mean_and_sd(&[3.0]), Some((3.0, None)));
        assert_eq!(mean_and_sd(&[]), None);
    }

    #[test]
    fn a_shared_error_does_not_shrink_with_more_firings() {
        let alone = half_width_95(2.0, 4, 0.0).expect("a width");
        // Student's t with 3 degrees of freedom: 3.1824.
        assert!((alone - 3.182_446_3).abs() < 1e-6, "{alone}");
        let shared = half_width_95(2.0, 4_000_000, 3.0).expect("a width");
        assert!((shared - 3.0 * 1.959_964).abs() < 1e-4, "{shared}");
        assert!(half_width_95(0.0, 3, 1.0).is_some_and(|w| (w - 1.959_964).abs() < 1e-6));
    }
}
