//! Quantiles and tail probabilities: the one place that knows the statistics library.

use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, Normal, StudentsT};
use statrs::function::gamma::ln_gamma;

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

/// Standard normal density.
pub fn normal_density(value: f64) -> f64 {
    (-0.5 * value * value).exp() / (2.0 * std::f64::consts::PI).sqrt()
}

/// Probability that |t| with these degrees of freedom exceeds |`statistic`|; `None` where it is not defined.
pub fn t_both_tails(statistic: f64, dof: f64) -> Option<f64> {
    f_upper_tail(statistic * statistic, 1.0, dof)
}

/// Probability that chi-squared exceeds `value`; `None` without degrees of freedom.
pub fn chi_squared_upper_tail(value: f64, dof: f64) -> Option<f64> {
    if value.is_nan() {
        return None;
    }
    Some(ChiSquared::new(dof).ok()?.sf(value.max(0.0)))
}

/// Chi-squared: the value the variable stays below with this probability.
pub fn chi_squared_quantile(probability: f64, dof: f64) -> Option<f64> {
    if !(probability > 0.0 && probability < 1.0) {
        return None;
    }
    Some(ChiSquared::new(dof).ok()?.inverse_cdf(probability))
}

/// Density of χ/√ν, the ratio of a sample's standard deviation to the true one with `dof` degrees of freedom.
///
/// # Formula
/// f(s) = 2 (ν/2)^(ν/2) / Γ(ν/2) s^(ν−1) exp(−ν s²/2)
pub fn scale_density(s: f64, dof: f64) -> f64 {
    if s <= 0.0 {
        return 0.0;
    }
    let half = 0.5 * dof;
    (std::f64::consts::LN_2 + half * half.ln() - ln_gamma(half) + (dof - 1.0) * s.ln() - half * s * s).exp()
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
