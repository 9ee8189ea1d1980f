//! The stand's response: found, told by `inspect`, and taken out, against vectors computed elsewhere and simulated firings.

mod simulator;

use burntally::condition::response::{self, Response};
use burntally::load::load_run;
use burntally::reduce::{Reduction, reduce};
use rayon::prelude::*;
use simulator::Scenario;
use simulator::random::{Kind, random_scenario_kind};
use std::fmt::Write as _;

fn table(text: &str) -> Vec<Vec<f64>> {
    text.lines()
        .map(|l| l.split(',').filter_map(|x| x.parse().ok()).collect::<Vec<f64>>())
        .filter(|r| r.len() >= 3)
        .collect()
}

/// tests/reference/stand_deconvolution.csv, written by stand_deconvolution.py beside it (scipy.signal.lsim and scipy.fft). The inverse there
/// has a Gaussian of 1.5 ms; here its length follows from the noise, so that the noise is given that makes it as long.
#[test]
fn agrees_with_a_deconvolution_by_scipy() {
    let rows = table(include_str!("reference/stand_deconvolution.csv"));
    assert_eq!(rows.len(), 1400);
    let stand = Response { frequency_hz: 34.0, damping_ratio: 0.02 };
    let wanted_hz = (2.0 * 2f64.ln()).sqrt() / (std::f64::consts::TAU * 1.5e-3);
    let (mut low, mut high) = (1e-4, 0.1);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if response::band_end_hz(stand, 0.001, middle) > wanted_hz { low = middle } else { high = middle }
    }
    assert!((response::band_end_hz(stand, 0.001, low) / wanted_hz - 1.0).abs() < 1e-6);
    let kernel = response::kernel(stand, 0.001, low);
    let found = response::apply(&kernel, &rows.iter().map(|r| r[2]).collect::<Vec<f64>>());
    let top = rows.iter().map(|r| r[1]).fold(0.0, f64::max);
    let naive = rows.iter().map(|r| r[2]).fold(0.0, f64::max);
    assert!(naive > 1.5 * top, "the reading overshoots: {naive} over {top}");
    // Beyond 1.2 s the script fades its record out. The kernel ends at five standard deviations (4e-6 of it is cut off) and its
    // derivatives are of the sampled Gaussian, which differ from those of the continuous one by (dt/s)² and less.
    let worst = rows.iter().zip(&found).filter(|(r, _)| r[0] < 1.2).map(|(r, f)| (f - r[3]).abs()).fold(0.0, f64::max);
    assert!(worst < 1e-3 * top, "{worst} of {top}");
    let peak = found.iter().copied().fold(0.0, f64::max);
    let peak_by_scipy = rows.iter().map(|r| r[3]).fold(0.0, f64::max);
    assert!(
        (peak / peak_by_scipy - 1.0).abs() < 1e-4 && (peak / top - 1.0).abs() < 0.002,
        "{peak} {peak_by_scipy} {top}"
    );
}

/// tests/reference/item09_dynamics.json tells peak and impulse of the trapezoid and of its response.
#[test]
fn the_reference_trapezoid_keeps_its_impulse() {
    let text = include_str!("reference/item09_dynamics.json");
    let all: serde_json::Value = serde_json::from_str(text).expect("JSON");
    let told = |key: &str| all["sdof_trapezoid"][key].as_f64().expect("a number");
    let rows = table(include_str!("reference/sdof_trapezoid_fn38_zeta003_1kHz.csv"));
    let stand = Response { frequency_hz: told("fn_Hz"), damping_ratio: told("zeta") };
    let reading: Vec<f64> = rows.iter().map(|r| r[2]).collect();
    let naive = reading.iter().copied().fold(0.0, f64::max);
    assert!((naive / told("response_peak_N") - 1.0).abs() < 1e-3, "{naive}");
    let found = response::apply(&response::kernel(stand, 0.001, 1e-5), &reading);
    let sum = |f: &[f64]| f.windows(2).map(|w| 0.5 * (w[0] + w[1]) * 0.001).sum::<f64>();
    assert!((sum(&found) / told("true_impulse_Ns") - 1.0).abs() < 1e-4, "{}", sum(&found));
    let peak = found.iter().copied().fold(0.0, f64::max);
    assert!((peak / told("true_peak_N") - 1.0).abs() < 0.005, "{peak}");
}

fn reduced(scenario: &Scenario) -> (Reduction, simulator::Truth) {
    let simulated = scenario.simulate();
    let dir = tempfile::tempdir().expect("a folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    (reduce(&load_run(&path).expect("inputs")).expect("a reduction"), simulated.truth)
}

/// Frequency and damping as found, where run.toml does not tell them.
#[test]
fn frequency_and_damping_come_from_the_record() {
    let scenarios: Vec<Scenario> =
        (1..=20).map(|seed| random_scenario_kind(Kind::Ringing, seed)).filter(|s| !s.stand.resonance_told).collect();
    assert!(scenarios.len() > 5);
    scenarios.par_iter().for_each(|scenario| {
        let stand = reduced(scenario).0.firing.stand.expect("a stand");
        assert_eq!(stand.source, "ring after ignition");
        assert!((stand.natural_frequency_hz / 34.0 - 1.0).abs() < 0.01, "{}: {stand:?}", scenario.id);
        assert!(stand.damping_ratio.is_some_and(|z| (z / 0.02 - 1.0).abs() < 0.2), "{}: {stand:?}", scenario.id);
    });
}

/// The mass on the spring falls by 10 to 40 %: ignition is seen through with the ring after ignition, burn-out with that after it.
#[test]
fn a_stand_that_grows_lighter() {
    let results: Vec<(String, f64, f64, bool)> = (1..=8)
        .into_par_iter()
        .map(|seed| {
            let scenario = random_scenario_kind(Kind::RingingLighter, seed);
            let (reduction, truth) = reduced(&scenario);
            let q = &reduction.firing.quantities;
            let off = |f: &Option<burntally::firing::Figure>, t: f64| f.as_ref().map_or(1.0, |f| f.value / t - 1.0);
            let words = &reduction.firing.conditioning.filter;
            let found = reduction.firing.stand.as_ref().map_or(0.0, |s| s.natural_frequency_hz);
            assert!((found / 34.0 - 1.0).abs() < 0.01, "{}: {found}", scenario.id);
            let rises = words.contains("Hz at ignition, ") && words.contains("Hz after burn-out");
            (scenario.id, off(&q.peak_thrust, truth.peak_thrust_n), off(&q.burn_time, truth.burn_time_s), rises)
        })
        .collect();
    for (id, peak, burn_time, _) in &results {
        assert!(peak.abs() < 0.005 && burn_time.abs() < 0.003, "{id}: peak {peak}, burn time {burn_time}");
    }
    // After a slow tail nothing rings, and one frequency has to do.
    let rising = results.iter().filter(|r| r.3).count();
    assert!(rising >= 4, "{rising} of 8");
}

/// Someone taps an empty stand three times: `inspect` tells frequency and damping.
#[test]
fn inspect_reads_a_tap_test() {
    let dir = tempfile::tempdir().expect("a folder");
    let mut text = String::from("time_s,load_N\n");
    let (hz, damping) = (41.5, 0.025);
    let step = 5e-5;
    let force: Vec<f64> = (0..160_000)
        .map(|i| {
            let t = f64::from(i) * step;
            // A tap of 6 ms.
            [2.0, 4.0, 6.0].iter().map(|at| if (0.0..0.006).contains(&(t - at)) { 400.0 } else { 0.0 }).sum()
        })
        .collect();
    let reading = simulator::stand::second_order(&force, step, hz, damping, 0);
    for (i, x) in reading.iter().enumerate().step_by(20) {
        // Noise of 0.3 N by a plain congruential generator: twelve uniform numbers.
        let mut state = (i as u64).wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1;
        let noise: f64 = (0..12)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                (state >> 11) as f64 / (1u64 << 53) as f64
            })
            .sum::<f64>()
            - 6.0;
        let _ = writeln!(text, "{:.3},{:.4}", i as f64 * step, x + 0.3 * noise);
    }
    let path = dir.path().join("taps.csv");
    std::fs::write(&path, text).expect("a log");
    let output = assert_cmd::Command::cargo_bin("burntally")
        .expect("the program")
        .arg("inspect")
        .arg("--json")
        .arg(&path)
        .output();
    let output = output.expect("output");
    let json: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    let found = json.to_string();
    let number = |key: &str| -> f64 {
        let at = found.find(&format!("\"{key}\":")).unwrap_or_else(|| panic!("{key} in {found}")) + key.len() + 3;
        found[at..].split([',', '}']).next().and_then(|n| n.parse().ok()).expect("a number")
    };
    assert!((number("resonance_hz") / hz - 1.0).abs() < 0.01, "{found}");
    assert!((number("resonance_damping_ratio") / damping - 1.0).abs() < 0.2, "{found}");
}

/// A stand that swings a few times during the burn, or faster than the sampling follows, is told and not trusted.
#[test]
fn a_resonance_among_the_motors_own_frequencies_or_beyond_the_sampling_is_flagged() {
    for (hz, words) in [(4.0, "Stiffen the stand"), (300.0, "Log faster")] {
        let mut scenario = Scenario::default();
        scenario.stand.resonance = Some((hz, 0.03));
        scenario.stand.resonance_told = true;
        let firing = reduced(&scenario).0.firing;
        let check = firing.checks.iter().find(|c| c.id == "ringing").expect("the check");
        assert!(check.status != burntally::firing::Status::Pass && check.message.contains(words), "{hz}: {check:?}");
    }
}

/// 480 samples a second by a clock of whole milliseconds: rounded stamps hide neither the rate nor, on a swinging stand, the rise.
#[test]
fn stamps_of_whole_milliseconds() {
    for seed in 1..=6 {
        let mut scenario = Scenario { seed, ..Scenario::default() };
        scenario.stand.resonance = Some((45.0, 0.035));
        scenario.logger.rate_hz = 480.0;
        scenario.logger.time = simulator::logger::TimeStyle::Millis { decimals: 0 };
        scenario.motor.rise = simulator::motor::RiseKind::SCurve;
        scenario.motor.rise_s = 0.02;
        let (reduction, truth) = reduced(&scenario);
        let firing = &reduction.firing;
        assert!(
            (firing.conditioning.sample_rate_hz / 480.0 - 1.0).abs() < 1e-4,
            "{}",
            firing.conditioning.sample_rate_hz
        );
        let q = &firing.quantities;
        for (name, figure, truth) in [
            ("burn time", &q.burn_time, truth.burn_time_s),
            ("initial thrust", &q.initial_thrust, truth.initial_thrust_n),
            ("peak", &q.peak_thrust, truth.peak_thrust_n),
        ] {
            let figure = figure.as_ref().expect("a figure");
            let off = (figure.value - truth) / figure.standard_uncertainty.expect("an uncertainty");
            println!("{seed} {name} {off}");
            assert!(off.abs() < 3.0 && (figure.value / truth - 1.0).abs() < 2e-3, "{seed} {name}: {figure:?} {truth}");
        }
    }
}
