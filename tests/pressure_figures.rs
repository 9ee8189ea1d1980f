//! Figures from simulated pressure channels against the truth behind them.

mod simulator;

use burntally::firing::{Figure, Quantities};
use burntally::load::load_run;
use burntally::reduce::{Reduction, reduce};
use rayon::prelude::*;
use simulator::random::{Kind, random_scenario_kind};
use simulator::{PressureChannel, Scenario, Truth};

/// A plain firing with a chamber-pressure channel: odd seeds gauge, even ones absolute.
fn scenario(seed: u64) -> Scenario {
    let mut scenario = random_scenario_kind(Kind::Plain, seed);
    let throat_diameter_m = 0.0095;
    let area = 0.25 * std::f64::consts::PI * throat_diameter_m * throat_diameter_m;
    let thrust_coefficient = scenario.motor.peak_n / (area * 4e6);
    scenario.pressure = Some(PressureChannel {
        unit: "bar",
        unit_pa: 1e5,
        gauge: seed % 2 == 1,
        thrust_coefficient,
        throat_diameter_m,
        air_pressure_pa: 97_800.0,
        noise_pa: 8e3,
        accuracy: "0.1 %",
        web_thickness_m: Some(0.011),
    });
    scenario.conditions = vec![("air_pressure".into(), "\"978 hPa\"".into())];
    scenario
}

fn fire(scenario: &Scenario) -> (Reduction, Truth) {
    let simulated = scenario.simulate();
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    let inputs = load_run(&path).unwrap_or_else(|problem| panic!("{}: {problem}", scenario.id));
    let reduction = reduce(&inputs).unwrap_or_else(|problem| panic!("{}: {problem}", scenario.id));
    (reduction, simulated.truth)
}

struct Row {
    name: &'static str,
    found: fn(&Quantities) -> &Option<Figure>,
    truth: fn(&Truth) -> Option<f64>,
    each: f64,
}

#[test]
fn pressure_figures_come_out_true() {
    let rows = [
        Row { name: "peak pressure", found: |q| &q.peak_pressure, truth: |t| t.peak_pressure_pa, each: 0.02 },
        Row { name: "mean pressure", found: |q| &q.mean_pressure, truth: |t| t.mean_pressure_pa, each: 0.01 },
        Row {
            name: "characteristic velocity",
            found: |q| &q.characteristic_velocity,
            truth: |t| t.characteristic_velocity_m_s,
            each: 0.005,
        },
        Row {
            name: "thrust coefficient",
            found: |q| &q.thrust_coefficient,
            truth: |t| t.thrust_coefficient,
            each: 0.005,
        },
    ];
    let cases: Vec<(String, f64, Reduction, Truth)> = (70_001..70_041_u64)
        .into_par_iter()
        .map(|seed| {
            let scenario = scenario(seed);
            let (reduction, truth) = fire(&scenario);
            let weighing = scenario.propellant_limits_kg / scenario.motor.propellant_mass_kg;
            (scenario.id, weighing, reduction, truth)
        })
        .collect();
    let mut failures = Vec::new();
    for row in &rows {
        let (mut within, mut errors) = (0, Vec::new());
        for (id, weighing, reduction, truth) in &cases {
            let figure = (row.found)(&reduction.firing.quantities).as_ref().expect(row.name);
            let truth = (row.truth)(truth).expect("a truth");
            let error = figure.value / truth - 1.0;
            let [low, high] = figure.interval_95.expect("an interval");
            within += usize::from((low..=high).contains(&truth));
            errors.push(error.abs());
            // A motor of a few grams is weighed to a tenth of one.
            let weighing = if row.name == "characteristic velocity" { *weighing } else { 0.0 };
            if error.abs() > row.each + weighing {
                failures.push(format!("{id}: {} off by {:.3} %", row.name, 100.0 * error));
            }
        }
        errors.sort_by(f64::total_cmp);
        println!(
            "{:<24} median {:.4} % largest {:.3} % covered {within} of {}",
            row.name,
            100.0 * errors[errors.len() / 2],
            100.0 * errors[errors.len() - 1],
            errors.len()
        );
        // 95 % of 40 is 38, less three standard deviations of 1.4.
        if within < 34 {
            failures.push(format!("{}: {within} of {} intervals hold the truth", row.name, errors.len()));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}

/// A trapezoid of thrust ends its web where its level part does.
#[test]
fn the_web_burns_out_at_the_knee() {
    let mut scenario = scenario(70_001);
    scenario.motor = simulator::motor::Motor {
        peak_n: 400.0,
        body: simulator::motor::Body::Neutral,
        body_s: 2.0,
        rise: simulator::motor::RiseKind::Linear,
        rise_s: 0.05,
        tail: simulator::motor::TailKind::Linear,
        tail_s: 0.3,
        propellant_mass_kg: 0.4,
        ..simulator::motor::Motor::default()
    };
    scenario.logger.rate_hz = 1000.0;
    let (reduction, _) = fire(&scenario);
    let rate = reduction.firing.quantities.burn_rate.expect("a burn rate");
    // From 10 % of the rise, 5 ms, to the knee at 2 s; noise of 0.2 % of peak blurs the knee by some samples.
    let expected = 0.011 / (2.0 - 0.005);
    assert!((rate.value / expected - 1.0).abs() < 0.01, "{rate:?} {expected}");
}

#[test]
fn what_is_not_given_is_null() {
    let mut plain = scenario(70_002);
    plain.pressure = None;
    let q = fire(&plain).0.firing.quantities;
    assert!(q.peak_pressure.is_none() && q.mean_pressure.is_none() && q.thrust_coefficient.is_none());
    let mut without_web = scenario(70_002);
    if let Some(p) = &mut without_web.pressure {
        p.web_thickness_m = None;
    }
    let (reduction, _) = fire(&without_web);
    assert!(reduction.firing.quantities.burn_rate.is_none() && reduction.firing.quantities.peak_pressure.is_some());
    assert!(reduction.curves.pressure_pa.is_some());
}
