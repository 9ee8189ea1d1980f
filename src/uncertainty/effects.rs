//! What one standard uncertainty of each independent source does to each figure, and what they come to together.
//!
//! Law of propagation of uncertainty, JCGM 100:2008 5.1.2, with the sources taken as independent and their effects on
//! different figures kept with their signs, so that what two figures share (clock, scale) cancels where it should.

use crate::firing::{BudgetLine, Figure};
use crate::uncertainty::statistics;
use std::collections::BTreeMap;

/// Effect of one standard uncertainty of one source on the figures read from the curve.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Effect {
    pub source: String,
    pub total_impulse: f64,
    pub burn_impulse: f64,
    pub burn_time: f64,
    pub action_time: f64,
    pub peak_thrust: f64,
    pub initial_thrust: f64,
    pub rise_time: f64,
    pub ignition_delay: f64,
    pub propellant_mass: f64,
    pub extrapolated_impulse: f64,
}

impl Effect {
    pub fn of(source: impl Into<String>) -> Self {
        Effect { source: source.into(), ..Effect::default() }
    }
}

/// A figure's effects, by source, in the figure's unit.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Propagated {
    pub lines: Vec<(String, f64)>,
}

impl Propagated {
    /// Collects one figure's effects; sources of one name are independent parts of it and add in quadrature.
    pub fn collect(effects: &[Effect], of: impl Fn(&Effect) -> f64) -> Self {
        let mut squares: Vec<(String, f64)> = Vec::new();
        for effect in effects {
            let e = of(effect);
            if e == 0.0 {
                continue;
            }
            match squares.iter_mut().find(|(s, _)| *s == effect.source) {
                Some((_, sum)) => *sum += e * e,
                None => squares.push((effect.source.clone(), e * e)),
            }
        }
        Propagated { lines: squares.into_iter().map(|(s, v)| (s, v.sqrt())).collect() }
    }

    pub fn standard_uncertainty(&self) -> f64 {
        self.lines.iter().map(|(_, u)| u * u).sum::<f64>().sqrt()
    }

    /// Budget, largest first; shares add up to 1.
    pub fn budget(&self) -> Vec<BudgetLine> {
        let variance: f64 = self.lines.iter().map(|(_, u)| u * u).sum();
        let mut lines: Vec<BudgetLine> = self
            .lines
            .iter()
            .map(|(source, u)| BudgetLine { source: source.clone(), standard_uncertainty: *u, share: u * u / variance })
            .collect();
        lines.sort_by(|a, b| b.standard_uncertainty.total_cmp(&a.standard_uncertainty));
        lines
    }
}

/// Figures with their budgets.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Budgets(pub BTreeMap<String, Vec<BudgetLine>>);

impl Budgets {
    /// A figure with the uncertainty that its effects come to; none where `known` is false (the scale's error is not known).
    pub fn figure(&mut self, name: &str, value: f64, unit: &str, propagated: &Propagated, known: bool) -> Figure {
        let u = known.then(|| propagated.standard_uncertainty()).filter(|u| u.is_finite());
        if u.is_some() && !propagated.lines.is_empty() {
            self.0.insert(name.to_string(), propagated.budget());
        }
        Figure {
            value,
            unit: unit.to_string(),
            standard_uncertainty: u,
            interval_95: u.map(|u| {
                let half = statistics::normal_quantile(0.975).unwrap_or(1.96) * u;
                [value - half, value + half]
            }),
            bound: None,
            source: None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_shared_clock_cancels_in_a_mean() {
        let (impulse, time) = (300.0, 3.0);
        let clock = Effect { burn_impulse: 0.003 * impulse, burn_time: 0.003 * time, ..Effect::of("clock") };
        let mean = |e: &Effect| impulse / time * (e.burn_impulse / impulse - e.burn_time / time);
        assert!(Propagated::collect(&[clock], mean).standard_uncertainty() < 1e-12);
    }

    /// JCGM 101:2008 9.2: four independent inputs of standard uncertainty 1 add up to 2.
    #[test]
    fn independent_sources_add_in_quadrature_and_shares_to_one() {
        let effects: Vec<Effect> =
            (0..4).map(|i| Effect { total_impulse: 1.0, ..Effect::of(format!("input {i}")) }).collect();
        let p = Propagated::collect(&effects, |e| e.total_impulse);
        assert!((p.standard_uncertainty() - 2.0).abs() < 1e-12);
        assert!((p.budget().iter().map(|l| l.share).sum::<f64>() - 1.0).abs() < 1e-12);
        let f = Budgets::default().figure("total_impulse", 10.0, "N.s", &p, true);
        // JCGM 101:2008 9.2.2 table 2: the 95 % interval of the Gaussian case is ±3.92.
        assert!((f.interval_95.expect("interval")[1] - 13.92).abs() < 0.005);
    }
}
