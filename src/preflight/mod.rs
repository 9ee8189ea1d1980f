//! The check before a flight: rail, thrust-to-weight and stability with the measured thrust. Pure: same inputs, same numbers.

pub mod atmosphere;
pub mod check;
pub mod parse;
pub mod places;
pub mod pressure_centre;
pub mod rail;
pub mod vehicle;

use crate::firing::{Figure, Status};
use crate::quantity::Measured;
use rail::Thrust;
use serde::{Deserialize, Serialize};

/// Name and version of the shape of preflight.json.
pub const SCHEMA: &str = "burntally.preflight/1";

/// What every pre-flight output says.
pub const CAUTIONS: [&str; 4] = [
    "A go says that the limits named were met on paper with the inputs given, and nothing more: not that the vehicle is safe, sound or allowed.",
    "A measured motor is not a certified one, and the next motor is not this one.",
    "Local law, the range's safety code and the range safety officer rule.",
    "Nobody near a live motor; remote ignition; after a misfire wait as long as the safety code says.",
];

/// The thrust that is checked with.
#[derive(Debug, Clone, PartialEq)]
pub struct Source {
    pub description: String,
    /// Decides: measured, or the lower bound of a group.
    pub thrust: Thrust,
    /// Mean of a group, shown beside.
    pub mean: Option<Thrust>,
    /// Standard uncertainty of the whole curve as a share; `None`: not known.
    pub relative_u: Option<f64>,
    pub propellant_kg: Option<Measured>,
    /// Why a "go" from it is not an unqualified one.
    pub qualifications: Vec<String>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Check {
    pub id: String,
    pub value: f64,
    pub unit: String,
    pub limit: f64,
    pub limit_source: String,
    pub interval_95: Option<[f64; 2]>,
    /// Null where the thrust's error is not known and the check depends on it: the status then rests on the other errors alone.
    pub probability_met: Option<f64>,
    pub status: Status,
}

/// What would bring a limit within reach.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Fix {
    pub check: String,
    pub advice: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RailFigures {
    pub effective_length: Figure,
    pub exit_speed: Figure,
    /// From first motion.
    pub exit_time: Figure,
    /// Time average, first motion to exit.
    pub mean_thrust: Figure,
    /// From first thrust to first motion, s.
    pub held_s: f64,
    pub lowest_thrust_n: f64,
    /// With the mean thrust of the whole burn, constant mass and no drag; null where that does not lift.
    pub simple_exit_speed_m_s: Option<f64>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ThrustToWeight {
    pub rail_average: f64,
    pub peak: f64,
    pub lowest_on_rail: f64,
    pub definition: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Stability {
    pub cp_m: f64,
    pub cp_source: String,
    pub cp_side_area_m: Option<f64>,
    pub cg_loaded_m: f64,
    pub cg_at_exit_m: f64,
    pub cg_burnout_m: f64,
    pub margin_loaded: f64,
    pub margin_at_exit: f64,
    pub margin_burnout: f64,
    /// Smallest from rail exit to burn-out.
    pub margin_minimum: f64,
}

/// The same figures for another thrust.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Assumed {
    pub exit_speed_m_s: f64,
    pub exit_time_s: f64,
    pub mean_thrust_n: f64,
    pub thrust_to_weight: f64,
    pub margin_minimum: f64,
    #[serde(skip)]
    pub speed_along_rail: Vec<[f64; 2]>,
}

/// What preflight.json holds.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Preflight {
    pub schema: String,
    pub vehicle: String,
    pub thrust_source: String,
    /// `go` or `no-go`.
    pub verdict: String,
    pub qualifications: Vec<String>,
    pub checks: Vec<Check>,
    pub fixes: Vec<Fix>,
    pub thrust_to_weight: ThrustToWeight,
    pub lift_off_mass_kg: f64,
    pub rail: RailFigures,
    pub stability: Stability,
    pub wind_angle_at_exit_deg: Option<f64>,
    pub mean_of_group: Option<Assumed>,
    pub assumed: Option<Assumed>,
    pub findings: Vec<String>,
    pub cautions: Vec<String>,
    /// Travel, m, and speed, m/s.
    #[serde(skip)]
    pub speed_along_rail: Vec<[f64; 2]>,
}
