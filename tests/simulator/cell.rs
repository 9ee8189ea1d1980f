//! The load cell: newtons to readings, its noise, and the calibration session with weights that err.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;
use std::fmt::Write as _;

/// Density of air that conventional masses are defined for, kg/m3 (OIML D 28).
const AIR_DENSITY: f64 = 1.2;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum WeightErrors {
    Each,
    Stack,
    Common,
}

/// How newtons are found from readings.
#[derive(Debug, Clone, PartialEq)]
pub enum Scale {
    /// A session with weights.
    Points,
    /// `[constants]` with the stated slope off by a hidden part of `limits` (a fraction).
    Constants { limits: f64 },
    /// The log holds forces already: unit, newtons a unit, accuracy as written (or none).
    Direct { unit: &'static str, newtons: f64, accuracy: Option<&'static str> },
}

#[derive(Debug, Clone, PartialEq)]
pub struct Cell {
    pub name: String,
    pub capacity_n: f64,
    pub date: String,
    pub scale: Scale,
    /// `count`, `mV`, `V`.
    pub reading_unit: &'static str,
    /// Reading = c0 + c1 F + c2 F^2, F in newtons, weights pushing.
    pub coefficients: [f64; 3],
    /// Thrust pulls where the weights pushed.
    pub pulls: bool,
    /// White noise of a sample, N.
    pub noise_n: f64,
    /// Slow noise (about 1/f from 0.05 to 50 Hz), standard deviation in N.
    pub slow_noise_n: f64,
    /// Mains hum: amplitude in N, frequency in Hz.
    pub hum: Option<(f64, f64)>,
    /// Nominal masses of the calibration session, kg.
    pub masses_kg: Vec<f64>,
    /// Limits of a weight's error, as a fraction; the true masses err inside.
    pub weight_tolerance: f64,
    pub weight_errors: WeightErrors,
    pub weight_density: f64,
    /// Noise of a calibration reading, N.
    pub calibration_noise_n: f64,
    /// Where the weights hung.
    pub gravity_m_s2: f64,
    /// Hidden errors and noise of the session are drawn from this.
    pub calibration_seed: u64,
    pub decimals: usize,
    /// Degree written into `[fit]`.
    pub fit_degree: Option<u32>,
}

impl Default for Cell {
    fn default() -> Self {
        Cell {
            name: "bench cell".into(),
            capacity_n: 2000.0,
            date: "2026-04-02".into(),
            scale: Scale::Points,
            reading_unit: "count",
            coefficients: [8123.0, 900.0, 0.0],
            pulls: false,
            noise_n: 1.0,
            slow_noise_n: 0.0,
            hum: None,
            masses_kg: vec![0.0, 10.0, 20.0, 30.0, 40.0, 50.0, 60.0, 70.0],
            weight_tolerance: 2e-4,
            weight_errors: WeightErrors::Each,
            weight_density: 7850.0,
            calibration_noise_n: 0.005,
            gravity_m_s2: 9.8072,
            calibration_seed: 1,
            decimals: 1,
            fit_degree: None,
        }
    }
}

impl Cell {
    /// Eight equal steps of mass up to at least `force_n`, in whole hundreds of grams.
    pub fn masses_up_to(force_n: f64) -> Vec<f64> {
        let step = (force_n / 9.8 / 7.0 * 10.0).ceil().max(1.0) / 10.0;
        (0..8).map(|i| (f64::from(i) * step * 1000.0).round() / 1000.0).collect()
    }

    /// Sign of the force on the cell that a positive thrust makes.
    pub fn thrust_sign(&self) -> f64 {
        if self.pulls { -1.0 } else { 1.0 }
    }

    /// Noise-free reading under a force in newtons (weights positive).
    pub fn reading(&self, force_n: f64) -> f64 {
        if let Scale::Direct { newtons, .. } = self.scale {
            return self.coefficients[0] + force_n / newtons;
        }
        let [c0, c1, c2] = self.coefficients;
        c0 + force_n * (c1 + c2 * force_n)
    }

    /// The true masses behind the nominal ones.
    pub fn true_masses_kg(&self) -> Vec<f64> {
        let mut rng = ChaCha8Rng::seed_from_u64(self.calibration_seed ^ 0x7765_6967_6874);
        let mut err =
            || if self.weight_tolerance > 0.0 { rng.random_range(-1.0..1.0) * self.weight_tolerance } else { 0.0 };
        match self.weight_errors {
            WeightErrors::Each => self.masses_kg.iter().map(|m| m * (1.0 + err())).collect(),
            WeightErrors::Common => {
                let shared = err();
                self.masses_kg.iter().map(|m| m * (1.0 + shared)).collect()
            }
            WeightErrors::Stack => {
                let (mut nominal, mut truth) = (0.0, 0.0);
                let mut out = Vec::new();
                for &mass in &self.masses_kg {
                    truth += (mass - nominal) * (1.0 + err());
                    nominal = mass;
                    out.push(truth);
                }
                out
            }
        }
    }

    /// Force of a mass hung on the cell: m g (1 - air / weight density).
    pub fn weight_force_n(&self, mass_kg: f64) -> f64 {
        mass_kg * self.gravity_m_s2 * (1.0 - AIR_DENSITY / self.weight_density)
    }

    /// Text of the calibration file; `None` when the log holds forces.
    pub fn calibration_file(&self, first_comment: &str) -> Option<String> {
        let mut text = String::new();
        if !first_comment.is_empty() {
            let _ = writeln!(text, "# {first_comment}");
        }
        let _ = writeln!(
            text,
            "[cell]\nname = \"{}\"\ncapacity = \"{} N\"\ndate = \"{}\"\n\n[site]\ngravity = \"{} m/s2\"\n",
            self.name, self.capacity_n, self.date, self.gravity_m_s2
        );
        match &self.scale {
            Scale::Direct { .. } => return None,
            Scale::Constants { limits } => {
                let mut rng = ChaCha8Rng::seed_from_u64(self.calibration_seed);
                let slope = (1.0 + limits * rng.random_range(-1.0..1.0)) / self.coefficients[1];
                let _ = writeln!(
                    text,
                    "[constants]\nslope = \"{slope:.9e} N/{}\"\nslope_uncertainty = \"{} %\"\nzero = {}",
                    self.reading_unit,
                    round_sig(limits * 100.0),
                    self.coefficients[0]
                );
            }
            Scale::Points => {
                let errors = match self.weight_errors {
                    WeightErrors::Each => "each",
                    WeightErrors::Stack => "stack",
                    WeightErrors::Common => "common",
                };
                let _ = writeln!(
                    text,
                    "[weights]\ndensity = \"{} kg/m3\"\ntolerance = \"{} %\"\nerrors = \"{errors}\"\n",
                    self.weight_density,
                    round_sig(self.weight_tolerance * 100.0)
                );
                let _ = writeln!(text, "[points]\nunit = \"kg\"\nreading_unit = \"{}\"", self.reading_unit);
                let mut rng = ChaCha8Rng::seed_from_u64(self.calibration_seed);
                let truth = self.true_masses_kg();
                let mut line = |name: &str, order: &mut dyn Iterator<Item = usize>| {
                    let mut points = Vec::new();
                    for i in order {
                        let noise: f64 = rng.sample(StandardNormal);
                        let force = self.weight_force_n(truth[i]) + noise * self.calibration_noise_n;
                        points.push(format!("[{}, {:.*}]", self.masses_kg[i], self.decimals, self.reading(force)));
                    }
                    let _ = writeln!(text, "{name} = [\n  {},\n]", points.join(",\n  "));
                };
                line("up", &mut (0..truth.len()));
                line("down", &mut (0..truth.len()).rev());
                if let Some(degree) = self.fit_degree {
                    let _ = writeln!(text, "\n[fit]\ndegree = {degree}");
                }
            }
        }
        Some(text)
    }
}

/// A number without the tail that binary fractions leave.
pub fn round_sig(value: f64) -> f64 {
    format!("{value:.6e}").parse().unwrap_or(value)
}
