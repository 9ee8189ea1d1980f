//! What one standard uncertainty of each independent source does to each figure, and what they come to together.
//!
//! The sources are independent, and their effects on different figures keep their signs, so that what two figures share
//! (clock, scale) cancels where it should. One model of all figures serves both ways: the law of propagation (JCGM 100:2008 5.1.2)
//! takes each source's effect by itself, Monte Carlo (JCGM 101:2008) draws all of them at once.

use crate::firing::{BudgetLine, Figure};
use crate::quantity::STANDARD_GRAVITY_M_S2;
use crate::uncertainty::distribution::Shape;
use crate::uncertainty::monte_carlo::{self, Source};
use crate::uncertainty::propagation::{self, Combined};
use std::collections::BTreeMap;

/// Effect of one standard uncertainty of one source on the figures read from the curve.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Effect {
    pub source: String,
    /// How the source's error is distributed.
    pub shape: Shape,
    /// Effects of one number were judged by one and the same scatter.
    pub scatter: Option<usize>,
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
    /// kg
    pub expelled_mass: f64,
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

    /// What draws it.
    pub fn drawn_by(&self) -> Source {
        Source { shape: self.shape, scatter: self.scatter }
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
            self.expelled_mass,
        ]
    }
}

/// Amounts that a source can move.
const AMOUNTS: usize = 18;

/// The amounts as they were found, which the figures are made of; the same names as in [`Effect`], nil where there is none.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Found {
    pub amounts: Effect,
    /// The propellant's mass came from the weight that left the stand: an error of the force scale moves it too.
    pub mass_from_force: bool,
}

/// Figures that the trials give, by their keys in result.json.
pub const DRAWN: [&str; 19] = [
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
    "expelled_mass",
];

/// All figures as a function of the sources.
struct Model<'a> {
    found: &'a Found,
    base: [f64; AMOUNTS],
    moves: Vec<(Acts, [f64; AMOUNTS])>,
}

impl<'a> Model<'a> {
    fn new(found: &'a Found, effects: &[Effect]) -> Self {
        let moves = effects.iter().map(|e| (e.acts, e.amounts())).collect();
        Model { found, base: found.amounts.amounts(), moves }
    }

    /// The figures, in the order of [`DRAWN`], where each source has the value drawn.
    fn figures(&self, drawn: &[f64], figures: &mut [f64]) {
        let (mut a, mut time, mut force) = (self.base, 1.0, 1.0);
        for (z, (acts, amounts)) in drawn.iter().zip(&self.moves) {
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
            expelled,
        ] = a;
        let mass = if self.found.mass_from_force { mass * force } else { mass };
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
            expelled,
        ]);
    }
}

/// Draws every source once a trial and makes all figures of the same draw. One vector a figure, in the order of [`DRAWN`].
pub fn trials(found: &Found, effects: &[Effect], count: usize) -> Vec<Vec<f64>> {
    let sources: Vec<Source> = effects.iter().map(Effect::drawn_by).collect();
    let model = Model::new(found, effects);
    monte_carlo::propagate(count, &sources, DRAWN.len(), monte_carlo::SEED, |drawn, out| model.figures(drawn, out))
}

/// What one standard uncertainty of each source does to each figure, in the order of [`DRAWN`].
pub fn first_order(found: &Found, effects: &[Effect]) -> Vec<Propagated> {
    let model = Model::new(found, effects);
    let moved = propagation::effects(effects.len(), DRAWN.len(), |drawn, out| model.figures(drawn, out));
    (0..DRAWN.len())
        .map(|figure| Propagated::of(effects, &moved.iter().map(|of| of[figure]).collect::<Vec<f64>>()))
        .collect()
}

/// A figure's effects, by source, in the figure's unit.
#[derive(Debug, Clone, PartialEq)]
pub struct Propagated {
    pub lines: Vec<(String, f64)>,
    pub combined: Combined,
}

impl Propagated {
    /// Collects one figure's effects; sources of one name are independent parts of it and add in quadrature.
    pub fn collect(effects: &[Effect], of: impl Fn(&Effect) -> f64) -> Self {
        Self::of(effects, &effects.iter().map(of).collect::<Vec<f64>>())
    }

    /// As [`Propagated::collect`], with what each source does to the figure.
    fn of(effects: &[Effect], moved: &[f64]) -> Self {
        let mut squares: Vec<(&str, f64)> = Vec::new();
        for (effect, e) in effects.iter().zip(moved).filter(|(_, e)| **e != 0.0) {
            match squares.iter_mut().find(|(s, _)| *s == effect.source) {
                Some((_, sum)) => *sum += e * e,
                None => squares.push((&effect.source, e * e)),
            }
        }
        let sources: Vec<Source> = effects.iter().map(Effect::drawn_by).collect();
        Propagated {
            lines: squares.into_iter().map(|(s, v)| (s.to_string(), v.sqrt())).collect(),
            combined: propagation::combine(moved, &sources),
        }
    }

    pub fn standard_uncertainty(&self) -> f64 {
        self.combined.standard_uncertainty
    }

    /// Budget, largest first; shares add up to 1.
    pub fn budget(&self) -> Vec<BudgetLine> {
        let variance: f64 = self.lines.iter().map(|(_, u)| u * u).sum();
        let mut lines: Vec<BudgetLine> = self
            .lines
            .iter()
            .map(|(source, u)| BudgetLine {
                source: source.clone(),
                standard_uncertainty: *u,
                share: u * u / variance,
                improvement: None,
            })
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
                let half = if u > 0.0 { propagated.combined.half_width(monte_carlo::CONTENT) } else { 0.0 };
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

    fn found(mass_from_force: bool) -> Found {
        let amounts = Effect {
            total_impulse: 303.0,
            burn_impulse: 300.0,
            burn_time: 3.0,
            peak_thrust: 150.0,
            propellant_mass: 0.16,
            ..Effect::default()
        };
        Found { amounts, mass_from_force }
    }

    fn place(key: &str) -> usize {
        DRAWN.iter().position(|k| *k == key).expect("a figure")
    }

    /// Standard uncertainties by both ways.
    fn both(found: &Found, effects: &[Effect], key: &str) -> [f64; 2] {
        let first = first_order(found, effects)[place(key)].standard_uncertainty();
        let mut drawn = trials(found, effects, 40_000).swap_remove(place(key));
        [first, monte_carlo::spread(&mut drawn).expect("a spread").standard_deviation]
    }

    #[test]
    fn a_shared_clock_cancels_in_a_mean() {
        let clock = Effect { acts: Acts::StretchesTime(0.003), ..Effect::of("clock") };
        let found = found(false);
        assert!(both(&found, std::slice::from_ref(&clock), "average_thrust").iter().all(|u| *u < 1e-9));
        assert!(both(&found, std::slice::from_ref(&clock), "burn_time").iter().all(|u| (u / 0.009 - 1.0).abs() < 0.02));
    }

    /// A mass told by the same force as the impulse: their ratio knows nothing of the force.
    #[test]
    fn a_shared_force_cancels_in_specific_impulse() {
        let ratio = [Effect { acts: Acts::DividesForce(0.01), ..Effect::of("force ratio") }];
        assert!(both(&found(true), &ratio, "specific_impulse").iter().all(|u| *u < 1e-9));
        let specific = 303.0 / (0.16 * STANDARD_GRAVITY_M_S2);
        for u in both(&found(false), &ratio, "specific_impulse") {
            assert!((u / (0.01 * specific) - 1.0).abs() < 0.02, "{u}");
        }
    }

    /// Products and quotients by hand (JCGM 100:2008 5.1.6: relative variances add up).
    #[test]
    fn relative_uncertainties_of_a_quotient_add_in_quadrature() {
        let effects = [
            Effect { burn_impulse: 1.5, ..Effect::of("zero") },
            Effect { burn_time: 0.02, ..Effect::of("ends").shaped(Shape::Rectangular) },
        ];
        let expected = 100.0 * (1.5f64 / 300.0).hypot(0.02 / 3.0);
        for u in both(&found(false), &effects, "average_thrust") {
            assert!((u / expected - 1.0).abs() < 0.02, "{u} {expected}");
        }
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
