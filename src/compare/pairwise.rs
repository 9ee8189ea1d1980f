//! Whether pours differ, by how much, and whether they are alike within a margin.

use super::components::layout;
use super::sample::{half_width_95, mean_and_sd};
use super::studentised_range;
use crate::uncertainty::statistics::{f_upper_tail, t_both_tails, t_two_sided};
use serde::{Deserialize, Serialize};

/// Outcome of a test of all groups at once.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Test {
    pub statistic: f64,
    /// Between and within; a t has only the latter.
    pub df: [f64; 2],
    pub p_value: f64,
}

/// One-way analysis of variance: F, and its probability where all groups are of one population with one spread.
pub fn analysis_of_variance(groups: &[Vec<f64>]) -> Option<Test> {
    let l = layout(groups)?;
    let statistic = (l.between / l.between_dof) / (l.within / l.within_dof);
    let p_value = f_upper_tail(statistic, l.between_dof, l.within_dof)?;
    Some(Test { statistic, df: [l.between_dof, l.within_dof], p_value })
}

/// Welch's analysis of variance, which does not ask for one spread; groups of one do not enter.
///
/// # Formula
/// w = n/s², F = Σ w (m − m̄)²/(k − 1) / (1 + 2 (k − 2)/(k² − 1) Λ), Λ = Σ (1 − w/Σw)²/(n − 1), df₂ = (k² − 1)/(3 Λ) (B. L. Welch,
/// Biometrika 38 (1951) 330)
pub fn welch_anova(groups: &[Vec<f64>]) -> Option<Test> {
    let parts: Vec<(f64, f64, f64)> = groups
        .iter()
        .filter_map(|g| {
            let (mean, sd) = mean_and_sd(g)?;
            let sd = sd.filter(|sd| *sd > 0.0)?;
            Some((g.len() as f64, mean, g.len() as f64 / (sd * sd)))
        })
        .collect();
    let k = parts.len() as f64;
    if parts.len() < 2 {
        return None;
    }
    let weight: f64 = parts.iter().map(|p| p.2).sum();
    let centre = parts.iter().map(|p| p.2 * p.1).sum::<f64>() / weight;
    let between = parts.iter().map(|p| p.2 * (p.1 - centre).powi(2)).sum::<f64>() / (k - 1.0);
    let lambda: f64 = parts.iter().map(|p| (1.0 - p.2 / weight).powi(2) / (p.0 - 1.0)).sum();
    let statistic = between / (1.0 + 2.0 * (k - 2.0) / (k * k - 1.0) * lambda);
    let df = [k - 1.0, (k * k - 1.0) / (3.0 * lambda)];
    Some(Test { statistic, df, p_value: f_upper_tail(statistic, df[0], df[1])? })
}

/// Difference of two means with Welch's standard error and degrees of freedom; `None` where a group has no spread to go by.
///
/// # Formula
/// u² = s₁²/n₁ + s₂²/n₂, ν = u⁴/Σ ((s²/n)²/(n − 1)) (B. L. Welch, Biometrika 34 (1947) 28)
pub fn welch(a: &[f64], b: &[f64]) -> Option<(f64, f64, f64)> {
    let ((ma, sa), (mb, sb)) = (mean_and_sd(a)?, mean_and_sd(b)?);
    let (va, vb) = (sa?.powi(2) / a.len() as f64, sb?.powi(2) / b.len() as f64);
    let u2 = va + vb;
    let dof = u2 * u2 / (va * va / (a.len() as f64 - 1.0) + vb * vb / (b.len() as f64 - 1.0));
    (u2 > 0.0).then(|| (ma - mb, u2.sqrt(), dof))
}

/// Welch's t test of two groups.
pub fn welch_t(a: &[f64], b: &[f64]) -> Option<Test> {
    let (difference, u, dof) = welch(a, b)?;
    Some(Test { statistic: difference / u, df: [1.0, dof], p_value: t_both_tails(difference / u, dof)? })
}

/// A difference of two groups' means: standard error, degrees of freedom and half-width of its 95 % interval.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Difference {
    pub difference: f64,
    pub standard_error: f64,
    pub dof: f64,
    pub half_width_95: f64,
}

/// Differences of all pairs, their intervals widened so that all of them hold together 95 times in 100.
///
/// # Formula
/// q(0.95; k, ν)/√2 · √(MS_within (1/n_a + 1/n_b)) (Tukey-Kramer: C. Y. Kramer, Biometrics 12 (1956) 307; from memory). One pair: Welch.
pub fn differences(groups: &[Vec<f64>]) -> Vec<(usize, usize, Difference)> {
    let filled: Vec<usize> = (0..groups.len()).filter(|i| !groups[*i].is_empty()).collect();
    let mut found = Vec::new();
    if let [a, b] = filled[..]
        && let Some((difference, standard_error, dof)) = welch(&groups[a], &groups[b])
        && let Some(t) = t_two_sided(0.95, dof)
    {
        found.push((a, b, Difference { difference, standard_error, dof, half_width_95: t * standard_error }));
        return found;
    }
    let Some(l) = layout(groups) else { return found };
    let spread = l.within / l.within_dof;
    let Some(q) = studentised_range::quantile(0.95, filled.len(), l.within_dof) else { return found };
    for (k, a) in filled.iter().enumerate() {
        for b in &filled[k + 1..] {
            let (ga, gb) = (&groups[*a], &groups[*b]);
            let (Some(ma), Some(mb)) = (mean_and_sd(ga), mean_and_sd(gb)) else { continue };
            let standard_error = (spread * (1.0 / ga.len() as f64 + 1.0 / gb.len() as f64)).sqrt();
            let difference = Difference {
                difference: ma.0 - mb.0,
                standard_error,
                dof: l.within_dof,
                half_width_95: q / 2f64.sqrt() * standard_error,
            };
            found.push((*a, *b, difference));
        }
    }
    found
}

/// What the firings say of two pours being alike within a margin.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Alike {
    Alike,
    Different,
    CannotTell,
}

/// Two one-sided tests at 5 % each: alike where the 90 % interval of the difference lies within ± margin, different where the 95 %
/// interval lies outside it (D. J. Schuirmann, J. Pharmacokin. Biopharm. 15 (1987) 657). `shared_u`: what errors of calibration that the two
/// do not share add.
pub fn alike_within(d: &Difference, margin: f64, shared_u: f64) -> Option<Alike> {
    let u2 = d.standard_error.powi(2) + shared_u * shared_u;
    let dof = d.dof * (u2 / d.standard_error.powi(2)).powi(2);
    let (t90, t95) = (t_two_sided(0.90, dof)?, t_two_sided(0.95, dof)?);
    let off = d.difference.abs();
    Some(if off + t90 * u2.sqrt() < margin {
        Alike::Alike
    } else if off - t95 * u2.sqrt() > margin {
        Alike::Different
    } else {
        Alike::CannotTell
    })
}

/// Half-width of a difference's interval with errors of calibration that the two groups do not share.
pub fn with_calibration(d: &Difference, shared_u: f64) -> f64 {
    d.half_width_95.hypot(half_width_95(0.0, 2, shared_u).unwrap_or(0.0))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn two_groups_and_their_margin() {
        let (a, b) = (vec![100.0, 101.0, 99.0, 100.0], vec![100.5, 101.5, 99.5, 100.5]);
        let all = differences(&[a, vec![], b]);
        let [(0, 2, d)] = all[..] else { panic!("{all:?}") };
        assert!((d.difference + 0.5).abs() < 1e-12);
        assert_eq!(alike_within(&d, 5.0, 0.0), Some(Alike::Alike));
        assert_eq!(alike_within(&d, 0.4, 0.0), Some(Alike::CannotTell));
        // Different cells, each unsure by more than the margin: nobody can tell.
        assert_eq!(alike_within(&d, 5.0, 6.0), Some(Alike::CannotTell));
        let far = Difference { difference: 30.0, ..d };
        assert_eq!(alike_within(&far, 5.0, 0.0), Some(Alike::Different));
    }

    #[test]
    fn groups_of_one_have_no_test() {
        assert!(differences(&[vec![1.0], vec![2.0]]).is_empty());
        assert_eq!(welch_t(&[1.0], &[2.0, 3.0]), None);
        assert_eq!(analysis_of_variance(&[vec![1.0], vec![2.0]]), None);
    }

    /// Of two groups F is the square of Student's t, and Tukey's interval is the plain one.
    #[test]
    fn two_groups_are_the_plain_case() {
        let groups = [vec![1.0, 2.0, 4.0], vec![3.0, 5.0, 6.0, 7.0]];
        let welch_f = welch_anova(&groups).expect("a test");
        let t = welch_t(&groups[0], &groups[1]).expect("a test");
        assert!((welch_f.statistic - t.statistic.powi(2)).abs() < 1e-12);
        assert!((welch_f.p_value - t.p_value).abs() < 1e-12 && (welch_f.df[1] - t.df[1]).abs() < 1e-9);
        let q = studentised_range::quantile(0.95, 2, 5.0).expect("a quantile");
        assert!((q / 2f64.sqrt() - t_two_sided(0.95, 5.0).expect("t")).abs() < 1e-6);
    }
}
