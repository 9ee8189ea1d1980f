//! The invented firings of `sample-runs/`: twelve motors of four pours of two propellants, on three stands.

use super::cell::{Cell, Scale, WeightErrors};
use super::logger::{Logger, TimeStyle};
use super::motor::{Body, Chuff, Hump, Motor, RiseKind, TailKind};
use super::stand::{Hit, Orientation, Stand};
use super::text::Text;
use super::{CheckLoad, PressureChannel, Scenario};

const INVENTED: &str = "Invented firing: people, places, stand, motor and every number come from a simulator.";
pub const INVENTED_CELL: &str = "Invented load cell: every number comes from a simulator.";

/// Cells by file name in `calibration/`.
pub fn cells() -> Vec<(&'static str, Cell)> {
    vec![("trough-2kn.toml", trough_cell()), ("post-1kn.toml", post_cell()), ("crate-1kn.toml", crate_cell())]
}

/// S-beam of the trough, 24-bit counts.
fn trough_cell() -> Cell {
    Cell {
        name: "trough, 2 kN S-beam".into(),
        capacity_n: 2000.0,
        date: "2026-03-28".into(),
        coefficients: [-41_230.0, 1868.4, 0.0],
        noise_n: 1.1,
        hum: Some((0.4, 50.0)),
        masses_kg: (0..8).map(|i| f64::from(i) * 20.0).collect(),
        weight_errors: WeightErrors::Stack,
        weight_tolerance: 5e-4,
        calibration_noise_n: 0.06,
        gravity_m_s2: 9.8124,
        calibration_seed: 4101,
        decimals: 0,
        ..Cell::default()
    }
}

/// Button cell under the post; bends enough to ask for a second degree.
fn post_cell() -> Cell {
    Cell {
        name: "post, 1 kN button".into(),
        capacity_n: 1000.0,
        date: "2026-04-11".into(),
        coefficients: [118_004.0, 7311.0, 0.075],
        noise_n: 0.5,
        slow_noise_n: 0.06,
        masses_kg: (0..9).map(|i| f64::from(i) * 7.5).collect(),
        weight_tolerance: 2e-4,
        calibration_noise_n: 0.05,
        gravity_m_s2: 9.8124,
        calibration_seed: 4102,
        decimals: 0,
        ..Cell::default()
    }
}

/// The crate's beam, whose slope was handed on without its points; the thrust pulls it.
fn crate_cell() -> Cell {
    Cell {
        name: "crate, 1 kN beam".into(),
        capacity_n: 1000.0,
        date: "2025-11-02".into(),
        scale: Scale::Constants { limits: 0.004 },
        coefficients: [8_388.0, 412.7, 0.0],
        pulls: true,
        noise_n: 0.25,
        calibration_seed: 4103,
        ..Cell::default()
    }
}

fn trough() -> Stand {
    Stand { resonance: Some((62.0, 0.035)), resonance_told: true, ..Stand::default() }
}

fn post() -> Stand {
    Stand { orientation: Orientation::NozzleUp, thermal: Some((0.5, 6.0)), drift_n_s: 0.005, ..Stand::default() }
}

/// A quick motor: 1.2 s, J class. `level` and `pace` are this motor's own.
fn white(level: f64, pace: f64) -> Motor {
    Motor {
        peak_n: 905.0 * level,
        body_s: 1.18 * pace,
        body: Body::Arched { edge: 0.68 },
        rise: RiseKind::SCurve,
        rise_s: 0.025,
        tail: TailKind::Exponential,
        tail_s: 0.045,
        roughness: 0.002,
        roughness_hz: 90.0,
        propellant_mass_kg: 0.4631,
        mass_before_kg: 1.4020,
        ignition_lag_s: 0.14,
        ..Motor::default()
    }
}

/// A slow one: 3.6 s, K class, an ignition peak and a falling thrust.
fn slow(level: f64, pace: f64) -> Motor {
    Motor {
        peak_n: 510.0 * level,
        body_s: 3.5 * pace,
        body: Body::Regressive { end: 0.72 },
        rise: RiseKind::Exponential,
        rise_s: 0.09,
        tail: TailKind::Exponential,
        tail_s: 0.16,
        spike: Some(Hump { height: 0.12, width_s: 0.15 }),
        propellant_mass_kg: 0.8234,
        mass_before_kg: 2.118,
        ignition_lag_s: 0.3,
        ..Motor::default()
    }
}

fn base(id: &str, pour: &str, date: &str, seed: u64, cell: (&str, Cell)) -> Scenario {
    let propellant = if pour.starts_with("BW") { "Bittern White" } else { "Bittern Slow" };
    Scenario {
        id: id.into(),
        pour: pour.into(),
        date: date.into(),
        seed,
        cell: cell.1,
        gravity_m_s2: 9.8124,
        comment: INVENTED.into(),
        calibration_elsewhere: Some(format!("../../calibration/{}", cell.0)),
        log_name: format!("{}.csv", id.to_lowercase()),
        tags: vec![("propellant".into(), format!("\"{propellant}\""))],
        ..Scenario::default()
    }
}

fn on_trough(id: &str, pour: &str, date: &str, seed: u64, motor: Motor) -> Scenario {
    Scenario {
        motor,
        stand: trough(),
        before_s: 3.0,
        after_s: 5.0,
        ..base(id, pour, date, seed, ("trough-2kn.toml", trough_cell()))
    }
}

fn on_post(id: &str, pour: &str, date: &str, seed: u64, motor: Motor) -> Scenario {
    Scenario {
        motor,
        stand: post(),
        logger: Logger {
            rate_hz: 80.0,
            averaging_s: 0.0125,
            time: TimeStyle::Millis { decimals: 0 },
            ..Logger::default()
        },
        before_s: 12.0,
        after_s: 15.0,
        ..base(id, pour, date, seed, ("post-1kn.toml", post_cell()))
    }
}

fn on_crate(id: &str, pour: &str, date: &str, seed: u64, motor: Motor) -> Scenario {
    Scenario {
        motor,
        logger: Logger {
            rate_hz: 10.0,
            averaging_s: 0.1,
            clock_error: 0.0018,
            clock_tolerance: Some("0.5 %".into()),
            time: TimeStyle::None,
            ..Logger::default()
        },
        before_s: 20.0,
        after_s: 25.0,
        ..base(id, pour, date, seed, ("crate-1kn.toml", crate_cell()))
    }
}

/// All twelve, in order.
pub fn firings() -> Vec<Scenario> {
    // Level and pace: the pour's own, times a motor's own.
    let mut bw1_1 = on_trough("BW1-1", "BW1", "2026-05-09", 101, white(1.000, 1.004));
    bw1_1.ignition = true;
    bw1_1.expelled_extra_kg = Some(0.0062);
    bw1_1.tags.push(("cure_days".into(), "9".into()));
    bw1_1.tags.push(("batch_mass".into(), "\"1.9 kg\"".into()));
    bw1_1.tags.push(("fired_by".into(), "\"Mara Quillfeather\"".into()));
    bw1_1.conditions = vec![
        ("motor_temperature".into(), "\"19 degC\"".into()),
        ("air_temperature".into(), "\"16.5 degC\"".into()),
        ("air_pressure".into(), "\"1009 hPa\"".into()),
    ];

    let mut bw1_2 = on_trough("BW1-2", "BW1", "2026-05-09", 102, white(0.994, 1.001));
    bw1_2.logger.rate_hz = 10_000.0;
    bw1_2.logger.time = TimeStyle::Micros;
    bw1_2.logger.rollover = true;
    bw1_2.logger.first_stamp_s = 4_294.967_296 - 1.1;
    (bw1_2.before_s, bw1_2.after_s) = (0.6, 0.7);

    let mut bw1_3 = on_trough("BW1-3", "BW1", "2026-05-10", 103, white(1.005, 0.997));
    bw1_3.log_name = "capture.txt".into();
    bw1_3.logger.rate_hz = 320.0;
    bw1_3.logger.time = TimeStyle::Millis { decimals: 0 };
    bw1_3.logger.first_stamp_s = 618.204;
    bw1_3.logger.glitches = 5;
    bw1_3.logger.gaps_s = vec![(1.2, 1.29)];
    bw1_3.logger.limits = Some((-8_388_608.0, 8_388_607.0));
    bw1_3.logger.text = Text {
        delimiter: ';',
        banner: vec!["*** trough logger, board 2, firmware of our own ***".into(), "sd card ok, tare skipped".into()],
        comment_every: 700,
        line_end: "\r\n",
        trailing_delimiter: true,
        garbled: 4,
        repeated_header: true,
        cut_last_line: true,
        words: true,
        temperature: true,
        nul_bytes: 2,
        ..Text::default()
    };
    bw1_3.stand.hits = vec![
        Hit { after_s: 3.1, force_n: 2600.0, length_s: 0.011, ring_hz: 62.0, ejection: false },
        Hit { after_s: 3.4, force_n: -1900.0, length_s: 0.009, ring_hz: 62.0, ejection: false },
    ];

    let mut bw2_1 = on_trough("BW2-1", "BW2", "2026-06-06", 104, white(1.022, 0.993));
    bw2_1.ignition = true;
    bw2_1.pressure = Some(PressureChannel {
        unit: "bar",
        unit_pa: 1e5,
        gauge: false,
        thrust_coefficient: 1.52,
        throat_diameter_m: 0.0136,
        air_pressure_pa: 100_400.0,
        noise_pa: 9e3,
        accuracy: "0.5 %",
        web_thickness_m: Some(0.0095),
        ..PressureChannel::default()
    });
    bw2_1.logger.text.units_row = super::text::UnitsRow::AfterHeader;

    let mut bw2_2 = on_trough("BW2-2", "BW2", "2026-06-06", 105, white(1.015, 0.990));
    // The amplifier was left at a gain that ends near 830 N.
    bw2_2.logger.limits = Some((-1_510_000.0, 1_510_000.0));

    let mut bw2_3 = on_trough("BW2-3", "BW2", "2026-06-07", 106, white(1.025, 0.996));
    bw2_3.pressure = Some(PressureChannel {
        unit: "MPa",
        unit_pa: 1e6,
        gauge: true,
        thrust_coefficient: 1.52,
        throat_diameter_m: 0.0136,
        air_pressure_pa: 100_900.0,
        noise_pa: 9e3,
        accuracy: "0.5 %",
        web_thickness_m: None,
        ..PressureChannel::default()
    });
    bw2_3.conditions = vec![("air_pressure".into(), "\"1009 hPa\"".into())];

    let mut bs1_1 = on_post("BS1-1", "BS1", "2026-05-16", 107, slow(1.000, 1.003));
    bs1_1.tags.push(("cure_days".into(), "14".into()));
    bs1_1.tags.push(("fired_by".into(), "\"Tobias Enderlin\"".into()));

    let mut bs1_2 = on_post("BS1-2", "BS1", "2026-05-16", 108, slow(0.993, 1.000));
    bs1_2.motor.chuff = Some(Chuff { before_s: 3.2, length_s: 0.18, height: 0.22 });
    bs1_2.logger.time = TimeStyle::Seconds { decimals: 4 };
    bs1_2.logger.text = Text { delimiter: ';', decimal_comma: true, ..Text::default() };

    let mut bs1_3 = on_post("BS1-3", "BS1", "2026-05-17", 109, slow(1.004, 0.998));
    bs1_3.logger.time = TimeStyle::Clock;
    bs1_3.stand.hits = vec![Hit { after_s: 6.4, force_n: 310.0, length_s: 0.06, ring_hz: 0.0, ejection: true }];

    let bs2_1 = on_crate("BS2-1", "BS2", "2026-06-20", 110, slow(0.978, 1.011));

    let mut bs2_2 = on_crate("BS2-2", "BS2", "2026-06-20", 111, slow(0.986, 1.006));
    bs2_2.stand.drift_n_s = 0.02;

    let mut bs2_3 = on_post("BS2-3", "BS2", "2026-06-21", 112, slow(0.981, 1.009));
    bs2_3.propellant_told = false;
    bs2_3.check_load = Some(CheckLoad { mass_kg: 20.0, from_s: 3.0, to_s: 8.0 });
    bs2_3.before_s = 16.0;
    // The clock of this logger ticks only every 50 ms: four records share a stamp.
    bs2_3.logger.stamp_step_s = 0.05;

    vec![bw1_1, bw1_2, bw1_3, bw2_1, bw2_2, bw2_3, bs1_1, bs1_2, bs1_3, bs2_1, bs2_2, bs2_3]
}
