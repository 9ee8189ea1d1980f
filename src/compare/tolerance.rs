//! Tolerance factors of the normal distribution: mean ± k standard deviations holds a share of all motors to come, at a confidence.

use super::quadrature::{integrate, scale_range, solve};
use crate::uncertainty::statistics::{
    chi_squared_upper_tail, normal_cdf, normal_density, normal_quantile, scale_density,
};

/// Content and confidence that everything here is given for.
pub const CONTENT: f64 = 0.95;
pub const CONFIDENCE: f64 = 0.95;

/// Distribution function of the noncentral t.
///
/// # Formula
/// P(T ≤ t) = ∫ Φ(t s − δ) f(s) ds, s = χ/√ν (N. L. Johnson and B. L. Welch, Biometrika 31 (1940) 362; from memory).
fn noncentral_t_cdf(t: f64, dof: f64, delta: f64) -> f64 {
    let (low, high) = scale_range(dof);
    integrate(low, high, 200, |s| normal_cdf(t * s - delta) * scale_density(s, dof))
}

/// One-sided factor: below mean + k s (above mean − k s) lies `content` of the population with `confidence`. `None` for fewer than 2.
///
/// # Formula
/// k = t'(confidence; n − 1, z √n) / √n, noncentral t (NIST/SEMATECH e-Handbook 7.2.6.3).
pub fn one_sided(n: usize, content: f64, confidence: f64) -> Option<f64> {
    if n < 2 {
        return None;
    }
    let root = (n as f64).sqrt();
    let delta = normal_quantile(content)? * root;
    let t = solve(0.0, delta.abs() + 4.0, |t| noncentral_t_cdf(t, n as f64 - 1.0, delta) - confidence)?;
    Some(t / root)
}

/// Half-width R with Φ(z + R) − Φ(z − R) = content, by Newton's method from above.
fn half_width(z: f64, content: f64) -> f64 {
    // One end alone is nearly all of it where z is large.
    let mut r = z.abs() + normal_quantile(content).unwrap_or(0.0).max(1.0) + 0.7;
    for _ in 0..60 {
        let off = normal_cdf(z + r) - normal_cdf(z - r) - content;
        let slope = normal_density(z + r) + normal_density(z - r);
        let step = off / slope.max(1e-300);
        r -= step.clamp(-0.5, 0.5);
        if step.abs() < 1e-13 * r {
            break;
        }
    }
    r
}

/// Two-sided factor, exact: between mean − k s and mean + k s lies `content` of the population with `confidence`. `None` for fewer than 2.
///
/// # Formula
/// 2 √n ∫₀^∞ P(χ²(n−1) > (n−1) R(z)²/k²) φ(z √n) dz = confidence (R. E. Odeh, Commun. Statist. Simul. Comput. 7 (1978) 183; from memory;
/// checked against ../shared values of the e-Handbook's case, whose printed factor is of another pair).
pub fn two_sided(n: usize, content: f64, confidence: f64) -> Option<f64> {
    if n < 2 {
        return None;
    }
    let (nf, dof) = (n as f64, n as f64 - 1.0);
    let top = 9.0 / nf.sqrt();
    // Nodes do not depend on k, so R is found once for each.
    let panels = 24;
    let nodes = std::cell::RefCell::new(Vec::new());
    integrate(0.0, top, panels, |z| {
        nodes.borrow_mut().push((z, half_width(z, content)));
        0.0
    });
    let nodes = nodes.into_inner();
    solve(0.1, 3.0, |k| {
        let at = std::cell::Cell::new(0);
        let held = integrate(0.0, top, panels, |z| {
            let (_, r) = nodes[at.get()];
            at.set(at.get() + 1);
            let tail = chi_squared_upper_tail(dof * r * r / (k * k), dof).unwrap_or(f64::NAN);
            2.0 * nf.sqrt() * tail * normal_density(z * nf.sqrt())
        });
        held - confidence
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn half_widths_hold_their_content() {
        for z in [0.0, 0.3, 2.0, 6.0] {
            let r = half_width(z, 0.95);
            assert!((normal_cdf(z + r) - normal_cdf(z - r) - 0.95).abs() < 1e-12, "{z}");
        }
        // The distribution function is good to some 1e-12, which the slope of 0.058 makes ten times as much.
        assert!((half_width(0.0, 0.95) - 1.959_963_984_540_054).abs() < 1e-10);
    }

    #[test]
    fn too_few_say_nothing() {
        assert_eq!(one_sided(1, CONTENT, CONFIDENCE), None);
        assert_eq!(two_sided(0, CONTENT, CONFIDENCE), None);
    }

    /// Ever more firings: the factors fall to the normal distribution's own.
    #[test]
    fn many_firings_leave_the_normal_distribution() {
        assert!((two_sided(100_000, 0.95, 0.5).expect("a factor") - 1.96).abs() < 1e-3);
        assert!((one_sided(100_000, 0.95, 0.5).expect("a factor") - 1.6449).abs() < 1e-3);
    }
}
