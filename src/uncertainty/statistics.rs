//! Quantiles and tail probabilities: the one place that knows the statistics library.

use statrs::distribution::{ContinuousCDF, FisherSnedecor, Normal, StudentsT};

/// Probability that F with these degrees of freedom exceeds `statistic`; `None` where it is not defined.
pub fn f_upper_tail(statistic: f64, numerator_dof: f64, denominator_dof: f64) -> Option<f64> {
    if statistic.is_nan() {
        return None;
    }
    if statistic == f64::INFINITY {
        return Some(0.0);
    }
    let distribution = FisherSnedecor::new(numerator_dof, denominator_dof).ok()?;
    Some(distribution.sf(statistic.max(0.0)))
}

/// Student's t: the value the variable stays below with this probability; `None` outside 0 to 1 or without degrees
/// of freedom. Infinite degrees of freedom give the normal quantile.
pub fn t_quantile(probability: f64, dof: f64) -> Option<f64> {
    if !(probability > 0.0 && probability < 1.0) || dof.is_nan() || dof <= 0.0 {
        return None;
    }
    if dof > 1e7 {
        return normal_quantile(probability);
    }
    let distribution = StudentsT::new(0.0, 1.0, dof).ok()?;
    Some(distribution.inverse_cdf(probability))
}

/// Half-width factor of a two-sided interval with this content, from Student's t.
pub fn t_two_sided(content: f64, dof: f64) -> Option<f64> {
    t_quantile(0.5 + content / 2.0, dof)
}

/// Standard normal quantile.
pub fn normal_quantile(probability: f64) -> Option<f64> {
    if !(probability > 0.0 && probability < 1.0) {
        return None;
    }
    Some(Normal::standard().inverse_cdf(probability))
}

/// Standard normal distribution function.
pub fn normal_cdf(value: f64) -> f64 {
    if value.is_nan() { f64::NAN } else { Normal::standard().cdf(value) }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Table values: NIST/SEMATECH e-Handbook 1.3.6.7.2 (t), 1.3.6.7.3 (F, 5 %), 1.3.6.7.1 (normal), printed to three
    /// or four digits (from memory).
    #[test]
    fn printed_tables() {
        assert!((t_two_sided(0.95, 10.0).unwrap() - 2.228).abs() < 5e-4);
        assert!((t_two_sided(0.95, 1.0).unwrap() - 12.706).abs() < 5e-4);
        assert!((t_two_sided(0.95, f64::INFINITY).unwrap() - 1.960).abs() < 5e-4);
        assert!((f_upper_tail(4.965, 1.0, 10.0).unwrap() - 0.05).abs() < 1e-4);
        assert!((f_upper_tail(3.326, 5.0, 10.0).unwrap() - 0.05).abs() < 1e-4);
        assert!((normal_cdf(1.0) - 0.8413).abs() < 5e-5);
        assert!((normal_quantile(0.975).unwrap() - 1.95996).abs() < 5e-6);
    }

    /// t with n degrees of freedom, squared, is F with (1, n).
    #[test]
    fn t_squared_is_f() {
        for dof in [1.0, 3.0, 17.0, 200.0] {
            let t = t_two_sided(0.99, dof).unwrap();
            assert!((f_upper_tail(t * t, 1.0, dof).unwrap() - 0.01).abs() < 1e-9, "{dof}");
        }
    }

    #[test]
    fn undefined_is_none() {
        assert_eq!(t_quantile(0.5, 0.0), None);
        assert_eq!(t_quantile(1.0, 5.0), None);
        assert_eq!(t_quantile(f64::NAN, 5.0), None);
        assert_eq!(f_upper_tail(f64::NAN, 1.0, 2.0), None);
        assert_eq!(f_upper_tail(2.0, 0.0, 2.0), None);
        assert_eq!(f_upper_tail(f64::INFINITY, 1.0, 2.0), Some(0.0));
        assert_eq!(normal_quantile(0.0), None);
    }
}
