//! Figures against date, temperature or a number of the person's own, and the burn-rate law.

use crate::uncertainty::statistics::{t_both_tails, t_two_sided};
use serde::{Deserialize, Serialize};

/// A straight line through points, with its 95 % interval.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Line {
    pub n: usize,
    pub slope: f64,
    pub slope_standard_error: f64,
    pub slope_interval_95: [f64; 2],
    pub intercept: f64,
    pub intercept_standard_error: f64,
    pub intercept_interval_95: [f64; 2],
    /// Chance of a slope this far from nil where there is none.
    pub p_value: f64,
    pub residual_sd: f64,
}

/// Ordinary least squares. `None` for fewer than three points or all at one x.
pub fn line(x: &[f64], y: &[f64]) -> Option<Line> {
    let n = x.len().min(y.len());
    if n < 3 {
        return None;
    }
    let (x, y) = (&x[..n], &y[..n]);
    let nf = n as f64;
    let (mx, my) = (x.iter().sum::<f64>() / nf, y.iter().sum::<f64>() / nf);
    let sxx: f64 = x.iter().map(|v| (v - mx).powi(2)).sum();
    let sxy: f64 = x.iter().zip(y).map(|(a, b)| (a - mx) * (b - my)).sum();
    // All at one place but for rounding.
    if sxx <= 1e-18 * nf * mx * mx || sxx == 0.0 {
        return None;
    }
    let slope = sxy / sxx;
    let intercept = my - slope * mx;
    let rss: f64 = x.iter().zip(y).map(|(a, b)| (b - intercept - slope * a).powi(2)).sum();
    let residual_sd = (rss / (nf - 2.0)).sqrt();
    let slope_standard_error = residual_sd / sxx.sqrt();
    let intercept_standard_error = residual_sd * (1.0 / nf + mx * mx / sxx).sqrt();
    let t = t_two_sided(0.95, nf - 2.0)?;
    let interval = |value: f64, u: f64| [value - t * u, value + t * u];
    let p_value = if slope_standard_error > 0.0 {
        t_both_tails(slope / slope_standard_error, nf - 2.0)?
    } else if slope == 0.0 {
        1.0
    } else {
        0.0
    };
    Some(Line {
        n,
        slope,
        slope_standard_error,
        slope_interval_95: interval(slope, slope_standard_error),
        intercept,
        intercept_standard_error,
        intercept_interval_95: interval(intercept, intercept_standard_error),
        p_value,
        residual_sd,
    })
}

/// r = a pⁿ, r in mm/s and p in MPa.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct BurnRateLaw {
    pub firings: usize,
    pub exponent: f64,
    pub exponent_interval_95: [f64; 2],
    /// mm/s at 1 MPa.
    pub coefficient_mm_s: f64,
    pub coefficient_interval_95: [f64; 2],
    /// Range of the pressures, MPa; the law holds no further.
    pub range_mpa: [f64; 2],
}

/// Fits ln r = ln a + n ln p by least squares. `pressure_pa` and `rate_m_s` have one element a firing. `None` for fewer than three firings or
/// pressures all alike.
pub fn burn_rate_law(pressure_pa: &[f64], rate_m_s: &[f64]) -> Option<BurnRateLaw> {
    let usable: Vec<(f64, f64)> = pressure_pa
        .iter()
        .zip(rate_m_s)
        .filter(|(p, r)| **p > 0.0 && **r > 0.0)
        .map(|(p, r)| (p / 1e6, r * 1e3))
        .collect();
    let x: Vec<f64> = usable.iter().map(|p| p.0.ln()).collect();
    let y: Vec<f64> = usable.iter().map(|p| p.1.ln()).collect();
    let fit = line(&x, &y)?;
    let ends = |best: fn(f64, f64) -> f64| usable.iter().map(|p| p.0).reduce(best).unwrap_or(0.0);
    Some(BurnRateLaw {
        firings: usable.len(),
        exponent: fit.slope,
        exponent_interval_95: fit.slope_interval_95,
        coefficient_mm_s: fit.intercept.exp(),
        coefficient_interval_95: fit.intercept_interval_95.map(f64::exp),
        range_mpa: [ends(f64::min), ends(f64::max)],
    })
}

/// Days since 1970-01-01 of a date `2026-05-14`, whatever follows it; `None` where it is none.
pub fn days(date: &str) -> Option<f64> {
    let day: jiff::civil::Date = date.get(..10)?.parse().ok()?;
    let start = jiff::civil::date(1970, 1, 1);
    Some(f64::from(start.until(day).ok()?.get_days()))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn too_few_or_all_at_one_place_is_no_trend() {
        assert_eq!(line(&[1.0, 2.0], &[1.0, 2.0]), None);
        assert_eq!(line(&[5.0, 5.0, 5.0], &[1.0, 2.0, 3.0]), None);
    }

    #[test]
    fn dates_are_days() {
        assert_eq!(days("1970-01-31"), Some(30.0));
        assert_eq!(days("2026-05-14T10:00").zip(days("2026-06-14")).map(|(a, b)| b - a), Some(31.0));
        assert_eq!(days("May 14"), None);
    }
}
