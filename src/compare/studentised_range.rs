//! The studentised range: the largest difference among several means, in standard deviations that were estimated too.

use super::quadrature::{integrate, scale_range};
use crate::uncertainty::statistics::{normal_cdf, normal_density, scale_density};

/// Probability that the range of `groups` standard normal values stays below `w`.
fn range_cdf(w: f64, groups: f64) -> f64 {
    if w <= 0.0 {
        return 0.0;
    }
    integrate(-8.0, 8.0 + w, 24 + (2.0 * w) as usize, |z| {
        groups * normal_density(z) * (normal_cdf(z) - normal_cdf(z - w)).powf(groups - 1.0)
    })
}

/// Probability that the studentised range of `groups` means stays below `q`.
///
/// # Formula
/// P(Q ≤ q) = ∫ f(s) W(q s) ds, s = χ/√ν, W(w) = k ∫ φ(z) (Φ(z) − Φ(z − w))^(k−1) dz (D. Newman, Biometrika 31 (1939) 20; from memory)
pub fn cdf(q: f64, groups: usize, dof: f64) -> f64 {
    let k = groups as f64;
    if dof > 1e5 {
        return range_cdf(q, k);
    }
    let (low, high) = scale_range(dof);
    integrate(low, high, 32, |s| {
        let density = scale_density(s, dof);
        if density < 1e-18 { 0.0 } else { density * range_cdf(q * s, k) }
    })
}

/// The value the studentised range stays below with this probability; `None` for fewer than two groups or without degrees of freedom.
pub fn quantile(probability: f64, groups: usize, dof: f64) -> Option<f64> {
    if groups < 2 || dof.is_nan() || dof < 1.0 || !(probability > 0.0 && probability < 1.0) {
        return None;
    }
    // A millionth is far more than any interval is told to.
    let (mut low, mut high) = (0.0, 4.0);
    while cdf(high, groups, dof) < probability {
        (low, high) = (high, 2.0 * high);
        if high > 1e4 {
            return None;
        }
    }
    while high - low > 1e-7 * high {
        let middle = 0.5 * (low + high);
        if cdf(middle, groups, dof) < probability { low = middle } else { high = middle }
    }
    Some(0.5 * (low + high))
}
