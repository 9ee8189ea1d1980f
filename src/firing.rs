//! The reduced firing: figures, checks, provenance; what result.json holds and what is read back from it.

use crate::log::{Records, Repair};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Name and version of the shape of result.json.
pub const SCHEMA: &str = "burntally.result/1";

/// A figure: value in SI with a UCUM unit code, its standard uncertainty and its 95 % interval; null where not known.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Figure {
    pub value: f64,
    pub unit: String,
    pub standard_uncertainty: Option<f64>,
    pub interval_95: Option<[f64; 2]>,
    /// `lower` where the true value is at least this, `upper` where it is at most this.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub bound: Option<String>,
    /// Where the value came from, when that is not the usual way.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub source: Option<String>,
    /// Beside a bound: what the figure may have been. Never in the place of the bound.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub estimate: Option<Estimate>,
}

/// What a figure that is known by a bound only may have been, in the figure's unit.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    pub value: f64,
    pub standard_uncertainty: Option<f64>,
    pub interval_95: Option<[f64; 2]>,
    /// What it rests on.
    pub method: String,
}

/// Every figure of the contract; `None` (null) where it is not known.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Quantities {
    pub total_impulse: Option<Figure>,
    pub burn_impulse: Option<Figure>,
    pub burn_time: Option<Figure>,
    pub action_time: Option<Figure>,
    pub average_thrust: Option<Figure>,
    pub peak_thrust: Option<Figure>,
    pub initial_thrust: Option<Figure>,
    pub rise_time: Option<Figure>,
    pub ignition_delay: Option<Figure>,
    pub propellant_mass: Option<Figure>,
    /// mass_before - mass_after, where both were weighed.
    pub expelled_mass: Option<Figure>,
    pub specific_impulse: Option<Figure>,
    pub effective_exhaust_velocity: Option<Figure>,
    pub peak_pressure: Option<Figure>,
    pub mean_pressure: Option<Figure>,
    pub characteristic_velocity: Option<Figure>,
    pub thrust_coefficient: Option<Figure>,
    pub burn_rate: Option<Figure>,
    /// Impulse added beyond the end of a record that ends before the thrust does (part of total_impulse).
    pub extrapolated_impulse: Option<Figure>,
}

impl Quantities {
    /// The figure of a key, where there is one.
    pub fn by_key(&self, key: &str) -> Option<&Figure> {
        match key {
            "total_impulse" => &self.total_impulse,
            "burn_impulse" => &self.burn_impulse,
            "burn_time" => &self.burn_time,
            "action_time" => &self.action_time,
            "average_thrust" => &self.average_thrust,
            "peak_thrust" => &self.peak_thrust,
            "initial_thrust" => &self.initial_thrust,
            "rise_time" => &self.rise_time,
            "ignition_delay" => &self.ignition_delay,
            "propellant_mass" => &self.propellant_mass,
            "expelled_mass" => &self.expelled_mass,
            "specific_impulse" => &self.specific_impulse,
            "effective_exhaust_velocity" => &self.effective_exhaust_velocity,
            "peak_pressure" => &self.peak_pressure,
            "mean_pressure" => &self.mean_pressure,
            "characteristic_velocity" => &self.characteristic_velocity,
            "thrust_coefficient" => &self.thrust_coefficient,
            "burn_rate" => &self.burn_rate,
            "extrapolated_impulse" => &self.extrapolated_impulse,
            _ => return None,
        }
        .as_ref()
    }

    /// The figure of a key, where there is one.
    pub fn by_key_mut(&mut self, key: &str) -> Option<&mut Figure> {
        match key {
            "total_impulse" => &mut self.total_impulse,
            "burn_impulse" => &mut self.burn_impulse,
            "burn_time" => &mut self.burn_time,
            "action_time" => &mut self.action_time,
            "average_thrust" => &mut self.average_thrust,
            "peak_thrust" => &mut self.peak_thrust,
            "initial_thrust" => &mut self.initial_thrust,
            "rise_time" => &mut self.rise_time,
            "ignition_delay" => &mut self.ignition_delay,
            "propellant_mass" => &mut self.propellant_mass,
            "expelled_mass" => &mut self.expelled_mass,
            "specific_impulse" => &mut self.specific_impulse,
            "effective_exhaust_velocity" => &mut self.effective_exhaust_velocity,
            "peak_pressure" => &mut self.peak_pressure,
            "mean_pressure" => &mut self.mean_pressure,
            "characteristic_velocity" => &mut self.characteristic_velocity,
            "thrust_coefficient" => &mut self.thrust_coefficient,
            "burn_rate" => &mut self.burn_rate,
            "extrapolated_impulse" => &mut self.extrapolated_impulse,
            _ => return None,
        }
        .as_mut()
    }
}

#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct RunRecord {
    pub id: String,
    pub pour: Option<String>,
    pub date: Option<String>,
    pub conditions: serde_json::Map<String, serde_json::Value>,
    pub tags: serde_json::Map<String, serde_json::Value>,
}

/// Log time of the burn's landmarks, s.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct BurnTimes {
    pub thrust_start_s: f64,
    pub start_s: f64,
    pub end_s: f64,
    pub thrust_end_s: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum BurstKind {
    Burn,
    Chuff,
    Knock,
    Ejection,
    Other,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Burst {
    pub start_s: f64,
    pub end_s: f64,
    /// N.s
    pub impulse: f64,
    /// N
    pub peak: f64,
    pub kind: BurstKind,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct MotorClass {
    pub letter: String,
    pub designation: String,
    /// 0 at the lower edge of the band, 1 at the upper.
    pub position: f64,
    pub probability: Option<BTreeMap<String, f64>>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StandRecord {
    pub natural_frequency_hz: f64,
    pub damping_ratio: Option<f64>,
    pub source: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BudgetLine {
    pub source: String,
    /// In the unit of the figure.
    pub standard_uncertainty: f64,
    /// Share of the figure's variance, 0 to 1.
    pub share: f64,
    /// What would make the largest sources smaller.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub improvement: Option<Improvement>,
}

/// What to do about a source of error, and what that would bring.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Improvement {
    /// In words, with its numbers.
    pub advice: String,
    /// What to do, without numbers.
    pub remedy: String,
    /// Half-width of the 95 % interval if this source's error were half as large, in the unit of the figure.
    pub half_width_95_if_halved: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Status {
    Pass,
    Caution,
    Fail,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Check {
    /// One of the ids of the contract.
    pub id: String,
    pub status: Status,
    pub message: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct InputFile {
    pub file: String,
    pub sha256: String,
}

#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Provenance {
    pub program: String,
    pub version: String,
    pub inputs: Vec<InputFile>,
    pub records: Records,
    pub repairs: Vec<Repair>,
    /// How the 95 % intervals were drawn.
    #[serde(default)]
    pub monte_carlo: Option<MonteCarlo>,
    /// What was found, chosen or assumed on the way, one sentence each.
    pub findings: Vec<String>,
}

/// Trials behind the 95 % intervals (JCGM 101:2008); the seed makes them the same each time.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct MonteCarlo {
    pub trials: usize,
    pub seed: u64,
}

/// How the curve was conditioned.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Conditioning {
    pub sample_rate_hz: f64,
    /// Standard deviation of the quiet record, N.
    pub noise_n: f64,
    /// Cutoff of the zero-phase Butterworth low-pass, Hz; null: none applied.
    pub cutoff_hz: Option<f64>,
    /// Passes and order in words.
    pub filter: String,
    /// Zero before and after, N as the calibration reads it; null where there is no quiet record.
    pub baseline_before_n: Option<f64>,
    pub baseline_after_n: Option<f64>,
}

/// A reduced firing: what result.json holds.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Firing {
    pub schema: String,
    pub run: RunRecord,
    pub quantities: Quantities,
    pub burn: BurnTimes,
    pub bursts: Vec<Burst>,
    pub motor_class: Option<MotorClass>,
    pub stand: Option<StandRecord>,
    pub conditioning: Conditioning,
    pub uncertainty_budget: BTreeMap<String, Vec<BudgetLine>>,
    pub checks: Vec<Check>,
    pub provenance: Provenance,
}

/// What is drawn and tabulated beside the figures. All vectors of one group have equal length; time is log time in s.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Curves {
    /// Calibrated, baseline-corrected samples, unfiltered.
    pub time_s: Vec<f64>,
    pub raw_n: Vec<f64>,
    /// Conditioned thrust at the same instants.
    pub conditioned_n: Vec<f64>,
    /// Standard uncertainty of the conditioned thrust, N; `None` where the scale's error is not known.
    pub conditioned_u_n: Option<Vec<f64>>,
    /// Zero taken away, N as the calibration reads it.
    pub baseline_n: Vec<f64>,
    /// Thrust from first to last measurable thrust, exactly zero at both ends: straight lines between these points
    /// carry the total impulse.
    pub thrust_time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    pub thrust_u_n: Option<Vec<f64>>,
    /// 5 % of peak, N.
    pub burn_threshold_n: f64,
    pub peak_time_s: f64,
    /// Absolute chamber pressure where there is a channel, Pa, at `time_s`.
    pub pressure_pa: Option<Vec<f64>>,
}
