//! Law of propagation of uncertainty (JCGM 100:2008 clause 5, annex G), for models of independent standardised sources.

use super::distribution::Shape;
use super::monte_carlo::Source;
use super::statistics;
use nalgebra::DMatrix;

/// Independent directions of a covariance matrix: its eigenvectors, each one standard uncertainty long. Inputs of this
/// covariance are their estimates plus each direction times a source of its own.
///
/// Rows of the result are directions; there are as many as the rank.
pub fn directions(covariance: &DMatrix<f64>) -> Vec<Vec<f64>> {
    let eigen = covariance.clone().symmetric_eigen();
    let largest = eigen.eigenvalues.iter().copied().fold(0.0, f64::max);
    (0..eigen.eigenvalues.len())
        // Below this an eigenvalue is rounding, and may be negative.
        .filter(|at| eigen.eigenvalues[*at] > 1e-14 * largest)
        .map(|at| (eigen.eigenvectors.column(at) * eigen.eigenvalues[at].sqrt()).iter().copied().collect())
        .collect()
}

/// What one standard uncertainty of each source does to each output, with its sign: `[source][output]`.
///
/// # Formula
/// Z = ½ (f(x + u) − f(x − u)), JCGM 100:2008 5.1.3 note 2: sensitivity coefficient times standard uncertainty.
pub fn effects(sources: usize, outputs: usize, model: impl Fn(&[f64], &mut [f64])) -> Vec<Vec<f64>> {
    let mut at = vec![0.0; sources];
    let (mut above, mut below) = (vec![0.0; outputs], vec![0.0; outputs]);
    (0..sources)
        .map(|source| {
            at[source] = 1.0;
            model(&at, &mut above);
            at[source] = -1.0;
            model(&at, &mut below);
            at[source] = 0.0;
            above.iter().zip(&below).map(|(a, b)| 0.5 * (a - b)).collect()
        })
        .collect()
}

/// What the sources come to together for one output.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Combined {
    /// Combined standard uncertainty (JCGM 100:2008 5.1.2).
    pub standard_uncertainty: f64,
    /// Effective degrees of freedom (G.4.1, Welch and Satterthwaite); infinite where no source has any.
    pub degrees_of_freedom: f64,
}

/// Adds up the effects of independent sources on one output. Errors judged by one scatter share its degrees of freedom.
///
/// # Formula
/// u² = Σ u_i², ν = u⁴ / Σ (u_i⁴/ν_i).
pub fn combine(effects: &[f64], sources: &[Source]) -> Combined {
    let variance: f64 = effects.iter().map(|e| e * e).sum();
    let mut parts: Vec<(Option<usize>, f64, f64)> = Vec::new();
    for (effect, source) in effects.iter().zip(sources) {
        let Shape::StudentT(degrees_of_freedom) = source.shape else { continue };
        match parts.iter_mut().find(|(number, ..)| number.is_some() && *number == source.scatter) {
            Some((_, sum, _)) => *sum += effect * effect,
            None => parts.push((source.scatter, effect * effect, degrees_of_freedom)),
        }
    }
    let uncertain: f64 = parts.iter().map(|(_, part, dof)| part * part / dof).sum();
    Combined {
        standard_uncertainty: variance.sqrt(),
        degrees_of_freedom: if uncertain > 0.0 { variance * variance / uncertain } else { f64::INFINITY },
    }
}

impl Combined {
    /// Half-width of the two-sided interval with this content: the quantile of Student's t times the standard uncertainty
    /// (JCGM 100:2008 G.3.2, G.4.1).
    pub fn half_width(&self, content: f64) -> f64 {
        let factor = statistics::t_two_sided(content, self.degrees_of_freedom).unwrap_or(f64::INFINITY);
        factor * self.standard_uncertainty
    }

    /// The tolerance to which two intervals of this uncertainty may differ.
    ///
    /// # Formula
    /// JCGM 101:2008 7.9.2: u written as c × 10^l with an integer c of one digit has the tolerance ½ × 10^l.
    pub fn numerical_tolerance(&self) -> f64 {
        if self.standard_uncertainty > 0.0 { 0.5 * 10f64.powf(leading_power(self.standard_uncertainty)) } else { 0.0 }
    }
}

/// Power of ten of the leading digit, after rounding to that digit.
fn leading_power(value: f64) -> f64 {
    let power = value.log10().floor();
    if value / 10f64.powf(power) >= 9.5 { power + 1.0 } else { power }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NORMAL: Source = Source { shape: Shape::Normal, scatter: None };

    #[test]
    fn directions_rebuild_the_covariance() {
        let covariance = DMatrix::from_row_slice(3, 3, &[4.0, 1.2, 0.0, 1.2, 1.0, -0.3, 0.0, -0.3, 0.5]);
        let found = directions(&covariance);
        let again = DMatrix::from_fn(3, 3, |i, k| found.iter().map(|d| d[i] * d[k]).sum::<f64>());
        assert!((again - covariance).abs().max() < 1e-12);
        // Fully correlated: one direction carries both.
        assert_eq!(directions(&DMatrix::from_element(2, 2, 1.0)).len(), 1);
    }

    #[test]
    fn effects_carry_their_signs() {
        let found = effects(2, 2, |z, out| {
            out[0] = 3.0 * z[0] - 2.0 * z[1];
            out[1] = (1.0 + 0.1 * z[0]) * (2.0 + 0.1 * z[1]);
        });
        for (effect, expected) in found.concat().iter().zip([3.0, 0.2, -2.0, 0.1]) {
            assert!((effect - expected).abs() < 1e-12);
        }
    }

    /// JCGM 100:2008 G.4.2, example: 0.25, 0.57 and 0.82 % with 9, 4 and 14 degrees of freedom give 1.03 % with 19.0 (from memory).
    #[test]
    fn degrees_of_freedom_of_a_sum() {
        let t = |degrees_of_freedom| Source { shape: Shape::StudentT(degrees_of_freedom), scatter: None };
        let combined = combine(&[0.25, 0.57, 0.82], &[t(9.0), t(4.0), t(14.0)]);
        assert!((combined.standard_uncertainty - 1.03).abs() < 0.005);
        assert!((combined.degrees_of_freedom - 19.0).abs() < 0.1, "{combined:?}");
        assert_eq!(combine(&[1.0], &[NORMAL]).degrees_of_freedom, f64::INFINITY);
    }

    #[test]
    fn errors_judged_by_one_scatter_share_its_degrees_of_freedom() {
        let source = Source { shape: Shape::StudentT(9.0), scatter: Some(0) };
        assert!((combine(&[0.3, 0.4], &[source; 2]).degrees_of_freedom - 9.0).abs() < 1e-12);
        let apart = Source { scatter: None, ..source };
        assert!(combine(&[0.3, 0.4], &[apart; 2]).degrees_of_freedom > 16.0);
    }

    /// JCGM 101:2008 7.9.2 examples: 0.35 g to one digit is 0.4, so 0.05 g; 2 K gives 0.5 K (from memory).
    #[test]
    fn numerical_tolerance_of_one_digit() {
        let of = |u: f64| Combined { standard_uncertainty: u, degrees_of_freedom: f64::INFINITY }.numerical_tolerance();
        for (u, expected) in [(0.35, 0.05), (2.0, 0.5), (0.97, 0.5), (0.0, 0.0)] {
            assert!((of(u) - expected).abs() < 1e-12, "{u}");
        }
    }
}
