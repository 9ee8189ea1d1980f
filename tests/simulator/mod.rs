//! A simulator of motor, stand, cell and logger that knows the truth.
//!
//! A [`Scenario`] says what is fired, on what, measured and logged with what; [`Scenario::simulate`] makes the run
//! folder from it, and the [`Truth`] by the definitions the figures are reported under. Pure: the same scenario and
//! seed give the same bytes. True time runs from the instant of the first record.

// Each test file uses a part of the simulator.
#![allow(dead_code)]

pub mod cell;
pub mod logger;
pub mod motor;
pub mod random;
pub mod samples;
pub mod stand;
pub mod text;

use cell::{Cell, Scale};
use logger::{Extra, LogTruth, Logger, TimeStyle};
use motor::{Dense, Motor};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use stand::{CellForce, Stand};
use std::fmt::Write as _;
use std::path::{Path, PathBuf};

/// m/s2, exact by definition of the standard acceleration (3rd CGPM, 1901).
pub const STANDARD_GRAVITY: f64 = 9.80665;

/// A chamber-pressure channel. Absolute pressure = air + thrust / (thrust coefficient x throat area); a throat that wears grows in
/// area evenly through the burn.
#[derive(Debug, Clone, PartialEq)]
pub struct PressureChannel {
    /// Unit of the log with its size in Pa.
    pub unit: &'static str,
    pub unit_pa: f64,
    pub gauge: bool,
    pub thrust_coefficient: f64,
    pub throat_diameter_m: f64,
    pub air_pressure_pa: f64,
    pub noise_pa: f64,
    /// As written into run.toml.
    pub accuracy: &'static str,
    pub web_thickness_m: Option<f64>,
    /// After the burn, where the throat wore.
    pub throat_after_m: Option<f64>,
    /// Limits of both diameters and of the web, as run.toml states them.
    pub throat_limits_m: Option<f64>,
    pub web_limits_m: Option<f64>,
    /// What is written into run.toml less what is true, the same for both diameters.
    pub throat_error_m: f64,
    pub web_error_m: f64,
    /// Hidden errors of the transducer: share of the reading (of absolute pressure for an absolute one), and its zero, Pa.
    pub scale_error: f64,
    pub zero_pa: f64,
    /// Readings end there, in the log's unit.
    pub limit: Option<f64>,
    /// From this share of the burn on the nozzle gives this part of the thrust coefficient.
    pub nozzle_lost: Option<(f64, f64)>,
}

impl Default for PressureChannel {
    fn default() -> Self {
        PressureChannel {
            unit: "bar",
            unit_pa: 1e5,
            gauge: true,
            thrust_coefficient: 1.5,
            throat_diameter_m: 0.0095,
            air_pressure_pa: 100_000.0,
            noise_pa: 8e3,
            accuracy: "0.5 %",
            web_thickness_m: None,
            throat_after_m: None,
            throat_limits_m: Some(2e-5),
            web_limits_m: Some(5e-5),
            throat_error_m: 0.0,
            web_error_m: 0.0,
            scale_error: 0.0,
            zero_pa: 0.0,
            limit: None,
            nozzle_lost: None,
        }
    }
}

impl PressureChannel {
    fn area(diameter_m: f64) -> f64 {
        0.25 * std::f64::consts::PI * diameter_m * diameter_m
    }

    /// Throat area, m², at a share of the burn.
    fn throat_area(&self, share: f64) -> f64 {
        let (before, after) =
            (Self::area(self.throat_diameter_m), Self::area(self.throat_after_m.unwrap_or(self.throat_diameter_m)));
        before + (after - before) * share.clamp(0.0, 1.0)
    }

    /// Pressure above the air, Pa, that gives this thrust; the burn runs from `from_s` to `to_s`.
    fn above(&self, thrust: &Dense, from_s: f64, to_s: f64) -> Dense {
        let pressure = |(i, f): (usize, &f64)| {
            let share = (thrust.start_s + i as f64 * motor::STEP_S - from_s) / (to_s - from_s);
            let nozzle = self.nozzle_lost.map_or(1.0, |(at, part)| if share > at { part } else { 1.0 });
            f / (self.thrust_coefficient * nozzle * self.throat_area(share))
        };
        Dense::new(thrust.start_s, thrust.values.iter().enumerate().map(pressure).collect())
    }
}

/// A known weight on the stand before the firing: kg, from and to in true time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CheckLoad {
    pub mass_kg: f64,
    pub from_s: f64,
    pub to_s: f64,
}

/// Everything about a firing. Take the default and change what matters.
#[derive(Debug, Clone)]
pub struct Scenario {
    pub id: String,
    pub pour: String,
    pub date: String,
    /// Of noise, roughness, jitter and spoilt lines.
    pub seed: u64,
    pub motor: Motor,
    pub stand: Stand,
    pub cell: Cell,
    pub logger: Logger,
    /// Of the stand's site; written into run.toml.
    pub gravity_m_s2: f64,
    /// From the first record to the motor's first sign of life, s.
    pub before_s: f64,
    /// From the end of thrust to the end of the record, s.
    pub after_s: f64,
    /// The record ends when thrust last falls through this fraction of the peak.
    pub cut_at: Option<f64>,
    pub pressure: Option<PressureChannel>,
    /// Volts on the igniter's leads are logged.
    pub ignition: bool,
    pub check_load: Option<CheckLoad>,
    /// Limits of the weighing of the propellant, kg, and whether run.toml gives the mass.
    pub propellant_limits_kg: f64,
    pub propellant_told: bool,
    /// Weighed before and after the firing too, liner and nozzle loss included (kg).
    pub expelled_extra_kg: Option<f64>,
    pub tags: Vec<(String, String)>,
    pub conditions: Vec<(String, String)>,
    /// First comment line of run.toml.
    pub comment: String,
    /// Path of a calibration file kept elsewhere; `None`: written into the run folder.
    pub calibration_elsewhere: Option<String>,
    pub log_name: String,
}

impl Default for Scenario {
    fn default() -> Self {
        Scenario {
            id: "SIM-1".into(),
            pour: "SIM".into(),
            date: "2026-05-14".into(),
            seed: 1,
            motor: Motor::default(),
            stand: Stand::default(),
            cell: Cell::default(),
            logger: Logger::default(),
            gravity_m_s2: 9.8072,
            before_s: 5.0,
            after_s: 6.0,
            cut_at: None,
            pressure: None,
            ignition: false,
            check_load: None,
            propellant_limits_kg: 0.0005,
            propellant_told: true,
            expelled_extra_kg: None,
            tags: Vec::new(),
            conditions: Vec::new(),
            comment: "Simulated firing: everything in it is invented.".into(),
            calibration_elsewhere: None,
            log_name: "log.csv".into(),
        }
    }
}

/// What is true of the firing. `*_s` landmarks are log time, durations true seconds.
#[derive(Debug, Clone, PartialEq)]
pub struct Truth {
    pub total_impulse_n_s: f64,
    /// Within the burn time.
    pub burn_impulse_n_s: f64,
    /// First to last crossing of 5 % of peak.
    pub burn_time_s: f64,
    /// First to last crossing of 10 % of peak.
    pub action_time_s: f64,
    pub average_thrust_n: f64,
    pub peak_thrust_n: f64,
    pub initial_thrust_n: f64,
    /// First crossing of 10 % to first crossing of 90 %.
    pub rise_time_s: f64,
    /// Ignition signal to start of burn (5 %), where it is logged.
    pub ignition_delay_s: Option<f64>,
    pub propellant_mass_kg: f64,
    pub specific_impulse_s: f64,
    pub expelled_mass_kg: Option<f64>,
    pub peak_pressure_pa: Option<f64>,
    /// Absolute, over the action time.
    pub mean_pressure_pa: Option<f64>,
    /// Integral of throat area times absolute pressure over the burn time, raised by the share of the impulse outside it, over the
    /// propellant's mass.
    pub characteristic_velocity_m_s: Option<f64>,
    /// Over the action time, absolute pressure.
    pub thrust_coefficient: Option<f64>,
    /// From 10 % of the highest pressure to where the tail begins.
    pub web_time_s: Option<f64>,
    pub burn_rate_m_s: Option<f64>,
    /// First and last thrust above 0.05 % of peak.
    pub thrust_start_s: f64,
    pub thrust_end_s: f64,
    pub start_s: f64,
    pub end_s: f64,
    pub peak_at_s: f64,
    pub chuff_s: Option<(f64, f64)>,
    pub chuff_impulse_n_s: f64,
    pub hits: usize,
    /// Impulse after the end of the record.
    pub cut_off_n_s: f64,
    pub log: LogTruth,
}

/// A run folder and the truth behind it.
#[derive(Debug, Clone)]
pub struct Simulated {
    pub truth: Truth,
    /// Path inside the run folder, bytes.
    pub files: Vec<(PathBuf, Vec<u8>)>,
}

impl Simulated {
    /// Writes the run folder and gives the path of its run.toml.
    pub fn write_to(&self, dir: &Path) -> std::io::Result<PathBuf> {
        for (path, bytes) in &self.files {
            let path = dir.join(path);
            if let Some(parent) = path.parent() {
                std::fs::create_dir_all(parent)?;
            }
            std::fs::write(path, bytes)?;
        }
        Ok(dir.join("run.toml"))
    }
}

impl Scenario {
    pub fn simulate(&self) -> Simulated {
        let curve = self.motor.curve(self.seed);
        let force = CellForce::new(&self.motor, &curve, &self.stand, self.before_s, self.gravity_m_s2);
        let thrust_over_s = self.before_s + curve.all.end_s();
        let burn = &curve.burn;
        let smooth = &curve.smooth;
        let (peak_at, peak) = smooth.peak();
        let crossings = |part: f64| smooth.outer_crossings(part * peak).unwrap_or((f64::NAN, f64::NAN));
        let end_s = match self.cut_at {
            Some(part) => self.before_s + crossings(part).1,
            None => thrust_over_s + self.after_s,
        };

        let (up5, down5) = crossings(0.05);
        let chamber = self.pressure.as_ref().map(|p| (p, p.above(&curve.all, up5, down5)));
        let window_s = self.logger.averaging_s / (1.0 + self.logger.clock_error);
        let mut extras = Vec::new();
        if let Some((p, above)) = &chamber {
            let zero = if p.gauge { 0.0 } else { p.air_pressure_pa };
            extras.push(Extra {
                name: "chamber",
                unit: p.unit,
                decimals: 4,
                noise: p.noise_pa / p.unit_pa,
                limit: p.limit,
                value: Box::new(move |t| {
                    let true_pa = zero + above.mean_before(t - self.before_s, window_s);
                    (true_pa * (1.0 + p.scale_error) + p.zero_pa) / p.unit_pa
                }),
            });
        }
        let burn_from_s = self.before_s + smooth.start_s;
        let signal_s = burn_from_s - self.motor.ignition_lag_s;
        if self.ignition {
            extras.push(Extra {
                name: "igniter",
                unit: "V",
                decimals: 2,
                noise: 0.01,
                limit: None,
                value: Box::new(move |t| if t >= signal_s && t < signal_s + 0.8 { 11.6 } else { 0.0 }),
            });
        }
        let check = self.check_load.map(|c| (c.from_s, c.to_s, self.stand.force_ratio * c.mass_kg * self.gravity_m_s2));
        let force_at = |t: f64, window: f64| {
            let aside = check.map_or(0.0, |(from, to, n)| if t > from && t - window < to { n } else { 0.0 });
            force.mean_before(t, window) + aside
        };
        let (bytes, log) = self.logger.write(&self.cell, end_s, self.seed, &force_at, &extras);
        drop(extras);

        let (up10, down10) = crossings(0.10);
        let (up90, _) = crossings(0.90);
        let (first, last) = crossings(0.0005);
        let log_time = |t: f64| (self.before_s + t) * (1.0 + self.logger.clock_error);
        let total = burn.integral_to(burn.end_s());
        let burn_impulse = burn.integral_to(down5) - burn.integral_to(up5);
        let initial_s = (down5 - up5).min(0.5);
        let action = burn.integral_to(down10) - burn.integral_to(up10);
        let chamber = self.pressure.as_ref().map(|p| Chamber::of(p, smooth, burn, [up5, down5], [up10, down10]));
        let tail_from_s = smooth.start_s + self.motor.body_s;
        let web_time_s = chamber.as_ref().map(|c| tail_from_s - c.rises_s);
        let truth = Truth {
            total_impulse_n_s: total,
            burn_impulse_n_s: burn_impulse,
            burn_time_s: down5 - up5,
            action_time_s: down10 - up10,
            average_thrust_n: burn_impulse / (down5 - up5),
            peak_thrust_n: peak,
            initial_thrust_n: (burn.integral_to(up5 + initial_s) - burn.integral_to(up5)) / initial_s,
            rise_time_s: up90 - up10,
            ignition_delay_s: self.ignition.then_some(self.motor.ignition_lag_s + up5 - smooth.start_s),
            propellant_mass_kg: self.motor.propellant_mass_kg,
            specific_impulse_s: total / (self.motor.propellant_mass_kg * STANDARD_GRAVITY),
            expelled_mass_kg: self.expelled_extra_kg.map(|extra| self.motor.propellant_mass_kg + extra),
            peak_pressure_pa: chamber.as_ref().map(|c| c.peak_pa),
            mean_pressure_pa: chamber.as_ref().map(|c| c.action_pa_s / (down10 - up10)),
            characteristic_velocity_m_s: chamber
                .as_ref()
                .map(|c| c.burn_n_s * (total / burn_impulse) / self.motor.propellant_mass_kg),
            thrust_coefficient: chamber.as_ref().map(|c| action / c.action_n_s),
            web_time_s,
            burn_rate_m_s: self.pressure.as_ref().and_then(|p| Some(p.web_thickness_m? / web_time_s?)),
            thrust_start_s: log_time(first),
            thrust_end_s: log_time(last),
            start_s: log_time(up5),
            end_s: log_time(down5),
            peak_at_s: log_time(peak_at),
            chuff_s: curve.chuff_s.map(|(from, to)| (log_time(from), log_time(to))),
            chuff_impulse_n_s: curve.chuff_impulse_n_s,
            hits: self.stand.hits.len(),
            cut_off_n_s: (total - burn.integral_to(end_s - self.before_s)).max(0.0),
            log,
        };
        let mut files =
            vec![(PathBuf::from("run.toml"), self.run_toml().into_bytes()), (PathBuf::from(&self.log_name), bytes)];
        if self.calibration_elsewhere.is_none()
            && let Some(text) = self.cell.calibration_file("Simulated load cell: everything in it is invented.")
        {
            files.push((PathBuf::from("cell.toml"), text.into_bytes()));
        }
        Simulated { truth, files }
    }

    /// What the scale said: off by a hidden part of its limits, in steps of a fifth of them.
    pub fn weighed_propellant_kg(&self) -> f64 {
        let mut rng = ChaCha8Rng::seed_from_u64(self.seed ^ 0x0073_6361_6c65);
        let off_kg = self.propellant_limits_kg * rng.random_range(-0.9..0.9);
        let step_kg = self.propellant_limits_kg / 5.0;
        ((self.motor.propellant_mass_kg + off_kg) / step_kg).round() * step_kg
    }

    fn run_toml(&self) -> String {
        let mut t = String::new();
        let w = &mut t;
        let number = cell::round_sig;
        let _ = writeln!(w, "# {}", self.comment);
        let _ = writeln!(
            w,
            "[run]\nid = \"{}\"\npour = \"{}\"\ndate = \"{}\"\n\n[log]\nfile = \"{}\"",
            self.id, self.pour, self.date, self.log_name
        );
        match (self.logger.time, self.logger.time_name()) {
            (TimeStyle::Counter | TimeStyle::None, _) | (_, None) => {
                let _ = writeln!(w, "rate = \"{} Hz\"", self.logger.rate_hz);
            }
            (TimeStyle::Clock | TimeStyle::Iso, _) => {}
            (_, Some((name, unit))) => {
                let column = if self.logger.text.header { format!("\"{name}\"") } else { "1".into() };
                let _ = writeln!(w, "time = {{ column = {column}, unit = \"{unit}\" }}");
            }
        }
        if let Some(tolerance) = &self.logger.clock_tolerance {
            let _ = writeln!(w, "clock_tolerance = \"{tolerance}\"");
        }
        if self.logger.averaging_s > 0.0 && self.logger.averaging_told {
            let _ = writeln!(w, "averaging = \"{} ms\"", number(self.logger.averaging_s * 1e3));
        }
        let first = if self.logger.time == TimeStyle::None { 1 } else { 2 };
        let column = |name: &str, place: usize| {
            if self.logger.text.header { format!("\"{name}\"") } else { (first + place).to_string() }
        };
        let _ = writeln!(w, "\n[[channel]]\nrole = \"force\"\ncolumn = {}", column("load", 0));
        if let Scale::Direct { unit, accuracy, .. } = self.cell.scale {
            let _ = writeln!(w, "unit = \"{unit}\"");
            if let Some(accuracy) = accuracy {
                let _ = writeln!(w, "accuracy = \"{accuracy}\"");
            }
        } else {
            let file = self.calibration_elsewhere.as_deref().unwrap_or("cell.toml");
            let _ = writeln!(w, "unit = \"{}\"\ncalibration = \"{file}\"", self.cell.reading_unit);
        }
        let mut place = 1;
        if let Some(p) = &self.pressure {
            let _ = writeln!(
                w,
                "\n[[channel]]\nrole = \"pressure\"\ncolumn = {}\nunit = \"{}\"\naccuracy = \"{}\"\nreference = \"{}\"",
                column("chamber", place),
                p.unit,
                p.accuracy,
                if p.gauge { "gauge" } else { "absolute" }
            );
            place += 1;
        }
        if self.ignition {
            let _ =
                writeln!(w, "\n[[channel]]\nrole = \"ignition\"\ncolumn = {}\nunit = \"V\"", column("igniter", place));
        }
        let _ = writeln!(w, "\n[stand]\norientation = \"{}\"", self.stand.orientation.word());
        if let (Some((hz, damping)), true) = (self.stand.resonance, self.stand.resonance_told) {
            let _ = writeln!(w, "natural_frequency = \"{hz} Hz\"\ndamping_ratio = {damping}");
        }
        if self.stand.force_ratio != 1.0 {
            let _ = writeln!(w, "force_ratio = \"{} ± 0.002\"", self.stand.force_ratio);
        }
        let _ = writeln!(w, "\n[site]\ngravity = \"{} m/s2\"", self.gravity_m_s2);
        let grams = |kg: f64| number(kg * 1e3);
        let limits = grams(self.propellant_limits_kg);
        let mut motor = Vec::new();
        if self.propellant_told {
            let mass = grams(self.weighed_propellant_kg());
            motor.push(format!("propellant_mass = \"{mass} ± {limits} g\""));
        }
        if let Some(extra) = self.expelled_extra_kg {
            let before = grams(self.motor.mass_before_kg);
            let after = grams(self.motor.mass_before_kg - self.motor.propellant_mass_kg - extra);
            motor.push(format!("mass_before = \"{before} ± {limits} g\"\nmass_after = \"{after} ± {limits} g\""));
        }
        if let Some(p) = &self.pressure {
            let length = |true_m: f64, error_m: f64, limits_m: Option<f64>| {
                let limits = limits_m.map_or(String::new(), |l| format!(" ± {}", number(l * 1e3)));
                format!("\"{}{limits} mm\"", number((true_m + error_m) * 1e3))
            };
            let throat = |true_m: f64| length(true_m, p.throat_error_m, p.throat_limits_m);
            motor.push(format!("throat_diameter = {}", throat(p.throat_diameter_m)));
            if let Some(after) = p.throat_after_m {
                motor.push(format!("throat_diameter_after = {}", throat(after)));
            }
            if let Some(web) = p.web_thickness_m {
                motor.push(format!("web_thickness = {}", length(web, p.web_error_m, p.web_limits_m)));
            }
        }
        if !motor.is_empty() {
            let _ = writeln!(w, "\n[motor]\n{}", motor.join("\n"));
        }
        for (title, pairs) in [("conditions", &self.conditions), ("tags", &self.tags)] {
            if !pairs.is_empty() {
                let _ = writeln!(w, "\n[{title}]");
                for (name, value) in pairs {
                    let _ = writeln!(w, "{name} = {value}");
                }
            }
        }
        if let Some(c) = self.check_load {
            let k = 1.0 + self.logger.clock_error;
            let _ = writeln!(
                w,
                "\n[[check_load]]\nmass = \"{} kg\"\nfrom = \"{} s\"\nto = \"{} s\"",
                c.mass_kg,
                number(c.from_s * k),
                number(c.to_s * k)
            );
        }
        t
    }
}

/// What is true of the chamber. Times since the first sign of life.
struct Chamber {
    peak_pa: f64,
    action_pa_s: f64,
    /// Integrals of throat area times absolute pressure over the action and the burn time.
    action_n_s: f64,
    burn_n_s: f64,
    /// First crossing of 10 % of the highest pressure above the air.
    rises_s: f64,
}

impl Chamber {
    fn of(p: &PressureChannel, smooth: &Dense, burn: &Dense, within_5: [f64; 2], within_10: [f64; 2]) -> Chamber {
        let [from_s, to_s] = within_5;
        let above = p.above(burn, from_s, to_s);
        let shape = p.above(smooth, from_s, to_s);
        let highest = shape.peak().1;
        let values = above.values.iter().enumerate();
        let weighed = values.map(|(i, pressure)| {
            let share = (above.start_s + i as f64 * motor::STEP_S - from_s) / (to_s - from_s);
            p.throat_area(share) * (p.air_pressure_pa + pressure)
        });
        let weighed = Dense::new(above.start_s, weighed.collect());
        let over = |dense: &Dense, [a, b]: [f64; 2]| dense.integral_to(b) - dense.integral_to(a);
        Chamber {
            peak_pa: p.air_pressure_pa + highest,
            action_pa_s: over(&above, within_10) + p.air_pressure_pa * (within_10[1] - within_10[0]),
            action_n_s: over(&weighed, within_10),
            burn_n_s: over(&weighed, within_5),
            rises_s: shape.first_above(0.1 * highest).unwrap_or(f64::NAN),
        }
    }
}
