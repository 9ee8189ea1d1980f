//! What one standard uncertainty of each independent source does to each figure, and what they come to together.
//!
//! Law of propagation of uncertainty, JCGM 100:2008 5.1.2, with the sources taken as independent and their effects on
//! different figures kept with their signs, so that what two figures share (clock, scale) cancels where it should.

use crate::firing::{BudgetLine, Figure};
use crate::quantity::STANDARD_GRAVITY_M_S2;
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::monte_carlo;
use crate::uncertainty::statistics;
use std::collections::BTreeMap;

/// Effect of one standard uncertainty of one source on the figures read from the curve.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Effect {
    pub source: String,
    /// How the source's error is distributed.
    pub shape: Shape,
    pub acts: Acts,
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
    /// Over the action time, N s.
    pub action_impulse: f64,
    pub peak_pressure: f64,
    /// Integral of absolute pressure over the whole burst, and over the action time, Pa s.
    pub pressure_total: f64,
    pub pressure_action: f64,
    /// m²
    pub throat_area: f64,
    /// s
    pub web_time: f64,
    /// m
    pub web_thickness: f64,
}

/// How a source's error enters the figures beyond first order.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Acts {
    /// Adds its effects.
    #[default]
    Adds,
    /// Stretches time by this share: times and integrals over time with it.
    StretchesTime(f64),
    /// Divides every force by 1 plus this share.
    DividesForce(f64),
}

impl Effect {
    pub fn of(source: impl Into<String>) -> Self {
        Effect { source: source.into(), ..Effect::default() }
    }

    pub fn shaped(self, shape: Shape) -> Self {
        Effect { shape, ..self }
    }

    /// Whether it moves nothing.
    pub fn is_nil(&self) -> bool {
        self.amounts().iter().all(|a| *a == 0.0)
    }

    fn amounts(&self) -> [f64; AMOUNTS] {
        [
            self.total_impulse,
            self.burn_impulse,
            self.burn_time,
            self.action_time,
            self.peak_thrust,
            self.initial_thrust,
            self.rise_time,
            self.ignition_delay,
            self.propellant_mass,
            self.extrapolated_impulse,
            self.action_impulse,
            self.peak_pressure,
            self.pressure_total,
            self.pressure_action,
            self.throat_area,
            self.web_time,
            self.web_thickness,
        ]
    }
}

/// Amounts that a source can move.
const AMOUNTS: usize = 17;

/// The amounts as they were found, which the figures are made of; the same names as in [`Effect`], nil where there is none.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Found {
    pub amounts: Effect,
    /// The propellant's mass came from the weight that left the stand: an error of the force scale moves it too.
    pub mass_from_force: bool,
}

/// Figures that the trials give, by their keys in result.json.
pub const DRAWN: [&str; 18] = [
    "total_impulse",
    "burn_impulse",
    "burn_time",
    "action_time",
    "average_thrust",
    "peak_thrust",
    "initial_thrust",
    "rise_time",
    "ignition_delay",
    "propellant_mass",
    "specific_impulse",
    "effective_exhaust_velocity",
    "extrapolated_impulse",
    "peak_pressure",
    "mean_pressure",
    "characteristic_velocity",
    "thrust_coefficient",
    "burn_rate",
];

/// Draws every source once a trial and makes all figures of the same draw, so that what they share cancels where it should.
/// One vector a figure, in the order of [`DRAWN`].
pub fn trials(found: &Found, effects: &[Effect], count: usize) -> Vec<Vec<f64>> {
    let shapes: Vec<Shape> = effects.iter().map(|e| e.shape).collect();
    let amounts: Vec<(Acts, [f64; AMOUNTS])> = effects.iter().map(|e| (e.acts, e.amounts())).collect();
    let base = found.amounts.amounts();
    monte_carlo::propagate(count, &shapes, DRAWN.len(), |drawn, figures| {
        let (mut a, mut time, mut force) = (base, 1.0, 1.0);
        for (z, (acts, amounts)) in drawn.iter().zip(&amounts) {
            match acts {
                Acts::Adds => a.iter_mut().zip(amounts).for_each(|(sum, amount)| *sum += z * amount),
                Acts::StretchesTime(share) => time *= 1.0 + z * share,
                Acts::DividesForce(share) => force /= 1.0 + z * share,
            }
        }
        let [
            total,
            burn,
            burn_time,
            action_time,
            peak,
            initial,
            rise,
            delay,
            mass,
            beyond,
            action,
            peak_pressure,
            pressure_total,
            pressure_action,
            area,
            web_time,
            web,
        ] = a;
        let mass = if found.mass_from_force { mass * force } else { mass };
        let velocity = total * force * time / mass;
        figures.copy_from_slice(&[
            total * force * time,
            burn * force * time,
            burn_time * time,
            action_time * time,
            burn * force / burn_time,
            peak * force,
            initial * force,
            rise * time,
            delay * time,
            mass,
            velocity / STANDARD_GRAVITY_M_S2,
            velocity,
            beyond * force * time,
            peak_pressure,
            pressure_action / action_time,
            area * pressure_total * time / mass,
            action * force / (area * pressure_action),
            web / (web_time * time),
        ]);
    })
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

    /// Degrees of freedom of the standard uncertainty by the Welch-Satterthwaite formula (JCGM 100:2008 G.4.1).
    pub fn effective_degrees_of_freedom(effects: &[Effect], of: impl Fn(&Effect) -> f64) -> f64 {
        let (mut squares, mut fourths) = (0.0, 0.0);
        for effect in effects {
            let e = of(effect);
            squares += e * e;
            fourths += e.powi(4) / effect.shape.degrees_of_freedom();
        }
        if fourths > 0.0 { squares * squares / fourths } else { f64::INFINITY }
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
            estimate: None,
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
