//! Integrals over smooth functions, for distributions that have no closed form.

/// Nodes and weights of the 8-point Gauss-Legendre rule on −1 to 1, positive half (Abramowitz and Stegun, table 25.4).
const RULE: [(f64, f64); 4] = [
    (0.183_434_642_495_649_8, 0.362_683_783_378_362),
    (0.525_532_409_916_329, 0.313_706_645_877_887_3),
    (0.796_666_477_413_626_7, 0.222_381_034_453_374_48),
    (0.960_289_856_497_536_3, 0.101_228_536_290_376_26),
];

/// Integral of `f` from `low` to `high` in `panels` equal parts of eight points each.
pub fn integrate(low: f64, high: f64, panels: usize, f: impl Fn(f64) -> f64) -> f64 {
    let half = 0.5 * (high - low) / panels.max(1) as f64;
    (0..panels.max(1))
        .map(|k| {
            let middle = low + (2 * k + 1) as f64 * half;
            half * RULE.iter().map(|(x, w)| w * (f(middle - x * half) + f(middle + x * half))).sum::<f64>()
        })
        .sum()
}

/// Where the ratio χ/√ν lies but for 1e-16 of its probability.
pub fn scale_range(dof: f64) -> (f64, f64) {
    ((1.0 - 6.5 / dof.sqrt()).max(0.0), 1.0 + 9.0 / dof.sqrt())
}

/// Where an increasing function crosses zero, by bisection between `low` and an upper end that is doubled until it lies beyond.
pub fn solve(low: f64, high: f64, f: impl Fn(f64) -> f64) -> Option<f64> {
    let (mut low, mut high) = (low, high);
    for _ in 0..60 {
        if f(high) >= 0.0 {
            break;
        }
        (low, high) = (high, 2.0 * high);
    }
    if f(high).is_nan() || f(high) < 0.0 {
        return None;
    }
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if middle <= low || middle >= high || high - low < 1e-13 * high.abs() {
            break;
        }
        if f(middle) < 0.0 { low = middle } else { high = middle }
    }
    Some(0.5 * (low + high))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn polynomials_and_roots() {
        assert!((integrate(0.0, 2.0, 3, |x| x.powi(9)) - 102.4).abs() < 1e-11);
        assert!((solve(0.0, 1.0, |x| x * x - 50.0).expect("a root") - 50f64.sqrt()).abs() < 1e-12);
        assert_eq!(solve(0.0, 1.0, |_| -1.0), None);
    }
}
