//! Firings that do not belong to their group.

use super::sample::mean_and_sd;
use crate::uncertainty::statistics::t_quantile;

/// Chance of calling a sound group's farthest firing odd.
pub const LEVEL: f64 = 0.05;
/// From so many firings on several odd ones may hide each other, and the generalised test is used (B. Rosner, Technometrics 25 (1983)
/// 165, who asks for 25 and finds it fair from 15 on).
pub const SEVERAL_FROM: usize = 15;

/// A value out of line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Odd {
    pub index: usize,
    /// Departure from the mean of the values it was held against, in their standard deviations.
    pub statistic: f64,
    pub critical: f64,
}

/// Largest |departure| in standard deviations, and where.
fn farthest(values: &[f64]) -> Option<(usize, f64)> {
    let (mean, sd) = mean_and_sd(values)?;
    let sd = sd.filter(|sd| *sd > 0.0)?;
    values.iter().map(|v| (v - mean).abs() / sd).enumerate().max_by(|a, b| a.1.total_cmp(&b.1))
}

/// Critical value of Grubbs' test for `n` values; `sides` 1 or 2.
///
/// # Formula
/// (n − 1)/√n · √(t²/(n − 2 + t²)), t at 1 − α/(sides·n) with n − 2 degrees of freedom (NIST/SEMATECH e-Handbook 1.3.5.17.1).
pub fn grubbs_critical(n: usize, level: f64, sides: f64) -> Option<f64> {
    if n < 3 {
        return None;
    }
    let nf = n as f64;
    let t = t_quantile(1.0 - level / (sides * nf), nf - 2.0)?;
    Some((nf - 1.0) / nf.sqrt() * (t * t / (nf - 2.0 + t * t)).sqrt())
}

/// Grubbs' two-sided test: the farthest value, where it is odd.
pub fn grubbs(values: &[f64], level: f64) -> Option<Odd> {
    let critical = grubbs_critical(values.len(), level, 2.0)?;
    let (index, statistic) = farthest(values)?;
    (statistic > critical).then_some(Odd { index, statistic, critical })
}

/// Generalised extreme studentised deviate test for up to `most` odd values, farthest first.
///
/// # Formula
/// λ_i = (n − i) t / √((n − i − 1 + t²)(n − i + 1)), t at 1 − α/(2(n − i + 1)) with n − i − 1 degrees of freedom; the number odd is the
/// largest i with R_i > λ_i (NIST/SEMATECH e-Handbook 1.3.5.17.3).
pub fn generalised_esd(values: &[f64], most: usize, level: f64) -> Vec<Odd> {
    let mut left: Vec<(usize, f64)> = values.iter().copied().enumerate().collect();
    let mut steps = Vec::new();
    let mut odd = 0;
    for i in 1..=most.min(values.len().saturating_sub(2)) {
        let rest: Vec<f64> = left.iter().map(|(_, v)| *v).collect();
        let Some((k, statistic)) = farthest(&rest) else { break };
        let m = (values.len() - i) as f64;
        let Some(t) = t_quantile(1.0 - level / (2.0 * (m + 1.0)), m - 1.0) else { break };
        let critical = m * t / ((m - 1.0 + t * t) * (m + 1.0)).sqrt();
        steps.push(Odd { index: left.remove(k).0, statistic, critical });
        if statistic > critical {
            odd = i;
        }
    }
    steps.truncate(odd);
    steps
}

/// Fewer values hold no odd one: of three, the test only sees whether two lie close together.
const FEWEST: usize = 4;

/// The odd values of a group, by the test that suits its size.
pub fn find(values: &[f64]) -> Vec<Odd> {
    if values.len() < FEWEST {
        Vec::new()
    } else if values.len() >= SEVERAL_FROM {
        generalised_esd(values, values.len() / 5, LEVEL)
    } else {
        grubbs(values, LEVEL).into_iter().collect()
    }
}

/// The test's name.
pub fn test_for(n: usize) -> &'static str {
    if n >= SEVERAL_FROM { "generalised ESD" } else { "Grubbs" }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn alike_values_hold_no_odd_one() {
        assert_eq!(grubbs(&[1.0, 1.0, 1.0], LEVEL), None);
        assert_eq!(grubbs(&[1.0, 2.0], LEVEL), None);
        assert!(generalised_esd(&[5.0; 20], 4, LEVEL).is_empty());
    }

    /// Two odd values on one side hide each other from Grubbs' test, not from the generalised one.
    #[test]
    fn odd_values_that_hide_each_other() {
        let mut values: Vec<f64> = (0..18).map(|i| f64::from(i % 6)).collect();
        values.extend([12.0, 12.2, 12.4]);
        assert_eq!(grubbs(&values, LEVEL), None);
        let mut found: Vec<usize> = generalised_esd(&values, 4, LEVEL).iter().map(|o| o.index).collect();
        found.sort_unstable();
        assert_eq!(found, [18, 19, 20]);
    }
}
