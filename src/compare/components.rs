//! Spread within pours and between them.

use super::sample::{mean_and_sd, squares_about};
use serde::{Deserialize, Serialize};

/// Sums of squares of a one-way layout.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Layout {
    pub between: f64,
    pub between_dof: f64,
    pub within: f64,
    pub within_dof: f64,
    /// Size of a group where they are alike, and what stands in for it where they are not.
    pub typical_size: f64,
}

/// Lays out groups of values; `None` for fewer than two groups or no group with two values. Empty groups do not count.
///
/// # Formula
/// n₀ = (N − Σ n²/N)/(p − 1) (ISO 5725-2:1994, 7.4.5; from memory)
pub fn layout(groups: &[Vec<f64>]) -> Option<Layout> {
    let groups: Vec<&Vec<f64>> = groups.iter().filter(|g| !g.is_empty()).collect();
    let sizes: Vec<f64> = groups.iter().map(|g| g.len() as f64).collect();
    let (p, n) = (groups.len() as f64, sizes.iter().sum::<f64>());
    if groups.len() < 2 || n <= p {
        return None;
    }
    let means: Vec<f64> = groups.iter().filter_map(|g| mean_and_sd(g)).map(|m| m.0).collect();
    let grand = means.iter().zip(&sizes).map(|(m, n)| m * n).sum::<f64>() / n;
    Some(Layout {
        between: means.iter().zip(&sizes).map(|(m, n)| n * (m - grand).powi(2)).sum(),
        between_dof: p - 1.0,
        within: groups.iter().zip(&means).map(|(g, m)| squares_about(g, *m)).sum(),
        within_dof: n - p,
        typical_size: (n - sizes.iter().map(|s| s * s).sum::<f64>() / n) / (p - 1.0),
    })
}

/// ISO 5725-2, with motors of a pour for the repeated measurements and pours for the laboratories.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Components {
    /// Standard deviation of motors of one pour.
    pub repeatability_sd: f64,
    /// Standard deviation of the pours' own means; nil where the pours differ by no more than their motors let expect.
    pub between_pour_sd: f64,
    /// Standard deviation of motors of any pour.
    pub reproducibility_sd: f64,
    /// The estimate of the pours' variance came out below nil and was cut there.
    pub between_cut_at_nil: bool,
    /// Degrees of freedom of the repeatability.
    pub repeatability_dof: f64,
    pub pours: usize,
}

/// # Formula
/// s_L² = (MS_between − MS_within)/n₀, not below nil; s_R² = s_L² + s_r² (ISO 5725-2:1994, 7.4.5; from memory)
pub fn components(groups: &[Vec<f64>]) -> Option<Components> {
    let l = layout(groups)?;
    let repeatability = l.within / l.within_dof;
    let between = (l.between / l.between_dof - repeatability) / l.typical_size;
    Some(Components {
        repeatability_sd: repeatability.sqrt(),
        between_pour_sd: between.max(0.0).sqrt(),
        reproducibility_sd: (between.max(0.0) + repeatability).sqrt(),
        between_cut_at_nil: between < 0.0,
        repeatability_dof: l.within_dof,
        pours: l.between_dof as usize + 1,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// By hand: means 1 and 4 about 3, sizes 1 and 2: between 1·4 + 2·1 = 6, within 2·1 = 2, n₀ = 3 − 5/3.
    #[test]
    fn groups_of_unlike_size() {
        let c = components(&[vec![1.0], vec![3.0, 5.0]]).expect("components");
        assert!((c.repeatability_sd - 2f64.sqrt()).abs() < 1e-12);
        assert!((c.between_pour_sd - (4.0 / (4.0 / 3.0_f64)).sqrt()).abs() < 1e-12, "{c:?}");
        assert!((c.reproducibility_sd.powi(2) - 5.0).abs() < 1e-12);
    }

    #[test]
    fn pours_alike_have_no_spread_of_their_own() {
        let c = components(&[vec![1.0, 3.0], vec![1.0, 3.0]]).expect("components");
        assert!(c.between_cut_at_nil && c.between_pour_sd == 0.0 && c.reproducibility_sd == c.repeatability_sd);
        assert_eq!(components(&[vec![1.0], vec![2.0]]), None);
        assert_eq!(components(&[vec![1.0, 2.0]]), None);
    }
}
