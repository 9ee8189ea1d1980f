//! Figures from simulated pressure channels against the truth behind them.

mod simulator;

use burntally::firing::{Figure, Firing, Quantities};
use burntally::load::load_run;
use burntally::problem::Problem;
use burntally::reduce::{Reduction, reduce};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;
use simulator::motor::{Body, Motor, RiseKind, TailKind};
use simulator::random::{Kind, random_scenario_kind};
use simulator::{PressureChannel, Scenario, Truth};

/// A firing with a chamber-pressure channel whose every input is off by a hidden part of its stated limits. Odd seeds gauge, even
/// ones absolute; every third throat wears, every fourth run states no air pressure.
fn scenario(kind: Kind, seed: u64) -> Scenario {
    let mut rng = ChaCha8Rng::seed_from_u64(seed ^ 0x7072_6573_7375_7265);
    let mut within = |limits: f64| rng.random_range(-limits..limits);
    let mut scenario = random_scenario_kind(kind, seed);
    let throat_diameter_m = 0.0095 + within(0.003);
    let area = 0.25 * std::f64::consts::PI * throat_diameter_m * throat_diameter_m;
    let highest_pa = 4e6 + within(2e6);
    let gauge = seed % 2 == 1;
    // 978 hPa ± 2 hPa are stated, or 1013 hPa ± 30 hPa assumed.
    let told = !seed.is_multiple_of(4);
    let air_pressure_pa = if told { 97_800.0 + within(200.0) } else { 101_325.0 + within(3000.0) };
    scenario.pressure = Some(PressureChannel {
        gauge,
        thrust_coefficient: scenario.motor.peak_n / (area * highest_pa),
        throat_diameter_m,
        air_pressure_pa,
        noise_pa: highest_pa * (0.003 + within(0.002)),
        accuracy: "0.1 %",
        scale_error: within(0.001),
        // A gauge transducer's zero is anywhere; that of an absolute one is a part of its stated accuracy.
        zero_pa: if gauge { within(20_000.0) } else { 0.0 },
        throat_after_m: seed.is_multiple_of(3).then(|| throat_diameter_m * (1.01 + within(0.01))),
        throat_error_m: within(2e-5),
        web_thickness_m: Some(0.011),
        web_error_m: within(5e-5),
        ..PressureChannel::default()
    });
    if told {
        scenario.conditions = vec![("air_pressure".into(), "\"978 ± 2 hPa\"".into())];
    }
    scenario
}

fn try_fire(scenario: &Scenario, change: impl Fn(String) -> String) -> (Result<Reduction, Problem>, Truth) {
    let simulated = scenario.simulate();
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    let text = std::fs::read_to_string(&path).expect("run.toml");
    std::fs::write(&path, change(text)).expect("run.toml");
    (load_run(&path).and_then(|inputs| reduce(&inputs)), simulated.truth)
}

fn fire(scenario: &Scenario) -> (Reduction, Truth) {
    let (reduction, truth) = try_fire(scenario, |text| text);
    (reduction.unwrap_or_else(|problem| panic!("{}: {problem}", scenario.id)), truth)
}

fn says(firing: &Firing, words: &str) -> bool {
    firing.provenance.findings.iter().any(|f| f.contains(words))
}

/// A tail that begins in a corner: there is no other opinion on where the web ends.
fn corner(motor: &Motor) -> bool {
    motor.tail != TailKind::Cosine
}

struct Row {
    name: &'static str,
    found: fn(&Quantities) -> &Option<Figure>,
    truth: fn(&Truth) -> Option<f64>,
}

const ROWS: [Row; 5] = [
    Row { name: "peak pressure", found: |q| &q.peak_pressure, truth: |t| t.peak_pressure_pa },
    Row { name: "mean pressure", found: |q| &q.mean_pressure, truth: |t| t.mean_pressure_pa },
    Row {
        name: "characteristic velocity",
        found: |q| &q.characteristic_velocity,
        truth: |t| t.characteristic_velocity_m_s,
    },
    Row { name: "thrust coefficient", found: |q| &q.thrust_coefficient, truth: |t| t.thrust_coefficient },
    Row { name: "burn rate", found: |q| &q.burn_rate, truth: |t| t.burn_rate_m_s },
];

/// `BURNTALLY_FIRST_SEED` takes other firings than those of every day.
fn first_seed() -> u64 {
    std::env::var("BURNTALLY_FIRST_SEED").ok().and_then(|s| s.parse().ok()).unwrap_or(70_000)
}

/// Firings of a kind.
fn cases(kind: Kind, count: u64) -> Vec<(Scenario, Reduction, Truth)> {
    let first = first_seed();
    (first + 1..=first + count)
        .into_par_iter()
        .map(|seed| {
            let scenario = scenario(kind, seed);
            let (reduction, truth) = fire(&scenario);
            (scenario, reduction, truth)
        })
        .collect()
}

#[test]
fn intervals_of_pressure_figures_hold_the_truth() {
    let all: Vec<(Scenario, Reduction, Truth)> = [
        (Kind::Plain, 60),
        (Kind::Noisy, 20),
        (Kind::Truncated, 20),
        (Kind::Averaging80Hz, 20),
        (Kind::Averaging10Hz, 10),
    ]
    .into_iter()
    .flat_map(|(kind, count)| cases(kind, count))
    .collect();
    let mut failures = Vec::new();
    for row in &ROWS {
        let (mut held, mut none, mut errors, mut widths) = (0_u32, 0_u32, Vec::new(), Vec::new());
        for (scenario, reduction, truth) in &all {
            if row.name == "burn rate" && !corner(&scenario.motor) {
                continue;
            }
            let Some(figure) = (row.found)(&reduction.firing.quantities).as_ref() else {
                // A tail-off without a knee is said, and gives no rate.
                if row.name == "burn rate" && says(&reduction.firing, "no knee in the pressure's tail-off") {
                    println!("  no knee: {} {:?}", scenario.id, scenario.motor);
                    none += 1;
                    continue;
                }
                failures.push(format!("{}: no {}", scenario.id, row.name));
                continue;
            };
            let truth = (row.truth)(truth).expect("a truth");
            let [low, high] = figure.interval_95.expect("an interval");
            let u = figure.standard_uncertainty.expect("an uncertainty");
            let inside = (low..=high).contains(&truth);
            held += u32::from(inside);
            errors.push((figure.value / truth - 1.0).abs());
            widths.push(0.5 * (high - low) / truth);
            if !inside {
                println!(
                    "  {} {} ({} Hz {:?} {:?} {:.2} s): {:+.3} %, {:+.1} u",
                    row.name,
                    scenario.id,
                    scenario.logger.rate_hz,
                    scenario.motor.body,
                    scenario.motor.tail,
                    scenario.motor.tail_s / scenario.motor.body_s,
                    100.0 * (figure.value / truth - 1.0),
                    (figure.value - truth) / u
                );
            }
            // The peak is found as that of thrust is, whose fit is at times far more off than it says (DEVELOPERS.md): it is
            // held to 2 %. No other figure may lie five standard uncertainties off.
            let far = match row.name {
                "peak pressure" => (figure.value / truth - 1.0).abs() > 0.02,
                _ => (figure.value - truth).abs() > 5.0 * u,
            };
            if far {
                failures.push(format!("{}: {} {} and not {truth}, u {u}", scenario.id, row.name, figure.value));
            }
        }
        errors.sort_by(f64::total_cmp);
        widths.sort_by(f64::total_cmp);
        let n = errors.len();
        println!(
            "{:<24} error median {:.3} % largest {:.3} %; ± median {:.3} %; covered {held} of {n}",
            row.name,
            100.0 * errors[n / 2],
            100.0 * errors[n - 1],
            100.0 * widths[n / 2],
        );
        // 95 % less three standard deviations of a count of n.
        let least = 0.95 * n as f64 - 3.0 * (0.95 * 0.05 * n as f64).sqrt();
        if none > 3 {
            failures.push(format!("{none} firings without a knee"));
        }
        if f64::from(held) < least {
            failures.push(format!("{}: {held} of {n} intervals hold the truth", row.name));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}

/// 1 kHz, 400 N, 2 s at an even thrust.
fn trapezoid() -> Scenario {
    let mut scenario = scenario(Kind::Plain, 70_001);
    scenario.motor = Motor {
        peak_n: 400.0,
        body: Body::Neutral,
        body_s: 2.0,
        rise: RiseKind::Linear,
        rise_s: 0.05,
        tail: TailKind::Linear,
        tail_s: 0.3,
        propellant_mass_kg: 0.4,
        ..Motor::default()
    };
    scenario.logger.rate_hz = 1000.0;
    scenario
}

/// A trapezoid of thrust ends its web where its level part does.
#[test]
fn the_web_burns_out_at_the_knee() {
    let (reduction, _) = fire(&trapezoid());
    let rate = reduction.firing.quantities.burn_rate.expect("a burn rate");
    // From 10 % of the rise, 5 ms, to the knee at 2 s; noise of 0.2 % of peak blurs the knee by some samples.
    let expected = 0.011 / (2.0 - 0.005);
    assert!((rate.value / expected - 1.0).abs() < 0.01, "{rate:?} {expected}");
}

#[test]
fn what_is_not_given_is_null() {
    let mut plain = scenario(Kind::Plain, 70_002);
    plain.pressure = None;
    let q = fire(&plain).0.firing.quantities;
    assert!(ROWS.iter().all(|row| (row.found)(&q).is_none()));
    let mut bare = scenario(Kind::Plain, 70_002);
    bare.propellant_told = false;
    bare.stand.orientation = simulator::stand::Orientation::Horizontal;
    let without = |key: &'static str| {
        move |text: String| text.lines().filter(|l| !l.starts_with(key)).map(|l| format!("{l}\n")).collect::<String>()
    };
    let (reduction, _) = try_fire(&bare, |text| without("throat")(without("web")(text)));
    let reduction = reduction.unwrap_or_else(|p| panic!("{p}"));
    let q = reduction.firing.quantities;
    assert!(q.burn_rate.is_none() && q.characteristic_velocity.is_none() && q.thrust_coefficient.is_none());
    assert!(q.peak_pressure.is_some() && q.mean_pressure.is_some() && reduction.curves.pressure_pa.is_some());
}

/// The error of a length that states none is not known, and neither is that of what is made of it.
#[test]
fn lengths_without_limits_have_no_uncertainty() {
    let mut s = scenario(Kind::Plain, 70_003);
    if let Some(p) = &mut s.pressure {
        (p.throat_limits_m, p.web_limits_m) = (None, None);
    }
    let firing = fire(&s).0.firing;
    let q = &firing.quantities;
    for figure in [&q.characteristic_velocity, &q.thrust_coefficient, &q.burn_rate] {
        let figure = figure.as_ref().expect("a figure");
        assert!(figure.standard_uncertainty.is_none() && figure.interval_95.is_none(), "{figure:?}");
    }
    assert!(q.peak_pressure.as_ref().is_some_and(|f| f.interval_95.is_some()));
    assert!(says(&firing, "no limits are given for a throat diameter") && says(&firing, "for the web thickness"));
}

#[test]
fn a_gauge_says_what_air_was_added_and_a_zero_that_moved() {
    let told = scenario(Kind::Plain, 70_001);
    assert!(says(
        &fire(&told).0.firing,
        "978.0 hPa ± 2.0 hPa as stated under [conditions]; added to the gauge pressure"
    ));
    let mut untold = scenario(Kind::Plain, 70_001);
    untold.conditions.clear();
    assert!(says(&fire(&untold).0.firing, "1013 hPa ± 30 hPa taken from the standard atmosphere at sea level"));
    // A gauge reading that run.toml calls absolute starts near nil where there should be air.
    let (wrong, _) = try_fire(&told, |text| text.replace("reference = \"gauge\"", "reference = \"absolute\""));
    assert!(says(&wrong.unwrap_or_else(|p| panic!("{p}")).firing, "is it a gauge one?"));
}

#[test]
fn two_pressure_channels_are_refused_in_words() {
    let s = scenario(Kind::Plain, 70_001);
    let (refused, _) = try_fire(&s, |text| {
        let from = text.find("[[channel]]\nrole = \"pressure\"").expect("a pressure channel");
        let to = text[from..].find("\n\n").map_or(text.len(), |k| from + k);
        format!("{}{}\n\n{}", &text[..from], &text[from..to], &text[from..])
    });
    let problem = refused.expect_err("two channels");
    assert!(problem.found.contains("two channels"), "{problem}");
}

#[test]
fn a_dead_transducer_gives_no_figures() {
    let mut s = scenario(Kind::Plain, 70_001);
    if let Some(p) = &mut s.pressure {
        p.unit_pa = 1e12;
        p.noise_pa = 1e10;
    }
    let firing = fire(&s).0.firing;
    assert!(ROWS.iter().all(|row| (row.found)(&firing.quantities).is_none()));
    assert!(says(&firing, "does not rise during the burn"));
}

#[test]
fn a_cut_pressure_gives_bounds() {
    let mut s = trapezoid();
    if let Some(p) = &mut s.pressure {
        p.limit = Some(
            0.8 * 400.0 / (p.thrust_coefficient * 0.25 * std::f64::consts::PI * p.throat_diameter_m.powi(2)) / 1e5,
        );
    }
    let (reduction, truth) = fire(&s);
    let q = &reduction.firing.quantities;
    for row in &ROWS[..3] {
        let figure = (row.found)(q).as_ref().expect(row.name);
        assert_eq!(figure.bound.as_deref(), Some("lower"), "{}", row.name);
        assert!(figure.value < (row.truth)(&truth).expect("a truth"), "{}", row.name);
    }
    let coefficient = q.thrust_coefficient.as_ref().expect("a coefficient");
    assert_eq!(coefficient.bound.as_deref(), Some("upper"));
    assert!(coefficient.value > truth.thrust_coefficient.expect("a truth"));
    assert!(q.total_impulse.as_ref().is_some_and(|f| f.bound.is_none() && f.estimate.is_none()));
}

/// Thrust over pressure is judged steady on sound firings, and a lost part of the nozzle is seen where it went.
#[test]
fn a_lost_nozzle_shows() {
    let false_alarms: Vec<String> = cases(Kind::Plain, 40)
        .into_iter()
        .filter(|(_, reduction, _)| says(&reduction.firing, "CAUTION: thrust over pressure"))
        .map(|(scenario, ..)| scenario.id)
        .collect();
    assert!(false_alarms.is_empty(), "{false_alarms:?}");
    let mut s = trapezoid();
    if let Some(p) = &mut s.pressure {
        p.nozzle_lost = Some((0.6, 0.85));
    }
    let firing = fire(&s).0.firing;
    assert!(says(&firing, "thrust over pressure steps by -1"), "{:?}", firing.provenance.findings);
}

/// Thrust cut at 60 to 95 % of its peak, with and without a pressure trace.
#[test]
fn what_was_cut_off_is_estimated_beside_the_bound() {
    let outcomes: Vec<(String, Firing, Truth)> = (first_seed() + 1001..first_seed() + 1041)
        .into_par_iter()
        .map(|seed| {
            let mut s = scenario(Kind::Plain, seed);
            s.cell.pulls = false;
            s.stand.hits.clear();
            s.logger.glitches = 0;
            s.stand.orientation = simulator::stand::Orientation::Horizontal;
            let share = 0.6 + 0.05 * (seed % 8) as f64;
            s.logger.limits = Some((-1e12, s.cell.reading(share * s.motor.peak_n).round()));
            let (reduction, truth) = fire(&s);
            let p = s.pressure.as_ref().expect("a channel");
            let growth = p.throat_after_m.map_or(0.0, |d| (d / p.throat_diameter_m).powi(2) - 1.0);
            let id = format!(
                "{} {} Hz cut at {share:.2} growth {growth:.3} {:?} {:?} {:.2}",
                s.id, s.logger.rate_hz, s.motor.body, s.motor.tail, s.motor.tail_s
            );
            (id, reduction.firing, truth)
        })
        .collect();
    let (mut held, mut estimates, mut failures) = (0_u32, 0_u32, Vec::new());
    let mut errors = [Vec::new(), Vec::new()];
    for (id, firing, truth) in &outcomes {
        let q = &firing.quantities;
        let rows = [(&q.total_impulse, truth.total_impulse_n_s), (&q.peak_thrust, truth.peak_thrust_n)];
        for (k, (figure, truth)) in rows.into_iter().enumerate() {
            let figure = figure.as_ref().expect("a figure");
            let Some(estimate) = &figure.estimate else {
                println!("  {id}: none: {:?}", firing.provenance.findings.iter().find(|f| f.contains("estimate")));
                continue;
            };
            assert!(says(firing, "ESTIMATE, not measured"));
            // The bound stays what was measured, and lies below.
            assert_eq!(figure.bound.as_deref(), Some("lower"));
            assert!(estimate.value >= figure.value && figure.value < 1.002 * truth, "{id} {figure:?} {truth}");
            let [low, high] = estimate.interval_95.expect("an interval");
            estimates += 1;
            held += u32::from((low..=high).contains(&truth));
            let error = estimate.value / truth - 1.0;
            errors[k].push(error.abs());
            if !(low..=high).contains(&truth) {
                println!("  {id} {k}: {:+.2} %, [{low:.2}, {high:.2}] not {truth:.2}", 100.0 * error);
            }
            if error.abs() > 0.05 {
                failures.push(format!("{id}: {:+.2} %", 100.0 * error));
            }
        }
    }
    for (name, errors) in ["impulse", "peak"].into_iter().zip(&mut errors) {
        errors.sort_by(f64::total_cmp);
        let n = errors.len();
        println!("{name}: error median {:.2} % largest {:.2} % of {n}", 100.0 * errors[n / 2], 100.0 * errors[n - 1]);
    }
    println!("covered {held} of {estimates}");
    let n = f64::from(estimates);
    assert!(failures.is_empty(), "{failures:?}");
    assert!(estimates >= 60 && f64::from(held) > 0.95 * n - 3.0 * (0.95 * 0.05 * n).sqrt(), "{held} of {estimates}");
}

#[test]
fn without_pressure_nothing_is_made_up_for_what_was_cut() {
    let mut s = scenario(Kind::Plain, 71_002);
    s.cell.pulls = false;
    s.pressure = None;
    s.logger.limits = Some((-1e12, s.cell.reading(0.8 * s.motor.peak_n).round()));
    let firing = fire(&s).0.firing;
    assert!(firing.quantities.total_impulse.as_ref().is_some_and(|f| f.estimate.is_none() && f.bound.is_some()));
    assert!(says(&firing, "no estimate of what was cut off: there is no pressure trace"));
}
