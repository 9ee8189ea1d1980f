//! The simulator against closed forms and against what was computed elsewhere, so that its truth can be relied on.

mod simulator;

use simulator::Scenario;
use simulator::cell::{Cell, WeightErrors};
use simulator::logger::{Encoding, Logger, Text, TimeStyle};
use simulator::motor::{Body, Dense, Motor, RiseKind, TailKind};
use simulator::random::{KINDS, random_scenario_kind};
use simulator::stand::{CellForce, Orientation, Stand, second_order};

/// Rises in 0.1 s, level until 0.9 s, falls until 1.0 s: impulse 0.9 peak, 5 % crossings at 0.005 and 0.995 s.
fn trapezoid() -> Motor {
    Motor {
        peak_n: 200.0,
        body_s: 0.9,
        body: Body::Neutral,
        rise: RiseKind::Linear,
        rise_s: 0.1,
        tail: TailKind::Linear,
        tail_s: 0.1,
        propellant_mass_kg: 0.1,
        mass_before_kg: 0.3,
        ..Motor::default()
    }
}

fn quiet() -> Scenario {
    Scenario {
        motor: trapezoid(),
        cell: Cell { noise_n: 0.0, coefficients: [0.0, 1.0, 0.0], ..Cell::default() },
        logger: Logger {
            lsb: 0.0,
            decimals: 9,
            time: TimeStyle::None,
            text: Text { header: false, ..Text::default() },
            ..Logger::default()
        },
        ..Scenario::default()
    }
}

fn readings(scenario: &Scenario) -> Vec<f64> {
    let simulated = scenario.simulate();
    let text = String::from_utf8(simulated.files[1].1.clone()).expect("plain text");
    text.lines().map(|line| line.parse().expect("a reading")).collect()
}

#[test]
fn the_truth_of_a_trapezoid_is_its_closed_form() {
    let truth = quiet().simulate().truth;
    // Corners fall on the 50 us grid, so only rounding is left.
    let close = |a: f64, b: f64| assert!((a - b).abs() < 1e-9 * b.abs().max(1.0), "{a} is not {b}");
    close(truth.total_impulse_n_s, 180.0);
    close(truth.peak_thrust_n, 200.0);
    close(truth.burn_time_s, 0.99);
    close(truth.action_time_s, 0.98);
    close(truth.rise_time_s, 0.08);
    // Two triangles of 5 ms up to 10 N are outside the burn time.
    close(truth.burn_impulse_n_s, 180.0 - 2.0 * 0.5 * 0.005 * 10.0);
    close(truth.start_s, 5.005);
    close(truth.end_s, 5.995);
    close(truth.specific_impulse_s, 180.0 / (0.1 * 9.80665));
    // 0.005 to 0.505 s: the ramp's mean of 105 N over 95 ms, then 200 N.
    close(truth.initial_thrust_n, (0.095 * 105.0 + 0.405 * 200.0) / 0.5);
}

#[test]
fn exponential_rise_and_tail_have_their_closed_form() {
    let motor = Motor {
        peak_n: 100.0,
        body_s: 2.0,
        rise: RiseKind::Exponential,
        rise_s: 0.03,
        tail: TailKind::Exponential,
        tail_s: 0.1,
        ..Motor::default()
    };
    let curve = motor.curve(1);
    // 100 (2 - tau) + 100 x 0.1, tau = 10 ms; the 10-constant cut and the 50 us chords cost below 1e-5.
    let expected = 100.0 * (2.0 - 0.01) + 10.0;
    assert!((curve.all.integral_to(9.0) / expected - 1.0).abs() < 1e-5);
    let (up, down) = curve.smooth.outer_crossings(5.0).expect("crossings");
    assert!((up - -0.01 * 0.95_f64.ln()).abs() < 1e-6);
    assert!((down - (2.0 + 0.1 * 20.0_f64.ln())).abs() < 1e-6);
}

#[test]
fn the_stand_answers_as_computed_elsewhere() {
    // Trapezoid through 38 Hz, damping 0.03, sampled at 1 kHz; closed form and scipy.signal.lsim agree to 3e-12 there.
    let text = include_str!("reference/sdof_trapezoid_fn38_zeta003_1kHz.csv");
    let rows: Vec<Vec<f64>> =
        text.lines().skip(1).map(|l| l.split(',').map(|f| f.parse().expect("a number")).collect()).collect();
    let force: Vec<f64> = rows.iter().map(|r| r[1]).collect();
    let found = second_order(&force, 0.001, 38.0, 0.03, 0);
    // The file is written to 1e-9 in the force and 1e-12 in the response.
    let worst = rows.iter().zip(&found).map(|(r, y)| (r[2] - y).abs()).fold(0.0, f64::max);
    assert!(worst < 1e-7, "{worst}");
    assert!(rows.len() > 1000);
}

#[test]
fn ringing_leaves_the_impulse_as_it_was() {
    let mut scenario = quiet();
    scenario.stand.resonance = Some((34.0, 0.02));
    scenario.logger.rate_hz = 2000.0;
    let sum: f64 = readings(&scenario).iter().sum::<f64>() / 2000.0;
    assert!((sum / 180.0 - 1.0).abs() < 1e-5, "{sum}");
}

#[test]
fn the_weight_of_what_burned_is_missing_afterwards() {
    for (orientation, sign) in [(Orientation::NozzleUp, 1.0), (Orientation::NozzleDown, -1.0)] {
        let mut scenario = quiet();
        scenario.stand.orientation = orientation;
        let values = readings(&scenario);
        let g = scenario.gravity_m_s2;
        let last = values[values.len() - 1];
        assert!((values[0] - sign * 0.3 * g).abs() < 1e-8);
        assert!((last - sign * 0.2 * g).abs() < 1e-8);
        // Half the impulse is out at the middle of the burn, and half the propellant with it.
        let middle = values[5500];
        assert!((middle - (200.0 + sign * 0.25 * g)).abs() < 1e-6, "{middle}");
    }
}

#[test]
fn a_converter_that_averages_keeps_the_impulse() {
    for rate_hz in [10.0, 80.0] {
        let mut scenario = quiet();
        scenario.logger.rate_hz = rate_hz;
        scenario.logger.averaging_s = 1.0 / rate_hz;
        let sum: f64 = readings(&scenario).iter().sum::<f64>() / rate_hz;
        assert!((sum - 180.0).abs() < 1e-6, "{sum}");
    }
}

#[test]
fn a_window_mean_is_the_mean_of_its_samples() {
    let curve = Motor { roughness: 0.05, ..Motor::default() }.curve(3);
    let force = CellForce::new(&Motor::default(), &curve, &Stand::default(), 1.0, 9.81);
    let n = 20_000;
    let fine: f64 = (0..n).map(|i| force.mean_before(1.9 + 0.1 * (f64::from(i) + 0.5) / f64::from(n), 0.0)).sum();
    assert!((force.mean_before(2.0, 0.1) - fine / f64::from(n)).abs() < 1e-4);
}

#[test]
fn roughness_has_the_size_asked_for() {
    let motor = Motor { roughness: 0.02, roughness_hz: 100.0, body_s: 20.0, ..Motor::default() };
    let curve = motor.curve(5);
    let ratio: Vec<f64> = curve
        .burn
        .values
        .iter()
        .zip(&curve.smooth.values)
        .skip(20_000)
        .take(300_000)
        .map(|(a, b)| a / b - 1.0)
        .collect();
    let rms = (ratio.iter().map(|r| r * r).sum::<f64>() / ratio.len() as f64).sqrt();
    // 15 s of a 50 Hz wide band: some 750 independent values, 2.6 % on their spread.
    assert!((rms / 0.02 - 1.0).abs() < 0.1, "{rms}");
}

#[test]
fn weights_err_within_their_limits_and_in_the_stated_way() {
    let cell = |errors| Cell { weight_errors: errors, weight_tolerance: 1e-3, calibration_seed: 9, ..Cell::default() };
    for errors in [WeightErrors::Each, WeightErrors::Stack, WeightErrors::Common] {
        let cell = cell(errors);
        let off: Vec<f64> =
            cell.true_masses_kg().iter().zip(&cell.masses_kg).skip(1).map(|(t, n)| t / n - 1.0).collect();
        assert!(off.iter().all(|e| e.abs() <= 1e-3 && *e != 0.0));
        let equal = off.iter().all(|e| (e - off[0]).abs() < 1e-12);
        assert_eq!(equal, errors == WeightErrors::Common);
    }
}

#[test]
fn a_dense_curve_integrates_its_straight_lines() {
    let dense = Dense::new(1.0, vec![0.0, 2.0, 2.0]);
    let step = simulator::motor::STEP_S;
    assert!((dense.integral_to(1.0 + 0.5 * step) - 0.25 * step).abs() < 1e-15);
    assert!((dense.integral_to(1.0 + 2.0 * step) - 3.0 * step).abs() < 1e-15);
    assert_eq!(dense.at(0.5), 0.0);
    assert_eq!(dense.at(9.0), 2.0);
}

#[test]
fn every_line_of_a_messy_log_is_accounted_for() {
    let mut scenario = Scenario::default();
    scenario.logger.glitches = 4;
    scenario.logger.gaps_s = vec![(1.0, 1.05)];
    scenario.logger.text = Text {
        garbled: 3,
        repeated_header: true,
        cut_last_line: true,
        banner: vec!["# bench".into()],
        ..Text::default()
    };
    let simulated = scenario.simulate();
    let log = &simulated.truth.log;
    let text = String::from_utf8(simulated.files[1].1.clone()).expect("plain text");
    let lines: Vec<&str> = text.lines().collect();
    // Banner and two headers are no records.
    assert_eq!(lines.len() as u64, log.records + 3);
    assert_eq!(log.glitch_lines.len(), 4);
    assert_eq!(log.spoilt_lines.len(), 4);
    assert_eq!(*log.spoilt_lines.last().expect("a line"), lines.len() as u64);
    assert!((40..=60).contains(&log.missing), "{}", log.missing);
    for line in &log.spoilt_lines[..3] {
        assert!(lines[*line as usize - 1].contains('~'));
    }
}

#[test]
fn counters_wrap_and_text_is_encoded() {
    let mut scenario = Scenario::default();
    scenario.logger.time = TimeStyle::Micros;
    scenario.logger.rollover = true;
    scenario.logger.first_stamp_s = 4_294.967_296 - 2.0;
    scenario.logger.text.encoding = Encoding::Utf16Le;
    let bytes = scenario.simulate().files[1].1.clone();
    assert_eq!(&bytes[..2], &[0xff, 0xfe]);
    let units: Vec<u16> = bytes[2..].chunks(2).map(|pair| u16::from_le_bytes([pair[0], pair[1]])).collect();
    let text = String::from_utf16(&units).expect("UTF-16");
    let stamps: Vec<f64> =
        text.lines().skip(1).filter_map(|l| l.split(',').next().and_then(|f| f.parse().ok())).collect();
    assert_eq!(stamps[0], 4_292_967_296.0);
    assert_eq!(stamps[2000], 0.0);
}

#[test]
fn the_same_seed_gives_the_same_bytes_and_another_does_not() {
    for kind in KINDS {
        let make = |seed| random_scenario_kind(kind, seed).simulate();
        let (a, b, c) = (make(7), make(7), make(8));
        assert_eq!(a.files, b.files);
        assert_ne!(a.files[1].1, c.files[1].1);
        assert!(a.truth.total_impulse_n_s.is_finite() && a.truth.burn_time_s > 0.0, "{kind:?}");
    }
}

#[test]
fn the_scale_is_off_within_its_limits() {
    for seed in 1..40 {
        let scenario = random_scenario_kind(KINDS[0], seed);
        let off = scenario.weighed_propellant_kg() - scenario.motor.propellant_mass_kg;
        assert!(off.abs() <= scenario.propellant_limits_kg && off != 0.0, "{off}");
    }
}
