//! The stated uncertainty against brute force: everything hidden is drawn anew, and the whole program is run on each.
//!
//! One motor is fired many times. Each time the noise, the place of the samples, the weights of the calibration and its readings, the
//! logger's clock and the weighing err anew within what the files state. The figures' scatter about the truth is held
//! against the standard uncertainties stated, and those against the Monte Carlo intervals. `-- --nocapture` shows the ratios.

mod simulator;

use burntally::firing::{Figure, Firing};
use burntally::load::load_run;
use burntally::reduce::reduce;
use burntally::uncertainty::effects::DRAWN;
use rand::{RngExt, SeedableRng};
use rayon::prelude::*;
use simulator::cell::Cell;
use simulator::logger::Logger;
use simulator::motor::Motor;
use simulator::random::{KINDS, random_scenario_kind};
use simulator::stand::{Orientation, Stand};
use simulator::{Scenario, Simulated, Truth};

/// `BURNTALLY_FIRINGS=N` takes more.
fn count() -> u64 {
    std::env::var("BURNTALLY_FIRINGS").ok().and_then(|n| n.parse().ok()).unwrap_or(100)
}

/// The same firing with other hidden errors.
fn again(scenario: &Scenario, number: u64) -> (Firing, Truth) {
    let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(7_000 + number);
    let mut scenario = scenario.clone();
    scenario.seed = 40_000 + number;
    scenario.cell.calibration_seed = 80_000 + number;
    scenario.before_s += random.random::<f64>() / scenario.logger.rate_hz;
    let percent = scenario.logger.clock_tolerance.as_deref().and_then(|t| t.strip_suffix(" %")?.parse::<f64>().ok());
    scenario.logger.clock_error = percent.map_or(0.0, |p| 0.01 * p * random.random_range(-1.0..1.0));
    let simulated = scenario.simulate();
    (reduced(&simulated), simulated.truth)
}

fn reduced(simulated: &Simulated) -> Firing {
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    let inputs = load_run(&path).unwrap_or_else(|problem| panic!("{problem}"));
    reduce(&inputs).unwrap_or_else(|problem| panic!("{problem}")).firing
}

struct Row {
    name: &'static str,
    found: fn(&Firing) -> &Option<Figure>,
    truth: fn(&Truth) -> f64,
    /// Scatter over stated uncertainty: what is allowed beside the scatter's own chance. Never more than stated. Less where what is
    /// stated allows for what this motor does not do: edges between two samples, and a course of the zero that does not drift here.
    allowed: std::ops::RangeInclusive<f64>,
}

fn hold(scenario: &Scenario, rows: &[Row]) {
    let n = count() as f64;
    let firings: Vec<(Firing, Truth)> = (0..count()).into_par_iter().map(|n| again(scenario, n)).collect();
    let mut failures = Vec::new();
    for row in rows {
        let (mut errors, mut stated, mut held) = (0.0, 0.0, 0);
        for (firing, truth) in &firings {
            let figure = (row.found)(firing).as_ref().expect(row.name);
            let truth = (row.truth)(truth);
            errors += (figure.value - truth).powi(2);
            stated += figure.standard_uncertainty.expect("u").powi(2);
            let [low, high] = figure.interval_95.expect("an interval");
            held += u32::from((low..=high).contains(&truth));
        }
        let ratio = (errors / stated).sqrt();
        println!("{:<18} scatter / stated {ratio:.3}  held {:.3}", row.name, f64::from(held) / n);
        // A root mean square of n errors is itself uncertain by 1/√(2n); three of that.
        let chance = 3.0 / (2.0 * n).sqrt();
        if ratio < row.allowed.start() - chance || ratio > row.allowed.end() + chance {
            failures.push(format!("{}: errors are {ratio:.3} of what is stated", row.name));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}

fn row(
    name: &'static str,
    found: fn(&Firing) -> &Option<Figure>,
    truth: fn(&Truth) -> f64,
    allowed: std::ops::RangeInclusive<f64>,
) -> Row {
    Row { name, found, truth, allowed }
}

#[test]
fn a_horizontal_firing_scatters_as_stated() {
    let scenario = Scenario {
        motor: Motor { roughness: 0.0, ..Motor::default() },
        cell: Cell { weight_tolerance: 1e-3, noise_n: 3.0, ..Cell::default() },
        logger: Logger { rate_hz: 300.0, clock_tolerance: Some("0.1 %".into()), ..Logger::default() },
        ..Scenario::default()
    };
    hold(
        &scenario,
        &[
            row("total impulse", |f| &f.quantities.total_impulse, |t| t.total_impulse_n_s, 0.9..=1.0),
            row("burn time", |f| &f.quantities.burn_time, |t| t.burn_time_s, 0.5..=1.0),
            row("average thrust", |f| &f.quantities.average_thrust, |t| t.average_thrust_n, 0.5..=1.0),
            row("specific impulse", |f| &f.quantities.specific_impulse, |t| t.specific_impulse_s, 0.9..=1.0),
            row("propellant mass", |f| &f.quantities.propellant_mass, |t| t.propellant_mass_kg, 0.9..=1.0),
            row("initial thrust", |f| &f.quantities.initial_thrust, |t| t.initial_thrust_n, 0.5..=1.0),
            row("action time", |f| &f.quantities.action_time, |t| t.action_time_s, 0.5..=1.0),
        ],
    );
}

/// Propellant mass from the weight that left the stand: the cell's slope cancels in specific impulse.
#[test]
fn a_nozzle_up_firing_scatters_as_stated() {
    let scenario = Scenario {
        motor: Motor { roughness: 0.0, ..Motor::default() },
        stand: Stand { orientation: Orientation::NozzleUp, ..Stand::default() },
        cell: Cell { weight_tolerance: 2e-3, ..Cell::default() },
        logger: Logger { rate_hz: 300.0, ..Logger::default() },
        propellant_told: false,
        ..Scenario::default()
    };
    hold(
        &scenario,
        &[
            row("total impulse", |f| &f.quantities.total_impulse, |t| t.total_impulse_n_s, 0.9..=1.0),
            row("specific impulse", |f| &f.quantities.specific_impulse, |t| t.specific_impulse_s, 0.9..=1.0),
            row("propellant mass", |f| &f.quantities.propellant_mass, |t| t.propellant_mass_kg, 0.9..=1.0),
            row("average thrust", |f| &f.quantities.average_thrust, |t| t.average_thrust_n, 0.5..=1.0),
        ],
    );
}

/// The first-order uncertainty and the Monte Carlo interval of every figure, over all kinds of firings.
///
/// A half-width is 1.96 u where normal errors rule, 0.95 √3 u = 1.65 u where one rectangular error does, and that of Student's t with
/// 14 degrees of freedom, those of a line through sixteen calibration points, 2.14 u where the fit does. An interval's end scatters
/// by some 0.01 u with 50,000 trials (four of that allowed), and quotients lean by less.
#[test]
fn both_ways_of_propagation_agree() {
    let mut compared = 0;
    let mut said = 0;
    for (kind, seed) in KINDS.iter().flat_map(|kind| [(kind, 71), (kind, 72)]) {
        let mut firing = reduced(&random_scenario_kind(*kind, seed).simulate());
        said += usize::from(firing.provenance.findings.iter().any(|f| f.contains("JCGM 101:2008 8.1")));
        for key in DRAWN {
            let Some(figure) = firing.quantities.by_key_mut(key) else { continue };
            let u = figure.standard_uncertainty.expect("u");
            let [low, high] = figure.interval_95.expect("an interval").map(|end| (end - figure.value) / u);
            assert!((1.61..2.18).contains(&(0.5 * (high - low))), "{kind:?}-{seed} {key}: {low} to {high} u");
            assert!((high + low).abs() < 0.15, "{kind:?}-{seed} {key}: {low} to {high} u");
            compared += 1;
        }
        let trials = firing.provenance.monte_carlo.expect("how the intervals were drawn").trials;
        assert_eq!(trials, 50_000);
    }
    assert!(compared > 100 && said > 0, "{compared} {said}");
}

/// Where nobody knows gravity and one gravity made both the force of the weights and the mass of the propellant: the force and
/// specific impulse owe to it, the mass does not.
#[test]
fn one_gravity_for_weights_and_propellant_cancels_in_the_mass() {
    let scenario = Scenario {
        stand: Stand { orientation: Orientation::NozzleUp, ..Stand::default() },
        propellant_told: false,
        ..Scenario::default()
    };
    let mut simulated = scenario.simulate();
    for (path, bytes) in &mut simulated.files {
        if path.extension().is_some_and(|e| e == "toml") {
            let text = String::from_utf8(std::mem::take(bytes)).expect("text");
            *bytes =
                text.lines().filter(|l| !l.starts_with("gravity")).map(|l| format!("{l}\n")).collect::<String>().into();
        }
    }
    let mut firing = reduced(&simulated);
    let mut gravity = |key: &str| {
        let lines = &firing.uncertainty_budget[key];
        let u = lines.iter().find(|l| l.source == "gravity").map_or(0.0, |l| l.standard_uncertainty);
        u / firing.quantities.by_key_mut(key).expect("a figure").value
    };
    // 9.807 ± 0.026: limits. The scale's error is taken over all the force that came on the cell, from which the weight that left
    // it (here 1.2 % of the thrust) is missing.
    let expected = 0.026 / 3f64.sqrt() / 9.807;
    assert!((gravity("total_impulse") / expected - 1.0).abs() < 0.02);
    assert!((gravity("specific_impulse") / expected - 1.0).abs() < 0.02);
    assert_eq!(gravity("propellant_mass"), 0.0);
}
